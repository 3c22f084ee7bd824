"""What a stream file that cannot be used is told: file, line, table, key, rule, value, remedy."""

import re

import pytest
from stream_texts import STREAM, changed, holds, reader

from aquabuf.assess.tank.job_file import read_stream
from aquabuf.errors import FileError, InputError


@pytest.fixture
def read(tmp_path):
    """Reads a text as a stream file."""
    return reader(tmp_path)


FLOW = 'flow = "6 m3/h"'
HOLDS = 'holds = { "sulfuric acid" = "0.98 g/L" }'
PH = "ph = 4.0"


def flow(text):
    """The stream with these keys in place of its flow."""
    return changed((FLOW, text))


def titration(text):
    """The stream with a titration in place of its contents."""
    return changed((HOLDS, text))


def tail(text):
    """The stream with more tables."""
    return STREAM + text


CONTENTS = [
    ('acetate = 5', PH, r"acetate must be a concentration with its unit, in quotes; found 5. Write for example acetate = \"120 mg/L as CH3COO\""),
    ('"sulfuric acid" = true', "", r'sulfuric acid must be a concentration .*; found true. Write for example "sulfuric acid" = "120 mg/L"'),
    ('"sulfuric acid" = "much"', "", r"sulfuric acid must begin with a number; found 'much'. Write for example"),
    ('"sulfuric acid" = "1,5 g/L"', "", r"sulfuric acid must have a point as decimal mark and no mark for thousands; found '1,5 g/L'"),
    ('"sulfuric acid" = "-1 g/L"', "", r"sulfuric acid must be zero or more; found '-1 g/L'"),
    ('"sulfuric acid" = "5"', "", r"sulfuric acid must have a unit, one of mg/L, g/L, mmol/L, meq/L, N; found none"),
    ('"sulfuric acid" = "5 %"', "", r"sulfuric acid must be in one of mg/L, g/L, mmol/L, meq/L, N; found '%'"),
    ('"sulfuric acid" = "5 mg/kg"', "", r"sulfuric acid must be in one of mg/L, .*; found 'mg/kg'"),
    ('"sulfuric acid" = "5 mg/L as S"', "", r"sulfuric acid must be in one of mg/L, .*; found 'mg/L as S'"),
    ('"sulfuric acid" = "5000 g/L"', "", r"sulfuric acid must be at most 20 mol/L; found '5000 g/L'. Check value and unit"),
    ('zinc = "5 mg/L as Fe"', PH, r"zinc must be in one of mg/L, g/L, mmol/L; found 'mg/L as Fe'"),
    ('zinc = "5 meq/L"', PH, r"zinc must be in one of mg/L, g/L, mmol/L; found 'meq/L'"),
    ('phosphate = "5 mg/L"', PH, r"phosphate must say what it counts, mg/L as P or mg/L as PO4; found 'mg/L'. Write for example phosphate = \"120 mg/L as P\""),
    ('phosphate = "5 N"', PH, r"phosphate must be in one of .*mmol/L.*; found 'N'"),
    ('"phosphoric acid" = "0.1 N"', "", r"phosphoric acid loses protons in steps, .*; found 'N'. Give it in mg/L, g/L, mmol/L"),
    ('"citric acid" = "0.1 N"', "", r"citric acid loses protons in steps"),
    ('"calcium chloride" = "0.1 N"', "", r"calcium chloride has no equivalents; found 'N'. Give it in mg/L"),
    ('"sulphuric acid" = "1 g/L"', "", r"'sulphuric acid' is no product, weak acid, metal or ion. The nearest is sulfuric acid. Correct it, or define"),
    ('acetat = "1 g/L"', PH, r"'acetat' is no product, .* The nearest is acetate"),
    ('qqq = "1 g/L"', PH, r"'qqq' is no product, weak acid, metal or ion. Correct it"),
    ('iron = "1 mg/L"', PH, r"iron must say which ion it is, .*; found 'iron'. Write iron\(III\) or iron\(II\)"),
    ('"Total iron" = "1 mg/L"', PH, r"Total iron must say which ion it is, .* Write iron\(III\) or iron\(II\)"),
    ('Zn = "1 mg/L"', PH, r"Zn must say which ion it is, .*; found 'Zn'. Write zinc"),
    ('chromium = "1 mg/L"', PH, r"chromium must say which ion it is, .* Write chromium\(III\)"),
    ('soda = "1 g/L"', "", r"soda' can mean several"),
    ('copperas = "1 g/L"', "", r"copperas must be told by what it dissolves to; .* Give iron\(II\) and sulfate"),
    ('"polyaluminum chloride" = "1 g/L"', "", r"polyaluminum chloride must be told by what it dissolves to, as its basicity differs"),
    ('zinc = "1 mg/L", Zinc = "1 mg/L"', PH, r"Zinc is given twice, under two names of zinc. Remove one"),
    ('"caustic soda" = "1 g/L", alkalinity = "1 meq/L"', "", r"alkalinity of waste 'rinse' counts its acids and bases already; found alkalinity and caustic soda"),
    ('calcium = "1 mg/L"', "ph = 2.0", r"waste 'rinse' must be known by a titration, .*; found its pH and ions that hold no protons alone. .* Titrate a liter of it"),
    ('"sulfuric acid" = "0 g/L"', "ph = 2.0", r"found its pH alone"),
    ('acetate = "1 g/L"', "", r"found its composition without pH alone"),
    ('acetate = "1 g/L"', "ph = 16", r"ph must be at least -1 and at most 15; found 16"),
    ('acetate = "1 g/L"', 'ph = "4"', r"ph must be a number without quotes; found '4'"),
    ('', "ph = 2.0", r"found its pH alone"), ('', "", r"found nothing alone")]


@pytest.mark.parametrize(("content", "more", "words"), CONTENTS)
def test_contents(read, content, more, words):
    """Each is named at its line of the file."""
    with pytest.raises(InputError, match=words) as error:
        read(holds(content, more))
    assert re.match(r"s\.toml, line [678], \[wastes\.rinse\]", str(error.value))


ACIDS = [
    ("pk = [5, 4]", r"acids.x\]: the pK values of acid 'x' must be numbers that rise; found \[5.0, 4.0\]. List them from the first"),
    ("pk = [1, 2, 3, 4, 5, 6, 7]", r"acid 'x' must have 1 to 6 pK values; found 7"),
    ("pk = []", r"pk must be a list of one or more"), ('pk = "5"', r"pk must be a number without quotes; found '5'"),
    ("pk = [99]", r"pk must be at least -3 and at most 16; found 99"), ("charge = 0", r"pk is needed"),
    ("pk = [5]\ncharge = 9", r"charge must be at least -4 and at most 4; found 9"),
    ("pk = [5]\nmass = 9", r"mass is not a key here. The nearest is molar_mass"),
    ("pk = [5]\nmolar_mass = 0", r"molar_mass must be at least 1 .*; found 0")]


@pytest.mark.parametrize(("text", "words"), ACIDS)
def test_own_acids(read, text, words):
    """Their pK, charge and mass."""
    with pytest.raises(InputError, match=words):
        read(tail(f"[acids.x]\n{text}\n"))


@pytest.mark.parametrize("name", ["zinc", "Carbon", "alkalinity", "acetate", "acetic acid"])
def test_names_of_own_acids(read, name):
    """No second meaning of a name."""
    with pytest.raises(InputError, match=rf"the name {name} is taken: it stands for {name.lower()} already. Choose another"):
        read(tail(f'[acids."{name}"]\npk = [5]\n'))


def test_mass_of_an_own_acid(read):
    """By moles alone without a molar mass."""
    own = "[acids.humic]\npk = [4]\n"
    with pytest.raises(InputError, match=r"humic is given as mass, and no molar mass is known; found 'mg/L'. Add molar_mass to \[acids.humic\]"):
        read(holds('humic = "3 mg/L"', PH) + own)
    with pytest.raises(InputError, match=r"an acid needs a name of letters; found '-'"):
        read(tail('[acids."-"]\npk = [4]\n'))


COURSES = [
    ("", r"flow is needed: a mean flow, a batch, or a \[profile\]; none is there. Add for example flow"),
    ('flow = "6"', r"flow must .*unit"), ('flow = 6', r"flow must have a unit, one of .*m³/h.*; found 6"),
    ('flow = "0 m3/h"', r"flow must be above 0"), ('flow = "-3 m3/h"', r"flow must be above 0 .*; found '-3 m3/h'"),
    ('flow = "6 mg/L"', r"flow must be in one of .*; found 'mg/L'"),
    (FLOW + '\nleast = "7 m3/h"', r"least must be at most the mean flow, 6 m³/h; found 7 m³/h. Correct one"),
    (FLOW + '\nmost = "5 m3/h"', r"most must be at least the mean flow, 6 m³/h; found 5 m³/h"),
    (FLOW + '\nmost = "99 m3/h"', r"most must be 1 to 15 times the mean; found 99 and 6"),
    (FLOW + '\nleast = "4 m3/h"\ndaily = { swing = "50 %" }', r"daily must stay within least and most; found a swing of 50 %, to 3 m³/h, past least = 4"),
    (FLOW + '\nmost = "8 m3/h"\ndaily = { swing = "50 %" }', r"found a swing of 50 %, to 9 m³/h, past most = 8"),
    (FLOW + '\ndaily = { peak = "14 h" }', r"\[wastes.rinse\] daily: swing is needed"),
    (FLOW + '\ndaily = { swing = "40 %", peak = "25 h" }', r"peak must be at least 0 and at most 24 h; found '25 h'"),
    (FLOW + '\nstrength = { spread = "30" }', r"spread must .*found none"),
    (FLOW + '\nstrength = { spread = "30 %", most = 2 }', r"most is not a key here"),
    (FLOW + '\nstrength = "30 %"', r"strength must be a table; found '30 %'"),
    (FLOW + '\nbatch = { size = "6 m3", every = "8 h" }', r"a waste that is dumped in batches has no flow; found both. Remove one"),
    ('daily = { swing = "40 %" }\nbatch = { size = "6 m3", every = "8 h" }', r"dumped in batches has no daily"),
    ('batch = { size = "6 m3", every = "8 h", over = "9 h" }', r"a dump must be over before the next begins, after 8 h; found over = 9 h"),
    ('batch = { size = "6 m3" }', r"every is needed"), (FLOW + "\nflwo = 3", r"flwo is not a key here. The nearest is flow"),
    (FLOW + '\nsample = "A"', r"sample must go with titration; found none. Add titration or remove sample")]


@pytest.mark.parametrize(("text", "words"), COURSES)
def test_courses(read, text, words):
    """Flow, batches, strength."""
    with pytest.raises(InputError, match=words) as error:
        read(flow(text))
    assert re.match(r"s\.toml, line \d+, \[wastes\.rinse\]", str(error.value))


TITRATIONS = [
    ('titration = "no.csv"', r"line 6, .*titration must be a table beside the stream file; found no file 'no.csv'. Correct the name"),
    (f'titration = "{"n" * 400}.csv"', r"titration must be a table beside the stream file"),
    ('titration = "curves.csv"\nsample = "a"', r"line 7, \[wastes.rinse\]: a is not a sample of curves.csv. The nearest is A"),
    ('titration = "raised.csv"', r"line 6, .*the titration of 'A' must hold the raw waste, with nothing added; it runs from 0.005 to 0.019 eq/L. Add its pH at 0"),
    ('titration = "falls.csv"', r"no titration of falls.csv can be used. row 4, sample 'A', .*found"),
    ('titration = "flows.csv"', r"line 6, \[wastes.rinse\]: ")]


@pytest.mark.parametrize(("text", "words"), TITRATIONS)
def test_titrations(read, text, words):
    """File, sample, raw waste, curves that fall: with the row."""
    with pytest.raises(InputError, match=words):
        read(titration(text))


def test_hot_waste_needs_the_temperature_of_its_titration(read):
    """Nobody titrates at 80 °C."""
    with pytest.raises(InputError, match=r"curves.csv must say at which temperature it was titrated, as a waste of 80 °C hardly was"):
        read(titration('titration = "curves.csv"').replace('"25 °C"', '"80 °C"'))
    assert read(titration('titration = "warm.csv"').replace('"25 °C"', '"80 °C"')).wastes[0].curve.t_c == 30.0


PROFILES = [
    ('file = "no.csv"', r"line \d+, \[profile\]: file must be a table beside the stream file; found no file 'no.csv'"),
    ('file = "gap.csv"', r"\[profile\]: gap.csv, row 5, .*rows must follow within 1.5 usual steps .*found 4 h after '2'. Add the missing rows"),
    ('file = "back.csv"', r"back.csv, row 3, .*flow must be 0 or more; found -8 m³?3?/h"),
    ('file = "mixed.csv"', r"mixed.csv, row 3, .*one unit for the whole column, m³/h; found '8 L/s'. Convert it"),
    ('file = "curves.csv"', r"\[profile\]: curves.csv"), ('file = "two.csv"', r"two.csv.*wash"),
    ('hold_gaps = "2 h"', r"file is needed"), ('file = "flows.csv"\nhold_gaps = "2"', r"hold_gaps must")]


@pytest.mark.parametrize(("text", "words"), PROFILES)
def test_profiles(read, text, words):
    """Gaps, negative flow, mixed units: with the row."""
    with pytest.raises(InputError, match=words):
        read(tail(f"[profile]\n{text}\n"))


def test_shares_of_several_wastes(read):
    """By flows or by columns; with neither nobody knows what is in the stream."""
    more = '[wastes.wash]\ntemperature = "25 °C"\nholds = { "caustic soda" = "0.4 g/L" }\n[window]'
    for table, keep, lacks, column in (("flows.csv", "", "rinse", "rinse"), ("half.csv", "", "rinse", "wash"), ("half.csv", FLOW, "wash", "wash")):
        with pytest.raises(InputError, match=rf"s.toml, line \d+, \[profile\]: several wastes need the flow of each, or a column of strength for "
                                             rf"each; found no flow of '{lacks}', and in {table} no column for '{column}'. Add either"):
            read(changed(("[window]", more), (FLOW, keep)) + f'[profile]\nfile = "{table}"\n')


def test_statistics_without_a_mean(read):
    """A profile has the flow; a largest flow without a mean says nothing."""
    with pytest.raises(InputError, match=r"most must go with flow, its mean; found none. Add flow or remove most"):
        read(flow('most = "9 m3/h"') + '[profile]\nfile = "flows.csv"\n')


WINDOW = "ph = [6.0, 9.0]"
REST = [
    ((WINDOW, "ph = [9.0, 6.0]"), r"line 11, \[window\]: ph must have its lower limit first; found \[9.0, 6.0\]"),
    ((WINDOW, "ph = [6.0, 6.0]"), r"ph must have a lower limit below its upper one; found \[6, 6\]. Give both"),
    ((WINDOW, "ph = [6.0]"), r"ph must be a value, \[low, high\], .*; found \[6.0\]"), ((WINDOW, "ph = 7"), r"ph must be a window \[low, high\]; found 7"),
    ((WINDOW, "ph = [6.0, 19.0]"), r"ph must be at least 0 and at most 14; found 19"), ((WINDOW, "aim = 7"), r"\[window\]: ph is needed"),
    ((WINDOW, WINDOW + "\naim = 9.5"), r"line 12, \[window\]: aim must lie within the window 6 to 9; found 9.5. Correct one"),
    ((WINDOW, WINDOW + '\ntotal = "3 %"'), r"total must be in one of .*; found '%'"),
    (('is = "caustic soda"', 'is = "caustick"'), r"line 14, \[reagents.lye\]: no product is called 'caustick'; nearest: caustic"),
    (('is = "caustic soda"', 'is = "phosphoric acid"'), r"\[reagents.lye\]: a reagent may bring no weak acid but carbonic"),
    (('is = "caustic soda"', 'is = "calcium chloride"'), r"a reagent must be a base or an acid; 'calcium chloride' changes neither"),
    (('strength = "25 %"', ""), r"give the strength of lye \(caustic soda\) from its certificate: none is usual"),
    (('strength = "25 %"', 'strength = "25 %"\nresidense = "20 min"'), r"residense is not a key here. The nearest is residence"),
    (('strength = "25 %"', 'strength = "25 %"\nefficiency = "0 %"'), r"efficiency must be above 0 and at most 1; found '0 %'"),
    (('strength = "25 %"', 'strength = "25 %"\ndry = "yes"'), r"dry must be true or false, without quotes; found 'yes'"),
    (('"20 mg/L"', '"600 g/L"'), r"line 7, \[wastes.rinse\]: solids must be at least 0 and at most 500 g/L; found '600 g/L'"),
    (('name = "Weir Lane"', ""), r"line 1, \[tank\]: name is needed"), (('name = "Weir Lane"', "name = 3"), r"name must be text in quotes; found 3"),
    (("[tank]", "[tanks]"), r"top level: tanks is not a table of a stream file. The nearest is tank"),
    (("[wastes.rinse]", '[wastes."--"]'), r"a waste needs a name of letters; found '--'. Name it"),
    (("[window]", '[wastes.Rinse]\n[window]'), r"the name of a waste must differ from the others in its letters; found 'Rinse' and 'rinse'"),
    (("[window]", 'wastes = 3\n[window]'), r"wastes is not a key here")]


@pytest.mark.parametrize(("change", "words"), REST)
def test_window_reagents_and_heads(read, change, words):
    """Each with its line."""
    with pytest.raises(InputError, match=words) as error:
        read(changed(change))
    assert str(error.value).startswith("s.toml, line")


TAILS = [
    ('[use]\nbase = "lie"\n', r"line 21, \[use\]: lie is not a reagent of \[reagents\]. The nearest is lye. Correct it"),
    ('[use]\nacid = "lye"\n', r"line 21, \[use\]: acid must be a reagent that lowers pH; lye is a base. Name another"),
    ('[use]\nbase = "vitriol"\n', r"base must be a reagent that raises pH; vitriol is an acid. Name another"),
    ("[site]\nturndown = 1\n", r"turndown must be above 1 and at most 1e\+06; found 1"),
    ('[site]\ncontainment = "largest"\n', r"containment must be one of 110 % of largest, .*; found 'largest'.* Correct it"),
    ('[site]\nprobe_lag = 10\n', r"probe_lag must have a unit"), ('[site]\nlag = 10\n', r"lag is not a key here"),
    ('[layout]\nstages = 2\nset_points = [7.0]\n', r"line 21, .*stages, volumes and set_points must agree in number; found stages 2, set_points 1"),
    ('[layout]\nvolumes = ["1 m3", "2 m3"]\nset_points = [7.0]\n', r"found volumes 2, set_points 1. Correct one"),
    ('[layout]\nset_points = [5.0, 9.5]\n', r"the last set point must lie within the window 6 to 9; found 9.5. Correct it"),
    ('[layout]\nstages = 0\n', r"stages must be at least 1 and at most 4; found 0"), ('[layout]\nstages = 2.0\n', r"stages must be a whole number without quotes; found 2.0"),
    ('[layout]\ncontrol = "pid"\n', r"control must be one of demand, ph; found 'pid'"),
    ('[simulate]\ncases = -1\n', r"cases must be at least 0 and at most 5000; found -1"),
    ('[simulate]\ndays = "300 d"\nstep = "0.1 s"\n', r"line 22, \[simulate\]: step must be long enough for 1e\+07 steps at most; found 0.1 s for 300 d. Lengthen it"),
    ('[simulate]\ndays = "3 m"\n', r"days must be in one of .*; found 'm'")]


@pytest.mark.parametrize(("text", "words"), TAILS)
def test_tables_at_the_end(read, text, words):
    """Use, site, layout, simulation."""
    with pytest.raises(InputError, match=words):
        read(tail(text))


def test_aim_and_last_set_point(read):
    """Two aims cannot both be met."""
    with pytest.raises(InputError, match=r"the last set point must be the aim of \[window\], 8; found 7.5. Remove one of them"):
        read(changed((WINDOW, WINDOW + "\naim = 8.0")) + "[layout]\nset_points = [7.5]\n")


@pytest.mark.parametrize(("cut", "words"), [
    ("[wastes.rinse]", r"s.toml: a stream file needs one waste or more in \[wastes\]; none is there. Add for example \[wastes.rinse\]"),
    ("[window]", r"s.toml: a stream file needs \[window\]; it is missing. Add it"), ("[tank]", r"s.toml: a stream file needs \[tank\]; it is missing"),
    ("[reagents.", r"s.toml: a stream file needs one reagent or more in \[reagents\]; none is there. Add for example \[reagents.caustic\]")])
def test_tables_that_are_missing(read, cut, words):
    """What to add."""
    parts = re.split(r"(?m)^(?=\[)", STREAM)
    with pytest.raises(InputError, match=words):
        read("".join(p for p in parts if not p.startswith(cut)))


@pytest.mark.parametrize("text", ["[tank", "a = ", "[tank]\nname = 'x'\nname = 'y'", "x = " + "[" * 5000, "x = 1979-13-45"])
def test_not_toml(read, text):
    """The parser says where."""
    with pytest.raises(InputError, match=r"^s.toml is not valid TOML: .*\. Correct"):
        read(text)


@pytest.mark.parametrize(("text", "words"), [("tank = 3", r"must be a table"), ("[tank]\nname='x'\n[[wastes]]\n", r"must be a table"),
                                             ("[tank]\nname='x'\n[wastes]\nrinse = 3\n", r"\[wastes.rinse\]: must be a table of keys and values; found 3")])
def test_tables_that_are_none(read, text, words):
    """Values where tables belong."""
    with pytest.raises(InputError, match=words):
        read(text)


def test_file_that_cannot_be_read(tmp_path):
    """File errors say what and why."""
    with pytest.raises(FileError, match=r"the stream file none.toml cannot be read: No such file or directory. Check the path"):
        read_stream(tmp_path / "none.toml")
    with pytest.raises(FileError, match=r"cannot be read: Is a directory"):
        read_stream(tmp_path)
    (tmp_path / "latin.toml").write_bytes("# µ".encode("latin-1"))
    with pytest.raises(FileError, match=r"latin.toml cannot be read: not UTF-8 text"):
        read_stream(tmp_path / "latin.toml")

"""Maps of long tables: a table of one's own is read as it is, and every slip in the map has a message."""

import pytest
from numpy.testing import assert_allclose

from aquabuf.errors import FileError, HeaderError, InputError
from aquabuf.readings.long.mapping import read_long_map
from aquabuf.readings.long.shipped import shipped_map, shipped_names
from aquabuf.readings.result import join_readings
from aquabuf.readings.source import load_map, open_any

TABLE = """Stn;Day;Par;Res;Kind
A;6/5/2012;T;59;sample
A;6/5/2012;Ca;4007,8;sample
B;6/5/2012;NO3;ND;sample
B;6/5/2012;malate;134;sample
B;6/5/2012;Ca;-9999;sample
C;6/5/2012;T;50;blank
"""
MAP = """
[long]
sample_id = ["Stn", "Day"]
date = "Day"
site = "Stn"
characteristic = "Par"
value = "Res"
unit = { always = "mg/L" }
limit_unit = { always = "mg/L" }
[keep_only]
"Kind" = ["sample"]
[characteristics]
"T" = { is = "temperature" , unit = "°F" }
"Ca" = "calcium"
"NO3" = { is = "nitrate_mol_l", as = "N", with = { water_kind = "river" } }
"malate" = "malate"
[acids.malate]
pk = [3.4, 5.2]
molar_mass_g = 134.0
[values]
salinity = 0.2
[fill]
temperature_c = 12.5
[read]
missing = [-9999, "ND"]
date_order = "day-month-year"
"""
SMALL = '[long]\nsample_id = "S"\ncharacteristic = "P"\nvalue = "V"\n[characteristics]\n"ph" = "ph"\n'


def read(table, map_text, table_text):
    """Readings of a table by a map, both given as text."""
    return join_readings(open_any(table(table_text, "t.csv"), table(map_text, "m.toml")))


def test_a_table_of_ones_own(table):
    """Joined names, constants in place of columns, own acids, fills, missing values, decimal commas and dates."""
    own = MAP.replace('unit = { always = "mg/L" }\nlimit', "limit").replace('"Ca" = "calcium"', '"Ca" = { is = "calcium", unit = "mg/L" }')
    own = own.replace('as = "N"', 'as = "N", unit = "mg/L"').replace('"malate" = "malate"', '"malate" = { is = "malate", unit = "mg/L" }')
    readings = read(table, own, TABLE)
    frame = readings.frame
    assert readings.rejected.empty, readings.rejected.to_string()
    assert frame["sample_id"].tolist() == ["A_6/5/2012", "B_6/5/2012"]
    assert [str(day.date()) for day in frame["date_parsed"]] == ["2012-05-06"] * 2
    assert_allclose(frame["temperature_c"], [15, 12.5])  # 59 °F, and the fill
    assert_allclose(frame["calcium_mol_l"] * 40.078e3, [4007.8, float("nan")])
    assert_allclose(frame["malate_mol_l"], [float("nan"), 1e-3])
    assert frame["salinity"].tolist() == [0.2, 0.2]
    assert list(readings.acids) == ["malate_mol_l"]
    assert readings.flags["what"].tolist() == ["missing, filled from the map file"]
    assert readings.headers["T"] == ("temperature_c", "°F")
    assert "1 rows left out by Kind: blank (1)" in readings.notes
    assert "water_kind" in frame  # of the nitrate, which has no value here


def test_a_unit_for_all(table):
    """`always` stands for a column; what no such unit fits is refused."""
    readings = read(table, MAP, TABLE)
    assert readings.rejected[["column", "rule"]].values.tolist() == [["T", "'mg/L' is not a unit of temperature"]]


def test_units_of_ones_own(table):
    """A spelling leads to a unit; case and blanks do not count."""
    text = SMALL.replace('"ph" = "ph"', '"Ca" = "calcium"').replace('value = "V"', 'value = "V"\nunit = "U"') + '[units]\n"MG" = "mg/L"\n'
    frame = read(table, text, "S,P,V,U\na,Ca,40.078, mg\n").frame
    assert_allclose(frame["calcium_mol_l"], [1e-3])


def test_a_base(table):
    """What a map says itself wins and comes first; the rest is taken over; "" takes a column away."""
    own = load_map(table('base = "wqx"\n[long]\ndepth = ""\n[characteristics]\n"pH, lab" = "ph"\n"calcium" = "ignore"\n'
                         '[detection]\nabove = ["high"]\n', "m.toml"))  # fmt: skip
    base = load_map("wqx")
    assert list(own.forms)[:3] == ["ph, lab", "calcium", "ph"]
    assert set(own.forms) == set(base.forms)
    assert own.forms["calcium"] == ()
    assert own.forms["ph, lab"][0].words == ()
    assert own.forms["ph, lab"][0].rank < own.forms["ph"][0].rank
    assert "depth" not in own.headers
    assert own.headers["value"] == "ResultMeasureValue"
    assert own.conditions["high"] == "above"
    assert "present above quantification limit" not in own.conditions
    assert own.conditions["not detected"] == "below"
    assert own.mark == "recalled"


def test_forms_by_speciation(table):
    """A form may ask for its speciation; what fits no form is left out."""
    text = SMALL.replace('"ph" = "ph"', '"N" = { is = "nitrate", speciation = ["as N", "N"], unit = "mg/L" }')
    readings = read(table, text.replace('value = "V"', 'value = "V"\nspeciation = "Sp"'), "S,P,V,Sp\na,N,14.007,AS  N\nb,N,1,as NO3\n")
    assert_allclose(readings.frame["nitrate_mol_l"], [1e-3])
    assert "1 results of 1 characteristics left out, which the map does not name: N [as NO3] (1)" in readings.notes


def test_letters_of_any_alphabet(table):
    """Words are compared as written, so that names without a Latin letter are told apart."""
    text = SMALL.replace('"ph" = "ph"', '"кальций" = { is = "calcium", unit = "mg/L" }\n"натрий" = { is = "sodium", unit = "mg/L" }')
    frame = read(table, text, "S,P,V\na,Кальций,40.078\na,Натрий,22.99\n").frame
    assert_allclose(frame[["calcium_mol_l", "sodium_mol_l"]], [[1e-3, 1e-3]])


@pytest.mark.parametrize("name", shipped_names())
def test_shipped_maps_are_valid_and_marked(name):
    """Their words are recalled from memory, and the map says so."""
    found = read_long_map(shipped_map(name))
    assert found.forms
    assert found.mark == "recalled"
    needed = {"calcium_mol_l", "sulfate_mol_l", "nitrate_mol_l", "anc_eq_l", "ph", "temperature_c", "doc_mg_l", "aluminum_mol_l"}
    assert needed <= {form.quantity.name for forms in found.forms.values() for form in forms}


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        (("[long]", "[lng]\n[long]"), InputError, r"map file m\.toml, top level: the key 'lng' is not known\. Use one of: base, source"),
        (('value = "V"', 'valu = "V"'), InputError, r"\[long\]: the key 'valu' is not known\. Use one of: sample_id, characteristic"),
        (('value = "V"\n', ""), InputError, r"\[long\]: the key 'value' is missing\. Name the header"),
        (('sample_id = "S"\n', ""), InputError, r"\[long\]: the key 'sample_id' is missing"),
        (('characteristic = "P"', 'characteristic = ""'), InputError, r"the key 'characteristic' is missing"),
        (('"S"', "3"), InputError, r"\[long\] sample_id: must be a header or a list of headers; found 3"),
        (('value = "V"', "value = 3"), InputError, r"\[long\] value: must be a header in quotes; found 3"),
        (('value = "V"', 'value = { always = "1" }'), InputError, r"\[long\] value: must be a header in quotes; found"),
        (('value = "V"', 'value = "V"\nunit = { as = "mg/L" }'), InputError, r"\[long\] unit: .*or \{ always = \"\.\.\.\" \}; found"),
        (('value = "V"', 'value = "V"\nmay_lack = ["V"]'), InputError, r"\[long\] may_lack: 'V' is needed in every file"),
        (("[long]", "source = 3\n[long]"), InputError, r"source: must be text in quotes; found 3"),
        (("[long]", 'base = "wqz"\n[long]'), InputError, r"base: no shipped map is named 'wqz'\. Use one of: wqx"),
        (('"ph" = "ph"', ""), InputError, r"\[characteristics\]: names no characteristic"),
        (('"ph" = "ph"', '"ph" = 3'), InputError, r"\[characteristics\] 'ph': must be a table of keys and values; found 3"),
        (('"ph" = "ph"', '"ph" = { is = 3 }'), InputError, r"must be the name of a quantity in quotes, .*found 3"),
        (('"ph" = "ph"', '"ph" = { as = "N" }'), InputError, r"the key 'is' is missing"),
        (('"ph" = "ph"', '"ph" = { is = "ph", of = "N" }'), InputError, r"the key 'of' is not known\. Use one of: is, fraction"),
        (('"ph" = "ph"', '"ph" = "calcum"'), InputError, r"no quantity is named 'calcum'; .*The nearest are calcium_mol_l"),
        (('"ph" = "ph"', '"ph" = "qqqq"'), InputError, r"no quantity is named 'qqqq'; .*`aquabuf columns` lists them"),
        (('"ph" = "ph"', '"ph" = "site"'), InputError, r"must be one quantity measured as a number; found 'site'"),
        (('"ph" = "ph"', '"ph" = "ph"\n"PH" = "ph"'), InputError, r"'PH': is listed twice; case and blanks do not count"),
        (('"ph" = "ph"', '"ph" = { is = "nitrate", as = "P" }'), InputError, r"'ph' as: must be one of: N, NO3; found 'P'"),
        (('"ph" = "ph"', '"ph" = { is = "ph", as = "P" }'), InputError, r"'ph' as: must be one of: nothing: it has no basis; found 'P'"),
        (('"ph" = "ph"', '"ph" = { is = "nitrate", unit = "°C" }'), InputError, r"unit: must be a unit of nitrate, e\.g\. 'mol/L'; found '°C'"),
        (('"ph" = "ph"', '"ph" = { is = "ph", negative = "drop" }'), InputError, r"negative: must be one of keep, zero, missing; found 'drop'"),
        (('"ph" = "ph"', '"ph" = { is = "ph", fraction = [] }'), InputError, r"fraction: must be a word or a list of words, .*found \[\]"),
        (('"ph" = "ph"', '"ph" = { is = "ph", speciation = 3 }'), InputError, r"speciation: must be a word or a list of words, .*found 3"),
        (('"ph" = "ph"', '"ph" = { is = "ph", with = { water_kind = "pond" } }'), InputError,
         r"with water_kind: must be one of: lake, stream, .*; found 'pond'"),
        (('"ph" = "ph"', '"ph" = { is = "ph", with = { salinity = 1 } }'), InputError, r"with salinity: must be one of: a column of words; found 1"),
        (('"ph" = "ph"', '"ph" = "ph"\n[fractions]\nions = 3'), InputError, r"\[fractions\] ions: must be a word or a list of words"),
        (('"ph" = "ph"', '"ph" = "ph"\n[leave_out]\n"A" = 3'), InputError, r"\[leave_out\] 'A': must be a word or a list of words"),
        (('"ph" = "ph"', '"ph" = "ph"\n[keep_only]\n"A" = 3'), InputError, r"\[keep_only\] 'A': must be a word or a list of words"),
        (('"ph" = "ph"', '"ph" = "ph"\n[detection]\nunder = "x"'), InputError, r"\[detection\]: the key 'under' is not known\. Use one of: below"),
        (('"ph" = "ph"', '"ph" = "ph"\n[detection]\nbelow = "x"\nabove = "X"'), InputError, r"\[detection\]: 'x' is both below and above"),
        (('"ph" = "ph"', '"ph" = "ph"\n[units]\n"MG" = "grain"'), InputError, r"\[units\] 'MG': must be a known unit, .*found 'grain'"),
        (('"ph" = "ph"', '"ph" = "ph"\n[acids.calcium]\npk = [4]'), InputError, r"\[acids\]: the name 'calcium' stands for both"),
        (('value = "V"', 'value = "V"\nsite = "P"\n[values]\nsite = "x"'), InputError, r"\[values\]: site is given by a column too"),
        (("[long]", "[long"), FileError, r"m\.toml: the map file is not valid TOML"),
    ],
)  # fmt: skip
def test_slips_in_the_map(table, change, error, words):
    """Each names the key, the rule, what was found and what to write."""
    assert change[0] in SMALL
    with pytest.raises(error, match=words):
        read_long_map(table(SMALL.replace(*change), "m.toml"))


@pytest.mark.parametrize(
    ("head", "words"),
    [
        ("S,Q,V", r"the map names headers that the file does not have: 'P' under \[long\] characteristic\. .*under \[long\] may_lack"),
        ("Sx,P,Vx", r"'S' under \[long\] sample_id \(the nearest of the file: Sx\); 'V' under \[long\] value \(the nearest of the file: Vx\)"),
        ("S,P,V,V", r"two columns have the same header 'V'"),
    ],
)
def test_maps_that_do_not_fit_the_file(table, head, words):
    """All missing headers in one message; a header that is used stands once."""
    with pytest.raises(HeaderError, match=words):
        read(table, SMALL, head + "\na,ph,7,\n")


def test_a_header_for_rows_to_leave_out_must_be_there(table):
    """Without it blanks would count as samples, unless the map says it can be done without."""
    text = SMALL + '[leave_out]\n"Kind" = "blank"\n'
    with pytest.raises(HeaderError, match=r"'Kind' under \[leave_out\]"):
        read(table, text, "S,P,V\na,ph,7\n")
    assert len(read(table, text.replace("[long]", '[long]\nmay_lack = "Kind"'), "S,P,V\na,ph,7\n").frame) == 1


def test_columns_that_play_no_part(table):
    """Counted, not listed; a header that is used twice among them is no matter."""
    assert read(table, SMALL, "S,P,V,x,x,\na,ph,7,1,2,\n").notes == ("2 columns left out, which the map does not name",)


def test_a_table_without_rows(table):
    """As in a wide table."""
    with pytest.raises(InputError, match=r"the table has a header but no rows"):
        read(table, SMALL, "S,P,V\n")

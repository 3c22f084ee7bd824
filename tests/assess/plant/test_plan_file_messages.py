"""What a plan file that cannot be used is told: file, line, table, key, rule, value, remedy."""

import re

import pytest

from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.errors import FileError, InputError

PLAN = '''[plan]
name = "Upper Mill"

[flow]
now = "9.6 ML/d"

[water]
alkalinity = "57.4 mg/L as CaCO3"
ph = 7.68
temperature_c = 11.2

[products.lime]
is = "hydrated lime"
strength = "92 %"

[products.co2]
is = "carbon dioxide"
strength = "100 %"

[products.alum]
is = "liquid alum as 14.3-water"

[sources.well]
alkalinity = "5 meq/L"
ph = 7.2
temperature_c = 9

[guards]
over_dose = 1.2

[[steps]]
do = "coagulate"
product = "alum"
dose = "25 mg/L"

[[steps]]
do = "adjust"
products = ["lime", "co2"]
target = { ph = 8.4, alkalinity = "45 mg/L as CaCO3" }
'''
SEASON = "sample_id,temperature_c,ph,alkalinity_mg_l_caco3\nR14-05,10.0,7.5,40\nR14-06,11.0,99,50\n"
WATER = PLAN[PLAN.index("[water]"):PLAN.index("[products.lime]")]
ADJUST = PLAN[PLAN.rindex("[[steps]]"):]
COAGULATE = PLAN[PLAN.index("[[steps]]"):PLAN.rindex("[[steps]]")]
ROW = '[water]\nreadings = "year.csv"\n'
STONE = '[products.stone]\nis = "limestone"\nstrength = "98 %"\n'


def step(text, more=""):
    """A change: the last step instead, and tables before it."""
    return (ADJUST, f"{more}[[steps]]\n{text}\n")


def product(text, more=""):
    """A change: another product."""
    return ("[guards]", f"[products.new]\n{text}\n[guards]{more}")


def target(text):
    """A change: another target."""
    return ('{ ph = 8.4, alkalinity = "45 mg/L as CaCO3" }', text)


@pytest.fixture
def read(tmp_path):
    """Reads a text as a plan file; a table of readings lies beside it."""
    (tmp_path / "year.csv").write_text(SEASON, encoding="utf-8")
    (tmp_path / "empty.csv").write_text("sample_id,temperature_c,ph,alkalinity_mg_l_caco3\nx,11,99,50\n", encoding="utf-8")

    def of(text):
        path = tmp_path / "plan.toml"
        path.write_text(text, encoding="utf-8")
        return read_plan(path)
    return of


# old and new text, the line that the message must name (a word of it), the message
MESSAGES = [
    # keys and tables
    (('strength = "92 %"', 'strenght = "92 %"'), "strenght", r"\[products.lime\]: strenght is not a key here. The nearest is strength. Correct it or remove it\.$"),
    (("[guards]", "[gards]"), "[gards]", r"top level: gards is not a table of a plan. The nearest is guards. Correct it or remove it"),
    (("[plan]", "pump = 3\n[plan]"), "pump = 3", r"top level: pump is not a table of a plan\. (There are plan, flow|The nearest)"),
    (('[flow]\nnow = "9.6 ML/d"\n', ""), None, r"^plan.toml: a plan needs \[flow\]; it is missing. Add it"),
    ((WATER, ""), None, r"^plan.toml: a plan needs \[water\]; it is missing"),
    (("[flow]\n", "[[flow]]\n"), "[[flow]]", r"\[flow\]: must be a table of keys and values; found \[\{'now'.*Write \[flow\] and its keys below"),
    (("[products.lime]\n", "[products]\nlimes = 3\n[products.lime]\n"), "limes = 3", r"\[products.limes\]: must be a table of keys and values; found 3. Write \[products.limes\]"),
    (('name = "Upper Mill"', 'use = "beer"\nname = "x"'), "use", r"\[plan\]: use must be one of drinking water, .*; found 'beer'. "),
    # flow
    (('now = "9.6 ML/d"', 'now = "9.6 ML/d"\nleast = "10 ML/d"'), "least", r"\[flow\]: least must be at most the flow now, 9600 m³/d; found 10000 m³/d. Correct one of them"),
    (('now = "9.6 ML/d"', 'now = "9.6 ML/d"\nmost = "1 ML/d"'), "most", r"most must be at least the flow now, 9600 m³/d; found 1000 m³/d"),
    # water
    (("ph = 7.68", 'ph = 7.68\ncalcum = "3 mg/L"'), "calcum", r"\[water\] 'calcum': keys must be readings, sample, map or one of .*; found 'calcum'. The nearest known names are calcium_mol_l.*Correct it or remove it"),
    (("ph = 7.68", "ph = 7.68\nlake_area_m2 = 3"), "lake_area", r"\[water\] 'lake_area_m2': keys must be .*; found 'lake_area_m2'"),
    (("ph = 7.68", 'ph = "7.68 mg/L"'), "ph = ", r"\[water\] 'ph': column 'ph \(mg/L\)'"),
    (("temperature_c = 11.2\n\n[products.lime]", "[products.lime]"), "[water]", r"\[water\]: the temperature is needed; it is missing. Add for example temperature_c = 11.2"),
    (("ph = 7.68", ""), "[water]", r"\[water\]: two of pH, alkalinity, inorganic carbon \(dic\) and CO2 pressure \(pco2\) are needed; found alkalinity. Add another"),
    (("ph = 7.68", "ph = 7.68\ncalcium_u_mg_l = 1"), "[water]", r"\[water\]: calcium_u_mol_l must go with a value; found none of calcium. Add the value"),
    (("ph = 7.68", 'ph = 7.68\nsample = "a"'), "sample", r"\[water\]: sample must go with readings; found none. Add readings or remove sample"),
    (("ph = 7.68", 'ph = 7.68\nmap = "a"'), "map", r"map must go with readings"),
    ((WATER, '[water]\nreadings = "none.csv"\n'), "readings", r"\[water\]: readings cannot be read: .*none.csv"),
    ((WATER, '[water]\nreadings = "nul\\u0000.csv"\n'), "readings", r"\[water\]: readings cannot be read: "),
    ((WATER, ROW + 'map = "none.toml"\n'), "readings", r"readings cannot be read: .*none.toml: no such map file"),
    ((WATER, ROW + 'sample = "R14-50"\n'), "sample", r"sample must be a name of year.csv; found 'R14-50', which is not there. The nearest is R14-05. Correct it"),
    ((WATER, ROW + 'sample = "R14-06"\n'), "sample", r"sample 'R14-06' of year.csv cannot be used. Row 3, ph = '99': .*"),
    ((WATER, ROW + "sample = 14\n"), "sample", r"sample must be text in quotes; found 14. Write for example sample = \"R14-06\""),
    ((WATER, '[water]\nreadings = "empty.csv"\n'), "readings", r"empty.csv must have a row that can be used; found none.* Row 2, ph = '99': "),
    (("[sources.well]\n", '[sources.well]\nshare = "30 %"\nflow = "1 ML/d"\n'), "flow = \"1", r"\[sources.well\]: a source must have one of share and flow; found both. Remove one"),
    (("[sources.well]\n", '[sources.well]\nshare = "130 %"\n'), "share", r"share must be above 0 and at most 1; found '130 %'"),
    # products
    (('strength = "92 %"\n', ""), "[products.lime]", r"\[products.lime\]: give the strength of lime \(hydrated lime\) from its certificate: none is usual. Write for example strength = \"92 %\"\."),
    (('is = "hydrated lime"', 'is = "hydrated line"'), "is = ", r"\[products.lime\]: no product is called 'hydrated line'; nearest: hydrated lime"),
    (('is = "hydrated lime"', 'is = "alum"'), "is = ", r"\[products.lime\]: 'alum' can mean several products. Say which"),
    (('strength = "92 %"', 'strength = "92 %"\nstrength_as = "Al2O3"'), "strength = \"92", r"\[products.lime\]: the strength of 'hydrated lime' \(Ca\(OH\)2\) cannot be counted as 'Al2O3'"),
    (('strength = "92 %"', 'strength = "80 %"\nstrength_as = "CaO"'), "strength = \"80", r"80 % as CaO is more than pure Ca\(OH\)2 holds"),
    (product('is = "quicklime"\nstrength_as = "CaO"'), "strength_as", r"\[products.new\]: strength_as must go with strength; found none. Add strength or remove strength_as"),
    (product('is = "polyaluminum chloride"\nstrength = "17 %"'), "[products.new]", r"basicity is needed for polyaluminum chloride; it is missing. Take it from the certificate, for example basicity = \"70 %\""),
    (product('is = "quicklime"\nstrength = "80 %"\nstrength_as = "Ca0"'), "strength = \"80", r"'Ca0' is not a chemical formula: Ca has a count of 0"),
    (product('is = "quicklime"\nbasicity = "70 %"'), "basicity", r"\[products.new\]: 'quicklime' has no basicity; found 0.7"),
    (product('is = "quicklime"\nformula = "CaO"'), "formula", r"formula belongs to a product of your own; found is = 'quicklime'. Write is = \"own\", or remove it"),
    (product('is = "own"\nstrength = "50 %"\nadds = { calcium = 1 }'), "is = \"own\"", r"product 'new' needs the formula or the molar mass"),
    (product('is = "own"\nstrength = "50 %"\nformula = "CaQ"\nadds = { calcium = 1 }'), "is = \"own\"", r"'CaQ' is not a chemical formula"),
    (product('is = "own"\nformula = "CaO"\nadds = { calcium = 1 }'), "[products.new]", r"give the strength of new \(new\) from its certificate"),
    (product('is = "own"\nformula = "CaO"\nstrength = "50 %"\nadds = { calcium = "1" }'), "adds", r"\[products.new\] adds: calcium must be a number per mole, up to 1000; found '1'. Write it without quotes"),
    (product('is = "own"\nformula = "CaO"\nstrength = "50 %"\nadds = { calcium = 1e9 }'), "adds", r"calcium must be a number per mole, up to 1000; found 1000000000.0"),
    (product('is = "own"\nformula = "CaO"\nstrength = "50 %"\nadds = { calcum = 1 }'), "is = \"own\"", r"'calcum' is not a dissolved total"),
    (product('is = "own"\nmolar_mass = 50\nstrength = "120 %"\nadds = { calcium = 1 }'), "strength = \"120", r"strength must be at most 100 %; found 120 %. Correct it"),
    (product('is = "quicklime"\nform = "powder"'), "form", r"form must be one of solid, liquid, slurry, gas; found 'powder'"),
    (product('is = "quicklime"\nprice = 0.31'), "price", r"price must have a unit, one of per kg, per t, per lb, per short ton; found 0.31. Write for example price = \"0.31 per kg\""),
    # feed
    (product('is = "quicklime"\npump = { largest = "20 L/h" }\nfeeder = { largest = "2 kg/h" }'), "feeder", r"a product must have one of pump and feeder; found both. Remove one"),
    (product('is = "quicklime"\npump = { biggest = "20 L/h" }'), "pump", r"\[products.new\] pump: biggest is not a key here. (There are|The nearest)"),
    (product('is = "quicklime"\npump = { largest = "20 kg/h" }'), "pump", r"\[products.new\] pump: largest must be in one of .*L/h.*; found 'kg/h'"),
    (product('is = "quicklime"\n[products.new.pump]\nlargest = "20 L/h"\ncurve = [[20, 3.9], [40, 3.1]]'), "curve", r"\[products.new\] pump: calibration curve of pump 'new' must rise from point to point"),
    (product('is = "quicklime"\n[products.new.pump]\nlargest = "20 L/h"\ncurve = [[20, 3.9], [40, 8]]\ncurve_unit = "m"'), "curve = ", r"must be in a volume or mass per time; found 'm'"),
    (product('is = "quicklime"\n[products.new.pump]\nlargest = "20 L/h"\nturndown = 10\nrange = ["1 %", "5 %"]'), "[products.new.pump]", r"\[products.new\] pump: smallest rate of pump 'new' must be below its largest"),
    (product('is = "quicklime"\nslurry = "10 %"'), "slurry", r"slurry and slurry_density must come together; found slurry alone. Add slurry_density: weigh a liter"),
    (product('is = "quicklime"\nslurry_density = "1.1 kg/L"'), "slurry_density", r"found slurry_density alone. Add slurry:"),
    (product('is = "limestone"\nstrength = "98 %"\nstore = "5 m3"'), "store", r"store is given as a volume, so that the density of the product is needed; it is missing. Add density, or give the mass"),
    # steps
    ((COAGULATE + ADJUST, ""), None, r"\[steps\]: a plan needs its steps, one or more; found None. Write \[\[steps\]\] and below it for example do = \"adjust\""),
    ((COAGULATE + ADJUST, "[steps]\ndo = 'adjust'"), "[steps]", r"a plan needs its steps, one or more; found \{'do': 'adjust'\}"),
    (('do = "adjust"', 'do = "ajust"'), "do = \"ajust\"", r"\[\[steps\]\] 2: do must be one of coagulate, .*, adjust; found 'ajust'. The nearest is adjust. Correct it"),
    (('do = "adjust"\n', ""), "[[steps]]#2", r"\[\[steps\]\] 2: do is needed \(kind of the step\); it is missing. Add for example do = \"coagulate\""),
    (('do = "adjust"', 'do = "adjust"\nopen = true'), "open = true", r"\[\[steps\]\] 2 \(adjust\): open is not a key of adjust. The nearest is open_to_air"),
    (('do = "coagulate"', 'do = "coagulate"\nname = "adjust"'), "do = \"adjust\"", r"each step must have a name of its own; found 'adjust' again. Add name = \"...\""),
    (('products = ["lime", "co2"]', 'products = ["line", "co2"]'), "products = ", r"\[\[steps\]\] 2 \(adjust\): products names 'line', which is not in the store; there are lime, co2, alum. The nearest is lime. Correct it, or add \[products.\"line\"\]"),
    (('product = "alum"', 'product = "xyz"'), "product = ", r"\(coagulate\): product names 'xyz', which is not in the store; there are lime, co2, alum. Correct it, or add"),
    (('products = ["lime", "co2"]', 'products = ["lime", "lime"]'), "products = ", r"products must name each product once; found \['lime', 'lime'\]. Remove one"),
    # doses
    *((('dose = "25 mg/L"', f"dose = {bad}"), "dose = ", message) for bad, message in (
        ('"25 mg/L as Fe"', r"a dose of 'liquid alum as 14.3-water' .* cannot be counted as 'Fe'"), ('"25 mg/L as Qq"', r"'Qq' is not a chemical formula"),
        ('"25 meq/L"', r"dose must be in one of mg/L, g/L, µg/L, mmol/L; found 'meq/L'. Write for example dose = \"25 mg/L\""), ('"25"', r"dose must be in one of mg/L, .*; found ''"),
        ('"25 mg/kg"', "found 'mg/kg'"), ('"25 °dH"', "found '°dH'"), ('"3 mol/L"', r"dose must be at most 1 mol/L of active substance; found 3 mol/L. Check value and unit"),
        ('"1 mmol/L as Al"', r"dose in moles counts the active substance; found a basis beside it. Remove it"), ("25", r"dose must have a unit, one of mg/L, .*; found 25"))),
    (('dose = "25 mg/L"', 'dose = "25 mg/L as Al"\ndose_as = "pure"'), "dose_as", r"what the dose counts must be said once; found 'Al' in dose and 'pure' in dose_as. Remove one"),
    (('dose = "25 mg/L"', 'dose = "25 mg/L"\ndose_as = "Fe"'), "dose_as", r"cannot be counted as 'Fe'"),
    (step('do = "contact"\nproduct = "stone"\nco2_dose = "5 mg/L"', STONE), "co2_dose", r"co2_dose must go with co2; found none. Add co2 or remove co2_dose"),
    # targets
    (target("{ pH_ = 8 }"), "target", r"\(adjust\) target: pH_ is not a quantity that a target can be set for. The nearest is ph. Correct it or remove it"),
    (target('{ alkalinty = "3 meq/L" }'), "target", r"alkalinty is not a quantity .* The nearest is alkalinity"),
    (target("{ pco2 = 1 }"), "target", r"pco2 is not a quantity that a target can be set for"),
    (target("{}"), "target", r"target must have one quantity or more; found none. Write for example target = \{ ph = 8.4 \}"),
    (target("{ alkalinity = 45 }"), "target", r"alkalinity must have a unit, for example mg/L as CaCO3; found 45. Write for example alkalinity = \"... mg/L as CaCO3\""),
    (target('{ alkalinity = "45" }'), "target", r"alkalinity must have a unit, for example mg/L as CaCO3; found '45'"),
    (target('{ alkalinity = "45 furlongs" }'), "target", r"alkalinity cannot be '45 furlongs': alkalinity must be in one of .*; found 'furlongs'"),
    (target('{ alkalinity = "45 mg/L" }'), "target", r"alkalinity cannot be '45 mg/L': .*basis"),
    (target('{ alkalinity = "4 mmol/kg" }'), "target", r"alkalinity cannot be '4 mmol/kg': "),
    (target('{ calcium = "-3 mg/L" }'), "target", r"calcium cannot be '-3 mg/L': must be at least 0; found '-3 mg/L'"),
    (target("{ ph = 15 }"), "target", r"ph must be at most 14; found 15. Write for example ph = 8.4"),
    (target('{ ph = "8.4 mg/L" }'), "target", r"ph cannot be '8.4 mg/L': pH has no unit; found 'mg/L'"),
    (target("{ ph = true }"), "target", r"ph must be a number; found true"),
    (target("{ alkalinity = true }"), "target", r"alkalinity must be a number with its unit, in quotes; found true"),
    (target('{ ph = "about 8" }'), "target", r"ph must begin with a number; found 'about 8'"),
    (target("{ ph = [8.6, 8.2] }"), "target", r"ph must have its lower limit first; found \[8.6, 8.2\]"),
    (target("{ ph = [8.2] }"), "target", r"ph must be a value, \[low, high\], .*; found \[8.2\]"),
    # single kinds of steps
    *((step(f'do = "aerate"\n{keys}'), "[[steps]]#2", rf"aerate takes one of efficiency, kla with time, or to_air = true; found {found}. Give one of them")
      for keys, found in (("", "none"), ('efficiency = "80 %"\nto_air = true', "efficiency and to_air"), ('kla = "2 per h"', "kla"), ("to_air = false", "to_air"),
                          ('efficiency = "80 %"\ntime = "1 h"', "efficiency and time"))),
    (step('do = "contact"\nproduct = "stone"\nrate = "2 per h"', STONE), "[[steps]]#2", r"contact takes one of approach, or rate with time; found rate. Give one of them"),
    (step('do = "blend"\nwith = ["wel"]'), "with", r"with names 'wel', which is not among the sources; there are well. The nearest is well. Correct it, or add \[sources.\"wel\"\]"),
    (step('do = "blend"\nwith = ["well", "well"]'), "with", r"with must name each source once; found \['well', 'well'\]"),
    (step('do = "blend"\nwith = ["well"]'), "[[steps]]#2", r"the blend needs a share or flow of well; found none. Add shares here, or share to \[sources.well\]"),
    (step('do = "blend"\nwith = ["well"]\nshares = [0.3, 0.3]'), "shares", r"shares must be as many as the sources in with; found 2 for 1. Give one each"),
    (step('do = "blend"\nwith = ["well", "other"]\nshares = [0.6, 0.6]', '[sources.other]\nph = 7\nalkalinity = "1 meq/L"\ntemperature_c = 9\n'), "shares", r"shares of a blend must add up to 100 % at most; found 120 %. Lower them"),
    (step('do = "recarbonate"\nproduct = "co2"\nph = [8.6, 10.3]'), "ph = [8.6", r"ph must be that of one stage, or of two with the lower one last; found \[8.6, 10.3\]. Write for example ph = \[10.3, 8.6\]"),
    (step('do = "recarbonate"\nproduct = "co2"\nph = [11, 10, 9]'), "ph = [11", r"found \[11.0, 10.0, 9.0\]"),
    (step('do = "soften"\nlime = "lime"\nmethod = "split"'), "method", r"magnesium belongs to method = \"split\" and must be given there; found method = \"split\" without it. Give it, or change the method"),
    (step('do = "soften"\nlime = "lime"\nmethod = "single stage"\nmagnesium = "3 mg/L"'), "magnesium", r"found method = \"single stage\" with it"),
    (step('do = "remineralize"\nmineral = "lime"\nco2 = "co2"'), "[[steps]]#2", r"remineralize needs what is wanted, alkalinity or calcium or both; found none. Add one"),
    (step('do = "remineralize"\nmineral = "lime"\nco2 = "co2"\nalkalinity = "1 meq/L"\nph = 8.3'), "ph = 8.3", r"base and ph must come together; found ph alone. Add the other"),
    # hold, drift, guards, limits
    (("over_dose = 1.2", "ph = [7, 7]"), "ph = [7", r"\[guards\]: the pH guard rails must go from low to high within 0 to 14; found 7 to 7"),
    (("[guards]", '[hold]\nph = 8\nintensity = "1 meq/L per pH"\nfault_of = "acid"\n[guards]'), "fault_of", r"\[hold\]: fault_of must go with fault; found none. Add fault or remove fault_of"),
    (("[guards]", '[hold]\nph = 8\nintensity = "1 meq/L"\n[guards]'), "intensity", r"\[hold\]: intensity must be in one of meq/L per pH, .*; found 'meq/L'"),
    (("[guards]", "[hold]\nph = 8\n[guards]"), "[hold]", r"\[hold\]: intensity is needed \(buffer intensity wanted at that pH\); it is missing"),
    (("[guards]", '[drift]\nreadings = "none.csv"\n[guards]'), "readings", r"\[drift\]: readings must be a file beside the plan; found no file 'none.csv'. Correct the name"),
    (("[guards]", '[drift]\nreadings = "\\u0000"\n[guards]'), "readings", r"\[drift\]: readings must be a file beside the plan; found no file"),
    (("[guards]", '[drift]\nmap = "year.csv"\n[guards]'), "map", r"\[drift\]: map must go with readings; found none. Add readings or remove map"),
    (("[guards]", '[drift]\nerrors = { pph = 0.1 }\n[guards]'), "errors", r"\[drift\] errors 'pph': keys must be one of .*; found 'pph'. The nearest known names are ph"),
    (("[guards]", '[drift]\nerrors = { ph = -0.1 }\n[guards]'), "errors", r"\[drift\] errors 'ph': must be at least 0; found -0.1"),
    (("[guards]", '[limits]\n"my pH" = 3\n[guards]'), "my pH", r"\[limits.my pH\]: a limit must be a table of keys and values; found 3. Write \[limits.\"my pH\"\] and its keys below"),
]


def line_of(text, mark):
    """Line that begins with the mark; of several the one behind '#'."""
    mark, _, number = mark.partition("#")
    lines = [n for n, line in enumerate(text.splitlines(), start=1) if line.startswith(mark) or (mark in line and line.endswith(mark))
             or re.match(rf"\"?{re.escape(mark)}", line)]
    return lines[int(number or 1) - 1]


@pytest.mark.parametrize(("change", "mark", "message"), [m for m in MESSAGES if m[2]], ids=lambda v: v[:40] if isinstance(v, str) else "")
def test_messages(read, change, mark, message):
    """Each mistake is told with its line."""
    old, new = change
    assert PLAN.count(old) >= 1
    text = PLAN.replace(old, new, 1)
    with pytest.raises(InputError, match=message) as error:
        read(text)
    if mark is not None:
        after = text.index(new) if new else 0  # the line is looked for from the change on
        first = text[:after].count("\n") if mark in new else 0
        expected = first + line_of("\n".join(text.splitlines()[first:]), mark)
        assert str(error.value).startswith(f"plan.toml, line {expected}, ")


def test_the_plan_itself_is_read(read):
    """What the messages start from has no mistake."""
    assert [s.kind for s in read(PLAN).steps] == ["coagulate", "adjust"]


def test_store_and_sources_may_be_empty(read):
    """Then the message says so."""
    bare = PLAN[:PLAN.index("[products.lime]")]
    with pytest.raises(InputError, match=r"product names 'alum', and the store is empty. Add \[products.\"alum\"\]"):
        read(bare + COAGULATE)
    with pytest.raises(InputError, match=r"with names 'well', and the plan has no sources. Add \[sources.\"well\"\]"):
        read(bare + '[[steps]]\ndo = "blend"\nwith = "well"\n')


@pytest.mark.parametrize("text", ["[plan", "a = ", "[plan]\nname = 'x'\nname = 'y'", "x = " + "[" * 5000, "x = 1979-13-45"])
def test_not_toml(read, text):
    """The parser says where."""
    with pytest.raises(InputError, match=r"^plan.toml is not valid TOML: .*\. Correct"):
        read(text)


def test_file_that_cannot_be_read(tmp_path):
    """File errors say what and why."""
    with pytest.raises(FileError, match=r"the plan file none.toml cannot be read: No such file or directory. Check the path"):
        read_plan(tmp_path / "none.toml")
    with pytest.raises(FileError, match=r"cannot be read: Is a directory"):
        read_plan(tmp_path)
    (tmp_path / "latin.toml").write_bytes("# µ".encode("latin-1"))
    with pytest.raises(FileError, match=r"latin.toml cannot be read: not UTF-8 text"):
        read_plan(tmp_path / "latin.toml")

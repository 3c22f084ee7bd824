"""The list of keys of plan files and its checks: every example and default is valid, and every message."""

import csv
import math
import tomllib
from importlib.resources import files

import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.plant.hold import buffer_uses
from aquabuf.assess.plant.plan_keys import Amount, check_keys, check_value, plan_keys, step_kinds, window_of
from aquabuf.assess.plant.plan_place import Place, nearest_word, shown_value
from aquabuf.assess.plant.plan_units import in_key_unit, units_of
from aquabuf.assess.plant.toml_lines import toml_lines
from aquabuf.errors import InputError

ROWS = list(csv.DictReader((files("aquabuf") / "data" / "plan_keys.csv").read_text(encoding="utf-8").splitlines()))
SECTIONS = list(dict.fromkeys(row["section"] for row in ROWS))
KEYS = [plan_keys(section)[name] for section in SECTIONS for name in plan_keys(section)]


def check(text, section):
    """The values of a table written as TOML, checked against a section."""
    return check_keys(Place("p.toml", toml_lines(text), (), f"[{section}]"), tomllib.loads(text), section)


# ---------------------------------------------------------------- the list


def test_each_key_is_listed_once_and_explained():
    """No key twice in a section; each has a type, an example and words."""
    assert len({(row["section"], row["key"]) for row in ROWS}) == len(ROWS) == len(KEYS)
    assert [row for row in ROWS if not (row["type"] and row["example"] and row["words"])] == []
    assert [row for row in ROWS if row["needed"] and row["default"]] == []


@pytest.mark.parametrize("key", KEYS, ids=lambda k: f"{k.section}.{k.name}")
def test_example_and_default_pass_their_own_check(key):
    """What messages and docs tell people to write is accepted."""
    place = Place("p.toml", toml_lines(""), (), key.section)
    for written in filter(None, (key.example, key.default)):
        check_value(place, key, tomllib.loads(f"v = {written}")["v"])


def test_choices_come_from_where_they_are_known():
    """Uses of the buffer table, kinds of steps of this list."""
    assert plan_keys("plan")["use"].choices == buffer_uses()
    assert plan_keys("steps")["do"].choices == step_kinds()
    assert step_kinds()[:2] == ("coagulate", "chlorinate")
    assert {f"steps.{kind}" for kind in step_kinds()} == {s for s in SECTIONS if s.startswith("steps.")}


# ---------------------------------------------------------------- units


@pytest.mark.parametrize(("value", "unit", "dimension", "wanted", "expected"), [
    (9.6, "ML/d", "flow", "m³/d", 9600.0), (9.6, "MLD", "flow", "m³/d", 9600.0), (2.0, "MGD", "flow", "m³/d", 2e6 * 3.785411784e-3),
    (100.0, "gpm", "flow", "m³/d", 1.44e5 * 3.785411784e-3), (400.0, "m3/h", "flow", "m³/d", 9600.0), (20.0, "L/h", "flow", "L/h", 20.0), (240.0, "mL/min", "flow", "L/h", 14.4),
    (2.0, "ML", "volume", "m³", 2000.0), (2.0, "mL", "volume", "L", 0.002), (250.0, "L", "volume", "L", 250.0),
    (57.4, "mg/L as CaCO3", "alkalinity_eq_l", "eq/L", 57.4 / 50043.0), (61.017, "mg/L as HCO3", "alkalinity_eq_l", "eq/L", 1e-3),
    (92.0, "%", "share", "-", 0.92), (0.3, "-", "share", "-", 0.3), (0.31, "per kg", "price", "per kg", 0.31), (0.45359237, "per lb", "price", "per kg", 1.0),
    (310.0, "per t", "price", "per kg", 0.31), (907.18474, "per short ton", "price", "per kg", 1.0), (2.0, "per h", "per_time", "per h", 2.0),
    (2.0, "per  min", "per_time", "per h", 120.0), (48.0, "per d", "per_time", "per h", 2.0), (30.0, "min", "time", "h", 0.5), (7.0, "d", "time", "d", 7.0),
    (0.5, "meq/L per pH", "intensity", "eq/L per pH", 5e-4), (50.043, "mg/L as CaCO3 per pH", "intensity", "eq/L per pH", 1e-3),
    (50.0, "°F", "temperature_c", "°C", 10.0), (14.007, "mg/L as N", "ammonium_mol_l", "mol/L", 1e-3), (70.90, "mg/L", "hypochlorite_mol_l as Cl2", "mol/L", 1e-3),
    (18.998, "mg/L", "fluoride_mol_l", "mol/L", 1e-3), (1335.0, "kg/m3", "density", "kg/L", 1.335), (425.0, "ppm", "mole_fraction", "µmol/mol", 425.0)])
def test_units(value, unit, dimension, wanted, expected):
    """Definitions of units, molar masses by IUPAC; a pound is 0.45359237 kg, a US gallon 3.785411784 L."""
    assert_allclose(in_key_unit(value, unit, dimension, wanted), expected, rtol=2e-5 if "as" in unit or dimension.endswith(("_l", "Cl2")) else 1e-12)


@pytest.mark.parametrize(("unit", "dimension", "message"), [
    ("mL/d", "flow", r"must be in one of ML/d, m³/d, .*; found 'mL/d'"), ("ml/d", "flow", "found 'ml/d'"), ("", "flow", r"must have a unit, one of ML/d, .*; found none"),
    ("%", "flow", "found '%'"), ("kg", "share", r"must be in one of -, %; found 'kg'"), ("per mole", "price", r"one of per kg, per t, per lb, per short ton; found 'per mole'"),
    ("mg/L", "alkalinity_eq_l", r"must say what it counts, mg/L as CaCO3 or mg/L as HCO3; found 'mg/L'"), ("mg/L", "ammonium_mol_l", "must say what it counts, mg/L as N or mg/L as NH4"),
    ("meq/kg", "alkalinity_eq_l", "found 'meq/kg'"), ("mg/L as N", "alkalinity_eq_l", "found 'mg/L as N'"), ("meq/L", "intensity", r"one of meq/L per pH, .*; found 'meq/L'"),
    ("mg/L per pH", "intensity", "found 'mg/L per pH'"), ("µmol/kg per pH", "intensity", "found 'µmol/kg per pH'"), ("per pH", "intensity", "found 'per pH'")])
def test_units_of_something_else(unit, dimension, message):
    """Refused with the units that may stand there; litres in thousands are never taken for millilitres."""
    with pytest.raises(InputError, match=message):
        in_key_unit(1.0, unit, dimension, {"flow": "m³/d", "share": "-", "price": "per kg", "intensity": "eq/L per pH"}.get(dimension, "mol/L"))


@pytest.mark.parametrize("dimension", sorted({d for k in KEYS for d in k.dimension.split(" or ") if d not in ("", "dose")}))
def test_every_unit_in_a_message_is_accepted(dimension):
    """Units that messages offer can be written, and lead there and back."""
    assert units_of(dimension)
    for unit in units_of(dimension):
        assert_allclose(in_key_unit(in_key_unit(3.0, unit, dimension, units_of(dimension)[0]), units_of(dimension)[0], dimension, unit), 3.0, rtol=1e-9)


# ---------------------------------------------------------------- values


def test_values_come_in_the_unit_of_the_list():
    """Litres per hour of a pump, cubic meters per day of the works; shares with or without a percent sign."""
    found = check('now = "4 ML/d"\nmost = "1 MGD"', "flow")
    assert_allclose([found["now"], found["most"]], [4000.0, 3785.411784])
    assert "least" not in found.values
    pump = check('largest = "0.48 m3/d"\nstroke = "60 %"', "products.pump")
    assert_allclose([pump["largest"], pump["stroke"], pump["speed"]], [20.0, 0.6, 1.0])
    assert [key.name for key in pump.defaults] == ["speed", "sets", "curve_unit"]
    assert_allclose([check(f"is = 'x'\nstrength = {text}", "products")["strength"] for text in ('"92 %"', "0.92", '"0.92"')], 0.92)


def test_either_volume_or_mass():
    """The dimension comes with the number."""
    assert check('is = "x"\nstore = "5 m3"\ndelivery = "2 short tons"'.replace("tons", "ton"), "products")["store"] == Amount(5.0, "m³", "volume")
    found = check('is = "x"\nstore = "3 t"\nstock = "1000 L"', "products")
    assert (found["store"], found["stock"]) == (Amount(3000.0, "kg", "weight"), Amount(1.0, "m³", "volume"))
    with pytest.raises(InputError, match=r"store must be in one of ML, m³, .*kg, g, .*; found '°C'. Write for example store = \"5 m3\""):
        check('is = "x"\nstore = "5 °C"', "products")


def test_words_or_quantity_and_lists():
    """"all" beside an amount; one product as a list of one."""
    assert check('oxidize = "All"', "steps.nitrify")["oxidize"] == "all"
    assert_allclose(check('oxidize = "14.007 mg/L as N"', "steps.nitrify")["oxidize"], 1e-3, rtol=1e-4)
    assert check('with = "well"', "steps.blend")["with"] == ("well",)
    assert check('product = "co2"\nph = [10.3, 8.6]', "steps.recarbonate")["ph"] == (10.3, 8.6)
    assert check("name = 'x'\ndate = 2026-03-14", "plan")["date"] == "2026-03-14"
    assert check("name = ' x '\nuse = 'Drinking_Water'", "plan").values == {"name": "x", "use": "drinking water"}


def number(value):
    """A bare number as the reader of a window's parts."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise InputError(f"bad {value!r}")
    return float(value)


@pytest.mark.parametrize(("value", "expected"), [
    (8.4, (8.4, 8.4)), ([6, 9.5], (6.0, 9.5)), ([7, 7], (7.0, 7.0)), ("at least 7.5", (7.5, math.inf)), ("At most  8", (-math.inf, 8.0))])
def test_windows(value, expected):
    """A value, two limits, or one."""
    assert window_of(value, number) == expected


@pytest.mark.parametrize(("value", "message"), [
    ([1], r"must be a value, \[low, high\], \"at least ...\" or \"at most ...\"; found \[1\]"), ([], "must be a value"), ([1, 2, 3], "must be a value"),
    ([9, 6], r"must have its lower limit first; found \[9, 6\]"), ("at least x", "bad 'x'"), ("at least", "bad 'at least'"), (["a", 1], "bad 'a'"), (True, "bad True")])
def test_windows_that_are_none(value, message):
    """Each says what it must be."""
    with pytest.raises(InputError, match=message):
        window_of(value, number)


# ---------------------------------------------------------------- messages

MESSAGES = [
    ("products", 'is = "x"\n\nstrenght = "92 %"', r"^p.toml, line 3, \[products\]: strenght is not a key here. The nearest is strength. Correct it or remove it.$"),
    ("guards", "\nqqq = 1", r"line 2, \[guards\]: qqq is not a key here. There are ph, over_dose, over_ph. Correct it or remove it"),
    ("flow", "", r"line 1, \[flow\]: now is needed \(flow treated now\); it is missing. Add for example now = \"9.6 ML/d\"."),
    ("flow", "now = 9.6", r"now must have a unit, one of ML/d, m³/d, .*, MGD, .*; found 9.6. Write for example now = \"9.6 ML/d\"."),
    ("flow", 'now = "9.6"', r"now must have a unit, one of ML/d, .*; found none. Write for example"),
    ("flow", 'now = "fast"', r"now must begin with a number; found 'fast'. Write for example now = \"9.6 ML/d\"."),
    ("flow", 'now = "9,6 ML/d"', r"now must have a point as decimal mark"),
    ("flow", 'now = "9.6 furlongs"', r"now must be in one of ML/d, .*; found 'furlongs'. Write for example"),
    ("flow", 'now = "0 ML/d"', r"now must be above 0 and at most 1e\+08 m³/d; found '0 ML/d'. Check value and unit."),
    *(("flow", f"now = {bad}", rf"now must be a number with its unit, in quotes; found {shown}. Write for example now =")
      for bad, shown in (("true", "true"), ("['9 ML/d']", r"\['9 ML/d'\]"), ("{}", r"\{\}"), ("nan", "nan"), ("2026-01-01", "2026-01-01"))),
    ("products", 'is = "x"\nstrength = 92', r"line 2, .* strength must be at least 0.0001 and at most 1.5; found 92. Check value and unit"),
    ("products", 'is = "x"\nbasicity = "100 %"', r"basicity must be at least 0 and below 1; found '100 %'"),
    *(("products", f"is = {bad}", r"is must be text in quotes; found .*\. Write for example is = \"hydrated lime\"") for bad in ("3", "' '", "[]", "true")),
    *(("steps.adjust", f'products = "x"\ntarget = {{ph = 8}}\nopen_to_air = {bad}', r"open_to_air must be true or false, without quotes; found .*Write for example open_to_air = true") for bad in ("1", '"true"')),
    ("guards", 'over_dose = "1.2"', r"over_dose must be a number without quotes; found '1.2'. Write for example over_dose = 1.2"),
    ("guards", "over_dose = 0.5", r"over_dose must be at least 1 and at most 100; found 0.5"),
    *(("guards", f"ph = {bad}", message) for bad, message in (
        ("7", r"ph must be a window \[low, high\]; found 7. Write for example ph = \[6.0, 9.5\]"), ("[9, 6]", r"ph must have its lower limit first; found \[9, 6\]. Write"),
        ("[6]", r"ph must be a value, \[low, high\], .*; found \[6\]"), ("[6, 15]", r"ph must be at least 0 and at most 14; found 15"), ('["6", 9]', r"ph must be a number without quotes; found '6'"))),
    *(("drift", f"draws = {bad}", r"draws must be a whole number without quotes; found ") for bad in ("2.5", '"500"', "true")),
    ("drift", "draws = 0", r"draws must be at least 100 and at most 100000; found 0"),
    ("drift", f"seed = {'9' * 400}", r"seed must be a number without quotes; found 9{57}\.\.\."),
    ("steps.soften", 'method = "split lime"\nlime = "x"', r"method must be one of single stage, excess lime, split; found 'split lime'. The nearest is .*\. Correct it"),
    ("steps", 'do = "coagluate"', r"do must be one of coagulate, .*; found 'coagluate'. The nearest is coagulate. Correct it."),
    *(("steps.dose", f"product = 'x'\ndose = {bad}", message) for bad, message in (
        ("25", r"dose must have a unit, one of mg/L, g/L, µg/L, mmol/L; found 25. Write for example dose = \"25 mg/L\""),
        ("[25]", r"dose must be a number with its unit, in quotes; found \[25\]"), ('"-3 mg/L"', r"dose must be at least 0 and at most 1 mol/L; found '-3 mg/L'"))),
    ("steps.blend", "with = []", r"with must be a list of one or more; found \[\]. Write for example with = \[\"well\", \"permeate\"\]"),
    *(("products.pump", f'largest = "20 L/h"\ncurve = {bad}', r"curve must be a list of points \[setting, rate\]; found .*Write for example curve = \[\[20, 3.9\], \[40, 8.1\]\]")
      for bad in ("3", "[1, 2]", "[[1, 2, 3]]", '[["20", 3]]', "[[1, nan]]")),
    ("steps.adjust", 'products = "x"\ntarget = 8', r"target must be a table; found 8. Write for example target = \{ ph = 8.4"),
]


@pytest.mark.parametrize(("section", "text", "message"), MESSAGES, ids=[str(i) for i in range(len(MESSAGES))])
def test_messages(section, text, message):
    """Each mistake names file, line, table, key, value and remedy."""
    with pytest.raises(InputError, match=message) as error:
        check(text, section)
    assert str(error.value).startswith("p.toml, line ")


def test_nearest_and_shown():
    """Spelling is forgiven; long values are cut."""
    assert nearest_word("Day Tank", ("day_tank", "store")) == "day_tank"
    assert nearest_word("zzz", ("day_tank", "store")) == ""
    assert (shown_value(True), shown_value([1]), len(shown_value("x" * 99))) == ("true", "[1]", 60)


def test_a_needed_key_has_no_default_and_the_rest_may_be_left_out():
    """A table of its needed keys alone passes; without any one of them it does not."""
    for section in SECTIONS:
        needed = {key.name: key.example for key in plan_keys(section).values() if key.needed}
        lines = [f"{name} = {example}" for name, example in needed.items()]
        assert set(check("\n".join(lines), section).values) >= set(needed)
        for left_out in needed:
            with pytest.raises(InputError, match=rf"{left_out} is needed \("):
                check("\n".join(line for line in lines if not line.startswith(f"{left_out} =")), section)

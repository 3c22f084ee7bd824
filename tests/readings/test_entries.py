"""Readings as keys and values: house units, uncertainties, texts with a unit, and every message."""

import pytest
from numpy.testing import assert_allclose

from aquabuf.errors import InputError
from aquabuf.readings.entries import is_number, number_and_unit, read_entries
from aquabuf.readings.schema import quantities

SCHEMA = {name: quantities()[name] for name in ("temperature_c", "ph", "alkalinity_eq_l", "calcium_mol_l", "nitrate_mol_l", "pco2_atm")}


def read(given, **options):
    """Entries whose place is the key itself."""
    return read_entries(given, SCHEMA, lambda key: f"f.toml {key!r}", **options)


@pytest.mark.parametrize(("key", "value", "name", "expected"), [
    ("ph", 7.68, "ph", 7.68), ("temperature_c", 11, "temperature_c", 11.0), ("temperature (°F)", 50.0, "temperature_c", 10.0),
    ("alkalinity (mg/L as CaCO3)", 50.043, "alkalinity_eq_l", 1e-3), ("calcium_mg_l", 40.078, "calcium_mol_l", 1e-3),
    ("nitrate (mg/L as N)", 14.007, "nitrate_mol_l", 1e-3)])
def test_headers_with_numbers(key, value, name, expected):
    """Molar masses 100.086/2, 40.078 and 14.007 g (IUPAC)."""
    assert_allclose(read({key: value}).values[name], expected, rtol=1e-9)


@pytest.mark.parametrize(("key", "value", "name", "expected"), [
    ("alkalinity", "50.043 mg/L as CaCO3", "alkalinity_eq_l", 1e-3), ("alkalinity", " 1e0 meq/L ", "alkalinity_eq_l", 1e-3),
    ("temperature", "50 °F", "temperature_c", 10.0), ("temperature", "11.2°C", "temperature_c", 11.2), ("Ca", "40.078 mg/L", "calcium_mol_l", 1e-3),
    ("pco2", "+2.5 matm", "pco2_atm", 2.5e-3), ("NO3-N", "14007 µg/L", "nitrate_mol_l", 1e-3), ("alkalinity", "-.5 meq/L", "alkalinity_eq_l", -5e-4)])
def test_texts_with_their_unit(key, value, name, expected):
    """The unit of the text goes to the header."""
    assert_allclose(read({key: value}, texts=True).values[name], expected, rtol=1e-9)


def test_uncertainties_go_by_the_name_of_their_value():
    """From keys that say so, or all of them; a spread has no zero point: 9 °F are 5 °C wide."""
    found = read({"ph": 7, "ph_u": 0.02, "alkalinity_u": "2 meq/L"}, texts=True)
    assert (dict(found.values), found.u["ph"]) == ({"ph": 7.0}, 0.02)
    assert_allclose(found.u["alkalinity_eq_l"], 2e-3, rtol=1e-12)
    spread = read({"ph": 0.1, "temperature (°F)": 9.0, "alkalinity_u": "2 meq/L"}, texts=True, spreads=True)
    assert spread.values == {}
    assert_allclose([spread.u[n] for n in ("ph", "temperature_c", "alkalinity_eq_l")], [0.1, 5.0, 2e-3], rtol=1e-12)


def test_uncertainty_needs_a_value_somewhere():
    """Here, or in what the caller has beside."""
    found = read({"calcium_u_mg_l": 1.0})
    found.check_u("f.toml", SCHEMA, others=("calcium_mol_l",))
    with pytest.raises(InputError, match=r"^f.toml: calcium_u_mol_l must go with a value; found none of calcium. Add the value"):
        found.check_u("f.toml", SCHEMA)


@pytest.mark.parametrize(("given", "options", "message"), [
    ({"calcum_mg_l": 1}, {}, r"f.toml 'calcum_mg_l': keys must be one of temperature, ph, .*; found 'calcum_mg_l'. The nearest known names are calcium_mol_l. Correct it or remove it"),
    ({"xyzzy": 1}, {"beside": ("sample", "map")}, r"keys must be sample, map or one of temperature, .*; found 'xyzzy'. Correct it or remove it"),
    ({"sodium_mg_l": 1}, {}, r"keys must be one of .*; found 'sodium_mg_l'"),
    ({"calcium": 1}, {}, r"f.toml 'calcium': column 'calcium' needs a unit: calcium can be in .*Write it in the header"),
    ({"nitrate": "3 mg/L"}, {"texts": True}, r"column 'nitrate \(mg/L\)' is ambiguous: mg/L of nitrate can mean mg/L as N or mg/L as NO3"),
    ({"calcium (µmol/kg)": 1}, {}, r"must be per liter; found µmol/kg. Convert it"),
    ({"calcium": "3 furlongs"}, {"texts": True}, r"'furlongs' is not a unit of calcium. Use one of: "),
    ({"calcium": "3 mg/L"}, {}, r"'calcium': must be a number; found '3 mg/L'. Write it without quotes; leave the key out"),
    *(({"calcium": bad}, {"texts": True}, r"must be a number; found .*\. Write it without quotes, or with its unit in quotes behind a key without one; leave")
      for bad in ("mg/L", "<3 mg/L", "3", "1,5 mg/L", "1e999 mg/L", True, None, [3], float("nan"), 10**400, "3 (mg/L)")),
    ({"calcium (mg/L)": "3 mg/L"}, {"texts": True}, r"must be a number; found '3 mg/L'"),
    ({"calcium_mg_l": "x" * 200}, {}, r"found 'x{56}\.\.\.\. Write"),
    ({"ph": 99}, {}, r"'ph': must be from [-\d.]+ to [\d.]+; found 99. Check value and unit"),
    ({"calcium_mg_l": -1}, {}, r"must be from 0 to .* mg/L; found -1. Check value and unit"),
    ({"ph": 7, "ph_u": -0.1}, {}, r"'ph_u': must be at least 0; found -0.1"),
    ({"calcium_mg_l": 1, "Ca (mg/L)": 1}, {}, r"'Ca \(mg/L\)': calcium_mol_l must be given once; found a second key for it. Remove one"),
])
def test_messages(given, options, message):
    """Each mistake names place, rule, value and remedy."""
    with pytest.raises(InputError, match=message) as error:
        read(given, **options)
    assert str(error.value).startswith("f.toml ")


def test_numbers_of_a_file():
    """True, not-a-number and numbers beyond floats are none."""
    assert [is_number(v) for v in (1, 1.5, -2, True, float("nan"), float("inf"), 10**400, "1", None)] == [True] * 3 + [False] * 6


@pytest.mark.parametrize(("text", "expected"), [
    ("9.6 ML/d", (9.6, "ML/d")), (" 57.4  mg/L as CaCO3 ", (57.4, "mg/L as CaCO3")), ("92%", (92.0, "%")), ("-1e-3 eq/L", (-1e-3, "eq/L")),
    ("5.", (5.0, "")), (".5", (0.5, "")), ("+3 m³/d", (3.0, "m³/d"))])
def test_number_and_unit(text, expected):
    """Any way of writing a number, and what follows it."""
    assert number_and_unit(text) == expected


@pytest.mark.parametrize(("text", "message"), [
    *((text, "must begin with a number; found ") for text in ("", "ML/d", "1.2.3 L", "about 3 L", "1e999 L", "--3 L", "nan", "inf L")),
    ("9,6 ML/d", r"must have a point as decimal mark and no mark for thousands; found '9,6 ML/d'"), ("1,000 kg", "no mark for thousands")])
def test_texts_without_a_number(text, message):
    """What is not a number is refused."""
    with pytest.raises(InputError, match=message):
        number_and_unit(text)

"""Units against factors worked out by hand from IUPAC masses and legal definitions, not against the code's own table."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.errors import InputError
from aquabuf.tables import read_table
from aquabuf.units import accepted_units, convert, key, parse_unit, substances, to_house

# IUPAC abridged standard atomic weights, recalled from memory
ATOMIC = {
    "H": 1.008, "C": 12.011, "N": 14.007, "O": 15.999, "F": 18.998, "Na": 22.990, "Mg": 24.305, "Al": 26.982, "Si": 28.085,
    "P": 30.974, "S": 32.06, "Cl": 35.45, "K": 39.098, "Ca": 40.078, "Mn": 54.938, "Fe": 55.845, "Cu": 63.546, "Zn": 65.38,
    "Br": 79.904, "Sr": 87.62, "Ba": 137.327, "B": 10.81, "Li": 6.94, "Pb": 207.2,
}  # fmt: skip
CACO3 = 40.078 + 12.011 + 3 * 15.999
# atoms of each substance, counted by hand
ATOMS = {
    "hydrogen": "H", "hydroxide": "O H", "calcium": "Ca", "magnesium": "Mg", "sodium": "Na", "potassium": "K",
    "ammonium": "N 4H", "chloride": "Cl", "sulfate": "S 4O", "nitrate": "N 3O", "nitrite": "N 2O", "fluoride": "F",
    "bicarbonate": "H C 3O", "carbonate": "C 3O", "bromide": "Br", "lithium": "Li", "strontium": "Sr", "barium": "Ba",
    "iron": "Fe", "manganese": "Mn", "zinc": "Zn", "copper": "Cu", "lead": "Pb", "aluminum": "Al",
    "dihydrogen phosphate": "2H P 4O", "hydrogen phosphate": "H P 4O", "phosphate": "P 4O", "bisulfate": "H S 4O",
    "bisulfide": "H S", "acetate": "2C 3H 2O", "formate": "C H 2O", "propionate": "3C 5H 2O", "butyrate": "4C 7H 2O",
    "lactate": "3C 5H 3O", "citrate": "6C 5H 7O", "oxalate": "2C 4O", "phthalate": "8C 4H 4O", "benzoate": "7C 5H 2O",
    "hypochlorite": "Cl O", "cyanide": "C N", "sulfite": "S 3O", "sulfide": "S", "silica": "Si 2O", "boron": "B",
    "boric acid": "B 3O 3H", "ammonia": "N 3H", "carbon": "C", "nitrogen": "N", "phosphorus": "P", "silicon": "Si",
    "oxygen": "2O", "chlorine": "2Cl", "carbon dioxide": "C 2O", "hydrogen sulfide": "2H S", "calcium carbonate": "Ca C 3O",
    "calcium oxide": "Ca O", "sulfur dioxide": "S 2O", "acetic acid": "2C 4H 2O",
}  # fmt: skip


def mass_of(atoms):
    """Molar mass from counted atoms such as "Ca C 3O"."""
    parts = [(int(part[0]), part[1:]) if part[0].isdigit() else (1, part) for part in atoms.split()]
    return sum(count * ATOMIC[symbol] for count, symbol in parts)


def test_every_substance_is_counted():
    """A new row of the ion table needs its atoms here."""
    assert set(substances()) == set(ATOMS)


@pytest.mark.parametrize("name", ATOMS)
def test_molar_mass_is_the_sum_of_its_atoms(name):
    """Tolerance: the table prints six figures."""
    assert_allclose(substances()[name].molar_mass_g, mass_of(ATOMS[name]), rtol=6e-6)


@pytest.mark.parametrize(
    ("name", "charge"),
    [("hydrogen", 1), ("hydroxide", -1), ("calcium", 2), ("sulfate", -2), ("aluminum", 3), ("ammonium", 1),
     ("carbonate", -2), ("bicarbonate", -1), ("fluoride", -1), ("silica", 0), ("phosphate", None), ("sulfide", None)],
)  # fmt: skip
def test_charges(name, charge):
    """Charges of the common ions; None where pH decides."""
    assert substances()[name].charge == charge


def test_equivalent_conductivities_are_the_survey_list():
    """EPA lake survey 1984: values recovered by regression over 1798 lakes."""
    rows = {row["name"]: row for row in read_table("ions")}
    expected = {
        "hydrogen": 349.65, "calcium": 59.47, "magnesium": 53.00, "sodium": 50.08, "potassium": 73.48, "ammonium": 73.5,
        "sulfate": 80.0, "nitrate": 71.42, "chloride": 76.31, "bicarbonate": 44.5, "carbonate": 69.3, "fluoride": 55.41,
    }  # fmt: skip
    assert {name: float(rows[name]["conductivity_s_cm2_eq"]) for name in expected} == expected


# mg/L CaCO3 and meq/L of one unit: handbook table worked out from IUPAC masses (17.848 mg/L per °dH is also printed)
@pytest.mark.parametrize(
    ("unit", "mg_l_caco3", "meq_l"),
    [("meq/L", 50.043, 1.0), ("°dH", 17.848, 0.35665), ("°fH", 10.0, 0.19983), ("°Clark", 14.254, 0.28483),
     ("gr/gal", 17.118, 0.34206)],
)  # fmt: skip
def test_alkalinity_units_against_the_handbook(unit, mg_l_caco3, meq_l):
    """Five printed figures."""
    assert_allclose(convert(1.0, unit, "mg/L as CaCO3", "alkalinity"), mg_l_caco3, rtol=3e-5)
    assert_allclose(to_house(1.0, unit, "alkalinity"), 1e-3 * meq_l, rtol=3e-5)


def test_the_food_and_agriculture_glossary_figures():
    """FAO: 50 mg/L CaCO3 = 1 meq/L = 2.805 °dH = 28 mg CaO/L (printed digits; 50 and 28 are rounded)."""
    assert_allclose(convert(1.0, "meq/L", "°dH", "alkalinity"), 2.805, atol=0.0015)
    assert_allclose(convert(1.0, "meq/L", "mg/L as CaO", "alkalinity"), 28.0, atol=0.05)
    assert_allclose(convert(1.0, "meq/L", "mg/L as CaCO3", "alkalinity"), 50.0, atol=0.05)


def test_one_mmol_of_calcium_as_hardness():
    """Handbook table: 1 mmol/L Ca = 100.086 mg/L CaCO3 = 5.6077 °dH = 2 meq/L."""
    assert_allclose(convert(1.0, "mmol/L", "mg/L as CaCO3", "hardness"), 100.086, rtol=1e-6)
    assert_allclose(convert(1.0, "mmol/L", "°dH", "hardness"), 5.6077, rtol=2e-5)
    assert_allclose(convert(1.0, "mmol/L", "meq/L", "hardness"), 2.0, rtol=1e-12)


# mol/L (or eq/L) of one unit, worked out from atomic weights
@pytest.mark.parametrize(
    ("text", "dimension", "substance", "expected"),
    [
        ("mg/L as N", "amount", "nitrate", 1e-3 / 14.007),
        ("mg/L as NO3", "amount", "nitrate", 1e-3 / 62.004),
        ("µg/L as P", "amount", "phosphate", 1e-6 / 30.974),
        ("mg/L as SiO2", "amount", "silica", 1e-3 / 60.083),
        ("mg/L as Si", "amount", "silica", 1e-3 / 28.085),
        ("mg/L as Ca", "amount", "calcium", 1e-3 / 40.078),
        ("mg/L as CaCO3", "amount", "calcium", 1e-3 / CACO3),
        ("mg/L as CaCO3", "amount", "sodium", 2e-3 / CACO3),
        ("meq/L", "amount", "sulfate", 0.5e-3),
        ("ueq/L", "amount", "aluminum", 1e-6 / 3),
        ("mg/L as C", "amount", "carbon", 1e-3 / 12.011),
        ("mg/L as CO2", "amount", "carbon", 1e-3 / 44.009),
        ("mg/L as HCO3", "alkalinity", "", 1e-3 / 61.016),
        ("mmol/L", "alkalinity", "", 1e-3),
        ("mg/L as Cl2", "amount", "hypochlorite", 1e-3 / 70.9),
        ("mg/L as S", "amount", "sulfate", 1e-3 / 32.06),
        ("µmol/L", "mass", "oxygen", 31.998e-3),  # mg/L
        ("g/m²/yr as SO4", "load", "sulfate", 2.0 / 96.056),
        ("kg S/ha/yr", "load", "sulfate", 0.1 * 2.0 / 32.06),
        ("kg/ha/yr as N", "load", "nitrate", 0.1 / 14.007),
        ("mg/m2/yr as NH4", "load", "ammonium", 1e-3 / 18.039),
    ],
)
def test_concentrations_from_atomic_weights(text, dimension, substance, expected):
    """One unit of each is what the atomic weights say."""
    assert_allclose(to_house(1.0, text, dimension, substance), expected, rtol=6e-6)


# legal or exact definitions
EXACT = [
    (68.0, "°F", "temperature", 20.0), (-40.0, "degF", "temperature", -40.0), (273.15, "K", "temperature", 0.0),
    (1.0, "mS/cm", "conductivity", 1000.0), (1.0, "S/m", "conductivity", 10000.0), (1.0, "mS/m", "conductivity", 10.0),
    (101325.0, "Pa", "pressure", 1.0), (1013.25, "hPa", "pressure", 1.0), (101.325, "kPa", "pressure", 1.0),
    (760.0, "mmHg", "pressure", 1.0), (29.9213, "inHg", "pressure", 1.0), (1.01325, "bar", "pressure", 1.0),
    (420.0, "µatm", "pressure", 4.2e-4), (1000.0, "ft", "length", 304.8), (36.0, "h", "time", 1.5),
    (1440.0, "min", "time", 1.0), (35.16504, "g/kg", "salinity", 35.0), (1.0, "gal", "volume", 3.785411784e-3),
    (1.0, "MGD", "flow", 3785.411784), (1.0, "gpm", "flow", 3.785411784e-3 * 1440), (1.0, "L/s", "flow", 86.4),
    (1.0, "cfs", "flow", 0.3048**3 * 86400), (1.0, "acre-ft", "volume", 43560 * 0.3048**3), (1.0, "m3/h", "flow", 24.0),
    (1.0, "lb", "weight", 0.45359237), (1.0, "lb/h", "weight_rate", 24 * 0.45359237), (1.0, "short ton", "weight", 907.18474),
    (1.0, "acre", "area", 43560 * 0.3048**2), (1.0, "ha", "area", 1e4), (1.0, "mL/min", "flow", 1.44e-3),
    (1.0, "gpd", "flow", 3.785411784e-3), (1.0, "ft3", "volume", 0.3048**3), (1.0, "ft2", "area", 0.3048**2),
    (1.0, "L/min", "flow", 1.44), (1.0, "m3/s", "flow", 86400.0), (1.0, "t/d", "weight_rate", 1000.0),
    (1.0, "cm", "length", 0.01), (1.0, "km", "length", 1000.0), (1.0, "matm", "pressure", 1e-3), (1.0, "L", "volume", 1e-3),
    (1.0, "mL", "volume", 1e-6), (1.0, "megaliter", "volume", 1e3), (1.0, "g", "weight", 1e-3), (1.0, "mg", "weight", 1e-6),
    (1.0, "t", "weight", 1e3), (1.0, "km2", "area", 1e6), (1.0, "L/h", "flow", 0.024), (1.0, "L/d", "flow", 1e-3),
    (1.0, "kg/h", "weight_rate", 24.0), (1.0, "lb/d", "weight_rate", 0.45359237), (1.0, "mmol/L", "ionic_strength", 1e-3),
    (250.0, "µL", "small_volume", 0.25), (0.05, "L", "small_volume", 50.0), (1500.0, "mg", "small_mass", 1.5),
    (0.1, "kg", "small_mass", 100.0), (-0.177, "V", "potential", -177.0), (20.0, "meq/L", "titrant_strength", 0.02),
    (100.0, "meq/kg", "titrant_per_kg", 0.1), (998.2, "kg/m3", "density", 0.9982), (90.0, "s", "minutes", 1.5),
    (0.5, "h", "minutes", 30.0), (1.0, "cc", "small_volume", 1.0), (1.0, "N", "titrant_strength", 1.0),
    (1.0, "mol H+/L", "titrant_strength", 1.0), (1.1, "g/cm³", "density", 1.1), (7.0, "digits", "count", 7.0),
    (1.0, "hm3", "volume", 1e6), (1.0, "keq/ha/yr", "load", 0.1), (1.0, "eq/ha/yr", "load", 1e-4),
    (1.0, "meq/m²/yr", "load", 1e-3), (1.0, "g/m2/yr as H", "load", 1.0 / 1.008), (1.0, "cm/yr", "runoff", 0.01),
    (1000.0, "mm/yr", "runoff", 1.0), (100.0, "in/yr", "runoff", 2.54), (100.0, "L/s/km2", "runoff", 3.15576),
    (18.0, "months", "years", 1.5), (365.25, "d", "years", 1.0), (36.0, "km/h", "speed", 10.0),
    (10.0, "gal/h", "flow", 10.0 * 3.785411784e-3 * 24.0), (8.34, "lb/gal", "density", 8.34 * 0.45359237 / 3.785411784),
    (1.0, "kn", "speed", 1852.0 / 3600.0), (1.0, "mph", "speed", 1609.344 / 3600.0),
]  # fmt: skip


@pytest.mark.parametrize(("value", "text", "dimension", "expected"), EXACT)
def test_exact_definitions(value, text, dimension, expected):
    """SI, the international foot, pound, mile and knot, the US gallon, the standard atmosphere, the Julian year."""
    substance = "hydrogen" if text.endswith("as H") else ""
    assert_allclose(to_house(value, text, dimension, substance), expected, rtol=2e-6, atol=1e-9)


def test_no_unit_is_left_unchecked():
    """A unit is a house unit (scale 1), a decimal multiple that its prefix tells, or stands among the checks above."""
    checked = {parse_unit(text, dimension) for _, text, dimension, _ in EXACT}
    prefix = {"m": 1e-3, "µ": 1e-6, "n": 1e-9}
    for row in read_table("units"):
        if row["group"] == "concentration" and not row["basis"]:
            head = row["unit"].split("/")[0]
            factor = 1.0 if head in ("mol", "eq", "g") else prefix[head[0]]
            assert (float(row["scale"]), row["per_kg"] == "yes") == (factor, row["unit"].endswith("/kg")), row["unit"]
        elif row["group"] == "load" and row["kind"] == "mass":  # by area: m² or ha; the bases are checked above
            assert float(row["scale"]) == {"g/m²/yr": 1.0, "mg/m²/yr": 1e-3, "kg/ha/yr": 1e3 / 1e4}[row["unit"]]
        elif not row["basis"] and (float(row["scale"]), float(row["offset"])) != (1.0, 0.0):
            assert parse_unit(row["unit"], row["group"]) in checked, row["unit"]


def test_mass_per_kilogram_needs_the_density():
    """Sea water at 25 °C and salinity 35 has 1023.34306 kg/m3 (UNESCO technical paper 44, recalled from memory)."""
    assert_allclose(
        to_house(2300.0, "µmol/kg", "alkalinity", density_kg_l=1.02334306), 2300e-6 * 1.02334306, rtol=1e-12
    )
    with pytest.raises(InputError, match=r"µmol/kg needs the density of the sample; none is given"):
        to_house(2300.0, "µmol/kg", "alkalinity")


@pytest.mark.parametrize(
    "text", ["mg/L as N", "mg/l as n", "MG/L AS N", "mg N/L", "mg-N/L", "mgN_L", "mg_l_n", "mg L-1 as N", "mg·L⁻¹ as N", "mg/liter as nitrogen", "mg per L as N", "ppm as N"]
)  # fmt: skip
def test_one_unit_in_many_spellings(text):
    """Case, separators and the place of the basis do not matter."""
    unit = parse_unit(text, "amount")
    assert (unit.unit, unit.basis) == ("mg/L", "N")


@pytest.mark.parametrize("text", ["µeq/L", "μeq/L", "ueq/L", "UEQ/L", "ueq_l", "µeq L⁻¹", "µval/L"])
def test_both_micro_signs_and_the_letter_u(text):
    """U+00B5, U+03BC and u."""
    assert parse_unit(text, "alkalinity").unit == "µeq/L"


@pytest.mark.parametrize("text", ["furlong", "mg/L as gold", "mol/L as N", "", "mg", "°dH as N"])
def test_what_is_no_unit(text):
    """None, not a guess."""
    assert parse_unit(text, "amount") is None


def test_messages_name_the_remedy():
    """Unknown unit, mass without basis, equivalents without a fixed charge, mass of an unknown substance, no group."""
    with pytest.raises(InputError, match=r"'furlong' is not a unit of temperature\. Use one of: °C, °F, K"):
        to_house(1.0, "furlong", "temperature")
    with pytest.raises(InputError, match=r"mg/L needs a basis .*Write e\.g\. 'mg/L as CaCO3'"):
        to_house(1.0, "mg/L", "alkalinity")
    with pytest.raises(InputError, match=r"meq/L counts charges, .*Use mmol/L or mg/L"):
        to_house(1.0, "meq/L", "amount", "phosphate")
    with pytest.raises(InputError, match=r"µmol/L needs a molar mass to become mg/L"):
        to_house(1.0, "µmol/L", "mass")
    with pytest.raises(InputError, match=r"no unit group is named 'color temperature'"):
        parse_unit("K", "color temperature")


def test_back_is_the_reverse_on_arrays():
    """Boiling and freezing point of water in °F, as an array."""
    assert_allclose(to_house(np.array([0.0, 100.0]), "°F", "temperature", back=True), [32.0, 212.0], atol=1e-10)
    assert_allclose(convert(np.array([1.0, 2.0]), "m3/h", "m3/d", "flow"), [24.0, 48.0])


@pytest.mark.parametrize(
    ("text", "plain"),
    [("Calcium (mg/L)", "calcium_mg_l"), ("µS cm⁻¹", "us_cm"), ("SiO₂", "sio2"), (" m³/d ", "m3_d"), ("pH", "ph")],
)
def test_plain_form(text, plain):
    """What headers and units are compared by."""
    assert key(text) == plain


def test_no_spelling_means_two_units():
    """Within one group a spelling may occur once only."""
    for group in {row["group"] for row in read_table("units")}:
        rows = [row for row in read_table("units") if row["group"] == group]
        spellings = [s for row in rows for s in {row["suffix"], key(row["unit"]), *row["spellings"].split(";")} if s]
        assert len(spellings) == len(set(spellings)), group


def test_accepted_units_show_each_basis_once():
    """Degrees of hardness are offered for alkalinity only."""
    labels = [unit.label for unit in accepted_units("alkalinity", ("CaCO3", "HCO3"))]
    assert {"mg/L as CaCO3", "mg/L as HCO3", "°dH", "µeq/L"} <= set(labels)
    assert len(labels) == len(set(labels))
    assert "°dH" not in [unit.label for unit in accepted_units("amount", ("N",))]

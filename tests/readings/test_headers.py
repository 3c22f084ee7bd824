"""Header forms x units: one quantity written in every way must give the same column."""

import pytest

from aquabuf.errors import HeaderError
from aquabuf.readings.headers import nearest_names, parse_header
from aquabuf.readings.schema import name_index

INDEX = name_index()


def read(header):
    """The column that a header means."""
    return parse_header(header, INDEX)


# how people write a header: suffix, brackets, square brackets, comma, capitals
FORMS = [
    lambda name, unit: f"{name} ({unit})",
    lambda name, unit: f"{name} [{unit}]",
    lambda name, unit: f"{name.upper()}({unit.upper()})",
    lambda name, unit: f"{name}_{unit}".replace("/", "_").replace(" ", "_").replace("°", ""),
    lambda name, unit: f"{name} {unit}",
    lambda name, unit: f"  {name}, {unit}  ",
]
# value of one unit in house units, from atomic weights and definitions by hand
UNITS = [
    ("alkalinity", "mg/L as CaCO3", 2 / 100.086e3), ("alkalinity", "mg/L as HCO3", 1 / 61.016e3), ("alkalinity", "meq/L", 1e-3),
    ("alkalinity", "µeq/L", 1e-6), ("alkalinity", "ueq/L", 1e-6), ("alkalinity", "mmol/L", 1e-3), ("alkalinity", "°dH", 0.35665e-3),
    ("alkalinity", "°fH", 0.19983e-3), ("alkalinity", "°Clark", 0.28483e-3), ("alkalinity", "µmol/kg", 1e-6),
    ("calcium", "mg/L", 1 / 40.078e3), ("calcium", "µg/L", 1 / 40.078e6), ("calcium", "mmol/L", 1e-3), ("calcium", "µmol/L", 1e-6),
    ("calcium", "meq/L", 0.5e-3), ("calcium", "µeq/L", 0.5e-6), ("calcium", "mg/L as CaCO3", 1 / 100.086e3),
    ("nitrate", "mg/L as N", 1 / 14.007e3), ("nitrate", "mg/L as NO3", 1 / 62.004e3), ("nitrate", "µg N/L", 1 / 14.007e6),
    ("ammonia", "mg/L as NH3", 1 / 17.031e3), ("orthophosphate", "mg/L as P", 1 / 30.974e3), ("silica", "mg/L as SiO2", 1 / 60.083e3),
    ("hardness", "mg/L as CaCO3", 1 / 100.086e3), ("hardness", "°dH", 0.178325e-3), ("dic", "mg/L as C", 1 / 12.011e3),
    ("conductivity", "mS/cm", 1e3), ("conductivity", "µS/cm", 1.0), ("water temperature", "°C", 1.0), ("elevation", "ft", 0.3048),
]  # fmt: skip


@pytest.mark.parametrize("form", range(len(FORMS)))
@pytest.mark.parametrize(("name", "unit", "scale"), UNITS, ids=lambda v: str(v))
def test_every_form_of_every_unit(form, name, unit, scale):
    """Five figures: the handbook prints no more for the degrees."""
    assert read(FORMS[form](name, unit)).scale == pytest.approx(scale, rel=3e-5)


@pytest.mark.parametrize(
    ("header", "name"),
    [
        ("pH", "ph"), ("PH", "ph"), ("pH (total)", "ph_total"), ("pH (field)", "ph"), ("Ca2+ (mg/L)", "calcium_mol_l"), ("SO4 2- (mg/L)", "sulfate_mol_l"), ("Salinity (PSU)", "salinity"),
        ("Specific conductance (µS/cm at 25 °C)", "conductivity_us_cm"), ("Sample ID", "sample_id"), ("Water kind", "water_kind"),
        ("Temperature of pH (°C)", "ph_temperature_c"), ("pH temperature (°C)", "ph_temperature_c"), ("NO3-N (mg/L)", "nitrate_mol_l"),
        ("Total hardness (°dH)", "total_hardness_mol_l"), ("ANC (µeq/L)", "anc_eq_l"), ("pCO2 (µatm)", "pco2_atm"),
        ("Free chlorine (mg/L)", "hypochlorite_mol_l"), ("Dissolved oxygen (mg/L)", "dissolved_oxygen_mg_l"),
        ("raw conductivity (µS/cm)", "conductivity_raw_us_cm"), ("holding time (h)", "holding_days"), ("Lat", "latitude"),
        ("Alkalinity as CaCO3 (mg/L)", "alkalinity_eq_l"), ("SiO2 (mg/L)", "silica_mol_l"), ("Barometric pressure (hPa)", "air_pressure_atm"),
    ],
)  # fmt: skip
def test_words_people_use(header, name):
    """Plain words find their quantity."""
    assert read(header).name == name


@pytest.mark.parametrize(
    ("header", "name", "scale"),
    [
        ("ph_u", "ph_u", 1.0), ("pH uncertainty", "ph_u", 1.0), ("temperature_u_c", "temperature_u_c", 1.0),
        ("temperature_u_f", "temperature_u_c", 5 / 9), ("alkalinity_u_mg_l_caco3", "alkalinity_u_eq_l", 2 / 100.086e3),
        ("Alkalinity uncertainty (mg/L as CaCO3)", "alkalinity_u_eq_l", 2 / 100.086e3),
        ("Calcium standard uncertainty [mg/L]", "calcium_u_mol_l", 1 / 40.078e3),
    ],
)  # fmt: skip
def test_uncertainty_columns(header, name, scale):
    """A spread in °F has no zero point: only the scale counts."""
    column = read(header)
    assert (column.name, column.is_u, column.offset) == (name, True, 0.0)
    assert column.scale == pytest.approx(scale, rel=1e-5)


def test_words_that_state_the_basis():
    """NO3-N says nitrogen, SiO2 says silica; a unit that states another basis wins."""
    assert read("NO3-N (mg/L)").scale == pytest.approx(1 / 14.007e3, rel=1e-6)
    assert read("SiO2 (mg/L)").scale == pytest.approx(1 / 60.083e3, rel=1e-5)
    assert read("Alkalinity as HCO3 (mg/L)").scale == pytest.approx(1 / 61.016e3, rel=1e-5)
    assert read("SO4-S (mg/L)").scale == pytest.approx(1 / 32.06e3, rel=1e-6)  # against the bare mg/L of sulfate
    assert read("Boric acid (mg/L)").scale == pytest.approx(1 / 61.831e3, rel=1e-5)
    assert read("SiO2 (mg/L as Si)").scale == pytest.approx(1 / 28.085e3, rel=1e-6)


@pytest.mark.parametrize(
    ("header", "words"),
    [
        (
            "nitrate_mg_l",
            r"'nitrate_mg_l' is ambiguous: mg/L of nitrate can mean mg/L as N or mg/L as NO3.*nitrate_mg_l_n or nitrate_mg_l_no3",
        ),
        ("Ammonia (mg/L)", r"mg/L as N or mg/L as NH4 or mg/L as NH3"),
        ("phosphate_ug_l", r"µg/L as P or µg/L as PO4"),
        ("silica_mg_l", r"mg/L as SiO2 or mg/L as Si"),
        ("Alkalinity (mg/L)", r"mg/L as CaCO3 or mg/L as HCO3.*alkalinity_mg_l_caco3 or alkalinity_mg_l_hco3"),
        ("dic_mg_l", r"mg/L as C or mg/L as CO2 or mg/L as HCO3"),
        ("hardness (mg/L)", r"mg/L as CaCO3 or mg/L as CaO or mg/L as Ca"),
    ],
)
def test_ambiguous_headers_show_both_readings(header, words):
    """Four times too much nitrate is no rounding error."""
    with pytest.raises(HeaderError, match=words):
        read(header)


@pytest.mark.parametrize(
    ("header", "words"),
    [
        (
            "temperature",
            r"'temperature' needs a unit: temperature can be in °C, °F, K\. Write it in the header, e\.g\. temperature_c",
        ),
        ("Calcium", r"needs a unit: calcium can be in mmol/L.*e\.g\. calcium_mg_l"),
        ("alkalinity", r"needs a unit: .*°dH.*e\.g\. alkalinity_mg_l_caco3"),
        ("conductivity", r"needs a unit: conductivity can be in µS/cm, mS/cm"),
    ],
)
def test_a_missing_unit_is_an_error_that_names_the_possible_ones(header, words):
    """A temperature of 61 can be both °C and °F."""
    with pytest.raises(HeaderError, match=words):
        read(header)


@pytest.mark.parametrize(
    ("header", "words"),
    [
        ("calcum_mg_l", r"'calcum_mg_l' is not known\. The nearest known names are calcium_mol_l"),
        ("alkalinitty (meq/L)", r"nearest known names are alkalinity_eq_l"),
        (
            "xyzzy",
            r"'xyzzy' is not known\. No known name is near\. Rename it, remove it, or give its meaning in a map file",
        ),
        ("Calcium (furlong)", r"'furlong' is not a unit of calcium\. Use one of: mmol/L"),
        ("pCO2 (ppm)", r"'ppm' is not a unit of pco2\. Use one of: atm"),
        ("calcium_mg_l_n", r"calcium cannot be given in mg/L as N, because it is not given as N"),
        ("phosphate_ueq_l", r"phosphate cannot be given in µeq/L, because its charge is zero or depends on pH"),
        (
            "nitrate (°dH)",
            r"nitrate cannot be given in °dH, because degrees of hardness are for hardness and alkalinity",
        ),
        ("tds_mmol_l", r"tds cannot be given in mmol/L, because it is a mass with no one molar mass"),
        ("site (m)", r"site takes no unit, found 'm'"),
        ("pH (deep)", r"ph takes no unit, found 'deep'\. Remove it"),
    ],
)
def test_unusable_headers(header, words):
    """Each message has the header, the rule and a way out."""
    with pytest.raises(HeaderError, match=words):
        read(header)


def test_nearest_names_prefer_the_likeness():
    """A slip of one letter finds its name first."""
    assert nearest_names("magnesum", INDEX)[0] == "magnesium_mol_l"


def test_unit_in_words():
    """The label leaves the basis out where it goes without saying."""
    assert read("calcium_mg_l").unit_label == "mg/L"
    assert read("calcium_mg_l_caco3").unit_label == "mg/L as CaCO3"
    assert read("alkalinity_dh").unit_label == "°dH"

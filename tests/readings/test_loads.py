"""Columns of lakes and catchments: loads, runoff, times, speeds, areas and choices; house values by hand arithmetic."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.errors import HeaderError
from aquabuf.readings.headers import parse_header
from aquabuf.readings.reader import read_readings
from aquabuf.readings.schema import name_index, quantities

INDEX = name_index()
S, N, OX, CL, H = 32.06, 14.007, 15.999, 35.45, 1.008  # IUPAC, g/mol
YEAR_S = 365.25 * 86400.0

# header, column, house value of one unit: loads in eq/m2/yr (1 kg/ha = 0.1 g/m2), runoff in m/yr, times in years
ONE_UNIT = [
    ("sulfur_deposition_eq_m2_yr", "sulfur_deposition_eq_m2_yr", 1.0),
    ("sulfur deposition (meq/m2/yr)", "sulfur_deposition_eq_m2_yr", 1e-3),
    ("Sulfur deposition [eq/ha/yr]", "sulfur_deposition_eq_m2_yr", 1e-4),
    ("sulfur deposition (keq/ha/yr)", "sulfur_deposition_eq_m2_yr", 0.1),
    ("sulfur deposition (kg/ha/yr as S)", "sulfur_deposition_eq_m2_yr", 0.1 * 2 / S),
    ("sulfur_deposition_kg_ha_yr_so4", "sulfur_deposition_eq_m2_yr", 0.1 * 2 / (S + 4 * OX)),
    ("Sulfur deposition (kg S/ha/yr)", "sulfur_deposition_eq_m2_yr", 0.1 * 2 / S),
    ("sulfate deposition (g/m2/yr)", "sulfur_deposition_eq_m2_yr", 2 / (S + 4 * OX)),
    ("dep_S_mg_m2_yr", "sulfur_deposition_eq_m2_yr", 2e-3 / S),
    ("nitrate deposition (kg N/ha/yr)", "nitrate_deposition_eq_m2_yr", 0.1 / N),
    ("nitrate deposition (mg/m²/yr as NO3)", "nitrate_deposition_eq_m2_yr", 1e-3 / (N + 3 * OX)),
    ("oxidized nitrogen deposition (kg/ha/yr)", "nitrate_deposition_eq_m2_yr", 0.1 / N),
    ("ammonium deposition (kg/ha/yr as NH4)", "ammonium_deposition_eq_m2_yr", 0.1 / (N + 4 * H)),
    ("dep_NH4_g_m2_yr", "ammonium_deposition_eq_m2_yr", 1 / (N + 4 * H)),
    ("chloride deposition (kg/ha/yr as Cl)", "chloride_deposition_eq_m2_yr", 0.1 / CL),
    ("hydrogen deposition (g/m2/yr as H)", "hydrogen_deposition_eq_m2_yr", 1 / H),
    ("base cation deposition (meq/m2/yr)", "base_cation_deposition_eq_m2_yr", 1e-3),
    ("nitrogen sink (kg/ha/yr as N)", "nitrogen_sink_eq_m2_yr", 0.1 / N),
    ("sulfur_deposition_u_kg_ha_yr_s", "sulfur_deposition_u_eq_m2_yr", 0.1 * 2 / S),
    ("runoff_m_yr", "runoff_m_yr", 1.0),
    ("runoff (mm/yr)", "runoff_m_yr", 1e-3),
    ("annual runoff (cm/yr)", "runoff_m_yr", 1e-2),
    ("Runoff [in/yr]", "runoff_m_yr", 0.0254),
    ("specific runoff (L/s/km2)", "runoff_m_yr", 1e-3 * YEAR_S / 1e6),
    ("precipitation (mm/a)", "precipitation_m_yr", 1e-3),
    ("residence time (yr)", "residence_time_yr", 1.0),
    ("residence time (months)", "residence_time_yr", 1 / 12),
    ("water residence time (days)", "residence_time_yr", 1 / 365.25),
    ("wind speed (km/h)", "wind_speed_m_s", 1 / 3.6),
    ("wind (knots)", "wind_speed_m_s", 1852 / 3600),
    ("wind_speed_mph", "wind_speed_m_s", 1609.344 / 3600),
    ("lake area (ha)", "lake_area_m2", 1e4),
    ("Watershed area (km²)", "watershed_area_m2", 1e6),
    ("catchment (acres)", "watershed_area_m2", 4840 * 0.9144**2),
    ("lake volume (10^6 m3)", "lake_volume_m3", 1e6),
    ("lake volume (acre-ft)", "lake_volume_m3", 43560 * 0.3048**3),
    ("mean depth (ft)", "mean_depth_m", 0.3048),
    ("equilibration CO2 (ppm)", "equilibration_co2_ppm", 1.0),
    ("equilibration_co2_ppm", "equilibration_co2_ppm", 1.0),
    ("ph_air_equilibrated", "ph_air_equilibrated", 1.0),
    ("survey_weight", "survey_weight", 1.0),
]  # fmt: skip


@pytest.mark.parametrize(("header", "name", "value"), ONE_UNIT, ids=[header for header, _, _ in ONE_UNIT])
def test_one_unit_in_house_units(header, name, value):
    """Atomic weights and definitions by hand; no column has a zero point of its own."""
    column = parse_header(header, INDEX)
    assert (column.name, column.offset) == (name, 0.0)
    assert_allclose(column.scale, value, rtol=2e-5)  # molar masses of the ion table have three decimals


TABLE = """\
sample_id,survey_weight,anc_method,ph_kind,analysis_method,ph,ph_air_equilibrated,equilibration_co2_ppm,\
lake area (ha),watershed (km2),lake volume (hm3),residence time (months),runoff (L/s/km2),precipitation (in/yr),\
wind speed (km/h),S deposition (kg/ha/yr),dep NO3 (g/m2/yr),dep_bc_meq_m2_yr,nitrogen sink (kg N/ha/yr)
Lower,3.5,Gran plot,in situ,lab A,5.1,5.2,300,7.3,1.45,0.434,6.94,20,50,18,8.9,2.33,-5,2.1
Upper,,pH 4.5,air,,,,,,,,,,,,,,,
"""


def test_a_lake_with_its_catchment(table):
    """Two lakes in the units of the trade; what is missing stays missing."""
    readings = read_readings(table(TABLE))
    assert readings.rejected.empty
    lower, upper = (readings.frame.iloc[i] for i in range(2))
    expected = {
        "survey_weight": 3.5, "ph": 5.1, "ph_air_equilibrated": 5.2, "equilibration_co2_ppm": 300.0, "lake_area_m2": 73_000.0,
        "watershed_area_m2": 1.45e6, "lake_volume_m3": 434_000.0, "residence_time_yr": 6.94 / 12, "runoff_m_yr": 0.631152,
        "precipitation_m_yr": 1.27, "wind_speed_m_s": 5.0, "sulfur_deposition_eq_m2_yr": 8.9e3 / 1e4 / S * 2,
        "nitrate_deposition_eq_m2_yr": 2.33 / 62.004, "base_cation_deposition_eq_m2_yr": -0.005,
        "nitrogen_sink_eq_m2_yr": 0.21 / N,
    }
    assert_allclose([lower[name] for name in expected], list(expected.values()), rtol=1e-6)
    assert np.isnan([upper[name] for name in expected]).all()
    assert (lower["anc_method"], lower["ph_kind"], lower["analysis_method"]) == ("gran", "field", "lab A")
    assert (upper["anc_method"], upper["ph_kind"], upper["analysis_method"]) == ("end_point", "air_equilibrated", "")


@pytest.mark.parametrize(("column", "cell", "word"), [
    ("anc_method", "gran titration", "gran"), ("anc_method", "non-linear fit", "curve_fit"),
    ("anc_method", "Inflection point", "inflection"), ("anc_method", "fixed end point", "end_point"),
    ("anc_method", "double end point", "two_end_points"), ("anc_method", "calculated", "charge_balance"),
    ("ph_kind", "closed cell", "closed"), ("ph_kind", "laboratory", "open_bottle"), ("ph_kind", "aerated", "air_equilibrated"),
    ("ph_kind", "in place", "field"),
])  # fmt: skip
def test_words_of_a_choice(table, column, cell, word):
    """How people say which ANC and which pH it is."""
    assert read_readings(table(f"sample_id,{column}\na,{cell}\n")).frame[column].tolist() == [word]


# ------------------------------------------------------------------ what is refused


@pytest.mark.parametrize("header", ["base_cation_deposition_kg_ha_yr", "bc deposition (mg/m2/yr)",
                                    "base cation deposition (kg/ha/yr as Ca)"])
def test_a_mass_of_base_cations_is_refused(header):
    """20 kg of calcium carry as much charge as 23 kg of sodium or 39 kg of potassium."""
    with pytest.raises(HeaderError, match=r"base_cation_deposition cannot be given in .*because it is a sum of several "
                                          r"ions.*mass does not tell its charge.*Use one of: meq/m²/yr, eq/ha/yr, keq/ha/yr"):
        parse_header(header, INDEX)


@pytest.mark.parametrize(("header", "ways"), [
    ("sulfur_deposition_kg_ha_yr", "kg/ha/yr as S or kg/ha/yr as SO4"),
    ("sulfur deposition (g/m2/yr)", "g/m²/yr as S or g/m²/yr as SO4"),
    ("nitrate deposition (kg/ha/yr)", "kg/ha/yr as N or kg/ha/yr as NO3"),
    ("ammonium deposition (mg/m2/yr)", "mg/m²/yr as N or mg/m²/yr as NH4"),
])  # fmt: skip
def test_a_mass_that_can_mean_two_things_is_refused(header, ways):
    """1 kg of S is 3 kg of sulfate."""
    with pytest.raises(HeaderError, match=f"is ambiguous: .*can mean {ways}.*different amounts. Rename it to"):
        parse_header(header, INDEX)


@pytest.mark.parametrize("header", ["chloride deposition (kg/ha/yr)", "hydrogen deposition (g/m2/yr)",
                                    "nitrogen_sink_kg_ha_yr"])
def test_a_mass_that_can_mean_one_thing_is_read(header):
    """Chloride is weighed as Cl, acid as H, nitrogen as N: nothing is doubtful."""
    plain, basis = parse_header(header, INDEX), {"c": "Cl", "h": "H", "n": "N"}[header[0]]
    assert plain.unit.basis == basis


@pytest.mark.parametrize("name", [q.name for q in quantities().values() if q.dimension in ("load", "runoff", "area", "volume",
                                                                                          "years", "speed")])
def test_a_missing_unit_is_refused(name):
    """The bare name of any of them says nothing about its unit."""
    base = quantities()[name].base
    with pytest.raises(HeaderError, match=rf"column '{base}' needs a unit: {base} can be in .*Write it in the header, e.g. "):
        parse_header(base, INDEX)


@pytest.mark.parametrize(("header", "unit"), [("sulfur deposition (kg/ha)", "kg/ha"), ("runoff (m)", "m"),
                                              ("sulfur deposition (mg/L)", "mg/L"), ("wind speed (m)", "m"),
                                              ("residence time (min)", "min")])
def test_a_unit_of_something_else_is_refused(header, unit):
    """No load without a time, no concentration for a load."""
    with pytest.raises(HeaderError, match=rf"'{unit}' is not a unit of \w+. Use one of: "):
        parse_header(header, INDEX)


@pytest.mark.parametrize(("header", "low"), [
    ("sulfur deposition (kg/ha/yr as S)", "must be 0 to 1603 kg/ha/yr as S"), ("dep_NO3_meq_m2_yr", "must be 0 to 10000 meq/m²/yr"),
    ("ammonium_deposition_eq_ha_yr", "must be 0 to 100000 eq/ha/yr"), ("nitrogen sink (meq/m2/yr)", "must be 0 to 10000 meq/m²/yr"),
])  # fmt: skip
def test_negative_deposition_rejects_its_row(table, header, low):
    """10 eq/m2/yr is the most that is read: 10 x 32.06 / 2 g = 1603 kg/ha of S."""
    readings = read_readings(table(f"sample_id,{header}\na,1\nb,-1\nc,2\n"))
    assert readings.frame["sample_id"].tolist() == ["a", "c"]
    line = readings.rejected.iloc[0]
    assert (line["row"], line["sample_id"], line["column"], line["value"]) == (3, "b", header, "-1")
    assert line["rule"] == low
    assert line["remedy"] == "it cannot be below zero; leave it blank, or correct it"


def test_base_cations_may_be_negative_for_sea_salt(table):
    """Taking sea salt off can leave less than nothing: -5 meq/m2/yr is read, -2 eq/m2/yr is not."""
    readings = read_readings(table("sample_id,dep_bc_meq_m2_yr\na,-5\nb,-2000\n"))
    assert readings.frame["base_cation_deposition_eq_m2_yr"].tolist() == [-0.005]
    assert readings.rejected["rule"].tolist() == ["must be -1000 to 10000 meq/m²/yr"]


@pytest.mark.parametrize(("header", "cell", "rule"), [
    ("survey_weight", "-1", "must be 0 to 1e+07"), ("runoff (mm/yr)", "0", "must be 0.1 to 20000 mm/yr"),
    ("lake area (ha)", "0", "must be 0.0001 to 1e+08 ha"), ("ph_air_equilibrated", "56", "must be -1 to 15"),
    ("wind speed (km/h)", "300", "must be 0 to 216 km/h"), ("ph_kind", "old", "must be one of field, closed, open_bottle"),
    ("anc_method", "magic", "must be one of gran, curve_fit, inflection, end_point, two_end_points, charge_balance"),
])  # fmt: skip
def test_values_no_lake_has_reject_their_row(table, header, cell, rule):
    """Limits in the unit of the file."""
    readings = read_readings(table(f"sample_id,{header}\na,{cell}\n"))
    assert readings.frame.empty
    assert rule in readings.rejected["rule"][0]

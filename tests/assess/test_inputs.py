"""From readings to what the engine wants: ionic strength, pressure, uncertainties, acids of the user's own."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from sample_tables import assessed, results

from aquabuf.assess.sample.inputs import (
    alkalinity_reading,
    alkalinity_source,
    ionic_strength,
    own_acids,
    pressure,
    uncertainties,
    values_of,
)
from aquabuf.readings.reader import read_readings
from aquabuf.readings.result import UserAcid

IONS = {"calcium_mol_l": 4e-4, "magnesium_mol_l": 2e-4, "sodium_mol_l": 3e-4, "potassium_mol_l": 5e-5, "chloride_mol_l": 2e-4,
        "sulfate_mol_l": 1e-4, "alkalinity_eq_l": 1e-3}
# half of 4 (Ca + Mg + SO4) + Na + K + Cl + HCO3: 0.5 (4 * 7e-4 + 3e-4 + 5e-5 + 2e-4 + 1e-3), by hand
OF_IONS = 2.175e-3


def values(**numbers):
    """One sample as the dictionary of arrays."""
    return {name: np.array([value]) for name, value in ({"temperature_c": 15.0} | numbers).items()}


SOURCES = [  # best first; by hand: 1.6e-5 x 150, 2.5e-5 x 120 (Langelier 1936)
    ("given", {"ionic_strength_mol_l": 0.007}, 0.007),
    ("ions", IONS, OF_IONS),
    ("conductivity", {"conductivity_us_cm": 150.0}, 2.4e-3),
    ("dissolved solids", {"tds_mg_l": 120.0}, 3.0e-3),
]


@pytest.mark.parametrize("best", range(len(SOURCES)))
def test_ionic_strength_takes_the_best_source(best):
    """Given, ions, conductivity, dissolved solids: the first that is there counts, whatever stands behind it."""
    everything = {name: v for _, numbers, _ in SOURCES[best:] for name, v in numbers.items()}
    found, source = ionic_strength(values(**everything))
    assert source.tolist() == [SOURCES[best][0]]
    assert_allclose(found, SOURCES[best][2], rtol=1e-12)


def test_ionic_strength_implied_by_salinity_and_alkalinity():
    """Without any of these the engine implies it: 19.924 S / (1000 - 1.005 S) (Dickson et al. 2007), or alkalinity as 1:1 salt."""
    assert np.isnan(ionic_strength(values(salinity=0.5))[0]).all()
    cases = ({"sample_id": "salt", "salinity": 0.5}, {"sample_id": "bare"}, {"sample_id": "zero", "salinity": 0.0})
    table = results(*({"ph": 8.0, "alkalinity_eq_l": 2e-3, "temperature_c": 15.0} | case for case in cases))
    assert table["ionic_strength_from"].tolist() == ["salinity", "alkalinity", "alkalinity"]
    assert_allclose(table["ionic_strength_mol_l"], [19.924 * 0.5 / (1000 - 1.005 * 0.5), 2e-3, 2e-3], rtol=1e-6)


def test_salinity_fixes_the_ionic_strength_of_salt_water():
    """From salinity 1 on the sea-salt relation counts, even where conductivity is measured: 0.7227 mol/kg at S 35 (Dickson)."""
    row = results({"ph": 8.0, "alkalinity_eq_l": 2.3e-3, "temperature_c": 15.0, "salinity": 35.0, "conductivity_us_cm": 53e3}).iloc[0]
    assert row["ionic_strength_from"] == "salinity"
    assert_allclose(row["ionic_strength_mol_l"], 0.7227, rtol=2e-4)


@pytest.mark.parametrize("missing", ["calcium", "magnesium", "sodium", "chloride", "sulfate"])
def test_ions_count_only_if_the_major_ones_are_there(missing):
    """A sum without one of the major ions would be too small: the next source is taken."""
    some = {k: v for k, v in IONS.items() if k != f"{missing}_mol_l"}
    assert ionic_strength(values(conductivity_us_cm=150.0, **some))[1].tolist() == ["conductivity"]


def test_ions_need_an_alkalinity():
    """Bicarbonate is part of the sum; in acid water the H+ of a negative alkalinity is."""
    no_alkalinity = {k: v for k, v in IONS.items() if k != "alkalinity_eq_l"}
    assert ionic_strength(values(**no_alkalinity))[1].tolist() == ["alkalinity"]
    acid = ionic_strength(values(**(IONS | {"alkalinity_eq_l": -1e-3})))[0]
    assert_allclose(acid, OF_IONS, rtol=1e-12)


def test_sources_are_chosen_row_by_row():
    """Each row has its own best source."""
    table = {name: np.array(v) for name, v in {
        "temperature_c": [10.0] * 3, "conductivity_us_cm": [100.0, np.nan, np.nan], "tds_mg_l": [np.nan, 100.0, np.nan]}.items()}
    found, source = ionic_strength(table)
    assert source.tolist() == ["conductivity", "dissolved solids", "alkalinity"]
    assert_allclose(found, [1.6e-3, 2.5e-3, np.nan], rtol=1e-12)


def test_pressure_by_elevation():
    """Standard atmosphere, ISO 2533 (recalled): 898.746 hPa at 1000 m, 540.199 hPa at 5000 m; measured pressure wins; else 1 atm."""
    table = {"temperature_c": np.full(4, 10.0), "elevation_m": np.array([1000.0, 5000.0, 1000.0, np.nan]),
             "air_pressure_atm": np.array([np.nan, np.nan, 0.95, np.nan])}
    assert_allclose(pressure(table), [898.746 / 1013.25, 540.199 / 1013.25, 0.95, 1.0], rtol=0, atol=5e-6)


def test_pressure_reaches_the_answer():
    """CO2 of air falls with pressure: at 5000 m, x (P - pH2O) with 17.044 hPa of vapor at 15 °C (handbook)."""
    low, high = (results({"ph": 7.0, "alkalinity_eq_l": 1e-3, "temperature_c": 15.0, "elevation_m": z}).iloc[0] for z in (0.0, 5000.0))
    ratio = (540.199 - 17.044) / (1013.25 - 17.044)
    assert_allclose((low["pco2_air_ratio"] / low["pco2_uatm"]) / (high["pco2_air_ratio"] / high["pco2_uatm"]), ratio, rtol=2e-5)


def test_uncertainty_default_and_own():
    """Default of the column table (alkalinity: 2 µeq/L and 2 %), unless the row has its own, zero included."""
    table = {"temperature_c": np.full(3, 10.0), "alkalinity_eq_l": np.full(3, 1e-3),
             "alkalinity_u_eq_l": np.array([np.nan, 5e-6, 0.0]), "ph": np.full(3, 7.0)}
    u = uncertainties(table)
    assert_allclose(u["alkalinity_eq_l"], [2.2e-5, 5e-6, 0.0], rtol=1e-12)
    assert_allclose(u["ph"], 0.05, rtol=1e-12)
    assert "alkalinity_u_eq_l" not in u


def test_uncertainty_of_a_non_detect(tmp_path):
    """Below detection: half the limit, spread of a value evenly likely up to it, limit / sqrt(12)."""
    path = tmp_path / "t.csv"
    path.write_text("sample_id,temperature_c,ph,alkalinity_meq_l,sulfate_mg_l\na,10,7,1,<0.2\nb,10,7,1,4\n")
    found = values_of(read_readings(path).frame)
    mol = 1e-3 / 96.06  # of sulfate, g/mol (IUPAC)
    assert_allclose(found["sulfate_mol_l"], [0.1 * mol, 4.0 * mol], rtol=1e-4)
    assert_allclose(uncertainties(found)["sulfate_mol_l"], [0.2 * mol / np.sqrt(12.0), 1e-6 + 0.05 * 4.0 * mol], rtol=1e-4)


def test_anc_stands_in_for_alkalinity():
    """Measured alkalinity first; ANC where only that was measured; the name of the definition stays."""
    table = {"temperature_c": np.full(3, 10.0), "alkalinity_eq_l": np.array([1e-4, np.nan, np.nan]),
             "anc_eq_l": np.array([9e-5, 8e-5, np.nan])}
    assert_array_equal(alkalinity_reading(table), [1e-4, 8e-5, np.nan])
    assert alkalinity_source(table).tolist() == ["alkalinity", "anc", "computed"]


def test_values_leave_empty_columns_and_words_out():
    """Only numbers with at least one value travel on."""
    frame = assessed({"ph": 7.0, "alkalinity_eq_l": 1e-3, "temperature_c": 10.0, "site": "weir"}).inputs
    assert set(frame.values) == {"ph", "alkalinity_eq_l", "temperature_c"}


def test_own_acid_counts_in_the_balance():
    """An acid of the user's own, pK 5, is all base at pH 8: it takes its part of the alkalinity from carbonate.

    A share of 1/(1 + 10^-3) of 0.2 mmol/L is charged; carbonate alkalinity falls by just that amount.
    """
    acid = UserAcid(name="humus", pk=(5.0,), charge=0)
    water = {"ph": 8.0, "alkalinity_eq_l": 1e-3, "temperature_c": 25.0, "ionic_strength_mol_l": 1e-3}
    bare = results(water).iloc[0]
    held = results(water | {"humus_mol_l": 2e-4}, acids={"humus_mol_l": acid}).iloc[0]
    carbonate = [r["bicarbonate_mmol_l"] + 2.0 * r["carbonate_mmol_l"] for r in (bare, held)]
    assert_allclose(carbonate[0] - carbonate[1], 0.2 / (1.0 + 10.0**-3.0), rtol=2e-4)
    assert own_acids({"humus_mol_l": acid})[0].reference == "given in the map file"


def test_own_acid_has_an_uncertainty():
    """Five percent unless a column of its own says otherwise."""
    table = {"humus_mol_l": np.array([2e-4, 2e-4]), "humus_u_mol_l": np.array([np.nan, 1e-6]), "temperature_c": np.full(2, 5.0)}
    assert_allclose(uncertainties(table)["humus_mol_l"][1], 1e-6, rtol=1e-12)
    assert_allclose(uncertainties(table)["humus_mol_l"][0], 0.05 * 2e-4, rtol=0.11)


def test_readings_per_kilogram_have_the_default_of_sea_laboratories(tmp_path):
    """10 µmol/kg whatever the size where the file is per kilogram; its own column wins; 2 µeq/L and 2 % otherwise."""
    path = tmp_path / "t.csv"
    path.write_text("sample_id,temperature_c,salinity,ph,alkalinity_umol_kg,alkalinity_u_umol_kg\n"
                    "a,20,35,8.1,2300,\nb,20,35,8.1,2300,3\n", encoding="utf-8")
    readings = read_readings(path)
    found = values_of(readings.frame)
    assert_allclose(uncertainties(found, readings.headers)["alkalinity_eq_l"], [1e-5, 3e-6 * 1.0248], rtol=1e-3)
    assert_allclose(uncertainties(found)["alkalinity_eq_l"][0], 2e-6 + 0.02 * 2300e-6 * 1.0248, rtol=1e-3)

"""Heat against calorimetry, closed forms and data that the constants do not come from."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from published_rows import computed, read_rows, row_id

from aquabuf.chem.fresh import k_henry_co2
from aquabuf.chem.heat import (
    CO2_DISSOLVING_KJ_MOL,
    SULFURIC_DILUTION_KJ_MOL,
    carbonic_enthalpies_kj_mol,
    dilution_heat_kj_mol,
    neutralization_heat_kj_eq,
    sulfuric_dilution_kj_mol,
)
from aquabuf.errors import InputError
from aquabuf.tables import read_table

ROWS = [r for r in read_rows("heat") if r["quantity"] != "carbonic_enthalpies_kj_mol"]


@pytest.mark.parametrize("row", ROWS, ids=row_id)
def test_heat_matches_its_source(row):
    """Each figure within the tolerance of its source."""
    assert_allclose(computed(row), float(row["expected"]), rtol=0, atol=float(row["atol"]), err_msg=row["source"])


def test_carbonic_enthalpies():
    """Goldberg et al. 2002 (recalled): 9.15 and 14.70 kJ/mol at 25 °C."""
    assert_allclose(carbonic_enthalpies_kj_mol(), (9.15, 14.70), atol=0.3)


def test_carbon_dioxide_warms_water_as_its_solubility_says():
    """The van 't Hoff slope of Henry's constant is the heat of dissolving."""
    slope = np.log(k_henry_co2(26.0) / k_henry_co2(24.0)) / (1.0 / 299.15 - 1.0 / 297.15)
    assert_allclose(1e-3 * 8.314462618 * slope, CO2_DISSOLVING_KJ_MOL, atol=1.0)


def test_what_many_waters_leave_is_the_second_proton():
    """Its enthalpy of ionization is -22.4 kJ/mol (Goldberg et al. 2002, recalled), a source apart from the dilution."""
    assert_allclose(sulfuric_dilution_kj_mol(100.0), 22.4, atol=1.0)


def test_neutralization_with_weak_acids():
    """An array of ionization enthalpies; zero is a strong acid, a missing one stays missing."""
    assert_allclose(neutralization_heat_kj_eq([0.0, np.nan, 51.95]), [55.815, np.nan, 3.865], atol=1e-9)


def test_strength_of_sulfuric_acid_is_counted_in_waters():
    """93 %: 7 g of water over 18.015 and 93 g of acid over 98.074."""
    waters = (7.0 / 18.015) / (93.0 / 98.074)
    assert_allclose(dilution_heat_kj_mol("H2SO4", 0.93), 95.3 - 74.73 * waters / (waters + 1.7983), atol=1e-3)
    assert_allclose(dilution_heat_kj_mol("H2SO4", 1.0), SULFURIC_DILUTION_KJ_MOL, rtol=1e-12)


def test_between_and_beyond_the_points():
    """Halfway of 5 and 9 mol/kg; 37 % (16.1 mol/kg) by the last slope; far beyond and unknown substances are nan."""
    m = 7.0 * 36.458e-3
    assert_allclose(dilution_heat_kj_mol("HCl", m / (1.0 + m)), 0.5 * (5.318 + 9.213), atol=1e-6)
    assert_allclose(dilution_heat_kj_mol("HCl", 0.37), 15.40 + (0.37 / 0.63 / 36.458e-3 - 15.0) * (15.40 - 9.213) / 6.0, atol=1e-3)
    assert np.isnan([dilution_heat_kj_mol("HCl", 0.45), dilution_heat_kj_mol("HNO3", 0.6),
                     dilution_heat_kj_mol("NaOH", 1.0)]).all()


def test_table_rises_from_nothing_and_names_its_sources():
    """Every substance begins at zero; every row is marked."""
    for formula in {r["formula"] for r in read_table("dilution_heats")}:
        rows = [r for r in read_table("dilution_heats") if r["formula"] == formula]
        points = np.array([[float(r["molality_mol_kg"]), float(r["kj_mol"])] for r in rows])
        assert (points[0] == 0.0).all()
        assert (np.diff(points, axis=0) > 0.0).all()
        assert all(r["mark"] in ("printed", "recalled", "derived") and len(r["source"]) > 10 for r in rows)


def test_strength_must_be_a_mass_fraction():
    """50 for 50 % is refused."""
    with pytest.raises(InputError, match=r"strength of NaOH must be a mass fraction.*found 50.*0\.5"):
        dilution_heat_kj_mol("NaOH", 50.0)

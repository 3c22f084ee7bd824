"""The seam at salinity 1, where the seawater constants take over: the measured step, its bounds and its cause.

The bounds here are those printed in docs/engine.md.
"""

import numpy as np
import pytest
from by_hand import PairedWater, gamma
from numpy.testing import assert_allclose

from aquabuf import Water

BELOW, AT = 1.0 - 1e-9, 1.0


def both(maker=Water.from_alkalinity_dic, **values):
    """The same readings just below the seam and on it."""
    water = maker(**values, salinity=[BELOW, AT])
    assert (water.status == 0).all()
    return water


def pks(t_c):
    """pK1, pK2 (meter pH, concentrations in mol/L) on both sides."""
    water = both(Water.from_ph_dic, ph=8.0, dic_mol_l=1e-3, t_c=t_c)
    s = water.species_mol_l
    return water.ph - np.log10(s["HCO3-"] / s["CO2"]), water.ph - np.log10(s["CO3--"] / s["HCO3-"])


@pytest.mark.parametrize("t_c", [0.0, 10.0, 25.0, 40.0])
def test_step_of_the_constants(t_c):
    """pK1 rises by 0.000 to 0.007, pK2 falls by 0.145 to 0.205."""
    pk1, pk2 = pks(t_c)
    assert_allclose(pk1[1] - pk1[0], 0.0035, rtol=0, atol=0.0035)
    assert_allclose(pk2[1] - pk2[0], -0.175, rtol=0, atol=0.03)


@pytest.mark.parametrize("t_c", [10.0, 25.0])
def test_ion_pairs_of_sea_salt_explain_the_step_of_pk2(t_c):
    """Millero's constants hold pairs, the fresh ones do not: sea salt of salinity 1 pairs that share of carbonate.

    Mg 0.0528, Ca 0.01028, Na 0.469, K 0.0102, SO4 0.0282 mol/kg at S 35 (composition of sea water, recalled); pair constants
    of Plummer & Busenberg 1982, Siebert & Hostetler 1977 and Nordstrom et al. 1990 with Davies coefficients. They account
    for the whole step and a little more (0.03 at 10 °C, 0.06 at 25 °C).
    """
    salt = {"magnesium": 0.0528 / 35.0, "calcium": 0.01028 / 35.0, "sodium": 0.469 / 35.0, "potassium": 0.0102 / 35.0}
    held, _, _ = PairedWater(salt, 0.0282 / 35.0, t_c, 0.01994).speciate(1e-8, 1e-4)
    _, pk2 = pks(t_c)
    assert_allclose(pk2[1] - pk2[0], -np.log10(held["CO3"] / held["HCO3"]), rtol=0, atol=0.06)


@pytest.mark.parametrize("t_c", [0.0, 10.0, 25.0, 40.0])
def test_scales_and_activity_join_without_a_step(t_c):
    """Meter activity over free H+ is the Davies coefficient on both sides; density and CO2 solubility join within 0.01 %
    and 0.9 %, alkalinity and carbon are as given."""
    water = both(Water.from_ph_pco2, ph=7.0, pco2_atm=1e-3, t_c=t_c)
    step = water.ph - water.ph_on("free")
    assert_allclose(step, -np.log10(gamma(1, 0.019944, t_c)), rtol=0, atol=2e-5)
    assert_allclose(water.density_kg_l[1] / water.density_kg_l[0] - 1.0, 8e-4, rtol=0, atol=1e-4)  # the salt itself
    assert_allclose(water.species_mol_l["CO2"][1] / water.species_mol_l["CO2"][0], 1.0, rtol=0, atol=0.009)


@pytest.mark.parametrize(("alkalinity", "dic", "low", "high"), [
    (1e-3, 1.20e-3, 0.0, 0.006),      # river water with free CO2: far below the uncertainty of a field meter
    (1e-3, 1.02e-3, -0.045, 0.0),     # near air equilibrium
    (1e-4, 1.0e-4, -0.18, -0.10),     # soft water at the bicarbonate point: weakest buffering, largest step
    (2.3e-3, 2.2e-3, -0.175, -0.14),  # carbonate water
])
def test_step_of_ph_for_given_alkalinity_and_carbon(alkalinity, dic, low, high):
    """pH falls by what pK2 falls where CO3-- matters, and hardly moves where CO2 rules."""
    for t_c in (0.0, 10.0, 25.0):
        ph = both(alkalinity_eq_l=alkalinity, dic_mol_l=dic, t_c=t_c).ph
        assert low <= ph[1] - ph[0] <= high


def test_step_of_ph_for_given_alkalinity_and_co2():
    """Under air the step is at most 0.01 in pH at 1 meq/L, because HCO3- carries the alkalinity there."""
    ph = both(Water.from_alkalinity_pco2, alkalinity_eq_l=1e-3, pco2_atm=4.2e-4, t_c=[[0.0], [10.0], [25.0]]).ph
    assert_allclose(ph[:, 1] - ph[:, 0], 0.0, rtol=0, atol=0.01)


def test_no_other_step_on_the_marine_side():
    """From salinity 1 to 50 pH at given alkalinity and carbon moves by less than 0.01 per 0.05 of salinity."""
    salinity = np.arange(1.0, 50.0, 0.05)
    ph = Water.from_alkalinity_dic(alkalinity_eq_l=2.3e-3, dic_mol_l=2.2e-3, t_c=20.0, salinity=salinity).ph
    assert np.abs(np.diff(ph)).max() < 0.01


def test_step_of_saturation_is_small():
    """Fresh rows count the pairs of calcium carbonate, so the calcite index steps by 0.05 to 0.08 only at given pH and
    alkalinity, CO2 pressure by 1.5 % at most."""
    water = both(Water.from_ph_alkalinity, ph=8.2, alkalinity_eq_l=2e-3, t_c=[[10.0], [25.0]], calcium_mol_l=1e-3)
    assert_allclose(np.diff(water.saturation_index()), 0.065, rtol=0, atol=0.015)
    pressure = both(Water.from_ph_alkalinity, ph=8.0, alkalinity_eq_l=[[1e-4], [3e-3]], t_c=15.0).pco2_atm
    assert_allclose(pressure[:, 1] / pressure[:, 0], 1.0, rtol=0, atol=0.015)

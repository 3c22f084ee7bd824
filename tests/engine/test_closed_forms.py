"""Waters whose answer is a closed form: identities of the balance, ideal solutions, gas and calcite equilibria.

The constants come from the tables of chem (each with its published row), the activity factors and the density are
applied here a second time.
"""

import numpy as np
import pytest
from by_hand import gamma
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from aquabuf import Water
from aquabuf.chem import fresh
from aquabuf.chem.gases import co2_fugacity_ratio, pco2_of_air
from aquabuf.chem.properties import water_density

LN10 = np.log(10.0)
STRENGTHS = [0.0, 0.001, 0.1]
TEMPERATURES = [0.0, 12.5, 25.0, 50.0]


def constants(t_c, strength):
    """K1 and K2 for activity of H+ and concentrations of the rest, H+ and OH- in mol/L per activity, density."""
    g1, g2 = gamma(1, strength, t_c), gamma(2, strength, t_c)
    rho = water_density(t_c) / 1000.0
    k1 = fresh.k1_carbonic(t_c) * 10.0 ** (0.1 * strength) / g1
    return k1, fresh.k2_carbonic(t_c) * g1 / g2, rho / g1, fresh.k_water(t_c) / g1 * rho


@pytest.mark.parametrize("strength", STRENGTHS)
@pytest.mark.parametrize("t_c", TEMPERATURES)
def test_bicarbonate_point(t_c, strength):
    """At pH = (pK1 + pK2)/2 the carbonate alkalinity equals total carbon: CO2 and CO3-- are equal there."""
    k1, k2, c_h, c_oh = constants(t_c, strength)
    h, dic = np.sqrt(k1 * k2), 2e-3
    water = Water.from_alkalinity_dic(alkalinity_eq_l=dic + c_oh / h - c_h * h, dic_mol_l=dic, t_c=t_c,
                                      ionic_strength_mol_l=strength)
    assert_allclose(water.ph, -np.log10(h), rtol=0, atol=1e-10)
    assert_allclose(water.species_mol_l["CO2"], water.species_mol_l["CO3--"], rtol=1e-9)


@pytest.mark.parametrize("strength", STRENGTHS)
@pytest.mark.parametrize("t_c", TEMPERATURES)
def test_pure_water_is_half_of_pkw(t_c, strength):
    """Without carbon and alkalinity pH is pKw/2 at any ionic strength: H+ and OH- have the same activity coefficient."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=0.0, dic_mol_l=0.0, t_c=t_c, ionic_strength_mol_l=strength)
    assert_allclose(water.ph, -0.5 * np.log10(fresh.k_water(t_c)), rtol=0, atol=1e-12)


@pytest.mark.parametrize(("t_c", "pkw"), [(0.0, 14.946), (25.0, 13.995), (50.0, 13.264)])
def test_pure_water_by_the_handbook(t_c, pkw):
    """CRC Handbook values of pKw (printed), 0.003 for the same formula."""
    assert_allclose(2.0 * Water.from_alkalinity_dic(alkalinity_eq_l=0.0, dic_mol_l=0.0, t_c=t_c).ph, pkw, rtol=0, atol=0.003)


@pytest.mark.parametrize("strength", STRENGTHS)
def test_strong_acid_and_base_are_bare_hydrogen_and_hydroxide(strength):
    """Without carbon, alkalinity of -0.01 is H+ alone and +0.01 is OH- alone (the partner is 1e-10 of it)."""
    _, _, c_h, c_oh = constants(25.0, strength)
    water = Water.from_alkalinity_dic(alkalinity_eq_l=[-0.01, 0.01], dic_mol_l=0.0, t_c=25.0, ionic_strength_mol_l=strength)
    assert_allclose(water.ph, [-np.log10(0.01 / c_h), -np.log10(c_oh / 0.01)], rtol=0, atol=1e-9)


def test_far_above_pk2_carbonate_alkalinity_is_twice_the_carbon():
    """Limit of the balance: all carbon is CO3-- at pH 14.5 (1 - 6.7e-5 of it at I = 0)."""
    water = Water.from_ph_dic(ph=14.5, dic_mol_l=1e-3, t_c=25.0, ionic_strength_mol_l=0.0)
    assert_allclose(water.alkalinity_eq_l - water.species_mol_l["OH-"], 2e-3, rtol=1e-4)
    assert_allclose(water.charge_eq_l("carbonate"), -2e-3, rtol=1e-4)


# 1 mM solutions, ideal, pK 6.351, 10.329, 13.995 at 25 °C; worked out apart from this code (closed-form polynomials)
@pytest.mark.parametrize(("alkalinity", "ph"), [(0.0, 4.680), (0.5e-3, 6.352), (1e-3, 8.297), (1.5e-3, 10.102), (2e-3, 10.562)])
def test_ideal_millimolar_solutions(alkalinity, ph):
    """CO2, half-neutralized, NaHCO3, between, Na2CO3; textbook values for the rounded constants named above."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=alkalinity, dic_mol_l=1e-3, t_c=25.0, ionic_strength_mol_l=0.0)
    assert_allclose(water.ph, ph, rtol=0, atol=0.002)


def test_single_acid_peaks_at_its_pk():
    """Van Slyke 1922: ln10/4 C = 0.575646 C at pH = pKa, 40/121 of it one unit away, 400/10201 two units away."""
    total, pka = 1e-3, 4.756
    water = Water.from_ph_dic(ph=pka + np.array([0.0, -1.0, 1.0, -2.0, 2.0]), dic_mol_l=0.0, t_c=25.0,
                              ionic_strength_mol_l=0.0, acetate_mol_l=total)
    peak = 0.5756462732485115 * total
    share = water.buffer_by_pair()["CH3COOH/CH3COO-"]
    assert_allclose(share, peak * np.array([1.0, 40 / 121, 40 / 121, 400 / 10201, 400 / 10201]), rtol=1e-12)
    bare = Water.from_ph_dic(ph=water.ph, dic_mol_l=0.0, t_c=25.0, ionic_strength_mol_l=0.0)
    assert_allclose(water.buffer_intensity_eq_l() - bare.buffer_intensity_eq_l(), share, rtol=1e-9)


@pytest.mark.parametrize(("ph", "expected"), [(6.35, 5.770e-4), (8.29, 5.113e-5), (4.69, 9.515e-5), (10.329, 1.0727e-3)])
def test_carbonate_buffer_intensity(ph, expected):
    """1 mM carbon, ideal: maximum, both minima and the point where OH- takes over; worked out numerically elsewhere."""
    water = Water.from_ph_dic(ph=ph, dic_mol_l=1e-3, t_c=25.0, ionic_strength_mol_l=0.0)
    assert_allclose(water.buffer_intensity_eq_l(), expected, rtol=0.005)


@pytest.mark.parametrize(("strength", "expected"), [(0.0, 8.340), (0.001, 8.294), (0.005, 8.243), (0.01, 8.207)])
def test_weakest_point_lies_between_the_pks(strength, expected):
    """(pK1 + pK2)/2 of the concentration constants (computed apart from this code), so -log10 [H+]; a meter reads activity.

    Much carbon, so that water itself is minor.
    """
    water = Water.from_ph_dic(ph=7.5, dic_mol_l=0.5, t_c=25.0, ionic_strength_mol_l=strength)
    concentration_ph = water.weakest_buffering().ph + np.log10(gamma(1, strength, 25.0))
    assert_allclose(concentration_ph, expected, rtol=0, atol=0.002)


@pytest.mark.parametrize(("ppm", "t_c", "ph"), [
    (280, 25.0, 5.686), (316, 25.0, 5.660), (350, 25.0, 5.637), (420, 25.0, 5.598), (400, 20.0, 5.593),
    (400, 10.0, 5.565), (400, 0.0, 5.542),
])
def test_rain_in_equilibrium_with_air(ppm, t_c, ph):
    """Pure water under CO2 at ppm 1e-6 atm, Plummer & Busenberg constants; worked out apart from this code."""
    water = Water.from_alkalinity_pco2(alkalinity_eq_l=0.0, pco2_atm=ppm * 1e-6, t_c=t_c)
    assert_allclose(water.ph, ph, rtol=0, atol=0.002)


def test_rain_product_of_hydrogen_and_bicarbonate():
    """[H+][HCO3-] = 4.84e-12 per kg2 at 316 ppm, 25 °C (encyclopedia, printed), and pH 4.79 under 10^-1.75 atm (printed)."""
    water = Water.from_alkalinity_pco2(alkalinity_eq_l=0.0, pco2_atm=[316e-6, 10.0**-1.75], t_c=25.0)
    product = water.species_mol_l["H+"] * water.species_mol_l["HCO3-"]
    assert_allclose(product[0] / water.density_kg_l[0] ** 2, 4.84e-12, rtol=0.02)
    assert_allclose(water.ph, [5.66, 4.79], rtol=0, atol=0.01)


@pytest.mark.parametrize("t_c", TEMPERATURES)
def test_dissolved_co2_follows_henry(t_c):
    """[CO2] = KH / gamma0 times fugacity, per liter: definition, with the fugacity ratio of Weiss 1974."""
    water = Water.from_ph_pco2(ph=5.0, pco2_atm=0.01, t_c=t_c, ionic_strength_mol_l=0.05, pressure_atm=0.8)
    expected = (fresh.k_henry_co2(t_c) / 10.0**0.005 * 0.01 * co2_fugacity_ratio(t_c, 0.8) * water_density(t_c) / 1000.0)
    assert_allclose(water.species_mol_l["CO2"], expected, rtol=1e-12)


def test_at_air_subtracts_water_vapor_at_the_waters_own_pressure():
    """pCO2 = x (P - pH2O): 23.746 mmHg of vapor at 25 °C (Weiss & Price 1980, recalled from memory)."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=1e-3, dic_mol_l=1.2e-3, t_c=25.0, pressure_atm=0.8)
    aired = water.at_air(400.0)
    assert_allclose(aired.pco2_atm, 400e-6 * (0.8 - 23.746 / 760.0), rtol=1e-5)
    assert_allclose(aired.pco2_atm, pco2_of_air(400.0, 25.0, 0.8), rtol=1e-12)
    assert_allclose(aired.alkalinity_eq_l, 1e-3, rtol=1e-15)


def test_at_air_over_sea_water():
    """Salt lowers the vapor pressure: 0.030655 atm at S 35, 25 °C (Weiss & Price 1980, recalled from memory)."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=2.3e-3, dic_mol_l=2e-3, t_c=25.0, salinity=[35.0])
    assert_allclose(water.at_air(400.0).pco2_atm, 400e-6 * (1.0 - 0.030655), rtol=2e-6)


def test_air_ratio_is_one_under_the_same_air():
    """CO2 pressure over that of the air: 1 after equilibrium with it, 2.5 where the water holds 1000 ppm under 400 (definition)."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=1e-3, dic_mol_l=1e-3, t_c=[5.0, 30.0], pressure_atm=0.9).at_air(1000.0)
    assert_allclose(water.pco2_air_ratio(1000.0), 1.0, rtol=1e-12)
    assert_allclose(water.pco2_air_ratio(400.0), 2.5, rtol=1e-12)


def open_calcite_ph(k_h, k_1, k_2, k_s, pco2):
    """[H]3 = KH2 K1 2 K2 P2 / (2 Ks): ideal water with calcite and CO2 gas, charge balance 2 Ca = HCO3."""
    return -np.log10(k_h**2 * k_1**2 * k_2 * pco2**2 / (2.0 * k_s)) / 3.0


def test_open_calcite():
    """The formula gives the published 8.328 with its own constants; the engine follows it with its own.

    Left over: calcium pairs (1.2 % of Ca as CaHCO3+, 1.1 % as CaCO3), CO3-- in the charge balance, density: 0.012 in pH.
    """
    assert_allclose(open_calcite_ph(3.3e-2, 4.5e-7, 4.7e-11, 5e-9, 10.0**-3.5), 8.328, rtol=0, atol=0.002)

    def index(log_ca):
        water = Water.from_alkalinity_pco2(alkalinity_eq_l=2 * 10.0**log_ca, pco2_atm=10.0**-3.5, t_c=25.0,
                                           ionic_strength_mol_l=0.0, calcium_mol_l=10.0**log_ca)
        return float(water.saturation_index()), float(water.ph), 10.0**log_ca

    _, ph, calcium = index(brentq(lambda x: index(x)[0], -5, -2))
    own = (fresh.k_henry_co2(25.0) * co2_fugacity_ratio(25.0), fresh.k1_carbonic(25.0), fresh.k2_carbonic(25.0),
           fresh.ksp_calcite(25.0))
    expected = open_calcite_ph(*own, 10.0**-3.5)
    assert_allclose(ph, expected, rtol=0, atol=0.012)
    assert_allclose(calcium, own[0] * own[1] * 10.0**-3.5 / 10.0**-expected / 2.0, rtol=0.04)


def test_calcite_in_pure_closed_water():
    """pH 9.907 and 1.230e-4 mol/kg dissolved: Plummer & Busenberg, activity and pairs, worked out apart from this code.

    A trace of dissolved calcite starts the water; it takes up the rest at the ionic strength it ends with.
    """
    trace = 1e-6
    water = Water.from_alkalinity_dic(alkalinity_eq_l=2 * trace, dic_mol_l=trace, calcium_mol_l=trace, t_c=25.0,
                                      ionic_strength_mol_l=3.6e-4)
    assert_allclose(water.ph_at_saturation(), 9.907, rtol=0, atol=0.004)
    assert_allclose(trace - water.precipitation_potential_mol_l(), 1.230e-4 * 0.997, rtol=0.005)

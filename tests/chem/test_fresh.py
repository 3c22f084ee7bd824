"""Fresh-water constants against other measurements and against thermochemistry."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.chem import fresh

T_C = np.array([0.0, 5.0, 10.0, 15.0, 20.0, 25.0, 30.0, 40.0, 50.0])
R_J_MOL_K = 8.314462618


def test_k1_agrees_with_harned_davis_fit():
    """pK1 = 3404.71/T - 14.8435 + 0.032786 T (Harned & Davis 1943, recalled); two data sets agree within 0.003."""
    t = T_C + 273.15
    expected = 3404.71 / t - 14.8435 + 0.032786 * t
    assert_allclose(-np.log10(fresh.k1_carbonic(T_C)), expected, rtol=0, atol=0.003)


def test_k2_agrees_with_harned_scholes_fit():
    """pK2 = 2902.39/T - 6.4980 + 0.02379 T (Harned & Scholes 1941, recalled); within 0.004 of the found table."""
    t = T_C + 273.15
    expected = 2902.39 / t - 6.4980 + 0.02379 * t
    assert_allclose(-np.log10(fresh.k2_carbonic(T_C)), expected, rtol=0, atol=0.004)


@pytest.mark.parametrize(("function", "a", "b", "c", "atol"), [
    (fresh.k1_carbonic, -126.34048, 6320.813, 19.568224, 0.0015),
    (fresh.k2_carbonic, -90.18333, 5143.692, 14.613358, 0.003),
], ids=["k1", "k2"])
def test_carbonic_constants_agree_with_second_fit(function, a, b, c, atol):
    """Pure-water pK of Millero et al. 2006 (printed): a + b/T + c ln T, a refit of the Harned data."""
    t = T_C + 273.15
    assert_allclose(-np.log10(function(T_C)), a + b / t + c * np.log(t), rtol=0, atol=atol)


def test_product_of_henry_and_first_constant():
    """log(KH K1) = -7.82 at 25 °C (Stumm & Morgan 1970, printed)."""
    product = fresh.k_henry_co2(25.0) * fresh.k1_carbonic(25.0)
    assert_allclose(np.log10(product), -7.82, rtol=0, atol=0.0055)


@pytest.mark.parametrize(("function", "enthalpy_kj_mol", "atol"), [
    # CODATA key values (HCO3- recalled, the others printed); 0.3 is the spread against the slopes.
    (fresh.k_henry_co2, -19.74, 0.3), (fresh.k1_carbonic, 9.16, 0.3), (fresh.k2_carbonic, 14.70, 0.3),
    # CODATA 55.815; the conductance and cell fits have slopes of 56.4 to 56.6 (recalled).
    (fresh.k_water, 55.815, 0.8), (fresh.k_water_marshall_franck, 55.815, 0.8),
], ids=lambda x: getattr(x, "__name__", ""))
def test_slope_in_temperature_is_the_enthalpy(function, enthalpy_kj_mol, atol):
    """d ln K / d(1/T) = -dH/R at 25 °C: the temperature course agrees with calorimetry."""
    ln_k = np.log(function([24.9, 25.1]))
    slope = (ln_k[1] - ln_k[0]) / (1.0 / 298.25 - 1.0 / 298.05)
    assert_allclose(-R_J_MOL_K * slope / 1000.0, enthalpy_kj_mol, rtol=0, atol=atol)


def test_two_formulas_of_water_stay_within_their_known_distance():
    """The two formulas differ by 0.008 in pKw at 0 °C and 0.016 at 75 °C, and cross near 25 °C (handbook tables)."""
    t_c = [0.0, 25.0, 75.0]
    difference = np.log10(fresh.k_water(t_c) / fresh.k_water_marshall_franck(t_c))
    assert_allclose(difference, [-0.008, 0.0, 0.016], rtol=0, atol=0.0025)


def test_minerals_keep_their_order_of_solubility():
    """Calcite is the stable form at air pressure, vaterite the least stable, at every temperature."""
    t_c = np.linspace(0.0, 90.0, 19)
    calcite, aragonite, vaterite = fresh.ksp_calcite(t_c), fresh.ksp_aragonite(t_c), fresh.ksp_vaterite(t_c)
    assert np.all((calcite < aragonite) & (aragonite < vaterite))

"""Ends of limestone, lime, magnesia and CO2 against worked figures (ideal, 25 °C), closed forms and limits."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.ceilings import (
    brucite_ksp,
    calcite_ksp,
    co2_lowest_ph,
    hydroxide_ceiling_ph,
    hydroxide_ksp_of_solubility,
    limestone_end_ph,
)
from aquabuf.engine.conditions import conditions

# constants that the worked figures were computed with; each recalled
IDEAL = replace(conditions(25.0), k0=np.array(10**-1.47), k1=np.array(10**-6.352), k2=np.array(10**-10.329),
                c_h=np.array(1.0), c_oh=np.array(1e-14))
KSP_CALCITE, KSP_BRUCITE = 10**-8.48, 5.6e-12


@pytest.mark.parametrize(("pco2", "expected"), [
    (1.0, (5.93, 5.83, 5.61)), (0.1, (6.60, 6.41, 6.13)), (0.01, (7.26, 6.96, 6.63)), (4.2e-4, (8.18, 7.67, 7.32))])
def test_limestone_in_acid_under_co2(pco2, expected):
    """Worked figures for 0, 0.01 and 0.05 N of strong acid."""
    assert_allclose(limestone_end_ph([0.0, 0.01, 0.05], pco2, IDEAL, KSP_CALCITE), expected, atol=0.01)


def test_limestone_in_much_acid_follows_the_closed_form():
    """Calcium is half the acid then: h^2 = K1 K2 KH p (A/2) / Ksp."""
    h = np.sqrt(10.0 ** -(6.352 + 10.329 + 1.47) * 1.0 * 0.5 * 5.0 / KSP_CALCITE)

    assert_allclose(limestone_end_ph(5.0, 1.0, IDEAL, KSP_CALCITE), -np.log10(h), atol=0.002)


def test_shipped_constants_agree_with_the_worked_figures():
    """Calcite of Plummer & Busenberg at zero ionic strength gives pH 5.61 too."""
    assert_allclose(limestone_end_ph(0.05, 1.0, conditions(25.0)), 5.61, atol=0.02)
    assert_allclose(np.log10(calcite_ksp(conditions(25.0))), -8.48, atol=0.01)


def test_activities_lift_the_end_of_limestone():
    """Ions of 0.1 mol/L hold calcium and carbonate back: more dissolves, by the Davies equation about 0.2 pH more."""
    lifted = limestone_end_ph(0.05, 1.0, conditions(25.0, 0.0, 0.1)) - limestone_end_ph(0.05, 1.0, conditions(25.0))

    assert 0.1 < lifted < 0.3


def test_magnesium_hydroxide_in_pure_water():
    """Ksp 5.6e-12: pH 10.35 and 6.5 mg/L dissolved (worked figures)."""
    ph = float(hydroxide_ceiling_ph(KSP_BRUCITE, 0.0, IDEAL))

    assert_allclose(ph, 10.35, atol=0.005)
    assert_allclose(0.5 * 10 ** (ph - 14.0) * 58.32e3, 6.5, atol=0.05)


def test_a_hydroxide_stops_earlier_in_acid():
    """Limit of much acid: OH^2 = 2 Ksp / A; the balance OH^2 (A + OH) = 2 Ksp holds in between."""
    acid = np.array([1e-4, 1e-2, 1.0])
    oh = 10.0 ** (hydroxide_ceiling_ph(KSP_BRUCITE, acid, IDEAL) - 14.0)

    assert_allclose(oh**2 * (acid + oh), 2.0 * KSP_BRUCITE, rtol=1e-9)
    assert_allclose(oh[-1], np.sqrt(2.0 * KSP_BRUCITE / 1.0), rtol=1e-5)


def test_lime_water():
    """1.6 g/L of Ca(OH)2: 0.0432 N and ideal pH 12.6 (worked figures); the trade sheet measures 12.45."""
    ph = float(hydroxide_ceiling_ph(hydroxide_ksp_of_solubility(1.6 / 74.093), 0.0, IDEAL))

    assert_allclose(10.0 ** (ph - 14.0), 0.0432, rtol=0.001)
    assert_allclose(ph, 12.6, atol=0.05)


def test_brucite_with_activities():
    """Zero ionic strength leaves the thermodynamic constant; ions raise the product by gamma2 gamma1^2, 0.77^6 in Davies."""
    ideal, salty = (float(brucite_ksp(conditions(25.0, 0.0, i))) for i in (0.0, 0.1))
    log_gamma_1 = -0.509 * (np.sqrt(0.1) / (1 + np.sqrt(0.1)) - 0.03)

    assert_allclose(np.log10(salty / ideal), -6.0 * log_gamma_1, atol=0.01)


def test_co2_cannot_pass_its_own_saturation():
    """pH = pK1 + log10(base) + 1.47 where bicarbonate is all of the base; the mineral ends of the table agree with it."""
    base = np.array([0.01, 0.05])

    assert_allclose(co2_lowest_ph(base, 1.0, IDEAL), 6.352 + np.log10(base) + 1.47, atol=1e-3)
    assert_allclose(co2_lowest_ph(0.0, 1.0, IDEAL), 0.5 * (6.352 + 1.47), atol=1e-3)  # water: h^2 = K1 KH p


def test_missing_figures_cost_their_own_row():
    """nan in, nan out; a pressure of zero has no end."""
    found = limestone_end_ph([0.01, np.nan], [[1.0], [0.0]], IDEAL, KSP_CALCITE)

    assert np.isfinite(found).tolist() == [[True, False], [False, False]]
    assert np.isfinite(co2_lowest_ph([0.01, np.nan], 1.0, IDEAL)).tolist() == [True, False]
    assert np.isfinite(hydroxide_ceiling_ph(KSP_BRUCITE, [0.01, np.nan], IDEAL)).tolist() == [True, False]

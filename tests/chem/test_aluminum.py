"""Charge of dissolved aluminum: limits, mass action in high precision, slope."""

import mpmath as mp
import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.chem.aluminum import aluminum_charge, charge_and_slope

# Nordstrom & May 1996 (recalled): log10 of Al+++ + n H2O = Al(OH)n + n H+, 25 °C
LOG_BETA = ("-5.00", "-10.1", "-16.9", "-22.7")
PH = np.linspace(2.0, 12.0, 81)


def precise(ph):
    """Mean charge and variance of the hydroxides on one aluminum, by mass action in 40 digits."""
    with mp.workdps(40):
        weight = [mp.mpf(1)] + [mp.power(10, mp.mpf(b) + (n + 1) * mp.mpf(float(ph))) for n, b in enumerate(LOG_BETA)]
        share = [w / sum(weight) for w in weight]
        bound = sum(n * s for n, s in enumerate(share))
        return 3 - bound, sum(n * n * s for n, s in enumerate(share)) - bound**2


def test_mass_action_in_high_precision():
    """Every species by its own constant: the mean charge over the whole pH range."""
    assert_allclose(aluminum_charge(PH), [float(precise(ph)[0]) for ph in PH], rtol=0, atol=1e-12)


def test_limits():
    """Al+++ in strong acid, Al(OH)4- in alkaline water; far beyond any water it stays there."""
    assert_allclose(aluminum_charge([1.0, 0.0, -30.0]), 3.0, rtol=0, atol=2e-4)
    assert_allclose(aluminum_charge([11.0, 14.0, 30.0]), -1.0, rtol=0, atol=1e-5)


def test_equal_weights_by_hand():
    """pH 5.0: Al+++ and AlOH++ weigh 1, Al(OH)2+ 10^-0.1, Al(OH)3 10^-1.9, Al(OH)4- 10^-2.7; written out."""
    w = np.array([1.0, 1.0, 10**-0.1, 10**-1.9, 10**-2.7])
    assert_allclose(aluminum_charge(5.0), (3 * w[0] + 2 * w[1] + w[2] - w[4]) / w.sum(), rtol=1e-13)


def test_slope_is_the_derivative():
    """Five-point differences of the charge, 0.002 pH apart."""
    step = 2e-3
    at = [aluminum_charge(PH + k * step) for k in (-2, -1, 1, 2)]
    assert_allclose(charge_and_slope(PH)[1], (at[0] - 8 * at[1] + 8 * at[2] - at[3]) / (12 * step), rtol=0, atol=1e-9)


def test_slope_is_the_variance():
    """Mass action: slope = -ln 10 times the variance of the hydroxides bound, so the charge only falls with pH."""
    charge, slope = charge_and_slope(PH)
    assert_allclose(slope, [-np.log(10.0) * float(precise(ph)[1]) for ph in PH], rtol=1e-7, atol=1e-9)
    assert (slope <= 0.0).all()
    assert_array_equal(charge, aluminum_charge(PH))


@pytest.mark.parametrize("shape", [(), (6,), (3, 2)])
def test_both_have_the_shape_of_the_ph(shape):
    """An array is answered as its values one by one; a missing pH stays missing and does no harm."""
    ph = np.linspace(3.0, 8.0, 6)[: int(np.prod(shape))].reshape(shape)
    for part, whole in enumerate(charge_and_slope(ph)):
        assert whole.shape == shape
        assert_allclose(np.ravel(whole), [charge_and_slope(x)[part] for x in np.ravel(ph)], rtol=1e-14)
    assert_array_equal(np.isnan(charge_and_slope([4.0, np.nan, 6.0])), [[False, True, False]] * 2)

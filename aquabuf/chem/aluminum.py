"""Dissolved aluminum as an acid: the charge it carries at a pH."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import LN10, exp10

__all__ = ["aluminum_charge", "charge_and_slope"]

# log10 of Al+++ + n H2O = Al(OH)n + n H+ at 25 °C, n = 1 to 4
LOG_BETA = (-5.00, -10.1, -16.9, -22.7)


def aluminum_charge(ph: ArrayLike) -> NDArray[np.float64]:
    """Mean charge of dissolved aluminum, without complexes of fluoride or organic acids. [-]

    `ph` 3 to 10. Mononuclear hydroxides at 25 °C, dilute water: Nordstrom & May 1996 (recalled).
    """
    return charge_and_slope(ph)[0]


def charge_and_slope(ph: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Mean charge of dissolved aluminum and its slope against pH, which is never positive. [-, 1/pH]"""
    inverse_h = exp10(np.clip(np.asarray(ph, dtype=float), -20.0, 20.0))
    w1 = inverse_h * 10.0**LOG_BETA[0]
    square = inverse_h * inverse_h
    w2 = square * 10.0**LOG_BETA[1]
    w3 = square * inverse_h * 10.0**LOG_BETA[2]
    w4 = square * square * 10.0**LOG_BETA[3]
    whole = 1.0 + w1 + w2 + w3 + w4
    lost = (w1 + 2.0 * w2 + 3.0 * w3 + 4.0 * w4) / whole
    squared = (w1 + 4.0 * w2 + 9.0 * w3 + 16.0 * w4) / whole
    return 3.0 - lost, -LN10 * (squared - lost * lost)

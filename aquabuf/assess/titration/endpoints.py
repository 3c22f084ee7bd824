"""Where a titration curve passes a pH, and what follows from such end points.

Acid is counted per unit of sample [eq/L or eq/kg], negative for base; arrays are titrations times points with nan
behind the last point. pH falls along the points (of a base titration it rises: mirror it first).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Crossing", "alkalinity_two_points", "crossing", "end_point_for", "left_at"]

Array = NDArray[np.float64]

# End point by expected alkalinity: upper alkalinity [mg/L as CaCO3] of each and its pH. Standard methods for water name
# 4.9, 4.6 and 4.3 for 30, 150 and 500 mg/L (pairing recalled; the equivalence pH with half the CO2 lost gives 4.94,
# 4.59 and 4.33); the bounds between them are the geometric means.
LEVELS = ((np.sqrt(30.0 * 150.0), 4.9), (np.sqrt(150.0 * 500.0), 4.6), (np.inf, 4.3))
TWO_POINT_STEP = 0.30      # pH between the two end points: the free acid doubles
GAP_SHARE, ANYWHERE = 0.08, 1.0 / np.sqrt(12.0)  # of the acid between two points 1 pH apart; found by simulation
CURVATURE_SHARE = 0.75     # of the difference between straight and curved interpolation; found by simulation


@dataclass(frozen=True, slots=True, eq=False)
class Crossing:
    """Acid at which each titration passes a pH; nan where it does not.

    acid : interpolated. [eq per unit of sample]
    slope : change of acid per pH there, positive. [eq per unit of sample and pH]
    u_curve : standard uncertainty that the spacing of the points leaves. [eq per unit of sample]
    step_ph : pH between the two points around it. [-]
    before : index of the point before it; -1 where there is none.
    scatter : scatter of the crossing over that of one reading, both points around it having part in it. [-]
    """

    acid: Array
    slope: Array
    u_curve: Array
    step_ph: Array
    before: NDArray[np.intp]
    scatter: Array


def crossing(acid: Array, ph: Array, at_ph: Array | float) -> Crossing:
    """First crossing of `at_ph` from above, interpolated by a monotone cubic through the four points around it.

    Where the neighbors do not fall evenly, or there are none, the line between the two points counts.
    Source of the interpolation: Fritsch & Carlson 1980, SIAM J. Numer. Anal. 17:238 (harmonic mean slopes).
    """
    n, m = ph.shape
    target = np.broadcast_to(np.asarray(at_ph, dtype=float), (n,))[:, None]
    with np.errstate(invalid="ignore"):
        passed = ph <= target
        is_there = passed.any(axis=1) & (ph[:, 0] >= target[:, 0])
    after = np.where(is_there, passed.argmax(axis=1), 0)
    i = np.maximum(after - 1, 0)

    def point(k: NDArray, of: Array) -> Array:
        inside = (k >= 0) & (k < m)
        return np.where(inside, of[np.arange(n), np.clip(k, 0, m - 1)], np.nan)

    x0, x1, x2, x3 = (point(i + j, acid) for j in (-1, 0, 1, 2))
    p0, p1, p2, p3 = (point(i + j, ph) for j in (-1, 0, 1, 2))
    x2, p2 = np.where(after == 0, x1, x2), np.where(after == 0, p1, p2)
    with np.errstate(invalid="ignore", divide="ignore"):
        width = p1 - p2
        share = np.where(width > 0.0, (p1 - target[:, 0]) / width, 0.0)
        straight = x1 + share * (x2 - x1)
        middle = (x2 - x1) / width
        slope1 = _end_slope(middle, (x1 - x0) / (p0 - p1), width, p0 - p1)
        slope2 = _end_slope(middle, (x3 - x2) / (p2 - p3), width, p2 - p3)
        curved = _hermite(share, x1, x2, slope1 * width, slope2 * width)
        curved = np.where(np.isfinite(curved), curved, straight)
        slope = np.where(width > 0.0, middle, np.nan)
    known = is_there & (width >= 0.0)
    return Crossing(
        acid=np.where(known, curved, np.nan), slope=np.where(known, np.nan_to_num(slope), np.nan),
        u_curve=np.where(known, np.fmax(CURVATURE_SHARE * np.abs(curved - straight), _gap_u(width, x2 - x1)), np.nan),
        step_ph=np.where(known, width, np.nan), before=np.where(known & (after > 0), i, np.where(known, 0, -1)),
        scatter=np.where(known, np.hypot(share, 1.0 - share), np.nan))


def _gap_u(step_ph: Array, width: Array) -> Array:
    """What a wide gap leaves open whatever is drawn through it: up to evenly likely anywhere between the two points.

    The acid past an end point doubles in 0.3 pH, so that a curve departs from any smooth one by the square of the gap.
    """
    with np.errstate(invalid="ignore"):
        return np.minimum(GAP_SHARE * step_ph**2, ANYWHERE) * np.abs(width)


def _end_slope(inner: Array, outer: Array, inner_width: Array, outer_width: Array) -> Array:
    """Slope at a point between two intervals: weighted harmonic mean, which keeps the curve monotone."""
    a, b = 2.0 * outer_width + inner_width, outer_width + 2.0 * inner_width
    both = (inner > 0.0) & (outer > 0.0) & (outer_width > 0.0)
    mean = (a + b) / (b / np.where(both, outer, 1.0) + a / np.where(both, inner, 1.0))
    return np.where(both, mean, np.where(np.isfinite(outer), 0.0, inner))


def _hermite(t: Array, y0: Array, y1: Array, d0: Array, d1: Array) -> Array:
    """Cubic between y0 and y1 with end slopes d0 and d1 per unit of t."""
    return ((1.0 + 2.0 * t) * (1.0 - t) ** 2 * y0 + t * (1.0 - t) ** 2 * d0
            + t * t * (3.0 - 2.0 * t) * y1 + t * t * (t - 1.0) * d1)


def end_point_for(alkalinity_mg_l: Array) -> Array:
    """End point pH suited to an alkalinity [mg/L as CaCO3]: 4.9, 4.6 or 4.3; nan where it is not known."""
    out = np.full(np.shape(alkalinity_mg_l), np.nan)
    for upper, ph in reversed(LEVELS):
        out = np.where(alkalinity_mg_l <= upper, ph, out)
    return out


def alkalinity_two_points(first: Array, second: Array) -> Array:
    """Low-alkalinity form 2B - C from acid to the first end point and to 0.30 pH below it. [eq per unit of sample]

    The free acid doubles in 0.30 pH, so what lies past the equivalence point at the first is the difference of the two.
    For less than 400 µeq/L (20 mg/L as CaCO3). Source: standard methods for water (recalled); the second end point
    0.3 below the first: US EPA Region 9 procedure 560.
    """
    return 2.0 * first - second


def left_at(ph: float | Array, k1: Array, h_per_activity: Array) -> Array:
    """Share of carbon that is still bicarbonate at a meter pH. [-]"""
    return k1 / (k1 + 10.0 ** -np.asarray(ph) * h_per_activity)

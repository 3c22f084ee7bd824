"""From electrode potentials to pH: by standards, or by the titration's own acid end."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10
from aquabuf.chem.properties import FARADAY, GAS_CONSTANT, kelvin

__all__ = ["Calibration", "by_standards", "nernst_mv_per_ph", "zero_potential_of_acid"]

Array = NDArray[np.float64]

STANDARDS = (1, 2, 3)
ZERO_ROUNDS = 30
SETTLED_MV = 1e-7
FEWEST_ACID_POINTS = 3
GLASS_ZERO_PH = 7.0    # where an ordinary glass electrode reads 0 mV; only to start from
ACID_PH = (2.7, 4.3)   # points that tell the zero potential


@dataclass(frozen=True, slots=True, eq=False)
class Calibration:
    """pH = (zero - potential) / slope. Per titration; nan where not known.

    zero_mv : potential at pH 0. [mV]
    slope_mv : fall of potential per pH. [mV]
    efficiency : slope over the one of theory; not above zero where the standards make no electrode. [-]
    standards : number of standards used; 0 where the titration itself gave the zero potential.
    """

    zero_mv: Array
    slope_mv: Array
    efficiency: Array
    standards: NDArray[np.intp]

    def ph(self, potential_mv: Array) -> Array:
        """pH at each point."""
        return (self.zero_mv[:, None] - potential_mv) / self.slope_mv[:, None]


def nernst_mv_per_ph(t_c: Array) -> Array:
    """Slope of an ideal glass electrode, ln10 R T / F. [mV per pH]"""
    return 1e3 * LN10 * GAS_CONSTANT * kelvin(t_c) / FARADAY


def by_standards(values: Mapping[str, Array], t_c: Array, slope_over_theory: Array | float = 1.0) -> Calibration:
    """Calibration from the standards given: more than one give a least-squares line, fewer keep the slope of theory.

    `slope_over_theory` takes another slope in place of that of theory.
    """
    n = t_c.size

    def column(name: str) -> Array:
        return values.get(name, np.full(n, np.nan))

    ph = np.stack([column(f"standard_{k}_ph") for k in STANDARDS], axis=1)
    mv = np.stack([column(f"standard_{k}_mv") for k in STANDARDS], axis=1)
    known = np.isfinite(ph) & np.isfinite(mv)
    count = known.sum(axis=1)
    theory = nernst_mv_per_ph(t_c) * slope_over_theory
    safe = np.maximum(count, 1)
    x, y = np.where(known, ph, 0.0), np.where(known, mv, 0.0)
    mean_x, mean_y = x.sum(axis=1) / safe, y.sum(axis=1) / safe
    spread = (np.where(known, ph - mean_x[:, None], 0.0) ** 2).sum(axis=1)
    product = (np.where(known, (ph - mean_x[:, None]) * (mv - mean_y[:, None]), 0.0)).sum(axis=1)
    with np.errstate(invalid="ignore", divide="ignore"):
        read = np.where(spread > 0.0, -product / spread, theory)
    slope = np.where(read > 0.0, read, np.nan)  # a rising potential with pH is no glass electrode
    zero = np.where(count > 0, mean_y + slope * mean_x, np.nan)
    return Calibration(zero, np.where(count > 0, slope, theory), read / theory, count.astype(np.intp))


def zero_potential_of_acid(potential_mv: Array, acid: Array, dilution: Array, activity_per_acid: Array, slope_mv: Array,
                           ) -> Array:
    """Zero potential from the points past the end point, by the first Gran function of the potential. [mV]

    (V0 + V)/V0 10^(E/S) is proportional to the free acid whatever the zero potential; the line's slope against the acid
    added gives it, once the strength of the acid is taken as right. `activity_per_acid` is meter activity of H+ per
    free acid in the mixture (titrations times points). Source of the function: Gran 1952.
    """
    zero, settled = np.full(len(acid), GLASS_ZERO_PH) * slope_mv, np.zeros(len(acid), dtype=bool)
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        for _ in range(ZERO_ROUNDS):
            ph = (zero[:, None] - potential_mv) / slope_mv[:, None]
            use = (ph >= ACID_PH[0]) & (ph <= ACID_PH[1])
            enough = use.sum(axis=1) >= FEWEST_ACID_POINTS
            use = np.where(enough[:, None], use, _last_points(potential_mv))
            free = np.where(use, np.exp(-LN10 * ph) / dilution / activity_per_acid, 0.0)
            x = np.where(use, acid, 0.0)
            k = np.maximum(use.sum(axis=1), 1)
            mean_x, mean_f = x.sum(axis=1) / k, free.sum(axis=1) / k
            off = np.where(use, acid - mean_x[:, None], 0.0)
            gain = (off * np.where(use, free - mean_f[:, None], 0.0)).sum(axis=1) / (off**2).sum(axis=1)
            step = slope_mv * np.log10(gain)
            zero = np.where(settled, zero, np.where(np.isfinite(step), zero + step, np.nan))
            settled |= ~(np.abs(step) > SETTLED_MV)
            if settled.all():
                break
    return zero


def _last_points(potential_mv: Array) -> NDArray[np.bool_]:
    """The last few points of each titration."""
    there = np.isfinite(potential_mv)
    from_end = np.cumsum(there[:, ::-1], axis=1)[:, ::-1]
    return there & (from_end <= FEWEST_ACID_POINTS)

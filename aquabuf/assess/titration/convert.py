"""From one definition of alkalinity to another; done only where it is asked for by name."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.titration.options import ALWAYS_END_POINT
from aquabuf.assess.titration.solve import Solved, value_of
from aquabuf.chem.organic import organic_anion_oliver

__all__ = ["converted", "fixed_to_proton_balance", "henriksen_1982"]

Array = NDArray[np.float64]

HENRIKSEN_FREE_ACID_UEQ = 31.6   # 10^-4.5
HENRIKSEN_FACTOR = 0.646         # sqrt(µeq/L)
OLIVER_LEAST_PH = 3.0            # range of the organic anion relation


def henriksen_1982(alkalinity_4_5_ueq_l: ArrayLike) -> NDArray[np.float64]:
    """Alkalinity at the equivalence point from the one titrated to pH 4.5, Scandinavian convention. [µeq/L]

    (A - 31.6) + 0.646 sqrt(A - 31.6); nan below 31.6. Source: Henriksen 1982 (recalled). 0.646 squared is K1 in
    µeq/L: the convention adds the free H+ at the equivalence point and drops the bicarbonate left, so that it lies
    3 to 9 µeq/L above the proton balance from 30 to 1,000 µeq/L, and below it beyond about 2,000.
    """
    rest = np.asarray(alkalinity_4_5_ueq_l, dtype=float) - HENRIKSEN_FREE_ACID_UEQ
    return np.where(rest >= 0.0, rest + HENRIKSEN_FACTOR * np.sqrt(np.maximum(rest, 0.0)), np.nan)


def fixed_to_proton_balance(s: Solved) -> Array:
    """Alkalinity from the acid to pH 4.5 by the whole proton balance there. [eq per unit of sample]

    A = x + C nu(h) + weak acids - free acid over dilution, with the carbon of the fit, else that at the start.
    """
    found = s.crossings[ALWAYS_END_POINT]
    rows, at = np.arange(s.curves.count.size), np.maximum(found.before, 0)
    ph = np.full(s.ph.shape, ALWAYS_END_POINT)
    per_carbon, rest, _, _ = s.points.terms(s.points.h(ph))
    carbon = np.where(np.isfinite(s.fit.fit.carbon), s.fit.fit.carbon, s.carbon_at_start)
    return found.acid + carbon * per_carbon[rows, at] + rest[rows, at]


def converted(s: Solved, name: str, value: Array) -> Array:
    """The result by another definition, one of CONVERSIONS; nan where it cannot be told. [eq per unit of sample]

    `value` is the recommended result, which charge-balance ANC starts from.
    """
    n = s.curves.count.size
    if name == "proton_balance":
        return fixed_to_proton_balance(s)
    if name == "henriksen_1982":
        return np.where(s.curves.by_mass, np.nan, henriksen_1982(s.crossings[ALWAYS_END_POINT].acid * 1e6) * 1e-6)
    if name == "charge_balance":
        last = s.ph[np.arange(n), np.maximum(s.gran.last, 0)]
        ph = np.where(s.gran.last >= 0, np.maximum(last, OLIVER_LEAST_PH), np.nan)
        return value + organic_anion_oliver(value_of(s.samples, "doc_mg_l", n), ph)
    return np.full(n, np.nan)

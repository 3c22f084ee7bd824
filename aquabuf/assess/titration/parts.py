"""What alkalinity and acidity are made of."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.titration.solve import Solved, value_of
from aquabuf.engine.balance import fractions

__all__ = ["PARTITION_PH", "calculated_acidity", "co2_acidity", "hydrolyzing_metals", "partition", "partition_of",
           "species"]

Array = NDArray[np.float64]

PARTITION_PH = 8.3        # phenolphthalein
PARTITION_TO_PH = 9.2     # bicarbonate and carbonate alone; US Geological Survey field manual
OTHER_SHARE = 0.02        # of the alkalinity that other bases may be; common practice, no source
METAL_ACIDITY = {"iron_2_mol_l": 2.0, "iron_3_mol_l": 3.0, "aluminum_mol_l": 3.0, "manganese_mol_l": 2.0}


def partition(phenolphthalein: ArrayLike, total: ArrayLike) -> tuple[Array, Array, Array]:
    """Hydroxide, carbonate and bicarbonate from alkalinity to pH 8.3 and total alkalinity, all in one unit of charge.

    P = 0: all bicarbonate. P up to T/2: carbonate 2P, bicarbonate T - 2P. Beyond: hydroxide 2P - T, carbonate 2(T - P).
    nan where P or T is negative or P exceeds T. Source: standard methods for water, as printed in test-kit handbooks.
    """
    p, t = (np.asarray(v, dtype=float) for v in (phenolphthalein, total))
    with np.errstate(invalid="ignore"):
        able = (p >= 0.0) & (p <= t)
    hydroxide = np.maximum(2.0 * p - t, 0.0)
    carbonate = np.minimum(2.0 * p, 2.0 * (t - p))
    bicarbonate = np.maximum(t - 2.0 * p, 0.0)
    return tuple(np.where(able, v, np.nan) for v in (hydroxide, carbonate, bicarbonate))  # type: ignore[return-value]


def partition_of(s: Solved, total: Array) -> tuple[tuple[Array, Array, Array], NDArray[np.object_]]:
    """The partition of each sample, and "yes" or the reason why the rule does not hold."""
    start = s.ph[:, 0]
    passed = -s.acidity[PARTITION_PH].value
    with np.errstate(invalid="ignore"):
        from_sample = np.where(s.curves.added[:, 0] == 0.0, 0.0, np.nan)  # a later reading is not the sample's own pH
        phenolphthalein = np.where(start <= PARTITION_PH, from_sample, passed)
        parts = partition(phenolphthalein, np.where(s.curves.is_base, np.nan, total))
        hydroxide, carbonate, bicarbonate = species(s, total)
        others = np.abs(total - hydroxide - carbonate - bicarbonate) > OTHER_SHARE * np.abs(total)
        holds = np.full(total.size, "yes", dtype=object)
        holds[others] = f"other bases or acids hold more than {OTHER_SHARE:.0%} of it"
        holds[start > PARTITION_TO_PH] = f"the first pH is above {PARTITION_TO_PH:g}"
    holds[np.isnan(parts[0])] = "no total alkalinity above zero, or no reading before the first acid"
    return parts, holds


def species(s: Solved, total: Array) -> tuple[Array, Array, Array]:
    """Hydroxide, carbonate and bicarbonate at the first pH, by speciation with the result. [eq per unit of sample]"""
    p = s.points
    first = np.where(np.isfinite(s.ph[:, :1]), s.ph[:, :1], 7.0)
    h = p.h(first)
    per_carbon, rest, _, _ = (v[:, 0] for v in p.take(np.arange(total.size)).terms(np.broadcast_to(h, s.ph.shape)))
    h0, k1, k2 = h[:, 0], p.k1[:, 0], p.k2[:, 0]
    with np.errstate(invalid="ignore", divide="ignore"):
        carbon = np.maximum((total - p.acid[:, 0] - rest) / per_carbon, 0.0)
        alpha = fractions((k1, k2), 1.0 / h0)
        found = p.c_oh[:, 0] / h0 / p.dilution[:, 0], 2.0 * carbon * alpha[2], carbon * alpha[1]
    able = np.isfinite(s.ph[:, 0]) & np.isfinite(total)
    return tuple(np.where(able, v, np.nan) for v in found)  # type: ignore[return-value]


def co2_acidity(s: Solved) -> Array:
    """Free CO2 by base to pH 8.3, less what was needed to pH 4.5 from below and the free acid left there.

    Of a water that starts above pH 4.5, less the free acid at its start. [mol per unit of sample]
    """
    to_8_3, to_4_5 = s.acidity[8.3].value, s.acidity[4.5].value
    rows = np.arange(to_8_3.size)
    with np.errstate(invalid="ignore"):
        at = (s.ph >= 4.5).argmax(axis=1)
    start = np.maximum(np.where(np.isfinite(s.ph[:, :1]), s.ph[:, :1], 7.0), 4.5)
    free = s.points.c_h * s.points.h(start) / s.points.dilution
    return np.where(s.curves.is_base, to_8_3 - np.nan_to_num(to_4_5) - free[rows, at], np.nan)


def hydrolyzing_metals(samples: Mapping[str, NDArray], size: int) -> Array:
    """Acid that iron(III) and aluminum can give off or bind along a Gran line: three per mole. [eq/L]"""
    return 3.0 * sum((np.nan_to_num(value_of(samples, name, size)) for name in ("iron_3_mol_l", "aluminum_mol_l")),
                     start=np.zeros(size))


def calculated_acidity(samples: Mapping[str, NDArray], ph: Array) -> Array:
    """Acidity that metals give once oxidized and hydrolyzed: 2 Fe(II) + 3 Fe(III) + 3 Al + 2 Mn + 10^-pH. [eq/L]

    nan where no metal was measured. Source: Kirby & Cravotta 2005, Appl. Geochem. (form as printed in their abstract,
    journal recalled); it counts Fe(III) and Al a little too high and bisulfate too low, which roughly cancel.
    """
    metals = {name: value_of(samples, name, ph.size) for name in METAL_ACIDITY}
    measured = np.any([np.isfinite(v) for v in metals.values()], axis=0)
    total = sum((METAL_ACIDITY[name] * np.nan_to_num(v) for name, v in metals.items()), start=np.zeros(ph.size))
    return np.where(measured, total + 10.0**-ph, np.nan)

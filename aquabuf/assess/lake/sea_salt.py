"""What of each ion did not come from the sea.

One ion is taken to come from the sea alone, the tracer, and the others came along with it as in sea water. A result
below zero stays below zero: it says that the tracer had another source too (road salt, rock, sewage), that an ion was
held back on its way, or that a reading is wrong.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from aquabuf.chem.seasalt import equivalents_per_chloride, equivalents_per_sodium
from aquabuf.errors import InputError

__all__ = ["NO_TRACER", "TRACERS", "NonMarine", "negative_words", "non_marine", "sulfate_of_sea_salt"]

Array = NDArray[np.float64]

# The tracers, and where the ratios of sea water to each are
TRACERS: Mapping[str, Callable[[], Mapping[str, float]]] = MappingProxyType(
    {"chloride": equivalents_per_chloride, "sodium": equivalents_per_sodium})
NO_TRACER = "none"    # sea salt is left in
ROUNDING = 1e-9       # share of the sea-salt part below which a negative rest is rounding, not a finding


@dataclass(frozen=True, slots=True, eq=False)
class NonMarine:
    """The non-marine part of each ion by name. [eq/L]

    negative : of the ions that have a ratio, where that part is below zero beyond rounding; a mask per ion.
    """

    tracer: str
    eq_l: Mapping[str, Array]
    negative: Mapping[str, NDArray[np.bool_]]


def non_marine(charges: Mapping[str, Array], tracer: str = "chloride") -> NonMarine:
    """Take the sea salt off each ion.

    charges : charge of each ion by name of the ion table, always positive; arrays that broadcast. [eq/L]
    tracer : "chloride", "sodium" or "none".

    X* = X - (X / tracer in sea water) tracer; of the tracer itself nothing is left. Ions that sea water brings next to
    nothing of (nitrate, ammonium) stay as they are. Raises InputError for an unknown tracer or one that is not there.
    """
    ratios = _ratios(tracer)
    if tracer != NO_TRACER and tracer not in charges:
        raise InputError(f"sea salt by {tracer} needs the charge of {tracer}; found {', '.join(charges) or 'no ion'}. "
                         f"Add it, or choose {NO_TRACER}.")
    left, negative = {}, {}
    for ion, measured in charges.items():
        if ion not in ratios:
            left[ion] = measured
            continue
        marine = ratios[ion] * charges[tracer]
        left[ion] = measured - marine
        negative[ion] = left[ion] < -ROUNDING * np.abs(marine)
    return NonMarine(tracer, left, negative)


def _ratios(tracer: str) -> Mapping[str, float]:
    if tracer == NO_TRACER:
        return {}
    if tracer not in TRACERS:
        raise InputError(f"the tracer of sea salt must be one of {', '.join((*TRACERS, NO_TRACER))}; found {tracer!r}. "
                         f"Correct it.")
    return {**TRACERS[tracer](), tracer: 1.0}


def sulfate_of_sea_salt(tracer_amount: Array, tracer: str = "chloride") -> Array:
    """Sulfate that came with an amount of the tracer, in the same unit; none without a tracer. [eq/L, eq/m2/yr ...]"""
    return _ratios(tracer).get("sulfate", 0.0) * np.asarray(tracer_amount, dtype=float)


def negative_words(of: NonMarine) -> NDArray[np.object_]:
    """For each lake the ions below zero, such as "magnesium; sulfate"; arrays of shape (lakes,) or (lakes, 1)."""
    masks = {ion: mask.reshape(-1) for ion, mask in of.negative.items()}
    found = np.full(len(next(iter(masks.values()), ())), "", dtype=object)
    for ion, mask in masks.items():
        found[mask] += np.where(found[mask] == "", ion, f"; {ion}")
    return found

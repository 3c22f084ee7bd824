"""What the carbonate picture of a natural water leaves out: organic acids and aluminum, estimated to warn by."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.sample.inputs import Values, reading
from aquabuf.chem.organic import OLIVER_SITES_EQ_PER_MG, organic_anion_oliver

__all__ = ["ALUMINUM_ACTS_BELOW", "charge_allowance", "demand", "titrated_organic"]

Array = NDArray[np.float64]

TITRATION_END_PH = 4.0   # about where a Gran titration stops reaching weak acids; common practice
ALUMINUM_CHARGE = 3.0    # upper bound per mole in acid water (Al+++)
ALUMINUM_ACTS_BELOW = 5.5  # pH; it buffers between 4.5 and 5.5: Driscoll & Bisogni 1983


def _get(values: Values, name: str) -> Array:
    return np.nan_to_num(reading(values, name))


def titrated_organic(values: Values, ph: Array) -> Array:
    """Organic charge that a titration from `ph` counts as alkalinity. [eq/L]"""
    doc = _get(values, "doc_mg_l")
    return np.maximum(organic_anion_oliver(doc, ph) - organic_anion_oliver(doc, TITRATION_END_PH), 0.0)


def charge_allowance(values: Values) -> Array:
    """Most charge that organic acids and aluminum can carry. [eq/L]"""
    return (OLIVER_SITES_EQ_PER_MG * _get(values, "doc_mg_l")
            + ALUMINUM_CHARGE * _get(values, "aluminum_mol_l"))


def demand(values: Values, ph: Array, to_ph: float) -> Array:
    """Acid or base that organic acids and aluminum take between two pH values. [eq/L]"""
    doc = _get(values, "doc_mg_l")
    aluminum = np.where(ph < ALUMINUM_ACTS_BELOW, ALUMINUM_CHARGE * _get(values, "aluminum_mol_l"), 0.0)
    return np.abs(organic_anion_oliver(doc, to_ph) - organic_anion_oliver(doc, ph)) + aluminum

"""Words and checks that the steps share: rows of a setting, figures in sentences, findings that hold."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.steps.base import Finding
from aquabuf.assess.plant.stream import ALKALINITY
from aquabuf.chem.products import molar_mass
from aquabuf.errors import InputError
from aquabuf.units import to_house

__all__ = ["as_caco3", "as_rows_of", "brief", "holding", "mg_l", "span"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

CACO3 = "mg/L as CaCO3"


def as_rows_of(value: ArrayLike, rows: int, subject: str, low: float = 0.0, high: float = np.inf) -> Array:
    """A setting as one number per row. Raises InputError where it does not fit the rows or leaves `low` to `high`."""
    try:
        out = np.broadcast_to(np.asarray(value, dtype=float), (rows,))
    except (TypeError, ValueError):
        raise InputError(f"{subject} must be one number or one per row of water ({rows}); found {value!r}. "
                         "Give one value, or a list as long as the readings.") from None
    bad = (out < low) | (out > high)
    if bad.any():
        limits = f"at least {low:g}" if high == np.inf else f"{low:g} to {high:g}"
        raise InputError(f"{subject} must be {limits}; found {out[bad][0]:g} in {int(bad.sum())} of {rows} rows. "
                         "Correct it.")
    return out


def as_caco3(eq_l: ArrayLike) -> Array:
    """Alkalinity as people read it. [mg/L as CaCO3]"""
    return np.asarray(to_house(np.asarray(eq_l, dtype=float), CACO3, ALKALINITY, back=True))


def mg_l(mol_l: ArrayLike, formula: str) -> Array:
    """Mass concentration of a substance by its formula. [mg/L]"""
    return 1e3 * molar_mass(formula) * np.asarray(mol_l, dtype=float)


def span(values: ArrayLike, where: Mask, digits: int = 1) -> str:
    """The values of some rows in words: one number, or the lowest and the highest."""
    some = np.broadcast_to(np.asarray(values, dtype=float), where.shape)[where]
    some = some[np.isfinite(some)]
    if not some.size:
        return "unknown"
    low, high = (f"{v + 0.0:.{digits}f}" for v in (some.min(), some.max()))
    return low if low == high else f"{low} to {high}"


def brief(value: float, figures: int = 3, sign: str = "") -> str:
    """A number in a sentence: so many figures, no zeros behind them; all of a whole number with more. `sign` : "+"."""
    whole = abs(value) >= 10.0**figures - 0.5
    return f"{value:{sign},.0f}" if whole else f"{value:{sign}.{figures}g}"


def holding(*findings: Finding) -> tuple[Finding, ...]:
    """Those findings that hold in a row at least."""
    return tuple(f for f in findings if f.where.any())

"""Small functions for arrays whose rows do not see each other."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["LN10", "as_rows", "common_shape", "exp10", "worded"]


LN10 = float(np.log(10.0))


def exp10(x: ArrayLike) -> NDArray[np.float64]:
    """Ten to the power of `x`; several times faster than the general power, and as exact."""
    return np.exp(LN10 * np.asarray(x, dtype=float))


def common_shape(*values: ArrayLike) -> tuple[int, ...]:
    """Shape to which all `values` broadcast; a ValueError of numpy's where they do not."""
    return np.broadcast_shapes(*(np.shape(v) for v in values))


def as_rows(value: ArrayLike, shape: tuple[int, ...]) -> NDArray[np.float64]:
    """`value` as a float array of `shape`, read-only when it was stretched."""
    return np.broadcast_to(np.asarray(value, dtype=float), shape)


def worded(rows: int, *cases: tuple[NDArray[np.bool_], str], default: str = "") -> NDArray[np.object_]:
    """Words per row: `default`, overwritten by each case in turn where its mask holds."""
    out = np.full(rows, default, dtype=object)
    for mask, words in cases:
        out[mask] = words
    return out

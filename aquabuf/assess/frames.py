"""Tables from arrays."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

__all__ = ["LongRows", "frame_of"]


def frame_of(columns: Mapping[str, NDArray]) -> pd.DataFrame:
    """Table of columns; text stays plain objects, which pandas would otherwise inspect cell by cell."""
    return pd.DataFrame({name: pd.Series(v, dtype=object, copy=False) if v.dtype.kind in "UO" else v
                         for name, v in columns.items()}, copy=False)


class LongRows:
    """Rows of a long table: one for each sample where a mask holds, sample by sample, masks in their order.

    sample, which : number of the sample and of the mask of each row.
    """

    def __init__(self, masks: Sequence[NDArray[np.bool_]]):
        self._at = [np.flatnonzero(mask) for mask in masks] or [np.zeros(0, dtype=np.intp)]
        sample = np.concatenate(self._at)
        which = np.repeat(np.arange(len(self._at)), [at.size for at in self._at])
        self._order = np.argsort(sample, kind="stable")  # the masks come in order, so a stable sort keeps it
        self.sample, self.which = sample[self._order], which[self._order]

    def pick(self, columns: Sequence[NDArray]) -> NDArray:
        """Values of the rows from one array over all samples per mask."""
        if not columns:
            return np.zeros(0)
        return np.concatenate([column[at] for column, at in zip(columns, self._at, strict=True)])[self._order]

    def of_mask(self, values: Sequence[object]) -> NDArray:
        """Values of the rows from one value per mask."""
        out = np.empty(max(len(values), 1), dtype=object)
        out[:len(values)] = values
        return out[self.which]

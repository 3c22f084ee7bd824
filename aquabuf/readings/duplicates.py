"""Names seen so far, in 16 bytes each, so that a long file can be read in pieces."""

from __future__ import annotations

import numpy as np
import pandas as pd

__all__ = ["DUPLICATE_RULE", "SeenNames", "duplicate_rows", "hashes_of"]

DUPLICATE_RULE = "sample_id is already used in row"


def duplicate_rows(rejected: pd.DataFrame) -> int:
    """How many of the refused rows were refused for a name used before."""
    return int(rejected["rule"].astype(str).str.startswith(DUPLICATE_RULE).sum())


def hashes_of(names: list[str]) -> np.ndarray:
    """64-bit hash of each name, the same in every run."""
    return pd.util.hash_array(np.asarray(names, dtype=object), categorize=False)


class SeenNames:
    """Names already taken and the row that took each.

    Names are kept as 64-bit hashes (the same in every run): in a file of a million rows the chance that two different
    names are taken for one is about 3e-8.
    """

    def __init__(self):
        self._hashes = np.empty(0, dtype=np.uint64)  # sorted
        self._rows = np.empty(0, dtype=np.int64)

    def first_rows(self, names: list[str], rows: np.ndarray) -> np.ndarray:
        """Row that had each name first, 0 for a new name; new names are remembered. One per name."""
        hashes = hashes_of(names)
        first = self._before(hashes)
        unique, position, back = np.unique(hashes, return_index=True, return_inverse=True)
        same = position[back]  # earliest position in this piece with the same name
        first = np.where((first == 0) & (same < np.arange(len(names))), rows[same], first)
        new = self._before(unique) == 0
        self._add(unique[new], rows[position[new]])
        return first

    def rows_of(self, names: list[str]) -> np.ndarray:
        """Row that had each name first, 0 for a name that is not known; nothing is remembered."""
        return self._before(hashes_of(names))

    def _before(self, hashes: np.ndarray) -> np.ndarray:
        at = np.searchsorted(self._hashes, hashes)
        inside = np.minimum(at, max(len(self._hashes) - 1, 0))
        if not len(self._hashes):
            return np.zeros(len(hashes), dtype=np.int64)
        return np.where(self._hashes[inside] == hashes, self._rows[inside], 0)

    def _add(self, hashes: np.ndarray, rows: np.ndarray) -> None:
        at = np.searchsorted(self._hashes, hashes)
        self._hashes = np.insert(self._hashes, at, hashes)
        self._rows = np.insert(self._rows, at, rows)

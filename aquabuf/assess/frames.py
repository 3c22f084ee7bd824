"""Tables from arrays."""

from __future__ import annotations

from collections.abc import Mapping

import pandas as pd
from numpy.typing import NDArray

__all__ = ["frame_of"]


def frame_of(columns: Mapping[str, NDArray]) -> pd.DataFrame:
    """Table of columns; text stays plain objects, which pandas would otherwise inspect cell by cell."""
    return pd.DataFrame({name: pd.Series(v, dtype=object) if v.dtype.kind in "UO" else v
                         for name, v in columns.items()}, copy=False)

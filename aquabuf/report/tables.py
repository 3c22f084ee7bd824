"""Result tables as CSV text: rounded to what the figures can carry, the same bytes for the same input."""

from __future__ import annotations

from collections.abc import Mapping
from typing import IO

import numpy as np
import pandas as pd

from aquabuf.assess.options import Options
from aquabuf.assess.sample.columns import result_columns
from aquabuf.report.files import OutputFolder

__all__ = ["GrowingTables", "csv_text", "result_digits", "rounded"]

TINY = 1e-250     # smaller is nothing, and its power of ten would overflow
OTHER_DIGITS = 6  # significant digits of numbers without a stated number of decimals


class GrowingTables:
    """CSV tables of a run that are written piece by piece, each with its header before the first.

    `digits` are the decimals of the columns of a table, by the name of its file.
    """

    def __init__(self, out: OutputFolder, digits: Mapping[str, Mapping[str, int]]):
        self._out, self._digits = out, digits
        self._open: dict[str, IO[str]] = {}

    def __enter__(self) -> GrowingTables:
        return self

    def __exit__(self, *_: object) -> None:
        for stream in self._open.values():
            stream.close()

    def add(self, name: str, table: pd.DataFrame) -> None:
        """Append rows to the table `name`."""
        first = name not in self._open
        if first:
            self._open[name] = self._out.part(name).open("w", encoding="utf-8", newline="")
        self._open[name].write(csv_text(rounded(table, self._digits.get(name, {})), header=first))


def result_digits(options: Options) -> dict[str, int]:
    """Decimals of each column of results.csv, interval ends included."""
    digits = {}
    for column in result_columns(options):
        if column.digits is not None:
            for name in (column.name, f"{column.name}_low", f"{column.name}_high"):
                digits[name] = column.digits
    return digits


def rounded(table: pd.DataFrame, digits: Mapping[str, int]) -> pd.DataFrame:
    """Numbers rounded by column; others to OTHER_DIGITS significant digits. Integers and text are untouched."""
    out = {}
    for name in table.columns:
        column = table[name]
        if column.dtype.kind == "f":
            v = column.to_numpy()
            v = np.round(v, digits[name]) if name in digits else _significant(v)
            column = pd.Series(v + 0.0, index=table.index)  # no negative zero
        out[name] = column
    return pd.DataFrame(out, index=table.index)


def _significant(v: np.ndarray) -> np.ndarray:
    usable = np.isfinite(v) & (np.abs(v) > TINY)
    power = np.floor(np.log10(np.where(usable, np.abs(v), 1.0)))
    scale = 10.0 ** (OTHER_DIGITS - 1 - power)
    return np.where(usable, np.round(v * scale) / scale, np.where(np.isfinite(v), 0.0, v))


def csv_text(table: pd.DataFrame, *, header: bool) -> str:
    """CSV with \\n line ends and empty cells for what is missing."""
    return table.to_csv(index=False, header=header, lineterminator="\n")

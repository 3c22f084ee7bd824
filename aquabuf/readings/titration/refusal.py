"""Why a sample cannot be used, and how columns and values are named in such a line."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import NamedTuple

import numpy as np
import pandas as pd

from aquabuf.readings.headers import Column
from aquabuf.readings.table import Table
from aquabuf.readings.titration.result import TITRATION_REJECTED_COLUMNS, sorted_lines

__all__ = ["Labels", "Refusal", "refused_by", "rejected_lines"]


class Refusal(NamedTuple):
    """One problem of the sample at position `block`, with the fields of its line in `rejected`."""

    block: int
    file: str  # "points" or "samples"
    row: int
    column: str
    value: str
    rule: str
    remedy: str


class Labels:
    """How the columns of one file are written there."""

    def __init__(self, table: Table):
        self.file = table.path.name
        self.fill = table.table_map.fill
        read = [*(column for _, column in table.plan.columns), *(column for column, _ in table.table_map.values)]
        columns = {column.name: column for column in (*(column for column, _ in self.fill), *read)}
        self.columns: Mapping[str, Column] = columns
        per_kg = [column for column in read if column.unit is not None and column.unit.per_kg]
        spreads = {column.quantity.u_name for column in per_kg} - set(columns)  # of readings below detection
        self.per_kg = frozenset(column.name for column in per_kg) | spreads

    def __contains__(self, name: str) -> bool:
        return name in self.columns

    def header(self, name: str) -> str:
        """Header of a column; its canonical name where the file has none."""
        return self.columns[name].header if name in self.columns else name

    def text(self, name: str, value: object) -> str:
        """A house value as the file would write it, to the twelfth figure; words as they are."""
        if isinstance(value, str):
            return value
        column = self.columns.get(name)
        scale, offset = (column.scale, column.offset) if column else (1.0, 0.0)
        return f"{(float(value) - offset) / scale:.12g}"  # type: ignore[arg-type]

    def with_unit(self, name: str, value: object) -> str:
        """A value and its unit, as in "100 mL"."""
        column = self.columns.get(name)
        unit = column.unit_label if column else ""
        return f"{self.text(name, value)} {unit if unit != '-' else ''}".rstrip()


def refused_by(refusals: Iterable[Refusal], count: int) -> np.ndarray:
    """Which of `count` samples have a problem. Boolean."""
    refused = np.zeros(count, dtype=bool)
    refused[[refusal.block for refusal in refusals]] = True
    return refused


def rejected_lines(refusals: Iterable[Refusal], names: Sequence[str]) -> pd.DataFrame:
    """Lines of `rejected`, in the order of the files and their rows."""
    lines = [(r.file, r.row, names[r.block], r.column, r.value, r.rule, r.remedy) for r in refusals]
    return sorted_lines([pd.DataFrame(lines, columns=list(TITRATION_REJECTED_COLUMNS))], TITRATION_REJECTED_COLUMNS)

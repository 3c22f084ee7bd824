"""One piece of a table while it is being read: cells in, house-unit columns out, every problem kept with its row."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from aquabuf.readings.cells import Problem, no_value_words, parse_choice, parse_date, parse_numbers
from aquabuf.readings.headers import Column
from aquabuf.readings.result import BELOW_DETECTION, FLAG_COLUMNS, REJECTED_COLUMNS

__all__ = ["Sheet"]

RECTANGLE_SIGMA = 1.0 / (2.0 * math.sqrt(3.0))  # standard deviation of 0..1, evenly likely
_SLACK = 1e-9  # relative, so that a limit converted from the file's unit still passes
FILLED = "missing, filled from the map file"
_UNREAD_DATE = "date not understood or with two readings (date_order in a map file says which number is the month)"


@dataclass(slots=True)
class Sheet:
    """Columns of one piece of a table; positions count its records from 0."""

    rows: np.ndarray  # line of each record in the file
    decimal: str
    missing: tuple[str | float, ...]
    date_order: str
    ids: list[str] = field(default_factory=list)
    words: dict[str, list[str]] = field(default_factory=dict)
    days: np.ndarray | None = None
    numbers: dict[str, np.ndarray] = field(default_factory=dict)  # house units
    per_kg: list[tuple[Column, Sequence[str]]] = field(default_factory=list)  # columns that wait for a density
    problems: list[tuple[int, str, str, str, str]] = field(default_factory=list)  # at, column, value, rule, remedy
    flagged: list[tuple[np.ndarray, str, list[str], str]] = field(default_factory=list)  # at, column, value, what

    def __len__(self) -> int:
        return len(self.rows)

    def reject(self, header: str, cells: Sequence[str], problems: Iterable[Problem]) -> None:
        """Note that these cells make their rows unusable."""
        self.problems += [(p.at, header, cells[p.at].strip(), p.rule, p.remedy) for p in problems]

    def flag(self, where: np.ndarray, column: str, cells: Sequence[str] | None, what: str) -> None:
        """Note something about cells that are used all the same."""
        at = np.flatnonzero(where) if where.dtype == bool else where
        if len(at):
            self.flagged.append((at, column, [cells[i].strip() if cells else "" for i in at.tolist()], what))

    def plain_words(self, cells: Sequence[str]) -> list[str]:
        """Cells without outer blanks; "" where a word for "no value" stands."""
        absent = no_value_words(self.missing)
        short = max(map(len, absent))
        stripped = [cell.strip() for cell in cells]
        return [cell if len(cell) > short or cell.lower() not in absent else "" for cell in stripped]

    def take_ids(self, columns: Sequence[Sequence[str]], header: str, remedy: str) -> None:
        """The sample_id of each record, composed where it has several parts; `remedy` is for one that has none."""
        parts = [self.plain_words(cells) for cells in columns]
        self.ids = ["_".join(record) if all(record) else "" for record in zip(*parts, strict=True)]
        rule = "each row needs a sample_id"
        self.reject(header, self.ids, [Problem(at, rule, remedy) for at, name in enumerate(self.ids) if not name])

    def take_words(self, column: Column, cells: Sequence[str]) -> None:
        """A column of text, choices or dates."""
        words = self.plain_words(cells)
        if column.quantity.kind == "choice":
            words = self._choices(column, words)
        self.words[column.name] = words
        if column.quantity.kind == "date":
            self._days(column, words)

    def _choices(self, column: Column, words: list[str]) -> list[str]:
        known = {word: parse_choice(word, column.quantity) if word else "" for word in dict.fromkeys(words)}
        allowed = ", ".join(dict.fromkeys(word for _, word in column.quantity.choices))
        bad = [at for at, word in enumerate(words) if known[word] is None]
        self.reject(column.header, words, [Problem(at, f"must be one of {allowed}", "correct the word") for at in bad])
        return [known[word] or "" for word in words]

    def _days(self, column: Column, words: list[str]) -> None:
        known = {word: parse_date(word, self.date_order) for word in dict.fromkeys(words)}
        self.days = np.array([known[word] for word in words], dtype="datetime64[D]")
        unread = np.array([bool(word) and known[word] is None for word in words], dtype=bool)
        self.flag(unread, column.name, words, _UNREAD_DATE)

    def take_numbers(self, column: Column, cells: Sequence[str], density_kg_l: np.ndarray | None = None) -> None:
        """A column of numbers, brought to house units and checked against the hard limits."""
        parsed = parse_numbers(cells, column.quantity, decimal=self.decimal, missing=self.missing)
        self.reject(column.header, cells, parsed.problems)
        values = parsed.values
        if column.negative != "keep":
            below_zero = values < 0
            values[below_zero] = 0.0 if column.negative == "zero" else np.nan
            instead = "set to zero" if column.negative == "zero" else "left out"
            self.flag(below_zero, column.name, cells, f"below zero, {instead}")
        scale = column.scale if density_kg_l is None else column.scale * density_kg_l
        house = values * scale + column.offset
        if parsed.below:
            self._halve(column, cells, house, np.array(parsed.below))
        self._check_limits(column, cells, house)
        kept = self.numbers.get(column.name)  # an uncertainty may be there from a detection limit
        self.numbers[column.name] = house if kept is None else np.where(np.isnan(kept), house, kept)

    def fill(self, column: Column, value: float) -> None:
        """A number, in the unit of the column, for the rows that have none."""
        given = self.numbers.get(column.name, np.full(len(self), np.nan))
        missing = np.isnan(given)
        self.numbers[column.name] = np.where(missing, value * column.scale + column.offset, given)
        self.flag(missing, column.name, None, FILLED)

    def _halve(self, column: Column, cells: Sequence[str], house: np.ndarray, at: np.ndarray) -> None:
        """Below detection: half the limit, with the spread of a value evenly likely from 0 to the limit."""
        limit = house[at].copy()
        house[at] = limit / 2.0
        spread = self.numbers.setdefault(column.quantity.u_name, np.full(len(self), np.nan))
        spread[at] = limit * RECTANGLE_SIGMA
        self.flag(at, column.name, cells, BELOW_DETECTION)

    def _check_limits(self, column: Column, cells: Sequence[str], house: np.ndarray) -> None:
        q = column.quantity
        low, high = (0.0, math.inf) if column.is_u else (q.low, q.high)
        bad = (house < low - _SLACK * abs(low)) | (house > high + _SLACK * abs(high))
        if not bad.any():
            return
        unit = "" if column.unit_label == "-" else f" {column.unit_label}"
        if column.is_u:
            rule = "an uncertainty must be 0 or more"
        else:
            rule = f"must be {column.in_file_unit(low):g} to {column.in_file_unit(high):g}{unit}"
        found = [Problem(at, rule, likely_slip(column, float(house[at]))) for at in np.flatnonzero(bad).tolist()]
        self.reject(column.header, cells, found)

    def usable(self) -> np.ndarray:
        """Which records have no problem. Boolean."""
        good = np.ones(len(self), dtype=bool)
        good[[problem[0] for problem in self.problems]] = False
        return good

    def rejected_frame(self) -> pd.DataFrame:
        """One line per problem, in the order of the file."""
        order = sorted(range(len(self.problems)), key=lambda i: self.problems[i][0])
        lines = [
            (int(self.rows[self.problems[i][0]]), self.ids[self.problems[i][0]], *self.problems[i][1:]) for i in order
        ]
        return pd.DataFrame(lines, columns=list(REJECTED_COLUMNS))

    def flags_frame(self, good: np.ndarray) -> pd.DataFrame:
        """Flags of the usable rows, in the order of the file."""
        parts = []
        for at, column, cells, what in self.flagged:
            keep = good[at]
            at = at[keep]
            cells = [cell for cell, use in zip(cells, keep.tolist(), strict=True) if use]
            ids = [self.ids[i] for i in at.tolist()]
            parts.append(
                pd.DataFrame({"row": self.rows[at], "sample_id": ids, "column": column, "value": cells, "what": what})
            )
        parts = [part for part in parts if len(part)]
        if not parts:
            return pd.DataFrame({name: [] for name in FLAG_COLUMNS}).astype({"row": "int64"})
        return pd.concat(parts, ignore_index=True).sort_values("row", kind="stable", ignore_index=True)


def likely_slip(column: Column, house: float) -> str:
    """Remedy for a value outside the hard limits: the most likely slip of unit or decimal sign."""
    q = column.quantity
    value = column.in_file_unit(house)
    if q.dimension == "temperature" and column.unit_label == "°C" and q.low <= (value - 32.0) / 1.8 <= q.high:
        return f"is it in °F (then {(value - 32.0) / 1.8:.1f} °C)? Then say so in the header; else correct it"
    if q.dimension == "temperature" and column.unit_label == "°C" and q.low <= value - 273.15 <= q.high:
        return f"is it in kelvin (then {value - 273.15:.1f} °C)? Then say so in the header; else correct it"
    for power in (10.0, 100.0, 1000.0):
        if q.dimension in ("ph", "temperature") and q.soft_low <= house / power <= q.soft_high:
            return f"is it {value / power:g}? Check the decimal sign"
    if house < q.low == 0.0:
        below = "write <limit if it was below detection" if q.below_limit else "correct it"
        return f"it cannot be below zero; leave it blank, or {below}"
    return "check the unit in the header and the decimal sign"

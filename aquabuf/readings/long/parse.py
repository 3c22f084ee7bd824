"""The results of a long table as numbers in house units, read as a wide table: a column per quantity and unit."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from aquabuf.readings.headers import Column
from aquabuf.readings.long.resolve import NO_LIMIT, Refusal
from aquabuf.readings.long.scan import NO_TEXT, Line, Scan
from aquabuf.readings.sheet import Sheet

__all__ = ["ESTIMATED", "Numbers", "Task", "parse", "tasks_of"]

ESTIMATED = "between detection and quantification limit, value used as it is"
_BELOW, _ABOVE = "<", ">"  # what a cell of a wide table would begin with
_MARKS = {"below": _BELOW, "estimated": _BELOW, "above": _ABOVE}
Flag = tuple[NDArray[np.intp], str, list[str], str]  # results, column, cells, what


@dataclass(frozen=True, slots=True)
class Task:
    """Results that are read together."""

    column: Column
    mark: str  # put before each cell: "<" where it is a detection limit
    results: NDArray[np.intp]  # positions
    texts: NDArray[np.int32]  # cells, NO_TEXT for none

    def cells(self, scan: Scan) -> list[str]:
        """The cells as a wide table would have them."""
        found = ["" if code == NO_TEXT else scan.texts[code] for code in self.texts.tolist()]
        return [self.mark + cell.lstrip("<≤> ") for cell in found] if self.mark else found


@dataclass(slots=True)
class Numbers:
    """Results as numbers, one entry per result; nan where missing or refused."""

    house: NDArray[np.float64]
    spread: NDArray[np.float64]  # standard uncertainty where a detection limit gives one, else nan
    columns: list[Column]  # read so far
    column: NDArray[np.int32]  # place in `columns`, -1 for a result not read
    bad: NDArray[np.bool_]  # refused
    refused: list[Line] = field(default_factory=list)
    flags: list[Flag] = field(default_factory=list)

    @classmethod
    def empty(cls, size: int) -> Numbers:
        """Nothing read yet."""
        nothing = np.full(size, np.nan)
        return cls(nothing, nothing.copy(), [], np.full(size, -1, dtype=np.int32), np.zeros(size, dtype=bool))


def in_long_table(remedy: str) -> str:
    """The remedy of a wide table in the words of a long one, where the unit stands in a column."""
    return remedy.replace("in the header", "in the column of units")


def shown(scan: Scan, result: int) -> str:
    """What to show of a result that is refused: its value, else its condition."""
    code = int(scan.value[result])
    return scan.kinds[int(scan.kind[result])].condition.strip() if code == NO_TEXT else scan.texts[code]


def _choices(scan: Scan) -> tuple[list[tuple[Column, str] | Refusal], NDArray[np.intp]]:
    """Every way to read a result, and the way of each one."""
    ways: dict[tuple[Column, str] | Refusal, int] = {}

    def place(column: Column | Refusal, mark: str) -> int:
        way = column if isinstance(column, Refusal) else (column, mark)
        return ways.setdefault(way, len(ways))

    marks = [_MARKS.get(meaning.condition, "") for meaning in scan.meanings]
    pairs = list(zip(scan.meanings, marks, strict=True))
    by_value = np.array([place(meaning.value, "") for meaning, _ in pairs], dtype=np.intp)
    by_limit = np.array([place(meaning.limit, mark) for meaning, mark in pairs], dtype=np.intp)
    limited = np.array([bool(mark) for mark in marks], dtype=bool)
    estimated = np.array([meaning.condition == "estimated" for meaning in scan.meanings], dtype=bool)
    above = np.array([mark == _ABOVE for mark in marks], dtype=bool)
    kind, has_value, has_limit = scan.kind, scan.value != NO_TEXT, scan.limit != NO_TEXT
    with_limit = limited[kind] & ~(estimated[kind] & has_value)
    less = np.array([text.startswith(("<", "≤")) for text in scan.texts], dtype=bool)
    is_less = less[scan.value] & has_value if less.size else has_value
    no_limit = with_limit & ~has_limit & ~above[kind]
    way = np.where(with_limit, by_limit[kind], by_value[kind])
    way[no_limit & is_less] = by_value[kind][no_limit & is_less]  # "<0.02" says its limit itself
    way[no_limit & ~is_less] = place(NO_LIMIT, "")
    return list(ways), way


def tasks_of(scan: Scan, numbers: Numbers) -> Iterator[Task]:
    """The results by the way they are read; those that cannot be read are refused in `numbers`."""
    ways, way = _choices(scan)
    order = np.argsort(way, kind="stable")
    starts = np.searchsorted(way[order], np.arange(len(ways) + 1))
    for place, found in enumerate(ways):
        results = order[starts[place] : starts[place + 1]]
        if isinstance(found, Refusal):
            refuse(scan, numbers, results, found)
        elif results.size:
            column, mark = found
            has_limit = (mark != "") & (scan.limit[results] != NO_TEXT)
            texts = np.where(has_limit, scan.limit[results], scan.value[results])
            yield Task(column, mark, results, texts)


def refuse(scan: Scan, numbers: Numbers, results: NDArray[np.intp], why: Refusal) -> None:
    """Note that these results cannot be used."""
    numbers.bad[results] = True
    for at in results.tolist():
        name = scan.kinds[int(scan.kind[at])].characteristic.strip()
        numbers.refused.append((int(scan.line[at]), int(scan.sample[at]), name, shown(scan, at), why.rule, why.remedy))


def parse(task: Task, scan: Scan, numbers: Numbers, density_kg_l: NDArray[np.float64] | None = None) -> None:
    """Read the cells of one task into `numbers`; `density_kg_l` is per sample, for columns per kilogram."""
    column, results = task.column, task.results
    sheet = Sheet(
        rows=scan.line[results],
        decimal=scan.plan.table.form.decimal,
        missing=scan.long_map.shared.missing,
        date_order="",
    )
    cells = task.cells(scan)
    sheet.take_numbers(column, cells, None if density_kg_l is None else density_kg_l[scan.sample[results]])
    numbers.house[results] = sheet.numbers[column.name]
    numbers.spread[results] = sheet.numbers.get(column.quantity.u_name, np.nan)
    numbers.column[results] = len(numbers.columns)
    numbers.columns.append(column)
    for at, header, value, rule, remedy in sheet.problems:
        result = int(results[at])
        numbers.house[result], numbers.bad[result] = np.nan, True
        line = (int(scan.line[result]), int(scan.sample[result]), header, value, rule, in_long_table(remedy))
        numbers.refused.append(line)
    numbers.flags += [(results[at], name, values, what) for at, name, values, what in sheet.flagged]
    _flag_estimates(task, scan, numbers, cells)


def _flag_estimates(task: Task, scan: Scan, numbers: Numbers, cells: list[str]) -> None:
    """Values that the laboratory calls estimates are used, and said to be."""
    if task.mark:
        return
    estimated = np.array([meaning.condition == "estimated" for meaning in scan.meanings], dtype=bool)
    at = np.flatnonzero(estimated[scan.kind[task.results]])
    if at.size:
        numbers.flags.append((task.results[at], task.column.name, [cells[i] for i in at.tolist()], ESTIMATED))

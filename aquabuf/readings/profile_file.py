"""Flow and strength of a stream over time, read from a CSV file. Each row holds until the time of the next.

    time, flow (m3/h), strength
    2026-03-01 00:00, 12.5, 1
    2026-03-01 01:00, 14, 0.8

The *usual step* is the median of the times between rows, unless it is stated. A time between rows of more than
1.5 usual steps is a gap; so is a run of empty cells. Gaps are refused unless the caller says up to which length the
value before them may be held. The last row holds for the usual step.
"""

from __future__ import annotations

import datetime
import math
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from aquabuf.errors import HeaderError, InputError
from aquabuf.readings.cells import no_value_words, parse_numbers
from aquabuf.readings.entries import number_and_unit
from aquabuf.readings.profile_columns import ProfileColumn, profile_columns
from aquabuf.readings.textfile import Record, inspect_table, open_records

__all__ = ["GAP_STEPS", "ProfileTable", "read_profile"]

Array = NDArray[np.float64]

GAP_STEPS = 1.5      # usual steps between two rows from which on a row is missing (common practice, no source)
LEAST_ROWS = 2
SHOWN = 3            # problems told in full
_SLACK = 1e-9        # relative, so that a limit converted from the unit of the file still passes


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ProfileTable:
    """A profile as read. `strength` and `base_eq_l` go by the name of the waste, "" for the whole stream."""

    name: str
    rows: NDArray[np.int64]  # line in the file
    time_s: Array  # from the first row
    step_s: float  # for which the last row holds
    flow_m3_h: Array
    strength: Mapping[str, Array] = field(default_factory=dict)
    base_eq_l: Mapping[str, Array] = field(default_factory=dict)
    t_c: Array | None = None
    start: str = ""  # date and time of the first row, where the file tells it
    notes: tuple[str, ...] = ()


class _Problems:
    """What is wrong with the cells of a file, told together."""

    def __init__(self, name: str):
        self.name = name
        self.found: list[tuple[int, str]] = []

    def add(self, row: int, header: str, rule: str, value: str, remedy: str) -> None:
        """One cell that cannot be used."""
        self.found.append((row, f"row {row}, column {header!r}: {rule}; found {value}. {remedy}."))

    def stop(self) -> None:
        """Raise InputError if there is any."""
        if not self.found:
            return
        self.found.sort(key=lambda item: item[0])
        more = self.found[SHOWN:]
        rest = f" And {len(more)} more, from row {more[0][0]} on." if more else ""
        raise InputError(f"{self.name}, {' '.join(text for _, text in self.found[:SHOWN])}{rest}")


def read_profile(path: str | Path, wastes: Sequence[str] = (), *, hold_gap_s: float = 0.0,
                 usual_step_s: float | None = None, ignore: Collection[str] = ()) -> ProfileTable:
    """Read a profile.

    Parameters
    ----------
    path
        CSV table: a time, a flow, and for the stream or each waste a strength, a base or an acidity.
    wastes
        Names that the headers of strengths may have.
    hold_gap_s
        Longest gap over which the value before it is held; 0 refuses every gap. [s]
    usual_step_s
        Longest step that is no gap, where steps differ by intent (an hourly day, then daily composites). [s]
    ignore
        Headers to be left out.

    Raises
    ------
    FileError, HeaderError, InputError
        The file or its header cannot be read; cells that are no number, out of range or in a unit of their own; times
        that do not rise; gaps; no flow at all.
    """
    _check_settings(hold_gap_s, usual_step_s)
    path = Path(path)
    form = inspect_table(path)
    records = list(open_records(path, form))
    headers = records[0][1]
    try:
        columns = profile_columns(headers, wastes, ignore)
    except HeaderError as error:
        raise HeaderError(f"{path.name}: {error}") from None
    body = _body(records, path.name)
    rows = np.array([row for row, _ in body], dtype=np.int64)
    problems = _Problems(path.name)
    cells = {c: [record[c.at].strip() for _, record in body] for c in columns}
    time = next(c for c in columns if c.quantity.name == "time")
    seconds, start, zoned = _times(time, cells[time], rows, problems, form.decimal)
    values = {c: _numbers(c, cells[c], rows, problems, form.decimal) for c in columns if c is not time}
    problems.stop()
    _check_rising(time, cells[time], seconds, rows, problems, zoned)
    problems.stop()
    usual = float(np.median(np.diff(seconds))) if usual_step_s is None else usual_step_s
    notes = list(form.notes) + _left_out(headers, columns)
    notes += _gaps(time, cells[time], seconds, usual, rows, hold_gap_s, problems)
    for column, found in values.items():
        values[column], told = _held(column, found, seconds, usual, rows, hold_gap_s, problems)
        notes += told
    problems.stop()
    return _table(path.name, rows, seconds, usual, values, start, notes)


def _check_settings(hold_gap_s: float, usual_step_s: float | None) -> None:
    if not (math.isfinite(hold_gap_s) and hold_gap_s >= 0.0):
        raise InputError(f"the gap to be held must be 0 s or more; found {hold_gap_s:g}. Correct it.")
    if usual_step_s is not None and not (math.isfinite(usual_step_s) and usual_step_s > 0.0):
        raise InputError(f"the usual step must be above 0 s; found {usual_step_s:g}. Correct it or leave it out.")


def _body(records: list[Record], name: str) -> list[Record]:
    width = len(records[0][1])
    for row, record in records[1:]:
        if len(record) != width:
            raise InputError(f"{name}, row {row}: each row needs {width} fields, as the header has; found "
                             f"{len(record)}. Check delimiters, decimal commas and quotation marks in this row.")
    if len(records) < LEAST_ROWS + 1:
        raise InputError(f"{name}: a profile needs at least {LEAST_ROWS} rows; found {len(records) - 1}. Add rows, or "
                         "describe the stream by statistics.")
    return records[1:]


def _left_out(headers: Sequence[str], columns: Sequence[ProfileColumn]) -> list[str]:
    used = {c.at for c in columns}
    left = [header for at, header in enumerate(headers) if at not in used and header.strip()]
    acids = [c.header for c in columns if c.quantity.sign < 0.0]
    notes = [f"columns left out: {', '.join(left)}"] if left else []
    turned = "counts acid as positive; its sign is turned, so that acid is negative"
    return notes + [f"{header!r} {turned}" for header in acids]


# ------------------------------------------------------------ times


def _times(column: ProfileColumn, cells: Sequence[str], rows: NDArray[np.int64], problems: _Problems, decimal: str,
           ) -> tuple[Array, str, bool]:
    """Seconds from the first row, the date and time of it, and whether times know their zone."""
    absent = no_value_words()
    for row, cell in zip(rows.tolist(), cells, strict=True):
        if cell.lower() in absent:
            problems.add(row, column.header, "each row needs its time", "none", "Fill it in or remove the row")
    if column.unit:
        parsed = parse_numbers(cells, column.quantity.cells, decimal=decimal)
        for p in parsed.problems:
            problems.add(int(rows[p.at]), column.header, f"must be a number of {column.unit}", repr(cells[p.at]),
                         "Write all times in the unit of the header")
        return (parsed.values - parsed.values[0]) * column.scale, "", True
    stamps: list[datetime.datetime | None] = []
    for row, cell in zip(rows.tolist(), cells, strict=True):
        stamps.append(_stamp(cell))
        if stamps[-1] is None and cell.lower() not in absent:
            problems.add(row, column.header, "must be a date with a time of day, year first", repr(cell),
                         "Write 2026-03-01 08:00, or give hours or minutes since the start with the unit in the header")
    known = [s for s in stamps if s is not None]
    aware = [s.tzinfo is not None for s in known]
    if len(set(aware)) > 1 and not problems.found:
        at = aware.index(not aware[0])
        problems.add(int(rows[at]), column.header, "all times must name their zone or none", repr(cells[at]),
                     "Write all in one way")
    if problems.found:
        return np.full(len(cells), np.nan), "", True
    first = known[0]
    return np.array([(s - first).total_seconds() for s in known]), cells[0], all(aware)


def _stamp(cell: str) -> datetime.datetime | None:
    try:
        return datetime.datetime.fromisoformat(cell)
    except ValueError:
        return None


def _check_rising(column: ProfileColumn, cells: Sequence[str], seconds: Array, rows: NDArray[np.int64],
                  problems: _Problems, zoned: bool) -> None:
    for at in (np.flatnonzero(np.diff(seconds) <= 0.0) + 1).tolist():
        clock = "" if zoned else " or, where the clock was set back, write the zone (+01:00) behind all times"
        problems.add(int(rows[at]), column.header, f"times must rise; the row before has {cells[at - 1]!r}",
                     repr(cells[at]), f"Sort the rows, remove the repeated one{clock}")


def _span(seconds: float) -> str:
    """A length of time in words."""
    return f"{seconds / 3600.0:.4g} h" if seconds >= 3600.0 else f"{seconds / 60.0:.4g} min"


def _gaps(column: ProfileColumn, cells: Sequence[str], seconds: Array, usual: float, rows: NDArray[np.int64],
          hold: float, problems: _Problems) -> list[str]:
    """Rows that are missing: problems where they may not be held, else what was held."""
    step = np.diff(seconds)
    found = np.flatnonzero(step > GAP_STEPS * usual)
    missing = step[found] - usual
    long = missing > hold * (1.0 + _SLACK)
    for at, length in zip(found[long].tolist(), missing[long].tolist(), strict=True):
        problems.add(int(rows[at + 1]), column.header,
                     f"rows must follow within {GAP_STEPS:g} usual steps of {_span(usual)}",
                     f"{_span(float(step[at]))} after {cells[at]!r}",
                     f"Add the missing rows, or allow a gap of {_span(length)} to be held at the value before it")
    held = missing[~long]
    told = f"{held.size} x rows missing, held at the value before ({_span(float(held.sum()))} in all)"
    return [told] if held.size else []


# ------------------------------------------------------------ values


def _numbers(column: ProfileColumn, cells: Sequence[str], rows: NDArray[np.int64], problems: _Problems,
             decimal: str) -> Array:
    """House values, nan where a cell is empty."""
    parsed = parse_numbers(cells, column.quantity.cells, decimal=decimal)
    for p in parsed.problems:
        own = _own_unit(column, cells[p.at])
        rule = f"one unit for the whole column, {column.unit}" if own else p.rule
        remedy = f"Convert it to {column.unit} and write the number alone" if own else _sentence(p.remedy)
        problems.add(int(rows[p.at]), column.header, rule, repr(cells[p.at]), remedy)
    q = column.quantity
    house = parsed.values * column.scale + column.offset
    bad = (house < q.low - _SLACK * abs(q.low)) | (house > q.high + _SLACK * abs(q.high))
    for at in np.flatnonzero(bad).tolist():
        low, high = sorted(((q.low - column.offset) / column.scale, (q.high - column.offset) / column.scale))
        if q.low == 0.0 and house[at] < 0.0:
            rule, remedy = f"{q.name} must be 0 or more", "Correct it; leave water that flows back out of the profile"
        else:
            rule = f"{q.name} must be {low:.4g} to {high:.4g} {column.unit}"
            remedy = "Check the value and the unit in the header"
        problems.add(int(rows[at]), column.header, rule, f"{cells[at]} {column.unit}".removesuffix(" -"), remedy)
    return house


def _sentence(text: str) -> str:
    return text[:1].upper() + text[1:]


def _own_unit(column: ProfileColumn, cell: str) -> bool:
    """Whether a cell is a number with a unit behind it."""
    try:
        _, unit = number_and_unit(cell)
    except InputError:
        return False
    return bool(unit) and column.quantity.unit(unit) is not None


def _held(column: ProfileColumn, values: Array, seconds: Array, usual: float, rows: NDArray[np.int64], hold: float,
          problems: _Problems) -> tuple[Array, list[str]]:
    """Values with short runs of empty cells held at the value before, and what was held."""
    known = ~np.isnan(values)
    if known.all():
        return values, []
    ends = np.append(seconds, seconds[-1] + usual)
    edge = np.flatnonzero(np.diff(np.concatenate([[False], ~known, [False]]).astype(int)))
    first, after = edge[::2], edge[1::2]
    length = ends[after] - ends[first]
    kept = (length <= hold * (1.0 + _SLACK)) & (first > 0)
    for at, long in zip(first[~kept].tolist(), length[~kept].tolist(), strict=True):
        allow = "" if at == 0 else f", or allow a gap of {_span(long)} to be held at the value before it"
        zero = "" if column.quantity.name == "flow" else " (any value where nothing flows)"
        problems.add(int(rows[at]), column.header, "each row needs a value", f"none for {_span(long)}",
                     f"Fill it in{zero}{allow}")
    last = np.maximum.accumulate(np.where(known, np.arange(values.size), 0))
    told = [f"{int(kept.sum())} x cells missing in {column.header!r}, held at the value before "
            f"({_span(float(length[kept].sum()))} in all)"] if kept.any() else []
    return values[last], told


def _table(name: str, rows: NDArray[np.int64], seconds: Array, usual: float, values: Mapping[ProfileColumn, Array],
           start: str, notes: list[str]) -> ProfileTable:
    by_name: dict[str, dict[str, Array]] = {"strength": {}, "base": {}, "flow": {}, "temperature": {}}
    for column, found in values.items():
        by_name["base" if column.quantity.name == "acidity" else column.quantity.name][column.waste] = found
    flow = by_name["flow"][""]
    if not (flow > 0.0).any():
        raise InputError(f"{name}: something must flow at some time; found zero flow in all {flow.size} rows. Check "
                         "the column of flow.")
    return ProfileTable(name=name, rows=rows, time_s=seconds, step_s=usual, flow_m3_h=flow,
                        strength=by_name["strength"], base_eq_l=by_name["base"], t_c=by_name["temperature"].get(""),
                        start=start, notes=tuple(notes))

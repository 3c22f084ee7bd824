"""Read a long table into `Readings`: the same rows, units, flags and refusals that the reader of wide tables gives.

The results of a sample may stand anywhere in the file, so the table is read whole before the first piece goes out. A
result takes 24 bytes while reading and about 50 more while it is worked out, and each distinct cell is kept once; with
the samples themselves a million results of fifteen quantities take about 200 MB.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.errors import InputError
from aquabuf.readings.cells import Problem
from aquabuf.readings.derive import density_kg_l, derive
from aquabuf.readings.duplicates import SeenNames
from aquabuf.readings.headers import Column
from aquabuf.readings.long.choose import Choice, choose
from aquabuf.readings.long.mapping import LongMap, read_long_map
from aquabuf.readings.long.parse import Numbers, parse, tasks_of
from aquabuf.readings.long.plan import open_long_table
from aquabuf.readings.long.scan import Line, Scan, scan
from aquabuf.readings.reader import CHUNK_ROWS, _frame, _reject_duplicates
from aquabuf.readings.result import REJECTED_COLUMNS, Readings, flag_notes
from aquabuf.readings.schema import find_quantity
from aquabuf.readings.sheet import Sheet
from aquabuf.readings.table import OWN_NAME

__all__ = ["iter_long_readings"]

_AT = "at"  # position of the sample, while the lines of `rejected` are put in order
_NO_DATE = ("each sample needs a date", "fill in the day of sampling in one of its rows at least")
_DENSITY_NEEDS = ("temperature_c", "salinity")


def _sheet_of_samples(found: Scan) -> Sheet:
    """A sheet with one row per sample: name, place, time, and what is the same for every row."""
    long_map, samples = found.long_map, found.samples
    shared = long_map.shared
    sheet = Sheet(
        rows=np.array(samples.lines, dtype=np.int64),
        decimal=found.plan.table.form.decimal,
        missing=shared.missing,
        date_order=shared.date_order,
    )
    header = long_map.sample_id[0] if len(long_map.sample_id) == 1 else "sample_id"
    sheet.take_ids(list(zip(*samples.parts, strict=True)), header, OWN_NAME)
    for role in ("site", "date", "time"):
        if long_map.headers.get(role, "") in found.plan.lacking or role not in long_map.headers:
            continue
        words = samples.words[role]
        sheet.take_words(Column(header=long_map.headers[role], quantity=find_quantity(role)), words)
        if role == "date":
            without = [at for at, word in enumerate(words) if not word and sheet.ids[at]]
            sheet.reject(long_map.headers[role], words, [Problem(at, *_NO_DATE) for at in without])
    for column, value in shared.values:
        text = value if isinstance(value, str) else repr(float(value)).replace(".", sheet.decimal)
        take = sheet.take_words if column.unit is None else sheet.take_numbers
        take(column, [text] * len(sheet))
    return sheet


def _put(sheet: Sheet, found: Scan, numbers: Numbers, choice: Choice, names: tuple[str, ...] = ()) -> None:
    """The used results as columns of the samples (only those in `names`, if any are given)."""
    for place, name in enumerate(choice.names):
        if names and name not in names:
            continue
        used = choice.used[choice.quantity == place]
        at = found.sample[used]
        u_name = next(m.form.quantity.u_name for m in found.meanings if m.form.quantity.name == name)
        for column, values in ((name, numbers.house[used]), (u_name, numbers.spread[used])):
            if column == name or np.isfinite(values).any():
                kept = sheet.numbers.setdefault(column, np.full(len(sheet), np.nan))
                kept[at] = np.where(np.isnan(values), kept[at], values)


def _flag(sheet: Sheet, found: Scan, numbers: Numbers, choice: Choice) -> None:
    """What was noticed about the cells that are used or left out on purpose, and the words that go with a form."""
    noted = np.isnan(numbers.house) & ~numbers.bad
    noted[choice.used] = True
    for results, name, values, what in numbers.flags:
        keep = noted[results]
        cells = [value for value, use in zip(values, keep.tolist(), strict=True) if use]
        if cells:
            sheet.flagged.append((found.sample[results[keep]].astype(np.intp), name, cells, what))
    for kind, meaning in enumerate(found.meanings):
        at = found.sample[choice.used[found.kind[choice.used] == kind]] if meaning.form.words else ()
        for column, word in meaning.form.words:
            words = sheet.words.setdefault(column.name, [""] * len(sheet))
            for sample in at:
                words[sample] = word


def _fill(sheet: Sheet, long_map: LongMap, *, for_density: bool) -> None:
    for column, number in long_map.shared.fill:
        if (column.name in _DENSITY_NEEDS) == for_density:
            sheet.fill(column, number)


def _numbers(sheet: Sheet, found: Scan) -> tuple[Numbers, Choice]:
    """Read all results; those per kilogram once temperature and salinity of their sample are known."""
    numbers = Numbers.empty(found.line.size)
    per_kg = []
    for task in tasks_of(found, numbers):
        if task.column.unit is not None and task.column.unit.per_kg:
            per_kg.append(task)
        else:
            parse(task, found, numbers)
    _put(sheet, found, numbers, choose(found, numbers), _DENSITY_NEEDS)
    _fill(sheet, found.long_map, for_density=True)
    if per_kg:
        needed = np.zeros(len(sheet), dtype=bool)
        needed[np.concatenate([found.sample[task.results] for task in per_kg])] = True
        density = density_kg_l(sheet, per_kg[0].column.name, needed)
        for task in per_kg:
            parse(task, found, numbers, density)
    choice = choose(found, numbers)
    _put(sheet, found, numbers, choice)
    _fill(sheet, found.long_map, for_density=False)
    _flag(sheet, found, numbers, choice)
    return numbers, choice


def _headers(found: Scan, numbers: Numbers, choice: Choice) -> dict[str, tuple[str, str]]:
    """Characteristic -> (column, unit in the file), as most results of the quantity have it."""
    roles = {role: found.long_map.headers[role] for role in ("site", "date", "time") if role in found.long_map.headers}
    headers = {header: (role, "") for role, header in roles.items() if header not in found.plan.lacking}
    for place, name in enumerate(choice.names):
        columns = numbers.column[choice.used[choice.quantity == place]]
        if not columns.size:
            continue
        column = numbers.columns[int(np.bincount(columns).argmax())]
        key = column.header if column.header not in headers else f"{column.header} ({column.quantity.base})"
        headers[key] = (name, column.unit_label)
    return headers


def _rejected(sheet: Sheet, found: Scan, lines: list[Line]) -> pd.DataFrame:
    """Every line of `rejected`, sample by sample in order of appearance, with the position of the sample."""
    own = [(row, sample, sheet.ids[sample], *rest) for row, sample, *rest in lines]
    columns = [REJECTED_COLUMNS[0], _AT, *REJECTED_COLUMNS[1:]]
    results = pd.DataFrame(own, columns=columns)
    samples = sheet.rejected_frame()
    samples[_AT] = np.searchsorted(sheet.rows, samples["row"].to_numpy(dtype=np.int64))
    misfits = found.misfits.copy()  # they go with the sample that began before them
    before = np.searchsorted(sheet.rows, misfits["row"].to_numpy(dtype=np.int64), side="right")
    misfits[_AT] = np.maximum(before - 1, 0)
    parts = [part[columns].astype({"row": "int64", _AT: "int64"}) for part in (misfits, samples, results)]
    whole = pd.concat(parts, ignore_index=True)
    return whole.sort_values([_AT, "row"], kind="stable", ignore_index=True)


def _piece(whole: Readings, rows: NDArray[np.int64], at: NDArray[np.int64], start: int, stop: int) -> Readings:
    """The samples from `start` to `stop` of a whole table; `at` is the sample of each line of `rejected`."""

    def within(frame: pd.DataFrame, positions: NDArray[np.int64]) -> pd.DataFrame:
        return frame[(positions >= start) & (positions < stop)].reset_index(drop=True)

    flags = within(whole.flags, np.searchsorted(rows, whole.flags["row"].to_numpy(dtype=np.int64)))
    return replace(
        whole,
        frame=within(whole.frame, np.searchsorted(rows, whole.frame["row"].to_numpy())),
        rejected=within(whole.rejected, at),
        flags=flags,
        notes=(*(() if start else whole.notes), *flag_notes(flags)),
    )


def _nothing(found: Scan) -> InputError:
    why = "; ".join(found.notes()) or "every row was refused for its number of fields"
    return InputError(
        f"{found.plan.table.path.name}: no row holds a reading that the map {found.long_map.name} names. Found: {why}. "
        "Check [characteristics] of the map, and the words under [leave_out] and [keep_only]."
    )


def iter_long_readings(
    path: str | Path, long_map: LongMap | str | Path, chunk_rows: int = CHUNK_ROWS
) -> Iterator[Readings]:
    """Read a long table, piece by piece of `chunk_rows` samples in order of first appearance.

    A bad result is refused and its sample goes on without it; a sample is refused where its name or date is missing.
    `row` of `frame` and `flags` is the first row of the sample, `row` of `rejected` that of the refused result, and
    `column` of `rejected` the characteristic. The result does not depend on `chunk_rows`.

    Parameters
    ----------
    path
        CSV table with a header line.
    long_map
        Map of long tables, or the path of one.
    chunk_rows
        Samples per piece, 1 or more.

    Raises
    ------
    FileError, HeaderError, InputError
        When the table as a whole cannot be read, or nothing in it is a reading.
    """
    if chunk_rows < 1:
        raise InputError(f"chunk_rows must be 1 or more; found {chunk_rows}.")
    long_map = long_map if isinstance(long_map, LongMap) else read_long_map(long_map)
    whole, rows, at = _read_whole(path, long_map)
    for start in range(0, len(rows), chunk_rows):
        yield _piece(whole, rows, at, start, start + chunk_rows)


def _read_whole(path: str | Path, long_map: LongMap) -> tuple[Readings, NDArray[np.int64], NDArray[np.int64]]:
    """The whole table, the first row of each sample, and the sample of each line of `rejected`."""
    plan = open_long_table(path, long_map)
    found = scan(plan, long_map)
    if not len(found.samples):
        raise _nothing(found)
    sheet = _sheet_of_samples(found)
    numbers, choice = _numbers(sheet, found)
    derive(sheet)
    _reject_duplicates(sheet, SeenNames())
    good = sheet.usable()
    rejected = _rejected(sheet, found, [*found.refused, *numbers.refused, *choice.refused])
    origin = [f"map {long_map.name}: {long_map.source}" + (f" ({long_map.mark})" if long_map.mark else "")]
    whole = Readings(
        frame=_frame(sheet, good),
        rejected=rejected.drop(columns=_AT),
        notes=(*(origin if long_map.source else ()), *plan.notes(), *found.notes(), *choice.notes),
        flags=sheet.flags_frame(good),
        headers=_headers(found, numbers, choice),
        acids=long_map.shared.acids,
    )
    return whole, sheet.rows, rejected[_AT].to_numpy()

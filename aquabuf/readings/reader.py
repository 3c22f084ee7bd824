"""Read a table of readings, whole or in pieces of bounded memory."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import islice
from pathlib import Path

import numpy as np
import pandas as pd

from aquabuf.errors import InputError
from aquabuf.readings.cells import Problem
from aquabuf.readings.derive import density_kg_l, derive
from aquabuf.readings.duplicates import DUPLICATE_RULE, SeenNames
from aquabuf.readings.mapping import TableMap, read_map
from aquabuf.readings.plan import Plan, make_plan
from aquabuf.readings.result import REJECTED_COLUMNS, Readings, flag_notes, join_readings
from aquabuf.readings.schema import schema_order
from aquabuf.readings.sheet import Sheet
from aquabuf.readings.textfile import TableFormat, inspect_table, open_records

__all__ = ["iter_readings", "read_readings"]

Record = tuple[int, list[str]]
CHUNK_ROWS = 50_000


def _pieces(records: Iterator[Record], size: int) -> Iterator[list[Record]]:
    while piece := list(islice(records, size)):
        yield piece


def _misfits(piece: list[Record], plan: Plan) -> tuple[list[Record], pd.DataFrame]:
    """Records with the right number of fields, and a line of `rejected` for each other one."""
    good, lines = [], []
    for row, record in piece:
        if len(record) == plan.width and not (plan.unnamed and any(record[at].strip() for at in plan.unnamed)):
            good.append((row, record))
            continue
        if len(record) != plan.width:
            rule, value = f"each row needs {plan.width} fields, as the header has", f"{len(record)} fields"
            remedy = "check delimiters, decimal commas and quotation marks in this row"
        else:
            rule, value = (
                "a column without a header must be empty",
                next(filter(str.strip, (record[at] for at in plan.unnamed))),
            )
            remedy = "name the column or empty it"
        name = record[plan.id_fields[0]].strip() if len(plan.id_fields) == 1 and plan.id_fields[0] < len(record) else ""
        lines.append((row, name, "(row)", value, rule, remedy))
    return good, pd.DataFrame(lines, columns=list(REJECTED_COLUMNS))


def _fill_sheet(sheet: Sheet, records: list[list[str]], plan: Plan, table_map: TableMap) -> None:
    """All columns of the records into the sheet; those per kilogram last, because they need the density."""
    fields = list(zip(*records, strict=True)) if records else [()] * plan.width
    header = next((c.header for _, c in plan.columns if c.name == "sample_id"), "sample_id")
    sheet.take_ids([fields[at] for at in plan.id_fields], header)
    work = [(column, fields[at]) for at, column in plan.columns if column.name != "sample_id"]
    for column, value in table_map.values:
        text = value if isinstance(value, str) else repr(float(value)).replace(".", sheet.decimal)
        work.append((column, (text,) * len(records)))
    per_kg = [(column, cells) for column, cells in work if column.unit and column.unit.per_kg]
    for column, cells in work:
        if column.unit is None:
            sheet.take_words(column, cells)
        elif not column.unit.per_kg:
            sheet.take_numbers(column, cells)
    for column, number in table_map.fill:
        sheet.fill(column, number)
    density = density_kg_l(sheet, per_kg[0][0].name) if per_kg else None
    for column, cells in per_kg:
        sheet.take_numbers(column, cells, density)
    derive(sheet)


def _reject_duplicates(sheet: Sheet, seen: SeenNames) -> None:
    """The first usable row keeps a name; later ones are rejected."""
    at = np.flatnonzero(sheet.usable())
    names = [sheet.ids[i] for i in at.tolist()]
    first = seen.first_rows(names, sheet.rows[at])
    remedy = "give each sample a name of its own; the first row is kept"
    again = [Problem(int(at[i]), f"{DUPLICATE_RULE} {first[i]}", remedy) for i in np.flatnonzero(first).tolist()]
    sheet.reject("sample_id", sheet.ids, again)


def _frame(sheet: Sheet, good: np.ndarray) -> pd.DataFrame:
    """The usable rows as a table."""
    columns: dict[str, object] = {"row": sheet.rows, "sample_id": pd.Series(sheet.ids, dtype="str")}
    for name in schema_order((*sheet.words, *sheet.numbers)):
        if name in sheet.numbers:
            columns[name] = sheet.numbers[name]
            continue
        columns[name] = pd.Series(sheet.words[name], dtype="str")
        if name == "date" and sheet.days is not None:
            columns["date_parsed"] = sheet.days.astype("datetime64[s]")
    return pd.DataFrame(columns)[good].reset_index(drop=True)


def _read_piece(
    piece: list[Record], plan: Plan, form: TableFormat, table_map: TableMap, seen: SeenNames, notes: tuple[str, ...]
) -> Readings:
    """One piece of the file as Readings."""
    good_records, misfits = _misfits(piece, plan)
    sheet = Sheet(
        rows=np.array([row for row, _ in good_records], dtype=np.int64),
        decimal=form.decimal,
        missing=table_map.missing,
        date_order=table_map.date_order,
    )
    _fill_sheet(sheet, [record for _, record in good_records], plan, table_map)
    _reject_duplicates(sheet, seen)
    good = sheet.usable()
    flags = sheet.flags_frame(good)
    rejected = pd.concat([misfits, sheet.rejected_frame()], ignore_index=True)
    return Readings(
        frame=_frame(sheet, good),
        rejected=rejected.astype({"row": "int64"}).sort_values("row", kind="stable", ignore_index=True),
        notes=(*notes, *flag_notes(flags)),
        flags=flags,
        headers=plan.headers(),
        acids=table_map.acids,
    )


def _file_notes(form: TableFormat, plan: Plan) -> tuple[str, ...]:
    notes = list(form.notes)
    if plan.ignored:
        notes.append(f"{len(plan.ignored)} columns left out: {', '.join(plan.ignored)}")
    if plan.unnamed:
        notes.append(f"{len(plan.unnamed)} empty columns without a header left out")
    return tuple(notes)


def _as_map(mapping: TableMap | str | Path | None) -> TableMap:
    return TableMap() if mapping is None else mapping if isinstance(mapping, TableMap) else read_map(mapping)


def iter_readings(
    path: str | Path, mapping: TableMap | str | Path | None = None, chunk_rows: int = CHUNK_ROWS
) -> Iterator[Readings]:
    """Read a table piece by piece; memory does not grow with the file, but for 16 bytes per row.

    Parameters
    ----------
    path
        CSV table with a header line.
    mapping
        Map file (or its path) where the headers are not this program's own.
    chunk_rows
        Rows per piece, 1 or more.

    Raises
    ------
    FileError, HeaderError, InputError
        When the table as a whole cannot be read; single bad rows are in `rejected` of their piece.
    """
    if chunk_rows < 1:
        raise InputError(f"chunk_rows must be 1 or more; found {chunk_rows}.")
    path = Path(path)
    table_map = _as_map(mapping)
    form = inspect_table(path, encoding=table_map.encoding, delimiter=table_map.delimiter, decimal=table_map.decimal)
    records = open_records(path, form)
    plan = make_plan(next(records)[1], table_map)
    notes, seen, empty = _file_notes(form, plan), SeenNames(), True
    for piece in _pieces(records, chunk_rows):
        yield _read_piece(piece, plan, form, table_map, seen, notes if empty else ())
        empty = False
    if empty:
        raise InputError(f"{path.name}: the table has a header but no rows. Add at least one row of readings.")


def read_readings(path: str | Path, mapping: TableMap | str | Path | None = None) -> Readings:
    """Read a whole table; see `iter_readings`."""
    return join_readings(iter_readings(path, mapping))

"""A table on disk, whatever its schema: the header understood, then piece by piece a filled `Sheet`."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import chain, islice
from pathlib import Path

import numpy as np
import pandas as pd

from aquabuf.errors import InputError
from aquabuf.readings.mapping import TableMap, read_map
from aquabuf.readings.plan import Plan, make_plan
from aquabuf.readings.result import REJECTED_COLUMNS
from aquabuf.readings.schema import Schema, name_index
from aquabuf.readings.sheet import Sheet
from aquabuf.readings.textfile import Record, TableFormat, inspect_table, open_records

__all__ = ["Table", "as_map", "iter_sheets", "misfit_name", "open_table", "pieces", "read_sheet"]

OWN_NAME = "fill in a name of its own"


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table whose header line is understood."""

    path: Path
    table_map: TableMap
    form: TableFormat
    plan: Plan

    @property
    def notes(self) -> tuple[str, ...]:
        """What was recognized in the file, and what of it is left out."""
        notes = list(self.form.notes)
        if self.plan.ignored:
            notes.append(f"{len(self.plan.ignored)} columns left out: {', '.join(self.plan.ignored)}")
        if self.plan.unnamed:
            notes.append(f"{len(self.plan.unnamed)} empty columns without a header left out")
        return tuple(notes)

    def records(self) -> Iterator[Record]:
        """Line and fields of each row; InputError when there is none."""
        records = islice(open_records(self.path, self.form), 1, None)
        first = next(records, None)
        if first is None:
            raise InputError(f"{self.path.name}: the table has a header but no rows. Add at least one row of readings.")
        return chain([first], records)

    def fits(self, record: list[str]) -> bool:
        """Whether a row has the fields of the header, and nothing where there is no header."""
        plan = self.plan
        return len(record) == plan.width and not (plan.unnamed and any(record[at].strip() for at in plan.unnamed))


def as_map(mapping: TableMap | str | Path | None, schema: Schema | None = None) -> TableMap:
    """A map from what the caller gave: a map, the path of a map file, or nothing."""
    if mapping is None:
        return TableMap(index=name_index(schema=schema))
    return mapping if isinstance(mapping, TableMap) else read_map(mapping, schema)


def open_table(path: str | Path, table_map: TableMap) -> Table:
    """Recognize the format of a file and understand its header line.

    Raises
    ------
    FileError, HeaderError, InputError
        The file or its header cannot be read.
    """
    path = Path(path)
    form = inspect_table(path, encoding=table_map.encoding, delimiter=table_map.delimiter, decimal=table_map.decimal)
    header = next((record for _, record in open_records(path, form)), [])
    return Table(path=path, table_map=table_map, form=form, plan=make_plan(header, table_map))


def pieces(records: Iterator[Record], size: int) -> Iterator[list[Record]]:
    """Records, `size` at a time."""
    while piece := list(islice(records, size)):
        yield piece


def misfit_name(record: list[str], plan: Plan) -> str:
    """The sample_id of a row that does not fit the header, "" where it cannot be told."""
    at = plan.id_fields[0]
    return record[at].strip() if len(plan.id_fields) == 1 and at < len(record) else ""


def _misfits(piece: list[Record], table: Table) -> tuple[list[Record], pd.DataFrame]:
    """Records that fit the header, and a line of `rejected` for each other one."""
    good, lines = [], []
    plan = table.plan
    for row, record in piece:
        if table.fits(record):
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
        lines.append((row, misfit_name(record, plan), "(row)", value, rule, remedy))
    return good, pd.DataFrame(lines, columns=list(REJECTED_COLUMNS)).astype({"row": "int64"})


def read_sheet(piece: list[Record], table: Table, id_remedy: str = OWN_NAME) -> tuple[Sheet, pd.DataFrame]:
    """A filled sheet of the records that fit the header, and a line of `rejected` for each other one.

    What depends on other columns is left to the caller: the numbers of `[fill]`, and the columns per kilogram, which
    need a density and are in `sheet.per_kg`.
    """
    good, misfits = _misfits(piece, table)
    plan, table_map = table.plan, table.table_map
    sheet = Sheet(
        rows=np.array([row for row, _ in good], dtype=np.int64),
        decimal=table.form.decimal,
        missing=table_map.missing,
        date_order=table_map.date_order,
    )
    fields = list(zip(*(record for _, record in good), strict=True)) if good else [()] * plan.width
    header = next((c.header for _, c in plan.columns if c.name == "sample_id"), "sample_id")
    sheet.take_ids([fields[at] for at in plan.id_fields], header, id_remedy)
    work = [(column, fields[at]) for at, column in plan.columns if column.name != "sample_id"]
    for column, value in table_map.values:
        text = value if isinstance(value, str) else repr(float(value)).replace(".", sheet.decimal)
        work.append((column, (text,) * len(good)))
    for column, cells in work:
        if column.unit is None:
            sheet.take_words(column, cells)
        elif column.unit.per_kg:
            sheet.per_kg.append((column, cells))
        else:
            sheet.take_numbers(column, cells)
    return sheet, misfits


def iter_sheets(table: Table, chunk_rows: int) -> Iterator[tuple[Sheet, pd.DataFrame]]:
    """The whole table, `chunk_rows` at a time: see `read_sheet`."""
    for piece in pieces(table.records(), chunk_rows):
        yield read_sheet(piece, table)

"""Read a table of readings, whole or in pieces of bounded memory."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pandas as pd

from aquabuf.errors import InputError
from aquabuf.readings.cells import Problem
from aquabuf.readings.derive import density_kg_l, derive
from aquabuf.readings.duplicates import DUPLICATE_RULE, SeenNames
from aquabuf.readings.mapping import TableMap
from aquabuf.readings.result import Readings, flag_notes, join_readings
from aquabuf.readings.schema import schema_order
from aquabuf.readings.sheet import Sheet
from aquabuf.readings.table import Table, as_map, iter_sheets, open_table

__all__ = ["iter_readings", "read_readings"]

CHUNK_ROWS = 50_000


def _complete(sheet: Sheet, table_map: TableMap) -> None:
    """What depends on other columns: numbers of the map for gaps, columns per kilogram, derived quantities."""
    by_mass = {column.name for column, _ in sheet.per_kg}
    for column, number in table_map.fill:
        if column.name not in by_mass:
            sheet.fill(column, number)
    density = density_kg_l(sheet, sheet.per_kg[0][0].name) if sheet.per_kg else None
    for column, cells in sheet.per_kg:
        sheet.take_numbers(column, cells, density)
    for column, number in table_map.fill:
        if column.name in by_mass:  # what was measured stands
            sheet.fill(column, number)
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


def _as_readings(
    sheet: Sheet, misfits: pd.DataFrame, table: Table, seen: SeenNames, notes: tuple[str, ...]
) -> Readings:
    """One piece of the file as Readings."""
    _complete(sheet, table.table_map)
    _reject_duplicates(sheet, seen)
    good = sheet.usable()
    flags = sheet.flags_frame(good)
    rejected = pd.concat([misfits, sheet.rejected_frame()], ignore_index=True)
    return Readings(
        frame=_frame(sheet, good),
        rejected=rejected.astype({"row": "int64"}).sort_values("row", kind="stable", ignore_index=True),
        notes=(*notes, *flag_notes(flags)),
        flags=flags,
        headers=table.plan.headers(),
        acids=table.table_map.acids,
    )


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
    table = open_table(path, as_map(mapping))
    seen = SeenNames()
    for at, (sheet, misfits) in enumerate(iter_sheets(table, chunk_rows)):
        yield _as_readings(sheet, misfits, table, seen, () if at else table.notes)


def read_readings(path: str | Path, mapping: TableMap | str | Path | None = None) -> Readings:
    """Read a whole table; see `iter_readings`."""
    return join_readings(iter_readings(path, mapping))

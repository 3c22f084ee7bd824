"""Where the numbers of a sample stand in its file: the cells as entered, each with the meaning of its column."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from aquabuf.readings.cells import no_value_words, parse_numbers
from aquabuf.readings.headers import Column
from aquabuf.readings.long.mapping import LongMap
from aquabuf.readings.long.plan import open_long_table
from aquabuf.readings.long.reader import _numbers, _sheet_of_samples
from aquabuf.readings.long.scan import NO_TEXT, scan
from aquabuf.readings.mapping import TableMap
from aquabuf.readings.table import Table, as_map, open_table
from aquabuf.units import EQUIVALENTS_PER_MOL, WITH_BASIS, molar_mass_of

__all__ = ["Cell", "cells_of"]

FROM_MAP = "the same for every row, from the map file"


@dataclass(frozen=True, slots=True, kw_only=True)
class Cell:
    """One reading as entered.

    row : line in the file. text : the cell. value : its number in the unit of the file, nan for words.
    place : where it stands if it is no cell of the table.
    """

    row: int
    column: Column
    text: str
    value: float
    place: str = ""

    @property
    def name(self) -> str:
        """Canonical column name."""
        return self.column.name

    def conversion(self) -> str:
        """How the number in the file becomes one in house units, in words."""
        column, unit = self.column, self.column.unit
        if unit is None:
            return ""
        by_mass = " × density of the sample" if unit.per_kg else ""
        if column.scale == 1.0 and not column.offset and not by_mass:
            return "no conversion"
        shift = f" {'+' if column.offset > 0 else '-'} {abs(column.offset):.6g}" if column.offset else ""
        basis = self._basis()
        return f"× {column.scale:.6g}{by_mass}{shift}{f' ({basis})' if basis else ''}"

    def _basis(self) -> str:
        """Whose mass or charge is counted."""
        quantity, unit = self.column.quantity, self.column.unit
        if unit is None or quantity.dimension not in WITH_BASIS or quantity.dimension == "mass":
            return ""
        if unit.kind == "charge":
            return f"charge {abs(quantity.charge)}" if quantity.charge and abs(quantity.charge) > 1 else ""
        if unit.kind != "mass":
            return ""
        mass = molar_mass_of(unit.basis) if unit.basis else quantity.molar_mass_g
        each = EQUIVALENTS_PER_MOL.get(unit.basis)
        return f"{unit.basis or quantity.base}: {mass:.6g} g/mol{f', {each:g} equivalents per mole' if each else ''}"


def cells_of(path: str | Path, mapping: TableMap | LongMap | None, rows: Collection[int],
             ) -> dict[int, tuple[Cell, ...]]:
    """The cells with something in them, by the row of their sample as `Readings.frame` has it.

    Rows that do not fit the header have none. Raises as the reader of the table does.
    """
    if isinstance(mapping, LongMap):
        return _of_long(path, mapping, rows)
    table = open_table(path, as_map(mapping))
    found: dict[int, tuple[Cell, ...]] = {}
    for row, record in table.records():
        if row in rows:
            found[row] = tuple(_of_record(row, record, table)) if table.fits(record) else ()
        if len(found) == len(set(rows)):
            break
    return found


def _of_record(row: int, record: list[str], table: Table) -> Iterable[Cell]:
    table_map, decimal = table.table_map, table.form.decimal
    absent = no_value_words(table_map.missing)
    for at, column in table.plan.columns:
        text = record[at].strip()
        if text.lower() not in absent:
            yield _cell(row, column, text, decimal, table_map.missing)
    yield from _of_map(row, table_map)


def _of_map(row: int, table_map: TableMap) -> Iterable[Cell]:
    for column, value in table_map.values:
        number = np.nan if isinstance(value, str) else float(value)
        yield Cell(row=row, column=column, text=str(value), value=number, place=FROM_MAP)


def _cell(row: int, column: Column, text: str, decimal: str, missing: tuple) -> Cell:
    number = np.nan
    if column.unit is not None:
        number = float(parse_numbers([text], column.quantity, decimal=decimal, missing=missing).values[0])
    return Cell(row=row, column=column, text=text, value=number)


def _of_long(path: str | Path, long_map: LongMap, rows: Collection[int]) -> dict[int, tuple[Cell, ...]]:
    """The results that a sample was taken from, each with its own row."""
    found = scan(open_long_table(path, long_map), long_map)
    sheet = _sheet_of_samples(found)
    numbers, choice = _numbers(sheet, found)
    at_sample: Mapping[int, int] = {int(line): at for at, line in enumerate(sheet.rows.tolist()) if line in rows}
    out: dict[int, tuple[Cell, ...]] = {}
    for line, at in at_sample.items():
        cells = []
        for used in choice.used[found.sample[choice.used] == at].tolist():
            column = numbers.columns[int(numbers.column[used])]
            code = int(found.value[used]) if found.value[used] != NO_TEXT else int(found.limit[used])
            text = "" if code == NO_TEXT else found.texts[code]
            house = float(numbers.house[used])
            cells.append(Cell(row=int(found.line[used]), column=column, text=text,
                              value=np.nan if column.unit is None else (house - column.offset) / column.scale))
        out[line] = (*cells, *_of_map(line, long_map.shared))
    return out

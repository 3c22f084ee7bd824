"""Titration curves of wastes: a table of pH against base or acid added becomes one rising curve per sample.

sample_id,base (mL),pH,sample volume (mL),normality     a titrant by volume
sample_id,acid (meq/L),base (meq/L),pH                  amounts per liter of sample; acid counts negative
pH,reagent ratio (L/L)                                  reagent per influent; its normality as an argument

Points of one sample may stand in any order and come from two vessels, one taken up with base and one down with acid.
Good curves go on; a bad one comes back with its row, its column and what to do.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd

from aquabuf.errors import HeaderError, InputError
from aquabuf.readings.curve_points import ADDED, CurvePoints, Line, SampleRows, curve_of
from aquabuf.readings.headers import Column
from aquabuf.readings.mapping import TableMap
from aquabuf.readings.plan import _check_unique, _id_fields, _meanings
from aquabuf.readings.result import REJECTED_COLUMNS
from aquabuf.readings.schema import Quantity, _quantity, quantities
from aquabuf.readings.sheet import Sheet
from aquabuf.readings.table import as_map
from aquabuf.readings.textfile import Record, inspect_table, open_records
from aquabuf.tables import read_table
from aquabuf.units import key

__all__ = ["NOISE_PH", "CurvePoints", "CurveTable", "curve_quantities", "read_curves"]

NOISE_PH = 0.05        # scatter of pH that is repaired; beyond it a falling pH is a mistake of somebody
NAMELESS = "waste"     # the sample of a file without names
_PER_VOLUME = {"l_l": 1.0, "ml_ml": 1.0, "m3_m3": 1.0, "gal_gal": 1.0, "v_v": 1.0, "ml_l": 1e-3, "l_m3": 1e-3}
_VOLUMES = re.compile(r"^(?P<name>.*?)[\s_]*[(\[]?\s*(?P<unit>(?:L|mL|m3|m³|gal|v)[/_](?:L|mL|m3|m³|gal|v))\s*[)\]]?$",
                      re.IGNORECASE)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class CurveTable:
    """What a file of curves holds: good curves in its order, and a line per problem of the others."""

    curves: tuple[CurvePoints, ...]
    refused: pd.DataFrame  # REJECTED_COLUMNS
    notes: tuple[str, ...] = ()
    headers: Mapping[str, tuple[str, str]] = field(default_factory=dict)  # file header -> (column, unit in file)

    @property
    def refused_ids(self) -> tuple[str, ...]:
        """Samples that cannot be used, in the order of the file."""
        return tuple(dict.fromkeys(self.refused["sample_id"]))


@cache
def curve_quantities() -> dict[str, Quantity]:
    """The columns that a table of curves may have, by canonical name (treat as read-only)."""
    return {row["name"]: quantities()[row["name"]] if row["kind"] == "shared" else _quantity(row)
            for row in read_table("curve_columns")}


def read_curves(path: str | Path, *, mapping: TableMap | str | Path | None = None,
                sample_volume_ml: float | None = None, titrant_normality_eq_l: float | None = None,
                t_c: float | None = None, noise_ph: float = NOISE_PH) -> CurveTable:
    """Read titration curves of a waste.

    Parameters
    ----------
    path
        CSV table with a header line.
    mapping
        A map, or the path of one, where headers do not explain themselves.
    sample_volume_ml, titrant_normality_eq_l, t_c
        For rows that have no value of their own. [mL], [eq/L], [°C]
    noise_ph
        How far a pH may be off the nearest rising curve. [-]

    Raises
    ------
    FileError, HeaderError, InputError
        The file cannot be read, a header means nothing, or there is no column of pH or of titrant, or no rows.
    """
    path = Path(path)
    for name, value in (("sample_volume_ml", sample_volume_ml), ("titrant_normality_eq_l", titrant_normality_eq_l)):
        if value is not None and not 0.0 < value < np.inf:
            raise InputError(f"{name} must be above 0; found {value!r}. Correct it.")
    if not 0.0 <= noise_ph <= 1.0:
        raise InputError(f"noise_ph must be 0 to 1; found {noise_ph!r}. A scatter beyond 1 is not repaired.")
    given = {"sample_volume_ml": sample_volume_ml, "titrant_normality_eq_l": titrant_normality_eq_l,
             "temperature_c": t_c}
    sheet, lines, columns, notes = _read(path, as_map(mapping, curve_quantities()))
    for name, value in given.items():
        if value is not None:
            cells = sheet.numbers.get(name, np.full(len(sheet), np.nan))
            sheet.numbers[name] = np.where(np.isnan(cells), value, cells)
    headers = {column.name: column.header for column in columns}
    lines += list(sheet.rejected_frame().itertuples(index=False, name=None))
    bad = {line[1] for line in lines}
    ids, curves = np.array(sheet.ids, dtype=object), []
    for name in dict.fromkeys(sheet.ids):
        if name not in bad:
            one = curve_of(SampleRows(name, np.flatnonzero(ids == name), sheet, headers), noise_ph)
            if isinstance(one, CurvePoints):
                curves.append(one)
            else:
                lines += one
    refused = pd.DataFrame(lines, columns=list(REJECTED_COLUMNS)).astype({"row": "int64"})
    return CurveTable(curves=tuple(curves), refused=refused.sort_values("row", kind="stable", ignore_index=True),
                      notes=notes, headers={c.header: (c.name, c.unit_label) for c in columns})


# ---------------------------------------------------------------- cells

def _ratio_header(header: str) -> tuple[str, float] | None:
    """Name and scale of a header in volumes per volume, "base (mL/L)"; None for all others."""
    found = _VOLUMES.match(header)
    scale = _PER_VOLUME.get(key(found["unit"])) if found else None
    return None if found is None or scale is None else (key(found["name"]), scale)


def _ratio_columns(names: Sequence[str], table_map: TableMap) -> list[tuple[int, Column]]:
    """Columns of reagent per influent, whose unit is told by two volumes."""
    columns = []
    for at, header in enumerate(names):
        apart = None if header in table_map.columns else _ratio_header(header)
        quantity = next((q for q, _ in table_map.index.get(apart[0], ()) if q.name in ADDED["ratio"]),
                        None) if apart else None
        if apart and quantity:
            columns.append((at, Column(header=header, quantity=quantity, unit=quantity.house, scale=apart[1])))
    return columns


def _read(path: Path, table_map: TableMap) -> tuple[Sheet, list[Line], list[Column], tuple[str, ...]]:
    """All cells in house units, a line for each row that does not fit the header, and the columns found."""
    form = inspect_table(path, encoding=table_map.encoding, delimiter=table_map.delimiter, decimal=table_map.decimal)
    records = open_records(path, form)
    names = [name.strip() for name in next(records, (0, []))[1]]
    ratios = _ratio_columns(names, table_map)
    at_ratio = {at for at, _ in ratios}
    found, ignored = _meanings(["" if at in at_ratio else name for at, name in enumerate(names)], table_map)
    found = sorted(found + ratios, key=lambda item: item[0])
    _check_unique(found, table_map)
    _check_columns(path.name, [c for _, c in found] + [c for c, _ in table_map.values])
    has_name = table_map.compose or any(column.name == "sample_id" for _, column in found)
    id_fields = _id_fields(names, found, table_map) if has_name else ()
    good, ids, lines = _fitting(records, names, id_fields)
    if not good and not lines:
        raise InputError(f"{path.name}: the table has a header but no rows. Add the points of a curve.")
    sheet = Sheet(rows=np.array([row for row, _ in good], dtype=np.int64), decimal=form.decimal,
                  missing=table_map.missing, date_order=table_map.date_order)
    sheet.ids = ids
    fields = list(zip(*(record for _, record in good), strict=True)) if good else [()] * len(names)
    work = [(column, fields[at]) for at, column in found if column.name != "sample_id"]
    for column, value in table_map.values:
        text = value if isinstance(value, str) else repr(float(value)).replace(".", sheet.decimal)
        work.append((column, (text,) * len(good)))
    for column, cells in work:
        (sheet.take_words if column.unit is None else sheet.take_numbers)(column, cells)
    for column, number in table_map.fill:
        sheet.fill(column, number)
    left_out = [f"{len(ignored)} columns left out: {', '.join(ignored)}"] if ignored else []
    return sheet, lines, [column for column, _ in work], (*form.notes, *left_out)


def _check_columns(file: str, columns: Sequence[Column]) -> None:
    """HeaderError when a column of pH or any of titrant is missing, or one is per kilogram."""
    names = {column.name for column in columns}
    per_kg = next((c for c in columns if c.unit is not None and c.unit.per_kg), None)
    if per_kg is not None:
        raise HeaderError(f"{file}: column {per_kg.header!r} is per kilogram; curves are read per liter of sample. "
                          "Multiply it by the density and say so in the header.")
    if "ph" not in names:
        raise HeaderError(f"{file}: a titration curve needs a column of pH; found {', '.join(sorted(names))}. "
                          "Add one named pH.")
    if not names & {name for pair in ADDED.values() for name in pair}:
        raise HeaderError(f"{file}: a titration curve needs a column of what was added; found "
                          f"{', '.join(sorted(names))}. Add one, e.g. 'base (meq/L)', 'acid (mL)' or "
                          "'reagent ratio (L/L)'.")


def _fitting(records: Iterator[Record], names: Sequence[str], id_fields: Sequence[int],
             ) -> tuple[list[Record], list[str], list[Line]]:
    """Records that fit the header, the sample of each, and a line for each other row.

    A row without a name belongs to the sample before it.
    """
    good: list[Record] = []
    ids: list[str] = []
    lines: list[Line] = []
    last = NAMELESS
    for row, record in records:
        parts = [record[at].strip() if at < len(record) else "" for at in id_fields]
        last = "_".join(parts) if parts and all(parts) else last
        stray = next((cell for cell, name in zip(record, names, strict=False) if cell.strip() and not name), None)
        if len(record) != len(names):
            lines.append((row, last, "(row)", f"{len(record)} fields", f"each row needs {len(names)} fields, as the "
                          "header has", "check delimiters, decimal commas and quotation marks in this row"))
        elif stray is not None:
            lines.append((row, last, "(row)", stray.strip(), "a column without a header must be empty",
                          "name the column or empty it"))
        else:
            good.append((row, record))
            ids.append(last)
    return good, ids, lines

"""What reading a table gives."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from aquabuf.readings.schema import schema_order

__all__ = ["FLAG_COLUMNS", "REJECTED_COLUMNS", "Readings", "UserAcid", "join_readings", "notes_on_file"]

REJECTED_COLUMNS = ("row", "sample_id", "column", "value", "rule", "remedy")
FLAG_COLUMNS = ("row", "sample_id", "column", "value", "what")
_NOT_IN_SCHEMA = ("row", "date_parsed")
BELOW_DETECTION = "below detection, half the limit used"


@dataclass(frozen=True, slots=True, kw_only=True)
class UserAcid:
    """An acid of the user's own, from `[acids.NAME]` in a map file; its column is `NAME_mol_l`."""

    name: str
    pk: tuple[float, ...]  # at 25 °C and zero ionic strength, first to last
    charge: int  # of the fully protonated form
    dh_j_mol: tuple[float, ...] = ()  # enthalpy of each step; empty = not given. [J/mol]
    dcp_j_mol_k: tuple[float, ...] = ()  # heat capacity change of each step; empty = not given. [J/(mol K)]
    molar_mass_g: float | None = None  # [g/mol]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Readings:
    """Rows that can be used, rows that cannot and why, and what was noticed.

    `frame` has `row` (line in the file, the header counts), `sample_id`, and the columns found: numbers as float64 in
    house units (nan = missing), text as str ("" = missing); beside `date` (as written) stands `date_parsed`.
    """

    frame: pd.DataFrame
    rejected: pd.DataFrame  # REJECTED_COLUMNS, one line per problem
    notes: tuple[str, ...] = ()
    flags: pd.DataFrame = field(default_factory=lambda: pd.DataFrame(columns=list(FLAG_COLUMNS)))
    headers: Mapping[str, tuple[str, str]] = field(default_factory=dict)  # file header -> (column, unit in file)
    acids: Mapping[str, UserAcid] = field(default_factory=dict)  # by column name

    def below_detection(self, column: str) -> np.ndarray:
        """Which rows of `frame` hold half a detection limit in `column`. Boolean, one per row."""
        hit = (self.flags["column"] == column) & (self.flags["what"] == BELOW_DETECTION)
        return self.frame["row"].isin(self.flags.loc[hit, "row"]).to_numpy()


def flag_notes(flags: pd.DataFrame) -> list[str]:
    """One sentence per kind of flag and column, with its count and first row."""
    notes = []
    for (what, column), part in flags.groupby(["what", "column"], sort=False):
        first = part.iloc[0]
        value = f", {first['value']!r}" if first["value"] else ""
        notes.append(f"{len(part)} x {what} in {column} (first: row {first['row']}{value})")
    return notes


def notes_on_file(readings: Readings) -> tuple[str, ...]:
    """The notes that are about the file, not about single cells."""
    about_cells = set(flag_notes(readings.flags))
    return tuple(note for note in readings.notes if note not in about_cells)


def join_readings(parts: Iterable[Readings]) -> Readings:
    """The chunks of one file as a whole; notes on single cells are counted anew."""
    parts = list(parts)
    flags = pd.concat([part.flags for part in parts], ignore_index=True)
    about_file = dict.fromkeys(note for part in parts for note in notes_on_file(part))
    frame = pd.concat([part.frame for part in parts], ignore_index=True)
    order = schema_order(name for name in frame.columns if name not in _NOT_IN_SCHEMA)
    if "date" in order:
        order.insert(order.index("date") + 1, "date_parsed")
    return Readings(
        frame=frame[["row", *order]],
        rejected=pd.concat([part.rejected for part in parts], ignore_index=True),
        notes=(*about_file, *flag_notes(flags)),
        flags=flags,
        headers=parts[0].headers,
        acids=parts[0].acids,
    )

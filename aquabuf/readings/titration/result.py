"""What reading titrations gives."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from aquabuf.readings.result import FLAG_COLUMNS, REJECTED_COLUMNS, UserAcid, flag_notes
from aquabuf.readings.schema import schema_order, titration_quantities

__all__ = [
    "COUNTS_PER_ML",
    "TITRATION_FLAG_COLUMNS",
    "TITRATION_REJECTED_COLUMNS",
    "Titrations",
    "join_titrations",
    "sorted_lines",
]

COUNTS_PER_ML = 800.0  # of a digital titrator, where counts_per_ml is not given
TITRATION_REJECTED_COLUMNS = ("file", *REJECTED_COLUMNS)
TITRATION_FLAG_COLUMNS = ("file", *FLAG_COLUMNS)
_LEAD = ["row", "sample_id"]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Titrations:
    """Some titrations of a file, in its order; those that cannot be used are there with no points.

    `samples` has a row per titration: `row` (line of its first point), `sample_id`, then the columns known of the
    sample in house units: numbers as float64 (nan = missing), text as str ("" = missing). An uncertainty of what is
    read at each point (`ph_u`, `titrant_volume_u_ml`) is one of them: it is the same for all points of a titration.
    """

    samples: pd.DataFrame
    usable: np.ndarray  # bool per titration
    start: np.ndarray  # int64, one more than titrations: the points of titration i are start[i]:start[i + 1]
    added: np.ndarray  # titrant added since the start. [mL], or [g] where `added_by` is "mass"
    reading: np.ndarray  # pH, or potential where `read_as` says so. [-], [mV]
    minutes: np.ndarray  # nan where not given. [min]
    point_row: np.ndarray  # int64, line of each point in the file of points
    added_by: np.ndarray  # "volume", "mass" or "counts" per titration; "" for a refused one
    read_as: np.ndarray  # "ph" or "potential" per titration; "" for a refused one
    rejected: pd.DataFrame  # TITRATION_REJECTED_COLUMNS, one line per problem; file is "points" or "samples"
    notes: tuple[str, ...]  # about the files, with the first piece; on single cells only in the whole
    flags: pd.DataFrame  # TITRATION_FLAG_COLUMNS
    headers: Mapping[str, tuple[str, str]]  # header of either file -> (column, unit in file)
    acids: Mapping[str, UserAcid]  # of either map file, by column name

    def __len__(self) -> int:
        return len(self.usable)


def sorted_lines(parts: Iterable[pd.DataFrame], columns: Sequence[str]) -> pd.DataFrame:
    """Lines with these columns in the order of the files and their rows, whatever the size of the pieces."""
    lines = pd.concat(parts, ignore_index=True)[list(columns)]
    lines = lines.astype({name: "int64" if name == "row" else "str" for name in columns})
    return lines.sort_values(["file", "row"], kind="stable", ignore_index=True)


def _joined_samples(parts: list[Titrations]) -> pd.DataFrame:
    """All rows; a column that only some pieces have is missing in the others."""
    frame = pd.concat([part.samples for part in parts], ignore_index=True)
    order = schema_order((name for name in frame.columns if name not in _LEAD), titration_quantities())
    return frame[[*_LEAD, *order]]


def _notes_on_cells(flags: pd.DataFrame) -> list[str]:
    return [f"{file}: {note}" for file, part in flags.groupby("file", sort=False) for note in flag_notes(part)]


def join_titrations(parts: Iterable[Titrations]) -> Titrations:
    """The pieces of one file as a whole; notes on single cells are counted over all of them."""
    parts = list(parts)
    flags = sorted_lines([part.flags for part in parts], TITRATION_FLAG_COLUMNS)
    counts = np.concatenate([np.diff(part.start) for part in parts])
    return Titrations(
        samples=_joined_samples(parts),
        usable=np.concatenate([part.usable for part in parts]),
        start=np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
        added=np.concatenate([part.added for part in parts]),
        reading=np.concatenate([part.reading for part in parts]),
        minutes=np.concatenate([part.minutes for part in parts]),
        point_row=np.concatenate([part.point_row for part in parts]),
        added_by=np.concatenate([part.added_by for part in parts]),
        read_as=np.concatenate([part.read_as for part in parts]),
        rejected=sorted_lines([part.rejected for part in parts], TITRATION_REJECTED_COLUMNS),
        notes=(*(note for part in parts for note in part.notes), *_notes_on_cells(flags)),
        flags=flags,
        headers=parts[0].headers,
        acids=parts[0].acids,
    )

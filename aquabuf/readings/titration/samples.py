"""The file of samples, held as arrays: one row per sample, found by name."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from aquabuf.readings.duplicates import DUPLICATE_RULE, hashes_of
from aquabuf.readings.result import FLAG_COLUMNS, REJECTED_COLUMNS
from aquabuf.readings.table import OWN_NAME, Table, iter_sheets
from aquabuf.readings.titration.refusal import Labels, Refusal

__all__ = ["Samples", "read_samples"]

_CHUNK_ROWS = 20_000


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Samples:
    """What is known of each sample; a row that cannot be used is there with its problems."""

    labels: Labels
    names: np.ndarray  # str per row of the arrays
    rows: np.ndarray  # line in the file
    numbers: dict[str, np.ndarray]  # house units; columns per kilogram still per kilogram
    words: dict[str, np.ndarray]
    problems: pd.DataFrame  # REJECTED_COLUMNS and `at`, position of the sample; -1 where the line belongs to none
    flags: pd.DataFrame  # FLAG_COLUMNS and `at`, sorted by it
    hashes: np.ndarray  # of the names, sorted
    order: np.ndarray  # position of the sample of each hash
    met: np.ndarray  # bool, whether the sample has points; set while those are read

    def find(self, names: Sequence[str]) -> np.ndarray:
        """Position of each name, -1 where there is none; those found count as met."""
        if not len(self.hashes):
            return np.full(len(names), -1)
        wanted = hashes_of(list(names))
        slot = np.minimum(np.searchsorted(self.hashes, wanted), len(self.hashes) - 1)
        at = np.where(self.hashes[slot] == wanted, self.order[slot], -1)
        self.met[at[at >= 0]] = True
        return at

    def refusals(self, at: np.ndarray) -> list[Refusal]:
        """Problems of the rows of these samples, by position in `at`."""
        block = {position: i for i, position in enumerate(at.tolist()) if position >= 0}
        lines = _of(self.problems, at[at >= 0])
        columns = [lines[name] for name in ("at", "row", "column", "value", "rule", "remedy")]
        return [Refusal(block[position], "samples", int(row), column, value, rule, remedy)
                for position, row, column, value, rule, remedy in zip(*columns, strict=True)]

    def flags_of(self, at: np.ndarray) -> pd.DataFrame:
        """Flags of these samples."""
        return _of(self.flags, at[at >= 0])[list(FLAG_COLUMNS)]

    def left_over(self, points_file: str) -> pd.DataFrame:
        """Lines of rows that belong to no sample with points. To be asked when all points are read."""
        lost = np.flatnonzero(~self.met)
        own = _of(self.problems, np.concatenate([[-1], lost]))[list(REJECTED_COLUMNS)]
        rule = f"no points of this sample are in {points_file}"
        remedy = "add its points, write the name as it is there, or remove the row"
        header = self.labels.header("sample_id")
        names = self.names[lost]
        none = pd.DataFrame({"row": self.rows[lost], "sample_id": names, "column": header, "value": names,
                             "rule": rule, "remedy": remedy})
        return pd.concat([own, none], ignore_index=True).astype({"row": "int64"})


def _of(lines: pd.DataFrame, at: np.ndarray) -> pd.DataFrame:
    """The lines of these positions; `lines` is sorted by `at`."""
    keys = lines["at"].to_numpy()
    at = np.unique(at)
    low, high = np.searchsorted(keys, at, side="left"), np.searchsorted(keys, at, side="right")
    spans = [np.arange(a, b) for a, b in zip(low.tolist(), high.tolist(), strict=True) if b > a]
    return lines.iloc[np.concatenate(spans)] if spans else lines.iloc[:0]


def read_samples(table: Table) -> Samples:
    """The whole file of samples.

    Raises
    ------
    FileError, InputError
        The file cannot be read or has no rows.
    """
    parts, lines, flags = [], [], []
    for sheet, misfits in iter_sheets(table, _CHUNK_ROWS):
        for column, cells in sheet.per_kg:
            sheet.take_numbers(column, cells)
        parts.append(pd.DataFrame({
            "row": sheet.rows, "sample_id": np.array(sheet.ids, dtype=object), **sheet.numbers,
            **{name: np.array(words, dtype=object) for name, words in sheet.words.items()},
        }).astype({"row": "int64"}))
        parts.append(misfits[["row", "sample_id"]])
        lines += [misfits, sheet.rejected_frame()]
        flags.append(sheet.flags_frame(sheet.usable()))
    known = pd.concat(parts, ignore_index=True).sort_values("row", kind="stable", ignore_index=True)
    return _indexed(table, known, pd.concat(lines, ignore_index=True), pd.concat(flags, ignore_index=True))


def _indexed(table: Table, known: pd.DataFrame, lines: pd.DataFrame, flags: pd.DataFrame) -> Samples:
    """Rows by name: the first with a name keeps it, later ones and nameless ones are only problems."""
    labels = Labels(table)
    known = known[known["sample_id"] != ""].reset_index(drop=True)
    names = known["sample_id"].to_numpy(dtype=object)
    hashes, first, of = np.unique(hashes_of(list(names)), return_index=True, return_inverse=True)
    kept = np.sort(first)
    again = np.flatnonzero(first[of] != np.arange(len(names)))
    earlier = known["row"].to_numpy()[first[of[again]]]
    repeated = pd.DataFrame({
        "row": known["row"].to_numpy()[again], "sample_id": names[again], "column": labels.header("sample_id"),
        "value": names[again], "rule": [f"{DUPLICATE_RULE} {row}" for row in earlier.tolist()],
        "remedy": f"{OWN_NAME}, or remove the row; the first row is kept",
    })  # fmt: skip
    rows = known["row"].to_numpy(dtype=np.int64)[kept]
    columns = [name for name in known.columns if name not in ("row", "sample_id")]
    words = [name for name in columns if name in labels and not labels.columns[name].quantity.is_number]
    return Samples(
        labels=labels,
        names=names[kept],
        rows=rows,
        numbers={name: known[name].to_numpy(dtype=float)[kept] for name in columns if name not in words},
        words={name: known[name].fillna("").to_numpy(dtype=object)[kept] for name in words},
        problems=_placed(pd.concat([lines, repeated], ignore_index=True), rows),
        flags=_placed(flags, rows, only_known=True),
        hashes=hashes,
        order=np.searchsorted(kept, first),
        met=np.zeros(len(kept), dtype=bool),
    )


def _placed(lines: pd.DataFrame, rows: np.ndarray, only_known: bool = False) -> pd.DataFrame:
    """Lines with the position of their row among `rows`, -1 where it is none of them, sorted by it."""
    wanted = lines["row"].to_numpy(dtype=np.int64)
    slot = np.searchsorted(rows, wanted)
    hit = np.isin(wanted, rows)
    lines = lines.assign(at=np.where(hit, slot, -1))
    return (lines[hit] if only_known else lines).sort_values(["at", "row"], kind="stable", ignore_index=True)

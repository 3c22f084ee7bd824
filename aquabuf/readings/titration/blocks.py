"""The file of points as blocks: the rows of one sample, which stand together, cut into batches of whole blocks."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from itertools import groupby, islice

import numpy as np

from aquabuf.readings.cells import no_value_words
from aquabuf.readings.duplicates import SeenNames
from aquabuf.readings.table import Table
from aquabuf.readings.textfile import Record

__all__ = ["MOST_POINTS", "Batch", "Names", "batches", "scan_names"]

MOST_POINTS = 5_000  # of one titration
MOST_ROWS = 50_000  # of a batch, before it is closed behind the block at hand
NAMES_AT_ONCE = 20_000  # while they are scanned


@dataclass(frozen=True, slots=True, kw_only=True)
class Batch:
    """Blocks in the order of the file, one per sample; of one that cannot be used as a whole no row is kept."""

    records: list[Record]
    names: list[str]
    first_rows: np.ndarray  # int64, line of the first row of each block
    lengths: np.ndarray  # int64, rows of each block in the file
    again: np.ndarray  # int64, line where the name appears once more after another sample; 0 where it does not

    def __len__(self) -> int:
        return len(self.names)

    def block_of(self, rows: np.ndarray) -> np.ndarray:
        """Position of the block that each of these lines stands in."""
        return np.searchsorted(self.first_rows, rows, side="right") - 1


@dataclass(frozen=True, slots=True)
class Names:
    """Names of the whole file: where each stood first, and where it came again after another."""

    first: SeenNames
    again: SeenNames


def _namer(table: Table) -> Callable[[Record], str]:
    """The sample of each row, asked in order: a row without a name belongs to the sample before it."""
    fields = table.plan.id_fields
    absent = no_value_words(table.table_map.missing)
    last = ""

    def name(item: Record) -> str:
        nonlocal last
        record = item[1]
        parts = [record[at].strip() if at < len(record) else "" for at in fields]
        if all(part and part.lower() not in absent for part in parts):
            last = "_".join(parts)
        return last

    return name


def _blocks(table: Table) -> Iterator[tuple[str, Iterator[Record]]]:
    return groupby(table.records(), _namer(table))


def scan_names(table: Table) -> Names:
    """Names of all blocks of the file, in 16 bytes each and 16 more for one that comes again.

    Raises
    ------
    InputError
        The table has no rows.
    """
    found = Names(SeenNames(), SeenNames())
    blocks = ((name, next(rows)[0]) for name, rows in _blocks(table))
    while piece := list(islice(blocks, NAMES_AT_ONCE)):
        names, rows = [name for name, _ in piece], np.array([row for _, row in piece], dtype=np.int64)
        known = found.first.first_rows(names, rows) > 0
        if known.any():
            found.again.first_rows([names[i] for i in np.flatnonzero(known).tolist()], rows[known])
    return found


def batches(table: Table, size: int, names: Names) -> Iterator[Batch]:
    """The file in batches of at most `size` samples, fewer where they have many points.

    Of a sample whose rows do not stand together, and of one with more than `MOST_POINTS`, no rows are kept.
    """
    blocks: list[tuple[str, int, int]] = []
    records: list[Record] = []
    for name, rows in _blocks(table):
        head = list(islice(rows, MOST_POINTS + 1))
        length = len(head) + sum(1 for _ in rows)
        blocks.append((name, head[0][0], length))
        records += head if length <= MOST_POINTS else []
        if len(blocks) == size or len(records) >= MOST_ROWS:
            yield from _closed(blocks, records, names)
            blocks, records = [], []
    yield from _closed(blocks, records, names)


def _closed(blocks: list[tuple[str, int, int]], records: list[Record], names: Names) -> Iterator[Batch]:
    """The batch of these blocks without those that were met before; nothing where none is left."""
    words = [name for name, _, _ in blocks]
    first_rows = np.array([row for _, row, _ in blocks], dtype=np.int64)
    lengths = np.array([length for _, _, length in blocks], dtype=np.int64)
    again = names.again.rows_of(words)
    if again.any():
        records = _without(records, first_rows, again > 0)
    kept = (again == 0) | (names.first.rows_of(words) == first_rows)
    if kept.any():
        yield Batch(
            records=records,
            names=[words[i] for i in np.flatnonzero(kept).tolist()],
            first_rows=first_rows[kept],
            lengths=lengths[kept],
            again=again[kept],
        )


def _without(records: list[Record], first_rows: np.ndarray, left_out: np.ndarray) -> list[Record]:
    """The records that stand in none of the blocks left out."""
    rows = np.array([row for row, _ in records], dtype=np.int64)
    block = np.searchsorted(first_rows, rows, side="right") - 1
    return [records[i] for i in np.flatnonzero(~left_out[block]).tolist()]

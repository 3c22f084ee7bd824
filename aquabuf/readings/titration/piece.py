"""A batch of samples with its cells read: all that is at hand while they are judged."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from aquabuf.readings.schema import titration_quantities
from aquabuf.readings.sheet import Sheet
from aquabuf.readings.table import Table, read_sheet
from aquabuf.readings.titration.blocks import MOST_POINTS, Batch
from aquabuf.readings.titration.refusal import Labels, Refusal
from aquabuf.readings.titration.samples import Samples

__all__ = ["POINT_NAMES", "Piece", "read_piece"]

POINT_NAMES = frozenset(titration_quantities("points")) - {"sample_id"}
_NAME_REMEDY = "fill in the name of its sample; till then the sample above is refused, as a point of it may be missing"


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Piece:
    """Rows of the file of points, the sample that each belongs to, and the file of samples."""

    batch: Batch
    sheet: Sheet  # columns per kilogram still per kilogram
    block: np.ndarray  # position of the sample of each row of the sheet
    labels: Labels  # how columns are written in the file of points
    samples: Samples | None
    place: np.ndarray  # of each sample in `samples`, -1 where it is not there

    def __len__(self) -> int:
        return len(self.batch)

    def first_row(self, i: int) -> int:
        """Line of the first point of sample `i`."""
        return int(self.batch.first_rows[i])


def read_piece(batch: Batch, table: Table, labels: Labels, samples: Samples | None) -> tuple[Piece, list[Refusal]]:
    """The cells of a batch, and the samples that its rows, its cells or the file of samples refuse."""
    sheet, misfits = read_sheet(batch.records, table, _NAME_REMEDY)
    for column, cells in sheet.per_kg:
        sheet.take_numbers(column, cells)
    for column, number in labels.fill:
        if column.name in POINT_NAMES:
            sheet.fill(column, number)
    place = samples.find(batch.names) if samples else np.full(len(batch), -1)
    block = batch.block_of(sheet.rows)
    piece = Piece(batch=batch, sheet=sheet, block=block, labels=labels, samples=samples, place=place)
    refusals = [*_whole_refusals(batch), *_cell_refusals(piece, misfits)]
    return piece, refusals + (samples.refusals(place) if samples else [])


def _whole_refusals(batch: Batch) -> list[Refusal]:
    """Samples whose rows do not stand together, and those with too many."""
    found = []
    for i in np.flatnonzero(batch.again).tolist():
        rule = f"the points of a sample must stand together; this name comes again in row {batch.again[i]}"
        remedy = "move its rows together, or give each titration a name of its own"
        found.append(Refusal(i, "points", int(batch.first_rows[i]), "sample_id", batch.names[i], rule, remedy))
    for i in np.flatnonzero((batch.lengths > MOST_POINTS) & (batch.again == 0)).tolist():
        rule = f"a titration may have {MOST_POINTS} points at most"
        remedy = "leave out points, or give each titration a name of its own"
        value = f"{batch.lengths[i]} points"
        found.append(Refusal(i, "points", int(batch.first_rows[i]), "(rows)", value, rule, remedy))
    return found


def _cell_refusals(piece: Piece, misfits: pd.DataFrame) -> list[Refusal]:
    """Problems of single rows and cells, each refusing the whole sample; what is said of the sample counts once."""
    lines = pd.concat([misfits, piece.sheet.rejected_frame()], ignore_index=True)
    lines["block"] = piece.batch.block_of(lines["row"].to_numpy(dtype=np.int64))
    labels = piece.labels
    headers = [labels.header(name) for name in labels.columns if name not in POINT_NAMES | {"sample_id"}]
    of_sample = lines["column"].isin(headers)
    lines = lines[~(of_sample & lines.duplicated(["block", "column", "value", "rule"]))]
    columns = [lines[name] for name in ("block", "row", "column", "value", "rule", "remedy")]
    return [Refusal(int(i), "points", int(row), *cells) for i, row, *cells in zip(*columns, strict=True)]

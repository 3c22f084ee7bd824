"""Read titrations, whole or in pieces of bounded memory: the points of each sample and what is known of it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd

from aquabuf.errors import InputError
from aquabuf.readings.schema import schema_order, titration_quantities
from aquabuf.readings.titration.blocks import Batch, batches, scan_names
from aquabuf.readings.titration.files import Files, MapOf, open_both
from aquabuf.readings.titration.merge import Known, complete, merge
from aquabuf.readings.titration.needs import check_needs
from aquabuf.readings.titration.piece import POINT_NAMES, Piece, read_piece
from aquabuf.readings.titration.points import SORTED, Points, check_points
from aquabuf.readings.titration.refusal import refused_by, rejected_lines
from aquabuf.readings.titration.result import (
    COUNTS_PER_ML,
    TITRATION_FLAG_COLUMNS,
    TITRATION_REJECTED_COLUMNS,
    Titrations,
    join_titrations,
    sorted_lines,
)

__all__ = ["iter_titrations", "read_titrations"]

CHUNK_SAMPLES = 1_000


def _read_batch(batch: Batch, files: Files) -> Titrations:
    """One batch of the file of points as Titrations."""
    piece, refusals = read_piece(batch, files.points, files.labels, files.samples)
    sound = ~refused_by(refusals, len(piece))
    points, of_points = check_points(piece, sound)
    known, contradictions = merge(piece, sound)
    completed = complete(known, piece)
    refusals += [*of_points, *contradictions]
    refusals += check_needs(known, piece, sound & ~refused_by(contradictions, len(piece)))
    usable = ~refused_by(refusals, len(piece))
    flags = [_point_flags(piece, usable, points.moved), completed.flags_frame(usable)]
    flags = [_with_file("points", lines) for lines in flags]
    if files.samples is not None:
        flags.append(_with_file("samples", files.samples.flags_of(piece.place[usable])))
    rejected = rejected_lines(refusals, batch.names)
    return _titrations(batch, usable, points, known, rejected, sorted_lines(flags, TITRATION_FLAG_COLUMNS), files)


def _with_file(file: str, lines: pd.DataFrame) -> pd.DataFrame:
    return lines.assign(file=file)


def _point_flags(piece: Piece, usable: np.ndarray, moved: np.ndarray) -> pd.DataFrame:
    """Flags of the usable rows, what is said of a whole sample once; and the samples that were put in order."""
    batch = piece.batch
    flags = piece.sheet.flags_frame(usable[piece.block])
    of = batch.block_of(flags["row"].to_numpy(dtype=np.int64))
    repeated = flags.assign(of=of).duplicated(["of", "column", "what"]) & ~flags["column"].isin(POINT_NAMES)
    at = np.flatnonzero(moved & usable)
    order = pd.DataFrame({"row": batch.first_rows[at], "sample_id": [batch.names[i] for i in at.tolist()],
                          "column": "sequence", "value": "", "what": SORTED})
    return pd.concat([flags[~repeated], order], ignore_index=True)


def _samples_frame(batch: Batch, usable: np.ndarray, known: Known) -> pd.DataFrame:
    """A row per sample; of a refused one only its place and name."""
    columns: dict[str, object] = {"row": batch.first_rows, "sample_id": pd.Series(batch.names, dtype="str")}
    for name in schema_order((*known.words, *known.numbers), titration_quantities()):
        if name in known.numbers:
            columns[name] = np.where(usable, known.numbers[name], np.nan)
        else:
            columns[name] = pd.Series(np.where(usable, known.words[name], ""), dtype="str")
    return pd.DataFrame(columns)


def _titrations(batch: Batch, usable: np.ndarray, points: Points, known: Known, rejected: pd.DataFrame,
                flags: pd.DataFrame, files: Files) -> Titrations:
    """Points of the usable samples, with their counts brought to milliliters."""
    count = len(batch)
    at = np.flatnonzero(usable[points.block])
    block, added = points.block[at], points.added[at]
    per_ml = known.numbers.get("counts_per_ml", np.full(count, np.nan))
    per_ml = np.where(np.isnan(per_ml), COUNTS_PER_ML, per_ml)
    by_counts = points.added_by == "counts"
    return Titrations(
        samples=_samples_frame(batch, usable, known),
        usable=usable,
        start=np.searchsorted(block, np.arange(count + 1)).astype(np.int64),
        added=np.where(by_counts[block], added / per_ml[block], added),
        reading=points.reading[at],
        minutes=points.minutes[at],
        point_row=points.row[at],
        added_by=np.where(usable, points.added_by, ""),
        read_as=np.where(usable, points.read_as, ""),
        rejected=rejected,
        notes=(),
        flags=flags,
        headers=files.headers,
        acids=files.acids,
    )


def _with_left_over(piece: Titrations, files: Files) -> Titrations:
    """The last piece with the rows of the file of samples that belong to no points."""
    if files.samples is None:
        return piece
    left_over = _with_file("samples", files.samples.left_over(files.labels.file))
    return replace(piece, rejected=sorted_lines([piece.rejected, left_over], TITRATION_REJECTED_COLUMNS))


def iter_titrations(
    points: str | Path,
    samples: str | Path | None = None,
    *,
    points_map: MapOf = None,
    samples_map: MapOf = None,
    chunk_samples: int = CHUNK_SAMPLES,
) -> Iterator[Titrations]:
    """Read titrations piece by piece; memory does not grow with the file of points, but for 16 bytes per sample.

    Parameters
    ----------
    points
        CSV table with a row per point: name of the sample, titrant added since the start, pH or potential. What is
        known of the sample may stand there too, in each row or in the first of its rows.
    samples
        CSV table with a row per sample. It is held in memory as a whole.
    points_map, samples_map
        Map files (or their paths) where the headers are not this program's own.
    chunk_samples
        Titrations per piece, 1 or more; a piece has fewer where they have many points.

    Raises
    ------
    FileError, HeaderError, InputError
        When a file as a whole cannot be read; samples that cannot be used are in `rejected` of their piece.
    """
    if chunk_samples < 1:
        raise InputError(f"chunk_samples must be 1 or more; found {chunk_samples}.")
    files = open_both(points, samples, points_map, samples_map)
    names = scan_names(files.points)
    pieces = (_read_batch(batch, files) for batch in batches(files.points, chunk_samples, names))
    held = replace(next(pieces), notes=files.notes)
    for piece in pieces:
        yield held
        held = piece
    yield _with_left_over(held, files)


def read_titrations(
    points: str | Path,
    samples: str | Path | None = None,
    *,
    points_map: MapOf = None,
    samples_map: MapOf = None,
) -> Titrations:
    """Read all titrations of a file; see `iter_titrations`."""
    return join_titrations(iter_titrations(points, samples, points_map=points_map, samples_map=samples_map))

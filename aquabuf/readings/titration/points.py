"""The points of each sample: one column of titrant, one of readings, in an order in which the titrant never falls."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from aquabuf.readings.titration.piece import Piece
from aquabuf.readings.titration.refusal import Labels, Refusal, refused_by

__all__ = ["ADDED", "READ", "SORTED", "Points", "check_points"]

ADDED = {"volume": "titrant_volume_ml", "mass": "titrant_mass_g", "counts": "titrant_counts"}
READ = {"ph": "ph", "potential": "potential_mv"}
FEWEST_POINTS = 2
SORTED = "points of the sample sorted"


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Points:
    """Points of the samples of a batch, sample by sample and in order."""

    block: np.ndarray  # sample that each belongs to
    row: np.ndarray
    added: np.ndarray  # in the unit of the column
    reading: np.ndarray
    minutes: np.ndarray
    added_by: np.ndarray  # per sample: key of ADDED, "" where there is none
    read_as: np.ndarray  # per sample: key of READ, "" where there is none
    moved: np.ndarray  # per sample: whether its points were put in another order


def check_points(piece: Piece, good: np.ndarray) -> tuple[Points, list[Refusal]]:
    """Points of the good samples, in order, and the problems of these samples."""
    at = np.flatnonzero(good[piece.block])
    at, moved, refusals = _in_order(piece, at)
    added, added_by, more = _pick("the titrant added", ADDED, piece, at)
    reading, read_as, still_more = _pick("pH or potential", READ, piece, at)
    minutes = piece.sheet.numbers.get("minutes", np.full(len(piece.sheet), np.nan))[at]
    points = Points(block=piece.block[at], row=piece.sheet.rows[at], added=added, reading=reading, minutes=minutes,
                    added_by=added_by, read_as=read_as, moved=moved)
    refusals += [*more, *still_more, *_too_few(points)]
    return points, refusals + _falls(points, refused_by(refusals, len(piece)), piece.labels)


def _first_of(block: np.ndarray, wanted: np.ndarray) -> list[tuple[int, int]]:
    """Each sample that has a wanted row, with the position of the first."""
    at = np.flatnonzero(wanted)
    samples, first = np.unique(block[at], return_index=True)
    return list(zip(samples.tolist(), at[first].tolist(), strict=True))


def _in_order(piece: Piece, at: np.ndarray) -> tuple[np.ndarray, np.ndarray, list[Refusal]]:
    """Positions sorted by the number of each point where the sample has numbers; which samples were moved."""
    moved = np.zeros(len(piece), dtype=bool)
    if "sequence" not in piece.sheet.numbers:
        return at, moved, []
    number, block, rows = piece.sheet.numbers["sequence"][at], piece.block[at], piece.sheet.rows[at]
    header = piece.labels.header("sequence")
    numbered = np.bincount(block[np.isfinite(number)], minlength=len(piece)) > 0
    refusals = []
    for i, first in _first_of(block, np.isnan(number) & numbered[block]):
        rule = "each point needs its number where other points of the sample have one"
        refusals.append(Refusal(i, "points", int(rows[first]), header, "", rule, "fill it in, or empty the others"))
    order = np.lexsort((number, block))  # stable, so equal and missing numbers keep the order of the file
    number, sorted_rows = number[order], rows[order]
    again = np.zeros(len(at), dtype=bool)
    again[1:] = (number[1:] == number[:-1]) & (block[1:] == block[:-1])  # block is sorted either way
    for i, second in _first_of(block, again):
        rule = f"each point of a sample needs a number of its own; row {sorted_rows[second - 1]} has it too"
        value = piece.labels.text("sequence", number[second])
        refusals.append(Refusal(i, "points", int(sorted_rows[second]), header, value, rule, "correct one of them"))
    moved[block[1:][(np.diff(sorted_rows) < 0) & (block[1:] == block[:-1])]] = True
    return at[order], moved, refusals


def _pick(what: str, kinds: Mapping[str, str], piece: Piece, at: np.ndarray,
          ) -> tuple[np.ndarray, np.ndarray, list[Refusal]]:
    """The value of each point from the one column that its sample uses, and the kind of that column per sample."""
    block, rows, labels, count = piece.block[at], piece.sheet.rows[at], piece.labels, len(piece)
    columns = {word: piece.sheet.numbers[name][at] for word, name in kinds.items() if name in piece.sheet.numbers}
    value, kind, refusals = np.full(len(at), np.nan), np.full(count, "", dtype=object), []
    for word, column in columns.items():
        given = np.isfinite(column)
        for i, first in _first_of(block, given & (kind[block] != "")):
            other = labels.header(kinds[kind[i]])
            rule = f"mixed units: {what} must be in one column for all points of a sample; {other} has values too"
            remedy = "leave the cells of one column blank in this sample, or give the two titrations two names"
            header, text = labels.header(kinds[word]), labels.text(kinds[word], column[first])
            refusals.append(Refusal(i, "points", int(rows[first]), header, text, rule, remedy))
        own = np.isin(np.arange(count), block[given]) & (kind == "")
        kind[own] = word
        value = np.where(own[block], column, value)
    blank = np.isnan(value) & ~refused_by(refusals, count)[block]
    missing, points = np.bincount(block[blank], minlength=count), np.bincount(block, minlength=count)
    for i, first in _first_of(block, blank):
        header = labels.header(kinds[kind[i] or next(iter(columns))])
        text = f"blank in {missing[i]} of {points[i]} points"
        rule, remedy = f"each point needs {what}", "fill it in, or remove the row"
        refusals.append(Refusal(i, "points", int(rows[first]), header, text, rule, remedy))
    return value, kind, refusals


def _too_few(points: Points) -> list[Refusal]:
    count = np.bincount(points.block, minlength=len(points.moved))
    rule = f"a titration needs {FEWEST_POINTS} points or more"
    remedy = "add the other points, under the same sample_id"
    return [Refusal(i, "points", int(points.row[at]), "(rows)", "1 point", rule, remedy)
            for i, at in _first_of(points.block, count[points.block] < FEWEST_POINTS)]


def _falls(points: Points, refused: np.ndarray, labels: Labels) -> list[Refusal]:
    """Samples in which the titrant added is less than at the point before; it is a running total."""
    added, block, rows = points.added, points.block, points.row
    fall = np.zeros(len(added), dtype=bool)
    fall[1:] = (added[1:] < added[:-1]) & (block[1:] == block[:-1])
    remedy = "correct it" + (" or the numbers of the points" if "sequence" in labels
                             else ", or add a column sequence with the order of the points")
    remedy += "; where these are steps, give the running total"
    refusals = []
    for i, at in _first_of(block, fall & ~refused[block]):
        name = ADDED[points.added_by[i]]
        before = labels.with_unit(name, added[at - 1])
        rule = f"the titrant added since the start must not fall; it was {before} in row {rows[at - 1]}"
        refusals.append(Refusal(i, "points", int(rows[at]), labels.header(name), labels.text(name, added[at]), rule,
                                remedy))
    return refusals

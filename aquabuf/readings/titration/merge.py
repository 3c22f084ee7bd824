"""What is known of each sample: the columns of both files brought together, and what is missing or contradicts."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from aquabuf.readings.derive import density_kg_l, derive
from aquabuf.readings.schema import schema_order, titration_quantities
from aquabuf.readings.sheet import Sheet
from aquabuf.readings.titration.piece import POINT_NAMES, Piece
from aquabuf.readings.titration.refusal import Refusal

__all__ = ["Known", "complete", "merge"]

_SAME = 1e-9  # relative difference up to which two numbers are one
_REMARKS = "notes"  # may differ from row to row: they are kept side by side


@dataclass(slots=True)
class Known:
    """Values per sample of a batch, nan or "" where not known."""

    numbers: dict[str, np.ndarray]
    words: dict[str, np.ndarray]
    from_samples: dict[str, np.ndarray]  # bool per sample: the value stands in the file of samples only

    def has(self, name: str, count: int) -> np.ndarray:
        """Which samples have a number in this column."""
        return np.isfinite(self.numbers[name]) if name in self.numbers else np.zeros(count, dtype=bool)


def _present(values: np.ndarray) -> np.ndarray:
    return np.isfinite(values) if values.dtype == float else values != ""


def _differ(one: np.ndarray, other: np.ndarray) -> np.ndarray:
    if one.dtype != float:
        return one != other
    return np.abs(one - other) > _SAME * np.maximum(np.abs(one), np.abs(other))


def _collapse(values: np.ndarray, block: np.ndarray, count: int) -> tuple[np.ndarray, list[tuple[int, int, int]]]:
    """The first value of each sample; and (sample, first row, other row) of each one that has two.

    `block` is sorted; rows are positions in `values`.
    """
    at = np.flatnonzero(_present(values))
    of, first, back = np.unique(block[at], return_index=True, return_inverse=True)
    out = np.full(count, np.nan if values.dtype == float else "", dtype=values.dtype)
    out[of] = values[at[first]]
    other = np.flatnonzero(_differ(values[at], values[at[first]][back])) if len(at) else at
    samples, found = np.unique(back[other], return_index=True)
    return out, [(int(of[s]), int(at[first[s]]), int(at[other[f]])) for s, f in zip(samples, found, strict=True)]


def _remarks(words: np.ndarray, block: np.ndarray, count: int) -> np.ndarray:
    """All different remarks on each sample, joined."""
    out = np.full(count, "", dtype=object)
    for i, word in dict.fromkeys(zip(block.tolist(), words.tolist(), strict=True)):
        out[i] = f"{out[i]}; {word}" if out[i] and word else out[i] or word
    return out


def _columns(sheet: Sheet, at: np.ndarray) -> dict[str, np.ndarray]:
    """Columns of the sheet that belong to the sample, at these rows."""
    words = {name: np.array(cells, dtype=object)[at] for name, cells in sheet.words.items()}
    numbers = {name: values[at] for name, values in sheet.numbers.items() if name not in POINT_NAMES}
    return {**words, **numbers}


def merge(piece: Piece, good: np.ndarray) -> tuple[Known, list[Refusal]]:
    """Values of the good samples from their points and from the file of samples, and where they contradict."""
    at, labels, count = np.flatnonzero(good[piece.block]), piece.labels, len(piece)
    rows, block = piece.sheet.rows[at], piece.block[at]
    known, refusals = Known({}, {}, {}), []
    for name, values in _columns(piece.sheet, at).items():
        if name == _REMARKS:
            known.words[name] = _remarks(values, block, count)
            continue
        own, contradictions = _collapse(values, block, count)
        (known.numbers if own.dtype == float else known.words)[name] = own
        for i, first, other in contradictions:
            shown = labels.with_unit(name, values[first])
            rule = f"a sample has one value in this column; row {rows[first]} has {shown}"
            remedy = "correct one of them, or leave all but the first blank"
            header, text = labels.header(name), labels.text(name, values[other])
            refusals.append(Refusal(i, "points", int(rows[other]), header, text, rule, remedy))
    return known, refusals + _take_samples(known, piece)


def _take_samples(known: Known, piece: Piece) -> list[Refusal]:
    """Put the values of the file of samples beside those of the points; both may say a thing if they say the same."""
    samples, place, labels = piece.samples, piece.place, piece.labels
    if samples is None:
        return []
    refusals = []
    there, count = place >= 0, len(place)
    for name, column in (*samples.words.items(), *samples.numbers.items()):
        into = known.numbers if column.dtype == float else known.words
        given = np.full(count, np.nan if column.dtype == float else "", dtype=column.dtype)
        given[there] = column[place[there]]
        own = into.get(name, np.full_like(given, np.nan if column.dtype == float else ""))
        if name == _REMARKS:
            numbers = np.arange(count)
            into[name] = _remarks(np.concatenate([own, given]), np.concatenate([numbers, numbers]), count)
            continue
        both = _present(own) & _present(given)
        for i in np.flatnonzero(both & _differ(own, given)).tolist():
            shown = f"{samples.labels.with_unit(name, given[i])} in row {samples.rows[place[i]]}"
            rule = f"both files must say the same; {samples.labels.file} has {shown}"
            remedy = "correct one of them, or leave one blank"
            header, text = labels.header(name), labels.text(name, own[i])
            refusals.append(Refusal(i, "points", piece.first_row(i), header, text, rule, remedy))
        into[name] = np.where(_present(own), own, given)
        known.from_samples[name] = ~_present(own) & _present(given)
    return refusals


def complete(known: Known, piece: Piece) -> Sheet:
    """Fill gaps by the map files, bring columns per kilogram to liters and derive what follows; `known` is changed.

    Returns a sheet with a row per sample, at the line of its first point, that has the flags of all this.
    """
    batch = piece.batch
    sheet = Sheet(rows=batch.first_rows, decimal=".", missing=(), date_order="", ids=batch.names, numbers=known.numbers)
    both = [piece.labels] + ([piece.samples.labels] if piece.samples else [])
    for labels in both:
        for column, number in labels.fill:
            if column.name not in POINT_NAMES:
                sheet.fill(column, number)
    per_kg = schema_order([name for name in known.numbers if any(name in labels.per_kg for labels in both)],
                          titration_quantities())
    if per_kg:
        needed = np.logical_or.reduce([np.isfinite(known.numbers[name]) for name in per_kg])
        density = density_kg_l(sheet, per_kg[0], needed)
        for name in per_kg:
            known.numbers[name] = known.numbers[name] * density
    derive(sheet)
    return sheet

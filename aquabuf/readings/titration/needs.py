"""What a titration cannot do without: the size of the sample, the strength of the titrant, standards in pairs."""

from __future__ import annotations

import difflib

import numpy as np

from aquabuf.readings.titration.merge import Known
from aquabuf.readings.titration.piece import Piece
from aquabuf.readings.titration.refusal import Labels, Refusal

__all__ = ["check_needs"]

ONE_OF = (("sample_volume_ml", "sample_mass_g"), ("titrant_strength_eq_l", "titrant_strength_eq_kg"))
MOST_COMPARED = 500  # samples, beyond which no likeness of names is sought
LEAST_LIKE = 0.9
STANDARDS = tuple((f"standard_{i}_ph", f"standard_{i}_mv") for i in (1, 2, 3))


def _source(known: Known, piece: Piece, i: int, name: str) -> tuple[str, int, Labels]:
    """File, line and labels of the value that sample `i` has in a column."""
    if piece.samples is not None and name in known.from_samples and known.from_samples[name][i]:
        return "samples", int(piece.samples.rows[piece.place[i]]), piece.samples.labels
    return "points", piece.first_row(i), piece.labels


def _refusal(known: Known, piece: Piece, i: int, name: str, rule: str, remedy: str) -> Refusal:
    """A problem with the value that sample `i` has in a column."""
    file, row, labels = _source(known, piece, i, name)
    return Refusal(i, file, row, labels.header(name), labels.text(name, known.numbers[name][i]), rule, remedy)


def _how_to_give(piece: Piece, i: int, names: tuple[str, str]) -> str:
    """Which file would give one of these columns to sample `i`, and how."""
    either, points, samples = " or ".join(names), piece.labels, piece.samples
    if samples is None:
        there = [points.header(name) for name in names if name in points]
        if there:
            return f"fill in {' or '.join(there)} in row {piece.first_row(i)}, or give it in a file of samples"
        return f"add a column {either} to {points.file}, or to a file of samples with a row for each sample_id"
    file = samples.labels.file
    if piece.place[i] < 0:
        add = f"add a row of this name to {file} with {either}, or give it in {points.file}"
        return f"{_misspelled(piece, i)}{add}"
    there = [samples.labels.header(name) for name in names if name in samples.labels]
    if not there:
        return f"add a column {either} to {file} or to {points.file}"
    return f"fill in {' or '.join(there)} in row {samples.rows[piece.place[i]]} of {file}"


def _plain(name: str) -> str:
    return " ".join(name.casefold().split())


def _figures(name: str) -> str:
    return "".join(c for c in name if c.isdigit())


def _misspelled(piece: Piece, i: int) -> str:
    """A name of the file of samples that may be meant by that of sample `i`, as a question: like it, same figures."""
    samples = piece.samples
    if samples is None or len(samples.names) > MOST_COMPARED:
        return ""
    name = _plain(piece.batch.names[i])
    plain = {_plain(other): at for at, other in enumerate(samples.names.tolist()) if _figures(other) == _figures(name)}
    near = difflib.get_close_matches(name, plain, n=1, cutoff=LEAST_LIKE)
    if not near:
        return ""
    at = plain[near[0]]
    return f"is it {samples.names[at]} in row {samples.rows[at]} of {samples.labels.file}? Else "


def check_needs(known: Known, piece: Piece, good: np.ndarray) -> list[Refusal]:
    """What is missing or given twice in the good samples."""
    refusals = []
    for names in ONE_OF:
        one, other = (known.has(name, len(piece)) for name in names)
        for i in np.flatnonzero(good & ~one & ~other).tolist():
            rule = f"{names[0]} or {names[1]} must be known"
            remedy = _how_to_give(piece, i, names)
            refusals.append(Refusal(i, "points", piece.first_row(i), names[0], "", rule, remedy))
        for i in np.flatnonzero(good & one & other).tolist():
            labels = _source(known, piece, i, names[0])[2]
            first = f"{labels.header(names[0])} has {labels.with_unit(names[0], known.numbers[names[0]][i])}"
            rule = f"only one of {names[0]} and {names[1]} may be given; {first}"
            refusals.append(_refusal(known, piece, i, names[1], rule, "leave one of them blank"))
    for pair in STANDARDS:
        ph, potential = (known.has(name, len(piece)) for name in pair)
        for i in np.flatnonzero(good & (ph != potential)).tolist():
            given, lacking = pair if ph[i] else pair[::-1]
            rule = f"a standard needs its pH and its potential; {lacking} is not given"
            refusals.append(_refusal(known, piece, i, given, rule, f"fill in {lacking}, or leave both blank"))
    return refusals

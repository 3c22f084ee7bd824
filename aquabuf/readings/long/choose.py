"""Which result a sample's quantity is taken from, where there are several."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.readings.long.parse import Numbers, shown
from aquabuf.readings.long.scan import Line, Scan, listed

__all__ = ["DIFFERS_RULE", "Choice", "choose"]

DIFFERS_RULE = "a sample has one value of a quantity, and this one differs from its first"
_SAME = 1e-9  # relative, so that a value given in two units is one value


@dataclass(frozen=True, slots=True)
class Choice:
    """Results that are used, one per sample and quantity, and the others."""

    used: NDArray[np.intp]
    quantity: NDArray[np.intp]  # of each used result, place in `names`
    names: list[str]  # canonical columns
    refused: list[Line]
    notes: list[str]


def choose(scan: Scan, numbers: Numbers) -> Choice:
    """One result per sample and quantity: the lowest rank, and the first of several in one rank.

    A later one in the same rank that says the same is dropped; one that differs is refused. Refused results and blanks
    play no part, so that a result of a higher rank takes the place of a refused one.
    """
    names = list(dict.fromkeys(meaning.form.quantity.name for meaning in scan.meanings))
    of_kind = np.array([names.index(meaning.form.quantity.name) for meaning in scan.meanings], dtype=np.intp)
    ranks = np.array([meaning.rank for meaning in scan.meanings], dtype=np.intp)
    there = np.flatnonzero(np.isfinite(numbers.house))
    sample, quantity, rank = scan.sample[there], of_kind[scan.kind[there]], ranks[scan.kind[there]]
    order = np.lexsort((there, rank, quantity, sample))  # results stand in the order of the file
    there, sample, quantity, rank = there[order], sample[order], quantity[order], rank[order]
    first = np.ones(there.size, dtype=bool)
    first[1:] = (sample[1:] != sample[:-1]) | (quantity[1:] != quantity[:-1])
    best = np.flatnonzero(first)[np.cumsum(first) - 1]  # place of the used one, for each
    again = ~first & (rank == rank[best])
    house, spread = numbers.house[there], numbers.spread[there]
    same = np.abs(house - house[best]) <= _SAME * np.abs(house[best])
    same &= np.isnan(spread) == np.isnan(spread[best])  # half a limit is not a measured value
    differs = again & ~same
    notes = _notes(scan, int((again & same).sum()), there[~first & ~again])
    return Choice(there[first], quantity[first], names, _refused(scan, there, best, differs), notes)


def _notes(scan: Scan, repeated: int, outranked: NDArray[np.intp]) -> list[str]:
    found = [f"{repeated:,} results say again what the sample already has"] if repeated else []
    if outranked.size:
        codes, counts = np.unique(scan.kind[outranked], return_counts=True)
        words: Counter[str] = Counter()
        for code, count in zip(codes.tolist(), counts.tolist(), strict=True):
            kind = scan.kinds[code]
            fraction = f" [{kind.fraction.strip()}]" if kind.fraction.strip() else ""
            words[kind.characteristic.strip() + fraction] += count
        found.append(f"{outranked.size:,} results stand back behind a form that the map prefers: {listed(words)}")
    return found


def _refused(scan: Scan, there: NDArray[np.intp], best: NDArray[np.intp], differs: NDArray[np.bool_]) -> list[Line]:
    lines = []
    for place in np.flatnonzero(differs).tolist():
        at, kept = int(there[place]), int(there[best[place]])
        kind = scan.kinds[int(scan.kind[at])]
        remedy = f"{shown(scan, kept)} in row {int(scan.line[kept])} is used; correct one, or leave replicates out"
        name, line, sample = kind.characteristic.strip(), int(scan.line[at]), int(scan.sample[at])
        lines.append((line, sample, name, shown(scan, at), DIFFERS_RULE, remedy))
    return lines

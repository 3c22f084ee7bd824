"""The sensitivity class of each lake under a scheme: by its value, by chance, in words, and where schemes disagree."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtr

from aquabuf.arrays import worded
from aquabuf.assess.lake.schemes import QUANTITIES, Scheme
from aquabuf.errors import InputRangeError

__all__ = ["NO_CLASS", "SECOND_SHARE", "basis_words", "between_classes", "class_names", "class_probabilities",
           "classify", "definition_used", "disagreements", "normal_probabilities", "second_class", "values_used"]

Array = NDArray[np.float64]
Index = NDArray[np.intp]
Words = NDArray[np.object_]

NO_CLASS = -1        # index where the value is missing
SECOND_SHARE = 0.10  # probability from which a second class is named; practice


def classify(scheme: Scheme, values: ArrayLike) -> Index:
    """Index of the class of each value, 0 the worst; NO_CLASS where it is missing. Values in eq/L, or - for pH."""
    x = np.asarray(values, dtype=float)
    return np.where(np.isnan(x), NO_CLASS, np.searchsorted(scheme.cuts, x, side="right"))


def class_probabilities(scheme: Scheme, draws: ArrayLike) -> Array:
    """Share of the draws in each class; (lakes, draws) gives (lakes, classes), worst first.

    Missing draws do not count; a lake without any has nan.
    """
    x = np.asarray(draws, dtype=float)
    known = np.count_nonzero(~np.isnan(x), axis=-1)
    at_least = [np.count_nonzero(x >= cut, axis=-1) for cut in scheme.cuts]  # never true where missing
    counts = np.stack([known, *at_least, np.zeros_like(known)], axis=-1)
    return (counts[..., :-1] - counts[..., 1:]) / np.where(known > 0, known, np.nan)[..., None]


def normal_probabilities(scheme: Scheme, value: ArrayLike, u: ArrayLike) -> Array:
    """Probability of each class for normal errors of standard uncertainty `u`; (lakes,) gives (lakes, classes).

    Without uncertainty (u = 0) the class of the value has it all. Raises InputRangeError for a negative `u`.
    """
    x, spread = np.broadcast_arrays(np.asarray(value, dtype=float), np.asarray(u, dtype=float))
    negative = spread < 0.0
    if negative.any():
        raise InputRangeError(f"a standard uncertainty must be 0 or more; {int(negative.sum())} of {negative.size} are "
                              f"below (first: {spread[negative][0]:g}). Give its size without a sign.", negative)
    distance = x[..., None] - scheme.cuts
    wide = spread[..., None]
    at_least = np.where(wide > 0.0, ndtr(distance / np.where(wide > 0.0, wide, 1.0)), distance >= 0.0)
    ends = np.ones((*x.shape, 1))
    share = np.concatenate([ends, at_least, 0.0 * ends], axis=-1)
    return np.where(np.isnan(x + spread)[..., None], np.nan, share[..., :-1] - share[..., 1:])


# ------------------------------------------------------------------ which definition the class rests on


def definition_used(scheme: Scheme, values: Mapping[str, ArrayLike]) -> Index:
    """For each lake the place in `scheme.definitions` of the first that it has a value of; NO_CLASS if of none.

    `values` holds an array for each of those definitions.
    """
    known = np.stack(np.broadcast_arrays(*(~np.isnan(np.asarray(values[d], dtype=float)) for d in scheme.definitions)))
    return np.where(known.any(axis=0), np.argmax(known, axis=0), NO_CLASS)


def values_used(scheme: Scheme, values: Mapping[str, ArrayLike], used: Index) -> Array:
    """Each lake's value, or its draws, of the definition that `definition_used` found for it; `used` must broadcast."""
    arrays = [np.asarray(values[d], dtype=float) for d in scheme.definitions]
    return np.select([used == k for k in range(len(arrays))], arrays, np.nan)


def basis_words(scheme: Scheme, used: Index) -> Words:
    """What each lake's class rests on, and where that only stands in for what the scheme was made for."""
    meant = QUANTITIES[scheme.quantity]
    words = [meant, *(f"{QUANTITIES[d]}, standing in for {meant}" for d in scheme.stand_ins)]
    return worded(used.size, *((used == k, text) for k, text in enumerate(words)))


# ------------------------------------------------------------------ words


def class_names(scheme: Scheme, index: Index) -> Words:
    """Name of each lake's class, empty where it has none."""
    return np.array([c.name for c in scheme.classes] + [""], dtype=object)[index]  # NO_CLASS takes the last


def second_class(scheme: Scheme, index: Index, probabilities: Array) -> Words:
    """The most probable class beside the one found, "X (30 %)"; empty below SECOND_SHARE and where no class was found.

    index (lakes,), probabilities (lakes, classes).
    """
    rows = np.arange(index.size)
    others = np.where(np.isnan(probabilities), 0.0, probabilities)
    others[rows, index] = -1.0
    second = np.argmax(others, axis=1)
    share = others[rows, second]
    percent = np.where((share >= SECOND_SHARE) & (index != NO_CLASS), np.rint(100.0 * share), -1.0).astype(np.intp)
    return _per_combination([second, percent], lambda code: (
        f"{scheme.classes[code[0]].name} ({code[1]} %)" if code[1] >= 0 else ""))


def between_classes(scheme: Scheme, index: Index, probabilities: Array) -> Words:
    """Plain words of each lake's class, and which other it could be; empty where it has none."""
    words = np.array([c.words for c in scheme.classes] + [""], dtype=object)[index]
    second = second_class(scheme, index, probabilities)
    return np.where(second != "", words + "; could also be " + second, words)


# ------------------------------------------------------------------ disagreement


def disagreements(results: Mapping[tuple[str, str], Index], schemes: Mapping[str, Scheme]) -> Words:
    """Where a lake's class depends on the definition of ANC or on the scheme, in words; empty where it does not.

    results : class indexes (lakes,) by (name of the scheme, definition). Within a scheme the classes by definition are
    set side by side. Schemes have different classes, so between them only "at risk" is compared, each on the first
    definition of its own order that the lake has.
    """
    used = {name: schemes[name] for name, _ in results}
    by_scheme = {name: _by_definition(scheme, results) for name, scheme in used.items()}
    parts = []
    for name, scheme in used.items():
        inner = _within(scheme, by_scheme[name])
        parts.append(np.where(inner != "", f"{name} (" + inner + ")", "") if len(used) > 1 else inner)
    if len(used) > 1:
        parts.append(_between(used, by_scheme))
    out = parts[0]
    for part in parts[1:]:
        out = out + np.where((out != "") & (part != ""), "; ", "") + part
    return out


def _by_definition(scheme: Scheme, results: Mapping[tuple[str, str], Index]) -> dict[str, Index]:
    """Class indexes of one scheme by definition: in the scheme's own order, then any that it does not name."""
    given = [d for name, d in results if name == scheme.name]
    return {d: results[scheme.name, d] for d in dict.fromkeys((*scheme.definitions, *given)) if d in given}


def _within(scheme: Scheme, found: Mapping[str, Index]) -> Words:
    """Class by each definition where the known ones are not all the same."""
    def say(code: tuple[int, ...]) -> str:
        known = {d: k for d, k in zip(found, code, strict=True) if k != NO_CLASS}
        if len(set(known.values())) < 2:
            return ""
        return "; ".join(f"{QUANTITIES[d]}: {scheme.classes[k].name}" for d, k in known.items())

    return _per_combination(list(found.values()), say)


def _between(used: Mapping[str, Scheme], by_scheme: Mapping[str, Mapping[str, Index]]) -> Words:
    """Which schemes call a lake at risk and which do not, where both happen."""
    columns: list[Index] = []
    for name, scheme in used.items():
        risk = np.array([c.at_risk for c in scheme.classes] + [False])
        code = np.full(next(iter(by_scheme[name].values())).shape, NO_CLASS, dtype=np.intp)
        for place, index in reversed(list(enumerate(by_scheme[name].values()))):
            code = np.where(index == NO_CLASS, code, 2 * place + risk[index])
        columns.append(code)

    def say(code: tuple[int, ...]) -> str:
        sides: dict[bool, list[str]] = {True: [], False: []}
        for name, c in zip(used, code, strict=True):
            if c != NO_CLASS:
                sides[c % 2 == 1].append(f"{name} ({QUANTITIES[list(by_scheme[name])[c // 2]]})")
        differ = all(sides.values())
        return f"at risk by {', '.join(sides[True])} but not by {', '.join(sides[False])}" if differ else ""

    return _per_combination(columns, say)


def _per_combination(columns: Sequence[Index], say: Callable[[tuple[int, ...]], str]) -> Words:
    """Text of each row of `columns`, worked out once per combination that occurs."""
    codes, which = np.unique(np.stack(columns, axis=1), axis=0, return_inverse=True)
    return np.array([say(tuple(int(c) for c in code)) for code in codes], dtype=object)[which.reshape(-1)]

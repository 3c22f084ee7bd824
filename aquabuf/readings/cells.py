"""The text of cells as numbers, words and dates. Nothing is guessed: what does not fit is a `Problem`."""

from __future__ import annotations

import datetime
import math
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

import numpy as np

from aquabuf.readings.schema import Quantity
from aquabuf.units import key

__all__ = ["DATE_ORDERS", "Numbers", "Problem", "no_value_words", "parse_choice", "parse_date", "parse_numbers"]

MISSING = frozenset({"", "na", "n/a", "n.a.", "-", "--", "nan", "null"})
DATE_ORDERS = ("day-month-year", "month-day-year")
_HUGE = 1e100  # beyond it a conversion could overflow
_NOT_PLAIN = re.compile(r"[^0-9eE+\-.,\n \t]")
_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)
_THOUSANDS = re.compile(r"[+-]?\d{1,3}(?:[,.' \u00a0\u202f]\d{3})+(?:[.,]\d+)?")
_BELOW_WORDS = re.compile(r"(?:nd|n\.d\.|bdl|bql|b\.?d\.?|<?\s*(?:lod|loq|mdl|dl)|u)", re.IGNORECASE)
_MONTHS = dict(zip("jan feb mar apr may jun jul aug sep oct nov dec".split(), range(1, 13), strict=True))  # noqa: SIM905


@dataclass(frozen=True, slots=True)
class Problem:
    """Why the cell at position `at` cannot be used."""

    at: int
    rule: str
    remedy: str


@dataclass(slots=True)
class Numbers:
    """A parsed column: values in the unit of the file, nan where missing or bad."""

    values: np.ndarray
    problems: list[Problem] = field(default_factory=list)
    below: list[int] = field(default_factory=list)  # positions of "<x"; the value there is x


def no_value_words(missing: Iterable[object] = ()) -> frozenset[str]:
    """Words that stand for "no value", in lower case: the usual ones and those of a map file."""
    return MISSING | {str(word).strip().lower() for word in missing}


def _bad_number(cell: str, decimal: str) -> tuple[str, str]:
    """Rule and remedy for a cell that is no number."""
    lower = cell.lower()
    if cell.startswith((">", "≥")):
        return "a value above the range of the method is not a number", "enter the diluted result or leave it blank"
    if lower.lstrip("+-") in ("inf", "infinity", "∞"):
        return "must be finite", "leave the cell blank if there is no value"
    if _THOUSANDS.fullmatch(cell):
        return "thousands separators are not read", "write the number without them, e.g. 1234.5"
    if _BELOW_WORDS.fullmatch(cell):
        return (
            "a value below detection needs its limit",
            "write it as <0.02, or add the word to 'missing' in a map file",
        )
    if decimal == "." and _NUMBER.fullmatch(cell.replace(",", ".", 1)):
        return "the decimal sign of this file is a point", 'write 7.4, or say decimal = "," in a map file'
    if decimal == "," and _NUMBER.fullmatch(cell):
        return "the decimal sign of this file is a comma", 'write 7,4, or say decimal = "." in a map file'
    return "must be a number", "correct it or leave it blank; units belong in the header"


def _one_number(cell: str, decimal: str) -> tuple[float, bool] | None:
    """Value and whether it is "<value"; None when the text is neither."""
    text = cell.replace("−", "-")
    below = text.startswith(("<", "≤"))
    text = text.lstrip("<≤").lstrip() if below else text
    if decimal == ",":
        if "." in text:
            return None
        text = text.replace(",", ".", 1)
    return (float(text), below) if _NUMBER.fullmatch(text) else None


def _fast(cells: Sequence[str], decimal: str) -> np.ndarray | None:
    """All cells at once; None when one of them needs a closer look."""
    joined = "\n".join(cells)
    if _NOT_PLAIN.search(joined) or ("." if decimal == "," else ",") in joined:
        return None
    if decimal == ",":
        cells = [cell.replace(",", ".") for cell in cells]
    try:
        return np.array([float(cell) if cell else math.nan for cell in cells])
    except ValueError:
        return None


def parse_numbers(
    cells: Sequence[str], quantity: Quantity, *, decimal: str = ".", missing: Sequence[object] = ()
) -> Numbers:
    """Numbers of one column; `missing` adds words and numbers that stand for "no value" (such as -9999)."""
    own_words = no_value_words(missing)
    values = _fast(cells, decimal)
    found = Numbers(np.full(len(cells), np.nan)) if values is None else Numbers(values)
    if values is None:
        for at, raw in enumerate(cells):
            cell = raw.strip()
            if cell.lower() not in own_words:
                _take(found, at, cell, quantity, decimal)
    numbers = [float(word) for word in missing if isinstance(word, int | float)]
    if numbers:
        found.values[np.isin(found.values, numbers)] = np.nan
    for at in np.flatnonzero(np.abs(found.values) > _HUGE).tolist():
        found.values[at] = np.nan
        found.problems.append(Problem(at, "must be finite", "leave the cell blank if there is no value"))
    return found


def _take(found: Numbers, at: int, cell: str, quantity: Quantity, decimal: str) -> None:
    """Put one cell into `found`, as a value or as a problem."""
    parsed = _one_number(cell, decimal)
    if parsed is None:
        found.problems.append(Problem(at, *_bad_number(cell, decimal)))
    elif parsed[1] and not (quantity.below_limit and parsed[0] > 0):
        rule = f"'<' has no use for {quantity.base}" if parsed[0] > 0 else "a detection limit must be above zero"
        found.problems.append(Problem(at, rule, "enter the value itself or leave it blank"))
    else:
        found.values[at] = parsed[0]
        if parsed[1]:
            found.below.append(at)


def parse_choice(cell: str, quantity: Quantity) -> str | None:
    """The word of the schema that a cell means, None when it means none."""
    return dict(quantity.choices).get(key(cell))


def _full_year(text: str) -> int:
    """Two digits: 69 to 99 are 1969 to 1999, 00 to 68 are 2000 to 2068 (the POSIX rule)."""
    year = int(text)
    return year if len(text) == 4 else year + (1900 if year >= 69 else 2000)


def _date(year: int, month: int, day: int) -> datetime.date | None:
    try:
        return datetime.date(year, month, day)
    except ValueError:
        return None


def parse_date(cell: str, order: str = "") -> datetime.date | None:
    """The day a text means, None when it means none or could mean two.

    Read: 2024-05-31 (a clock time may follow), 31 May 2024, 31-May-24, 31.5.2024 (points: day first), and
    31/5/2024 where one number is above 12 or both are equal, or where `order` says which comes first.
    """
    text = cell.strip()
    iso = re.match(r"(\d{4})-(\d{1,2})-(\d{1,2})(?:[T ].*)?$", text)
    if iso:
        return _date(int(iso[1]), int(iso[2]), int(iso[3]))
    named = re.match(r"(\d{1,2})[ \-/.]+([A-Za-z]{3})[a-z]*\.?[ \-/,.]+(\d{4}|\d{2})$", text)
    if named and named[2].lower() in _MONTHS:
        return _date(_full_year(named[3]), _MONTHS[named[2].lower()], int(named[1]))
    plain = re.match(r"(\d{1,2})([/.\-])(\d{1,2})\2(\d{4}|\d{2})(?: .*)?$", text)
    if not plain:
        return None
    first, second, year = int(plain[1]), int(plain[3]), _full_year(plain[4])
    if (not order and plain[2] == ".") or order == DATE_ORDERS[0] or (not order and (first > 12 or first == second)):
        return _date(year, second, first)
    if order == DATE_ORDERS[1] or second > 12:
        return _date(year, first, second)
    return None

"""Trends in words: direction and size first, then how sure."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from aquabuf.assess.lake.trend import CORRECTED_YEARS, MIN_PAIRS, MIN_YEARS, Step, Trend

__all__ = ["LIKELY", "SURE", "Change", "direction_of", "short", "step_words", "trend_words"]

SURE, LIKELY = 0.05, 0.10  # two-sided p below which a trend is sure, or likely; practice, no source


@dataclass(frozen=True, slots=True)
class Change:
    """A change of method, the first year of the later one, and what it did to the values."""

    before: str
    after: str
    year: int
    step: Step


def _judged_p(trend: Trend) -> float:
    """The p that decides: with serial correlation counted where that can be told.

    Where it cannot, p of independent values decides over one value per year; several of one year are never independent,
    so then nothing can be sure (nan).
    """
    if np.isfinite(trend.p_corrected):
        return trend.p_corrected
    return trend.p if trend.per_year == 1 else np.nan


def direction_of(trend: Trend) -> str:
    """Rising or falling where at least likely, no sure trend where it is not, blank where nothing can be told."""
    if trend.status != "ok":
        return ""
    if not _judged_p(trend) < LIKELY:
        return "no sure trend"
    return "rising" if trend.s > 0.0 else "falling"


def trend_words(trend: Trend, unit: str) -> str:
    """The trend in one line; `unit` has a leading blank, or is empty."""
    if trend.status != "ok":
        what, found, needed = {"too few years": ("years with a value", trend.years, MIN_YEARS),
                               "too few pairs": ("pairs that can be compared", trend.pairs, MIN_PAIRS)}[trend.status]
        return f"no trend can be told: {found} {what}, {needed} are needed"
    decimals = _decimals(trend.slope, trend.low, trend.high)
    low, high = (_figure(end, decimals) for end in (trend.low, trend.high))
    verb = {"rising": "rises", "falling": "falls"}.get(direction_of(trend))
    size = _figure(abs(trend.slope), decimals)
    if verb is None:
        verb, size = "no sure trend:", _figure(trend.slope, decimals, sign=True)
    elif trend.slope == 0.0:
        verb, size = f"{verb} by less than the values resolve:", "0"
    else:
        verb = f"{verb} by"
        if trend.slope < 0.0:  # the verb says the direction, so the interval is turned with it
            low, high = (_figure(-end, decimals) for end in (trend.high, trend.low))
    return f"{verb} {size}{unit} per year ({low} to {high}), {_certainty(trend)}"


def _certainty(trend: Trend) -> str:
    """How sure the direction is."""
    if not np.isfinite(trend.p_corrected):
        known = f"which {trend.years} years cannot tell (more than {CORRECTED_YEARS} are needed)"
        word = "sure" if trend.p < SURE else "likely" if trend.p < LIKELY else f"p {_p(trend.p)}"
        return f"{word} if {'years' if trend.per_year == 1 else 'seasons and years'} are independent, {known}"
    if trend.p_corrected < SURE:
        return "sure even with serial correlation counted"
    if trend.p_corrected < LIKELY:
        return f"likely (p {_p(trend.p_corrected)} with serial correlation counted)"
    without = f", {_p(trend.p)} without" if trend.p < LIKELY else ""
    return f"p {_p(trend.p_corrected)} with serial correlation counted{without}"


def step_words(changes: Sequence[Change], unit: str) -> list[str]:
    """What a change of method did to the values, the surest of several; nothing where there is none."""
    if not changes:
        return []
    first = changes[0]
    what = f"the change of method in {first.year} ({first.before} to {first.after})"
    more = f"; {len(changes) - 1} more change{'s' if len(changes) > 2 else ''} of method" if len(changes) > 1 else ""
    if not np.isfinite(first.step.size):
        return [f"what {what} did cannot be told, so values before and after it are not compared{more}"]
    decimals = _decimals(first.step.size, first.step.low, first.step.high)
    low, high = (_figure(end, decimals) for end in (first.step.low, first.step.high))
    size = _figure(first.step.size, decimals, sign=True)
    verb = "moved" if first.step.p < LIKELY else "may have moved"
    return [f"{what} {verb} the values by {size}{unit} ({low} to {high}, p {_p(first.step.p)}), not part of the trend"
            f"{more}"]


def short(value: float) -> str:
    """A number with two significant digits, no exponent."""
    return _figure(value, _decimals(value))


def _decimals(*values: float) -> int:
    """Decimals that show two digits of the largest of some finite values."""
    largest = max((abs(v) for v in values if np.isfinite(v)), default=0.0)
    largest = float(f"{largest:.1e}")  # 0.997 is 1.0 with two digits
    return 0 if largest == 0.0 else int(np.clip(1.0 - np.floor(np.log10(largest)), 0, 9))


def _figure(value: float, decimals: int, *, sign: bool = False) -> str:
    """A number with fixed decimals and no minus before zero; an end that is not bounded in words."""
    if not np.isfinite(value):
        return "no bound"
    value = round(value, decimals) + 0.0
    return f"{value:{'+' if sign and value else ''}.{decimals}f}"


def _p(p: float) -> str:
    """A probability to two digits."""
    return "below 0.001" if p < 0.001 else f"{p:.2g}"

"""Trends in words."""

import numpy as np
import pytest

from aquabuf.assess.lake.trend import Step, Trend
from aquabuf.assess.lake.trend_words import Change, direction_of, short, step_words, trend_words


def found(**changes):
    """A sure rise of 1.1 per year over 25 years, but for some figures."""
    known = {"n": 25, "years": 25, "per_year": 1, "pairs": 300, "s": 250.0, "variance": 1833.0, "status": "ok", "p": 1e-6,
             "p_corrected": 0.001, "slope": 1.14, "low": 0.9, "high": 1.36, "z": 5.8, "tied": 0.0}
    return Trend(**{**known, **changes})


WORDS = {
    "rises by 1.1 µeq/L per year (0.9 to 1.4), sure even with serial correlation counted": {},
    "falls by 3.0 µeq/L per year (2.7 to 3.4), sure even with serial correlation counted":
        {"s": -250.0, "slope": -3.0, "low": -3.4, "high": -2.7},
    "rises by 1.1 µeq/L per year (0.9 to 1.4), likely (p 0.072 with serial correlation counted)": {"p_corrected": 0.072},
    "no sure trend: +1.1 µeq/L per year (-0.2 to 1.4), p 0.23 with serial correlation counted, below 0.001 without":
        {"p_corrected": 0.23, "low": -0.2},
    "no sure trend: -0.030 µeq/L per year (-0.090 to 0.020), p 0.5 with serial correlation counted":
        {"p": 0.4, "p_corrected": 0.5, "slope": -0.03, "low": -0.09, "high": 0.02},
    "rises by 1.1 µeq/L per year (0.9 to 1.4), sure if years are independent, which 9 years cannot tell (more than 10 are needed)":
        {"p_corrected": np.nan, "years": 9},
    "no sure trend: +1.1 µeq/L per year (0.9 to 1.4), sure if seasons and years are independent, which 9 years cannot tell (more than 10 are needed)":
        {"p_corrected": np.nan, "years": 9, "per_year": 12},
    "rises by less than the values resolve: 0 µeq/L per year (0.000 to 0.045), sure even with serial correlation counted":
        {"slope": 0.0, "low": 0.0, "high": 0.045},
    "rises by 1.1 µeq/L per year (no bound to 1.4), sure even with serial correlation counted": {"low": -np.inf},
    "no trend can be told: 7 years with a value, 8 are needed": {"status": "too few years", "years": 7},
    "no trend can be told: 12 pairs that can be compared, 28 are needed": {"status": "too few pairs", "pairs": 12},
}


@pytest.mark.parametrize(("words", "changes"), WORDS.items())
def test_trend_words(words, changes):
    """Direction, size and interval first, then how sure."""
    assert trend_words(found(**changes), " µeq/L") == words


def test_a_quantity_without_unit():
    """pH has none."""
    assert trend_words(found(slope=0.021, low=0.011, high=0.031), "").startswith("rises by 0.021 per year (0.011 to 0.031)")


@pytest.mark.parametrize(("changes", "direction"), [
    ({}, "rising"), ({"s": -1.0}, "falling"), ({"p_corrected": 0.1}, "no sure trend"), ({"status": "too few years"}, ""),
    ({"p_corrected": np.nan}, "rising"), ({"p_corrected": np.nan, "p": 0.2}, "no sure trend"),
    ({"p_corrected": np.nan, "per_year": 4}, "no sure trend")])
def test_direction(changes, direction):
    """By the corrected p where there is one; several values of a year without it are never sure."""
    assert direction_of(found(**changes)) == direction


def test_step_words():
    """Size, interval and p of the surest change; the others are counted."""
    sure = Change("a", "b", 2005, Step(size=12.3, low=8.0, high=16.0, p=0.004))
    unsure = Change("b", "c", 2010, Step(size=-2.0, low=-6.0, high=2.0, p=0.4))
    unknown = Change("b", "c", 2010, Step(size=np.nan, low=np.nan, high=np.nan, p=np.nan))
    assert step_words([], "") == []
    assert step_words([sure], " µeq/L") == [
        "the change of method in 2005 (a to b) moved the values by +12 µeq/L (8 to 16, p 0.004), not part of the trend"]
    assert step_words([unsure, unknown, unknown], "") == [
        "the change of method in 2010 (b to c) may have moved the values by -2.0 (-6.0 to 2.0, p 0.4), not part of the trend; "
        "2 more changes of method"]
    assert step_words([unknown], "") == [
        "what the change of method in 2010 (b to c) did cannot be told, so values before and after it are not compared"]


@pytest.mark.parametrize(("value", "words"), [(0.997, "1.0"), (-3.04, "-3.0"), (123.0, "123"), (0.0, "0"), (0.00123, "0.0012")])
def test_short(value, words):
    """Two digits, no exponent."""
    assert short(value) == words

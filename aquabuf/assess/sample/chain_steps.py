"""What a chain from reading to verdict is made of."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

__all__ = ["AT_RISK", "BROKEN", "FOUND", "INSIDE", "KEPT", "MET", "NOT_MET", "OUTSIDE", "REFUSED", "USED", "Chain",
           "Part", "Step", "label_and_words", "quantity_label", "six"]

INSIDE, OUTSIDE = "inside", "OUTSIDE"  # its range
MET, NOT_MET = "met", "NOT MET"        # a check
KEPT, BROKEN = "kept", "BROKEN"        # a rule
REFUSED = "REFUSED"                    # a row
FOUND, USED = "FOUND", "used"          # something suspicious; a method or choice
AT_RISK = "AT RISK"                    # a class
_CAPITALS = {"ph": "pH", "anc": "ANC", "dic": "DIC", "doc": "DOC", "tds": "TDS", "pco2": "pCO2", "co2": "CO2"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Step:
    """One link: what it is, its value and unit, how it came about, where that is from, a sign where it is judged."""

    label: str
    value: str = ""
    unit: str = ""
    words: str = ""
    source: str = ""
    sign: str = ""


@dataclass(frozen=True, slots=True)
class Part:
    """Steps of one kind under a title, with what holds for all of them."""

    title: str
    steps: tuple[Step, ...]
    words: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Chain:
    """The way of one sample from its readings to its verdict, or to its refusal.

    verdict : the outcome in one sentence.
    """

    sample_id: str
    row: int
    file: str
    verdict: str
    parts: tuple[Part, ...]
    refused: bool = False

    def steps(self) -> Iterator[Step]:
        """All steps in order."""
        for part in self.parts:
            yield from part.steps


def six(value: float) -> str:
    """A number with up to six significant digits; empty where there is none."""
    return "" if np.isnan(value) else f"{value + 0.0:.6g}"


def quantity_label(base: str) -> str:
    """The name of a column without its unit as words, such as "pH total"."""
    return " ".join(_CAPITALS.get(word, word) for word in base.split("_"))


def label_and_words(meaning: str) -> tuple[str, str]:
    """The meaning of a column as a label, which ends at the first mark or bracket, and what is left of it."""
    label = re.split(r"[;:,(]", meaning, maxsplit=1)[0]
    return label.strip(), meaning[len(label):].lstrip(";:, ")

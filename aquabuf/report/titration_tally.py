"""What the text on a run over titrations needs, gathered piece by piece."""

from __future__ import annotations

import math
from collections import Counter
from dataclasses import dataclass, field

import pandas as pd

from aquabuf.assess.titration.assess import TitrationResult
from aquabuf.readings.duplicates import DUPLICATE_RULE
from aquabuf.readings.titration.result import Titrations

__all__ = ["LISTED", "NAME_LENGTH", "TitrationTally"]

LISTED = 20  # samples that the text shows one by one
NAMED = 3    # samples that the text names for each finding
NAME_LENGTH = 20


def _general(rule: str) -> str:
    """A rule without what differs from sample to sample."""
    return DUPLICATE_RULE.removesuffix(" in row") if rule.startswith(DUPLICATE_RULE) else rule.split(";")[0]


def _value(value: float, unit: str) -> str:
    """The value of a finding with its unit; "" where it has none."""
    return "" if math.isnan(value) else f": {value:.3g}{'' if unit in ('', '-') else ' ' + unit}"


@dataclass(slots=True)
class TitrationTally:
    """Counts and the first rows of a run; `named` are the first samples of each finding.

    `first_more` is what the first of them adds in words.
    """

    status: Counter = field(default_factory=Counter)
    methods: Counter = field(default_factory=Counter)
    findings: Counter = field(default_factory=Counter)
    refusals: Counter = field(default_factory=Counter)
    refused_names: dict[tuple[str, str], list[str]] = field(default_factory=dict)
    named: dict[str, list[str]] = field(default_factory=dict)
    first_more: dict[str, str] = field(default_factory=dict)
    assumed: Counter = field(default_factory=Counter)
    flags: Counter = field(default_factory=Counter)
    notes: dict[str, None] = field(default_factory=dict)
    shown: list[pd.Series] = field(default_factory=list)
    figures: int = 0

    def add(self, t: Titrations, part: TitrationResult) -> None:
        """Count a piece."""
        results = part.results
        self.status.update(results["status"])
        has = results["status"].isin(["ok", "warned"])
        self.methods.update(m for m in results.loc[has, "recommended_method"] if m)
        self.findings.update(part.findings["finding"])
        columns = (part.findings[name].tolist() for name in
                   ("finding", "sample_id", "point_row", "value", "unit", "more"))
        for finding, sample_id, row, value, unit, more in zip(*columns, strict=True):
            self.first_more.setdefault(finding, more)
            names = self.named.setdefault(finding, [])
            if len(names) < NAMED:
                place = "" if row is pd.NA else f" row {row}"
                names.append(f"{sample_id[:NAME_LENGTH]}{place}{_value(value, unit)}")
        self.assumed.update(part.assumed)
        first = part.rejected.drop_duplicates(["file", "sample_id"])
        for column, rule, name in zip(first["column"], map(_general, first["rule"]), first["sample_id"], strict=True):
            self.refusals[(column, rule)] += 1
            names = self.refused_names.setdefault((column, rule), [])
            names += [str(name)[:NAME_LENGTH]] if len(names) < NAMED else []
        self.flags.update(zip(t.flags["what"], t.flags["column"], strict=True))
        self.notes |= dict.fromkeys(t.notes)
        room = LISTED - len(self.shown)
        self.shown += [row for _, row in results.head(room).iterrows()]

    @property
    def samples(self) -> int:
        """Titrations seen."""
        return sum(self.status.values())

    @property
    def with_result(self) -> int:
        """Titrations that have one."""
        return self.status["ok"] + self.status["warned"]

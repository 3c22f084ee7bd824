"""What the text on a run over titrations needs, gathered piece by piece."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field

import pandas as pd

from aquabuf.assess.titration.assess import TitrationResult
from aquabuf.readings.titration.result import Titrations

__all__ = ["LISTED", "TitrationTally"]

LISTED = 20  # samples that the text shows one by one


@dataclass(slots=True)
class TitrationTally:
    """Counts and the first rows of a run."""

    status: Counter = field(default_factory=Counter)
    methods: Counter = field(default_factory=Counter)
    findings: Counter = field(default_factory=Counter)
    refusals: Counter = field(default_factory=Counter)
    assumed: Counter = field(default_factory=Counter)
    definitions: Counter = field(default_factory=Counter)
    flags: Counter = field(default_factory=Counter)
    notes: dict[str, None] = field(default_factory=dict)
    shown: list[pd.Series] = field(default_factory=list)
    extra_rejected: int = 0
    figures: int = 0

    def add(self, t: Titrations, part: TitrationResult) -> None:
        """Count a piece."""
        results = part.results
        self.status.update(results["status"])
        has = results["status"].isin(["ok", "warned"])
        self.methods.update(m for m in results.loc[has, "recommended_method"] if m)
        self.definitions.update(d for d in results.loc[has, "definition"] if d)
        self.findings.update(part.findings["finding"])
        self.assumed.update(part.assumed)
        for sample in part.rejected.drop_duplicates(["file", "sample_id"]).itertuples():
            self.refusals[(sample.column, sample.rule)] += 1
        refused = set(results.loc[results["status"] == "refused", "sample_id"])
        self.extra_rejected += len(set(part.rejected["sample_id"]) - refused)
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

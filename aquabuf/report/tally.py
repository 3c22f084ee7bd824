"""What a run over many pieces of a table adds up to."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from functools import reduce

import numpy as np
import pandas as pd

from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import Assessment
from aquabuf.assess.sample.curves import Inputs, curve_rows, worst
from aquabuf.assess.sample.headline import RANK_BY
from aquabuf.assess.sample.quality import Rounding, file_check_rows
from aquabuf.readings.duplicates import DUPLICATE_RULE

__all__ = ["Tally"]

WORST_KEPT = 20
FIGURE_COLUMNS = ("ph", "alkalinity_meq_l", "buffer_closed_meq_l_ph")


def _general(rules: pd.Series) -> list[str]:
    """Rules without what differs from row to row."""
    return [DUPLICATE_RULE.removesuffix(" in row") if rule.startswith(DUPLICATE_RULE) else rule for rule in rules]


def _count(counter: Counter, column: pd.Series) -> None:
    """Count the words of a column."""
    codes, words = pd.factorize(column.to_numpy(dtype=object))
    counter.update(dict(zip(words.tolist(), np.bincount(codes, minlength=words.size).tolist(), strict=True)))


@dataclass(slots=True)
class Tally:
    """Counts, the worst-buffered samples with their curves, and the few columns that the figure draws."""

    assessed: int = 0
    warned: int = 0
    refused_rows: set[int] = field(default_factory=set)
    refusal_rules: Counter = field(default_factory=Counter)
    warnings: Counter = field(default_factory=Counter)
    statuses: Counter = field(default_factory=Counter)
    pairs: Counter = field(default_factory=Counter)
    strengths: Counter = field(default_factory=Counter)
    regimes: Counter = field(default_factory=Counter)
    kinds: Counter = field(default_factory=Counter)
    unmet: Counter = field(default_factory=Counter)
    made: Counter = field(default_factory=Counter)
    notes: dict[str, None] = field(default_factory=dict)
    flags: Counter = field(default_factory=Counter)
    rounding: dict[str, Rounding] = field(default_factory=dict)
    duplicates: int = 0
    titrations: list[str] = field(default_factory=list)  # what titrations gave, in words
    _candidates: list[tuple[pd.DataFrame, Inputs]] = field(default_factory=list)
    _ranks: np.ndarray = field(default_factory=lambda: np.empty(0))
    drawn: list[np.ndarray] = field(default_factory=list)

    def add(self, part: Assessment) -> None:
        """Take in one assessed piece."""
        results = part.results
        self.assessed += len(results)
        warned = (results["warnings"] != "").to_numpy()
        self.warned += int(warned.sum())
        self.refused_rows.update(part.rejected["row"].tolist())
        self.refusal_rules.update(zip(part.rejected["column"], _general(part.rejected["rule"]), strict=True))
        _count(self.warnings, part.verdicts["warning"])
        for counter, column in ((self.statuses, "status"), (self.pairs, "pair"), (self.regimes, "regime"),
                                (self.strengths, "ionic_strength_from"), (self.kinds, "water_kind")):
            if column in results:
                _count(counter, results[column])
        if "water_kind" not in results:
            self.kinds[""] += len(results)
        self.made.update(part.made)
        self.unmet.update(part.unmet)
        self.notes |= dict.fromkeys(part.notes)
        self.flags.update(part.flags)
        self.duplicates += part.duplicates
        for name, found in part.rounding.items():
            self.rounding[name] = self.rounding[name].plus(found) if name in self.rounding else found
        self._keep_worst(part)
        columns = [results[name].to_numpy(dtype=np.float32) for name in FIGURE_COLUMNS]
        self.drawn.append(np.stack([*columns, warned.astype(np.float32)]))

    def _keep_worst(self, part: Assessment) -> None:
        """Keep the samples that may be among the worst; they are put together when someone asks."""
        rank = part.results[RANK_BY].to_numpy()
        best = worst(rank, WORST_KEPT)
        if len(self._ranks) >= WORST_KEPT:  # only what is worse than the last of the worst so far can enter
            best = best[rank[best] < np.sort(self._ranks)[WORST_KEPT - 1]]
        if best.size:
            self._ranks = np.concatenate([self._ranks, rank[best]])
            self._candidates.append((part.results.iloc[best].reset_index(drop=True), part.inputs.take(best)))

    def _worst(self) -> tuple[pd.DataFrame, Inputs | None]:
        if not self._candidates:
            return pd.DataFrame(), None
        if len(self._candidates) > 1:
            rows = pd.concat([rows for rows, _ in self._candidates])
            inputs = reduce(Inputs.joined, (inputs for _, inputs in self._candidates))
            keep = worst(rows[RANK_BY].to_numpy(), WORST_KEPT)
            self._candidates = [(rows.iloc[keep].reset_index(drop=True), inputs.take(keep))]
            self._ranks = self._ranks[np.argsort(self._ranks, kind="stable")[:WORST_KEPT]]
        return self._candidates[0]

    @property
    def worst(self) -> pd.DataFrame:
        """Result rows of the worst-buffered samples, worst first."""
        return self._worst()[0]

    def file_checks(self) -> pd.DataFrame:
        """Checks of the table as a whole."""
        return file_check_rows(self.rounding, self.duplicates)

    def curves(self, options: Options) -> pd.DataFrame:
        """Curves of the worst-buffered samples, worst first."""
        inputs = self._worst()[1]
        return pd.DataFrame() if inputs is None else curve_rows(inputs, options)

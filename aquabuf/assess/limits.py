"""Limits that make a warning, and their verdict on figures."""

from __future__ import annotations

import operator
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.tables import read_table

__all__ = ["ANY", "OPERATORS", "UNSTATED", "Limit", "shipped_limits", "verdicts"]

OPERATORS: Mapping[str, Callable] = {"<": operator.lt, "<=": operator.le, ">": operator.gt, ">=": operator.ge}
ANY = "any"
EDGE = 1e-9  # relative distance below which a value is taken to be the limit itself
UNSTATED = "unstated"  # kind of water not given in the readings


@dataclass(frozen=True, slots=True, kw_only=True)
class Limit:
    """One rule: a sample is warned where `quantity operator limit` holds (and, if given, quantity >= lower).

    group : of the limits that share one, only the first met counts, so bands are listed worst first.
    kinds, regimes : waters it applies to; "any" for all, "unstated" where the kind is not given.
    """

    name: str
    group: str
    quantity: str
    operator: str
    limit: float
    lower: float
    unit: str
    kinds: tuple[str, ...]
    regimes: tuple[str, ...]
    words: str
    next_step: str
    source: str

    def rule(self) -> str:
        """The rule in one line."""
        floor = "" if np.isneginf(self.lower) else f" (and at least {self.lower:g})"
        unit = "" if self.unit == "-" else f" {self.unit}"
        return f"{self.quantity} {self.operator} {self.limit:g}{unit}{floor}"

    def met(self, value: NDArray) -> NDArray[np.bool_]:
        """Where the rule holds; never where the value is missing."""
        with np.errstate(invalid="ignore"):
            on_edge = np.abs(value - self.limit) <= EDGE * max(abs(self.limit), EDGE)  # rounding must not break it
            return OPERATORS[self.operator](np.where(on_edge, self.limit, value), self.limit) & (value >= self.lower)

    def applies(self, kind: str, regime: str) -> bool:
        """Whether this limit is for waters of a kind ("" where it is not given) and regime."""
        return bool({ANY, kind or UNSTATED} & set(self.kinds)) and bool({ANY, regime} & set(self.regimes))


def shipped_limits(table: str = "limits") -> tuple[Limit, ...]:
    """The limits of a shipped table, in its order: "limits" of samples or "lake_limits"."""
    return tuple(
        Limit(name=r["name"], group=r["group"], quantity=r["quantity"], operator=r["operator"], limit=float(r["limit"]),
              lower=float(r["lower"] or "-inf"), unit=r["unit"], kinds=tuple(r["kinds"].split(";")),
              regimes=tuple(r["regimes"].split(";")), words=r["words"], next_step=r["next_step"],
              source=f"{r['source']}{' (recalled)' if r['mark'] == 'recalled' else ''}")
        for r in read_table(table))


def verdicts(limits: tuple[Limit, ...], figures: Mapping[str, NDArray], kind: NDArray, regime: NDArray,
             ) -> dict[str, NDArray[np.bool_]]:
    """Which samples each limit warns about; of a group only the first limit met counts."""
    taken: dict[str, NDArray[np.bool_]] = {}
    out = {}
    kind_code, kinds = pd.factorize(kind)
    regime_code, regimes = pd.factorize(regime)
    for limit in limits:
        if limit.quantity not in figures:
            continue
        before = taken.get(limit.group, np.zeros(kind.shape, dtype=bool))
        for_whom = np.array([[limit.applies(k, r) for r in regimes] for k in kinds], dtype=bool)
        applies = for_whom[kind_code, regime_code] if for_whom.size else before
        met = limit.met(figures[limit.quantity]) & applies & ~before
        taken[limit.group] = before | met
        out[limit.name] = met
    return out

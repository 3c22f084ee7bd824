"""Rules of thumb for tanks, mixers, feeders and stores, each with its source, and how a design stands to them.

Published rules disagree. All that touch a figure are shown beside each other; which one decided is said in words.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache

import numpy as np

from aquabuf.assess.limits import EDGE
from aquabuf.assess.plant.feed import shown
from aquabuf.assess.plant.steps.words import brief
from aquabuf.errors import InputError
from aquabuf.tables import read_table
from aquabuf.units import convert

__all__ = [
    "HP_W", "Standing", "TankRule", "at_least_zero", "positive", "power_w_m3", "rule", "rules_in", "stands",
    "words_for",
]

HP_W = 745.69987158227022  # 550 foot pounds a second (definition)
RECALLED = "recalled"


@dataclass(frozen=True, slots=True, kw_only=True)
class TankRule:
    """One row of the table. low, value, high : range and the figure taken, nan where it gives none."""

    key: str
    group: str
    low: float
    value: float
    high: float
    unit: str
    words: str
    mark: str
    source: str

    @property
    def told_by(self) -> str:
        """Source, and whether it is only recalled."""
        return f"{self.source} (recalled)" if self.mark == RECALLED else self.source

    def keeps(self, value: float) -> bool:
        """Whether a value lies in the range, its ends included."""
        slack = EDGE * max(abs(value), EDGE)  # rounding must not break it
        return not (value < self.low - slack or value > self.high + slack or np.isnan(value))

    @property
    def range_words(self) -> str:
        """The range in words."""
        unit = "" if self.unit == "-" else f" {self.unit}"
        low, high = np.isfinite(self.low), np.isfinite(self.high)
        if low and high:
            both = brief(self.low) if self.low == self.high else f"{brief(self.low)} to {brief(self.high)}"
            return f"{both}{unit}"
        if low:
            return f"at least {brief(self.low)}{unit}"
        return f"at most {brief(self.high)}{unit}" if high else ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Standing:
    """A value of the design held against a rule. kept : whether it lies in the range of the rule."""

    rule: TankRule
    quantity: str
    value: float
    kept: bool
    words: str

    @property
    def source(self) -> str:
        """Where the rule comes from."""
        return self.rule.told_by


def _figure(cell: str) -> float:
    return float(cell) if cell else np.nan


@cache
def _table() -> tuple[TankRule, ...]:
    return tuple(TankRule(key=r["key"], group=r["group"], low=_figure(r["low"]), value=_figure(r["value"]),
                          high=_figure(r["high"]), unit=r["unit"], words=r["words"], mark=r["mark"],
                          source=r["source"]) for r in read_table("tank_rules"))


def rules_in(group: str) -> tuple[TankRule, ...]:
    """Rules of a group, in the order of the table."""
    return tuple(r for r in _table() if r.group == group)


def rule(key: str, group: str | None = None) -> TankRule:
    """The rule of this name; `group` where several groups have one. Raises InputError where there is none."""
    found = [r for r in _table() if r.key == key and group in (None, r.group)]
    if len(found) != 1:
        among = ", ".join(repr(r.key) for r in (_table() if group is None else rules_in(group)))
        raise InputError(f"a tank rule must be named by one row of the table; found {len(found)} named {key!r}. "
                         f"Use one of {among}.")
    return found[0]


def words_for(group: str, names: Iterable[str]) -> tuple[TankRule, ...]:
    """Rules in words of a group that belong to any of these names (of products or their groups), or to all.

    The key of such a rule may hold several names, with ";" between them.
    """
    asked = {"any", *names}
    return tuple(r for r in rules_in(group) if asked & set(r.key.split(";")))


def stands(key: str, quantity: str, value: float) -> Standing:
    """How a value stands to a rule."""
    r = rule(key)
    kept = r.keeps(value)
    unit = "" if r.unit == "-" else f" {r.unit}"
    words = (f"{quantity} {shown(value)}{unit}: {'keeps' if kept else 'breaks'} {r.range_words}; {r.words} "
             f"({r.told_by})")
    return Standing(rule=r, quantity=quantity, value=value, kept=kept, words=words)


def power_w_m3(r: TankRule) -> tuple[float, float]:
    """Range of a rule on mixing power. [W/m3]"""
    m3 = {"hp/Mgal": convert(1e6, "gal", "m³", "volume"), "hp/1000 gal": convert(1e3, "gal", "m³", "volume")}
    factor = HP_W / m3[r.unit] if r.unit in m3 else 1.0
    return r.low * factor, r.high * factor


def positive(value: float, what: str, remedy: str) -> float:
    """The value if it is a number above zero."""
    if not (np.isfinite(value) and value > 0.0):
        raise InputError(f"{what} must be above 0; found {value:g}. {remedy}")
    return value


def at_least_zero(value: float, what: str, remedy: str) -> float:
    """The value if it is a number of zero or more."""
    if not (np.isfinite(value) and value >= 0.0):
        raise InputError(f"{what} must be 0 or more; found {value:g}. {remedy}")
    return value

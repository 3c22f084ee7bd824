"""Batches instead of continuous flow: number and size of the tanks, their cycle, and whether that suits the stream.

Tanks fill in turn. While one fills, the others react, are tested and drain: with N tanks of volume V at the flow F

    (N - 1) V / F >= react + test + V / drain rate      =>      V >= F (react + test) / (N - 1 - F / drain rate)
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache
from typing import NamedTuple

import numpy as np
import pandas as pd

from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["BatchPlan", "Reason", "batch_plan", "batch_reasons", "batch_suits", "batch_table", "cycle_table"]

RESERVE = 1.10           # as for alternating tanks (printed: 110 % of the largest day)
TEST_H = 0.5             # to sample, measure and decide (common practice, no source)
TANK_COUNTS = (2, 3, 4)
_SLACK = 1e-9


@dataclass(frozen=True, slots=True, kw_only=True)
class BatchPlan:
    """Batch tanks that fill in turn. Times of one batch in hours."""

    tanks: int
    volume_m3: float        # of each, filled
    fill_h: float
    react_h: float
    test_h: float
    drain_h: float
    idle_h: float           # left before the tank must fill again
    flow_m3_h: float
    drain_m3_h: float

    @property
    def cycle_h(self) -> float:
        """From one fill of a tank to its next."""
        return self.tanks * self.fill_h

    @property
    def total_m3(self) -> float:
        """Volume of all tanks."""
        return self.tanks * self.volume_m3

    @property
    def batches_per_day(self) -> float:
        """Batches let out by all tanks together."""
        return 24.0 / self.fill_h


class Reason(NamedTuple):
    """One rule for or against batches."""

    name: str
    quantity: str
    value: float
    operator: str
    limit: float
    unit: str
    holds: bool
    words: str
    mark: str
    source: str


@cache
def _rules() -> dict[str, dict[str, str]]:
    return {row["name"]: row for row in read_table("tank_batch_rules")}


def batch_plan(flow_m3_h: float, *, react_h: float, drain_m3_h: float, tanks: int = 2, test_h: float = TEST_H,
               volume_m3: float | None = None, reserve: float = RESERVE) -> BatchPlan:
    """Size of batch tanks for a steady inflow.

    Parameters
    ----------
    flow_m3_h
        Largest flow that lasts for a cycle; the tanks take nothing more.
    react_h, test_h
        From full to neutral, and to sample, measure and decide.
    drain_m3_h
        Rate at which a tank is emptied.
    volume_m3
        Of each tank; the least that the cycle allows, times the reserve, if not given.

    Raises
    ------
    InputError
        Fewer than two tanks, times or rates out of range, a drain too slow for any volume, a volume that does not do.
    """
    _check(flow_m3_h, react_h, test_h, drain_m3_h, tanks, reserve)
    room = tanks - 1 - flow_m3_h / drain_m3_h
    if room <= 0.0:
        raise InputError(f"{tanks} batch tanks must drain faster than {flow_m3_h / (tanks - 1):.4g} m3/h; found "
                         f"{drain_m3_h:g} m3/h. Take a larger pump or one tank more.")
    least = flow_m3_h * (react_h + test_h) / room
    if volume_m3 is not None and volume_m3 < least * (1.0 - _SLACK):
        raise InputError(f"{tanks} batch tanks need at least {least:.4g} m3 each; found {volume_m3:g} m3. Take "
                         "larger tanks, one more, or a faster drain.")
    volume = least * reserve if volume_m3 is None else volume_m3
    fill, drain = volume / flow_m3_h, volume / drain_m3_h
    idle = (tanks - 1) * fill - react_h - test_h - drain
    idle = idle if idle > _SLACK * fill else 0.0
    return BatchPlan(tanks=tanks, volume_m3=volume, fill_h=fill, react_h=react_h, test_h=test_h, drain_h=drain,
                     idle_h=idle, flow_m3_h=flow_m3_h, drain_m3_h=drain_m3_h)


def _check(flow: float, react: float, test: float, drain: float, tanks: int, reserve: float) -> None:
    if tanks < 2:
        raise InputError(f"batches of a stream that does not stop need 2 tanks or more, one to fill while the other is "
                         f"treated; found {tanks}. Take 2.")
    for what, value, unit in (("flow", flow, "m3/h"), ("rate of draining", drain, "m3/h"),
                              ("reaction time", react, "h")):
        if not (np.isfinite(value) and value > 0.0):
            raise InputError(f"the {what} of a batch must be above 0 {unit}; found {value:g}. Correct it.")
    if not (np.isfinite(test) and test >= 0.0):
        raise InputError(f"the time for testing a batch must be 0 h or more; found {test:g}. Correct it.")
    if not reserve >= 1.0:
        raise InputError(f"the reserve of a batch tank must be a factor of 1 or more; found {reserve:g}. Correct it.")


def batch_table(flow_m3_h: float, *, react_h: float, drain_m3_h: float, test_h: float = TEST_H,
                reserve: float = RESERVE, counts: Sequence[int] = TANK_COUNTS) -> pd.DataFrame:
    """One row per number of tanks that the drain allows: volume of each and of all, and the times of a batch."""
    rows = []
    for tanks in counts:
        if tanks - 1 > flow_m3_h / drain_m3_h:
            plan = batch_plan(flow_m3_h, react_h=react_h, drain_m3_h=drain_m3_h, tanks=tanks, test_h=test_h,
                              reserve=reserve)
            rows.append({"tanks": tanks, "volume_m3": plan.volume_m3, "total_m3": plan.total_m3, "fill_h": plan.fill_h,
                         "react_h": plan.react_h, "test_h": plan.test_h, "drain_h": plan.drain_h, "idle_h": plan.idle_h,
                         "cycle_h": plan.cycle_h, "batches_per_day": plan.batches_per_day})
    if not rows:
        raise InputError(f"no number of batch tanks up to {max(counts)} can drain {flow_m3_h:g} m3/h at "
                         f"{drain_m3_h:g} m3/h. Take a larger pump.")
    return pd.DataFrame(rows)


def cycle_table(plan: BatchPlan, cycles: int = 1) -> pd.DataFrame:
    """What each tank does when, from the first fill: tank, batch, step, start_h, end_h, start_m3, end_m3."""
    if cycles < 1:
        raise InputError(f"a cycle table needs 1 cycle or more; found {cycles}. Correct it.")
    full = plan.volume_m3
    steps = (("fill", plan.fill_h, 0.0, full), ("react", plan.react_h, full, full), ("test", plan.test_h, full, full),
             ("drain", plan.drain_h, full, 0.0), ("idle", plan.idle_h, 0.0, 0.0))
    rows = []
    for batch in range(cycles * plan.tanks):
        at = batch * plan.fill_h
        for name, hours, start, end in steps:
            if hours > 0.0:
                rows.append((batch % plan.tanks + 1, batch + 1, name, at, at + hours, start, end))
            at += hours
    return pd.DataFrame(rows, columns=["tank", "batch", "step", "start_h", "end_h", "start_m3", "end_m3"])


def batch_reasons(flow_m3_h: float, strongest_eq_l: float, toxic: Sequence[str] = (), *, plan: BatchPlan | None = None,
                  largest_tank_m3: float | None = None) -> list[Reason]:
    """Each rule with its value and whether it holds.

    strongest_eq_l : base or acid of the stream at its strongest, either sign. toxic : what must be proven gone.
    largest_tank_m3 : that the site allows; judged where there is a plan.
    """
    found = [_reason("small", flow_m3_h), _reason("strong", abs(strongest_eq_l)), _reason("toxic", float(len(toxic)))]
    if plan is not None and largest_tank_m3 is not None:
        found.append(_reason("fits", plan.volume_m3, largest_tank_m3))
    return found


def _reason(name: str, value: float, limit: float | None = None) -> Reason:
    row = _rules()[name]
    bound = float(row["limit"]) if limit is None else limit
    slack = 1.0 + _SLACK if row["operator"] == "<=" else 1.0 - _SLACK
    holds = value <= bound * slack if row["operator"] == "<=" else value >= bound * slack
    return Reason(name, row["quantity"], value, row["operator"], bound, row["unit"], bool(holds), row["words"],
                  row["mark"], row["source"])


def batch_suits(reasons: Sequence[Reason]) -> bool:
    """Whether batches suit: the stream is small, strong or toxic, and the tank fits the site where that was judged."""
    return any(r.holds for r in reasons if r.name != "fits") and all(r.holds for r in reasons if r.name == "fits")

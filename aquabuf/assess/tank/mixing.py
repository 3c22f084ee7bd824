"""Mixing of a stirred tank: dead time and lag, pumping, power, baffles, and where things go.

    dead time = V / (F + Fa),   lag = V / F - dead time        (Shinskey, McMillan; recalled)

V : volume; F : flow through it; Fa : pumping of the agitator. Any units that fit each other.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.rules import (
    Standing,
    TankRule,
    at_least_zero,
    positive,
    power_w_m3,
    rule,
    rules_in,
    stands,
)
from aquabuf.assess.tank.volumes import MIN_PER_H

__all__ = [
    "Baffles", "Mixer", "PowerRange", "air_m3_min", "baffles", "dead_time", "loop_standing", "mixer", "places",
    "power_ranges", "pumping_for_dead_time", "pumping_for_turnover",
]

Array = NDArray[np.float64]

S_PER_H = 3600.0
TURNOVER = "usual turnover"    # the one designed for
POWER = "neutralization power"


def dead_time(volume: ArrayLike, flow: ArrayLike, pumping: ArrayLike) -> tuple[Array, Array]:
    """Mixing dead time and lag of a stirred tank, in the time unit of the flows; lag is endless without flow."""
    v, f, fa = (np.asarray(x, dtype=float) for x in (volume, flow, pumping))
    dead = v / (f + fa)
    return dead, np.where(f > 0.0, v / np.where(f > 0.0, f, 1.0), np.inf) - dead


def pumping_for_dead_time(flow: float, share: float | None = None) -> float:
    """Least pumping of the agitator that keeps dead time to a share of residence time: F (1 / share - 1).

    From the definition of the dead time; the share of the table if not given.
    """
    part = rule("dead time").high if share is None else share
    return flow * (1.0 / positive(part, "share of dead time", "A twentieth is usual.") - 1.0)


def pumping_for_turnover(volume_m3: float, per_min: float) -> float:
    """Pumping that turns a volume over so many times a minute. [m3/h]"""
    return volume_m3 * per_min * MIN_PER_H


@dataclass(frozen=True, slots=True, kw_only=True)
class PowerRange:
    """Power of a mixer by one rule. [W]"""

    rule: TankRule
    low_w: float
    high_w: float
    words: str


def power_ranges(volume_m3: float) -> tuple[PowerRange, ...]:
    """Power that each rule asks for in a volume, in the order of the table."""
    out = []
    for r in rules_in("power"):
        low, high = power_w_m3(r)
        asked = "" if r.unit == "W/m³" else f", printed as {r.low:g} to {r.high:g} {r.unit}"
        out.append(PowerRange(rule=r, low_w=low * volume_m3, high_w=high * volume_m3,
                              words=f"{low:.1f} to {high:.1f} W/m³{asked}: {r.words} ({r.told_by})"))
    return tuple(out)


def air_m3_min(floor_m2: float) -> tuple[float, float]:
    """Air that mixes a tank of this floor. [m3/min]"""
    r = rule("air")
    return r.low * floor_m2, r.high * floor_m2


@dataclass(frozen=True, slots=True, kw_only=True)
class Baffles:
    """Baffles of a round tank, or the mixer off center instead. [m]"""

    count: int
    narrow_m: float
    wide_m: float
    offset_m: float
    words: str


def baffles(diameter_m: float) -> Baffles:
    """Baffles by the two rules of the table, and the offset that replaces them."""
    number, narrow, wide, off = (rule(k) for k in ("baffle count", "twelfth baffles", "tenth baffles", "offset mixer"))
    a, b, c = narrow.value * diameter_m, wide.value * diameter_m, off.value * diameter_m
    return Baffles(count=int(number.value), narrow_m=a, wide_m=b, offset_m=c,
                   words=f"{number.value:g} baffles, {a:.2f} m ({narrow.source}) to {b:.2f} m wide ({wide.source}), or "
                         f"the mixer {c:.2f} m off center ({off.source}); {number.words}")


@dataclass(frozen=True, slots=True, kw_only=True)
class Mixer:
    """What the agitator of one tank must do, at the largest flow and, for dead time and lag, at any.

    pumping_m3_h : of the impeller. dead_s, lag_s : at the largest flow. power_w : the middle of the range taken.
    """

    volume_m3: float
    flow_m3_h: float
    pumping_m3_h: float
    turnover_per_min: float
    dead_s: float
    lag_s: float
    power_w: float
    power_low_w: float
    power_high_w: float
    standings: tuple[Standing, ...]
    powers: tuple[PowerRange, ...]
    words: str


def mixer(volume_m3: float, flow_m3_h: float, *, pumping_m3_h: float | None = None) -> Mixer:
    """The agitator of a tank: the larger of what turnover and dead time ask for, or what is there already.

    flow_m3_h : the largest, where the dead time is the largest share of the residence time.
    """
    v = positive(volume_m3, "volume of a tank [m3]", "Give its liquid.")
    f = positive(flow_m3_h, "flow [m3/h]", "Give the largest flow.")
    usual, share = rule(TURNOVER), rule("dead time")
    by_turnover, by_dead = pumping_for_turnover(v, usual.value), pumping_for_dead_time(f)
    if pumping_m3_h is None:
        fa = max(by_turnover, by_dead)
        why = (f"{usual.words}, {usual.value:g} per min ({usual.told_by})" if by_turnover >= by_dead else
               f"{share.words} at most {share.high:g} ({share.told_by})")
    else:
        fa, why = at_least_zero(pumping_m3_h, "pumping of the mixer [m3/h]", "Read it off the data sheet."), "as given"
    dead, lag = (S_PER_H * float(x) for x in dead_time(v, f, fa))
    turnover = fa / v / MIN_PER_H
    low, high = (v * x for x in power_w_m3(rule(POWER)))
    told = (stands("dead time", "dead time over residence time", dead / (dead + lag)),
            *(stands(r.key, "turnover", turnover) for r in rules_in("turnover")))
    return Mixer(volume_m3=v, flow_m3_h=f, pumping_m3_h=fa, turnover_per_min=turnover, dead_s=dead, lag_s=lag,
                 power_w=0.5 * (low + high), power_low_w=low, power_high_w=high, standings=told,
                 powers=power_ranges(v),
                 words=f"{shown(fa)} m³/h of pumping, {turnover:.2g} turnovers a minute ({why}); dead time {dead:.3g} "
                       f"s, lag {lag:.4g} s; {low / 1e3:.3g} to {high / 1e3:.3g} kW")


def loop_standing(lag_s: float, *dead_s: float) -> Standing:
    """Dead times of mixing, line and probe together over the lag, held against the rule for the steep part. [s]"""
    lag = positive(lag_s, "lag of the tank [s]", "Give V/F less the mixing dead time.")
    total = sum(at_least_zero(d, "dead time [s]", "Give each part of the loop.") for d in dead_s)
    return stands("loop", "dead time over lag", total / lag)


def places() -> tuple[TankRule, ...]:
    """Where inlet, outlet, reagent and probe go, in words with their sources."""
    return rules_in("places")

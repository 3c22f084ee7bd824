"""The reagent feed: how far it must turn down, how finely it must resolve, at what strength, and how far away it is.

A full span S (equivalents per liter of waste that the feeder gives at 100 %) turns a share of the span into a step on
the titration curve; a window that takes W of reagent is W / S of the span. All follows from the definitions.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.limits import EDGE
from aquabuf.assess.plant.feed import shown
from aquabuf.assess.plant.steps.words import brief
from aquabuf.assess.plant.storage import least_feeder_size
from aquabuf.assess.tank.demand import L_PER_M3, Demand
from aquabuf.assess.tank.rules import TankRule, at_least_zero, positive, rule, rules_in
from aquabuf.assess.tank.stages import DemandCurve, Window
from aquabuf.errors import InputError

__all__ = [
    "Accuracy", "FeedNeed", "Line", "SplitRange", "Strength", "accuracy", "feed_need", "gain_ph_per_pct", "line",
    "need_of_demands", "resolved_ph", "span_eq_l", "split_range", "strength_for", "turndown_words", "window_share",
]

Array = NDArray[np.float64]

S_PER_H, M_PER_MM = 3600.0, 1e-3


# ---------------------------------------------------------------- range


@dataclass(frozen=True, slots=True, kw_only=True)
class FeedNeed:
    """What a feeder must reach. least : the smallest rate above zero. [eq/h], [L/h] of what is pumped

    size_l_h, size_eq_h : of the feeder, with the margin of the shipped rule. turndown : largest over least need.
    device_turndown : size over least need.
    """

    name: str
    least_eq_h: float
    largest_eq_h: float
    normality_eq_l: float
    size_eq_h: float

    @property
    def least_l_h(self) -> float:
        """Smallest rate."""
        return self.least_eq_h / self.normality_eq_l

    @property
    def largest_l_h(self) -> float:
        """Largest rate."""
        return self.largest_eq_h / self.normality_eq_l

    @property
    def size_l_h(self) -> float:
        """Rate of the feeder at 100 %."""
        return self.size_eq_h / self.normality_eq_l

    @property
    def turndown(self) -> float:
        """Largest over least need."""
        return self.largest_eq_h / self.least_eq_h

    @property
    def device_turndown(self) -> float:
        """Rate at 100 % over least need."""
        return self.size_eq_h / self.least_eq_h


def feed_need(name: str, demand_eq_l: ArrayLike, flow_m3_h: ArrayLike, normality_eq_l: float) -> FeedNeed:
    """Range of a feeder from every pair of demand [eq per liter of waste, of one kind] and flow that it must serve.

    normality_eq_l : reacting equivalents per liter of what is pumped. Raises InputError where nothing is ever needed.
    """
    positive(normality_eq_l, f"normality of what feeder {name!r} pumps [eq/L]", "A dry or gaseous feed goes by mass.")
    eq_h = np.ravel(np.asarray(demand_eq_l, dtype=float) * np.asarray(flow_m3_h, dtype=float) * L_PER_M3)
    if not np.all(np.isfinite(eq_h)) or np.any(eq_h < 0.0):
        raise InputError(f"demand and flow of feeder {name!r} must be numbers of 0 or more; found {eq_h.min():g} eq/h. "
                         "Leave out what it cannot reach, and give acid to the feeder of acid.")
    some = eq_h[eq_h > 0.0]
    if some.size == 0:
        raise InputError(f"feeder {name!r} must be asked for something; found no demand above 0. Leave it out.")
    most = float(some.max())
    return FeedNeed(name=name, least_eq_h=float(some.min()), largest_eq_h=most, normality_eq_l=normality_eq_l,
                    size_eq_h=float(least_feeder_size(most)[0]))


def need_of_demands(rows: Iterable[Demand]) -> FeedNeed:
    """Range of the feeder of one reagent from the rows of the demand table that name it."""
    kept = [d for d in rows if d.reagent is not None and np.isfinite(d.eq_l)]
    names = {d.reagent.name for d in kept if d.reagent is not None}
    if len(names) != 1 or kept[0].reagent is None:
        raise InputError(f"a feeder serves one reagent; found {len(names)}: {', '.join(sorted(names))}. Give the rows "
                         "of one that reaches its aim.")
    reagent = kept[0].reagent
    return feed_need(reagent.name, [d.eq_l for d in kept], [d.load.flow_m3_h for d in kept], reagent.reacting_eq_l)


def turndown_words(need: FeedNeed) -> tuple[tuple[TankRule, bool, str], ...]:
    """Each device of the table: whether its turndown serves the need, and why."""
    out = []
    for r in rules_in("device"):
        surely = need.device_turndown <= r.low * (1.0 + EDGE)
        maybe = np.isfinite(r.high) and need.device_turndown <= r.high * (1.0 + EDGE)
        says = "serves" if surely else "serves if a good one" if maybe else "does not reach"
        out.append((r, bool(surely or maybe), f"{r.key}, {r.range_words}: {says} {brief(need.device_turndown)}:1 "
                                              f"({r.told_by})"))
    return tuple(out)


# ---------------------------------------------------------------- accuracy


def span_eq_l(size_l_h: float, normality_eq_l: float, flow_m3_h: float) -> float:
    """Full span of a feeder per liter of waste, without the water of the reagent. [eq/L]"""
    return size_l_h * normality_eq_l / (L_PER_M3 * positive(flow_m3_h, "flow [m3/h]", "Give that of the waste."))


def window_share(curve: DemandCurve, low: float, high: float, span: float) -> float:
    """Reagent across a window over the full span. [-]"""
    at_low, at_high = curve.base_at([low, high])
    return float(at_high - at_low) / positive(span, "full span [eq/L]", "Give rate at 100 % over the flow.")


def gain_ph_per_pct(curve: DemandCurve, ph: ArrayLike, span: float) -> Array:
    """Change of pH by 1 % of the span, by the slope at a pH. [pH per %]"""
    return 0.01 * span / curve.buffer(ph)


def resolved_ph(curve: DemandCurve, aim: float, span: float, share: float) -> tuple[float, float]:
    """pH on either side of an aim when the feed is off by a share of the span. [-]"""
    low, high = curve.ph_of(float(curve.base_at(aim)) + share * span * np.array([-1.0, 1.0]))
    return float(low), float(high)


@dataclass(frozen=True, slots=True, kw_only=True)
class Accuracy:
    """Whether one feeder holds the window. [-] are shares of the full span.

    needed : tolerance to the nearer end; has : repeatability of the dose and resolution together.
    window : reagent across the window. lowest_ph, highest_ph : what an error of `has` makes.
    """

    span_eq_l: float
    window: float
    needed: float
    has: float
    gain_ph_per_pct: float
    lowest_ph: float
    highest_ph: float
    holds: bool
    class_words: str
    words: str


def accuracy(curve: DemandCurve, window: Window, span: float, *, repeatability: float, resolution: float = 0.0,
             dose_eq_l: float | None = None) -> Accuracy:
    """Accuracy that the window needs against what a feeder has.

    span : full span [eq/L]. repeatability : share of the rate asked for; resolution : share of the span.
    dose_eq_l : what this feeder gives; the demand of the waste if not given.
    """
    for what, value in (("repeatability", repeatability), ("resolution", resolution)):
        at_least_zero(value, f"{what} of a feeder", "Write 1 % as 0.01.")
    dose = abs(float(curve.demand(window.aim))) if dose_eq_l is None else abs(dose_eq_l)
    whole = window_share(curve, window.low, window.high, span)
    needed, has = window.tolerance_eq_l(curve) / span, repeatability * dose / span + resolution
    low, high = resolved_ph(curve, window.aim, span, has)
    holds = has <= needed * (1.0 + EDGE)
    seen = rule("repeatability")
    kind = ("any pump or valve has it" if needed >= seen.high else "only a good pump or valve has it"
            if needed >= seen.low else "no single pump or valve has it")
    known = f"{kind}: their repeatability is {100 * seen.low:g} to {100 * seen.high:g} % ({seen.told_by})"
    return Accuracy(
        span_eq_l=span, window=whole, needed=needed, has=has, lowest_ph=low, highest_ph=high, holds=holds,
        gain_ph_per_pct=float(gain_ph_per_pct(curve, window.aim, span)), class_words=known,
        words=f"the nearer end of the window is {brief(100 * needed)} % of the span away, this feed is good to "
              f"{brief(100 * has)} %: {'it holds' if holds else 'it cannot hold'} the window on its own "
              f"(pH {_end(low)} to {_end(high)}); {known}")


def _end(ph: float) -> str:
    return f"{ph:.2f}" if np.isfinite(ph) else "beyond the curve"


# ---------------------------------------------------------------- two devices, strength, line


@dataclass(frozen=True, slots=True, kw_only=True)
class SplitRange:
    """A coarse and a fine feeder on one tank. fine_share : span of the fine one over that of the coarse one.

    turndown : of both together. left_eq_l : error of the fine one at most.
    """

    fine_share: float
    coarse_l_h: float
    fine_l_h: float
    turndown: float
    left_eq_l: float
    works: bool
    words: str


def split_range(tolerance_eq_l: float, span: float, size_l_h: float, *, repeatability: float, resolution: float,
                turndown: float) -> SplitRange:
    """Fine feeder that makes up for the error of the coarse one and whose own error keeps the tolerance.

    Its share f of the span lies between 2 (e + r) and tolerance / ((e + r) span): the middle by ratio is taken where
    there is room, else the least. Errors at full rate: repeatability e and resolution r.
    """
    off = at_least_zero(repeatability, "repeatability", "Write 1 % as 0.01.")
    off = positive(off + at_least_zero(resolution, "resolution", "Write 1 % as 0.01."), "error of a feeder",
                   "Give its repeatability or resolution.")
    cover = rule("fine cover")
    least, most = cover.value * off, tolerance_eq_l / (off * span)
    works = least <= most * (1.0 + EDGE) and least < 1.0
    f = min(1.0, float(np.sqrt(least * most))) if works else min(1.0, least)
    left, wide = off * f * span, turndown / f
    words = (f"coarse {shown(size_l_h)} L/h and fine {shown(f * size_l_h)} L/h of the same reagent, "
             f"{brief(100 * f)} % of the span, {brief(wide)}:1 together")
    words += (f": leaves {left:.2g} of {tolerance_eq_l:.2g} eq/L" if works else
              f": still leaves {left:.2g} where {tolerance_eq_l:.2g} eq/L is allowed; take another tank, a buffer or "
              "a weaker trim reagent")
    return SplitRange(fine_share=f, coarse_l_h=size_l_h, fine_l_h=f * size_l_h, turndown=wide, left_eq_l=left,
                      works=works, words=words)


@dataclass(frozen=True, slots=True, kw_only=True)
class Strength:
    """Strength of what is pumped. low_eq_l, high_eq_l : range that a device can feed; chosen_eq_l : nan where none."""

    low_eq_l: float
    high_eq_l: float
    chosen_eq_l: float
    thinned: float
    words: str


def strength_for(need: FeedNeed, stock_eq_l: float, device_l_h: float, turndown: float) -> Strength:
    """Strength at which a device gives the largest and the least need: as strong as that allows.

    stock_eq_l : reacting equivalents per liter as delivered. device_l_h : at 100 %.
    """
    for what, value in (("strength as delivered [eq/L]", stock_eq_l), ("rate of the device [L/h]", device_l_h),
                        ("turndown", turndown)):
        positive(value, what, "Read it off the data sheet.")
    low, high = need.largest_eq_h / device_l_h, need.least_eq_h * turndown / device_l_h
    chosen = min(high, stock_eq_l)
    if low > chosen * (1.0 + EDGE):
        why = ("even as delivered it is too weak for the largest need: take a larger device" if low > stock_eq_l else
               f"no one strength serves a need of {brief(need.turndown)}:1 with a turndown of "
               f"{brief(turndown)}: split it over two devices")
        return Strength(low_eq_l=low, high_eq_l=high, chosen_eq_l=np.nan, thinned=np.nan, words=why)
    thinned = stock_eq_l / chosen
    least = brief(need.least_eq_h / chosen)
    words = (f"{brief(chosen)} eq/L, " + ("as delivered" if thinned <= 1.0 + EDGE else
             f"thinned {brief(thinned)} times so that the least need, {least} L/h, can be fed"))
    return Strength(low_eq_l=low, high_eq_l=high, chosen_eq_l=chosen, thinned=thinned, words=words)


@dataclass(frozen=True, slots=True, kw_only=True)
class Line:
    """Reagent line from valve to tank. carrier_l_h : water to send with the reagent, 0 if none is needed."""

    volume_l: float
    dead_s: float
    tank_dead_s: float
    carrier_l_h: float
    holds: bool
    words: str


def line(length_m: float, bore_mm: float, reagent_l_h: float, tank_dead_s: float) -> Line:
    """Dead time of a full line, pi/4 d^2 L over the rate, against the dead time of the tank.

    reagent_l_h : the least, where the delay is longest.
    """
    length = at_least_zero(length_m, "length of the reagent line [m]", "Measure from valve to tank.")
    bore = positive(bore_mm, "bore of the reagent line [mm]", "Give the inner diameter.")
    rate = positive(reagent_l_h, "reagent rate [L/h]", "Give the least rate.")
    tank = positive(tank_dead_s, "dead time of the tank [s]", "Give that of its mixing.")
    volume = 0.25 * np.pi * (bore * M_PER_MM) ** 2 * length * L_PER_M3
    dead = volume / rate * S_PER_H
    holds = dead <= tank * (1.0 + EDGE)
    carrier = 0.0 if holds else volume / tank * S_PER_H - rate
    words = f"{brief(volume)} L of line delay {brief(rate)} L/h by {brief(dead)} s"
    words += (f", no more than the {brief(tank)} s of the tank" if holds else
              f", longer than the {brief(tank)} s of the tank: put valve and pump at the tank, or send "
              f"{brief(carrier)} L/h of water with the reagent; keep the line full with a loop seal")
    return Line(volume_l=volume, dead_s=dead, tank_dead_s=tank, carrier_l_h=carrier, holds=holds, words=words)

"""From demand to tanks: stages with their aims, volumes, vessels, mixers and feeds."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.plant.storage import least_feeder_size
from aquabuf.assess.tank.ahead import Equalization, equalization_of
from aquabuf.assess.tank.aids import BufferAid, TrimAid, bicarbonate_aid, trim_aid
from aquabuf.assess.tank.basis import L_PER_M3, NEVER, Basis, Need, amounts_of, lacking_words, needs_of
from aquabuf.assess.tank.feed import (
    Accuracy,
    FeedNeed,
    Line,
    SplitRange,
    accuracy,
    line,
    split_range,
    turndown_words,
)
from aquabuf.assess.tank.job import Wishes
from aquabuf.assess.tank.mixing import Mixer, mixer
from aquabuf.assess.tank.reagents import BASE, Reagent, dissolved_share, effective_share
from aquabuf.assess.tank.stages import DemandCurve, StageChoice, Window, choose_stages, curve_of_readout
from aquabuf.assess.tank.volumes import (
    MIN_PER_H,
    Residence,
    Vessel,
    residence,
    round_vessel,
    unequal_volumes,
    volume_m3,
)
from aquabuf.errors import InputError

__all__ = ["Equalization", "Layout", "Stage", "StageFeed", "layout_of"]

Array = NDArray[np.float64]

TRIM_COVERS = 2.0      # trim feed over the error that the main feed may leave, as for a fine feeder
GAS_LINE_S = 2.0       # delay of a gas or dry feed: practice, no source
LEAST_SHARE = 0.05     # of an equivalent that still counts; with less a reagent does not get there
TRICKLE = 0.01         # share of the mean flow, below which a step does not decide on tanks and feeders: practice


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StageFeed:
    """The feed of one reagent to one tank; accuracy, split and line are None where they do not apply.

    Rates count equivalents of the reagent: more than those of the waste where its own carbon holds some back, or where
    not all has dissolved when it leaves. accuracy : at the flow where the feed is coarsest, judged_m3_h.
    """

    reagent: Reagent
    need: FeedNeed
    trim: bool
    accuracy: Accuracy | None
    judged_m3_h: float
    split: SplitRange | None
    line: Line | None
    devices: tuple[str, ...]

    @property
    def line_s(self) -> float:
        """Delay between feeder and tank; with carrier water it is that of the tank's mixing."""
        if self.line is None:
            return GAS_LINE_S
        return min(self.line.dead_s, self.line.tank_dead_s)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Stage:
    """One stirred tank."""

    name: str
    setpoint_ph: float
    volume_m3: float
    residence: Residence
    vessel: Vessel
    mixer: Mixer
    feeds: Mapping[str, StageFeed]

    def residence_min(self, flow_m3_h: float) -> float:
        """Time that the water stays at a flow. [min]"""
        return 60.0 * self.volume_m3 / flow_m3_h


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Layout:
    """The whole train. needs : after equalization. peak_m3_h, mean_m3_h : flow through the tanks.

    curve : the waste where its need is largest against what the window tolerates. aid, trim : bicarbonate, and a
    weaker trim reagent, in place of the last tank; None with one tank, or for a trim that is no liquid.
    """

    equalization: Equalization
    choice: StageChoice
    curve: DemandCurve
    window: Window
    needs: Mapping[str, Need]
    stages: tuple[Stage, ...]
    peak_m3_h: float
    mean_m3_h: float
    aid: BufferAid | None
    trim: TrimAid | None
    unequal_words: str


# ---------------------------------------------------------------- stages


@dataclass(frozen=True, slots=True, eq=False)
class _Course:
    """What comes to the tanks. lacks : base to the aim; tolerance : from the aim to the nearer end. [eq/L]"""

    flow: Array
    base: Array
    amounts: Array
    dt: Array
    lacks: Array
    tolerance: Array

    @property
    def peak(self) -> float:
        return float(self.flow.max())

    @property
    def mean(self) -> float:
        return float((self.flow * self.dt).sum() / self.dt.sum())

    def hardest(self, share: Array) -> int:
        """The step where something is largest, trickles left out."""
        return int(np.argmax(np.where(self.flow > TRICKLE * self.mean, share, -np.inf)))

    def curve(self, basis: Basis, step: int) -> DemandCurve:
        """The waste of a step on the axis of reagent."""
        return curve_of_readout(basis.chem.readout, float(self.base[step]), self.amounts[:, step],
                                basis.chem.carbon_carrier)


def _course_behind(basis: Basis, eq: Equalization) -> _Course:
    base, amounts = eq.base_eq_l[:, 0], amounts_of(eq.out.strength[:, :, 0])
    low, at, high = (basis.chem.readout.base_at(ph, amounts)
                     for ph in (basis.job.window.low, basis.aim_ph, basis.job.window.high))
    return _Course(flow=eq.out.flow_m3_h[:, 0], base=base, amounts=amounts, lacks=at - base,
                   dt=np.append(np.diff(eq.out.time_s), eq.out.step_s), tolerance=np.minimum(at - low, high - at))


def layout_of(basis: Basis) -> Layout:
    """Tanks, vessels, mixers and feeds of a job.

    Raises InputError where the stream keeps its window behind the equalization tank, or a kind of reagent is asked for
    that no reagent serves.
    """
    job, chem, site = basis.job, basis.chem, basis.job.site
    eq = equalization_of(basis)
    course = _course_behind(basis, eq)
    _check_outside(basis, eq, course)
    needs = needs_of(chem, basis.aim_ph, course.flow, course.base, course.amounts, course.dt)
    main = _main(basis, needs)
    sign = 1.0 if main == BASE else -1.0
    curve = course.curve(basis, course.hardest(sign * course.lacks / course.tolerance))
    window = Window(low=job.window.low, high=job.window.high, aim=basis.aim_ph)
    peak, mean = course.peak, course.mean
    choice = choose_stages(curve, window, error=site.feed_error, turndown=site.turndown, flow_m3_h=peak,
                           wanted=job.wishes.stages or _count(job.wishes), aims=job.wishes.set_points)
    reagent = basis.chosen[main]
    time = residence(reagent, precipitates=bool(chem.readout.metals), wanted_min=job.residence_min.get(reagent.name))
    sizes, why = job.wishes.volumes_m3, "as the file sets them"
    if sizes is None:
        sizes, why = unequal_volumes([volume_m3(peak, time.minutes)] * choice.tanks)
    foams = reagent.carbon_per_eq > 0.0 or any(w.carbon_mol_l > 0.0 for w in chem.wastes)
    off, stages = np.zeros_like(course.base), []
    for k, (ph, v) in enumerate(zip(choice.set_points, sizes, strict=True)):
        asked = {kind: _asked(basis, course, choice.set_points, k, kind, v) for kind in basis.chosen}
        feeds = {kind: _stage_feed(basis, course, kind, dose, off, k, window, mixer(v, mean).dead_s,
                                   last=k + 1 == choice.tanks) for kind, dose in asked.items()}
        off = site.feed_error * (np.maximum.reduce([np.abs(dose) for dose in asked.values()]) + off)
        stages.append(Stage(name=f"tank {k + 1}", setpoint_ph=ph, volume_m3=v, residence=time,
                            vessel=round_vessel(v, site.depth_m, foams=foams), mixer=mixer(v, peak), feeds=feeds))
    aid = None if choice.tanks < 2 else bicarbonate_aid(curve, window.low, window.high, site.feed_error,
                                                        choice.tanks - 1)
    trim = None if choice.tanks < 2 or not np.isfinite(reagent.reacting_eq_l) else trim_aid(
        curve, window, site.feed_error, reagent.reacting_eq_l, goes_in_eq_l=_into_last_but_one(curve, choice, window))
    return Layout(equalization=eq, choice=choice, curve=curve, window=window, needs=needs, stages=tuple(stages),
                  peak_m3_h=peak, mean_m3_h=mean, aid=aid, trim=trim, unequal_words=why)


def _into_last_but_one(curve: DemandCurve, choice: StageChoice, window: Window) -> float:
    """Demand that the last tank would see if the train were one tank shorter. [eq/L]"""
    before = curve.base_eq_l if choice.tanks < 3 else float(curve.base_at(choice.set_points[-3]))
    return float(curve.base_at(window.aim)) - before


def _check_outside(basis: Basis, eq: Equalization, course: _Course) -> None:
    """Refuse a stream that keeps its window behind the equalization tank."""
    flows = course.flow > 0.0
    ph = basis.chem.readout.ph(course.base[flows], course.amounts[:, flows])
    low, high, window = float(ph.min()), float(ph.max()), basis.job.window
    if window.low <= low and high <= window.high:
        raise InputError("something must be left to neutralize behind the equalization tank; the wastes cancel out in "
                         f"its {shown(eq.volume_m3)} m³ and leave it at pH {low:.2f} to {high:.2f}, within "
                         f"{window.low:g} to {window.high:g}. That tank alone does it; set a smaller one in [layout], "
                         "or 0, to size feeds for the time that it is out of use.")


def _count(wishes: Wishes) -> int | None:
    """Number of tanks that volumes or set points imply."""
    return next((len(found) for found in (wishes.volumes_m3, wishes.set_points) if found is not None), None)


def _main(basis: Basis, needs: Mapping[str, Need]) -> str:
    """The kind that is asked for most behind the equalization tank; every kind that counts must have its reagent."""
    main = max(needs, key=lambda kind: needs[kind].mean_eq_h)
    for kind, need in needs.items():
        if kind not in basis.chosen and need.mean_eq_h > NEVER * needs[main].mean_eq_h:
            raise InputError(lacking_words(kind, basis.aim_ph, need.mean_eq_h,
                                           basis.lacking.get(kind, f"the file names no {kind}")))
    return main


# ---------------------------------------------------------------- feeds


def _asked(basis: Basis, course: _Course, aims: tuple[float, ...], k: int, kind: str, volume: float) -> Array:
    """What tank k asks of a reagent, step by step, negative where it asks for the other. [eq/h]

    From the set point before to its own. An equivalent counts by its effective share at the set point, which also holds
    for what went in before, and by the share that dissolves in the tank at the largest flow.
    """
    reagent, readout, sign = basis.chosen[kind], basis.chem.readout, 1.0 if kind == BASE else -1.0
    here = sign * (readout.base_at(aims[k], course.amounts) - course.base)
    before = np.zeros_like(here) if k == 0 else sign * (readout.base_at(aims[k - 1], course.amounts) - course.base)
    share = _share(basis, reagent, aims[k])
    dose = (here - before) / share
    if k > 0:
        dose = dose + np.maximum(before, 0.0) * (1.0 / share - 1.0 / _share(basis, reagent, aims[k - 1]))
    dissolves = float(dissolved_share(reagent.dissolution_per_min, MIN_PER_H * volume / course.peak))
    return L_PER_M3 * course.flow * dose / dissolves


def _share(basis: Basis, reagent: Reagent, ph: float) -> float:
    """Effective share of an equivalent at a set point; 1 where it cannot get there, which the simulation then shows."""
    found = float(effective_share(basis.chem.readout, reagent, ph, basis.chem.carbon_carrier))
    return found if found > LEAST_SHARE else 1.0


def _stage_feed(basis: Basis, course: _Course, kind: str, dose: Array, off: Array, k: int, window: Window,
                tank_dead_s: float, *, last: bool) -> StageFeed:
    """The feed of a kind to tank k: what it asks for, and what the feeds before may leave (off).

    Less than the window tolerates need not be fed at all, so that the least is what lies above.
    """
    most, least = np.maximum(dose + off, 0.0), np.maximum(dose - off, 0.0)
    trim = bool(most.max() <= NEVER * np.abs(dose).max()) or (k > 0 and bool(dose.max() <= 0.0))
    if trim:  # never asked for in the normal course: it takes back what the other feed overdoes
        size = TRIM_COVERS * basis.job.site.feed_error * float(np.abs(dose).max()) + float(off.max())
        most = least = np.full_like(most, size)
    else:
        least = np.where(least > L_PER_M3 * course.flow * course.tolerance, least, 0.0)
    return _feed(basis, basis.chosen[kind], course, most, least, k, window, tank_dead_s, trim=trim, last=last)


def _feed(basis: Basis, reagent: Reagent, course: _Course, most: Array, least: Array, k: int, window: Window,
          tank_dead_s: float, *, trim: bool, last: bool) -> StageFeed:
    site = basis.job.site
    largest = float(most.max())
    some = least[least > NEVER * largest]
    need = FeedNeed(name=f"{reagent.name}, tank {k + 1}", least_eq_h=float(some.min()) if some.size else largest,
                    largest_eq_h=largest, normality_eq_l=reagent.reacting_eq_l,
                    size_eq_h=float(least_feeder_size(largest)[0]))
    judged, split, at = None, None, np.nan
    if last and not trim:
        per_l = np.where(course.flow > 0.0, 1.0 / (L_PER_M3 * np.where(course.flow > 0.0, course.flow, 1.0)), 0.0)
        step = course.hardest((site.feed_error * most + site.resolution * need.size_eq_h) * (most > 0.0) * per_l
                              / course.tolerance)
        at, span, curve = float(course.flow[step]), need.size_eq_h * float(per_l[step]), course.curve(basis, step)
        judged = accuracy(curve, window, span, repeatability=site.feed_error, resolution=site.resolution,
                          dose_eq_l=float(most[step] * per_l[step]))
        if not judged.holds:
            split = split_range(window.tolerance_eq_l(curve), span, need.size_l_h, repeatability=site.feed_error,
                                resolution=site.resolution, turndown=site.turndown)
    pumped = np.isfinite(reagent.fed_eq_l)
    told = line(site.line_m, site.line_bore_mm, need.least_l_h, tank_dead_s) if pumped else None
    return StageFeed(reagent=reagent, need=need, trim=trim, accuracy=judged, judged_m3_h=at, split=split, line=told,
                     devices=tuple(words for _, _, words in turndown_words(need)))

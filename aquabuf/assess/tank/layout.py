"""From demand to tanks: equalization, stages with their aims, volumes, vessels, mixers and feeds."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.plant.storage import least_feeder_size
from aquabuf.assess.tank.aids import BufferAid, bicarbonate_aid
from aquabuf.assess.tank.basis import L_PER_M3, NEVER, Basis, Need, amounts_of, needs_of
from aquabuf.assess.tank.equalize import DAY_S, cumulative_volume
from aquabuf.assess.tank.equalize_volume import VolumeChoice, choose_volume, run_tank, trial_volumes, volume_table
from aquabuf.assess.tank.feed import (
    Accuracy,
    FeedNeed,
    Line,
    SplitRange,
    accuracy,
    line,
    span_eq_l,
    split_range,
    turndown_words,
)
from aquabuf.assess.tank.mixing import Mixer, mixer
from aquabuf.assess.tank.profile import Cases, peak_factor
from aquabuf.assess.tank.reagents import ACID, BASE, Reagent
from aquabuf.assess.tank.stages import DemandCurve, StageChoice, Window, choose_stages, curve_of_readout
from aquabuf.assess.tank.volumes import Residence, Vessel, residence, round_vessel, unequal_volumes, volume_m3

__all__ = ["Equalization", "Layout", "Stage", "StageFeed", "layout_of"]

Array = NDArray[np.float64]

OTHER = {BASE: ACID, ACID: BASE}
EVEN_FLOW = 1.5        # largest over mean flow up to which the flow itself needs no volume: practice, no source
VARIES = 0.02          # relative swing of flow or demand below which nothing is to be equalized: practice
OVERFLOWS = 0.05       # share of the water over a tank for the flow, beyond which it is not worth building: practice
HARDLY_HELPS = 0.8     # share of the swings left, beyond which a tank for the strength is not worth building: practice
TRIM_COVERS = 2.0      # trim feed over the error that the main feed may leave, as for a fine feeder
GAS_LINE_S = 2.0       # delay of a gas or dry feed: practice, no source


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Equalization:
    """The tank ahead. content_m3 : always full, for the strength; flow_m3 : above it, for the flow.

    table : what other volumes leave. saved_eq_d : reagent that mixing saves against treating each water alone.
    out : what leaves it, over the course. pumped : whether it is drawn off at a steady rate.
    """

    content_m3: float
    flow_m3: float
    choice: VolumeChoice | None
    table: pd.DataFrame | None
    words: str
    saved_eq_d: float
    out: Cases
    base_eq_l: Array
    draw_m3_h: float | None

    @property
    def volume_m3(self) -> float:
        """The whole tank."""
        return self.content_m3 + self.flow_m3


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StageFeed:
    """The feed of one reagent to one tank; accuracy, split and line are None where they do not apply."""

    reagent: Reagent
    need: FeedNeed
    trim: bool
    accuracy: Accuracy | None
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

    curve : the waste at its largest need. aid : bicarbonate instead of a tank, None where it is of no use.
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
    unequal_words: str


# ---------------------------------------------------------------- equalization


def _course_as_case(basis: Basis) -> Cases:
    c = basis.course
    own = None if c.base_eq_l is None else c.base_eq_l[:, None]
    return Cases(c.time_s, c.flow_m3_h[:, None], c.strength[:, :, None], own, c.step_s)


def _varies(basis: Basis) -> bool:
    """Whether flow or demand swings enough for a tank ahead."""
    q = basis.course.flow_m3_h
    lacks = basis.chem.readout.base_at(basis.aim_ph, basis.amounts) - basis.base_eq_l
    flows = q > 0.0
    size = float(np.abs(lacks[flows]).mean())
    return bool(np.ptp(q) > VARIES * q.mean() or np.ptp(lacks[flows]) > VARIES * size)


def equalization_of(basis: Basis) -> Equalization:
    """The tank ahead: as the file sets it, else by the knee of volume against what is left of the swings."""
    case, wish = _course_as_case(basis), basis.job.wishes.equalization_m3
    if wish == 0.0 or (wish is None and not _varies(basis)):
        words = "none, as the file sets it" if wish == 0.0 else "none: flow and strength hardly vary"
        return Equalization(content_m3=0.0, flow_m3=0.0, choice=None, table=None, words=words, saved_eq_d=0.0, out=case,
                            base_eq_l=basis.base_eq_l[:, None], draw_m3_h=None)
    flow_m3, why = _flow_volume(basis)
    table = _table(basis, case, flow_m3)
    if flow_m3 > 0.0 and float(table["overflow_share"].iloc[0]) > OVERFLOWS:
        why = (f"the flow is left to the tanks: {shown(flow_m3)} m³ for a daily cycle would still let "
               f"{100.0 * float(table['overflow_share'].iloc[0]):.0f} % of the water pass over")
        flow_m3, table = 0.0, _table(basis, case, 0.0)
    content, words, choice = _content(basis, table, flow_m3)
    flow_m3 = min(flow_m3, content + flow_m3 if wish is None else wish)
    if content + flow_m3 == 0.0:
        return Equalization(content_m3=0.0, flow_m3=0.0, choice=choice, table=table, words=words, saved_eq_d=0.0, out=case,
                            base_eq_l=basis.base_eq_l[:, None], draw_m3_h=None)
    draw = basis.course.mean_m3_h if flow_m3 > 0.0 else None
    tank = run_tank(case, basis.course.base(basis.chem.base_eq_l)[:, None], np.array([content]), flow_volume_m3=flow_m3,
                    draw_m3_h=draw)
    out = Cases(case.time_s, tank.out_m3_h[:, 0], tank.out_amounts[:, :, 0], tank.out_base_eq_l[:, 0], case.step_s)
    return Equalization(
        content_m3=content, flow_m3=flow_m3, choice=choice, table=table, words="; ".join(filter(None, (words, why))),
        saved_eq_d=_saved(content, table), out=out, base_eq_l=tank.out_base_eq_l[:, 0], draw_m3_h=draw)


def _content(basis: Basis, table: pd.DataFrame, flow_m3: float) -> tuple[float, str, VolumeChoice | None]:
    """Volume for the strength, why, and the rule that picked it where no file sets it."""
    wish = basis.job.wishes.equalization_m3
    if wish is not None:
        return max(wish - flow_m3, 0.5 * wish), f"{shown(wish)} m³, as the file sets it", None
    choice = choose_volume(table)
    left = table["sd_eq_l"].to_numpy(dtype=float)
    if left[0] > 0.0 and left[choice.row] > HARDLY_HELPS * left[0]:
        return 0.0, (f"none for the strength: even {shown(float(table['volume_m3'].iloc[-1]))} m³ would leave "
                     f"{100.0 * left[-1] / left[0]:.0f} % of its swings"), choice
    return choice.volume_m3, f"{shown(choice.volume_m3)} m³ always full: {choice.words}", choice


def _flow_volume(basis: Basis) -> tuple[float, str]:
    """Volume that evens out the flow, where it swings so much that tanks and feeds should not follow it."""
    course = basis.course
    factor = peak_factor(course.flow_m3_h, course.dt_s)
    if factor <= EVEN_FLOW:
        return 0.0, f"flow peaks at {factor:.2f} times its mean, up to {EVEN_FLOW:g} is left to the tanks"
    daily = course.duration_s >= DAY_S
    found = cumulative_volume(course, repeat_s=DAY_S if daily else None).volume_m3
    return found, (f"{shown(found)} m³ of it for the flow, which peaks at {factor:.2f} times its mean (gap of the cumulative "
                   "flow curve, Environmental Engineers' Handbook)")


def _aim_of(basis: Basis, amounts: Array) -> Array:
    return basis.chem.readout.base_at(basis.aim_ph, amounts_of(amounts))


def _table(basis: Basis, case: Cases, flow_m3: float) -> pd.DataFrame:
    return volume_table(
        case, basis.chem.base_eq_l, trial_volumes(basis.course.mean_m3_h), flow_volume_m3=flow_m3,
        draw_m3_h=basis.course.mean_m3_h if flow_m3 > 0.0 else None,
        ph=lambda base, amounts: basis.chem.readout.ph(base, amounts_of(amounts)),
        aim=lambda amounts: _aim_of(basis, amounts))


def _saved(content: float, table: pd.DataFrame) -> float:
    at = table["volume_m3"].to_numpy(dtype=float)
    return float(np.interp(content, at, table["saved_eq_d"].to_numpy(dtype=float)))


# ---------------------------------------------------------------- stages


def layout_of(basis: Basis) -> Layout:
    """Tanks, vessels, mixers and feeds of a job."""
    job, chem, site = basis.job, basis.chem, basis.job.site
    eq = equalization_of(basis)
    flow, base = eq.out.flow_m3_h[:, 0], eq.base_eq_l[:, 0]
    amounts = amounts_of(eq.out.strength[:, :, 0])
    dt = np.append(np.diff(eq.out.time_s), eq.out.step_s)
    needs = needs_of(chem, basis.aim_ph, flow, base, amounts, dt)
    main = max(needs, key=lambda kind: needs[kind].mean_eq_h)
    worst = needs[main].loads[2]
    curve = curve_of_readout(chem.readout, worst.base_eq_l, worst.amounts, chem.carbon_carrier)
    window = Window(low=job.window.low, high=job.window.high, aim=basis.aim_ph)
    peak, mean = float(flow.max()), float((flow * dt).sum() / dt.sum())
    choice = choose_stages(curve, window, error=site.feed_error, turndown=site.turndown, flow_m3_h=peak,
                           wanted=job.wishes.stages, aims=job.wishes.set_points)
    reagent = basis.chosen[main]
    falls = bool(chem.readout.metals)
    times = [residence(reagent, precipitates=falls, wanted_min=job.residence_min.get(reagent.name))
             for _ in range(choice.tanks)]
    sizes, why = job.wishes.volumes_m3, "as the file sets them"
    if sizes is None:
        sizes, why = unequal_volumes([volume_m3(peak, t.minutes) for t in times])
    foams = reagent.carbon_per_eq > 0.0 or any(w.carbon_mol_l > 0.0 for w in chem.wastes)
    course = _Course(flow=flow, base=base, amounts=amounts, dt=dt, peak=peak, mean=mean)
    stages = tuple(
        Stage(name=f"tank {k + 1}", setpoint_ph=ph, volume_m3=v, residence=t,
              vessel=round_vessel(v, site.depth_m, foams=foams), mixer=mixer(v, peak),
              feeds=_feeds(basis, course, choice.set_points, k, curve, window, mixer(v, mean).dead_s))
        for k, (ph, v, t) in enumerate(zip(choice.set_points, sizes, times, strict=True)))
    aid = None if choice.tanks < 2 else bicarbonate_aid(curve, window.low, window.high, site.feed_error, choice.tanks - 1)
    return Layout(equalization=eq, choice=choice, curve=curve, window=window, needs=needs, stages=stages, peak_m3_h=peak,
                  mean_m3_h=mean, aid=aid, unequal_words=why)


@dataclass(frozen=True, slots=True, eq=False)
class _Course:
    flow: Array
    base: Array
    amounts: Array
    dt: Array
    peak: float
    mean: float


def _feeds(basis: Basis, course: _Course, aims: tuple[float, ...], k: int, curve: DemandCurve, window: Window,
           tank_dead_s: float) -> dict[str, StageFeed]:
    """Feeds of tank k: what it asks for over the course, and for later tanks what the feed before may leave."""
    readout, site = basis.chem.readout, basis.job.site
    target = readout.base_at(aims[k], course.amounts)
    if k == 0:
        signed = L_PER_M3 * course.flow * (target - course.base)
        off = np.zeros_like(signed)
    else:
        before = readout.base_at(aims[k - 1], course.amounts)
        signed = L_PER_M3 * course.flow * (target - before)
        off = site.feed_error * L_PER_M3 * course.flow * np.abs(before - course.base)
    found = {}
    for kind, sign in ((BASE, 1.0), (ACID, -1.0)):
        if kind not in basis.chosen:
            continue
        most = np.maximum(sign * signed + off, 0.0)
        least = np.maximum(sign * signed - off, 0.0)
        trim = bool(most.max() <= NEVER * np.abs(signed).max()) or (k > 0 and bool((sign * signed).max() <= 0.0))
        if trim:  # never asked for in the normal course: it takes back what the other feed overdoes
            most = np.full_like(most, TRIM_COVERS * site.feed_error * float(np.abs(signed).max()) + float(off.max()))
            least = most
        found[kind] = _feed(basis, basis.chosen[kind], course, most, least, k, curve, window, tank_dead_s,
                            trim=trim, last=k == len(aims) - 1)
    return found


def _feed(basis: Basis, reagent: Reagent, course: _Course, most: Array, least: Array, k: int, curve: DemandCurve,
          window: Window, tank_dead_s: float, *, trim: bool, last: bool) -> StageFeed:
    site = basis.job.site
    largest = float(most.max())
    some = least[least > NEVER * largest]
    need = FeedNeed(name=f"{reagent.name}, tank {k + 1}", least_eq_h=float(some.min()) if some.size else largest,
                    largest_eq_h=largest, normality_eq_l=reagent.reacting_eq_l,
                    size_eq_h=float(least_feeder_size(largest)[0]))
    judged, split = None, None
    if last and not trim:
        span = need.size_eq_h / (L_PER_M3 * course.peak)
        judged = accuracy(curve, window, span, repeatability=site.feed_error, resolution=site.resolution,
                          dose_eq_l=largest / (L_PER_M3 * course.peak))
        if not judged.holds:
            split = split_range(window.tolerance_eq_l(curve), span, need.size_l_h, repeatability=site.feed_error,
                                resolution=site.resolution, turndown=site.turndown)
    pumped = np.isfinite(reagent.fed_eq_l)
    told = line(site.line_m, site.line_bore_mm, max(need.least_l_h, 1e-9), tank_dead_s) if pumped else None
    return StageFeed(reagent=reagent, need=need, trim=trim, accuracy=judged, split=split, line=told,
                     devices=tuple(words for _, _, words in turndown_words(need)))

"""What a design takes for granted, and what an engineer must know before building it, in words."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.basis import MOVED_PH, Basis
from aquabuf.assess.tank.curve import resolution
from aquabuf.assess.tank.job import Job
from aquabuf.assess.tank.layout import Layout, Stage, StageFeed
from aquabuf.assess.tank.reagents import ACID, BASE
from aquabuf.assess.tank.side import SideEffects
from aquabuf.assess.tank.trial import OPERATOR_MIN, FaultRun, Trial
from aquabuf.assess.tank.volumes import MIN_PER_H, equal_depth_m

__all__ = ["assumptions_of", "warnings_of"]

PLACED_PH = 0.3   # practice: a set point nearer to the window than this is hardly off the steep part
MORE_USED = 0.1   # share of a reagent that the other may take back before it is told: practice


def assumptions_of(basis: Basis, layout: Layout) -> tuple[str, ...]:
    """What the design takes for granted: its own, and those of the stream file."""
    job = basis.job
    own = [
        f"Course of flow and strength: {basis.course.source}.",
        f"Aim of the last tank pH {basis.aim_ph:g}: {basis.aim_why}.",
        f"Chemistry at {basis.chem.t_c:.1f} °C, closed to air; constants at one ionic strength of "
        f"{float(basis.chem.constants.ionic_strength_mol_l):.3g} mol/L; metals by fresh hydroxides in equilibrium.",
        "Tanks are sized for the largest flow behind the equalization tank and stay full; mixing dead time counts in "
        "the signal of the probe.",
        "Feeders are sized without the water that comes with the reagent, and for what dissolves at the largest flow.",
        f"Reagent lines are full of liquid; where one is longer than the tank's dead time, carrier water is taken for "
        f"granted (line {job.site.line_m:g} m, {job.site.line_bore_mm:g} mm).",
        f"Time rule: {job.window.total_min:g} min a month in all and {job.window.each_min:g} min at a time "
        f"({job.window.time_source}).",
        "Stores and reagent lines are as cold as 0 °C at the coldest.",
    ]
    if len(basis.chosen) == 1:
        own.append(f"No {ACID if BASE in basis.chosen else BASE} is fed: what a feeder overdoes leaves with the "
                   "water, or is taken up by what follows.")
    return tuple(dict.fromkeys([*own, *(f"{words}." for words in job.assumptions)]))


def warnings_of(basis: Basis, layout: Layout, trial: Trial | None, side: Mapping[str, SideEffects]) -> tuple[str, ...]:
    """What an engineer must know, the stream first, then tanks, feeds, side effects and failures."""
    job = basis.job
    found = [*basis.chem.warnings, *(f"{n}." for n in job.notes), *(f"{w}." for w in basis.sample_words)]
    for a in job.arrivals:
        if a.waste.curve is not None:
            seen = resolution(a.waste.curve, job.window.low, job.window.high)
            if seen.words:
                found.append(f"{a.waste.name}: {seen.words}")
    found += [*_of_aim(basis, layout), *(f"Equalization: {w}." for w in layout.equalization.told)]
    found += [*_of_kinds(basis, layout), *_of_train(basis, layout)]
    for stage in layout.stages:
        found += _of_stage(stage, layout, job)
        for feed in stage.feeds.values():
            found += [f"{stage.name}, {feed.reagent.name}: {w}." for w in _of_feed(feed, job)]
    found += [f"{e.name}: {e.words}" for s in side.values() for e in s.warnings]
    if trial is not None:
        found += _of_use(trial, layout)
        found += [_of_fault(r, job) for r in trial.faults if np.isfinite(r.minutes_to_leave)]
    return tuple(dict.fromkeys(found))


def _of_aim(basis: Basis, layout: Layout) -> Iterator[str]:
    if abs(basis.aim_ph - basis.half_ph) > MOVED_PH:
        f = basis.fit
        near, far = sorted((float(abs(f.low_share)), float(abs(f.high_share))))
        yield (f"The aim, pH {basis.aim_ph:g}, is off the middle of the window on the axis of reagent, pH "
               f"{basis.half_ph:.2f} ({basis.aim_why}): {100.0 * near:.3g} % of the demand to the nearer end, "
               f"{100.0 * far:.3g} % to the other.")
    need, c = abs(float(layout.curve.demand(basis.aim_ph))), layout.choice
    off = basis.job.site.feed_error * need
    if off > c.tolerance_eq_l:
        yield (f"The window is narrower than the feed error: an error of {100.0 * basis.job.site.feed_error:.3g} % of "
               f"{need:.3g} eq/L is {off:.2g} eq/L, and {c.tolerance_eq_l:.2g} eq/L lead out of it. One tank with one "
               "feeder cannot hold it; tanks in series, a fine feed or a buffer must.")


def _of_kinds(basis: Basis, layout: Layout) -> Iterator[str]:
    for kind, need in layout.needs.items():
        if kind not in basis.chosen:
            yield (f"At times the stream asks for {kind}, up to {need.most_eq_h:.3g} eq/h, and none is fed; then it "
                   "leaves as it comes.")
    for kind in basis.needs:
        if kind not in layout.needs:
            yield (f"Behind the equalization tank nothing asks for {kind} any more; when that tank is out of use, it "
                   "does.")


def _of_train(basis: Basis, layout: Layout) -> Iterator[str]:
    c, window = layout.choice, basis.job.window
    if not c.reaches:
        yield (f"On paper the train leaves {c.left_eq_l:.2g} eq/L where {c.tolerance_eq_l:.2g} are allowed; the "
               "simulation decides.")
    before = layout.curve.base_eq_l
    for stage in layout.stages:
        here = float(layout.curve.base_at(stage.setpoint_ph))
        if stage is not layout.stages[-1]:
            if window.low - PLACED_PH < stage.setpoint_ph < window.high + PLACED_PH:
                yield (f"{stage.name}: its set point, pH {stage.setpoint_ph:.2f}, lies in or beside the window, on the "
                       "steep part of the curve; no better place was left for it.")
            if (float(layout.curve.base_at(layout.window.aim)) - here) * (here - before) < 0.0:
                yield (f"{stage.name}: its set point, pH {stage.setpoint_ph:.2f}, overshoots the aim; the next tank "
                       "must bring it back.")
        for feed in stage.feeds.values():
            if not feed.trim and not bool(feed.reagent.reaches(stage.setpoint_ph)):
                yield (f"{stage.name}: {feed.reagent.name} does not bring water to pH {stage.setpoint_ph:.2f}; set "
                       "another set point, or take another reagent there.")
        before = here


def _of_stage(stage: Stage, layout: Layout, job: Job) -> Iterator[str]:
    least = MIN_PER_H * stage.volume_m3 / layout.peak_m3_h
    for feed in (f for f in stage.feeds.values() if not f.trim):
        span = feed.reagent.residence_min
        if least < span.low * (1.0 - 1e-9):
            yield (f"{stage.name}: holds the largest flow for {least:.3g} min, less than any rule for "
                   f"{feed.reagent.name}, {span.low:g} min or more.")
        elif least < min(span.usual, stage.residence.minutes) * (1.0 - 1e-9):
            yield (f"{stage.name}: holds the largest flow for {least:.3g} min, less than the {span.usual:g} min to "
                   f"design for with {feed.reagent.name} ({span.source}).")
    if stage.vessel.limited:
        yield (f"{stage.name}: as deep as wide it would hold {equal_depth_m(stage.volume_m3):.2f} m of liquid, deeper "
               f"than the site allows, {job.site.depth_m:g} m; at {stage.vessel.diameter_m:g} m wide check that one "
               "mixer reaches all of it.")


def _of_feed(feed: StageFeed, job: Job) -> Iterator[str]:
    if feed.accuracy is not None and not feed.accuracy.holds:
        more = "" if feed.split is None else f". Split range: {feed.split.words}"
        yield f"at {shown(feed.judged_m3_h)} m³/h {feed.accuracy.words}{more}"
    has = feed.split.turndown if feed.split is not None and feed.split.works else job.site.turndown
    if not feed.trim and feed.need.device_turndown > has * (1.0 + 1e-9):
        yield (f"the least need, {feed.need.least_eq_h:.3g} eq/h, lies below what the feeder gives, "
               f"{feed.need.size_eq_h / has:.3g} eq/h at a turndown of {has:g}; there it goes on and off, and "
               f"{feed.need.device_turndown:.3g}:1 would be needed")
    if feed.line is not None and not feed.line.holds:
        yield feed.line.words


def _of_use(trial: Trial, layout: Layout) -> Iterator[str]:
    """Reagent that only takes back what the other overdoes."""
    hours = trial.course.simulated_min / MIN_PER_H
    used = {BASE: trial.course.base_used_eq, ACID: trial.course.acid_used_eq}
    fed = {kind: float(eq[:, 0].sum()) / hours for kind, eq in used.items()}
    for kind, back in ((BASE, ACID), (ACID, BASE)):
        if kind in layout.needs and back not in layout.needs and fed[back] > MORE_USED * fed[kind]:
            yield (f"The feeds work against each other: {shown(fed[back])} eq/h of {back} take back what "
                   f"{shown(fed[kind])} eq/h of {kind} overdo.")


def _of_fault(r: FaultRun, job: Job) -> str:
    low, high = r.lowest_ph, r.highest_ph
    worst = low if job.window.low - low > high - job.window.high else high
    acts = (f"faster than an operator can act ({OPERATOR_MIN:g} min, practice): only an alarm that stops feed and "
            "discharge by itself helps" if r.is_quick else "an alarm and a stop valve must be quicker")
    return (f"{r.tank}, {r.kind}: leaves the window {r.minutes_to_leave:.0f} min after it begins, worst pH "
            f"{worst:.1f}; {acts}.")

"""A whole design: what the waste asks for, the tanks, the proof by simulation, side effects, storage, and what to mind."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.tank.basis import Basis, basis_of
from aquabuf.assess.tank.batch import BatchPlan, Reason, batch_plan, batch_reasons, batch_suits
from aquabuf.assess.tank.curve import resolution
from aquabuf.assess.tank.demand import Load
from aquabuf.assess.tank.effects import effects_of, totals_of, treated
from aquabuf.assess.tank.job import Job
from aquabuf.assess.tank.layout import Layout, layout_of
from aquabuf.assess.tank.sensitivity import sensitivity_of
from aquabuf.assess.tank.side import Caution, SideEffects, Treated, cautions_of
from aquabuf.assess.tank.side_gas import mixing_effects
from aquabuf.assess.tank.storage import (
    Containment,
    Store,
    cautions,
    containments,
    freezing_words,
    materials,
    order_of_addition,
    store,
)
from aquabuf.assess.tank.trial import Trial, trial_of
from aquabuf.errors import InputError

__all__ = ["Design", "design"]

Array = NDArray[np.float64]

HOURS_PER_DAY = 24.0
MIXING = "mixing"
TOXIC = ("cyanide", "sulfide", "hypochlorite")
REACT_H, DRAIN_TIMES = 1.0, 3.0  # of a batch: time to react, and rate of draining over the flow: practice, no source


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Design:
    """Everything that a stream file is answered with.

    side : by kind of reagent, and "mixing" of wastes where there are several. stops : what forbids the design. curve : pH, reagent and buffer intensity of the mean waste.
    trial : None where no simulation was asked for.
    """

    job: Job
    basis: Basis
    layout: Layout
    trial: Trial | None
    side: Mapping[str, SideEffects]
    stores: tuple[Store, ...]
    containments: tuple[Containment, ...]
    storage_words: tuple[str, ...]
    batch: BatchPlan | None
    batch_reasons: tuple[Reason, ...]
    sensitivity: pd.DataFrame
    curve: pd.DataFrame
    assumptions: tuple[str, ...]
    warnings: tuple[str, ...]
    cautions: tuple[str, ...]
    caution_sources: tuple[Caution, ...]

    @property
    def stops(self) -> tuple[str, ...]:
        """What forbids the design, in words."""
        return tuple(f"{e.name}: {e.words}" for s in self.side.values() for e in s.stops)

    @property
    def accepted(self) -> bool:
        """Whether nothing forbids it and the simulation shows it holding."""
        return not self.stops and self.trial is not None and self.trial.accepted

    @property
    def verdict(self) -> str:
        """The outcome in one sentence."""
        if self.stops:
            return f"Do not build this: {self.stops[0]}"
        if self.trial is None:
            return "Not proven: no simulation was run."
        if self.trial.monte is None:
            return (f"The course simulated {'keeps' if self.trial.kept else 'breaks'} the time rule; no probability, as no "
                    "cases were asked for.")
        m = self.trial.monte
        share = f"{100.0 * m.probability:.0f} % of {m.meets.size} simulated cases keep the time rule (95 % interval " \
                f"{100.0 * m.low:.0f} to {100.0 * m.high:.0f} %)"
        return f"The design holds: {share}." if self.trial.accepted else f"The design does not hold: only {share}."


def design(job: Job, *, simulate: bool = True, cases: int | None = None, processes: int = 2) -> Design:
    """Size and try a neutralization.

    cases : of the Monte Carlo in place of those of the job; 0 leaves the probability out.

    Raises
    ------
    InputError
        The waste is not known well enough, a reagent that it needs is missing, or nothing is to be neutralized.
    """
    basis = basis_of(job)
    layout = layout_of(basis)
    kinds = [kind for kind in basis.chosen if kind in basis.needs]
    side = {kind: _side(basis, kind) for kind in kinds}
    if len(job.wastes) > 1:
        side[MIXING] = _mixing(basis)
    stopped = any(s.stops for s in side.values())
    trial = None
    if simulate and not stopped:
        trial = trial_of(basis, layout, cases=job.trial.cases if cases is None else cases, processes=processes)
    stores, held, words = _storage(basis, layout)
    plan, reasons = _batch(basis)
    told = cautions_of([_case(basis, kind) for kind in kinds], list(side.values()))
    return Design(
        job=job, basis=basis, layout=layout, trial=trial, side=side, stores=stores, containments=held, storage_words=words,
        batch=plan, batch_reasons=tuple(reasons), sensitivity=sensitivity_of(basis, layout), curve=_curve(basis),
        assumptions=_assumptions(basis, layout), warnings=_warnings(basis, layout, trial, side),
        cautions=tuple(dict.fromkeys((*(c.words for c in told), *cautions(basis.chosen.values())))), caution_sources=told)


# ---------------------------------------------------------------- parts


def _case(basis: Basis, kind: str) -> Treated:
    load = basis.needs[kind].loads[1]
    row = next(d for d in basis.demands if d.reagent is basis.chosen[kind] and d.load is load)
    return treated(basis.chem, load, basis.chosen[kind], row.eq_l if np.isfinite(row.eq_l) else 0.0, basis.aim_ph)


def _side(basis: Basis, kind: str) -> SideEffects:
    load, job = basis.needs[kind].loads[1], basis.job
    row = next(d for d in basis.demands if d.reagent is basis.chosen[kind] and d.load is load)
    return effects_of(basis.chem, load, basis.chosen[kind], row.eq_l if np.isfinite(row.eq_l) else 0.0, basis.aim_ph,
                      window=(job.window.low, job.window.high), outlet_limit_c=job.site.outlet_limit_c)


def _mixing(basis: Basis) -> SideEffects:
    """Gas that wastes set free where they meet, ahead of every reagent."""
    meeting = []
    for k, (waste, ph) in enumerate(zip(basis.chem.wastes, basis.chem.ph, strict=True)):
        alone = Load(name=waste.name, flow_m3_h=0.0, base_eq_l=0.0, amounts=np.eye(len(basis.chem.wastes) + 1)[k])
        meeting.append((waste.name, float(ph), totals_of(basis.chem, alone)[0]))
    return SideEffects(tuple(mixing_effects(meeting)))


def _storage(basis: Basis, layout: Layout) -> tuple[tuple[Store, ...], tuple[Containment, ...], tuple[str, ...]]:
    """Stores by the mean use behind the equalization tank, containment of each under its own, and words."""
    stores, held, words = [], [], []
    for kind, reagent in basis.chosen.items():
        need = layout.needs.get(kind)
        if need is None:
            words.append(f"{reagent.name}: only takes back what the other feed overdoes; a drum or tote is enough")
            continue
        found = store(reagent, need.mean_eq_h * HOURS_PER_DAY * reagent.kg_per_eq, days=basis.job.site.storage_d)
        stores.append(found)
        if np.isfinite(found.volume_m3) and reagent.stock.product.form in ("liquid", "slurry"):
            held += containments([found.volume_m3], basis.job.site.containment)
        words += [f"{reagent.name}: {r.words} ({r.told_by})" for r in materials(reagent)]
        words += [w for w in (freezing_words(reagent, 0.0),) if w]
    words += [f"{r.words} ({r.told_by})" for r in order_of_addition(basis.chosen.values())]
    return tuple(stores), tuple(held), tuple(dict.fromkeys(words))


def _batch(basis: Basis) -> tuple[BatchPlan | None, list[Reason]]:
    """Batch tanks instead, and whether the rules speak for them."""
    toxic = [name for name in TOXIC if any(w.total(name) > 0.0 for w in basis.job.wastes)]
    flow = basis.course.mean_m3_h
    strongest = float(basis.base_eq_l[np.argmax(np.abs(basis.base_eq_l))])
    reasons = batch_reasons(flow, strongest, toxic)
    if not batch_suits(reasons):
        return None, reasons
    try:
        return batch_plan(flow, react_h=REACT_H, drain_m3_h=DRAIN_TIMES * flow), reasons
    except InputError:
        return None, reasons


def _curve(basis: Basis) -> pd.DataFrame:
    """The titration curve of the mean waste, every 0.05 pH."""
    ph = np.round(np.arange(0.0, 14.0001, 0.05), 2)
    c = basis.mean.amounts[:, None]
    return pd.DataFrame({"ph": ph, "reagent_eq_l": basis.chem.readout.base_at(ph, c) - basis.mean.base_eq_l,
                         "buffer_eq_l_ph": basis.chem.readout.buffer_at(ph, c)})


# ---------------------------------------------------------------- what it rests on


def _assumptions(basis: Basis, layout: Layout) -> tuple[str, ...]:
    job = basis.job
    own = [
        f"Course of flow and strength: {basis.course.source}.",
        f"Aim of the last tank pH {basis.aim_ph:g}: {basis.aim_why}.",
        f"Chemistry at {basis.chem.t_c:.1f} °C, closed to air; constants at one ionic strength of "
        f"{float(basis.chem.constants.ionic_strength_mol_l):.3g} mol/L; metals by fresh hydroxides in equilibrium.",
        "Tanks are sized for the largest flow behind the equalization tank and stay full; mixing dead time counts in the "
        "signal of the probe.",
        f"Reagent lines are full of liquid; where one is longer than the tank's dead time, carrier water is taken for "
        f"granted (line {job.site.line_m:g} m, {job.site.line_bore_mm:g} mm).",
        f"Time rule: {job.window.total_min:g} min a month in all and {job.window.each_min:g} min at a time "
        f"({job.window.source}).",
    ]
    return tuple(dict.fromkeys([*own, *(f"{words}." for words in job.assumptions)]))


def _warnings(basis: Basis, layout: Layout, trial: Trial | None, side: Mapping[str, SideEffects]) -> tuple[str, ...]:
    job = basis.job
    found = [*basis.chem.warnings, *(f"{n}." for n in job.notes), *(f"{w}." for w in basis.sample_words)]
    for a in job.arrivals:
        if a.waste.curve is not None:
            seen = resolution(a.waste.curve, job.window.low, job.window.high)
            if seen.words:
                found.append(f"{a.waste.name}: {seen.words}")
    if not layout.choice.reaches:
        found.append(f"On paper the train leaves {layout.choice.left_eq_l:.2g} eq/L where {layout.choice.tolerance_eq_l:.2g} "
                     "are allowed; the simulation decides.")
    for stage in layout.stages:
        for feed in stage.feeds.values():
            if feed.accuracy is not None and not feed.accuracy.holds:
                more = f" Split range: {feed.split.words}." if feed.split is not None else ""
                found.append(f"{stage.name}, {feed.reagent.name}: {feed.accuracy.words}.{more}")
            if feed.line is not None and not feed.line.holds:
                found.append(f"{stage.name}, {feed.reagent.name}: {feed.line.words}.")
    found += [f"{e.name}: {e.words}" for s in side.values() for e in s.warnings]
    if trial is not None:
        found += [f"{r.tank}, {r.kind}: leaves the window {r.minutes_to_leave:.0f} min after it begins, worst pH "
                  f"{_worst(r.lowest_ph, r.highest_ph, job):.1f}; an alarm and a stop valve must be quicker."
                  for r in trial.faults if np.isfinite(r.minutes_to_leave)]
    return tuple(dict.fromkeys(found))


def _worst(low: float, high: float, job: Job) -> float:
    """The end of a range that lies farther outside the window."""
    return low if job.window.low - low > high - job.window.high else high

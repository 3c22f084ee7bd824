"""A whole design: what the waste asks for, tanks, proof by simulation, side effects, storage, and what to mind."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.plant.feed import HOURS_PER_DAY
from aquabuf.assess.tank.alternatives import Alternative, alternatives_of
from aquabuf.assess.tank.basis import L_PER_M3, Basis, Need, basis_of
from aquabuf.assess.tank.batch import BatchPlan, Reason, batch_plan, batch_reasons, batch_suits
from aquabuf.assess.tank.demand import Load, demand_eq_l
from aquabuf.assess.tank.design_words import assumptions_of, warnings_of
from aquabuf.assess.tank.effects import totals_of, treated
from aquabuf.assess.tank.job import Job
from aquabuf.assess.tank.known import Known, known_of
from aquabuf.assess.tank.layout import Layout, layout_of
from aquabuf.assess.tank.reagents import Reagent
from aquabuf.assess.tank.sensitivity import sensitivity_of
from aquabuf.assess.tank.side import Caution, SideEffects, Treated, cautions_of, side_effects
from aquabuf.assess.tank.side_case import NOTE
from aquabuf.assess.tank.side_gas import gas_effects, mixing_effects
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

MIXING = "mixing"
TOXIC = ("cyanide", "sulfide", "hypochlorite")
COLDEST_C = 0.0  # of store and lines, where nothing tells
REACT_H, DRAIN_TIMES = 1.0, 3.0  # of a batch: time to react, and rate of draining over the flow: practice, no source


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Design:
    """Everything that a stream file is answered with.

    side : by kind of reagent, and "mixing" of wastes where there are several. stops : what forbids the design.
    curve : pH, reagent and buffer intensity of the mean waste. trial : None where no simulation was asked for, or what
    is to be built is forbidden.
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
    alternatives: tuple[Alternative, ...]
    known: tuple[Known, ...]
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
        """Whether nothing forbids it and enough simulated cases show it holding; one course alone proves nothing."""
        proof = None if self.trial is None else self.trial.monte
        return not self.stops and self.trial is not None and proof is not None and self.trial.accepted

    @property
    def verdict(self) -> str:
        """The outcome in one sentence."""
        if self.stops:
            return f"Do not build this: {self.stops[0]}"
        if self.trial is None:
            return "Not proven: no simulation was run."
        if self.trial.monte is None:
            kept = self.trial.kept
            return ("Not proven: the course simulated keeps the time rule, and no cases were asked for." if kept else
                    "The design does not hold: the course simulated breaks the time rule.")
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
    cases_of = {kind: _treated(basis, layout, kind) for kind in basis.chosen}
    side = {kind: _side(basis, layout, kind, case) for kind, case in cases_of.items()}
    if len(job.wastes) > 1:
        side[MIXING] = _mixing(basis)
    stopped = any(s.stops for s in side.values())
    trial = None
    if simulate and not stopped:
        trial = trial_of(basis, layout, cases=job.trial.cases if cases is None else cases, processes=processes)
    others = () if trial is None else alternatives_of(basis, layout, trial)
    known = known_of(basis.chem, tuple(a.mean_m3_h or 0.0 for a in job.arrivals))
    stores, held, words = _storage(basis, layout)
    plan, reasons = _batch(basis, layout)
    told = cautions_of(list(cases_of.values()), list(side.values()))
    return Design(
        job=job, basis=basis, layout=layout, trial=trial, side=side, stores=stores, containments=held,
        storage_words=words, batch=plan, batch_reasons=tuple(reasons), sensitivity=sensitivity_of(basis),
        alternatives=others, known=known, curve=_curve(basis),
        assumptions=assumptions_of(basis, layout), warnings=warnings_of(basis, layout, trial, side),
        cautions=tuple(dict.fromkeys((*(c.words for c in told), *cautions(basis.chosen.values())))),
        caution_sources=told)


# ---------------------------------------------------------------- parts


def _treated(basis: Basis, layout: Layout, kind: str) -> Treated:
    """What a reagent is fed to behind the equalization tank, by the mean of what asks for it.

    One that only takes back overshoot goes into water at the aim, as much as its feeders are made for.
    """
    reagent, need = basis.chosen[kind], layout.needs.get(kind)
    if need is None:
        main = max(layout.needs.values(), key=lambda n: n.mean_eq_h).loads[1]
        at = replace(main, base_eq_l=float(basis.chem.readout.base_at(basis.aim_ph, main.amounts)))
        dose = sum(s.feeds[kind].need.largest_eq_h for s in layout.stages) / (L_PER_M3 * layout.mean_m3_h)
        return treated(basis.chem, at, reagent, dose, basis.aim_ph)
    return treated(basis.chem, need.loads[1], reagent, dose_of(basis, need, reagent), basis.aim_ph)


def dose_of(basis: Basis, need: Need, reagent: Reagent) -> float:
    """Reagent that the mean of a need takes to the aim. [eq/L]"""
    load = need.loads[1]
    found = float(demand_eq_l(basis.chem.readout, load.base_eq_l, load.amounts, basis.aim_ph, reagent,
                              carbon_carrier=basis.chem.carbon_carrier))
    if not np.isfinite(found):
        raise InputError(f"the reagent must bring the stream to the aim, pH {basis.aim_ph:g}; {reagent.name} does not. "
                         "Name another in [use], or set an aim that it reaches.")
    return found


def _side(basis: Basis, layout: Layout, kind: str, case: Treated) -> SideEffects:
    """Side effects of a reagent; of one that only takes back overshoot no more than the toxic gas it may set free."""
    if kind not in layout.needs:
        return SideEffects(tuple(row for row in gas_effects(case) if row.severity != NOTE))
    window = basis.job.window
    return side_effects(case, window=(window.low, window.high), outlet_limit_c=basis.job.site.outlet_limit_c)


def _mixing(basis: Basis) -> SideEffects:
    """Gas that wastes set free where they meet, ahead of every reagent."""
    meeting = []
    for k, (waste, ph) in enumerate(zip(basis.chem.wastes, basis.chem.ph, strict=True)):
        alone = Load(name=waste.name, flow_m3_h=0.0, base_eq_l=0.0, amounts=np.eye(len(basis.chem.wastes) + 1)[k])
        meeting.append((waste.name, float(ph), totals_of(basis.chem, alone)[0]))
    return SideEffects(tuple(mixing_effects(meeting)))


def _storage(basis: Basis, layout: Layout) -> tuple[tuple[Store, ...], tuple[Containment, ...], tuple[str, ...]]:
    """Stores by the mean use behind the equalization tank, containment of each under its own, and words."""
    stores: list[Store] = []
    held: list[Containment] = []
    words: list[str] = []
    for kind, reagent in basis.chosen.items():
        need = layout.needs.get(kind)
        if need is None:
            words.append(f"{reagent.name}: only takes back what the other feed overdoes; a drum or tote is enough")
            continue
        kg_d = dose_of(basis, need, reagent) * L_PER_M3 * need.loads[1].flow_m3_h * HOURS_PER_DAY * reagent.kg_per_eq
        found = store(reagent, kg_d, days=basis.job.site.storage_d)
        stores.append(found)
        if np.isfinite(found.volume_m3) and reagent.stock.product.form in ("liquid", "slurry"):
            held += containments([found.volume_m3], basis.job.site.containment)
        words += [f"{reagent.name}: {r.words} ({r.told_by})" for r in materials(reagent)]
        words += [w for w in (freezing_words(reagent, COLDEST_C),) if w]
    words += [f"{r.words} ({r.told_by})" for r in order_of_addition(basis.chosen.values())]
    return tuple(stores), tuple(held), tuple(dict.fromkeys(words))


def _batch(basis: Basis, layout: Layout) -> tuple[BatchPlan | None, list[Reason]]:
    """Batch tanks instead, and whether the rules speak for them.

    By the largest flow behind the equalization tank and the largest need of water that flows.
    """
    toxic = [name for name in TOXIC if any(w.total(name) > 0.0 for w in basis.job.wastes)]
    lacks = (basis.chem.readout.base_at(basis.aim_ph, basis.amounts) - basis.base_eq_l)[basis.course.flow_m3_h > 0.0]
    reasons = batch_reasons(basis.course.mean_m3_h, float(np.abs(lacks).max()), toxic)
    if not batch_suits(reasons):
        return None, reasons
    return batch_plan(layout.peak_m3_h, react_h=REACT_H, drain_m3_h=DRAIN_TIMES * layout.peak_m3_h), reasons


def _curve(basis: Basis) -> pd.DataFrame:
    """The titration curve of the mean waste, every 0.05 pH."""
    ph = np.round(np.arange(0.0, 14.0001, 0.05), 2)
    c = basis.mean.amounts[:, None]
    return pd.DataFrame({"ph": ph, "reagent_eq_l": basis.chem.readout.base_at(ph, c) - basis.mean.base_eq_l,
                         "buffer_eq_l_ph": basis.chem.readout.buffer_at(ph, c)})

"""A plan solved: doses, feeds, the water after every step, targets, rules, what would upset it, and what to mind."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.aims import aims_of
from aquabuf.assess.plant.build import build_steps
from aquabuf.assess.plant.curve import DoseCurve, dose_curve
from aquabuf.assess.plant.digester import alkali_for, digester, digester_words
from aquabuf.assess.plant.drift import UnderError, UnderFeedError, under_error, under_feed_error
from aquabuf.assess.plant.faults import Fault, full_stroke, guard
from aquabuf.assess.plant.feed_lines import FeedLine, StoreLine, feed_lines, largest_mol_l, store_lines
from aquabuf.assess.plant.held import Held, held_against
from aquabuf.assess.plant.hold import Buffering, hold_ph, ranked
from aquabuf.assess.plant.plan import Plan
from aquabuf.assess.plant.ranges import ControlRange, control_range
from aquabuf.assess.plant.rules import Judged, cautions_of, judged_by, plan_limits
from aquabuf.assess.plant.steps.base import Finding, Step
from aquabuf.assess.plant.steps.blend import Blend
from aquabuf.assess.plant.steps.contactor import CalciteContactor
from aquabuf.assess.plant.stream import Stream, stream_of
from aquabuf.assess.plant.targets import Target
from aquabuf.assess.plant.train import Train, run_train
from aquabuf.assess.sample.inputs import uncertainties, values_of
from aquabuf.readings.result import join_readings
from aquabuf.readings.source import open_any

if TYPE_CHECKING:
    from aquabuf.assess.plant.season import Season

__all__ = ["Answer", "Hold", "TargetLine", "solve_plan"]

Array = NDArray[np.float64]

FAULT_HOURS = 1.0
USUAL_DRAWS, USUAL_SEED, USUAL_FEED_U = 500, 1, 0.05  # where the plan has no [drift]
OVERFEED = 2.0  # times the dose where no pump tells how much a stuck feed gives; common practice, no source


@dataclass(frozen=True, slots=True)
class TargetLine:
    """A target of a step, and what was reached, in house units."""

    step: str
    target: Target
    reached: float

    @property
    def met(self) -> bool:
        """Whether it is met."""
        return bool(self.target.met(np.array([self.reached]))[0])


@dataclass(frozen=True, slots=True, eq=False)
class Hold:
    """Buffers that hold a pH, best first, and what a feed fault does to the water as it is."""

    buffers: tuple[Buffering, ...]
    held: Held


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Answer:
    """Everything that a plan is answered with; streams and doses have one row.

    pair : what the raw water was solved from. stops : findings that forbid the plan. curves, ranges and faults are by
    the step and the name of the product.
    """

    plan: Plan
    raw: Stream
    pair: str
    steps: tuple[Step, ...]
    train: Train
    feeds: tuple[FeedLine, ...]
    store: tuple[StoreLine, ...]
    targets: tuple[TargetLine, ...]
    limits: tuple[Judged, ...]
    guards: tuple[Finding, ...]
    curves: tuple[DoseCurve, ...]
    ranges: tuple[ControlRange, ...]
    faults: tuple[Fault, ...]
    fault_words: tuple[str, ...]
    readings_error: UnderError | None
    feed_error: UnderFeedError | None
    season: Season | None
    hold: Hold | None
    digester_words: str
    cautions: tuple[str, ...]

    @property
    def beds(self) -> frozenset[tuple[str, str]]:
        """Step and product of what dissolves from a bed, which no machine feeds."""
        return frozenset(_beds(self.train))

    @property
    def assumptions(self) -> tuple[str, ...]:
        """What was taken because the plan does not say."""
        places: dict[str, list[str]] = {}
        for line in self.feeds:
            if line.setting is not None:
                places.setdefault(line.product.name, []).append(line.step)
        return (*self.plan.assumptions, *(
            f"{name} goes in at {' and '.join(at)}: each is taken to have a machine of its own of the size in the plan"
            for name, at in places.items() if len(at) > 1))

    @property
    def stops(self) -> tuple[tuple[str, Finding], ...]:
        """Findings that forbid the plan, with the step they are of."""
        return (*self.train.findings("stop"), *(("guard rails", f) for f in self.guards if f.severity == "stop"))

    @property
    def feasible(self) -> bool:
        """Whether every dose was found, every target is met, and no guard rail is passed."""
        return not self.stops and bool(self.train.feasible()[0]) and all(t.met for t in self.targets)

    @property
    def reason(self) -> str:
        """Why it is not feasible; "" where it is."""
        if self.stops:
            return "; ".join(f"{name}: {f.words}" for name, f in self.stops)
        unmet = [f"{t.step}: {t.target.words} not met, {t.target.quantity.text(t.reached)}" for t in self.targets
                 if not t.met]
        return "; ".join(unmet)


def solve_plan(plan: Plan, *, draws: int | None = None) -> Answer:
    """Solve a plan. `draws` replaces those of the plan; 0 leaves out what errors of readings and feeds do.

    Raises InputError where the raw water cannot be solved or a step cannot be built; what the products cannot reach is
    no error but the reason of the answer.
    """
    raw, pair = stream_of(dict(plan.raw.values))
    steps = tuple(build_steps(plan))
    train = run_train(raw, steps)
    feeds = feed_lines(plan, train)
    found = bool(train.feasible()[0])
    plain = _without_sweeps(train)
    faults, fault_words = _faults(plan, plain, feeds) if found else ((), ())
    ways = _drift(plan, plain, draws) if found else (None, None)
    return Answer(
        plan=plan, raw=raw, pair=str(pair[0]), steps=steps, train=train, feeds=feeds, store=store_lines(plan, feeds),
        targets=tuple(TargetLine(a.step, a.target, float(a.value(train)[0])) for a in aims_of(train)),
        limits=judged_by(train.final, plan_limits(plan)),
        guards=guard(plain, plan.guards) if found else (),
        curves=_curves(plain) if found else (), ranges=_ranges(plain) if found else (), faults=faults,
        fault_words=fault_words, readings_error=ways[0], feed_error=ways[1],
        season=_season(plan, [p.step for p in plain.passed]),
        hold=_hold(plan, train.final), digester_words=_digester(plan),
        cautions=cautions_of(train, [s.kind for s in plan.steps]))


def _without_sweeps(train: Train) -> Train:
    """The run with blends that do not look at other ratios when they are run again, which only takes time."""
    return Train(train.raw, tuple(
        replace(p, step=replace(p.step, with_sweep=False)) if isinstance(p.step, Blend) else p for p in train.passed))


def _beds(train: Train) -> set[tuple[str, str]]:
    return {(p.step.name, p.step.calcite.name) for p in train.passed if isinstance(p.step, CalciteContactor)}


def _fed(train: Train) -> list[tuple[int, str]]:
    """Place of the step and product of every dose that a machine feeds and that is not nothing, each once."""
    beds = _beds(train)
    return list(dict.fromkeys((k, d.product.name) for k, p in enumerate(train.passed) for d in p.outcome.doses
                              if d.mol_l[0] > 0.0 and (p.step.name, d.product.name) not in beds))


def _curves(train: Train) -> tuple[DoseCurve, ...]:
    return tuple(dose_curve(train.passed[k], name) for k, name in _fed(train))


def _ranges(train: Train) -> tuple[ControlRange, ...]:
    """Of every product that is fed, where the works have targets."""
    if not aims_of(train):
        return ()
    return tuple(control_range(train, name) for name in dict.fromkeys(name for _, name in _fed(train)))


def _faults(plan: Plan, train: Train, feeds: Sequence[FeedLine]) -> tuple[tuple[Fault, ...], tuple[str, ...]]:
    """A feed at full stroke and one that stands still, for every product that is fed."""
    out: list[Fault] = []
    words: list[str] = []
    seen: set[tuple[str, str]] = set()
    beds = _beds(train)
    for line in feeds:
        if not line.mol_l[0] > 0.0 or (line.step, line.product.name) in beds:
            continue
        if (line.step, line.product.name) in seen:
            words.append(f"{line.product.name} goes in twice in {line.step}: a fault is looked at where it first does")
            continue
        seen.add((line.step, line.product.name))
        most = largest_mol_l(line, plan.flow.now_m3_d)
        small = most is not None and most < line.mol_l[0]
        if most is None:
            words.append(f"{line.product.name}: the plan has no pump or feeder, so a stuck feed is taken as "
                         f"{OVERFEED:g} times the dose")
        elif small:
            words.append(f"{line.product.name}: its pump or feeder gives less than the dose, so that a stuck one does "
                         "not overfeed")
        factor = OVERFEED if most is None else 1.0 if small else None
        stuck, stopped = full_stroke(train, line.product.name, flow_m3_d=plan.flow.now_m3_d, hours=FAULT_HOURS,
                                     step=line.step, most_mol_l=None if factor else most, factor=factor)
        out += [stopped] if small else [stuck, stopped]
    return tuple(out), tuple(words)


def _drift(plan: Plan, train: Train, draws: int | None) -> tuple[UnderError | None, UnderFeedError | None]:
    spec = plan.drift
    draws = (spec.draws if spec else USUAL_DRAWS) if draws is None else draws
    if not draws:
        return None, None
    seed = spec.seed if spec else USUAL_SEED
    u = dict(uncertainties(dict(plan.raw.values))) | dict(plan.raw.u)
    if spec:
        u |= {name: np.array([value]) for name, value in spec.errors.items()}
    feed_u = spec.feed_error if spec else USUAL_FEED_U
    of_feeds = under_feed_error(train, relative_u=feed_u, draws=draws, seed=seed) if train.doses() else None
    return under_error(dict(plan.raw.values), [p.step for p in train.passed], u=u, draws=draws, seed=seed), of_feeds


def _season(plan: Plan, steps: Sequence[Step]) -> Season | None:
    if plan.drift is None or plan.drift.readings is None:
        return None
    from aquabuf.assess.plant.season import season  # its ranks are slow to import

    readings = join_readings(open_any(plan.drift.readings, plan.drift.mapping))
    return season(values_of(readings.frame), steps, flow_m3_d=plan.flow.now_m3_d)


def _digester(plan: Plan) -> str:
    """State of the plan's digester and the alkali it lacks; "" where it has none."""
    spec = plan.digester
    if spec is None:
        return ""
    found = digester(alkalinity_eq_l=spec.alkalinity_eq_l, volatile_acids_eq_l=spec.volatile_acids_eq_l,
                     co2_share=spec.co2_share, t_c=spec.t_c, ionic_strength_mol_l=spec.ionic_strength_mol_l)
    wanted = {"ratio": spec.ratio} if spec.ratio is not None else {"ph": spec.ph}
    return digester_words(found, None if spec.ratio is None and spec.ph is None else alkali_for(found, **wanted))


def _hold(plan: Plan, water: Stream) -> Hold | None:
    spec = plan.hold
    if spec is None:
        return None
    options = hold_ph(water.water(), ph=spec.ph, intensity_eq_l=spec.intensity_eq_l, use=spec.use)
    best = tuple(options[k] for k in ranked(options)[:, 0])
    low, high = spec.window
    fault = np.nan if spec.fault_eq_l is None else spec.fault_eq_l
    basin = np.nan if spec.basin_m3 is None else spec.basin_m3
    return Hold(best, held_against(water.water(), ph_low=low, ph_high=high, fault_eq_l=fault, volume_m3=basin,
                                   flow_m3_d=plan.flow.now_m3_d))

"""The design put to the test: tanks, feeders, probes and controllers from the layout, run under its own disturbances.

The design is accepted by this and not by a rule of thumb: by the share of simulated cases that keep the time rule.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.tank.arrivals import courses
from aquabuf.assess.tank.basis import L_PER_M3, Basis, amounts_of
from aquabuf.assess.tank.control import Controller, Tuning, simc, steepest_slope, tank_loop
from aquabuf.assess.tank.curve import MeasuredCurve, strength_of
from aquabuf.assess.tank.equalize_volume import run_tank
from aquabuf.assess.tank.equipment import Feeder, Inflow, Probe, Tank, step_for
from aquabuf.assess.tank.faults import FAULTS, Fault
from aquabuf.assess.tank.layout import Layout, Stage, StageFeed
from aquabuf.assess.tank.mixing import mixer
from aquabuf.assess.tank.monte import Bands, MonteCarlo, TimeRule, monte_carlo
from aquabuf.assess.tank.reagents import ACID, BASE
from aquabuf.assess.tank.simulate import Simulated, simulate
from aquabuf.engine.readout import GRID_PH
from aquabuf.errors import InputError

__all__ = [
    "ENOUGH", "OPERATOR_MIN", "FaultRun", "Trial", "bands_of", "inflow_of", "step_of", "tanks_of", "trial_of",
    "tunings_of",
]

Array = NDArray[np.float64]

DAY_S, MIN_S = 86400.0, 60.0
LONGEST_STEP_S = 10.0     # of a simulation whose step nobody set
RECORDS = 1440            # of a simulated course, at most
FAULT_S = 3600.0          # how long a fault lasts: an hour until somebody comes (practice)
BEFORE_S, AFTER_S = 300.0, 1800.0  # of a fault run: at rest ahead of the fault, and behind it
CHANGE = 1.3              # of the strength as a probe gets stuck: practice
OPERATOR_MIN = 10.0       # that an operator takes to see an alarm and act: practice
ENOUGH = 0.95             # share of the cases that must keep the time rule: practice, no source
SPREAD_POINTS = 81        # at which samples of a titration are held against each other
CURVE_STEP = 5            # every so many points of the grid in the curve of a controller


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FaultRun:
    """One failure of one tank for an hour, at the mean of what asks for the reagent concerned.

    minutes_to_leave : the window, from the start of the failure; nan where it never does.
    """

    tank: str
    kind: str
    words: str
    minutes_to_leave: float
    minutes_outside: float
    lowest_ph: float
    highest_ph: float

    @property
    def is_quick(self) -> bool:
        """Whether the window is left before an operator can act."""
        return self.minutes_to_leave < OPERATOR_MIN


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Trial:
    """What the simulation says. monte : None where no cases were asked for; the one course decides then."""

    tanks: tuple[Tank, ...]
    tunings: tuple[Tuning, ...]
    course: Simulated
    inflow: Inflow
    rule: TimeRule
    monte: MonteCarlo | None
    faults: tuple[FaultRun, ...]
    step_s: float

    @property
    def kept(self) -> bool:
        """Whether the one course that is shown keeps the time rule."""
        allowed = self.rule.allowed_min(self.course.simulated_min)
        return bool(self.course.outside_min[0] <= allowed and self.course.longest_min[0] <= self.rule.each_min)

    @property
    def accepted(self) -> bool:
        """Whether enough cases keep it; the one course counts where there are no cases."""
        return self.kept if self.monte is None else self.monte.probability >= ENOUGH


# ---------------------------------------------------------------- the plant


def _feeder(feed: StageFeed, basis: Basis) -> Feeder:
    r, site = feed.reagent, basis.job.site
    fine = feed.split if feed.split is not None and feed.split.works else None
    slow = r.dissolution_per_min
    return Feeder(
        largest_eq_h=feed.need.size_eq_h, normality_eq_l=r.reacting_eq_l, carbon_mol_eq=r.carbon_per_eq,
        base_eq_eq=abs(r.base_per_eq), resolution=site.resolution * (1.0 if fine is None else fine.fine_share),
        repeatability=site.feed_error, turndown=site.turndown if fine is None else fine.turndown,
        line_dead_s=feed.line_s, dissolution_per_min=slow, ceiling_ph=None if slow is None else r.ceiling_ph)


def _probe(stage: Stage, basis: Basis, flow_m3_h: float) -> Probe:
    site = basis.job.site
    return Probe(lag_s=site.probe_lag_s, noise_ph=site.probe_noise_ph, dead_s=_mixing_dead_s(stage, flow_m3_h))


def _mixing_dead_s(stage: Stage, flow_m3_h: float) -> float:
    return mixer(stage.volume_m3, flow_m3_h, pumping_m3_h=stage.mixer.pumping_m3_h).dead_s


def tunings_of(basis: Basis, layout: Layout) -> tuple[Tuning, ...]:
    """PI settings of each tank at the mean flow, on the axis that the file wants.

    On the pH axis by the steepest point of the curve as far from the set point as the window is wide to its nearer end.
    """
    out = []
    half = min(layout.window.high - layout.window.aim, layout.window.aim - layout.window.low)
    for stage in layout.stages:
        feeds = list(stage.feeds.values())
        main = next((f for f in feeds if not f.trim), feeds[0])
        loop = tank_loop(stage.volume_m3, layout.mean_m3_h, mixing_dead_s=_mixing_dead_s(stage, layout.mean_m3_h),
                         line_dead_s=main.line_s, probe_lag_s=basis.job.site.probe_lag_s,
                         dissolution_per_min=main.reagent.dissolution_per_min,
                         sample_s=basis.job.trial.step_s or LONGEST_STEP_S)
        gain = 1.0 / (L_PER_M3 * layout.mean_m3_h)
        if basis.job.wishes.axis == "ph":
            gain *= steepest_slope(GRID_PH, layout.curve.base, stage.setpoint_ph - half, stage.setpoint_ph + half)
        out.append(simc(loop, gain))
    return tuple(out)


def tanks_of(basis: Basis, layout: Layout, tunings: Sequence[Tuning], faults: Sequence[tuple[Fault, ...]] = (),
             ) -> tuple[Tank, ...]:
    """The stages with feeders, probes and controllers; the equalization tank is in the inflow."""
    wishes, readout = basis.job.wishes, basis.chem.readout
    amounts = basis.mean.amounts
    curve_ph = GRID_PH[::CURVE_STEP]
    curve_base = readout.base_at(curve_ph, amounts[:, None])
    tanks = []
    for k, (stage, tuning) in enumerate(zip(layout.stages, tunings, strict=True)):
        feeders = {kind: _feeder(f, basis) for kind, f in stage.feeds.items()}
        controller = Controller(
            setpoint_ph=stage.setpoint_ph, gain=tuning.gain, reset_s=tuning.reset_s, axis=wishes.axis,
            curve_ph=curve_ph, curve_base_eq_l=curve_base,
            flow_ref_m3_h=layout.mean_m3_h if wishes.feedforward else None)
        tanks.append(Tank(name=stage.name, volume_m3=stage.volume_m3, base=feeders.get(BASE), acid=feeders.get(ACID),
                          probe=_probe(stage, basis, layout.mean_m3_h), controller=controller,
                          faults=faults[k] if faults else ()))
    return tuple(tanks)


def inflow_of(basis: Basis, layout: Layout, cases: int) -> Inflow:
    """What reaches the first tank in each case: drawn courses behind the equalization tank."""
    drawn = courses(basis.job, basis.chem, cases)
    base = drawn.base(basis.chem.base_eq_l)
    eq = layout.equalization
    if eq.volume_m3 == 0.0:
        return Inflow(drawn.time_s, drawn.flow_m3_h, base, amounts_of(drawn.strength))
    tank = run_tank(drawn, base, np.array([eq.content_m3]), flow_volume_m3=eq.flow_m3, draw_m3_h=eq.draw_m3_h)
    return Inflow(drawn.time_s, tank.out_m3_h[:, 0], tank.out_base_eq_l[:, 0], amounts_of(tank.out_amounts[:, :, 0]))


def _of_case(inflow: Inflow, case: int) -> Inflow:
    return Inflow(inflow.time_s, inflow.flow_m3_h[:, [case]], inflow.base_eq_l[:, [case]], inflow.amounts[:, :, [case]])


# ---------------------------------------------------------------- the runs


def trial_of(basis: Basis, layout: Layout, *, cases: int, processes: int = 2, with_faults: bool = True) -> Trial:
    """One course as shown, failures one by one, and the cases that the probability is counted over."""
    job, chem = basis.job, basis.chem
    tunings = tunings_of(basis, layout)
    tanks = tanks_of(basis, layout, tunings)
    inflow = inflow_of(basis, layout, max(cases, 1))
    until = job.trial.days * DAY_S
    step = step_of(basis, layout, tanks, inflow)
    window = (job.window.low, job.window.high)
    rule = TimeRule(job.window.total_min, job.window.each_min, job.window.time_source)
    every = step * max(1.0, np.ceil(until / RECORDS / step))
    course = simulate(chem.readout, tanks, _of_case(inflow, 0), until_s=until, record_every_s=every,
                      window=window, dt_s=step, seed=job.trial.seed, carbon_carrier=chem.carbon_carrier)
    monte = None
    if cases > 0:
        monte = monte_carlo(chem.readout, tanks, inflow, cases=cases, until_s=until, rule=rule, bands=bands_of(basis),
                            processes=processes, window=window, dt_s=step, seed=job.trial.seed,
                            carbon_carrier=chem.carbon_carrier)
    return Trial(tanks=tanks, tunings=tunings, course=course, inflow=_of_case(inflow, 0), rule=rule, monte=monte,
                 faults=_fault_runs(basis, layout, tunings, step) if with_faults else (), step_s=step)


def step_of(basis: Basis, layout: Layout, tanks: Sequence[Tank], inflow: Inflow) -> float:
    """Step of the simulation: as the file sets it, else by the fastest loop and the rows of the course. [s]

    Raises InputError where the file sets one that is longer than a value of the course holds.
    """
    wish, shortest = basis.job.trial.step_s, float(np.diff(inflow.time_s).min(initial=np.inf))
    if wish is not None and wish > shortest:
        raise InputError("the step of [simulate] must not be longer than the course holds a value, "
                         f"{shortest:g} s; found {wish:g} s. Shorten it, or leave it out.")
    return wish or min(LONGEST_STEP_S, step_for(tanks, layout.peak_m3_h), shortest)


def bands_of(basis: Basis) -> Bands:
    """What is not known of the plant: buffers by the spread of the samples where there are several, probe offset.

    With several wastes so titrated, by the largest spread.
    """
    spreads = [_spread(a.samples) for a in basis.job.arrivals if len(a.samples) > 1]
    known = [s for s in spreads if np.isfinite(s)]
    return Bands(buffer_share=max(known, default=basis.job.trial.buffer_sd), offset_ph=basis.job.trial.probe_offset_sd)


def _spread(samples: Sequence[MeasuredCurve]) -> float:
    """Relative standard deviation of the strength of samples; nan where they share no pH."""
    low, high = max(c.ph[0] for c in samples), min(c.ph[-1] for c in samples)
    if not low < high:
        return np.nan
    strength, _ = strength_of(samples, np.linspace(low, high, SPREAD_POINTS))
    return float(np.std(strength, ddof=1) / abs(np.mean(strength)))


def _faults_for(layout: Layout) -> list[tuple[int, str]]:
    """Failures worth a look: the last probe stuck, feeds full on, main feeds out, buffers lost."""
    last = len(layout.stages) - 1
    found = [(last, "probe stuck")]
    for k in sorted({0, last}):
        for kind, feed in layout.stages[k].feeds.items():
            if not feed.trim or k == last:
                found.append((k, f"{kind} pump full on"))
            if not feed.trim:
                found.append((k, f"{kind} out"))
    return [*found, (0, "buffer lost")]


def _fault_runs(basis: Basis, layout: Layout, tunings: Sequence[Tuning], step_s: float) -> tuple[FaultRun, ...]:
    """Each failure as a case of one simulation."""
    job, window = basis.job, (basis.job.window.low, basis.job.window.high)
    begin = step_s * np.ceil(BEFORE_S / step_s)
    kinds = _faults_for(layout)
    faults = [tuple(Fault(kind, begin, FAULT_S, case) for case, (k, kind) in enumerate(kinds) if k == i)
              for i in range(len(layout.stages))]
    done = simulate(basis.chem.readout, tanks_of(basis, layout, tunings, faults),
                    _fault_inflow(layout, [kind for _, kind in kinds], begin), until_s=begin + FAULT_S + AFTER_S,
                    window=window, dt_s=step_s, seed=job.trial.seed, carbon_carrier=basis.chem.carbon_carrier,
                    record_every_s=step_s)
    runs = []
    for case, (k, kind) in enumerate(kinds):
        ph = done.ph[-1, :, case]
        left = done.time_s[((ph < window[0]) | (ph > window[1])) & (done.time_s > begin)]
        runs.append(FaultRun(
            tank=layout.stages[k].name, kind=kind, words=FAULTS[kind], lowest_ph=float(done.lowest_ph[case]),
            minutes_to_leave=float((left[0] - begin) / MIN_S) if left.size else np.nan,
            minutes_outside=float(done.outside_min[case]), highest_ph=float(done.highest_ph[case])))
    return tuple(runs)


def _fault_inflow(layout: Layout, kinds: Sequence[str], begin_s: float) -> Inflow:
    """The mean of what asks for the reagent that fails, else for the main one; stronger once a probe is stuck.

    A probe that stays where it is does harm only when the stream changes.
    """
    main = max(layout.needs.values(), key=lambda need: need.mean_eq_h)
    loads = [layout.needs.get(kind.split(" ")[0] if kind.endswith("out") else "", main).loads[1] for kind in kinds]
    factor = np.array([[1.0] * len(kinds), [CHANGE if kind == "probe stuck" else 1.0 for kind in kinds]])
    return Inflow([0.0, begin_s], np.full(2, layout.mean_m3_h), factor * np.array([load.base_eq_l for load in loads]),
                  np.stack([load.amounts for load in loads], axis=1)[:, None] * factor)

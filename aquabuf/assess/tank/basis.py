"""What a design rests on: the chemistry of the wastes, their course, the aim, the demand and the reagents chosen."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.feed import HOURS_PER_DAY
from aquabuf.assess.tank.arrivals import design_course, mean_shares
from aquabuf.assess.tank.compare import Comparison, Effects, compare
from aquabuf.assess.tank.demand import Aim, Demand, Load, WindowFit, aims_of, demands, window_fit
from aquabuf.assess.tank.effects import effects_of, summary_of
from aquabuf.assess.tank.job import Job
from aquabuf.assess.tank.profile import Profile
from aquabuf.assess.tank.reagents import ACID, BASE, Reagent
from aquabuf.assess.tank.waste import Chemistry, chemistry
from aquabuf.errors import InputError

__all__ = ["L_PER_M3", "MOVED_PH", "NEVER", "Basis", "Need", "amounts_of", "basis_of", "lacking_words", "needs_of"]

Array = NDArray[np.float64]

L_PER_M3 = 1e3
MARGIN_OF_WINDOW = 0.25  # of its width in pH, kept between the aim and either end: practice, probes drift by some 0.1
NEVER = 1e-3             # of the largest need, below which a reagent is not asked for in the normal course
MOVED_PH = 0.06          # between aim and middle of the window on the axis of reagent: more than rounding


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Need:
    """Reagent of one kind that a course asks for: least and most of its steps, and the mean over all time. [eq/h]

    loads : the steps behind the least, the mean and the most. That of the mean has the volume that asks for this kind
    spread over all time, so that amounts per day follow from it.
    """

    kind: str
    least_eq_h: float
    mean_eq_h: float
    most_eq_h: float
    loads: tuple[Load, Load, Load]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Basis:
    """Chemistry, course, aim and demand of a job, and the reagents that serve it.

    base_eq_l, amounts : of the course, (n,) and (J, n). aim_why : how the aim was found. fit : the window of the mean.
    half_ph : the pH that has as much reagent to either end of the window. needs : by kind, of the course as it comes.
    comparisons : by kind, of the reagents that could serve. chosen : by kind. lacking : by kind that is asked for, why
    no reagent is there for it.
    """

    job: Job
    chem: Chemistry
    course: Profile
    base_eq_l: Array
    amounts: Array
    aim_ph: float
    aim_why: str
    half_ph: float
    mean: Load
    fit: WindowFit
    needs: Mapping[str, Need]
    comparisons: Mapping[str, Comparison]
    chosen: Mapping[str, Reagent]
    lacking: Mapping[str, str]
    demands: tuple[Demand, ...]
    sample_words: tuple[str, ...]

    @property
    def main(self) -> str:
        """The kind of reagent that is asked for most."""
        return max(self.needs, key=lambda kind: self.needs[kind].mean_eq_h)


def amounts_of(strength: Array) -> Array:
    """Amounts of a course, (J, n) or (J, n, cases): its strengths, and no carbon of reagents."""
    return np.concatenate([strength, np.zeros_like(strength[:1])])


def needs_of(chem: Chemistry, aim_ph: float, flow_m3_h: Array, base_eq_l: Array, amounts: Array, dt_s: Array,
             ) -> dict[str, Need]:
    """Base and acid that a course asks for, step by step; steps without flow ask for nothing."""
    lacks = chem.readout.base_at(aim_ph, amounts) - base_eq_l
    eq_h = L_PER_M3 * flow_m3_h * lacks
    found = {}
    for kind, sign in ((BASE, 1.0), (ACID, -1.0)):
        wanted = np.maximum(sign * eq_h, 0.0)
        is_asked = wanted > NEVER * np.abs(eq_h).max()
        if not is_asked.any():
            continue
        asked = np.flatnonzero(is_asked)
        low, high = asked[int(np.argmin(wanted[asked]))], int(np.argmax(wanted))
        weight = is_asked * dt_s * flow_m3_h
        middle = Load(name="mean", flow_m3_h=float(weight.sum() / dt_s.sum()),
                      base_eq_l=float((base_eq_l * weight).sum() / weight.sum()),
                      amounts=(amounts * weight).sum(axis=1) / weight.sum())
        ends = [Load(name=name, flow_m3_h=float(flow_m3_h[k]), base_eq_l=float(base_eq_l[k]), amounts=amounts[:, k])
                for name, k in (("least", low), ("most", high))]
        found[kind] = Need(kind=kind, least_eq_h=float(wanted[low]), most_eq_h=float(wanted[high]),
                           mean_eq_h=float((wanted * dt_s).sum() / dt_s.sum()), loads=(ends[0], middle, ends[1]))
    return found


def _mean_load(course: Profile, base: Array, amounts: Array) -> Load:
    volume = course.volume_m3
    total = float(volume.sum())
    return Load(name="mean of all", flow_m3_h=course.mean_m3_h, base_eq_l=float((base * volume).sum() / total),
                amounts=(amounts * volume).sum(axis=1) / total)


def _half(chem: Chemistry, mean: Load, low: float, high: float) -> float:
    """pH with as much reagent to either end of the window."""
    return float(window_fit(chem.readout, mean.base_eq_l, mean.amounts, low, high, 0.5 * (low + high)).halving_ph)


def _aim(job: Job, half_ph: float) -> tuple[float, str]:
    window = job.window
    if job.wishes.set_points is not None:
        return job.wishes.set_points[-1], "as the file sets it"
    if window.aim is not None:
        return window.aim, "as the file sets it"
    free = MARGIN_OF_WINDOW * (window.high - window.low)
    low, high = window.low + free, window.high - free
    aim = float(np.clip(half_ph, low, high))
    places = next(n for n in (1, 2, 3, 9) if n == 9 or low <= round(aim, n) <= high)
    why = f"as much reagent to either end of the window is at pH {half_ph:.2f}"
    if aim != half_ph:
        why += f"; kept {free:.2g} pH from both ends, for the probe"
    return round(aim, places), why


def _effects_of(chem: Chemistry, load: Load, aim_ph: float) -> Callable[[Reagent, float], Effects]:
    return lambda reagent, eq_l: summary_of(effects_of(chem, load, reagent, eq_l, aim_ph),
                                            HOURS_PER_DAY * load.flow_m3_h)


def basis_of(job: Job) -> Basis:
    """Chemistry to reagents of a job.

    Raises InputError where a waste is not known well enough, the stream keeps the window by itself, the reagent that
    the file names cannot reach the aim, or no reagent at all serves the stream.
    """
    chem = chemistry(job.wastes, t_c=float(mean_shares(job.arrivals) @ np.array([w.t_c for w in job.wastes])))
    course = design_course(job, chem)
    base, amounts = course.base(chem.base_eq_l), amounts_of(course.strength)
    mean = _mean_load(course, base, amounts)
    _check_outside(job, chem, course, base, amounts)
    half = _half(chem, mean, job.window.low, job.window.high)
    aim, why = _aim(job, half)
    fit = window_fit(chem.readout, mean.base_eq_l, mean.amounts, job.window.low, job.window.high, aim)
    needs = needs_of(chem, aim, course.flow_m3_h, base, amounts, course.dt_s)
    comparisons, chosen, lacking = _reagents(job, chem, needs, aim)
    rows = tuple(row for kind, need in needs.items() if kind in chosen
                 for row in demands(chem.readout, need.loads, _aims(job, aim), [chosen[kind]],
                                    carbon_carrier=chem.carbon_carrier))
    return Basis(job=job, chem=chem, course=course, base_eq_l=base, amounts=amounts, aim_ph=aim, aim_why=why,
                 half_ph=half, mean=mean, fit=fit, needs=needs, comparisons=comparisons, chosen=chosen, lacking=lacking,
                 demands=rows, sample_words=_samples(job, aim))


def _aims(job: Job, aim_ph: float) -> tuple[Aim, ...]:
    return aims_of(job.window.low, aim_ph, job.window.high)


def _check_outside(job: Job, chem: Chemistry, course: Profile, base: Array, amounts: Array) -> None:
    """Refuse a stream that keeps the window over its whole course."""
    flows = course.flow_m3_h > 0.0
    ph = chem.readout.ph(base[flows], amounts[:, flows])
    low, high = float(ph.min()), float(ph.max())
    if job.window.low <= low and high <= job.window.high:
        raise InputError(f"a stream to be neutralized must leave its window; found pH {low:.2f} to {high:.2f} over the "
                         f"whole course, within {job.window.low:g} to {job.window.high:g}. Nothing is to be built for "
                         "it; check what it holds and the window.")


def _reagents(job: Job, chem: Chemistry, needs: Mapping[str, Need], aim_ph: float,
              ) -> tuple[dict[str, Comparison], dict[str, Reagent], dict[str, str]]:
    """Comparisons, reagents chosen, and why a kind that is asked for has none."""
    comparisons: dict[str, Comparison] = {}
    chosen: dict[str, Reagent] = {}
    lacking: dict[str, str] = {}
    for kind in (BASE, ACID):
        named = job.base if kind == BASE else job.acid
        there = [r for r in job.reagents.values() if r.kind == kind]
        need = needs.get(kind)
        if need is not None and there:
            load = need.loads[1]
            comparisons[kind] = compare(
                chem.readout, load, there, low_ph=job.window.low, setpoint_ph=aim_ph, high_ph=job.window.high,
                constants=chem.constants, carbon_carrier=chem.carbon_carrier,
                effects=_effects_of(chem, load, aim_ph))
        best = comparisons[kind].chosen if kind in comparisons else None
        if named is not None:
            chosen[kind] = job.reagents[named]
            _check_reaches(named, comparisons.get(kind), aim_ph)
        elif best is not None:
            chosen[kind] = best.reagent
        elif kind in comparisons:
            lacking[kind] = "; ".join(f"{c.reagent.name} {c.words}" for c in comparisons[kind].candidates)
        elif need is not None:
            lacking[kind] = f"the file names no {kind}"
    main = max(needs, key=lambda k: needs[k].mean_eq_h)
    if not chosen.keys() & needs.keys():
        raise InputError(lacking_words(main, aim_ph, needs[main].mean_eq_h, lacking[main]))
    return comparisons, chosen, lacking


def lacking_words(kind: str, aim_ph: float, mean_eq_h: float, why: str) -> str:
    """What to say where a reagent of a kind is needed and none is there."""
    return (f"the stream asks for {kind} to reach pH {aim_ph:g}, {mean_eq_h:.3g} eq/h on average, and no reagent does "
            f"it: {why}. Add a reagent to [reagents] that does.")


def _check_reaches(name: str, comparison: Comparison | None, aim_ph: float) -> None:
    """Refuse a reagent that the file names and that does not bring the waste to the aim."""
    found = next((c for c in comparison.candidates if c.reagent.name == name), None) if comparison else None
    if found is not None and not found.reaches:
        raise InputError(f"the reagent that [use] names must bring the stream to the aim, pH {aim_ph:g}; {name} does "
                         f"not: {found.words}. Name another, or set an aim that it reaches.")


def _samples(job: Job, aim_ph: float) -> tuple[str, ...]:
    """The band of several titrations of a waste at the aim."""
    words = []
    for a in job.arrivals:
        if len(a.samples) < 2:
            continue
        found = np.array([float(c.base_at(aim_ph)) for c in a.samples])
        if np.isfinite(found).all():
            words.append(f"{a.waste.name}: {len(a.samples)} samples ask for {1e3 * found.min():.3g} to "
                         f"{1e3 * found.max():.3g} meq/L of base to pH {aim_ph:g}, the one designed for "
                         f"{1e3 * float(a.waste.curve.base_at(aim_ph)):.3g}")  # type: ignore[union-attr]
    return tuple(words)

"""What a design rests on: the chemistry of the wastes, their course, the aim, the demand and the reagents chosen."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.tank.arrivals import design_course, mean_shares
from aquabuf.assess.tank.compare import Comparison, Effects, compare
from aquabuf.assess.tank.demand import Aim, Demand, Load, WindowFit, aims_of, demands, window_fit
from aquabuf.assess.tank.effects import effects_of, summary_of
from aquabuf.assess.tank.job import Job
from aquabuf.assess.tank.profile import Profile
from aquabuf.assess.tank.reagents import ACID, BASE, Reagent
from aquabuf.assess.tank.waste import Chemistry, chemistry
from aquabuf.errors import InputError

__all__ = ["Basis", "L_PER_M3", "NEVER", "Need", "amounts_of", "basis_of", "needs_of"]

Array = NDArray[np.float64]

L_PER_M3 = 1e3
MARGIN_OF_WINDOW = 0.25  # of its width in pH, kept between the aim and either end: practice, probes drift by some 0.1
NEVER = 1e-3             # of the larger need, below which the other reagent is not needed in the normal course


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Need:
    """Reagent of one kind that a course asks for: least and most of its steps, and the mean over all time. [eq/h]

    loads : the steps behind the least, the mean and the most.
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
    needs : by kind. comparisons : by kind, of the reagents that could serve. chosen : by kind, None where none is there.
    """

    job: Job
    chem: Chemistry
    course: Profile
    base_eq_l: Array
    amounts: Array
    aim_ph: float
    aim_why: str
    mean: Load
    fit: WindowFit
    needs: Mapping[str, Need]
    comparisons: Mapping[str, Comparison]
    chosen: Mapping[str, Reagent]
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
    """Base and acid that a course asks for, step by step; steps without flow count for the mean only."""
    lacks = chem.readout.base_at(aim_ph, amounts) - base_eq_l
    eq_h = L_PER_M3 * flow_m3_h * lacks
    found = {}
    for kind, sign in ((BASE, 1.0), (ACID, -1.0)):
        wanted = np.maximum(sign * eq_h, 0.0)
        asked = np.flatnonzero(wanted > NEVER * wanted.max())
        if not asked.size:
            continue
        low, high = asked[int(np.argmin(wanted[asked]))], int(np.argmax(wanted))
        weight = (wanted > 0.0) * dt_s * flow_m3_h
        q = float((flow_m3_h[asked] * dt_s[asked]).sum() / dt_s[asked].sum())
        middle = Load(name="mean", flow_m3_h=q, base_eq_l=float((base_eq_l * weight).sum() / weight.sum()),
                      amounts=(amounts * weight).sum(axis=1) / weight.sum())
        ends = [Load(name=name, flow_m3_h=float(flow_m3_h[k]), base_eq_l=float(base_eq_l[k]), amounts=amounts[:, k])
                for name, k in (("least", low), ("most", high))]
        found[kind] = Need(kind=kind, least_eq_h=float(wanted[low]), most_eq_h=float(wanted[high]),
                           mean_eq_h=float((wanted * dt_s).sum() / dt_s.sum()), loads=(ends[0], middle, ends[1]))
    return found


def _mean_load(course: Profile, base: Array, amounts: Array) -> Load:
    volume = course.volume_m3
    total = float(volume.sum())
    if not total > 0.0:
        raise InputError("a stream must flow at some time; found no flow at all. Correct flow or profile.")
    return Load(name="mean of all", flow_m3_h=course.mean_m3_h, base_eq_l=float((base * volume).sum() / total),
                amounts=(amounts * volume).sum(axis=1) / total)


def _aim(job: Job, chem: Chemistry, mean: Load) -> tuple[float, str]:
    window = job.window
    if job.wishes.set_points is not None:
        return job.wishes.set_points[-1], "as the file sets it"
    if window.aim is not None:
        return window.aim, "as the file sets it"
    middle = 0.5 * (window.low + window.high)
    half = float(window_fit(chem.readout, mean.base_eq_l, mean.amounts, window.low, window.high, middle).halving_ph)
    free = MARGIN_OF_WINDOW * (window.high - window.low)
    aim = round(float(np.clip(half, window.low + free, window.high - free)), 1)
    why = f"as much reagent to either end of the window is at pH {half:.2f}"
    if abs(aim - half) > 0.06:
        why += f"; kept {free:.2g} pH from both ends, for the probe"
    return aim, why


def _effects_of(chem: Chemistry, load: Load, aim_ph: float) -> Callable[[Reagent, float], Effects]:
    return lambda reagent, eq_l: summary_of(effects_of(chem, load, reagent, eq_l, aim_ph))


def basis_of(job: Job) -> Basis:
    """Chemistry to reagents of a job.

    Raises InputError where nothing flows, or a reagent of the kind that the stream asks for is missing or cannot reach
    the window.
    """
    chem = chemistry(job.wastes, t_c=float(mean_shares(job.arrivals) @ np.array([w.t_c for w in job.wastes])))
    course = design_course(job, chem)
    base, amounts = course.base(chem.base_eq_l), amounts_of(course.strength)
    mean = _mean_load(course, base, amounts)
    aim, why = _aim(job, chem, mean)
    fit = window_fit(chem.readout, mean.base_eq_l, mean.amounts, job.window.low, job.window.high, aim)
    needs = needs_of(chem, aim, course.flow_m3_h, base, amounts, course.dt_s)
    if not needs:
        raise InputError(f"the stream is at the aim of pH {aim:g} all the time; nothing is to be neutralized. Check what "
                         "it holds.")
    comparisons, chosen = _reagents(job, chem, needs, aim)
    rows = tuple(row for kind, need in needs.items() if kind in chosen
                 for row in demands(chem.readout, need.loads, _aims(job, aim), [chosen[kind]],
                                    carbon_carrier=chem.carbon_carrier))
    return Basis(job=job, chem=chem, course=course, base_eq_l=base, amounts=amounts, aim_ph=aim, aim_why=why, mean=mean,
                 fit=fit, needs=needs, comparisons=comparisons, chosen=chosen, demands=rows,
                 sample_words=_samples(job, aim))


def _aims(job: Job, aim_ph: float) -> tuple[Aim, ...]:
    return aims_of(job.window.low, aim_ph, job.window.high)


def _reagents(job: Job, chem: Chemistry, needs: Mapping[str, Need], aim_ph: float,
              ) -> tuple[dict[str, Comparison], dict[str, Reagent]]:
    comparisons: dict[str, Comparison] = {}
    chosen: dict[str, Reagent] = {}
    largest = max(n.mean_eq_h for n in needs.values())
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
        if named is not None:
            chosen[kind] = job.reagents[named]
        elif kind in comparisons and comparisons[kind].chosen is not None:
            chosen[kind] = comparisons[kind].chosen.reagent  # type: ignore[union-attr]
        elif need is not None and need.mean_eq_h > NEVER * largest:
            what = "base" if kind == BASE else "acid"
            why = comparisons[kind].why if kind in comparisons else f"the file names no {what}"
            raise InputError(f"the stream asks for {what} to reach pH {aim_ph:g}, {need.mean_eq_h:.3g} eq/h on average; "
                             f"{why}. Add a reagent to [reagents] that does it.")
    return comparisons, chosen


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

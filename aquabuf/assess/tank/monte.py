"""How likely a plant is to meet the time rule of its permit: the simulation over many drawn cases.

Each case draws its own inflow, strength and buffer of the waste, probe offsets and noise, from a stream that follows
from seed and case number alone: the answer is the same in one process or in several.
"""

from __future__ import annotations

import math
import multiprocessing
import pickle
from collections.abc import Callable, Sequence
from concurrent.futures import ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.stats import beta

from aquabuf.assess.tank.equipment import Inflow, Tank, step_for
from aquabuf.assess.tank.simulate import Simulated, simulate
from aquabuf.engine.readout import Readout
from aquabuf.errors import InputError

__all__ = ["Bands", "MonteCarlo", "TimeRule", "clopper_pearson", "monte_carlo"]

Array = NDArray[np.float64]
Draw = Callable[[np.random.Generator], Inflow]

TOGETHER = 100  # cases in one array: more do not run faster
MONTH_MIN = 31.0 * 24.0 * 60.0
DRAWN = 2       # stream of a case's draws; simulate uses 0 and 1


@dataclass(frozen=True, slots=True)
class TimeRule:
    """Time outside the window that a permit leaves: in all per calendar month, and in one excursion. [min]"""

    total_min: float
    each_min: float
    source: str

    def __post_init__(self) -> None:
        if not (self.total_min >= 0.0 and self.each_min >= 0.0):
            raise InputError(f"minutes of a time rule must not be negative; found {self.total_min} and "
                             f"{self.each_min}. Take them from the permit.")

    def allowed_min(self, simulated_min: float) -> float:
        """Total scaled to the simulated length: a month is counted as 31 days."""
        return self.total_min * simulated_min / MONTH_MIN

    def words(self, simulated_min: float) -> str:
        """The rule as it was applied."""
        return (f"at most {self.total_min:g} min outside per month of 31 days, scaled to "
                f"{self.allowed_min(simulated_min):.1f} min in the {simulated_min / 1440.0:g} days simulated, and at "
                f"most {self.each_min:g} min in one excursion ({self.source})")


@dataclass(frozen=True, slots=True)
class Bands:
    """What is not known of the plant, one draw per case.

    strength_share : of base and amounts together (relative standard deviation of a log-normal factor of mean 1).
    buffer_share : of the amounts alone, base held: the band of the titration curve. offset_ph : of each probe.
    """

    strength_share: float = 0.0
    buffer_share: float = 0.0
    offset_ph: float = 0.0

    def __post_init__(self) -> None:
        if not min(self.strength_share, self.buffer_share, self.offset_ph) >= 0.0:
            raise InputError(f"bands must not be negative; found {self}. Give relative standard deviations.")


@dataclass(frozen=True, slots=True, eq=False)
class MonteCarlo:
    """Outcome of the cases, each array (cases,).

    probability, low, high : of meeting the rule, with its exact 95 % interval (Clopper & Pearson 1934).
    processes : how many the cases ran in; the answer does not depend on it.
    """

    meets: NDArray[np.bool_]
    outside_min: Array
    longest_min: Array
    lowest_ph: Array
    highest_ph: Array
    strength: Array
    buffer: Array
    probability: float
    low: float
    high: float
    simulated_min: float
    allowed_min: float
    rule: str
    processes: int

    def quantiles(self, shares: ArrayLike = (0.5, 0.9, 0.95, 1.0)) -> dict[str, Array]:
        """Quantiles of time outside and of the worst pH; of the lowest pH the same share is above."""
        at = np.asarray(shares, dtype=float)
        return {"outside_min": np.quantile(self.outside_min, at), "longest_min": np.quantile(self.longest_min, at),
                "lowest_ph": np.quantile(self.lowest_ph, 1.0 - at), "highest_ph": np.quantile(self.highest_ph, at)}


def clopper_pearson(successes: int, trials: int, confidence: float = 0.95) -> tuple[float, float]:
    """Exact interval of a probability (Clopper & Pearson 1934, Biometrika 26:404, recalled)."""
    if not (trials > 0 and 0 <= successes <= trials):
        raise InputError(f"successes are 0 to the number of trials, which is above zero; found {successes} of "
                         f"{trials}. Correct the count.")
    tail = 0.5 * (1.0 - confidence)
    low = 0.0 if successes == 0 else float(beta.ppf(tail, successes, trials - successes + 1))
    high = 1.0 if successes == trials else float(beta.ppf(1.0 - tail, successes + 1, trials - successes))
    return low, high


@dataclass(frozen=True, slots=True, eq=False)
class _Job:
    """All that a process needs; plain records, so that it can be sent to one."""

    readout: Readout
    tanks: tuple[Tank, ...]
    inflow: Inflow | Draw
    bands: Bands
    seed: int
    until_s: float
    window: tuple[float, float]
    dt_s: float
    sample_s: float | None
    carbon_carrier: int | None


def monte_carlo(readout: Readout, tanks: Sequence[Tank], inflow: Inflow | Draw, *, cases: int, seed: int,
                until_s: float, window: tuple[float, float], rule: TimeRule, bands: Bands | None = None,
                dt_s: float | None = None, sample_s: float | None = None, carbon_carrier: int | None = None,
                processes: int = 2) -> MonteCarlo:
    """Simulate `cases` drawn plants and count how many meet the rule.

    inflow : of one case, for all; of `cases` cases, one for each; or a function of a random generator that draws one,
    all with the same times. A function must be one that can be pickled to run in several processes; else, or where
    processes cannot be started, all cases run in this one.
    """
    if cases < 1:
        raise InputError(f"a Monte Carlo run needs at least 1 case; found {cases}. Ask for some hundreds.")
    if isinstance(inflow, Inflow) and inflow.cases not in (1, cases):
        raise InputError(f"an inflow of a Monte Carlo run has one case or as many as the run ({cases}); found "
                         f"{inflow.cases}. Draw one for each case.")
    dt_s = step_for(tanks) if dt_s is None else dt_s
    job = _Job(readout, tuple(tanks), inflow, bands or Bands(), seed, until_s, window, dt_s, sample_s, carbon_carrier)
    parts = max(processes, math.ceil(cases / TOGETHER))
    blocks = [b.tolist() for b in np.array_split(np.arange(cases), parts) if b.size]
    shared = _in_processes(job, blocks, processes)
    done = shared or [_run_block(job, b) for b in blocks]
    outside, longest, lowest, highest, strength, buffer = (np.concatenate(part) for part in zip(
        *(d[:-1] for d in done), strict=True))
    simulated_min = done[0][-1]
    allowed = rule.allowed_min(simulated_min)
    meets = (outside <= allowed) & (longest <= rule.each_min)
    low, high = clopper_pearson(int(meets.sum()), cases)
    return MonteCarlo(meets=meets, outside_min=outside, longest_min=longest, lowest_ph=lowest, highest_ph=highest,
                      strength=strength, buffer=buffer, probability=float(meets.mean()), low=low, high=high,
                      simulated_min=simulated_min, allowed_min=allowed, rule=rule.words(simulated_min),
                      processes=processes if shared else 1)


_Done = tuple[Array, Array, Array, Array, Array, Array, float]


def _in_processes(job: _Job, blocks: list[list[int]], processes: int) -> list[_Done] | None:
    """The blocks in several processes; None where that cannot be."""
    if processes < 2 or len(blocks) < 2:
        return None
    try:
        pickle.dumps(job)
    except (pickle.PicklingError, AttributeError, TypeError):
        return None
    try:
        with ProcessPoolExecutor(processes, mp_context=multiprocessing.get_context("spawn")) as pool:
            return list(pool.map(_run_block, [job] * len(blocks), blocks))
    except (BrokenProcessPool, OSError):
        return None


def _run_block(job: _Job, cases: list[int]) -> _Done:
    """Some neighboring cases in one array."""
    generators = [np.random.default_rng(np.random.SeedSequence([job.seed, c]).spawn(DRAWN + 1)[DRAWN]) for c in cases]
    drawn = [_draw_one(job, c, g) for c, g in zip(cases, generators, strict=True)]
    strength, buffer = np.array([d[1] for d in drawn]), np.array([d[2] for d in drawn])
    offsets = np.array([d[3] for d in drawn])
    tanks = [replace(t, probe=replace(t.probe, offset_ph=t.probe.offset_ph + offsets[:, s]))
             for s, t in enumerate(job.tanks)]
    result: Simulated = simulate(
        job.readout, tanks, _together([d[0] for d in drawn], strength, buffer), until_s=job.until_s, window=job.window,
        dt_s=job.dt_s, seed=job.seed, first_case=cases[0], carbon_carrier=job.carbon_carrier, sample_s=job.sample_s)
    return (result.outside_min, result.longest_min, result.lowest_ph, result.highest_ph, strength, buffer,
            result.simulated_min)


def _draw_one(job: _Job, case: int, generator: np.random.Generator) -> tuple[Inflow, float, float, Array]:
    """Inflow, strength, buffer and probe offsets of one case."""
    normal = generator.standard_normal(2 + len(job.tanks))
    strength, buffer = (_log_normal(z, share)
                        for z, share in zip(normal, (job.bands.strength_share, job.bands.buffer_share), strict=False))
    inflow = _of_case(job.inflow, case) if isinstance(job.inflow, Inflow) else job.inflow(generator)
    return inflow, strength, buffer, job.bands.offset_ph * normal[2:]


def _of_case(inflow: Inflow, case: int) -> Inflow:
    if inflow.cases == 1:
        return inflow
    return Inflow(inflow.time_s, inflow.flow_m3_h[:, [case]], inflow.base_eq_l[:, [case]], inflow.amounts[:, :, [case]])


def _log_normal(normal: float, share: float) -> float:
    """Factor of mean 1 and relative standard deviation `share`."""
    variance = math.log1p(share * share)
    return math.exp(math.sqrt(variance) * normal - 0.5 * variance)


def _together(inflows: Sequence[Inflow], strength: Array, buffer: Array) -> Inflow:
    """Single-case inflows side by side, with their factors."""
    first = inflows[0]
    for one in inflows:
        if one.cases != 1 or one.time_s.shape != first.time_s.shape or (one.time_s != first.time_s).any():
            raise InputError(f"drawn inflows must be of one case each and share their times; found {one.cases} cases "
                             f"and {one.time_s.size} times beside {first.time_s.size}. Draw them on one time axis.")
    flow = np.concatenate([one.flow_m3_h for one in inflows], axis=-1)
    base = np.concatenate([one.base_eq_l for one in inflows], axis=-1)
    amounts = np.concatenate([one.amounts for one in inflows], axis=-1)
    return Inflow(first.time_s, flow, base * strength, amounts * (strength * buffer))

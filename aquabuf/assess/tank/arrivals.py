"""How the wastes of a job come, as one course of flow and strength: measured, or drawn from what is known of them."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from aquabuf.assess.tank.job import Arrival, Job
from aquabuf.assess.tank.profile import Cases, Profile, Variation, profile_of_table
from aquabuf.assess.tank.profile_draw import Dump, Statistics, draw, sd_from_most
from aquabuf.assess.tank.waste import Chemistry
from aquabuf.errors import InputError

__all__ = ["courses", "design_course", "mean_shares", "statistics_of"]

FLOW_LASTS_H = 1.0       # how long a flow stays much the same where nothing tells; practice, no source
STEP_H = 1.0 / 12.0      # of a drawn course that is simulated
DESIGN_STEP_H = 0.25     # of the course that volumes are sized by
DESIGN_DAYS = 14.0       # of the course that volumes are sized by: two weeks, as a survey of a waste should last
HARDLY = 1e-6            # steady flow beside batches where there is none, as a share of theirs


def mean_shares(arrivals: Sequence[Arrival]) -> np.ndarray:
    """Share of each waste in the mean volume that comes; even where a flow is not known."""
    if any(a.mean_m3_h is None for a in arrivals):
        return np.full(len(arrivals), 1.0 / len(arrivals))
    flows = np.array([a.mean_m3_h for a in arrivals], dtype=float)
    return flows / flows.sum()


def statistics_of(arrivals: Sequence[Arrival], days: float, step_h: float = STEP_H) -> Statistics:
    """What is known of wastes that nobody recorded, as statistics of their common stream.

    Steady flows add up, their daily cycles as vectors; a largest flow is passed for one percent of the time. Where some
    wastes have a largest flow, the others add the top of their daily cycle to it.

    Raises InputError where a daily cycle leaves the least and the largest flow.
    """
    steady = [a for a in arrivals if a.batch is None]
    dumps = tuple(
        Dump(size_m3=a.batch.size_m3, every_h=a.batch.every_h, lasts_h=a.batch.over_h, first_h=a.batch.first_h, waste=k)
        for k, a in enumerate(arrivals) if a.batch is not None)
    means = np.array([(a.mean_m3_h or 0.0) if a.batch is None else 0.0 for a in arrivals])
    mean = float(means.sum())
    shares = means / mean if mean > 0.0 else np.full(len(arrivals), 1.0 / len(arrivals))
    if mean == 0.0:
        mean = HARDLY * sum(a.mean_m3_h or 0.0 for a in arrivals)
    least = sum(a.least_m3_h or 0.0 for a in steady)
    most = sum(_most(a) for a in steady) if any(a.most_m3_h is not None for a in steady) else np.inf
    amplitude, peak = _daily(steady, mean)
    sd = sd_from_most(mean * (1.0 + amplitude), most) if np.isfinite(most) and most > mean * (1.0 + amplitude) else 0.0
    return Statistics(
        mean_m3_h=mean, least_m3_h=least, most_m3_h=most, flow=Variation(sd, FLOW_LASTS_H), daily_amplitude=amplitude,
        daily_peak_h=peak, wastes=len(arrivals), shares=tuple(float(s) for s in shares),
        strength=tuple(_variation(a) for a in arrivals), dumps=dumps, days=days, step_h=min(step_h, days * 24.0))


def _most(arrival: Arrival) -> float:
    """Largest flow of a waste, by its daily cycle where nobody says. [m3/h]"""
    if arrival.most_m3_h is not None:
        return arrival.most_m3_h
    return (arrival.mean_m3_h or 0.0) * (1.0 + (0.0 if arrival.daily is None else arrival.daily.swing))


def _daily(steady: Sequence[Arrival], mean: float) -> tuple[float, float]:
    """Amplitude over the mean and hour of the peak of all daily cycles together."""
    turn = 2.0 * np.pi / 24.0
    total = sum(((a.mean_m3_h or 0.0) * a.daily.swing * np.exp(1j * turn * a.daily.peak_h)
                 for a in steady if a.daily is not None), start=0j)
    return float(abs(total)) / mean, float(np.angle(total) / turn % 24.0)


def _variation(arrival: Arrival) -> Variation:
    return Variation() if arrival.spread is None else Variation(arrival.spread.relative_sd, arrival.spread.lasting_h)


def design_course(job: Job, chem: Chemistry) -> Profile:
    """The course that volumes are sized by: the measured one, else one drawn for two weeks."""
    if job.profile is not None:
        return _measured(job, chem)
    drawn = draw(statistics_of(job.arrivals, DESIGN_DAYS, DESIGN_STEP_H), 1, job.trial.seed)
    return Profile(time_s=drawn.time_s, flow_m3_h=drawn.flow_m3_h[:, 0], strength=drawn.strength[:, :, 0],
                   step_s=drawn.step_s, source=f"drawn for {DESIGN_DAYS:g} days from the statistics of the wastes, "
                                               f"seed {job.trial.seed}")


def _measured(job: Job, chem: Chemistry) -> Profile:
    assert job.profile is not None
    bases = {w.name: float(b) for w, b in zip(chem.wastes, chem.base_eq_l, strict=True)}
    told = all(a.mean_m3_h is not None for a in job.arrivals)
    return profile_of_table(job.profile, bases, mean_shares(job.arrivals).tolist() if told and len(bases) > 1 else None)


def courses(job: Job, chem: Chemistry, n: int) -> Cases:
    """Courses for a simulation of the length that the job asks for, one per case.

    A measured course is repeated to that length and takes the noise of strength of each waste; without one, each case
    is drawn anew.
    """
    days = job.trial.days
    if job.profile is None:
        return draw(statistics_of(job.arrivals, days), n, job.trial.seed)
    once = _measured(job, chem)
    if not once.duration_s > 0.0:
        raise InputError("a profile must last longer than nothing; found no duration. Add rows.")
    times = int(np.ceil(days * 86400.0 / once.duration_s * (1.0 - 1e-12)))
    whole = once if times == 1 else Profile(
        time_s=np.concatenate([once.time_s + k * once.duration_s for k in range(times)]),
        flow_m3_h=np.tile(once.flow_m3_h, times), strength=np.tile(once.strength, (1, times)), step_s=once.step_s,
        base_eq_l=None if once.base_eq_l is None else np.tile(once.base_eq_l, times), source=once.source)
    return whole.cases(n, job.trial.seed, strength=tuple(_variation(a) for a in job.arrivals))

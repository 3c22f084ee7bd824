"""The layout beside others: what other tanks, volumes or a finer feed would do under the same disturbances."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from aquabuf.assess.plant.steps.words import brief
from aquabuf.assess.tank.basis import Basis
from aquabuf.assess.tank.job import Job, Wishes
from aquabuf.assess.tank.layout import Layout, layout_of
from aquabuf.assess.tank.trial import Trial, trial_of
from aquabuf.errors import InputError

__all__ = ["Alternative", "alternatives_of"]

MOST_CASES = 20          # of each other layout: enough to rank them, not to prove one (practice)
LARGER = 2.0             # times the volumes of the layout
FINER = 0.5              # times the error of the feed
MOST_TANKS = 4
USUAL_HOURS = 6.0        # of mean flow in an equalization tank where there is none: practice, 6 to 12 h in dairies


@dataclass(frozen=True, slots=True, kw_only=True)
class Alternative:
    """One layout. volume_m3 : of all its tanks. outside_min : median of the cases. accepted : by the same rule.

    low, high : 95 % interval of the probability. words : what is changed.
    """

    words: str
    tanks: int
    equalization_m3: float
    volume_m3: float
    cases: int
    probability: float
    low: float
    high: float
    outside_min: float
    accepted: bool


def alternatives_of(basis: Basis, layout: Layout, trial: Trial, *, processes: int = 2) -> tuple[Alternative, ...]:
    """The layout first, then others that differ in one thing; empty where the trial has no cases."""
    if trial.monte is None:
        return ()
    cases = min(trial.monte.meets.size, MOST_CASES)
    found = [_row("as designed", layout, trial)]
    for words, change in _changes(basis.job, layout):
        job = change(basis.job)
        try:
            other = replace(basis, job=job)
            made = layout_of(other)
            tried = trial_of(other, made, cases=cases, processes=processes, with_faults=False)
        except InputError:  # a layout that cannot be made is no alternative
            continue
        found.append(_row(words, made, tried))
    return tuple(found)


def _changes(job: Job, layout: Layout) -> list[tuple[str, Callable[[Job], Job]]]:
    tanks, eq = len(layout.stages), layout.equalization.volume_m3
    volumes = tuple(LARGER * s.volume_m3 for s in layout.stages)
    aims = tuple(s.setpoint_ph for s in layout.stages)
    usual = USUAL_HOURS * layout.mean_m3_h
    found: list[tuple[str, Callable[[Job], Job]]] = []
    if tanks > 1:
        found.append((f"{tanks - 1} tank{'s' if tanks > 2 else ''}", lambda j: _wish(j, stages=tanks - 1)))
    if tanks < MOST_TANKS:
        found.append((f"{tanks + 1} tanks", lambda j: _wish(j, stages=tanks + 1)))
    found.append((f"tanks {brief(LARGER)} times as large", lambda j: _wish(
        j, stages=tanks, volumes_m3=volumes, set_points=aims)))
    if eq > 0.0:
        found.append(("no equalization", lambda j: _wish(j, equalization_m3=0.0)))
        found.append((f"equalization {brief(LARGER)} times as large", lambda j: _wish(j, equalization_m3=LARGER * eq)))
    elif np.isfinite(usual):
        found.append((f"equalization of {brief(usual)} m³", lambda j: _wish(j, equalization_m3=usual)))
    found.append((f"feed error of {100.0 * FINER * job.site.feed_error:.2g} %", lambda j: replace(
        j, site=replace(j.site, feed_error=FINER * j.site.feed_error, resolution=FINER * j.site.resolution))))
    return found


def _wish(job: Job, **changes: object) -> Job:
    """The job with other wishes; what the file set on tanks gives way where their number changes."""
    free: dict[str, object] = {"stages": None, "volumes_m3": None, "set_points": None} if "stages" in changes else {}
    wishes: Wishes = replace(job.wishes, **(free | changes))  # type: ignore[arg-type]
    return replace(job, wishes=wishes)


def _row(words: str, layout: Layout, trial: Trial) -> Alternative:
    m = trial.monte
    assert m is not None
    eq = layout.equalization.volume_m3
    return Alternative(words=words, tanks=len(layout.stages), equalization_m3=eq,
                       volume_m3=eq + sum(s.volume_m3 for s in layout.stages), cases=int(m.meets.size),
                       probability=m.probability, low=m.low, high=m.high, outside_min=float(np.median(m.outside_min)),
                       accepted=trial.accepted)

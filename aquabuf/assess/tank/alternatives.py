"""The layout beside others: what other tanks, volumes or a finer feed would do under the same disturbances."""

from __future__ import annotations

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


def alternatives_of(basis: Basis, layout: Layout, trial: Trial) -> tuple[Alternative, ...]:
    """The layout first, then others that differ in one thing; empty where the trial has no cases.

    What could be left out beside a design that holds, what could be added to one that does not.
    """
    if trial.monte is None:
        return ()
    cases = min(trial.monte.meets.size, MOST_CASES)
    found = [_row("as designed", layout, trial)]
    changes = _smaller(basis.job, layout) if trial.accepted else _larger(basis.job, layout)
    for words, job in changes:
        try:
            other = replace(basis, job=job)
            made = layout_of(other)
            tried = trial_of(other, made, cases=cases, processes=1, with_faults=False)
        except InputError:  # a layout that cannot be made is no alternative
            continue
        found.append(_row(words, made, tried))
    return tuple(found)


def _smaller(job: Job, layout: Layout) -> list[tuple[str, Job]]:
    tanks, eq = len(layout.stages), layout.equalization.volume_m3
    found = []
    if tanks > 1:
        found.append((f"{tanks - 1} tank{'s' if tanks > 2 else ''}", _wish(job, stages=tanks - 1)))
    if eq > 0.0:
        found.append((f"equalization {brief(eq / LARGER)} m³", _fixed(job, layout, equalization_m3=eq / LARGER)))
        found.append(("no equalization", _fixed(job, layout, equalization_m3=0.0)))
    return found


def _larger(job: Job, layout: Layout) -> list[tuple[str, Job]]:
    tanks, eq = len(layout.stages), layout.equalization.volume_m3
    more_eq = LARGER * eq or USUAL_HOURS * layout.mean_m3_h
    eq_words = f"equalization {brief(more_eq)} m³"
    volumes = tuple(LARGER * s.volume_m3 for s in layout.stages)
    found = []
    if tanks < MOST_TANKS:
        found.append((f"{tanks + 1} tanks", _wish(job, stages=tanks + 1)))
    larger = f"tanks {brief(LARGER)} times larger"
    found.append((larger, _fixed(job, layout, volumes_m3=volumes)))
    found.append((eq_words, _fixed(job, layout, equalization_m3=more_eq)))
    found.append((f"{eq_words}, {larger}", _fixed(job, layout, equalization_m3=more_eq, volumes_m3=volumes)))
    finer = replace(job.site, feed_error=FINER * job.site.feed_error, resolution=FINER * job.site.resolution)
    found.append((f"feed error {100.0 * finer.feed_error:.2g} %", replace(_fixed(job, layout), site=finer)))
    return found


def _fixed(job: Job, layout: Layout, **changes: object) -> Job:
    """The job with the number of tanks and aims of the layout, and other wishes."""
    return _wish(job, stages=len(layout.stages), set_points=tuple(s.setpoint_ph for s in layout.stages), **changes)


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

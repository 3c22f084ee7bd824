"""Profiles drawn from statistics: mean, least and most flow, a daily cycle, noise, and batches that are dumped.

Every mean holds in expectation, not about: noise has mean one, flow is clipped to its least and most around a center
that gives back the mean, and the daily cycle is the mean over each step. What a dump brings comes on top.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr, ndtri

from aquabuf.assess.tank.profile import (
    HOUR_S,
    Cases,
    Profile,
    Variation,
    check_draws,
    noise,
    shares_of,
    spread_over,
)
from aquabuf.errors import InputError

__all__ = ["Dump", "Statistics", "draw", "profile_of_statistics", "sd_from_most"]

Array = NDArray[np.float64]

DAY_H = 24.0
NO_NOISE = Variation()
HALVINGS = 200           # of the bracket of a clipped mean, in its logarithm; more than a float holds
MOST_SHARE = 0.01        # of the time that the stated most flow is exceeded (common practice, no source)


@dataclass(frozen=True, slots=True, kw_only=True)
class Dump:
    """A batch of one waste that is let into the stream every so many hours.

    size_m3 : volume of one dump, beside the flow of the stream. strength : amount of the waste in it, 1 as described.
    every_h : time from one to the next. lasts_h : time it takes. first_h : of the first; drawn evenly where None.
    """

    size_m3: float
    every_h: float
    lasts_h: float
    waste: int = 0
    strength: float = 1.0
    first_h: float | None = None

    def __post_init__(self) -> None:
        for what, value in (("size", self.size_m3), ("interval", self.every_h), ("duration", self.lasts_h)):
            if not (np.isfinite(value) and value > 0.0):
                raise InputError(f"the {what} of a dump must be above 0; found {value:g}. Correct it.")
        if self.lasts_h > self.every_h:
            raise InputError(f"a dump must end before the next begins, {self.every_h:g} h later; found a duration of "
                             f"{self.lasts_h:g} h. Correct one of them.")
        if not self.strength >= 0.0:
            raise InputError(f"the strength of a dump must be 0 or more; found {self.strength:g}. Correct it.")


@dataclass(frozen=True, slots=True, kw_only=True)
class Statistics:
    """What is known of a stream without a record of it.

    mean_m3_h, least_m3_h, most_m3_h : flow, without dumps. flow : its noise.
    daily_amplitude : of the daily cycle, as a share of the mean; it peaks at daily_peak_h (0 to 24).
    wastes : number of them; shares of each in the volume; strength : noise of each, or one for all.
    days, step_h : length and step of the course, which begins at midnight.
    """

    mean_m3_h: float
    least_m3_h: float = 0.0
    most_m3_h: float = float("inf")
    flow: Variation = NO_NOISE
    daily_amplitude: float = 0.0
    daily_peak_h: float = 12.0
    wastes: int = 1
    shares: tuple[float, ...] | None = None
    strength: tuple[Variation, ...] = ()
    dumps: tuple[Dump, ...] = ()
    days: float = 30.0
    step_h: float = 1.0

    def __post_init__(self) -> None:
        if not (np.isfinite(self.mean_m3_h) and 0.0 <= self.least_m3_h <= self.mean_m3_h <= self.most_m3_h
                and self.mean_m3_h > 0.0):
            raise InputError(f"flow must rise from least (0 or more) to mean to most; found {self.least_m3_h:g}, "
                             f"{self.mean_m3_h:g}, {self.most_m3_h:g} m3/h. Correct them.")
        if not 0.0 <= self.daily_amplitude <= 1.0:
            raise InputError(f"the daily amplitude must be 0 to 1 times the mean flow; found {self.daily_amplitude:g}. "
                             "Correct it.")
        if not (self.days > 0.0 and 0.0 < self.step_h <= DAY_H * self.days):
            raise InputError(f"the course must have days above 0 and steps within it; found {self.days:g} d in steps "
                             f"of {self.step_h:g} h. Correct them.")
        low, high = (self.mean_m3_h * (1.0 + sign * self.daily_amplitude) for sign in (-1.0, 1.0))
        slack = 1e-9 * self.mean_m3_h
        if low < self.least_m3_h - slack or high > self.most_m3_h + slack:
            room = min(self.mean_m3_h - self.least_m3_h, self.most_m3_h - self.mean_m3_h) / self.mean_m3_h
            raise InputError(f"the daily cycle must stay within least and most flow, {self.least_m3_h:g} to "
                             f"{self.most_m3_h:g} m3/h; found {low:g} to {high:g} m3/h. Lower the amplitude to at most "
                             f"{room:.3g}.")
        for dump in self.dumps:
            if not 0 <= dump.waste < self.wastes:
                raise InputError(f"a dump must be of one of {self.wastes} wastes, counted from 0; found {dump.waste}. "
                                 "Correct it.")


def sd_from_most(mean: float, most: float, share: float = MOST_SHARE) -> float:
    """Relative standard deviation of a log-normal flow or strength that exceeds `most` for a share of the time.

    From ln(most/mean) = z s - s^2/2 with z the normal quantile of 1 - share; the smaller root. Closed form; holds for
    most/mean up to exp(z^2/2), 15 at 1 %.
    """
    z = float(ndtri(1.0 - share))
    rise = float(np.log(most / mean)) if most >= mean > 0.0 else -1.0
    if not 0.0 <= 2.0 * rise <= z * z:
        raise InputError(f"most must be 1 to {np.exp(0.5 * z * z):.3g} times the mean; found {most:g} and {mean:g}. "
                         "Give the standard deviation instead.")
    s = z - np.sqrt(z * z - 2.0 * rise)
    return float(np.sqrt(np.expm1(s * s)))


def _times(statistics: Statistics) -> tuple[Array, float]:
    n = max(1, round(statistics.days * DAY_H / statistics.step_h))
    return np.arange(n, dtype=np.float64) * (statistics.step_h * HOUR_S), statistics.step_h * HOUR_S


def _daily(statistics: Statistics, time_s: Array, step_s: float) -> Array:
    """Mean flow of each step by the daily cycle: the mean of the cosine over the step."""
    turn = 2.0 * np.pi / (DAY_H * HOUR_S)
    middle = time_s + 0.5 * step_s - statistics.daily_peak_h * HOUR_S
    flattened = np.sinc(step_s * turn / (2.0 * np.pi))
    return statistics.mean_m3_h * (1.0 + statistics.daily_amplitude * flattened * np.cos(turn * middle))


def _clipped_mean(center: Array, s: float, low: float, high: float) -> Array:
    """Mean of a log-normal of mean `center` and log spread s, clipped to low and high. Closed form."""
    mu = np.log(center) - 0.5 * s * s
    with np.errstate(divide="ignore"):
        a, b = (np.log(low) - mu) / s, (np.log(high) - mu) / s
    below = low * ndtr(a)
    above = high * ndtr(-b) if np.isfinite(high) else 0.0
    return below + center * (ndtr(b - s) - ndtr(a - s)) + above


def _center(mean: Array, s: float, low: float, high: float) -> Array:
    """Mean of the log-normal that has this mean once it is clipped; found by halving, as it rises with its center."""
    if low == 0.0 and np.isinf(high):
        return mean
    least, most = np.log(mean) - 50.0 - 5.0 * s * s, np.log(mean) + 50.0 + 5.0 * s * s
    for _ in range(HALVINGS):
        middle = 0.5 * (least + most)
        too_low = _clipped_mean(np.exp(middle), s, low, high) < mean
        least, most = np.where(too_low, middle, least), np.where(too_low, most, middle)
    return np.exp(0.5 * (least + most))


def _flows(statistics: Statistics, time_s: Array, step_s: float, n: int, seed: int) -> Array:
    """Flow without dumps, (n, cases)."""
    mean = _daily(statistics, time_s, step_s)
    low, high = statistics.least_m3_h, statistics.most_m3_h
    if statistics.flow.relative_sd == 0.0:
        return np.repeat(mean[:, None], n, axis=1)
    free = (mean > low) & (mean < high)
    of_day, back = np.unique(mean[free], return_inverse=True)
    center = mean.copy()
    center[free] = _center(of_day, statistics.flow.log_sd, low, high)[back]
    drawn = np.clip(center[:, None] * noise(statistics.flow, np.full(time_s.size, step_s), n, seed, 0), low, high)
    return np.where(free[:, None], drawn, mean[:, None])  # a mean at the very limit leaves no room for noise


def _dumped(dump: Dump, time_s: Array, step_s: float, n: int, seed: int, number: int) -> Array:
    """Flow of one kind of dump, the mean over each step, (n, cases). [m3/h]"""
    every = dump.every_h * HOUR_S
    if dump.first_h is None:
        first = np.random.default_rng([seed, number]).random(n) * every
    else:
        first = np.full(n, dump.first_h * HOUR_S)
    edges = np.append(time_s, time_s[-1] + step_s)[:, None] - first
    whole = np.floor(edges / every)
    part = np.minimum((edges - whole * every) / (dump.lasts_h * HOUR_S), 1.0)
    total = whole + part
    if dump.first_h is not None:
        total = np.maximum(total, 0.0)  # nothing before the first
    return dump.size_m3 * np.diff(total, axis=0) / step_s * HOUR_S


def draw(statistics: Statistics, n: int, seed: int) -> Cases:
    """`n` courses of a stream. A case is the same however many are drawn beside it.

    Expected flow is the mean and what the dumps bring; expected load of a waste is mean flow times its share, and what
    its dumps bring.
    """
    check_draws(n, seed)
    shares = shares_of(statistics.shares, statistics.wastes)
    spread = spread_over(statistics.strength, statistics.wastes)
    time_s, step_s = _times(statistics)
    steps = np.full(time_s.size, step_s)
    q = _flows(statistics, time_s, step_s, n, seed)
    strength = np.stack([shares[j] * noise(v, steps, n, seed, j + 1) for j, v in enumerate(spread)])
    for number, dump in enumerate(statistics.dumps, start=1 + statistics.wastes):
        extra = _dumped(dump, time_s, step_s, n, seed, number)
        total = q + extra
        part = np.divide(extra, total, out=np.zeros_like(total), where=total > 0.0)
        strength *= 1.0 - part
        strength[dump.waste] += part * dump.strength
        q = total
    return Cases(time_s, q, strength, None, step_s)


def profile_of_statistics(statistics: Statistics, seed: int, *, wastes: Sequence[str] = ()) -> Profile:
    """The first course that `draw` gives for a seed, as a profile."""
    drawn = draw(statistics, 1, seed)
    of = f" of {', '.join(wastes)}" if wastes else ""
    return Profile(time_s=drawn.time_s, flow_m3_h=drawn.flow_m3_h[:, 0], strength=drawn.strength[:, :, 0],
                   step_s=drawn.step_s, source=f"drawn from statistics{of}, seed {seed}")

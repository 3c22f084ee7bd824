"""Flow and strength of a stream over time, measured or drawn from statistics. Each value holds until the next time.

The strength of a waste is its amount per volume of the stream: its share times how strong it is, 1 as described. Base
follows as the sum of amounts times the base of each waste, unless the base of the stream itself was measured.

Drawn noise is log-normal with mean one and a first-order correlation in its logarithm:

    x_k = exp(s z_k - s^2 / 2),   s^2 = ln(1 + cv^2),   z_k+1 = f z_k + (1 - f^2)^0.5 e_k,   f = exp(-dt / correlation)

which follows exactly from the continuous process (Ornstein & Uhlenbeck 1930, recalled) at the times of the steps.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.errors import InputError
from aquabuf.readings.profile_file import ProfileTable

__all__ = ["Cases", "Profile", "Summary", "Variation", "noise", "peak_factor", "percentile", "profile_of_table",
           "stream", "summary", "weighted_mean"]

Array = NDArray[np.float64]

HOUR_S = 3600.0
L_PER_M3 = 1000.0
SUM_SLACK = 1e-6


@dataclass(frozen=True, slots=True)
class Variation:
    """Noise of mean one: relative standard deviation, and the time over which it is correlated (0: step by step)."""

    relative_sd: float = 0.0
    correlation_h: float = 0.0

    def __post_init__(self) -> None:
        for what, value, unit in (("relative standard deviation", self.relative_sd, ""),
                                  ("correlation time", self.correlation_h, " h")):
            if not (np.isfinite(value) and value >= 0.0):
                raise InputError(f"the {what} of a noise must be 0 or more; found {value:g}{unit}. Correct it.")

    @property
    def log_sd(self) -> float:
        """Standard deviation of the logarithm."""
        return float(np.sqrt(np.log1p(self.relative_sd**2)))


class Cases(NamedTuple):
    """Courses drawn side by side, for a simulation."""

    time_s: Array            # (n,)
    flow_m3_h: Array         # (n, cases)
    strength: Array          # (J, n, cases)
    base_eq_l: Array | None  # (n, cases), where the stream's own base was measured
    step_s: float

    def base(self, of_wastes_eq_l: ArrayLike) -> Array:
        """Base of the stream. [eq/L], (n, cases)"""
        return stream(self.strength, self.base_eq_l, of_wastes_eq_l)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Profile:
    """A course of flow and strength.

    time_s : (n,) from 0, rising. step_s : for which the last value holds.
    flow_m3_h : (n,). strength : (J, n), amount of each waste per volume of stream.
    base_eq_l : (n,) where the base of the stream was measured itself. source : where the course comes from, in words.
    """

    time_s: Array
    flow_m3_h: Array
    strength: Array
    step_s: float
    base_eq_l: Array | None = None
    t_c: Array | None = None
    source: str = ""

    def __post_init__(self) -> None:
        n = self.time_s.size
        shapes = {"flow": self.flow_m3_h.shape, "strength": self.strength.shape[1:],
                  "base": (n,) if self.base_eq_l is None else self.base_eq_l.shape}
        for what, shape in shapes.items():
            if shape != (n,):
                raise InputError(f"{what} of a profile must have a value per time ({n}); found shape {shape}. "
                                 "Correct it.")
        if n == 0 or self.time_s[0] != 0.0 or (np.diff(self.time_s) <= 0.0).any():
            raise InputError(f"times of a profile must rise from 0; found {self.time_s[:4].tolist()} ... Correct them.")
        if not self.step_s > 0.0:
            raise InputError(f"the last step of a profile must be above 0 s; found {self.step_s:g}. Correct it.")
        bad = np.flatnonzero(~(self.flow_m3_h >= 0.0))
        if bad.size:
            raise InputError(f"flow of a profile must be 0 or more; found {self.flow_m3_h[bad[0]]:g} m3/h at "
                             f"{self.time_s[bad[0]]:g} s. Correct it.")
        if not self.flow_m3_h.any():
            raise InputError("something must flow at some time of a profile; found zero flow throughout. Correct it.")

    @property
    def dt_s(self) -> Array:
        """How long each value holds. [s]"""
        return np.append(np.diff(self.time_s), self.step_s)

    @property
    def duration_s(self) -> float:
        """Length of the course. [s]"""
        return float(self.time_s[-1] + self.step_s)

    @property
    def volume_m3(self) -> Array:
        """Volume of each step. [m3]"""
        return self.flow_m3_h * self.dt_s / HOUR_S

    @property
    def mean_m3_h(self) -> float:
        """Mean flow over time."""
        return float(self.volume_m3.sum() / self.duration_s * HOUR_S)

    def base(self, of_wastes_eq_l: ArrayLike) -> Array:
        """Base of the stream, from its own measurement or that of the undiluted wastes. [eq/L], (n,)"""
        return stream(self.strength, self.base_eq_l, of_wastes_eq_l)

    def split(self, longest_s: float) -> Profile:
        """The same course in steps of at most `longest_s`."""
        if not longest_s > 0.0:
            raise InputError(f"the longest step must be above 0 s; found {longest_s:g}. Correct it.")
        parts = np.ceil(self.dt_s / longest_s * (1.0 - 1e-12)).astype(int)
        at = np.repeat(np.arange(self.time_s.size), parts)
        inner = np.arange(at.size) - np.repeat(np.cumsum(parts) - parts, parts)
        step = self.dt_s / parts
        return replace(self, time_s=self.time_s[at] + inner * step[at], flow_m3_h=self.flow_m3_h[at],
                       strength=self.strength[:, at], step_s=float(step[-1]),
                       base_eq_l=None if self.base_eq_l is None else self.base_eq_l[at],
                       t_c=None if self.t_c is None else self.t_c[at])

    def cases(self, n: int, seed: int, *, flow: Variation | None = None, strength: Sequence[Variation] = ()) -> Cases:
        """The course `n` times with noise on flow and on each waste.

        flow, strength : noise of mean one; none where not given. One strength serves all wastes, each drawn for itself.
        A measured base of the stream takes the noise of the first waste.
        """
        check_draws(n, seed)
        spread = spread_over(strength, self.strength.shape[0])
        q = self.flow_m3_h[:, None] * noise(flow or Variation(), self.dt_s, n, seed, 0)
        factors = np.stack([noise(v, self.dt_s, n, seed, j + 1) for j, v in enumerate(spread)])
        base = None if self.base_eq_l is None else self.base_eq_l[:, None] * factors[0]
        return Cases(self.time_s, q, self.strength[:, :, None] * factors, base, self.step_s)


def check_draws(n: int, seed: int) -> None:
    """InputError for a number of draws below one or a seed below zero."""
    if n < 1:
        raise InputError(f"the number of cases must be 1 or more; found {n}. Correct it.")
    if seed < 0:
        raise InputError(f"the seed must be a whole number of 0 or more; found {seed}. Correct it.")


def spread_over(strength: Sequence[Variation], wastes: int) -> tuple[Variation, ...]:
    """One noise per waste: none, one for all, or each its own."""
    found = tuple(strength) or (Variation(),)
    if len(found) not in (1, wastes):
        raise InputError(f"noise of strength must be given once or for each of {wastes} wastes; found {len(found)}. "
                         "Correct it.")
    return found * wastes if len(found) == 1 else found


def noise(variation: Variation, dt_s: Array, cases: int, seed: int, stream_number: int) -> Array:
    """Log-normal noise of mean one at steps of these lengths, (n, cases); see the head of the module.

    Each stream number has draws of its own, and a case is the same however many are drawn beside it.
    """
    n = dt_s.size
    if variation.relative_sd == 0.0:
        return np.ones((n, cases))
    rng = np.random.default_rng([seed, stream_number])
    e = np.ascontiguousarray(rng.standard_normal((cases, n)).T)
    s = variation.log_sd
    if variation.correlation_h > 0.0:
        gone = dt_s / (variation.correlation_h * HOUR_S)
        f, fresh = np.exp(-gone), np.sqrt(-np.expm1(-2.0 * gone))
        for k in range(1, n):
            e[k] = f[k - 1] * e[k - 1] + fresh[k - 1] * e[k]
    return np.exp(s * e - 0.5 * s * s)


def stream(strength: Array, own_base_eq_l: Array | None, of_wastes_eq_l: ArrayLike) -> Array:
    """Base of a mixture: its own where measured, else the sum of amounts times the base of each waste. [eq/L]"""
    if own_base_eq_l is not None:
        return own_base_eq_l
    bases = np.atleast_1d(np.asarray(of_wastes_eq_l, dtype=float))
    if bases.shape != strength.shape[:1]:
        raise InputError(f"a profile of {strength.shape[0]} wastes needs the base of each; found {bases.size}. "
                         "Correct it.")
    return np.tensordot(bases, strength, axes=1)


# ------------------------------------------------------------ figures of a course


def weighted_mean(values: ArrayLike, weights: ArrayLike) -> float:
    """Mean by weight (time or volume); nan where all weights are zero."""
    w = np.asarray(weights, dtype=float)
    total = float(w.sum())
    return float((np.asarray(values, dtype=float) * w).sum() / total) if total > 0.0 else float("nan")


def percentile(values: ArrayLike, weights: ArrayLike, percent: ArrayLike) -> Array:
    """Least value that is not exceeded for so many percent of the weight.

    Values hold over their step, so that nothing is interpolated between them.
    """
    v, w = np.asarray(values, dtype=float).ravel(), np.asarray(weights, dtype=float).ravel()
    order = np.argsort(v, kind="stable")
    share = np.cumsum(w[order])
    p = np.asarray(percent, dtype=float) / 100.0
    at = np.searchsorted(share, p * share[-1] * (1.0 - 1e-12))
    return v[order][np.minimum(at, v.size - 1)]


def peak_factor(values: ArrayLike, dt_s: ArrayLike, window_s: float = 0.0) -> float:
    """Largest mean over a window of time, by the mean over the whole course; 0: the largest value.

    Exact for values that hold over steps: the largest running mean begins or ends where a step does.
    """
    v, dt = np.asarray(values, dtype=float), np.asarray(dt_s, dtype=float)
    length = float(dt.sum())
    if not 0.0 <= window_s <= length * (1.0 + 1e-12):
        raise InputError(f"the window of a peak factor must be 0 to {length:g} s, the length of the profile; found "
                         f"{window_s:g} s. Shorten it.")
    total = np.concatenate([[0.0], np.cumsum(v * dt)])
    with np.errstate(invalid="ignore"):
        if window_s == 0.0:
            return float(np.float64(v.max()) / np.float64(total[-1] / length))
        edges = np.concatenate([[0.0], np.cumsum(dt)])
        begin = np.concatenate([edges, edges - window_s])
        begin = np.clip(begin, 0.0, length - window_s)
        sums = np.interp(begin + window_s, edges, total) - np.interp(begin, edges, total)
        return float(np.float64(sums.max() / window_s) / np.float64(total[-1] / length))


@dataclass(frozen=True, slots=True, kw_only=True)
class Summary:
    """Figures of a profile. Loads count base plus, acid minus; peak factors are against the mean over time."""

    days: float
    flow_mean_m3_h: float
    flow_least_m3_h: float
    flow_most_m3_h: float
    flow_p5_m3_h: float
    flow_p50_m3_h: float
    flow_p95_m3_h: float
    flow_peak_factor: float
    flow_peak_day_factor: float       # of the largest running 24 h; nan for a shorter profile
    base_mean_eq_l: float             # by volume
    base_least_eq_l: float
    base_most_eq_l: float
    base_p5_eq_l: float               # by volume
    base_p95_eq_l: float
    load_mean_eq_h: float
    acid_load_eq_h: float             # mean of what comes acid, positive
    base_load_eq_h: float             # mean of what comes alkaline
    load_peak_factor: float           # of the load's size, whichever its sign


def summary(profile: Profile, of_wastes_eq_l: ArrayLike) -> Summary:
    """Figures of a profile whose undiluted wastes have these bases. [eq/L]

    Strength counts where something flows.
    """
    dt, q, volume = profile.dt_s, profile.flow_m3_h, profile.volume_m3
    base = profile.base(of_wastes_eq_l)
    flows = volume > 0.0
    load = q * L_PER_M3 * base
    p5, p50, p95 = percentile(q, dt, [5.0, 50.0, 95.0])
    b5, b95 = percentile(base[flows], volume[flows], [5.0, 95.0])
    day = 24.0 * HOUR_S
    return Summary(
        days=profile.duration_s / day, flow_mean_m3_h=profile.mean_m3_h, flow_least_m3_h=float(q.min()),
        flow_most_m3_h=float(q.max()), flow_p5_m3_h=float(p5), flow_p50_m3_h=float(p50), flow_p95_m3_h=float(p95),
        flow_peak_factor=peak_factor(q, dt),
        flow_peak_day_factor=peak_factor(q, dt, day) if profile.duration_s >= day else float("nan"),
        base_mean_eq_l=weighted_mean(base, volume), base_least_eq_l=float(base[flows].min()),
        base_most_eq_l=float(base[flows].max()), base_p5_eq_l=float(b5), base_p95_eq_l=float(b95),
        load_mean_eq_h=weighted_mean(load, dt), acid_load_eq_h=weighted_mean(np.maximum(-load, 0.0), dt),
        base_load_eq_h=weighted_mean(np.maximum(load, 0.0), dt), load_peak_factor=peak_factor(np.abs(load), dt),
    )


# ------------------------------------------------------------ from a table


def shares_of(shares: Sequence[float] | None, wastes: int) -> Array:
    """Share of each waste in the volume of the stream; what is left over is water. InputError where they cannot be."""
    if shares is None and wastes == 1:
        return np.ones(1)
    if shares is None:
        raise InputError(f"{wastes} wastes need the share of each in the stream; found none. Give them, or a column of "
                         "strength for each in the profile.")
    found = np.asarray(shares, dtype=float)
    if found.shape != (wastes,) or not ((found >= 0.0).all() and 0.0 < found.sum() <= 1.0 + SUM_SLACK):
        raise InputError(f"shares of {wastes} wastes must be 0 or more each and up to 1 together; found "
                         f"{', '.join(f'{x:g}' for x in found.ravel())}. Correct them.")
    return found


def profile_of_table(table: ProfileTable, bases: Mapping[str, float], shares: Sequence[float] | None = None) -> Profile:
    """The profile of a table for wastes of these names and undiluted bases. [eq/L]

    A strength of the stream serves all wastes; a base or acidity of a waste becomes its strength by its base. Base of
    the stream is kept as measured; buffers then stay at the shares given. With a column for each waste and no shares,
    the columns are amounts themselves.

    Raises InputError for a waste that is not described, a base of the other sign than its waste, or shares missing.
    """
    names = list(bases)
    given = [name for name in (*table.strength, *table.base_eq_l) if name]
    for name in given:
        if name not in bases:
            raise InputError(f"{table.name}: no waste is named {name!r}; wastes are {', '.join(names)}. "
                             "Correct the header.")
    own = shares is None and set(given) == set(names)
    share = np.ones(len(names)) if own else shares_of(shares, len(names))
    n = table.time_s.size
    common = table.strength.get("", np.ones(n))
    strength = np.empty((len(names), n))
    for j, (name, base) in enumerate(bases.items()):
        found = _by_base(table, name, base) if name in table.base_eq_l else table.strength.get(name, common)
        strength[j] = share[j] * found
    return Profile(time_s=table.time_s, flow_m3_h=table.flow_m3_h, strength=strength, step_s=table.step_s,
                   base_eq_l=table.base_eq_l.get(""), t_c=table.t_c, source=f"measured, {table.name}")


def _by_base(table: ProfileTable, name: str, base: float) -> Array:
    found = table.base_eq_l[name]
    if base == 0.0:
        raise InputError(f"{table.name}: waste {name!r} has no base or acid of its own, so that a column of it tells "
                         "no strength. Give its strength instead.")
    wrong = np.flatnonzero(found * np.sign(base) < 0.0)
    if wrong.size:
        at = wrong[0]
        raise InputError(f"{table.name}, row {table.rows[at]}: the base of waste {name!r} must have the sign of the "
                         f"waste, {base:+.4g} eq/L; found {found[at]:+.4g} eq/L. Describe acid and alkaline waters "
                         "as two wastes, or give the base of the whole stream.")
    return found / base

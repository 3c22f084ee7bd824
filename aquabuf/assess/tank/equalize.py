"""Equalization: what a mixed tank of changing level makes of flow and signed acidity. Base is mixed, never pH.

    dV/dt = F - D,   V dC/dt = F (C_in - C)          for base and every carrier alike

Inflow F holds over a step, and so both equations have exact solutions between steps: a power law in the level where the
draw D is constant, an exponential where the level stands, and a logarithm more where the draw follows the level. Mixing
hour by hour and then withdrawing is another answer, off by a fifth in ordinary cases.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.tank.profile import HOUR_S, L_PER_M3, Profile, peak_factor
from aquabuf.errors import InputError

__all__ = ["CumulativeFlow", "Draw", "Equalized", "MixingSaving", "alternating_tank", "cumulative_volume", "equalize",
           "largest_day_m3", "mixing_saving"]

Array = NDArray[np.float64]

DAY_S = 24.0 * HOUR_S
LARGEST_DAY_FACTOR = 1.10  # printed: Environmental Engineers' Handbook, alternating flow diversion
_ENOUGH = 1e-12            # part of the volume below which what is drawn has the content at the end of the step


# ------------------------------------------------------------ flow alone


class CumulativeFlow(NamedTuple):
    """Cumulative inflow against a steady draw."""

    time_s: Array      # (n + 1,)
    inflow_m3: Array   # (n + 1,), total since the start
    draw_m3_h: float
    volume_m3: float
    start_m3: float    # content at the start with which the tank just never runs empty
    high_s: float      # where the tank is full
    low_s: float       # where it is empty


def cumulative_volume(profile: Profile, *, repeat_s: float | None = None) -> CumulativeFlow:
    """Volume that turns the inflow into its mean: the gap between two parallels to the line of mean flow.

    repeat_s : folds the course to the mean of its days (86,400 s), the last one left out where it is not whole. Without
    it the course is taken as it stands, whatever its length. Source: Environmental Engineers' Handbook, cumulative flow
    curve (printed). The surplus over the mean is as large as what is short, so that the answer does not depend on where
    the record begins.
    """
    edges = np.concatenate([[0.0], np.cumsum(profile.dt_s)])
    total = np.concatenate([[0.0], np.cumsum(profile.volume_m3)])
    if repeat_s is not None:
        edges, total = _folded(edges, total, repeat_s)
    draw = total[-1] / edges[-1]
    above = total - draw * edges
    high, low = int(np.argmax(above)), int(np.argmin(above))
    return CumulativeFlow(edges, total, float(draw * HOUR_S), float(above[high] - above[low]), float(-above[low]),
                          float(edges[high]), float(edges[low]))


def _folded(edges: Array, total: Array, repeat_s: float) -> tuple[Array, Array]:
    """Edges and cumulative volume of the mean cycle."""
    whole = int(np.floor(edges[-1] / repeat_s * (1.0 + 1e-12))) if repeat_s > 0.0 else 0
    if whole < 1:
        raise InputError(f"a profile to be folded must be at least one cycle of {repeat_s:g} s long; found "
                         f"{edges[-1]:g} s. Give a longer profile or do not fold it.")
    inner = edges[edges < whole * repeat_s * (1.0 - 1e-12)]
    folded = np.unique(np.append(np.round(inner % repeat_s, 6), [0.0, repeat_s]))
    at = folded + repeat_s * np.arange(whole)[:, None]
    volume = np.interp(at, edges, total)
    return folded, (volume - volume[:, :1]).mean(axis=0)


def largest_day_m3(profile: Profile) -> float:
    """Volume of the largest 24 hours, beginning at any time. [m3]"""
    if profile.duration_s < DAY_S * (1.0 - 1e-12):
        raise InputError(f"the largest day needs a profile of a day or more; found {profile.duration_s / HOUR_S:.3g} "
                         "h. Give a longer one.")
    peak = peak_factor(profile.flow_m3_h, profile.dt_s, min(DAY_S, profile.duration_s))
    return peak * profile.mean_m3_h * DAY_S / HOUR_S


def alternating_tank(day_m3: ArrayLike, factor: ArrayLike = LARGEST_DAY_FACTOR, fill_h: ArrayLike = 24.0) -> Array:
    """Volume of each of two tanks that fill in turn, T D F / k: filling time by largest day, with a reserve. [m3]

    T in hours, D in m3/d, k = 24 h/d. Environmental Engineers' Handbook, alternating flow diversion (printed; the
    meaning of its letters is our reading): 110 % of the largest day.
    """
    day, reserve, fill = (np.asarray(x, dtype=float) for x in (day_m3, factor, fill_h))
    if (day < 0.0).any() or (reserve < 1.0).any() or (fill <= 0.0).any():
        raise InputError(f"an alternating tank needs a day of 0 m3 or more, a factor of 1 or more and a filling time "
                         f"above 0 h; found {day.min():g}, {reserve.min():g}, {fill.min():g}. Correct them.")
    return fill * day * reserve / 24.0


# ------------------------------------------------------------ flow and content


@dataclass(frozen=True, slots=True)
class Draw:
    """How water is drawn from the tank: at a constant rate, or in proportion to the level above the least.

    m3_h : constant rate, 0 for a tank that only overflows. per_h : rate per volume above the least; None for constant.
    """

    m3_h: float = 0.0
    per_h: float | None = None

    def __post_init__(self) -> None:
        for what, value in (("draw", self.m3_h), ("draw per volume", self.per_h or 0.0)):
            if not (np.isfinite(value) and value >= 0.0):
                raise InputError(f"the {what} must be 0 or more; found {value:g}. Correct it.")
        if self.per_h is not None and self.m3_h > 0.0:
            raise InputError(f"a draw must be constant or follow the level; found {self.m3_h:g} m3/h and "
                             f"{self.per_h:g} per hour. Leave one out.")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Equalized:
    """A tank over time. Arrays of edges have n + 1 times, arrays of steps n; both may have cases behind.

    out_... : what leaves in a step, drawn and overflowing together: the mean of what left; content where nothing did.
    """

    time_s: Array            # (n + 1,)
    level_m3: Array          # (n + 1, ...)
    base_eq_l: Array         # (n + 1, ...)
    amounts: Array           # (J, n + 1, ...)
    out_m3_h: Array          # (n, ...)
    out_base_eq_l: Array     # (n, ...)
    out_amounts: Array       # (J, n, ...)
    overflow_m3: Array       # (...) above what was to be drawn, because the tank was full
    short_m3: Array          # (...) that could not be drawn, because it was at its least
    balance_error: Array     # (1 + J, ...) of base and carriers: in less out less stored, by what went through


def equalize(profile_time_s: Array, step_s: float, flow_m3_h: ArrayLike, base_eq_l: ArrayLike, amounts: ArrayLike, *,
             volume_m3: ArrayLike, draw: Draw, start_m3: ArrayLike | None = None, least_m3: ArrayLike = 0.0,
             start_base_eq_l: ArrayLike | None = None, start_amounts: ArrayLike | None = None) -> Equalized:
    """Run a stream through a mixed tank, exactly between steps.

    Parameters
    ----------
    profile_time_s, step_s
        Times (n,) of the inflow, and how long the last value holds. [s]
    flow_m3_h, base_eq_l
        Inflow, (n,) or (n, ...).
    amounts
        Carriers of the inflow, (J, n) or (J, n, ...); J may be 0.
    volume_m3
        Largest content, where the tank overflows; it may differ by case. 0 is no tank.
    draw
        How water is drawn; it stops short of what flows in when the level is at its least.
    start_m3
        Content at the start; full if not given.
    least_m3
        Content below which nothing is drawn beyond what flows in.
    start_base_eq_l, start_amounts
        Of the content at the start; the mean of the inflow by volume if not given.

    Raises
    ------
    InputError
        Contents that are not 0 <= least <= start <= largest.
    """
    time_s = np.asarray(profile_time_s, dtype=float)
    c_in, f, v_max, v_min, level = _shaped(time_s.size, flow_m3_h, base_eq_l, amounts, volume_m3, least_m3, start_m3)
    edges = np.append(time_s, time_s[-1] + step_s)
    dt = np.diff(edges) / HOUR_S
    content = _start(c_in, f, dt, start_base_eq_l, start_amounts)
    cases = f.shape[1:]
    levels, contents = np.empty((dt.size + 1, *cases)), np.empty((c_in.shape[0], dt.size + 1, *cases))
    out, out_c = np.empty((dt.size, *cases)), np.empty((c_in.shape[0], dt.size, *cases))
    over, short = np.zeros(cases), np.zeros(cases)
    levels[0], contents[:, 0] = level, content
    for k, hours in enumerate(dt):
        new, deviation, through, wanted = _step(level, f[k], hours, v_min, v_max, draw)
        gone = f[k] * hours - (new - level)
        far = content - c_in[:, k]
        content = c_in[:, k] + far * deviation
        share = np.divide(through, gone, out=np.zeros(cases), where=gone > _ENOUGH * (level + f[k] * hours))
        enough = gone > _ENOUGH * (level + f[k] * hours)
        out_c[:, k] = np.where(enough, c_in[:, k] + far * share, content)
        out[k] = gone / hours
        over += np.maximum(gone - wanted, 0.0)
        short += np.maximum(wanted - gone, 0.0)
        level = new
        levels[k + 1], contents[:, k + 1] = level, content
    error = _balance(levels, contents, f, c_in, out, out_c, dt)
    return Equalized(time_s=edges, level_m3=levels, base_eq_l=contents[0], amounts=contents[1:], out_m3_h=out,
                     out_base_eq_l=out_c[0], out_amounts=out_c[1:], overflow_m3=over, short_m3=short,
                     balance_error=error)


def _shaped(n: int, flow: ArrayLike, base: ArrayLike, amounts: ArrayLike, volume: ArrayLike, least: ArrayLike,
            start: ArrayLike | None) -> tuple[Array, Array, Array, Array, Array]:
    """Contents (1 + J, n, ...) and flow (n, ...) of the inflow, and the three levels, all with the cases of all."""
    q, y, a = (np.asarray(x, dtype=float) for x in (flow, base, amounts))
    v_max, v_min = np.asarray(volume, dtype=float), np.asarray(least, dtype=float)
    v = v_max if start is None else np.asarray(start, dtype=float)
    if not ((v_min >= 0.0).all() and (v_min <= v).all() and (v <= v_max).all()):
        raise InputError(f"the contents of a tank must rise from 0 to least, start and largest; found least "
                         f"{v_min.max():g}, start {v.min():g} to {v.max():g}, largest {v_max.min():g} m3. "
                         "Correct them.")
    if q.shape[:1] != (n,) or y.shape[:1] != (n,) or a.shape[1:2] != (n,) or not (q >= 0.0).all():
        raise InputError(f"flow, base and amounts of an inflow need a value of 0 or more per time ({n}) for flow; "
                         f"found shapes {q.shape}, {y.shape}, {a.shape}. Correct them.")
    cases = np.broadcast_shapes(q.shape[1:], y.shape[1:], a.shape[2:], v_max.shape, v_min.shape, v.shape)
    q = np.broadcast_to(q.reshape(n, *(1,) * (len(cases) - q.ndim + 1), *q.shape[1:]), (n, *cases))
    y = np.broadcast_to(y.reshape(n, *(1,) * (len(cases) - y.ndim + 1), *y.shape[1:]), (n, *cases))
    a = np.broadcast_to(a.reshape(-1, n, *(1,) * (len(cases) - a.ndim + 2), *a.shape[2:]), (a.shape[0], n, *cases))
    v_max, v_min, v = (np.broadcast_to(x, cases).astype(float) for x in (v_max, v_min, v))
    return np.concatenate([y[None], a]), q, v_max, v_min, v


def _start(c_in: Array, f: Array, dt: Array, base: ArrayLike | None, amounts: ArrayLike | None) -> Array:
    weight = f * dt.reshape(-1, *(1,) * (f.ndim - 1))
    total = weight.sum(axis=0)
    mean = (c_in * weight).sum(axis=1) / np.where(total > 0.0, total, 1.0)
    if base is not None:
        mean[0] = base
    if amounts is not None:
        given = np.asarray(amounts, dtype=float)
        mean[1:] = given.reshape(given.shape + (1,) * (mean.ndim - given.ndim))
    return mean


def _step(v: Array, f: Array, t: float, v_min: Array, v_max: Array, draw: Draw) -> tuple[Array, Array, Array, Array]:
    """One step of t hours. At a bound the level stands and as much leaves as comes.

    Returns the level at its end, what is left of the distance from the inflow, the integral of draw times that
    distance, and what was to be drawn [m3].
    """
    moving = _until(v, f, t, v_min, v_max, draw)
    new, left = _constant(v, f, moving, draw.m3_h) if draw.per_h is None else _level(v, f, moving, v_min, draw.per_h)
    stands = moving < t
    if stands.any():
        bound = np.where(f > draw.m3_h, v_max, v_min)  # a draw that follows the level only meets the upper one
        left = np.where(stands, left * _exponential(bound, f, t - moving), left)
    new = np.clip(new, v_min, v_max)
    through = v - new * left
    if draw.per_h is None:
        wanted = np.full(v.shape, draw.m3_h * t)
    else:
        wanted = f * moving - (new - v) + draw.per_h * (new - v_min) * (t - moving)
    return new, left, through, wanted


def _until(v: Array, f: Array, t: float, v_min: Array, v_max: Array, draw: Draw) -> Array:
    """Hours for which the level moves before it meets a bound, at most t."""
    with np.errstate(divide="ignore", invalid="ignore"):
        if draw.per_h is None:
            rate = f - draw.m3_h
            hit = np.where(rate > 0.0, (v_max - v) / rate, np.where(rate < 0.0, (v_min - v) / rate, np.inf))
        elif draw.per_h == 0.0:
            hit = np.where(f > 0.0, (v_max - v) / f, np.inf)
        else:
            aim = v_min + f / draw.per_h
            hit = np.where(aim > v_max, np.log((aim - v) / (aim - v_max)) / draw.per_h, np.inf)
    return np.clip(hit, 0.0, t)


def _exponential(v: Array, f: Array, t: Array) -> Array:
    """Distance left after t hours at a standing level; an empty tank has none of it once something flows."""
    with np.errstate(over="ignore", under="ignore"):
        return np.where(v > 0.0, np.exp(-f * t / np.where(v > 0.0, v, 1.0)), np.where(f * t > 0.0, 0.0, 1.0))


def _constant(v: Array, f: Array, t: Array, d: float) -> tuple[Array, Array]:
    """Level and distance left at a constant draw: (V / V0)^(-F / (F - D)), by the integral of dt / V."""
    safe = np.where(v > 0.0, v, 1.0)
    x = np.maximum((f - d) * t / safe, -1.0)
    with np.errstate(divide="ignore", invalid="ignore", under="ignore"):
        slope = np.where(np.abs(x) > 1e-8, np.log1p(x) / np.where(x == 0.0, 1.0, x), 1.0 - 0.5 * x)
        left = np.exp(-np.where(f > 0.0, f * t / safe * slope, 0.0))
    return v + (f - d) * t, np.where(v > 0.0, left, np.where(f * t > 0.0, 0.0, 1.0))


def _level(v: Array, f: Array, t: Array, v_min: Array, per_h: float) -> tuple[Array, Array]:
    """Level and distance left where the draw is per_h (V - least): the level nears V_e = least + F / per_h, and the
    integral of dt / V is (t + ln(V / V0) / per_h) / V_e."""
    if per_h == 0.0:
        return _constant(v, f, t, 0.0)
    aim = v_min + f / per_h
    gone = -np.expm1(-per_h * t)
    new = v + (aim - v) * gone
    safe = np.where((v > 0.0) & (new > 0.0), v, 1.0)
    with np.errstate(divide="ignore", invalid="ignore", under="ignore"):
        time = (t + np.log1p((new - safe) / safe) / per_h) / np.where(aim > 0.0, aim, 1.0)
        left = np.exp(-np.where(f > 0.0, f * time, 0.0))
    return new, np.where(v > 0.0, left, np.where(f * t > 0.0, 0.0, 1.0))


def _balance(levels: Array, contents: Array, f: Array, c_in: Array, out: Array, out_c: Array, dt: Array) -> Array:
    hours = dt.reshape(-1, *(1,) * (f.ndim - 1))
    came, left = c_in * f * hours, out_c * out * hours
    stored = levels[-1] * contents[:, -1] - levels[0] * contents[:, 0]
    size = np.abs(came).sum(axis=1) + np.abs(levels[0] * contents[:, 0])
    return (came.sum(axis=1) - left.sum(axis=1) - stored) / np.where(size > 0.0, size, 1.0)


# ------------------------------------------------------------ what mixing saves


class MixingSaving(NamedTuple):
    """Reagent to bring a stream to a base, step by step as it comes and after mixing. [eq/d]"""

    base_alone_eq_d: float   # base for the acid water, each step by itself
    acid_alone_eq_d: float   # acid for the alkaline water
    base_mixed_eq_d: float
    acid_mixed_eq_d: float
    saved_eq_d: float        # of both together


def mixing_saving(flow_m3_h: ArrayLike, base_eq_l: ArrayLike, dt_s: ArrayLike, *,
                  out_flow_m3_h: ArrayLike | None = None, out_base_eq_l: ArrayLike | None = None,
                  aim_eq_l: ArrayLike = 0.0, out_aim_eq_l: ArrayLike = 0.0) -> MixingSaving:
    """How much reagent acid and alkaline waters save each other. Arrays (n,) or (n, ...); cases are averaged.

    Without an outflow all is mixed with all, the most that any tank can save (`aim_eq_l` then by volume).
    aim_eq_l, out_aim_eq_l : base that a step has at the set point, before and behind the tank.
    """
    q, dt = np.asarray(flow_m3_h, dtype=float), np.asarray(dt_s, dtype=float)
    hours = dt.reshape(-1, *(1,) * (q.ndim - 1)) / HOUR_S
    days = float(dt.sum()) / DAY_S
    lack = (np.asarray(aim_eq_l, dtype=float) - np.asarray(base_eq_l, dtype=float)) * q * hours * L_PER_M3
    if out_flow_m3_h is None or out_base_eq_l is None:
        lack_out = lack.sum(axis=0, keepdims=True)
    else:
        lack_out = (np.asarray(out_aim_eq_l, dtype=float) - np.asarray(out_base_eq_l, dtype=float)) * hours * L_PER_M3
        lack_out = lack_out * np.asarray(out_flow_m3_h, dtype=float)
    base, acid, base_out, acid_out = (float(np.maximum(sign * x, 0.0).sum(axis=0).mean()) / days
                                      for x in (lack, lack_out) for sign in (1.0, -1.0))
    return MixingSaving(base, acid, base_out, acid_out, base + acid - base_out - acid_out)

"""How much a mixed tank at constant volume flattens what comes in: closed forms, each with its range.

tau : volume by flow, of all tanks together. All times in one unit. The rows of `data/tank_attenuation.csv` name the
source and range of each form; where flow and level change, `equalize` solves the balance itself.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["Attenuation", "attenuation", "sine_share", "slug_peak", "slug_peak_two_tanks", "variance_share",
           "variance_share_correlated", "variance_share_end", "variance_share_low"]

Array = NDArray[np.float64]


class Attenuation(NamedTuple):
    """One formula with its figure."""

    name: str
    share: float  # of variance, peak or amplitude that is left
    formula: str
    range: str
    mark: str
    source: str


def _positive(**times: ArrayLike) -> list[Array]:
    found = []
    for name, value in times.items():
        x = np.asarray(value, dtype=float)
        if (x <= 0.0).any():
            raise InputError(f"{name} must be above 0; found {x.min():g}. Correct it.")
        found.append(x)
    return found


def variance_share(dt: ArrayLike, tau: ArrayLike) -> Array:
    """Share of the variance left of loads without memory, dt / (2 tau) (Novotny & England 1974; recalled).

    Meant for dt well below tau: it passes one at dt = 2 tau. Against tanh(dt / 2 tau) it is 0.3 % high at dt = 0.2 tau,
    8 % at dt = tau.
    """
    x, t = _positive(dt=dt, tau=tau)
    return x / (2.0 * t)


def variance_share_end(dt: ArrayLike, tau: ArrayLike) -> Array:
    """The same at the end of each step, tanh(dt / (2 tau)). Exact at any dt."""
    x, t = _positive(dt=dt, tau=tau)
    return np.tanh(x / (2.0 * t))


def variance_share_low(dt: ArrayLike, tau: ArrayLike) -> Array:
    """The low-side form dt / (2 tau + dt) (recalled): that of a memory of half a step."""
    x, t = _positive(dt=dt, tau=tau)
    return x / (2.0 * t + x)


def variance_share_correlated(theta: ArrayLike, tau: ArrayLike) -> Array:
    """Share of the variance left of loads that forget with the time theta: theta / (theta + tau). Exact (derived)."""
    x, t = _positive(theta=theta, tau=tau)
    return x / (x + t)


def slug_peak(d: ArrayLike, tau: ArrayLike) -> Array:
    """Peak behind one tank of a slug of length d, as a share of the slug: 1 - exp(-d / tau). Exact."""
    x, t = _positive(d=d, tau=tau)
    return -np.expm1(-x / t)


def slug_peak_two_tanks(d: ArrayLike, tau: ArrayLike) -> Array:
    """Peak behind two equal tanks that share the volume. Exact (derived).

    It comes at t = d / (1 - exp(-a d)), a = 2 / tau, where the step response S(t) = 1 - (1 + a t) exp(-a t) has the
    slope that it had d before.
    """
    x, total = _positive(d=d, tau=tau)
    a = 2.0 / total
    late = a * x / -np.expm1(-a * x)
    early = late - a * x
    return (1.0 + early) * np.exp(-early) - (1.0 + late) * np.exp(-late)


def sine_share(omega_tau: ArrayLike, tanks: int = 1) -> Array:
    """Amplitude left of a sine behind equal tanks that share the volume, (1 + (omega tau / n)^2)^(-n/2). Exact."""
    if tanks < 1:
        raise InputError(f"the number of tanks must be 1 or more; found {tanks}. Correct it.")
    return (1.0 + (np.asarray(omega_tau, dtype=float) / tanks) ** 2) ** (-0.5 * tanks)


def attenuation(tau_h: float, *, step_h: float, correlation_h: float | None = None, slug_h: float | None = None,
                period_h: float | None = 24.0) -> list[Attenuation]:
    """Every form for one tank volume, to be shown beside the simulated answer. [h]"""
    shares = {"variance of the outflow": variance_share(step_h, tau_h),
              "variance at the end of a step": variance_share_end(step_h, tau_h),
              "low-side form": variance_share_low(step_h, tau_h)}
    if correlation_h is not None:
        shares["correlated loads"] = variance_share_correlated(correlation_h, tau_h)
    if slug_h is not None:
        shares["slug peak"] = slug_peak(slug_h, tau_h)
        shares["slug peak of two tanks"] = slug_peak_two_tanks(slug_h, tau_h)
    if period_h is not None:
        shares["sine"] = sine_share(2.0 * np.pi * tau_h / period_h)
    rows = {row["name"]: row for row in read_table("tank_attenuation")}
    return [Attenuation(name, float(share), *(rows[name][k] for k in ("formula", "range", "mark", "source")))
            for name, share in shares.items()]

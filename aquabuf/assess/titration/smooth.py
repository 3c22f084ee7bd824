"""The fitted curve between the points of one titration, to be drawn."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10
from aquabuf.assess.titration.fits import Fitted
from aquabuf.assess.titration.solve import Solved
from aquabuf.chem.acids import ZERO_LEVEL_PK
from aquabuf.engine.balance import Family
from aquabuf.engine.titrate import Points, titration_curve

__all__ = ["STEPS", "fit_of", "fitted_curve"]

Array = NDArray[np.float64]

STEPS = 500  # over the whole curve, so that the steep part bends smoothly in print


def fit_of(s: Solved, i: int) -> Fitted:
    """The fit that titration `i` is judged by: acid in excess where CO2 was swept out, else the closed one."""
    return s.excess if s.purged[i] else s.fit


def fitted_curve(s: Solved, i: int, *, steps: int = STEPS) -> tuple[Array, Array]:
    """Acid added and meter pH along the fit of titration `i`, from its first to its last point; empty without fit.

    Parameters
    ----------
    s, i
        What was found of some titrations, and the number of one of them.
    steps
        Number of steps over the whole curve, about; a step ends at every point of the fit.

    Returns
    -------
    acid, ph : ndarray
        Acid per unit of sample, negative for base, in the order of the titration [eq/L or eq/kg]; pH as the electrode
        reads it, its offset included.

    Notes
    -----
    The constants between two points follow from those at the points, their logarithms linearly in the acid added: ionic
    strength changes little from point to point. Dilution is exact.
    """
    found = fit_of(s, i)
    used = np.flatnonzero(np.isfinite(found.fit.residual_ph[i]))
    if not used.size or not found.fit.converged[i]:
        return np.zeros(0), np.zeros(0)
    acid = _between_and_at(s.curves.acid[i, used], steps)
    sign = -1.0 if s.curves.is_base[i] else 1.0
    points = _points_between(s.points.take(np.array([i])), int(s.curves.count[i]), acid, sign)
    points = _with_weak_acid(points, found.fit.acid_total[i], found.fit.acid_pk[i])
    ph = titration_curve(points, found.fit.alkalinity[[i]], found.fit.carbon[[i]])[0]
    return acid, ph + found.fit.offset_ph[i]


def _between_and_at(at: Array, steps: int) -> Array:
    """The points, and even steps between each two."""
    width = np.abs(np.diff(at))
    parts = np.ceil(steps * width / max(float(width.sum()), 1e-300)).astype(int)
    runs = [np.linspace(a, b, n, endpoint=False) for a, b, n in zip(at[:-1], at[1:], parts.tolist(), strict=True)]
    return np.concatenate([*runs, at[-1:]])


def _points_between(points: Points, count: int, acid: Array, sign: float) -> Points:
    """Points of one titration at other amounts of acid within its own."""
    x = sign * points.acid[0, :count]

    def line(v: Array) -> Array:
        return np.interp(sign * acid, x, v[0, :count])[None]

    def of_log(v: Array) -> Array:
        return np.exp(line(np.log(v)))

    families = tuple(Family(line(f.total), tuple(of_log(k) for k in f.k), f.zero) for f in points.families)
    logs = {name: of_log(getattr(points, name)) for name in ("k1", "k2", "c_h", "c_oh", "h_per_activity")}
    return Points(acid=acid[None], dilution=1.0 / line(1.0 / points.dilution), families=families, **logs)


def _with_weak_acid(points: Points, total: float, pk: float) -> Points:
    """The points with the weak acid that the fit has sought, if it has."""
    if not total > 0.0:
        return points
    k = np.exp(-LN10 * pk) * points.h_per_activity
    acid = Family(np.full(points.acid.shape, total), (k,), int(pk < ZERO_LEVEL_PK))
    return replace(points, families=(*points.families, acid))

"""Least squares of a whole titration curve: alkalinity, carbon, electrode offset and, if wanted, one more weak acid.

The residual of a point is the imbalance of its proton balance, explicit in what is sought, weighted by what the scatter
of pH and of the burette make of it. Many titrations are fitted at once by Levenberg-Marquardt steps, each on its own.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10
from aquabuf.chem.acids import ZERO_LEVEL_PK
from aquabuf.engine.balance import Family
from aquabuf.engine.titrate import Points, titration_curve

__all__ = ["CurveFit", "fit_curve"]

Array = NDArray[np.float64]

ROUNDS = 60
WEIGHT_ROUNDS = 6        # weights follow the solution so long, then stand still so that the sum of squares can settle
DAMPING = (1e-4, 1e-12, 1e8)  # first, least, most
DONE = 1e-9              # largest step over its own standard error
FIRST_PK, PK_RANGE = 5.0, (3.5, 8.5)
FARTHEST_OFFSET = 3.0    # pH; an electrode farther off measures nothing


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class CurveFit:
    """Outcome per titration; nan where `converged` is False. Amounts per unit of sample.

    offset_ph : reading less truth. [-]
    covariance : of alkalinity, carbon, offset, acid total and acid pK; zero for what was not sought.
    response : change of those five per relative error of the acid added.
    residual_ph : reading less curve at each point, nan where not used. [-]
    reduced_chi2 : weighted sum of squares over degrees of freedom. [-]
    """

    alkalinity: Array
    carbon: Array
    offset_ph: Array
    acid_total: Array
    acid_pk: Array
    covariance: Array
    response: Array
    residual_ph: Array
    reduced_chi2: Array
    converged: NDArray[np.bool_]


def fit_curve(points: Points, ph: Array, use: NDArray[np.bool_], *, u_ph: Array, u_acid: Array, alkalinity: Array,
              carbon: bool = True, weak_acid: bool = False) -> CurveFit:
    """Fit the points where `use` holds.

    Parameters
    ----------
    points, ph, use
        Points with their constants, meter pH, and which points count: titrations times points.
    u_ph, u_acid
        Scatter of one pH reading [-] and of one reading of the acid added, per titration. [eq per unit of sample]
    alkalinity
        First guess, per titration.
    carbon
        Seek the carbon too; False where the CO2 was swept out and none is left.
    weak_acid
        Seek the total and pK of one more weak acid. Its base counts in alkalinity where its pK is 4.5 or more.
    """
    n = ph.shape[0]
    sought = np.array([True, carbon, True, weak_acid, weak_acid])
    p = np.zeros((n, 5))
    p[:, 0], p[:, 1], p[:, 4] = alkalinity, np.abs(alkalinity) if carbon else 0.0, FIRST_PK
    p[:, 3] = 0.05 * np.abs(alkalinity) + 1e-6 if weak_acid else 0.0
    enough = use.sum(axis=1) > sought.sum()
    active = np.flatnonzero(enough & np.isfinite(alkalinity))
    converged = np.zeros(n, dtype=bool)
    if active.size:
        p[active], converged[active] = _iterate(points.take(active), ph[active], use[active], u_ph[active],
                                                u_acid[active], p[active], sought)
    return _outcome(points, ph, use, u_ph, u_acid, p, sought, converged)


def _model(points: Points, ph: Array, p: Array) -> tuple[Array, Array]:
    """Imbalance of every point and its derivatives against the five unknowns (last axis)."""
    a, c, offset, total, pk = (p[:, i, None] for i in range(5))
    h = points.h(ph - offset)
    per_carbon, rest, d_carbon, d_rest = points.terms(h)
    base = 1.0 / (1.0 + h / (np.exp(-LN10 * pk) * points.h_per_activity))
    spread = base * (1.0 - base)
    slope = c * d_carbon + d_rest - total * spread
    residual = a - points.acid - c * per_carbon - rest - total * base
    ones = np.ones_like(h)
    return residual, np.stack([ones, -per_carbon, -LN10 * slope, -base, LN10 * total * spread], axis=-1)


def _weights(jacobian: Array, use: NDArray[np.bool_], u_ph: Array, u_acid: Array) -> Array:
    """One over the variance that scatter of pH and acid gives the imbalance; zero where a point does not count."""
    variance = (u_ph[:, None] * jacobian[..., 2]) ** 2 + u_acid[:, None] ** 2
    return np.where(use, 1.0 / variance, 0.0)


def _normal(residual: Array, jacobian: Array, weight: Array) -> tuple[Array, Array]:
    """Normal matrix and gradient of each titration."""
    weighted = jacobian * weight[..., None]
    return np.einsum("nmi,nmj->nij", weighted, jacobian), np.einsum("nmi,nm->ni", weighted, residual)


def _iterate(points: Points, ph: Array, use: NDArray[np.bool_], u_ph: Array, u_acid: Array, p: Array,
             sought: NDArray[np.bool_]) -> tuple[Array, NDArray[np.bool_]]:
    """Damped steps until each titration stands still; those that are done drop out."""
    at = np.flatnonzero(sought)
    out, done_all = p.copy(), np.zeros(len(p), dtype=bool)
    rows, damping = np.arange(len(p)), np.full(len(p), DAMPING[0])
    ph = np.where(use, ph, 7.0)
    weight, done = np.zeros_like(ph), np.zeros(len(p), dtype=bool)
    for iteration in range(ROUNDS):
        residual, jacobian = _model(points, ph, p)
        if iteration < WEIGHT_ROUNDS:
            weight = _weights(jacobian, use, u_ph, u_acid)
        cost = (weight * residual**2).sum(axis=1)
        matrix, gradient = _normal(residual, jacobian[..., at], weight)
        scale = 1.0 / np.sqrt(np.maximum(np.einsum("nii->ni", matrix), 1e-300))
        matrix = matrix * scale[:, :, None] * scale[:, None, :] + damping[:, None, None] * np.eye(at.size)
        step = -scale * np.linalg.solve(matrix, (scale * gradient)[..., None])[..., 0]
        trial = p.copy()
        trial[:, at] += step
        trial = _inside(trial)
        new, _ = _model(points, ph, trial)
        better = (weight * new**2).sum(axis=1) <= cost * (1.0 + 1e-12)
        p = np.where((better & ~done)[:, None], trial, p)  # one that is done stands still, whatever the others need
        damping = np.clip(np.where(better, damping / 10.0, damping * 10.0), *DAMPING[1:])
        done |= (iteration >= WEIGHT_ROUNDS) & (np.abs(step / scale).max(axis=1) < DONE)
        done |= (iteration >= WEIGHT_ROUNDS) & ~better & (damping >= DAMPING[2])
        out[rows] = p
        done_all[rows] = done
        keep = np.flatnonzero(~done)
        if not keep.size:
            break
        if 2 * keep.size < done.size:
            points, ph, use, weight = points.take(keep), ph[keep], use[keep], weight[keep]
            p, damping, rows, u_ph, u_acid = p[keep], damping[keep], rows[keep], u_ph[keep], u_acid[keep]
            done = done[keep]
    return out, done_all


def _inside(p: Array) -> Array:
    """Unknowns kept where they mean something: amounts not below zero, offset and pK within reach."""
    p[:, 1] = np.maximum(p[:, 1], 0.0)
    p[:, 2] = np.clip(p[:, 2], -FARTHEST_OFFSET, FARTHEST_OFFSET)
    p[:, 3] = np.maximum(p[:, 3], 0.0)
    p[:, 4] = np.clip(p[:, 4], *PK_RANGE)
    return p


def _curve(points: Points, p: Array) -> Array:
    """What the electrode would read along the fitted curve."""
    shape = points.acid.shape
    k = np.exp(-LN10 * p[:, 4, None]) * points.h_per_activity
    more = replace(points, families=(*points.families, Family(np.broadcast_to(p[:, 3, None], shape), (k,), 0)))
    return titration_curve(more, p[:, 0], p[:, 1]) + p[:, 2, None]


def _outcome(points: Points, ph: Array, use: NDArray[np.bool_], u_ph: Array, u_acid: Array, p: Array,
             sought: NDArray[np.bool_], converged: NDArray[np.bool_]) -> CurveFit:
    """Covariance, response, residuals and quality of the fit at its solution."""
    n = len(p)
    at = np.flatnonzero(sought)
    safe = np.where(use, ph, 7.0)
    residual, jacobian = _model(points, safe, np.where(converged[:, None], p, [0.0, 1e-4, 0.0, 0.0, FIRST_PK]))
    weight = _weights(jacobian, use, u_ph, u_acid)
    free = np.maximum(use.sum(axis=1) - at.size, 1)
    chi2 = (weight * residual**2).sum(axis=1) / free
    matrix, _ = _normal(residual, jacobian[..., at], weight)
    scale = 1.0 / np.sqrt(np.maximum(np.einsum("nii->ni", matrix), 1e-300))
    inverse = np.linalg.pinv(matrix * scale[:, :, None] * scale[:, None, :], hermitian=True)
    inverse *= scale[:, :, None] * scale[:, None, :]
    pull = np.einsum("nmi,nm->ni", jacobian[..., at] * weight[..., None], points.acid)
    covariance, response = np.zeros((n, 5, 5)), np.zeros((n, 5))
    covariance[np.ix_(np.arange(n), at, at)] = inverse
    response[:, at] = np.einsum("nij,nj->ni", inverse, pull)
    alkalinity = p[:, 0] - np.where(p[:, 4] < ZERO_LEVEL_PK, p[:, 3], 0.0)
    residual_ph = np.full(ph.shape, np.nan)
    rows = np.flatnonzero(converged)
    if rows.size:
        residual_ph[rows] = np.where(use[rows], ph[rows] - _curve(points.take(rows), p[rows]), np.nan)

    def or_nan(v: Array) -> Array:
        return np.where(converged, v, np.nan)
    return CurveFit(
        alkalinity=or_nan(alkalinity), carbon=or_nan(p[:, 1]), offset_ph=or_nan(p[:, 2]), acid_total=or_nan(p[:, 3]),
        acid_pk=or_nan(p[:, 4]), covariance=covariance, response=response, residual_ph=residual_ph,
        reduced_chi2=or_nan(chi2), converged=converged)

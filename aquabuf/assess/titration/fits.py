"""The whole curve by least squares: closed, or acid in excess once CO2 has been swept out."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from aquabuf.engine.conditions import FRESH_BELOW
from aquabuf.engine.fit import CurveFit, fit_curve
from aquabuf.engine.titrate import Points

__all__ = ["EXCESS_PH", "Fitted", "fit_acid_excess", "fit_closed"]

Array = NDArray[np.float64]

LEAST_PH = 2.6          # below it activity coefficients are guesswork
FEWEST = 5
END_PH, BUFFERED_PH = 4.5, 5.2  # two points are needed below the one and two above the other
EXCESS_PH = {"fresh": (2.7, 4.3), "sea": (2.9, 3.6)}  # where CO2 is swept out and none is bound; sea: about 3.5 to 3.0
FEWEST_EXCESS = 4
ACID_SIGMAS = 3.0  # an extra weak acid counts as found from so many of its standard uncertainties on


@dataclass(frozen=True, slots=True, eq=False)
class Fitted:
    """A fit and its standard uncertainties; nan where it could not be made. Amounts per unit of sample.

    u_shape : of the alkalinity, from the fit alone; u_alkalinity adds what strength and volumes share.
    points : number of points used; why_not : reason in words where there is no result.
    """

    fit: CurveFit
    u_shape: Array
    u_alkalinity: Array
    u_carbon: Array
    u_offset: Array
    points: NDArray[np.intp]
    why_not: NDArray[np.object_]


def fit_closed(points: Points, ph: Array, there: NDArray[np.bool_], alkalinity: Array, *, u_ph: Array, u_acid: Array,
               relative_u: Array, purged: NDArray[np.bool_], is_base: NDArray[np.bool_], weak_acid: bool) -> Fitted:
    """Alkalinity, carbon and electrode offset from all points of titrations whose CO2 stayed in."""
    with np.errstate(invalid="ignore"):
        use = there & (ph >= LEAST_PH)
        low, high = (use & (ph < END_PH)).sum(axis=1), (use & (ph > BUFFERED_PH)).sum(axis=1)
    why = np.full(len(ph), "", dtype=object)
    why[(low < 2) | (high < 2)] = (f"needs two points below pH {END_PH:g} and two above {BUFFERED_PH:g} to tell carbon "
                                   f"from alkalinity")
    why[use.sum(axis=1) < FEWEST] = f"needs {FEWEST} points or more above pH {LEAST_PH:g}"
    why[purged] = "CO2 was swept out"
    why[is_base] = "titrated with base"
    use = use & (why == "")[:, None]
    fit = fit_curve(points, ph, use, u_ph=u_ph, u_acid=u_acid, alkalinity=alkalinity)
    if weak_acid:
        more = fit_curve(points, ph, use, u_ph=u_ph, u_acid=u_acid, alkalinity=alkalinity, weak_acid=True)
        fit = _either(fit, more, use.sum(axis=1))
    return _fitted(fit, use, why, relative_u)


def _either(plain: CurveFit, more: CurveFit, count: NDArray[np.intp]) -> CurveFit:
    """The fit with one more acid where it stands out from its uncertainty and mends the fit; else the plain one."""
    u_total = np.sqrt(np.maximum(more.covariance[:, 3, 3], 0.0))
    with np.errstate(invalid="ignore"):
        gain = plain.reduced_chi2 * np.maximum(count - 3, 1) - more.reduced_chi2 * np.maximum(count - 5, 1)
        found = more.converged & (more.acid_total > ACID_SIGMAS * u_total) & ~(gain < ACID_SIGMAS**2)

    def pick(name: str) -> NDArray:
        with_acid, without = getattr(more, name), getattr(plain, name)
        return np.where(found.reshape(-1, *(1,) * (with_acid.ndim - 1)), with_acid, without)
    picked = {f.name: pick(f.name) for f in fields(CurveFit)}
    picked["acid_pk"] = np.where(found, more.acid_pk, np.nan)
    return CurveFit(**picked)


def fit_acid_excess(points: Points, ph: Array, there: NDArray[np.bool_], alkalinity: Array, *, u_ph: Array,
                    u_acid: Array, relative_u: Array, purged: NDArray[np.bool_], salinity: Array) -> Fitted:
    """Alkalinity and electrode offset from the acid in excess, sulfate and fluoride counted, CO2 swept out.

    Form of the open-cell method for sea water (Dickson, Sabine & Christian 2007, procedure 3b): only points well past
    the end point are used, where nothing but free and bound acid is left.
    """
    sea = salinity >= FRESH_BELOW
    low, high = (np.where(sea, s, f)[:, None] for f, s in zip(EXCESS_PH["fresh"], EXCESS_PH["sea"], strict=True))
    with np.errstate(invalid="ignore"):
        use = there & (ph >= low) & (ph <= high)
    why = np.full(len(ph), "", dtype=object)
    for mask, kind in ((~sea, "fresh"), (sea, "sea")):
        bounds = EXCESS_PH[kind]
        why[mask & (use.sum(axis=1) < FEWEST_EXCESS)] = (
            f"needs {FEWEST_EXCESS} points from pH {bounds[1]:g} to {bounds[0]:g}")
    why[~purged] = "needs CO2 swept out (exchange = purged)"
    use = use & (why == "")[:, None]
    fit = fit_curve(points, ph, use, u_ph=u_ph, u_acid=u_acid, alkalinity=alkalinity, carbon=False)
    return _fitted(fit, use, why, relative_u)


def _fitted(fit: CurveFit, use: NDArray[np.bool_], why: NDArray[np.object_], relative_u: Array) -> Fitted:
    """Standard uncertainties: the fit's own, widened where points scatter more than expected, and what all share."""
    why = np.where((why == "") & ~fit.converged, "the fit found no solution", why)
    widen = np.maximum(fit.reduced_chi2, 1.0)
    own = [np.sqrt(np.maximum(fit.covariance[:, i, i] * widen, 0.0)) for i in range(3)]
    shared = [np.abs(fit.response[:, i]) * relative_u for i in range(3)]
    u = [np.where(fit.converged, np.hypot(o, s), np.nan) for o, s in zip(own, shared, strict=True)]
    return Fitted(fit, np.where(fit.converged, own[0], np.nan), u[0], u[1], u[2], use.sum(axis=1).astype(np.intp), why)

"""Every method on every titration of a piece: from arrays of points to estimates of the alkalinity."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.assess.sample.inputs import own_acids
from aquabuf.assess.titration.calibrate import Calibration, by_standards, zero_potential_of_acid
from aquabuf.assess.titration.curves import Curves, curves_of
from aquabuf.assess.titration.endpoints import (
    TWO_POINT_STEP,
    Crossing,
    alkalinity_two_points,
    crossing,
    end_point_for,
    left_at,
)
from aquabuf.assess.titration.fits import Fitted, fit_acid_excess, fit_closed
from aquabuf.assess.titration.gran import BIAS_SHARE, Gran, GranLines, gran_lines, windows
from aquabuf.assess.titration.inflection import Inflection, inflection
from aquabuf.assess.titration.options import ALWAYS_END_POINT, TitrationOptions
from aquabuf.chem.acids import Acid, acid_table
from aquabuf.chem.organic import OLIVER_SITES_EQ_PER_MG
from aquabuf.chem.seasalt import ionic_strength_seawater
from aquabuf.engine.balance import Family
from aquabuf.engine.build import IONS, SEA_SALTS, of_sea_salt
from aquabuf.engine.conditions import FRESH_BELOW, LIMITS
from aquabuf.engine.fit import fit_curve
from aquabuf.engine.solve import PH_HIGHEST, PH_LOWEST
from aquabuf.engine.titrate import Points, mixed_ionic_strength, points_at
from aquabuf.readings.titration.result import Titrations
from aquabuf.units import convert

__all__ = ["ACIDITY_END_POINTS", "IMPLIES_ABOVE_PH", "LEAST_SLOPE_ERROR", "Estimate", "Solved", "organic_sites",
           "solve_titrations", "text_of", "value_of"]

Array = NDArray[np.float64]

ACIDITY_END_POINTS = (3.7, 4.5, 8.3)  # mineral acidity by either old end point, and total acidity by phenolphthalein
LEAST_SLOPE_ERROR = 0.05  # of a slope that is noticed; common practice, no source
REFERENCE_ACID_PH = 3.5
ELECTRODE_SLOPE_SPREAD = 0.01  # of theory, where no two standards tell the slope; common practice, no source
LEAST_CARBON = 2e-5       # of an acid water, about what air gives. [mol/L]
TOO_SALTY = (f"ionic strength above {LIMITS['ionic_strength_mol_l'][3]:g} mol/L, where the fresh-water constants end; "
             f"give the salinity of salt water")
# Share of the acid sites of measured organic carbon by which a result may be off, since they hold acid all along its
# points; found by simulation of acids of many strengths.
ORGANIC_SHARES = {"gran": 0.06, "acid_excess": 0.06, "fit": 0.12, "two_point": 0.13}
IMPLIES_ABOVE_PH = 5.5    # of the first reading, below which alkalinity and pH say nothing of the carbon
MOST_CARBON = 5.0         # times alkalinity, where the start pH implies more it is a slip


@dataclass(frozen=True, slots=True, eq=False)
class Estimate:
    """One method's result per titration: value and standard uncertainty [eq per unit of sample], nan where none.

    own_u : the part of the uncertainty that other methods do not share. why_not : reason where there is no value.
    """

    value: Array
    u: Array
    own_u: Array
    why_not: NDArray[np.object_]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Solved:
    """All that was found of a piece; arrays over its usable titrations, amounts per unit of sample.

    chi2_by_slope : reduced chi-squared of the fit, had the titrant the strength that the Gran line implies. [-]
    """

    curves: Curves
    samples: Mapping[str, NDArray]
    points: Points
    ph: Array
    calibration: Calibration
    purged: NDArray[np.bool_]
    first_guess: Array
    carbon_at_start: Array
    gran: Gran
    gran_lines: GranLines
    inflection: Inflection
    crossings: Mapping[float, Crossing]
    level_ph: Array
    level: Crossing
    fit: Fitted
    excess: Fitted
    estimates: Mapping[str, Estimate]
    acidity: Mapping[float, Estimate]
    chi2_by_slope: Array


def value_of(samples: Mapping[str, NDArray], name: str, size: int) -> Array:
    """A number of each sample, nan throughout where it was not given."""
    v = samples.get(name)
    return np.full(size, np.nan) if v is None else v


def text_of(samples: Mapping[str, NDArray], name: str, size: int) -> NDArray[np.object_]:
    """A word of each sample, "" throughout where it was not given."""
    v = samples.get(name)
    return np.full(size, "", dtype=object) if v is None else v


def solve_titrations(t: Titrations, options: TitrationOptions) -> Solved:
    """Every method on the usable titrations of `t`.

    Where fewer than two standards tell the slope of the electrode, all is worked out a second time with a slope that is
    lower by its standard uncertainty, and what that changes is added to the uncertainty of every estimate.
    """
    c = curves_of(t)
    n = c.count.size
    frame = t.samples[t.usable]
    samples = {name: frame[name].to_numpy(dtype=float if frame[name].dtype.kind in "fi" else object)
               for name in frame.columns}
    solved = _solve(c, samples, own_acids(t.acids), options)
    untold = c.is_potential & (solved.calibration.standards < 2)
    if not untold.any():
        return solved
    spread = value_of(samples, "electrode_slope_spread", n)
    spread = np.where(untold, np.where(np.isfinite(spread), spread, ELECTRODE_SLOPE_SPREAD), 0.0)
    other = _solve(c, samples, own_acids(t.acids), options, 1.0 - spread)
    return replace(
        solved,
        estimates={name: _shifted(e, other.estimates[name], untold) for name, e in solved.estimates.items()},
        acidity={end: _shifted(e, other.acidity[end], untold) for end, e in solved.acidity.items()})


def _shifted(e: Estimate, other: Estimate, where: NDArray[np.bool_]) -> Estimate:
    """The estimate with its change to another one counted in its uncertainty."""
    shift = np.where(where & np.isfinite(other.value) & np.isfinite(e.value), np.abs(other.value - e.value), 0.0)
    return replace(e, u=np.hypot(e.u, shift), own_u=np.hypot(e.own_u, shift))


def _solve(c: Curves, samples: Mapping[str, NDArray], acids: tuple[Acid, ...], options: TitrationOptions,
           slope_over_theory: Array | float = 1.0) -> Solved:
    """Every method with one slope of the electrodes that no standards tell."""
    n = c.count.size
    purged = text_of(samples, "exchange", n) == "purged"
    totals = _totals(samples, c, acids)
    sulfuric = (text_of(samples, "titrant_acid", n) == "sulfuric") & ~c.is_base
    own_strength = value_of(samples, "titrant_ionic_strength_mol_l", n)
    plain = np.where(sulfuric, 1.5, 1.0) * np.abs(c.per_added) * c.sample  # ionic strength of 2:1 and 1:1 acids
    titrant = np.where(np.isfinite(own_strength), own_strength, plain)
    is_sea = c.salinity >= FRESH_BELOW

    acid, dilution = np.nan_to_num(c.acid), np.nan_to_num(c.dilution, nan=1.0)  # a point that is not there does no harm

    def points_with(alkalinity: Array) -> Points:
        sample = np.where(np.isfinite(c.ionic_strength_mol_l), c.ionic_strength_mol_l, np.abs(alkalinity))
        sample = np.where(is_sea, ionic_strength_seawater(c.salinity), sample)
        strength = mixed_ionic_strength(sample[:, None], titrant[:, None], acid, alkalinity[:, None], dilution)
        return points_at(acid, dilution, t_c=c.t_c, salinity=c.salinity, ionic_strength_mol_l=strength,
                         totals=totals, by_mass=c.by_mass, sulfuric=sulfuric)

    calibration, ph = _readings_as_ph(c, samples, points_with, slope_over_theory)
    guess = _first_guess(c, ph)
    points = points_with(guess)
    known = np.isfinite(points.k1)
    there, safe = np.isfinite(ph) & c.there & known, _harmless(points, known)
    too_salty = np.asarray(np.any(np.isfinite(ph) & c.there & ~known, axis=1))
    acidity = _acidity(c, ph)
    carbon = _carbon_at_start(points, ph, guess, samples, purged, c, acidity)
    gran = windows(points, ph, there, alkalinity=guess, carbon=carbon, u_ph=c.u_ph_scatter, u_acid=c.u_acid)
    near = np.where(np.isfinite(gran.acid), gran.acid, guess)
    common = {"u_ph": c.u_ph_scatter, "u_acid": c.u_acid, "relative_u": c.relative_u, "purged": purged}
    fit = fit_closed(safe, ph, there, near, is_base=c.is_base, weak_acid=options.weak_acid, **common)
    excess = fit_acid_excess(safe, ph, there, near, salinity=c.salinity, **common)
    turned = np.where(c.is_base[:, None], np.nan, ph)
    crossings = {e: crossing(c.acid, turned, e) for e in options.end_points}
    level_ph = end_point_for(_mg_caco3(near))
    level = crossing(c.acid, turned, level_ph)
    bend = inflection(c.acid, turned, c.u_ph_scatter, c.u_acid)
    estimates = {
        "gran": _of_gran(gran, c), "fit": _of_fit(fit), "inflection": _of_inflection(bend, c),
        "two_point": _two_point(c, turned, crossings[ALWAYS_END_POINT], carbon, points),
        "fixed_level": _of_crossing(level, c), "acid_excess": _of_fit(excess),
    }
    sites = organic_sites(samples, n)
    estimates |= {name: _with_sites(estimates[name], share * sites) for name, share in ORGANIC_SHARES.items()}
    estimates |= {name: _because(estimates[name], too_salty) for name in ("gran", "fit", "two_point", "acid_excess")}
    estimates |= {f"fixed_{e:g}": _of_crossing(found, c) for e, found in crossings.items()}
    return Solved(
        curves=c, samples=samples, points=points, ph=ph, calibration=calibration, purged=purged, first_guess=guess,
        carbon_at_start=_carbon_at_start(points, ph, _known_best(gran, fit, guess), samples, purged, c, acidity),
        gran=gran,
        gran_lines=gran_lines(points, ph, there & ~purged[:, None], near, c.u_ph_scatter, c.u_acid),
        inflection=bend, crossings=crossings, level_ph=level_ph, level=level, fit=fit, excess=excess,
        estimates=estimates, acidity=acidity, chi2_by_slope=_chi2_by_slope(safe, ph, fit, gran, c))


def _chi2_by_slope(points: Points, ph: Array, fit: Fitted, gran: Gran, c: Curves) -> Array:
    """Reduced chi-squared of the fit, had the titrant the strength that the slope of the Gran line implies.

    nan where there is no fit, or where the slope is right; infinite where no curve can be found for that strength.
    Strength and electrode make the same free acid; what tells them apart is how well the rest of the curve then fits.
    """
    out, ratio = np.full(c.count.size, np.nan), gran.slope_ratio
    with np.errstate(invalid="ignore", divide="ignore"):
        rows = np.flatnonzero(fit.fit.converged & (np.abs(np.log(ratio)) > LEAST_SLOPE_ERROR))
    if rows.size:
        p, r = points.take(rows), ratio[rows]
        other = fit_curve(replace(p, acid=p.acid * r[:, None]), ph[rows], np.isfinite(fit.fit.residual_ph[rows]),
                          u_ph=c.u_ph_scatter[rows], u_acid=c.u_acid[rows] * r, alkalinity=fit.fit.alkalinity[rows] * r)
        out[rows] = np.where(other.converged, other.reduced_chi2, np.inf)
    return out


def _harmless(points: Points, known: NDArray[np.bool_]) -> Points:
    """The points with constants of 1 where there are none, so that a fit that gives them no weight is not upset."""
    if known.all():
        return points
    families = tuple(Family(f.total, tuple(np.where(known, k, 1.0) for k in f.k), f.zero) for f in points.families)
    constants = {name: np.where(known, getattr(points, name), 1.0) for name in ("k1", "k2", "c_h", "c_oh",
                                                                               "h_per_activity")}
    return replace(points, families=families, **constants)


def organic_sites(samples: Mapping[str, NDArray], size: int) -> Array:
    """Acid sites of the organic carbon, 0 where it was not measured. [eq/L]"""
    return OLIVER_SITES_EQ_PER_MG * np.nan_to_num(value_of(samples, "doc_mg_l", size))


def _with_sites(e: Estimate, organic: Array) -> Estimate:
    """The estimate with what organic acids may add or take counted in its uncertainty."""
    return replace(e, u=np.hypot(e.u, organic), own_u=np.hypot(e.own_u, organic))


def _because(e: Estimate, too_salty: NDArray[np.bool_]) -> Estimate:
    """The estimate with the reason that so much salt has no constants, where it has no value."""
    none = too_salty & ~(np.isfinite(e.value) & np.isfinite(e.u))
    return replace(e, why_not=np.where(none, TOO_SALTY, e.why_not))


def _totals(samples: Mapping[str, NDArray], c: Curves, own: tuple[Acid, ...]) -> dict[Acid, Array]:
    """Weak acids of the samples, per unit of sample; sea salt brings its own where they were not measured."""
    unit = np.where(c.by_mass, c.density_kg_l, 1.0)
    is_sea = c.salinity >= FRESH_BELOW
    acids = [a for a in (*acid_table().values(), *own)
             if f"{a.name}_mol_l" in samples or (is_sea.any() and a.name in SEA_SALTS and a.name not in IONS)]
    out = {}
    for acid in acids:
        given = value_of(samples, f"{acid.name}_mol_l", c.count.size)
        if acid.name in SEA_SALTS:
            salt = np.where(is_sea, of_sea_salt(acid.name, c.salinity) * c.density_kg_l, 0.0)
            given = np.where(np.isnan(given), salt, given)
        out[acid] = np.nan_to_num(given) / unit
    return out


def _readings_as_ph(c: Curves, samples: Mapping[str, NDArray], points_with, slope_over_theory: Array | float,
                    ) -> tuple[Calibration, Array]:
    """pH of every point; potentials by their standards, else by the acid end of the titration."""
    calibration = by_standards(samples, c.t_c, slope_over_theory)
    rows = np.flatnonzero(c.is_potential & (calibration.standards == 0))
    if rows.size:
        points = points_with(np.zeros(c.count.size)).take(rows)
        activity = np.full(points.acid.shape, 10.0**-REFERENCE_ACID_PH)
        d_rest = points.terms(activity * points.h_per_activity)[3]
        per_acid = activity / (-d_rest * points.dilution)
        calibration.zero_mv[rows] = zero_potential_of_acid(
            c.reading[rows], c.acid[rows], c.dilution[rows], per_acid, calibration.slope_mv[rows])
    ph = calibration.ph(c.reading)
    with np.errstate(invalid="ignore"):
        beyond = ((ph < PH_LOWEST) | (ph > PH_HIGHEST)).any(axis=1)
    ph[beyond] = np.nan  # one potential that no water has spoils the titration, as a pH of 20 would
    return calibration, np.where(c.is_potential[:, None], ph, c.reading)


def _first_guess(c: Curves, ph: Array) -> Array:
    """Alkalinity to start from: where pH passes 4.5, else the first point, less the free acid there."""
    free = 10.0**-ALWAYS_END_POINT
    found = crossing(c.acid, np.where(c.is_base[:, None], np.nan, ph), ALWAYS_END_POINT).acid - free
    rows = np.arange(c.count.size)
    last = c.acid[rows, np.maximum(c.count - 1, 0)]
    acid_start = c.acid[:, 0] - 10.0 ** -np.minimum(ph[:, 0], 14.0) / c.dilution[:, 0]
    of_start = np.where(ph[:, 0] < ALWAYS_END_POINT, acid_start, np.where(c.is_base, 0.0, last))
    return np.where(np.isfinite(found), found, np.nan_to_num(of_start))


def _carbon_at_start(points: Points, ph: Array, alkalinity: Array, samples: Mapping[str, NDArray],
                     purged: NDArray[np.bool_], c: Curves, acidity: Mapping[float, Estimate]) -> Array:
    """Carbon: measured, else what the first reading and the alkalinity imply, within reason; none where swept out.

    An acid water titrated with base: what took up base between the two end points.
    """
    start = np.where(np.isfinite(ph), ph, 7.0)
    per_carbon, rest, _, _ = points.terms(points.h(start))
    least = np.maximum(alkalinity, 0.0) + LEAST_CARBON
    implied = (alkalinity - points.acid[:, 0] - rest[:, 0]) / per_carbon[:, 0]
    implied = np.clip(implied, 0.0, MOST_CARBON * least)
    by_base = np.maximum(acidity[8.3].value - acidity[ALWAYS_END_POINT].value - 10.0**-ALWAYS_END_POINT, 0.0)
    unknown = np.where(c.is_base & np.isfinite(by_base), by_base, least)
    implied = np.where((ph[:, 0] > IMPLIES_ABOVE_PH) & np.isfinite(implied), implied, unknown)
    measured = value_of(samples, "dic_mol_l", c.count.size) / np.where(c.by_mass, c.density_kg_l, 1.0)
    return np.where(purged, 0.0, np.where(np.isfinite(measured), measured, implied))


def _known_best(gran: Gran, fit: Fitted, guess: Array) -> Array:
    """Alkalinity by Gran, which lost CO2 does not change, else by the fit, else the first guess."""
    by_fit = np.where(np.isfinite(fit.fit.alkalinity), fit.fit.alkalinity, guess)
    return np.where(np.isfinite(gran.acid), gran.acid, by_fit)


def _mg_caco3(eq_l: Array) -> Array:
    return convert(eq_l, "eq/L", "mg/L as CaCO3", "alkalinity")


def _shared(c: Curves, value: Array) -> Array:
    """Uncertainty that every method shares: strength of the titrant, volume of the sample, scale of the burette."""
    return c.relative_u * np.abs(value)


def _of_gran(g: Gran, c: Curves) -> Estimate:
    own = np.sqrt(g.u_line**2 + g.u_window**2 + g.u_bias**2)
    why = worded(c.count.size, (g.first < 0, "needs three points in a row from pH 4.6 to 2.7"))
    return Estimate(g.acid, np.hypot(own, _shared(c, g.acid)), own, why)


def _of_fit(f: Fitted) -> Estimate:
    return Estimate(f.fit.alkalinity, f.u_alkalinity, f.u_shape, f.why_not)


def _of_inflection(b: Inflection, c: Curves) -> Estimate:
    own = np.hypot(b.u_acid, c.u_acid)
    why = worded(c.count.size, (np.isnan(b.acid), "no point of the curve is steepest beyond scatter"))
    return Estimate(b.acid, np.hypot(own, _shared(c, b.acid)), own, why)


def _of_crossing(found: Crossing, c: Curves) -> Estimate:
    """A fixed end point. What the electrode reads wrong moves it along the curve."""
    own = np.sqrt(found.u_curve**2 + _reading_u(found, c) ** 2)
    why = worded(c.count.size, (np.isnan(found.acid), "the curve does not pass this pH"),
                 (c.is_base, "titrated with base"))
    return Estimate(found.acid, np.hypot(own, _shared(c, found.acid)), own, why)


def _reading_u(found: Crossing, c: Curves) -> Array:
    """What readings make of a crossing: an electrode that is off moves it along the curve, scatter moves its points."""
    scatter = found.scatter * np.hypot(found.slope * c.u_ph_scatter, c.u_acid)
    return np.hypot(found.slope * c.u_ph, scatter)


def _two_point(c: Curves, ph: Array, first: Crossing, carbon: Array, points: Points) -> Estimate:
    """Low-alkalinity form from pH 4.5 and 0.30 below."""
    second = crossing(c.acid, ph, ALWAYS_END_POINT - TWO_POINT_STEP)
    value = alkalinity_two_points(first.acid, second.acid)
    k1, per_activity = points.k1[:, 0], points.h_per_activity[:, 0]
    left = (2.0 * left_at(ALWAYS_END_POINT, k1, per_activity)
            - left_at(ALWAYS_END_POINT - TWO_POINT_STEP, k1, per_activity))
    scatter = np.hypot(2.0 * first.scatter * np.hypot(first.slope * c.u_ph_scatter, c.u_acid),
                       second.scatter * np.hypot(second.slope * c.u_ph_scatter, c.u_acid))
    own = np.sqrt(4.0 * first.u_curve**2 + second.u_curve**2 + scatter**2
                  + ((2.0 * first.slope - second.slope) * c.u_ph) ** 2
                  + (BIAS_SHARE * left * carbon) ** 2)
    why = worded(c.count.size, (np.isnan(value), "the curve does not pass pH 4.5 and 4.2"))
    return Estimate(value, np.hypot(own, _shared(c, value)), own, why)


def _acidity(c: Curves, ph: Array) -> dict[float, Estimate]:
    """Base taken up to each end point; of an acid titration that starts above one, its acid with a minus sign."""
    out = {}
    for end in ACIDITY_END_POINTS:
        up = crossing(-c.acid, np.where(c.is_base[:, None], -ph, np.nan), -end)
        down = crossing(c.acid, np.where(c.is_base[:, None], np.nan, ph), end)
        value = np.where(c.is_base, up.acid, -down.acid)
        own = np.where(c.is_base, np.hypot(up.u_curve, _reading_u(up, c)), np.hypot(down.u_curve, _reading_u(down, c)))
        why = worded(c.count.size, (np.isnan(value), "the curve does not pass this pH"))
        out[end] = Estimate(value, np.hypot(own, _shared(c, value)), own, why)
    return out


"""Critical load of acidity of lakes by the steady-state water chemistry method, and what exceeds it.

Inputs in eq/L, runoff in m/yr, loads in eq/m2/yr; arrays broadcast, such as (lakes, 1) with (lakes, draws). Every
equation is in its function; `critical_choice` holds the variants. Method: Henriksen; the equations of load and original
base cations as printed by the UK critical loads of fresh waters.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.lake.critical_choice import (
    LIMIT_MOST_EQ_L,
    LIMIT_SLOPE_YR_M,
    CriticalLoadChoice,
    SulfateBackground,
    parse_choice,
)
from aquabuf.assess.lake.inputs import BASE_CATIONS
from aquabuf.assess.lake.sea_salt import NO_TRACER, non_marine, sulfate_of_sea_salt
from aquabuf.errors import InputError

__all__ = [
    "FLAGS", "SULFUR_IS", "AfterChange", "CriticalLoad", "CriticalLoadChoice", "after_deposition_change",
    "concentration_scale", "critical_load", "critical_load_eq_m2_yr", "exceedance_eq_m2_yr", "f_factor",
    "original_base_cations", "original_base_cations_iterated", "parse_choice", "sulfate_before", "variable_anc_limit",
]

Array = NDArray[np.float64]

LITERS_PER_M3 = 1e3
HALF_PI = 0.5 * np.pi
NEEDED = (*BASE_CATIONS, "sulfate", "nitrate")
SULFUR_IS = ("nonmarine", "total")  # what a sulfur deposition may be
STEPS, MORE_STEPS = 2, 6            # of the solver for all rows, and for the few that are not done then
TOLERANCE = 1e-11                   # of its argument, of order 1; two steps leave 2e-12 at most where F is positive

# What a lake may have to be told, by name
FLAGS: Mapping[str, str] = MappingProxyType({
    "background_above_today": "the relation gives more sulfate before acid deposition than there is today",
    "sulfate_negative": "less sulfate than its chloride or sodium would bring as sea salt",
    "base_cations_negative": "fewer base cations than its chloride or sodium would bring as sea salt; F taken as 0",
    "f_capped": "F reached 1: the soil answers all acid",
    "limit_out_of_reach": "the ANC limit lies above what the lake had without acid deposition: the load is negative",
    "limit_capped": "the variable ANC limit reached its highest value",
})


# ------------------------------------------------------------------ one function per equation


def concentration_scale(choice: CriticalLoadChoice, runoff_m_yr: ArrayLike) -> Array:
    """Concentration of base cations at which F reaches 1: S, or S over runoff in the flux form. [eq/L]

    nan without runoff above 0.
    """
    runoff = _positive(runoff_m_yr)
    scale = choice.scale / (LITERS_PER_M3 * runoff) if choice.form == "flux" else choice.scale
    return np.where(np.isnan(runoff), np.nan, scale)


def f_factor(base_cations_eq_l: ArrayLike, scale_eq_l: ArrayLike) -> Array:
    """Share F of acid that the soil answers with base cations: sin(pi/2 BC*/S), 1 from S on, 0 below zero. [-]

    Source: abstract of the Nordic critical loads, S = 400 µeq/L; the factor pi/2 recalled (without it F stays below 1).
    """
    part = np.asarray(base_cations_eq_l, dtype=float) / np.asarray(scale_eq_l, dtype=float)
    return np.sin(HALF_PI * np.clip(part, 0.0, 1.0))


def sulfate_before(base_cations_eq_l: ArrayLike, background: SulfateBackground) -> Array:
    """Non-marine sulfate before acid deposition, a + b BC* of today. [eq/L] Relations recalled, see the table."""
    return background.a_eq_l + background.b * np.asarray(base_cations_eq_l, dtype=float)


def original_base_cations(base_cations_eq_l: ArrayLike, acid_added_eq_l: ArrayLike, scale_eq_l: ArrayLike) -> Array:
    """Non-marine base cations before acid deposition with F at today's: BC0 = BC - F(BC) added acid. [eq/L]

    acid_added : (SO4* + NO3) today less before. Source: UK critical loads of fresh waters (printed).
    """
    bc = np.asarray(base_cations_eq_l, dtype=float)
    return bc - f_factor(bc, scale_eq_l) * np.asarray(acid_added_eq_l, dtype=float)


def original_base_cations_iterated(
    base_cations_eq_l: ArrayLike, acid_added_eq_l: ArrayLike, scale_eq_l: ArrayLike,
) -> Array:
    """The same with F at the original base cations: the root of BC0 + F(BC0) added acid = BC. [eq/L]

    There is exactly one root for BC above 0: F never falls, so the left side rises throughout where acid was added;
    where acid was taken away it is convex and starts below BC. With F = 1 the root is BC - acid; else pi/2 BC0/S solves
    an equation of Kepler's kind, by Halley steps from the root with 1 - (1 - x)^2 in place of the sine. For BC at or
    below 0, F is 0. Steps are few and counted; tests hold them to bracketed roots over all that waters can be and more.
    """
    shape = np.broadcast_shapes(np.shape(base_cations_eq_l), np.shape(acid_added_eq_l), np.shape(scale_eq_l))
    scale = np.asarray(scale_eq_l, dtype=float)
    total = np.broadcast_to(np.asarray(base_cations_eq_l, dtype=float) / scale, shape)
    acid = np.broadcast_to(np.asarray(acid_added_eq_l, dtype=float) / scale, shape)
    whole = total - acid >= 1.0
    with np.errstate(invalid="ignore", divide="ignore"):
        inside = ~whole & (total > 0.0)
        twice = 1.0 + 2.0 * acid
        first = 2.0 * total / (twice + np.sqrt(np.maximum(twice * twice - 4.0 * acid * total, 0.0)))
        x = np.asarray(_halley(HALF_PI * first, HALF_PI * acid, HALF_PI * total, STEPS))
        left = x + HALF_PI * (acid * np.sin(x) - total)
        undone = inside & (np.abs(left) > TOLERANCE)
        if undone.any():
            x[undone] = _halley(x[undone], HALF_PI * acid[undone], HALF_PI * total[undone], MORE_STEPS)
    solved = np.where(inside, x / HALF_PI, np.where(whole, total - acid, total))
    return scale * np.where(np.isnan(acid), np.nan, solved)


def _halley(x: Array, acid: Array, total: Array, steps: int) -> Array:
    """Steps of Halley's method toward x + acid sin x = total, x from 0 to pi/2."""
    for _ in range(steps):
        sine, slope = np.sin(x), 1.0 + acid * np.cos(x)
        bent = acid * sine
        left = x + bent - total
        x = np.clip(x - left * slope / (slope * slope + 0.5 * left * bent), 0.0, HALF_PI)
    return x


def variable_anc_limit(original_eq_l: ArrayLike, runoff_m_yr: ArrayLike) -> Array:
    """ANC limit that rises evenly with the critical load, from 0 to 50 µeq/L at 200 meq/m2/yr. [eq/L]

    limit = k load and load = Q (BC0 - limit) give k Q BC0 / (1 + k Q), k = 0.25 yr/m; not below 0.
    Source: Henriksen et al. 1995, Water Air Soil Pollut. 85:2419 (printed); closed form worked out.
    """
    part = LIMIT_SLOPE_YR_M * _positive(runoff_m_yr)
    return np.clip(part * np.asarray(original_eq_l, dtype=float) / (1.0 + part), 0.0, LIMIT_MOST_EQ_L)


def critical_load_eq_m2_yr(original_eq_l: ArrayLike, anc_limit_eq_l: ArrayLike, runoff_m_yr: ArrayLike) -> Array:
    """Critical load Q (BC0 - ANC limit); negative where the limit is out of reach. [eq/m2/yr]

    Source: UK critical loads of fresh waters (printed).
    """
    above = np.asarray(original_eq_l, dtype=float) - np.asarray(anc_limit_eq_l, dtype=float)
    return LITERS_PER_M3 * _positive(runoff_m_yr) * above


def exceedance_eq_m2_yr(sulfur_deposition_eq_m2_yr: ArrayLike, nitrate_eq_l: ArrayLike, runoff_m_yr: ArrayLike,
                        load_eq_m2_yr: ArrayLike) -> Array:
    """Non-marine sulfur deposition and leached nitrate less the critical load; negative below it. [eq/m2/yr]

    Source: Henriksen & Posch 2001 (recalled).
    """
    leached = LITERS_PER_M3 * _positive(runoff_m_yr) * np.asarray(nitrate_eq_l, dtype=float)
    return np.asarray(sulfur_deposition_eq_m2_yr, dtype=float) + leached - np.asarray(load_eq_m2_yr, dtype=float)


def _positive(runoff_m_yr: ArrayLike) -> Array:
    runoff = np.asarray(runoff_m_yr, dtype=float)
    return np.where(runoff > 0.0, runoff, np.nan)


# ------------------------------------------------------------------ all of it


@dataclass(frozen=True, slots=True, eq=False)
class CriticalLoad:
    """Critical load of each lake and what it came from; nan where a reading is missing.

    f : share of acid that the soil answers, where the choice takes it. [-]
    bc_today_star, so4_star : non-marine base cations and sulfate of today; so4_background, bc_original : before acid
    deposition. scale : base cations at which F reaches 1. [eq/L]
    load, exceedance : [eq/m2/yr]. flags : a mask per name of FLAGS.
    """

    f: Array
    bc_today_star: Array
    so4_star: Array
    so4_background: Array
    bc_original: Array
    scale: Array
    anc_limit: Array
    load: Array
    exceedance: Array
    flags: Mapping[str, NDArray[np.bool_]]


def critical_load(
    charges: Mapping[str, Array], runoff_m_yr: ArrayLike, choice: CriticalLoadChoice, *,
    sulfur_deposition_eq_m2_yr: ArrayLike = np.nan, sulfur_is: str = "nonmarine",
    chloride_deposition_eq_m2_yr: ArrayLike | None = None,
) -> CriticalLoad:
    """Critical load and exceedance by the chosen variant.

    charges : charge of base cations, sulfate, nitrate and the tracer by name of the ion table, sea salt in. [eq/L]
    sulfur_is : "nonmarine", or "total" to take its sea salt off: by chloride deposition where that is given, else by
    the tracer that runs off, which at steady state is what came down. With sea salt left in, nothing is taken off.

    Raises InputError for an unknown word or an ion that is not there.
    """
    for ion in NEEDED:
        if ion not in charges:
            raise InputError(f"a critical load needs the charge of {', '.join(NEEDED)}; found no {ion}. Add it.")
    star = non_marine(charges, choice.tracer).eq_l
    base = sum((star[ion] for ion in BASE_CATIONS[1:]), start=star[BASE_CATIONS[0]])
    sulfur = _nonmarine_sulfur(charges, runoff_m_yr, choice.tracer, np.asarray(sulfur_deposition_eq_m2_yr, dtype=float),
                               sulfur_is, chloride_deposition_eq_m2_yr)
    return _evaluated(base, star["sulfate"], charges["nitrate"], runoff_m_yr, choice, sulfur)


def _nonmarine_sulfur(charges: Mapping[str, Array], runoff_m_yr: ArrayLike, tracer: str, sulfur: Array, sulfur_is: str,
                      chloride_deposition: ArrayLike | None) -> Array:
    if sulfur_is not in SULFUR_IS:
        raise InputError(f"sulfur deposition must be {' or '.join(SULFUR_IS)}; found {sulfur_is!r}. Correct it.")
    if sulfur_is == "nonmarine" or tracer == NO_TRACER:
        return sulfur
    if chloride_deposition is not None:
        return sulfur - sulfate_of_sea_salt(np.asarray(chloride_deposition, dtype=float))
    return sulfur - sulfate_of_sea_salt(LITERS_PER_M3 * _positive(runoff_m_yr) * charges[tracer], tracer)


def _evaluated(base: Array, sulfate: Array, nitrate: Array, runoff: ArrayLike, choice: CriticalLoadChoice,
               sulfur: Array) -> CriticalLoad:
    """From non-marine concentrations and deposition."""
    scale = concentration_scale(choice, runoff)
    before = sulfate_before(base, choice.background)
    with np.errstate(invalid="ignore"):
        above = before > sulfate
        if choice.excess_background == "capped":
            before = np.where(above, sulfate, before)
        added = sulfate + nitrate - before
        if choice.base_cations == "today":
            f = f_factor(base, scale)
            original = base - f * added
        else:
            original = original_base_cations_iterated(base, added, scale)
            f = f_factor(original, scale)
        fixed = choice.anc_limit_eq_l
        limit = variable_anc_limit(original, runoff) if fixed is None else np.asarray(fixed)
        load = critical_load_eq_m2_yr(original, limit, runoff)
        flags = {
            "background_above_today": above, "sulfate_negative": sulfate < 0.0, "base_cations_negative": base < 0.0,
            "f_capped": f >= 1.0, "limit_out_of_reach": load < 0.0,
            "limit_capped": (limit >= LIMIT_MOST_EQ_L) & (fixed is None) & ~np.isnan(load),
        }
    return CriticalLoad(
        f=f, bc_today_star=base, so4_star=sulfate, so4_background=before, bc_original=original, scale=scale, load=load,
        anc_limit=np.where(np.isnan(load), np.nan, limit),
        exceedance=exceedance_eq_m2_yr(sulfur, nitrate, runoff, load), flags=MappingProxyType(flags))


# ------------------------------------------------------------------ after a change of deposition


@dataclass(frozen=True, slots=True, eq=False)
class AfterChange:
    """ANC once a lake has come to a steady state with another sulfur deposition. [eq/L]"""

    change: float  # of deposition, -0.5 for half of it gone
    anc_change: Array
    anc: Array


def after_deposition_change(of: CriticalLoad, anc_eq_l: ArrayLike, changes: Sequence[float]) -> tuple[AfterChange, ...]:
    """Steady-state ANC after acid sulfur deposition changes by each fraction of today's: dANC = -(1 - F) dSO4.

    The sulfate above the background follows deposition in proportion, and what nature brought stays, so -1 leads back
    to the background; none follows where the background lies above today's. F is taken at the mean of the base cations
    before and after, m = BC + F(m) dSO4/2, whatever the choice says: F is a slope, and the mean integrates it to second
    order. Nitrate stays. No time is told: soils may take decades.
    Source: definition of F (Henriksen). Raises InputError for a change below -1.
    """
    out = []
    acid = np.maximum(of.so4_star - of.so4_background, 0.0)
    anc = np.asarray(anc_eq_l, dtype=float)
    for change in changes:
        if not change >= -1.0:
            raise InputError(f"a change of deposition must be -1 or more; found {change:g}. Give -50 % as -0.5.")
        rise = change * acid
        mean = original_base_cations_iterated(of.bc_today_star, -0.5 * rise, of.scale)
        shift = (1.0 - f_factor(mean, of.scale)) * (0.0 - rise)
        out.append(AfterChange(change, shift, anc + shift))
    return tuple(out)

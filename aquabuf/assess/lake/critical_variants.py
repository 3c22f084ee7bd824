"""How far the critical load of each lake moves with the variant of the method."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from itertools import product

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.lake.critical import critical_load
from aquabuf.assess.lake.critical_choice import BASE_CATIONS_AT, EXCESS, FORMS, CriticalLoadChoice, sulfate_backgrounds
from aquabuf.assess.lake.sea_salt import NO_TRACER, TRACERS

__all__ = ["LIMITS_EQ_L", "Sensitivity", "Variant", "full_factorial", "one_at_a_time", "sensitivity"]

Array = NDArray[np.float64]

LIMITS_EQ_L = (0.0, 20e-6, 50e-6, None)  # ANC limits beside the chosen one; None is the variable limit
SCALES = (0.5, 2.0)                      # factors on S


@dataclass(frozen=True, slots=True, eq=False)
class Variant:
    """One variant: what differs from the chosen one in words, and its load and exceedance. [eq/m2/yr]"""

    words: str
    choice: CriticalLoadChoice
    load: Array
    exceedance: Array


@dataclass(frozen=True, slots=True, eq=False)
class Sensitivity:
    """The chosen variant first, then every change of one thing; lowest and highest over all combinations. [eq/m2/yr]

    Combined are form, base cations, background, and the chosen ANC limit with the variable one.
    """

    variants: tuple[Variant, ...]
    combinations: int
    load_lowest: Array
    load_highest: Array
    exceedance_lowest: Array
    exceedance_highest: Array


def one_at_a_time(chosen: CriticalLoadChoice) -> Iterator[tuple[str, CriticalLoadChoice]]:
    """The chosen variant, and every variant that differs in one thing, with words for it."""
    yield "as chosen", chosen
    for field, options in (
        ("form", {form: f"F by {form}" for form in FORMS}),
        ("base_cations", {"today": "F at today's base cations", "original": "F at the original base cations"}),
        ("sulfate_background", {b.name: f"original sulfate of {b.region}" for b in sulfate_backgrounds().values()}),
        ("excess_background", {option: f"original sulfate above today's {option}" for option in EXCESS}),
    ):
        for option, words in options.items():
            if option != getattr(chosen, field):
                yield words, _changed(chosen, field, option)
    for limit in LIMITS_EQ_L:
        if limit != chosen.anc_limit_eq_l:
            words = "variable ANC limit" if limit is None else f"ANC limit {limit * 1e6:g} µeq/L"
            yield words, replace(chosen, anc_limit_eq_l=limit)
    for tracer in (*TRACERS, NO_TRACER):
        if tracer != chosen.tracer:
            yield "sea salt left in" if tracer == NO_TRACER else f"sea salt by {tracer}", replace(chosen, tracer=tracer)
    for factor in SCALES:
        yield "S halved" if factor < 1.0 else "S doubled", replace(chosen, s_scale=factor * chosen.scale)


def full_factorial(chosen: CriticalLoadChoice) -> Iterator[CriticalLoadChoice]:
    """Every combination of form, base cations, background, and chosen or variable ANC limit."""
    for form, base, background, limit in product(FORMS, BASE_CATIONS_AT, sulfate_backgrounds(),
                                                 dict.fromkeys((chosen.anc_limit_eq_l, None))):
        yield replace(_changed(chosen, "form", form), base_cations=base, sulfate_background=background,
                      anc_limit_eq_l=limit)


def _changed(chosen: CriticalLoadChoice, field: str, option: str) -> CriticalLoadChoice:
    """`chosen` with another word; in another form an S of one's own keeps its ratio to the usual one."""
    if field == "form" and chosen.s_scale is not None:
        ratio = chosen.s_scale / FORMS[chosen.form].s_scale
        return replace(chosen, form=option, s_scale=ratio * FORMS[option].s_scale)
    return replace(chosen, **{field: option})  # type: ignore[arg-type]


def sensitivity(
    charges: Mapping[str, Array], runoff_m_yr: ArrayLike, chosen: CriticalLoadChoice, *,
    sulfur_deposition_eq_m2_yr: ArrayLike = np.nan, sulfur_is: str = "nonmarine",
    chloride_deposition_eq_m2_yr: ArrayLike | None = None,
) -> Sensitivity:
    """Load and exceedance of every variant; arguments as of `critical_load`. Tracers without a reading are left out."""
    def worked(words: str, choice: CriticalLoadChoice) -> Variant:
        found = critical_load(charges, runoff_m_yr, choice, sulfur_deposition_eq_m2_yr=sulfur_deposition_eq_m2_yr,
                              sulfur_is=sulfur_is, chloride_deposition_eq_m2_yr=chloride_deposition_eq_m2_yr)
        return Variant(words, choice, found.load, found.exceedance)

    variants = tuple(worked(words, choice) for words, choice in one_at_a_time(chosen)
                     if choice.tracer == NO_TRACER or choice.tracer in charges)
    combined = [worked(choice.label, choice) for choice in full_factorial(chosen)]
    loads, exceeded = [v.load for v in combined], [v.exceedance for v in combined]
    return Sensitivity(variants, len(combined), np.minimum.reduce(loads), np.maximum.reduce(loads),
                       np.minimum.reduce(exceeded), np.maximum.reduce(exceeded))

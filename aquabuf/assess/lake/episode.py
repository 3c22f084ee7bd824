"""Acid episodes: what a lake becomes when melt or storm water mixes into it, and what took its ANC.

A water is a mapping of arrays that broadcast, such as (lakes, 1) with (1, draws): the charge of each strong ion
(`calcium_eq_l` ... `chloride_eq_l`, always positive), `doc_mg_l`, `aluminum_mol_l`, `anc_eq_l` (charge-balance ANC) and
`dic_mol_l`. All of these mix in proportion to volume (two-component mixing: Eshleman 1988, recalled). Aluminum that
would settle out stays in solution here, and the lake is taken as fully mixed.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import worded
from aquabuf.assess.lake.inputs import BASE_CATIONS, CATION_NAMES, STRONG_ANIONS, Lakes
from aquabuf.chem.aluminum import aluminum_charge
from aquabuf.chem.organic import OrganicModel
from aquabuf.chem.seasalt import equivalents_per_chloride
from aquabuf.engine.conditions import Conditions
from aquabuf.engine.lake import LakeBalance

__all__ = [
    "CHANGES", "DEPOSITION", "OTHER_CATIONS", "WEAK_CHANGES", "Solved", "anc_changes", "at_air", "balance_of",
    "completed", "crossing_words", "deposition_words", "event_from_deposition", "event_share", "fraction_at_anc",
    "fraction_at_ph", "ion_anc", "mix", "solved", "water_of", "weak_changes",
]

Array = NDArray[np.float64]
Water = Mapping[str, Array]

STRONG_IONS = (*CATION_NAMES, *STRONG_ANIONS)
OTHER_CATIONS = "other_base_cations_eq_l"  # of a water whose base cations are not told apart; none where not given

# Parts of the change of charge-balance ANC, in words; exact bookkeeping, they add up to the change
CHANGES: Mapping[str, str] = MappingProxyType({
    "base_cations": "base cations beyond the sea salt of the chloride (dilution where they fall)",
    "ammonium": "ammonium",
    "sulfate": "sulfate beyond the sea salt of the chloride",
    "nitrate": "nitrate",
    "sea_salt": "chloride with the sea salt that came along (a loss where soil held back its sodium and magnesium)",
    "rest": "what these ions do not tell: other ions, and error of ANC or ions",
})
# Further parts of the change of carbonate ANC: ANC less organic anions, with the charge of aluminum
WEAK_CHANGES: Mapping[str, str] = MappingProxyType({
    "organic": "organic anions, which count in the charge-balance ANC but hold no pH up",
    "aluminum": "dissolved aluminum, which gives back acid as pH rises",
})

# Columns of deposition that tell the composition of rain and melt, with what is made of them where they are missing
DEPOSITION: Mapping[str, str] = MappingProxyType({
    "hydrogen_deposition_eq_m2_yr": "free acid",
    "sulfur_deposition_eq_m2_yr": "sulfate",
    "nitrate_deposition_eq_m2_yr": "nitrate",
    "ammonium_deposition_eq_m2_yr": "ammonium",
    "chloride_deposition_eq_m2_yr": "chloride with its sea salt",
    "base_cation_deposition_eq_m2_yr": "base cations beyond sea salt",
})


def water_of(lakes: Lakes, anc: Array | None = None, dic: Array | None = None) -> dict[str, Array]:
    """The waters of some lakes, with the charge-balance ANC and the carbon that were worked out for them.

    Ammonium, organic carbon and aluminum count as none where they were not measured; other ions stay nan.
    """
    water = {f"{ion}_eq_l": lakes.charge(ion) for ion in STRONG_IONS}
    water |= {"ammonium_eq_l": np.nan_to_num(water["ammonium_eq_l"]), "doc_mg_l": lakes.doc_mg_l,
              "aluminum_mol_l": lakes.aluminum_mol_l}
    return water | {name: v for name, v in (("anc_eq_l", anc), ("dic_mol_l", dic)) if v is not None}


def mix(base: Water, event: Water, fraction: ArrayLike) -> dict[str, Array]:
    """Mixture of a lake's water with the share `fraction` (0 to 1) of event water.

    Holds what both waters hold; OTHER_CATIONS where one of them does. nan where the fraction is not from 0 to 1.
    """
    f = _inside(fraction)
    names = [name for name in base if name in event]
    mixed = {name: (1.0 - f) * base[name] + f * event[name] for name in names}
    if (OTHER_CATIONS in base) != (OTHER_CATIONS in event):
        mixed[OTHER_CATIONS] = (1.0 - f) * _other(base) + f * _other(event)
    return mixed


def _inside(fraction: ArrayLike) -> Array:
    f = np.asarray(fraction, dtype=float)
    with np.errstate(invalid="ignore"):
        return np.where((f >= 0.0) & (f <= 1.0), f, np.nan)


def _other(water: Water) -> Array:
    return np.asarray(water.get(OTHER_CATIONS, 0.0), dtype=float)


def ion_anc(water: Water) -> Array:
    """Charge-balance ANC of the strong ions: base cations and ammonium less sulfate, nitrate and chloride. [eq/L]"""
    cations = sum((water[f"{ion}_eq_l"] for ion in CATION_NAMES), start=_other(water))
    return cations - sum((water[f"{ion}_eq_l"] for ion in STRONG_ANIONS[1:]), start=water[f"{STRONG_ANIONS[0]}_eq_l"])


def balance_of(water: Water, conditions: Conditions, organic: OrganicModel) -> LakeBalance:
    """The charge balance of a water at the given conditions."""
    return LakeBalance(conditions, np.asarray(water["doc_mg_l"]), np.asarray(water["aluminum_mol_l"]), organic)


def completed(balance: LakeBalance, *, anc: Array, ph: Array, dic: Array, co2: Array) -> tuple[Array, Array]:
    """Charge-balance ANC and inorganic carbon of an event water of which one or both are nan. [eq/L, mol/L]

    Where ANC is missing it follows from `ph`; where carbon is missing the water holds dissolved `co2` [mol/L], that of
    air or one that was measured.
    """
    of_ph = np.where(np.isfinite(dic), balance.anc(ph, dic=dic), balance.anc(ph, co2=co2))
    whole = np.where(np.isfinite(anc), anc, of_ph)
    if np.isfinite(dic).all():
        return whole, np.broadcast_to(dic, whole.shape)
    at_air = co2 / balance.co2_per_dic(balance.ph(whole, co2=co2))
    return whole, np.where(np.isfinite(dic), dic, at_air)


@dataclass(frozen=True, slots=True, eq=False)
class Solved:
    """A water solved from its ANC and carbon.

    anc_eq_l : charge-balance ANC. [eq/L]
    ph_closed : with the carbon it has, as right after mixing. ph_open : once at equilibrium with air.
    organic_eq_l, aluminum_eq_l : charge of organic anions and of dissolved aluminum at `ph_closed`. [eq/L]
    """

    anc_eq_l: Array
    ph_closed: Array
    ph_open: Array
    organic_eq_l: Array
    aluminum_eq_l: Array

    @property
    def carbonate_anc_eq_l(self) -> Array:
        """ANC less organic anions, with the charge of aluminum: bicarbonate, carbonate, hydroxide less H+. [eq/L]"""
        return self.anc_eq_l - self.organic_eq_l + self.aluminum_eq_l


def solved(water: Water, conditions: Conditions, organic: OrganicModel, co2_of_air: Array) -> Solved:
    """ANC and pH of a water; `co2_of_air` is CO2 dissolved at equilibrium with air [mol/L]."""
    balance = balance_of(water, conditions, organic)
    anc = water["anc_eq_l"]
    closed = balance.ph(anc, dic=water["dic_mol_l"])
    return Solved(
        anc_eq_l=anc, ph_closed=closed, ph_open=balance.ph(anc, co2=co2_of_air),
        organic_eq_l=organic.anion_eq_l(balance.doc_mg_l, closed),
        aluminum_eq_l=balance.aluminum_mol_l * aluminum_charge(closed))


def anc_changes(base: Water, event: Water, fraction: ArrayLike) -> dict[str, Array]:
    """Change of charge-balance ANC by the share `fraction` of event water, by cause (CHANGES); losses negative. [eq/L]

    The sea salt of a water is its chloride with as much of sodium, magnesium, calcium, potassium and sulfate as sea
    water holds beside that chloride, or all there is if that is less. Whole sea salt changes ANC by less than 1 % of
    its chloride; where soil held back its sodium or magnesium in exchange for acid, the part is a loss. The parts add
    up to the change of `anc_eq_l`; a part is nan where one of its ions is.
    """
    f = _inside(fraction)
    before, after = _shares(base), _shares(event)
    parts = {name: f * (after[name] - before[name]) for name in before}
    parts["rest"] = f * (event["anc_eq_l"] - base["anc_eq_l"]) - sum(parts.values(), start=np.zeros(()))
    return parts


def _shares(water: Water) -> dict[str, Array]:
    """The charge-balance ANC of a water by the parts of CHANGES, rest left out."""
    charge = {ion: np.asarray(water[f"{ion}_eq_l"], dtype=float) for ion in STRONG_IONS}
    ratios = equivalents_per_chloride()
    salt = {ion: np.minimum(charge[ion], ratio * charge["chloride"]) for ion, ratio in ratios.items()}
    with_chloride = sum((salt[ion] for ion in BASE_CATIONS), start=-salt["sulfate"])
    return {
        "base_cations": sum((charge[ion] - salt[ion] for ion in BASE_CATIONS), start=_other(water)),
        "ammonium": charge["ammonium"],
        "sulfate": salt["sulfate"] - charge["sulfate"],
        "nitrate": -charge["nitrate"],
        "sea_salt": with_chloride - charge["chloride"],
    }


def weak_changes(before: Solved, after: Solved) -> dict[str, Array]:
    """What organic acids and aluminum add to the change of carbonate ANC (WEAK_CHANGES); losses negative. [eq/L]

    With the parts of `anc_changes` they add up to the change of `carbonate_anc_eq_l`, the kind of ANC that holds pH up
    (exact bookkeeping; closed, each water at its own pH).
    """
    return {"organic": before.organic_eq_l - after.organic_eq_l,
            "aluminum": after.aluminum_eq_l - before.aluminum_eq_l}


def fraction_at_anc(anc_base: ArrayLike, anc_event: ArrayLike, limit: ArrayLike) -> Array:
    """Share of event water at which ANC falls to `limit`: (ANC of the lake - limit) / (ANC of the lake - of the event).

    0 where the lake is at or below the limit already, inf where even event water alone is above it, nan where a
    value is missing. ANC of one definition throughout. [eq/L]
    """
    limit = np.asarray(limit, dtype=float)
    return _fraction_at_zero(np.asarray(anc_base, dtype=float) - limit, np.asarray(anc_event, dtype=float) - limit)


def fraction_at_ph(base: Water, event: Water, limit_ph: ArrayLike, *, conditions: Conditions, organic: OrganicModel,
                   co2_of_air: Array | None = None) -> Array:
    """Share of event water at which pH falls to `limit_ph`, as `fraction_at_anc` tells it.

    Closed with the mixed carbon, or open where `co2_of_air` [mol/L] is given. `conditions` are those of the mixture and
    serve both waters. The ANC that goes with a pH is then a linear function of carbon, DOC and aluminum, so that it
    mixes in proportion as ANC does: the share is a closed form, and there is no second crossing.
    """
    ph = np.asarray(limit_ph, dtype=float)

    def above(water: Water) -> Array:
        balance = balance_of(water, conditions, organic)
        carbon = {"dic": water["dic_mol_l"]} if co2_of_air is None else {"co2": co2_of_air}
        return water["anc_eq_l"] - balance.anc(ph, **carbon)

    return _fraction_at_zero(above(base), above(event))


def _fraction_at_zero(base: Array, event: Array) -> Array:
    """Share of event water at which a quantity that mixes in proportion falls to zero; 0 already, inf never."""
    falls = (base > 0.0) & (event <= 0.0)
    share = base / np.where(falls, base - event, 1.0)
    found = np.where(falls, share, np.where(base > 0.0, np.inf, 0.0))
    return np.where(np.isnan(base) | np.isnan(event), np.nan, found)


def crossing_words(fraction: Array) -> NDArray[np.object_]:
    """What each share of a one-dimensional array means (see `fraction_at_anc`); "" for a plain share."""
    return worded(fraction.size, (np.isnan(fraction), "cannot be told"), (fraction == 0.0, "at or below it already"),
                  (np.isinf(fraction), "never, not even as event water alone"))


def event_from_deposition(deposition: Water, precipitation_m_yr: Array, *, concentration: ArrayLike = 1.0,
                          ) -> dict[str, Array]:
    """Rain or melt where nothing but deposition is known: load over precipitation; carbon is left to `at_air`.

    deposition : columns of DEPOSITION [eq/m2/yr], nan or left out where not known.
    concentration : how many times stronger the event water is than the year's mean precipitation, as the first melt of
    a snow pack can be.

    Charge-balance ANC is minus the free acid where that is given; else base cations and ammonium less sulfate, nitrate
    and chloride, nan where sulfate, nitrate or ammonium is missing. Chloride and base cations that are not given count
    as none: both sides of the sea salt are then missing, and dust. Deposition of sulfur counts with its sea salt, that
    of base cations without, as the columns say. Dry deposition is in the load, so that the figures are high for rain.
    """
    wet = np.where(precipitation_m_yr > 0.0, precipitation_m_yr, np.nan)

    def of(name: str) -> Array:
        load = np.asarray(deposition.get(name, np.nan), dtype=float)
        return load / (1e3 * wet) * np.asarray(concentration, dtype=float)

    free_acid, sulfate, nitrate, ammonium, chloride, others = (of(name) for name in DEPOSITION)
    chloride, others = (np.where(np.isnan(v) & np.isfinite(wet), 0.0, v) for v in (chloride, others))
    water = {"ammonium_eq_l": ammonium, "sulfate_eq_l": sulfate, "nitrate_eq_l": nitrate, "chloride_eq_l": chloride,
             OTHER_CATIONS: others}
    water |= {f"{ion}_eq_l": equivalents_per_chloride()[ion] * chloride for ion in BASE_CATIONS}
    none = np.zeros_like(wet)
    anc = np.where(np.isfinite(free_acid), -free_acid, ion_anc(water))
    return water | {"doc_mg_l": none, "aluminum_mol_l": none, "anc_eq_l": anc}


def deposition_words(deposition: Water, concentration: float = 1.0) -> NDArray[np.object_]:
    """How the event water of each row was had from one-dimensional columns of DEPOSITION."""
    rows = max((np.size(v) for v in deposition.values()), default=1)
    there = np.stack([np.broadcast_to(np.isfinite(deposition.get(n, np.nan)), (rows,)) for n in DEPOSITION], axis=1)
    start = "deposition over precipitation" + ("" if concentration == 1.0 else f", times {concentration:g}")
    cases = [((there == pattern).all(axis=1), f"{start}; {_of_pattern(dict(zip(DEPOSITION, pattern, strict=True)))}")
             for pattern in np.unique(there, axis=0).tolist()]
    return worded(rows, *cases)


def _of_pattern(there: Mapping[str, bool]) -> str:
    """The source of ANC and what is missing, for rows that have the same columns of DEPOSITION."""
    acid, *ions = DEPOSITION
    missing = [DEPOSITION[name] for name in ions if not there[name]]
    needed = [DEPOSITION[name] for name in ions[:3] if not there[name]]
    if there[acid]:
        source = f"ANC is minus the {DEPOSITION[acid]}"
    elif needed:
        return f"no ANC: {', '.join(needed)} not given"
    else:
        source = "ANC is the sum of the ions"
    return f"{source}; not given: {', '.join(missing)}" if missing else source


def at_air(water: Water, conditions: Conditions, organic: OrganicModel, co2_of_air: Array) -> dict[str, Array]:
    """A water with the carbon it holds at equilibrium with air; `co2_of_air` is the CO2 dissolved then [mol/L]."""
    anc = np.asarray(water["anc_eq_l"], dtype=float)
    unknown = np.full(np.shape(anc), np.nan)
    dic = completed(balance_of(water, conditions, organic), anc=anc, ph=unknown, dic=unknown, co2=co2_of_air)[1]
    return {**water, "dic_mol_l": dic}


def event_share(anc_before: ArrayLike, anc_during: ArrayLike, anc_event: ArrayLike) -> Array:
    """Share of event water from three ANCs of one definition: (before - during) / (before - event). [-]

    Two-component separation: Eshleman 1988 (recalled). A share outside 0 to 1 means that the three do not lie on one
    mixing line; nan where before and event are equal.
    """
    before = np.asarray(anc_before, dtype=float)
    span = before - np.asarray(anc_event, dtype=float)
    apart = span != 0.0
    return np.where(apart, (before - np.asarray(anc_during, dtype=float)) / np.where(apart, span, 1.0), np.nan)

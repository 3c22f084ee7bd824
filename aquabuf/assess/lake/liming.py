"""Liming of lakes and streams: dose, product, the first days, and how long it lasts.

ANC is the charge-balance one unless a name says otherwise; arrays broadcast, such as (lakes, 1) with (lakes, draws).
Each equivalent of base that dissolves raises charge-balance and Gran ANC alike by one equivalent, so that the dose is
the same in both as long as lake and target are of one kind. A lake counts as fully mixed; what settles undissolved may
dissolve later and is not counted.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cache
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import worded
from aquabuf.chem.aluminum import aluminum_charge
from aquabuf.chem.products import Product, products, zero_level_charge
from aquabuf.engine.lake import LakeBalance
from aquabuf.tables import read_table
from aquabuf.units import molar_mass_of, substances

__all__ = [
    "DEMANDS", "HARMFUL_ALUMINATE_UG_L", "AfterLiming", "Dose", "LimeProduct", "after_liming", "anc_after",
    "anc_for_carbonate", "anc_for_ph", "anc_needed", "lime_dose", "lime_products", "over_liming_words", "product_g_m3",
    "product_kg", "reacidification_words", "reacidification_yr",
]

Array = NDArray[np.float64]

HARMFUL_ALUMINATE_UG_L = 100.0  # of a river limed with half-burnt dolomite past pH 9: Erstad et al. 2001, Vann

# What takes up the dose, in words; exact bookkeeping, they add up to it. The terms are those of Henrikson et al. 1995,
# Water Air Soil Pollut. 85:131: acid, aluminum, organic matter, and the buffer that is wanted.
DEMANDS: Mapping[str, str] = MappingProxyType({
    "acid": "free acid (less the hydroxide gained)",
    "aluminum": "dissolved aluminum, which loses its charge",
    "organic": "organic acids, which give off protons",
    "carbonate": "bicarbonate and carbonate: the buffer that is wanted",
})


@dataclass(frozen=True, slots=True, kw_only=True)
class LimeProduct:
    """One product as it is spread on water; `pure` is its compound in the table of treatment products.

    is_quick : dissolves so fast that pH can overshoot before carbon dioxide from air comes in.
    dissolved_low, dissolved_usual, dissolved_high : share that dissolves before it settles. [-]
    """

    name: str
    pure: Product
    is_quick: bool
    dissolved_low: float
    dissolved_usual: float
    dissolved_high: float
    words: str
    hazard: str
    source: str

    @property
    def formula(self) -> str:
        """Formula of the pure compound."""
        return self.pure.formula

    @property
    def eq_per_mol(self) -> float:
        """Acid that one formula unit binds. [eq/mol]"""
        return self.pure.adds["alkalinity"]

    @property
    def g_per_eq(self) -> float:
        """Mass that binds one equivalent of acid. [g/eq]"""
        return self.pure.molar_mass_g / self.eq_per_mol

    @property
    def neutralizing_value_pct(self) -> float:
        """Acid that a mass binds against the same mass of calcium carbonate. [%]"""
        return 100.0 * calcium_carbonate_g_per_eq() / self.g_per_eq

    @property
    def carbon_mol_per_eq(self) -> float:
        """Inorganic carbon that comes with each equivalent. [mol/eq]"""
        return self.pure.adds["carbon"] / self.eq_per_mol

    def cation_per_eq(self, ion: str) -> float:
        """Charge of calcium, magnesium or sodium added with each equivalent. [eq/eq]"""
        return self.pure.adds.get(ion, 0.0) * zero_level_charge(ion) / self.eq_per_mol

    @property
    def shares(self) -> dict[str, float]:
        """Share that dissolves: usual, low and high. [-]"""
        return {"usual": self.dissolved_usual, "low": self.dissolved_low, "high": self.dissolved_high}


def calcium_carbonate_g_per_eq() -> float:
    """Mass of calcium carbonate that binds one equivalent of acid. [g/eq]"""
    return 0.5 * molar_mass_of("CaCO3")


@cache
def lime_products() -> dict[str, LimeProduct]:
    """The shipped products by name (treat as read-only)."""
    return {r["name"]: LimeProduct(
        name=r["name"], pure=products()[r["name"]], is_quick=r["is_quick"] == "yes",
        dissolved_low=float(r["dissolved_low"]), dissolved_usual=float(r["dissolved_usual"]),
        dissolved_high=float(r["dissolved_high"]), words=r["words"], hazard=r["hazard"],
        source=f"{r['source']}{' (recalled)' if r['mark'] == 'recalled' else ''}")
        for r in read_table("lime_products")}


def anc_for_ph(balance: LakeBalance, ph: ArrayLike, co2_of_air: Array) -> Array:
    """Charge-balance ANC of the lake once it stands at this pH at equilibrium with air. [eq/L]"""
    return balance.anc(np.asarray(ph, dtype=float), co2=co2_of_air)


def anc_for_carbonate(balance: LakeBalance, carbonate_anc: ArrayLike, co2_of_air: Array) -> Array:
    """Charge-balance ANC at which bicarbonate, carbonate and hydroxide less H+ have this value, open to air. [eq/L]

    What organic acids and aluminum give up until then comes on top.
    """
    none = np.zeros_like(balance.doc_mg_l)
    bare = replace(balance, doc_mg_l=none, aluminum_mol_l=np.zeros_like(balance.aluminum_mol_l))
    return balance.anc(bare.ph(np.asarray(carbonate_anc, dtype=float), co2=co2_of_air), co2=co2_of_air)


@dataclass(frozen=True, slots=True, eq=False)
class Dose:
    """Base that must dissolve, and what takes it up.

    dose_eq_l : base to add; 0 where the target is met already. [eq/L]
    demand_eq_l : parts of the dose by the names of DEMANDS; they add up to it. [eq/L]
    ph_before : closed, with the carbon of the lake. ph_target : after the dose, at equilibrium with air.
    """

    dose_eq_l: Array
    demand_eq_l: dict[str, Array]
    ph_before: Array
    ph_target: Array


def lime_dose(balance: LakeBalance, anc: Array, dic: Array, target_anc: ArrayLike, co2_of_air: Array) -> Dose:
    """Dose that brings the ANC of a lake to `target_anc`, both charge-balance [eq/L].

    A target of another kind: `anc_for_ph`, `anc_for_carbonate`; one as Gran ANC: `anc` + target - Gran ANC of the lake.
    Where the carbon of the lake is nan, the demands and the pH before are too, but not the dose.
    """
    dose = np.maximum(np.asarray(target_anc, dtype=float) - anc, 0.0)
    before, after = balance.ph(anc, dic=dic), balance.ph(anc + dose, co2=co2_of_air)
    h_before, h_after = balance.h(before), balance.h(after)
    c = balance.conditions
    demand = {
        "acid": c.c_h * (h_before - h_after) + c.c_oh * (1.0 / h_after - 1.0 / h_before),
        "aluminum": balance.aluminum_mol_l * (aluminum_charge(before) - aluminum_charge(after)),
        "organic": balance.organic.anion_eq_l(balance.doc_mg_l, after)
        - balance.organic.anion_eq_l(balance.doc_mg_l, before),
        "carbonate": balance.carbonate_per_co2(after) * co2_of_air - balance.carbonate_per_dic(before) * dic,
    }
    demand = {name: np.where(dose == 0.0, 0.0, part) for name, part in demand.items()}  # only air would change it
    return Dose(dose, demand, before, after)


def product_g_m3(dose_eq_l: ArrayLike, product: LimeProduct, dissolved: ArrayLike,
                 neutralizing_value_pct: ArrayLike | None = None) -> Array:
    """Product to spread per volume of water. [g/m3]

    dissolved : share that dissolves. neutralizing_value_pct : of the product as delivered, by its own analysis [%];
    that of the pure compound if none is given.
    """
    value = product.neutralizing_value_pct if neutralizing_value_pct is None else neutralizing_value_pct
    pure = 1e3 * np.asarray(dose_eq_l, dtype=float) * calcium_carbonate_g_per_eq()
    return pure / np.asarray(dissolved, dtype=float) / (0.01 * np.asarray(value, dtype=float))


def product_kg(g_m3: ArrayLike, water_m3: ArrayLike) -> Array:
    """Product for a whole lake [kg], or in a year for a yearly inflow with the `g_m3` that the inflow needs [kg/yr]."""
    return 1e-3 * np.asarray(g_m3, dtype=float) * np.asarray(water_m3, dtype=float)


@dataclass(frozen=True, slots=True, eq=False)
class AfterLiming:
    """The water once a dose has dissolved.

    ph_closed : in the first days, with the carbon of water and product only. ph_open : at equilibrium with air.
    aluminate_ug_l : dissolved aluminum that is anionic at `ph_closed`, at least. [µg/L]
    """

    anc_eq_l: Array
    dic_mol_l: Array
    ph_closed: Array
    ph_open: Array
    aluminate_ug_l: Array


def after_liming(balance: LakeBalance, anc: Array, dic: Array, dose_eq_l: ArrayLike, product: LimeProduct,
                 co2_of_air: Array) -> AfterLiming:
    """What a dose [eq/L] makes of a water of this charge-balance ANC [eq/L] and carbon [mol/L].

    Pass the dose times high over usual share to see what comes if more dissolves than planned. The aluminate is a
    floor: the mean charge of aluminum cannot be more negative than its anionic share.
    """
    dose = np.asarray(dose_eq_l, dtype=float)
    after, carbon = anc + dose, dic + product.carbon_mol_per_eq * dose
    closed = balance.ph(after, dic=carbon)
    anionic = balance.aluminum_mol_l * np.maximum(-aluminum_charge(closed), 0.0)
    return AfterLiming(after, carbon, closed, balance.ph(after, co2=co2_of_air),
                       1e6 * substances()["aluminum"].molar_mass_g * anionic)


def over_liming_words(ph_closed: Array, aluminate_ug_l: Array, limit_ph: float, product: LimeProduct,
                      ) -> NDArray[np.object_]:
    """What is wrong with one-dimensional `after_liming`: pH above `limit_ph` in the first days; "" where nothing is."""
    with np.errstate(invalid="ignore"):
        high = ph_closed > limit_ph
        harmful = high & (aluminate_ug_l > HARMFUL_ALUMINATE_UG_L)
    why = f"{product.name} brings its base faster than air brings carbon dioxide" if product.is_quick else \
        "the dose is large for the carbon in the water"
    first = f"pH above {limit_ph:g} in the first days: {why}"
    return worded(ph_closed.size, (high, first), (
        harmful, f"{first}; more than {HARMFUL_ALUMINATE_UG_L:g} µg/L of aluminum would be anionic, which harms fish"))


def anc_after(anc_start: ArrayLike, anc_inflow: ArrayLike, residence_yr: ArrayLike, years: ArrayLike) -> Array:
    """ANC of a flushed lake, any one definition, without sources of its own: ANCin + (ANC0 - ANCin) e^(-t/tau). [eq/L]

    Mass balance of a fully mixed reactor.
    """
    inflow = np.asarray(anc_inflow, dtype=float)
    left = np.exp(-np.asarray(years, dtype=float) / _positive(residence_yr))
    return inflow + (np.asarray(anc_start, dtype=float) - inflow) * left


def reacidification_yr(anc_start: ArrayLike, anc_inflow: ArrayLike, threshold: ArrayLike, residence_yr: ArrayLike,
                       ) -> Array:
    """Years until flushing brings ANC down to `threshold`: tau ln((ANC0 - ANCin)/(ANCthr - ANCin)). [yr]

    0 where it starts at or below the threshold, inf where the inflow is at or above it. Inverse of `anc_after`; with
    the target as start it is the interval between limings, each of which then takes target less threshold.
    """
    start, inflow, limit = (np.asarray(v, dtype=float) for v in (anc_start, anc_inflow, threshold))
    tau = _positive(residence_yr)
    above, over = start - inflow, limit - inflow
    falls = (start > limit) & (over > 0.0)
    ratio = np.where(falls, above, 1.0) / np.where(falls, over, 1.0)
    time = np.where(start <= limit, 0.0, np.where(over <= 0.0, np.inf, tau * np.log(ratio)))
    return np.where(np.isnan(above) | np.isnan(over) | np.isnan(tau), np.nan, time)


def anc_needed(threshold: ArrayLike, anc_inflow: ArrayLike, residence_yr: ArrayLike, years: ArrayLike) -> Array:
    """Start ANC from which a flushed lake stays at or above `threshold` for `years`; never below it. [eq/L]

    ANCin + (ANCthr - ANCin) e^(t/tau), inverse of `anc_after`.
    """
    limit, inflow = np.asarray(threshold, dtype=float), np.asarray(anc_inflow, dtype=float)
    with np.errstate(over="ignore", invalid="ignore"):
        grown = inflow + (limit - inflow) * np.exp(np.asarray(years, dtype=float) / _positive(residence_yr))
    return np.where(limit > inflow, grown, np.where(np.isnan(grown), np.nan, limit))


def _positive(residence_yr: ArrayLike) -> Array:
    tau = np.asarray(residence_yr, dtype=float)
    return np.where(tau > 0.0, tau, np.nan)


def reacidification_words(years: Array) -> NDArray[np.object_]:
    """What each time of a one-dimensional array from `reacidification_yr` means; "" for a plain time."""
    return worded(years.size, (np.isnan(years), "cannot be told"),
                  (years == 0.0, "at or below the limit from the start"),
                  (np.isinf(years), "never by flushing: the inflow stays at or above the limit"))

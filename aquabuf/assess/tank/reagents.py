"""Reagents of a neutralization: what a kilogram and a liter of feed bring, how fast, and where it ends.

The table `data/tank_reagents.csv` has what is known of each, one row per rule, so that rules that disagree stand side
by side with their sources. What a reagent counts at a pH where it is itself a weak acid or base is worked out with the
tables of the waste (`effective_share`), not with a fixed number.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.feed import MadeUp
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.tank.ceilings import (
    brucite_ksp,
    hydroxide_ceiling_ph,
    hydroxide_ksp_of_solubility,
    limestone_end_ph,
)
from aquabuf.chem.acids import acid_table
from aquabuf.chem.products import molar_mass
from aquabuf.chem.strength import density_from_strength, freezes_at_c
from aquabuf.engine.conditions import Conditions
from aquabuf.engine.readout import GRID_PH, Readout
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = [
    "ACID", "ANY_OTHER", "BASE", "STONE_FORMULAS", "Reagent", "Rule", "Span", "carrier_of", "dissolved_share",
    "effective_share", "end_ph_in", "eq_per_kg", "eq_per_mol", "reagent_of", "rules_of",
]

Array = NDArray[np.float64]

BASE, ACID = "base", "acid"
ANY_OTHER = "any other"  # row of the table for products that it does not name
LIME_FORMULAS, MAGNESIA_FORMULAS, STONE_FORMULAS = ("Ca(OH)2", "CaO"), ("Mg(OH)2", "MgO"), ("CaCO3",)


@dataclass(frozen=True, slots=True, kw_only=True)
class Rule:
    """One row of the table: what it says of which quantity; nan where it gives no figure."""

    quantity: str
    low: float
    usual: float
    high: float
    unit: str
    words: str
    mark: str
    source: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Span:
    """Rules on one quantity together: the least, the one taken, the most. source : of the one taken."""

    low: float
    usual: float
    high: float
    source: str


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Reagent:
    """A reagent as it is fed.

    kind : BASE or ACID. efficiency : share of its equivalents that react.
    eq_per_kg : nominal, per kilogram as delivered. [eq/kg]
    fed_eq_l : nominal, per liter of what is pumped; inf where no water comes with it (dry or gas). [eq/L]
    base_per_eq, carbon_per_eq : change of base [eq] and of inorganic carbon [mol] by one equivalent that reacts; base
        is -1 for an acid and 0 for carbon dioxide, whose equivalent is a mole that becomes bicarbonate.
    residence_min : the rules together. dissolution_per_min : first order, None where it dissolves at once or no rate
        is known. ceiling_ph, lowest_ph : a base does not go above, an acid not below. freezes_at_c : nan where unknown.
    """

    name: str
    stock: Stocked
    kind: str
    efficiency: float
    efficiency_source: str
    eq_per_kg: float
    fed_eq_l: float
    fed_as: str
    base_per_eq: float
    carbon_per_eq: float
    residence_min: Span
    dissolution_per_min: float | None
    ceiling_ph: float | None
    lowest_ph: float | None
    solubility_g_l: float | None
    hazards: tuple[str, ...]
    limited_by: tuple[str, ...]
    freezes_at_c: float
    rules: tuple[Rule, ...]

    @property
    def reacting_eq_l(self) -> float:
        """Equivalents that react, per liter of what is pumped. [eq/L]"""
        return self.efficiency * self.fed_eq_l

    @property
    def kg_per_eq(self) -> float:
        """Product as delivered for one equivalent that reacts. [kg/eq]"""
        return 1.0 / (self.eq_per_kg * self.efficiency)

    @property
    def cost_per_eq(self) -> float:
        """Cost of one equivalent that reacts; nan without a price."""
        return np.nan if self.stock.price_per_kg is None else self.stock.price_per_kg * self.kg_per_eq

    def reaches(self, ph: ArrayLike) -> NDArray[np.bool_]:
        """Whether a pH lies within what it can do by solubility or gas transfer."""
        x = np.asarray(ph, dtype=float)
        high = np.inf if self.ceiling_ph is None else self.ceiling_ph
        low = -np.inf if self.lowest_ph is None else self.lowest_ph
        return x <= high if self.kind == BASE else x >= low


# ---------------------------------------------------------------- the table


@cache
def _table() -> Mapping[str, tuple[Rule, ...]]:
    rules: dict[str, tuple[Rule, ...]] = {}
    for row in read_table("tank_reagents"):
        low, usual, high = (float(row[cell]) if row[cell] else np.nan for cell in ("low", "usual", "high"))
        rule = Rule(quantity=row["quantity"], low=low, usual=usual, high=high, unit=row["unit"], words=row["words"],
                    mark=row["mark"], source=row["source"])
        for name in row["products"].split(";"):
            rules[name] = (*rules.get(name, ()), rule)
    return rules


def rules_of(name: str) -> tuple[Rule, ...]:
    """Rows of the table for a product by its name in `products.csv`; those of ANY_OTHER where it has none."""
    return _table().get(name, _table()[ANY_OTHER])


def _span(rules: tuple[Rule, ...], quantity: str) -> Span:
    rows = [rule for rule in rules if rule.quantity == quantity]
    figures = [v for rule in rows for v in (rule.low, rule.usual, rule.high) if np.isfinite(v)]
    taken = next((rule for rule in rows if np.isfinite(rule.usual)), None)
    return Span(low=min(figures, default=np.nan), usual=taken.usual if taken else np.nan,
                high=max(figures, default=np.nan), source=f"{taken.source} ({taken.mark})" if taken else "")


def _usual(rules: tuple[Rule, ...], quantity: str) -> float | None:
    found = _span(rules, quantity).usual
    return found if np.isfinite(found) else None


def _words(rules: tuple[Rule, ...], quantity: str) -> tuple[str, ...]:
    return tuple(rule.words for rule in rules if rule.quantity == quantity)


# ---------------------------------------------------------------- equivalents


def eq_per_mol(stock: Stocked) -> float:
    """Equivalents of one mole of the active substance, by its alkalinity; carbon dioxide by the bicarbonate it makes.

    Raises InputError for a product that is neither base nor acid.
    """
    adds = stock.product.adds
    found = abs(adds["alkalinity"]) or adds.get("carbon", 0.0)
    if found == 0.0:
        raise InputError(f"a reagent must be a base or an acid; {stock.product.name!r} changes neither alkalinity nor "
                         "carbon. Name another product.")
    return found


def eq_per_kg(stock: Stocked) -> float:
    """Nominal equivalents of a kilogram as delivered: strength and stoichiometry. [eq/kg]"""
    return stock.strength * eq_per_mol(stock) * 1e3 / stock.product.molar_mass_g


def effective_share(readout: Readout, reagent: Reagent, ph: ArrayLike, carbon_carrier: int | None = None,
                    stripped: float = 0.0) -> Array:
    """Share of an equivalent that counts at an end pH; below 1 where the carbon it brings holds some of it back. [-]

    One less the base that its carbon has taken up at that pH, by the tables; above 1 for carbon dioxide past the
    bicarbonate; zero or less where the reagent cannot reach the pH. stripped : share of its carbon that leaves as gas.
    """
    sign = 1.0 if reagent.kind == BASE else -1.0
    carbon = reagent.carbon_per_eq * (1.0 - stripped)
    x = np.asarray(ph, dtype=float)
    if carbon == 0.0:
        return np.where(np.isfinite(x), sign * reagent.base_per_eq, np.nan)
    held = np.interp(x, GRID_PH, readout.held[carrier_of(reagent, carbon_carrier)])
    return sign * (reagent.base_per_eq - carbon * held)


def carrier_of(reagent: Reagent, carbon_carrier: int | None) -> int:
    """The carrier that a reagent's carbon goes to. Raises InputError where none is named."""
    if carbon_carrier is None:
        raise InputError(f"{reagent.name!r} brings inorganic carbon, which needs a carrier of its own in the tables; "
                         "none is named. Give carbon_carrier.")
    return carbon_carrier


def dissolved_share(dissolution_per_min: float | None, residence_min: ArrayLike, tanks: int = 1) -> Array:
    """Share of a slurry that has dissolved when it leaves stirred tanks in a row; 1 where it dissolves at once. [-]

    1 - (1 + k t/n)^-n for first-order dissolution in n equal ideal tanks that hold t min together. Follows from the
    balance of each tank.
    """
    t = np.asarray(residence_min, dtype=float)
    if dissolution_per_min is None:
        return np.where(np.isfinite(t), 1.0, np.nan)
    return 1.0 - (1.0 + dissolution_per_min * t / tanks) ** -tanks


# ---------------------------------------------------------------- from the store to the feed


def reagent_of(
    stock: Stocked, *, efficiency: float | None = None, made_up: MadeUp | None = None, dry: bool = False,
    dissolution_per_min: float | None = None, ceiling_ph: float | None = None, lowest_ph: float | None = None,
) -> Reagent:
    """A product of the store as a reagent; what is not given comes from the table.

    made_up : slurry or solution made on site; the usual one of a solid if not given. dry : the solid is fed as such.

    Raises
    ------
    InputError
        A product that is neither base nor acid, brings weak acids that the tables do not follow, or is a liquid of
        unknown density; an efficiency that is no share.
    """
    product = stock.product
    weak = [name for name in product.adds if name in acid_table() and not _is_spectator(name)]
    if weak:
        raise InputError(f"a reagent may bring no weak acid but carbonic; {product.name!r} brings {', '.join(weak)}, "
                         "which shifts the curve of the waste. Take a strong base or acid.")
    rules = rules_of(product.name)
    share = _span(rules, "efficiency")
    used = share.usual if efficiency is None else efficiency
    if not 0.0 < used <= 1.0:
        raise InputError(f"the efficiency of {stock.name!r} must be above 0 and at most 1; found {used:g}. "
                         "Give 95 % as 0.95.")
    eq, alkalinity = eq_per_mol(stock), product.adds["alkalinity"]
    fed_eq_l, fed_as = _fed(stock, rules, made_up, dry)
    return Reagent(
        name=stock.name, stock=stock, kind=BASE if alkalinity > 0.0 else ACID, efficiency=used,
        efficiency_source=share.source if efficiency is None else "given", eq_per_kg=eq_per_kg(stock),
        fed_eq_l=fed_eq_l, fed_as=fed_as, base_per_eq=alkalinity / eq,
        carbon_per_eq=product.adds.get("carbon", 0.0) / eq, residence_min=_span(rules, "residence_min"),
        dissolution_per_min=_first(dissolution_per_min, _usual(rules, "dissolution_per_min")),
        ceiling_ph=_first(ceiling_ph, _usual(rules, "ceiling_ph")),
        lowest_ph=_first(lowest_ph, _usual(rules, "lowest_ph")), solubility_g_l=_usual(rules, "solubility_g_l"),
        hazards=_words(rules, "hazard"), limited_by=_words(rules, "limited_by"),
        freezes_at_c=freezes_at_c(product, stock.strength), rules=rules)


def _is_spectator(name: str) -> bool:
    """Sulfate takes part in the proton balance only below about pH 3, far from any aim."""
    return all(pk < 2.5 for pk in acid_table()[name].pk)


def _first(given: float | None, table: float | None) -> float | None:
    return table if given is None else given


def _fed(stock: Stocked, rules: tuple[Rule, ...], made_up: MadeUp | None, dry: bool) -> tuple[float, str]:
    """Nominal equivalents per liter of what is pumped, and what that is."""
    form, eq = stock.product.form, eq_per_kg(stock)
    if form == "gas":
        return np.inf, "gas"
    if made_up is None and form == "solid" and not dry:
        fraction, density = _usual(rules, "made_up_fraction"), _usual(rules, "made_up_density_kg_l")
        if fraction is not None and density is not None:
            made_up = MadeUp(fraction=fraction, density_kg_l=density)
    if made_up is not None:
        return eq * made_up.fraction * made_up.density_kg_l, f"{100.0 * made_up.fraction:g} % made up on site"
    if form == "solid":
        return np.inf, "dry"
    told = density_from_strength(stock.product, stock.strength)
    kg_l = next((d for d in (stock.density_kg_l, told if np.isfinite(told) else None, _usual(rules, "density_kg_l"),
                             stock.product.density_kg_l) if d is not None), None)
    if kg_l is None:
        raise InputError(f"a {form} reagent needs its density to become a normality; none is known for "
                         f"{stock.name!r} at {100.0 * stock.strength:g} %. Take its density from the certificate.")
    return eq * kg_l, "as delivered"


def end_ph_in(reagent: Reagent, acid_eq_l: ArrayLike, c: Conditions, pco2_atm: float = 1.0) -> Array | None:
    """pH at which a sparingly soluble base stops in a waste that took this much of it; None for a soluble reagent. [-]

    The computed end of the mineral, or the one that practice tells where that is lower (not for limestone, which the
    pressure of CO2 decides). acid_eq_l : strong acid neutralized. [eq/L]
    """
    formula = reagent.stock.product.formula
    if formula in STONE_FORMULAS:
        return limestone_end_ph(acid_eq_l, pco2_atm, c)
    if formula in MAGNESIA_FORMULAS:
        ksp = brucite_ksp(c)
    elif formula in LIME_FORMULAS and reagent.solubility_g_l is not None:
        ksp = hydroxide_ksp_of_solubility(reagent.solubility_g_l / molar_mass(LIME_FORMULAS[0]))
    else:
        return None
    ceiling = hydroxide_ceiling_ph(ksp, acid_eq_l, c)
    return np.minimum(ceiling, np.inf if reagent.ceiling_ph is None else reagent.ceiling_ph)

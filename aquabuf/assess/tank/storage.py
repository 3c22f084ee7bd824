"""Storing reagents: days of supply, volume of the store, containment under each named rule, order, materials, cautions.

The rules on days and containment disagree by place and substance. All are worked out; the engineer chooses, and local
code outranks them.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from aquabuf.assess.limits import EDGE
from aquabuf.assess.plant.feed import shown
from aquabuf.assess.plant.storage import SUPPLIES, feed_rules
from aquabuf.assess.tank.reagents import LIME_FORMULAS, Reagent
from aquabuf.assess.tank.rules import TankRule, at_least_zero, positive, rule, rules_in, words_for
from aquabuf.chem.strength import density_from_strength
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = [
    "CONTAINMENT_RULES", "Containment", "Store", "Supply", "cautions", "containment", "containments", "freezing_words",
    "lime_words", "materials", "order_of_addition", "store", "supplies",
]

L_PER_M3 = 1e3
CONTAINMENT_RULES = tuple(r.key for r in rules_in("containment"))
LARGEST, GREATER, RAIN = CONTAINMENT_RULES
FREEZING_MARGIN_K = 5.0  # above the freezing point where a line should be traced (judgment, no source)


# ---------------------------------------------------------------- days and volume


@dataclass(frozen=True, slots=True, kw_only=True)
class Supply:
    """Days of use that one rule asks for."""

    name: str
    days: float
    words: str
    source: str


def supplies(shipping_d: float | None = None) -> tuple[Supply, ...]:
    """Days of supply by each rule; those that count shipping only where its time is known. [d]"""
    out = [Supply(name=r.key, days=r.value, words=r.words, source=r.told_by) for r in rules_in("supply")]
    if shipping_d is not None:
        at_least_zero(shipping_d, "shipping time [d]", "Count from order to delivery.")
        for name in SUPPLIES:
            fixed, times = feed_rules()[f"{name} days"], feed_rules()[f"{name} shipping"]
            out.append(Supply(name=name, days=fixed.limit + times.limit * shipping_d, source=fixed.source,
                              words=f"{fixed.words}: {fixed.limit:g} d and {times.limit:g} shipping times"))
    return tuple(out)


@dataclass(frozen=True, slots=True, kw_only=True)
class Store:
    """Store of one reagent as delivered; volume nan where its density is not known.

    by_truck : a delivery decides, not the days. shown : what each rule on days would ask for.
    """

    reagent: str
    days: float
    kg: float
    volume_m3: float
    by_truck: bool
    shown: tuple[Supply, ...]
    words: str


def store(reagent: Reagent, kg_d: float, *, days: float | None = None, shipping_d: float | None = None,
          load_kg: float = 0.0, density_kg_l: float | None = None) -> Store:
    """Store for a use [kg/d as delivered]: the days wished, else the least of the table, and 1.5 loads at least.

    load_kg : of one delivery. density_kg_l : of the product as delivered (in bulk for a solid), if the store room has
    none.
    """
    use = positive(kg_d, f"use of {reagent.name!r} [kg/d]", "Give the mean need of the worst month.")
    load = at_least_zero(load_kg, "size of a delivery [kg]", "Ask the seller.")
    told, least = supplies(shipping_d), rule("least days")
    taken = least.value if days is None else positive(days, "days of supply", "Give days.")
    why = f"{least.words}, {least.told_by}" if days is None else "as set"
    density = _density(reagent) if density_kg_l is None else positive(density_kg_l, "density [kg/L]", "Weigh a liter.")
    by_truck = feed_rules()["truck loads"].limit * load
    kg = max(taken * use, by_truck)
    volume = kg / density / L_PER_M3
    room = f"{shown(volume)} m³" if np.isfinite(volume) else "volume unknown without a density"
    truck = f"; {feed_rules()['truck loads'].limit:g} loads decide" if by_truck > taken * use else ""
    need = rule("need")
    return Store(reagent=reagent.name, days=kg / use, kg=kg, volume_m3=volume, by_truck=by_truck > taken * use,
                 shown=told, words=f"{reagent.name}: {shown(kg)} kg, {room}, for {shown(kg / use)} d ({why}{truck}); "
                                   f"{need.words} ({need.told_by})")


def _density(reagent: Reagent) -> float:
    """Density as delivered; nan where not known. [kg/L]"""
    stock, product = reagent.stock, reagent.stock.product
    found = (stock.density_kg_l, float(density_from_strength(product, stock.strength)), product.density_kg_l)
    return next((d for d in found if d is not None and np.isfinite(d)), np.nan)


# ---------------------------------------------------------------- containment


@dataclass(frozen=True, slots=True, kw_only=True)
class Containment:
    """Volume that must be held back by one rule. chosen : the rule that was asked for. [m3]"""

    rule: TankRule
    volume_m3: float
    chosen: bool
    words: str


def containment(name: str, volumes_m3: Sequence[float], *, rain_m: float | None = None, floor_m2: float | None = None,
                ) -> float:
    """Containment of tanks by one named rule; nan where the rule counts rain and none is given. [m3]

    rain_m : of the design storm; floor_m2 : contained area that it falls on. A roof makes the rain 0. What other tanks
    take up of the basin comes on top.
    """
    if name not in CONTAINMENT_RULES:
        raise InputError(f"a containment rule must be one of {'; '.join(CONTAINMENT_RULES)}; found {name!r}. "
                         "Use one of these.")
    if not volumes_m3:
        raise InputError("containment needs the volume of at least one tank; found none. Give what each holds.")
    all_m3 = [positive(v, "volume of a stored tank [m3]", "Give what it holds when full.") for v in volumes_m3]
    share, largest = rule(name).value, max(all_m3)
    if name == GREATER:
        return max(share * sum(all_m3), largest)
    if name == LARGEST:
        return share * largest
    if rain_m is None or floor_m2 is None:
        return np.nan
    return share * largest + at_least_zero(rain_m, "rain [m]", "A roof makes it 0.") * positive(
        floor_m2, "contained area [m2]", "Give the floor inside the walls.")


def containments(volumes_m3: Sequence[float], chosen: str, *, rain_m: float | None = None,
                 floor_m2: float | None = None) -> tuple[Containment, ...]:
    """Every rule beside each other, with the one that the engineer chose."""
    containment(chosen, volumes_m3)  # refuses a name that no rule has
    out = []
    for r in rules_in("containment"):
        m3 = containment(r.key, volumes_m3, rain_m=rain_m, floor_m2=floor_m2)
        figure = f"{shown(m3)} m³" if np.isfinite(m3) else "needs rain and contained area"
        out.append(Containment(rule=r, volume_m3=m3, chosen=r.key == chosen,
                               words=f"{r.key}: {figure} ({r.told_by}); local code outranks it"))
    return tuple(out)


# ---------------------------------------------------------------- words


def _names(reagents: Iterable[Reagent]) -> set[str]:
    return {n for r in reagents for p in (r.stock.product,) for n in (*p.groups, *_family(p.name))}


def _family(product: str) -> tuple[str, ...]:
    """Names of the table that a product goes by: its own, and that without the strength."""
    return product, product.rstrip("% 0123456789")


def order_of_addition(reagents: Iterable[Reagent]) -> tuple[TankRule, ...]:
    """What goes into what first."""
    return words_for("order", _names(reagents))


def materials(reagent: Reagent) -> tuple[TankRule, ...]:
    """Materials for tank and line of a reagent; advice to be checked with the supplier for its strength."""
    return words_for("materials", _names((reagent,)))


def lime_words(reagent: Reagent, peak_kg_h: float, slurry_m3_h: float) -> Mapping[str, tuple[float, str]]:
    """Slaker or feeder [kg/h], slurry tank [m3] and hours of caustic on standby, for lime; empty for all else."""
    if reagent.stock.product.formula not in LIME_FORMULAS:
        return MappingProxyType({})
    slaker, tank, standby = rule("slaker"), rule("slurry tank"), rule("standby caustic")
    figures = ((slaker, slaker.value * positive(peak_kg_h, "lime at the peak [kg/h]", "Give the largest need.")),
               (tank, tank.value / 60.0 * positive(slurry_m3_h, "slurry [m3/h]", "Give the largest need.")),
               (standby, standby.value))
    return MappingProxyType({r.key: (value, f"{r.words} ({r.told_by})") for r, value in figures})


def freezing_words(reagent: Reagent, coldest_c: float) -> str:
    """Whether tank and lines must be heated at the coldest temperature [°C]; "" where no freezing point is known."""
    freezes = reagent.freezes_at_c
    if np.isnan(freezes) or not np.isfinite(coldest_c):
        return ""
    begin = f"{reagent.name} begins to freeze or to form crystals at {freezes:g} °C"
    if coldest_c >= freezes + FREEZING_MARGIN_K - EDGE:
        return f"{begin}, {coldest_c:g} °C at the coldest: no heating"
    near = "below that" if coldest_c < freezes else f"within {FREEZING_MARGIN_K:g} K of that"
    return (f"{begin}, {coldest_c:g} °C at the coldest is {near}: keep it indoors, heat tank and lines, or buy it in a "
            "strength that freezes later")


def cautions(reagents: Iterable[Reagent]) -> tuple[str, ...]:
    """Cautions on storing and handling these reagents: those of treatment products, and those of neutralization."""
    names = _names(reagents)
    general = [r["words"] for r in read_table("plant_cautions") if r["hangs_on"] in names]
    return (*general, *(f"{r.words[0].upper()}{r.words[1:]}." for r in words_for("cautions", names)))

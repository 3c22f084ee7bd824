"""Why a target cannot be met, in chemistry, and what would reach it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.choose import MOST_PRODUCTS, cheapest
from aquabuf.assess.plant.dose import NEGATIVE, NO_EFFECT, NOTHING, REACHED, Point, Solved, solve_doses
from aquabuf.assess.plant.steps.words import brief
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import ALKALINITY, CARBON, Stream
from aquabuf.assess.plant.targets import Target, reached
from aquabuf.chem.gases import AIR_CO2_PPM
from aquabuf.chem.products import Product, products
from aquabuf.tables import read_table

__all__ = ["STRIPPING", "missing_ions", "why_not"]

Array = NDArray[np.float64]

# What would be taken out of the water by blowing air through it; no product, only a way to say how much
STRIPPING = Product(name="stripping of CO2", formula="CO2", molar_mass_g=44.009, adds={CARBON: -1.0}, solids={},
                    form="gas", strength=1.0, strength_low=None, strength_high=None, density_kg_l=None, groups=(),
                    mark="derived", source="takes out what carbon dioxide brings")
SUGGESTED = {"base", "acid", "carbon", "calcium"}
UNSUITED = {"coagulant", "oxidant", "fluoride", "phosphate", "ammonia", "nitrate", "basicity", "magnesium"}
MOST_NAMED = 3
SOFTENED = {"calcium", "magnesium", "hardness"}
ONLY_ADDED = {*SOFTENED, "sodium", "fluoride"}  # by products; a step or another water takes them out
MOST_STRIPPED = 0.95  # share of the dissolved CO2 that an aerator can take out; common practice, no source


@dataclass(frozen=True, slots=True)
class _Way:
    words: str
    kg: float


def why_not(stream: Stream, stock: Sequence[Stocked], targets: Sequence[Target], *, air_co2_ppm: float = AIR_CO2_PPM,
            ) -> str:
    """Why the products in `stock` do not bring the first row of `stream` to `targets`, and what would.

    Says what each product alone is asked to do (less than nothing of one), and which shipped product, or stripping of
    CO2, makes it feasible together with those in stock, the least mass first.
    """
    one = stream.take(np.array([0]))
    if one.water().status[0] < 0:
        return (f"the water before these doses cannot be worked out: {one.water().status_words[0]}. Check its readings "
                f"and the steps before.")
    unknown = missing_ions(one, targets)
    if unknown:
        return (f"{' and '.join(unknown)} of the raw water {'is' if len(unknown) == 1 else 'are'} not given, without "
                f"which {' and '.join(t.words for t in targets)} cannot be judged. Measure it and add it to the plan.")
    wanted = " with ".join(t.words for t in targets)
    names = " and ".join(s.name for s in stock)
    cause = _cause(one, stock, targets, air_co2_ppm)
    ways = _ways(one, stock, targets, air_co2_ppm)
    if ways:
        remedy = f"What would reach it: {'; or '.join(w.words for w in ways)}."
    else:
        none = "No single further product of the shipped table reaches it: widen a window, or drop a target."
        remedy = " ".join([none, *_taken_out(one, targets, air_co2_ppm)])
    return f"{wanted} cannot be met with {names}{cause}. {remedy}"


def missing_ions(stream: Stream, targets: Sequence[Target]) -> list[str]:
    """Ions that a target is judged by and that are not known in the first row."""
    needs = {row["name"]: row["needs"].split(";") for row in read_table("plant_quantities") if row["needs"]}
    names = dict.fromkeys(n for t in targets for n in needs.get(t.quantity.name, ()))
    return [name for name in names if np.isnan(stream.total(name)[0])]


def _cause(one: Stream, stock: Sequence[Stocked], targets: Sequence[Target], air_co2_ppm: float) -> str:
    """What is wrong with the doses that mathematics asks for, where as many products as values are there."""
    points = [Point(t.quantity, _nearest(one, t, air_co2_ppm)) for t in targets]
    points = [p for p, t in zip(points, targets, strict=True) if t.is_point or _off(one, t, air_co2_ppm)]
    if not points:
        return ""
    if len(points) > len(stock):
        return _each_alone(one, stock[0], points, targets, air_co2_ppm)
    tried = list(stock[:len(points)])
    try:
        solved = solve_doses(one, [s.product for s in tried], points, air_co2_ppm=air_co2_ppm)
    except ValueError:
        return ""
    return _of_status(solved, tried, [p.quantity.name for p in points])


def _each_alone(one: Stream, only: Stocked, points: Sequence[Point], targets: Sequence[Target], air_co2_ppm: float,
                ) -> str:
    """What one product would have to do for each target by itself, where there are more of them than products."""
    said = [f": {len(points)} targets need as many products that work apart"]
    for point in points:
        solved = solve_doses(one, [only.product], [point], air_co2_ppm=air_co2_ppm)
        alone = f"{point.quantity.label} {point.quantity.text(float(np.ravel(point.value)[0]))} alone"
        if solved.status[0] == REACHED:
            found = reached(solved.stream, tuple(targets), air_co2_ppm)
            others = [f"{t.quantity.label} {t.quantity.text(float(found[t.quantity.name][0]))}" for t in targets
                      if t.quantity.name != point.quantity.name]
            mg_l = brief(float(only.mg_l_product(solved.mol_l[0, 0])))
            said.append(f"{alone} takes {mg_l} mg/L of {only.name}, and then it has {' and '.join(others)}")
        elif solved.status[0] == NEGATIVE:
            mg_l = brief(float(only.mg_l_product(-solved.mol_l[0, 0])))
            said.append(f"{alone} would need {mg_l} mg/L of {only.name} taken out")
    return "; ".join(said)


def _of_status(solved: Solved, tried: Sequence[Stocked], wanted: Sequence[str]) -> str:
    if solved.status[0] == NO_EFFECT and len(tried) == 1:
        return f": {tried[0].name} does not move it"
    if solved.status[0] == NO_EFFECT:
        return ": they move these targets together, not apart"
    if solved.status[0] != NEGATIVE:
        return ": no dose of them reaches it"
    parts = [f"{brief(float(s.mg_l_product(-x[0])))} mg/L of {s.name} taken out, which nothing does; "
             f"{_opposite(s, wanted)}"
             for s, x in zip(tried, solved.mol_l, strict=True) if x[0] < -NOTHING]
    return f": it would need {' and '.join(parts)}"


def _opposite(s: Stocked, wanted: Sequence[str]) -> str:
    """What works against a product on the quantities that are wanted; carbon dioxide leaves alkalinity as it is."""
    alkalinity, carbon = s.product.adds.get(ALKALINITY, 0.0), s.product.adds.get(CARBON, 0.0)
    if alkalinity > 0.0 and carbon > 0.0:
        return "acid takes out its alkalinity and aeration its carbon"
    if alkalinity > 0.0 and not set(wanted) - {ALKALINITY}:
        return "acid takes out alkalinity; carbon dioxide lowers pH and leaves alkalinity as it is"
    if alkalinity > 0.0:
        return "acid or carbon dioxide works the other way"
    if alkalinity < 0.0:
        return "a base works the other way"
    return "aeration (stripping of CO2) or a base without carbon works the other way"


def _taken_out(one: Stream, targets: Sequence[Target], air_co2_ppm: float) -> list[str]:
    """What lowers an ion that the water has too much of; no dose does."""
    out = []
    for t in targets:
        if t.quantity.name in ONLY_ADDED and reached(one, (t,), air_co2_ppm)[t.quantity.name][0] > t.high:
            soften = "soften, or " if t.quantity.name in SOFTENED else ""
            out.append(f"The water brings more {t.quantity.label} than this, and no dose takes it out: {soften}blend "
                       "with water that has less.")
    return out


def _nearest(one: Stream, t: Target, air_co2_ppm: float) -> float:
    value = float(reached(one, (t,), air_co2_ppm)[t.quantity.name][0])
    return float(np.clip(value, t.low, t.high)) if np.isfinite(value) else (t.low if np.isfinite(t.low) else t.high)


def _off(one: Stream, t: Target, air_co2_ppm: float) -> bool:
    return not bool(t.met(reached(one, (t,), air_co2_ppm)[t.quantity.name])[0])


def _ways(one: Stream, stock: Sequence[Stocked], targets: Sequence[Target], air_co2_ppm: float) -> list[_Way]:
    """Single additions to the stock that make it feasible, each by its kind of chemistry, the least mass first."""
    if len(stock) >= MOST_PRODUCTS:
        return []
    have = {_chemistry(s.product) for s in stock}
    found: dict[tuple, _Way] = {}
    shipped = (p for p in products().values() if SUGGESTED & set(p.groups) and not UNSUITED & set(p.groups))
    for product in (STRIPPING, *shipped):
        kind = _chemistry(product)
        if kind in have or kind in found:
            continue
        extra = Stocked(name=product.name, product=product, strength=1.0, strength_from="pure")
        chosen = cheapest(one, [*stock, extra], targets, air_co2_ppm=air_co2_ppm)
        x = chosen.mol_l[-1, 0]
        if not chosen.feasible[0] or x <= NOTHING or (product is STRIPPING and x > MOST_STRIPPED * _co2(one)):
            continue
        mg_l = float(extra.mg_l_pure(x))
        what = f"strip {brief(mg_l)} mg/L of CO2 first (aerate)" if product is STRIPPING else f"{product.name}, " \
            f"{brief(mg_l)} mg/L of pure {product.formula}, beside them"
        found[kind] = _Way(what, mg_l)
    return sorted(found.values(), key=lambda w: w.kg)[:MOST_NAMED]


def _chemistry(product: Product) -> tuple:
    """Products alike in what they add count as one."""
    return tuple(sorted(product.adds.items()))


def _co2(one: Stream) -> float:
    return float(one.water().species_mol_l["CO2"][0])

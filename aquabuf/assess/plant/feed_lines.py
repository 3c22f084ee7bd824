"""From doses to the store room's figures: rates, settings, tanks, stock and cost of every feed of a plan."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.feed import FeedRate, Setting, feed_rate
from aquabuf.assess.plant.plan import FeedSpec, Plan
from aquabuf.assess.plant.storage import (
    Cost,
    Order,
    Verdict,
    cost,
    day_tank,
    delivery,
    months_use,
    order,
    silo,
    storage_days,
)
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.train import Train
from aquabuf.errors import InputError

__all__ = ["FeedLine", "StoreLine", "feed_lines", "feed_of", "largest_mol_l", "store_lines"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FeedLine:
    """One dose of one step: what the operator sets. Arrays have one row.

    setting : of its pump or feeder, None where the plan has none. tank : rules of its day tank, if it has one.
    at_flows : rate at the least and the largest flow of the plan, by name.
    """

    step: str
    product: Stocked
    spec: FeedSpec
    mol_l: Array
    rate: FeedRate
    setting: Setting | None
    tank: tuple[Verdict, ...]
    at_flows: tuple[tuple[str, FeedRate, Setting | None], ...]

    @property
    def mg_l_product(self) -> float:
        """Dose of the product as delivered. [mg/L]"""
        return float(self.product.mg_l_product(self.mol_l)[0])

    @property
    def mg_l_pure(self) -> float:
        """Dose of the active substance. [mg/L]"""
        return float(self.product.mg_l_pure(self.mol_l)[0])

    @property
    def meq_l(self) -> float:
        """Alkalinity that the dose adds; negative for acids. [meq/L]"""
        return float(self.product.meq_l(self.mol_l)[0])

    @property
    def out_of_reach(self) -> bool:
        """Whether its pump or feeder cannot give the dose."""
        return self.setting is not None and self.setting.status[0] in ("too small", "too large")

    def setting_words(self) -> str:
        """What to set, in words; what is missing where it cannot be told."""
        if not np.isfinite(self.mol_l[0]):
            return "no dose found"
        if self.mol_l[0] == 0.0:
            return "off: nothing is needed"
        if self.setting is None and self.spec.pump is not None:
            return f"its pump needs something to move: give [products.{self.product.name}] its slurry or solution"
        if self.setting is None:
            return f"give [products.{self.product.name}] a pump or feeder for its setting"
        return self.setting.words(dose_mg_l=self.mg_l_product)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class StoreLine:
    """One product over all its steps.

    kg_d, kg_month : use, nan where a dose was not found. silo_words, delivery_words : "" where plan or doses say too
    little.
    """

    product: Stocked
    spec: FeedSpec
    kg_d: float
    kg_month: float
    cost: Cost | None
    stock_days: float
    order: Order | None
    silo_words: str
    delivery_words: str


def feed_lines(plan: Plan, train: Train) -> tuple[FeedLine, ...]:
    """A line for every dose of the run, in the order of the steps. The run has one row.

    Raises InputError naming file and product where what is fed cannot become a rate, as a liquid without its density.
    """
    lines = []
    for step, dosed in train.doses():
        try:
            lines.append(_line(plan, step, dosed.product, np.atleast_1d(dosed.mol_l)))
        except InputError as error:
            raise InputError(f"{plan.file}, [products.{dosed.product.name}]: {error}") from None
    return tuple(lines)


def _line(plan: Plan, step: str, product: Stocked, mol_l: Array) -> FeedLine:
    spec = plan.feeds[product.name]
    rate = _rate(product, spec, mol_l, plan.flow.now_m3_d)
    others = tuple((name, _rate(product, spec, mol_l, flow)) for name, flow in (
        ("least flow", plan.flow.least_m3_d), ("largest flow", plan.flow.most_m3_d)) if flow is not None)
    tank = day_tank(spec.day_tank_l, rate.l_h) if spec.day_tank_l is not None and rate.moved else ()
    return FeedLine(step=step, product=product, spec=spec, mol_l=mol_l, rate=rate, setting=_setting(spec, rate),
                    tank=tuple(tank), at_flows=tuple((name, r, _setting(spec, r)) for name, r in others))


def _rate(product: Stocked, spec: FeedSpec, mol_l: Array, flow_m3_d: float) -> FeedRate:
    return feed_rate(product.mg_l_pure(mol_l), flow_m3_d, strength=product.strength, form=product.product.form,
                     density_kg_l=product.density_kg_l, made_up=spec.made_up)


def _setting(spec: FeedSpec, rate: FeedRate) -> Setting | None:
    if spec.pump is not None and rate.moved:
        return spec.pump.reach.setting(rate.l_h)
    if spec.feeder is not None:
        return spec.feeder.reach.setting(rate.product_kg_h)
    return None


def feed_of(plan: Plan, product: Stocked, mol_l: Array) -> tuple[FeedRate, Setting | None]:
    """Rates and settings of any doses of a product at the flow of the plan, row by row."""
    spec = plan.feeds[product.name]
    rate = _rate(product, spec, mol_l, plan.flow.now_m3_d)
    return rate, _setting(spec, rate)


def largest_mol_l(line: FeedLine, flow_m3_d: float) -> float | None:
    """Dose that the pump or feeder of a line gives at its largest setting in this flow; None without one. [mol/L]"""
    if line.setting is None:
        return None
    pump = line.spec.pump is not None and bool(line.rate.moved)
    reach = (line.spec.pump if pump else line.spec.feeder).reach  # type: ignore[union-attr]
    now = float((line.rate.l_h if pump else line.rate.product_kg_h)[0])
    if now > 0.0:
        return float(line.mol_l[0]) * reach.largest / now
    unit = _rate(line.product, line.spec, np.array([1e-3]), flow_m3_d)
    return 1e-3 * reach.largest / float((unit.l_h if pump else unit.product_kg_h)[0])


def store_lines(plan: Plan, lines: tuple[FeedLine, ...]) -> tuple[StoreLine, ...]:
    """A line per product, its use summed over the steps."""
    names = dict.fromkeys(line.product.name for line in lines)
    return tuple(_store_line(plan, [line for line in lines if line.product.name == name]) for name in names)


def _store_line(plan: Plan, lines: list[FeedLine]) -> StoreLine:
    product, spec = lines[0].product, lines[0].spec
    kg_d = float(sum(line.rate.product_kg_d[0] for line in lines))
    price = None if product.price_per_kg is None else cost(
        [kg_d], product.price_per_kg, plan.flow.now_m3_d, plan.currency or "of the plan's currency")
    stock = spec.stock_kg
    due = order([stock], [kg_d], spec.shipping_d, supply=spec.supply) if stock is not None and \
        spec.shipping_d is not None else None
    return StoreLine(
        product=product, spec=spec, kg_d=kg_d, kg_month=float(np.ravel(months_use(kg_d))[0]), cost=price,
        stock_days=float(np.ravel(storage_days(stock, kg_d))[0]) if stock is not None else np.nan, order=due,
        silo_words=_silo_words(spec, kg_d), delivery_words=_delivery_words(spec, kg_d))


def _silo_words(spec: FeedSpec, kg_d: float) -> str:
    """How much store the use asks for, against what there is."""
    if spec.shipping_d is None or not kg_d > 0.0:
        return ""
    found = silo([kg_d], spec.shipping_d, supply=spec.supply, truck_kg=spec.delivery_kg or 0.0)
    need = f"a store of {float(found.kg[0]):,.0f} kg ({float(found.days[0]):.3g} d) is asked for"
    if spec.store_kg is None:
        return need
    return f"{need}; it holds {spec.store_kg:,.0f} kg{': too small' if spec.store_kg < found.kg[0] else ''}"


def _delivery_words(spec: FeedSpec, kg_d: float) -> str:
    """Whether a load ordered now fits when it comes, and how long it lasts."""
    if spec.delivery_kg is None or spec.stock_kg is None or spec.store_kg is None or spec.shipping_d is None or \
            np.isnan(kg_d):
        return ""
    found = delivery([spec.delivery_kg], [spec.stock_kg], spec.store_kg, [kg_d], spec.shipping_d)
    load, lasts, wait = f"a load of {spec.delivery_kg:,.0f} kg", float(found.lasts_d[0]), float(found.wait_d[0])
    if found.fits[0]:
        return f"{load} fits{f' and lasts {lasts:.3g} d' if np.isfinite(lasts) else ''}"
    if np.isfinite(wait):
        return f"{load} does not fit yet: wait {wait:.3g} d"
    if spec.delivery_kg > spec.store_kg:
        return f"{load} is more than the store holds, {spec.store_kg:,.0f} kg"
    return f"{load} does not fit, and nothing is used"

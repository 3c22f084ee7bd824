"""What keeps a feed going and proves it: drawdown check, day tank, batches, stock, deliveries, cost, lime in water.

Amounts are of the product as delivered, arrays are of shape (rows,); nan in a row gives nan in that row. Rules are
guidance with their source, from feed_rules.csv.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.limits import EDGE, OPERATORS
from aquabuf.assess.plant.feed import (
    HOURS_PER_DAY,
    MadeUp,
    both_units,
    checked,
    in_us,
    made_up_l_h,
    product_kg_d,
    shown,
)
from aquabuf.chem.properties import water_density
from aquabuf.errors import InputError
from aquabuf.tables import read_table
from aquabuf.units import convert

__all__ = [
    "DAYS_PER_MONTH", "SUPPLIES", "Batch", "Cost", "Delivery", "Drawdown", "FeedRule", "LimeFeed", "Order", "Silo",
    "Verdict", "batch", "column_seconds", "cost", "day_tank", "day_tank_sizes_l", "delivery", "drawdown",
    "feed_rules", "hours_of_use", "judged", "least_feeder_size", "lime_feed", "lime_solubility_g_l", "months_use",
    "order", "packages", "silo", "storage_days",
]

Array = NDArray[np.float64]

DAYS_PER_MONTH = convert(1.0, "months", "d", "years")  # 365.25 / 12
SECONDS_PER_HOUR, ML_PER_L = 3600.0, 1e3
SUPPLIES = ("critical", "interruptible")  # whether a product may run out


@dataclass(frozen=True, slots=True, kw_only=True)
class FeedRule:
    """One row of feed_rules.csv: `quantity operator limit`; `at` is the temperature that it holds for. [°C]"""

    name: str
    group: str
    quantity: str
    operator: str
    limit: float
    unit: str
    at: float
    words: str
    remedy: str
    source: str

    def met(self, value: ArrayLike) -> NDArray[np.bool_]:
        """Where the rule is kept; not where the value is missing."""
        v = np.asarray(value, dtype=float)
        on_edge = np.abs(v - self.limit) <= EDGE * max(abs(self.limit), EDGE)  # rounding must not break it
        return OPERATORS[self.operator](np.where(on_edge, self.limit, v), self.limit)


@cache
def feed_rules() -> Mapping[str, FeedRule]:
    """The shipped rules by name."""
    return MappingProxyType({r["name"]: FeedRule(
        name=r["name"], group=r["group"], quantity=r["quantity"], operator=r["operator"], limit=float(r["limit"]),
        unit=r["unit"], at=float(r["at"] or "nan"), words=r["words"], remedy=r["remedy"],
        source=f"{r['source']}{' (recalled)' if r['mark'] == 'recalled' else ''}") for r in read_table("feed_rules")})


@dataclass(frozen=True, slots=True, eq=False)
class Verdict:
    """A rule on the rows of a value: `judged` where it could be applied, `met` where it is kept."""

    rule: FeedRule
    value: Array
    judged: NDArray[np.bool_]
    met: NDArray[np.bool_]

    def words(self, row: int = 0) -> str:
        """What was found, the rule, and what to do where it is broken."""
        unit = "" if self.rule.unit == "-" else f" {self.rule.unit}"
        bound = "at most" if self.rule.operator == "<=" else "at least"
        rule = f"{bound} {self.rule.limit:g}{unit}, so that {self.rule.words}; {self.rule.source}"
        if not self.judged[row]:
            return f"{self.rule.quantity}: not judged, nothing is fed or a value is missing ({rule})"
        found = f"{self.rule.quantity}: {shown(float(self.value[row]))}{unit}"
        return f"{found}, kept ({rule})" if self.met[row] else f"{found}, broken ({rule}): {self.rule.remedy}"


def judged(name: str, value: ArrayLike) -> Verdict:
    """Verdict of the shipped rule `name`; a value that is not finite is not judged."""
    v = np.atleast_1d(np.asarray(value, dtype=float))
    rule, known = feed_rules()[name], np.isfinite(v)
    return Verdict(rule, v, known, known & rule.met(v))


def _rate(values: ArrayLike, what: str) -> Array:
    return np.atleast_1d(checked(values, what, "Nothing is fed at 0.", above=None))


def _stock(values: ArrayLike, what: str) -> Array:
    return np.atleast_1d(checked(values, what, "Give what is there.", above=None))


def _shipping(days: ArrayLike) -> Array:
    return checked(days, "shipping time [d]", "Count from order to delivery.", above=None)


def _lasts(amount: ArrayLike, rate: Array) -> Array:
    """Amount over rate; infinite where nothing is used, nan where either is missing."""
    a, r = np.broadcast_arrays(np.asarray(amount, dtype=float), rate)
    return np.where(r == 0.0, np.where(np.isnan(a), np.nan, np.inf), a / np.where(r == 0.0, 1.0, r))


@dataclass(frozen=True, slots=True, eq=False)
class Drawdown:
    """What a pump was seen to move: its rate, how far it is from the wanted one, and the verdict on that. [L/h], [-]"""

    l_h: Array
    wanted_l_h: Array
    off: Array
    verdict: Verdict

    @property
    def gal_h(self) -> Array:
        """Measured rate. [gal/h]"""
        return in_us(self.l_h, "L/h")[0]

    def words(self, row: int = 0) -> str:
        """Measured and wanted rate, and the verdict."""
        found = f"drawdown: {both_units(float(self.l_h[row]), 'L/h')}"
        if not np.isfinite(self.off[row]):
            return f"{found}; nothing to compare it with"
        side = "above" if self.off[row] > 0.0 else "below"
        wanted = both_units(float(self.wanted_l_h[row]), "L/h")
        return f"{found}, {shown(100.0 * abs(self.off[row]))} % {side} the wanted {wanted}; {self.verdict.words(row)}"


def drawdown(ml: ArrayLike, seconds: ArrayLike, wanted_l_h: ArrayLike) -> Drawdown:
    """Check of a pump by the volume [mL] that it drew from a calibration column in a time [s]."""
    volume = _stock(ml, "volume drawn down [mL]")
    time = checked(seconds, "time of the drawdown [s]", "Time it with a watch.")
    wanted = _rate(wanted_l_h, "wanted rate [L/h]")
    l_h, wanted = np.broadcast_arrays(volume / ML_PER_L / time * SECONDS_PER_HOUR, wanted)
    off = np.where(wanted > 0.0, l_h / np.where(wanted > 0.0, wanted, 1.0) - 1.0, np.nan)
    return Drawdown(l_h, wanted, off, judged("feed accuracy", 100.0 * np.abs(off)))


def column_seconds(column_ml: ArrayLike, wanted_l_h: ArrayLike) -> Array:
    """Time in which the wanted rate draws down a calibration column of this volume. [s]"""
    volume = checked(column_ml, "volume of the calibration column [mL]", "Read it off the column.")
    return _lasts(volume / ML_PER_L * SECONDS_PER_HOUR, _rate(wanted_l_h, "wanted rate [L/h]"))


def least_feeder_size(rate: ArrayLike) -> Array:
    """Smallest size of a feeder for a rate at the design dose, in its unit: the rate and the shipped margin."""
    return (1.0 + 0.01 * feed_rules()["feeder margin"].limit) * _rate(rate, "rate at the design dose")


def hours_of_use(held_l: ArrayLike, l_h: ArrayLike) -> Array:
    """Time that a tank lasts at a feed. [h]"""
    volume = checked(held_l, "volume of the tank [L]", "Give what it holds when full.")
    return _lasts(volume, _rate(l_h, "feed [L/h]"))


def day_tank(tank_l: ArrayLike, l_h: ArrayLike) -> tuple[Verdict, ...]:
    """Verdicts of the day tank rules, in the order of the table, on a tank [L] at a feed [L/h]."""
    hours = hours_of_use(tank_l, l_h)
    drop = np.where(np.isinf(hours), np.nan, 100.0 * HOURS_PER_DAY / np.where(hours > 0.0, hours, np.nan))
    value = {"h": hours, "%": drop}
    return tuple(judged(name, value[rule.unit]) for name, rule in feed_rules().items() if rule.group == "day tank")


def day_tank_sizes_l(l_h: ArrayLike) -> tuple[Array, Array]:
    """Smallest and largest day tank that keep the rules on hours at a feed [L/h]. [L]"""
    rate = _rate(l_h, "feed [L/h]")
    return feed_rules()["day tank lasts"].limit * rate, feed_rules()["day tank limit"].limit * rate


@dataclass(frozen=True, slots=True, kw_only=True)
class Batch:
    """A recipe: product and water of one batch. [kg], [L]"""

    volume_l: float
    product_kg: float
    water_kg: float
    water_l: float

    def words(self) -> str:
        """The recipe in a line, metric and US."""
        return (f"{both_units(self.product_kg, 'kg')} of product and {both_units(self.water_l, 'L')} of water make "
                f"{both_units(self.volume_l, 'L')}")


def batch(volume_l: float, mixture: MadeUp, t_c: float = 15.0) -> Batch:
    """Recipe of a batch [L] of a mixture with water of `t_c` [°C]; masses add up, volumes need not."""
    volume = float(checked(volume_l, "volume of a batch [L]", "Give what the slurry or solution tank holds."))
    mass = volume * mixture.density_kg_l
    water = (1.0 - mixture.fraction) * mass
    return Batch(volume_l=volume, product_kg=mixture.fraction * mass, water_kg=water,
                 water_l=water / (1e-3 * float(water_density(t_c))))


def packages(kg: ArrayLike, package_kg: ArrayLike) -> Array:
    """Bags, drums or totes for an amount; round up to open whole ones. [-]"""
    size = checked(package_kg, "product in a package [kg]", "Read it off the bag; 50 lb are 22.68 kg.")
    return _stock(kg, "amount to pack [kg]") / size


def storage_days(stock_kg: ArrayLike, kg_d: ArrayLike) -> Array:
    """Time that a stock lasts. [d]"""
    return _lasts(_stock(stock_kg, "stock [kg]"), _rate(kg_d, "use [kg/d]"))


def _supply(supply: str) -> tuple[float, float]:
    """Stock days and shipping times that a supply asks for."""
    if supply not in SUPPLIES:
        raise InputError(f"supply must be {' or '.join(SUPPLIES)}; found {supply!r}. Use one of these.")
    return feed_rules()[f"{supply} days"].limit, feed_rules()[f"{supply} shipping"].limit


@dataclass(frozen=True, slots=True, eq=False)
class Silo:
    """Store to build: days of use, mass, volume (nan without a density); where the truck decides, not the days."""

    days: Array
    kg: Array
    m3: Array
    by_truck: NDArray[np.bool_]


def silo(kg_d: ArrayLike, shipping_d: ArrayLike, *, bulk_density_kg_m3: ArrayLike = np.nan,
         truck_kg: ArrayLike = 0.0, supply: str = SUPPLIES[0]) -> Silo:
    """Store for a use [kg/d]: fixed days and a multiple of the shipping time [d], and 1.5 truck loads at least.

    Source: Davis, Water and Wastewater Engineering, table 5-1; the figures are rows of feed_rules.csv.
    """
    days, times = _supply(supply)
    density = checked(bulk_density_kg_m3, "bulk density [kg/m3]", "Write 0.85 kg/L as 850.", above=50.0, most=3000.0)
    use = _rate(kg_d, "use [kg/d]")
    by_days = (days + times * _shipping(shipping_d)) * use
    by_truck = feed_rules()["truck loads"].limit * checked(truck_kg, "truck load [kg]", "Ask the seller.", above=None)
    kg = np.maximum(by_days, by_truck)
    return Silo(_lasts(kg, use), kg, kg / density, by_truck > by_days)


@dataclass(frozen=True, slots=True, eq=False)
class Order:
    """When to order: stock at which [kg], days until then, days until the stock is gone. [d]"""

    at_kg: Array
    days: Array
    gone_days: Array

    def words(self, row: int = 0) -> str:
        """When to order, in words."""
        if np.isnan(self.days[row]):
            return "when to order cannot be told: stock or use is unknown"
        if np.isinf(self.days[row]):
            return "nothing is used: no order is due"
        when = "order now" if self.days[row] == 0.0 else f"order in {shown(float(self.days[row]))} d"
        return (f"{when}, when {both_units(float(self.at_kg[row]), 'kg')} are left; the stock is gone in "
                f"{shown(float(self.gone_days[row]))} d")


def order(stock_kg: ArrayLike, kg_d: ArrayLike, shipping_d: ArrayLike, *, supply: str = SUPPLIES[0],
          reserve_d: ArrayLike = 0.0) -> Order:
    """When to order: once only the shipping allowance of the supply and the own reserve [d] are left (practice)."""
    times = _supply(supply)[1]
    reserve = checked(reserve_d, "reserve [d]", "Give the days that must stay in store.", above=None)
    gone, left = storage_days(stock_kg, kg_d), times * _shipping(shipping_d) + reserve
    at_kg, days, gone = np.broadcast_arrays(left * _rate(kg_d, "use [kg/d]"), np.maximum(gone - left, 0.0), gone)
    return Order(at_kg, days, gone)


@dataclass(frozen=True, slots=True, eq=False)
class Delivery:
    """A load that comes a shipping time from now.

    room_kg : in the store when it comes. fits : whether the load does (false where unknown). wait_d : days from now
    until it would. lasts_d : time that the load lasts. loads : verdict on how many the store holds. [kg], [d]
    """

    room_kg: Array
    fits: NDArray[np.bool_]
    wait_d: Array
    lasts_d: Array
    loads: Verdict


def delivery(load_kg: ArrayLike, stock_kg: ArrayLike, capacity_kg: ArrayLike, kg_d: ArrayLike,
             shipping_d: ArrayLike) -> Delivery:
    """Whether a load [kg] ordered now fits into the store [kg] when it comes."""
    load = checked(load_kg, "delivery [kg]", "Give the load of one truck or order.")
    capacity = checked(capacity_kg, "capacity of the store [kg]", "Give what it holds when full.")
    load, stock, capacity, use, shipping = np.broadcast_arrays(
        load, _stock(stock_kg, "stock [kg]"), capacity, _rate(kg_d, "use [kg/d]"), _shipping(shipping_d))
    room = capacity - np.maximum(stock - use * shipping, 0.0)
    over = stock + load - capacity  # to be used up first
    never = (load > capacity * (1.0 + EDGE)) & ~np.isnan(over)
    wait = np.where(never, np.inf, np.where(over <= 0.0, 0.0, _lasts(over, use)))
    return Delivery(room, room >= load * (1.0 - EDGE), wait, _lasts(load, use), judged("truck loads", capacity / load))


def months_use(per_day: ArrayLike) -> Array:
    """Use in a month of 365.25/12 days, in the unit of the daily use."""
    return DAYS_PER_MONTH * _rate(per_day, "daily use")


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Cost:
    """What a product costs, in `currency`: a word that is only repeated."""

    currency: str
    per_day: Array
    per_month: Array
    per_1000_m3: Array
    per_million_gal: Array

    def rows(self, row: int = 0) -> tuple[tuple[str, str], ...]:
        """Lines of a sheet: for what, and the cost."""
        each = {"a day": self.per_day, "a month": self.per_month, "1000 m³": self.per_1000_m3,
                "a million gallons": self.per_million_gal}
        return tuple((what, f"{shown(float(v[row]))} {self.currency}") for what, v in each.items())


def cost(kg_d: ArrayLike, price_per_kg: ArrayLike, flow_m3_d: ArrayLike, currency: str) -> Cost:
    """Cost of a use [kg/d] in a flow [m3/d] at a price per kg as delivered; nan per water where none flows."""
    price = checked(price_per_kg, "price per kg", "Give it without a sign.", above=None)
    flow = checked(flow_m3_d, "flow [m3/d]", "Give the flow that is treated.", above=None)
    day, flow = np.broadcast_arrays(_rate(kg_d, "use [kg/d]") * price, flow)
    per_m3 = day / np.where(flow > 0.0, flow, np.nan)
    return Cost(currency=currency, per_day=day, per_month=DAYS_PER_MONTH * day, per_1000_m3=1e3 * per_m3,
                per_million_gal=convert(1.0, "MGD", "m³/d", "flow") * per_m3)


def lime_solubility_g_l(t_c: ArrayLike) -> Array:
    """Ca(OH)2 that dissolves, between the rows of feed_rules.csv (recalled); nan outside them. [g/L]"""
    rows = [r for r in feed_rules().values() if r.group == "lime solubility"]
    return np.interp(np.asarray(t_c, dtype=float), [r.at for r in rows], [r.limit for r in rows], left=np.nan,
                     right=np.nan)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class LimeFeed:
    """A lime slurry, and clear saturated lime water for the same dose.

    carries_g_l : Ca(OH)2 in the slurry; dissolves_g_l : what dissolves. slurry_l_h, water_l_h : feed as either. [L/h]
    water_pct : lime water in the plant flow. [%]
    """

    carries_g_l: float
    dissolves_g_l: Array
    slurry_l_h: Array
    water_l_h: Array
    water_pct: Array

    def words(self, row: int = 0, *, after_filters: bool) -> str:
        """Whether solids are fed, and what to feed instead where the water is clear already."""
        dissolves = float(self.dissolves_g_l[row])
        carries = f"the lime as made up carries {shown(self.carries_g_l)} g/L of Ca(OH)2"
        if np.isnan(dissolves):
            return f"{carries}; how much dissolves is known from 0 to 30 °C only"
        about = f"about {shown(dissolves)} g/L dissolve (recalled)"
        if self.carries_g_l <= dissolves:
            return f"{carries} and {about}: clear lime water, grit apart"
        found = f"{carries} and {about}: most of it is solid, so keep it stirred, and dissolves only in the stream"
        if not after_filters:
            return found
        return (f"{found}. Past the filters what stays solid shows as turbidity: feed saturated lime water there, "
                f"{both_units(float(self.water_l_h[row]), 'L/h')}, {shown(float(self.water_pct[row]))} % of the flow")


def lime_feed(pure: ArrayLike, flow_m3_d: ArrayLike, t_c: ArrayLike, *, mixture: MadeUp, strength: float) -> LimeFeed:
    """Hydrated lime [kg/d of Ca(OH)2] as a slurry made from a product of this strength, or as saturated lime water."""
    use, dissolves = _rate(pure, "lime [kg/d]"), lime_solubility_g_l(t_c)
    flow = checked(flow_m3_d, "flow [m3/d]", "Give the flow that is treated.")
    slurry = made_up_l_h(product_kg_d(use, strength), mixture)
    water_m3_d = use / dissolves  # g/L is kg/m3
    dissolves, slurry, water, pct = np.broadcast_arrays(
        dissolves, slurry, convert(water_m3_d, "m³/d", "L/h", "flow"), 100.0 * water_m3_d / flow)
    return LimeFeed(carries_g_l=1e3 * mixture.density_kg_l * mixture.fraction * strength, dissolves_g_l=dissolves,
                    slurry_l_h=slurry, water_l_h=water, water_pct=pct)

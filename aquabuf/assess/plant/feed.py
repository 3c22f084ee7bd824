"""From a dose to what the operator sets: mass and volume rates, settings of pumps and feeders.

Doses are mg/L of the pure substance, rates are of the product as delivered or of what was made up from it on site;
arrays are of shape (rows,), and nan in a row gives nan in that row.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from itertools import pairwise
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import worded
from aquabuf.assess.limits import EDGE
from aquabuf.errors import InputError, InputRangeError
from aquabuf.units import convert, parse_unit

__all__ = [
    "FORMS", "HOURS_PER_DAY", "KNOBS", "Curve", "FeedRate", "Feeder", "MadeUp", "Pump", "Reach", "Setting",
    "both_units", "checked", "feed_rate", "in_us", "liquid_l_h", "made_up_l_h", "measured_curve", "metric_and_us",
    "product_kg_d", "pure_kg_d", "shown",
]

Array = NDArray[np.float64]

FORMS = ("solid", "liquid", "slurry", "gas")  # how a product is delivered
KNOBS = ("speed", "stroke")  # what the operator of a pump sets; the other is held
HOURS_PER_DAY = 24.0

# Unit in the United States of each metric one: its name, unit and dimension in units.csv, and what is left to divide by
_US: Mapping[str, tuple[str, str, str, float]] = MappingProxyType({
    "m³/d": ("MGD", "MGD", "flow", 1.0), "L/h": ("gal/h", "gal/d", "flow", HOURS_PER_DAY),
    "L/d": ("gal/d", "gal/d", "flow", 1.0), "mL/min": ("mL/min", "mL/min", "flow", 1.0),
    "kg/d": ("lb/d", "lb/d", "weight_rate", 1.0), "kg/h": ("lb/h", "lb/h", "weight_rate", 1.0),
    "kg": ("lb", "lb", "weight", 1.0), "L": ("gal", "gal", "volume", 1.0), "m³": ("ft³", "ft³", "volume", 1.0),
})
# A dose is lb/MG there: 8.3454 lb per mg/L and million gallons; the 8.34 of handbooks is this factor rounded
_LB_MG_PER_MG_L = convert(1e-3 * convert(1.0, "MGD", "m³/d", "flow"), "kg/d", "lb/d", "weight_rate")


def in_us(values: ArrayLike, unit: str) -> tuple[Array, str]:
    """Values in a metric unit as those of the United States, and the name of their unit (exact factors)."""
    if unit == "mg/L":
        return np.asarray(values, dtype=float) * _LB_MG_PER_MG_L, "lb/MG"
    if unit not in _US:
        raise InputError(f"a metric unit must be one of {', '.join(['mg/L', *_US])}; found {unit!r}. Use one of these.")
    name, target, dimension, rest = _US[unit]
    return convert(np.asarray(values, dtype=float), unit, target, dimension) / rest, name


def shown(value: float) -> str:
    """A number for people: three figures, or all of a whole number with more."""
    if not np.isfinite(value):
        return "unknown" if np.isnan(value) else "endless"
    places = 2 - int(f"{value:.2e}".partition("e")[2]) if value else 0
    return f"{value:,.{min(max(places, 0), 8)}f}"


def metric_and_us(value: float, unit: str) -> tuple[str, str]:
    """A value in a metric unit as text, metric and US."""
    us, name = in_us(value, unit)
    return f"{shown(value)} {unit}", f"{shown(float(us))} {name}"


def both_units(value: float, unit: str) -> str:
    """A value in a metric unit as text, the US one in brackets."""
    metric, us = metric_and_us(value, unit)
    return f"{metric} ({us})"


def checked(values: ArrayLike, what: str, remedy: str, *, above: float | None = 0.0, most: float = np.inf) -> Array:
    """Values as an array if all are above `above` (0 or more where it is None) and at most `most`; nan passes."""
    v = np.asarray(values, dtype=float)
    bad = (v < 0.0 if above is None else v <= above) | (v > most)
    if bad.any():
        low = "0 or more" if above is None else f"above {above:g}"
        rule = low if np.isinf(most) else f"{low} and at most {most:g}"
        first = np.atleast_1d(v)[np.atleast_1d(bad)][0]
        raise InputRangeError(f"{what} must be {rule}; found {first:g}. {remedy}", bad)
    return v


def _known(values: Iterable[float | None], owner: str) -> None:
    """Refuse a setting that is not a number."""
    for value in values:
        if value is not None and np.isnan(value):
            raise InputError(f"every figure of {owner} must be a number; found nan. Read it off the name plate.")


def pure_kg_d(dose_mg_l: ArrayLike, flow_m3_d: ArrayLike) -> Array:
    """Pure substance [kg/d] of a dose [mg/L] in a flow [m3/d]: mg/L is g/m3."""
    dose = checked(dose_mg_l, "dose [mg/L]", "A negative dose calls for the opposite product.", above=None)
    flow = checked(flow_m3_d, "flow [m3/d]", "Give the flow that is treated.", above=None)
    return 1e-3 * dose * flow


def product_kg_d(pure: ArrayLike, strength: ArrayLike) -> Array:
    """Product as delivered [kg/d] that brings `pure` [kg/d]; strength is the mass fraction of pure. [-]"""
    part = checked(strength, "strength (mass fraction)", "Write 92 % as 0.92.", most=1.0)
    return np.asarray(pure, dtype=float) / part


def liquid_l_h(product: ArrayLike, density_kg_l: ArrayLike) -> Array:
    """Volume rate [L/h] of a liquid product [kg/d] of this density [kg/L]."""
    return np.asarray(product, dtype=float) / (HOURS_PER_DAY * _density(density_kg_l))


def _density(kg_l: ArrayLike) -> Array:
    return checked(kg_l, "density [kg/L]", "Weigh a liter of it; 1525 kg/m3 is 1.525 kg/L.", above=0.5, most=3.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class MadeUp:
    """A slurry, solution or dilution made on site.

    fraction : mass of the product as delivered in the mass of the mixture. [-]
    density_kg_l : of the mixture. [kg/L]
    """

    fraction: float
    density_kg_l: float

    def __post_init__(self):
        _known((self.fraction, self.density_kg_l), "a mixture")
        checked(self.fraction, "mass fraction of product in a mixture", "Write 10 % as 0.1.", most=1.0)
        _density(self.density_kg_l)


def made_up_l_h(product: ArrayLike, mixture: MadeUp) -> Array:
    """Volume rate of a mixture [L/h] that carries `product` [kg/d]."""
    return liquid_l_h(np.asarray(product, dtype=float) / mixture.fraction, mixture.density_kg_l)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class FeedRate:
    """What a dose asks of the feeder.

    l_h : what a pump moves, nan where the product is fed dry or as a gas; moved : that in words, "" there.
    """

    dose_mg_l: Array
    flow_m3_d: Array
    pure_kg_d: Array
    product_kg_d: Array
    l_h: Array
    moved: str

    @property
    def product_kg_h(self) -> Array:
        """Product as delivered. [kg/h]"""
        return self.product_kg_d / HOURS_PER_DAY

    @property
    def ml_min(self) -> Array:
        """What a pump moves. [mL/min]"""
        return convert(self.l_h, "L/h", "mL/min", "flow")

    def in_us(self) -> dict[str, Array]:
        """The rates in US units; the name of each ends in its unit."""
        rates = {"pure_lb_d": (self.pure_kg_d, "kg/d"), "product_lb_d": (self.product_kg_d, "kg/d"),
                 "product_lb_h": (self.product_kg_h, "kg/h"), "gal_h": (self.l_h, "L/h"),
                 "gal_d": (HOURS_PER_DAY * self.l_h, "L/d")}
        return {name: in_us(*rate)[0] for name, rate in rates.items()}

    def rows(self, row: int = 0) -> tuple[tuple[str, str, str], ...]:
        """Lines of a sheet: what it is, in metric units, in US units."""
        lines: list[tuple[str, Array, str]] = [
            ("dose, pure", self.dose_mg_l, "mg/L"), ("flow", self.flow_m3_d, "m³/d"),
            ("pure substance", self.pure_kg_d, "kg/d"), ("product", self.product_kg_d, "kg/d"),
            ("product", self.product_kg_h, "kg/h")]
        if self.moved:
            lines += [(self.moved, self.l_h, "L/h"), (self.moved, HOURS_PER_DAY * self.l_h, "L/d"),
                      (self.moved, self.ml_min, "mL/min")]
        return tuple((what, *metric_and_us(float(v[row]), unit)) for what, v, unit in lines)


def feed_rate(dose_mg_l: ArrayLike, flow_m3_d: ArrayLike, *, strength: ArrayLike, form: str,
              density_kg_l: ArrayLike | None = None, made_up: MadeUp | None = None) -> FeedRate:
    """All rates of a dose.

    Parameters
    ----------
    dose_mg_l, flow_m3_d : pure substance and the flow treated. [mg/L], [m3/d]
    strength : mass fraction of pure in the product as delivered. [-]
    form : how the product is delivered, one of FORMS.
    density_kg_l : of the product as delivered; needed for liquids and slurries that are pumped as they come. [kg/L]
    made_up : the mixture that is pumped instead, where one is made on site.
    """
    if form not in FORMS or (form == "gas" and made_up is not None):
        raise InputError(f"form of a product must be one of {', '.join(FORMS)}, and no gas where a mixture is made up; "
                         f"found {form!r}. Correct it.")
    pure = pure_kg_d(dose_mg_l, flow_m3_d)
    product = product_kg_d(pure, strength)
    l_h, moved = np.full(np.shape(product), np.nan), ""
    if made_up is not None:
        l_h, moved = made_up_l_h(product, made_up), "mixture to pump"
    elif form in ("liquid", "slurry"):
        if density_kg_l is None:
            raise InputError(f"a {form} product needs its density [kg/L] to become a volume; found none. "
                             "Take it from the certificate.")
        l_h, moved = liquid_l_h(product, density_kg_l), f"{form} to pump"
    each = (dose_mg_l, flow_m3_d, pure, product, l_h)
    dose, flow, pure, product, l_h = np.broadcast_arrays(*(np.atleast_1d(np.asarray(v, dtype=float)) for v in each))
    return FeedRate(dose_mg_l=dose, flow_m3_d=flow, pure_kg_d=pure, product_kg_d=product, l_h=l_h, moved=moved)


@dataclass(frozen=True, slots=True, kw_only=True)
class Curve:
    """Measured rates [`unit`] of a pump or feeder at its settings [%], straight between the points.

    Straight lines keep the order, lead back exactly, and can be checked with a ruler. Make one by `measured_curve`.
    """

    owner: str
    setting_pct: tuple[float, ...]
    rate: tuple[float, ...]
    unit: str

    def __post_init__(self):
        subject = f"calibration curve of {self.owner}"
        _known((*self.setting_pct, *self.rate), f"the {subject}")
        if len(self.rate) < 2:
            raise InputError(f"{subject} needs 2 points or more; found {len(self.rate)}. Measure at another setting.")
        checked(self.setting_pct, f"setting [%] in the {subject}", "Give points as (%, rate).", above=None, most=100.0)
        checked(self.rate, f"rate in the {subject}", "Give what was measured.", above=None)
        for (s0, r0), (s1, r1) in pairwise(zip(self.setting_pct, self.rate, strict=True)):
            if s1 <= s0 or r1 <= r0:
                raise InputError(f"{subject} must rise from point to point; found {r1:g} {self.unit} at {s1:g} % after "
                                 f"{r0:g} {self.unit} at {s0:g} %. Measure again at {s1:g} %.")


def measured_curve(owner: str, points: Iterable[tuple[float, float]], unit: str = "L/h") -> Curve:
    """Curve from pairs of setting [%] and rate, in any order; the rate is a volume or a mass per time."""
    house = {"flow": "L/h", "weight_rate": "kg/h"}
    dimension = next((d for d in house if parse_unit(unit, d)), None)
    if dimension is None:
        raise InputError(f"calibration curve of {owner} must be in a volume or mass per time; found {unit!r}. "
                         "Use L/h, mL/min, kg/h or lb/h.")
    pairs = sorted(points)
    return Curve(owner=owner, setting_pct=tuple(float(s) for s, _ in pairs), unit=house[dimension],
                 rate=tuple(float(convert(r, unit, house[dimension], dimension)) for _, r in pairs))


@dataclass(frozen=True, slots=True, kw_only=True)
class Reach:
    """What a pump or feeder gives over the settings that may be used (`range_pct`).

    least : rate that it does not go below at any setting. [unit of the curve]
    basis : how the curve is known, in words.
    """

    owner: str
    curve: Curve
    range_pct: tuple[float, float]
    least: float
    basis: str

    def rate_at(self, setting_pct: ArrayLike) -> Array:
        """Rate at a setting [%], nan outside its range. [unit of the curve]"""
        s = np.asarray(setting_pct, dtype=float)
        rate = np.interp(s, self.curve.setting_pct, self.curve.rate)
        return np.where((s >= self.range_pct[0]) & (s <= self.range_pct[1]), rate, np.nan)

    @property
    def smallest(self) -> float:
        """Smallest rate. [unit of the curve]"""
        return max(float(self.rate_at(self.range_pct[0])), self.least)

    @property
    def largest(self) -> float:
        """Largest rate. [unit of the curve]"""
        return float(self.rate_at(self.range_pct[1]))

    def setting(self, wanted: ArrayLike) -> Setting:
        """Setting for each wanted rate [unit of the curve]; nan where the rate is out of reach."""
        rate = np.atleast_1d(checked(wanted, f"wanted rate of {self.owner}", "Nothing is fed at 0.", above=None))
        too_small = (rate > 0.0) & (rate < self.smallest * (1.0 - EDGE))
        too_large = rate > self.largest * (1.0 + EDGE)
        pct = np.interp(rate, self.curve.rate, self.curve.setting_pct)
        pct = np.where(rate == 0.0, 0.0, np.where(too_small | too_large, np.nan, pct))
        status = worded(rate.size, (np.isnan(rate), "unknown"), (rate == 0.0, "off"), (too_small, "too small"),
                        (too_large, "too large"), default="set")
        return Setting(self, rate, pct, status)


@dataclass(frozen=True, slots=True, eq=False)
class Setting:
    """Settings for wanted rates; status is set, off (nothing wanted), too small, too large or unknown."""

    reach: Reach
    wanted: Array
    setting_pct: Array
    status: NDArray[np.object_]

    def words(self, row: int = 0, dose_mg_l: float | None = None) -> str:
        """What to set, or which machine, dilution or dose (given that of the row) would do where it is out of reach."""
        reach, rate, status = self.reach, float(self.wanted[row]), self.status[row]
        unit = reach.curve.unit
        if status == "unknown":
            return f"{reach.owner}: no setting, the wanted rate is unknown"
        if status == "off":
            return f"{reach.owner}: off, nothing is to be fed"
        if status == "set":
            pct = shown(float(self.setting_pct[row]))
            return f"{reach.owner}: set {pct} % for {both_units(rate, unit)}, {reach.basis}"
        large = status == "too large"
        bound = reach.largest if large else reach.smallest
        share = bound / rate
        ways = [f"take one that {'gives' if large else 'goes down to'} {both_units(rate, unit)}"]
        if unit == "L/h":
            ways.append(f"feed a mixture {shown(1.0 / share)} times as strong" if large
                        else f"thin what is fed: 1 L made up to {shown(share)} L")
        if dose_mg_l is not None:
            ways.append(f"dose {'at most' if large else 'at least'} {shown(share * dose_mg_l)} mg/L")
        return (f"{reach.owner}: {both_units(rate, unit)} is wanted and it gives "
                f"{'no more' if large else 'no less'} than {both_units(bound, unit)}, {reach.basis}; "
                f"{', or '.join(ways)}")


def _reach(owner: str, unit: str, largest: float, held: float, turndown: float | None,
           range_pct: tuple[float, float], curve: Curve | None, formula: str) -> Reach:
    """Reach of a pump or feeder whose settings leave something."""
    _known((largest, held, turndown, *range_pct), owner)
    checked(largest, f"largest rate of {owner} [{unit}]", "Read it off the name plate.")
    checked(1.0 if turndown is None else turndown, f"turndown of {owner}", "A turndown of 10 goes down to a tenth.",
            above=None if turndown is None else 1.0)
    if curve is not None and curve.unit != unit:
        raise InputError(f"calibration curve of {owner} must be in {unit}; found {curve.unit}. Measure a "
                         f"{'volume' if unit == 'L/h' else 'mass'} per time.")
    used = curve or Curve(owner=owner, setting_pct=(0.0, 100.0), rate=(0.0, largest * held), unit=unit)
    low, high = max(range_pct[0], used.setting_pct[0]), min(range_pct[1], used.setting_pct[-1])
    if low >= high:
        raise InputError(f"settings of {owner} must run from a lower to a higher percentage within 0 to 100, and its "
                         f"curve through them; found {low:g} to {high:g} %. Correct the range or the curve.")
    reach = Reach(owner=owner, curve=used, range_pct=(low, high), least=largest / turndown if turndown else 0.0,
                  basis="by its measured curve" if curve else
                  f"as {formula}, which holds only once a measured curve bears it out")
    if reach.smallest >= reach.largest:
        raise InputError(f"smallest rate of {owner} must be below its largest; found {reach.smallest:g} and "
                         f"{reach.largest:g} {unit}. Correct its turndown, stroke or speed.")
    return reach


@dataclass(frozen=True, slots=True, kw_only=True)
class Pump:
    """A metering pump: largest rate at full stroke and speed [L/h], stroke and speed as shares of full, the knob that
    `sets` it (the other is held), range of that knob [%], turndown (largest over smallest rate) and its measured
    curve, if any, which holds at the stroke (or speed) at which it was measured.
    """

    name: str
    largest_l_h: float
    stroke: float = 1.0
    speed: float = 1.0
    sets: str = KNOBS[0]
    range_pct: tuple[float, float] = (0.0, 100.0)
    turndown: float | None = None
    curve: Curve | None = None

    def __post_init__(self):
        if self.sets not in KNOBS:
            raise InputError(f"pump {self.name!r} must be set by {' or '.join(KNOBS)}; found {self.sets!r}. "
                             "Use one of these.")
        checked((self.stroke, self.speed), f"stroke and speed of pump {self.name!r}", "Write 80 % as 0.8.", most=1.0)
        _ = self.reach  # refuses what leaves nothing

    @property
    def reach(self) -> Reach:
        """What it gives over the range of its knob, the other knob held."""
        held = self.stroke if self.sets == "speed" else self.speed
        return _reach(f"pump {self.name!r}", "L/h", self.largest_l_h, held, self.turndown, self.range_pct, self.curve,
                      "largest rate x stroke x speed")


@dataclass(frozen=True, slots=True, kw_only=True)
class Feeder:
    """A feeder of dry product or gas: largest rate [kg/h], range of its setting [%], turndown, measured curve."""

    name: str
    largest_kg_h: float
    range_pct: tuple[float, float] = (0.0, 100.0)
    turndown: float | None = None
    curve: Curve | None = None

    def __post_init__(self):
        _ = self.reach  # refuses what leaves nothing

    @property
    def reach(self) -> Reach:
        """What it gives over the range of its setting."""
        return _reach(f"feeder {self.name!r}", "kg/h", self.largest_kg_h, 1.0, self.turndown, self.range_pct,
                      self.curve, "largest rate x setting")

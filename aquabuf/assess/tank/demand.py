"""How much reagent a waste asks for, and how closely it must be metered to stay inside a window of pH.

Demand is counted in equivalents that react per liter of undiluted waste, so that mass, volume and cost follow by the
figures of the reagent. The water that comes with the feed and the carbon that a carbonate brings are in the balance.
The window is judged on the titration curve C(pH) = base at that pH less base now, without reagent water.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import product

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import exp10
from aquabuf.assess.plant.feed import HOURS_PER_DAY
from aquabuf.assess.tank.reagents import ACID, BASE, Reagent, carrier_of, effective_share
from aquabuf.engine.readout import PH_STEP, Readout
from aquabuf.errors import InputError

__all__ = [
    "Aim", "Demand", "Load", "WindowFit", "aims_of", "demand_eq_l", "demands", "loads_of", "mixed", "ph_after",
    "reagent_gain", "window_fit",
]

Array = NDArray[np.float64]

ROUNDS = 40          # of the secant; two suffice unless a metal changes between solid and dissolved
DONE = 1e-12         # relative change of the dose
CLOSED = 1e-9        # of the need that the balance may leave open
ROUNDING = 1e-14     # eq/L, of the balance itself
L_PER_M3 = 1e3
CASES = ("least", "mean", "most")


# ---------------------------------------------------------------- one reagent in one waste


def mixed(base_eq_l: ArrayLike, amounts: ArrayLike, reagent: Reagent, eq_l: ArrayLike, *,
          carbon_carrier: int | None = None, stripped: float = 0.0) -> tuple[Array, Array, Array]:
    """Base [eq/L] and amounts of a waste with reagent in it, and its volume per volume of waste.

    eq_l : equivalents that react per liter of waste. stripped : share of the reagent's carbon that leaves as gas.
    """
    d, y = np.asarray(eq_l, dtype=float), np.asarray(base_eq_l, dtype=float)
    c: Array = np.asarray(amounts, dtype=float)
    volume = 1.0 + d / reagent.reacting_eq_l
    shape = np.broadcast_shapes(d.shape, y.shape, c.shape[1:])
    carriers, *rest = c.shape
    total: Array = np.array(np.broadcast_to(c.reshape(carriers, *(1,) * (len(shape) - len(rest)), *rest),
                                            (carriers, *shape)))
    if reagent.carbon_per_eq:
        total[carrier_of(reagent, carbon_carrier)] += reagent.carbon_per_eq * (1.0 - stripped) * d
    return (y + reagent.base_per_eq * d) / volume, total / volume, volume


def ph_after(readout: Readout, base_eq_l: ArrayLike, amounts: ArrayLike, reagent: Reagent, eq_l: ArrayLike, *,
             carbon_carrier: int | None = None, stripped: float = 0.0) -> Array:
    """pH of a waste after so many reacting equivalents of a reagent per liter of it. [-]

    The balance alone: a ceiling by solubility is not looked at.
    """
    base, total, _ = mixed(base_eq_l, amounts, reagent, eq_l, carbon_carrier=carbon_carrier, stripped=stripped)
    return readout.ph(base, total)


def demand_eq_l(readout: Readout, base_eq_l: ArrayLike, amounts: ArrayLike, ph: ArrayLike, reagent: Reagent, *,
                carbon_carrier: int | None = None, stripped: float = 0.0) -> Array:
    """Reagent that brings a waste to a pH, in reacting equivalents per liter of waste. [eq/L]

    nan where it cannot: the pH lies on the other side, beyond its ceiling, or beyond what its own solution has. Without
    metals the balance is a straight line in the dose; solid hydroxides bend it where the feed dilutes them.
    """
    x = np.asarray(ph, dtype=float)

    def gap(dose: Array) -> Array:
        base, total, volume = mixed(base_eq_l, amounts, reagent, dose, carbon_carrier=carbon_carrier, stripped=stripped)
        return volume * (readout.base_at(x, total) - base)

    start = gap(np.zeros(np.broadcast_shapes(x.shape, np.shape(base_eq_l), np.shape(amounts)[1:])))
    wanted = np.where(start >= 0.0, BASE, ACID) == reagent.kind
    before, f_before = np.zeros(start.shape), start
    dose = np.where(wanted & np.isfinite(start), np.abs(start), 0.0)
    for _ in range(ROUNDS):
        f = gap(dose)
        run = f - f_before
        step = np.where(run != 0.0, -f * (dose - before) / np.where(run == 0.0, 1.0, run), 0.0)
        before, f_before, dose = dose, f, dose + step
        if not (np.abs(step) > DONE * np.abs(dose)).any():
            break
    with np.errstate(invalid="ignore"):
        works = (wanted | (start == 0.0)) & (dose >= 0.0) & reagent.reaches(x)
        closed = np.abs(gap(np.where(works, dose, 0.0))) <= CLOSED * np.abs(start) + ROUNDING
    return np.where(works & closed & np.isfinite(start), dose, np.nan)


def reagent_gain(readout: Readout, base_eq_l: ArrayLike, amounts: ArrayLike, ph: ArrayLike, reagent: Reagent,
                 eq_l: ArrayLike, *, carbon_carrier: int | None = None, stripped: float = 0.0) -> Array:
    """Change of pH by one more reacting equivalent per liter of waste, at the pH the dose has reached. [pH per eq/L]

    What of the equivalent counts, over the buffer intensity of the mixture with the reagent's carbon in it; the
    water of that one equivalent is left out.
    """
    _, total, volume = mixed(base_eq_l, amounts, reagent, eq_l, carbon_carrier=carbon_carrier, stripped=stripped)
    share = effective_share(readout, reagent, ph, carbon_carrier, stripped)
    return share / (volume * readout.buffer_at(ph, total))


# ---------------------------------------------------------------- loads and aims


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Load:
    """A flow of waste of one strength. amounts : of each carrier, shape (J,)."""

    name: str
    flow_m3_h: float
    base_eq_l: float
    amounts: Array


@dataclass(frozen=True, slots=True, kw_only=True)
class Aim:
    """A pH that the waste is brought to."""

    name: str
    ph: float


def aims_of(low_ph: float, setpoint_ph: float, high_ph: float) -> tuple[Aim, ...]:
    """Set point and both ends of the window. Raises InputError where they do not rise."""
    if not low_ph < setpoint_ph < high_ph:
        raise InputError(f"the set point must lie inside its window; found {setpoint_ph:g} in {low_ph:g} to "
                         f"{high_ph:g}. Correct the window or the set point.")
    return Aim(name="set point", ph=setpoint_ph), Aim(name="low end", ph=low_ph), Aim(name="high end", ph=high_ph)


def loads_of(flows_m3_h: Sequence[float], strengths: Sequence[float], base_eq_l: float, amounts: ArrayLike,
             ) -> tuple[Load, ...]:
    """Every pair of least, mean and most flow with least, mean and most strength, nine in all.

    strengths : multiples of the waste as described, which scale its base and its amounts alike.
    """
    for what, values in (("flows", flows_m3_h), ("strengths", strengths)):
        if len(values) != len(CASES) or not 0.0 <= values[0] <= values[1] <= values[2]:
            raise InputError(f"{what} must be three numbers that rise from least over mean to most; found "
                             f"{list(values)}. Repeat the mean where it does not vary.")
    c = np.asarray(amounts, dtype=float)
    pairs = product(zip(CASES, flows_m3_h, strict=True), zip(CASES, strengths, strict=True))
    return tuple(Load(name=f"{flow} flow, {strength} strength", flow_m3_h=q, base_eq_l=s * base_eq_l, amounts=s * c)
                 for (flow, q), (strength, s) in pairs)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Demand:
    """What one reagent must give for one load and one aim; figures are nan where it cannot, with the reason in `words`.

    strong_eq_l : strong base that the waste lacks, without dilution; negative where it needs acid. [eq/L]
    eq_l : reacting equivalents per liter of waste. product_kg_h : as delivered. fed_l_h : what is pumped, 0 if dry.
    """

    reagent: Reagent | None
    load: Load
    aim: Aim
    strong_eq_l: float
    eq_l: float
    product_kg_h: float
    fed_l_h: float
    hours_per_day: float
    words: str

    @property
    def kg_d(self) -> float:
        """Product as delivered. [kg/d]"""
        return self.product_kg_h * self.hours_per_day

    @property
    def cost_d(self) -> float:
        """Cost of a day; nan without a price."""
        price = self.reagent.stock.price_per_kg if self.reagent else None
        return np.nan if price is None else self.kg_d * price


def demands(readout: Readout, loads: Iterable[Load], aims: Iterable[Aim], reagents: Sequence[Reagent], *,
            carbon_carrier: int | None = None, stripped: float = 0.0, hours_per_day: float = HOURS_PER_DAY,
            ) -> tuple[Demand, ...]:
    """A row per load, aim and reagent of the kind that the sign of the need asks for; one that says so where none is.

    A load that is at the aim already needs nothing of either kind, and gets its row with the first reagent.
    """
    found = []
    for load, aim in product(loads, aims):
        need = float(readout.base_at(aim.ph, load.amounts)) - load.base_eq_l
        kind = BASE if need >= 0.0 else ACID
        fitting: list[Reagent | None] = [r for r in reagents if r.kind == kind or need == 0.0]
        for reagent in fitting or [None]:
            found.append(_row(readout, load, aim, need, kind, reagent, carbon_carrier, stripped, hours_per_day))
    return tuple(found)


def _row(readout: Readout, load: Load, aim: Aim, need: float, kind: str, reagent: Reagent | None,
         carbon_carrier: int | None, stripped: float, hours_per_day: float) -> Demand:
    words, eq, kg_h, l_h = "", np.nan, np.nan, np.nan
    if reagent is None:
        words = f"pH {aim.ph:g} asks for {kind} here, and no {kind} is named"
    else:
        eq = float(demand_eq_l(readout, load.base_eq_l, load.amounts, aim.ph, reagent, carbon_carrier=carbon_carrier,
                               stripped=stripped))
        eq_h = eq * L_PER_M3 * load.flow_m3_h
        kg_h, l_h = eq_h * reagent.kg_per_eq, eq_h / reagent.reacting_eq_l
        words = "" if np.isfinite(eq) else f"{reagent.name} does not bring this waste to pH {aim.ph:g}"
    return Demand(reagent=reagent, load=load, aim=aim, strong_eq_l=need, eq_l=eq, product_kg_h=kg_h, fed_l_h=l_h,
                  hours_per_day=hours_per_day, words=words)


# ---------------------------------------------------------------- the window


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class WindowFit:
    """How a window of pH looks on the axis of reagent; arrays have the shape of the loads.

    demand_eq_l : strong base to the set point, negative for acid. tolerance_eq_l : reagent between both ends.
    share_of_demand : tolerance over demand. low_share, high_share : the same from the set point to either end.
    buffer_eq_l_ph, gain_ph_per_eq_l : at the set point. steepest_ph, steepest_gain_ph_per_eq_l : within the window.
    halving_ph : set point that has as much reagent to either end.
    demand_over_ph : demand over what pH alone would tell, 10^-pH of an acid waste or the hydroxide of an alkaline one.
    """

    low_ph: float
    high_ph: float
    setpoint_ph: float
    demand_eq_l: Array
    tolerance_eq_l: Array
    share_of_demand: Array
    low_share: Array
    high_share: Array
    buffer_eq_l_ph: Array
    gain_ph_per_eq_l: Array
    steepest_ph: Array
    steepest_gain_ph_per_eq_l: Array
    halving_ph: Array
    demand_over_ph: Array


def window_fit(readout: Readout, base_eq_l: ArrayLike, amounts: ArrayLike, low_ph: float, high_ph: float,
               setpoint_ph: float) -> WindowFit:
    """The window on the titration curve of a waste, by strong base or acid without its water.

    Tolerance is C(high) - C(low), gain is 1 over buffer intensity (Van Slyke 1922). Shares are nan where nothing is
    needed. Raises InputError where the set point is not inside the window.
    """
    aims_of(low_ph, setpoint_ph, high_ph)
    y, c = np.asarray(base_eq_l, dtype=float), np.asarray(amounts, dtype=float)
    at_low, at_set, at_high = (readout.base_at(ph, c) for ph in (low_ph, setpoint_ph, high_ph))
    need = at_set - y
    over = np.where(need == 0.0, np.nan, np.abs(need))
    buffer = readout.buffer_at(setpoint_ph, c) + 0.0 * y
    grid = np.linspace(low_ph, high_ph, 1 + max(2, round((high_ph - low_ph) / PH_STEP)))
    along = grid.reshape((-1,) + (1,) * (c.ndim - 1))
    intensity = readout.buffer_at(along, c[:, None])
    least = intensity.min(axis=0) + 0.0 * y
    ph = readout.ph(y, c)
    seen = np.where(need >= 0.0, exp10(-ph), readout.c_oh * exp10(ph))
    return WindowFit(
        low_ph=low_ph, high_ph=high_ph, setpoint_ph=setpoint_ph, demand_eq_l=need,
        tolerance_eq_l=at_high - at_low + 0.0 * y, share_of_demand=(at_high - at_low) / over,
        low_share=(at_set - at_low) / over, high_share=(at_high - at_set) / over,
        buffer_eq_l_ph=buffer, gain_ph_per_eq_l=1.0 / buffer,
        steepest_ph=grid[intensity.argmin(axis=0)] + 0.0 * y, steepest_gain_ph_per_eq_l=1.0 / least,
        halving_ph=readout.ph(0.5 * (at_low + at_high) + 0.0 * y, c), demand_over_ph=np.abs(need) / seen)

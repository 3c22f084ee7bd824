"""What may stand in for another tank: bicarbonate that widens the window, or a weak trim reagent beside the strong one.

Bicarbonate x [mol/L of waste] changes every term of the balance by a straight line in x, so the amount that lets one
feed error fit into the window has a closed form:

    e |D + x (c_mid - 1)| = (W + x (c_high - c_low)) / 2
    x = (e |D| - W / 2) / ((c_high - c_low) / 2 - s e (c_mid - 1))

D : demand to the middle of the window on the axis of reagent, of sign s; W : reagent across the window; c : base held
by a mole of carbon; c_mid : mean of both ends. Follows from the proton balance, closed to air.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from aquabuf.assess.limits import EDGE
from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.rules import positive, rule
from aquabuf.assess.tank.stages import DemandCurve, Window, curve_of, residual_eq_l
from aquabuf.chem.products import molar_mass
from aquabuf.engine.readout import GRID_PH
from aquabuf.errors import InputError

__all__ = ["BufferAid", "TrimAid", "aids_words", "bicarbonate_aid", "trim_aid", "with_bicarbonate"]

BICARBONATE = "NaHCO3"


@dataclass(frozen=True, slots=True, kw_only=True)
class BufferAid:
    """Bicarbonate that lets tanks of one feed error each keep the window; nan where no amount does.

    tanks : that are then enough. bicarbonate_eq_l : per liter of waste, of which a mole is an equivalent.
    demand_eq_l : strong base still to be fed (negative: acid). aim : new middle of the window. worth : see `words`.
    """

    tanks: int
    bicarbonate_eq_l: float
    kg_m3: float
    share_of_demand: float
    demand_eq_l: float
    aim: float
    tolerance_eq_l: float
    worth: bool
    words: str


def with_bicarbonate(curve: DemandCurve, mol_l: float) -> DemandCurve:
    """The curve of a waste with bicarbonate in it. Raises InputError where carbon is no part of its tables."""
    if curve.carbon is None:
        raise InputError("bicarbonate needs the base that carbon holds along the curve; none is given. Name the "
                         "carrier of inorganic carbon.")
    carbon = curve.carbon
    return curve_of(lambda ph: curve.base + mol_l * carbon, curve.base_eq_l + mol_l, lambda ph: carbon)


def bicarbonate_aid(curve: DemandCurve, low: float, high: float, error: float, tanks: int = 1) -> BufferAid:
    """Least bicarbonate with which so many tanks leave no more than half the window, aimed at its middle.

    What a tank leaves is counted as in `residual_eq_l`. CO2 that strips takes the buffer with it, so the tank must not
    be aerated. low, high : the window.
    """
    plain = with_bicarbonate(curve, 0.0)
    at_low, at_high = (float(v) for v in plain.base_at([low, high]))
    carbon = np.zeros_like(GRID_PH) if plain.carbon is None else plain.carbon
    c_low, c_high = (float(v) for v in np.interp([low, high], GRID_PH, carbon))
    need = 0.5 * (at_low + at_high) - plain.base_eq_l
    left = float(residual_eq_l(1.0, error, tanks))
    short = left * abs(need) - 0.5 * (at_high - at_low)
    gains = 0.5 * (c_high - c_low) - np.sign(need) * left * (0.5 * (c_low + c_high) - 1.0)
    x = 0.0 if short <= 0.0 else short / gains if gains > 0.0 else np.nan
    return _buffer_aid(plain, low, high, x, tanks, need)


def _buffer_aid(plain: DemandCurve, low: float, high: float, x: float, tanks: int, need: float) -> BufferAid:
    limit = rule("worth adding")
    share = x / abs(need) if need else np.nan
    if np.isnan(x):
        return BufferAid(tanks=tanks, bicarbonate_eq_l=x, kg_m3=x, share_of_demand=x, demand_eq_l=x, aim=x,
                         tolerance_eq_l=x, worth=False, words="no amount of bicarbonate does it in this window")
    helped = with_bicarbonate(plain, x)
    window = Window.halving(helped, low, high)
    kg = x * molar_mass(BICARBONATE)  # g/L is kg/m3
    worth = bool(limit.keeps(share))
    words = "none is needed" if x == 0.0 else (
        f"{shown(1e3 * x)} meq/L of bicarbonate, {shown(kg)} kg/m³ as {BICARBONATE}, {shown(100 * share)} % of the "
        f"demand, let {tanks} tank{'s' if tanks > 1 else ''} do; {'worth' if worth else 'not worth'} more than another "
        f"tank (worth it up to {100 * limit.high:g} %: {limit.source}). Not with aeration: "
        "CO2 that strips takes the buffer along")
    return BufferAid(tanks=tanks, bicarbonate_eq_l=x, kg_m3=kg, share_of_demand=share,
                     demand_eq_l=float(helped.demand(window.aim)), aim=window.aim,
                     tolerance_eq_l=window.tolerance_eq_l(helped), worth=worth, words=words)


@dataclass(frozen=True, slots=True, kw_only=True)
class TrimAid:
    """A second, weaker feed into the last tank.

    span_eq_l : of the trim feed, per liter of waste. normality_eq_l : of its reagent, so that a feeder of the size of
    the strong one has this span. left_eq_l : error that it leaves; works : within the tolerance.
    """

    span_eq_l: float
    normality_eq_l: float
    thinned: float
    left_eq_l: float
    tolerance_eq_l: float
    works: bool
    words: str


def trim_aid(curve: DemandCurve, window: Window, error: float, normality_eq_l: float, *,
             goes_in_eq_l: float | None = None) -> TrimAid:
    """A trim feed that makes up for the error of the strong feed either way, and what it leaves of that.

    normality_eq_l : of the strong reagent. goes_in_eq_l : demand of the tank it stands in; of the waste if not given.
    """
    positive(normality_eq_l, "normality of the reagent [eq/L]", "Give that of what is pumped.")
    dose = abs(float(curve.demand(window.aim))) if goes_in_eq_l is None else abs(goes_in_eq_l)
    span = rule("fine cover").value * float(residual_eq_l(dose, error))
    left, tolerance = float(residual_eq_l(span, error)), window.tolerance_eq_l(curve)
    works = left <= tolerance * (1.0 + EDGE)
    thinned = dose / span
    words = (f"a trim feed of {shown(1e3 * span)} meq/L, its reagent thinned {shown(thinned)} times to "
             f"{normality_eq_l / thinned:.3g} eq/L for a pump of the same size, leaves {left:.2g} eq/L: "
             f"{'within' if works else 'not within'} the tolerance of {tolerance:.2g} eq/L. It stands in for a tank "
             "as to the feed only; the loop has the gain of one tank")
    return TrimAid(span_eq_l=span, normality_eq_l=normality_eq_l / thinned, thinned=thinned, left_eq_l=left,
                   tolerance_eq_l=tolerance, works=works, words=words)


def aids_words(buffer: BufferAid | None, trim: TrimAid) -> str:
    """Which of the two beats another tank, in words."""
    if buffer is not None and buffer.bicarbonate_eq_l == 0.0:
        return "neither bicarbonate nor a trim feed is needed"
    if trim.works:
        other = "; bicarbonate would also lower the gain of the loop" if buffer is not None and buffer.worth else ""
        return f"a trim feed beats another tank as far as the feed decides{other}"
    if buffer is not None and buffer.worth:
        return "bicarbonate beats another tank; a trim feed alone does not do"
    return "another tank: neither a trim feed nor little enough bicarbonate does"

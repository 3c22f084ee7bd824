"""How many stirred tanks in series, and what each aims at.

A feeder that is off by a share e of what it was asked for leaves that share of the demand; the next tank sees only the
rest. Counting on the axis of reagent, not of pH, makes this exact for any titration curve:

    rest after n tanks = e^n |demand|                                 base and acid in every tank
    r >= a e (R - r),   largest rest = r + e (R - r)                  one reagent in every tank

R : largest demand that comes in; r : what the tank leaves on purpose, so that the next feeder is always asked for
something, and within its turndown T. Before the last tank a = q = (T + 1) / (T - 1). A tank in between gives only
1 / (1 + e a) of what comes in, so that the one before it must leave more: a' = (q + 1) (1 + e a) - 1. All of it follows
from the definition of e.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.limits import EDGE
from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.rules import TankRule, rule, rules_in
from aquabuf.engine.readout import GRID_PH, Readout
from aquabuf.errors import InputError

__all__ = [
    "DemandCurve", "Opinion", "StageChoice", "Window", "choose_stages", "curve_of", "curve_of_readout", "opinions",
    "remaining_share", "residual_eq_l", "residual_ph", "set_points", "stages_by_residual", "stages_within_turndown",
]

Array = NDArray[np.float64]

NOT_TOLD = 0   # a rule that says nothing about this stream
ROUNDING = 1e-9  # of base, as in the tables
PH_PLACES = 3  # to which a distance from the window is known


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DemandCurve:
    """A waste on the axis of reagent. base : at GRID_PH, of a liter of undiluted waste; base_eq_l : as it comes. [eq/L]

    carbon : base that a mole of inorganic carbon has taken up at GRID_PH; None where it is not known.
    """

    base: Array
    base_eq_l: float
    carbon: Array | None = None

    def base_at(self, ph: ArrayLike) -> Array:
        """Base of the waste brought to a pH. [eq/L]"""
        return np.interp(np.asarray(ph, dtype=float), GRID_PH, self.base, left=np.nan, right=np.nan)

    def demand(self, ph: ArrayLike) -> Array:
        """Strong base to a pH, negative for acid. [eq/L]"""
        return self.base_at(ph) - self.base_eq_l

    def ph_of(self, base_eq_l: ArrayLike) -> Array:
        """pH of the waste with this base; nan beyond -1 or 15."""
        return np.interp(np.asarray(base_eq_l, dtype=float), self.base, GRID_PH, left=np.nan, right=np.nan)

    @property
    def inlet_ph(self) -> float:
        """pH of the waste as it comes."""
        return float(self.ph_of(self.base_eq_l))

    def buffer(self, ph: ArrayLike) -> Array:
        """Slope of base against pH. [eq/L per pH]"""
        return np.interp(np.asarray(ph, dtype=float), GRID_PH, np.gradient(self.base, GRID_PH))


def curve_of(base_at: Callable[[Array], Array], base_eq_l: float,
             carbon_at: Callable[[Array], Array] | None = None) -> DemandCurve:
    """The curve of a waste from a function of pH. Raises InputError where it does not rise with pH."""
    base = np.asarray(base_at(GRID_PH), dtype=float)
    falls = np.diff(base) < -ROUNDING * (1.0 + np.abs(base[1:]))
    if falls.any() or not np.isfinite(base).all():
        where = f"fall at pH {GRID_PH[int(falls.argmax())]:.2f}" if falls.any() else "value that is no number"
        raise InputError(f"the base of a waste must rise with pH all along; found a {where}. Correct its curve.")
    base = np.maximum.accumulate(base)
    if not base[0] <= base_eq_l <= base[-1]:
        raise InputError(f"the base of a waste must lie on its curve, {base[0]:.4g} to {base[-1]:.4g} eq/L; found "
                         f"{base_eq_l:.4g} eq/L. Correct one of them.")
    return DemandCurve(base=base, base_eq_l=base_eq_l, carbon=None if carbon_at is None else carbon_at(GRID_PH))


def curve_of_readout(readout: Readout, base_eq_l: float, amounts: ArrayLike, carbon_carrier: int | None = None,
                     ) -> DemandCurve:
    """The curve of a waste from the tables. carbon_carrier : row of the amounts that is inorganic carbon."""
    c = np.asarray(amounts, dtype=float)
    held = None if carbon_carrier is None else readout.held[carbon_carrier]
    return curve_of(lambda ph: readout.base_at(ph, c.reshape((-1,) + (1,) * ph.ndim)), base_eq_l,
                    None if held is None else (lambda ph: np.interp(ph, GRID_PH, held)))


@dataclass(frozen=True, slots=True, kw_only=True)
class Window:
    """pH that must be kept, and the aim inside it. `Window.halving` finds the aim."""

    low: float
    high: float
    aim: float

    def __post_init__(self):
        if not self.low < self.aim < self.high:
            raise InputError(f"the aim must lie inside the window; found pH {self.aim:g} in {self.low:g} to "
                             f"{self.high:g}. Correct the window or the aim.")

    @classmethod
    def halving(cls, curve: DemandCurve, low: float, high: float) -> Window:
        """The window with the aim that has as much reagent to either end."""
        return cls(low=low, high=high, aim=float(curve.ph_of(0.5 * (curve.base_at(low) + curve.base_at(high)))))

    def tolerance_eq_l(self, curve: DemandCurve) -> float:
        """Reagent from the aim to the nearer end. [eq/L]"""
        low, aim, high = (float(v) for v in curve.base_at([self.low, self.aim, self.high]))
        return min(aim - low, high - aim)

    def distance(self, ph: float) -> float:
        """How far a pH lies outside the window; 0 inside."""
        return round(max(self.low - ph, ph - self.high, 0.0), PH_PLACES)


# ---------------------------------------------------------------- feed error


def _share(error: float) -> float:
    if not 0.0 < error < 1.0:
        raise InputError(f"the feed error must be a share above 0 and below 1; found {error:g}. Write 1 % as 0.01.")
    return error


def residual_eq_l(demand_eq_l: ArrayLike, error: float, tanks: int = 1) -> Array:
    """Demand that ideal tanks in series leave, each off by a share of its own: error^n |demand|. [eq/L]"""
    return np.abs(np.asarray(demand_eq_l, dtype=float)) * _share(error) ** tanks


def residual_ph(curve: DemandCurve, aim: float, error: float, tanks: int = 1) -> tuple[float, float]:
    """Lowest and highest pH behind so many tanks that aim at a pH. [-]"""
    rest = float(residual_eq_l(curve.demand(aim), error, tanks))
    low, high = curve.ph_of(float(curve.base_at(aim)) + np.array([-rest, rest]))
    return float(low), float(high)


def stages_by_residual(demand_eq_l: float, tolerance_eq_l: float, error: float) -> int:
    """Least number of tanks whose rest is within a tolerance: error^n |demand| <= tolerance, 1 or more."""
    if not tolerance_eq_l > 0.0:
        raise InputError(f"the tolerance must be above 0 eq/L; found {tolerance_eq_l:g}. Widen the window.")
    n = np.log(max(abs(demand_eq_l), tolerance_eq_l) / tolerance_eq_l) / -np.log(_share(error))
    return max(1, int(np.ceil(n - EDGE)))


def _least_left(error: float, turndown: float, behind: int) -> float:
    """What a tank must leave, over its own error (`a` of the module text), with so many tanks behind it."""
    if not turndown > 1.0:
        raise InputError(f"the turndown must be above 1; found {turndown:g}. It is the largest over the smallest rate.")
    q = 1.0 if np.isinf(turndown) else (turndown + 1.0) / (turndown - 1.0)
    a = q
    for _ in range(behind - 1):
        a = (q + 1.0) * (1.0 + _share(error) * a) - 1.0
    return a


def remaining_share(error: float, turndown: float, behind: int = 1) -> float:
    """Largest demand a tank passes on over the largest it got, when it leaves no more than it must.

    behind : tanks that follow it. See the module text.
    """
    a = _least_left(error, turndown, behind)
    return _share(error) * (1.0 + a) / (1.0 + error * a)


def stages_within_turndown(demand_eq_l: float, tolerance_eq_l: float, error: float, turndown: float) -> int | None:
    """Least number of tanks with one reagent each; None where more tanks do not help or more than are looked at."""
    rest = abs(demand_eq_l)
    for n in range(1, int(rule("most tanks").high) + 1):
        if _share(error) * rest <= tolerance_eq_l * (1.0 + EDGE):
            return n
        rest *= remaining_share(error, turndown, n)
    return None


def set_points(curve: DemandCurve, window: Window, tanks: int, error: float, turndown: float) -> tuple[float, ...]:
    """pH that each tank aims at, the last at the aim of the window.

    What a tank leaves lies between the least that keeps the next feeder within its turndown and the most that the rest
    of the train can take and that leaves its own feeder enough to do; of that, the half next to the least (by ratio) is
    used, and there the pH at which the curve has the lowest gain. Where the train is too short the least is left.
    """
    need, takes = float(curve.demand(window.aim)), [window.tolerance_eq_l(curve) / _share(error)]
    for behind in range(1, tanks - 1):  # largest demand that so many tanks and one more can bring home
        takes.append(takes[-1] / remaining_share(error, turndown, behind))
    comes, off, aims = abs(need), 0.0, []
    for behind in range(tanks - 1, 0, -1):
        a = error * _least_left(error, turndown, behind)
        least = a * comes / (1.0 + a)
        own = comes - off * (1.0 + _least_left(error, turndown, 1))  # more would starve the feeder of this tank
        most = max(least, min((takes[behind - 1] - error * comes) / (1.0 - error), own))
        ends = curve.ph_of(float(curve.base_at(window.aim)) - np.sign(need) * np.array([least, np.sqrt(least * most)]))
        among = np.linspace(float(ends.min()), float(ends.max()), 101)
        ph = float(among[np.argmax(curve.buffer(among))])
        aims.append(ph)
        left = abs(float(curve.base_at(window.aim) - curve.base_at(ph)))
        off = error * (comes - left)
        comes = left + off
    return (*aims, window.aim)


# ---------------------------------------------------------------- opinions


@dataclass(frozen=True, slots=True, kw_only=True)
class Opinion:
    """What one rule says. tanks : 0 where it says nothing; at_least : more may be needed by the same rule."""

    rule: TankRule
    tanks: int
    at_least: bool
    words: str

    @property
    def source(self) -> str:
        """Where the rule comes from."""
        return self.rule.told_by


def _opinion(r: TankRule, tanks: int, words: str, at_least: bool = False) -> Opinion:
    return Opinion(rule=r, tanks=tanks, at_least=at_least, words=words)


def opinions(curve: DemandCurve, window: Window, *, error: float, turndown: float, flow_m3_h: float,
             ) -> tuple[Opinion, ...]:
    """What each rule says of the number of tanks, in the order of the table. flow_m3_h : the largest."""
    ph, need, tolerance = curve.inlet_ph, float(curve.demand(window.aim)), window.tolerance_eq_l(curve)
    off, most = window.distance(ph), int(rule("most tanks").high)
    n = stages_by_residual(need, tolerance, error)
    held = stages_within_turndown(need, tolerance, error, turndown)
    left = (f"{100 * error:.3g} % of {abs(need):.3g} eq/L is {residual_eq_l(need, error):.3g} eq/L, the nearer end of "
            f"the window {tolerance:.3g} eq/L away")
    far = rule("distance")
    swing = np.log10(turndown)
    return (
        _opinion(rule("residual"), n, left),
        _opinion(rule("within turndown"), held or NOT_TOLD, f"{left}; one reagent, turndown {turndown:g}" if held else
                 f"{left}; no number up to {most} does with one reagent and a turndown of {turndown:g}"),
        _opinion(far, 2 if off > far.value else 1, f"inlet pH {ph:.2f} is {off:.2f} from the window", off > far.value),
        _opinion(rule("rangeability"), max(1, int(np.ceil(off / swing - EDGE))),
                 f"turndown {turndown:g} takes out {swing:.2f} of {off:.2f} pH; buffers ask for less"),
        _by_inlet(ph), _opinion(rule("continuous"), int(rule("continuous").low), rule("continuous").words, True),
        _single(flow_m3_h, off))


def _by_inlet(ph: float) -> Opinion:
    for r in rules_in("inlets"):
        if r.keeps(ph):
            return _opinion(r, int(r.value), f"inlet pH {ph:.2f} lies in {r.low:g} to {r.high:g}")
    last = rules_in("inlets")[-1]
    return _opinion(last, int(last.value), f"inlet pH {ph:.2f} lies beyond {last.low:g} to {last.high:g}", True)


def _single(flow_m3_h: float, off: float) -> Opinion:
    flow, distance = rule("single flow"), rule("single distance")
    holds = [f"{x:.3g} {r.unit} is {'within' if r.keeps(x) else 'above'} {r.high:g} {r.unit}"
             for r, x in ((flow, flow_m3_h), (distance, off))]
    one = flow.keeps(flow_m3_h) or distance.keeps(off)
    return _opinion(flow, 1 if one else 2, f"{', '.join(holds)}; the rule joins both by or", not one)


@dataclass(frozen=True, slots=True, kw_only=True)
class StageChoice:
    """Number of tanks, what each aims at, and why. reaches : whether that number is enough on paper.

    left_eq_l : error behind the last tank, at worst; tolerance_eq_l : what the window has.
    """

    tanks: int
    set_points: tuple[float, ...]
    reaches: bool
    left_eq_l: float
    tolerance_eq_l: float
    words: str
    opinions: tuple[Opinion, ...]


def choose_stages(curve: DemandCurve, window: Window, *, error: float, turndown: float, flow_m3_h: float,
                  wanted: int | None = None, aims: Sequence[float] | None = None) -> StageChoice:
    """The number of tanks by titration curve, feed error and turndown; rules of thumb only raise one tank to two.

    wanted : number that is set already. aims : set points that are set, one per tank, the last within the window.
    """
    if aims:
        window = replace(window, aim=float(aims[-1]))
    told = opinions(curve, window, error=error, turndown=turndown, flow_m3_h=flow_m3_h)
    need, tolerance = float(curve.demand(window.aim)), window.tolerance_eq_l(curve)
    counted = stages_within_turndown(need, tolerance, error, turndown)
    spare, two = rule("spare in one tank"), rule("continuous")
    if wanted is not None:
        tanks, why = wanted, "as set"
    elif counted is None:
        tanks = int(rule("most tanks").high)
        why = (f"no number up to {tanks} brings the feed error within the window: feed more closely, "
               "add a buffer or widen the window")
    elif counted > 1:
        tanks, why = counted, f"curve and feed error need {counted}; {told[1].words}"
    elif error * abs(need) <= spare.high * tolerance:
        took = shown(100.0 * error * abs(need) / tolerance)
        tanks, why = 1, (f"the feed error takes {took} % of the tolerance, and one may do up to {100 * spare.high:g} % "
                         f"({spare.source}), though a manual asks for {int(two.low)} ({two.told_by})")
    else:
        tanks, why = int(two.low), f"one would just do, and {two.words} ({two.told_by})"
    points = set_points(curve, window, tanks, error, turndown) if not aims else _own(aims, tanks)
    left = _left(curve, window, points, error)
    return StageChoice(tanks=tanks, set_points=points, reaches=left <= tolerance * (1.0 + 1e-6), left_eq_l=left,
                       tolerance_eq_l=tolerance, words=f"{tanks} tank{'s' if tanks > 1 else ''}: {why}", opinions=told)


def _own(aims: Sequence[float], tanks: int) -> tuple[float, ...]:
    if len(aims) != tanks:
        raise InputError(f"there must be one set point per tank ({tanks}); found {len(aims)}. Correct one of them.")
    return tuple(float(a) for a in aims)


def _left(curve: DemandCurve, window: Window, points: Sequence[float], error: float) -> float:
    """Error behind the last tank, every tank off the same way; what a tank overshoots counts as demand too."""
    comes, at = 0.0, curve.base_eq_l
    for ph in points:
        base = float(curve.base_at(ph))
        comes, at = error * (abs(base - at) + comes), base
    return comes

"""Volume and shape of the tanks: residence time by reagent, depth and diameter, walls, unequal sizes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.reagents import Reagent, Rule, Span
from aquabuf.assess.tank.rules import Standing, TankRule, positive, rule, rules_in, stands

__all__ = [
    "MIN_PER_H", "Residence", "Vessel", "equal_depth_m", "residence", "round_vessel", "rounded_up_m", "unequal_volumes",
    "volume_m3",
]

MIN_PER_H = 60.0
WALL_STEP_M = 0.1  # heights are rounded up to it
_ROUNDING = 1e-9   # of a size, below which it is not rounded up


# ---------------------------------------------------------------- residence time


@dataclass(frozen=True, slots=True, kw_only=True)
class Residence:
    """Residence time of a tank. rules : all that touch it; conflict : how they disagree, or "". [min]"""

    minutes: float
    source: str
    conflict: str
    rules: tuple[Rule | TankRule, ...]
    words: str


def residence(reagent: Reagent, *, precipitates: bool = False, wanted_min: float | None = None) -> Residence:
    """The residence time to design for: that of the reagent's table, longer where metals fall out, or the wanted one.

    precipitates : whether metal hydroxide falls out in the tank.
    """
    span, falls = reagent.residence_min, rule("precipitation")
    told: list[Rule | TankRule] = [r for r in reagent.rules if r.quantity == "residence_min"]
    told += [r for r in rules_in("residence") if precipitates or r is not falls]
    if wanted_min is not None:
        minutes, source = positive(wanted_min, "residence time [min]", "Give it in minutes."), "as set"
    elif precipitates and not span.usual >= falls.low:
        minutes, source = falls.low, falls.told_by
    else:
        minutes, source = positive(span.usual, f"residence time with {reagent.name!r} [min]", "Set one."), span.source
    conflict = _conflict(told, span)
    short = f"; shorter than any rule, {span.low:g} min or more" if minutes < span.low else ""
    return Residence(minutes=minutes, source=source, conflict=conflict, rules=tuple(told),
                     words=f"{minutes:g} min with {reagent.name} ({source}){short}")


def _conflict(told: Sequence[Rule | TankRule], span: Span) -> str:
    """Sources whose ranges leave no common figure."""
    ends = [(r.low if np.isfinite(r.low) else 0.0, r.high if np.isfinite(r.high) else np.inf, r) for r in told]
    latest, earliest = max(ends, key=lambda e: e[0]), min(ends, key=lambda e: e[1])
    if latest[0] <= earliest[1]:
        return ""
    return (f"sources disagree: at most {earliest[1]:g} min ({earliest[2].source}) and at least {latest[0]:g} min "
            f"({latest[2].source}); taken {span.usual:g} min ({span.source})")


def volume_m3(flow_m3_h: float, minutes: float) -> float:
    """Volume of liquid that a flow takes so long to pass. [m3]"""
    flow = positive(flow_m3_h, "flow [m3/h]", "Give the flow that the tank is sized for.")
    return flow * positive(minutes, "residence time [min]", "Give it in minutes.") / MIN_PER_H


def unequal_volumes(volumes_m3: Sequence[float]) -> tuple[tuple[float, ...], str]:
    """Volumes of tanks in a row, each raised until it is larger than the one before by the shipped ratio; and why."""
    r = rule("unequal volumes")
    out: list[float] = []
    for v in volumes_m3:
        positive(v, "volume of a tank [m3]", "Give its liquid.")
        out.append(max(v, r.low * out[-1]) if out else v)
    raised = [i + 1 for i, (a, b) in enumerate(zip(volumes_m3, out, strict=True)) if b > a]
    if not raised:
        return tuple(out), ""
    which = " and ".join(str(i) for i in raised)
    return tuple(out), (f"tank{'s' if len(raised) > 1 else ''} {which} made at least {r.low:g} times as large as the "
                        f"one before: {r.words} ({r.told_by})")


# ---------------------------------------------------------------- shape


@dataclass(frozen=True, slots=True, kw_only=True)
class Vessel:
    """A round upright tank for a volume of liquid. limited : the depth allowed decides, not the diameter. [m]"""

    volume_m3: float
    diameter_m: float
    liquid_m: float
    freeboard_m: float
    wall_m: float
    limited: bool
    standings: tuple[Standing, ...]
    words: str

    @property
    def floor_m2(self) -> float:
        """Area of the floor."""
        return 0.25 * np.pi * self.diameter_m**2


def equal_depth_m(volume: float) -> float:
    """Diameter of a cylinder that is as deep as wide: (4 V / pi)^(1/3). [m]"""
    return float(np.cbrt(4.0 * volume / np.pi))


def rounded_up_m(diameter_m: float) -> float:
    """A diameter rounded up to the step of the table. [m]"""
    small, large = rule("small diameters"), rule("large diameters")
    return _up(diameter_m, small.value if diameter_m <= small.high * (1.0 + _ROUNDING) else large.value)


def _up(value: float, step: float) -> float:
    return round(float(np.ceil(value / step * (1.0 - _ROUNDING))) * step, 6)


def round_vessel(volume: float, depth_most_m: float, *, foams: bool = False) -> Vessel:
    """A tank as deep as wide, or wider where the site allows less depth; diameter and wall rounded up.

    depth_most_m : deepest liquid that the site allows. foams : whether carbon dioxide bubbles off.
    """
    positive(volume, "volume of a tank [m3]", "Give its liquid.")
    depth = positive(depth_most_m, "largest depth of liquid [m]", "Ask what site and crane allow.")
    same = equal_depth_m(volume)
    limited = same > depth * (1.0 + _ROUNDING)
    diameter = rounded_up_m(float(np.sqrt(4.0 * volume / (np.pi * depth))) if limited else same)
    liquid = volume / (0.25 * np.pi * diameter**2)
    free = rule("foam freeboard" if foams else "freeboard")
    wall = _up(liquid + free.value, WALL_STEP_M)
    told = (stands("equal depth", "depth over diameter", liquid / diameter),
            stands("deeper than wide", "depth over diameter", liquid / diameter), stands("depth", "depth", liquid))
    return Vessel(volume_m3=volume, diameter_m=diameter, liquid_m=liquid, freeboard_m=wall - liquid, wall_m=wall,
                  limited=limited, standings=told,
                  words=f"{shown(volume)} m³: {diameter:g} m wide, {liquid:.2f} m of liquid, wall {wall:.1f} m "
                        f"({'depth limited by the site' if limited else 'as deep as wide'}, diameter rounded up; "
                        f"freeboard at least {free.value:g} m: {free.words}, {free.source})")

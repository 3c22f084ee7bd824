"""The way of the water through the works in the plane of carbon and alkalinity, with lines of equal pH."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.quantities import find_quantity, in_unit
from aquabuf.assess.plant.stream import Stream
from aquabuf.assess.plant.train import Passed
from aquabuf.engine.water import Water
from aquabuf.report.dose_lines import sentence
from aquabuf.report.dose_page import POINTS
from aquabuf.report.dose_panels import SMALL
from aquabuf.report.style import CALM, FAINT, GRAY, INK, WARNED

__all__ = ["Leg", "ladder_key", "ladder_points", "legs_of", "ph_line", "plot_ladder"]

Array = NDArray[np.float64]

LEVELS = (4.5, 5.0, 5.5, 6.0, 6.25, 6.5, 6.75, 7.0, 7.25, 7.5, 7.75, 8.0, 8.5, 9.0, 9.5, 10.0, 10.5, 11.0, 11.5, 12.0)
MARGIN = 0.16          # of the span, on every side
LEAST_SPAN = 0.2       # of the largest value, so that works that move little are not blown up
NEAREST = 0.055        # between labels of lines, in parts of the axes
TOGETHER = 0.03        # of the axes, within which waters have their numbers together
BOW, LEAST_LEG = 0.3, 14.0  # of legs that meet, in parts of their length; points, of a leg that has words
SAME = 1e-9            # mol/L and eq/L, within which two waters are one point
EXACT = 1e-12          # within which the products alone make the step


@dataclass(frozen=True, slots=True)
class Leg:
    """One stretch of the way: of a step, or of one product within it. Ends as carbon [mol/L] and alkalinity [eq/L]."""

    number: int
    words: str
    start: tuple[float, float]
    end: tuple[float, float]

    @property
    def moves(self) -> bool:
        """Whether it leads anywhere."""
        return max(abs(b - a) for a, b in zip(self.start, self.end, strict=True)) > SAME


def ladder_points(answer: Answer) -> Array:
    """Carbon [mol/L] and alkalinity [eq/L] of the raw water and behind every step."""
    streams = [answer.train.raw, *(p.after for p in answer.train.passed)]
    return np.array([_point(s) for s in streams])


def _point(stream: Stream) -> tuple[float, float]:
    return float(stream.carbon_mol_l[0]), float(stream.alkalinity_eq_l[0])


def legs_of(answer: Answer) -> list[Leg]:
    """The way from the raw water on; a step that only adds products has a leg for each, in the order of the plan."""
    return [leg for k, p in enumerate(answer.train.passed, start=1) for leg in _legs(k, p)]


def _legs(number: int, passed: Passed) -> list[Leg]:
    start, end = _point(passed.before), _point(passed.after)
    out, at = [], start
    for d in (d for d in passed.outcome.doses if d.mol_l[0] > 0.0):
        adds, x = d.product.product.adds, float(d.mol_l[0])
        to = (at[0] + adds.get("carbon", 0.0) * x, at[1] + adds.get("alkalinity", 0.0) * x)
        out.append(Leg(number, d.product.name, at, to))
        at = to
    exact = out and np.allclose(at, end, rtol=0.0, atol=EXACT)
    return out if exact else [Leg(number, passed.step.name, start, end)]


def ph_line(stream: Stream, ph: float, carbon_mol_l: ArrayLike) -> Array:
    """Alkalinity at a meter pH over carbon, for the temperature, ionic strength and other acids of a water; straight.
    [eq/L]"""
    carbon = np.asarray(carbon_mol_l, dtype=float)
    water: dict[str, Any] = {name: np.repeat(value[:1], carbon.size) for name, value in stream.keywords().items()}
    return Water.from_ph_dic(ph=np.full(carbon.size, ph), dic_mol_l=carbon, **water).alkalinity_eq_l


def plot_ladder(answer: Answer, *, ax: Axes) -> Axes:
    """Carbon across, alkalinity up, numbered waters with arrows between them, lines of equal pH of the final water."""
    carbon, alkalinity = find_quantity("dic"), find_quantity("alkalinity")
    legs = [leg for leg in legs_of(answer) if leg.moves]
    ends = np.concatenate([ladder_points(answer), *(np.array([leg.start, leg.end]) for leg in legs)])
    x_low, x_high = _span(in_unit(carbon, ends[:, 0]), floor=0.0)
    y_low, y_high = _span(in_unit(alkalinity, ends[:, 1]))
    ax.set(xlim=(x_low, x_high), ylim=(y_low, y_high), xlabel=f"{carbon.label} [{carbon.unit}]",
           ylabel=f"{alkalinity.label} [{alkalinity.unit}]")
    ax.set_title("The way of the water; gray: lines of equal pH")
    _lines(ax, answer.train.final)
    for leg in legs:
        _arrow(ax, leg, bowed=any(_against(leg, other) for other in legs))
    _waters(ax, answer)
    return ax


def _against(leg: Leg, other: Leg) -> bool:
    """Whether another leg runs along the same line the other way, so that one would hide the other."""
    a, b, c = (np.subtract(p, leg.start) for p in (leg.end, other.start, other.end))
    length = float(np.hypot(*a))
    aside = [abs(float(a[0] * p[1] - a[1] * p[0])) / length for p in (b, c)]
    along = sorted(float(a @ p) / length for p in (b, c))
    return max(aside) <= SAME and float(a @ (c - b)) < 0.0 and along[0] < length - SAME and along[1] > SAME


def _arrow(ax: Axes, leg: Leg, *, bowed: bool) -> None:
    """The leg with its words beside it; bowed to its right where another comes the other way."""
    (x0, x1), (y0, y1) = ([float(in_unit(find_quantity(name), end[k])) for end in (leg.start, leg.end)]
                          for k, name in enumerate(("dic", "alkalinity")))
    bow = BOW if bowed else 0.0
    ax.annotate("", (x1, y1), (x0, y0), zorder=3, arrowprops={
        "arrowstyle": "-|>", "color": CALM, "lw": 1.6, "shrinkA": 0.0, "shrinkB": 2.0,
        "connectionstyle": f"arc3,rad={bow:g}"})
    dx, dy = np.subtract(*ax.transData.transform([(x1, y1), (x0, y0)])) * POINTS / ax.figure.dpi
    if max(abs(dx), abs(dy)) < LEAST_LEG:
        return
    upright = abs(dy) > abs(dx)
    aside = (np.sign(dy) if upright else -np.sign(dx)) * 0.5 * bow * np.hypot(dx, dy)
    right = aside >= 0.0 if bowed else True
    place = (aside + (5.0 if right else -5.0), -3.0) if upright else (0.0, aside + 5.0)
    ax.annotate(leg.words, (0.5 * (x0 + x1), 0.5 * (y0 + y1)), place, textcoords="offset points", fontsize=SMALL,
                ha=("left" if right else "right") if upright else "center", color=INK, zorder=4, parse_math=False,
                bbox={"facecolor": "white", "edgecolor": "none", "alpha": 0.8, "pad": 0.6})


def _span(values: Array, floor: float | None = None) -> tuple[float, float]:
    """Ends of an axis that holds values, with room around them."""
    low, high = float(np.nanmin(values)), float(np.nanmax(values))
    span = max(high - low, LEAST_SPAN * max(abs(high), abs(low))) or 1.0
    middle = 0.5 * (low + high)
    low, high = middle - (0.5 + MARGIN) * span, middle + (0.5 + MARGIN) * span
    return (low if floor is None else max(low, floor)), high


def _lines(ax: Axes, stream: Stream) -> None:
    """Lines of equal pH, each named where it leaves the axes at the top or the right, as far as names keep apart."""
    carbon, alkalinity = find_quantity("dic"), find_quantity("alkalinity")
    x, (low, high) = np.array(ax.get_xlim()), ax.get_ylim()
    named: list[tuple[float, float]] = []
    whole_first = sorted(LEVELS, key=lambda ph: (ph % 1.0 > 0.0, ph % 0.5 > 0.0, ph))
    for ph in whole_first:
        y = in_unit(alkalinity, ph_line(stream, ph, x / carbon.per_house))
        at = _leaves(x, y, low, high)
        if at is None:
            continue
        part = ((at[0] - x[0]) / (x[1] - x[0]), (at[1] - low) / (high - low))
        if any(max(abs(part[0] - a), abs(part[1] - b)) < NEAREST for a, b in named):
            continue
        named.append(part)
        ax.plot(x, y, color=FAINT, lw=0.9, label=f"_pH {ph:g}", zorder=1)
        top = at[1] >= high
        ax.annotate(f"{ph:g}", at, (0.0, 2.0) if top else (3.0, 0.0), textcoords="offset points", fontsize=SMALL,
                    ha="center" if top else "left", va="bottom" if top else "center", color=GRAY, annotation_clip=False)
    ax.set_title(ax.get_title(loc="left"), pad=14.0)


def _leaves(x: Array, y: Array, low: float, high: float) -> tuple[float, float] | None:
    """Where a line from the left to the right edge leaves at the top or the right; None where it never is within."""
    slope = (y[1] - y[0]) / (x[1] - x[0])
    if max(y) <= low or min(y) >= high or not np.isfinite(slope):
        return None
    if y[1] <= high:
        return float(x[1]), float(y[1])
    return float(x[0] + (high - y[0]) / slope), high


def _waters(ax: Axes, answer: Answer) -> None:
    """The waters; those that lie together have their numbers together; the final water is filled otherwise."""
    points = ladder_points(answer)
    at = [in_unit(find_quantity(name), points[:, k]) for k, name in enumerate(("dic", "alkalinity"))]
    last = len(points) - 1
    for k in range(len(points)):
        ax.plot(at[0][k], at[1][k], ls="", marker="o", ms=7.0, mfc=WARNED if k == last else "white", mec=INK,
                label="_water", zorder=5)
    scale = [x / np.ptp(end) for x, end in zip(at, (ax.get_xlim(), ax.get_ylim()), strict=True)]
    for group in _groups(np.array(scale).T):
        k = group[-1]
        ax.annotate(", ".join(str(n) for n in group), (float(at[0][k]), float(at[1][k])), (6.0, -10.0),
                    textcoords="offset points", fontsize=SMALL + 1.5, fontweight="bold", zorder=6,
                    bbox={"facecolor": "white", "edgecolor": "none", "alpha": 0.8, "pad": 0.6})


def _groups(points: Array) -> list[list[int]]:
    """Numbers of the waters that lie together; places in parts of the axes."""
    out: list[list[int]] = []
    for k, point in enumerate(points):
        same = next((g for g in out if np.abs(points[g[0]] - point).max() <= TOGETHER), None)
        if same is None:
            out.append([k])
        else:
            same.append(k)
    return out


def ladder_key(answer: Answer) -> str:
    """Which number is which water, with its pH; and which water the lines are of."""
    waters = [("raw water", answer.train.raw), *((p.step.name, p.after) for p in answer.train.passed)]
    named = "; ".join(f"{k} {name} (pH {s.water().ph[0]:.2f})" for k, (name, s) in enumerate(waters))
    t_c = answer.train.final.t_c[0]
    return sentence(f"{named}. Lines of equal pH are those of the final water at {t_c:.1f} °C")

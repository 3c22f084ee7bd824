"""What the panels of a survey share: the axis of ANC, the lines at limits, and names beside curves."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FixedLocator, FuncFormatter, MaxNLocator, NullFormatter
from numpy.typing import NDArray

from aquabuf.assess.lake.classes import class_names, classify
from aquabuf.assess.lake.schemes import Scheme
from aquabuf.report.labels import SIZE
from aquabuf.report.lake_marks import MICRO, limits_of
from aquabuf.report.style import GRAY, INK

__all__ = ["WHITE", "Curve", "across", "anc_axis", "anc_kind", "anc_label", "label_curves", "limit_lines", "text_width"]

Array = NDArray[np.float64]

WHITE: Any = {"facecolor": "white", "edgecolor": "none", "alpha": 0.85}  # behind words
PLAIN_TO = 500.0       # µeq/L, up to which the axis of ANC is plain
LINEAR_BELOW = 50.0    # µeq/L, near linear part of a wide axis
MARGIN = 0.04          # of an axis beyond the data
LEAST_SPAN = 60.0      # µeq/L
LETTER = 0.58          # width of a letter in type sizes
TICK_SIZE = 9.0        # points
ROW = 1.5              # height of a row of labels in type sizes
LEVELS = (50.0, 40.0, 60.0, 30.0, 70.0, 20.0, 80.0, 12.0, 88.0)  # percent, where a curve may carry its name


# ------------------------------------------------------------------ ANC


def anc_axis(ax: Axes, values: Array, limits: Sequence[float] = ()) -> None:
    """Horizontal axis of ANC [µeq/L] that holds values and limits: plain, or linear near zero and logarithmic away."""
    known = values[np.isfinite(values)]
    low, high = (float(f([*known, *limits] or [0.0])) for f in (np.min, np.max))
    if max(-low, high) > PLAIN_TO:
        _wide(ax, low, high)
        return
    middle, half = 0.5 * (low + high), max(0.5 * (high - low), 0.5 * LEAST_SPAN) * (1.0 + 2.0 * MARGIN)
    ax.set_xlim(middle - half, middle + half)
    ax.xaxis.set_major_locator(MaxNLocator(7, steps=[1, 2, 5, 10]))


def _wide(ax: Axes, low: float, high: float) -> None:
    """An inverse hyperbolic sine: no kink where linear turns into logarithmic, so that curves keep their shape."""
    ax.set_xscale("asinh", linear_width=LINEAR_BELOW)
    scale = ax.xaxis.get_transform()
    a, b = scale.transform(np.array([low, high]))
    margin = MARGIN * (b - a)
    left, right = scale.inverted().transform(np.array([a - margin, b + margin]))
    ax.set_xlim(left, right)
    powers = 10.0 ** np.arange(1, 8)
    wanted = [0.0, *(sign * p for p in powers[1:] for sign in (1.0, -1.0)),
              *(sign * k * p for p in powers for k in (5.0, 2.0) for sign in (1.0, -1.0))]
    width, _ = _inches(ax)
    kept: list[tuple[float, float]] = []
    for tick in (t for t in wanted if left <= t <= right):
        at, half = across(ax, tick), 0.5 * text_width(f"{tick:,.0f} ", TICK_SIZE) / width
        if all(abs(at - across(ax, t)) > half + other for t, other in kept):
            kept.append((tick, half))
    between = [sign * k * p for p in powers for k in range(1, 10) for sign in (1.0, -1.0)]
    ax.xaxis.set_major_locator(FixedLocator(sorted(t for t, _ in kept)))
    ax.xaxis.set_minor_locator(FixedLocator([t for t in between if left <= t <= right]))
    ax.xaxis.set_major_formatter(FuncFormatter(lambda v, _: f"{v:,.0f}".replace("-", "−")))
    ax.xaxis.set_minor_formatter(NullFormatter())


def anc_kind(results: pd.DataFrame) -> str:
    """The most common definition of the ANC in use, in words."""
    kinds = results.loc[results["anc_used_ueq_l"].notna(), "anc_used_from"].value_counts()
    return str(kinds.index[0]) if len(kinds) else "ANC"


def anc_label(results: pd.DataFrame, scheme: Scheme) -> str:
    """Name and unit of the ANC in use: its definition, or the most common of several; whether classes rest on it."""
    used = results[results["anc_used_ueq_l"].notna()]
    kind = anc_kind(results)
    label = f"{kind if (used['anc_used_from'] == kind).all() else f'ANC in use, mostly {kind}'} [µeq/L]"
    if scheme.quantity == "ph":
        return label
    of_used = class_names(scheme, classify(scheme, used["anc_used_ueq_l"].to_numpy(dtype=float) / MICRO))
    return f"{label}; classes rest on another" if (of_used != used["class"].to_numpy()).any() else label


# ------------------------------------------------------------------ limits


def limit_lines(ax: Axes, scheme: Scheme, anc_limit_ueq_l: float, *, named: bool = True) -> None:
    """Upright lines at the class limits, their values in the room above the data, and a dashed one at the ANC limit.

    The limits of the axes must stand before; the vertical axis is stretched for the values.
    """
    limits = [] if scheme.quantity == "ph" else limits_of(scheme)
    for x in limits:
        ax.axvline(x, color=GRAY, lw=0.8, label="_class_limit", zorder=1.5)
    if limits:
        _values_above(ax, limits)
    if np.isfinite(anc_limit_ueq_l):
        ax.axvline(anc_limit_ueq_l, color=INK, lw=0.9, ls=(0, (4, 3)), label="_anc_limit", zorder=1.6)
        if named:
            ax.annotate(f"ANC limit {anc_limit_ueq_l:g}", (anc_limit_ueq_l, 0.02), (2.0, 0.0), rotation=90,
                        xycoords=("data", "axes fraction"), textcoords="offset points", ha="left", va="bottom",
                        fontsize=SIZE, color=INK, zorder=4, bbox=WHITE | {"pad": 0.5})


def _values_above(ax: Axes, limits: Sequence[float]) -> None:
    """Limits as small numbers at the top, in as many rows as it takes to keep them apart."""
    width, height = _inches(ax)
    ends: list[float] = []
    placed = []
    for x in sorted(limits):
        half = 0.5 * text_width(f"{x:g}") / width
        at = across(ax, x)
        row = next((k for k, end in enumerate(ends) if at - half > end), len(ends))
        ends[row:row + 1] = [at + half + 0.5 * SIZE / 72.0 / width]
        placed.append((x, row))
    step = ROW * SIZE / 72.0 / height
    bottom, top = ax.get_ylim()
    ax.set_ylim(bottom, bottom + (top - bottom) / (1.0 - step * len(ends)))
    for x, row in placed:
        ax.annotate(f"{x:g}".replace("-", "−"), (x, 1.0 - (row + 0.5) * step), xycoords=("data", "axes fraction"),
                    ha="center", va="center", fontsize=SIZE, color=INK, zorder=4, bbox=WHITE | {"pad": 0.8})


def text_width(words: str, size: float = SIZE) -> float:
    """About how wide some words are. [inches]"""
    return LETTER * size / 72.0 * len(words)


def _inches(ax: Axes) -> tuple[float, float]:
    box = ax.get_position()
    figure = ax.get_figure()
    wide, high = figure.get_size_inches() if isinstance(figure, Figure) else (1.0, 1.0)
    return box.width * wide, box.height * high


def across(ax: Axes, x: float) -> float:
    """Place along the horizontal axis as a share of its length."""
    a, b, at = ax.xaxis.get_transform().transform(np.array([*ax.get_xlim(), x]))
    return float((at - a) / (b - a))


# ------------------------------------------------------------------ names


@dataclass(frozen=True, slots=True)
class Curve:
    """A rising curve of cumulative shares: its name and color, its values in order and their shares [%]."""

    name: str
    color: str
    x: Array
    share: Array
    bold: bool = False

    def at(self, percent: float) -> float:
        """Value up to which the share goes."""
        return float(self.x[min(int(np.searchsorted(self.share, percent)), self.x.size - 1)])


def label_curves(ax: Axes, curves: Sequence[Curve]) -> bool:
    """Write each curve's name beside it, clear of all others. Where one finds no room nothing is written: False."""
    boxes: list[tuple[float, float, float, float]] = []
    for curve in curves:
        box = next((b for b in _places(ax, curve, curves) if not any(_meet(b, other) for other in boxes)), None)
        if box is None:
            return False
        boxes.append(box)
    bottom, top = ax.get_ylim()
    for curve, (left, _, low, high) in zip(curves, boxes, strict=True):
        ax.text(left, (0.5 * (low + high) - bottom) / (top - bottom), curve.name, transform=ax.transAxes, va="center",
                fontsize=SIZE, color=curve.color, parse_math=False, fontweight="bold" if curve.bold else "normal",
                bbox=WHITE | {"pad": 0.5})
    return True


def _places(ax: Axes, curve: Curve, curves: Sequence[Curve]) -> list[tuple[float, float, float, float]]:
    """Boxes beside the curve that meet no curve: left and right as shares of the axis, low and high in percent."""
    width, height = _inches(ax)
    bottom, top = ax.get_ylim()
    half = 0.5 * ROW * SIZE / 72.0 / height * (top - bottom)
    wide, gap = 1.1 * text_width(curve.name) / width, 0.4 * SIZE / 72.0 / width
    found = []
    for level in LEVELS:
        low, high = level - half, level + half
        spans = [(across(ax, c.at(low)), across(ax, c.at(high))) for c in curves if c is not curve]
        own = (across(ax, curve.at(low)), across(ax, curve.at(high)))
        for left in (own[1] + gap, own[0] - gap - wide):
            clear = all(span[1] < left - gap or span[0] > left + wide + gap for span in spans)
            if clear and left > 0.01 and left + wide < 0.99:
                found.append((float(left), float(left + wide), low, high))
    return found


def _meet(a: tuple[float, ...], b: tuple[float, ...]) -> bool:
    return a[0] < b[1] and b[0] < a[1] and a[2] < b[3] and b[2] < a[3]

"""Labels beside a curve: one column at the right that keeps clear of it, each tied to its place by a thin line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, cast

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties
from matplotlib.textpath import TextPath
from numpy.typing import NDArray

from aquabuf.report.style import FAINT, INK

__all__ = ["SIZE", "Label", "label_column", "spread_out"]

SIZE = 7.5            # points
LINE = 1.55           # from label to label, in type sizes
EDGE, GAP = 0.01, 0.06  # of the axes: to its right edge, and from the last place labeled to the column
WIDEST = 0.75         # of the axes that a column may take


@dataclass(frozen=True, slots=True)
class Label:
    """Words about a place of the plot; a place with nan is not in it, so that no line leads there."""

    words: str
    x: float
    y: float
    bold: bool = False
    on_top: bool = False  # of the column, where it has no place of its own


def spread_out(wanted: Sequence[float], *, gap: float, low: float, high: float) -> list[float]:
    """Heights from the top down near the wanted ones (falling), at least `gap` apart and from `high` down to `low`.

    Where there is no room for all of them, the gap narrows.
    """
    count = len(wanted)
    if count > 1:
        gap = min(gap, (high - low) / (count - 1))
    out: list[float] = []
    for y in wanted:
        out.append(min(y, out[-1] - gap if out else high))
    floor = low
    for k in range(count - 1, -1, -1):
        out[k] = max(out[k], floor)
        floor = out[k] + gap
    return out


def label_column(ax: Axes, labels: Sequence[Label], x: NDArray, y: NDArray) -> None:
    """Write `labels` at the right of the curve through the points x (rising), y; its x-axis is stretched to make room.

    The limits of the axes must stand before. The column lies above the curve or below it, wherever there is more room.
    """
    if not labels:
        return
    width, height = _inches(ax)
    share = min(max(_width(label) for label in labels) / width, WIDEST)
    _make_room(ax, labels, share)
    left, (low, high) = 1.0 - EDGE - share, _free(ax, 1.0 - EDGE - share, x, y, 0.5 * LINE * SIZE / 72.0 / height)
    (_, _), (bottom, top) = ax.get_xlim(), ax.get_ylim()
    fraction = {id(label): (label.y - bottom) / (top - bottom) if np.isfinite(label.y) else float(label.on_top)
                for label in labels}
    order = sorted(labels, key=lambda label: (-fraction[id(label)], label.x))
    heights = spread_out([fraction[id(label)] for label in order], gap=LINE * SIZE / 72.0 / height, low=low, high=high)
    for label, at in zip(order, heights, strict=True):
        _write(ax, label, left, at)


def _inches(ax: Axes) -> tuple[float, float]:
    box = ax.get_window_extent()
    dpi = cast(Figure, ax.get_figure()).dpi
    return box.width / dpi, box.height / dpi


def _width(label: Label) -> float:
    """Width of the words in inches."""
    font = FontProperties(size=SIZE, weight="bold" if label.bold else "normal")
    return float(TextPath((0.0, 0.0), label.words, prop=font).get_extents().width) / 72.0


def _make_room(ax: Axes, labels: Sequence[Label], share: float) -> None:
    """Move the right end of the axis so that the column stands right of every place labeled."""
    left, right = ax.get_xlim()
    reach = max((label.x for label in labels if np.isfinite(label.x)), default=left)
    ax.set_xlim(left, max(right, left + (reach - left) / (1.0 - share - EDGE - GAP)))


def _free(ax: Axes, from_x: float, x: NDArray, y: NDArray, pad: float) -> tuple[float, float]:
    """Lowest and highest middle of a label right of `from_x`, above or below the curve; in shares of the axes."""
    (left, right), (bottom, top) = ax.get_xlim(), ax.get_ylim()
    across, up = (x - left) / (right - left), (y - bottom) / (top - bottom)
    low, high = pad, 1.0 - pad
    if not across.size or across[-1] <= from_x:
        return low, high
    there = np.append(up[across >= from_x], np.interp(from_x, across, up))
    over, under = float(there.max()) + 2.0 * pad, float(there.min()) - 2.0 * pad
    if 1.0 - over >= under:
        return min(over, high), high
    return low, max(under, low)


def _write(ax: Axes, label: Label, left: float, at: float) -> None:
    style: Any = {"fontsize": SIZE, "ha": "left", "va": "center", "color": INK,
                  "parse_math": False, "fontweight": "bold" if label.bold else "normal"}
    if not np.isfinite(label.x + label.y):
        ax.text(left, at, label.words, transform=ax.transAxes, **style)
        return
    ax.annotate(label.words, (label.x, label.y), (left, at), textcoords="axes fraction", zorder=2.5,
                arrowprops={"arrowstyle": "-", "color": FAINT, "lw": 0.7, "shrinkA": 1.0, "shrinkB": 3.5,
                            "relpos": (0.0, 0.5)}, **style)

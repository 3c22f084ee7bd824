"""Words in the panels of a neutralization: labels beside points that keep apart, titles that fit."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from matplotlib.axes import Axes

from aquabuf.report.dose_page import POINTS, text_width, wrapped
from aquabuf.report.dose_panels import SMALL, ax_width
from aquabuf.report.style import GRAY

__all__ = ["AWAY", "DASHED", "DOTTED", "GROUND", "LABEL_STEP", "LEADER", "ax_height", "cut", "label_gap", "side_labels",
           "spread"]

TITLE_SIZE = 10.0
LABEL_STEP = 1.45           # from label to label, in type sizes
EDGE_SHARE = 0.012          # of the width, kept free at the edge
AWAY = 0.16                 # inches from a point to its words
GROUND: Any = {"facecolor": "white", "edgecolor": "none", "alpha": 0.85, "pad": 0.6}
LEADER: Any = {"color": GRAY, "lw": 0.6}
DASHED, DOTTED = (0, (5, 2)), (0, (1, 1.5))


def ax_height(ax: Axes) -> float:
    """Height of an axis in inches."""
    figure = ax.get_figure()
    assert figure is not None
    return float(ax.get_position().height * figure.get_size_inches()[1])  # type: ignore[union-attr]


def cut(ax: Axes, words: str, size: float = TITLE_SIZE) -> str:
    """Words as a title that the axis has room for."""
    return wrapped(words, ax_width(ax), size, bold=True, most=1)[0]


def spread(places: Sequence[float], gap: float, low: float, high: float) -> list[float]:
    """Places moved as little as keeps them `gap` apart, in the order of their size, between `low` and `high`."""
    order = sorted(range(len(places)), key=lambda k: places[k])
    groups: list[tuple[float, list[int]]] = []  # middle and members of what stands together
    for k in order:
        groups.append((float(places[k]), [k]))
        while True:
            placed = []
            for middle, members in groups:
                half = 0.5 * gap * (len(members) - 1)
                placed.append((min(max(middle, low + half), max(high - half, low + half)), half))
            if len(groups) < 2 or placed[-1][0] - placed[-1][1] - placed[-2][0] - placed[-2][1] >= gap * (1.0 - 1e-9):
                break
            (a, first), (b, second) = groups[-2:]
            groups[-2:] = [((a * len(first) + b * len(second)) / (len(first) + len(second)), [*first, *second])]
    found = [0.0] * len(places)
    for (_, members), (middle, half) in zip(groups, placed, strict=True):
        for j, k in enumerate(members):
            found[k] = middle - half + gap * j
    return found


def label_gap(ax: Axes, size: float = SMALL) -> float:
    """Distance of two labels one above the other, in units of the vertical axis."""
    low, high = ax.get_ylim()
    return LABEL_STEP * size / POINTS / ax_height(ax) * (high - low)


def side_labels(ax: Axes, points: Sequence[tuple[float, float, str]], *, left: bool, away: float = AWAY,
                lifted: Sequence[bool] | None = None, outside: bool = False) -> list[float]:
    """Words `away` inches beside points, with a line to each; the heights at which they stand are returned.

    Words that are `lifted`, or without room at that side, stand above their point (below it if not `left`), the latter
    at the edge of the axes; `outside`: they may leave the axes.
    """
    gap, side = label_gap(ax), -1.0 if left else 1.0
    low, high = ax.get_ylim()
    across = [float(ax.transAxes.inverted().transform(ax.transData.transform((x, y)))[0]) for x, y, _ in points]
    ends, wanted = [], []
    for share, (_, y, words), up in zip(across, points, lifted or [False] * len(points), strict=True):
        wide = text_width(words, SMALL) / ax_width(ax) + EDGE_SHARE
        end = share + side * away / ax_width(ax)
        fits = outside or (end >= wide if left else end <= 1.0 - wide)
        ends.append(end if fits else (wide if left else 1.0 - wide))
        wanted.append(y if fits and not up else y - side * 1.4 * gap)
    at = spread(wanted, gap, low + 0.6 * gap, high - 0.6 * gap)
    for share, end, (_, y, words), level in zip(across, ends, points, at, strict=True):
        ax.plot([share, end - side * 0.02 / ax_width(ax)], [y, level], transform=ax.get_yaxis_transform(),
                label="_leader", zorder=2.5, clip_on=False, **LEADER)
        ax.text(end, level, words, transform=ax.get_yaxis_transform(), ha="right" if left else "left", va="center",
                fontsize=SMALL, zorder=5, bbox=GROUND, parse_math=False)
    return at

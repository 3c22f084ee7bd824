"""The train of a neutralization as a scheme: equalization tank, stirred tanks, what is fed to each, what leaves."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from matplotlib.axes import Axes
from matplotlib.patches import Rectangle

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.layout import Stage, StageFeed
from aquabuf.assess.tank.reagents import BASE
from aquabuf.report.dose_page import POINTS, wrapped
from aquabuf.report.dose_panels import SMALL, ax_width
from aquabuf.report.style import CALM, GRAY, INK, WARNED
from aquabuf.report.tank_labels import ax_height

__all__ = ["feed_lines", "feed_words", "plot_train", "stage_words", "train_height"]

STEP = 1.3 * SMALL / POINTS  # inches from line to line
GAP = 0.14                   # inches between columns
TANK = 0.62                  # inches of the height of the tallest tank drawn
HEAD = 0.34                  # inches that the arrow of a feed and the rim above the tanks take
FILL, LOWER = "#dfe6ee", "#b9c9da"
FULL = 0.8                   # of the height of a tank that is drawn as liquid
PIPE: Any = {"arrowstyle": "-|>", "color": INK, "lw": 1.2, "shrinkA": 0, "shrinkB": 0}
SIGNS = {True: "▼", False: "▽"}  # base, acid
NAME_LINES = 2
MORE = 1.005                  # times the steady draw, beyond which the largest flow is told too


class _Column(NamedTuple):
    """One piece of the train: name, words below, feeds above."""

    kind: str
    below: tuple[str, ...]
    above: tuple[str, ...]
    stage: Stage | None


def feed_words(feed: StageFeed) -> str:
    """Range of a feed in L/h as pumped; in kg/h of product where nothing is pumped."""
    least, most = feed.need.least_l_h, feed.need.largest_l_h
    unit = "L/h"
    if not np.isfinite(feed.need.normality_eq_l):
        least, most = (v * feed.reagent.kg_per_eq for v in (feed.need.least_eq_h, feed.need.largest_eq_h))
        unit = "kg/h"
    if feed.trim:
        return f"to {shown(most)} {unit}, to correct"
    ends = dict.fromkeys((shown(least), shown(most)))
    return f"{' to '.join(ends)} {unit}"


def stage_words(design: Design, stage: Stage) -> list[str]:
    """Name, volume, size and time of a tank."""
    v = stage.vessel
    return [f"{stage.name}: {shown(stage.volume_m3)} m³", f"Ø {shown(v.diameter_m)} m, {shown(v.liquid_m)} m deep",
            f"{shown(stage.residence_min(design.layout.mean_m3_h))} min at mean flow",
            f"stirrer {shown(stage.mixer.power_w)} W"]


def feed_lines(stage: Stage, room: float) -> list[str]:
    """What is fed to a tank, in lines no wider than `room` inches."""
    lines: list[str] = []
    for kind, feed in stage.feeds.items():
        lines += wrapped(f"{SIGNS[kind == BASE]} {feed.reagent.name}", room, SMALL, most=NAME_LINES)
        lines += wrapped(feed_words(feed), room, SMALL, most=NAME_LINES)
    return lines


def _columns(design: Design, width: float) -> tuple[list[_Column], float]:
    """Pieces from left to right with words wrapped for the room that each has, and that room. [inches]"""
    layout, job = design.layout, design.job
    eq = layout.equalization
    count = 2 + len(layout.stages) + (eq.volume_m3 > 0.0)
    room = width / count - GAP

    def lines(words: list[str], most: int | None = NAME_LINES) -> tuple[str, ...]:
        return tuple(line for w in words for line in wrapped(w, room, SMALL, most=most))

    names = [w.name for w in job.wastes]
    told = names if len(names) <= NAME_LINES + 1 else [*names[:NAME_LINES], f"and {len(names) - NAME_LINES} more"]
    course = design.basis.course
    flow = [f"{shown(course.mean_m3_h)} m³/h mean", f"{shown(float(course.flow_m3_h.max()))} m³/h most"]
    columns = [_Column("in", lines([*told, *flow]), (), None)]
    if eq.volume_m3 > 0.0:
        parts = [f"equalization: {shown(eq.volume_m3)} m³", f"{shown(eq.content_m3)} m³ always full"]
        parts += [f"{shown(eq.flow_m3)} m³ for the flow"] if eq.flow_m3 > 0.0 else []
        parts += _leaving(design)
        columns.append(_Column("equalization", lines(parts), (), None))
    for stage in layout.stages:
        columns.append(_Column("tank", lines(stage_words(design, stage)), tuple(feed_lines(stage, room)), stage))
    window = job.window
    leaves = [f"out: pH {window.low:g} to {window.high:g}", f"({window.source})"]
    columns.append(_Column("out", lines(leaves, 4), (), None))
    return columns, room


def _leaving(design: Design) -> list[str]:
    """Flow out of the equalization tank."""
    draw, peak = design.layout.equalization.draw_m3_h, design.layout.peak_m3_h
    most = [f"{shown(peak)} m³/h at most"] if draw is None or peak > MORE * draw else []
    return [*([] if draw is None else [f"{shown(draw)} m³/h drawn off"]), *most]


def train_height(design: Design, width: float) -> float:
    """Height that the scheme needs at a width. [inches]"""
    columns, _ = _columns(design, width)
    return STEP * (max(len(c.above) for c in columns) + max(len(c.below) for c in columns)) + HEAD + TANK + 0.1


def plot_train(design: Design, *, ax: Axes) -> Axes:
    """Draw the train; tanks are as high as their share of the largest volume, in thirds."""
    width, height = ax_width(ax), ax_height(ax)
    columns, room = _columns(design, width)
    ax.set(xlim=(0.0, width), ylim=(0.0, height), xticks=[], yticks=[])
    ax.set_axis_off()
    floor = 0.06 + STEP * max(len(c.below) for c in columns)
    tall = max(height - floor - HEAD - STEP * max(len(c.above) for c in columns), 0.5 * TANK)
    sizes = [c.stage.volume_m3 for c in columns if c.stage is not None] + [design.layout.equalization.volume_m3]
    pitch = width / len(columns)
    pipe = floor + 0.25 * tall
    for k, column in enumerate(columns):
        left = k * pitch + 0.5 * GAP
        if column.kind in ("equalization", "tank"):
            volume = column.stage.volume_m3 if column.stage is not None else sizes[-1]
            high = tall * (0.55 + 0.45 * (volume / max(sizes)) ** (1.0 / 3.0))
            _vessel(ax, design, column, left, floor, room, high)
            _feeds(ax, column, left, room, floor + high, height)
        else:
            _end(ax, column.kind, left, pipe, room, left + pitch)
        if k > 1 and column.kind != "out":
            ax.annotate("", (left, pipe), (left - GAP, pipe), arrowprops=PIPE)
        for j, words in enumerate(column.below):
            ax.text(left, floor - 0.06 - STEP * j, words, ha="left", va="top", fontsize=SMALL, color=INK,
                    fontweight="bold" if j == 0 else "normal", parse_math=False)
    return ax


def _vessel(ax: Axes, design: Design, column: _Column, left: float, floor: float, wide: float, high: float) -> None:
    """Outline and liquid of a tank; the part of the equalization tank that moves is lighter."""
    if column.stage is None:
        eq = design.layout.equalization
        full = FULL * high * eq.content_m3 / eq.volume_m3
        ax.add_patch(Rectangle((left, floor), wide, FULL * high, facecolor=FILL, lw=0, label="_flow_part"))
        ax.add_patch(Rectangle((left, floor), wide, full, facecolor=LOWER, lw=0, label="_content_part"))
        if eq.flow_m3 > 0.0:
            ax.plot([left, left + wide], [floor + full] * 2, color=CALM, lw=0.8, ls=(0, (4, 2)))
    else:
        ax.add_patch(Rectangle((left, floor), wide, FULL * high, facecolor=LOWER, lw=0, label="_liquid"))
        middle, level = left + 0.5 * wide, floor + 0.16 * high
        ax.plot([middle, middle], [level, floor + 1.08 * high], color=GRAY, lw=1.1)
        ax.plot([middle - 0.12, middle + 0.12], [level, level], color=GRAY, lw=2.4, solid_capstyle="round")
        ax.text(middle, floor + 0.5 * high, f"pH {shown(column.stage.setpoint_ph)}", ha="center", va="center",
                fontsize=SMALL + 2.0, fontweight="bold", bbox={"facecolor": "white", "edgecolor": INK, "lw": 0.6,
                                                               "pad": 1.6}, label="_setpoint")
    ax.plot([left, left, left + wide, left + wide], [floor + high, floor, floor, floor + high], color=INK, lw=1.4,
            label="_vessel")


def _feeds(ax: Axes, column: _Column, left: float, wide: float, rim: float, top: float) -> None:
    """Words of the feeds at the top, an arrow from each into the tank."""
    if column.stage is None:
        return
    for j, words in enumerate(column.above):
        ax.text(left, top - STEP * j, words, ha="left", va="top", fontsize=SMALL, parse_math=False)
    under = top - STEP * len(column.above) - 0.03
    for kind, feed in column.stage.feeds.items():
        x = left + wide * (0.2 if kind == BASE else 0.8)
        ax.annotate("", (x, rim - 0.12), (x, max(under, rim + 0.1)), arrowprops={
            "arrowstyle": "-|>", "mutation_scale": 9, "shrinkA": 0, "shrinkB": 0, "lw": 0.8 if feed.trim else 1.4,
            "ls": (0, (2, 1.5)) if feed.trim else "-", "color": WARNED if kind == BASE else CALM,
            "fc": (WARNED if kind == BASE else "white")})


def _end(ax: Axes, kind: str, left: float, level: float, wide: float, after: float) -> None:
    """Arrow of what comes, as far as the tank at `after`, or of what leaves."""
    begin, end = (left, after) if kind == "in" else (left - GAP, left + 0.55 * wide)
    ax.annotate("", (end, level), (begin, level), arrowprops=PIPE)
    if kind == "in":
        ax.plot(begin, level, marker="o", ms=4, color=INK, label="_source")

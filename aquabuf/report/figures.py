"""Figures of a sample set, on axes that are handed in and returned."""

from __future__ import annotations

import warnings
from collections.abc import Mapping
from pathlib import Path

import matplotlib
import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, MaxNLocator, NullFormatter
from numpy.typing import NDArray

from aquabuf.assess.options import ALWAYS_ACID
from aquabuf.assess.sample.headline import RANK_BY
from aquabuf.assess.uncertainty import COVERAGE
from aquabuf.report.style import CALM, CURVE_COLORS, FAINT, INK, STYLE, WARNED, short_name
from aquabuf.report.tally import Tally

__all__ = ["plot_alkalinity", "plot_buffering", "plot_curves", "plot_worst", "sample_figure", "save_samples"]

BARS, CURVES = 12, 6
MANY_POINTS = 3000  # beyond, points shrink and are drawn as pixels inside the vector file
WIDE = 10.0          # ratio of highest to lowest from which an axis is logarithmic
LINEAR_BELOW = 0.05  # meq/L, linear part of the alkalinity axis


def _points(ax: Axes, x: NDArray, y: NDArray, warned: NDArray[np.bool_]) -> None:
    many = x.size > MANY_POINTS
    for mask, color, marker, label in ((~warned, CALM, "o", "no warning"), (warned, WARNED, "^", "warning")):
        if mask.any():
            ax.scatter(x[mask], y[mask], s=4 if many else 16, c=color, marker=marker, linewidths=0,
                       alpha=0.4 if many else 0.75, rasterized=many, label=f"{label} ({int(mask.sum()):,})")


def _alkalinity_scale(ax: Axes, low: float, high: float) -> None:
    """Plain axis for waters alike, else one that is linear near zero and logarithmic beyond."""
    if low * high > 0.0 and max(low / high, high / low) < WIDE:
        return
    _wide_axis(ax, low, high)
    if low <= 0.0 <= high:
        ax.axvline(0.0, color=FAINT, lw=0.8, zorder=0)


def _wide_axis(ax: Axes, low: float, high: float) -> None:
    """Horizontal axis [meq/L] that is linear near zero and logarithmic beyond, with plain numbers."""
    ax.set_xscale("symlog", linthresh=LINEAR_BELOW, linscale=0.7)
    ticks = [t for t in (-10, -1, -0.1, 0, 0.1, 1, 10, 100)
             if min(2.0 * low, 0.0) - LINEAR_BELOW <= t <= max(3.0 * high, high / 3.0) + LINEAR_BELOW]
    ax.set_xticks(ticks, [f"{t:g}" for t in ticks])
    ax.minorticks_off()


def plot_alkalinity(ph: NDArray, alkalinity_meq_l: NDArray, warned: NDArray[np.bool_], *, ax: Axes) -> Axes:
    """pH against alkalinity [meq/L]."""
    _points(ax, alkalinity_meq_l, ph, warned)
    _alkalinity_scale(ax, float(np.nanmin(alkalinity_meq_l)), float(np.nanmax(alkalinity_meq_l)))
    ax.set(xlabel="Alkalinity [meq/L]", ylabel="pH", title="What the samples are")
    ax.legend(loc="best")
    return ax


def plot_buffering(ph: NDArray, buffer_meq_l_ph: NDArray, warned: NDArray[np.bool_], *, ax: Axes) -> Axes:
    """Closed buffer intensity [meq/L per pH] against pH."""
    _points(ax, ph, buffer_meq_l_ph, warned)
    low, high = float(np.nanmin(buffer_meq_l_ph)), float(np.nanmax(buffer_meq_l_ph))
    if high >= WIDE * low:
        ax.set_yscale("log")
        ax.yaxis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
        ax.yaxis.set_major_formatter(FuncFormatter(lambda v, _: f"{v:g}"))
        ax.yaxis.set_minor_formatter(NullFormatter())
    else:
        ax.set_ylim(0.0, 1.1 * high)
    ax.set(xlabel="pH", ylabel="Buffer intensity, closed [meq/L per pH]", title="How strongly they resist pH change")
    return ax


def plot_worst(worst: pd.DataFrame, *, ax: Axes) -> Axes:
    """Bars of the acid that brings the worst-buffered samples to pH 6, with their intervals."""
    table = worst.head(BARS)
    place = np.arange(len(table))[::-1]
    value = table[RANK_BY].to_numpy(dtype=float)
    warned = (table["warnings"] != "").to_numpy()
    ax.barh(place, value, height=0.62, color=np.where(warned, WARNED, CALM))
    if f"{RANK_BY}_low" in table:
        low, high = (table[f"{RANK_BY}_{end}"].to_numpy(dtype=float) for end in ("low", "high"))
        ax.hlines(place, low, high, color=INK, lw=1.0)
    ax.axvline(0.0, color="#666666", lw=0.8)
    ax.set_yticks(place, [short_name(name) for name in table["sample_id"]], parse_math=False)
    ax.tick_params(axis="y", length=0)
    size = np.abs(value)
    if size.max() > WIDE * max(float(np.median(size)), LINEAR_BELOW):
        _wide_axis(ax, min(float(value.min()), 0.0), max(float(value.max()), 0.0))
    else:
        ax.xaxis.set_major_locator(MaxNLocator(6))
    line = f" (line: {COVERAGE:.0%} interval)" if f"{RANK_BY}_low" in table else ""
    below = "; negative: below it already" if (value < 0.0).any() else ""
    ax.set(xlabel=f"Strong acid to pH {ALWAYS_ACID:g}, closed [meq/L]{below}", title=f"Worst buffered first{line}")
    return ax


def plot_curves(curves: pd.DataFrame, worst: pd.DataFrame, *, ax: Axes) -> Axes:
    """pH of the worst-buffered samples against strong acid (right) or base (left) added, closed."""
    reaches = [0.1]
    for color, (_, sample) in zip(CURVE_COLORS, worst.head(CURVES).iterrows(), strict=False):
        curve = curves[curves["row"] == sample["row"]]
        added = curve["acid_added_meq_l"].to_numpy()
        ax.plot(added, curve["ph"], color=color, lw=1.5, label=short_name(sample["sample_id"]))
        ax.plot(0.0, sample["ph"], "o", color=color, ms=4)
        reaches.append(max(1.5 * abs(sample[RANK_BY]), 1.2 * abs(sample["alkalinity_meq_l"])))
    reach = min(max(reaches), WIDE * float(np.median(reaches)), 5.0)  # one odd sample must not hide the others
    ax.axhline(ALWAYS_ACID, color=FAINT, lw=0.8, zorder=0)
    ax.axvline(0.0, color=FAINT, lw=0.8, zorder=0)
    ax.set(xlim=(-reach, reach), ylim=(3.5, 11.0), xlabel="Strong acid added [meq/L]  (left of 0: base)", ylabel="pH",
           title="What acid or base does to them")
    if ax.lines[2:]:
        for text in ax.legend(loc="upper right").get_texts():
            text.set_parse_math(False)
    return ax


def sample_figure(tally: Tally, curves: pd.DataFrame, *, source: str = "") -> Figure:
    """Four panels on one landscape page: samples, worst first, buffer intensity, curves."""
    with matplotlib.rc_context(STYLE):
        figure = Figure(figsize=(11.0, 8.0), layout="constrained")
        FigureCanvasAgg(figure)
        axes = figure.subplots(2, 2)
        ph, alkalinity, buffer, warned = np.concatenate(tally.drawn, axis=1).astype(float)
        warned = warned > 0.5
        plot_alkalinity(ph, alkalinity, warned, ax=axes[0, 0])
        plot_worst(tally.worst, ax=axes[0, 1])
        plot_buffering(ph, buffer, warned, ax=axes[1, 0])
        plot_curves(curves, tally.worst, ax=axes[1, 1])
        if source:
            figure.suptitle(f"{source}: {tally.assessed:,} samples, {tally.warned:,} with a warning", x=0.01, ha="left",
                            parse_math=False)
    return figure


def save_samples(tally: Tally, curves: pd.DataFrame, paths: Mapping[str, Path], *, source: str = "") -> None:
    """Write the figure to a path per format (png, svg); no date and no program name goes into the files."""
    figure = sample_figure(tally, curves, source=source)
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph")  # a name in letters that the font lacks is drawn as boxes
        for kind, path in paths.items():
            metadata = {"Date": None, "Creator": None} if kind == "svg" else {"Software": None}
            figure.savefig(path, format=kind, dpi=150, metadata=metadata)

"""Panels of a lake survey on axes that are handed in and returned: classes, critical loads, what to look at first."""

from __future__ import annotations

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.colors import to_rgb
from matplotlib.patheffects import withStroke
from matplotlib.ticker import FuncFormatter, MaxNLocator
from numpy.typing import NDArray

from aquabuf.assess.lake.columns import TO_PH_6
from aquabuf.assess.lake.schemes import Scheme
from aquabuf.assess.lake.survey import priorities
from aquabuf.assess.uncertainty import COVERAGE
from aquabuf.report.labels import SIZE
from aquabuf.report.lake_axes import WHITE, anc_axis, text_width
from aquabuf.report.lake_marks import FEW_LAKES, empty, group_names, lake_names, marks, numbers, styles_of, weights
from aquabuf.report.style import CLASS_COLORS, INK, short_name

__all__ = ["FIRST_LAKES", "GROUP_BARS", "has_loads", "plot_classes", "plot_first", "plot_loads"]

Array = NDArray[np.float64]

GROUP_BARS, FIRST_LAKES = 12, 12
LOAD_ROOM, FEW_LOAD_ROOM = 2.0, 4.0  # of the largest deposition, up to which critical loads of many and few are drawn
BAR_ROOM = 1.5     # of the longest bar, for the words after it
BAR_INCHES = 4.2   # about, of the axis of bars


def plot_classes(results: pd.DataFrame, scheme: Scheme, *, ax: Axes, group: str = "region") -> Axes:
    """Lakes of each group by class as bars end to end, the group with the largest share at risk on top."""
    weight, weighted = weights(results)
    of_class = results["class"].to_numpy()
    at_risk = np.isin(of_class, [c.name for c in scheme.classes if c.at_risk])
    names = group_names(results, group)[:GROUP_BARS]
    sets = {name: (results[group] == name).to_numpy() for name in names} if len(names) > 1 else {}
    if not sets:
        sets = {"all lakes": np.ones(len(results), dtype=bool)}
    classed = of_class != ""
    share = {name: float(weight[of & at_risk].sum()) / (float(weight[of & classed].sum()) or 1.0)
             for name, of in sets.items()}
    order = sorted(sets, key=lambda name: (share[name], name))
    longest = max(float(weight[of].sum()) for of in sets.values())
    for place, name in enumerate(order):
        of = sets[name]
        end = _bar(ax, place, [(float(weight[of & (of_class == c)].sum()), color)
                               for c, (color, _) in styles_of(scheme).items()], longest)
        words = (f"{share[name]:.0%} at risk ({int(of.sum()):,} sampled)" if weighted else
                 f"{int((of & at_risk).sum()):,} of {int((of & classed).sum()):,} at risk")
        ax.annotate(words, (end, place), (4.0, 0.0), textcoords="offset points", va="center", fontsize=SIZE, color=INK)
    left_out = len(group_names(results, group)) - len(names)
    ax.set_yticks(range(len(order)), [short_name(name) for name in order], parse_math=False)
    ax.tick_params(axis="y", length=0)
    by = f" by {group.replace('_', ' ')}" if len(sets) > 1 else ""
    ax.set(xlim=(0.0, BAR_ROOM * longest or 1.0), ylim=_rows(len(order)),
           xlabel="Lakes of the population, by survey weight" if weighted
           else "Lakes sampled (counts, no shares of a population)",
           title=f"Classes{by}" + (f" ({left_out} small groups left out)" if left_out > 0 else ""))
    ax.xaxis.set_major_locator(MaxNLocator(6, integer=True, steps=[1, 2, 5, 10]))
    ax.xaxis.set_major_formatter(FuncFormatter(lambda v, _: f"{v:,.0f}"))
    return ax


def _rows(count: int) -> tuple[float, float]:
    """Limits of an axis of bars, one per whole number from 0 on; room for three at least."""
    half = 0.5 * max(count, 3) + 0.1
    return 0.5 * (count - 1) - half, 0.5 * (count - 1) + half


def _bar(ax: Axes, place: int, parts: list[tuple[float, str]], longest: float) -> float:
    """Segments from the worst class to the best, each with its number where it is wide enough; returns the end."""
    at, inches = 0.0, BAR_INCHES / (BAR_ROOM * longest or 1.0)
    for length, color in parts:
        if length <= 0.0:
            continue
        ax.barh(place, length, left=at, height=0.7, color=color, edgecolor="white", linewidth=0.6)
        words = f"{length:,.0f}"
        if text_width(words) < length * inches:
            dark = float(np.dot(to_rgb(color), (0.2126, 0.7152, 0.0722))) < 0.5
            ax.text(at + 0.5 * length, place, words, ha="center", va="center", fontsize=SIZE,
                    color="white" if dark else INK)
        at += length
    return at


def plot_loads(results: pd.DataFrame, scheme: Scheme, *, ax: Axes) -> Axes:
    """Critical load against sulfur deposition and leached nitrate; exceeded below the line 1:1."""
    load, over, low, high = (numbers(results, f"{name}_meq_m2_yr{end}") for name, end in (
        ("critical_load", ""), ("exceedance", ""), ("critical_load", "_low"), ("critical_load", "_high")))
    known = np.isfinite(load + over)
    load, over, low, high = (v[known] for v in (load, over, low, high))
    fallen = load + over
    most = float(fallen.max(initial=1e-3))
    has_lines = load.size <= FEW_LAKES and bool(np.isfinite(low).any())
    edge, bottom, top = 1.06 * most, *_load_span(load, low, high, most, has_lines)
    seen = (load >= bottom) & (load <= top)
    marks(ax, results[known][seen], scheme, fallen[seen], load[seen])
    if has_lines:
        ax.vlines(fallen[seen], low[seen], high[seen], color=INK, lw=0.8, label="_interval", zorder=2.4)
    ax.set(xlim=(0.0, edge), ylim=(bottom, top), ylabel="Critical load [meq/m²/yr]",
           xlabel="Sulfur deposition and leached nitrate [meq/m²/yr]",
           title="Critical load and acid deposition" + (f" (line: {COVERAGE:.0%} interval)" if has_lines else ""))
    ax.plot([0.0, edge], [0.0, edge], color=INK, lw=1.0, label="_one_to_one", zorder=2)
    ax.annotate("1 : 1", (0.1 * edge, 0.1 * edge), (-2.0, 3.0), textcoords="offset points", ha="right", va="bottom",
                fontsize=SIZE, color=INK)
    ax.fill_between([0.0, edge], [0.0, edge], bottom, color=CLASS_COLORS[2], alpha=0.08, lw=0, zorder=0)
    for words, side, right in ((f" of {load.size:,} lakes", over > 0.0, True), ("", over <= 0.0, False)):
        beyond = int((side & ~seen).sum())
        _corner(ax, f"{'' if right else 'not '}exceeded: {int(side.sum()):,}{words}"
                + (f", {beyond:,} of them beyond the axis" if beyond else ""), right=right)
    return ax


def _load_span(load: Array, low: Array, high: Array, most: float, has_lines: bool) -> tuple[float, float]:
    """Limits of the axis of critical loads: what lies near the deposition or below it, with its intervals."""
    top = min(float(load.max()), (FEW_LOAD_ROOM if load.size <= FEW_LAKES else LOAD_ROOM) * most)
    bottom = max(float(load.min()), -most)
    if has_lines:
        seen = (load <= top) & (load >= bottom)
        top = max(top, min(float(np.nanmax(high[seen], initial=top)), 1.5 * top))
        bottom = max(min(bottom, float(np.nanmin(low[seen], initial=bottom))), -most)
    top, bottom = max(top, 1.1 * most), min(bottom, 0.0)
    margin = 0.06 * (top - bottom)
    return bottom - margin, top + margin


def _corner(ax: Axes, words: str, *, right: bool = False) -> None:
    """Words in the lower right corner, or in the upper left one."""
    x, y, ha, va = (0.98, 0.02, "right", "bottom") if right else (0.02, 0.98, "left", "top")
    ax.text(x, y, words, transform=ax.transAxes, ha=ha, va=va, fontsize=8, color=INK, zorder=5,
            bbox=WHITE | {"pad": 1.5})


FIRST = (("critical_load_meq_m2_yr", "Critical load [meq/m²/yr]; deposition not known"),
         (TO_PH_6, "Acid to pH 6, open to air [µeq/L]"),
         ("acid_to_anc_limit_ueq_l", "ANC above the limit [µeq/L]"))


def plot_first(results: pd.DataFrame, scheme: Scheme, *, ax: Axes) -> Axes:
    """Bars of the lakes to look at first: critical load, else acid to pH 6 open to air, else ANC above the limit."""
    found = next((f for f in FIRST if np.isfinite(numbers(results, f[0])).any()), None)
    if found is None:
        ax.set_title("First lakes to look at")
        return empty(ax, "No critical load, acid to pH 6 or ANC is known")
    column, label = found
    known = results[np.isfinite(numbers(results, column))]
    first = priorities(known, scheme)["row"].head(FIRST_LAKES)
    table = known.set_index("row", drop=False).loc[first.tolist()]
    place, value = np.arange(len(table))[::-1], numbers(table, column)
    styles = styles_of(scheme)
    ax.barh(place, value, height=0.62, color=[styles[name][0] for name in table["class"]])
    low, high = (numbers(table, f"{column}_{end}") for end in ("low", "high"))
    has_lines = bool(np.isfinite(low).any())
    if has_lines:
        ax.hlines(place, low, high, color=INK, lw=1.0, label="_interval",
                  path_effects=[withStroke(linewidth=2.4, foreground="white")])
    anc_axis(ax, np.concatenate([value, low[np.isfinite(low)], high[np.isfinite(high)]]), [0.0])
    ax.axvline(0.0, color="#666666", lw=0.8)
    ax.set_yticks(place, lake_names(table), parse_math=False)
    ax.tick_params(axis="y", length=0)
    below = "; negative: below it" if column == TO_PH_6 and (value < 0.0).any() else ""
    line = f" (line: {COVERAGE:.0%} interval)" if has_lines else ""
    ax.set(xlabel=f"{label}{below}", ylim=_rows(len(table)), title=f"First lakes to look at{line}")
    return ax


def has_loads(results: pd.DataFrame) -> bool:
    """Whether any lake has both a critical load and a deposition to set against it."""
    load, over = (numbers(results, name) for name in ("critical_load_meq_m2_yr", "exceedance_meq_m2_yr"))
    return bool(np.isfinite(load + over).any())

"""Panels of a lake survey, on axes that are handed in and returned."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.colors import to_rgb
from matplotlib.patches import Patch
from matplotlib.ticker import FuncFormatter, MaxNLocator
from numpy.typing import NDArray

from aquabuf.assess.lake.classes import class_names, classify
from aquabuf.assess.lake.columns import TO_PH_6
from aquabuf.assess.lake.response import CO2_TIMES, ResponseCurves
from aquabuf.assess.lake.schemes import Scheme
from aquabuf.assess.lake.survey import priorities
from aquabuf.assess.uncertainty import COVERAGE
from aquabuf.report.labels import SIZE
from aquabuf.report.lake_axes import (
    GRAY,
    MICRO,
    Curve,
    across,
    anc_axis,
    anc_label,
    dark_edge,
    empty,
    label_curves,
    lake_names,
    limit_lines,
    limits_of,
    text_width,
)
from aquabuf.report.style import CLASS_COLORS, CURVE_COLORS, FAINT, INK, short_name

__all__ = ["FEW_LAKES", "FIRST_LAKES", "GROUP_BARS", "GROUP_CURVES", "NO_CLASS", "has_loads", "plot_classes",
           "plot_distribution", "plot_first", "plot_loads", "plot_response", "styles_of"]

Array = NDArray[np.float64]

MANY_POINTS = 3000       # beyond, points are drawn as pixels inside the vector file
FEW_LAKES = 60           # up to which lakes are drawn large, with intervals and their pH at air
GROUP_CURVES, GROUP_BARS, FIRST_LAKES = 6, 12, 12
LEAST_PH_SPAN = 1.5
CLEAR, BROWN = "#b9cfe0", "#d9c3a3"
CLEAR_LINE, BROWN_LINE = "#2f5d86", "#7a5320"
NO_CLASS = "no class"
NO_CLASS_STYLE = (FAINT, "x")
LOAD_ROOM = 2.0          # of the largest deposition, up to which critical loads are drawn
BAR_ROOM = 1.5           # of the longest bar, for the words after it
BAR_INCHES = 4.2         # about, of the axis of bars
DASHES = ("-", (0, (5, 1.5)), (0, (1.5, 1.2)), (0, (6, 1.5, 1.5, 1.5)), (0, (3, 1)), (0, (8, 2)))
LEGEND: Any = {"fontsize": SIZE, "title_fontsize": SIZE, "alignment": "left", "borderaxespad": 0.2, "frameon": True,
               "facecolor": "white", "edgecolor": "none", "framealpha": 0.85}
WHITE: Any = {"facecolor": "white", "edgecolor": "none", "alpha": 0.85}


def styles_of(scheme: Scheme) -> dict[str, tuple[str, str]]:
    """Color and marker of each class by name, the worst first, and of lakes without one."""
    names = [c.name for c in scheme.classes]
    return dict(zip(names, classstyles_of(len(names)), strict=True)) | {"": NO_CLASS_STYLE}


def _numbers(results: pd.DataFrame, name: str) -> Array:
    """A column as numbers; nan throughout where it is not there."""
    return results[name].to_numpy(dtype=float) if name in results else np.full(len(results), np.nan)


def _marks(ax: Axes, results: pd.DataFrame, scheme: Scheme, x: Array, y: Array, *, hollow: bool = False) -> None:
    """A mark per lake in the color of its class, worse classes on top."""
    known = np.isfinite(x + y)
    size = 34.0 if known.sum() <= FEW_LAKES else 8.0 if hollow else 15.0 if known.sum() <= MANY_POINTS else 5.0
    of_class = results["class"].to_numpy()
    for place, (name, (color, marker)) in enumerate(styles_of(scheme).items()):
        here = known & (of_class == name)
        if here.any():
            edge = color if marker == "x" else dark_edge(color)
            face = {"facecolors": "none", "edgecolors": edge} if hollow and marker != "x" else (
                {"c": color} if marker == "x" else {"facecolors": color, "edgecolors": edge})
            ax.scatter(x[here], y[here], s=size, marker=marker, linewidths=1.0 if hollow or marker == "x" else 0.4,
                       rasterized=known.sum() > MANY_POINTS, label=f"{name or NO_CLASS} ({int(here.sum()):,})",
                       zorder=3.0 - 0.05 * place, **face)


# ------------------------------------------------------------------ panels


def plot_response(results: pd.DataFrame, scheme: Scheme, response: ResponseCurves | None, *, ax: Axes,
                  anc_limit_ueq_l: float = np.nan) -> Axes:
    """pH in the lake against the ANC in use, over the curves of clear and brown water at equilibrium with air."""
    x, in_lake, at_air = (_numbers(results, name) for name in ("anc_used_ueq_l", "ph", "ph_at_air"))
    none_read = not np.isfinite(in_lake + x).any()
    y = at_air if none_read else in_lake
    known = np.isfinite(x + y)
    ax.set_title("pH and ANC")
    if not known.any():
        return empty(ax, "No lake has both ANC and pH")
    shows_air = not none_read and known.sum() <= FEW_LAKES
    if shows_air:
        ax.vlines(x, in_lake, at_air, color=FAINT, lw=0.8, label="_to_air", zorder=2)
        ax.plot(x, at_air, ls="", marker="o", ms=3.5, mfc="white", mec=GRAY, mew=0.8, label="_at_air", zorder=2.2)
        ax.set_title("pH and ANC (small open marks: at equilibrium with air)")
    _marks(ax, results, scheme, x, y, hollow=none_read)
    anc_axis(ax, x[known], [] if scheme.quantity == "ph" else limits_of(scheme))
    _ph_axis(ax, np.concatenate([y[known], at_air[known & np.isfinite(at_air)] if shows_air else []]))
    ax.set(xlabel=anc_label(results), ylabel="pH at equilibrium with air (none was read)" if none_read else "pH")
    limit_lines(ax, scheme, anc_limit_ueq_l)
    if scheme.quantity == "ph":
        _ph_limits(ax, scheme)
    elif (class_names(scheme, classify(scheme, x / MICRO)) != results["class"].to_numpy())[np.isfinite(x)].any():
        ax.set_xlabel(f"{ax.get_xlabel()}; classes rest on another ANC")
    if response is not None:
        _curves(ax, response, anc_label(results).endswith("charge balance [µeq/L]"))
    return ax


def _ph_axis(ax: Axes, ph: Array) -> None:
    low, high = float(ph.min()), float(ph.max())
    half = 0.53 * max(high - low, LEAST_PH_SPAN)
    ax.set_ylim(0.5 * (low + high) - half, 0.5 * (low + high) + half)


def _ph_limits(ax: Axes, scheme: Scheme) -> None:
    """Level lines at the limits of a scheme on pH, with their values at the right end."""
    for ph in limits_of(scheme):
        ax.axhline(ph, color=GRAY, lw=0.8, label="_class_limit", zorder=1.5)
        ax.annotate(f"{ph:g}", (1.0, ph), (2.0, 0.0), xycoords=("axes fraction", "data"), textcoords="offset points",
                    va="center", fontsize=SIZE, color=INK, annotation_clip=True)


def _curves(ax: Axes, r: ResponseCurves, is_charge_balance: bool) -> None:
    """Bands from the CO2 of air to the multiple of it, with a line at the CO2 of air."""
    (left, right), handles, words = ax.get_xlim(), [], []
    more = f"CO2 of air (line) to {CO2_TIMES[-1]:g} times"
    for name, anc, band, line, text, order in (
            ("brown", r.brown_eq_l + is_charge_balance * r.left_out_eq_l, BROWN, BROWN_LINE,
             f"brown water, DOC {r.doc_mg_l:.3g} mg/L", 0.4),
            ("clear", r.clear_eq_l, CLEAR, CLEAR_LINE, f"clear water: {more}", 0.5)):
        if not np.isfinite(anc[0]).any():
            continue
        there = np.isfinite(anc[0])
        ends = np.where(np.isfinite(anc), anc, np.nanmax(anc))[:, there] * MICRO
        ax.fill_betweenx(r.ph[there], ends[0], ends[-1], color=band, lw=0, alpha=0.6, label=f"_{name}_band", zorder=order)
        drawn, = ax.plot(anc[0] * MICRO, r.ph, color=line, lw=1.2, label=f"_{name}", zorder=order + 0.5)
        handles.insert(0, (Patch(color=band, lw=0, alpha=0.6), drawn))
        words.insert(0, text)
    ax.set_xlim(left, right)
    ax.legend(handles, words, loc="lower right", title=f"At {r.temperature_c:.3g} °C, air of {r.air_co2_ppm:.4g} ppm",
              **LEGEND)


def _group_names(results: pd.DataFrame, group: str) -> list[str]:
    """Groups from the largest to the smallest; lakes without one do not count."""
    counts = results[group].value_counts() if group in results else pd.Series(dtype=int)
    return sorted((name for name in counts.index if name), key=lambda name: (-counts[name], name))


def _weights(results: pd.DataFrame) -> tuple[Array, bool]:
    """Weight of each lake and whether the survey gives one; 1 where it does not."""
    weight = _numbers(results, "survey_weight")
    given = bool(np.isfinite(weight).any())
    return (np.nan_to_num(weight) if given else np.ones(len(results))), given


def plot_distribution(results: pd.DataFrame, scheme: Scheme, *, ax: Axes, group: str = "region",
                      anc_limit_ueq_l: float = np.nan) -> Axes:
    """Share of the lakes up to each ANC: all of them in bold, and a curve for each of the largest groups."""
    x = _numbers(results, "anc_used_ueq_l")
    weight, weighted = _weights(results)
    names = _group_names(results, group)
    shown = names[:GROUP_CURVES] if len(names) > 1 else []
    more = f" ({len(shown)} largest of {len(names)} groups)" if len(names) > len(shown) > 0 else ""
    ax.set_title(f"How ANC is spread{more}")
    known = np.isfinite(x) & (weight > 0.0)
    if not known.any():
        return empty(ax, "No lake has an ANC")
    anc_axis(ax, x[known], [] if scheme.quantity == "ph" else limits_of(scheme))
    ax.set_ylim(0.0, 101.0)
    ax.set_yticks(range(0, 101, 20))
    ax.set(xlabel=anc_label(results), ylabel="Share of the population, by survey weight [%]" if weighted
           else "Share of the lakes sampled [%]")
    limit_lines(ax, scheme, anc_limit_ueq_l, named=False)
    curves = [_cumulative(short_name(name), color, x, weight, known & (results[group] == name).to_numpy())
              for name, color in zip(shown, CURVE_COLORS[::-1], strict=False)]
    curves = [c for c in curves if c.x.size] + [_cumulative("all lakes", INK, x, weight, known, bold=True)]
    left, right = ax.get_xlim()
    for curve, dashes in zip(curves, (*DASHES[:len(curves) - 1], "-"), strict=True):
        ax.step([left, *curve.x, right], [0.0, *curve.share, 100.0], where="post", color=curve.color, ls=dashes,
                lw=2.0 if curve.bold else 1.1, label=curve.name.strip(), zorder=2.6 if curve.bold else 2.5)
    ax.set_xlim(left, right)
    if len(curves) > 1 and not label_curves(ax, curves):
        _curve_legend(ax, curves)
    return ax


def _cumulative(name: str, color: str, x: Array, weight: Array, of: NDArray[np.bool_], *, bold: bool = False) -> Curve:
    order = np.argsort(x[of], kind="stable")
    total = np.cumsum(weight[of][order])
    return Curve(name, color, x[of][order], 100.0 * total / total[-1] if total.size else total, bold)


def _curve_legend(ax: Axes, curves: list[Curve]) -> None:
    """Names in the order of the medians, the lowest ANC first."""
    lines = {line.get_label(): line for line in ax.lines}
    order = sorted(curves, key=lambda c: (c.at(50.0), c.name))
    is_right_free = max(across(ax, c.at(45.0)) for c in curves) < 0.65
    legend = ax.legend([lines[c.name.strip()] for c in order], [c.name for c in order], title="by median, lowest first",
                       loc="lower right" if is_right_free else "upper left",
                       bbox_to_anchor=(1.0, 0.0) if is_right_free else (0.0, 0.93), **LEGEND)
    for text in legend.get_texts():
        text.set_parse_math(False)


def plot_classes(results: pd.DataFrame, scheme: Scheme, *, ax: Axes, group: str = "region") -> Axes:
    """Lakes of each group by class as bars end to end, the group with the largest share at risk on top."""
    weight, weighted = _weights(results)
    of_class = results["class"].to_numpy()
    at_risk = np.isin(of_class, [c.name for c in scheme.classes if c.at_risk])
    names = _group_names(results, group)[:GROUP_BARS]
    sets = {name: (results[group] == name).to_numpy() for name in names} if len(names) > 1 else {}
    if not sets:
        sets = {"all lakes": np.ones(len(results), dtype=bool)}
    share = {name: float(weight[of & at_risk].sum()) / max(float(weight[of].sum()), 1e-300) for name, of in sets.items()}
    order = sorted(sets, key=lambda name: (share[name], name))
    longest = max(float(weight[of].sum()) for of in sets.values())
    for place, name in enumerate(order):
        of = sets[name]
        end = _bar(ax, place, [(float(weight[of & (of_class == c)].sum()), color)
                               for c, (color, _) in styles_of(scheme).items()], longest)
        words = (f"{share[name]:.0%} at risk ({int(of.sum()):,} sampled)" if weighted else
                 f"{int((of & at_risk).sum()):,} of {int(of.sum()):,} at risk")
        ax.annotate(words, (end, place), (4.0, 0.0), textcoords="offset points", va="center", fontsize=SIZE, color=INK)
    left_out = len(_group_names(results, group)) - len(names)
    ax.set_yticks(range(len(order)), [short_name(name) for name in order], parse_math=False)
    ax.tick_params(axis="y", length=0)
    ax.set(xlim=(0.0, BAR_ROOM * longest or 1.0), ylim=(-0.6, max(len(order), 3) - 0.4), xlabel=(
        "Lakes of the population, by survey weight" if weighted else "Lakes sampled (counts, no shares of a population)"),
        title="Classes" + (f" by {group.replace('_', ' ')}" if len(sets) > 1 else "")
        + (f" ({left_out} small groups left out)" if left_out > 0 else ""))
    ax.xaxis.set_major_locator(MaxNLocator(6, integer=True, steps=[1, 2, 5, 10]))
    ax.xaxis.set_major_formatter(FuncFormatter(lambda v, _: f"{v:,.0f}"))
    return ax


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
    """Critical load against the acid deposition that counts: sulfur and leached nitrate; exceeded below the line 1:1."""
    load, over = (_numbers(results, name) for name in ("critical_load_meq_m2_yr", "exceedance_meq_m2_yr"))
    fallen = load + over
    known = np.isfinite(fallen)
    most = float(fallen[known].max(initial=1e-3))
    top, bottom = min(float(load[known].max()), LOAD_ROOM * most), max(min(float(load[known].min()), 0.0), -most)
    top = max(top, 1.1 * most)
    low, high = (f"critical_load_meq_m2_yr_{end}" for end in ("low", "high"))
    has_lines = known.sum() <= FEW_LAKES and bool(np.isfinite(_numbers(results, low)).any())
    if has_lines:
        ax.vlines(fallen[known], _numbers(results, low)[known], _numbers(results, high)[known], color=INK, lw=0.8,
                  label="_interval", zorder=2.4)
    _marks(ax, results, scheme, fallen, load)
    margin = 0.06 * (top - bottom)
    ax.set(xlim=(0.0, 1.06 * most), ylim=(bottom - margin, top + margin), ylabel="Critical load [meq/m²/yr]",
           xlabel="Sulfur deposition and leached nitrate [meq/m²/yr]",
           title="Critical load and acid deposition" + (f" (line: {COVERAGE:.0%} interval)" if has_lines else ""))
    edge = ax.get_xlim()[1]
    ax.plot([0.0, edge], [0.0, edge], color=INK, lw=1.0, label="_one_to_one", zorder=2)
    ax.annotate("1 : 1", (edge, edge), (-3.0, 4.0), textcoords="offset points", ha="right", va="bottom", fontsize=SIZE,
                color=INK)
    ax.fill_between([0.0, edge], [0.0, edge], ax.get_ylim()[0], color=CLASS_COLORS[2], alpha=0.08, lw=0, zorder=0)
    above = int((load[known] > ax.get_ylim()[1]).sum())
    exceeded = over[known] > 0.0
    _corner(ax, f"exceeded: {int(exceeded.sum()):,} of {int(known.sum()):,} lakes", right=True)
    _corner(ax, f"not exceeded: {int((~exceeded).sum()):,}" + (f", {above:,} of them beyond the axis" if above else ""))
    return ax


def _corner(ax: Axes, words: str, *, right: bool = False) -> None:
    """Words in the lower right corner, or in the upper left one."""
    ax.text(0.98 if right else 0.02, 0.02 if right else 0.98, words, transform=ax.transAxes, ha="right" if right else "left",
            va="bottom" if right else "top", fontsize=8, color=INK, zorder=5,
            bbox=WHITE | {"pad": 1.5})


FIRST = (("critical_load_meq_m2_yr", "Critical load [meq/m²/yr]", "Critical load, deposition not known"),
         (TO_PH_6, "Strong acid to pH 6, open to air [µeq/L]", "Acid to pH 6"),
         ("acid_to_anc_limit_ueq_l", "ANC above the limit [µeq/L]", "ANC above the limit"))


def plot_first(results: pd.DataFrame, scheme: Scheme, *, ax: Axes) -> Axes:
    """Bars of the lakes to look at first: critical load, else acid to pH 6 open to air, else ANC above the limit."""
    found = next((f for f in FIRST if np.isfinite(_numbers(results, f[0])).any()), None)
    if found is None:
        ax.set_title("Lakes to look at first")
        return empty(ax, "No critical load, acid to pH 6 or ANC is known")
    column, label, title = found
    known = results[np.isfinite(_numbers(results, column))]
    first = priorities(known, scheme)["row"].head(FIRST_LAKES)
    table = known.set_index("row", drop=False).loc[first.tolist()]
    place, value = np.arange(len(table))[::-1], _numbers(table, column)
    styles = styles_of(scheme)
    ax.barh(place, value, height=0.62, color=[styles[name][0] for name in table["class"]])
    low, high = (_numbers(table, f"{column}_{end}") for end in ("low", "high"))
    has_lines = bool(np.isfinite(low).any())
    if has_lines:
        ax.hlines(place, low, high, color=INK, lw=1.0, label="_interval")
    anc_axis(ax, np.concatenate([value, low[np.isfinite(low)], high[np.isfinite(high)]]), [0.0])
    ax.axvline(0.0, color="#666666", lw=0.8)
    ax.set_yticks(place, lake_names(table), parse_math=False)
    ax.tick_params(axis="y", length=0)
    below = "; negative: below it already" if column == TO_PH_6 and (value < 0.0).any() else ""
    line = f" (line: {COVERAGE:.0%} interval)" if has_lines else ""
    ax.set(xlabel=f"{label}{below}", ylim=(-0.6, max(len(table), 3) - 0.4), title=f"{title}, first lakes to look at{line}")
    return ax


def has_loads(results: pd.DataFrame) -> bool:
    """Whether any lake has both a critical load and a deposition to set against it."""
    return bool(np.isfinite(_numbers(results, "critical_load_meq_m2_yr") + _numbers(results, "exceedance_meq_m2_yr")).any())

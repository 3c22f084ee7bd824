"""Panels of a lake survey about ANC, on axes that are handed in and returned: pH against it, and how it is spread."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.legend_handler import HandlerTuple
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from numpy.typing import NDArray

from aquabuf.assess.lake.answers import ANC_KINDS
from aquabuf.assess.lake.response import CO2_TIMES, ResponseCurves
from aquabuf.assess.lake.schemes import Scheme
from aquabuf.report.labels import SIZE
from aquabuf.report.lake_axes import Curve, across, anc_axis, anc_kind, anc_label, label_curves, limit_lines
from aquabuf.report.lake_marks import FEW_LAKES, MICRO, empty, group_names, limits_of, marks, numbers, weights
from aquabuf.report.style import CURVE_COLORS, FAINT, GRAY, INK, short_name

__all__ = ["GROUP_CURVES", "GROUP_LAKES", "plot_distribution", "plot_response"]

Array = NDArray[np.float64]

LEAST_PH_SPAN = 1.5
WATER_COLORS = {"clear": ("#b9cfe0", "#2f5d86"), "brown": ("#d9c3a3", "#7a5320")}  # band and line
GROUP_CURVES, GROUP_LAKES = 6, 5  # most groups; least lakes of one that make a distribution
DASHES = ("-", (0, (5, 1.5)), (0, (1.5, 1.2)), (0, (6, 1.5, 1.5, 1.5)), (0, (3, 1)), (0, (8, 2)))
LEGEND: Any = {"fontsize": SIZE, "title_fontsize": SIZE, "alignment": "left", "borderaxespad": 0.2, "frameon": True,
               "facecolor": "white", "edgecolor": "none", "framealpha": 0.85}


def plot_response(results: pd.DataFrame, scheme: Scheme, response: ResponseCurves | None, *, ax: Axes,
                  anc_limit_ueq_l: float = np.nan) -> Axes:
    """pH in the lake against the ANC in use, over the curves of clear and brown water at equilibrium with air."""
    x, in_lake, at_air = (numbers(results, name) for name in ("anc_used_ueq_l", "ph", "ph_at_air"))
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
        ax.set_title("pH and ANC (open marks: at equilibrium with air)")
    marks(ax, results, scheme, x, y, hollow=none_read)
    anc_axis(ax, x[known], [] if scheme.quantity == "ph" else limits_of(scheme))
    _ph_axis(ax, np.concatenate([y[known], at_air[known & np.isfinite(at_air)] if shows_air else []]))
    ax.set(xlabel=anc_label(results, scheme),
           ylabel="pH at equilibrium with air (none was read)" if none_read else "pH")
    limit_lines(ax, scheme, anc_limit_ueq_l)
    if scheme.quantity == "ph":
        _ph_limits(ax, scheme)
    if response is not None:
        _curves(ax, response, anc_kind(results) == ANC_KINDS[-1])
    return ax


def _ph_axis(ax: Axes, ph: Array) -> None:
    low, high = float(ph.min()), float(ph.max())
    half = 0.56 * max(high - low, LEAST_PH_SPAN)
    ax.set_ylim(0.5 * (low + high) - half, 0.5 * (low + high) + half)


def _ph_limits(ax: Axes, scheme: Scheme) -> None:
    """Level lines at the limits of a scheme on pH, with their values at the right end."""
    for ph in limits_of(scheme):
        ax.axhline(ph, color=GRAY, lw=0.8, label="_class_limit", zorder=1.5)
        ax.annotate(f"{ph:g}", (1.0, ph), (2.0, 0.0), xycoords=("axes fraction", "data"), textcoords="offset points",
                    va="center", fontsize=SIZE, color=INK, annotation_clip=True)


def _curves(ax: Axes, r: ResponseCurves, is_charge_balance: bool) -> None:
    """Clear and brown water from the CO2 of air to the multiple of it."""
    brown = r.brown_eq_l + is_charge_balance * r.left_out_eq_l
    waters = [("clear", r.clear_eq_l, f"clear water: CO2 of air (line) to {CO2_TIMES[-1]:g} times", 0.5)]
    if np.isfinite(brown).any():
        waters.append(("brown", brown, f"brown water, DOC {r.doc_mg_l:.3g} mg/L", 0.4))
    signs = [_band(ax, r.ph, anc * MICRO, name, order) for name, anc, _, order in waters]
    ax.legend(handles=signs, labels=[words for _, _, words, _ in waters], loc="lower right", handler_map={
        tuple: HandlerTuple(ndivide=1)}, title=f"At {r.temperature_c:.3g} °C, air of {r.air_co2_ppm:.4g} ppm", **LEGEND)


def _band(ax: Axes, ph: Array, anc_ueq_l: Array, name: str, order: float) -> tuple[Patch, Line2D]:
    """Band between the first and the last multiple of CO2 and a line at the first; returns their signs for a legend."""
    band, color = WATER_COLORS[name]
    there = np.isfinite(anc_ueq_l[0])
    ends = np.where(np.isfinite(anc_ueq_l), anc_ueq_l, np.nanmax(anc_ueq_l))[:, there]
    ax.fill_betweenx(ph[there], ends[0], ends[-1], color=band, lw=0, alpha=0.6, label=f"_{name}_band", zorder=order)
    line, = ax.plot(anc_ueq_l[0], ph, color=color, lw=1.2, label=f"_{name}", zorder=order + 3.0)
    return Patch(color=band, lw=0, alpha=0.6), line


def plot_distribution(results: pd.DataFrame, scheme: Scheme, *, ax: Axes, group: str = "region",
                      anc_limit_ueq_l: float = np.nan) -> Axes:
    """Share of the lakes up to each ANC: all of them in bold, and a curve for each of the largest groups."""
    x = numbers(results, "anc_used_ueq_l")
    weight, weighted = weights(results)
    known = np.isfinite(x) & (weight > 0.0)
    ax.set_title("How ANC is spread")
    if not known.any():
        return empty(ax, "No lake has an ANC")
    names = group_names(results, group)
    large = [name for name in names if int((known & (results[group] == name)).sum()) >= GROUP_LAKES]
    shown = large[:GROUP_CURVES] if len(names) > 1 else []
    if len(names) > len(shown) > 0:
        ax.set_title(f"How ANC is spread ({len(shown)} of {len(names)} groups)")
    anc_axis(ax, x[known], [] if scheme.quantity == "ph" else limits_of(scheme))
    ax.set_ylim(0.0, 101.0)
    ax.set_yticks(range(0, 101, 20))
    ax.set(xlabel=anc_label(results, scheme), ylabel="Share of the population, by survey weight [%]" if weighted
           else "Share of the lakes sampled [%]")
    limit_lines(ax, scheme, anc_limit_ueq_l, named=False)
    curves = [_cumulative(short_name(name), color, x, weight, known & (results[group] == name).to_numpy())
              for name, color in zip(shown, CURVE_COLORS[::-1], strict=False)]
    curves.append(_cumulative("all lakes", INK, x, weight, known, bold=True))
    left, right = ax.get_xlim()
    for curve, dashes in zip(curves, (*DASHES[:len(curves) - 1], "-"), strict=True):
        ax.step([left, *curve.x, right], [0.0, *curve.share, 100.0], where="post", color=curve.color, ls=dashes,
                lw=2.0 if curve.bold else 1.1, label=curve.name.strip(), zorder=2.6 if curve.bold else 2.5)
    if len(curves) > 1 and not label_curves(ax, curves):
        _curve_legend(ax, curves)
    return ax


def _cumulative(name: str, color: str, x: Array, weight: Array, of: NDArray[np.bool_], *, bold: bool = False) -> Curve:
    order = np.argsort(x[of], kind="stable")
    total = np.cumsum(weight[of][order])
    return Curve(name, color, x[of][order], 100.0 * total / total[-1], bold)


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

"""The figure of one titration: curve, Gran line, slope of the curve, and what the fit leaves."""

from __future__ import annotations

import textwrap
import warnings
from pathlib import Path

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from matplotlib.ticker import FuncFormatter, MaxNLocator
from numpy.typing import NDArray

from aquabuf.assess.titration.assess import TitrationResult
from aquabuf.assess.titration.gran import first_gran
from aquabuf.assess.titration.inflection import SPANS, slopes
from aquabuf.assess.titration.smooth import fit_of
from aquabuf.assess.titration.tables import MICRO
from aquabuf.assess.uncertainty import COVERAGE, TO_COVERAGE
from aquabuf.report.labels import SIZE, label_column
from aquabuf.report.style import CALM, FAINT, INK, STYLE, WARNED
from aquabuf.report.titration_view import (
    OneTitration,
    amount,
    finding_lines,
    marks_of,
    number,
    one_titration,
    title_line,
    volume,
)

__all__ = ["plot_curve", "plot_derivative", "plot_gran", "plot_residuals", "save_titration", "titration_figure"]

Array = NDArray[np.float64]

GRAY = "#777777"
BAND = "#dfe6ee"
MANY = 60               # points, beyond which they are drawn small
MANY_SLOPES = 40        # on a curve without inflection, beyond which slopes are taken over more than one step
MARGIN = 0.03           # of an axis beyond the data
SLOPE_ROOM = 1.3        # height of the axis over the steepest slope, for words above it
RESIDUAL_EDGE, RESIDUAL_ROOM = 1.15, 1.5  # of the largest residual, below and above, there for words too
LEAST_SCATTERS = 3.0    # of expected scatter that the axis of residuals shows
WRAP = 46               # letters per line of words in an empty panel
WIDE, HIGH = 11.0, 8.0  # of the page in inches
TITLE_INCHES, LINE_INCHES, BELOW_INCHES, FOOT_INCHES = 0.36, 0.145, 0.12, 0.2
SIGNS = (f"± is half the {COVERAGE:.0%} interval. Hollow points are left out. Diamonds: end points, the recommended "
         f"one filled.")


def _size(one: OneTitration) -> float:
    """Diameter of a point."""
    return 4.5 if one.added.size <= MANY else 3.0


def _across(ax: Axes, one: OneTitration, *also: float) -> None:
    """Horizontal axis: titrant from nothing on, and whatever else must be seen."""
    low, high = one.span
    low, high = min(low, *also, high), max(high, *also, low)
    margin = MARGIN * (high - low)
    ax.set_xlim(low - margin, high + margin)
    ax.set_xlabel(f"{one.titrant} added [{one.unit}]")
    ax.xaxis.set_major_locator(MaxNLocator(7, steps=[1, 2, 5, 10]))


def _say(ax: Axes, words: str) -> None:
    """Words in an empty panel."""
    ax.text(0.5, 0.5, textwrap.fill(words, WRAP), transform=ax.transAxes, ha="center", va="center", color=GRAY,
            parse_math=False)


def _note(ax: Axes, words: str, *, right: bool = False) -> None:
    """Small words in an upper corner, readable over whatever is there."""
    ax.text(0.98 if right else 0.02, 0.98, words, transform=ax.transAxes, ha="right" if right else "left", va="top",
            fontsize=SIZE, color=INK, parse_math=False, linespacing=1.4, zorder=5,
            bbox={"facecolor": "white", "edgecolor": "none", "alpha": 0.85, "pad": 1.5})


def _dots(ax: Axes, one: OneTitration, y: Array, used: NDArray[np.bool_], words: str) -> None:
    """Points: used ones filled, others hollow, those that a finding is about as triangles."""
    size = _size(one)
    for mask, marker, color, face, label in (
            (used & ~one.named, "o", CALM, CALM, words), (~used & ~one.named, "o", FAINT, "white", "left out"),
            (one.named, "^", WARNED, WARNED, "named in a finding")):
        if mask.any():
            ax.plot(one.added[mask], y[mask], ls="", marker=marker, ms=1.5 * size if marker == "^" else size, mec=color,
                    mfc=face, mew=0.9, label=f"{label} ({int(mask.sum())})", zorder=3)


def plot_curve(result: TitrationResult, i: int, *, ax: Axes) -> Axes:
    """pH against titrant: readings, the fitted curve, and the end points of every method."""
    one = one_titration(result, i)
    _dots(ax, one, one.ph, one.used, one.used_by)
    if one.curve_added.size:
        ax.plot(one.curve_added, one.curve_ph, color=INK, lw=0.9, label="_fit", zorder=3.2)
    line = " (line: fit)" if one.curve_added.size else ""
    ax.set(ylabel="pH", title=f"Titration curve{line}")
    _across(ax, one)
    if not one.added.size:
        ax.set_yticks([])
        _say(ax, "No reading could be brought to pH")
        return ax
    low, high = float(np.nanmin(one.ph)), float(np.nanmax(one.ph))
    margin = max(0.06 * (high - low), 0.05)
    ax.set_ylim(low - margin, high + margin)
    marks = marks_of(result, one, i)
    for mark in (m for m in marks if np.isfinite(m.x)):
        ax.plot(mark.x, mark.y, ls="", marker="D", ms=6.5 if mark.bold else 4.5, mec=INK, mew=0.9,
                mfc=INK if mark.bold else "white", label="_mark", zorder=3.5)
    label_column(ax, marks, one.added, one.ph)
    if not one.used.all() or one.named.any():
        ax.legend(loc="upper left" if one.is_base else "lower left", fontsize=SIZE, handletextpad=0.2,
                  borderaxespad=0.2)
    return ax


def plot_gran(result: TitrationResult, i: int, *, ax: Axes) -> Axes:
    """First Gran function against titrant: the chosen points, their line down to its root, and the slope of theory."""
    one, s = one_titration(result, i), result.solved
    g, c = s.gran, s.curves
    f = first_gran(one.ph, c.dilution[i, one.at]) * MICRO
    chosen = (one.at >= g.first[i]) & (one.at <= g.last[i]) & (g.first[i] >= 0)
    root = float(g.acid[i]) / one.per_added
    ax.set(ylabel=f"First Gran function [{'µmol/kg' if c.by_mass[i] else 'µmol/L'}]", title="Gran line")
    _across(ax, one, *([root] if np.isfinite(root) else []))
    _dots(ax, one, f, chosen, "on the line")
    ax.axhline(0.0, color=FAINT, lw=0.8, zorder=0)
    top = float(f.max(initial=0.0)) or 1.0
    ax.set_ylim(-0.05 * top, (1.08 if chosen.any() else 1.2) * top)
    ax.yaxis.set_major_formatter(FuncFormatter(lambda v, _: f"{v:,.6g}"))
    if not f.size:
        ax.set_yticks([])
    if not chosen.any():
        _note(ax, f"No line: {s.estimates['gran'].why_not[i]}", right=one.is_base)
        return ax
    _gran_line(ax, one, float(g.slope[i]) * MICRO, float(g.slope_ratio[i]), root, one.added[chosen])
    e = result.choice if result.choice.method[i] == "gran" else s.estimates["gran"]
    ax.plot(root, 0.0, ls="", marker="D", ms=6.5, mec=INK, mfc=INK if e is result.choice else "white",
            label="_root", zorder=4, clip_on=False)
    words = [f"Root {volume(one, root)}", f"alkalinity {amount(s, i, e.value[i], e.u[i])}",
             f"{g.points[i]} points, slope {g.slope_ratio[i]:.2f} of theory (dashed)"]
    if not g.straight[i]:
        words.append("no straight run of points: line in doubt")
    _note(ax, "\n".join(words), right=one.is_base)
    return ax


def _gran_line(ax: Axes, one: OneTitration, slope: float, ratio: float, root: float, chosen: Array) -> None:
    """The line from its root through the chosen points, and the one that strength and electrode would give."""
    far = chosen[0] if one.is_base else chosen[-1]
    x = np.array([root, far])
    rise = slope * one.per_added * (x - root)
    ax.plot(x, rise / ratio, color=GRAY, lw=1.0, ls=(0, (4, 3)), label="_theory", zorder=3.1)
    ax.plot(x, rise, color=INK, lw=1.2, label="_line", zorder=3.2)


def plot_derivative(result: TitrationResult, i: int, *, ax: Axes) -> Axes:
    """Change of pH per titrant, with the inflection and the step it is known to."""
    one, b = one_titration(result, i), result.solved.inflection
    at, width = float(b.acid[i]) / one.per_added, float(b.resolution[i]) / one.per_added
    span = _steps(one, at, width)
    x, fall, _ = slopes(one.added[None], (-one.ph if one.is_base else one.ph)[None], span)
    ax.plot(x[0], fall[0], color=CALM, lw=0.9, marker="o", ms=0.7 * _size(one), label="_slope", zorder=2)
    ax.axhline(0.0, color=FAINT, lw=0.8, zorder=0)
    way = "Rise" if one.is_base else "Fall"
    ax.set(ylabel=f"{way} of pH [per {one.unit}]", title="Where pH changes fastest")
    _across(ax, one)
    if x.shape[1]:
        low, high = float(np.nanmin(fall, initial=0.0)), float(np.nanmax(fall, initial=0.0))
        ax.set_ylim(low - 0.05 * (high - low or 1.0), low + SLOPE_ROOM * (high - low or 1.0))
    else:
        ax.set_yticks([])
    if not np.isfinite(at):
        why = result.solved.estimates["inflection"].why_not[i]
        words = "No inflection is sought in a titration with base" if one.is_base else f"No inflection: {why}"
        _note(ax, words + (f"\nslopes over {span} steps" if span > 1 else ""))
        return ax
    ax.axvspan(at - 0.5 * width, at + 0.5 * width, color=BAND, lw=0, zorder=0)
    ax.axvline(at, color=INK, lw=1.0, zorder=1)
    u = result.solved.estimates["inflection"].own_u[i] / one.per_added
    right = at > np.mean(ax.get_xlim())
    words = f"Inflection {volume(one, at)}\n± {volume(one, TO_COVERAGE * u)}; slopes over {volume(one, width)} (band)"
    ax.annotate(words, (at, 0.98), (-5.0 if right else 5.0, 0.0), xycoords=("data", "axes fraction"),
                textcoords="offset points", ha="right" if right else "left", va="top", fontsize=SIZE, linespacing=1.4,
                parse_math=False)
    return ax


def _steps(one: OneTitration, at: float, width: float) -> int:
    """Number of steps that the steepest slope was taken over; of a curve without inflection, as many as it is long."""
    if not np.isfinite(at):
        return max(one.added.size // MANY_SLOPES, 1)
    for steps in SPANS:
        middle, size = 0.5 * (one.added[steps:] + one.added[:-steps]), one.added[steps:] - one.added[:-steps]
        if (np.isclose(size, width, rtol=1e-6, atol=0.0) & (np.abs(middle - at) <= width)).any():
            return steps
    return 1


def plot_residuals(result: TitrationResult, i: int, *, ax: Axes) -> Axes:
    """Reading less fitted curve against titrant, with the scatter expected of it; without a fit, the reason."""
    one, s = one_titration(result, i), result.solved
    found = fit_of(s, i)
    ax.set(ylabel="Reading less fitted curve [pH]", title="What the fit leaves")
    _across(ax, one)
    inside = np.isfinite(one.residual_ph)
    if not inside.any():
        ax.set_yticks([])
        _say(ax, f"No fit: {found.why_not[i]}")
        return ax
    scatter = float(s.curves.u_ph_scatter[i])
    band = _expected(one, scatter, float(s.curves.u_acid[i]) / abs(one.per_added))
    reach = max(float(np.abs(one.residual_ph[inside]).max()), LEAST_SCATTERS * scatter, 1e-4)
    reach = max(reach, min(float(band.max()), 2.0 * reach))
    band = np.minimum(band, RESIDUAL_EDGE * reach)
    ax.fill_between(one.curve_added, -band, band, color=BAND, lw=0, label="_expected", zorder=0)
    ax.axhline(0.0, color=INK, lw=0.9, zorder=1)
    _dots(ax, one, one.residual_ph, inside, "in the fit")
    ax.set_ylim(-RESIDUAL_EDGE * reach, RESIDUAL_ROOM * reach)
    for k in np.flatnonzero(one.named & inside).tolist():
        _row(ax, one, k)
    chi2, offset, u = found.fit.reduced_chi2[i], found.fit.offset_ph[i], found.u_offset[i]
    sign, half = "+" if offset > 0.0 else "", TO_COVERAGE * u
    _note(ax, f"{found.points[i]} points, reduced chi-squared {number(chi2, chi2)}; band: expected scatter\n"
              f"Electrode offset {sign}{number(offset, half)} ± {number(half, half)} pH")
    return ax


def _expected(one: OneTitration, u_ph: float, u_added: float) -> Array:
    """Scatter of a reading expected along the fitted curve: of pH, and of the titrant where the curve is steep."""
    if one.curve_added.size < 2:
        return np.full(one.curve_added.size, u_ph)
    return np.hypot(u_ph, np.gradient(one.curve_ph, one.curve_added) * u_added)


def _row(ax: Axes, one: OneTitration, k: int) -> None:
    """The line of the file of points beside a point that a finding is about."""
    right = one.added[k] > np.mean(ax.get_xlim())
    ax.annotate(f"row {one.row[k]}", (one.added[k], one.residual_ph[k]), (-6.0 if right else 6.0, 0.0), color=WARNED,
                textcoords="offset points", ha="right" if right else "left", va="center", fontsize=SIZE)


def titration_figure(result: TitrationResult, i: int) -> Figure:
    """One landscape page of titration `i` of `result.solved`: four panels under its result and findings."""
    lines = finding_lines(result, i)
    with matplotlib.rc_context(STYLE):
        head = (TITLE_INCHES + LINE_INCHES * len(lines) + BELOW_INCHES) / HIGH
        foot = FOOT_INCHES / HIGH
        layout = ConstrainedLayoutEngine(rect=(0.0, foot, 1.0, 1.0 - head - foot), hspace=0.04, wspace=0.03, w_pad=0.08)
        figure = Figure(figsize=(WIDE, HIGH), layout=layout)
        FigureCanvasAgg(figure)
        axes = figure.subplots(2, 2)
        plot_curve(result, i, ax=axes[0, 0])
        plot_gran(result, i, ax=axes[0, 1])
        plot_derivative(result, i, ax=axes[1, 0])
        plot_residuals(result, i, ax=axes[1, 1])
        _head(figure, title_line(result, i), lines)
    return figure


def _head(figure: Figure, title: str, lines: list[str]) -> None:
    """Title and findings above the panels, and what the signs mean below them."""
    top = 1.0 - 0.1 / HIGH
    head = figure.suptitle(title, x=0.01, y=top, ha="left", va="top", parse_math=False, fontsize=11, fontweight="bold")
    findings = figure.text(0.01, top - (TITLE_INCHES - 0.1) / HIGH, "\n".join(lines), va="top", fontsize=8, color=INK,
                           linespacing=1.3, parse_math=False)
    signs = figure.text(0.99, 0.06 / HIGH, SIGNS, ha="right", va="bottom", fontsize=7, color=GRAY)
    for text in (head, findings, signs):
        text.set_in_layout(False)


def save_titration(result: TitrationResult, i: int, path: Path) -> None:
    """Write the page as a PNG; no date and no program name goes into it."""
    figure = titration_figure(result, i)
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph")  # a name in letters that the font lacks is drawn as boxes
        figure.savefig(path, format="png", dpi=150, metadata={"Software": None})

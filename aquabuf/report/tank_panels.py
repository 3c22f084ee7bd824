"""Panels of a neutralization, on axes that are handed in: titration curve, buffering, equalization, demand, what it is
sensitive to."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import LogLocator, MaxNLocator, NullLocator
from numpy.typing import NDArray

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.curve import band
from aquabuf.assess.tank.demand import Aim, Demand, demands
from aquabuf.assess.tank.design import Design
from aquabuf.report.dose_page import POINTS, text_width, wrapped
from aquabuf.report.dose_panels import SMALL, WINDOW, ax_width
from aquabuf.report.style import CALM, FAINT, GRAY, INK, WARNED
from aquabuf.report.tank_labels import (
    AWAY,
    DASHED,
    GROUND,
    LABEL_STEP,
    LEADER,
    ax_height,
    cut,
    label_gap,
    side_labels,
    spread,
)

__all__ = ["demand_groups", "plot_buffer", "plot_demand", "plot_equalization", "plot_sensitivity", "plot_titration",
           "sample_band", "stage_points", "tolerance_words"]

Array = NDArray[np.float64]

PERCENT = 100.0
PH_ENDS = (0.0, 14.0)       # of the axis of pH
BEYOND = 0.22               # of the span from the raw waste to the window, shown on both sides
STEPS = (1, 2, 2.5, 5, 10)  # of the numbers on an axis
MOST_LINES = 6
WIDEST_CHANGE = 200.0       # percent that a bar shows; beyond, its figure alone tells
MARKS = {"least": "<", "mean": "o", "most": ">"}


# ---------------------------------------------------------------- titration curve


class StagePoint(NamedTuple):
    """Set point of a tank on the titration curve of the mean waste."""

    name: str
    reagent_eq_l: float
    ph: float


def stage_points(design: Design) -> list[StagePoint]:
    """Where the set points of the tanks lie."""
    basis = design.basis
    at = [float(basis.chem.readout.base_at(s.setpoint_ph, basis.mean.amounts)) for s in design.layout.stages]
    return [StagePoint(s.name, base - basis.mean.base_eq_l, s.setpoint_ph)
            for s, base in zip(design.layout.stages, at, strict=True)]


def mean_ph(design: Design) -> float:
    """pH of the mean waste as it comes."""
    mean = design.basis.mean
    return float(design.basis.chem.readout.ph(mean.base_eq_l, mean.amounts))


def tolerance_words(design: Design) -> str:
    """The window as reagent."""
    fit = design.basis.fit
    share = float(fit.share_of_demand)
    told = f", {shown(PERCENT * share)} % of the demand" if np.isfinite(share) else ""
    return f"window: {shown(float(fit.tolerance_eq_l))} eq/L wide{told}"


def _on_curve(ax: Axes, point: StagePoint, words: str, left: bool, curve: tuple[Array, Array]) -> bool:
    """Whether words beside a point of the curve would lie on it."""
    inch = (ax.get_xlim()[1] - ax.get_xlim()[0]) / ax_width(ax)
    along = np.linspace(AWAY, AWAY + text_width(words, SMALL), 40) * (-inch if left else inch)
    return bool(np.abs(np.interp(point.reagent_eq_l + along, *curve) - point.ph).min() < 0.8 * label_gap(ax))


def sample_band(design: Design) -> tuple[Array, Array, Array] | None:
    """pH, lowest and highest reagent [eq/L] of the mean waste over the samples titrated; None where none has several.

    Each waste with several samples moves the curve by its share of the mean; nan where no sample was measured.
    """
    several = [(k, a) for k, a in enumerate(design.job.arrivals) if len(a.samples) > 1 and a.waste.curve is not None]
    if not several:
        return None
    ph = design.curve["ph"].to_numpy(dtype=float)
    low = high = design.curve["reagent_eq_l"].to_numpy(dtype=float)
    for k, arrival in several:
        share, found = float(design.basis.mean.amounts[k]), band(arrival.samples, ph)
        own = arrival.waste.curve.base_at(ph)  # type: ignore[union-attr]
        low, high = low + share * (found.lowest - own), high + share * (found.highest - own)
    return ph, low, high


def _window(ax: Axes, design: Design) -> None:
    ax.axhspan(design.job.window.low, design.job.window.high, label="_window", zorder=0.4, **WINDOW)


def plot_titration(design: Design, *, ax: Axes) -> Axes:
    """pH against reagent with window, raw waste, set points, and the band of several samples."""
    window, fit, points = design.job.window, design.basis.fit, stage_points(design)
    ph, reagent = (design.curve[name].to_numpy(dtype=float) for name in ("ph", "reagent_eq_l"))
    ends = np.interp([window.low, window.high], ph, reagent)
    marks = [0.0, *ends, *(p.reagent_eq_l for p in points)]
    reach = max(marks) - min(marks)
    ax.set(ylim=PH_ENDS, xlim=(min(marks) - BEYOND * reach, max(marks) + BEYOND * reach))
    _window(ax, design)
    samples = sample_band(design)
    if samples is not None:
        ax.fill_betweenx(samples[0], samples[1], samples[2], facecolor=FAINT, alpha=0.6, lw=0, label="_samples",
                         zorder=1)
    ax.axvline(0.0, color=FAINT, lw=0.8, zorder=0.6)
    ax.plot(reagent, ph, color=INK, lw=1.6, label="_curve", zorder=3)
    raw = mean_ph(design)
    ax.plot(0.0, raw, ls="", marker="s", ms=6, mfc="white", mec=INK, label="_raw", zorder=4)
    acid = float(fit.demand_eq_l) >= 0.0  # the waste lacks base: lower right and upper left are free
    for p in points:
        ax.plot(p.reagent_eq_l, p.ph, ls="", marker="o", ms=6, mfc=WARNED, mec=INK, label="_setpoint", zorder=4)
    last = len(points) - 1
    words = [(p.reagent_eq_l, p.ph, f"{p.name}: pH {shown(p.ph)}{', the aim' if k == last and k else ''}")
             for k, p in enumerate(points)]
    gap = label_gap(ax)
    flat = [_on_curve(ax, p, said, acid, (reagent, ph)) for p, (_, _, said) in zip(points, words, strict=True)]
    at = side_labels(ax, words, left=acid, lifted=flat)
    ax.annotate(f"{'waste' if len(design.job.wastes) == 1 else 'mean of the wastes'}: pH {raw:.2f}", (0.0, raw),
                (6.0, -7.0) if acid else (-6.0, 7.0), textcoords="offset points", ha="left" if acid else "right",
                va="top" if acid else "bottom", fontsize=SMALL, bbox=GROUND, zorder=5, annotation_clip=False)
    inside = [y for y in at if window.low - gap < y < window.high + 2.0 * gap]
    lines = wrapped(tolerance_words(design), 0.7 * ax_width(ax), SMALL)
    step = LABEL_STEP * SMALL / POINTS / ax_height(ax) * (PH_ENDS[1] - PH_ENDS[0])
    level = max([window.high, *(y + 0.5 * gap for y in inside)]) if acid else min(
        [window.low, *(y - 0.5 * gap for y in inside)])
    ax.text(0.02 if acid else 0.98, level + (0.3 * step if acid else -0.3 * step), "\n".join(lines),
            transform=ax.get_yaxis_transform(), ha="left" if acid else "right", va="bottom" if acid else "top",
            fontsize=SMALL, fontweight="bold", color=INK, zorder=5, bbox=GROUND)
    ax.yaxis.set_major_locator(MaxNLocator(7, steps=[1, 2, 10]))
    ax.xaxis.set_major_locator(MaxNLocator(5, steps=list(STEPS)))
    sign = "base" if acid else "base (negative: acid)"
    ax.set(ylabel="pH", xlabel=f"{sign} added [eq/L of waste]")
    ax.set_title(cut(ax, "Titration curve" + ("; gray: all samples" if samples is not None else "")))
    return ax


# ---------------------------------------------------------------- buffering


def _over(x: Any) -> Any:
    """1 over x, for the second scale; what is not above zero has none."""
    x = np.asarray(x, dtype=float)
    return np.divide(1.0, x, out=np.full(x.shape, np.nan), where=x > 0.0)


def plot_buffer(design: Design, *, ax: Axes) -> Axes:
    """pH against buffer intensity, with the process gain, its inverse, as a second scale on top."""
    fit, curve = design.basis.fit, design.curve
    intensity = curve["buffer_eq_l_ph"].to_numpy(dtype=float)
    steepest = 1.0 / float(fit.steepest_gain_ph_per_eq_l)
    ax.set_xscale("log")
    ax.set(ylim=PH_ENDS, xlim=(0.5 * min(float(intensity.min()), steepest), 1.6 * float(intensity.max())))
    _window(ax, design)
    ax.plot(intensity, curve["ph"], color=INK, lw=1.6, label="_buffer", zorder=3)
    for x, y, marker, color, label in ((float(fit.buffer_eq_l_ph), fit.setpoint_ph, "o", WARNED, "_aim"),
                                       (steepest, float(fit.steepest_ph), "D", "white", "_steepest")):
        ax.plot(x, y, ls="", marker=marker, ms=6, mfc=color, mec=INK, label=label, zorder=4)
    words = [(steepest, float(fit.steepest_ph),
              f"steepest, pH {float(fit.steepest_ph):.2f}:\n{_gain(fit.steepest_gain_ph_per_eq_l)}"),
             (float(fit.buffer_eq_l_ph), fit.setpoint_ph,
              f"aim, pH {fit.setpoint_ph:g}:\n{_gain(fit.gain_ph_per_eq_l)}")]
    _right_labels(ax, words)
    for axis in (ax.xaxis, gain := ax.secondary_xaxis("top", functions=(_over, _over)).xaxis):
        axis.set_major_locator(LogLocator(numticks=5))
        axis.set_minor_locator(NullLocator())
    gain.axes.tick_params(labelsize=8, pad=1)
    gain.axes.set_xlabel("process gain [pH per eq/L]", labelpad=3)
    ax.yaxis.set_major_locator(MaxNLocator(7, steps=[1, 2, 10]))
    ax.set(ylabel="pH", xlabel="buffer intensity [eq/L per pH]")
    return ax


def _gain(value: Any) -> str:
    """A process gain to three figures."""
    return f"{shown(float(f'{float(value):.3g}'))} pH per eq/L"


def _right_labels(ax: Axes, points: Sequence[tuple[float, float, str]]) -> None:
    """Words of two lines that end at the right edge, with lines to their points."""
    gap = 2.0 * label_gap(ax)
    low, high = ax.get_ylim()
    at = spread([y for _, y, _ in points], gap, low + gap, high - gap)
    for (x, y, words), level in zip(points, at, strict=True):
        wide = max(text_width(line, SMALL) for line in words.split("\n")) / ax_width(ax)
        across = float(ax.transAxes.inverted().transform(ax.transData.transform((x, y)))[0])
        ax.plot([across, 0.98 - wide], [y, level], transform=ax.get_yaxis_transform(), label="_leader", zorder=2.5,
                **LEADER)
        ax.text(0.99, level, words, transform=ax.get_yaxis_transform(), ha="right", va="center", fontsize=SMALL,
                multialignment="left", zorder=5, bbox=GROUND)


# ---------------------------------------------------------------- equalization


def plot_equalization(design: Design, *, ax: Axes) -> Axes:
    """What is left of the swings of strength against the volume that is always full, and the volume chosen."""
    eq = design.layout.equalization
    ax.set_title(cut(ax, "Equalization: swings of strength left"))
    if eq.table is None:
        ax.set_axis_off()
        _say(ax, f"No equalization tank: {eq.words.removeprefix('none: ').removeprefix('none, ')}.")
        return ax
    volume, left = eq.table["volume_m3"].to_numpy(dtype=float), PERCENT * eq.table["sd_share"].to_numpy(dtype=float)
    top = max(float(np.nanmax(left)), PERCENT)
    ax.set(xlim=(0.0, float(max(volume[-1], eq.content_m3))), ylim=(0.0, 1.12 * top))
    ax.plot(volume, left, color=INK, lw=1.4, marker="o", ms=3.0, label="_left", zorder=3)
    ax.set(xlabel="volume always full [m³]", ylabel="left of their standard\ndeviation [%]")
    ax.yaxis.set_major_locator(MaxNLocator(5))
    at = float(np.interp(eq.content_m3, volume, left))
    if eq.volume_m3 > 0.0:
        ax.plot([eq.content_m3, eq.content_m3], [0.0, at], color=WARNED, lw=1.1, ls=DASHED, label="_stem", zorder=2)
        ax.plot(eq.content_m3, at, ls="", marker="o", ms=7, mfc=WARNED, mec=INK, label="_chosen", zorder=4)
        words = f"chosen: {shown(eq.content_m3)} m³ always full, {shown(at)} % left"
        words += f"; {shown(eq.flow_m3)} m³ above it for the flow" if eq.flow_m3 > 0.0 else ""
    else:
        words = f"None is built: {eq.words.removeprefix('none for the strength: ')}"
    built = eq.volume_m3 > 0.0
    clear = np.interp(np.linspace(0.4, 1.0, 50) * ax.get_xlim()[1], volume, left).max() < 0.55 * top
    lines = wrapped(words, (0.6 if built else 0.9) * ax_width(ax), SMALL, most=MOST_LINES)
    ax.text(0.98, 0.97 if clear else 0.05, "\n".join(lines), transform=ax.transAxes, ha="right",
            va="top" if clear else "bottom", multialignment="left", fontsize=SMALL, zorder=5, bbox=GROUND)
    return ax


def _say(ax: Axes, words: str) -> None:
    """Words in place of a drawing."""
    ax.text(0.0, 0.95, "\n".join(wrapped(words, ax_width(ax), SMALL + 1.0)), transform=ax.transAxes, ha="left",
            va="top", fontsize=SMALL + 1.0, color=GRAY, parse_math=False)


# ---------------------------------------------------------------- demand


class DemandGroup(NamedTuple):
    """Least, mean and most need of a reagent at the set point, in one place of the works."""

    reagent: str
    place: str
    rows: tuple[Demand, ...]


def demand_groups(design: Design) -> list[DemandGroup]:
    """Each reagent in the waste as it comes, and behind the equalization tank where one is built."""
    basis, aim = design.basis, Aim(name="set point", ph=design.basis.aim_ph)
    built = design.layout.equalization.volume_m3 > 0.0
    found = []
    for kind, reagent in basis.chosen.items():
        for place, needs in (("as it comes", basis.needs), ("behind equalization", design.layout.needs))[:1 + built]:
            if kind in needs:
                rows = demands(basis.chem.readout, needs[kind].loads, [aim], [reagent],
                               carbon_carrier=basis.chem.carbon_carrier)
                found.append(DemandGroup(reagent.name, place, rows))
    return found


def plot_demand(design: Design, *, ax: Axes) -> Axes:
    """Reagent at the set point from least to most, a row per reagent and place; figures beside each row."""
    groups = demand_groups(design)
    kg = np.array([[d.product_kg_h for d in g.rows] for g in groups])
    told = [(" – ".join(shown(v) for v in of_kg),
             " – ".join(shown(d.fed_l_h) for d in g.rows) if g.rows[0].fed_l_h > 0.0 else "dry or gas")
            for g, of_kg in zip(groups, kg, strict=True)]
    rooms = [max(text_width(w, SMALL, True) for w in (head, *(t[k] for t in told))) + 0.12
             for k, head in enumerate(("kg/h", "L/h pumped"))]
    share = min(sum(rooms) / ax_width(ax), 0.7)
    top = float(np.nanmax(kg, initial=0.0)) or 1.0
    ax.set(xlim=(-0.03 * top, 1.06 * top / (1.0 - share)), ylim=(-0.5, len(groups) + 0.1))
    for y, (g, of_kg, words) in enumerate(zip(reversed(groups), kg[::-1], reversed(told), strict=True)):
        ax.plot(of_kg[[0, -1]], [y - 0.16] * 2, color=CALM, lw=2.2, label="_range", zorder=2)
        for d, value in zip(g.rows, of_kg, strict=True):
            color = WARNED if d.load.name == "mean" else CALM
            ax.plot(value, y - 0.16, ls="", marker=MARKS[d.load.name], ms=5.5, mfc=color, mec=INK, mew=0.6,
                    label=f"_{d.load.name}", zorder=3)
        name = wrapped(f"{g.reagent}, {g.place}", 0.97 * ax_width(ax), SMALL, most=1)[0]
        ax.text(0.0, y + 0.12, name, fontsize=SMALL, va="bottom", ha="left", zorder=4, parse_math=False)
        for right, text in zip((1.0 - rooms[1] / ax_width(ax), 1.0), words, strict=True):
            ax.text(right, y - 0.16, text, transform=ax.get_yaxis_transform(), ha="right", va="center", fontsize=SMALL)
    for right, text in zip((1.0 - rooms[1] / ax_width(ax), 1.0), ("kg/h", "L/h pumped"), strict=True):
        ax.text(right, len(groups) - 0.25, text, transform=ax.get_yaxis_transform(), ha="right", va="center",
                fontsize=SMALL, fontweight="bold")
    ax.set_yticks([])
    ax.spines["left"].set_visible(False)
    ax.set_xticks([t for t in MaxNLocator(4, steps=list(STEPS)).tick_values(0.0, top) if 0.0 <= t <= 1.02 * top])
    ax.set_xlabel("product as delivered [kg/h]", loc="left")
    ax.set_title(cut(ax, f"Reagent to pH {design.basis.aim_ph:g}: least – mean – most"))
    return ax


# ---------------------------------------------------------------- sensitivity


def plot_sensitivity(design: Design, *, ax: Axes, beside: Axes) -> Axes:
    """Change of demand and, beside it, of tolerance by one change at a time, the largest on top."""
    table = design.sensitivity
    change = PERCENT * (table[["demand_ratio", "tolerance_ratio"]].to_numpy(dtype=float) - 1.0)
    order = np.argsort(np.nan_to_num(np.abs(np.clip(change, -WIDEST_CHANGE, WIDEST_CHANGE))).max(axis=1), kind="stable")
    for axes, column, title in ((ax, 0, "Demand"), (beside, 1, "Tolerance")):
        value = change[order, column]
        drawn = np.clip(value, -WIDEST_CHANGE, WIDEST_CHANGE)
        place = np.arange(value.size)
        axes.barh(place, np.nan_to_num(drawn), height=0.66, color=[CALM if v >= 0.0 else FAINT for v in drawn],
                  edgecolor=INK, lw=0.5, label=f"_{title.lower()}")
        axes.axvline(0.0, color=INK, lw=0.8)
        reach = max(float(np.nanmax(np.abs(drawn), initial=0.0)), 1.0)
        room = (max(text_width(_signed(v), SMALL - 0.5) for v in value) + 0.06) / ax_width(axes)
        half = reach / max(1.0 - 2.0 * room, 0.2)
        axes.set(xlim=(-half, half), ylim=(-0.7, value.size - 0.3))
        for y, v, end in zip(place, value, np.nan_to_num(drawn), strict=True):
            axes.annotate(_signed(v), (end, y), (2.5 if end >= 0.0 else -2.5, 0.0), textcoords="offset points",
                          va="center", ha="left" if end >= 0.0 else "right", fontsize=SMALL - 0.5, zorder=5)
        axes.xaxis.set_major_locator(MaxNLocator(3, symmetric=True))
        axes.tick_params(axis="y", length=0)
        axes.set_title(title, fontsize=8.5)
    ax.set_xlabel("change [%]")
    beside.set_xlabel("change [%]")
    ax.set_yticks(range(len(order)), table["change"].to_numpy()[order], fontsize=SMALL, parse_math=False)
    beside.set_yticks([])
    return ax


def _signed(value: float) -> str:
    """A change in percent, as a label."""
    if not np.isfinite(value):
        return "not known"
    return (f"{value:+z.1f}" if round(value, 1) else "0") if abs(value) < 9.95 else f"{value:+,.0f}"

"""Panels of a simulated neutralization, on axes that are handed in: inflow, pH, reagent, cases, failures."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator, MultipleLocator
from numpy.typing import NDArray

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.trial import FAULT_S, Trial
from aquabuf.report.dose_page import POINTS, text_width, wrapped
from aquabuf.report.dose_panels import SMALL, WINDOW, ax_width, ph_axis
from aquabuf.report.style import CALM, FAINT, GRAY, INK, WARNED
from aquabuf.report.tank_labels import DASHED, DOTTED, GROUND, ax_height, cut, side_labels

__all__ = ["cases_words", "fault_name_room", "outside_runs", "plot_cases", "plot_early_ph", "plot_faults", "plot_flow",
           "plot_last_ph", "plot_reagent", "plot_strength", "plot_worst_ph", "rule_words", "time_unit"]

Array = NDArray[np.float64]

DAY_S, HOUR_S, MIN_S = 86400.0, 3600.0, 60.0
LONG_S = 3.0 * DAY_S     # from which time is told in days
SMALL_TITLE = 8.5
PERCENT, TOP_SHARE = 100.0, 105.0
FAR = 12.0               # largest time outside over that allowed, from which the axis is not linear throughout
KINDS = ((CALM, "-"), (GRAY, DASHED), (WARNED, DOTTED))  # of the tanks ahead of the last
NAME_SHARE = 0.3         # of the width of the failures that their names may take
TICKS_H, MOST_TICKS = (0.25, 0.5, 1.0, 2.0, 3.0, 4.0, 6.0, 8.0), 12
TICK_ROOM = 0.17         # inches from number to number up an axis
REAGENT_ROOM = 1.1       # inches of the name of a reagent
LEAST_SPAN = 0.2         # of an axis, over its largest value
NEAR_LIMIT = 2.0         # times the largest rate seen, up to which the largest of a feeder is drawn


def time_unit(trial: Trial) -> tuple[float, str]:
    """Seconds of the unit of the time axis, and its name."""
    return (DAY_S, "d") if trial.course.simulated_min * MIN_S > LONG_S else (HOUR_S, "h")


def _time_axis(ax: Axes, trial: Trial) -> float:
    """Limits of the time axis; its unit in seconds."""
    unit, _ = time_unit(trial)
    ax.set_xlim(0.0, trial.course.simulated_min * MIN_S / unit)
    span = ax.get_xlim()[1]
    if unit == DAY_S:
        ax.xaxis.set_major_locator(MaxNLocator(10, steps=[1, 2, 5, 10]))
    else:
        ax.xaxis.set_major_locator(MultipleLocator(next((h for h in TICKS_H if span / h <= MOST_TICKS), TICKS_H[-1])))
    return unit


def _ticks(ax: Axes) -> None:
    """As many numbers up the axis as there is room for."""
    ax.yaxis.set_major_locator(MaxNLocator(int(np.clip(ax_height(ax) / TICK_ROOM, 2, 6)), steps=[1, 2, 2.5, 5, 10]))
    ax.ticklabel_format(axis="y", useOffset=False)


def _title(ax: Axes, words: str) -> None:
    ax.set_title(cut(ax, words, SMALL_TITLE), fontsize=SMALL_TITLE, parse_math=False)


def _span(values: Array, *also: float) -> tuple[float, float]:
    """Ends of an axis that holds some values with a margin; zero where they are not far from it."""
    low, high = float(np.min([*values, *also])), float(np.max([*values, *also]))
    low = 0.0 if low > 0.0 and low < 0.6 * high else low
    high = 0.0 if high < 0.0 and high > 0.6 * low else high
    margin = 0.1 * max(high - low, LEAST_SPAN * max(abs(low), abs(high)), 1e-12)
    return (low if low == 0.0 else low - margin), (high if high == 0.0 else high + margin)


# ---------------------------------------------------------------- what comes in


def _steps(ax: Axes, trial: Trial, values: Array, label: str) -> None:
    """Values of the inflow, each held until the next."""
    unit = _time_axis(ax, trial)
    end = trial.course.simulated_min * MIN_S
    time = trial.inflow.time_s
    kept = time <= end
    ax.plot(np.append(time[kept], end) / unit, np.append(values[kept], values[kept][-1]), drawstyle="steps-post",
            color=INK, lw=1.0, label=label, zorder=3)
    ax.set_ylim(_span(values[kept]))
    _ticks(ax)


def plot_flow(design: Design, trial: Trial, *, ax: Axes) -> Axes:
    """Flow into the first tank."""
    _steps(ax, trial, trial.inflow.flow_m3_h[:, 0], "_flow")
    tank = design.layout.equalization.volume_m3 > 0.0
    _title(ax, "Flow " + ("behind the equalization tank" if tank else "of the waste as it comes"))
    ax.set_ylabel("[m³/h]")
    return ax


def strength(design: Design, trial: Trial) -> Array:
    """Base that the inflow lacks at the aim, negative where it needs acid. [eq/L]"""
    readout, inflow = design.basis.chem.readout, trial.inflow
    return readout.base_at(design.basis.aim_ph, inflow.amounts[:, :, 0]) - inflow.base_eq_l[:, 0]


def plot_strength(design: Design, trial: Trial, *, ax: Axes) -> Axes:
    """Strength of the inflow as base to the aim."""
    values = strength(design, trial)
    _steps(ax, trial, values, "_strength")
    both = float(values.min()) < 0.0 < float(values.max())
    if both:
        ax.axhline(0.0, color=GRAY, lw=0.8, zorder=1)
    sign = "; below zero: acid" if float(values.min()) < 0.0 else ""
    _title(ax, f"Strength of that flow: base to pH {design.basis.aim_ph:g}{sign}")
    ax.set_ylabel("[eq/L]")
    return ax


# ---------------------------------------------------------------- pH


def outside_runs(time: Array, ph: Array, low: float, high: float) -> list[tuple[float, float]]:
    """First and last recorded time of every unbroken run outside the window."""
    out = (ph < low) | (ph > high)
    edges = np.flatnonzero(np.diff(np.concatenate([[False], out, [False]]).astype(int)))
    return [(float(time[a]), float(time[b - 1])) for a, b in zip(edges[::2], edges[1::2], strict=True)]


def brief(value: float) -> str:
    """A number of three figures, without zeros that say nothing."""
    return f"{float(f'{value:.3g}'):,g}"


def rule_words(trial: Trial) -> str:
    """Time outside of the course that is drawn, against the rule."""
    course, rule = trial.course, trial.rule
    allowed = rule.allowed_min(course.simulated_min)
    held = "rule kept" if trial.kept else "RULE BROKEN"
    return (f"{held}, {brief(float(course.outside_min[0]))} min outside ({brief(allowed)} allowed), longest "
            f"{brief(float(course.longest_min[0]))} min ({brief(rule.each_min)})")


def plot_early_ph(design: Design, trial: Trial, *, ax: Axes) -> Axes:
    """pH of the tanks ahead of the last, with their set points."""
    unit = _time_axis(ax, trial)
    course, stages = trial.course, design.layout.stages[:-1]
    aims = [s.setpoint_ph for s in stages]
    ph_axis(ax, course.ph[:-1, :, 0].ravel(), *aims)
    _ticks(ax)
    for k, stage in enumerate(stages):
        color, style = KINDS[k % len(KINDS)]
        ax.axhline(stage.setpoint_ph, color=FAINT, lw=1.0, label="_setpoint", zorder=1)
        ax.plot(course.time_s / unit, course.ph[k, :, 0], color=color, lw=1.0, ls=style, label="_ph", zorder=3)
    side_labels(ax, [(ax.get_xlim()[1], s.setpoint_ph, s.name) for s in stages], left=False, away=0.1, outside=True)
    points = ", ".join(shown(a) for a in aims)
    _title(ax, f"pH ahead of the last tank; gray: set point{'s' if len(aims) > 1 else ''} {points}")
    return ax


def plot_last_ph(design: Design, trial: Trial, *, ax: Axes) -> Axes:
    """pH that leaves, with the window and the time outside it."""
    unit = _time_axis(ax, trial)
    course, window, stage = trial.course, design.job.window, design.layout.stages[-1]
    ph = course.ph[-1, :, 0]
    ph_axis(ax, ph, window.low, window.high)
    _ticks(ax)
    low, high = ax.get_ylim()
    ax.set_ylim(low, high + 0.1 * (high - low))
    ax.axhspan(window.low, window.high, label="_window", zorder=0.4, **WINDOW)
    ax.axhline(stage.setpoint_ph, color=FAINT, lw=1.0, label="_setpoint", zorder=1)
    half = 0.5 * float(np.diff(course.time_s[:2])[0])
    for begin, end in outside_runs(course.time_s, ph, window.low, window.high):
        ax.axvspan(max(begin - half, 0.0) / unit, (end + half) / unit, facecolor=FAINT, alpha=0.6, lw=0, zorder=0.6,
                   label="_outside")
        ax.plot(0.5 * (begin + end) / unit, 0.965, ls="", marker="x", ms=4.0, mew=1.0, color=WARNED, label="_cross",
                transform=ax.get_xaxis_transform(), zorder=4)
    ax.plot(course.time_s / unit, ph, color=INK, lw=1.0, label="_ph", zorder=3)
    last = ", the last" if len(design.layout.stages) > 1 else ""
    _title(ax, f"pH of {stage.name}{last}: {rule_words(trial)}")
    return ax


# ---------------------------------------------------------------- reagent


def plot_reagent(design: Design, trial: Trial, k: int, *, ax: Axes) -> Axes:
    """Rate at which reagent reaches tank k, base above zero and acid below, and the largest of its feeders."""
    unit = _time_axis(ax, trial)
    rate, tank, stage = trial.course.reagent_eq_h[k, :, 0], trial.tanks[k], design.layout.stages[k]
    ax.plot(trial.course.time_s / unit, rate, color=INK, lw=1.0, label="_rate", zorder=3)
    limits = [sign * f.largest_eq_h for sign, f in ((1.0, tank.base), (-1.0, tank.acid)) if f is not None]
    near = [v for v in limits if abs(v) <= NEAR_LIMIT * float(np.max(np.sign(v) * rate, initial=0.0))]
    for value in near:
        ax.axhline(value, color=WARNED, lw=1.0, ls=DOTTED, label="_largest", zorder=2)
    ax.set_ylim(_span(rate, 0.0, *near))
    if float(rate.min()) < 0.0 < float(rate.max()):
        ax.axhline(0.0, color=GRAY, lw=0.8, zorder=1)
    _ticks(ax)
    ax.set_ylabel("[eq/h]")
    side = {"base": " above zero", "acid": " below"} if len(stage.feeds) > 1 else {}
    names = [f"{wrapped(f.reagent.name, REAGENT_ROOM, SMALL_TITLE, bold=True, most=1)[0]}{side.get(kind, '')}"
             for kind, f in stage.feeds.items()]
    parts = [f"Reagent to {stage.name}: {', '.join(names)}", *(["dotted: largest feed"] if near else [])]
    _title(ax, "; ".join(parts))
    return ax


# ---------------------------------------------------------------- cases


def _shares(values: Array) -> tuple[Array, Array]:
    """Empirical distribution: sorted values, and the percent of cases at or below each; from 0 %."""
    x = np.sort(values)
    return np.concatenate([x[:1], x]), PERCENT * np.arange(x.size + 1) / x.size


def _say(ax: Axes, words: str) -> Axes:
    ax.set_axis_off()
    ax.text(0.0, 0.9, "\n".join(wrapped(words, ax_width(ax), SMALL + 1.0)), transform=ax.transAxes, va="top",
            fontsize=SMALL + 1.0, color=GRAY)
    return ax


def _name(ax: Axes, values: Array, name: str, *, high: bool, right: bool) -> None:
    """Name of a distribution beside its line, in its upper or lower half, on the side wanted if there is room."""
    level = 70.0 if high else 30.0
    x = float(np.quantile(values, level / PERCENT, method="inverted_cdf"))
    share = float(ax.transAxes.inverted().transform(ax.transData.transform((x, level)))[0])
    room = (text_width(name, SMALL) + 0.1) / ax_width(ax)
    right = share < 1.0 - room if right else share < room
    ax.annotate(name, (x, level), (4.0 if right else -4.0, 0.0), textcoords="offset points", va="center",
                ha="left" if right else "right", fontsize=SMALL, bbox=GROUND, zorder=5)


def plot_cases(trial: Trial, *, ax: Axes) -> Axes:
    """Distribution over the cases of time outside and of the longest excursion, each against what is allowed."""
    _title(ax, "Time outside, all cases")
    monte = trial.monte
    if monte is None:
        return _say(ax, *cases_words(trial))
    allowed, each = monte.allowed_min, trial.rule.each_min
    most = max(float(monte.outside_min.max()), float(monte.longest_min.max()))
    limit = max(allowed, each)
    if limit > 0.0 and most > FAR * limit:
        ax.set_xscale("symlog", linthresh=limit, linscale=1.0)
        ticks = [0.0, limit, *(10.0 ** np.arange(np.ceil(np.log10(limit * 2.0)), np.ceil(np.log10(most)) + 1.0))]
        ax.set_xticks(ticks, [brief(t) for t in ticks])
        ax.minorticks_off()
        ax.set_xlim(-0.06 * limit, 1.6 * most)
    else:
        ax.xaxis.set_major_locator(MaxNLocator(4))
        ax.set_xlim(-0.04 * max(most, limit), 1.15 * (max(most, limit) or 1.0))
    ax.set_ylim(0.0, TOP_SHARE)
    for values, bound, color, style, name in ((monte.outside_min, allowed, INK, "-", "total"),
                                              (monte.longest_min, each, CALM, DASHED, "longest")):
        x, share = _shares(values)
        ax.plot([*x, ax.get_xlim()[1]], [*share, PERCENT], drawstyle="steps-post", color=color, lw=1.6, ls=style,
                label=f"_{name}", zorder=3)
        ax.axvline(bound, color=color, lw=1.0, ls=DOTTED, label=f"_{name}_allowed", zorder=2)
        _name(ax, values, name, high=name == "total", right=name == "total")
    ax.set(xlabel="minutes", ylabel="share of cases [%]")
    return ax


def cases_words(trial: Trial) -> list[str]:
    """What the lines of the cases mean, and the share that keeps the rule."""
    monte = trial.monte
    if monte is None:
        return ["No cases were asked for, so there is no probability."]
    return [f"Solid: minutes outside in all, dotted line at {brief(monte.allowed_min)} allowed; dashed blue: longest "
            f"excursion, at most {brief(trial.rule.each_min)} allowed.",
            f"{PERCENT * monte.probability:.0f} % of {monte.meets.size} cases keep both (95 % interval "
            f"{PERCENT * monte.low:.0f} to {PERCENT * monte.high:.0f} %)."]


def plot_worst_ph(design: Design, trial: Trial, *, ax: Axes) -> Axes:
    """Distribution over the cases of the lowest and the highest pH that leaves, with the window."""
    _title(ax, "Worst pH, all cases")
    monte, window = trial.monte, design.job.window
    if monte is None:
        return _say(ax, *cases_words(trial))
    low = min(float(monte.lowest_ph.min()), window.low) - 0.4
    high = max(float(monte.highest_ph.max()), window.high) + 0.4
    ax.set(xlim=(low, high), ylim=(0.0, TOP_SHARE))
    ax.axvspan(window.low, window.high, label="_window", zorder=0.4, **WINDOW)
    for values, color, style, name in ((monte.lowest_ph, INK, "-", "lowest"),
                                       (monte.highest_ph, WARNED, DASHED, "highest")):
        x, share = _shares(values)
        ax.plot([low, *x, high], [0.0, *share, PERCENT], drawstyle="steps-post", color=color, lw=1.6, ls=style,
                label=f"_{name}", zorder=3)
        _name(ax, values, name, high=name == "lowest", right=name == "highest")
    ax.xaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))
    ax.set(xlabel="pH of the last tank", ylabel="share of cases [%]")
    return ax


# ---------------------------------------------------------------- failures


def fault_names(trial: Trial, room: float = np.inf) -> list[str]:
    """Each failure with its tank, cut to `room` inches."""
    return [wrapped(f"{f.tank}: {f.kind}", room, SMALL, most=1)[0] for f in trial.faults]


def fault_name_room(trial: Trial, width: float) -> float:
    """Room for the names of the failures. [inches]"""
    return min(max(text_width(n, SMALL) for n in fault_names(trial)) + 0.1, NAME_SHARE * width)


def plot_faults(design: Design, trial: Trial, *, ax: Axes) -> Axes:
    """Minutes from the start of each failure until the water leaves the window, and how far it goes."""
    faults, window = trial.faults, design.job.window
    size = min(SMALL, 0.8 * POINTS * ax_height(ax) / (len(faults) + 1.0))
    leave = np.array([f.minutes_to_leave for f in faults])
    told = [f"pH {f.lowest_ph:.1f} to {f.highest_ph:.1f}, {brief(f.minutes_outside)} min outside"
            if np.isfinite(f.minutes_to_leave) else f"stays inside: pH {f.lowest_ph:.1f} to {f.highest_ph:.1f}"
            for f in faults]
    room = (max(text_width(w, size) for w in told) + 0.15) / ax_width(ax)
    ends = FAULT_S / MIN_S
    most = max(float(np.nanmax(leave, initial=0.0)), 0.25 * ends)
    ax.set(xlim=(0.0, 1.06 * most / (1.0 - room)), ylim=(-0.6, len(faults) - 0.4))
    place = np.arange(len(faults))[::-1]
    ax.hlines(place, 0.0, np.nan_to_num(leave), color=CALM, lw=3.0, label="_way", zorder=2)
    left = np.isfinite(leave)
    ax.plot(leave[left], place[left], ls="", marker="X", ms=6.0, mfc=WARNED, mec=INK, mew=0.6, label="_leaves",
            zorder=3)
    ax.plot(np.zeros(int((~left).sum())), place[~left], ls="", marker="o", ms=4.5, mfc="white", mec=INK, label="_stays",
            zorder=3, clip_on=False)
    if ends < most:
        ax.axvline(ends, color=GRAY, lw=1.0, ls=DOTTED, label="_ends", zorder=1)
    for y, words, fault in zip(place, told, faults, strict=True):
        out = min(fault.lowest_ph - window.low, window.high - fault.highest_ph) < 0.0
        ax.text(1.0, y, words, transform=ax.get_yaxis_transform(), ha="right", va="center", fontsize=size,
                fontweight="normal" if not out else "bold")
    names = fault_names(trial, fault_name_room(trial, ax_width(ax) / (1.0 - NAME_SHARE)) - 0.06)
    ax.set_yticks(place, names, fontsize=size, parse_math=False)
    ax.tick_params(axis="y", length=0)
    ax.xaxis.labelpad = 2.0
    ticks = [t for t in MaxNLocator(5).tick_values(0.0, most) if 0.0 <= t <= 1.02 * most]
    ax.set_xticks(ticks)
    dotted = "; dotted: end of the failure" if ends < most else ""
    ax.set_xlabel(f"minutes from its start until the water leaves the window; ring: it stays inside{dotted}",
                  loc="left")
    _title(ax, f"Failures of {brief(FAULT_S / MIN_S)} min, one at a time, at the mean of the stream")
    return ax


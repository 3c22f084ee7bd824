"""Panels of a dosing plan, on axes that are handed in: response to a dose, water through the works, feeds at fault."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from aquabuf.assess.plant.aims import banded
from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.answer_json import step_rows
from aquabuf.assess.plant.curve import DoseCurve
from aquabuf.assess.plant.faults import FULL, STOPPED, Fault
from aquabuf.assess.plant.quantities import find_quantity, in_unit, measured
from aquabuf.assess.plant.steps.base import Dosed, Held
from aquabuf.assess.plant.targets import Target
from aquabuf.report.dose_lines import calcite_words
from aquabuf.report.dose_page import POINTS, text_width, wrapped
from aquabuf.report.style import CALM, FAINT, GRAY, INK, WARNED

__all__ = ["SMALL", "TRAIN_KEY", "ax_width", "control_doses", "fault_names", "faults_key", "feeds_at_fault",
           "label_height", "main_curve", "ph_axis", "ph_window", "plot_faults", "plot_response", "plot_train",
           "response_key", "smooth_response", "train_labels", "window_band"]

Array = NDArray[np.float64]

SMALL = 7.0             # points
FINE = 240              # doses of a smooth curve
WINDOW: Any = {"facecolor": "#dfe6ee", "edgecolor": CALM, "lw": 0.8}
WEAK: Any = {"facecolor": "none", "edgecolor": GRAY, "hatch": "////", "lw": 0.0}
PASSES: Any = {"color": WARNED, "lw": 1.1, "ls": (0, (5, 2))}   # guard rails
OVER: Any = {"color": WARNED, "lw": 1.1, "ls": (0, (1, 1.5))}   # the rail of an overfeed
LEAST_PH_SPAN = 1.0     # of an axis
NAME_LINES = 3          # of a step under its column
LABEL_LEADING, LABEL_STEP = 1.1, 1.2  # as the drawing takes it, and from line to line in type sizes
TRAIN_KEY = ("Below the names: calcium carbonate that the water would dissolve or deposit, mg/L. Shaded: window of pH "
             "of a step. Dashed: guard rails.")
NAME_ROOM = 1.1         # inches, of a product beside its fault
ROW_SHARE = 0.75        # of the height of a row that its words take
HEAD_INCHES = 0.17      # of the words above the rows of feeds
CASES = {STOPPED: "stopped", FULL: "stuck"}


# ---------------------------------------------------------------- dose and response


def main_curve(answer: Answer) -> DoseCurve | None:
    """Curve of the product that an error of its feed tells on most, in the last step with a target of pH (or any)."""
    aimed = [t.step for t in answer.targets if t.target.quantity.name == "ph"] or [t.step for t in answer.targets]
    pool = [c for c in answer.curves if aimed and c.step == aimed[-1]] or answer.curves
    return max(pool, key=lambda c: abs(c.slope_ph_per_mg_l * c.wanted_mg_l), default=None)


def ph_window(answer: Answer, step: str) -> Target | None:
    """Window of pH behind a step; around a fixed value the band that it is held to. None where nothing is wanted."""
    found = [t.target for t in answer.targets if t.step == step and t.target.quantity.name == "ph"]
    return banded(found[-1]) if found else None


def smooth_response(answer: Answer, curve: DoseCurve) -> tuple[Array, Array, Array]:
    """Doses [mg/L of product] from none to the largest of the curve, its own among them, with pH and buffer intensity
    [meq/L per pH] behind the step, other doses held."""
    passed = next(p for p in answer.train.passed if p.step.name == curve.step)
    table = curve.table["dose_mg_l_product"].to_numpy(dtype=float)
    dose = np.unique(np.concatenate([table, np.linspace(0.0, table[-1], FINE)]))
    which = [d.product.name for d in passed.outcome.doses].index(curve.product)  # the first, as in the curve itself
    held = tuple(Dosed(d.product, d.product.mol_l(dose) if k == which else np.repeat(d.mol_l, dose.size))
                 for k, d in enumerate(passed.outcome.doses))
    assert isinstance(passed.step, Held)
    found = measured(passed.step.held(held).run(passed.before.repeated(dose.size)).stream, ("ph", "buffer_intensity"))
    return dose, found["ph"], in_unit(find_quantity("buffer_intensity"), found["buffer_intensity"])


def control_doses(answer: Answer, curve: DoseCurve) -> tuple[float, float] | None:
    """Least and most dose of a curve's product that keep every window [mg/L of product].

    None where none does, and where the product goes in at several steps: its range moves all of them together.
    """
    if sum(d.product.name == curve.product for _, d in answer.train.doses()) > 1:
        return None
    for found in answer.ranges:
        if found.product.name == curve.product and np.isfinite(found.least[0]):
            return float(found.least[0] * curve.wanted_mg_l), float(found.most[0] * curve.wanted_mg_l)
    return None


def window_band(ax: Axes, window: Target) -> None:
    """Shade a window of pH between its ends; an open end goes to that of the axis, whose limits must stand before."""
    low, high = ax.get_ylim()
    ax.axhspan(max(window.low, low), min(window.high, high), label="_window", zorder=0.4, **WINDOW)


def ph_axis(ax: Axes, values: Array, *also: float) -> None:
    """Vertical axis that holds pH values, not flatter than LEAST_PH_SPAN."""
    known = [v for v in (*values, *also) if np.isfinite(v)] or [7.0]
    low, high = min(known), max(known)
    half = max(0.5 * (high - low) * 1.14, 0.5 * LEAST_PH_SPAN)
    ax.set_ylim(0.5 * (low + high) - half, 0.5 * (low + high) + half)
    ax.yaxis.set_major_locator(MaxNLocator(6, steps=[1, 2, 5, 10]))
    ax.set_ylabel("pH")


def _rails(ax: Axes, answer: Answer) -> None:
    """Level lines at the guard rails that the axis reaches."""
    guards = answer.plan.guards
    low, high = ax.get_ylim()
    for ph, style in ((guards.ph_low, PASSES), (guards.ph_high, PASSES), (guards.over_ph, OVER)):
        if low < ph < high:
            ax.axhline(ph, label="_rail", zorder=0.8, **style)


def plot_response(answer: Answer, curve: DoseCurve, *, ax: Axes, below: Axes) -> Axes:
    """pH against the dose of a product with window and control range; buffer intensity below, its weak zone hatched."""
    dose, ph, intensity = smooth_response(answer, curve)
    window, control = ph_window(answer, curve.step), control_doses(answer, curve)
    ends = [] if window is None else [v for v in (window.low, window.high) if np.isfinite(v)]
    ph_axis(ax, ph, *ends)
    ax.set_xlim(0.0, dose[-1])
    if window is not None:
        window_band(ax, window)
    _rails(ax, answer)
    if control is not None:
        ax.axvspan(control[0], min(control[1], dose[-1]), facecolor=FAINT, edgecolor=GRAY, lw=0.8, alpha=0.6,
                   label="_control", zorder=0.5)
    ax.plot(dose, ph, color=INK, lw=1.6, label="_ph", zorder=3)
    ax.plot(curve.wanted_mg_l, curve.wanted_ph, ls="", marker="o", ms=7, mfc=WARNED, mec=INK, label="_wanted", zorder=4)
    ax.tick_params(labelbottom=False)
    ax.set_title(" ".join(wrapped(f"pH by dose of {curve.product}", ax_width(ax), 10.0, bold=True, most=1)),
                 parse_math=False)
    if not curve.weak_throughout:
        below.axvspan(curve.weakest_low_mg_l, curve.weakest_high_mg_l, label="_weak", zorder=0.5, **WEAK)
    below.plot(dose, intensity, color=INK, lw=1.3, label="_intensity", zorder=3)
    below.axvline(curve.wanted_mg_l, color=WARNED, lw=1.1, label="_wanted", zorder=2)
    below.set(xlim=(0.0, dose[-1]), ylim=(0.0, 1.12 * float(np.nanmax(intensity))))
    below.yaxis.set_major_locator(MaxNLocator(3))
    below.set_ylabel("buffer\n[meq/L per pH]", fontsize=SMALL)
    below.set_xlabel("dose of product as delivered [mg/L]")
    return ax


def response_key(answer: Answer, curve: DoseCurve) -> str:
    """What the signs of the response mean."""
    window, control = ph_window(answer, curve.step), control_doses(answer, curve)
    parts = ["Dot and upright line: dose wanted"]
    if window is not None:
        parts.append(f"level band: {window.words}")
    if control is not None:
        parts.append("upright band: doses that keep every window")
    parts += [] if curve.weak_throughout else ["hatched: weakest buffering"]
    return "; ".join([*parts, "dashed, dotted: guard rails"]) + "."


def ax_width(ax: Axes) -> float:
    """Width of an axis in inches."""
    return _inches(ax)[0]


def _inches(ax: Axes) -> tuple[float, float]:
    figure, box = ax.get_figure(), ax.get_position()
    assert isinstance(figure, Figure)
    wide, high = figure.get_size_inches()
    return float(box.width * wide), float(box.height * high)


# ---------------------------------------------------------------- the works


def train_labels(answer: Answer, width: float) -> list[str]:
    """Name of each water and what it does to calcium carbonate, wrapped for columns that share `width` [inches]."""
    rows = step_rows(answer)
    room = 0.94 * width / len(rows)
    names = [wrapped(str(r["name"]), room, SMALL, most=NAME_LINES) for r in rows]
    tall = max(len(n) for n in names)
    words = [calcite_words(r["ccpp_mg_l"]) if np.isfinite(r["ccpp_mg_l"]) else "not known" for r in rows]
    return ["\n".join([*name, *[""] * (tall - len(name)), *wrapped(does, room, SMALL)])
            for name, does in zip(names, words, strict=True)]


def label_height(labels: Sequence[str]) -> float:
    """Height of the tallest label. [inches]"""
    return 0.06 + max(len(words.split("\n")) for words in labels) * LABEL_STEP * SMALL / POINTS


def plot_train(answer: Answer, labels: Sequence[str], *, ax: Axes, below: Axes) -> Axes:
    """pH and, below, alkalinity of the raw water and behind each step; labels from `train_labels`."""
    rows = step_rows(answer)
    x = np.arange(len(rows), dtype=float)
    ph, alkalinity = (np.array([r[find_quantity(n).column] for r in rows]) for n in ("ph", "alkalinity"))
    for each in (ax, below):
        each.set_xlim(-0.5, len(rows) - 0.5)
        each.set_xticks(x)
    windows = [w for w in (ph_window(answer, s.name) for s in answer.steps) if w is not None]
    ph_axis(ax, ph, *(end for w in windows for end in (w.low, w.high)))
    low, high = ax.get_ylim()
    ax.set_ylim(low, high + 0.22 * (high - low))
    _rails(ax, answer)
    _windows_of_steps(ax, answer)
    ax.plot(x, ph, color=INK, lw=1.2, marker="o", ms=5, mfc=CALM, label="_ph", zorder=3)
    _values(ax, x, ph, 2)
    ax.tick_params(labelbottom=False)
    ax.set_title("Water through the works")
    below.bar(x, alkalinity, width=0.5, color=FAINT, edgecolor=INK, lw=0.6, label="_alkalinity")
    below.axhline(0.0, color=INK, lw=0.6)
    least, most = min(float(np.nanmin(alkalinity)), 0.0), max(float(np.nanmax(alkalinity)), 0.0)
    below.set_ylim(least - (0.3 if least < 0.0 else 0.0) * (most - least), most + 0.34 * ((most - least) or 1.0))
    below.yaxis.set_major_locator(MaxNLocator(3))
    below.set_ylabel("alkalinity [mg/L\nas CaCO3]", fontsize=SMALL)
    _values(below, x, alkalinity, find_quantity("alkalinity").digits)
    below.set_xticklabels(labels, fontsize=SMALL, parse_math=False, linespacing=LABEL_LEADING)
    below.tick_params(axis="x", length=2, pad=2)
    return ax


def _windows_of_steps(ax: Axes, answer: Answer) -> None:
    """Shade the window of pH behind each step that has one, over its column alone."""
    low, high = ax.get_ylim()
    for k, step in enumerate(answer.steps, start=1):
        window = ph_window(answer, step.name)
        if window is not None:
            ax.fill_between([k - 0.4, k + 0.4], max(window.low, low), min(window.high, high), label="_window",
                            zorder=0.4, **WINDOW)


def _values(ax: Axes, x: Array, y: Array, digits: int) -> None:
    """Each value above its point, over a white ground."""
    for at, value in zip(x, y, strict=True):
        if np.isfinite(value):
            ax.annotate(f"{value:z.{digits}f}", (at, max(value, 0.0)), (0.0, 5.0), textcoords="offset points",
                        ha="center", va="bottom", fontsize=SMALL + 0.5, color=INK, zorder=5,
                        bbox={"facecolor": "white", "edgecolor": "none", "alpha": 0.8, "pad": 0.6})


# ---------------------------------------------------------------- faults


def feeds_at_fault(answer: Answer) -> list[tuple[Fault, ...]]:
    """The faults of each feed together, in the order of the answer."""
    feeds: dict[tuple[str, str], list[Fault]] = {}
    for fault in answer.faults:
        feeds.setdefault((fault.product.name, fault.step), []).append(fault)
    return [tuple(each) for each in feeds.values()]


def plot_faults(answer: Answer, *, ax: Axes) -> Axes:
    """pH right behind the step with each feed stuck at full stroke and stopped, against the guard rails."""
    guards, feeds = answer.plan.guards, feeds_at_fault(answer)
    every = [f for each in feeds for f in each]
    ax.set_title(f"A feed at fault ({every[0].hours:g} h)")
    ends = [float(v) for f in every for v in (f.ph_behind[0], f.ph_wanted[0]) if np.isfinite(v)]
    low, high = min([*ends, guards.ph_low]) - 0.5, max([*ends, guards.over_ph]) + 0.5
    high_inches = _inches(ax)[1]
    head = (len(feeds) + 0.1) * HEAD_INCHES / (high_inches - HEAD_INCHES)  # in rows
    size = min(SMALL, ROW_SHARE * POINTS * high_inches / (len(feeds) + head))
    rooms = [max(text_width(w, size, True) for w in (case, *(_beyond(f) for f in every if f.case == of))) + 0.1
             for of, case in CASES.items()]
    share = min(sum(rooms) / ax_width(ax), 0.6)
    ax.set(xlim=(low, low + (high - low) / (1.0 - share)), ylim=(-0.6, len(feeds) - 0.5 + head))
    for ph, style in ((guards.ph_low, PASSES), (guards.ph_high, PASSES), (guards.over_ph, OVER)):
        ax.axvline(ph, ymax=(len(feeds) + 0.1) / (len(feeds) + 0.1 + head), label="_rail", zorder=0.8, **style)
    right = {STOPPED: 1.0 - rooms[1] / ax_width(ax), FULL: 1.0}
    for case, words in CASES.items():
        _figure(ax, right[case], len(feeds) - 0.5 + 0.5 * head, words, size, bold=False)
    for y, each in zip(range(len(feeds) - 1, -1, -1), feeds, strict=True):
        for fault in each:
            outside = not guards.ph_low <= fault.ph_behind[0] <= guards.ph_high
            _fault(ax, float(y), fault, outside=outside)
            _figure(ax, right[fault.case], y, _beyond(fault), size, bold=outside)
    ax.set_yticks(range(len(feeds) - 1, -1, -1), fault_names(answer), fontsize=size, parse_math=False)
    ax.tick_params(axis="y", length=0)
    ax.set_xticks(list(range(int(np.ceil(low)), int(high) + 1)))
    ax.set_xlabel("pH right behind the step")
    return ax


def _figure(ax: Axes, right: float, y: float, words: str, size: float, *, bold: bool) -> None:
    """Words that end at a place across the axis."""
    ax.text(right, y, words, transform=ax.get_yaxis_transform(), ha="right", va="center", fontsize=size, color=INK,
            fontweight="bold" if bold else "normal", parse_math=False, zorder=5)


def faults_key(answer: Answer) -> str:
    """What the signs of the faults mean."""
    g = answer.plan.guards
    return (f"Ring: pH as planned; arrow: feed stuck at its largest; cross: feed stopped. Dashed: guard rails "
            f"{g.ph_low:g} and {g.ph_high:g}; dotted: {g.over_ph:g}, the most with {g.over_dose:g} times the dose.")


def _beyond(fault: Fault) -> str:
    """pH at the fault, and the worst that such water does."""
    if not np.isfinite(fault.ph_behind[0]):
        return "not known"
    passed = fault.levels()
    return f"{float(fault.ph_behind[0]):.2f}{f' {passed[-1].name}' if passed else ''}"


def fault_names(answer: Answer) -> list[str]:
    """Product of each feed at fault; the step too where the product goes in at several."""
    first = [each[0] for each in feeds_at_fault(answer)]
    out = []
    for fault in first:
        several = sum(f.product.name == fault.product.name for f in first) > 1
        parts = (fault.product.name, fault.step) if several else (fault.product.name,)
        out.append(", ".join(wrapped(part, NAME_ROOM / len(parts), SMALL, most=1)[0] for part in parts))
    return out


def _fault(ax: Axes, y: float, fault: Fault, *, outside: bool) -> None:
    """From the pH as planned (ring) to that of the fault."""
    wanted, ph = float(fault.ph_wanted[0]), float(fault.ph_behind[0])
    full = fault.case == FULL
    ax.plot([wanted, ph], [y, y], color=GRAY, lw=1.2, label="_way", zorder=2)
    ax.plot(wanted, y, ls="", marker="o", ms=4.5, mfc="white", mec=INK, label="_planned", zorder=3)
    ax.plot(ph, y, ls="", marker=">" if full else "X", ms=6.5, mec=INK, mew=0.6, mfc=WARNED if outside else CALM,
            label="_stuck" if full else "_stopped", zorder=4)

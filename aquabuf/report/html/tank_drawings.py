"""Figures of the page of a neutralization, one panel each, with their figures in words for who cannot see them."""

from __future__ import annotations

from collections.abc import Callable

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.trial import FAULT_S, MIN_S, Trial
from aquabuf.report.dose_lines import sentence
from aquabuf.report.dose_page import PAGE_STYLE, text_width
from aquabuf.report.dose_panels import SMALL
from aquabuf.report.html.canvas import axes_at, blank, svg_of
from aquabuf.report.html.parts import drawing, gallery
from aquabuf.report.tank_panels import (
    PERCENT,
    demand_groups,
    mean_ph,
    plot_buffer,
    plot_demand,
    plot_equalization,
    plot_sensitivity,
    plot_titration,
    stage_points,
    tolerance_words,
)
from aquabuf.report.tank_scheme import plot_train, stage_words, train_height
from aquabuf.report.tank_time import (
    brief,
    cases_words,
    fault_name_room,
    plot_cases,
    plot_early_ph,
    plot_faults,
    plot_flow,
    plot_last_ph,
    plot_reagent,
    plot_strength,
    plot_worst_ph,
    rule_words,
    strength,
    time_unit,
)

__all__ = ["tank_drawings"]

NARROW, WIDE, HIGH = 5.2, 7.6, 3.6  # inches
LEFT, RIGHT, TOP, BOTTOM, GAP = 0.62, 0.12, 0.28, 0.45, 0.12
TANK_NAMES = 0.55                   # beside the courses of several tanks
TOP_SCALE = 0.44                    # of the gain, above the panel of buffering
ROW_HIGH = 0.19                     # of a failure or a change
DEMAND_HIGH = 0.55                  # of a reagent in one place
COURSE_HIGH = {"inflow": 0.8, "early": 1.1, "last": 1.6, "reagent": 0.8}

Panel = tuple[float, Callable[[Axes], Axes]]


def tank_drawings(design: Design) -> tuple[str, ...]:
    """The panels that there is something for; narrow ones side by side. Of what is not to be built the waste alone."""
    waste = [_titration(design), _buffer(design)]
    if design.stops:
        return (gallery([*waste, _sensitivity(design)]),)
    built = design.layout.equalization.table is not None
    found = [_train(design),
             gallery([*waste, *([_equalization(design)] if built else []), _demand(design), _sensitivity(design)])]
    if design.trial is not None:
        found += [_course(design, design.trial), *_cases(design, design.trial), _faults(design, design.trial)]
    return tuple(found)


# ---------------------------------------------------------------- drawing


def _axes(figure: Figure, top: float, height: float, left: float = LEFT, right: float = RIGHT) -> Axes:
    return axes_at(figure, top, height, left=left, right=right)


def _single(draw: Callable[[Axes], object], *, wide: float = NARROW, high: float = HIGH, top: float = TOP,
            left: float = LEFT) -> str:
    """One panel as SVG text."""
    with matplotlib.rc_context(PAGE_STYLE):
        figure = blank(wide, high)
        draw(_axes(figure, top, high - top - BOTTOM, left))
        return svg_of(figure)


# ---------------------------------------------------------------- the design


def _titration(design: Design) -> str:
    points = "; ".join(f"{p.name} pH {p.ph:.2f} at {shown(p.reagent_eq_l)} eq/L" for p in stage_points(design))
    window = design.job.window
    alt = (f"Titration curve of the mean waste: pH {mean_ph(design):.2f} as it comes; pH {window.low:g} to "
           f"{window.high:g}, {tolerance_words(design)}. Set points: {points}.")
    return drawing(_single(lambda ax: plot_titration(design, ax=ax)), name="titration", alt=alt,
                   caption="Square: waste as it comes. Red dots: set points.")


def _buffer(design: Design) -> str:
    fit = design.basis.fit
    alt = (f"Buffer intensity against pH: {shown(float(fit.buffer_eq_l_ph))} eq/L per pH at the aim, pH "
           f"{fit.setpoint_ph:.2f}; steepest in the window at pH {float(fit.steepest_ph):.2f}, "
           f"{brief(float(fit.steepest_gain_ph_per_eq_l))} pH per eq/L.")
    return drawing(_single(lambda ax: plot_buffer(design, ax=ax), top=TOP_SCALE), name="buffering", alt=alt,
                   caption="Buffering and, on the upper scale, process gain. Red dot: aim. Diamond: steepest point in "
                           "the window.")


def _train(design: Design) -> str:
    eq = design.layout.equalization
    ahead = [f"equalization {shown(eq.volume_m3)} m³"] if eq.volume_m3 > 0.0 else []
    tanks = [f"{', '.join(stage_words(design, s))}, pH {s.setpoint_ph:.2f}" for s in design.layout.stages]
    with matplotlib.rc_context(PAGE_STYLE):
        width = WIDE - 2.0 * RIGHT
        high = train_height(design, width) + 0.1
        figure = blank(WIDE, high)
        plot_train(design, ax=_axes(figure, 0.05, high - 0.1, RIGHT, RIGHT))
        svg = svg_of(figure)
    return drawing(svg, name="train-drawn", alt=f"The train: {'; '.join([*ahead, *tanks])}.",
                   caption="The train. Filled arrow: base, open arrow: acid; dashed: corrects what the other overdoes.")


def _equalization(design: Design) -> str:
    eq = design.layout.equalization
    assert eq.table is not None
    rows = eq.table.iloc[[0, -1]]
    ends = "; ".join(f"{shown(v)} m³ leave {PERCENT * s:.0f} %" for v, s in zip(rows["volume_m3"], rows["sd_share"],
                                                                               strict=True))
    return drawing(_single(lambda ax: plot_equalization(design, ax=ax), left=LEFT + 0.15), name="equalized",
                   alt=f"Swings of strength left against the volume always full: {ends}. {sentence(eq.words)}")


def _demand(design: Design) -> str:
    groups = demand_groups(design)
    said = "; ".join(f"{g.reagent} {g.place}: " + ", ".join(
        f"{d.load.name} {shown(d.product_kg_h)} kg/h" for d in g.rows) for g in groups)
    high = TOP + BOTTOM + DEMAND_HIGH * (len(groups) + 1)
    return drawing(_single(lambda ax: plot_demand(design, ax=ax), high=high, left=0.2), name="demanded",
                   alt=f"Reagent to pH {design.basis.aim_ph:g}. {said}.",
                   caption="Triangles: least and most while it is asked for. Dot: mean of all time.")


def _sensitivity(design: Design) -> str:
    changes = design.sensitivity
    said = "; ".join(f"{r['change']}: demand times {r['demand_ratio']:.3f}, tolerance times {r['tolerance_ratio']:.3f}"
                     for r in changes.to_dict("records"))
    with matplotlib.rc_context(PAGE_STYLE):
        names = max(text_width(str(n), SMALL) for n in changes["change"]) + 0.25
        high = TOP + BOTTOM + ROW_HIGH * 1.15 * (len(changes) + 1)
        figure = blank(NARROW, high)
        half = 0.5 * (NARROW - names - 2.0 * RIGHT)
        room = high - TOP - BOTTOM
        plot_sensitivity(design, ax=_axes(figure, TOP, room, names, NARROW - names - half),
                         beside=_axes(figure, TOP, room, NARROW - RIGHT - half))
        svg = svg_of(figure)
    return drawing(svg, name="changes", alt=f"Demand and tolerance if one thing is not as taken. {said}.",
                   caption="If one thing is not as taken.")


# ---------------------------------------------------------------- the simulation


def _course(design: Design, trial: Trial) -> str:
    panels: list[Panel] = [(COURSE_HIGH["inflow"], lambda ax: plot_flow(design, trial, ax=ax)),
                           (COURSE_HIGH["inflow"], lambda ax: plot_strength(design, trial, ax=ax))]
    if len(design.layout.stages) > 1:
        panels.append((COURSE_HIGH["early"], lambda ax: plot_early_ph(design, trial, ax=ax)))
    panels.append((COURSE_HIGH["last"], lambda ax: plot_last_ph(design, trial, ax=ax)))
    for k in range(len(design.layout.stages)):
        panels.append((COURSE_HIGH["reagent"],
                       lambda ax, k=k: plot_reagent(design, trial, k, ax=ax)))  # type: ignore[misc]
    with matplotlib.rc_context(PAGE_STYLE):
        figure = blank(WIDE, sum(high + TOP for high, _ in panels) + BOTTOM)
        top, right = 0.0, TANK_NAMES if len(design.layout.stages) > 1 else RIGHT
        for k, (high, draw) in enumerate(panels):
            ax = _axes(figure, top + TOP, high - 0.04, LEFT + 0.1, right)
            draw(ax)
            if k < len(panels) - 1:
                ax.tick_params(labelbottom=False)
            else:
                ax.set_xlabel(f"time [{time_unit(trial)[1]}]")
            top += high + TOP
        svg = svg_of(figure)
    course, flow, lack = trial.course, trial.inflow.flow_m3_h[:, 0], strength(design, trial)
    tanks = "; ".join(f"{s.name} pH {float(ph.min()):.2f} to {float(ph.max()):.2f}"
                      for s, ph in zip(design.layout.stages, course.ph[:, :, 0], strict=True))
    alt = (f"Course simulated: flow {shown(float(flow.min()))} to {shown(float(flow.max()))} m³/h; base to the aim "
           f"{shown(float(lack.min()))} to {shown(float(lack.max()))} eq/L; {tanks}. {sentence(rule_words(trial))}")
    return drawing(svg, name="course", alt=alt, caption="The course shown. Gray with a cross: outside the window.")


def _cases(design: Design, trial: Trial) -> list[str]:
    monte = trial.monte
    if monte is None:
        return []
    words = " ".join(cases_words(trial))
    outside, longest = float(np.median(monte.outside_min)), float(np.median(monte.longest_min))
    low, high = float(monte.lowest_ph.min()), float(monte.highest_ph.max())
    return [gallery([
        drawing(_single(lambda ax: plot_cases(trial, ax=ax), high=0.75 * HIGH), name="cases", caption=words,
                alt=f"Time outside, all cases: in half of them up to {brief(outside)} min in all, up to "
                    f"{brief(longest)} min at a time. {words}"),
        drawing(_single(lambda ax: plot_worst_ph(design, trial, ax=ax), high=0.75 * HIGH), name="worst-ph",
                alt=f"Worst pH, all cases: lowest {low:.2f}, highest {high:.2f}; window {design.job.window.low:g} to "
                    f"{design.job.window.high:g}.", caption="Lowest and highest pH of each case; band: the window.")])]


def _faults(design: Design, trial: Trial) -> str:
    said = "; ".join(f"{f.tank}, {f.kind}: " + (
        f"leaves after {f.minutes_to_leave:.0f} min, pH {f.lowest_ph:.1f} to {f.highest_ph:.1f}"
        if np.isfinite(f.minutes_to_leave) else "stays in") for f in trial.faults)
    with matplotlib.rc_context(PAGE_STYLE):
        names = fault_name_room(trial, WIDE - RIGHT)
    return drawing(_single(lambda ax: plot_faults(design, trial, ax=ax), wide=WIDE, left=names + 0.05,
                           high=TOP + BOTTOM + ROW_HIGH * (len(trial.faults) + 1)), name="failed",
                   alt=f"Failures of {FAULT_S / MIN_S:.0f} min. {said}.")

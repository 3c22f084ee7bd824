"""Figures of a neutralization: one page of the design, one page of its simulation."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from pathlib import Path

import matplotlib
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.trial import Trial
from aquabuf.errors import InputError
from aquabuf.report.dose_page import PAGE_STYLE, Block, block_of, save_page, stacked, text_width
from aquabuf.report.dose_panels import SMALL
from aquabuf.report.style import GRAY
from aquabuf.report.tank_panels import (
    plot_buffer,
    plot_demand,
    plot_equalization,
    plot_sensitivity,
    plot_titration,
)
from aquabuf.report.tank_scheme import plot_train, train_height
from aquabuf.report.tank_time import (
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
    time_unit,
)

__all__ = ["design_figure", "save_design", "save_simulation", "simulation_figure"]

WIDE, HIGH = 8.27, 11.69       # A4 portrait in inches
EDGE, GAP, AXIS, BLOCK_GAP = 0.35, 0.1, 0.5, 0.05
TITLE, LABELS = 0.22, 0.43     # room above and below a panel
TOP_SCALE = 0.44               # of the gain, above the panel of buffering
BETWEEN = 0.3                  # between panels side by side
CURVES, LOWER = 2.5, 1.55      # inches of the axes of the curves, and of those below, at least
FORBIDS, INSET = "#f6dcd5", 0.1  # ground of the verdict on a design that is not to be built, inches within its box
MOST_STOPS = 3
CASES_HIGH, FAULT_ROW = 1.35, 0.155
WEIGHTS = {"inflow": 0.8, "early": 1.1, "last": 1.7, "reagent": 0.8}
LEAST_PANEL = 0.57             # inches of the axes of a course, per weight

Panel = tuple[float, Callable[[Axes], Axes]]


# ---------------------------------------------------------------- the design


def design_figure(design: Design) -> Figure:
    """The page for the basis of design: curves, the train, equalization, demand, what it is sensitive to."""
    with matplotlib.rc_context(PAGE_STYLE):
        figure = Figure(figsize=(WIDE, HIGH))
        FigureCanvasAgg(figure)
        width = WIDE - 2.0 * EDGE
        head, foot = _head(design, width, "Neutralization: basis of design"), _foot(design, width)
        y = _put(figure, head, EDGE, width)
        low = HIGH - EDGE - foot.height
        foot.draw(figure, EDGE, low, width)
        train = train_height(design, width)
        free = low - GAP - y - train - 2 * GAP - 3 * LABELS - 2 * TITLE - TITLE - TOP_SCALE - 3 * GAP
        extra = max(free - CURVES - 2.0 * LOWER, 0.0)
        curves = CURVES + 0.4 * extra if free >= CURVES + 2.0 * LOWER else free * CURVES / (CURVES + 2.0 * LOWER)
        each = 0.5 * (free - curves)
        y = _curves(figure, design, y, width, curves)
        plot_train(design, ax=_axes(figure, EDGE, y + TITLE, width, train))
        _heading(figure, "The train", y)
        y += TITLE + train + GAP
        _lower(figure, design, y, width, each)
    return figure


def _curves(figure: Figure, design: Design, top: float, width: float, high: float) -> float:
    """Titration curve and buffering side by side, on one scale of pH; where the next begins."""
    left = 0.54 * width
    y = top + TITLE + TOP_SCALE - 0.06
    plot_titration(design, ax=_axes(figure, EDGE + AXIS, y, left - AXIS - 0.5 * BETWEEN, high))
    start = EDGE + left + 0.5 * BETWEEN + 0.75 * AXIS
    plot_buffer(design, ax=_axes(figure, start, y, WIDE - EDGE - start, high))
    wide, page = figure.get_size_inches()
    figure.text(start / wide, 1.0 - (top + 0.02) / page, "Buffering and process gain", fontsize=10.0, fontweight="bold",
                va="top")
    return y + high + LABELS + GAP


def _lower(figure: Figure, design: Design, top: float, width: float, high: float) -> None:
    """Equalization and demand at the left, sensitivities at the right."""
    left = 0.5 * width
    plot_equalization(design, ax=_axes(figure, EDGE + AXIS + 0.1, top + TITLE, left - AXIS - 0.1 - 0.5 * BETWEEN, high))
    y = top + TITLE + high + LABELS + GAP
    plot_demand(design, ax=_axes(figure, EDGE + 0.1, y + TITLE, left - 0.1 - 0.5 * BETWEEN, high))
    names = max(text_width(str(n), SMALL) for n in design.sensitivity["change"]) + 0.1
    start = EDGE + left + 0.5 * BETWEEN + names
    half = 0.5 * (WIDE - EDGE - start - 0.12)
    tall = 2.0 * high + LABELS + GAP + TITLE - 0.25
    upper, lower = (_axes(figure, x, top + TITLE + 0.25, half, tall) for x in (start, start + half + 0.12))
    plot_sensitivity(design, ax=upper, beside=lower)
    wide, page = figure.get_size_inches()
    figure.text((EDGE + left + 0.5 * BETWEEN) / wide, 1.0 - (top + 0.03) / page, "If one thing is not as taken",
                fontsize=10.0, fontweight="bold", va="top")


def _heading(figure: Figure, words: str, top: float) -> None:
    wide, page = figure.get_size_inches()
    figure.text(EDGE / wide, 1.0 - (top + 0.03) / page, words, fontsize=10.0, fontweight="bold", va="top")


def _head(design: Design, width: float, title: str) -> tuple[Block, ...]:
    """Name, verdict, and what the design is for."""
    job, basis = design.job, design.basis
    verdict = [design.verdict, *design.stops[1:MOST_STOPS]]
    window = job.window
    facts = (f"Mean flow {shown(basis.course.mean_m3_h)} m³/h at {basis.chem.t_c:.0f} °C. Window pH {window.low:g} to "
             f"{window.high:g} ({window.source}). Aim pH {basis.aim_ph:g}: {basis.aim_why}.")
    name = stacked(block_of([job.name], width, 13.0, bold=True, most=2), block_of([title], width, 9.0, color=GRAY),
                   gap=0.04)
    return name, _verdict(verdict, width, boxed=not design.accepted), block_of([facts], width, 8.0, most=4)


def _verdict(words: Sequence[str], width: float, *, boxed: bool) -> Block:
    """The outcome in bold; in a box where the design is not to be built as it stands."""
    found = block_of(words, width - (INSET if boxed else 0.0), 8.7, bold=True, most=4, x=INSET if boxed else 0.0)
    if not boxed:
        return found
    lines = tuple(replace(line, y=line.y + 0.5 * INSET) for line in found.lines)
    return Block(lines, (), found.height + 0.8 * INSET, FORBIDS)


def _foot(design: Design, width: float) -> Block:
    """How the signs read, and what the page does not replace."""
    words = ("Square: waste as it comes. Red dots: set points, and volume chosen. Diamond: steepest point in the "
             "window. Filled arrow: base, open arrow: acid; dashed: corrects what the other overdoes. Demand: "
             "triangles least and most while it is asked for, dot mean of all time. A licensed engineer must check the "
             "design; permit and codes outrank it.")
    return block_of([words], width, SMALL - 0.5, color=GRAY)


def save_design(design: Design, paths: Mapping[str, Path]) -> None:
    """Write the page of a design to a path per format: png, svg, pdf. The same design gives the same bytes."""
    save_page(design_figure(design), paths)


# ---------------------------------------------------------------- the simulation


def simulation_figure(design: Design) -> Figure:
    """Course of inflow, pH and reagent, all cases, failures. Raises InputError where nothing was simulated."""
    trial = design.trial
    if trial is None:
        raise InputError(_no_trial(design))
    with matplotlib.rc_context(PAGE_STYLE):
        panels = _panels(design, trial)
        width = WIDE - 2.0 * EDGE
        head = _head(design, width, "Neutralization: simulated under its own disturbances")
        words = block_of(cases_words(trial), width, SMALL)
        faults = FAULT_ROW * (len(trial.faults) + 1)
        cases = 0.0 if trial.monte is None else TITLE + CASES_HIGH + LABELS
        below = cases + words.height + 2 * GAP + TITLE + faults + LABELS
        weight = sum(w for w, _ in panels)
        used = 2.0 * EDGE + sum(b.height + BLOCK_GAP for b in head) + 2 * GAP + TITLE * len(panels) + LABELS + below
        high = max(HIGH, used + LEAST_PANEL * weight)
        figure = Figure(figsize=(WIDE, high))
        FigureCanvasAgg(figure)
        y = _put(figure, head, EDGE, width) + GAP
        y = _courses(figure, trial, panels, y, (high - used) / weight)
        y = _cases(figure, design, trial, y, words)
        names = fault_name_room(trial, width)
        plot_faults(design, trial, ax=_axes(figure, EDGE + names, y + TITLE, width - names, faults))
    return figure


def _no_trial(design: Design) -> str:
    name = repr(design.job.name)
    if design.stops:
        return (f"a figure of the simulation needs a design that nothing forbids; {name} was not simulated, as "
                f"{design.stops[0]}. Deal with that first.")
    return (f"a figure of the simulation needs a simulation; {name} was designed without one. "
            "Design it with simulate=True.")


def _panels(design: Design, trial: Trial) -> list[Panel]:
    """What the courses show from top to bottom, each with its share of the height."""
    found: list[Panel] = [(WEIGHTS["inflow"], lambda ax: plot_flow(design, trial, ax=ax)),
                          (WEIGHTS["inflow"], lambda ax: plot_strength(design, trial, ax=ax))]
    if len(design.layout.stages) > 1:
        found.append((WEIGHTS["early"], lambda ax: plot_early_ph(design, trial, ax=ax)))
    found.append((WEIGHTS["last"], lambda ax: plot_last_ph(design, trial, ax=ax)))
    for k in range(len(design.layout.stages)):
        found.append((WEIGHTS["reagent"], lambda ax, k=k: plot_reagent(design, trial, k, ax=ax)))  # type: ignore[misc]
    return found


def _courses(figure: Figure, trial: Trial, panels: Sequence[Panel], top: float, each: float) -> float:
    """Panels that share the time axis, one below the other; where the next begins."""
    y, left = top, EDGE + AXIS + 0.1
    right = 0.55 if len(trial.tanks) > 1 else 0.0  # for the names of the tanks
    for k, (weight, draw) in enumerate(panels):
        ax = _axes(figure, left, y + TITLE, WIDE - EDGE - left - right, weight * each - 0.06)
        draw(ax)
        if k < len(panels) - 1:
            ax.tick_params(labelbottom=False)
        else:
            ax.set_xlabel(f"time [{time_unit(trial)[1]}]")
        y += TITLE + weight * each
    return y + LABELS


def _cases(figure: Figure, design: Design, trial: Trial, top: float, words: Block) -> float:
    """Distributions over the cases side by side, and what they say; where the next begins."""
    half, y = 0.5 * (WIDE - 2.0 * EDGE), top
    if trial.monte is not None:
        left, start = EDGE + AXIS + 0.1, EDGE + half + 0.5 * BETWEEN + AXIS
        plot_cases(trial, ax=_axes(figure, left, y + TITLE, half - AXIS - 0.1 - 0.5 * BETWEEN, CASES_HIGH))
        plot_worst_ph(design, trial, ax=_axes(figure, start, y + TITLE, WIDE - EDGE - start, CASES_HIGH))
        y += TITLE + CASES_HIGH + LABELS
    words.draw(figure, EDGE, y, WIDE - 2.0 * EDGE)
    return y + words.height + GAP


def save_simulation(design: Design, paths: Mapping[str, Path]) -> None:
    """Write the page of the simulation to a path per format. Raises InputError where nothing was simulated."""
    save_page(simulation_figure(design), paths)


# ---------------------------------------------------------------- places


def _put(figure: Figure, blocks: Sequence[Block], top: float, width: float) -> float:
    """Draw blocks one below the other at the left edge; where the next begins."""
    for block in blocks:
        block.draw(figure, EDGE, top, width)
        top += block.height + BLOCK_GAP
    return top - BLOCK_GAP + GAP


def _axes(figure: Figure, left: float, top: float, width: float, height: float) -> Axes:
    """Axes by their place in inches from the upper left corner of the page."""
    wide, high = figure.get_size_inches()
    return figure.add_axes((left / wide, 1.0 - (top + height) / high, width / wide, height / high))

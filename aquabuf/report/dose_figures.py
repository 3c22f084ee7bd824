"""Figures of a dosing plan: the sheet for the wall, a season of doses, a sweep of blends."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import matplotlib
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.steps.blend import Blend
from aquabuf.errors import InputError
from aquabuf.report.dose_lines import sentence
from aquabuf.report.dose_page import PAGE_STYLE, Block, beside, block_of, save_page, stacked, text_width
from aquabuf.report.dose_panels import (
    SMALL,
    TRAIN_KEY,
    fault_names,
    faults_key,
    label_height,
    main_curve,
    plot_faults,
    plot_response,
    plot_train,
    response_key,
    train_labels,
)
from aquabuf.report.dose_season import plot_blend, plot_season_dose, plot_season_ph, season_key
from aquabuf.report.dose_sheet_words import (
    MOST_WARNINGS,
    TIGHT_BELOW,
    curve_words,
    fault_notes,
    feeds_block,
    foot_block,
    head_block,
    stop_block,
    targets_block,
    warnings_block,
)
from aquabuf.report.style import GRAY

__all__ = ["blend_figure", "blends_of", "save_blend", "save_season", "save_sheet", "season_figure", "sheet_figure"]

WIDE, HIGH = 8.27, 11.69    # A4 portrait in inches
EDGE, GAP = 0.35, 0.08      # of the page; between blocks
SCALES = (1.2, 1.1, 1.0, 0.9, 0.8)  # of the words that give way to the panels
LEAST_PANELS, LEAST_AXES = 4.9, 1.1  # inches that the panels want, and the axes of one
SHARE, LEAST_WORKS = 0.57, 1.4       # of the upper panels in the room of all; inches of the axes of the works
EMPTY, MOST_TRAIN = 0.4, 5.0         # inches of words in place of panels; of the works
FEW_WARNINGS = 2
AXIS = 0.5                  # room for an axis and its words at the left of a panel
TITLE, LABELS = 0.2, 0.43   # room above and below a panel
SEASON_WIDE, SEASON_EDGES, PANEL_HIGH, PH_HIGH = 11.0, 2.0, 1.45, 2.2
BLEND_WIDE, BLEND_HIGH = 8.27, 8.0
NO_CURVE = "No dose was found, or nothing is dosed: there is no curve to draw."
NO_FAULT = "No feed runs, so none can stick or stop."


# ---------------------------------------------------------------- the sheet


def sheet_figure(answer: Answer) -> Figure:
    """The page to print: what to set, what it does, what upsets it, what to mind."""
    with matplotlib.rc_context(PAGE_STYLE):
        figure = Figure(figsize=(WIDE, HIGH))
        FigureCanvasAgg(figure)
        width = WIDE - 2.0 * EDGE
        upper, foot = _words(answer, width)
        y = EDGE
        for block in upper:
            block.draw(figure, EDGE, y, width)
            y += block.height + (GAP if block.height else 0.0)
        low = HIGH - EDGE - foot.height
        foot.draw(figure, EDGE, low, width)
        _panels(figure, answer, y, low - GAP, width)
    return figure


def _words(answer: Answer, width: float) -> tuple[list[Block], Block]:
    """Blocks above the panels and that below, as large as leaves the panels their room."""
    half = 0.5 * (width - 0.2)
    for scale in SCALES:
        most = MOST_WARNINGS if scale >= TIGHT_BELOW else FEW_WARNINGS
        aims = beside(targets_block(answer, half), warnings_block(answer, half, most), half + 0.2)
        upper = [head_block(answer, width, scale), stop_block(answer, width, scale),
                 feeds_block(answer, width, scale), aims]
        foot = foot_block(answer, width, min(scale, 1.0))
        used = sum(b.height + GAP for b in (*upper, foot) if b.height)
        if HIGH - 2.0 * EDGE - used >= LEAST_PANELS:
            break
    return upper, foot


def _panels(figure: Figure, answer: Answer, top: float, bottom: float, width: float) -> None:
    """Response and faults side by side, the works below, each with its key."""
    drawn = answer.curves or answer.faults
    works = TITLE + LEAST_WORKS + label_height(train_labels(answer, width - AXIS))
    middle = min(top + SHARE * (bottom - top), bottom - works) if drawn else top + EMPTY
    left = 0.52 * width
    if drawn:
        _response(figure, answer, EDGE, top, left, middle - GAP - top)
        _faults(figure, answer, EDGE + left + 0.15, top, width - left - 0.15, middle - GAP - top)
    else:
        _say(figure, " ".join((NO_CURVE, *fault_notes(answer))), EDGE, top, width)
    _train(figure, answer, EDGE, middle, width, min(bottom - middle, MOST_TRAIN))


def _response(figure: Figure, answer: Answer, left: float, top: float, width: float, height: float) -> None:
    curve = main_curve(answer)
    if curve is None:
        _say(figure, NO_CURVE, left, top, width)
        return
    words = curve_words(curve)
    signs = block_of([response_key(answer, curve)], width - AXIS, SMALL - 0.5, color=GRAY)
    for said in (words, words[1:3], ()):
        key = stacked(block_of(said, width - AXIS, SMALL, bullet="– "), signs)
        room = height - TITLE - LABELS - key.height
        if room >= LEAST_AXES:
            break
    room = max(room, 0.5 * LEAST_AXES)
    upper = _axes(figure, left + AXIS, top + TITLE, width - AXIS, 0.66 * room)
    lower = _axes(figure, left + AXIS, top + TITLE + 0.71 * room, width - AXIS, 0.29 * room)
    plot_response(answer, curve, ax=upper, below=lower)
    key.draw(figure, left + AXIS, top + height - key.height, width - AXIS)


def _faults(figure: Figure, answer: Answer, left: float, top: float, width: float, height: float) -> None:
    if not answer.faults:
        _say(figure, " ".join((NO_FAULT, *fault_notes(answer))), left, top, width)
        return
    signs = block_of([faults_key(answer)], width, SMALL - 0.5, color=GRAY)
    for notes in (fault_notes(answer), ()):
        key = stacked(block_of(notes, width, SMALL - 0.5, most=2, bullet="– "), signs)
        room = height - TITLE - LABELS - key.height
        if room >= 0.75 * LEAST_AXES:
            break
    room = max(room, 0.5 * LEAST_AXES)
    names = max(text_width(name, SMALL) for name in fault_names(answer)) + 0.1
    ax = _axes(figure, left + names, top + TITLE, width - names, room)
    plot_faults(answer, ax=ax)
    key.draw(figure, left, top + height - key.height, width)


def _train(figure: Figure, answer: Answer, left: float, top: float, width: float, height: float) -> None:
    labels = train_labels(answer, width - AXIS)
    key = block_of([TRAIN_KEY], width - AXIS, SMALL - 0.5, color=GRAY)
    below = label_height(labels) + key.height + 0.1
    room = max(height - TITLE - below, 0.5 * LEAST_AXES)
    upper = _axes(figure, left + AXIS, top + TITLE, width - AXIS, 0.56 * room)
    lower = _axes(figure, left + AXIS, top + TITLE + 0.62 * room, width - AXIS, 0.38 * room)
    plot_train(answer, labels, ax=upper, below=lower)
    key.draw(figure, left + AXIS, top + height - key.height, width - AXIS)


def _say(figure: Figure, words: str, left: float, top: float, width: float) -> None:
    """Words in place of a panel."""
    block_of([words], width - AXIS, 8.5, color=GRAY).draw(figure, left + 0.5 * AXIS, top + 0.1, width)


def _axes(figure: Figure, left: float, top: float, width: float, height: float) -> Axes:
    """Axes by their place in inches from the upper left corner of the page."""
    wide, high = figure.get_size_inches()
    return figure.add_axes((left / wide, 1.0 - (top + height) / high, width / wide, height / high))


def save_sheet(answer: Answer, paths: Mapping[str, Path]) -> None:
    """Write the page to a path per format: png, svg, pdf. The same answer gives the same bytes."""
    save_page(sheet_figure(answer), paths)


# ---------------------------------------------------------------- season


def season_figure(answer: Answer) -> Figure:
    """Dose of each product and final pH, row by row of the season. Raises InputError where the plan has none."""
    if answer.season is None:
        raise InputError(f"a figure of the season needs readings; plan {answer.plan.name!r} has none. Add "
                         "readings = \"year.csv\" to its [drift].")
    count = len(answer.season.doses)
    with matplotlib.rc_context(PAGE_STYLE):
        high = SEASON_EDGES + PANEL_HIGH * count + PH_HIGH
        figure = Figure(figsize=(SEASON_WIDE, high))
        FigureCanvasAgg(figure)
        width = SEASON_WIDE - 2.0 * EDGE
        head = stacked(block_of([f"{answer.plan.name}: a season of raw water"], width, 13.0, bold=True, most=1),
                       block_of([f"{answer.season.words()[0]}. {season_key(answer.season)}"], width, 8.0, most=3))
        head.draw(figure, EDGE, EDGE, width)
        y, wide = EDGE + head.height + GAP, width - AXIS
        room = (high - y - EDGE - LABELS - PH_HIGH) / max(count, 1)
        for k in range(count):
            ax = _axes(figure, EDGE + AXIS, y + TITLE, wide, room - TITLE - GAP)
            plot_season_dose(answer.season, k, ax=ax)
            ax.tick_params(labelbottom=False)
            y += room
        y = high - EDGE - LABELS - PH_HIGH
        plot_season_ph(answer, ax=_axes(figure, EDGE + AXIS, y + TITLE, wide, PH_HIGH - TITLE))
    return figure


def save_season(answer: Answer, paths: Mapping[str, Path]) -> None:
    """Write the figure of the season to a path per format. Raises InputError where the plan has no season."""
    save_page(season_figure(answer), paths)


# ---------------------------------------------------------------- blends


def blends_of(answer: Answer) -> tuple[str, ...]:
    """Names of the steps that blend."""
    return tuple(p.step.name for p in answer.train.passed if isinstance(p.step, Blend))


def blend_figure(answer: Answer, step: str | None = None) -> Figure:
    """pH and precipitation potential along the ratios of a blending step, the first if none is named."""
    names = blends_of(answer)
    if not names or step not in (None, *names):
        raise InputError(f"a figure of a blend needs a step that blends; plan {answer.plan.name!r} has "
                         f"{', '.join(names) or 'none'}{'' if step is None else f', not {step!r}'}. Name one of them.")
    passed = next(p for p in answer.train.passed if p.step.name == (step or names[0]))
    with matplotlib.rc_context(PAGE_STYLE):
        figure = Figure(figsize=(BLEND_WIDE, BLEND_HIGH))
        FigureCanvasAgg(figure)
        width = BLEND_WIDE - 2.0 * EDGE
        head = stacked(block_of([f"{answer.plan.name}: {passed.step.name}"], width, 13.0, bold=True, most=2),
                       block_of([sentence(f.words) for f in passed.outcome.findings], width, 8.0,
                                bullet="– ", most=2), gap=0.03)
        head.draw(figure, EDGE, EDGE, width)
        top = EDGE + head.height + GAP
        room = 0.5 * (BLEND_HIGH - top - EDGE - LABELS)
        upper, lower = (_axes(figure, EDGE + AXIS, top + k * room + TITLE, width - AXIS, room - TITLE - GAP)
                        for k in range(2))
        plot_blend(passed, ax=upper, below=lower)
    return figure


def save_blend(answer: Answer, paths: Mapping[str, Path], step: str | None = None) -> None:
    """Write the figure of a blend to a path per format. Raises InputError where no such step blends."""
    save_page(blend_figure(answer, step), paths)

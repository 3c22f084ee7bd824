"""Figures of the page of a plan, one panel each, with their figures in words for who cannot see them."""

from __future__ import annotations

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.answer_json import step_rows
from aquabuf.assess.plant.quantities import find_quantity, in_unit
from aquabuf.assess.plant.steps.blend import Blend
from aquabuf.assess.plant.train import Passed
from aquabuf.report.dose_ladder import ladder_key, plot_ladder
from aquabuf.report.dose_lines import sentence
from aquabuf.report.dose_page import PAGE_STYLE, text_width
from aquabuf.report.dose_panels import (
    SMALL,
    TRAIN_KEY,
    fault_names,
    faults_key,
    feeds_at_fault,
    label_height,
    main_curve,
    plot_faults,
    plot_response,
    plot_train,
    response_key,
    smooth_response,
    train_labels,
)
from aquabuf.report.dose_season import plot_blend, plot_season_dose, plot_season_ph, season_key
from aquabuf.report.dose_tables import sweeps
from aquabuf.report.html.canvas import axes_at, blank, svg_of
from aquabuf.report.html.parts import drawing, gallery

__all__ = ["dose_drawings"]

NARROW, WIDE, HIGH = 5.2, 7.6, 4.3  # inches
LEFT, TOP, BOTTOM, GAP = 0.55, 0.28, 0.45, 0.12  # around axes; between two
RIGHT = 0.1
FEED_HIGH, HEAD_HIGH = 0.32, 0.5    # of the rows of faults
MOST_COLUMNS = 6                    # of the works that fit a narrow drawing


def dose_drawings(answer: Answer) -> tuple[str, ...]:
    """The panels that there is something for, those about the plan first; narrow ones side by side."""
    narrow = [_ladder(answer), *_response(answer), *_faults(answer)]
    works = _works(answer)
    wide = [*([] if _is_narrow(answer) else [works]), *_season(answer)]
    narrow += [works] if _is_narrow(answer) else []
    narrow += [_blend(k, p) for k, p in enumerate(answer.train.passed) if sweeps(p)]
    return (gallery(narrow), *wide)


# ---------------------------------------------------------------- drawing


def _axes(figure: Figure, top: float, height: float, left: float = LEFT, right: float = RIGHT) -> Axes:
    return axes_at(figure, top, height, left=left, right=right)


# ---------------------------------------------------------------- panels


def _ladder(answer: Answer) -> str:
    with matplotlib.rc_context(PAGE_STYLE):
        figure = blank(NARROW, HIGH)
        plot_ladder(answer, ax=_axes(figure, 0.45, HIGH - 0.45 - BOTTOM, right=0.35))
        svg = svg_of(figure)
    carbon, alkalinity = find_quantity("dic"), find_quantity("alkalinity")
    rows = "; ".join(f"{r['name']}: {r[carbon.column]:.3f} {carbon.unit} of carbon, {r[alkalinity.column]:.1f} "
                     f"{alkalinity.unit}" for r in step_rows(answer))
    return drawing(svg, name="ladder", alt=f"The water in the plane of carbon and alkalinity. {rows}.",
                   caption=ladder_key(answer))


def _response(answer: Answer) -> list[str]:
    curve = main_curve(answer)
    if curve is None:
        return []
    with matplotlib.rc_context(PAGE_STYLE):
        figure = blank(NARROW, HIGH)
        room = HIGH - TOP - BOTTOM - GAP
        upper, lower = _axes(figure, TOP, 0.68 * room), _axes(figure, TOP + 0.68 * room + GAP, 0.32 * room)
        plot_response(answer, curve, ax=upper, below=lower)
        svg = svg_of(figure)
    dose, ph, intensity = smooth_response(answer, curve)
    least = int(np.nanargmin(intensity))
    alt = (f"pH behind {curve.step} against the dose of {curve.product}: {ph[0]:.2f} with none, {curve.wanted_ph:.2f} "
           f"with the {curve.wanted_mg_l:.3g} mg/L of the plan, {ph[-1]:.2f} with {dose[-1]:.3g} mg/L. Buffer "
           f"intensity is least, {intensity[least]:.3g} meq/L per pH, at {dose[least]:.3g} mg/L.")
    return [drawing(svg, name="response", alt=alt, caption=response_key(answer, curve))]


def _faults(answer: Answer) -> list[str]:
    if not answer.faults:
        return []
    with matplotlib.rc_context(PAGE_STYLE):
        room = HEAD_HIGH + FEED_HIGH * len(feeds_at_fault(answer))
        figure = blank(NARROW, TOP + room + BOTTOM)
        names = max(text_width(name, SMALL) for name in fault_names(answer)) + 0.15
        plot_faults(answer, ax=_axes(figure, TOP, room, left=names))
        svg = svg_of(figure)
    said = "; ".join(f"{f.product.name} in {f.step} {f.case}: pH {float(f.ph_behind[0]):.2f} in place of "
                     f"{float(f.ph_wanted[0]):.2f}" for f in answer.faults)
    return [drawing(svg, name="faults", alt=f"pH right behind the step with a feed at fault. {said}.",
                    caption=faults_key(answer))]


def _is_narrow(answer: Answer) -> bool:
    return len(answer.train.passed) < MOST_COLUMNS


def _works(answer: Answer) -> str:
    wide = NARROW if _is_narrow(answer) else WIDE
    with matplotlib.rc_context(PAGE_STYLE):
        labels = train_labels(answer, wide - LEFT - RIGHT)
        below = label_height(labels) + 0.1
        room = HIGH - TOP - BOTTOM - GAP
        figure = blank(wide, TOP + room + GAP + below)
        upper, lower = _axes(figure, TOP, 0.6 * room), _axes(figure, TOP + 0.6 * room + GAP, 0.4 * room)
        plot_train(answer, labels, ax=upper, below=lower)
        svg = svg_of(figure)
    ph, alkalinity = find_quantity("ph"), find_quantity("alkalinity")
    rows = "; ".join(f"{r['name']}: pH {r[ph.column]:.2f}, alkalinity {r[alkalinity.column]:.1f} {alkalinity.unit}"
                     for r in step_rows(answer))
    return drawing(svg, name="works", alt=f"pH and alkalinity of the water through the works. {rows}.",
                   caption=TRAIN_KEY)


def _season(answer: Answer) -> list[str]:
    season = answer.season
    if season is None:
        return []
    count, each = len(season.doses), 1.5
    with matplotlib.rc_context(PAGE_STYLE):
        figure = blank(WIDE, (each + TOP) * (count + 1) + GAP * count + BOTTOM)
        for k in range(count):
            ax = _axes(figure, TOP + k * (each + TOP + GAP), each)
            plot_season_dose(season, k, ax=ax)
            ax.tick_params(labelbottom=False)
        plot_season_ph(answer, ax=_axes(figure, TOP + count * (each + TOP + GAP), each))
        svg = svg_of(figure)
    said = " ".join(sentence(words) for words in season.words())
    return [drawing(svg, name="season", alt=f"Doses and pH row by row of the season. {said}",
                    caption=season_key(season))]


def _blend(k: int, passed: Passed) -> str:
    assert isinstance(passed.step, Blend)
    with matplotlib.rc_context(PAGE_STYLE):
        figure = blank(NARROW, HIGH + 0.4)
        room = 0.5 * (HIGH + 0.4 - 2.0 * TOP - BOTTOM - GAP)
        plot_blend(passed, ax=_axes(figure, TOP, room, left=0.75),
                   below=_axes(figure, 2.0 * TOP + GAP + room, room, left=0.75))
        svg = svg_of(figure)
    sweep, potential = passed.step.sweep(passed.before), find_quantity("ccpp")
    ends = "; ".join(
        f"{100.0 * float(sweep.share[i]):.0f} %: pH {float(sweep.ph[i, 0]):.2f}, precipitation potential "
        f"{float(in_unit(potential, sweep.ccpp_mol_l[i, 0])):.1f} {potential.unit}" for i in (0, -1))
    words = " ".join(sentence(f.words) for f in passed.outcome.findings)
    return drawing(svg, name=f"blend-{k + 1}", alt=f"The blend against the share of {sweep.vary}. {ends}. {words}",
                   caption=f"{passed.step.name}: solved at every ratio; the mean of the pH values is not the pH of a "
                           "blend.")

"""Figures of a page: single panels, small enough for a phone, each as SVG with its numbers in words."""

from __future__ import annotations

import io
import warnings
from collections.abc import Callable, Sequence
from functools import partial
from typing import Any

import matplotlib
import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from aquabuf.assess.lake.response import survey_response
from aquabuf.assess.options import ALWAYS_ACID
from aquabuf.assess.sample.headline import RANK_BY
from aquabuf.assess.titration.assess import TitrationResult
from aquabuf.report.figures import BARS, CURVES, plot_alkalinity, plot_buffering, plot_curves, plot_worst
from aquabuf.report.html.common import number
from aquabuf.report.html.parts import drawing
from aquabuf.report.lake_anc_panels import plot_distribution, plot_response
from aquabuf.report.lake_blocks import LakeRun
from aquabuf.report.lake_class_panels import has_loads, plot_classes, plot_first, plot_loads
from aquabuf.report.lake_marks import MICRO, NO_CLASS, styles_of
from aquabuf.report.style import STYLE, short_name
from aquabuf.report.tally import Tally
from aquabuf.report.titration_figures import plot_curve, plot_gran
from aquabuf.report.titration_view import title_line
from aquabuf.report.trend_figures import main_quantities, plot_trend, sites_on_page

__all__ = ["lake_drawings", "panel", "sample_drawings", "titration_drawings"]

WIDE, HIGH = 5.4, 4.0     # inches of a panel
SMALL_WIDE, SMALL_HIGH = 3.9, 3.0
NAMED = 6                 # lakes or samples that the words about a figure name


def panel(draw: Callable[[Axes], object], *, wide: float = WIDE, high: float = HIGH,
          key: Sequence[tuple[str, str, str]] = ()) -> str:
    """A panel as SVG text; `draw` is handed the axes. key : color, marker and words of what stands above the axes."""
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph")  # a name in letters that the font lacks is drawn as boxes
        figure = Figure(figsize=(wide, high), layout="constrained")
        FigureCanvasAgg(figure)
        ax = figure.subplots()
        draw(ax)
        if key:
            signs = [Line2D([], [], ls="", marker=marker, color=color, ms=6) for color, marker, _ in key]
            legend = figure.legend(signs, [words for *_, words in key], loc="outside upper left", fontsize=7.5,
                                   ncols=2, handletextpad=0.1, columnspacing=1.0)
            for text in legend.get_texts():
                text.set_parse_math(False)
        out = io.BytesIO()
        figure.savefig(out, format="svg", dpi=150, metadata={"Date": None, "Creator": None})
    return out.getvalue().decode("utf-8")


def _range(values: np.ndarray, digits: int) -> str:
    known = values[np.isfinite(values)]
    return f"{number(known.min(), digits)} to {number(known.max(), digits)}" if known.size else "none known"


# ---------------------------------------------------------------- samples


def sample_drawings(tally: Tally, curves: pd.DataFrame) -> list[str]:
    """The four panels of an assessment."""
    ph, alkalinity, buffer, warned = np.concatenate(tally.drawn, axis=1).astype(float)
    warned = warned > 0.5
    worst = tally.worst
    bars = "; ".join(f"{r['sample_id']} {number(r[RANK_BY], 3)}" for _, r in worst.head(BARS).iterrows())
    starts = ", ".join(f"{r['sample_id']} (from pH {number(r['ph'], 2)})" for _, r in worst.head(CURVES).iterrows())
    of = f"{ph.size:,} samples, {int(warned.sum()):,} with a warning"
    return [
        drawing(panel(lambda ax: plot_worst(worst, ax=ax)), name="worst-samples",
                alt=f"Acid to pH {ALWAYS_ACID:g} in meq/L, least first: {bars}.",
                caption=f"The acid that takes the worst-buffered samples to pH {ALWAYS_ACID:g}."),
        drawing(panel(lambda ax: plot_alkalinity(ph, alkalinity, warned, ax=ax)), name="all-samples",
                alt=f"{of}: pH {_range(ph, 2)}, alkalinity {_range(alkalinity, 3)} meq/L.",
                caption="pH against alkalinity; triangles: a limit is broken."),
        drawing(panel(lambda ax: plot_curves(curves, worst, ax=ax)), name="added-acid",
                alt=f"pH against strong acid or base added to {starts}.",
                caption="What acid (right of 0) or base (left) does to the worst-buffered samples."),
        drawing(panel(lambda ax: plot_buffering(ph, buffer, warned, ax=ax)), name="buffer-intensity",
                alt=f"Buffer intensity of {of}: {_range(buffer, 4)} meq/L per pH.",
                caption="How strongly each sample resists a change of pH now."),
    ]


# ---------------------------------------------------------------- titrations


def titration_drawings(result: TitrationResult, i: int) -> list[str]:
    """Curve and Gran line of titration `i` of `result.solved`; `name` of the drawings is its row."""
    title, row = title_line(result, i), int(result.results["row"].iloc[result.at[i]])
    ph = result.solved.ph[i]
    points = f"{int(np.isfinite(ph).sum())} points"
    return [
        drawing(panel(lambda ax: plot_curve(result, i, ax=ax)), name=f"curve-{row}",
                alt=f"Titration curve, {title}; {points} from pH {_range(ph, 2)}.",
                caption=title),
        drawing(panel(lambda ax: plot_gran(result, i, ax=ax)), name=f"gran-{row}",
                alt=f"First Gran function of the {points} and its line, {title}.",
                caption="The same titration: Gran line."),
    ]


# ---------------------------------------------------------------- lakes


def lake_drawings(run: LakeRun) -> list[str]:
    """Lakes to look at first or loads, classes, ANC and pH, spread of ANC, and the trends of the first lakes."""
    found, lakes, group = run.found, run.lakes, run.options.group
    scheme, results = found.rules.schemes[0], found.results
    counts = lakes["class"].value_counts()
    key = [(color, marker, f"{short_name(name) or NO_CLASS} ({counts.get(name, 0):,})")
           for name, (color, marker) in styles_of(scheme).items() if name or name in counts]
    said = ", ".join(f"{counts.get(name, 0):,} {name or NO_CLASS}" for name in styles_of(scheme)
                     if name or name in counts)
    response = survey_response(results, run.options.air_co2_ppm, found.rules.organic)
    limit = MICRO * found.rules.limit.value_eq_l
    anc, ph = (results[name].to_numpy(dtype=float) for name in ("anc_used_ueq_l", "ph"))
    over = lakes["exceedance_meq_m2_yr"].dropna()
    out = [
        drawing(panel(lambda ax: plot_classes(lakes, scheme, ax=ax, group=group), key=key), name="classes",
                alt=f"Lakes by class: {said}.", caption="Sensitivity classes, the group with most at risk on top."),
        drawing(panel(lambda ax: plot_response(results, scheme, response, ax=ax, anc_limit_ueq_l=limit), key=key),
                name="response", alt=f"pH {_range(ph, 2)} against ANC {_range(anc, 0)} µeq/L.",
                caption="pH against ANC, with what water at equilibrium with air would have."),
        drawing(panel(lambda ax: plot_distribution(lakes, scheme, ax=ax, group=group, anc_limit_ueq_l=limit)),
                name="distribution", alt=f"How many lakes have no more than an ANC; from {_range(anc, 0)} µeq/L.",
                caption="How ANC is spread over the lakes."),
    ]
    if has_loads(lakes):
        out.append(drawing(
            panel(lambda ax: plot_loads(lakes, scheme, ax=ax), key=key), name="loads",
            alt=f"Critical load against deposition; exceeded in {int((over > 0).sum()):,} of {over.size:,} lakes.",
            caption="Critical load of acidity against deposition: below the line it is exceeded."))
    else:
        names = "; ".join(f"{r['sample_id']} {number(r['anc_used_ueq_l'], 0) or 'no'} µeq/L"
                          for _, r in run.priorities.head(NAMED).iterrows())
        out.append(drawing(panel(lambda ax: plot_first(lakes, scheme, ax=ax), key=key), name="first",
                           alt=f"Lakes to look at first, with their ANC: {names}.",
                           caption="The lakes to look at first."))
    return out + _trend_drawings(run)


def _trend(series: pd.DataFrame, row: pd.Series[Any], ax: Axes) -> None:
    plot_trend(series, row, ax=ax, width_inches=SMALL_WIDE)


def _trend_drawings(run: LakeRun) -> list[str]:
    """A small panel per main quantity of the first lakes with a trend."""
    if not len(run.trends) or not (run.trends["status"] == "ok").any():
        return []
    out: list[str] = []
    for site in sites_on_page(run.trends)[0]:
        of_site = run.trends[run.trends["site"] == site]
        for name in main_quantities(run.trends, site):
            row = of_site[of_site["quantity"] == name].iloc[0]
            svg = panel(partial(_trend, run.series, row), wide=SMALL_WIDE, high=SMALL_HIGH)
            out.append(drawing(svg, name=f"trend-{len(out) + 1}", alt=f"{site}: {row['words']}."))
    return out

"""The figure of a lake survey: pH and ANC, how ANC is spread, classes by group, critical load and deposition."""

from __future__ import annotations

import textwrap
import warnings
from collections.abc import Mapping
from pathlib import Path

import matplotlib
import numpy as np
import pandas as pd
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from matplotlib.legend import Legend
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from aquabuf.assess.lake.assess import LakeAssessment
from aquabuf.assess.lake.response import ResponseCurves, survey_response
from aquabuf.assess.lake.schemes import Scheme
from aquabuf.chem.gases import AIR_CO2_PPM
from aquabuf.report.lake_anc_panels import plot_distribution, plot_response
from aquabuf.report.lake_class_panels import has_loads, plot_classes, plot_first, plot_loads
from aquabuf.report.lake_marks import MICRO, NO_CLASS, dark_edge, styles_of
from aquabuf.report.style import GRAY, STYLE, short_name

__all__ = ["lake_figure", "save_lakes"]

WIDE, HIGH = 11.0, 8.0  # of the page in inches
HEAD_INCHES, FOOT_INCHES = 0.62, 0.24
SOURCE_LETTERS, FOOT_LETTERS = 60, 190


def lake_figure(results: pd.DataFrame, scheme: Scheme, response: ResponseCurves | None, *, source: str,
                anc_limit_ueq_l: float = np.nan, group: str = "region",
                latest: NDArray[np.bool_] | None = None) -> Figure:
    """One landscape page of four panels on the lakes of a survey.

    results : of a lake assessment. scheme : of its classes. response : None draws no curves.
    anc_limit_ueq_l : nan draws no line, as for a limit that varies. group : column of results.
    latest : samples that stand for their lake where there are several of one; the first panel shows all of them.
    """
    lakes = results if latest is None else results[latest]
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph")
        head, foot = HEAD_INCHES / HIGH, FOOT_INCHES / HIGH
        layout = ConstrainedLayoutEngine(rect=(0.0, foot, 1.0, 1.0 - head - foot), hspace=0.05, wspace=0.04, w_pad=0.08)
        figure = Figure(figsize=(WIDE, HIGH), layout=layout)
        FigureCanvasAgg(figure)
        axes = figure.subplots(2, 2)
        plot_response(results, scheme, response, ax=axes[0, 0], anc_limit_ueq_l=anc_limit_ueq_l)
        plot_distribution(lakes, scheme, ax=axes[0, 1], group=group, anc_limit_ueq_l=anc_limit_ueq_l)
        plot_classes(lakes, scheme, ax=axes[1, 0], group=group)
        (plot_loads if has_loads(lakes) else plot_first)(lakes, scheme, ax=axes[1, 1])
        _head(figure, lakes, len(results), scheme, source)
    return figure


def _head(figure: Figure, lakes: pd.DataFrame, samples: int, scheme: Scheme, source: str) -> None:
    """Title and key of the classes above the panels, what the signs mean below them."""
    risk = int(lakes["class"].isin([c.name for c in scheme.classes if c.at_risk]).sum())
    name = source if len(source) <= SOURCE_LETTERS else source[:SOURCE_LETTERS - 1] + "…"
    count = f"{len(lakes):,} lake{'s' if len(lakes) != 1 else ''}"
    count += f" ({samples:,} samples)" if samples > len(lakes) else ""
    title = figure.suptitle(f"{name}: {count}, {risk:,} at risk by {scheme.name}", x=0.01, y=1.0 - 0.1 / HIGH,
                            ha="left", va="top", parse_math=False, fontsize=11, fontweight="bold")
    kind = "Level" if scheme.quantity == "ph" else "Upright"
    words = f"Classes: {scheme.name}{f', {scheme.words}' if scheme.words else ''}. {kind} gray lines: their limits."
    if samples > len(lakes):
        words += " First panel: all samples; others: the latest of each lake."
    foot = figure.text(0.99, 0.06 / HIGH, textwrap.shorten(words, FOOT_LETTERS, placeholder=" …"), ha="right",
                       va="bottom", fontsize=7, color=GRAY, parse_math=False)
    for thing in (title, foot, _key(figure, lakes, scheme)):
        thing.set_in_layout(False)


def _key(figure: Figure, lakes: pd.DataFrame, scheme: Scheme) -> Legend:
    """Color, marker and number of lakes of each class."""
    counts = lakes["class"].value_counts()
    signs, words = [], []
    for name, (color, marker) in styles_of(scheme).items():
        if name or name in counts:
            edge = dark_edge(color) if name else color
            signs.append(Line2D([], [], ls="", marker=marker, color=color, ms=6, mec=edge, mew=0.5 if name else 1.2))
            words.append(f"{short_name(name) or NO_CLASS} ({counts.get(name, 0):,})")
    key = figure.legend(signs, words, loc="upper left", ncols=len(words), fontsize=8, handletextpad=0.1,
                        bbox_to_anchor=(0.0, 1.0 - 0.3 / HIGH), columnspacing=1.4)
    for text in key.get_texts():
        text.set_parse_math(False)
    return key


def save_lakes(found: LakeAssessment, latest: NDArray[np.bool_], paths: Mapping[str, Path], *, source: str,
               group: str = "region", air_co2_ppm: float = AIR_CO2_PPM) -> None:
    """Write the page to a path per format (png, svg); no date and no program name goes into the files."""
    rules = found.rules
    figure = lake_figure(
        found.results, rules.schemes[0], survey_response(found.results, air_co2_ppm, rules.organic), source=source,
        anc_limit_ueq_l=MICRO * rules.limit.value_eq_l, group=group, latest=latest)
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph")  # a name in letters that the font lacks is drawn as boxes
        for kind, path in paths.items():
            metadata = {"Date": None, "Creator": None} if kind == "svg" else {"Software": None}
            figure.savefig(path, format=kind, dpi=150, metadata=metadata)

"""A figure of a page: made to a size, its axes placed by inches, given back as SVG text."""

from __future__ import annotations

import io
import warnings

from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from aquabuf.report.dose_page import METADATA

__all__ = ["axes_at", "blank", "svg_of"]


def blank(wide: float, high: float) -> Figure:
    """An empty figure of this size. [inches]"""
    figure = Figure(figsize=(wide, high))
    FigureCanvasAgg(figure)
    return figure


def axes_at(figure: Figure, top: float, height: float, *, left: float, right: float) -> Axes:
    """Axes over the width of a figure, by their top, height and margins. [inches]"""
    wide, high = figure.get_size_inches()
    return figure.add_axes((left / wide, 1.0 - (top + height) / high, (wide - left - right) / wide, height / high))


def svg_of(figure: Figure) -> str:
    """The figure as SVG text without a date."""
    out = io.BytesIO()
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph")  # a name in letters that the font lacks is drawn as boxes
        figure.savefig(out, format="svg", dpi=150, metadata=METADATA["svg"])
    return out.getvalue().decode("utf-8")

"""The figure of trends: small panels of dated values, a line of their Sen slope, and its direction in words."""

from __future__ import annotations

import textwrap
import warnings
from collections.abc import Mapping, Sequence
from itertools import pairwise
from pathlib import Path

import matplotlib
import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from aquabuf.assess.lake.trend import CONFIDENCE
from aquabuf.assess.lake.trends import UNKNOWN
from aquabuf.report.style import CALM, FAINT, GRAY, INK, STYLE, WARNED, short_name
from aquabuf.tables import read_table

__all__ = ["PANELS", "main_quantities", "plot_trend", "save_trends", "sites_on_page", "trend_figure"]

Array = NDArray[np.float64]

PANELS = 12             # of a page
WIDE, HIGH = 11.0, 8.0  # of the page in inches
HEAD_INCHES, FOOT_INCHES = 0.34, 0.24
SOURCE_LETTERS = 60
HEADING_SIZE, WORD_SIZE = 8.5, 7.5  # points
SPACING = 1.1                       # from line to line, in lines
LETTER, BOLD_LETTER = 0.52, 0.6     # width of a letter in type sizes
SIDE_INCHES = 0.62                  # of a panel, left of its axes
FEW_POINTS = 60                     # up to which they are drawn large
BAND = "#dfe6ee"
RECOVERY = "#2e7d6b"
LINE_COLORS = {"harm": WARNED, "recovery": RECOVERY}
METHOD_MARKS = (("o", CALM), ("s", "white"), ("^", CALM), ("D", "white"))  # marker and face of each method in turn
SIGNS = (f"Line: Sen slope through the medians, dashed where no trend is sure; band: its {CONFIDENCE:.0%} interval. "
         "Red: toward harm; green: toward recovery. Dotted: change of method; values on both sides are not compared.")


def main_quantities(trends: pd.DataFrame, site: str) -> list[str]:
    """What is drawn of a site: ANC, what drives it and what answers; where it has none of these, the rest.

    ANC is the first definition whose trend can be told, else the first that was measured.
    """
    table = trends[trends["site"] == site].set_index("quantity")["status"]
    there = [r for r in read_table("trend_quantities") if r["name"] in table.index]
    judges = [r["name"] for r in there if r["role"] == "judge"]
    judge = [name for name in judges if table[name] == "ok"][:1] or judges[:1]
    main = judge + [r["name"] for r in there if r["role"] in ("driver", "answer")]
    return main or [r["name"] for r in there]


def sites_on_page(trends: pd.DataFrame) -> list[list[str]]:
    """Sites of the table in its order, as many to a page as fit with their main quantities."""
    sites = [str(site) for site in dict.fromkeys(trends["site"])]
    each = max((len(main_quantities(trends, site)) for site in sites), default=1)
    count = max(PANELS // each, 1)
    return [sites[k:k + count] for k in range(0, len(sites), count)]


# ------------------------------------------------------------------ one panel


def plot_trend(series: pd.DataFrame, trend: pd.Series, *, ax: Axes, width_inches: float = WIDE / 4) -> Axes:
    """Dated values of one site and quantity with the line of its trend, a row of the table of trends, and its words.

    series : samples as the trends take them. width_inches : of the panel, for the words above it.
    """
    own = series[(series["site"] == trend["site"]) & series[trend["quantity"]].notna() & series["date"].notna()]
    value, t = own[trend["quantity"]].to_numpy(dtype=float), _decimal_years(own["date"])
    methods = own["method"].fillna("").astype(str).to_numpy() if "method" in own else np.full(len(own), "")
    order, size = _in_time(t, methods), 4.0 if value.size <= FEW_POINTS else 2.6
    for name, (marker, face) in zip(order, METHOD_MARKS * len(order), strict=False):
        ax.plot(t[methods == name], value[methods == name], ls="", marker=marker, ms=size, mec=CALM, mfc=face, mew=0.5,
                alpha=0.8, label=f"_values {name}", zorder=2)
        _sen_line(ax, trend, t[methods == name], value[methods == name])
    for number, (before, after) in enumerate(pairwise(order)):
        _change(ax, float(t[methods == after].min()), "" if number else before or UNKNOWN, after or UNKNOWN)
    if value.size and value.min() < 0.0 < value.max():
        ax.axhline(0.0, color=FAINT, lw=0.8, zorder=0)
    ax.set_ylabel(trend["label"] if trend["unit"] == "-" else trend["unit"])
    ax.xaxis.set_major_locator(MaxNLocator(5, integer=True, steps=[1, 2, 5, 10]))
    ax.yaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))
    _words(ax, trend, width_inches)
    return ax


def _decimal_years(date: pd.Series) -> Array:
    """Dates as years, in the middle of the day as the trends count them."""
    length = 365.0 + date.dt.is_leap_year.to_numpy()
    return date.dt.year.to_numpy(dtype=float) + (date.dt.day_of_year.to_numpy(dtype=float) - 0.5) / length


def _in_time(t: Array, methods: NDArray) -> list[str]:
    """Methods by their mean time."""
    return sorted(dict.fromkeys(methods.tolist()), key=lambda name: float(t[methods == name].mean()))


def _sen_line(ax: Axes, trend: pd.Series, t: Array, value: Array) -> None:
    """Line of the slope through median time and median of what it leaves; band between the ends of its interval."""
    slope, low, high = (float(trend[name]) for name in ("sen_slope", "sen_low", "sen_high"))
    if not np.isfinite(slope):
        return
    middle = float(np.median(t))
    level = float(np.median(value - slope * (t - middle)))
    along = np.array([t.min(), middle, t.max()])
    if np.isfinite(low + high):
        sides = level + np.outer([low, high], along - middle)
        ax.fill_between(along, sides.min(axis=0), sides.max(axis=0), color=BAND, lw=0, label="_band", zorder=1)
    ends = along[[0, 2]]
    ax.plot(ends, level + slope * (ends - middle), color=LINE_COLORS.get(trend["toward"], INK), lw=1.4, label="_sen",
            ls=(0, (4, 2)) if trend["direction"] == "no sure trend" else "-", zorder=3)


def _change(ax: Axes, year: float, before: str, after: str) -> None:
    """Dotted line where the later method begins, with the names on both sides (none for a side that has its name)."""
    ax.axvline(year, color=GRAY, lw=1.0, ls=(0, (1, 1.5)), label="_change", zorder=1.5)
    for name, side, ha in ((before, -2.0, "right"), (after, 2.0, "left")):
        ax.annotate(short_name(name).strip(), (year, 0.98), (side, 0.0), rotation=90, ha=ha, va="top", fontsize=6.5,
                    xycoords=("data", "axes fraction"), textcoords="offset points", color=INK, parse_math=False,
                    zorder=4, bbox={"facecolor": "white", "edgecolor": "none", "alpha": 0.7, "pad": 0.4})


def _words(ax: Axes, trend: pd.Series, width_inches: float) -> None:
    """Quantity and site in bold, below them direction and slope in the words of the table."""
    told = str(trend["words"]).split("; ")[0] + (f": {trend['toward']}" if trend["toward"] else "")
    lines = _wrapped(told, WORD_SIZE, LETTER, width_inches)
    words = ax.annotate("\n".join(lines), (0.0, 1.0), (0.0, 4.0), xycoords="axes fraction", textcoords="offset points",
                        va="bottom", fontsize=WORD_SIZE, color=INK, linespacing=SPACING, parse_math=False)
    words.set_in_layout(False)  # the title above keeps the room, and long words do not narrow the panel
    label = str(trend["label"])
    heading = f"{label[:1].upper()}{label[1:]}, {short_name(trend['site']).strip()}"
    ax.set_title("\n".join(_wrapped(heading, HEADING_SIZE, BOLD_LETTER, width_inches)), fontsize=HEADING_SIZE,
                 pad=7.5 + SPACING * WORD_SIZE * len(lines), parse_math=False)


def _wrapped(text: str, size: float, letter: float, width_inches: float) -> list[str]:
    """Lines that fit a panel."""
    return textwrap.wrap(text, int((width_inches - SIDE_INCHES) * 72.0 / (size * letter)), break_on_hyphens=False)


# ------------------------------------------------------------------ the page


def trend_figure(series: pd.DataFrame, trends: pd.DataFrame, *, source: str = "",
                 sites: Sequence[str] | None = None) -> Figure:
    """One landscape page of up to `PANELS` panels: a site after another, with its main quantities side by side.

    series, trends : what the table of trends was made from, and that table. sites : those of the page, else the first.
    """
    pages = sites_on_page(trends)
    shown = list(sites) if sites is not None else (pages[0] if pages else [])
    rows = [(site, name) for site in shown for name in main_quantities(trends, site)][:PANELS]
    count, total = len(dict.fromkeys(site for site, _ in rows)), sum(map(len, pages))
    high, wide = _grid(len(rows), max(len(rows) // max(count, 1), 1))
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph")
        head, foot = HEAD_INCHES / HIGH, FOOT_INCHES / HIGH
        layout = ConstrainedLayoutEngine(rect=(0.0, foot, 1.0, 1.0 - head - foot), hspace=0.03, wspace=0.02, w_pad=0.05,
                                         h_pad=0.05)
        figure = Figure(figsize=(WIDE, HIGH), layout=layout)
        FigureCanvasAgg(figure)
        axes = figure.subplots(high, wide, squeeze=False).ravel()
        for ax, (site, name) in zip(axes, rows, strict=False):
            plot_trend(series, _row(trends, site, name), ax=ax, width_inches=WIDE / wide)
        for ax in axes[len(rows):]:
            ax.remove()
        _same_years(axes[:len(rows)].tolist())
        _head(figure, source, count, total)
    return figure


def _grid(panels: int, each: int) -> tuple[int, int]:
    """Rows and columns for so many panels, `each` of a site."""
    if panels <= 1:
        return 1, 1
    wide = 2 if panels == each and panels <= 4 else each if each in (3, 4) else 4 if each < 3 and panels > 4 else 2
    wide = min(max(wide, 2), 4)
    return -(-panels // wide), wide


def _row(trends: pd.DataFrame, site: str, quantity: str) -> pd.Series:
    return trends[(trends["site"] == site) & (trends["quantity"] == quantity)].iloc[0]


def _same_years(axes: list[Axes]) -> None:
    """One span of years for all panels, so that they can be read side by side."""
    ends = np.array([ax.get_xlim() for ax in axes if ax.lines]).reshape(-1, 2)
    for ax in axes if ends.size else ():
        ax.set_xlim(ends[:, 0].min(), ends[:, 1].max())


def _head(figure: Figure, source: str, count: int, total: int) -> None:
    name = source if len(source) <= SOURCE_LETTERS else source[:SOURCE_LETTERS - 1] + "…"
    which = f"{count} of {total} sites" if count < total else f"{total} site{'s' if total != 1 else ''}"
    title = figure.suptitle(f"{name}{': ' if name else ''}trends of {which}", x=0.01, y=1.0 - 0.08 / HIGH, ha="left",
                            va="top", parse_math=False, fontsize=11, fontweight="bold")
    signs = figure.text(0.99, 0.06 / HIGH, SIGNS, ha="right", va="bottom", fontsize=7, color=GRAY)
    for text in (title, signs):
        text.set_in_layout(False)


def save_trends(series: pd.DataFrame, trends: pd.DataFrame, paths: Mapping[str, Path], *, source: str = "",
                sites: Sequence[str] | None = None) -> None:
    """Write the page to a path per format (png, svg); no date and no program name goes into the files."""
    figure = trend_figure(series, trends, source=source, sites=sites)
    with matplotlib.rc_context(STYLE), warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph")  # a name in letters that the font lacks is drawn as boxes
        for kind, path in paths.items():
            metadata = {"Date": None, "Creator": None} if kind == "svg" else {"Software": None}
            figure.savefig(path, format=kind, dpi=150, metadata=metadata)

"""Panels of a season of raw water and of a sweep of blends, on axes that are handed in."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.quantities import find_quantity, in_unit
from aquabuf.assess.plant.season import MISSED, UNREAD, Season
from aquabuf.assess.plant.steps.blend import Blend, Sweep
from aquabuf.assess.plant.steps.words import brief
from aquabuf.assess.plant.train import Passed
from aquabuf.report.dose_page import wrapped
from aquabuf.report.dose_panels import SMALL, ax_width, ph_axis, ph_window, window_band
from aquabuf.report.style import CALM, FAINT, GRAY, INK, WARNED
from aquabuf.units import key

__all__ = ["mean_ph", "plot_blend", "plot_season_dose", "plot_season_ph", "season_key"]

Array = NDArray[np.float64]

FEW = 40             # rows, up to which each has a dot
DASHED, DOTTED = (0, (5, 2)), (0, (1, 1.5))
PERCENT = 100.0
TOP = 0.965          # of the axes, where rows that are missed are marked


# ---------------------------------------------------------------- season


def season_key(season: Season) -> str:
    """What the signs mean."""
    missed, unread = int((season.status == MISSED).sum()), int((season.status == UNREAD).sum())
    words = "Dashed: 5 and 95 % of the doses."
    if missed:
        words += f" Crosses and gray: rows that cannot be met ({missed:,})."
    if unread:
        words += f" Gaps with a bar below: raw water not solved ({unread:,})."
    return words


def plot_season_dose(season: Season, k: int, *, ax: Axes) -> Axes:
    """Dose `k` of the season, row by row, with the band that holds nine rows of ten."""
    row = season.doses.iloc[k]
    x = season.table["row"].to_numpy(dtype=float)
    dose = season.table[f"{key(row['step'])}_{key(row['product'])}_mg_l_product"].to_numpy(dtype=float)
    top = float(np.nanmax(dose)) if np.isfinite(dose).any() else 1.0
    ax.set(xlim=(x[0] - 0.5, x[-1] + 0.5), ylim=(0.0, 1.15 * top or 1.0))
    _mark_rows(ax, season)
    _line(ax, x, dose, "_dose")
    for name in ("low_mg_l_product", "high_mg_l_product"):
        if np.isfinite(row[name]):
            ax.axhline(row[name], color=CALM, lw=1.1, ls=DASHED, label=f"_{name}", zorder=2)
    ax.yaxis.set_major_locator(MaxNLocator(4))
    ax.xaxis.set_major_locator(MaxNLocator(12, integer=True))
    ax.set_ylabel("product [mg/L]", fontsize=SMALL + 0.5)
    low, high = float(row["low_mg_l_product"]), float(row["high_mg_l_product"])
    band = f": {_band_words(low, high)}" if np.isfinite(low) else ": no dose found"
    ax.set_title(wrapped(f"{row['product']} in {row['step']}{band}", ax_width(ax), 10.0, bold=True, most=1)[0],
                 parse_math=False)
    return ax


def _band_words(low: float, high: float) -> str:
    """What nine rows of ten take."""
    if brief(low) == brief(high):
        return f"{brief(low)} mg/L in nine rows of ten" if high > 0.0 else "none in nine rows of ten"
    return f"{brief(low)} to {brief(high)} mg/L in nine rows of ten"


def plot_season_ph(answer: Answer, *, ax: Axes) -> Axes:
    """pH of the last step that has a window of it, and of the final water where that is another."""
    season = answer.season
    assert season is not None
    x = season.table["row"].to_numpy(dtype=float)
    final = season.table["final_ph"].to_numpy(dtype=float)
    aimed = [t.step for t in answer.targets if t.target.quantity.name == "ph"]
    window = ph_window(answer, aimed[-1]) if aimed else None
    inner = season.table[f"{key(aimed[-1])}_ph"].to_numpy(dtype=float) if aimed else final
    ends = [] if window is None else [v for v in (window.low, window.high) if np.isfinite(v)]
    ax.set_xlim(x[0] - 0.5, x[-1] + 0.5)
    ph_axis(ax, np.concatenate([final, inner]), *ends)
    low, high = ax.get_ylim()
    ax.set_ylim(low, high + 0.08 * (high - low))
    if window is not None:
        window_band(ax, window)
    _mark_rows(ax, season)
    step = aimed[-1] if aimed else ""
    same = not step or season.train.passed[-1].step.name == step
    if not same:
        _line(ax, x, final, "_final", color=GRAY, style=DOTTED)
    _line(ax, x, inner, "_ph")
    title = f"pH behind {step}" if step else "pH of the final water"
    title += f" (shaded: {window.words})" if window is not None else ""
    title += "" if same else "; dotted: final water"
    ax.set_title(wrapped(title, ax_width(ax), 10.0, bold=True, most=1)[0], parse_math=False)
    ax.xaxis.set_major_locator(MaxNLocator(12, integer=True))
    ax.set_xlabel("row of raw water")
    return ax


def _line(ax: Axes, x: Array, y: Array, label: str, *, color: str = INK, style: object = "-") -> None:
    few = x.size <= FEW
    ax.plot(x, y, color=color, lw=1.2, ls=style, marker="o" if few else "", ms=3.0, label=label, zorder=3)


def _mark_rows(ax: Axes, season: Season) -> None:
    """Rows that are missed: gray behind them and crosses at the top; rows not solved: bars at the bottom."""
    x = season.table["row"].to_numpy(dtype=float)
    missed, unread = season.status == MISSED, season.status == UNREAD
    for first, last in _runs(missed):
        ax.axvspan(x[first] - 0.5, x[last] + 0.5, facecolor=FAINT, alpha=0.45, lw=0, label="_missed", zorder=0.6)
    at = ax.get_xaxis_transform()
    ax.plot(x[missed], np.full(int(missed.sum()), TOP), ls="", marker="x", ms=4.0, mew=1.0, color=WARNED,
            transform=at, label="_crosses", zorder=4)
    ax.plot(x[unread], np.full(int(unread.sum()), 0.02), ls="", marker="|", ms=6.0, color=INK, transform=at,
            label="_unread", zorder=4)


def _runs(mask: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """First and last place of every unbroken run."""
    edges = np.flatnonzero(np.diff(np.concatenate([[False], mask, [False]]).astype(int)))
    return [(int(a), int(b) - 1) for a, b in zip(edges[::2], edges[1::2], strict=True)]


# ---------------------------------------------------------------- blends


def mean_ph(passed: Passed, sweep: Sweep) -> Array:
    """Mean of the pH values of the waters along a sweep, which is not the pH of their blend."""
    blend = passed.step
    assert isinstance(blend, Blend)
    waters = [(blend.own_name, passed.before, blend.own_share), *((s.name, s.stream, s.share) for s in blend.others)]
    ph = {name: float(stream.water().ph[0]) for name, stream, _ in waters}
    share = {name: float(np.ravel(value)[0]) for name, _, value in waters if name != sweep.vary}
    rest = sum(ph[name] * part for name, part in share.items()) / sum(share.values())
    return (1.0 - sweep.share) * rest + sweep.share * ph[sweep.vary]


def _present(passed: Passed, sweep: Sweep) -> float:
    """Share of the swept source as the plan blends it."""
    blend = passed.step
    assert isinstance(blend, Blend)
    shares = {blend.own_name: blend.own_share} | {s.name: s.share for s in blend.others}
    all_of = {name: float(np.ravel(value)[0]) for name, value in shares.items()}
    return all_of[sweep.vary] / sum(all_of.values())


def plot_blend(passed: Passed, *, ax: Axes, below: Axes) -> Axes:
    """pH and precipitation potential against the share of a source; worst ratios and the plan's own marked."""
    assert isinstance(passed.step, Blend)
    sweep = passed.step.sweep(passed.before)
    x, now = PERCENT * sweep.share, PERCENT * _present(passed, sweep)
    ph, mean = sweep.ph[:, 0], mean_ph(passed, sweep)
    for each in (ax, below):
        each.set_xlim(0.0, PERCENT)
        each.axvline(now, color=CALM, lw=1.2, ls=DOTTED, label="_now", zorder=1)
    ph_axis(ax, np.concatenate([ph, mean]))
    ax.plot(x, ph, color=INK, lw=1.6, label="solved", zorder=3)
    ax.plot(x, mean, color=GRAY, lw=1.2, ls=DASHED, label="mean of the pH values: wrong", zorder=2)
    ax.plot(now, float(passed.outcome.figures["ph_after"][0]), ls="", marker="o", ms=6.5, mfc=CALM, mec=INK,
            label=f"this plan: {now:.3g} %", zorder=4)
    ax.legend(loc="best", fontsize=SMALL + 0.5)
    ax.tick_params(labelbottom=False)
    ax.set_title("pH of the blend")
    quantity = find_quantity("ccpp")
    potential = in_unit(quantity, sweep.ccpp_mol_l[:, 0])
    below.set_title("What it does to calcium carbonate")
    name = wrapped(f"share of {sweep.vary} in the blend [%]", ax_width(below), 9.0, most=1)[0]
    below.set_xlabel(name, parse_math=False)
    below.set_ylabel(f"{quantity.label}\n[{quantity.unit}]", fontsize=SMALL + 1.0)
    if not np.isfinite(potential).any():
        below.set_yticks([])
        below.text(0.5, 0.5, "not known: calcium of a source is not known", transform=below.transAxes, ha="center",
                   va="center", color=GRAY)
        return ax
    _potential(below, sweep, x, potential)
    return ax


def _potential(ax: Axes, sweep: Sweep, x: Array, potential: Array) -> None:
    """The potential along the sweep, zero, and the worst ratios in words."""
    low, high = min(float(np.nanmin(potential)), 0.0), max(float(np.nanmax(potential)), 0.0)
    margin = 0.2 * ((high - low) or 1.0)
    ax.set_ylim(low - margin, high + margin)
    ax.axhline(0.0, color=INK, lw=0.8, zorder=1)
    ax.plot(x, potential, color=INK, lw=1.6, label="_potential", zorder=3)
    for point, words, marker in ((sweep.most_depositing(), "deposits most", "^"),
                                 (sweep.most_dissolving(), "dissolves most", "v")):
        share, value = PERCENT * float(point.share[0]), float(in_unit(find_quantity("ccpp"), point.ccpp_mol_l)[0])
        if np.isfinite(share):
            ax.plot(share, value, ls="", marker=marker, ms=8, mfc=WARNED, mec=INK, label="_worst", zorder=4,
                    clip_on=False)
            right, up = share > 50.0, marker == "^"
            ax.annotate(f"{words}: {abs(value):.1f} mg/L at {share:.3g} %", (share, value),
                        (-8.0 if right else 8.0, 6.0 if up else -6.0), textcoords="offset points", zorder=5,
                        ha="right" if right else "left", va="bottom" if up else "top", fontsize=SMALL + 0.5,
                        bbox={"facecolor": "white", "edgecolor": "none", "alpha": 0.85, "pad": 0.8})

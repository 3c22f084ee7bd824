"""What the panels of a survey rest on: its numbers, its groups, the look of its classes, and names for its lakes."""

from __future__ import annotations

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.colors import to_rgb
from numpy.typing import NDArray

from aquabuf.assess.lake.schemes import Scheme
from aquabuf.report.style import FAINT, GRAY, NAME_LENGTH, class_styles, short_name

__all__ = ["FEW_LAKES", "MICRO", "NO_CLASS", "dark_edge", "empty", "group_names", "lake_names", "limits_of", "marks",
           "numbers", "styles_of", "weights"]

Array = NDArray[np.float64]

MICRO = 1e6
MANY_POINTS = 3000  # beyond, points are drawn as pixels inside the vector file
FEW_LAKES = 60      # up to which lakes are drawn large, with intervals and their pH at air
NO_CLASS = "no class"
NO_CLASS_STYLE = (FAINT, "x")


def styles_of(scheme: Scheme) -> dict[str, tuple[str, str]]:
    """Color and marker of each class by name, the worst first, and of lakes without one."""
    names = [c.name for c in scheme.classes]
    return dict(zip(names, class_styles(len(names)), strict=True)) | {"": NO_CLASS_STYLE}


def numbers(results: pd.DataFrame, name: str) -> Array:
    """A column as numbers; nan throughout where it is not there."""
    return results[name].to_numpy(dtype=float) if name in results else np.full(len(results), np.nan)


def marks(ax: Axes, results: pd.DataFrame, scheme: Scheme, x: Array, y: Array, *, hollow: bool = False) -> None:
    """A mark per lake in the color of its class, worse classes on top."""
    known = np.isfinite(x + y)
    size = 34.0 if known.sum() <= FEW_LAKES else 8.0 if hollow else 12.0 if known.sum() <= MANY_POINTS else 5.0
    of_class = results["class"].to_numpy()
    for place, (name, (color, marker)) in enumerate(styles_of(scheme).items()):
        here = known & (of_class == name)
        if here.any():
            edge = color if marker == "x" else dark_edge(color)
            face = {"facecolors": "none", "edgecolors": edge} if hollow and marker != "x" else (
                {"c": color} if marker == "x" else {"facecolors": color, "edgecolors": edge})
            ax.scatter(x[here], y[here], s=size, marker=marker, linewidths=1.0 if hollow or marker == "x" else 0.4,
                       rasterized=known.sum() > MANY_POINTS, label=f"{name or NO_CLASS} ({int(here.sum()):,})",
                       zorder=3.0 - 0.05 * place, **face)


def group_names(results: pd.DataFrame, group: str) -> list[str]:
    """Groups from the largest to the smallest; lakes without one do not count."""
    counts = results[group].value_counts() if group in results else pd.Series(dtype=int)
    return sorted((name for name in counts.index if name), key=lambda name: (-counts[name], name))


def weights(results: pd.DataFrame) -> tuple[Array, bool]:
    """Weight of each lake and whether the survey gives one; 1 where it does not."""
    weight = numbers(results, "survey_weight")
    given = bool(np.isfinite(weight).any())
    return (np.nan_to_num(weight) if given else np.ones(len(results))), given


def limits_of(scheme: Scheme) -> list[float]:
    """Limits between the classes in the unit of results, from the worst to the best."""
    return [c.upper * (1.0 if scheme.quantity == "ph" else MICRO) for c in scheme.classes[:-1]]


def lake_names(results: pd.DataFrame) -> list[str]:
    """Short name of each lake: its site where all of these differ, else its sample, else that with its row."""
    for column in ("site", "sample_id"):
        if column in results:
            names = [short_name(name) for name in results[column]]
            if all(name.strip() for name in names) and len(set(names)) == len(names):
                return names
    rows = [f" (row {row})" for row in results["row"]]
    return [short_name(name)[:NAME_LENGTH - len(row)] + row
            for name, row in zip(results["sample_id"], rows, strict=True)]


def dark_edge(color: str) -> tuple[float, ...]:
    """A darker shade, for the edge of a mark on white."""
    return tuple(0.6 * part for part in to_rgb(color))


def empty(ax: Axes, words: str) -> Axes:
    """Words in a panel that has nothing to show."""
    ax.set(xticks=[], yticks=[])
    ax.text(0.5, 0.5, words, transform=ax.transAxes, ha="center", va="center", color=GRAY, parse_math=False)
    return ax

"""How figures look: colors, type and names, shared by all of them; drawing itself is elsewhere."""

from __future__ import annotations

from typing import Any

__all__ = ["CALM", "CLASS_COLORS", "CLASS_MARKERS", "CURVE_COLORS", "FAINT", "GRAY", "INK", "NAME_LENGTH", "STYLE",
           "WARNED", "class_styles", "short_name"]

# Distinct in gray print and to color-blind eyes
CALM, WARNED, INK, GRAY, FAINT = "#4a7ba6", "#c8553d", "#222222", "#777777", "#b8b8b8"
CURVE_COLORS = ("#c8553d", "#7a4e9e", "#2e7d6b", "#4a7ba6", "#9a6b1f", "#555555")
# Sensitivity classes from worst to best: lighter from step to step, with a marker each as second sign
CLASS_COLORS = ("#571838", "#8d3036", "#b8562c", "#bb8a3e", "#82b69b", "#b7dae8")
CLASS_MARKERS = ("v", "X", "s", "D", "o", "^")
CLASS_STEPS = {2: (1, 4), 3: (0, 2, 4), 4: (0, 2, 4, 5), 5: (0, 1, 2, 4, 5)}  # the steps that few classes take
NAME_LENGTH = 22

STYLE: Any = {
    "font.size": 9, "axes.titlesize": 10, "axes.titlelocation": "left", "axes.titleweight": "bold",
    "axes.spines.top": False, "axes.spines.right": False, "axes.edgecolor": "#666666", "axes.linewidth": 0.8,
    "xtick.color": INK, "ytick.color": INK, "legend.frameon": False, "legend.fontsize": 8,
    "svg.fonttype": "none", "svg.hashsalt": "aquabuf", "figure.dpi": 100,
}


def short_name(sample_id: object) -> str:
    """A sample's name as a label: short, and not hidden as names with a leading underscore would be."""
    text = str(sample_id)[:NAME_LENGTH]
    return f" {text}" if text.startswith("_") else text


def class_styles(count: int) -> list[tuple[str, str]]:
    """Color and marker of each of `count` classes, the worst first. More classes than steps share the ramp evenly."""
    last = len(CLASS_COLORS) - 1
    if count > len(CLASS_COLORS):
        return [(_between(k * last / (count - 1)), CLASS_MARKERS[k % len(CLASS_MARKERS)]) for k in range(count)]
    return [(CLASS_COLORS[k], CLASS_MARKERS[k]) for k in CLASS_STEPS.get(count, range(count))]


def _between(place: float) -> str:
    """Color at a place along the ramp."""
    k = min(int(place), len(CLASS_COLORS) - 2)
    worse, better = (bytes.fromhex(CLASS_COLORS[i][1:]) for i in (k, k + 1))
    return "#" + bytes(round(a + (place - k) * (b - a)) for a, b in zip(worse, better, strict=True)).hex()

"""How figures look: colors, type and names, shared by all of them; drawing itself is elsewhere."""

from __future__ import annotations

from typing import Any

__all__ = ["CALM", "CURVE_COLORS", "FAINT", "INK", "NAME_LENGTH", "STYLE", "WARNED", "short_name"]

# Distinct in gray print and to color-blind eyes
CALM, WARNED, INK, FAINT = "#4a7ba6", "#c8553d", "#222222", "#b8b8b8"
CURVE_COLORS = ("#c8553d", "#7a4e9e", "#2e7d6b", "#4a7ba6", "#9a6b1f", "#555555")
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

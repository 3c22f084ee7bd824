"""Lines of text for pages of the plant room: titled lists, aligned tables, numbers for people."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence

from aquabuf.assess.plant.indices import NOTHING_MG_L
from aquabuf.report.summary import WIDTH, item

__all__ = ["aligned", "block", "bullet", "calcite_words", "dropped", "figure", "sentence", "titled"]

GAP = "  "
INDENT = "  "
LEAST_NAME = 12  # characters that a column of names keeps on a narrow page
HELD = "\u00a0"  # stands for a space at which a line must not break, while lines are made
BEFORE_UNIT = re.compile(r"(?<=\d) (?=(%|mg/L|meq/L|mmol/L|kg|lb|L/h|L\b|gal|m³|ft³|h\b|d\b|s\b|°C|g\b|mL))"
                         r"|(?<=\bpH) (?=\d)")


def bullet(text: str, mark: str = "  - ") -> str:
    """A wrapped line of a list; no number is parted from its unit."""
    return item(BEFORE_UNIT.sub(HELD, text), mark).replace(HELD, " ")


def block(title: str, lines: Sequence[str]) -> str:
    """A titled list; nothing where there are no lines."""
    return "\n".join([title, *(bullet(line) for line in lines if line)]) if any(lines) else ""


def titled(title: str, *parts: str) -> str:
    """A title over parts that are laid out already; nothing where all are empty."""
    some = [part for part in parts if part]
    return "\n".join([title, *some]) if some else ""


def sentence(text: str) -> str:
    """A text with a capital first letter, unless it starts with a name such as pH, and one full stop."""
    text = text.strip()
    if len(text) > 1 and not text[1].isupper():
        text = text[0].upper() + text[1:]
    return text if text.endswith((".", ":")) else f"{text}."


def figure(value: float | None, digits: int, sign: str = "") -> str:
    """A number with so many decimals; a dash where there is none."""
    if value is None or math.isnan(value):
        return "-"
    return "endless" if math.isinf(value) else f"{value:{sign}z,.{digits}f}"


def calcite_words(mg_l: float) -> str:
    """What would deposit or dissolve on the way to balance, a word before the figure. [mg/L as CaCO3]"""
    if math.isnan(mg_l):
        return "-"
    if abs(mg_l) < NOTHING_MG_L:
        return "in balance"
    return f"{'deposits' if mg_l > 0.0 else 'dissolves'} {abs(mg_l):.1f}"


def dropped(head: Sequence[Sequence[str]], rows: Sequence[Sequence[str]],
            ) -> tuple[list[list[str]], list[list[str]], list[int]]:
    """Head and rows without the columns in which no row has anything; and the numbers of those that stay."""
    keep = [k for k in range(len(head[0])) if any(row[k] not in ("", "-") for row in rows)]
    return [[line[k] for k in keep] for line in head], [[row[k] for k in keep] for row in rows], keep


def aligned(head: Sequence[Sequence[str]], rows: Sequence[Sequence[str]], left: Sequence[int] = (0,), gap: str = GAP,
            ) -> str:
    """A table: lines of the head, then the rows; columns in `left` start together, the others end together.

    A column in which no row has anything is left out. Where the page is too narrow, names are cut.
    """
    if not rows:
        return ""
    head, rows, kept = dropped(head, rows)
    widths = _fitted([max(len(line[k]) for line in (*head, *rows)) for k in range(len(kept))],
                     [k for k, column in enumerate(kept) if column in left], len(gap))
    lines = []
    for line in (*head, *rows):
        cells = [_cut(cell, widths[k]) for k, cell in enumerate(line)]
        lines.append(INDENT + gap.join(
            cell.ljust(widths[k]) if kept[k] in left else cell.rjust(widths[k]) for k, cell in enumerate(cells)))
    return "\n".join(line.rstrip() for line in lines)


def _fitted(widths: list[int], names: Sequence[int], gap: int) -> list[int]:
    """Widths of columns that fit the page, taken off the widest of the columns that hold names."""
    out = list(widths)
    while len(INDENT) + sum(out) + gap * (len(out) - 1) > WIDTH:
        widest = max(names, key=lambda k: out[k])
        if out[widest] <= LEAST_NAME:
            break
        out[widest] -= 1
    return out


def _cut(cell: str, width: int) -> str:
    return cell if len(cell) <= width else f"{cell[:width - 3].rstrip()}..."

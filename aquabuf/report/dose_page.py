"""Text on a page in inches: words wrapped by their real width, blocks whose height is known before they are drawn."""

from __future__ import annotations

import re
import warnings
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cache
from pathlib import Path

import matplotlib
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.textpath import text_to_path

from aquabuf.report.style import INK, STYLE

__all__ = ["LEADING", "METADATA", "PAGE_STYLE", "POINTS", "Block", "Line", "beside", "block_of", "save_page", "stacked",
           "text_width", "wrapped"]

LEADING = 1.28   # from line to line, in type sizes
POINTS = 72.0    # per inch
MORE = "…"
_PARTS = re.compile(r"\s+|\S+")
PAGE_STYLE = STYLE | {"pdf.fonttype": 42,  # type that can be searched
                      "axes.labelsize": 8, "xtick.labelsize": 8, "ytick.labelsize": 8}
HINTED = 1.03    # widest that the pixels of a screen make a line
# No date and no program name goes into the files
METADATA: Mapping[str, Mapping[str, None]] = {
    "png": {"Software": None}, "svg": {"Date": None, "Creator": None},
    "pdf": {"CreationDate": None, "Creator": None, "Producer": None}}


@dataclass(frozen=True, slots=True)
class Line:
    """One line of words: its left end and top in inches from the corner of its block, its type."""

    x: float
    y: float
    words: str
    size: float
    bold: bool = False
    color: str = INK


@dataclass(frozen=True, slots=True)
class Block:
    """Lines, level rules (heights in inches from the top) and perhaps a filled box behind them. height in inches."""

    lines: tuple[Line, ...] = ()
    rules: tuple[float, ...] = ()
    height: float = 0.0
    fill: str = ""

    def draw(self, figure: Figure, left: float, top: float, width: float) -> None:
        """Put it on the page; left and top in inches from the upper left corner."""
        wide, high = figure.get_size_inches()
        if self.fill:
            figure.add_artist(Rectangle((left / wide, 1.0 - (top + self.height) / high), width / wide,
                                        self.height / high, facecolor=self.fill, edgecolor=INK, lw=1.0, zorder=0.5))
        for y in self.rules:
            level = 1.0 - (top + y) / high
            figure.add_artist(Line2D((left / wide, (left + width) / wide), (level, level), color=INK, lw=0.6))
        for line in self.lines:
            figure.text((left + line.x) / wide, 1.0 - (top + line.y) / high, line.words, fontsize=line.size,
                        fontweight="bold" if line.bold else "normal", color=line.color, ha="left", va="top",
                        parse_math=False)


def text_width(words: str, size: float, bold: bool = False) -> float:
    """Width of some words. [inches]"""
    return HINTED * size / POINTS * sum(_part_width(part, bold) for part in _PARTS.findall(words))


@cache
def _part_width(part: str, bold: bool) -> float:
    """Width of a word or space in type sizes; between them nothing is kerned."""
    font = FontProperties(size=POINTS, weight="bold" if bold else "normal")
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph")
        return float(text_to_path.get_text_width_height_descent(part, font, False)[0]) / POINTS


def wrapped(words: str, width: float, size: float, *, bold: bool = False, most: int | None = None) -> list[str]:
    """Words in lines no wider than `width` [inches]; a word that is wider is cut. Beyond `most` lines they end in …"""
    lines: list[str] = []
    for word in (part for w in words.split() for part in _parts(w, width, size, bold)):
        if lines and text_width(f"{lines[-1]} {word}", size, bold) <= width:
            lines[-1] += f" {word}"
        else:
            lines.append(word)
    if most is None or len(lines) <= most:
        return lines
    last = lines[most - 1]
    while last and text_width(last + MORE, size, bold) > width:
        last = last[:-1]
    return [*lines[:most - 1], last.rstrip() + MORE]


def _parts(word: str, width: float, size: float, bold: bool) -> list[str]:
    """A word in pieces that fit."""
    parts = [""]
    for letter in word:
        if parts[-1] and text_width(parts[-1] + letter, size, bold) > width:
            parts.append("")
        parts[-1] += letter
    return parts


def block_of(words: Sequence[str], width: float, size: float, *, bold: bool = False, color: str = INK, x: float = 0.0,
             most: int | None = None, bullet: str = "") -> Block:
    """Each of the sentences wrapped, one below the other; `bullet` stands before the first line of each."""
    indent = text_width(bullet, size) if bullet else 0.0
    step = LEADING * size / POINTS
    lines: list[Line] = []
    for sentence in words:
        for k, text in enumerate(wrapped(sentence, width - x - indent, size, bold=bold, most=most)):
            y = step * len({line.y for line in lines})
            if bullet and k == 0:
                lines.append(Line(x, y, bullet.rstrip(), size, bold, color))
            lines.append(Line(x + indent, y, text, size, bold, color))
    return Block(tuple(lines), (), step * len({line.y for line in lines}))


def stacked(*blocks: Block, gap: float = 0.0) -> Block:
    """Blocks one below the other as one block."""
    lines: list[Line] = []
    rules: list[float] = []
    y = 0.0
    for block in (b for b in blocks if b.height > 0.0):
        lines += [replace(line, y=line.y + y) for line in block.lines]
        rules += [rule + y for rule in block.rules]
        y += block.height + gap
    return Block(tuple(lines), tuple(rules), max(y - gap, 0.0))


def beside(left: Block, right: Block, offset: float) -> Block:
    """Two blocks with level tops as one; `offset` [inches] from the left end of one to that of the other."""
    moved = tuple(replace(line, x=line.x + offset) for line in right.lines)
    return Block((*left.lines, *moved), (), max(left.height, right.height))


def save_page(figure: Figure, paths: Mapping[str, Path]) -> None:
    """Write a figure to a path per format: png, svg, pdf."""
    with matplotlib.rc_context(PAGE_STYLE), warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph")  # a name in letters that the font lacks is drawn as boxes
        for kind, path in paths.items():
            figure.savefig(path, format=kind, dpi=150, metadata=METADATA[kind])

"""The parts of a page, each a function from a result to HTML text; everything that comes from outside is escaped."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from html import escape
from urllib.parse import quote

from aquabuf.errors import InputError

__all__ = ["TONES", "Column", "Link", "bullets", "card", "details", "drawing", "facts", "gallery", "paragraph",
           "section", "shown_text", "table"]

TONES: Mapping[str, str] = {"stop": "STOP", "warn": "WARNING", "good": "OK", "note": "NOTE"}  # sign beside the color
LONGEST_TEXT = 400   # of a text from a file; the rest is cut with a mark
# Marks that turn the direction of writing or hide themselves; a name must not rearrange the page
_CONTROLS = re.compile(r"[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\u200b-\u200f\u202a-\u202e\u2066-\u2069\ufeff]")


def shown_text(value: object, longest: int = LONGEST_TEXT) -> str:
    """A text as the page shows it: escaped, without control characters, cut where it is very long."""
    text = _CONTROLS.sub("\N{REPLACEMENT CHARACTER}", str(value))
    return escape(text if len(text) <= longest else f"{text[:longest]}…", quote=True)


@dataclass(frozen=True, slots=True)
class Link:
    """Words that lead to a file of the same folder."""

    words: str
    file: str

    def html(self) -> str:
        """The link; a name with a slash, colon or hash in it still leads nowhere but into the folder."""
        return f'<a href="{quote(self.file, safe="")}">{shown_text(self.words)}</a>'


def _cell(value: str | Link, longest: int) -> str:
    return value.html() if isinstance(value, Link) else shown_text(value, longest)


def paragraph(words: str, *, soft: bool = False, link: Link | None = None) -> str:
    """A paragraph, with a link at its end if one is given; empty for no words."""
    more = f" {link.html()}" if link else ""
    return f'<p{" class=soft" if soft else ""}>{shown_text(words, 4000)}{more}</p>' if words else ""


def section(title: str, *body: str, name: str = "") -> str:
    """A heading with what belongs under it; empty where nothing does."""
    inner = "\n".join(part for part in body if part)
    anchor = f' id="{escape(name, quote=True)}"' if name else ""
    return f"<section{anchor}>\n<h2>{shown_text(title)}</h2>\n{inner}\n</section>" if inner else ""


def card(tone: str, verdict: str, *, number: str = "", rule: str = "", next_step: str = "", caution: str = "") -> str:
    """A verdict: its sign in words, what was found, the number and its interval, the rule, what to do."""
    if tone not in TONES:
        raise InputError(f"a card must be one of {', '.join(TONES)}; found {tone!r}. Correct its tone.")
    lines = [f'<p><span class="sign">{TONES[tone]}</span></p>', f'<p class="big">{shown_text(verdict)}</p>']
    lines += [f"<p>{shown_text(number)}</p>"] if number else []
    lines += [f'<p class="soft">Rule: {shown_text(rule, 1000)}</p>'] if rule else []
    lines += [f"<p><strong>Next:</strong> {shown_text(next_step, 1000)}</p>"] if next_step else []
    lines += [f"<p><strong>Caution:</strong> {shown_text(caution, 1000)}</p>"] if caution else []
    inner = "\n".join(lines)
    return f'<div class="card {tone}">\n{inner}\n</div>'


def bullets(items: Iterable[str], *, ordered: bool = False) -> str:
    """A list, empty for no items."""
    lines = "\n".join(f"<li>{shown_text(item, 2000)}</li>" for item in items if item)
    kind = "ol" if ordered else "ul"
    return f"<{kind}>\n{lines}\n</{kind}>" if lines else ""


def facts(pairs: Iterable[tuple[str, str]]) -> str:
    """Names and values, one row each."""
    rows = "\n".join(f'<tr><th scope="row">{shown_text(name)}</th><td>{shown_text(value, 2000)}</td></tr>'
                     for name, value in pairs if value)
    return f'<div class="scroll" tabindex="0"><table>\n<tbody>\n{rows}\n</tbody>\n</table></div>' if rows else ""


def details(title: str, *body: str, printed: bool = True) -> str:
    """Something folded, which opens for the printer or stays away from it; empty where there is nothing in it."""
    inner = "\n".join(part for part in body if part)
    kind = "" if printed else ' class="screen"'
    return f"<details{kind}>\n<summary>{shown_text(title)}</summary>\n{inner}\n</details>" if inner else ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """A column of a table: its heading with the unit, whether it holds numbers or sentences, what the heading means."""

    title: str
    number: bool = False
    sentence: bool = False
    meaning: str = ""

    @property
    def kind(self) -> str:
        """Its class as an attribute."""
        return ' class="number"' if self.number else ' class="sentence"' if self.sentence else ""

    def head(self) -> str:
        """Its heading."""
        hint = f' title="{shown_text(self.meaning)}"' if self.meaning else ""
        return f'<th scope="col"{self.kind}{hint}>{shown_text(self.title)}</th>'


def table(columns: Sequence[Column], rows: Iterable[Sequence[str | Link]], *, caption: str = "",
          tones: Sequence[str] = (), sortable: bool = True, longest: int = LONGEST_TEXT) -> str:
    """A table of texts and links; the first column names the rows.

    tones : marks rows by color, so the rows must say it too. longest : letters of a cell that are shown.
    """
    lines = []
    for k, row in enumerate(rows):
        if len(row) != len(columns):
            raise InputError(f"row {k + 1} of a table must have {len(columns)} cells; found {len(row)}. Fill it up.")
        tone = f' class="{tones[k]}"' if k < len(tones) and tones[k] in ("stop", "warn") else ""
        cells = [f'<th scope="row">{_cell(row[0], longest)}</th>']
        cells += [f"<td{c.kind}>{_cell(v, longest)}</td>" for c, v in zip(columns[1:], row[1:], strict=True)]
        lines.append(f"<tr{tone}>{''.join(cells)}</tr>")
    if not lines:
        return ""
    head = "".join(c.head() for c in columns)
    title = f"<caption>{shown_text(caption, 1000)}</caption>\n" if caption else ""
    kind = ' class="sortable"' if sortable and len(lines) > 1 else ""
    label = shown_text(caption or columns[0].title, 120)
    body = "\n".join(lines)
    return (f'<div class="scroll" tabindex="0" role="region" aria-label="{label}">\n<table{kind}>\n{title}<thead>\n'
            f"<tr>{head}</tr>\n</thead>\n<tbody>\n{body}\n</tbody>\n</table>\n</div>")


# ---------------------------------------------------------------- drawings

_OPENING = re.compile(r"<svg\b[^>]*>", re.DOTALL)
_BOX = re.compile(r'viewBox="([^"]*)"')
_ID = re.compile(r'\bid="([^"]+)"')
_NAMED = re.compile(r'(\bid="|url\(#|href="#)([^")]+)')
_METADATA = re.compile(r"<metadata>.*?</metadata>", re.DOTALL)


def drawing(svg: str, *, name: str, alt: str, caption: str = "") -> str:
    """A figure within the page: its SVG with ids of its own, scaled to the width, with a text for who cannot see it.

    name : unique in the page; ids of the drawing begin with it.

    Raises InputError where the text is no SVG drawing with a viewBox.
    """
    opening = _OPENING.search(svg)
    box = _BOX.search(opening.group()) if opening else None
    if opening is None or box is None:
        raise InputError("a drawing must be an SVG text with a viewBox; found none. Save the figure as SVG.")
    inner = _CONTROLS.sub("\N{REPLACEMENT CHARACTER}", _METADATA.sub("", svg[opening.end():]))
    ids = set(_ID.findall(inner))
    inner = _NAMED.sub(lambda m: f"{m[1]}{name}-{m[2]}" if m[2] in ids else m[0], inner)
    inner = inner.replace("xlink:href", "href")
    said = shown_text(alt, 2000)
    words = f"<figcaption>{shown_text(caption, 1000)}</figcaption>" if caption else ""
    return (f'<figure>\n<div class="drawing">\n<svg xmlns="http://www.w3.org/2000/svg" viewBox="{box.group(1)}" '
            f'role="img" aria-label="{said}">{inner.strip()}\n</div>\n{words}\n</figure>')


def gallery(drawings: Iterable[str]) -> str:
    """Drawings side by side where there is room; empty for none."""
    inner = "\n".join(drawings)
    return f'<div class="gallery">\n{inner}\n</div>' if inner else ""

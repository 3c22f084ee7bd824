"""What several pages share: rows kept for a table, blocks of the text summary, rules in words, provenance, files."""

from __future__ import annotations

import fnmatch
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.limits import Limit
from aquabuf.assess.uncertainty import COVERAGE
from aquabuf.report.html.parts import Column, Link, bullets, details, facts, paragraph, section, table
from aquabuf.tables import read_table

__all__ = ["INTERVAL", "ROWS", "Block", "Kept", "blocks_of", "capital", "constants_part", "file_part", "first",
           "folded", "limited", "number", "provenance", "quantity_words", "refused_part", "rule_words", "spread",
           "titled"]

ROWS = 200  # of a table; the rest is in the CSV file beside the page
OPEN_ROWS, FEW_ROWS = 25, 40  # rows that stand open, the others folded; up to so many all stand open
INTERVAL = f"{COVERAGE:.0%} interval"
SIGNS = {"<": "below", "<=": "at or below", ">": "above", ">=": "at or above"}
OPTION_UNITS = {"_ueq_l": " [µeq/L]", "_ppm": " [ppm]"}
SPELLED = {"anc": "ANC", "co2": "CO2", "ph": "pH"}


# ---------------------------------------------------------------- rows


@dataclass(slots=True)
class Kept:
    """First rows of a table that comes in pieces, by a rank (the least first) or as they come; `total` counts all."""

    most: int = ROWS
    total: int = 0
    rows: list[Mapping[Any, Any]] = field(default_factory=list)
    _ranks: list[float] = field(default_factory=list)

    def add(self, piece: pd.DataFrame, rank: Sequence[float] | np.ndarray | None = None) -> None:
        """Take in a piece."""
        self.total += len(piece)
        ranks = np.zeros(len(piece)) if rank is None else np.asarray(rank, dtype=float)
        ranks = np.where(np.isnan(ranks), np.inf, ranks)
        at = np.argsort(ranks, kind="stable")[:self.most]
        rows = [*self.rows, *piece.iloc[at].to_dict("records")]
        every = [*self._ranks, *ranks[at].tolist()]
        keep = sorted(range(len(every)), key=every.__getitem__)[:self.most]
        self.rows, self._ranks = [rows[k] for k in keep], [every[k] for k in keep]


def limited(columns: Sequence[Column], rows: Sequence[Sequence[str | Link]], *, total: int, file: str, what: str,
            caption: str = "", tones: Sequence[str] = ()) -> str:
    """A table of at most `ROWS` rows, and where the rest is; `what` names the rows, such as "samples"."""
    shown = min(len(rows), ROWS)
    said = f"All {total:,} {what}, every column:" if shown >= total else \
        f"The first {shown:,} of {total:,} {what}; all of them, every column:"
    cut = shown if shown <= FEW_ROWS else OPEN_ROWS
    more = details(f"The next {shown - cut:,}", table(columns, rows[cut:ROWS], tones=tones[cut:ROWS]), printed=False)
    return table(columns, rows[:cut], caption=caption, tones=tones) + more + paragraph(said, soft=True,
                                                                                       link=Link(file, file))


# ---------------------------------------------------------------- numbers and words


def number(value: Any, digits: int) -> str:
    """A number with so many decimals; empty where there is none."""
    return "" if pd.isna(value) else f"{round(float(value), digits) + 0.0:,.{digits}f}"


def spread(row: Mapping[str, Any], name: str, digits: int) -> str:
    """A figure with its interval where it has one, such as "12 (8 to 15)"."""
    low, high = (row.get(f"{name}_{end}", float("nan")) for end in ("low", "high"))
    around = "" if pd.isna(low) or pd.isna(high) else f" ({number(low, digits)} to {number(high, digits)})"
    return number(row[name], digits) + around


def first(words: str, mark: str = "; ") -> str:
    """The first of several words in one cell."""
    return words.split(mark)[0]


def capital(words: str) -> str:
    """Words as a sentence."""
    return f"{words[:1].upper()}{words[1:]}{'' if words.endswith('.') else '.'}" if words else ""


def quantity_words(columns: Iterable[Any]) -> dict[str, str]:
    """What a column of the results is, in a few words, by its name; from records with `name` and `meaning`."""
    out = {}
    for c in columns:
        words = first(first(c.meaning), " (").removeprefix("the same ")
        ph = re.search(r"_to_ph_(\d+)_(\d+)", c.name)
        out[c.name] = words.replace("that pH", f"pH {ph[1]}.{ph[2]}" if ph else "that pH")
    return out | {"ph": "pH"}


def rule_words(limit: Limit, quantities: Mapping[str, str]) -> str:
    """The rule of a limit without names of columns, such as "alkalinity below 0.05 meq/L"."""
    unit = "" if limit.unit == "-" else f" {limit.unit}"
    floor = "" if np.isneginf(limit.lower) else f", from {limit.lower:g} on"
    return f"{quantities.get(limit.quantity, limit.quantity)} {SIGNS[limit.operator]} {limit.limit:g}{unit}{floor}"


# ---------------------------------------------------------------- blocks of the summary


@dataclass(frozen=True, slots=True)
class Block:
    """A titled list of the text summary, its lines put together again."""

    title: str
    lines: tuple[str, ...]


def blocks_of(text: str) -> list[Block]:
    """The blocks of a summary: paragraphs whose first lines are the title and whose items begin with a dash."""
    out = []
    for part in text.strip("\n").split("\n\n"):
        head, *items = re.split(r"\n  (?=- |next: )", part)
        out.append(Block(_joined(head), tuple(_joined(re.sub(r"^(- |next: )", "", x)) for x in items)))
    return out


def _joined(lines: str) -> str:
    return " ".join(lines.split())


def titled(block: Block) -> str:
    """A block as a section, its title without what stands in parentheses behind it; that becomes a line of its own."""
    title, more = _title(block)
    return section(title, paragraph(more, soft=True), bullets(block.lines)) if block.lines else ""


def folded(block: Block) -> str:
    """A block folded."""
    title, more = _title(block)
    return details(title, paragraph(more, soft=True), bullets(block.lines)) if block.lines else ""


def _title(block: Block) -> tuple[str, str]:
    title, mark, more = block.title.partition(" (")
    return (title, more.removesuffix(")")) if mark and more.endswith(")") else (block.title, "")


# ---------------------------------------------------------------- what stands at the end of a page


def refused_part(block: Block | None, kept: Kept) -> str:
    """What was refused, by reason, and each with its remedy."""
    if block is None or not kept.total:
        return ""
    has_file = "file" in (kept.rows[0] if kept.rows else {})
    columns = [Column(title="Name"), *([Column(title="File")] if has_file else []), Column(title="Row", number=True),
               Column(title="Column"), Column(title="Found"), Column(title="Rule", sentence=True),
               Column(title="What to do", sentence=True)]
    rows = [[str(r["sample_id"]), *([str(r["file"])] if has_file else []), str(r["row"]), str(r["column"]),
             "" if pd.isna(r["value"]) else str(r["value"]), str(r["rule"]), str(r["remedy"])] for r in kept.rows]
    title, _ = _title(block)
    return section(title, bullets(block.lines),
                   limited(columns, rows, total=kept.total, file="rejected.csv", what="refusals"), name="refused")


def constants_part(constants: Iterable[Mapping[str, str]]) -> str:
    """Constants with source and range, folded."""
    columns = [Column(title="Used for"), Column(title="Source"), Column(title="Holds for")]
    rows = [[c["used_for"], c["source"], c["range"]] for c in constants]
    return details("Constants and where they hold", table(columns, rows))


def provenance(record: Mapping[str, Any]) -> str:
    """Version, files with their hashes, and options, from the record of the run; folded."""
    names = record.get("files", {"readings": record.get("input", "")})
    of_files = [(f"File: {what}", f"{names.get(what, '')} (sha256 {digest})".strip())
                for what, digest in record["sha256"].items()]
    options = [(_option(name), _value(value)) for name, value in record["options"].items()]
    return details("Where this comes from", facts([("Program", f"aquabuf {record['version']}"), *of_files]),
                   facts(options))


def _option(name: str) -> str:
    """The name of an option in words."""
    for end, unit in OPTION_UNITS.items():
        if name.endswith(end):
            return _option(name.removesuffix(end)) + unit
    words = " ".join(SPELLED.get(word, word) for word in name.split("_"))
    return f"{words[:1].upper() if words[:1] != 'p' or words[:2] != 'pH' else 'p'}{words[1:]}"


def _value(value: Any) -> str:
    if value is None or value == "" or value == () or value == []:
        return "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    return ", ".join(f"{x}" for x in value) if isinstance(value, list | tuple) else str(value)


def file_part(command: str, written: Iterable[str]) -> str:
    """The files beside the page, each with what it holds; of many figures the first."""
    names = sorted(written)
    rows: list[list[str | Link]] = []
    for row in read_table("page_files"):
        found = fnmatch.filter(names, row["file"]) if row["command"] == command else []
        if found and row["file"] != "report.html":
            more = f" ({len(found) - 1:,} more like it)" if len(found) > 1 else ""
            rows.append([Link(found[0], found[0]), row["words"] + more])
    return section("Files of this run", table([Column(title="File"), Column(title="What it holds")], rows,
                                              sortable=False), name="files")

"""Read a long table into compact arrays: 24 bytes per result, and each distinct cell once."""

from __future__ import annotations

from array import array
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from aquabuf.readings.cells import no_value_words
from aquabuf.readings.long.characteristics import Form
from aquabuf.readings.long.mapping import LongMap
from aquabuf.readings.long.plan import LongPlan, getter
from aquabuf.readings.long.resolve import Kind, Meaning, column_of, meaning_of
from aquabuf.readings.long.samples import PLACE, Samples
from aquabuf.readings.long.words import plain
from aquabuf.readings.result import REJECTED_COLUMNS
from aquabuf.readings.schema import find_quantity
from aquabuf.readings.table import _misfits, pieces
from aquabuf.readings.textfile import Record

__all__ = ["Line", "Scan", "scan"]

PIECE_ROWS = 50_000
NO_TEXT = -1  # a blank cell, or a word for "no value"
_LEFT_OUT = -1  # kind that the map does not name
_NAMES_SHOWN = 12
AGREE_RULE = "results of one sample must agree in {role}"

Line = tuple[int, int, str, str, str, str]  # line in the file, sample, column, value, rule, remedy


@dataclass(slots=True, kw_only=True)
class Scan:
    """A long table as read. The arrays have one entry per result that the map names and that holds something."""

    plan: LongPlan
    long_map: LongMap
    samples: Samples
    meanings: list[Meaning] = field(default_factory=list)  # by kind
    kinds: list[Kind] = field(default_factory=list)
    texts: list[str] = field(default_factory=list)  # distinct cells of value and limit
    line: np.ndarray = field(default_factory=lambda: np.empty(0, dtype=np.int64))
    sample: np.ndarray = field(default_factory=lambda: np.empty(0, dtype=np.int32))
    kind: np.ndarray = field(default_factory=lambda: np.empty(0, dtype=np.int32))
    value: np.ndarray = field(default_factory=lambda: np.empty(0, dtype=np.int32))  # text, or NO_TEXT
    limit: np.ndarray = field(default_factory=lambda: np.empty(0, dtype=np.int32))
    refused: list[Line] = field(default_factory=list)
    misfits: pd.DataFrame = field(default_factory=lambda: pd.DataFrame(columns=list(REJECTED_COLUMNS)))
    unnamed: Counter[str] = field(default_factory=Counter)  # results by what the map does not name
    sifted: Counter[tuple[str, str]] = field(default_factory=Counter)  # rows by header and word
    blank: int = 0  # results without a value

    def notes(self) -> list[str]:
        """How many rows play no part, and why."""
        found = []
        for header in dict.fromkeys(header for header, _ in self.sifted):
            words = Counter({word: count for (name, word), count in self.sifted.items() if name == header})
            found.append(f"{words.total():,} rows left out by {header}: {listed(words)}")
        if self.unnamed:
            found.append(
                f"{self.unnamed.total():,} results of {len(self.unnamed)} characteristics left out, "
                f"which the map does not name: {listed(self.unnamed)}"
            )
        return found + ([f"{self.blank:,} results have no value"] if self.blank else [])


def listed(words: Counter[str]) -> str:
    """Words with their counts, the most frequent first; a long list is cut."""
    shown = [f"{word} ({count:,})" for word, count in words.most_common(_NAMES_SHOWN)]
    return ", ".join(shown) + (f" and {len(words) - _NAMES_SHOWN} more" if len(words) > _NAMES_SHOWN else "")


class _Scanner:
    """Takes records one by one; every lookup that many rows share is made once."""

    def __init__(self, plan: LongPlan, long_map: LongMap):
        shared = long_map.shared
        self.plan = plan
        self.absent = no_value_words(shared.missing)
        samples = Samples(absent=self.absent, date_order=shared.date_order)
        self.scan = Scan(plan=plan, long_map=long_map, samples=samples)
        self.lines, self.at_sample = array("q"), array("i")
        self.kinds, self.values, self.limits = array("i"), array("i"), array("i")
        self.kind_codes: dict[tuple[str, ...], int] = {}
        self.text_codes: dict[str, int] = {}
        self.conditions: list[str] = []  # words for a condition that stand in place of a value
        self.needs_value: list[bool] = []  # by kind: nothing is left where the value is blank
        self.left_out: Counter[tuple[str, ...]] = Counter()  # results of kinds that the map does not name
        self.sieve_memo: dict[tuple[str, ...], tuple[str, str] | None] = {}

    def take(self, records: Sequence[Record]) -> None:
        """Records that fit the header."""
        plan, scan = self.plan, self.scan
        samples = scan.samples
        sieve_cells = getter([field for field, *_ in plan.sieve])
        id_cells = getter(plan.table.plan.id_fields)
        kind_cells = getter([plan.at[role] for role in Kind._fields])
        place_cells = getter([plan.at[role] for role in PLACE])
        value_at, limit_at, extra = plan.at["value"], plan.at["limit"], plan.extra
        for line, record in records:
            record += extra
            cells = sieve_cells(record)
            if cells not in self.sieve_memo:
                self.sieve_memo[cells] = plan.why_left_out(cells)
            if why := self.sieve_memo[cells]:
                scan.sifted[why] += 1
                continue
            cells = kind_cells(record)
            kind = self.kind_codes.get(cells)
            if kind is None:
                kind = self._new_kind(cells)
            if kind == _LEFT_OUT:
                self.left_out[cells] += 1
                continue
            sample = samples.find(id_cells(record), line)
            differing = samples.agree(sample, place_cells(record))
            if differing:
                self._refuse(line, sample, *differing)
                continue
            value, limit = self._text(record[value_at]), self._text(record[limit_at])
            if value < NO_TEXT:  # a word such as "ND" where the value should be
                kind, value = self._with_condition(cells, self.conditions[NO_TEXT - 1 - value]), NO_TEXT
            if scan.meanings[kind].condition == "no_value" or (value == NO_TEXT and self.needs_value[kind]):
                scan.blank += 1
                continue
            self._add(line, sample, kind, value, limit)

    def _add(self, line: int, sample: int, kind: int, value: int, limit: int) -> None:
        self.lines.append(line)
        self.at_sample.append(sample)
        self.kinds.append(kind)
        self.values.append(value)
        self.limits.append(limit)

    def _label(self, cells: tuple[str, ...]) -> str:
        """What the map does not name: a characteristic, or one of its forms."""
        name, fraction, speciation = (cell.strip() for cell in cells[:3])
        if plain(name) not in self.scan.long_map.forms:
            return name or "(blank)"
        return f"{name} [{', '.join(filter(None, (fraction, speciation))) or 'no fraction'}]"

    def _new_kind(self, cells: tuple[str, ...]) -> int:
        kind = Kind(*cells)
        meaning = meaning_of(kind, self.scan.long_map)
        code = _LEFT_OUT if meaning is None else self._add_kind(kind, meaning)
        self.kind_codes[cells] = code
        return code

    def _add_kind(self, kind: Kind, meaning: Meaning) -> int:
        self.scan.kinds.append(kind)
        self.scan.meanings.append(meaning)
        self.needs_value.append(not meaning.condition)
        return len(self.scan.kinds) - 1

    def _with_condition(self, cells: tuple[str, ...], word: str) -> int:
        """The kind with the condition that stands in the cell of the value, unless it has one of its own."""
        kind = Kind(*cells)
        changed = kind if kind.condition.strip() else kind._replace(condition=word)
        code = self.kind_codes.get(changed)
        return self._new_kind(changed) if code is None else code

    def _text(self, cell: str) -> int:
        """Number of a distinct cell; NO_TEXT for a blank, below it for a word that is a condition."""
        code = self.text_codes.get(cell)
        return self._new_text(cell) if code is None else code

    def _new_text(self, cell: str) -> int:
        word = cell.strip()
        if word.lower() in self.absent:
            code = NO_TEXT
        elif plain(word) in self.scan.long_map.conditions:
            self.conditions.append(word)
            code = NO_TEXT - len(self.conditions)
        else:
            self.scan.texts.append(word)
            code = len(self.scan.texts) - 1
        self.text_codes[cell] = code
        return code

    def _refuse(self, line: int, sample: int, role: str, found: str, own: str) -> None:
        first = self.scan.samples.lines[sample]
        remedy = f"the sample begins in row {first} with {own}; correct it, or give each sample a name of its own"
        header = self.scan.long_map.headers[role]
        self.scan.refused.append((line, sample, header, found, AGREE_RULE.format(role=role), remedy))

    def add_depths(self) -> None:
        """The depth of each sample, as a result of its first row."""
        scan, depth_kinds = self.scan, {}
        words = scan.samples.words
        for sample, (text, unit) in enumerate(zip(words["depth"], words["depth_unit"], strict=True)):
            if not text:
                continue
            if unit not in depth_kinds:
                depth_kinds[unit] = self._depth_kind(unit)
            self._add(scan.samples.lines[sample], sample, depth_kinds[unit], max(self._text(text), NO_TEXT), NO_TEXT)

    def _depth_kind(self, unit: str) -> int:
        long_map = self.scan.long_map
        header, form = long_map.headers["depth"], Form(quantity=find_quantity("depth_m"), rank=-1)
        column = column_of(header, form, unit, "", long_map)
        meaning = Meaning(form=form, rank=-1, condition="", value=column, limit=column)
        return self._add_kind(Kind(header, "", "", unit, "", ""), meaning)

    def done(self, misfits: list[pd.DataFrame]) -> Scan:
        """The arrays, once every record is taken."""
        scan = self.scan
        scan.line = np.frombuffer(self.lines, dtype=np.int64)
        arrays = (self.at_sample, self.kinds, self.values, self.limits)
        scan.sample, scan.kind, scan.value, scan.limit = (np.frombuffer(a, dtype=np.int32) for a in arrays)
        scan.limit = np.maximum(scan.limit, NO_TEXT)
        for cells, count in self.left_out.items():
            scan.unnamed[self._label(cells)] += count
        scan.misfits = pd.concat(misfits, ignore_index=True)
        return scan


def scan(plan: LongPlan, long_map: LongMap) -> Scan:
    """Read all records of a long table.

    Raises
    ------
    FileError, InputError
        The file cannot be read to its end, or has no rows.
    """
    scanner = _Scanner(plan, long_map)
    misfits = []
    for piece in pieces(plan.table.records(), PIECE_ROWS):
        good, bad = _misfits(piece, plan.table)
        scanner.take(good)
        misfits.append(bad)
    scanner.add_depths()
    return scanner.done(misfits)

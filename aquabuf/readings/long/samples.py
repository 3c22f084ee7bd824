"""The samples of a long table while it is read: who they are, where their first result stands, place and time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

from aquabuf.readings.cells import parse_date

__all__ = ["PLACE", "Samples"]

PLACE = ("site", "date", "time", "depth", "depth_unit")  # what all results of a sample have in common
_MUST_AGREE = ("site", "date", "depth")  # the clock time may differ from result to result; the first is kept


@dataclass(slots=True)
class Samples:
    """Samples in order of first appearance. A row without a name is a sample of its own, which is refused later."""

    absent: frozenset[str]  # words for "no value", lower case
    date_order: str
    parts: list[tuple[str, ...]] = field(default_factory=list)  # of the name; all blank where one is missing
    lines: list[int] = field(default_factory=list)  # of the first result
    words: dict[str, list[str]] = field(default_factory=lambda: {role: [] for role in PLACE})
    _by_cells: dict[tuple[str, ...], int] = field(default_factory=dict)
    _by_parts: dict[tuple[str, ...], int] = field(default_factory=dict)
    _cells: list[tuple[str, ...]] = field(default_factory=list)  # of the place, as in the first row

    def __len__(self) -> int:
        return len(self.parts)

    def plain(self, cell: str) -> str:
        """A cell without outer blanks, "" where a word for "no value" stands."""
        word = cell.strip()
        return "" if word.lower() in self.absent else word

    def find(self, cells: tuple[str, ...], line: int) -> int:
        """Position of the sample that these cells name; a new one begins in this line."""
        at = self._by_cells.get(cells)
        if at is not None:
            return at
        parts = tuple(map(self.plain, cells))
        if not all(parts):
            return self._new(("",) * len(parts), line)
        at = self._by_parts.get(parts)
        if at is None:
            at = self._by_parts[parts] = self._new(parts, line)
        self._by_cells[cells] = at
        return at

    def _new(self, parts: tuple[str, ...], line: int) -> int:
        self.parts.append(parts)
        self.lines.append(line)
        self._cells.append(())
        for words in self.words.values():
            words.append("")
        return len(self.parts) - 1

    def agree(self, at: int, cells: tuple[str, ...]) -> tuple[str, str, str] | None:
        """Take in place and time of a row; role, word of the row and word of the sample where these differ."""
        if cells == self._cells[at]:
            return None
        found = dict(zip(PLACE, map(self.plain, cells), strict=True))
        for role in _MUST_AGREE:
            own, new = self.words[role][at], found[role]
            units = (self.words["depth_unit"][at], found["depth_unit"]) if role == "depth" else ("", "")
            if own and new and not (units[0] == units[1] and self._same(role, own, new)):
                return role, f"{new} {units[1]}".strip(), f"{own} {units[0]}".strip()
        self._fill(at, found)
        self._cells[at] = self._cells[at] or cells
        return None

    def _same(self, role: str, own: str, new: str) -> bool:
        if own == new:
            return True
        if role == "date":
            day = parse_date(own, self.date_order)
            return day is not None and day == parse_date(new, self.date_order)
        return role == "depth" and _number(own) is not None and _number(own) == _number(new)

    def _fill(self, at: int, found: dict[str, str]) -> None:
        """What the sample did not have yet; a depth comes with its own unit."""
        for role in ("site", "date", "time"):
            self.words[role][at] = self.words[role][at] or found[role]
        if not self.words["depth"][at]:  # a depth comes with its own unit
            self.words["depth"][at], self.words["depth_unit"][at] = found["depth"], found["depth_unit"]

    def names_of(self, positions: Sequence[int]) -> list[str]:
        """The joined names."""
        return ["_".join(self.parts[at]) if all(self.parts[at]) else "" for at in positions]


def _number(text: str) -> float | None:
    try:
        return float(text)
    except ValueError:
        return None

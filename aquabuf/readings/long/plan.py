"""From the header line of a long table to a plan: where each record has what, and which rows to leave out."""

from __future__ import annotations

import difflib
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from operator import itemgetter
from pathlib import Path

from aquabuf.errors import HeaderError
from aquabuf.readings.long.mapping import ROLES, LongMap
from aquabuf.readings.long.words import hit_by
from aquabuf.readings.plan import Plan
from aquabuf.readings.table import Table
from aquabuf.readings.textfile import inspect_table, open_records

__all__ = ["LongPlan", "getter", "open_long_table"]

Getter = Callable[[list[str]], tuple[str, ...]]


@dataclass(frozen=True, slots=True, kw_only=True)
class LongPlan:
    """How to read each record of one long table."""

    table: Table
    at: dict[str, int]  # field of each role, once `extra` stands behind the record
    extra: tuple[str, ...]  # cells put behind each record: a blank, then the constants of the map
    sieve: tuple[tuple[int, str, tuple[str, ...], bool], ...]  # field, header, words, whether these are kept
    lacking: tuple[str, ...]  # headers of the map that the file does without

    def notes(self) -> list[str]:
        """What was recognized in the file, and which columns play no part."""
        notes = list(self.table.form.notes)
        if self.table.plan.ignored:
            notes.append(f"{len(self.table.plan.ignored)} columns left out, which the map does not name")
        if self.lacking:
            notes.append(f"the file has no column {', '.join(self.lacking)}, which the map can do without")
        return notes

    def why_left_out(self, cells: Sequence[str]) -> tuple[str, str] | None:
        """Header and word for which a row is left out, from its cells under the headers of `sieve`; None to keep it."""
        for cell, (_, header, words, keep) in zip(cells, self.sieve, strict=True):
            if cell.strip() and hit_by(cell, words) != keep:
                return header, cell.strip()
        return None


def getter(fields: Sequence[int]) -> Getter:
    """Function that takes the cells of these fields from a record, always as a tuple."""
    if len(fields) > 1:
        return itemgetter(*fields)
    return (lambda record: (record[fields[0]],)) if fields else (lambda record: ())


def _named(long_map: LongMap) -> dict[str, str]:
    """Every header of the map and where the map names it."""
    found = dict.fromkeys(long_map.sample_id, "[long] sample_id")
    found |= {header: f"[long] {role}" for role, header in long_map.headers.items()}
    sections = {"[leave_out]": long_map.leave_out, "[keep_only]": long_map.keep_only}
    return found | {header: name for name, section in sections.items() for header in section}


def _check(names: Sequence[str], named: dict[str, str], may_lack: Iterable[str]) -> None:
    """HeaderError for headers that are missing, or that stand twice where one is used; all missing in one message."""
    missing = []
    for header, where in named.items():
        if header not in names and header not in may_lack:
            near = difflib.get_close_matches(header, names, n=2)
            hint = f" (the nearest of the file: {', '.join(near)})" if near else ""
            missing.append(f"{header!r} under {where}{hint}")
        elif names.count(header) > 1:
            raise HeaderError(f"two columns have the same header {header!r}; rename or remove one.")
    if missing:
        raise HeaderError(
            f"the map names headers that the file does not have: {'; '.join(missing)}. "
            "Correct the map, or list what a file can do without under [long] may_lack."
        )


def open_long_table(path: str | Path, long_map: LongMap) -> LongPlan:
    """Recognize the format of a long table and find the headers of the map in it.

    Raises
    ------
    FileError, HeaderError, InputError
        The file or its header cannot be read, or a header of the map is missing.
    """
    path, shared = Path(path), long_map.shared
    form = inspect_table(path, encoding=shared.encoding, delimiter=shared.delimiter, decimal=shared.decimal)
    names = [name.strip() for name in next((record for _, record in open_records(path, form)), [])]
    named = _named(long_map)
    _check(names, named, long_map.may_lack)
    constants = tuple(long_map.constants.items())
    at = {role: names.index(header) for role, header in long_map.headers.items() if header in names}
    at |= {role: len(names) + 1 + n for n, (role, _) in enumerate(constants)}
    plan = Plan(
        width=len(names),
        columns=(),
        id_fields=tuple(names.index(header) for header in long_map.sample_id),
        unnamed=tuple(n for n, name in enumerate(names) if not name),
        ignored=tuple(name for name in names if name and name not in named),
    )
    sections = ((long_map.leave_out, False), (long_map.keep_only, True))
    return LongPlan(
        table=Table(path=path, table_map=shared, form=form, plan=plan),
        at={role: at.get(role, len(names)) for role in ROLES},
        extra=("", *(words for _, words in constants)),
        sieve=tuple((names.index(h), h, words, keep) for section, keep in sections for h, words in section.items()
                    if h in names),
        lacking=tuple(header for header in named if header not in names),
    )  # fmt: skip

"""From the header line to a plan: which field is which column, and what every row gets besides."""

from __future__ import annotations

import difflib
from collections.abc import Sequence
from dataclasses import dataclass

from aquabuf.errors import HeaderError
from aquabuf.readings.headers import Column, parse_header
from aquabuf.readings.mapping import TableMap

__all__ = ["Plan", "make_plan"]


@dataclass(frozen=True, slots=True)
class Plan:
    """How to read each record of one file."""

    width: int  # fields per record
    columns: tuple[tuple[int, Column], ...]  # field position, meaning
    id_fields: tuple[int, ...]  # fields that make the sample_id
    unnamed: tuple[int, ...]  # fields without header, which must stay empty
    ignored: tuple[str, ...]  # headers left out on purpose

    def headers(self) -> dict[str, tuple[str, str]]:
        """File header -> (canonical column, unit in the file)."""
        return {column.header: (column.name, column.unit_label) for _, column in self.columns}


def _check_listed(names: Sequence[str], wanted: Sequence[str], where: str) -> None:
    """HeaderError when the map names a header that the file does not have."""
    for header in wanted:
        if header not in names:
            near = difflib.get_close_matches(header, names, n=3)
            hint = f" The nearest headers of the file are {', '.join(near)}." if near else ""
            raise HeaderError(f"the map names the header {header!r} under {where}, but the file has none such.{hint}")


def _meanings(names: Sequence[str], table_map: TableMap) -> tuple[list[tuple[int, Column]], list[str]]:
    """Meaning of each header, and the headers that are ignored; all header errors in one message."""
    found: list[tuple[int, Column]] = []
    ignored: list[str] = []
    errors: list[str] = []
    for at, header in enumerate(names):
        if not header:
            continue
        try:
            column = _meaning(header, table_map)
        except HeaderError as error:
            errors.append(str(error))
            continue
        if column is None:
            ignored += [header] if header not in table_map.compose else []
        else:
            found.append((at, column))
    if errors:
        errors.append("What headers mean can be said in a map file: `aquabuf template map` starts one, and the map "
                      "option for this table takes it (see --help).")
        raise HeaderError("\n".join(errors))
    return found, ignored


def _meaning(header: str, table_map: TableMap) -> Column | None:
    if header in table_map.columns:
        return table_map.columns[header]
    if table_map.unlisted == "ignore" or header in table_map.compose:
        return None
    if table_map.unlisted == "error":
        raise HeaderError(
            f'column {header!r} is not listed in the map file, and unlisted = "error". List it or set it to "ignore".'
        )
    return parse_header(header, table_map.index)


def _check_unique(found: Sequence[tuple[int, Column]], table_map: TableMap) -> None:
    """HeaderError when two columns, or a column and a constant, give the same quantity."""
    seen: dict[str, str] = {}
    entries = [column for _, column in found] + [column for column, _ in table_map.values]
    for column in entries:
        if column.name in seen:
            raise HeaderError(
                f"columns {seen[column.name]!r} and {column.header!r} both give {column.name}; one is needed. "
                'Remove one, or choose in a map file: [columns] "the other" = "ignore".'
            )
        seen[column.name] = column.header


def _id_fields(names: Sequence[str], found: Sequence[tuple[int, Column]], table_map: TableMap) -> tuple[int, ...]:
    own = tuple(at for at, column in found if column.name == "sample_id")
    if table_map.compose and own:
        raise HeaderError(
            f"column {names[own[0]]!r} and [compose] both give sample_id; one is needed. Remove one of them."
        )
    fields = own or tuple(names.index(header) for header in table_map.compose)
    if not fields:
        raise HeaderError(
            "the table has no column sample_id, and each row needs a name. "
            'Rename a column to sample_id, or say in a map file [compose] sample_id = ["site", "date"].'
        )
    return fields


def make_plan(header: Sequence[str], table_map: TableMap) -> Plan:
    """The plan for a file with this header line.

    Raises
    ------
    HeaderError
        A header that is unknown, ambiguous, repeated, or listed in the map and not in the file; no sample_id; no names.
    """
    names = [name.strip() for name in header]
    if not any(names):
        raise HeaderError("the header line has no names. The first line that is no comment must name the columns.")
    repeated = next((name for at, name in enumerate(names) if name and name in names[:at]), None)
    if repeated is not None:
        raise HeaderError(f"two columns have the same header {repeated!r}; rename or remove one.")
    _check_listed(names, list(table_map.columns), "[columns]")
    _check_listed(names, table_map.compose, "[compose]")
    found, ignored = _meanings(names, table_map)
    _check_unique(found, table_map)
    return Plan(
        width=len(names),
        columns=tuple(found),
        id_fields=_id_fields(names, found, table_map),
        unnamed=tuple(at for at, name in enumerate(names) if not name),
        ignored=tuple(ignored),
    )

"""Starter files: a table with headers, units and invented example rows, or a map file."""

from __future__ import annotations

from functools import cache
from importlib.resources import files

from aquabuf.errors import InputError
from aquabuf.readings.headers import Column, parse_header
from aquabuf.readings.schema import name_index
from aquabuf.tables import read_table

__all__ = ["template", "template_kinds"]

MAP_KIND = "map"


@cache
def _kinds() -> dict[str, list[dict[str, str]]]:
    found: dict[str, list[dict[str, str]]] = {}
    for row in read_table("templates"):
        found.setdefault(row["kind"], []).append(row)
    return found


def template_kinds() -> list[str]:
    """Kinds of starter file, in table order; "map" is the starter map file."""
    return [*_kinds(), MAP_KIND]


def template(kind: str) -> str:
    """Text of a starter file of this kind; a table can be read back as it is. InputError for an unknown kind."""
    if kind == MAP_KIND:
        return (files("aquabuf") / "data" / "starter_map.toml").read_text(encoding="utf-8")
    if kind not in _kinds():
        raise InputError(f"no starter file is named {kind!r}. Use one of: {', '.join(template_kinds())}.")
    rows = _kinds()[kind]
    index = name_index()
    remarks = [_remark(parse_header(row["header"], index)) for row in rows]
    head = [
        f"# Starter table: {kind}. The two rows are invented; replace them with your readings.",
        "# Lines that begin with # are remarks. Leave a cell blank where there is no value; <0.02 is below detection.",
        "# Columns can be removed, reordered, or given in another unit by changing the end of the header.",
    ]
    table = [",".join(row[field] for row in rows) for field in ("header", "example_1", "example_2")]
    return "\n".join((*head, *remarks, *table)) + "\n"


def _remark(column: Column) -> str:
    unit = f" [{column.unit_label}]" if column.unit and column.unit_label != "-" else ""
    meaning = f"standard uncertainty of {column.quantity.base}" if column.is_u else column.quantity.meaning
    return f"#   {column.header}{unit}: {meaning}"

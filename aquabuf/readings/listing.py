"""A schema as text: one line per column, or all there is to know about some of them."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

from aquabuf.errors import HeaderError, InputError
from aquabuf.readings.headers import nearest_names, parse_header
from aquabuf.readings.schema import (
    Quantity,
    Schema,
    example_header,
    name_index,
    quantities,
    titration_quantities,
    unit_labels,
)
from aquabuf.units import key

__all__ = ["columns_text"]

WIDTH = 100
_LABEL = 15
_MEANING_LEAD = " " * 4
_CLOSING = (
    "Readings may be in any usual unit, said at the end of the header: calcium_mg_l, 'Calcium (mg/L)', "
    "alkalinity_ueq_l. The column name is what the program calls them, in its own unit. A standard uncertainty has "
    "_u before the unit: calcium_u_mg_l, ph_u. Name a column to see its units, other headers and limits."
)


def columns_text(names: Sequence[str] = (), width: int = WIDTH, schema: Schema | None = None) -> str:
    """Text of a schema.

    Parameters
    ----------
    names
        Canonical names or other headers ("calcium", "EC25"); empty for the short list of all columns.
    width
        Line width. [characters]
    schema
        The columns to list; those of readings if none is given.

    Raises
    ------
    InputError
        A name that is not known; the message shows the nearest ones.
    """
    schema = quantities() if schema is None else schema
    if not names:
        return _overview(schema, width)
    return "\n".join(_detail(quantity, width) for name in names for quantity in _find(name, schema))


def _find(name: str, schema: Schema) -> list[Quantity]:
    """What a name means: one quantity, or several where only the unit in a header tells them apart."""
    index = name_index(schema=schema)
    if name in schema:
        return [schema[name]]
    if key(name) in index:
        return [quantity for quantity, _ in index[key(name)]]
    try:
        return [parse_header(name, index).quantity]  # a header with its unit
    except HeaderError:
        pass
    if schema is quantities() and key(name) in name_index(schema=titration_quantities()):
        raise InputError(f"no column of readings is named {name!r}, but one of titrations is. Add --titration.")
    near = nearest_names(name, index)
    hint = f"The nearest are {', '.join(near)}." if near else "Ask for the list without a name."
    raise InputError(f"no column is named {name!r}. {hint}")


def _overview(schema: Schema, width: int) -> str:
    """Every column with a header people write, the unit and range it has here, its meaning and what needs it."""
    records = list(schema.values())
    rows = [(q.name, example_header(q), q.house_unit if q.is_number else "text",
             f"{q.low:g} to {q.high:g}" if q.is_number else "") for q in records]
    head = ("column", "header, e.g.", "unit", "range")
    widths = [max(len(row[i]) for row in [head, *rows]) for i in range(4)]
    lines = ["  ".join(cell.ljust(w) for cell, w in zip(head, widths, strict=True)).rstrip()]
    lines += [_MEANING_LEAD + "meaning (what needs it)"]
    for q, row in zip(records, rows, strict=True):
        lines.append("  ".join(cell.ljust(w) for cell, w in zip(row, widths, strict=True)).rstrip())
        choices = f": {_choices(q)}" if q.choices else ""
        lines.append(textwrap.fill(f"{q.meaning}{choices} ({q.needed_by})", width, initial_indent=_MEANING_LEAD,
                                   subsequent_indent=_MEANING_LEAD))
    return "\n".join((*lines, "", textwrap.fill(_CLOSING, width))) + "\n"


def _choices(q: Quantity) -> str:
    return ", ".join(dict.fromkeys(word for _, word in q.choices))


def _item(label: str, text: str, width: int) -> str:
    lead = " " * _LABEL
    return textwrap.fill(
        text, width, initial_indent=f"  {label:{_LABEL - 2}}", subsequent_indent=lead, break_long_words=False
    )


def _units(q: Quantity) -> str:
    if not q.is_number:
        return ""
    must = "" if q.has_default_unit else "; must be said in the header"
    more = "; also with other prefixes and per kg" if len(unit_labels(q, rare=True)) > len(unit_labels(q)) else ""
    return ", ".join(unit_labels(q)) + more + must


def _headers(q: Quantity) -> str:
    """Examples of headers, and the other names."""
    examples = list(dict.fromkeys((example_header(q), q.name)))
    others = [name.replace("_", " ") for name, _ in q.aliases]
    return ", ".join(examples) + (f"; other names: {', '.join(others)}" if others else "")


def _range(q: Quantity) -> str:
    unit = "" if q.house_unit == "-" else f" {q.house_unit}"
    return f"{q.low:g} to {q.high:g}{unit}, else the row is rejected; usual {q.soft_low:g} to {q.soft_high:g}"


def _uncertainty(q: Quantity) -> str:
    unit = "" if q.house_unit == "-" else f" {q.house_unit}"
    if not (q.default_u or q.default_u_rel):
        return f"column {q.u_name}"
    terms = [f"{q.default_u:g}{unit}"] if q.default_u else []
    terms += [f"{100 * q.default_u_rel:g} %"] if q.default_u_rel else []
    text = f"column {q.u_name}, else {' + '.join(terms)} ({q.u_source})"
    if q.default_u_per_kg is not None:
        text += f"; {q.default_u_per_kg:g}{unit} where the file is per kilogram ({q.u_per_kg_source})"
    return text


def _detail(q: Quantity, width: int) -> str:
    """Everything about one column."""
    items = [("meaning", q.meaning), ("headers", _headers(q)), ("units", _units(q))]
    items.append(("choices", _choices(q)))
    if q.is_number:
        items += [("range", _range(q)), ("uncertainty", _uncertainty(q))]
        items.append(("below limit", "'<0.02' counts as half, with its spread" if q.below_limit else "not accepted"))
    items.append(("needed by", q.needed_by))
    return "\n".join((q.name, *(_item(label, text, width) for label, text in items if text))) + "\n"

"""Readings of one water as keys and values of a file: keys are the headers of a table of readings.

ph = 7.68                                   a number, in the unit that the key says
"sulfate (µeq/L)" = 45
"sulfate_u (µeq/L)" = 3                     its standard uncertainty
alkalinity = "57.4 mg/L as CaCO3"           where the caller allows it: number and unit in quotes
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Collection, Iterable, Mapping
from contextlib import suppress
from dataclasses import dataclass, replace
from typing import TypeGuard

from aquabuf.errors import HeaderError, InputError
from aquabuf.readings.headers import Column, nearest_names, parse_header
from aquabuf.readings.schema import Index, Quantity, Schema, name_index

__all__ = ["Entries", "is_number", "number_and_unit", "read_entries"]

_NUMBER = re.compile(r"\s*([+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?)(?![\d.])\s*(.*?)\s*", re.DOTALL)
TOO_LARGE = 1e300  # a whole number may be too large to be a float


@dataclass(frozen=True, slots=True)
class Entries:
    """Values and standard uncertainties in house units, both by the column name of the value."""

    values: Mapping[str, float]
    u: Mapping[str, float]

    def check_u(self, where: str, schema: Schema, others: Collection[str] = ()) -> None:
        """InputError where an uncertainty has no value, here or among `others`."""
        for name in self.u:
            if name not in self.values and name not in others:
                raise InputError(f"{where}: {schema[name].u_name} must go with a value; found none of "
                                 f"{schema[name].base}. Add the value.")


def is_number(value: object) -> TypeGuard[float]:
    """Whether a value of a file is a finite number (true and false are none)."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return False
    return abs(value) < TOO_LARGE


def number_and_unit(text: str) -> tuple[float, str]:
    """A text split into its number and the unit behind it, "" where none is. Raises InputError without a number."""
    match = _NUMBER.fullmatch(text)
    value = float(match[1]) if match else math.nan
    if match is None or not is_number(value):
        raise InputError(f"must begin with a number; found {text!r}")
    if match[2].startswith(","):
        raise InputError(f"must have a point as decimal mark and no mark for thousands; found {text!r}")
    return value, match[2]


def read_entries(given: Mapping[str, object], schema: Schema, where: Callable[[str], str], *,
                 beside: Iterable[str] = (), texts: bool = False, spreads: bool = False) -> Entries:
    """Values of header-like keys in house units.

    Parameters
    ----------
    given
        Keys and values of a table of the file.
    schema
        Quantities that may be given.
    where
        Place of a key, for messages.
    beside
        Other keys that the same table may have, for messages.
    texts
        Whether "57.4 mg/L as CaCO3" is read too, behind a key without unit.
    spreads
        Whether all values are standard uncertainties, whatever their key says.

    Raises
    ------
    InputError
        A key that is not known or needs a unit, a value that is no number, out of range or given twice.
    """
    index = name_index(schema=schema)
    values: dict[str, float] = {}
    u: dict[str, float] = {}
    for key, value in given.items():
        place = where(key)
        header, number = _number(place, key, value, texts)
        column = _column(place, key, header, index, schema, beside)
        if spreads:
            column = replace(column, is_u=True, offset=0.0)
        house = number * column.scale + column.offset
        _check_range(place, column, house, number)
        into = u if column.is_u else values
        if column.quantity.name in into:
            raise InputError(f"{place}: {column.name} must be given once; found a second key for it. Remove one.")
        into[column.quantity.name] = house
    return Entries(values, u)


def _number(place: str, key: str, value: object, texts: bool) -> tuple[str, float]:
    """Header and number: a text gives its unit to the header."""
    if is_number(value):
        return key, float(value)
    remedy = "Write it without quotes"
    if texts:
        remedy += ", or with its unit in quotes behind a key without one"
        with suppress(InputError):
            number, unit = number_and_unit(value if isinstance(value, str) else "")
            if unit and not set("()[]") & set(key + unit):
                return f"{key} ({unit})", number
    raise InputError(f"{place}: must be a number; found {_cut(value)}. {remedy}; leave the key out if there is no "
                     "value.")


def _cut(value: object) -> str:
    text = repr(value)
    return text if len(text) <= 60 else f"{text[:57]}..."


def _column(place: str, key: str, header: str, index: Index, schema: Schema, beside: Iterable[str]) -> Column:
    try:
        column = parse_header(header, index)
    except HeaderError as error:
        if " is not known. " not in str(error):
            raise InputError(f"{place}: {error}") from None
        near = nearest_names(key, index)
        hint = f" The nearest known names are {', '.join(near)}." if near else ""
        others = f"{', '.join(beside)} or " if beside else ""
        bases = ", ".join(q.base for q in schema.values())
        raise InputError(f"{place}: keys must be {others}one of {bases}, with unit; found {key!r}.{hint} Correct "
                         f"it or remove it.") from None
    if column.unit is not None and column.unit.per_kg:
        raise InputError(f"{place}: must be per liter; found {column.unit_label}. Convert it.")
    return column


def _check_range(place: str, column: Column, house: float, given: float) -> None:
    quantity: Quantity = column.quantity
    low, high = (0.0, math.inf) if column.is_u else (quantity.low, quantity.high)
    if not low <= house <= high:
        ends = f"at least {column.in_file_unit(low):g}" if math.isinf(high) else \
            f"from {column.in_file_unit(low):g} to {column.in_file_unit(high):g}"
        unit = "" if column.unit_label == "-" else f" {column.unit_label}"
        raise InputError(f"{place}: must be {ends}{unit}; found {given:g}. Check value and unit.")

"""Map files (TOML): what the headers of someone else's table mean, so that it is read as it is.

unlisted = "ignore"                       headers not named below: "read" (default), "ignore" or "error"
[columns]
"Ca_ueq_L" = "calcium (µeq/L)"            any header this program knows, or
"NH4" = { is = "ammonium", unit = "µeq/L", multiply = 1.0, negative = "zero" }
[compose]
sample_id = ["site_id", "date"]           joined with "_"
[values]
temperature_c = 22                        the same for every row
[fill]
temperature_c = 15                        only where a row has none; such rows are noted
[read]
delimiter, decimal, encoding, missing, date_order
[acids.NAME]
pk, charge, dh_j_mol, dcp_j_mol_k, molar_mass_g
"""

from __future__ import annotations

import math
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from aquabuf.errors import FileError, HeaderError, InputError
from aquabuf.readings.cells import DATE_ORDERS
from aquabuf.readings.headers import Column, parse_header
from aquabuf.readings.result import UserAcid
from aquabuf.readings.schema import Index, Quantity, Schema, acid_quantity, name_index
from aquabuf.units import key

__all__ = ["TableMap", "read_map"]

_SECTIONS = ("unlisted", "columns", "compose", "values", "fill", "read", "acids")
_READ_KEYS = ("delimiter", "decimal", "encoding", "missing", "date_order")
_COLUMN_KEYS = ("is", "unit", "multiply", "negative")
_ACID_KEYS = ("pk", "charge", "dh_j_mol", "dcp_j_mol_k", "molar_mass_g")
_UNLISTED = ("read", "ignore", "error")
_NEGATIVE = ("keep", "zero", "missing")


@dataclass(frozen=True, slots=True, kw_only=True)
class TableMap:
    """A map file, checked. The default is the empty map: every header must explain itself."""

    unlisted: str = "read"
    columns: Mapping[str, Column | None] = field(default_factory=dict)  # by header in the file; None = ignore
    compose: tuple[str, ...] = ()  # headers that make the sample_id
    values: tuple[tuple[Column, str | float], ...] = ()  # the same for every row
    fill: tuple[tuple[Column, float], ...] = ()  # numbers for rows that have none
    delimiter: str = ""
    decimal: str = ""
    encoding: str = ""
    missing: tuple[str | float, ...] = ()
    date_order: str = ""
    acids: Mapping[str, UserAcid] = field(default_factory=dict)  # by column name
    index: Index = field(default_factory=name_index)


class _Place:
    """Where in the map file we are, for messages."""

    def __init__(self, name: str):
        self.name = name

    def error(self, where: str, message: str) -> InputError:
        return InputError(f"map file {self.name}, {where}: {message}")

    def known(self, where: str, found: Mapping[str, Any], allowed: tuple[str, ...]) -> None:
        """InputError for a key that means nothing here."""
        for name in found:
            if name not in allowed:
                raise self.error(where, f"the key {name!r} is not known. Use one of: {', '.join(allowed)}.")

    def choice(self, where: str, value: Any, allowed: tuple[str, ...]) -> str:
        if value not in allowed:
            raise self.error(where, f"must be one of {', '.join(allowed)}; found {value!r}.")
        return value

    def table(self, where: str, value: Any) -> dict[str, Any]:
        if not isinstance(value, dict):
            raise self.error(where, f"must be a table of keys and values; found {value!r}.")
        return value


def _is_number(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)


def _header(place: _Place, where: str, text: Any, index: Index) -> Column:
    if not isinstance(text, str):
        raise place.error(where, f'must be a quantity in quotes, e.g. "calcium (mg/L)"; found {text!r}.')
    try:
        return parse_header(text, index)
    except HeaderError as error:
        raise HeaderError(f"map file {place.name}, {where}: {error}") from None


def _column(place: _Place, header: str, value: Any, index: Index) -> Column | None:
    """Meaning of one header from its entry under [columns]."""
    where = f"[columns] {header!r}"
    if value == "ignore":
        return None
    entry = value if isinstance(value, dict) else {"is": value}
    place.known(where, entry, _COLUMN_KEYS)
    if "is" not in entry:
        raise place.error(where, "the key 'is' is missing. Name the quantity, e.g. is = \"calcium\".")
    text = f"{entry['is']} ({entry['unit']})" if "unit" in entry else entry["is"]
    column = _header(place, where, text, index)
    factor = entry.get("multiply", 1.0)
    if not _is_number(factor) or factor <= 0:
        raise place.error(where, f"'multiply' must be a number above 0; found {factor!r}.")
    negative = place.choice(f"{where} negative", entry.get("negative", "keep"), _NEGATIVE)
    return replace(column, header=header, scale=column.scale * factor, negative=negative)


def _numbers(place: _Place, where: str, value: Any, count: int | None = None) -> tuple[float, ...]:
    if not isinstance(value, list) or not value or not all(map(_is_number, value)):
        raise place.error(where, f"must be a list of numbers, e.g. [4.76]; found {value!r}.")
    if count is not None and len(value) != count:
        raise place.error(where, f"needs one number per pk, that is {count}; found {len(value)}.")
    return tuple(map(float, value))


def _acid(place: _Place, name: str, value: Any) -> UserAcid:
    """One user-defined acid, checked."""
    where = f"[acids.{name}]"
    entry = place.table(where, value)
    place.known(where, entry, _ACID_KEYS)
    if "pk" not in entry:
        raise place.error(where, "the key 'pk' is missing. Give the list of pK at 25 °C, e.g. pk = [4.76].")
    pk = _numbers(place, f"{where} pk", entry["pk"])
    if list(pk) != sorted(pk) or not all(-10 <= value <= 20 for value in pk):
        raise place.error(f"{where} pk", f"must rise from first to last, within -10 to 20; found {list(pk)}.")
    charge = entry.get("charge", 0)
    if not isinstance(charge, int) or isinstance(charge, bool) or abs(charge) > 8:
        raise place.error(f"{where} charge", f"must be a whole number from -8 to 8; found {charge!r}.")
    mass = entry.get("molar_mass_g")
    if mass is not None and not (_is_number(mass) and mass > 0):
        raise place.error(f"{where} molar_mass_g", f"must be a number above 0; found {mass!r}.")
    steps = {k: _numbers(place, f"{where} {k}", entry[k], len(pk)) for k in ("dh_j_mol", "dcp_j_mol_k") if k in entry}
    return UserAcid(name=key(name), pk=pk, charge=charge, molar_mass_g=mass, **steps)


def _acids(place: _Place, entries: Mapping[str, Any]) -> tuple[dict[str, UserAcid], list[Quantity]]:
    acids = [_acid(place, name, value) for name, value in entries.items()]
    records = [acid_quantity(acid.name, acid.molar_mass_g) for acid in acids]
    return {record.name: acid for record, acid in zip(records, acids, strict=True)}, records


def _values(place: _Place, entries: Mapping[str, Any], index: Index) -> tuple[tuple[Column, str | float], ...]:
    """Constants of [values], as columns with one content."""
    found = []
    for name, value in entries.items():
        column = _header(place, f"[values] {name!r}", name, index)
        if column.name == "sample_id":
            raise place.error("[values]", "sample_id cannot be the same for every row. Use [compose].")
        if column.quantity.is_number and not _is_number(value):
            raise place.error(f"[values] {name!r}", f"must be a number; found {value!r}.")
        found.append((column, value if column.quantity.is_number else str(value)))
    return tuple(found)


def _fill(place: _Place, entries: Mapping[str, Any], index: Index) -> tuple[tuple[Column, float], ...]:
    """Numbers of [fill], in the unit that their name states."""
    found = []
    for name, value in entries.items():
        column = _header(place, f"[fill] {name!r}", name, index)
        if not column.quantity.is_number or not _is_number(value):
            raise place.error(f"[fill] {name!r}", f"must be a number for a column of numbers; found {value!r}.")
        if column.unit is not None and column.unit.per_kg:
            raise place.error(f"[fill] {name!r}", "cannot be per kilogram of water. Use a unit per liter.")
        found.append((column, float(value)))
    return tuple(found)


def _read_options(place: _Place, entry: Mapping[str, Any]) -> dict[str, Any]:
    """Options of [read], checked."""
    place.known("[read]", entry, _READ_KEYS)
    missing = entry.get("missing", [])
    if not isinstance(missing, list) or not all(isinstance(m, str) or _is_number(m) for m in missing):
        raise place.error("[read] missing", f"must be a list of words or numbers, e.g. [-9999]; found {missing!r}.")
    allowed = {"delimiter": (",", ";", "\t", "|"), "decimal": (".", ","), "date_order": DATE_ORDERS,
               "encoding": ("utf-8", "latin-1", "cp1252")}  # fmt: skip
    options = {k: place.choice(f"[read] {k}", entry[k], allowed[k]) for k in allowed if k in entry}
    if options.get("decimal", ".") == "," and options.get("delimiter") == ",":
        raise place.error("[read]", "delimiter and decimal cannot both be a comma. Correct one of them.")
    return {**options, "missing": tuple(missing)}


def _load(path: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except FileNotFoundError:
        raise FileError(f"{path}: no such map file. Check the name and the folder.") from None
    except OSError as error:
        raise FileError(f"{path}: the map file cannot be read ({error.strerror}).") from None
    except UnicodeDecodeError:
        raise FileError(f"{path.name}: the map file must be UTF-8 text. Save it as UTF-8.") from None
    except tomllib.TOMLDecodeError as error:
        raise FileError(f"{path.name}: the map file is not valid TOML: {error}. Correct that line.") from None


def read_map(path: str | Path, schema: Schema | None = None) -> TableMap:
    """Read and check a map file.

    Parameters
    ----------
    path
        The file.
    schema
        Quantities that the table may hold; those of readings if none is given.

    Raises
    ------
    FileError
        The file cannot be read or is not TOML.
    InputError, HeaderError
        A key or value that means nothing; the message names the key and the remedy.
    """
    path = Path(path)
    content = _load(path)
    place = _Place(path.name)
    place.known("top level", content, _SECTIONS)
    parts = {name: place.table(f"[{name}]", content.get(name, {})) for name in _SECTIONS[1:]}
    acids, records = _acids(place, parts["acids"])
    try:
        index = name_index(records, schema)
    except InputError as error:
        raise place.error("[acids]", str(error)) from None
    place.known("[compose]", parts["compose"], ("sample_id",))
    compose = parts["compose"].get("sample_id", [])
    if not isinstance(compose, list) or not all(isinstance(name, str) for name in compose):
        raise place.error("[compose] sample_id", f"must be a list of headers; found {compose!r}.")
    return TableMap(
        unlisted=place.choice("unlisted", content.get("unlisted", "read"), _UNLISTED),
        columns={header: _column(place, header, value, index) for header, value in parts["columns"].items()},
        compose=tuple(compose),
        values=_values(place, parts["values"], index),
        fill=_fill(place, parts["fill"], index),
        acids=acids,
        index=index,
        **_read_options(place, parts["read"]),
    )

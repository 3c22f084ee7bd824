"""Map files of long tables (TOML): what the headers are, which rows count, which characteristic is which quantity.

base = "wqx"                              take over a shipped map; what stands below replaces its keys and comes first
source, mark                              where the words come from, and how surely they are known (shown in the notes)
[long]                                    this section makes the file a map of long tables
sample_id = ["Station", "Day"]            one header, or several joined with "_"
characteristic, value                     headers; needed
unit, fraction, speciation, condition, limit, limit_unit, site, date, time, depth, depth_unit     headers, if there
unit = { always = "mg/L" }                instead of a header, where no column says it (units, fraction, speciation)
may_lack = ["Fraction"]                   headers that a file need not have
[characteristics]
"Calcium" = "calcium"                     any quantity this program knows, without its unit, or "ignore", or
"Nitrate" = { is = "nitrate", as = "N", unit = "mg/L", fraction = ["Dissolved", "Total"], speciation = [...],
              negative = "zero", with = { water_kind = "lake" } }           or a list of such entries
[fractions]
ions = ["Dissolved", "Total", ""]         a list by a name, for fraction = "ions"
[leave_out], [keep_only]
"Activity" = ["Quality Control*"]         by header: rows with (without) these words; a blank cell leaves nothing out
[detection]
below, estimated, above, no_value         words for: half the limit; the value, else half the limit; refused; nothing
[units]
"mg/l CaCO3**" = "mg/L as CaCO3"          spellings of the file
[values], [fill], [read], [acids.NAME]    as in the map file of a wide table
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from aquabuf.errors import InputError
from aquabuf.readings.long.characteristics import Forms, read_characteristics, word_list
from aquabuf.readings.long.shipped import shipped_map
from aquabuf.readings.long.words import plain
from aquabuf.readings.mapping import TableMap, _acids, _fill, _load, _Place, _read_options, _values
from aquabuf.readings.schema import name_index, quantities
from aquabuf.units import parse_unit

__all__ = ["CONDITIONS", "ROLES", "LongMap", "is_long", "read_long_map"]

_SECTIONS = ("long", "characteristics", "fractions", "leave_out", "keep_only", "detection", "units", "values", "fill",
             "read", "acids")  # fmt: skip
ROLES = ("characteristic", "value", "unit", "fraction", "speciation", "condition", "limit", "limit_unit", "site",
         "date", "time", "depth", "depth_unit")  # fmt: skip
_NEEDED = ("sample_id", "characteristic", "value")
_CAN_BE_SAID = ("unit", "fraction", "speciation", "limit_unit", "depth_unit")  # instead of a column
_TEXTS = ("site", "date", "time")  # roles that are columns of the schema under the same name
CONDITIONS = ("below", "estimated", "above", "no_value")


@dataclass(frozen=True, slots=True, kw_only=True)
class LongMap:
    """A map of long tables, checked."""

    name: str
    sample_id: tuple[str, ...]  # headers
    headers: Mapping[str, str]  # by role
    constants: Mapping[str, str] = field(default_factory=dict)  # by role, where no column says it
    may_lack: tuple[str, ...] = ()
    forms: Forms
    leave_out: Mapping[str, tuple[str, ...]] = field(default_factory=dict)  # plain words by header
    keep_only: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    conditions: Mapping[str, str] = field(default_factory=dict)  # one of CONDITIONS by plain word
    units: Mapping[str, str] = field(default_factory=dict)  # unit by plain spelling
    shared: TableMap  # values, fill, acids and how the file is written
    source: str = ""
    mark: str = ""


def is_long(content: Mapping[str, Any]) -> bool:
    """Whether the content of a map file is about long tables."""
    return "long" in content or "base" in content


def _with_base(place: _Place, content: Mapping[str, Any]) -> dict[str, Any]:
    """The content with what it takes over from a shipped map; its own keys win and come first."""
    if "base" not in content:
        return dict(content)
    own = {name: value for name, value in content.items() if name != "base"}
    try:
        base = _load(shipped_map(content["base"]))
    except InputError as error:
        raise place.error("base", str(error)) from None
    base = _with_base(place, base)
    for name in _SECTIONS:
        mine, theirs = place.table(f"[{name}]", own.get(name, {})), base.get(name, {})
        spelled = {plain(word) for word in mine} if name == "characteristics" else set(mine)
        taken = {k: v for k, v in theirs.items() if (plain(k) if name == "characteristics" else k) not in spelled}
        own[name] = {**mine, **taken}
    return {**{k: v for k, v in base.items() if k not in own}, **own}


def _role(place: _Place, role: str, value: Any) -> tuple[str, str]:
    """Header of a role, or the words that stand in its place; both "" where an own map takes the role away."""
    where = f"[long] {role}"
    if isinstance(value, str):
        return value, ""
    can = role in _CAN_BE_SAID
    if can and isinstance(value, dict) and list(value) == ["always"] and isinstance(value["always"], str):
        return "", value["always"]
    also = ' or { always = "..." }' if can else ""
    raise place.error(where, f"must be a header in quotes{also}; found {value!r}.")


def _headers(place: _Place, where: str, value: Any) -> tuple[str, ...]:
    found = [value] if isinstance(value, str) else value
    if not isinstance(found, list) or not all(isinstance(name, str) and name for name in found):
        raise place.error(where, f"must be a header or a list of headers; found {value!r}.")
    return tuple(found)


def _roles(place: _Place, section: Mapping[str, Any]) -> dict[str, Any]:
    """The section [long], checked, as fields of `LongMap`."""
    place.known("[long]", section, ("sample_id", *ROLES, "may_lack"))
    said = {role: _role(place, role, section[role]) for role in ROLES if role in section}
    headers = {role: header for role, (header, _) in said.items() if header}
    sample_id = _headers(place, "[long] sample_id", section.get("sample_id", []))
    for role in _NEEDED:
        if not (sample_id if role == "sample_id" else headers.get(role)):
            raise place.error("[long]", f"the key {role!r} is missing. Name the header of the table that holds it.")
    may_lack = _headers(place, "[long] may_lack", section.get("may_lack", []))
    needed = {*sample_id, headers["characteristic"], headers["value"]}
    for header in may_lack:
        if header in needed:
            raise place.error("[long] may_lack", f"{header!r} is needed in every file. Remove it.")
    return {"sample_id": sample_id, "headers": headers, "may_lack": may_lack,
            "constants": {role: words for role, (_, words) in said.items() if words}}  # fmt: skip


def _sieve(place: _Place, name: str, section: Mapping[str, Any]) -> dict[str, tuple[str, ...]]:
    return {header: word_list(place, f"[{name}] {header!r}", value) for header, value in section.items()}


def _conditions(place: _Place, section: Mapping[str, Any]) -> dict[str, str]:
    """Meaning of each detection condition by its plain word."""
    place.known("[detection]", section, CONDITIONS)
    found: dict[str, str] = {}
    for meaning, value in section.items():
        for word in word_list(place, f"[detection] {meaning}", value):
            if found.setdefault(word, meaning) != meaning:
                raise place.error("[detection]", f"{word!r} is both {found[word]} and {meaning}. Remove one.")
    return found


def _units(place: _Place, section: Mapping[str, Any], dimensions: Iterable[str]) -> dict[str, str]:
    """Spellings of units by their plain form; each must lead to a unit of some quantity."""
    for spelling, unit in section.items():
        if not isinstance(unit, str) or not any(parse_unit(unit, dimension) for dimension in dimensions):
            raise place.error(f"[units] {spelling!r}", f"must be a known unit, e.g. 'mg/L'; found {unit!r}.")
    return {plain(spelling): unit for spelling, unit in section.items()}


def _text(place: _Place, where: str, value: Any) -> str:
    if not isinstance(value, str):
        raise place.error(where, f"must be text in quotes; found {value!r}.")
    return value


def read_long_map(path: str | Path) -> LongMap:
    """Read and check a map of long tables.

    Raises
    ------
    FileError
        The file cannot be read or is not TOML.
    InputError, HeaderError
        A key or value that means nothing; the message names the key and the remedy.
    """
    path = Path(path)
    place = _Place(path.name)
    content = _load(path)
    place.known("top level", content, ("base", "source", "mark", *_SECTIONS))
    content = _with_base(place, content)
    parts = {name: place.table(f"[{name}]", content.get(name, {})) for name in _SECTIONS}
    acids, records = _acids(place, parts["acids"])
    try:
        index = name_index(records)
    except InputError as error:
        raise place.error("[acids]", str(error)) from None
    roles = _roles(place, parts["long"])
    shared = TableMap(
        unlisted="ignore",
        values=_values(place, parts["values"], index),
        fill=_fill(place, parts["fill"], index),
        acids=acids,
        index=index,
        **_read_options(place, parts["read"]),
    )
    for column, _ in shared.values:
        if column.name in _TEXTS and column.name in roles["headers"]:
            raise place.error("[values]", f"{column.name} is given by a column too. Remove one of them.")
    dimensions = {q.dimension for q in quantities().values() if q.is_number}
    lists = {name: word_list(place, f"[fractions] {name}", value) for name, value in parts["fractions"].items()}
    if not parts["characteristics"]:
        raise place.error("[characteristics]", 'names no characteristic. Say what is what, e.g. "Calcium" = "calcium".')
    return LongMap(
        name=path.name,
        **roles,
        forms=read_characteristics(place, parts["characteristics"], index, lists),
        leave_out=_sieve(place, "leave_out", parts["leave_out"]),
        keep_only=_sieve(place, "keep_only", parts["keep_only"]),
        conditions=_conditions(place, parts["detection"]),
        units=_units(place, parts["units"], dimensions),
        shared=shared,
        source=_text(place, "source", content.get("source", "")),
        mark=_text(place, "mark", content.get("mark", "")),
    )

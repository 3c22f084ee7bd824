"""The user's own limits file (TOML), checked key by key.

only_mine = true            drop all shipped limits
remove = ["name"]           drop some
[limits."name"]             replace the shipped limit of that name, or add one
quantity, operator, limit, words, source                        needed
unit, lower, kinds, regimes, group, next_step                   if wanted
"""

from __future__ import annotations

import math
import tomllib
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from aquabuf.assess.limits import ANY, OPERATORS, UNSTATED, Limit, shipped_limits
from aquabuf.assess.sample.headline import REGIMES
from aquabuf.errors import FileError, InputError
from aquabuf.readings.schema import quantities as reading_columns

__all__ = ["limits_of", "read_limits"]

_NEEDED = ("quantity", "operator", "limit", "words", "source")
_TEXT = ("quantity", "operator", "unit", "group", "words", "next_step", "source")
_NUMBERS = ("limit", "lower")
_LISTS = ("kinds", "regimes")


def read_limits(path: Path | None, quantities: Mapping[str, str], table: str = "limits") -> tuple[Limit, ...]:
    """Limits to use: those of the shipped table, changed by the user's file if there is one.

    `quantities` are the figures that can be limited, with their unit. New limits lead their group; one that replaces a
    shipped limit takes its place. Raises FileError or InputError naming file, key, value and remedy.
    """
    shipped = shipped_limits(table)
    return shipped if path is None else limits_of(path.name, _toml(path), quantities, shipped)


def limits_of(file: str, content: Mapping[str, Any], quantities: Mapping[str, str], shipped: Sequence[Limit], *,
              kinds: Sequence[str] = (), where: str = "results.csv") -> tuple[Limit, ...]:
    """The `shipped` limits changed by tables of the user's own, as `read_limits` does; `file` names them in messages.

    kinds : what a limit may be for beside "any"; by default the kinds of water of the readings. where : the table that
    has the quantities.
    """
    limits = {limit.name: limit for limit in shipped}
    kinds = kinds or (UNSTATED, *dict.fromkeys(word for _, word in reading_columns()["water_kind"].choices))
    unknown = sorted(set(content) - {"limits", "remove", "only_mine"})
    if unknown:
        raise InputError(f"{file}: keys must be limits, remove or only_mine; found {unknown[0]!r}. "
                         f"Put each limit under [limits.\"its name\"].")
    only_mine, remove, entries = (content.get(k, v) for k, v in (("only_mine", False), ("remove", []), ("limits", {})))
    if not isinstance(only_mine, bool):
        raise InputError(f"{file}: only_mine must be true or false; found {only_mine!r}. Write it without quotes.")
    if not isinstance(entries, dict):
        raise InputError(f"{file}: limits must be tables; found {entries!r}. Write [limits.\"its name\"].")
    limits = {} if only_mine else limits
    for name in _word_list(file, "remove", remove, ()):
        if name not in limits:
            raise InputError(f"{file}: remove names a limit that is not there: {name!r}; there are "
                             f"{', '.join(limits) or 'none'}. Correct the name.")
        del limits[name]
    own = {name: _own_limit(f"{file}: limit {name!r}", name, entry, quantities, (ANY, *kinds), where)
           for name, entry in entries.items()}
    kept = {name: own.pop(name, limit) for name, limit in limits.items()}
    return (*own.values(), *kept.values())


def _toml(path: Path) -> dict:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else "not UTF-8 text"
        raise FileError(f"the limits file {path.name} cannot be read: {reason}. Check the path.") from None
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{path.name} is not valid TOML: {error}. Correct that line.") from None


def _own_limit(where: str, name: str, entry: object, quantities: Mapping[str, str], kinds: Sequence[str], table: str,
               ) -> Limit:
    """One limit of the file; `where` names file and limit in messages."""
    if not isinstance(entry, dict):
        raise InputError(f"{where} must be a table; found {entry!r}. Write [limits.\"{name}\"] and its keys below.")
    _check_keys(where, entry)
    quantity = entry["quantity"]
    if quantity not in quantities:
        raise InputError(f"{where}: quantity must be a figure of {table}; found {quantity!r}. "
                         f"Choose from {', '.join(quantities)}.")
    if entry["operator"] not in OPERATORS:
        raise InputError(f"{where}: operator must be one of {', '.join(OPERATORS)}; found {entry['operator']!r}. "
                         f"Correct it.")
    unit = entry.get("unit", quantities[quantity])
    if unit != quantities[quantity]:
        raise InputError(f"{where}: {quantity} is in {quantities[quantity]}; found unit {unit!r}. Convert the limit.")
    return Limit(
        name=name, group=entry.get("group", name), quantity=quantity, operator=entry["operator"],
        limit=float(entry["limit"]), lower=float(entry.get("lower", -math.inf)), unit=unit,
        kinds=_word_list(where, "kinds", entry.get("kinds", [ANY]), kinds),
        regimes=_word_list(where, "regimes", entry.get("regimes", [ANY]), (ANY, *REGIMES)),
        words=entry["words"], next_step=entry.get("next_step", ""), source=entry["source"])


def _check_keys(where: str, entry: Mapping[str, object]) -> None:
    """Keys known, the needed ones there, and each of its type."""
    known = sorted({*_NEEDED, *_TEXT, *_NUMBERS, *_LISTS})
    for key in entry:
        if key not in known:
            raise InputError(f"{where} has an unknown key {key!r}; keys are {', '.join(known)}. Correct it.")
    for key in _NEEDED:
        if key not in entry:
            raise InputError(f"{where} must have {key}; it is missing. Add it.")
    for key in _TEXT:
        if key in entry and not isinstance(entry[key], str):
            raise InputError(f"{where}: {key} must be text; found {entry[key]!r}. Put it in quotes.")
    for key in _NUMBERS:
        value = entry.get(key, 0)
        if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
            raise InputError(f"{where}: {key} must be a number; found {value!r}. Write it without quotes.")


def _word_list(where: str, key: str, value: object, allowed: Sequence[str]) -> tuple[str, ...]:
    """A list of words, each one of `allowed` if that is not empty."""
    if not isinstance(value, list) or not all(isinstance(v, str) for v in value):
        raise InputError(f"{where}: {key} must be a list of words; found {value!r}. Write {key} = [\"any\"].")
    for word in value:
        if allowed and word not in allowed:
            raise InputError(f"{where}: {key} must be from {', '.join(allowed)}; found {word!r}. Correct it.")
    return tuple(value)

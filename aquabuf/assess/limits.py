"""Limits that make a warning: the shipped table, the user's own file, and their verdict on figures."""

from __future__ import annotations

import operator
import tomllib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.errors import FileError, InputError
from aquabuf.tables import read_table

__all__ = ["OPERATORS", "Limit", "read_limits", "shipped_limits", "verdicts"]

OPERATORS: Mapping[str, Callable] = {"<": operator.lt, "<=": operator.le, ">": operator.gt, ">=": operator.ge}
ANY = "any"
EDGE = 1e-9  # relative distance below which a value is taken to be the limit itself
UNSTATED = "unstated"  # kind of water not given in the readings
_FILE_KEYS = {"quantity", "operator", "limit", "lower", "unit", "kinds", "regimes", "group", "words", "next_step",
              "source"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Limit:
    """One rule: a sample is warned where `quantity operator limit` holds (and, if given, quantity >= lower).

    group : of the limits that share one, only the first met counts, so bands are listed worst first.
    kinds, regimes : waters it applies to; "any" for all, "unstated" where the kind is not given.
    """

    name: str
    group: str
    quantity: str
    operator: str
    limit: float
    lower: float
    unit: str
    kinds: tuple[str, ...]
    regimes: tuple[str, ...]
    words: str
    next_step: str
    source: str

    def rule(self) -> str:
        """The rule in one line."""
        floor = "" if np.isneginf(self.lower) else f" (and at least {self.lower:g})"
        unit = "" if self.unit == "-" else f" {self.unit}"
        return f"{self.quantity} {self.operator} {self.limit:g}{unit}{floor}"

    def met(self, value: NDArray) -> NDArray[np.bool_]:
        """Where the rule holds; never where the value is missing."""
        with np.errstate(invalid="ignore"):
            on_edge = np.abs(value - self.limit) <= EDGE * max(abs(self.limit), EDGE)  # rounding must not break it
            return OPERATORS[self.operator](np.where(on_edge, self.limit, value), self.limit) & (value >= self.lower)

    def applies(self, kind: str, regime: str) -> bool:
        """Whether this limit is for waters of a kind ("" where it is not given) and regime."""
        return bool({ANY, kind or UNSTATED} & set(self.kinds)) and bool({ANY, regime} & set(self.regimes))


def shipped_limits() -> tuple[Limit, ...]:
    """The limits of the shipped table, in its order."""
    return tuple(
        Limit(name=r["name"], group=r["group"], quantity=r["quantity"], operator=r["operator"], limit=float(r["limit"]),
              lower=float(r["lower"] or "-inf"), unit=r["unit"], kinds=tuple(r["kinds"].split(";")),
              regimes=tuple(r["regimes"].split(";")), words=r["words"], next_step=r["next_step"],
              source=f"{r['source']}{' (recalled)' if r['mark'] == 'recalled' else ''}")
        for r in read_table("limits"))


def read_limits(path: Path | None, quantities: Mapping[str, str]) -> tuple[Limit, ...]:
    """Limits to use: the shipped ones, changed by the user's TOML file if there is one.

    File: `[limits."name"]` tables replace a shipped limit of that name or add one; `remove = ["name"]` drops some;
    `only_mine = true` drops all shipped ones. `quantities` are the figures that can be limited, with their unit.
    Raises FileError or InputError naming file, key, value and remedy.
    """
    limits = {limit.name: limit for limit in shipped_limits()}
    if path is None:
        return tuple(limits.values())
    content = _toml(path)
    unknown = set(content) - {"limits", "remove", "only_mine"}
    if unknown:
        raise InputError(f"{path.name}: keys must be limits, remove or only_mine; found {sorted(unknown)[0]!r}. "
                         f"Put each limit under [limits.\"its name\"].")
    if content.get("only_mine", False):
        limits = {}
    for name in content.get("remove", []):
        if name not in limits:
            raise InputError(f"{path.name}: remove names a limit that is not there: {name!r}; there are "
                             f"{', '.join(limits) or 'none'}. Correct the name.")
        del limits[name]
    own = {name: _own_limit(path.name, name, entry, quantities) for name, entry in content.get("limits", {}).items()}
    kept = {name: own.pop(name, limit) for name, limit in limits.items()}
    return (*own.values(), *kept.values())  # new ones first, so that they lead their group


def _toml(path: Path) -> dict:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else "not UTF-8 text"
        raise FileError(f"the limits file {path.name} cannot be read: {reason}. Check the path.") from None
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{path.name} is not valid TOML: {error}. Correct that line.") from None


def _own_limit(file: str, name: str, entry: object, quantities: Mapping[str, str]) -> Limit:
    where = f"{file}: limit {name!r}"
    if not isinstance(entry, dict):
        raise InputError(f"{where} must be a table; found {entry!r}. Write [limits.\"{name}\"] and its keys below.")
    for key in set(entry) - _FILE_KEYS:
        raise InputError(f"{where} has an unknown key {key!r}; keys are {', '.join(sorted(_FILE_KEYS))}. Correct it.")
    for key in ("quantity", "operator", "limit", "words", "source"):
        if key not in entry:
            raise InputError(f"{where} must have {key}; it is missing. Add it.")
    quantity = entry["quantity"]
    if quantity not in quantities:
        raise InputError(f"{where}: quantity must be a figure of results.csv; found {quantity!r}. "
                         f"Choose from {', '.join(quantities)}.")
    if entry["operator"] not in OPERATORS:
        raise InputError(f"{where}: operator must be one of {', '.join(OPERATORS)}; found {entry['operator']!r}.")
    unit = entry.get("unit", quantities[quantity])
    if unit != quantities[quantity]:
        raise InputError(f"{where}: {quantity} is in {quantities[quantity]}; found unit {unit!r}. Convert the limit.")
    for key in ("limit", "lower"):
        if key in entry and (isinstance(entry[key], bool) or not isinstance(entry[key], int | float)):
            raise InputError(f"{where}: {key} must be a number; found {entry[key]!r}. Write it without quotes.")
    return Limit(
        name=name, group=entry.get("group", name), quantity=quantity, operator=entry["operator"],
        limit=float(entry["limit"]), lower=float(entry.get("lower", "-inf")), unit=unit,
        kinds=_words(where, "kinds", entry), regimes=_words(where, "regimes", entry), words=entry["words"],
        next_step=entry.get("next_step", ""), source=entry["source"])


def _words(where: str, key: str, entry: dict) -> tuple[str, ...]:
    value = entry.get(key, [ANY])
    if not isinstance(value, list) or not all(isinstance(v, str) for v in value):
        raise InputError(f"{where}: {key} must be a list of words; found {value!r}. Write {key} = [\"any\"].")
    return tuple(value)


def verdicts(limits: tuple[Limit, ...], figures: Mapping[str, NDArray], kind: NDArray, regime: NDArray,
             ) -> dict[str, NDArray[np.bool_]]:
    """Which samples each limit warns about; of a group only the first limit met counts."""
    taken: dict[str, NDArray[np.bool_]] = {}
    out = {}
    kind_code, kinds = pd.factorize(kind)
    regime_code, regimes = pd.factorize(regime)
    for limit in limits:
        if limit.quantity not in figures:
            continue
        before = taken.get(limit.group, np.zeros(kind.shape, dtype=bool))
        for_whom = np.array([[limit.applies(k, r) for r in regimes] for k in kinds], dtype=bool)
        applies = for_whom[kind_code, regime_code] if for_whom.size else before
        met = limit.met(figures[limit.quantity]) & applies & ~before
        taken[limit.group] = before | met
        out[limit.name] = met
    return out

"""The keys of plan and stream files and their generic checks; `plan_keys.csv` and `stream_keys.csv` are the one list.

A section is a table of the plan: "plan", "products", "products.pump", "steps.coagulate" ... Values come out in the
unit that the list states for their key; what only other tables can tell (products, targets) is looked up elsewhere.
"""

from __future__ import annotations

import datetime
import math
import tomllib
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from functools import cache
from types import MappingProxyType
from typing import Any

from aquabuf.assess.plant.faults import Guards
from aquabuf.assess.plant.feed import FORMS, KNOBS
from aquabuf.assess.plant.hold import buffer_uses
from aquabuf.assess.plant.plan_place import Place, nearest_hint, shown_value
from aquabuf.assess.plant.plan_units import in_key_unit, units_of
from aquabuf.assess.plant.steps.soften import PROCESSES
from aquabuf.assess.plant.storage import SUPPLIES, feed_rules
from aquabuf.errors import InputError
from aquabuf.readings.entries import is_number, number_and_unit
from aquabuf.tables import read_table
from aquabuf.units import key as plain

__all__ = ["Amount", "Checked", "PlanKey", "Window", "check_keys", "check_value", "plan_keys", "step_kinds",
           "window_of"]

Window = tuple[float, float]  # an open side is infinite

TABLES = ("plan_keys", "stream_keys")  # of plans and of wastes; their sections do not share names
STEPS = "steps"
OR = " or "  # between the dimensions of a key that may have either
_LEAST, _MOST = "at least ", "at most "


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanKey:
    """One row of the list.

    type : name of its check. dimension, unit : of a quantity; low and high are in that unit, the edge itself left out
    where low_open or high_open. bare : a number without unit is taken to be in it. default, example : as in a file.
    """

    section: str
    name: str
    type: str
    dimension: str
    unit: str
    bare: bool
    needed: bool
    low: float
    high: float
    low_open: bool
    high_open: bool
    choices: tuple[str, ...]
    default: str
    example: str
    words: str

    def allows(self, value: float) -> bool:
        """Whether a value in the unit of the key is within its range."""
        above = value > self.low if self.low_open else value >= self.low
        return above and (value < self.high if self.high_open else value <= self.high)

    def range_words(self) -> str:
        """The range in words."""
        unit = "" if self.unit in ("", "-") else f" {self.unit}"
        low = f"{'above' if self.low_open else 'at least'} {self.low:g}" if math.isfinite(self.low) else ""
        high = f"{'below' if self.high_open else 'at most'} {self.high:g}" if math.isfinite(self.high) else ""
        return " and ".join(filter(None, (low, high))) + unit


@dataclass(frozen=True, slots=True)
class Amount:
    """A number as it was written, with the unit that its meaning hangs on; `dimension` where a key may have several."""

    value: float
    unit: str
    dimension: str = ""


def _choices(cell: str) -> tuple[str, ...]:
    lists: Mapping[str, Callable[[], Iterable[str]]] = {
        "@buffer uses": buffer_uses, "@forms": lambda: FORMS, "@knobs": lambda: KNOBS, "@supplies": lambda: SUPPLIES,
        "@steps": step_kinds, "@softening": lambda: PROCESSES}
    return tuple(lists[cell]()) if cell.startswith("@") else tuple(filter(None, cell.split(";")))


def _default(cell: str) -> str:
    """A default as a file would have it; those of other tables are looked up there."""
    if not cell.startswith("@"):
        return cell
    guards = Guards()
    return {"@feed accuracy": f'"{feed_rules()["feed accuracy"].limit:g} %"',
            "@guard ph": f"[{guards.ph_low:g}, {guards.ph_high:g}]", "@guard over_dose": f"{guards.over_dose:g}",
            "@guard over_ph": f"{guards.over_ph:g}"}[cell]


def step_kinds() -> tuple[str, ...]:
    """Kinds of steps, in the order of the list."""
    sections = (row["section"].partition(".") for row in read_table("plan_keys"))
    return tuple(dict.fromkeys(kind for first, _, kind in sections if first == STEPS and kind))


def _edge(cell: str, missing: float) -> tuple[float, bool]:
    return float(cell.lstrip("<>") or missing), cell[:1] in ("<", ">")


@cache
def plan_keys(section: str) -> Mapping[str, PlanKey]:
    """Keys of a section by name, in the order of the list."""
    found = {}
    for row in (row for table in TABLES for row in read_table(table)):
        if row["section"] != section:
            continue
        low, low_open = _edge(row["low"], -math.inf)
        high, high_open = _edge(row["high"], math.inf)
        found[row["key"]] = PlanKey(
            section=section, name=row["key"], type=row["type"], dimension=row["dimension"], unit=row["unit"],
            bare=row["bare"] == "yes", needed=row["needed"] == "yes", low=low, high=high, low_open=low_open,
            high_open=high_open, choices=_choices(row["choices"]), default=_default(row["default"]),
            example=row["example"], words=row["words"])
    return MappingProxyType(found)


# ---------------------------------------------------------------- checks


@dataclass(frozen=True, slots=True)
class Checked:
    """Values of a table by key, and the keys whose default was taken."""

    values: Mapping[str, Any]
    defaults: tuple[PlanKey, ...]

    def get(self, name: str, default: Any = None) -> Any:
        """Value of a key, or `default` where the table does not give it and the list has none."""
        return self.values.get(name, default)

    def __getitem__(self, name: str) -> Any:
        return self.values[name]


def check_keys(place: Place, table: Mapping[str, object], section: str, *, free: Iterable[str] = ()) -> Checked:
    """Check a table against the list; keys in `free` are checked elsewhere. Raises InputError at the first mistake."""
    keys = plan_keys(section)
    skip = set(free)
    for name in table:
        if name not in keys and name not in skip:
            raise place.unknown(name, keys)
    values: dict[str, Any] = {}
    defaults = []
    for name, key in keys.items():
        if name in table:
            values[name] = check_value(place, key, table[name])
        elif key.needed and name not in skip:
            raise place.error(f"{name} is needed ({key.words}); it is missing. Add for example {name} = {key.example}.")
        elif key.default:
            values[name] = check_value(place, key, tomllib.loads(f"v = {key.default}")["v"])
            defaults.append(key)
    return Checked(values, tuple(defaults))


def check_value(place: Place, key: PlanKey, value: object) -> Any:
    """One value of a key, checked and in the unit of the list."""
    return _CHECKS[key.type](place, key, value)


def _wrong(place: Place, key: PlanKey, must: str, value: object) -> InputError:
    return place.error(f"{key.name} must be {must}; found {shown_value(value)}. Write for example {key.name} = "
                       f"{key.example}.", key.name)


def _text(place: Place, key: PlanKey, value: object) -> str:
    if not isinstance(value, str) or not value.strip():
        raise _wrong(place, key, "text in quotes", value)
    return value.strip()


def _flag(place: Place, key: PlanKey, value: object) -> bool:
    if not isinstance(value, bool):
        raise _wrong(place, key, "true or false, without quotes", value)
    return value


def _in_range(place: Place, key: PlanKey, number: float, value: object) -> float:
    if not key.allows(number):
        raise place.error(f"{key.name} must be {key.range_words()}; found {shown_value(value)}. Check value and unit.",
                          key.name)
    return number


def _number(place: Place, key: PlanKey, value: object) -> float:
    if not is_number(value):
        raise _wrong(place, key, "a number without quotes", value)
    return _in_range(place, key, float(value), value)


def _integer(place: Place, key: PlanKey, value: object) -> int:
    if not isinstance(value, int) or isinstance(value, bool):
        raise _wrong(place, key, "a whole number without quotes", value)
    return int(_number(place, key, value))


def _choice(place: Place, key: PlanKey, value: object) -> str:
    known = {plain(c): c for c in key.choices}
    word = _text(place, key, value)
    if plain(word) not in known:
        raise place.error(f"{key.name} must be one of {', '.join(key.choices)}; found {shown_value(value)}."
                          f"{nearest_hint(word, key.choices)} Correct it.", key.name)
    return known[plain(word)]


def _date(place: Place, key: PlanKey, value: object) -> str:
    if isinstance(value, datetime.date):
        return value.isoformat()
    return _text(place, key, value)


def _quantity(place: Place, key: PlanKey, value: object) -> Any:
    """A number in the unit of the key; the word itself where it is one of its choices."""
    if isinstance(value, str) and plain(value) in key.choices:
        return plain(value)
    if isinstance(value, str):
        amount = _parsed(place, key, value)
        found = _converted(place, key, amount)
        _in_range(place, key, found.value if isinstance(found, Amount) else found, value)
        return found
    if not is_number(value):
        raise _wrong(place, key, "a number with its unit, in quotes", value)
    if not key.bare:
        units = ", ".join(unit for d in key.dimension.split(OR) for unit in units_of(d))
        raise place.error(f"{key.name} must have a unit, one of {units}; found {shown_value(value)}. Write for example "
                          f"{key.name} = {key.example}.", key.name)
    return _in_range(place, key, float(value), value)


def _parsed(place: Place, key: PlanKey, text: str) -> Amount:
    try:
        return Amount(*number_and_unit(text))
    except InputError as error:
        raise place.error(f"{key.name} {error}. Write for example {key.name} = {key.example}.", key.name) from None


def _converted(place: Place, key: PlanKey, amount: Amount) -> float | Amount:
    """The amount in the unit of the key; with its dimension where the key may have several."""
    dimensions, units = key.dimension.split(OR), key.unit.split(OR)
    problems = []
    for dimension, unit in zip(dimensions, units, strict=True):
        given = amount.unit or (unit if key.bare else "")
        try:
            value = in_key_unit(amount.value, given, dimension, unit)
        except InputError as error:
            problems.append(str(error))
            continue
        return Amount(value, unit, dimension) if len(units) > 1 else value
    problem = problems[0]
    if len(problems) > 1:
        listed = ", ".join(unit for d in dimensions for unit in units_of(d))
        problem = f"must be in one of {listed}; found {amount.unit!r}"
    raise place.error(f"{key.name} {problem}. Write for example {key.name} = {key.example}.", key.name)


def window_of(value: object, one: Callable[[object], float]) -> Window:
    """A value, [low, high], "at least X" or "at most X" as limits, each part read by `one`.

    Raises InputError for a list that is not one of two, and where low is above high.
    """
    if isinstance(value, str) and value.strip().lower().startswith((_LEAST, _MOST)):
        text = value.strip()
        rest = text[len(_LEAST) if text.lower().startswith(_LEAST) else len(_MOST):].strip()
        try:
            part: object = float(rest)  # quantities without unit, such as pH
        except ValueError:
            part = rest
        return (one(part), math.inf) if text.lower().startswith(_LEAST) else (-math.inf, one(part))
    if not isinstance(value, list):
        exact = one(value)
        return exact, exact
    if len(value) != 2:
        raise InputError(f"must be a value, [low, high], \"at least ...\" or \"at most ...\"; found "
                         f"{shown_value(value)}")
    low, high = one(value[0]), one(value[1])
    if low > high:
        raise InputError(f"must have its lower limit first; found {shown_value(value)}")
    return low, high


def _window(place: Place, key: PlanKey, value: object) -> Window:
    def one(part: object) -> float:
        return _number(place, key, part) if key.dimension == "ph" else _quantity(place, key, part)
    if not isinstance(value, list):
        raise _wrong(place, key, "a window [low, high]", value)
    try:
        return window_of(value, one)
    except InputError as error:
        if str(error).startswith(place.file):
            raise
        raise place.error(f"{key.name} {error}. Write for example {key.name} = {key.example}.", key.name) from None


def _dose(place: Place, key: PlanKey, value: object) -> Amount:
    """A dose as written: what its mass counts hangs on the product."""
    if is_number(value):
        raise place.error(f"{key.name} must have a unit, one of mg/L, g/L, µg/L, mmol/L; found {shown_value(value)}. "
                          f"Write for example {key.name} = {key.example}.", key.name)
    if not isinstance(value, str):
        raise _wrong(place, key, "a number with its unit, in quotes", value)
    amount = _parsed(place, key, value)
    _in_range(place, key, min(amount.value, 0.0), value)  # how much is too much hangs on the unit
    return amount


def _listed(place: Place, key: PlanKey, value: object, one: Callable[[Place, PlanKey, object], Any]) -> tuple[Any, ...]:
    parts = value if isinstance(value, list) else [value]
    if not parts:
        raise _wrong(place, key, "a list of one or more", value)
    return tuple(one(place, key, part) for part in parts)


def _points(place: Place, key: PlanKey, value: object) -> tuple[tuple[float, float], ...]:
    good = isinstance(value, list) and all(
        isinstance(p, list) and len(p) == 2 and all(is_number(x) for x in p) for p in value)
    if not isinstance(value, list) or not good:
        raise _wrong(place, key, "a list of points [setting, rate]", value)
    return tuple((float(p[0]), float(p[1])) for p in value)


def _table(place: Place, key: PlanKey, value: object) -> dict[str, Any]:
    if not isinstance(value, dict):
        raise _wrong(place, key, "a table", value)
    return value


_CHECKS: Mapping[str, Callable[[Place, PlanKey, Any], Any]] = MappingProxyType({
    "text": _text, "flag": _flag, "number": _number, "integer": _integer, "choice": _choice, "date": _date,
    "quantity": _quantity, "window": _window, "dose": _dose, "points": _points, "table": _table, "targets": _table,
    "product": _text, **dict.fromkeys(("products", "words"), lambda p, k, v: _listed(p, k, v, _text)),
    **dict.fromkeys(("shares", "quantities"), lambda p, k, v: _listed(p, k, v, _quantity)),
    "numbers": lambda p, k, v: _listed(p, k, v, _number),
})

"""Named schemes of acid sensitivity classes: the shipped ones and the user's own file (TOML), checked key by key.

name, quantity, unit, source             needed
stand_ins, words                         if wanted
[[classes]]                              one per class, the worst first
name, at_risk, words, next_step          needed
upper, upper_belongs                     needed but for the best class, which has neither
source                                   if it is not the one of the scheme
"""

from __future__ import annotations

import math
import tomllib
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from difflib import get_close_matches
from functools import cache
from itertools import pairwise
from pathlib import Path
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.limits import EDGE
from aquabuf.errors import FileError, InputError
from aquabuf.readings.schema import Quantity, quantities
from aquabuf.tables import read_table
from aquabuf.units import accepted_units, linear, parse_unit, to_house

__all__ = ["FILE_ENDING", "OWN", "QUANTITIES", "Scheme", "SensitivityClass", "find_scheme", "read_scheme",
           "shipped_schemes"]

# What a scheme can be defined on, and the words for it
QUANTITIES: Mapping[str, str] = MappingProxyType({
    "anc_gran": "Gran ANC", "anc_charge": "charge balance", "alkalinity": "alkalinity",
    "anc_gran_of_ions": "Gran ANC of the ions",
    "anc_organic_corrected": "charge balance less organic acids", "ph": "pH"})
OWN = "own"  # mark of a class that a user's file brings
FILE_ENDING = ".toml"


@dataclass(frozen=True, slots=True, kw_only=True)
class SensitivityClass:
    """One class of a scheme.

    upper : limit toward the next better class; infinite for the best one. [eq/L, or - for pH]
    upper_belongs : whether a value on that limit is still in this class.
    at_risk : acid, or may turn acid in an event. Our reading of each class (practice), to set schemes side by side.
    words, next_step : for a person. mark, source : how the limit is known and where from.
    """

    name: str
    upper: float
    upper_belongs: bool
    at_risk: bool
    words: str
    next_step: str
    mark: str
    source: str

    def __post_init__(self):
        for field in ("name", "words", "next_step", "source"):
            if not getattr(self, field).strip():
                raise InputError(f"class {self.name!r}: {field} must be text; it is empty. Write it.")
        if math.isnan(self.upper):
            raise InputError(f"class {self.name!r}: upper must be a number; found nan. Give the limit.")

    @property
    def slack(self) -> float:
        """Distance within which a value counts as on the limit: rounding must not decide. [unit of `upper`]"""
        return EDGE * max(abs(self.upper), EDGE)


@dataclass(frozen=True, slots=True, kw_only=True)
class Scheme:
    """Classes from worst to best, on one quantity.

    quantity : the one of `QUANTITIES` that the scheme was made for.
    stand_ins : those that may take its place where it is missing, the best first; a report says so.
    """

    name: str
    quantity: str
    stand_ins: tuple[str, ...]
    words: str
    mark: str
    source: str
    classes: tuple[SensitivityClass, ...]

    def __post_init__(self):
        self._check_quantities()
        names = [c.name for c in self.classes]
        if len(names) < 2:
            raise self._error("classes", "must be two or more", str(len(names)), "Add the missing class.")
        for name in names:
            if names.count(name) > 1:
                raise self._error("classes", "must differ in name", f"{name!r} twice", "Rename one.")
        self._check_limits()
        for worse, better in pairwise(self.classes):
            if better.at_risk and not worse.at_risk:
                raise self._error("at_risk", "must run from the worst class without a gap",
                                  f"{better.name!r} at risk and the worse {worse.name!r} not", "Correct one.")

    def _error(self, what: str, rule: str, found: str, remedy: str) -> InputError:
        return InputError(f"scheme {self.name!r}: {what} {rule}; found {found}. {remedy}")

    def _check_quantities(self) -> None:
        if not self.name.strip() or self.name.lower().endswith(FILE_ENDING):
            raise self._error("name", f"must be text that does not end in {FILE_ENDING}", repr(self.name), "Rename it.")
        if not self.source.strip():
            raise self._error("source", "must be text", "none", "Say where the limits come from.")
        for name in self.definitions:
            _check_quantity(f"scheme {self.name!r}", "quantity and stand_ins", name)
        for name in self.stand_ins:
            if self.definitions.count(name) > 1:
                raise self._error("stand_ins", "must differ from the quantity and each other", repr(name), "Drop it.")
            if reading_of(name) != reading_of(self.quantity):
                raise self._error("stand_ins", f"must be in the unit of {self.quantity}", repr(name), "Drop it.")

    def _check_limits(self) -> None:
        reading = reading_of(self.quantity)
        low, high = (self._shown(x) for x in (reading.soft_low, reading.soft_high))
        *inner, best = self.classes
        if best.upper != math.inf:
            raise self._error("the last class", "is the best and must have no upper limit", self._shown(best.upper),
                              "Order the classes from worst to best and drop it.")
        for c in inner:
            if not reading.soft_low <= c.upper <= reading.soft_high:
                raise self._error(f"upper of {c.name!r}", f"must be from {low} to {high} {self.unit}",
                                  self._shown(c.upper), "Correct the limit or its unit.")
        for worse, better in pairwise(inner):
            if better.upper - worse.upper <= worse.slack + better.slack:
                raise self._error("upper", "must rise from class to class",
                                  f"{self._shown(better.upper)} after {self._shown(worse.upper)} {self.unit}",
                                  "Order the classes from worst to best.")

    def _shown(self, limit: float) -> str:
        """A limit in the unit of results."""
        return f"{to_house(limit, self.unit, reading_of(self.quantity).dimension, back=True):g}"

    @property
    def definitions(self) -> tuple[str, ...]:
        """The quantity and what may stand in for it, in order."""
        return (self.quantity, *self.stand_ins)

    @property
    def unit(self) -> str:
        """Unit in which results and rules show the quantity."""
        return "µeq/L" if reading_of(self.quantity).dimension == "alkalinity" else "-"

    @property
    def cuts(self) -> NDArray[np.float64]:
        """Where each class but the worst begins: its lower limit, moved by the slack. [eq/L, or - for pH]"""
        return np.array([c.upper + (c.slack if c.upper_belongs else -c.slack) for c in self.classes[:-1]])

    def rule(self, index: int, definition: str = "") -> str:
        """The rule of a class in one line; `definition` is what stands in for the quantity, if anything does."""
        parts = []
        if index > 0:
            below = self.classes[index - 1]
            parts.append(f"{'>' if below.upper_belongs else '>='} {self._shown(below.upper)}")
        if index < len(self.classes) - 1:
            own = self.classes[index]
            parts.append(f"{'<=' if own.upper_belongs else '<'} {self._shown(own.upper)}")
        return f"{QUANTITIES[definition or self.quantity]} {' and '.join(parts)}{f' {self.unit}' * (self.unit != '-')}"


def _check_quantity(where: str, what: str, name: str) -> None:
    if name not in QUANTITIES:
        raise InputError(f"{where}: {what} must be from {', '.join(QUANTITIES)}; found {name!r}. Correct it.")


def reading_of(quantity: str) -> Quantity:
    """Record of the column that tells dimension and usual range of a quantity of schemes."""
    return quantities()["ph" if quantity == "ph" else "anc_eq_l"]


def shipped_schemes() -> dict[str, Scheme]:
    """The schemes of the shipped table by name, in its order; a recalled source says so."""
    return {scheme.name: scheme for scheme in _shipped()}


@cache
def _shipped() -> tuple[Scheme, ...]:
    rows = read_table("lake_schemes")
    return tuple(_of_rows(head, [r for r in rows if r["scheme"] == head["scheme"] and r["kind"] == "class"])
                 for head in rows if head["kind"] == "scheme")


def _of_rows(head: Mapping[str, str], rows: list[dict[str, str]]) -> Scheme:
    def source(row: Mapping[str, str]) -> str:
        return f"{row['source']}{' (recalled)' if row['mark'] == 'recalled' else ''}"

    dimension = reading_of(head["quantity"]).dimension
    return Scheme(
        name=head["scheme"], quantity=head["quantity"], stand_ins=tuple(filter(None, head["stand_ins"].split(";"))),
        words=head["words"], mark=head["mark"], source=source(head), classes=tuple(
            SensitivityClass(
                name=r["name"], upper=to_house(float(r["upper"] or "inf"), head["unit"], dimension),
                upper_belongs=r["upper_belongs"] != "no", at_risk=r["at_risk"] == "yes", words=r["words"],
                next_step=r["next_step"], mark=r["mark"], source=source(r))
            for r in rows))


def find_scheme(text: str) -> Scheme:
    """The shipped scheme of that name, or the one in the file `text` if that ends in .toml.

    Raises InputError for a name that is not shipped, with the nearest ones, and what `read_scheme` raises.
    """
    if text.lower().endswith(FILE_ENDING):
        return read_scheme(text)
    known = shipped_schemes()
    if text not in known:
        near = get_close_matches(text.lower(), known, n=1)
        raise InputError(f"a scheme must be one of {', '.join(known)}, or a file ending in {FILE_ENDING}; "
                         f"found {text!r}. {f'Did you mean {near[0]}?' if near else 'Choose one.'}")
    return known[text]


# ------------------------------------------------------------------ the user's own file

_TOP: Mapping[str, type] = {"name": str, "quantity": str, "unit": str, "source": str, "classes": list}
_TOP_IF_WANTED: Mapping[str, type] = {"stand_ins": list, "words": str}
_CLASS: Mapping[str, type] = {"name": str, "at_risk": bool, "words": str, "next_step": str}
_LIMIT: Mapping[str, type] = {"upper": float, "upper_belongs": bool}
_CLASS_IF_WANTED: Mapping[str, type] = {"source": str}
_RULES: Mapping[type, tuple[str, str]] = {
    str: ("text", "Put it in quotes."), bool: ("true or false", "Write it without quotes."),
    float: ("a number", "Write it without quotes."), list: ("a list", "Put it in brackets.")}


def read_scheme(path: str | Path) -> Scheme:
    """A scheme of the user's own.

    Raises FileError where the file cannot be read, InputError naming file, key, value and remedy where it is wrong.
    """
    path = Path(path)
    content = _content(path)
    _check_keys(path.name, content, _TOP, _TOP_IF_WANTED)
    name, quantity, entries, stand_ins = (content.get(k, []) for k in ("name", "quantity", "classes", "stand_ins"))
    if name in shipped_schemes():
        raise InputError(f"{path.name}: name must differ from the shipped schemes; found {name!r}. Rename it, so that "
                         "no report shows your limits under that name.")
    _check_quantity(path.name, "quantity", quantity)
    if not all(isinstance(word, str) for word in stand_ins):
        raise InputError(f"{path.name}: stand_ins must be a list of words; found {stand_ins!r}. Put each in quotes.")
    if not all(isinstance(entry, dict) for entry in entries):
        raise InputError(f"{path.name}: classes must be tables; found {entries!r}. Write [[classes]] above each.")
    scale = _scale(path.name, content["unit"], reading_of(quantity))
    classes = tuple(_own_class(f"{path.name}: class {number}", entry, number == len(entries), scale, content["source"])
                    for number, entry in enumerate(entries, start=1))
    with _inside(path.name):
        return Scheme(name=name, quantity=quantity, stand_ins=tuple(stand_ins), words=content.get("words", ""),
                      mark=OWN, source=content["source"], classes=classes)


@contextmanager
def _inside(where: str) -> Iterator[None]:
    """Errors of what is built inside name the file."""
    try:
        yield
    except InputError as error:
        raise InputError(f"{where}: {error}") from None


def _content(path: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except (OSError, UnicodeDecodeError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else "not UTF-8 text"
        raise FileError(f"the scheme file {path.name} cannot be read: {reason}. Check the path.") from None
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{path.name} is not valid TOML: {error}. Correct that line.") from None


def _own_class(where: str, entry: Mapping[str, Any], is_best: bool, scale: float, source: str) -> SensitivityClass:
    """One class of the file; `where` names file and class in messages."""
    if is_best:
        for key in _LIMIT:
            if key in entry:
                raise InputError(f"{where} is the last and so the best: it must have no {key}; found {entry[key]!r}. "
                                 "Order the classes from worst to best and drop it.")
    _check_keys(where, entry, _CLASS if is_best else {**_CLASS, **_LIMIT}, _CLASS_IF_WANTED)
    with _inside(where):
        return SensitivityClass(
            name=entry["name"], upper=math.inf if is_best else entry["upper"] * scale,
            upper_belongs=entry.get("upper_belongs", True), at_risk=entry["at_risk"], words=entry["words"],
            next_step=entry["next_step"], mark=OWN, source=entry.get("source", source))


def _check_keys(where: str, entry: Mapping[str, Any], needed: Mapping[str, type], wanted: Mapping[str, type]) -> None:
    """Keys known, the needed ones there, and each of its type."""
    types = {**needed, **wanted}
    for key in entry:
        if key not in types:
            raise InputError(f"{where} has an unknown key {key!r}; keys are {', '.join(types)}. Correct it.")
    for key in needed:
        if key not in entry:
            raise InputError(f"{where} must have {key}; it is missing. Add it.")
    for key, value in entry.items():
        kind = types[key]
        is_number = isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)
        if not (is_number if kind is float else isinstance(value, kind)):
            word, remedy = _RULES[kind]
            raise InputError(f"{where}: {key} must be {word}; found {value!r}. {remedy}")


def _scale(where: str, text: str, reading: Quantity) -> float:
    """Factor from the unit of the file to the house unit."""
    unit = parse_unit(text, reading.dimension)
    if unit is None or unit.per_kg:
        labels = [u.label for u in accepted_units(reading.dimension, reading.bases) if not (u.per_kg or u.rare)]
        raise InputError(f"{where}: unit must be one of {', '.join(labels)}; found {text!r}. Correct it.")
    with _inside(f"{where}: unit"):
        return linear(unit, reading.dimension)[0]

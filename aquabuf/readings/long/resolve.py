"""What the words of a result mean: its quantity, unit and basis, and whether the value is a limit."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import NamedTuple

from aquabuf.readings.headers import Column, column_for
from aquabuf.readings.long.characteristics import Form, form_of
from aquabuf.readings.long.mapping import LongMap
from aquabuf.readings.long.words import plain
from aquabuf.readings.schema import Quantity, unit_labels, why_not
from aquabuf.units import EQUIVALENTS_PER_MOL, WITH_BASIS, Unit, find_basis, parse_unit

__all__ = ["NO_LIMIT", "UNKNOWN", "Kind", "Meaning", "Refusal", "column_of", "meaning_of"]


class Kind(NamedTuple):
    """The cells that many results share."""

    characteristic: str
    fraction: str
    speciation: str
    unit: str
    condition: str
    limit_unit: str


@dataclass(frozen=True, slots=True)
class Refusal:
    """Why results of one kind cannot be used."""

    rule: str
    remedy: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Meaning:
    """A kind of results, understood; the column of the value and that of the detection limit may be refused apart."""

    form: Form
    rank: int
    condition: str  # "", one of CONDITIONS, or UNKNOWN (then value and limit are refused)
    value: Column | Refusal
    limit: Column | Refusal


UNKNOWN = "unknown"
NO_LIMIT = Refusal("a value below detection needs its limit", "fill in the detection limit and its unit")


def _with_speciation(quantity: Quantity, unit: Unit, speciation: str) -> Unit | Refusal:
    """The unit with the basis that the words after "as" name; they win, but a unit must not contradict them."""
    words = speciation.strip()
    basis = find_basis(words[3:] if words.lower().startswith("as ") else words)
    if not basis:
        known = ", ".join(f"as {formula}" for formula in quantity.bases) or "none"
        return Refusal(f"the speciation {words!r} names no known formula", f"{quantity.base} can have: {known}")
    if unit.kind == "mass":
        if unit.basis and unit.basis != basis:
            return Refusal(
                f"the unit says as {unit.basis} and the speciation says as {basis}", "correct one of the two"
            )
        return replace(unit, basis=basis)
    if basis not in quantity.bases:
        return Refusal(f"{quantity.base} is not given as {basis}", "correct the speciation or leave it blank")
    if unit.kind == "amount" and basis in EQUIVALENTS_PER_MOL:
        return Refusal(
            f"{unit.unit} as {basis} does not tell whether atoms or equivalents are counted", "use meq/L or mg/L"
        )
    return unit


def _unit(form: Form, text: str, long_map: LongMap) -> Unit | Refusal:
    """The unit that a cell names."""
    quantity = form.quantity
    text = text.strip() or form.unit
    text = long_map.units.get(plain(text), text)
    if not text:
        if quantity.has_default_unit:
            return quantity.house
        return Refusal(f"a result of {quantity.base} needs a unit", f"use one of: {', '.join(unit_labels(quantity))}")
    unit = parse_unit(text, quantity.dimension)
    if unit is None:
        labels = ", ".join(unit_labels(quantity))
        return Refusal(
            f"{text!r} is not a unit of {quantity.base}",
            f"use one of: {labels}; or say what it means under [units] in a map file",
        )
    return unit


def column_of(characteristic: str, form: Form, unit_text: str, speciation: str, long_map: LongMap) -> Column | Refusal:
    """How to bring a result of this form, unit and speciation to house units, or why not."""
    quantity = form.quantity
    unit = _unit(form, unit_text, long_map)
    if isinstance(unit, Unit) and speciation.strip() and quantity.dimension in WITH_BASIS:
        unit = _with_speciation(quantity, unit, speciation)
    if isinstance(unit, Refusal):
        return unit
    if unit.kind == "mass" and quantity.bases and not (unit.basis or form.basis or quantity.bare_basis):
        ways = " or ".join(f"as {basis}" for basis in quantity.bases)
        return Refusal(
            f"{unit.unit} of {quantity.base} can mean {ways}, which are different amounts",
            f"fill in the speciation, or say as = {quantity.bases[0]!r} for this characteristic in a map file",
        )
    reason = why_not(quantity, unit)
    if reason:
        labels = ", ".join(unit_labels(quantity))
        return Refusal(f"{quantity.base} cannot be given in {unit.label}, because {reason}", f"use one of: {labels}")
    return replace(column_for(characteristic, quantity, unit, basis=form.basis), negative=form.negative)


def _condition(text: str, long_map: LongMap) -> str | Refusal:
    if not text.strip():
        return ""
    found = long_map.conditions.get(plain(text))
    if found is None:
        remedy = "correct it, or list it under [detection] in a map file"
        return Refusal(f"the detection condition {text.strip()!r} is not known", remedy)
    return found


def meaning_of(kind: Kind, long_map: LongMap) -> Meaning | None:
    """What a kind of results means; None when the map does not name it."""
    found = form_of(long_map.forms.get(plain(kind.characteristic), ()), kind.fraction, kind.speciation)
    if found is None:
        return None
    form, rank = found
    name = kind.characteristic.strip()
    condition = _condition(kind.condition, long_map)
    value = column_of(name, form, kind.unit, kind.speciation, long_map)
    limit = column_of(name, form, kind.limit_unit.strip() or kind.unit, kind.speciation, long_map)
    if isinstance(condition, Refusal):
        return Meaning(form=form, rank=rank, condition=UNKNOWN, value=condition, limit=condition)
    return Meaning(form=form, rank=rank, condition=condition, value=value, limit=limit)

"""Numbers with a unit as text ("9.6 ML/d", "57.4 mg/L as CaCO3", "30 %"), as plan files have them.

A dimension is a group of units.csv, one of plan_units.csv, the name of a column of readings ("alkalinity_eq_l"), which
brings its bases, or "intensity". "X as CaCO3" says what a bare mass counts.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from functools import cache

from aquabuf.errors import InputError
from aquabuf.readings.schema import Quantity, quantities, unit_labels, why_not
from aquabuf.tables import read_table
from aquabuf.units import Unit, accepted_units, linear, parse_unit

__all__ = ["PER_PH", "in_key_unit", "units_of"]

PER_PH = "per pH"
INTENSITY = "intensity"
_MEANS = " as "


@cache
def _own_units() -> Mapping[str, Mapping[str, float]]:
    """Scales of plan_units.csv by dimension and spelling; letters count, so that ML is not mL."""
    found: dict[str, dict[str, float]] = {}
    for row in read_table("plan_units"):
        for spelling in filter(None, (row["unit"], *row["spellings"].split(";"))):
            found.setdefault(row["dimension"], {})[spelling] = float(row["scale"])
    return found


def _column(dimension: str) -> tuple[Quantity | None, str]:
    """The column of readings that a dimension names, if it does, and what a bare mass counts."""
    name, _, means = dimension.partition(_MEANS)
    quantity = quantities().get(name)
    quantity = quantity if quantity is not None and quantity.is_number else None
    return quantity, means or (quantity.bare_basis if quantity else "")


def _group(dimension: str) -> str:
    """The group of units.csv to look in, "" where plan_units.csv holds the whole dimension."""
    if dimension == INTENSITY:
        return "alkalinity"
    return "" if dimension in _own_units() and dimension not in _shared() else dimension


@cache
def _shared() -> frozenset[str]:
    groups = {row["group"] for row in read_table("units")}
    return frozenset(groups & set(_own_units()))


def units_of(dimension: str) -> list[str]:
    """Units that a dimension may have, in words."""
    quantity, _ = _column(dimension)
    if quantity is not None:
        return [label for label in unit_labels(quantity) if "/kg" not in label]
    own = [row["unit"] for row in read_table("plan_units") if row["dimension"] == dimension]
    group = _group(dimension)
    if not group:
        return own
    bases = ("CaCO3",) if group == "alkalinity" else ()
    listed = [u.label for u in accepted_units(group, bases)
              if not u.per_kg and not u.rare and _counts(u, group)]
    return [f"{label} {PER_PH}" for label in listed] if dimension == INTENSITY else own + listed


def _counts(unit: Unit, group: str) -> bool:
    """Whether a unit stands for a dimension whatever the substance."""
    if group == "mass":
        return unit.kind == "mass" and not unit.basis
    return unit.kind != "amount" and (group != "alkalinity" or unit.kind == "charge" or bool(unit.basis))


def in_key_unit(value: float, unit: str, dimension: str, wanted: str) -> float:
    """A value in `unit` as one in the unit `wanted`, of one dimension. Raises InputError for a unit of another."""
    scale, offset = _linear(unit, dimension)
    wanted_scale, wanted_offset = _linear(wanted, dimension)
    return (value * scale + offset - wanted_offset) / wanted_scale


def _linear(unit: str, dimension: str) -> tuple[float, float]:
    plain = " ".join(unit.split())
    own = _own_units().get(dimension, {})
    if plain in own:
        return own[plain], 0.0
    quantity, means = _column(dimension)
    if dimension == INTENSITY:
        if not plain.endswith(PER_PH):
            raise _no_unit(unit, dimension)
        plain = plain.removesuffix(PER_PH).strip()
    group = quantity.dimension if quantity else _group(dimension)
    found = parse_unit(plain, group) if group else None
    if found is None or found.per_kg:
        raise _no_unit(unit, dimension)
    return _of_column(found, quantity, means, unit, dimension) if quantity else _of_group(found, group, unit, dimension)


def _of_group(found: Unit, group: str, unit: str, dimension: str) -> tuple[float, float]:
    if not _counts(found, group):
        raise _no_unit(unit, dimension)
    return linear(found, group)


def _of_column(found: Unit, quantity: Quantity, means: str, unit: str, dimension: str) -> tuple[float, float]:
    if found.kind == "mass" and not found.basis and quantity.bases:
        if not means:
            ways = " or ".join(f"{found.unit} as {basis}" for basis in quantity.bases)
            raise InputError(f"must say what it counts, {ways}; found {unit!r}")
        found = replace(found, basis=means)
    if why_not(quantity, found):
        raise _no_unit(unit, dimension)
    return linear(found, quantity.dimension, molar_mass_g=quantity.molar_mass_g, charge=quantity.charge)


def _no_unit(unit: str, dimension: str) -> InputError:
    return InputError(f"must be in one of {', '.join(units_of(dimension))}; found {unit!r}" if unit else
                      f"must have a unit, one of {', '.join(units_of(dimension))}; found none")

"""Units: what a header or an option may say, and the one conversion to the house unit.

The table `data/units.csv` lists the units, `data/ions.csv` the molar masses. A concentration is read in three
steps: the unit gives an amount, a charge or a mass; a basis ("as N", "as CaCO3") tells whose mass; the dimension
of the quantity decides what is wanted:

    amount      mol/L of a substance            alkalinity  eq/L
    hardness    mol/L of calcium + magnesium    mass        mg/L of a substance

A load (deposition) is a charge or a mass per area and year, and its mass needs a basis too. Every other dimension
(temperature, pressure, flow ...) is a group of its own with a fixed scale and offset.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from functools import cache
from typing import Any

from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = [
    "Substance",
    "Unit",
    "accepted_units",
    "convert",
    "find_basis",
    "key",
    "linear",
    "parse_unit",
    "substances",
    "to_house",
]

CONCENTRATIONS = {"amount", "alkalinity", "hardness", "mass"}
WITH_BASIS = CONCENTRATIONS | {"load"}  # dimensions whose mass units count somebody's mass
EQUIVALENTS_PER_MOL = {"CaCO3": 2.0, "CaO": 2.0}  # bases that count acid-binding equivalents, not atoms
_SAMPLE_CHARGE = {"alkalinity": 1.0, "hardness": 2.0}
_MICRO_AND_SMALL = str.maketrans("µμ⁻−¹²³₀₁₂₃₄₅₆₇₈₉", "uu--12301" + "23456789")
_PER = re.compile(r"[\s·*.]*\b(l|kg|cm|m|d|h|s|ha|yr|a)\s*\^?-1(?!\d)")
_PER_AREA = re.compile(r"[\s·*.]*\b(m|km)\s*\^?-2(?!\d)")
_LITER = re.compile(r"_(?:liter|litre|dm3)(?=_|$)")
_INNER_BASIS = re.compile(r"^([muk]?g)_?([a-z][a-z0-9]*)_(l|kg|m2_yr|ha_yr)$")


@dataclass(frozen=True, slots=True)
class Substance:
    """One row of the ion table."""

    name: str
    formula: str
    molar_mass_g: float  # [g/mol]
    charge: int | None  # None where it depends on pH


@dataclass(frozen=True, slots=True)
class Unit:
    """One way to state a quantity; `basis` is the formula after "as", "" when none is stated."""

    group: str
    kind: str  # plain, amount, charge or mass
    unit: str
    suffix: str
    scale: float
    offset: float
    per_kg: bool
    basis: str
    rare: bool = False  # understood, but left out of short lists

    @property
    def label(self) -> str:
        """The unit as a person writes it, e.g. "mg/L as CaCO3"."""
        return f"{self.unit} as {self.basis}" if self.basis and self.suffix in _BASIS_UNITS else self.unit


_BASIS_UNITS = {"g_l", "mg_l", "ug_l", "g_kg", "mg_kg", "ug_kg", "g_m2_yr", "mg_m2_yr", "kg_ha_yr"}


def key(text: str) -> str:
    """Plain form of a header or unit: lower case, ASCII, words joined by '_' ("µS/cm" -> "us_cm")."""
    plain = text.lower().translate(_MICRO_AND_SMALL)  # lower first: capital µ is a Greek capital
    text = _PER_AREA.sub(r"/\g<1>2", _PER.sub(r"/\1", plain))
    return _LITER.sub("_l", re.sub(r"[^a-z0-9]+", "_", text).strip("_").replace("_per_", "_"))


@cache
def substances() -> dict[str, Substance]:
    """The ion table by substance name (treat as read-only)."""
    return {
        row["name"]: Substance(
            row["name"], row["formula"], float(row["molar_mass_g"]), int(row["charge"]) if row["charge"] else None
        )
        for row in read_table("ions")
    }


@cache
def _bases() -> dict[str, str]:
    """Formula of each substance by its plain form, and the element names people write instead."""
    found = {key(s.formula): s.formula for s in substances().values()}
    elements = ("carbon", "nitrogen", "phosphorus")
    return found | {name: substances()[name].formula for name in elements} | {"h3bo3": "B(OH)3"}


def find_basis(text: str) -> str:
    """Formula meant by `text` ("caco3", "nitrogen"), or "" when it is none."""
    return _bases().get(key(text), "")


@cache
def molar_mass_of(formula: str) -> float:
    """Molar mass of a formula in the ion table. [g/mol]"""
    return next(s.molar_mass_g for s in substances().values() if s.formula == formula)


@cache
def _group(group: str) -> dict[str, Unit]:
    """Units of one group by every plain spelling."""
    found: dict[str, Unit] = {}
    for row in read_table("units"):
        if row["group"] != group:
            continue
        unit = Unit(
            group, row["kind"], row["unit"], row["suffix"], float(row["scale"]), float(row["offset"]),
            row["per_kg"] == "yes", row["basis"], row["rare"] == "yes",
        )  # fmt: skip
        found[row["unit"]] = unit  # "-" and "°" have no plain form
        for spelling in (row["suffix"], key(row["unit"]), *row["spellings"].split(";")):
            if spelling:
                found[spelling] = unit
    if not found:
        raise InputError(f"no unit group is named {group!r}; use one from units.csv, e.g. 'temperature'")
    return found


def _group_name(dimension: str) -> str:
    return "concentration" if dimension in CONCENTRATIONS else dimension


def _split_basis(text: str) -> tuple[str, str]:
    """Split a plain unit into the bare unit and the formula of its basis."""
    inner = _INNER_BASIS.match(text)
    if inner and inner[2] in _bases():  # mg_n_l, mgc_l
        return f"{inner[1]}_{inner[3]}", _bases()[inner[2]]
    words = text.split("_")
    for i in range(1, len(words)):
        basis = _bases().get("_".join(words[i:]), "")
        if basis:
            return "_".join(words[:i]).removesuffix("_as"), basis
    return text, ""


def parse_unit(text: str, dimension: str) -> Unit | None:
    """The unit that `text` names for a quantity of this dimension, None when it names none.

    Any case, either micro sign, and "/", " ", "_" or "L-1" forms are equal: "mg/L as N", "mg N/L", "mg_l_n".
    """
    units = _group(_group_name(dimension))
    plain = key(text)
    known = units.get(text.strip()) or units.get(plain)
    if known:
        return known
    bare, basis = _split_basis(plain)
    unit = units.get(bare)
    if unit is None or not basis or unit.suffix not in _BASIS_UNITS:
        return None
    return replace(unit, basis=basis)


def accepted_units(dimension: str, bases: tuple[str, ...] = ()) -> list[Unit]:
    """Units of a dimension in table order; mass units once per basis."""
    found: list[Unit] = []
    for unit in dict.fromkeys(_group(_group_name(dimension)).values()):
        if unit.basis and dimension not in _SAMPLE_CHARGE:  # degrees are for alkalinity and hardness
            continue
        if unit.group in ("concentration", "load") and unit.kind == "mass" and not unit.basis and bases:
            found += [replace(unit, basis=basis) for basis in bases]
        else:
            found.append(unit)
    return found


def _mass_scale(unit: Unit, dimension: str, molar_mass_g: float | None, charge: float | None) -> float:
    if dimension == "mass":
        return 1e3
    mass = molar_mass_of(unit.basis) if unit.basis else molar_mass_g
    if mass is None:
        example = "CaCO3" if dimension in ("alkalinity", "hardness") else "N"
        raise InputError(f"{unit.label} needs a basis to become an amount: none is given. "
                         f"Write e.g. '{unit.label} as {example}'.")
    if unit.basis in EQUIVALENTS_PER_MOL:
        return EQUIVALENTS_PER_MOL[unit.basis] / mass / _whole_charge(unit, charge)
    return 1.0 / mass


def _whole_charge(unit: Unit, charge: float | None) -> float:
    if not charge:
        raise InputError(
            f"{unit.label} counts charges, and the charge of this quantity depends on pH or is zero. "
            "Use mmol/L or mg/L."
        )
    return abs(charge)


def linear(
    unit: Unit, dimension: str, *, molar_mass_g: float | None = None, charge: float | None = None
) -> tuple[float, float]:
    """Scale and offset that turn a value in `unit` into the house unit of `dimension`.

    Parameters
    ----------
    unit, dimension
        From `parse_unit`. A per-kilogram unit must still be multiplied by the density in kg/L.
    molar_mass_g, charge
        Of the substance, where mass or charge is counted. [g/mol], [-]

    Raises
    ------
    InputError
        Mass without a basis, or equivalents of something whose charge is not fixed.
    """
    if unit.group == "load" and unit.kind == "mass":
        return unit.scale * _mass_scale(unit, dimension, molar_mass_g, charge) * _whole_charge(unit, charge), 0.0
    if unit.group != "concentration":
        return unit.scale, unit.offset
    charge = _SAMPLE_CHARGE.get(dimension, charge)
    if unit.kind == "mass":
        return unit.scale * _mass_scale(unit, dimension, molar_mass_g, charge), 0.0
    scale = unit.scale / (_whole_charge(unit, charge) if unit.kind == "charge" else 1.0)
    if dimension == "mass":
        if molar_mass_g is None:
            raise InputError(f"{unit.label} needs a molar mass to become mg/L. Use mg/L.")
        scale *= 1e3 * molar_mass_g
    return scale, 0.0


def to_house(
    values: Any,
    text: str,
    dimension: str,
    substance: str = "",
    density_kg_l: Any = None,
    back: bool = False,
) -> Any:
    """Values in the unit `text` as house units of `dimension` (mol/L, eq/L, °C, m³/d ...); `back` reverses.

    `substance` is a name of the ion table where mass or charge is counted. Arrays and scalars keep their shape.

    >>> round(to_house(50.043, "mg/L as CaCO3", "alkalinity"), 9)
    0.001
    """
    unit = parse_unit(text, dimension)
    if unit is None:
        labels = ", ".join(u.label for u in accepted_units(dimension))
        raise InputError(f"{text!r} is not a unit of {dimension}. Use one of: {labels}.")
    of = substances().get(substance)
    scale, offset = linear(
        unit, dimension, molar_mass_g=of.molar_mass_g if of else None, charge=of.charge if of else None
    )
    if unit.per_kg:
        if density_kg_l is None:
            raise InputError(f"{unit.label} needs the density of the sample; none is given. Pass density_kg_l.")
        scale = scale * density_kg_l
    return (values - offset) / scale if back else values * scale + offset


def convert(values: Any, from_unit: str, to_unit: str, dimension: str, substance: str = "") -> Any:
    """Values in `from_unit` expressed in `to_unit`, both of one dimension (see `to_house`)."""
    house = to_house(values, from_unit, dimension, substance)
    return to_house(house, to_unit, dimension, substance, back=True)

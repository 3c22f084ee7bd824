"""Headers of a profile: time, flow, temperature, and the strength of each waste; see `data/profile_columns.csv`."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cache

from aquabuf.errors import HeaderError
from aquabuf.readings.schema import Quantity
from aquabuf.tables import read_table
from aquabuf.units import Unit, accepted_units, key, linear, parse_unit

__all__ = ["ProfileColumn", "ProfileQuantity", "profile_columns", "profile_quantities"]

_PER_DAY = 24.0                                            # m³/d of the unit table per m³/h of a profile
_SECONDS = {"minutes": 60.0, "time": 86_400.0}             # house unit of each group of times
_COUNTS_ACID = ("CaCO3", "CaO")                            # bases of a mass that counts equivalents


@dataclass(frozen=True, slots=True)
class ProfileQuantity:
    """One quantity of a profile; limits in the house unit of its row."""

    name: str
    dimensions: tuple[str, ...]
    house_unit: str
    default_unit: str
    per_waste: bool
    sign: float
    low: float
    high: float
    aliases: tuple[str, ...]  # plain names, its own first
    meaning: str

    @property
    def cells(self) -> Quantity:
        """The record that the reader of numbers asks for."""
        return Quantity(name=self.name, kind="number", house_unit="", dimension=self.dimensions[0])

    def unit(self, text: str) -> tuple[Unit, str] | None:
        """The unit that a text names, and its dimension; None when it names none."""
        found = ((parse_unit(text, dimension), dimension) for dimension in self.dimensions)
        return next(((unit, dimension) for unit, dimension in found if unit is not None), None)

    def labels(self) -> str:
        """Units that a header may have, in words."""
        found: dict[str, None] = {}
        for dimension in self.dimensions:
            units = accepted_units(dimension, ("CaCO3",))
            found |= dict.fromkeys(u.label for u in units if not (u.rare or u.per_kg) and u.kind != "amount")
        return ", ".join(found)


@dataclass(frozen=True, slots=True)
class ProfileColumn:
    """A column of the file: house value = cell * scale + offset. `unit` is "" for dates with a time of day."""

    at: int
    header: str
    quantity: ProfileQuantity
    waste: str  # "" for the whole stream
    unit: str
    scale: float = 1.0
    offset: float = 0.0


def _limit(text: str, missing: float) -> float:
    return float(text) if text else missing


@cache
def profile_quantities() -> Mapping[str, ProfileQuantity]:
    """Quantities by name, in table order."""
    return {
        row["name"]: ProfileQuantity(
            row["name"], tuple(row["dimension"].split(";")), row["house_unit"], row["default_unit"],
            row["per_waste"] == "yes", _limit(row["sign"], 1.0), _limit(row["low"], -float("inf")),
            _limit(row["high"], float("inf")), tuple(map(key, (row["name"], *row["aliases"].split(";")))),
            row["meaning"],
        )
        for row in read_table("profile_columns")
    }  # fmt: skip


def _names(wastes: Sequence[str]) -> Iterator[tuple[str, tuple[ProfileQuantity, str]]]:
    """Every plain name of a column without its unit: whose quantity, of which waste."""
    for quantity in profile_quantities().values():
        for alias in quantity.aliases:
            yield alias, (quantity, "")
            for waste in wastes if quantity.per_waste else ():
                yield f"{alias}_{key(waste)}", (quantity, waste)
                yield f"{key(waste)}_{alias}", (quantity, waste)


def _found(header: str, names: Mapping[str, tuple[ProfileQuantity, str]]) -> tuple[ProfileQuantity, str, str] | None:
    """Quantity, waste and unit in words; the longest name wins. None for an unknown name."""
    plain = key(header)
    time = profile_quantities()["time"]
    if time.unit(plain):  # a column that is named by its unit: "hours"
        return time, "", plain
    words = plain.split("_")
    known = None
    for cut in range(len(words), 0, -1):
        quantity, waste = names.get("_".join(words[:cut]), (None, ""))
        if quantity is not None:
            text = "_".join(words[cut:])
            if not text or quantity.unit(text):
                return quantity, waste, text
            known = known or (quantity, waste, text)
    return known


def _column(at: int, header: str, found: tuple[ProfileQuantity, str, str], wastes: Sequence[str]) -> ProfileColumn:
    quantity, waste, text = found
    text = text or quantity.default_unit
    if not text and quantity.name == "time":
        return ProfileColumn(at, header, quantity, waste, "")
    if not text:
        raise HeaderError(f"column {header!r} needs a unit: {quantity.name} can be in {quantity.labels()}. Write it in "
                          f"the header, e.g. '{quantity.name} ({quantity.house_unit})'.")
    read = quantity.unit(text)
    counts = read is not None and not read[0].per_kg and (
        read[1] != "alkalinity" or read[0].kind == "charge" or read[0].basis in _COUNTS_ACID)
    if read is None or not counts:
        named = read is None and quantity.per_waste and wastes
        known = f" or the name of a waste ({', '.join(wastes)})" if named else ""
        raise HeaderError(f"column {header!r}: {text!r} is not a unit of {quantity.name}{known}. Use one of: "
                          f"{quantity.labels()}.")
    unit, dimension = read
    scale, offset = linear(unit, dimension)
    scale *= quantity.sign * _SECONDS.get(dimension, 1.0) / (_PER_DAY if dimension == "flow" else 1.0)
    return ProfileColumn(at, header, quantity, waste, unit.label, scale, offset)


def profile_columns(headers: Sequence[str], wastes: Sequence[str] = (), ignore: Collection[str] = (),
                    ) -> list[ProfileColumn]:
    """What each header of a profile means.

    Raises
    ------
    HeaderError
        An unknown column, a unit missing or wrong, two columns for one thing, no time or no flow.
    """
    names = dict(_names(wastes))
    columns: list[ProfileColumn] = []
    for at, header in enumerate(headers):
        if not header.strip() or header in ignore:
            continue
        found = _found(header, names)
        if found is None:
            of = f", each alone or with the name of a waste ({', '.join(wastes)})" if wastes else ""
            per_waste = [q.name for q in profile_quantities().values() if q.per_waste]
            others = [q.name for q in profile_quantities().values() if not q.per_waste]
            raise HeaderError(f"column {header!r} is not known; a profile has {', '.join(others)}, and "
                              f"{', '.join(per_waste)}{of}. Rename it, or say that it is to be ignored.")
        columns.append(_column(at, header, found, wastes))
    _check_once(columns)
    return columns


def _check_once(columns: Sequence[ProfileColumn]) -> None:
    seen: dict[tuple[str, str], str] = {}
    for column in columns:
        what = "the strength" if column.quantity.per_waste else column.quantity.name
        of = f" of {column.waste}" if column.waste else ""
        other = seen.setdefault((what, column.waste), column.header)
        if other != column.header or sum(c.header == other for c in columns) > 1:
            raise HeaderError(f"columns {other!r} and {column.header!r} both give {what}{of}; one is needed. "
                              "Remove one.")
    for name in ("time", "flow"):
        if (name, "") not in seen:
            raise HeaderError(f"a profile needs a column of {name}; found none. Add one, with its unit in the header.")

"""What a target can be set for and a step is reported by: names, units, and their values in a stream."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from functools import cache
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.indices import chloride_sulfate_ratio, larson_ratio
from aquabuf.assess.plant.stream import Stream
from aquabuf.chem.gases import AIR_CO2_PPM
from aquabuf.errors import InputError
from aquabuf.tables import read_table
from aquabuf.units import accepted_units, molar_mass_of, parse_unit, substances, to_house

__all__ = ["STEP_QUANTITIES", "PlantQuantity", "find_quantity", "in_house", "in_unit", "measured", "plant_quantities"]

Array = NDArray[np.float64]

STEP_QUANTITIES = ("ph", "alkalinity", "dic", "calcium", "hardness", "si_calcite", "ccpp", "buffer_intensity",
                   "chloride_sulfate_ratio", "larson_ratio", "tds", "pco2")
PER_PH = " per pH"
_OWN_UNITS = {"potential": "hardness", "intensity": "alkalinity"}  # dimension whose units they share
MATM = 1e3


@dataclass(frozen=True, slots=True, kw_only=True)
class PlantQuantity:
    """One row of the table.

    column : its name in the tables of results, with the unit.
    kind : "straight" where a dose moves it in proportion once pH is fixed, "curved" where a root must be searched,
        "told" where it is only reported. closeness : within which a target counts as met, in `unit`.
    """

    name: str
    column: str
    label: str
    unit: str
    dimension: str
    substance: str
    digits: int
    kind: str
    closeness: float
    words: str

    @property
    def is_target(self) -> bool:
        """Whether a plan may ask for it."""
        return self.kind != "told"

    @property
    def per_house(self) -> float:
        """Units in one house unit."""
        return float(in_unit(self, 1.0))

    def text(self, house: float) -> str:
        """A value as a person reads it, with its unit."""
        if not np.isfinite(house):
            return "not known"
        unit = "" if self.unit == "-" else f" {self.unit}"
        return f"{float(in_unit(self, house)):z.{self.digits}f}{unit}"


@cache
def plant_quantities() -> Mapping[str, PlantQuantity]:
    """The table by name."""
    rows = read_table("plant_quantities")
    return MappingProxyType({r["name"]: PlantQuantity(
        name=r["name"], column=r["column"], label=r["label"], unit=r["unit"], dimension=r["dimension"],
        substance=r["substance"],
        digits=int(r["digits"]), kind=r["kind"], closeness=float(r["closeness"] or "nan"), words=r["words"])
        for r in rows})


def find_quantity(name: str, *, target: bool = True) -> PlantQuantity:
    """The quantity of that name. Raises InputError naming the nearest where there is none (or none to aim at)."""
    known = {n: q for n, q in plant_quantities().items() if q.is_target or not target}
    if name in known:
        return known[name]
    near = get_close_matches(name, known, n=1)
    hint = f" The nearest is {near[0]}." if near else ""
    raise InputError(f"{name!r} is no quantity that a target can be set for; there are {', '.join(known)}.{hint} "
                     f"Correct it.")


def in_house(quantity: PlantQuantity, value: float, unit: str = "") -> float:
    """A value in `unit` (without one, that of the tables) in house units. Raises InputError for a wrong unit."""
    unit = unit or quantity.unit
    if quantity.dimension in ("ph", "ratio"):
        if unit not in ("-", "pH"):
            raise InputError(f"{quantity.label} has no unit; found {unit!r}. Give the bare number.")
        return value
    if quantity.name == "pco2":
        return value / MATM
    dimension = _OWN_UNITS.get(quantity.dimension, quantity.dimension)
    plain = unit.removesuffix(PER_PH) if quantity.dimension == "intensity" else unit
    if parse_unit(plain, dimension) is None:
        labels = ", ".join(u.label for u in accepted_units(dimension, ("CaCO3",)) if not u.per_kg and not u.rare)
        raise InputError(f"{quantity.label} must be in one of {labels}; found {unit!r}. Correct the unit.")
    return float(to_house(value, plain, dimension, quantity.substance))


def in_unit(quantity: PlantQuantity, house: ArrayLike) -> Array:
    """House values in the unit of the tables."""
    value = np.asarray(house, dtype=float)
    if quantity.dimension in ("ph", "ratio"):
        return value
    if quantity.name == "pco2":
        return value * MATM
    dimension = _OWN_UNITS.get(quantity.dimension, quantity.dimension)
    return np.asarray(to_house(value, quantity.unit.removesuffix(PER_PH), dimension, quantity.substance, back=True))


def measured(stream: Stream, names: Iterable[str], *, air_co2_ppm: float = AIR_CO2_PPM) -> dict[str, Array]:
    """Values of the named quantities in every row, in house units; nan where an ion they need is not known."""
    return {name: _VALUE[name](stream, air_co2_ppm) for name in names}


def _hardness(s: Stream, _: float) -> Array:
    return s.total("calcium") + s.total("magnesium")


_MAJOR = ("calcium", "magnesium", "sodium", "chloride", "sulfate")
_MINOR = ("potassium", "nitrate", "fluoride", "silica")


def _tds(s: Stream, _: float) -> Array:
    mass = {n: s.total(n) * substances()[n].molar_mass_g for n in (*_MAJOR, *_MINOR)}
    ions = sum(mass[n] for n in _MAJOR) + sum(np.nan_to_num(mass[n]) for n in _MINOR)
    return 1e3 * (ions + np.maximum(s.alkalinity_eq_l, 0.0) * 0.5 * molar_mass_of("CO3"))


_VALUE: Mapping[str, Callable[[Stream, float], Array]] = MappingProxyType({
    "ph": lambda s, _: s.water().ph,
    "ph_at_air": lambda s, ppm: s.water().at_air(ppm).ph,
    "alkalinity": lambda s, _: s.alkalinity_eq_l,
    "dic": lambda s, _: s.carbon_mol_l,
    "calcium": lambda s, _: s.total("calcium"),
    "magnesium": lambda s, _: s.total("magnesium"),
    "hardness": _hardness,
    "sodium": lambda s, _: s.total("sodium"),
    "fluoride": lambda s, _: s.total("fluoride"),
    "chloride_sulfate_ratio": lambda s, _: chloride_sulfate_ratio(s.total("chloride"), s.total("sulfate")),
    "larson_ratio": lambda s, _: larson_ratio(s.total("chloride"), s.total("sulfate"), s.alkalinity_eq_l),
    "si_calcite": lambda s, _: s.water().saturation_index(),
    "ccpp": lambda s, _: s.water().precipitation_potential_mol_l(),
    "buffer_intensity": lambda s, _: s.water().buffer_intensity_eq_l(),
    "tds": _tds,
    "pco2": lambda s, _: s.water().pco2_atm,
})

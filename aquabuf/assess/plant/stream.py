"""The water on its way through the works: what is carried from step to step, and how a product changes it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.options import Options
from aquabuf.assess.sample.inputs import Values, ionic_strength, pressure, reading
from aquabuf.assess.sample.solve import NO_PAIR, believable, choose, groups, has, take_rows, water_of
from aquabuf.chem.acids import acid_table
from aquabuf.engine.build import IONS
from aquabuf.engine.conditions import FRESH_BELOW
from aquabuf.engine.mix import mix
from aquabuf.engine.water import Water
from aquabuf.errors import InputError
from aquabuf.units import substances

__all__ = ["ALKALINITY", "CARBON", "TOTALS", "Stream", "mixed", "stream_of"]

Array = NDArray[np.float64]

ALKALINITY, CARBON = "alkalinity", "carbon"  # what a product may add beside TOTALS
TOTALS = ("calcium", "magnesium", "sodium", "potassium", "chloride", "sulfate", "nitrate", "fluoride", "phosphate",
          "ammonium", "silica", "hypochlorite")


@dataclass(frozen=True, slots=True, eq=False)
class Stream:
    """Water of one or many rows (hours, draws), one-dimensional; read-only.

    totals : by the names in TOTALS, and other weak acids of the raw water (boron); nan where not known. In the balance
        of acids and bases an unknown total counts as none; what is judged by it (saturation, ratios of ions) stays
        unknown. [mol/L]
    ionic_strength_mol_l : of the raw water as its readings tell, then followed through everything added or removed.
    solids : formed on the way, by formula, and taken out with the sludge or filter. [mol/L]
    """

    t_c: Array
    alkalinity_eq_l: Array
    carbon_mol_l: Array
    totals: Mapping[str, Array]
    ionic_strength_mol_l: Array
    pressure_atm: Array
    solids: Mapping[str, Array] = field(default_factory=dict)
    _solved: list[Water] = field(default_factory=list, repr=False)

    @property
    def rows(self) -> int:
        """Number of rows."""
        return int(self.t_c.size)

    def total(self, name: str) -> Array:
        """Total of one of TOTALS; nan where not known. [mol/L]"""
        return self.totals.get(name, np.full(self.rows, np.nan))

    def water(self) -> Water:
        """The acid-base equilibrium, solved once."""
        if not self._solved:
            self._solved.append(Water.from_alkalinity_dic(
                alkalinity_eq_l=self.alkalinity_eq_l, dic_mol_l=self.carbon_mol_l, **self.keywords()))
        return self._solved[0]

    def keywords(self) -> dict[str, Array]:
        """Conditions and totals as `Water` wants them."""
        acids = dict.fromkeys(name for name in (*TOTALS, *self.totals) if name in acid_table())
        out = {f"{name}_mol_l": np.nan_to_num(self.total(name)) for name in acids}
        out |= {f"{name}_mol_l": self.total(name) for name in IONS}
        return out | {"t_c": self.t_c, "ionic_strength_mol_l": self.ionic_strength_mol_l,
                      "pressure_atm": self.pressure_atm}

    def added(self, adds: Mapping[str, float], mol_l: ArrayLike, solids: Mapping[str, float] | None = None) -> Stream:
        """The water after `mol_l` of something that brings `adds` per mole, and forms `solids` per mole.

        A negative amount takes out. Volume is held. Ionic strength follows by half the charge squared of each ion;
        carbonate follows the charge that the others leave, counted as bicarbonate.
        """
        x = np.asarray(mol_l, dtype=float)
        totals = dict(self.totals)
        for name, per_mol in adds.items():
            if name not in (ALKALINITY, CARBON):
                totals[name] = self.total(name) + per_mol * x
        formed = {name: np.broadcast_to(self.solids.get(name, 0.0) + per_mol * x, self.t_c.shape)
                  for name, per_mol in (solids or {}).items()}
        strength = self.ionic_strength_mol_l + strength_per_mol(adds) * x
        return self.replaced(
            alkalinity_eq_l=self.alkalinity_eq_l + adds.get(ALKALINITY, 0.0) * x,
            carbon_mol_l=self.carbon_mol_l + adds.get(CARBON, 0.0) * x, totals=totals,
            ionic_strength_mol_l=np.maximum(strength, 0.0), solids={**self.solids, **formed})

    def replaced(self, **changes: object) -> Stream:
        """The same water with some of its fields changed."""
        return replace(self, **changes, _solved=[])  # type: ignore[arg-type]

    def take(self, rows: NDArray) -> Stream:
        """Some of the rows."""
        return Stream(self.t_c[rows], self.alkalinity_eq_l[rows], self.carbon_mol_l[rows],
                      {n: v[rows] for n, v in self.totals.items()}, self.ionic_strength_mol_l[rows],
                      self.pressure_atm[rows], {n: v[rows] for n, v in self.solids.items()})

    def repeated(self, times: int) -> Stream:
        """Every row `times` times, one after the other."""
        return self.take(np.repeat(np.arange(self.rows), times))


@cache
def _charge_squared(name: str) -> float:
    charge = substances()[name].charge if name in substances() else None
    return 0.0 if charge is None else float(charge**2)  # acids whose charge depends on pH come in with the alkalinity


def strength_per_mol(adds: Mapping[str, float]) -> float:
    """What a mole of something that brings `adds` does to the ionic strength. [-]"""
    ions = sum(_charge_squared(name) * n for name, n in adds.items() if name not in (ALKALINITY, CARBON))
    return 0.5 * (ions + adds.get(ALKALINITY, 0.0))


def mixed(streams: Sequence[Stream], volumes: Sequence[ArrayLike]) -> Stream:
    """Streams mixed in proportion to `volumes`; alkalinity, carbon, totals and heat are conserved, pH follows.

    Raises InputError as `engine.mix` does.
    """
    water = mix([s.water() for s in streams], volumes)
    v = [np.asarray(x, dtype=float) for x in volumes]
    whole = sum(v)

    def by_volume(parts: Sequence[ArrayLike]) -> Array:
        shares = (np.where(x == 0.0, 0.0, x * p) for x, p in zip(v, parts, strict=True))  # none of an unknown is none
        return np.broadcast_to(sum(shares) / whole, water.shape)

    names = dict.fromkeys(name for s in streams for name in s.totals)
    solids = dict.fromkeys(name for s in streams for name in s.solids)
    return Stream(
        t_c=water.t_c, alkalinity_eq_l=by_volume([s.alkalinity_eq_l for s in streams]),
        carbon_mol_l=by_volume([s.carbon_mol_l for s in streams]),
        totals={n: by_volume([s.total(n) for s in streams]) for n in names},
        ionic_strength_mol_l=by_volume([s.ionic_strength_mol_l for s in streams]),
        pressure_atm=by_volume([s.pressure_atm for s in streams]),
        solids={n: by_volume([s.solids.get(n, np.zeros(s.rows)) for s in streams]) for n in solids})


def stream_of(values: Values, options: Options | None = None) -> tuple[Stream, NDArray[np.object_]]:
    """Raw water of readings (house units by column name, one-dimensional) and the pair each row was solved from.

    The known pair is chosen as in an assessment of samples. Rows that cannot be solved, and salt water, are nan
    and have no pair.
    Raises InputError where no row can be.
    """
    options = options or Options(draws=0)
    n = values["temperature_c"].size
    solved = {name: np.full(n, np.nan) for name in ("t_c", "alkalinity", "carbon", "strength")}
    pair = np.full(n, "", dtype=object)
    values = dict(values) | {"calcium_mol_l": reading(values, "calcium_mol_l")}
    choices = choose(values, n, options, preferred=np.full(n, NO_PAIR, dtype=np.int8),
                     carbon_unknown=np.zeros(n, dtype=bool))
    for choice in choices:
        for name, ph_column, rows in groups(values, np.where(pair == "", choice, NO_PAIR).astype(np.int8)):
            water = water_of(take_rows(values, rows), name, ph_column, (), options)
            good = believable(water) & ~water.is_marine
            for key, found in (("t_c", water.t_c), ("alkalinity", water.alkalinity_eq_l), ("carbon", water.dic_mol_l),
                               ("strength", water.ionic_strength_mol_l)):
                solved[key][rows[good]] = found[good]
            pair[rows[good]] = name
    if (pair == "").all():
        if (np.nan_to_num(reading(values, "salinity")) >= FRESH_BELOW).any():
            raise InputError("a works treats fresh water, of a salinity below 1; found salt water. "
                             "Correct the salinity.")
        there = [name for name, mask in has(values, n).items() if mask.any()]
        raise InputError(f"the raw water needs two of pH, alkalinity, carbon and pCO2 that fit together; found "
                         f"{', '.join(there) or 'none'}. Add another, or check these.")
    given = ionic_strength(values)[0]
    strength = np.where(np.isfinite(given), given, solved["strength"])
    magnesium = reading(values, "magnesium_mol_l")
    by_hardness = reading(values, "total_hardness_mol_l") - values["calcium_mol_l"]
    others = (name for name in acid_table() if f"{name}_mol_l" in values)  # the pair was solved with them
    totals = {name: reading(values, f"{name}_mol_l") for name in (*TOTALS, *others)}
    totals["magnesium"] = np.where(np.isfinite(magnesium), magnesium, np.maximum(by_hardness, 0.0))
    return Stream(solved["t_c"], solved["alkalinity"], solved["carbon"], totals, strength, pressure(values)), pair

"""A solved water: what is known of every row once its pH and its carbon are known. Rows are one-dimensional."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import exp10
from aquabuf.chem.acids import Acid
from aquabuf.engine.balance import Family, System, alkalinity_at, fractions
from aquabuf.engine.conditions import Conditions

__all__ = ["CARBONATE_FORMS", "PH_SCALES", "Dissolved", "Exchange", "State"]

Array = NDArray[np.float64]
Exchange = Literal["closed", "open"]

CARBONATE_FORMS = ("CO2", "HCO3-", "CO3--")
PH_SCALES = ("meter", "total", "seawater", "free")


@dataclass(frozen=True, slots=True, eq=False)
class Dissolved:
    """An acid and its total in every row. [mol/L]"""

    acid: Acid
    total: Array


@dataclass(frozen=True, slots=True, eq=False)
class State:
    """Rows of water with their conditions, totals and solution; nan where `status` is below 0.

    h in the variable of `Conditions`; dic and calcium and other ions in mol/L; alkalinity in eq/L.
    """

    conditions: Conditions
    acids: tuple[Dissolved, ...]
    ions: dict[str, Array]
    h: Array
    dic: Array
    alkalinity: Array
    residual: Array
    status: NDArray[np.int8]

    @property
    def families(self) -> tuple[Family, ...]:
        """The weak acids, carbonic acid apart, as the balance wants them."""
        return families_of(self.conditions, self.acids)

    def system(self, *, dic: Array | None = None, co2: Array | None = None) -> System:
        """Balance of this water, closed with its own carbon unless `dic` or a held `co2` [mol/L] is given."""
        c = self.conditions
        if co2 is None and dic is None:
            dic = self.dic
        return System(self.alkalinity, c.c_h, c.c_oh, c.k1, c.k2, dic=dic, co2=co2, families=self.families)

    def carbonate_fractions(self, h: Array | None = None) -> list[Array]:
        """Fractions of inorganic carbon as CO2, HCO3- and CO3--. [-]"""
        c = self.conditions
        return fractions((c.k1, c.k2), 1.0 / (self.h if h is None else h))

    @property
    def co2(self) -> Array:
        """Dissolved carbon dioxide, CO2 and H2CO3 together. [mol/L]"""
        return self.dic * self.carbonate_fractions()[0]

    def h_from_ph(self, ph: Array, scale: str = "meter") -> Array:
        """Hydrogen variable of a pH on one of PH_SCALES."""
        return exp10(-ph) / self.per_h(scale)

    def ph(self, scale: str = "meter") -> Array:
        """pH on one of PH_SCALES. [-]"""
        return -np.log10(self.h * self.per_h(scale))

    def per_h(self, scale: str) -> Array:
        """Factor from the hydrogen variable to the quantity that `scale` takes the logarithm of."""
        return per_h(self.conditions, scale)

    def alkalinity_at_ph(self, ph: Array, *, co2: Array | None = None) -> Array:
        """Alkalinity this water would have at a meter pH: its own carbon kept, or `co2` [mol/L] held. [eq/L]"""
        return alkalinity_at(self.system(co2=co2), self.h_from_ph(ph))


def per_h(c: Conditions, scale: str) -> Array:
    """Factor from the hydrogen variable to the quantity that `scale` takes the logarithm of. [-]"""
    if scale == "seawater":
        return np.where(c.is_marine, 1.0, c.free_per_h)
    return {"meter": c.activity_per_h, "total": c.total_per_h, "free": c.free_per_h}[scale]


def families_of(c: Conditions, acids: tuple[Dissolved, ...]) -> tuple[Family, ...]:
    """The balance's view of the weak acids in the water."""
    return tuple(Family(d.total, c.acid_constants(d.acid), d.acid.zero_level) for d in acids)

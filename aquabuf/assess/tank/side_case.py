"""A waste and the reagent that treats it, as plain numbers: what every side effect is worked out from."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from aquabuf.chem.acids import Acid, acid_table
from aquabuf.chem.metals import Metal, metals
from aquabuf.chem.products import Product
from aquabuf.engine.balance import fractions
from aquabuf.engine.conditions import Conditions, conditions
from aquabuf.errors import InputError

__all__ = ["CARBON", "NOTE", "SEVERITIES", "STOP", "WARNING", "Effect", "Treated"]

Array = NDArray[np.float64]

CARBON = "carbon"
NOTE, WARNING, STOP = "note", "warning", "stop"
SEVERITIES = (NOTE, WARNING, STOP)
HOURS_PER_DAY = 24.0
HOTTEST_C = 60.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Effect:
    """One side effect: its value, what it means, the rule it was judged or worked out by, and how grave it is."""

    name: str
    value: float
    unit: str
    words: str
    rule: str
    source: str
    severity: str = NOTE


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Treated:
    """A waste that a reagent brings from one pH to another. Amounts per liter of waste; reagent water is left out.

    dose_eq_l : equivalents of reagent, zero or more (an acid too); carbon dioxide by the bicarbonate it makes. [eq/L]
    strength : mass fraction at which the reagent is fed or thinned on site, for its heat; None where not known.
    totals : dissolved in the waste, by name: "carbon", weak acids, metals, ions. [mol/L]
    acids : other weak acids, for heat and the pH after stripping. [mol/L]
    held : base that everything but carbon and water holds at a pH, where a curve tells it, in place of acids. [eq/L]
    efficiency : share of a solid reagent that reacts; the rest is sludge.
    constants : of the mixture; ideal solution at t_c if not given.

    Raises InputError for a figure that is not a number, or below zero.
    """

    flow_m3_h: float
    t_c: float
    start_ph: float
    end_ph: float
    dose_eq_l: float
    product: Product
    strength: float | None = None
    totals: Mapping[str, float] = field(default_factory=dict)
    acids: Mapping[Acid, float] = field(default_factory=dict)
    held: Callable[[float], float] | None = None
    solids_g_l: float = 0.0
    efficiency: float = 1.0
    constants: Conditions | None = None

    def __post_init__(self) -> None:
        amounts = {"dose_eq_l": self.dose_eq_l, "flow_m3_h": self.flow_m3_h, "solids_g_l": self.solids_g_l,
                   **self.totals}
        for name, value in amounts.items():
            if not 0.0 <= value < np.inf:
                raise InputError(f"{name} must be zero or more; found {value:g}. Correct it, a dose of acid too is "
                                 "above "
                                 "zero.")
        for name, value in (("start_ph", self.start_ph), ("end_ph", self.end_ph)):
            if not -1.0 <= value <= 15.0:
                raise InputError(f"{name} must be from -1 to 15; found {value:g}. Correct it.")
        if not 0.0 < self.efficiency <= 1.0:
            raise InputError(f"the efficiency must be above 0 and at most 1; found {self.efficiency:g}. Give 95 % as "
                             "0.95.")
        if not self.product.adds["alkalinity"] and not self.product.adds.get(CARBON):
            raise InputError(f"a reagent must be a base or an acid; {self.product.name!r} is neither. Name another "
                             "product.")
        if not 0.0 <= self.t_c <= HOTTEST_C:
            raise InputError(f"the temperature must be from 0 to {HOTTEST_C:g} °C for the constants to hold; found "
                             f"{self.t_c:g}. Is it in °F?")
        if self.constants is None:
            object.__setattr__(self, "constants", conditions(self.t_c))

    @property
    def c(self) -> Conditions:
        """Constants of the mixture."""
        assert self.constants is not None  # set above
        return self.constants

    @property
    def pkw(self) -> float:
        """-log10 of [H+] [OH-]."""
        return -float(np.log10(self.c.c_h * self.c.c_oh))

    @property
    def mol_l(self) -> float:
        """Active substance that reacts. [mol/L]"""
        adds = self.product.adds
        return self.dose_eq_l / (abs(adds["alkalinity"]) or adds[CARBON])

    @property
    def is_acid(self) -> bool:
        """Whether the reagent lowers pH."""
        return self.product.adds["alkalinity"] <= 0.0

    @property
    def m3_d(self) -> float:
        """Flow. [m3/d]"""
        return HOURS_PER_DAY * self.flow_m3_h

    def added(self, name: str) -> float:
        """What the reagent brings. [mol/L]"""
        return self.product.adds.get(name, 0.0) * self.mol_l

    def total(self, name: str) -> float:
        """What waste and reagent bring together. [mol/L]"""
        return self.totals.get(name, 0.0) + self.added(name)

    @property
    def metals(self) -> dict[Metal, float]:
        """Metals of waste and reagent. [mol/L]"""
        return {m: self.total(name) for name, m in metals().items() if self.total(name) > 0.0}

    @property
    def weak_acids(self) -> dict[Acid, float]:
        """Weak acids of the waste, carbonic apart. [mol/L]"""
        found = {acid: self.totals[name] for name, acid in acid_table().items() if self.totals.get(name, 0.0) > 0.0}
        return found | dict(self.acids)

    def hydrogen(self, ph: float) -> float:
        """[H+] at a pH. [mol/L]"""
        return float(self.c.c_h) * 10.0**-ph

    def hydroxide(self, ph: float) -> float:
        """[OH-] at a pH. [mol/L]"""
        return float(self.c.c_oh) * 10.0**ph

    def carbonate_shares(self, ph: float) -> Array:
        """Shares of dissolved CO2, bicarbonate and carbonate."""
        return _shares((self.c.k1, self.c.k2), ph)

    def acid_shares(self, acid: Acid, ph: float) -> Array:
        """Shares of the forms of a weak acid, from fully protonated to bare."""
        return _shares(self.c.acid_constants(acid), ph)


def _shares(constants: tuple, ph: float) -> Array:
    k = [np.atleast_1d(np.asarray(x, dtype=float)) for x in constants]
    return np.array([float(np.ravel(a)[0]) for a in fractions(k, np.array([10.0**ph]))])

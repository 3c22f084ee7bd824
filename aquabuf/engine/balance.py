"""The proton balance: how much alkalinity each acid carries at a given hydrogen variable.

The balance is written with all terms positive, `surplus(h) = deficit(h)`:

    surplus = bases + OH- (+ |alkalinity| if negative)
    deficit = acids below their zero level + H+ (+ alkalinity if positive)

Both sides are sums of positive terms, so their ratio is well scaled however acid or alkaline the water is.
Arrays are one-dimensional rows here; concentrations in mol/L, constants in units of h.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.errors import InputError

__all__ = ["Family", "System", "alkalinity_at", "fractions", "moments", "protons_lost"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Family:
    """One acid in the water: its total [mol/L], conditional constants, and protons lost at the zero level."""

    total: Array
    k: tuple[Array, ...]
    zero: int

    def take(self, rows: slice | NDArray[np.intp]) -> Family:
        """The same acid for some of the rows."""
        return Family(self.total[rows], tuple(k[rows] for k in self.k), self.zero)


@dataclass(frozen=True, slots=True, eq=False)
class System:
    """The balance of many rows; exactly one of `dic` (closed) and `co2` (open: CO2 held) is given. [mol/L]"""

    alkalinity: Array
    c_h: Array
    c_oh: Array
    k1: Array
    k2: Array
    dic: Array | None = None
    co2: Array | None = None
    families: tuple[Family, ...] = ()

    def take(self, rows: slice | NDArray[np.intp]) -> System:
        """The balance of some of the rows."""
        def pick(v: Array | None) -> Array | None:
            return None if v is None else v[rows]
        return System(self.alkalinity[rows], self.c_h[rows], self.c_oh[rows], self.k1[rows], self.k2[rows],
                      pick(self.dic), pick(self.co2), tuple(f.take(rows) for f in self.families))

    @property
    def carbon(self) -> Array:
        """The carbon that is given: total inorganic carbon, or the CO2 that is held. [mol/L]"""
        given = self.co2 if self.dic is None else self.dic
        if given is None:
            raise InputError("a balance needs dic or co2; neither is given. Pass zeros for water without carbon.")
        return given

    def sides(self, h: Array) -> tuple[Array, Array, Array, Array]:
        """Surplus and deficit at `h`, and their slopes against ln h. [eq/L]"""
        inv = 1.0 / h
        surplus = self.c_oh * inv
        d_surplus = -surplus
        carbonate, d_carbonate = self._carbonate(inv)
        surplus = surplus + carbonate + np.maximum(-self.alkalinity, 0.0)
        d_surplus += d_carbonate
        d_deficit = self.c_h * h
        deficit = d_deficit + np.maximum(self.alkalinity, 0.0)
        for f in self.families:
            if len(f.k) > 1:
                deficit, d_deficit = _add_polyprotic(f, inv, surplus, d_surplus, deficit, d_deficit)
                continue
            base = f.k[0] + h
            np.divide(f.k[0], base, out=base)  # in place: temporaries are what this loop costs
            if f.zero == 0:
                part = f.total * base
                surplus += part
                np.subtract(1.0, base, out=base)
                base *= part
                d_surplus -= base
            else:
                part = f.total * (1.0 - base)
                deficit = deficit + part
                base *= part
                d_deficit = d_deficit + base
        return surplus, deficit, d_surplus, d_deficit

    def _carbonate(self, inv: Array) -> tuple[Array, Array]:
        """Carbonate alkalinity and its slope against ln h, closed or open."""
        r = self.k1 * inv
        q2 = 2.0 * self.k2 * inv
        if self.dic is None:
            bicarbonate = self.carbon * r
            return bicarbonate * (1.0 + q2), -bicarbonate * (1.0 + 2.0 * q2)
        per_total = r / (1.0 + r + 0.5 * r * q2)
        charge = per_total * (1.0 + q2)
        variance = per_total * (1.0 + 2.0 * q2) - charge * charge
        return self.dic * charge, -self.dic * variance


def _add_polyprotic(f: Family, inv: Array, surplus: Array, d_surplus: Array, deficit: Array, d_deficit: Array,
                    ) -> tuple[Array, Array]:
    """Add an acid of several steps to both sides; the surplus is changed in place.

    Forms weigh K1..Kj / h^j; a side is total times its weighted protons over all weights, and the slope of a weight
    against ln h is -j times itself.
    """
    weight = f.k[0] * inv
    whole, protons = 1.0 + weight, weight.copy()
    above: Array | float = 0.0
    above_lost: Array | float = 0.0
    below: Array | float = float(f.zero)
    below_lost: Array | float = 0.0
    for j in range(1, len(f.k) + 1):
        if j > 1:
            weight = weight * f.k[j - 1]
            weight *= inv
            whole += weight
            protons += j * weight
        if j > f.zero:
            part = weight if j == f.zero + 1 else (j - f.zero) * weight
            above, above_lost = above + part, above_lost + j * part
        elif j < f.zero:
            below, below_lost = below + (f.zero - j) * weight, below_lost + (f.zero - j) * j * weight
    np.divide(1.0, whole, out=whole)  # in place: temporaries are what this costs
    protons *= whole                  # mean protons lost
    whole *= f.total                  # total over the sum of weights
    if f.zero:
        deficit = deficit + whole * below
        d_deficit = d_deficit + whole * (protons * below - below_lost)
    if f.zero < len(f.k):
        surplus += whole * above
        protons *= above
        protons -= above_lost
        protons *= whole
        d_surplus += protons
    return deficit, d_deficit


def fractions(k: Sequence[Array], inv_h: Array) -> list[Array]:
    """Fraction of an acid in each of its forms, from fully protonated to bare. [-]"""
    weights = [np.ones_like(inv_h)]
    for step in k:
        weights.append(weights[-1] * step * inv_h)
    whole = sum(weights[1:], start=weights[0])
    return [w / whole for w in weights]


def protons_lost(alpha: Sequence[Array]) -> Array:
    """Mean number of protons lost per molecule. [-]"""
    return sum((j * a for j, a in enumerate(alpha[1:], start=1)), start=np.zeros_like(alpha[0]))


def moments(alpha: Sequence[Array]) -> tuple[Array, Array, Array]:
    """Mean, variance and third central moment of the number of protons lost. [-]"""
    if len(alpha) == 2:
        base = alpha[1]
        variance = alpha[0] * base
        return base, variance, variance * (alpha[0] - base)
    mean = protons_lost(alpha)
    variance = third = np.zeros_like(mean)
    for j, a in enumerate(alpha):
        off = j - mean
        part = a * off * off
        variance = variance + part
        third = third + part * off
    return mean, variance, third


def alkalinity_at(system: System, h: Array) -> Array:
    """Alkalinity that the water of `system` has at `h`, whatever `system.alkalinity` says. [eq/L]"""
    inv = 1.0 / h
    r, q2 = system.k1 * inv, 2.0 * system.k2 * inv
    bicarbonate = system.carbon * r
    if system.dic is not None:
        bicarbonate = bicarbonate / (1.0 + r + 0.5 * r * q2)
    total = bicarbonate * (1.0 + q2) + system.c_oh * inv - system.c_h * h
    for f in system.families:
        total += f.total * (protons_lost(fractions(f.k, inv)) - f.zero)
    return total

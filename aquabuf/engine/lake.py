"""Charge balance of dilute natural water: carbonate and water with organic anions and aluminum.

ANC here is the charge-balance one, the charge of strong base cations less that of strong acid anions:

    ANC = HCO3- + 2 CO3-- + OH- - H+ + organic anions - charge of dissolved aluminum

Arrays may have any shapes that broadcast with those of the conditions, such as (lakes, 1) with (lakes, draws).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10, exp10
from aquabuf.chem.aluminum import aluminum_charge, charge_and_slope
from aquabuf.chem.organic import OrganicModel
from aquabuf.engine.balance import System, alkalinity_at
from aquabuf.engine.conditions import Conditions

__all__ = ["LakeBalance"]

Array = NDArray[np.float64]

PH_LOWEST, PH_HIGHEST = 1.0, 13.0  # a root outside is reported as none
MAX_STEPS = 60
STEP_DONE = 1e-6    # pH; Newton's next step is below rounding
LARGEST_STEP = 2.0  # pH
PATIENCE = 8        # steps before a stalled row is halved instead


@dataclass(frozen=True, slots=True, eq=False)
class LakeBalance:
    """Constants and weak acids of each water. DOC [mg/L], aluminum [mol/L]; both must be numbers, zero for none."""

    conditions: Conditions
    doc_mg_l: Array
    aluminum_mol_l: Array
    organic: OrganicModel

    def h(self, ph: Array) -> Array:
        """Hydrogen variable of the conditions at a meter pH."""
        return exp10(-ph) / self.conditions.activity_per_h

    def beside_carbonate(self, ph: Array) -> Array:
        """Charge of organic anions less that of aluminum. [eq/L]"""
        return self.organic.anion_eq_l(self.doc_mg_l, ph) - self.aluminum_mol_l * aluminum_charge(ph)

    def without_carbon(self, ph: Array) -> Array:
        """ANC that this water would have at `ph` without inorganic carbon. [eq/L]"""
        h = self.h(ph)
        return self.conditions.c_oh / h - self.conditions.c_h * h + self.beside_carbonate(ph)

    def anc(self, ph: Array, *, dic: Array | None = None, co2: Array | None = None) -> Array:
        """ANC at `ph`, closed with total carbon `dic` or open with dissolved `co2` held [mol/L]. [eq/L]"""
        return alkalinity_at(self._system(dic, co2), self.h(ph)) + self.beside_carbonate(ph)

    def carbonate_per_dic(self, ph: Array) -> Array:
        """Carbonate alkalinity per mole of inorganic carbon at `ph`. [eq/mol]"""
        r, q = self._ratios(ph)
        return r * (1.0 + 2.0 * q) / (1.0 + r * (1.0 + q))

    def carbonate_per_co2(self, ph: Array) -> Array:
        """Carbonate alkalinity per mole of dissolved CO2 at `ph`. [eq/mol]"""
        r, q = self._ratios(ph)
        return r * (1.0 + 2.0 * q)

    def co2_per_dic(self, ph: Array) -> Array:
        """Share of the inorganic carbon that is CO2 at `ph`. [-]"""
        r, q = self._ratios(ph)
        return 1.0 / (1.0 + r * (1.0 + q))

    def _ratios(self, ph: Array) -> tuple[Array, Array]:
        inverse = 1.0 / self.h(ph)
        return self.conditions.k1 * inverse, self.conditions.k2 * inverse

    def intensity(self, ph: Array, *, dic: Array | None = None, co2: Array | None = None) -> Array:
        """Buffer intensity dANC/dpH at `ph`, organic acids and aluminum included. [eq/L per pH]"""
        _, _, d_surplus, d_deficit = self._system(dic, co2).sides(self.h(ph))
        return LN10 * (d_deficit - d_surplus) + self._slope_beside(ph)

    def _slope_beside(self, ph: Array) -> Array:
        return self.doc_mg_l * self.organic.charge(ph)[1] - self.aluminum_mol_l * charge_and_slope(ph)[1]

    def _system(self, dic: Array | None, co2: Array | None) -> System:
        c = self.conditions
        return System(np.zeros(1), c.c_h, c.c_oh, c.k1, c.k2, dic=dic, co2=co2)

    def ph(self, anc: Array, *, dic: Array | None = None, co2: Array | None = None, start: Array | float = 6.0,
           ) -> Array:
        """pH at which the water has `anc` [eq/L]; nan where there is none from 1 to 13.

        ANC rises with pH, so there is one root. Newton's method on the logarithm of the two sides of the balance, each
        a sum of positive terms, from `start` inside a bracket that only shrinks.
        """
        system = self._system(dic, co2)
        shape = np.broadcast_shapes(np.shape(anc), np.shape(system.carbon), np.shape(start), *(
            v.shape for v in (self.conditions.k1, self.doc_mg_l, self.aluminum_mol_l)))
        x = np.where(np.isfinite(start), np.broadcast_to(start, shape), 6.0)
        low, high = np.full(shape, PH_LOWEST - 1.0), np.full(shape, PH_HIGHEST + 1.0)
        last = np.full(shape, np.inf)
        with np.errstate(invalid="ignore", divide="ignore"):
            for step in range(MAX_STEPS):
                gap, slope = self._gap(system, anc, x)
                np.copyto(high, x, where=gap > 0.0)
                np.copyto(low, x, where=gap < 0.0)
                new = x - np.clip(gap / slope, -LARGEST_STEP, LARGEST_STEP)
                halve = ~((new >= low) & (new <= high))
                if step > PATIENCE:
                    halve |= np.abs(new - x) > 0.5 * last
                np.copyto(new, 0.5 * (low + high), where=halve)
                np.copyto(new, x, where=last <= STEP_DONE)  # rows that are done do not wait for their neighbors
                last, x = np.abs(new - x), new
                if not (last > STEP_DONE).any():
                    break
            found = np.isfinite(gap) & (x > PH_LOWEST) & (x < PH_HIGHEST)
        return np.where(found, x, np.nan)

    def _gap(self, system: System, anc: Array, ph: Array) -> tuple[Array, Array]:
        """Logarithm of the positive over the negative side of the balance, and its slope against pH."""
        surplus, deficit, d_surplus, d_deficit = system.sides(self.h(ph))
        organic, organic_slope = self.organic.charge(ph)
        more = surplus + self.doc_mg_l * organic + np.maximum(-anc, 0.0)
        less = deficit + np.maximum(anc, 0.0)
        d_more, d_less = -LN10 * d_surplus + self.doc_mg_l * organic_slope, -LN10 * d_deficit
        if self.aluminum_mol_l.any():
            charge, slope = charge_and_slope(ph)
            cation = charge > 0.0
            more = more + self.aluminum_mol_l * np.where(cation, 0.0, -charge)
            less = less + self.aluminum_mol_l * np.where(cation, charge, 0.0)
            d_more = d_more - self.aluminum_mol_l * np.where(cation, 0.0, slope)
            d_less = d_less + self.aluminum_mol_l * np.where(cation, slope, 0.0)
        return np.log(more / less), d_more / more - d_less / less

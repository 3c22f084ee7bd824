"""The pH at which a sparingly soluble base stops, and the one below which carbon dioxide cannot bring a water.

Each is the saturated water itself, so no dose passes it. Constants come from `Conditions`; with those at zero ionic
strength the results are ideal. In strong wastes activities lift the end of limestone by about 0.2.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import exp10
from aquabuf.chem.activity import log_gamma_davies
from aquabuf.chem.fresh import ksp_calcite
from aquabuf.chem.solids import ksp_brucite
from aquabuf.engine.conditions import Conditions

__all__ = [
    "brucite_ksp", "calcite_ksp", "co2_lowest_ph", "hydroxide_ceiling_ph", "hydroxide_ksp_of_solubility",
    "limestone_end_ph",
]

Array = NDArray[np.float64]

PH_RANGE = (-1.0, 15.0)
HALVINGS = 60
NEWTON_STEPS = 60


def _gamma(c: Conditions, charge: int) -> Array:
    return exp10(log_gamma_davies(charge, c.ionic_strength_mol_l, c.debye_huckel_a))


def calcite_ksp(c: Conditions) -> Array:
    """Solubility product of calcite in concentrations. [(mol/L)^2] `ksp_calcite` with Davies activities."""
    return ksp_calcite(c.t_c) * (c.density_kg_l / _gamma(c, 2)) ** 2


def brucite_ksp(c: Conditions) -> Array:
    """Solubility product of magnesium hydroxide in concentrations. [(mol/L)^3] `ksp_brucite` with Davies activities."""
    return ksp_brucite(c.t_c) * c.density_kg_l**3 / (_gamma(c, 2) * _gamma(c, 1) ** 2)


def hydroxide_ksp_of_solubility(mol_l: ArrayLike) -> Array:
    """Solubility product 4 s^3 of a hydroxide M(OH)2 that dissolves to so much in pure water. [(mol/L)^3]"""
    return 4.0 * np.asarray(mol_l, dtype=float) ** 3


def hydroxide_ceiling_ph(ksp: ArrayLike, acid_eq_l: ArrayLike, c: Conditions) -> Array:
    """Highest pH that a hydroxide M(OH)2 brings a strong acid to, its own metal ion holding it back. [-]

    M++ is half of acid and hydroxide, so OH^2 (acid + OH) = 2 Ksp. Follows from the definition of Ksp; other sources of
    the metal and its pairs with sulfate and hydroxide are left out. ksp in concentrations; acid_eq_l 0 or more.
    """
    twice, acid = 2.0 * np.asarray(ksp, dtype=float), np.maximum(np.asarray(acid_eq_l, dtype=float), 0.0)
    oh = np.cbrt(twice) + 0.0 * acid
    for _ in range(NEWTON_STEPS):  # from above on a convex curve: falls to the root and stays
        step = (oh * oh * (acid + oh) - twice) / (oh * (2.0 * acid + 3.0 * oh))
        oh = oh - step
        if not (np.abs(step) > 1e-12 * oh).any():
            break
    return np.log10(oh / c.c_oh)


def _root(gap: Callable[[Array], Array], shape: tuple[int, ...]) -> Array:
    """pH at which a gap that rises with pH is zero; halved."""
    low, high = np.full(shape, PH_RANGE[0]), np.full(shape, PH_RANGE[1])
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        above = gap(middle) > 0.0
        low, high = np.where(above, low, middle), np.where(above, middle, high)
    return 0.5 * (low + high)


def _open_base(ph: Array, pco2_atm: Array, c: Conditions) -> tuple[Array, Array]:
    """Base of a water in balance with a pressure of CO2, and its carbonate. [eq/L], [mol/L]"""
    h = exp10(-ph)
    bicarbonate = c.k0 * pco2_atm * c.k1 / h
    carbonate = bicarbonate * c.k2 / h
    return bicarbonate + 2.0 * carbonate + c.c_oh / h - c.c_h * h, carbonate


def limestone_end_ph(acid_eq_l: ArrayLike, pco2_atm: ArrayLike, c: Conditions, ksp: ArrayLike | None = None) -> Array:
    """pH at which strong acid has dissolved all the limestone it can, under a pressure of CO2. [-]

    Calcite saturation with the charges balanced: 2 Ca++ = acid + base, Ca++ = Ksp / CO3--. A bed without aeration
    stands at about 1 atm, what bubbles off. ksp : in concentrations; that of calcite if not given.
    """
    acid, pressure = np.asarray(acid_eq_l, dtype=float), np.asarray(pco2_atm, dtype=float)
    k = calcite_ksp(c) if ksp is None else np.asarray(ksp, dtype=float)

    def gap(ph: Array) -> Array:
        base, carbonate = _open_base(ph, np.where(pressure > 0.0, pressure, 1.0), c)
        return base + acid - 2.0 * k / carbonate
    found = _root(gap, np.broadcast_shapes(acid.shape, pressure.shape, k.shape))
    return np.where(np.isfinite(acid) & (pressure > 0.0), found, np.nan)


def co2_lowest_ph(base_eq_l: ArrayLike, pco2_atm: ArrayLike, c: Conditions) -> Array:
    """pH of a water of this base saturated with CO2 at a pressure: no dose of gas brings it lower. [-]

    Henry's law and the carbonic acid constants. base_eq_l : 0 or more.
    """
    base, pressure = np.asarray(base_eq_l, dtype=float), np.asarray(pco2_atm, dtype=float)
    found = _root(lambda ph: _open_base(ph, pressure, c)[0] - base, np.broadcast_shapes(base.shape, pressure.shape))
    return np.where(np.isfinite(base) & (pressure > 0.0), found, np.nan)

"""Acidity of mine drainage from its pH and dissolved metals, net of alkalinity, and as a load.

Each metal counts with the charge that hydroxide must meet before it is out of solution; iron(II) and manganese(II) as
such, since oxidation followed by precipitation sets the same two protons free. The sum counts all of iron(III) and
aluminum as free ions (too much where some is hydrolyzed) and no hydrogen sulfate (too little); in mine waters the two
nearly cancel (Kirby & Cravotta 2005, abstract).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import exp10
from aquabuf.chem.products import molar_mass
from aquabuf.errors import InputRangeError

__all__ = [
    "acidity_eq_l", "acidity_mg_l_caco3", "caco3_mg_l_of_eq_l", "load_kg_d", "load_short_tons_yr", "net_acidity_eq_l",
]

Array = NDArray[np.float64]

HOURS_PER_DAY, DAYS_PER_YEAR = 24.0, 365.0
KG_PER_SHORT_TON = 907.18474  # 2000 avoirdupois pounds, exact
CHARGES = {"iron_ii": 2.0, "iron_iii": 3.0, "aluminum": 3.0, "manganese": 2.0}


def _not_negative(**values: ArrayLike) -> dict[str, Array]:
    checked = {}
    for name, value in values.items():
        v = np.asarray(value, dtype=float)
        bad = v < 0.0
        if bad.any():
            first = np.atleast_1d(v)[np.atleast_1d(bad)][0]
            raise InputRangeError(f"{name} must be 0 or more; found {first:g}. Enter a value below detection as 0 or "
                                  "as half the limit.", bad)
        checked[name] = v
    return checked


def acidity_mg_l_caco3(
    ph: ArrayLike, iron_ii_mg_l: ArrayLike = 0.0, iron_iii_mg_l: ArrayLike = 0.0, aluminum_mg_l: ArrayLike = 0.0,
    manganese_mg_l: ArrayLike = 0.0,
) -> Array:
    """Acidity with the rounded atomic weights in which it is printed. [mg/L as CaCO3]

    50 (1000 10^-pH + (2 Fe2+ + 3 Fe3+)/56 + 2 Mn/55 + 3 Al/27), metals in mg/L. Source: Kirby & Cravotta 2005, Appl.
    Geochem. (formula in their conference abstract of 2004). About 0.3 % below `acidity_eq_l`.

    Raises InputRangeError for a metal below zero.
    """
    m = _not_negative(iron_ii_mg_l=iron_ii_mg_l, iron_iii_mg_l=iron_iii_mg_l, aluminum_mg_l=aluminum_mg_l,
                      manganese_mg_l=manganese_mg_l)
    iron = (2.0 * m["iron_ii_mg_l"] + 3.0 * m["iron_iii_mg_l"]) / 56.0
    return 50.0 * (1e3 * exp10(-np.asarray(ph, dtype=float)) + iron + 2.0 * m["manganese_mg_l"] / 55.0
                   + 3.0 * m["aluminum_mg_l"] / 27.0)


def acidity_eq_l(
    ph: ArrayLike, iron_ii_mol_l: ArrayLike = 0.0, iron_iii_mol_l: ArrayLike = 0.0, aluminum_mol_l: ArrayLike = 0.0,
    manganese_mol_l: ArrayLike = 0.0,
) -> Array:
    """The same sum without rounding: 10^-pH and each metal times its charge. [eq/L]

    Raises InputRangeError for a metal below zero.
    """
    m = _not_negative(iron_ii_mol_l=iron_ii_mol_l, iron_iii_mol_l=iron_iii_mol_l, aluminum_mol_l=aluminum_mol_l,
                      manganese_mol_l=manganese_mol_l)
    metals = sum(charge * m[f"{name}_mol_l"] for name, charge in CHARGES.items())
    return exp10(-np.asarray(ph, dtype=float)) + metals


def net_acidity_eq_l(acidity: ArrayLike, alkalinity_eq_l: ArrayLike) -> Array:
    """Computed acidity less measured alkalinity; above zero the water turns acid once its metals are out. [eq/L]

    A titrated hot-peroxide acidity is net already and keeps its negative values: never take it from the alkalinity
    once more. Source: Kirby & Cravotta 2005, abstract.
    """
    return np.asarray(acidity, dtype=float) - np.asarray(alkalinity_eq_l, dtype=float)


def caco3_mg_l_of_eq_l(eq_l: ArrayLike) -> Array:
    """Equivalents as the mass of calcium carbonate that has as many, two per mole. [mg/L as CaCO3]"""
    return np.asarray(eq_l, dtype=float) * 0.5e3 * molar_mass("CaCO3")


def load_kg_d(flow_m3_h: ArrayLike, mg_l: ArrayLike) -> Array:
    """Load of a concentration in a flow, as CaCO3 where that is; negative where net acidity is. [kg/d]"""
    flow = _not_negative(flow_m3_h=flow_m3_h)["flow_m3_h"]
    return 1e-3 * HOURS_PER_DAY * flow * np.asarray(mg_l, dtype=float)


def load_short_tons_yr(flow_m3_h: ArrayLike, mg_l: ArrayLike) -> Array:
    """The same load in US tons of 2000 lb per year of 365 days. [short ton/yr]

    The mining rule gpm times mg/L times 0.0022 (recalled) has its factor rounded up from 0.0021932.
    """
    return load_kg_d(flow_m3_h, mg_l) * DAYS_PER_YEAR / KG_PER_SHORT_TON

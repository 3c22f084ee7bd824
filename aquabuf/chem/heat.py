"""Heat of neutralization and of dilution, and how far it warms water. Heat given off is positive; kJ.

Enthalpies at 25 °C and infinite dilution. Water is counted at 4.18 kJ per liter and kelvin; salts lower that by some
per cent, so that strong wastes warm a little more.
"""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.chem.fresh import k1_carbonic, k2_carbonic
from aquabuf.chem.products import molar_mass
from aquabuf.chem.properties import GAS_CONSTANT, kelvin
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = [
    "CO2_DISSOLVING_KJ_MOL", "NEUTRALIZATION_KJ_EQ", "SLAKING_KJ_G", "SULFURIC_DILUTION_KJ_MOL", "WATER_KJ_L_K",
    "carbonic_enthalpies_kj_mol", "dilution_heat_kj_mol", "neutralization_heat_kj_eq", "sulfuric_dilution_kj_mol",
    "temperature_rise_k",
]

Array = NDArray[np.float64]

NEUTRALIZATION_KJ_EQ = 285.830 - 230.015  # H+ + OH- = H2O, standard enthalpies of formation (recalled)
WATER_KJ_L_K = 4.18                       # heat capacity of a liter of water
SULFURIC_DILUTION_KJ_MOL = 909.3 - 814.0  # H2SO4(l) to infinite dilution, both protons off (worked example, printed)
SLAKING_KJ_G = 1.14                       # CaO + H2O = Ca(OH)2 (recalled) [kJ/g CaO]
CO2_DISSOLVING_KJ_MOL = 413.26 - 393.51   # CO2(g) = CO2(aq), CODATA enthalpies of formation (recalled)

THOMSEN_KJ_MOL, THOMSEN_WATERS = 74.73, 1.7983  # heat of mixing 74.73 n / (n + 1.7983); Thomsen (recalled)
VANT_HOFF_STEP = 1.0                      # °C to each side
BEYOND = 1.2                              # how far past the last point of a table it is read on


def neutralization_heat_kj_eq(ionization_kj_mol: ArrayLike = 0.0) -> Array:
    """Heat per equivalent of hydroxide that meets an acid of this enthalpy of ionization. [kJ/eq]

    Hess: water forms, the acid is taken apart. Zero for a strong acid; acids that take heat to ionize (HCN, H2S, NH4+)
    give off less.
    """
    return NEUTRALIZATION_KJ_EQ - np.asarray(ionization_kj_mol, dtype=float)


def temperature_rise_k(heat_kj_l: ArrayLike, capacity_kj_l_k: ArrayLike = WATER_KJ_L_K) -> Array:
    """Warming of a liter by a heat, nothing lost to the surroundings. [K]"""
    return np.asarray(heat_kj_l, dtype=float) / np.asarray(capacity_kj_l_k, dtype=float)


def sulfuric_dilution_kj_mol(water_per_acid: ArrayLike) -> Array:
    """Heat that sulfuric acid still gives off to infinite dilution, by moles of water it holds already. [kJ/mol]

    What pure acid gives off less Thomsen's heat of mixing. With many waters about 22 are left, which is the second
    proton coming off; within 3 of tabulated enthalpies of formation (recalled).
    """
    n = np.asarray(water_per_acid, dtype=float)
    return SULFURIC_DILUTION_KJ_MOL - THOMSEN_KJ_MOL * n / (n + THOMSEN_WATERS)


def carbonic_enthalpies_kj_mol(t_c: float = 25.0) -> tuple[float, float]:
    """Enthalpies of the two ionizations of carbonic acid, from its constants by van 't Hoff's equation. [kJ/mol]"""
    low, high = t_c - VANT_HOFF_STEP, t_c + VANT_HOFF_STEP
    inverse = 1.0 / kelvin(low) - 1.0 / kelvin(high)
    first, second = (float(1e-3 * GAS_CONSTANT * np.log(k(high) / k(low)) / inverse) for k in (k1_carbonic,
                                                                                               k2_carbonic))
    return first, second


@cache
def _points(formula: str) -> tuple[Array, Array]:
    rows = [row for row in read_table("dilution_heats") if row["formula"] == formula]
    molality, heat = (np.array([float(row[cell]) for row in rows]) for cell in ("molality_mol_kg", "kj_mol"))
    return molality, heat


def dilution_heat_kj_mol(formula: str, strength: float) -> float:
    """Heat that a reagent solution gives off when it is diluted without end. [kJ/mol]

    strength : mass fraction of the active substance, above 0 to 1. [-] H2SO4 as `sulfuric_dilution_kj_mol`; others by
    straight lines over molality between the points of `data/dilution_heats.csv`, read on by a fifth past the last; nan
    for a substance or strength that it does not have.

    Raises InputError for a strength that is no mass fraction.
    """
    if not 0.0 < strength <= 1.0:
        raise InputError(f"the strength of {formula} must be a mass fraction above 0 and at most 1; found "
                         f"{strength:g}. "
                         "Give 50 % as 0.5.")
    if formula == "H2SO4":
        water = (1.0 - strength) / molar_mass("H2O")
        return float(sulfuric_dilution_kj_mol(water / (strength / molar_mass(formula))))
    molality, heat = _points(formula)
    if not molality.size or strength == 1.0:
        return np.nan
    m = 1e3 * strength / (1.0 - strength) / molar_mass(formula)
    if m > BEYOND * molality[-1]:
        return np.nan
    slope = (heat[-1] - heat[-2]) / (molality[-1] - molality[-2])
    return float(np.interp(m, molality, heat) + slope * max(m - molality[-1], 0.0))

"""What sea salt brings along, and the pH scales of sea water.

Totals are in mol per kg of solution and proportional to practical salinity. Rivers with their own calcium, sulfate or
boron break the proportion at low salinity: a measured total always wins.
"""

from collections.abc import Mapping
from functools import cache
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.chem.properties import kelvin
from aquabuf.tables import read_table

__all__ = [
    "boron_lee", "boron_uppstrom", "calcium_of_seawater", "equivalents_per_chloride", "equivalents_per_sodium",
    "fluoride_of_seawater", "free_to_seawater_scale", "free_to_total_scale", "hydrogen_activity_takahashi",
    "ionic_strength_seawater", "per_kg_solution", "sulfate_of_seawater",
]

CHLORINITY_RATIO = 1.80655  # practical salinity over chlorinity, by definition


def _per_salinity(grams_per_chlorinity: float, molar_mass: float, salinity: ArrayLike) -> NDArray[np.float64]:
    return grams_per_chlorinity / molar_mass / CHLORINITY_RATIO * np.asarray(salinity, dtype=float)


def boron_uppstrom(salinity: ArrayLike) -> NDArray[np.float64]:
    """Total boron, ratio 0.232 mg/kg per unit chlorinity. [mol/kg] Uppström 1974, Deep-Sea Res. 21:161."""
    return _per_salinity(0.000232, 10.811, salinity)


def boron_lee(salinity: ArrayLike) -> NDArray[np.float64]:
    """Total boron, ratio 0.2414 mg/kg per unit chlorinity. [mol/kg] Lee et al. 2010, GCA 74:1801, abstract."""
    return _per_salinity(0.0002414, 10.811, salinity)


def sulfate_of_seawater(salinity: ArrayLike) -> NDArray[np.float64]:
    """Total sulfate. [mol/kg] Morris & Riley 1966 (recalled)."""
    return _per_salinity(0.1400, 96.062, salinity)


def fluoride_of_seawater(salinity: ArrayLike) -> NDArray[np.float64]:
    """Total fluoride. [mol/kg] Riley 1965 (recalled)."""
    return _per_salinity(0.000067, 18.998, salinity)


def calcium_of_seawater(salinity: ArrayLike) -> NDArray[np.float64]:
    """Total calcium. [mol/kg] Riley & Tongudai 1967 (recalled)."""
    return _per_salinity(0.02127, 40.078, salinity)


def ionic_strength_seawater(salinity: ArrayLike) -> NDArray[np.float64]:
    """Ionic strength of sea water. [mol/kg of water] DOE 1994 handbook (recalled)."""
    s = np.asarray(salinity, dtype=float)
    return 19.924 * s / (1000.0 - 1.005 * s)


def per_kg_solution(salinity: ArrayLike) -> NDArray[np.float64]:
    """Kilograms of water per kilogram of solution, 1 - 0.001005 S. [-]"""
    return 1.0 - 0.001005 * np.asarray(salinity, dtype=float)


def free_to_total_scale(sulfate: ArrayLike, k_bisulfate: ArrayLike) -> NDArray[np.float64]:
    """[H]total / [H]free = 1 + TS/KS, KS on the free scale. [-] Definition, Millero 2010 abstract."""
    return 1.0 + np.asarray(sulfate, dtype=float) / np.asarray(k_bisulfate, dtype=float)


def free_to_seawater_scale(
    sulfate: ArrayLike, k_bisulfate: ArrayLike, fluoride: ArrayLike, k_fluoride: ArrayLike,
) -> NDArray[np.float64]:
    """[H]seawater / [H]free = 1 + TS/KS + TF/KF, both constants on the free scale. [-] Definition."""
    return free_to_total_scale(sulfate, k_bisulfate) + np.asarray(fluoride, dtype=float) / np.asarray(
        k_fluoride, dtype=float)


def hydrogen_activity_takahashi(t_c: ArrayLike, salinity: ArrayLike) -> NDArray[np.float64]:
    """Meter activity of H+ over its seawater-scale concentration, fH. [-]

    Source: Takahashi et al. 1982 (recalled). Depends on the electrode: treat as ± 0.02 in pH or worse.
    Made for sea water; below about salinity 6 a Debye-Hückel type equation is nearer (`engine.conditions`).
    """
    t = kelvin(t_c)
    s = np.asarray(salinity, dtype=float)
    return 1.2948 - 0.002036 * t + (0.0004607 - 0.000001475 * t) * s * s


@cache
def equivalents_per_chloride() -> Mapping[str, float]:
    """Equivalents of each ion that come with one of chloride in sea water, by name of the ion table. [-]"""
    return _equivalents("chloride")


@cache
def equivalents_per_sodium() -> Mapping[str, float]:
    """Equivalents of each ion that come with one of sodium in sea water, by name of the ion table. [-]"""
    return _equivalents("sodium")


def _equivalents(tracer: str) -> Mapping[str, float]:
    rows = (row for row in read_table("sea_salt_ratios") if row["tracer"] == tracer)
    return MappingProxyType({row["ion"]: float(row["ratio"]) for row in rows})

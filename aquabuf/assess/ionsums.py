"""Sums over ions and what is allowed of them: conductivity, balance of charges."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import exp10
from aquabuf.chem.activity import log_gamma_davies
from aquabuf.tables import read_table

__all__ = ["conductivity_factor", "conductivity_of_ions", "most_conductivity_percent", "most_imbalance_percent"]

Array = NDArray[np.float64]

SM_2510_A = 0.5  # Debye-Hückel slope that the method uses at 25 °C


def conductivity_of_ions(charges: Mapping[str, Array], ionic_strength_mol_l: Array) -> Array:
    """Conductivity at 25 °C from the charge of each ion [eq/L], by name of the ion table; nan counts as none. [µS/cm]

    Sum of equivalent conductivities times the square of a monovalent activity coefficient at 25 °C, Standard Methods
    2510 (recalled). At zero ionic strength it is the sum for infinite dilution.
    """
    total = np.zeros(np.shape(ionic_strength_mol_l))
    for row in read_table("ions"):
        if row["name"] in charges and row["conductivity_s_cm2_eq"]:
            total = total + np.nan_to_num(charges[row["name"]]) * float(row["conductivity_s_cm2_eq"]) * 1e3
    return total * conductivity_factor(ionic_strength_mol_l)


def conductivity_factor(ionic_strength_mol_l: Array) -> Array:
    """What ions conduct at an ionic strength over infinite dilution: Standard Methods 2510 (recalled). [-]"""
    return exp10(2.0 * log_gamma_davies(1, ionic_strength_mol_l, SM_2510_A))


def most_imbalance_percent(total_ueq_l: Array) -> Array:
    """Largest ion imbalance that is accepted, by all ions together [µeq/L]: Hillman et al. 1986 (recalled). [%]"""
    return np.where(total_ueq_l < 50.0, 60.0, np.where(total_ueq_l <= 100.0, 30.0, 15.0))


def most_conductivity_percent(measured_us_cm: Array) -> Array:
    """Largest accepted distance of computed from measured conductivity: Hillman et al. 1986 (recalled). [%]"""
    return np.where(measured_us_cm < 5.0, 50.0, np.where(measured_us_cm <= 30.0, 30.0, 20.0))

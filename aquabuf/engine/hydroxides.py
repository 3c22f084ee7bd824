"""A metal that falls out as hydroxide, as a table for `engine.readout`."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from aquabuf.chem.metals import PKW, Metal, complex_at, free_at
from aquabuf.engine.readout import GRID_PH, MetalTable
from aquabuf.errors import InputError

__all__ = ["metal_table"]


def metal_table(metal: Metal, per_unit: ArrayLike, *, pkw: float = PKW) -> MetalTable:
    """Solubility of a hydroxide on GRID_PH. [mol/L]

    Ideal activities of the metal ions; `pkw` may be conditional, -log10 of [H+] times [OH-] at 10^-pH, which carries
    the temperature and the activity of hydroxide. Ksp in terms of OH- hardly moves with temperature.

    Parameters
    ----------
    per_unit : metal in one unit of each carrier of the readout, shape (J,). [mol]

    Raises InputError where an amount is below zero or not a number.
    """
    amounts = np.atleast_1d(np.asarray(per_unit, dtype=float))
    if not (amounts >= 0.0).all():
        raise InputError(f"the amount of {metal.name} in a carrier must be zero or more; found {amounts.tolist()}. "
                         "Correct it.")
    up = metal.charge_up
    return MetalTable(name=metal.name, charge=metal.charge, complex_charge=0 if up is None else metal.charge + up,
                      free=free_at(metal, GRID_PH, pkw), bound=complex_at(metal, GRID_PH, pkw), per_unit=amounts)

"""Magnesium hydroxide, and the pairs of calcium and magnesium with hydroxide; both count only in alkaline water.

Constants at zero ionic strength on the molal scale; `t_c` in °C.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import exp10
from aquabuf.chem.fresh import k_water
from aquabuf.chem.properties import GAS_CONSTANT, kelvin

__all__ = ["K_PAIR_CAOH", "K_PAIR_MGOH", "ksp_brucite"]

LOG_BRUCITE = 16.84           # Mg(OH)2 + 2 H+ = Mg++ + 2 H2O at 25 °C; Nordstrom et al. 1990 (recalled)
ENTHALPY_BRUCITE = -113.4e3   # of that reaction [J/mol]; the same (recalled)

K_PAIR_CAOH = 10.0**1.22  # Ca++ + OH- = CaOH+ at 25 °C [kg/mol]; Nordstrom et al. 1990 (recalled)
K_PAIR_MGOH = 10.0**2.56  # Mg++ + OH- = MgOH+ at 25 °C [kg/mol]; Nordstrom et al. 1990 (recalled)


def ksp_brucite(t_c: ArrayLike) -> NDArray[np.float64]:
    """Mg(OH)2(brucite) = Mg++ + 2 OH-, 0 to 50 °C. [(mol/kg)^3]

    Dissolution in acid with a constant enthalpy, turned round with the ion product of water. Nordstrom et al. 1990
    (recalled). Handbooks differ by 0.1 in the logarithm; a fresh precipitate is more soluble than the mineral.
    """
    inverse = 1.0 / kelvin(t_c) - 1.0 / kelvin(25.0)
    log_k = LOG_BRUCITE - ENTHALPY_BRUCITE / (np.log(10.0) * GAS_CONSTANT) * inverse
    return exp10(log_k) * k_water(t_c) ** 2

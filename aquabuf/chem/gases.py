"""Carbon dioxide in air."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.chem.properties import kelvin, vapor_pressure

__all__ = ["AIR_CO2_PPM", "AIR_CO2_YEAR", "co2_fugacity_ratio", "pco2_of_air"]

AIR_CO2_PPM = 425.0   # mole fraction in dry air, µmol/mol; about the global mean of the year below (recalled)
AIR_CO2_YEAR = 2025


def pco2_of_air(
    co2_ppm: ArrayLike, t_c: ArrayLike, pressure_atm: ArrayLike = 1.0, salinity: ArrayLike = 0.0,
) -> NDArray[np.float64]:
    """Partial pressure of CO2 in air saturated with water vapor. [atm]

    x(CO2, dry) (P - pH2O); `co2_ppm` is the mole fraction in dry air.
    """
    dry = np.asarray(pressure_atm, dtype=float) - vapor_pressure(t_c, salinity)
    return np.asarray(co2_ppm, dtype=float) * 1e-6 * dry


def co2_fugacity_ratio(t_c: ArrayLike, pressure_atm: ArrayLike = 1.0) -> NDArray[np.float64]:
    """Fugacity of CO2 in air over its partial pressure. [-]

    exp((B + 2 delta) P / (R T)). Source: Weiss 1974, Mar. Chem. 2:203 (recalled), -1 to 40 °C.
    """
    t = kelvin(t_c)
    virial = -1636.75 + t * (12.0408 + t * (-0.0327957 + t * 3.16528e-5))
    cross = 57.7 - 0.118 * t
    gas_constant_cm3_atm = 82.05736608
    return np.exp((virial + 2.0 * cross) * np.asarray(pressure_atm, dtype=float) / (gas_constant_cm3_atm * t))

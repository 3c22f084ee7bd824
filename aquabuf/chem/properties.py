"""Density, dielectric constant, vapor pressure and air pressure.

Every function takes scalars or arrays that broadcast, and returns an array of their common shape.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = [
    "FARADAY", "GAS_CONSTANT", "T_ZERO_K", "air_pressure", "dielectric_constant",
    "seawater_density", "vapor_pressure", "water_density",
]

T_ZERO_K = 273.15          # ice point in kelvin, exact (SI)
GAS_CONSTANT = 8.314462618  # J/(mol K), exact (SI 2019)
FARADAY = 96485.33212       # C/mol, exact (SI 2019)


def kelvin(t_c: ArrayLike) -> NDArray[np.float64]:
    """Absolute temperature. [K]"""
    return np.asarray(t_c, dtype=float) + T_ZERO_K


def water_density(t_c: ArrayLike) -> NDArray[np.float64]:
    """Density of pure water at 1 atm. [kg/m3]

    Parameters: `t_c` 0 to 100 °C. Within 0.004 kg/m3 of IAPWS-95 from 0 to 50 °C.
    Source: Kell 1975, J. Chem. Eng. Data 20:97 (coefficients recalled, verified against IAPWS-95).
    """
    t = np.asarray(t_c, dtype=float)
    above = 999.83952 + t * (16.945176 + t * (-7.9870401e-3 + t * (
        -46.170461e-6 + t * (105.56302e-9 - t * 280.54253e-12))))
    return above / (1.0 + 16.879850e-3 * t)


def seawater_density(t_c: ArrayLike, salinity: ArrayLike) -> NDArray[np.float64]:
    """Density of sea and brackish water at 1 atm. [kg/m3]

    Parameters: `t_c` 0 to 40 °C; `salinity` 0.5 to 43 (practical).
    Source: Millero & Poisson 1981, Deep-Sea Res. 28A:625, as printed in its abstract; sigma 0.0036 kg/m3.
    """
    t = np.asarray(t_c, dtype=float)
    s = np.asarray(salinity, dtype=float)
    rho0 = 999.842594 + t * (6.793952e-2 + t * (-9.095290e-3 + t * (
        1.001685e-4 + t * (-1.120083e-6 + t * 6.536332e-9))))
    a = 8.24493e-1 + t * (-4.0899e-3 + t * (7.6438e-5 + t * (-8.2467e-7 + t * 5.3875e-9)))
    b = -5.72466e-3 + t * (1.0227e-4 - t * 1.6546e-6)
    return rho0 + a * s + b * s * np.sqrt(s) + 4.8314e-4 * s * s


def dielectric_constant(t_c: ArrayLike) -> NDArray[np.float64]:
    """Relative static dielectric constant of water at 1 bar. [-]

    Parameters: `t_c` 0 to 100 °C. Within 0.06 of the IAPWS 1997 values.
    Source: Bradley & Pitzer 1979, J. Phys. Chem. 83:1599 (coefficients recalled, verified against IAPWS).
    """
    t = kelvin(t_c)
    eps_1000 = 342.79 * np.exp(t * (-5.0866e-3 + t * 9.4690e-7))
    c = -2.0525 + 3115.9 / (t - 182.89)
    b = -8032.5 + 4.2142e6 / t + 2.1417 * t
    return eps_1000 + c * np.log((b + 1.0) / (b + 1000.0))


def vapor_pressure(t_c: ArrayLike, salinity: ArrayLike = 0.0) -> NDArray[np.float64]:
    """Water vapor pressure over fresh or sea water. [atm]

    Parameters: `t_c` 0 to 40 °C; `salinity` 0 to 40.
    Source: Weiss & Price 1980, Mar. Chem. 8:347 (recalled; 23.746 mmHg at 25 °C checks).
    """
    x = kelvin(t_c) / 100.0
    return np.exp(24.4543 - 67.4509 / x - 4.8489 * np.log(x)
                  - 0.000544 * np.asarray(salinity, dtype=float))


def air_pressure(elevation_m: ArrayLike) -> NDArray[np.float64]:
    """Air pressure of the standard atmosphere. [atm]

    Parameters: `elevation_m` -430 to 11 000 m above sea level.
    Source: ISO 2533 standard atmosphere, troposphere (recalled).
    """
    return (1.0 - 2.25577e-5 * np.asarray(elevation_m, dtype=float)) ** 5.25588

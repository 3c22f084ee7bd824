"""Equilibrium constants of fresh water at zero ionic strength.

Every function takes the temperature in °C (scalar or array) and returns the constant itself, same shape,
on the molal scale (mol per kg of water); gas pressures in atm.
No range check here: `engine.conditions` checks readings once, at the border.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import exp10
from aquabuf.chem.properties import GAS_CONSTANT, kelvin, water_density

__all__ = [
    "k1_carbonic", "k2_carbonic", "k_henry_co2", "k_pair_caco3", "k_pair_cahco3", "k_pair_caso4",
    "k_pair_kso4", "k_pair_mgco3", "k_pair_mghco3", "k_pair_mgso4", "k_pair_naco3", "k_pair_nahco3",
    "k_pair_naso4", "k_water", "k_water_marshall_franck", "ksp_aragonite", "ksp_calcite", "ksp_vaterite",
]

# a + b T + c/T + d log10 T + e/T^2 = log10 K. Plummer & Busenberg 1982, Geochim. Cosmochim. Acta 46:1011, abstract.
_PLUMMER_BUSENBERG = {
    "henry": (108.3865, 0.01985076, -6919.53, -40.45154, 669365.0),
    "k1": (-356.3094, -0.06091964, 21834.37, 126.8339, -1684915.0),
    "k2": (-107.8871, -0.03252849, 5151.79, 38.92561, -563713.9),
    "calcite": (-171.9065, -0.077993, 2839.319, 71.595, 0.0),
    "aragonite": (-171.9773, -0.077993, 2903.293, 71.595, 0.0),
    "vaterite": (-172.1295, -0.077993, 3074.688, 71.595, 0.0),
    "cahco3": (1209.120, 0.31294, -34765.05, -478.782, 0.0),
    "caco3": (-1228.732, -0.299444, 35512.75, 485.818, 0.0),
}


def _plummer_busenberg(key: str, t_c: ArrayLike) -> NDArray[np.float64]:
    a, b, c, d, e = _PLUMMER_BUSENBERG[key]
    t = kelvin(t_c)
    return exp10(a + b * t + c / t + d * np.log10(t) + e / (t * t))


def k_henry_co2(t_c: ArrayLike) -> NDArray[np.float64]:
    """CO2(g) = CO2(aq), 0 to 100 °C. [mol/kg/atm] Plummer & Busenberg 1982."""
    return _plummer_busenberg("henry", t_c)


def k1_carbonic(t_c: ArrayLike) -> NDArray[np.float64]:
    """CO2(aq) + H2O = H+ + HCO3-, 0 to 100 °C. [mol/kg] Plummer & Busenberg 1982."""
    return _plummer_busenberg("k1", t_c)


def k2_carbonic(t_c: ArrayLike) -> NDArray[np.float64]:
    """HCO3- = H+ + CO3--, 0 to 100 °C. [mol/kg] Plummer & Busenberg 1982."""
    return _plummer_busenberg("k2", t_c)


def ksp_calcite(t_c: ArrayLike) -> NDArray[np.float64]:
    """CaCO3(calcite) = Ca++ + CO3--, 0 to 90 °C. [(mol/kg)^2] Plummer & Busenberg 1982."""
    return _plummer_busenberg("calcite", t_c)


def ksp_aragonite(t_c: ArrayLike) -> NDArray[np.float64]:
    """CaCO3(aragonite) = Ca++ + CO3--, 0 to 90 °C. [(mol/kg)^2] Plummer & Busenberg 1982."""
    return _plummer_busenberg("aragonite", t_c)


def ksp_vaterite(t_c: ArrayLike) -> NDArray[np.float64]:
    """CaCO3(vaterite) = Ca++ + CO3--, 0 to 90 °C. [(mol/kg)^2] Plummer & Busenberg 1982."""
    return _plummer_busenberg("vaterite", t_c)


def k_pair_cahco3(t_c: ArrayLike) -> NDArray[np.float64]:
    """Ca++ + HCO3- = CaHCO3+, 0 to 90 °C. [kg/mol] Plummer & Busenberg 1982."""
    return _plummer_busenberg("cahco3", t_c)


def k_pair_caco3(t_c: ArrayLike) -> NDArray[np.float64]:
    """Ca++ + CO3-- = CaCO3(aq), 5 to 80 °C. [kg/mol] Plummer & Busenberg 1982."""
    return _plummer_busenberg("caco3", t_c)


def k_pair_mghco3(t_c: ArrayLike) -> NDArray[np.float64]:
    """Mg++ + HCO3- = MgHCO3+, 10 to 90 °C. [kg/mol] Siebert & Hostetler 1977 (recalled; 1.07 at 25 °C)."""
    t = kelvin(t_c)
    return exp10(-59.215 + 2537.455 / t + 20.92298 * np.log10(t))


def k_pair_mgco3(t_c: ArrayLike) -> NDArray[np.float64]:
    """Mg++ + CO3-- = MgCO3(aq), 10 to 90 °C. [kg/mol] Siebert & Hostetler 1977 (recalled; 2.98 at 25 °C)."""
    return exp10(0.991 + 0.00667 * kelvin(t_c))


def _van_t_hoff(log_k25: float, enthalpy_j_mol: float, t_c: ArrayLike) -> NDArray[np.float64]:
    """Association constant from its value at 25 °C and a constant enthalpy."""
    inverse = 1.0 / kelvin(t_c) - 1.0 / kelvin(25.0)
    return exp10(log_k25 - enthalpy_j_mol / (np.log(10.0) * GAS_CONSTANT) * inverse)


def k_pair_nahco3(t_c: ArrayLike) -> NDArray[np.float64]:
    """Na+ + HCO3- = NaHCO3(aq); no temperature term known. [kg/mol] Nordstrom et al. 1990 (recalled)."""
    return _van_t_hoff(-0.25, 0.0, t_c)


def k_pair_naco3(t_c: ArrayLike) -> NDArray[np.float64]:
    """Na+ + CO3-- = NaCO3-. [kg/mol] Nordstrom et al. 1990 (recalled)."""
    return _van_t_hoff(1.27, 37.3e3, t_c)


def k_pair_caso4(t_c: ArrayLike) -> NDArray[np.float64]:
    """Ca++ + SO4-- = CaSO4(aq). [kg/mol] Nordstrom et al. 1990 (recalled)."""
    return _van_t_hoff(2.30, 6.9e3, t_c)


def k_pair_mgso4(t_c: ArrayLike) -> NDArray[np.float64]:
    """Mg++ + SO4-- = MgSO4(aq). [kg/mol] Nordstrom et al. 1990 (recalled); older sets have 2.25."""
    return _van_t_hoff(2.37, 19.0e3, t_c)


def k_pair_naso4(t_c: ArrayLike) -> NDArray[np.float64]:
    """Na+ + SO4-- = NaSO4-. [kg/mol] Nordstrom et al. 1990 (recalled)."""
    return _van_t_hoff(0.70, 4.7e3, t_c)


def k_pair_kso4(t_c: ArrayLike) -> NDArray[np.float64]:
    """K+ + SO4-- = KSO4-. [kg/mol] Nordstrom et al. 1990 (recalled)."""
    return _van_t_hoff(0.85, 9.4e3, t_c)


def k_water(t_c: ArrayLike) -> NDArray[np.float64]:
    """Ion product of water at 1 atm, 0 to 100 °C. [(mol/kg)^2]

    Source: IAPWS R11-07 (Bandura & Lvov 2006, J. Phys. Chem. Ref. Data 35:15); coefficients recalled,
    verified against a general reference library to 0.001 in pKw.
    """
    t = kelvin(t_c)
    rho = water_density(t_c) / 1000.0
    q = rho * np.exp(-0.864671 + 8659.19 / t - 22786.2 / (t * t) * rho ** (2.0 / 3.0))
    gas = 0.61415 + 48251.33 / t - 67707.93 / t**2 + 10102100.0 / t**3
    liquid = np.log10(1.0 + q) - q / (q + 1.0) * rho * (0.642044 - 56.8534 / t - 0.375754 * rho)
    return exp10(12.0 * liquid - gas - 2.0 * np.log10(0.018015268))


def k_water_marshall_franck(t_c: ArrayLike) -> NDArray[np.float64]:
    """Ion product of water at 1 atm, 0 to 100 °C. [(mol/kg)^2]

    Source: Marshall & Franck 1981, J. Phys. Chem. Ref. Data 10:295; coefficients recalled, verified against the
    handbook table. Differs from `k_water` by 0.008 in pKw at 0 °C.
    """
    t = kelvin(t_c)
    log_rho = np.log10(water_density(t_c) / 1000.0)
    base = -4.098 - 3245.2 / t + 2.2362e5 / t**2 - 3.984e7 / t**3
    return exp10(base + (13.957 - 1262.3 / t + 8.5641e5 / t**2) * log_rho)

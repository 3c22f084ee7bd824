"""Equilibrium constants of sea and brackish water.

Temperature `t_c` in °C and practical `salinity`, scalars or arrays that broadcast. Constants are returned as such
(not as pK), per kilogram of solution, on the pH scale that each docstring names.
No range check here: `engine.conditions` checks readings once, at the border.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import exp10
from aquabuf.chem.properties import kelvin
from aquabuf.chem.seasalt import ionic_strength_seawater, per_kg_solution

__all__ = [
    "k0_co2",
    "k1_lueker",
    "k1_millero",
    "k1_phosphoric",
    "k2_lueker",
    "k2_millero",
    "k2_phosphoric",
    "k3_phosphoric",
    "k_ammonium",
    "k_bisulfate",
    "k_boric",
    "k_fluoride",
    "k_fluoride_perez_fraga",
    "k_silicic",
    "k_sulfide",
    "k_water_sea",
    "ksp_aragonite_sea",
    "ksp_calcite_sea",
]

Array = NDArray[np.float64]


def _ts(t_c: ArrayLike, salinity: ArrayLike) -> tuple[Array, Array, Array]:
    s = np.asarray(salinity, dtype=float)
    return kelvin(t_c), s, np.sqrt(s)


def k0_co2(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """CO2 solubility on a fugacity basis; S 0 to 40, -1 to 40 °C. [mol/kg/atm] Weiss 1974 (recalled)."""
    t, s, _ = _ts(t_c, salinity)
    x = t / 100.0
    return np.exp(-60.2409 + 93.4517 / x + 23.3585 * np.log(x) + s * (0.023517 + x * (-0.023656 + x * 0.0047036)))


def k1_millero(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """First constant of carbonic acid, seawater scale; S 0 to 50, 0 to 50 °C. [mol/kg]

    Source: Millero et al. 2006, Mar. Chem. 100:80, abstract; sigma 0.0054 in pK.
    """
    t, s, root = _ts(t_c, salinity)
    log_t = np.log(t)
    fresh = -126.34048 + 6320.813 / t + 19.568224 * log_t
    return exp10(-(fresh + 13.4191 * root + 0.0331 * s - 5.33e-5 * s * s
                     + (-530.123 * root - 6.103 * s) / t - 2.06950 * root * log_t))


def k2_millero(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """Second constant of carbonic acid, seawater scale; S 0 to 50, 0 to 50 °C. [mol/kg]

    Source: Millero et al. 2006, Mar. Chem. 100:80, abstract; sigma 0.011 in pK.
    """
    t, s, root = _ts(t_c, salinity)
    log_t = np.log(t)
    fresh = -90.18333 + 5143.692 / t + 14.613358 * log_t
    return exp10(-(fresh + 21.0894 * root + 0.1248 * s - 3.687e-4 * s * s
                     + (-772.483 * root - 20.051 * s) / t - 3.3336 * root * log_t))


def k1_lueker(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """First constant of carbonic acid, total scale; S 19 to 43, 2 to 35 °C. [mol/kg]

    Source: Lueker, Dickson & Keeling 2000, Mar. Chem. 70:105, abstract.
    """
    t, s, _ = _ts(t_c, salinity)
    return exp10(-(3633.86 / t - 61.2172 + 9.67770 * np.log(t) - 0.011555 * s + 0.0001152 * s * s))


def k2_lueker(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """Second constant of carbonic acid, total scale; S 19 to 43, 2 to 35 °C. [mol/kg]

    Source: Lueker, Dickson & Keeling 2000, Mar. Chem. 70:105, abstract.
    """
    t, s, _ = _ts(t_c, salinity)
    return exp10(-(471.78 / t + 25.9290 - 3.16967 * np.log(t) - 0.01781 * s + 0.0001122 * s * s))


def k_boric(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """Boric acid, total scale; S 5 to 45, 0 to 45 °C. [mol/kg] Dickson 1990, Deep-Sea Res. 37:755."""
    t, s, root = _ts(t_c, salinity)
    return np.exp((-8966.90 - 2890.53 * root - 77.942 * s + 1.728 * s * root - 0.0996 * s * s) / t
                  + 148.0248 + 137.1942 * root + 1.62142 * s
                  + (-24.4344 - 25.085 * root - 0.2474 * s) * np.log(t) + 0.053105 * root * t)


def k_bisulfate(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """HSO4- = H+ + SO4--, free scale; S 5 to 45, 0 to 45 °C. [mol/kg] Dickson 1990, J. Chem. Thermodyn. 22:113."""
    t, s, _ = _ts(t_c, salinity)
    i = ionic_strength_seawater(s)
    log_t, root_i = np.log(t), np.sqrt(i)
    ln_k = (-4276.1 / t + 141.328 - 23.093 * log_t + (-13856.0 / t + 324.57 - 47.986 * log_t) * root_i
            + (35474.0 / t - 771.54 + 114.723 * log_t) * i - 2698.0 / t * i * root_i + 1776.0 / t * i * i)
    return np.exp(ln_k) * per_kg_solution(s)


def k_fluoride(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """HF = H+ + F-, free scale, also at low salinity. [mol/kg] Dickson & Riley 1979, Mar. Chem. 7:89 (recalled)."""
    t, s, _ = _ts(t_c, salinity)
    return np.exp(1590.2 / t - 12.641 + 1.525 * np.sqrt(ionic_strength_seawater(s))) * per_kg_solution(s)


def k_fluoride_perez_fraga(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """HF = H+ + F-, total scale; only S 10 to 40, 9 to 33 °C. [mol/kg] Perez & Fraga 1987 (recalled)."""
    t, _, root = _ts(t_c, salinity)
    return np.exp(874.0 / t - 9.68 + 0.111 * root)


def k_water_sea(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """Ion product of water, seawater scale; S 0 to 45, 0 to 45 °C. [(mol/kg)^2] Millero 1995 (recalled)."""
    t, s, root = _ts(t_c, salinity)
    log_t = np.log(t)
    return np.exp(148.9802 - 13847.26 / t - 23.6521 * log_t
                  + (118.67 / t - 5.977 + 1.0495 * log_t) * root - 0.01615 * s)


def k1_phosphoric(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """H3PO4 = H+ + H2PO4-, seawater scale; S 0 to 45, 0 to 45 °C. [mol/kg] Yao & Millero 1995 (recalled)."""
    t, s, root = _ts(t_c, salinity)
    return np.exp(-4576.752 / t + 115.540 - 18.453 * np.log(t) + (-106.736 / t + 0.69171) * root
                  + (-0.65643 / t - 0.01844) * s)


def k2_phosphoric(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """H2PO4- = H+ + HPO4--, seawater scale; S 0 to 45, 0 to 45 °C. [mol/kg] Yao & Millero 1995 (recalled)."""
    t, s, root = _ts(t_c, salinity)
    return np.exp(-8814.715 / t + 172.1033 - 27.927 * np.log(t) + (-160.340 / t + 1.3566) * root
                  + (0.37335 / t - 0.05778) * s)


def k3_phosphoric(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """HPO4-- = H+ + PO4---, seawater scale; S 0 to 45, 0 to 45 °C. [mol/kg] Yao & Millero 1995 (recalled)."""
    t, s, root = _ts(t_c, salinity)
    return np.exp(-3070.75 / t - 18.126 + (17.27039 / t + 2.81197) * root + (-44.99486 / t - 0.09984) * s)


def k_silicic(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """Si(OH)4 = H+ + SiO(OH)3-, seawater scale; S 0 to 45, 0 to 45 °C. [mol/kg] Millero 1995 (recalled)."""
    t, s, _ = _ts(t_c, salinity)
    i = ionic_strength_seawater(s)
    ln_k = (-8904.2 / t + 117.400 - 19.334 * np.log(t) + (-458.79 / t + 3.5913) * np.sqrt(i)
            + (188.74 / t - 1.5998) * i + (-12.1652 / t + 0.07871) * i * i)
    return np.exp(ln_k) * per_kg_solution(s)


def k_ammonium(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """NH4+ = H+ + NH3, seawater scale; S 0 to 45, 0 to 45 °C. [mol/kg] Yao & Millero 1995 (recalled)."""
    t, s, root = _ts(t_c, salinity)
    return np.exp(-6285.33 / t + 0.0001635 * t - 0.25444 + (0.46532 - 123.7184 / t) * root
                  + (-0.01992 + 3.17556 / t) * s)


def k_sulfide(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """H2S = H+ + HS-, taken as total scale (unconfirmed, 0.01 in pK); S 0 to 45, 0 to 45 °C. [mol/kg]

    Source: Millero, Plese & Fernandez 1988 / Millero 1995 (recalled).
    """
    t, s, root = _ts(t_c, salinity)
    return np.exp(225.838 - 13275.3 / t - 34.6435 * np.log(t) + 0.3449 * root - 0.0274 * s)


def ksp_calcite_sea(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """Stoichiometric solubility product of calcite; S 5 to 44, 5 to 40 °C. [(mol/kg)^2] Mucci 1983 (recalled)."""
    t, s, root = _ts(t_c, salinity)
    return exp10(-171.9065 - 0.077993 * t + 2839.319 / t + 71.595 * np.log10(t)
                    + (-0.77712 + 0.0028426 * t + 178.34 / t) * root - 0.07711 * s + 0.0041249 * s * root)


def ksp_aragonite_sea(t_c: ArrayLike, salinity: ArrayLike) -> Array:
    """Stoichiometric solubility product of aragonite; S 5 to 44, 5 to 40 °C. [(mol/kg)^2] Mucci 1983 (recalled)."""
    t, s, root = _ts(t_c, salinity)
    return exp10(-171.945 - 0.077993 * t + 2903.293 / t + 71.595 * np.log10(t)
                    + (-0.068393 + 0.0017276 * t + 88.135 / t) * root - 0.10018 * s + 0.0059415 * s * root)

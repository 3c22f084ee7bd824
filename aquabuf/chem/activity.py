"""Activity coefficients of ions and neutral species in dilute water.

Ionic strength is in mol per kg of water (mol/L serves in fresh water).
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.chem.properties import dielectric_constant, kelvin, water_density

__all__ = [
    "debye_huckel_a", "debye_huckel_b", "log_gamma_davies", "log_gamma_neutral", "log_gamma_truesdell_jones",
]

DAVIES_LINEAR = 0.3    # Davies 1962, Ion Association; the 1938 paper has 0.2
NEUTRAL_SALTING = 0.1  # common practice for uncharged species; agrees with Weiss 1974 for CO2 at low salinity


def debye_huckel_a(t_c: ArrayLike) -> NDArray[np.float64]:
    """Debye-Hückel slope A for log10 of activity coefficients. [kg^0.5 mol^-0.5]

    A = 1.824829e6 sqrt(rho) (eps T)^-1.5, rho in g/cm3: first principles with CODATA constants.
    Parameters: `t_c` 0 to 100 °C. Check: Helgeson & Kirkham 1974 (within 0.001).
    """
    return 1.824829e6 * np.sqrt(water_density(t_c) / 1000.0) * (dielectric_constant(t_c) * kelvin(t_c)) ** -1.5


def debye_huckel_b(t_c: ArrayLike) -> NDArray[np.float64]:
    """Debye-Hückel size coefficient B. [kg^0.5 mol^-0.5 per angstrom]

    B = 50.2916 sqrt(rho) (eps T)^-0.5, rho in g/cm3. Parameters: `t_c` 0 to 100 °C.
    """
    return 50.2916 * np.sqrt(water_density(t_c) / 1000.0) * (dielectric_constant(t_c) * kelvin(t_c)) ** -0.5


def log_gamma_davies(charge: ArrayLike, ionic_strength: ArrayLike, a: ArrayLike) -> NDArray[np.float64]:
    """log10 activity coefficient of an ion by the Davies equation (0.3).

    -A z^2 (sqrt(I) / (1 + sqrt(I)) - 0.3 I). Useful to I = 0.1, with falling accuracy to 0.5.
    Source: Davies 1962. `a` from `debye_huckel_a`.
    """
    root = np.sqrt(np.asarray(ionic_strength, dtype=float))
    return -np.asarray(a) * np.square(charge) * (root / (1.0 + root) - DAVIES_LINEAR * root * root)


def log_gamma_truesdell_jones(
    charge: ArrayLike, ionic_strength: ArrayLike, size: ArrayLike, slope: ArrayLike,
    a: ArrayLike, b: ArrayLike,
) -> NDArray[np.float64]:
    """log10 activity coefficient of an ion by the Truesdell-Jones equation.

    -A z^2 sqrt(I) / (1 + B å sqrt(I)) + b I, for I below 1. `size` å in angstrom and `slope` b are the ion's own
    (columns tj_a, tj_b of the ion table). Source: Truesdell & Jones 1974, J. Res. U.S. Geol. Surv. 2:233.
    """
    strength = np.asarray(ionic_strength, dtype=float)
    root = np.sqrt(strength)
    return -np.asarray(a) * np.square(charge) * root / (1.0 + np.asarray(b) * size * root) + slope * strength


def log_gamma_neutral(ionic_strength: ArrayLike) -> NDArray[np.float64]:
    """log10 activity coefficient of an uncharged species, 0.1 I. Common practice, no single source."""
    return NEUTRAL_SALTING * np.asarray(ionic_strength, dtype=float)

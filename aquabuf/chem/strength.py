"""Liquid products: what density and strength say about each other, and where they freeze.

Strength is a mass fraction, density in kg/L. Liquid alum has published relations; other products are read by straight
lines between the marked points of `data/product_densities.csv`, never outside them. What cannot be told is nan.
"""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.chem.products import Product, molar_mass
from aquabuf.chem.properties import water_density
from aquabuf.tables import read_table

__all__ = [
    "check_certificate", "density_from_strength", "freezes_at_c", "liquid_alum_18_water_g_l", "liquid_alum_al2o3_g_l",
    "liquid_alum_fraction", "liquid_alum_g_l", "strength_from_density",
]

Array = NDArray[np.float64]

DRY_ALUM = "Al2(SO4)3.14.3H2O"  # 17 % Al2O3, which the relations for liquid alum count
ALUM_T_C = (60.0 - 32.0) / 1.8  # their specific gravity is at 60 °F against water at 60 °F
ALUM_TOLERANCE_KG_L = 0.006     # 0.002 of the specific gravity and 14 for 14.3 waters (practice)
BOW_KG_L = 0.01                 # how far density lies off the line between points that are far apart (practice)
FAR_APART = 0.05                # such points differ by more than this mass fraction
PER_DEGREE_KG_L = 0.001         # density of strong liquids falls by no more than this per °C (recalled)
UNKNOWN_C = 10.0                # how far temperatures may be apart where one is not stated (practice)
SAME_STRENGTH = 0.005           # a single point speaks for strengths this near, a freezing point for twice that
TELLING_SLOPE = 0.3             # kg/L per mass fraction below which a density does not tell the strength


def _polynomial(sg: ArrayLike, a: float, b: float, c: float) -> Array:
    s = np.asarray(sg, dtype=float)
    with np.errstate(invalid="ignore"):
        return np.where((s >= 1.0) & (s <= 1.38), a + s * (b + c * s), np.nan)


def liquid_alum_g_l(sg: ArrayLike) -> Array:
    """Dry alum in liquid alum. [g/L]

    Parameters: `sg` specific gravity at 60 °F, 1.00 to 1.38; nan outside. Source: Hendricks, Table F.2 (printed). He
    calls it the 14-hydrate, but his figures for Al2O3 stand at 17.0 % of it: 14.3 waters; the 14-hydrate has 17.2 %.
    """
    return _polynomial(sg, -1011.9, 312.25, 699.2)


def liquid_alum_18_water_g_l(sg: ArrayLike) -> Array:
    """Alum of 18 waters in liquid alum. [g/L]

    Parameters: `sg` specific gravity at 60 °F, 1.00 to 1.38; nan outside. Source: Hendricks, Table F.2 (printed); about
    0.7 % above what his dry alum works out to by molar mass.
    """
    return _polynomial(sg, -1134.3, 350.01, 783.01)


def liquid_alum_al2o3_g_l(sg: ArrayLike) -> Array:
    """Aluminum in liquid alum, as Al2O3. [g/L]

    Parameters: `sg` specific gravity at 60 °F, 1.00 to 1.38; nan outside. Source: Hendricks, Table F.2 (printed).
    """
    return _polynomial(sg, -172.09, 53.103, 118.91)


_ALUM_FRACTION = (-2.2903, 2.9173, -0.62606)


def liquid_alum_fraction(sg: ArrayLike) -> Array:
    """Mass fraction of dry alum (17 % Al2O3) in liquid alum. [-]

    Parameters: `sg` specific gravity at 60 °F, 1.00 to 1.38; nan outside. Source: Hendricks, Table F.2 (printed); a
    supplier's table of dry alum agrees within 0.002.
    """
    return _polynomial(sg, *_ALUM_FRACTION)


def _alum_sg(fraction: float) -> float:
    """Inverse of `liquid_alum_fraction`; nan outside its range."""
    a, b, c = _ALUM_FRACTION
    inside = liquid_alum_fraction(1.0) <= fraction <= liquid_alum_fraction(1.38)
    return float((-b + np.sqrt(b * b - 4.0 * c * (a - fraction))) / (2.0 * c)) if inside else np.nan


@cache
def _points(formula: str, quantity: str) -> Array:
    """Rows of strength, value, its uncertainty, temperature [°C]; by rising strength."""
    rows = [r for r in read_table("product_densities") if (r["formula"], r["quantity"]) == (formula, quantity)]
    cells = ("strength", "value", "plus_minus", "t_c")
    return np.array([[float(r[cell] or np.nan) for cell in cells] for r in rows]).reshape(-1, len(cells))


def _salt(formula: str) -> str:
    return formula.partition(".")[0]


def _known_as(product: Product, quantity: str) -> str:
    """Formula under which the table knows the salt of a product, "" if it does not."""
    found = (r["formula"] for r in read_table("product_densities") if r["quantity"] == quantity)
    return next((formula for formula in found if _salt(formula) == _salt(product.formula)), "")


def _hydrate_ratio(product: Product, formula: str) -> float:
    """Mass of one hydrate over that of the product's, for the same amount of salt."""
    return molar_mass(formula) / product.molar_mass_g


def _is_alum(product: Product) -> bool:
    return _salt(product.formula) == _salt(DRY_ALUM)


def _alum_water_kg_l() -> float:
    return 1e-3 * float(water_density(ALUM_T_C))


def _density(product: Product, strength: float) -> tuple[float, float, float]:
    """Density that belongs to a strength, its uncertainty [kg/L] and its temperature [°C]."""
    if _is_alum(product):
        sg = _alum_sg(strength * _hydrate_ratio(product, DRY_ALUM))
        return sg * _alum_water_kg_l(), ALUM_TOLERANCE_KG_L, ALUM_T_C
    points = _points(_known_as(product, "density_kg_l"), "density_kg_l")
    if len(points) == 0:
        return np.nan, np.nan, np.nan
    at, value, spread, t_c = points.T
    slack = SAME_STRENGTH if len(points) == 1 else 1e-9
    if not at[0] - slack <= strength <= at[-1] + slack:
        return np.nan, np.nan, np.nan
    above = min(int(np.searchsorted(at, strength)), len(at) - 1)
    gap = at[above] - at[max(above - 1, 0)]
    bow = BOW_KG_L if gap > FAR_APART and not np.isclose(at, strength, rtol=0, atol=1e-9).any() else 0.0
    density, u, t = (float(np.interp(strength, at, column)) for column in (value, spread, t_c))
    return density, u + bow, t


def density_from_strength(product: Product, strength: float) -> float:
    """Density of a liquid product of this strength; nan where no source tells. [kg/L]

    strength : mass fraction of the active substance as the product counts it. [-]
    """
    return _density(product, strength)[0]


def strength_from_density(product: Product, density_kg_l: float) -> float:
    """Strength of a liquid product of this density; nan where no source tells or density barely depends on it. [-]"""
    if _is_alum(product):
        dry = float(liquid_alum_fraction(density_kg_l / _alum_water_kg_l()))
        return dry / _hydrate_ratio(product, DRY_ALUM)
    points = _points(_known_as(product, "density_kg_l"), "density_kg_l")
    if len(points) < 2:
        return np.nan
    at, value = points[:, 0], points[:, 1]
    levels = np.unique(value)
    strengths = np.array([at[value == level].mean() for level in levels])  # rounded tables repeat a density
    if not levels[0] <= density_kg_l <= levels[-1] or np.ptp(levels) < TELLING_SLOPE * np.ptp(strengths):
        return np.nan
    return float(np.interp(density_kg_l, levels, strengths))


def check_certificate(product: Product, strength: float, density_kg_l: float, t_c: float | None = None) -> str:
    """What is wrong with a strength and a density that are stated together; "" if they agree or nothing can be told.

    strength : mass fraction as the product counts it. t_c : at which the density was measured, if known. [°C]
    The tolerance is that of the source, the bow between its points, and what temperature can do.
    """
    belongs, u, at_c = _density(product, strength)
    apart = abs(at_c - (np.nan if t_c is None else t_c))
    allowed = u + PER_DEGREE_KG_L * (UNKNOWN_C if np.isnan(apart) else apart)
    off = density_kg_l - belongs
    if np.isnan(off) or abs(off) <= allowed:
        return ""
    instead = strength_from_density(product, density_kg_l)
    tells = "" if np.isnan(instead) else f"; {density_kg_l:.3f} kg/L belongs to about {100 * instead:.1f} %"
    return (f"strength and density of {product.name!r} disagree: {100 * strength:.1f} % {product.formula} has about "
            f"{belongs:.3f} kg/L, stated is {density_kg_l:.3f} kg/L, {abs(off):.3f} kg/L "
            f"{'more' if off > 0 else 'less'} where {allowed:.3f} would be ordinary{tells}. "
            "Measure the density of this delivery, or ask the supplier")


def freezes_at_c(product: Product, strength: float) -> float:
    """Temperature at which a liquid of this strength begins to freeze or to form crystals; nan where not known. [°C]

    The nearest point of the table within a mass fraction of 0.01; between points these curves rise and fall.
    """
    formula = _known_as(product, "freezes_at_c")
    points = _points(formula, "freezes_at_c")
    if len(points) == 0 or product.form not in ("liquid", "slurry"):
        return np.nan
    away = np.abs(points[:, 0] - strength * _hydrate_ratio(product, formula))
    nearest = int(np.argmin(away))
    return float(points[nearest, 1]) if away[nearest] <= 2.0 * SAME_STRENGTH + 1e-9 else np.nan

"""The store room: products with their certificate strength, price and feed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.chem.products import Product

__all__ = ["Stocked"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Stocked:
    """A product in the store.

    name : how the plan calls it. strength : mass fraction of the active substance, and where it is from.
    density_kg_l : of what the pump moves. price_per_kg : of the product as delivered.
    """

    name: str
    product: Product
    strength: float
    strength_from: str = "certificate"
    density_kg_l: float | None = None
    price_per_kg: float | None = None

    def mg_l_pure(self, mol_l: ArrayLike) -> Array:
        """Dose of the active substance. [mg/L]"""
        return 1e3 * self.product.molar_mass_g * np.asarray(mol_l, dtype=float)

    def mg_l_product(self, mol_l: ArrayLike) -> Array:
        """Dose of the product as delivered. [mg/L]"""
        return self.mg_l_pure(mol_l) / self.strength

    def mol_l(self, mg_l_product: ArrayLike) -> Array:
        """Active substance in a dose of the product as delivered. [mol/L]"""
        return np.asarray(mg_l_product, dtype=float) * self.strength / (1e3 * self.product.molar_mass_g)

    def meq_l(self, mol_l: ArrayLike) -> Array:
        """Alkalinity that a dose adds; negative for acids. [meq/L]"""
        return 1e3 * self.product.adds.get("alkalinity", 0.0) * np.asarray(mol_l, dtype=float)

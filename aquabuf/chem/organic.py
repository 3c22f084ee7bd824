"""Organic acids of natural water, estimated from dissolved organic carbon.

The constants are conditional: published models were fitted to the pH of a meter in dilute water, so they are used with
that pH and without activity coefficients.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import LN10, exp10
from aquabuf.tables import read_table

__all__ = ["OLIVER_SITES_EQ_PER_MG", "OrganicModel", "organic_anion_oliver", "organic_models", "strong_organic_anion",
           "triprotic_charge"]

Array = NDArray[np.float64]

OLIVER_SITES_EQ_PER_MG = 1e-5  # acid sites per mg of carbon; Oliver, Thurman & Malcolm 1983
STRONG_SHARE = 1.0 / 3.0       # of the sites of a triprotic acid, a strong acid; Lydersen et al. 2004 (recalled)
MG_C_PER_UMOL = 12.011e-3


def organic_anion_oliver(doc_mg_l: ArrayLike, ph: ArrayLike) -> Array:
    """Charge of organic anions. [eq/L]

    Parameters: `doc_mg_l` dissolved organic carbon as C [mg/L]; `ph` 3 to 8.
    pK = 0.96 + 0.90 pH - 0.039 pH^2 of 10 µeq of sites per mg. Source: Oliver, Thurman & Malcolm 1983, GCA 47:2031; it
    reproduces the organic anion of the US lake surveys to 5e-8 µeq/L.
    """
    return OLIVER_SITES_EQ_PER_MG * np.asarray(doc_mg_l, dtype=float) * _oliver_fraction(np.asarray(ph, dtype=float))[0]


def _oliver_fraction(ph: Array) -> tuple[Array, Array]:
    """Dissociated fraction and its slope against pH. [-, 1/pH]"""
    off = (0.96 - ph * 0.10) - 0.039 * ph * ph  # pK - pH
    alpha = 1.0 / (1.0 + exp10(off))
    return alpha, LN10 * alpha * (1.0 - alpha) * (0.10 + 0.078 * ph)


def triprotic_charge(ph: ArrayLike, pk1: float, pk2: float, pk3: float) -> Array:
    """Mean charge of a triprotic acid over its three sites. [-]

    A closed form of mass action; `ph` any.
    """
    return _triprotic(np.asarray(ph, dtype=float), (pk1, pk2, pk3))[0]


def _triprotic(ph: Array, pk: tuple[float, ...]) -> tuple[Array, Array]:
    """Mean charge per site and its slope against pH. [-, 1/pH]"""
    inverse_h = exp10(np.clip(ph, -20.0, 30.0))
    one = inverse_h * 10.0**-pk[0]
    two = one * inverse_h * 10.0**-pk[1]
    three = two * inverse_h * 10.0**-pk[2]
    whole = 1.0 + one + two + three
    lost = (one + 2.0 * two + 3.0 * three) / whole
    squared = (one + 4.0 * two + 9.0 * three) / whole
    return lost / 3.0, LN10 * (squared - lost * lost) / 3.0


def strong_organic_anion(doc_mg_l: ArrayLike) -> Array:
    """Organic anions that stay ionized in acid lakes, as the base-cation surplus counts them. [eq/L]

    0.071 times dissolved organic carbon [µmol/L] less 2.1, not below zero. Source: Lawrence et al. 2007, Environ. Sci.
    Technol. 41 (coefficients recalled), Adirondack streams.
    """
    carbon_umol_l = np.asarray(doc_mg_l, dtype=float) / MG_C_PER_UMOL
    return 1e-6 * np.maximum(0.071 * carbon_umol_l - 2.1, 0.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class OrganicModel:
    """How many acid sites organic carbon has and how they dissociate; no `pk` means the relation of Oliver et al."""

    name: str
    sites_eq_mg: float  # [eq/mg of carbon]
    pk: tuple[float, ...]
    source: str
    words: str

    def charge(self, ph: Array) -> tuple[Array, Array]:
        """Charge of organic anions per mg of carbon and its slope against pH. [eq/mg, eq/mg per pH]"""
        fraction, slope = _triprotic(ph, self.pk) if self.pk else _oliver_fraction(ph)
        return self.sites_eq_mg * fraction, self.sites_eq_mg * slope

    def anion_eq_l(self, doc_mg_l: Array, ph: Array) -> Array:
        """Charge of organic anions. [eq/L]"""
        return doc_mg_l * self.charge(ph)[0]

    def strong_eq_l(self, doc_mg_l: Array) -> Array:
        """The third of all sites that acts as a strong acid: Hesthagen et al. 2008; Lydersen et al. 2004. [eq/L]"""
        return STRONG_SHARE * self.sites_eq_mg * doc_mg_l

    def in_words(self) -> str:
        """The model in one line."""
        how = f"pK {', '.join(f'{p:g}' for p in self.pk)}" if self.pk else "pK by pH"
        return f"{self.name}: {self.sites_eq_mg * 1e6:g} µeq of sites per mg of carbon, {how} ({self.source})"


@cache
def organic_models() -> dict[str, OrganicModel]:
    """The shipped models by name (treat as read-only)."""
    return {r["name"]: OrganicModel(
        name=r["name"], sites_eq_mg=float(r["sites_ueq_mg"]) * 1e-6,
        pk=tuple(float(step) for step in r["pk"].split(";") if step),
        source=f"{r['source']}{' (recalled)' if r['mark'] == 'recalled' else ''}", words=r["words"])
        for r in read_table("organic_acids")}

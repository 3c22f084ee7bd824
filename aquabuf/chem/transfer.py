"""Transfer of CO2 between lake and air: Schmidt numbers of fresh water and transfer velocities by wind.

Velocities are in m/d. Wind is the mean speed 10 m above the water. A k600 is the velocity of a gas whose Schmidt number
is 600, CO2 at 20 °C in fresh water.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["TransferRelation", "k600_cole_caraco", "k600_vachon_prairie", "k_at_schmidt", "schmidt_exponent",
           "schmidt_relations", "schmidt_wanninkhof_1992", "schmidt_wanninkhof_2014", "transfer_relations",
           "transfer_velocity_m_d"]

Array = NDArray[np.float64]

M_D_PER_CM_H = 0.24  # the sources print velocities in cm/h
M2_PER_KM2 = 1e6
ROUGH_FROM_M_S = 3.0  # wind from which small waves cover the water; common practice
SCHMIDT = "wanninkhof_2014"  # the relation in use; that of 1992 fails above 30 °C
ROUGH_EXPONENT, SMOOTH_EXPONENT = 1.0 / 2.0, 2.0 / 3.0


def schmidt_wanninkhof_1992(t_c: ArrayLike) -> Array:
    """Schmidt number of CO2 in fresh water, 0 to 30 °C; it fails above. [-]

    1911.1 - 118.11 t + 3.4527 t^2 - 0.04132 t^3. Source: Wanninkhof 1992, J. Geophys. Res. 97:7373. A cubic term of
    0.043132 is a slip in circulation.
    """
    t = np.asarray(t_c, dtype=float)
    return 1911.1 + t * (-118.11 + t * (3.4527 - t * 0.04132))


def schmidt_wanninkhof_2014(t_c: ArrayLike) -> Array:
    """Schmidt number of CO2 in fresh water, -2 to 40 °C. [-]

    1923.6 - 125.06 t + 4.3773 t^2 - 0.085681 t^3 + 0.00070284 t^4. Source: Wanninkhof 2014, Limnol. Oceanogr. Methods
    12:351.
    """
    t = np.asarray(t_c, dtype=float)
    return 1923.6 + t * (-125.06 + t * (4.3773 + t * (-0.085681 + t * 0.00070284)))


def k600_cole_caraco(wind_m_s: ArrayLike) -> Array:
    """Velocity at Schmidt number 600 by wind, 0 to about 9 m/s. [m/d]

    2.07 + 0.215 U^1.7 cm/h. Source: Cole & Caraco 1998, Limnol. Oceanogr. 43:647; range recalled.
    """
    return M_D_PER_CM_H * (2.07 + 0.215 * _not_negative(wind_m_s) ** 1.7)


def k600_vachon_prairie(wind_m_s: ArrayLike, lake_area_m2: ArrayLike) -> Array:
    """Velocity at Schmidt number 600 by wind, up to about 10 m/s, and lake area, 0.19 to 602 km2. [m/d]

    2.51 + 1.48 U + 0.39 U log10(A in km2) cm/h. Source: Vachon & Prairie 2013, Can. J. Fish. Aquat. Sci. 70:1757; range
    recalled. nan for ponds below about 160 m2, where the relation would have wind slow the transfer.
    """
    wind, area = np.broadcast_arrays(_not_negative(wind_m_s), np.asarray(lake_area_m2, dtype=float))
    some = area > 0.0
    per_wind = 1.48 + 0.39 * np.log10(np.where(some, area, 1.0) / M2_PER_KM2)
    return np.where(some & (per_wind > 0.0), M_D_PER_CM_H * (2.51 + per_wind * wind), np.nan)


def schmidt_exponent(wind_m_s: ArrayLike) -> Array:
    """Exponent n of (Sc/600)^-n: 1/2 where wind roughens the water (from 3 m/s on), 2/3 where it is smooth. [-]

    Usual practice of lake studies; the velocity has a step at 3 m/s, 9 % at 10 °C and none at 20 °C.
    """
    wind = _not_negative(wind_m_s)
    return np.where(np.isnan(wind), np.nan, np.where(wind >= ROUGH_FROM_M_S, ROUGH_EXPONENT, SMOOTH_EXPONENT))


def k_at_schmidt(k600_m_d: ArrayLike, schmidt: ArrayLike, wind_m_s: ArrayLike) -> Array:
    """Velocity of a gas from its k600, k600 (Sc/600)^-n with n by wind. [m/d]

    The exponent is negative: cold water, with its high Schmidt number, exchanges slower. nan where `schmidt` is not
    positive.
    """
    sc = np.asarray(schmidt, dtype=float)
    safe = np.where(sc > 0.0, sc, np.nan)
    return np.asarray(k600_m_d, dtype=float) * (safe / 600.0) ** -schmidt_exponent(wind_m_s)


def _not_negative(wind_m_s: ArrayLike) -> Array:
    wind = np.asarray(wind_m_s, dtype=float)
    return np.where(wind >= 0.0, wind, np.nan)


_FUNCTIONS: Mapping[str, Callable[..., Array]] = {f.__name__: f for f in (
    schmidt_wanninkhof_1992, schmidt_wanninkhof_2014, k600_cole_caraco, k600_vachon_prairie)}


@dataclass(frozen=True, slots=True, kw_only=True)
class TransferRelation:
    """One row of transfer_relations.csv: a relation by name, with the range of each reading that it needs."""

    name: str
    words: str
    ranges: Mapping[str, tuple[float, float]]  # by argument of `function`
    function: Callable[..., Array]
    source: str

    def __call__(self, **readings: ArrayLike) -> Array:
        """The relation at those of the readings that it needs, by their names; the others do not matter."""
        return self.function(**{name: readings[name] for name in self.ranges})

    def outside(self, **readings: ArrayLike) -> NDArray[np.bool_]:
        """Where a reading that the relation needs lies outside its range; not where it is missing."""
        mask = np.zeros((), dtype=bool)
        for name, (low, high) in self.ranges.items():
            value = np.asarray(readings[name], dtype=float)
            mask = mask | (value < low) | (value > high)
        return mask


def transfer_relations() -> dict[str, TransferRelation]:
    """The relations of k600 by name (treat as read-only)."""
    return _relations("k600")


def schmidt_relations() -> dict[str, TransferRelation]:
    """The relations of the Schmidt number by name (treat as read-only)."""
    return _relations("schmidt")


@cache
def _relations(kind: str) -> dict[str, TransferRelation]:
    return {r["name"]: TransferRelation(
        name=r["name"], words=r["words"], function=_FUNCTIONS[f"{kind}_{r['name']}"],
        ranges={name: (float(r[f"{name}_low"]), float(r[f"{name}_high"]))
                for name in ("t_c", "wind_m_s", "lake_area_m2") if r[f"{name}_low"]},
        source=f"{r['source']}{' (recalled)' if r['mark'] == 'recalled' else ''}")
        for r in read_table("transfer_relations") if r["kind"] == kind}


def transfer_velocity_m_d(wind_m_s: ArrayLike, t_c: ArrayLike, relation: str = "cole_caraco", *,
                          lake_area_m2: ArrayLike = np.nan, schmidt: str = SCHMIDT) -> Array:
    """Transfer velocity of CO2 in fresh water by named relations. [m/d]

    nan where a reading that the relation needs is missing; `TransferRelation.outside` tells where it is stretched.
    Raises InputError for a name that is not in the table.
    """
    of_wind = _named("the wind relation", relation, transfer_relations())
    of_warmth = _named("the Schmidt number relation", schmidt, schmidt_relations())
    return k_at_schmidt(of_wind(wind_m_s=wind_m_s, lake_area_m2=lake_area_m2), of_warmth(t_c=t_c), wind_m_s)


def _named(subject: str, name: str, relations: Mapping[str, TransferRelation]) -> TransferRelation:
    if name not in relations:
        raise InputError(f"{subject} must be one of {', '.join(relations)}; found {name!r}. Correct it.")
    return relations[name]

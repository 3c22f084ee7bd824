"""Indices of scale and corrosion, with their constants named and their verdict in words.

No index is left as a bare sign: a water "deposits" or "dissolves" calcium carbonate. Bands are rows of
`index_bands.csv`; hand over your own where a local rule outranks them.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.arrays import common_shape
from aquabuf.chem.products import molar_mass
from aquabuf.engine.water import Water
from aquabuf.errors import InputError
from aquabuf.tables import read_table
from aquabuf.units import to_house

__all__ = ["FULL_CONSTANTS", "SIGN_HABITS", "TABLE_CONSTANTS", "Band", "Langelier", "band_names", "banded", "bands",
           "chloride_sulfate_ratio", "langelier", "langelier_constant", "langelier_words", "larson_ratio",
           "low_point_words", "potential_mg_l", "potential_words", "ryznar_index"]

Array = NDArray[np.float64]

EDGE = 1e-9                 # relative distance within which a value is the limit itself
TDS_PER_STRENGTH = 1 / 2.5e-5  # mg/L of dissolved solids per mol/L of ionic strength: Langelier 1936
NOTHING_INDEX = 0.005       # saturation index that is written as 0.00
NOTHING_MG_L = 0.05         # of calcium carbonate, below which a water is called balanced
TABLE_CONSTANTS = ("printed table of pHs = pCa + pAlk + C (Davis, Water and Wastewater Engineering, Table 7-5), with "
                   "constants of 1936 to 1941")
FULL_CONSTANTS = "full speciation with Plummer & Busenberg 1982, their ion pairs and Davies activities"
SIGN_HABITS = ("Two sign habits are about: here and in most handbooks a positive precipitation potential deposits; "
               "as final less initial alkalinity of a marble test, in some state rules, positive dissolves.")


@dataclass(frozen=True, slots=True, kw_only=True)
class Band:
    """One row of the table: values between two limits, each with whether it belongs, and what they mean."""

    quantity: str
    unit: str
    lower: float
    lower_belongs: bool
    upper: float
    upper_belongs: bool
    alkalinity_from: float   # [mg/L as CaCO3], belongs
    alkalinity_below: float
    name: str
    words: str
    mark: str
    source: str

    def holds(self, value: Array, alkalinity_mg_l_caco3: Array) -> NDArray[np.bool_]:
        """Where a value is in this band; never where it is missing."""
        v, alk = value, alkalinity_mg_l_caco3
        at_lower, at_upper = (np.isclose(v, limit, rtol=EDGE, atol=EDGE**2) for limit in (self.lower, self.upper))
        with np.errstate(invalid="ignore"):
            inside = np.where(at_lower, self.lower_belongs, v > self.lower) & np.where(
                at_upper, self.upper_belongs | np.isinf(self.upper), v < self.upper)
            if np.isfinite(self.alkalinity_from) or np.isfinite(self.alkalinity_below):
                inside &= (alk >= self.alkalinity_from) & (alk < self.alkalinity_below)
        return inside


@cache
def _all_bands() -> tuple[Band, ...]:
    return tuple(Band(
        quantity=r["quantity"], unit=r["unit"], lower=float(r["lower"] or "-inf"), upper=float(r["upper"] or "inf"),
        lower_belongs=r["lower_belongs"] == "yes", upper_belongs=r["upper_belongs"] == "yes",
        alkalinity_from=float(r["alkalinity_from_mg_l_caco3"] or "-inf"),
        alkalinity_below=float(r["alkalinity_below_mg_l_caco3"] or "inf"), name=r["name"], words=r["words"],
        mark=r["mark"], source=r["source"]) for r in read_table("index_bands"))


def bands(quantity: str) -> tuple[Band, ...]:
    """Shipped bands of a quantity. Raises InputError for one that has none."""
    names = tuple(dict.fromkeys(b.quantity for b in _all_bands()))
    if quantity not in names:
        raise InputError(f"bands are known for {', '.join(names)}; found {quantity!r}. Correct the name.")
    return tuple(b for b in _all_bands() if b.quantity == quantity)


def banded(quantity: str, value: ArrayLike, alkalinity_mg_l_caco3: ArrayLike = np.nan, *,
           table: tuple[Band, ...] | None = None) -> NDArray[np.object_]:
    """Band of each value (in the unit of the bands), None where it is missing or no band holds it.

    Where bands ask for the alkalinity it must be given, else the value has no band. `table` takes the place of the
    shipped bands.
    """
    return _by_band(quantity, value, alkalinity_mg_l_caco3, table, None, lambda band: band)


def band_names(quantity: str, value: ArrayLike, alkalinity_mg_l_caco3: ArrayLike = np.nan, *,
               table: tuple[Band, ...] | None = None) -> NDArray[np.object_]:
    """Name of the band of each value, "" where there is none."""
    return _by_band(quantity, value, alkalinity_mg_l_caco3, table, "", lambda band: band.name)


def _by_band(quantity: str, value: ArrayLike, alkalinity: ArrayLike, table: tuple[Band, ...] | None, missing: object,
             of: Callable[[Band], object]) -> NDArray[np.object_]:
    shape = common_shape(value, alkalinity)
    v, alk = (np.broadcast_to(np.asarray(x, dtype=float), shape) for x in (value, alkalinity))
    out = np.full(shape, missing, dtype=object)
    for band in bands(quantity) if table is None else table:
        out[band.holds(v, alk)] = of(band)
    return out


# -------------------------------------------------------------- saturation


@cache
def _grid() -> tuple[Array, Array, Array]:
    """Dissolved solids, temperatures, and constants of the printed table; nan where the print is cut."""
    rows = [(float(r["tds_mg_l"]), float(r["t_c"]), float(r["constant"])) for r in read_table("langelier_constants")]
    tds, t = (np.unique([row[i] for row in rows]) for i in (0, 1))
    values = np.full((tds.size, t.size), np.nan)
    for at_tds, at_t, constant in rows:
        values[np.searchsorted(tds, at_tds), np.searchsorted(t, at_t)] = constant
    return tds, t, values


def langelier_constant(t_c: ArrayLike, tds_mg_l: ArrayLike) -> tuple[Array, NDArray[np.bool_]]:
    """C of pHs = pCa + pAlk + C by temperature [°C] and dissolved solids [mg/L], bilinear; and whether it is in range.

    Outside the printed table (0 to 90 °C, 0 to 600 mg/L) the nearest edge stands in and the flag is False; nan where
    the print is cut (600 mg/L above 70 °C).
    """
    tds, t, values = _grid()
    shape = common_shape(t_c, tds_mg_l)
    row, up = _place(np.broadcast_to(np.asarray(tds_mg_l, dtype=float), shape), tds)
    column, right = _place(np.broadcast_to(np.asarray(t_c, dtype=float), shape), t)
    total = np.zeros(shape)
    for down, weight_row in ((0, 1.0 - up), (1, up)):
        for side, weight_column in ((0, 1.0 - right), (1, right)):
            weight = weight_row * weight_column
            total = total + np.where(weight == 0.0, 0.0, weight * values[row + down, column + side])
    with np.errstate(invalid="ignore"):
        inside = ((np.asarray(t_c) >= t[0]) & (np.asarray(t_c) <= t[-1])
                  & (np.asarray(tds_mg_l) >= tds[0]) & (np.asarray(tds_mg_l) <= tds[-1]))
    return total, inside & np.isfinite(total)


def _place(value: Array, knots: Array) -> tuple[NDArray[np.intp], Array]:
    """Index of the knot below each value, held to the table, and the share of the way to the next; nan stays."""
    held = np.clip(value, knots[0], knots[-1])
    below = np.clip(np.searchsorted(knots, np.nan_to_num(held), side="right") - 1, 0, knots.size - 2)
    return below, (held - knots[below]) / (knots[below + 1] - knots[below])


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Langelier:
    """Saturation index of a water by the printed table and by full speciation; arrays of rows.

    constant, in_range : C, and whether temperature and dissolved solids lie in the table.
    ph_saturation, index : by the table. full_index, full_ph_saturation : by speciation at the water's own pH; the
        latter is pH less index, so that both saturation pH values mean the same. difference : table less full. [-]
    """

    constant: Array
    in_range: NDArray[np.bool_]
    ph_saturation: Array
    index: Array
    full_ph_saturation: Array
    full_index: Array
    difference: Array


def langelier(water: Water, tds_mg_l: ArrayLike | None = None) -> Langelier:
    """Simplified saturation pH (pCa in mol/L, pAlk in eq/L) beside full speciation for calcite.

    Without `tds_mg_l` the dissolved solids follow from the ionic strength (2.5e-5 mol/L per mg/L, Langelier 1936). Nan
    where calcium or alkalinity is missing or not above zero.
    """
    tds = water.ionic_strength_mol_l * TDS_PER_STRENGTH if tds_mg_l is None else np.asarray(tds_mg_l, dtype=float)
    constant, inside = langelier_constant(water.t_c, tds)
    full = water.saturation_index()
    ph_s = _p(water.total_mol_l("calcium")) + _p(water.alkalinity_eq_l) + constant
    index = water.ph - ph_s
    return Langelier(constant=constant, in_range=inside, ph_saturation=ph_s, index=index, full_index=full,
                     full_ph_saturation=water.ph - full, difference=index - full)


def _p(value: Array) -> Array:
    """-log10, nan where it has none."""
    with np.errstate(invalid="ignore"):
        some = value > 0.0
    return -np.log10(np.where(some, value, np.nan))


def ryznar_index(ph: ArrayLike, ph_saturation: ArrayLike) -> Array:
    """Twice the saturation pH less the pH. [-] Source: Ryznar 1944, J. AWWA 36:472."""
    return 2.0 * np.asarray(ph_saturation, dtype=float) - np.asarray(ph, dtype=float)


def langelier_words(found: Langelier, row: int = 0) -> str:
    """Both saturation indices of one row, what they say, their difference and their constants."""
    table, full, gap = (float(np.ravel(v)[row]) for v in (found.index, found.full_index, found.difference))
    if np.isnan(full):
        return "Saturation with calcium carbonate is not known: calcium or alkalinity is missing or not above zero."
    said = f"The water {_does(full)} calcium carbonate: saturation index {full:+.2f} ({FULL_CONSTANTS})."
    if np.isnan(table):
        return f"{said} The printed table has no value there."
    edge = "" if np.ravel(found.in_range)[row] else "; outside the table, its edge stands in"
    return (f"{said} {table:+.2f}, {_does(table)}, by the {TABLE_CONSTANTS}{edge}: {abs(gap):.2f} "
            f"{'lower' if gap < 0.0 else 'higher'}.")


def _does(index: float) -> str:
    """What a saturation index says, in a word."""
    if abs(index) < NOTHING_INDEX:
        return "neither deposits nor dissolves"
    return "deposits" if index > 0.0 else "dissolves"


def potential_mg_l(potential_mol_l: ArrayLike) -> Array:
    """Precipitation potential as calcium carbonate; positive deposits. [mg/L]"""
    return 1e3 * molar_mass("CaCO3") * np.asarray(potential_mol_l, dtype=float)


def potential_words(potential_mol_l: float) -> str:
    """A precipitation potential (positive deposits, as the engine counts) in words. [mol/L]"""
    mg_l = float(potential_mg_l(potential_mol_l))
    if np.isnan(mg_l):
        return "precipitation potential not known"
    if abs(mg_l) < NOTHING_MG_L:
        return "neither deposits nor dissolves calcium carbonate"
    return f"{'deposits' if mg_l > 0.0 else 'dissolves'} {abs(mg_l):.1f} mg/L CaCO3"


# -------------------------------------------------------------- corrosion


def larson_ratio(chloride_mol_l: ArrayLike, sulfate_mol_l: ArrayLike, alkalinity_eq_l: ArrayLike) -> Array:
    """(Cl- + SO4--) over alkalinity, in equivalents; inf where no alkalinity is left. [-]

    Source: Larson & Skold 1958, Corrosion 14:285 (recalled).
    """
    return _ratio(np.asarray(chloride_mol_l, dtype=float) + 2.0 * np.asarray(sulfate_mol_l, dtype=float),
                  np.asarray(alkalinity_eq_l, dtype=float))


def chloride_sulfate_ratio(chloride_mol_l: ArrayLike, sulfate_mol_l: ArrayLike) -> Array:
    """Chloride over sulfate by mass; inf where there is no sulfate. [-]"""
    return _ratio(np.asarray(chloride_mol_l, dtype=float) * molar_mass("Cl"),
                  np.asarray(sulfate_mol_l, dtype=float) * molar_mass("SO4"))


def _ratio(above: Array, below: Array) -> Array:
    """Quotient; inf over zero or less, nan where that is nothing over nothing or a value is missing."""
    with np.errstate(invalid="ignore"):
        some = below > 0.0
        endless = np.where((above > 0.0) & (below <= 0.0), np.inf, np.nan)
    return np.where(some, above / np.where(some, below, 1.0), endless)


def low_point_words(water: Water, row: int = 0) -> str:
    """Where the water buffers least near its pH, and how it stands to that point."""
    found = water.weakest_buffering()
    ph, least, ahead = (float(np.ravel(v)[row]) for v in (found.ph, found.intensity, found.distance))
    if np.isnan(ph):
        return "No pH of least buffering lies near."
    here, now = (float(np.ravel(v)[row]) for v in (water.ph, water.buffer_intensity_eq_l()))
    where = "is just there" if abs(ahead) < 0.005 else f"lies {abs(ahead):.2f} {'below' if ahead > 0.0 else 'above'} it"
    meq_l = to_house(np.array([least, now]), "meq/L", "alkalinity", back=True)
    return (f"The water buffers least at pH {ph:.2f}, with {meq_l[0]:.3g} meq/L per pH; pH {here:.2f} {where}, with "
            f"{meq_l[1]:.3g}.")

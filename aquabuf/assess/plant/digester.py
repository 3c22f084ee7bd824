"""Anaerobic digesters: volatile acids against alkalinity, bicarbonate alkalinity, pH from the gas, alkali to add.

Volatile acids are counted as equivalents of acid, alkalinity as titrated; both in eq/L. The sludge is taken to be in
balance with its gas, so that alkali raises the pH by its equivalents alone, whatever carbon it brings. Limits are rows
of `index_bands.csv`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize.elementwise import find_root

from aquabuf.arrays import exp10
from aquabuf.assess.plant.indices import banded
from aquabuf.chem.acids import acid_named
from aquabuf.chem.gases import pco2_of_air
from aquabuf.chem.products import molar_mass
from aquabuf.engine.conditions import conditions
from aquabuf.engine.water import Water
from aquabuf.errors import InputError
from aquabuf.units import to_house

__all__ = ["ACID_IN_TITRATION", "Alkali", "Digester", "acid_ratio", "alkali_for", "bicarbonate_alkalinity",
           "digester", "digester_words", "gas_pco2", "titrated_share"]

Array = NDArray[np.float64]

CACO3 = "mg/L as CaCO3"
BICARBONATE, LIME = "NaHCO3", "Ca(OH)2"
ACID_IN_TITRATION = 0.85  # share of volatile acids that the alkalinity titration to about pH 4.0 counts (recalled)
MOST_LIME_MOL_L = 1.0     # search for the lime limit ends here
LEAST_TOLD_MG_L = 0.5     # of sodium bicarbonate; less is told as 0
NO_BICARBONATE = ("No bicarbonate is left, so that the volatile acids and not the gas set the pH, near their pKa of "
                  "4.8 or below: measure it.")


def acid_ratio(volatile_acids_eq_l: ArrayLike, alkalinity_eq_l: ArrayLike) -> Array:
    """Volatile acids as mg/L acetic acid over alkalinity as mg/L CaCO3: the ratio of the limits. [-]

    In equivalents it is smaller: 60.05 / 50.04 = 1.2 mg/mg per eq/eq. Inf where no alkalinity is left.
    """
    acid = 1e3 * molar_mass("CH3COOH") * np.asarray(volatile_acids_eq_l, dtype=float)
    alkalinity = _mg_l(alkalinity_eq_l)
    with np.errstate(invalid="ignore"):
        some, endless = alkalinity > 0.0, (acid > 0.0) & (alkalinity <= 0.0)
    return np.where(some, acid / np.where(some, alkalinity, 1.0), np.where(endless, np.inf, np.nan))


def _mg_l(alkalinity_eq_l: ArrayLike) -> Array:
    return to_house(np.asarray(alkalinity_eq_l, dtype=float), CACO3, "alkalinity", back=True)


def titrated_share(end_ph: ArrayLike, sample_ph: ArrayLike = 7.0, *, t_c: ArrayLike = 25.0,
                   ionic_strength_mol_l: ArrayLike = 0.0) -> Array:
    """Share of volatile acids, as acetate, that takes up acid between the sample's pH and the end point. [-]

    Base fraction K / (K + H) at the sample's pH less that at the end point; temperature is that of the titration.
    """
    c = conditions(t_c, 0.0, ionic_strength_mol_l)
    (k,) = c.acid_constants(acid_named("acetate"))
    return 1.0 / (1.0 + exp10(-np.asarray(sample_ph)) / k) - 1.0 / (1.0 + exp10(-np.asarray(end_ph)) / k)


def bicarbonate_alkalinity(alkalinity_eq_l: ArrayLike, volatile_acids_eq_l: ArrayLike,
                           share: ArrayLike = ACID_IN_TITRATION) -> Array:
    """Total alkalinity less the part of the volatile acids that it counts. [eq/L]

    In the trade's units the factor is 0.833 share (50.04 / 60.05 by stoichiometry): 0.71 with the usual 0.85. `share`
    belongs to the end point of the titration, see `titrated_share`.
    """
    return np.asarray(alkalinity_eq_l, dtype=float) - np.asarray(share) * np.asarray(volatile_acids_eq_l, dtype=float)


def gas_pco2(co2_share: ArrayLike, t_c: ArrayLike, pressure_atm: ArrayLike = 1.0) -> Array:
    """CO2 pressure over the sludge from its share of the dry gas: share (P - vapor pressure). [atm]

    `pressure_atm` is the whole pressure in the head space. Vapor pressure holds to 60 °C within 0.5 %.
    """
    return pco2_of_air(1e6 * np.asarray(co2_share, dtype=float), t_c, pressure_atm)


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Digester:
    """State of a digester; arrays of rows.

    ratio : mg/L acetic acid over mg/L CaCO3; ratio_eq : the same in equivalents. [-]
    bicarbonate_eq_l : total alkalinity less what it counts of the volatile acids. [eq/L]
    pco2_atm : of the gas over the sludge. water : bicarbonate alkalinity in balance with it; its pH is `ph`.
    ratio_band, bicarbonate_band, ph_band : verdicts, as `Band` or None.
    """

    alkalinity_eq_l: Array
    volatile_acids_eq_l: Array
    ratio: Array
    ratio_eq: Array
    bicarbonate_eq_l: Array
    pco2_atm: Array
    water: Water
    ratio_band: NDArray[np.object_]
    bicarbonate_band: NDArray[np.object_]
    ph_band: NDArray[np.object_]

    @property
    def ph(self) -> Array:
        """pH that the gas and the bicarbonate alkalinity ask for; nan where no bicarbonate is left to set it."""
        return _ph(self.water)


def _ph(water: Water) -> Array:
    return np.where(water.alkalinity_eq_l > 0.0, water.ph, np.nan)


def digester(*, alkalinity_eq_l: ArrayLike, volatile_acids_eq_l: ArrayLike, co2_share: ArrayLike, t_c: ArrayLike,
             ionic_strength_mol_l: ArrayLike, pressure_atm: ArrayLike = 1.0, acid_share: ArrayLike = ACID_IN_TITRATION,
             calcium_mol_l: ArrayLike = np.nan) -> Digester:
    """Judge a digester from total alkalinity, volatile acids and the CO2 share of its gas.

    Parameters
    ----------
    alkalinity_eq_l, volatile_acids_eq_l
        As titrated; volatile acids with or without their proton count alike. [eq/L]
    co2_share
        Of the dry gas, 0 to 1. [-]
    acid_share
        Of the volatile acids that the alkalinity counts, see `titrated_share`. [-]

    Raises InputError where a share is not between 0 and 1.
    """
    shares = np.asarray(co2_share, dtype=float)
    if (shares < 0.0).any() or (shares > 1.0).any():
        raise InputError(f"co2_share must be between 0 and 1; found {shares[(shares < 0.0) | (shares > 1.0)][0]:g}. "
                         f"Give 35 % as 0.35.")
    alkalinity, acids = (np.asarray(v, dtype=float) for v in (alkalinity_eq_l, volatile_acids_eq_l))
    bicarbonate = bicarbonate_alkalinity(alkalinity, acids, acid_share)
    pco2 = gas_pco2(shares, t_c, pressure_atm)
    water = Water.from_alkalinity_pco2(alkalinity_eq_l=bicarbonate, pco2_atm=pco2, t_c=t_c, calcium_mol_l=calcium_mol_l,
                                       ionic_strength_mol_l=ionic_strength_mol_l, pressure_atm=pressure_atm)
    ratio = acid_ratio(acids, alkalinity)
    per_eq = acid_ratio(1.0, 1.0)
    return Digester(
        alkalinity_eq_l=alkalinity, volatile_acids_eq_l=acids, ratio=ratio, ratio_eq=ratio / per_eq,
        bicarbonate_eq_l=bicarbonate, pco2_atm=pco2, water=water, ratio_band=banded("volatile_acid_ratio", ratio),
        bicarbonate_band=banded("bicarbonate_alkalinity", _mg_l(bicarbonate)),
        ph_band=banded("digester_ph", _ph(water)))


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Alkali:
    """Alkali that brings a digester back; arrays of rows, zero where nothing is lacking.

    added_eq_l : equivalents that are lacking. bicarbonate_mol_l : as sodium bicarbonate, the first choice, which asks
        nothing of the gas. lime_mol_l : as hydrated lime instead. [eq/L, mol/L]
    co2_taken_mol_l : that the lime takes out of the gas, two per mole. [mol/L]
    lime_limit_mol_l : lime at which calcite begins to be supersaturated with the gas held; nan without calcium. [mol/L]
    lime_band : what practice says of lime at the bicarbonate alkalinity that is reached.
    ph : after the alkali, at the CO2 pressure of the gas.
    """

    added_eq_l: Array
    bicarbonate_mol_l: Array
    lime_mol_l: Array
    co2_taken_mol_l: Array
    lime_limit_mol_l: Array
    lime_band: NDArray[np.object_]
    ph: Array


def alkali_for(found: Digester, *, ratio: ArrayLike | None = None, ph: ArrayLike | None = None) -> Alkali:
    """Alkali for a wanted ratio (mg acetic acid per mg CaCO3) or pH; with both, whichever asks more.

    The ratio by definition, with the volatile acids as they are; the pH with the gas's CO2 pressure held, so that an
    equivalent of any alkali counts the same. Raises InputError without a target, or for a ratio not above zero.
    """
    if ratio is None and ph is None:
        raise InputError("a target is needed: ratio or ph; found none. Give one or both.")
    lacking = np.zeros(found.water.shape)
    if ratio is not None:
        wanted = np.asarray(ratio, dtype=float)
        if (wanted <= 0.0).any():
            raise InputError(f"ratio must be above zero; found {wanted.min():g}. A usual one is 0.25.")
        needed = found.volatile_acids_eq_l * acid_ratio(1.0, 1.0) / wanted
        lacking = np.maximum(lacking, needed - found.alkalinity_eq_l)
    if ph is not None:
        lacking = np.maximum(lacking, found.water.base_to_ph_eq_l(ph, "open"))
    after = found.bicarbonate_eq_l + lacking
    return Alkali(added_eq_l=lacking, bicarbonate_mol_l=lacking, lime_mol_l=0.5 * lacking, co2_taken_mol_l=lacking,
                  lime_limit_mol_l=_lime_limit(found.water),
                  lime_band=banded("lime_bicarbonate_alkalinity", _mg_l(after)),
                  ph=found.water.after_acid(-lacking, "open").ph)


def _lime_limit(water: Water) -> Array:
    """Hydrated lime at which calcite saturation is reached, the CO2 pressure held; 0 where it is passed. [mol/L]"""
    given = [np.ravel(v) for v in (water.alkalinity_eq_l, water.total_mol_l("calcium"), water.pco2_atm, water.t_c,
                                   water.ionic_strength_mol_l, water.pressure_atm)]

    def index(lime: Array, *row: Array) -> Array:
        alkalinity, calcium, pco2, t_c, strength, pressure = row
        return Water.from_alkalinity_pco2(
            alkalinity_eq_l=alkalinity + 2.0 * lime, calcium_mol_l=calcium + lime, pco2_atm=pco2, t_c=t_c,
            ionic_strength_mol_l=strength, pressure_atm=pressure).saturation_index()

    now = index(np.zeros(given[0].shape), *given)
    root = find_root(index, (np.zeros(given[0].shape), np.full(given[0].shape, MOST_LIME_MOL_L)), args=tuple(given))
    with np.errstate(invalid="ignore"):
        limit = np.where(now >= 0.0, 0.0, np.where(root.success, root.x, np.nan))
    return limit.reshape(water.shape)


def digester_words(found: Digester, alkali: Alkali | None = None, row: int = 0) -> str:
    """The state of one digester and the alkali it lacks, for a person."""
    def at(v: ArrayLike) -> float:
        return float(np.ravel(np.broadcast_to(v, found.water.shape))[row])

    def said(band: NDArray[np.object_]) -> str:
        one = np.ravel(band)[row]
        return "not known" if one is None else f"{one.name}: {one.words}"

    lines = [f"Volatile acids over alkalinity {at(found.ratio):.2f} mg acetic acid per mg CaCO3 "
             f"({at(found.ratio_eq):.2f} in equivalents), {said(found.ratio_band)}.",
             f"Bicarbonate alkalinity {at(_mg_l(found.bicarbonate_eq_l)):.0f} {CACO3}, {said(found.bicarbonate_band)}.",
             f"pH {at(found.ph):.2f} with {at(found.pco2_atm):.3f} atm of CO2 in the gas, {said(found.ph_band)}."
             if at(found.bicarbonate_eq_l) > 0.0 else NO_BICARBONATE]
    if not np.isfinite(at(found.water.ph)):
        return "The state of the digester is not known: a reading is missing or outside the range of the constants."
    soda = 0.0 if alkali is None else 1e3 * molar_mass(BICARBONATE) * at(alkali.bicarbonate_mol_l)
    if alkali is not None and soda >= LEAST_TOLD_MG_L:
        lime = 1e3 * molar_mass(LIME)
        limit = at(alkali.lime_limit_mol_l)
        start = "already" if limit == 0.0 else f"from {lime * limit:.0f} mg/L of it on"
        bound = "" if np.isnan(limit) else f"; calcite is supersaturated {start}"
        lines.append(f"To bring it back: {soda:.0f} mg/L of sodium bicarbonate, the first choice, to pH "
                     f"{at(alkali.ph):.2f}.")
        lines.append(f"Hydrated lime would be {lime * at(alkali.lime_mol_l):.0f} mg/L and take "
                     f"{1e3 * at(alkali.co2_taken_mol_l):.3g} mmol/L of carbon dioxide out of the gas, whose pressure "
                     f"falls{bound}. Lime at the alkalinity that is reached, {said(alkali.lime_band)}.")
    elif alkali is not None:
        lines.append("No alkali is lacking.")
    return " ".join(lines)

"""Readings of lakes as the lake questions want them: charges per ion, what they rest on, the conditions of each water.

Arrays have the shape (lakes, 1), or (lakes, draws) for random draws of the readings; conditions are (lakes, 1).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.sample.inputs import ionic_strength, pressure, reading
from aquabuf.chem.gases import pco2_of_air
from aquabuf.chem.organic import OrganicModel
from aquabuf.engine.conditions import Conditions, conditions
from aquabuf.engine.lake import LakeBalance
from aquabuf.units import substances

__all__ = ["ANION_NAMES", "BASE_CATIONS", "CATION_NAMES", "IONS", "ORGANIC_U_REL", "STRONG_ANIONS", "Lakes", "Setting",
           "as_recorded", "setting_of", "words_of"]

Array = NDArray[np.float64]

BASE_CATIONS = ("calcium", "magnesium", "sodium", "potassium")
STRONG_ANIONS = ("sulfate", "nitrate", "chloride")
CATION_NAMES, ANION_NAMES = (*BASE_CATIONS, "ammonium"), (*STRONG_ANIONS, "fluoride")
IONS = (*CATION_NAMES, *ANION_NAMES)
ORGANIC_U_REL = 0.15  # of the charge of organic anions: what the published models differ by at pH 5 to 6.5 (derived)
LEAST_STRENGTH = 2e-5  # mol/L where nothing tells it; activity coefficients are within 0.5 % of 1 there


@dataclass(frozen=True, slots=True, eq=False)
class Setting:
    """What does not vary between draws: constants in the lake and at the temperature of the pH reading, CO2 of air.

    air_pco2_atm : CO2 pressure of air over the lake; air_co2_mol_l : CO2 dissolved at equilibrium with it.
    """

    lake: Conditions
    at_meter: Conditions
    moved: NDArray[np.bool_]  # whether pH was read at another temperature than the lake's
    air_pco2_atm: Array
    air_co2_mol_l: Array

    def take(self, rows: NDArray[np.intp] | slice) -> Setting:
        """The same for some of the lakes."""
        return Setting(_take(self.lake, rows), _take(self.at_meter, rows), self.moved[rows], self.air_pco2_atm[rows],
                       self.air_co2_mol_l[rows])


def _take(c: Conditions, rows: Any) -> Conditions:
    fields = {n: getattr(c, n)[rows] for n in c.__dataclass_fields__ if n != "_cache"}
    return Conditions(**fields)


def words_of(frame: pd.DataFrame, name: str) -> NDArray[np.object_]:
    """A column of words; empty where it was not given."""
    return frame[name].to_numpy(dtype=object) if name in frame else np.full(len(frame), "", dtype=object)


def as_recorded(values: Mapping[str, Array], filtered: NDArray[np.object_], ph_kind: NDArray[np.object_],
                anc_method: NDArray[np.object_]) -> dict[str, Array]:
    """Values under the names that their record asks for.

    A titration of a filtered sample is an alkalinity and one of a whole sample an ANC, whichever column it came in; a
    pH read after air was bubbled through is no pH of the lake.
    """
    out = dict(values)
    for words, source, target in (("yes", "anc", "alkalinity"), ("no", "alkalinity", "anc")):
        rows = (filtered == words) & (anc_method != "charge_balance")
        _move(out, rows, f"{source}_eq_l", f"{target}_eq_l", f"{source}_u_eq_l", f"{target}_u_eq_l")
    bubbled = ph_kind == "air_equilibrated"
    _move(out, bubbled, "ph", "ph_air_equilibrated", "ph_u", "ph_air_equilibrated_u")
    if "ph" in out:
        out["ph"] = np.where(bubbled, np.nan, out["ph"])
    return out


def _move(values: dict[str, Array], rows: NDArray[np.bool_], source: str, target: str, source_u: str, target_u: str,
          ) -> None:
    """Move values with their uncertainty to another name, where that has none."""
    if source not in values or not rows.any():
        return
    nothing = np.full(rows.shape, np.nan)
    there = values.get(target, nothing)
    moved = rows & np.isnan(there)
    for name, new in ((source, target), (source_u, target_u)):
        old, have = values.get(name, nothing), values.get(new, nothing)
        values[new] = np.where(moved, old, have)
        values[name] = np.where(moved, np.nan, old)


def setting_of(values: Mapping[str, Array], air_co2_ppm: float, carbonic: str = "millero") -> Setting:
    """Conditions of each row of `values` (one-dimensional); nan where the temperature is missing."""
    t = values["temperature_c"]
    strength = ionic_strength(values)[0]
    titrated = np.fmax(np.abs(reading(values, "anc_eq_l")), np.abs(reading(values, "alkalinity_eq_l")))
    strength = np.where(np.isnan(strength), np.fmax(titrated, LEAST_STRENGTH), strength)
    salinity, p = np.nan_to_num(reading(values, "salinity")), pressure(values)
    t_ph = reading(values, "ph_temperature_c")
    moved = np.isfinite(t_ph) & np.isfinite(t) & (t_ph != t)

    def at(temperature: Array) -> Conditions:
        c = conditions(temperature, salinity, strength, pressure_atm=p, carbonic=carbonic)
        return _take(c, (slice(None), None))

    lake = at(t)
    air = pco2_of_air(air_co2_ppm, lake.t_c, lake.pressure_atm, lake.salinity)
    return Setting(lake, at(np.where(moved, t_ph, t)) if moved.any() else lake, moved[:, None], air, air * lake.k0)


@dataclass(frozen=True, slots=True, eq=False)
class Lakes:
    """Values in house units by column name, of shape (lakes, 1) or (lakes, draws), with what they are solved with.

    organic_error : factor on the charge of organic anions, 1 for the value itself, drawn for its uncertainty.
    """

    values: Mapping[str, Array]
    setting: Setting
    organic: OrganicModel
    organic_error: Array

    def get(self, name: str) -> Array:
        """Values of a column; nan where it was not measured."""
        found = self.values.get(name)
        return np.full((self.setting.air_pco2_atm.shape[0], 1), np.nan) if found is None else found

    def charge(self, ion: str) -> Array:
        """Charge of a strong ion as measured, always positive; nan where missing. [eq/L]"""
        of = substances()[ion]
        return abs(of.charge or 1) * self.get(f"{ion}_mol_l")

    @property
    def doc_mg_l(self) -> Array:
        """Organic carbon as the organic acids count it: none where not measured, times the drawn model error. [mg/L]"""
        return np.nan_to_num(self.get("doc_mg_l")) * self.organic_error

    @property
    def aluminum_mol_l(self) -> Array:
        """Dissolved aluminum; none where not measured. [mol/L]"""
        return np.nan_to_num(self.get("aluminum_mol_l"))

    def balance(self, *, at_meter: bool = False) -> LakeBalance:
        """Charge balance in the lake, or at the temperature of the pH reading."""
        s = self.setting
        return LakeBalance(s.at_meter if at_meter else s.lake, self.doc_mg_l, self.aluminum_mol_l, self.organic)

"""How pH answers to ANC in a survey's waters once they are at equilibrium with air: curves to set its lakes against."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.lake.budget import left_out_by_gran
from aquabuf.assess.lake.inputs import LEAST_STRENGTH
from aquabuf.assess.sample.inputs import ionic_strength
from aquabuf.chem.gases import pco2_of_air
from aquabuf.chem.organic import OrganicModel
from aquabuf.engine.conditions import LIMITS, conditions
from aquabuf.engine.lake import LakeBalance
from aquabuf.errors import InputError

__all__ = ["BROWN_QUANTILE", "CO2_TIMES", "ResponseCurves", "response_curves", "survey_response"]

Array = NDArray[np.float64]

CO2_TIMES = (1.0, 4.0)  # of the CO2 of air, between which many lakes lie; practice
BROWN_QUANTILE = 0.9    # of the survey's organic carbon, for its brown water; practice
PH = np.linspace(2.5, 10.5, 401)
MOST_STRENGTH = LIMITS["ionic_strength_mol_l"][1]  # up to which the activity equation holds
PASSES = 12             # until ionic strength and ANC agree; each leaves less than a third of the difference


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ResponseCurves:
    """pH and the ANC that belongs to it, in clear and in brown water, for each multiple of the CO2 of air.

    ph : (points,), rising. clear_eq_l, brown_eq_l : Gran ANC, (multiples, points); nan beyond the range of the activity
    equation, and in brown water where its organic carbon is not known. [eq/L]
    left_out_eq_l : what the charge balance of the brown water has beyond its Gran ANC. [eq/L]
    The rest is what they were worked out for.
    """

    ph: Array
    clear_eq_l: Array
    brown_eq_l: Array
    left_out_eq_l: float
    temperature_c: float
    ionic_strength_mol_l: float
    air_co2_ppm: float
    doc_mg_l: float


def response_curves(temperature_c: float, ionic_strength_mol_l: float, air_co2_ppm: float, doc_mg_l: float,
                    organic_model: OrganicModel) -> ResponseCurves:
    """pH against Gran ANC of water at equilibrium with air, and with `CO2_TIMES` its CO2.

    Parameters
    ----------
    temperature_c, ionic_strength_mol_l
        Of the water. Where ANC alone takes more ions than that, the ionic strength is the ANC.
    air_co2_ppm
        Mole fraction of CO2 in dry air at sea level.
    doc_mg_l, organic_model
        Organic carbon of the brown water (nan for none known) and its acids. The clear water has none.

    Returns
    -------
    ResponseCurves

    Raises
    ------
    InputError
        For a temperature, ionic strength, CO2 or organic carbon that no lake has.
    """
    _check("temperature", temperature_c, LIMITS["t_c"][2], LIMITS["t_c"][3], "°C")
    _check("ionic strength", ionic_strength_mol_l, 0.0, MOST_STRENGTH, "mol/L")
    _check("air CO2", air_co2_ppm, 1.0, 1e6, "ppm")
    if not np.isnan(doc_mg_l):
        _check("organic carbon", doc_mg_l, 0.0, np.inf, "mg/L")
    pco2 = float(pco2_of_air(air_co2_ppm, temperature_c)) * np.array(CO2_TIMES)[:, None]
    left_out = float(left_out_by_gran(organic_model, np.array(doc_mg_l), np.zeros(1))[0])
    clear, brown = (_anc(temperature_c, ionic_strength_mol_l, pco2, doc, organic_model) for doc in (0.0, doc_mg_l))
    return ResponseCurves(ph=PH, clear_eq_l=clear, brown_eq_l=brown - left_out, left_out_eq_l=left_out,
                          temperature_c=temperature_c, ionic_strength_mol_l=ionic_strength_mol_l,
                          air_co2_ppm=air_co2_ppm, doc_mg_l=doc_mg_l)


def _check(what: str, value: float, low: float, high: float, unit: str) -> None:
    if not low <= value <= high:
        raise InputError(f"the {what} of a response curve must be from {low:g} to {high:g} {unit}; found {value:g}. "
                         "Take the survey's median.")


def _anc(t_c: float, strength: float, pco2_atm: Array, doc_mg_l: float, organic: OrganicModel) -> Array:
    """Charge-balance ANC at each pH; nan where it takes more ions than the activity equation can."""
    at_least = np.full((pco2_atm.shape[0], PH.size), strength)
    anc = np.zeros_like(at_least)
    for _ in range(PASSES):
        c = conditions(t_c, 0.0, np.minimum(np.fmax(at_least, np.abs(anc)), MOST_STRENGTH))
        anc = LakeBalance(c, np.array(doc_mg_l), np.zeros(1), organic).anc(PH, co2=pco2_atm * c.k0)
    return np.where(np.abs(anc) <= MOST_STRENGTH, anc, np.nan)


def survey_response(results: pd.DataFrame, air_co2_ppm: float, organic_model: OrganicModel) -> ResponseCurves | None:
    """Curves at the survey's median temperature and conductivity; brown water at `BROWN_QUANTILE` of its DOC.

    `results` as of a lake assessment. None where no lake has a temperature.
    """
    t_c, conductivity = (_quantile(results, name, 0.5) for name in ("temperature_c", "conductivity_us_cm"))
    if np.isnan(t_c):
        return None
    middle = {"temperature_c": np.array([t_c]), "conductivity_us_cm": np.array([conductivity])}
    strength = float(np.fmin(np.fmax(ionic_strength(middle)[0][0], LEAST_STRENGTH), MOST_STRENGTH))
    return response_curves(t_c, strength, air_co2_ppm, _quantile(results, "doc_mg_l", BROWN_QUANTILE), organic_model)


def _quantile(results: pd.DataFrame, name: str, quantile: float) -> float:
    """Quantile of what was measured; nan where nothing was."""
    values = results[name].dropna().to_numpy(dtype=float)
    return float(np.quantile(values, quantile)) if values.size else float("nan")

"""What more than two readings of one sample say about each other."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.options import Options
from aquabuf.assess.sample.inputs import PH_COLUMNS, Array, Values, alkalinity_reading, water_keywords
from aquabuf.assess.sample.quality import ORGANIC_CHARGE_EQ_PER_MG
from aquabuf.chem.acids import Acid
from aquabuf.engine.water import Water

__all__ = ["Closure", "closure"]

ALUMINUM_CHARGE = 3.0  # upper bound per mole in acid water


@dataclass(frozen=True, slots=True, eq=False)
class Closure:
    """Carbonate alkalinity that pH and alkalinity leave [eq/L], and titrated less computed alkalinity [meq/L].

    within_reach : carbonate is below zero, but by no more than uncertainty, organic acids and aluminum can explain.
    """

    carbonate: Array
    carbonate_u: Array
    within_reach: NDArray[np.bool_]
    carbon_meq_l: Array
    carbon_u_meq_l: Array


def closure(values: Values, u: Values, acids: tuple[Acid, ...], options: Options) -> Closure:
    """Compare alkalinity with what the pH alone, and pH with carbon, ask for; nan where a reading is missing."""
    alkalinity, source = alkalinity_reading(values)
    missing = np.full(alkalinity.shape, np.nan)
    ph, ph_u, scale = missing, missing, "meter"
    for column, name in PH_COLUMNS.items():
        if column in values and np.isnan(ph).all():
            ph, ph_u, scale = values[column], u[column], name
    if np.isnan(ph).all() or np.isnan(alkalinity).all():
        return Closure(missing, missing, np.zeros(alkalinity.shape, dtype=bool), missing, missing)
    keywords = water_keywords(values, acids, options.carbonic)
    t_ph = values.get("ph_temperature_c", missing)
    keywords["t_c"] = np.where(np.isfinite(t_ph), t_ph, keywords["t_c"])
    alkalinity_u = np.where(source == "anc", u.get("anc_eq_l", missing), u.get("alkalinity_eq_l", missing))
    bare = Water.from_ph_dic(ph=ph, dic_mol_l=0.0, ph_scale=scale, **keywords)
    carbonate = alkalinity - bare.alkalinity_eq_l
    carbonate_u = np.hypot(alkalinity_u, bare.buffer_intensity_eq_l() * ph_u)
    allowance = (2.0 * carbonate_u + ORGANIC_CHARGE_EQ_PER_MG * np.nan_to_num(values.get("doc_mg_l", missing))
                 + ALUMINUM_CHARGE * np.nan_to_num(values.get("aluminum_mol_l", missing)))
    with np.errstate(invalid="ignore"):
        reach = (carbonate < 0.0) & (carbonate >= -allowance)
    dic = values.get("dic_mol_l", missing)
    with_carbon = Water.from_ph_dic(ph=ph, dic_mol_l=dic, ph_scale=scale, **keywords)
    charge = -with_carbon.charge_eq_l("carbonate") / np.where(dic > 0.0, dic, np.nan)
    spread = np.sqrt(alkalinity_u**2 + (charge * u.get("dic_mol_l", missing)) ** 2
                     + (with_carbon.buffer_intensity_eq_l() * ph_u) ** 2)
    return Closure(carbonate, carbonate_u, reach, 1e3 * (alkalinity - with_carbon.alkalinity_eq_l), 1e3 * spread)

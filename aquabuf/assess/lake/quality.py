"""Quality checks of lakes: ions against each other, conductivity, titration, pH and carbon, and the lake's history."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.ionsums import conductivity_of_ions, most_conductivity_percent, most_imbalance_percent
from aquabuf.assess.lake.budget import NEEDED, Budget, gran_leaves_out
from aquabuf.assess.lake.chemistry import Chemistry, of_titration
from aquabuf.assess.lake.inputs import ANION_NAMES, CATION_NAMES, ORGANIC_U_REL, Lakes
from aquabuf.assess.sample.quality import Check, fixed_check, outside_usual

__all__ = ["HISTORY_COLUMNS", "IonSums", "ion_sums", "lake_checks", "own_history"]

Array = NDArray[np.float64]

HISTORY_LEAST, HISTORY_FAR = 8, 5.0      # samples of one lake, robust standard deviations; common practice, no source
MAD_TO_SIGMA = 1.4826                    # of a normal distribution
HISTORY_COLUMNS = ("anc_gran_ueq_l", "anc_charge_ueq_l", "ph", "sulfate_ueq_l", "base_cations_ueq_l",
                   "conductivity_us_cm")


@dataclass(frozen=True, slots=True, eq=False)
class IonSums:
    """Sums over the ions of each lake, one-dimensional; nan where an ion of the charge balance is missing.

    balance, balance_organic : anions less cations over both; with organic anions and aluminum in the second. [%]
    total : both together. [µeq/L] conductivity : of the ions; known : of those measured, the others left out. [µS/cm]
    """

    balance: Array
    balance_organic: Array
    total: Array
    conductivity: Array
    known: Array


def ion_sums(lakes: Lakes, c: Chemistry) -> IonSums:
    """Charges and conductivity of each lake at its pH; H+, HCO3-, CO3-- and OH- come from the solved water."""
    water, h = lakes.balance(), lakes.balance().h(c.ph)
    constants = lakes.setting.lake
    ionized = c.dic * (1.0 - water.co2_per_dic(c.ph))
    carbonate = c.dic * water.carbonate_per_dic(c.ph)
    charges = {ion: lakes.charge(ion) for ion in (*CATION_NAMES, *ANION_NAMES)}
    charges |= {"hydrogen": constants.c_h * h, "hydroxide": constants.c_oh / h,
                "bicarbonate": 2.0 * ionized - carbonate, "carbonate": 2.0 * (carbonate - ionized)}
    plus = _sum(charges, (*CATION_NAMES, "hydrogen"))
    minus = _sum(charges, (*ANION_NAMES, "bicarbonate", "carbonate", "hydroxide"))
    complete = np.isfinite(lakes.get("ph")) & np.isfinite(h) & np.isfinite(c.dic)
    for ion in NEEDED:
        complete &= np.isfinite(charges[ion])
    beside = water.beside_carbonate(c.ph)
    organic = lakes.organic.anion_eq_l(lakes.doc_mg_l, c.ph)
    both = organic + np.abs(organic - beside)  # organic anions and aluminum
    known = conductivity_of_ions(charges, constants.ionic_strength_mol_l)

    def percent(extra: Array | float, size: Array | float) -> Array:
        total = np.where(complete & (plus + minus > 0.0), plus + minus + size, np.nan)
        return (100.0 * (minus + extra - plus) / total)[:, 0]

    return IonSums(balance=percent(0.0, 0.0), balance_organic=percent(beside, both),
                   total=np.where(complete, 1e6 * (plus + minus), np.nan)[:, 0],
                   conductivity=np.where(complete, known, np.nan)[:, 0], known=known[:, 0])


def _sum(charges: Mapping[str, Array], names: tuple[str, ...]) -> Array:
    return sum((np.nan_to_num(charges[n]) for n in names[1:]), start=np.nan_to_num(charges[names[0]]))


def lake_checks(lakes: Lakes, u: Mapping[str, Array], b: Budget, c: Chemistry, sums: IonSums,
                figures: Mapping[str, NDArray], at_equilibration: tuple[Array, Array]) -> list[Check]:
    """All checks of single lakes; `figures` are columns of the result.

    u : standard uncertainty of each reading, one-dimensional. at_equilibration : pH computed for the air that was
    bubbled through, and its standard uncertainty.
    """
    n = c.ph.shape[0]

    def get(name: str) -> Array:
        return lakes.get(name)[:, 0]

    def spread(name: str) -> Array:
        return u.get(name, np.full(n, np.nan))

    most = most_imbalance_percent(sums.total)
    measured = get("conductivity_us_cm")
    allowed = most_conductivity_percent(measured)
    gap_u = figures["anc_gap_u_ueq_l"]
    left = _carbonate_left(lakes, b)
    titrated_u = np.where(np.isfinite(b.gran[:, 0]), spread("anc_eq_l"), spread("alkalinity_eq_l"))
    left_u = np.hypot(titrated_u, c.buffer_closed[:, 0] * spread("ph"))
    outside, names = outside_usual({k: v[:, 0] for k, v in lakes.values.items()}, n)
    computed, computed_u = at_equilibration
    negative = np.array([float(t.count(";") + 1) if t else 0.0 for t in figures["sea_salt_negative"]])
    return [
        Check("ion balance", sums.balance, -most, most),
        Check("ion balance with organic anions", sums.balance_organic, -most, most),
        Check("conductivity", figures["conductivity_percent"], -allowed, allowed),
        Check("pH against alkalinity", left * 1e3, -2e3 * left_u, np.inf),
        _over_determined(lakes, b, c, titrated_u, spread("dic_mol_l"), spread("ph")),
        Check("ANC by charge against titration", figures["anc_gap_rest_ueq_l"], -2.0 * gap_u, 2.0 * gap_u),
        Check("pH at air", computed - get("ph_air_equilibrated"), -2.0 * computed_u, 2.0 * computed_u),
        fixed_check("sea salt", np.where(np.isfinite(figures["sulfate_star_ueq_l"]), negative, np.nan),
                    figures["sea_salt_negative"]),
        fixed_check("CO2 pressure", 1e6 * c.pco2_atm[:, 0]),
        fixed_check("temperature", get("temperature_c")),
        fixed_check("holding time", get("holding_days")),
        fixed_check("usual ranges", outside, names),
    ]


def _over_determined(lakes: Lakes, b: Budget, c: Chemistry, titrated_u: Array, dic_u: Array, ph_u: Array) -> Check:
    """Titrated ANC against the one that pH and carbon give, where all three were measured."""
    meter, ph, dic = lakes.balance(at_meter=True), lakes.get("ph"), lakes.get("dic_mol_l")
    titrated = of_titration(lakes, np.where(np.isfinite(b.gran), b.gran, b.alkalinity))
    gap = 1e3 * (titrated - meter.anc(ph, dic=dic))[:, 0]
    of_carbon, of_ph = meter.carbonate_per_dic(ph)[:, 0] * dic_u, meter.intensity(ph, dic=dic)[:, 0] * ph_u
    organic = ORGANIC_U_REL * (lakes.organic.anion_eq_l(lakes.doc_mg_l, ph) - gran_leaves_out(lakes)[0])[:, 0]
    both = 2e3 * np.sqrt(titrated_u**2 + of_carbon**2 + of_ph**2 + organic**2)
    return Check("alkalinity against pH and carbon", gap, -both, both)


def _carbonate_left(lakes: Lakes, b: Budget) -> Array:
    """Carbonate alkalinity that the titrated ANC leaves at the pH read; nan without both. [eq/L]"""
    titrated = np.where(np.isfinite(b.gran), b.gran, b.alkalinity)
    return (of_titration(lakes, titrated) - lakes.balance(at_meter=True).without_carbon(lakes.get("ph")))[:, 0]


def own_history(results: pd.DataFrame, keys: NDArray[np.object_]) -> tuple[Array, NDArray[np.object_]]:
    """How many readings of each row lie far from those of its own lake, and which; nan where too few samples are there.

    `keys` name the lake of each row, empty where it is not known. Robust: distance from the lake's median over 1.4826
    times the median distance, at least a tenth of the unit, which is rounding.
    """
    n = len(results)
    count, names = np.full(n, np.nan), np.full(n, "", dtype=object)
    named = np.flatnonzero(keys != "")
    for place in pd.Series(keys[named], dtype=object).groupby(keys[named], sort=False).indices.values():
        rows = named[np.asarray(place)]
        if rows.size < HISTORY_LEAST:
            continue
        count[rows] = 0.0
        for column in HISTORY_COLUMNS:
            values = results[column].to_numpy(dtype=float)[rows]
            given = np.isfinite(values)
            if given.sum() < HISTORY_LEAST:
                continue
            middle = np.median(values[given])
            scale = max(MAD_TO_SIGMA * float(np.median(np.abs(values[given] - middle))), 0.1)
            with np.errstate(invalid="ignore"):
                far = rows[np.abs(values - middle) > HISTORY_FAR * scale]
            count[far] += 1.0
            names[far] = np.where(names[far] == "", column, names[far] + ", " + column)
    return count, names

"""Figures of readings alone, which are not drawn: first days of liming, closed episodes, simple lake form, notes."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.assess.lake.answers import Answers, with_carbon
from aquabuf.assess.lake.co2 import (
    NEAL_AIR_ATM,
    neal_excess_simple,
    neal_excess_temperature,
    neal_left_out_share,
)
from aquabuf.assess.lake.critical import FLAGS
from aquabuf.assess.lake.critical_variants import sensitivity
from aquabuf.assess.lake.episode import DEPOSITION, balance_of, deposition_words, mix
from aquabuf.assess.lake.inputs import IONS, Lakes, setting_of
from aquabuf.assess.lake.liming import after_liming, over_liming_words
from aquabuf.assess.lake.options import Rules
from aquabuf.assess.lake.simple_lake import at_both_ends, lake_share
from aquabuf.assess.limits import Limit

__all__ = ["BUBBLED_T_C", "at_equilibration", "closed_carbon", "closed_episode", "closed_lake", "event_words",
           "lime_words", "load_notes", "load_range", "neal_pco2_atm", "simple_lake"]

Array = NDArray[np.float64]
Words = NDArray[np.object_]

BUBBLED_T_C, BUBBLED_U_PH = 22.5, 0.05  # of a laboratory where air is bubbled through; what 5 °C either way move pH by
NEAL_SIMPLE_AT_C = 7.0                  # where their form without temperature agrees with the one with it
NEAL_LEAVES_OUT = 0.1                   # share of carbonate and hydroxide from which the relation is not used


def load_notes(found: Answers) -> Words:
    """What the critical load of each lake has to be told of, in words."""
    known = np.isfinite(found.critical.load)[:, 0]
    out = np.full(known.size, "", dtype=object)
    for name, words in FLAGS.items():
        hit = known & np.broadcast_to(found.critical.flags[name], (known.size, 1))[:, 0]
        out[hit] = np.where(out[hit] == "", words, out[hit] + "; " + words)
    return out


def closed_carbon(lakes: Lakes, found: Answers, figures: Mapping[str, NDArray]) -> tuple[Array, Array]:
    """Carbon and ANC that closed answers about a change start from: those of the lake where its CO2 can be stated.

    Elsewhere the CO2 of air at the lake's pH, which is the least that a lake open to air holds for long.
    """
    c, balance = found.chemistry, lakes.balance()
    own = np.isfinite(figures["pco2_uatm"])[:, None]
    of_air = lakes.setting.air_co2_mol_l / balance.co2_per_dic(c.ph)
    dic = np.where(own, c.dic, of_air)
    return dic, np.where(own, c.anc_closed, balance.anc(c.ph, dic=dic))


def closed_lake(lakes: Lakes, found: Answers, figures: Mapping[str, NDArray]) -> Mapping[str, Array]:
    """The lakes' water as closed answers about a change take it: carbon and ANC of `closed_carbon`."""
    dic, anc = closed_carbon(lakes, found, figures)
    return {**found.episode.lake, "anc_eq_l": anc, "dic_mol_l": dic}


def closed_episode(lakes: Lakes, found: Answers, figures: Mapping[str, NDArray]) -> dict[str, NDArray]:
    """pH of the mixture before air changes its carbon."""
    mixed = mix(closed_lake(lakes, found, figures), with_carbon(lakes, found.episode.event), found.episode.fraction)
    balance = balance_of(mixed, lakes.setting.lake, lakes.organic)
    return {"episode_ph_closed": balance.ph(mixed["anc_eq_l"], dic=mixed["dic_mol_l"])[:, 0]}


def lime_words(lakes: Lakes, found: Answers, rules: Rules, figures: Mapping[str, NDArray], limits: Sequence[Limit],
                ) -> dict[str, NDArray]:
    """pH after liming, in the first days and at air, and the warning of over-liming."""
    dose = 1e-6 * figures["lime_dose_ueq_l"][:, None]
    c = found.chemistry
    air = lakes.setting.air_co2_mol_l
    dic, anc = closed_carbon(lakes, found, figures)
    after = after_liming(lakes.balance(), anc, dic, dose, rules.lime, air)
    needed = (dose > 0.0)[:, 0]
    closed = np.where(needed, after.ph_closed[:, 0], np.nan)
    at_air = np.where(needed, lakes.balance().ph(c.anc + dose, co2=air)[:, 0], np.nan)
    highest = min((x.limit for x in limits if x.quantity == "lime_ph_closed" and x.operator in (">", ">=")),
                  default=np.inf)
    return {"lime_ph_closed": closed, "lime_ph_at_air": at_air,
            "lime_warning": over_liming_words(closed, after.aluminate_ug_l[:, 0], highest, rules.lime)}


def simple_lake(lakes: Lakes, found: Answers) -> dict[str, NDArray]:
    """Whether sulfur and nitrogen together exceed the simple lake form, where its readings are there."""
    share = lake_share(lakes.get("lake_area_m2"), lakes.get("watershed_area_m2"))
    worse, better = at_both_ends(found.critical.load, lakes.get("nitrogen_sink_eq_m2_yr"), lakes.get("runoff_m_yr"),
                                 share, found.deposition.sulfur, found.deposition.nitrogen)
    known = np.isfinite(worse.excess)[:, 0]
    outside = (known, "no"), (worse.outside[:, 0], "only with slow nitrogen uptake"), (better.outside[:, 0], "yes")
    return {"simple_lake_exceeded": worded(known.size, *outside),
            "simple_lake_sulfur_cut_meq_m2_yr": 1e3 * worse.sulfur_cut[:, 0]}


def load_range(lakes: Lakes, found: Answers, rules: Rules) -> dict[str, NDArray]:
    """Lowest and highest critical load over the variants of the method."""
    of = sensitivity({ion: lakes.charge(ion) for ion in IONS}, lakes.get("runoff_m_yr"), rules.critical,
                     sulfur_deposition_eq_m2_yr=found.deposition.sulfur)
    return {"critical_load_lowest_meq_m2_yr": 1e3 * of.load_lowest[:, 0],
            "critical_load_highest_meq_m2_yr": 1e3 * of.load_highest[:, 0]}


def event_words(lakes: Lakes, rules: Rules, figures: Mapping[str, NDArray]) -> Words:
    """Where the event water of each lake comes from; empty where there is none."""
    known = np.isfinite(figures["episode_anc_ueq_l"])
    if rules.event is not None:
        return worded(known.size, (known, rules.event.in_words()[0]))
    return np.where(known, deposition_words({name: lakes.get(name)[:, 0] for name in DEPOSITION}), "")


def at_equilibration(lakes: Lakes, found: Answers, u: Mapping[str, Array], values: Mapping[str, Array],
                      ) -> tuple[Array, Array]:
    """pH for the air bubbled through the sample, and its standard uncertainty; nan where that air is not given."""
    ppm = lakes.get("equilibration_co2_ppm")
    warm = setting_of({**values, "temperature_c": np.full(values["temperature_c"].shape, BUBBLED_T_C)}, 1.0)
    balance = replace(lakes, setting=warm).balance()
    co2 = ppm * warm.air_co2_mol_l
    ph = balance.ph(found.chemistry.anc, co2=co2)
    anc_u = u.get("anc_eq_l", np.full(ph.shape[0], np.nan))
    own = u.get("ph_air_equilibrated", np.full(ph.shape[0], np.nan))
    return ph[:, 0], np.sqrt((anc_u / balance.intensity(ph, co2=co2)[:, 0]) ** 2 + own**2 + BUBBLED_U_PH**2)


def neal_pco2_atm(lakes: Lakes, found: Answers) -> Array:
    """CO2 pressure after Neal et al. from titrated ANC and pH, where what they leave out is small. [atm]"""
    b, ph, t_c = found.budget, lakes.get("ph"), lakes.setting.at_meter.t_c
    titrated = np.where(np.isfinite(b.gran), b.gran, b.alkalinity)
    with np.errstate(invalid="ignore"):
        small = neal_left_out_share(titrated, ph, np.nan_to_num(t_c, nan=NEAL_SIMPLE_AT_C)) <= NEAL_LEAVES_OUT
    excess = np.where(np.isnan(t_c), neal_excess_simple(titrated, ph), neal_excess_temperature(titrated, ph, t_c))
    return np.where(small, NEAL_AIR_ATM * excess, np.nan)[:, 0]

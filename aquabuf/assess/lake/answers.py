"""The numbers of each lake, the same for its readings and for random draws of them.

Every function takes `Lakes` of shape (lakes, 1) or (lakes, draws) and returns columns of results.csv by name, in their
unit; nan where a reading is missing.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.lake.budget import AncKinds, Budget, budget, left_out_by_gran
from aquabuf.assess.lake.capacity import H2SO4_KG_PER_KEQ, Deposition, Hydrology, deposition, hydrology, keq, years_left
from aquabuf.assess.lake.chemistry import Chemistry, chemistry, choose_sources
from aquabuf.assess.lake.co2 import flux_mol_m2_d, supersaturation
from aquabuf.assess.lake.columns import acid_column
from aquabuf.assess.lake.critical import CriticalLoad, critical_load
from aquabuf.assess.lake.episode import (
    DEPOSITION,
    at_air,
    balance_of,
    event_from_deposition,
    fraction_at_anc,
    mix,
    water_of,
)
from aquabuf.assess.lake.event_file import water_of_event
from aquabuf.assess.lake.inputs import IONS, Lakes
from aquabuf.assess.lake.liming import anc_for_ph, product_g_m3, product_kg, reacidification_yr
from aquabuf.assess.lake.options import LakeOptions, Rules
from aquabuf.assess.lake.sea_salt import NO_TRACER
from aquabuf.chem.transfer import transfer_velocity_m_d

__all__ = ["ANC_KINDS", "Answers", "Episode", "Plan", "answers", "plan_of", "with_carbon"]

Array = NDArray[np.float64]

MICRO, MILLI = 1e6, 1e3
ANC_KINDS = ("Gran ANC", "alkalinity", "Gran ANC of the ions", "charge balance")  # which ANC counts, best first


@dataclass(frozen=True, slots=True, eq=False)
class Plan:
    """What is decided once per lake, from its readings and not from their draws.

    kinds : what the column of ANC is. sources : of ANC and of carbon, see `chemistry`.
    used : index in ANC_KINDS of the ANC that class and limits rest on; its length where there is none.
    """

    kinds: AncKinds
    sources: tuple[NDArray[np.intp], NDArray[np.intp]]
    used: NDArray[np.intp]

    def take(self, rows: NDArray[np.intp]) -> Plan:
        """The same for some of the lakes."""
        return Plan(self.kinds.take(rows), (self.sources[0][rows], self.sources[1][rows]), self.used[rows])


def plan_of(lakes: Lakes, kinds: AncKinds, options: LakeOptions) -> Plan:
    """Decide from the readings of each lake what its answers rest on."""
    b = budget(lakes, kinds, ammonium=options.ammonium)
    there = [np.isfinite(v)[:, 0] for v in (b.gran, b.alkalinity, b.gran_of_ions, b.charge)]
    used = np.full(kinds.is_gran.shape[0], len(ANC_KINDS), dtype=np.intp)
    for index in reversed(range(len(there))):
        used[there[index]] = index
    return Plan(kinds, choose_sources(lakes, b), used)


@dataclass(frozen=True, slots=True, eq=False)
class Episode:
    """The two waters that mix, the ANC of the event water by definition and as the one in use [eq/L], and its share."""

    lake: Mapping[str, Array]
    event: Mapping[str, Array]
    event_by_definition: Mapping[str, Array]
    event_anc: Array
    fraction: float

    def after(self, share: float, lakes: Mapping[str, Array], ph: Array) -> dict[str, Array]:
        """Each ANC of `lakes`, by definition, after a share of event water; pH is `ph`, which does not mix."""
        mixed = {d: (1.0 - share) * v + share * self.event_by_definition[d] for d, v in lakes.items() if d != "ph"}
        return mixed | {"ph": ph}


@dataclass(frozen=True, slots=True, eq=False)
class Answers:
    """Columns by name, and what they were made from."""

    columns: dict[str, Array]
    budget: Budget
    chemistry: Chemistry
    water: Hydrology
    deposition: Deposition
    critical: CriticalLoad
    by_definition: Mapping[str, Array]
    anc_used: Array
    limit: Array
    episode: Episode


def answers(lakes: Lakes, plan: Plan, rules: Rules, options: LakeOptions, *, draws: int = 0) -> Answers:
    """All numbers of the lakes. `draws` is the number of draws that `lakes` hold, 0 for the readings themselves."""
    b = budget(lakes, plan.kinds, ammonium=options.ammonium)
    c = chemistry(lakes, b, plan.sources, options.thresholds)
    water = hydrology(lakes)
    fallen = deposition(lakes, keep_sea_salt=rules.critical.tracer == NO_TRACER)
    kinds = np.broadcast_arrays(b.gran, b.alkalinity, b.gran_of_ions, b.charge)
    used = np.choose(np.minimum(plan.used, len(kinds) - 1)[:, None], kinds)
    load = critical_load({ion: lakes.charge(ion) for ion in IONS}, lakes.get("runoff_m_yr"), rules.critical,
                         sulfur_deposition_eq_m2_yr=fallen.sulfur)
    limit = load.anc_limit if rules.limit.is_variable else np.full((1, 1), rules.limit.value_eq_l)
    columns = _anc(lakes, b, c, used) | _water(c, options) | _carbon(lakes, c)
    columns |= _capacity(lakes, c, water, fallen, used, limit, options) | _loads(load)
    by_gran = plan.used < ANC_KINDS.index("charge balance")
    both, of_episode = episode(lakes, b, c, rules, options, used, by_gran, limit, draws)
    columns |= of_episode | lime(lakes, c, rules, options, water, used, limit)
    columns |= transfer(lakes, c, options.wind_relation)
    by_definition = {"anc_gran": b.gran, "anc_gran_of_ions": b.gran_of_ions, "anc_charge": b.charge,
                     "alkalinity": b.alkalinity,
                     "anc_organic_corrected": b.organic_corrected, "ph": c.ph}
    return Answers(columns, b, c, water, fallen, load, by_definition, used, limit, both)


def _anc(lakes: Lakes, b: Budget, c: Chemistry, used: Array) -> dict[str, Array]:
    """ANC by every definition, and what the difference is made of. [µeq/L]"""
    found = {
        "anc_used": used, "anc_gran": b.gran, "anc_gran_of_ions": b.gran_of_ions, "alkalinity": b.alkalinity,
        "anc_end_point": b.end_point,
        "anc_charge": b.charge, "anc_charge_bare": b.charge_bare, "anc_organic_corrected": b.organic_corrected,
        "anc_less_organic": b.charge - c.organic, "organic_anion": c.organic, "base_cation_surplus": b.surplus,
        "anc_gap": b.gap, "anc_gap_organic": b.gap_organic, "anc_gap_aluminum": b.gap_aluminum,
        "anc_gap_other": b.gap_other, "anc_gap_rest": b.gap_rest, "base_cations": b.base_cations,
    } | {ion: lakes.charge(ion) for ion in IONS if ion != "fluoride"}
    out = {f"{name}_ueq_l": MICRO * v for name, v in found.items()}
    density = lakes.organic.charge(c.ph)[0] * lakes.organic_error
    return out | {"organic_density_ueq_mg": MICRO * np.where(np.isfinite(c.organic), density, np.nan)}


def _water(c: Chemistry, options: LakeOptions) -> dict[str, Array]:
    """pH, buffering and tolerance, closed and at equilibrium with air."""
    out = {
        "ph": c.ph, "ph_at_air": c.ph_at_air, "buffer_closed_ueq_l_ph": MICRO * c.buffer_closed,
        "buffer_open_ueq_l_ph": MICRO * c.buffer_open,
    }
    for k, ph in enumerate(options.thresholds):
        out[acid_column(ph, "closed")] = MICRO * c.closed_to[k]
        out[acid_column(ph, "open")] = MICRO * c.open_to[k]
    return out


def _carbon(lakes: Lakes, c: Chemistry) -> dict[str, Array]:
    """Carbon, its pressure, and what the lake gives to the air; whether it can be stated is decided elsewhere."""
    s = lakes.setting
    return {"dic_umol_l": MICRO * c.dic, "pco2_uatm": MICRO * c.pco2_atm,
            "pco2_air_ratio": supersaturation(c.pco2_atm, s.air_pco2_atm)}


def transfer(lakes: Lakes, c: Chemistry, relation: str) -> dict[str, Array]:
    """Gas transfer velocity by wind, and the flux of CO2 to the air."""
    s = lakes.setting
    k = transfer_velocity_m_d(lakes.get("wind_speed_m_s"), s.lake.t_c, relation, lake_area_m2=lakes.get("lake_area_m2"))
    return {"gas_transfer_m_d": k,
            "co2_flux_mmol_m2_d": MILLI * flux_mol_m2_d(c.pco2_atm, s.air_pco2_atm, s.lake.k0, k)}


def _capacity(lakes: Lakes, c: Chemistry, water: Hydrology, fallen: Deposition, used: Array, limit: Array,
              options: LakeOptions) -> dict[str, Array]:
    """Acid that the whole lake can take, and the years it lasts."""
    above = used - limit
    amount = keq(above, water.volume_m3)
    catchment, surface = years_left(above, lakes, water, fallen.net_acid)
    to_ph_6 = c.open_to[options.thresholds.index(6.0)]
    return {
        "anc_limit_ueq_l": MICRO * np.where(np.isfinite(used), limit, np.nan), "acid_to_anc_limit_ueq_l": MICRO * above,
        "lake_volume_m3": water.volume_m3, "acid_to_anc_limit_keq": amount,
        "acid_to_anc_limit_h2so4_kg": H2SO4_KG_PER_KEQ * amount,
        "acid_to_ph_6_0_open_keq": keq(to_ph_6, water.volume_m3),
        "net_acid_deposition_meq_m2_yr": MILLI * fallen.net_acid,
        "years_to_anc_limit": catchment, "years_to_anc_limit_surface": surface,
    }


def _loads(load: CriticalLoad) -> dict[str, Array]:
    """Critical load and exceedance."""
    return {
        "base_cations_star_ueq_l": MICRO * load.bc_today_star, "sulfate_star_ueq_l": MICRO * load.so4_star,
        "critical_load_meq_m2_yr": MILLI * load.load, "exceedance_meq_m2_yr": MILLI * load.exceedance,
        "f_factor": load.f, "base_cations_original_ueq_l": MICRO * load.bc_original,
    }


def _fluoride_of(rules: Rules) -> float:
    """Fluoride of the event water, which its pH counts and the reported charge balance leaves out. [eq/L]"""
    known = rules.event is not None and rules.event.anc_from == "ions"
    return rules.event.values.get("fluoride_mol_l", 0.0) if known and rules.event else 0.0


def episode(lakes: Lakes, b: Budget, c: Chemistry, rules: Rules, options: LakeOptions, used: Array,
            is_titrated: NDArray[np.bool_], limit: Array, draws: int) -> tuple[Episode, dict[str, Array]]:
    """What the share of event water makes of each lake.

    The ANC in use mixes in proportion, whatever its definition: that of the event water is brought to the same one.
    """
    lake = water_of(lakes, c.anc, c.dic)
    if rules.event is None:
        event = event_from_deposition({n: lakes.get(n) for n in DEPOSITION}, lakes.get("precipitation_m_yr"))
    else:
        event = water_of_event(rules.event, rules.organic, options.air_co2_ppm, draws=draws, seed=options.seed,
                               organic_error=lakes.organic_error)
    left_organic, left_aluminum = left_out_by_gran(lakes.organic, event["doc_mg_l"], event["aluminum_mol_l"])
    titrated = event["anc_eq_l"] - left_organic + left_aluminum
    charge = event["anc_eq_l"] + _fluoride_of(rules) - np.where(b.with_ammonium, 0.0, event["ammonium_eq_l"])
    by_definition = {
        "anc_gran": titrated, "anc_gran_of_ions": titrated, "alkalinity": titrated, "anc_charge": charge,
        "anc_organic_corrected": charge - lakes.organic.strong_eq_l(event["doc_mg_l"])}
    event_anc = np.where(is_titrated[:, None], titrated, charge)
    fraction = options.event_fraction if rules.event is None else max(rules.event.fractions)
    mixed = mix(lake, event, fraction)
    balance = balance_of(mixed, lakes.setting.lake, lakes.organic)
    after = (1.0 - fraction) * used + fraction * event_anc
    columns = {
        "episode_anc_ueq_l": MICRO * after,
        "episode_ph": balance.ph(mixed["anc_eq_l"], co2=lakes.setting.air_co2_mol_l, start=c.ph_at_air),
        "event_fraction": np.where(np.isfinite(after), fraction, np.nan),
        "event_fraction_to_limit": fraction_at_anc(used, event_anc, limit),
    }
    return Episode(lake, event, by_definition, event_anc, fraction), columns


def with_carbon(lakes: Lakes, event: Mapping[str, Array]) -> Mapping[str, Array]:
    """Event water with the carbon it holds at equilibrium with air, unless it has its own."""
    if "dic_mol_l" in event:
        return event
    return at_air(event, lakes.setting.lake, lakes.organic, lakes.setting.air_co2_mol_l)


def lime(lakes: Lakes, c: Chemistry, rules: Rules, options: LakeOptions, water: Hydrology, used: Array, limit: Array,
         ) -> dict[str, Array]:
    """Dose to the liming target, product for the lake and its inflow, and how long it lasts.

    An equivalent of base raises every ANC alike, so that the dose to an ANC is the same in each definition. The inflow
    is taken to stay as the lake is now.
    """
    if options.lime_ph is None:
        dose = np.maximum(options.lime_anc_ueq_l / MICRO - used, 0.0)
    else:
        dose = np.maximum(anc_for_ph(lakes.balance(), options.lime_ph, lakes.setting.air_co2_mol_l) - c.anc, 0.0)
    needed = dose > 0.0
    shares = rules.lime.shares
    per_m3 = {name: product_g_m3(dose, rules.lime, share) for name, share in shares.items()}
    again = reacidification_yr(used + dose, used, limit, water.residence_yr)
    return {
        "lime_dose_ueq_l": MICRO * dose, "lime_g_m3": per_m3["usual"],
        "lime_t": 1e-3 * product_kg(per_m3["usual"], water.volume_m3),
        "lime_least_t": 1e-3 * product_kg(per_m3["high"], water.volume_m3),
        "lime_most_t": 1e-3 * product_kg(per_m3["low"], water.volume_m3),
        "lime_stream_t_yr": 1e-3 * product_kg(per_m3["usual"], water.outflow_m3_yr),
        "reacidify_yr": np.where(needed, again, np.nan),
    }

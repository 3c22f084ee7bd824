"""Assess a survey of lakes: every answer of each lake, its class, its checks, and what was refused and why."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.assess.frames import frame_of
from aquabuf.assess.lake.answers import Answers, Plan, answers, closed_lake, plan_of, with_carbon
from aquabuf.assess.lake.budget import NEEDED, anc_kinds, gran_leaves_out, missing_ions
from aquabuf.assess.lake.chemistry import CARBON_SOURCES
from aquabuf.assess.lake.classes import (
    basis_words,
    class_names,
    classify,
    definition_used,
    disagreements,
    second_class,
    values_used,
)
from aquabuf.assess.lake.co2 import NEAL_AIR_ATM, neal_excess_temperature, neal_left_out_share, stateable
from aquabuf.assess.lake.columns import AS_GIVEN, lake_columns
from aquabuf.assess.lake.critical import FLAGS
from aquabuf.assess.lake.critical_variants import sensitivity
from aquabuf.assess.lake.draws import Spread, spread
from aquabuf.assess.lake.episode import DEPOSITION, balance_of, deposition_words, mix
from aquabuf.assess.lake.inputs import IONS, ORGANIC_U_REL, Lakes, as_recorded, setting_of, words_of
from aquabuf.assess.lake.liming import after_liming, over_liming_words
from aquabuf.assess.lake.options import LakeOptions, Rules
from aquabuf.assess.lake.quality import HISTORY_COLUMNS, IonSums, ion_sums, lake_checks, own_history
from aquabuf.assess.lake.schemes import Scheme
from aquabuf.assess.lake.sea_salt import negative_words, non_marine
from aquabuf.assess.lake.simple_lake import at_both_ends, lake_share
from aquabuf.assess.lake.survey import site_keys
from aquabuf.assess.lake.words import anc_used_words, carbon_words, charge_form_words, gap_words, left_out_words
from aquabuf.assess.limits import Limit, shipped_limits, verdicts
from aquabuf.assess.sample.inputs import TITRATED_BY, uncertainties, values_of
from aquabuf.assess.sample.quality import Check, Rounding, counted, failed, fixed_check, roundings
from aquabuf.engine.status import FLAGGED
from aquabuf.readings.duplicates import duplicate_rows
from aquabuf.readings.result import REJECTED_COLUMNS, Readings, notes_on_file
from aquabuf.units import substances

__all__ = ["BUBBLED_T_C", "LakeAssessment", "assess_lakes", "class_after", "closed_carbon"]

Array = NDArray[np.float64]
Words = NDArray[np.object_]

BUBBLED_T_C, BUBBLED_U_PH = 22.5, 0.05  # of a laboratory where air is bubbled through; what 5 °C either way move pH by
NEAL_LEAVES_OUT = 0.1                   # share of carbonate and hydroxide from which the relation is not used
CONDUCTIVITY_ROOM = 0.02                # relative allowance of the conductivity meter for what missing ions may carry
NOTHING = ("no ANC, alkalinity, complete major ions or pH", "a lake needs ANC, alkalinity, all of the major ions, or "
                                                            "pH",
           "titrate the sample, or give the ions that are missing")


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class LakeAssessment:
    """Assessed lakes in input order, and all that their tables are made of.

    results : one row per accepted lake, columns of results.csv. frame : their readings.
    index : class of each lake by (scheme, definition); used : place of the definition in use by scheme.
    broken : lakes that break each limit. checks : quality checks.
    rejected, notes, flags, rounding, duplicates : as of an assessment of samples.
    """

    results: pd.DataFrame
    frame: pd.DataFrame
    lakes: Lakes
    plan: Plan
    answers: Answers
    spread: Spread
    rules: Rules
    index: Mapping[tuple[str, str], NDArray[np.intp]]
    used: Mapping[str, NDArray[np.intp]]
    broken: Mapping[str, NDArray[np.bool_]]
    checks: list[Check]
    rejected: pd.DataFrame
    notes: tuple[str, ...]
    flags: Mapping[tuple[str, str], int]
    rounding: Mapping[str, Rounding]
    duplicates: int

    @property
    def made(self) -> Mapping[str, int]:
        """How many lakes each check could be made for."""
        return counted(self.checks)

    @property
    def unmet(self) -> Mapping[str, int]:
        """How many lakes broke each check."""
        return counted(self.checks, only_unmet=True)

    @property
    def dates(self) -> NDArray[np.datetime64]:
        """Day of each sample; not-a-time where there is none."""
        if "date_parsed" in self.frame:
            return self.frame["date_parsed"].to_numpy().astype("datetime64[D]")
        return np.full(len(self.frame), np.datetime64("NaT"), dtype="datetime64[D]")


def assess_lakes(readings: Readings, rules: Rules, options: LakeOptions, limits: tuple[Limit, ...]) -> LakeAssessment:
    """Assess every lake of `readings`; those without anything to go by come back in `rejected`."""
    values = values_of(readings.frame)
    values.setdefault("temperature_c", np.full(len(readings.frame), np.nan))
    good = _usable(values, readings.frame)
    keep = np.flatnonzero(good)
    frame = readings.frame.iloc[keep].reset_index(drop=True)
    values = as_recorded({name: v[keep] for name, v in values.items()}, words_of(frame, "filtered"),
                         words_of(frame, "ph_kind"), words_of(frame, "anc_method"))
    u = uncertainties(values, readings.headers)
    setting = setting_of(values, options.air_co2_ppm, options.carbonic)
    lakes = Lakes({name: v[:, None] for name, v in values.items()}, setting, rules.organic, np.ones((1, 1)))
    method, titrated = words_of(frame, "anc_method"), words_of(frame, TITRATED_BY)
    plan = plan_of(lakes, anc_kinds(np.where(titrated != "", "gran", method)), options)
    found = answers(lakes, plan, rules, options)
    figures: dict[str, NDArray] = {name: np.broadcast_to(v, (keep.size, 1))[:, 0].copy()
                                   for name, v in found.columns.items()}
    figures["event_fraction_to_limit"][np.isinf(figures["event_fraction_to_limit"])] = np.nan
    around = spread(values, u, setting, plan, rules, options, limits)
    _add_ions(figures, lakes, u, found, rules)
    _add_carbon(figures, around, lakes, plan, found, words_of(frame, "ph_kind"))
    sums = ion_sums(lakes, found.chemistry)
    _add_quality(figures, lakes, found, sums, values)
    index, used = _classes(figures, found, rules, around)
    figures |= _lime_words(lakes, found, rules, figures) | _simple_lake(lakes, found)
    figures["critical_load_notes"] = _load_notes(found)
    figures |= _sensitivity(lakes, found, rules) | _closed_episode(lakes, found)
    figures["exceedance_probability"] = np.full(keep.size, np.nan) if around.exceeded is None else around.exceeded
    figures |= {
        "anc_used_from": anc_used_words(plan, np.where(titrated != "", titrated, method)),
        "anc_charge_form": charge_form_words(found, plan.kinds.is_computed[:, 0]), "anc_gap_words": gap_words(figures),
        "volume_from": found.water.volume_from, "net_acid_from": found.deposition.counted,
        "event_from": _event_words(lakes, rules, figures),
    }
    figures["left_out"] = left_out_words(lakes, figures, plan.kinds.is_gran[:, 0],
                                         with_event=rules.event is not None)
    figures["status"] = _status(lakes, figures)
    bubbled = _at_equilibration(lakes, found, u, values)
    checks = lake_checks(lakes, u, found.budget, found.chemistry, sums, figures, bubbled)
    kind = frame["water_kind"].to_numpy(dtype=object) if "water_kind" in frame else np.full(keep.size, "", dtype=object)
    broken = verdicts(limits, figures, kind, np.full(keep.size, "fresh", dtype=object))
    checks.append(_history(frame, figures))
    figures |= {"failed_checks": failed(checks, keep.size), "warnings": _warnings(figures, rules.schemes[0], broken)}
    refused = _refused(readings, np.flatnonzero(~good))
    return LakeAssessment(
        results=_results(frame, figures, around, options), frame=frame, lakes=lakes, plan=plan, answers=found,
        spread=around, rules=rules, index=index, used=used, broken=broken, checks=checks, rejected=refused,
        notes=notes_on_file(readings),
        flags=Counter(zip(readings.flags["what"], readings.flags["column"], strict=True)),
        rounding=roundings(values, u, readings.headers), duplicates=duplicate_rows(readings.rejected))


def _usable(values: Mapping[str, Array], frame: pd.DataFrame) -> NDArray[np.bool_]:
    """Rows with an ANC of any kind, all ions of one, or a pH."""
    n = len(frame)

    def there(name: str) -> NDArray[np.bool_]:
        return np.isfinite(values[name]) if name in values else np.zeros(n, dtype=bool)

    ions = np.logical_and.reduce([there(f"{ion}_mol_l") for ion in NEEDED])
    return ions | there("anc_eq_l") | there("alkalinity_eq_l") | there("ph")


def _refused(readings: Readings, rows: NDArray[np.intp]) -> pd.DataFrame:
    """Rows refused by the reader, and those without anything to go by, in file order."""
    lines = [(readings.frame["row"].iloc[i], readings.frame["sample_id"].iloc[i], "anc, alkalinity, ions, ph", *NOTHING)
             for i in rows.tolist()]
    here = pd.DataFrame(lines, columns=list(REJECTED_COLUMNS))
    parts = [p for p in (readings.rejected, here) if len(p)]
    return pd.concat(parts).sort_values("row", kind="stable").reset_index(drop=True) if parts else readings.rejected


# ------------------------------------------------------------------ what is added to the numbers


def _add_ions(figures: dict, lakes: Lakes, u: Mapping[str, Array], found: Answers, rules: Rules) -> None:
    """Readings repeated in the result, what salt is below zero, and the uncertainty of the gap between two ANCs."""
    n = lakes.setting.air_pco2_atm.shape[0]
    figures |= {"temperature_c": lakes.get("temperature_c")[:, 0], "doc_mg_l": lakes.get("doc_mg_l")[:, 0],
                "aluminum_umol_l": 1e6 * lakes.get("aluminum_mol_l")[:, 0],
                "conductivity_us_cm": lakes.get("conductivity_us_cm")[:, 0],
                "ph_at_air_measured": lakes.get("ph_air_equilibrated")[:, 0]}
    star = non_marine({ion: lakes.charge(ion) for ion in IONS}, rules.critical.tracer)
    figures["sea_salt_negative"] = negative_words(star) if star.negative else np.full(n, "", dtype=object)
    total = np.zeros(n)
    for ion in IONS:
        of = u.get(f"{ion}_mol_l")
        if of is not None and ion != "fluoride":
            total += np.nan_to_num(abs(substances()[ion].charge or 1) * of) ** 2
    total += np.nan_to_num(u.get("anc_eq_l", np.zeros(n))) ** 2
    organic = ORGANIC_U_REL * np.nan_to_num(found.budget.gap_organic[:, 0])
    aluminum = np.nan_to_num(3.0 * u.get("aluminum_mol_l", np.zeros(n)))
    spread_u = 1e6 * np.sqrt(total + organic**2 + aluminum**2)
    figures["anc_gap_u_ueq_l"] = np.where(np.isfinite(figures["anc_gap_ueq_l"]), spread_u, np.nan)


def _add_carbon(figures: dict, around: Spread, lakes: Lakes, plan: Plan, found: Answers, ph_kind: Words) -> None:
    """Take the CO2 pressure, and what rests on it, away where it cannot be stated, and say why."""
    c = found.chemistry
    n = c.pco2_atm.shape[0]
    counted_organic = c.organic - gran_leaves_out(lakes)[0]
    none = np.full(n, np.nan)
    of_titration = plan.sources[1] >= CARBON_SOURCES.index("pH and ANC")
    of = stateable(c.pco2_atm[:, 0], of_titration=of_titration, ph=c.ph[:, 0], carbonate_eq_l=c.carbonate[:, 0],
                   organic_eq_l=counted_organic[:, 0], low_atm=1e-6 * around.low.get("pco2_uatm", none),
                   high_atm=1e-6 * around.high.get("pco2_uatm", none))
    figures["pco2_neal_uatm"] = 1e6 * _neal(lakes, found)
    for name in ("pco2_uatm", "pco2_air_ratio", "co2_flux_mmol_m2_d", "pco2_neal_uatm"):
        for store in (figures, around.low, around.high):
            if name in store:
                store[name] = np.where(of.mask, store[name], np.nan)
    figures["pco2_from"] = np.where(of.mask, carbon_words(plan, ph_kind, lakes.get("doc_mg_l")[:, 0]), of.words)


def _neal(lakes: Lakes, found: Answers) -> Array:
    """CO2 pressure after Neal et al. from titrated ANC and pH, where what they leave out is small. [atm]"""
    b, ph, t_c = found.budget, lakes.get("ph"), lakes.setting.at_meter.t_c
    titrated = np.where(np.isfinite(b.gran), b.gran, b.alkalinity)
    with np.errstate(invalid="ignore"):
        small = neal_left_out_share(titrated, ph, t_c) <= NEAL_LEAVES_OUT
    return np.where(small, NEAL_AIR_ATM * neal_excess_temperature(titrated, ph, t_c), np.nan)[:, 0]


def _add_quality(figures: dict, lakes: Lakes, found: Answers, sums: IonSums, values: Mapping[str, Array]) -> None:
    """Ion balance, conductivity, and bounds where an ion is missing."""
    measured = lakes.get("conductivity_us_cm")
    room = (1.0 + CONDUCTIVITY_ROOM) * measured - sums.known[:, None]
    missing = missing_ions(lakes, room)
    with np.errstate(invalid="ignore", divide="ignore"):
        off = np.where(measured[:, 0] > 0.01, 100.0 * (sums.conductivity / measured[:, 0] - 1.0), np.nan)
    figures |= {
        "ion_balance_percent": sums.balance, "ion_balance_organic_percent": sums.balance_organic,
        "conductivity_calculated_us_cm": sums.conductivity, "conductivity_percent": off,
        "missing_ions": missing.names, "missing_most_ueq_l": 1e6 * missing.most[:, 0],
        "anc_charge_bound_low_ueq_l": 1e6 * missing.low[:, 0], "anc_charge_bound_high_ueq_l": 1e6 * missing.high[:, 0]}


def _classes(figures: dict, found: Answers, rules: Rules, around: Spread) -> tuple[dict, dict]:
    """Class of each lake by every scheme and definition; the first scheme's goes into the result."""
    by = {name: v[:, 0] for name, v in found.by_definition.items()}
    by = {name: np.broadcast_to(v, figures["ph"].shape) for name, v in by.items()}
    index = {(s.name, d): classify(s, by[d]) for s in rules.schemes for d in s.definitions}
    used = {s.name: definition_used(s, by) for s in rules.schemes}
    first = rules.schemes[0]
    place = used[first.name]
    code = classify(first, values_used(first, by, place))
    chance = around.classes.get((first.name, ""), np.full((code.size, len(first.classes)), np.nan))
    figures |= {
        "scheme": np.where(code >= 0, first.name, ""), "class": class_names(first, code),
        "class_on": basis_words(first, place),
        "class_probability": np.where(code >= 0, chance[np.arange(code.size), np.maximum(code, 0)], np.nan),
        "class_also": second_class(first, code, chance),
        "class_conflicts": disagreements(index, {s.name: s for s in rules.schemes}),
        "episode_class": class_after(first, found.episode.after(
            found.episode.fraction, found.by_definition, figures["episode_ph"][:, None]), place),
    }
    return index | {(first.name, ""): code}, used


def class_after(scheme: Scheme, by_definition: Mapping[str, Array], place: NDArray[np.intp]) -> Words:
    """Class of each lake by values after a change, on the definition that its class rests on today."""
    values = {d: np.broadcast_to(v, (place.size, 1))[:, 0] for d, v in by_definition.items()}
    return class_names(scheme, classify(scheme, values_used(scheme, values, place)))


def _load_notes(found: Answers) -> Words:
    """What the critical load of each lake has to be told of, in words."""
    known = np.isfinite(found.critical.load)[:, 0]
    out = np.full(known.size, "", dtype=object)
    for name, words in FLAGS.items():
        hit = known & np.broadcast_to(found.critical.flags[name], (known.size, 1))[:, 0]
        out[hit] = np.where(out[hit] == "", words, out[hit] + "; " + words)
    return out


def closed_carbon(lakes: Lakes, found: Answers, figures: Mapping[str, NDArray]) -> tuple[Array, Array]:
    """Carbon and ANC that the first days after liming start from: those of the lake where its CO2 can be stated.

    Elsewhere the CO2 of air at the lake's pH, which is the least that a lake open to air holds for long.
    """
    c, balance = found.chemistry, lakes.balance()
    own = np.isfinite(figures["pco2_uatm"])[:, None]
    of_air = lakes.setting.air_co2_mol_l / balance.co2_per_dic(c.ph)
    dic = np.where(own, c.dic, of_air)
    return dic, np.where(own, c.anc_closed, balance.anc(c.ph, dic=dic))


def _lime_words(lakes: Lakes, found: Answers, rules: Rules, figures: Mapping[str, NDArray]) -> dict[str, NDArray]:
    """pH after liming, in the first days and at air, and the warning of over-liming."""
    dose = 1e-6 * figures["lime_dose_ueq_l"][:, None]
    c = found.chemistry
    air = lakes.setting.air_co2_mol_l
    dic, anc = closed_carbon(lakes, found, figures)
    after = after_liming(lakes.balance(), anc, dic, dose, rules.lime, air)
    needed = (dose > 0.0)[:, 0]
    closed = np.where(needed, after.ph_closed[:, 0], np.nan)
    at_air = np.where(needed, lakes.balance().ph(c.anc + dose, co2=air)[:, 0], np.nan)
    limit = next(x.limit for x in shipped_limits("lake_limits") if x.quantity == "lime_ph_closed")
    return {"lime_ph_closed": closed, "lime_ph_at_air": at_air,
            "lime_warning": over_liming_words(closed, after.aluminate_ug_l[:, 0], limit, rules.lime)}


def _simple_lake(lakes: Lakes, found: Answers) -> dict[str, NDArray]:
    """Whether sulfur and nitrogen together exceed the simple lake form, where its readings are there."""
    share = lake_share(lakes.get("lake_area_m2"), lakes.get("watershed_area_m2"))
    worse, better = at_both_ends(found.critical.load, lakes.get("nitrogen_sink_eq_m2_yr"), lakes.get("runoff_m_yr"),
                                 share, found.deposition.sulfur, found.deposition.nitrogen)
    known = np.isfinite(worse.excess)[:, 0]
    outside = (known, "no"), (worse.outside[:, 0], "only with slow nitrogen uptake"), (better.outside[:, 0], "yes")
    return {"simple_lake_exceeded": worded(known.size, *outside),
            "simple_lake_sulfur_cut_meq_m2_yr": 1e3 * worse.sulfur_cut[:, 0]}


def _sensitivity(lakes: Lakes, found: Answers, rules: Rules) -> dict[str, NDArray]:
    """Lowest and highest critical load over the variants of the method."""
    of = sensitivity({ion: lakes.charge(ion) for ion in IONS}, lakes.get("runoff_m_yr"), rules.critical,
                     sulfur_deposition_eq_m2_yr=found.deposition.sulfur)
    return {"critical_load_lowest_meq_m2_yr": 1e3 * of.load_lowest[:, 0],
            "critical_load_highest_meq_m2_yr": 1e3 * of.load_highest[:, 0]}


def _closed_episode(lakes: Lakes, found: Answers) -> dict[str, NDArray]:
    """pH of the mixture before air changes its carbon."""
    mixed = mix(closed_lake(found), with_carbon(lakes, found.episode.event), found.episode.fraction)
    balance = balance_of(mixed, lakes.setting.lake, lakes.organic)
    return {"episode_ph_closed": balance.ph(mixed["anc_eq_l"], dic=mixed["dic_mol_l"])[:, 0]}


def _event_words(lakes: Lakes, rules: Rules, figures: Mapping[str, NDArray]) -> Words:
    known = np.isfinite(figures["episode_anc_ueq_l"])
    if rules.event is not None:
        return worded(known.size, (known, rules.event.in_words()[0]))
    return np.where(known, deposition_words({name: lakes.get(name)[:, 0] for name in DEPOSITION}), "")


def _at_equilibration(lakes: Lakes, found: Answers, u: Mapping[str, Array], values: Mapping[str, Array],
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


def _status(lakes: Lakes, figures: Mapping[str, NDArray]) -> Words:
    code = lakes.setting.lake.status[:, 0]
    partial = (figures["class"] == "") | np.isnan(figures["ph_at_air"]) | np.isnan(figures["acid_to_ph_6_0_ueq_l"])
    return worded(code.size, (code == FLAGGED, "outside range"), (partial, "partial"), default="ok")


def _history(frame: pd.DataFrame, figures: Mapping[str, NDArray]) -> Check:
    table = frame_of({name: figures[name] for name in HISTORY_COLUMNS})
    count, names = own_history(table, site_keys(frame))
    return fixed_check("own history", count, names)


def _warnings(figures: Mapping[str, NDArray], scheme: Scheme, broken: Mapping[str, NDArray[np.bool_]]) -> Words:
    """Classes at risk and broken limits, joined by semicolons."""
    at_risk = [c.name for c in scheme.classes if c.at_risk]
    out = np.where(np.isin(figures["class"], at_risk), figures["class"], "").astype(object)
    for name, hit in broken.items():
        out[hit] = np.where(out[hit] == "", name, out[hit] + "; " + name)
    return out


def _results(frame: pd.DataFrame, figures: Mapping[str, NDArray], around: Spread, options: LakeOptions) -> pd.DataFrame:
    """One row per lake, all columns of results.csv in their order; those only repeated where they were given."""
    n = len(frame)
    ordered: dict[str, NDArray] = {}
    for column in lake_columns(options.thresholds):
        if column.name in AS_GIVEN:
            if column.name in frame:
                ordered[column.name] = frame[column.name].to_numpy()
            continue
        ordered[column.name] = figures[column.name]
        if column.interval and options.draws:
            for end, store in (("low", around.low), ("high", around.high)):
                ordered[f"{column.name}_{end}"] = store.get(column.name, np.full(n, np.nan))
    return frame_of(ordered)

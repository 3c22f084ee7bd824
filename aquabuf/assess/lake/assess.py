"""Assess a survey of lakes: every answer of each lake, its class, its checks, and what was refused and why."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.assess.frames import frame_of
from aquabuf.assess.lake.answers import Answers, Plan, answers, plan_of
from aquabuf.assess.lake.beside import (
    at_equilibration,
    closed_episode,
    event_words,
    lime_words,
    load_notes,
    load_range,
    neal_pco2_atm,
    simple_lake,
)
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
from aquabuf.assess.lake.co2 import stateable
from aquabuf.assess.lake.columns import AS_GIVEN, lake_columns
from aquabuf.assess.lake.draws import Spread, spread
from aquabuf.assess.lake.inputs import IONS, ORGANIC_U_REL, Lakes, as_recorded, setting_of, words_of
from aquabuf.assess.lake.options import LakeOptions, Rules
from aquabuf.assess.lake.quality import HISTORY_COLUMNS, IonSums, ion_sums, lake_checks, own_history
from aquabuf.assess.lake.schemes import Scheme
from aquabuf.assess.lake.sea_salt import negative_words, non_marine
from aquabuf.assess.lake.survey import site_keys
from aquabuf.assess.lake.words import anc_used_words, carbon_words, charge_form_words, gap_words, left_out_words
from aquabuf.assess.limits import Limit, verdicts
from aquabuf.assess.sample.inputs import TITRATED_BY, uncertainties, values_of
from aquabuf.assess.sample.quality import Check, Rounding, counted, failed, fixed_check, roundings
from aquabuf.engine.status import FLAGGED
from aquabuf.readings.duplicates import duplicate_rows
from aquabuf.readings.result import BELOW_DETECTION, REJECTED_COLUMNS, Readings, notes_on_file
from aquabuf.units import substances

__all__ = ["LakeAssessment", "assess_lakes", "class_after", "ph_after"]

Array = NDArray[np.float64]
Words = NDArray[np.object_]

ZERO_ANC_PH = 5.6                       # pH of water without ANC at equilibrium with air (closed form, 5.60)
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
    values = without_censored(values, readings, frame)
    u = uncertainties(values, readings.headers)
    setting = setting_of(values, options.air_co2_ppm, options.carbonic)
    lakes = Lakes({name: v[:, None] for name, v in values.items()}, setting, rules.organic, np.ones((1, 1)))
    method, titrated = words_of(frame, "anc_method"), words_of(frame, TITRATED_BY)
    plan = plan_of(lakes, anc_kinds(np.where(titrated != "", "gran", method)), options)
    found = answers(lakes, plan, rules, options)
    figures: dict[str, NDArray] = {name: np.broadcast_to(v, (keep.size, 1))[:, 0].copy()
                                   for name, v in found.columns.items()}
    for name in ("event_fraction_to_limit", "reacidify_yr"):  # never: told by blanks
        figures[name][np.isinf(figures[name])] = np.nan
    used = _definitions(found, rules, keep.size)
    around = spread(values, u, setting, plan, rules, options, limits, used)
    _add_ions(figures, lakes, u, found, rules)
    _add_carbon(figures, around, lakes, plan, found, words_of(frame, "ph_kind"))
    sums = ion_sums(lakes, found.chemistry)
    _add_quality(figures, lakes, found, sums, values)
    index = _classes(figures, found, rules, around, used)
    figures |= lime_words(lakes, found, rules, figures, limits) | simple_lake(lakes, found)
    figures["critical_load_notes"] = load_notes(found)
    figures |= load_range(lakes, found, rules) | closed_episode(lakes, found, figures)
    figures["exceedance_probability"] = np.full(keep.size, np.nan) if around.exceeded is None else around.exceeded
    figures |= {
        "anc_used_from": anc_used_words(plan, np.where(titrated != "", titrated, method)),
        "anc_charge_form": charge_form_words(found, plan.kinds.is_computed[:, 0]), "anc_gap_words": gap_words(figures),
        "volume_from": found.water.volume_from, "net_acid_from": found.deposition.counted,
        "event_from": event_words(lakes, rules, figures),
    }
    figures["left_out"] = left_out_words(lakes, figures, plan.kinds.is_gran[:, 0],
                                         with_event=rules.event is not None)
    figures["status"] = _status(lakes, figures)
    bubbled = at_equilibration(lakes, found, u, values)
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


def without_censored(values: dict[str, Array], readings: Readings, frame: pd.DataFrame) -> dict[str, Array]:
    """Values less the alkalinities below detection in waters so acid (below ZERO_ANC_PH) that they may be negative."""
    if "ph" not in values:
        return values
    acid = values["ph"] < ZERO_ANC_PH
    out = dict(values)
    for name in ("alkalinity_eq_l", "anc_eq_l"):
        if name in values:
            flags = readings.flags
            rows = flags["row"][(flags["column"] == name) & (flags["what"] == BELOW_DETECTION)]
            here = frame["row"].isin(rows).to_numpy()
            out[name] = np.where(here & acid, np.nan, values[name])
    return out


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
    figures["pco2_neal_uatm"] = 1e6 * neal_pco2_atm(lakes, found)
    for name in ("pco2_uatm", "pco2_air_ratio", "co2_flux_mmol_m2_d", "pco2_neal_uatm"):
        for store in (figures, around.low, around.high):
            if name in store:
                store[name] = np.where(of.mask, store[name], np.nan)
    figures["pco2_from"] = np.where(of.mask, carbon_words(plan, ph_kind, lakes.get("doc_mg_l")[:, 0]), of.words)


def _add_quality(figures: dict, lakes: Lakes, found: Answers, sums: IonSums, values: Mapping[str, Array]) -> None:
    """Ion balance, conductivity, and bounds where an ion is missing."""
    measured = lakes.get("conductivity_us_cm")
    room = (1.0 + CONDUCTIVITY_ROOM) * measured - sums.known[:, None]
    missing = missing_ions(lakes, room)
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        off = np.where(measured[:, 0] > 0.01, 100.0 * (sums.conductivity / measured[:, 0] - 1.0), np.nan)
    figures |= {
        "ion_balance_percent": sums.balance, "ion_balance_organic_percent": sums.balance_organic,
        "conductivity_calculated_us_cm": sums.conductivity, "conductivity_percent": off,
        "missing_ions": missing.names, "missing_most_ueq_l": 1e6 * missing.most[:, 0],
        "anc_charge_bound_low_ueq_l": 1e6 * missing.low[:, 0], "anc_charge_bound_high_ueq_l": 1e6 * missing.high[:, 0]}


def _values_of(found: Answers, lakes: int) -> dict[str, Array]:
    return {name: np.broadcast_to(v, (lakes, 1))[:, 0] for name, v in found.by_definition.items()}


def _definitions(found: Answers, rules: Rules, lakes: int) -> dict[str, NDArray[np.intp]]:
    """Place of the definition that the class of each lake rests on, by scheme."""
    return {s.name: definition_used(s, _values_of(found, lakes)) for s in rules.schemes}


def _classes(figures: dict, found: Answers, rules: Rules, around: Spread, used: Mapping[str, NDArray[np.intp]],
             ) -> dict[tuple[str, str], NDArray[np.intp]]:
    """Class of each lake by every scheme and definition; the first scheme's goes into the result."""
    by = _values_of(found, figures["ph"].size)
    index = {(s.name, d): classify(s, by[d]) for s in rules.schemes for d in s.definitions}
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
            found.episode.fraction, found.by_definition, ph_after(found, figures["episode_ph"][:, None])), place),
    }
    return index


def ph_after(found: Answers, at_air: Array) -> Array:
    """pH that a class by pH takes after a change: today's, moved as far as the pH at air moves."""
    return found.chemistry.ph + (at_air - found.chemistry.ph_at_air)


def class_after(scheme: Scheme, by_definition: Mapping[str, Array], place: NDArray[np.intp]) -> Words:
    """Class of each lake by values after a change, on the definition that its class rests on today."""
    values = {d: np.broadcast_to(v, (place.size, 1))[:, 0] for d, v in by_definition.items()}
    return class_names(scheme, classify(scheme, values_used(scheme, values, place)))


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
            known = np.isfinite(figures[column.name].astype(float))
            for end, store in (("low", around.low), ("high", around.high)):
                ends = store.get(column.name, np.full(n, np.nan))
                ordered[f"{column.name}_{end}"] = np.where(known & np.isfinite(ends), ends, np.nan)
    return frame_of(ordered)

"""The long tables of a lake assessment: a row per lake and class, verdict, variant, share of event water, or change."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.assess.frames import LongRows, frame_of
from aquabuf.assess.lake.answers import with_carbon
from aquabuf.assess.lake.assess import LakeAssessment, class_after, ph_after
from aquabuf.assess.lake.beside import closed_carbon, closed_lake
from aquabuf.assess.lake.classes import basis_words
from aquabuf.assess.lake.critical import FLAGS, after_deposition_change
from aquabuf.assess.lake.critical_variants import sensitivity
from aquabuf.assess.lake.episode import anc_changes, balance_of, mix, solved, weak_changes
from aquabuf.assess.lake.inputs import IONS
from aquabuf.assess.lake.liming import DEMANDS, lime_dose, product_g_m3, reacidification_words
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.lake.schemes import QUANTITIES
from aquabuf.assess.limits import Limit

__all__ = ["class_table", "deposition_table", "episode_table", "liming_table", "load_table", "verdict_table"]

Array = NDArray[np.float64]

LEAST_SHOWN = 0.005  # probability from which a class gets a row of its own
SHARES = (0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.8, 1.0)
MICRO, MILLI = 1e6, 1e3
DAYS_PER_YEAR, MOST_YEARS = 365.25, 1000.0
CLASS_VERDICT = "class"


def _head(a: LakeAssessment, rows: LongRows) -> dict[str, NDArray]:
    """Line in the readings and name of the lake of each row."""
    return {name: a.results[name].to_numpy()[rows.sample] for name in ("row", "sample_id")}


def class_table(a: LakeAssessment) -> pd.DataFrame:
    """Each class that a lake falls into, or may fall into, by scheme and definition, with its probability."""
    n = len(a.results)
    masks, facts, columns = [], [], []
    for scheme in a.rules.schemes:
        for place, definition in enumerate(scheme.definitions):
            code = a.index[scheme.name, definition]
            chance = a.spread.classes.get((scheme.name, definition), np.full((n, len(scheme.classes)), np.nan))
            for k, one in enumerate(scheme.classes):
                is_class = code == k
                with np.errstate(invalid="ignore"):
                    masks.append((code >= 0) & (is_class | (chance[:, k] >= LEAST_SHOWN)))
                facts.append((scheme.name, QUANTITIES[definition], one.name, scheme.rule(k, definition), one.source))
                columns.append((chance[:, k], np.where(is_class, "yes", "no").astype(object),
                                np.where(a.used[scheme.name] == place, "yes", "no").astype(object)))
    rows = LongRows(masks)
    words = [rows.of_mask(list(column)) for column in zip(*facts, strict=True)]
    picked = [rows.pick(list(column)) for column in zip(*columns, strict=True)]
    return frame_of(_head(a, rows) | {
        "scheme": words[0], "definition": words[1], "in_use": picked[2], "class": words[2], "rule": words[3],
        "is_class_of_value": picked[1], "probability": picked[0].astype(float), "source": words[4]})


def verdict_table(a: LakeAssessment, limits: Sequence[Limit]) -> pd.DataFrame:
    """Every verdict of each lake with its rule: the class by each scheme, then each limit that could be tested."""
    n = len(a.results)
    nothing = np.full(n, np.nan)
    parts = [_class_verdicts(a, k) for k in range(len(a.rules.schemes))]
    for limit in limits:
        if limit.quantity not in a.results:
            continue
        value = a.results[limit.quantity].to_numpy(dtype=float)
        hit = a.broken.get(limit.name, np.zeros(n, dtype=bool))
        parts.append({
            "mask": np.isfinite(value) & applies(limit, a), "verdict": np.full(n, limit.name, dtype=object),
            "quantity": np.full(n, limit.quantity, dtype=object), "value": value,
            "low": _end(a, limit.quantity, "low"), "high": _end(a, limit.quantity, "high"),
            "unit": np.full(n, limit.unit, dtype=object), "rule": np.full(n, limit.rule(), dtype=object),
            "warned": np.where(hit, "yes", "no").astype(object),
            "probability": a.spread.limits.get(limit.name, nothing),
            "rests_on": _rests_on(a, limit.quantity), "words": np.where(hit, limit.words, "").astype(object),
            "next_step": np.where(hit, limit.next_step, "").astype(object),
            "source": np.full(n, limit.source, dtype=object)})
    rows = LongRows([p["mask"] for p in parts])
    names = [name for name in parts[0] if name != "mask"]
    return frame_of(_head(a, rows) | {name: rows.pick([p[name] for p in parts]) for name in names})


def applies(limit: Limit, a: LakeAssessment) -> NDArray[np.bool_]:
    """Lakes whose kind of water a limit is for."""
    kinds = a.frame["water_kind"] if "water_kind" in a.frame else pd.Series([""] * len(a.results), dtype=object)
    return kinds.map(lambda kind: limit.applies(kind, "fresh")).to_numpy(dtype=bool)


def _class_verdicts(a: LakeAssessment, k: int) -> dict[str, NDArray]:
    """The class of each lake by one scheme, on the definition in use."""
    scheme, n = a.rules.schemes[k], len(a.results)
    place = a.used[scheme.name]
    columns = {"anc_gran": "anc_gran_ueq_l", "anc_gran_of_ions": "anc_gran_of_ions_ueq_l",
               "anc_charge": "anc_charge_ueq_l", "alkalinity": "alkalinity_ueq_l",
               "anc_organic_corrected": "anc_organic_corrected_ueq_l", "ph": "ph"}
    code = np.select([place == p for p in range(len(scheme.definitions))],
                     [a.index[scheme.name, d] for d in scheme.definitions], -1)
    chance = a.spread.classes.get((scheme.name, ""), np.full((n, len(scheme.classes)), np.nan))
    at_risk = np.array([c.at_risk for c in scheme.classes] + [False])[code]

    def by_place(values: Sequence[NDArray], default: object) -> NDArray:
        out = np.full(n, default, dtype=object)
        for p, v in enumerate(values):
            out[place == p] = v[place == p]
        return out

    def of_class(values: Sequence[str]) -> NDArray:
        return np.array([*values, ""], dtype=object)[code]

    names = [columns[d] for d in scheme.definitions]
    rules = [np.array([*(scheme.rule(i, d) for i in range(len(scheme.classes))), ""], dtype=object)[code]
             for d in scheme.definitions]
    return {
        "mask": code >= 0,
        "verdict": np.array([f"{CLASS_VERDICT} by {scheme.name}: {c.name}" for c in scheme.classes] + [""],
                            dtype=object)[code],
        "quantity": by_place([np.full(n, name, dtype=object) for name in names], ""),
        **{word: by_place([end(a, name) for name in names], np.nan).astype(float) for word, end in (
            ("value", lambda a, name: a.results[name].to_numpy(dtype=float)),
            ("low", lambda a, name: _end(a, name, "low")), ("high", lambda a, name: _end(a, name, "high")))},
        "unit": np.full(n, "-" if scheme.quantity == "ph" else "µeq/L", dtype=object),
        "rule": by_place(rules, ""), "warned": np.where(at_risk, "yes", "no").astype(object),
        "probability": np.where(code >= 0, chance[np.arange(n), np.maximum(code, 0)], np.nan),
        "rests_on": basis_words(scheme, place), "words": of_class([c.words for c in scheme.classes]),
        "next_step": of_class([c.next_step for c in scheme.classes]),
        "source": of_class([c.source for c in scheme.classes])}


def _end(a: LakeAssessment, name: str, end: str) -> Array:
    column = f"{name}_{end}"
    return a.results[column].to_numpy(dtype=float) if column in a.results else np.full(len(a.results), np.nan)


def _rests_on(a: LakeAssessment, quantity: str) -> NDArray[np.object_]:
    """What a figure of the result rests on, in words."""
    n = len(a.results)
    if quantity.startswith(("anc_used", "acid_to_anc")):
        return a.results["anc_used_from"].to_numpy(dtype=object)
    if quantity.startswith(("critical", "exceedance")):
        return np.full(n, f"variant {a.rules.critical.label}; {a.rules.limit.in_words()}", dtype=object)
    if quantity.startswith("episode"):
        return a.results["event_from"].to_numpy(dtype=object)
    if quantity.startswith("lime"):
        return np.full(n, f"{a.rules.lime.name}, target of the run", dtype=object)
    return np.full(n, "readings", dtype=object)


def load_table(a: LakeAssessment) -> pd.DataFrame:
    """Critical load and exceedance of each lake by the chosen variant and by every change of one thing."""
    of = sensitivity({ion: a.lakes.charge(ion) for ion in IONS}, a.lakes.get("runoff_m_yr"), a.rules.critical,
                     sulfur_deposition_eq_m2_yr=a.answers.deposition.sulfur)
    n = len(a.results)

    def flat(v: Array) -> Array:
        return np.broadcast_to(v, (n, 1))[:, 0]

    loads = [flat(v.load) for v in of.variants]
    rows = LongRows([np.isfinite(v) for v in loads])
    chosen = loads[0]
    return frame_of(_head(a, rows) | {
        "variant": rows.of_mask([v.words for v in of.variants]),
        "full_variant": rows.of_mask([v.choice.label for v in of.variants]),
        "critical_load_meq_m2_yr": MILLI * rows.pick(loads),
        "change_percent": rows.pick([100.0 * (v / np.where(chosen == 0.0, np.nan, chosen) - 1.0) for v in loads]),
        "exceedance_meq_m2_yr": MILLI * rows.pick([flat(v.exceedance) for v in of.variants])})


def episode_table(a: LakeAssessment) -> pd.DataFrame:
    """Each lake with rising shares of event water: ANC, pH, class, and what took the ANC. Losses are negative."""
    e, n = a.answers.episode, len(a.results)
    event = with_carbon(a.lakes, e.event)
    used, limit = a.answers.anc_used, a.answers.limit
    given = SHARES if a.rules.event is None else a.rules.event.fractions
    shares = sorted({*given, e.fraction} - {0.0})
    closed = closed_lake(a.lakes, a.answers, {"pco2_uatm": a.results["pco2_uatm"].to_numpy(dtype=float)})
    before = solved(closed, a.lakes.setting.lake, a.lakes.organic, a.lakes.setting.air_co2_mol_l)
    scheme = a.rules.schemes[0]
    parts: list[dict[str, NDArray]] = []
    for share in shares:
        mixed = mix(e.lake, event, share)
        after = solved(mix(closed, event, share), a.lakes.setting.lake, a.lakes.organic, a.lakes.setting.air_co2_mol_l)
        anc = (1.0 - share) * used + share * e.event_anc
        at_air = balance_of(mixed, a.lakes.setting.lake, a.lakes.organic).ph(mixed["anc_eq_l"],
                                                                            co2=a.lakes.setting.air_co2_mol_l)
        causes = anc_changes(e.lake, event, share) | weak_changes(before, after)
        figures = {"anc_ueq_l": MICRO * anc, "ph_at_air": at_air, "ph_closed": after.ph_closed,
                   **{f"change_{name}_ueq_l": MICRO * v for name, v in causes.items()}}
        one = {name: np.broadcast_to(v, (n, 1))[:, 0] for name, v in figures.items()}
        one["event_fraction"] = np.full(n, share)
        one["class"] = class_after(
            scheme, e.after(share, a.answers.by_definition, ph_after(a.answers, at_air)), a.used[scheme.name])
        with np.errstate(invalid="ignore"):
            below = np.broadcast_to(anc < limit, (n, 1))[:, 0]
        one["below_anc_limit"] = worded(n, (np.isfinite(one["anc_ueq_l"]), "no"), (below, "yes"))
        parts.append(one)
    rows = LongRows([np.isfinite(p["anc_ueq_l"]) for p in parts])
    names = ["event_fraction", *(k for k in parts[0] if k != "event_fraction")]
    return frame_of(_head(a, rows) | {name: rows.pick([p[name] for p in parts]) for name in names})


def deposition_table(a: LakeAssessment, options: LakeOptions) -> pd.DataFrame:
    """ANC of each lake at a steady state with less or more sulfur deposition, its class, pH at air, and exceedance."""
    n, scheme = len(a.results), a.rules.schemes[0]
    changes = tuple(dict.fromkeys((0.0, *(c / 100.0 for c in options.deposition_changes))))
    found = after_deposition_change(a.answers.critical, a.answers.anc_used, changes)
    above = np.broadcast_to(a.answers.critical.flags["background_above_today"], (n, 1))
    parts = []
    for one in found:
        untold = above & (one.change != 0.0)
        one = replace(one, anc_change=np.where(untold, np.nan, one.anc_change), anc=np.where(untold, np.nan, one.anc))
        anc = np.broadcast_to(one.anc, (n, 1))[:, 0]
        ph = a.lakes.balance().ph(a.answers.chemistry.anc + one.anc_change, co2=a.lakes.setting.air_co2_mol_l)[:, 0]
        by_definition = {d: v + one.anc_change for d, v in a.answers.by_definition.items()} | {
            "ph": ph_after(a.answers, ph[:, None])}
        sulfur = np.broadcast_to(a.answers.deposition.sulfur, (n, 1))[:, 0]
        exceeded = a.results["exceedance_meq_m2_yr"].to_numpy(dtype=float) + MILLI * one.change * sulfur
        net = a.results["net_acid_deposition_meq_m2_yr"].to_numpy(dtype=float)
        new_net = net + MILLI * one.change * sulfur
        years = a.results["years_to_anc_limit"].to_numpy(dtype=float)
        with np.errstate(invalid="ignore", divide="ignore"):
            lasts = np.where(new_net > 0.0, years * net / new_net, np.nan)
        parts.append({
            "sulfur_deposition_change_percent": np.full(n, 100.0 * one.change), "anc_ueq_l": MICRO * anc,
            "anc_change_ueq_l": MICRO * np.broadcast_to(one.anc_change, (n, 1))[:, 0],
            "class": class_after(scheme, by_definition, a.used[scheme.name]), "ph_at_air": ph,
            "exceedance_meq_m2_yr": exceeded, "years_to_anc_limit": lasts,
            "note": worded(n, (untold[:, 0], FLAGS["background_above_today"]))})
    known = np.broadcast_to(np.isfinite(a.answers.anc_used + a.answers.critical.load), (n, 1))[:, 0]
    rows = LongRows([known] * len(parts))
    return frame_of(_head(a, rows) | {name: rows.pick([p[name] for p in parts]) for name in parts[0]})


def liming_table(a: LakeAssessment, options: LakeOptions) -> pd.DataFrame:
    """Dose, product and what takes it up, for each lake below the liming target."""
    dose = a.results["lime_dose_ueq_l"].to_numpy(dtype=float)
    dic, anc = closed_carbon(a.lakes, a.answers, {"pco2_uatm": a.results["pco2_uatm"].to_numpy(dtype=float)})
    demands = lime_dose(a.lakes.balance(), anc, dic, anc + dose[:, None] / MICRO, a.lakes.setting.air_co2_mol_l)
    with np.errstate(invalid="ignore"):
        rows = LongRows([dose > 0.0])
    repeated = ("lime_dose_ueq_l", "lime_g_m3", "lime_t", "lime_least_t", "lime_most_t", "lime_stream_t_yr",
                "lime_ph_closed", "lime_ph_at_air", "lime_warning", "reacidify_yr")
    target = f"ANC {options.lime_anc_ueq_l:g} µeq/L" if options.lime_ph is None else f"pH {options.lime_ph:g} at air"
    again, limit = _reacidify_words(a, rows), np.broadcast_to(a.answers.limit, a.answers.anc_used.shape)[:, 0]
    limed_to = a.results["anc_used_ueq_l"].to_numpy(dtype=float) + dose
    repeat = np.where(again == "", (limed_to - MICRO * limit)[rows.sample], np.nan)  # from the limit to the target
    return frame_of(_head(a, rows) | {
        "product": rows.of_mask([a.rules.lime.name]), "target": rows.of_mask([target]),
        **{name: a.results[name].to_numpy()[rows.sample] for name in repeated}, "reacidify_words": again,
        "reacidify_date": _days_later(options.lime_date, a.results["reacidify_yr"].to_numpy(dtype=float)[rows.sample]),
        "repeat_dose_ueq_l": repeat,
        "repeat_g_m3": product_g_m3(repeat / MICRO, a.rules.lime, a.rules.lime.dissolved_usual),
        **{f"taken_by_{name}_ueq_l": MICRO * v[:, 0][rows.sample] for name, v in demands.demand_eq_l.items()
           if name in DEMANDS},
        "hazard": rows.of_mask([a.rules.lime.hazard])})


def _days_later(day: str, years: Array) -> NDArray[np.object_]:
    """The day so many years after `day`; empty where either is not known."""
    out = np.full(years.shape, "", dtype=object)
    known = np.isfinite(years) & (years < MOST_YEARS)
    if day:
        days = np.round(years[known] * DAYS_PER_YEAR).astype("timedelta64[D]")
        out[known] = (np.datetime64(day) + days).astype(str)
    return out


def _reacidify_words(a: LakeAssessment, rows: LongRows) -> NDArray[np.object_]:
    used = a.answers.anc_used[:, 0]
    limit = np.broadcast_to(a.answers.limit, a.answers.anc_used.shape)[:, 0]
    years = a.results["reacidify_yr"].to_numpy(dtype=float)
    with np.errstate(invalid="ignore"):
        never = (used >= limit) & np.isnan(years)
    return reacidification_words(np.where(never, np.inf, years))[rows.sample]



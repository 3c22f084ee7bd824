"""Blocks of text about what was worked out for the lakes of a survey: tolerance, loads, episodes, CO2, liming."""

from __future__ import annotations

from collections import Counter

import pandas as pd

from aquabuf.assess.lake.columns import acid_column
from aquabuf.report.lake_blocks import LakeRun, block
from aquabuf.report.summary import plural

__all__ = ["carbon", "critical_loads", "episodes", "liming", "tolerance"]


def _of(count: object, total: object) -> str:
    """A count of lakes among all, such as "3 of 12 lakes"."""
    return f"{int(count):,} of {plural(int(total), 'lake')}"  # type: ignore[call-overload]


def tolerance(run: LakeRun) -> str:
    """Acid that the lakes can take, and how long that lasts."""
    t, lines = run.lakes, []
    for ph in run.options.thresholds:
        value = t[acid_column(ph, "open")].dropna()
        if len(value):
            lines.append(f"Acid to pH {ph:g} at equilibrium with air: median {value.median():.0f} µeq/L; below that pH "
                         f"already: {_of((value < 0).sum(), len(value))}.")
    years = t["years_to_anc_limit"].dropna()
    above = years[years > 0]
    if len(above):
        lines.append(f"Against today's net acid deposition on the whole catchment, with no help from soils, the "
                     f"water's own "
                     f"ANC lasts {above.median():.1f} years (median of the {plural(len(above), 'lake')} above the ANC "
                     f"limit). Soils are what keeps lakes neutral: a short time means that the lake depends on them.")
    if len(years) > len(above):
        lines.append(f"Below the ANC limit already: {_of(len(years) - len(above), len(years))}.")
    return block("Acid tolerance (whole-lake amounts in keq and kg of sulfuric acid are in results.csv)", lines)


def critical_loads(run: LakeRun) -> str:
    """Exceedance by the chosen variant, and how far it moves with the variant."""
    t = run.lakes[run.lakes["critical_load_meq_m2_yr"].notna()]
    if t.empty:
        return ""
    rules, load = run.found.rules, t["critical_load_meq_m2_yr"]
    ends = f"{load.quantile(0.1):.0f} to {load.quantile(0.9):.0f}"
    spread = "" if len(t) < 3 else f", {ends} from the 10th to the 90th percentile"
    lines = [f"Critical load: median {load.median():.0f} meq/m²/yr{spread} ({plural(len(t), 'lake')})."]
    known = t[t["exceedance_meq_m2_yr"].notna()]
    if len(known):
        lines.append(_exceeded(known, drawn=bool(run.options.draws)))
    limit = "a variable ANC limit" if rules.limit.is_variable else f"ANC limit {1e6 * rules.limit.value_eq_l:g} µeq/L"
    lines.append(f"Variant: {rules.critical.label}; {limit}. critical_loads.csv shows every change of it.")
    notes = Counter(words for text in t["critical_load_notes"] for words in text.split("; ") if words)
    lines += [f"{plural(count, 'lake')}: {words}." for words, count in notes.most_common()]
    simple = Counter(words for words in t["simple_lake_exceeded"] if words)
    if simple:
        slow = simple["only with slow nitrogen uptake"]
        lines.append(f"With nitrogen (simple lake form): exceeded in {_of(simple['yes'], simple.total())}"
                     f"{f', in {slow:,} more if the lake takes nitrogen up slowly' if slow else ''}.")
    return block("Critical load of acidity", lines)


def _exceeded(known: pd.DataFrame, *, drawn: bool) -> str:
    over, load = known["exceedance_meq_m2_yr"], known["critical_load_meq_m2_yr"]
    least = (over + load - known["critical_load_highest_meq_m2_yr"] > 0).sum()
    most = (over + load - known["critical_load_lowest_meq_m2_yr"] > 0).sum()
    sure = f", with a probability above 0.95 in {(known['exceedance_probability'] > 0.95).sum():,}" if drawn else ""
    return (f"Exceeded in {_of((over > 0).sum(), len(known))} by the chosen variant{sure}; in {least:,} by the "
            f"variant with the "
            f"highest load and in {most:,} by the one with the lowest.")


def episodes(run: LakeRun) -> str:
    """What melt or storm water does."""
    t = run.lakes[run.lakes["episode_anc_ueq_l"].notna()]
    if t.empty:
        return ""
    now, then, limit = t["anc_used_ueq_l"], t["episode_anc_ueq_l"], t["anc_limit_ueq_l"]
    lines = [f"ANC changes by a median of {(then - now).median():+.0f} µeq/L. At or below 0 then: "
             f"{_of((then <= 0).sum(), len(t))} "
             f"({(now <= 0).sum():,} today); below the ANC limit then: {(then < limit).sum():,} "
             f"({(now < limit).sum():,} today)."]
    share = t["event_fraction_to_limit"]
    crossing = share[share > 0]
    if len(crossing):
        lines.append(f"Share of event water at which the ANC limit is crossed: median {crossing.median():.2f} of the "
                     f"{plural(len(crossing), 'lake')} above the limit that event water alone would take below it.")
    lines.append("episodes.csv has other shares, and what took the ANC.")
    lines += [f"Event water: {words} ({plural(c, 'lake')})"
              for words, c in Counter(w for w in t["event_from"] if w).most_common(3)]
    return block(f"Episode: {100 * t['event_fraction'].iloc[0]:g} % of event water mixed in", lines)


def carbon(run: LakeRun) -> str:
    """CO2: how many can be stated, and what they say."""
    t = run.lakes
    stated = t[t["pco2_uatm"].notna()]
    refused_words = Counter(_kind_of_refusal(w) for w in t["pco2_from"][t["pco2_uatm"].isna()] if w)
    lines = []
    if len(stated):
        lines.append(f"CO2 pressure is stated for {plural(len(stated), 'lake')}: median "
                     f"{stated['pco2_uatm'].median():.0f} µatm; "
                     f"more than air holds: {(stated['pco2_air_ratio'] > 1).sum():,}.")
    flux = t["co2_flux_mmol_m2_d"].dropna()
    if len(flux):
        lines.append(f"CO2 to the air: median {flux.median():.1f} mmol/m²/d ({plural(len(flux), 'lake')} with wind).")
    lines += [f"Not stated for {plural(c, 'lake')}: {w}." for w, c in refused_words.most_common()]
    return block("Carbon dioxide", lines)


def _kind_of_refusal(words: str) -> str:
    """The reason without the figures of the single lake."""
    text = words.removeprefix("not stated: ").split(";")[0].replace("more than ", "").split(" (")[0]
    return " ".join("..." if any(ch.isdigit() for ch in word) else word for word in text.split())


def liming(run: LakeRun) -> str:
    """What liming would take."""
    need, o, product = run.lakes[run.lakes["lime_dose_ueq_l"] > 0], run.options, run.found.rules.lime
    if need.empty:
        return ""
    target = f"pH {o.lime_ph:g} at air" if o.lime_ph is not None else f"an ANC of {o.lime_anc_ueq_l:g} µeq/L"
    lines = [f"Below {target}: {plural(len(need), 'lake')}. Dose: median {need['lime_g_m3'].median():.1f} g/m³ of "
             f"{product.name} "
             f"({100 * product.dissolved_usual:g} % dissolving; {100 * product.dissolved_low:g} to "
             f"{100 * product.dissolved_high:g} % for the least and the most)."]
    known = need[need["lime_t"].notna()]
    if len(known):
        lines.append(f"For the {plural(len(known), 'lake')} with a volume: {_tons(known['lime_t'].sum())} t in all "
                     f"({_tons(known['lime_least_t'].sum())} to {_tons(known['lime_most_t'].sum())} t by the share "
                     f"that "
                     f"dissolves).")
    again = need["reacidify_yr"].dropna()
    if len(again):
        middle = "" if len(again) < 4 else \
            f"; half of these within {again.quantile(0.25):.1f} to {again.quantile(0.75):.1f} years"
        lines.append(f"Flushing brings {plural(len(again), 'lake')} back to the ANC limit after {again.median():.1f} "
                     f"years "
                     f"(median){middle}. A lake that is back within months needs dosing of its inflow instead.")
    warned = int((need["lime_warning"] != "").sum())
    lines += [f"Over-limed in the first days: {plural(warned, 'lake')}; see liming.csv."] if warned else []
    return block("Liming", lines)


def _tons(value: float) -> str:
    return f"{value:,.0f}" if value >= 10.0 else f"{value:.2g}"

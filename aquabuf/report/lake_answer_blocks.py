"""Blocks of text about what was worked out for the lakes of a survey: tolerance, loads, episodes, CO2, liming."""

from __future__ import annotations

from collections import Counter

import pandas as pd

from aquabuf.assess.lake.columns import TO_PH_6
from aquabuf.report.lake_blocks import LakeRun, block, figure_or_dash
from aquabuf.report.summary import plural

__all__ = ["carbon", "critical_loads", "episodes", "liming", "tolerance"]


def tolerance(run: LakeRun) -> str:
    """Acid that the lakes can take, and how long that lasts."""
    t, o = run.lakes, run.options
    lines = []
    for ph in o.thresholds:
        name = TO_PH_6.replace("6_0", f"{ph:.1f}".replace(".", "_"))
        value = t[name] if name in t else pd.Series(dtype=float)
        if value.notna().any():
            lines.append(
                f"Acid to pH {ph:g} at equilibrium with air: median {value.median():.0f} µeq/L; "
                f"{int((value < 0).sum()):,} of {int(value.notna().sum()):,} lakes are below that pH already."
            )
    years = t["years_to_anc_limit"]
    if years.notna().any():
        some = years[years > 0]
        lines.append(
            f"Against today's net acid deposition on the whole catchment, with no help from soils, the water's own ANC "
            f"lasts {figure_or_dash(some.median(), 1)} years (median of {len(some):,} lakes above the ANC limit); "
            f"{int((years == 0).sum()):,} lakes are below the limit already. Soils are what keeps lakes neutral: a "
            f"short time means that the lake depends on them."
        )
    return block("Acid tolerance (whole-lake amounts in keq and kg of sulfuric acid are in results.csv)", lines)


def critical_loads(run: LakeRun) -> str:
    """Exceedance by the chosen variant, and how far it moves with the variant."""
    t = run.lakes
    load, over = t["critical_load_meq_m2_yr"], t["exceedance_meq_m2_yr"]
    if not load.notna().any():
        return ""
    rules = run.found.rules
    lines = [
        f"Critical load: median {load.median():.0f} meq/m²/yr ({load.quantile(0.1):.0f} to {load.quantile(0.9):.0f} "
        f"from "
        f"the 10th to the 90th percentile of {plural(int(load.notna().sum()), 'lake')})."
    ]
    if over.notna().any():
        known = over.notna()
        least = (over + load - t["critical_load_highest_meq_m2_yr"])[known] > 0
        most = (over + load - t["critical_load_lowest_meq_m2_yr"])[known] > 0
        sure = t["exceedance_probability"][known] > 0.95
        lines.append(
            f"Exceeded in {int((over[known] > 0).sum()):,} of {int(known.sum()):,} lakes by the chosen variant, "
            f"{int(sure.sum()):,} of them with a probability above 0.95; in {int(least.sum()):,} by the variant with "
            f"the highest load and in {int(most.sum()):,} by the one with the lowest."
        )
    limit = "a variable ANC limit" if rules.limit.is_variable else f"ANC limit {1e6 * rules.limit.value_eq_l:g} µeq/L"
    lines.append(f"Variant: {rules.critical.label}; {limit}. critical_loads.csv shows every change of it.")
    notes = Counter(words for text in t["critical_load_notes"] for words in text.split("; ") if words)
    lines += [f"{plural(count, 'lake')}: {words}." for words, count in notes.most_common()]
    simple = Counter(t["simple_lake_exceeded"])
    if simple["yes"] + simple["no"]:
        lines.append(
            f"With nitrogen (simple lake form): exceeded in {simple['yes']:,} of {simple['yes'] + simple['no']:,} "
            f"lakes."
        )
    return block("Critical load of acidity", lines)


def episodes(run: LakeRun) -> str:
    """What melt or storm water does."""
    t = run.lakes
    anc = t["episode_anc_ueq_l"]
    if not anc.notna().any():
        return ""
    now, known = t["anc_used_ueq_l"], anc.notna()
    fraction = t["event_fraction"].dropna().iloc[0]
    limit = t["anc_limit_ueq_l"]
    share = t["event_fraction_to_limit"]
    return block(
        f"Episode: {100 * fraction:g} % of event water mixed in",
        [
            f"ANC falls by a median of {(now - anc)[known].median():.0f} µeq/L; {int((anc[known] <= 0).sum()):,} "
            f"lakes end at or "
            f"below 0 ({int((now[known] <= 0).sum()):,} are there today), {int((anc < limit)[known].sum()):,} below "
            f"the ANC limit "
            f"({int((now < limit)[known].sum()):,} today).",
            f"Share of event water at which the limit is crossed: median "
            f"{figure_or_dash(share[share > 0].median(), 2)} of the "
            f"{int((share > 0).sum()):,} lakes that cross it. episodes.csv has other shares, and what took the ANC.",
            *(f"Event water: {words} ({c:,})" for words, c in Counter(w for w in t["event_from"] if w).most_common(3)),
        ],
    )


def carbon(run: LakeRun) -> str:
    """CO2: how many can be stated, and what they say."""
    t = run.lakes
    stated = t["pco2_uatm"].notna()
    refused_words = Counter(_kind_of_refusal(w) for w in t["pco2_from"][~stated] if w)
    if not stated.any() and not refused_words:
        return ""
    lines = []
    if stated.any():
        ratio = t["pco2_air_ratio"][stated]
        lines.append(
            f"CO2 pressure is stated for {plural(int(stated.sum()), 'lake')}: median "
            f"{t['pco2_uatm'].median():.0f} µatm; "
            f"{int((ratio > 1).sum()):,} of them hold more than air does."
        )
        flux = t["co2_flux_mmol_m2_d"].dropna()
        if len(flux):
            lines.append(f"CO2 to the air: median {flux.median():.1f} mmol/m²/d ({len(flux):,} lakes with wind).")
    lines += [f"Not stated for {c:,}: {w}." for w, c in refused_words.most_common()]
    return block("Carbon dioxide", lines)


def _kind_of_refusal(words: str) -> str:
    """The reason without the figures of the single lake."""
    text = words.removeprefix("not stated: ").split(";")[0].replace("more than ", "")
    return " ".join(
        "..." if any(ch.isdigit() for ch in word) and not word.startswith("(") else word
        for word in text.split(" (")[0].split()
    )


def liming(run: LakeRun) -> str:
    """What liming would take."""
    t, o = run.lakes, run.options
    dose = t["lime_dose_ueq_l"]
    need = t[dose > 0]
    if need.empty:
        return ""
    rules = run.found.rules
    target = f"pH {o.lime_ph:g} at air" if o.lime_ph is not None else f"an ANC of {o.lime_anc_ueq_l:g} µeq/L"
    lines = [
        f"{plural(len(need), 'lake')} {'is' if len(need) == 1 else 'are'} below {target}. "
        f"Dose: median {need['lime_g_m3'].median():.1f} g/m³ of "
        f"{rules.lime.name} "
        f"({100 * rules.lime.dissolved_usual:g} % dissolving; {100 * rules.lime.dissolved_low:g} to "
        f"{100 * rules.lime.dissolved_high:g} % in liming tables)."
    ]
    if need["lime_t"].notna().any():
        known = need[need["lime_t"].notna()]
        lines.append(
            f"For the {len(known):,} with a volume: {known['lime_t'].sum():.0f} t in all "
            f"({known['lime_least_t'].sum():.0f}"
            f" to {known['lime_most_t'].sum():.0f} t by the share that dissolves)."
        )
    again = need["reacidify_yr"].dropna()
    if len(again):
        lines.append(
            f"Flushing brings them back to the ANC limit after {again.median():.1f} years (median of {len(again):,}); "
            f"half of these lakes within {again.quantile(0.25):.1f} to {again.quantile(0.75):.1f} years. A lake that "
            f"is back within months needs dosing of its inflow instead."
        )
    warned = int((need["lime_warning"] != "").sum())
    lines += [f"{warned:,} would be over-limed in the first days: see liming.csv."] if warned else []
    return block("Liming", lines)

"""Blocks of text about a survey of lakes; summary and report are put together from them."""

from __future__ import annotations

import textwrap
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.lake.assess import LakeAssessment
from aquabuf.assess.lake.classes import class_names
from aquabuf.assess.lake.columns import TO_PH_6
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.lake.schemes import QUANTITIES
from aquabuf.assess.limits import Limit
from aquabuf.assess.sample.quality import allowed, check_facts, file_check_rows
from aquabuf.report.summary import WIDTH, item, plural

__all__ = [
    "LakeRun",
    "block",
    "carbon",
    "classes",
    "critical_loads",
    "episodes",
    "first_to_look_at",
    "groups",
    "head",
    "liming",
    "quality",
    "refused",
    "tolerance",
    "trends",
]

FIRST_SHOWN = 8
SITES_SHOWN = 12
REASONS_SHOWN = 10


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class LakeRun:
    """A run: what was found, and the tables of the survey as a whole.

    latest : rows that stand for their lake. series, trends, recovery : empty where no lake was sampled often enough.
    """

    found: LakeAssessment
    options: LakeOptions
    limits: tuple[Limit, ...]
    source: str
    titrations: Sequence[str]
    priorities: pd.DataFrame
    groups: pd.DataFrame
    latest: NDArray[np.bool_]
    series: pd.DataFrame
    trends: pd.DataFrame
    recovery: pd.DataFrame

    @property
    def lakes(self) -> pd.DataFrame:
        """One row per lake: its latest sample."""
        return self.found.results[self.latest]


def block(title: str, lines: Sequence[str]) -> str:
    """A titled list; nothing where there are no lines."""
    return "\n".join([title, *(item(line) for line in lines)]) if lines else ""


def _n(value: float, digits: int = 0) -> str:
    return "-" if pd.isna(value) else f"{value:.{digits}f}"


def _spread(row: pd.Series, name: str, digits: int = 0) -> str:
    low, high = (row.get(f"{name}_{end}", np.nan) for end in ("low", "high"))
    around = "" if pd.isna(low) else f" ({low:.{digits}f} to {high:.{digits}f})"
    return _n(row[name], digits) + around


def head(run: LakeRun) -> str:
    """What was assessed."""
    rows, lakes = len(run.found.results), int(run.latest.sum())
    samples = "" if rows == lakes else f" from {plural(rows, 'sample')}"
    warned = int((run.lakes["warnings"] != "").sum())
    refused_rows = run.found.rejected["row"].nunique()
    text = (
        f"{run.source}: {plural(lakes, 'lake')}{samples} assessed, {warned:,} with a warning, "
        f"{plural(refused_rows, 'row')} refused."
    )
    return textwrap.fill(text, WIDTH)


def classes(run: LakeRun) -> str:
    """Lakes by class of the first scheme, and how the count moves with the definition of ANC."""
    scheme, table = run.found.rules.schemes[0], run.lakes
    chance = run.found.spread.classes.get((scheme.name, ""))
    lines = []
    for k, one in enumerate(scheme.classes):
        count = int((table["class"] == one.name).sum())
        expected = (
            "" if chance is None else f" ({np.nansum(chance[run.latest, k]):.1f} expected with the readings' errors)"
        )
        lines.append(f"{count:,} x {one.name}{expected}: {one.words} [{scheme.rule(k)}; {_first_source(one.source)}]")
    unknown = int((table["class"] == "").sum())
    lines += [f"{unknown:,} x no class: neither ANC nor pH to go by"] if unknown else []
    rests = Counter(w for w in table["class_on"] if w)
    lines.append(f"The class rests on: {', '.join(f'{w} {c:,}' for w, c in rests.most_common())}.")
    lines += _by_definition(run) + _by_scheme(run)
    weighted = run.groups.iloc[0]["weighted"] == "yes"
    lines.append(
        "Shares in groups.csv are weighted by the survey's design weights."
        if weighted
        else "These are counts of the lakes in this table, not shares of a population."
    )
    return block(f"Sensitivity class by {scheme.name} ({scheme.words})", lines)


def _first_source(source: str) -> str:
    return source.split(";")[0]


def _by_definition(run: LakeRun) -> list[str]:
    """Counts by each definition where more than one is known, and how many lakes change class."""
    scheme = run.found.rules.schemes[0]
    lines, codes = [], {}
    for definition in scheme.definitions:
        code = run.found.index[scheme.name, definition][run.latest]
        if (code >= 0).any():
            codes[definition] = code
    if len(codes) < 2:
        return []
    for definition, code in codes.items():
        names = Counter(name for name in class_names(scheme, code) if name)
        counts = ", ".join(f"{names[c.name]:,} {c.name}" for c in scheme.classes)
        lines.append(f"By {QUANTITIES[definition]} ({int((code >= 0).sum()):,} lakes): {counts}.")
    every = np.stack(list(codes.values()))
    known = (every >= 0).sum(axis=0) > 1
    lowest = np.where(every >= 0, every, 99).min(axis=0)
    differ = int((known & (lowest != every.max(axis=0))).sum())
    lines.append(
        f"{differ:,} of {int(known.sum()):,} lakes with more than one definition of ANC change class with it "
        f"(column class_conflicts)."
    )
    return lines


def _by_scheme(run: LakeRun) -> list[str]:
    lines = []
    for scheme in run.found.rules.schemes[1:]:
        place = run.found.used[scheme.name][run.latest]
        code = np.select(
            [place == p for p in range(len(scheme.definitions))],
            [run.found.index[scheme.name, d][run.latest] for d in scheme.definitions],
            -1,
        )
        names = Counter(name for name in class_names(scheme, code) if name)
        counts = ", ".join(f"{names[c.name]:,} {c.name}" for c in scheme.classes)
        lines.append(f"By {scheme.name} ({scheme.words}): {counts}.")
    return lines


def first_to_look_at(run: LakeRun) -> str:
    """The lakes to look at first: figures, reason, and next step."""
    table = run.priorities.head(FIRST_SHOWN)
    by_row = run.found.results.set_index("row")
    lines = [
        f"Look at these first (of {len(run.priorities):,}; priorities.csv has all): worst class, then exceedance, "
        f"then ANC"
    ]
    for _, p in table.iterrows():
        r = by_row.loc[p["row"]]
        name = str(r.get("site") or r["sample_id"])[:40]
        chance = "" if pd.isna(r["class_probability"]) else f" (probability {r['class_probability']:.2f})"
        also = f", could be {r['class_also']}" if r["class_also"] else ""
        load = (
            ""
            if pd.isna(r["exceedance_meq_m2_yr"])
            else f"; {'above' if r['exceedance_meq_m2_yr'] > 0 else 'below'} its critical load by "
            f"{abs(r['exceedance_meq_m2_yr']):.0f} meq/m²/yr"
        )
        lines.append(
            item(
                f"{p['rank']}. {name}{_sample(r)}: {r['class'] or 'no class'}{chance}{also}; "
                f"{r['anc_used_from'] or 'ANC'} {_spread(r, 'anc_used_ueq_l')} µeq/L; pH {_n(r['ph'], 2)}; acid to "
                f"pH 6 at air {_spread(r, TO_PH_6)} µeq/L{load}. {_sentence(p['reason'])}",
                "  ",
            )
        )
    steps = dict.fromkeys(table["next_step"])
    return "\n".join([*lines, *(item(f"{_sentence(step)}", "  next: ") for step in list(steps)[:3])])


def _sample(r: pd.Series) -> str:
    parts = [str(r[name]) for name in ("region", "date") if r.get(name)]
    return f" ({', '.join(parts)})" if parts else ""


def _sentence(words: str) -> str:
    return f"{words[:1].upper()}{words[1:]}." if words else ""


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
            f"lasts {_n(some.median(), 1)} years (median of {len(some):,} lakes above the ANC limit); "
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
        f"the 10th to the 90th percentile of {int(load.notna().sum()):,} lakes)."
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
            f"Share of event water at which the limit is crossed: median {_n(share[share > 0].median(), 2)} of the "
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
            f"CO2 pressure is stated for {int(stated.sum()):,} lakes: median {t['pco2_uatm'].median():.0f} µatm; "
            f"{int((ratio > 1).sum()):,} of them hold more than air does."
        )
        flux = t["co2_flux_mmol_m2_d"].dropna()
        if len(flux):
            lines.append(f"CO2 to the air: median {flux.median():.1f} mmol/m²/d ({len(flux):,} lakes with wind).")
    lines += [f"Not stated for {c:,}: {w}." for w, c in refused_words.most_common()]
    return block("Carbon dioxide", lines)


def _kind_of_refusal(words: str) -> str:
    """The reason without the figures of the single lake."""
    text = words.removeprefix("not stated: ").split(";")[0]
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
        f"{len(need):,} lakes are below {target}. Dose: median {need['lime_g_m3'].median():.1f} g/m³ of "
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


def trends(run: LakeRun) -> str:
    """Recovery of each lake that was sampled often enough."""
    if run.recovery.empty:
        return ""
    counts = Counter(run.recovery["recovering"])
    lines = [
        f"{plural(len(run.recovery), 'lake')} sampled in several years. Recovering from acid: "
        f"{', '.join(f'{w} {c:,}' for w, c in counts.most_common())}."
    ]
    lines += [f"{r.site}: {r.words}" for r in run.recovery.head(SITES_SHOWN).itertuples()]
    if len(run.recovery) > SITES_SHOWN:
        lines.append(f"and {len(run.recovery) - SITES_SHOWN:,} more in recovery.csv")
    return block("Trends (trends.csv has each quantity with its slope, interval and both p)", lines)


def quality(run: LakeRun) -> str:
    """Checks that are not met."""
    facts, made, unmet = check_facts(), run.found.made, run.found.unmet
    lines = [
        f"{unmet[name]:,} of {made[name]:,} fail {name} ({allowed(fact)}): {fact['remedy']}."
        for name, fact in facts.items()
        if unmet.get(name)
    ]
    for r in file_check_rows(run.found.rounding, run.found.duplicates).itertuples():
        if r.met == "no":
            lines.append(f"{r.check}: {r.value:.4g} {r.unit}, should be {r.limit}: {r.remedy}.")
    gap = Counter(w for w in run.lakes["anc_gap_words"] if w)
    if gap:
        lines.append(f"Charge-balance against titrated ANC: {', '.join(f'{w} {c:,}' for w, c in gap.most_common())}.")
    missing = Counter(w for w in run.lakes["missing_ions"] if w)
    if missing:
        lines.append(
            f"Ions not measured, so that there is no charge balance: "
            f"{', '.join(f'{w} ({c:,} lakes)' for w, c in missing.most_common(5))}."
        )
    return block("Quality (checks.csv has each lake)", lines or ["Every check that could be made is met."])


def refused(run: LakeRun) -> str:
    """Rows that were not used, by reason."""
    rejected = run.found.rejected
    if rejected.empty:
        return ""
    counted = Counter(zip(rejected["column"], [str(r).split(" in row")[0] for r in rejected["rule"]], strict=True))
    lines = [f"{count:,} x {column}: {rule}" for (column, rule), count in counted.most_common(REASONS_SHOWN)]
    if len(counted) > REASONS_SHOWN:
        lines.append(f"and {len(counted) - REASONS_SHOWN} more reasons")
    return block(
        f"Refused: {plural(rejected['row'].nunique(), 'row')} (rejected.csv names row, column, value and remedy)", lines
    )


def groups(run: LakeRun) -> str:
    """Lakes of each group by class, as a small table."""
    scheme, table = run.found.rules.schemes[0], run.groups
    if len(table) < 2:
        return ""
    from aquabuf.units import key

    names = [c.name for c in scheme.classes]
    rows = [
        [
            str(r["group"])[:24],
            f"{int(r['lakes']):,}",
            *(f"{int(r[f'lakes_{key(name)}']):,}" for name in names),
            _n(r["anc_used_ueq_l_median"]),
            f"{int(r['exceeded']):,} of {int(r['with_critical_load']):,}",
        ]
        for _, r in table.iterrows()
    ]
    header = [run.options.group, "lakes", *names, "median ANC", "exceeded"]
    widths = [max(len(row[i]) for row in [header, *rows]) for i in range(len(header))]
    lines = [
        "  " + "  ".join([row[0].ljust(widths[0]), *(row[i].rjust(widths[i]) for i in range(1, len(header)))])
        for row in [header, *rows]
    ]
    return "\n".join([f"Lakes by {run.options.group} and class (counts; median ANC in µeq/L)", *lines])

"""What `lake` prints, and the report it writes: the same blocks, the report with every rule and source behind them."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable

from aquabuf.assess.lake.budget import GRAN_PH
from aquabuf.assess.lake.critical_variants import LIMITS_EQ_L
from aquabuf.assess.lake.inputs import ORGANIC_U_REL
from aquabuf.assess.sample.quality import allowed, check_facts
from aquabuf.assess.uncertainty import COVERAGE
from aquabuf.chem.gases import AIR_CO2_PPM, AIR_CO2_YEAR
from aquabuf.chem.transfer import SCHMIDT, schmidt_relations, transfer_relations
from aquabuf.report import lake_answer_blocks as answer_blocks
from aquabuf.report import lake_blocks as blocks
from aquabuf.report.lake_blocks import LakeRun, block
from aquabuf.report.summary import cautions, plural

__all__ = ["LakeRun", "lake_report", "lake_summary"]


def lake_summary(run: LakeRun, files: Iterable[str]) -> str:
    """The text on the screen; same run, same text."""
    parts = [
        blocks.head(run),
        blocks.classes(run),
        blocks.first_to_look_at(run),
        *_answers(run),
        blocks.trends(run),
        blocks.quality(run),
        blocks.refused(run),
        _notes(run),
        _assumptions(run),
        block("Cautions", cautions("lake")),
        _next(run, files),
    ]
    return _joined(parts)


def lake_report(run: LakeRun) -> str:
    """The report to hand on: the summary with groups, schemes, limits and checks, each with its rule and source."""
    parts = [
        blocks.head(run),
        blocks.classes(run),
        blocks.groups(run),
        blocks.first_to_look_at(run),
        *_answers(run),
        _variants(run),
        blocks.trends(run),
        blocks.quality(run),
        blocks.refused(run),
        _notes(run),
        _assumptions(run),
        _schemes(run),
        _limits(run),
        _checks(run),
        block("Cautions", cautions("lake")),
    ]
    return _joined(parts)


def _joined(parts: Iterable[str]) -> str:
    return "\n\n".join(part for part in parts if part) + "\n"


def _answers(run: LakeRun) -> list[str]:
    return [
        answer_blocks.tolerance(run),
        answer_blocks.critical_loads(run),
        answer_blocks.episodes(run),
        answer_blocks.carbon(run),
        answer_blocks.liming(run),
    ]


def _notes(run: LakeRun) -> str:
    """What the reader noticed and did: cells below detection, filled in, left out."""
    found = run.found
    return block(
        "Readings", [*found.notes, *(f"{count:,} x {what}: {column}" for (what, column), count in found.flags.items())]
    )


def _assumptions(run: LakeRun) -> str:
    """Everything that an answer leans on."""
    o, rules = run.options, run.found.rules
    air = f"{o.air_co2_ppm:g} ppm CO2 in dry air"
    if o.air_co2_ppm == AIR_CO2_PPM:
        air += f" (default: about the global mean of {AIR_CO2_YEAR}, recalled)"
    target = f"pH {o.lime_ph:g} at equilibrium with air" if o.lime_ph is not None else f"ANC {o.lime_anc_ueq_l:g} µeq/L"
    has_loads = bool(run.lakes["critical_load_meq_m2_yr"].notna().any())
    end_point = int(run.lakes["anc_end_point_ueq_l"].notna().sum())
    unstated = sum("method unstated" in str(w) for w in run.lakes["anc_used_from"])
    draws = (
        f"{COVERAGE:.0%} intervals and probabilities from {o.draws:,} seeded draws (seed {o.seed}) of the readings' "
        f"own or default uncertainties (`aquabuf columns NAME` shows them), and {ORGANIC_U_REL:.0%} on the charge of "
        f"organic anions; temperature and constants are taken as exact"
        if o.draws
        else "No intervals (--draws 0)"
    )
    used = Counter(w for w in run.lakes["anc_used_from"] if w)
    counts = ", ".join(f"{w} {c:,}" for w, c in used.most_common(6))
    lines = [
        f"ANC in use: Gran ANC, else alkalinity, else the Gran ANC that ions, organic carbon and aluminum imply, else "
        f"charge balance{f' ({counts})' if counts else ''}.",
        f"An ANC or alkalinity whose method is not given counts as Gran: {plural(unstated, 'lake')} "
        "(column anc_method tells)."
        if unstated
        else "",
        f"ANC titrated to a fixed end point: {plural(end_point, 'lake')}. It is kept in its own column and never used: "
        f"in dilute water it is about 32 µeq/L too high."
        if end_point
        else "",
        f"Charge balance: calcium, magnesium, sodium, potassium{' and ammonium' if o.ammonium else ''} less sulfate, "
        f"nitrate and chloride; fluoride is left out of it but counts in pH. A missing one of these ions is never "
        f"taken as "
        f"zero: there is no charge balance then.",
        _as_none(run),
        f"Organic anions by {rules.organic.in_words()}; counted with their sites at pH, a third of all sites as "
        f"strong acids "
        f"(Hesthagen et al. 2008). A Gran titration leaves out what its tangent at pH {GRAN_PH:g} leaves out.",
        "Aluminum counts with the charge of its dissolved hydroxides at 25 °C (Nordstrom & May 1996, recalled); it "
        "does not "
        "settle out.",
        f"Closed: the carbon of the sample stays. Air: {air}; pressure by elevation, 1 atm where neither is given.",
        "Tolerance, years, episode and re-acidification compare the ANC in use with the ANC limit, whatever definition "
        "that limit was found with; the critical load works with base cations and strong acid anions.",
        *(f"Critical load: {line}." for line in (rules.critical.lines() if has_loads else ())),
        "Sulfur deposition is taken as given; its sea salt is taken off only where chloride deposition is given. Net "
        "acid "
        "deposition counts sulfur, nitrate and ammonium less base cations, of those given.",
        *(f"Event water, {line}." for line in (rules.event.in_words() if rules.event else ())),
        f"Liming: {rules.lime.name} ({rules.lime.formula}) to {target}; {rules.lime.source}. The inflow stays as the "
        f"lake is now.",
        f"Gas transfer: {o.wind_relation}, {transfer_relations()[o.wind_relation].source}; Schmidt number: "
        f"{schmidt_relations()[SCHMIDT].source}; exponent 1/2 from 3 m/s of wind on, else 2/3."
        if _has_flux(run)
        else "",
        *run.titrations,
        f"{draws}.",
    ]
    return block("What the answers rest on", [line for line in lines if line])


def _as_none(run: LakeRun) -> str:
    """Readings that count as none in pH and tolerance where they were not measured."""
    t = run.lakes
    gone = [(words, int(t[name].isna().sum())) for words, name in (
        ("organic carbon", "doc_mg_l"), ("aluminum", "aluminum_umol_l"), ("ammonium", "ammonium_ueq_l"))]
    told = ", ".join(f"{words} in {plural(count, 'lake')}" for words, count in gone if count)
    return f"Counted as none in pH, tolerance and lime, because not measured: {told}." if told else ""


def _has_flux(run: LakeRun) -> bool:
    return bool(run.lakes["gas_transfer_m_d"].notna().any())


def _variants(run: LakeRun) -> str:
    """How the number of exceeded lakes moves with the variant of the critical load."""
    from aquabuf.assess.lake.tables import load_table

    table = load_table(run.found)
    if table.empty or not table["exceedance_meq_m2_yr"].notna().any():
        return ""
    table = table[table["row"].isin(run.lakes["row"])]
    lines = []
    for words, part in table.groupby("variant", sort=False):
        over = part["exceedance_meq_m2_yr"].dropna()
        lines.append(
            f"{words}: median load {part['critical_load_meq_m2_yr'].median():.0f} meq/m²/yr, exceeded in "
            f"{int((over > 0).sum()):,} of {len(over):,} lakes"
        )
    limits = ", ".join("variable" if x is None else f"{x * 1e6:g}" for x in LIMITS_EQ_L)
    return block(f"Critical load by variant (one thing changed at a time; ANC limits tried: {limits} µeq/L)", lines)


def _schemes(run: LakeRun) -> str:
    lines = []
    for scheme in run.found.rules.schemes:
        lines.append(f"{scheme.name}: {scheme.words} ({scheme.source})")
        lines += [f"{scheme.name}, {c.name}: {scheme.rule(k)} ({c.source})" for k, c in enumerate(scheme.classes)]
    return block("Schemes", lines)


def _limits(run: LakeRun) -> str:
    return block("Limits behind the warnings", [f"{x.name}: {x.rule()}: {x.words} ({x.source})" for x in run.limits])


def _checks(run: LakeRun) -> str:
    made, unmet = run.found.made, run.found.unmet
    return block(
        "Checks",
        [
            f"{name}: {allowed(fact)}; {unmet.get(name, 0):,} of {made[name]:,} fail ({fact['source']})"
            for name, fact in check_facts().items()
            if made.get(name)
        ],
    )


def _next(run: LakeRun, files: Iterable[str]) -> str:
    broken = [
        x
        for x in run.limits
        if x.next_step and run.found.broken.get(x.name) is not None and run.found.broken[x.name].any()
    ]
    steps = [f"{x.next_step[0].upper()}{x.next_step[1:]}." for x in broken]
    left = Counter(part.split(" (")[0] for words in run.lakes["left_out"] for part in words.split("; ") if part)
    if left:
        steps.append(
            "Left out for want of readings: "
            + ", ".join(f"{name} ({plural(c, 'lake')})" for name, c in left.most_common())
            + "; the column left_out says which column would bring each."
        )
    steps.append(
        "For one lake, read its row of results.csv and its rows of verdicts.csv: value, rule, probability, source."
    )
    return block("Next", [*dict.fromkeys(steps), f"Written: {', '.join(files)}."])

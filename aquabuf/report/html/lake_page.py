"""The page of a lake survey: the lakes to look at first, classes, groups, loads, trends, and every rule behind them."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import pandas as pd

from aquabuf.assess.lake.columns import TO_PH_6, lake_columns
from aquabuf.assess.lake.schemes import Scheme
from aquabuf.assess.lake.survey import ALL_LAKES
from aquabuf.assess.sample.chain_steps import Chain
from aquabuf.report.html.chain import chains_part
from aquabuf.report.html.common import (
    INTERVAL,
    ROWS,
    Kept,
    blocks_of,
    capital,
    constants_part,
    file_part,
    first,
    folded,
    limited,
    number,
    provenance,
    quantity_words,
    refused_part,
    rule_words,
    spread,
    titled,
)
from aquabuf.report.html.document import document
from aquabuf.report.html.parts import Column, Link, card, details, gallery, paragraph, section, table
from aquabuf.report.lake_blocks import LakeRun
from aquabuf.report.summary import cautions, plural
from aquabuf.units import key

__all__ = ["lake_page"]

OWN = ("Look at these first", "Lakes by", "Refused", "Limits behind the warnings", "Trends")  # told by the page itself
FOLDED = ("Critical load by variant", "Readings", "Schemes", "Checks")
TREND_TONES = {"no": "warn"}


def lake_page(run: LakeRun, *, report: str, record: Mapping[str, Any], written: Iterable[str],
              drawings: Sequence[str] = (), chains: Sequence[Chain] = ()) -> str:
    """The page of a survey; same run, same bytes.

    report : its text. record : its run.json. written : its files. drawings : figures as HTML. chains : of the lakes to
    look at first.
    """
    head, *blocks = blocks_of(report)
    refused_block = next((b for b in blocks if b.title.startswith("Refused")), None)
    refused = Kept()
    refused.add(run.found.rejected)
    told = [b for b in blocks if not b.title.startswith(OWN)]
    classes = [b for b in told if b.title.startswith("Sensitivity class")]
    parts = [
        *_cards(run),
        _first(run),
        _groups(run),
        section("Figures", gallery(drawings), name="figures"),
        *(titled(b) for b in classes),
        _trends(run),
        *(titled(b) for b in told if b not in classes and not b.title.startswith(FOLDED)),
        chains_part(chains, total=len(run.priorities), what="lakes"),
        refused_part(refused_block, refused),
        _warnings(run),
        file_part("lake", written),
        *(folded(b) for b in told if b.title.startswith(FOLDED)),
        constants_part(record["constants"]),
        provenance(record),
    ]
    return document(f"How sensitive the lakes of {run.source} are to acid", head.title, parts)


def _name(row: Mapping[str, Any]) -> str:
    """A lake by its site, else by its sample."""
    return str(row.get("site") or row["sample_id"])


def _plain(value: Any) -> str:
    return "" if pd.isna(value) else str(value)


def _rows(run: LakeRun) -> list[Mapping[str, Any]]:
    """Results of the lakes to look at first, in that order, with reason and next step."""
    table_ = run.priorities.head(ROWS)
    results = run.found.results.set_index("row", drop=False).loc[table_["row"].tolist()].to_dict("records")
    return [{str(name): value for name, value in r.items()} | {"reason": reason, "next_step": step}
            for r, reason, step in zip(results, table_["reason"], table_["next_step"], strict=True)]


def _at_risk(scheme: Scheme) -> list[str]:
    return [c.name for c in scheme.classes if c.at_risk]


# ---------------------------------------------------------------- first screen


def _cards(run: LakeRun) -> list[str]:
    """The survey in a sentence, and the lake to look at first."""
    scheme, lakes = run.found.rules.schemes[0], run.lakes
    counts = {c.name: int((lakes["class"] == c.name).sum()) for c in scheme.classes}
    risk = sum(counts[name] for name in _at_risk(scheme))
    known = sum(counts.values())
    over = lakes["exceedance_meq_m2_yr"].dropna()
    exceeded = int((over > 0.0).sum())
    tone = "warn" if risk or exceeded else "good" if known else "note"
    said = ", ".join(f"{count:,} {name}" for name, count in counts.items() if count)
    unknown = f"; {len(lakes) - known:,} without a class" if known < len(lakes) else ""
    loads = f" Critical load exceeded in {exceeded:,} of {plural(over.size, 'lake')}." if over.size else ""
    verb = "is" if risk == 1 or len(lakes) == 1 else "are"
    out = [card(tone, f"{risk:,} of {plural(len(lakes), 'lake')} {verb} at risk of acid",
                number=f"{capital(said + unknown)}{loads}")]
    return out + [_lake_card(run, row, scheme) for row in _rows(run)[:1]]


def _lake_card(run: LakeRun, row: Mapping[str, Any], scheme: Scheme) -> str:
    names = [c.name for c in scheme.classes]
    has_class = row["class"] in names
    place = names.index(row["class"]) if has_class else 0
    chance = "" if pd.isna(row["class_probability"]) else f" (probability {row['class_probability']:.2f})"
    figures = [f"{words} {value}{unit}" for words, value, unit in (
        (row["anc_used_from"] or "ANC", spread(row, "anc_used_ueq_l", 0), " µeq/L"),
        ("pH", number(row["ph"], 2), ""), ("acid to pH 6 at air", spread(row, TO_PH_6, 0), " µeq/L"),
        ("above its critical load by", spread(row, "exceedance_meq_m2_yr", 0), " meq/m²/yr")) if value]
    around = f"; in parentheses the {INTERVAL}" if run.options.draws else ""
    rule = scheme.rule(place).replace("<=", "≤").replace(">=", "≥")
    tone = "note" if not has_class else "warn" if scheme.classes[place].at_risk else "good"
    return card(tone, f"Look at first: {_name(row)}, {row['class'] or 'no class'}{chance}",
                number=f"{'; '.join(figures)}{around}." if figures else "",
                rule=f"{rule} ({scheme.classes[place].source})" if has_class else "",
                next_step=capital(row["next_step"]), caution=cautions("lake")[0])


# ---------------------------------------------------------------- tables


def _first(run: LakeRun) -> str:
    """The lakes in the order in which to look at them."""
    rows, scheme = _rows(run), run.found.rules.schemes[0]
    has_region = bool(rows) and "region" in rows[0]
    columns = [Column(title="Lake"), *([Column(title="Region")] if has_region else []), Column(title="Class"),
               Column(title="Probability", number=True, meaning="of this class, with the errors of the readings"),
               Column(title="ANC (µeq/L)", number=True, meaning="acid neutralizing capacity in use"),
               Column(title="pH", number=True),
               Column(title="Acid to pH 6 at air (µeq/L)", number=True, meaning="negative: below pH 6 already"),
               Column(title="Exceedance (meq/m²/yr)", number=True, meaning="above the critical load; negative: below"),
               Column(title="Why", sentence=True)]
    lines = [[_name(r), *([_plain(r["region"])] if has_region else []),
              (r["class"] or "no class") + (f", could be {r['class_also']}" if r["class_also"] else ""),
              number(r["class_probability"], 2), spread(r, "anc_used_ueq_l", 0), number(r["ph"], 2),
              spread(r, TO_PH_6, 0), spread(r, "exceedance_meq_m2_yr", 0), str(r["reason"])] for r in rows]
    worst, risk = scheme.classes[0].name, _at_risk(scheme)
    tones = ["stop" if r["class"] == worst and worst in risk else "warn" if r["class"] in risk else "" for r in rows]
    around = f"; in parentheses the {INTERVAL}" if run.options.draws else ""
    return section("Look at these first", limited(
        columns, lines, total=len(run.priorities), file="priorities.csv", what="lakes", tones=tones,
        caption=f"Worst class first, then the surest exceedance of the critical load, then the lowest ANC{around}"),
        name="first")


def _groups(run: LakeRun) -> str:
    """Lakes of each group by class, the group with the largest share at risk first."""
    scheme, groups = run.found.rules.schemes[0], run.groups
    if len(groups) < 2:
        return ""
    risk = [f"share_{key(name)}" for name in _at_risk(scheme)]
    part = groups[groups["group"] != ALL_LAKES]
    order = part[risk].sum(axis=1).sort_values(ascending=False, kind="stable").index
    name = run.options.group.replace("water_kind", "kind of water")
    weighted = groups["weighted"].iloc[0] == "yes"
    columns = [Column(title=name.capitalize()), Column(title="Lakes", number=True),
               *(Column(title=capital(c.name).rstrip("."), number=True, meaning=c.words) for c in scheme.classes),
               Column(title="Share at risk", number=True,
                      meaning="by the survey's weights" if weighted else "of the lakes in this table"),
               Column(title="Median ANC (µeq/L)", number=True), Column(title="Critical load exceeded in", number=True)]
    lines = []
    for _, r in pd.concat([part.loc[order], groups[groups["group"] == ALL_LAKES]]).head(ROWS).iterrows():
        known = int(r["with_critical_load"])
        share = float(r[risk].sum())
        lines.append(["all lakes" if r["group"] == ALL_LAKES else str(r["group"]), f"{int(r['lakes']):,}",
                      *(f"{int(r[f'lakes_{key(c.name)}']):,}" for c in scheme.classes),
                      f"{100 * share:.0f} %" if r["classed"] else "", number(r["anc_used_ueq_l_median"], 0),
                      f"{int(r['exceeded']):,} of {known:,}" if known else ""])
    return section(f"By {name}", table(columns, lines, caption="Lakes by class; the largest share at risk first"),
                   paragraph("Shares and the spread of each figure:", soft=True, link=Link("groups.csv", "groups.csv")),
                   name="groups")


def _trends(run: LakeRun) -> str:
    """Whether each lake recovers, those that do not first."""
    if run.recovery.empty:
        return ""
    order = {word: place for place, word in enumerate(("no", "not shown", "unclear", "unknown", "yes"))}
    rows = sorted(run.recovery.to_dict("records"), key=lambda r: order.get(r["recovering"], len(order)))
    columns = [Column(title="Lake"), Column(title="Recovers from acid"), Column(title="What is seen"),
               Column(title="ANC per year (µeq/L)", number=True), Column(title="In words", sentence=True)]
    lines = [[str(r["site"]), str(r["recovering"]), str(r["verdict"]), number(r["anc_slope_ueq_l_yr"], 2),
              str(r["words"])] for r in rows]
    counts = run.recovery["recovering"].value_counts()
    said = ", ".join(f"{counts[word]:,} {word}" for word in order if word in counts)
    return section("Trends", paragraph(f"{plural(len(rows), 'lake')} sampled in several years. Recovering from acid: "
                                       f"{said}. {capital(first(str(rows[0]['rule']), chr(10)))}"),
                   limited(columns, lines, total=len(rows), file="recovery.csv", what="lakes",
                           tones=[TREND_TONES.get(r["recovering"], "") for r in rows]),
                   paragraph("Each quantity with its slope, interval and both p:", soft=True,
                             link=Link("trends.csv", "trends.csv")), name="trends")


def _warnings(run: LakeRun) -> str:
    """The limits behind the warnings, folded."""
    quantities = quantity_words(lake_columns(run.options.thresholds))
    columns = [Column(title="Warning"), Column(title="Lakes", number=True), Column(title="Rule"),
               Column(title="What to do", sentence=True), Column(title="Source", sentence=True)]
    lines = []
    for x in run.limits:
        broken = run.found.broken.get(x.name)
        count = 0 if broken is None else int(broken[run.latest].sum())
        lines.append([x.words, f"{count:,}", rule_words(x, quantities), capital(x.next_step), x.source])
    return details("Limits behind the warnings", table(columns, lines),
                   paragraph("Each lake with value, interval and probability:", soft=True,
                             link=Link("verdicts.csv", "verdicts.csv")))

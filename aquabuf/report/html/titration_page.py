"""The page of a run over titrations: what has no result first, each result with interval, method and why, findings."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import pandas as pd

from aquabuf.assess.sample.chain_steps import Chain
from aquabuf.assess.titration.assess import TitrationResult
from aquabuf.assess.titration.choose import method_facts
from aquabuf.assess.titration.findings import finding_facts
from aquabuf.assess.titration.options import ph_digits
from aquabuf.assess.titration.solve import ACIDITY_END_POINTS
from aquabuf.assess.titration.tables import NO_RESULT, REFUSED, WARNED, limit_words
from aquabuf.assess.uncertainty import TO_COVERAGE
from aquabuf.report.html.chain import chains_part
from aquabuf.report.html.common import (
    INTERVAL,
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
    refused_part,
    titled,
)
from aquabuf.report.html.document import document
from aquabuf.report.html.parts import Column, Link, card, details, gallery, section
from aquabuf.report.summary import plural
from aquabuf.report.titration_tally import TitrationTally

__all__ = ["TitrationRows", "rank_of", "titration_page"]

UNITS = {"ueq_l": "µeq/L", "umol_kg": "µmol/kg"}
RANKS = {NO_RESULT: 0, REFUSED: 1, WARNED: 2}  # what to look at first
LAST = 3
WHOLE_FROM = 10.0  # half an interval, from which on a result has no decimals
TONES = {NO_RESULT: "stop", REFUSED: "stop", WARNED: "warn"}
OWN = ("Results", "Refused", "Next")
FOLDED = ("Files",)


def rank_of(status: str) -> int:
    """Place of a status in the order in which to look: the lowest first."""
    return RANKS.get(status, LAST)


@dataclass(slots=True)
class TitrationRows:
    """What the tables of the page need, gathered piece by piece."""

    results: Kept = field(default_factory=Kept)
    findings: Kept = field(default_factory=Kept)
    refused: Kept = field(default_factory=Kept)

    def add(self, part: TitrationResult) -> None:
        """Take in one piece."""
        self.results.add(part.results, part.results["status"].map(rank_of).to_numpy(dtype=float))
        self.findings.add(part.findings)
        self.refused.add(part.rejected)


def titration_page(tally: TitrationTally, rows: TitrationRows, *, source: str, summary: str, record: Mapping[str, Any],
                   written: Iterable[str], drawings: Sequence[str] = (), chains: Sequence[Chain] = ()) -> str:
    """The page of a run; same run, same bytes.

    summary : its text. record : its run.json. written : its files. drawings : figures as HTML. chains : of the
    titrations to look at first.
    """
    head, *blocks = blocks_of(summary)
    refused = next((b for b in blocks if b.title.startswith("Refused")), None)
    told = [b for b in blocks if not b.title.startswith(OWN)]
    cautions = next((b.lines for b in blocks if b.title == "Cautions"), ("",))
    parts = [
        *_cards(tally, rows, cautions[0]),
        _results(rows),
        section("Figures", gallery(drawings), name="figures"),
        *(titled(b) for b in told if b.title.startswith("Diagnosis")),
        _findings(rows),
        chains_part(chains, total=tally.samples - tally.status[REFUSED], what="titrations"),
        refused_part(refused, rows.refused),
        *(titled(b) for b in told if not b.title.startswith(("Diagnosis", *FOLDED))),
        file_part("titration", written),
        *(folded(b) for b in told if b.title.startswith(FOLDED)),
        constants_part(record["constants"]),
        provenance(record),
    ]
    return document(f"Alkalinity by the titrations of {source}", head.title, parts)


def _amount(value: float, u: float) -> str:
    half = TO_COVERAGE * u
    digits = 0 if half >= WHOLE_FROM else 1
    return f"{number(value, digits)} ± {number(half, digits)}"


def _of(row: Mapping[str, Any], name: str) -> tuple[str, str]:
    """A figure with half its interval, and its unit; empty where there is none."""
    for unit, words in UNITS.items():
        value, u = (row.get(f"{name}{part}_{unit}", float("nan")) for part in ("", "_u"))
        if not pd.isna(value):
            return _amount(value, u), words
    return "", ""


def _result(row: Mapping[str, Any]) -> tuple[str, str, str]:
    """The result of a titration, its unit, and what it is: acidity to the highest end point where base was added."""
    if row["titrated_with"] == "base":
        for end in sorted(ACIDITY_END_POINTS, reverse=True):
            value, unit = _of(row, f"acidity_{ph_digits(end)}")
            if value:
                return value, unit, f"acidity to pH {end:g}"
    value, unit = _of(row, "recommended")
    return value, unit, str(row["definition"]) if value else ""


def _method(row: Mapping[str, Any]) -> str:
    name = row["recommended_method"]
    return method_facts("method")[name]["words"] if name else ""


def _findings_of(row: Mapping[str, Any]) -> list[str]:
    return [name for name in str(row["warnings"]).split("; ") if name]


# ---------------------------------------------------------------- parts


def _cards(tally: TitrationTally, rows: TitrationRows, caution: str) -> list[str]:
    """The run in a sentence, and the first titration of the order of the table."""
    warned, without, refused = tally.status[WARNED], tally.status[NO_RESULT], tally.status[REFUSED]
    verdict = (f"{tally.with_result:,} of {plural(tally.samples, 'titration')} "
               f"{'has' if tally.with_result == 1 else 'have'} a result")
    number_words = "; ".join(words for count, words in (
        (warned, f"{warned:,} of them with a warning"), (without, f"{without:,} without a result"),
        (refused, f"{refused:,} refused")) if count)
    tone = "stop" if not tally.with_result else "warn" if warned or without or refused else "good"
    out = [card(tone, verdict, number=capital(number_words) or "Nothing suspicious was found.")]
    usable = [r for r in rows.results.rows if r["status"] != REFUSED]
    return [*out, _first(usable[0], caution)] if usable else out


def _first(row: Mapping[str, Any], caution: str) -> str:
    """The titration to look at first."""
    found = _findings_of(row)
    facts = finding_facts()
    value, unit, definition = _result(row)
    said = f"{definition} {value} {unit} ({INTERVAL})" if value else "no result"
    fact = facts.get(found[0]) if found else None
    limit = f", {limit_words(fact)}" if fact and limit_words(fact) else ""
    return card(TONES.get(row["status"], "good"), f"{row['sample_id']}: {said}",
                number=capital(f"{fact['words']}; {row['recommended_reason']}" if fact else row["recommended_reason"]),
                rule=f"{found[0]}{limit} ({fact['source']})" if fact else "",
                next_step=capital(fact["remedy"]) if fact else "", caution=caution)


def _results(rows: TitrationRows) -> str:
    """Each titration with its result, method and why."""
    kept = rows.results.rows
    has_figure = any(r.get("figure") for r in kept)
    units = sorted({_result(r)[1] for r in kept} - {""})
    one = f" ({units[0]})" if len(units) == 1 else ""
    columns = [Column(title="Sample"), Column(title=f"Result{one}", number=True, meaning=f"± is half the {INTERVAL}"),
               *([Column(title="Unit")] if not one else []),
               Column(title="mg/L as CaCO3", number=True, meaning="of the alkalinity or ANC"),
               Column(title="What it is"), Column(title="Method"), Column(title="Findings"),
               Column(title="Why", sentence=True),
               *([Column(title="Figure")] if has_figure else [])]
    lines: list[list[str | Link]] = []
    for r in kept:
        value, unit, definition = _result(r)
        mg = "" if r["titrated_with"] == "base" else number(r.get("recommended_mg_l_caco3", float("nan")), 2)
        said = "; ".join(_findings_of(r)) or ("" if r["status"] == "ok" else r["status"])
        why = str(r["recommended_reason"]) if r["status"] != REFUSED else "see what was refused, below"
        name = str(r.get("figure") or "")
        figure = [Link("figure", name) if name else ""] if has_figure else []
        lines.append([str(r["sample_id"]), value or str(r["status"]), *([unit] if not one else []), mg, definition,
                      _method(r), said, why, *figure])
    return section("Results", limited(
        columns, lines, total=rows.results.total, file="alkalinity.csv", what="titrations",
        caption=f"Without a result first, then those with a warning; ± is half the {INTERVAL}",
        tones=[TONES.get(r["status"], "") for r in kept]), name="results")


def _findings(rows: TitrationRows) -> str:
    """Each finding of each titration, folded."""
    if not rows.findings.total:
        return ""
    columns = [Column(title="Sample"), Column(title="Finding"), Column(title="Row", number=True),
               Column(title="Value", number=True), Column(title="Unit"), Column(title="Limit"),
               Column(title="Meaning", sentence=True),
               Column(title="What to do", sentence=True), Column(title="Source", sentence=True)]
    lines = [[str(r["sample_id"]), str(r["finding"]), "" if pd.isna(r["point_row"]) else str(r["point_row"]),
              "" if pd.isna(r["value"]) else f"{r['value']:.4g}", "" if r["unit"] == "-" else str(r["unit"]),
              str(r["limit"]), first(str(r["words"]), "\n"), str(r["remedy"]), str(r["source"])]
             for r in rows.findings.rows]
    return details("Each finding of each titration", limited(
        columns, lines, total=rows.findings.total, file="findings.csv", what="findings"))

"""The page of a neutralization: accepted or not, what to do next, the train, proof, side effects, what it rests on."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.side_case import STOP
from aquabuf.report.dose_lines import sentence
from aquabuf.report.html.common import constants_part, file_part, provenance
from aquabuf.report.html.document import document
from aquabuf.report.html.parts import bullets, card, section
from aquabuf.report.html.tank_sections import (
    Lines,
    alternatives_section,
    batch_section,
    demand_section,
    equalization_section,
    failures_section,
    feeds_section,
    reagents_section,
    rules_section,
    sensitivity_section,
    side_effects_section,
    simulation_section,
    storage_section,
    stream_section,
    tanks_section,
    title_of,
    train_section,
)
from aquabuf.report.tank_report import ACCEPTED, REFUSED, STOPPED, UNPROVEN, headline, next_steps

__all__ = ["tank_page"]

TONES = {ACCEPTED: "good", REFUSED: "warn", UNPROVEN: "note", STOPPED: "stop"}
TIME_RULE, ASKED, ASIDE = "Time rule: ", "A design is accepted where ", "It is a verdict on pH."  # of its items
STOP_BLOCK = "STOP: "
PLACED = ("VERDICT", STOP_BLOCK, "WHAT TO DO NEXT", "STREAM", "REAGENT DEMAND", "REAGENTS COMPARED", "WINDOW",
          "SIMULATION", "OTHER LAYOUTS", "FAILURES", "SIDE EFFECTS", "NUMBER OF TANKS", "EQUALIZATION", "TANKS",
          "FEEDS", "STORAGE", "BATCH", "SENSITIVITY", "WARNINGS", "ASSUMPTIONS", "CAUTIONS")  # blocks with a place
ITEM, MORE = re.compile(r"  - (?=\S)"), re.compile(r"    (?=\S)")  # first line of an item of the report, and the others
OPTIONS = {"step_s": "step of the simulation [s]", "days": "days simulated"}


def tank_page(found: Design, record: Mapping[str, Any], *, report: str, run: Mapping[str, Any], written: Iterable[str],
              drawings: Sequence[str] = ()) -> str:
    """The page of a run; same design, same bytes.

    record : the design as `design_record` gives it. report : its text. run : its run.json. written : its files, which
    alone are linked. drawings : figures as HTML.
    """
    lines, files = _lines(report), frozenset(written)
    steps = next_steps(found, record)
    parts = [
        _verdict(found, record, lines, steps),
        *(_told(lines, STOP_BLOCK) if len(found.stops) > 1 else []),
        section("What to do next", bullets(steps, ordered=True) if len(steps) > 1 else "", name="next"),
        "" if found.stops else train_section(found, record),
        stream_section(found, record, lines),
        demand_section(found, record, lines, files), reagents_section(found, record, lines, files),
        *_told(lines, "WINDOW"),
        simulation_section(record, lines, files), alternatives_section(record, lines, files),
        failures_section(record, lines, files),
        side_effects_section(record, lines, files), rules_section(record, lines, files),
        equalization_section(record, lines, files), tanks_section(record, lines, files),
        feeds_section(record, lines, files), storage_section(lines, files), batch_section(lines),
        sensitivity_section(record, lines, files),
        *(part for title in lines if not title.startswith(PLACED) for part in _told(lines, title)),
        section("Figures", *drawings, name="figures"),
        *_told(lines, "WARNINGS"), *_told(lines, "ASSUMPTIONS"), *_told(lines, "CAUTIONS"),
        file_part("tank", files),
        section("Provenance", provenance(_in_words(run)), constants_part(run["constants"]), name="provenance")]
    return document(found.job.name, _subtitle(found), parts, closing=record["cautions"][0])


def _subtitle(found: Design) -> str:
    job = found.job
    told = ["Neutralization: basis of design.", f"{job.date}." if job.date else "",
            sentence(job.note) if job.note else ""]
    return " ".join(words for words in told if words)


def _lines(report: str) -> Lines:
    """Items of each block of the report behind its head by title, put together again; tables are made anew."""
    out: dict[str, list[str]] = {}
    for part in report.split("\n\n")[1:]:
        title, *rest = part.strip("\n").split("\n")
        items = out.setdefault(title, [])
        open_item = False
        for line in rest:
            if ITEM.match(line):
                items.append(line[4:])
            elif MORE.match(line) and open_item:
                items[-1] += f" {line.strip()}"
            open_item = bool(ITEM.match(line)) or (open_item and bool(MORE.match(line)))
    return out


def _told(lines: Lines, begin: str) -> list[str]:
    """Blocks of the report without a table, as they are."""
    return [section(title_of(title), bullets(items), name=begin.strip(": ").lower())
            for title, items in lines.items() if title.startswith(begin)]


def _in_words(run: Mapping[str, Any]) -> dict[str, Any]:
    """The record with names of options in words."""
    return {**run, "options": {OPTIONS.get(name, name): value for name, value in run["options"].items()}}


def _verdict(found: Design, record: Mapping[str, Any], lines: Lines, steps: Sequence[str]) -> str:
    """The outcome, its probability and interval, the time rule and its source, what it leaves out, what to do."""
    word = headline(found)
    told = next(items for title, items in lines.items() if title.startswith("VERDICT"))
    said = [line for line in told if not line.startswith((TIME_RULE, ASKED, ASIDE))]
    if word == STOPPED:
        big = next(title_of(title) for title in lines if title.startswith(STOP_BLOCK))
        said = [sentence(found.stops[0]), *said]
        stops = [e for e in record["side_effects"] if e["severity"] == STOP]
        rules = [f"{e['rule']} ({e['source']})" for e in stops[:1] if e["rule"]]
    else:
        big = word.capitalize()
        rules = [line.removeprefix(TIME_RULE) for line in told if line.startswith(TIME_RULE)]
        rules += [line for line in told if line.startswith(ASKED)]
    caution = [*(line for line in told if line.startswith(ASIDE)), record["cautions"][0]]
    return card(TONES[word], big, number=" ".join(said), rule=" ".join(sentence(rule) for rule in rules),
                next_step=" ".join(steps[:2 if word == REFUSED else 1]), caution=" ".join(caution))

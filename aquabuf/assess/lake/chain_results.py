"""Links of the chain of a lake: its figures by question, class with probabilities, critical load, and verdicts."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.lake.assess import LakeAssessment
from aquabuf.assess.lake.columns import AS_GIVEN, lake_columns
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.limits import Limit
from aquabuf.assess.sample.chain_results import with_interval, written
from aquabuf.assess.sample.chain_steps import AT_RISK, BROKEN, KEPT, USED, Part, Step, label_and_words
from aquabuf.assess.sample.columns import ResultColumn
from aquabuf.assess.uncertainty import COVERAGE

__all__ = ["TITLES", "class_part", "column_label", "figures_part", "load_part", "title_of", "verdict_part",
           "verdict_words"]

TITLES = ("Which ANC this is, and its parts", "Readings in µeq/L and beside them", "Ions against each other",
          "pH, buffering and tolerance", "Carbon dioxide", "Critical load", "The whole lake and its years",
          "An event of melt or storm", "Liming")
HOLDS = (  # the beginnings of the columns under each title
    ("anc_used", "anc_gran", "alkalinity_", "anc_end_point", "anc_charge", "missing_", "anc_organic", "anc_less",
     "organic_", "base_cation_surplus", "anc_gap"),
    ("temperature_c", "doc_mg_l", "aluminum_", "base_cations_ueq_l", "calcium_", "magnesium_", "sodium_", "potassium_",
     "ammonium_", "sulfate_ueq_l", "nitrate_", "chloride_"),
    ("ion_balance", "conductivity_"), ("ph", "buffer_", "acid_to_ph_"), ("dic_", "pco2_", "gas_transfer_", "co2_flux"),
    ("base_cations_star", "base_cations_original", "sulfate_star", "sea_salt_", "critical_load_", "exceedance_",
     "f_factor", "simple_lake_"),
    ("anc_limit_", "acid_to_anc_limit_", "lake_volume", "volume_from", "acid_to_ph_6_0_open_keq", "net_acid_",
     "years_"),
    ("episode_", "event_"), ("lime_", "reacidify_"),
)
ELSEWHERE = ("status", "left_out", "scheme", "class", "failed_checks", "warnings")  # told by parts of their own
LOAD_CHOICES = ("share F of acid that the soil answers", "where F is taken", "sulfate before acid deposition",
                "nitrate before acid deposition", "ANC limit", "sea salt")
LONG, LONG_WORDS = 30, 120  # letters of a text that stands as a value, and of one that is told in full
MICRO = 1e6
NOT_STATED = "not stated"


def title_of(name: str) -> str:
    """The title that a column stands under, by the longest beginning; "" where another part tells it."""
    if name in AS_GIVEN or name.startswith(ELSEWHERE):
        return ""
    found = [(len(start), title) for title, starts in zip(TITLES, HOLDS, strict=True) for start in starts
             if name.startswith(start)]
    return max(found)[1]


def column_label(column: ResultColumn) -> tuple[str, str]:
    """The label of a column and what more is to say of it."""
    label, words = label_and_words(column.meaning)
    if column.name.startswith("acid_to_ph_") and column.name.endswith("_ueq_l"):
        ph = column.name.removeprefix("acid_to_ph_").removesuffix("_ueq_l").removesuffix("_open").replace("_", ".")
        label = label.replace("that pH", f"pH {ph}") if "that pH" in label else f"{label} (pH {ph})"
    return label, words


# ---------------------------------------------------------------- figures


def figures_part(title: str, found: LakeAssessment, i: int, row: Mapping[str, Any], options: LakeOptions,
                 more: tuple[Step, ...] = ()) -> Part:
    """Every column of results.csv under one title, with its interval."""
    steps = [*more]
    for column in lake_columns(options.thresholds):
        if title_of(column.name) == title and column.name in row:
            steps += list(_figure(column, row))
    about = f"{COVERAGE:.0%} intervals of {options.draws:,} draws, seed {options.seed}" if options.draws else ""
    has_interval = any(" to " in step.value for step in steps)
    return Part(title, tuple(steps), about if has_interval else "")


def _figure(column: ResultColumn, row: Mapping[str, Any]) -> Iterator[Step]:
    value = row[column.name]
    label, words = column_label(column)
    if not column.unit:
        text = str(value)
        if column.name == "pco2_from" and text.startswith(NOT_STATED):
            label, text, words = "CO2 pressure", NOT_STATED, text.removeprefix(f"{NOT_STATED}: ")
        elif len(text) > LONG:
            text, words = "", text
        if value:
            yield Step(label=label, value=text, words=words)
    elif not np.isnan(value):
        yield Step(label=label, value=with_interval(row, column), unit=column.unit.removeprefix("-"), words=words)


# ---------------------------------------------------------------- class


def class_part(found: LakeAssessment, i: int, row: Mapping[str, Any], classes: pd.DataFrame, options: LakeOptions,
               ) -> Part:
    """The class under each scheme by the definition in use, with the probability of every class it may be."""
    steps = [Step(label="scheme of the class", value=scheme.name, words=scheme.words, source=scheme.source)
             for scheme in found.rules.schemes[:1]]
    steps.append(Step(label="class", value=str(row["class"]) or "none", words=_rests_on(row)))
    used = classes[classes["in_use"] == "yes"] if len(classes) else classes
    for r in used.to_dict("records"):
        chance = float(r["probability"])
        mine = r["is_class_of_value"] == "yes"
        steps.append(Step(label=f"{r['scheme']}: {r['class']}",
                          value="" if np.isnan(chance) else f"probability {written(chance, 3)}",
                          words=str(r["rule"]), source=str(r["source"]), sign=USED if mine else ""))
    if row["class_conflicts"]:
        steps.append(Step(label="class by other definitions", words=str(row["class_conflicts"])))
    about = f"probabilities: share of {options.draws:,} draws" if options.draws else "no draws, no probabilities"
    return Part("Class", tuple(steps), about)


def _rests_on(row: Mapping[str, Any]) -> str:
    also = f"; could also be {row['class_also']}" if row["class_also"] else ""
    return f"rests on: {row['class_on'] or 'nothing'}{also}"


# ---------------------------------------------------------------- critical load


def load_part(found: LakeAssessment, i: int, row: Mapping[str, Any], loads: pd.DataFrame, options: LakeOptions) -> Part:
    """Every choice of the method with its source, what they give for this lake, and what other choices would give."""
    title = TITLES[5]
    figures = figures_part(title, found, i, row, options)
    if np.isnan(row["critical_load_meq_m2_yr"]):
        return figures
    choices = [Step(label=label, words=line) for label, line in
               zip(LOAD_CHOICES, found.rules.critical.lines(), strict=True)]
    critical = found.answers.critical
    before = float(np.broadcast_to(critical.so4_background, found.answers.anc_used.shape)[i, 0])
    scale = float(np.broadcast_to(critical.scale, found.answers.anc_used.shape)[i, 0])
    worked = [Step(label="sulfate before acid deposition", value=written(MICRO * before, 1), unit="µeq/L",
                   words="by the relation chosen, of base cations less sea salt"),
              Step(label="base cations at which F reaches 1", value=written(MICRO * scale, 1), unit="µeq/L",
                   words="S of the choice"),
              Step(label="equation", value="load = Q (BC0 - ANC limit)",
                   words="Q runoff, BC0 base cations before acid deposition: today's less F times the acid added "
                         "since; exceedance: sulfur deposition plus nitrate that runs off, less the load",
                   source="steady-state water chemistry method; UK critical loads of fresh waters (printed)")]
    others = [Step(label=str(r["variant"]), value=written(float(r["critical_load_meq_m2_yr"]), 2), unit="meq/m²/yr",
                   words=_variant(r), sign=USED if k == 0 else "") for k, r in enumerate(loads.to_dict("records"))]
    return Part(title, (*choices, *worked, *figures.steps, *others), figures.words)


def _variant(r: Mapping[Any, Any]) -> str:
    change, over = float(r["change_percent"]), float(r["exceedance_meq_m2_yr"])
    words = [] if np.isnan(change) or not change else [f"{change:+.0f} %"]
    return "; ".join([*words, *([] if np.isnan(over) else [f"exceedance {written(over, 2)} meq/m²/yr"])])


# ---------------------------------------------------------------- verdicts


def verdict_part(found: LakeAssessment, row: Mapping[str, Any], table: pd.DataFrame, limits: tuple[Limit, ...],
                 options: LakeOptions) -> Part:
    """Each verdict with its rule, the broken ones first."""
    columns = {c.name: c for c in lake_columns(options.thresholds)}
    by_name = {limit.name: limit for limit in limits}
    steps = sorted((_verdict(r, columns, by_name, row) for r in table.to_dict("records")),
                   key=lambda step: step.sign not in (BROKEN, AT_RISK))
    return Part("Verdicts", tuple(steps), f"{len(limits)} limits, and the class")


def _verdict(r: Mapping[Any, Any], columns: Mapping[str, ResultColumn], limits: Mapping[str, Limit],
             row: Mapping[str, Any]) -> Step:
    column, limit = columns[str(r["quantity"])], limits.get(str(r["verdict"]))
    label = column_label(column)[0]
    unit = "" if r["unit"] == "-" else str(r["unit"])
    rule = str(r["rule"])
    if limit is not None:
        floor = "" if np.isneginf(limit.lower) else f", from {limit.lower:g} on"
        rule = f"warned where {label} {limit.operator} {limit.limit:g} {unit}".rstrip() + floor
    chance, warned = float(r["probability"]), r["warned"] == "yes"
    rests_on = str(r["rests_on"])
    rests_on = rests_on if len(rests_on) <= LONG_WORDS else rests_on.split(" (")[0]  # the load tells its limit already
    words = [rule, f"rests on: {rests_on}", "" if np.isnan(chance) else f"in {100.0 * chance:.0f} % of the draws",
             str(r["words"]), f"next: {r['next_step']}" if r["next_step"] else ""]
    return Step(label=str(r["verdict"]), value=with_interval(row, column), unit=unit,
                words="; ".join(filter(None, words)), source=str(r["source"]),
                sign=(BROKEN if warned else KEPT) if limit else AT_RISK if warned else "")


def verdict_words(found: LakeAssessment, row: Mapping[str, Any]) -> str:
    """The outcome in one sentence."""
    chance, over = float(row["class_probability"]), float(row["exceedance_meq_m2_yr"])
    words = [f"{row['class']} by {row['scheme']}" + ("" if np.isnan(chance) else f" (probability {written(chance, 3)})")
             if row["class"] else "no class"]
    if not np.isnan(over):
        words.append(f"{written(abs(over), 2)} meq/m²/yr {'above' if over > 0.0 else 'below'} its critical load")
    broken = [name for name in str(row["warnings"]).split("; ") if name]
    failed = [name for name in str(row["failed_checks"]).split("; ") if name]
    words.append(f"warnings: {', '.join(broken)}" if broken else "no warning")
    words.append(f"checks not met: {', '.join(failed)}" if failed else "all checks met")
    return "; ".join([*words, *([f"status: {row['status']}"] if row["status"] != "ok" else [])])

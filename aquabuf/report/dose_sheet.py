"""The sheet for the wall: what to set this shift, the water that follows, and what would upset it."""

from __future__ import annotations

import numpy as np

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.answer_json import found_of, step_rows
from aquabuf.assess.plant.feed import FeedRate, both_units, in_us, shown
from aquabuf.assess.plant.feed_lines import FeedLine
from aquabuf.assess.plant.quantities import plant_quantities
from aquabuf.assess.plant.rules import Judged
from aquabuf.assess.plant.storage import batch, lime_feed
from aquabuf.report.dose_blocks import (
    assumptions,
    cautions,
    digester,
    hold,
    log,
    saturation,
    season,
    store,
    upset,
)
from aquabuf.report.dose_lines import aligned, block, bullet, calcite_words, figure, sentence, titled
from aquabuf.report.summary import WIDTH, plural

__all__ = ["dose_sheet", "feed_words", "raw_words", "rest_lines", "stop_lines"]

SHOWN = (("ph", "pH"), ("alkalinity", "alk."), ("dic", "carbon"), ("calcium", "Ca"), ("hardness", "hard."),
         ("buffer_intensity", "buffer"), ("chloride_sulfate_ratio", "Cl/SO4"), ("larson_ratio", "Larson"),
         ("tds", "TDS"))
UNITS = (("alk.", "alkalinity", "mg/L as CaCO3"), ("hard.", "hardness", "mg/L as CaCO3"),
         ("calcite", "calcite (what would deposit or dissolve)", "mg/L as CaCO3"), ("carbon", "carbon", "mmol/L"),
         ("buffer", "buffer", "meq/L per pH"), ("Ca", "Ca", "mg/L"), ("TDS", "TDS", "mg/L"),
         ("Cl/SO4", "Cl/SO4", "by mass"), ("sat.", "sat.", "saturation index of calcite"))
THIN_PERCENT = 10.0  # setting below which few machines feed evenly; common practice, no source
LIME = "Ca(OH)2"
BED, BED_WORDS = "bed", "It dissolves from the bed as the water asks for it: nothing to set; keep the bed filled."
TIGHT_FROM = 12  # columns


def dose_sheet(answer: Answer) -> str:
    """The whole page; same answer, same text."""
    blocks = [_head(answer), _stop(answer), _feeds(answer), _water(answer), _targets(answer), _rules(answer),
              log(answer), upset(answer), store(answer), saturation(answer), hold(answer), season(answer),
              digester(answer), assumptions(answer), cautions(answer)]
    return "\n\n".join(b for b in blocks if b) + "\n"


# ---------------------------------------------------------------- head


def _head(answer: Answer) -> str:
    plan = answer.plan
    title = f"{plan.name}{' ' * max(2, WIDTH - len(plan.name) - len(plan.date))}{plan.date}".rstrip()
    flow = f"Flow {both_units(plan.flow.now_m3_d, 'm³/d')}"
    ends = [f"{name} {shown(v)}" for name, v in (("least", plan.flow.least_m3_d), ("largest", plan.flow.most_m3_d))
            if v is not None]
    flow += f", {', '.join(ends)} m³/d" if ends else ""
    lines = [title, "=" * min(WIDTH, max(len(title), 1)), f"{flow}. Water for: {plan.use}.",
             bullet(f"Raw water ({plan.raw.words}): {raw_words(answer)}.", mark="")]
    return "\n".join([*lines, *([bullet(sentence(plan.note), mark="Note: ")] if plan.note else [])])


def raw_words(answer: Answer) -> str:
    """Readings of the raw water."""
    row = step_rows(answer)[0]
    said = [f"{figure(row['temperature_c'], 1)} °C"]
    for name in ("ph", "alkalinity", "dic", "calcium", "hardness"):
        q = plant_quantities()[name]
        if np.isfinite(row[q.column]):
            said.append(f"{q.label} {figure(row[q.column], q.digits)}{'' if q.unit == '-' else f' {q.unit}'}")
    return ", ".join(said)


# ---------------------------------------------------------------- stop


def _stop(answer: Answer) -> str:
    if answer.feasible:
        return ""
    found = bool(answer.train.feasible()[0])
    closing = "Doses below are what the plan comes to; they are not to be fed." if found else \
        "Figures below are without the doses that were not found."
    return block("STOP: DO NOT SET THESE FEEDS. This plan does not hold.", [*stop_lines(answer), closing])


def stop_lines(answer: Answer) -> list[str]:
    """Why a plan does not hold, with rule and next step; nothing where it does."""
    if answer.feasible:
        return []
    lines: list[str] = []
    for name, f in answer.stops:
        rule = f" Rule: {f.rule}." if f.rule else ""
        lines.append(f"{name}: {sentence(f.words)}{rule}{_next(f.next_step)}")
    if not lines:
        lines.append(sentence(answer.reason or "no dose was found"))
    return lines


def _next(text: str) -> str:
    return f" Next: {text}." if text else ""


# ---------------------------------------------------------------- feeds


def _feeds(answer: Answer) -> str:
    if not answer.feeds:
        return "SET THE FEEDS\n  Nothing is dosed in this plan."
    head = (("product", "step", "mg/L of", "mg/L", "product", "product", "feed", "feed", "set", "day tank"),
            ("", "", "product", "pure", "kg/d", "lb/d", "metric", "US", "%", "lasts h"))
    rows = [_feed_row(line, bed=(line.step, line.product.name) in answer.beds) for line in answer.feeds]
    said = [words for line in answer.feeds for words in feed_words(answer, line)]
    return titled("SET THE FEEDS", aligned(head, rows, left=(0, 1)), *(bullet(w) for w in dict.fromkeys(said)))


def _feed_row(line: FeedLine, *, bed: bool) -> list[str]:
    rate, setting = line.rate, None if bed else line.setting
    if not np.isfinite(line.mol_l[0]):
        return [line.product.name, line.step, "no dose", *["-"] * 7]
    value, unit = _fed(rate)
    us, name = in_us(value, unit)
    pct = "-" if setting is None else shown(float(setting.setting_pct[0])) if setting.status[0] == "set" \
        else str(setting.status[0])
    hours = next((float(v.value[0]) for v in line.tank if v.rule.unit == "h" and line.mol_l[0] > 0.0), np.nan)
    if bed:
        pct = BED
    return [line.product.name, line.step, shown(line.mg_l_product), shown(line.mg_l_pure),
            shown(float(rate.product_kg_d[0])), shown(float(rate.in_us()["product_lb_d"][0])),
            f"{shown(value)} {unit}", f"{shown(float(us))} {name}", pct, figure(hours, 1)]


def _fed(rate: FeedRate) -> tuple[float, str]:
    """What the machine moves, and in which unit."""
    return (float(rate.l_h[0]), "L/h") if rate.moved else (float(rate.product_kg_h[0]), "kg/h")


def feed_words(answer: Answer, line: FeedLine) -> list[str]:
    """What goes with a setting: product and strength, other flows, what to make up, rules of the day tank."""
    p = line.product
    strength = f"{100.0 * p.strength:.4g} % ({p.strength_from})"
    mixture = line.spec.made_up
    moved = "" if mixture is None else f", made up to {100.0 * mixture.fraction:.3g} % of product by mass"
    said = f"{sentence(line.setting_words())}{_thin(line)}{_at_flows(line)}"
    if (line.step, p.name) in answer.beds:
        said = BED_WORDS
    out = [f"{p.name}: {p.product.name}, {p.product.formula}, {strength}{moved}. {said}"]
    out += [f"{p.name}: {words}." for words in _made_up(answer, line)]
    return out + [f"{p.name}, day tank: {v.words()}." for v in line.tank if v.judged[0] and not v.met[0]]


def _thin(line: FeedLine) -> str:
    """A setting so low that the machine may not hold it, where the plan does not say what it can."""
    setting, machine = line.setting, line.spec.pump if line.rate.moved and line.spec.pump else line.spec.feeder
    if setting is None or machine is None or setting.status[0] != "set" or not setting.setting_pct[0] < THIN_PERCENT:
        return ""
    return (f" Below {THIN_PERCENT:g} % few machines feed evenly (common practice, no source): give its range or "
            "turndown, thin the product, or take a smaller one.")


def _made_up(answer: Answer, line: FeedLine) -> list[str]:
    """The recipe of a full day tank, and how much of a lime slurry is solid."""
    mixture, rate = line.spec.made_up, line.rate
    if mixture is None or not line.mol_l[0] > 0.0:
        return []
    out = [f"to fill the day tank, {batch(line.spec.day_tank_l, mixture).words()}"] if line.spec.day_tank_l else []
    if line.product.product.formula == LIME:
        kinds = [p.step.kind for p in answer.train.passed]
        at = [p.step.name for p in answer.train.passed].index(line.step)
        found = lime_feed(rate.pure_kg_d, rate.flow_m3_d, answer.train.passed[at].before.t_c, mixture=mixture,
                          strength=line.product.strength)
        out.append(found.words(after_filters="coagulate" in kinds[:at]))
    return out


def _at_flows(line: FeedLine) -> str:
    """What the same dose asks for at the least and the largest flow."""
    said = []
    for name, rate, setting in line.at_flows:
        value, unit = _fed(rate)
        if not value > 0.0:
            continue
        reached = "" if setting is None else f" at {shown(float(setting.setting_pct[0]))} %" \
            if setting.status[0] == "set" else f", {setting.status[0]} for it"
        said.append(f"{both_units(value, unit)}{reached} at the {name}")
    return f" Same dose: {'; '.join(said)}." if said else ""


# ---------------------------------------------------------------- water


def _water(answer: Answer) -> str:
    named, rows = plant_quantities(), step_rows(answer)
    warm = len({round(r["temperature_c"], 1) for r in rows}) > 1
    columns = [(named[name], head) for name, head in SHOWN]
    head = ["water after", "°C" if warm else "", *(word for _, word in columns), "sat.", "calcite"]
    table = [[r["name"], figure(r["temperature_c"], 1) if warm else "",
              *(figure(r[q.column], q.digits) for q, _ in columns), figure(r["si_calcite"], 2, "+"),
              calcite_words(r["ccpp_mg_l"])] for r in rows]
    return titled(f"WATER AFTER EVERY STEP{'' if answer.train.feasible()[0] else ' (without the doses not found)'}",
                  aligned([head], table, gap=" " * (2 if len(head) < TIGHT_FROM else 1)),
                  bullet(_units([word for k, word in enumerate(head) if any(row[k] not in ("", "-") for row in table)]),
                         mark="  "))


def _units(heads: list[str]) -> str:
    """What the columns of the table of waters are in."""
    parts: dict[str, list[str]] = {}
    for head, name, unit in UNITS:
        if head in heads:
            parts.setdefault(unit, []).append(name)
    return sentence("; ".join(f"{', '.join(names)}: {unit}" for unit, names in parts.items()))


# ---------------------------------------------------------------- targets and rules


def _targets(answer: Answer) -> str:
    rows = [[t.step, t.target.words, t.target.quantity.text(t.reached), "met" if t.met else "NOT MET"]
            for t in answer.targets]
    return titled("TARGETS", aligned([["step", "wanted", "reached", ""]], rows, left=(0, 1, 2, 3)))


def _rules(answer: Answer) -> str:
    return block("RULES AND WARNINGS", _rule_lines(answer))


def _rule_lines(answer: Answer) -> list[str]:
    """Warnings, broken rules, notes of plan and steps, then what was kept and what could not be judged."""
    lines = [f"{name}: {sentence(f.words)}{f' Rule: {f.rule}.' if f.rule else ''}{_next(f.next_step)}"
             for name, f in found_of(answer, "warning")]
    lines += [_broken(j) for j in answer.limits if j.broken]
    lines += [f"Plan: {sentence(note)}" for note in answer.plan.notes]
    lines += [f"{name}: {sentence(f.words)}" for name, f in found_of(answer, "note")]
    return [*lines, *rest_lines(answer)]


def rest_lines(answer: Answer) -> list[str]:
    """How many rules are kept, and which could not be judged."""
    lines = []
    kept = sum(not j.broken and np.isfinite(j.value) for j in answer.limits)
    unknown = dict.fromkeys(j.limit.name for j in answer.limits if not np.isfinite(j.value))
    if kept:
        lines.append(f"{plural(kept, 'further rule')} for the water that leaves: kept (limits.csv).")
    if unknown:
        lines.append(f"Not judged, as an ion is not known: {', '.join(unknown)}.")
    return lines


def _broken(j: Judged) -> str:
    """A broken rule with its value, source and next step."""
    q = next(q for q in plant_quantities().values() if q.column == j.limit.quantity)
    unit = "" if q.unit == "-" else f" {q.unit}"
    value = f"({calcite_words(j.value)}{unit})" if q.name == "ccpp" else f"{figure(j.value, q.digits)}{unit}"
    rule = f"{j.limit.name}, {j.limit.operator} {j.limit.limit:g}"
    return (f"{q.label} {value}: {sentence(j.limit.words)} Rule ({rule}): {j.limit.source}."
            f"{_next(j.limit.next_step)}")

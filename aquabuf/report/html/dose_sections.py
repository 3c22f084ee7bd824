"""Sections of the page of a plan: targets, rules, waters, what would upset it, faults, season, store."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.answer_json import found_of, step_rows
from aquabuf.assess.plant.faults import Fault
from aquabuf.assess.plant.feed import both_units, shown
from aquabuf.assess.plant.quantities import STEP_QUANTITIES, find_quantity, plant_quantities
from aquabuf.assess.plant.ranges import ControlRange
from aquabuf.assess.plant.rules import Judged
from aquabuf.report.dose_blocks import (
    cost_words,
    fault_lines,
    hold_lines,
    saturation_lines,
    store_lines,
    upset_lines,
)
from aquabuf.report.dose_lines import calcite_words, dropped, figure, sentence
from aquabuf.report.dose_sheet import rest_lines
from aquabuf.report.html.common import ROWS
from aquabuf.report.html.parts import Column, Link, bullets, paragraph, section, table

__all__ = ["faults_section", "lasting_section", "rules_section", "saturation_section", "store_section",
           "targets_section", "upset_section", "water_section"]

Files = frozenset[str]

SPREAD = ("least", "low", "high", "most")  # of the doses of a season


def _plain(titles: Sequence[str], rows: Sequence[Sequence[str]], *, text: Sequence[int] = (0,), caption: str = "",
           tones: Sequence[str] = (), sortable: bool = True) -> str:
    """A table of at most ROWS rows without the columns in which no row has anything."""
    if not rows:
        return ""
    (head,), body, kept = dropped([titles], rows)
    columns = [Column(title=title, number=k not in text) for title, k in zip(head, kept, strict=True)]
    return table(columns, body[:ROWS], caption=caption, tones=tones, sortable=sortable)


def _beside(words: str, file: str, files: Files) -> str:
    """Words that lead to a file beside the page; nothing where it was not written."""
    return paragraph(words, soft=True, link=Link(file, file)) if file in files else ""


# ---------------------------------------------------------------- targets and rules


def targets_section(answer: Answer) -> str:
    """Wanted and reached; those not met first."""
    found = sorted(answer.targets, key=lambda t: t.met)
    rows = [[t.step, t.target.words, t.target.quantity.text(t.reached), "met" if t.met else "NOT MET"] for t in found]
    none = "" if rows else paragraph("The plan sets no target; doses are fixed.")
    return section("Targets", none, _plain(("behind", "wanted", "reached", "so it is"), rows, text=(0, 1, 2, 3),
                                           tones=["" if t.met else "stop" for t in found]), name="targets")


def rules_section(answer: Answer, files: Files) -> str:
    """Warnings of the steps and broken rules with value, source and next step; notes; how many rules are kept."""
    rows = [[name, sentence(f.words), f.rule or "-", f.next_step or "-"] for name, f in found_of(answer, "warning")]
    rows += [_broken(j) for j in answer.limits if j.broken]
    rows += [["plan", sentence(note), "-", "-"] for note in answer.plan.notes]
    notes = [f"{name}: {sentence(f.words)}" for name, f in found_of(answer, "note")]
    caption = "Guidance, which your permit outranks" if any(j.broken for j in answer.limits) else ""
    found = _plain(("where", "what", "rule and source", "next"), rows, text=(0, 1, 2, 3), tones=["warn"] * len(rows),
                   caption=caption)
    none = "" if rows else paragraph("No rule is broken and nothing is warned of.")
    return section("Rules and warnings", none, found, bullets([*notes, *rest_lines(answer)]),
                   _beside("Every rule with its value:", "limits.csv", files), name="rules")


def _broken(j: Judged) -> list[str]:
    q = next(q for q in plant_quantities().values() if q.column == j.limit.quantity)
    unit = "" if q.unit == "-" else f" {q.unit}"
    value = f"{calcite_words(j.value)}{unit}" if q.name == "ccpp" else f"{figure(j.value, q.digits)}{unit}"
    return ["final water", f"{q.label} {value}: {sentence(j.limit.words)}",
            f"{j.limit.name}, {j.limit.operator} {j.limit.limit:g}: {j.limit.source}", j.limit.next_step or "-"]


# ---------------------------------------------------------------- water


def water_section(answer: Answer, files: Files) -> str:
    """The raw water and the water after every step."""
    rows = step_rows(answer)
    named = [find_quantity(name, target=False) for name in STEP_QUANTITIES]
    warm = len({round(r["temperature_c"], 1) for r in rows}) > 1
    titles = ["water after", "°C", *(q.label if q.unit == "-" else f"{q.label} ({q.unit})" for q in named)]
    body = [[str(r["name"]), figure(r["temperature_c"], 1) if warm else "", *(
        calcite_words(r[q.column]) if q.name == "ccpp" else
        figure(r[q.column], q.digits, "+" if q.name == "si_calcite" else "") for q in named)] for r in rows]
    without = "" if answer.train.feasible()[0] else "Without the doses that were not found"
    return section("Water after every step", _plain(titles, body, caption=without, sortable=False),
                   _beside("Every quantity:", "steps.csv", files), name="water")


def saturation_section(answer: Answer) -> str:
    """Scale, corrosion, buffers, digester, in words."""
    held = hold_lines(answer)
    return (section("Scale, corrosion and buffering of the last water", bullets(saturation_lines(answer)),
                    name="saturation")
            + section("Holding the pH", bullets(held), name="hold")
            + section("Digester", paragraph(sentence(answer.digester_words)) if answer.digester_words else "",
                      name="digester"))


# ---------------------------------------------------------------- what would upset it


def upset_section(answer: Answer, files: Files) -> str:
    """What 0.1 pH costs, ranges that keep the windows, errors of readings and feeds."""
    rows = [[r.product.name, _end(r, 1.0), _end(r, float(r.least[0])), _end(r, float(r.most[0])),
             _left(r.ends_low[0], r.ends_high[0])] for r in answer.ranges if np.isfinite(r.least[0])]
    ranges = _plain(("product", "dose (mg/L)", "least (mg/L)", "most (mg/L)", "left first"), rows, text=(0, 4),
                    caption="How far a dose may go while every window is kept, the other doses held")
    return section("What would upset it", ranges, bullets(upset_lines(answer)),
                   _beside("Each window under errors:", "errors.csv", files), name="upset")


def _end(found: ControlRange, factor: float) -> str:
    if np.isinf(factor):
        return "no end found"
    return "none" if factor == 0.0 else shown(factor * float(found.product.mg_l_product(found.mol_l)[0]))


def _left(low: str, high: str) -> str:
    if low == high:
        return low
    return "; ".join(f"{side} {words}" for side, words in (("below:", low), ("above:", high)) if words)


def faults_section(answer: Answer, files: Files) -> str:
    """A feed stuck and a feed stopped, the farthest off first."""
    if not answer.faults:
        return ""
    found = sorted(answer.faults, key=lambda f: (-len(f.levels()), -abs(_off(f))))
    rows = [[f.product.name, f.step, f.case, shown(float(f.product.mg_l_product(f.dose_mol_l)[0])),
             shown(float(f.product.mg_l_product(f.wanted_mol_l)[0])), figure(float(f.ph_behind[0]), 2),
             figure(float(f.ph_final[0]), 2), shown(abs(float(f.excess_kg[0]))),
             "; ".join(x.name for x in f.levels()) or "none"] for f in found]
    first = found[0]
    return section(
        "A feed at fault",
        _plain(("feed", "step", "fault", "mg/L given", "mg/L wanted", "pH behind the step", "pH behind the works",
                "kg too much or missing", "level of harm passed"), rows, text=(0, 1, 2, 8),
               tones=["stop" if len(f.levels()) else "" for f in found],
               caption=f"For {first.hours:g} h, in {both_units(float(first.volume_m3[0]), 'm³')} of water"),
        bullets(fault_lines(answer)), _beside("The same as a table of figures:", "faults.csv", files), name="faults")


def _off(fault: Fault) -> float:
    return float(np.nan_to_num(fault.ph_behind[0] - fault.ph_wanted[0]))


# ---------------------------------------------------------------- season and store


def lasting_section(answer: Answer, files: Files) -> str:
    """What a season of raw water does."""
    season = answer.season
    if season is None:
        return ""
    rows = [[str(r["step"]), str(r["product"]), *(shown(float(r[f"{end}_mg_l_product"])) for end in SPREAD)]
            for r in season.doses.to_dict("records")]
    return section("Over the season", bullets(sentence(words) for words in season.words()),
                   _plain(("step", "product", *(f"{end} (mg/L)" for end in SPREAD)), rows, text=(0, 1),
                          caption="Doses of product; low and high hold nine rows of ten"),
                   _beside("Every row of raw water:", "season.csv", files), name="season")


def store_section(answer: Answer) -> str:
    """Use, stock, cost, and what to order."""
    lines = [s for s in answer.store if s.kg_d > 0.0]
    word = answer.plan.currency
    rows = [[s.product.name, *both_units(s.kg_d, "kg/d").rstrip(")").split(" ("), shown(s.kg_month),
             figure(s.stock_days, 1), *cost_words([s.cost])] for s in lines]
    if len(lines) > 1 and all(s.cost for s in lines):
        rows.append(["all", "", "", "", "", *cost_words([s.cost for s in lines])])
    per = f"cost ({word}) per" if word else "cost per"
    return section("Stores and costs", _plain(
        ("product", "use", "use, US", "kg/month", "stock lasts (days)", f"{per} day", f"{per} month", f"{per} 1000 m³",
         f"{per} million gal"), rows, sortable=False), bullets(store_lines(answer)), name="store")

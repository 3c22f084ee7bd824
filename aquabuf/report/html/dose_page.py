"""The page of a plan: whether it holds, what to set, the water that follows, what would upset it, what it rests on."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.answer_json import found_of, step_rows
from aquabuf.assess.plant.drift import worst_of
from aquabuf.assess.plant.feed import both_units, metric_and_us, shown
from aquabuf.assess.plant.feed_lines import FeedLine
from aquabuf.assess.plant.quantities import find_quantity
from aquabuf.assess.uncertainty import COVERAGE
from aquabuf.report.dose_blocks import assumption_lines, log_lines
from aquabuf.report.dose_lines import calcite_words, sentence
from aquabuf.report.dose_settings import control_words, rate_words, setting_words
from aquabuf.report.dose_sheet import feed_words, raw_words, stop_lines
from aquabuf.report.html.common import constants_part, file_part, provenance
from aquabuf.report.html.document import document
from aquabuf.report.html.dose_sections import (
    faults_section,
    lasting_section,
    rules_section,
    saturation_section,
    store_section,
    targets_section,
    upset_section,
    water_section,
)
from aquabuf.report.html.parts import bullets, card, details, facts, paragraph, section, shown_text
from aquabuf.report.html.whatif import whatif_panels, whatif_script
from aquabuf.report.summary import plural

__all__ = ["dose_page"]

HEADLINE = ("ph", "alkalinity", "si_calcite", "ccpp")  # of the final water in the verdict
RULE_SHOWN = 4                                         # targets in the verdict
NOT_SET = "DO NOT SET"


def dose_page(answer: Answer, record: Mapping[str, Any], *, written: Iterable[str] = (), figure: bool = True) -> str:
    """The whole page; same answer, same text.

    record : what the run rests on, as run.json has it. written : names of the files beside the page, which alone are
    linked. figure : whether to draw the panels.
    """
    files = frozenset(written)
    whatif = whatif_panels(answer)
    parts = [
        *_verdict(answer), _settings(answer, files), targets_section(answer), rules_section(answer, files),
        water_section(answer, files), section("What if a dose is moved", *whatif, name="whatif"),
        section("Measure and log this shift", bullets(log_lines(answer)), name="log"),
        upset_section(answer, files), faults_section(answer, files), saturation_section(answer),
        lasting_section(answer, files), store_section(answer),
        section("Figures", *_drawings(answer), name="figures") if figure else "",
        section("What it rests on", bullets(assumption_lines(answer)), name="rests"),
        section("Cautions", bullets(answer.cautions), name="cautions"),
        file_part("dose", files),
        section("Provenance", provenance(record), constants_part(record["constants"]), name="provenance")]
    plan = answer.plan
    day = f", {plan.date}" if plan.date and plan.date not in plan.name else ""
    return document(f"{plan.name}{day}", _subtitle(answer), parts,
                    closing="The plan stands for no permit: local code, safety data sheets and the licensed operator "
                    "in charge decide.", script=whatif_script() if whatif else "")


def _subtitle(answer: Answer) -> str:
    plan = answer.plan
    note = f" {sentence(plan.note)}" if plan.note else ""
    return f"Dosing plan. Flow {both_units(plan.flow.now_m3_d, 'm³/d')}. Water for: {plan.use}.{note}"


def _drawings(answer: Answer) -> tuple[str, ...]:
    from aquabuf.report.html.dose_drawings import dose_drawings  # drawing is slow to import

    return dose_drawings(answer)


# ---------------------------------------------------------------- verdict


def _verdict(answer: Answer) -> list[str]:
    """STOP or OK, then what else must be looked at before a feed is turned on."""
    return [_stopped(answer)] if not answer.feasible else [_holds(answer), *_look_out(answer)]


def _stopped(answer: Answer) -> str:
    reasons = stop_lines(answer)
    found = bool(answer.train.feasible()[0])
    closing = "The doses below are what the plan comes to; they are not to be fed." if found else \
        "The figures below are without the doses that were not found."
    steps = [f.next_step for _, f in answer.stops if f.next_step]
    rules = [f.rule for _, f in answer.stops if f.rule]
    first = card("stop", "Do not set these feeds: this plan does not hold", number=closing,
                 rule="; ".join(dict.fromkeys(rules)), next_step=sentence("; ".join(dict.fromkeys(steps))) if steps else
                 "Change the products or the targets, and solve the plan again.")
    return f"{first}\n{section('Why it does not hold', bullets(reasons), name='stop')}"


def _holds(answer: Answer) -> str:
    fails = [line.product.name for line in answer.feeds if line.out_of_reach]
    verdict = "The plan holds: set the feeds below" if not fails else \
        f"The doses hold, but a machine cannot give its dose: {', '.join(dict.fromkeys(fails))}"
    aims = [t.target.words for t in answer.targets]
    more = f", and {len(aims) - RULE_SHOWN} more" if len(aims) > RULE_SHOWN else ""
    g = answer.plan.guards
    asked = f"{'; '.join(aims[:RULE_SHOWN])}{more}, as the plan asks; " if aims else ""
    rule = f"{asked}guard rails pH {g.ph_low:g} to {g.ph_high:g} ({g.rule('ph_high')})"
    return card("warn" if fails else "good", verdict, number=f"Final water: {_final(answer)}.{_spread(answer)}",
                rule=rule, next_step=_next(answer, fails), caution=_worst(answer))


def _final(answer: Answer) -> str:
    row, said = step_rows(answer)[-1], []
    for q in (find_quantity(name) for name in HEADLINE):
        value = row[q.column]
        if np.isfinite(value):
            said.append(f"{calcite_words(value)} mg/L of calcium carbonate" if q.name == "ccpp" and "balance" not in
                        calcite_words(value) else calcite_words(value) if q.name == "ccpp" else
                        f"{q.label} {value:z.{q.digits}f}{'' if q.unit == '-' else f' {q.unit}'}")
    return ", ".join(said)


def _spread(answer: Answer) -> str:
    """Interval of pH under errors of the readings, the doses held."""
    e = answer.readings_error
    if e is None:
        return ""
    rows = [r for r in e.windows.to_dict("records") if r["quantity"] == find_quantity("ph").label]
    if not rows or not np.isfinite(rows[-1]["value_low"]):
        return ""
    r = rows[-1]
    return (f" With these doses and readings that err, pH of the {r['step']} lies from {r['value_low']:.2f} to "
            f"{r['value_high']:.2f} in {100.0 * COVERAGE:.0f} % of draws.")


def _next(answer: Answer, fails: list[str]) -> str:
    if fails:
        return sentence("; ".join(f"{x.product.name}: {x.setting_words()}" for x in answer.feeds if x.out_of_reach))
    if not answer.feeds:
        return "Nothing is dosed: measure the water behind the works."
    aimed = [t.step for t in answer.targets if t.target.quantity.name == "ph"]
    where = f"behind {aimed[-1]}" if aimed else "behind the works"
    return f"Set each feed, prove it by a drawdown or a catch, and measure pH {where} before and after."


def _worst(answer: Answer) -> str:
    """The window that errors of the readings leave most often."""
    e = answer.readings_error
    if e is None or not e.windows["leaves_percent"].notna().any():
        return ""
    return sentence(f"readings err: {worst_of(e)}")


def _look_out(answer: Answer) -> list[str]:
    """Warnings and broken rules, counted, the first told."""
    found = [f"{name}: {f.words}" for name, f in found_of(answer, "warning")]
    found += [f"final water: {j.limit.words}" for j in answer.limits if j.broken]
    found += list(answer.plan.notes)
    if not found:
        return []
    return [card("warn", f"{plural(len(found), 'thing')} to look at before you start", number=sentence(found[0]),
                 next_step="Read rules and warnings below.")]


# ---------------------------------------------------------------- settings


def _settings(answer: Answer, files: frozenset[str]) -> str:
    """What to set in large type, a card per feed; raw water and flow it is for."""
    title = "Set the feeds" if answer.feasible else "Not to be set: feeds that the plan comes to"
    cards = "\n".join(_setting_card(answer, line) for line in answer.feeds)
    said = dict.fromkeys(words for line in answer.feeds for words in feed_words(answer, line))
    body = f'<div class="settings">\n{cards}\n</div>' if cards else paragraph("Nothing is dosed in this plan.")
    return section(title, paragraph(f"For raw water ({answer.plan.raw.words}): {raw_words(answer)}."), body,
                   details("How the settings are known, other flows, what to make up", bullets(said)), name="feeds")


def _setting_card(answer: Answer, line: FeedLine) -> str:
    """A feed: its setting large, the rate and the dose in both units, how far it may go."""
    bed = (line.step, line.product.name) in answer.beds
    setting, about = setting_words(line, bed=bed)
    found = bool(np.isfinite(line.mol_l[0]))
    tone = "stop" if not answer.feasible else "warn" if line.out_of_reach else "note"
    sign = f'<p><span class="sign">{NOT_SET}</span></p>\n' if not answer.feasible else ""
    pairs: list[tuple[str, str]] = []
    if found and line.mol_l[0] > 0.0:
        pairs = [("feed", " = ".join(rate_words(line))),
                 ("dose as delivered", " = ".join(metric_and_us(line.mg_l_product, "mg/L"))),
                 ("dose, pure", f"{shown(line.mg_l_pure)} mg/L"),
                 ("a day", " = ".join(metric_and_us(float(line.rate.product_kg_d[0]), "kg/d"))),
                 ("range", control_words(answer, line))]
    rows = facts(pairs)
    where = paragraph(f"in {line.step}", soft=True)
    return (f'<div class="card {tone}">\n<h3>{shown_text(line.product.name)}</h3>\n{where}\n{sign}'
            f'<p class="large">{shown_text(setting)}</p>\n{paragraph(about, soft=True)}\n{rows}\n</div>')

"""Blocks of the report on a neutralization that tell how it does: simulation, failures, side effects, doubts."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.monte import MonteCarlo
from aquabuf.assess.tank.side_case import NOTE, SEVERITIES
from aquabuf.assess.tank.trial import CHANGE, FAULT_S, MIN_S
from aquabuf.report.dose_lines import aligned, block, figure, sentence, titled
from aquabuf.report.tank_blocks import MILLI, PERCENT, Record, bullets, number, united

__all__ = ["alternatives", "batch", "best_alternative", "failures", "sensitivity", "side_effects", "simulation",
           "spread_words", "storage", "worst_change"]

LEAST_SHOWN = 0.001
METAL_WINDOW = " window"  # ends the name of a row that tells where a metal falls out
QUANTILES = ("half of the cases", "90 %", "95 %", "all")


def simulation(found: Design, record: Record) -> str:
    """Minutes outside, worst pH, cases, tuning."""
    s = record["simulation"]
    if s is None:
        why = "a stop forbids the design" if record["stops"] else "it was left out"
        return block("SIMULATION", [f"None: {why}. Nothing here is proven."])
    lines = [
        f"The course shown, {s['days']:g} d in steps of {s['step_s']:g} s: {s['minutes_outside']:.1f} min outside the "
        f"window, {s['percent_outside']:.2g} % of the time, longest excursion {s['longest_excursion_min']:.1f} min, pH "
        f"{s['lowest_ph']:.2f} to {s['highest_ph']:.2f}, worst pH {s['worst_ph']:.2f}. It "
        f"{'keeps' if s['keeps_rule'] else 'BREAKS'} the rule.",
        f"Reagent used in it: {_used(s)}. Mass balances close within {s['balance_error']:.0e} of what passed."]
    m = found.trial.monte if found.trial is not None else None
    table = ""
    if m is not None:
        lines.append(f"{m.meets.size} cases with their own course, buffers and probe errors: {int(m.meets.sum())} keep "
                     f"the rule, {PERCENT * m.probability:.0f} % (95 % interval {PERCENT * m.low:.0f} to "
                     f"{PERCENT * m.high:.0f} %). {spread_words(m)}")
        q = s["quantiles"]
        table = aligned([["no worse than, in", "min outside", "longest min", "lowest pH", "highest pH"]],
                        [[name, figure(q["outside_min"][k], 1), figure(q["longest_min"][k], 1),
                          figure(q["lowest_ph"][k], 2), figure(q["highest_ph"][k], 2)]
                         for k, name in enumerate(QUANTILES)])
    tuned = aligned([["controller", "gain", "reset s", "gain margin", "ultimate period s"]],
                    [[t["tank"], number(t["gain"]), number(t["reset_s"]), figure(t["gain_margin"], 1),
                      number(t["ultimate_period_s"])] for t in s["tuning"]])
    axis = "eq/h per eq/L on the axis of reagent demand" if found.job.wishes.axis == "demand" else "eq/h per pH"
    ahead = "with" if found.job.wishes.feedforward else "without"
    told = [f"Tuning: {rule}." for rule in dict.fromkeys(t["rule"] for t in s["tuning"])]
    kind = f"Controllers: proportional and integral, gain in {axis}, {ahead} flow feed-forward."
    return titled("SIMULATION", bullets(lines), table, bullets([kind, *told]), tuned)


def _used(s: Record) -> str:
    """Equivalents of base and acid by tank."""
    parts = [f"{shown(eq)} eq of {kind} in {t['tank']}" for kind in ("base", "acid")
             for t, eq in zip(s["tuning"], s[f"{kind}_used_eq"], strict=True) if eq > 0.0]
    return ", ".join(parts) or "none"


def spread_words(m: MonteCarlo) -> str:
    """What sets cases that fail apart from those that hold."""
    fail = ~m.meets
    if not fail.any() or fail.all():
        return ""
    said = [f"{name} on average {values[fail].mean():.2f} times those of the design where the rule breaks, "
            f"{values[~fail].mean():.2f} times where it holds"
            for name, values in (("buffers", m.buffer), ("strengths", m.strength)) if values.std() > 0.0]
    return sentence("; ".join(said)) if said else ""


def failures(record: Record) -> str:
    """Failures of an hour, and how long until the window is left."""
    s = record["simulation"]
    if s is None or not s["faults"]:
        return ""
    head = [["tank", "failure", "leaves after min", "min outside", "lowest pH", "highest pH"]]
    rows = [[f["tank"], f["kind"], "stays in" if f["minutes_to_leave"] is None else f"{f['minutes_to_leave']:.0f}",
             f"{f['minutes_outside']:.0f}", figure(f["lowest_ph"], 1), figure(f["highest_ph"], 1)] for f in s["faults"]]
    lines = [f"Each lasts {FAULT_S / MIN_S:.0f} min, at the mean of what asks for the reagent; as a probe gets stuck "
             f"the strength rises by {PERCENT * (CHANGE - 1.0):.0f} % (practice, no source). Nobody acts meanwhile."]
    lines += [f"{kind}: {words}." for kind, words in dict.fromkeys((f["kind"], f["words"]) for f in s["faults"])]
    return titled("FAILURES", aligned(head, rows, left=(0, 1)), bullets(lines))


def alternatives(record: Record) -> str:
    """Other layouts under the same disturbances."""
    rows = record["alternatives"]
    if len(rows) < 2:
        return ""
    head = [["layout", "tanks", "ahead", "all", "cases", "keep rule", "95 % interval", "outside"],
            ["", "", "m³", "m³", "", "%", "%", "median min"]]
    table = [[a["change"], f"{a['tanks']}", number(a["equalization_m3"]), number(a["volume_m3"]), f"{a['cases']}",
              f"{PERCENT * a['probability_of_meeting_rule']:.0f}",
              f"{PERCENT * a['probability_low']:.0f} to {PERCENT * a['probability_high']:.0f}",
              figure(a["minutes_outside"], 0)] for a in rows]
    what = "what could be left out" if rows[0]["accepted"] else "what could make it hold"
    return titled(f"OTHER LAYOUTS under the same disturbances: {what}", aligned(head, table),
                  bullets(["Ahead: equalization; all: with the tanks. One thing is changed at a time, with few cases, "
                           "enough to rank them and not to prove one: put the one that is wanted into [layout] or "
                           "[site] and run it."]))


def best_alternative(record: Record) -> Record | None:
    """The other layout that keeps the rule most often, the smallest of equals; None where none does better."""
    rows = record["alternatives"]
    better = [a for a in rows[1:] if a["probability_of_meeting_rule"] > rows[0]["probability_of_meeting_rule"]]
    return min(better, key=lambda a: (-a["probability_of_meeting_rule"], a["volume_m3"])) if better else None


def side_effects(record: Record) -> str:
    """The gravest first: those to be acted on in words, the others as a table."""
    rows = sorted(record["side_effects"], key=lambda e: -SEVERITIES.index(e["severity"]))
    grave = [f"{e['severity'].upper()}, {e['reagent']}: {e['name']}, {_valued(e)}: {sentence(e['words'])} Rule: "
             f"{e['rule']} ({e['source']})." for e in rows if e["severity"] != NOTE]
    noted = [e for e in rows if e["severity"] == NOTE]
    windows = [f"{sentence(e['words'])} [{e['source']}]" for e in noted if e["name"].endswith(METAL_WINDOW)]
    notes = [e for e in noted if e["value"] and not e["name"].endswith(METAL_WINDOW)]
    table = aligned([["with", "effect", "", ""]], [[e["reagent"], e["name"], _small(e["value"]), _unit(e["unit"])]
                                                   for e in notes], left=(0, 1, 3))
    told = bool(grave or windows or notes)
    per = "At the mean of what each reagent has to treat; amounts per m³ of that waste, per day as if it came all " \
          "day. Words, rules and sources: side_effects.csv." if told else ""
    return titled("SIDE EFFECTS, the gravest first", bullets([*grave, "" if told else "None was found."]), table,
                  bullets([*windows, per]))


def _valued(e: Record) -> str:
    return united(e["value"], e["unit"].replace("m3", "m³"))


def _small(value: float) -> str:
    """A number for a cell; what is as good as nothing is not spelled out."""
    return f"< {LEAST_SHOWN:g}" if 0.0 < value < LEAST_SHOWN else number(value)


def _unit(unit: str) -> str:
    return "" if unit == "-" else unit.replace("m3", "m³")


def storage(record: Record) -> str:
    """Stores, what must be held back, materials and order."""
    s = record["storage"]
    lines = [sentence(one["words"]) for one in s["stores"]]
    lines += [f"Containment by {'the chosen rule' if c['chosen'] else 'another rule'}, {c['words']}."
              for c in s["containment"]]
    return block("STORAGE AND CONTAINMENT", [*dict.fromkeys(lines), *(sentence(w) for w in s["words"])])


def batch(record: Record) -> str:
    """Batch tanks instead of continuous flow."""
    b, lines = record["batch"], []
    plan = b["plan"]
    if plan is not None:
        lines.append(f"It may suit: {plan['tanks']} tanks of {shown(plan['volume_m3'])} m³ in turn. Each fills in "
                     f"{plan['fill_h']:.2g} h, reacts {plan['react_h']:.2g} h, is tested {plan['test_h']:.2g} h, "
                     f"drains in {plan['drain_h']:.2g} h, waits {plan['idle_h']:.2g} h; {plan['cycle_h']:.2g} h from "
                     "fill to fill. Nothing leaves before it is measured.")
    else:
        lines.append("No rule speaks for it." if not any(r["holds"] for r in b["rules"]) else
                     "A rule speaks for it, but no cycle can be laid out.")
    lines += [f"{'For' if r['holds'] else 'Not for'} it: {r['quantity']} {united(r['value'], r['unit'])}, rule "
              f"{r['operator']} {r['limit']:g}: {r['words']} ({r['source']})." for r in b["rules"]]
    return block("BATCH TANKS INSTEAD", lines)


def sensitivity(record: Record) -> str:
    """One change at a time."""
    head = [["one change", "demand", "over design", "tolerance", "over design"], ["", "meq/L", "", "meq/L", ""]]
    rows = [[r["change"], number(MILLI * r["demand_eq_l"]), figure(r["demand_ratio"], 3),
             number(MILLI * r["tolerance_eq_l"]), figure(r["tolerance_ratio"], 3)] for r in record["sensitivity"]]
    return titled("SENSITIVITY of demand and of the tolerance of the window, mean of the stream", aligned(head, rows))


def worst_change(record: Mapping[str, Any]) -> Mapping[str, Any] | None:
    """The change that takes most of the tolerance; None where nothing does."""
    known = [r for r in record["sensitivity"] if r["tolerance_ratio"] is not None and r["tolerance_ratio"] < 1.0]
    return min(known, key=lambda r: r["tolerance_ratio"]) if known else None

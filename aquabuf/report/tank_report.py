"""The report on a neutralization: what an engineer puts into a basis of design, the verdict first."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.side_case import NOTE
from aquabuf.assess.tank.trial import ENOUGH
from aquabuf.report import tank_blocks as built
from aquabuf.report import tank_proof as proof
from aquabuf.report.dose_lines import block, bullet, sentence
from aquabuf.report.summary import WIDTH

__all__ = ["failing", "headline", "next_steps", "tank_report"]

Record = Mapping[str, Any]

PERCENT = 100.0
ACCEPTED, REFUSED, UNPROVEN, STOPPED = "ACCEPTED", "NOT ACCEPTED", "NOT PROVEN", "STOP"
MORE_CASES = 200
MOST_TANKS = 4     # that a stream file may ask for
FEW_SAMPLES = 3    # titrations below which the band of a waste is not known (practice, no source)
LESS_SWING = 0.75  # of the swings left, below which a larger tank is worth naming


def tank_report(found: Design, record: Record) -> str:
    """The whole report; same design, same text. `record` : the design as `design_record` gives it."""
    blocks = [_head(found), _verdict(found, record), _stops(record), built.stream(found, record),
              built.demand(found, record), built.reagents(found, record), built.window(found, record)]
    if not found.stops:  # nothing is to be built else
        blocks += [built.equalization(found, record), built.stages(found, record), built.rules_of_thumb(found, record),
                   built.feeds(record)]
    blocks += [proof.simulation(found, record), proof.alternatives(record), proof.failures(record),
               proof.side_effects(record)]
    if not found.stops:
        blocks += [proof.storage(record), proof.batch(record)]
    blocks += [proof.sensitivity(record), block("ASSUMPTIONS", record["assumptions"])]
    blocks += [block("WARNINGS", _untold(record["warnings"], blocks)), block("CAUTIONS", record["cautions"]),
               block("WHAT TO DO NEXT", next_steps(found, record))]
    return "\n\n".join(b for b in blocks if b) + "\n"


def _untold(warnings: Sequence[str], blocks: Sequence[str]) -> list[str]:
    """Warnings that no block above has told in the same words."""
    told = _plain(" ".join(blocks))
    new = [w for w in warnings if _plain(w.partition(": ")[2] or w) not in told]
    some = len(new) < len(warnings)
    return [*(sentence(w) for w in new), "More warnings stand where they belong, in the blocks above." if some else ""]


def _plain(text: str) -> str:
    return " ".join(text.split()).casefold().removesuffix(".")


def headline(found: Design) -> str:
    """The verdict in a word or two. A course without cases can refute a design, not prove it."""
    if found.stops:
        return STOPPED
    if found.trial is None or (found.trial.monte is None and found.trial.kept):
        return UNPROVEN
    return ACCEPTED if found.accepted else REFUSED


def failing(found: Design) -> str:
    """Why the design must not be built as it is; "" where it is accepted, or only not proven."""
    return found.verdict if headline(found) in (STOPPED, REFUSED) else ""


def _head(found: Design) -> str:
    job = found.job
    title = f"{job.name}{' ' * max(2, WIDTH - len(job.name) - len(job.date))}{job.date}".rstrip()
    lines = [title, "=" * min(WIDTH, len(title)), "Neutralization: basis of design"]
    return "\n".join([*lines, *([bullet(sentence(job.note), mark="Note: ")] if job.note else [])])


def _verdict(found: Design, record: Record) -> str:
    """Accepted or not, in how many cases, by which rule."""
    word = headline(found)
    lines = []
    if word != STOPPED:
        lines.append(sentence(record["verdict"]))
        if record["simulation"] is not None:
            lines.append(f"Time rule: {record['simulation']['rule']}.")
        lines.append(f"A design is accepted where {PERCENT * ENOUGH:.0f} % of the simulated cases or more keep the "
                     "time rule (practice, no source).")
        lines += [_beside_ph(record), _in_short(found, record)]
    else:
        lines.append("Do not build this. Figures below show what the stream asks for, no tanks or feeds; nothing was "
                     "simulated.")
    return block(f"VERDICT: {word}", lines)


def _in_short(found: Design, record: Record) -> str:
    """The plant in one sentence."""
    tanks = record["stages"]
    ahead = record["equalization"]["volume_m3"]
    first = f"{shown(ahead)} m³ of equalization, then " if ahead > 0.0 else ""
    vessels = " and ".join(f"{shown(s['volume_m3'])} m³ at pH {s['setpoint_ph']:.1f}" for s in tanks)
    chosen = record["reagents"]["chosen"]
    needed = found.layout.needs
    fed = " and ".join(name for kind, name in chosen.items() if kind in needed)
    trim = "".join(f", with {name} to take back overdoses" for kind, name in chosen.items() if kind not in needed)
    return f"In short: {first}{built.tanks_words(len(tanks))}, stirred ({vessels}), fed with {fed}{trim}."


def _beside_ph(record: Record) -> str:
    """What the verdict, which is on pH alone, leaves out."""
    names = dict.fromkeys(e["name"] for e in record["side_effects"] if e["severity"] != NOTE)
    return f"It is a verdict on pH. Side effects that warn: {', '.join(names)}." if names else ""


def _stops(record: Record) -> str:
    return block("STOP: NOTHING IS TO BE BUILT", [sentence(words) for words in record["stops"]])


# ---------------------------------------------------------------- next


def next_steps(found: Design, record: Record) -> list[str]:
    """What to do next, in words, the most pressing first."""
    word, lines = headline(found), []
    if word == STOPPED:
        return ["Do away with what forbids the design: keep that waste apart, destroy what it holds, or choose another "
                "reagent; then run this again. Until then no reagent is to be tried on this waste, not in a beaker "
                "either."]
    if word == REFUSED:
        lines += _mend(found, record)
    if word == UNPROVEN:
        lines.append(f"Prove it: run with the simulation and --cases {MORE_CASES}.")
    monte = None if found.trial is None else found.trial.monte
    if word == ACCEPTED and monte is not None and monte.low < ENOUGH:
        lines.append(f"Run more cases: with {monte.meets.size} the interval begins at {PERCENT * monte.low:.0f} %, "
                     f"below the {PERCENT * ENOUGH:.0f} % asked for; --cases {MORE_CASES} narrows it.")
    return [*lines, *_alarms(record), *_measure(found)]


def _mend(found: Design, record: Record) -> list[str]:
    """What a design that does not hold points to: feeds, side of the excursions, tanks, equalization, sensitivity."""
    lines = [_side_of(found, record), _best(record)]
    for f in record["feed"]:
        if f["holds"] is False:
            needed, has = PERCENT * f["resolution_needed"], PERCENT * f["resolution_has"]
            lines.append(f"Buy a finer feeder for {f['reagent']} in {f['tank']}: the window needs {needed:.2g} % of "
                         f"the full rate, this one has {has:.2g} %.")
    choice = record["stage_choice"]
    aid = choice["bicarbonate_instead"]
    if choice["tanks"] < MOST_TANKS:
        lines.append(f"Try one tank more, [layout] stages = {choice['tanks'] + 1}; or larger tanks, [layout] volumes.")
    if aid and aid != "none is needed":
        lines.append(f"Or more buffer: {aid}.")
    lines.append(_larger(record))
    worst = proof.worst_change(record)
    if worst is not None:
        lines.append(f"Know better what the tolerance hangs on most, or design for it ({worst['change']}: "
                     f"{PERCENT * worst['tolerance_ratio']:.0f} % of that of the design is left; see SENSITIVITY).")
    if record["batch"]["plan"] is not None:
        lines.append("Or treat in batches (see there): nothing leaves before it is measured.")
    return [line for line in lines if line]


def _best(record: Record) -> str:
    """The other layout that did best, and whether that is enough."""
    best = proof.best_alternative(record)
    if best is None:
        return "None of the other layouts tried does better: what the waste or the feed is must change first." \
            if record["alternatives"] else ""
    share = f"{PERCENT * best['probability_of_meeting_rule']:.0f} % of {best['cases']} cases"
    return (f"Of the other layouts tried, {best['change']} does best: {share} keep the rule "
            f"({'enough; prove it with more cases' if best['accepted'] else 'not enough yet'}).")


def _side_of(found: Design, record: Record) -> str:
    """To which side the window is left, and what is missing for that side."""
    s, w = record["simulation"], record["window"]
    m = None if found.trial is None else found.trial.monte
    low, high = s["lowest_ph"], s["highest_ph"]
    if m is not None:
        low, high = float(m.lowest_ph.min()), float(m.highest_ph.max())
    under, over = low < w["low_ph"], high > w["high_ph"]
    ends = [f"below, down to pH {low:.1f}" if under else "", f"above, up to pH {high:.1f}" if over else ""]
    said = f"pH leaves the window {' and '.join(e for e in ends if e)}."
    chosen = record["reagents"]["chosen"]
    if over and "acid" not in chosen:
        said += " No acid is named, so nothing takes an overdose of base back: add one in [reagents] and [use]."
    if under and "base" not in chosen:
        said += " No base is named, so nothing takes an overdose of acid back: add one in [reagents] and [use]."
    return said if under or over else ""


def _larger(record: Record) -> str:
    """The next larger equalization that leaves clearly less of the swings."""
    e = record["equalization"]
    now = [r for r in e["volumes"] if r["volume_m3"] <= e["content_m3"] + 1e-6]
    if not now or not now[-1]["sd_share"]:
        return ""
    left = now[-1]["sd_share"]
    more = [r for r in e["volumes"] if r["sd_share"] is not None and r["sd_share"] <= LESS_SWING * left]
    if not more:
        return ""
    now_words = f"{shown(e['volume_m3'])} m³ leave" if e["volume_m3"] > 0.0 else "without it stay"
    return (f"More equalization, [layout] equalization: {shown(more[0]['total_m3'])} m³ in all would leave "
            f"{PERCENT * more[0]['sd_share']:.0f} % of the swings, {now_words} {PERCENT * left:.0f} %.")


def _alarms(record: Record) -> list[str]:
    """The failure that leaves the window first."""
    left = [] if record["simulation"] is None else [f for f in record["simulation"]["faults"]
                                                    if f["minutes_to_leave"] is not None]
    if not left:
        return []
    first = min(left, key=lambda f: f["minutes_to_leave"])
    soon = "less than a minute" if first["minutes_to_leave"] < 1.0 else f"{first['minutes_to_leave']:.0f} min"
    return [f"Provide an alarm and a stop valve or diversion that act within {soon}: so soon the window is left with "
            f"{first['kind']} in {first['tank']}."]


def _measure(found: Design) -> list[str]:
    """What is to be measured, for what is only taken."""
    lines = []
    untitrated = [a.waste.name for a in found.job.arrivals if a.waste.curve is None]
    if untitrated:
        lines.append(f"Titrate samples of {', '.join(untitrated)} and name the table as titration in the stream file: "
                     "what is known by its composition alone may hold buffers that nobody named.")
    few = [a.waste.name for a in found.job.arrivals if a.waste.curve is not None and len(a.samples) < FEW_SAMPLES]
    if few:
        lines.append(f"Titrate more samples of {', '.join(few)}, from different days and hours: {FEW_SAMPLES} or more "
                     "show how its buffers vary.")
    if found.job.profile is None:
        lines.append("Record flow and strength for two weeks at work and give the table as [profile]: now they are "
                     "drawn from statistics.")
    lines.append("Try the chosen reagents in a beaker of the real waste: dose, pH over time, sludge, gas.")
    return lines

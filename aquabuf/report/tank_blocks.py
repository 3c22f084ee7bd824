"""Blocks of the report on a neutralization that tell what is built: stream, demand, reagents, window, tanks, feeds."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from aquabuf.assess.plant.feed import shown
from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.job import Arrival
from aquabuf.assess.tank.mixing import baffles, places
from aquabuf.assess.tank.reagents import BASE
from aquabuf.report.dose_lines import aligned, block, bullet, figure, sentence, titled

__all__ = ["demand", "equalization", "feeds", "number", "reagents", "rules_of_thumb", "stages", "stream", "tanks_asked",
           "tanks_words", "united", "window"]

Record = Mapping[str, Any]

MILLI, PERCENT, W_PER_KW = 1e3, 100.0, 1e3
SAME_M3 = 1e-6
SHOWN_VOLUMES = 7  # rows of the equalization table; the file has all


def united(value: float | None, unit: str) -> str:
    """A number of three figures with its unit, if it has one."""
    return number(value) if unit == "-" else f"{number(value)} {unit}"


def number(value: float | None) -> str:
    """A number of three figures for a cell; a dash where there is none."""
    return "-" if value is None else shown(value)


def bullets(lines: Sequence[str]) -> str:
    """Lines of a list, each once."""
    return "\n".join(bullet(line) for line in dict.fromkeys(lines) if line)


# ---------------------------------------------------------------- the stream and what it asks for


def stream(found: Design, record: Record) -> str:
    """The wastes and their mean together."""
    s = record["stream"]
    rows = [[w["name"], w["known_by"], f"{a.waste.t_c:g}", figure(w["ph"], 2), number(MILLI * w["base_eq_l"]),
             _comes(a)] for w, a in zip(s["wastes"], found.job.arrivals, strict=True)]
    head = [["waste", "known by its", "°C", "pH", "base meq/L", "comes"]]
    lines = [f"Together: {shown(s['mean_flow_m3_h'])} m³/h on average, {s['temperature_c']:.1f} °C, base "
             f"{shown(MILLI * s['mean_base_eq_l'])} meq/L, pH {s['mean_ph']:.2f}. Base is strong base less strong "
             "acid, or alkalinity; negative: an acid waste."]
    lines += [sentence(f"course: {s['course']}"), *(sentence(w) for k in s["known"] for w in k["words"])]
    return titled("STREAM", aligned(head, rows, left=(0, 1, 5)), bullets(lines))


def _comes(a: Arrival) -> str:
    """How a waste comes, short enough for a cell."""
    if a.batch is not None:
        return f"{shown(a.batch.size_m3)} m³ every {a.batch.every_h:g} h, over {60.0 * a.batch.over_h:.0f} min"
    if a.mean_m3_h is None:
        return "as the profile says"
    ends = [f"{word} {shown(v)}" for word, v in (("least", a.least_m3_h), ("most", a.most_m3_h)) if v is not None]
    return ", ".join([f"{shown(a.mean_m3_h)} m³/h", *ends])


def demand(found: Design, record: Record) -> str:
    """Reagent at the least, mean and most that the stream asks for, to the set point and either end of the window."""
    money = f"{found.job.currency or 'cost'}/d"
    head = [["reagent", "stream", "m³/h", "brought to", "pH", "eq/L", "kg/h", "L/h", money]]
    rows = [[d["reagent"] or "-", d["condition"], number(d["flow_m3_h"]), d["aim"], figure(d["ph"], 2),
             number(d["eq_l"]), number(d["kg_h"]), _pumped(d["l_h"]), number(d["cost_per_day"])]
            for d in record["demand"]]
    words = [sentence(d["words"]) for d in record["demand"] if d["words"]]
    words.append("Least and most are the steps of the course that ask for the least and the most an hour, as the waste "
                 "comes, ahead of equalization. kg as delivered, L as pumped, cost as if it lasted all day.")
    return titled("REAGENT DEMAND", aligned(head, rows, left=(0, 1, 3)), bullets(words))


def _pumped(l_h: float | None) -> str:
    """Liters that are pumped; a dash for gas and dry feed."""
    return "-" if not l_h else shown(l_h)


def reagents(found: Design, record: Record) -> str:
    """Reagents side by side, and why the chosen one."""
    money = f"{found.job.currency or 'cost'}/d"
    head = [["reagent", "reaches", "dose", "product", money, "pumped", "stays", "gain", "sludge", "heat", "CO2"],
            ["", "pH", "meq/L", "kg/d", "", "L/h", "min", "pH per meq/L", "kg/d", "K", "kg/d"]]
    rows, words = [], []
    for one in record["reagents"]["compared"]:
        for r in one["rows"]:
            rows.append([r["reagent"], "yes" if r["reaches_setpoint"] else "NO", number(r["demand_meq_l"]),
                         number(r["product_kg_d"]), number(r["cost_per_day"]), _pumped(r["fed_l_h"]),
                         number(r["residence_min"]), number(r["gain_ph_per_meq_l"]), number(r["sludge_kg_d"]),
                         figure(r["heat_k"], 2), number(r["co2_kg_d"])])
        words.append(one["why"])
        words += [f"{r['reagent']}: {sentence(r['words'])}" for r in one["rows"] if r["words"]]
        words += [f"{r['reagent']}, to mind: {r['risks']}." for r in one["rows"] if r["risks"]]
    chosen = [_chosen(found, kind, name) for kind, name in record["reagents"]["chosen"].items()]
    return titled("REAGENTS COMPARED at the mean of the stream", aligned(head, rows), bullets([*chosen, *words]))


def _chosen(found: Design, kind: str, name: str) -> str:
    """Which reagent, by whom, and what the comparison would have taken."""
    named = found.job.base if kind == BASE else found.job.acid
    best = found.basis.comparisons[kind].chosen if kind in found.basis.comparisons else None
    by = "as the file names it" if named is not None else "by the comparison"
    other = best is not None and best.reagent.name != name
    instead = f"; the comparison would take {best.reagent.name}" if best is not None and other else ""
    trims = "" if kind in found.layout.needs else "; it only takes back what the other feed overdoes"
    return f"Chosen {kind}: {name}, {by}{instead}{trims}."


def window(found: Design, record: Record) -> str:
    """The window on the axis of reagent."""
    w = record["window"]
    toward = share = ""
    if w["share_of_demand"] is not None:
        need = shown(MILLI * abs(w["demand_eq_l"]))
        share = f", {PERCENT * w['share_of_demand']:.3g} % of the demand of {need} meq/L"
        toward = (f" From the set point, {PERCENT * w['low_share']:.3g} % of the demand lies to the low end and "
                  f"{PERCENT * w['high_share']:.3g} % to the high end.")
    lines = [
        f"pH {w['low_ph']:g} to {w['high_ph']:g} ({found.job.window.source}); the last tank aims at pH "
        f"{w['setpoint_ph']:g} ({record['aim_why']}).",
        f"Tolerance: {shown(MILLI * w['tolerance_eq_l'])} meq/L of reagent between both ends{share}.{toward}",
        f"At the set point: buffer intensity {shown(MILLI * w['buffer_eq_l_ph'])} meq/L per pH, process gain "
        f"{shown(w['gain_ph_per_eq_l'] / MILLI)} pH per meq/L. Steepest at pH {w['steepest_ph']:.2f}, "
        f"{shown(w['steepest_gain_ph_per_eq_l'] / MILLI)} pH per meq/L."]
    if w["demand_over_ph"] is not None:
        lines.append(f"True demand over what pH alone would tell: {shown(w['demand_over_ph'])}.")
    return block("WINDOW, for the mean of the stream", lines)


# ---------------------------------------------------------------- tanks


def equalization(found: Design, record: Record) -> str:
    """The tank ahead, and what other volumes would leave."""
    e = record["equalization"]
    lines = [sentence(e["rule"])]
    if e["volume_m3"] > 0.0:
        drawn = "" if e["draw_m3_h"] is None else f"; drawn off at a steady {shown(e['draw_m3_h'])} m³/h"
        lines.insert(0, f"{shown(e['volume_m3'])} m³ in all{drawn}.")
        if e["saved_eq_d"] > 0.5:
            lines.append(f"Wastes that neutralize each other in it save {shown(e['saved_eq_d'])} eq of reagent a day.")
    rows = _thinned(e["volumes"], e["content_m3"])
    head = [["", "full", "whole", "holds", "swings", "largest", "pH that leaves", "largest", "passes", "saved"],
            ["", "m³", "m³", "h", "left %", "off meq/L", "from, to", "flow/mean", "over %", "eq/d"]]
    saves = any(r["saved_eq_d"] > 0.5 for r in rows)
    flows = any(r["overflow_share"] > 1e-6 for r in rows)
    table = [[">" if abs(r["volume_m3"] - e["content_m3"]) < SAME_M3 else "", number(r["volume_m3"]),
              number(r["total_m3"]), f"{r['hold_h']:g}",
              "-" if r["sd_share"] is None else f"{PERCENT * r['sd_share']:.0f}",
              number(MILLI * r["peak_eq_l"]), f"{figure(r['ph_low'], 1)} to {figure(r['ph_high'], 1)}",
              figure(r["flow_peak_factor"], 2), f"{PERCENT * r['overflow_share']:.1f}" if flows else "",
              number(r["saved_eq_d"]) if saves else ""] for r in rows]
    said = ["> taken. Swings: standard deviation of what the stream asks for, over that of the stream as it comes. "
            "Largest off: farthest from the mean."] if rows else []
    if rows and flows:
        said.append("Passes over: share of the water that comes while the volume for the flow is full.")
    return titled("EQUALIZATION", bullets(lines), aligned(head, table), bullets(said))


def _thinned(rows: Sequence[Record], taken: float) -> list[Record]:
    """Some rows of a long table: both ends, the one taken, and others evenly between."""
    if len(rows) <= SHOWN_VOLUMES:
        return list(rows)
    keep = {round(k * (len(rows) - 1) / (SHOWN_VOLUMES - 1)) for k in range(SHOWN_VOLUMES)}
    keep |= {k for k, r in enumerate(rows) if abs(r["volume_m3"] - taken) < SAME_M3}
    return [rows[k] for k in sorted(keep)]


def stages(found: Design, record: Record) -> str:
    """Every tank with its vessel and mixer."""
    head = [["tank", "set", "liquid", "wide", "deep", "wall", "stays", "dead", "lag", "pumping", "turns", "power"],
            ["", "pH", "m³", "m", "m", "m", "min", "s", "s", "m³/h", "1/min", "kW"]]
    rows = [[s["name"], figure(s["setpoint_ph"], 2), number(s["volume_m3"]), number(s["diameter_m"]),
             number(s["liquid_m"]), number(s["wall_m"]), number(s["residence_min"]), number(s["dead_time_s"]),
             number(s["lag_s"]),
             number(s["pumping_m3_h"]), number(s["turnover_per_min"]),
             f"{_kw(s['power_low_w'])} to {_kw(s['power_high_w'])}"] for s in record["stages"]]
    layout = found.layout
    lines = [sentence(record["stage_choice"]["why"]),
             f"Sized for {shown(layout.peak_m3_h)} m³/h, the largest flow that reaches them; time of stay in the "
             f"table at the mean of {shown(layout.mean_m3_h)} m³/h."]
    if len(layout.stages) > 1 and layout.unequal_words:
        lines.append(sentence(f"volumes: {layout.unequal_words}"))
    aid = record["stage_choice"]["bicarbonate_instead"]
    lines.append(sentence(f"bicarbonate in place of the last tank: {aid}") if aid else "")
    trim, better = record["stage_choice"]["trim_instead"], record["stage_choice"]["tank_or_aid"]
    lines.append(sentence(f"a weaker trim reagent in place of it: {trim}. Of the three: {better}") if trim else "")
    for s in record["stages"]:
        lines += [sentence(s[key]) for key in ("residence_rule", "residence_conflict") if s[key]]
    for s, stage in zip(record["stages"], layout.stages, strict=True):
        lines += [f"{s['name']}, vessel: {s['vessel']}.", f"{s['name']}, mixer: {s['mixer']}.",
                  f"{s['name']}, wall: {baffles(stage.vessel.diameter_m).words}."]
    lines += [f"{sentence(p.words)[:-1]} ({p.told_by})." for p in places()]
    return titled("TANKS", aligned(head, rows), bullets(lines))


def _kw(watt: float) -> str:
    return f"{watt / W_PER_KW:.2g}" if watt < W_PER_KW else shown(watt / W_PER_KW)


def tanks_words(tanks: int) -> str:
    """A number of tanks."""
    return f"{tanks} tank{'' if tanks == 1 else 's'}"


def tanks_asked(opinion: Record) -> str:
    """What a rule asks for, ahead of its words; nothing where it says nothing."""
    if opinion["tanks"] is None:
        return ""
    return f"{'at least ' if opinion['at_least'] else ''}{tanks_words(opinion['tanks'])}; "


def rules_of_thumb(found: Design, record: Record) -> str:
    """What each rule says of the number of tanks, beside what the simulation found for the number taken."""
    choice = record["stage_choice"]
    lines = [f"{o['rule']}: {tanks_asked(o)}{o['words']} [{o['source']}]" for o in choice["rules"]]
    trial = found.trial
    if trial is None:
        proof = "not simulated"
    elif trial.monte is None:
        proof = f"the course simulated {'keeps' if trial.kept else 'breaks'} the time rule"
    else:
        proof = f"{PERCENT * trial.monte.probability:.0f} % of the simulated cases keep the time rule"
    return block("NUMBER OF TANKS BY RULES OF THUMB, and by simulation",
                 [f"Taken: {tanks_words(choice['tanks'])}; {proof}. The design is accepted or not by this, not by "
                  "a rule below.", *lines])


# ---------------------------------------------------------------- feeds


def feeds(record: Record) -> str:
    """Range, resolution and line of every feeder."""
    head = [["tank", "reagent", "least", "most", "feeder", "least", "most", "feeder", "turndown", "needs", "has",
             "line"], ["", "", "eq/h", "eq/h", "eq/h", "L/h", "L/h", "L/h", "", "%", "%", "s"]]
    rows = [[f["tank"], f["reagent"] + (" *" if f["trim_only"] else ""), number(f["least_eq_h"]),
             number(f["largest_eq_h"]), number(f["size_eq_h"]),
             *(_pumped(f[key]) for key in ("least_l_h", "largest_l_h", "size_l_h")),
             f"{f['turndown']:.3g}", _percent(f["resolution_needed"]), _percent(f["resolution_has"]),
             number(f["line_dead_s"])] for f in record["feed"]]
    lines = []
    for f in record["feed"]:
        name = f"{f['tank']}, {f['reagent']}"
        lines += [f"{name}: {sentence(f['verdict'])}" if f["verdict"] else "",
                  f"{name}, split range: {sentence(f['split_range'])}" if f["split_range"] else "",
                  f"{name}, line: {sentence(f['line'])}" if f["line"] else "",
                  f"{name}, kinds of feeder: {'; '.join(f['devices'])}." if not f["trim_only"] else ""]
    lines.append("Needs and has: share of the full rate that the feed must hold and can hold. Line: delay taken in the "
                 "simulation, with carrier water where the bare line is slower than the tank.")
    if any(f["trim_only"] for f in record["feed"]):
        lines.append("* only takes back what the other feed overdoes.")
    return titled("FEEDS", aligned(head, rows, left=(0, 1)), bullets(lines))


def _percent(share: float | None) -> str:
    return "-" if share is None else f"{PERCENT * share:.3g}"

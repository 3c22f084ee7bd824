"""Sections of the page of a neutralization: the report's words, its tables in full."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.side_case import NOTE, SEVERITIES
from aquabuf.report.dose_lines import dropped, figure, sentence
from aquabuf.report.html.common import ROWS
from aquabuf.report.html.parts import Column, Link, bullets, details, paragraph, section, table
from aquabuf.report.tank_blocks import MILLI, PERCENT, SAME_M3, W_PER_KW, number, tanks_asked, tanks_words, united
from aquabuf.report.tank_proof import QUANTILES
from aquabuf.report.tank_scheme import feed_words

__all__ = ["Lines", "alternatives_section", "batch_section", "demand_section", "equalization_section",
           "failures_section", "feeds_section", "reagents_section", "rules_section", "sensitivity_section",
           "side_effects_section", "simulation_section", "storage_section", "stream_section", "tanks_section",
           "title_of", "train_section"]

Lines = Mapping[str, Sequence[str]]  # items of each block of the report by its title
Record = Mapping[str, Any]
Files = frozenset[str]

CHOSEN, TUNING = "Chosen ", ("Controllers: ", "Tuning: ")


def title_of(title: str) -> str:
    """Title of a block of the report as a heading."""
    return title.capitalize()


def _block(lines: Lines, begin: str) -> tuple[str, Sequence[str]]:
    """Heading and items of the block whose title begins so; empty where the report has none."""
    return next(((title_of(title), items) for title, items in lines.items() if title.startswith(begin)), ("", ()))


def _table(titles: Sequence[str], rows: Sequence[Sequence[str]], *, text: Sequence[int] = (0,),
           sentences: Sequence[int] = (), caption: str = "", tones: Sequence[str] = (), sortable: bool = True) -> str:
    """A table of at most ROWS rows without the columns in which no row has anything."""
    if not rows:
        return ""
    (head,), body, kept = dropped([titles], rows)
    columns = [Column(title=title, number=k not in text and k not in sentences, sentence=k in sentences)
               for title, k in zip(head, kept, strict=True)]
    return table(columns, body[:ROWS], caption=caption, tones=tones, sortable=sortable)


def _beside(words: str, file: str, files: Files) -> str:
    """Words that lead to a file beside the page; nothing where it was not written."""
    return paragraph(words, soft=True, link=Link(file, file)) if file in files else ""


def _pumped(l_h: float | None) -> str:
    return "-" if not l_h else number(l_h)


def _range(least: float | None, most: float | None) -> str:
    """Both ends in a cell; a dash where nothing is pumped."""
    return "-" if not most else f"{number(least)} to {number(most)}"


def _money(found: Design) -> str:
    return f"Cost ({found.job.currency + ' ' if found.job.currency else ''}per day)"


# ---------------------------------------------------------------- what is built


def train_section(found: Design, record: Record) -> str:
    """Equalization, tanks, set points and feeds in one table."""
    e = record["equalization"]
    rows = []
    if e["volume_m3"] > 0.0:
        rows.append(["equalization", "-", number(e["volume_m3"]), "-", "-", "-", "none"])
    for s, stage in zip(record["stages"], found.layout.stages, strict=True):
        fed = "; ".join(f"{feed.reagent.name} {feed_words(feed)}" for feed in stage.feeds.values())
        rows.append([s["name"], figure(s["setpoint_ph"], 2), number(s["volume_m3"]), number(s["residence_min"]),
                     number(s["dead_time_s"]), number(s["power_w"] / W_PER_KW), fed])
    window = record["window"]
    rows.append(["leaves", f"{window['low_ph']:g} to {window['high_ph']:g}", "-", "-", "-", "-",
                 found.job.window.source])
    return section("The train", _table(
        ("Tank", "Set point (pH)", "Liquid (m³)", "Stays at mean flow (min)", "Dead time (s)", "Stirrer (kW)",
         "Fed with"), rows, text=(0,), sentences=(6,), sortable=False),
        name="train")


def tanks_section(record: Record, lines: Lines, files: Files) -> str:
    """Vessels and mixers."""
    title, items = _block(lines, "TANKS")
    rows = [[s["name"], number(s["volume_m3"]), number(s["diameter_m"]), number(s["liquid_m"]), number(s["wall_m"]),
             number(s["residence_min"]), number(s["dead_time_s"]), number(s["lag_s"]), number(s["turnover_per_min"]),
             f"{number(s['power_low_w'] / W_PER_KW)} to "
             f"{number(s['power_high_w'] / W_PER_KW)}"] for s in record["stages"]]
    return section(title, _table(
        ("Tank", "Liquid (m³)", "Wide (m)", "Deep (m)", "Wall (m)", "Stays (min)", "Dead time (s)", "Lag (s)",
         "Turnovers (1/min)", "Power (kW)"), rows),
        details("Why so many and so large, vessels, mixers, where things go", bullets(items)),
        _beside("Each tank, every column:", "stages.csv", files), name="tanks") if items else ""


def feeds_section(record: Record, lines: Lines, files: Files) -> str:
    """Range, resolution and line of every feeder; those that do not hold the window first."""
    title, items = _block(lines, "FEEDS")
    found = sorted(record["feed"], key=lambda f: f["holds"] is not False)
    rows = [[f["tank"], f["reagent"] + (" *" if f["trim_only"] else ""),
             _range(f["least_eq_h"], f["largest_eq_h"]), number(f["size_eq_h"]),
             _range(f["least_l_h"], f["largest_l_h"]), _pumped(f["size_l_h"]), f"{f['turndown']:.3g}",
             *("-" if share is None else f"{PERCENT * share:.3g}" for share in (f["resolution_needed"],
                                                                               f["resolution_has"])),
             {True: "yes", False: "NO", None: "-"}[f["holds"]], number(f["line_dead_s"])] for f in found]
    return section(title, _table(
        ("Tank", "Reagent", "Least to most (eq/h)", "Feeder (eq/h)", "Least to most (L/h)", "Feeder (L/h)", "Turndown",
         "Needs (%)", "Has (%)", "Holds the window", "Line (s)"), rows, text=(0, 1, 9),
        tones=["warn" if f["holds"] is False else "" for f in found]), details("Each feeder in words", bullets(items)),
        _beside("Each feeder, every column:", "feed.csv", files), name="feeds") if items else ""


def equalization_section(record: Record, lines: Lines, files: Files) -> str:
    """The tank ahead, and what other volumes would leave."""
    title, items = _block(lines, "EQUALIZATION")
    e = record["equalization"]
    rows = [[f"{'> ' if abs(r['volume_m3'] - e['content_m3']) < SAME_M3 else ''}{number(r['volume_m3'])}",
             number(r["total_m3"]), f"{r['hold_h']:g}",
             "-" if r["sd_share"] is None else f"{PERCENT * r['sd_share']:.0f}", number(MILLI * r["peak_eq_l"]),
             f"{figure(r['ph_low'], 1)} to {figure(r['ph_high'], 1)}", figure(r["flow_peak_factor"], 2),
             f"{PERCENT * r['overflow_share']:.1f}", number(r["saved_eq_d"])] for r in e["volumes"]]
    return section(title, bullets(items), details("What other volumes would leave", _table(
        ("Always full (m³)", "Whole tank (m³)", "Holds (h)", "Swings left (%)", "Largest off (meq/L)",
         "pH that leaves", "Largest flow over mean", "Passes over (%)", "Saved (eq/d)"), rows, sortable=False)),
        _beside("Each volume, every column:", "equalization.csv", files), name="equalization") if items else ""


# ---------------------------------------------------------------- stream and reagents


def stream_section(found: Design, record: Record, lines: Lines) -> str:
    """The wastes and their mean together."""
    title, items = _block(lines, "STREAM")
    rows = [[w["name"], w["known_by"], f"{a.waste.t_c:g}", figure(w["ph"], 2), number(MILLI * w["base_eq_l"])]
            for w, a in zip(record["stream"]["wastes"], found.job.arrivals, strict=True)]
    return section(title, _table(("Waste", "Known by its", "°C", "pH", "Base (meq/L)"), rows, text=(0, 1)),
                   bullets(items), name="stream")


def demand_section(found: Design, record: Record, lines: Lines, files: Files) -> str:
    """Reagent at the least, mean and most, to the set point and both ends of the window."""
    title, items = _block(lines, "REAGENT DEMAND")
    rows = [[d["reagent"] or "-", d["condition"], number(d["flow_m3_h"]), d["aim"], figure(d["ph"], 2),
             number(d["eq_l"]), number(d["kg_h"]), _pumped(d["l_h"]), number(d["cost_per_day"])]
            for d in record["demand"]]
    return section(title, _table(
        ("Reagent", "Stream", "Flow (m³/h)", "Brought to", "pH", "Demand (eq/L)", "Product (kg/h)", "Pumped (L/h)",
         _money(found)), rows, text=(0, 1, 3)), bullets(items),
        _beside("Every column:", "demand.csv", files), name="demand")


def reagents_section(found: Design, record: Record, lines: Lines, files: Files) -> str:
    """The choice, and the reagents side by side."""
    title, items = _block(lines, "REAGENTS COMPARED")
    chosen = [line for line in items if line.startswith(CHOSEN)]
    every = [r for one in record["reagents"]["compared"] for r in one["rows"]]
    rows = [[r["reagent"], "yes" if r["reaches_setpoint"] else "NO", number(r["demand_meq_l"]),
             number(r["product_kg_d"]), number(r["cost_per_day"]), number(r["residence_min"]),
             number(r["gain_ph_per_meq_l"]), number(r["sludge_kg_d"]), figure(r["heat_k"], 2), number(r["co2_kg_d"])]
            for r in every]
    return section(title, bullets(chosen), _table(
        ("Reagent", "Reaches the set point", "Dose (meq/L)", "Product (kg/d)", _money(found),
         "Stays (min)", "Gain (pH per meq/L)", "Sludge (kg/d)", "Heat (K)", "CO2 (kg/d)"), rows, text=(0, 1),
        tones=["" if r["reaches_setpoint"] else "warn" for r in every]),
        bullets(line for line in items if line not in chosen), _beside("Every column:", "reagents.csv", files),
        name="reagents")


# ---------------------------------------------------------------- proof


def simulation_section(record: Record, lines: Lines, files: Files) -> str:
    """Time outside, cases, controllers."""
    title, items = _block(lines, "SIMULATION")
    s = record["simulation"]
    cases = tuned = ""
    if s is not None:
        q = s["quantiles"]
        cases = "" if q is None else _table(
            ("No worse than, in", "Outside (min)", "Longest (min)", "Lowest pH", "Highest pH"),
            [[name, figure(q["outside_min"][k], 1), figure(q["longest_min"][k], 1), figure(q["lowest_ph"][k], 2),
              figure(q["highest_ph"][k], 2)] for k, name in enumerate(QUANTILES)], sortable=False)
        tuned = _table(("Controller", "Gain", "Reset (s)", "Gain margin", "Ultimate period (s)"),
                       [[t["tank"], number(t["gain"]), number(t["reset_s"]), figure(t["gain_margin"], 1),
                         number(t["ultimate_period_s"])] for t in s["tuning"]])
    how = [line for line in items if line.startswith(TUNING)]
    return section(title, bullets(line for line in items if line not in how), cases,
                   details("Controllers and their tuning", bullets(how), tuned),
                   _beside("The course shown:", "simulation.csv", files), _beside("Each case:", "cases.csv", files),
                   name="simulation")


def alternatives_section(record: Record, lines: Lines, files: Files) -> str:
    """Other layouts under the same disturbances."""
    title, items = _block(lines, "OTHER LAYOUTS")
    others = record["alternatives"]
    rows = [[a["change"], f"{a['tanks']}", number(a["equalization_m3"]), number(a["volume_m3"]), f"{a['cases']}",
             f"{PERCENT * a['probability_of_meeting_rule']:.0f} ({PERCENT * a['probability_low']:.0f} to "
             f"{PERCENT * a['probability_high']:.0f})", figure(a["minutes_outside"], 0)] for a in others]
    return section(title, _table(
        ("Layout", "Tanks", "Equalization (m³)", "All tanks (m³)", "Cases", "Keep the rule (%, 95 % interval)",
         "Outside (median min)"), rows, tones=["" if a["accepted"] else "warn" for a in others]),
        bullets(items), _beside("Every column:", "alternatives.csv", files), name="alternatives") if items else ""


def failures_section(record: Record, lines: Lines, files: Files) -> str:
    """Failures, the one that leaves the window soonest first."""
    title, items = _block(lines, "FAILURES")
    faults = [] if record["simulation"] is None else record["simulation"]["faults"]
    found = sorted(faults, key=lambda f: float("inf") if f["minutes_to_leave"] is None else f["minutes_to_leave"])
    rows = [[f["tank"], f["kind"], "stays in" if f["minutes_to_leave"] is None else f"{f['minutes_to_leave']:.0f}",
             f"{f['minutes_outside']:.0f}", figure(f["lowest_ph"], 1), figure(f["highest_ph"], 1)] for f in found]
    return section(title, _table(
        ("Tank", "Failure", "Leaves the window after (min)", "Outside (min)", "Lowest pH", "Highest pH"), rows,
        text=(0, 1), tones=["" if f["minutes_to_leave"] is None else "warn" for f in found]), bullets(items),
        _beside("Every column:", "faults.csv", files), name="failures") if items else ""


def side_effects_section(record: Record, lines: Lines, files: Files) -> str:
    """The gravest first, with words, rule and source; then those to know."""
    title, items = _block(lines, "SIDE EFFECTS")
    grave = sorted((e for e in record["side_effects"] if e["severity"] != NOTE),
                   key=lambda e: -SEVERITIES.index(e["severity"]))
    signs = tuple(f"{severity.upper()}, " for severity in SEVERITIES if severity != NOTE)
    rows = [[f"{e['severity'].upper()}: {e['name']}", e["reagent"], united(e["value"], _unit(e["unit"])),
             sentence(e["words"]), sentence(e["rule"]) if e["rule"] else "-", e["source"]] for e in grave]
    notes = [[e["name"], e["reagent"], united(e["value"], _unit(e["unit"])),
              sentence(e["words"]) if e["words"] else "-"]
             for e in record["side_effects"] if e["severity"] == NOTE and e["value"] is not None]
    return section(title, _table(
        ("Effect", "With", "Value", "What it means", "Rule", "Source"), rows, text=(0, 1), sentences=(3, 4, 5),
        tones=["stop" if e["severity"] == SEVERITIES[-1] else "warn" for e in grave]),
        bullets(line for line in items if not line.startswith(signs)),
        details("Other effects", _table(("Effect", "With", "Value", "In words"), notes, text=(0, 1), sentences=(3,))),
        _beside("Every column:", "side_effects.csv", files), name="side-effects")


def _unit(unit: str) -> str:
    return unit.replace("m3", "m³")


def rules_section(record: Record, lines: Lines, files: Files) -> str:
    """What each rule of thumb asks for beside what the simulation found."""
    title, items = _block(lines, "NUMBER OF TANKS")
    choice = record["stage_choice"]
    rows = [[o["rule"], tanks_asked(o).rstrip("; ") or "-", sentence(o["words"]), o["source"]] for o in choice["rules"]]
    rows.append(["taken", tanks_words(choice["tanks"]), sentence(choice["why"]), "this design"])
    return section(title, bullets(items[:1]), _table(
        ("Rule", "Asks for", "Because", "Source"), rows, text=(0, 1), sentences=(2, 3),
        tones=["warn" if o["tanks"] is not None and o["tanks"] > choice["tanks"] else "" for o in choice["rules"]]),
        _beside("Every rule that the design shows, and whether it keeps it:", "rules.csv", files),
        name="rules") if items else ""


# ---------------------------------------------------------------- the rest


def storage_section(lines: Lines, files: Files) -> str:
    """Stores, what must be held back, materials and order."""
    title, items = _block(lines, "STORAGE")
    return section(title, bullets(items), _beside("Every column:", "storage.csv", files),
                   name="storage") if items else ""


def batch_section(lines: Lines) -> str:
    """Batch tanks instead of continuous flow."""
    title, items = _block(lines, "BATCH")
    return section(title, bullets(items), name="batch") if items else ""


def sensitivity_section(record: Record, lines: Lines, files: Files) -> str:
    """One change at a time, what takes most of the tolerance first."""
    title = next((title_of(t) for t in lines if t.startswith("SENSITIVITY")), "")
    found = sorted(record["sensitivity"], key=lambda r: float("inf") if r["tolerance_ratio"] is None else
                   r["tolerance_ratio"])
    rows = [[r["change"], number(MILLI * r["demand_eq_l"]), figure(r["demand_ratio"], 3),
             number(MILLI * r["tolerance_eq_l"]), figure(r["tolerance_ratio"], 3)] for r in found]
    return section(title, _table(
        ("One change", "Demand (meq/L)", "Over design", "Tolerance (meq/L)", "Over design"), rows),
        _beside("Every column:", "sensitivity.csv", files), name="sensitivity")

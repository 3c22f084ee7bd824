"""Tables of a design, by the name of their file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.tank.basis import basis_of
from aquabuf.assess.tank.demand import demand_eq_l
from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.feed import turndown_words
from aquabuf.assess.tank.job import Job
from aquabuf.assess.tank.mixing import places
from aquabuf.assess.tank.monte import MonteCarlo
from aquabuf.assess.tank.rules import rules_in
from aquabuf.assess.tank.trial import ENOUGH, Trial
from aquabuf.report.dose_lines import aligned, bullet, figure, titled
from aquabuf.report.tank_blocks import MILLI, number, tanks_asked

__all__ = ["TABLES", "curve_log", "rule_rows", "tank_tables"]

TABLES = ("curve.csv", "demand.csv", "reagents.csv", "equalization.csv", "stages.csv", "feed.csv", "simulation.csv",
          "cases.csv", "alternatives.csv", "faults.csv", "side_effects.csv", "sensitivity.csv", "storage.csv",
          "rules.csv")
LOG_STEP, LOG_AROUND = 0.25, 1.0  # pH of the printed curve, and how far it runs past waste and window
FLAT = str | int | float | bool | None


def tank_tables(found: Design, record: Mapping[str, Any]) -> dict[str, pd.DataFrame]:
    """Every table that has something to say. `record` : the design as `design_record` gives it."""
    trial, simulated = found.trial, record["simulation"]
    tables = {
        "curve.csv": found.curve,
        "demand.csv": _frame(record["demand"]),
        "reagents.csv": _frame([row for one in record["reagents"]["compared"] for row in one["rows"]]),
        "equalization.csv": _frame(record["equalization"]["volumes"]),
        "stages.csv": _frame(record["stages"]),
        "feed.csv": _frame([{**row, "devices": "; ".join(row["devices"])} for row in record["feed"]]),
        "simulation.csv": pd.DataFrame() if trial is None else _course(trial),
        "cases.csv": pd.DataFrame() if trial is None or trial.monte is None else _cases(trial.monte),
        "alternatives.csv": _frame(record["alternatives"]),
        "faults.csv": _frame([] if simulated is None else simulated["faults"]),
        "side_effects.csv": _frame(record["side_effects"]),
        "sensitivity.csv": _frame(record["sensitivity"]),
        "storage.csv": _storage(record["storage"]),
        "rules.csv": _frame(rule_rows(found, record)),
    }
    return {name: table for name, table in tables.items() if len(table)}


def _frame(rows: Sequence[Mapping[str, Any]]) -> pd.DataFrame:
    """Rows as a table; a column of numbers stays one where some are not known."""
    if not rows:
        return pd.DataFrame()
    return pd.DataFrame(rows).astype({name: float for name in rows[0] if _is_number(rows, name)})


def _is_number(rows: Sequence[Mapping[str, Any]], name: str) -> bool:
    values = [r[name] for r in rows if r[name] is not None]
    return bool(values) and all(isinstance(v, float) for v in values)


def _course(trial: Trial) -> pd.DataFrame:
    """The course shown: pH and feed of each tank, and the inflow at the time, which lasts until its next value."""
    c, inflow = trial.course, trial.inflow
    at = np.maximum(np.searchsorted(inflow.time_s, c.time_s, side="right") - 1, 0)
    columns = {"time_s": c.time_s}
    columns |= {f"ph_{k + 1}": ph for k, ph in enumerate(c.ph[:, :, 0])}
    columns |= {f"reagent_eq_h_{k + 1}": fed for k, fed in enumerate(c.reagent_eq_h[:, :, 0])}
    return pd.DataFrame(columns | {"flow_m3_h": inflow.flow_m3_h[at, 0], "base_eq_l": inflow.base_eq_l[at, 0]})


def _cases(m: MonteCarlo) -> pd.DataFrame:
    return pd.DataFrame({
        "case": np.arange(1, m.meets.size + 1), "meets": m.meets, "outside_min": m.outside_min,
        "longest_min": m.longest_min, "lowest_ph": m.lowest_ph, "highest_ph": m.highest_ph, "strength": m.strength,
        "buffer": m.buffer})


def _storage(record: Mapping[str, Any]) -> pd.DataFrame:
    """Stores and containments below each other; `item` says which a row is."""
    rows = [{"item": "store", "name": s["reagent"], "days": s["days"], "kg": s["kg"], "volume_m3": s["volume_m3"],
             "chosen": None, "words": s["words"]} for s in record["stores"]]
    rows += [{"item": "containment", "name": c["rule"], "days": None, "kg": None, "volume_m3": c["volume_m3"],
              "chosen": c["chosen"], "words": c["words"]} for c in record["containment"]]
    return _frame(rows)


# ---------------------------------------------------------------- rules


def rule_rows(found: Design, record: Mapping[str, Any]) -> list[dict[str, Any]]:
    """Every rule that the design shows: what about, its name, what it says, whether the design keeps it, its source.

    keeps : None where a rule only tells, or says nothing here.
    """
    rows: list[dict[str, Any]] = []

    def add(about: str, rule: str, says: str, source: str, keeps: bool | None = None) -> None:
        rows.append({"about": about, "rule": rule, "says": says, "keeps": keeps, "source": source})

    tanks = record["stage_choice"]["tanks"]
    for o in record["stage_choice"]["rules"]:
        add("number of tanks", o["rule"], f"{tanks_asked(o)}{o['words']}", o["source"],
            None if o["tanks"] is None else tanks >= o["tanks"])
    for stage in found.layout.stages:
        r = stage.residence
        for told in r.rules:
            add(f"residence time, {stage.name}", told.words or r.words, _span(told.low, told.high, told.unit),
                f"{told.source} ({told.mark})")
        for s in stage.mixer.standings:
            add(f"mixing, {stage.name}", s.rule.key, s.words, s.source, s.kept)
        for p in stage.mixer.powers:
            add(f"mixer power, {stage.name}", p.rule.key, p.words, p.rule.told_by,
                bool(p.low_w <= stage.mixer.power_w <= p.high_w))
        for feed in stage.feeds.values():
            for device, serves, _ in turndown_words(feed.need):
                add(f"feeder, {stage.name}, {feed.reagent.name}", device.key,
                    f"turndown {device.range_words}, asked for {feed.need.device_turndown:.3g}", device.told_by, serves)
    for place in places():
        add("places in a tank", place.key, place.words, place.told_by)
    for held in found.containments:
        add("containment", held.rule.key, held.words.rpartition("; ")[0], held.rule.told_by, held.chosen or None)
    for days in rules_in("supply"):
        add("storage", days.key, f"{days.value:g} d: {days.words}", days.told_by)
    for reason in found.batch_reasons:
        add("batch instead", reason.name, f"{reason.words} ({reason.quantity} {reason.value:.3g}, rule "
            f"{reason.operator} {reason.limit:g} {reason.unit})", reason.source, reason.holds)
    add("acceptance", "share of cases", f"at least {100.0 * ENOUGH:.0f} % of the simulated cases keep the time rule",
        "practice, no source", None if found.trial is None or found.trial.monte is None else found.trial.accepted)
    for e in record["side_effects"]:
        if e["rule"]:
            add(f"side effect, {e['reagent']}", e["name"], e["rule"], e["source"])
    return list({tuple(row.items()): row for row in rows}.values())


def _span(low: float, high: float, unit: str) -> str:
    """A range of which either end may be missing."""
    known = [f"{v:g}" for v in dict.fromkeys((low, high)) if np.isfinite(v)]
    begin = "at most " if not np.isfinite(low) else "at least " if not np.isfinite(high) else ""
    return f"{begin}{' to '.join(known)} {unit}"


# ---------------------------------------------------------------- the curve for the log


def curve_log(job: Job) -> str:
    """The titration curve of the mean waste for the log: reagent to each pH, buffer intensity, gain."""
    basis = basis_of(job)
    readout, mean = basis.chem.readout, basis.mean
    start = float(readout.ph(mean.base_eq_l, mean.amounts))
    ends = (start, job.window.low, job.window.high)
    first, last = max(min(ends) - LOG_AROUND, 0.0), min(max(ends) + LOG_AROUND, 14.0)
    ph = np.arange(np.floor(first / LOG_STEP), np.ceil(last / LOG_STEP) + 1.0) * LOG_STEP
    c = mean.amounts[:, None]
    strong, buffer = readout.base_at(ph, c) - mean.base_eq_l, readout.buffer_at(ph, c)
    carbon = basis.chem.carbon_carrier
    fed = {r.name: MILLI * r.kg_per_eq * demand_eq_l(readout, mean.base_eq_l, c, ph, r, carbon_carrier=carbon)
           for r in basis.chosen.values()}
    head = [["", "pH", "base", *fed, "buffer", "gain"],
            ["", "", "meq/L", *("kg/m³" for _ in fed), "meq/L per pH", "pH per meq/L"]]
    rows = [["*" if job.window.low <= x <= job.window.high else "", f"{x:.2f}", figure(MILLI * y, 3),
             *(figure(float(kg[k]), 3) for kg in fed.values()), number(MILLI * float(b)),
             number(1.0 / (MILLI * float(b)))] for k, (x, y, b) in enumerate(zip(ph, strong, buffer, strict=True))]
    return titled(
        f"{job.name}: titration curve of the mean waste, pH {start:.2f} as it comes, {basis.chem.t_c:.1f} °C",
        aligned(head, rows),
        bullet("* within the window of the discharge. Base: strong base per liter of waste to reach the pH; negative: "
               "acid. Reagents as delivered; - where the pH lies on their other side or out of reach.",
               mark="  ")) + "\n"

"""The answer to a plan as plain numbers, words, lists and dictionaries with documented keys: answer.json.

Keys end in their unit. A value that is not known is None. Doses are of the product as delivered (`_product`) and of
its active substance (`_pure`); `dose_meq_l` is the alkalinity that a dose adds, negative for acids.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from aquabuf.assess.plant.answer import Answer, TargetLine
from aquabuf.assess.plant.drift import UnderError, UnderFeedError, worst_of
from aquabuf.assess.plant.faults import Fault
from aquabuf.assess.plant.feed import HOURS_PER_DAY, FeedRate, Setting, in_us
from aquabuf.assess.plant.feed_lines import FeedLine, StoreLine
from aquabuf.assess.plant.held import held_words
from aquabuf.assess.plant.hold import Buffering, buffer_words
from aquabuf.assess.plant.indices import langelier, langelier_words, potential_words
from aquabuf.assess.plant.quantities import in_unit, measured, plant_quantities
from aquabuf.assess.plant.rules import Judged
from aquabuf.assess.plant.storage import Verdict
from aquabuf.assess.plant.stream import Stream

if TYPE_CHECKING:
    from aquabuf.assess.plant.season import Season

__all__ = ["RAW_WATER", "answer_record", "buffer_rows", "found_of", "limit_rows", "step_rows", "warning_words"]

RAW_WATER = "raw water"
FIGURES = 12  # significant; more would be rounding
ROUNDING = 1e-10  # below every figure of a water, a dose or a cost


def answer_record(answer: Answer) -> dict[str, Any]:
    """Everything that a plan is answered with, ready for JSON; same answer, same record."""
    plan = answer.plan
    record = {
        "name": plan.name, "use": plan.use, "date": plan.date, "note": plan.note,
        "flow": {"now_m3_d": plan.flow.now_m3_d, "now_mgd": in_us(plan.flow.now_m3_d, "m³/d")[0],
                 "least_m3_d": plan.flow.least_m3_d, "largest_m3_d": plan.flow.most_m3_d},
        "raw_water": {"from": plan.raw.words, "solved_from": answer.pair},
        "feasible": answer.feasible, "reason": answer.reason,
        "doses": [_dose(line) for line in answer.feeds],
        "steps": step_rows(answer),
        "targets": [_target(t) for t in answer.targets],
        "limits": limit_rows(answer.limits),
        "findings": _findings(answer),
        "warnings": warning_words(answer),
        "notes": [f"{name}: {f.words}" for name, f in found_of(answer, "note")],
        "cautions": answer.cautions, "assumptions": answer.assumptions,
        "saturation": _saturation(answer.train.final),
        "store": [_store(line) for line in answer.store],
        "curves": [_curve(c) for c in answer.curves],
        "control_ranges": [{**_rows(r.table())[0], "words": r.words()} for r in answer.ranges],
        "faults": [_fault(f) for f in answer.faults], "fault_notes": answer.fault_words,
        "error": {"of_readings": _reading_error(answer.readings_error), "of_feeds": _feed_error(answer.feed_error)},
        "hold": None if answer.hold is None else {
            "words": held_words(answer.hold.held), "buffers": buffer_rows(answer.hold.buffers)},
        "season": _season(answer.season),
        "digester": answer.digester_words or None,
    }
    return _plain(record)


def _plain(value: Any) -> Any:
    """Numbers, text, lists and dictionaries only; None for what is no number."""
    if isinstance(value, Mapping):
        return {str(k): _plain(v) for k, v in value.items()}
    if isinstance(value, str | bool | int) or value is None:
        return value
    if isinstance(value, np.ndarray) and value.ndim == 0:
        return _plain(value.item())
    if isinstance(value, Iterable):
        return [_plain(v) for v in value]
    if isinstance(value, np.bool_ | np.integer):
        return value.item()
    number = float(value)
    if not math.isfinite(number):
        return None
    return float(f"{number:.{FIGURES}g}") if abs(number) >= ROUNDING else 0.0


def _rows(table: pd.DataFrame | None) -> list[dict[str, Any]]:
    """Rows of a table; none where there is no table."""
    return [] if table is None else [{str(k): v for k, v in row.items() if k != "row"}
                                     for row in table.to_dict("records")]


# ---------------------------------------------------------------- what to set


def _dose(line: FeedLine) -> dict[str, Any]:
    p = line.product
    return {
        "product": p.name, "step": line.step, "substance": p.product.name, "formula": p.product.formula,
        "strength": p.strength, "strength_from": p.strength_from, "density_kg_l": p.density_kg_l,
        "dose_mg_l_product": line.mg_l_product, "dose_mg_l_pure": line.mg_l_pure, "dose_meq_l": line.meq_l,
        "feed": _rate(line.rate) | _setting(line.setting) | {
            "words": line.setting_words(), "day_tank": [_verdict(v) for v in line.tank],
            "at_flows": [{"flow": name} | _rate(rate) | _setting(setting) for name, rate, setting in line.at_flows]},
    }


def _rate(rate: FeedRate) -> dict[str, Any]:
    """Rates of one water, metric and US; those of a pump are None where nothing is pumped."""
    metric = {"pure_kg_d": rate.pure_kg_d, "product_kg_d": rate.product_kg_d, "product_kg_h": rate.product_kg_h,
              "l_h": rate.l_h, "l_d": HOURS_PER_DAY * rate.l_h, "ml_min": rate.ml_min}
    return {"flow_m3_d": rate.flow_m3_d[0], "moved": rate.moved} | {
        name: v[0] for name, v in (metric | rate.in_us()).items()}


def _setting(setting: Setting | None) -> dict[str, Any]:
    if setting is None:
        return {"machine": None, "setting_percent": None, "setting_status": None}
    return {"machine": setting.reach.owner, "setting_percent": setting.setting_pct[0],
            "setting_status": setting.status[0]}


def _verdict(v: Verdict) -> dict[str, Any]:
    return {"quantity": v.rule.quantity, "value": v.value[0], "unit": v.rule.unit, "operator": v.rule.operator,
            "limit": v.rule.limit, "kept": v.met[0] if v.judged[0] else None, "next_step": v.rule.remedy,
            "source": v.rule.source}


def _store(line: StoreLine) -> dict[str, Any]:
    costs = {} if line.cost is None else {
        "currency": line.cost.currency, "cost_per_day": line.cost.per_day[0], "cost_per_month": line.cost.per_month[0],
        "cost_per_1000_m3": line.cost.per_1000_m3[0], "cost_per_million_gallons": line.cost.per_million_gal[0]}
    due = {} if line.order is None else {
        "order_at_kg": line.order.at_kg[0], "order_in_days": line.order.days[0], "order_words": line.order.words()}
    return {
        "product": line.product.name, "use_kg_d": line.kg_d, "use_lb_d": in_us(line.kg_d, "kg/d")[0],
        "use_kg_month": line.kg_month, "use_lb_month": in_us(line.kg_month, "kg")[0], "stock_days": line.stock_days,
        **due, **costs, "store_words": line.silo_words, "delivery_words": line.delivery_words}


# ---------------------------------------------------------------- the water


def step_rows(answer: Answer) -> list[dict[str, Any]]:
    """The raw water and the water after every step, in the columns of the table of quantities."""
    passed = answer.train.passed
    streams = [answer.train.raw, *(p.after for p in passed)]
    names = [(RAW_WATER, RAW_WATER), *((p.step.name, p.step.kind) for p in passed)]
    columns: dict[str, Any] = {"temperature_c": [s.t_c[0] for s in streams]}
    each = [measured(s, plant_quantities()) for s in streams]
    for name, q in plant_quantities().items():
        columns[q.column] = [float(in_unit(q, v[name])[0]) for v in each]
    return [{"name": name, "kind": kind, **{column: v[i] for column, v in columns.items()}}
            for i, (name, kind) in enumerate(names)]


def _saturation(water: Stream) -> dict[str, Any]:
    """Saturation of the last water by full speciation and by the simplified table, never a bare sign."""
    found = langelier(water.water())
    potential = float(measured(water, ["ccpp"])["ccpp"][0])
    return {"si_calcite": found.full_index[0], "ph_saturation": found.full_ph_saturation[0],
            "si_by_table": found.index[0], "words": langelier_words(found), "ccpp_words": potential_words(potential)}


def _target(t: TargetLine) -> dict[str, Any]:
    q = t.target.quantity
    low, high, reached = (float(in_unit(q, v)) for v in (t.target.low, t.target.high, t.reached))
    return {"step": t.step, "quantity": q.name, "wanted": t.target.words, "wanted_low": low, "wanted_high": high,
            "reached": reached, "unit": q.unit, "met": t.met}


def limit_rows(limits: Sequence[Judged]) -> list[dict[str, Any]]:
    """Every rule with the value it was held against and where it is from."""
    return [{"name": j.limit.name, "rule": j.limit.rule(), "quantity": j.limit.quantity, "value": j.value,
             "unit": j.limit.unit, "broken": j.broken, "words": j.limit.words, "next_step": j.limit.next_step,
             "source": j.limit.source} for j in limits]


# ---------------------------------------------------------------- findings


def found_of(answer: Answer, severity: str) -> list[tuple[str, Any]]:
    """Findings of one severity: of the steps by their name, then of the guard rails."""
    guards = [("guard rails", f) for f in answer.guards if f.severity == severity]
    return [*answer.train.findings(severity), *guards]


def _findings(answer: Answer) -> list[dict[str, Any]]:
    return [{"severity": severity, "step": name, "words": f.words, "rule": f.rule, "next_step": f.next_step}
            for severity in ("stop", "warning", "note") for name, f in found_of(answer, severity)]


def warning_words(answer: Answer) -> list[str]:
    """Warnings as sentences with their rule and next step: of the steps, of the rules for the water, of the plan."""
    out = [f"{name}: {f.words}{_rule(f.rule)}{_next(f.next_step)}" for severity in ("stop", "warning")
           for name, f in found_of(answer, severity)]
    out += [f"{j.limit.name}: {j.limit.words} ({j.limit.rule()}, found {_figure(j.value)}; {j.limit.source})"
            f"{_next(j.limit.next_step)}" for j in answer.limits if j.broken]
    out += [words for line in answer.feeds for words in _feed_warnings(line)]
    return [*out, *answer.plan.notes]


def _feed_warnings(line: FeedLine) -> list[str]:
    """A machine that cannot give the dose, and a day tank that breaks a rule."""
    out = [f"{line.product.name}: {line.setting_words()}"] if line.out_of_reach else []
    return out + [f"{line.product.name}, day tank: {v.words()}" for v in line.tank if v.judged[0] and not v.met[0]]


def _figure(value: float) -> str:
    return f"{value:.4g}" if math.isfinite(value) else "no figure"


def _rule(text: str) -> str:
    return f" ({text})" if text else ""


def _next(text: str) -> str:
    return f". Next: {text}" if text else ""


# ---------------------------------------------------------------- what would upset it


def _curve(c: Any) -> dict[str, Any]:
    names = ("step", "product", "wanted_mg_l", "wanted_ph", "slope_ph_per_mg_l", "up_mg_l", "down_mg_l", "up_percent",
             "down_percent", "weakest_low_mg_l", "weakest_high_mg_l", "weakest_ph")
    return {name: getattr(c, name) for name in names} | {"words": c.words(), "rows": _rows(c.table)}


def _fault(f: Fault) -> dict[str, Any]:
    mg_l = f.product.mg_l_product
    return {"product": f.product.name, "step": f.step, "case": f.case, "hours": f.hours,
            "dose_mg_l_product": mg_l(f.dose_mol_l)[0], "wanted_mg_l_product": mg_l(f.wanted_mol_l)[0],
            "ph_behind": f.ph_behind[0], "ph_final": f.ph_final[0], "ph_wanted": f.ph_wanted[0],
            "volume_m3": f.volume_m3[0], "excess_kg": f.excess_kg[0], "passes": [x.name for x in f.levels()],
            "words": f.words()}


def _reading_error(e: UnderError | None) -> dict[str, Any] | None:
    return None if e is None else {
        "draws": e.draws, "seed": e.seed, "words": worst_of(e), "doses": _rows(e.doses), "windows": _rows(e.windows),
        "causes": _rows(e.causes)}


def _feed_error(e: UnderFeedError | None) -> dict[str, Any] | None:
    return None if e is None else {
        "draws": e.draws, "seed": e.seed, "relative_u": e.relative_u, "words": worst_of(e),
        "windows": _rows(e.windows), "windows_of_each": _rows(e.each), "causes": _rows(e.causes)}


def buffer_rows(buffers: Sequence[Buffering]) -> list[dict[str, Any]]:
    """Each buffer pair with what it takes, best first."""
    return [{
        "pair": b.pair.label, "usable": b.usable[0], "permitted": b.permitted, "in_range": b.in_range[0],
        "pka": b.pka[0], "outside_ph": b.outside_ph[0],
        "acid_reagent": b.pair.acid_reagent.name, "acid_mg_l_pure": _mg_l(b.acid_mol_l, b.pair.acid_reagent),
        "base_reagent": b.pair.base_reagent.name, "base_mg_l_pure": _mg_l(b.base_mol_l, b.pair.base_reagent),
        "total_mmol_l": 1e3 * np.ravel(b.total_mol_l)[0], "words": buffer_words(b), "source": b.pair.source,
    } for b in buffers]


def _mg_l(mol_l: Any, reagent: Any) -> float:
    return float(1e3 * reagent.molar_mass_g * np.ravel(mol_l)[0])


def _season(s: Season | None) -> dict[str, Any] | None:
    """The summary; the rows are a table of their own."""
    return None if s is None else {
        "rows": int(s.status.size), "missed_percent": 100.0 * s.share_missed, "first_reason": s.first_reason,
        "words": s.words(), "doses": _rows(s.doses), "targets": _rows(s.targets)}

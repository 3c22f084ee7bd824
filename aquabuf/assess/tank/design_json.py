"""The design as plain numbers under documented keys, for other programs; nan and infinity are null."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numpy as np

from aquabuf.assess.tank.aids import aids_words
from aquabuf.assess.tank.basis import Need
from aquabuf.assess.tank.demand import Demand
from aquabuf.assess.tank.design import Design
from aquabuf.assess.tank.known import Known
from aquabuf.assess.tank.layout import Stage, StageFeed
from aquabuf.assess.tank.trial import Trial

__all__ = ["design_record"]


def design_record(design: Design) -> dict[str, Any]:
    """All of a design. Keys are described in docs/tank.md and stay as they are."""
    record = {
        "name": design.job.name, "accepted": design.accepted, "verdict": design.verdict, "stops": list(design.stops),
        "stream": _stream(design), "aim_ph": design.basis.aim_ph, "aim_why": design.basis.aim_why,
        "demand": [_demand(d) for d in design.basis.demands], "need": [_need(n) for n in design.layout.needs.values()],
        "reagents": _reagents(design), "window": _window(design), "equalization": _equalization(design),
        "stage_choice": _choice(design), "stages": [_stage(s, design.layout.mean_m3_h) for s in design.layout.stages],
        "feed": _feed(design), "simulation": None if design.trial is None else _simulation(design.trial, design),
        "side_effects": _side_effects(design),
        "storage": _storage(design), "batch": _batch(design), "sensitivity": design.sensitivity.to_dict("records"),
        "alternatives": [{"change": a.words, "tanks": a.tanks, "equalization_m3": a.equalization_m3,
                          "volume_m3": a.volume_m3, "cases": a.cases, "probability_of_meeting_rule": a.probability,
                          "probability_low": a.low, "probability_high": a.high, "minutes_outside": a.outside_min,
                          "accepted": a.accepted} for a in design.alternatives],
        "assumptions": list(design.assumptions), "warnings": list(design.warnings), "cautions": list(design.cautions),
    }
    return _plain(record)


def _plain(value: Any) -> Any:
    """Without arrays, and with null for what is no number."""
    if isinstance(value, Mapping):
        return {str(k): _plain(v) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(v) for v in value]
    if isinstance(value, np.generic | np.ndarray) and np.ndim(value) == 0:
        value = value.item()
    if isinstance(value, np.ndarray):
        return [_plain(v) for v in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value


def _stream(design: Design) -> dict[str, Any]:
    chem, mean = design.basis.chem, design.basis.mean
    wastes = [{"name": w.name, "base_eq_l": b, "ph": p,
               "known_by": "titration" if w.curve is not None else "composition"}
              for w, b, p in zip(chem.wastes, chem.base_eq_l, chem.ph, strict=True)]
    return {"wastes": wastes, "known": [_known(k) for k in design.known], "temperature_c": chem.t_c,
            "mean_flow_m3_h": mean.flow_m3_h, "mean_base_eq_l": mean.base_eq_l,
            "mean_ph": chem.readout.ph(mean.base_eq_l, mean.amounts), "course": design.basis.course.source}


def _known(k: Known) -> dict[str, Any]:
    s = k.spectrum
    buffers = [] if s is None else [{"pk": pk, "u_pk": u_pk, "mol_l": mol, "u_mol_l": u}
                                    for pk, u_pk, mol, u in zip(s.pk, s.u_pk, s.mol_l, s.u_mol_l, strict=True)]
    return {"name": k.waste, "buffers": buffers, "carbon_mol_l": None if s is None else s.carbon_mol_l,
            "u_carbon_mol_l": None if s is None else s.u_carbon_mol_l, "acidity_eq_l": k.acidity_eq_l,
            "words": list(k.words)}


def _demand(d: Demand) -> dict[str, Any]:
    return {"reagent": None if d.reagent is None else d.reagent.name,
            "kind": None if d.reagent is None else d.reagent.kind, "condition": d.load.name, "aim": d.aim.name,
            "ph": d.aim.ph, "flow_m3_h": d.load.flow_m3_h, "eq_l": d.eq_l, "kg_h": d.product_kg_h, "l_h": d.fed_l_h,
            "cost_per_day": d.cost_d, "words": d.words}


def _need(n: Need) -> dict[str, Any]:
    return {"kind": n.kind, "least_eq_h": n.least_eq_h, "mean_eq_h": n.mean_eq_h, "most_eq_h": n.most_eq_h}


def _reagents(design: Design) -> dict[str, Any]:
    basis = design.basis
    return {"chosen": {kind: r.name for kind, r in basis.chosen.items()},
            "compared": [{"why": c.why, "rows": c.table().to_dict("records")} for c in basis.comparisons.values()]}


def _window(design: Design) -> dict[str, Any]:
    f = design.basis.fit
    return {"low_ph": f.low_ph, "high_ph": f.high_ph, "setpoint_ph": f.setpoint_ph, "demand_eq_l": f.demand_eq_l,
            "tolerance_eq_l": f.tolerance_eq_l, "share_of_demand": f.share_of_demand, "low_share": f.low_share,
            "high_share": f.high_share, "buffer_eq_l_ph": f.buffer_eq_l_ph, "gain_ph_per_eq_l": f.gain_ph_per_eq_l,
            "steepest_ph": f.steepest_ph, "steepest_gain_ph_per_eq_l": f.steepest_gain_ph_per_eq_l,
            "halving_ph": f.halving_ph, "demand_over_ph": f.demand_over_ph}


def _equalization(design: Design) -> dict[str, Any]:
    e = design.layout.equalization
    return {"volume_m3": e.volume_m3, "content_m3": e.content_m3, "flow_m3": e.flow_m3, "rule": e.words,
            "draw_m3_h": e.draw_m3_h, "saved_eq_d": e.saved_eq_d,
            "volumes": [] if e.table is None else e.table.to_dict("records")}


def _choice(design: Design) -> dict[str, Any]:
    c, aid, trim = design.layout.choice, design.layout.aid, design.layout.trim
    return {"tanks": c.tanks, "why": c.words, "reaches": c.reaches, "left_eq_l": c.left_eq_l,
            "tolerance_eq_l": c.tolerance_eq_l, "bicarbonate_instead": None if aid is None else aid.words,
            "trim_instead": None if trim is None else trim.words,
            "tank_or_aid": None if trim is None else aids_words(aid, trim),
            "rules": [{"rule": o.rule.key, "tanks": o.tanks or None, "at_least": o.at_least, "words": o.words,
                       "source": o.source} for o in c.opinions]}


def _stage(s: Stage, mean_m3_h: float) -> dict[str, Any]:
    return {"name": s.name, "volume_m3": s.volume_m3, "residence_min": s.residence_min(mean_m3_h),
            "design_residence_min": s.residence.minutes, "residence_rule": s.residence.words,
            "residence_conflict": s.residence.conflict, "setpoint_ph": s.setpoint_ph, "dead_time_s": s.mixer.dead_s,
            "lag_s": s.mixer.lag_s, "power_w": s.mixer.power_w, "power_low_w": s.mixer.power_low_w,
            "power_high_w": s.mixer.power_high_w, "pumping_m3_h": s.mixer.pumping_m3_h,
            "turnover_per_min": s.mixer.turnover_per_min, "diameter_m": s.vessel.diameter_m,
            "liquid_m": s.vessel.liquid_m, "wall_m": s.vessel.wall_m, "vessel": s.vessel.words, "mixer": s.mixer.words}


def _feed(design: Design) -> list[dict[str, Any]]:
    return [_feed_row(s, kind, f) for s in design.layout.stages for kind, f in s.feeds.items()]


def _feed_row(stage: Stage, kind: str, f: StageFeed) -> dict[str, Any]:
    a = f.accuracy
    return {"tank": stage.name, "kind": kind, "reagent": f.reagent.name, "trim_only": f.trim,
            "least_eq_h": f.need.least_eq_h, "largest_eq_h": f.need.largest_eq_h, "size_eq_h": f.need.size_eq_h,
            "least_l_h": f.need.least_l_h, "largest_l_h": f.need.largest_l_h, "size_l_h": f.need.size_l_h,
            "turndown": f.need.device_turndown, "resolution_needed": None if a is None else a.needed,
            "resolution_has": None if a is None else a.has, "holds": None if a is None else a.holds,
            "verdict": "" if a is None else a.words, "judged_at_m3_h": f.judged_m3_h,
            "split_range": None if f.split is None else f.split.words,
            "line_dead_s": f.line_s, "line": "" if f.line is None else f.line.words, "devices": list(f.devices)}


def _simulation(t: Trial, design: Design) -> dict[str, Any]:
    c, m = t.course, t.monte
    window = design.job.window
    low, high = float(c.lowest_ph[0]), float(c.highest_ph[0])
    worst = low if window.low - low > high - window.high else high
    return {
        "days": c.simulated_min / 1440.0, "step_s": t.step_s, "minutes_outside": c.outside_min[0],
        "percent_outside": 100.0 * c.outside_min[0] / c.simulated_min, "longest_excursion_min": c.longest_min[0],
        "worst_ph": worst, "lowest_ph": low, "highest_ph": high, "rule": t.rule.words(c.simulated_min),
        "keeps_rule": t.kept,
        "balance_error": float(np.abs(c.balance_error).max()),
        "base_used_eq": c.base_used_eq[:, 0], "acid_used_eq": c.acid_used_eq[:, 0],
        "cases": None if m is None else int(m.meets.size),
        "probability_of_meeting_rule": None if m is None else m.probability,
        "probability_low": None if m is None else m.low, "probability_high": None if m is None else m.high,
        "quantiles": None if m is None else m.quantiles(),
        "tuning": [{"tank": tank.name, "gain": u.gain, "reset_s": u.reset_s, "gain_margin": u.gain_margin,
                    "ultimate_period_s": u.ultimate_period_s, "rule": u.rule}
                   for tank, u in zip(t.tanks, t.tunings, strict=True)],
        "faults": [{"tank": f.tank, "kind": f.kind, "words": f.words, "minutes_to_leave": f.minutes_to_leave,
                    "minutes_outside": f.minutes_outside, "lowest_ph": f.lowest_ph, "highest_ph": f.highest_ph}
                   for f in t.faults]}


def _side_effects(design: Design) -> list[dict[str, Any]]:
    chosen = design.basis.chosen
    return [{"reagent": chosen[kind].name if kind in chosen else kind, "name": e.name, "value": e.value, "unit": e.unit,
             "severity": e.severity, "words": e.words, "rule": e.rule, "source": e.source}
            for kind, s in design.side.items() for e in s.rows]


def _storage(design: Design) -> dict[str, Any]:
    return {"stores": [{"reagent": s.reagent, "days": s.days, "kg": s.kg, "volume_m3": s.volume_m3, "words": s.words}
                       for s in design.stores],
            "containment": [{"rule": c.rule.key, "volume_m3": c.volume_m3, "chosen": c.chosen, "words": c.words}
                            for c in design.containments],
            "words": list(design.storage_words)}


def _batch(design: Design) -> dict[str, Any]:
    b = design.batch
    return {"suits": b is not None,
            "plan": None if b is None else {"tanks": b.tanks, "volume_m3": b.volume_m3, "fill_h": b.fill_h,
                                            "react_h": b.react_h, "test_h": b.test_h, "drain_h": b.drain_h,
                                            "idle_h": b.idle_h, "cycle_h": b.cycle_h},
            "rules": [r._asdict() for r in design.batch_reasons]}

"""The summary of a run for programs: the same keys for every command, and keys that stay (docs/commands.md)."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Collection, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from aquabuf.assess.sample.headline import RANK_BY
from aquabuf.report.tables import result_digits, rounded

if TYPE_CHECKING:  # each command waits for its own room only
    from aquabuf.assess.options import Options
    from aquabuf.assess.tank.design import Design
    from aquabuf.assess.titration.options import TitrationOptions
    from aquabuf.report.lake_blocks import LakeRun
    from aquabuf.report.tally import Tally
    from aquabuf.report.titration_tally import TitrationTally

__all__ = ["LISTED", "Tell", "assess_machine", "dose_machine", "lake_machine", "tank_machine", "titration_machine",
           "untold"]

LISTED = 20  # rows that a summary lists at most; the tables have all
CLEAR, WARNINGS, HOLDS, FAILS = "clear", "warnings", "holds", "does not hold"
ASSESS_COLUMNS = ("sample_id", "row", "ph", "alkalinity_meq_l", RANK_BY, f"{RANK_BY}_low", f"{RANK_BY}_high", "carrier",
                  "warnings")
TITRATION_COLUMNS = ("sample_id", "row", "status", "definition", "recommended_ueq_l", "recommended_u_ueq_l",
                     "recommended_umol_kg", "recommended_u_umol_kg",
                     "recommended_mg_l_caco3", "recommended_u_mg_l_caco3", "recommended_method", "warnings")
LAKE_COLUMNS = ("rank", "sample_id", "row", "site", "region", "class", "class_probability", "anc_used_ueq_l", "ph",
                "exceedance_meq_m2_yr", "exceedance_probability", "episode_anc_ueq_l", "warnings", "next_step")
LAKE_DIGITS = {"class_probability": 3, "anc_used_ueq_l": 1, "ph": 2, "exceedance_meq_m2_yr": 2,
               "exceedance_probability": 3, "episode_anc_ueq_l": 1}

Tell = Callable[[Mapping[str, Any]], None]


def untold(summary: Mapping[str, Any]) -> None:
    """A listener that listens to nothing."""


def assess_machine(tally: Tally, options: Options, record: Mapping[str, Any], written: Collection[str],
                   ) -> dict[str, Any]:
    """Summary of `aquabuf assess`; `record` is that of run.json."""
    worst = rounded(tally.worst.head(LISTED), result_digits(options))
    return _summary(record, written, counts=record["samples"], verdict=WARNINGS if tally.warned else CLEAR, figures={
        "warnings": dict(sorted(tally.warnings.items())), "worst_buffered": _rows(worst, ASSESS_COLUMNS)})


def titration_machine(tally: TitrationTally, options: TitrationOptions, record: Mapping[str, Any],
                      written: Collection[str]) -> dict[str, Any]:
    """Summary of `aquabuf titration`."""
    from aquabuf.assess.titration.tables import NO_RESULT, OK, REFUSED, WARNED, titration_digits

    names = {OK: "ok", WARNED: "warned", NO_RESULT: "no_result", REFUSED: "refused"}
    counts = {"titrations": tally.samples} | {name: int(tally.status[status]) for status, name in names.items()}
    shown = rounded(pd.DataFrame(tally.shown[:LISTED]).infer_objects(), titration_digits(options))
    verdict = CLEAR if counts["ok"] == tally.samples else WARNINGS
    return _summary(record, written, counts=counts, verdict=verdict, figures={
        "findings": dict(sorted(tally.findings.items())), "methods": dict(sorted(tally.methods.items())),
        "results": _rows(shown, TITRATION_COLUMNS)})


def lake_machine(run: LakeRun, record: Mapping[str, Any], written: Collection[str]) -> dict[str, Any]:
    """Summary of `aquabuf lake`."""
    scheme, counted = run.found.rules.schemes[0], Counter(run.lakes["class"])
    first = rounded(run.priorities.head(LISTED), LAKE_DIGITS)
    return _summary(record, written, counts=record["lakes"],
                    verdict=WARNINGS if record["lakes"]["warned"] else CLEAR, figures={
        "scheme": scheme.name, "classes": {c.name: counted[c.name] for c in scheme.classes}, "no_class": counted[""],
        "first_to_look_at": _rows(first, LAKE_COLUMNS)})


def dose_machine(answer: Mapping[str, Any], record: Mapping[str, Any], written: Collection[str]) -> dict[str, Any]:
    """Summary of `aquabuf dose`; `answer` is the content of answer.json."""
    targets, limits = answer["targets"], answer["limits"]
    counts = {"doses": len(answer["doses"]), "targets": len(targets),
              "targets_met": sum(bool(t["met"]) for t in targets),
              "limits_broken": sum(bool(x["broken"]) for x in limits), "warnings": len(answer["warnings"])}
    doses = [{"step": d["step"], "product": d["product"], "mg_l_product": d["dose_mg_l_product"],
              "kg_d_product": d["feed"]["product_kg_d"], "setting_percent": d["feed"]["setting_percent"]}
             for d in answer["doses"]]
    last = answer["steps"][-1] if answer["steps"] else {}
    figures = {"doses": doses, "finished_ph": last.get("ph"),
               "finished_alkalinity_mg_l_caco3": last.get("alkalinity_mg_l_caco3")}
    return _summary(record, written, counts=counts, verdict=HOLDS if answer["feasible"] else FAILS,
                    reason=answer["reason"], figures=figures) | {"answer": dict(answer)}


def tank_machine(found: Design, design: Mapping[str, Any], record: Mapping[str, Any], written: Collection[str],
                 ) -> dict[str, Any]:
    """Summary of `aquabuf tank`; `design` is the content of design.json."""
    from aquabuf.report.tank_report import failing, headline

    simulated, equal = design["simulation"] or {}, design["equalization"] or {}
    stages = design["stages"] or []
    counts = {"wastes": len(design["stream"]["wastes"]), "tanks": len(stages), "stops": len(design["stops"]),
              "warnings": len(design["warnings"])}
    figures = {"aim_ph": design["aim_ph"], "chosen_reagents": design["reagents"]["chosen"],
               "equalization_m3": equal.get("volume_m3"), "tank_volumes_m3": [s["volume_m3"] for s in stages],
               **{name: simulated.get(name) for name in ("minutes_outside", "keeps_rule", "probability_of_meeting_rule",
                                                         "probability_low", "probability_high")}}
    return _summary(record, written, counts=counts, verdict=headline(found).lower(), reason=failing(found),
                    figures=figures) | {"design": dict(design)}


def _summary(record: Mapping[str, Any], written: Collection[str], *, counts: Mapping[str, Any], verdict: str,
             figures: Mapping[str, Any], reason: str = "") -> dict[str, Any]:
    return {"program": record["program"], "version": record["version"], "command": record["command"],
            "inputs": dict(record["files"]), "counts": dict(counts), "verdict": verdict, "reason": reason,
            "headline": dict(figures), "written": sorted(written)}


def _rows(table: pd.DataFrame, columns: Collection[str]) -> list[dict[str, Any]]:
    """Rows as plain values under all `columns`, None where there is nothing; warnings as a list."""
    return [{name: _plain(name, row.get(name)) for name in columns} for row in table.to_dict("records")]


def _plain(name: str, value: Any) -> Any:
    if name == "warnings":
        return [w for w in str(value or "").split("; ") if w]
    if isinstance(value, np.generic):
        value = value.item()
    return None if value is None or pd.isna(value) or value == "" else value

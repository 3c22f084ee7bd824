"""Solve a plan and write its results: answer, sheet for the wall, page, tables, figures, and what the run rests on."""

from __future__ import annotations

import fnmatch
import json
import tomllib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import aquabuf
from aquabuf.assess.plant.answer import Answer, solve_plan
from aquabuf.assess.plant.answer_json import answer_record
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.report.dose_sheet import dose_sheet
from aquabuf.report.dose_tables import dose_tables, sweeps
from aquabuf.report.files import OutputFolder, sha256
from aquabuf.report.html.dose_page import dose_page
from aquabuf.report.machine import Tell, dose_machine, untold
from aquabuf.report.summary import item
from aquabuf.report.tables import GrowingTables
from aquabuf.report.terminal import Step, silent
from aquabuf.tables import read_table

__all__ = ["OUTPUT_FILES", "DoseRun", "dose_plan"]

OUTPUT_FILES = (
    "answer.json", "sheet.txt", "doses.csv", "steps.csv", "curves.csv", "faults.csv", "limits.csv", "errors.csv",
    "season.csv", "season_doses.csv", "blend.csv", "buffers.csv", "run.json", "dose.png", "dose.svg", "season.png",
    "season.svg", "blend.png", "blend.svg", "report.html")
KINDS = ("png", "svg")


@dataclass(frozen=True, slots=True)
class DoseRun:
    """What a run has to say: its text, and why the plan does not hold ("" where it does)."""

    text: str
    reason: str


def unseen(text: str) -> None:
    """A place where nothing is shown."""


def dose_plan(path: Path, folder: Path, *, force: bool = False, figure: bool = True, draws: int | None = None,
              step: Step = silent, tell: Tell = untold, show: Callable[[str], None] = unseen) -> DoseRun:
    """Solve the plan at `path` and write OUTPUT_FILES to `folder`, also where it does not hold.

    draws : replaces those of the plan; 0 leaves out what errors of readings and feeds do. step, tell : are told what is
    being done, and the summary for programs. show : gets the sheet as soon as it is there, ahead of figures and page.

    Raises InputError or FileError where the plan cannot be read or worked out; nothing is written then, and an earlier
    result stays.
    """
    plan = read_plan(path)
    hashes = {name: sha256(file) for name, file in _given(path).items()}
    with OutputFolder(folder, OUTPUT_FILES, force=force) as out:
        step("the plan being solved")
        answer = solve_plan(plan, draws=draws)
        record = answer_record(answer)
        _write_json(out, "answer.json", record)
        sheet = dose_sheet(answer)
        out.part("sheet.txt").write_text(sheet, encoding="utf-8")
        with GrowingTables(out, {}) as writer:
            for name, table in dose_tables(answer, record).items():
                writer.add(name, table)
        show(sheet)
        if figure:
            step("figures")
            _draw(answer, out)
        step("page")
        rests_on = _record(path, hashes, answer)
        _write_json(out, "run.json", rests_on)
        page = dose_page(answer, rests_on, written=out.written, figure=figure)
        out.part("report.html").write_text(page, encoding="utf-8")
        written = [name for name in OUTPUT_FILES if fnmatch.filter(out.written, name)]
    tell(dose_machine(record, rests_on, out.written))
    files = item(f"Written to {folder.name}: {', '.join(written)}.", mark="")
    return DoseRun(f"{sheet}\n{files}\n", answer.reason)


def _write_json(out: OutputFolder, name: str, record: Mapping[str, Any]) -> None:
    text = json.dumps(record, indent=1, ensure_ascii=False, allow_nan=False)
    out.part(name).write_text(f"{text}\n", encoding="utf-8")


def _draw(answer: Answer, out: OutputFolder) -> None:
    from aquabuf.report.dose_figures import save_blend, save_season, save_sheet  # drawing is slow to import

    save_sheet(answer, {kind: out.part(f"dose.{kind}") for kind in KINDS})
    if answer.season is not None:
        save_season(answer, {kind: out.part(f"season.{kind}") for kind in KINDS})
    if any(sweeps(p) for p in answer.train.passed):
        save_blend(answer, {kind: out.part(f"blend.{kind}") for kind in KINDS})


def _given(path: Path) -> dict[str, Path]:
    """Every file of a plan that was read, by what it is: the plan, tables of readings, their maps."""
    content = tomllib.loads(path.read_text(encoding="utf-8-sig"))
    tables = {"water": content.get("water", {}), "drift": content.get("drift", {})}
    tables |= {f"source {name}": table for name, table in content.get("sources", {}).items()}
    return {"plan": path} | {f"{name} {key}": path.parent / table[key] for name, table in tables.items()
                             for key in ("readings", "map") if key in table}


def _record(path: Path, hashes: Mapping[str, str], answer: Answer) -> dict[str, Any]:
    """What the run rests on: no clock, no paths."""
    e = answer.readings_error
    return {
        "program": "aquabuf", "version": aquabuf.__version__, "command": "dose",
        "files": {name: file.name for name, file in _given(path).items()}, "sha256": dict(hashes),
        "options": {"draws": 0 if e is None else e.draws, "seed": None if e is None else e.seed},
        "feasible": answer.feasible,
        "constants": [dict(row) for row in read_table("constants") if row["regime"] in ("fresh", "both")],
        "limits": [{"name": j.limit.name, "rule": j.limit.rule(), "source": j.limit.source} for j in answer.limits],
        "assumptions": list(answer.plan.assumptions), "notes": list(answer.plan.notes),
    }

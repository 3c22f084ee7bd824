"""Design a neutralization from a stream file and write its results: report, page, design, tables, figures, and what
they rest on."""

from __future__ import annotations

import json
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import Any

import aquabuf
from aquabuf.assess.tank.design import Design, design
from aquabuf.assess.tank.design_json import design_record
from aquabuf.assess.tank.job import Job
from aquabuf.assess.tank.job_file import read_stream
from aquabuf.report.files import OutputFolder, sha256
from aquabuf.report.machine import Tell, tank_machine, untold
from aquabuf.report.summary import item
from aquabuf.report.tables import GrowingTables
from aquabuf.report.tank_report import failing, tank_report
from aquabuf.report.tank_tables import TABLES, tank_tables
from aquabuf.report.terminal import Step, silent
from aquabuf.tables import read_table

__all__ = ["OUTPUT_FILES", "TankRun", "tank_stream"]

KINDS = ("png", "svg")
FIGURES = ("design", "simulation")
OUTPUT_FILES = ("report.txt", "design.json", *TABLES, "report.html", "run.json",
                *(f"{name}.{kind}" for name in FIGURES for kind in KINDS))
LIBRARIES = ("numpy", "scipy", "pandas")


@dataclass(frozen=True, slots=True)
class TankRun:
    """What a run has to say: its text, and why the design is not accepted ("" where it is, or is not proven)."""

    text: str
    reason: str


def tank_stream(path: Path, folder: Path, *, cases: int | None = None, simulate: bool = True, figure: bool = True,
                force: bool = False, jobs: int = 2, step: Step = silent, tell: Tell = untold) -> TankRun:
    """Design for the stream file at `path` and write OUTPUT_FILES to `folder`, also where the design does not hold.

    cases : of the Monte Carlo in place of those of the file; 0 leaves the probability out. jobs : processes that the
    cases share; the results do not depend on it. step, tell : are told what is being done, and the summary for
    programs.

    Raises InputError or FileError where the file cannot be read or nothing can be sized; nothing is written then, and
    an earlier result stays.
    """
    job = read_stream(path)
    given = _given(path)
    hashes = {name: sha256(file) for name, file in given.items()}
    with OutputFolder(folder, OUTPUT_FILES, force=force) as out:
        step("the design being worked out and tried" if simulate else "the design being worked out")
        found = design(job, simulate=simulate, cases=cases, processes=jobs)
        record = design_record(found)
        report = tank_report(found, record)
        out.part("report.txt").write_text(report, encoding="utf-8")
        _write_json(out, "design.json", record)
        with GrowingTables(out, {}) as writer:
            for name, table in tank_tables(found, record).items():
                writer.add(name, table)
        if figure:
            step("figures")
            _draw(found, out)
        step("page")
        files = {name: file.name for name, file in given.items()}
        run = _record(found, record, files, hashes, simulate=simulate, cases=cases)
        _write_json(out, "run.json", run)
        page = _page(found, record, report, run, out.written, figure=figure)
        out.part("report.html").write_text(page, encoding="utf-8")
        written = [name for name in OUTPUT_FILES if name in out.written]
    tell(tank_machine(found, record, run, out.written))
    listed = item(f"Written to {folder.name}: {', '.join(written)}.", mark="")
    return TankRun(f"{report}\n{listed}\n", failing(found))


def _write_json(out: OutputFolder, name: str, record: Mapping[str, Any]) -> None:
    text = json.dumps(record, indent=1, ensure_ascii=False, allow_nan=False)
    out.part(name).write_text(f"{text}\n", encoding="utf-8")


def _draw(found: Design, out: OutputFolder) -> None:
    from aquabuf.report.tank_figures import save_design, save_simulation  # drawing is slow to import

    save_design(found, {kind: out.part(f"design.{kind}") for kind in KINDS})
    if found.trial is not None:
        save_simulation(found, {kind: out.part(f"simulation.{kind}") for kind in KINDS})


def _page(found: Design, record: Mapping[str, Any], report: str, run: Mapping[str, Any], written: frozenset[str], *,
          figure: bool) -> str:
    from aquabuf.report.html.tank_drawings import tank_drawings  # drawing is slow to import
    from aquabuf.report.html.tank_page import tank_page

    drawings = tank_drawings(found) if figure else ()
    return tank_page(found, record, report=report, run=run, written=written, drawings=drawings)


def _given(path: Path) -> dict[str, Path]:
    """Every file that was read, by what it is: the stream, titrations, the profile."""
    content = tomllib.loads(path.read_text(encoding="utf-8-sig"))
    tables = {f"titration of {name}": waste["titration"] for name, waste in content["wastes"].items()
              if "titration" in waste}
    if "profile" in content:
        tables["profile"] = content["profile"]["file"]
    return {"stream": path} | {name: path.parent / file for name, file in tables.items()}


def _record(found: Design, record: Mapping[str, Any], files: Mapping[str, str], hashes: Mapping[str, str], *,
            simulate: bool, cases: int | None) -> dict[str, Any]:
    """What the run rests on: no clock, no paths, no number of processes."""
    job: Job = found.job
    return {
        "program": "aquabuf", "version": aquabuf.__version__, "command": "tank",
        "versions": {name: version(name) for name in LIBRARIES}, "files": dict(files), "sha256": dict(hashes),
        "options": {"simulation": simulate, "cases": job.trial.cases if cases is None else cases,
                    "days": job.trial.days, "step_s": None if found.trial is None else found.trial.step_s,
                    "seed": job.trial.seed},
        "accepted": record["accepted"], "verdict": record["verdict"],
        "constants": [dict(row) for row in read_table("constants") if row["regime"] in ("fresh", "both")],
        "assumptions": record["assumptions"], "notes": list(job.notes),
    }

"""Assess a file piece by piece and write its results; memory does not grow with the file."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from dataclasses import asdict
from pathlib import Path

import pandas as pd

import aquabuf
from aquabuf.assess.limits import Limit
from aquabuf.assess.limits_file import read_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import Assessment, assess
from aquabuf.assess.sample.columns import limit_quantities
from aquabuf.assess.sample.titrated import Titrated, titrated_by
from aquabuf.errors import InputError
from aquabuf.readings.source import open_any, resolve_map
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.chains import WorstSamples
from aquabuf.report.files import OutputFolder, sha256
from aquabuf.report.html.assess_page import AssessRows, assess_page
from aquabuf.report.machine import Tell, assess_machine, untold
from aquabuf.report.summary import summary_text
from aquabuf.report.tables import GrowingTables, csv_text, result_digits, rounded
from aquabuf.report.tally import Tally
from aquabuf.report.terminal import Step, silent
from aquabuf.tables import read_table

__all__ = ["OUTPUT_FILES", "assess_file"]

OUTPUT_FILES = ("results.csv", "verdicts.csv", "checks.csv", "curves.csv", "rejected.csv", "report.html", "run.json",
                "samples.png", "samples.svg")
SECONDS_PER_DRAW = 7e-6  # on one core, measured; only for the notice
FAILED_RUN_FILES = ("rejected.csv", "run.json")  # of a run that could assess no row
CHUNK_ROWS = 16_384      # long enough for the fixed cost of a piece not to count, short enough for the cache
ALL_CHECKS_UP_TO = 20_000  # samples; beyond, checks.csv holds the unmet ones only


def assess_file(path: Path, folder: Path, options: Options, *, mapping: str | Path | None = None,
                limits: Path | None = None, titrations: TitrationFiles | None = None, force: bool = False,
                figure: bool = True, notify: Callable[[str], None] = lambda text: None, step: Step = silent,
                tell: Tell = untold) -> str:
    """Assess the table at `path`, write OUTPUT_FILES to `folder`, and return the summary text.

    `mapping` is a map file or the name of a shipped map.

    `titrations` give the alkalinity of the samples they name, in place of any that the table has. `notify` is told
    beforehand when the draws of a long table will take long, `step` what is being done, `tell` the summary for
    programs.

    Raises InputError or FileError where the table as a whole cannot be used or no row is accepted; rejected.csv is
    still written then.
    """
    map_file = None if mapping is None else resolve_map(mapping)
    rules = read_limits(limits, limit_quantities(options))
    used = {"readings": path} | {name: p for name, p in (("map", map_file), ("limits", limits)) if p is not None}
    used |= {f"titration {name}": p for name, p in (titrations.given() if titrations else {}).items()}
    hashes = {name: sha256(p) for name, p in used.items()}
    pieces = open_any(path, map_file, CHUNK_ROWS)
    titrated = Titrated() if titrations is None else titrated_by(titrations)
    lines = _lines(path)
    tally, rows, worst, few = Tally(), AssessRows(), WorstSamples(), lines <= ALL_CHECKS_UP_TO
    step("reading")
    if not few and options.draws:
        minutes = ALL_CHECKS_UP_TO * options.draws * SECONDS_PER_DRAW / 60.0
        notify(f"{options.draws:,} draws for each of more than {ALL_CHECKS_UP_TO:,} rows take about {minutes:.0f} "
               f"minutes per {ALL_CHECKS_UP_TO:,} rows; --draws 0 leaves the intervals out and takes seconds.")
    with OutputFolder(folder, OUTPUT_FILES, force=force, leftovers=FAILED_RUN_FILES) as out:
        with GrowingTables(out, {"results.csv": result_digits(options)}) as writer:
            for piece in pieces:
                readings = piece if titrations is None else titrated.put_into(piece)
                part = assess(readings, options, rules, only_unmet_checks=not few)
                for name, table in (("results.csv", part.results), ("verdicts.csv", part.verdicts),
                                    ("checks.csv", part.checks), ("rejected.csv", part.rejected)):
                    writer.add(name, table)
                tally.add(part)
                rows.add(part)
                if few:
                    worst.add(readings, part)
                step(f"{tally.assessed:,} samples assessed", _share(part, lines))
            writer.add("checks.csv", tally.file_checks())
        if not tally.refused_rows:
            out.drop("rejected.csv")
        if tally.assessed:
            step("curves, figure and page")
            curves = tally.curves(options)
            out.part("curves.csv").write_text(csv_text(rounded(curves, {"ph": 2}), header=True), encoding="utf-8")
            drawings = _draw(tally, curves, out, path.name) if figure else []
        else:
            failure = _nothing_assessed(path.name, tally)
            if (folder / OUTPUT_FILES[0]).exists():  # a failed run must not take an earlier result away
                raise InputError(f"{failure} The earlier result is untouched; use another --out to see the reasons.")
            for name in ("results.csv", "verdicts.csv", "checks.csv"):
                out.drop(name)
        if titrations is not None:
            tally.titrations = titrated.in_words(titrations.points.name)
        record = _record({name: p.name for name, p in used.items()}, hashes, options, rules, tally, all_checks=few)
        out.part("run.json").write_text(json.dumps(record, indent=1, ensure_ascii=False) + "\n", encoding="utf-8")
        if tally.assessed:
            page = out.part("report.html")
            written = [name for name in OUTPUT_FILES if name in out.written]
            summary = summary_text(tally, options, rules, source=path.name, files=written)
            page.write_text(assess_page(tally, rows, options, rules, source=path.name, summary=summary, record=record,
                                        written=written, drawings=drawings,
                                        chains=worst.chains(path, map_file, options, rules)), encoding="utf-8")
    if not tally.assessed:
        raise InputError(f"{failure} rejected.csv in {folder.name} names each with its remedy.")
    tell(assess_machine(tally, options, record, out.written))
    return summary


def _nothing_assessed(name: str, tally: Tally) -> str:
    (column, rule), count = tally.refusal_rules.most_common(1)[0]
    return (f"no row of {name} can be assessed; {len(tally.refused_rows)} were refused, mostly for {column}: {rule} "
            f"({count} x).")


def _draw(tally: Tally, curves: pd.DataFrame, out: OutputFolder, source: str) -> list[str]:
    """Write the figure; returns its panels for the page."""
    from aquabuf.report.figures import save_samples  # drawing is slow to import
    from aquabuf.report.html.panels import sample_drawings

    save_samples(tally, curves, {kind: out.part(f"samples.{kind}") for kind in ("png", "svg")}, source=source)
    return sample_drawings(tally, curves)


def _lines(path: Path) -> int:
    """Lines of the file."""
    with path.open("rb") as stream:
        return sum(block.count(b"\n") for block in iter(lambda: stream.read(1 << 20), b""))


def _share(part: Assessment, lines: int) -> float | None:
    """How far down the file a piece ends; None where that is not known."""
    ends = [float(table["row"].max()) for table in (part.results, part.rejected) if len(table)]
    return max(ends) / lines if ends and lines else None


def _record(files: Mapping[str, str], hashes: Mapping[str, str], options: Options, limits: tuple[Limit, ...],
            tally: Tally, *, all_checks: bool) -> dict:
    """What the run rests on, for run.json: no clock, no paths."""
    regimes = {"fresh" if r == "fresh" else "salt" for r in tally.regimes} | {"both"}
    return {
        "program": "aquabuf", "version": aquabuf.__version__, "command": "assess",
        "input": files["readings"], "files": dict(files), "sha256": dict(hashes), "options": asdict(options),
        "samples": {"assessed": tally.assessed, "warned": tally.warned, "refused_rows": len(tally.refused_rows)},
        "known_pairs": dict(sorted(tally.pairs.items())), "status": dict(sorted(tally.statuses.items())),
        "ionic_strength_from": dict(sorted(tally.strengths.items())),
        "titrations": tally.titrations, "checks_listed": "all" if all_checks else "unmet only",
        "constants": [dict(row) for row in read_table("constants") if row["regime"] in regimes],
        "limits": [{"name": x.name, "rule": x.rule(), "kinds": list(x.kinds), "regimes": list(x.regimes),
                    "source": x.source} for x in limits],
        "notes": [*tally.notes, *(f"{count} x {what}: {column}" for (what, column), count in tally.flags.items())],
    }

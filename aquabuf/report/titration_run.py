"""Assess a file of titrations piece by piece and write its results; memory does not grow with the file."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import asdict, dataclass, field
from pathlib import Path

import aquabuf
from aquabuf.assess.titration.assess import TitrationResult, assess_titrations
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.tables import titration_digits
from aquabuf.errors import InputError
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.readings.titration.reader import iter_titrations
from aquabuf.report.chains import FirstTitrations, amounts_of
from aquabuf.report.files import OutputFolder, sha256
from aquabuf.report.html.titration_page import TitrationRows, rank_of, titration_page
from aquabuf.report.machine import Tell, titration_machine, untold
from aquabuf.report.tables import GrowingTables
from aquabuf.report.terminal import Step, silent
from aquabuf.report.titration_summary import titration_summary
from aquabuf.report.titration_tally import TitrationTally
from aquabuf.tables import read_table

__all__ = ["ALL_FIGURES", "OUTPUT_FILES", "titrate_file"]

FIGURE_NAMES = "titration_*.png"
OUTPUT_FILES = ("alkalinity.csv", "findings.csv", "rejected.csv", "report.html", "run.json", FIGURE_NAMES)
FAILED_RUN_FILES = ("rejected.csv",)
ALL_FIGURES = 10**9
PAGE_TITRATIONS = 4  # whose figures are on the page
CHAINS_UP_TO = 20_000  # titrations; beyond, the page has no chains, for which the points are read again
SLOW_FROM = 100  # figures, from which the user is told


def titrate_file(files: TitrationFiles, folder: Path, options: TitrationOptions, *, force: bool = False,
                 figures: int = 50, notify: Callable[[str], None] = lambda text: None, step: Step = silent,
                 tell: Tell = untold) -> str:
    """Assess the titrations in `files`, write OUTPUT_FILES to `folder`, and return the text.

    `figures` is the number of titrations to draw, in the order of the file. `notify` is told when drawing will take
    long, `step` what is being done, `tell` the summary for programs.

    Raises InputError or FileError where a file as a whole cannot be used or no titration is accepted; rejected.csv is
    still written then.
    """
    hashes = {name: sha256(path) for name, path in files.given().items()}
    pieces = iter_titrations(files.points, files.samples, points_map=files.points_map, samples_map=files.samples_map)
    tally, rows, drawings, first = TitrationTally(), TitrationRows(), PageDrawings(), FirstTitrations()
    step("titrations being read, worked out and drawn")
    with OutputFolder(folder, OUTPUT_FILES, force=force, leftovers=FAILED_RUN_FILES) as out:
        with GrowingTables(out, {"alkalinity.csv": titration_digits(options)}) as tables:
            for t in pieces:
                by_liter, by_kilogram = amounts_of(t)
                part = assess_titrations(t, options, by_kilogram=by_kilogram, by_liter=by_liter)
                _draw(part, tally, drawings, out, figures, notify)
                for name, table in (("alkalinity.csv", part.results), ("findings.csv", part.findings),
                                    ("rejected.csv", part.rejected)):
                    tables.add(name, table)
                tally.add(t, part)
                rows.add(part)
                first.add(t, part, rank_of)
                step(f"{tally.samples:,} titrations worked out")
        if not tally.refusals:
            out.drop("rejected.csv")
        usable = tally.samples - tally.status["refused"]
        if not usable:
            failure = _nothing(files.points.name, tally)
            if (folder / OUTPUT_FILES[0]).exists():  # a failed run must not take an earlier result away
                raise InputError(f"{failure} The earlier result is untouched; use another --out to see the reasons.")
            for name in ("alkalinity.csv", "findings.csv"):
                out.drop(name)
        else:
            record = _record(files, hashes, options, tally)
            out.part("run.json").write_text(json.dumps(record, indent=1, ensure_ascii=False) + "\n", encoding="utf-8")
            page = out.part("report.html")
            chains = first.chains(files, options) if tally.samples <= CHAINS_UP_TO else []
            written = [name for name in OUTPUT_FILES if name in out.written] + ([FIGURE_NAMES] if tally.figures else [])
            summary = titration_summary(tally, options, source=files.points.name, files=written)
            page.write_text(titration_page(tally, rows, source=files.points.name, summary=summary, record=record,
                                           written=out.written, drawings=drawings.all(), chains=chains),
                            encoding="utf-8")
    if not usable:
        raise InputError(f"{failure} rejected.csv in {folder.name} names each with its remedy.")
    tell(titration_machine(tally, options, record, out.written))
    return summary


def _nothing(name: str, tally: TitrationTally) -> str:
    (column, rule), count = tally.refusals.most_common(1)[0]
    were = "was" if tally.samples == 1 else "were"
    return (f"no titration of {name} can be used; {tally.samples:,} {were} refused, mostly for {column}: {rule} "
            f"({count} x).")


@dataclass(slots=True)
class PageDrawings:
    """Drawings of the few titrations that the page shows, in the order of its table."""

    _of_rank: dict[int, list[list[str]]] = field(default_factory=dict)

    def add(self, part: TitrationResult, i: int) -> None:
        """Draw titration `i` of a piece for the page if it may come onto it."""
        rank = rank_of(part.results["status"].iloc[part.at[i]])
        if sum(len(drawn) for r, drawn in self._of_rank.items() if r <= rank) >= PAGE_TITRATIONS:
            return
        from aquabuf.report.html.panels import titration_drawings

        self._of_rank.setdefault(rank, []).append(titration_drawings(part, i))

    def all(self) -> list[str]:
        """At most those of `PAGE_TITRATIONS`."""
        ordered = [drawn for rank in sorted(self._of_rank) for drawn in self._of_rank[rank]]
        return [drawing for drawn in ordered[:PAGE_TITRATIONS] for drawing in drawn]


def _draw(part: TitrationResult, tally: TitrationTally, drawings: PageDrawings, out: OutputFolder, figures: int,
          notify: Callable[[str], None]) -> None:
    """Figures of the piece while the number asked for is not reached; their names go into the table.

    Files are numbered by the place in alkalinity.csv: a sample's name never becomes a file name.
    """
    room = figures - tally.figures
    if room <= 0 or not part.at.size:
        return
    from aquabuf.report.titration_figures import save_titration  # drawing is slow to import

    names = part.results["figure"].to_numpy(dtype=object, copy=True)
    for i, place in enumerate(part.at[:room].tolist()):
        names[place] = FIGURE_NAMES.replace("*", f"{tally.samples + place + 1:05d}")
        save_titration(part, i, out.part(names[place]))
        drawings.add(part, i)
        tally.figures += 1
        if tally.figures == SLOW_FROM:
            notify("drawing; each figure takes about a quarter of a second. --figures 0 leaves them out.")
    part.results["figure"] = names


def _record(files: TitrationFiles, hashes: dict[str, str], options: TitrationOptions, tally: TitrationTally) -> dict:
    """What the run rests on, for run.json: no clock, no paths."""
    return {
        "program": "aquabuf", "version": aquabuf.__version__, "command": "titration",
        "files": {name: path.name for name, path in files.given().items()}, "sha256": hashes,
        "options": asdict(options),
        "titrations": {"seen": tally.samples, **{k: int(v) for k, v in sorted(tally.status.items())}},
        "methods": dict(sorted(tally.methods.items())), "findings": dict(sorted(tally.findings.items())),
        "assumed": dict(tally.assumed),
        "constants": [dict(row) for row in read_table("constants") if row["regime"] != "lake"],
        "notes": [*tally.notes, *(f"{count} x {what}: {column}" for (what, column), count in tally.flags.items())],
    }

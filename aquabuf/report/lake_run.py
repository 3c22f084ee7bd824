"""Assess a survey of lakes and write its results: tables, report, figures."""

from __future__ import annotations

import fnmatch
import json
from collections import Counter
from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass
from pathlib import Path

import numpy as np
import pandas as pd

import aquabuf
from aquabuf.assess.lake.assess import LakeAssessment, assess_lakes
from aquabuf.assess.lake.chain import LakeTables
from aquabuf.assess.lake.columns import lake_columns, lake_quantities
from aquabuf.assess.lake.episode import CHANGES, WEAK_CHANGES
from aquabuf.assess.lake.liming import DEMANDS
from aquabuf.assess.lake.options import LakeOptions, Rules, rules_of
from aquabuf.assess.lake.recovery import recovery
from aquabuf.assess.lake.schemes import FILE_ENDING
from aquabuf.assess.lake.survey import group_table, latest_of_site, priorities, site_keys
from aquabuf.assess.lake.tables import (
    class_table,
    deposition_table,
    episode_table,
    liming_table,
    load_table,
    verdict_table,
)
from aquabuf.assess.lake.trends import trend_table
from aquabuf.assess.limits import Limit
from aquabuf.assess.limits_file import read_limits
from aquabuf.assess.sample.chain_steps import Chain
from aquabuf.assess.sample.quality import check_rows, file_check_rows
from aquabuf.assess.sample.titrated import Titrated, titrated_by
from aquabuf.errors import InputError
from aquabuf.readings.result import Readings, join_readings
from aquabuf.readings.source import open_any, resolve_map
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.chains import ON_PAGE, first_lakes
from aquabuf.report.files import OutputFolder, sha256
from aquabuf.report.html.lake_page import lake_page
from aquabuf.report.lake_blocks import LakeRun
from aquabuf.report.lake_summary import lake_report, lake_summary
from aquabuf.report.machine import Tell, lake_machine, untold
from aquabuf.report.run import FAILED_RUN_FILES
from aquabuf.report.tables import GrowingTables
from aquabuf.report.terminal import Step, silent
from aquabuf.tables import read_table

__all__ = ["OUTPUT_FILES", "LakeFiles", "assess_survey", "lake_digits"]

OUTPUT_FILES = (
    "results.csv",
    "priorities.csv",
    "classes.csv",
    "verdicts.csv",
    "groups.csv",
    "critical_loads.csv",
    "episodes.csv",
    "deposition.csv",
    "liming.csv",
    "trends.csv",
    "recovery.csv",
    "checks.csv",
    "rejected.csv",
    "report.html",
    "report.txt",
    "run.json",
    "lakes.png",
    "lakes.svg",
    "trends*.png",
    "trends*.svg",
)
SECONDS_PER_DRAW = 2e-6  # on one core, measured; only for the notice
NOTICE_FROM = 10_000  # lakes
TREND_PAGES = 10         # of the figure of trends, three or more lakes each
SAME_DEPTH_M = 1.0  # below the shallowest sample of a lake, from which on a sample is no part of its trends
TREND_YEARS = 3  # years with a sample from which a lake gets rows in the table of trends
ALL_CHECKS_UP_TO = 20_000


@dataclass(frozen=True, slots=True, kw_only=True)
class LakeFiles:
    """Files of one run: the survey, and what else was given."""

    survey: Path
    mapping: str | None = None
    limits: Path | None = None
    event: Path | None = None
    titrations: TitrationFiles | None = None

    def given(self, schemes: tuple[str, ...] = ()) -> dict[str, Path]:
        """Every file by what it is; of `schemes` those that are files."""
        mapping = None if self.mapping is None else resolve_map(self.mapping)
        found = {"readings": self.survey, "map": mapping, "limits": self.limits, "event": self.event}
        found |= {f"scheme {k}": Path(name) for k, name in enumerate(schemes, start=1) if name.endswith(FILE_ENDING)}
        more = self.titrations.given() if self.titrations else {}
        return {k: v for k, v in found.items() if v is not None} | {f"titration {k}": v for k, v in more.items()}


def assess_survey(
    files: LakeFiles,
    folder: Path,
    options: LakeOptions,
    *,
    force: bool = False,
    figure: bool = True,
    notify: Callable[[str], None] = lambda text: None,
    step: Step = silent,
    tell: Tell = untold,
) -> str:
    """Assess the lakes of a survey, write OUTPUT_FILES to `folder`, and return the summary text.

    `notify` is told beforehand when the draws will take long, `step` what is being done, `tell` the summary for
    programs.

    Raises InputError or FileError where the table as a whole cannot be used or no lake is accepted; rejected.csv is
    still written then.
    """
    rules = rules_of(options, files.event)
    limits = read_limits(files.limits, lake_quantities(options.thresholds), "lake_limits")
    hashes = {name: sha256(path) for name, path in files.given(options.schemes).items()}
    step("reading")
    titrated = Titrated() if files.titrations is None else titrated_by(files.titrations)
    readings = join_readings(open_any(files.survey, files.mapping))
    if files.titrations is not None:
        readings = titrated.put_into(readings)
    if options.draws and len(readings.frame) > NOTICE_FROM:
        minutes = len(readings.frame) * options.draws * SECONDS_PER_DRAW / 60.0
        notify(
            f"{options.draws:,} draws for each of {len(readings.frame):,} lakes take about {minutes:.0f} minutes; "
            f"--draws 0 leaves intervals and probabilities out and takes seconds."
        )
    step(f"{len(readings.frame):,} lakes being worked out")
    found = assess_lakes(readings, rules, options, limits)
    with OutputFolder(folder, OUTPUT_FILES, force=force, leftovers=FAILED_RUN_FILES[:1]) as out:
        if not len(found.results):
            failure = _nothing_assessed(files.survey.name, found)
            if (folder / OUTPUT_FILES[0]).exists():  # a failed run must not take an earlier result away
                raise InputError(f"{failure} The earlier result is untouched; use another --out to see the reasons.")
            _write(out, {"rejected.csv": found.rejected}, options)
        else:
            step("trends, tables, figures and page")
            run = _run_of(
                found,
                options,
                limits,
                files.survey.name,
                titrated.in_words(files.titrations.points.name) if files.titrations else [],
            )
            tables = _tables(found, run, options, limits)
            _write(out, tables, options)
            drawings = _draw(found, run, out) if figure else []
            record = _record(files, hashes, options, rules, run, limits)
            out.part("run.json").write_text(json.dumps(record, indent=1, ensure_ascii=False) + "\n", encoding="utf-8")
            report, page = lake_report(run), out.part("report.html")
            out.part("report.txt").write_text(report, encoding="utf-8")
            chains = _chains(readings, run, tables, files, options, limits)
            page.write_text(
                lake_page(run, report=report, record=record, written=out.written, drawings=drawings, chains=chains),
                encoding="utf-8",
            )
            written = [name for name in OUTPUT_FILES if fnmatch.filter(out.written, name)]
    if not len(found.results):
        raise InputError(f"{failure} rejected.csv in {folder.name} names each with its remedy.")
    tell(lake_machine(run, record, out.written))
    return lake_summary(run, written)


def _nothing_assessed(name: str, found: LakeAssessment) -> str:
    counted = Counter(zip(found.rejected["column"], found.rejected["rule"], strict=True))
    if not counted:
        return f"no row of {name} can be assessed; it has none."
    (column, rule), count = counted.most_common(1)[0]
    return (
        f"no row of {name} can be assessed; {found.rejected['row'].nunique()} were refused, mostly for {column}: "
        f"{rule} "
        f"({count} x)."
    )


def _run_of(
    found: LakeAssessment,
    options: LakeOptions,
    limits: tuple[Limit, ...],
    source: str,
    titrations: list[str],
) -> LakeRun:
    """All that report and summary tell of."""
    keys = site_keys(found.frame)
    latest = latest_of_site(
        keys,
        found.dates,
        classed=(found.results["class"] != "").to_numpy(),
        depth_m=found.frame["depth_m"].to_numpy(dtype=float) if "depth_m" in found.frame else None,
    )
    scheme = found.rules.schemes[0]
    series = _series(found, keys)
    trends = trend_table(series) if len(series) else pd.DataFrame()
    return LakeRun(
        found=found,
        options=options,
        limits=limits,
        source=source,
        titrations=titrations,
        priorities=priorities(found.results[latest], scheme),
        groups=group_table(found.results, scheme, options.group, latest),
        latest=latest,
        series=series,
        trends=trends,
        recovery=recovery(trends) if len(trends) else pd.DataFrame(),
    )


def _series(found: LakeAssessment, keys: np.ndarray) -> pd.DataFrame:
    """Dated samples of the lakes that were sampled in enough years, as the trends want them."""
    dates = found.dates
    frame = pd.DataFrame({"site": keys, "date": dates.astype("datetime64[s]")})
    if "analysis_method" in found.frame:
        frame["method"] = found.frame["analysis_method"].to_numpy(dtype=object)
    for row in read_table("trend_quantities"):
        frame[row["name"]] = found.results[row["name"]].to_numpy(dtype=float)
    dated = (keys != "") & ~np.isnat(dates)
    if "depth_m" in found.frame:
        depth = found.frame["depth_m"].to_numpy(dtype=float)
        least = pd.Series(np.where(np.isfinite(depth), depth, np.inf)).groupby(pd.Series(keys)).transform("min")
        dated &= ~(depth > least.to_numpy() + SAME_DEPTH_M)
    if "ph_kind" in found.frame:
        frame.loc[_other_kind(found.frame["ph_kind"].to_numpy(dtype=object), keys), "ph"] = np.nan
    frame = frame[dated]
    years = frame["date"].dt.year.groupby(frame["site"]).transform("nunique")
    return frame[years >= TREND_YEARS].reset_index(drop=True)


def _other_kind(kind: np.ndarray, keys: np.ndarray) -> np.ndarray:
    """Rows whose pH is of another kind (field, closed ...) than most of their lake: such a step is no trend."""
    words, names = pd.Series(kind, dtype=object), pd.Series(keys, dtype=object)
    most = words.groupby(names).transform(lambda part: part.value_counts().index[0])
    return (words != most).to_numpy()


def _tables(
    found: LakeAssessment, run: LakeRun, options: LakeOptions, limits: tuple[Limit, ...]
) -> dict[str, pd.DataFrame]:
    """Every table by the name of its file; those with nothing to say are left out."""
    few = len(found.results) <= ALL_CHECKS_UP_TO
    checks = [
        check_rows(found.checks, found.frame, only_unmet=not few),
        file_check_rows(found.rounding, found.duplicates),
    ]
    checks = [part for part in checks if len(part)]
    tables = {
        "results.csv": found.results,
        "priorities.csv": run.priorities,
        "classes.csv": class_table(found),
        "verdicts.csv": verdict_table(found, limits),
        "groups.csv": run.groups,
        "critical_loads.csv": load_table(found),
        "episodes.csv": episode_table(found),
        "deposition.csv": deposition_table(found, options),
        "liming.csv": liming_table(found, options),
        "trends.csv": run.trends,
        "recovery.csv": run.recovery,
        "checks.csv": pd.concat(checks) if checks else pd.DataFrame(),
        "rejected.csv": found.rejected,
    }
    return {name: table for name, table in tables.items() if len(table)}


def _chains(
    readings: Readings,
    run: LakeRun,
    tables: Mapping[str, pd.DataFrame],
    files: LakeFiles,
    options: LakeOptions,
    limits: tuple[Limit, ...],
) -> list[Chain]:
    """Chains of the lakes to look at first; none for a long table, which would have to be read again."""
    if len(run.found.results) > ALL_CHECKS_UP_TO:
        return []
    none = pd.DataFrame({"row": []})
    of = LakeTables(
        checks=tables.get("checks.csv", none),
        classes=tables.get("classes.csv", none),
        verdicts=tables.get("verdicts.csv", none),
        loads=tables.get("critical_loads.csv", none),
    )
    rows = [int(row) for row in run.priorities["row"].head(ON_PAGE)]
    map_file = None if files.mapping is None else resolve_map(files.mapping)
    return first_lakes(run.found, readings, rows, of, options, limits, files.survey, map_file)


def lake_digits(options: LakeOptions) -> dict[str, dict[str, int]]:
    """Decimals of the columns of every table: those of results.csv also where a column is repeated elsewhere."""
    of_results = {
        f"{c.name}{end}": c.digits
        for c in lake_columns(options.thresholds)
        if c.digits is not None
        for end in ("", "_low", "_high")
    }
    of_results |= {"anc_ueq_l": 1, "anc_change_ueq_l": 1, "ph_closed": 2, "change_percent": 1, "repeat_dose_ueq_l": 1}
    of_results |= {f"change_{name}_ueq_l": 2 for name in (*CHANGES, *WEAK_CHANGES)}
    of_results |= {f"taken_by_{name}_ueq_l": 2 for name in DEMANDS} | {"repeat_g_m3": 2, "probability": 3}
    of_trends = {r["name"]: int(r["digits"]) for r in read_table("trend_columns") if r["digits"]}
    return dict.fromkeys(OUTPUT_FILES, of_results) | {"trends.csv": of_trends}


def _write(out: OutputFolder, tables: Mapping[str, pd.DataFrame], options: LakeOptions) -> None:
    with GrowingTables(out, lake_digits(options)) as writer:
        for name, table in tables.items():
            writer.add(name, table)


def _draw(found: LakeAssessment, run: LakeRun, out: OutputFolder) -> list[str]:
    """Write the figures; returns the panels for the page."""
    from aquabuf.report.html.panels import lake_drawings
    from aquabuf.report.lake_figures import save_lakes  # drawing is slow to import
    from aquabuf.report.trend_figures import save_trends, sites_on_page

    save_lakes(
        found,
        run.latest,
        {kind: out.part(f"lakes.{kind}") for kind in ("png", "svg")},
        source=run.source,
        group=run.options.group,
        air_co2_ppm=run.options.air_co2_ppm,
    )
    if len(run.trends) and (run.trends["status"] == "ok").any():
        for page, sites in enumerate(sites_on_page(run.trends)[:TREND_PAGES], start=1):
            name = "trends" if page == 1 else f"trends_{page}"
            paths = {kind: out.part(f"{name}.{kind}") for kind in ("png", "svg")}
            save_trends(run.series, run.trends, paths, source=run.source, sites=sites)
    return lake_drawings(run)


def _record(
    files: LakeFiles,
    hashes: Mapping[str, str],
    options: LakeOptions,
    rules: Rules,
    run: LakeRun,
    limits: tuple[Limit, ...],
) -> dict:
    """What the run rests on, for run.json: no clock, no paths."""
    found = run.found
    salt = bool(found.lakes.setting.lake.is_marine.any())
    return {
        "program": "aquabuf",
        "version": aquabuf.__version__,
        "command": "lake",
        "files": {name: path.name for name, path in files.given(options.schemes).items()},
        "sha256": dict(hashes),
        "options": asdict(options) | {"schemes": [Path(name).name for name in options.schemes]},
        "lakes": {
            "rows": len(found.results),
            "lakes": int(run.latest.sum()),
            "warned": int((run.lakes["warnings"] != "").sum()),
            "refused_rows": int(found.rejected["row"].nunique()),
        },
        "status": dict(sorted(Counter(found.results["status"]).items())),
        "anc_from": dict(sorted(Counter(found.results["anc_used_from"]).items())),
        "schemes": [
            {
                "name": s.name,
                "quantity": s.quantity,
                "source": s.source,
                "classes": [s.rule(i) for i in range(len(s.classes))],
            }
            for s in rules.schemes
        ],
        "organic": rules.organic.in_words(),
        "critical_load": list(rules.critical.lines()),
        "anc_limit": rules.limit.in_words(),
        "lime": rules.lime.name,
        "event": rules.event.in_words() if rules.event else None,
        "titrations": run.titrations,
        "constants": [dict(row) for row in read_table("constants") if row["regime"] != "salt" or salt],
        "limits": [{"name": x.name, "rule": x.rule(), "source": x.source} for x in limits],
        "notes": [*found.notes, *(f"{count} x {what}: {column}" for (what, column), count in found.flags.items())],
    }

"""`aquabuf lake`: a survey table in, acid sensitivity out."""

from __future__ import annotations

from pathlib import Path

import click

from aquabuf.cli.command import Command, option
from aquabuf.cli.screen import Screen, screen_options
from aquabuf.errors import InputError

__all__ = ["lake"]


def _numbers(_: click.Context, option: click.Parameter, text: str | None) -> tuple[float, ...] | None:
    if text is None:
        return None
    try:
        return tuple(dict.fromkeys(float(x) for x in text.split(",") if x.strip()))
    except ValueError:
        raise click.BadParameter(f"must be numbers with commas between, such as 6.0,5.5; found {text!r}.") from None


@click.command(cls=Command, examples=(
    "aquabuf lake field_data/lake_survey.csv --out lakes",
    "aquabuf lake field_data/lake_history.csv --by site --out history"))
@click.argument("survey", type=click.Path(path_type=Path))
@option("Results", "--out", "folder", type=click.Path(path_type=Path), required=True, help="Folder for the results.")
@option("Files read", "--map", "mapping", help="What the headers mean: a TOML file, or `wqx` for a long table of that "
                                       "exchange.")
@option("Class and groups", "--scheme", "schemes", multiple=True,
        help="Sensitivity scheme, a name or a TOML file; the first gives the class, more are set beside it.  "
                   "[default: survey_bands]")
@option("Acids and ions", "--organic", help="Organic acid model, or your own as SITES:PK,PK,PK.  [default: hruska_b]")
@option("Critical load, deposition, melt", "--critical-load",
        help="Words of the variant, such as \"flux original sweden\".  "
                                      "[default: concentration today norway chloride kept]")
@option("Critical load, deposition, melt", "--anc-limit",
        help="ANC limit in µeq/L, a name, or variable.  [default: 20]")
@option("Files read", "--event", type=click.Path(path_type=Path),
        help="Melt or storm water (TOML).  [default: of deposition]")
@option("Critical load, deposition, melt", "--event-fraction", type=float,
        help="Share of event water of deposition.  [default: 0.4]")
@option("Critical load, deposition, melt", "--deposition-change", "deposition_changes", callback=_numbers,
        help="Changes of sulfur deposition in percent.  [default: -50,-25,25]")
@option("Liming", "--lime", help="Liming product.  [default: limestone]")
@option("Liming", "--lime-anc", "lime_anc_ueq_l", type=float, help="ANC to lime to, in µeq/L.  [default: 100]")
@option("Liming", "--lime-ph", type=float, help="pH to lime to, at equilibrium with air, instead of an ANC.")
@option("Liming", "--lime-date", help="Day of liming, such as 2026-05-01, for the date of re-acidification.")
@option("Water and air", "--wind-relation",
        help="Gas transfer by wind: cole_caraco or vachon_prairie.  [default: cole_caraco]")
@option("Acids and ions", "--ammonium/--no-ammonium", default=None,
        help="Count ammonium in the charge balance.  [default: "
                                                             "ammonium]")
@option("Class and groups", "--by", "group", help="Column to group by: region, site or water_kind.  [default: region]")
@option("Files read", "--limits", type=click.Path(path_type=Path), help="Your own limits (TOML); they replace or add.")
@option("Files read", "--titrations", type=click.Path(path_type=Path),
        help="Titrations (as for `aquabuf titration`) that give the ANC of the samples they name.")
@option("Files read", "--titration-samples", type=click.Path(path_type=Path), help="Their table of samples.")
@option("Files read", "--titration-map", type=click.Path(path_type=Path),
        help="What the headers of titrations mean (TOML).")
@option("Files read", "--titration-samples-map", type=click.Path(path_type=Path),
        help="The same for their table of samples.")
@option("Water and air", "--air-co2-ppm", type=float, help="CO2 in dry air; the default and its year are printed.")
@option("Acids and ions", "--thresholds", callback=_numbers,
        help="More pH values for acid tolerance beside 6.0, 5.5 and 5.0.")
@option("Intervals", "--draws", type=int, help="Random draws behind intervals and probabilities; 0 leaves them out.  "
                                        "[default: 1000]")
@option("Intervals", "--seed", type=int, help="Seed of the draws.  [default: 1]")
@option("Water and air", "--marine-constants", "carbonic", type=click.Choice(["millero", "lueker"]),
        help="K1 and K2 of salt water.  [default: millero]")
@option("Results", "--figure/--no-figure", default=True, help="Draw the figures.  [default: figure]")
@option("Results", "--force", is_flag=True, help="Replace an earlier result in the folder.")
@screen_options
def lake(survey: Path, folder: Path, mapping: str | None, event: Path | None, limits: Path | None,
         titrations: Path | None, titration_samples: Path | None, titration_map: Path | None,
         titration_samples_map: Path | None, figure: bool, force: bool, quiet: bool, as_json: bool,
         **choices: object) -> None:
    """Judge the acid sensitivity of every lake of the table SURVEY and write the results to a folder.

    The folder gets results.csv (a row per lake), priorities.csv (what to look at first), classes.csv, verdicts.csv (the
    rule behind each verdict), groups.csv, critical_loads.csv (every variant), episodes.csv, deposition.csv, liming.csv,
    trends.csv and recovery.csv (dated series), checks.csv, rejected.csv, report.txt, run.json and figures.
    """
    from aquabuf.assess.lake.options import LakeOptions
    from aquabuf.readings.titration.paths import TitrationFiles
    from aquabuf.report.lake_run import LakeFiles, assess_survey

    given = {name: v for name, v in choices.items() if v is not None and v != ()}
    try:
        options = LakeOptions(**given)  # type: ignore[arg-type]
    except InputError as error:
        raise click.UsageError(str(error)) from None
    beside = (titration_samples, titration_map, titration_samples_map)
    if titrations is None and any(beside):
        raise click.UsageError("--titration-samples and the titration maps need --titrations. Name the file of points.")
    files = LakeFiles(survey=survey, mapping=mapping, limits=limits, event=event,
                      titrations=None if titrations is None else TitrationFiles(titrations, *beside))
    with Screen("lake", quiet=quiet, as_json=as_json) as screen:
        screen.show(assess_survey(files, folder, options, force=force, figure=figure, notify=screen.note,
                                  step=screen.step, tell=screen.tell))

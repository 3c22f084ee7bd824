"""`aquabuf assess`: readings in, assessment out."""

from __future__ import annotations

from pathlib import Path

import click

from aquabuf.cli.command import Command, option
from aquabuf.cli.screen import Screen, screen_options
from aquabuf.errors import InputError

__all__ = ["assess"]


def _thresholds(_: click.Context, option: click.Parameter, text: str | None) -> tuple[float, ...] | None:
    if text is None:
        return None
    try:
        return tuple(dict.fromkeys(float(x) for x in text.split(",") if x.strip()))
    except ValueError:
        raise click.BadParameter(f"must be pH values with commas between, such as 6.5,6.0; found {text!r}.") from None


@click.command(cls=Command, examples=(
    "aquabuf assess field_data/stream_survey.csv --out result",
    "aquabuf assess field_data/plant_raw_water.csv --limits field_data/plant_limits.toml --out raw"))
@click.argument("readings", type=click.Path(path_type=Path))
@option("Results", "--out", "folder", type=click.Path(path_type=Path), required=True, help="Folder for the results.")
@option("Files read", "--map", "mapping",
        help="What the headers mean: a TOML file, or wqx for a long table of that exchange.")
@option("Files read", "--limits", type=click.Path(path_type=Path), help="Your own limits (TOML); they replace or add.")
@option("Files read", "--titrations", type=click.Path(path_type=Path),
        help="Titrations (as for `aquabuf titration`) that give the alkalinity of the samples they name.")
@option("Files read", "--titration-samples", type=click.Path(path_type=Path), help="Their table of samples.")
@option("Files read", "--titration-map", type=click.Path(path_type=Path),
        help="What the headers of titrations mean (TOML).")
@option("Files read", "--titration-samples-map", type=click.Path(path_type=Path),
        help="The same for their table of samples.")
@option("Water and air", "--exchange", type=click.Choice(["closed", "open"]), default="closed", show_default=True,
        help="Take the water as sampled, or bring it to equilibrium with air first.")
@option("Water and air", "--air-co2-ppm", type=float, help="CO2 in dry air; the default and its year are printed.")
@option("Tolerance", "--thresholds", callback=_thresholds, help="pH values for acid tolerance, such as 6.5,6.0,5.5.")
@option("Tolerance", "--base-thresholds", callback=_thresholds, help="pH values for base tolerance, such as 8.5,9.0.")
@option("Intervals", "--draws", type=int, help="Random draws behind the intervals; 0 leaves them out.  [default: 1000]")
@option("Intervals", "--seed", type=int, help="Seed of the draws.  [default: 1]")
@option("Water and air", "--marine-constants", "carbonic", type=click.Choice(["millero", "lueker"]),
        help="K1 and K2 of salt water.  [default: millero]")
@option("Results", "--figure/--no-figure", default=True, help="Draw the figure.  [default: figure]")
@option("Results", "--force", is_flag=True, help="Replace an earlier result in the folder.")
@screen_options
def assess(readings: Path, folder: Path, mapping: str | None, limits: Path | None, titrations: Path | None,
           titration_samples: Path | None, titration_map: Path | None, titration_samples_map: Path | None, force: bool,
           figure: bool, thresholds: tuple[float, ...] | None, base_thresholds: tuple[float, ...] | None,
           quiet: bool, as_json: bool, **choices: object) -> None:
    """Assess every sample of the table READINGS and write the results to a folder.

    The folder gets results.csv (a row per sample), verdicts.csv (the rule behind each warning), checks.csv (quality),
    curves.csv (pH against added acid, worst samples), rejected.csv (rows refused and why), run.json and a figure.
    """
    from aquabuf.assess.options import Options
    from aquabuf.readings.titration.paths import TitrationFiles
    from aquabuf.report.run import assess_file

    given = choices | {"acid_thresholds": thresholds, "base_thresholds": base_thresholds}
    try:
        options = Options(**{n: v for n, v in given.items() if v is not None})  # type: ignore[arg-type]
    except InputError as error:
        raise click.UsageError(str(error)) from None
    beside = (titration_samples, titration_map, titration_samples_map)
    if titrations is None and any(beside):
        raise click.UsageError("--titration-samples and the titration maps need --titrations. Name the file of points.")
    files = None if titrations is None else TitrationFiles(titrations, *beside)
    with Screen("assess", quiet=quiet, as_json=as_json) as screen:
        screen.show(assess_file(readings, folder, options, mapping=mapping, limits=limits, titrations=files,
                                force=force, figure=figure, notify=screen.note, step=screen.step, tell=screen.tell))

"""`aquabuf titration`: burette readings in, alkalinity out; and the plan of a titration."""

from __future__ import annotations

from pathlib import Path

import click

from aquabuf.cli.command import Command, option
from aquabuf.cli.default import DefaultGroup
from aquabuf.cli.screen import Screen, screen_options
from aquabuf.errors import InputError

__all__ = ["titration"]


@click.group(cls=DefaultGroup, file_word="POINTS", invoke_without_command=False)
def titration() -> None:
    """Alkalinity and acidity from titrations, by every recognized method, with error bars and a diagnosis.

    `aquabuf titration POINTS --out FOLDER` assesses a file of titrations (options: `aquabuf titration run --help`);
    `aquabuf titration plan` says what to expect and which steps to take before you titrate.
    """


def _end_points(_: click.Context, option: click.Parameter, text: str | None) -> tuple[float, ...] | None:
    if text is None:
        return None
    try:
        return tuple(float(x) for x in text.split(",") if x.strip())
    except ValueError:
        raise click.BadParameter(f"must be pH values with commas between, such as 4.5,8.3; found {text!r}.") from None


def _figures(_: click.Context, option: click.Parameter, text: str) -> int:
    from aquabuf.report.titration_run import ALL_FIGURES

    if text.strip().lower() == "all":
        return ALL_FIGURES
    if text.strip().isdecimal():
        return int(text)
    raise click.BadParameter(f"must be a whole number or the word all; found {text!r}.")


@titration.command("run", cls=Command, examples=(
    "aquabuf titration field_data/titration_points.csv --samples field_data/titration_samples.csv --out titrated",
    "aquabuf titration field_data/sea_titration_points.csv --samples field_data/sea_titration_samples.csv --out sea"))
@click.argument("points", type=click.Path(path_type=Path))
@option("Results", "--out", "folder", type=click.Path(path_type=Path), required=True, help="Folder for the results.")
@option("Files read", "--samples", type=click.Path(path_type=Path),
        help="Table with a row per sample: volume, strength, ...")
@option("Files read", "--map", "points_map", type=click.Path(path_type=Path),
        help="What the headers of POINTS mean (TOML).")
@option("Files read", "--samples-map", type=click.Path(path_type=Path), help="What the headers of SAMPLES mean (TOML).")
@option("Methods", "--end-points", callback=_end_points, help="Fixed end points.  [default: 8.3,5.4,4.9,4.6,4.5,4.3]")
@option("Methods", "--weak-acid", is_flag=True, help="Let the fit of the curve seek one more weak acid.")
@option("Methods", "--convert", "conversion",
        help="Definition to convert the result to, beside its own: proton_balance, "
              "henriksen_1982 or charge_balance.")
@option("Results", "--figures", callback=_figures, default="50", show_default=True,
        help="How many titrations to draw; all or 0.")
@option("Results", "--force", is_flag=True, help="Replace an earlier result in the folder.")
@screen_options
def run(points: Path, folder: Path, samples: Path | None, points_map: Path | None, samples_map: Path | None,
        figures: int, force: bool, quiet: bool, as_json: bool, **choices: object) -> None:
    """Assess the titrations of the table POINTS and write the results to a folder.

    POINTS has a row per reading (sample_id, titrant_ml or titrant_counts or titrant_mass_g, ph or potential_mv); what
    is known of a sample (sample_volume_ml, titrant_eq_l, temperature_c, ...) stands there too or in SAMPLES; where a
    permit prescribes a method, name it in own_method. `aquabuf columns --titration` lists the columns, `aquabuf
    template titration_points` starts a table. The folder gets alkalinity.csv (a row per sample), findings.csv (what
    went wrong), a figure per sample, rejected.csv and run.json.
    """
    from aquabuf.assess.titration.options import TitrationOptions
    from aquabuf.readings.titration.paths import TitrationFiles
    from aquabuf.report.titration_run import titrate_file

    try:
        options = TitrationOptions(**{n: v for n, v in choices.items() if v is not None})  # type: ignore[arg-type]
    except InputError as error:
        raise click.UsageError(str(error)) from None
    with Screen("titration", quiet=quiet, as_json=as_json) as screen:
        screen.show(titrate_file(TitrationFiles(points, samples, points_map, samples_map), folder, options, force=force,
                                 figures=figures, notify=screen.note, step=screen.step, tell=screen.tell))


@titration.command("plan", cls=Command, examples=(
    "aquabuf titration plan --alkalinity 50",
    "aquabuf titration plan --alkalinity 120 --unit 'mg/L as CaCO3' --device counts --sulfuric --strength 1.6"))
@option("Sample", "--alkalinity", type=float, required=True, help="Expected alkalinity, in the unit of --unit.")
@option("Sample", "--unit", default="µeq/L", show_default=True, help="Its unit, such as 'mg/L as CaCO3' or meq/L.")
@option("Titration", "--sample-ml", type=float, help="Volume of sample.  [default: 100]")
@option("Titration", "--strength", "strength_eq_l", type=float, help="Strength of the acid, eq/L.  [default: 0.02]")
@option("Titration", "--device", help="burette, microburette or counts (digital titrator).  [default: burette]")
@option("Sample", "--ph", type=float, help="Expected first pH.  [default: in equilibrium with air]")
@option("Sample", "--temperature", "t_c", type=float, help="Temperature, °C.  [default: 20]")
@option("Titration", "--sulfuric", is_flag=True, help="The acid is sulfuric, not hydrochloric.")
def plan(alkalinity: float, unit: str, **given: object) -> None:
    """Say what to expect of a titration, and which steps to take near the end point."""
    from aquabuf.assess.titration.plan import Setup
    from aquabuf.assess.titration.plan import plan as worked_out
    from aquabuf.report.titration_plan import plan_text
    from aquabuf.units import to_house

    try:
        setup = Setup(alkalinity_eq_l=float(to_house(alkalinity, unit, "alkalinity")),
                      **{n: v for n, v in given.items() if v is not None})  # type: ignore[arg-type]
        text = plan_text(worked_out(setup))
    except InputError as error:
        raise click.UsageError(str(error)) from None
    click.echo(text, nl=False)

"""`aquabuf dose`: a plan of the works in, feeder settings and a sheet for the wall out."""

from __future__ import annotations

from pathlib import Path

import click

from aquabuf.cli.command import Command, option
from aquabuf.cli.default import DefaultGroup
from aquabuf.cli.screen import Screen, screen_options
from aquabuf.errors import InputError

__all__ = ["dose"]

MOST_DRAWS = 100_000


@click.group(cls=DefaultGroup, file_word="PLAN.toml", invoke_without_command=False)
def dose() -> None:
    """Doses, feeder settings and the water after every step, from a plan of the works.

    `aquabuf dose PLAN.toml --out FOLDER` solves a plan and prints the sheet for the wall (options: `aquabuf dose run
    --help`); `aquabuf dose sheet PLAN.toml` prints the dose-response table for the shift log.
    """


@dose.command("run", cls=Command, examples=(
    "aquabuf dose field_data/plan_upland.toml --out upland",
    "aquabuf dose field_data/plan_river.toml --draws 0 --no-figure --json --out river"))
@click.argument("plan", type=click.Path(path_type=Path))
@option("Results", "--out", "folder", type=click.Path(path_type=Path), required=True, help="Folder for the results.")
@option("Intervals", "--draws", type=click.IntRange(0, MOST_DRAWS),
        help="Random draws behind what errors of readings and feeds do; 0 leaves that out.  [default: of the "
                   "plan, else 500]")
@option("Results", "--figure/--no-figure", default=True, help="Draw the figure.  [default: figure]")
@option("Results", "--force", is_flag=True, help="Replace an earlier result in the folder.")
@screen_options
def run(plan: Path, folder: Path, draws: int | None, figure: bool, force: bool, quiet: bool, as_json: bool) -> None:
    """Solve the plan PLAN (TOML), print the sheet for the wall, and write the results to a folder.

    The folder gets answer.json (everything, under documented keys), sheet.txt, doses.csv (with the feed), steps.csv
    (the water after every step), curves.csv, faults.csv, limits.csv, errors.csv, season.csv and season_doses.csv,
    blend.csv, buffers.csv, report.html (all of it on a page, with sliders that answer what if), run.json and figures,
    as far as the plan has something for them.

    Exit code 0: every dose is found, every target met, no guard rail passed. 1: the plan cannot be read, or it does not
    hold; then the results are written all the same, and the reason goes to standard error. 2: wrong usage.
    """
    from aquabuf.report.dose_run import dose_plan

    with Screen("dose", quiet=quiet, as_json=as_json) as screen:
        done = dose_plan(plan, folder, draws=draws, force=force, figure=figure, step=screen.step, tell=screen.tell,
                         show=screen.early)
        screen.show(done.text)
    if done.reason:
        raise click.ClickException(f"the plan does not hold. {done.reason}")


@dose.command("sheet", cls=Command, examples=(
    "aquabuf dose sheet field_data/plan_upland.toml",
    "aquabuf dose sheet field_data/plan_river.toml --product alum --most '120 mg/L'"))
@click.argument("plan", type=click.Path(path_type=Path))
@option("Which dose", "--step", help="Name of one step.  [default: every step that doses]")
@option("Which dose", "--product", help="Name of one product of the store.  [default: all that are dosed]")
@option("Which dose", "--most",
        help="Largest dose of product, such as \"60 mg/L\".  [default: about twice the wanted one]")
def sheet(plan: Path, step: str | None, product: str | None, most: str | None) -> None:
    """Print the dose-response table of the plan PLAN for the shift log.

    A row per dose: product, pure substance, feed and setting at this flow, pH, alkalinity, saturation, buffer
    intensity, slope. The wanted dose is marked; below stands what 0.1 pH costs.
    """
    from aquabuf.report.dose_response import dose_responses, mg_l_of

    try:
        most_mg_l = None if most is None else mg_l_of(most)
    except InputError as error:
        raise click.UsageError(str(error)) from None
    click.echo(dose_responses(plan, step=step, product=product, most_mg_l=most_mg_l), nl=False)

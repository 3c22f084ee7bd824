"""`aquabuf tank`: a stream file in, a design of its neutralization and the proof by simulation out."""

from __future__ import annotations

from pathlib import Path

import click

from aquabuf.cli.command import Command, option
from aquabuf.cli.default import DefaultGroup
from aquabuf.cli.screen import Screen, screen_options

__all__ = ["tank"]

MOST_CASES, MOST_JOBS = 5000, 64


@click.group(cls=DefaultGroup, file_word="STREAM.toml", invoke_without_command=False)
def tank() -> None:
    """Size a neutralization from titration curve or composition, and try it by simulation.

    `aquabuf tank STREAM.toml --out FOLDER` designs and prints the report (options: `aquabuf tank run --help`);
    `aquabuf tank curve STREAM.toml` prints the titration curve of the mean waste.
    """


@tank.command("run", cls=Command, examples=(
    "aquabuf tank field_data/stream_plating.toml --out tanks",
    "aquabuf tank field_data/stream_seep.toml --no-simulation --json --out seep"))
@click.argument("stream", type=click.Path(path_type=Path))
@option("Results", "--out", "folder", type=click.Path(path_type=Path), required=True, help="Folder for the results.")
@option("Simulation", "--cases", type=click.IntRange(0, MOST_CASES),
        help="Cases of the Monte Carlo; 0 leaves the probability out.  [default: of the stream file, else 40]")
@option("Simulation", "--simulation/--no-simulation", default=True,
        help="Try the design by simulation.  [default: simulation]")
@option("Results", "--figure/--no-figure", default=True, help="Draw the figures.  [default: figure]")
@option("Results", "--force", is_flag=True, help="Replace an earlier result in the folder.")
@option("Simulation", "--jobs", type=click.IntRange(1, MOST_JOBS), default=2, show_default=True,
        help="Processes that the cases share; the results do not depend on it.")
@screen_options
def run(stream: Path, folder: Path, cases: int | None, simulation: bool, figure: bool, force: bool, jobs: int,
        quiet: bool, as_json: bool) -> None:
    """Design for the stream file STREAM (TOML), print the report, and write the results to a folder.

    The folder gets report.txt, design.json (everything, under documented keys), curve.csv, demand.csv, reagents.csv,
    equalization.csv, stages.csv, feed.csv, simulation.csv, cases.csv, faults.csv, side_effects.csv, sensitivity.csv,
    storage.csv, rules.csv (every rule shown, with its source), run.json and figures, as far as there is something for
    them.

    Exit code 0: the design is accepted, or it is not proven because simulation or cases were left out. 1: the file
    cannot be read, nothing can be sized, or the design is stopped or does not hold; then the results are written all
    the same, and the reason goes to standard error. 2: wrong usage.
    """
    from aquabuf.report.tank_run import tank_stream

    if cases and not simulation:
        raise click.UsageError("--cases needs the simulation. Leave out --no-simulation, or --cases.")
    with Screen("tank", quiet=quiet, as_json=as_json) as screen:
        done = tank_stream(stream, folder, cases=cases, simulate=simulation, figure=figure, force=force, jobs=jobs,
                           step=screen.step, tell=screen.tell)
        screen.show(done.text)
    if done.reason:
        raise click.ClickException(f"the design is not accepted. {done.reason}")


@tank.command("curve", cls=Command, examples=(
    "aquabuf tank curve field_data/stream_plating.toml",
    "aquabuf tank curve field_data/stream_dairy.toml | less"))
@click.argument("stream", type=click.Path(path_type=Path))
def curve(stream: Path) -> None:
    """Print the titration curve of the mean waste of STREAM: reagent to each pH, buffer intensity, gain."""
    from aquabuf.assess.tank.job_file import read_stream
    from aquabuf.report.tank_tables import curve_log

    click.echo(curve_log(read_stream(stream)), nl=False)

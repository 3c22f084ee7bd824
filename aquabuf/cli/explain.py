"""`aquabuf explain`: why a sample got its verdict, link by link."""

from __future__ import annotations

from pathlib import Path

import click

from aquabuf.cli.command import Command, option

__all__ = ["explain"]


@click.command(cls=Command, examples=(
    "aquabuf explain result UT-base --input field_data/stream_survey.csv",
    "aquabuf explain result LT-base --input field_data/stream_survey.csv --row 28 | less"))
@click.argument("results", metavar="RESULTS_DIR", type=click.Path(path_type=Path))
@click.argument("sample_id")
@option("Which reading", "--input", "given", type=click.Path(path_type=Path),
        help="The readings of the run, where they are neither beside RESULTS_DIR nor in the current folder.")
@option("Which reading", "--row", type=int, help="One row of the readings, where several have this name.")
def explain(results: Path, sample_id: str, given: Path | None, row: int | None) -> None:
    """Print the chain from reading to verdict for one sample of a run of `assess`, `titration` or `lake`.

    RESULTS_DIR is the folder that --out made. The readings (with map, limits and whatever else the run was given) must
    be those of the run: they are told by their hash, and the numbers are worked out again and compared with those
    written.
    """
    from aquabuf.report.explain_run import explain as explained

    click.echo(explained(results, sample_id, given=given, row=row), nl=False)

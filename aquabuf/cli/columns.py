"""`aquabuf columns`: what readings may hold, and what results mean."""

from __future__ import annotations

import click

from aquabuf.cli.command import Command, option
from aquabuf.errors import InputError

__all__ = ["columns"]


@click.command(cls=Command, examples=(
    "aquabuf columns alkalinity_eq_l", "aquabuf columns --results --titration"))
@click.argument("names", nargs=-1)
@option("Which columns", "--results", is_flag=True, help="Show the columns of the results instead.")
@option("Which columns", "--titration", is_flag=True,
        help="Show the columns of titrations (with --results: of alkalinity.csv).")
@option("Which columns", "--lake", is_flag=True,
        help="With --results: those of `aquabuf lake`, which reads the same readings.")
def columns(names: tuple[str, ...], results: bool, titration: bool, lake: bool) -> None:
    """Print the columns that a table of readings may have; name some to see their units, headers and ranges."""
    if lake and titration:
        raise click.UsageError("--lake and --titration must not come together. Drop one.")
    if results:
        from aquabuf.report.columns import lake_columns_text, result_columns_text, titration_columns_text

        text = titration_columns_text if titration else lake_columns_text if lake else result_columns_text
        click.echo(text())
    else:
        from aquabuf.readings.listing import columns_text
        from aquabuf.readings.schema import titration_quantities

        try:
            click.echo(columns_text(names, schema=titration_quantities() if titration else None))
        except InputError as error:
            raise click.UsageError(str(error)) from None

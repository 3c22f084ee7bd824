"""`aquabuf columns`: what readings may hold, and what results mean."""

from __future__ import annotations

import click

from aquabuf.errors import InputError

__all__ = ["columns"]


@click.command()
@click.argument("names", nargs=-1)
@click.option("--results", is_flag=True, help="Show the columns of results.csv instead.")
def columns(names: tuple[str, ...], results: bool) -> None:
    """Print the columns that a table of readings may have; name some to see their units, headers and ranges."""
    if results:
        from aquabuf.report.columns import result_columns_text

        click.echo(result_columns_text())
    else:
        from aquabuf.readings.listing import columns_text

        try:
            click.echo(columns_text(names))
        except InputError as error:
            raise click.UsageError(str(error)) from None

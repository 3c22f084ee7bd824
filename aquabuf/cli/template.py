"""`aquabuf template`: starter files."""

from __future__ import annotations

import click

from aquabuf.errors import InputError

__all__ = ["template"]


@click.command()
@click.argument("kind")
def template(kind: str) -> None:
    """Print a starter file: a table of readings for a KIND of water, a map file, or a limits file.

    \b
    Tables: stream, lake, plant, estuary.   Settings: map, limits.
    """
    from aquabuf.report.starters import starter

    try:
        click.echo(starter(kind), nl=False)
    except InputError as error:
        raise click.UsageError(str(error)) from None

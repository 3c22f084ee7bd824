"""`aquabuf template`: starter files."""

from __future__ import annotations

import click

from aquabuf.errors import InputError

__all__ = ["template"]


@click.command()
@click.argument("kind", required=False)
def template(kind: str | None) -> None:
    """Print a starter file: readings for a KIND of water, titrations, or a map, limits, scheme, event or plan.

    Without a KIND, list the kinds there are.
    """
    from aquabuf.report.starters import starter, starter_kinds

    try:
        click.echo("\n".join(starter_kinds()) + "\n" if kind is None else starter(kind), nl=False)
    except InputError as error:
        raise click.UsageError(str(error)) from None

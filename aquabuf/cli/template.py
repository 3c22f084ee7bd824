"""`aquabuf template`: starter files."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from aquabuf.cli.command import Command, option
from aquabuf.errors import InputError

if TYPE_CHECKING:
    from click.shell_completion import CompletionItem

__all__ = ["template"]


def _kinds(_: click.Context, __: click.Parameter, incomplete: str) -> list[CompletionItem]:
    from click.shell_completion import CompletionItem

    from aquabuf.report.starters import starter_kinds

    return [CompletionItem(kind) for kind in starter_kinds() if kind.startswith(incomplete)]


@click.command(cls=Command, examples=(
    "aquabuf template assess > readings.csv", "aquabuf template tank --out stream.toml"))
@click.argument("kind", required=False, shell_complete=_kinds)
@option("Results", "--out", "path", type=click.Path(path_type=Path), help="File to write.  [default: print it]")
@option("Results", "--force", is_flag=True, help="Replace a file that is there.")
def template(kind: str | None, path: Path | None, force: bool) -> None:
    """Print a starter file of a KIND, with remarks that say what belongs where.

    assess, titration, lake, dose and tank give a file that runs as it stands through the command of that name. The
    other kinds are tables of readings for a kind of water, and what a run may be given beside them: a map, limits, a
    scheme, event water. Without a KIND, list the kinds there are.
    """
    from aquabuf.report.starters import starter, starter_kinds, write_starter

    if kind is None and path is not None:
        raise click.UsageError("--out needs a KIND. `aquabuf template` lists the kinds.")
    try:
        if kind is not None and path is not None:
            write_starter(kind, path, force=force)
        else:
            click.echo("\n".join(starter_kinds()) + "\n" if kind is None else starter(kind), nl=False)
    except InputError as error:
        raise click.UsageError(str(error)) from None

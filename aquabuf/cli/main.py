"""The `aquabuf` command: groups the commands and turns every error made on purpose into one line."""

from __future__ import annotations

import os
import sys
from typing import Any

import click

from aquabuf import __version__
from aquabuf.cli.assess import assess
from aquabuf.cli.columns import columns
from aquabuf.cli.command import write_examples
from aquabuf.cli.completion import completion
from aquabuf.cli.dose import dose
from aquabuf.cli.explain import explain
from aquabuf.cli.lake import lake
from aquabuf.cli.tank import tank
from aquabuf.cli.template import template
from aquabuf.cli.titration import titration
from aquabuf.errors import AquabufError

__all__ = ["main"]


class _Group(click.Group):
    """Exit codes: 0 done, 1 the readings cannot be assessed, 2 wrong usage."""

    def invoke(self, ctx: click.Context) -> Any:
        try:
            return super().invoke(ctx)
        except AquabufError as error:
            raise click.ClickException(str(error)) from error
        except (click.ClickException, click.Abort, click.exceptions.Exit):
            raise
        except BrokenPipeError:  # the reader of our output, such as `head`, has gone
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            raise SystemExit(1) from None
        except Exception as error:  # a defect of ours; its place is for us, not for the user
            if os.environ.get("AQUABUF_TRACEBACK"):
                raise
            raise click.ClickException(
                f"aquabuf met a case it was not made for ({type(error).__name__}: {error}). Nothing was written over. "
                f"Please report it with the table; AQUABUF_TRACEBACK=1 shows where it happened.") from None

    def resolve_command(self, ctx: click.Context, args: list[str]) -> Any:
        from difflib import get_close_matches

        if args and not args[0].startswith("-") and args[0] not in self.commands and not ctx.resilient_parsing:
            near = get_close_matches(args[0], self.commands, n=1)
            hint = f" Did you mean {near[0]!r}?" if near else ""
            raise click.UsageError(f"No such command {args[0]!r}.{hint} Commands: {', '.join(sorted(self.commands))}.")
        return super().resolve_command(ctx, args)

    def format_epilog(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Where to start."""
        super().format_epilog(ctx, formatter)
        write_examples(("aquabuf assess field_data/stream_survey.csv --out result",
                        "aquabuf dose field_data/plan_upland.toml --out upland"), formatter)


@click.group(cls=_Group, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="aquabuf")
def main() -> None:
    """Alkalinity, speciation, buffering and acid tolerance of water, from field readings, with error bars.

    Start with `aquabuf template assess > readings.csv`, fill it in, then `aquabuf assess readings.csv --out result`.
    """


main.add_command(assess)
main.add_command(columns)
main.add_command(completion)
main.add_command(dose)
main.add_command(explain)
main.add_command(lake)
main.add_command(tank)
main.add_command(template)
main.add_command(titration)

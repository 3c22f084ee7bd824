"""A group of commands that runs one of them when none is named."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from aquabuf.cli.command import write_examples

if TYPE_CHECKING:
    from click.shell_completion import CompletionItem

__all__ = ["DefaultGroup"]


class DefaultGroup(click.Group):
    """`aquabuf GROUP FILE ...` runs the command named in `default`, `aquabuf GROUP NAME ...` the one named.

    file_word : what FILE is called in the help.
    """

    default = "run"

    def __init__(self, *words: Any, file_word: str = "FILE", **settings: Any):
        super().__init__(*words, **settings)
        self.file_word = file_word

    def parse_args(self, ctx: click.Context, args: list[str]) -> list[str]:
        """Put the default command before arguments that name none."""
        if args and args[0] not in {*self.commands, "--help", "-h"}:
            if not ctx.resilient_parsing:
                self._refuse_slip(args[0], ctx)
            args = [self.default, *args]
        return super().parse_args(ctx, args)

    def _refuse_slip(self, word: str, ctx: click.Context) -> None:
        """Refuse a bare word that is nearly a command and no file."""
        from difflib import get_close_matches

        near = [] if Path(word).suffix else get_close_matches(word, self.commands, n=1)
        if near and not Path(word).exists():
            raise click.UsageError(f"No such command or file {word!r}. Did you mean {near[0]!r}? "
                                   f"Commands: {', '.join(sorted(self.commands))}.", ctx)

    def shell_complete(self, ctx: click.Context, incomplete: str) -> list[CompletionItem]:
        """Commands, and what the default command would take."""
        run = self.commands[self.default]
        with run.make_context(self.default, [], parent=ctx, resilient_parsing=True) as inner:
            return [*super().shell_complete(ctx, incomplete), *_beside(run, inner, incomplete)]

    def format_usage(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Show both ways of calling."""
        formatter.write_usage(ctx.command_path, f"{self.file_word} --out FOLDER [OPTIONS] | COMMAND [ARGS]...")

    def format_epilog(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """The examples of the default command stand last."""
        super().format_epilog(ctx, formatter)
        write_examples(getattr(self.commands[self.default], "examples", ()), formatter)


def _beside(command: click.Command, ctx: click.Context, incomplete: str) -> list[CompletionItem]:
    """Completions of a command without its --help, which the group has too; its file where a word is begun."""
    if incomplete.startswith("-"):
        return [item for item in command.shell_complete(ctx, incomplete) if item.value not in ctx.help_option_names]
    first = next(param for param in command.params if isinstance(param, click.Argument))
    return first.shell_complete(ctx, incomplete)

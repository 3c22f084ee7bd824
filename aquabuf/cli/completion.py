"""`aquabuf completion`: the script that lets a shell complete commands, options and files."""

from __future__ import annotations

import click

from aquabuf.cli.command import Command

__all__ = ["completion"]

SHELLS = ("bash", "zsh", "fish")
PROGRAM = "aquabuf"


@click.command(cls=Command, examples=(
    'eval "$(aquabuf completion bash)"',
    "aquabuf completion fish > ~/.config/fish/completions/aquabuf.fish"))
@click.argument("shell", type=click.Choice(SHELLS))
@click.pass_context
def completion(ctx: click.Context, shell: str) -> None:
    """Print the script that completes commands, options and file names in SHELL.

    Run it in the shell, or add the line to its start-up file (~/.bashrc, ~/.zshrc).
    """
    from click.shell_completion import get_completion_class

    made = get_completion_class(shell)
    if made is None:
        raise click.UsageError(f"the installed click cannot complete in {shell}. Use one of: {', '.join(SHELLS)}.")
    click.echo(made(ctx.find_root().command, {}, PROGRAM, f"_{PROGRAM.upper()}_COMPLETE").source())

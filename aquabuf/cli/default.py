"""A group of commands that runs one of them when none is named."""

from __future__ import annotations

from typing import Any

import click

__all__ = ["DefaultGroup"]


class DefaultGroup(click.Group):
    """`aquabuf GROUP FILE ...` runs the command named in `default`, `aquabuf GROUP NAME ...` the one named."""

    default = "run"

    def parse_args(self, ctx: click.Context, args: list[str]) -> list[str]:
        """Put the default command before arguments that name none."""
        if args and args[0] not in {*self.commands, "--help", "-h"}:
            args = [self.default, *args]
        return super().parse_args(ctx, args)

    def format_usage(self, ctx: click.Context, formatter: Any) -> None:
        """Show both ways of calling."""
        formatter.write_usage(ctx.command_path, "POINTS --out FOLDER [OPTIONS] | COMMAND [ARGS]...")

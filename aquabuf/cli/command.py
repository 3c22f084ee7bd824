"""Commands whose help groups the options under headings and ends with examples."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import click

__all__ = ["Command", "HeadedOption", "option", "write_examples"]

OTHER = "Help"


class HeadedOption(click.Option):
    """An option that stands under a heading of its own in the help."""

    def __init__(self, *names: Any, heading: str, **settings: Any):
        super().__init__(*names, **settings)
        self.heading = heading


def option(heading: str, *names: str, **settings: Any) -> Callable[[Any], Any]:
    """An option under a heading of the help; the rest as for `click.option`."""
    return click.option(*names, cls=HeadedOption, heading=heading, **settings)


def write_examples(examples: Sequence[str], formatter: click.HelpFormatter) -> None:
    """The section of examples, each on a line of its own so that it can be copied."""
    if examples:
        with formatter.section("Examples"):
            for example in examples:
                formatter.write(f"{'':>{formatter.current_indent}}{example}\n")


class Command(click.Command):
    """A command with `examples`, whose options are HeadedOption."""

    def __init__(self, *words: Any, examples: Sequence[str] = (), **settings: Any):
        super().__init__(*words, **settings)
        self.examples = tuple(examples)

    def format_options(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """A section for each heading, in the order in which the headings first come."""
        sections: dict[str, list[tuple[str, str]]] = {}
        for param in self.get_params(ctx):
            record = None if isinstance(param, click.Argument) else param.get_help_record(ctx)
            if record is not None:
                sections.setdefault(getattr(param, "heading", OTHER), []).append(record)
        for heading, records in sections.items():
            with formatter.section(heading):
                formatter.write_dl(records)

    def format_epilog(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """The examples stand last."""
        super().format_epilog(ctx, formatter)
        write_examples(self.examples, formatter)

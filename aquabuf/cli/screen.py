"""What a run shows: its text in color, or its summary for programs, or nothing; and its progress while it works."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Mapping
from types import TracebackType
from typing import Any

import click

from aquabuf.cli.command import option
from aquabuf.report.terminal import Progress, colored, wants_color

__all__ = ["Screen", "screen_options"]

SCREEN = "Screen"


def screen_options(command: Callable[..., Any]) -> Callable[..., Any]:
    """Give a command `--quiet` and `--json`."""
    quiet = option(SCREEN, "--quiet", is_flag=True, help="Print errors only; the files are written all the same.")
    as_json = option(SCREEN, "--json", "as_json", is_flag=True,
                     help="Print a summary for programs instead of the text (docs/commands.md lists its keys).")
    return quiet(as_json(command))


class Screen:
    """The place of one run on the terminal; as a context manager it shows progress on stderr until the run ends.

    `note`, `step` and `tell` are handed to the run; `show` prints what it returned.
    """

    def __init__(self, command: str, *, quiet: bool, as_json: bool):
        self._quiet, self._as_json = quiet, as_json
        self._progress = Progress(f"aquabuf {command}", sys.stderr)
        self._summary: Mapping[str, Any] = {}
        self._shown = ""
        self.step = self._progress.step

    def __enter__(self) -> Screen:
        if not self._quiet:
            self._progress.open()
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        self._progress.close()

    def note(self, text: str) -> None:
        """A note beside the results, on stderr."""
        if not self._quiet:
            self._progress.note(text)

    def tell(self, summary: Mapping[str, Any]) -> None:
        """Keep the summary for programs."""
        self._summary = summary

    def early(self, text: str) -> None:
        """Print the beginning of the text while figures and page are still being made."""
        if not (self._as_json or self._quiet):
            self._shown = text
            self._progress.close()
            self._print(text)

    def show(self, text: str) -> None:
        """Print the text of the run, or what is left of it, or its summary as JSON, to stdout."""
        self._progress.close()
        if self._as_json:
            import json

            click.echo(json.dumps(self._summary, indent=1, ensure_ascii=False, allow_nan=False))
        elif not self._quiet:
            self._print(text.removeprefix(self._shown))

    def _print(self, text: str) -> None:
        click.echo(colored(text) if wants_color(sys.stdout, os.environ) else text, nl=False)

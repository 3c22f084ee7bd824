"""What a terminal shows beside the text: colors on the words of a verdict, and a line of progress that goes away."""

from __future__ import annotations

import os
import re
import threading
import time
from collections.abc import Mapping
from typing import Protocol, TextIO

__all__ = ["AFTER_S", "Progress", "Step", "colored", "progress_line", "silent", "wants_color"]

AFTER_S = 2.0  # work shorter than this shows no progress
EVERY_S = 0.25
BAR = 24       # cells
USUAL_COLUMNS = 80
RED, YELLOW, GREEN = "31", "33", "32"
# Longer words first: NOT ACCEPTED must not be taken for ACCEPTED. The text says all of it without color.
_WORDS = (
    (RED, r"\b(?:STOP|NOT ACCEPTED|NOT MET|NOT KEPT)\b"),
    (YELLOW, r"\b(?:NOT PROVEN|WARNINGS?|RULES AND WARNINGS)\b|^(?:Warnings|Refused)\b"),
    (GREEN, r"\bACCEPTED\b|^No limit is broken\b"),
)
_PATTERN = re.compile("|".join(f"(?P<c{color}>{words})" for color, words in _WORDS), re.MULTILINE)
_CLEAR = "\r\x1b[2K"


class Step(Protocol):
    """Is told what is being done, and how much of the whole is done where that is known (0 to 1)."""

    def __call__(self, words: str, share: float | None = None) -> None:
        """Take it in."""


def silent(words: str, share: float | None = None) -> None:
    """A step that nobody looks at."""


def wants_color(stream: TextIO, environment: Mapping[str, str]) -> bool:
    """Whether color goes to this stream: a terminal that can show it, and no NO_COLOR set to anything."""
    return stream.isatty() and not environment.get("NO_COLOR") and environment.get("TERM") != "dumb"


def colored(text: str) -> str:
    """The text with the words of a verdict in bold color; nothing else changes."""
    return _PATTERN.sub(lambda found: f"\x1b[1;{str(found.lastgroup)[1:]}m{found.group()}\x1b[0m", text)


def progress_line(label: str, words: str, share: float | None, seconds: float, columns: int) -> str:
    """One line of at most `columns` characters: what is done, how much of it, for how long."""
    bar = ""
    if share is not None:
        full = round(min(max(share, 0.0), 1.0) * BAR)
        bar = f"[{'=' * full}{' ' * (BAR - full)}] {min(max(share, 0.0), 1.0):4.0%}  "
    return f"{label}: {bar}{words}, {seconds:.0f} s"[:columns]


class Progress:
    """A line on a terminal that says what is being done, from `after_s` seconds on; nothing where `stream` is none.

    The line is drawn by a thread of its own, so that it moves while one long step is at work, and is wiped by
    `close` and before every note.
    """

    def __init__(self, label: str, stream: TextIO, *, after_s: float = AFTER_S):
        self._label, self._stream, self._after_s = label, stream, after_s
        self._words, self._drawn = "starting", False
        self._lock, self._done = threading.Lock(), threading.Event()
        self._start = time.monotonic()
        self._share: float | None = None
        self._thread: threading.Thread | None = None

    def open(self) -> None:
        """Start to watch the clock."""
        if self._stream.isatty() and os.environ.get("TERM") != "dumb":
            self._start = time.monotonic()
            self._thread = threading.Thread(target=self._draw_on, daemon=True)
            self._thread.start()

    def step(self, words: str, share: float | None = None) -> None:
        """Take in what is being done now."""
        with self._lock:
            self._words, self._share = words, share

    def note(self, text: str) -> None:
        """Write a line that stays."""
        with self._lock:
            self._wipe()
            self._stream.write(f"{text}\n")
            self._stream.flush()

    def close(self) -> None:
        """Stop, and leave the terminal as if no line had been there."""
        self._done.set()
        if self._thread is not None:
            self._thread.join()
            self._thread = None
        with self._lock:
            self._wipe()

    def _draw_on(self) -> None:
        wait = self._after_s
        while not self._done.wait(wait):
            wait = EVERY_S
            with self._lock:
                line = progress_line(self._label, self._words, self._share, time.monotonic() - self._start,
                                     _columns(self._stream) - 1)
                self._stream.write(f"{_CLEAR}{line}")
                self._stream.flush()
                self._drawn = True

    def _wipe(self) -> None:
        if self._drawn:
            self._stream.write(_CLEAR)
            self._stream.flush()
            self._drawn = False


def _columns(stream: TextIO) -> int:
    try:
        return os.get_terminal_size(stream.fileno()).columns or USUAL_COLUMNS
    except (OSError, ValueError):
        return USUAL_COLUMNS

"""Color on the words of a verdict, and the line of progress. What a terminal is, is told by a stand-in or by a pty."""

import io
import os
import re
import threading
import time

import pytest

from aquabuf.report import tank_report
from aquabuf.report.html.parts import TONES
from aquabuf.report.terminal import AFTER_S, BAR, Progress, colored, progress_line, silent, wants_color

ANSI = re.compile(r"\x1b\[[\d;]*m")


class Terminal(io.StringIO):
    """A stream that says it is a terminal."""

    def isatty(self):
        return True


# ------------------------------------------------------------------ color

@pytest.mark.parametrize(("stream", "environment", "wanted"), [
    (Terminal(), {}, True), (Terminal(), {"TERM": "xterm", "NO_COLOR": ""}, True), (io.StringIO(), {}, False),
    (Terminal(), {"NO_COLOR": "1"}, False), (Terminal(), {"NO_COLOR": "0"}, False), (Terminal(), {"TERM": "dumb"}, False)],
    ids=["terminal", "NO_COLOR empty", "pipe", "NO_COLOR=1", "NO_COLOR=0", "dumb"])
def test_when_color_is_wanted(stream, environment, wanted):
    """On a terminal only; any NO_COLOR that is not empty forbids it, whatever it says (the usual convention of that variable)."""
    assert wants_color(stream, environment) is wanted


def colors(text):
    """Each colored piece with its code, and nothing of the rest."""
    return re.findall(r"\x1b\[1;(\d+)m(.*?)\x1b\[0m", colored(text))


@pytest.mark.parametrize(("text", "expected"), [
    ("VERDICT: NOT ACCEPTED\n", [("31", "NOT ACCEPTED")]), ("VERDICT: ACCEPTED", [("32", "ACCEPTED")]),
    ("NOT PROVEN", [("33", "NOT PROVEN")]), ("STOP: DO NOT SET", [("31", "STOP")]), ("pH  7.1  NOT MET", [("31", "NOT MET")]),
    ("a\n\nRULES AND WARNINGS\n", [("33", "RULES AND WARNINGS")]), ("a\nWarnings\n  - 1 x", [("33", "Warnings")]),
    ("No limit is broken (x).", [("32", "No limit is broken")]), ("Refused: 2 rows", [("33", "Refused")])])
def test_words_of_a_verdict(text, expected):
    """Red for what must not be done, yellow for what must be looked at, green for what holds (ISO 6429: 31, 33, 32)."""
    assert colors(text) == expected


@pytest.mark.parametrize("text", ["UNSTOPPABLE", "STOPS", "an accepted design", "with a warning", "the Warnings", "row was Refused", ""])
def test_other_words_stay_plain(text):
    """Parts of words, small letters and words in the middle of a line have no color."""
    assert colored(text) == text


def test_nothing_but_color_is_added():
    """Without the codes the text is the same, byte for byte."""
    text = "VERDICT: NOT ACCEPTED\n  - STOP µeq/L\nWarnings\n"
    assert colored(text) != text
    assert ANSI.sub("", colored(text)) == text


@pytest.mark.parametrize("word", [tank_report.ACCEPTED, tank_report.REFUSED, tank_report.UNPROVEN, tank_report.STOPPED,
                                  TONES["stop"], TONES["warn"]])
def test_every_verdict_of_the_house_has_a_color(word):
    """A verdict word that changes its spelling must not lose its color unseen; the whole word has it."""
    assert [piece for _, piece in colors(f"VERDICT: {word}")] == [word]


# ------------------------------------------------------------------ the line

def test_the_line_says_what_how_much_and_how_long():
    """A bar where the share is known; the length by hand: a quarter of the cells is full."""
    assert progress_line("aquabuf lake", "trends", None, 12.4, 80) == "aquabuf lake: trends, 12 s"
    line = progress_line("a", "rows", 0.25, 3.0, 80)
    assert (line.count("="), line.count("[") + line.count("]")) == (BAR // 4, 2)
    assert " 25%" in line


@pytest.mark.parametrize(("share", "cells"), [(-1.0, 0), (0.0, 0), (1.0, BAR), (7.0, BAR)])
def test_the_bar_never_overflows(share, cells):
    """A share that was guessed wrong stays within the bar."""
    assert progress_line("a", "b", share, 0.0, 80).count("=") == cells


def test_the_line_fits_the_terminal():
    """A line that wraps could not be wiped."""
    assert len(progress_line("aquabuf", "w" * 300, 0.5, 9.0, 40)) == 40


def drawn(after_s, work, stream=None):
    """What a stream got of a progress that lasted as long as `work`."""
    stream = Terminal() if stream is None else stream
    progress = Progress("aquabuf x", stream, after_s=after_s)
    progress.open()
    work(progress)
    progress.close()
    return stream.getvalue()


def until_shown(progress, words="\x1b[2K"):
    """Wait until the stream has these words; by default the first line."""
    end = time.monotonic() + 20.0
    while words not in progress._stream.getvalue() and time.monotonic() < end:
        time.sleep(0.01)


def test_long_work_is_told_and_leaves_nothing():
    """The line is drawn, and the last thing written wipes it (ISO 6429: erase in line)."""
    def work(progress):
        until_shown(progress, "starting")
        progress.step("tables", 0.5)
        until_shown(progress, "tables")

    text = drawn(0.0, work)
    assert text.startswith("\r\x1b[2Kaquabuf x: starting, 0 s\r\x1b[2K")
    assert f"\r\x1b[2Kaquabuf x: [{'=' * (BAR // 2)}{' ' * (BAR // 2)}]  50%  tables, " in text
    assert text.endswith("\r\x1b[2K")


def test_short_work_shows_nothing():
    """Work that is over before the time draws no line; the time is two seconds."""
    assert drawn(60.0, lambda progress: progress.step("tables")) == ""
    assert AFTER_S == 2.0


def test_a_pipe_gets_nothing():
    """No thread, no line."""
    threads = threading.active_count()
    assert drawn(0.0, lambda _: time.sleep(0.05), io.StringIO()) == ""
    assert threading.active_count() == threads


def test_a_dumb_terminal_gets_nothing(monkeypatch):
    """It could not wipe the line."""
    monkeypatch.setenv("TERM", "dumb")
    assert drawn(0.0, lambda _: time.sleep(0.05)) == ""


def test_a_note_stands_alone_on_its_line():
    """The line is wiped first, and the note stays."""
    def work(progress):
        until_shown(progress)
        progress.note("1,000 draws take long.")

    assert "\r\x1b[2K1,000 draws take long.\n" in drawn(0.0, work)


def test_the_thread_ends_with_the_work():
    """Nothing goes on drawing."""
    before = threading.active_count()
    drawn(0.0, until_shown)
    assert threading.active_count() == before


@pytest.mark.skipif(not hasattr(os, "openpty"), reason="terminals of Unix")
def test_width_is_that_of_the_terminal():
    """On 30 columns no line is longer than 29 characters, so that the cursor never wraps."""
    import fcntl
    import struct
    import termios

    ours, theirs = os.openpty()
    fcntl.ioctl(theirs, termios.TIOCSWINSZ, struct.pack("HHHH", 24, 30, 0, 0))
    with os.fdopen(theirs, "w") as stream:
        progress = Progress("aquabuf x", stream, after_s=0.0)
        progress.step("w" * 200)
        progress.open()
        text = os.read(ours, 65536).decode()  # waits for the first line
        progress.close()
    os.close(ours)
    lines = [line for line in text.split("\r\x1b[2K") if line]
    assert {len(line) for line in lines} == {29}


def test_a_silent_step_returns_nothing():
    """It takes what every step takes."""
    assert silent("words", 0.5) is None

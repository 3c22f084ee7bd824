"""A chain from reading to verdict as text, 100 columns wide."""

from __future__ import annotations

import textwrap

from aquabuf.assess.sample.chain_steps import Chain, Part, Step
from aquabuf.report.html.parts import _CONTROLS

__all__ = ["LONGEST_WORDS", "WIDTH", "chain_text"]

WIDTH = 100
LABEL, VALUE = 38, 22  # columns of the label, and least of the value
LONGEST_TEXT = 400  # of a text from a file; the rest is cut with a mark
LONGEST_WORDS = 2000  # of a step


def chain_text(chain: Chain) -> str:
    """The chain as lines of at most WIDTH columns; what comes from the file cannot move the cursor or hide."""
    head = f"{plain(chain.sample_id)} ({plain(chain.file)}, row {chain.row}): {plain(chain.verdict, LONGEST_WORDS)}"
    body = [_part(number, part) for number, part in enumerate(chain.parts, start=1)]
    return "\n\n".join([_filled(head, ""), *body]) + "\n"


def plain(text: str, longest: int = LONGEST_TEXT) -> str:
    """A text in one line, without control characters, cut where it is very long."""
    one = _CONTROLS.sub("\N{REPLACEMENT CHARACTER}", " ".join(text.split()))
    return one if len(one) <= longest else f"{one[:longest]}…"


def _part(number: int, part: Part) -> str:
    about = f" ({plain(part.words)})" if part.words else ""
    lines = [_filled(f"{number}. {part.title}{about}", "   ")]
    return "\n".join([*lines, *(_step(step) for step in part.steps)])


def _step(step: Step) -> str:
    """Label, value and sign, then how it came about and where that is from: in one line where there is room."""
    label, value = plain(step.label), " ".join(plain(x) for x in (step.value, step.unit) if x)
    sign = f"  [{step.sign}]" if step.sign else ""
    said = " ".join([*([_sentence(plain(step.words, LONGEST_WORDS))] if step.words else []),
                     *([f"Source: {plain(step.source, LONGEST_WORDS)}."] if step.source else [])])
    first = f"   {label.ljust(LABEL)} {value}{sign}"
    together = f"{first.ljust(3 + LABEL + 1 + VALUE)}  {said}".rstrip()
    if len(together) <= WIDTH and (not said or not step.source):
        return together
    lines = [first.rstrip()] if len(first) <= WIDTH else [_filled(f"   {label}", "     "),
                                                          _filled(f"     {value}{sign}", "     ")]
    return "\n".join([*lines, _filled(f"       {said}", "       ")] if said else lines)


def _sentence(words: str) -> str:
    return words if words.endswith((".", "…")) else f"{words}."


def _filled(text: str, indent: str) -> str:
    kept = text.replace(" %", "\N{NO-BREAK SPACE}%")  # a number keeps its sign
    lines = textwrap.fill(kept, WIDTH, subsequent_indent=indent, break_on_hyphens=False)
    return lines.replace("\N{NO-BREAK SPACE}", " ")

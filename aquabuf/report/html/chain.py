"""A chain from reading to verdict as a folded part of a page."""

from __future__ import annotations

from aquabuf.assess.sample.chain_steps import BROKEN, FOUND, NOT_MET, OUTSIDE, REFUSED, Chain, Part, Step
from aquabuf.report.html.parts import Column, details, paragraph, table

__all__ = ["chain_details"]

# beside the words, which say it too
_TONES = {BROKEN: "stop", REFUSED: "stop", NOT_MET: "warn", OUTSIDE: "warn", FOUND: "warn"}


def chain_details(chain: Chain) -> str:
    """The same chain that the command prints, folded; each kind of link is a table of its own."""
    body = [_part(number, part) for number, part in enumerate(chain.parts, start=1)]
    title = f"How {chain.sample_id} was worked out (row {chain.row})"
    return details(title, paragraph(f"Outcome: {chain.verdict}."), *body)


def _part(number: int, part: Part) -> str:
    shown = {"Source": any(s.source for s in part.steps), "Judged": any(s.sign for s in part.steps)}
    columns = [Column(title="What"), Column(title="Value"), Column(title="How"),
               *(Column(title=title) for title, wanted in shown.items() if wanted)]
    rows = [_row(step, source=shown["Source"], judged=shown["Judged"]) for step in part.steps]
    caption = f"{number}. {part.title}" + (f" ({part.words})" if part.words else "")
    return table(columns, rows, caption=caption, tones=[_TONES.get(s.sign, "") for s in part.steps], sortable=False)


def _row(step: Step, *, source: bool, judged: bool) -> list[str]:
    value = " ".join(filter(None, (step.value, step.unit)))
    return [step.label, value, step.words, *([step.source] if source else []), *([step.sign] if judged else [])]

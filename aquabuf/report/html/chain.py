"""A chain from reading to verdict as a folded part of a page."""

from __future__ import annotations

from collections.abc import Sequence

from aquabuf.assess.sample.chain_steps import AT_RISK, BROKEN, FOUND, NOT_MET, OUTSIDE, REFUSED, Chain, Part, Step
from aquabuf.report.explain import LONGEST_WORDS
from aquabuf.report.html.parts import Column, details, paragraph, section, table

__all__ = ["chain_details", "chains_part"]

# beside the words, which say it too
_TONES = {BROKEN: "stop", REFUSED: "stop", **dict.fromkeys((NOT_MET, OUTSIDE, FOUND, AT_RISK), "warn")}


def chains_part(chains: Sequence[Chain], *, total: int, what: str, more: str = "") -> str:
    """The chains of the samples that the page shows first, each folded.

    what : names the samples, such as "lakes". more : what the command tells beside them.
    """
    if not chains:
        return ""
    which = f"All {total:,} {what}" if len(chains) >= total else f"The first {len(chains):,} of {total:,} {what}"
    words = (f"{which}, link by link from the readings as entered to the verdict. For any other one{more}: aquabuf "
             f"explain FOLDER NAME, with the folder of this page and the name of the sample.")
    return section("How each was worked out", paragraph(words), *(chain_details(chain) for chain in chains),
                   name="chains")


def chain_details(chain: Chain) -> str:
    """The same chain that the command prints, folded; each kind of link is a table of its own."""
    body = [_part(number, part) for number, part in enumerate(chain.parts, start=1)]
    title = f"How {chain.sample_id} was worked out (row {chain.row})"
    return details(title, paragraph(f"Outcome: {chain.verdict}."), *body, printed=False)


def _part(number: int, part: Part) -> str:
    shown = {"Source": any(s.source for s in part.steps), "Judged": any(s.sign for s in part.steps)}
    columns = [Column(title="What"), Column(title="Value"), Column(title="How"),
               *(Column(title=title) for title, wanted in shown.items() if wanted)]
    rows = [_row(step, source=shown["Source"], judged=shown["Judged"]) for step in part.steps]
    caption = f"{number}. {part.title}" + (f" ({part.words})" if part.words else "")
    return table(columns, rows, caption=caption, tones=[_TONES.get(s.sign, "") for s in part.steps], sortable=False,
                 longest=LONGEST_WORDS)


def _row(step: Step, *, source: bool, judged: bool) -> list[str]:
    value = " ".join(filter(None, (step.value, step.unit)))
    return [step.label, value, step.words, *([step.source] if source else []), *([step.sign] if judged else [])]

"""The page of an assessment of samples: what is wrong, the worst buffered, groups, quality, what was refused."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.limits import Limit
from aquabuf.assess.options import ALWAYS_ACID, Options
from aquabuf.assess.sample.assess import Assessment
from aquabuf.assess.sample.chain_steps import Chain
from aquabuf.assess.sample.columns import result_columns
from aquabuf.assess.sample.headline import RANK_BY
from aquabuf.report.html.chain import chains_part
from aquabuf.report.html.common import (
    INTERVAL,
    ROWS,
    Block,
    Kept,
    blocks_of,
    capital,
    constants_part,
    file_part,
    folded,
    limited,
    number,
    provenance,
    quantity_words,
    refused_part,
    rule_words,
    spread,
    titled,
)
from aquabuf.report.html.document import document
from aquabuf.report.html.parts import Column, Link, card, gallery, paragraph, section, table
from aquabuf.report.summary import plural
from aquabuf.report.tally import Tally

__all__ = ["AssessRows", "assess_page"]

GROUPS = ("region", "water_kind", "site")  # the first that differs among the samples makes the groups
FOLDED = ("Readings",)
OWN = ("Warnings", "Worst buffered first", "Refused", "Next", "No limit is broken")  # blocks that the page tells itself


@dataclass(slots=True)
class AssessRows:
    """What the tables of the page need, gathered piece by piece."""

    worst: Kept = field(default_factory=Kept)
    refused: Kept = field(default_factory=Kept)
    _groups: dict[str, dict[str, list[np.ndarray]]] = field(default_factory=lambda: {name: {} for name in GROUPS})

    def add(self, part: Assessment) -> None:
        """Take in one assessed piece."""
        results = part.results
        self.worst.add(results, results[RANK_BY].to_numpy())
        self.refused.add(part.rejected)
        figures = np.stack([results[RANK_BY].to_numpy(dtype=float), results["ph"].to_numpy(dtype=float),
                            (results["warnings"] != "").to_numpy(dtype=float)])
        for name, groups in self._groups.items():
            if name in results:
                codes, words = pd.factorize(results[name].to_numpy(dtype=object))
                for code, word in enumerate(words.tolist()):
                    groups.setdefault(str(word), []).append(figures[:, codes == code])

    def groups(self) -> tuple[str, list[tuple[str, np.ndarray]]]:
        """What the groups are and their figures (rank, pH, warned), the one with the worst median first."""
        for name, groups in self._groups.items():
            named = [(group, np.concatenate(pieces, axis=1)) for group, pieces in groups.items() if group]
            if 1 < len(named) < sum(figures.shape[1] for _, figures in named):
                return name, sorted(named, key=lambda g: (_middle(g[1][0]), g[0]))
        return "", []


def assess_page(tally: Tally, rows: AssessRows, options: Options, limits: Sequence[Limit], *, source: str, summary: str,
                record: Mapping[str, Any], written: Iterable[str], drawings: Sequence[str] = (),
                chains: Sequence[Chain] = ()) -> str:
    """The page of a run; same run, same bytes.

    summary : its text. record : its run.json. written : its files. drawings : figures as HTML. chains : of the worst
    samples.
    """
    quantities = quantity_words(result_columns(options))
    head, *blocks = blocks_of(summary)
    refused = next((b for b in blocks if b.title.startswith("Refused")), None)
    told = [b for b in blocks if not b.title.startswith(OWN)]
    cautions = next((b.lines for b in blocks if b.title == "Cautions"), ("",))
    parts = [
        *_cards(tally, rows, limits, quantities, cautions[0]),
        _worst(rows, limits),
        _warnings(tally, limits, quantities),
        _groups(rows),
        section("Figures", gallery(drawings), name="figures"),
        *(_told(b) for b in told if not b.title.startswith(FOLDED)),
        chains_part(chains, total=tally.assessed, what="samples", more=", and for the readings that each interval "
                                                                       "comes from"),
        refused_part(refused, rows.refused),
        file_part("assess", written),
        *(folded(b) for b in told if b.title.startswith(FOLDED)),
        constants_part(record["constants"]),
        provenance(record),
    ]
    return document(f"How well the waters of {source} hold their pH", head.title, parts)


def _middle(values: np.ndarray) -> float:
    """Median of what is known; infinite where nothing is, so that such a group comes last."""
    known = values[np.isfinite(values)]
    return float(np.median(known)) if known.size else np.inf


def _told(block: Block) -> str:
    """A block of the summary; one without lines says all in its title."""
    if block.lines:
        return titled(block)
    title, _, words = block.title.partition(": ")
    return section(title, paragraph(capital(words)))


def _reason(row: Mapping[str, Any], words: Mapping[str, str]) -> str:
    """The first limit that a sample breaks, in words, and how many more."""
    names = [name for name in str(row["warnings"]).split("; ") if name]
    more = f" (and {len(names) - 1} more)" if len(names) > 1 else ""
    return f"{words.get(names[0], names[0])}{more}" if names else "no limit broken"


def _cards(tally: Tally, rows: AssessRows, limits: Sequence[Limit], quantities: Mapping[str, str], caution: str,
           ) -> list[str]:
    """The survey in a sentence, and the sample that is buffered worst."""
    counts = [f"{tally.warnings[x.name]:,} × {x.words}" for x in limits if tally.warnings[x.name]]
    samples, verb = plural(tally.assessed, "sample"), "breaks" if tally.warned == 1 else "break"
    out = [card("warn", f"{tally.warned:,} of {samples} {verb} a limit", number="; ".join(counts[:3]))
           if tally.warned else card("good", f"No limit is broken in {samples}")]
    if not rows.worst.rows:
        return out
    worst = rows.worst.rows[0]
    broken = next((x for x in limits if x.name in str(worst["warnings"]).split("; ")), None)
    figures = (f"Acid to pH {ALWAYS_ACID:g}: {spread(worst, RANK_BY, 3)} meq/L"
               f"{f', {INTERVAL}' if f'{RANK_BY}_low' in worst else ''}; pH {number(worst['ph'], 2)}; alkalinity "
               f"{number(worst['alkalinity_meq_l'], 3)} meq/L. Negative: below pH {ALWAYS_ACID:g} already.")
    verdict = f"Worst buffered: {worst['sample_id']}, {broken.words if broken else 'no limit broken'}"
    out.append(card("warn" if broken else "good", verdict, number=figures, caution=caution,
                    rule=f"{rule_words(broken, quantities)} ({broken.source})" if broken else "",
                    next_step=capital(broken.next_step) if broken else ""))
    return out


def _worst(rows: AssessRows, limits: Sequence[Limit]) -> str:
    """The samples that take the least acid."""
    words = {x.name: x.words for x in limits}
    kept = rows.worst.rows
    given = [(name, title) for name, title in (("site", "Site"), ("region", "Region"))
             if kept and name in kept[0]]
    columns = [Column(title="Sample"), *(Column(title=title) for _, title in given), Column(title="pH", number=True),
               Column(title="Alkalinity (meq/L)", number=True),
               Column(title=f"Acid to pH {ALWAYS_ACID:g} (meq/L)", number=True,
                      meaning="strong acid that brings the water there; negative: it is below already"),
               Column(title="Carried by", meaning="pair of acid and base that buffers most now"),
               Column(title="Why", sentence=True)]
    lines = [[str(r["sample_id"]), *(str(r[name]) for name, _ in given), number(r["ph"], 2),
              number(r["alkalinity_meq_l"], 3), spread(r, RANK_BY, 3), str(r["carrier"]), _reason(r, words)]
             for r in kept]
    around = f"; in parentheses the {INTERVAL}" if kept and f"{RANK_BY}_low" in kept[0] else ""
    return section("Worst buffered first", limited(
        columns, lines, total=rows.worst.total, file="results.csv", what="samples",
        caption=f"By the acid that brings them to pH {ALWAYS_ACID:g}{around}",
        tones=["warn" if r["warnings"] else "" for r in kept]), name="worst")


def _warnings(tally: Tally, limits: Sequence[Limit], quantities: Mapping[str, str]) -> str:
    """Every limit that is broken, with rule, source and next step."""
    columns = [Column(title="Warning"), Column(title="Samples", number=True), Column(title="Rule"),
               Column(title="What to do", sentence=True), Column(title="Source", sentence=True)]
    lines = [[x.words, f"{tally.warnings[x.name]:,}", rule_words(x, quantities), capital(x.next_step), x.source]
             for x in limits if tally.warnings[x.name]]
    where = paragraph("Each sample with its own value and probability:" if lines else "", soft=True,
                      link=Link("verdicts.csv", "verdicts.csv"))
    return section("Warnings and their rules", table(columns, lines), where, name="warnings")


def _groups(rows: AssessRows) -> str:
    """Groups of samples, the worst first."""
    name, groups = rows.groups()
    title = name.replace("water_kind", "kind of water")
    columns = [Column(title=title.capitalize()), Column(title="Samples", number=True),
               Column(title="With a warning", number=True), Column(title="Lowest pH", number=True),
               Column(title=f"Lowest acid to pH {ALWAYS_ACID:g} (meq/L)", number=True),
               Column(title="Median (meq/L)", number=True)]
    lines = [[group.replace("_", " ") if name == "water_kind" else group, f"{f.shape[1]:,}", f"{int(f[2].sum()):,}",
              number(f[1].min(), 2), number(f[0].min(), 3), number(_middle(f[0]), 3)]
             for group, f in groups[:ROWS]]
    return section(f"By {title}", table(columns, lines, caption="The group with the least acid to it first"),
                   name="groups")

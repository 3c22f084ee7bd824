"""The text that `assess` prints: what was found, the worst first, what it rests on, and what to do next."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Sequence

import pandas as pd

from aquabuf.assess.limits import ANY, UNSTATED, Limit
from aquabuf.assess.options import Options
from aquabuf.assess.sample.headline import RANK_BY, TEST_ACID_EQ_L
from aquabuf.assess.sample.quality import allowed, check_facts
from aquabuf.assess.uncertainty import COVERAGE
from aquabuf.chem.gases import AIR_CO2_PPM, AIR_CO2_YEAR
from aquabuf.report.tally import Tally
from aquabuf.tables import read_table

__all__ = ["cautions", "item", "plural", "summary_text"]

WIDTH = 100
WORST_SHOWN = 8
REASONS_SHOWN = 12


def summary_text(tally: Tally, options: Options, limits: Sequence[Limit], *, source: str, files: Iterable[str]) -> str:
    """The whole summary; same run, same text."""
    blocks = [_head(tally, source)]
    if tally.assessed:
        blocks += [_warnings(tally, limits), _worst(tally, limits, options), _quality(tally)]
    blocks += [_refused(tally), _notes(tally), _assumptions(tally, options), _cautions(tally)]
    blocks.append(_next(tally, limits, files))
    return "\n\n".join(b for b in blocks if b) + "\n"


def plural(count: int, noun: str) -> str:
    """A count with its noun."""
    return f"{count:,} {noun}{'' if count == 1 else 's'}"


def item(text: str, mark: str = "  - ") -> str:
    """A wrapped line of a list."""
    return textwrap.fill(text, WIDTH, initial_indent=mark, subsequent_indent=" " * len(mark), break_on_hyphens=False)


def _head(tally: Tally, source: str) -> str:
    refused = len(tally.refused_rows)
    return (f"{source}: {plural(tally.assessed, 'sample')} assessed, {tally.warned:,} with a warning, "
            f"{plural(refused, 'row')} refused.")


def _warnings(tally: Tally, limits: Sequence[Limit]) -> str:
    if not tally.warnings:
        return "No limit is broken (`aquabuf template limits` shows the limits)."
    lines = ["Warnings"]
    for limit in limits:
        if limit.name in tally.warnings:
            lines.append(item(f"{tally.warnings[limit.name]:,} x {limit.name}: {limit.words} "
                               f"[{limit.rule()}; {_short(limit.source)}]"))
    return "\n".join(lines)


def _short(source: str) -> str:
    """The source without what follows its first colon or semicolon; verdicts.csv has it whole."""
    return source.split(";")[0].split(": ")[0]


def _number(value: float, digits: int) -> str:
    return "-" if pd.isna(value) else f"{value:.{digits}f}"


def _worst(tally: Tally, limits: Sequence[Limit], options: Options) -> str:
    """The worst-buffered samples: the figures that matter and the reason in words."""
    words = {limit.name: limit.words for limit in limits}
    rows = []
    for _, r in tally.worst.head(WORST_SHOWN).iterrows():
        low, high = (r.get(f"{RANK_BY}_{end}", float("nan")) for end in ("low", "high"))
        spread = "" if pd.isna(low) else f" ({low:.3f} to {high:.3f})"
        first = r["warnings"].split("; ")[0]
        rows.append((str(r["sample_id"])[:24], _number(r["ph"], 2), _number(r["alkalinity_meq_l"], 3),
                     _number(r[RANK_BY], 3) + spread, r["carrier"], words.get(first, "no limit broken")))
    head = ("sample", "pH", "alkalinity", "acid to pH 6", "carried by", "reason")
    widths = [max(len(x[i]) for x in [head, *rows]) for i in range(5)]
    lead = sum(widths) + 2 * 5
    state = "the closed water" if options.exchange == "closed" else "water at air, then closed"
    spread = f", {COVERAGE:.0%} interval" if f"{RANK_BY}_low" in tally.worst else ""
    lines = [f"Worst buffered first (meq/L; acid to pH 6 in {state}{spread}; negative: below 6 already)"]
    for row in [head, *rows]:
        cells = [row[0].ljust(widths[0])] + [row[i].rjust(widths[i]) for i in (1, 2)]
        cells += [row[i].ljust(widths[i]) for i in (3, 4)]
        reason = textwrap.wrap(row[5], max(30, WIDTH + 20 - lead - 2)) or [""]
        lines.append("  " + "  ".join([*cells, reason[0]]).rstrip())
        lines += [" " * (lead + 2) + more for more in reason[1:]]
    return "\n".join(lines)


def _quality(tally: Tally) -> str:
    facts = check_facts()
    lines = []
    for name, fact in facts.items():
        if tally.unmet[name]:
            lines.append(item(f"{tally.unmet[name]:,} of {tally.made[name]:,} fail {name} "
                               f"({allowed(fact)}): {fact['remedy']}."))
    for r in tally.file_checks().itertuples():
        if r.met == "no":
            lines.append(item(f"{r.check}: {r.value:.4g} {r.unit}, should be {r.limit}: {r.remedy}."))
    if not lines:
        return "Quality: every check that could be made is met."
    return "\n".join(["Quality (checks.csv has each sample)", *dict.fromkeys(lines)])


def _refused(tally: Tally) -> str:
    if not tally.refused_rows:
        return ""
    lines = [f"Refused: {plural(len(tally.refused_rows), 'row')} (rejected.csv names row, column, value and remedy)"]
    common = tally.refusal_rules.most_common(REASONS_SHOWN)
    lines += [item(f"{count:,} x {column}: {rule}") for (column, rule), count in common]
    if len(tally.refusal_rules) > REASONS_SHOWN:
        lines.append(f"  - and {len(tally.refusal_rules) - REASONS_SHOWN} more reasons")
    return "\n".join(lines)


def _notes(tally: Tally) -> str:
    """What the reader noticed and did: cells below detection, filled in, left out."""
    lines = [*tally.notes, *(f"{count:,} x {what}: {column}" for (what, column), count in tally.flags.items())]
    return "\n".join(["Readings", *(item(line) for line in lines)]) if lines else ""


def _counted(counter) -> str:
    return ", ".join(f"{name} {count:,}" for name, count in counter.most_common())


def _assumptions(tally: Tally, options: Options) -> str:
    air = f"{options.air_co2_ppm:g} ppm CO2 in dry air"
    if options.air_co2_ppm == AIR_CO2_PPM:
        air += f" (default: about the global mean of {AIR_CO2_YEAR}, recalled)"
    state = ("closed: the water as sampled, carbon kept in" if options.exchange == "closed"
             else "open: every water brought to equilibrium with air first")
    intervals = (f"{COVERAGE:.0%} intervals from {options.draws:,} seeded draws (seed {options.seed}) of the readings' "
                 f"own or default uncertainties (`aquabuf columns NAME` shows them); constants are taken as exact"
                 if options.draws else "No intervals (--draws 0)")
    lines = [f"Exchange {state}; {air}.", *tally.titrations,
             f"Known pair: {_counted(tally.pairs)}." if tally.pairs else "",
             f"Ionic strength from: {_counted(tally.strengths)}." if tally.strengths else "",
             "Alkalinity is the proton deficit at pH 4.5 zero level; pH is on the meter scale unless a column says so. "
             "Air pressure is 1 atm where neither pressure nor elevation is given.",
             f"Test dose of acid: {TEST_ACID_EQ_L * 1e3:g} meq/L. {intervals}."]
    if any(r != "fresh" for r in tally.regimes):
        lines.append(f"Salt water: marine constants of set {options.carbonic!r}; boron, sulfate, fluoride and calcium "
                     f"from salinity where not measured.")
    odd = {s: c for s, c in tally.statuses.items() if s != "ok"}
    if odd:
        lines.append("Status other than ok: " + ", ".join(f"{s} {c:,}" for s, c in odd.items()) + ".")
    return "\n".join(["What the answers rest on", *(item(line) for line in lines if line)])


def _cautions(tally: Tally) -> str:
    kinds = {kind or UNSTATED for kind in tally.kinds}
    return "\n".join(["Cautions", *(item(line) for line in cautions("assess", kinds))])


def cautions(command: str, kinds: Iterable[str] = ()) -> list[str]:
    """The cautions that belong to a command and to these kinds of water."""
    return [row["words"] for row in read_table("cautions") if row["command"] == command
            and (row["kinds"] == ANY or set(kinds) & set(row["kinds"].split(";")))]


def _next(tally: Tally, limits: Sequence[Limit], files: Iterable[str]) -> str:
    steps = [limit.next_step for limit in limits if limit.next_step and tally.warnings[limit.name]]
    lines = [item(f"{step[0].upper()}{step[1:]}.") for step in dict.fromkeys(steps)]
    lines.append(item(f"Written: {', '.join(files)}."))
    return "\n".join(["Next", *lines])

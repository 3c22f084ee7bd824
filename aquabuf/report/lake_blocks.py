"""Blocks of text about a survey of lakes; summary and report are put together from them."""

from __future__ import annotations

import textwrap
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.lake.assess import LakeAssessment
from aquabuf.assess.lake.classes import class_names
from aquabuf.assess.lake.columns import TO_PH_6
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.lake.schemes import QUANTITIES
from aquabuf.assess.limits import Limit
from aquabuf.assess.sample.quality import allowed, check_facts, file_check_rows
from aquabuf.readings.duplicates import DUPLICATE_RULE
from aquabuf.report.summary import WIDTH, item, plural
from aquabuf.units import key

__all__ = ["LakeRun", "block", "classes", "first_to_look_at", "groups", "head", "quality",
           "refused", "trends"]

FIRST_SHOWN = 8
SITES_SHOWN = 12
REASONS_SHOWN = 10
FAR_YEARS = 5  # between the latest samples of a survey's lakes; common practice, no source


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class LakeRun:
    """A run: what was found, and the tables of the survey as a whole.

    latest : rows that stand for their lake. series, trends, recovery : empty where no lake was sampled often enough.
    """

    found: LakeAssessment
    options: LakeOptions
    limits: tuple[Limit, ...]
    source: str
    titrations: Sequence[str]
    priorities: pd.DataFrame
    groups: pd.DataFrame
    latest: NDArray[np.bool_]
    series: pd.DataFrame
    trends: pd.DataFrame
    recovery: pd.DataFrame

    @property
    def lakes(self) -> pd.DataFrame:
        """One row per lake: its latest sample."""
        return self.found.results[self.latest]


def block(title: str, lines: Sequence[str]) -> str:
    """A titled list; nothing where there are no lines."""
    return "\n".join([textwrap.fill(title, WIDTH), *(item(line) for line in lines)]) if lines else ""


def _n(value: float, digits: int = 0) -> str:
    """A number with so many decimals; a dash where there is none."""
    return "-" if pd.isna(value) else f"{value:.{digits}f}"


def _spread(row: pd.Series, name: str, digits: int = 0) -> str:
    low, high = (row.get(f"{name}_{end}", np.nan) for end in ("low", "high"))
    around = "" if pd.isna(low) else f" ({low:.{digits}f} to {high:.{digits}f})"
    return _n(row[name], digits) + around


def head(run: LakeRun) -> str:
    """What was assessed."""
    rows, lakes = len(run.found.results), int(run.latest.sum())
    samples = "" if rows == lakes else f" from {plural(rows, 'sample')}"
    warned = int((run.lakes["warnings"] != "").sum())
    refused_rows = run.found.rejected["row"].nunique()
    text = (
        f"{run.source}: {plural(lakes, 'lake')}{samples} assessed, {warned:,} with a warning, "
        f"{plural(refused_rows, 'row')} refused."
    )
    dates = run.found.dates[run.latest]
    known = dates[~np.isnat(dates)].astype("datetime64[Y]")
    if known.size and (known.max() - known.min()).astype(int) > FAR_YEARS:
        text += f" The latest samples of these lakes are from {known.min()} to {known.max()}: old ones tell of then."
    return textwrap.fill(text, WIDTH)


def classes(run: LakeRun) -> str:
    """Lakes by class of the first scheme, and how the count moves with the definition of ANC."""
    scheme, table = run.found.rules.schemes[0], run.lakes
    chance = run.found.spread.classes.get((scheme.name, ""))
    lines = []
    for k, one in enumerate(scheme.classes):
        count = int((table["class"] == one.name).sum())
        expected = (
            "" if chance is None else f" ({np.nansum(chance[run.latest, k]):.1f} expected with the readings' errors)"
        )
        lines.append(f"{count:,} x {one.name}{expected}: {one.words} [{scheme.rule(k)}; {_first_source(one.source)}]")
    unknown = int((table["class"] == "").sum())
    lines += [f"{unknown:,} x no class: nothing that this scheme can class them by"] if unknown else []
    rests = Counter(w for w in table["class_on"] if w)
    if rests:
        lines.append(f"The class rests on: {', '.join(f'{w} {c:,}' for w, c in rests.most_common())}.")
    lines += _by_definition(run) + _by_scheme(run)
    weighted = run.groups.iloc[0]["weighted"] == "yes"
    lines.append(
        "Shares in groups.csv are weighted by the survey's design weights."
        if weighted
        else "These are counts of the lakes in this table, not shares of a population."
    )
    return block(f"Sensitivity class by {scheme.name} ({scheme.words})", lines)


def _first_source(source: str) -> str:
    return source.split(";")[0]


def _by_definition(run: LakeRun) -> list[str]:
    """Counts by each definition where more than one is known, and how many lakes change class."""
    scheme = run.found.rules.schemes[0]
    lines, codes = [], {}
    for definition in scheme.definitions:
        code = run.found.index[scheme.name, definition][run.latest]
        if (code >= 0).any():
            codes[definition] = code
    if len(codes) < 2:
        return []
    for definition, code in codes.items():
        names = Counter(name for name in class_names(scheme, code) if name)
        counts = ", ".join(f"{names[c.name]:,} {c.name}" for c in scheme.classes)
        lines.append(f"By {QUANTITIES[definition]} ({plural(int((code >= 0).sum()), 'lake')}): {counts}.")
    every = np.stack(list(codes.values()))
    known = (every >= 0).sum(axis=0) > 1
    lowest = np.where(every >= 0, every, 99).min(axis=0)
    differ = int((known & (lowest != every.max(axis=0))).sum())
    lines.append(
        f"{differ:,} of {plural(int(known.sum()), 'lake')} with more than one definition of ANC change class with it "
        f"(column class_conflicts)."
    )
    return lines


def _by_scheme(run: LakeRun) -> list[str]:
    lines = []
    for scheme in run.found.rules.schemes[1:]:
        place = run.found.used[scheme.name][run.latest]
        code = np.select(
            [place == p for p in range(len(scheme.definitions))],
            [run.found.index[scheme.name, d][run.latest] for d in scheme.definitions],
            -1,
        )
        names = Counter(name for name in class_names(scheme, code) if name)
        counts = ", ".join(f"{names[c.name]:,} {c.name}" for c in scheme.classes)
        lines.append(f"By {scheme.name} ({scheme.words}): {counts}.")
    return lines


def first_to_look_at(run: LakeRun) -> str:
    """The lakes to look at first: figures, reason, and next step."""
    table = run.priorities.head(FIRST_SHOWN)
    by_row = run.found.results.set_index("row")
    lines = [
        f"Look at these first (of {len(run.priorities):,}; priorities.csv has all): worst class, then exceedance, "
        f"then ANC"
    ]
    for _, p in table.iterrows():
        r = by_row.loc[p["row"]]
        name = _one_line(r.get("site") or r["sample_id"])
        chance = "" if pd.isna(r["class_probability"]) else f" (probability {r['class_probability']:.2f})"
        also = f", could be {r['class_also']}" if r["class_also"] else ""
        load = (
            ""
            if pd.isna(r["exceedance_meq_m2_yr"])
            else f"; {'above' if r['exceedance_meq_m2_yr'] > 0 else 'below'} its critical load by "
            f"{abs(r['exceedance_meq_m2_yr']):.0f} meq/m²/yr"
        )
        lines.append(
            item(
                f"{p['rank']}. {name}{_sample(r)}: {r['class'] or 'no class'}{chance}{also}"
                f"{_figure('; ' + (r['anc_used_from'] or 'ANC'), r, 'anc_used_ueq_l', ' µeq/L')}"
                f"{_figure('; pH', r, 'ph', '', 2)}"
                f"{_figure('; acid to pH 6 at air', r, TO_PH_6, ' µeq/L')}{load}. {_sentence(p['reason'])}",
                "  ",
            )
        )
    steps = dict.fromkeys(table["next_step"])
    return "\n".join([*lines, *(item(f"{_sentence(step)}", "  next: ") for step in list(steps)[:3])])


def _figure(words: str, r: pd.Series, name: str, unit: str, digits: int = 0) -> str:
    """A figure with its name, interval and unit; nothing where it is not known."""
    if pd.isna(r[name]):
        return ""
    spread = f"{r[name]:.{digits}f}" if name == "ph" else _spread(r, name, digits)
    return f"{words} {spread}{unit}"


def _sample(r: pd.Series) -> str:
    parts = [str(r[name]) for name in ("region", "date") if r.get(name)]
    return f" ({', '.join(parts)})" if parts else ""


def _sentence(words: str) -> str:
    return f"{words[:1].upper()}{words[1:]}." if words else ""


def trends(run: LakeRun) -> str:
    """Recovery of each lake that was sampled often enough."""
    if run.recovery.empty:
        return ""
    counts = Counter(run.recovery["recovering"])
    lines = [
        f"{plural(len(run.recovery), 'lake')} sampled in several years. Recovering from acid: "
        f"{', '.join(f'{w} {c:,}' for w, c in counts.most_common())}."
    ]
    lines += [f"{_one_line(r.site)}: {r.words}" for r in run.recovery.head(SITES_SHOWN).itertuples()]
    if len(run.recovery) > SITES_SHOWN:
        lines.append(f"and {len(run.recovery) - SITES_SHOWN:,} more in recovery.csv")
    return block("Trends (trends.csv has each quantity with its slope, interval and both p)", lines)


def quality(run: LakeRun) -> str:
    """Checks that are not met."""
    facts, made, unmet = check_facts(), run.found.made, run.found.unmet
    lines = [
        f"{unmet[name]:,} of {made[name]:,} fail {name} ({allowed(fact)}): {fact['remedy']}."
        for name, fact in facts.items()
        if unmet.get(name)
    ]
    checks = {check.name: check for check in run.found.checks}
    fails = ~checks["ion balance"].met & np.isfinite(checks["ion balance"].value)
    explained = int((fails & checks["ion balance with organic anions"].met).sum())
    if explained:
        lines.append(
            f"Of the {int(fails.sum()):,} that fail the ion balance, {explained:,} "
            f"{'passes' if explained == 1 else 'pass'} "
            f"once organic anions and aluminum are counted: these explain it."
        )
    for r in file_check_rows(run.found.rounding, run.found.duplicates).itertuples():
        if r.met == "no":
            lines.append(f"{r.check}: {r.value:.4g} {r.unit}, should be {r.limit}: {r.remedy}.")
    gap = Counter(w for w in run.lakes["anc_gap_words"] if w)
    if gap:
        lines.append(f"Charge-balance against titrated ANC: {', '.join(f'{w} {c:,}' for w, c in gap.most_common())}.")
    missing = Counter(w for w in run.lakes["missing_ions"] if w)
    if missing:
        lines.append(
            f"Ions not measured, so that there is no charge balance: "
            f"{', '.join(w + ' (' + plural(c, 'lake') + ')' for w, c in missing.most_common(5))}."
        )
    return block("Quality (checks.csv has each lake)", [*(lines or ["Every check that could be made is "
                                                                    "met."]), *_not_made(run)])


def _not_made(run: LakeRun) -> list[str]:
    """The checks that could be made for no lake, since a reading is missing."""
    names = [name for name, count in run.found.made.items() if not count]
    return [f"Could not be made for want of readings: {', '.join(names)}."] if names else []


def refused(run: LakeRun) -> str:
    """Rows that were not used, by reason."""
    rejected = run.found.rejected
    if rejected.empty:
        return ""
    counted = Counter(zip(rejected["column"], [str(r).split(" in row")[0] for r in rejected["rule"]], strict=True))
    lines = [f"{count:,} x {column}: {rule}" for (column, rule), count in counted.most_common(REASONS_SHOWN)]
    if len(counted) > REASONS_SHOWN:
        lines.append(f"and {len(counted) - REASONS_SHOWN} more reasons")
    again = rejected["rule"].astype(str).str.startswith(DUPLICATE_RULE)
    single = rejected["row"][rejected["sample_id"].isin(run.found.results["sample_id"]) & ~again].nunique()
    if single:  # only a long table has them
        lines.append(f"{single:,} of these are single results of samples that are assessed without them")
    return block(
        f"Refused: {plural(rejected['row'].nunique(), 'row')} (rejected.csv names row, column, value and remedy)", lines
    )


def groups(run: LakeRun) -> str:
    """Lakes of each group by class."""
    scheme, table = run.found.rules.schemes[0], run.groups
    if len(table) < 2:
        return ""
    lines = []
    for _, r in table.iterrows():
        counts = ", ".join(f"{int(r[f'lakes_{key(c.name)}']):,} {c.name}" for c in scheme.classes)
        anc = r["anc_used_ueq_l_median"]
        known = int(r["with_critical_load"])
        middle = "" if pd.isna(anc) else f"; median ANC {anc:.0f} µeq/L"
        over = f"; critical load exceeded in {int(r['exceeded']):,} of {known:,}" if known else ""
        lines.append(f"{_one_line(r['group'])}, {plural(int(r['lakes']), 'lake')}: {counts}{middle}{over}")
    return block(f"Lakes by {run.options.group} and class (counts)", lines)


def _one_line(name: object) -> str:
    """A name of the user's as part of a line: short and without breaks."""
    return " ".join(str(name).split())[:40]

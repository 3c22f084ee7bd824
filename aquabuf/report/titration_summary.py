"""The text that `titration` prints: results, what went wrong, what they rest on, and what to do next."""

from __future__ import annotations

from collections.abc import Iterable

import pandas as pd

from aquabuf.assess.titration.choose import method_facts
from aquabuf.assess.titration.findings import finding_facts
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.tables import NO_RESULT
from aquabuf.assess.uncertainty import TO_COVERAGE
from aquabuf.report.summary import cautions, item, plural
from aquabuf.report.titration_tally import LISTED, NAME_LENGTH, TitrationTally

__all__ = ["titration_summary"]

REASONS_SHOWN = 12


def titration_summary(tally: TitrationTally, options: TitrationOptions, *, source: str, files: Iterable[str]) -> str:
    """The whole text; same run, same text."""
    blocks = [_head(tally, source), _results(tally), _findings(tally), _refused(tally), _notes(tally),
              _rests_on(tally, options), "\n".join(["Cautions", *(item(line) for line in cautions("titration"))]),
              _next(tally, files)]
    return "\n\n".join(b for b in blocks if b) + "\n"


def _head(tally: TitrationTally, source: str) -> str:
    return (f"{source}: {plural(tally.samples, 'titration')}, {tally.with_result:,} with a result "
            f"({tally.status['warned']:,} of them with a warning), {tally.status['no result']:,} without, "
            f"{tally.status['refused']:,} refused.")


def _result(value: float, u: float) -> str:
    """A result and its 90 % interval, with the decimals that the interval allows."""
    half = TO_COVERAGE * u
    digits = 0 if half >= 10.0 else 1
    return f"{value:,.{digits}f} ± {half:,.{digits}f}"


def _row(r: pd.Series) -> tuple[str, str, str, str, str]:
    name = str(r["sample_id"])[:NAME_LENGTH]
    unit = next((u for u in ("ueq_l", "umol_kg") if not pd.isna(r.get(f"recommended_{u}", float("nan")))), "")
    if r["titrated_with"] == "base":
        result, per_l = _acidity(r), ""
    elif unit:
        value, u = r[f"recommended_{unit}"], r[f"recommended_u_{unit}"]
        result = f"{_result(value, u)} {'µeq/L' if unit == 'ueq_l' else 'µmol/kg'}"
        per_l = f"{r['recommended_mg_l_caco3']:.4g}"
    else:
        result, per_l = "-", ""
    warnings = r["warnings"].split("; ") if r["warnings"] else []
    more = f" (+{len(warnings) - 1})" if len(warnings) > 1 else ""
    said = warnings[0] + more if warnings else r["status"] if r["status"] != "ok" else ""
    method = "end point" if r["titrated_with"] == "base" and result != "-" else r["recommended_method"]
    return name, result, per_l, method, said


def _acidity(r: pd.Series) -> str:
    """Acidity to the highest end point that a base titration reached."""
    for end in ("8_3", "4_5", "3_7"):
        for unit, words in (("ueq_l", "µeq/L"), ("umol_kg", "µmol/kg")):
            value = r.get(f"acidity_{end}_{unit}", float("nan"))
            if not pd.isna(value):
                return f"{_result(value, r[f'acidity_{end}_u_{unit}'])} {words} acidity to pH {end.replace('_', '.')}"
    return "-"


def _results(tally: TitrationTally) -> str:
    if not tally.shown:
        return ""
    head = ("sample", "result, 90 % interval", "mg/L CaCO3", "method", "warning")
    rows = [head, *(_row(r) for r in tally.shown)]
    widths = [max(len(row[i]) for row in rows) for i in range(4)]
    lines = [f"Results{'' if tally.samples <= LISTED else f' (first {LISTED} of {tally.samples:,})'}"]
    for row, why in zip(rows, ["", *(_why_none(r) for r in tally.shown)], strict=True):
        cells = [row[0].ljust(widths[0]), row[1].ljust(widths[1]), row[2].rjust(widths[2]), row[3].ljust(widths[3])]
        lines.append("  " + "  ".join([*cells, row[4]]).rstrip())
        lines += [item(why, mark=" " * (widths[0] + 4))] if why else []
    return "\n".join(lines)


def _why_none(r: pd.Series) -> str:
    """Reason of a titration without result; those refused have theirs further down."""
    return f"{r['recommended_reason']}." if r["status"] == NO_RESULT else ""


def _findings(tally: TitrationTally) -> str:
    if not tally.findings:
        return "Diagnosis: nothing suspicious was found." if tally.with_result else ""
    lines = ["Diagnosis (findings.csv has each, with value, limit and source)"]
    for name, fact in finding_facts().items():
        if tally.findings[name]:
            names = ", ".join(tally.named[name]) + (" ..." if tally.findings[name] > len(tally.named[name]) else "")
            lines.append(item(f"{tally.findings[name]:,} x {name} ({names}): {fact['words']}. Next: {fact['remedy']}."))
    return "\n".join(lines)


def _refused(tally: TitrationTally) -> str:
    if not tally.refusals:
        return ""
    lines = ["Refused (rejected.csv names file, row, column, value and remedy)"]
    lines += [item(f"{count:,} x {column}: {rule}")
              for (column, rule), count in tally.refusals.most_common(REASONS_SHOWN)]
    if len(tally.refusals) > REASONS_SHOWN:
        lines.append(f"  - and {len(tally.refusals) - REASONS_SHOWN} more reasons")
    return "\n".join(lines)


def _notes(tally: TitrationTally) -> str:
    lines = [*tally.notes, *(f"{count:,} x {what}: {column}" for (what, column), count in tally.flags.items())]
    return "\n".join(["Files", *(item(line) for line in lines)]) if lines else ""


def _rests_on(tally: TitrationTally, options: TitrationOptions) -> str:
    used = [f"{method_facts('method')[name]['words']} {count:,}" for name, count in tally.methods.most_common()]
    lines = []
    if used:
        lines.append(f"Methods: {', '.join(used)}.")
    lines += [f"{words} ({count:,} of {tally.samples:,})." for words, count in tally.assumed.items()]
    lines += [
        "Fresh-water constants of Plummer & Busenberg with Davies activities, at the temperature and at the ionic "
        "strength of sample and titrant together; marine constants (Millero 2006) from salinity 1 on.",
        "Alkalinity is the proton deficit at the pH 4.5 zero level, signed; a fixed end point is reported as it is "
        "read. " + ("Nothing is converted between definitions (--convert does)." if options.conversion == "none" else
           f"Converted to: {options.conversion} ({method_facts('conversion')[options.conversion]['words']})."),
        "Uncertainty: strength, volumes, scatter of pH and burette, choice of points, fit. Weak acids that are not "
        "listed are not in it.",
    ]
    return "\n".join(["What the results rest on", *(item(line) for line in lines)])


def _next(tally: TitrationTally, files: Iterable[str]) -> str:
    lines = ["alkalinity.csv holds every method beside the recommended result and the reason for the choice."]
    if tally.with_result:
        lines.append("`aquabuf assess READINGS.csv --titrations POINTS.csv` takes these results into the assessment; "
                     "give it the same samples and maps.")
    if tally.figures < tally.samples and tally.figures:
        lines.append(f"Figures were drawn of the first {tally.figures:,}; --figures all draws every one.")
    lines.append(f"Written: {', '.join(files)}.")
    return "\n".join(["Next", *(item(line) for line in lines)])

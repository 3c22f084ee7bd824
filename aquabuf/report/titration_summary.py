"""The text that `titration` prints: results, what went wrong, what they rest on, and what to do next."""

from __future__ import annotations

import math
from collections.abc import Iterable

import pandas as pd

from aquabuf.assess.titration.choose import method_facts
from aquabuf.assess.titration.findings import finding_facts
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.tables import MICRO, NO_RESULT, limit_words
from aquabuf.assess.uncertainty import TO_COVERAGE
from aquabuf.report.summary import cautions, item, plural
from aquabuf.report.titration_tally import LISTED, NAME_LENGTH, NAMED, TitrationTally
from aquabuf.units import convert

__all__ = ["titration_summary"]

REASONS_SHOWN = 12
UNITS = {"ueq_l": "µeq/L", "umol_kg": "µmol/kg"}


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
    unit = next((u for u in UNITS if not pd.isna(r.get(f"recommended_{u}", float("nan")))), "")
    if r["titrated_with"] == "base":
        result, per_l = _acidity(r)
    elif unit:
        value, u = r[f"recommended_{unit}"], r[f"recommended_u_{unit}"]
        result = f"{_result(value, u)} {UNITS[unit]}"
        per_l = f"{r['recommended_mg_l_caco3']:.4g}"
    else:
        result, per_l = "-", ""
    warnings = r["warnings"].split("; ") if r["warnings"] else []
    more = f" (+{len(warnings) - 1})" if len(warnings) > 1 else ""
    said = warnings[0] + more if warnings else r["status"] if r["status"] != "ok" else ""
    method = "end point" if r["titrated_with"] == "base" and result != "-" else r["recommended_method"]
    return name, result, per_l, method, said


def _acidity(r: pd.Series) -> tuple[str, str]:
    """Acidity to the highest end point that a base titration reached, and the same in mg/L as CaCO3."""
    for end in ("8_3", "4_5", "3_7"):
        for unit, words in UNITS.items():
            value = r.get(f"acidity_{end}_{unit}", float("nan"))
            if not pd.isna(value):
                said = f"{_result(value, r[f'acidity_{end}_u_{unit}'])} {words} acidity to pH {end.replace('_', '.')}"
                mg = convert(value / MICRO, "eq/L", "mg/L as CaCO3", "alkalinity") if unit == "ueq_l" else None
                return said, "" if mg is None else f"{mg:.4g}"
    return "-", ""


def _results(tally: TitrationTally) -> str:
    if not tally.shown:
        return ""
    head = ("sample", "result, 90 % interval", "mg/L CaCO3", "method", "warning")
    rows = [head, *(_row(r) for r in tally.shown)]
    widths = [max(len(row[i]) for row in rows) for i in range(4)]
    lines = [f"Results{'' if tally.samples <= LISTED else f' (first {LISTED} of {tally.samples:,})'}"]
    for row, why in zip(rows, ["", *(_below(r) for r in tally.shown)], strict=True):
        cells = [row[0].ljust(widths[0]), row[1].ljust(widths[1]), row[2].rjust(widths[2]), row[3].ljust(widths[3])]
        lines.append("  " + "  ".join([*cells, row[4]]).rstrip())
        lines += [item(why, mark=" " * (widths[0] + 4))] if why else []
    return "\n".join(lines)


def _converted(r: pd.Series) -> str:
    """The result by the definition that was asked for."""
    for unit, words in UNITS.items():
        value = r.get(f"converted_{unit}", math.nan)
        if not pd.isna(value):
            return f"{value:,.1f} {words} by {r['converted_to']}."
    return ""


def _below(r: pd.Series) -> str:
    """What stands under a line: why there is no result (those refused have theirs further down), more on acidity."""
    if r["status"] == NO_RESULT:
        return f"{r['recommended_reason']}."
    if r["titrated_with"] != "base":
        return _converted(r)
    unit = next((u for u in UNITS for name in ("acidity_8_3", "recommended")
                 if not pd.isna(r.get(f"{name}_{u}", math.nan))), "ueq_l")
    words = UNITS[unit]
    calculated, net, value = (r.get(f"{name}_{unit}", math.nan) for name in ("calculated_acidity", "net_acidity",
                                                                            "recommended"))
    said = []
    if not pd.isna(calculated):
        said.append(f"acidity calculated from metals and pH {calculated:,.0f} {words}" +
                    ("" if pd.isna(net) else f", net {net:,.0f} {words}"))
    if not pd.isna(value):
        said.append(f"signed alkalinity by the Gran line {_result(value, r[f'recommended_u_{unit}'])} {words}")
    return f"{'; '.join(said)}." if said else ""


def _findings(tally: TitrationTally) -> str:
    if not tally.findings:
        return "Diagnosis: nothing suspicious was found." if tally.with_result else ""
    told = {r["recommended_reason"] for r in tally.shown}
    lines = ["Diagnosis (findings.csv has each, with value, limit and source)"]
    for name, fact in finding_facts().items():
        if tally.findings[name]:
            names = ", ".join(tally.named[name]) + (" ..." if tally.findings[name] > len(tally.named[name]) else "")
            limit = f"; limit: {limit_words(fact)}" if fact["low"] or fact["high"] else ""
            more = tally.first_more[name] if tally.findings[name] == 1 else ""
            more = f"; {more}" if more and more not in told else ""
            lines.append(item(f"{tally.findings[name]:,} x {name} ({names}{limit}): {fact['words']}{more}. "
                              f"Next: {fact['remedy']}."))
    return "\n".join(lines)


def _refused(tally: TitrationTally) -> str:
    if not tally.refusals:
        return ""
    lines = ["Refused (rejected.csv names file, row, column, value and remedy)"]
    for key, count in tally.refusals.most_common(REASONS_SHOWN):
        names = tally.refused_names[key]
        more = "" if count <= NAMED else ", ..."
        lines.append(item(f"{count:,} x {key[0]}: {key[1]} ({', '.join(names)}{more})"))
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
        lines.append("`aquabuf assess READINGS.csv --titrations POINTS.csv --out FOLDER` takes these results into the "
                     "assessment; where there is a table of samples, add --titration-samples SAMPLES.csv.")
    if tally.figures < tally.samples and tally.figures:
        lines.append(f"Figures were drawn of the first {tally.figures:,}; --figures all draws every one.")
    lines.append(f"Written: {', '.join(files)}.")
    return "\n".join(["Next", *(item(line) for line in lines)])

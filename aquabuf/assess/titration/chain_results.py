"""Links of the chain of a titration: method and why, lines and fits, result, what its interval is made of, findings."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.sample.chain_results import written
from aquabuf.assess.sample.chain_steps import FOUND, USED, Part, Step, label_and_words
from aquabuf.assess.titration.assess import TitrationResult
from aquabuf.assess.titration.choose import method_facts, method_key
from aquabuf.assess.titration.curves import SHARED_BY_ALL, u_of
from aquabuf.assess.titration.findings import finding_facts
from aquabuf.assess.titration.options import ALWAYS_END_POINT, TitrationOptions
from aquabuf.assess.titration.solve import ACIDITY_END_POINTS, ORGANIC_SHARES, organic_sites
from aquabuf.assess.titration.tables import MICRO, PER_KILOGRAM, PER_LITER, column_facts
from aquabuf.assess.uncertainty import COVERAGE, TO_COVERAGE
from aquabuf.readings.schema import titration_quantities

__all__ = ["column_label", "contributions", "findings_part", "method_part", "result_parts", "uncertainty_part",
           "verdict_words"]

TITLES = {  # of the parts, by the beginning of the columns that they hold
    "recommended_": "Result", "converted_": "Result", "gran_": "Gran line", "fit_": "Fit of the whole curve",
    "inflection_": "Other ways to the end point", "fixed_": "Other ways to the end point",
    "two_point_": "Other ways to the end point", "acid_excess_": "Other ways to the end point",
    "acidity_": "What the water holds", "co2_": "What the water holds", "calculated_": "What the water holds",
    "net_": "What the water holds", "partition_": "What the water holds", "species_": "What the water holds",
    "points": "The curve", "first_ph": "The curve", "lowest_ph": "The curve", "temperature_c": "The curve",
    "salinity": "The curve",
}
TITLE_ORDER = ("The curve", "Gran line", "Fit of the whole curve", "Other ways to the end point", "Result",
               "What the water holds")
ABOUT = {
    "Gran line": "free acid past the end point, (V0 + V)/V0 10^-pH, against acid added: its root is the alkalinity",
    "Fit of the whole curve": "least squares on the proton balance; alkalinity, carbon and electrode offset sought",
}
FITTED = {"Fit of the whole curve": "pH of the points in the fit",
          "Other ways to the end point": "pH of the points of acid in excess"}
LEAST_SHARE = 0.005  # of the variance; smaller ones are not told


def _unit(part: TitrationResult, i: int) -> str:
    return "µmol/kg" if part.solved.curves.by_mass[i] else "µeq/L"


# ---------------------------------------------------------------- verdict and method


def verdict_words(part: TitrationResult, i: int, row: Mapping[str, Any]) -> str:
    """The outcome in one sentence: result with its interval, method, findings."""
    found = [name for name in str(row["warnings"]).split("; ") if name]
    count = f"{len(found)} finding{'s' if len(found) > 1 else ''}"
    said = f"{count} ({', '.join(found)})" if found else "nothing suspicious"
    value, u, what = _headline(part, i, row)
    if np.isnan(value):
        return f"no result by any method; {said}"
    low, high = value - TO_COVERAGE * u, value + TO_COVERAGE * u
    return (f"{what} {written(value, 2)} {_unit(part, i)} ({COVERAGE:.0%} interval {written(low, 2)} to "
            f"{written(high, 2)}); {said}")


def _headline(part: TitrationResult, i: int, row: Mapping[str, Any]) -> tuple[float, float, str]:
    """The result, its standard uncertainty, and what it is: acidity to the highest end point where base was added."""
    s, method = part.solved, str(part.choice.method[i])
    if s.curves.is_base[i]:
        for end in sorted(ACIDITY_END_POINTS, reverse=True):
            e = s.acidity[end]
            if np.isfinite(e.value[i]):
                return MICRO * float(e.value[i]), MICRO * float(e.u[i]), f"acidity to pH {end:g}"
    by = f" by {method_facts('method')[method]['words']}:" if method else ""
    return MICRO * float(part.choice.value[i]), MICRO * float(part.choice.u[i]), f"{row['definition']}{by}"


def method_part(part: TitrationResult, i: int) -> Part:
    """The kind of water, every method with what it gives, and why it is recommended or not."""
    s, choice = part.solved, part.choice
    water = method_facts("water")[str(choice.water[i])]
    steps = [Step(label="kind of water", value=water["words"], words=water["why"], source=_source(water)),
             Step(label="why this method", value="" if choice.method[i] else "none", words=str(choice.reason[i]))]
    if choice.own_problem[i]:
        steps.append(Step(label="your own method", value="cannot work here", words=str(choice.own_problem[i])))
    for name, (able, why) in choice.able.items():
        fact, e = method_facts("method")[name], s.estimates[method_key(name)]
        value = "none" if np.isnan(e.value[i]) else \
            f"{written(MICRO * e.value[i], 2)} ± {written(MICRO * TO_COVERAGE * e.u[i], 2)}"
        chosen = name == choice.method[i]
        words = fact["why"] if chosen else _passed_over(name, str(choice.method[i]), water["order"].split(";")) \
            if able[i] else f"not used: {why[i]}"
        steps.append(Step(label=fact["words"], value=value, unit="" if value == "none" else _unit(part, i), words=words,
                          source=_source(fact), sign=USED if chosen else ""))
    return Part("Method", tuple(steps), f"± is half the {COVERAGE:.0%} interval")


def _passed_over(name: str, chosen: str, order: list[str]) -> str:
    """Why a method that has a sound result is not the one recommended."""
    if not chosen:
        return "has a result, which is not given: see above"
    if name not in order:
        return "has a result; not a method for this kind of water"
    if chosen not in order or order.index(name) < order.index(chosen):
        return "has a result; your own method is kept"
    return "has a result; another comes first for this kind of water"


def _source(fact: Mapping[str, str]) -> str:
    return fact["source"] + (" (recalled)" if fact["mark"] == "recalled" else "")


# ---------------------------------------------------------------- numbers of alkalinity.csv


def column_label(key: str, fact: Mapping[str, str]) -> tuple[str, str]:
    """The label of a column of alkalinity.csv and what more is to say of it."""
    label, words = label_and_words(fact["meaning"])
    if key == "partition_holds":
        return "phenolphthalein and total alkalinity tell it", ""
    if "*" in fact["name"]:
        before, after = fact["name"].split("*")
        ph = key.removeprefix(before).removesuffix(after).replace("_", ".")
        for place in ("that fixed end point", "that pH"):
            label = label.replace(place, f"pH {ph}")
    return label, words


def result_parts(part: TitrationResult, i: int, row: Mapping[str, Any], options: TitrationOptions) -> list[Part]:
    """Every number of alkalinity.csv, under the title it belongs to."""
    facts = {key: (name, fact) for name, key, fact in column_facts(
        options, by_kilogram=bool(part.solved.curves.by_mass[i]), by_liter=not part.solved.curves.by_mass[i])}
    steps: dict[str, list[Step]] = {title: [] for title in TITLE_ORDER}
    for key, (name, fact) in facts.items():
        title = next((t for begin, t in TITLES.items() if key.startswith(begin)), "")
        value = row.get(name)
        if not title or "_u_" in key or key.endswith("_status") or value is None or _blank(value):
            continue
        label, words = column_label(key, fact)
        u_name, u_fact = facts.get(_u_key(key), ("", fact))
        u = float(row.get(u_name, np.nan)) if u_name else np.nan
        digits = int(fact["digits"]) if fact["digits"] else None
        around = f"standard uncertainty {written(u, int(u_fact['digits'] or 0))}" if np.isfinite(u) else ""
        text = written(float(value), digits) if fact["digits"] else str(value)
        if key == "recommended_{eq}" and np.isfinite(u):
            low, high = float(value) - TO_COVERAGE * u, float(value) + TO_COVERAGE * u
            text += f" ({written(low, digits)} to {written(high, digits)})"
        if key == "recommended_reason":  # stands with the method
            continue
        if key == "recommended_method":
            label, text, words = "method", method_facts("method")[str(value)]["words"], ""
        if key == "converted_to":
            label, (text, words, source) = "converted to", _conversion(options.conversion)
            steps[title].append(Step(label=label, value=text, words=words, source=source))
            continue
        steps[title].append(Step(label=label, value=text, unit=_shown_unit(fact["unit"], part, i),
                                 words="; ".join(filter(None, (around, words)))))
    for title, fit in zip(FITTED, (part.solved.fit, part.solved.excess), strict=True):
        used = part.solved.ph[i, np.isfinite(fit.fit.residual_ph[i])]
        if used.size and steps[title]:
            steps[title].append(Step(label=FITTED[title], value=f"{used.max():.2f} to {used.min():.2f}"))
    return [Part(title, tuple(of), ABOUT.get(title, "")) for title, of in steps.items() if of]


def _conversion(name: str) -> tuple[str, str, str]:
    fact = method_facts("conversion")[name]
    return fact["words"], fact["why"], _source(fact)


def _u_key(key: str) -> str:
    """Key of the standard uncertainty of a figure."""
    for end in ("{eq}", "{mol}", "ph", "mg_l_caco3"):
        if key.endswith(f"_{end}"):
            return f"{key.removesuffix(end)}u_{end}"
    return ""


def _blank(value: Any) -> bool:
    return value is pd.NA or value == "" or (isinstance(value, float) and np.isnan(value))


def _shown_unit(unit: str, part: TitrationResult, i: int) -> str:
    if unit in PER_LITER:
        per = (PER_KILOGRAM if part.solved.curves.by_mass[i] else PER_LITER)[unit]
        return per.replace("ueq_l", "µeq/L").replace("umol_l", "µmol/L").replace("umol_kg", "µmol/kg")
    return unit.removeprefix("-")


# ---------------------------------------------------------------- what the interval comes from


def contributions(part: TitrationResult, i: int) -> list[tuple[str, float]]:
    """What the standard uncertainty of the result is made of [eq per unit of sample]; squares add up to its square."""
    s, method = part.solved, str(part.choice.method[i])
    if not method:
        return []
    e = s.estimates[method_key(method)]
    own, rest = list(_own(part, i, method)), "slope of the electrode, which no two standards tell"
    if method.startswith("fixed"):
        rest = "reading of pH and titrant at the end point"
    elif method == "two_point":
        rest = "reading of both end points, bicarbonate left there"
    left = float(e.own_u[i]) ** 2 - sum(v**2 for _, v in own)
    shared = np.sqrt(max(float(e.u[i]) ** 2 - float(e.own_u[i]) ** 2, 0.0))
    more = np.sqrt(max(float(part.choice.u[i]) ** 2 - float(e.u[i]) ** 2, 0.0))
    return [*own, (rest, np.sqrt(max(left, 0.0))), *_shared(part, i, float(shared)),
            ("doubt of the strength, from the slope of the Gran line", float(more))]


def _own(part: TitrationResult, i: int, method: str) -> Iterator[tuple[str, float]]:
    """What belongs to the method alone."""
    s = part.solved
    if method == "gran":
        yield "scatter of the points about the line", float(s.gran.u_line[i])
        yield "choice of the points of the line", float(s.gran.u_window[i])
        yield "acid that is still bound along the line", float(s.gran.u_bias[i])
    elif method in ("fit", "acid_excess"):
        yield "scatter of the points about the curve", float((s.fit if method == "fit" else s.excess).u_shape[i])
    elif method == "inflection":
        yield "steps around the inflection", float(s.inflection.u_acid[i])
        yield "scatter of one titrant reading", float(s.curves.u_acid[i])
    elif method.startswith("fixed"):
        found = s.level if method == "fixed_level" else s.crossings[ALWAYS_END_POINT]
        yield "spacing of the points around the end point", float(found.u_curve[i])
    if method in ORGANIC_SHARES:
        yield "organic acids", float(ORGANIC_SHARES[method] * organic_sites(s.samples, s.curves.count.size)[i])


def _shared(part: TitrationResult, i: int, shared: float) -> Iterator[tuple[str, float]]:
    """What all methods share, by its parts."""
    s, known = part.solved, titration_quantities()
    values = {name: v[i:i + 1] for name, v in s.samples.items() if v.dtype.kind == "f"}
    whole, told = float(s.curves.relative_u[i]), 0.0
    if whole <= 0.0:
        return
    for name in SHARED_BY_ALL:
        size = values.get(name)
        if size is not None and np.isfinite(size[0]):
            relative = float(u_of(values, known[name], size)[0] / size[0])
            told += relative**2
            label, _ = label_and_words(known[name].meaning)
            yield label, shared * relative / whole
    yield "scale of the burette", shared * np.sqrt(max(whole**2 - told, 0.0)) / whole


def uncertainty_part(part: TitrationResult, i: int) -> Part:
    """What the interval of the result comes from, the largest first."""
    parts = contributions(part, i)
    total = sum(v**2 for _, v in parts)
    if not total > 0.0:
        return Part("What the interval comes from", ())
    steps = [Step(label=words, value=f"{100.0 * v**2 / total:.0f} %",
                  words=f"standard uncertainty {written(MICRO * v, 2)} {_unit(part, i)}")
             for words, v in sorted(parts, key=lambda item: -item[1]) if v**2 >= LEAST_SHARE * total]
    return Part("What the interval comes from", tuple(steps),
                f"shares of the squared standard uncertainty; the interval is {TO_COVERAGE:g} times its root each way")


# ---------------------------------------------------------------- findings


def findings_part(found: pd.DataFrame) -> Part:
    """Each finding with value, limit, remedy and source."""
    steps = []
    for r in found.to_dict("records"):
        unit = "" if r["unit"] == "-" else str(r["unit"])
        value = "" if np.isnan(r["value"]) else f"{r['value']:.6g}"
        allowed = f"allowed: {r['limit']}" if r["limit"] else ""
        words = [str(r["words"]), str(r["more"]), allowed, f"to do: {r['remedy']}"]
        steps.append(Step(label=str(r["finding"]), value=value, unit=unit if value else "", sign=FOUND,
                          words="; ".join(filter(None, words)), source=str(r["source"])))
    tests = len(finding_facts())
    return Part("Findings", tuple(steps), f"{len(steps) or 'none'} of {tests} things looked for")

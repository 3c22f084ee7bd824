"""The last links of a chain: results with their intervals and what these come from, checks, and rules."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.limits import Limit
from aquabuf.assess.options import Options
from aquabuf.assess.sample.chain_readings import house_label
from aquabuf.assess.sample.chain_steps import BROKEN, KEPT, MET, NOT_MET, Part, Step
from aquabuf.assess.sample.columns import AS_GIVEN, ResultColumn, result_columns, table_columns
from aquabuf.assess.sample.draws import OF_CARBON
from aquabuf.assess.sample.headline import alkalinity_as_read, headline
from aquabuf.assess.sample.inputs import Array, Values, alkalinity_reading
from aquabuf.assess.sample.solve import ALKALINITY_AIR, PH_AIR, believable, groups, water_of
from aquabuf.assess.uncertainty import COVERAGE, drawn, interval
from aquabuf.chem.acids import Acid
from aquabuf.tables import read_table

__all__ = ["Equation", "Shares", "checks_part", "equation_of", "results_part", "rules_part", "shares", "with_interval",
           "written"]

LEAST_SHARE = 0.01    # smaller ones are not told
LEAST_WIDTH = 1e-6    # of the value; a narrower interval is rounding of the solver
ADDITIVE_WITHIN = 0.1  # of the whole interval; beyond, it is told that the parts do not add up
Shares = Mapping[str, tuple[Mapping[str, float], float]]  # by figure: share of each reading; sum over interval


# ---------------------------------------------------------------- names, equations, numbers


@dataclass(frozen=True, slots=True)
class Equation:
    """What a figure is called, and its equation in symbols and words."""

    key: str
    label: str
    symbols: str
    words: str
    source: str


@cache
def _equations() -> dict[str, Mapping[str, str]]:
    return {row["name"]: row for row in read_table("result_equations")}


def equation_of(name: str) -> Equation:
    """The equation of a column of the results; the pH of a tolerance takes the place of the star."""
    rows = _equations()
    _, _, rest = name.partition("_to_ph_")
    if name in rows or not rest:
        row, ph = rows[name], ""
    else:
        digits = rest.removesuffix("_meq_l").removesuffix("_open")
        row = rows[name.replace(f"_to_ph_{digits}_", "_to_ph_*_")]
        ph = f"pH {digits.replace('_', '.')}"
    return Equation(row["name"], row["label"].replace("*", ph), row["symbols"], row["words"], row["source"])


def _numbers(options: Options) -> list[ResultColumn]:
    return [c for c in result_columns(options) if c.unit and c.name not in AS_GIVEN]


def written(value: float, digits: int | None) -> str:
    """A number as results.csv has it, its decimals filled up; "none" where it is missing."""
    if np.isnan(value):
        return "none"
    if digits is None or np.isinf(value):
        return f"{value:.6g}"
    return f"{np.round(value, digits) + 0.0:.{digits}f}"


# ---------------------------------------------------------------- what an interval comes from


def shares(values: Values, u: Values, choice: NDArray[np.int8], acids: tuple[Acid, ...], options: Options) -> Shares:
    """Which readings the interval of each figure of one sample comes from.

    Each reading is drawn alone, the others held; its share is its squared interval over the sum of all. The second
    number is the root of that sum over the interval with all drawn together: 1 where uncertainties just add up.
    """
    if not options.draws:
        return {}
    names = [n for n in u if n in values and np.isfinite(u[n][0]) and u[n][0] > 0.0 and np.isfinite(values[n][0])]
    whole = _widths(values, u, choice, acids, options, list(u))
    alone = {n: _widths(values, u, choice, acids, options, [n]) for n in names}
    out = {}
    for figure, width in whole.items():
        squares = {n: w.get(figure, np.nan) ** 2 for n, w in alone.items()}
        squares = {n: v for n, v in squares.items() if np.isfinite(v) and v > 0.0}
        total = sum(squares.values())
        if total > 0.0 and np.isfinite(width):
            ordered = sorted(squares.items(), key=lambda item: -item[1])
            out[figure] = ({n: v / total for n, v in ordered}, float(np.sqrt(total) / width))
    return out


def _widths(values: Values, u: Values, choice: NDArray[np.int8], acids: tuple[Acid, ...], options: Options,
            names: list[str]) -> dict[str, float]:
    """Width of the interval of every figure with only the named readings drawn."""
    pair, ph_column, _ = next(iter(groups(values, choice)))
    many = drawn(values, u, options.draws, options.seed, names)
    water = water_of(many, pair, ph_column, acids, options)
    if options.exchange == "open" and pair != ALKALINITY_AIR:
        water = water.at_air(options.air_co2_ppm)
    solved = believable(water)
    figures: dict[str, Array] = {n: np.where(solved, v, np.nan) for n, v in headline(water, options).items()}
    figures |= alkalinity_as_read(alkalinity_reading(many), figures)
    if pair == PH_AIR:
        figures = {n: v for n, v in figures.items() if n not in OF_CARBON}
    out = {}
    for name, v in figures.items():
        low, high = (float(end[0]) for end in interval(v.reshape(1, -1)))
        wide = np.isfinite(low) and np.isfinite(high) and high - low > LEAST_WIDTH * abs(high + low)
        out[name] = high - low if wide else np.nan
    return out


# ---------------------------------------------------------------- results


def results_part(row: Mapping[str, Any], of: Shares, options: Options) -> Part:
    """Every number of results.csv with its interval, the readings that it comes from, and its equation."""
    steps, told = [], set()
    for column in _numbers(options):
        value = float(row[column.name])
        if np.isnan(value):
            continue
        equation = equation_of(column.name)
        words = [] if equation.key in told else [f"{equation.symbols}: {equation.words}"]
        words += [_from_words(*of[column.name])] if column.name in of else []
        steps.append(Step(label=equation.label, value=with_interval(row, column), words=". ".join(words),
                          unit="" if column.unit == "-" else column.unit,
                          source="" if equation.key in told else equation.source))
        told.add(equation.key)
    steps += _worded(row)
    about = f"{COVERAGE:.0%} intervals of {options.draws:,} draws, seed {options.seed}" if options.draws else \
        "no intervals: the run was made without draws"
    return Part("Results", tuple(steps), about)


def with_interval(row: Mapping[str, Any], column: ResultColumn) -> str:
    """A number with the ends of its interval where it has one."""
    low, high = (float(row.get(f"{column.name}_{end}", np.nan)) for end in ("low", "high"))
    value = written(float(row[column.name]), column.digits)
    if np.isnan(low) or np.isnan(high):
        return value
    return f"{value} ({written(low, column.digits)} to {written(high, column.digits)})"


def _from_words(parts: Mapping[str, float], ratio: float) -> str:
    told = [f"{house_label(n)[0]} {100.0 * v:.0f} %" for n, v in parts.items() if v >= LEAST_SHARE]
    extra = "" if abs(ratio - 1.0) <= ADDITIVE_WITHIN else \
        f"; the single parts together are {ratio:.2g} times as wide as the interval, so they do not simply add up"
    return f"Interval from {', '.join(told)}{extra}"


def _worded(row: Mapping[str, Any]) -> list[Step]:
    """Results that are words."""
    of = {c.name: c.meaning for c in table_columns("results", lambda name: [name])}
    names = ("carrier", "pairs_in_range", "ccpp_words", "status_reason")
    shown = {"carrier": "pair that buffers most", "pairs_in_range": "pairs in their effective range",
             "ccpp_words": "calcium carbonate", "status_reason": "status"}
    return [Step(label=shown[n], value=str(row[n]), words=of[n]) for n in names if row.get(n)]


# ---------------------------------------------------------------- checks and rules


def checks_part(checks: pd.DataFrame) -> Part:
    """Every quality check that could be made."""
    steps = [Step(label=str(r["check"]), value=f"{r['value']:.6g}", unit=str(r["unit"]),
                  words=f"allowed: {r['limit']}" + (f"; to do: {r['remedy']}" if r["remedy"] else ""),
                  source=str(r["source"]), sign=MET if r["met"] == "yes" else NOT_MET)
             for r in checks.to_dict("records")]
    return Part("Quality checks", tuple(steps), "those that its readings allow")


def rules_part(row: Mapping[str, Any], verdicts: pd.DataFrame, limits: tuple[Limit, ...], options: Options) -> Part:
    """Each rule for this kind of water, the broken ones first."""
    columns = {c.name: c for c in _numbers(options)}
    kind, regime = str(row.get("water_kind") or ""), str(row["regime"])
    broken = {str(r["warning"]): r for r in verdicts.to_dict("records")}
    applying = [x for x in limits if x.applies(kind, regime)]
    steps = sorted((_rule(x, row, columns[x.quantity], broken) for x in applying if x.quantity in columns),
                   key=lambda step: step.sign != BROKEN)
    others = len(limits) - len(applying)
    about = f"kind of water: {kind.replace('_', ' ') or 'not stated'}; {regime}"
    return Part("Rules", tuple(steps), about + (f"; {others} more rules are for other waters" if others else ""))


def _rule(limit: Limit, row: Mapping[str, Any], column: ResultColumn, broken: Mapping[str, Mapping[Any, Any]]) -> Step:
    label = equation_of(limit.quantity).label
    unit = "" if limit.unit == "-" else f" {limit.unit}"
    floor = "" if np.isneginf(limit.lower) else f", from {limit.lower:g} on"
    value = float(row[limit.quantity])
    words = [f"warned where {label} {limit.operator} {limit.limit:g}{unit}{floor}"]
    verdict = broken.get(limit.name)
    if verdict is not None:
        chance = float(verdict["probability"])
        words.append(limit.words + ("" if np.isnan(chance) else f" (in {100.0 * chance:.0f} % of the draws)"))
        words += [f"next: {limit.next_step}"] if limit.next_step else []
    elif np.isnan(value):
        words.append(f"not judged, {label} is not known")
    elif limit.met(np.array([value]))[0]:
        words.append("holds too, but a rule of its group that is listed before says it already")
    sign = BROKEN if verdict is not None else "" if np.isnan(value) else KEPT
    return Step(label=limit.name, value=f"{label} {written(value, column.digits)}", sign=sign,
                unit="" if np.isnan(value) else unit.strip(),
                words="; ".join(words), source=limit.source)

"""Which method's result is recommended, by the kind of water, and the reason in words."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.titration.options import ALWAYS_END_POINT
from aquabuf.assess.titration.solve import Estimate, Solved, organic_sites, text_of, value_of
from aquabuf.assess.titration.strength import (
    GOOD_CHI2,
    doubt_in_words,
    strength_doubtful,
    strength_explains,
    unresolved,
)
from aquabuf.engine.conditions import FRESH_BELOW
from aquabuf.tables import read_table

__all__ = ["DILUTE_BELOW_EQ", "Choice", "choose", "method_facts", "method_key", "read_at",
           "water_kinds"]

Array = NDArray[np.float64]

DILUTE_BELOW_EQ = 4e-4      # alkalinity below which an inflection cannot be told; US Geological Survey field manual
DILUTE_BELOW_PH = 7.0       # the same source
ACID_BELOW_EQ = 1e-3        # a hard groundwater starts below pH 7 by its CO2 alone; common practice, no source
DILUTE_BELOW_US_CM = 100.0  # the same source
ORGANIC_SHARE = 0.1         # of alkalinity that organic acid sites may be; the source says "appreciable"
MOST_U_OFFSET = 0.3         # pH; beyond, the curve does not tell offset from alkalinity
MOST_STEP_PH = 1.2          # around a fixed end point that is still recommended
COARSEST_STEP = 0.2         # over value: steepest step of an inflection that is still recommended
AT_END_POINT = 0.1          # pH between a reading and an end point that was titrated to
LEAST_RESOLVED = 0.05       # uncertainty over value of an inflection that is still recommended


@cache
def method_facts(kind: str) -> dict[str, dict[str, str]]:
    """Rows of one kind (water, method, conversion) of the table of methods, by name."""
    return {row["name"]: row for row in read_table("titration_methods") if row["kind"] == kind}


def method_key(name: str) -> str:
    """Key of an estimate by the name that tables use: fixed_4_5 is kept under fixed_4.5."""
    return name.replace("fixed_4_5", f"fixed_{ALWAYS_END_POINT:g}")


@dataclass(frozen=True, slots=True, eq=False)
class Choice:
    """Recommended result per titration: value and standard uncertainty [eq per unit of sample], method, reason.

    water : kind of water that decided. own_problem : why the user's own method cannot work here, "" where it can or
    none was named. able : where each method can be recommended, and why not elsewhere.
    """

    value: Array
    u: Array
    method: NDArray[np.object_]
    reason: NDArray[np.object_]
    water: NDArray[np.object_]
    own_problem: NDArray[np.object_]
    able: Mapping[str, tuple[NDArray[np.bool_], NDArray[np.object_]]]


def best_guess(s: Solved) -> Array:
    """Alkalinity for judging what kind of water this is: by Gran, else by the fit, else the first guess."""
    gran, fit = s.estimates["gran"].value, s.estimates["fit"].value
    return np.where(np.isfinite(gran), gran, np.where(np.isfinite(fit), fit, s.first_guess))


def water_kinds(s: Solved) -> tuple[NDArray[np.object_], NDArray[np.object_]]:
    """Kind of water of each titration, and what about it decided, in words."""
    n = s.curves.count.size
    alkalinity, start = best_guess(s), s.ph[:, 0]
    conductivity, doc = value_of(s.samples, "conductivity_us_cm", n), value_of(s.samples, "doc_mg_l", n)
    organic = organic_sites(s.samples, n)
    with np.errstate(invalid="ignore"):
        cases = (
            (organic > ORGANIC_SHARE * np.abs(alkalinity), "dilute", lambda i: f"organic carbon {doc[i]:.3g} mg/L"),
            (starts_acid(s) & (alkalinity < ACID_BELOW_EQ), "dilute",
             lambda i: f"pH {start[i]:.2f} at the start, below 7"),
            (conductivity < DILUTE_BELOW_US_CM, "dilute",
             lambda i: f"conductivity {conductivity[i]:.3g} µS/cm, below 100"),
            (alkalinity < DILUTE_BELOW_EQ, "dilute",
             lambda i: f"alkalinity about {alkalinity[i] * 1e6:.0f} µeq/L, below 400"),
            (text_of(s.samples, "water_kind", n) == "wastewater", "complex", lambda i: "water_kind wastewater"),
            (s.curves.salinity >= FRESH_BELOW, "salt", lambda i: f"salinity {s.curves.salinity[i]:.3g}"),
        )
    kind, detail = np.full(n, "ordinary", dtype=object), np.full(n, "", dtype=object)
    for mask, name, words in cases:
        kind[mask] = name
        for i in np.flatnonzero(mask).tolist():
            detail[i] = words(i)
    return kind, detail


def starts_acid(s: Solved) -> NDArray[np.bool_]:
    """Where the sample itself is below pH 7; a first reading after acid was added does not tell."""
    with np.errstate(invalid="ignore"):
        return ~s.curves.is_base & (s.curves.added[:, 0] == 0.0) & (s.ph[:, 0] < DILUTE_BELOW_PH)


def able(s: Solved, kind: NDArray[np.object_]) -> dict[str, tuple[NDArray[np.bool_], NDArray[np.object_]]]:
    """Where each method can be recommended, and why not elsewhere."""
    n = s.curves.count.size
    out = {}
    for name in method_facts("method"):
        estimate = s.estimates[method_key(name)]
        can = np.isfinite(estimate.value) & np.isfinite(estimate.u)
        why = np.where(can, "", estimate.why_not)
        for mask, words in _limits(s, name, estimate, kind):
            why[mask & can] = words
            can = can & ~mask
        out[name] = (can, why if n else np.zeros(0, dtype=object))
    return out


def _limits(s: Solved, name: str, e: Estimate, kind: NDArray[np.object_]) -> list[tuple[NDArray[np.bool_], str]]:
    """What keeps a method that has a result from being recommended."""
    with np.errstate(invalid="ignore"):
        if name == "gran":
            return [(~s.gran.straight, "its points do not lie on a line")]
        if name == "fit":
            return [(s.fit.u_offset > MOST_U_OFFSET, "the points do not tell electrode offset from alkalinity"),
                    (s.fit.fit.reduced_chi2 > GOOD_CHI2, "the curve does not fit")]
        if name == "inflection":
            return [((kind == "dilute") | starts_acid(s),
                     "not below pH 7, 400 µeq/L or 100 µS/cm, or with organic acids"),
                    ((e.own_u > LEAST_RESOLVED * np.abs(e.value))
                     | (s.inflection.resolution > COARSEST_STEP * np.abs(e.value)), "steps too coarse to tell it")]
        if name == "two_point":
            return [(best_guess(s) >= DILUTE_BELOW_EQ, "made for less than 400 µeq/L"),
                    (s.crossings[ALWAYS_END_POINT].step_ph > MOST_STEP_PH, "steps too coarse at pH 4.5")]
        if name.startswith("fixed"):
            found, end = s.crossings[ALWAYS_END_POINT], np.full(kind.size, ALWAYS_END_POINT)
            found, end = (s.level, s.level_ph) if name == "fixed_level" else (found, end)
            return [(kind == "dilute", "a fixed end point counts free acid as alkalinity, about 32 µeq/L at pH 4.5"),
                    ((found.step_ph > MOST_STEP_PH) & ~read_at(s, end), "steps too coarse at the end point")]
    return []


def read_at(s: Solved, end_ph: Array | float) -> NDArray[np.bool_]:
    """Where a reading was taken at an end point, so that it does not matter how far the next one is."""
    distance = np.abs(s.ph - np.broadcast_to(np.asarray(end_ph, dtype=float), (len(s.ph),))[:, None])
    return np.asarray(np.any(distance <= AT_END_POINT, axis=1))


def choose(s: Solved) -> Choice:
    """Recommended method of each titration: the user's own where it can work, else the first able one for the water."""
    n = s.curves.count.size
    kind, detail = water_kinds(s)
    can = able(s, kind)
    own = text_of(s.samples, "own_method", n)
    method, problem = np.full(n, "", dtype=object), np.full(n, "", dtype=object)
    for name, (mask, why) in can.items():
        wanted = own == name
        method[wanted & mask] = name
        problem = np.where(wanted & ~mask, why, problem)
    by_wish = method != ""
    for water, facts in method_facts("water").items():
        for name in facts["order"].split(";"):
            method[(kind == water) & (method == "") & can[name][0]] = name
    base, doubtful = s.curves.is_base, strength_doubtful(s)
    method[base] = np.where(can["gran"][0][base], "gran", "")
    method[doubtful] = ""
    value, u = np.full(n, np.nan), np.full(n, np.nan)
    for name in can:
        at, e = method == name, s.estimates[method_key(name)]
        value[at], u[at] = e.value[at], e.u[at]
    # all that the slope shows where the curve sides with the strength; else evenly likely from nothing to that
    share = np.where(strength_explains(s), 1.0, 1.0 / np.sqrt(3.0))
    strength = np.where(unresolved(s), share * np.abs(s.gran.slope_ratio - 1.0), 0.0)
    u = np.hypot(u, strength * np.abs(value))
    reason = [doubt_in_words(s, i) if doubtful[i]
              else _reason(s, i, method[i], kind[i], detail[i], can, bool(by_wish[i])) for i in range(n)]
    return Choice(value, u, method, np.array(reason, dtype=object), kind, problem, can)


def _reason(s: Solved, i: int, method: str, kind: str, detail: str, can: Mapping, by_wish: bool) -> str:
    """Why this method and no other, for one titration."""
    if not np.isfinite(s.ph[i]).any():
        return ("no pH can be made of the potentials: give standards, and see whether two of them are exchanged or the "
                "sign of the meter is turned")
    facts = method_facts("water")[kind]
    water = facts["words"] + (f" ({detail})" if detail else "")
    if s.curves.is_base[i]:
        line = f"; its free acid by the Gran line, {_quality(s, i, method)}" if method else ""
        return f"titrated with base: see the acidity columns{line}"
    skipped = [f"{method_facts('method')[name]['words']}: {can[name][1][i]}"
               for name in facts["order"].split(";") if can[name][1][i]]
    if not method:
        return f"{water}; no method for it has a result ({'; '.join(skipped)})"
    if by_wish:
        return f"{water}; your own method, which can work here; {_quality(s, i, method)}"
    before = facts["order"].split(";").index(method)
    passed = [f"{method_facts('method')[name]['words']} cannot be used: {can[name][1][i]}"
              for name in facts["order"].split(";")[:before]]
    return "; ".join([water, method_facts("method")[method]["words"] + ": " + method_facts("method")[method]["why"],
                      _quality(s, i, method), *passed])


def _quality(s: Solved, i: int, method: str) -> str:
    """What the result of one titration rests on."""
    if method == "gran":
        g = s.gran
        return (f"{g.points[i]} points, pH {s.ph[i, g.first[i]]:.2f} to {s.ph[i, g.last[i]]:.2f}, "
                f"slope {g.slope_ratio[i]:.2f} of theory")
    if method in ("fit", "acid_excess"):
        f = s.fit if method == "fit" else s.excess
        return f"{f.points[i]} points, electrode offset {f.fit.offset_ph[i]:+.3f}"
    if method == "inflection":
        unit = "µmol/kg" if s.curves.by_mass[i] else "µeq/L"
        return f"known to {s.inflection.resolution[i] * 1e6:.3g} {unit} by the steps"
    if method == "fixed_level":
        return f"pH {s.level_ph[i]:g}, points {s.level.step_ph[i]:.2f} pH apart there"
    found, end = s.crossings[ALWAYS_END_POINT], ALWAYS_END_POINT
    return f"pH {end:g}, points {found.step_ph[i]:.2f} pH apart there"


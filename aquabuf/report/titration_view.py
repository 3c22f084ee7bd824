"""What a figure shows of one titration, as numbers and words: points, places marked, title and findings."""

from __future__ import annotations

import textwrap
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.titration.assess import TitrationResult
from aquabuf.assess.titration.choose import method_facts, method_key
from aquabuf.assess.titration.findings import Finding, finding_facts
from aquabuf.assess.titration.options import ALWAYS_END_POINT
from aquabuf.assess.titration.smooth import fit_of, fitted_curve
from aquabuf.assess.titration.solve import ACIDITY_END_POINTS, Solved
from aquabuf.assess.titration.tables import MICRO
from aquabuf.assess.uncertainty import TO_COVERAGE
from aquabuf.report.labels import Label
from aquabuf.report.style import short_name

__all__ = ["OneTitration", "amount", "finding_lines", "marks_of", "number", "one_titration", "title_line", "volume"]

Array = NDArray[np.float64]

FINDINGS_SHOWN = 3
LINE_LENGTH = 165       # of small type across the page
TITLE_LENGTH = 105
MOST_DECIMALS = 5
FOUR_DIGITS = 1000.0    # from which a value without uncertainty is whole
PHENOLPHTHALEIN = 8.3
SHORT_WORDS = {"fit": "Fit", "acid_excess": "Acid in excess", "two_point": "Two end points"}  # of methods, as labels


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class OneTitration:
    """Readings of one titration in its order, and what is needed to draw them.

    added, ph : titrant and reading of each point that has one. unit : mL or g. at : place of each point among all.
    residual_ph : reading less fitted curve, nan where a point is not in the fit. used : points that the fit rests on,
    else the Gran line, else all; named : points that a finding is about. row : line of each in the file of points.
    curve_added, curve_ph : the fitted curve, empty without fit. per_added : acid per unit of titrant and sample.
    decimals : of a volume or mass of titrant.
    """

    added: Array
    ph: Array
    at: NDArray[np.intp]
    residual_ph: Array
    used: NDArray[np.bool_]
    used_by: str
    named: NDArray[np.bool_]
    row: NDArray[np.int64]
    curve_added: Array
    curve_ph: Array
    unit: str
    titrant: str
    per_added: float
    is_base: bool
    decimals: int

    @property
    def span(self) -> tuple[float, float]:
        """Least and greatest titrant, from nothing on; never the same."""
        low, high = float(self.added.min(initial=0.0)), float(self.added.max(initial=0.0))
        return low, high if high > low else low + 1.0


def one_titration(result: TitrationResult, i: int) -> OneTitration:
    """Titration `i` of `result.solved`."""
    s = result.solved
    c = s.curves
    at = np.flatnonzero(np.isfinite(s.ph[i]) & np.isfinite(c.acid[i]))
    acid, curve_ph = fitted_curve(s, i)
    per_added = float(c.per_added[i])
    fitted = np.isfinite(fit_of(s, i).fit.residual_ph[i, at])
    residual = np.full(at.size, np.nan)
    if acid.size:
        residual[fitted] = s.ph[i, at[fitted]] - curve_ph[np.isin(acid, c.acid[i, at[fitted]])]
    used, by = _used(s, i, at, residual)
    return OneTitration(
        added=c.added[i, at], ph=s.ph[i, at], at=at, residual_ph=residual, used=used, used_by=by,
        named=np.isin(at, [k for f in result.found for k in _about(f, i)]), row=c.row[i, at],
        curve_added=acid / per_added, curve_ph=curve_ph, unit="g" if c.added_mass[i] else "mL",
        titrant="Base" if c.is_base[i] else "Acid", per_added=per_added,
        is_base=bool(c.is_base[i]), decimals=_decimals(float(c.u_acid[i]) / abs(per_added)))


def _used(s: Solved, i: int, at: NDArray[np.intp], residual: Array) -> tuple[NDArray[np.bool_], str]:
    """Which points a result rests on, and by what."""
    if np.isfinite(residual).any():
        return np.isfinite(residual), "in the fit"
    if s.gran.first[i] >= 0:
        return (at >= s.gran.first[i]) & (at <= s.gran.last[i]), "on the Gran line"
    return np.ones(at.size, dtype=bool), "read"


def _about(f: Finding, i: int) -> list[int]:
    """Points of titration `i` that a finding is about; of two that were swapped, both."""
    first = int(f.point[i])
    if not f.here[i] or first < 0:
        return []
    return [first, first + 1] if f.name == "points swapped" else [first]


def _decimals(scatter: float) -> int:
    """Decimals that a reading with this scatter carries."""
    return int(np.clip(np.ceil(-np.log10(max(scatter, 10.0**-MOST_DECIMALS))), 0, MOST_DECIMALS))


def number(value: float, u: float) -> str:
    """A value with as many digits as two of its uncertainty ask for."""
    if not np.isfinite(value):
        return "none"
    has_u = np.isfinite(u) and u > 0.0
    digits = 1 - int(np.floor(np.log10(u))) if has_u else int(abs(value) < FOUR_DIGITS)
    return f"{round(value, digits):,.{max(digits, 0)}f}".replace("-", "−")


def amount(s: Solved, i: int, value: float, u: float) -> str:
    """A result of titration `i` [eq per unit of sample] with half its interval, where that is known."""
    value, u, unit = value * MICRO, TO_COVERAGE * u * MICRO, "µmol/kg" if s.curves.by_mass[i] else "µeq/L"
    return f"{number(value, u)} ± {number(u, u)} {unit}" if np.isfinite(u) else f"{number(value, u)} {unit}"


def volume(one: OneTitration, added: float) -> str:
    """An amount of titrant with its unit."""
    return f"{added:.{one.decimals}f} {one.unit}".replace("-", "−")


def marks_of(result: TitrationResult, one: OneTitration, i: int) -> list[Label]:
    """End points, inflection, Gran root and the recommended result as places on the curve of titration `i`."""
    s, method = result.solved, str(result.choice.method[i])
    if one.is_base:
        places = [(f"pH {end:g}", -s.acidity[end].value[i], end, "") for end in ACIDITY_END_POINTS]
    else:
        places = [(f"pH {PHENOLPHTHALEIN:g}", -s.acidity[PHENOLPHTHALEIN].value[i], PHENOLPHTHALEIN, ""),
                  (f"pH {s.level_ph[i]:g}, by alkalinity", s.level.acid[i], s.level_ph[i], "fixed_level"),
                  (f"pH {ALWAYS_END_POINT:g}", s.crossings[ALWAYS_END_POINT].acid[i], ALWAYS_END_POINT, "fixed_4_5"),
                  ("Inflection", s.inflection.acid[i], np.nan, "inflection")]
    places.append(("Gran line", s.gran.acid[i], np.nan, "gran"))
    if method and method not in [name for *_, name in places]:
        words = SHORT_WORDS.get(method, method_facts("method")[method]["words"])
        places.append((words, s.estimates[method_key(method)].value[i], np.nan, method))
    marks = []
    for words, acid, ph, name in places:
        if np.isfinite(acid):
            said = f", acidity {amount(s, i, -acid, np.nan)}" if one.is_base and not name else ""
            said += f", recommended{' for alkalinity' if one.is_base else ''}" if method and name == method else ""
            marks.append(_mark(one, words, said, float(acid) / one.per_added, float(ph)))
    return marks


def _mark(one: OneTitration, words: str, said: str, added: float, ph: float) -> Label:
    """A place on the curve; where the curve does not reach, words alone."""
    text, bold = f"{words}: {volume(one, added)}{said}", "recommended" in said
    if not one.added.size or added < one.added[0]:
        before = "" if added < 0.0 else " (before the first)"
        return Label(f"{text}{before}", np.nan, np.nan, bold, on_top=not one.is_base)
    if added > one.added[-1]:
        return Label(f"{text} (not reached)", np.nan, np.nan, bold, on_top=one.is_base)
    x, y = one.added, one.ph
    if one.curve_added.size and one.curve_added[0] <= added <= one.curve_added[-1]:
        x, y = one.curve_added, one.curve_ph
    return Label(text, added, ph if np.isfinite(ph) else float(np.interp(added, x, y)), bold)


def title_line(result: TitrationResult, i: int) -> str:
    """Sample, recommended result with its interval, and method in words."""
    s, choice = result.solved, result.choice
    name, method = " ".join(short_name(s.curves.names[i]).split()), str(choice.method[i])
    to_end = [end for end in reversed(ACIDITY_END_POINTS) if np.isfinite(s.acidity[end].value[i])]
    if s.curves.is_base[i] and to_end:
        words = amount(s, i, s.acidity[to_end[0]].value[i], s.acidity[to_end[0]].u[i])
        return f"{name}: acidity {words}, titrated with base to pH {to_end[0]:g}"
    if method:
        definition = result.results["definition"].iloc[result.at[i]]
        words = amount(s, i, choice.value[i], choice.u[i])
        return f"{name}: {definition} {words}, {method_facts('method')[method]['words']}"
    if any(mask[i] for mask, _ in choice.able.values()) and not s.curves.is_base[i]:
        why = str(choice.reason[i]).split(":")[0]
        return textwrap.shorten(f"{name}: no result; {why}", TITLE_LENGTH, placeholder=" …")
    if not s.curves.is_base[i]:
        return f"{name}: no result by any method for {method_facts('water')[choice.water[i]]['words']}"
    return f"{name}: no acidity; the curve passes no end point"


def finding_lines(result: TitrationResult, i: int) -> list[str]:
    """At most three findings with what to do, one per line; what more there are is counted."""
    here = [f for f in result.found if f.here[i]]
    if not here:
        return ["no findings"]
    lines = []
    for f in here[:FINDINGS_SHOWN]:
        rows = [str(result.solved.curves.row[i, k]) for k in _about(f, i)]
        place = f" (row{'s' if len(rows) > 1 else ''} {' and '.join(rows)})" if rows else ""
        remedy = finding_facts()[f.name]["remedy"]
        lines.append(textwrap.shorten(f"{f.name}{place}: {remedy}", LINE_LENGTH, placeholder=" …"))
    more = len(here) - FINDINGS_SHOWN
    if more > 0:
        lines[-1] = textwrap.shorten(lines[-1], LINE_LENGTH - 30, placeholder=" …") + f"  (and {more} more)"
    return lines

"""What went wrong in a titration, or may have: each finding with its value, limit, remedy and source."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import cache

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.sample.quality import outside_usual
from aquabuf.assess.titration.calibrate import nernst_mv_per_ph
from aquabuf.assess.titration.choose import Choice, best_guess, read_at
from aquabuf.assess.titration.convert import fixed_to_proton_balance
from aquabuf.assess.titration.curves import u_of
from aquabuf.assess.titration.options import ALWAYS_END_POINT
from aquabuf.assess.titration.parts import hydrolyzing_metals
from aquabuf.assess.titration.solve import IMPLIES_ABOVE_PH, Solved, text_of, value_of
from aquabuf.assess.titration.strength import GOOD_CHI2, doubt_in_words, slope_off, strength_doubtful, what_tells
from aquabuf.readings.schema import titration_quantities
from aquabuf.tables import read_table

__all__ = ["Finding", "finding_facts", "findings"]

Array = NDArray[np.float64]

SIGMAS = 2.0
DISAGREE_SIGMAS = 2.5
STEPS_MOVE = 0.1           # pH that changes at "one" volume when steps were written down instead of running totals
LEAST_TURN = 0.05          # pH
TURN_SIGMAS = 4.0
OFF_CURVE = (6.0, 0.08, 6.0)  # times scatter, pH, times the median of all points: one that stands out of its curve
WINDOW_MATTERS = (2e-6, 0.02)  # standard deviation over the windows: eq per unit of sample, share of the result
OFFSET_SPOILS = 0.1        # pH; an electrode farther off spoils every fixed end point
# What a wrong strength brings about; said beside it, it would lead astray
OF_THE_STRENGTH = ("point off the curve", "fit is poor", "carbon dioxide lost", "carbon differs", "electrode offset",
                   "methods disagree")


@dataclass(frozen=True, slots=True, eq=False)
class Finding:
    """One finding over all titrations: where it holds, its value, the point it is about (-1: none), and more words."""

    name: str
    here: NDArray[np.bool_]
    value: Array
    point: NDArray[np.intp]
    more: NDArray[np.object_]


@cache
def finding_facts() -> dict[str, dict[str, str]]:
    """Words, limits, remedy and source of each finding, in table order."""
    return {row["name"]: row for row in read_table("titration_findings")}


@cache
def _bounds(name: str) -> tuple[float, float]:
    row = finding_facts()[name]
    return float(row["low"] or "-inf"), float(row["high"] or "inf")


def findings(s: Solved, choice: Choice) -> tuple[Finding, ...]:
    """All findings in the order of the table."""
    found = {f.name: f for part in (_strength, _course, _points, _lines, _fits, _electrode, _methods)
             for f in part(s, choice)}
    sound = ~strength_doubtful(s)
    for name in OF_THE_STRENGTH:
        found[name] = replace(found[name], here=found[name].here & sound)
    return tuple(found[name] for name in finding_facts() if name in found)


def _finding(name: str, here: NDArray, value: Array | float, *, point: NDArray | None = None,
             more: NDArray | None = None) -> Finding:
    n = here.size
    return Finding(name, here.astype(bool), np.broadcast_to(np.asarray(value, dtype=float), (n,)),
                   np.full(n, -1, dtype=np.intp) if point is None else point,
                   np.full(n, "", dtype=object) if more is None else more)


def _outside(name: str, value: Array, where: NDArray | bool = True) -> Finding:
    """Finding by the limits of the table."""
    low, high = _bounds(name)
    with np.errstate(invalid="ignore"):
        return _finding(name, ((value < low) | (value > high)) & where, value)


def _strength(s: Solved, choice: Choice) -> Iterator[Finding]:
    """Is the titrant what it is said to be?"""
    c, ratio = s.curves, s.gran.slope_ratio
    doubtful, said = strength_doubtful(s), np.full(ratio.size, "", dtype=object)
    for i in np.flatnonzero(doubtful).tolist():
        said[i] = doubt_in_words(s, i)
    yield _finding("strength doubtful", doubtful, ratio, more=said)
    slope = slope_off(s)
    yield _finding("Gran slope", slope, ratio, more=what_tells(s, slope))
    outside, names = outside_usual(s.samples, c.count.size, titration_quantities("samples"))
    yield replace(_outside("outside usual", outside), more=names)
    conductivity = value_of(s.samples, "conductivity_us_cm", c.count.size)
    with np.errstate(invalid="ignore", divide="ignore"):
        yield _outside("alkalinity against conductivity", best_guess(s) * 1e6 / conductivity, conductivity > 0.0)


def _course(s: Solved, choice: Choice) -> Iterator[Finding]:
    """How the titration was done."""
    c, n = s.curves, s.curves.count.size
    yield _finding("temperature missing", np.isnan(value_of(s.samples, "temperature_c", n)), np.nan)
    as_prescribed = (text_of(s.samples, "own_method", n) == choice.method) & _is_fixed(choice)  # no more is needed then
    yield _outside("few points", c.count.astype(float), ~as_prescribed)
    with np.errstate(invalid="ignore"):
        lowest = np.nanmin(np.where(np.isfinite(s.ph), s.ph, np.inf), axis=1, initial=np.inf)
    yield _outside("stops too soon", lowest, ~c.is_base & np.isfinite(lowest) & ~as_prescribed)
    yield _outside("coarse end point", s.crossings[ALWAYS_END_POINT].step_ph,
                   ~s.purged & ~read_at(s, ALWAYS_END_POINT))
    drift = c.drift / np.where(c.is_potential, nernst_mv_per_ph(c.t_c), 1.0)
    yield _outside("wrong way", _wrong_way(s))
    steps = _outside("running total", c.repeats.astype(float), drift > STEPS_MOVE)
    yield steps
    yield _outside("drift", drift, ~steps.here)
    took = np.nanmax(np.where(np.isfinite(c.minutes), c.minutes, -np.inf), axis=1, initial=-np.inf)
    yield _outside("slow titration", took, np.isfinite(took) & ~s.purged)
    at_end = s.crossings[ALWAYS_END_POINT].before
    thinned = 100.0 * (1.0 - c.dilution[np.arange(n), np.maximum(at_end, 0)])
    yield _outside("dilution", thinned, at_end >= 0)


def _is_fixed(choice: Choice) -> NDArray[np.bool_]:
    """Where the result is a fixed end point."""
    return np.array([str(name).startswith("fixed") for name in choice.method], dtype=bool)


def _wrong_way(s: Solved) -> Array:
    """Change from the first to the last reading against the one that the titrant should bring about. [pH]"""
    c = s.curves
    change = c.reading[np.arange(c.count.size), np.maximum(c.count - 1, 0)] - c.reading[:, 0]
    as_ph = np.where(c.is_potential, -change / nernst_mv_per_ph(c.t_c), change)
    return np.where(c.is_base, -as_ph, as_ph)


def _points(s: Solved, choice: Choice) -> Iterator[Finding]:
    """Readings that go the wrong way."""
    c = s.curves
    ph = np.where(c.is_base[:, None], -s.ph, s.ph)
    rise = np.diff(ph, axis=1)
    by_burette = TURN_SIGMAS * c.u_acid[:, None] * _steepness(np.abs(c.acid), ph)
    limit = np.maximum(np.sqrt(2.0) * np.hypot(TURN_SIGMAS * c.u_ph_scatter[:, None], by_burette), LEAST_TURN)
    with np.errstate(invalid="ignore"):
        back = (rise > limit) & ~(_outside("wrong way", _wrong_way(s)).here | s.purged)[:, None]  # sweeping raises pH
    if not back.any():
        return
    at = np.where(back, rise, -np.inf).argmax(axis=1)
    here = back.any(axis=1)
    rows, width = np.arange(len(ph)), ph.shape[1]

    def reading(k: NDArray) -> Array:
        return np.where((k >= 0) & (k < width), ph[rows, np.clip(k, 0, width - 1)], np.nan)

    with np.errstate(invalid="ignore"):  # is the order right without the first of the two, without the second?
        first_off, second_off = ~(reading(at - 1) < reading(at + 1)), ~(reading(at) < reading(at + 2))
    mends = first_off & second_off & (back.sum(axis=1) == 1)  # then changing them over mends it on both sides
    value = rise[rows, at]
    yield _finding("points swapped", here & mends, value, point=np.where(here & mends, at, -1))
    turned = here & ~mends
    yield _finding("pH turns back", turned, value, point=np.where(turned, at + ~(first_off & ~second_off), -1))


def _steepness(acid: Array, ph: Array) -> Array:
    """Fall of pH per acid about each step, from the point before it to the point after it; 0 where there is none."""
    if ph.shape[1] < 4:
        return np.zeros((len(ph), max(ph.shape[1] - 1, 0)))
    with np.errstate(invalid="ignore", divide="ignore"):
        wide = np.abs(ph[:, 3:] - ph[:, :-3]) / (acid[:, 3:] - acid[:, :-3])
    padded = np.concatenate([wide[:, :1], wide, wide[:, -1:]], axis=1)
    return np.where(np.isfinite(padded), padded, 0.0)


def _lines(s: Solved, choice: Choice) -> Iterator[Finding]:
    """The Gran line."""
    g = s.gran
    with np.errstate(invalid="ignore"):
        curved = (g.first >= 0) & ~g.straight
        matters = g.u_window > np.maximum(WINDOW_MATTERS[0], WINDOW_MATTERS[1] * np.abs(g.acid))
        beyond = g.u_window > g.u_line
    with np.errstate(invalid="ignore", divide="ignore"):
        share = 100.0 * hydrolyzing_metals(s.samples, s.curves.count.size) / np.abs(g.acid)
    yield _outside("metals take part", share)
    yield _finding("curved Gran line", curved, g.reduced_chi2)
    yield _finding("choice of points matters", g.straight & matters & beyond, g.u_window * 1e6)


def _fits(s: Solved, choice: Choice) -> Iterator[Finding]:
    """The fit of the whole curve."""
    c, f = s.curves, s.fit
    yield _outside("fit is poor", f.fit.reduced_chi2, choice.water != "complex")  # there weak acids are expected
    residual = np.abs(f.fit.residual_ph)
    safe = np.where(np.isfinite(residual), residual, 0.0)
    at, largest = safe.argmax(axis=1), safe.max(axis=1)
    # near the end point a small error of volume moves pH far: count it as scatter
    slope, spacing, rows = _change(s.ph), _change(c.acid), np.arange(c.count.size)
    with np.errstate(invalid="ignore", divide="ignore"):
        by_volume = np.nan_to_num(slope[rows, at] / spacing[rows, at]) * c.u_acid
        limit = np.maximum(OFF_CURVE[0] * np.hypot(c.u_ph_scatter, by_volume), OFF_CURVE[1])
    usual = _median(residual)
    off = largest > np.maximum(limit, OFF_CURVE[2] * usual)
    yield _finding("point off the curve", off, largest, point=np.where(off, at, -1))
    with np.errstate(invalid="ignore", divide="ignore"):
        lost = 100.0 * (1.0 - f.fit.carbon / s.carbon_at_start)
        gran = s.estimates["gran"]  # the alkalinity that the first pH is taken with
        u_implied = s.carbon_at_start * np.nan_to_num(gran.own_u / np.abs(gran.value))
        clear = (s.carbon_at_start - f.fit.carbon) > SIGMAS * np.hypot(f.u_carbon, u_implied)
        clear &= ~(f.fit.acid_total > 0.0) & ~slope_off(s)  # a wrong pH implies a wrong carbon
        implied = (s.ph[:, 0] > IMPLIES_ABOVE_PH) & (s.ph[:, 0] < 8.5)
    measured = value_of(s.samples, "dic_mol_l", c.count.size) / np.where(c.by_mass, c.density_kg_l, 1.0)
    yield _outside("carbon dioxide lost", lost, clear & np.isnan(measured) & implied)
    u_measured = u_of(s.samples, titration_quantities()["dic_mol_l"], measured)
    with np.errstate(invalid="ignore", divide="ignore"):
        gap = f.fit.carbon - measured
        differs = np.abs(gap) > DISAGREE_SIGMAS * np.hypot(f.u_carbon, u_measured)
        yield _finding("carbon differs", differs, 100.0 * gap / measured)


def _median(v: Array) -> Array:
    """Median of the finite values of each row; infinite where there are none."""
    ordered, count = np.sort(v, axis=1), np.isfinite(v).sum(axis=1)  # nan sorts to the end
    rows = np.arange(len(v))
    low, high = (ordered[rows, np.clip(k, 0, v.shape[1] - 1)] for k in ((count - 1) // 2, count // 2))
    return np.where(count > 0, 0.5 * (low + high), np.inf)


def _change(v: Array) -> Array:
    """Mean change from the point before and to the one after; of only one of them at the ends, 0 of a single point."""
    step, edge = np.abs(np.diff(v, axis=1)), np.full((len(v), 1), np.nan)
    both = np.stack([np.concatenate([edge, step], axis=1), np.concatenate([step, edge], axis=1)])
    return np.nan_to_num(both).sum(axis=0) / np.maximum(np.isfinite(both).sum(axis=0), 1)


def _electrode(s: Solved, choice: Choice) -> Iterator[Finding]:
    """The electrode."""
    c, k = s.curves, s.calibration
    with np.errstate(invalid="ignore"):
        found = np.where(np.isfinite(s.fit.fit.offset_ph), s.fit.fit.offset_ph, s.excess.fit.offset_ph)
        u = np.where(np.isfinite(s.fit.u_offset), s.fit.u_offset, s.excess.u_offset)
        clear = (np.abs(found) > SIGMAS * u) & ~(s.fit.fit.reduced_chi2 > GOOD_CHI2)
    offset = _outside("electrode offset", np.abs(found), clear & ~(c.is_potential & (k.standards == 0)))
    yield _finding(offset.name, offset.here, found)
    yield _outside("electrode slope", 100.0 * k.efficiency, c.is_potential & (k.standards > 1))


def _methods(s: Solved, choice: Choice) -> Iterator[Finding]:
    """Methods against each other, and against the water."""
    n = s.curves.count.size
    fixed = s.estimates[f"fixed_{ALWAYS_END_POINT:g}"]
    balanced = fixed_to_proton_balance(s)
    able, kept = choice.water != "dilute", ~s.purged  # CO2 swept out on the way leaves no curve to read end points from
    with np.errstate(invalid="ignore"):
        electrode = ~(np.abs(s.fit.fit.offset_ph) > OFFSET_SPOILS)
    candidates = {
        "Gran line": (s.estimates["gran"].value, s.estimates["gran"].own_u,
                      s.gran.straight & (choice.water != "salt")),
        "fit": (s.estimates["fit"].value, s.estimates["fit"].own_u, kept & (choice.water != "complex")),
        "acid in excess": (s.estimates["acid_excess"].value, s.estimates["acid_excess"].own_u, ~kept),
        "inflection": (s.estimates["inflection"].value, s.estimates["inflection"].own_u, able & kept),
        "end point 4.5 (proton balance)": (balanced, fixed.own_u,
                                           kept & electrode & (s.crossings[ALWAYS_END_POINT].step_ph < 0.8)),
        "two end points": (s.estimates["two_point"].value, s.estimates["two_point"].own_u, ~able & kept),
    }
    worst, words = np.zeros(n), np.full(n, "", dtype=object)
    names = list(candidates)
    for a in range(len(names)):
        for b in range(a + 1, len(names)):
            (va, ua, wa), (vb, ub, wb) = candidates[names[a]], candidates[names[b]]
            with np.errstate(invalid="ignore", divide="ignore"):
                gap = np.where(wa & wb & np.isfinite(va) & np.isfinite(vb), np.abs(va - vb) / np.hypot(ua, ub), 0.0)
            for i in np.flatnonzero(gap > worst).tolist():
                unit = "µmol/kg" if s.curves.by_mass[i] else "µeq/L"
                words[i] = f"{names[a]} {va[i] * 1e6:.1f}, {names[b]} {vb[i] * 1e6:.1f} {unit}"
            worst = np.maximum(worst, gap)
    disagree = _outside("methods disagree", worst)
    yield _finding(disagree.name, disagree.here, worst, more=np.where(disagree.here, words, ""))
    reference = best_guess(s)
    with np.errstate(invalid="ignore"):
        hidden = (fixed.value > 0.0) & (reference <= 0.0) & np.isfinite(s.gran.acid)
    yield _finding("end point hides acid", hidden, fixed.value * 1e6)
    own = text_of(s.samples, "own_method", n)
    yield _finding("own method unfit", (own != "") & (choice.own_problem != ""), np.nan, more=choice.own_problem)

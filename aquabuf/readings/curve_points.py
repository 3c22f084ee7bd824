"""The points of one titrated waste, made a curve: how titrant is counted, order, scatter, and what cannot be used."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import isotonic_regression

from aquabuf.readings.sheet import Sheet

__all__ = ["ADDED", "FEWEST_POINTS", "CurvePoints", "Line", "SampleRows", "curve_of"]

Array = NDArray[np.float64]
Line = tuple[int, str, str, str, str, str]  # REJECTED_COLUMNS

FEWEST_POINTS = 5
SAME_AMOUNT = 1e-9        # of the largest amount: below it two points have the same
TEMPERATURE_SPREAD = 2.0  # °C within a curve, from which on it is told
ADDED = {"amount": ("base_added_eq_l", "acid_added_eq_l"), "volume": ("base_volume_ml", "acid_volume_ml"),
         "ratio": ("base_ratio", "acid_ratio")}


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class CurvePoints:
    """One curve, as base and pH that both rise.

    base_eq_l : base added per liter of raw waste; acid is negative, zero is the raw waste. [eq/L]
    ph : meter pH. dilution : share of waste in the mixture; 1 where the volume of titrant is not known. [-]
    rows : line of each point in the file; of points that were put together, the first.
    t_c : mean temperature, nan where none is given. [°C]; time : when the sample was taken, as written.
    notes : what was repaired or taken for granted.
    """

    sample_id: str
    base_eq_l: Array
    ph: Array
    dilution: Array
    rows: NDArray[np.int64]
    t_c: float = float("nan")
    time: str = ""
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class SampleRows:
    """Rows of one sample while it is judged; `at` are their positions in the sheet."""

    name: str
    at: NDArray[np.intp]
    sheet: Sheet
    headers: Mapping[str, str]

    def numbers(self, column: str) -> Array:
        """A column in house units, nan where it has no value."""
        cells = self.sheet.numbers.get(column)
        return np.full(len(self.at), np.nan) if cells is None else cells[self.at]

    def line(self, i: int, column: str, value: object, rule: str, remedy: str) -> Line:
        """What is wrong with one cell."""
        text = f"{value:.6g}" if isinstance(value, float) else str(value)
        return int(self.sheet.rows[self.at[i]]), self.name, self.headers.get(column, column), text, rule, remedy

    def row(self, i: int) -> int:
        """Line of a row in the file."""
        return int(self.sheet.rows[self.at[i]])


def curve_of(sample: SampleRows, noise_ph: float) -> CurvePoints | list[Line]:
    """The rising curve of a sample, or why there is none."""
    ph = sample.numbers("ph")
    kind, lines = _kind(sample)
    lines += [sample.line(i, "ph", "", "each point needs its pH", "fill it in, or remove the row")
              for i in np.flatnonzero(np.isnan(ph)).tolist()]
    if lines:
        return lines
    base, dilution, lines, notes = _amounts(sample, kind)
    if lines:
        return lines
    order = np.argsort(base, kind="stable")
    merged = _merged(sample, order, base, ph, dilution, noise_ph)
    if isinstance(merged, list):
        return merged
    x, y, d, first, more = merged
    if x.size < FEWEST_POINTS:
        return [sample.line(0, "(rows)", f"{x.size} points of different amount and pH",
                            f"a curve needs {FEWEST_POINTS} or more",
                            "titrate on, with smaller steps where pH is steep")]
    t, told = _temperature(sample)
    if not x[0] <= 0.0 <= x[-1]:
        told.append(f"the raw waste (nothing added) is not within the curve, which runs from {x[0]:.4g} to {x[-1]:.4g} "
                    f"eq/L: add its pH with 0 added")
    times = [text for text in sample.sheet.words.get("time", []) if text]
    mine = [sample.sheet.words["time"][i] for i in sample.at.tolist()] if times else []
    rows = np.array([sample.row(i) for i in first.tolist()], dtype=np.int64)
    return CurvePoints(sample_id=sample.name, base_eq_l=x, ph=y, dilution=d, rows=rows, t_c=t,
                       time=next(filter(None, mine), ""), notes=(*notes, *more, *told))


def _kind(sample: SampleRows) -> tuple[str, list[Line]]:
    """How titrant is counted in this sample, and what is wrong with that: two ways mixed, or none in some row."""
    ways = {kind: np.isfinite(np.stack([sample.numbers(name) for name in pair])) for kind, pair in ADDED.items()}
    used = [kind for kind, there in ways.items() if there.any()]
    if not used:
        name = next(name for pair in ADDED.values() for name in pair if name in sample.headers)
        return "", [sample.line(0, name, f"blank in all {len(sample.at)} rows", "a curve needs the base or acid added",
                                "fill it in; the raw waste has 0")]
    if len(used) > 1:
        k, i = np.argwhere(ways[used[1]])[0]
        name, other = ADDED[used[1]][k], next(n for n in ADDED[used[0]] if n in sample.headers)
        rule = ("mixed units: what was added must be counted in one way for all points of a sample; "
                f"{sample.headers[other]} has values too")
        remedy = "convert one of them, or give the two titrations two names"
        return used[0], [sample.line(int(i), name, float(sample.numbers(name)[i]), rule, remedy)]
    gaps = np.flatnonzero(~ways[used[0]].any(axis=0))
    name = next(n for n in ADDED[used[0]] if n in sample.headers)
    return used[0], [sample.line(i, name, "", "each point needs the base or acid added",
                                 "fill it in (0 for the raw waste), or remove the row") for i in gaps.tolist()]


def _amounts(sample: SampleRows, kind: str) -> tuple[Array, Array, list[Line], list[str]]:
    """Base added per liter of sample and the share of sample in the mixture, of each row."""
    plus, minus = (np.nan_to_num(sample.numbers(name)) for name in ADDED[kind])
    strength, volume = sample.numbers("titrant_normality_eq_l"), sample.numbers("sample_volume_ml")
    lines = []
    needs = {"volume": {"sample_volume_ml": volume, "titrant_normality_eq_l": strength},
             "ratio": {"titrant_normality_eq_l": strength}, "amount": {}}[kind]
    used = plus + np.abs(minus) > 0.0
    for name, values in needs.items():
        lacking = np.flatnonzero(np.isnan(values) & used)
        if lacking.size:
            rule = f"{name} must be known where titrant is counted by {kind}"
            lines.append(sample.line(int(lacking[0]), name, f"blank in {lacking.size} of {len(sample.at)} rows", rule,
                                     "add a column of it, or pass it for the whole file"))
    if lines:
        return plus, plus, lines, []
    net, both = plus - minus, np.abs(plus) + np.abs(minus)
    if kind == "amount":
        told = bool((np.isnan(strength) & used).any())
        notes = ["the titrant normality is not given: thinning by the titrant is not corrected for"] if told else []
        return net, 1.0 / (1.0 + np.where(used & ~np.isnan(strength), both / strength, 0.0)), [], notes
    per_sample = np.where(used, 1.0 / volume if kind == "volume" else 1.0, 0.0)
    return (net * np.where(used, strength, 0.0) * per_sample, 1.0 / (1.0 + both * per_sample), [], [])


Merged = tuple[Array, Array, Array, NDArray[np.intp], list[str]]


def _merged(sample: SampleRows, order: NDArray[np.intp], base: Array, ph: Array, dilution: Array, noise_ph: float,
            ) -> Merged | list[Line]:
    """Points in order, those of one amount put together, then pooled until pH rises; or the worst fault."""
    x, y = base[order], ph[order]
    same = np.concatenate([[False], np.diff(x) <= SAME_AMOUNT * np.abs(x).max()])
    notes = []
    for j in np.flatnonzero(same).tolist():
        a, b = int(order[j - 1]), int(order[j])
        if abs(y[j] - y[j - 1]) > 2.0 * noise_ph:
            rule = (f"points of the same amount must agree within {2.0 * noise_ph:g}; pH is {y[j - 1]:g} in row "
                    f"{sample.row(a)}")
            return [sample.line(b, "ph", float(y[j]), rule, "read it again, or remove one of the two rows")]
        notes.append(f"rows {sample.row(a)} and {sample.row(b)} have the same amount; their mean pH is used")
    starts = np.flatnonzero(~same)
    x, y, d, first = _blocks(starts, x, y, dilution[order], order)
    fitted = np.asarray(isotonic_regression(y, weights=np.diff(np.append(starts, len(same))).astype(float)).x)
    off = np.abs(fitted - y)
    if off.max() > noise_ph:
        return [_falls(sample, x, y, first)]
    starts = np.flatnonzero(np.concatenate([[True], np.diff(fitted) > 0.0]))
    if starts.size < x.size:
        rows = [sample.row(int(first[j])) for j in np.flatnonzero(off > 0.0).tolist()]
        where = f"rows {', '.join(map(str, rows))} were evened out by up to {off.max():.3f}" if rows else \
            f"{x.size - starts.size} points repeat the pH of the point before and were put together with it"
        notes.append(f"pH did not rise everywhere: {where}")
    x, y, d, first = _blocks(starts, x, fitted, d, first)
    return x, y, d, first, notes


def _blocks(starts: NDArray[np.intp], x: Array, y: Array, d: Array, first: NDArray[np.intp],
            ) -> tuple[Array, Array, Array, NDArray[np.intp]]:
    """Means of the blocks that begin at `starts`; one that holds the raw waste stays at zero added."""
    count = np.diff(np.append(starts, x.size))
    mean_x, mean_y, mean_d = (np.add.reduceat(v, starts) / count for v in (x, y, d))
    raw = np.add.reduceat((x == 0.0).astype(float), starts) > 0.0
    return np.where(raw, 0.0, mean_x), mean_y, np.where(raw, 1.0, mean_d), first[starts]


def _falls(sample: SampleRows, x: Array, y: Array, first: NDArray[np.intp]) -> Line:
    """The line of the worst fall of pH."""
    j = int(np.argmin(np.diff(y))) + 1
    turned = np.sum((x - x.mean()) * (y - y.mean())) < 0.0
    remedy = ("all of it falls: is this acid? Name the column acid, or write acid with a minus" if turned else
              "read the point again, correct it, or remove the row")
    rule = f"pH must rise as base is added; it was {y[j - 1]:g} in row {sample.row(int(first[j - 1]))}"
    return sample.line(int(first[j]), "ph", float(y[j]), rule, remedy)


def _temperature(sample: SampleRows) -> tuple[float, list[str]]:
    """Mean temperature, and a word where it did not hold still."""
    t = sample.numbers("temperature_c")
    t = t[np.isfinite(t)]
    if not t.size:
        return float("nan"), []
    spread = float(np.ptp(t))
    told = [f"the temperature ran over {spread:.3g} °C; constants move with it, which the electrode does not correct"]
    return float(t.mean()), told if spread > TEMPERATURE_SPREAD else []

"""Gran functions: straight lines whose root is an equivalence point.

Source: Gran 1952, Analyst 77:661. Acid per unit of sample is the abscissa, so a root is the alkalinity itself; arrays
are titrations times points.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri

from aquabuf.arrays import LN10
from aquabuf.engine.titrate import Points

__all__ = ["GRAN_PH", "Gran", "Line", "first_gran", "gran_lines", "line_root", "windows"]

Array = NDArray[np.float64]

GRAN_PH = (2.7, 4.6)     # where free acid outweighs bicarbonate, and activity and bisulfate are still small corrections
FEWEST = 3               # points on a line
LEAST_SPAN_PH = 0.3      # of a window: free acid doubles, so that the line has something to stand on
LEAST_FREE_ACID = 5e-6   # eq per unit of sample, taken for points that lie before a first guess of the end point
CHANCE_PARTS = 2.0       # of the variance expected of windows that chance may bring about
LENGTH_STEP = 1.1        # between the lengths of window that are tried, at least one point
NOT_BY_CHANCE = 0.01     # probability of so much scatter, below which points are called curved
BIAS_SHARE = 0.75        # of the error from acid still bound; some goes with escaping CO2; found by simulation
BUFFER_PH = (5.4, 7.8)   # where carbon dioxide and bicarbonate share the carbon: second function
CARBONATE_FROM_PH = 8.8  # above it bicarbonate and carbonate do: third function


@dataclass(frozen=True, slots=True, eq=False)
class Line:
    """Straight lines through some points, one per titration; nan where there are too few.

    root [eq per unit of sample], slope, r : of the line; u_root : its standard uncertainty from scatter.
    reduced_chi2, points : quality of the line and its number of points.
    """

    root: Array
    slope: Array
    r: Array
    u_root: Array
    reduced_chi2: Array
    points: NDArray[np.intp]


@dataclass(frozen=True, slots=True, eq=False)
class Gran:
    """First Gran function of each titration; nan where no window of points will do.

    acid : root: the alkalinity. u_line : standard uncertainty from the scatter of the points. u_bias : from
    bicarbonate, bisulfate and weak acids left. u_window : spread over all admissible windows beyond what scatter and
    these known acids give them: what is not known takes part. [eq per unit of sample]
    low, high : least and greatest root of the admissible windows; count : their number.
    first, last : index of the first and last point of the chosen window. slope, r : of the line.
    slope_ratio : slope over theory; of free acid alone and of bicarbonate counted, what comes nearer to 1, since that
    much bicarbonate explains. reduced_chi2 : scatter of its points over the one expected.
    straight : whether any window is straight within scatter.
    """

    acid: Array
    u_line: Array
    u_bias: Array
    u_window: Array
    low: Array
    high: Array
    count: NDArray[np.intp]
    first: NDArray[np.intp]
    last: NDArray[np.intp]
    slope: Array
    slope_ratio: Array
    r: Array
    reduced_chi2: Array
    straight: NDArray[np.bool_]

    @property
    def points(self) -> NDArray[np.intp]:
        """Number of points on the line."""
        return np.where(self.first >= 0, self.last - self.first + 1, 0)

    def take(self, rows: NDArray) -> Gran:
        """The same for some of the titrations."""
        return Gran(*(getattr(self, f.name)[rows] for f in fields(self)))


def first_gran(ph: Array, dilution: Array) -> Array:
    """First function (V0 + V)/V0 10^-pH, proportional to the free acid past the end point."""
    return np.exp(-LN10 * ph) / dilution


def line_root(x: Array, y: Array, use: NDArray[np.bool_], u_y: Array) -> Line:
    """Unweighted least squares of y on x over the points where `use` holds, and its root in x."""
    sums = _Sums(x, y, u_y, use)
    return sums.line(np.zeros(len(x), dtype=np.intp), np.full(len(x), x.shape[1], dtype=np.intp))


class _Sums:
    """Running sums over the points of each titration, so that any window's line follows from two of them."""

    def __init__(self, x: Array, y: Array, u_y: Array, use: NDArray[np.bool_]):
        count = use.sum(axis=1)
        safe = np.maximum(count, 1)
        x, y, v = np.where(use, x, 0.0), np.where(use, y, 0.0), np.where(use, u_y**2, 0.0)
        self.x0 = x.sum(axis=1) / safe  # sums about the mean keep their digits
        largest = np.abs(y).max(axis=1)
        self.y1 = np.where(largest > 0.0, largest, 1.0)
        x, y, v = np.where(use, x - self.x0[:, None], 0.0), y / self.y1[:, None], v / self.y1[:, None] ** 2
        w = np.divide(1.0, v, out=np.zeros_like(v), where=v > 0.0)
        terms = (use.astype(float), x, y, x * x, x * y, y * y, v, x * v, x * x * v, w, w * x, w * y, w * x * x,
                 w * x * y, w * y * y)
        self._run = np.zeros((len(terms), x.shape[0], x.shape[1] + 1))
        for running, term in zip(self._run, terms, strict=True):
            np.cumsum(term, axis=1, out=running[:, 1:])

    def line(self, start: NDArray[np.intp], stop: NDArray[np.intp]) -> Line:
        """Line through the points start:stop of each titration."""
        rows = np.arange(self._run.shape[1])
        s = self._run[:, rows, stop] - self._run[:, rows, start]
        return self._line(s, self.x0, self.y1)

    def all_starts(self, length: int) -> Line:
        """Lines through every run of `length` points: titrations times starts."""
        s = self._run[:, :, length:] - self._run[:, :, :-length]
        return self._line(s, self.x0[:, None], self.y1[:, None])

    @staticmethod
    def _line(s: Array, x0: Array, y1: Array) -> Line:
        k, sx, sy, sxx, sxy, syy, v, xv, xxv, w, wx, wy, wxx, wxy, wyy = s
        with np.errstate(invalid="ignore", divide="ignore"):
            mean_x, mean_y = sx / k, sy / k
            spread = sxx - k * mean_x**2
            slope = np.where((k >= FEWEST) & (spread > 0.0), (sxy - k * mean_x * mean_y) / spread, np.nan)
            root = mean_x - mean_y / slope
            lever = (root - mean_x) / spread
            variance = (v / k**2 + 2.0 * lever / k * (xv - mean_x * v)
                        + lever**2 * (xxv - 2.0 * mean_x * xv + mean_x**2 * v)) / slope**2
            cut = mean_y - slope * mean_x
            off = wyy - 2.0 * slope * wxy - 2.0 * cut * wy + slope**2 * wxx + 2.0 * slope * cut * wx + cut**2 * w
            total = syy - k * mean_y**2
            r = (sxy - k * mean_x * mean_y) / np.sqrt(spread * total)
        return Line(root + x0, slope * y1, r, np.sqrt(np.maximum(variance, 0.0)),
                    np.maximum(off, 0.0) / np.maximum(k - 2.0, 1.0), np.where(np.isfinite(slope), k, 0).astype(np.intp))


def windows(points: Points, ph: Array, use: NDArray[np.bool_], *, alkalinity: Array, carbon: Array, u_ph: Array,
            u_acid: Array) -> Gran:
    """Choose the window of points for the first function: smallest expected error among the straight ones.

    Every run of three or more points within GRAN_PH is tried (runs of up to 40 lengths in a long titration). One is
    admissible when it spans 0.3 pH, its line rises, its root lies before its first point, and its points scatter about
    it no more than pH and burette explain (chi-squared test at 1 %). Expected error: scatter, and what `carbon`
    [mol per unit of sample] and the weak acids still hold of the acid. It is worked out for an ideal line through a
    first guess of the `alkalinity`, not for the readings: else the window would be picked by its own scatter, which
    pulls the result up. Where no window is straight the straightest is taken and said to be curved.
    """
    x, n, m = points.acid, *ph.shape
    with np.errstate(invalid="ignore"):
        use = use & (ph >= GRAN_PH[0]) & (ph <= GRAN_PH[1])
    safe = np.where(use, ph, 4.0)
    f = first_gran(safe, points.dilution)
    per_carbon, rest, _, d_rest = points.terms(points.h(safe))
    steepness = -d_rest / f                     # free and bound acid per unit of the function
    excess = -rest - carbon[:, None] * per_carbon  # acid past the end point, bound acid and bicarbonate counted
    ideal = np.maximum(x - alkalinity[:, None], LEAST_FREE_ACID) / steepness
    u_f = np.hypot(LN10 * u_ph[:, None] * ideal, u_acid[:, None] / steepness)
    plain, corrected, expected = (_Sums(x, y, u_f, use) for y in (f, excess, ideal))
    best = _Best(n)
    run = use.cumsum(axis=1)
    for length in _lengths(m):
        line = replace(plain.all_starts(length), u_root=expected.all_starts(length).u_root)
        true = corrected.all_starts(length).root
        solid = np.concatenate([run[:, length - 1:length], run[:, length:] - run[:, :-length]], axis=1) == length
        solid &= np.abs(safe[:, length - 1:] - safe[:, :m - length + 1]) >= LEAST_SPAN_PH
        best.offer(length, line, true, solid, x[:, :m - length + 1], float(chdtri(length - 2, NOT_BY_CHANCE)))
    return best.gran(steepness, plain, corrected, expected)


def _lengths(most: int) -> list[int]:
    """Lengths of window from FEWEST points on; the same for every titration, however long its neighbors are."""
    out, length = [], FEWEST
    while length <= most:
        out.append(length)
        length = max(length + 1, round(length * LENGTH_STEP))
    return out


class _Best:
    """The best window found so far in each titration, and what all admissible ones give."""

    def __init__(self, n: int):
        self.score, self.chi2 = np.full(n, np.inf), np.full(n, np.inf)
        self.first, self.last = np.full(n, -1, dtype=np.intp), np.full(n, -1, dtype=np.intp)
        self.straight = np.zeros(n, dtype=bool)
        self.bias = np.full(n, np.nan)
        self.count = np.zeros(n, dtype=np.intp)
        self.low, self.high = np.full(n, np.inf), np.full(n, -np.inf)
        self.total, self.squares, self.expected = np.zeros(n), np.zeros(n), np.zeros(n)
        self.zero = np.full(n, np.nan)  # a first root, so that the sums keep their digits

    def offer(self, length: int, line: Line, true: Array, solid: NDArray[np.bool_], x: Array, chi2_limit: float,
              ) -> None:
        """Take in all windows of one length; `true` is the root once the acids that are known are counted."""
        bias = np.abs(true - line.root)
        with np.errstate(invalid="ignore"):
            able = solid & (line.slope > 0.0) & (line.root < x) & np.isfinite(line.root)
            straight = able & (line.reduced_chi2 * (length - 2) <= chi2_limit)
        self._spread(line, true, straight)
        error = np.where(straight, np.hypot(line.u_root, BIAS_SHARE * bias), np.inf)
        self._choose(length, error, np.where(straight, 0.0, np.inf), bias, straight=True)
        chi = np.where(able, line.reduced_chi2, np.inf)
        self._choose(length, np.full(chi.shape, np.inf), chi, bias, straight=False)

    def _spread(self, line: Line, true: Array, straight: NDArray[np.bool_]) -> None:
        """Add the roots of straight windows to the spread."""
        root = np.where(straight, line.root, np.nan)
        straight = straight & np.isfinite(true)
        has = straight.any(axis=1)
        first = true[np.arange(len(root)), straight.argmax(axis=1)]
        self.zero = np.where(np.isnan(self.zero) & has, first, self.zero)
        off = np.where(straight, true - self.zero[:, None], 0.0)
        self.count += straight.sum(axis=1)
        self.total += off.sum(axis=1)
        self.squares += (off**2).sum(axis=1)
        self.expected += np.where(straight, line.u_root**2, 0.0).sum(axis=1)
        self.low = np.fmin(self.low, np.where(straight, root, np.inf).min(axis=1))
        self.high = np.fmax(self.high, np.where(straight, root, -np.inf).max(axis=1))

    def _choose(self, length: int, error: Array, chi: Array, bias: Array, *, straight: bool) -> None:
        """Keep the best start of this length where it beats what was kept."""
        rows = np.arange(len(error))
        rank = error if straight else chi
        at = rank.argmin(axis=1)
        if straight:
            better = error[rows, at] < self.score
            self.straight |= better
            self.score = np.where(better, error[rows, at], self.score)
        else:
            better = ~self.straight & (chi[rows, at] < self.chi2)
            self.chi2 = np.where(better, chi[rows, at], self.chi2)
        self.first = np.where(better, at, self.first)
        self.last = np.where(better, at + length - 1, self.last)
        self.bias = np.where(better, bias[rows, at], self.bias)

    def gran(self, steepness: Array, sums: _Sums, corrected: _Sums, expected: _Sums) -> Gran:
        """The outcome, with the line through the chosen points worked out again."""
        has = self.first >= 0
        start, stop = np.where(has, self.first, 0), np.where(has, self.last + 1, 0)
        line = replace(sums.line(start, stop), u_root=expected.line(start, stop).u_root)
        in_window = (np.arange(steepness.shape[1]) >= start[:, None]) & (np.arange(steepness.shape[1]) < stop[:, None])
        mean = np.where(in_window, steepness, 0.0).sum(axis=1) / np.maximum(stop - start, 1)
        alone = line.slope * mean
        bound = corrected.line(start, stop).slope - alone  # by a carbon that was worked out with the strength as stated
        with np.errstate(invalid="ignore", divide="ignore"):
            counted = np.where(bound < 1.0, alone / (1.0 - bound), np.inf)
        count = np.maximum(self.count, 1)
        variance = (self.squares - CHANCE_PARTS * self.expected) / count - (self.total / count) ** 2

        def or_nan(v: Array) -> Array:
            return np.where(has, v, np.nan)
        worse = np.where(self.straight, 1.0, np.sqrt(np.maximum(line.reduced_chi2, 1.0)))
        return Gran(or_nan(line.root), or_nan(line.u_root * worse), or_nan(BIAS_SHARE * self.bias),
                    or_nan(np.sqrt(np.maximum(variance, 0.0))),
                    np.where(np.isfinite(self.low), self.low, np.nan),
                    np.where(np.isfinite(self.high), self.high, np.nan), self.count, self.first, self.last,
                    or_nan(line.slope), or_nan(_nearest_one(alone, counted)), or_nan(line.r),
                    or_nan(line.reduced_chi2), self.straight)


def _nearest_one(a: Array, b: Array) -> Array:
    """1 where it lies between both, else the nearer of the two."""
    return np.clip(1.0, np.fmin(a, b), np.fmax(a, b))


@dataclass(frozen=True, slots=True, eq=False)
class GranLines:
    """Second and third function, nan where the points do not allow them.

    carbonate : acid to the carbonate end point, from the second and the third function; negative: that much free CO2.
    [eq per unit of sample]
    k1_ratio : first constant of carbonic acid that the second function implies over the one of tables; an electrode
    that reads d too high divides it by 10^d.
    """

    carbonate_second: Array
    u_carbonate_second: Array
    k1_ratio: Array
    carbonate_third: Array


def gran_lines(points: Points, ph: Array, use: NDArray[np.bool_], alkalinity: Array, u_ph: Array, u_acid: Array,
               ) -> GranLines:
    """Second function between bicarbonate and CO2, and third between carbonate and bicarbonate.

    With A the alkalinity, x1 the acid to the carbonate end point and x' the acid that carbonate has taken up (acid
    added less free acid, water and other weak acids): (A - x') h = K1 (x' - x1), and
    (A - 2 x1 + x') / h = (x1 - x') / K2.
    """
    h = points.h(np.where(use, ph, 7.0))
    taken = points.acid + points.terms(h)[1]
    left = alkalinity[:, None] - taken
    with np.errstate(invalid="ignore"):
        middle = use & (ph > BUFFER_PH[0]) & (ph < BUFFER_PH[1]) & (left > 0.0)
        high = use & (ph > CARBONATE_FROM_PH)
    u_h = LN10 * u_ph[:, None]
    second = line_root(taken, left * h, middle, np.hypot(u_h * left * h, u_acid[:, None] * h))
    k1 = np.where(middle, points.k1, 0.0).sum(axis=1) / np.maximum(middle.sum(axis=1), 1)
    bicarbonate = left + 2.0 * (taken - second.root[:, None])
    third = line_root(taken, bicarbonate / h, high & (bicarbonate > 0.0), u_h * bicarbonate / h)
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = np.where(second.slope > 0.0, second.slope / k1, np.nan)
    return GranLines(np.where(second.slope > 0.0, second.root, np.nan), second.u_root, ratio,
                     np.where(third.slope < 0.0, third.root, np.nan))

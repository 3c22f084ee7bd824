"""Is a series of years rising or falling, how fast, and how sure is that? Rank statistics, no distribution assumed.

A series is a rectangle: a row per calendar year in order, a column per block, nan where there is no value. A block is
one season measured by one method; a plain annual series is one column. Values are compared only within their block, so
neither the seasons nor a change of method can pass for a trend.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtr, ndtri

from aquabuf.errors import InputError

__all__ = ["CONFIDENCE", "CORRECTED_YEARS", "EXACT_N", "MIN_PAIRS", "MIN_SIDE", "MIN_YEARS", "Step", "Trend",
           "covariance_of_s", "kendall_s", "lag_one", "normal_score", "p_exact", "p_normal", "pair_slopes",
           "rank_interval", "residuals", "step_between", "trend_of", "variance_inflation", "variance_of_s"]

Array = NDArray[np.float64]

CONFIDENCE = 0.90      # of intervals
EXACT_N = 10           # values up to which p is exact where none are tied: table of Gilbert 1987
CORRECTED_YEARS = 10   # serial correlation is judged from more years than this: US Geological Survey SIR 2005-5275
MIN_YEARS = 8          # fewer give no trend; practice, no source
MIN_PAIRS = MIN_YEARS * (MIN_YEARS - 1) // 2  # as many as that many years of one method have; practice, no source
MIN_SIDE = 3           # values of a method that a step needs; practice, no source
LARGEST_LAG_ONE = 0.95  # keeps the correction finite; practice, no source


@dataclass(frozen=True, slots=True, kw_only=True)
class Trend:
    """Trend of one series; nan where `status` says that there is too little to tell, `s` and `n` are always there.

    n, years, per_year, pairs : values, years with a value, most values of one year, pairs compared.
    s, variance : sum of the signs of all pairs, and its variance with ties if values are independent.
    inflation_seasons, inflation_years : by what the variance is multiplied for correlation between the seasons of a
        year and from year to year; at least 1, and nan where the years are too few to tell.
    z, p : normal score of `s` with continuity, and two-sided p; `p_from` says how p was got.
    p_corrected : p with the wider variance.
    slope, low, high : Sen slope per unit of time and its interval, with the wider variance where there is one;
        -inf and inf where the pairs do not bound it.
    tied : share of the pairs that are tied.
    """

    n: int
    years: int
    per_year: int
    pairs: int
    s: float
    variance: float
    status: str
    p_from: str = ""
    inflation_seasons: float = np.nan
    inflation_years: float = np.nan
    z: float = np.nan
    p: float = np.nan
    p_corrected: float = np.nan
    slope: float = np.nan
    low: float = np.nan
    high: float = np.nan
    tied: float = np.nan

    @property
    def widened(self) -> float:
        """Variance over that of independent values, as far as known; 1 where it cannot be told."""
        inflation = self.inflation_seasons * self.inflation_years
        return inflation if np.isfinite(inflation) else 1.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Step:
    """Change from one method to another: later minus earlier with the slope removed, its interval, and two-sided p."""

    size: float
    low: float
    high: float
    p: float


def _signs(x: Array) -> Array:
    """Sign of value j minus value i of each column, zero where one is missing: (i, j, column)."""
    return np.nan_to_num(np.sign(x[None, :, :] - x[:, None, :]))


def kendall_s(x: Array) -> Array:
    """Mann-Kendall S of each column: pairs that rise minus pairs that fall.

    Source: Mann 1945, Econometrica 13:245 (recalled); agrees with the worked series of EPA QA/G-9S.
    """
    rows, later = np.triu_indices(x.shape[0], 1)
    return _signs(x)[rows, later].sum(axis=0)


def variance_of_s(x: Array) -> Array:
    """Variance of S of each column for independent values, ties counted.

    [n(n-1)(2n+5) - sum over groups of t equal values of t(t-1)(2t+5)] / 18. Source: Kendall 1975 (recalled); agrees
    with the worked series of EPA QA/G-9S.
    """
    n = np.isfinite(x).sum(axis=0).astype(float)
    equal = (x[None, :, :] == x[:, None, :]).sum(axis=0)  # group size as each of its members sees it; 0 where missing
    tied = np.where(equal > 0, (equal - 1.0) * (2.0 * equal + 5.0), 0.0).sum(axis=0)
    return (n * (n - 1.0) * (2.0 * n + 5.0) - tied) / 18.0


def covariance_of_s(x: Array) -> Array:
    """Covariance of the S of every two columns, estimated from their ranks: (column, column).

    (K + sum over years of D D') / 3, K the concordant minus discordant pairs of two columns and D = 2 rank - n - 1,
    zero where a value is missing. Needs no model of the correlation within a year; takes the years as independent.
    Source: Dietz & Killeen 1981, J. Am. Stat. Assoc. 76:169, used for seasons by Hirsch & Slack 1984, Water Resour.
    Res. 20:727; missing values get the middle rank as in Gilbert 1987 (all recalled).
    """
    signs = _signs(x)
    rows, later = np.triu_indices(x.shape[0], 1)
    pairs, ranks = signs[rows, later], signs.sum(axis=0)
    return (pairs.T @ pairs + ranks.T @ ranks) / 3.0


def normal_score(s: ArrayLike, variance: ArrayLike) -> Array:
    """Z of S with the continuity correction of one; 0 where S is 0. Source: as `kendall_s`."""
    s, variance = np.asarray(s, dtype=float), np.asarray(variance, dtype=float)
    return (s - np.sign(s)) / np.sqrt(np.where(variance == 0.0, 1.0, variance))


def p_normal(z: ArrayLike) -> Array:
    """Two-sided probability of a normal score at least as large."""
    return 2.0 * ndtr(-np.abs(np.asarray(z, dtype=float)))


def p_exact(s: float, n: int) -> float:
    """Two-sided probability of |S| at least as large for `n` untied independent values, by counting all their orders.

    Source: null distribution of S in Kendall 1975; tabulated up to n = 10 in Gilbert 1987 (both recalled).
    """
    counts = _orders_by_inversions(n)
    reached = np.abs(n * (n - 1) // 2 - 2 * np.arange(counts.size)) >= abs(s)
    return float(counts[reached].sum() / counts.sum())


@cache
def _orders_by_inversions(n: int) -> Array:
    """How many orders of `n` values have 0, 1, 2, ... pairs the wrong way round; S = n(n-1)/2 - 2 of them."""
    counts = np.ones(1)
    for size in range(2, n + 1):
        counts = np.convolve(counts, np.ones(size))
    return counts


def pair_slopes(t: Array, x: Array) -> Array:
    """Slopes between all pairs of values of one column, sorted, all columns together; their median is the Sen slope.

    Source: Sen 1968, J. Am. Stat. Assoc. 63:1379; within seasons Hirsch, Slack & Smith 1982, Water Resour. Res. 18:107
    (both recalled). That pairs stay within one method as well is our choice.
    """
    rows, later = np.triu_indices(x.shape[0], 1)
    rise = x[later] - x[rows]
    known = np.isfinite(rise)
    return np.sort(rise[known] / (t[later] - t[rows])[known])


def rank_interval(ordered: Array, variance: float, confidence: float = CONFIDENCE) -> tuple[float, float]:
    """Interval for the median of sorted pair slopes (or pair differences) whose sum of signs has this variance.

    The values of rank (N - C)/2 and (N + C)/2 + 1 with C = z sqrt(variance), ranks rounded outward; -inf and inf where
    there are no such ranks. Source: Gilbert 1987, section 16.5; Hollander & Wolfe 1973 (both recalled).
    """
    half = float(ndtri(0.5 + confidence / 2.0)) * np.sqrt(variance)
    lower = int(np.floor((ordered.size - half) / 2.0)) - 1
    upper = int(np.ceil((ordered.size + half) / 2.0))
    return (float(ordered[lower]) if lower >= 0 else -np.inf,
            float(ordered[upper]) if upper < ordered.size else np.inf)


def residuals(t: Array, x: Array, slope: float) -> Array:
    """What is left of the values without slope and without the median of their column."""
    left = x - slope * t
    known = np.isfinite(left)
    filled = np.where(known.any(axis=0), left, 0.0)  # a column without values has no median to warn about
    return left - np.nanmedian(filled, axis=0)


def lag_one(series: Array) -> float:
    """Rank autocorrelation of successive values of a detrended series, its bias removed, 0 to 0.95.

    (n r + 2) / (n - 4): a fitted line takes (2 + 4 rho)/n from the correlation (first order, recalled); values after a
    gap count as successive. Negative values become 0: we only ever widen.
    """
    series = series[np.isfinite(series)]
    n = series.size
    ranks = np.sign(series[:, None] - series[None, :]).sum(axis=1)  # 2 rank - n - 1
    spread = float(ranks @ ranks)
    if n <= 4 or spread == 0.0:
        return 0.0
    r = float(ranks[1:] @ ranks[:-1]) / spread
    return float(np.clip((n * r + 2.0) / (n - 4.0), 0.0, LARGEST_LAG_ONE))


def variance_inflation(n: int, rho: float) -> float:
    """Variance of S of `n` serially correlated values over that of independent ones; at least 1.

    1 + 2/(n(n-1)(n-2)) sum over lags k of (n-k)(n-k-1)(n-k-2) rho_k. Source: Hamed & Rao 1998, J. Hydrol. 204:182
    (recalled). They take the rank autocorrelations that are significant one by one; in 10 to 40 years hardly any is,
    and the correction does little. Ours takes rho_k = rho^k from the bias-corrected lag one, significant or not, never
    below zero, so that the variance never shrinks.
    """
    if n < 3:
        return 1.0
    k = np.arange(1, n - 2, dtype=float)
    weights = (n - k) * (n - k - 1.0) * (n - k - 2.0)
    return 1.0 + 2.0 / (n * (n - 1.0) * (n - 2.0)) * float(weights @ max(rho, 0.0)**k)


def trend_of(t: ArrayLike, x: ArrayLike, *, confidence: float = CONFIDENCE) -> Trend:
    """Trend of one series: Mann-Kendall for one column, the seasonal Kendall test for several.

    Parameters
    ----------
    t, x
        Times in decimal years and values, years times blocks, nan where there is none. A plain list is one block.
    confidence
        Of the interval of the slope, between 0 and 1.

    Returns
    -------
    Trend
        `status` is ok, too few years (below `MIN_YEARS`) or too few pairs (below `MIN_PAIRS`).

    Raises
    ------
    InputError
        Where times and values differ in shape, a value has no time, or the confidence is not between 0 and 1.

    Notes
    -----
    S and its variance are summed over blocks (Hirsch, Slack & Smith 1982). The wider variance is the sum with the
    covariances of the blocks (`covariance_of_s`) times the inflation from year to year (`lag_one` of the mean residual
    of each year); the first takes years as independent, so where a lake remembers last year it falls short. Putting the
    two together is our choice, and so is that neither may lower the variance.
    """
    t, x = _checked(t, x, confidence)
    of_year, of_column = np.isfinite(x).sum(axis=1), np.isfinite(x).sum(axis=0)
    n, years, per_year = int(of_year.sum()), int((of_year > 0).sum()), int(of_year.max(initial=0))
    pairs = int((of_column * (of_column - 1) // 2).sum())
    s, variance = float(kendall_s(x).sum()), float(variance_of_s(x).sum())
    if years < MIN_YEARS or pairs < MIN_PAIRS:
        return Trend(n=n, years=years, per_year=per_year, pairs=pairs, s=s, variance=variance,
                     status="too few years" if years < MIN_YEARS else "too few pairs")
    slopes = pair_slopes(t, x)
    tied = float((slopes == 0.0).mean())
    slope = float(np.median(slopes))
    z = float(normal_score(s, variance))
    p, p_from = _p_of(s, variance, n, (of_column > 0).sum() == 1, tied > 0.0)
    seasons, yearly = _inflation(t, x, slope, variance) if years > CORRECTED_YEARS else (np.nan, np.nan)
    wide = variance * seasons * yearly
    low, high = rank_interval(slopes, wide if np.isfinite(wide) else variance, confidence)
    return Trend(n=n, years=years, per_year=per_year, pairs=pairs, s=s, variance=variance, status="ok", p_from=p_from,
                 z=z, p=p, inflation_seasons=seasons, inflation_years=yearly,
                 p_corrected=float(p_normal(normal_score(s, wide))), slope=slope, low=low, high=high, tied=tied)


def _checked(t: ArrayLike, x: ArrayLike, confidence: float) -> tuple[Array, Array]:
    """Times and values as rectangles."""
    t, x = np.asarray(t, dtype=float), np.asarray(x, dtype=float)
    if t.shape != x.shape or x.ndim not in (1, 2):
        raise InputError(f"times and values of a trend must have one shape of one or two dimensions; found {t.shape} "
                         f"and {x.shape}. Give a time for every value.")
    if bool((np.isfinite(x) & ~np.isfinite(t)).any()):
        raise InputError("every value of a trend needs a time; found a value without. Leave it out or date it.")
    if not 0.0 < confidence < 1.0:
        raise InputError(f"confidence must be between 0 and 1; found {confidence:g}. Give 90 % as 0.90.")
    return (t[:, None], x[:, None]) if x.ndim == 1 else (t, x)


def _p_of(s: float, variance: float, n: int, single: bool, ties: bool) -> tuple[float, str]:
    """Two-sided p for independent values and how it was got."""
    if single and n <= EXACT_N and not ties:
        return p_exact(s, n), "exact"
    few = f", although n <= {EXACT_N}, for there are ties" if single and n <= EXACT_N else ""
    return float(p_normal(normal_score(s, variance))), f"normal approximation{few}"


def _inflation(t: Array, x: Array, slope: float, variance: float) -> tuple[float, float]:
    """Factors on the variance of S for correlation between the blocks of a year, and from year to year."""
    if variance <= 0.0:
        return 1.0, 1.0
    covariance = covariance_of_s(x)
    between = float(covariance.sum() - np.trace(covariance))
    left = residuals(t, x, slope)
    count = np.isfinite(left).sum(axis=1)
    yearly = np.nansum(left, axis=1)[count > 0] / count[count > 0]
    return max(1.0, 1.0 + between / variance), variance_inflation(yearly.size, lag_one(yearly))


def step_between(t: Array, x: Array, season: ArrayLike, later: Sequence[bool | None], slope: float, *,
                 widened: float = 1.0, confidence: float = CONFIDENCE) -> Step:
    """Size of the step between two methods, slope removed: Hodges-Lehmann estimate and rank-sum test by season.

    Parameters
    ----------
    t, x
        The series as for `trend_of`, years times blocks.
    season, later
        Of each block: its season, and whether it is of the later method (True), the earlier (False) or another (None).
    slope
        Slope within methods, removed from the values.
    widened
        Factor on the variance for serial correlation (`Trend.widened`).
    confidence
        Of the interval.

    Returns
    -------
    Step
        All nan where a method has fewer than `MIN_SIDE` values in seasons that both methods have.

    Notes
    -----
    Median of later minus earlier over all pairs within a season; the sum of their signs has the rank-sum variance with
    ties. Source: Hirsch 1988, Water Resour. Res. 24:493 (recalled). The slope removed is itself an estimate: its error,
    carried over the time between the methods, multiplies the variance of the step by 1 + dt^2 H / Sxx, the ratio that
    least squares gives for the same dates (H sum over seasons of n1 n2/(n1 + n2), dt the mean time between the methods
    weighted so, Sxx the sum of squared times within blocks). The interval of the rank-sum test is stretched by the root
    of that factor, and p is the one at which it just leaves out zero. Taking the ratio over for ranks is our choice.
    """
    left = x - slope * t
    of_season, late = np.asarray(season), np.array([side is True for side in later])
    early = np.array([side is False for side in later])
    differences, weight, lag, variance, sides = [], 0.0, 0.0, 0.0, np.zeros(2, dtype=int)
    for one in np.unique(of_season):
        (t1, r1), (t2, r2) = (_values(t, left, side & (of_season == one)) for side in (early, late))
        if r1.size and r2.size:
            sides += (r1.size, r2.size)
            weight += r1.size * r2.size / (r1.size + r2.size)
            lag += r1.size * r2.size / (r1.size + r2.size) * (t2.mean() - t1.mean())
            variance += _rank_sum_variance(r1, r2)
            differences.append(np.subtract.outer(r2, r1).ravel())
    if sides.min() < MIN_SIDE:
        return Step(size=np.nan, low=np.nan, high=np.nan, p=np.nan)
    ordered = np.sort(np.concatenate(differences))
    size = float(np.median(ordered))
    stretch = float(np.sqrt(widened * (1.0 + lag**2 / weight / _squared_times(t, x))))
    low, high = (size + stretch * (end - size) for end in rank_interval(ordered, variance, confidence))
    against_zero = normal_score(np.sign(ordered - size * (1.0 - 1.0 / stretch)).sum(), variance)
    return Step(size=size, low=low, high=high, p=float(p_normal(against_zero)))


def _values(t: Array, x: Array, columns: NDArray[np.bool_]) -> tuple[Array, Array]:
    """Times and values of some columns, those that are there."""
    known = np.isfinite(x[:, columns])
    return t[:, columns][known], x[:, columns][known]


def _rank_sum_variance(early: Array, late: Array) -> float:
    """Variance of the sum of signs of all differences between two samples of one population, ties counted."""
    pooled = np.concatenate((early, late))
    n = pooled.size
    equal = (pooled[:, None] == pooled[None, :]).sum(axis=0)
    ties = float((equal.astype(float)**2 - 1.0).sum()) / (n**3 - n)  # sum of t^3 - t over groups, member by member
    return early.size * late.size * (n + 1.0) / 3.0 * (1.0 - ties)


def _squared_times(t: Array, x: Array) -> float:
    """Sum of squared times of the values, each from the mean of its column."""
    known = np.isfinite(x)
    times = np.where(known, t, 0.0)
    mean = times.sum(axis=0) / np.maximum(known.sum(axis=0), 1)
    return float((np.where(known, t - mean, 0.0)**2).sum())

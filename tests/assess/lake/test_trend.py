"""Rank statistics against published rows, closed forms, scipy, plain loops and simulated series."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from published_rows import read_rows
from scipy import stats

from aquabuf.assess.lake import trend
from aquabuf.assess.lake.trend import (
    CONFIDENCE,
    CORRECTED_YEARS,
    MIN_YEARS,
    covariance_of_s,
    kendall_s,
    lag_one,
    normal_score,
    p_exact,
    p_normal,
    pair_slopes,
    rank_interval,
    step_between,
    trend_of,
    variance_inflation,
    variance_of_s,
)
from aquabuf.errors import InputError

ROWS = read_rows("trends")


def rows_of(what):
    """Published rows of one kind with readable names."""
    return pytest.mark.parametrize("row", [r for r in ROWS if r["what"] == what], ids=lambda r: f"{r['where']} {r['quantity']}")


def close(found, row):
    """Equal to the published value within its tolerance."""
    assert_allclose(found, float(row["expected"]), rtol=0, atol=float(row["atol"]))


def remembering(rng, shape, rho):
    """Normal series with unit variance whose rows (last axis) remember the value before by rho."""
    x = rng.standard_normal(shape)
    for i in range(1, shape[-1]):
        x[..., i] = rho * x[..., i - 1] + np.sqrt(1.0 - rho**2) * x[..., i]
    return x


def blocks(values):
    """Years and values, the same years for each column."""
    return np.repeat(np.arange(len(values), dtype=float)[:, None], values.shape[1], axis=1), values


@rows_of("series")
def test_worked_series(row):
    """The series that the agency works out by hand."""
    found = trend_of(np.arange(11), [float(v) for v in row["where"].split()])
    close(getattr(found, row["quantity"]), row)


@rows_of("upper tail")
def test_table_of_small_n(row):
    """Half of the two-sided p is the tail that the tables print."""
    close(p_exact(float(row["quantity"]), int(row["where"])) / 2.0, row)


@rows_of("score")
def test_score_of_a_known_s(row):
    """S of n untied years gives the score that others found."""
    n = int(row["where"])
    close(normal_score(float(row["quantity"]), variance_of_s(np.arange(n, dtype=float)[:, None])[0]), row)


@pytest.mark.parametrize("n", range(2, 11))
def test_exact_p_is_that_of_scipy(n):
    """Every order of up to ten values."""
    rng = np.random.default_rng(n)
    for _ in range(20):
        x = rng.permutation(n).astype(float)
        expected = stats.kendalltau(np.arange(n), x, method="exact").pvalue
        assert_allclose(p_exact(kendall_s(x[:, None])[0], n), expected, rtol=1e-12)


def test_exact_where_few_and_untied():
    """Up to ten values without ties are counted out; ties or more values take the normal approximation and say so."""
    few = trend_of(np.arange(10), [3, 1, 2, 5, 4, 8, 7, 6, 9, 10])
    assert_allclose(few.p, stats.kendalltau(np.arange(10), [3, 1, 2, 5, 4, 8, 7, 6, 9, 10], method="exact").pvalue)
    assert few.p_from == "exact"
    tied = trend_of(np.arange(10), [3, 1, 2, 5, 4, 8, 7, 7, 9, 10])
    assert_allclose(tied.p, p_normal(tied.z))
    assert tied.p_from == "normal approximation, although n <= 10, for there are ties"
    assert trend_of(np.arange(11), np.arange(11)).p_from == "normal approximation"


@pytest.mark.parametrize("levels", [4, 1000])
def test_s_and_variance_by_loop_and_by_scipy(levels):
    """S counts pairs; with ties too, the variance is the one scipy uses (it has no continuity correction)."""
    rng = np.random.default_rng(levels)
    x = rng.integers(levels, size=30).astype(float)
    s = sum(np.sign(x[j] - x[i]) for i in range(30) for j in range(i + 1, 30))
    assert kendall_s(x[:, None])[0] == s
    expected = stats.kendalltau(np.arange(30), x, method="asymptotic").pvalue
    assert_allclose(p_normal(s / np.sqrt(variance_of_s(x[:, None])[0])), expected, rtol=1e-10)
    assert_allclose(normal_score(s, 100.0), (abs(s) - 1.0) / 10.0 * np.sign(s))


def test_score_of_unknown_variance_is_unknown():
    """No variance, no score; nothing but ties is a score of zero."""
    assert np.isnan(normal_score(5.0, np.nan))
    assert normal_score(0.0, 0.0) == 0.0


@pytest.mark.parametrize("seed", range(5))
def test_slope_and_interval_like_scipy(seed):
    """The slope is that of scipy; the ends of its interval are the same but for rounding ranks outward."""
    rng = np.random.default_rng(seed)
    t, x = np.sort(rng.uniform(1990, 2020, 24)), rng.standard_normal(24).cumsum()
    found, expected = pair_slopes(t[:, None], x[:, None]), stats.theilslopes(x, t, alpha=0.9)
    low, high = rank_interval(found, variance_of_s(x[:, None])[0], 0.9)
    assert_allclose(np.median(found), expected.slope, rtol=1e-12)
    assert abs(np.searchsorted(found, low) - np.searchsorted(found, expected.low_slope)) <= 1
    assert abs(np.searchsorted(found, high) - np.searchsorted(found, expected.high_slope)) <= 1
    assert low <= expected.low_slope
    assert high >= expected.high_slope


def test_ranks_of_the_interval():
    """Of 100 ordered slopes with C = 1.645 x 10, those of rank 41 and 60 lie outside of (100 - C)/2 and (100 + C)/2 + 1."""
    ordered = np.arange(1.0, 101.0)
    assert rank_interval(ordered, 100.0, 0.9) == (41.0, 60.0)  # 41.78 down, 59.22 up
    assert rank_interval(ordered, 1e4, 0.9) == (-np.inf, np.inf)


def test_covariance_of_blocks():
    """The same column twice has its own variance, its mirror image the negative, and other years none."""
    x = np.random.default_rng(1).standard_normal((15, 1))
    pair = covariance_of_s(np.hstack((x, x, -x)))
    variance = 15 * 14 * 35 / 18
    assert_allclose(pair, variance * np.outer([1, 1, -1], [1, 1, -1]), rtol=1e-12)
    early, late = np.where(np.arange(15)[:, None] < 8, x, np.nan), np.where(np.arange(15)[:, None] >= 8, x, np.nan)
    assert_allclose(covariance_of_s(np.hstack((early, late)))[0, 1], 0.0, atol=1e-12)


def test_covariance_by_ranks():
    """[K + 4 sum R R' - n (n+1)^2] / 3, the form for complete columns."""
    a, b = np.random.default_rng(2).standard_normal((2, 12))
    k = sum(np.sign((a[j] - a[i]) * (b[j] - b[i])) for i in range(12) for j in range(i + 1, 12))
    expected = (k + 4.0 * stats.rankdata(a) @ stats.rankdata(b) - 12 * 13**2) / 3.0
    assert_allclose(covariance_of_s(np.stack((a, b), axis=1))[0, 1], expected, rtol=1e-12)


def test_twelve_equal_months_are_one():
    """Months that only repeat one another multiply S by 12 and its variance by 144, not by 12."""
    x = np.tile(np.random.default_rng(7).standard_normal(20)[:, None], 12)
    found, one = trend_of(*blocks(x)), trend_of(np.arange(20), x[:, 0])
    assert found.s == 12 * one.s
    assert_allclose((found.variance, found.inflation_seasons), (12 * one.variance, 12.0))
    assert_allclose(found.inflation_years, one.inflation_years)
    assert_allclose(found.p_corrected, p_normal((12 * abs(one.s) - 1) / np.sqrt(144 * one.variance * one.inflation_years)))


def exact_variance(n, rho):
    """Variance of S of a normal series with correlation rho^lag, by the arcsine law of four values."""
    i, j = np.triu_indices(n, 1)
    r = rho ** np.abs(np.subtract.outer(np.arange(n), np.arange(n)))
    shared = r[np.ix_(j, j)] - r[np.ix_(i, j)] - r[np.ix_(j, i)] + r[np.ix_(i, i)]
    spread = np.sqrt(2.0 - 2.0 * r[i, j])
    return 2.0 / np.pi * np.arcsin(np.clip(shared / np.outer(spread, spread), -1.0, 1.0)).sum()


@pytest.mark.parametrize("n", [12, 25, 40])
@pytest.mark.parametrize("rho", [0.2, 0.5, 0.8])
def test_inflation_against_the_arcsine_law(n, rho):
    """Within 6 % of the exact variance; the rank correlation of a normal pair is 6/pi asin(rho/2)."""
    found = variance_inflation(n, 6.0 / np.pi * np.arcsin(rho / 2.0))
    assert_allclose(found, exact_variance(n, rho) / exact_variance(n, 0.0), rtol=0.06)


def test_inflation_of_five():
    """1 + 2/60 (24 rho + 6 rho^2)."""
    assert_allclose(variance_inflation(5, 0.5), 1.45)


def test_inflation_never_narrows():
    """No correlation, a negative one, or next to no values leave the variance as it is."""
    assert [variance_inflation(25, 0.0), variance_inflation(25, -0.5), variance_inflation(2, 0.9)] == [1.0, 1.0, 1.0]


def test_lag_one():
    """A long series shows its own rank correlation; one that alternates shows none; a constant one neither."""
    x = remembering(np.random.default_rng(3), (3000,), 0.6)
    assert_allclose(lag_one(x), 6.0 / np.pi * np.arcsin(0.3), atol=0.04)
    assert (lag_one(np.tile([0.0, 1.0], 20)), lag_one(np.ones(20)), lag_one(np.arange(4.0))) == (0.0, 0.0, 0.0)
    few = np.array([3.0, 1.0, 4.0, 5.0, 9.0, 2.6, 7.0, 3.5, 6.0, 8.0])
    ranks = stats.rankdata(few) - 5.5
    assert_allclose(lag_one(few), (10.0 * (ranks[1:] @ ranks[:-1]) / (ranks @ ranks) + 2.0) / 6.0)


def shares(x):
    """Share of series whose p, and corrected p, is below 5 %, and coverage of a slope of zero."""
    found = [trend_of(*(blocks(row) if row.ndim == 2 else (np.arange(row.size), row))) for row in x]
    return (np.mean([f.p < 0.05 for f in found]), np.mean([f.p_corrected < 0.05 for f in found]),
            np.mean([f.low <= 0.0 <= f.high for f in found]))


def test_white_noise_is_no_trend():
    """25 years without memory: false alarms as announced, fewer with the correction; the interval holds zero."""
    plain, corrected, cover = shares(np.random.default_rng(11).standard_normal((1500, 25)))
    assert 0.035 < plain < 0.065
    assert 0.01 < corrected < 0.05
    assert 0.88 < cover < 0.97


def test_memory_is_no_trend():
    """25 years that remember the last by half: four times too many alarms, with the correction not twice."""
    plain, corrected, cover = shares(remembering(np.random.default_rng(12), (1500, 25), 0.5))
    assert plain > 0.18
    assert 0.03 < corrected < 0.10
    assert cover > 0.82


def test_seasons_and_memory_are_no_trend():
    """20 years of months with weather of months and memory of years: nearly always an alarm, corrected near nominal."""
    rng = np.random.default_rng(13)
    x = remembering(rng, (250, 20), 0.5)[:, :, None] + remembering(rng, (250, 240), 0.3).reshape(250, 20, 12)
    plain, corrected, cover = shares(x)
    assert plain > 0.5
    assert 0.02 < corrected < 0.15
    assert cover > 0.8


def test_months_are_not_independent_years():
    """Persistence from month to month alone is counted by the covariance of the months."""
    plain, corrected, _ = shares(remembering(np.random.default_rng(14), (300, 240), 0.5).reshape(300, 20, 12))
    assert plain > 0.15
    assert corrected < 0.08


def test_interval_holds_the_slope():
    """A true slope of 1 per year under white noise lies in nine of ten intervals (a little more: they only widen)."""
    x = np.random.default_rng(15).standard_normal((1000, 20)) * 5.0 + np.arange(20.0)
    held = np.mean([f.low <= 1.0 <= f.high for f in (trend_of(np.arange(20), row) for row in x)])
    assert CONFIDENCE - 0.02 < held < 0.97


@pytest.mark.parametrize("columns", [1, 4])
def test_correction_only_widens(columns):
    """p never shrinks and the interval never narrows, whatever the noise."""
    rng = np.random.default_rng(16)
    for rho in (-0.6, 0.0, 0.6):
        for row in remembering(rng, (40, columns, 14), rho):
            t, x = blocks(row.T)
            found = trend_of(t, x)
            plain = rank_interval(pair_slopes(t, x), found.variance)
            assert found.p_corrected >= found.p
            assert found.low <= plain[0] <= plain[1] <= found.high


def test_rows_that_are_missing():
    """Empty years and empty blocks change nothing; a missing value takes out only its own pairs."""
    x = np.random.default_rng(17).standard_normal((14, 3)).round(1)
    x[3, 1] = np.nan
    t = blocks(x)[0]
    full = trend_of(t, x)
    wide = trend_of(*(np.hstack((np.vstack((a, np.full((2, 3), np.nan))), np.full((16, 1), np.nan))) for a in (t, x)))
    assert_allclose([getattr(wide, n) for n in ("n", "s", "p", "p_corrected", "slope", "low", "high")],
                    [getattr(full, n) for n in ("n", "s", "p", "p_corrected", "slope", "low", "high")], rtol=1e-12)
    assert (full.n, full.pairs) == (41, 2 * 14 * 13 // 2 + 13 * 12 // 2)
    alone = [trend_of(t[:, c], x[:, c]) for c in range(3)]
    assert (full.s, full.variance) == (sum(a.s for a in alone), pytest.approx(sum(a.variance for a in alone)))


def test_mirror_image():
    """Values upside down turn every sign and swap the ends."""
    x = np.random.default_rng(18).standard_normal(20)
    up, down = trend_of(np.arange(20), x), trend_of(np.arange(20), -x)
    assert (up.s, up.slope, up.low, up.high, up.p) == (-down.s, -down.slope, -down.high, -down.low, down.p)


def test_nothing_but_ties():
    """A value that never changes has no trend, for sure none that is known."""
    found = trend_of(np.arange(12), np.full(12, 3.0))
    assert (found.s, found.z, found.p, found.p_corrected, found.slope, found.tied) == (0.0, 0.0, 1.0, 1.0, 0.0, 1.0)


def test_too_little_gives_no_figures():
    """S and n stay, nothing that could mislead is given."""
    few = trend_of(np.arange(MIN_YEARS - 1), np.arange(MIN_YEARS - 1.0))
    assert (few.status, few.n, few.s) == ("too few years", 7, 21.0)
    assert_array_equal([few.z, few.p, few.p_corrected, few.slope, few.low, few.high], np.nan)
    apart = np.where(np.eye(4, dtype=bool).repeat(3, axis=0), np.arange(12.0)[:, None], np.nan)  # 4 methods of 3 years
    months = trend_of(*blocks(np.tile(np.arange(MIN_YEARS - 1.0)[:, None], 12)))
    assert (months.status, months.pairs) == ("too few years", 12 * 21)
    none = trend_of(*blocks(apart))
    assert (none.status, none.years, none.pairs, none.s) == ("too few pairs", 12, 12, 12.0)
    assert trend_of([], []).status == "too few years"


def test_serial_correlation_needs_years():
    """Ten years do not tell, eleven do."""
    assert np.isnan(trend_of(np.arange(CORRECTED_YEARS), np.arange(CORRECTED_YEARS)).p_corrected)
    assert np.isfinite(trend_of(np.arange(CORRECTED_YEARS + 1), np.arange(CORRECTED_YEARS + 1)).p_corrected)


def two_methods(x, change, *, shift=0.0):
    """An annual series as two blocks, the later method from row `change` on reading `shift` more."""
    late = np.arange(x.size) >= change
    t, values = blocks(np.stack((np.where(late, np.nan, x), np.where(late, x + shift, np.nan)), axis=1))
    return t, values


@pytest.mark.parametrize("change", [6, 12])
def test_a_step_is_measured_and_is_no_trend(change):
    """A line of slope 0.5 read 30 higher by the later method: slope and step come back exactly."""
    t, x = two_methods(0.5 * np.arange(25.0), change, shift=30.0)
    found = trend_of(t, x)
    step = step_between(t, x, [0, 0], [False, True], found.slope)
    assert_allclose((found.slope, found.low, found.high, step.size), (0.5, 0.5, 0.5, 30.0))
    flat = trend_of(*two_methods(np.zeros(25), change, shift=30.0))
    assert (flat.s, flat.slope) == (0.0, 0.0)  # one series of both would rise for sure
    assert trend_of(np.arange(25), np.repeat([0.0, 30.0], [change, 25 - change])).p < 0.001


def test_a_step_is_no_memory():
    """A shift of the later method changes nothing of the trend, its corrected p neither."""
    x = np.random.default_rng(22).standard_normal(24)
    near, far = (trend_of(*two_methods(x, 12, shift=shift)) for shift in (0.0, 64.0))
    assert_allclose((far.slope, far.p, far.p_corrected), (near.slope, near.p, near.p_corrected), rtol=1e-9)


@pytest.mark.parametrize("change", [6, 12])
def test_no_step_no_alarm(change):
    """White noise: false alarms near 5 %, the interval holds a true step, a step of 5 spreads is found."""
    rng, alarms, held, seen = np.random.default_rng(19), [], [], []
    for x in rng.standard_normal((400, 25)):
        for shift in (0.0, 5.0):
            t, y = two_methods(x, change, shift=shift)
            step = step_between(t, y, [0, 0], [False, True], trend_of(t, y).slope)
            (seen if shift else alarms).append(step.p < 0.05)
            held.append(step.low <= shift <= step.high)
    assert 0.02 < np.mean(alarms) < 0.08
    assert 0.86 < np.mean(held) < 0.95
    assert np.mean(seen) > 0.95


def test_step_between_methods_of_the_same_dates():
    """Both methods on the same dates: the slope has no part in it and p is that of the rank-sum test."""
    rng = np.random.default_rng(20)
    t, x = blocks(np.stack((rng.standard_normal(14), rng.standard_normal(14) + 1.0), axis=1).round(1))
    step = step_between(t, x, [0, 0], [False, True], 0.0)
    expected = stats.mannwhitneyu(x[:, 1], x[:, 0], method="asymptotic", use_continuity=True)
    assert_allclose(step.p, expected.pvalue, rtol=1e-9)
    assert_allclose(step.size, np.median(x[:, 1][:, None] - x[:, 0]), atol=1e-12)


def test_stretch_is_that_of_least_squares():
    """The interval is wider than with a known slope by the ratio of standard errors that a linear model gives."""
    rng = np.random.default_rng(21)
    t, x = blocks(np.full((20, 4), np.nan))
    x[:9, :2], x[9:, 2:] = rng.standard_normal((9, 2)), rng.standard_normal((11, 2))  # 2 seasons, 2 methods
    season, later = [1, 2, 1, 2], [False, False, True, True]
    step = step_between(t, x, season, later, 0.0)
    rows = [(float(season[c] == 1), float(season[c] == 2), float(later[c]), t[y, c]) for y, c in np.argwhere(np.isfinite(x))]
    design = np.array(rows)
    free, fixed = (np.linalg.inv(d.T @ d)[2, 2] for d in (design, design[:, :3]))
    differences = np.sort(np.concatenate([(x[9:, c + 2][:, None] - x[:9, c]).ravel() for c in (0, 1)]))
    low, high = rank_interval(differences, 2 * 9 * 11 * 21 / 3.0)
    assert_allclose((step.high - step.size) / (high - step.size), np.sqrt(free / fixed), rtol=1e-9)
    assert_allclose((step.size - step.low) / (step.size - low), np.sqrt(free / fixed), rtol=1e-9)
    wider = step_between(t, x, season, later, 0.0, widened=4.0)
    assert_allclose((wider.high - wider.size) / (step.high - step.size), 2.0)


def test_step_needs_values_on_both_sides():
    """Two values of a method, or no season in common, give no step."""
    t, x = two_methods(np.arange(20.0), 18)
    assert_array_equal([getattr(step_between(t, x, [0, 0], [False, True], 1.0), n) for n in ("size", "p")], np.nan)
    t, x = two_methods(np.arange(20.0), 10)
    assert np.isnan(step_between(t, x, [1, 2], [False, True], 1.0).size)


@pytest.mark.parametrize(("t", "x", "confidence", "words"), [
    ([1, 2], [1, 2, 3], 0.9, r"one shape of one or two dimensions; found \(2,\) and \(3,\)\. Give a time"),
    ([1, np.nan], [1, 2], 0.9, r"every value of a trend needs a time; found a value without\. Leave it out"),
    ([1, 2], [1, 2], 90.0, r"confidence must be between 0 and 1; found 90\. Give 90 % as 0\.90"),
])
def test_messages(t, x, confidence, words):
    """Rule, value and remedy."""
    with pytest.raises(InputError, match=words):
        trend_of(t, x, confidence=confidence)


def test_everything_public_is_a_function_or_a_limit():
    """What the module offers is there."""
    assert all(hasattr(trend, name) for name in trend.__all__)

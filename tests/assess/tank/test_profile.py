"""Courses of flow and strength: figures against values worked by hand, draws against closed forms."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats

from aquabuf.assess.tank.profile import (
    Profile,
    Variation,
    noise,
    peak_factor,
    percentile,
    profile_of_table,
    summary,
    weighted_mean,
)
from aquabuf.assess.tank.profile_draw import Dump, Statistics, draw, profile_of_statistics, sd_from_most
from aquabuf.errors import InputError
from aquabuf.readings.profile_file import ProfileTable


def profile(flow, hours=None, **more):
    """A profile of one waste with steps of these lengths, an hour each if none are given."""
    flow = np.asarray(flow, dtype=float)
    dt = np.full(flow.size, 3600.0) if hours is None else np.asarray(hours) * 3600.0
    strength = np.asarray(more.pop("strength", np.ones((1, flow.size))), dtype=float)
    return Profile(time_s=np.cumsum(dt) - dt, flow_m3_h=flow, strength=strength, step_s=float(dt[-1]), **more)


# ------------------------------------------------------------ figures


def test_means_by_time_and_volume():
    """Steps of 1, 2 and 5 h at 6, 3 and 0 m3/h: 12 m3 in 8 h."""
    p = profile([6, 3, 0], hours=[1, 2, 5], strength=[[2.0, 5.0, 9.0]])
    assert_allclose(p.volume_m3, [6, 6, 0])
    assert_allclose(p.mean_m3_h, 1.5, rtol=1e-15)
    assert_allclose(p.duration_s, 8 * 3600)
    assert_allclose(weighted_mean(p.strength[0], p.volume_m3), 3.5)
    assert np.isnan(weighted_mean([1.0], [0.0]))


def test_summary_by_hand():
    """Base -0.02 eq/L times strength: 6 and 3 m3/h carry -240 and -300 eq/h for 1 and 2 h of 8 h."""
    s = summary(profile([6, 3, 0], hours=[1, 2, 5], strength=[[2.0, 5.0, 9.0]]), [-0.02])
    assert_allclose([s.flow_mean_m3_h, s.flow_least_m3_h, s.flow_most_m3_h, s.flow_peak_factor], [1.5, 0, 6, 4])
    assert_allclose([s.flow_p5_m3_h, s.flow_p50_m3_h, s.flow_p95_m3_h], [0, 0, 6])
    assert_allclose([s.base_mean_eq_l, s.base_least_eq_l, s.base_most_eq_l], [-0.07, -0.1, -0.04])
    assert_allclose([s.load_mean_eq_h, s.acid_load_eq_h, s.base_load_eq_h], [-105, 105, 0])
    assert_allclose(s.load_peak_factor, 300 / 105)
    assert np.isnan(s.flow_peak_day_factor)


def test_summary_of_both_signs():
    """Acid and alkaline loads are kept apart: 2 h of -100 and 2 h of +60 eq/h."""
    s = summary(profile([10, 10, 10, 10], base_eq_l=np.array([-0.01, -0.01, 0.006, 0.006])), [np.nan])
    assert_allclose([s.load_mean_eq_h, s.acid_load_eq_h, s.base_load_eq_h], [-20, 50, 30])
    assert_allclose(s.load_peak_factor, 100 / 80)


def test_percentiles_hold_over_their_step():
    """Weights 1, 2, 5 at 6, 3, 0: 62.5 % of the time is 0, 87.5 % at most 3."""
    assert_allclose(percentile([6, 3, 0], [1, 2, 5], [0, 62.5, 62.6, 87.5, 87.6, 100]), [0, 0, 3, 3, 6, 6])


def test_peak_factor_of_a_window():
    """A block of 2 h at 4 in 10 h at 1: the mean is 1.6; a window of 4 h around it has mean 2.5, wherever steps begin."""
    v, dt = np.array([1.0, 4.0, 1.0]), np.array([3.5, 2.0, 4.5]) * 3600
    assert_allclose(peak_factor(v, dt), 4 / 1.6)
    assert_allclose(peak_factor(v, dt, 4 * 3600), 2.5 / 1.6)
    assert_allclose(peak_factor(v, dt, 3600), 4 / 1.6)
    assert_allclose(peak_factor(v, dt, 10 * 3600), 1.0)
    # 3.5 h at 2 before: 4 h that end with the block have mean 3, those that begin with it 2.5; the mean of all is 1.95
    assert_allclose(peak_factor([2.0, 4.0, 1.0], dt, 4 * 3600), 3 / 1.95)
    with pytest.raises(InputError, match=r"the window of a peak factor must be 0 to 36000 s, the length of the profile; found 40000 s"):
        peak_factor(v, dt, 4e4)


def test_split_keeps_everything():
    """Shorter steps, same volume and values."""
    p = profile([6, 3, 0], hours=[1, 2, 5], strength=[[2.0, 5.0, 9.0]], base_eq_l=np.array([1.0, 2.0, 3.0]), t_c=np.array([5.0, 6, 7]))
    s = p.split(1500.0)
    assert s.dt_s.max() <= 1500.0
    assert_allclose(s.duration_s, p.duration_s)
    for mine, its in ((p.flow_m3_h, s.flow_m3_h), (p.strength[0], s.strength[0]), (p.base_eq_l, s.base_eq_l), (p.t_c, s.t_c)):
        assert_allclose((its * s.dt_s).sum(), (mine * p.dt_s).sum(), rtol=1e-12)
    assert_array_equal(p.split(18000.0).time_s, p.time_s)
    with pytest.raises(InputError, match=r"the longest step must be above 0 s; found 0\. Correct it"):
        p.split(0.0)


@pytest.mark.parametrize(("change", "words"), [
    ({"flow_m3_h": np.array([1.0, -2.0])}, r"flow of a profile must be 0 or more; found -2 m3/h at 3600 s"),
    ({"flow_m3_h": np.array([1.0, np.nan])}, r"flow of a profile must be 0 or more; found nan m3/h"),
    ({"flow_m3_h": np.zeros(2)}, "something must flow at some time of a profile; found zero flow throughout"),
    ({"flow_m3_h": np.ones(3)}, r"flow of a profile must have a value per time \(2\); found shape \(3,\)"),
    ({"strength": np.ones((1, 3))}, r"strength of a profile must have a value per time"),
    ({"base_eq_l": np.ones(3)}, r"base of a profile must have a value per time"),
    ({"time_s": np.array([0.0, 0.0])}, r"times of a profile must rise from 0; found \[0\.0, 0\.0\]"),
    ({"time_s": np.array([1.0, 2.0])}, r"times of a profile must rise from 0; found"),
    ({"step_s": 0.0}, "the last step of a profile must be above 0 s; found 0"),
])  # fmt: skip
def test_profiles_that_cannot_be(change, words):
    """Each rule with the value found."""
    good = {"time_s": np.array([0.0, 3600.0]), "flow_m3_h": np.ones(2), "strength": np.ones((1, 2)), "step_s": 3600.0}
    with pytest.raises(InputError, match=words):
        Profile(**(good | change))


# ------------------------------------------------------------ noise


@pytest.mark.parametrize("correlation_h", [0.0, 6.0])
def test_noise_has_mean_one_and_its_spread(correlation_h):
    """Log-normal: mean 1, relative sd as asked, logarithm normal with mean -s^2/2; 6 standard errors of 40,000 draws."""
    cv, n = 0.6, 40_000
    x = noise(Variation(cv, correlation_h), np.full(5, 3600.0), n, 7, 0)
    assert_allclose(x.mean(axis=1), 1.0, atol=6 * cv / np.sqrt(n))
    s2 = np.log(1 + cv**2)
    assert_allclose(np.log(x).mean(axis=1), -s2 / 2, atol=6 * np.sqrt(s2 / n))
    assert_allclose(np.log(x).var(axis=1), s2, rtol=6 * np.sqrt(2 / n))


def test_noise_is_correlated_as_the_continuous_process():
    """Correlation of the logarithm exp(-lag/time), at steps of any length: two short ones are one long one."""
    dt = np.array([1.0, 2.0, 3.0, 1.0]) * 3600
    z = np.log(noise(Variation(0.5, 4.0), dt, 40_000, 3, 1))
    got = np.corrcoef(z)
    lag = np.abs(np.subtract.outer([0, 1, 3, 6], [0, 1, 3, 6]))
    assert_allclose(got, np.exp(-lag / 4.0), atol=6 / 200)
    white = np.corrcoef(np.log(noise(Variation(0.5), dt, 40_000, 3, 1)))
    assert_allclose(white, np.eye(4), atol=6 / 200)


def test_cases_are_seeded_and_do_not_see_each_other():
    """The same seed gives the same; a case does not depend on how many there are; wastes and flow are drawn apart."""
    p = profile(np.ones(50), strength=np.ones((2, 50)))
    a = p.cases(5, 11, flow=Variation(0.3), strength=(Variation(0.3),))
    b = p.cases(3, 11, flow=Variation(0.3), strength=(Variation(0.3),))
    assert_array_equal(a.flow_m3_h[:, :3], b.flow_m3_h)
    assert_array_equal(a.strength[:, :, :3], b.strength)
    assert a.strength.shape == (2, 50, 5)
    assert (p.cases(3, 12, flow=Variation(0.3)).flow_m3_h != b.flow_m3_h).all()
    rows = np.stack([np.log(a.flow_m3_h.ravel()), *np.log(a.strength.reshape(2, -1))])
    assert_allclose(np.corrcoef(rows), np.eye(3), atol=6 / np.sqrt(250))
    plain = p.cases(2, 1)
    assert_array_equal(plain.flow_m3_h, np.ones((50, 2)))
    assert_array_equal(plain.base([0.1, -0.3]), np.full((50, 2), 0.1 - 0.3))


def test_measured_base_takes_the_noise_of_the_first_waste():
    """Base and strength move together."""
    p = profile(np.ones(4), base_eq_l=np.array([-0.1, 0.2, -0.3, 0.4]))
    c = p.cases(3, 2, strength=(Variation(0.5),))
    assert_allclose(c.base([np.nan]), p.base_eq_l[:, None] * c.strength[0], rtol=1e-14)


def test_draw_settings():
    """Ranges of draws and noise."""
    p = profile([1.0, 1.0])
    with pytest.raises(InputError, match=r"the number of cases must be 1 or more; found 0\. Correct it"):
        p.cases(0, 1)
    with pytest.raises(InputError, match=r"the seed must be a whole number of 0 or more; found -1"):
        p.cases(1, -1)
    with pytest.raises(InputError, match=r"noise of strength must be given once or for each of 1 wastes; found 2"):
        p.cases(1, 1, strength=(Variation(), Variation()))
    with pytest.raises(InputError, match=r"relative standard deviation of a noise must be 0 or more; found -0\.1"):
        Variation(-0.1)
    with pytest.raises(InputError, match=r"correlation time of a noise must be 0 or more; found inf h"):
        Variation(0.1, np.inf)
    with pytest.raises(InputError, match=r"a profile of 1 wastes needs the base of each; found 2\. Correct it"):
        p.base([0.1, 0.2])


# ------------------------------------------------------------ statistics


def test_flow_keeps_mean_and_limits():
    """Clipping does not move the mean, at any hour of the daily cycle; 6 standard errors of 20,000 draws."""
    s = Statistics(mean_m3_h=10, least_m3_h=4, most_m3_h=18, flow=Variation(0.5, 3.0), daily_amplitude=0.5, daily_peak_h=9, days=1)
    q = draw(s, 20_000, 5).flow_m3_h
    assert q.min() == 4.0
    assert q.max() == 18.0
    # mean of the cosine over an hour, from its integral
    edge = np.arange(25.0)
    turn = 2 * np.pi / 24
    cosine = np.diff(np.sin(turn * (edge - 9))) / turn
    error = q.std(axis=1) / np.sqrt(20_000)
    assert_allclose((q.mean(axis=1) - 10 * (1 + 0.5 * cosine)) / error, 0.0, atol=6)
    assert_allclose(cosine.sum(), 0, atol=1e-12)


def test_flow_at_a_limit_does_not_vary():
    """Where the cycle touches the least flow, nothing but the least has that mean."""
    s = Statistics(mean_m3_h=10, least_m3_h=10, most_m3_h=30, flow=Variation(0.5), days=1)
    assert_array_equal(draw(s, 3, 1).flow_m3_h, np.full((24, 3), 10.0))


def test_daily_cycle_without_noise():
    """The course of a whole day has the mean flow, whatever the step."""
    for step in (0.25, 1.0, 4.0, 24.0):
        s = Statistics(mean_m3_h=7, daily_amplitude=0.9, daily_peak_h=15, days=2, step_h=step)
        p = profile_of_statistics(s, 0)
        assert_allclose(p.mean_m3_h, 7.0, rtol=1e-12)
        if step == 0.25:
            assert_allclose(p.time_s[np.argmax(p.flow_m3_h)] % 86400, 14.75 * 3600, atol=901)
            assert_allclose(p.flow_m3_h.max(), 7 * 1.9, rtol=1e-3)


def test_dumps_bring_their_volume_and_load():
    """Known first: 2 m3 of a waste five times as strong, every 8 h over half an hour, beside 4 m3/h."""
    s = Statistics(mean_m3_h=4, wastes=2, shares=(0.75, 0.25), days=2, dumps=(
        Dump(size_m3=2, every_h=8, lasts_h=0.5, waste=1, strength=5, first_h=3.25),))
    c = draw(s, 2, 1)
    extra = c.flow_m3_h[:, 0] - 4.0
    assert_allclose(extra.sum(), 6 * 2.0, rtol=1e-12)
    at = np.flatnonzero(extra > 1e-9)
    assert_array_equal(at, [3, 11, 19, 27, 35, 43])
    assert_allclose(c.strength[:, 3, 0], [0.75 * 4 / 6, (0.25 * 4 + 5 * 2) / 6])
    assert_allclose(c.strength[:, 4, 0], [0.75, 0.25])
    late = Statistics(mean_m3_h=4, days=1, dumps=(Dump(size_m3=2, every_h=8, lasts_h=0.5, first_h=7.75),))
    assert_array_equal(np.flatnonzero(draw(late, 1, 1).flow_m3_h[:, 0] > 4.0), [7, 8, 15, 16, 23])  # none before the first


def test_expected_load_with_dumps_at_any_time():
    """Volume and amount add up in every step in expectation: 4 + 2/8 m3/h; 4 x 0.25 + 5 x 2/8 of the waste per hour."""
    s = Statistics(mean_m3_h=4, wastes=2, shares=(0.75, 0.25), days=1, strength=(Variation(0.4, 2.0),), flow=Variation(0.3),
                   dumps=(Dump(size_m3=2, every_h=8, lasts_h=1.5, waste=1, strength=5),))
    n = 20_000
    c = draw(s, n, 9)
    for got, expected in ((c.flow_m3_h, 4.25), (c.flow_m3_h * c.strength[0], 3.0), (c.flow_m3_h * c.strength[1], 2.25)):
        error = got.std(axis=1) / np.sqrt(n)
        assert_allclose((got.mean(axis=1) - expected) / error, 0.0, atol=6)


def test_a_draw_is_a_profile():
    """The first case."""
    s = Statistics(mean_m3_h=4, flow=Variation(0.3, 5.0), strength=(Variation(0.2),), days=3, step_h=0.5)
    p, c = profile_of_statistics(s, 4, wastes=["rinse"]), draw(s, 3, 4)
    assert_array_equal(p.flow_m3_h, c.flow_m3_h[:, 0])
    assert_array_equal(p.strength, c.strength[:, :, 0])
    assert p.time_s.size == 144
    assert p.source == "drawn from statistics of rinse, seed 4"


@pytest.mark.parametrize(("share", "ratio"), [(0.01, 2.0), (0.05, 3.0), (0.01, 1.0)])
def test_sd_from_most(share, ratio):
    """scipy's log-normal of that mean and sd exceeds the most for just that share of the time."""
    cv = sd_from_most(10.0, 10.0 * ratio, share)
    if ratio == 1.0:
        assert cv == 0.0
        return
    s = np.sqrt(np.log(1 + cv**2))
    law = stats.lognorm(s, scale=10 * np.exp(-s * s / 2))
    assert_allclose([law.mean(), law.std(), law.sf(10 * ratio)], [10, 10 * cv, share], rtol=1e-9)


@pytest.mark.parametrize(("more", "words"), [
    ({"least_m3_h": 11.0}, r"flow must rise from least \(0 or more\) to mean to most; found 11, 10, inf m3/h"),
    ({"most_m3_h": 9.0}, "found 0, 10, 9 m3/h"),
    ({"daily_amplitude": 1.2}, r"the daily amplitude must be 0 to 1 times the mean flow; found 1\.2"),
    ({"daily_amplitude": 0.5, "least_m3_h": 8.0}, r"daily cycle must stay within least and most flow, 8 to inf m3/h; found 5 to 15 m3/h\. "
                                                  r"Lower the amplitude to at most 0\.2"),
    ({"days": 0.0}, r"days above 0 and steps within it; found 0 d in steps of 1 h"),
    ({"step_h": 1000.0}, r"found 30 d in steps of 1000 h"),
    ({"dumps": (Dump(size_m3=1, every_h=2, lasts_h=1, waste=1),)}, r"a dump must be of one of 1 wastes, counted from 0; found 1"),
])  # fmt: skip
def test_statistics_that_cannot_be(more, words):
    """Each rule with the value found."""
    with pytest.raises(InputError, match=words):
        Statistics(**({"mean_m3_h": 10.0} | more))


def test_other_refusals():
    """Dumps, shares, and a most flow that no log-normal has."""
    with pytest.raises(InputError, match=r"the size of a dump must be above 0; found 0\. Correct it"):
        Dump(size_m3=0, every_h=2, lasts_h=1)
    with pytest.raises(InputError, match=r"must end before the next begins, 2 h later; found a duration of 3 h"):
        Dump(size_m3=1, every_h=2, lasts_h=3)
    with pytest.raises(InputError, match=r"the strength of a dump must be 0 or more; found -1"):
        Dump(size_m3=1, every_h=2, lasts_h=1, strength=-1)
    with pytest.raises(InputError, match=r"most must be 1 to 15 times the mean; found 200 and 10\. Give the standard deviation"):
        sd_from_most(10, 200)
    with pytest.raises(InputError, match=r"2 wastes need the share of each in the stream; found none\. Give them"):
        draw(Statistics(mean_m3_h=1, wastes=2), 1, 1)
    with pytest.raises(InputError, match=r"shares of 2 wastes must be 0 or more each and up to 1 together; found 0\.8, 0\.4"):
        draw(Statistics(mean_m3_h=1, wastes=2, shares=(0.8, 0.4)), 1, 1)


# ------------------------------------------------------------ from a table


def table(**more):
    """A read table of two rows."""
    return ProfileTable(name="p.csv", rows=np.array([2, 3]), time_s=np.array([0.0, 3600.0]), step_s=3600.0,
                        flow_m3_h=np.array([5.0, 10.0]), **more)


def test_table_with_base_of_each_waste():
    """A base becomes a strength by the base of its waste; it gives back the base measured."""
    p = profile_of_table(table(strength={"rinse": np.array([0.2, 0.4])}, base_eq_l={"pickle": np.array([-0.05, -0.2])}),
                         {"rinse": 0.01, "pickle": -0.1})
    assert_allclose(p.strength, [[0.2, 0.4], [0.5, 2.0]])
    assert_allclose(p.base([0.01, -0.1]), [0.002 - 0.05, 0.004 - 0.2])
    assert p.source == "measured, p.csv"


def test_table_with_shares():
    """A strength of the stream is for all wastes; shares scale it, and a column for every waste with shares too."""
    p = profile_of_table(table(strength={"": np.array([1.0, 3.0])}), {"a": 1.0, "b": 2.0}, [0.5, 0.25])
    assert_allclose(p.strength, [[0.5, 1.5], [0.25, 0.75]])
    p = profile_of_table(table(base_eq_l={"": np.array([-1.0, 3.0])}), {"a": 1.0, "b": 2.0}, [0.5, 0.25])
    assert_allclose(p.strength, [[0.5, 0.5], [0.25, 0.25]])
    assert_allclose(p.base([1.0, 2.0]), [-1.0, 3.0])
    assert_allclose(profile_of_table(table(), {"a": 1.0}).strength, [[1.0, 1.0]])


def test_tables_that_cannot_be():
    """A waste unknown, of the wrong sign, without base; shares missing."""
    with pytest.raises(InputError, match=r"p\.csv: no waste is named 'c'; wastes are a, b\. Correct the header"):
        profile_of_table(table(strength={"c": np.ones(2)}), {"a": 1.0, "b": 2.0}, [0.5, 0.5])
    with pytest.raises(InputError, match=r"p\.csv, row 3: the base of waste 'a' must have the sign of the waste, -0\.1 eq/L; found "
                                         r"\+0\.2 eq/L\. Describe acid and alkaline waters as two wastes"):
        profile_of_table(table(base_eq_l={"a": np.array([-0.1, 0.2])}), {"a": -0.1})
    with pytest.raises(InputError, match=r"waste 'a' has no base or acid of its own, .*Give its strength instead"):
        profile_of_table(table(base_eq_l={"a": np.ones(2)}), {"a": 0.0})
    with pytest.raises(InputError, match=r"2 wastes need the share of each in the stream; found none"):
        profile_of_table(table(strength={"a": np.ones(2)}), {"a": 1.0, "b": 2.0})

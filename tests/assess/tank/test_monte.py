"""Probability of meeting a time rule: the same in any number of processes, and equal to closed forms where there are any."""

import pickle

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.optimize import brentq
from scipy.stats import binom

from aquabuf.assess.tank.control import Controller
from aquabuf.assess.tank.monte import Bands, TimeRule, clopper_pearson, monte_carlo
from aquabuf.assess.tank.simulate import Feeder, Inflow, Probe, Tank
from aquabuf.engine.readout import GRID_PH, Readout
from aquabuf.errors import InputError

HOUR = 3600.0
BARE = Readout(1.0, 1e-14, np.zeros((0, GRID_PH.size)))
ACETATE = Readout(1.0, 1e-14, (1.0 / (1.0 + 10.0 ** (4.756 - GRID_PH)))[None])
RULE = TimeRule(446.0, 60.0, "40 CFR 401.17 (recalled)")
TIMES = np.arange(36) * 600.0


class Waste:
    """Acetic waste whose acid and flow wander; a class, so that it can be sent to another process."""

    def __call__(self, generator):
        """One drawn inflow of six hours."""
        n = TIMES.size
        return Inflow(TIMES, generator.uniform(8.0, 12.0, n), generator.uniform(-0.012, -0.008, n),
                      generator.uniform(0.005, 0.015, (1, n)))


def plant():
    """One tank with noise and scatter."""
    feeder = Feeder(400.0, 1.0, repeatability=0.01)
    return [Tank("one", 3.0, base=feeder, acid=feeder, probe=Probe(10.0, 0.05, 0.0, 30.0),
                 controller=Controller(7.0, 20.0, 600.0))]


def run(inflow=None, cases=7, **changed):
    """Six hours of the plant."""
    settings = {"seed": 3, "until_s": 6 * HOUR, "window": (6.0, 9.0), "rule": RULE, "dt_s": 20.0, "processes": 1,
                "bands": Bands(0.1, 0.2, 0.1)}
    return monte_carlo(ACETATE, plant(), inflow or Waste(), cases=cases, **(settings | changed))


def test_same_answer_in_one_process_and_in_two():
    """To the last bit; the streams of a case follow from seed and case number alone."""
    inflow = Waste()(np.random.default_rng(0))
    one, two = run(inflow), run(inflow, processes=2)
    assert (one.processes, two.processes) == (1, 2)
    for name in ("meets", "outside_min", "longest_min", "lowest_ph", "highest_ph", "strength", "buffer"):
        assert_array_equal(getattr(one, name), getattr(two, name))
    assert np.unique(one.lowest_ph).size == 7


def test_first_cases_are_the_same_in_a_longer_run():
    """Seven cases are the first seven of nine; another seed gives others."""
    seven, nine, other = run(), run(cases=9), run(seed=4)
    assert_array_equal(nine.lowest_ph[:7], seven.lowest_ph)
    assert not np.isin(other.lowest_ph, seven.lowest_ph).any()


def test_each_case_has_its_own_inflow():
    """Strong acid of 1e-3, 1e-4 ... eq/L in four cases, no feed: lowest pH 3, 4, 5, 6; across two processes too."""
    base = -(10.0 ** np.array([[-3.0, -4.0, -5.0, -6.0]]))
    inflow = Inflow([0.0], np.full((1, 4), 10.0), base, np.zeros((0, 1)))
    for processes in (1, 2):
        found = monte_carlo(BARE, [Tank("one", 1.0)], inflow, cases=4, seed=0, until_s=HOUR, window=(6.0, 9.0), rule=RULE,
                            dt_s=60.0, processes=processes)
        assert_allclose(found.lowest_ph, [3.0, 4.0, 5.0, 6.0], rtol=0, atol=0.01)
    with pytest.raises(InputError, match=r"one case or as many as the run \(3\); found 4. Draw one for each case"):
        monte_carlo(BARE, [Tank("one", 1.0)], inflow, cases=3, seed=0, until_s=HOUR, window=(6.0, 9.0), rule=RULE)


def test_what_cannot_be_sent_runs_in_one_process():
    """A function made on the spot cannot be pickled, and the answer is the same."""
    waste = Waste()
    draw = lambda generator: waste(generator)  # noqa: E731
    with pytest.raises((pickle.PicklingError, AttributeError)):
        pickle.dumps(draw)
    alone = run(draw, processes=2)
    assert alone.processes == 1
    assert_array_equal(alone.lowest_ph, run().lowest_ph)


def test_probability_is_that_of_the_strength():
    """Strong base at a fixed feed meets the rule where the acid, log-normal about it, leaves pH 6 to 9: the share of
    draws with a base between 1e-5 and -1e-6 eq/L, counted from the strengths themselves."""
    tank = Tank("one", 1.0, base=Feeder(1e3, np.inf), fixed_eq_h=0.1, start_base_eq_l=0.0)
    found = monte_carlo(BARE, [tank], Inflow([0.0], [10.0], [-1e-5], np.zeros((0, 1))), cases=150, seed=1,
                        until_s=20 * HOUR, window=(6.0, 9.0), rule=TimeRule(446.0, 30.0, "test"),
                        bands=Bands(strength_share=0.4), dt_s=60.0, processes=1)
    left = 1e-5 * (1.0 - found.strength)
    expected = (left > -(1e-6 - 1e-8)) & (left < 1e-5 - 1e-9)
    assert_array_equal(found.meets, expected)
    assert 0.2 < found.probability < 0.9
    assert_allclose(found.probability, expected.mean(), rtol=1e-12)


def test_factors_have_mean_one_and_their_share():
    """Log-normal factors: mean 1, relative standard deviation as asked."""
    tank = Tank("one", 1.0)
    found = monte_carlo(ACETATE, [tank], Inflow([0.0], [1.0], [0.01], [[0.01]]), cases=4000, seed=1, until_s=60.0,
                        window=(6.0, 9.0), rule=RULE, bands=Bands(0.3, 0.2), dt_s=60.0, processes=1)
    assert_allclose([found.strength.mean(), found.strength.std()], [1.0, 0.3], rtol=0, atol=0.02)
    assert_allclose([found.buffer.mean(), found.buffer.std()], [1.0, 0.2], rtol=0, atol=0.02)
    assert abs(np.corrcoef(found.strength, found.buffer)[0, 1]) < 0.05


def test_strength_and_buffer_are_in_the_water():
    """0.005 s of base in 0.01 s b of acetate: pH by scipy's root of the balance, case by case."""
    found = monte_carlo(ACETATE, [Tank("one", 1.0)], Inflow([0.0], [1.0], [0.005], [[0.01]]), cases=20, seed=5, until_s=60.0,
                        window=(4.0, 9.0), rule=RULE, bands=Bands(0.3, 0.1), dt_s=60.0, processes=1)
    expected = [brentq(lambda x, s=s, b=b: 0.01 * s * b / (1.0 + 10.0 ** (4.756 - x)) + 10.0 ** (x - 14) - 10.0**-x
                       - 0.005 * s, 1.0, 13.0) for s, b in zip(found.strength, found.buffer, strict=True)]
    assert_allclose(found.lowest_ph, expected, rtol=0, atol=1e-4)


def test_probe_offset_moves_the_tank():
    """A probe that reads d too high leaves the tank d below its set point, so lowest pH spreads like the offset."""
    feeder = Feeder(400.0, 1.0)
    still = Tank("one", 3.0, base=feeder, acid=feeder, controller=Controller(7.0, 5.0, 1200.0))
    found = monte_carlo(ACETATE, [still], Inflow([0.0], [10.0], [-0.01], [[0.01]]), cases=200, seed=2, until_s=6 * HOUR,
                        window=(6.0, 9.0), rule=RULE, bands=Bands(offset_ph=0.2), dt_s=20.0, processes=1)
    spread = np.where(found.lowest_ph < 7.0 - 1e-3, found.lowest_ph, found.highest_ph) - 7.0
    assert_allclose(spread.std(), 0.2, rtol=0.1)


def test_rule_is_scaled_and_says_so():
    """446 min of 31 days (44,640 min) are 446/31 in one day: at most 14.4."""
    assert_allclose(RULE.allowed_min(44640.0), 446.0, rtol=1e-12)
    assert_allclose(RULE.allowed_min(1440.0), 446.0 / 31.0, rtol=1e-12)
    assert RULE.words(1440.0) == ("at most 446 min outside per month of 31 days, scaled to 14.4 min in the 1 days simulated, "
                                  "and at most 60 min in one excursion (40 CFR 401.17 (recalled))")
    found = run()
    assert_allclose(found.allowed_min, 446.0 * 6.0 / 744.0, rtol=1e-12)
    assert_array_equal(found.meets, (found.outside_min <= found.allowed_min) & (found.longest_min <= 60.0))


def test_each_excursion_counts():
    """Enough minutes in all, but one excursion of 90 min: the rule is broken."""
    inflow = Inflow([0.0, 10 * HOUR, 11.5 * HOUR], [10.0] * 3, [0.0, -1e-3, 0.0], np.zeros((0, 3)))
    results = [monte_carlo(BARE, [Tank("one", 1e-3)], inflow, cases=1, seed=0, until_s=24 * HOUR, window=(6.0, 9.0),
                           rule=TimeRule(1e4, each, "test"), dt_s=10.0, processes=1).meets[0] for each in (60.0, 95.0)]
    assert results == [False, True]


@pytest.mark.parametrize(("successes", "trials"), [(0, 20), (3, 20), (20, 20), (190, 200)])
def test_interval_is_exact(successes, trials):
    """Clopper & Pearson by definition: at each bound the binomial tail beyond the count is 2.5 %."""
    low, high = clopper_pearson(successes, trials)
    assert low <= successes / trials <= high
    assert_allclose(0.025 if successes == 0 else binom.sf(successes - 1, trials, low), 0.025, rtol=1e-6)
    assert_allclose(0.025 if successes == trials else binom.cdf(successes, trials, high), 0.025, rtol=1e-6)


def test_quantiles_look_at_the_bad_side():
    """Of 7 cases the last is the worst: most minutes outside, lowest and highest pH."""
    found = run()
    worst = {name: float(v[-1]) for name, v in found.quantiles().items()}
    assert worst == {"outside_min": found.outside_min.max(), "longest_min": found.longest_min.max(),
                     "lowest_ph": found.lowest_ph.min(), "highest_ph": found.highest_ph.max()}


def other_times(generator):
    """An inflow whose times are drawn too, which cannot stand beside others."""
    return Inflow([0.0, generator.uniform(100.0, 200.0)], [1.0, 1.0], [0.0, 0.0], [[0.0, 0.0]])


@pytest.mark.parametrize(("make", "message"), [
    (lambda: TimeRule(-1.0, 60.0, ""), "must not be negative; found -1.0 and 60.0. Take them from the permit"),
    (lambda: Bands(buffer_share=-0.1), "bands must not be negative; found .*-0.1.*relative standard deviations"),
    (lambda: clopper_pearson(3, 2), "found 3 of 2. Correct the count"),
    (lambda: run(cases=0), "at least 1 case; found 0. Ask for some hundreds"),
    (lambda: run(other_times), "one case each and share their times; found 1 cases and 2 times beside 2. Draw them"),
])
def test_messages(make, message):
    """Each says rule, value and remedy."""
    with pytest.raises(InputError, match=message):
        make()

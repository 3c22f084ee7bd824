"""The 90 % intervals hold the truth as often as they say, in seeded titrations with every error of a bench.

Curves are made without aquabuf's chemistry (`simulated.py`); only those of sea water use its forward model.
"""

from dataclasses import replace

import numpy as np
import pytest
from simulated import ERRORS, Bench

from aquabuf.assess.titration.choose import choose
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.solve import solve_titrations

COUNT = 1500
TO_90_PERCENT = 1.6449
WATERS = {"dilute": (-1e-4, 4e-4), "ordinary": (4e-4, 2e-3), "hard": (2e-3, 8e-3)}  # alkalinity, eq/L
INSIDE = (0.85, 0.95)


@pytest.fixture(scope="module")
def bench():
    """Benches by kind of water and temperature, solved once."""
    kept = {}

    def of(water, t_c=25.0, **more):
        key = (water, t_c, *sorted(more.items()))
        if key not in kept:
            made = Bench(COUNT, *WATERS[water], seed=7, t_c=t_c, **more)
            kept[key] = made, solve_titrations(made.titrations(), TitrationOptions())
        return kept[key]
    return of


def coverage(value, u, truth):
    """Share of the intervals that hold the truth, among those that there are."""
    known = np.isfinite(value) & np.isfinite(truth)
    assert known.mean() > 0.5, "too few results to tell"
    return float(np.mean(np.abs(value - truth)[known] < TO_90_PERCENT * u[known]))


METHODS = [("gran", "dilute"), ("gran", "ordinary"), ("gran", "hard"), ("fit", "dilute"), ("fit", "ordinary"),
           ("fit", "hard"), ("inflection", "ordinary"), ("inflection", "hard"), ("two_point", "dilute")]


@pytest.mark.parametrize("t_c", [10.0, 25.0])
@pytest.mark.parametrize(("method", "water"), METHODS)
def test_alkalinity_interval(bench, method, water, t_c):
    """Each method inside its range, against the true alkalinity."""
    made, solved = bench(water, t_c)
    e = solved.estimates[method]
    assert INSIDE[0] <= coverage(e.value, e.u, made.alkalinity) <= INSIDE[1]


@pytest.mark.parametrize("water", WATERS)
@pytest.mark.parametrize("end", [4.9, 4.6, 4.5, 4.3])
def test_fixed_end_point_interval(bench, water, end):
    """A fixed end point against the acid that truly brings the water there: its own definition."""
    made, solved = bench(water)
    e = solved.estimates[f"fixed_{end:g}"]
    assert INSIDE[0] <= coverage(e.value, e.u, made.acid_to(end)) <= INSIDE[1]


@pytest.mark.parametrize("water", ["dilute", "ordinary"])
def test_swept_out_interval(bench, water):
    """Acid in excess in fresh water without CO2."""
    made, solved = bench(water, purged=True)
    e = solved.estimates["acid_excess"]
    assert INSIDE[0] <= coverage(e.value, e.u, made.alkalinity) <= INSIDE[1]


@pytest.mark.parametrize("water", WATERS)
def test_recommended_interval(bench, water):
    """What is recommended is as good as it says."""
    made, solved = bench(water)
    chosen = choose(solved)
    assert INSIDE[0] <= coverage(chosen.value, chosen.u, made.alkalinity) <= INSIDE[1]


@pytest.mark.parametrize("water", WATERS)
def test_carbon_and_offset_interval(bench, water):
    """The other two answers of the fit: carbon, and an offset of known spread."""
    made, solved = bench(water)
    assert 0.84 <= coverage(solved.fit.fit.carbon, solved.fit.u_carbon, made.carbon) <= 0.96
    spread = np.nanstd(solved.fit.fit.offset_ph)
    assert 0.9 * ERRORS["ph_all"] <= spread <= 1.3 * ERRORS["ph_all"]


@pytest.mark.parametrize("water", WATERS)
def test_potentials_without_standards(bench, water):
    """Electrodes whose slope is off by 1 % (standard deviation) and whose zero nobody knows."""
    made, _ = bench(water)
    slope = 59.16 * (1.0 + 0.01 * np.random.default_rng(5).standard_normal((COUNT, 1)))
    read = replace(made.titrations(), reading=(415.0 - slope * made.ph).ravel(), read_as=np.full(COUNT, "potential", dtype=object))
    solved = solve_titrations(read, TitrationOptions())
    chosen = choose(solved)
    for e in (solved.estimates["gran"], solved.estimates["fit"], chosen):
        assert INSIDE[0] <= coverage(e.value, e.u, made.alkalinity) <= INSIDE[1]


def test_an_interval_of_half_the_width_fails(bench):
    """The check can fail: with half the uncertainty the truth is missed far more often."""
    made, solved = bench("ordinary")
    e = solved.estimates["fit"]
    assert coverage(e.value, 0.5 * e.u, made.alkalinity) < 0.7

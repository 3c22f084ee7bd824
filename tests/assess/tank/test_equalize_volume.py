"""Volume against what is left of the swings, and the choice among volumes."""

import numpy as np
import pytest
from even_steps import profile
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.tank.equalize import cumulative_volume
from aquabuf.assess.tank.equalize_volume import choose_volume, run_tank, trial_volumes, volume_rules, volume_table
from aquabuf.assess.tank.profile import Variation
from aquabuf.assess.tank.profile_draw import Statistics, draw
from aquabuf.errors import InputError

STREAM = Statistics(mean_m3_h=10.0, strength=(Variation(0.5, 0.0),), days=40, step_h=1.0)
BASES = [-0.02]


@pytest.fixture(scope="module")
def cases():
    """Twenty months of loads without memory at a steady flow."""
    return draw(STREAM, 20, 8)


def test_table_follows_the_closed_form(cases):
    """What leaves in a step is c_in + (c_0 - c_in) m, m = (1 - e^-r)/r, r = dt/tau; c_0 has tanh(r/2) of the variance."""
    table = volume_table(cases, BASES, [0.0, 5.0, 20.0, 80.0])
    r = 10.0 / np.array([5.0, 20.0, 80.0])
    m = -np.expm1(-r) / r
    expected = (1 - m) ** 2 + m**2 * np.tanh(r / 2)  # c_0 does not know the c_in of its step
    assert table["sd_share"][0] == 1.0
    assert_allclose(table["sd_share"][1:] ** 2, expected, rtol=0.06)
    assert_allclose(table["hold_h"], [0, 0.5, 2, 8])
    assert (np.diff(table["sd_eq_l"]) < 0).all()
    assert (np.diff(table["peak_eq_l"]) < 0).all()
    assert_allclose(table["sd_eq_l"][0], 0.02 * 0.5, rtol=0.05)
    assert_allclose(table["flow_peak_factor"], 1.0, rtol=1e-12)
    assert (table["overflow_share"] == 0).all()


def test_table_has_ph_and_savings():
    """pH is asked of what flows out; acid and alkaline hours save nothing without a tank and nearly all in a large one."""
    n = 240
    p = profile(np.full(n, 10.0), base=np.tile([-0.02, 0.02], n // 2)).cases(1, 0)
    table = volume_table(p, [np.nan], [0.0, 2000.0], ph=lambda base, amounts: 7.0 + 100.0 * base * amounts[0])
    assert_allclose(table[["ph_low", "ph_high", "ph_sd"]].iloc[0], [5, 9, 2])
    assert_allclose(table["ph_sd"], 100 * table["sd_eq_l"], rtol=1e-12)
    assert_allclose(table["saved_eq_d"][0], 0, atol=1e-9)
    assert_allclose(table["saved_eq_d"][1], 10 * 24 * 20, rtol=0.01)
    aimed = volume_table(p, [np.nan], [2000.0], aim=lambda amounts: 0.03 * amounts[0])
    assert_allclose(aimed["saved_eq_d"], 0, atol=1e-6)


def test_peak_counts_both_sides():
    """One hour in four at -0.03 and three at 0.01 eq/L: the mean is 0, the farthest 0.03."""
    p = profile(np.full(40, 2.0), base=np.tile([-0.03, 0.01, 0.01, 0.01], 10)).cases(1, 0)
    table = volume_table(p, [np.nan], [0.0])
    assert_allclose(table[["peak_eq_l", "low_eq_l", "high_eq_l"]].iloc[0], [0.03, -0.03, 0.01])
    assert_allclose(table["sd_eq_l"], np.sqrt((0.03**2 + 3 * 0.01**2) / 4))


def test_volume_for_flow_is_added():
    """With the volume of the cumulative curve above it, the draw is steady; content is mixed in both together."""
    p = profile(np.tile([0.0] * 12 + [20.0] * 12, 5), base=np.tile([-0.02] * 3 + [0.01] * 3, 20))
    flow_volume = cumulative_volume(p).volume_m3
    assert_allclose(flow_volume, 120.0)
    table = volume_table(p.cases(1, 0), [np.nan], [0.0, 30.0], flow_volume_m3=flow_volume)
    assert_allclose(table["total_m3"], [120, 150])
    assert table["flow_peak_factor"][1] < 2.0
    tank = run_tank(p.cases(1, 0), p.base([0.0])[:, None], [30.0], flow_volume_m3=flow_volume)
    assert_allclose(tank.level_m3.min(), 30.0)
    assert_allclose(tank.level_m3.max(), 150.0)
    plain = run_tank(p.cases(1, 0), p.base([0.0])[:, None], 30.0)
    assert_allclose(plain.level_m3, 30.0)
    assert_array_equal(plain.out_m3_h[:, 0, 0], p.flow_m3_h)


@pytest.mark.parametrize("flow_volume", [0.0, 100.0])
@pytest.mark.parametrize("volume", [0.0, 60.0, 5000.0])
def test_the_course_leads_back_to_its_start(volume, flow_volume):
    """What is in the tank at the end is what was in it at the start, however slow it is, so that no store is counted."""
    p = profile(np.tile([5.0, 15.0, 12.0, 8.0], 60), base=np.tile([-0.02] * 12 + [0.03] * 12, 10)).cases(2, 0)
    tank = run_tank(p, p.base([0.0]), volume, flow_volume_m3=flow_volume)
    assert_allclose(tank.base_eq_l[0], tank.base_eq_l[-1], atol=1e-12)
    assert_allclose(tank.amounts[:, 0], 1.0, rtol=1e-12)
    assert_allclose(tank.level_m3[0], tank.level_m3[-1], atol=1e-9)


def test_choice_by_each_rule(cases):
    """The least that meets the limit; the knee by hand."""
    table = volume_table(cases, BASES, trial_volumes(10.0))
    sd = table["sd_eq_l"].to_numpy()
    got = choose_volume(table, "sd", 0.5 * (sd[3] + sd[4]))
    assert (got.row, got.volume_m3, got.total_m3) == (4, 30.0, 30.0)
    peak = table["peak_eq_l"].to_numpy()
    assert choose_volume(table, "peak", peak[6]).row == 6
    assert choose_volume(table, "hours", 6.0).volume_m3 == 60.0
    knee = choose_volume(table)
    x, y = table["volume_m3"] / 240.0, (sd - sd[-1]) / (sd[0] - sd[-1])
    line = 1.0 - x
    assert knee.row == int(np.argmax(line - y))
    assert 0 < knee.row < len(table) - 1
    assert knee.rule == "knee"
    assert "farthest below the straight line" in knee.words
    assert "eq/L" in got.words
    assert all(row["source"] and row["mark"] for row in volume_rules().values())


def test_knee_of_a_known_curve():
    """sd = 1 at 0 and 0.1 from 4 m3 on: the corner is the knee. Nothing gained: no tank."""
    table = volume_table(profile(np.full(48, 1.0), base=np.ones(48)).cases(1, 0), [0.0], [0.0, 1.0, 2.0, 4.0, 8.0, 16.0])
    assert choose_volume(table).volume_m3 == 0.0
    table["sd_eq_l"] = [1.0, 0.8, 0.6, 0.1, 0.1, 0.1]
    assert choose_volume(table).volume_m3 == 4.0


def test_choices_that_cannot_be_made(cases):
    """Rules, limits and tables."""
    table = volume_table(cases, BASES, [0.0, 10.0])
    with pytest.raises(InputError, match=r"the rule for a volume must be one of knee, sd, peak, hours; found 'best'"):
        choose_volume(table, "best")
    with pytest.raises(InputError, match=r"the rule 'sd' needs a limit in eq/L; found none\. Correct it"):
        choose_volume(table, "sd")
    with pytest.raises(InputError, match=r"the rule 'knee' needs no limit; found 1\. Correct it"):
        choose_volume(table, "knee", 1.0)
    with pytest.raises(InputError, match=r"a knee needs at least 3 volumes; found 2\. Try more"):
        choose_volume(table)
    with pytest.raises(InputError, match=r"no volume tried meets the rule 'hours' at 9 h; the largest, 10 m3, gives 1\. Try larger"):
        choose_volume(table, "hours", 9.0)
    with pytest.raises(InputError, match=r"volumes to be tried must rise from 0 or more; found \[5\.0, 1\.0\] m3"):
        volume_table(cases, BASES, [5.0, 1.0])

"""Equalization against published worked values, closed forms, a general integrator and conservation."""

import numpy as np
import pytest
from even_steps import HOUR, profile, run
from numpy.testing import assert_allclose, assert_array_equal
from scipy.integrate import solve_ivp

from aquabuf.assess.tank.equalize import Draw, alternating_tank, cumulative_volume, largest_day_m3, mixing_saving
from aquabuf.errors import InputError

# ------------------------------------------------------------ cumulative flow

SURPLUS = [45.5, 57.0, 56.5, 48.0, 48.0, 45.5]  # m3/h in 2-h steps on a mean of 37.7
LOW = [10.0, 30.0, 35.0, 32.0, 26.9, 18.0]      # ours: the rest of the day brings it to the mean, 6 x 37.7 - 74.3 = 151.9


@pytest.mark.parametrize("shift", range(12))
def test_cumulative_flow_of_the_worked_example(shift):
    """Sincero & Sincero 2003, Example 3.8 (printed): 148.6 m3; the same wherever the day begins."""
    rest = list(np.array(LOW) * 151.9 / sum(LOW))
    assert max(rest) < 37.7  # so that all surplus stands together
    got = cumulative_volume(profile(np.roll(rest + SURPLUS, shift), 2.0))
    assert_allclose(got.draw_m3_h, 37.7, rtol=1e-12)
    assert_allclose(got.volume_m3, 148.6, atol=0.05)


def test_the_tank_holds_with_its_start_level():
    """Started at the level found, it touches full and empty and neither overflows nor runs short."""
    flow = np.array([3.0, 9.0, 1.0, 0.0, 7.0, 4.0])
    got = cumulative_volume(profile(flow))
    tank = run(flow, np.ones(6), Draw(got.draw_m3_h), volume_m3=got.volume_m3, start_m3=got.start_m3)
    assert_allclose([tank.level_m3.min(), tank.level_m3.max(), tank.overflow_m3, tank.short_m3], [0, got.volume_m3, 0, 0], atol=1e-12)
    assert_allclose(tank.level_m3[int(got.high_s / HOUR)], got.volume_m3, atol=1e-12)
    assert_allclose(tank.level_m3[int(got.low_s / HOUR)], 0, atol=1e-12)


def test_folding_to_a_mean_day():
    """Two days that differ by a constant have the swing of either; what lasts less than a day is left out."""
    day = np.tile([1.0, 5.0, 3.0, 2.0], 6)
    both = np.concatenate([day, day + 4.0, [100.0] * 5])
    got = cumulative_volume(profile(both), repeat_s=86400.0)
    assert_allclose(got.volume_m3, cumulative_volume(profile(day)).volume_m3, rtol=1e-12)
    assert_allclose(got.draw_m3_h, 2.75 + 2.0, rtol=1e-12)
    assert got.volume_m3 < cumulative_volume(profile(both)).volume_m3
    with pytest.raises(InputError, match=r"at least one cycle of 86400 s long; found 43200 s\. Give a longer profile"):
        cumulative_volume(profile(np.ones(12)), repeat_s=86400.0)


def test_alternating_tanks():
    """Environmental Engineers' Handbook (printed): 110 % of the largest day, 624.53 m3 as it implies, gives 686.98 m3."""
    assert_allclose(alternating_tank(624.53), 686.98, atol=0.01)
    assert_allclose(alternating_tank(100.0, 1.0, 12.0), 50.0)
    with pytest.raises(InputError, match=r"a factor of 1 or more and a filling time above 0 h; found 100, 0\.9, 24\. Correct them"):
        alternating_tank(100.0, 0.9)


def test_largest_day_begins_at_any_time():
    """12 h at 3 m3/h across midnight in two days at 1: 48 m3."""
    flow = np.ones(48)
    flow[18:30] = 3.0
    assert_allclose(largest_day_m3(profile(flow)), 12 * 3 + 12, rtol=1e-12)
    assert_allclose(largest_day_m3(profile(np.full(24, 2.0))), 48.0, rtol=1e-12)
    with pytest.raises(InputError, match=r"needs a profile of a day or more; found 12 h\. Give a longer one"):
        largest_day_m3(profile(np.ones(12)))


# ------------------------------------------------------------ the balance of base

FLOW, BASE = [20.0, 40.0, 30.0], [0.020, -0.010, 0.030]  # check of the facts, section 6.1: V0 50 m3, C0 5 meq/L, draw 30 m3/h


def test_worked_example_of_signed_acidity():
    """Exact 10.400, -1.644, 12.633 meq/L; mixing an hour's inflow and then withdrawing would give 9.286, -0.357, 11.027."""
    got = run(FLOW, BASE, Draw(30.0), volume_m3=60.0, start_m3=50.0, start_base_eq_l=0.005)
    assert_allclose(got.level_m3, [50, 40, 50, 50], rtol=1e-12)
    assert_allclose(1e3 * got.base_eq_l[1:], [10.400, -1.644, 12.633], atol=5e-4)
    v, c, short = 50.0, 5.0, []
    for f, x in zip(FLOW, (20.0, -10.0, 30.0), strict=True):
        c = (v * c + f * x) / (v + f)
        v += f - 30.0
        short.append(c)
    assert_allclose(short, [9.286, -0.357, 11.027], atol=5e-4)
    assert np.abs(1e3 * got.base_eq_l[1:] - short).min() > 1.1
    # the other shortcut, that the level stands at its start: exp(-F t / V)
    still, c = [], 5.0
    for f, x in zip(FLOW, (20.0, -10.0, 30.0), strict=True):
        c = x + (c - x) * np.exp(-f / 50.0)
        still.append(c)
    assert np.abs(1e3 * got.base_eq_l[1:] - still).min() > 0.1


def reference(flow, base, dt_h, start, content, out):
    """The same by a general integrator, step by step: level, base, and volume and base let out. out(level, inflow) -> m3/h."""
    y = np.array([start, start * content, 0.0, 0.0])
    rows = [y]
    for f, x in zip(flow, base, strict=True):
        def slope(t, y, f=f, x=x):
            d = out(y[0], f)
            return [f - d, f * x - d * y[1] / y[0], d, d * y[1] / y[0]]
        y = solve_ivp(slope, (0.0, dt_h), y, method="DOP853", rtol=1e-12, atol=1e-13).y[:, -1]
        rows.append(y)
    rows = np.array(rows)
    out = np.diff(rows[:, 2])
    mean = np.diff(rows[:, 3]) / np.where(out > 0.0, out, 1.0)
    return rows[:, 0], rows[:, 1] / rows[:, 0], out / dt_h, mean


CASES = {
    "constant draw": (Draw(30.0), {"volume_m3": 1e3}, lambda v, f: 30.0),
    "no draw": (Draw(), {"volume_m3": 1e3}, lambda v, f: 0.0),
    "level": (Draw(per_h=0.7), {"volume_m3": 1e3}, lambda v, f: 0.7 * v),
    "level above a dead volume": (Draw(per_h=2.0), {"volume_m3": 1e3, "least_m3": 25.0}, lambda v, f: 2.0 * (v - 25.0)),
    "overflow": (Draw(0.0), {"volume_m3": 50.0}, lambda v, f: f),
}  # fmt: skip


@pytest.mark.parametrize("case", CASES)
def test_exact_between_steps(case):
    """Level, content and what is let out agree with a general integrator to its own accuracy."""
    by, more, out = CASES[case]
    flow, base = [20.0, 40.0, 0.0, 30.0, 5.0], [0.020, -0.010, 0.5, 0.030, -0.2]
    got = run(flow, base, by, 0.4, start_m3=50.0, start_base_eq_l=0.005, **more)
    level, content, drawn, drawn_c = reference(flow, base, 0.4, 50.0, 0.005, out)
    assert_allclose(got.level_m3, level, rtol=1e-10)
    assert_allclose(got.base_eq_l, content, rtol=1e-9, atol=1e-12)
    assert_allclose(got.out_m3_h, drawn, rtol=1e-9, atol=1e-9)
    some = drawn > 0
    assert_allclose(got.out_base_eq_l[some], drawn_c[some], rtol=1e-8, atol=1e-11)
    assert_allclose(got.short_m3, 0, atol=1e-12)


def test_power_law_and_exponential():
    """Closed forms: (V/V0)^(-F/(F-D)) while the level moves, exp(-F t/V) where it stands, and the one tends to the other."""
    got = run([20.0], [0.0], Draw(30.0), start_m3=50.0, start_base_eq_l=1.0, volume_m3=50.0)
    assert_allclose(got.base_eq_l[1], (40 / 50) ** 2, rtol=1e-14)
    for off in (0.0, 1e-12, 1e-7, -1e-7):
        got = run([30.0 + off], [0.0], Draw(30.0), start_m3=50.0, start_base_eq_l=1.0, volume_m3=60.0)
        assert_allclose(got.base_eq_l[1], np.exp(-30 / 50), rtol=1e-8)
        assert_allclose(got.out_base_eq_l[0], (1 - np.exp(-0.6)) / 0.6, rtol=1e-8)


def test_bounds_are_met_within_a_step():
    """It fills 10 m3 in 1 h and then overflows for 1 h; it empties in 1 h and then passes on what comes."""
    full = run([40.0], [0.0], Draw(30.0), 2.0, start_m3=50.0, start_base_eq_l=1.0, volume_m3=60.0)
    assert_allclose(full.level_m3, [50, 60])
    assert_allclose(full.base_eq_l[1], (60 / 50) ** -4 * np.exp(-40 / 60), rtol=1e-12)
    assert_allclose([full.overflow_m3, full.short_m3, full.out_m3_h[0]], [10, 0, 35], atol=1e-12)
    empty = run([10.0], [7.0], Draw(30.0), 2.0, start_m3=20.0, start_base_eq_l=1.0, volume_m3=60.0)
    assert_allclose(empty.level_m3, [20, 0], atol=1e-12)
    assert_allclose([empty.base_eq_l[1], empty.overflow_m3, empty.short_m3], [7, 0, 20])
    assert_allclose(empty.out_base_eq_l[0], (20 * 1 + 20 * 7) / 40)
    least = run([10.0], [0.0], Draw(30.0), 2.0, start_m3=25.0, least_m3=5.0, start_base_eq_l=1.0, volume_m3=60.0)
    assert_allclose(least.base_eq_l[1], (5 / 25) ** 0.5 * np.exp(-10 / 5), rtol=1e-12)
    # level-proportional: nears 40/0.5 = 80 m3 and meets 60 at exp(-0.5 t) = 20/30
    level = run([40.0], [0.0], Draw(per_h=0.5), 2.0, start_m3=50.0, start_base_eq_l=1.0, volume_m3=60.0)
    moving = np.log(30 / 20) / 0.5
    assert_allclose(level.base_eq_l[1], (50 / 60) * np.exp(-0.5 * moving) * np.exp(-40 / 60 * (2 - moving)), rtol=1e-12)
    assert_allclose(level.overflow_m3, (40 - 30) * (2 - moving), rtol=1e-12)


def test_an_empty_tank():
    """No tank lets out what comes; a tank that is filled from empty has what comes; nothing in and nothing out is kept."""
    none = run([5.0, 0.0, 7.0], [1.0, 2.0, 3.0], Draw(6.0), volume_m3=0.0)
    assert_array_equal(none.out_base_eq_l[[0, 2]], [1.0, 3.0])
    assert_array_equal(none.out_m3_h, [5.0, 0.0, 7.0])
    fills = run([5.0, 5.0], [1.0, 3.0], Draw(0.0), volume_m3=100.0, start_m3=0.0)
    assert_allclose(fills.base_eq_l[1:], [1.0, 2.0])
    for by in (Draw(0.0), Draw(per_h=0.5), Draw(per_h=100.0), Draw(per_h=0.0)):
        rest = run([0.0, 0.0], [9.0, 9.0], by, start_m3=5.0, volume_m3=5.0, start_base_eq_l=2.0)
        assert_array_equal(rest.base_eq_l, [2.0, 2.0, 2.0])
    assert run([0.0], [1.0], Draw(per_h=1.0), volume_m3=9.0, start_m3=0.0).level_m3[1] == 0.0


@pytest.mark.parametrize("by", [Draw(8.0), Draw(12.0), Draw(per_h=0.3), Draw(0.0)])
def test_what_comes_leaves_or_stays(by):
    """Water, base and carriers to 1e-12 over a month with every bound met, summed here."""
    rng = np.random.default_rng(3)
    n, cases = 720, 4
    flow = rng.gamma(1.5, 7.0, (n, cases)) * (rng.random((n, cases)) > 0.2)
    base, amounts = rng.normal(0.0, 0.1, (n, cases)), rng.random((2, n, cases))
    got = run(flow, base, by, amounts=amounts, volume_m3=40.0, start_m3=15.0, least_m3=2.0)
    dt = 1.0
    assert_allclose(flow.sum(axis=0) * dt, got.out_m3_h.sum(axis=0) * dt + got.level_m3[-1] - 15.0, rtol=1e-12)
    for inside, content, out in ((base, got.base_eq_l, got.out_base_eq_l), *zip(amounts, got.amounts, got.out_amounts, strict=True)):
        stored = got.level_m3[-1] * content[-1] - 15.0 * content[0]
        came = (flow * inside).sum(axis=0)
        assert_allclose((came - (got.out_m3_h * out).sum(axis=0) - stored) / (flow * np.abs(inside)).sum(axis=0), 0, atol=1e-12)
    assert np.abs(got.balance_error).max() < 1e-12
    assert got.balance_error.shape == (3, cases)
    assert 2.0 <= got.level_m3.min() <= got.level_m3.max() <= 40.0


def test_buffers_mix_as_base_does():
    """A carrier with the content of the base follows it; one that is the same throughout stays so."""
    got = run(FLOW, BASE, Draw(30.0), amounts=np.array([BASE, [2.0, 2.0, 2.0]]), volume_m3=60.0, start_m3=50.0,
              start_base_eq_l=0.005, start_amounts=[0.005, 2.0])
    assert_allclose(got.amounts[0], got.base_eq_l, rtol=1e-14)
    assert_allclose(got.out_amounts, [got.out_base_eq_l, [2, 2, 2]], rtol=1e-14)


def test_cases_do_not_see_each_other():
    """Volumes and courses side by side give what each gives alone; nan stays in its case."""
    rng = np.random.default_rng(1)
    flow, base = rng.random((30, 1, 3)) * 9, rng.normal(size=(30, 1, 3))
    base[5, 0, 1] = np.nan
    volumes = np.array([[5.0], [50.0]])
    both = run(flow, base, Draw(4.0), volume_m3=volumes, start_m3=volumes / 2, start_base_eq_l=0.0)
    assert both.base_eq_l.shape == (31, 2, 3)
    for m in range(2):
        for k in range(3):
            alone = run(flow[:, 0, k], base[:, 0, k], Draw(4.0), volume_m3=volumes[m, 0], start_m3=volumes[m, 0] / 2, start_base_eq_l=0.0)
            assert_allclose(both.base_eq_l[:, m, k], alone.base_eq_l, rtol=1e-13)
            assert_allclose(both.out_m3_h[:, m, k], alone.out_m3_h, rtol=1e-13)
    assert np.isfinite(both.base_eq_l[:, :, [0, 2]]).all()
    assert np.isnan(both.base_eq_l[6:, :, 1]).all()


def test_refusals():
    """Levels, shapes and draws."""
    with pytest.raises(InputError, match=r"must rise from 0 to least, start and largest; found least 0, start 9 to 9, largest 5 m3"):
        run(FLOW, BASE, Draw(1.0), volume_m3=5.0, start_m3=9.0)
    with pytest.raises(InputError, match=r"a value of 0 or more per time \(3\) for flow; found shapes \(3,\), \(2,\), \(0, 3\)"):
        run(FLOW, BASE[:2], Draw(1.0), volume_m3=5.0)
    with pytest.raises(InputError, match=r"a value of 0 or more per time"):
        run([-1.0, 1.0], [0.0, 0.0], Draw(1.0), volume_m3=5.0)
    with pytest.raises(InputError, match=r"the draw must be 0 or more; found -1\. Correct it"):
        Draw(-1.0)
    with pytest.raises(InputError, match=r"the draw per volume must be 0 or more; found -1\. Correct it"):
        Draw(per_h=-1.0)
    with pytest.raises(InputError, match=r"a draw must be constant or follow the level; found 5 m3/h and 1 per hour\. Leave one out"):
        Draw(5.0, 1.0)


# ------------------------------------------------------------ what mixing saves


def test_saving_of_equal_batches():
    """10 m3/h, an hour at -20 and an hour at +15 meq/L, each half a day of the day: 200 and 150 eq cancel to 50 eq."""
    q, y, dt = np.full(24, 10.0), np.tile([-0.020, 0.015], 12), np.full(24, HOUR)
    got = mixing_saving(q, y, dt)
    assert_allclose(got, [12 * 200, 12 * 150, 12 * 50, 0, 12 * 300], atol=1e-9)
    tank = run(q, y, Draw(0.0), volume_m3=1e6)
    behind = mixing_saving(q, y, dt, out_flow_m3_h=tank.out_m3_h, out_base_eq_l=tank.out_base_eq_l)
    assert_allclose(behind.saved_eq_d, got.saved_eq_d, rtol=1e-3)
    none = mixing_saving(q, y, dt, out_flow_m3_h=q, out_base_eq_l=y)
    assert none.saved_eq_d == 0.0
    shifted = mixing_saving(q, y, dt, aim_eq_l=0.015)
    assert_allclose(shifted, [12 * 350, 0, 12 * 350, 0, 0], atol=1e-9)

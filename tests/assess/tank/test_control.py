"""Tuning against published values, and the action of controllers against closed forms."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.control import (
    Controller,
    Loop,
    Loops,
    half_rule,
    simc,
    steepest_slope,
    tank_loop,
    ultimate,
)
from aquabuf.errors import InputError


@pytest.fixture
def handbook_loop():
    """V/F = 20 min and agitator flow 19 F: dead time V/(F + Fa) = 1 min (facts: handbook figures, form recalled)."""
    return tank_loop(20.0, 60.0, mixing_dead_s=20.0 / (1.0 + 19.0) * 60.0)


def test_lag_and_dead_time_of_the_handbook_tank(handbook_loop):
    """td 1.0 min and tau 19.0 min: check case 10 of the facts."""
    assert_allclose([handbook_loop.dead_s / 60.0, handbook_loop.lag_s / 60.0], [1.0, 19.0], rtol=1e-3)


def test_ultimate_period_and_gain(handbook_loop):
    """Pu 3.918 min, K Ku 30.48: check case 10 (computed there)."""
    period, gain = ultimate(handbook_loop)
    assert_allclose([period / 60.0, gain], [3.918, 30.48], rtol=1e-3)


def test_simc_settings(handbook_loop):
    """K Kc 9.5, Ti 8 min, gain margin about 3.2: check case 10 (Skogestad 2003, recalled)."""
    tuning = simc(handbook_loop, process_gain=0.25)
    assert_allclose([0.25 * tuning.gain, tuning.reset_s / 60.0], [9.5, 8.0], rtol=1e-3)
    assert_allclose(tuning.gain_margin, 3.2, rtol=0.01)
    assert simc(Loop(100.0, 50.0), 1.0).reset_s == 100.0


@pytest.mark.parametrize(("share", "grows"), [(0.97, False), (1.03, True)])
def test_a_loop_cycles_at_its_ultimate_gain(share, grows):
    """A lag with dead time under proportional control decays below the ultimate gain and grows above it."""
    loop, dt = Loop(190.0, 20.0), 0.05
    period, gain = ultimate(loop)
    loops = loops_of(Controller(7.0, share * gain, np.inf), interval_s=dt)
    x, late, seen = 7.001, [7.001] * round(loop.dead_s / dt), []
    for _ in range(round(12 * period / dt)):
        u = loops.act(np.array([[late[0]]]), np.ones((1, 1)))[0, 0]
        late = [*late[1:], x]
        x = 7.0 + u + (x - 7.0 - u) * np.exp(-dt / loop.lag_s)
        seen.append(x - 7.0)
    seen = np.array(seen)
    n = round(period / dt)
    assert (np.ptp(seen[-n:]) > np.ptp(seen[6 * n:7 * n])) == grows
    rising = np.flatnonzero((seen[:-1] < 0.0) & (seen[1:] >= 0.0))
    assert_allclose(np.diff(rising)[-3:].mean() * dt, period, rtol=0.02)


def loops_of(controller, interval_s=1.0, low=-1e9, high=1e9):
    """One controller on one case."""
    return Loops([controller], np.zeros((1, 1)), np.full((1, 1), low), np.full((1, 1), high), interval_s)


def act(loops, ph, flow=1.0):
    """Output at a pH and a flow."""
    return float(loops.act(np.array([[ph]]), np.array([[flow]]))[0, 0])


def test_half_rule():
    """Lags 100, 20, 4 and dead 5: lag 100 + 10, dead 5 + 10 + 4 (Skogestad 2003, recalled)."""
    loop = half_rule((20.0, 100.0, 4.0), 5.0)
    assert_allclose([loop.lag_s, loop.dead_s], [110.0, 19.0], rtol=1e-12)


def test_tank_loop_counts_every_delay():
    """Residence 600 s less mixing 30 s; line 10, probe 5, half of a 4 s sample; probe lag 8 s shared by the half rule."""
    loop = tank_loop(1.0, 6.0, mixing_dead_s=30.0, line_dead_s=10.0, probe_dead_s=5.0, probe_lag_s=8.0, sample_s=4.0)
    assert_allclose([loop.lag_s, loop.dead_s], [570.0 + 4.0, 30.0 + 10.0 + 5.0 + 2.0 + 4.0], rtol=1e-12)
    slow = tank_loop(1.0, 6.0, mixing_dead_s=30.0, dissolution_per_min=0.5)
    assert_allclose([slow.lag_s, slow.dead_s], [570.0 + 60.0, 30.0 + 60.0], rtol=1e-12)


def test_steepest_slope_of_bare_water():
    """2.17e6 pH per eq/L at pH 7: 1/(2.303 (h + OH)), facts section 3.1; away from it the band's near end counts."""
    ph = np.linspace(3.0, 11.0, 8001)
    base = 1e-14 * 10.0**ph - 10.0**-ph
    assert_allclose(steepest_slope(ph, base, 6.0, 9.0), 2.17e6, rtol=1e-3)
    assert_allclose(steepest_slope(ph, base, 9.0, 10.0), 1.0 / (np.log(10.0) * (1e-5 + 1e-9)), rtol=2e-3)


def test_pi_is_gain_and_ramp():
    """A constant error e gives gain e (1 + t / reset): the definition of PI."""
    loops = loops_of(Controller(7.0, 4.0, 50.0), interval_s=2.0)
    found = [act(loops, 6.5) for _ in range(5)]
    assert_allclose(found, 4.0 * 0.5 * (1.0 + np.arange(5) * 2.0 / 50.0), rtol=1e-9)


def test_start_is_bumpless():
    """The first output is the one asked for, whatever the error and flow."""
    loops = loops_of(Controller(7.0, 4.0, 50.0, flow_ref_m3_h=10.0))
    loops.settle(np.array([[5.0]]), np.array([[20.0]]), np.array([[33.0]]))
    assert_allclose(act(loops, 5.0, 20.0), 33.0, rtol=1e-12)


def test_error_on_the_demand_axis_is_base_to_the_set_point():
    """Strong acid at pH 3 to pH 7 with Kw 1e-14: 1e-3 eq/L less 1e-11, so gain times that."""
    ph = np.linspace(0.0, 14.0, 14001)
    loops = loops_of(Controller(7.0, 1e5, np.inf, "demand", ph, 1e-14 * 10.0**ph - 10.0**-ph))
    assert_allclose(act(loops, 3.0), 1e5 * 1e-3, rtol=1e-4)
    assert_allclose(act(loops, 11.0), -1e5 * 1e-3, rtol=1e-4)


def test_output_follows_the_flow():
    """Ratio feed-forward: twice the flow, twice the reagent, at once."""
    loops = loops_of(Controller(7.0, 4.0, np.inf, flow_ref_m3_h=10.0))
    assert_allclose([act(loops, 6.0, f) for f in (10.0, 20.0, 0.0)], [4.0, 8.0, 0.0], rtol=1e-9)


def test_gain_follows_its_schedule():
    """Factor 1 to pH 6, 0.1 from pH 7: straight between them."""
    loops = loops_of(Controller(8.0, 10.0, np.inf, schedule=((6.0, 1.0), (7.0, 0.1))))
    assert_allclose([act(loops, x) for x in (5.0, 6.5, 7.5)], [30.0, 10.0 * 0.55 * 1.5, 0.5], rtol=0.01)


def test_integral_does_not_wind_up():
    """After a long time at the limit the output leaves it with the sign of the error, not after the time it wound up."""
    loops = loops_of(Controller(7.0, 10.0, 100.0), low=0.0, high=50.0)
    for _ in range(1000):
        assert act(loops, 1.0) == 50.0
    assert act(loops, 7.5) == 0.0  # gain (6 - ...) was over the limit by itself, so that the integral rested at 0
    assert_allclose(act(loops, 6.5), 5.0, atol=0.1)


def test_a_stage_without_controller_keeps_its_feed():
    """The fixed feed, whatever the pH."""
    loops = Loops([None, Controller(7.0, 2.0, 10.0)], np.array([[5.0], [0.0]]), np.full((2, 1), -9.0),
                  np.full((2, 1), 9.0), 1.0)
    loops.settle(np.array([[3.0], [7.0]]), np.ones((2, 1)), np.array([[5.0], [1.0]]))
    assert_allclose(loops.act(np.array([[3.0], [7.0]]), np.ones((2, 1))), [[5.0], [1.0]], rtol=1e-12)
    assert_allclose(loops.act(np.array([[9.0], [6.0]]), np.ones((2, 1))), [[5.0], [3.0]], rtol=1e-9)


@pytest.mark.parametrize(("make", "message"), [
    (lambda: Controller(7.0, 1.0, 10.0, "acid"), "axis of a controller is one of ph, demand; found 'acid'. Choose one"),
    (lambda: Controller(7.0, 0.0, 10.0), "must be above zero; found gain 0.0 and reset 10.0 s. Tune it"),
    (lambda: Controller(7.0, 1.0, 10.0, "demand"), "needs a nominal titration curve; none was given. Give"),
    (lambda: Controller(7.0, 1.0, 10.0, "demand", [7.0, 6.0], [0.0, 1.0]), "must rise from point to point; .* Sort"),
    (lambda: Controller(7.0, 1.0, 10.0, flow_ref_m3_h=0.0), "must be above zero; found 0.0 m3/h. Give the flow"),
    (lambda: half_rule((0.0,)), "needs a lag above zero; none was given. Give volume and flow"),
    (lambda: tank_loop(1.0, 60.0, mixing_dead_s=90.0), "residence of 60 s; found a dead time of 90 s. Mix harder"),
    (lambda: simc(Loop(10.0, 0.0), 1.0), "dead time and a process gain above zero; found 0.0 s and 1.0. Count"),
    (lambda: steepest_slope([2.0, 5.0], [0.0, 1.0], 6.0, 9.0), "reach the control band pH 6.0 to 9.0; .* Titrate further"),
])
def test_messages(make, message):
    """Each says rule, value and remedy."""
    with pytest.raises(InputError, match=message):
        make()


def test_without_dead_time_nothing_cycles():
    """A bare first-order lag has no ultimate gain."""
    assert ultimate(Loop(10.0, 0.0)) == (0.0, float("inf"))

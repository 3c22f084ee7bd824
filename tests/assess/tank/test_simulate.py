"""The simulator against closed forms of stirred tanks, its balances, its instruments and its faults."""

import math
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.optimize import brentq

from aquabuf.assess.tank.control import Controller, simc, steepest_slope, tank_loop
from aquabuf.assess.tank.equipment import step_for
from aquabuf.assess.tank.simulate import Fault, Feeder, Inflow, Probe, Tank, simulate
from aquabuf.engine.readout import GRID_PH, Readout
from aquabuf.errors import InputError

KW, HOUR = 1e-14, 3600.0
WINDOW = (6.0, 9.0)
BARE = Readout(1.0, KW, np.zeros((0, GRID_PH.size)))
NONE = np.zeros((0, 1))


def acetate(ph):
    """Base that a mole of acetic acid (pK 4.756) has taken up."""
    return 1.0 / (1.0 + 10.0 ** (4.756 - ph))


def carbonate(ph):
    """Base that a mole of carbonic acid (pK 6.352, 10.329) has taken up."""
    first, second = 10.0 ** (ph - 6.352), 10.0 ** (2.0 * ph - 6.352 - 10.329)
    return (first + 2.0 * second) / (1.0 + first + second)


ACETATE = Readout(1.0, KW, acetate(GRID_PH)[None])
BOTH = Readout(1.0, KW, np.array([acetate(GRID_PH), carbonate(GRID_PH)]))


def bare_ph(base):
    """Strong acid or base in water: h = -base/2 + sqrt(base^2/4 + Kw)."""
    return -np.log10(-0.5 * base + np.sqrt(0.25 * base**2 + KW))


def controlled(setpoint, largest=400.0, flow=10.0, volume=3.0, *, curve=None, step=5.0, probe=None, faults=(), **feeder):
    """A tank with a PI controller on the demand axis, tuned by SIMC, and both feeders."""
    probe = probe or Probe(lag_s=10.0, dead_s=volume / flow * HOUR / 20.0)
    loop = tank_loop(volume, flow, mixing_dead_s=probe.dead_s, line_dead_s=feeder.get("line_dead_s", 0.0),
                     probe_lag_s=probe.lag_s, sample_s=step)
    tuning = simc(loop, 1.0 / (1000.0 * flow))
    curve = KW * 10.0**GRID_PH - 10.0**-GRID_PH if curve is None else curve
    controller = Controller(setpoint, tuning.gain, tuning.reset_s, "demand", GRID_PH, curve, flow_ref_m3_h=flow)
    one = Feeder(largest, 1.0, **feeder)
    return Tank(f"pH {setpoint}", volume, base=one, acid=one, probe=probe, controller=controller, faults=faults)


# ---------------------------------------------------------------- contents

def test_tanks_in_series_follow_the_closed_form():
    """Step through three equal tanks: 1 - e^-t (1 + t + t^2/2), t in residences; steps small against the residence."""
    tanks = [Tank(str(i), 2.0, start_base_eq_l=0.0) for i in range(3)]
    run = simulate(BARE, tanks, Inflow([0.0], [4.0], [-0.02], NONE), until_s=2 * HOUR, dt_s=5.0, window=WINDOW,
                   record_every_s=600.0)
    t = run.time_s / (0.5 * HOUR)
    for i, form in enumerate((1.0 + 0.0 * t, 1.0 + t, 1.0 + t + 0.5 * t**2)):
        assert_allclose(run.base_eq_l[i, :, 0], -0.02 * (1.0 - np.exp(-t) * form), rtol=0, atol=2e-7)


def test_one_tank_is_exact_whatever_the_step():
    """An exponential has no step error: one step of an hour equals many of 10 s."""
    for dt in (10.0, HOUR):
        tank = Tank("one", 2.0, start_base_eq_l=0.01)
        run = simulate(BARE, [tank], Inflow([0.0], [4.0], [-0.02], NONE), until_s=HOUR, dt_s=dt, window=WINDOW)
        assert_allclose(run.base_eq_l[0, -1, 0], -0.02 + 0.03 * np.exp(-2.0), rtol=1e-12)


def test_equalization_with_a_moving_level():
    """50 m3 at +5 meq/L, draw-off 30 m3/h, hours of 20/40/30 m3/h at +20/-10/+30 meq/L: the exact ODE gives
    10.400, -1.644, 12.633 meq/L and 40, 50, 50 m3 (facts section 6.1, computed)."""
    tank = Tank("equalization", 60.0, least_m3=10.0, out_m3_h=30.0, start_m3=50.0, start_base_eq_l=5e-3)
    inflow = Inflow(np.arange(3) * HOUR, [20.0, 40.0, 30.0], [0.02, -0.01, 0.03], np.zeros((0, 3)))
    for dt in (HOUR, 60.0):
        run = simulate(BARE, [tank], inflow, until_s=3 * HOUR, dt_s=dt, window=WINDOW, record_every_s=HOUR)
        assert_allclose(1e3 * run.base_eq_l[0, 1:, 0], [10.400, -1.644, 12.633], rtol=0, atol=6e-4)
        assert_allclose(run.level_m3[0, 1:, 0], [40.0, 50.0, 50.0], rtol=1e-12)


def test_level_stays_between_its_bounds():
    """Full, everything goes through; at its least, no more than comes in: 2 h at +5 m3/h into 5 m3 of room, then -5."""
    tank = Tank("equalization", 20.0, least_m3=10.0, out_m3_h=10.0, start_m3=15.0)
    inflow = Inflow([0.0, 2 * HOUR], [15.0, 5.0], [-0.01, -0.01], np.zeros((0, 2)))
    run = simulate(BARE, [tank, Tank("next", 1.0)], inflow, until_s=6 * HOUR, dt_s=60.0, window=WINDOW, record_every_s=HOUR)
    assert_allclose(run.level_m3[0, :, 0], [15.0, 20.0, 20.0, 15.0, 10.0, 10.0, 10.0], rtol=1e-9)
    assert_allclose([run.full_min[0, 0], run.empty_min[0, 0]], [60.0, 120.0], rtol=1e-9)
    assert_allclose(run.balance_error, 0.0, rtol=0, atol=1e-12)


def test_equalization_starts_at_the_mean_of_what_comes():
    """Weighted by flow and time: 1 h of 30 m3/h at -0.02, 3 h of 10 m3/h at +0.01 eq/L give (-0.6 + 0.3) / 60."""
    tank = Tank("equalization", 60.0, least_m3=10.0, out_m3_h=15.0)
    inflow = Inflow([0.0, HOUR], [30.0, 10.0], [-0.02, 0.01], np.zeros((0, 2)))
    run = simulate(BARE, [tank, Tank("next", 1.0)], inflow, until_s=4 * HOUR, dt_s=60.0, window=WINDOW)
    assert_allclose(run.base_eq_l[:, 0, 0], -0.3 / 60.0, rtol=1e-12)
    assert_allclose(run.level_m3[0, 0, 0], 35.0, rtol=1e-12)


def test_slow_reagent_leaves_a_share_undissolved():
    """First order in stirred tanks: of the feed, k V/(F + k V) dissolves in the first and of the rest in the second."""
    lime = Feeder(200.0, math.inf, dissolution_per_min=0.1)
    tanks = [Tank("one", 5.0, base=lime, fixed_eq_h=100.0, start_base_eq_l=-0.01), Tank("two", 2.0, start_base_eq_l=0.0)]
    run = simulate(BARE, tanks, Inflow([0.0], [10.0], [-0.01], NONE), until_s=20 * HOUR, dt_s=20.0, window=WINDOW)
    first = 6.0 * 5.0 / (10.0 + 6.0 * 5.0)
    second = first + (1.0 - first) * 6.0 * 2.0 / (10.0 + 6.0 * 2.0)
    assert_allclose(run.base_eq_l[:, -1, 0], [-0.01 + 0.01 * first, -0.01 + 0.01 * second], rtol=1e-9)
    assert_allclose(run.balance_error, 0.0, rtol=0, atol=1e-12)


def test_start_with_slow_reagent_is_at_rest():
    """A start at the set point stays there: pool, feed and contents of the steady state fit together."""
    tank = controlled(6.5, dissolution_per_min=0.3)
    run = simulate(ACETATE, [tank, Tank("two", 2.0)], Inflow([0.0], [10.0], [-0.01], [[0.01]]), until_s=2 * HOUR,
                   dt_s=5.0, window=WINDOW, record_every_s=HOUR)
    assert_allclose(run.ph[0, :, 0], 6.5, rtol=0, atol=2e-3)
    assert_allclose(run.base_eq_l[1, :, 0], run.base_eq_l[1, 0, 0], rtol=1e-3)


def test_overfed_reagent_stops_at_its_ceiling():
    """Ten times the demand of a slow reagent with a ceiling of 9.5: the pH comes up to it and no further."""
    feeder = Feeder(2000.0, math.inf, dissolution_per_min=0.5, ceiling_ph=9.5)
    tank = Tank("one", 5.0, base=feeder, fixed_eq_h=1000.0, start_base_eq_l=-0.01)
    run = simulate(ACETATE, [tank], Inflow([0.0], [10.0], [-0.01], [[1e-3]]), until_s=10 * HOUR, dt_s=30.0, window=WINDOW,
                   record_every_s=30.0)
    assert run.ph.max() <= 9.5 + 1e-4
    assert_allclose(run.ph[0, 600:, 0], 9.5, rtol=0, atol=1e-3)
    assert_allclose(run.balance_error, 0.0, rtol=0, atol=1e-12)


def test_carbon_of_reagents_arrives():
    """CO2 on 0.5 N NaOH, one mole per mole, ends at pH 8.34 (facts section 5.3): carbon comes, base stays."""
    gas = Feeder(1e5, math.inf, carbon_mol_eq=1.0, base_eq_eq=0.0)
    tank = Tank("one", 1.0, acid=gas, fixed_eq_h=-5000.0)
    run = simulate(BOTH, [tank], Inflow([0.0], [10.0], [0.5], [[0.0], [0.0]]), until_s=5 * HOUR, dt_s=60.0, window=WINDOW,
                   carbon_carrier=1)
    assert_allclose(run.ph[0, -1, 0], 8.34, rtol=0, atol=0.01)
    assert_allclose(run.balance_error, 0.0, rtol=0, atol=1e-12)


def test_balance_closes_over_a_month_of_everything():
    """Base and every carrier to 1e-9 with moving level, slow lime, soda ash, acid, noise, dead times and faults."""
    rng = np.random.default_rng(4)
    times = np.arange(0.0, 30 * 24 * HOUR, 2 * HOUR)
    flow = rng.uniform(2.0, 18.0, (times.size, 2))
    amounts = rng.uniform(0.0, 0.02, (2, times.size, 2))
    curve = ACETATE.base_at(GRID_PH, [0.01])
    first = controlled(5.0, curve=curve, step=240.0, dissolution_per_min=0.2, ceiling_ph=9.0)
    soda = Feeder(300.0, 1.0, carbon_mol_eq=0.5, repeatability=0.01, line_dead_s=300.0)
    second = Tank("soda", 4.0, base=soda, acid=Feeder(300.0, 2.0, turndown=50.0), probe=Probe(30.0, 0.05, 0.0, 60.0),
                  controller=Controller(7.5, 60.0, 900.0), faults=(Fault("base pump full on", 1e6, 1e5),))
    tanks = [Tank("equalization", 80.0, least_m3=20.0, out_m3_h=10.0), first, second]
    run = simulate(BOTH, tanks, Inflow(times, flow, rng.uniform(-0.03, 0.01, flow.shape), amounts), until_s=30 * 24 * HOUR,
                   dt_s=240.0, window=WINDOW, carbon_carrier=1)
    assert run.base_used_eq.min(axis=1)[1] > 0.0
    assert run.balance_error.shape == (3, 2)
    assert_allclose(run.balance_error, 0.0, rtol=0, atol=1e-9)


def test_recorded_flows_close_the_balance_too():
    """Booked from the record alone: stored base is inflow and reagent less outflow, by the trapezoid of small steps."""
    tank = controlled(7.0, curve=ACETATE.base_at(GRID_PH, [0.01]))
    inflow = Inflow([0.0, HOUR], [10.0, 12.0], [-0.01, -0.03], [[0.01, 0.01]])
    run = simulate(ACETATE, [tank], inflow, until_s=3 * HOUR, dt_s=2.0, window=WINDOW, record_every_s=2.0)
    base, feed = run.base_eq_l[0, :, 0], run.reagent_eq_h[0, 1:, 0]
    flow = np.where(run.time_s[:-1] < HOUR, 10.0, 12.0)
    into = flow * np.where(run.time_s[:-1] < HOUR, -0.01, -0.03) + 1e-3 * feed
    out = (flow + 1e-3 * np.abs(feed)) * 0.5 * (base[1:] + base[:-1])
    assert_allclose(3.0 * (base[-1] - base[0]), ((into - out) * 2.0 / HOUR).sum(), rtol=0, atol=1e-6)
    assert_allclose(run.base_used_eq[0, 0], np.maximum(feed, 0.0).sum() * 2.0 / HOUR, rtol=1e-9)


# ---------------------------------------------------------------- control

def test_demand_is_the_acid_that_comes():
    """0.01 N strong acid at 10 m3/h to pH 7 needs 100 eq/h, less nothing: 1000 eq in 10 h."""
    run = simulate(BARE, [controlled(7.0)], Inflow([0.0], [10.0], [-0.01], NONE), until_s=10 * HOUR, dt_s=5.0, window=WINDOW)
    assert_allclose(run.base_used_eq[0, 0], 1000.0, rtol=1e-4)
    assert_allclose(run.acid_used_eq[0, 0], 0.0, atol=0.1)


@pytest.mark.parametrize("axis", ["ph", "demand"])
def test_integral_brings_the_tank_back(axis):
    """After a step in acid the pH returns to the set point, without an offset."""
    tank = controlled(6.5, curve=ACETATE.base_at(GRID_PH, [0.01]))
    if axis == "ph":
        loop = tank_loop(3.0, 10.0, mixing_dead_s=54.0, probe_lag_s=10.0)
        tuning = simc(loop, steepest_slope(GRID_PH, ACETATE.base_at(GRID_PH, [0.01]), 6.0, 7.0) / (1000.0 * 10.0))
        tank = Tank("one", 3.0, base=tank.base, acid=tank.acid, probe=tank.probe,
                    controller=Controller(6.5, tuning.gain, tuning.reset_s))
    inflow = Inflow([0.0, HOUR], [10.0, 10.0], [-0.01, -0.0102], [[0.01, 0.01]])
    run = simulate(ACETATE, [tank], inflow, until_s=12 * HOUR, dt_s=5.0, window=WINDOW, record_every_s=HOUR)
    assert run.lowest_ph[0] < 6.49
    assert_allclose(run.ph[0, [0, -1], 0], 6.5, rtol=0, atol=1e-3)


def test_acid_takes_over_where_the_waste_turns_alkaline():
    """Split feeders: base for the acid half, acid for the alkaline one; strong, so demand is what comes."""
    inflow = Inflow([0.0, 5 * HOUR], [10.0, 10.0], [-0.01, 0.01], np.zeros((0, 2)))
    run = simulate(BARE, [controlled(7.0)], inflow, until_s=10 * HOUR, dt_s=5.0, window=WINDOW, record_every_s=HOUR)
    assert_allclose(run.reagent_eq_h[0, [4, -1], 0], [100.0, -100.0], rtol=1e-2)


def test_saturated_feeder_leaves_the_rest():
    """60 eq/h against 100: 0.004 eq/L of acid are left, diluted by 60 L/h of reagent; pH by the closed form."""
    run = simulate(BARE, [controlled(7.0, largest=60.0)], Inflow([0.0], [10.0], [-0.01], NONE), until_s=5 * HOUR, dt_s=5.0,
                   window=WINDOW)
    left = (0.06 - 0.1) / 10.06
    assert_allclose(run.ph[0, -1, 0], bare_ph(left), rtol=0, atol=1e-3)
    assert_allclose(run.outside_min, 300.0, rtol=1e-9)


# ---------------------------------------------------------------- timing

def test_line_dead_time_delays_reagent():
    """A step in acid at 1 h: with 120 s of line the reagent that answers it reaches the tank 120 s later."""
    answers = []
    for dead in (0.0, 120.0):
        tank = controlled(7.0, line_dead_s=dead, probe=Probe())
        tank = Tank("one", 3.0, base=tank.base, acid=tank.acid, controller=Controller(7.0, 5.0, math.inf))
        inflow = Inflow([0.0, HOUR], [10.0, 10.0], [-0.01, -0.02], [[0.01, 0.01]])
        run = simulate(ACETATE, [tank], inflow, until_s=1.2 * HOUR, dt_s=10.0, window=WINDOW, record_every_s=10.0)
        feed = run.reagent_eq_h[0, :, 0]
        answers.append(run.time_s[np.flatnonzero(feed > feed[300] + 1e-3)[0]])
    assert_allclose(np.diff(answers), 120.0, rtol=1e-12)


def test_controllers_act_at_their_interval():
    """With 60 s between samples the feed changes at whole minutes only."""
    inflow = Inflow([0.0, 600.0], [10.0, 10.0], [-0.01, -0.02], [[0.01, 0.01]])
    run = simulate(ACETATE, [controlled(6.5, probe=Probe(lag_s=10.0, dead_s=30.0))], inflow, until_s=HOUR, dt_s=10.0, sample_s=60.0,
                   window=WINDOW, record_every_s=10.0)
    changes = np.flatnonzero(np.diff(run.reagent_eq_h[0, 1:, 0]) != 0.0) + 1
    assert changes.size > 10
    assert_array_equal(changes % 6, 0)


# ---------------------------------------------------------------- counting

def test_minutes_outside_and_longest_excursion():
    """A tank of a liter follows its inflow: 30 min of acid, 90 of neutral, 80 of base, neutral; counted on every step."""
    inflow = Inflow(np.array([0.0, 60.0, 90.0, 180.0, 260.0]) * 60.0, np.full(5, 10.0), [0.0, -1e-3, 0.0, 1e-3, 0.0],
                    np.zeros((0, 5)))
    run = simulate(BARE, [Tank("one", 1e-3)], inflow, until_s=300 * 60.0, dt_s=10.0, window=WINDOW)
    assert_allclose([run.outside_min[0], run.longest_min[0]], [110.0, 80.0], rtol=0, atol=0.4)
    assert_allclose([run.lowest_ph[0], run.highest_ph[0]], [3.0, 11.0], rtol=0, atol=1e-3)
    assert run.time_s.tolist() == [0.0, 18000.0]
    assert run.simulated_min == 300.0


def test_a_case_does_not_depend_on_its_company():
    """The same bits alone and as one of five, noise and scatter included."""
    rng = np.random.default_rng(0)
    times = np.arange(20) * 300.0
    flow, base = rng.uniform(8, 12, (20, 5)), rng.uniform(-0.02, 0.0, (20, 5))
    amounts = rng.uniform(0.0, 0.02, (1, 20, 5))
    tanks = [controlled(5.0, repeatability=0.02, probe=Probe(10.0, 0.05, 0.0, 30.0)), controlled(7.0, line_dead_s=20.0)]
    settings = {"until_s": 6000.0, "dt_s": 5.0, "window": WINDOW, "record_every_s": 100.0, "seed": 9}
    together = simulate(ACETATE, tanks, Inflow(times, flow, base, amounts), first_case=10, **settings)
    alone = simulate(ACETATE, tanks, Inflow(times, flow[:, 3:4], base[:, 3:4], amounts[..., 3:4]), first_case=13, **settings)
    for name in ("ph", "base_eq_l", "reagent_eq_h"):
        assert_array_equal(getattr(together, name)[..., 3:4], getattr(alone, name))
    assert not np.array_equal(together.reagent_eq_h[0, :, 0], together.reagent_eq_h[0, :, 1])


# ---------------------------------------------------------------- faults

def faulty(kind, start_s=HOUR, length_s=HOUR, base=(-0.01, -0.02), **changed):
    """A controlled tank of acetic waste whose acid doubles an hour and a half into the run."""
    tank = controlled(6.5, curve=ACETATE.base_at(GRID_PH, [0.01]), faults=(Fault(kind, start_s, length_s),))
    tank = replace(tank, **changed)
    inflow = Inflow([0.0, 1.5 * HOUR], [10.0, 10.0], base, [[0.01, 0.01]])
    return simulate(ACETATE, [tank], inflow, until_s=4 * HOUR, dt_s=10.0, window=WINDOW, record_every_s=10.0)


def during(run, start_h, end_h):
    """Recorded steps within some hours."""
    return (run.time_s > start_h * HOUR + 1.0) & (run.time_s <= end_h * HOUR)


def test_pump_full_on():
    """All it has, 400 eq/h, for its hour and no longer: 0.4 keq/h less the acid, in 10.4 m3/h, after three residences."""
    run = faulty("base pump full on", base=(-0.01, -0.01), acid=None)
    feed = run.reagent_eq_h[0, :, 0]
    assert_allclose(feed[during(run, 1.0, 2.0)], 400.0, rtol=1e-12)
    assert feed[during(run, 2.0, 4.0)].max() < 399.0
    assert_allclose(run.base_eq_l[0, run.time_s == 2.0 * HOUR, 0], (0.4 - 0.1) / 10.4, rtol=0.03)


def test_reagent_out():
    """No base for an hour: base falls towards that of the waste with the residence of the tank, 0.3 h."""
    run = faulty("base out", base=(-0.01, -0.01))
    inside = during(run, 1.0, 2.0)
    assert_allclose(np.maximum(run.reagent_eq_h[0, inside, 0], 0.0), 0.0, atol=0.0)
    t = run.time_s[inside] / HOUR - 1.0
    begin = run.base_eq_l[0, run.time_s == HOUR, 0]
    assert_allclose(run.base_eq_l[0, inside, 0], -0.01 + (begin + 0.01) * np.exp(-t / 0.3), rtol=1e-9, atol=1e-12)
    assert_allclose(run.ph[0, -1, 0], 6.5, rtol=0, atol=0.05)


def test_acid_out_and_acid_full_on():
    """An alkaline waste without its acid stays alkaline; with all of it, it gets what the pump has."""
    out = faulty("acid out", base=(0.03, 0.03))
    assert_allclose(np.minimum(out.reagent_eq_h[0, during(out, 1.0, 2.0), 0], 0.0), 0.0, atol=0.0)
    full = faulty("acid pump full on", base=(0.03, 0.03))
    assert full.reagent_eq_h[0, during(full, 1.0, 1.02), 0].max() <= -399.0


def test_stuck_probe_blinds_the_controller():
    """The reading stays, so the feed does not answer the acid that comes at 1.5 h, until the probe is free again."""
    run, sound = faulty("probe stuck"), faulty("probe stuck", start_s=3.9 * HOUR)
    feed, answer = run.reagent_eq_h[0, :, 0], sound.reagent_eq_h[0, :, 0]
    stuck = during(run, 1.0, 2.0)
    assert_allclose(feed[stuck], float(feed[run.time_s == HOUR][0]), rtol=1e-3)
    assert answer[stuck].max() > 1.4 * feed[stuck].max()
    assert_allclose(run.ph[0, -1, 0], 6.5, rtol=0, atol=0.05)


def test_buffer_lost():
    """The weak acid is gone and base stays: strong acid at the base of the tank, pH by the closed form."""
    tank = Tank("one", 0.3, faults=(Fault("buffer lost", HOUR),), start_base_eq_l=-1e-3)
    run = simulate(ACETATE, [tank], Inflow([0.0], [10.0], [2e-3], [[0.01]]), until_s=3 * HOUR, dt_s=10.0, window=WINDOW,
                   record_every_s=HOUR)
    buffered = brentq(lambda x: 0.01 * acetate(x) + KW * 10.0**x - 10.0**-x - 2e-3, 1.0, 13.0)
    assert_allclose(run.ph[0, 1, 0], buffered, rtol=0, atol=1e-4)
    assert_allclose(run.ph[0, -1, 0], bare_ph(np.array(2e-3)), rtol=0, atol=1e-3)


# ---------------------------------------------------------------- setting up

def test_step_follows_the_fastest_loop():
    """A fifth of line, mixing and probe together, in plain numbers; with a flow no more than a twentieth of a residence."""
    assert step_for([controlled(7.0, probe=Probe(lag_s=10.0, dead_s=45.0), line_dead_s=10.0)]) == 12.0
    assert step_for([controlled(7.0, probe=Probe(lag_s=2.0, dead_s=4.0)), controlled(7.0)]) == 1.0
    assert step_for([controlled(7.0, probe=Probe(lag_s=10.0, dead_s=42.0))]) == 10.0
    assert step_for([Tank("free", 100.0)]) == 60.0
    assert step_for([Tank("free", 1.0)], 10.0) == 15.0
    assert step_for([controlled(7.0, probe=Probe())]) == 0.5


def an_inflow(**changed):
    """Two hours of clean water, with changes."""
    given = {"time_s": [0.0, HOUR], "flow_m3_h": [1.0, 1.0], "base_eq_l": [0.0, 0.0], "amounts": [[0.0, 0.0]]}
    return Inflow(**(given | changed))


def run_with(**changed):
    """A run of an hour, with changes."""
    given = {"until_s": HOUR, "dt_s": 10.0, "window": WINDOW, "carbon_carrier": None, "tanks": [Tank("one", 1.0)],
             "inflow": an_inflow()}
    given |= changed
    return simulate(ACETATE, given.pop("tanks"), given.pop("inflow"), **given)


SODA = Tank("one", 1.0, base=Feeder(1.0, 1.0, carbon_mol_eq=0.5))


@pytest.mark.parametrize(("make", "message"), [
    (lambda: Feeder(0.0, 1.0), "delivery and strength above zero and a turndown of 1 or more; found 0.0 eq/h"),
    (lambda: Feeder(1.0, 1.0, resolution=1.5), "shares at most 1; found .*resolution=1.5.*Correct it"),
    (lambda: Feeder(1.0, 1.0, dissolution_per_min=0.0), "must be above zero; found 0.0 per min. Leave it out"),
    (lambda: Feeder(1.0, 1.0, ceiling_ph=9.0), r"ceiling \(pH 9.0\) slows dissolution, .* at once. Give dissolution"),
    (lambda: Probe(lag_s=-1.0), "must not be negative; found -1.0 s"),
    (lambda: Tank("one", 0.0), "volume of tank 'one' must be above zero; found 0.0 m3. Size it"),
    (lambda: Tank("one", 5.0, least_m3=6.0, out_m3_h=1.0), "up to its 5.0 m3, and a draw-off; found 6.0 m3 and 1.0"),
    (lambda: Tank("one", 5.0, least_m3=2.0), "and a draw-off; found 2.0 m3 and None m3/h. Give least_m3 and out_m3_h"),
    (lambda: Tank("one", 1.0, controller=Controller(7.0, 1.0, 1.0)), "needs a feeder; found none. Give base or acid"),
    (lambda: Tank("one", 1.0, fixed_eq_h=-1.0), "fixed feed of tank 'one' needs a feeder for it; found none"),
    (lambda: an_inflow(time_s=[1.0, 2.0]), "start at 0 s and rise; found .* Sort them"),
    (lambda: an_inflow(flow_m3_h=[1.0]), r"flow of an inflow must have 2 times and 1 or 1 cases; found shape \(1, 1\)"),
    (lambda: an_inflow(base_eq_l=[0.0, np.nan]), "base of an inflow must be finite; found 1 values that are not. Fill"),
    (lambda: an_inflow(flow_m3_h=[1.0, -2.0]), "must not be negative; found -2.0 m3/h .* Correct the profile"),
    (lambda: Fault("flood", 0.0), "a fault is one of probe stuck, .*; found 'flood'. Choose one"),
    (lambda: Fault("base out", -1.0), "starts at 0 s or later and lasts; found start -1.0 s"),
    (lambda: run_with(tanks=[]), "needs at least one tank; found none"),
    (lambda: run_with(dt_s=-1.0), "length at least a step; found -1.0 s and 3600.0 s"),
    (lambda: run_with(dt_s=7200.0, until_s=1e5), r"not be longer than the inflow holds a value \(3600 s\); found 7200 s"),
    (lambda: run_with(inflow=Inflow([0.0], [1.0], [0.0], NONE)), r"one row of amounts per carrier \(1\); found 0"),
    (lambda: run_with(tanks=[SODA]), "carbon that a reagent brings needs a carrier; none was named. Give carbon_carrier"),
    (lambda: run_with(carbon_carrier=3), "row from 0 to 0; found 3. Correct it"),
    (lambda: run_with(tanks=[Tank("a", 1.0), Tank("b", 1.0, faults=(Fault("buffer lost", 0.0),))]),
     "'buffer lost' belongs to the inflow of the first tank; found it at tank 2. Move"),
])
def test_messages(make, message):
    """Each says rule, value and remedy."""
    with pytest.raises(InputError, match=message):
        make()

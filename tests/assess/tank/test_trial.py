"""The proof of a design: tuning by its rule, reagent used against balances, faults against a stirred tank by hand."""

from dataclasses import replace

import numpy as np
import pytest
from made_jobs import MAGNESIA, SODA_ASH, acetic, bicarbonate, course, job, steady, strong
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.tank.arrivals import Arrival
from aquabuf.assess.tank.basis import basis_of
from aquabuf.assess.tank.curve import MeasuredCurve
from aquabuf.assess.tank.job import Spread
from aquabuf.assess.tank.layout import layout_of
from aquabuf.assess.tank.trial import (
    OPERATOR_MIN,
    FaultRun,
    bands_of,
    inflow_of,
    step_of,
    tanks_of,
    trial_of,
    tunings_of,
)
from aquabuf.errors import InputError

ONE = {"stages": 1}
QUIET = {"feed_error": 1e-6, "resolution": 0.0, "probe_noise_ph": 0.0}


def tried(*arrivals, cases=0, **options):
    """Layout and trial of a job."""
    basis = basis_of(job(*arrivals, **options))
    layout = layout_of(basis)
    return basis, layout, trial_of(basis, layout, cases=cases, processes=1)


BUFFERED = tried(steady(bicarbonate()), wishes=ONE, acid="acid")


def fault(trial, kind, tank="tank 1"):
    """The run of one failure."""
    return next(f for f in trial.faults if (f.tank, f.kind) == (tank, kind))


# ---------------------------------------------------------------- the plant


def test_tuning_by_hand():
    """1 m3 at 6 m3/h: mixer of 19 F = 114 m3/h, dead time 1/120 h = 30 s, lag 570 s, probe 10 s, line 2 m of 6 mm.

    SIMC: half of the probe's lag to each, gain lag / (2 dead) times 1000 F, reset 8 dead times.
    """
    _, layout, trial = BUFFERED
    feed = layout.stages[0].feeds["base"]
    line = 1e3 * 2.0 * 0.25 * np.pi * 0.006**2 / feed.need.least_l_h * 3600.0
    dead = 30.0 + min(line, 30.0) + 5.0 + 5.0  # half a step of 10 s
    tuning = trial.tunings[0]
    assert tuning.gain == pytest.approx((570.0 + 5.0) / (2.0 * dead) * 6000.0, rel=1e-3)
    assert tuning.reset_s == pytest.approx(8.0 * dead, rel=1e-3)


def test_tuning_on_the_ph_axis_uses_the_steepest_point_around_each_set_point():
    """Gain on the demand axis over the steepest slope there; tank 1 at pH 3.5 sees 1 / 2.3026 [H+] at pH 3.5 + 0.8."""
    wishes = {"set_points": (3.5, 8.2)}
    _basis, _layout, trial = tried(steady(strong()), wishes=wishes)
    other = basis_of(job(steady(strong()), wishes=wishes | {"axis": "ph"}))
    on_ph = tunings_of(other, layout_of(other))
    ratio = trial.tunings[0].gain / on_ph[0].gain
    slope = 1.0 / (np.log(10.0) * 10.0**-4.3)
    assert ratio == pytest.approx(slope, rel=0.2)  # activity of 0.01 mol/L
    assert trial.tunings[1].gain / on_ph[1].gain > 1e3 * ratio / 100.0


def test_plant_follows_layout_and_site():
    """Sizes, strength, errors and probes; the acid feeder only where the layout has one."""
    basis, layout, trial = BUFFERED
    tank = trial.tanks[0]
    assert (tank.volume_m3, tank.probe.lag_s, tank.probe.noise_ph) == (1.0, 10.0, 0.02)
    assert tank.base.largest_eq_h == layout.stages[0].feeds["base"].need.size_eq_h
    assert (tank.base.turndown, tank.base.repeatability, tank.base.resolution) == (100.0, 0.01, 0.001)
    assert tank.controller.setpoint_ph == basis.aim_ph
    assert tank.controller.flow_ref_m3_h == pytest.approx(6.0)
    assert tank.probe.dead_s == pytest.approx(30.0)
    assert tank.acid is not None


def test_feedforward_that_is_not_wanted():
    """No ratio then."""
    basis = basis_of(job(steady(bicarbonate()), wishes={"stages": 1, "feedforward": False}))
    layout = layout_of(basis)
    assert tanks_of(basis, layout, tunings_of(basis, layout))[0].controller.flow_ref_m3_h is None


def test_fine_feeder_of_a_split_range():
    """Where the layout splits the feed, steps are those of the fine feeder and the turndown is that of both."""
    _basis, layout, trial = tried(steady(bicarbonate(0.002, 0.012)), wishes=ONE, site={"resolution": 0.05})
    split = layout.stages[0].feeds["base"].split
    assert split is not None
    assert split.works
    assert trial.tanks[0].base.resolution == pytest.approx(0.05 * split.fine_share)
    assert trial.tanks[0].base.turndown == pytest.approx(100.0 / split.fine_share)


# ---------------------------------------------------------------- courses


def test_reagent_used_is_base_needed():
    """Base fed over the course is what the water took on, within what the tank may hold more or less (its tolerance)."""
    basis, _, trial = tried(steady(bicarbonate()), wishes=ONE, trial={"days": 0.3}, site=QUIET)
    volume = 6.0 * 7.2
    needed = 1e3 * volume * (float(basis.chem.readout.base_at(basis.aim_ph, [1.0, 0.0])) - (-0.010))
    slack = 1e3 * 1.0 * float(basis.fit.tolerance_eq_l)
    assert trial.course.base_used_eq[0, 0] == pytest.approx(needed, abs=slack, rel=0.01)
    assert trial.course.simulated_min == pytest.approx(432.0)
    assert np.abs(trial.course.balance_error).max() < 1e-9


def test_buffered_waste_holds():
    """One tank, 1 % feed error, base of 13 % of the demand across the window: never outside, in any case."""
    _basis, _layout, trial = tried(steady(bicarbonate(), spread=Spread(relative_sd=0.1, lasting_h=1.0)), cases=8,
                                 wishes=ONE, acid="acid", trial={"buffer_sd": 0.05, "probe_offset_sd": 0.05})
    assert trial.kept
    assert trial.accepted
    assert trial.course.outside_min[0] == 0.0
    assert trial.monte.probability == 1.0
    assert trial.monte.meets.size == 8


def test_strong_acid_in_one_tank_with_a_coarse_feed_fails():
    """Window 6.9 to 7.1 is 4e-8 eq/L wide; a feed good to 2 % of 0.1 eq/L is off by 2e-3: it cannot hold."""
    _basis, layout, trial = tried(steady(strong(-0.1)), cases=3, window=(6.9, 7.1), wishes=ONE, acid="acid",
                                 site={"feed_error": 0.02, "resolution": 0.01})
    assert not layout.choice.reaches
    assert not layout.stages[0].feeds["base"].accuracy.holds
    assert not trial.kept
    assert not trial.accepted
    assert trial.monte.probability == 0.0
    assert trial.course.outside_min[0] > 0.5 * trial.course.simulated_min


def test_probability_is_counted_over_the_cases():
    """Share of the cases that keep both limits, counted by hand, with a rule that some break."""
    _basis, _layout, trial = tried(
        steady(bicarbonate(), spread=Spread(relative_sd=0.4, lasting_h=0.5)), cases=12, window=(6.2, 7.4), aim=6.8,
        total_min=2000.0, each_min=5.0, wishes=ONE, trial={"probe_offset_sd": 0.4, "seed": 5})
    m = trial.monte
    allowed = 2000.0 * 144.0 / (31.0 * 1440.0)
    by_hand = (m.outside_min <= allowed) & (m.longest_min <= 5.0)
    assert 0.0 < by_hand.mean() < 1.0
    assert m.probability == by_hand.mean()
    assert trial.accepted == (by_hand.mean() >= 0.95)
    assert trial.kept == (trial.course.outside_min[0] <= allowed and trial.course.longest_min[0] <= 5.0)


def test_every_case_has_its_own_course():
    """As many columns as cases, all different; behind the equalization tank they swing less, and hold its amounts."""
    waste = steady(strong(), spread=Spread(relative_sd=0.5, lasting_h=1.0))
    basis = basis_of(job(waste, wishes={"equalization_m3": 0.0}))
    bare = inflow_of(basis, layout_of(basis), 5)
    other = basis_of(job(waste, wishes={"equalization_m3": 50.0}))
    mixed = inflow_of(other, layout_of(other), 5)
    for found in (bare, mixed):
        assert found.cases == 5
        assert np.unique(found.base_eq_l[3]).size == 5
        assert_allclose(found.base_eq_l, -0.01 * found.amounts[0], rtol=1e-9)
        assert_array_equal(found.amounts[1], 0.0)
    assert (np.ptp(mixed.base_eq_l, axis=0) < np.ptp(bare.base_eq_l, axis=0)).all()


def step(*arrivals, **options):
    """Step that a job is simulated with."""
    basis = basis_of(job(*arrivals, **options))
    layout = layout_of(basis)
    return step_of(basis, layout, tanks_of(basis, layout, tunings_of(basis, layout)), inflow_of(basis, layout, 1))


def test_step_follows_lags_file_and_course():
    """At most 10 s; what the file sets; no longer than the rows of a measured course.

    A fifth of mixing dead time, 0.3 m3 / (20 x 6 m3/h), and probe is 2 s.
    """
    assert step(steady(bicarbonate()), wishes=ONE) == 10.0 == BUFFERED[2].step_s
    assert step(steady(bicarbonate()), wishes=ONE, trial={"step_s": 4.0}) == 4.0
    rows = course(np.full(1800, 6.0), step_s=5.0)
    assert step(Arrival(waste=bicarbonate(), mean_m3_h=None), profile=rows, wishes=ONE) == 5.0
    with pytest.raises(InputError, match=r"step of \[simulate\] must not be longer than .* 300 s; found 600 s. Shorten it"):
        step(steady(bicarbonate()), wishes=ONE, trial={"step_s": 600.0})
    quick = step(steady(bicarbonate()), wishes={"volumes_m3": (0.3,)}, site={"probe_lag_s": 1.0, "line_m": 0.0})
    assert 0.5 <= quick <= (9.0 + 1.0) / 5.0


def test_hours_without_flow():
    """The plant stands and goes on."""
    rows = course([6.0, 0.0, 0.0, 6.0], step_s=1800.0)
    trial = tried(Arrival(waste=bicarbonate(), mean_m3_h=None), profile=rows, wishes=ONE)[2]
    assert np.isfinite(trial.course.ph).all()
    assert np.abs(trial.course.balance_error).max() < 1e-9
    assert trial.course.lowest_ph[0] > 5.0
    assert trial.course.highest_ph[0] < 10.0


# ---------------------------------------------------------------- failures


def test_feed_that_fails_by_hand():
    """Contents go to the raw waste by e^(-t / 10 min); the window is left when the base of pH 6 is passed.

    The line still holds reagent for its own delay.
    """
    basis, layout, trial = tried(steady(bicarbonate()), wishes=ONE, site=QUIET)
    at = {ph: float(basis.chem.readout.base_at(ph, [1.0, 0.0])) for ph in (6.0, basis.aim_ph)}
    feed = layout.stages[0].feeds["base"]
    tau = 1e3 / (6e3 / 60.0)  # reagent water is 0.2 %
    minutes = tau * np.log((at[basis.aim_ph] + 0.010) / (at[6.0] + 0.010)) + feed.line_s / 60.0
    found = fault(trial, "base out")
    assert found.minutes_to_leave == pytest.approx(minutes, abs=0.35)
    lowest = float(basis.chem.readout.ph(-0.010 + (at[basis.aim_ph] + 0.010) * np.exp(-(60.0 - feed.line_s / 60.0) / tau),
                                         [1.0, 0.0]))
    assert found.lowest_ph == pytest.approx(lowest, abs=0.03)


def test_faults_that_are_looked_at():
    """Each main feed of the first and last tank, trims of the last full on, the last probe, the buffers."""
    _, _layout, trial = tried(steady(strong()), acid="acid", wishes={"stages": 3})
    assert [(f.tank, f.kind) for f in trial.faults] == [
        ("tank 3", "probe stuck"), ("tank 1", "base pump full on"), ("tank 1", "base out"),
        ("tank 3", "base pump full on"), ("tank 3", "base out"), ("tank 3", "acid pump full on"),
        ("tank 1", "buffer lost")]


def test_acid_out_is_tried_where_acid_is_asked_for():
    """With a mean that asks for base, and alkaline hours: the acid feed fails in those."""
    swings = course([6.0, 6.0, 6.0, 6.0], base_eq_l={"": np.array([-0.02, -0.02, -0.02, 0.02])})
    _, _, trial = tried(Arrival(waste=bicarbonate(), mean_m3_h=None), profile=swings, acid="acid", wishes=ONE)
    found = fault(trial, "acid out")
    assert found.highest_ph > 9.0
    assert found.minutes_to_leave < 30.0
    assert fault(trial, "base out").lowest_ph < 6.0


def test_stuck_probe_meets_a_stronger_stream():
    """30 % more acid while the probe shows the aim: pH falls, and the time counts from the start of the failure."""
    _, _, trial = tried(steady(bicarbonate()), window=(6.4, 9.0), aim=6.8, wishes=ONE, site=QUIET)
    found = fault(trial, "probe stuck")
    assert found.lowest_ph < 6.4
    assert 0.0 < found.minutes_to_leave < 20.0


def test_lost_buffers():
    """Strong acid has none to lose; the buffered one does."""
    assert np.isnan(fault(tried(steady(strong()), wishes={"stages": 2}, site=QUIET, window=(5.0, 9.5))[2],
                          "buffer lost").minutes_to_leave)
    assert np.isfinite(fault(BUFFERED[2], "buffer lost").minutes_to_leave)


def test_quick_failures():
    """Before an operator can act; never is not quick."""
    one = FaultRun(tank="t", kind="k", words="", minutes_to_leave=OPERATOR_MIN - 0.1, minutes_outside=1.0, lowest_ph=5.0,
                   highest_ph=7.0)
    assert one.is_quick
    assert not replace(one, minutes_to_leave=OPERATOR_MIN).is_quick
    assert not replace(one, minutes_to_leave=np.nan).is_quick


# ---------------------------------------------------------------- reagents and bands


def test_slow_reagent_reaches_its_aim():
    """Magnesium hydroxide at pH 7.5: the feed is large enough although 28 % leaves undissolved."""
    basis, _, trial = tried(steady(bicarbonate()), reagents={"m": MAGNESIA}, base="m", aim=7.5, wishes=ONE,
                            site=QUIET, trial={"days": 0.2})
    assert np.median(trial.course.ph[-1]) == pytest.approx(7.5, abs=0.1)
    used = trial.course.base_used_eq[0, 0] / (6.0 * 4.8)
    need = 1e3 * (float(basis.chem.readout.base_at(7.5, [1.0, 0.0])) + 0.010)
    assert used == pytest.approx(need * (1.0 + 1.0 / (0.0438 * 60.0)), rel=0.05)


def test_soda_ash_reaches_its_aim():
    """Its own carbon in the balance."""
    _, _, trial = tried(steady(bicarbonate()), reagents={"s": SODA_ASH}, base="s", aim=8.0, wishes=ONE,
                        site=QUIET)
    assert np.median(trial.course.ph[-1]) == pytest.approx(8.0, abs=0.1)


def test_bands_by_samples_or_by_the_file():
    """Two curves of one shape, 0.8 and 1.2 times their middle: standard deviation 0.2 sqrt 2; else as the file sets."""
    curves = tuple(MeasuredCurve(name, np.linspace(0.0, x, 9), np.linspace(3.0, 11.0, 9))
                   for name, x in (("a", 0.016), ("b", 0.024)))
    one = job(steady(acetic(curve=curves[0], base_eq_l=None), samples=curves), aim=7.0,
              trial={"buffer_sd": 0.07, "probe_offset_sd": 0.1})
    found = bands_of(basis_of(one))
    assert found.buffer_share == pytest.approx(0.2 * np.sqrt(2.0))
    assert found.offset_ph == 0.1
    single = replace(one, arrivals=(replace(one.arrivals[0], samples=curves[:1]),))
    assert bands_of(basis_of(single)).buffer_share == 0.07

"""Tanks and feeds of a design against flow times residence, the margin of the feeder, and balances of base."""

import numpy as np
import pytest
from ideal_wastes import reagent
from made_jobs import (
    ACID,
    CAUSTIC,
    DAY_S,
    GAS,
    MAGNESIA,
    SODA_ASH,
    batch,
    bicarbonate,
    course,
    job,
    steady,
    strong,
)
from numpy.testing import assert_allclose

from aquabuf.assess.tank.arrivals import Arrival
from aquabuf.assess.tank.basis import basis_of
from aquabuf.assess.tank.job import Daily, Spread
from aquabuf.assess.tank.layout import equalization_of, layout_of
from aquabuf.errors import InputError

MARGIN = 1.10  # of a feeder over the dose (printed: Water Treatment Plant Design)
WAVE = 6.0 * (1.0 + 0.4 * np.sin(np.arange(48) * 2.0 * np.pi / 24.0))  # two days, peak at hour 6


def laid(*arrivals, **options):
    """Basis and layout of a job."""
    basis = basis_of(job(*arrivals, **options))
    return basis, layout_of(basis)


def measured(flow, strength=None, waste=None, **options):
    """The same with a measured course of hours."""
    return laid(Arrival(waste=waste or strong(), mean_m3_h=None), profile=course(flow, strength=strength), **options)


# ---------------------------------------------------------------- equalization


def test_steady_stream_needs_no_equalization():
    """Nor does one whose file sets none."""
    assert "hardly vary" in equalization_of(basis_of(job(steady(strong()), wishes={"equalization_m3": None}))).words
    found = equalization_of(basis_of(job(steady(strong()))))
    assert found.words == "none, as the file sets it"
    assert found.volume_m3 == 0.0
    assert found.told == ()
    assert_allclose(found.out.flow_m3_h, 6.0)


@pytest.mark.parametrize("wish", [3.0, 40.0, 400.0])
def test_volume_that_the_file_sets_is_the_whole_tank(wish):
    """Content and flow together; a wave of 60 % needs 24/pi x 0.6 x 6 = 27.5 m3 for the flow.

    With 20 m3 for the flow 7.5 of 144 m3 a day pass over, 5.2 %; more than 5 % is told.
    """
    wave = 6.0 * (1.0 + 0.6 * np.sin(np.arange(48) * 2.0 * np.pi / 24.0))
    basis = basis_of(job(Arrival(waste=strong(), mean_m3_h=None), profile=course(wave), wishes={"equalization_m3": wish}))
    found = equalization_of(basis)
    assert found.volume_m3 == pytest.approx(wish)
    assert found.flow_m3 == pytest.approx(min(24.0 / np.pi * 0.6 * 6.0, 0.5 * wish), rel=0.01)
    assert ("passes over" in " ".join(found.told)) == (wish < 100.0)


def test_equalization_loses_no_base():
    """Over a course that leads back to its start as much base leaves as comes, of acid and alkaline hours."""
    rng = np.random.default_rng(2)
    basis = basis_of(job(Arrival(waste=strong(), mean_m3_h=None), profile=course(WAVE, strength=rng.uniform(0.2, 2.0, 48)),
                         wishes={"equalization_m3": 60.0}))
    found = equalization_of(basis)
    out = (found.out.flow_m3_h[:, 0] * found.base_eq_l[:, 0]).sum()
    assert out == pytest.approx((basis.course.flow_m3_h * basis.base_eq_l).sum(), rel=1e-6)
    assert np.ptp(found.base_eq_l) < 0.5 * np.ptp(basis.base_eq_l)


def test_equalization_that_is_not_worth_building_says_why():
    """Strength that stays the same for days is not mixed away by a day's volume."""
    slow = Spread(relative_sd=0.3, lasting_h=200.0)
    found = equalization_of(basis_of(job(steady(strong(), spread=slow), wishes={"equalization_m3": None})))
    assert found.volume_m3 == 0.0
    assert "none for the strength" in found.told[0]
    assert "of its swings" in found.told[0]


def test_acid_and_alkaline_batches_neutralize_each_other():
    """12 m3/d of each, 0.2 and 0.15 eq/L: 600 eq/d of base are left to be fed of 2400, and no acid in the mean."""
    acid, base = batch(strong(-0.2, name="a"), 6.0, 12.0, 0.5, 1.0), batch(strong(0.15, name="b"), 6.0, 12.0, 0.5, 2.0)
    basis, layout = laid(acid, base, acid="acid", wishes={"equalization_m3": 60.0})
    assert basis.needs["base"].mean_eq_h == pytest.approx(2400.0 / 24.0, rel=0.02)
    net = sum(sign * n.mean_eq_h for k, n in layout.needs.items() for sign in ((1.0 if k == "base" else -1.0),))
    assert net == pytest.approx(600.0 / 24.0, rel=0.02)
    assert layout.equalization.saved_eq_d > 0.0


# ---------------------------------------------------------------- tanks


def test_volumes_are_flow_times_residence():
    """10 min of caustic (equipment makers' rule) at 6 m3/h is 1 m3; each next tank 1.5 times as large."""
    _, layout = laid(steady(strong()), wishes={"stages": 3})
    assert_allclose([s.volume_m3 for s in layout.stages], [1.0, 1.5, 2.25])
    assert layout.stages[1].residence_min(3.0) == pytest.approx(30.0)
    _, layout = laid(steady(strong()), wishes={"stages": 1}, residence_min={"caustic soda": 25.0})
    assert layout.stages[0].volume_m3 == pytest.approx(2.5)


def test_tanks_are_sized_for_the_largest_flow():
    """Of a course from 3.6 to 8.4 m3/h."""
    _, layout = measured(WAVE, wishes={"stages": 1})
    assert layout.stages[0].volume_m3 == pytest.approx(8.4 / 6.0)
    assert (layout.peak_m3_h, layout.mean_m3_h) == (pytest.approx(8.4), pytest.approx(6.0))


@pytest.mark.parametrize("stages", [1, 2, 3, 4])
def test_number_of_tanks_that_is_set(stages):
    """The set points rise to the aim, the last is the aim."""
    basis, layout = laid(steady(strong()), wishes={"stages": stages})
    aims = [s.setpoint_ph for s in layout.stages]
    assert len(aims) == stages
    assert aims[-1] == basis.aim_ph
    assert aims == sorted(aims)
    assert (layout.aid is None) == (stages == 1)


def test_volumes_and_set_points_that_are_set():
    """They also tell how many tanks there are."""
    _, layout = laid(steady(strong()), wishes={"volumes_m3": (2.0, 5.0)})
    assert [s.volume_m3 for s in layout.stages] == [2.0, 5.0]
    _, layout = laid(steady(strong()), wishes={"set_points": (3.0, 4.0, 7.5)})
    assert [s.setpoint_ph for s in layout.stages] == [3.0, 4.0, 7.5]


def test_tanks_by_the_strongest_step_not_by_the_largest_load():
    """0.1 eq/L at 2 m3/h decides, though 0.03 eq/L at 10 m3/h is more per hour."""
    _, layout = measured([10.0, 2.0], strength=[3.0, 10.0])
    assert layout.curve.base_eq_l == pytest.approx(-0.1)
    assert layout.needs["base"].most_eq_h == pytest.approx(300.0, rel=1e-3)


def test_a_trickle_does_not_decide():
    """Nor does a standing hour, however strong."""
    _, layout = measured([6.0, 0.0, 0.01], strength=[1.0, 50.0, 50.0])
    assert layout.curve.base_eq_l == pytest.approx(-0.01)


# ---------------------------------------------------------------- feeds


def test_feeder_has_the_margin_over_the_largest_need():
    """84 eq/h at the peak of 8.4 m3/h and 0.01 eq/L; the acid feed only takes back twice the feed error of that."""
    _, layout = measured(WAVE, wishes={"stages": 1}, acid="acid")
    base, acid = (layout.stages[0].feeds[k] for k in ("base", "acid"))
    assert base.need.largest_eq_h == pytest.approx(84.0, rel=2e-3)
    assert base.need.size_eq_h == pytest.approx(MARGIN * 84.0, rel=2e-3)
    assert base.need.least_eq_h == pytest.approx(36.0, rel=2e-3)
    assert acid.trim
    assert not base.trim
    assert acid.need.largest_eq_h == pytest.approx(2.0 * 0.01 * 84.0, rel=2e-3)
    assert base.need.size_l_h == pytest.approx(MARGIN * 84.0 / (0.25 * 1280.0 / 39.997), rel=2e-3)


def test_later_tank_covers_what_the_one_before_may_leave():
    """Tanks at pH 3 and 7.5: from 10^-3 eq/L, give or take 1 % of the 0.009 eq/L before."""
    _, layout = laid(steady(strong()), wishes={"set_points": (3.0, 7.5)})
    first, second = (s.feeds["base"].need for s in layout.stages)
    left = -float(layout.curve.base_at(3.0))  # 10^-3 over the activity of the proton
    assert left == pytest.approx(1e-3, rel=0.15)
    assert first.largest_eq_h == pytest.approx(6e3 * (0.01 - left), rel=1e-3)
    assert second.largest_eq_h == pytest.approx(6e3 * (left + 0.01 * (0.01 - left)), rel=2e-3)
    assert second.least_eq_h == pytest.approx(6e3 * (left - 0.01 * (0.01 - left)), rel=2e-3)


def test_soda_ash_feeds_more_where_its_own_carbon_holds_base_back():
    """At pH 8.34 half of its equivalents stay bicarbonate: twice the acid, not once (facts 5.1, NaHCO3 1 of 2 eq)."""
    _, layout = laid(steady(strong()), reagents={"soda ash": SODA_ASH}, base="soda ash", aim=8.34, wishes={"stages": 1})
    assert layout.stages[0].feeds["base"].need.largest_eq_h == pytest.approx(2.0 * 60.0, rel=0.03)


def test_soda_ash_in_two_tanks_adds_up_to_the_same():
    """At pH 4 hardly any is held back, at 8.34 half: the second tank makes up for both."""
    _, layout = laid(steady(strong()), reagents={"soda ash": SODA_ASH}, base="soda ash", aim=8.34,
                     wishes={"set_points": (4.0, 8.34)})
    first, second = (s.feeds["base"].need.largest_eq_h for s in layout.stages)
    assert first == pytest.approx(60.0, rel=0.03)
    assert second == pytest.approx(60.0 + 0.01 * first, rel=0.03)


def test_slow_reagent_is_fed_for_what_dissolves():
    """k t / (1 + k t) in a stirred tank, 0.0438 per min (Tang et al. 2020) and 60 min: 72 %."""
    _, layout = laid(steady(strong()), reagents={"m": MAGNESIA}, base="m", aim=7.0, wishes={"stages": 1})
    dissolves = 0.0438 * 60.0 / (1.0 + 0.0438 * 60.0)
    assert layout.stages[0].feeds["base"].need.largest_eq_h == pytest.approx(60.0 / dissolves, rel=2e-3)


def test_less_than_the_window_tolerates_need_not_be_fed():
    """0.01 mol/L of carbon holds 0.0082 eq/L at pH 7 and 0.0031 at pH 6: an hour that lacks 0.0006 eq/L sets no least
    feed, one that lacks 0.0062 does."""
    for base, least in ((0.0076, 6e3 * 0.0182), (0.002, 6e3 * 0.0062)):
        profile = course([6.0, 6.0], base_eq_l={"": np.array([-0.010, base])})
        _, layout = laid(Arrival(waste=bicarbonate(), mean_m3_h=None), profile=profile, aim=7.0, wishes={"stages": 1})
        assert layout.stages[0].feeds["base"].need.least_eq_h == pytest.approx(least, rel=0.05)


def test_accuracy_is_judged_where_the_feed_is_coarsest():
    """A step of 0.1 % of a feeder for 300 eq/h is 3 times as much in a third of the water."""
    _, layout = measured([9.0, 3.0], waste=bicarbonate(), wishes={"stages": 1}, site={"resolution": 0.02})
    feed = layout.stages[0].feeds["base"]
    assert feed.judged_m3_h == 3.0
    assert feed.accuracy.span_eq_l == pytest.approx(feed.need.size_eq_h / 3e3)
    assert feed.accuracy.has == pytest.approx(0.02 + 0.01 / (3.0 * MARGIN), rel=1e-3)


def test_gas_has_no_line_and_no_water():
    """Carbon dioxide alone for an alkaline waste."""
    _, layout = laid(steady(strong(0.05)), reagents={"gas": GAS}, base=None, aim=8.34, wishes={"stages": 1})
    feed = layout.stages[0].feeds["acid"]
    assert feed.line is None
    assert feed.line_s == 2.0
    assert feed.need.size_l_h == 0.0
    assert feed.need.largest_eq_h == pytest.approx(300.0, rel=0.02)


def test_dry_feed():
    """Soda ash fed dry brings no water either."""
    dry = reagent("soda ash", dry=True)
    _, layout = laid(steady(strong()), reagents={"dry": dry}, base="dry", aim=7.0, wishes={"stages": 1})
    assert layout.stages[0].feeds["base"].line is None


def test_both_reagents_where_the_stream_swings():
    """Acid and alkaline hours without equalization: both feeds are main ones."""
    _, layout = laid(batch(strong(-0.02, name="a"), 6.0, 2.0, 1.0), batch(strong(0.01, name="b"), 6.0, 2.0, 1.0, 1.0),
                     acid="acid", reagents={"caustic": CAUSTIC, "acid": ACID}, wishes={"stages": 1})
    feeds = layout.stages[0].feeds
    assert not feeds["base"].trim
    assert not feeds["acid"].trim
    assert feeds["base"].need.largest_eq_h == pytest.approx(120.0, rel=0.02)
    assert feeds["acid"].need.largest_eq_h == pytest.approx(60.0, rel=0.02)


def test_alkaline_hours_without_acid_are_refused_and_small_ones_are_not():
    """The message names kind and mean; a brief alkaline trickle is left to a warning."""
    both = (batch(strong(-0.02, name="a"), 6.0, 2.0, 1.0), batch(strong(0.01, name="b"), 6.0, 2.0, 1.0, 1.0))
    with pytest.raises(InputError, match=r"asks for acid to reach pH .*, 30 eq/h on average, .* the file names no acid"):
        laid(*both, reagents={"caustic": CAUSTIC})
    few = course([6.0] * 2000, base_eq_l={"": np.where(np.arange(2000) == 7, 0.001, -0.01)})
    _, layout = laid(Arrival(waste=strong(), mean_m3_h=None), profile=few, reagents={"caustic": CAUSTIC})
    assert set(layout.stages[0].feeds) == {"base"}
    assert layout.needs["acid"].most_eq_h == pytest.approx(6.0, rel=0.01)


def test_wastes_that_cancel_out_are_refused():
    """Acid and base of the same size in a week's tank leave the bicarbonate that comes with both."""
    swings = course([6.0] * 24, base_eq_l={"": 0.001 + np.tile([-0.01, 0.01], 12)})
    with pytest.raises(InputError, match=r"cancel out in its 1,000 m³ and leave it at pH .*, within 5 to 9. That tank"):
        laid(Arrival(waste=bicarbonate(0.001, 0.0), mean_m3_h=None), acid="acid", window=(5.0, 9.0), profile=swings,
             wishes={"equalization_m3": 1000.0})


def test_daily_cycle_is_evened_out():
    """Swing of 60 % about 6 m3/h, peak of 1.6 times the mean: 24/pi x 0.6 x 6 m3 for the flow, drawn at the mean."""
    daily = steady(strong(), daily=Daily(swing=0.6, peak_h=12.0))
    found = equalization_of(basis_of(job(daily, wishes={"equalization_m3": None})))
    assert found.flow_m3 == pytest.approx(24.0 / np.pi * 0.6 * 6.0, rel=0.02)
    assert found.draw_m3_h == pytest.approx(6.0, rel=0.01)
    assert found.out.time_s[-1] < 14.0 * DAY_S


# ---------------------------------------------------------------- what beats another tank


def test_trim_reagent_in_place_of_the_last_tank():
    """Two tanks: the trim covers the error of the whole demand both ways, 2 e D, and leaves e of that."""
    basis, found = laid(steady(strong(-0.1)), wishes={"stages": 2})
    demand = float(basis.chem.readout.base_at(basis.aim_ph, [1.0, 0.0])) + 0.1
    assert_allclose(found.trim.span_eq_l, 2.0 * 0.01 * demand, rtol=1e-6)
    assert_allclose(found.trim.left_eq_l, 0.01 * 2.0 * 0.01 * demand, rtol=1e-6)
    assert found.trim.works == (found.trim.left_eq_l <= found.window.tolerance_eq_l(found.curve))


def test_trim_reagent_of_a_longer_train():
    """Three tanks: the tank that it would stand in sees what the first one passes on."""
    basis, found = laid(steady(strong(-0.1)), wishes={"stages": 3})
    at = [float(basis.chem.readout.base_at(ph, [1.0, 0.0])) for ph in (found.choice.set_points[0], basis.aim_ph)]
    assert_allclose(found.trim.span_eq_l, 2.0 * 0.01 * (at[1] - at[0]), rtol=1e-3)


def test_no_trim_reagent_for_one_tank_or_a_gas():
    """Nothing to do without; a gas is not thinned."""
    assert laid(steady(bicarbonate()), wishes={"stages": 1})[1].trim is None
    _, gas = laid(steady(strong(0.02)), reagents={"gas": GAS}, base=None, acid="gas", wishes={"stages": 2},
                  window=(6.5, 9.0))
    assert gas.trim is None

"""Number of tanks and set points against printed tables for strong acid, and against closed forms."""

from itertools import pairwise

import numpy as np
import pytest
from ideal_wastes import NOTHING, PK_CARBONIC, ideal, protons_lost
from numpy.testing import assert_allclose

from aquabuf.assess.tank.stages import (
    Window,
    choose_stages,
    curve_of,
    curve_of_readout,
    opinions,
    remaining_share,
    residual_eq_l,
    residual_ph,
    set_points,
    stages_by_residual,
    stages_within_turndown,
)
from aquabuf.engine.readout import GRID_PH
from aquabuf.errors import InputError

ERROR, TURNDOWN = 0.01, 100.0


def strong(ph):
    """Strong acid or base that has this pH: base is Kw/H - H, Kw 1e-14."""
    return curve_of_readout(ideal(NOTHING), 10.0 ** (ph - 14) - 10.0**-ph, [1.0, 0.0], 1)


def carbonated(ph, carbon):
    """The same with carbon in it."""
    readout = ideal(protons_lost(PK_CARBONIC) * carbon)
    return curve_of_readout(readout, float(readout.base_at(ph, [1.0, 0.0])), [1.0, 0.0], 1)


# what one tank leaves

TABLE = {1: ((4.0, 10.0), (3.3, 10.7), (3.0, 11.0), (2.7, 11.3)), 2: ((5.0, 9.0), (4.3, 9.7), (4.0, 10.0), (3.7, 10.3)),
         3: ((6.0, 8.0), (5.3, 8.7), (5.0, 9.0), (4.7, 9.3))}


@pytest.mark.parametrize("ph", TABLE)
def test_residual_ph_of_one_tank(ph):
    """Facts, section 4: residual after one stage for feed pH 1 to 3, rounded to 0.1; neutral aim."""
    for error, printed in zip((0.001, 0.005, 0.01, 0.02), TABLE[ph], strict=True):
        assert_allclose(residual_ph(strong(ph), 7.0, error), printed, atol=0.051)


@pytest.mark.parametrize(("error", "low", "high"), [(0.01, 4.0, 10.0), (0.001, 5.0, 9.0)])
def test_check_case_8(error, low, high):
    """Facts, check case 8: feed pH 2, strong, within 0.01."""
    assert_allclose(residual_ph(strong(2.0), 7.0, error), (low, high), atol=0.01)


def test_residual_in_a_closed_form():
    """H - Kw/H = rest, solved by the quadratic; two tanks leave the square of the error."""
    rest = ERROR**2 * (1e-1 - 1e-13)
    h = 0.5 * (rest + np.sqrt(rest**2 + 4e-14))
    low, high = residual_ph(strong(1.0), 7.0, ERROR, 2)
    assert_allclose((low, high), (-np.log10(h), 14.0 + np.log10(h)), atol=1e-4)


def test_residual_beyond_the_curve_is_unknown():
    """Residual beyond the curve is unknown."""
    curve = curve_of(lambda ph: 10.0 ** (ph - 14) - 10.0**-ph, -9.9)
    assert np.isnan(residual_ph(curve, 14.9, 0.9)[1])


# number of tanks

PRINTED = {0: (2, 3, 4, 5), 1: (2, 3, 3, 4), 2: (2, 2, 3, 4), 3: (1, 2, 2, 3), 4: (1, 1, 2, 2)}


@pytest.mark.parametrize("ph", PRINTED)
def test_stages_to_ph_6(ph):
    """Facts, section 4: stages that leave at most 1e-6 eq/L, for errors of 0.1, 1, 2 and 5 %."""
    assert tuple(stages_by_residual(10.0**-ph, 1e-6, e) for e in (0.001, 0.01, 0.02, 0.05)) == PRINTED[ph]


def test_sign_of_the_demand_does_not_matter():
    """Sign of the demand does not matter."""
    assert stages_by_residual(-0.1, 1e-6, 0.01) == stages_by_residual(0.1, 1e-6, 0.01) == 3
    assert_allclose(residual_eq_l([-0.1, 0.1], 0.01, 2), 1e-5, rtol=1e-12)


def test_nothing_to_do_is_one_tank():
    """Nothing to do is one tank."""
    assert stages_by_residual(0.0, 1e-6, 0.01) == 1
    assert stages_within_turndown(0.0, 1e-6, 0.01, 50.0) == 1


@pytest.mark.parametrize(("error", "turndown"), [(0.01, 3.0), (0.001, 50.0), (0.05, np.inf)])
def test_remaining_share_by_hand(error, turndown):
    """The tank gets 1 and leaves r; the next feeder sees r +- e (1 - r), whose ratio is the turndown."""
    share = remaining_share(error, turndown)
    r = (share - error) / (1.0 - error)
    smallest = r - error * (1.0 - r)
    assert_allclose(smallest * turndown if np.isfinite(turndown) else 0.0, share if np.isfinite(turndown) else smallest,
                    rtol=1e-9, atol=1e-15)


def test_turndown_may_ask_for_a_tank_more():
    """0.05 eq/L at 2 %: by ideal shares 2e-5 and 4e-7 after two and three.

    A turndown of 1.5 has q = 5: 0.109 goes on at least, and never more than e (q + 1) = 0.12.
    """
    assert 0.02 * 0.05 * (0.12 / 1.1) ** 2 > 5e-6 > 0.02 * 0.05 * 0.12**3
    assert stages_by_residual(0.05, 5e-6, 0.02) == 3
    assert stages_within_turndown(0.05, 5e-6, 0.02, 1.5) == 4


def test_no_number_of_tanks_does():
    """No number of tanks does."""
    assert stages_within_turndown(1.0, 1e-6, 0.5, 50.0) is None


# set points


@pytest.mark.parametrize("ph", [0.0, 1.0, 2.0, 12.0, 13.0])
def test_set_points_keep_turndown_and_sign(ph):
    """Worked through with every tank off by its error, both ways: what the next feeder must give keeps its sign and ratio."""
    curve = strong(ph)
    window = Window.halving(curve, 6.0, 9.0)
    tanks = stages_within_turndown(float(curve.demand(window.aim)), window.tolerance_eq_l(curve), ERROR, TURNDOWN)
    points = set_points(curve, window, tanks, ERROR, TURNDOWN)
    sign = np.sign(float(curve.demand(window.aim)))
    comes = np.array([curve.base_eq_l, curve.base_eq_l])
    for i, point in enumerate(points):
        at = float(curve.base_at(point))
        dose = sign * (at - comes)
        assert (dose > 0.0).all()
        if i:
            assert dose.max() / dose.min() <= TURNDOWN * (1 + 1e-9)
        worst = dose.max() * ERROR
        comes = np.array([at - worst, at + worst])
    low, high = curve.ph_of(comes)
    assert 6.0 <= low <= high <= 9.0
    assert points[-1] == window.aim


def test_tanks_to_spare_keep_every_feeder_busy():
    """pK of carbonate just inside the aim: the first tank goes as near as it may, and must not starve the second."""
    curve, error, turndown = carbonated(2.0, 0.02), 0.02, 2.0
    points = set_points(curve, Window(low=5.0, high=9.0, aim=6.45), 3, error, turndown)
    comes = np.array([curve.base_eq_l, curve.base_eq_l])
    for i, at in enumerate(curve.base_at(points)):
        dose = at - comes
        assert (dose > 0.0).all()
        if i:
            assert dose.max() / dose.min() <= turndown * (1 + 1e-3)
        comes = at + error * dose.max() * np.array([-1.0, 1.0])


def test_a_train_too_short_leaves_the_least():
    """Every later feeder is then asked for exactly its turndown, the error of all tanks before it included."""
    curve, error, turndown = strong(0.0), 0.05, 3.0
    points = set_points(curve, Window.halving(curve, 6.0, 9.0), 3, error, turndown)
    comes = np.array([curve.base_eq_l, curve.base_eq_l])
    for i, at in enumerate(curve.base_at(points)):
        dose = at - comes
        if i:
            assert_allclose(dose.max() / dose.min(), turndown, rtol=1e-3)
        comes = at + error * dose.max() * np.array([-1.0, 1.0])


def test_set_point_settles_on_a_buffer():
    """Waste with much carbonate: the aim in between goes to the pK, where the curve is flattest."""
    first, _ = set_points(carbonated(1.5, 0.02), Window(low=6.5, high=9.5, aim=8.3), 2, 0.1, TURNDOWN)
    assert_allclose(first, PK_CARBONIC[0], atol=0.02)


def test_one_tank_aims_at_the_window():
    """One tank aims at the window."""
    curve = strong(3.0)
    assert set_points(curve, Window(low=6.0, high=9.0, aim=7.5), 1, ERROR, TURNDOWN) == (7.5,)


# curve and window


def test_halving_in_a_closed_form():
    """Strong acid, window 6 to 9: base is -1e-6 + 1e-8 and 1e-5 - 1e-9; the middle on the axis of reagent."""
    window = Window.halving(strong(2.0), 6.0, 9.0)
    middle = 0.5 * (1e-8 - 1e-6 + 1e-5 - 1e-9)
    h = 0.5 * (-middle + np.sqrt(middle**2 + 4e-14))
    assert_allclose(window.aim, -np.log10(h), atol=1e-3)
    assert_allclose(window.tolerance_eq_l(strong(2.0)), 0.5 * 1.0990e-5, rtol=1e-3)


def test_curve_from_a_function_and_from_tables_agree():
    """Curve from a function and from tables agree."""
    one = curve_of(lambda ph: 10.0 ** (ph - 14) - 10.0**-ph, -0.01)
    assert_allclose(one.base, strong(2.0).base, rtol=1e-9, atol=1e-20)
    assert_allclose(one.inlet_ph, 2.0, atol=1e-4)
    assert_allclose(one.buffer(7.0), 2 * np.log(10) * 1e-7, rtol=1e-3)
    assert one.carbon is None
    assert_allclose(np.interp(PK_CARBONIC[0], GRID_PH, strong(2.0).carbon), 0.5, atol=1e-3)


def test_refusals():
    """Each message tells the rule, the value and the remedy."""
    with pytest.raises(InputError, match=r"must rise with pH all along; found a fall at pH -1\.00"):
        curve_of(lambda ph: -ph, 0.0)
    with pytest.raises(InputError, match="must rise with pH all along; found a value that is no number"):
        curve_of(lambda ph: np.where(ph > 14.0, np.nan, ph), 0.0)
    with pytest.raises(InputError, match=r"must lie on its curve, .* found 100 eq/L"):
        curve_of(lambda ph: 10.0 ** (ph - 14) - 10.0**-ph, 100.0)
    with pytest.raises(InputError, match="the aim must lie inside the window; found pH 5 in 6 to 9"):
        Window(low=6.0, high=9.0, aim=5.0)
    with pytest.raises(InputError, match="feed error must be a share above 0 and below 1; found 1"):
        residual_eq_l(1.0, 1.0)
    with pytest.raises(InputError, match="the tolerance must be above 0 eq/L; found 0"):
        stages_by_residual(1.0, 0.0, 0.01)
    with pytest.raises(InputError, match="the turndown must be above 1; found 1"):
        remaining_share(0.01, 1.0)


# rules beside each other


def told(ph, flow=20.0, **kwargs):
    """Number of tanks by each rule, by the key of the rule."""
    curve = strong(ph)
    given = {"error": ERROR, "turndown": TURNDOWN} | kwargs
    return {o.rule.key: o for o in opinions(curve, Window(low=6.0, high=9.0, aim=7.0), flow_m3_h=flow, **given)}


@pytest.mark.parametrize(("ph", "key", "tanks"), [
    (5.0, "one tank", 1), (10.0, "one tank", 1), (3.0, "two tanks", 2), (11.5, "two tanks", 2), (1.0, "three tanks", 3),
    (13.0, "three tanks", 3)])
def test_tanks_by_inlet_ph(ph, key, tanks):
    """1, 2, 3 tanks for 4 to 10, 2 to 12, 0 to 14."""
    assert told(ph)[key].tanks == tanks


def test_distance_rule():
    """An extra stage beyond 2 units of pH from the band."""
    assert told(4.0)["distance"].tanks == 1
    assert told(3.9)["distance"].tanks == 2
    assert "recalled" not in told(3.9)["distance"].source


@pytest.mark.parametrize(("turndown", "ph", "tanks"), [(1000.0, 3.0, 1), (1000.0, 2.9, 2), (1e5, 1.0, 1), (50.0, 2.0, 3)])
def test_rangeability(turndown, ph, tanks):
    """1000:1 takes out 3 units and 100,000:1 takes out 5; 50:1 only 1.7, so that 4 units take three."""
    assert told(ph, turndown=turndown)["rangeability"].tanks == tanks


def test_continuous_flow_asks_for_two():
    """Continuous flow asks for two."""
    found = told(5.0)["continuous"]
    assert found.tanks == 2
    assert found.at_least


@pytest.mark.parametrize(("ph", "flow", "tanks"), [(1.0, 11.4, 1), (3.0, 50.0, 1), (2.9, 11.5, 2), (9.0, 5.0, 1)])
def test_limits_of_a_single_tank(ph, flow, tanks):
    """One tank up to 11.4 m3/h or 3 units of pH."""
    assert told(ph, flow)["single flow"].tanks == tanks


def test_a_rule_that_finds_no_number_says_so():
    """A rule that finds no number says so."""
    found = told(0.0, error=0.5)["within turndown"]
    assert found.tanks == 0
    assert "no number up to 4 does" in found.words


# the choice


def chosen(ph, **kwargs):
    """The choice for a strong acid and window 6 to 9."""
    curve = strong(ph)
    given = {"error": ERROR, "turndown": TURNDOWN, "flow_m3_h": 20.0} | kwargs
    return choose_stages(curve, Window.halving(curve, 6.0, 9.0), **given)


@pytest.mark.parametrize(("ph", "tanks"), [(0.0, 3), (1.0, 3), (2.0, 2), (3.0, 2), (4.0, 1)])
def test_choice_by_inlet_ph(ph, tanks):
    """Facts, section 4: 3/3/2/2/1 tanks at 1 % for pH 0 to 4."""
    found = chosen(ph)
    assert found.tanks == tanks == len(found.set_points)
    assert found.reaches
    assert found.left_eq_l <= found.tolerance_eq_l


def test_little_to_spare_takes_two():
    """5 % of 1e-4 eq/L is 0.95 of the tolerance: one would just do."""
    found = chosen(4.0, error=0.05)
    assert found.tanks == 2
    assert "one would just do" in found.words
    assert "MIL-HDBK" in found.words


def test_left_by_hand():
    """Strong acid, three set points given: error on what each tank doses, the error before it included."""
    found = chosen(1.0, wanted=3, aims=[2.0, 4.0, 8.0])
    base = [-0.1, -0.01, -1e-4, 1e-6]
    rest = 0.0
    for before, after in pairwise(base):
        rest = ERROR * (after - before + rest)
    assert_allclose(found.left_eq_l, rest, rtol=2e-3)
    assert found.words == "3 tanks: as set"
    assert found.set_points == (2.0, 4.0, 8.0)


def test_too_few_tanks_do_not_reach():
    """Too few tanks do not reach."""
    found = chosen(1.0, wanted=1)
    assert not found.reaches
    assert_allclose(found.left_eq_l, 1e-3, rtol=1e-3)


def test_no_number_is_an_answer():
    """No number is an answer."""
    found = chosen(0.0, error=0.5)
    assert not found.reaches
    assert "no number up to 4" in found.words


def test_set_points_must_fit():
    """Set points must fit."""
    with pytest.raises(InputError, match=r"one set point per tank \(2\); found 1"):
        chosen(2.0, wanted=2, aims=[7.0])
    with pytest.raises(InputError, match="the aim must lie inside the window; found pH 10"):
        chosen(2.0, wanted=2, aims=[4.0, 10.0])

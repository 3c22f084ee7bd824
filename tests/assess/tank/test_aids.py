"""Bicarbonate and trim feeds in place of a tank, checked by titrating with what they say."""

import numpy as np
import pytest
from ideal_wastes import NOTHING, PK_CARBONIC, ideal, protons_lost
from numpy.testing import assert_allclose

from aquabuf.assess.tank.aids import aids_words, bicarbonate_aid, trim_aid, with_bicarbonate
from aquabuf.assess.tank.stages import Window, curve_of, curve_of_readout, residual_ph
from aquabuf.engine.readout import GRID_PH
from aquabuf.errors import InputError

ERROR = 0.01


def strong(ph):
    """Strong acid or base that has this pH."""
    return curve_of_readout(ideal(NOTHING), 10.0 ** (ph - 14) - 10.0**-ph, [1.0, 0.0], 1)


def held(ph):
    """Base held by a mole of carbon, closed form."""
    r1, r2 = 10.0 ** (ph - PK_CARBONIC[0]), 10.0 ** (ph - PK_CARBONIC[1])
    return (r1 + 2 * r1 * r2) / (1 + r1 + r1 * r2)


@pytest.mark.parametrize("ph", [1.0, 2.0, 3.0, 12.0, 13.0])
@pytest.mark.parametrize("tanks", [1, 2])
def test_bicarbonate_fills_the_window_exactly(ph, tanks):
    """Balance written out: |D| e^n of waste with bicarbonate is half the window, or none is needed."""
    aid = bicarbonate_aid(strong(ph), 6.0, 9.0, ERROR, tanks)
    x = aid.bicarbonate_eq_l
    ends = np.array([10.0 ** (p - 14) - 10.0**-p + x * held(p) for p in (6.0, 9.0)])
    demand = ends.mean() - (10.0 ** (ph - 14) - 10.0**-ph + x)
    tolerance = 0.5 * np.diff(ends)[0]
    if x > 0.0:
        assert_allclose(ERROR**tanks * abs(demand), tolerance, rtol=1e-3)
    else:
        assert ERROR**tanks * abs(demand) <= tolerance
    assert_allclose(aid.demand_eq_l, demand, rtol=1e-3)
    assert_allclose(aid.tolerance_eq_l, tolerance, rtol=2e-3)


def test_one_tank_with_bicarbonate_ends_on_the_window():
    """What the aid says, titrated: residual pH of one tank is 6 and 9."""
    curve = strong(2.0)
    aid = bicarbonate_aid(curve, 6.0, 9.0, ERROR)
    low, high = residual_ph(with_bicarbonate(curve, aid.bicarbonate_eq_l), aid.aim, ERROR)
    assert_allclose((low, high), (6.0, 9.0), atol=0.01)
    assert_allclose(aid.kg_m3, aid.bicarbonate_eq_l * (22.98977 + 1.00794 + 12.011 + 3 * 15.9994), rtol=1e-4)
    assert_allclose(aid.share_of_demand, aid.bicarbonate_eq_l / 0.01, rtol=2e-3)


def test_bicarbonate_of_its_own_has_the_ph_of_bicarbonate():
    """Equal parts of base and carbon: pH half way between the pK values."""
    water = curve_of(lambda ph: 10.0 ** (ph - 14) - 10.0**-ph, 0.0, lambda ph: protons_lost(PK_CARBONIC))
    assert_allclose(with_bicarbonate(water, 0.1).inlet_ph, sum(PK_CARBONIC) / 2, atol=0.01)


def test_more_than_a_tenth_is_not_worth_it():
    """At an error of 5 % bicarbonate is about 2.7 times the error: 13 % of the demand."""
    aid = bicarbonate_aid(strong(2.0), 6.0, 9.0, 0.05)
    assert 0.1 < aid.share_of_demand < 0.15
    assert not aid.worth
    assert "not worth" in aid.words
    assert bicarbonate_aid(strong(2.0), 6.0, 9.0, 0.01).worth


def test_no_amount_does_where_bicarbonate_buffers_nothing():
    """Narrow window about pH 4 in an alkaline waste: every mole asks for acid and buffers almost nothing."""
    aid = bicarbonate_aid(strong(12.0), 3.99, 4.01, 0.05)
    assert np.isnan(aid.bicarbonate_eq_l)
    assert "no amount" in aid.words


def test_carbon_must_be_known():
    """Carbon must be known."""
    bare = curve_of(lambda ph: 10.0 ** (ph - 14) - 10.0**-ph, -0.01)
    with pytest.raises(InputError, match="bicarbonate needs the base that carbon holds along the curve"):
        with_bicarbonate(bare, 1e-3)
    assert GRID_PH.shape == with_bicarbonate(strong(2.0), 1e-3).base.shape


@pytest.mark.parametrize(("ph", "works"), [(1.0, False), (2.0, True)])
def test_trim_feed(ph, works):
    """Span of twice e |D|; leaves 2 e^2 |D|: 2e-5 and 2e-6 eq/L against half of 1.099e-5."""
    curve = strong(ph)
    aid = trim_aid(curve, Window.halving(curve, 6.0, 9.0), ERROR, 5.0)
    assert_allclose(aid.span_eq_l, 2 * ERROR * 10.0**-ph, rtol=1e-3)
    assert_allclose(aid.left_eq_l, 2 * ERROR**2 * 10.0**-ph, rtol=1e-3)
    assert_allclose(aid.tolerance_eq_l, 0.5 * 1.099e-5, rtol=1e-3)
    assert aid.works is works
    assert_allclose((aid.thinned, aid.normality_eq_l), (50.0, 0.1), rtol=1e-9)


def test_trim_feed_behind_a_tank():
    """Trim feed behind a tank."""
    curve = strong(1.0)
    aid = trim_aid(curve, Window.halving(curve, 6.0, 9.0), ERROR, 1.0, goes_in_eq_l=2e-3)
    assert_allclose(aid.left_eq_l, 4e-7, rtol=1e-9)
    assert aid.works


@pytest.mark.parametrize(("ph", "error", "said"), [
    (4.0, 0.01, "neither bicarbonate nor a trim feed is needed"), (2.0, 0.01, "a trim feed beats another tank"),
    (1.0, 0.01, "bicarbonate beats another tank"), (1.0, 0.05, "another tank: neither")])
def test_what_beats_another_tank(ph, error, said):
    """What beats another tank."""
    curve = strong(ph)
    trim = trim_aid(curve, Window.halving(curve, 6.0, 9.0), error, 1.0)
    assert aids_words(bicarbonate_aid(curve, 6.0, 9.0, error), trim).startswith(said)


def test_without_carbon_only_the_trim_feed_is_judged():
    """Without carbon only the trim feed is judged."""
    curve = strong(2.0)
    assert aids_words(None, trim_aid(curve, Window.halving(curve, 6.0, 9.0), ERROR, 1.0)).startswith("a trim feed beats")


def test_trim_needs_a_strength():
    """Trim needs a strength."""
    curve = strong(2.0)
    with pytest.raises(InputError, match=r"normality of the reagent .* must be above 0; found 0"):
        trim_aid(curve, Window.halving(curve, 6.0, 9.0), ERROR, 0.0)

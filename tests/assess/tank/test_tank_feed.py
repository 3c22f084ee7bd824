"""Reagent feed against the printed gain example, closed forms and geometry."""

import numpy as np
import pytest
from ideal_wastes import NOTHING, PK_CARBONIC, diluted_caustic, ideal, protons_lost, reagent
from numpy.testing import assert_allclose

from aquabuf.assess.tank.demand import aims_of, demands, loads_of
from aquabuf.assess.tank.feed import (
    accuracy,
    feed_need,
    gain_ph_per_pct,
    line,
    need_of_demands,
    resolved_ph,
    span_eq_l,
    split_range,
    strength_for,
    turndown_words,
    window_share,
)
from aquabuf.assess.tank.stages import Window, curve_of, curve_of_readout
from aquabuf.errors import InputError

# Gain example of the facts, section 4: 100 L/min of waste, 1.0 N reagent, span 2.0 L/min
SPAN = 0.02
PK_PHOSPHORIC = (2.148, 7.198, 12.35)


def water(ph=2.0, pks=(), mol_l=0.0):
    """A strong acid of this pH with a weak one in it."""
    held = protons_lost(pks) * mol_l if pks else NOTHING
    readout = ideal(held)
    return curve_of_readout(readout, float(readout.base_at(ph, [1.0, 0.0])), [1.0, 0.0], 1)


def test_span_of_the_example():
    """Span of the example."""
    assert_allclose(span_eq_l(120.0, 1.0, 6.0), SPAN, rtol=1e-12)


@pytest.mark.parametrize(("pks", "mol_l", "gain"), [((), 0.0, 434.0), (PK_CARBONIC, 1e-3, 0.577), (PK_PHOSPHORIC, 0.0333, 0.011)])
def test_gain_of_the_example(pks, mol_l, gain):
    """pH per % of output at pH 7: 434, 0.577, 0.011."""
    assert_allclose(gain_ph_per_pct(water(2.0, pks, mol_l), 7.0, SPAN), gain, rtol=3e-3 if gain > 0.02 else 0.05)


@pytest.mark.parametrize(("share", "low", "high"), [
    (0.001, 4.70, 9.30), (0.005, 4.00, 10.00), (0.01, 3.70, 10.30), (0.02, 3.40, 10.60)])
def test_resolution_of_the_example(share, low, high):
    """pH about neutral for a resolution of 0.1, 0.5, 1, 2 % of span."""
    assert_allclose(resolved_ph(water(), 7.0, SPAN, share), (low, high), atol=0.006)


def test_window_of_the_example():
    """pH 6 to 9 is 0.055 % of the span."""
    assert_allclose(100 * window_share(water(), 6.0, 9.0, SPAN), 0.055, rtol=2e-3)


# range


def test_need_over_flow_and_strength():
    """Two strengths and two flows: 1e3 L/m3 x eq/L x m3/h; the feeder is a tenth larger (10 % printed margin)."""
    need = feed_need("acid", [[0.01], [0.2]], [[5.0, 20.0]], 2.0)
    assert_allclose((need.least_eq_h, need.largest_eq_h), (50.0, 4000.0))
    assert_allclose((need.least_l_h, need.largest_l_h, need.turndown), (25.0, 2000.0, 80.0))
    assert_allclose((need.size_l_h, need.device_turndown), (2200.0, 88.0))


def test_a_feeder_may_rest():
    """A feeder may rest."""
    assert feed_need("acid", [0.0, 0.1], 1.0, 1.0).least_eq_h == pytest.approx(100.0)


def test_need_of_the_demand_table():
    """Acid 0.01 and 0.03 N at 10 and 30 m3/h with dilute caustic: 100 to 900 eq/h at the set point, by stoichiometry."""
    readout, caustic = ideal(NOTHING), diluted_caustic(5.0)
    rows = demands(readout, loads_of((10.0, 20.0, 30.0), (1.0, 2.0, 3.0), -0.01, [1.0, 0.0]), aims_of(6.0, 7.0, 9.0)[:1],
                   [caustic])
    need = need_of_demands(rows)
    assert_allclose((need.least_eq_h, need.largest_eq_h), (100.0, 900.0), rtol=1e-4)
    assert_allclose(need.largest_l_h, 180.0, rtol=1e-4)


def test_one_reagent_at_a_time():
    """One reagent at a time."""
    readout = ideal(NOTHING)
    rows = demands(readout, loads_of((1.0, 1.0, 1.0), (1.0, 1.0, 1.0), -0.01, [1.0, 0.0]), aims_of(6.0, 7.0, 9.0)[:1],
                   [diluted_caustic(5.0), reagent("caustic potash", 0.45)])
    with pytest.raises(InputError, match="a feeder serves one reagent; found 2: caustic potash, caustic soda"):
        need_of_demands(rows)
    with pytest.raises(InputError, match="a feeder serves one reagent; found 0"):
        need_of_demands([])


@pytest.mark.parametrize(("largest", "serves"), [
    (20.0 / 1.1, (True, True, True)), (49.0 / 1.1, (True, True, True)), (190.0 / 1.1, (True, False, True)),
    (900.0 / 1.1, (False, False, True)), (2000.0, (False, False, False))])
def test_turndown_of_devices(largest, serves):
    """Printed: pump 20:1 to 200:1, valve with positioner 50:1, two split-range valves 1000:1."""
    need = feed_need("caustic", [1e-3, 1e-3 * largest], 1.0, 1.0)
    found = turndown_words(need)
    assert [r.key for r, _, _ in found] == ["metering pump", "valve", "split valves"]
    assert tuple(ok for _, ok, _ in found) == serves
    assert ("serves if a good one" in found[0][2]) == (20.5 / 1.1 < largest < 201.0 / 1.1)


# accuracy


def test_accuracy_of_one_feeder():
    """Strong acid 0.01 N, feed good to 1 % of the dose: 1e-4 of half 1.099e-5 eq/L; residual pH 4 and 10 about neutral."""
    found = accuracy(water(), Window(low=6.0, high=9.0, aim=7.0), SPAN, repeatability=0.01)
    assert_allclose(found.has, 1e-4 / SPAN, rtol=1e-4)
    assert_allclose(found.needed, 1e-6 * (1 - 1e-2) / SPAN, rtol=1e-3)  # to pH 6, 1e-6 - 1e-8
    assert_allclose(found.window, 5.495e-4, rtol=1e-3)
    assert_allclose((found.lowest_ph, found.highest_ph), (4.0, 10.0), atol=0.01)
    assert not found.holds
    assert "it cannot hold" in found.words
    assert "no single pump or valve has it" in found.class_words


def test_resolution_adds_to_repeatability():
    """Resolution adds to repeatability."""
    found = accuracy(water(), Window(low=6.0, high=9.0, aim=7.0), SPAN, repeatability=0.01, resolution=0.001, dose_eq_l=1e-3)
    assert_allclose(found.has, 0.01 * 1e-3 / SPAN + 0.001, rtol=1e-9)


@pytest.mark.parametrize(("carbon", "holds", "said"), [(0.2, True, "any pump"), (0.02, True, "any pump"), (0.0, False, "no single")])
def test_a_buffer_lets_one_feeder_hold(carbon, holds, said):
    """A buffer lets one feeder hold."""
    curve = water(2.0, PK_CARBONIC, carbon)
    found = accuracy(curve, Window.halving(curve, 6.0, 9.0), SPAN, repeatability=0.01)
    assert found.holds is holds
    assert said in found.class_words


def test_only_a_good_one_has_it():
    """Carbon 1e-3 mol/L: half the window 6 to 9 is about 3.7e-4 eq/L, 1.9 % of the span of 0.02 eq/L."""
    curve = water(2.0, PK_CARBONIC, 1e-3)
    assert "only a good" in accuracy(curve, Window.halving(curve, 6.0, 9.0), SPAN, repeatability=0.01).class_words


def test_an_error_beyond_the_curve():
    """An error beyond the curve."""
    curve = curve_of(lambda ph: 10.0 ** (ph - 14) - 10.0**-ph, -0.01)
    found = accuracy(curve, Window(low=6.0, high=9.0, aim=7.0), 100.0, repeatability=0.0, resolution=0.5)
    assert "beyond the curve" in found.words


# split range, strength, line


@pytest.mark.parametrize(("tolerance", "works"), [(5e-5, True), (2e-6, False)])
def test_split_range(tolerance, works):
    """Fine span covers the coarse error both ways; its own error is at most the tolerance where that can be."""
    found = split_range(tolerance, SPAN, 120.0, repeatability=0.01, resolution=0.001, turndown=100.0)
    off = 0.011
    assert found.fine_share >= 2 * off * (1 - 1e-12)
    assert_allclose(found.left_eq_l, off * found.fine_share * SPAN, rtol=1e-12)
    assert found.works is works
    assert (found.left_eq_l <= tolerance) == works
    assert_allclose(found.turndown, 100.0 / found.fine_share, rtol=1e-12)
    assert_allclose(found.fine_l_h, 120.0 * found.fine_share, rtol=1e-12)
    assert ("another tank" in found.words) != works


def test_split_range_needs_an_error():
    """Split range needs an error."""
    with pytest.raises(InputError, match="error of a feeder must be above 0; found 0"):
        split_range(1e-5, SPAN, 120.0, repeatability=0.0, resolution=0.0, turndown=100.0)


def test_strength_so_that_the_least_can_be_fed():
    """Device of 100 L/h, 50:1 (2 L/h at least): 20 eq/h at least must be 10 eq/L or weaker, 500 eq/h 5 eq/L or stronger."""
    need = feed_need("caustic", [0.02, 0.5], 1.0, 19.1)
    found = strength_for(need, 19.1, 100.0, 50.0)
    assert_allclose((found.low_eq_l, found.high_eq_l, found.chosen_eq_l), (5.0, 10.0, 10.0))
    assert_allclose(found.thinned, 1.91)
    assert_allclose(need.least_eq_h / found.chosen_eq_l, 100.0 / 50.0)
    assert "thinned 1.91 times" in found.words


def test_as_strong_as_delivered_where_that_can_be_fed():
    """As strong as delivered where that can be fed."""
    found = strength_for(feed_need("caustic", [0.02, 0.5], 1.0, 8.0), 8.0, 100.0, 50.0)
    assert_allclose((found.chosen_eq_l, found.thinned), (8.0, 1.0))
    assert "as delivered" in found.words


@pytest.mark.parametrize(("stock", "turndown", "said"), [(19.1, 10.0, "no one strength serves"), (4.0, 50.0, "too weak")])
def test_no_strength_is_an_answer(stock, turndown, said):
    """No strength is an answer."""
    found = strength_for(feed_need("caustic", [0.02, 0.5], 1.0, stock), stock, 100.0, turndown)
    assert np.isnan(found.chosen_eq_l)
    assert said in found.words


def test_line_by_geometry():
    """10 m of 20 mm bore hold pi L; at 36 L/h (0.01 L/s) that is 100 pi s."""
    found = line(10.0, 20.0, 36.0, 30.0)
    assert_allclose((found.volume_l, found.dead_s), (np.pi, 100 * np.pi), rtol=1e-12)
    assert not found.holds
    assert_allclose(found.volume_l / (36.0 + found.carrier_l_h) * 3600.0, 30.0, rtol=1e-12)
    assert "longer than" in found.words


def test_a_short_line():
    """A short line."""
    found = line(0.0, 20.0, 36.0, 30.0)
    assert found.holds
    assert (found.dead_s, found.carrier_l_h) == (0.0, 0.0)


def test_refusals():
    """Each message tells the rule, the value and the remedy."""
    with pytest.raises(InputError, match=r"normality of what feeder 'a' pumps .* must be above 0; found inf"):
        feed_need("a", 1.0, 1.0, np.inf)
    with pytest.raises(InputError, match=r"demand and flow of feeder 'a' must be numbers of 0 or more; found -1e\+06 eq/h"):
        feed_need("a", [-1.0, 2.0], 1e3, 1.0)
    with pytest.raises(InputError, match="feeder 'a' must be asked for something"):
        feed_need("a", [0.0], 1.0, 1.0)
    with pytest.raises(InputError, match="repeatability of a feeder must be 0 or more; found -1"):
        accuracy(water(), Window(low=6.0, high=9.0, aim=7.0), SPAN, repeatability=-1.0)
    with pytest.raises(InputError, match=r"full span .* must be above 0; found 0"):
        window_share(water(), 6.0, 9.0, 0.0)
    with pytest.raises(InputError, match=r"flow .* must be above 0; found 0"):
        span_eq_l(1.0, 1.0, 0.0)
    with pytest.raises(InputError, match="turndown must be above 0; found 0"):
        strength_for(feed_need("a", 1.0, 1.0, 1.0), 1.0, 1.0, 0.0)
    with pytest.raises(InputError, match=r"bore of the reagent line .* must be above 0; found 0"):
        line(1.0, 0.0, 1.0, 1.0)
    with pytest.raises(InputError, match=r"length of the reagent line .* must be 0 or more; found -1"):
        line(-1.0, 1.0, 1.0, 1.0)

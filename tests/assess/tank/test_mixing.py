"""Mixing against printed figures, check case 10 and the balance of a stirred tank."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.mixing import (
    air_m3_min,
    baffles,
    dead_time,
    loop_standing,
    mixer,
    places,
    power_ranges,
    pumping_for_dead_time,
    pumping_for_turnover,
)
from aquabuf.errors import InputError

GAL = 3.785411784e-3


def test_check_case_10():
    """V/F = 20 min and Fa = 19 F: dead time 1.0 min, lag 19.0 min."""
    assert_allclose(dead_time(20.0, 1.0, 19.0), (1.0, 19.0), rtol=1e-12)


def test_dead_time_and_lag_are_the_residence_time():
    """Dead time and lag are the residence time."""
    flow = np.array([1.0, 5.0, 40.0])
    dead, lag = dead_time(10.0, flow, 100.0)
    assert_allclose(dead + lag, 10.0 / flow, rtol=1e-12)


def test_no_flow_has_no_end():
    """No flow has no end."""
    dead, lag = dead_time(10.0, 0.0, 100.0)
    assert_allclose(dead, 0.1)
    assert lag == np.inf


def test_a_twentieth_asks_for_nineteen_flows():
    """Printed: dead time below 1/20 of the residence time, which is Fa = 19 F."""
    assert_allclose(pumping_for_dead_time(3.0), 57.0, rtol=1e-12)
    dead, lag = dead_time(7.0, 3.0, pumping_for_dead_time(3.0))
    assert_allclose(dead / (dead + lag), 0.05, rtol=1e-12)


def test_worked_example_of_turnover():
    """W2, printed: 750 gal at 2 turnovers a minute is 1500 gpm."""
    assert_allclose(pumping_for_turnover(750 * GAL, 2.0) / (60 * GAL), 1500.0, rtol=1e-12)


def test_power_of_a_tank():
    """200 to 400 hp per million gallons on a tenth of one."""
    found = {p.rule.key: p for p in power_ranges(1e5 * GAL)}["neutralization power"]
    assert_allclose((found.low_w, found.high_w), (20 * 745.69987, 40 * 745.69987), rtol=1e-6)
    assert "200 to 400 hp/Mgal" in found.words
    assert "MIL-HDBK" in found.words


def test_baffles():
    """1/12 and about 10 % of the diameter, four of them; offset by 20 %."""
    found = baffles(2.4)
    assert found.count == 4
    assert_allclose((found.narrow_m, found.wide_m, found.offset_m), (0.2, 0.24, 0.48), rtol=1e-6)


def test_air():
    """0.3 to 1.0 m3/min per m2."""
    assert_allclose(air_m3_min(5.0), (1.5, 5.0))


@pytest.mark.parametrize(("volume", "flow", "pumping", "why"), [
    (10.0, 20.0, 10.0 * 1.5 * 60, "standard"), (1.0, 20.0, 19 * 20.0, "dead time over residence time at most 0.05")])
def test_larger_of_turnover_and_dead_time(volume, flow, pumping, why):
    """Larger of turnover and dead time."""
    found = mixer(volume, flow)
    assert_allclose(found.pumping_m3_h, pumping, rtol=1e-12)
    assert why in found.words
    assert {s.rule.key: s.kept for s in found.standings}["dead time"]
    assert_allclose(found.dead_s + found.lag_s, 3600 * volume / flow, rtol=1e-12)
    assert_allclose(found.turnover_per_min, pumping / volume / 60, rtol=1e-12)
    assert_allclose(found.power_w, 0.5 * (39.4 + 78.8) * volume, rtol=1e-3)


def test_a_weak_mixer_breaks_the_rules():
    """A weak mixer breaks the rules."""
    found = mixer(10.0, 20.0, pumping_m3_h=100.0)
    kept = {s.rule.key: s.kept for s in found.standings}
    assert not kept["dead time"]
    assert not kept["usual turnover"]
    assert "as given" in found.words


@pytest.mark.parametrize(("parts", "kept"), [((15.0, 5.0), True), ((15.0, 5.1), False)])
def test_loop_on_the_steep_part(parts, kept):
    """Printed: below 0.02 for set points on the steep part."""
    found = loop_standing(1000.0, *parts)
    assert found.kept is kept
    assert_allclose(found.value, sum(parts) / 1000.0)


def test_places_tell_inlet_outlet_injection_and_probe():
    """Places tell inlet outlet injection and probe."""
    told = {r.key: r.words for r in places()}
    assert {"inlet", "outlet", "injection", "probe"} <= set(told)
    assert "outlet" in told["probe"]
    assert "never near a wall" in told["injection"]


def test_refusals():
    """Each message tells the rule, the value and the remedy."""
    with pytest.raises(InputError, match=r"volume of a tank .* must be above 0; found 0"):
        mixer(0.0, 1.0)
    with pytest.raises(InputError, match=r"flow .* must be above 0; found 0"):
        mixer(1.0, 0.0)
    with pytest.raises(InputError, match=r"pumping of the mixer .* must be 0 or more; found -1"):
        mixer(1.0, 1.0, pumping_m3_h=-1.0)
    with pytest.raises(InputError, match=r"lag of the tank .* must be above 0; found 0"):
        loop_standing(0.0, 1.0)
    with pytest.raises(InputError, match=r"dead time .* must be 0 or more; found -1"):
        loop_standing(1.0, -1.0)
    with pytest.raises(InputError, match="share of dead time must be above 0; found 0"):
        pumping_for_dead_time(1.0, 0.0)

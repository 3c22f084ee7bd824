"""Batch tanks: size, cycle without overlap, and whether they suit."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.batch import batch_plan, batch_reasons, batch_suits, batch_table, cycle_table
from aquabuf.errors import InputError
from aquabuf.tables import read_table

FLOW = {"react_h": 1.5, "test_h": 0.5, "drain_m3_h": 20.0}


def test_least_volume_by_hand():
    """5 m3/h, 2 h of reaction and test, drained at 20 m3/h: V = 5 x 2 / (1 - 5/20) = 13.33 m3, and nothing is idle."""
    plan = batch_plan(5.0, tanks=2, reserve=1.0, **FLOW)
    assert_allclose([plan.volume_m3, plan.fill_h, plan.drain_h, plan.idle_h], [40 / 3, 8 / 3, 2 / 3, 0], atol=1e-12)
    assert_allclose([plan.cycle_h, plan.total_m3, plan.batches_per_day], [16 / 3, 80 / 3, 9])
    three = batch_plan(5.0, tanks=3, reserve=1.0, **FLOW)
    assert_allclose(three.volume_m3, 10 / (2 - 0.25))


def test_reserve_and_own_volume():
    """The reserve enlarges the tank and becomes idle time; a volume of the site is taken as it is."""
    plan = batch_plan(5.0, tanks=2, **FLOW)
    assert_allclose(plan.volume_m3, 1.1 * 40 / 3)
    own = batch_plan(5.0, tanks=2, volume_m3=40.0, **FLOW)
    assert_allclose([own.fill_h, own.drain_h, own.idle_h], [8, 2, 8 - 2 - 2])
    with pytest.raises(InputError, match=r"2 batch tanks need at least 13\.33 m3 each; found 13 m3\. Take larger tanks, one more"):
        batch_plan(5.0, tanks=2, volume_m3=13.0, **FLOW)


@pytest.mark.parametrize("tanks", [2, 3, 4])
def test_the_cycle_takes_all_water_without_overlap(tanks):
    """At every moment one tank fills; none begins before it is empty; what drains is what came."""
    plan = batch_plan(5.0, tanks=tanks, **FLOW)
    table = cycle_table(plan, cycles=3)
    fills = table[table["step"] == "fill"].sort_values("start_h")
    assert_allclose(fills["start_h"].to_numpy()[1:], fills["end_h"].to_numpy()[:-1])
    assert len(fills) == 3 * tanks
    for _, mine in table.groupby("tank"):
        assert_allclose(mine["start_h"].to_numpy()[1:], mine["end_h"].to_numpy()[:-1])
        assert_allclose(mine["start_m3"].to_numpy()[1:], mine["end_m3"].to_numpy()[:-1], atol=1e-12)
    drains = table[table["step"] == "drain"]
    rate = (drains["start_m3"] - drains["end_m3"]) / (drains["end_h"] - drains["start_h"])
    assert_allclose(rate, 20.0)
    assert_allclose((fills["end_m3"] - fills["start_m3"]) / (fills["end_h"] - fills["start_h"]), 5.0)
    with pytest.raises(InputError, match=r"a cycle table needs 1 cycle or more; found 0"):
        cycle_table(plan, 0)


def test_steps_of_no_length_are_left_out():
    """No reserve, no idle time; no test, no row for it."""
    table = cycle_table(batch_plan(5.0, react_h=1.0, drain_m3_h=20.0, test_h=0.0, reserve=1.0))
    assert set(table["step"]) == {"fill", "react", "drain"}


def test_table_of_tank_counts():
    """More tanks, smaller each; those that cannot be drained are left out."""
    table = batch_table(5.0, **FLOW)
    assert table["tanks"].tolist() == [2, 3, 4]
    assert_allclose(table["volume_m3"], 1.1 * 10 / (np.array([1, 2, 3]) - 0.25))
    assert_allclose(table["total_m3"], table["tanks"] * table["volume_m3"])
    assert batch_table(30.0, **FLOW)["tanks"].tolist() == [3, 4]
    with pytest.raises(InputError, match=r"no number of batch tanks up to 4 can drain 80 m3/h at 20 m3/h\. Take a larger pump"):
        batch_table(80.0, **FLOW)


@pytest.mark.parametrize(("more", "words"), [
    ({"tanks": 1}, r"need 2 tanks or more, one to fill while the other is treated; found 1\. Take 2"),
    ({"flow_m3_h": 0.0}, r"the flow of a batch must be above 0 m3/h; found 0"),
    ({"react_h": np.nan}, r"the reaction time of a batch must be above 0 h; found nan"),
    ({"test_h": -1.0}, r"the time for testing a batch must be 0 h or more; found -1"),
    ({"drain_m3_h": 0.0}, r"the rate of draining of a batch must be above 0 m3/h; found 0"),
    ({"reserve": 0.9}, r"the reserve of a batch tank must be a factor of 1 or more; found 0\.9"),
    ({"drain_m3_h": 5.0}, r"2 batch tanks must drain faster than 5 m3/h; found 5 m3/h\. Take a larger pump or one tank more"),
])  # fmt: skip
def test_plans_that_cannot_be(more, words):
    """Rule, value, remedy."""
    with pytest.raises(InputError, match=words):
        batch_plan(**({"flow_m3_h": 5.0, "tanks": 2} | FLOW | more))


def test_reasons():
    """50 gpm is 11.4 m3/h (50 x 0.227125 = 11.356); 0.1 eq/L is pH 1 without buffers."""
    small, strong, toxic = batch_reasons(50 * 0.2271247, -0.02)
    assert (small.holds, strong.holds, toxic.holds) == (True, False, False)
    assert batch_reasons(11.5, -0.1)[0].holds is False
    assert batch_reasons(11.5, -0.1)[1].holds is True
    assert batch_reasons(11.5, 0.099)[1].holds is False
    assert batch_reasons(11.5, 0.0, ["cyanide"])[2].holds is True
    assert [r.name for r in batch_reasons(1, 1)] == [row["name"] for row in read_table("tank_batch_rules")][:3]
    assert all(r.source and r.mark and r.words for r in batch_reasons(1, 1))


def test_batches_suit():
    """One reason is enough; a tank that does not fit the site is against it."""
    assert batch_suits(batch_reasons(5.0, 0.0))
    assert not batch_suits(batch_reasons(50.0, 0.01))
    assert batch_suits(batch_reasons(50.0, 0.01, ["sulfide"]))
    plan = batch_plan(5.0, **FLOW)
    assert batch_suits(batch_reasons(5.0, 0.0, plan=plan, largest_tank_m3=15.0))
    assert not batch_suits(batch_reasons(5.0, 0.0, plan=plan, largest_tank_m3=14.0))
    fits = batch_reasons(5.0, 0.0, plan=plan, largest_tank_m3=14.0)[-1]
    assert (fits.name, fits.limit, fits.unit) == ("fits", 14.0, "m³")

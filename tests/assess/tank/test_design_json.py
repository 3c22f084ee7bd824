"""The record of a design: documented keys, plain values, and figures that are those of the design."""

import json
from functools import cache

import pytest
from made_jobs import GAS, bicarbonate, job, steady, strong

from aquabuf.assess.tank.design import design
from aquabuf.assess.tank.design_json import design_record

ONE = {"stages": 1}
CONTRACT = {  # keys that others rely on
    "demand": {"eq_l", "kg_h", "l_h", "reagent", "condition"},
    "window": {"tolerance_eq_l", "share_of_demand", "buffer_eq_l_ph", "gain_ph_per_eq_l"},
    "equalization": {"volume_m3", "rule"},
    "stages": {"volume_m3", "residence_min", "setpoint_ph", "dead_time_s", "power_w"},
    "feed": {"turndown", "resolution_needed"},
    "simulation": {"minutes_outside", "percent_outside", "worst_ph", "probability_of_meeting_rule"},
    "side_effects": {"name", "value", "severity"}, "storage": {"stores", "containment"},
}


@cache
def made():
    """A design with cases and its record."""
    found = design(job(steady(bicarbonate()), acid="acid", wishes={"stages": 2}, trial={"cases": 3, "days": 0.05}),
                   processes=1)
    return found, design_record(found)


def plain(value):
    """Everything in a record, one by one."""
    if isinstance(value, dict):
        assert all(type(k) is str for k in value)
        for v in value.values():
            yield from plain(v)
    elif isinstance(value, list):
        for v in value:
            yield from plain(v)
    else:
        yield value


def test_keys_of_the_contract():
    """All are there; lists have them in every row."""
    _, record = made()
    assert {"assumptions", "warnings", "cautions", *CONTRACT} <= set(record)
    for part, keys in CONTRACT.items():
        for row in record[part] if isinstance(record[part], list) else [record[part]]:
            assert keys <= set(row), part


@pytest.mark.parametrize("found", [
    lambda: made()[0], lambda: design(job(steady(strong()), wishes=ONE), simulate=False),
    lambda: design(job(steady(strong(0.05)), reagents={"gas": GAS}, base=None, aim=8.3, wishes=ONE), simulate=False)])
def test_values_are_plain_and_survive_the_round_trip(found):
    """No numpy, no nan, no infinity."""
    record = design_record(found())
    assert {type(v) for v in plain(record)} <= {str, int, float, bool, type(None)}
    assert json.loads(json.dumps(record, allow_nan=False)) == record


def test_nan_is_null():
    """What was not run or does not come about; a figure that is there stays."""
    record = design_record(design(job(steady(strong()), wishes=ONE), simulate=False))
    assert record["simulation"] is None
    assert record["reagents"]["compared"][0]["rows"][0]["end_ph"] == 14.0
    gas = design_record(design(job(steady(strong(0.05)), reagents={"gas": GAS}, base=None, aim=8.3, wishes=ONE),
                               simulate=False))
    assert record["reagents"]["compared"][0]["rows"][0]["fed_l_h"] > 0.0 == gas["feed"][0]["size_l_h"]
    assert all(row["cost_per_day"] is not None for row in gas["reagents"]["compared"][0]["rows"])
    no_case = design_record(design(job(steady(bicarbonate()), wishes=ONE, trial={"days": 0.05}), cases=0))
    assert no_case["simulation"]["probability_of_meeting_rule"] is None
    assert no_case["simulation"]["cases"] is None
    assert any(f["minutes_to_leave"] is None for f in made()[1]["simulation"]["faults"])


def test_figures_are_those_of_the_design():
    """By hand where it can be."""
    found, record = made()
    assert record["accepted"] == found.accepted
    assert record["aim_ph"] == found.basis.aim_ph
    assert [s["residence_min"] for s in record["stages"]] == pytest.approx([10.0, 15.0])  # 1 and 1.5 m3 at 6 m3/h
    assert [s["setpoint_ph"] for s in record["stages"]] == [s.setpoint_ph for s in found.layout.stages]
    mean = next(d for d in record["demand"] if (d["condition"], d["aim"]) == ("mean", "set point"))
    assert mean["kg_h"] == pytest.approx(mean["eq_l"] * 6e3 * 39.997e-3 / 0.25, rel=1e-3)
    assert mean["l_h"] == pytest.approx(mean["kg_h"] / 1.28, rel=1e-6)
    need = record["need"][0]
    assert need["mean_eq_h"] == pytest.approx(6e3 * record["window"]["demand_eq_l"], rel=1e-6)
    feed = record["feed"][0]
    assert feed["turndown"] == pytest.approx(feed["size_eq_h"] / feed["least_eq_h"])
    sim, course = record["simulation"], found.trial.course
    assert sim["percent_outside"] == pytest.approx(100.0 * sim["minutes_outside"] / (0.05 * 1440.0))
    assert sim["probability_of_meeting_rule"] == found.trial.monte.meets.mean()
    assert sim["cases"] == 3
    assert sim["base_used_eq"] == course.base_used_eq[:, 0].tolist()
    assert len(record["feed"]) == 4
    assert {f["kind"] for f in record["feed"]} == {"base", "acid"}


@pytest.mark.parametrize(("low", "high", "worst"), [(5.0, 8.0, 5.0), (6.5, 9.8, 9.8), (6.2, 7.0, 6.2), (7.0, 8.9, 8.9)])
def test_worst_ph_is_the_end_farther_out(low, high, worst):
    """Or nearer to an end of the window, 6 to 9, where both lie inside."""
    found, _ = made()
    course = found.trial.course
    before = course.lowest_ph.copy(), course.highest_ph.copy()
    try:
        course.lowest_ph[:], course.highest_ph[:] = low, high
        assert design_record(found)["simulation"]["worst_ph"] == worst
    finally:
        course.lowest_ph[:], course.highest_ph[:] = before

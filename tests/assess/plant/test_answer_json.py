"""The answer as plain data: its keys and types, figures against closed forms, and what is said of a plan that fails."""

import json
import math
import sys
from pathlib import Path

import pytest
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parents[2]))

from invented_plans import PLANS, answered

from aquabuf.assess.plant.answer_json import RAW_WATER
from aquabuf.assess.plant.quantities import plant_quantities

# The contract that others rely on, as the documentation lists it
TOP = {"name": str, "use": str, "date": str, "note": str, "flow": dict, "raw_water": dict, "feasible": bool, "reason": str,
       "doses": list, "steps": list, "targets": list, "limits": list, "findings": list, "warnings": list, "notes": list,
       "cautions": list, "assumptions": list, "saturation": dict, "store": list, "curves": list, "control_ranges": list,
       "faults": list, "fault_notes": list, "error": dict, "hold": dict | None, "season": dict | None,
       "digester": str | None}
NUMBER = float | int | None
DOSE = {"product": str, "step": str, "dose_mg_l_product": NUMBER, "dose_mg_l_pure": NUMBER, "dose_meq_l": NUMBER, "feed": dict}
FEED = ("product_kg_d", "product_lb_d", "product_kg_h", "product_lb_h", "pure_kg_d", "pure_lb_d", "l_h", "gal_h", "ml_min",
        "setting_percent")
STEP = ("ph", "alkalinity_mg_l_caco3", "dic_mmol_l", "calcium_mg_l", "temperature_c", "si_calcite", "ccpp_mg_l",
        "buffer_meq_l_ph")
TARGET = {"step": str, "quantity": str, "wanted": str, "reached": NUMBER, "unit": str, "met": bool}
LIMIT = {"rule": str, "value": NUMBER, "broken": bool, "words": str, "source": str, "next_step": str}
LB = 0.45359237  # kg, exact
GALLON = 3.785411784  # L, exact
MGD = 1e3 * GALLON  # m3/d
CA, CO2, LIME, ALUM_14 = 40.078, 44.009, 74.092, 594.342  # g/mol, IUPAC masses
CACO3 = 100.086 / 2.0  # g per equivalent


def record(name):
    """The record of a plan."""
    return answered(name)[1]


def step(name, which):
    """A row of the steps by its name."""
    return next(r for r in record(name)["steps"] if r["name"] == which)


@pytest.mark.parametrize("name", PLANS)
def test_keys_and_types_of_the_contract(name):
    """Every plan, whether it holds or not, has all keys with values of their type."""
    r = record(name)
    assert list(r) == list(TOP)
    assert [k for k, kind in TOP.items() if not isinstance(r[k], kind)] == []
    for rows, kinds in ((r["doses"], DOSE), (r["targets"], TARGET), (r["limits"], LIMIT)):
        assert [(row, k) for row in rows for k, kind in kinds.items() if not isinstance(row[k], kind)] == []
    assert all(isinstance(dose["feed"][k], NUMBER) for dose in r["doses"] for k in FEED)
    assert all(isinstance(row[k], NUMBER) for row in r["steps"] for k in STEP)
    assert all(isinstance(text, str) for k in ("warnings", "notes", "cautions", "assumptions", "fault_notes") for text in r[k])


@pytest.mark.parametrize("name", PLANS)
def test_it_is_strict_json(name):
    """Nothing that JSON does not know; what is not known is null."""
    assert json.loads(json.dumps(record(name), allow_nan=False)) == record(name)


@pytest.mark.parametrize("name", PLANS)
def test_steps_are_the_raw_water_and_every_step_in_order(name):
    """In the columns of the table of quantities."""
    answer, r = answered(name)
    assert [row["name"] for row in r["steps"]] == [RAW_WATER, *(s.name for s in answer.plan.steps)]
    assert {q.column for q in plant_quantities().values()} <= set(r["steps"][0])


def test_a_plan_that_holds():
    """No reason, targets met within 1e-6 of their unit."""
    r = record("upland")
    assert (r["feasible"], r["reason"]) == (True, "")
    assert [t["met"] for t in r["targets"]] == [True, True]
    assert_allclose([t["reached"] for t in r["targets"]], [8.4, 55.0], rtol=0, atol=1e-6)
    assert_allclose([step("upland", "final pH")[k] for k in ("ph", "alkalinity_mg_l_caco3")], [8.4, 55.0], rtol=0, atol=1e-6)


def test_carbon_calcium_and_alkalinity_are_the_doses():
    """Conservation: carbon by the gas, calcium and alkalinity by the lime."""
    lime, gas = record("upland")["doses"]
    before, after = step("upland", RAW_WATER), step("upland", "final pH")
    assert_allclose(after["dic_mmol_l"] - before["dic_mmol_l"], gas["dose_mg_l_pure"] / CO2, rtol=1e-6)
    assert_allclose(after["calcium_mg_l"] - before["calcium_mg_l"], lime["dose_mg_l_pure"] * CA / LIME, rtol=1e-6)
    assert_allclose(35.0, 2.0 * CACO3 * lime["dose_mg_l_pure"] / LIME, rtol=1e-6)
    assert_allclose([lime["dose_meq_l"], gas["dose_meq_l"]], [35.0 / CACO3, 0.0], rtol=1e-6, atol=1e-12)


def test_product_and_pure_dose_differ_by_the_strength():
    """92 % lime."""
    lime = record("upland")["doses"][0]
    assert_allclose(lime["dose_mg_l_product"], lime["dose_mg_l_pure"] / 0.92, rtol=1e-9)
    assert (lime["strength"], lime["strength_from"], lime["formula"]) == (0.92, "certificate", "Ca(OH)2")


def test_feed_of_a_known_example():
    """15 mg/L NaOH in 10 ML/d, 50 % at 1.525: 8.20 L/h, 41 % of a 20 L/h pump, 246 L for 30 h; worked by hand."""
    feed = record("fixed")["doses"][0]["feed"]
    assert_allclose([feed["pure_kg_d"], feed["product_kg_d"]], [150.0, 300.0], rtol=1e-9)
    assert_allclose(feed["l_h"], 300.0 / 24.0 / 1.525, rtol=1e-9)
    assert_allclose([feed["l_h"], feed["setting_percent"]], [8.20, 41.0], rtol=0, atol=0.05)
    assert_allclose([feed["product_lb_d"], feed["gal_h"]], [300.0 / LB, feed["l_h"] / GALLON], rtol=1e-9)
    assert_allclose(feed["ml_min"], 1e3 * feed["l_h"] / 60.0, rtol=1e-9)
    assert (feed["machine"], feed["setting_status"]) == ("pump 'caustic'", "set")
    assert_allclose(feed["day_tank"][0]["value"], 30.0, rtol=0, atol=0.05)


def test_flow_at_the_least():
    """The same dose at 4 of 10 ML/d asks for two fifths of the feed."""
    feed = record("upland")["doses"][0]["feed"]
    (least,) = feed["at_flows"]
    assert least["flow"] == "least flow"
    assert_allclose(least["l_h"], 0.4 * feed["l_h"], rtol=1e-9)


def test_alum_takes_its_alkalinity():
    """Six equivalents per mole of the formula; the facts have 0.5052 mg CaCO3 per mg of 14-water alum (computed)."""
    (alum, _), after = record("river")["doses"], step("river", "rapid mix")
    assert_allclose(alum["dose_mg_l_pure"], 40.0, rtol=1e-9)
    assert_allclose(60.0 - after["alkalinity_mg_l_caco3"], 6.0 * CACO3 * 40.0 / ALUM_14, rtol=1e-5)
    assert_allclose((60.0 - after["alkalinity_mg_l_caco3"]) / 40.0, 0.5052, rtol=0, atol=0.0001)
    assert alum["dose_meq_l"] == pytest.approx(-6.0 * 40.0 / ALUM_14, rel=1e-5)
    assert alum["feed"]["product_lb_d"] == pytest.approx(40.0 / 0.485 * 15.0 * MGD * 1e-3 / LB, rel=1e-9)


def test_a_machine_that_is_too_small_is_a_warning():
    """82.5 mg/L in 15 MGD is 146 L/h of liquid alum; the pump gives 120."""
    r = record("river")
    assert (r["doses"][0]["feed"]["setting_status"], r["doses"][0]["feed"]["setting_percent"]) == ("too large", None)
    assert any("alum" in w and "no more than 120 L/h" in w for w in r["warnings"])
    assert [f["case"] for f in r["faults"] if f["product"] == "alum"] == ["stopped"]


def test_blend_by_mass_balance():
    """40 % of 290 and 60 % of 6 mg/L."""
    after = step("blend", "blend")
    assert_allclose(after["alkalinity_mg_l_caco3"], 0.4 * 290.0 + 0.6 * 6.0, rtol=1e-6)
    assert_allclose(after["calcium_mg_l"], 0.4 * 110.0 + 0.6, rtol=1e-6)
    assert record("blend")["doses"] == []


def test_an_impossible_plan_says_why_and_what_would_reach_it():
    """One product cannot meet two targets; its dose is null, nothing is told of its errors."""
    r = record("impossible")
    assert not r["feasible"]
    assert "pH 8.40" in r["reason"]
    assert "carbon dioxide" in r["reason"]
    assert (r["doses"][0]["dose_mg_l_product"], r["doses"][0]["feed"]["l_h"]) == (None, None)
    assert [t["met"] for t in r["targets"]] == [False, False]
    assert (r["curves"], r["faults"], r["error"]) == ([], [], {"of_readings": None, "of_feeds": None})
    assert r["warnings"][0].startswith("final pH: ")


def test_a_guard_rail_stops_a_plan():
    """80 mg/L of caustic soda in soft water: far above pH 9.5."""
    r = record("over rail")
    assert not r["feasible"]
    assert "guard rail of 9.5" in r["reason"]
    assert r["steps"][-1]["ph"] > 9.5
    assert {f["severity"] for f in r["findings"] if f["step"] == "guard rails"} == {"stop"}


@pytest.mark.parametrize("name", PLANS)
def test_every_broken_rule_has_its_source_and_next_step(name):
    """In its row, and as a warning in words."""
    r = record(name)
    broken = [x for x in r["limits"] if x["broken"]]
    for x in broken:
        assert x["source"]
        assert x["next_step"]
        assert x["words"]
        assert x["value"] is not None
        assert any(x["words"] in w and x["source"] in w and x["next_step"] in w for w in r["warnings"])
    if name in ("upland", "river"):
        assert "chlorine works slowly" in {x["name"] for x in broken}


def test_unknown_ions_are_null():
    """Without chloride and sulfate their ratio is not known."""
    assert step("fixed", "feed")["chloride_sulfate_ratio"] is None
    assert step("upland", "final pH")["chloride_sulfate_ratio"] == pytest.approx(8.4 / 9.6, rel=1e-9)


def test_stuck_at_full_stroke():
    """A pump of 250 L/h at 80 % stroke gives at most 200 L/h; the dose goes up by as much."""
    feed = record("upland")["doses"][0]
    stuck = record("upland")["faults"][0]
    assert stuck["case"] == "stuck at full stroke"
    assert_allclose(stuck["dose_mg_l_product"], feed["dose_mg_l_product"] * 200.0 / feed["feed"]["l_h"], rtol=1e-6)
    assert_allclose(stuck["volume_m3"], 10_000.0 / 24.0, rtol=1e-9)
    assert stuck["ph_behind"] > 8.4


def test_price_and_order():
    """Cost per day is use times price; per 1000 m3 by the flow."""
    lime = record("upland")["store"][0]
    assert_allclose(lime["cost_per_day"], 0.31 * lime["use_kg_d"], rtol=1e-9)
    assert_allclose(lime["cost_per_1000_m3"], lime["cost_per_day"] / 10.0, rtol=1e-9)
    assert_allclose(lime["cost_per_million_gallons"], lime["cost_per_1000_m3"] * MGD / 1e3, rtol=1e-9)
    assert_allclose(lime["use_kg_month"], 365.25 / 12.0 * lime["use_kg_d"], rtol=1e-9)
    assert_allclose([lime["use_lb_d"], lime["use_lb_month"]], [lime["use_kg_d"] / LB, lime["use_kg_month"] / LB], rtol=1e-9)
    assert_allclose(lime["stock_days"], 4000.0 / lime["use_kg_d"], rtol=1e-9)


def test_curves_and_ranges_hold_the_wanted_dose():
    """The wanted row is marked once; the range reaches to both sides of the dose."""
    r = record("upland")
    assert [(c["product"], sum(row["is_wanted"] for row in c["rows"])) for c in r["curves"]] == [("lime", 1), ("gas", 1)]
    for found, dose in zip(r["control_ranges"], r["doses"], strict=True):
        assert found["least_mg_l_product"] < dose["dose_mg_l_product"] < found["most_mg_l_product"]


def test_season_and_hold():
    """The season counts its rows; buffers are told best first."""
    assert record("season")["season"]["rows"] == 24
    assert record("season")["season"]["words"]
    assert record("upland")["season"] is None
    assert record("upland")["hold"]["buffers"][0]["acid_reagent"] in ("carbon dioxide", "sodium bicarbonate")
    assert record("fixed")["hold"] is None


def test_saturation_is_never_a_bare_sign():
    """Words, both indices, and the constants by name."""
    found = record("upland")["saturation"]
    assert "dissolves calcium carbonate" in found["words"]
    assert "Plummer & Busenberg 1982" in found["words"]
    assert "printed table" in found["words"]
    assert math.isfinite(found["si_by_table"])
    assert found["si_calcite"] == pytest.approx(step("upland", "tap in summer")["si_calcite"], abs=1e-9)

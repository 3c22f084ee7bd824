"""The demo plans: they solve, and what their README and the first hour say of them holds.

Expected values come from those pages, from the tables read with the csv module and from laws written out here.
"""

import csv
import re
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf import Water
from aquabuf.assess.plant.answer import solve_plan
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.errors import AquabufError

DATA = Path(__file__).parents[1] / "field_data"
PLANS = ("plan_upland.toml", "plan_river.toml", "plan_wells.toml", "plan_effluent.toml")
CACO3 = 50.043  # g per equivalent, IUPAC


@cache
def answer(name):
    """A plan solved with few draws."""
    return solve_plan(read_plan(DATA / name), draws=200)


def after(name, step):
    """Water that leaves a step."""
    return next(p.after for p in answer(name).train.passed if p.step.name == step)


@pytest.mark.parametrize("name", PLANS)
def test_every_plan_is_feasible_and_says_it_is_invented(name):
    """Targets met, no stop; the file says that its data are made up."""
    found = answer(name)
    assert (found.feasible, found.reason) == (True, "")
    assert "Invented data" in (DATA / name).read_text(encoding="utf-8").splitlines()[0]
    assert found.targets
    assert all(line.mol_l[0] >= 0.0 for line in found.feeds)


def test_upland_by_mass_balance():
    """Lime brings all the alkalinity that is added; carbon dioxide the rest of the carbon; figures of the first hour."""
    found = answer("plan_upland.toml")
    lime, gas = found.feeds
    assert_allclose(2.0 * lime.mol_l[0], (55.0 - 20.0) / CACO3 * 1e-3, rtol=1e-4)
    carbon = after("plan_upland.toml", "final pH").carbon_mol_l[0] - found.raw.carbon_mol_l[0]
    assert_allclose(gas.mol_l[0], carbon, rtol=1e-9)
    assert (round(lime.mg_l_product, 1), round(gas.mg_l_product, 1)) == (28.2, 14.5)
    assert_allclose(lime.mg_l_product, 1e3 * lime.mol_l[0] * 74.092 / 0.92, rtol=1e-5)
    assert round(float(lime.setting.setting_pct[0]), 1) == 43.6
    assert lime.at_flows[0][0] == "least flow"
    assert lime.at_flows[0][2].status[0] == "too small"
    curve = found.curves[0]
    assert round(curve.up_mg_l, 2) == 0.21
    assert 0.0 < curve.up_percent < 1.0


def test_river_rules_and_season():
    """Alum takes 6 equivalents a mole; the lime ahead of it warns, not stops; storms of the year cannot all be met."""
    found = answer("plan_river.toml")
    before, mixed = (after("plan_river.toml", step).alkalinity_eq_l[0] for step in ("lime ahead of alum", "rapid mix"))
    assert_allclose((before - mixed) * 599.75e3 / 6.0, 42.0, rtol=1e-4)  # mg/L of Al2(SO4)3.14.3H2O
    assert any(f.severity == "warning" and "lime ahead of alum" in f.words for f in found.guards)
    assert 9.8 < after("plan_river.toml", "lime ahead of alum").water().ph[0] < 10.2
    assert next(j for j in found.limits if j.limit.name == "soft for the mains").limit.limit == 25.0
    assert 0.0 < found.season.share_missed < 0.1
    assert "carbon dioxide" in found.season.first_reason


def test_raw_water_of_the_river_is_that_of_the_table():
    """The row of the storm as the table has it, sodium from the plan."""
    with (DATA / "plant_raw_water.csv").open(encoding="utf-8") as stream:
        rows = list(csv.reader((line for line in stream if not line.startswith("#")), delimiter=";"))
    row = dict(zip(rows[0], next(r for r in rows if r[0] == "R16-20"), strict=True))

    def number(head):
        return float(row[head].replace(",", "."))

    raw = answer("plan_river.toml").raw
    assert_allclose(raw.water().ph[0], number("pH"), rtol=0, atol=1e-6)
    assert_allclose(1e3 * CACO3 * raw.alkalinity_eq_l[0], number("Alkalinity (mg/L as CaCO3)"), rtol=1e-5)
    assert_allclose(1e3 * 100.086 * raw.total("calcium")[0], number("Calcium hardness (mg/L as CaCO3)"), rtol=1e-5)
    assert_allclose(1e3 * 22.990 * raw.total("sodium")[0], 5.0, rtol=1e-4)


def test_wells_mix_to_more_than_either():
    """The blend is a mass balance, and dissolves more calcium carbonate than the wells or the permeate do."""
    found = answer("plan_wells.toml")
    blend = after("plan_wells.toml", "blend")
    assert_allclose(1e3 * CACO3 * blend.alkalinity_eq_l[0], 0.45 * 310.0 + 0.55 * 6.0, rtol=1e-4)
    own = found.raw.water().precipitation_potential_mol_l()[0]
    step = next(p for p in found.train.passed if p.step.name == "blend")
    sweep = step.step.sweep(step.before)
    assert_allclose(sweep.ccpp_mol_l[0], own, rtol=1e-6)
    assert sweep.ccpp_mol_l.min() < min(own, sweep.ccpp_mol_l[-1])
    assert_allclose(1e3 * 100.086 * after("plan_wells.toml", "final trim").water().precipitation_potential_mol_l()[0], 2.0,
                    rtol=1e-6)


def test_effluent_by_stoichiometry():
    """Two equivalents a mole of nitrogen taken, one given back; without bicarbonate nothing would be left."""
    found = answer("plan_effluent.toml")
    steps = {p.step.name: 1e3 * CACO3 * p.after.alkalinity_eq_l[0] for p in found.train.passed}
    taken = steps["alkali for nitrification"] - steps["nitrification"]
    assert_allclose(taken, 30.0 * 2.0 * CACO3 / 14.007, rtol=1e-4)
    assert round(taken) == 214
    assert_allclose(steps["anoxic zone"] - steps["nitrification"], 18.0 * CACO3 / 14.007, rtol=1e-4)
    assert steps["nitrification"] > 75.0 > 160.0 - taken
    assert "rising" in found.digester_words


def test_an_alkalinity_that_cannot_be_had(tmp_path):
    """As the first hour says: 25 in place of 55, and the answer is no, with what has to be blown out."""
    text = (DATA / "plan_upland.toml").read_text(encoding="utf-8")
    path = tmp_path / "plan.toml"
    path.write_text(text.replace('alkalinity = "55 mg/L', 'alkalinity = "25 mg/L'), encoding="utf-8")
    found = solve_plan(read_plan(path), draws=0)
    assert not found.feasible
    words = re.search(r"strip ([\d.]+) mg/L of CO2 first \(aerate\)", found.reason)
    wanted = Water.from_ph_alkalinity(ph=8.4, alkalinity_eq_l=25.0 / CACO3 * 1e-3, t_c=8.0, ionic_strength_mol_l=1e-3)
    assert_allclose(float(words[1]), 44.009e3 * (found.raw.carbon_mol_l[0] - wanted.dic_mol_l), rtol=5e-3)
    assert np.isnan(found.feeds[0].mol_l[0])


def test_the_year_is_complete_and_plausible():
    """365 days in order, none below zero, storms and dry weather in it."""
    with (DATA / "plant_season.csv").open(encoding="utf-8") as stream:
        rows = list(csv.DictReader(line for line in stream if not line.startswith("#")))
    assert len(rows) == 365
    assert [r["date"] for r in rows] == sorted({r["date"] for r in rows})
    alkalinity = np.array([float(r["alkalinity (mg/L as CaCO3)"]) for r in rows])
    assert 10.0 < alkalinity.min() < 20.0 < 55.0 < alkalinity.max() < 75.0
    assert all(6.5 < float(r["ph"]) < 8.2 for r in rows)


def test_a_wrong_key_in_a_demo_plan_is_named(tmp_path):
    """As a user meets it: the line, the key, the nearest one."""
    text = (DATA / "plan_wells.toml").read_text(encoding="utf-8").replace("efficiency", "efficency")
    path = tmp_path / "plan.toml"
    path.write_text(text, encoding="utf-8")
    line = next(k for k, row in enumerate(text.splitlines(), start=1) if "efficency" in row)
    with pytest.raises(AquabufError, match=rf"plan\.toml, line {line}, .*efficency.*efficiency"):
        read_plan(path)

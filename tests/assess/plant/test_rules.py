"""Rules for the finished water: each judged met, not met and not judged, with source and next step; cautions."""

import csv
import sys
from pathlib import Path

import carbonate_reference as reference
import numpy as np
import pytest
from made_streams import MG_CACO3, stocked, stream
from numpy.testing import assert_allclose
from works import dosing

sys.path.insert(0, str(Path(__file__).parents[2]))

from invented_plans import SMALLEST, answered, write_plan

from aquabuf.assess.limits import Limit, shipped_limits
from aquabuf.assess.plant.answer_json import limit_rows, warning_words
from aquabuf.assess.plant.hold import buffer_uses
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.assess.plant.plan_keys import step_kinds
from aquabuf.assess.plant.rules import LIMITS_TABLE, cautions_of, judged_by, plan_limits
from aquabuf.assess.plant.train import run_train
from aquabuf.chem.products import products

DATA = Path(__file__).parents[3] / "aquabuf" / "data"
LIMITS = {limit.name: limit for limit in shipped_limits(LIMITS_TABLE)}
CHLORIDE, SULFATE, CARBON = 35.453, 96.06, 12.011  # g/mol, IUPAC masses
T_C, STRENGTH = 15.0, 3e-3


def shipped(name):
    """Rows of a shipped table, read with the csv module alone."""
    with (DATA / f"{name}.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def at_ph(ph, alkalinity=1e-3, **totals):
    """Water of a pH; its carbon by the second calculation, in 40 digits."""
    return stream(alkalinity, float(reference.carbon_of(ph, alkalinity, T_C, STRENGTH)), t_c=T_C, strength=STRENGTH, **totals)


def caco3(mg_l, **more):
    """Water of an alkalinity in mg/L as CaCO3."""
    return stream(mg_l / MG_CACO3, 1e-3, **more)


def ions(chloride, sulfate, alkalinity=1e-3):
    """Water of chloride and sulfate in mol/L."""
    return stream(alkalinity, 1.1e-3, chloride=chloride, sulfate=sulfate)


HARD = 100.0 / MG_CACO3  # alkalinity of check 12 of the facts; half of it in moles is its calcium


def hard(ph, calcium=HARD / 2.0):
    """Water of check 12 of the facts (15 °C, ionic strength 0.005), at another pH or with another calcium."""
    return stream(HARD, float(reference.carbon_of(ph, HARD, T_C, 5e-3)), t_c=T_C, strength=5e-3, calcium=calcium)


def ccpp(ph):
    """Its precipitation potential by the second calculation, ion pairs counted. [mg/L as CaCO3]"""
    return 100.086e3 * float(reference.potential(ph, HARD, HARD / 2.0, T_C, 5e-3)[0])


NOT_KNOWN = stream(np.nan, np.nan)
# name of the rule: water that breaks it, with the value; one that keeps it, with the value; one that cannot be judged
CASES = {
    "pH below the secondary level": ((at_ph(6.4), 6.4), (at_ph(6.6), 6.6), NOT_KNOWN),
    "pH above the secondary level": ((at_ph(8.6), 8.6), (at_ph(8.4), 8.4), NOT_KNOWN),
    "chlorine works slowly": ((at_ph(8.1), 8.1), (at_ph(7.9), 7.9), NOT_KNOWN),
    "soft for the mains": ((caco3(29.9), 29.9), (caco3(30.1), 30.1), NOT_KNOWN),
    "little carbon for corrosion control": ((stream(5e-4, 8.2e-4), 0.82), (stream(5e-4, 8.4e-4), 0.84), NOT_KNOWN),
    "dissolves calcium carbonate": ((hard(7.5), ccpp(7.5)), (hard(8.2), ccpp(8.2)), hard(8.2, np.nan)),
    "deposits much": ((hard(9.2), ccpp(9.2)), (hard(8.2), ccpp(8.2)), hard(8.2, np.nan)),
    "chloride over sulfate": ((ions(0.51 / CHLORIDE, 1.0 / SULFATE), 0.51), (ions(0.49 / CHLORIDE, 1.0 / SULFATE), 0.49),
                              ions(1e-3, np.nan)),
    "corrosive to steel": ((ions(6.3e-4, 3e-4), 1.23), (ions(5.7e-4, 3e-4), 1.17), ions(np.nan, 3e-4)),
    "short of alkalinity for nitrification": ((caco3(49.0), 49.0), (caco3(51.0), 51.0), NOT_KNOWN),
    "pond short of alkalinity": ((caco3(19.0), 19.0), (caco3(21.0), 21.0), NOT_KNOWN),
}


def test_every_rule_has_its_waters():
    """A rule that nobody judged cannot be shipped."""
    assert set(CASES) == {row["name"] for row in shipped(LIMITS_TABLE)}


@pytest.mark.parametrize("name", CASES)
def test_a_rule_that_is_broken(name):
    """With its value by hand, its source and next step as the table has them."""
    water, value = CASES[name][0]
    (found,) = judged_by(water, [LIMITS[name]])
    assert found.broken
    assert_allclose(found.value, value, rtol=1e-4, atol=1e-4)
    (record,) = limit_rows([found])
    row = next(r for r in shipped(LIMITS_TABLE) if r["name"] == name)
    assert record["broken"]
    assert record["source"] == row["source"] + (" (recalled)" if row["mark"] == "recalled" else "")
    assert (record["next_step"], record["words"]) == (row["next_step"], row["words"])
    assert record["next_step"]
    assert record["rule"].startswith(f"{row['quantity']} {row['operator']} {float(row['limit']):g}")


@pytest.mark.parametrize("name", CASES)
def test_a_rule_that_is_kept(name):
    """On the other side of the limit; the value stays, and so does the source."""
    water, value = CASES[name][1]
    (found,) = judged_by(water, [LIMITS[name]])
    assert not found.broken
    assert_allclose(found.value, value, rtol=1e-4, atol=1e-4)
    assert limit_rows([found])[0]["source"].startswith(LIMITS[name].source)


@pytest.mark.parametrize("name", CASES)
def test_a_rule_that_cannot_be_judged(name):
    """What is missing breaks nothing, and has no value."""
    (found,) = judged_by(CASES[name][2], [LIMITS[name]])
    assert not found.broken
    assert np.isnan(found.value)


def test_chloride_without_any_sulfate_breaks_its_rule():
    """The ratio is endless, not unknown; without chloride too there is nothing to judge."""
    found = [judged_by(ions(c, 0.0), [LIMITS["chloride over sulfate"]])[0] for c in (1e-4, 0.0)]
    assert [j.broken for j in found] == [True, False]


def test_potential_of_the_facts():
    """+3.68 mg/L, 0.3 allowed as constants and pairs differ (check 12, computed by two other solvers)."""
    (found,) = judged_by(hard(8.2), [LIMITS["deposits much"]])
    assert_allclose(found.value, 3.68, rtol=0, atol=0.3)


def test_a_value_on_the_limit_keeps_the_rule():
    """Below 30 is broken, 30 itself is not, whatever rounding does to the units."""
    assert not judged_by(caco3(30.0), [LIMITS["soft for the mains"]])[0].broken


def test_of_a_group_only_the_first_broken_counts():
    """Bands are listed worst first; the next one has its value all the same."""
    def own(name, limit, group="band"):
        return Limit(name=name, group=group, quantity="alkalinity_mg_l_caco3", operator="<", limit=limit, lower=-np.inf, unit="mg/L as CaCO3",
                     kinds=("any",), regimes=("any",), words="low", next_step="", source="house rule")
    bands = [own("bad", 10.0), own("poor", 20.0), own("other", 20.0, group="own")]
    assert [j.broken for j in judged_by(caco3(5.0), bands)] == [True, False, True]
    assert [j.broken for j in judged_by(caco3(15.0), bands)] == [False, True, True]
    assert_allclose([j.value for j in judged_by(caco3(5.0), bands)], 5.0, rtol=1e-4)


def test_the_unit_of_each_rule_is_that_of_its_quantity():
    """A limit and its value can be compared."""
    units = {row["column"]: row["unit"] for row in shipped("plant_quantities")}
    assert [row["name"] for row in shipped(LIMITS_TABLE) if units.get(row["quantity"]) != row["unit"]] == []
    assert all(row["source"] and row["words"] and row["next_step"] for row in shipped(LIMITS_TABLE))
    assert_allclose(LIMITS["little carbon for corrosion control"].limit * CARBON, 10.0, rtol=0, atol=0.05)  # mg C/L


# ------------------------------------------------------------------ rules of a plan


@pytest.mark.parametrize("use", buffer_uses())
def test_rules_of_each_use(tmp_path, use):
    """Those whose row names it, in the order of the table."""
    plan = read_plan(write_plan(tmp_path, text=SMALLEST.replace("[flow]", f'use = "{use}"\n[flow]')))
    assert [x.name for x in plan_limits(plan)] == [r["name"] for r in shipped(LIMITS_TABLE) if use in r["kinds"].split(";")]


def test_an_own_rule_takes_the_place_of_a_shipped_one(tmp_path):
    """Of the same name; another name leads, and one for another use is left out."""
    def rule(name, limit, more=""):
        return (f'[limits."{name}"]\nquantity = "alkalinity_mg_l_caco3"\noperator = "<"\nlimit = {limit}\nwords = "low"\n'
                f'source = "house rule"\n{more}')
    text = SMALLEST + rule("soft for the mains", 25) + rule("house", 26) + rule("ponds", 27, 'kinds = ["pond"]\n')
    found = plan_limits(read_plan(write_plan(tmp_path, text=text)))
    shipped_names = [r["name"] for r in shipped(LIMITS_TABLE) if r["kinds"] == "drinking water"]
    assert [x.name for x in found] == ["house", *shipped_names]
    assert next(x.limit for x in found if x.name == "soft for the mains") == 25.0


def test_broken_rules_are_warnings_with_source_and_next_step():
    """As the record of a plan has them; what is kept or not judged warns of nothing."""
    answer, record = answered("upland")
    broken = {j.limit.name for j in answer.limits if j.broken}
    assert broken
    assert broken < {j.limit.name for j in answer.limits}
    told = {name for name in LIMITS if any(w.startswith(f"{name}: ") for w in warning_words(answer))}
    assert told == broken
    for name in broken:
        (words,) = [w for w in record["warnings"] if w.startswith(f"{name}: ")]
        assert LIMITS[name].source in words
        assert words.endswith(f"Next: {LIMITS[name].next_step}")


# ------------------------------------------------------------------ cautions


def test_every_caution_hangs_on_something_that_is():
    """A group of a product, a kind of step, or everything."""
    groups = {group for p in products().values() for group in p.groups}
    assert {row["hangs_on"] for row in shipped("plant_cautions")} <= groups | set(step_kinds()) | {"any"}
    assert all(row["source"] for row in shipped("plant_cautions"))


@pytest.mark.parametrize("name", ["quicklime", "hydrated lime", "caustic soda", "sulfuric acid", "ferric chloride", "chlorine gas",
                                  "carbon dioxide", "fluosilicic acid", "ammonia", "calcium chloride"])
def test_cautions_of_a_product(name):
    """Those of its groups and those for all, once each, in the order of the table."""
    train = run_train(stream(2e-3, 2e-3), [dosing([stocked(name)], [1e-5])])
    wanted = [r["words"] for r in shipped("plant_cautions") if r["hangs_on"] == "any" or r["hangs_on"] in products()[name].groups]
    assert list(cautions_of(train, [])) == wanted


def test_hazards_that_a_product_must_warn_of():
    """Heat of slaking, chlorine gas from acid and hypochlorite, caustic burns, gas that gathers (section 5 of the facts)."""
    words = {name: " ".join(cautions_of(run_train(stream(2e-3, 2e-3), [dosing([stocked(name)], [1e-5])]), []))
             for name in ("quicklime", "hydrochloric acid", "caustic soda 50 %", "carbon dioxide", "sodium hypochlorite")}
    assert "1,160 kJ/kg" in words["quicklime"]  # 65.2 kJ/mol / 56.077 g/mol = 1163 kJ/kg
    assert "chlorine gas" in words["hydrochloric acid"]
    assert "Acid into water" in words["hydrochloric acid"]
    assert "burn" in words["caustic soda 50 %"]
    assert "confined spaces" in words["carbon dioxide"]
    assert "Never let chlorine or hypochlorite meet acid" in words["sodium hypochlorite"]
    assert "kJ/kg" not in words["caustic soda 50 %"]


def test_cautions_of_a_kind_of_step():
    """Aeration and nitrification have their own, without any product."""
    train = run_train(stream(2e-3, 2e-3), [])
    of = {r["hangs_on"]: r["words"] for r in shipped("plant_cautions")}
    assert set(cautions_of(train, ["aerate", "nitrify"])) - set(cautions_of(train, [])) == {of["aerate"], of["nitrify"]}

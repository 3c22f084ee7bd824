"""A plan solved: what makes it hold, its feeds and faults, rules by use and of the plan's own, cautions by product."""

import sys
from dataclasses import replace
from pathlib import Path

import pytest
from made_streams import target
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parents[2]))

from invented_plans import BLEND, FIXED, RIVER, TWO_STAGES, UPLAND, answered, write_plan

from aquabuf.assess.plant.answer import OVERFEED, TargetLine, solve_plan
from aquabuf.assess.plant.feed_lines import feed_lines, feed_of, largest_mol_l
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.assess.plant.steps.blend import Blend
from aquabuf.errors import InputError
from aquabuf.tables import read_table

NAOH = 39.997  # g/mol, IUPAC masses
FULL_MG_L = 20.0 * 24.0 * 1.525 * 0.50 / 10.0  # pure caustic that 20 L/h of 50 % at 1.525 kg/L give in 10 ML/d


@pytest.fixture
def solve(tmp_path):
    """Solve a plan without draws."""
    def go(text, draws=0):
        return solve_plan(read_plan(write_plan(tmp_path, text=text)), draws=draws)
    return go


def test_a_target_that_is_missed_makes_the_plan_fail():
    """Whatever missed it; the reason has what was reached."""
    answer = answered("upland")[0]
    missed = replace(answer, targets=(TargetLine("final pH", target("ph", 8.0), 8.4),))
    assert answer.feasible
    assert not missed.feasible
    assert missed.reason == "final pH: pH 8.00 not met, 8.40"


def test_the_sweep_of_a_blend_is_looked_at_once(solve, monkeypatch):
    """Draws, faults and curves run the works again, and none of them needs the other ratios."""
    seen = []
    sweep = Blend.sweep
    monkeypatch.setattr(Blend, "sweep", lambda self, *a, **k: seen.append(1) or sweep(self, *a, **k))
    solve(BLEND, draws=100)
    assert len(seen) == 1


def test_no_draws_no_errors(solve):
    """And with draws there are both."""
    without, some = solve(FIXED), solve(FIXED, draws=100)
    assert (without.readings_error, without.feed_error) == (None, None)
    assert (some.readings_error.draws, some.feed_error.draws) == (100, 100)


# ------------------------------------------------------------------ feeds

@pytest.mark.parametrize("dose", ["15 mg/L", "0 mg/L"])
def test_largest_dose_of_a_pump(solve, dose):
    """From its size alone, whether anything is dosed or not."""
    answer = solve(FIXED.replace('dose = "15 mg/L"', f'dose = "{dose}"'))
    assert_allclose(largest_mol_l(answer.feeds[0], 10_000.0) * 1e3 * NAOH, FULL_MG_L, rtol=1e-6)
    assert_allclose(solve(FIXED).faults[0].dose_mol_l[0] * 1e3 * NAOH, FULL_MG_L, rtol=1e-6)


def test_a_feed_of_nothing_is_off(solve):
    """No fault, no curve, and words."""
    answer = solve(FIXED.replace('dose = "15 mg/L"', 'dose = "0 mg/L"'))
    assert (answer.faults, answer.curves) == ((), ())
    assert answer.feeds[0].setting_words() == "off: nothing is needed"


def test_without_a_machine_a_stuck_feed_is_a_multiple(solve):
    """Told as an assumption."""
    answer = solve(FIXED.replace('pump = { largest = "20 L/h" }\n', ""))
    assert_allclose(answer.faults[0].dose_mol_l, OVERFEED * answer.faults[0].wanted_mol_l)
    assert answer.fault_words == ("caustic: the plan has no pump or feeder, so a stuck feed is taken as 2 times the dose",)
    assert answer.feeds[0].setting_words() == "give [products.caustic] a pump or feeder for its setting"


def test_a_machine_that_is_too_small_cannot_overfeed(solve):
    """Only its stop is looked at."""
    answer = solve(RIVER)
    assert [f.case for f in answer.faults if f.product.name == "alum"] == ["stopped"]
    assert "alum: its pump or feeder gives less than the dose, so that a stuck one does not overfeed" in answer.fault_words
    assert [line.out_of_reach for line in answer.feeds] == [True, False]


@pytest.mark.parametrize("kg_h", [2, 6, 60])
def test_a_product_that_goes_in_twice(solve, kg_h):
    """Two stages of one gas: each has its feed; curve and fault are told once, whatever the feeder reaches."""
    answer = solve(TWO_STAGES.replace("6 kg/h", f"{kg_h} kg/h"))
    assert [line.product.name for line in answer.feeds] == ["gas", "gas"]
    assert len(answer.curves) == 1
    assert {f.case for f in answer.faults} >= {"stopped"}
    assert len(answer.faults) <= 2
    assert answer.fault_words[-1] == "gas goes in twice in gas: a fault is looked at where it first does"


def test_feed_of_any_doses(solve):
    """Row by row, as the table of a dose-response asks."""
    answer = solve(FIXED)
    rate, setting = feed_of(answer.plan, answer.feeds[0].product, [0.0, FULL_MG_L / NAOH / 2e3])
    assert_allclose(rate.l_h, [0.0, 10.0], rtol=1e-6)
    assert_allclose(setting.setting_pct, [0.0, 50.0], rtol=1e-6)


def test_doses_not_found_have_no_setting():
    """And no rate."""
    answer = answered("impossible")[0]
    assert [line.setting_words() for line in feed_lines(answer.plan, answer.train)] == ["no dose found"]


# ------------------------------------------------------------------ rules and cautions

def test_rules_are_those_of_the_use(solve):
    """Each use has rows of its own."""
    found = {j.limit.name for j in solve(FIXED.replace('name = "Fixed feed"', 'name = "x"\nuse = "pond"')).limits}
    assert found == {r["name"] for r in read_table("plant_limits") if "pond" in r["kinds"].split(";")}


def test_own_rules_replace_and_add(solve):
    """With their source; a faulty one is told."""
    own = '\n[limits."corrosion plan"]\nquantity = "ph"\noperator = "<"\nlimit = 8.5\nwords = "below our plan"\nsource = "plan of 2025"\n'
    broken = [j for j in solve(UPLAND + own).limits if j.broken]
    assert ("corrosion plan", "plan of 2025") in [(j.limit.name, j.limit.source) for j in broken]
    with pytest.raises(InputError, match=r"plan\.toml: limit 'corrosion plan'.*turbidity"):
        solve(UPLAND + own.replace('"ph"', '"turbidity"'))


def test_cautions_belong_to_the_products():
    """Lime has its own, caustic has none of lime; those for all stand in each."""
    lime, caustic = (answered(name)[0].cautions for name in ("upland", "fixed"))
    words = {r["hangs_on"]: r["words"] for r in read_table("plant_cautions")}
    assert words["lime"] in lime
    assert words["lime"] not in caustic
    assert words["strong base"] in caustic
    assert words["any"] in lime
    assert words["any"] in caustic
    assert words["coagulant"] in answered("river")[0].cautions

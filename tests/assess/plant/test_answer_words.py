"""What an answer says of beds, of feeds in several places, of lime that does not dissolve, and of what cannot be met."""

import re
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parents[2]))

from invented_plans import FIXED, PLANS, RIVER, answered, write_plan

from aquabuf.assess.plant.answer import solve_plan
from aquabuf.assess.plant.answer_json import answer_record
from aquabuf.assess.plant.faults import STOPPED
from aquabuf.assess.plant.hold import buffer_words
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.assess.plant.steps.words import brief

LIME_G_MOL, NAOH_G_MOL = 74.093, 39.997  # IUPAC masses
MG_CACO3_MEQ = 50.0435                   # mg of CaCO3 per milliequivalent
BED = '''[plan]
name = "Bed"
[flow]
now = "3 ML/d"
[water]
temperature_c = 15
ph = 6.3
alkalinity = "20 mg/L as CaCO3"
"calcium (mg/L)" = 6.0
[products.stone]
is = "limestone"
strength = "98 %"
[products.gas]
is = "carbon dioxide"
strength = "99.9 %"
feeder = { largest = "5 kg/h" }
[[steps]]
do = "contact"
name = "bed"
product = "stone"
co2 = "gas"
co2_dose = "15 mg/L"
'''
HARD = '''[plan]
name = "Hard"
[flow]
now = "1 ML/d"
[water]
temperature_c = 10
ph = 7.8
alkalinity = "150 mg/L as CaCO3"
"calcium (mg/L)" = 50
"magnesium (mg/L)" = 5
[products.lime]
is = "hydrated lime"
strength = "95 %"
[products.caustic]
is = "caustic soda 50 %"
[[steps]]
do = "adjust"
name = "final pH"
'''
SEWAGE = '''[plan]
name = "Sewage"
use = "wastewater"
[flow]
now = "9 ML/d"
[water]
temperature_c = 14
ph = 7.2
alkalinity = "250 mg/L as CaCO3"
ammonium = "32 mg/L as N"
[[steps]]
do = "nitrify"
oxidize = "30 mg/L as N"
[[steps]]
do = "aerate"
efficiency = "80 %"
'''


@pytest.fixture
def solve(tmp_path):
    """Solve a plan without draws."""
    def go(text):
        return solve_plan(read_plan(write_plan(tmp_path, text=text)), draws=0)
    return go


# ------------------------------------------------------------------ beds


def test_a_bed_follows_its_water(solve):
    """With its gas stopped, the bed dissolves what the water without gas asks for: the same as a plan without gas."""
    answer, without = solve(BED), solve(BED.replace("15 mg/L", "0 mg/L"))
    stopped = next(f for f in answer.faults if f.case == STOPPED)
    assert_allclose(stopped.ph_behind, without.train.final.water().ph, rtol=1e-12)
    assert abs(float(stopped.ph_behind[0]) - float(answer.train.final.water().ph[0])) > 0.05


def test_a_bed_is_no_feed(solve):
    """It cannot stick, has no setting and no dose-response; its gas has all of them."""
    answer = solve(BED)
    assert answer.beds == {("bed", "stone")}
    assert {f.product.name for f in answer.faults} == {c.product for c in answer.curves} == {"gas"}
    assert [x.product.name for x in answer.feeds] == ["gas", "stone"]


# ------------------------------------------------------------------ guard rails


@pytest.mark.parametrize(("mg_l", "stops"), [(1700, 0), (1800, 1)])
def test_lime_beyond_its_solubility(solve, mg_l, stops):
    """1.85 g/L at 0 °C and 1.65 at 20 °C (recalled): 1.75 at 10 °C. Rails on pH are out of the way."""
    lime = '[products.lime]\nis = "hydrated lime"\nstrength = "95 %"\n'
    text = FIXED[:FIXED.index("[products")].replace("temperature_c = 15", "temperature_c = 10") + lime + \
        f'[[steps]]\ndo = "dose"\nname = "feed"\nproduct = "lime"\ndose = "{mg_l} mg/L"\ndose_as = "pure"\n' \
        "[guards]\nph = [5, 14]\nover_ph = 14\n"
    found = [f.words for _, f in solve(text).stops]
    assert len(found) == stops
    assert all(f"takes {mg_l} mg/L of Ca(OH)2 as lime, and about 1750 mg/L dissolve" in words for words in found)


def test_a_step_without_a_dose_may_pass_a_rail(solve):
    """Nitrification of 30 mg/L as N takes 214 of 250 mg/L as CaCO3 and leaves its acid: a warning, as air follows."""
    answer = solve(SEWAGE)
    ph = [float(p.after.water().ph[0]) for p in answer.train.passed]
    assert ph[0] < 6.0
    assert [(f.severity, f"pH is {ph[0]:.2f}, below the guard rail of 6" in f.words) for f in answer.guards] == \
        [("warning", True)] + [("stop", False)] * (ph[1] < 6.0)


def test_a_step_that_leaves_ph_as_it_is_is_not_blamed(solve):
    """Sour raw water that only turns warmer passes no rail before the end."""
    text = ('[plan]\nname = "Bog"\n[flow]\nnow = "1 ML/d"\n[water]\ntemperature_c = 10\nph = 5.5\n'
            'alkalinity = "5 mg/L as CaCO3"\n[[steps]]\ndo = "temperature"\nname = "pipe"\nto = "11 °C"\n'
            '[[steps]]\ndo = "temperature"\nname = "tap"\nto = "12 °C"\n')
    assert [f.severity for f in solve(text).guards] == ["stop"]


# ------------------------------------------------------------------ ranges


def test_range_of_a_product_in_two_places(solve):
    """Both feeds are named with their sum, and what was assumed of their machines is told."""
    first = '[[steps]]\ndo = "dose"\nname = "ahead"\nproduct = "lime"\ndose = "6 mg/L"\ndose_as = "product"\n\n'
    answer = solve(RIVER.replace("[[steps]]", first + "[[steps]]", 1))
    found = next(r for r in answer.ranges if r.product.name == "lime")
    together = sum(x.mg_l_product for x in answer.feeds if x.product.name == "lime")
    assert found.words().startswith(f"lime, 2 feeds moved alike, {together:.3g} mg/L together: from ")
    said = "lime goes in at ahead and final pH: each is taken to have a machine of its own of the size in the plan"
    assert said in answer_record(answer)["assumptions"]
    assert not any("machine of its own" in a for a in answer_record(solve(RIVER))["assumptions"])


def test_range_does_not_turn_down_what_works_elsewhere(solve):
    """A coagulant and an oxidant are fed for more than the windows; lime is not."""
    words = {r.product.name: r.words() for r in solve(RIVER).ranges}
    assert words["alum"].endswith("coagulation is no window here and sets its least dose")
    assert "is no window here" not in words["lime"]


# ------------------------------------------------------------------ numbers and words


@pytest.mark.parametrize(("value", "figures", "sign", "wanted"), [
    (158.2, 2, "+", "+158"), (-0.7531, 2, "+", "-0.75"), (3878.4, 3, "", "3,878"), (999.6, 3, "", "1,000"), (4.0, 3, "", "4"),
    (99.6, 2, "", "100"), (0.0212, 2, "", "0.021")])
def test_brief_numbers(value, figures, sign, wanted):
    """Never a power of ten."""
    assert brief(value, figures, sign) == wanted


@pytest.mark.parametrize("name", PLANS)
def test_no_powers_of_ten_in_sentences(name):
    """Nobody reads 1.6e+02 % off a wall."""
    def texts(value):
        if isinstance(value, str):
            yield value
        elif isinstance(value, dict | list | tuple):
            for v in value.values() if isinstance(value, dict) else value:
                yield from texts(v)
    assert [t for t in texts(answered(name)[1]) if re.search(r"\de\+\d", t)] == []


def test_buffering_that_hardly_changes():
    """Where the whole curve counts as weak there is no weakest part to warn of."""
    curve = answered("upland")[0].curves[0]
    flat = replace(curve, weakest_low_mg_l=0.0, weakest_high_mg_l=curve.most_mg_l)
    assert curve.words()[-1].startswith("buffering is weakest from ")
    assert flat.words()[-1] == f"buffering is much the same at every dose up to {curve.most_mg_l:.3g} mg/L"


def test_a_reagent_of_nothing_is_not_told(solve):
    """Water that buffers enough as it is needs a pH only, and no zero of a reagent."""
    hold = '[hold]\nph = 7.4\nintensity = "0.05 meq/L per pH"\nuse = "wastewater"\n'
    buffers = [b for b in solve(SEWAGE + hold).hold.buffers if np.ravel(b.acid_mol_l)[0] == 0.0 and b.in_reach[0]]
    assert buffers
    for b in buffers:
        assert "only its pH is to be moved" in buffer_words(b)
        assert not re.search(r"(takes|and) 0 mg/L", buffer_words(b))


# ------------------------------------------------------------------ what cannot be met


def test_carbon_dioxide_is_no_cure_for_alkalinity(solve):
    """It lowers pH and leaves alkalinity; against pH it does work."""
    alkalinity = solve(HARD + 'products = ["caustic"]\ntarget = { alkalinity = "100 mg/L as CaCO3" }\n').reason
    assert "carbon dioxide lowers pH and leaves alkalinity as it is" in alkalinity
    assert "acid or carbon dioxide works the other way" in solve(HARD + 'products = ["caustic"]\ntarget = { ph = 7.2 }\n').reason


@pytest.mark.parametrize(("target", "label"), [('hardness = ["60 mg/L as CaCO3", "80 mg/L as CaCO3"]', "total hardness"),
                                               ('calcium = "40 mg/L"', "calcium")])
def test_what_no_dose_takes_out(solve, target, label):
    """Caustic moves no hardness, and softening or another water is named."""
    reason = solve(HARD + f'products = ["caustic"]\ntarget = {{ {target} }}\n').reason
    assert ": caustic does not move it" in reason
    assert "together, not apart" not in reason
    assert reason.endswith(f"The water brings more {label} than this, and no dose takes it out: soften, or blend with water "
                           "that has less.")


def test_two_targets_and_one_product(solve):
    """What each target would take by itself: 50 mg/L as CaCO3 of alkalinity from lime, by hand."""
    reason = solve(HARD + 'products = ["lime"]\ntarget = { ph = 8.3, alkalinity = "200 mg/L as CaCO3" }\n').reason
    lime = 50.0 / MG_CACO3_MEQ / 2.0 * LIME_G_MOL / 0.95
    assert f"alkalinity 200.0 mg/L as CaCO3 alone takes {lime:.3g} mg/L of lime, and then it has pH " in reason
    ph = re.search(r"pH 8\.30 alone takes ([\d.]+) mg/L of lime, and then it has alkalinity ([\d.]+) mg/L", reason)
    assert_allclose(float(ph[2]), 150.0 + float(ph[1]) * 0.95 / LIME_G_MOL * 2.0 * MG_CACO3_MEQ, atol=0.1)


def test_two_targets_that_pull_apart(solve):
    """A lower pH wants caustic out, more to deposit wants it in."""
    reason = solve(HARD + 'products = ["caustic"]\ntarget = { ph = [7.0, 7.5], ccpp = "at least 20 mg/L as CaCO3" }\n').reason
    assert re.search(r"pH 7\.50 alone would need [\d.]+ mg/L of caustic taken out; precipitation potential 20\.00 mg/L as CaCO3 alone "
                     r"takes [\d.]+ mg/L of caustic, and then it has pH 8\.\d\d", reason)


# ------------------------------------------------------------------ rounding


def test_rounding_is_no_figure(solve):
    """Water that a softener leaves at saturation has an index of 0, not 1e-13, and is not said to deposit."""
    soften = HARD.replace('[products.caustic]\nis = "caustic soda 50 %"\n', "").replace('do = "adjust"\nname = "final pH"',
        'do = "soften"\nmethod = "excess lime"\nlime = "lime"') + "[guards]\nph = [5, 13]\nover_ph = 13\n"
    record = answer_record(solve(soften))
    small = [v for row in (*record["steps"], *(r for c in record["curves"] for r in c["rows"])) for v in row.values()
             if isinstance(v, float) and 0.0 < abs(v) < 1e-10]
    assert small == []
    assert record["steps"][-1]["si_calcite"] == 0.0
    assert record["saturation"]["words"].startswith("The water neither deposits nor dissolves calcium carbonate: saturation index")

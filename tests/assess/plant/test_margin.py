"""The room that an adjust step keeps at the ends of its windows, and what it does where there is none.

Doses by hand: caustic in carbonate water from printed constants alone (`works`, `carbonate_by_hand`).
"""

import sys
from pathlib import Path

import numpy as np
import pytest
from made_streams import MG_CACO3, target
from numpy.testing import assert_allclose
from works import CAUSTIC, CO2, LIME, bare, caustic_by_hand, ph

sys.path.insert(0, str(Path(__file__).parents[2]))

from invented_plans import UPLAND, write_plan

from aquabuf.assess.plant.answer import solve_plan
from aquabuf.assess.plant.build import build_steps
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.assess.plant.steps.adjust import Adjust
from aquabuf.errors import InputError

ALKALINITY, RAW_PH = 1e-3, 7.2
RAW, (DIC,) = bare(ALKALINITY, RAW_PH)
WINDOW = 'target = { ph = [8.0, 8.4], alkalinity = "at least 55 mg/L as CaCO3" }'


def run(*wants, products=(CAUSTIC,), raw=RAW, **options):
    """A step that adjusts; its doses and what it says."""
    out = Adjust(name="final", products=products, targets=wants, **options).run(raw)
    return out, " | ".join(f.words for f in out.findings)


def at_most_alkalinity_of(wanted_ph):
    """A window of alkalinity that ends where caustic brings the water to a pH."""
    return target("alkalinity", -np.inf, (ALKALINITY + caustic_by_hand(ALKALINITY, DIC, wanted_ph)) * MG_CACO3)


@pytest.mark.parametrize(("margin", "reached"), [(0.25, 8.1), (0.1, 8.04), (0.5, 8.2), (0.0, 8.0)])
def test_the_cheapest_dose_keeps_the_margin(margin, reached):
    """The least caustic lies at the low end, so much of the width of 0.4 inside."""
    out, words = run(ph(8.0, 8.4), margin=margin)
    assert_allclose(out.stream.water().ph, reached, rtol=0, atol=1e-6)
    assert_allclose(out.doses[0].mol_l, caustic_by_hand(ALKALINITY, DIC, reached), rtol=1e-3)
    assert f"held by pH {reached:.2f}" in words
    assert ("aimed" in words) == (margin > 0.0)
    if margin:
        assert f"aimed {100 * margin:g} % of the width inside each window" in words
    assert "no room left" not in words


def test_no_room_left():
    """Alkalinity may not go as high as pH 8.1 asks, but pH 8.05 would be within: the window's own end is taken, and said."""
    wants = (ph(8.0, 8.4), at_most_alkalinity_of(8.05))
    out, words = run(*wants, margin=0.25)
    assert_allclose(out.stream.water().ph, 8.0, rtol=0, atol=1e-6)
    assert_allclose(out.doses[0].mol_l, caustic_by_hand(ALKALINITY, DIC, 8.0), rtol=1e-3)
    assert "held by pH 8.00 (low end), with no room left" in words
    assert "with no room left" not in run(*wants, margin=0.0)[1]


def test_room_enough_says_nothing_of_it():
    """The same with alkalinity up to that of pH 8.15."""
    out, words = run(ph(8.0, 8.4), at_most_alkalinity_of(8.15), margin=0.25)
    assert_allclose(out.stream.water().ph, 8.1, rtol=0, atol=1e-6)
    assert "no room left" not in words


def test_out_of_reach_stays_out_of_reach():
    """Neither inside nor at the end: no dose, and a stop."""
    out, _ = run(ph(8.0, 8.4), at_most_alkalinity_of(7.9), margin=0.25)
    assert np.isnan(out.doses[0].mol_l[0])
    assert [f.severity for f in out.findings] == ["stop"]


def test_rows_do_not_see_each_other():
    """One row has room, the next has none, the third cannot."""
    limit = (ALKALINITY + caustic_by_hand(ALKALINITY, DIC, 8.05)) * MG_CACO3
    raw, _ = bare([0.95 * ALKALINITY, ALKALINITY, 1.2 * ALKALINITY], RAW_PH)
    wants = (ph(8.0, 8.4), target("alkalinity", -np.inf, limit))
    out, _ = run(*wants, raw=raw, margin=0.25)
    assert_allclose(out.stream.water().ph[:2], [8.1, 8.0], rtol=0, atol=1e-6)
    assert np.isnan(out.doses[0].mol_l[2])
    for k in range(3):
        alone, _ = run(*wants, raw=raw.take(np.array([k])), margin=0.25)
        assert_allclose(alone.doses[0].mol_l[0], out.doses[0].mol_l[k], rtol=1e-9)


def test_open_windows_and_values_keep_their_end():
    """A window without a second end has no width; a value has none either."""
    least = target("alkalinity", 70.0, np.inf)
    out, _ = run(least, margin=0.25)
    assert_allclose(out.doses[0].mol_l, 70.0 / MG_CACO3 - ALKALINITY, rtol=1e-4)
    out, _ = run(ph(8.3), target("alkalinity", 60.0, 80.0), products=(LIME, CO2), margin=0.25)
    assert_allclose(out.stream.water().ph, 8.3, rtol=0, atol=1e-6)
    assert_allclose(out.stream.alkalinity_eq_l * MG_CACO3, 65.0, rtol=1e-4)  # 60 + 20 / 4


# ---------------------------------------------------------------- from a plan


@pytest.fixture
def plan_of(tmp_path):
    """The plan of the upland works with a window, and what is written below it."""
    def read(more=""):
        old = 'target = { ph = 8.4, alkalinity = "55 mg/L as CaCO3" }'
        assert old in UPLAND
        return read_plan(write_plan(tmp_path, text=UPLAND.replace(old, f"{WINDOW}\n{more}")))
    return read


def test_a_plan_keeps_a_quarter_by_default(plan_of):
    """Told as an assumption; 25 % of 0.4 leave pH 8.1 to 8.3, and the answer lies there."""
    plan = plan_of()
    assert build_steps(plan)[0].margin == 0.25
    assert any('margin = "25 %"' in words for words in plan.assumptions)
    answer = solve_plan(plan, draws=0)
    reached = next(t.reached for t in answer.targets if t.target.quantity.name == "ph")
    assert 8.1 - 1e-6 <= reached <= 8.3 + 1e-6
    assert any("aimed 25 % of the width inside each window" in f.words for _, f in answer.train.findings("note"))
    assert answer.targets[0].target.words == "pH 8.00 to 8.40"  # the window is judged as it was written


@pytest.mark.parametrize(("margin", "share"), [('margin = "10 %"', 0.1), ("margin = 0.4", 0.4), ('margin = "0 %"', 0.0)])
def test_margin_of_a_plan(plan_of, margin, share):
    """As written, and then it is no assumption."""
    plan = plan_of(margin)
    assert_allclose(build_steps(plan)[0].margin, share, rtol=1e-12)
    assert not any("margin" in words for words in plan.assumptions)


def test_a_margin_that_leaves_nothing(plan_of):
    """More than half at each end."""
    with pytest.raises(InputError, match=r"plan\.toml, line 44, .*margin must be at least 0 and at most 0\.5; found .*60 %"):
        plan_of('margin = "60 %"')

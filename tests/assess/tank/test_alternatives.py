"""Other layouts beside a design: smaller beside one that holds, larger beside one that does not, by the same rule."""

import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parent))

from made_jobs import bicarbonate, job, steady, strong

from aquabuf.assess.tank.alternatives import LARGER, MOST_CASES, USUAL_HOURS
from aquabuf.assess.tank.design import design
from aquabuf.assess.tank.job import Spread

VARIED = Spread(relative_sd=0.3, lasting_h=2.0)


@pytest.fixture(scope="module")
def failing():
    """Strong acid in one tank with a coarse feed and a narrow window."""
    return design(job(steady(strong(-0.1), spread=VARIED), window=(6.9, 7.1), wishes={"stages": 1},
                      site={"feed_error": 0.02}, trial={"cases": 2}), processes=1)


@pytest.fixture(scope="module")
def holding():
    """A buffered acid in two tanks behind an equalization tank."""
    return design(job(steady(bicarbonate(), spread=VARIED), wishes={"stages": 2, "equalization_m3": 12.0},
                      trial={"cases": 3}), processes=1)


def by_words(found):
    """Layouts by what is changed."""
    return {a.words: a for a in found.alternatives}


def test_the_design_stands_first(failing, holding):
    """With the same cases, volumes and verdict."""
    for found in (failing, holding):
        first = found.alternatives[0]
        assert first.words == "as designed"
        assert first.accepted == found.accepted
        assert first.probability == found.trial.monte.probability
        assert_allclose(first.volume_m3, found.layout.equalization.volume_m3 + sum(s.volume_m3 for s in found.layout.stages))
        assert_allclose(first.outside_min, np.median(found.trial.monte.outside_min))


def test_larger_layouts_beside_one_that_fails(failing):
    """A tank more, tanks twice as large, an equalization tank of 6 h where there is none, both, half the feed error."""
    assert not failing.accepted
    found = by_words(failing)
    (size,) = (s.volume_m3 for s in failing.layout.stages)
    assert found["2 tanks"].tanks == 2
    assert_allclose(found["tanks 2 times larger"].volume_m3, LARGER * size)
    ahead = USUAL_HOURS * failing.layout.mean_m3_h
    both = found[f"equalization {ahead:.0f} m³, tanks 2 times larger"]
    assert_allclose([both.equalization_m3, found[f"equalization {ahead:.0f} m³"].equalization_m3], ahead)
    assert_allclose(both.volume_m3, ahead + LARGER * size)
    assert "feed error 1 %" in found
    assert all(a.tanks == 1 for w, a in found.items() if w != "2 tanks")
    assert "no equalization" not in found


def test_more_tanks_do_better(failing):
    """A residual of e^n: the second tank sees 2 % of what the first saw, so it is far less outside."""
    found = by_words(failing)
    assert found["2 tanks"].outside_min < found["as designed"].outside_min


def test_smaller_layouts_beside_one_that_holds(holding):
    """A tank fewer, half and none of the equalization."""
    assert holding.accepted
    found = by_words(holding)
    assert set(found) == {"as designed", "1 tank", "equalization 6 m³", "no equalization"}
    assert found["1 tank"].tanks == 1
    assert_allclose(found["equalization 6 m³"].equalization_m3, 6.0)
    assert found["no equalization"].equalization_m3 == 0.0
    assert found["no equalization"].tanks == 2


def test_none_without_cases():
    """Nothing to rank by."""
    assert design(job(steady(bicarbonate()), wishes={"stages": 1}), cases=0).alternatives == ()
    assert design(job(steady(bicarbonate()), wishes={"stages": 1}), simulate=False).alternatives == ()


def test_few_cases_are_enough(monkeypatch):
    """However many cases the design has, another layout gets no more than the table says."""
    import aquabuf.assess.tank.alternatives as module

    asked = []
    real = module.trial_of

    def noted(*args, cases, **more):
        asked.append(cases)
        return real(*args, cases=min(cases, 2), **more)

    monkeypatch.setattr(module, "trial_of", noted)
    design(job(steady(bicarbonate()), wishes={"stages": 2}, trial={"cases": MOST_CASES + 5, "days": 0.02}), processes=1)
    assert set(asked) == {MOST_CASES}

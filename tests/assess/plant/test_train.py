"""Steps in a row, and the same works with its doses held."""

import numpy as np
from made_streams import MG_CACO3, soft, stocked, stream, target
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.steps.adjust import Adjust, Dose
from aquabuf.assess.plant.steps.base import Dosed, Finding, Held, StepOutcome
from aquabuf.assess.plant.train import held_steps, run_train

ALUM, LIME = stocked("alum 14-water"), stocked("hydrated lime")


class Aerate:
    """A step that doses nothing: half of the CO2 goes."""

    name, kind = "tower", "aerate"

    def run(self, water):
        away = 0.5 * water.water().species_mol_l["CO2"]
        where = np.ones(water.rows, dtype=bool)
        return StepOutcome(water.added({"carbon": -1.0}, away), findings=(Finding("note", "half of the CO2 blown out", where),))


def works():
    """Alum, air, lime to pH 8.3."""
    return [Dose(name="clarifier", products=(ALUM,), mol_l=(ALUM.mol_l(10.0),)), Aerate(),
            Adjust(name="final pH", products=(LIME,), targets=(target("ph", 8.3),))]


def test_water_after_each_step():
    """Each step has the water that the one before let go; alkalinity by hand after alum (6 eq per 594.34 g)."""
    raw = soft(2)
    train = run_train(raw, works())
    assert [p.step.name for p in train.passed] == ["clarifier", "tower", "final pH"]
    assert train.passed[0].before is raw
    assert all(one.after is two.before for one, two in zip(train.passed, train.passed[1:], strict=False))
    assert_allclose(train.passed[0].after.alkalinity_eq_l, 4e-4 - 6 * 10e-3 / 594.34, rtol=1e-5)
    assert_allclose(train.passed[1].after.alkalinity_eq_l, train.passed[0].after.alkalinity_eq_l)
    assert (train.passed[1].after.carbon_mol_l < train.passed[0].after.carbon_mol_l).all()
    assert_allclose(train.final.water().ph, 8.3, rtol=0, atol=1e-6)
    assert [(name, d.product.name) for name, d in train.doses()] == [("clarifier", "alum 14-water"), ("final pH", "hydrated lime")]
    assert train.feasible().all()


def test_conservation_through_the_works():
    """Alkalinity and calcium at the end are those of the raw water and the doses."""
    raw = soft(3)
    train = run_train(raw, works())
    alum, lime = (d.mol_l for _, d in train.doses())
    assert_allclose(train.final.alkalinity_eq_l, raw.alkalinity_eq_l - 6 * alum + 2 * lime, rtol=1e-12)
    assert_allclose(train.final.total("calcium"), raw.total("calcium") + lime, rtol=1e-12)
    assert_allclose(train.final.total("sulfate"), raw.total("sulfate") + 3 * alum, rtol=1e-12)


def test_no_steps():
    """The water leaves as it came."""
    raw = soft()
    assert run_train(raw, []).final is raw
    assert run_train(raw, []).feasible().all()


def test_findings_by_severity():
    """With the name of their step; all, or of one severity."""
    steps = [*works()[:2], Adjust(name="wish", products=(LIME,), targets=(target("ph", 5.0),))]
    train = run_train(soft(2), steps)
    assert [(name, f.severity) for name, f in train.findings()] == [("tower", "note"), ("wish", "stop")]
    assert [name for name, _ in train.findings("stop")] == ["wish"]
    assert_array_equal(train.feasible(), [False, False])


def test_feasible_row_by_row():
    """Only the row whose dose was found."""
    raw = stream([4e-4, 4e-4], [5e-4, 3.8e-4], t_c=10.0, strength=1e-3)  # pH 6.9 and above 9
    train = run_train(raw, [Adjust(name="pH", products=(LIME,), targets=(target("ph", 8.3),), explain=False)])
    assert_array_equal(train.feasible(), [True, False])
    assert_array_equal(train.final.alkalinity_eq_l[1], 4e-4)


def test_held_doses():
    """The found doses go on when the water changes; a factor on one product alone; steps without doses stay as they are."""
    raw = soft()
    train = run_train(raw, works())
    lime = train.doses()[1][1].mol_l
    steps = held_steps(train, {"hydrated lime": 1.2})
    assert steps[1] is train.passed[1].step
    assert [s.name for s in steps] == ["clarifier", "tower", "final pH"]
    assert [s.kind for s in steps] == ["dose", "aerate", "adjust"]
    other = stream(8e-4, 9e-4, t_c=10.0, strength=1e-3)
    drifted = run_train(other, steps)
    assert_allclose(drifted.doses()[0][1].mol_l, ALUM.mol_l(10.0))
    assert_allclose(drifted.doses()[1][1].mol_l, 1.2 * lime)
    assert_allclose(drifted.final.alkalinity_eq_l * MG_CACO3, (8e-4 - 6 * ALUM.mol_l(10.0) + 2.4 * lime) * MG_CACO3)
    same = run_train(raw, held_steps(train))
    assert_allclose(same.final.water().ph, 8.3, rtol=0, atol=1e-6)


def test_what_can_be_held():
    """Dosing steps say so."""
    assert isinstance(works()[0], Held)
    assert isinstance(works()[2], Held)
    assert not isinstance(Aerate(), Held)
    again = works()[0].held((Dosed(LIME, np.array([1e-4])),))
    assert_array_equal(again.mol_l[0], [1e-4])

"""What holds for every step that needs no dose solver: rows do not see each other, nothing in is nothing out."""

from dataclasses import FrozenInstanceError

import numpy as np
import pytest
from made_water import stocked, water_of
from numpy.testing import assert_allclose

from aquabuf.assess.plant.steps.biology import Denitrify, Nitrify
from aquabuf.assess.plant.steps.blend import Blend, Source
from aquabuf.assess.plant.steps.coagulate import Coagulate
from aquabuf.assess.plant.steps.disinfect import Disinfect
from aquabuf.assess.plant.steps.gas import Aerate, Saturate
from aquabuf.assess.plant.steps.temperature import ChangeTemperature
from aquabuf.assess.plant.stream import TOTALS

WELL = water_of(7.3, 250.0, **dict.fromkeys(TOTALS, 1e-3))
STEPS = {
    "coagulate": Coagulate(name="s", product=stocked("alum 14-water"), dose_mol_l=6e-5),
    "chlorinate": Disinfect(name="s", product=stocked("sodium hypochlorite"), dose_mol_l=4e-5, demand_mol_l=1e-5),
    "nitrify": Nitrify(name="s", fraction=0.8), "denitrify": Denitrify(name="s", fraction=0.8),
    "aerate": Aerate(name="s", kla_per_h=8.0, time_h=0.3), "saturate": Saturate(name="s", pco2_atm=0.02),
    "blend": Blend(name="s", own_share=2.0, others=(Source("well", WELL, 1.0),)),
    "temperature": ChangeTemperature(name="s", t_c=31.0),
}
IDLE = [
    Coagulate(name="s", product=stocked("alum 14-water"), dose_mol_l=0.0),
    Disinfect(name="s", product=stocked("chlorine gas"), dose_mol_l=0.0, demand_mol_l=0.0),
    Nitrify(name="s", fraction=0.0), Denitrify(name="s", removed_mol_l=0.0), Aerate(name="s", efficiency=0.0),
    Aerate(name="s", kla_per_h=0.0, time_h=3.0), Saturate(name="s", pco2_atm=0.3, efficiency=0.0),
    Blend(name="s", own_share=1.0, others=(Source("well", WELL, 0.0),)), ChangeTemperature(name="s", t_c=14.0),
]


def raw(ph=(6.6, 7.4, 8.3, 9.2)):
    """Four rows that differ in everything but temperature."""
    totals = {name: np.linspace(1e-4, 4e-4, 4) for name in TOTALS if name != "hypochlorite"} | {"hypochlorite": 0.0}
    return water_of(np.array(ph), np.array([40.0, 90.0, 160.0, 240.0]), t_c=14.0, rows=4, **totals)


def numbers(outcome):
    """All numbers of an outcome, (quantities, rows)."""
    s = outcome.stream
    return np.array([s.t_c, s.alkalinity_eq_l, s.carbon_mol_l, s.ionic_strength_mol_l, *(s.total(n) for n in TOTALS),
                     *s.solids.values(), *outcome.figures.values()])


@pytest.mark.parametrize("kind", STEPS)
def test_rows_do_not_see_each_other(kind):
    """All rows at once give what each gives alone."""
    step, water = STEPS[kind], raw()
    assert step.kind == kind
    together = numbers(step.run(water))
    alone = np.hstack([numbers(step.run(water.take(np.array([i])))) for i in range(4)])
    assert_allclose(together, alone, rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("kind", STEPS)
def test_an_unknown_row_spoils_only_itself(kind):
    """nan in, nan out; its neighbors stay, and no finding holds for it."""
    step, water = STEPS[kind], raw()
    broken = water.replaced(alkalinity_eq_l=np.where(np.arange(4) == 2, np.nan, water.alkalinity_eq_l))
    found = step.run(broken)
    others = [0, 1, 3]
    assert np.isnan(found.stream.water().ph[2])
    assert_allclose(numbers(found)[:, others], numbers(step.run(water))[:, others], rtol=1e-9, atol=1e-12)
    for finding in found.findings:
        assert finding.where.shape == (4,)
        assert finding.severity in ("stop", "warning", "note")
        assert finding.words
        assert finding.rule
        assert "nan" not in finding.words + finding.next_step


@pytest.mark.parametrize("step", IDLE, ids=lambda s: s.kind)
def test_nothing_in_is_nothing_out(step):
    """No dose, no time, no share: the same water, and nothing said to act."""
    water = raw()
    out = step.run(water).stream
    assert_allclose(out.water().ph, water.water().ph, atol=1e-9)
    assert_allclose(out.alkalinity_eq_l, water.alkalinity_eq_l, rtol=1e-12)
    assert_allclose(out.carbon_mol_l, water.carbon_mol_l, rtol=1e-9)
    for name in TOTALS:
        assert_allclose(out.total(name), water.total(name), rtol=1e-12)


def test_steps_are_read_only():
    """Settings do not change under a plan."""
    with pytest.raises(FrozenInstanceError):
        STEPS["aerate"].efficiency = 0.5

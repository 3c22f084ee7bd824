"""Waters over a grid of doses: points are direct runs, between them a line or a plane twisted once, with its error told."""

import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parents[2] / "report"))

from dosing_plans import answer_of

from aquabuf.assess.plant.dose_grid import between, dose_grid, grids_of, moved_doses
from aquabuf.assess.plant.quantities import in_unit, measured
from aquabuf.assess.plant.steps.adjust import Dose
from aquabuf.assess.plant.train import Train, run_train
from aquabuf.errors import InputError

MG_CACO3_PER_EQ = 100.086 / 2.0 * 1e3  # IUPAC masses
LIME, GAS = 74.092, 44.009             # g/mol of Ca(OH)2 and CO2, IUPAC masses


def upland():
    """The grid of lime and carbon dioxide of one adjusting step, with a warmer water behind it."""
    answer = answer_of("upland")
    return answer, grids_of(answer.train)[0]


def channel(grid, name, place):
    """A channel of a grid."""
    (found,) = [c for c in grid.channels if c.quantity.name == name and c.place == place]
    return found


def test_between_is_exact_for_what_is_linear_in_each_dose():
    """a + b x + c y + d x y is met anywhere in a cell; beyond the edge the edge counts."""
    x, y = np.meshgrid(np.arange(5.0), np.arange(4.0), indexing="ij")
    values = 3.0 - 2.0 * x + 0.5 * y + 0.25 * x * y
    for at in ((0.0, 0.0), (1.3, 2.7), (4.0, 3.0), (3.99, 0.01)):
        assert between(values, at) == pytest.approx(3.0 - 2.0 * at[0] + 0.5 * at[1] + 0.25 * at[0] * at[1], abs=1e-12)
    assert between(values, (9.0, -1.0)) == values[4, 0]
    assert between(np.array([1.0, 5.0]), (0.25,)) == 2.0


def test_between_knows_nothing_beside_the_unknown():
    """A cell with a value that is not known gives none."""
    assert np.isnan(between(np.array([1.0, np.nan, 3.0]), (0.5,)))


def test_alkalinity_over_the_grid_is_the_mass_balance():
    """Two equivalents per mole of lime, none of carbon dioxide, on the raw water's 20 mg/L."""
    _, grid = upland()
    lime = grid.mg_l[0] * 0.92 / LIME * 1e-3
    wanted = 20.0 + 2.0 * lime * MG_CACO3_PER_EQ
    found = channel(grid, "alkalinity", 0)
    assert_allclose(found.values, np.broadcast_to(wanted[:, None], found.values.shape), rtol=2e-5)
    assert found.error < 1e-9


def test_points_and_what_lies_between_them_against_direct_runs():
    """The works run with fixed doses: the points to rounding, anything between within the error that is told."""
    answer, grid = upland()
    rng = np.random.default_rng(7)
    n = grid.mg_l[0].size - 1
    places = [(0.0, 0.0), (n, n), (17, 60), *(rng.uniform(0, n, (60, 2)))]
    step = answer.train.passed[0].step
    pure = [np.interp([p[k] for p in places], np.arange(n + 1), grid.mg_l[k]) * strength / mass * 1e-3
            for k, (strength, mass) in enumerate(((0.92, LIME), (0.999, GAS)))]
    fixed = Dose(name="fixed", products=step.products, mol_l=tuple(pure))
    run = run_train(answer.train.raw.take(np.zeros(len(places), dtype=int)), [fixed, answer.train.passed[1].step])
    for name in ("ph", "si_calcite", "ccpp", "buffer_intensity"):
        for place, water in ((0, run.passed[0].after), (None, run.final)):
            c = channel(grid, name, place)
            wanted = in_unit(c.quantity, measured(water, [name])[name])
            off = np.abs([between(c.values, at) for at in places] - wanted)
            # masses of the test are rounded to five figures, which moves pH near its steepest by some 1e-3
            assert off[:3].max() < 3e-3, name
            assert off.max() <= 1.05 * c.error + 3e-3, name
            assert c.error > 0.5 * off[3:].max(), name


def test_error_falls_with_the_square_of_the_cells():
    """As it must for linear interpolation of a smooth curve: half the width, about a quarter of the error."""
    train = answer_of("minimal").train
    coarse, fine = (channel(dose_grid(train, moved_doses(train), cells), "ph", 0).error for cells in (40, 80))
    assert coarse / fine == pytest.approx(4.0, rel=0.15)


def test_the_plan_is_the_middle_point():
    """There the value is that of the plan itself."""
    answer, grid = upland()
    middle = (grid.mg_l[0].size - 1) // 2
    assert channel(grid, "ph", 0).values[middle, middle] == pytest.approx(answer.train.passed[0].after.water().ph[0], abs=1e-9)
    assert channel(grid, "ph", None).values[middle, middle] == pytest.approx(answer.train.final.water().ph[0], abs=1e-9)
    assert [x[middle] for x in grid.mg_l] == pytest.approx([line.mg_l_product for line in answer.feeds])


def test_every_dose_is_in_one_grid():
    """Two of the last step that adjusts with two together, the others alone, a product that goes in twice twice."""
    grids = grids_of(answer_of("many").train)
    moved = [[(m.step, m.product.name) for m in g.moved] for g in grids]
    assert [len(m) for m in moved] == [2, 1, 1, 1, 1, 1]
    assert {step for step, _ in moved[0]} == {"final pH"}
    assert len({x for m in moved for x in m}) == 7


def test_windows_stand_where_they_are_wanted():
    """Behind the step that has them, also for a dose far ahead of it."""
    answer, grid = upland()
    assert [(c.quantity.name, c.where) for c in grid.channels if c.targets] == [
        ("ph", "behind final pH"), ("alkalinity", "behind final pH")]
    ahead = grids_of(answer_of("many").train)[1]
    assert ahead.moved[0].place == 0
    assert [(c.quantity.name, c.where) for c in ahead.channels if c.targets] == [
        ("ph", "behind final pH"), ("alkalinity", "behind final pH")]
    assert answer.feasible


def test_windows_of_the_last_step_are_of_the_final_water():
    """One channel for both, where nothing comes behind the step that is aimed at."""
    train = answer_of("many").train
    short = Train(train.raw, train.passed[:7])
    ahead = grids_of(short)[1]
    assert [(c.quantity.name, c.where) for c in ahead.channels if c.targets] == [
        ("ph", "final water"), ("alkalinity", "final water")]
    assert len(ahead.channels) == 10


def test_a_bed_and_what_was_not_found_have_no_grid():
    """Nothing to move."""
    assert grids_of(answer_of("infeasible").train) == ()
    assert grids_of(answer_of("no dose").train) == ()


def test_other_numbers_of_doses_and_cells():
    """One or two doses, an even number of cells."""
    train = answer_of("minimal").train
    with pytest.raises(InputError, match="must be of one dose or two; found 0"):
        dose_grid(train, [])
    with pytest.raises(InputError, match="must have an even number of cells, 2 or more; found 5"):
        dose_grid(train, moved_doses(train), 5)


def test_a_blend_ahead_of_the_dose_is_left_as_it_is():
    """Only what comes behind the dose is run; the raw water is the blend's."""
    answer = answer_of("blend")
    grid = grids_of(answer.train)[0]
    assert isinstance(answer.train, Train)
    assert channel(grid, "alkalinity", 1).values[0] == pytest.approx(
        1e3 * 50.043 * answer.train.passed[0].after.alkalinity_eq_l[0], rel=1e-4)

"""The solved pH against the same balance in 50 digits, and against its own residual."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from precise_balance import ph_errors, random_waters

from aquabuf import Water
from aquabuf.engine.solve import BRACKET, solve_h


def test_ph_agrees_with_fifty_digits():
    """300 waters over the whole range; source: the alkalinity definition, solved by mpmath (see precise_balance)."""
    rows, errors = ph_errors(random_waters(300, seed=20))

    assert rows.size > 280
    assert_allclose(errors, 0.0, rtol=0, atol=1e-10)


@pytest.mark.parametrize("alkalinity", [-0.9, -1e-2, -1e-9, 0.0, 1e-12, 1e-5, 1e-2, 0.9])
def test_residual_is_at_rounding(alkalinity):
    """The imbalance left is within rounding of the terms it is made of: conservation of alkalinity."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=alkalinity, dic_mol_l=[0.0, 1e-6, 1e-3, 0.1], t_c=15.0,
                                      ionic_strength_mol_l=0.5, phosphate_mol_l=1e-3, citrate_mol_l=1e-3)
    size = np.abs(alkalinity) + water.dic_mol_l + 1e-2

    assert (water.status >= 0).all()
    assert_allclose(water.residual_eq_l / size, 0.0, rtol=0, atol=2e-14)


def test_every_step_bound_is_wide_enough_for_a_poor_start():
    """Strong acids and bases to 0.9 mol/L, many acids, from a start that knows only carbonate: all end, in few steps."""
    water = random_waters(4000, seed=5)
    result = solve_h(water.state.system())

    solved = result.status == 0
    assert solved[water.state.status >= 0].all()
    assert result.iterations.max() < 60
    assert (np.log(result.h[solved]) > BRACKET[0]).all()
    assert (np.log(result.h[solved]) < BRACKET[1]).all()


@pytest.mark.parametrize("pair", ["ph_alkalinity", "ph_dic", "alkalinity_pco2", "ph_pco2", "dic_pco2"])
def test_every_known_pair_finds_the_same_water(pair):
    """Any two of pH, alkalinity, carbon and CO2 pressure fix the water: identity of the five other routes."""
    rng = np.random.default_rng(7)
    n = 200
    rest = {"t_c": rng.uniform(0, 50, n), "salinity": np.where(rng.random(n) < 0.5, 0.0, rng.uniform(1, 50, n)),
            "ionic_strength_mol_l": 0.01, "boron_mol_l": 1e-4, "phosphate_mol_l": 1e-5}
    alkalinity = rng.uniform(1e-4, 1e-2, n)
    first = Water.from_alkalinity_dic(alkalinity_eq_l=alkalinity, dic_mol_l=alkalinity * rng.uniform(0.7, 1.5, n), **rest)
    values = {"ph": first.ph, "alkalinity_eq_l": first.alkalinity_eq_l, "dic_mol_l": first.dic_mol_l,
              "pco2_atm": first.pco2_atm}
    names = {"ph": "ph", "alkalinity": "alkalinity_eq_l", "dic": "dic_mol_l", "pco2": "pco2_atm"}
    again = getattr(Water, f"from_{pair}")(**{names[p]: values[names[p]] for p in pair.split("_")}, **rest)

    assert (again.status == 0).all()
    assert_allclose(again.ph, first.ph, rtol=0, atol=1e-9)
    assert_allclose(again.alkalinity_eq_l, first.alkalinity_eq_l, rtol=1e-9)
    assert_allclose(again.dic_mol_l, first.dic_mol_l, rtol=1e-9)
    assert_allclose(again.pco2_atm, first.pco2_atm, rtol=1e-8)


def test_plain_waters_need_few_steps():
    """Carbonate waters of the usual kind are done after four Newton steps: speed is part of the promise."""
    rng = np.random.default_rng(2)
    alkalinity = 10.0 ** rng.uniform(-5, -2, 5000)
    water = Water.from_alkalinity_dic(alkalinity_eq_l=alkalinity, dic_mol_l=alkalinity * rng.uniform(0.7, 1.5, 5000), t_c=12.0)
    iterations = solve_h(water.state.system()).iterations
    assert np.mean(iterations <= 4) > 0.99
    assert iterations.max() <= 8

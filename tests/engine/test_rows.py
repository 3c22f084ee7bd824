"""Rows do not see each other: shapes, status per row, order, and what happens to values no water can have."""

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf import Water

QUANTITIES = ("ph", "alkalinity_eq_l", "dic_mol_l", "pco2_atm", "residual_eq_l", "status", "density_kg_l",
              "ionic_strength_mol_l", "ph_total")


def readings(n, seed=3):
    """Fresh, brackish and sea waters in turn, with acids and calcium."""
    rng = np.random.default_rng(seed)
    return {
        "alkalinity_eq_l": rng.uniform(-1e-3, 5e-3, n), "dic_mol_l": rng.uniform(1e-5, 5e-3, n),
        "t_c": rng.uniform(0, 40, n), "salinity": np.tile([0.0, 0.5, 5.0, 35.0], n)[:n],
        "phosphate_mol_l": rng.uniform(0, 1e-3, n), "ammonium_mol_l": rng.uniform(0, 1e-3, n),
        "calcium_mol_l": rng.uniform(1e-4, 1e-2, n), "magnesium_mol_l": rng.uniform(1e-4, 1e-2, n),
    }


def answers(water):
    """Everything a row can be asked for, by name."""
    out = {name: getattr(water, name) for name in QUANTITIES}
    out |= {"beta": water.buffer_intensity_eq_l(), "beta open": water.buffer_intensity_eq_l("open"),
            "acid": water.acid_to_ph_eq_l(4.5), "si": water.saturation_index(),
            "ccpp": water.precipitation_potential_mol_l(), "ph then": water.ph_at_saturation(),
            "weakest": water.weakest_buffering().ph, "share": water.carrier().share}
    return out | water.species_mol_l


GOOD = answers(Water.from_alkalinity_dic(**readings(12)))


@pytest.mark.parametrize("shape", [(), (12,), (3, 4)])
def test_array_call_equals_loop_of_scalars(shape):
    """An array is answered as each of its rows alone; every answer has the common shape."""
    n = int(np.prod(shape))
    given_values = readings(n)
    whole = answers(Water.from_alkalinity_dic(**{k: v.reshape(shape) for k, v in given_values.items()}))
    for i in range(n):
        alone = answers(Water.from_alkalinity_dic(**{k: v[i] for k, v in given_values.items()}))
        for name, value in whole.items():
            assert np.shape(value) == shape, name
            single = alone.get(name, 0.0)  # the acids of sea salt are absent where no row is marine
            assert_allclose(np.reshape(value, -1)[i], single, rtol=1e-12, atol=1e-12, err_msg=name)


def test_broadcasting_keeps_the_common_shape():
    """A column of temperatures against a row of alkalinities gives the table of both."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=[1e-3, 2e-3, 3e-3], dic_mol_l=2e-3, t_c=[[5.0], [25.0]])
    assert water.shape == (2, 3)
    assert_allclose(water.t_c, [[5.0] * 3, [25.0] * 3])
    assert_allclose(water.alkalinity_eq_l, [[1e-3, 2e-3, 3e-3]] * 2)


@settings(max_examples=15, deadline=None)
@given(st.permutations(range(12)))
def test_order_of_rows_does_not_matter(order):
    """Permuting the rows permutes the answers."""
    values, first = readings(12), GOOD
    mixed = answers(Water.from_alkalinity_dic(**{k: v[list(order)] for k, v in values.items()}))
    for name, value in first.items():
        assert_allclose(mixed[name], value[list(order)], rtol=1e-13, atol=1e-15, err_msg=name)


def test_infinite_calcium_is_a_row_without_an_answer():
    """An infinite ion total gives no saturation for its row, quietly, and leaves the other row alone."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=2e-3, dic_mol_l=2e-3, t_c=15.0, calcium_mol_l=[1e-3, np.inf])
    assert_array_equal(np.isnan(water.saturation_index()), [False, True])
    assert_array_equal(np.isnan(water.precipitation_potential_mol_l()), [False, True])


@settings(max_examples=40, deadline=None)
@given(bad=st.sampled_from(["alkalinity_eq_l", "dic_mol_l", "t_c", "salinity", "calcium_mol_l"]),
       value=st.sampled_from([np.nan, np.inf, -np.inf, -50.0, 1e6]), row=st.integers(0, 11))
def test_one_bad_row_changes_no_other(bad, value, row):
    """Whatever stands in one cell, the other eleven rows keep their answers."""
    values = readings(12)
    good = GOOD
    assume((bad, value) != ("calcium_mol_l", np.inf))  # has a test of its own
    values[bad] = values[bad].copy()
    values[bad][row] = value
    spoiled = answers(Water.from_alkalinity_dic(**values))
    others = np.arange(12) != row
    for name in good:
        assert_allclose(spoiled[name][others], good[name][others], rtol=1e-13, atol=1e-15, err_msg=name)


def test_many_rows_are_solved_as_few():
    """Work in blocks does not show: 20,000 rows equal the same 10 rows again and again, also with gaps."""
    few = readings(10)
    many = {k: np.tile(v, 2000) for k, v in few.items()}
    many["alkalinity_eq_l"][::7] = np.nan
    ph = Water.from_alkalinity_dic(**many).ph
    expected = np.tile(Water.from_alkalinity_dic(**few).ph, 2000)
    expected[::7] = np.nan
    assert_allclose(ph, expected, rtol=0, atol=1e-12)


# value by value: what the row says. 0 solved, 1 flagged, -1 impossible, -2 far out of range, -3 not a number
@pytest.mark.parametrize(("changed", "status"), [
    ({}, 0),
    ({"alkalinity_eq_l": np.nan}, -3), ({"dic_mol_l": np.nan}, -3), ({"t_c": np.nan}, -3), ({"salinity": np.nan}, -3),
    ({"alkalinity_eq_l": np.inf}, -3), ({"dic_mol_l": -np.inf}, -3), ({"phosphate_mol_l": np.inf}, -3),
    ({"dic_mol_l": -1e-6}, -1), ({"phosphate_mol_l": -1e-6}, -1),
    ({"alkalinity_eq_l": 1e3, "ionic_strength_mol_l": 0.1}, -1), ({"alkalinity_eq_l": -1e3, "ionic_strength_mol_l": 0.1}, -1),
    ({"t_c": 61.0}, -2), ({"t_c": -3.0}, -2), ({"salinity": 56.0}, -2), ({"salinity": -0.1}, -2),
    ({"ionic_strength_mol_l": 1.1}, -2), ({"pressure_atm": 0.1}, -2), ({"pressure_atm": 2.5}, -2),
    ({"t_c": 55.0}, 1), ({"t_c": -1.0}, 1), ({"salinity": 52.0}, 1), ({"ionic_strength_mol_l": 0.3}, 1),
    ({"pressure_atm": 0.3}, 1), ({"t_c": 50.0}, 0), ({"t_c": 0.0}, 0), ({"salinity": 50.0}, 0),
    ({"ionic_strength_mol_l": 1.1, "salinity": 20.0}, 0),
])
def test_status_of_a_row(changed, status):
    """Each kind of trouble has its own status, between two good rows that stay solved; no number where not solved."""
    base = {"alkalinity_eq_l": 2e-3, "dic_mol_l": 2e-3, "t_c": 15.0, "salinity": 0.0, "ionic_strength_mol_l": 0.01,
            "pressure_atm": 1.0, "phosphate_mol_l": 1e-5}
    rows = {k: np.array([v, changed.get(k, v), v]) for k, v in base.items()}
    water = Water.from_alkalinity_dic(**rows)

    assert_array_equal(water.status, [0, status, 0])
    assert np.isfinite(water.ph[[0, 2]]).all()
    assert np.isfinite(water.ph[1]) == (status >= 0)
    for quantity in (water.alkalinity_eq_l, water.dic_mol_l, water.pco2_atm, water.buffer_intensity_eq_l(),
                     water.acid_to_ph_eq_l(4.5), water.weakest_buffering().intensity, water.weakest_buffering().ph,
                     water.carrier().acid_left):
        assert np.isfinite(quantity[1]) == (status >= 0)


@pytest.mark.parametrize("values", [
    {"ph": 9.0, "alkalinity_eq_l": -1e-3}, {"ph": 5.0, "alkalinity_eq_l": -1e-3}, {"ph": 16.0, "dic_mol_l": 1e-3},
    {"ph": -2.0, "dic_mol_l": 1e-3}, {"ph": 7.0, "dic_mol_l": -1e-3}, {"ph": 7.0, "pco2_atm": -1e-3},
    {"dic_mol_l": 1e-6, "pco2_atm": 1.0}, {"alkalinity_eq_l": 1e-3, "pco2_atm": -1e-3},
    {"ph": 7.0, "dic_mol_l": 1e-3, "phosphate_mol_l": -1e-6},
], ids=str)
def test_pairs_no_water_can_have(values):
    """Negative carbon, CO2 or phosphate, more CO2 than carbon, a pH off the scale: impossible, and no number is given."""
    maker = {frozenset(["ph", "alkalinity_eq_l"]): Water.from_ph_alkalinity, frozenset(["ph", "dic_mol_l"]): Water.from_ph_dic,
             frozenset(["ph", "pco2_atm"]): Water.from_ph_pco2, frozenset(["dic_mol_l", "pco2_atm"]): Water.from_dic_pco2,
             frozenset(["alkalinity_eq_l", "pco2_atm"]): Water.from_alkalinity_pco2}[frozenset(values) - {"phosphate_mol_l"}]
    water = maker(**values, t_c=20.0)
    assert water.status == -1
    assert water.status_words == "no water has these values"
    assert np.isnan(water.ph)
    assert np.isnan(water.dic_mol_l)
    assert np.isnan(water.alkalinity_eq_l)


def test_refused_row_shows_no_invented_conditions():
    """A row refused for 61 °C must not be reported as a water of some other temperature."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=1e-3, dic_mol_l=1e-3, t_c=[10.0, 61.0])
    assert water.t_c[1] == 61.0 or np.isnan(water.t_c[1])


def test_refused_row_keeps_its_reason():
    """Asked for another state, a row that was out of range says so still, not that a value was missing."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=1e-3, dic_mol_l=1e-3, t_c=[10.0, 61.0])
    assert_array_equal(water.after_acid(1e-4).status, water.status)


def test_missing_total_of_an_acid_is_not_zero():
    """A phosphate that is not a number is missing, which is not the same as none."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=1e-3, dic_mol_l=1e-3, t_c=10.0, phosphate_mol_l=[0.0, np.nan])
    assert_array_equal(water.status, [0, -3])


def test_no_rows_is_no_error():
    """An empty table gives empty answers."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=[], dic_mol_l=[], t_c=10.0, calcium_mol_l=1e-3)
    for value in answers(water).values():
        assert value.shape == (0,)
    assert water.status_words.shape == (0,)
    assert water.require_solved() is water

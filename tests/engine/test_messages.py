"""Every message of the engine: subject, rule, value found, remedy."""

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from aquabuf import Acid, Water, mix
from aquabuf.engine.balance import System
from aquabuf.engine.conditions import conditions
from aquabuf.engine.solve import solve_h
from aquabuf.errors import AquabufError, InputError, InputRangeError

PLAIN = {"alkalinity_eq_l": 1e-3, "dic_mol_l": 1e-3, "t_c": 20.0}


def water(**changed):
    """A plain water, with changes."""
    return Water.from_alkalinity_dic(**(PLAIN | changed))


@pytest.mark.parametrize(("act", "match"), [
    (lambda: water(phosphat_mol_l=1e-3), r"'phosphat_mol_l' is not a total that water can have; nearest: .*phosphate_mol_l.* own acid"),
    (lambda: water(temperature=1e-3), r"'temperature' is not a total that water can have; nearest: .*_mol_l"),
    (lambda: water(phosphate=1e-3), r"'phosphate' is not a total .* nearest: .*phosphate_mol_l"),
    (lambda: water().buffer_intensity_eq_l("opened"), r"exchange must be one of closed, open; found 'opened'\. Closed keeps the carbon"),
    (lambda: water().acid_to_ph_eq_l(5.0, "air"), r"exchange must be one of closed, open; found 'air'"),
    (lambda: water().after_acid(1e-4, "air"), r"exchange must be one of closed, open; found 'air'"),
    (lambda: water().curve([5.0], "air"), r"exchange must be one of closed, open; found 'air'"),
    (lambda: water(calcium_mol_l=1e-3).saturation_index("dolomite"),
     r"the mineral must be one of calcite, aragonite, vaterite; found 'dolomite'\. Use 'calcite'"),
    (lambda: water(calcium_mol_l=1e-3).precipitation_potential_mol_l("lime"), r"the mineral must be one of .* found 'lime'"),
    (lambda: water(calcium_mol_l=1e-3).ph_at_saturation("lime"), r"the mineral must be one of .* found 'lime'"),
    (lambda: water().ph_on("paper"), r"the pH scale must be one of meter, total, seawater, free; found 'paper'\. Use 'meter'"),
    (lambda: Water.from_ph_dic(ph=7.0, dic_mol_l=1e-3, t_c=20.0, ph_scale="paper"), r"the pH scale must be one of .* found 'paper'"),
    (lambda: water(carbonic="best"), r"carbonic must be one of millero, lueker; found 'best'\. Leave it out for 'millero'"),
    (lambda: conditions([20.0], carbonic="best"), r"carbonic must be one of millero, lueker; found 'best'"),
    (lambda: water(boron_ratio="best"), r"boron_ratio must be one of uppstrom, lee; found 'best'\. Leave it out for 'uppstrom'"),
    (lambda: water(t_c=[1.0, 2.0], alkalinity_eq_l=[1e-3] * 3), r"inputs must broadcast to one shape; found .*\(.*Give scalars or arrays of one length"),
    (lambda: mix([water()], [1.0, 2.0]), r"mixing needs one volume per water; found 1 waters and 2 volumes\. Give them in the same order"),
    (lambda: mix([], []), r"mixing needs one volume per water; found 0 waters"),
    (lambda: mix([water(), water()], [1.0, -2.0]), r"volumes must not be negative and must not all be zero"),
    (lambda: mix([water(), water()], [0.0, 0.0]), r"volumes must not be negative and must not all be zero"),
    (lambda: water(phosphate_mol_l=1e-3).charge_eq_l("citrate"),
     r"no acid 'citrate' is in this water; it holds carbonate, phosphate\. Give citrate_mol_l when making the water"),
])
def test_message(act, match):
    """The user learns what was wrong, the rule, what was found and what to do."""
    with pytest.raises(InputError, match=match):
        act()


@pytest.mark.parametrize("act", [
    lambda w: w.at_temperature([1.0, 2.0]), lambda w: w.at_air([300.0, 400.0]), lambda w: w.at_pco2([1e-4, 2e-4]),
    lambda w: w.after_acid([1e-4, 2e-4]), lambda w: w.acid_to_ph_eq_l(5.0, "open", pco2_atm=[1e-4, 2e-4]),
], ids=["at_temperature", "at_air", "at_pco2", "after_acid", "acid_to_ph_eq_l"])
def test_shapes_that_do_not_fit_a_change(act):
    """Two values for three rows are refused in plain words, as when a water is made."""
    with pytest.raises(AquabufError, match="one shape"):
        act(water(t_c=[10.0, 20.0, 30.0]))


def test_text_for_a_number_is_refused_in_plain_words():
    """A word where a number belongs is an input error of ours."""
    with pytest.raises(AquabufError, match="cold"):
        water(t_c="cold")


def test_mixing_unlike_acids_of_one_name_is_refused():
    """Two different acids under one name cannot be added up."""
    a, b = (water(t_c=[20.0], acids=[Acid(name="humic", pk=(pk,))], humic_mol_l=1e-3) for pk in (4.2, 6.5))
    with pytest.raises(InputError, match="humic"):
        mix([a, b], [1.0, 1.0])


def test_balance_without_carbon():
    """A balance that is neither closed nor open says so."""
    one = np.ones(1)
    with pytest.raises(InputError, match=r"needs dic or co2; neither is given\. Pass zeros"):
        solve_h(System(one, one, one, one, one))


def test_scalar_conditions_of_sea_water():
    """`conditions` takes single values, as it says."""
    assert conditions(20.0, 35.0).k1.shape == conditions(20.0, 0.0).k1.shape == ()


def test_require_solved_marks_the_rows():
    """The error tells how many, the first row and why, and carries the mask; a solved water passes through."""
    mixed = water(t_c=[10.0, 61.0, np.nan])
    with pytest.raises(InputRangeError, match=r"2 of 3 waters are not solved; first: row 1, temperature.*°F\?.*`mask`") as err:
        mixed.require_solved()
    assert_array_equal(err.value.mask, [False, True, True])
    with pytest.raises(InputRangeError, match=r"1 of 1 waters are not solved; first: row 0, no water has these values\. Correct"):
        water(dic_mol_l=-1.0).require_solved()
    good = water()
    assert good.require_solved() is good


def test_status_words_name_the_trouble():
    """Each status has its words."""
    words = water(t_c=[10.0, 55.0, 61.0, np.nan]).status_words
    assert list(words) == ["solved", "solved outside the range of a constant",
                           "temperature, salinity or ionic strength far outside the range of the constants",
                           "a value is missing or not a number"]


def test_a_water_without_temperature():
    """The missing keyword is named, not an internal function."""
    with pytest.raises(AquabufError, match=r"t_c is missing\. Give t_c in °C"):
        Water.from_ph_alkalinity(ph=7.0, alkalinity_eq_l=1e-3)


@pytest.mark.parametrize("ph", ["x", [6.0, 5.0], [[6.0]]])
def test_ph_targets_that_do_not_fit_one_water(ph):
    """A target is one pH per water."""
    with pytest.raises(AquabufError, match="one shape"):
        water().acid_to_ph_eq_l(ph)


@pytest.mark.parametrize("ph", ["x", [[6.0, 5.0]]])
def test_curve_points_that_are_no_row_of_numbers(ph):
    """The points of a curve are numbers in one row; a single number is one point."""
    with pytest.raises(AquabufError, match="numbers in one row"):
        water().curve(ph)
    assert water().curve(7.0)[0].shape == (*water().shape, 1)


def test_negative_ions_are_impossible():
    """A negative amount of an ion is no water, in its row only."""
    assert water(calcium_mol_l=[-1e-3, 1e-3]).status.tolist() == [-1, 0]


def test_repr_tells_rows_and_ph():
    """What a Python user sees first: rows, how many are solved, and the span of pH."""
    assert repr(water(t_c=[10.0, 99.0])).startswith("<Water: 2 rows, 1 solved, pH ")

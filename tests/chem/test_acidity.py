"""Mine acidity: rounded against exact weights, loads against the mining rule, signs. Figures are in published/acidity.csv."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.chem.acidity import (
    acidity_eq_l,
    acidity_mg_l_caco3,
    caco3_mg_l_of_eq_l,
    load_short_tons_yr,
    net_acidity_eq_l,
)
from aquabuf.errors import InputRangeError

G_MOL = {"fe": 55.845, "al": 26.9815, "mn": 54.938}  # standard atomic weights
GPM_M3_H = 3.785411784e-3 * 60.0  # US gallon, exact


@pytest.mark.parametrize(("ph", "fe2", "fe3", "al", "mn", "expected"), [
    (3.0, 0.0, 50.0, 20.0, 10.0, 313.96), (2.5, 100.0, 200.0, 80.0, 15.0, 1347.60), (6.3, 60.0, 0.0, 0.2, 5.0, 117.78),
    (4.0, 0.0, 2.0, 25.0, 30.0, 204.14)])
def test_exact_weights(ph, fe2, fe3, al, mn, expected):
    """The printed formula worked apart with standard atomic weights."""
    eq_l = acidity_eq_l(ph, 1e-3 * fe2 / G_MOL["fe"], 1e-3 * fe3 / G_MOL["fe"], 1e-3 * al / G_MOL["al"],
                        1e-3 * mn / G_MOL["mn"])

    assert_allclose(caco3_mg_l_of_eq_l(eq_l), expected, atol=0.01)


def test_acid_without_metals_is_its_hydrogen():
    """pH 3 is 1 meq/L, 50 mg/L as CaCO3 in the rounded form."""
    assert_allclose(acidity_eq_l(3.0), 1e-3, rtol=1e-12)
    assert_allclose(acidity_mg_l_caco3(3.0), 50.0, rtol=1e-12)


def test_the_factor_of_the_mining_rule():
    """Tons a year per gpm and mg/L: 525,600 min/yr x 3.785411784 L x 1e-6 kg / 907.18474 kg, which the rule rounds to 0.0022."""
    factor = 525_600 * 3.785411784e-6 / 907.18474

    assert_allclose(load_short_tons_yr(GPM_M3_H, 1.0), factor, rtol=1e-12)
    assert_allclose(factor, 0.0022, rtol=0.004)


def test_rows_do_not_see_each_other():
    """A missing metal costs its own row."""
    found = acidity_eq_l([3.0, 3.0], iron_iii_mol_l=[np.nan, 1e-3])

    assert np.isnan(found[0])
    assert_allclose(found[1], 4e-3, rtol=1e-12)


def test_net_alkaline_water_keeps_its_sign():
    """pH 6.3 with 60 mg/L iron(II) and 200 mg/L of alkalinity is net alkaline although it holds acidity."""
    acid = acidity_mg_l_caco3(6.3, 60.0, 0.0, 0.2, 5.0) / 50e3

    assert net_acidity_eq_l(acid, 200.0 / 50e3) < 0.0 < net_acidity_eq_l(acid, 100.0 / 50e3)


def test_a_metal_below_zero_is_refused():
    """Labs that report below detection as a negative number."""
    with pytest.raises(InputRangeError, match=r"iron_iii_mg_l must be 0 or more; found -2\. Enter a value below detection") as e:
        acidity_mg_l_caco3(3.0, iron_iii_mg_l=[1.0, -2.0])

    assert e.value.mask.tolist() == [False, True]

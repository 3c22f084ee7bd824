"""pH of a lake from its ANC: round trips over the whole range, impossible and missing rows, shapes, rows apart."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.chem.organic import organic_models
from aquabuf.engine.conditions import conditions
from aquabuf.engine.lake import LakeBalance

MODELS = organic_models()
LAKES = 4000


def random_lakes(model, lakes=LAKES, seed=11):
    """Fresh and salt water, with and without carbon, organic acids and aluminum; true pH 1.5 to 12.5."""
    rng = np.random.default_rng(seed)

    def some(low, high, share):
        return np.where(rng.random((lakes, 1)) < share, 10.0 ** rng.uniform(low, high, (lakes, 1)), 0.0)

    c = conditions(rng.uniform(0, 40, (lakes, 1)), rng.choice([0.0, 0.0, 0.5, 3.0, 35.0], (lakes, 1)),
                   10.0 ** rng.uniform(-5, -2, (lakes, 1)))
    return LakeBalance(c, some(-1, 2, 0.7), some(-8, -3.5, 0.7), model), some(-7, -2, 0.9), rng.uniform(1.5, 12.5, (lakes, 1))


def take(lake, rows):
    """The same balance for some of the lakes."""
    c = lake.conditions
    fields = {n: getattr(c, n)[rows] for n in c.__dataclass_fields__ if n != "_cache"}
    return LakeBalance(type(c)(**fields), lake.doc_mg_l[rows], lake.aluminum_mol_l[rows], lake.organic)


@pytest.mark.parametrize("name", MODELS)
@pytest.mark.parametrize("exchange", ["dic", "co2"])
def test_round_trip(name, exchange):
    """The ANC at a pH leads back to that pH within the rounding of the ANC itself."""
    lake, carbon, ph = random_lakes(MODELS[name])
    known = {exchange: carbon if exchange == "dic" else 1e-3 * carbon}
    anc = lake.anc(ph, **known)
    found = lake.ph(anc, **known)
    terms = np.abs(anc) + lake.doc_mg_l * lake.organic.sites_eq_mg + 3.0 * lake.aluminum_mol_l
    rounding = 20.0 * np.finfo(float).eps * terms / lake.intensity(ph, **known)
    assert (np.abs(found - ph) <= 1e-10 + rounding).all(), np.abs(found - ph).max()


@pytest.mark.parametrize("name", MODELS)
def test_lakes_do_not_see_each_other(name):
    """A lake alone has the pH that it has among four thousand others, easy or hard to solve."""
    lake, carbon, ph = random_lakes(MODELS[name])
    anc = lake.anc(ph, dic=carbon)
    together = lake.ph(anc, dic=carbon)
    for row in range(0, LAKES, 97):
        rows = slice(row, row + 1)
        assert_allclose(take(lake, rows).ph(anc[rows], dic=carbon[rows]), together[rows], rtol=0, atol=1e-11)


def test_an_easy_lake_beside_a_hard_one():
    """The second lake needs ten steps; the first was done long before and must not be moved again."""
    c = conditions(np.full((2, 1), 10.0), 0.0, 1e-4)
    lake = LakeBalance(c, np.array([[7.0], [26.0]]), np.array([[0.0], [3e-5]]), MODELS["hruska_b"])
    anc, dic = np.array([[1.7e-4], [3.21e-4]]), np.array([[1e-4], [1e-5]])
    alone = take(lake, slice(0, 1)).ph(anc[:1], dic=dic[:1])
    assert_allclose(lake.ph(anc, dic=dic)[:1], alone, rtol=0, atol=1e-11)


@pytest.mark.parametrize("start", [0.5, 4.0, 6.0, 9.0, 13.5, np.nan])
def test_any_start_leads_to_the_one_root(start):
    """ANC rises with pH, so where the search begins does not matter."""
    lake, carbon, ph = random_lakes(MODELS["hruska_b"], 500)
    anc = lake.anc(ph, dic=carbon)
    assert_allclose(lake.ph(anc, dic=carbon, start=start), lake.ph(anc, dic=carbon), rtol=0, atol=1e-9)
    assert_allclose(lake.ph(anc, dic=carbon, start=np.full((500, 1), start)), ph, rtol=0, atol=1e-6)


def lake_of(rows, doc=3.0, aluminum=1e-6):
    """Some equal lakes of 10 °C."""
    whole = np.ones((rows, 1))
    return LakeBalance(conditions(10.0 * whole, 0.0, 1e-4), doc * whole, aluminum * whole, MODELS["hruska_b"])


def test_impossible_and_missing_lakes_are_nan_alone():
    """More acid or base than pH 1 to 13 holds, a missing ANC, missing carbon: each is nan, its neighbors are solved."""
    lake = lake_of(7)
    anc = np.array([5e-5, 2.0, -2.0, np.nan, 5e-5, 5e-5, 5e-5])[:, None]
    dic = np.array([1e-4, 1e-4, 1e-4, 1e-4, np.nan, 1e-4, 1e-4])[:, None]
    lake.doc_mg_l[5] = np.nan
    found = lake.ph(anc, dic=dic)[:, 0]
    assert_array_equal(np.isnan(found), [False, True, True, True, True, True, False])
    assert_allclose(found[[0, 6]], lake_of(1).ph(np.array([[5e-5]]), dic=np.array([[1e-4]]))[0, 0], rtol=0, atol=1e-11)
    assert_array_equal(np.isnan(lake.anc(np.array([6.0]), dic=dic))[:, 0], [False, False, False, False, True, True, False])


def test_water_without_temperature_is_nan_alone():
    """Constants are missing with the temperature: no answer there and no warning."""
    c = conditions(np.array([[10.0], [np.nan], [20.0]]), 0.0, 1e-4)
    lake = LakeBalance(c, np.full((3, 1), 4.0), np.full((3, 1), 1e-6), MODELS["hruska_b"])
    dic = np.full((3, 1), 1e-4)
    for answer in (lake.ph(np.full((3, 1), 5e-5), dic=dic), lake.anc(np.array([[6.0]]), dic=dic),
                   lake.intensity(np.array([[6.0]]), dic=dic), lake.carbonate_per_dic(np.array([[6.0]]))):
        assert_array_equal(np.isnan(answer)[:, 0], [False, True, False])


def test_edges_of_the_search():
    """Just inside pH 1 to 13 there is an answer; just outside there is none."""
    lake, dic, ph = lake_of(1), np.array([[1e-4]]), np.array([[0.99, 1.01, 12.99, 13.01]])
    assert_allclose(lake.ph(lake.anc(ph, dic=dic), dic=dic), [[np.nan, 1.01, 12.99, np.nan]], rtol=0, atol=1e-9)


def test_shapes_broadcast():
    """Lakes in a column against draws in a row: each cell is the single answer."""
    lake = lake_of(3, doc=np.array([[0.0], [2.0], [9.0]]))
    anc, dic = np.array([[-2e-5, 1e-5, 4e-5, 2e-4]]), np.array([[2e-5], [8e-5], [3e-4]])
    table = lake.ph(anc, dic=dic)
    assert table.shape == (3, 4)
    for i in range(3):
        for j in range(4):
            alone = take(lake, slice(i, i + 1)).ph(anc[:, j : j + 1], dic=dic[i : i + 1])
            assert_allclose(table[i, j], alone[0, 0], rtol=0, atol=1e-11)
    drawn = LakeBalance(lake.conditions, np.repeat(lake.doc_mg_l, 4, axis=1), lake.aluminum_mol_l, lake.organic)
    assert_allclose(drawn.ph(anc, dic=dic), table, rtol=0, atol=1e-11)
    assert drawn.intensity(table, dic=dic).shape == drawn.anc(table, dic=dic).shape == (3, 4)
    assert_allclose(drawn.anc(table, dic=dic), np.broadcast_to(anc, (3, 4)), rtol=0, atol=1e-14)


def test_more_acid_is_a_lower_ph():
    """Monotone: pH rises with ANC, more organic carbon or less aluminum at the same ANC lowers or raises it."""
    dic, anc = np.array([[5e-5]]), np.linspace(-1e-4, 3e-4, 60)[None, :]
    plain = lake_of(1).ph(anc, dic=dic)
    assert (np.diff(plain) > 0.0).all()
    assert (lake_of(1, doc=8.0).ph(anc, dic=dic) < plain).all()
    with_aluminum = lake_of(1, aluminum=1e-5).ph(anc, dic=dic)
    assert (with_aluminum[plain < 5.5] > plain[plain < 5.5]).all()  # its cations take the place of H+

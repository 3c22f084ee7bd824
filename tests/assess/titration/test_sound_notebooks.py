"""Sound titrations, done otherwise than by the book: no finding that leads astray, and no interval that is not meant."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from simulated import Bench
from titrations import assessed, hard, row, sample

from aquabuf.assess.titration.assess import assess_titrations
from aquabuf.assess.titration.choose import choose
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.solve import solve_titrations


def stopped(alkalinity, past):
    """Hard water titrated only so far [eq/L] past its end point: bicarbonate is left all along the Gran line."""
    end = alkalinity * 100.0 / 0.1
    added = np.concatenate([np.linspace(0.0, 0.8, 6) * end, np.linspace(0.86 * end, end + past * 1e3, 14)])
    return sample(np.round(added, 4), alkalinity=alkalinity, carbon=1.1 * alkalinity, strength=0.1)


@pytest.mark.parametrize(("alkalinity", "past"), [(1e-3, 8e-5), (3e-3, 5e-5), (6e-3, 5e-5), (6e-3, 2e-4), (1.8e-2, 6e-4)])
def test_bicarbonate_left_on_a_gran_line_is_not_held_against_the_strength(alkalinity, past):
    """The line rises too slowly because acid is still bound; that says nothing of strength or electrode."""
    one = stopped(alkalinity, past)
    r = row(one)
    assert "Gran slope" not in r["warnings"]
    assert "strength doubtful" not in r["warnings"]
    assert_allclose(r["gran_slope_ratio"], 1.0, rtol=0, atol=0.03)
    assert r["recommended_method"] == "fit"
    assert_allclose(r["recommended_ueq_l"], alkalinity * 1e6, rtol=2e-3)
    assert r["recommended_u_ueq_l"] < 0.01 * alkalinity * 1e6


@pytest.mark.parametrize("factor", [0.5, 2.0])
def test_a_wrong_strength_still_shows(factor):
    """Bicarbonate explains a little; not half or twice the acid."""
    r = row(hard(titrant_strength_eq_l=0.05 * factor))
    assert "Gran slope" in r["warnings"]
    assert_allclose(r["gran_slope_ratio"], 1.0 / factor, rtol=0.05)


@pytest.mark.parametrize("step", [0.1, 0.05])
@pytest.mark.parametrize(("low", "high"), [(0.0, 1e-4), (1e-4, 4e-4), (4e-4, 2e-3)])
def test_interval_where_the_meter_was_read_to_coarse_steps(step, low, high):
    """Readings that are all whole steps scatter by them."""
    made = Bench(600, low, high, seed=7)
    made.ph = np.round(np.round(made.ph / step) * step, 3)
    chosen = choose(solve_titrations(made.titrations(), TitrationOptions()))
    assert np.isfinite(chosen.value).mean() > 0.99
    inside = np.abs(chosen.value - made.alkalinity) < 1.645 * chosen.u
    assert 0.85 <= inside[np.isfinite(chosen.value)].mean() <= 0.995


def test_a_scatter_that_is_given_outranks_the_steps():
    """Who knows the scatter says so; and a few readings, or finer ones, tell nothing of the meter."""
    one = hard()
    coarse = one | {"ph": np.round(one["ph"], 1)}
    few = {"added": coarse["added"][:5], "ph": coarse["ph"][:5]}
    given = (one, coarse, coarse | {"ph_scatter": 0.02}, coarse | few)
    found = assessed(*[g | {"sample_id": f"s{i}"} for i, g in enumerate(given)]).solved.curves.u_ph_scatter
    assert_allclose(found, [0.01, np.hypot(0.01, 0.1 / np.sqrt(12.0)), 0.02, 0.01], rtol=1e-9)


def test_points_far_apart_do_not_lose_carbon_dioxide():
    """Six points in dilute water: the end point lies anywhere between two of them, the carbon of the fit does not."""
    one = sample(np.array([0.0, 0.15, 1.0, 1.7, 2.4, 3.0]), alkalinity=5e-5, carbon=8e-5, strength=0.02)
    r = row(one)
    assert "carbon dioxide lost" not in r["warnings"]
    assert_allclose(r["fit_dic_umol_l"], 80.0, rtol=0.02)


def test_carbon_of_an_acid_water_widens_the_gran_result_by_base():
    """Bicarbonate at pH 4.5 takes up base too: what lies between pH 4.5 and 8.3 says how much carbon there is."""
    one = sample(np.linspace(0.0, 3.2, 33), alkalinity=-4e-4, carbon=1e-3, ionic=2e-3, strength=-0.05)
    solved = assessed(one).solved
    assert_allclose(solved.carbon_at_start, 1e-3, rtol=0.03)
    poor = assessed(one | {"dic_mol_l": 2e-5}).solved
    assert solved.gran.u_bias[0] > 2.0 * poor.gran.u_bias[0]


@pytest.mark.parametrize("alkalinity", [-5e-5, 2e-5, 2e-4, 1e-3])
@pytest.mark.parametrize("doc_mg_l", [5.0, 15.0, 30.0])
def test_interval_of_brown_water(alkalinity, doc_mg_l):
    """Organic acids of many strengths hold acid along the line; organic carbon that was measured counts for them."""
    pk = np.linspace(2.5, 7.0, 19)
    share = np.exp(-0.5 * ((pk - 4.3) / 1.2) ** 2)
    acids = [(doc_mg_l * 1e-5 * s, p) for p, s in zip(pk.tolist(), (share / share.sum()).tolist(), strict=True)]
    end = (max(alkalinity, 0.0) + 6e-4) * 1e4
    added = np.round(np.concatenate([np.linspace(0.0, 0.8, 8) * max(alkalinity, 2e-5) * 1e4, np.linspace(0.1, 1.0, 22) * end]), 3)
    one = sample(np.sort(added), alkalinity=alkalinity, carbon=max(alkalinity, 0.0) * 1.2 + 2e-5, strength=0.01, acids=acids)
    known, unknown = row(one | {"doc_mg_l": doc_mg_l}), row(one)
    assert abs(known["recommended_ueq_l"] - alkalinity * 1e6) < 1.645 * known["recommended_u_ueq_l"]
    assert known["gran_u_ueq_l"] > unknown["gran_u_ueq_l"]


@pytest.mark.parametrize("offset", [0.3, 0.45, 0.6, 0.8])
@pytest.mark.parametrize("alkalinity", [5e-4, 1e-3, 2e-3, 4e-3])
def test_an_electrode_far_off_costs_nothing_where_no_strength_fits(offset, alkalinity):
    """With the strength that the line implies no curve can be found at all: so it is the electrode, and the result stands."""
    end = alkalinity * 2e3
    added = np.concatenate([np.linspace(0.0, 0.8, 8) * end, np.linspace(0.85 * end, end + 1.4, 20)])
    r = row(sample(np.round(added, 3), alkalinity=alkalinity, carbon=1.2 * alkalinity, offset=offset))
    assert "Gran slope" in r["warnings"]
    assert "electrode offset" in r["warnings"]
    assert_allclose([r["recommended_ueq_l"], r["fit_offset_ph"]], [alkalinity * 1e6, offset], rtol=0.01)
    assert r["recommended_u_ueq_l"] < 0.01 * alkalinity * 1e6 + 3.0


@pytest.mark.parametrize("factor", [0.5, 0.7, 1.5, 2.0])
@pytest.mark.parametrize("alkalinity", [1e-3, 2e-3, 4e-3])
def test_interval_where_the_curve_says_that_the_strength_is_wrong(factor, alkalinity):
    """The interval reaches as far as the strength that the finding names, and lost CO2 is not blamed as well."""
    end = alkalinity * 2e3
    added = np.round(np.concatenate([np.linspace(0.0, 0.8, 8) * end, np.linspace(0.85 * end, end + 1.4, 20)]), 3)
    r = row(sample(added, alkalinity=alkalinity, carbon=1.2 * alkalinity, titrant_strength_eq_l=0.05 / factor))
    assert "Gran slope" in r["warnings"]
    assert "carbon dioxide lost" not in r["warnings"]
    assert abs(r["recommended_ueq_l"] - alkalinity * 1e6) < 1.645 * r["recommended_u_ueq_l"]


def test_small_samples_do_not_look_swapped():
    """5 mL of sample and half a milliliter of acid read to 0.005 mL: readings cross by the burette's scatter, not by a slip."""
    bench = Bench(300, 4e-4, 2e-3, seed=3, sample_ml=5.0, end_ml=0.5)
    result = assess_titrations(bench.titrations(), TitrationOptions(), by_liter=True, by_kilogram=False)
    slips = result.findings["finding"].isin(["points swapped", "pH turns back"])
    assert slips.sum() <= 6

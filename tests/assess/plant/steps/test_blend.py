"""Blending against mass balance and water worked out by hand, and the sweep against single blends."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_water import EQ_PER_MG_CACO3, water_of, words
from numpy.testing import assert_allclose, assert_array_equal
from scipy.optimize import brentq

from aquabuf.assess.plant.steps.blend import Blend, Source
from aquabuf.errors import InputError

SOFT = {"ph": 8.9, "mg_caco3": 30.0, "calcium": 3e-4, "magnesium": 1e-4, "sodium": 2e-4, "potassium": 0.0, "chloride": 1e-4}
HARD = {"ph": 7.2, "mg_caco3": 260.0, "calcium": 3e-3, "magnesium": 4e-4, "sodium": 9e-4, "potassium": 0.0, "chloride": 1e-3}


def blend(own_share, *others, **settings):
    """A blend with sources given as (name, stream, share)."""
    return Blend(name="mix", own_share=own_share, others=tuple(Source(*o) for o in others), **settings)


def test_two_waters_by_hand():
    """Alkalinity, carbon, calcium by volume; the pH of a water worked out from printed constants."""
    soft, hard = water_of(**SOFT), water_of(**HARD)
    out = blend(3.0, ("well", hard, 1.0)).run(soft)
    water = BareWater(25.0, 0.003)
    parts = [(SOFT, 0.75), (HARD, 0.25)]
    alkalinity = sum(share * p["mg_caco3"] * EQ_PER_MG_CACO3 for p, share in parts)
    carbon = sum(share * water.dic(p["ph"], p["mg_caco3"] * EQ_PER_MG_CACO3) for p, share in parts)
    assert_allclose(out.stream.alkalinity_eq_l, alkalinity, rtol=1e-12)
    assert_allclose(out.figures["ph_after"], water.ph(alkalinity, carbon), atol=0.004)
    for name in ("calcium", "chloride", "sodium"):
        assert_allclose(out.stream.total(name), sum(share * p[name] for p, share in parts), rtol=1e-12)


def test_mean_of_ph_is_shown_to_be_wrong():
    """Volume-weighted mean of 8.9 and 7.2 against the solved pH; said only where it differs."""
    out = blend(1.0, ("well", water_of(**HARD), 1.0)).run(water_of(**SOFT))
    assert_allclose(out.figures["mean_of_ph"], 8.05, atol=1e-9)
    assert out.figures["ph_after"][0] < 7.6
    assert "the mean of the pH values, 8.05, would be wrong by" in words(out)
    uneven = blend(3.0, ("well", water_of(**HARD), 1.0)).run(water_of(**SOFT))
    assert_allclose(uneven.figures["mean_of_ph"], 8.475, atol=1e-9)
    same = blend(1.0, ("again", water_of(**SOFT), 1.0)).run(water_of(**SOFT))
    assert "mean of the pH" not in words(same)


def test_three_waters_conserve_everything():
    """Amounts of three sources add up, temperature by heat; shares are in proportion, whatever their sum."""
    streams = [water_of(**SOFT), water_of(**HARD), water_of(7.9, 120.0, t_c=12.0, calcium=1e-3, sulfate=1e-3)]
    shares = np.array([2.0, 5.0, 3.0])
    mix = blend(2.0, ("well", streams[1], 5.0), ("river", streams[2], 3.0)).run(streams[0]).stream
    for value in ("alkalinity_eq_l", "carbon_mol_l"):
        assert_allclose(getattr(mix, value), shares @ [getattr(s, value)[0] for s in streams] / 10.0, rtol=1e-12)
    assert_allclose(mix.total("calcium"), shares @ [s.total("calcium")[0] for s in streams] / 10.0, rtol=1e-12)
    assert_allclose(mix.t_c, 0.7 * 25.0 + 0.3 * 12.0, atol=0.01)  # masses weigh, densities differ by 0.2 %
    tenfold = blend(20.0, ("well", streams[1], 50.0), ("river", streams[2], 30.0)).run(streams[0]).stream
    assert_allclose(tenfold.water().ph, mix.water().ph, atol=1e-12)


def test_a_water_with_itself_and_with_nothing():
    """No change."""
    soft = water_of(**SOFT)
    for step in (blend(0.3, ("twin", water_of(**SOFT), 0.7)), blend(1.0, ("well", water_of(**HARD), 0.0))):
        assert_allclose(step.run(soft).stream.water().ph, 8.9, atol=1e-9)


# ---------------------------------------------------------------- sweep


def test_sweep_ends_are_the_sources_and_points_are_blends():
    """0 to 100 % in steps of 5 %, each as a blend of its own."""
    soft, hard = water_of(**SOFT), water_of(**HARD)
    sweep = blend(3.0, ("well", hard, 1.0)).sweep(soft)
    assert_allclose(sweep.share, np.arange(21) * 0.05, atol=1e-12)
    for i, own, other in ((0, 1.0, 0.0), (20, 0.0, 1.0), (7, 0.65, 0.35)):
        water = blend(own, ("well", hard, other), with_sweep=False).run(soft).stream.water()
        assert_allclose(sweep.ph[i], water.ph, atol=1e-9)
        assert_allclose(sweep.alkalinity_eq_l[i], water.alkalinity_eq_l, rtol=1e-12)
        assert_allclose(sweep.si_calcite[i], water.saturation_index(), atol=1e-9)
        assert_allclose(sweep.ccpp_mol_l[i], water.precipitation_potential_mol_l(), atol=1e-12)
    assert_allclose(sweep.ph[[0, 20], 0], [8.9, 7.2], atol=1e-9)


def test_others_keep_their_proportion():
    """Three waters: the swept one against the two others at 2 to 3; another source can be swept."""
    own, well, river = water_of(**SOFT), water_of(**HARD), water_of(7.9, 120.0, calcium=1e-3)
    sources = (("well", well, 5.0), ("river", river, 3.0))
    sweep = blend(2.0, *sources).sweep(own)
    assert_allclose(sweep.alkalinity_eq_l[8, 0] / EQ_PER_MG_CACO3, 0.4 * 260.0 + 0.6 * (0.4 * 30.0 + 0.6 * 120.0), rtol=1e-9)
    other = blend(2.0, *sources, vary="river").sweep(own)
    assert_allclose(other.alkalinity_eq_l[8, 0] / EQ_PER_MG_CACO3, 0.4 * 120.0 + 0.6 * (2.0 * 30.0 + 5.0 * 260.0) / 7.0, rtol=1e-9)
    mine = blend(2.0, *sources, vary="the water so far").sweep(own)
    assert_allclose(mine.alkalinity_eq_l[-1, 0] / EQ_PER_MG_CACO3, 30.0, rtol=1e-9)


def test_turns_are_where_saturation_changes_sign():
    """The share found against a root search over single blends; words and figure tell it."""
    soft, hard = water_of(**SOFT | {"ph": 7.4}), water_of(**HARD | {"ph": 7.8})
    step = blend(1.0, ("well", hard, 1.0))
    turns = step.sweep(soft).turns()
    assert np.isfinite(turns).sum() == 1

    def index(share):
        return float(blend(1.0 - share, ("well", hard, share), with_sweep=False).run(soft).stream.water().saturation_index()[0])

    assert_allclose(np.nanmax(turns), brentq(index, 0.0, 1.0), atol=0.003)
    out = step.run(soft)
    assert_allclose(out.figures["saturation_turns_share_percent"], 100.0 * np.nanmax(turns))
    assert_array_equal(out.figures["saturation_turns_count"], [1.0])
    assert f"at about {100.0 * np.nanmax(turns):.0f} % of 'well'" in words(out)


def test_worst_ratios():
    """Largest and smallest potential of a fine scan lie within a step of those of the sweep."""
    soft, hard = water_of(**SOFT), water_of(**HARD | {"ph": 7.5})
    out = blend(1.0, ("well", hard, 1.0)).run(soft)
    fine = np.linspace(0.0, 1.0, 101)
    ccpp = np.array([blend(1.0 - s, ("well", hard, s), with_sweep=False).run(soft).stream.water()
                     .precipitation_potential_mol_l()[0] for s in fine]) * 100.086e3
    for what, best in (("most_depositing", ccpp.argmax()), ("most_dissolving", ccpp.argmin())):
        assert_allclose(out.figures[f"{what}_share_percent"], 100.0 * fine[best], atol=5.0)
        assert_allclose(out.figures[f"{what}_ccpp_mg_l_caco3"], ccpp[best], atol=0.05)


def test_two_saturated_waters_mix_to_one_that_dissolves():
    """Wigley & Plummer 1976 (printed abstract): waters at saturation can mix to undersaturated water."""
    def at_saturation(calcium, alk):
        ph = brentq(lambda x: float(water_of(x, alk, calcium=calcium).water().saturation_index()[0]), 6.0, 10.0)
        return water_of(ph, alk, calcium=calcium)

    out = blend(1.0, ("well", at_saturation(4e-3, 350.0), 1.0)).run(at_saturation(4e-4, 40.0))
    assert out.stream.water().saturation_index()[0] < -0.05
    (finding,) = (f for f in out.findings if f.severity == "warning")
    assert "some ratios dissolve more than either end" in finding.words
    assert not np.isfinite(out.figures["most_depositing_share_percent"]).any() or (
        out.figures["most_depositing_ccpp_mg_l_caco3"] < 0.01).all()


def test_a_mixture_that_deposits_more_than_its_parts():
    """Alkaline water with little calcium meets calcium with little carbonate: neither deposits, the mixture does."""
    soda, salt = water_of(9.6, 300.0, calcium=2e-6), water_of(7.0, 10.0, calcium=5e-3)
    out = blend(1.0, ("brine", salt, 1.0)).run(soda)
    assert "some ratios deposit more than either end" in words(out, "warning")
    assert out.figures["saturation_turns_count"][0] == 2.0
    assert " and " in next(f.words for f in out.findings if "changes between" in f.words)


def test_unknown_calcium_is_said():
    """No saturation without calcium; the blend itself stands."""
    out = blend(1.0, ("well", water_of(7.2, 260.0), 1.0)).run(water_of(**SOFT))
    assert "calcium of a source is not known" in words(out)
    assert np.isfinite(out.figures["ph_after"]).all()
    assert np.isnan(out.figures["most_depositing_share_percent"]).all()
    assert out.figures["saturation_turns_count"][0] == 0.0


def test_one_reading_of_a_well_serves_all_hours():
    """A source with one row goes into every row, and shares may change by row."""
    river = water_of(np.array([7.0, 7.5, 8.0]), 60.0, rows=3, calcium=5e-4)
    out = blend(np.array([1.0, 2.0, 3.0]), ("well", water_of(**HARD), 1.0)).run(river)
    assert_allclose(out.stream.alkalinity_eq_l / EQ_PER_MG_CACO3, [160.0, 380.0 / 3.0, 110.0], rtol=1e-9)
    assert out.figures["most_dissolving_share_percent"].shape == (3,)


# ---------------------------------------------------------------- bad input


def test_bad_input():
    """Each message names rule, value and remedy."""
    soft, hard = water_of(**SOFT), water_of(**HARD)
    with pytest.raises(InputError, match=r"step 'mix' blends and needs another water; none is given. Add a source"):
        blend(1.0)
    with pytest.raises(InputError, match=r"names of their own; found the water so far, well, well. Rename one"):
        blend(1.0, ("well", hard, 1.0), ("well", hard, 1.0))
    with pytest.raises(InputError, match="sweeps the share of 'lake', which is no source; there are the water so far, well"):
        blend(1.0, ("well", hard, 1.0), vary="lake")
    with pytest.raises(InputError, match="share of 'well' in step 'mix' must be at least 0; found -1"):
        blend(1.0, ("well", hard, -1.0)).run(soft)
    with pytest.raises(InputError, match="must have one row or 3; 'well' has 2"):
        blend(1.0, ("well", water_of(rows=2), 1.0)).run(water_of(rows=3))
    with pytest.raises(InputError, match=r"changes the share of 'well' against the other sources; .* zero in some row"):
        blend(0.0, ("well", hard, 1.0)).run(soft)
    with pytest.raises(InputError, match="volumes must not be negative and must not all be zero"):
        blend(0.0, ("well", hard, 0.0), with_sweep=False).run(soft)

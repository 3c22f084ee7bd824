"""Hydroxides of metals against their masses, tables of precipitation, mass action and the pH that must serve several."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from published_rows import MARKS, read_rows
from scipy.optimize import brentq, minimize_scalar

from aquabuf.chem.metals import (
    complex_at,
    conflict,
    dissolved_at,
    free_at,
    least_ph,
    metal_named,
    metals,
    precipitation_window,
    soluble_window,
    window_disagreement,
)
from aquabuf.errors import InputError

ROWS = read_rows("metal_hydroxides")
WINDOW = ("start_ph", "done_ph", "back_ph")
ALL = list(metals().values())


def value_of(row):
    """What the code gives for a row."""
    metal, quantity = metal_named(row["metal"]), row["quantity"]
    if quantity in WINDOW:
        return precipitation_window(metal)[WINDOW.index(quantity)]
    return least_ph(metal) if quantity == "least_ph" else getattr(metal, quantity)


@pytest.mark.parametrize("row", ROWS, ids=lambda r: f"{r['metal']} {r['quantity']}")
def test_metal_agrees_with_its_source_or_is_known_not_to(row):
    """Masses to three decimals; pH windows to half a unit, but for rows marked `no`, which the user is told of."""
    apart = abs(value_of(row) - float(row["expected"]))
    assert row["mark"] in MARKS
    assert len(row["source"]) > 10
    assert (apart <= float(row["atol"])) == (row["agrees"] == "yes")
    assert apart < 2.5


def test_every_metal_has_its_rows():
    """Mass of hydroxide for all, and the table of precipitation wherever the shipped table repeats it."""
    assert {r["metal"] for r in ROWS if r["quantity"] == "g_hydroxide_per_g"} == set(metals())
    for metal in ALL:
        printed = [float(r["expected"]) for name in WINDOW for r in ROWS
                   if (r["metal"], r["quantity"]) == (metal.name, name)]
        assert printed == [x for x in metal.table_window if np.isfinite(x)]


@pytest.mark.parametrize("metal", ALL, ids=lambda m: m.name)
def test_disagreement_is_told_with_both_windows(metal):
    """Words appear for just those metals that have a row marked `no`, and show both figures."""
    apart = [r for r in ROWS if r["metal"] == metal.name and r["quantity"] in WINDOW and r["agrees"] == "no"]
    words = window_disagreement(metal)
    assert bool(words) == bool(apart)
    for row in apart:
        assert f"{float(row['expected']):.1f}" in words
        assert f"{value_of(row):.1f}" in words


@pytest.mark.parametrize("metal", ALL, ids=lambda m: m.name)
def test_solubility_is_mass_action(metal):
    """[M] [OH]^z is Ksp, and the anion over [OH]^n its constant, at any ion product of water."""
    ph = np.array([2.0, 7.0, 12.5])
    for pkw in (13.2, 14.0):
        oh = 10.0 ** (ph - pkw)
        assert_allclose(np.log10(free_at(metal, ph, pkw) * oh**metal.charge), -metal.pksp, atol=1e-9)
        anion = 0.0 * oh if metal.log_k_up is None else 10.0**metal.log_k_up * oh**metal.charge_up
        assert_allclose(complex_at(metal, ph, pkw), anion, rtol=1e-9)
    assert_allclose(dissolved_at(metal, ph), free_at(metal, ph) + complex_at(metal, ph), rtol=1e-14)
    assert np.isnan(dissolved_at(metal, [np.nan, 7.0])).tolist() == [True, False]


@pytest.mark.parametrize("metal", [m for m in ALL if m.log_k_up is not None], ids=lambda m: m.name)
def test_least_solubility_and_window_against_general_solvers(metal):
    """The least is where a minimizer finds it; the window ends where a root finder does."""
    def log_s(ph):
        return float(np.log10(dissolved_at(metal, ph)))
    found = minimize_scalar(log_s, bounds=(2.0, 14.5), method="bounded", options={"xatol": 1e-9})
    assert_allclose(least_ph(metal), found.x, atol=1e-5)
    limit = 30.0 * dissolved_at(metal, found.x)
    low, high = soluble_window(metal, float(limit))
    assert_allclose(low, brentq(lambda x: log_s(x) - np.log10(limit), -1.0, found.x), atol=0.0101)
    if high < 15.0:
        assert_allclose(high, brentq(lambda x: log_s(x) - np.log10(limit), found.x, 15.5), atol=0.0101)
    assert np.isnan(soluble_window(metal, 0.5 * float(dissolved_at(metal, found.x)))).all()


def test_metals_that_one_ph_serves():
    """Copper and zinc: the common part of 8 to 9.5 and 9 to 10.5 (trade page)."""
    found = conflict([metal_named("copper"), metal_named("zinc")])
    assert not found.clash
    assert (found.practice_low, found.practice_high) == (9.0, 9.5)
    assert found.ph_low == found.windows["zinc"][0]
    assert found.words == "One pH can serve all metals that are listed."


def test_metals_that_no_single_ph_serves():
    """Chromium and aluminum end where nickel and cadmium begin."""
    found = conflict([metal_named(n) for n in ("chromium(III)", "cadmium")])
    assert found.clash
    assert "cadmium at least 10.5 and chromium(III) at most 9.0" in found.words
    found = conflict([metal_named(n) for n in ("aluminum", "cadmium", "nickel")])
    assert found.clash
    assert np.isnan(found.ph_low)
    assert "aluminum at most" in found.words
    assert "cadmium at least" in found.words
    assert "two stages" in found.words


def test_given_levels_outrank_listed_ones():
    """A level of 1e-5 mol/L is where the free ion of cadmium is at pH 9.7 by its Ksp; the rest of the words follow."""
    cadmium, aluminum = metal_named("cadmium"), metal_named("aluminum")
    found = conflict([cadmium], {"cadmium": 1e-5})
    assert_allclose(found.ph_low, 14.0 - (13.6 - 5.0) / 2.0, atol=0.011)
    assert not conflict([cadmium, aluminum], {"cadmium": 1.0, "aluminum": 1.0}).windows["aluminum"][0] > 5.0
    assert "no pH brings lead below its level" in conflict([metal_named("lead")], {"lead": 1e-8}).words


def test_metal_without_level_or_window_decides_nothing():
    """Magnesium has neither."""
    found = conflict([metal_named("magnesium")])
    assert not found.clash
    assert not found.windows
    assert np.isnan(found.ph_low)


def test_messages():
    """Unknown metal, impossible level."""
    with pytest.raises(InputError, match=r"no metal is called 'iron'; nearest: .*iron\(I.*valence"):
        metal_named("iron")
    with pytest.raises(InputError, match=r"level of zinc must be above zero; found -1 mol/L.*permit"):
        conflict([metal_named("zinc")], {"zinc": -1.0})


def test_every_figure_has_a_mark_and_a_source():
    """What is recalled says so."""
    for metal in ALL:
        assert metal.solubility_source.endswith("(recalled)")
        for value, source in ((metal.ph_low, metal.window_source), (metal.limit_mg_l, metal.limit_source),
                              (metal.table_window[0], metal.table_source)):
            assert np.isfinite(value) == source.endswith(("(recalled)", "(printed)", "(practice)"))

"""Nitrification and denitrification against operators' sums and the balance of nitrogen, carbon and charge."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_water import EQ_PER_MG_CACO3, water_of, words
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.steps.biology import METHANOL_CARBON, RESIDUAL_EQ_L, Denitrify, Nitrify, nitrifiable
from aquabuf.errors import InputError

N = 14007.0  # mg/mol
LB_PER_MGAL_MG_L = 8.34  # as operators have it


def nitrified(mg_n, water, **settings):
    """The step with nitrogen in mg/L."""
    return Nitrify(name="tank", oxidized_mol_l=mg_n / N, **settings).run(water)


def test_operator_example_of_a_day():
    """30 mg/L as N in 2.35 MGD: 588 lb of nitrogen take 4,198 lb with the printed 7.14, 4,201 with 7.145 (slides)."""
    figures = nitrified(30.0, water_of(7.5, 300.0)).figures
    assert_allclose(figures["ammonium_oxidized_mg_l_n"] * 2.35 * LB_PER_MGAL_MG_L, 588.0, rtol=0.002)
    assert_allclose(figures["alkalinity_used_mg_l_caco3"] * 2.35 * LB_PER_MGAL_MG_L, 4198.0, rtol=0.002)


def test_operator_example_of_missing_alkali():
    """25 mg/L as N on 125, keep 75, 2.22 MGD: short 128.5; 2,379 lb as CaCO3, 1,761 lb hydrate (slides, reckoned on)."""
    keep = 75.0 * EQ_PER_MG_CACO3
    out = nitrified(25.0, water_of(7.5, 125.0), residual_eq_l=(keep, keep))
    short = out.figures["alkalinity_short_mg_l_caco3"]
    assert_allclose(short, 128.5, atol=0.2)
    assert_allclose(short * 2.22 * LB_PER_MGAL_MG_L, 2379.0, rtol=0.002)
    (finding,) = (f for f in out.findings if f.severity == "warning")
    assert_allclose(float(finding.next_step.split("add ")[1].split()[0]) * 2.22 * LB_PER_MGAL_MG_L, 1761.0, rtol=0.002)
    assert finding.rule == "set in the plan"


def test_factors_per_mg_of_nitrogen():
    """7.145 and 3.573 mg CaCO3 per mg N from IUPAC masses; denitrification gives back half."""
    raw = water_of(7.5, 300.0)
    assert_allclose(nitrified(10.0, raw).figures["alkalinity_used_mg_l_caco3"], 71.45, atol=0.006)
    back = Denitrify(name="anoxic", removed_mol_l=10.0 / N).run(raw)
    assert_allclose(back.figures["alkalinity_gained_mg_l_caco3"], 35.73, atol=0.006)


def test_nitrogen_carbon_and_alkalinity_are_accounted_for():
    """Ammonium becomes nitrate, nitrate leaves; carbon comes from the donor alone."""
    raw = water_of(7.4, 250.0, ammonium=2e-3, nitrate=1e-4)
    mid = Nitrify(name="tank", fraction=0.75).run(raw).stream
    assert_allclose([mid.total("ammonium"), mid.total("nitrate")], [[0.5e-3], [1.6e-3]], rtol=1e-12)
    assert_allclose(mid.alkalinity_eq_l, raw.alkalinity_eq_l - 3e-3, rtol=1e-12)
    assert_array_equal(mid.carbon_mol_l, raw.carbon_mol_l)
    out = Denitrify(name="anoxic", fraction=0.5).run(mid).stream
    assert_allclose(out.total("nitrate"), 0.8e-3, rtol=1e-12)
    assert_allclose(out.alkalinity_eq_l, mid.alkalinity_eq_l + 0.8e-3, rtol=1e-12)
    assert_allclose(out.carbon_mol_l, mid.carbon_mol_l + 0.8e-3 * 5.0 / 6.0, rtol=1e-12)
    bare = Denitrify(name="anoxic", fraction=0.5, donor_carbon_per_n=0.0).run(mid).stream
    assert_array_equal(bare.carbon_mol_l, mid.carbon_mol_l)


def test_methanol_by_electrons():
    """Methanol gives 6 electrons per carbon (to CO2), nitrate takes 5 (to N2)."""
    assert_allclose(METHANOL_CARBON, (5 - 0) / (4 - -2))


def test_ph_as_by_hand():
    """Two equivalents per mole off a water worked out from printed constants."""
    raw = water_of(7.4, 200.0)
    out = nitrified(14.0, raw)
    water = BareWater(25.0, float(out.stream.ionic_strength_mol_l[0]))
    left = 200.0 * EQ_PER_MG_CACO3 - 2.0 * 14.0 / N
    assert_allclose(out.figures["ph_after"], water.ph(left, float(raw.carbon_mol_l[0])), atol=0.004)


def test_what_can_be_oxidized_leaves_just_the_residual():
    """The figure put in again comes out at 50 mg/L; below it nothing can be oxidized."""
    raw = water_of(7.5, 180.0)
    limit = float(nitrified(1.0, raw).figures["nitrifiable_to_residual_mg_l_n"][0])
    assert_allclose(limit, 130.0 / 7.145, rtol=2e-4)
    assert_allclose(nitrified(limit, raw).figures["alkalinity_left_mg_l_caco3"], 50.0)
    assert nitrifiable(40.0 * EQ_PER_MG_CACO3, RESIDUAL_EQ_L[0]) == 0.0


@pytest.mark.parametrize(("raw", "severity", "said"), [
    (110.0, "warning", "leaves 38.5 mg/L as CaCO3 of alkalinity, below 50"),
    (150.0, "note", "alkalinity left is 78.5 mg/L as CaCO3; 100 would be safe"),
    (180.0, "note", ""),
])
def test_residual_is_judged(raw, severity, said):
    """50 to 100 mg/L should be left, practice of manuals (recalled)."""
    out = nitrified(10.0, water_of(7.5, raw))
    found = [f for f in out.findings if "alkalinity, below" in f.words or "alkalinity left is" in f.words]
    assert [f.severity for f in found] == [severity] * bool(said)
    assert all(said in f.words and "recalled" in f.rule for f in found)


def test_more_than_there_is():
    """Only what is there reacts, and the rest is told."""
    out = nitrified(20.0, water_of(7.5, 300.0, ammonium=15.0 / N))
    assert_allclose(out.figures["ammonium_oxidized_mg_l_n"], 15.0)
    assert_allclose(out.stream.total("ammonium"), 0.0, atol=1e-18)
    assert "5.0 mg/L as N more oxidized than there is ammonium" in words(out, "warning")
    gone = Denitrify(name="anoxic", removed_mol_l=20.0 / N).run(water_of(7.5, 300.0, nitrate=5.0 / N))
    assert_allclose(gone.figures["nitrate_removed_mg_l_n"], 5.0)
    assert "15.0 mg/L as N more removed than there is nitrate" in words(gone, "warning")


def test_unknown_ammonium_is_said_and_stays_unknown():
    """Nitrogen given alone works; the total remains nan."""
    out = nitrified(5.0, water_of(7.5, 300.0))
    assert "ammonium of the water is not known" in words(out)
    assert np.isnan(out.stream.total("ammonium")).all()
    assert "not known" not in words(nitrified(5.0, water_of(7.5, 300.0, ammonium=1e-3)))


def test_assumptions_are_said():
    """Growth, donor and carbon dioxide."""
    assert "cell growth is not counted" in words(nitrified(5.0, water_of(7.5, 300.0)))
    out = Denitrify(name="anoxic", removed_mol_l=5.0 / N).run(water_of(7.5, 300.0))
    assert "donor is counted as uncharged and makes 0.83 moles" in words(out)
    assert "cell growth is not counted" in words(out)


@pytest.mark.parametrize(("step", "amount"), [(Nitrify, "oxidized_mol_l"), (Denitrify, "removed_mol_l")])
def test_bad_input(step, amount):
    """Neither or both settings, shares out of range, unknown totals."""
    with pytest.raises(InputError, match=f"step 's' needs either fraction or {amount}; found none. Give one"):
        step(name="s")
    with pytest.raises(InputError, match=f"step 's' needs either fraction or {amount}; found both"):
        step(name="s", fraction=0.5, **{amount: 1e-3})
    with pytest.raises(InputError, match="fraction of step 's' must be 0 to 1; found 50"):
        step(name="s", fraction=50.0).run(water_of(ammonium=1e-3, nitrate=1e-3))
    with pytest.raises(InputError, match=r"takes a fraction of .* not known in any row"):
        step(name="s", fraction=0.5).run(water_of())
    with pytest.raises(InputError, match="nitrogen of step 's' must be at least 0; found -1"):
        step(name="s", **{amount: -1.0}).run(water_of())


def test_bad_donor():
    """Carbon made is not negative."""
    with pytest.raises(InputError, match=r"donor_carbon_per_n of step 's' must be at least 0; found -0.5.*Methanol"):
        Denitrify(name="s", fraction=0.5, donor_carbon_per_n=-0.5)

"""Fluoridation: stoichiometry, alkalinity and pH worked out a second time, guard rails, the overfeed lesson."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_water import EQ_PER_MG_CACO3, stocked, water_of, words
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.steps.fluoridate import Fluoridate, feed_times_to
from aquabuf.errors import InputError

F = 18.998e3  # mg/mol


def step(mg_l=0.7, **settings):
    """Fluosilicic acid of 24 % to a fluoride in mg/L."""
    return Fluoridate(name="fluor", product=stocked("fluosilicic acid", 0.24), fluoride_mol_l=mg_l / F, **settings)


def test_dose_brings_the_fluoride_wanted():
    """Six per mole; raw 0.2 mg/L leaves 0.5 to add, which is 144.09 / (6 x 18.998) mg of acid each."""
    raw = water_of(7.8, 60.0, fluoride=0.2 / F)
    out = step().run(raw)
    assert_allclose(out.figures["fluoride_after_mg_l"], 0.7, atol=1e-9)
    assert_allclose(out.stream.total("fluoride"), 0.7 / F, rtol=1e-4)
    dosed = out.doses[0]
    assert_allclose(dosed.product.mg_l_pure(dosed.mol_l), 0.5 * 144.09 / (6.0 * 18.998), rtol=1e-3)
    assert_allclose(dosed.product.mg_l_product(dosed.mol_l), 0.5 * 144.09 / (6.0 * 18.998) / 0.24, rtol=1e-3)


def test_alkalinity_falls_by_2_634_mg_per_mg():
    """Full hydrolysis takes six equivalents per six fluoride: 2.634 mg/L as CaCO3 per mg F (molar masses)."""
    out = step(1.0).run(water_of(7.8, 60.0, fluoride=0.0))
    assert_allclose(out.figures["alkalinity_change_mg_l_caco3"], -2.634, atol=0.001)
    assert_allclose(out.stream.alkalinity_eq_l, (60.0 - 2.634) * EQ_PER_MG_CACO3, rtol=1e-4)
    assert_allclose(out.stream.carbon_mol_l, water_of(7.8, 60.0).carbon_mol_l, rtol=1e-12)


def test_ph_as_worked_by_hand():
    """The same carbon with less alkalinity; hydrogen fluoride and silicate do not matter at this pH."""
    raw = water_of(7.8, 20.0, strength=0.001, fluoride=0.0)
    out = step().run(raw)
    by_hand = BareWater(25.0, 0.001)
    carbon = by_hand.dic(7.8, 20.0 * EQ_PER_MG_CACO3)
    wanted = by_hand.ph(20.0 * EQ_PER_MG_CACO3 - 0.7 / F, carbon)
    assert_allclose(out.figures["ph_after"], wanted, atol=0.004)
    assert_allclose(out.figures["ph_before"], 7.8, atol=1e-9)


def test_stop_above_the_guideline_and_the_legal_limit():
    """1.5 mg/L (WHO, recalled) and 4 mg/L (US, recalled): the first row passes, the others stop."""
    raw = water_of(7.8, 100.0, rows=3, fluoride=np.array([0.0, 1.6, 4.2]) / F)
    out = step(1.4).run(raw)
    stops = [f for f in out.findings if f.severity == "stop"]
    assert [f.where.tolist() for f in stops] == [[False, True, True], [False, False, True]]
    assert "fluoride of 1.60 to 4.20 mg/L is above 1.5 mg/L" in stops[0].words
    assert "above the legal limit of 4 mg/L" in stops[1].words
    assert not [f for f in step(1.5).run(water_of(7.8, 100.0, fluoride=0.0)).findings if f.severity == "stop"]
    own = step(1.0, most_mol_l=0.9 / F).run(water_of(7.8, 100.0, fluoride=0.0))
    assert "is above 0.9 mg/L" in words(own, "stop")
    assert own.findings[0].rule == "set in the plan"


def test_water_with_enough_fluoride_gets_none():
    """No negative dose; the row beside it is served."""
    out = step(0.7).run(water_of(7.8, 100.0, rows=2, fluoride=np.array([0.9, 0.1]) / F))
    assert out.doses[0].mol_l[0] == 0.0
    assert_allclose(out.figures["fluoride_after_mg_l"], [0.9, 0.7], atol=1e-9)
    assert "0.90 mg/L of fluoride of its own, more than wanted" in words(out, "note")


def test_how_often_the_feed_fits_into_the_limits():
    """Raw 0.2, dose 0.5 mg/L: (1.5 - 0.2) / 0.5 = 2.6 and (4 - 0.2) / 0.5 = 7.6 times."""
    out = step().run(water_of(7.8, 60.0, fluoride=0.2 / F))
    assert_allclose(out.figures["feed_times_to_guideline"], 2.6, rtol=1e-4)
    assert_allclose(out.figures["feed_times_to_legal_limit"], 7.6, rtol=1e-4)
    assert_array_equal(feed_times_to(1.5, 0.2, 0.0), np.inf)


def test_the_overfeed_lesson():
    """A pump at 80 % instead of 10 %: 0.7 mg/L becomes 5.6 (5.9 was measured in 2017), and soft water loses its pH."""
    raw = water_of(7.8, 20.0, strength=0.001, fluoride=0.0)
    out = step().run(raw)
    assert_allclose(out.figures["fault_fluoride_mg_l"], 5.6, atol=1e-3)
    by_hand = BareWater(25.0, 0.001)
    wanted = by_hand.ph(20.0 * EQ_PER_MG_CACO3 - 5.6 / F, by_hand.dic(7.8, 20.0 * EQ_PER_MG_CACO3))
    assert_allclose(out.figures["fault_ph"], wanted, atol=0.02)
    assert f"a pump that runs 8 times too fast gives 5.6 mg/L at pH {np.floor(10.0 * wanted) / 10.0:.1f}" in words(out, "note")
    assert any("incident of 2017" in f.rule for f in out.findings)


def test_fluoride_that_is_not_known_counts_as_none_and_is_said():
    """Row by row."""
    out = step().run(water_of(7.8, 60.0, rows=2, fluoride=np.array([np.nan, 0.2]) / F))
    (found,) = [f for f in out.findings if f.severity == "warning"]
    assert_array_equal(found.where, [True, False])
    assert "not known and counts as none" in found.words
    assert_allclose(out.figures["fluoride_added_mg_l"], [0.7, 0.5], atol=1e-9)


def test_held_dose_stays_when_the_raw_water_changes():
    """0.2 mg/L more in the raw water is 0.2 mg/L more in the end."""
    out = step().run(water_of(7.8, 60.0, fluoride=0.2 / F))
    drift = step().held(out.doses).run(water_of(7.8, 60.0, fluoride=0.4 / F))
    assert_allclose(drift.figures["fluoride_after_mg_l"], 0.9, atol=1e-9)


@pytest.mark.parametrize(("settings", "message"), [
    ({"product": stocked("caustic soda")}, r"needs a product that brings fluoride; found 'caustic soda'"),
    ({"fluoride_mol_l": 0.7}, r"fluoride wanted in step 'fluor' must be 0 or more and below 0.01 mol/L .* found 0.7"),
    ({"most_mol_l": -1.0}, r"most fluoride in step 'fluor' must be 0 or more .* found -1"),
    ({"fixed_mol_l": (1e-5, 1e-5)}, r"fixed_mol_l of step 'fluor' must have 1 value; found 2"),
])
def test_settings_that_cannot_be(settings, message):
    """Each says the rule, what was found and what to do."""
    settings = {"name": "fluor", "product": stocked("fluosilicic acid"), "fluoride_mol_l": 3.7e-5} | settings
    with pytest.raises(InputError, match=message):
        Fluoridate(**settings)

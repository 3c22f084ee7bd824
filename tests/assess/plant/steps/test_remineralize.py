"""Remineralizing permeate: linear sums by hand, saturation, and the set of criteria for desalinated water."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_water import EQ_PER_MG_CACO3, stocked, words
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.steps.remineralize import (
    Remineralize,
    carbon_dioxide_for,
    criteria,
    mineral_for,
    saturation_ph,
)
from aquabuf.assess.plant.stream import Stream
from aquabuf.chem.products import find_product
from aquabuf.errors import InputError
from aquabuf.tables import read_table

CO2 = 44.009e3  # mg/mol
CACO3 = 100.086e3


def permeate(alkalinity=(5e-5, 2e-4, 4e-4), carbon=(1e-4, 3e-4, 6e-4), calcium=(1e-5, 2e-5, 0.0), t_c=25.0):
    """Permeate of three kinds."""
    rows = np.size(alkalinity)
    return Stream(np.full(rows, t_c), np.array(alkalinity), np.array(carbon),
                  {"calcium": np.array(calcium), "magnesium": np.zeros(rows), "sodium": np.full(rows, 3e-4)},
                  np.full(rows, 5e-4), np.ones(rows))


def step(mineral="limestone", **settings):
    """A remineralization step."""
    wanted = {"alkalinity_eq_l": 90 * EQ_PER_MG_CACO3} if "calcium_mol_l" not in settings else {}
    return Remineralize(name="remin", mineral=stocked(mineral), carbon_dioxide=stocked("carbon dioxide"),
                        **(wanted | settings))


def with_base(**settings):
    """The same, brought to pH 8.3 with caustic soda."""
    return step(base=stocked("caustic soda"), to_ph=8.3, **settings)


def test_mineral_closes_the_larger_gap():
    """Two equivalents and one calcium per mole: the larger of the two needs, none below zero."""
    adds = find_product("limestone").adds
    got = mineral_for(permeate(), adds, 1e-3, [4e-4, 6e-4, 0.0])
    assert_allclose(got, [max(0.475e-3, 0.39e-3), max(0.4e-3, 0.58e-3), max(0.3e-3, 0.0)])
    assert_array_equal(mineral_for(permeate(), adds, 0.0, 0.0), 0.0)


def test_carbon_dioxide_per_mg_as_printed():
    """0.44 mg per mg of calcium carbonate, 0.88 mg per mg as CaCO3 by lime (table of steps)."""
    one = 1.0 / CACO3  # mol of calcium in 1 mg/L as CaCO3
    assert_allclose(CO2 * carbon_dioxide_for(one, find_product("limestone").adds), 0.44, atol=0.001)
    assert_allclose(CO2 * carbon_dioxide_for(one, find_product("hydrated lime").adds), 0.88, atol=0.001)


@pytest.mark.parametrize(("mineral", "carbon"), [("limestone", 1.0), ("hydrated lime", 0.0), ("quicklime", 0.0)])
def test_wanted_alkalinity_is_met_and_nothing_is_lost(mineral, carbon):
    """Sums of what went in, per mole."""
    raw = permeate()
    out = step(mineral).run(raw)
    stone, gas = (d.mol_l for d in out.doses)
    assert_allclose(out.stream.alkalinity_eq_l, 90 * EQ_PER_MG_CACO3, rtol=1e-12)
    assert_allclose(stone, 0.5 * (90 * EQ_PER_MG_CACO3 - raw.alkalinity_eq_l), rtol=1e-12)
    assert_allclose(out.stream.total("calcium"), raw.total("calcium") + stone, rtol=1e-12)
    assert_allclose(out.stream.carbon_mol_l, raw.carbon_mol_l + gas + carbon * stone, rtol=1e-12)


def test_lime_route_ends_as_bicarbonate():
    """Two moles of carbon dioxide per mole of lime, less what is there: carbon equals alkalinity."""
    raw = permeate()
    out = step("hydrated lime").run(raw)
    by_hand = BareWater(25.0, 5e-4)
    for row in range(3):
        carbon = raw.carbon_mol_l[row]
        there = carbon * by_hand.shares(by_hand.ph(raw.alkalinity_eq_l[row], carbon))[0]
        assert_allclose(out.figures["co2_by_rule_mg_l"][row], CO2 * (2.0 * out.doses[0].mol_l[row] - there), rtol=1e-3)
    assert_array_equal(out.figures["co2_to_dissolve_mg_l"], 0.0)
    assert_allclose(out.stream.carbon_mol_l, out.stream.alkalinity_eq_l, rtol=0.01)


def test_limestone_route_ends_at_saturation():
    """The least carbon dioxide with which so much dissolves leaves water with an index of 0."""
    out = step().run(permeate())
    fed = out.figures["co2_fed_mg_l"]
    assert_allclose(fed, np.maximum(out.figures["co2_by_rule_mg_l"], out.figures["co2_to_dissolve_mg_l"]))
    assert (fed > out.figures["co2_by_rule_mg_l"]).all()
    assert_allclose(out.stream.water().saturation_index(), 0.0, atol=1e-7)
    assert "so much limestone dissolves only with" in words(out, "note")


def test_so_little_limestone_needs_no_carbon_dioxide_to_dissolve():
    """Below saturation at any pH: what stoichiometry asks is all, here less than the permeate brings."""
    out = step(alkalinity_eq_l=1.5e-4).run(permeate((5e-5,), (4e-4,), (1e-5,)))
    assert out.doses[0].mol_l[0] > 4e-5
    assert out.figures["co2_to_dissolve_mg_l"][0] == 0.0
    assert out.doses[1].mol_l[0] == 0.0


def test_saturation_ph_has_an_index_of_zero():
    """Alkalinity and calcium held. Unknown calcium stays unknown; the weakest is below saturation whatever its pH.

    There at most 2.5e-5 mol/L of carbonate meets 1e-4 of calcium; calcite needs 3.3e-9 (Plummer & Busenberg 1982).
    """
    raw = permeate((2e-4, 1e-3, 5e-3, 1e-3), (3e-4, 2e-3, 3e-3, 2e-3), (1e-4, 1e-3, 3e-3, np.nan))
    ph = saturation_ph(raw)
    assert ph[0] == np.inf
    assert_array_equal(np.isnan(ph), [False, False, False, True])
    carbon = BareWater(25.0, 5e-4)
    for row in (1, 2):
        again = raw.take(np.array([row]))
        there = again.replaced(carbon_mol_l=np.array([carbon.dic(ph[row], raw.alkalinity_eq_l[row])]))
        assert_allclose(there.water().saturation_index(), 0.0, atol=0.006)


def test_base_brings_the_ph_by_the_balance():
    """Caustic is the alkalinity at pH 8.3 less what is there, carbon held: worked out a second time."""
    raw = permeate()
    out = with_base().run(raw)
    assert_allclose(out.figures["ph_after"], 8.3, atol=1e-7)
    stone, gas, base = (d.mol_l for d in out.doses)
    before = 90 * EQ_PER_MG_CACO3
    for row in range(3):
        strength = out.stream.ionic_strength_mol_l[row]
        carbon = raw.carbon_mol_l[row] + gas[row] + stone[row]
        wanted = BareWater(25.0, strength).alkalinity(8.3, carbon) - before
        assert_allclose(base[row], wanted, rtol=0.03)
    assert_allclose(out.stream.alkalinity_eq_l, before + base, rtol=1e-12)
    assert_allclose(out.figures["base_meq_l"], 1e3 * base)
    assert (base > 1e-6).all()


def test_water_above_the_wanted_ph_gets_no_base():
    """Lime ends above pH 8; a wanted 7.5 cannot come from a base."""
    out = step("hydrated lime", base=stocked("caustic soda"), to_ph=7.5).run(permeate())
    assert_array_equal(out.doses[2].mol_l, 0.0)
    assert "without base, above the wanted 7.5" in words(out, "warning")


def test_criteria_are_those_printed():
    """Lahav & Birnhack 2007 as quoted: alkalinity above 80, calcium 80 to 120 (as CaCO3), CCPP 3 to 10, pH below 8.5."""
    found = {c.quantity.name: (c.low, c.high) for c in criteria()["desalinated water"]}
    mol = 1.0 / CACO3
    expected = {"alkalinity": (80 * 2 * mol, np.inf), "calcium": (80 * mol, 120 * mol), "ccpp": (3 * mol, 10 * mol),
                "ph": (-np.inf, 8.5)}
    assert found.keys() == expected.keys()
    for name, limits in expected.items():
        assert_allclose(found[name], limits, rtol=1e-4)
    assert all(row["mark"] in ("printed", "recalled", "practice") and row["source"] for row in read_table("remineralization_sets"))


@pytest.mark.parametrize(("settings", "met", "missed"), [
    ({"alkalinity_eq_l": 90 * EQ_PER_MG_CACO3}, True, ()),
    ({"alkalinity_eq_l": 60 * EQ_PER_MG_CACO3}, False, ("alkalinity of", "is outside at least 80.0 mg/L as CaCO3")),
    ({"calcium_mol_l": 140.0 / CACO3}, False, ("calcium of", "is outside 32.0 mg/L to 48.1 mg/L")),
])
def test_verdict_against_the_set(settings, met, missed):
    """Each criterion that fails is a warning with value, limit and source; all met is a note."""
    raw = permeate((5e-5,), (1e-4,), (5e-5,))
    out = with_base(**settings).run(raw)
    assert ("meets the criteria for desalinated water" in words(out, "note")) is met
    for piece in missed:
        assert piece in words(out, "warning")
    none = with_base(criteria_set=None, **settings).run(raw)
    assert "criteria" not in words(none)
    assert "outside" not in words(none)


def test_a_low_ph_fails_the_potential_and_a_high_one_the_ph():
    """Water at the limestone's own saturation has no potential; at pH 8.9 it is too alkaline."""
    raw = permeate((5e-5,), (1e-4,), (5e-5,))
    assert "precipitation potential of" in words(step().run(raw), "warning")
    assert "pH of 8.90 is outside at most 8.50" in words(step(base=stocked("caustic soda"), to_ph=8.9).run(raw), "warning")


def test_held_doses_stay():
    """The same water again; less gas than so much limestone needs is a warning."""
    raw = permeate()
    out = with_base().run(raw)
    again = with_base().held(out.doses).run(raw)
    assert_allclose(again.stream.carbon_mol_l, out.stream.carbon_mol_l, rtol=1e-12)
    assert_allclose(again.figures["ph_after"], 8.3, atol=1e-7)
    short = step(fixed_mol_l=(1e-3, 1e-4)).run(raw)
    assert "the bed stops at saturation before" in words(short, "warning")
    assert "the bed stops" not in words(again)


def test_an_unknown_row_stays_alone():
    """nan calcium in one row."""
    raw = permeate(calcium=(1e-5, np.nan, 0.0))
    out, whole = with_base().run(raw), with_base().run(permeate())
    assert_array_equal(np.isnan(out.doses[0].mol_l), [False, True, False])
    assert_allclose(out.stream.carbon_mol_l[[0, 2]], whole.stream.carbon_mol_l[[0, 2]], rtol=1e-9)


@pytest.mark.parametrize(("settings", "message"), [
    ({"mineral": stocked("soda ash")}, r"remineralizes with limestone or lime; found 'soda ash'"),
    ({"carbon_dioxide": stocked("soda ash")}, r"needs carbon dioxide; found 'soda ash'"),
    ({"alkalinity_eq_l": None}, r"must say what is wanted; found neither alkalinity nor calcium"),
    ({"alkalinity_eq_l": 90.0}, r"alkalinity wanted in step 'remin' must be 0 or more and below 0.1; found 90"),
    ({"calcium_mol_l": -1.0}, r"calcium wanted in step 'remin' must be 0 or more and below 0.1; found -1"),
    ({"to_ph": 8.3}, r"needs a base and the pH to bring the water to, or neither; found one"),
    ({"base": stocked("soda ash"), "to_ph": 8.3}, r"must bring alkalinity and no carbon; found 'soda ash'"),
    ({"criteria_set": "sea"}, r"must be one of desalinated water; found 'sea'"),
    ({"fixed_mol_l": (1e-3,)}, r"must have 2 values, one per product; found 1"),
])
def test_settings_that_cannot_be(settings, message):
    """Each says the rule, what was found and what to do."""
    settings = {"name": "remin", "mineral": stocked("limestone"), "carbon_dioxide": stocked("carbon dioxide"),
                "alkalinity_eq_l": 1.8e-3} | settings
    with pytest.raises(InputError, match=message):
        Remineralize(**settings)


def test_calcium_must_be_known():
    """Zero is a value."""
    raw = permeate()
    with pytest.raises(InputError, match=r"needs the calcium of the permeate; it is not known. Give calcium, 0 for"):
        step().run(raw.replaced(totals={}))

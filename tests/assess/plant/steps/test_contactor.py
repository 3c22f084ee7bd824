"""The calcite contactor: balances, saturation that it never passes, first order by hand."""

import numpy as np
import pytest
from made_water import stocked, words
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.steps.contactor import CalciteContactor, share_in_bed
from aquabuf.assess.plant.stream import Stream
from aquabuf.errors import InputError

CACO3, CO2 = 100.086e3, 44.009e3  # mg/mol


def soft(rows=30, seed=5):
    """Soft waters with some carbon dioxide."""
    rng = np.random.default_rng(seed)
    alkalinity = rng.uniform(2e-5, 8e-4, rows)
    return Stream(rng.uniform(2.0, 28.0, rows), alkalinity, alkalinity + rng.uniform(1e-4, 1.5e-3, rows),
                  {"calcium": rng.uniform(0.0, 3e-4, rows), "magnesium": rng.uniform(0.0, 1e-4, rows),
                   "sodium": rng.uniform(1e-4, 5e-4, rows), "sulfate": rng.uniform(0.0, 1e-4, rows)},
                  rng.uniform(3e-4, 2e-3, rows), np.ones(rows))


def bed(strength=1.0, **settings):
    """A contactor step."""
    return CalciteContactor(name="bed", calcite=stocked("limestone", strength), **settings)


@pytest.mark.parametrize("share", [0.3, 0.9, 1.0])
def test_nothing_is_lost(share):
    """Each mole dissolved brings two of alkalinity, one of carbon, one of calcium; gas ahead is counted."""
    raw, gas = soft(), np.linspace(0.0, 1e-3, 30)
    out = bed(share=share, carbon_dioxide=stocked("carbon dioxide"), co2_mol_l=gas).run(raw)
    stone = out.doses[1].mol_l
    assert (stone > 1e-6).all()
    assert_array_equal(out.doses[0].mol_l, gas)
    assert_allclose(out.stream.alkalinity_eq_l, raw.alkalinity_eq_l + 2.0 * stone, rtol=1e-12)
    assert_allclose(out.stream.carbon_mol_l, raw.carbon_mol_l + gas + stone, rtol=1e-12)
    assert_allclose(out.stream.total("calcium"), raw.total("calcium") + stone, rtol=1e-12)
    assert_allclose(out.figures["alkalinity_rise_mg_l_caco3"], CACO3 * stone, rtol=1e-5)
    assert_allclose(out.figures["calcium_rise_mg_l"], 40.078e3 * stone, rtol=1e-5)


def test_the_whole_way_is_saturation_and_no_share_passes_it():
    """Index 0 at a share of 1, below 0 short of it, closer the larger the share."""
    raw = soft()
    index = [bed(share=s).run(raw).stream.water().saturation_index() for s in (0.2, 0.6, 0.95, 1.0)]
    assert_allclose(index[-1], 0.0, atol=1e-8)
    assert (np.diff(index, axis=0) > 0.0).all()
    assert (index[-2] < -1e-3).all()


def test_share_is_of_what_dissolves_at_saturation():
    """Half the way is half the stone."""
    raw = soft()
    whole, half = (bed(share=s).run(raw).doses[0].mol_l for s in (1.0, 0.5))
    assert_allclose(half, 0.5 * whole, rtol=1e-12)


def test_first_order_in_contact_time_by_hand():
    """The deficit halves with every ln 2 / k: 75 % of the way after two of them."""
    assert_allclose(share_in_bed(0.1, [0.0, np.log(2.0) / 0.1, 2.0 * np.log(2.0) / 0.1]), [0.0, 0.5, 0.75])
    raw = soft()
    timed = bed(rate_per_min=0.1, contact_min=2.0 * np.log(2.0) / 0.1).run(raw)
    assert_allclose(timed.doses[0].mol_l, bed(share=0.75).run(raw).doses[0].mol_l, rtol=1e-12)


def test_carbon_dioxide_used_is_0_44_mg_per_mg_where_bicarbonate_is_made():
    """44.009 / 100.086; the solved use agrees where carbon dioxide is in excess and the water is not acid itself.

    Exactly, it is the stone less what carbonate, hydroxide and hydrogen ions change (alkalinity less carbon).
    """
    raw = soft()
    out = bed(share=0.3, carbon_dioxide=stocked("carbon dioxide"), co2_mol_l=2e-3).run(raw)
    stone = out.figures["calcite_dissolved_mg_l"]
    assert_allclose(out.figures["co2_by_rule_mg_l"], 0.4397 * stone, rtol=2e-4)
    buffered = raw.alkalinity_eq_l > 3e-4
    assert buffered.sum() > 10
    assert_allclose(out.figures["co2_used_mg_l"][buffered], 0.4397 * stone[buffered], rtol=0.02)
    fed = raw.added({"carbon": 1.0}, 2e-3).water().species_mol_l
    left = out.stream.water().species_mol_l
    change = sum(sign * (left[f] - fed[f]) for f, sign in (("CO3--", 1.0), ("OH-", 1.0), ("H+", -1.0)))
    assert_allclose((out.figures["co2_used_mg_l"] / CO2)[buffered], (stone / CACO3 - change)[buffered], rtol=1e-4)
    assert_allclose(out.figures["co2_used_mg_l"] + out.figures["co2_left_mg_l"],
                    CO2 * (raw.water().species_mol_l["CO2"] + 2e-3), rtol=0.01)


def test_stone_used_per_megaliter_counts_its_strength():
    """1 mg/L is 1 kg per ML; stone of 96 % takes more of it."""
    raw = soft()
    out = bed(strength=0.96, share=1.0).run(raw)
    assert_allclose(out.figures["calcite_kg_per_ml"], CACO3 / 0.96 * out.doses[0].mol_l, rtol=1e-5)


def test_gas_ahead_dissolves_more():
    """More carbon dioxide, more alkalinity; without any, little."""
    raw = soft()
    gas = stocked("carbon dioxide")
    rises = [bed(carbon_dioxide=gas, co2_mol_l=x).run(raw).figures["alkalinity_rise_mg_l_caco3"] for x in (0.0, 3e-4, 9e-4)]
    assert (np.diff(rises, axis=0) > 0.0).all()


def test_water_that_would_deposit_passes_unchanged():
    """A bed does not soften: the row is as it came, with a warning; its neighbor dissolves."""
    raw = Stream(np.full(2, 20.0), np.array([3e-3, 3e-4]), np.array([2.9e-3, 4e-4]), {"calcium": np.array([2e-3, 1e-4])},
                 np.full(2, 0.003), np.ones(2))
    out = bed().run(raw)
    assert out.doses[0].mol_l[0] == 0.0
    assert out.doses[0].mol_l[1] > 0.0
    assert out.stream.alkalinity_eq_l[0] == raw.alkalinity_eq_l[0]
    (found,) = [f for f in out.findings if f.severity == "warning"]
    assert_array_equal(found.where, [True, False])
    assert "saturated with calcium carbonate before the bed" in found.words


def test_water_without_calcium_dissolves_and_unknown_calcium_is_unknown():
    """0 is a value, nan is not; rows do not see each other."""
    raw = soft(3)
    calcium = np.array([0.0, np.nan, raw.total("calcium")[2]])
    out = bed().run(raw.replaced(totals={**raw.totals, "calcium": calcium}))
    assert out.doses[0].mol_l[0] > 1e-5
    assert_array_equal(np.isnan(out.stream.alkalinity_eq_l), [False, True, False])
    assert_allclose(out.doses[0].mol_l[2], bed().run(raw).doses[0].mol_l[2], rtol=1e-9)


def test_an_assumed_share_is_said():
    """90 % is an assumption; one that is given is not."""
    assert "90 % of the way to saturation, which is an assumption" in words(bed().run(soft()), "note")
    assert "assumption" not in words(bed(share=0.9).run(soft()))
    assert "assumption" not in words(bed(rate_per_min=0.1, contact_min=20.0).run(soft()))
    assert "would still dissolve calcium carbonate" in words(bed(share=0.5).run(soft()), "note")


@pytest.mark.parametrize(("settings", "message"), [
    ({"calcite": stocked("dolomite")}, r"step 'bed' needs calcium carbonate; found 'dolomite' \(CaMg\(CO3\)2\)"),
    ({"carbon_dioxide": stocked("soda ash")}, r"step 'bed' needs carbon dioxide; found 'soda ash'"),
    ({"co2_mol_l": 1e-4}, r"doses carbon dioxide, which no product is named for"),
    ({"share": 0.5, "rate_per_min": 0.1, "contact_min": 10.0}, r"either a share .* or both a rate and a contact time"),
    ({"rate_per_min": 0.1}, r"either a share .* or both a rate and a contact time"),
    ({"share": 1.2}, r"share of step 'bed' must be 0 to 1; found 1.2"),
    ({"rate_per_min": -1.0, "contact_min": 5.0}, r"rate of step 'bed' must be 0 to 100; found -1"),
    ({"rate_per_min": 1.0, "contact_min": -5.0}, r"contact time of step 'bed' must be 0 to 10000; found -5"),
])
def test_settings_that_cannot_be(settings, message):
    """Each says the rule, what was found and what to do."""
    with pytest.raises(InputError, match=message):
        CalciteContactor(**({"name": "bed", "calcite": stocked("limestone")} | settings))


def test_a_dose_that_cannot_be_and_calcium_that_nobody_knows():
    """Both are asked for when the water is there."""
    raw = soft(2)
    with pytest.raises(InputError, match=r"co2_mol_l of step 'bed' must be at least 0; found -0.001"):
        bed(carbon_dioxide=stocked("carbon dioxide"), co2_mol_l=-1e-3).run(raw)
    with pytest.raises(InputError, match=r"needs the calcium of the water; it is not known. Give calcium, 0 for water"):
        bed().run(raw.replaced(totals={}))

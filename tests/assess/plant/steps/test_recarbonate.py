"""Recarbonation against the design example, stoichiometry, and carbonate water worked out a second time."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_water import EQ_PER_MG_CACO3, stocked, words
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.steps.recarbonate import Recarbonate, carbon_to_bicarbonate
from aquabuf.assess.plant.stream import Stream
from aquabuf.errors import InputError

CO2 = 44.009e3  # mg/mol
POUNDS_PER_MGAL = 8.3454  # per mg/L


def alkaline(alkalinity=(1.6e-3, 2.4e-3, 3e-3), carbon=(2e-4, 6e-4, 1.6e-3), calcium=(9e-4, 7e-4, 4e-4), t_c=25.0,
             strength=0.006):
    """Waters as excess lime leaves them."""
    rows = np.size(alkalinity)
    return Stream(np.full(rows, t_c), np.array(alkalinity), np.array(carbon),
                  {"calcium": np.array(calcium), "magnesium": np.full(rows, 1e-4), "sodium": np.full(rows, 1e-3)},
                  np.full(rows, strength), np.ones(rows))


def step(to_ph=8.6, **settings):
    """A recarbonation step."""
    return Recarbonate(name="recarb", carbon_dioxide=stocked("carbon dioxide"), to_ph=to_ph, **settings)


def test_carbon_dioxide_of_the_design_example():
    """Water Treatment Plant Design ex. 11.3: 40 mg/L of carbonate to bicarbonate, 65 of hydroxide: 389 lb/MG, 385.3 exact."""
    mol = carbon_to_bicarbonate(40 * EQ_PER_MG_CACO3, 65 * EQ_PER_MG_CACO3, settles=True)
    pounds = mol * CO2 * POUNDS_PER_MGAL
    assert_allclose(pounds, 389.0, rtol=0.01)
    assert_allclose(pounds, 385.3, atol=0.1)
    assert_allclose(1.1 * pounds, 428.0, rtol=0.012)


def test_each_mg_as_caco3_takes_0_4397_mg():
    """Molar masses: 44.009 / 100.086; twice as much for hydroxide that does not settle out."""
    assert_allclose(carbon_to_bicarbonate(EQ_PER_MG_CACO3, 0.0, settles=False) * CO2, 0.4397, atol=5e-5)
    assert_allclose(carbon_to_bicarbonate(0.0, EQ_PER_MG_CACO3, settles=True) * CO2, 0.4397, atol=5e-5)
    assert_allclose(carbon_to_bicarbonate(0.0, EQ_PER_MG_CACO3, settles=False) * CO2, 0.8794, atol=1e-4)


def test_dose_to_a_ph_as_worked_by_hand():
    """Carbon at the pH and alkalinity, less what is there."""
    raw = alkaline()
    out = step(8.6).run(raw)
    by_hand = BareWater(25.0, 0.006)
    wanted = by_hand.dic(8.6, raw.alkalinity_eq_l) - raw.carbon_mol_l
    assert_allclose(out.doses[0].mol_l, wanted, rtol=3e-3)
    assert_allclose(out.figures["ph_after"], 8.6, atol=1e-9)
    assert_array_equal(out.stream.alkalinity_eq_l, raw.alkalinity_eq_l)
    assert_allclose(out.stream.carbon_mol_l, raw.carbon_mol_l + out.doses[0].mol_l, rtol=1e-15)


def test_rule_and_solved_dose_agree_at_bicarbonate():
    """Where all carbon is bicarbonate, (pK1 + pK2)/2, carbon equals alkalinity: what the rule counts."""
    raw = alkaline()
    constants = BareWater(25.0, 0.006)
    out = step(-0.5 * np.log10(constants.k1 * constants.k2)).run(raw)
    assert_allclose(out.figures["co2_by_rule_mg_l"], out.figures["co2_taken_up_mg_l"], rtol=5e-3)
    assert_allclose(out.stream.carbon_mol_l, raw.alkalinity_eq_l, rtol=3e-3)


def test_two_stages_settle_between_and_lose_nothing():
    """First to 10.4 with settling, then to 8.6: carbon, calcium and alkalinity are accounted for; index 0 in between."""
    raw = alkaline()
    out = step(first_ph=10.4, least_calcium_mol_l=0.0).run(raw)
    chalk, fed = out.stream.solids["CaCO3"], [d.mol_l for d in out.doses]
    assert (chalk > 1e-5).all()
    assert_allclose(out.stream.alkalinity_eq_l, raw.alkalinity_eq_l - 2.0 * chalk, rtol=1e-12)
    assert_allclose(out.stream.total("calcium"), raw.total("calcium") - chalk, rtol=1e-12)
    assert_allclose(out.stream.carbon_mol_l, raw.carbon_mol_l + fed[0] + fed[1] - chalk, rtol=1e-12)
    assert_allclose(out.figures["caco3_formed_mg_l"], 100.086e3 * chalk, rtol=1e-5)
    assert_allclose(out.figures["ph_after"], 8.6, atol=1e-9)
    constants = BareWater(25.0, 0.006)
    assert_allclose(fed[0], np.maximum(constants.dic(10.4, raw.alkalinity_eq_l) - raw.carbon_mol_l, 0.0), rtol=0.01,
                    atol=1e-7)
    between = raw.added({"carbon": 1.0}, fed[0])
    settled = between.added({"alkalinity": 2.0, "carbon": 1.0, "calcium": 1.0}, -chalk)
    assert_allclose(settled.water().saturation_index(), 0.0, atol=1e-8)
    for row in range(3):  # the rule: hydroxide to carbonate first, then what carbonate and hydroxide are left
        hydroxide = constants.c_oh * 10.0 ** constants.ph(raw.alkalinity_eq_l[row], raw.carbon_mol_l[row])
        later = BareWater(25.0, settled.ionic_strength_mol_l[row])
        ph = later.ph(settled.alkalinity_eq_l[row], settled.carbon_mol_l[row])
        carbonate = settled.carbon_mol_l[row] * later.shares(ph)[2]
        by_rule = CO2 * (0.5 * hydroxide + carbonate + later.c_oh * 10.0**ph)
        assert_allclose(out.figures["co2_by_rule_mg_l"][row], by_rule, rtol=0.01)


def test_two_stages_leave_softer_water():
    """Less calcium and less alkalinity than one stage, whose calcium stays."""
    raw = alkaline()
    one, two = step().run(raw), step(first_ph=10.4).run(raw)
    assert_array_equal(one.stream.total("calcium"), raw.total("calcium"))
    assert (two.stream.total("calcium") < raw.total("calcium")).all()
    assert_allclose(two.stream.total("calcium")[0], 35.0 / 100.086e3, rtol=1e-6)  # practical limit


def test_gas_that_is_not_absorbed_is_fed_on_top():
    """80 % absorbed: 1.25 times the gas, the same water."""
    raw = alkaline()
    all_of_it, most = step().run(raw), step(absorbed=0.8).run(raw)
    assert_allclose(most.doses[0].mol_l, 1.25 * all_of_it.doses[0].mol_l)
    assert_allclose(most.figures["ph_after"], all_of_it.figures["ph_after"], atol=1e-12)


def test_held_gas_gives_the_same_water_and_stays():
    """The doses found go on when the raw water changes."""
    raw = alkaline()
    for settings in ({}, {"first_ph": 10.4, "absorbed": 0.9}):
        out = step(**settings).run(raw)
        again = step(**settings).held(out.doses).run(raw)
        assert_allclose(again.stream.carbon_mol_l, out.stream.carbon_mol_l, rtol=1e-12)
        drifted = step(**settings).held(out.doses).run(alkaline(alkalinity=(1.7e-3, 2.5e-3, 3.1e-3)))
        assert (drifted.figures["ph_after"] > out.figures["ph_after"]).all()


def test_water_below_the_ph_gets_none_and_a_warning():
    """Carbon dioxide cannot raise a pH; the row beside it is served."""
    raw = alkaline(alkalinity=(2e-3, 2e-3), carbon=(2.2e-3, 3e-4), calcium=(5e-4, 5e-4))
    out = step(8.6).run(raw)
    assert out.doses[0].mol_l[0] == 0.0
    assert out.doses[0].mol_l[1] > 0.0
    assert out.stream.carbon_mol_l[0] == raw.carbon_mol_l[0]
    (found,) = [f for f in out.findings if f.severity == "warning"]
    assert_array_equal(found.where, [True, False])
    assert "below pH 8.6 without carbon dioxide" in found.words


def test_first_ph_away_from_least_solubility_is_questioned():
    """10.3 to 10.5 is practice."""
    assert "calcium carbonate settles best from 10 to 10.6" in words(step(first_ph=9.5).run(alkaline()), "warning")
    assert words(step(first_ph=10.4).run(alkaline()), "warning") == ""
    assert "rule of thumb gives" in words(step().run(alkaline()), "note")


def test_an_unknown_row_stays_alone():
    """nan in one row leaves the others as they are."""
    raw, part = alkaline(), alkaline(alkalinity=(1.6e-3, np.nan, 3e-3))
    out, whole = step(first_ph=10.4).run(part), step(first_ph=10.4).run(raw)
    assert_array_equal(np.isnan(out.figures["ph_after"]), [False, True, False])
    assert_allclose(out.stream.carbon_mol_l[[0, 2]], whole.stream.carbon_mol_l[[0, 2]], rtol=1e-9)


@pytest.mark.parametrize(("settings", "message"), [
    ({"carbon_dioxide": stocked("soda ash")}, r"needs carbon dioxide; found 'soda ash', which changes alkalinity"),
    ({"carbon_dioxide": stocked("monosodium phosphate")}, r"which brings no carbon. Name carbon dioxide"),
    ({"absorbed": 0.0}, r"absorbed share of step 'recarb' must be above 0 and at most 1; found 0"),
    ({"to_ph": 5.0}, r"pH that step 'recarb' leaves must be 6 to 12; found 5"),
    ({"first_ph": 8.0}, r"first pH of step 'recarb' must lie above the last, 8.6, and at most at 12; found 8"),
    ({"fixed_mol_l": (1e-3, 1e-3)}, r"must have 1 value\(s\), one per stage; found 2"),
    ({"calcite_ratio": 0.0}, r"settles to must be 1 \(equilibrium\) to 1000; found 0"),
])
def test_settings_that_cannot_be(settings, message):
    """Each says the rule, what was found and what to do."""
    settings = {"name": "recarb", "carbon_dioxide": stocked("carbon dioxide"), "to_ph": 8.6} | settings
    with pytest.raises(InputError, match=message):
        Recarbonate(**settings)

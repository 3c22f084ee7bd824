"""Dose-response: caustic in carbonate water by hand, round numbers, the price of 0.1 pH, weak buffering."""

import numpy as np
import pytest
from made_streams import soft, stocked, target
from numpy.testing import assert_allclose, assert_array_equal
from scipy.optimize import brentq
from works import CAUSTIC, CO2, LIME, adjusted, bare, by_hand, caustic_by_hand, dosing, ph, ph_by_hand

from aquabuf.assess.plant.curve import dose_curve, round_doses
from aquabuf.assess.plant.steps.coagulate import Coagulate
from aquabuf.assess.plant.train import run_train
from aquabuf.errors import InputError

ALKALINITY, RAW_PH, WANTED_PH = 4e-4, 6.5, 8.3
NAOH_MG = 39.997e3  # per mole; IUPAC masses


@pytest.fixture(scope="module")
def curve():
    """Caustic to pH 8.3, and the carbon of the water."""
    raw, dic = bare(ALKALINITY, RAW_PH)
    run = adjusted(raw, ph(WANTED_PH))
    return dose_curve(run.passed[0], CAUSTIC.name), float(dic[0])


def test_ph_alkalinity_and_buffering_along_the_dose(curve):
    """Every row is the water of the balance written by hand."""
    found, dic = curve
    x = found.table["dose_mg_l_pure"].to_numpy() / NAOH_MG
    expected = [ph_by_hand(ALKALINITY, dic, v) for v in x]
    assert_allclose(found.table["ph"], expected, rtol=0, atol=2e-3)
    assert_allclose(found.table["alkalinity_mg_l_caco3"], 50043.0 * (ALKALINITY + x), rtol=2e-5)
    assert_allclose(found.table["buffer_intensity_meq_l_ph"],
                    [1e3 * by_hand(v).buffer(p, dic) for v, p in zip(x, expected, strict=True)], rtol=5e-3)
    assert_allclose(found.table["dose_mg_l_product"] * CAUSTIC.strength, found.table["dose_mg_l_pure"], rtol=1e-12)


def test_wanted_dose_and_price_of_a_tenth(curve):
    """The dose errors are differences of doses solved by hand, not slopes."""
    found, dic = curve
    low, wanted, high = (caustic_by_hand(ALKALINITY, dic, WANTED_PH + d) * NAOH_MG / CAUSTIC.strength
                         for d in (-0.1, 0.0, 0.1))
    assert_allclose(found.wanted_mg_l, wanted, rtol=1e-3)
    assert_allclose([found.up_mg_l, found.down_mg_l], [high - wanted, low - wanted], rtol=3e-3)
    assert_allclose([found.up_percent, found.down_percent], 100.0 * np.array([high - wanted, low - wanted]) / wanted,
                    rtol=3e-3)
    assert abs(found.up_mg_l * found.slope_ph_per_mg_l - 0.1) > 1e-3  # the slope alone would tell another price


def test_slopes_are_those_of_the_hand_balance(curve):
    """Slope at every dose, and at none."""
    found, dic = curve
    x, h = found.table["dose_mg_l_pure"].to_numpy() / NAOH_MG, 1e-8
    expected = [(ph_by_hand(ALKALINITY, dic, v + h) - ph_by_hand(ALKALINITY, dic, v - h)) / (2 * h) for v in x]
    assert_allclose(found.table["slope_ph_per_mg_l"], np.array(expected) * CAUSTIC.strength / NAOH_MG, rtol=5e-3)
    at = found.table["is_wanted"].to_numpy()
    assert at.sum() == 1
    assert_allclose(found.slope_ph_per_mg_l, found.table["slope_ph_per_mg_l"][at].iloc[0], rtol=1e-6)


def test_weakest_buffering(curve):
    """Intensity at both ends of the range is 1.25 times the least, all by hand; the least lies near pH 8.2 to 8.3."""
    found, dic = curve

    def intensity(x):
        return by_hand(x).buffer(ph_by_hand(ALKALINITY, dic, x), dic)

    doses = np.linspace(0.0, 2.0 * found.wanted_mg_l * CAUSTIC.strength / NAOH_MG, 4001)
    least = min(doses, key=intensity)
    ends = [brentq(lambda x: intensity(x) - 1.25 * intensity(least), *pair) for pair in ((0.0, least), (least, doses[-1]))]
    assert_allclose(np.array([found.weakest_low_mg_l, found.weakest_high_mg_l]) * CAUSTIC.strength / NAOH_MG, ends, rtol=2e-3)
    assert_allclose(found.weakest_ph, ph_by_hand(ALKALINITY, dic, least), rtol=0, atol=0.05)
    assert 8.15 <= found.weakest_ph <= 8.33  # low point of carbonate at 25 °C, 8.20 to 8.28 without salts (computed twice)


@pytest.mark.parametrize("wanted", [0.083, 0.5, 1.0, 2.37, 7.77, 10.0, 14.2, 24.16, 33.3, 61.0, 99.9, 480.0])
def test_round_doses(wanted):
    """Eleven to thirteen doses from none to about twice the wanted, round but for the wanted."""
    doses = round_doses(wanted)
    assert 11 <= doses.size <= 13
    assert doses[0] == 0.0
    assert wanted in doses
    assert (np.diff(doses) > 0.0).all()
    assert 1.7 * wanted <= doses[-1] <= 2.35 * wanted
    others = doses[(doses > 0.0) & (doses != wanted)]
    assert_allclose(others, [float(f"{d:.3g}") for d in others], rtol=1e-12)


def test_largest_dose_may_be_given(curve):
    """About as far as asked for."""
    doses = round_doses(3.3, most=20.0)
    assert_allclose(np.delete(doses, np.flatnonzero(doses == 3.3)), np.arange(11) * 2.0, rtol=1e-12)


def test_an_acid_lowers_ph_and_a_partner_is_held():
    """Less CO2 raises pH; the lime stays; the water computed again is 0.1 away."""
    run = adjusted(soft(), ph(8.3), target("alkalinity", 50.0), products=(LIME, CO2))
    found = dose_curve(run.passed[0], CO2.name)
    assert found.up_mg_l < 0.0 < found.down_mg_l
    assert_allclose(found.table["alkalinity_mg_l_caco3"], 50.0, rtol=1e-8)
    lime, gas = (d.mol_l for d in run.passed[0].outcome.doses)
    for change, shift in ((found.up_mg_l, 0.1), (found.down_mg_l, -0.1)):
        again = dosing((LIME, CO2), (lime, gas + CO2.mol_l(change))).run(soft())
        assert_allclose(again.stream.water().ph, 8.3 + shift, rtol=0, atol=1e-8)


def test_no_dose_below_nothing():
    """A dose so small that leaving it out costs less than 0.1 pH has no lower price."""
    run = run_train(soft(), [dosing((CAUSTIC,), (1e-7,))])
    found = dose_curve(run.passed[0], CAUSTIC.name)
    assert np.isnan(found.down_mg_l)
    assert found.up_mg_l > 0.0
    assert any("no dose of caustic soda lowers pH by 0.1" in w for w in found.words())


def test_a_coagulant_lowers_ph_and_is_never_dosed_below_nothing():
    """The step refuses negative doses; its slope at none is told all the same."""
    iron = stocked("ferric chloride", strength=0.4)
    run = run_train(soft(), [Coagulate(name="coagulate", product=iron, dose_mol_l=6e-5)])
    found = dose_curve(run.passed[0], iron.name)
    assert (found.table["slope_ph_per_mg_l"] < 0.0).all()
    assert found.up_mg_l < 0.0 < found.down_mg_l


def test_words(curve):
    """Numbers as people read them, with the direction."""
    found = curve[0]
    words = found.words()
    assert f"{found.up_mg_l:.2g} mg/L ({found.up_percent:.2g} %) more raises pH by 0.1" in words
    assert f"{-found.down_mg_l:.2g} mg/L ({-found.down_percent:.2g} %) less lowers pH by 0.1" in words
    assert words[0].startswith(f"{found.wanted_mg_l:.3g} mg/L of caustic soda gives pH 8.30")


def test_a_row_of_many_is_as_alone():
    """The row asked for counts, no other."""
    raw, _ = bare(4e-4, np.array([6.3, 6.5, 7.0]))
    many, one = adjusted(raw, ph(8.3)), adjusted(raw.take(np.array([1])), ph(8.3))
    assert_array_equal(dose_curve(many.passed[0], CAUSTIC.name, row=1).table["ph"],
                       dose_curve(one.passed[0], CAUSTIC.name).table["ph"])


def test_what_cannot_be_drawn():
    """Each refusal says why and what to do."""
    run = adjusted(soft(), ph(8.3))
    with pytest.raises(InputError, match=r"step 'final' must dose the product of a dose-response; it doses caustic soda, not 'lime'. Name"):
        dose_curve(run.passed[0], "lime")
    with pytest.raises(InputError, match=r"doses of step 'final'; they were not found. Change"):
        dose_curve(adjusted(soft(), ph(5.0)).passed[0], CAUSTIC.name)
    none = run_train(soft(), [dosing((CAUSTIC,), (0.0,))])
    with pytest.raises(InputError, match=r"largest dose above 0; the wanted dose is 0 and the largest not given. Give most_mg_l"):
        dose_curve(none.passed[0], CAUSTIC.name)
    found = dose_curve(none.passed[0], CAUSTIC.name, most_mg_l=20.0)
    assert found.up_mg_l > 0.0
    assert np.isnan(found.up_percent)

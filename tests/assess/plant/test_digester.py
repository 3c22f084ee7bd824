"""Digesters: ratios, bicarbonate alkalinity, pH from the gas by hand, limits, alkali and the limit of lime."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf import Water
from aquabuf.assess.plant.digester import (
    acid_ratio,
    alkali_for,
    bicarbonate_alkalinity,
    digester,
    digester_words,
    gas_pco2,
    titrated_share,
)
from aquabuf.errors import InputError

MG_CACO3 = 50043.0  # mg/eq, IUPAC masses
MG_ACETIC = 60052.0  # mg/mol
VAPOR_35 = 0.05553  # atm, 5.627 kPa of the steam tables
AT = {"co2_share": 0.35, "t_c": 35.0, "ionic_strength_mol_l": 0.15}


def judged(alkalinity_mg_l, acids_mg_l=0.0, **changes):
    """A digester in the trade's units."""
    return digester(alkalinity_eq_l=np.asarray(alkalinity_mg_l) / MG_CACO3,
                    volatile_acids_eq_l=np.asarray(acids_mg_l) / MG_ACETIC, **(AT | changes))


def test_ratio_in_both_units():
    """500 mg/L acetic acid over 2000 mg/L CaCO3 is 0.25; in equivalents 8.33 over 39.97 meq/L, 0.208."""
    found = judged(2000.0, 500.0)
    assert_allclose(found.ratio, 0.25, rtol=1e-4)
    assert_allclose(found.ratio_eq, (500.0 / 60.052) / (2000.0 / 50.043), rtol=1e-4)


def test_ratio_without_alkalinity():
    """Acids without alkalinity are endless; nothing over nothing and missing values stay open."""
    assert_array_equal(acid_ratio([1e-2, 1e-2, 0.0, np.nan], [0.0, -1e-3, 0.0, 1e-2]), [np.inf, np.inf, np.nan, np.nan])


def test_bicarbonate_alkalinity_factor():
    """0.833 x 0.85 = 0.71 mg CaCO3 per mg of acetic acid: the factor of the handbooks (recalled)."""
    found = bicarbonate_alkalinity(3000.0 / MG_CACO3, 1000.0 / MG_ACETIC)
    assert_allclose(found * MG_CACO3, 3000.0 - 0.71 * 1000.0, rtol=0, atol=3.0)
    assert_allclose(bicarbonate_alkalinity(0.0, 1.0 / MG_ACETIC, 1.0) * MG_CACO3, -0.8333, rtol=1e-4)


@pytest.mark.parametrize(("end_ph", "share"), [(4.0, 0.85), (4.3, 0.74), (4.5, 0.64)])
def test_share_that_a_titration_counts(end_ph, share):
    """Henderson-Hasselbalch with pK 4.756 without ionic strength: 0.85 belongs to an end point of 4.0."""
    by_hand = 1.0 / (1.0 + 10.0 ** (4.756 - 7.0)) - 1.0 / (1.0 + 10.0 ** (4.756 - end_ph))
    assert_allclose(titrated_share(end_ph), by_hand, rtol=0, atol=1e-6)
    assert_allclose(by_hand, share, rtol=0, atol=0.006)


def test_gas_pressure():
    """Share of the dry gas: 0.35 (P - 0.0555 atm) at 35 °C."""
    assert_allclose(gas_pco2(0.35, 35.0, [1.0, 1.02]), 0.35 * (np.array([1.0, 1.02]) - VAPOR_35), rtol=1e-4)


@pytest.mark.parametrize(("alkalinity", "ph"), [(2000.0, 6.8), (3000.0, 7.0), (1000.0, 6.5)])
def test_ph_of_the_facts(alkalinity, ph):
    """35 °C, ionic strength 0.15 and 0.35 atm of CO2 give 6.8, 7.0 and about 6.5, to one decimal."""
    found = judged(alkalinity, pressure_atm=1.0 + VAPOR_35)
    assert_allclose(found.ph, ph, rtol=0, atol=0.05)


def test_ph_by_hand():
    """pH = pK1 + pKH + log(HCO3- / pCO2) + log gamma: Harned & Davis as printed (recalled) and KH of Harned & Davis."""
    found = judged(2000.0)
    t = 308.15
    pk1 = 3404.71 / t - 14.8435 + 0.032786 * t
    pkh = -(2385.73 / t - 14.0184 + 0.0152642 * t)
    a = 0.5195  # Debye-Hückel at 35 °C, between the printed 0.5092 (25) and 0.5336 (50)
    root = np.sqrt(0.15)
    log_gamma = -a * (root / (1.0 + root) - 0.3 * 0.15)
    by_hand = pk1 + pkh + np.log10(2000.0 / MG_CACO3 / (0.35 * (1.0 - VAPOR_35))) + log_gamma
    assert_allclose(found.ph, by_hand, rtol=0, atol=0.01)


@pytest.mark.parametrize(("alkalinity", "acids", "ratio", "bicarbonate"), [
    (3000.0, 200.0, "low", "usual"), (3000.0, 300.0, "usual", "usual"), (3000.0, 750.0, "usual", "usual"),
    (3000.0, 760.0, "rising", "usual"), (2000.0, 1000.0, "high", "usual"), (1000.0, 900.0, "failing", "short"),
    (1000.0, 100.0, "usual", "modest"), (6000.0, 100.0, "low", "high")])
def test_limits_of_ratio_and_bicarbonate(alkalinity, acids, ratio, bicarbonate):
    """0.1 to 0.25 usual; bicarbonate below 500, 1000, 5000 mg/L (facts: bioenergy text; Water Sci. Technol. 30(12))."""
    found = judged(alkalinity, acids)
    assert (found.ratio_band.item().name, found.bicarbonate_band.item().name) == (ratio, bicarbonate)


@pytest.mark.parametrize(("ph", "name"), [(6.1, "failing"), (6.3, "low"), (6.79, "low"), (7.0, "usual"), (7.3, "high")])
def test_limits_of_ph(ph, name):
    """Methane formers fail below 6.2; 6.8 to 7.2 is usual (Gerardi)."""
    alkalinity = Water.from_ph_pco2(ph=ph, pco2_atm=gas_pco2(0.35, 35.0), t_c=35.0,
                                    ionic_strength_mol_l=0.15).alkalinity_eq_l
    found = digester(alkalinity_eq_l=alkalinity, volatile_acids_eq_l=0.0, **AT)
    assert_allclose(found.ph, ph, rtol=0, atol=1e-9)
    assert found.ph_band.item().name == name


def test_alkali_for_a_ratio():
    """1000 mg/L of acids at 0.25 ask for 4000 mg/L of alkalinity: 2000 are lacking, 3357 mg/L of NaHCO3."""
    alkali = alkali_for(judged(2000.0, 1000.0), ratio=0.25)
    assert_allclose(alkali.added_eq_l * MG_CACO3, 2000.0, rtol=1e-4)
    assert_allclose(alkali.bicarbonate_mol_l * 84006.0, 2000.0 * 1.6787, rtol=2e-4)  # facts: 1.6787 mg per mg CaCO3
    assert_allclose(alkali.lime_mol_l * 74092.0, 2000.0 * 0.7403, rtol=2e-4)
    assert_allclose(alkali.co2_taken_mol_l, 2.0 * alkali.lime_mol_l, rtol=1e-12)


def test_alkali_for_a_ph():
    """The same gas over the sludge with the alkali in it gives the wanted pH."""
    found = judged([1000.0, 5000.0], 100.0)
    alkali = alkali_for(found, ph=6.9)
    after = digester(alkalinity_eq_l=found.alkalinity_eq_l + alkali.added_eq_l,
                     volatile_acids_eq_l=found.volatile_acids_eq_l, **AT)
    assert_allclose(after.ph[0], 6.9, rtol=0, atol=1e-9)
    assert_allclose(alkali.ph, after.ph, rtol=0, atol=1e-9)
    assert alkali.added_eq_l[1] == 0.0  # never a negative dose


def test_the_larger_of_two_targets_counts():
    """Ratio and pH together take whichever asks more."""
    found = judged(2000.0, 1000.0)
    one, other, both = (alkali_for(found, **t).added_eq_l for t in ({"ratio": 0.25}, {"ph": 6.9}, {"ratio": 0.25, "ph": 6.9}))
    assert both == max(one, other)
    assert one != other


def test_lime_ends_where_calcite_is_saturated():
    """At the limit the sludge with that lime has a calcite saturation index of zero at the gas's CO2 pressure."""
    found = judged([800.0, 800.0, 4000.0], calcium_mol_l=[2e-4, np.nan, 2e-2])
    limit = alkali_for(found, ph=7.0).lime_limit_mol_l
    limed = Water.from_alkalinity_pco2(
        alkalinity_eq_l=found.bicarbonate_eq_l[0] + 2.0 * limit[0], calcium_mol_l=2e-4 + limit[0],
        pco2_atm=found.pco2_atm, t_c=35.0, ionic_strength_mol_l=0.15)
    assert limit[0] > 0.0
    assert_allclose(limed.saturation_index(), 0.0, rtol=0, atol=1e-6)
    assert_array_equal(limit[1:], [np.nan, 0.0])


def test_words():
    """Units of the ratio, bicarbonate first, what lime takes; nothing lacking and missing readings say so."""
    found = judged([1000.0, 3000.0, np.nan], [600.0, 300.0, 300.0], calcium_mol_l=1e-3)
    alkali = alkali_for(found, ratio=0.25)
    said = digester_words(found, alkali)
    assert said.startswith("Volatile acids over alkalinity 0.60 mg acetic acid per mg CaCO3 (0.50 in equivalents), high:")
    assert "2350 mg/L of sodium bicarbonate, the first choice" in said  # 1400 x 1.6787
    assert "Hydrated lime would be 1036 mg/L and take 28 mmol/L of carbon dioxide" in said  # 1400 x 0.7403; 1400 / 50.043
    assert digester_words(found, alkali, 1).endswith("No alkali is lacking.")
    assert "not known" in digester_words(found, alkali, 2)
    assert np.isnan(alkali.added_eq_l[2])


@pytest.mark.parametrize("share", [-0.1, 35.0])
def test_share_message(share):
    """A share in percent."""
    with pytest.raises(InputError, match=rf"co2_share must be between 0 and 1; found {share:g}"):
        judged(2000.0, co2_share=share)


def test_target_messages():
    """No target, or a ratio that no alkali reaches."""
    with pytest.raises(InputError, match="a target is needed"):
        alkali_for(judged(2000.0))
    with pytest.raises(InputError, match="ratio must be above zero; found 0"):
        alkali_for(judged(2000.0), ratio=0.0)

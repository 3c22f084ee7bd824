"""From one definition of alkalinity to another: conventions by hand, and nothing converted unless it is named."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from numpy.testing import assert_allclose
from titrations import acid_steps, dilute, hard, results, row, sample

from aquabuf.assess.titration.convert import henriksen_1982
from aquabuf.assess.titration.options import CONVERSIONS, TitrationOptions
from aquabuf.errors import InputError

# (A - 31.6) + 0.646 sqrt(A - 31.6), worked out by hand, µeq/L
HENRIKSEN = [(31.6, 0.0), (32.0, 0.8086), (32.6, 1.646), (47.6, 18.584), (81.6, 54.5679), (131.6, 106.46), (531.6, 514.4450)]


@pytest.mark.parametrize(("titrated", "expected"), HENRIKSEN)
def test_scandinavian_convention(titrated, expected):
    """Whole squares past 31.6 and others."""
    assert_allclose(henriksen_1982(titrated), expected, rtol=0, atol=1e-3)


def test_scandinavian_convention_ends_at_its_free_acid():
    """Below 31.6 there is no root to take."""
    assert np.isnan(henriksen_1982([31.5, 0.0, -50.0, np.nan])).all()


def test_scandinavian_convention_of_a_curve():
    """The acid to pH 4.5 by hand, converted by hand: 100 µeq/L at 25 °C."""
    one = dilute()
    water = BareWater(25.0, 2.2e-4)
    end = 100.0 - water.alkalinity(4.5, 1.3e-4) * 1e6  # dilution: 0.6 mL in 100
    end += 10.0**-4.5 / (water.rho / water.c_h) * 1e6 * 0.0066
    expected = end - 31.6 + 0.646 * np.sqrt(end - 31.6)
    r = row(one, conversion="henriksen_1982")
    assert_allclose(r["converted_ueq_l"], expected, rtol=0, atol=0.6)
    assert r["converted_to"] == "henriksen_1982"


@pytest.mark.parametrize("t_c", [10.0, 25.0])
@pytest.mark.parametrize(("ueq", "low", "high"),
                         [(30.0, 3.0, 9.5), (100.0, 3.0, 9.5), (500.0, 3.0, 9.5), (1000.0, 3.0, 9.5), (4000.0, -30.0, 0.0)])
def test_scandinavian_convention_against_the_proton_balance(ueq, low, high, t_c):
    """What the page says of it: 3 to 9 µeq/L above up to 1 meq/L, below beyond about 2; closed water without dilution."""
    water = BareWater(t_c, 1.2e-6 * ueq + 1e-4)
    acid = ueq - water.alkalinity(4.5, 1.1e-6 * ueq + 1e-5) * 1e6
    assert low < henriksen_1982(acid) - ueq < high


@pytest.mark.parametrize("t_c", [10.0, 25.0])
@pytest.mark.parametrize("alkalinity", [5e-5, 1e-4, 2e-3])
def test_proton_balance_at_the_end_point(t_c, alkalinity):
    """Free acid and bicarbonate left at pH 4.5 are taken out: the true alkalinity of a curve made by hand comes back.

    The end point alone reads more: free acid, 31.6 over its activity coefficient, less the carbon that is bicarbonate still.
    """
    strength = 0.02 if alkalinity < 1e-3 else 0.05
    one = sample(acid_steps(6e-4, alkalinity=alkalinity, strength=strength, count=80), alkalinity=alkalinity, carbon=1.1 * alkalinity + 2e-5,
                 strength=strength, t_c=t_c)
    r = row(one, conversion="proton_balance")
    assert_allclose(r["converted_ueq_l"], alkalinity * 1e6, rtol=1e-3, atol=0.15)
    water = BareWater(t_c, 1.2 * alkalinity + 1e-4)  # of the sample; the titrant thins it by a few percent
    carbon = (1.1 * alkalinity + 2e-5) * 1e6
    assert_allclose(r["fixed_4_5_ueq_l"] - r["converted_ueq_l"], 31.6 * water.c_h / water.rho - water.shares(4.5)[1] * carbon, rtol=0, atol=2.0)


def charged(ph):
    """Share of organic acid sites that carry charge: published relation pK = 0.96 + 0.90 pH - 0.039 pH^2."""
    return 1.0 / (1.0 + 10.0 ** (0.96 + 0.90 * ph - 0.039 * ph**2 - ph))


def test_charge_balance_adds_the_organic_anion():
    """Result plus the anion at the lowest pH of the Gran line: 10 mg/L of organic carbon have 100 µeq/L of sites."""
    assert_allclose(charged(4.5), 0.6557, rtol=0, atol=5e-5)  # printed: 6.557 µeq per mg
    r = row(dilute(doc_mg_l=10.0), conversion="charge_balance")
    assert_allclose(r["converted_ueq_l"], r["recommended_ueq_l"] + 100.0 * charged(r["gran_ph_last"]), rtol=0, atol=1e-6)


def test_charge_balance_needs_organic_carbon():
    """Without it nothing can be told."""
    assert np.isnan(row(dilute(), conversion="charge_balance")["converted_ueq_l"])


def test_nothing_is_converted_unless_it_is_named():
    """No value and no name; and the result itself is the same with and without a conversion."""
    plain = row(dilute(doc_mg_l=4.0))
    assert np.isnan(plain["converted_ueq_l"])
    assert plain["converted_to"] == ""
    for name in CONVERSIONS[1:]:
        r = row(dilute(doc_mg_l=4.0), conversion=name)
        assert r["converted_to"] == name
        assert r["recommended_ueq_l"] == plain["recommended_ueq_l"]
        assert r["recommended_ueq_l"] != r["converted_ueq_l"]


def test_by_mass_the_convention_of_liters_is_not_applied():
    """Its 31.6 is per liter."""
    by_mass = hard() | {"sample_volume_ml": np.nan, "sample_mass_g": 100.0}
    r = results(hard(), by_mass, conversion="henriksen_1982")
    assert np.isfinite(r["converted_ueq_l"].iloc[0])
    assert r[["converted_ueq_l", "converted_umol_kg"]].iloc[1].isna().all()


def test_an_unknown_conversion():
    """The message names those there are."""
    with pytest.raises(InputError, match=r"a conversion must be one of none, proton_balance, henriksen_1982, charge_balance; found 'best'. Leave it out"):
        TitrationOptions(conversion="best")

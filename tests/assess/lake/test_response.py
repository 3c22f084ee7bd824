"""Curves of pH against ANC at equilibrium with air: closed forms, the charge of organic anions, high ANC, a survey's medians."""

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.response import BROWN_QUANTILE, CO2_TIMES, response_curves, survey_response
from aquabuf.chem.organic import organic_models
from aquabuf.errors import InputError

HRUSKA = organic_models()["hruska_b"]
VAPOR_25 = 0.0313  # atm over water of 25 °C (steam tables, recalled)


def ppm(pco2_atm):
    """CO2 of dry air that gives a pressure over water of 25 °C."""
    return 1e6 * pco2_atm / (1.0 - VAPOR_25)


AIR = ppm(420e-6)


def curves(t_c=25.0, strength=1e-3, air=AIR, doc=8.0, model=HRUSKA):
    """Curves at 25 °C unless said."""
    return response_curves(t_c, strength, air, doc, model)


def ph_at(anc, ph, at_ueq_l):
    """pH of a curve at an ANC."""
    known = np.isfinite(anc)
    return np.interp(1e-6 * at_ueq_l, anc[known], ph[known])


def test_pure_water_under_air():
    """No ANC at 420 µatm and 25 °C: pH 5.60, the equivalence point of an open titration (computed with pK1 6.35)."""
    found = curves(strength=0.0)
    assert_allclose(ph_at(found.clear_eq_l[0], found.ph, 0.0), 5.60, rtol=0, atol=0.006)


@pytest.mark.parametrize("strength", [1e-3, 5e-3])
def test_clear_water_by_hand(strength):
    """Plummer & Busenberg 1982 and Marshall & Franck 1981 at 25 °C as printed, Davies with A 0.509 (textbook, recalled)."""
    found = curves(strength=strength)
    h, root = 10.0**-found.ph, np.sqrt(strength)
    gamma = 10.0 ** (-0.509 * (root / (1.0 + root) - 0.3 * strength))
    for times, anc in zip(CO2_TIMES, found.clear_eq_l, strict=True):
        co2 = times * 420e-6 * 10.0**-1.468
        bicarbonate = co2 * 10.0**-6.352 / h / gamma
        carbonate = co2 * 10.0 ** -(6.352 + 10.329) / h**2 / gamma**4
        by_hand = bicarbonate + 2.0 * carbonate + 10.0**-13.995 / h / gamma - h / gamma
        here = np.abs(by_hand) < strength  # beyond, the ions of the ANC itself count
        assert here.sum() > 100
        assert_allclose(anc[here], by_hand[here], rtol=0.006, atol=2e-8)


def test_four_times_the_co2_is_log_four_lower():
    """Bicarbonate water, no carbonate worth counting: pH falls by 0.602."""
    found = curves(t_c=10.0)
    assert CO2_TIMES == (1.0, 4.0)
    air, rich = (ph_at(anc, found.ph, 300.0) for anc in found.clear_eq_l)
    assert_allclose(air - rich, np.log10(4.0), rtol=0, atol=0.01)


def test_brown_water_has_the_organic_anions_beside():
    """Brown less clear at one pH, per mg: charge of organic anions (facts computed from pK 3.04, 4.42, 6.70 and 10.2 µeq/mg)."""
    found = curves(doc=8.0)
    charge = (found.brown_eq_l + found.left_out_eq_l - found.clear_eq_l) / 8.0 * 1e6
    for ph, expected in ((4.5, 5.192), (5.0, 6.142), (5.5, 6.739), (6.0, 7.280), (6.5, 8.091), (7.0, 9.060)):
        assert_allclose(charge[:, np.argmin(np.abs(found.ph - ph))], expected, rtol=0, atol=0.001)


def test_gran_leaves_out_the_tangent_of_the_anions():
    """What the titration does not see: tangent in h at pH 4.5 of the triprotic charge, drawn here by two points."""
    def charge(h):
        one, two, three = 10.0**-3.04 / h, 10.0**-7.46 / h**2, 10.0**-14.16 / h**3
        return 10.2e-6 / 3.0 * (one + 2 * two + 3 * three) / (1 + one + two + three)

    h, step = 10.0**-4.5, 1e-9
    tangent = charge(h) - h * (charge(h + step) - charge(h - step)) / (2.0 * step)
    assert_allclose(curves(doc=8.0).left_out_eq_l, 8.0 * tangent, rtol=1e-4)
    assert curves(doc=0.0).left_out_eq_l == 0.0


def test_without_organic_carbon_both_waters_are_one():
    """DOC of zero is clear water; DOC that is not known is no curve."""
    same = curves(doc=0.0)
    assert_array_equal(same.brown_eq_l, same.clear_eq_l)
    unknown = curves(doc=np.nan)
    assert np.isnan(unknown.brown_eq_l).all()
    assert_array_equal(unknown.clear_eq_l, same.clear_eq_l)


def test_high_anc_brings_its_own_ions():
    """Where ANC is above the ionic strength given, the curve is that of water with as much: found again with it given."""
    found = curves()
    for k in np.flatnonzero(found.clear_eq_l[0] > 2e-3)[::8]:
        anc = found.clear_eq_l[0][k]
        assert_allclose(curves(strength=float(anc)).clear_eq_l[0][k], anc, rtol=1e-5)


def test_curves_rise_and_end_where_activities_are_not_known():
    """ANC rises with pH throughout; beyond 0.1 eq/L (Davies equation) there is none."""
    found = curves()
    for anc in (*found.clear_eq_l, *found.brown_eq_l):
        known = np.isfinite(anc)
        assert (np.diff(anc[known]) > 0.0).all()
        assert 0.09 < anc[known][-1] <= 0.1001
        assert not known[np.flatnonzero(~known)[0]:].any()
    assert (np.diff(found.ph) > 0.0).all()


@pytest.mark.parametrize(("changed", "words"), [
    ({"t_c": 99.0}, "the temperature of a response curve must be from -2 to 60 °C; found 99"),
    ({"t_c": np.nan}, "temperature of a response curve must be .* found nan"),
    ({"strength": 0.4}, "the ionic strength of a response curve must be from 0 to 0.1 mol/L; found 0.4"),
    ({"air": 0.0}, "the air CO2 of a response curve must be from 1 to .* ppm; found 0"),
    ({"doc": -1.0}, "the organic carbon of a response curve must be from 0 to inf mg/L; found -1. Take the survey's median"),
])  # fmt: skip
def test_what_no_lake_has_is_refused(changed, words):
    """Subject, rule, value, remedy."""
    with pytest.raises(InputError, match=words):
        curves(**changed)


def survey(**columns):
    """The columns of results that tell of a survey's waters."""
    return pd.DataFrame({"temperature_c": [4.0, 12.0, np.nan, 20.0], "conductivity_us_cm": [10.0, 40.0, 60.0, np.nan],
                         "doc_mg_l": [0.0, 10.0, np.nan, np.nan]} | columns)


def test_a_survey_gives_its_medians():
    """Median temperature and conductivity (1.6e-5 mol/L per µS/cm: Russell), the high end of its organic carbon."""
    found = survey_response(survey(), 400.0, HRUSKA)
    assert BROWN_QUANTILE == 0.9
    assert_allclose((found.temperature_c, found.ionic_strength_mol_l, found.doc_mg_l, found.air_co2_ppm),
                    (12.0, 1.6e-5 * 40.0, 9.0, 400.0), rtol=1e-12)
    assert_array_equal(found.clear_eq_l, response_curves(12.0, 1.6e-5 * 40.0, 400.0, 9.0, HRUSKA).clear_eq_l)


def test_a_survey_without_some_of_them():
    """No conductivity: next to no ions; salt lakes: as many as the equation takes; no DOC: no brown water; no temperature: none."""
    nothing = [np.nan] * 4
    bare = survey_response(survey(conductivity_us_cm=nothing, doc_mg_l=nothing), 400.0, HRUSKA)
    assert 0.0 < bare.ionic_strength_mol_l < 1e-4
    assert np.isnan(bare.brown_eq_l).all()
    assert survey_response(survey(conductivity_us_cm=[5e4] * 4), 400.0, HRUSKA).ionic_strength_mol_l == 0.1
    assert survey_response(survey(temperature_c=nothing), 400.0, HRUSKA) is None

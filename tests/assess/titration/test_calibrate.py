"""From electrode potentials to pH: by standards, or by the acid end of the titration itself."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from titrations import assessed, dilute, hard, row, sample

from aquabuf.assess.titration.calibrate import by_standards, nernst_mv_per_ph

NERNST = {0.0: 54.20, 20.0: 58.17, 25.0: 59.16}  # mV per pH, as printed in handbooks
T = np.array([25.0])


def standards(*pairs):
    """Columns of up to three standards: pH and mV."""
    return {f"standard_{k}_{what}": np.array([value]) for k, pair in enumerate(pairs, start=1)
            for what, value in zip(("ph", "mv"), pair, strict=True)}


def millivolts(one, *, zero=410.0, slope=59.16):
    """The titration as an electrode with this zero and slope shows it, in place of pH."""
    rest = {name: value for name, value in one.items() if name != "ph"}
    return rest | {"potential_mv": zero - slope * one["ph"]}


@pytest.mark.parametrize("t_c", NERNST)
def test_slope_of_theory(t_c):
    """ln10 R T / F to the printed digits."""
    assert_allclose(nernst_mv_per_ph(t_c), NERNST[t_c], rtol=0, atol=0.005)


def test_one_standard_keeps_the_slope_of_theory():
    """pH 7.00 at -3.0 mV: zero at 7 times 59.16 less 3; pH 4 then reads 174.5 mV."""
    found = by_standards(standards((7.0, -3.0)), T)
    assert found.standards.tolist() == [1]
    assert_allclose(found.zero_mv, 7.0 * 59.16 - 3.0, rtol=0, atol=0.04)
    assert_allclose(found.ph(np.array([[-3.0, 174.48]])), [[7.0, 4.0]], rtol=0, atol=1e-3)


def test_two_standards_give_zero_and_slope():
    """pH 7 at 0 mV and pH 4 at 171 mV: 57 mV per pH, zero 399 mV, 96.3 % of theory."""
    found = by_standards(standards((7.0, 0.0), (4.0, 171.0)), T)
    assert_allclose([found.slope_mv[0], found.zero_mv[0], found.efficiency[0]], [57.0, 399.0, 57.0 / 59.16], rtol=1e-4)


def test_three_standards_give_the_least_squares_line():
    """pH 4, 7, 10 at 172, 0, -169 mV, by hand: slope 341/6, mean of potentials 1 mV at mean pH 7."""
    found = by_standards(standards((4.0, 172.0), (7.0, 0.0), (10.0, -169.0)), T)
    assert found.standards.tolist() == [3]
    assert_allclose([found.slope_mv[0], found.zero_mv[0]], [341.0 / 6.0, 1.0 + 7.0 * 341.0 / 6.0], rtol=1e-12)


def test_gaps_among_standards_and_none_at_all():
    """The first and third standard count as two; a sample without any has no zero yet."""
    given = standards((7.0, 0.0), (5.0, 1e9), (4.0, 171.0))
    given["standard_2_ph"] = np.array([np.nan])
    assert_allclose(by_standards(given, T).slope_mv, 57.0)
    none = by_standards({}, T)
    assert (none.standards.tolist(), np.isnan(none.zero_mv).all()) == ([0], True)
    assert_allclose(none.slope_mv, 59.16, rtol=1e-4)


def test_two_readings_of_one_standard_are_one():
    """Twice pH 7 at 1 and -1 mV: slope of theory through their mean."""
    found = by_standards(standards((7.0, 1.0), (7.0, -1.0)), T)
    assert_allclose([found.slope_mv[0], found.zero_mv[0]], [59.16, 7.0 * 59.16], rtol=1e-4)


def test_each_titration_has_its_own_standards():
    """Two electrodes side by side, and one without standards between."""
    given = {"standard_1_ph": np.array([7.0, np.nan, 7.0]), "standard_1_mv": np.array([0.0, np.nan, 10.0])}
    found = by_standards(given, np.full(3, 25.0))
    assert_allclose(found.zero_mv[2] - found.zero_mv[0], 10.0)
    assert np.isnan(found.zero_mv[1])


# ------------------------------------------------------------------ in a titration

def test_potentials_with_standards_give_the_result_of_their_ph():
    """The electrode of 96 % slope, calibrated, reads as a pH meter does."""
    given = {"standard_1_ph": 7.0, "standard_1_mv": 410.0 - 57.0 * 7.0, "standard_2_ph": 4.0, "standard_2_mv": 410.0 - 57.0 * 4.0}
    by_meter, by_mv = row(hard()), row(millivolts(hard(), slope=57.0) | given)
    assert_allclose(by_mv["first_ph"], by_meter["first_ph"], rtol=0, atol=1e-9)
    assert_allclose([by_mv["recommended_ueq_l"], by_mv["gran_slope_ratio"]], [by_meter["recommended_ueq_l"], by_meter["gran_slope_ratio"]], rtol=1e-9)


@pytest.mark.parametrize("zero", [-700.0, 0.0, 400.0, 413.7, 900.0])
@pytest.mark.parametrize("make", [hard, dilute], ids=["hard", "dilute"])
def test_the_acid_end_gives_the_zero_of_any_electrode(make, zero):
    """No standards: the zero follows from the free acid past the end point, and pH comes out as it truly was."""
    one = make()
    a = assessed(millivolts(one, zero=zero))
    assert_allclose(a.solved.calibration.zero_mv, zero, rtol=0, atol=1.0)
    assert_allclose(a.results["first_ph"], one["ph"][0], rtol=0, atol=0.02)
    assert_allclose(a.results["recommended_ueq_l"], row(one)["recommended_ueq_l"], rtol=0.002)


def test_zero_by_the_acid_end_does_not_depend_on_where_the_search_begins():
    """Four electrodes far apart: each zero is found just as well, to a thousandth of a millivolt."""
    off = [assessed(millivolts(hard(), zero=zero)).solved.calibration.zero_mv[0] - zero for zero in (-700.0, 0.0, 413.7, 900.0)]
    assert np.ptp(off) < 1e-3


def test_zero_by_the_acid_end_says_nothing_of_the_strength():
    """A strength stated ten times too high moves the zero by 59 mV: no doubt is raised, as the text says."""
    a = assessed(millivolts(hard(titrant_strength_eq_l=0.5)))
    assert a.results["recommended_method"].iloc[0] != ""
    assert not set(a.findings["finding"]) & {"strength doubtful", "Gran slope", "electrode offset"}
    assert any(words.startswith("no standards: the zero potential comes from the acid end") for words in a.assumed)
    with_standards = millivolts(hard(titrant_strength_eq_l=0.5)) | {"standard_1_ph": 7.0, "standard_1_mv": 410.0 - 59.16 * 7.0}
    assert "strength doubtful" in set(assessed(with_standards).findings["finding"])


NO_PH = ("no pH can be made of the potentials: give standards, and see whether two of them are exchanged or the sign of the "
         "meter is turned")


def test_exchanged_standards_are_told():
    """pH 7 at 171 mV and pH 4 at 0: no glass electrode. No result, a reason, and a finding with the slope: 57 over 59.16 turned."""
    exchanged = standards((7.0, 171.0), (4.0, 0.0))
    found = by_standards(exchanged, T)
    assert np.isnan([found.slope_mv[0], found.zero_mv[0]]).all()
    a = assessed(millivolts(hard()) | {name: value[0] for name, value in exchanged.items()})
    r = a.results.iloc[0]
    assert (r["status"], r["recommended_reason"]) == ("no result", NO_PH)
    assert np.isnan(r["recommended_ueq_l"])
    assert_allclose(a.findings.set_index("finding").loc["electrode slope", "value"], -100.0 * 57.0 / 59.16, rtol=1e-4)


@pytest.mark.parametrize("base", [False, True])
def test_potentials_of_turned_sign(base):
    """They fall as acid is added, and there are no standards: no pH that could be made of them gives a result."""
    one = sample(np.linspace(0.0, 1.6, 17), alkalinity=1e-3, carbon=1.5e-3, strength=-0.05) if base else hard()
    r = row(millivolts(one, zero=-410.0, slope=-59.16))
    assert (r["status"], r["recommended_method"], r["recommended_reason"]) == ("no result", "", NO_PH)

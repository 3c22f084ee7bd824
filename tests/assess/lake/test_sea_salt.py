"""Sea salt taken off by chloride and by sodium: ratios, closed forms, what is negative, rows and messages."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from published_rows import MARKS, read_rows

from aquabuf.assess.lake.sea_salt import NO_TRACER, TRACERS, negative_words, non_marine, sulfate_of_sea_salt
from aquabuf.errors import InputError
from aquabuf.tables import read_table

RATIOS = [row for row in read_rows("critical_loads") if row["subject"] == "sea salt"]
# Sea water in mg/L, and gram per equivalent of each ion (IUPAC molar masses)
SEA_MG_L = {"sodium": 10800.0, "chloride": 19374.0, "magnesium": 1290.0, "calcium": 400.0, "sulfate": 2700.0}
GRAM_PER_EQ = {"sodium": 22.990, "chloride": 35.45, "magnesium": 24.305 / 2, "calcium": 40.078 / 2, "sulfate": 96.06 / 2}
SEA = {ion: np.array([mg * 1e-3 / GRAM_PER_EQ[ion]]) for ion, mg in SEA_MG_L.items()}


@pytest.mark.parametrize("row", RATIOS, ids=lambda r: f"{r['quantity']} per {r['choice']}")
def test_ratio_matches_its_source(row):
    """Each ratio is the printed or the worked out one."""
    assert_allclose(TRACERS[row["choice"]]()[row["quantity"]], float(row["expected"]), rtol=0, atol=float(row["atol"]))


def test_every_shipped_ratio_has_a_published_row_with_mark_and_source():
    """A ratio that nobody checked cannot be shipped, and none is checked that is gone."""
    shipped = {(row["tracer"], row["ion"]) for row in read_table("sea_salt_ratios")}
    assert shipped == {(row["choice"], row["quantity"]) for row in RATIOS}
    assert all(row["mark"] in MARKS and len(row["source"]) > 10 for row in [*RATIOS, *read_table("sea_salt_ratios")])


@pytest.mark.parametrize("tracer", TRACERS)
@pytest.mark.parametrize("ion", SEA_MG_L)
def test_ratios_are_those_of_sea_water(tracer, ion):
    """Equivalents worked out from mg/L; ratios to chloride are printed with three decimals from another analysis."""
    if ion != tracer:
        ratio = float((SEA[ion] / SEA[tracer])[0])
        assert_allclose(TRACERS[tracer]()[ion], ratio, rtol=0, atol=6e-5 if tracer == "sodium" else 0.003)


@pytest.mark.parametrize("tracer", TRACERS)
def test_diluted_sea_salt_leaves_nothing(tracer):
    """Salt in the proportions of the table is zero after the correction and is not called negative by rounding."""
    amount = np.geomspace(1e-7, 1e-2, 50)
    salt = {ion: ratio * (amount * 3.0) / 3.0 for ion, ratio in TRACERS[tracer]().items()} | {tracer: amount}
    found = non_marine(salt, tracer)
    for ion in salt:
        assert_allclose(found.eq_l[ion], 0.0, rtol=0, atol=1e-17)
        assert not found.negative[ion].any()
    assert min(left.min() for left in found.eq_l.values()) < 0.0  # rounding did go below


def test_sea_salt_added_to_a_lake_is_taken_off_again():
    """What was there before comes back, for every ion, by hand: chloride is wholly marine."""
    lake = {"calcium": np.array([50e-6]), "sulfate": np.array([100e-6]), "nitrate": np.array([5e-6]),
            "chloride": np.array([0.0])}
    salted = {**lake, "calcium": lake["calcium"] + 0.037 * 80e-6, "sulfate": lake["sulfate"] + 0.103 * 80e-6,
              "chloride": np.array([80e-6])}
    found = non_marine(salted, "chloride").eq_l
    for ion, before in lake.items():
        assert_allclose(found[ion], before, rtol=1e-12)


def test_a_negative_result_stays_and_is_told():
    """Road salt: 10 - 0.196 x 100 = -9.6 of magnesium stays -9.6, and only that row is marked."""
    lake = {"magnesium": np.array([10e-6, 30e-6, np.nan]), "chloride": np.array([100e-6, 100e-6, 100e-6])}
    found = non_marine(lake, "chloride")
    assert_allclose(found.eq_l["magnesium"], [-9.6e-6, 10.4e-6, np.nan], rtol=1e-12)
    assert_array_equal(found.negative["magnesium"], [True, False, False])


def test_sodium_as_tracer_leaves_chloride_of_another_source():
    """Sodium 100 brings chloride 116.34: of 200 there is 83.66 left, of 100 there is -16.34; no sodium is left."""
    lake = {"sodium": np.array([100e-6, 100e-6]), "chloride": np.array([200e-6, 100e-6])}
    found = non_marine(lake, "sodium")
    assert_allclose(found.eq_l["chloride"], [83.66e-6, -16.34e-6], rtol=1e-9)
    assert_array_equal(found.eq_l["sodium"], [0.0, 0.0])
    assert_array_equal(found.negative["chloride"], [False, True])


def test_without_tracer_nothing_is_changed():
    """Sea salt left in."""
    lake = {"sodium": np.array([1e-6]), "chloride": np.array([2e-3])}
    found = non_marine(lake, NO_TRACER)
    assert_array_equal(found.eq_l["sodium"], lake["sodium"])
    assert (found.negative, sulfate_of_sea_salt(np.array([1.0]), NO_TRACER)[0]) == ({}, 0.0)


def test_draws_broadcast_and_rows_do_not_see_each_other():
    """(lakes, 1) with (lakes, draws); a missing reading leaves the other lake alone."""
    chloride = np.array([[10e-6], [np.nan]])
    calcium = np.array([[1e-6, 2e-6, 3e-6], [4e-6, 5e-6, 6e-6]])
    found = non_marine({"calcium": calcium, "chloride": chloride}).eq_l["calcium"]
    assert_allclose(found, [[0.63e-6, 1.63e-6, 2.63e-6], [np.nan] * 3], rtol=1e-12)


def test_negative_ions_in_words():
    """One text per lake, in the order of the ions."""
    lake = {"magnesium": np.array([[1e-6], [90e-6], [np.nan]]), "sulfate": np.array([[1e-6], [1e-6], [1e-6]]),
            "chloride": np.array([[100e-6], [100e-6], [1e-6]])}
    assert_array_equal(negative_words(non_marine(lake)), ["magnesium; sulfate", "sulfate", ""])


def test_sulfate_of_a_chloride_deposition():
    """10.3 % of the equivalents of chloride, 11.97 % of sodium."""
    assert_allclose([sulfate_of_sea_salt(np.array([0.02]))[0], sulfate_of_sea_salt(np.array([0.02]), "sodium")[0]],
                    [0.00206, 0.002394], rtol=1e-12)


def test_unknown_tracer_is_refused():
    """The message lists the tracers."""
    with pytest.raises(InputError, match=r"must be one of chloride, sodium, none; found 'bromide'. Correct it"):
        non_marine({"chloride": np.array([1e-6])}, "bromide")


def test_missing_tracer_is_refused():
    """The message names what is there."""
    with pytest.raises(InputError, match=r"by sodium needs the charge of sodium; found calcium, chloride. Add it"):
        non_marine({"calcium": np.array([1e-6]), "chloride": np.array([1e-6])}, "sodium")

"""Sensitivity classes: every published boundary, chance of each class, words, and where schemes disagree."""

import math
import os
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal
from published_rows import read_rows
from scipy.stats import norm

from aquabuf.assess.lake.classes import (
    NO_CLASS,
    SECOND_SHARE,
    basis_words,
    between_classes,
    class_names,
    class_probabilities,
    classify,
    definition_used,
    disagreements,
    normal_probabilities,
    second_class,
    values_used,
)
from aquabuf.assess.lake.schemes import shipped_schemes
from aquabuf.errors import InputRangeError

SHIPPED = shipped_schemes()
BANDS, SWEDEN, NORWAY = (SHIPPED[n] for n in ("survey_bands", "sweden_alkalinity", "norway_20"))
EVERY_SCHEME = pytest.mark.parametrize("scheme", SHIPPED.values(), ids=lambda s: s.name)
HOUSE = {"µeq/L": 1e-6, "meq/L": 1e-3, "-": 1.0}
ROWS = read_rows("lake_classes")
DATA = os.environ.get("AQUABUF_OPEN_DATA", "")


# ------------------------------------------------------------------ classes of values


@pytest.mark.parametrize("row", ROWS, ids=lambda r: f"{r['scheme']} {r['value']}")
def test_published_boundaries(row):
    """Just below, at and just above each published limit; rounding of a sum does not move a value off its limit."""
    scheme, value = SHIPPED[row["scheme"]], float(row["value"]) * HOUSE[row["unit"]]
    for x in (value, value * (1 + 1e-12), value * (1 - 1e-12)):
        assert scheme.classes[int(classify(scheme, x))].name == row["expected"]


@EVERY_SCHEME
def test_every_boundary_has_published_rows(scheme):
    """A limit that nobody checked cannot be shipped: three rows for each."""
    found = {(float(r["limit"]) * HOUSE[r["unit"]], r["side"]) for r in ROWS if r["scheme"] == scheme.name}
    assert len(found) == 3 * (len(scheme.classes) - 1)
    for inner in scheme.classes[:-1]:
        near = {side for limit, side in found if math.isclose(limit, inner.upper, rel_tol=1e-9, abs_tol=1e-15)}
        assert near == {"below", "at", "above"}


def test_swedish_alkalinity_classes():
    """0.02, 0.05, 0.10, 0.20 meq/L are classes 5, 4, 3, 2. Source: Swedish EPA, Lakes and Watercourses, Table 15."""
    names = class_names(SWEDEN, classify(SWEDEN, np.array([0.02, 0.05, 0.10, 0.20]) * 1e-3))
    assert [name.split(",")[0] for name in names] == ["class 5", "class 4", "class 3", "class 2"]


@EVERY_SCHEME
@given(data=st.data())
def test_classes_part_the_line(scheme, data):
    """Every value has exactly one class, the one whose limits hold it; limits compared one by one here."""
    uppers = [c.upper for c in scheme.classes[:-1]]
    span = 12.0 if scheme.quantity == "ph" else 3e-4
    value = data.draw(st.floats(-span, span) | st.sampled_from([*uppers, -math.inf, math.inf]))
    if any(0 < abs(value - u) <= 2e-9 * max(abs(u), 2e-9) for u in uppers):  # rounding decides there
        value += 1e-6 * span
    holds = []
    lower_open, lower = False, -math.inf
    for c in scheme.classes:
        above = value > lower if lower_open else value >= lower
        below = True if c.upper == math.inf else value <= c.upper if c.upper_belongs else value < c.upper
        holds.append(above and below)
        lower_open, lower = c.upper_belongs, c.upper
    assert sum(holds) == 1
    assert int(classify(scheme, value)) == holds.index(True)


@EVERY_SCHEME
def test_more_is_never_worse(scheme):
    """The class rises with the value from the worst to the best and passes through all."""
    x = np.linspace(-1e-4, 3e-4, 4001) if scheme.quantity != "ph" else np.linspace(3, 11, 4001)
    index = classify(scheme, x)
    assert np.all(np.diff(index) >= 0)
    assert sorted(set(index)) == list(range(len(scheme.classes)))


@pytest.mark.parametrize("shape", [(), (5,), (5, 1), (2, 5), (0,)])
def test_shape_and_missing_values(shape):
    """Index of each value in the shape of the values; a missing one has no class and its neighbors keep theirs."""
    x = np.full(shape, 3e-5)
    assert classify(BANDS, x).shape == shape
    assert np.all(classify(BANDS, x) == 1)
    if x.size > 1:
        x.flat[2] = np.nan
        expected = np.where(np.arange(x.size) == 2, NO_CLASS, 1).reshape(shape)
        assert_array_equal(classify(BANDS, x), expected)
    assert classify(BANDS, [3e-5]).dtype.kind == "i"


# ------------------------------------------------------------------ chance of each class


def shares(scheme, value, u):
    """Chance of each class of a normal error, by the distribution function of scipy and the limits one by one."""
    p = norm.cdf([c.upper for c in scheme.classes], loc=value, scale=u)
    return np.diff(p, prepend=0.0)


@EVERY_SCHEME
def test_draws_agree_with_the_normal_distribution(scheme):
    """400,000 seeded normal draws: within five standard errors of the closed form, and the parts make one."""
    ph = scheme.quantity == "ph"
    value, u = np.array([6.3, 5.5] if ph else [4e-5, 0.0]), (0.3 if ph else 3e-5)
    draws = value[:, None] + u * np.random.default_rng(7).standard_normal((2, 400_000))
    found = class_probabilities(scheme, draws)
    for row, v in zip(found, value, strict=True):
        expected = shares(scheme, v, u)
        assert np.all(np.abs(row - expected) <= 5 * np.sqrt(expected * (1 - expected) / 400_000) + 1e-12)
    assert_allclose(found.sum(axis=1), 1.0, rtol=0, atol=1e-12)
    exact = normal_probabilities(scheme, value, np.array([u, u]))
    assert_allclose(exact, [shares(scheme, v, u) for v in value], rtol=0, atol=1e-7)


@given(value=st.floats(-1e-3, 1e-3), u=st.floats(1e-9, 1e-3))
def test_normal_probabilities_are_probabilities(value, u):
    """None below zero, together one; a higher value is not more likely in the worst class, nor less in the best."""
    here, higher = normal_probabilities(BANDS, [value, value + 1e-5], [u, u])
    assert np.all(here >= -1e-15)
    assert math.isclose(here.sum(), 1.0, abs_tol=1e-12)
    assert higher[0] <= here[0] + 1e-15
    assert higher[-1] >= here[-1] - 1e-15


def test_a_few_draws_by_hand():
    """Shares are counts; each limit is on the side that its scheme says, and missing draws are not counted."""
    draws = np.array([[-1.0, 0.0, 50.0, 51.0], [200.0, 200.1, np.nan, np.nan], [np.nan] * 4, [np.inf, 10.0, 300.0, -np.inf]]) * 1e-6
    expected = [[0.5, 0.25, 0.25, 0.0], [0.0, 0.0, 0.5, 0.5], [np.nan] * 4, [0.25, 0.25, 0.0, 0.5]]
    assert_array_equal(class_probabilities(BANDS, draws), expected)
    assert class_probabilities(BANDS, np.empty((0, 7))).shape == (0, 4)


@EVERY_SCHEME
def test_shares_are_those_of_the_classes_of_the_draws(scheme):
    """The share of a class is the share of draws that `classify` puts there, limits included."""
    rng = np.random.default_rng(3)
    limits = np.array([c.upper for c in scheme.classes[:-1]])
    draws = rng.choice(np.concatenate([limits, limits * 1.1, limits * 0.9, [np.nan]]), size=(20, 50))
    index = classify(scheme, draws)
    by_hand = [[np.mean(row[row != NO_CLASS] == k) for k in range(len(scheme.classes))] for row in index]
    assert_allclose(class_probabilities(scheme, draws), by_hand, rtol=0, atol=1e-12)


def test_a_value_without_uncertainty_has_one_class():
    """The limit itself goes where the scheme says; a missing value or uncertainty gives nothing, for its row only."""
    found = normal_probabilities(BANDS, [5e-5, 5.1e-5, np.nan, 1e-5, -1e-5], [0.0, 0.0, 1e-6, np.nan, 1e-12])
    assert_array_equal(found, [[0, 1, 0, 0], [0, 0, 1, 0], [np.nan] * 4, [np.nan] * 4, [1, 0, 0, 0]])
    assert_array_equal(normal_probabilities(NORWAY, [2e-5, 1.9e-5], [0.0, 0.0]), [[0, 1], [1, 0]])
    assert normal_probabilities(BANDS, 1e-5, 1e-6).shape == (4,)
    assert normal_probabilities(BANDS, [1e-5, 2e-5], 1e-6).shape == (2, 4)


def test_negative_uncertainty():
    """It has no meaning; the message counts and marks the rows."""
    with pytest.raises(InputRangeError, match=r"uncertainty must be 0 or more; 1 of 3 are below \(first: -2e-06\). Give its size") as err:
        normal_probabilities(BANDS, [1e-5, 1e-5, 1e-5], [1e-6, -2e-6, np.nan])
    assert_array_equal(err.value.mask, [False, True, False])


# ------------------------------------------------------------------ which definition


def test_first_definition_that_a_lake_has():
    """The scheme's own where there is one, else the stand-ins in their order; draws follow the choice for the value."""
    gone = np.nan
    values = {"anc_gran": [1e-5, gone, gone, gone, gone], "alkalinity": [2e-5, 2e-5, gone, gone, gone],
              "anc_gran_of_ions": [3e-5, 3e-5, 3e-5, gone, gone], "anc_charge": [4e-5, 4e-5, 4e-5, 4e-5, gone]}
    used = definition_used(BANDS, values)
    assert used.tolist() == [0, 1, 2, 3, NO_CLASS]
    assert_array_equal(values_used(BANDS, values, used), [1e-5, 2e-5, 3e-5, 4e-5, np.nan])
    draws = {name: np.array(v)[:, None] + [0.0, 1e-6] for name, v in values.items()}
    draws["anc_gran"][0, 1] = np.nan  # a missing draw is not filled by another definition
    assert_allclose(values_used(BANDS, draws, used[:, None]), [[1e-5, np.nan], [2e-5, 2.1e-5], [3e-5, 3.1e-5],
                                                                  [4e-5, 4.1e-5], [np.nan] * 2])
    assert basis_words(BANDS, used).tolist() == [
        "Gran ANC", "alkalinity, standing in for Gran ANC", "Gran ANC of the ions, standing in for Gran ANC",
        "charge balance, standing in for Gran ANC", ""]


def test_nothing_stands_in_for_ph():
    """A scheme on pH says nothing of a lake without one."""
    used = definition_used(SHIPPED["sweden_ph"], {"ph": [6.0, np.nan], "anc_gran": [1e-5, 1e-5]})
    assert basis_words(SHIPPED["sweden_ph"], used).tolist() == ["pH", ""]


# ------------------------------------------------------------------ words


def test_words_of_a_class_and_of_a_second():
    """A second class is named from SECOND_SHARE on, the likeliest if there are several; none without a first."""
    index = np.array([1, 1, 2, 0, NO_CLASS, 1])
    p = np.array([[0.3, 0.7, 0, 0], [0.099, 0.901, 0, 0], [0, 0.2, 0.55, 0.25], [0.4, 0.6, 0, 0], [0.5, 0.5, 0, 0], [np.nan] * 4])
    worst, next_, third, _ = (c.words for c in BANDS.classes)
    assert between_classes(BANDS, index, p).tolist() == [
        f"{next_}; could also be chronically acidic (30 %)", next_, f"{third}; could also be not sensitive (25 %)",
        f"{worst}; could also be prone to turn acid (60 %)", "", next_]
    assert second_class(BANDS, index, p).tolist() == [
        "chronically acidic (30 %)", "", "not sensitive (25 %)", "prone to turn acid (60 %)", "", ""]
    assert class_names(BANDS, index).tolist() == [
        "prone to turn acid", "prone to turn acid", "sensitive", "chronically acidic", "", "prone to turn acid"]


def test_a_second_class_at_the_share_itself():
    """The share belongs to those that are named."""
    p = np.array([[SECOND_SHARE, 1 - SECOND_SHARE]])
    assert second_class(NORWAY, np.array([1]), p).tolist() == [f"below the limit ({100 * SECOND_SHARE:.0f} %)"]


def test_words_of_no_lakes():
    """An empty table has no words."""
    none = np.empty(0, dtype=np.intp)
    assert between_classes(BANDS, none, np.empty((0, 4))).shape == (0,)
    assert disagreements({("survey_bands", "anc_gran"): none}, SHIPPED).shape == (0,)


# ------------------------------------------------------------------ disagreement


GRAN, CHARGE = np.array([2, 2, NO_CLASS, 2, 0]), np.array([0, 2, 0, NO_CLASS, 1])


def test_definitions_disagree_within_a_scheme():
    """Both classes by name where both are known and differ; nothing elsewhere."""
    found = disagreements({("survey_bands", "anc_charge"): CHARGE, ("survey_bands", "anc_gran"): GRAN}, SHIPPED)
    assert found.tolist() == ["Gran ANC: sensitive; charge balance: chronically acidic", "", "", "",
                              "Gran ANC: chronically acidic; charge balance: prone to turn acid"]


def test_a_definition_that_the_scheme_does_not_name():
    """It can be set beside the others all the same."""
    corrected = np.array([2, 1, NO_CLASS, 2, 0])
    found = disagreements({("survey_bands", "anc_organic_corrected"): corrected, ("survey_bands", "anc_gran"): GRAN}, SHIPPED)
    assert found.tolist() == ["", "Gran ANC: sensitive; charge balance less organic acids: prone to turn acid", "", "", ""]


def test_schemes_disagree_on_at_risk():
    """Classes of two schemes cannot be compared, whether a lake is at risk can; each on its own first definition."""
    norway = np.array([0, 1, 0, 0, 0])
    found = disagreements({("survey_bands", "anc_charge"): CHARGE, ("survey_bands", "anc_gran"): GRAN,
                           ("norway_20", "anc_charge"): norway}, SHIPPED)
    assert found.tolist() == [
        "survey_bands (Gran ANC: sensitive; charge balance: chronically acidic); "
        "at risk by norway_20 (charge balance) but not by survey_bands (Gran ANC)",
        "", "",
        "at risk by norway_20 (charge balance) but not by survey_bands (Gran ANC)",
        "survey_bands (Gran ANC: chronically acidic; charge balance: prone to turn acid)"]


def test_lakes_without_a_class_in_one_scheme_do_not_disagree():
    """What is not known contradicts nothing."""
    found = disagreements({("norway_20", "anc_charge"): np.array([NO_CLASS, 0, NO_CLASS, 1]),
                           ("uk_0", "anc_charge"): np.array([0, NO_CLASS, 1, NO_CLASS])}, SHIPPED)
    assert found.tolist() == [""] * 4


def test_a_scheme_of_ones_own_takes_part():
    """Schemes are looked up in the mapping given, not in the shipped table."""
    own = replace(NORWAY, name="own")
    found = disagreements({("own", "anc_charge"): np.array([1]), ("uk_0", "anc_charge"): np.array([0])}, {"own": own} | SHIPPED)
    assert found.tolist() == ["at risk by uk_0 (charge balance) but not by own (charge balance)"]


# ------------------------------------------------------------------ an agency survey


@pytest.mark.skipif(not DATA, reason="AQUABUF_OPEN_DATA names no folder")
@pytest.mark.open_data
@pytest.mark.parametrize("column", ["anc_ueq_L_orig", "anc_ueq_L_revised"])
def test_class_counts_of_the_eastern_lake_survey(column):
    """Counts of lakes in the sample, by plain comparisons; the survey design is not in them, so they are no shares of a population."""
    anc = pd.read_csv(Path(DATA) / "nsws_lakes_1984.csv")[column]
    assert anc.notna().sum() > 800
    index = classify(BANDS, anc.to_numpy() * 1e-6)
    by_hand = [(anc <= 0).sum(), ((anc > 0) & (anc <= 50)).sum(), ((anc > 50) & (anc <= 200)).sum(), (anc > 200).sum()]
    assert [int((index == k).sum()) for k in range(4)] == by_hand
    assert min(by_hand) > 20
    assert (index == NO_CLASS).sum() == anc.isna().sum()


@pytest.mark.skipif(not DATA, reason="AQUABUF_OPEN_DATA names no folder")
@pytest.mark.open_data
def test_a_second_release_of_the_same_survey_changes_classes():
    """More lakes of the sample are acid by the revised ANC (facts of the data: it is lower by 9 µeq/L in the median)."""
    table = pd.read_csv(Path(DATA) / "nsws_lakes_1984.csv")
    acid = {c: (classify(BANDS, table[c].to_numpy() * 1e-6) == 0).sum() for c in ("anc_ueq_L_orig", "anc_ueq_L_revised")}
    assert acid["anc_ueq_L_revised"] > acid["anc_ueq_L_orig"]

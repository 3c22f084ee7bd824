"""Indices: printed constants, full speciation, ratios, bands and words."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf import Water
from aquabuf.assess.plant.indices import (
    SIGN_HABITS,
    band_names,
    banded,
    bands,
    chloride_sulfate_ratio,
    langelier,
    langelier_constant,
    langelier_words,
    larson_ratio,
    low_point_words,
    potential_mg_l,
    potential_words,
    ryznar_index,
)
from aquabuf.errors import InputError
from aquabuf.tables import read_table

QUANTITIES = tuple(dict.fromkeys(r["quantity"] for r in read_table("index_bands")))
MG_CACO3 = 50043.0  # mg/eq


def case_12(ph=8.2):
    """Facts case 12: alkalinity and calcium 100 mg/L as CaCO3, 15 °C, ionic strength 0.005."""
    return Water.from_ph_alkalinity(ph=ph, alkalinity_eq_l=100.0 / MG_CACO3, calcium_mol_l=50.0 / MG_CACO3, t_c=15.0,
                                    ionic_strength_mol_l=0.005)


@pytest.mark.parametrize(("t_c", "tds", "constant"), [
    (0, 0, 2.45), (10, 0, 2.23), (20, 0, 2.02), (30, 0, 1.86), (0, 200, 2.71), (10, 200, 2.49), (20, 200, 2.28),
    (30, 200, 2.12), (90, 400, 1.31), (70, 600, 1.66), (0, 40, 2.58)])
def test_printed_constants(t_c, tds, constant):
    """Davis, Table 7-5."""
    found, inside = langelier_constant(t_c, tds)
    assert_allclose(found, constant, rtol=0, atol=1e-12)
    assert inside


def test_constants_between_are_bilinear():
    """A quarter of the way from 10 to 20 °C and half from 40 to 200 mg/L, by hand."""
    found, _ = langelier_constant(12.5, 120.0)
    by_hand = 0.5 * (0.75 * 2.36 + 0.25 * 2.15) + 0.5 * (0.75 * 2.49 + 0.25 * 2.28)
    assert_allclose(found, by_hand, rtol=0, atol=1e-12)


def test_range_of_the_table_is_flagged():
    """The edge stands in outside; where the print is cut, and for missing readings, there is no value."""
    found, inside = langelier_constant([-1.0, 95.0, 20.0, 85.0, np.nan, 20.0], [100.0, 100.0, 700.0, 600.0, 100.0, np.nan])
    assert_array_equal(inside, [False] * 6)
    assert_allclose(found[2], 2.45, rtol=0, atol=1e-12)
    assert_array_equal(np.isnan(found), [False, False, False, True, True, True])


def test_saturation_ph_of_the_table():
    """20 °C, 200 mg/L, calcium and alkalinity 100 mg/L as CaCO3: pHs 7.98 (facts, freshwater case 15)."""
    water = Water.from_ph_alkalinity(ph=8.2, alkalinity_eq_l=100.0 / MG_CACO3, calcium_mol_l=50.0 / MG_CACO3, t_c=20.0,
                                     ionic_strength_mol_l=0.005)
    found = langelier(water, 200.0)
    assert_allclose(found.ph_saturation, 7.98, rtol=0, atol=0.005)
    assert_allclose(found.index, 8.2 - 7.98, rtol=0, atol=0.005)
    assert_allclose(langelier(water).constant, found.constant, rtol=0, atol=1e-9)  # 0.005 mol/L is 200 mg/L


def test_full_speciation():
    """Case 12: index 0.33, potential 3.68 mg/L, pH at saturation 7.90, two independent solvers without ion pairs."""
    water = case_12()
    found = langelier(water)
    assert_allclose(found.full_index, 0.33, rtol=0, atol=0.02)
    assert_allclose(potential_mg_l(water.precipitation_potential_mol_l()), 3.68, rtol=0, atol=0.3)
    assert_allclose(water.ph_at_saturation(), 7.90, rtol=0, atol=0.02)
    assert_allclose(found.full_ph_saturation, 8.2 - found.full_index, rtol=0, atol=1e-12)


@pytest.mark.parametrize(("t_c", "lower"), [(0.0, 0.20), (10.0, 0.15), (20.0, 0.10), (30.0, 0.08)])
def test_old_constants_shift_the_index(t_c, lower):
    """The table lies above Plummer & Busenberg 1982 by 0.20 to 0.08 without ionic strength (facts): its index is lower."""
    water = Water.from_ph_alkalinity(ph=7.5, alkalinity_eq_l=1e-4, calcium_mol_l=1e-5, t_c=t_c, ionic_strength_mol_l=0.0)
    assert_allclose(langelier(water).difference, -lower, rtol=0, atol=0.01)


def test_index_needs_calcium_and_alkalinity():
    """Missing and zero calcium leave no index; negative alkalinity none by the table; the words say so."""
    water = Water.from_ph_alkalinity(ph=[8.0, 8.0, 4.0], alkalinity_eq_l=[2e-3, 2e-3, -1e-4],
                                     calcium_mol_l=[np.nan, 0.0, 1e-3], t_c=15.0)
    found = langelier(water)
    assert np.isnan(found.index).all()
    assert_array_equal(np.isnan(found.full_index), [True, True, False])
    assert "is not known" in langelier_words(found, 1)
    assert langelier_words(found, 2).endswith("The printed table has no value there.")


def test_words_name_constants_and_never_a_bare_sign():
    """Both indices, what they say, the gap and the constants."""
    said = langelier_words(langelier(case_12()))
    assert said.startswith("The water deposits calcium carbonate: saturation index +0.3")
    assert "Plummer & Busenberg 1982" in said
    assert "Davis, Water and Wastewater Engineering, Table 7-5" in said
    assert said.endswith("0.20 lower.")  # 0.15 to 0.20 of old constants at 15 °C and their ionic strength term
    assert langelier_words(langelier(case_12(7.0))).startswith("The water dissolves calcium carbonate")
    assert "its edge stands in" in langelier_words(langelier(case_12(), 800.0))
    assert "no value there" in langelier_words(langelier(case_12(), np.nan))


def test_potential_words():
    """Case 12 is oversaturated, the same water at pH 7 is not; a hair is called neither; both sign habits are told."""
    deposits, dissolves = (float(case_12(ph).precipitation_potential_mol_l()) for ph in (8.2, 7.0))
    assert potential_words(deposits) == f"deposits {1e5 * 1.00086 * deposits:.1f} mg/L CaCO3"
    assert potential_words(dissolves) == f"dissolves {-1e5 * 1.00086 * dissolves:.1f} mg/L CaCO3"
    assert potential_words(-3e-7) == "neither deposits nor dissolves calcium carbonate"
    assert potential_words(np.nan) == "precipitation potential not known"
    assert "positive precipitation potential deposits" in SIGN_HABITS
    assert "positive dissolves" in SIGN_HABITS


@pytest.mark.parametrize(("t_c", "ph_s", "ryznar"), [(25, 8.231, 8.96), (82, 7.234, 6.97)])
def test_ryznar(t_c, ph_s, ryznar):
    """Published example at pH 7.5 with its saturation pH (facts, freshwater 5.3)."""
    assert_allclose(ryznar_index(7.5, ph_s), ryznar, rtol=0, atol=0.005)


def test_larson_ratio():
    """Cl 30, SO4 60, HCO3 122 mg/L: 1.048 (facts, derived); endless without alkalinity."""
    found = larson_ratio([30.0 / 35450.0, 1e-3, 0.0, np.nan], [60.0 / 96056.0, 1e-3, 0.0, 1e-3],
                         [122.0 / 61016.0, -1e-4, 0.0, 1e-3])
    assert_allclose(found[0], 1.048, rtol=0, atol=0.001)
    assert_array_equal(found[1:], [np.inf, np.nan, np.nan])


def test_chloride_sulfate_ratio():
    """30 mg/L over 60 mg/L is 0.5 by mass."""
    found = chloride_sulfate_ratio([30.0 / 35450.0, 1e-3, 0.0], [60.0 / 96060.0, 0.0, 0.0])
    assert_allclose(found[0], 0.5, rtol=1e-4)
    assert_array_equal(found[1:], [np.inf, np.nan])


@pytest.mark.parametrize(("value", "alkalinity", "name"), [
    (0.19, 10, "low"), (0.2, 10, "moderate"), (0.5, 10, "moderate"), (0.51, 49, "high"), (0.51, 51, "moderate"),
    (np.inf, 20, "high"), (0.51, np.nan, ""), (np.nan, 20, "")])
def test_bands_of_chloride_and_sulfate(value, alkalinity, name):
    """Below 0.2 low, to 0.5 moderate, above it the alkalinity of 50 mg/L decides (Belitz et al. 2016)."""
    assert band_names("chloride_sulfate_ratio", value, alkalinity).item() == name


@pytest.mark.parametrize(("quantity", "value", "name"), [
    ("larson_ratio", 0.79, "low"), ("larson_ratio", 0.8, "caution"), ("larson_ratio", 1.2 + 1e-12, "caution"),
    ("larson_ratio", 1.21, "high"), ("saturation_index", -0.01, "dissolves"), ("saturation_index", 0.3, "usual aim"),
    ("precipitation_potential", -2.0, "dissolves"), ("precipitation_potential", 10.0, "usual aim"),
    ("precipitation_potential", 10.1, "deposits"), ("ryznar_index", 8.96, "dissolves"), ("digester_ph", 6.2, "low"),
    ("volatile_acid_ratio", 0.25, "usual"), ("lime_bicarbonate_alkalinity", 1001.0, "lost")])
def test_limits_of_bands(quantity, value, name):
    """Limits of the facts, with the side that a value on the limit belongs to."""
    assert band_names(quantity, value).item() == name


@pytest.mark.parametrize("quantity", QUANTITIES)
def test_bands_tile_the_line(quantity):
    """Every value, also on a limit, is in exactly one band; each row has words, mark and source."""
    limits = [x for b in bands(quantity) for x in (b.lower, b.upper) if np.isfinite(x)]
    values = np.array([-50.0, *limits, *(x + 1e-3 for x in limits), *(x - 1e-3 for x in limits), 1e5])
    for alkalinity in (0.0, 50.0, 500.0):
        held = sum(b.holds(values, np.full(values.shape, alkalinity)).astype(int) for b in bands(quantity))
        assert_array_equal(held, np.ones(values.shape, dtype=int))
    assert all(b.words and b.source and b.mark in {"printed", "recalled", "derived", "practice"} for b in bands(quantity))


def test_own_bands_take_the_place_of_shipped_ones():
    """A local rule outranks the table."""
    own = bands("larson_ratio")[2:]
    assert band_names("larson_ratio", [0.5, 2.0], table=own).tolist() == ["", "high"]
    assert banded("larson_ratio", 2.0, table=own).item() is own[0]


@pytest.mark.parametrize(("t_c", "low", "high"), [(10.0, 8.38, 8.42), (25.0, 8.20, 8.28)])
def test_low_point_of_buffering(t_c, low, high):
    """8.38 to 8.42 at 10 °C, 8.20 to 8.28 at 25 °C for 5 to 40 mg/L of carbon (facts, computed; 8 to 8.5 in EPA 816-B-16-003)."""
    water = Water.from_ph_dic(ph=7.9, dic_mol_l=np.array([5.0, 15.0, 40.0]) / 12011.0, t_c=t_c, ionic_strength_mol_l=0.003)
    found = [float(low_point_words(water, row).split("at pH ")[1].split(",")[0]) for row in range(3)]
    assert_allclose(found, 0.5 * (low + high), rtol=0, atol=0.5 * (high - low) + 0.005)  # the words have two decimals
    assert " below it, with " in low_point_words(water)


def test_low_point_words_of_other_waters():
    """Above the point, and where nothing is known."""
    water = Water.from_ph_dic(ph=[8.6, np.nan], dic_mol_l=1e-3, t_c=15.0)
    assert " above it, with " in low_point_words(water)
    assert low_point_words(water, 1) == "No pH of least buffering lies near."


def test_message():
    """A quantity without bands."""
    with pytest.raises(InputError, match=r"bands are known for saturation_index, .*; found 'luck'"):
        bands("luck")

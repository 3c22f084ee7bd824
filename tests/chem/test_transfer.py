"""Gas transfer of CO2: slips in circulation, diffusion, the table of relations, and what missing or odd readings do."""

import numpy as np
import pytest
from iapws import IAPWS97
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.chem import transfer
from aquabuf.chem.transfer import (
    k600_cole_caraco,
    k600_vachon_prairie,
    k_at_schmidt,
    schmidt_exponent,
    schmidt_relations,
    schmidt_wanninkhof_1992,
    schmidt_wanninkhof_2014,
    transfer_relations,
    transfer_velocity_m_d,
)
from aquabuf.errors import InputError
from aquabuf.tables import read_table

M_D_PER_CM_H = 24.0 / 100.0
KM2 = 1e6


@pytest.mark.parametrize("t_c", [5.0, 10.0, 20.0, 25.0])
def test_cubic_term_is_not_the_slip_in_circulation(t_c):
    """Copies of the 1992 fit carry 0.043132 in place of 0.04132: 14.5 too low at 20 °C. Ours is above by just that."""
    slip = 1911.1 - 118.11 * t_c + 3.4527 * t_c**2 - 0.043132 * t_c**3
    assert_allclose(schmidt_wanninkhof_1992(t_c) - slip, 0.001812 * t_c**3, rtol=1e-9)


@pytest.mark.parametrize("wind", [1.0, 5.0])
def test_exponent_is_not_the_slip_of_sign(wind):
    """Copies write (Sc/600)^+n: cold water, Sc above 600, must exchange slower than at 20 °C, and the slip says faster."""
    n = 0.5 if wind >= 3.0 else 2.0 / 3.0
    slip = (1033.95 / 600.0) ** n
    ours = float(k_at_schmidt(1.0, 1033.95, wind))
    assert ours < 1.0 < slip
    assert_allclose(ours * slip, 1.0, rtol=1e-13)


def test_schmidt_number_is_viscosity_over_diffusion():
    """At 25 °C: viscosity of IAPWS over 1.92e-9 m2/s, the handbook diffusion of CO2 (recalled, good to some percent)."""
    water = IAPWS97(T=298.15, P=0.101325)
    expected = water.mu / water.rho / 1.92e-9
    assert_allclose([schmidt_wanninkhof_1992(25.0), schmidt_wanninkhof_2014(25.0)], expected, rtol=0.03)


def test_both_fits_fall_with_warmth_and_agree():
    """The newer fit refines the older one: within 2.5 % over the range of both, and both fall all the way."""
    t_c = np.linspace(0.0, 30.0, 61)
    assert_allclose(schmidt_wanninkhof_1992(t_c), schmidt_wanninkhof_2014(t_c), rtol=0.025)
    assert (np.diff(schmidt_wanninkhof_1992(t_c)) < 0.0).all()
    assert (np.diff(schmidt_wanninkhof_2014(np.linspace(-2.0, 40.0, 85))) < 0.0).all()


def test_wind_law_of_cole_and_caraco():
    """2.07 + 0.215 U^1.7 cm/h: doubling the wind multiplies the part above still air by 2^1.7."""
    still, slow, fast = k600_cole_caraco([0.0, 2.0, 4.0])
    assert_allclose((fast - still) / (slow - still), 2.0**1.7, rtol=1e-13)


def test_area_counts_by_its_logarithm_and_with_wind():
    """Ten times the area adds 0.39 U cm/h, and nothing in still air."""
    wind = np.array([0.0, 1.0, 6.0])
    step = k600_vachon_prairie(wind, 50.0 * KM2) - k600_vachon_prairie(wind, 5.0 * KM2)
    assert_allclose(step, 0.39 * wind * M_D_PER_CM_H, rtol=1e-12, atol=1e-15)


def test_ponds_where_wind_would_slow_the_transfer_have_no_answer():
    """1.48 + 0.39 log10(A) is zero at A = 10^(-1.48/0.39) km2; no area, or none above zero, is no answer either."""
    edge = 10.0 ** (-1.48 / 0.39) * KM2
    found = k600_vachon_prairie(5.0, [0.99 * edge, 1.01 * edge, 0.0, -1.0, np.nan, KM2])
    assert_array_equal(np.isnan(found), [True, False, True, True, True, False])
    assert_allclose(found[1], 2.51 * M_D_PER_CM_H, rtol=0.01)


@pytest.mark.parametrize("relation", [k600_cole_caraco, lambda u: k600_vachon_prairie(u, KM2), schmidt_exponent])
def test_negative_wind_has_no_answer_and_no_warning(relation):
    """A draw of a calm day can fall below zero."""
    assert_array_equal(np.isnan(relation([-0.1, 0.0, np.nan])), [True, False, True])


def test_exponent_turns_at_three():
    """2/3 below 3 m/s, 1/2 from there on."""
    assert_allclose(schmidt_exponent([0.0, 2.999, 3.0, 12.0]), [2 / 3, 2 / 3, 0.5, 0.5], rtol=1e-15)


def test_schmidt_number_that_makes_no_sense_has_no_answer():
    """The cubic turns negative above 42 °C."""
    assert schmidt_wanninkhof_1992(45.0) < 0.0
    assert_array_equal(np.isnan(k_at_schmidt(1.0, [-5.0, 0.0, 600.0], 4.0)), [True, True, False])


def test_table_and_functions_name_the_same_relations():
    """One function for each row, one row for each function."""
    rows = {f"{row['kind']}_{row['name']}" for row in read_table("transfer_relations")}
    functions = {name for name in transfer.__all__ if name.startswith(("k600_", "schmidt_wanninkhof_"))}
    assert rows == functions
    assert {f"k600_{name}" for name in transfer_relations()} | {f"schmidt_{name}" for name in schmidt_relations()} == rows


def test_every_relation_has_words_source_range_and_marks():
    """A row without them cannot be told to the reader of a report."""
    marks = {"printed", "recalled", "derived", "practice"}
    for row in read_table("transfer_relations"):
        assert {row["mark"], row["range_mark"]} <= marks
        assert len(row["source"]) > 10
        assert len(row["range_source"]) > 10
    for relation in [*transfer_relations().values(), *schmidt_relations().values()]:
        assert relation.words
        assert relation.ranges
        assert all(low < high for low, high in relation.ranges.values())


def test_a_relation_takes_the_readings_it_needs_from_all():
    """The same readings serve both; only one of them looks at the area."""
    both = transfer_relations()
    readings = {"wind_m_s": 4.0, "lake_area_m2": KM2, "t_c": 10.0}
    assert_allclose(both["cole_caraco"](**readings), (2.07 + 0.215 * 4.0**1.7) * M_D_PER_CM_H, rtol=1e-13)
    assert_allclose(both["vachon_prairie"](**readings), (2.51 + 1.48 * 4.0) * M_D_PER_CM_H, rtol=1e-13)
    assert "lake_area_m2" not in both["cole_caraco"].ranges


def test_outside_marks_rows_by_each_reading_that_counts():
    """Area matters only to the relation that needs it; a missing reading is not outside."""
    wind, area = np.array([3.0, 3.0, 50.0, np.nan]), np.array([10 * KM2, 100.0, 10 * KM2, 10 * KM2])
    both = transfer_relations()
    assert both["vachon_prairie"].outside(wind_m_s=wind, lake_area_m2=area).tolist() == [False, True, True, False]
    assert both["cole_caraco"].outside(wind_m_s=wind, lake_area_m2=area).tolist() == [False, False, True, False]
    assert schmidt_relations()["wanninkhof_1992"].outside(t_c=[-0.5, 0.0, 30.0, 30.5]).tolist() == [True, False, False, True]


def test_dispatcher_puts_the_relations_together():
    """Closed form of the check case: k600 3.4617 cm/h at 3 m/s, 2.637 cm/h at 10 °C."""
    found = transfer_velocity_m_d([3.0, 1.0, np.nan], 10.0, "cole_caraco", schmidt="wanninkhof_1992")
    by_hand = [2.637 * M_D_PER_CM_H, 2.285 * (1033.95 / 600.0) ** (-2 / 3) * M_D_PER_CM_H, np.nan]
    assert_allclose(found, by_hand, rtol=0, atol=5e-4 * M_D_PER_CM_H)


def test_dispatcher_passes_the_area_on_and_keeps_rows_apart():
    """A lake without area has no answer where the relation needs one; its neighbor has."""
    found = transfer_velocity_m_d(5.0, [[20.0], [5.0]], "vachon_prairie", lake_area_m2=[100 * KM2, np.nan])
    assert found.shape == (2, 2)
    assert_array_equal(np.isnan(found), [[False, True], [False, True]])
    assert_allclose(found[0, 0], 13.81 * (600.3264 / 600.0) ** -0.5 * M_D_PER_CM_H, rtol=1e-6)
    assert np.isnan(transfer_velocity_m_d(5.0, 20.0, "vachon_prairie"))


def test_unknown_relations_are_named():
    """The message lists what there is."""
    with pytest.raises(InputError, match="the wind relation must be one of cole_caraco, vachon_prairie; found 'liss'"):
        transfer_velocity_m_d(3.0, 10.0, "liss")
    with pytest.raises(InputError, match=r"the Schmidt number relation must be one of wanninkhof_1992, .*; found '1992'"):
        transfer_velocity_m_d(3.0, 10.0, schmidt="1992")

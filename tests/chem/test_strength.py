"""Strength against density of liquid products, certificates that contradict themselves, freezing points."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.chem.products import find_product, products
from aquabuf.chem.strength import (
    check_certificate,
    density_from_strength,
    freezes_at_c,
    liquid_alum_18_water_g_l,
    liquid_alum_al2o3_g_l,
    liquid_alum_fraction,
    liquid_alum_g_l,
    strength_from_density,
)
from aquabuf.tables import read_table

POINTS = read_table("product_densities")
LIQUID = {p.formula: p for p in reversed(products().values()) if p.form == "liquid"}
CAUSTIC, ALUM_14, ALUM, ALUM_18 = (products()[n] for n in (
    "caustic soda", "liquid alum as 14-water", "liquid alum as 14.3-water", "liquid alum as 18-water"))
WATER_60_F = 0.99904  # kg/L, handbook density of water at 60 °F


# ---------------------------------------------------------------- liquid alum


@pytest.mark.parametrize("sg", [1.15, 1.20, 1.25, 1.30, 1.335, 1.37])
def test_the_alum_relations_agree_with_each_other(sg):
    """g/L over density is the mass fraction (within 1 %), and Al2O3 is 17 % of dry alum (within 0.5 %)."""
    assert_allclose(liquid_alum_g_l(sg) / (1e3 * sg * WATER_60_F), liquid_alum_fraction(sg), rtol=0.01)
    assert_allclose(liquid_alum_al2o3_g_l(sg) / liquid_alum_g_l(sg), 0.17, rtol=0.005)
    assert_allclose(liquid_alum_18_water_g_l(sg) / liquid_alum_g_l(sg), 666.40 / 599.75, rtol=0.01)


@pytest.mark.parametrize("relation", [
    liquid_alum_fraction, liquid_alum_g_l, liquid_alum_18_water_g_l, liquid_alum_al2o3_g_l])
def test_alum_relations_keep_their_range(relation):
    """Outside 1.00 to 1.38 they say nothing."""
    assert np.isnan(relation([0.99, 1.0, 1.38, 1.39, np.nan])).tolist() == [True, False, False, True, True]


def test_alum_density_in_each_hydrate():
    """Liquid of SG 1.335 is 48.85 % dry alum; the same liquid counts more as 18-hydrate and less as 14-hydrate."""
    density = 1.335 * WATER_60_F
    for product, mass in ((ALUM, 599.746), (ALUM_14, 594.342), (ALUM_18, 666.402)):
        strength = 0.4885 * mass / 599.746
        assert_allclose(strength_from_density(product, density), strength, rtol=0, atol=2e-4)
        assert_allclose(density_from_strength(product, strength), density, rtol=0, atol=2e-4)
    assert np.isnan(density_from_strength(ALUM, 0.9))
    assert np.isnan(strength_from_density(ALUM, 1.6))


# ---------------------------------------------------------------- the table of points


def test_points_are_marked_and_in_order():
    """Each names its source; strengths of one product rise; densities never fall except for ammonia, which has one."""
    assert all(r["mark"] in {"printed", "recalled"} and len(r["source"]) > 10 for r in POINTS)
    for key in {(r["formula"], r["quantity"]) for r in POINTS}:
        mine = [r for r in POINTS if (r["formula"], r["quantity"]) == key]
        strengths, values = ([float(r[c]) for r in mine] for c in ("strength", "value"))
        assert strengths == sorted(set(strengths))
        assert values == sorted(values)
        assert all(0 < s < 1 for s in strengths)


@pytest.mark.parametrize("row", [r for r in POINTS if r["quantity"] == "density_kg_l"],
                         ids=lambda r: f"{r['formula']} {r['strength']}")
def test_density_at_each_point_is_the_printed_one(row):
    """A point is met exactly, and a certificate that repeats it is not questioned."""
    product, strength, value = find_product(row["formula"]), float(row["strength"]), float(row["value"])
    assert_allclose(density_from_strength(product, strength), value, rtol=0, atol=1e-12)
    assert check_certificate(product, strength, value, 20.0) == ""
    assert "disagree" in check_certificate(product, strength, value + 0.06, 20.0)


def test_between_points_runs_a_straight_line():
    """Halfway between 25 % (1.27) and 50 % (1.5225) lies 1.39625; never beyond the last points."""
    assert_allclose(density_from_strength(CAUSTIC, 0.375), 1.39625, rtol=0, atol=1e-12)
    assert_allclose(strength_from_density(CAUSTIC, 1.39625), 0.375, rtol=0, atol=1e-12)
    for strength in (0.19, 0.51, np.nan):
        assert np.isnan(density_from_strength(CAUSTIC, strength))
    for density in (1.2, 1.53, np.nan):
        assert np.isnan(strength_from_density(CAUSTIC, density))


def test_a_strength_is_told_only_by_a_density_that_depends_on_it():
    """Strong sulfuric acid has one density from 96 to 98 %; one point tells no line; solids have none."""
    assert np.isnan(strength_from_density(products()["sulfuric acid"], 1.838))
    assert np.isnan(strength_from_density(products()["caustic potash"], 1.45))
    assert_allclose(strength_from_density(products()["hydrochloric acid"], 1.168), 0.335, rtol=0, atol=1e-3)
    assert np.isnan(density_from_strength(products()["soda ash"], 0.98))


# ---------------------------------------------------------------- certificates


@pytest.mark.parametrize(("name", "strength", "density", "t_c"), [
    ("caustic soda 50 %", 0.50, 1.525, None), ("caustic soda 50 %", 0.50, 1.515, 25.0), ("caustic soda 50 %", 0.50, 1.530, 20.0),
    ("caustic soda 25 %", 0.25, 1.274, 20.0),            # a worked pump example
    ("caustic soda", 0.40, 1.430, 20.0),                 # handbook value, 0.008 off the straight line
    ("liquid alum as 14.3-water", 0.4885, 1.334, 15.6), ("liquid alum as 14-water", 0.4885, 1.334, None),
    ("sulfuric acid 93 %", 0.93, 1.828, 20.0),           # handbook value
    ("ferric chloride", 0.40, 1.20, 20.0),               # no source tells
    ("soda ash", 0.98, 0.80, 20.0), ("caustic soda", 0.10, 1.5, 20.0), ("caustic soda", 0.5, np.nan, 20.0),
])
def test_a_certificate_that_may_be_right(name, strength, density, t_c):
    """Values that agree, and those that nobody can tell."""
    assert check_certificate(products()[name], strength, density, t_c) == ""


@pytest.mark.parametrize(("name", "strength", "density", "words"), [
    ("caustic soda 50 %", 0.50, 1.40, ("'caustic soda 50 %' disagree", "50.0 % NaOH has about 1.522 kg/L",
                                       "stated is 1.400 kg/L, 0.123 kg/L less", "1.400 kg/L belongs to about 37.9 %")),
    ("caustic soda 25 %", 0.25, 1.525, ("0.255 kg/L more",)),
    ("liquid alum as 14.3-water", 0.4885, 1.307, ("0.027 kg/L less", "belongs to about 45.5 %")),
    ("liquid alum as 18-water", 0.4885, 1.334, ("18H2O", "belongs to about 54.3 %")),  # wrong hydrate
    ("sulfuric acid", 0.93, 1.70, ("0.135 kg/L less",)),
])
def test_a_certificate_that_contradicts_itself(name, strength, density, words):
    """By how much, what density the strength would have, and what to do. Expected: table points and hand interpolation."""
    found = check_certificate(products()[name], strength, density, 20.0)
    assert [w for w in words if w not in found] == []
    assert found.endswith("Measure the density of this delivery, or ask the supplier")


def test_a_density_that_tells_no_strength_is_not_turned_into_one():
    """93 % acid at 1.70 kg/L lies below every point."""
    assert "belongs" not in check_certificate(products()["sulfuric acid"], 0.93, 1.70, 20.0)


def test_between_far_points_the_line_may_be_off():
    """0.022 kg/L above the line at 40 % can be the bow of the curve; at the point of 50 % it cannot."""
    assert check_certificate(CAUSTIC, 0.40, 1.27 + 0.6 * 0.2525 + 0.022, 20.0) == ""
    assert "0.022 kg/L more" in check_certificate(CAUSTIC, 0.50, 1.5225 + 0.022, 20.0)


def test_temperature_widens_what_is_ordinary():
    """0.03 kg/L off is much at 25 °C, where the point was measured, and little for a delivery at -10 °C."""
    strength, density = 0.1935, 1.2387
    assert "0.030 kg/L more where 0.001" in check_certificate(CAUSTIC, strength, density, 25.0)
    assert check_certificate(CAUSTIC, strength, density, -10.0) == ""
    assert "where 0.011" in check_certificate(CAUSTIC, strength, density)


# ---------------------------------------------------------------- freezing


@pytest.mark.parametrize(("name", "strength", "expected"), [
    ("caustic soda 50 %", 0.50, 12.0), ("caustic soda 25 %", 0.25, -18.0), ("sulfuric acid", 0.98, 3.0),
    ("sulfuric acid 93 %", 0.93, -30.0), ("liquid alum as 14.3-water", 0.507, -8.3), ("liquid alum as 14.3-water", 0.488, -15.6),
    ("liquid alum as 18-water", 0.488 * 666.402 / 599.746, -15.6), ("caustic soda", 0.505, 12.0),
])
def test_freezing_points_of_the_table(name, strength, expected):
    """Printed and recalled figures, for alum in any hydrate."""
    assert freezes_at_c(products()[name], strength) == expected


@pytest.mark.parametrize(("name", "strength"), [
    ("caustic soda", 0.40), ("ferric chloride", 0.40), ("alum 14.3-water", 0.488), ("sulfuric acid", 0.95),
    ("caustic soda", np.nan)])
def test_freezing_points_that_nobody_knows(name, strength):
    """Between far points, without a source, for a dry product."""
    assert np.isnan(freezes_at_c(products()[name], strength))

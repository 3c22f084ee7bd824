"""Volume and shape of tanks against worked examples and geometry."""

import numpy as np
import pytest
from ideal_wastes import reagent
from numpy.testing import assert_allclose

from aquabuf.assess.tank.volumes import (
    equal_depth_m,
    residence,
    round_vessel,
    rounded_up_m,
    unequal_volumes,
    volume_m3,
)
from aquabuf.errors import InputError
from aquabuf.units import convert

GPM = 3.785411784e-3 * 60.0  # m3/h
GAL = 3.785411784e-3
FT = 0.3048


@pytest.mark.parametrize(("gpm", "minutes", "gallons", "metres"), [(50.0, 15.0, 750.0, 1.535), (100.0, 5.0, 500.0, 4.40 * FT)])
def test_worked_examples(gpm, minutes, gallons, metres):
    """W2 (printed): 50 gpm for 15 min is 750 gal, as deep as wide 1.535 m. W12 (recalled): 100 gpm for 5 min, 4.40 ft."""
    volume = volume_m3(gpm * GPM, minutes)
    assert_allclose(volume / GAL, gallons, rtol=1e-9)
    assert_allclose(equal_depth_m(volume), metres, atol=0.003)


def test_gallon_of_the_examples_is_that_of_the_units():
    """Gallon of the examples is that of the units."""
    assert_allclose(convert(1.0, "gal", "m³", "volume"), GAL, rtol=1e-12)


@pytest.mark.parametrize("volume", [0.1, 2.84, 10.0, 20.0, 60.0, 500.0])
@pytest.mark.parametrize("depth", [1.5, 3.0, 6.0])
def test_vessel_holds_its_volume(volume, depth):
    """Geometry of a cylinder; never deeper than allowed, nor narrower than the free size; freeboard kept."""
    v = round_vessel(volume, depth)
    assert_allclose(np.pi / 4 * v.diameter_m**2 * v.liquid_m, volume, rtol=1e-12)
    assert_allclose(v.floor_m2 * v.liquid_m, volume, rtol=1e-12)
    assert v.liquid_m <= depth * (1 + 1e-12)
    assert v.diameter_m >= (4 * volume / np.pi) ** (1 / 3) * (1 - 1e-9)
    assert v.freeboard_m >= 0.3 - 1e-9
    assert_allclose(v.wall_m / 0.1, round(v.wall_m / 0.1), atol=1e-6)
    assert v.limited == ((4 * volume / np.pi) ** (1 / 3) > depth)


def test_equal_depth_rule_is_kept_where_the_site_lets_it():
    """Equal depth rule is kept where the site lets it."""
    kept = {s.rule.key: s.kept for s in round_vessel(10.0, 3.0).standings}
    assert kept["equal depth"]
    flat = {s.rule.key: s.kept for s in round_vessel(100.0, 3.0).standings}
    assert not flat["equal depth"]
    assert not flat["deeper than wide"]
    deep = {s.rule.key: s.kept for s in round_vessel(200.0, 8.0).standings}
    assert not deep["depth"]


def test_foam_asks_for_more_wall():
    """Foam asks for more wall."""
    assert round_vessel(10.0, 3.0, foams=True).freeboard_m >= 0.6 - 1e-9
    assert round_vessel(10.0, 3.0, foams=True).wall_m > round_vessel(10.0, 3.0).wall_m


@pytest.mark.parametrize(("size", "up"), [(1.535, 1.6), (1.6, 1.6), (2.91, 3.0), (3.0, 3.0), (3.01, 3.25), (4.5, 4.5), (4.51, 4.75)])
def test_diameters_go_up_to_a_step(size, up):
    """0.1 m to 3 m, 0.25 m above."""
    assert_allclose(rounded_up_m(size), up, atol=1e-9)


def test_unequal_volumes():
    """Unequal volumes."""
    sizes, why = unequal_volumes([10.0, 10.0, 40.0])
    assert sizes == (10.0, 15.0, 40.0)
    assert "tank 2 made" in why
    assert unequal_volumes([10.0, 15.0]) == ((10.0, 15.0), "")
    assert "tanks 2 and 3 made" in unequal_volumes([4.0, 4.0, 4.0])[1]
    assert_allclose(unequal_volumes([4.0, 4.0, 4.0])[0], (4.0, 6.0, 9.0))


# residence


@pytest.mark.parametrize(("name", "minutes"), [("caustic soda", 10.0), ("hydrated lime", 30.0), ("magnesium hydroxide", 60.0)])
def test_residence_by_reagent(name, minutes):
    """Facts, section 5.2: 10 to 20 min, 30 min recommended, 20 to 60 min and more."""
    kwargs = {"density_kg_l": 1.3} if name != "hydrated lime" else {}
    found = residence(reagent(name, 0.5, **kwargs))
    assert found.minutes == minutes
    assert "practice" in found.source or "recalled" in found.source
    assert "sources disagree: at most 2 min (trade page)" in found.conflict  # 30 to 120 s on a trade page


def test_all_rules_are_shown():
    """All rules are shown."""
    told = residence(reagent("caustic soda", 0.5, density_kg_l=1.5), precipitates=True).rules
    assert {(r.low, r.source.split(",")[0]) for r in told} >= {
        (5.0, "Environmental Engineers' Handbook"), (0.5, "trade page"),
        (10.0, "Environmental Engineers' Handbook: chromium(III) hydroxide")}


def test_precipitation_is_left_out_where_nothing_falls_out():
    """Precipitation is left out where nothing falls out."""
    told = residence(reagent("caustic soda", 0.5, density_kg_l=1.5)).rules
    assert not any("chromium" in r.source for r in told)


def test_own_residence_outranks_the_table():
    """Own residence outranks the table."""
    found = residence(reagent("hydrated lime"), wanted_min=4.0)
    assert (found.minutes, found.source) == (4.0, "as set")
    assert "shorter than any rule, 5 min or more" in found.words


def test_refusals():
    """Each message tells the rule, the value and the remedy."""
    with pytest.raises(InputError, match=r"flow .* must be above 0; found 0"):
        volume_m3(0.0, 10.0)
    with pytest.raises(InputError, match=r"residence time \[min\] must be above 0; found -1"):
        residence(reagent("hydrated lime"), wanted_min=-1.0)
    with pytest.raises(InputError, match=r"volume of a tank .* must be above 0; found nan"):
        round_vessel(np.nan, 3.0)
    with pytest.raises(InputError, match=r"largest depth of liquid .* must be above 0; found 0"):
        round_vessel(1.0, 0.0)
    with pytest.raises(InputError, match=r"volume of a tank .* must be above 0; found 0"):
        unequal_volumes([1.0, 0.0])

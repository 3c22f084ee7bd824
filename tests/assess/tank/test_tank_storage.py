"""Stores of reagents against the rules as stated and arithmetic."""

import numpy as np
import pytest
from ideal_wastes import reagent
from numpy.testing import assert_allclose

from aquabuf.assess.tank.storage import (
    CONTAINMENT_RULES,
    cautions,
    containment,
    containments,
    freezing_words,
    lime_words,
    materials,
    order_of_addition,
    store,
    supplies,
)
from aquabuf.errors import InputError
from aquabuf.tables import read_table

LIME, CAUSTIC = reagent("hydrated lime", 0.92), reagent("caustic soda 50 %", 0.5)
ACID = reagent("sulfuric acid 93 %", 0.93)


def test_days_by_each_rule():
    """30 d and 10 d without shipping; table 5-1 of Davis: 30 d and 2 shipping times, 10 d and 1.5."""
    assert [(s.name, s.days) for s in supplies()] == [("usual days", 30.0), ("least days", 10.0)]
    found = {s.name: s for s in supplies(4.0)}
    assert (found["critical"].days, found["interruptible"].days) == (38.0, 16.0)
    assert "Davis" in found["critical"].source
    assert found["usual days"].source.endswith("(recalled)")


def test_store_of_a_liquid():
    """200 kg/d of 50 % caustic for 14 d at its 1.5225 kg/L (mean of two printed tables): 2800 kg, 1.839 m3."""
    found = store(CAUSTIC, 200.0, days=14.0)
    assert_allclose((found.kg, found.volume_m3, found.days), (2800.0, 2.8 / 1.5225, 14.0), rtol=2e-3)
    assert "as set" in found.words
    assert not found.by_truck


def test_the_table_decides_where_no_days_are_wished():
    """The table decides where no days are wished."""
    found = store(CAUSTIC, 200.0)
    assert_allclose(found.kg, 2000.0)
    assert "wastewater" in found.words


def test_a_delivery_must_fit():
    """1.5 truck loads at least (printed)."""
    found = store(CAUSTIC, 200.0, load_kg=20000.0)
    assert_allclose((found.kg, found.days), (30000.0, 150.0))
    assert found.by_truck
    assert "1.5 loads decide" in found.words


def test_a_solid_needs_its_bulk_density():
    """A solid needs its bulk density."""
    assert np.isnan(store(LIME, 100.0).volume_m3)
    assert "volume unknown" in store(LIME, 100.0).words
    assert_allclose(store(LIME, 100.0, density_kg_l=0.5).volume_m3, 2.0)


# containment

TANKS = (10.0, 5.0, 2.0)


def test_rules_have_the_names_of_the_stream_file():
    """The choice of a stream file lists the same names."""
    row = next(r for r in read_table("stream_keys") if r["key"] == "containment")
    assert tuple(row["choices"].split(";")) == CONTAINMENT_RULES


def test_containment_by_each_rule():
    """110 % of the largest; greater of 10 % of all and the largest; the largest and 0.1 m of rain on 30 m2."""
    found = {name: containment(name, TANKS, rain_m=0.1, floor_m2=30.0) for name in CONTAINMENT_RULES}
    assert_allclose(list(found.values()), (11.0, 10.0, 13.0))


def test_ten_percent_of_all_decides_with_many_small_tanks():
    """Twelve of 1 m3: 10 % of all is 1.2 m3, more than the largest."""
    assert_allclose(containment(CONTAINMENT_RULES[1], [1.0] * 12), 1.2)


def test_all_rules_are_shown_with_the_one_chosen():
    """All rules are shown with the one chosen."""
    found = containments(TANKS, CONTAINMENT_RULES[1])
    assert [c.chosen for c in found] == [False, True, False]
    assert_allclose([c.volume_m3 for c in found], (11.0, 10.0, np.nan))
    assert "needs rain" in found[2].words
    assert all("local code outranks" in c.words and "recalled" in c.words for c in found)


def test_containment_refusals():
    """Names, volumes, rain and floor that cannot be."""
    with pytest.raises(InputError, match=r"a containment rule must be one of 110 % of largest; .*; found 'none'"):
        containments(TANKS, "none")
    with pytest.raises(InputError, match="containment needs the volume of at least one tank"):
        containment(CONTAINMENT_RULES[0], [])
    with pytest.raises(InputError, match=r"volume of a stored tank .* must be above 0; found -1"):
        containment(CONTAINMENT_RULES[0], [-1.0])
    with pytest.raises(InputError, match=r"rain .* must be 0 or more; found -1"):
        containment(CONTAINMENT_RULES[2], TANKS, rain_m=-1.0, floor_m2=1.0)
    with pytest.raises(InputError, match=r"contained area .* must be above 0; found 0"):
        containment(CONTAINMENT_RULES[2], TANKS, rain_m=0.0, floor_m2=0.0)


# words


def test_order_of_addition():
    """Order of addition."""
    assert any("never water into acid" in r.words for r in order_of_addition([ACID]))
    assert any("quicklime into much water" in r.words for r in order_of_addition([reagent("quicklime", 0.87)]))
    assert not any("quicklime" in r.words for r in order_of_addition([CAUSTIC, LIME]))


@pytest.mark.parametrize(("of", "said"), [(ACID, "93 % and stronger"), (CAUSTIC, "no aluminum"), (LIME, "silo")])
def test_materials(of, said):
    """Materials."""
    found = materials(of)
    assert any(said in r.words for r in found)
    assert found[-1].key == "any"
    assert len(found) == 2


@pytest.mark.parametrize("name", [p for r in read_table("tank_reagents") for p in r["products"].split(";") if p != "any other"])
def test_every_reagent_of_the_table_has_its_materials(name):
    """Every reagent of the table has its materials."""
    assert len(materials(reagent(name, 0.5, density_kg_l=1.2))) >= 2


@pytest.mark.parametrize(("coldest", "said"), [(20.0, "no heating"), (15.0, "within 5 K"), (5.0, "below that")])
def test_freezing(coldest, said):
    """Caustic of 50 % forms crystals from 12 °C (recalled figure of suppliers, in the table of densities)."""
    words = freezing_words(CAUSTIC, coldest)
    assert "12 °C" in words
    assert said in words


def test_nothing_is_said_of_what_is_not_known():
    """Nothing is said of what is not known."""
    assert freezing_words(LIME, -10.0) == ""
    assert freezing_words(CAUSTIC, np.nan) == ""


def test_lime_asks_for_more():
    """+20 % over the peak hour, slurry tank of 5 min, 24 h of caustic on standby (recalled)."""
    found = lime_words(LIME, 100.0, 1.2)
    assert_allclose([v for v, _ in found.values()], [120.0, 0.1, 24.0])
    assert dict(lime_words(CAUSTIC, 100.0, 1.2)) == {}


def test_cautions_fit_the_reagents():
    """Cautions fit the reagents."""
    acid, caustic = cautions([ACID]), cautions([CAUSTIC])
    assert any("sulfide" in w for w in acid)
    assert not any("sulfide" in w for w in caustic)
    assert any("Strong bases burn" in w for w in caustic)
    assert any(w.startswith("Local code") for w in caustic)
    assert all(w.endswith(".") for w in (*acid, *caustic))


def test_store_refusals():
    """Each message tells the rule, the value and the remedy."""
    with pytest.raises(InputError, match=r"use of 'caustic soda 50 %' .* must be above 0; found 0"):
        store(CAUSTIC, 0.0)
    with pytest.raises(InputError, match="days of supply must be above 0; found 0"):
        store(CAUSTIC, 1.0, days=0.0)
    with pytest.raises(InputError, match=r"size of a delivery .* must be 0 or more; found -1"):
        store(CAUSTIC, 1.0, load_kg=-1.0)
    with pytest.raises(InputError, match=r"shipping time .* must be 0 or more; found -1"):
        supplies(-1.0)
    with pytest.raises(InputError, match=r"lime at the peak .* must be above 0; found 0"):
        lime_words(LIME, 0.0, 1.0)

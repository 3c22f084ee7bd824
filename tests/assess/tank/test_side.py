"""The record of side effects: order, stops, salt, cautions, messages."""

import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.side import Treated, cautions_of, side_effects, tank_cautions
from aquabuf.assess.tank.side_case import SEVERITIES
from aquabuf.chem.products import find_product
from aquabuf.errors import InputError
from aquabuf.tables import read_table


def treated(reagent="hydrated lime", **given):
    """A lime treatment of 10 m3/h, with what is given put in."""
    case = {"flow_m3_h": 10.0, "t_c": 25.0, "start_ph": 2.0, "end_ph": 8.5, "dose_eq_l": 0.01,
            "product": find_product(reagent)}
    return Treated(**case | given)


def test_rows_come_gravest_first_and_explain_themselves():
    """Stops, warnings, notes; every row has words, a rule, a source, and a name of its own."""
    found = side_effects(treated("sulfuric acid", start_ph=11.0, end_ph=7.0, dose_eq_l=0.1, totals={
        "sulfide": 1e-3, "calcium": 0.05, "carbon": 0.02, "zinc": 1e-3, "fluoride": 1e-2, "ammonium": 1e-2}))
    ranks = [SEVERITIES.index(row.severity) for row in found.rows]
    assert ranks == sorted(ranks, reverse=True)
    assert len(found.stops) == 1
    assert found.warnings
    assert all(row.words and row.rule and row.source and row.unit for row in found.rows)
    assert len({row.name for row in found.rows}) == len(found.rows)
    assert len(found.stops) + len(found.warnings) + len(found.of("note")) == len(found.rows)


def test_dissolved_solids_are_ions_in_less_solids_out():
    """Caustic adds its sodium; soda ash the same; lime on strong sulfuric acid takes more out than it adds."""
    assert_allclose(side_effects(treated("caustic soda 25 %")).value("dissolved solids added"), 229.9, atol=0.1)
    assert_allclose(side_effects(treated("soda ash")).value("dissolved solids added"), 229.9, atol=0.1)
    limed = side_effects(treated(dose_eq_l=0.2, totals={"sulfate": 0.1}))
    gypsum = limed.value("gypsum") / 172.164
    assert_allclose(limed.value("dissolved solids added"), 1e3 * (0.1 * 40.078 - gypsum * 136.134), rtol=1e-4)
    zinc = side_effects(treated("caustic soda 25 %", totals={"zinc": 1e-3}))
    solid = zinc.value("zinc hydroxide") / 99.396
    assert_allclose(zinc.value("dissolved solids added"), 229.9 - 65.38e3 * solid, atol=0.1)


def test_cautions_follow_reagent_waste_and_effects():
    """Each hangs on what is there, and only then."""
    limed = treated(dose_eq_l=0.2, totals={"sulfate": 0.1, "chromium(III)": 1e-3})
    hangs = {c.hangs_on for c in cautions_of([limed], [side_effects(limed)])}
    assert {"any", "lime", "gypsum", "metals", "chromium"} <= hangs
    assert not {"acid", "sulfide", "hot"} & hangs
    acid = treated("sulfuric acid", start_ph=13.9, end_ph=7.0, dose_eq_l=3.0, totals={"sulfide": 1e-3, "carbon": 0.01})
    hangs = {c.hangs_on for c in cautions_of([acid], [side_effects(acid)])}
    assert {"acid", "H2SO4", "sulfide", "carbon", "hot"} <= hangs
    assert not {"lime", "gypsum", "metals"} & hangs


def test_every_caution_can_appear_and_has_a_source():
    """What a caution hangs on is a group or formula of a product, a total, or an effect of this module."""
    groups = {g for p in ("hydrated lime", "quicklime", "sulfuric acid", "soda ash", "caustic soda 25 %")
              for g in (*find_product(p).groups, find_product(p).formula)}
    known = {"any", "gypsum", "hot", "metals", "chromium", "sulfide", "cyanide", "hypochlorite", "ammonium", "fluoride"}
    rows = read_table("tank_cautions")
    assert {r["hangs_on"] for r in rows} <= groups | known
    assert all(r["mark"] in ("printed", "recalled", "derived", "practice") and r["source"] for r in rows)
    assert [int(r["order"]) for r in rows] == list(range(1, len(rows) + 1))
    assert [c.hangs_on for c in tank_cautions([])] == ["any"] * 3
    assert any("licensed engineer" in c.words for c in tank_cautions([]))


@pytest.mark.parametrize(("given", "message"), [
    ({"dose_eq_l": -0.1}, r"dose_eq_l must be zero or more; found -0\.1"),
    ({"totals": {"sulfate": float("nan")}}, r"sulfate must be zero or more; found nan"),
    ({"flow_m3_h": -1.0}, r"flow_m3_h must be zero or more; found -1"),
    ({"end_ph": 16.0}, r"end_ph must be from -1 to 15; found 16"),
    ({"efficiency": 95.0}, r"efficiency must be above 0 and at most 1; found 95.*0\.95"),
    ({"t_c": 77.0}, r"temperature must be from 0 to 60 °C.*found 77.*°F"),
    ({"product": find_product("calcium chloride")}, r"must be a base or an acid; 'calcium chloride' is neither"),
])
def test_impossible_cases(given, message):
    """Each message says rule, value and remedy."""
    with pytest.raises(InputError, match=message):
        treated(**given)


def test_unknown_names():
    """An effect and a severity that there are none of."""
    found = side_effects(treated())
    with pytest.raises(InputError, match=r"no side effect is called 'foam'; there are dry solids"):
        found.value("foam")
    with pytest.raises(InputError, match=r"severity must be one of note, warning, stop; found 'fatal'"):
        found.of("fatal")

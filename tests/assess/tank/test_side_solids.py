"""Solids of a neutralization against tables, closed forms and mass balances."""

import csv
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import fsolve

from aquabuf.assess.tank.side import Treated, side_effects
from aquabuf.assess.tank.side_solids import (
    calcium_solids,
    gypsum_onset_acid_g_l,
    gypsum_onset_eq_l,
    gypsum_solubility_mol_l,
    metal_left_mol_l,
    solids_kg_m3,
)
from aquabuf.chem.products import find_product
from aquabuf.errors import InputError

PUBLISHED = Path(__file__).parents[2] / "published" / "tank_side.csv"
ROWS = [r for r in csv.DictReader(PUBLISHED.read_text(encoding="utf-8").splitlines()) if r["quantity"].startswith(("gypsum", "sulfate"))]
F100 = 37.78  # 100 °F
H2SO4_G = 98.074


def treated(reagent="hydrated lime", **given):
    """A lime treatment of 10 m3/h, with what is given put in."""
    case = {"flow_m3_h": 10.0, "t_c": 25.0, "start_ph": 2.0, "end_ph": 8.5, "dose_eq_l": 0.01,
            "product": find_product(reagent)}
    return Treated(**case | given)


def limed(acid_g_l, t_c=F100):
    """Lime on so much sulfuric acid."""
    acid = acid_g_l / H2SO4_G
    return treated(t_c=t_c, dose_eq_l=2.0 * acid, totals={"sulfate": acid})


def value_of(row):
    """What the code gives for a row of gypsum."""
    at = float(row["at"] or "nan")
    if row["quantity"] == "gypsum_onset_acid_g_l":
        return gypsum_onset_acid_g_l(F100)
    if row["quantity"] == "gypsum_solubility_mg_l":
        return 1e3 * 136.134 * gypsum_solubility_mol_l(at)
    gypsum = solids_kg_m3(limed(at))["gypsum"]
    return gypsum if row["quantity"] == "gypsum_kg_m3" else 96.056e3 * (at / H2SO4_G - gypsum / 172.164)


@pytest.mark.parametrize("row", ROWS, ids=lambda r: f"{r['quantity']} {r['at']}")
def test_gypsum_matches_its_source(row):
    """Onset 1.513 g/L of acid, 14.9 kg/m3 from 10 g/L, the printed solubilities."""
    assert_allclose(value_of(row), float(row["expected"]), rtol=0, atol=float(row["atol"]))


def test_solubility_between_and_outside_the_points():
    """Straight between 0 and 37.78 °C; nan outside."""
    assert_allclose(gypsum_solubility_mol_l(0.5 * F100) * 136.134e3, 1950.0, atol=1.0)
    assert np.isnan(gypsum_solubility_mol_l([-1.0, 101.0])).all()


def test_gypsum_onset_is_where_the_product_is_reached():
    """Lime in sulfate: d/2 times sulfate is the square of the solubility; with calcium in it and sulfuric acid too."""
    s = float(gypsum_solubility_mol_l(F100))
    assert_allclose(gypsum_onset_eq_l(limed(10.0)), 2.0 * s * s / (10.0 / H2SO4_G), rtol=1e-9)
    onset = gypsum_onset_eq_l(treated("sulfuric acid", start_ph=12.0, end_ph=8.0, t_c=F100, dose_eq_l=0.2,
                                      totals={"calcium": 0.02, "sulfate": 0.001}))
    assert_allclose(0.02 * (0.001 + 0.5 * onset), s * s, rtol=1e-9)
    assert np.isnan(gypsum_onset_eq_l(limed(1.4)))
    assert np.isnan(gypsum_onset_eq_l(treated("caustic soda 25 %")))
    assert gypsum_onset_eq_l(treated(totals={"calcium": 0.05, "sulfate": 0.05})) == 0.0


def test_below_onset_nothing_falls_out_and_near_it_a_warning():
    """1.2 g/L of acid stays below 1.5; it is near enough to scale."""
    found = side_effects(limed(1.2))
    names = [row.name for row in found.rows]
    assert "gypsum" not in names
    assert found.value("gypsum saturation") < 1.0
    assert any("scale where it warms" in row.words for row in found.warnings)
    assert [r for r in side_effects(limed(0.5)).warnings if r.name.startswith("gypsum")] == []


def test_calcium_salts_satisfy_both_products_and_the_balance():
    """A general solver finds the same gypsum and fluorite; a third of fluoride is F-."""
    s, k, free, ca, so4, f = 0.015, 10.0**-10.46, 0.3, 0.05, 0.04, 0.01
    gypsum, fluorite = calcium_solids(ca, so4, f, gypsum_mol_l=s, free_fluoride=free)
    left = ca - gypsum - fluorite
    assert_allclose(left * (so4 - gypsum), s * s, rtol=1e-9)
    assert_allclose(left * (free * (f - 2.0 * fluorite)) ** 2, k, rtol=1e-6)
    found = fsolve(lambda x: [(ca - x[0] - x[1]) * (so4 - x[0]) / s**2 - 1.0,
                              np.log((ca - x[0] - x[1]) * (free * max(f - 2.0 * x[1], 1e-9)) ** 2 / k)], [0.03, 0.0049])
    assert_allclose((gypsum, fluorite), found, rtol=1e-6)
    assert calcium_solids(0.0, 1.0, 1.0, gypsum_mol_l=s) == (0.0, 0.0)


def test_fluoride_left_by_its_product():
    """Lime in a fluoride waste: F- is the root of Ksp over the calcium left; caustic leaves it all and warns."""
    found = side_effects(treated(dose_eq_l=0.1, totals={"fluoride": 0.05}))
    left = found.value("fluoride left") / 18.998e3
    calcium = 0.05 - 0.5 * (0.05 - left)
    assert_allclose(left, np.sqrt(10.0**-10.46 / calcium), rtol=1e-4)
    assert_allclose(found.value("calcium fluoride"), 0.5 * (0.05 - left) * 78.074, rtol=1e-4)
    found = side_effects(treated("caustic soda 25 %", dose_eq_l=0.1, totals={"fluoride": 0.05}))
    assert_allclose(found.value("fluoride left"), 0.05 * 18.998e3, rtol=1e-9)
    assert "fluoride left" in [row.name for row in found.warnings]


def test_hydroxides_balance_and_follow_their_mass():
    """Metal in solid and solution is what came; dry iron hydroxide 1.914 times iron, 90 % of 10 mmol/L nickel at 8.5."""
    totals = {"iron(III)": 0.002, "nickel": 0.01}
    case = treated(totals=totals)
    left = metal_left_mol_l(case)
    oh = 10.0 ** (8.5 - case.pkw)
    assert_allclose(left["nickel"], 10.0**-14.7 / oh**2 + 10.0**-2.7 * oh, rtol=1e-9)
    dry = side_effects(case)
    assert_allclose(dry.value("iron(III) hydroxide"), 1.914 * (0.002 - left["iron(III)"]) * 55.845, rtol=3e-4)
    assert_allclose(dry.value("nickel hydroxide") / 1.580 + 58.693 * left["nickel"], 0.01 * 58.693, rtol=3e-4)
    assert "nickel left" in [row.name for row in dry.warnings]
    assert all(row.name != "iron(III) left" for row in dry.warnings)


def test_metal_that_never_saturates_stays_dissolved():
    """At pH 5 all of the nickel is in solution, and none in the sludge."""
    found = side_effects(treated(end_ph=5.0, totals={"nickel": 0.001}))
    assert_allclose(found.value("nickel left"), 58.693, rtol=1e-9)
    assert found.value("nickel hydroxide") == 0.0
    assert found.value("dry solids") == 0.0


def test_metals_of_the_reagent_count():
    """Magnesium hydroxide past pH 11 is partly solid again."""
    found = side_effects(treated("magnesium hydroxide", end_ph=11.0, dose_eq_l=0.1))
    oh = 10.0 ** (11.0 - treated().pkw)
    assert_allclose(found.value("magnesium hydroxide"), (0.05 - 10.0**-11.25 / oh**2) * 58.319, rtol=1e-3)


def test_metals_that_clash_are_named():
    """Chromium and cadmium: a warning in words; the tables that disagree are told."""
    found = side_effects(treated(totals={"chromium(III)": 1e-3, "cadmium": 1e-3}))
    clash = next(row for row in found.warnings if row.name == "one pH for all metals")
    assert "cadmium at least 10.5 and chromium(III) at most 9.0" in clash.words
    assert "chromium(III) window" in [row.name for row in found.rows]


def test_sludge_adds_up():
    """Parts make the total; per day by flow; wet by the share of solids; 8 % of lime that does not react is sludge."""
    case = treated(totals={"sulfate": 0.1, "zinc": 0.001}, dose_eq_l=0.2, solids_g_l=0.3, efficiency=0.92)
    parts, found = solids_kg_m3(case), side_effects(case, sludge_share=0.05)
    assert_allclose(parts["unreacted reagent"], 0.1 * 74.092 * (1.0 / 0.92 - 1.0), rtol=1e-4)
    assert parts["solids of the waste"] == 0.3
    assert_allclose(found.value("dry solids"), sum(parts.values()), rtol=1e-12)
    assert_allclose(found.value("dry solids per day"), 240.0 * sum(parts.values()), rtol=1e-12)
    assert_allclose(found.value("wet sludge"), 240.0 * sum(parts.values()) / 50.0, rtol=1e-12)
    assert solids_kg_m3(treated("caustic soda 25 %", efficiency=0.9))["unreacted reagent"] == 0.0


def test_sludge_share_must_be_a_share():
    """2 for 2 % is refused."""
    with pytest.raises(InputError, match=r"share of solids in sludge must be above 0 and below 1; found 2.*0\.02"):
        side_effects(treated(), sludge_share=2.0)


def test_tables_of_analysts_are_compared_at_25_degrees():
    """Manganese agrees with its table at 25 °C; in a cold waste no disagreement is made up."""
    cold = side_effects(treated(t_c=5.0, totals={"manganese(II)": 1e-3}))
    assert "manganese(II) window" not in [row.name for row in cold.rows]

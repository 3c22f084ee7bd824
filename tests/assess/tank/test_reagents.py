"""Reagents against printed basicities, normalities and worked end points; the table against itself and the product list."""

import numpy as np
import pytest
from ideal_wastes import NOTHING, PK_CARBONIC, ideal, reagent, stocked
from numpy.testing import assert_allclose

from aquabuf.assess.plant.feed import MadeUp
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.tank.reagents import (
    ACID,
    ANY_OTHER,
    BASE,
    dissolved_share,
    effective_share,
    end_ph_in,
    eq_per_kg,
    reagent_of,
    rules_of,
)
from aquabuf.chem.products import own_product, products
from aquabuf.engine.conditions import conditions
from aquabuf.errors import InputError
from aquabuf.tables import read_table

WATER = ideal(NOTHING)
CARBON = 1
ROWS = read_table("tank_reagents")
LB_T = 2000.0  # pounds of acid


# equivalents


@pytest.mark.parametrize(("name", "strength", "sulfuric", "hydrochloric"), [
    ("caustic soda", 1.0, 1630, 2190), ("soda ash", 1.0, 2160, 2900), ("magnesium hydroxide", 1.0, 1190, 1600),
    ("quicklime", 0.922, 1240, 1670)])
def test_alkali_for_2000_lb_of_acid(name, strength, sulfuric, hydrochloric):
    """Printed in a lime trade fact sheet, which takes CaO at 92.2 %; figures rounded to 10 lb."""
    for acid, printed in (("sulfuric acid", sulfuric), ("hydrochloric acid", hydrochloric)):
        pounds = LB_T * eq_per_kg(stocked(acid)) / eq_per_kg(stocked(name, strength))
        assert_allclose(pounds, printed, rtol=0.003)


@pytest.mark.parametrize(("name", "g_eq"), [
    ("quicklime", 28.038), ("hydrated lime", 37.047), ("magnesium oxide", 20.152), ("magnesium hydroxide", 29.160),
    ("caustic soda", 39.997), ("caustic potash", 56.106), ("soda ash", 52.994), ("sodium bicarbonate", 84.007),
    ("limestone", 50.044), ("ammonia", 17.031), ("sulfuric acid", 49.039), ("hydrochloric acid", 36.461),
    ("nitric acid", 63.013), ("carbon dioxide", 44.009)])
def test_equivalent_weights(name, g_eq):
    """Standard atomic weights, worked apart (abridged ones of S and Cl differ by 0.006); carbon dioxide by its bicarbonate."""
    assert_allclose(1e3 / eq_per_kg(stocked(name)), g_eq, atol=0.004)


@pytest.mark.parametrize(("name", "strength", "normality"), [
    ("caustic soda 50 %", 0.50, 19.1), ("caustic soda 25 %", 0.25, 8.0), ("sulfuric acid 93 %", 0.93, 34.8),
    ("sulfuric acid", 0.98, 36.8), ("hydrochloric acid", 0.37, 12.0), ("hydrated lime", 1.0, 2.9),
    ("magnesium hydroxide", 0.60, 30.9)])
def test_normality_of_what_is_fed(name, strength, normality):
    """Worked figures with densities from memory; lime as the usual slurry of 10 %."""
    assert_allclose(reagent(name, strength).fed_eq_l, normality, rtol=0.015)


def test_lime_for_a_mine_water():
    """313.2 mg/L of acidity: Ca(OH)2 231.9 mg/L pure, 257.6 at 90 %, NaOH 250.3 (worked figures)."""
    eq_l = 313.22e-3 / 50.0435
    lime = reagent_of(stocked("hydrated lime"), efficiency=0.9)

    assert_allclose(1e6 * eq_l * reagent("hydrated lime").kg_per_eq, 231.9, rtol=1e-3)
    assert_allclose(1e6 * eq_l * lime.kg_per_eq, 257.6, rtol=1e-3)
    assert_allclose(1e6 * eq_l * reagent("caustic soda", density_kg_l=1.0).kg_per_eq, 250.3, rtol=1e-3)


def test_lime_of_a_textbook():
    """199 mg/L as CaCO3 with lime of 90 %: 124 mg/L CaO (printed, Davis p. 7-19, which has 50 and 28 as weights)."""
    assert_allclose(199e-3 / 50.0435 * 1e6 / eq_per_kg(stocked("quicklime", 0.9)), 124.0, rtol=0.003)


def test_the_drum_of_slurry_that_could_not_do_it():
    """400 gal of 60 % slurry at 1.5 kg/L hold 46.7 keq (worked), 73 % of what the acid of that case study asks for."""
    keq = 400 * 3.785411784 * reagent("magnesium hydroxide", 0.6).fed_eq_l / 1e3

    assert_allclose(keq, 46.7, atol=0.1)
    assert_allclose(keq / 63.9, 0.73, atol=0.005)


def test_efficiency_counts_in_mass_volume_and_cost():
    """Half of it reacts: twice the mass, half the normality, twice the cost."""
    whole, half = (reagent_of(stocked("caustic soda 50 %", 0.5, price_per_kg=0.4), efficiency=e) for e in (1.0, 0.5))

    assert_allclose([half.kg_per_eq, half.cost_per_eq], [2 * whole.kg_per_eq, 2 * whole.cost_per_eq], rtol=1e-12)
    assert_allclose(half.reacting_eq_l, 0.5 * whole.reacting_eq_l, rtol=1e-12)
    assert_allclose(whole.cost_per_eq, 0.4 * 39.997e-3 / 0.5, rtol=1e-4)


def test_how_it_is_fed():
    """A slurry of our own, a dry solid, a gas: dry and gas bring no water."""
    own = reagent_of(stocked("hydrated lime", 0.9), made_up=MadeUp(fraction=0.05, density_kg_l=1.03))

    assert_allclose(own.fed_eq_l, 0.9 * 0.05 * 1.03 * 1e3 / 37.047, rtol=1e-4)
    assert reagent("hydrated lime", dry=True).fed_eq_l == np.inf
    assert reagent("limestone").fed_as == "dry"
    assert (reagent("carbon dioxide").fed_eq_l, reagent("carbon dioxide").kind) == (np.inf, ACID)
    assert (own.kind, own.dissolution_per_min) == (BASE, 0.23)


# what counts at an end pH


def test_soda_ash_does_not_give_two_equivalents():
    """Closed to the air at pH 7: one less the bicarbonate over two; with its CO2 stripped, all of it."""
    h, (k1, k2) = 1e-7, (10.0**-pk for pk in PK_CARBONIC)
    lost = (k1 * h + 2 * k1 * k2) / (h * h + k1 * h + k1 * k2)
    soda = reagent("soda ash", 0.98)

    assert_allclose(effective_share(WATER, soda, 7.0, CARBON), 1.0 - 0.5 * lost, atol=1e-5)
    assert_allclose(effective_share(WATER, soda, 7.0, CARBON, stripped=1.0), 1.0, atol=1e-12)


def test_bicarbonate_counts_nothing_at_its_own_ph():
    """Half of both pK: one proton lost, so that nothing is left to give."""
    assert_allclose(effective_share(WATER, reagent("sodium bicarbonate"), 0.5 * sum(PK_CARBONIC), CARBON), 0.0, atol=1e-4)


@pytest.mark.parametrize(("ph", "share"), [(6.352, 0.5), (8.34, 1.0), (10.329, 1.5)])
def test_carbon_dioxide_as_an_acid(ph, share):
    """Half of it is bicarbonate at pK1, all at 8.34, half carbonate at pK2."""
    assert_allclose(effective_share(WATER, reagent("carbon dioxide"), ph, CARBON), share, atol=2e-4)


def test_strong_reagents_count_whole_at_every_ph():
    """And need no carrier of carbon."""
    assert_allclose(effective_share(WATER, reagent("caustic soda 50 %", 0.5), [5.0, 9.0, np.nan]), [1.0, 1.0, np.nan])
    assert_allclose(effective_share(WATER, reagent("sulfuric acid 93 %", 0.93), [5.0, 9.0]), 1.0)


# speed


def test_magnesium_hydroxide_in_a_beaker():
    """43.8 mmol/min per mol, first order: half after 16 min, 90 % after 53 (worked); many small tanks act as a beaker."""
    k = reagent("magnesium hydroxide", 0.6).dissolution_per_min

    assert_allclose([np.log(2) / k, np.log(10) / k], [16.0, 53.0], atol=0.5)
    assert_allclose(dissolved_share(k, [np.log(2) / k, np.log(10) / k], 100_000), [0.5, 0.9], atol=1e-4)


def test_one_stirred_tank_leaves_more_behind():
    """k t / (1 + k t), the balance of one tank; what dissolves at once leaves nothing."""
    assert_allclose(dissolved_share(0.1, [10.0, 90.0]), [0.5, 0.9], rtol=1e-12)
    assert_allclose(dissolved_share(None, [10.0, np.nan]), [1.0, np.nan])


@pytest.mark.parametrize(("name", "low", "usual", "high"), [
    ("hydrated lime", 5, 30, 30), ("caustic soda 50 %", 5, 10, 20), ("magnesium hydroxide", 20, 60, 60),
    ("limestone", 4, 40, 40), ("sulfuric acid", 5, 10, 20)])
def test_residence_times_keep_all_rules(name, low, usual, high):
    """Handbook, makers' pages, paper: least and most of all, and one that is taken with its source."""
    span = reagent(name, products()[name].strength or 0.5, density_kg_l=1.5).residence_min

    assert (span.low, span.usual, span.high) == (low, usual, high)
    assert len(span.source) > 10


def test_rules_that_disagree_stand_side_by_side():
    """Load of a limestone bed: 1.3 to 2.2 gpm/ft2 in the handbook, below 1 in the manual; both in m/h."""
    m_h = 3.785411784e-3 * 60.0 / 0.09290304
    found = [r for r in rules_of("limestone") if r.quantity == "bed_load_m_h"]

    assert_allclose([found[0].low, found[0].high, found[1].high], np.array([1.3, 2.2, 1.0]) * m_h, rtol=0.002)
    assert found[0].source != found[1].source


# where it ends


def test_end_in_a_waste_by_kind():
    """Limestone by CO2, magnesia and lime by their solubility or practice, soluble reagents nowhere."""
    c = conditions(25.0)

    assert_allclose(end_ph_in(reagent("limestone"), 0.05, c), 5.61, atol=0.02)
    assert_allclose(end_ph_in(reagent("magnesium hydroxide", 0.6), [0.0, 0.5], c), [9.0, 8.72], atol=0.07)  # sqrt(2 Ksp / A)
    assert_allclose(end_ph_in(reagent("hydrated lime"), 0.0, c), 12.45, atol=1e-9)  # measured, below the ideal 12.6
    assert end_ph_in(reagent("caustic soda 50 %", 0.5), 0.05, c) is None


# the table


def test_every_row_names_products_and_source():
    """Names are those of the product list, figures rise, each row has a mark and a source or says that there is none."""
    for row in ROWS:
        assert set(row["products"].split(";")) <= {*products(), ANY_OTHER}, row
        assert row["mark"] in {"printed", "recalled", "derived", "practice"}
        assert len(row["source"]) > 8
        figures = [float(row[cell]) for cell in ("low", "usual", "high") if row[cell]]
        assert figures == sorted(figures)
        assert bool(figures) == bool(row["unit"])


def test_every_reagent_has_one_figure_for_design_and_words():
    """Efficiency and residence time are taken from exactly one row; hazard and limit are told."""
    names = {name for row in ROWS for name in row["products"].split(";")} - {ANY_OTHER}
    for name in names:
        for quantity in ("efficiency", "residence_min"):
            taken = [r for r in rules_of(name) if r.quantity == quantity and np.isfinite(r.usual)]
            assert len(taken) == 1, (name, quantity)
        made = reagent_of(stocked(name, 0.5, density_kg_l=1.3))
        assert made.hazards, name
        assert made.limited_by or name == "magnesium oxide", name
        assert 0.0 < made.efficiency <= 1.0


def test_a_product_of_the_users_own():
    """A spent caustic: rules of any other reagent."""
    spent = own_product("spent caustic", formula="NaOH", ions={"sodium": 1.0}, strength=0.08, density_kg_l=1.08)
    made = reagent_of(Stocked(name="spent", product=spent, strength=0.08, density_kg_l=1.08))

    assert (made.kind, made.residence_min.usual) == (BASE, 10.0)
    assert_allclose(made.fed_eq_l, 0.08 * 1080 / 39.997, rtol=1e-4)


# refusals


def test_a_salt_is_no_reagent():
    """Gypsum."""
    with pytest.raises(InputError, match=r"must be a base or an acid; 'gypsum' changes neither .* Name another product"):
        reagent("gypsum")


@pytest.mark.parametrize("name", ["ammonia", "phosphoric acid"])
def test_weak_acids_and_bases_are_refused(name):
    """They shift the curve of the waste, which the tables do not follow."""
    with pytest.raises(InputError, match=r"no weak acid but carbonic; '.*' brings (ammonium|phosphate), .* Take a strong"):
        reagent(name, 0.5)


@pytest.mark.parametrize("efficiency", [0.0, 92.0, np.nan])
def test_efficiency_is_a_share(efficiency):
    """Percent typed as such."""
    with pytest.raises(InputError, match=r"efficiency of 'hydrated lime' must be above 0 .* Give 95 % as 0\.95"):
        reagent_of(stocked("hydrated lime", 0.9), efficiency=efficiency)


def test_a_liquid_without_density():
    """Nitric acid of 60 %, which no table has."""
    with pytest.raises(InputError, match=r"liquid reagent needs its density .* 'nitric acid' at 60 %\. Take its density"):
        reagent("nitric acid", 0.6)


def test_carbon_needs_a_carrier():
    """Soda ash in tables without one."""
    with pytest.raises(InputError, match=r"'soda ash' brings inorganic carbon, which needs a carrier .* Give carbon_carrier"):
        effective_share(WATER, reagent("soda ash"), 7.0)

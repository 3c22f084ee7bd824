"""Liming against published and hand-worked figures, a second working-out of the chemistry, and mass balances."""

from types import SimpleNamespace

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from numpy.testing import assert_allclose, assert_array_equal
from published_rows import MARKS, read_rows
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from aquabuf.assess.lake.liming import (
    DEMANDS,
    HARMFUL_ALUMINATE_UG_L,
    after_liming,
    anc_after,
    anc_for_carbonate,
    anc_for_ph,
    anc_needed,
    lime_dose,
    lime_products,
    over_liming_words,
    product_g_m3,
    product_kg,
    reacidification_words,
    reacidification_yr,
)
from aquabuf.chem.organic import organic_models
from aquabuf.engine.conditions import conditions
from aquabuf.engine.lake import LakeBalance
from aquabuf.tables import read_table
from aquabuf.units import substances

ROWS = read_rows("liming")
PRODUCTS = lime_products()
CACO3 = PRODUCTS["limestone"]
STRENGTH = 2e-4
HAND = BareWater(10.0, STRENGTH)
AIR = np.full((1, 1), 2.0e-5)  # CO2 in the water at equilibrium with air, mol/L


def balance(doc=0.0, aluminum=0.0, lakes=1):
    """Charge balance at 10 °C with DOC in mg/L and aluminum in mol/L."""
    c = conditions(np.full((lakes, 1), 10.0), 0.0, STRENGTH)
    return LakeBalance(c, np.full((lakes, 1), doc), np.full((lakes, 1), aluminum), organic_models()["hruska"])


def eq(ueq):
    """µeq/L as an array of one lake, in eq/L."""
    return np.full((1, 1), ueq * 1e-6)


def hruska(ph):
    """Charge of Hruska's acid per mg of carbon, by mass action. [eq/mg]"""
    w = np.cumprod([1.0, *(10.0 ** (ph - p) for p in (3.04, 4.51, 6.46))])
    return 10.2e-6 * (w @ np.arange(4)) / w.sum() / 3.0


def aluminum(ph):
    """Charge of dissolved aluminum, by mass action over its hydroxides. [-]"""
    b = np.array([1.0, *(10.0 ** (log + n * ph) for n, log in enumerate((-5.00, -10.1, -16.9, -22.7), start=1))])
    return (b @ np.array([3.0, 2.0, 1.0, 0.0, -1.0])) / b.sum()


# ---------------------------------------------------------------- published and worked figures


def computed(row):
    """What the code makes of a row of the published table, in its unit."""
    a = {k: float(v) for k, v in (pair.split("=") for pair in row["arguments"].split(";") if pair)}
    if row["quantity"] == "neutralizing_value_pct":
        return PRODUCTS[row["case"]].neutralizing_value_pct
    if row["quantity"] in ("g_m3", "t"):
        grams = product_g_m3(a["dose_ueq_l"] * 1e-6, CACO3, a["dissolved"])
        return grams if row["quantity"] == "g_m3" else 1e-3 * product_kg(grams, a["volume_m3"])
    order = {"reacidification_yr": ("start", "inflow", "threshold", "tau"), "anc_after": ("start", "inflow", "tau", "years"),
             "anc_needed": ("threshold", "inflow", "tau", "years")}[row["quantity"]]
    function = {"reacidification_yr": reacidification_yr, "anc_after": anc_after, "anc_needed": anc_needed}[row["quantity"]]
    return function(*(a[name] for name in order))


@pytest.mark.parametrize("row", ROWS, ids=lambda r: f"{r['quantity']} {r['case']} {r['expected']}")
def test_published_figures(row):
    """Each row of `tests/published/liming.csv`."""
    assert row["mark"] in MARKS
    assert_allclose(computed(row), float(row["expected"]), rtol=0, atol=float(row["atol"]))


# ---------------------------------------------------------------- products


def test_every_product_has_a_published_neutralizing_value():
    """A product that nobody checked cannot be shipped."""
    assert {r["case"] for r in ROWS if r["quantity"] == "neutralizing_value_pct"} == set(PRODUCTS)


@pytest.mark.parametrize("product", PRODUCTS.values(), ids=PRODUCTS)
def test_products_are_neutral_and_say_what_they_are(product):
    """Charge of the cations equals acid bound; the formula holds them; shares rise; words, hazard and source stand."""
    cations = {ion: product.pure.adds.get(ion, 0.0) for ion in ("calcium", "magnesium", "sodium")}
    assert sum(count * substances()[ion].charge for ion, count in cations.items()) == product.eq_per_mol > 0
    assert [ion for ion, count in cations.items() if (count > 0) != (substances()[ion].formula in product.formula)] == []
    assert (product.carbon_mol_per_eq > 0) == ("CO3" in product.formula)
    assert_allclose(sum(product.cation_per_eq(ion) for ion in ("calcium", "magnesium", "sodium")), 1.0, rtol=1e-12)
    assert 0.0 < product.dissolved_low <= product.dissolved_usual <= product.dissolved_high <= 1.0
    assert list(product.shares.values()) == [product.dissolved_usual, product.dissolved_low, product.dissolved_high]
    assert min(len(product.words), len(product.hazard), len(product.source)) > 10


def test_recalled_shares_say_so():
    """What is from memory is marked in the source that a report shows."""
    marks = {r["name"]: r["mark"] for r in read_table("lime_products")}
    assert set(marks.values()) <= {"recalled", "practice", "printed", "derived"}
    assert {n for n, m in marks.items() if m == "recalled"} == {n for n, p in PRODUCTS.items() if p.source.endswith("(recalled)")}
    assert CACO3.shares == {"usual": 0.7, "low": 0.6, "high": 0.8}


@pytest.mark.parametrize(("name", "carbon", "calcium", "magnesium", "sodium"), [
    ("limestone", 0.5, 1.0, 0.0, 0.0), ("hydrated lime", 0.0, 1.0, 0.0, 0.0), ("sodium bicarbonate", 1.0, 0.0, 0.0, 1.0),
    ("soda ash", 0.5, 0.0, 0.0, 1.0), ("dolomite", 0.5, 0.5, 0.5, 0.0), ("half-burnt dolomite", 0.25, 0.5, 0.5, 0.0),
    ("magnesium oxide", 0.0, 0.0, 1.0, 0.0), ("quicklime", 0.0, 1.0, 0.0, 0.0), ("magnesium carbonate", 0.5, 0.0, 1.0, 0.0)])
def test_what_each_equivalent_brings(name, carbon, calcium, magnesium, sodium):
    """Carbon [mol] and cations [eq] per equivalent, from the formulas."""
    product = PRODUCTS[name]
    found = [product.carbon_mol_per_eq, *(product.cation_per_eq(ion) for ion in ("calcium", "magnesium", "sodium"))]
    assert_allclose(found, [carbon, calcium, magnesium, sodium], rtol=1e-12)


def test_product_by_dissolved_share_and_own_analysis():
    """Half dissolved takes twice as much; a product of 90 % neutralizing value a ninth more than a pure one."""
    dose = 1e-4
    pure = product_g_m3(dose, CACO3, [1.0, 0.5, 1.0], [100.0, 100.0, 90.0])
    assert_allclose(pure, 5.0043 * np.array([1.0, 2.0, 1.0 / 0.9]), rtol=1e-12)
    assert_allclose(product_g_m3(dose, PRODUCTS["hydrated lime"], 1.0), 100.0 * 74.093 / 2.0 * 1e-3, rtol=1e-4)
    assert_allclose(product_kg(6.0, 0.762 * 1.5e6), 6858.0, rtol=1e-12)  # a yearly inflow: runoff times catchment


# ---------------------------------------------------------------- dose


def test_dose_is_what_the_target_lacks():
    """Charge balance: each equivalent of base raises ANC by one, whatever takes it up; nothing where it is met."""
    found = lime_dose(balance(8.0, 5e-6, lakes=3), np.array([[-3e-5], [2e-5], [1.2e-4]]), np.full((3, 1), 3e-5), 1e-4, AIR)
    assert_allclose(found.dose_eq_l[:, 0], [1.3e-4, 8e-5, 0.0], rtol=1e-12)
    assert all(part[2, 0] == 0.0 for part in found.demand_eq_l.values())


@pytest.mark.parametrize(("doc", "al"), [(0.0, 0.0), (8.0, 0.0), (0.0, 1e-5), (12.0, 8e-6)])
def test_demands_add_up_and_are_those_of_mass_action(doc, al):
    """Acid, aluminum, organic acids and carbonate, each by hand at the pH before and after; their sum is the dose."""
    anc, dic = eq(-40.0), np.full((1, 1), 4e-5)
    found = lime_dose(balance(doc, al), anc, dic, 1e-4, AIR)
    assert list(found.demand_eq_l) == list(DEMANDS)
    assert_allclose(sum(found.demand_eq_l.values()), found.dose_eq_l, rtol=0, atol=1e-11)
    before, after = found.ph_before[0, 0], found.ph_target[0, 0]
    free = HAND.c_h * (10.0**-before - 10.0**-after) + HAND.c_oh * (10.0**after - 10.0**before)
    expected = {"acid": free, "aluminum": al * (aluminum(before) - aluminum(after)),
                "organic": doc * (hruska(after) - hruska(before))}
    for name, value in expected.items():
        assert_allclose(found.demand_eq_l[name], value, rtol=0, atol=3e-8, err_msg=name)
    alkalinity_gained = HAND.alkalinity_at_co2(after, AIR[0, 0]) - HAND.alkalinity(before, dic[0, 0])
    assert_allclose(found.demand_eq_l["carbonate"], alkalinity_gained - free, rtol=0, atol=3e-8)


def test_target_as_ph():
    """pH 6.3 open to air: the ANC by hand is carbonate, hydroxide less H+, organic anions less aluminum."""
    found = anc_for_ph(balance(6.0, 4e-6), 6.3, AIR)
    by_hand = HAND.alkalinity_at_co2(6.3, AIR[0, 0]) + 6.0 * hruska(6.3) - 4e-6 * aluminum(6.3)
    assert_allclose(found, by_hand, rtol=1e-3)
    dose = lime_dose(balance(6.0, 4e-6), eq(-30.0), np.full((1, 1), 4e-5), found, AIR)
    assert_allclose(dose.ph_target, 6.3, rtol=0, atol=1e-6)


def test_target_as_carbonate_anc():
    """100 µeq/L of carbonate at air: organic acids and aluminum come on top; in clear water nothing does."""
    ph = brentq(lambda x: HAND.alkalinity_at_co2(x, AIR[0, 0]) - 1e-4, 5.0, 9.0, xtol=1e-12)
    found = anc_for_carbonate(balance(6.0, 4e-6), 1e-4, AIR)
    assert_allclose(found, 1e-4 + 6.0 * hruska(ph) - 4e-6 * aluminum(ph), rtol=2e-4)
    assert_allclose(anc_for_carbonate(balance(), 1e-4, AIR), 1e-4, rtol=1e-9)


def test_dose_of_draws():
    """(lakes, 1) with (lakes, draws): each cell as alone, a gap in its row only; unknown carbon leaves the dose."""
    rng = np.random.default_rng(3)
    anc = rng.uniform(-5e-5, 5e-5, (3, 20))
    anc[1, :] = np.nan
    dic = np.array([[4e-5], [4e-5], [np.nan]])
    found = lime_dose(balance(5.0, 1e-6, lakes=3), anc, dic, 1e-4, AIR)
    assert found.dose_eq_l.shape == found.ph_before.shape == (3, 20)
    assert np.isnan(found.dose_eq_l[1]).all()
    assert np.isfinite(found.dose_eq_l[2]).all()
    assert np.isnan(found.demand_eq_l["organic"][2]).all()
    alone = lime_dose(balance(5.0, 1e-6), anc[:1, 7:8], dic[:1], 1e-4, AIR)
    assert_allclose(found.demand_eq_l["organic"][0, 7], alone.demand_eq_l["organic"][0, 0], rtol=1e-9)


# ---------------------------------------------------------------- first days


@pytest.mark.parametrize(("name", "per_eq", "atol"), [
    ("limestone", 0.5, 3e-4), ("hydrated lime", 0.0, 5e-3), ("sodium bicarbonate", 1.0, 3e-4)])
def test_first_days_by_a_second_working_out(name, per_eq, atol):
    """Closed with the carbon of water and product, then open; pKw of the printed handbook is 0.004 off the engine's."""
    found = after_liming(balance(), eq(-20.0), np.full((1, 1), 5e-5), 1.2e-4, PRODUCTS[name], AIR)
    carbon = 5e-5 + per_eq * 1.2e-4
    assert_allclose(found.dic_mol_l, carbon, rtol=1e-12)
    assert_allclose(found.anc_eq_l, 1e-4, rtol=1e-12)
    assert_allclose(found.ph_closed, HAND.ph(1e-4, carbon), rtol=0, atol=atol)
    assert_allclose(found.ph_open, HAND.ph_at_co2(1e-4, AIR[0, 0]), rtol=0, atol=3e-4)


def test_products_end_alike_at_air_but_not_in_the_first_days():
    """The more carbon a product brings the lower the pH of the first days; air makes them equal."""
    found = {n: after_liming(balance(3.0, 1e-6), eq(-20.0), np.full((1, 1), 5e-5), 1.2e-4, PRODUCTS[n], AIR)
             for n in ("sodium bicarbonate", "limestone", "half-burnt dolomite", "hydrated lime")}
    assert len({float(a.ph_open[0, 0]) for a in found.values()}) == 1
    assert (np.diff([a.ph_closed[0, 0] for a in found.values()]) > 0.2).all()


def test_half_burnt_dolomite_above_30_mg_per_liter_passes_ph_9():
    """Erstad et al. 2001: above 30 mg/L the river passed pH 9. Here with all of it dissolved, in soft water."""
    dose = 30e-3 / PRODUCTS["half-burnt dolomite"].g_per_eq
    found = after_liming(balance(3.0, 5e-6), eq(10.0), np.full((1, 1), 1e-4), dose, PRODUCTS["half-burnt dolomite"], AIR)
    assert (found.ph_closed > 9.0).all()
    assert (found.aluminate_ug_l > HARMFUL_ALUMINATE_UG_L).all()
    assert (found.aluminate_ug_l <= 5.0 * 26.982).all()


def test_aluminate_is_a_floor_below_the_anionic_share():
    """Al(OH)4- by mass action is at least that; none while aluminum is a cation."""
    dose = np.array([[1e-5, 6e-5, 1.2e-4, 4e-4]])
    found = after_liming(balance(0.0, 2e-6), eq(-10.0), np.full((1, 1), 6e-5), dose, PRODUCTS["hydrated lime"], AIR)
    ph = found.ph_closed[0]
    anion = [10.0 ** (-22.7 + 4 * p) / sum(10.0 ** (log + n * p) for n, log in enumerate((0, -5.00, -10.1, -16.9, -22.7)))
             for p in ph]
    floor = found.aluminate_ug_l[0] / (2.0 * 26.982)
    assert (floor <= np.array(anion)).all()
    assert floor[0] == 0.0
    assert_allclose(floor[3], anion[3], rtol=0.01)


def test_words_of_over_liming():
    """Limit, cause by the kind of product, aluminum; nothing where pH is below or not known."""
    ph, aluminate = np.array([9.0, 9.1, 9.1, np.nan]), np.array([500.0, 50.0, 500.0, np.nan])
    quick = over_liming_words(ph, aluminate, 9.0, PRODUCTS["hydrated lime"]).tolist()
    first = "pH above 9 in the first days: hydrated lime brings its base faster than air brings carbon dioxide"
    assert quick == ["", first, f"{first}; more than 100 µg/L of aluminum would be anionic, which harms fish", ""]
    slow = over_liming_words(ph, aluminate, 8.5, CACO3).tolist()
    assert slow[1] == "pH above 8.5 in the first days: the dose is large for the carbon in the water"
    assert slow[0] != ""


# ---------------------------------------------------------------- re-acidification


def test_flushing_by_integration():
    """dC/dt = (Cin - C)/tau, integrated by a general library."""
    run = solve_ivp(lambda t, c: (-21.7 - c) / 0.578, (0.0, 3.0), [100.0], rtol=1e-10, atol=1e-10, t_eval=[0.3, 1.0, 3.0])
    assert_allclose(anc_after(100.0, -21.7, 0.578, run.t), run.y[0], rtol=1e-7)


def test_time_and_needed_anc_are_the_flushing_turned_around():
    """Round trip, beside the closed forms of the published table."""
    start = np.array([30.0, 100.0, 400.0])
    years = reacidification_yr(start, -21.7, 20.0, 0.578)
    assert_allclose(anc_after(start, -21.7, 0.578, years), 20.0, rtol=1e-12)
    assert_allclose(anc_needed(20.0, -21.7, 0.578, years), start, rtol=1e-12)
    assert_allclose(reacidification_yr(start * 1e-6, -21.7e-6, 20e-6, 0.578), years, rtol=1e-12)  # any unit of ANC


CASES = [  # start, inflow, threshold, tau, years
    (20.0, -20.0, 20.0, 1.0, 0.0), (10.0, -20.0, 20.0, 1.0, 0.0), (10.0, 40.0, 20.0, 1.0, 0.0), (150.0, 20.0, 20.0, 1.0, np.inf),
    (150.0, 30.0, 20.0, 1.0, np.inf), (150.0, -20.0, 20.0, 0.0, np.nan), (np.nan, -20.0, 20.0, 1.0, np.nan),
    (150.0, np.nan, 20.0, 1.0, np.nan), (150.0, -20.0, 20.0, np.nan, np.nan)]


def test_time_where_there_is_no_plain_answer():
    """At or below the threshold: 0; inflow at or above it: never; a gap: nan. Words say so."""
    start, inflow, threshold, tau, expected = np.array(CASES).T
    found = reacidification_yr(start, inflow, threshold, tau)
    assert_array_equal(found, expected)
    words = reacidification_words(np.append(found, 0.62)).tolist()
    assert words == [*["at or below the limit from the start"] * 3,
                     *["never by flushing: the inflow stays at or above the limit"] * 2, *["cannot be told"] * 4, ""]


def test_needed_anc_is_never_below_the_threshold():
    """Where the inflow holds the lake up, the threshold itself is enough; a gap stays one; a lifetime overflows to inf."""
    found = anc_needed(20.0, [20.0, 50.0, np.nan, -20.0, -20.0], [1.0, 1.0, 1.0, np.nan, 1e-3], [3.0, 3.0, 3.0, 3.0, 3.0])
    assert_array_equal(found, [20.0, 20.0, np.nan, np.nan, np.inf])


def test_times_of_draws():
    """(lakes, draws): a row does not see the others."""
    draws = SimpleNamespace(start=np.full((2, 5), 150.0), inflow=np.array([[-20.0], [30.0]]) + np.zeros((2, 5)))
    found = reacidification_yr(draws.start, draws.inflow, 20.0, np.array([[2.0], [2.0]]))
    assert_allclose(found[0], 2.0 * np.log(170.0 / 40.0), rtol=1e-12)
    assert np.isinf(found[1]).all()

"""Doses to targets against a 40-digit solver, published examples, hand stoichiometry and brute-force scans."""

import carbonate_reference as reference
import mpmath as mp
import numpy as np
import pytest
from made_streams import IONS, MG_CACO3, random_streams, soft, stream, target
from numpy.testing import assert_allclose

from aquabuf.assess.plant.dose import (
    NEGATIVE,
    NO_EFFECT,
    REACHED,
    STATUS_WORDS,
    UNREACHED,
    Point,
    alkalinity_at_ph,
    conditions_of,
    dosed,
    solve_doses,
)
from aquabuf.assess.plant.quantities import find_quantity, measured, plant_quantities
from aquabuf.chem.products import find_product, own_product, products
from aquabuf.errors import InputError

#      alkalinity, carbon, t_c, strength, calcium
RAW = {"soft": (4e-4, 5e-4, 10.0, 1e-3, 3e-4), "hard": (4e-3, 4.4e-3, 12.0, 1.2e-2, 2.2e-3),
       "acid": (-2e-4, 3e-4, 5.0, 8e-4, 1e-4), "limed": (2.5e-3, 1.0e-3, 20.0, 5e-3, 1.2e-3)}
# eq, mol of carbon, ionic strength and sulfate per mole: by hand from the formulas
ADDS = {"hydrated lime": (2, 0, 3, 0), "caustic soda": (1, 0, 1, 0), "soda ash": (2, 1, 2, 0), "sodium bicarbonate": (1, 1, 1, 0),
        "carbon dioxide": (0, 1, 0, 0), "sulfuric acid": (-2, 0, 1, 1)}


def raw(name, **totals):
    """One of RAW as a stream."""
    alkalinity, carbon, t_c, strength, calcium = RAW[name]
    return stream(alkalinity, carbon, t_c=t_c, strength=strength, calcium=calcium, **totals)


def points(*wanted):
    """Points in the units of the tables."""
    return [Point(t.quantity, t.low) for t in (target(name, value) for name, value in wanted)]


def solve(water, names, *wanted, **options):
    """Doses of named products."""
    return solve_doses(water, [find_product(n) for n in names], points(*wanted), **options)


def ph_after(alkalinity, carbon, t_c, strength, adds, x):
    """pH in 40 digits after x mol/L of one product."""
    a, c, i, s = adds
    return reference.ph_of(alkalinity + a * x, carbon + c * x, t_c, strength + i * x, s * x)


def again(water, names, doses, what):
    """The water computed again from the raw numbers and the shipped stoichiometry, one quantity of it."""
    for name, x in zip(names, doses, strict=True):
        product = find_product(name)
        water = stream(water.alkalinity_eq_l + product.adds["alkalinity"] * x, water.carbon_mol_l + product.adds["carbon"] * x,
                       t_c=water.t_c, strength=water.ionic_strength_mol_l + STRENGTH[name] * x,
                       **{n: water.total(n) + product.adds.get(n, 0.0) * x for n in water.totals})
    return measured(water, [what])[what]


STRENGTH = {name: adds[2] for name, adds in ADDS.items()}

# ------------------------------------------------------------------ the 40-digit solver


@pytest.mark.parametrize(("name", "water", "ph"), [
    ("hydrated lime", "soft", 8.6), ("hydrated lime", "acid", 7.5), ("caustic soda", "soft", 8.3), ("caustic soda", "hard", 9.2),
    ("caustic soda", "acid", 7.0), ("soda ash", "soft", 8.5), ("soda ash", "hard", 8.0), ("sodium bicarbonate", "soft", 7.4),
    ("sodium bicarbonate", "acid", 6.0), ("carbon dioxide", "hard", 6.9), ("carbon dioxide", "limed", 8.4),
    ("sulfuric acid", "hard", 7.0), ("sulfuric acid", "limed", 8.7), ("sulfuric acid", "soft", 4.2)])
def test_single_dose_to_ph(name, water, ph):
    """Dose and pH of one product against a root in 40 digits: pH to 1e-9, dose to 1e-9 of it."""
    alkalinity, carbon, t_c, strength, _ = RAW[water]
    with mp.workdps(reference.DIGITS):
        expected = reference.rooted(lambda x: ph_after(alkalinity, carbon, t_c, strength, ADDS[name], x) - ph, 0, mp.mpf("0.008"))
        found = solve(raw(water, sulfate=0.0), [name], ("ph", ph))
        assert list(found.status) == [REACHED]
        reached = ph_after(alkalinity, carbon, t_c, strength, ADDS[name], mp.mpf(float(found.mol_l[0, 0])))
    assert_allclose(float(reached), ph, rtol=0, atol=1e-9)
    assert_allclose(found.mol_l[0], float(expected), rtol=1e-9)
    assert_allclose(found.stream.water().ph, ph, rtol=0, atol=1e-9)


@pytest.mark.parametrize(("names", "ph", "mg_l"), [
    (("sodium bicarbonate", "caustic soda"), 8.4, 60.0), (("carbon dioxide", "hydrated lime"), 8.2, 45.0), (("soda ash", "carbon dioxide"), 8.0, 50.0),
    (("carbon dioxide", "caustic soda"), 7.6, 80.0)])
def test_ph_and_alkalinity(names, ph, mg_l):
    """Closed form: pH and alkalinity fix the carbon, which one product brings; the other makes up the alkalinity."""
    alkalinity, carbon, t_c, strength, _ = RAW["soft"]
    (a1, c1, i1, _), (a2, c2, i2, _) = (ADDS[n] for n in names)
    wanted = mp.mpf(mg_l) / mp.mpf(MG_CACO3)
    with mp.workdps(reference.DIGITS):
        x, y = mp.mpf(0), mp.mpf(0)
        for _ in range(60):  # ionic strength follows the doses
            more = reference.carbon_of(ph, wanted, t_c, strength + i1 * x + i2 * y) - carbon
            det = mp.mpf(a1 * c2 - a2 * c1)
            x, y = (c2 * (wanted - alkalinity) - a2 * more) / det, (a1 * more - c1 * (wanted - alkalinity)) / det
    found = solve(raw("soft"), names, ("ph", ph), ("alkalinity", mg_l))
    assert list(found.status) == [REACHED]
    assert_allclose(found.mol_l[:, 0], [float(x), float(y)], rtol=1e-8)


@pytest.mark.parametrize(("names", "wanted", "value"), [(("hydrated lime", "carbon dioxide"), "ccpp", 3.0), (("carbon dioxide", "hydrated lime"), "ccpp", 1.0),
                                                        (("hydrated lime", "carbon dioxide"), "si_calcite", 0.1)])
def test_ph_with_saturation(names, wanted, value):
    """pH 8.5 with a precipitation potential or saturation index: the water after the doses, in 40 digits, has both."""
    alkalinity, carbon, t_c, strength, calcium = RAW["soft"]
    found = solve(raw("soft"), names, ("ph", 8.5), (wanted, value))
    assert list(found.status) == [REACHED]
    doses = dict(zip(names, found.mol_l[:, 0], strict=True))
    lime, co2 = doses["hydrated lime"], doses["carbon dioxide"]
    assert lime > 0.0
    assert co2 > 0.0
    after = (alkalinity + 2 * lime, calcium + lime, t_c, strength + 3 * lime)
    with mp.workdps(reference.DIGITS):
        ph = reference.ph_of(after[0], carbon + co2, t_c, after[3])
        reached = reference.potential(ph, *after)[0] * 100.086e3 if wanted == "ccpp" else reference.saturation(ph, *after)[0]
    assert_allclose(float(ph), 8.5, rtol=0, atol=1e-9)
    assert_allclose(float(reached), value, rtol=0, atol=1e-6)


def test_alkalinity_and_calcium_by_stoichiometry():
    """Lime brings all calcium, caustic what alkalinity is left: 20 mg/L Ca and 60 mg/L as CaCO3, by hand."""
    found = solve(raw("soft"), ["caustic soda", "hydrated lime"], ("alkalinity", 60.0), ("calcium", 20.0))
    lime = 20.0 / 40.078e3 - 3e-4
    assert_allclose(found.mol_l[:, 0], [60.0 / MG_CACO3 - 4e-4 - 2 * lime, lime], rtol=1e-9)


# ------------------------------------------------------------------ published and hand-worked


def test_acid_of_the_textbook_remark():
    """Alkalinity 2.74 meq/L from pH 10 to 8.7 takes 0.70 to 0.76 meq/L of strong acid or 30 to 33 mg/L CO2, not 2.74 meq/L
    (computed apart; temperature and ionic strength of the source not stated, so 20 and 25 °C)."""
    for t_c in (20.0, 25.0):
        carbon = float(reference.carbon_of(10.0, 2.74e-3, t_c, 4e-3))
        water = stream(2.74e-3, carbon, t_c=t_c, strength=4e-3)
        acid = solve(water, ["sulfuric acid"], ("ph", 8.7)).mol_l[0, 0]
        co2 = solve(water, ["carbon dioxide"], ("ph", 8.7)).mol_l[0, 0]
        assert 0.69 <= acid * 2e3 <= 0.77
        assert 29.5 <= co2 * 44.009e3 <= 33.5


def test_alum_back_to_its_ph():
    """The check case turned round: 40 mg/L alum of 14 waters brings alkalinity 60, pH 7.5 to 6.60 (computed apart)."""
    carbon = float(reference.carbon_of(7.5, 60.0 / 50043.0, 15.0, 0.003))
    found = solve(stream(60.0 / 50043.0, carbon, strength=0.003, sulfate=0.0), ["alum 14-water"], ("ph", 6.60))
    assert_allclose(found.mol_l * 594.34e3, 40.0, rtol=0, atol=1.5)
    assert_allclose(found.stream.solids["Al(OH)3"] / found.mol_l[0], 2.0)


def test_single_totals():
    """One product to sodium, fluoride, carbon, hardness and the ratios, by hand."""
    water = stream(1e-3, 1e-3, calcium=5e-4, magnesium=1e-4, sodium=2e-4, fluoride=1e-5, chloride=3e-4, sulfate=1e-4)
    cases = [("caustic soda", "sodium", 22.990 * 0.5, 3e-4), ("carbon dioxide", "dic", 1.5, 5e-4), ("fluosilicic acid", "fluoride", 0.7, (0.7 / 18998 - 1e-5) / 6),
             ("hydrated lime", "hardness", 80.0, 80.0 / 100.086e3 - 6e-4), ("sulfuric acid", "chloride_sulfate_ratio", 0.5, 3e-4 * 35.45 / 0.5 / 96.056 - 1e-4),
             ("caustic soda", "larson_ratio", 0.4, 5e-4 / 0.4 - 1e-3), ("magnesium hydroxide", "magnesium", 4.0, 4.0 / 24.305e3 - 1e-4)]
    for name, quantity, value, dose in cases:
        assert_allclose(solve(water, [name], (quantity, value)).mol_l, dose, rtol=2e-6, err_msg=quantity)


def test_open_to_air():
    """pH at air: the water after the dose, opened to air of 420 ppm, reads the target; carbon dioxide does nothing to it."""
    found = solve(soft(), ["caustic soda"], ("ph_at_air", 8.3), air_co2_ppm=420.0)
    assert_allclose(found.stream.water().at_air(420.0).ph, 8.3, rtol=0, atol=1e-9)
    assert list(found.status) == [REACHED]
    assert list(solve(soft(), ["carbon dioxide"], ("ph_at_air", 8.3)).status) == [NO_EFFECT]
    ph, c = np.array([8.0]), conditions_of(soft())
    co2 = soft().water().species_mol_l["CO2"]
    open_water = soft().replaced(alkalinity_eq_l=alkalinity_at_ph(soft(), ph, c, co2=co2))
    assert_allclose(open_water.water().at_pco2(soft().water().pco2_atm).ph, 8.0, rtol=0, atol=1e-9)


# ------------------------------------------------------------------ several roots, bad ends


def test_the_least_dose_of_several():
    """Buffer intensity rises, falls and rises with acid; carbon dioxide in limed water raises saturation and lowers it again.

    A scan of 20,000 doses tells the first crossing.
    """
    for name, water, quantity, value in (("sulfuric acid", raw("soft", sulfate=0.0), "buffer_intensity", 0.25), ("carbon dioxide", raw("limed"), "si_calcite", 1.85),
                                         ("carbon dioxide", raw("limed"), "ccpp", 105.0)):
        grid = np.linspace(0.0, 2e-3, 20001)
        many = water.take(np.zeros(grid.size, dtype=int)).added(find_product(name).adds, grid)
        q = find_quantity(quantity)
        turns = np.flatnonzero(np.diff(np.sign(measured(many, [quantity])[quantity] * q.per_house - value)))
        assert turns.size > 1
        found = solve(water, [name], (quantity, value))
        assert list(found.status) == [REACHED]
        assert grid[turns[0]] <= found.mol_l[0, 0] <= grid[turns[0] + 1]


def test_a_target_just_below_the_peak():
    """Both doses that meet it lie close together; it is found all the same."""
    grid = np.linspace(0.0, 2e-3, 20001)
    adds = find_product("carbon dioxide").adds
    si = measured(raw("limed").take(np.zeros(grid.size, dtype=int)).added(adds, grid), ["si_calcite"])["si_calcite"]
    value = float(np.nanmax(si)) - 1e-4
    found = solve(raw("limed"), ["carbon dioxide"], ("si_calcite", value))
    assert list(found.status) == [REACHED]
    assert_allclose(found.stream.water().saturation_index(), value, rtol=0, atol=1e-6)
    assert list(solve(raw("limed"), ["carbon dioxide"], ("si_calcite", value + 0.01)).status) == [UNREACHED]


def test_less_than_nothing():
    """Caustic to a lower pH: the amount to take out is the acid that would do it; bicarbonate cannot pass its own pH."""
    found = solve(raw("hard"), ["caustic soda"], ("ph", 7.0))
    assert list(found.status) == [NEGATIVE]
    alkalinity, carbon, t_c, strength, _ = RAW["hard"]
    with mp.workdps(reference.DIGITS):
        expected = reference.rooted(lambda x: ph_after(alkalinity, carbon, t_c, strength, ADDS["caustic soda"], x) - 7, -mp.mpf("0.003"), 0)
    assert_allclose(found.mol_l, float(expected), rtol=1e-9)
    assert list(solve(soft(), ["sodium bicarbonate"], ("ph", 9.0)).status) == [NEGATIVE]
    below = solve(raw("soft"), ["hydrated lime"], ("si_calcite", -3.0))
    assert list(below.status) == [NEGATIVE]
    assert below.mol_l[0, 0] < 0.0
    assert list(solve(raw("soft"), ["hydrated lime"], ("si_calcite", -3.0), only_positive=True).status) == [UNREACHED]


def test_products_that_move_targets_together():
    """Lime and caustic both bring alkalinity alone; lime and sulfuric acid differ by a trace of bisulfate only."""
    for names in (("hydrated lime", "caustic soda"), ("hydrated lime", "sulfuric acid"), ("hydrochloric acid", "caustic soda")):
        assert list(solve(soft(), names, ("ph", 8.3), ("alkalinity", 60.0)).status) == [NO_EFFECT], names
    assert list(solve(soft(), ["caustic soda"], ("calcium", 60.0)).status) == [NO_EFFECT]


def test_products_that_differ_little():
    """Lime, and lime with a tenth of magnesia: 60 mg/L as CaCO3 with 27.2 mg/L calcium, by hand."""
    mixed = own_product("dolomitic lime", molar_mass_g=72.5, ions={"calcium": 0.9, "magnesium": 0.1})
    found = solve_doses(raw("soft"), [find_product("hydrated lime"), mixed], points(("alkalinity", 60.0), ("calcium", 27.2)))
    both, calcium = (60.0 / MG_CACO3 - 4e-4) / 2, 27.2 / 40.078e3 - 3e-4
    assert list(found.status) == [REACHED]
    assert_allclose(found.mol_l[:, 0], [10 * calcium - 9 * both, 10 * (both - calcium)], rtol=1e-6)


def test_no_dose_beyond_all_works():
    """pH 3.5 by carbon dioxide alone would take 22 g/L; pH 13.8 by caustic 16 g/L."""
    assert list(solve(soft(), ["carbon dioxide"], ("ph", 3.5)).status) == [UNREACHED]
    assert list(solve(soft(), ["caustic soda"], ("ph", 13.8)).status) == [UNREACHED]


def test_permeate():
    """Water almost without anything: lime and carbon dioxide bring pH, alkalinity and with them calcium; saturation needs it."""
    permeate = stream(2e-5, 6e-5, t_c=25.0, strength=1e-4, calcium=0.0, magnesium=0.0)
    found = solve(permeate, ["hydrated lime", "carbon dioxide"], ("ph", 8.3), ("alkalinity", 80.0))
    assert list(found.status) == [REACHED]
    assert_allclose(found.stream.total("calcium"), (80.0 / MG_CACO3 - 2e-5) / 2, rtol=1e-9)
    found = solve(permeate, ["hydrated lime", "carbon dioxide"], ("ph", 8.3), ("ccpp", 3.0))
    assert list(found.status) == [REACHED]
    assert_allclose(found.stream.water().precipitation_potential_mol_l() * 100.086e3, 3.0, rtol=0, atol=1e-6)
    assert list(solve(permeate, ["caustic soda"], ("si_calcite", 0.1)).status) == [UNREACHED]
    unknown = permeate.replaced(totals={})
    assert list(solve(unknown, ["hydrated lime"], ("si_calcite", 0.1)).status) == [UNREACHED]


@pytest.mark.parametrize(("alkalinity", "name", "ph"), [(-0.01, "hydrated lime", 8.0), (0.05, "sulfuric acid", 8.0), (0.05, "carbon dioxide", 9.0)])
def test_very_acid_and_very_alkaline(alkalinity, name, ph):
    """Acid drainage of pH 2 and lye of pH 12.6 come to their target, as the 40-digit balance has it."""
    water = stream(alkalinity, 1e-4, strength=0.03, sulfate=0.0)
    found = solve(water, [name], ("ph", ph))
    assert list(found.status) == [REACHED]
    a, c, i, s = ADDS[name]
    x = float(found.mol_l[0, 0])
    with mp.workdps(reference.DIGITS):
        assert_allclose(float(ph_after(alkalinity, 1e-4, 15.0, 0.03, (a, c, i, s), x)), ph, rtol=0, atol=1e-9)


# ------------------------------------------------------------------ rows


def test_rows_alone_and_together():
    """Each row has the dose that it has alone, whatever the others are; a broken row is its own affair."""
    rows = random_streams(30, seed=12)
    alkalinity = rows.alkalinity_eq_l.copy()
    alkalinity[5] = np.nan
    rows = rows.replaced(alkalinity_eq_l=alkalinity)
    for names, wanted in ((("caustic soda",), (("ph", 8.3),)), (("hydrated lime", "carbon dioxide"), (("ph", 8.3), ("ccpp", 3.0))),
                          (("carbon dioxide", "hydrated lime"), (("alkalinity", 150.0), ("si_calcite", 0.2))), (("soda ash",), (("buffer_intensity", 0.4),))):
        whole = solve(rows, names, *wanted)
        assert whole.status[5] != REACHED
        for row in range(rows.rows):
            alone = solve(rows.take(np.array([row])), names, *wanted)
            assert alone.status[0] == whole.status[row], (names, row)
            assert_allclose(alone.mol_l[:, 0], whole.mol_l[:, row], rtol=1e-7, atol=1e-11, err_msg=f"{names} {row}")


def test_order_of_products_does_not_matter():
    """Whichever product comes first, the same rows are reached (in curved cases perhaps by another of two answers)."""
    rows, reached = random_streams(40, seed=41), 0
    for names, wanted in ((("hydrated lime", "carbon dioxide"), (("ph", 8.3), ("si_calcite", 0.2))), (("soda ash", "sulfuric acid"), (("alkalinity", 120.0), ("si_calcite", 0.0))),
                          (("caustic soda", "carbon dioxide"), (("alkalinity", 150.0), ("buffer_intensity", 0.3)))):
        one, two = solve(rows, names, *wanted), solve(rows, names[::-1], *wanted)
        good = one.status == REACHED
        reached += good.sum()
        assert list(good) == list(two.status == REACHED), names
    assert reached > 20


def test_a_value_per_row():
    """Points may differ from row to row."""
    ph = np.array([7.5, 8.0, 8.5])
    found = solve_doses(soft(3), [find_product("caustic soda")], [Point(find_quantity("ph"), ph)])
    assert_allclose(found.stream.water().ph, ph, rtol=0, atol=1e-9)
    found = solve_doses(soft(3), [find_product("hydrated lime")], [Point(find_quantity("si_calcite"), ph - 8.0)])
    assert_allclose(found.stream.water().saturation_index(), ph - 8.0, rtol=0, atol=1e-6)


def test_doses_in_order():
    """`dosed` adds one product after the other, shape (products, rows)."""
    after = dosed(soft(2), [find_product("hydrated lime"), find_product("carbon dioxide")], np.array([[1e-4, 0.0], [0.0, 2e-4]]))
    assert_allclose(after.alkalinity_eq_l, [6e-4, 4e-4], rtol=1e-14)
    assert_allclose(after.carbon_mol_l, [5e-4, 7e-4], rtol=1e-14)


# ------------------------------------------------------------------ fuzz


def test_targets_are_met_when_the_water_is_computed_again():
    """Random waters, products and targets: what is called reached is within 1e-6 of its unit and never takes out anything."""
    rng, reached = np.random.default_rng(20), 0
    wanted = {"ph": (6, 10), "alkalinity": (20, 250), "dic": (0.2, 5), "si_calcite": (-1, 1), "ccpp": (-15, 20), "buffer_intensity": (0.1, 1), "calcium": (5, 120)}
    for _ in range(60):
        names = list(rng.choice(list(ADDS), 2, replace=False))
        some = [str(n) for n in rng.choice(list(wanted), 2, replace=False)]
        if {"si_calcite", "ccpp", "buffer_intensity"} >= set(some):
            continue
        water = random_streams(8, seed=int(rng.integers(1e6)))
        values = [(n, float(rng.uniform(*wanted[n]))) for n in some]
        found = solve(water, names, *values, only_positive=True)
        good = found.status == REACHED
        reached += good.sum()
        assert (found.mol_l[:, good] >= 0.0).all()
        for name, value in values:
            off = again(water, names, found.mol_l, name) * find_quantity(name).per_house - value
            assert (np.abs(off[good]) <= 1e-6).all(), (names, values)
    assert reached > 40


def test_one_product_to_one_ph_against_a_scan():
    """Feasible and infeasible agree with a scan of 4,000 doses up to 0.05 mol/L, for every product that is acid, base or carbon.

    The others move pH by ionic strength alone, which is no way to hold a pH.
    """
    grid = np.concatenate([[0.0], np.geomspace(1e-8, 0.05, 4000)])
    waters, rng = random_streams(3, seed=33), np.random.default_rng(34)
    counted = {True: 0, False: 0}
    for name, product in products().items():
        if "basicity" in product.groups or not (product.adds["alkalinity"] or product.adds["carbon"]):
            continue
        for row in range(waters.rows):
            water = waters.take(np.array([row]))
            ph = float(rng.uniform(4.5, 10.5))
            along = water.take(np.zeros(grid.size, dtype=int)).added(product.adds, grid).water().ph - ph
            crosses = bool((np.diff(np.sign(along[np.isfinite(along)])) != 0).any())
            status = int(solve(water, [name], ("ph", ph)).status[0])
            assert crosses == (status == REACHED and solve(water, [name], ("ph", ph)).mol_l[0, 0] <= 0.05), (name, row, ph, STATUS_WORDS[status])
            counted[crosses] += 1
    assert min(counted.values()) > 20


# ------------------------------------------------------------------ messages


def test_messages():
    """Numbers that differ, and two quantities that bend."""
    with pytest.raises(InputError, match=r"as many products as targets are needed; found 1 and 2\. Add or remove one"):
        solve(soft(), ["caustic soda"], ("ph", 8.0), ("alkalinity", 60.0))
    with pytest.raises(InputError, match="found 0 and 0"):
        solve(soft(), [])
    with pytest.raises(InputError, match=r"only one of saturation index, .* found saturation index and precipitation potential\. Give windows"):
        solve(soft(), ["caustic soda", "hydrated lime"], ("si_calcite", 0.1), ("ccpp", 3.0))
    assert set(STATUS_WORDS) == {REACHED, NEGATIVE, UNREACHED, NO_EFFECT}


def test_every_target_quantity_can_be_solved():
    """Each quantity of the table that may be a target is brought to a value by some shipped product."""
    water = stream(1e-3, 1e-3, fluoride=1e-5, **IONS)
    for name, q in plant_quantities().items():
        if q.is_target:
            now = float(measured(water, [name])[name][0]) * q.per_house
            found = [solve(water, [p], (name, now + side * 0.1 * max(abs(now), 0.1))).status[0] == REACHED
                     for p in ("hydrated lime", "caustic soda", "sulfuric acid", "magnesium hydroxide", "fluosilicic acid", "carbon dioxide") for side in (1, -1)]
            assert any(found), name

"""Calcium carbonate: saturation and precipitation against a speciation of its own, conservation, order of minerals."""

import numpy as np
import pytest
from by_hand import PairedWater, gamma, pair_constant
from numpy.testing import assert_allclose

from aquabuf import Water
from aquabuf.chem import fresh
from aquabuf.engine.precipitate import pairing

HARD = {"t_c": 15.0, "ionic_strength_mol_l": 0.02, "calcium_mol_l": 3e-3, "magnesium_mol_l": 2e-3, "sodium_mol_l": 5e-3,
        "potassium_mol_l": 1e-3, "sulfate_mol_l": 3e-3}
METALS = ("calcium", "magnesium", "sodium", "potassium")


def random_cases(count=25, seed=11):
    """Soft to hard waters, with and without the other ions, from undersaturated to far oversaturated."""
    rng = np.random.default_rng(seed)
    for _ in range(count):
        yield {
            "ph": rng.uniform(6.0, 10.0), "alkalinity_eq_l": 10 ** rng.uniform(-4, -2.3), "t_c": rng.uniform(5, 45),
            "ionic_strength_mol_l": 10 ** rng.uniform(-3.5, -1), "sulfate_mol_l": 10 ** rng.uniform(-5, -2),
        } | {f"{m}_mol_l": 10 ** rng.uniform(-4.5, -2) for m in METALS}


def own(case):
    """The case for the speciation written in the tests, and its H+ activity."""
    return PairedWater({m: case[f"{m}_mol_l"] for m in METALS}, case["sulfate_mol_l"], case["t_c"],
                       case["ionic_strength_mol_l"]), 10.0 ** -case["ph"]


@pytest.mark.parametrize("case", list(random_cases()), ids=lambda c: f"pH {c['ph']:.1f}")
def test_saturation_index_by_an_own_speciation(case):
    """Plain substitution with the same published constants, Davies by hand."""
    paired, h = own(case)
    index = paired.speciate(h, paired.carbonate_alkalinity(h, case["alkalinity_eq_l"]))[2]
    assert_allclose(Water.from_ph_alkalinity(**case).saturation_index(), index, rtol=0, atol=1e-8)


@pytest.mark.parametrize("case", list(random_cases(8, seed=4)), ids=lambda c: f"pH {c['ph']:.1f}")
def test_precipitation_potential_by_an_own_speciation(case):
    """Remove x until SI is zero where alkalinity (Alk - 2x) and carbon (DIC - x, pairs included) agree: two nested searches."""
    paired, h = own(case)
    x, ph = paired.precipitation_potential(h, case["alkalinity_eq_l"])
    water = Water.from_ph_alkalinity(**case)
    assert_allclose(water.precipitation_potential_mol_l(), x, rtol=1e-6)
    assert_allclose(water.ph_at_saturation(), ph, rtol=0, atol=1e-6)


def test_water_after_precipitation_is_just_saturated():
    """Rebuilt from what is left of calcium and alkalinity at the pH reached, the water has SI = 0 (pairs included)."""
    for ph in (6.5, 7.5, 8.5, 9.5):
        before = Water.from_ph_alkalinity(ph=ph, alkalinity_eq_l=4e-3, **HARD)
        x = before.precipitation_potential_mol_l()
        left = HARD | {"calcium_mol_l": HARD["calcium_mol_l"] - x}
        after = Water.from_ph_alkalinity(ph=before.ph_at_saturation(), alkalinity_eq_l=4e-3 - 2.0 * x, **left)
        assert_allclose(after.saturation_index(), 0.0, rtol=0, atol=1e-8)
        # carbon (pairs included) went down by the same amount: Ca - DIC and Alk - 2 DIC are conserved
        carbon = pairing(before.state).dic - pairing(after.state).dic
        assert_allclose(carbon, x, rtol=1e-6)


@pytest.mark.parametrize("mineral", ["calcite", "aragonite"])
def test_sea_water_after_precipitation_is_just_saturated(mineral):
    """Without pairs the rebuilt closed water (Alk - 2x, DIC - x, Ca - x) has SI = 0 and the promised pH."""
    before = Water.from_alkalinity_dic(alkalinity_eq_l=2.3e-3, dic_mol_l=2.0e-3, t_c=25.0, salinity=[35.0])
    x = before.precipitation_potential_mol_l(mineral)
    after = Water.from_alkalinity_dic(alkalinity_eq_l=2.3e-3 - 2.0 * x, dic_mol_l=2.0e-3 - x, t_c=25.0, salinity=[35.0],
                                      calcium_mol_l=before.total_mol_l("calcium") - x)
    assert x > 0.0
    assert_allclose(after.saturation_index(mineral), 0.0, rtol=0, atol=1e-8)
    assert_allclose(after.ph, before.ph_at_saturation(mineral), rtol=0, atol=1e-8)


def test_trace_of_calcium_leaves_carbonate_alone():
    """Limit of little calcium: SI = log(gamma2^2 Ca CO3 / Ks), CO3 of the plain closed balance, Ca less its own pairs."""
    water = Water.from_ph_alkalinity(ph=8.0, alkalinity_eq_l=1e-3, t_c=25.0, ionic_strength_mol_l=0.01, calcium_mol_l=1e-9)
    hco3, co3 = water.species_mol_l["HCO3-"], water.species_mol_l["CO3--"]
    bound = 1.0 + sum(pair_constant("calcium", a, 0.01, 25.0) * v for a, v in (("HCO3", hco3), ("CO3", co3)))
    molal = 1e-9 / bound * co3 / water.density_kg_l**2
    expected = np.log10(molal * gamma(2, 0.01, 25.0) ** 2 / fresh.ksp_calcite(25.0))
    assert_allclose(water.saturation_index(), expected, rtol=0, atol=1e-6)
    assert_allclose(water.saturation_ratio(), 10.0**expected, rtol=1e-5)


@pytest.mark.parametrize(("ph", "index", "potential_mg_l", "ph_then"), [(8.5, 0.7693, 8.089, 7.791), (7.0, -0.7146, -26.034, 7.515)])
def test_orientation_values(ph, index, potential_mg_l, ph_then):
    """Alk 100, Ca 40 mg/L, 25 °C, I 0.005, calculated elsewhere WITHOUT ion pairs: the speciation of these tests gives them
    when its pairs are left out, which vouches for it; with pairs it is what the engine must equal.

    Pairs move SI by -0.03 and the potential by +1.7 mg/L at pH 8.5, where dissolved CaCO3 falls out too.
    """
    alkalinity, totals = 100.0 / 50043.0, {"calcium": 40.0 / 40078.0}
    bare, paired = (PairedWater(totals, 0.0, 25.0, 0.005, **pairs) for pairs in ({"pairs": ()}, {}))
    h = 10.0**-ph
    x, then = bare.precipitation_potential(h, alkalinity)
    assert_allclose(bare.speciate(h, bare.carbonate_alkalinity(h, alkalinity))[2], index, rtol=0, atol=0.004)
    assert_allclose([x * 100087.0, then], [potential_mg_l, ph_then], rtol=0.006)

    water = Water.from_ph_alkalinity(ph=ph, alkalinity_eq_l=alkalinity, t_c=25.0, ionic_strength_mol_l=0.005,
                                     calcium_mol_l=totals["calcium"])
    assert_allclose(water.precipitation_potential_mol_l(), paired.precipitation_potential(h, alkalinity)[0], rtol=1e-6)
    assert_allclose(water.saturation_index(), index - 0.035, rtol=0, atol=0.025)
    assert_allclose(water.precipitation_potential_mol_l() * 100087.0, potential_mg_l, rtol=0, atol=2.0)
    assert_allclose(water.ph_at_saturation(), ph_then, rtol=0, atol=0.04)


@pytest.mark.parametrize(("t_c", "published", "old_data"), [(0.0, 2.45, 0.20), (10.0, 2.23, 0.15), (20.0, 2.02, 0.10), (50.0, 1.52, 0.0)])
def test_langelier_constant_at_no_ionic_strength(t_c, published, old_data):
    """C in pHs = pCa + pAlk + C, I = 0 row of a printed table (Davis, Water and Wastewater Engineering, Table 7-5).

    That row rests on older constants and lies above Plummer & Busenberg by the amounts named; traces, so no pairs.
    """
    water = Water.from_ph_alkalinity(ph=8.0, alkalinity_eq_l=1e-3, t_c=t_c, ionic_strength_mol_l=0.0, calcium_mol_l=1e-8)
    bicarbonate = water.species_mol_l["HCO3-"]
    constant = 8.0 - water.saturation_index() + np.log10(1e-8) + np.log10(bicarbonate)
    assert_allclose(constant, published - old_data, rtol=0, atol=0.012)


def test_langelier_increment_with_ionic_strength():
    """C grows by 0.26 from I = 0 to 0.005 and 0.36 to 0.01 in the printed table (4 sqrt(I)/(1 + sqrt(I)) within 0.01).

    Davies has 5 A and its linear term instead: 0.165 and 0.225 on activity, that is on a meter's pH.
    """
    def constant(strength):
        water = Water.from_ph_alkalinity(ph=8.0, alkalinity_eq_l=2e-5, t_c=25.0, ionic_strength_mol_l=strength,
                                         calcium_mol_l=1e-8)
        return 8.0 - float(water.saturation_index()) + np.log10(1e-8 * float(water.species_mol_l["HCO3-"]))
    # 5 pfm at 25 °C by Standard Methods 2330 (formula recalled): 0.0330 and 0.0449 per unit
    assert_allclose(constant(0.005) - constant(0.0), 5 * 0.0330, rtol=0, atol=0.002)
    assert_allclose(constant(0.01) - constant(0.0), 5 * 0.0449, rtol=0, atol=0.002)


def test_sign_and_monotony():
    """The potential has the sign of the index, and both rise with calcium, alkalinity and pH."""
    for name, values in (("ph", np.linspace(6.5, 10, 20)), ("alkalinity_eq_l", np.linspace(5e-4, 6e-3, 20)),
                         ("calcium_mol_l", np.linspace(3e-4, 8e-3, 20))):
        water = Water.from_ph_alkalinity(**({"ph": 7.5, "alkalinity_eq_l": 3e-3} | HARD | {name: values}))
        index, x = water.saturation_index(), water.precipitation_potential_mol_l()
        assert (np.sign(index) == np.sign(x)).all()
        assert (np.diff(index) > 0).all()
        assert (np.sign(index) == np.sign(water.ph - water.ph_at_saturation())).all()
    assert (np.diff(x) > 0).all()  # along calcium


@pytest.mark.parametrize("salinity", [0.0, 10.0, 35.0])
def test_order_of_the_minerals(salinity):
    """Calcite is the most stable, then aragonite, then vaterite: Plummer & Busenberg 1982 give 0.144 and 0.566 at 25 °C."""
    water = Water.from_ph_alkalinity(ph=[8.3], alkalinity_eq_l=3e-3, t_c=25.0, salinity=salinity, calcium_mol_l=3e-3)
    index = {m: water.saturation_index(m) for m in ("calcite", "aragonite", "vaterite")}
    assert index["calcite"] > index["aragonite"]
    if salinity == 0.0:
        assert_allclose(index["calcite"] - index["aragonite"], 8.480 - 8.336, rtol=0, atol=0.001)
        assert_allclose(index["calcite"] - index["vaterite"], 8.480 - 7.913, rtol=0, atol=0.001)
    else:
        assert np.isnan(index["vaterite"]).all()  # no constant for sea water


def test_mucci_in_sea_water():
    """Omega = Ca CO3 / Ksp per kg: 4.39e-7 and 6.65e-7 at S 35, 25 °C (Mucci 1983 means, recalled; 5 %)."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=2.3e-3, dic_mol_l=2.0e-3, t_c=25.0, salinity=[35.0])
    product = 0.010282 * water.species_mol_l["CO3--"] / water.density_kg_l
    assert_allclose(product / water.saturation_ratio("calcite"), 4.39e-7, rtol=0.05)
    assert_allclose(product / water.saturation_ratio("aragonite"), 6.65e-7, rtol=0.05)
    assert_allclose(water.saturation_ratio("calcite") / water.saturation_ratio("aragonite"), 6.4818 / 4.2724, rtol=1e-3)


@pytest.mark.parametrize("totals", [{}, {"magnesium_mol_l": 1e-3}, {"calcium_mol_l": 0.0}, {"calcium_mol_l": np.nan}], ids=str)
def test_without_calcium_there_is_no_index(totals):
    """The index of a water whose calcium is not known, or none, is not a number; it is no error."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=2e-3, dic_mol_l=2e-3, t_c=25.0, **totals)
    assert np.isnan(water.saturation_index())
    assert np.isnan(water.precipitation_potential_mol_l())
    assert np.isnan(water.ph_at_saturation())


def test_water_without_carbon_has_no_index():
    """Without carbon there is no carbonate to be saturated with, in acid and base alike; rounding must not decide."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=np.geomspace(1e-6, 1e-2, 40) * np.resize([1, -1], 40), dic_mol_l=0.0,
                                      t_c=20.0, calcium_mol_l=1e-3, phosphate_mol_l=1e-4)
    assert np.isnan(water.saturation_index()).all()


def test_many_waters_end_at_saturation():
    """5,000 random waters with all pairs: each gets a potential, and rebuilt after it has SI = 0 within 1e-4 (the definition)."""
    rng = np.random.default_rng(6)
    n = 5000
    rest = {"t_c": rng.uniform(0, 50, n), "ionic_strength_mol_l": 10 ** rng.uniform(-3, -1, n),
            "sulfate_mol_l": 10 ** rng.uniform(-6, -2, n)}
    rest |= {f"{m}_mol_l": 10 ** rng.uniform(-6, -2, n) for m in METALS[1:]}
    alkalinity, calcium, ph = 10 ** rng.uniform(-4.5, -2.2, n), 10 ** rng.uniform(-6, -2, n), rng.uniform(5, 10, n)
    before = Water.from_ph_alkalinity(ph=ph, alkalinity_eq_l=alkalinity, calcium_mol_l=calcium, **rest)
    before_ok = before.status >= 0
    x, then = before.precipitation_potential_mol_l(), before.ph_at_saturation()
    assert before_ok.sum() > 4000
    assert np.isfinite(x[before_ok]).all()
    after = Water.from_ph_alkalinity(ph=then, alkalinity_eq_l=alkalinity - 2.0 * x, calcium_mol_l=calcium - x, **rest)
    assert_allclose(after.saturation_index()[before_ok], 0.0, rtol=0, atol=1e-4)

"""Lime softening against worked examples of textbooks, balances, closed forms and a second solution in 30 digits."""

import mpmath as mp
import numpy as np
import pytest
from made_water import EQ_PER_MG_CACO3, stocked, words
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.steps.precipitation import Rest, brucite_index, hydroxide_pair_share, settled
from aquabuf.assess.plant.steps.soften import PROCESSES, Soften, lime_need, mg_l_cao, of_whole, treated_share
from aquabuf.assess.plant.stream import Stream
from aquabuf.errors import InputError

MG = 1e-3 / 100.086  # mol/L of a divalent metal in 1 mg/L as CaCO3
AT_REST = {"least_calcium_mol_l": 0.0, "least_magnesium_mol_l": 0.0}
SPLIT = {"magnesium_wanted_mol_l": 40.0 * MG}


def water(alkalinity, carbon, strength=0.008, t_c=25.0, **totals):
    """A stream of one or many rows."""
    alkalinity, carbon, strength, t_c = np.broadcast_arrays(*(np.atleast_1d(np.asarray(v, dtype=float))
                                                              for v in (alkalinity, carbon, strength, t_c)))
    known = {n: np.broadcast_to(np.asarray(v, dtype=float), alkalinity.shape) for n, v in totals.items()}
    return Stream(t_c, alkalinity, carbon, known, strength, np.ones(alkalinity.shape))


def many(rows=40, seed=3):
    """Hard waters of every kind."""
    rng = np.random.default_rng(seed)

    def between(low, high):
        return rng.uniform(low, high, rows)
    alkalinity = between(1e-3, 6e-3)
    return water(alkalinity, alkalinity + between(5e-5, 1e-3), between(4e-3, 0.015), between(2.0, 28.0),
                 calcium=between(0.8e-3, 3.5e-3), magnesium=between(0.45e-3, 2e-3), sodium=between(1e-4, 2e-3),
                 sulfate=between(1e-4, 2e-3), chloride=between(1e-4, 2e-3))


def step(process="excess lime", **settings):
    """A softening step with quicklime of 90 % and soda ash."""
    settings = {"soda_ash": stocked("soda ash", 0.98)} | (SPLIT if process == "split" else {}) | settings
    return Soften(name="soft", process=process, lime=stocked("quicklime", 0.9), **settings)


# ---------------------------------------------------------------- the rule


def test_lime_of_the_sweetwater_example():
    """Davis ex. 7-18 and 7-19: CO2 15, HCO3 164, excess 20 mg/L as CaCO3: 199, and 123.8 mg/L CaO at 90 %."""
    need = lime_need(carbon_dioxide_eq_l=15 * EQ_PER_MG_CACO3, bicarbonate_eq_l=164 * EQ_PER_MG_CACO3,
                     calcium_eq_l=180 * EQ_PER_MG_CACO3, magnesium_eq_l=36 * EQ_PER_MG_CACO3, takes_magnesium=False,
                     excess_eq_l=20 * EQ_PER_MG_CACO3)
    assert_allclose(need.lime / EQ_PER_MG_CACO3, 199.0, atol=1e-6)
    assert_allclose(mg_l_cao(need.lime) / 0.9, 123.8, atol=0.1)


def test_the_step_feeds_and_leaves_what_the_sweetwater_example_has():
    """The same from a solved water: 124 mg/L of quicklime, final hardness 71 as 36 of magnesium and 35 of calcium.

    The example counts on magnesium staying, that is on hydroxide that does not form though it could.
    """
    raw = water(164 * EQ_PER_MG_CACO3, 164 * EQ_PER_MG_CACO3 + 15 * MG, calcium=164 * MG, magnesium=36 * MG)
    out = step("single stage", excess_eq_l=20 * EQ_PER_MG_CACO3, brucite_ratio=10.0).run(raw)
    at_rest = step("single stage", excess_eq_l=20 * EQ_PER_MG_CACO3).run(raw)
    assert_allclose(out.doses[0].product.mg_l_product(out.doses[0].mol_l), 124.0, atol=1.0)
    assert_allclose(out.figures["lime_by_rule_mg_l_caco3"], 199.0, atol=1.0)
    assert_allclose(out.figures["hardness_by_rule_mg_l_caco3"], 71.0, atol=1e-6)
    assert_allclose(out.figures["calcium_left_mg_l_caco3"], 35.0, atol=1e-6)
    assert_allclose(out.figures["magnesium_left_mg_l_caco3"], 36.0, atol=1e-6)
    assert (at_rest.figures["magnesium_left_mg_l_caco3"] < 30.0).all()


def test_blended_doses_of_split_treatment():
    """Davis 7-25: fractions 0.628 and 0.372, lime 313.6 and 210.5, soda ash 130.6 and 0: 275 and 82."""
    assert_allclose(of_whole(0.628, 313.6, 210.5), 275.2, atol=0.06)
    assert_allclose(of_whole(0.628, 130.6, 0.0), 82.0, atol=0.06)


def test_soda_ash_of_the_design_example():
    """Water Treatment Plant Design ex. 11.3: 81 mg/L of non-carbonate hardness, 55 may stay: 229 lb/MG (handbook 8.8)."""
    need = lime_need(carbon_dioxide_eq_l=0.0, bicarbonate_eq_l=100 * EQ_PER_MG_CACO3, calcium_eq_l=181 * EQ_PER_MG_CACO3,
                     magnesium_eq_l=0.0, takes_magnesium=False, noncarbonate_left_eq_l=55 * EQ_PER_MG_CACO3)
    pounds_per_mgal = need.soda_ash * 0.5 * 105.988e3 * 8.3454
    assert_allclose(pounds_per_mgal, 229.0, atol=1.0)
    assert_allclose(need.left / EQ_PER_MG_CACO3, 55.0)


@pytest.mark.parametrize(("calcium", "magnesium", "bicarbonate", "takes", "lime", "soda"), [
    (4.0, 1.0, 3.0, False, 0.5 + 3.0, 1.0),          # calcium beyond bicarbonate: soda ash for it
    (2.0, 3.0, 4.0, False, 0.5 + 2.0, 0.0),          # bicarbonate of magnesium is left alone
    (4.0, 1.0, 3.0, True, 0.5 + 3.0 + 1.0, 2.0),     # magnesium once more; its hardness needs soda ash too
    (2.0, 3.0, 6.0, True, 0.5 + 6.0 + 3.0, 0.0),     # bicarbonate of sodium takes lime as well
])
def test_rule_in_equivalents(calcium, magnesium, bicarbonate, takes, lime, soda):
    """Sums by hand from the reactions of lime with carbon dioxide, bicarbonate and magnesium, in meq/L."""
    need = lime_need(carbon_dioxide_eq_l=0.5, bicarbonate_eq_l=bicarbonate, calcium_eq_l=calcium,
                     magnesium_eq_l=magnesium, takes_magnesium=takes)
    assert_allclose([need.lime, need.soda_ash], [lime, soda])


def test_carbonate_that_is_there_spares_lime_and_soda_ash():
    """Calcium that carbonate of the water will take needs neither."""
    need = lime_need(carbon_dioxide_eq_l=0.0, bicarbonate_eq_l=3.0, carbonate_eq_l=2.0, calcium_eq_l=4.0,
                     magnesium_eq_l=0.0, takes_magnesium=False)
    assert_allclose([need.lime, need.soda_ash], [2.0, 0.0])


def test_excess_lime_is_1_25_meq_l_by_default():
    """1.25 meq/L is 62.5 mg/L as CaCO3 (course cards); none in a single stage."""
    assert_allclose(step().run(many()).figures["lime_excess_meq_l"] / 1e3 / EQ_PER_MG_CACO3, 62.5, atol=0.1)
    assert_array_equal(step("single stage").run(many()).figures["lime_excess_meq_l"], 0.0)


def test_share_to_treat_closes_the_balance_of_magnesium():
    """Mass balance; all or nothing where the wanted magnesium is out of reach or there already."""
    share = treated_share(100.0, [40.0, 5.0, 120.0, 100.0], 10.0)
    assert_allclose(share, [60.0 / 90.0, 1.0, 0.0, 0.0])
    assert_allclose(share[0] * 10.0 + (1.0 - share[0]) * 100.0, 40.0)
    assert_allclose(treated_share(8.0, [4.0, 9.0], 10.0), [1.0, 0.0])


# ---------------------------------------------------------------- the chemistry


@pytest.mark.parametrize("process", PROCESSES)
@pytest.mark.parametrize("rest", [{}, AT_REST], ids=["practical", "equilibrium"])
def test_nothing_is_lost(process, rest):
    """Alkalinity, carbon, calcium and magnesium in and out, solids counted: stoichiometry written here."""
    raw = many()
    out = step(process, **rest).run(raw)
    after, (lime, soda) = out.stream, (d.mol_l for d in out.doses)
    chalk, brucite = after.solids["CaCO3"], after.solids["Mg(OH)2"]
    assert (chalk >= 0.0).all()
    assert (brucite >= 0.0).all()
    assert chalk.min() > 1e-4
    for got, wanted in (
        (after.alkalinity_eq_l, raw.alkalinity_eq_l + 2.0 * lime + 2.0 * soda - 2.0 * chalk - 2.0 * brucite),
        (after.carbon_mol_l, raw.carbon_mol_l + soda - chalk),
        (after.total("calcium"), raw.total("calcium") + lime - chalk),
        (after.total("magnesium"), raw.total("magnesium") - brucite),
        (after.total("sodium"), raw.total("sodium") + 2.0 * soda),
        (out.figures["dry_sludge_mg_l"], 100.086e3 * chalk + 58.319e3 * brucite),
    ):
        assert_allclose(got, wanted, rtol=1e-5 if wanted.max() > 1 else 1e-12, atol=1e-15)


def test_settled_water_is_at_equilibrium():
    """Saturation index of calcite 0, and of brucite 0 where it formed, below where not."""
    after = step(**AT_REST).run(many()).stream
    assert_allclose(after.water().saturation_index(), 0.0, atol=1e-8)
    assert_allclose(brucite_index(after), 0.0, atol=1e-8)
    assert (after.solids["Mg(OH)2"] > 1e-4).all()
    mild = step("single stage", **AT_REST).run(many()).stream
    none = mild.solids["Mg(OH)2"] == 0.0
    assert none.any()
    assert (brucite_index(mild)[none] <= 1e-8).all()
    assert_allclose(mild.water().saturation_index(), 0.0, atol=1e-8)


def test_supersaturation_that_stays():
    """What settles to three times saturation has the logarithm of three as its index, and so for brucite."""
    after = step(calcite_ratio=3.0, brucite_ratio=2.0, **AT_REST).run(many()).stream
    assert_allclose(after.water().saturation_index(), np.log10(3.0), atol=1e-8)
    assert_allclose(brucite_index(after), np.log10(2.0), atol=1e-8)


def test_practical_limits_hold():
    """35 and 10 mg/L as CaCO3 stay though equilibrium is lower; settling never goes beyond equilibrium either."""
    raw = water(4e-3, 4.4e-3, calcium=2.2e-3, magnesium=1e-3, sodium=5e-4, sulfate=5e-4)
    out = step().run(raw)
    assert_allclose(out.figures["magnesium_left_mg_l_caco3"], 10.0, atol=1e-6)
    single = step("single stage").run(raw)
    assert_allclose(single.figures["calcium_left_mg_l_caco3"], 35.0, atol=1e-6)
    for process in PROCESSES:
        after = step(process).run(many()).stream
        assert (after.water().saturation_index() > -1e-8).all()


def test_a_water_below_saturation_keeps_everything():
    """Nothing settles, and nothing dissolves."""
    raw = water(5e-4, 7e-4, calcium=2e-4, magnesium=1e-4)
    after = settled(raw, Rest())
    assert_array_equal(after.alkalinity_eq_l, raw.alkalinity_eq_l)
    assert_array_equal(after.solids["CaCO3"], 0.0)
    assert_array_equal(after.solids["Mg(OH)2"], 0.0)


def test_split_blend_has_the_magnesium_wanted():
    """40 mg/L as CaCO3 where the blend deposits no magnesium hydroxide."""
    raw = many()
    out = step("split").run(raw)
    clear = brucite_index(out.stream) < -0.01
    assert clear.sum() > 20
    assert_allclose(out.figures["magnesium_left_mg_l_caco3"][clear], 40.0, atol=1e-6)
    share = out.figures["treated_share"]
    assert_allclose(share, (raw.total("magnesium") / MG - 40.0) / (raw.total("magnesium") / MG - 10.0))
    whole = step().run(raw)
    for mine, all_of_it in zip(out.doses, whole.doses, strict=True):
        assert_allclose(mine.mol_l, share * all_of_it.mol_l)


# Constants at 25 °C, log10: equations of Plummer & Busenberg 1982 (printed) and for pairs of magnesium of Siebert & Hostetler 1977
# (recalled), evaluated in 30 digits; brucite of Nordstrom et al. 1990 (recalled). As printed: ion product of water of IAPWS R11-07,
# slope of Helgeson & Kirkham 1974, density. Their last digits are what the tolerances allow for.
K1, K2, KW, KSP, BRUCITE = -6.35186415, -10.3288544, -13.995, -8.47982988, 16.84 - 2 * 13.995
CAHCO3, CACO3, MGHCO3, MGCO3 = 1.10566298, 3.22409085, 1.06821589, 2.9796605
SLOPE, RHO = 0.5092, 0.99705


def solved_by_hand(alkalinity, carbon, calcium, magnesium, strength):
    """pH, calcite and brucite formed: six equations in 30 digits. Pairs stand beside the pH, as the engine defines it."""
    mp.mp.dps = 30

    def equations(p, x, y, log_ca, log_mg, log_b):
        i = strength - 3 * x - 3 * y
        root = mp.sqrt(i)
        davies = SLOPE * (root / (1 + root) - mp.mpf("0.3") * i)
        g0, g1, g2 = mp.power(10, i / 10), mp.power(10, -davies), mp.power(10, -4 * davies)
        ten = {n: mp.power(10, v) for n, v in (("k1", K1), ("k2", K2), ("kw", KW), ("ksp", KSP), ("bru", BRUCITE),
                                               ("cab", CAHCO3), ("cac", CACO3), ("mgb", MGHCO3), ("mgc", MGCO3))}
        h = mp.power(10, -p)
        k1, k2 = ten["k1"] * g0 / g1, ten["k2"] * g1 / g2
        water_part = (ten["kw"] / h - h) / g1 * RHO
        share = [1, k1 / h, k1 * k2 / h**2]
        ca, mg, b = (mp.power(10, v) for v in (log_ca, log_mg, log_b))
        c = b * k2 / h
        cab, mgb = ten["cab"] * g2 / RHO, ten["mgb"] * g2 / RHO
        cac, mgc = ten["cac"] * g2**2 / g0 / RHO, ten["mgc"] * g2**2 / g0 / RHO
        alk = alkalinity - 2 * x - 2 * y
        return (
            ((carbon - x) * (share[1] + 2 * share[2]) / sum(share) + water_part) / alk - 1,
            (b * (1 + cab * ca + mgb * mg) + 2 * c * (1 + cac * ca + mgc * mg)) / (alk - water_part) - 1,
            ca * (1 + cab * b + cac * c) / (calcium - x) - 1,
            mg * (1 + mgb * b + mgc * c) / (magnesium - y) - 1,
            mp.log10(ca * c * g2**2 / RHO**2 / ten["ksp"]),
            mp.log10(mg * g2 / RHO * (ten["kw"] / h) ** 2 / ten["bru"]))

    start = (11.3, min(calcium, carbon) * 0.9, magnesium * 0.95, -3.5, -5.0, -5.0)
    return [float(v) for v in mp.findroot(equations, start, tol=1e-20, maxsteps=100)[:3]]


def test_excess_lime_as_solved_by_hand():
    """A water softened by excess lime to equilibrium against a second solution that knows nothing of the engine."""
    raw = water(4e-3, 4.4e-3, 0.008, 25.0, calcium=2.2e-3, magnesium=1e-3)
    lime, soda = 4.0e-3, 1.0e-3
    out = step(fixed_mol_l=(lime, soda), **AT_REST).run(raw)
    # quicklime 3 per mole, soda ash 2 (half the squared charges: Ca++ or 2 Na+, alkalinity as bicarbonate)
    ph, chalk, brucite = solved_by_hand(4e-3 + 2 * lime + 2 * soda, 4.4e-3 + soda, 2.2e-3 + lime, 1e-3,
                                        0.008 + 3 * lime + 2 * soda)
    assert_allclose(out.figures["ph_after"], ph, atol=1.5e-3)
    assert_allclose(out.stream.solids["CaCO3"], chalk, rtol=5e-5)
    assert_allclose(out.stream.solids["Mg(OH)2"], brucite, rtol=3e-4)
    assert_allclose(out.stream.total("magnesium"), 1e-3 - brucite, rtol=0.01)
    assert_allclose(out.stream.carbon_mol_l, 4.4e-3 + soda - chalk, rtol=0.005)


def test_brucite_alone_leaves_what_its_closed_form_says():
    """Without carbonate: Mg++ = Ksp / (gamma (Kw/h)^2), log Ksp -11.15 (recalled), Davies with 0.5092 (printed)."""
    raw = water(6e-3, 1e-9, 0.009, 25.0, calcium=1e-9, magnesium=1.5e-3)
    after = settled(raw, Rest())
    i = after.ionic_strength_mol_l
    gamma = 10.0 ** (-4.0 * 0.5092 * (np.sqrt(i) / (1.0 + np.sqrt(i)) - 0.3 * i))
    hydroxide = 10.0 ** (after.water().ph - 13.995)
    assert_allclose(np.log10(after.total("magnesium")), np.log10(10.0**-11.15 / gamma / hydroxide**2), atol=0.004)
    assert_allclose(after.ionic_strength_mol_l, 0.009 - 3.0 * after.solids["Mg(OH)2"], rtol=1e-12)


@pytest.mark.parametrize(("metal", "log_k"), [("calcium", 1.22), ("magnesium", 2.56)])
def test_hydroxide_pairs_by_closed_form(metal, log_k):
    """K times the activity of hydroxide, over one more of it; constants recalled, slope and pKw printed."""
    raw = water(8e-3, 1e-5, 0.01, 25.0, calcium=1e-3, magnesium=1e-5)
    i = 0.01
    gamma = 10.0 ** (-0.5092 * (np.sqrt(i) / (1.0 + np.sqrt(i)) - 0.3 * i))
    paired = 10.0**log_k * 10.0 ** (raw.water().ph - 13.995) * gamma**3
    assert_allclose(hydroxide_pair_share(raw, metal), paired / (1.0 + paired), rtol=0.01)


# ---------------------------------------------------------------- rows, settings, words


def test_rows_do_not_see_each_other_and_an_unknown_one_stays_unknown():
    """A row gives the same alone; calcium that is not known makes its own row unknown and no other."""
    raw = many(6)
    calcium = raw.total("calcium").copy()
    calcium[2] = np.nan
    out = step("split").run(raw.replaced(totals={**raw.totals, "calcium": calcium}))
    assert_array_equal(np.isnan(out.stream.alkalinity_eq_l), [False, False, True, False, False, False])
    assert np.isnan(out.stream.total("calcium")[2])
    for row in (0, 5):
        alone = step("split").run(raw.take(np.array([row])))
        assert_allclose(out.stream.carbon_mol_l[row], alone.stream.carbon_mol_l[0], rtol=1e-8)
        assert_allclose(out.figures["ph_after"][row], alone.figures["ph_after"][0], atol=1e-9)


def test_held_doses_give_the_same_water():
    """The step with the doses it found changes nothing; with other raw water the doses stay."""
    raw = many(5)
    for process in PROCESSES:
        out = step(process).run(raw)
        again = step(process).held(out.doses).run(raw)
        assert_allclose(again.stream.alkalinity_eq_l, out.stream.alkalinity_eq_l, rtol=1e-9)
        other = step(process).held(out.doses).run(many(5, seed=9))
        assert_array_equal(other.doses[0].mol_l, out.doses[0].mol_l)


def test_without_soda_ash_noncarbonate_hardness_stays_and_is_said():
    """2 meq/L of hardness without bicarbonate: by the balance of alkalinity and calcium that much stays beside alkalinity."""
    raw = water(2e-3, 2.1e-3, calcium=2e-3, magnesium=1e-4, sulfate=1e-3)
    bare, with_soda = step("single stage", soda_ash=None).run(raw), step("single stage").run(raw)
    assert "has no bicarbonate to go with" in words(bare, "warning")
    assert "has no bicarbonate to go with" not in words(with_soda)
    assert len(bare.doses) == 1
    assert_allclose(bare.stream.total("calcium"), 1e-3 + 0.5 * bare.stream.alkalinity_eq_l, rtol=1e-9)
    assert_allclose(with_soda.stream.total("calcium"), 0.5 * with_soda.stream.alkalinity_eq_l, rtol=0.01)
    assert (bare.stream.total("calcium") > 1e-3).all()


def test_words_on_magnesium_pairs_and_recarbonation():
    """What stays above practice is a warning; high pH and the pairs left out are notes with figures."""
    raw = water(4e-3, 4.4e-3, calcium=2.2e-3, magnesium=1e-3)
    assert "magnesium of 9" in words(step("single stage").run(raw), "warning")
    excess = step().run(raw)
    assert "water heaters" not in words(excess)
    assert "pairs with hydroxide are left out: at this pH 1." in words(excess, "note")
    assert any(f.next_step == "recarbonate next" for f in excess.findings)
    unknown = step("single stage").run(raw.replaced(totals={"calcium": raw.total("calcium")}))
    assert "magnesium is not known" in words(unknown, "warning")
    weak = step("split", excess_eq_l=0.0, fixed_mol_l=(1e-4, 0.0)).run(raw)
    assert "the blend holds 100 mg/L as CaCO3 of magnesium, wanted were 40" in words(weak, "warning")


@pytest.mark.parametrize(("settings", "message"), [
    ({"process": "warm"}, r"process of step 'soft' must be one of single stage, excess lime, split; found 'warm'"),
    ({"lime": stocked("limestone")}, r"lime that brings calcium and no carbonate; found 'limestone'. Name hydrated"),
    ({"soda_ash": stocked("caustic soda")}, r"carbonate that brings none; found 'caustic soda'. Name soda ash"),
    ({"soda_ash": stocked("sodium bicarbonate")}, r"found 'sodium bicarbonate'. Name soda ash"),
    ({"process": "split"}, r"belongs to split treatment and to it alone; step 'soft' is 'split' without it"),
    ({"magnesium_wanted_mol_l": 4e-4}, r"step 'soft' is 'excess lime' with it. Give it, or change"),
    ({"excess_eq_l": -1e-3}, r"excess lime of step 'soft' must be 0 or more; found -0.001"),
    ({"noncarbonate_left_eq_l": -1e-3}, r"hardness that may stay of step 'soft' must be 0 or more; found -0.001"),
    ({"fixed_mol_l": (1e-3,)}, r"doses 2 product\(s\), and fixed_mol_l must have as many values; found 1"),
    ({"calcite_ratio": 0.5}, r"ratio that calcium carbonate settles to must be 1 .* found 0.5"),
    ({"brucite_ratio": 0.5}, r"ratio that magnesium hydroxide settles to must be 1 .* found 0.5"),
    ({"least_calcium_mol_l": -1.0}, r"calcium that settling leaves must be 0 or more and below 0.1 mol/L; found -1"),
    ({"least_magnesium_mol_l": 35.0}, r"magnesium that settling leaves must be 0 or more .* found 35"),
])
def test_settings_that_cannot_be(settings, message):
    """Each says the rule, what was found and what to do."""
    settings = {"name": "soft", "process": "excess lime", "lime": stocked("quicklime"),
                "soda_ash": stocked("soda ash")} | settings
    with pytest.raises(InputError, match=message):
        Soften(**settings)


def test_softening_needs_hardness():
    """Calcium always, magnesium where it must go."""
    raw = many(2)
    bare = raw.replaced(totals={"calcium": raw.total("calcium")})
    with pytest.raises(InputError, match=r"needs the magnesium of the water; it is not known. Give magnesium or total"):
        step().run(bare)
    with pytest.raises(InputError, match=r"needs the calcium of the water; it is not known"):
        step("single stage").run(raw.replaced(totals={}))

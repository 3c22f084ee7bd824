"""Coagulation against worked examples of operators' books, stoichiometry and water worked out by hand."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_water import EQ_PER_MG_CACO3, ML_PER_MGAL, stocked, water_of, words
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.steps.coagulate import (
    Coagulate,
    alkali_for,
    alkalinity_floor_eq_l,
    ph_window,
    residual_alkali,
)
from aquabuf.chem.products import find_product
from aquabuf.errors import InputError
from aquabuf.tables import read_table


def coagulated(product, mg_l, water, **settings):
    """The step with a dose of the pure product in mg/L."""
    stock = stocked(product, basicity=settings.pop("basicity", None))
    return Coagulate(name="floc", product=stock, dose_mol_l=stock.mol_l(mg_l), **settings).run(water)


WORKED = [  # product, dose mg/L, raw alkalinity, used, left, decimals as the source has them (half of the last digit)
    ("alum 18-water", 18, 35, 8.1, 26.9, 0.051),       # solved operator exam, printed with 0.45
    ("alum 14-water", 41, 10, 20.7, -10.7, 0.051),     # Spellman, question; answer from IUPAC masses
    ("alum 14-water", 33, 57, 16.7, 40.3, 0.051),      # Davis, question; answer from IUPAC masses
    ("alum 14-water", 60, 130, 30.3, 99.7, 0.051),     # Davis 6-6, question; answer from IUPAC masses
    ("alum 18-water", 60, 130, 27.0, 103.0, 0.051),    # the same with the other hydrate
    ("ferric chloride", 30, 136, 27.8, 108.2, 0.051),  # Davis 6-7, question; answer from IUPAC masses
    ("alum 14-water", 40, 60, 20.2, 39.8, 0.051),      # factor 0.5052 of IUPAC masses
]


@pytest.mark.parametrize(("product", "dose", "raw", "used", "left", "within"), WORKED)
def test_alkalinity_used_and_left_as_worked_by_hand(product, dose, raw, used, left, within):
    """Dose times factor, and what remains."""
    out = coagulated(product, dose, water_of(7.2, raw))
    assert_allclose(out.figures["alkalinity_used_mg_l_caco3"], used, atol=within)
    assert_allclose(out.figures["alkalinity_left_mg_l_caco3"], left, atol=within)
    assert_allclose(out.stream.alkalinity_eq_l / EQ_PER_MG_CACO3, left, atol=within)


@pytest.mark.parametrize(("dose", "ml_d", "kg_d", "within"), [
    (41, 32 * ML_PER_MGAL, 1304, 1.0),  # Spellman, question; 0.2625 mg per mg of alum from IUPAC masses
    (33, 22.0, 190.6, 0.06),            # Davis, question; the same
])
def test_hydroxide_made(dose, ml_d, kg_d, within):
    """Aluminum hydroxide per day."""
    out = coagulated("alum 14-water", dose, water_of(7.2, 100.0))
    assert_allclose(out.figures["metal_hydroxide_mg_l"] * ml_d, kg_d, atol=within)
    assert_allclose(out.stream.solids["Al(OH)3"], 2.0 * dose / 594.34e3, rtol=1e-4)


def test_alum_dose_of_110_makes_28_9_mg_l_and_needs_quicklime():
    """Spellman question, answer from IUPAC masses: 28.9 mg/L hydroxide, 19.9 mg/L CaO for what 20 mg/L do not cover."""
    out = coagulated("alum 14-water", 110, water_of(7.2, 20.0), floor_eq_l=0.0)
    assert_allclose(out.figures["metal_hydroxide_mg_l"], 28.9, atol=0.051)
    assert_allclose(out.figures["alkalinity_short_mg_l_caco3"] * 56.077 / 100.086, 19.9, atol=0.051)


def test_short_alkalinity_of_41_alum_on_10_as_caustic():
    """Spellman question, answer from IUPAC masses: short 10.7, caustic 8.56 mg/L."""
    out = coagulated("alum 14-water", 41, water_of(7.2, 10.0), floor_eq_l=0.0)
    assert_allclose(out.figures["alkalinity_short_mg_l_caco3"], 10.7, atol=0.051)
    assert_allclose(out.figures["alkalinity_short_mg_l_caco3"] * 2 * 39.997 / 100.086, 8.56, atol=0.016)


def test_operator_example_of_residual_alkali():
    """Spellman 10.60: alum 52 at 0.45, raw 36, residual 30: add 17.4, as lime 13.5 by the book's 0.35 per 0.45."""
    short = residual_alkali(raw_eq_l=36.0, demand_eq_l=0.45 * 52.0, residual_eq_l=30.0)  # any one unit serves
    assert_allclose(short, 17.4, atol=1e-9)
    assert_allclose(short * 0.35 / 0.45, 13.5, atol=0.051)


@pytest.mark.parametrize(("product", "lime"), [("alum 18-water", 12.9), ("alum 14-water", 15.0)])
def test_operator_example_by_stoichiometry(product, lime):
    """The same with pure lime: 12.9 to 15.0 mg/L by hydrate, from IUPAC masses; the words tell lime and soda ash."""
    out = coagulated(product, 52, water_of(7.2, 36.0))
    assert_allclose(out.figures["hydrated_lime_for_short_mg_l"], lime, atol=0.051)
    assert_allclose(out.figures["soda_ash_for_short_mg_l"], lime * 105.988 / 74.092, atol=0.08)
    (floor,) = (f for f in out.findings if "floor" in f.words and f.severity == "warning")
    assert f"{lime} mg/L of pure hydrated lime" in floor.next_step
    assert "Spellman" in floor.rule
    assert "30.0 mg/L as CaCO3" in floor.words


def test_residual_alkali_of_the_book_and_none_when_there_is_enough():
    """Spellman 10.58 and 10.59: 44 needed, 30 there, 14 short; 16 mg/L short is 12.47 mg/L hydrate of 95 % (IUPAC)."""
    assert residual_alkali(raw_eq_l=30.0, demand_eq_l=44.0, residual_eq_l=0.0) == 14.0
    assert residual_alkali(raw_eq_l=80.0, demand_eq_l=44.0, residual_eq_l=30.0) == 0.0
    assert_allclose(alkali_for(16.0 * EQ_PER_MG_CACO3)["hydrated lime"] / 0.95, 12.47, atol=0.006)


def test_soda_ash_balances_twice_its_mass_of_alum():
    """1 mg of soda ash for 2.09 mg of 18-water alum, from IUPAC masses (one text prints the ratio upside down)."""
    out = coagulated("alum 18-water", 2.0956, water_of(7.2, 0.0), floor_eq_l=0.0)
    assert_allclose(out.figures["soda_ash_for_short_mg_l"], 1.0, atol=0.002)


def test_ph_of_alum_on_60_alkalinity():
    """40 mg/L on 60 at pH 7.5, 15 °C, I 0.003: pH 6.60, by a quartic in hydrogen ion apart from this code."""
    out = coagulated("alum 14-water", 40, water_of(7.5, 60.0, t_c=15.0))
    assert_allclose(out.figures["ph_after"], 6.60, atol=0.03)


@pytest.mark.parametrize("t_c", [10.0, 25.0])
def test_ph_as_by_hand(t_c):
    """Carbon stays, alkalinity falls: the pH of a water worked out from printed constants."""
    raw = water_of(7.6, 80.0, t_c=t_c)
    out = coagulated("ferric chloride", 25, raw)
    by_hand = BareWater(t_c, float(out.stream.ionic_strength_mol_l[0]))
    left = 80.0 * EQ_PER_MG_CACO3 - 3.0 * 25.0 / 162.20e3
    assert_allclose(out.stream.water().ph, by_hand.ph(left, float(raw.carbon_mol_l[0])), atol=0.004)


def test_what_goes_in_is_found_again():
    """Sulfate and ionic strength of alum; carbon and calcium untouched."""
    raw = water_of(7.6, 80.0, sulfate=1e-4, calcium=1e-3)
    dose = 1e-4
    out = Coagulate(name="floc", product=stocked("alum 14-water"), dose_mol_l=dose).run(raw)
    assert_allclose(out.stream.total("sulfate"), 4e-4)
    assert_array_equal(out.stream.carbon_mol_l, raw.carbon_mol_l)
    assert_array_equal(out.stream.total("calcium"), raw.total("calcium"))
    # half of 4 per sulfate, half of 1 per bicarbonate lost: 3 x 2 - 6 x 0.5 = 3 per mole
    assert_allclose(out.stream.ionic_strength_mol_l, 0.003 + 3.0 * dose)
    assert_array_equal(out.doses[0].mol_l, [dose])


def test_raw_water_at_which_it_runs_out():
    """At that raw alkalinity nothing is left, at the other just the floor."""
    figures = coagulated("alum 14-water", 40, water_of(7.5, 60.0)).figures
    for name, left in (("raw_alkalinity_used_up_mg_l_caco3", 0.0), ("raw_alkalinity_for_floor_mg_l_caco3", 30.0)):
        raw = water_of(7.5, float(figures[name][0]))
        assert_allclose(coagulated("alum 14-water", 40, raw).figures["alkalinity_left_mg_l_caco3"], left, atol=1e-9)


# ---------------------------------------------------------------- findings


def test_window_is_judged_on_both_sides_and_shows_its_source():
    """Iron works at 5.5 to 6.5 (course handout, printed); above and below are warned of, inside is not."""
    low, fine, high = (coagulated("ferric chloride", 40, water_of(7.5, alk, t_c=15.0)) for alk in (37.5, 70.0, 250.0))
    assert 5.5 < fine.figures["ph_after"][0] < 6.5
    assert "outside" not in words(fine)
    for out in (low, high):
        (finding,) = (f for f in out.findings if "outside 5.5 to 6.5" in f.words)
        assert (finding.severity, "handout" in finding.rule) == ("warning", True)
    assert low.figures["ph_after"][0] < 5.5 < 6.5 < high.figures["ph_after"][0]


def test_windows_of_the_table():
    """Alum 5.5 to 6.8 (operator text, printed), iron 5.5 to 6.5 (handout, printed); none where none is known."""
    found = {n: ph_window(find_product(n)) for n in ("alum 18-water", "ferric sulfate anhydrous", "polyaluminum chloride",
                                                     "ferrous sulfate 7-water", "sodium aluminate")}
    assert found == {"alum 18-water": (5.5, 6.8), "ferric sulfate anhydrous": (5.5, 6.5), "polyaluminum chloride": None,
                     "ferrous sulfate 7-water": None, "sodium aluminate": (5.5, 6.8)}
    assert all(r["mark"] and r["source"] and r["words"] and r["next_step"] for r in read_table("coagulant_windows"))
    assert_allclose(alkalinity_floor_eq_l(), 30.0 * EQ_PER_MG_CACO3)


def test_no_window_is_said_and_own_window_counts():
    """Polyaluminum chloride is judged only by a window of the plan; it takes 3 (1 - B) of alkalinity."""
    raw = water_of(7.6, 100.0)
    out = coagulated("polyaluminum chloride", 2.0, raw, basicity=0.5)
    assert "no pH window is known" in words(out, "note")
    assert_allclose(out.figures["alkalinity_used_mg_l_caco3"], 2.0 * 5.564 * 0.5, atol=0.002)  # IUPAC masses
    own = coagulated("polyaluminum chloride", 2.0, raw, basicity=0.5, ph_window=(6.0, 6.4))
    (finding,) = (f for f in own.findings if "outside 6 to 6.4" in f.words)
    assert (finding.severity, finding.rule) == ("warning", "set in the plan")
    assert "prehydrolyzed" not in finding.words


def test_alkalinity_used_up_is_warned_of():
    """Nothing left: the metal cannot precipitate whole."""
    assert "uses up all alkalinity" in words(coagulated("alum 14-water", 140, water_of(7.5, 60.0)), "warning")
    assert "uses up all" not in words(coagulated("alum 14-water", 100, water_of(7.5, 60.0)))


def test_own_floor_and_a_coagulant_that_brings_alkalinity():
    """A floor of the plan names the plan; sodium aluminate takes none."""
    out = coagulated("alum 14-water", 40, water_of(7.5, 60.0), floor_eq_l=1e-3)
    (finding,) = (f for f in out.findings if f.severity == "warning" and "floor" in f.words)
    assert (finding.rule, "50.0 mg/L" in finding.words) == ("set in the plan", True)
    base = coagulated("sodium aluminate", 10, water_of(7.0, 60.0))
    assert_allclose(base.figures["alkalinity_used_mg_l_caco3"], -6.105, atol=0.001)  # IUPAC masses
    assert "floor" not in words(base)


@pytest.mark.parametrize("off", [-1e-6, -1e-13, 0.0, 1e-13, 1e-6])
def test_a_floor_that_is_just_kept_is_no_warning(off):
    """Rounding of the sum is no shortage; a millionth is."""
    used = coagulated("alum 14-water", 40, water_of(7.5, 60.0)).figures["alkalinity_used_mg_l_caco3"][0]
    floor = (60.0 - used) * EQ_PER_MG_CACO3 * (1.0 + off)
    out = coagulated("alum 14-water", 40, water_of(7.5, 60.0), floor_eq_l=floor)
    assert any(f.severity == "warning" and "floor" in f.words for f in out.findings) == (off > 1e-9)


def test_phosphate_is_said_to_be_left_out_unless_there_is_none():
    """The note goes where phosphate is measured as zero."""
    assert "phosphate" in words(coagulated("alum 14-water", 10, water_of(7.5, 60.0)))
    assert "phosphate" not in words(coagulated("alum 14-water", 10, water_of(7.5, 60.0, phosphate=0.0)))


# ---------------------------------------------------------------- bad input


def test_only_coagulants():
    """Another product is refused by name."""
    with pytest.raises(InputError, match=r"'floc' coagulates and needs a coagulant; found 'soda ash'.*Name another"):
        Coagulate(name="floc", product=stocked("soda ash"), dose_mol_l=1e-4)


def test_bad_doses():
    """Negative, or of another length than the water."""
    step = {"name": "floc", "product": stocked("alum 14-water")}
    with pytest.raises(InputError, match=r"dose_mol_l of step 'floc' must be at least 0; found -1 in 1 of 2 rows"):
        Coagulate(dose_mol_l=np.array([1.0, -1.0]), **step).run(water_of(rows=2))
    with pytest.raises(InputError, match=r"one number or one per row of water \(3\); found .*Give one value"):
        Coagulate(dose_mol_l=np.array([1.0, 1.0]), **step).run(water_of(rows=3))


def test_held_takes_another_dose():
    """A feed that goes on keeps everything but the dose."""
    step = Coagulate(name="floc", product=stocked("alum 14-water"), dose_mol_l=1e-4, floor_eq_l=2e-4)
    other = step.held(Coagulate(name="floc", product=step.product, dose_mol_l=2e-4).run(water_of()).doses)
    assert (other.floor_eq_l, other.name) == (2e-4, "floc")
    assert_array_equal(other.dose_mol_l, [2e-4])

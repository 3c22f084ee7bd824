"""What alkalinity and acidity are made of, against tables of standard methods and a second speciation by hand."""

import itertools

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from numpy.testing import assert_allclose, assert_array_equal
from titrations import acid_steps, hard, row, sample, steps

from aquabuf.assess.titration.parts import METAL_ACIDITY, calculated_acidity, partition

# Rule of phenolphthalein (P) and total (T) alkalinity, standard methods for water: P, T, then hydroxide, carbonate and
# bicarbonate, one case per row of the table; two of them are printed worked examples (mg/L as CaCO3)
RULE = {"P is 0": (0.0, 80.0, 0.0, 0.0, 80.0), "P below half": (20.0, 100.0, 0.0, 40.0, 60.0), "P is half": (45.0, 90.0, 0.0, 90.0, 0.0),
        "P above half": (50.0, 80.0, 20.0, 60.0, 0.0), "P is T": (70.0, 70.0, 70.0, 0.0, 0.0)}


@pytest.mark.parametrize("case", RULE)
def test_rule_of_phenolphthalein(case):
    """All five rows of the table."""
    p, t, *parts = RULE[case]
    assert_allclose(partition(p, t), parts, rtol=0, atol=1e-12)


def test_parts_add_up_to_the_total():
    """Hydroxide, carbonate and bicarbonate are all there is, and none is below zero."""
    p, t = np.array(list(itertools.product(np.linspace(0.0, 3.0, 13), np.linspace(0.0, 3.0, 13)))).T
    able = p <= t
    parts = np.array(partition(p, t))
    assert_allclose(parts.sum(axis=0)[able], t[able], rtol=0, atol=1e-12)
    assert (parts[:, able] >= 0.0).all()
    assert np.isnan(parts[:, ~able]).all()


@pytest.mark.parametrize(("p", "t"), [(-1.0, 80.0), (90.0, 80.0), (np.nan, 80.0), (10.0, np.nan), (-2.0, -1.0)])
def test_no_partition_of_what_cannot_be(p, t):
    """More to pH 8.3 than in all, a negative or a missing value: nothing is told."""
    assert np.isnan(partition(p, t)).all()


def test_rule_in_the_table_is_that_of_the_curve():
    """A water of pH 9: acid to pH 8.3 by hand is P; carbonate is twice that, bicarbonate the rest, and the rule holds."""
    alkalinity, carbon, ionic = 2e-3, 1.9e-3, 5e-3
    water = BareWater(25.0, ionic)
    to_8_3 = (alkalinity - water.alkalinity(8.3, carbon)) * 1e6
    r = row(sample(np.unique([*np.linspace(0.0, 0.8, 17), *steps(4.0)]), alkalinity=alkalinity, carbon=carbon, ionic=ionic))
    assert_allclose(r["partition_carbonate_ueq_l"], 2.0 * to_8_3, rtol=0.01)
    assert_allclose(r["partition_bicarbonate_ueq_l"], 2000.0 - 2.0 * to_8_3, rtol=0.002)
    assert (r["partition_hydroxide_ueq_l"], r["partition_holds"]) == (0.0, "yes")


HOLDS = {
    "yes": hard(),
    "yes, with hydroxide": sample(acid_steps(6e-4, alkalinity=1e-4, count=60), alkalinity=1e-4, carbon=8e-5, strength=0.02),  # pH 9.1, 13 % of it
    "the first pH is above 9.2": sample(steps(4.0), alkalinity=2e-3, carbon=1.4e-3),
    "no total alkalinity above zero, or no reading before the first acid": sample(steps(4.0)[2:], alkalinity=2e-3, carbon=1.9e-3),
}


@pytest.mark.parametrize("words", HOLDS)
def test_where_the_rule_holds(words):
    """The reason stands beside the numbers; a curve that starts past pH 8.3 has no P to go by."""
    r = row(HOLDS[words])
    assert r["partition_holds"] == words.split(", with")[0]
    assert np.isnan(r["partition_bicarbonate_ueq_l"]) == words.startswith("no total")


def test_rule_does_not_hold_with_ammonia():
    """1 mM of ammonium at pH 9 carries a third of a meq of ammonia, which the rule would call carbonate."""
    with_ammonia = sample(steps(4.0), alkalinity=2e-3, carbon=1.5e-3, acids=((1e-3, 9.244),), ammonium_mol_l=1e-3)
    r = row(with_ammonia)
    assert with_ammonia["ph"][0] < 9.2
    assert r["partition_holds"] == "other bases or acids hold more than 2% of it"


@pytest.mark.parametrize("t_c", [10.0, 25.0])
@pytest.mark.parametrize("carbon", [2.3e-3, 1.9e-3, 1.3e-3])
def test_species_at_the_first_ph(t_c, carbon):
    """Hydroxide, carbonate and bicarbonate by a second speciation with printed constants.

    Two sources of Kw differ by 0.006 in its logarithm at 10 °C: 1.4 % of hydroxide.
    """
    ionic, alkalinity = 4e-3, 2e-3
    r = row(sample(steps(4.0), alkalinity=alkalinity, carbon=carbon, t_c=t_c, ionic=ionic))
    water = BareWater(t_c, ionic)
    ph = water.ph(alkalinity, carbon)
    _, a1, a2 = water.shares(ph)
    expected = np.array([water.c_oh * 10.0**ph, 2.0 * carbon * a2, carbon * a1]) * 1e6
    assert_allclose(r["species_hydroxide_ueq_l"], expected[0], rtol=0.015, atol=0.02)
    assert_allclose([r["species_carbonate_ueq_l"], r["species_bicarbonate_ueq_l"]], expected[1:], rtol=2e-3, atol=0.02)


# ------------------------------------------------------------------ acidity

# Acidity of mine water from pH and metals, mg/L as CaCO3, worked out by hand with exact weights: 50.0435 mg CaCO3 per meq;
# Fe 55.845, Mn 54.938, Al 26.982 g/mol. pH, Fe(II), Fe(III), Al, Mn in mg/L.
MINE = [(3.0, 0, 50, 20, 10, 313.96), (2.5, 100, 200, 80, 15, 1347.60), (6.3, 60, 0, 0.2, 5, 117.78), (4.0, 0, 2, 25, 30, 204.14)]
FE, MN, AL = 55.845e3, 54.938e3, 26.982e3  # mg/mol


def metals(fe2, fe3, al, mn):
    """Amounts in mol/L."""
    return {"iron_2_mol_l": fe2 / FE, "iron_3_mol_l": fe3 / FE, "aluminum_mol_l": al / AL, "manganese_mol_l": mn / MN}


@pytest.mark.parametrize("line", MINE, ids=lambda x: f"pH {x[0]}")
def test_acidity_by_calculation(line):
    """Four waters against hand values."""
    ph, *amounts, expected = line
    given = {name: np.array([value]) for name, value in metals(*amounts).items()}
    assert_allclose(calculated_acidity(given, np.array([ph])) * 50.0435e3, expected, rtol=0, atol=0.005)


def test_acidity_counts_what_was_measured():
    """One metal alone is enough; without any there is no calculated acidity. Two protons per Fe(II) and Mn, three else."""
    ph = np.array([7.0, 7.0])
    for name, protons in (("iron_2_mol_l", 2.0), ("iron_3_mol_l", 3.0), ("aluminum_mol_l", 3.0), ("manganese_mol_l", 2.0)):
        assert_allclose(calculated_acidity({name: np.array([1e-4, np.nan])}, ph), [protons * 1e-4 + 1e-7, np.nan])
    assert np.isnan(calculated_acidity({}, ph)).all()
    assert len(METAL_ACIDITY) == 4


def test_net_acidity_is_calculated_less_alkalinity_and_may_be_negative():
    """Third mine water with 2 meq/L of alkalinity: 117.78/50.0435 meq/L of acidity less 2 is 353.5 µeq/L; with 4 meq/L, -1646.5."""
    for alkalinity, expected in ((2e-3, 353.5), (4e-3, -1646.5)):
        ionic = 8e-3
        carbon = BareWater(25.0, ionic).dic(6.3, alkalinity)
        r = row(sample(steps(alkalinity * 2000.0), alkalinity=alkalinity, carbon=carbon, ionic=ionic, **metals(60, 0, 0.2, 5)))
        assert_allclose(r["first_ph"], 6.3, rtol=0, atol=0.002)
        assert_allclose(r["calculated_acidity_ueq_l"], 117.78 / 50.0435 * 1e3, rtol=0, atol=0.2)
        assert_allclose(r["net_acidity_ueq_l"], expected, rtol=0, atol=1e4 * alkalinity)  # bicarbonate left takes up to 1 % off the Gran line


def test_net_acidity_of_acid_water_counts_its_free_acid_once():
    """At pH 3 the alkalinity is negative, and that acid is in the calculated acidity already."""
    r = row(sample(np.linspace(0.0, 6.0, 25), alkalinity=-1.2e-3, carbon=1e-4, ionic=4e-3, strength=-0.05, **metals(0, 50, 20, 10)))
    assert r["recommended_ueq_l"] < -1000.0
    assert r["net_acidity_ueq_l"] == r["calculated_acidity_ueq_l"]


def test_net_acidity_is_unknown_where_the_alkalinity_is():
    """Neutral mine water titrated with base alone: acidity is known, but not what alkalinity would take off it."""
    r = row(sample(np.linspace(0.0, 1.6, 17), alkalinity=1e-3, carbon=1.5e-3, strength=-0.05, **metals(60, 0, 0.2, 5)))
    assert r["calculated_acidity_ueq_l"] > 2000.0
    assert np.isnan(r["net_acidity_ueq_l"])


def test_carbon_dioxide_by_base_to_phenolphthalein():
    """CO2 and what bicarbonate lacks at pH 8.3, by hand: base to pH 8.3 is A(8.3) - A at constant carbon."""
    alkalinity, carbon, ionic = 1e-3, 1.4e-3, 3e-3
    water = BareWater(25.0, ionic)
    r = row(sample(np.linspace(0.0, 1.2, 49), alkalinity=alkalinity, carbon=carbon, ionic=ionic, strength=-0.05))
    expected = (water.alkalinity(8.3, carbon) - alkalinity) * 1e6
    assert_allclose(r["co2_acidity_umol_l"], expected, rtol=0, atol=1.5)
    assert_allclose(r["acidity_8_3_ueq_l"], expected, rtol=0, atol=1.5)


def test_carbon_dioxide_of_acid_water_is_what_lies_past_mineral_acidity():
    """From pH 3.4 up: the base to pH 4.5 is taken off, and the free acid left there, which is no carbon dioxide."""
    r = row(sample(np.linspace(0.0, 2.2, 89), alkalinity=-4e-4, carbon=5e-4, ionic=2e-3, strength=-0.05))
    water = BareWater(25.0, 1.5e-3)
    between, free = water.alkalinity(8.3, 5e-4) - water.alkalinity(4.5, 5e-4), water.c_h * 10.0**-4.5
    assert_allclose(r["acidity_8_3_ueq_l"] - r["acidity_4_5_ueq_l"], between * 1e6, rtol=0, atol=4.0)
    assert_allclose(r["co2_acidity_umol_l"], (between - free) * 1e6, rtol=0, atol=4.0)
    assert_allclose(r["co2_acidity_umol_l"], 500.0, rtol=0.02)


def test_acid_titration_has_no_co2_acidity_but_a_signed_acidity():
    """Water above pH 8.3 needs acid to get there: acidity with a minus sign; an acid curve tells no CO2."""
    r = row(sample(steps(4.0), alkalinity=2e-3, carbon=1.9e-3))
    assert np.isnan(r["co2_acidity_umol_l"])
    assert r["acidity_8_3_ueq_l"] < 0.0
    assert_array_equal(r["acidity_4_5_ueq_l"], -r["fixed_4_5_ueq_l"])

"""Wastes: base by composition, pH, alkalinity or titration; demand against closed forms; what is refused and told.

Closed forms use the constants that the engine publishes for the waste, or pK of the acids table with ideal water, and
are solved here with brentq. Figures of facts are those of the tables named (ideal, 25 °C).
"""

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from aquabuf.assess.tank.composition import Waste, dissolved
from aquabuf.assess.tank.curve import MeasuredCurve
from aquabuf.assess.tank.job_contents import free_acids
from aquabuf.assess.tank.waste import chemistry, ionic_strength_of
from aquabuf.chem.acids import Acid, acid_table
from aquabuf.chem.products import products
from aquabuf.engine.conditions import conditions
from aquabuf.errors import InputError

C_H, C_OH = float(conditions(25.0).c_h), float(conditions(25.0).c_oh)  # published: ideal water of 25 °C, its density in it


def waste(*contents, ph=None, t_c=25.0, name="w", own=(), **more):
    """A waste that holds these, by name of a product or total. [mol/L]"""
    known = products() | free_acids()
    return dissolved(Waste(name=name, ph=ph, t_c=t_c, **more), [(known.get(n, n), mol) for n, mol in contents], own)


def ideal(*wastes, **options):
    """Its tables without activities."""
    return chemistry(wastes, ionic_strength_mol_l=0.0, **options)


def water(ph):
    """[OH-] - [H+], ideal."""
    return C_OH * 10.0**ph - C_H * 10.0**-ph


def lost(ph, pks):
    """Mean protons lost, closed form."""
    weights, k = [1.0], 1.0
    for n, pk in enumerate(pks, start=1):
        k *= 10.0**-pk
        weights.append(k * 10.0 ** (n * ph))
    return sum(n * w for n, w in enumerate(weights)) / sum(weights)


# ---------------------------------------------------------------- closed forms


@pytest.mark.parametrize("ph", [1.0, 3.0, 6.0, 7.0, 9.0, 12.0])
def test_strong_acid_with_strong_base(ph):
    """Demand is acid less what water has; pH after a dose by the quadratic of facts 2.4."""
    chem = ideal(waste(("hydrochloric acid", 0.01)))
    assert_allclose(chem.demand(ph), 0.01 + water(ph), rtol=2e-5, atol=1e-10)
    x = 0.01 - 0.0099
    assert_allclose(chem.ph_after(0.0099), -math.log10((x + math.sqrt(x * x + 4 * C_H * C_OH)) / 2 / C_H), atol=1e-5)


@pytest.mark.parametrize(("contents", "ph0", "to_6", "to_7", "to_9", "beta_7"), [
    ([("hydrochloric acid", 0.1)], 1.000, 0.099999, 0.100000, 0.100010, 4.605e-7),
    ([("hydrochloric acid", 0.01)], 2.000, 0.009999, 0.010000, 0.010010, 4.605e-7),
    ([("hydrochloric acid", 0.01), ("carbon dioxide", 1e-3)], 2.000, 0.010307, 0.010817, 0.011053, 3.467e-4),
    ([("sulfuric acid", 0.05)], 1.240, 0.099994, 0.100000, 0.100010, 1.59e-6),
    ([("acetic acid", 0.1)], 2.881, 0.094605, 0.099433, 0.100004, 1.298e-3)])
def test_typical_streams(contents, ph0, to_6, to_7, to_9, beta_7):
    """Facts 3.2 (computed, ideal): pH as it comes, demand and buffer intensity."""
    chem = ideal(waste(*contents))
    assert_allclose(chem.ph, [ph0], atol=1.5e-3)
    assert_allclose(chem.demand([6.0, 7.0, 9.0]), [to_6, to_7, to_9], rtol=6e-4)
    assert_allclose(chem.readout.buffer_at(7.0, [1.0, 0.0]), beta_7, rtol=0.01)


@pytest.mark.parametrize(("contents", "ratio"), [
    ([("hydrochloric acid", 0.1)], 1.00), ([("sulfuric acid", 0.05)], 1.74), ([("acetic acid", 0.1)], 75.6)])
def test_ph_alone_misstates_demand(contents, ratio):
    """Facts 3.2: true demand over 10^-pH."""
    chem = ideal(waste(*contents))
    assert_allclose(chem.demand(7.0) / 10.0 ** -chem.ph[0], ratio, rtol=5e-3)


@pytest.mark.parametrize("name", ["phosphoric acid", "acetic acid", "citric acid", "lactic acid", "oxalic acid"])
def test_free_acids_by_their_charge_balance(name):
    """An acid as such starts where its charge balance closes, found here by bisection with the pK of the acids table."""
    acid = next(a for a in acid_table().values() if a.meaning == name)
    mol = 0.02
    own = brentq(lambda p: mol * lost(p, acid.pk) + water(p), 0.5, 7.0)
    chem = ideal(waste((name, mol)))
    assert_allclose(chem.ph, [own], atol=2e-5)
    for ph in (5.0, 7.0, 9.0):
        assert_allclose(chem.demand(ph), mol * lost(ph, acid.pk) + water(ph), rtol=1e-5)


def test_activities_by_published_constants():
    """With activities: conditional constants of the engine in the same closed form, ionic strength by hand 0.1."""
    chem = chemistry([waste(("hydrochloric acid", 0.1))])
    c = conditions(25.0, 0.0, 0.1)
    assert_allclose(ionic_strength_of(chem.wastes[0]), 0.1, rtol=1e-12)
    assert_allclose(chem.ph, [-math.log10(0.1 / float(c.c_h))], atol=1e-5)
    gamma = 10.0 ** (-float(c.debye_huckel_a) * (math.sqrt(0.1) / (1 + math.sqrt(0.1)) - 0.3 * 0.1))  # Davies, form recalled
    assert_allclose(chem.ph, [-math.log10(0.1 * gamma)], atol=2e-3)


@pytest.mark.parametrize(("contents", "strength"), [
    ([("hydrochloric acid", 0.1)], 0.1), ([("sulfuric acid", 0.05)], 0.15), ([("caustic soda", 0.2)], 0.2),
    ([("calcium", 0.01), ("sulfate", 0.01)], 0.04), ([("acetate", 0.1)], 0.1)])
def test_ionic_strength_by_hand(contents, strength):
    """Neutralized: NaCl, Na2SO4 (3 c), NaX, CaSO4 (4 c), sodium acetate; definition, half of sum z^2 c."""
    assert_allclose(ionic_strength_of(waste(*contents, ph=7.0)), strength, rtol=0.01)


def test_ionic_strength_of_base_alone_is_that_of_its_salt():
    """0.1 eq/L of strong acid nobody named make 0.1 mol/L of a salt."""
    assert ionic_strength_of(Waste(name="w", base_eq_l=-0.1)) == 0.1


def test_metals_that_fall_out_leave_ionic_strength():
    """Iron(III) does not stay at pH 7, nickel does in part: at 1e-6 mol/L all of it, 4 c / 2 and its counter-ions c."""
    assert_allclose(ionic_strength_of(waste(("iron(III)", 1e-3), ph=3.0)), 0.0, atol=1e-12)
    assert_allclose(ionic_strength_of(waste(("nickel", 1e-6), ph=3.0)), 0.5 * (4e-6 + 2e-6), rtol=1e-9)


# ---------------------------------------------------------------- ph and composition


@pytest.mark.parametrize("ph", [-1.0, 0.5, 2.5, 4.0, 7.0, 10.5, 15.0])
def test_ph_and_composition_come_back(ph):
    """The pH measured is that of the tables, also at the ends; base by electroneutrality of the closed form."""
    chem = ideal(waste(("acetate", 0.02), ph=ph))
    assert_allclose(chem.ph, [ph], atol=1e-5)
    assert_allclose(chem.base_eq_l, [0.02 * lost(ph, acid_table()["acetate"].pk) + water(ph)], rtol=1e-3, atol=1e-9)


def test_measured_ph_decides_where_only_salts_and_weak_acids_are_named():
    """Acetic acid half neutralized by something unnamed: pH 4.756 says that half is left; salts bring no base."""
    chem = ideal(waste(("acetic acid", 0.1), ("calcium chloride", 0.01), ph=acid_table()["acetate"].pk[0]))
    assert_allclose(chem.demand(9.0), 0.05, rtol=1e-3)
    named = ideal(waste(("hydrochloric acid", 0.1), ("acetic acid", 0.1), ph=3.0))  # strong acid named: it decides
    assert_allclose(named.demand(9.0), 0.2, rtol=1e-3)
    assert any("strong acids and bases imply pH 1.0" in w and "measured is 3.00" in w for w in named.warnings)


def test_half_a_ph_of_disagreement_is_told_and_less_is_not():
    """0.01 N: pH 2; 2.2 is within 0.3, 2.4 is not."""
    for ph, told in ((2.2, False), (2.4, True)):
        assert bool(ideal(waste(("hydrochloric acid", 0.01), ph=ph)).warnings) is told


def test_strong_acid_by_electrode_is_unsure():
    """pH 1 with 1 mmol/L of acetate: 0.1 in pH is 23 % of some 0.1 eq/L (2.303 x 0.1); at pH 4 acetate carries it."""
    (words,) = ideal(waste(("acetate", 1e-3), ph=1.0)).warnings
    assert "an error of 0.1 in pH is 23 % of the demand to pH 7" in words
    assert ideal(waste(("acetate", 0.1), ph=3.0)).warnings == ()


def test_ammonia_and_own_acid():
    """Ammonium counts zero and its gas one; an own acid of one pK as the closed form."""
    pk = acid_table()["ammonium"].pk[0]
    assert_allclose(ideal(waste(("ammonium", 0.01), ("caustic soda", 0.01))).base_eq_l, [0.01])
    assert_allclose(ideal(waste(("ammonium", 0.01), ph=pk)).base_eq_l, [0.005 + water(pk)], rtol=1e-4)
    own = Acid(name="resin", pk=(5.0,))
    assert_allclose(ideal(waste(("resin", 0.01), ph=5.0, own=(own,))).demand(8.0), 0.005 / 1.001 * 0.999 + water(8.0) - water(5.0), rtol=1e-3)


def test_products_that_form_hydroxide_bring_dissolved_metal():
    """Ferric chloride is a salt of iron: three equivalents to fall out, none before; alum the same for each aluminum."""
    ferric = waste(("ferric chloride", 0.01))
    assert (dict(ferric.metals), ferric.base_eq_l, ferric.ions["chloride"]) == ({"iron(III)": 0.01}, 0.0, 0.03)
    assert_allclose(ideal(ferric).demand(7.0), 0.03, rtol=1e-3)
    aluminate = waste(("sodium aluminate", 0.01))  # Al(OH)4-: four equivalents back to the free ion
    assert (dict(aluminate.metals), aluminate.base_eq_l) == ({"aluminum": 0.01}, 0.04)


# ---------------------------------------------------------------- metals: mine acidity


@pytest.mark.parametrize(("ph", "ferrous", "ferric", "aluminum", "acidity", "to_ph"), [
    (3.0, 0.0, 50.0, 20.0, 1.0 + 3 * 50 / 55.845 + 3 * 20 / 26.982, 6.5),
    (2.5, 0.0, 200.0, 80.0, 3.162 + 3 * 200 / 55.845 + 3 * 80 / 26.982, 6.5),
    (4.0, 0.0, 2.0, 25.0, 0.1 + 3 * 2 / 55.845 + 3 * 25 / 26.982, 6.5),
    (6.3, 60.0, 0.0, 0.0, 2 * 60 / 55.845, 10.0)])
def test_mine_acidity(ph, ferrous, ferric, aluminum, acidity, to_ph):
    """Kirby & Cravotta 2005 (facts 5.4, without manganese, which falls out later), IUPAC masses. [meq/L]"""
    seep = waste(("iron(II)", ferrous / 55845.0), ("iron(III)", ferric / 55845.0), ("aluminum", aluminum / 26982.0), ph=ph)
    assert_allclose(1e3 * float(ideal(seep).demand(to_ph)), acidity + 1e3 * water(to_ph), rtol=0.01)


def test_mine_acidity_with_manganese():
    """Row 1 of facts 5.4 with its manganese: 313.96 mg/L as CaCO3 by exact weights, once all has fallen out.

    To pH 10.5; hydroxide that water and aluminate take by then (0.32 and 0.74 meq/L) are not acidity of the waste.
    """
    seep = waste(("iron(III)", 50 / 55845), ("aluminum", 20 / 26982), ("manganese(II)", 10 / 54938), ph=3.0)
    taken = float(ideal(seep).demand(10.5)) - water(10.5) - 20 / 26982
    assert_allclose(taken * 50.043e3, 313.96, rtol=0.02)


def test_dissolved_iron_above_its_hydroxide_is_told():
    """50 mg/L at pH 3 and 25 °C: 10^-37.1 / [OH-]^3, some 4 mg/L, stay by the tables; all is counted, pH sinks."""
    stays = 55845.0 * 10.0**-37.1 / (C_H * C_OH / 1e-3) ** 3
    chem = ideal(waste(("iron(III)", 50 / 55845), ph=3.0))
    assert any(f"of 50 mg/L iron(III) its hydroxide leaves {stays:.2g} mg/L dissolved at pH 3.00; all of it is counted as dissolved" in w
               for w in chem.warnings)
    assert_allclose(chem.base_eq_l, [water(3.0)], rtol=1e-3)
    assert chem.ph[0] < 2.9
    farther = ideal(waste(("iron(III)", 50 / 55845), ph=4.0))  # 2.6 meq/L of acid set free: below pH 3
    assert farther.ph[0] < 3.0
    assert not any("imply" in w for w in farther.warnings)


def test_iron_that_cannot_be_dissolved_is_solid():
    """At pH 8 iron(III) is hydroxide: no demand, and told; base holds three equivalents of it."""
    chem = ideal(waste(("iron(III)", 1e-3), ph=8.0))
    assert_allclose(chem.demand(8.0), 0.0, atol=1e-8)
    assert_allclose(chem.base_eq_l, [3e-3 + water(8.0)], rtol=1e-4)
    assert any("counted as hydroxide that is solid already" in w for w in chem.warnings)


# ---------------------------------------------------------------- alkalinity


@pytest.mark.parametrize("ph", [5.0, 6.3, 8.3, 9.5])
def test_carbon_of_a_titrated_alkalinity(ph):
    """Carbon by the closed form (A - w) / (a1 + 2 a2) with the constants of the tables; it is told and kept in the waste."""
    chem = ideal(waste(("alkalinity", 1e-3), ph=ph))
    c = conditions(25.0)
    share = lost(ph, (-math.log10(float(c.k1)), -math.log10(float(c.k2))))
    assert_allclose(chem.wastes[0].carbon_mol_l, (1e-3 - water(ph)) / share, rtol=1e-4)
    assert_allclose(chem.ph, [ph], atol=1e-4)
    assert any("follows from its alkalinity and pH" in w for w in chem.warnings)


@pytest.mark.parametrize(("contents", "ph", "words"), [
    ([("alkalinity", -1e-3)], 3.0, "below pH 4.5 alkalinity and pH do not tell inorganic carbon"),
    ([("alkalinity", 0.05)], 4.8, "which no open water has; none is counted"),  # more free CO2 than 1 atm dissolves
    ([("alkalinity", 1e-4)], 11.0, "imply an inorganic carbon of -")])
def test_carbon_that_cannot_be(contents, ph, words):
    """None is counted, and that is told."""
    chem = ideal(waste(*contents, ph=ph))
    assert chem.wastes[0].carbon_mol_l == 0.0
    assert any(words in w for w in chem.warnings)


def test_carbon_stays_where_it_is_given():
    """Alkalinity, pH and carbon: nothing is made up; alkalinity decides and the difference is told."""
    chem = ideal(waste(("alkalinity", 2e-3), ("carbon", 1e-3), ph=7.0))
    assert chem.wastes[0].carbon_mol_l == 1e-3
    assert any("alkalinity implies pH" in w for w in chem.warnings)


# ---------------------------------------------------------------- several wastes, titrations


def test_blending_conserves_base_and_carriers():
    """Base of a blend is the mean by volume; acid and caustic of equal strength give neutral water."""
    chem = ideal(waste(("hydrochloric acid", 0.02), name="a"), waste(("caustic soda", 0.02), ("acetate", 0.01), name="b"))
    base, amounts = chem.blend([0.25, 0.75])
    assert_allclose(base, 0.25 * -0.02 + 0.75 * 0.02)
    assert_allclose(amounts, [0.25, 0.75, 0.0])
    even = brentq(lambda p: 0.005 * lost(p, acid_table()["acetate"].pk) + water(p), 2.0, 9.0)  # only acetic acid is left
    assert_allclose(chem.ph_after(0.0, [0.5, 0.5]), even, atol=1e-4)
    assert_allclose(chem.demand(7.0, [0.5, 0.5]), 0.005 * lost(7.0, acid_table()["acetate"].pk) + water(7.0), rtol=1e-4)
    with pytest.raises(InputError, match=r"several wastes need shares of each; found 2 wastes and no shares. Give one share"):
        chem.demand(7.0)


def acetic_curve(t_c=25.0):
    """A fine titration of 0.1 M acetic acid, ideal."""
    pk = acid_table()["acetate"].pk[0]
    raw = brentq(lambda p: 0.1 * lost(p, (pk,)) + water(p), 1.0, 7.0)
    ph = np.concatenate([[2.0, 2.4], raw + np.arange(0.0, 9.0, 0.1)])
    return MeasuredCurve("s1", [0.1 * lost(p, (pk,)) + water(p) for p in ph], ph, t_c)


def test_titration_tells_the_same_as_composition():
    """Demand of the measured curve is that of the acid it was made of; a pH beside it is only compared."""
    chem = ideal(Waste(name="w", curve=acetic_curve(), ph=4.0))
    for ph in (4.0, 6.0, 7.0, 9.0):
        assert_allclose(chem.demand(ph), 0.1 * lost(ph, acid_table()["acetate"].pk) + water(ph), rtol=2e-3)
    assert any("titration starts at pH 2.88, measured is 4.00" in w for w in chem.warnings)
    assert any("beyond, only strong acid and base and water are counted" in w for w in chem.warnings)


def test_titration_keeps_its_own_temperature():
    """Titrated at 25 °C and treated at 40: water by each, and told beyond 10 K."""
    warm = chemistry([Waste(name="w", t_c=40.0, curve=acetic_curve())])
    assert any("titrated at 25 °C, treated at 40 °C" in w for w in warm.warnings)
    near = chemistry([Waste(name="w", t_c=30.0, curve=acetic_curve())])
    assert not any("treated at" in w for w in near.warnings)
    assert_allclose(warm.demand(7.0), near.demand(7.0), rtol=1e-3)  # acid as titrated, water is nothing there


def test_ionic_strength_of_unknown_composition_is_told():
    """Taken from the wastes that tell theirs, else zero."""
    alone = chemistry([Waste(name="w", curve=acetic_curve())])
    assert any("its ionic strength is not known, as no ions are given; it is taken as zero" in w for w in alone.warnings)
    both = chemistry([Waste(name="w", curve=acetic_curve()), waste(("hydrochloric acid", 0.1), name="b")])
    assert any("that of the other wastes is taken, 0.1 mol/L" in w for w in both.warnings)
    assert_allclose(float(both.constants.ionic_strength_mol_l), 0.1)


def test_temperature_of_the_mixture():
    """The mean unless given; neutral pH is half of pKw of the temperature."""
    chem = chemistry([waste(("hydrochloric acid", 0.01), t_c=10.0), waste(("caustic soda", 0.01), t_c=50.0)])
    assert chem.t_c == 30.0
    at = chemistry(chem.wastes, t_c=20.0, ionic_strength_mol_l=0.0)
    c = conditions(20.0)
    assert_allclose(at.ph_after(0.0, [0.5, 0.5]), -0.5 * math.log10(float(c.c_oh / c.c_h)), atol=1e-4)


def test_beyond_davies_is_told():
    """1 mol/L of salt: constants are those of 0.5."""
    chem = chemistry([waste(("hydrochloric acid", 1.0))])
    assert float(chem.constants.ionic_strength_mol_l) == 0.5
    assert any("ionic strength of about 1 mol/L; activities are held at those of 0.5 mol/L" in w for w in chem.warnings)


# ---------------------------------------------------------------- refused


@pytest.mark.parametrize(("make", "words"), [
    (lambda: chemistry([]), r"a neutralization needs at least one waste; found none. Describe the stream"),
    (lambda: chemistry([Waste(name="w", ph=2.0)]), r"waste 'w' must be known by a titration, .*; found its pH alone. .* Titrate a liter"),
    (lambda: chemistry([Waste(name="w")]), r"found nothing alone"),
    (lambda: chemistry([waste(("chloride", 0.1), ph=1.0)]), r"found its pH and ions that hold no protons alone"),
    (lambda: chemistry([waste(("acetate", 0.1))]), r"found its composition without pH alone"),
    (lambda: chemistry([waste(("acetate", 0.0), ("sulfuric acid", 0.0), ph=3.0)]), r"found its pH alone"),
    (lambda: chemistry([Waste(name="w", ph=3.0, acids={acid_table()["acetate"]: 0.0})]), r"found its pH alone"),
    (lambda: waste(("acetate", -0.1)), r"the amount of acetate in waste 'w' must be zero or more; found -0.1 mol/L. Correct it"),
    (lambda: waste(("sulfuric acid", float("nan"))), r"the amount of sulfuric acid in waste 'w' must be zero or more; found nan"),
    (lambda: waste(("acetat", 0.1)), r"no weak acid is called 'acetat'; nearest: acetate"),
    (lambda: waste(("alkalinity", 2e-3), ("caustic soda", 1e-3)), r"alkalinity of waste 'w' counts its acids and bases already; found alkalinity and caustic soda. Remove one"),
    (lambda: Waste(name="w", ph=15.5), r"the pH of waste 'w' must be -1 to 15; found 15.5"),
    (lambda: Waste(name="w", ph=float("nan")), r"must be -1 to 15; found nan"),
    (lambda: Waste(name="w", carbon_mol_l=-1.0), r"the amount of carbon in waste 'w' must be zero or more; found -1 mol/L"),
    (lambda: Waste(name="w", metals={"zinc": float("inf")}), r"the amount of zinc in waste 'w' must be zero or more; found inf"),
    (lambda: Waste(name="w", base_eq_l=float("nan")), r"the base of waste 'w' must be a number; found nan eq/L"),
    (lambda: chemistry([waste(("caustic soda", 20.0))]), r"waste 'w' must have a pH from -1 to 15; its base of 20 eq/L lies beyond. Check the amounts"),
    (lambda: chemistry([waste(("sulfuric acid", 20.0))]), r"its base of -40 eq/L lies beyond"),
    (lambda: chemistry([waste(("caustic soda", 0.1), t_c=80.0)]), r"temperature of the mixture of the wastes must be -2 to 60 °C, .*; found 80 °C"),
    (lambda: chemistry([waste(("caustic soda", 0.1))], t_c=float("nan")), r"must be -2 to 60 °C, .*; found nan"),
    (lambda: chemistry([Waste(name="w", curve=acetic_curve(75.0))]), r"temperature of the titration of waste 'w' must be -2 to 60 °C"),
    (lambda: chemistry([waste(("caustic soda", 0.1))], ionic_strength_mol_l=-0.1), r"the ionic strength must be zero or more; found -0.1 mol/L"),
    (lambda: chemistry([Waste(name="w", curve=MeasuredCurve("s", [0.01, 0.02, 0.03, 0.04, 0.05], [4.0, 5.0, 6.0, 7.0, 8.0]))]), r"titration curve of 's' must hold the raw waste"),
])
def test_refused(make, words):
    """Subject, rule, value, remedy."""
    with pytest.raises(InputError, match=words):
        make()

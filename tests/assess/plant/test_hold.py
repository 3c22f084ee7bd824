"""Holding a pH: closed forms, phosphate pH standards, charge balance of the mixed water, choice and words."""

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf import Water
from aquabuf.assess.plant.hold import buffer_pairs, buffer_uses, buffer_words, hold_ph, ranked, why_not
from aquabuf.chem.acids import acid_table
from aquabuf.errors import InputError

LN10 = np.log(10.0)
DAVIES_A = 0.5092  # at 25 °C: Helgeson & Kirkham 1974 as printed by White, Geochemistry
PK_ACETIC = 4.756  # NIST 46, printed in handbooks
MASSES = {"H": 1.008, "C": 12.011, "N": 14.007, "O": 15.999, "Na": 22.990, "P": 30.974, "S": 32.06, "Cl": 35.45,
          "K": 39.098, "B": 10.81, "Si": 28.085}  # IUPAC abridged (recalled)
CARRIER = {"phosphate": ("P", 1), "boron": ("B", 1), "silica": ("Si", 1), "ammonium": ("N", 1), "sulfate": ("S", 1),
           "sulfite": ("S", 1), "carbonate": ("C", 1), "acetate": ("C", 2), "formate": ("C", 1), "propionate": ("C", 3),
           "butyrate": ("C", 4), "lactate": ("C", 3), "citrate": ("C", 6), "oxalate": ("C", 2), "phthalate": ("C", 8),
           "benzoate": ("C", 7)}  # element that tells how much of the acid a formula holds
PAIRS = {p.label: p for p in buffer_pairs()}


def pure(t_c=25.0, strength=0.0):
    """Water without carbon or alkalinity."""
    return Water.from_alkalinity_dic(alkalinity_eq_l=0.0, dic_mol_l=0.0, t_c=t_c, ionic_strength_mol_l=strength)


def option(label, water, **wanted):
    """What one pair takes."""
    found = hold_ph(water, **({"use": "laboratory"} | wanted))
    return next(o for o in found if o.pair.label == label)


def atoms(formula):
    """Atoms of a formula, brackets opened."""
    formula = re.sub(r"\(([^)]*)\)(\d*)", lambda m: m[1] * int(m[2] or 1), formula)
    count = {}
    for element, n in re.findall(r"([A-Z][a-z]?)(\d*)", formula):
        count[element] = count.get(element, 0) + int(n or 1)
    return count


def log_gamma(strength):
    """Davies (0.3) for one charge, by hand."""
    return -DAVIES_A * (np.sqrt(strength) / (1.0 + np.sqrt(strength)) - 0.3 * strength)


@pytest.mark.parametrize("ph", [4.0, 4.6, 5.4])
def test_least_total_is_van_slyke(ph):
    """C = (beta - 2.303 (H+ + OH-)) / (2.303 Ka H / (Ka + H)^2), Ka at the reported ionic strength by hand."""
    found = option("CH3COOH/CH3COO-", pure(), ph=ph, intensity_eq_l=5e-3)
    i = found.strength_mol_l
    pka = PK_ACETIC - 0.1 * i + log_gamma(i)
    h, ka = 10.0**-ph, 10.0**-pka
    assert_allclose(found.pka, pka, rtol=0, atol=5e-4)
    assert_allclose(found.least_mol_l, (5e-3 - LN10 * h / 10.0 ** log_gamma(i)) / (LN10 * ka * h / (ka + h) ** 2), rtol=1e-3)


def test_henderson_hasselbalch_without_ionic_strength():
    """pH = pKa + log(base/acid) with the pKa of the table where buffer and ionic strength go to zero."""
    ph = np.array([6.7, 7.198, 7.9])
    found = option("H2PO4-/HPO4--", pure(), ph=ph, intensity_eq_l=6e-6)
    assert_allclose(1.0 / found.acid_base_ratio, 10.0 ** (ph - 7.198), rtol=0.03)  # 0.01 pH: I is some 1e-5, not 0
    assert (found.strength_mol_l < 6e-5).all()


@pytest.mark.parametrize(("off", "share"), [(0.0, 1.0), (1.0, 40 / 121), (-1.0, 40 / 121)])
def test_peak_and_edge_of_the_range(off, share):
    """0.576 C at pKa and 40/121 of it, a third, one pH away: Van Slyke's closed form."""
    strength = 0.05  # of a salt, beside which the buffer does not count
    ph = PK_ACETIC - 0.1 * strength + log_gamma(strength) + off
    water = pure(strength=strength)
    own = Water.from_ph_dic(ph=ph, dic_mol_l=0.0, t_c=25.0, ionic_strength_mol_l=strength).buffer_intensity_eq_l()
    found = option("CH3COOH/CH3COO-", water, ph=ph, intensity_eq_l=own + 1e-5)
    assert_allclose(found.peak_share, share, rtol=2e-3)
    assert_allclose(found.lacking_eq_l / found.least_mol_l, 0.575646 * share, rtol=2e-3)
    assert_allclose(found.outside_ph, abs(off) - 1.0, rtol=0, atol=2e-3)


@pytest.mark.parametrize(("t_c", "ph", "intensity", "acid", "base"), [
    (25.0, 6.865, 0.029, 0.025, 0.025), (25.0, 7.413, 0.016, 0.008695, 0.03043)])
def test_phosphate_standards(t_c, ph, intensity, acid, base):
    """Composition of the pH standards from their pH and printed buffer value (Lange 8.106): total 7 %, ratio 0.015 pH."""
    found = option("H2PO4-/HPO4--", pure(t_c), ph=ph, intensity_eq_l=intensity)
    assert_allclose(found.total_mol_l, acid + base, rtol=0.07)
    assert_allclose(np.log10(found.base_mol_l / found.acid_mol_l), np.log10(base / acid), rtol=0, atol=0.015)
    assert found.usable


@pytest.mark.parametrize(("t_c", "ph"), [(5.0, 6.951), (10.0, 6.923), (40.0, 6.838)])
def test_phosphate_standard_at_other_temperatures(t_c, ph):
    """Equal parts at the pH of the standard (NBS table, recalled): temperature moves the pKa."""
    found = option("H2PO4-/HPO4--", pure(t_c), ph=ph, intensity_eq_l=0.029)
    assert_allclose(np.log10(found.base_mol_l / found.acid_mol_l), 0.0, rtol=0, atol=0.02)


def step_ph(pair):
    """pH at the pK of a pair's step, where both forms are there; carbonic pK of Plummer & Busenberg 1982."""
    pk = (6.352, 10.329) if pair.acid == "carbonate" else acid_table()[pair.acid].pk
    return pk[pair.step - 1]


@pytest.mark.parametrize("pair", PAIRS.values(), ids=PAIRS)
def test_mixed_water_is_neutral_and_has_the_ph(pair):
    """Charge of all ions, those of the reagents counted from their formulas, is zero; so is pH less the wanted one."""
    ph = step_ph(pair)
    wanted = 0.02 + 1.5 * LN10 * (10.0**-ph + 10.0 ** (ph - 14.0))  # more than water itself gives
    found = option(pair.label, pure(), ph=ph, intensity_eq_l=wanted)
    ions = {"Na": 1, "K": 1, "Cl": -1}
    strong = {e: z * sum(x * atoms(r.formula).get(e, 0) for x, r in (
        (found.acid_mol_l, pair.acid_reagent), (found.base_mol_l, pair.base_reagent))) for e, z in ions.items()}
    species = found.water.species_mol_l
    charge = {form: form.count("+") - form.count("-") for form in species}
    total = sum(strong.values()) + sum(charge[f] * v for f, v in species.items())
    strength = 0.5 * (sum(abs(v) for v in strong.values()) + sum(charge[f] ** 2 * v for f, v in species.items()))
    assert found.reachable
    assert_allclose(found.water.ph, ph, rtol=0, atol=1e-9)
    assert_allclose(total, 0.0, rtol=0, atol=1e-12)
    # pure water's own ions, 1e-7, were not given; beyond 0.5 mol/L the activity equation is not asked
    assert_allclose(found.strength_mol_l, min(strength, 0.5), rtol=0, atol=3e-7)
    assert found.in_reach == (strength <= 0.5)
    if pair.label == "HPO4--/PO4---":  # trisodium phosphate alone, and more of it, to make the hydroxide of that pH
        assert found.water.buffer_intensity_eq_l() > wanted
        assert found.acid_mol_l == 0.0
    else:
        assert_allclose(found.water.buffer_intensity_eq_l(), wanted, rtol=1e-9)


@pytest.mark.parametrize("pair", PAIRS.values(), ids=PAIRS)
def test_reagents_hold_what_the_table_says(pair):
    """Moles of acid and strong ions per mole and the molar mass follow from the formulas."""
    element, per_acid = CARRIER[pair.acid]
    for reagent in (pair.acid_reagent, pair.base_reagent):
        count = atoms(reagent.formula)
        assert reagent.parts.get(pair.acid, 0.0) == count.get(element, 0) / per_acid
        for ion, symbol in (("sodium", "Na"), ("potassium", "K"), ("chloride", "Cl")):
            assert reagent.parts.get(ion, 0.0) == count.get(symbol, 0)
        assert_allclose(reagent.molar_mass_g, sum(MASSES[e] * n for e, n in count.items()), rtol=1e-5)
    assert pair.mark in {"printed", "recalled", "derived", "practice"}
    assert pair.source
    assert pair.against


def test_masses_and_words():
    """Each reagent's mass by its own molar mass, and both told with formula, total, pKa and what speaks against them."""
    found = option("H2PO4-/HPO4--", pure(), ph=7.0, intensity_eq_l=0.02)
    acid, base = 119.976e3 * found.acid_mol_l, 141.957e3 * found.base_mol_l  # NaH2PO4, Na2HPO4 from IUPAC masses
    assert_allclose([found.acid_mg_l, found.base_mg_l], [acid, base], rtol=1e-4)
    said = buffer_words(found)
    assert f"takes {acid:,.0f} mg/L of monosodium phosphate (NaH2PO4) and {base:,.0f} mg/L of disodium phosphate" in said
    assert f"pH 7.00 with 20 meq/L per pH takes {acid:,.0f}" in said
    assert "against it: phosphorus feeds algae" in said
    assert "not usable" not in said


NATURAL = {"t_c": 12.0, "ionic_strength_mol_l": 0.004, "phosphate_mol_l": 1e-5}


@pytest.mark.parametrize("label", ["CO2/HCO3-", "H2PO4-/HPO4--", "HCit--/Cit---", "B(OH)3/B(OH)4-"])
def test_mixed_water_resists_as_wanted(label):
    """Slope of alkalinity against pH of the mixed composition by central differences, overlap of all steps included."""
    water = Water.from_ph_alkalinity(ph=6.9, alkalinity_eq_l=4e-4, **NATURAL)
    found = option(label, water, ph=7.2, intensity_eq_l=1.5e-3)
    mixed, step = found.water, 1e-3
    totals = {f"{n}_mol_l": mixed.total_mol_l(n) for n in mixed.total_names}
    low, high = (Water.from_ph_dic(ph=7.2 + d, dic_mol_l=mixed.dic_mol_l, t_c=12.0, **totals,
                                   ionic_strength_mol_l=mixed.ionic_strength_mol_l).alkalinity_eq_l for d in (-step, step))
    assert_allclose((high - low) / (2.0 * step), 1.5e-3, rtol=1e-5)
    assert_allclose(mixed.ph, 7.2, rtol=0, atol=1e-9)


def test_overlapping_steps_count():
    """Citric acid between its steps: ln10 C sum (j - i)^2 a_i a_j over its four forms, constants by hand with Davies."""
    ph = 5.3
    found = option("HCit--/Cit---", pure(), ph=ph, intensity_eq_l=5e-3)
    i, one = found.strength_mol_l, log_gamma(found.strength_mol_l)
    pk = np.array([3.128, 4.761, 6.396]) + np.array([one - 0.1 * i, 3.0 * one, 5.0 * one])  # Goldberg et al. 2002
    weight = 10.0 ** (np.arange(4) * ph - np.concatenate(([0.0], np.cumsum(pk))))
    a = weight / weight.sum()
    variance = sum((n - m) ** 2 * a[m] * a[n] for m in range(4) for n in range(m + 1, 4))
    assert_allclose(found.least_mol_l, found.lacking_eq_l / (LN10 * variance), rtol=2e-3)
    assert_allclose(found.pka, pk[2], rtol=0, atol=1e-3)


def test_phosphate_of_the_water_adds_to_the_buffer():
    """Total phosphate of the mixed water is what was there and what was added."""
    water = Water.from_ph_alkalinity(ph=6.9, alkalinity_eq_l=4e-4, **NATURAL)
    found = option("H2PO4-/HPO4--", water, ph=7.2, intensity_eq_l=1e-3)
    assert_allclose(found.water.total_mol_l("phosphate"), 1e-5 + found.acid_mol_l + found.base_mol_l, rtol=1e-12)


def test_pair_outside_its_range_says_what_it_would_take():
    """Acetate two pH above its pKa: 4 r / (1 + r)^2 of its peak, and the total that follows."""
    found = option("CH3COOH/CH3COO-", pure(), ph=6.7, intensity_eq_l=1e-3)
    r = 10.0 ** (6.7 - found.pka)
    assert_allclose(found.peak_share, 4.0 * r / (1.0 + r) ** 2, rtol=1e-9)
    assert_allclose(found.least_mol_l, 1e-3 / (LN10 * r / (1.0 + r) ** 2), rtol=2e-3)
    assert not found.usable
    assert "outside its range of pKa" in why_not(found)[0]
    assert f"{1e3 * found.least_mol_l:.3g} mmol/L even so" in buffer_words(found)


def test_bicarbonate_leads_in_drinking_water():
    """Whatever its total, in range or not; elsewhere the least mass of usable pairs leads."""
    water = Water.from_ph_alkalinity(ph=6.9, alkalinity_eq_l=4e-4, t_c=12.0, ionic_strength_mol_l=0.004)
    for ph in (7.2, 8.1):
        drinking = hold_ph(water, ph=ph, intensity_eq_l=6e-4, use="drinking water")
        first = drinking[ranked(drinking)[0]]
        assert (first.pair.label, bool(first.in_range)) == ("CO2/HCO3-", ph < 7.4)
        assert "first choice for drinking water" in buffer_words(first)
    process = hold_ph(water, ph=7.2, intensity_eq_l=6e-4, use="process")
    mass = {o.pair.label: float(o.acid_mg_l + o.base_mg_l) for o in process if o.usable}
    order = [process[i].pair.label for i in ranked(process)]
    assert len(mass) > 2
    assert order[: len(mass)] == sorted(mass, key=mass.get)
    assert order[0] != "CO2/HCO3-"


def test_only_permitted_pairs_are_usable():
    """Borate is no buffer for drinking water, and the reason is told."""
    found = option("B(OH)3/B(OH)4-", pure(), ph=9.2, intensity_eq_l=1e-3, use="drinking water")
    assert bool(found.in_range) is True
    assert bool(found.usable) is False
    assert any(r.startswith("not permitted for drinking water") for r in why_not(found))
    assert bool(option("B(OH)3/B(OH)4-", pure(), ph=9.2, intensity_eq_l=1e-3).usable) is True


def test_reagents_that_cannot_make_the_ph():
    """Bicarbonate with soda ash cannot bring pure water below the pH of bicarbonate: never a negative amount."""
    found = option("HCO3-/CO3--", pure(), ph=7.2, intensity_eq_l=1e-3)
    assert np.isnan(found.acid_mol_l)
    assert np.isnan(found.base_mol_l)
    assert found.least_mol_l > 0.0
    assert "would have to be taken out" in " ".join(why_not(found))


def test_more_than_the_least_where_the_water_must_be_moved():
    """Boric acid alone brings pH 8.0 down: its base falls to zero and more acid than the intensity asks for goes in."""
    water = Water.from_ph_alkalinity(ph=8.0, alkalinity_eq_l=2e-3, t_c=12.0, ionic_strength_mol_l=0.004)
    found = option("B(OH)3/B(OH)4-", water, ph=7.2, intensity_eq_l=1e-3)
    assert found.total_mol_l > found.least_mol_l
    assert_allclose(found.base_mol_l, 0.0, rtol=0, atol=1e-12)
    assert_allclose(found.water.alkalinity_eq_l, 2e-3, rtol=1e-9)
    assert_allclose(found.water.ph, 7.2, rtol=0, atol=1e-9)


def test_nothing_is_added_where_the_water_has_enough():
    """A water at the wanted pH with the wanted intensity takes nothing of a pair that could make it."""
    water = Water.from_ph_alkalinity(ph=7.0, alkalinity_eq_l=3e-3, t_c=20.0)
    found = option("CO2/HCO3-", water, ph=7.0, intensity_eq_l=0.5 * water.buffer_intensity_eq_l())
    assert_allclose([found.lacking_eq_l, found.total_mol_l, found.acid_mol_l], 0.0, rtol=0, atol=1e-15)


def test_rows_do_not_see_each_other():
    """Rows solved together are bit for bit those solved alone; a bad row costs itself."""
    rows = {"ph": [6.9, np.nan, 8.0], "alkalinity_eq_l": [4e-4, 4e-4, 2e-3], "t_c": [12.0, 12.0, 25.0]}
    together = hold_ph(Water.from_ph_alkalinity(**rows), ph=7.2, intensity_eq_l=1e-3, use="process")
    for row in (0, 2):
        alone = hold_ph(Water.from_ph_alkalinity(**{n: v[row] for n, v in rows.items()}), ph=7.2, intensity_eq_l=1e-3,
                        use="process")
        assert_array_equal([o.total_mol_l[row] for o in together], [o.total_mol_l for o in alone])
        assert_array_equal(ranked(together)[:, row], ranked(alone))
    assert np.isnan([o.total_mol_l[1] for o in together]).all()
    assert not any(o.usable[1] for o in together)
    assert "not one that can be solved" in why_not(together[0], 1)[0]


def test_sea_water_aquarium():
    """Salt fixes the ionic strength: bicarbonate still makes the pH, on the meter scale."""
    water = Water.from_ph_alkalinity(ph=7.8, alkalinity_eq_l=2e-3, t_c=25.0, salinity=35.0)
    found = option("HCO3-/CO3--", water, ph=8.2, intensity_eq_l=1e-3, use="pond")
    assert_allclose(found.water.ph, 8.2, rtol=0, atol=1e-9)
    assert found.usable


def test_messages():
    """Unknown use and shapes that do not fit."""
    with pytest.raises(InputError, match=r"use must be one of drinking water, .*; found 'tea'"):
        hold_ph(pure(), ph=7.0, intensity_eq_l=1e-3, use="tea")
    two = Water.from_ph_dic(ph=[7.0, 8.0], dic_mol_l=1e-3, t_c=10.0)
    with pytest.raises(InputError, match="must broadcast to one shape"):
        hold_ph(two, ph=[7.0, 7.1, 7.2], intensity_eq_l=1e-3, use=buffer_uses()[0])

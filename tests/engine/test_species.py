"""Species, charges and totals: mass balance, electroneutrality and ratios of neighbors."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf import Acid, Water
from aquabuf.chem.acids import acid_table

NAMES = tuple(acid_table())
FULL = Water.from_ph_dic(ph=np.linspace(2, 12, 11), dic_mol_l=3e-3, t_c=18.0, ionic_strength_mol_l=0.03,
                         **{f"{n}_mol_l": 1e-3 for n in NAMES})


@pytest.mark.parametrize("name", NAMES)
def test_forms_of_an_acid_add_up_to_its_total(name):
    """Mass balance of every shipped acid at every pH."""
    s = FULL.species_mol_l
    assert_allclose(sum(s[form] for form in acid_table()[name].species), 1e-3, rtol=1e-12)
    assert_allclose(FULL.total_mol_l(name), 1e-3)


def test_carbonate_adds_up_and_absent_is_zero():
    """CO2, HCO3- and CO3-- are the inorganic carbon; an acid that is not there has total zero."""
    s = FULL.species_mol_l
    assert_allclose(s["CO2"] + s["HCO3-"] + s["CO3--"], 3e-3, rtol=1e-13)
    plain = Water.from_ph_dic(ph=7.0, dic_mol_l=1e-3, t_c=20.0)
    assert plain.total_mol_l("citrate") == 0.0
    assert plain.total_names == ()


def test_charges_close_with_alkalinity():
    """Charge balance: the strong ions that alkalinity implies, charges of all acids, H+ and OH- sum to zero.

    Alkalinity = strong cations - strong anions + charge of each acid's zero-level form (Dickson 1981), by the written formulas.
    """
    s = FULL.species_mol_l
    zero_level = {"sulfate": -2, "fluoride": -1, "phosphate": -1, "citrate": -1, "oxalate": -2, "phthalate": -1, "sulfite": -1,
                  "ammonium": 1, "formate": -1, "lactate": -1, "benzoate": -1}
    strong = FULL.alkalinity_eq_l - sum(zero_level.get(n, 0) * 1e-3 for n in NAMES)
    weak = FULL.charge_eq_l("carbonate") + sum(FULL.charge_eq_l(n) for n in NAMES)
    assert_allclose(strong + weak + s["H+"] - s["OH-"], 0.0, rtol=0, atol=1e-15)


def test_charge_is_that_of_the_forms():
    """Charge of phosphate from its forms, 1, 2 and 3 minus."""
    s = FULL.species_mol_l
    assert_allclose(FULL.charge_eq_l("phosphate"), -s["H2PO4-"] - 2.0 * s["HPO4--"] - 3.0 * s["PO4---"], rtol=1e-12)
    assert_allclose(FULL.charge_eq_l("ammonium"), s["NH4+"], rtol=1e-12)
    assert_allclose(FULL.charge_eq_l("carbonate"), -s["HCO3-"] - 2.0 * s["CO3--"], rtol=1e-12)


@pytest.mark.parametrize(("acid", "base", "pk", "before", "after"), [
    ("NH4+", "NH3", 9.245, 1, 0), ("H2PO4-", "HPO4--", 7.198, 1, 2), ("HPO4--", "PO4---", 12.35, 2, 3),
    ("HSO4-", "SO4--", 1.987, 1, 2), ("CH3COOH", "CH3COO-", 4.756, 0, 1), ("HCO3-", "CO3--", 10.329, 1, 2),
    ("CO2", "HCO3-", 6.352, 0, 1),
])
def test_ratio_of_neighbors_at_25_degrees(acid, base, pk, before, after):
    """pH = pK + log base/acid + log of activity coefficients; Davies at I = 0.1 by hand: 0.10723 z2 (neutral: -0.01).

    pK values of the handbook class, some recalled; see the facts table of each acid.
    """
    log_gamma = {0: 0.01} | {z: -0.10723 * z * z for z in (1, 2, 3)}
    names = {"ammonium": 1e-3, "phosphate": 1e-3, "sulfate": 1e-3, "acetate": 1e-3}
    water = Water.from_ph_dic(ph=7.0, dic_mol_l=1e-3, t_c=25.0, ionic_strength_mol_l=0.1, **{f"{n}_mol_l": v for n, v in names.items()})
    s = water.species_mol_l
    expected = 7.0 - pk - log_gamma[after] + log_gamma[before]
    assert_allclose(np.log10(s[base] / s[acid]), expected, rtol=0, atol=0.0012)


def test_own_acid_outranks_the_shipped_one():
    """A user's acid of a shipped name is the one that counts."""
    own = Acid(name="acetate", pk=(5.5,))
    water = Water.from_ph_dic(ph=5.5, dic_mol_l=0.0, t_c=25.0, ionic_strength_mol_l=0.0, acids=[own], acetate_mol_l=1e-3)
    assert_allclose(water.charge_eq_l("acetate"), -5e-4, rtol=1e-12)


def test_acid_without_marine_equation_uses_activities_on_the_meter_scale():
    """In sea water acetic acid has pH(meter) = pK + log ratio + Davies terms at the ionic strength of the salt (I 0.02 at S 1)."""
    water = Water.from_ph_dic(ph=[5.0], dic_mol_l=1e-3, t_c=25.0, salinity=1.0, acetate_mol_l=1e-3)
    s = water.species_mol_l
    root = np.sqrt(0.019944)
    davies = -0.5100 * (root / (1.0 + root) - 0.3 * 0.019944)
    assert_allclose(np.log10(s["CH3COO-"] / s["CH3COOH"]), 5.0 - 4.756 + 0.0019944 - davies, rtol=0, atol=2e-4)


def test_implied_ionic_strength():
    """Without a given one: the larger of what salinity (19.924 S/(1000 - 1.005 S)) and alkalinity (1:1 salt) imply."""
    water = Water.from_alkalinity_dic(alkalinity_eq_l=[1e-3, 1e-3, -2e-3, 1e-3], dic_mol_l=1e-3, t_c=20.0,
                                      salinity=[0.0, 0.5, 0.0, 0.0], ionic_strength_mol_l=[np.nan, np.nan, np.nan, 0.03])
    assert_allclose(water.ionic_strength_mol_l, [1e-3, 19.924 * 0.5 / (1000.0 - 0.5025), 2e-3, 0.03], rtol=1e-12)
    from_ph = Water.from_ph_dic(ph=8.3, dic_mol_l=4e-3, t_c=20.0)
    assert_allclose(from_ph.ionic_strength_mol_l, 4e-3, rtol=0.02)

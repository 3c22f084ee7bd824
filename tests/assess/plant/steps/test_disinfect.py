"""Chlorination against stoichiometry and water worked out by hand."""

import numpy as np
import pytest
from carbonate_by_hand import LN10, BareWater
from made_water import EQ_PER_MG_CACO3, stocked, water_of, words
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from aquabuf.assess.plant.steps.disinfect import Disinfect, caustic_with, hocl_share
from aquabuf.errors import InputError

CL2 = 70.90e3  # mg/mol
PK_HOCL = 7.537  # at 25 °C, Morris 1966 (recalled)
GAS, BLEACH, POWDER = "chlorine gas", "sodium hypochlorite", "calcium hypochlorite"
PER_MOLE = {GAS: 1, BLEACH: 1, POWDER: 2}


def chlorinated(product, mg_cl2, water, demand_mg_cl2=0.0, **settings):
    """The step with dose and demand in mg/L as Cl2."""
    stock = stocked(product, settings.pop("strength", 1.0), settings.pop("density_kg_l", None))
    return Disinfect(name="chlorine", product=stock, dose_mol_l=mg_cl2 / CL2 / PER_MOLE[product],
                     demand_mol_l=demand_mg_cl2 / CL2, **settings).run(water)


@pytest.mark.parametrize(("product", "fresh", "used"), [(GAS, -0.706, -1.412), (BLEACH, 0.706, 0.0), (POWDER, 0.706, 0.0)])
def test_alkalinity_per_mg_of_chlorine(product, fresh, used):
    """From IUPAC masses: one equivalent per mole of Cl2 with the residual there, another once it is reduced."""
    raw = water_of(7.6, 100.0)
    for demand, change in ((0.0, fresh), (5.0, used), (2.0, 0.6 * fresh + 0.4 * used)):
        out = chlorinated(product, 5.0, raw, demand)
        assert_allclose(out.figures["alkalinity_change_mg_l_caco3"], 5.0 * change, atol=0.003)
        assert_allclose((out.stream.alkalinity_eq_l - raw.alkalinity_eq_l) / EQ_PER_MG_CACO3, 5.0 * change, atol=0.003)


@pytest.mark.parametrize(("product", "atoms"), [(GAS, 2), (BLEACH, 1), (POWDER, 1)])
@pytest.mark.parametrize("demand", [0.0, 1.5, 9.0])
def test_chlorine_atoms_and_charge_are_conserved(product, atoms, demand):
    """Chloride and free chlorine together; alkalinity follows the strong ions, with HOCl uncharged at the zero level."""
    none = dict.fromkeys(("sodium", "calcium", "chloride", "hypochlorite"), 0.0)
    out = chlorinated(product, 4.0, water_of(7.6, 100.0, **none), demand)
    after = out.stream
    mol = 4.0 / CL2
    assert_allclose(after.total("chloride") + after.total("hypochlorite"), atoms * mol, rtol=1e-12)
    assert_allclose(after.total("hypochlorite"), max(4.0 - demand, 0.0) / CL2, atol=1e-15)
    strong = after.total("sodium") + 2.0 * after.total("calcium") - after.total("chloride")
    assert_allclose(after.alkalinity_eq_l - 100.0 * EQ_PER_MG_CACO3, strong, atol=1e-12)
    assert_allclose(out.figures["chlorine_used_mg_l_cl2"] + out.figures["chlorine_left_mg_l_cl2"], 4.0)


def by_hand(water, alkalinity, carbon, free):
    """pH with hypochlorous acid, from printed constants at 25 °C, and the share of the acid."""
    k = 10.0**-PK_HOCL * water.k1 / 10.0**-6.3519  # the same step of charge as the first of carbonic acid
    ph = brentq(lambda x: water.alkalinity(x, carbon) + free / (1.0 + 10.0**-x / k) - alkalinity, 3.0, 11.0, xtol=1e-12)
    return ph, 1.0 / (1.0 + k / 10.0**-ph)


@pytest.mark.parametrize(("product", "sign"), [(GAS, -1.0), (BLEACH, 1.0)])
def test_three_ph_values_as_by_hand(product, sign):
    """With all chlorine there, after the demand, and with none left."""
    raw = water_of(7.6, 40.0)
    out = chlorinated(product, 6.0, raw, 2.0)
    carbon, free = float(raw.carbon_mol_l[0]), 6.0 / CL2
    water = BareWater(25.0, float(out.stream.ionic_strength_mol_l[0]))
    for figure, used in (("ph_all_chlorine_there", 0.0), ("ph_after", 2.0 / CL2), ("ph_no_chlorine_left", free)):
        alkalinity = 40.0 * EQ_PER_MG_CACO3 + sign * free - used
        ph, share = by_hand(water, alkalinity, carbon, free - used)
        assert_allclose(out.figures[figure], ph, atol=0.004)
        if figure == "ph_after":
            assert_allclose(out.figures["hocl_share_after"], share, atol=0.003)
    assert (out.figures["ph_after"] < out.figures["ph_all_chlorine_there"]).all()


def test_half_is_acid_at_its_pk():
    """Share of HOCl at meter pH equal to pK, at the lowest ionic strength."""
    water = water_of(PK_HOCL, 100.0, strength=1e-6, hypochlorite=1e-5)
    assert_allclose(hocl_share(water), 0.5, atol=0.003)
    assert np.isnan(hocl_share(water_of(7.5, hypochlorite=0.0))).all()


def test_excess_caustic_of_the_product():
    """12 % product of 1.2 kg/L with 8 g/L NaOH: 100 mg/L of it is 83.33 µL/L and 0.6667 mg/L NaOH."""
    stock = stocked(BLEACH, 0.12, 1.2)
    mol = stock.mol_l(100.0)
    assert_allclose(caustic_with(stock, mol, 8.0), 8.0 * 100e-6 / 1.2 / 39.997, rtol=1e-9)
    mg_cl2 = float(mol) * CL2
    raw = water_of(7.6, 100.0, sodium=0.0)
    bare, out = (chlorinated(BLEACH, mg_cl2, raw, 1.0, strength=0.12, density_kg_l=1.2, excess_caustic_g_l=e)
                 for e in (0.0, 8.0))
    for got in (out.stream.alkalinity_eq_l - bare.stream.alkalinity_eq_l,
                out.stream.total("sodium") - bare.stream.total("sodium")):
        assert_allclose(got, 0.66667 / 39997.0, rtol=1e-4)


def test_demand_beyond_the_dose():
    """No chlorine is left and the missing part is told; never a negative residual."""
    out = chlorinated(GAS, 2.0, water_of(7.2, 100.0), 3.5)
    assert_allclose(out.stream.total("hypochlorite"), 0.0, atol=1e-18)
    assert "1.50 mg/L as Cl2 more was wanted" in words(out, "warning")
    assert "was wanted" not in words(chlorinated(GAS, 4.0, water_of(7.2, 100.0), 3.5))


@pytest.mark.parametrize(("dose", "short"), [(4.0, False), (4.0 - 1e-13, False), (3.99, True)])
def test_a_dose_that_just_meets_the_demand_is_no_shortage(dose, short):
    """Rounding is not told as chlorine that was wanted."""
    out = chlorinated(GAS, dose, water_of(7.6, 100.0), 4.0)
    assert any("more was wanted" in f.words for f in out.findings) == short


def test_chlorine_that_the_water_brings_is_used_too():
    """0.5 mg/L there before and no dose: the demand takes it."""
    out = chlorinated(GAS, 0.0, water_of(7.2, 100.0, hypochlorite=0.5 / CL2), 0.2)
    assert_allclose(out.figures["chlorine_left_mg_l_cl2"], 0.3)


def test_high_ph_is_warned_of():
    """WHO prefers pH below 8 for chlorine (printed)."""
    out = chlorinated(BLEACH, 2.0, water_of(8.6, 100.0))
    (finding,) = (f for f in out.findings if f.severity == "warning")
    assert "of the free chlorine is hypochlorous acid" in finding.words
    assert "WHO" in finding.rule
    assert not words(chlorinated(BLEACH, 2.0, water_of(7.4, 100.0)), "warning")


def test_ammonium_means_chloramine_which_is_said():
    """With ammonium, without, and unknown."""
    with_it = words(chlorinated(BLEACH, 2.0, water_of(7.4, 100.0, ammonium=0.5 / 14007.0)))
    assert "0.50 mg/L of ammonium nitrogen" in with_it
    assert "chloramine, which is not modeled" in with_it
    assert "chloramine" not in words(chlorinated(BLEACH, 2.0, water_of(7.4, 100.0, ammonium=0.0)))
    assert "ammonium is not known" in words(chlorinated(BLEACH, 2.0, water_of(7.4, 100.0)))


def test_buffer_of_hypochlorous_acid_is_in_the_water():
    """The residual adds ln10 C a (1 - a) to the buffer intensity."""
    out = chlorinated(GAS, 10.0, water_of(7.6, 100.0))
    share = float(out.figures["hocl_share_after"][0])
    by_pair = out.stream.water().buffer_by_pair()
    (label,) = (name for name in by_pair if "HOCl" in name)
    assert_allclose(by_pair[label], LN10 * 10.0 / CL2 * share * (1.0 - share), rtol=1e-9)


def test_bad_input():
    """Another product, caustic in a gas, no density, bad numbers."""
    bleach = stocked(BLEACH, 0.12)
    with pytest.raises(InputError, match=r"needs a product that brings hypochlorite; found 'soda ash'.*Name another"):
        Disinfect(name="d", product=stocked("soda ash"), dose_mol_l=1e-5)
    with pytest.raises(InputError, match=r"excess caustic of step 'd' must be at least 0 g/L, of a liquid.*3 g/L.*\(gas\)"):
        Disinfect(name="d", product=stocked(GAS), dose_mol_l=1e-5, excess_caustic_g_l=3.0)
    with pytest.raises(InputError, match=r"at least 0 g/L.*found -3 g/L"):
        Disinfect(name="d", product=bleach, dose_mol_l=1e-5, excess_caustic_g_l=-3.0)
    with pytest.raises(InputError, match=r"needs the density of 'sodium hypochlorite'; none is given. Add its density"):
        Disinfect(name="d", product=bleach, dose_mol_l=1e-5, excess_caustic_g_l=3.0).run(water_of())
    with pytest.raises(InputError, match="demand_mol_l of step 'd' must be at least 0; found -1"):
        Disinfect(name="d", product=bleach, dose_mol_l=1e-5, demand_mol_l=-1.0).run(water_of())


def test_held_takes_another_dose():
    """A feed that goes on keeps the demand."""
    step = Disinfect(name="d", product=stocked(BLEACH), dose_mol_l=1e-5, demand_mol_l=2e-6)
    other = step.held(Disinfect(name="d", product=step.product, dose_mol_l=3e-5).run(water_of()).doses)
    assert (float(other.dose_mol_l[0]), other.demand_mol_l) == (3e-5, 2e-6)

"""Charge balance of dilute water: against `Water`, against balances written out here, derivatives, roots, rows."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf import Acid, Water
from aquabuf.chem.aluminum import LOG_BETA
from aquabuf.chem.organic import organic_models
from aquabuf.engine.conditions import conditions
from aquabuf.engine.lake import LakeBalance

NONE = np.zeros((1, 1))
T_C = np.array([[0.0], [7.0], [18.0], [25.0], [40.0]])
PH = np.linspace(3.2, 10.4, 25)[None, :]
REGIMES = pytest.mark.parametrize("salinity", [0.0, 0.4, 0.999, 1.0, 12.0, 35.0])
STRENGTH = 3e-4
NO_SALTS = {f"{name}_mol_l": 0.0 for name in ("boron", "sulfate", "fluoride")}  # nothing but carbonate and water
TRIPROTIC = organic_models()["hruska"]


def balance(doc=NONE, aluminum=NONE, model=TRIPROTIC, *, t_c=T_C, salinity=0.0, strength=STRENGTH):
    """A balance of one lake per temperature."""
    c = conditions(t_c, salinity, strength, sulfate_mol_l=0.0, fluoride_mol_l=0.0)
    return LakeBalance(c, np.asarray(doc, dtype=float), np.asarray(aluminum, dtype=float), model)


def water(salinity=0.0, strength=STRENGTH, **known):
    """The same with the engine's `Water`; `known` names the pair."""
    make = {frozenset(("ph", "dic_mol_l")): Water.from_ph_dic, frozenset(("ph", "pco2_atm")): Water.from_ph_pco2,
            frozenset(("alkalinity_eq_l", "pco2_atm")): Water.from_alkalinity_pco2,
            frozenset(("alkalinity_eq_l", "dic_mol_l")): Water.from_alkalinity_dic}[frozenset(known)]
    return make(**known, t_c=T_C, salinity=salinity, ionic_strength_mol_l=strength, **NO_SALTS)


def five_points(function, x, step=2e-3):
    """Derivative by central differences of fourth order."""
    return (function(x - 2 * step) - 8 * function(x - step) + 8 * function(x + step) - function(x + 2 * step)) / (12 * step)


# ------------------------------------------------------------------ no organic acid, no aluminum: the water of the engine


@REGIMES
def test_bare_water_is_the_engine_s(salinity):
    """ANC is alkalinity: closed, open, and the pH of both, on both sides of salinity 1."""
    lake, dic = balance(salinity=salinity), np.array([[1.7e-4]])
    closed = water(salinity, ph=PH, dic_mol_l=dic)
    assert_allclose(lake.anc(PH, dic=dic), closed.alkalinity_eq_l, rtol=1e-11, atol=1e-16)
    open_ = water(salinity, ph=PH, pco2_atm=4e-4)
    co2 = 4e-4 * lake.conditions.k0
    assert_allclose(lake.anc(PH, co2=co2), open_.alkalinity_eq_l, rtol=1e-11, atol=1e-16)
    alkalinity = np.array([[-3e-4, -2e-5, 0.0, 3e-5, 4e-4, 2e-3]])
    assert_allclose(lake.ph(alkalinity, co2=co2), water(salinity, alkalinity_eq_l=alkalinity, pco2_atm=4e-4).ph, atol=1e-10)
    assert_allclose(lake.ph(alkalinity, dic=dic), water(salinity, alkalinity_eq_l=alkalinity, dic_mol_l=dic).ph, atol=1e-10)


@REGIMES
def test_bare_buffering_is_the_engine_s(salinity):
    """Buffer intensity closed and open, acid to a pH, carbonate parts per carbon."""
    lake, dic = balance(salinity=salinity), np.array([[1.7e-4]])
    closed = water(salinity, ph=PH, dic_mol_l=dic)
    co2 = closed.species_mol_l["CO2"]
    assert_allclose(lake.intensity(PH, dic=dic), closed.buffer_intensity_eq_l("closed"), rtol=1e-9)
    assert_allclose(lake.intensity(PH, co2=co2), closed.buffer_intensity_eq_l("open"), rtol=1e-9)
    assert_allclose(lake.anc(PH, dic=dic) - lake.anc(np.array(5.0), dic=dic), closed.acid_to_ph_eq_l(5.0), rtol=0, atol=1e-14)
    assert_allclose(lake.anc(PH, co2=co2) - lake.anc(np.array(5.0), co2=co2), closed.acid_to_ph_eq_l(5.0, "open"),
                    rtol=1e-11, atol=1e-14)
    assert_allclose(dic * lake.carbonate_per_dic(PH), -closed.charge_eq_l("carbonate"), rtol=1e-11)
    assert_allclose(co2 * lake.carbonate_per_co2(PH), -closed.charge_eq_l("carbonate"), rtol=1e-9)
    assert_allclose(dic * lake.co2_per_dic(PH), co2, rtol=1e-11)


def test_carbonate_by_closed_forms():
    """At pH (pK1 + pK2) / 2 every carbon carries one charge; in strong acid none, in strong base two."""
    lake = balance()
    c = lake.conditions
    middle = -0.5 * np.log10(c.k1 * c.k2)
    assert_allclose(lake.carbonate_per_dic(middle), 1.0, rtol=0, atol=1e-12)
    assert_allclose(lake.carbonate_per_dic(np.array([[0.0, 16.0]])), [[0.0, 2.0]] * 5, rtol=0, atol=2e-5)
    pk1 = -np.log10(c.k1)
    assert_allclose(lake.co2_per_dic(pk1), 0.5, rtol=0, atol=1e-3)  # a little carbonate takes the rest
    assert_allclose(lake.carbonate_per_co2(pk1 - 2.0), 0.01, rtol=1e-5)


def test_pure_water_is_neutral_at_half_pkw():
    """No carbon, no acid, no ANC: pH 6.998 at 25 °C (pKw 13.995, printed by Marshall & Franck 1981)."""
    lake = balance(t_c=np.array([[25.0]]), strength=0.0)
    assert_allclose(lake.ph(NONE, dic=NONE), 13.995 / 2, rtol=0, atol=1e-3)


# ------------------------------------------------------------------ organic acids and aluminum


@pytest.mark.parametrize("name", ["hruska", "hruska_b", "fakhraei"])
def test_triprotic_carbon_is_an_acid_of_the_engine(name):
    """The same pK as an `Acid` at zero ionic strength, where activity coefficients are 1.

    Alkalinity counts from the form that stands at pH 4.5: steps below 4.5 have given their proton there, and
    that charge is strong acid to it. So ANC by charge = alkalinity + (steps below pH 4.5) x molecules.
    """
    model, doc = organic_models()[name], 6.5
    molecules = doc * model.sites_eq_mg / 3.0
    strong_steps = sum(pk < 4.5 for pk in model.pk)
    assert strong_steps == {"hruska": 1, "hruska_b": 2, "fakhraei": 1}[name]
    common = {"t_c": T_C, "ionic_strength_mol_l": 0.0, "acids": [Acid(name="brown", pk=model.pk)], "brown_mol_l": molecules}
    lake, dic = balance([[doc]], model=model, strength=0.0), np.array([[8e-5]])
    solved = Water.from_ph_dic(ph=PH, dic_mol_l=dic, **common)
    by_charge = solved.alkalinity_eq_l + strong_steps * molecules
    assert_allclose(lake.anc(PH, dic=dic), by_charge, rtol=0, atol=1e-16)
    assert_allclose(lake.intensity(PH, dic=dic), solved.buffer_intensity_eq_l(), rtol=1e-9)
    anc = np.array([[-5e-5, 1e-5, 6e-5, 2e-4]])
    there = Water.from_alkalinity_dic(alkalinity_eq_l=anc - strong_steps * molecules, dic_mol_l=dic, **common)
    assert_allclose(lake.ph(anc, dic=dic), there.ph, rtol=0, atol=1e-10)


def by_hand(ph, dic, doc, aluminum):
    """Charge of strong cations less strong anions that makes a water of 25 °C and no ionic strength neutral.

    Plummer & Busenberg 1982 and Marshall & Franck 1981 as printed; Hruska et al. 2003 (pK recalled); Nordstrom & May
    1996 (recalled): every species written out.
    """
    h, rho = 10.0**-ph, 0.99705
    h2co3 = dic / (1.0 + 10.0**-6.35186 / h + 10.0 ** -(6.35186 + 10.32885) / h**2)
    hco3 = h2co3 * 10.0**-6.35186 / h
    co3 = hco3 * 10.0**-10.32885 / h
    acid = 10.2e-6 * doc / 3.0
    forms = np.array([1.0, 10.0**-3.04 / h, 10.0 ** -(3.04 + 4.51) / h**2, 10.0 ** -(3.04 + 4.51 + 6.46) / h**3])
    h2a, ha, a = acid * forms[1:] / forms.sum()
    hydroxides = np.array([1.0, 10.0**-5.0 / h, 10.0**-10.1 / h**2, 10.0**-16.9 / h**3, 10.0**-22.7 / h**4])
    al, aloh, aloh2, _, aloh4 = aluminum * hydroxides / hydroxides.sum()
    negative = hco3 + 2.0 * co3 + rho * 10.0**-13.995 / h + h2a + 2.0 * ha + 3.0 * a + aloh4
    return negative - (rho * h + 3.0 * al + 2.0 * aloh + aloh2)


@pytest.mark.parametrize(("ph", "dic", "doc", "aluminum"), [
    (4.3, 2e-5, 12.0, 2e-5), (5.1, 5e-5, 4.0, 1e-5), (5.6, 3e-5, 0.0, 3e-5), (6.4, 1.5e-4, 8.0, 4e-7), (7.8, 9e-4, 2.0, 0.0),
    (9.1, 1e-3, 20.0, 5e-5),
])  # fmt: skip
def test_electroneutral_water_made_up_by_hand(ph, dic, doc, aluminum):
    """A water whose every ion is written out has the ANC of its strong ions, and that ANC gives back its pH.

    1e-9 eq/L and 1e-3 pH are what the last printed digits of the constants leave.
    """
    lake = balance([[doc]], [[aluminum]], t_c=np.array([[25.0]]), strength=0.0)
    strong = by_hand(ph, dic, doc, aluminum)
    carbon = np.array([[dic]])
    assert_allclose(lake.anc(np.array([[ph]]), dic=carbon), strong, rtol=1e-5, atol=1e-9)
    assert_allclose(lake.ph(np.array([[strong]]), dic=carbon), ph, rtol=0, atol=1e-3)


def test_what_is_beside_carbonate():
    """Organic anions less the charge of aluminum; without carbon the water itself comes on top."""
    lake = balance([[5.0]], [[1e-5]])
    c = lake.conditions
    own = 5.0 * TRIPROTIC.charge(PH)[0]
    h = 10.0**-PH
    w = np.stack([10.0**beta / h ** (n + 1) for n, beta in enumerate(LOG_BETA)])
    charge = 3.0 - np.tensordot([1, 2, 3, 4], w, 1) / (1.0 + w.sum(axis=0))
    assert_allclose(lake.beside_carbonate(PH), own - 1e-5 * charge, rtol=0, atol=1e-17)
    assert_allclose(lake.without_carbon(PH), own - 1e-5 * charge + c.c_oh / h - c.c_h * h, rtol=0, atol=1e-17)
    assert_allclose(lake.without_carbon(PH), lake.anc(PH, dic=NONE), rtol=0, atol=1e-17)


@REGIMES
@pytest.mark.parametrize("name", organic_models())
def test_intensity_is_the_slope_of_anc(salinity, name):
    """dANC/dpH by differences, closed and open, with organic acids and aluminum: definition."""
    lake = balance([[7.0]], [[2e-5]], organic_models()[name], salinity=salinity)
    for known in ({"dic": np.array([[1e-4]])}, {"co2": np.array([[1.5e-5]])}):
        slope = five_points(lambda x, known=known: lake.anc(x, **known), PH)
        assert_allclose(lake.intensity(PH, **known), slope, rtol=1e-7)
        assert (slope > 0.0).all()  # so there is one root


def test_meter_ph_in_brackish_water():
    """Organic acids go by the meter pH, whatever scale the constants are written for."""
    lake = balance([[5.0]], salinity=20.0)
    assert (np.abs(lake.conditions.activity_per_h - 1.0) > 0.01).all()
    assert_allclose(lake.h(PH) * lake.conditions.activity_per_h, np.broadcast_to(10.0**-PH, (5, 25)), rtol=1e-12)
    bare = balance(salinity=20.0).anc(PH, dic=np.array([[1e-4]]))
    assert_allclose(lake.anc(PH, dic=np.array([[1e-4]])) - bare,
                    np.broadcast_to(5.0 * TRIPROTIC.charge(PH)[0], (5, 25)), rtol=1e-9)

"""Sea and brackish water: pH scales, a published simulated titration, buffer factors, and recalled case values."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf import Water
from aquabuf.chem import marine
from aquabuf.chem.seasalt import free_to_seawater_scale, free_to_total_scale
from aquabuf.engine.balance import Family, System
from aquabuf.engine.solve import solve_h


def sea(alkalinity_umol_kg, dic_umol_kg, t_c, salinity=35.0, **options):
    """Sea water from amounts in µmol/kg."""
    rho = Water.from_alkalinity_dic(alkalinity_eq_l=0.0, dic_mol_l=0.0, t_c=[t_c], salinity=salinity).density_kg_l[0]
    return Water.from_alkalinity_dic(alkalinity_eq_l=np.asarray(alkalinity_umol_kg) * 1e-6 * rho,
                                     dic_mol_l=np.asarray(dic_umol_kg) * 1e-6 * rho, t_c=t_c, salinity=[salinity], **options)


def per_kg(water, form):
    """A form in µmol/kg."""
    return water.species_mol_l[form] / water.density_kg_l * 1e6


# ---- Dickson 1981, Deep-Sea Res. 28A:609: simulated titration without phosphate; inputs recalled from memory
ACID, SAMPLE, AT, CT, TB, TS, TF = 0.3, 200.0, 2450e-6, 2200e-6, 420e-6, 28240e-6, 70e-6
K1, K2, KB, KW, KS, KF = 1.00e-6, 8.20e-10, 1.78e-9, 4.32e-14, 1 / 12.3, 1 / 408.0
DICKSON = {  # grams of acid: -log h; the first two as published (recalled), the rest recomputed from the same balance
    0.00: 8.065650, 0.05: 7.925895, 0.10: 7.752062, 0.25: 7.111723, 0.50: 6.522665, 0.75: 6.178101, 1.50: 5.029724,
    1.60: 4.601818, 1.65: 4.304988, 1.75: 3.860034, 2.00: 3.395285, 2.25: 3.171626, 2.50: 3.024045,
}


def dickson_h(grams):
    """Free hydrogen ion along the titration, by the engine's solver with the given constants."""
    d = SAMPLE / (SAMPLE + grams)
    one = np.ones_like(grams)
    system = System(AT * d - ACID * grams / (SAMPLE + grams), one, KW * one, K1 * one, K2 * one, dic=CT * d, families=(
        Family(TB * d, (KB * one,), 0), Family(TS * d, (KS * one,), 1), Family(TF * d, (KF * one,), 1)))
    return solve_h(system).h


def test_dickson_titration_table():
    """Thirteen points of the simulated titration to the last printed digit."""
    grams = np.array(list(DICKSON))
    assert_allclose(-np.log10(dickson_h(grams)), list(DICKSON.values()), rtol=0, atol=1e-6)


def test_dickson_titration_gives_back_alkalinity_and_carbon():
    """Least squares over 51 points; the balance written here is linear in AT and CT. Published: 2450, 2200 µmol/kg."""
    grams = np.arange(51) * 0.05
    h, d = dickson_h(grams), SAMPLE / (SAMPLE + grams)
    carbonate = (K1 * h + 2.0 * K1 * K2) / (h * h + K1 * h + K1 * K2)
    rest = TB * d * KB / (KB + h) + KW / h - h - TS * d * h / (KS + h) - TF * d * h / (KF + h)
    design = np.column_stack([d, -d * carbonate])
    fitted = np.linalg.lstsq(design, rest + ACID * grams / (SAMPLE + grams), rcond=None)[0]
    assert_allclose(fitted * 1e6, [2450.0, 2200.0], rtol=0, atol=0.01)


# ---- scales
@pytest.mark.parametrize(("salinity", "free_minus_total", "total_minus_sea"), [
    (1.0, 0.01745, 0.00098), (5.0, 0.04206, 0.00355), (10.0, 0.05676, 0.00562), (20.0, 0.08062, 0.00803),
    (35.0, 0.10772, 0.00968),
])
def test_scales_at_25(salinity, free_minus_total, total_minus_sea):
    """Definitions of the scales with Dickson 1990 and Dickson & Riley 1979, worked out apart from this code."""
    water = sea(2300.0, 2000.0, 25.0, salinity)
    assert_allclose(water.ph_on("free") - water.ph_on("total"), free_minus_total, rtol=0, atol=1.1e-5)
    assert_allclose(water.ph_on("total") - water.ph_on("seawater"), total_minus_sea, rtol=0, atol=1.1e-5)


def test_meter_minus_seawater_scale():
    """pH of a meter less that on the seawater scale is 0.147 at S 35, 25 °C (Takahashi et al. 1982, recalled: fH 0.7134)."""
    water = sea(2300.0, 2000.0, 25.0)
    assert_allclose(water.ph - water.ph_on("seawater"), 0.147, rtol=0, atol=0.0006)
    assert_allclose(10.0 ** (water.ph_on("seawater") - water.ph), 0.7134, rtol=0, atol=1e-4)


@pytest.mark.parametrize("scale", ["meter", "total", "seawater", "free"])
def test_ph_given_on_a_scale_comes_back_on_it(scale):
    """A pH belongs to its scale: it is returned on the same one, and differs on another by the published distance."""
    water = Water.from_ph_dic(ph=[8.0], dic_mol_l=2e-3, t_c=25.0, salinity=35.0, ph_scale=scale)
    assert_allclose(water.ph_on(scale), 8.0, rtol=0, atol=1e-12)
    assert_allclose(water.ph_on("free") - water.ph_on("total"), 0.10772, rtol=0, atol=1.1e-5)


def test_fresh_total_and_free_scales_are_concentrations():
    """In fresh water pH on the free scale is -log10 of mol/kg: pH + log gamma1, 8 - 0.1072 at I = 0.1 (Davies by hand)."""
    water = Water.from_ph_dic(ph=[8.0], dic_mol_l=2e-3, t_c=25.0, ionic_strength_mol_l=0.1)
    for scale in ("total", "seawater", "free"):
        assert_allclose(water.ph_on(scale), 8.0 - 0.1072, rtol=0, atol=2e-4)


def test_sulfate_of_its_own_moves_the_scales():
    """[H]total/[H]free is 1 + TS/KS: twice the sulfate of sea water, twice the excess (definition)."""
    rho = sea(0.0, 0.0, 25.0).density_kg_l
    twice = Water.from_ph_dic(ph=[8.0], dic_mol_l=2e-3, t_c=25.0, salinity=35.0, sulfate_mol_l=2 * 0.0282354 * rho)
    assert_allclose(10.0 ** (twice.ph_on("free") - twice.ph_on("total")) - 1.0, 2.0 * (10.0**0.10772 - 1.0), rtol=1e-3)


def test_marine_constants_are_on_the_scale_of_their_source():
    """The ratio of species gives the constant back on its own scale: Millero (seawater), Dickson (boric, total)."""
    water = Water.from_ph_dic(ph=[8.1], dic_mol_l=2e-3, t_c=25.0, salinity=35.0)
    s = water.species_mol_l
    # printed by Millero et al. 2006: 5.8401, 8.9636 on the seawater scale
    assert_allclose(water.ph_on("seawater") - np.log10(s["HCO3-"] / s["CO2"]), 5.8401, rtol=0, atol=1e-4)
    assert_allclose(water.ph_on("seawater") - np.log10(s["CO3--"] / s["HCO3-"]), 8.9636, rtol=0, atol=1e-4)
    # ln KB = -19.7964 on the total scale, ln KS = -2.30 on the free scale (Dickson 1990; check values recalled)
    assert_allclose(water.ph_on("total") - np.log10(s["B(OH)4-"] / s["B(OH)3"]), 19.7964 / np.log(10), rtol=0, atol=5e-5)
    assert_allclose(water.ph_on("free") - np.log10(s["SO4--"] / s["HSO4-"]), 2.30 / np.log(10), rtol=0, atol=3e-4)
    # ln KF = -6.0468 on the free scale (Dickson & Riley 1979, recalled), pK of ammonium 9.2562 on the seawater scale
    assert_allclose(water.ph_on("free") - np.log10(s["F-"] / s["HF"]), 6.046766 / np.log(10), rtol=0, atol=1e-5)
    # [H+]total [OH-] per kg is e^-30.434 (Millero 1995 on the total scale, recalled; the 0.015 shift of that form is 0.0223)
    oh = np.log(s["OH-"] / water.density_kg_l) - np.log(10) * water.ph_on("seawater")
    assert_allclose(oh, -30.434 + 0.015, rtol=0, atol=0.001)


def test_lueker_on_the_engines_scale():
    """Lueker et al. 2000 (recalled check: log K1 -5.8472, log K2 -8.9660, total scale) when asked for."""
    water = Water.from_ph_dic(ph=[8.1], dic_mol_l=2e-3, t_c=25.0, salinity=35.0, carbonic="lueker")
    s = water.species_mol_l
    assert_allclose(water.ph_on("total") - np.log10(s["HCO3-"] / s["CO2"]), 5.8472, rtol=0, atol=6e-5)
    assert_allclose(water.ph_on("total") - np.log10(s["CO3--"] / s["HCO3-"]), 8.9660, rtol=0, atol=6e-5)


@pytest.mark.parametrize("t_c", [2.0, 15.0, 25.0, 35.0])
@pytest.mark.parametrize("salinity", [20.0, 30.0, 40.0])
def test_two_refits_of_the_same_data_agree_across_scales(t_c, salinity):
    """Dickson & Millero 1987 (seawater scale, printed) and Lueker 2000 (total) refit one data set: 0.003 and 0.007 in pK."""
    t = t_c + 273.15
    water = Water.from_ph_dic(ph=[8.0], dic_mol_l=2e-3, t_c=t_c, salinity=salinity, carbonic="lueker")
    s = water.species_mol_l
    pk1 = 3670.7 / t - 62.008 + 9.7944 * np.log(t) - 0.0118 * salinity + 0.000116 * salinity**2
    pk2 = 1394.7 / t + 4.777 - 0.0184 * salinity + 0.000118 * salinity**2
    assert_allclose(water.ph_on("seawater") - np.log10(s["HCO3-"] / s["CO2"]), pk1, rtol=0, atol=0.003)
    assert_allclose(water.ph_on("seawater") - np.log10(s["CO3--"] / s["HCO3-"]), pk2, rtol=0, atol=0.007)


# ---- whole cases
@pytest.mark.parametrize(("boron", "ph", "co2", "hco3", "co3", "boh4", "pco2"), [
    ("uppstrom", 8.04579, 11.2371, 1775.392, 213.371, 91.138, 395.787 / 0.99681),
    ("lee", 8.04014, 11.3992, 1777.714, 210.887, 93.870, 401.496 / 0.99681),
])
def test_reference_case(boron, ph, co2, hco3, co3, boh4, pco2):
    """AT 2300, CT 2000, S 35, 25 °C, Lueker; worked out apart from this code.

    That calculation took KW on the total scale with the fixed 0.015 shift and Perez-Fraga for HF: 0.7 % of OH-
    (0.05 µmol/kg) and a scale 0.003 apart, together 1e-4 in pH and 3e-4 in the species.
    """
    water = sea(2300.0, 2000.0, 25.0, carbonic="lueker", boron_ratio=boron)
    assert_allclose(water.ph_total, ph, rtol=0, atol=1.5e-4)
    found = [per_kg(water, f)[0] for f in ("CO2", "HCO3-", "CO3--", "B(OH)4-")]
    assert_allclose(found, [co2, hco3, co3, boh4], rtol=4e-4)
    assert_allclose(water.pco2_atm * 1e6, pco2, rtol=4e-4)


def test_temperature_coefficient_of_co2_pressure():
    """d ln pCO2/dt = 0.0423 per °C at constant alkalinity and carbon, 2.1 to 24.5 °C (Takahashi 1993, recalled)."""
    cold = sea(2270.0, 2074.0, 2.1, 35.38, carbonic="lueker")
    warm = cold.at_temperature(24.5)
    assert_allclose(np.log(warm.pco2_atm / cold.pco2_atm) / (24.5 - 2.1), 0.0423, rtol=0, atol=0.0005)


@pytest.mark.parametrize("carbonic", ["millero", "lueker"])
def test_revelle_factor(carbonic):
    """d ln pCO2 / d ln DIC of surface sea water: 8 to 13 (encyclopedia, printed), about 10 (Frankignoulle 1994)."""
    water = sea(2300.0, [1999.9, 2000.1], 25.0, carbonic=carbonic)
    revelle = np.diff(np.log(water.pco2_atm)) / np.diff(np.log(water.dic_mol_l))
    assert_allclose(revelle, 10.5, rtol=0, atol=2.5)
    assert_allclose(revelle, 9.596, rtol=0.01)  # worked out apart from this code, with Lueker


def numeric_factors(alkalinity, dic, t_c, **options):
    """gamma, beta of DIC and of alkalinity (Egleston et al. 2010): 1 / (d ln X / dY) by central differences, in mol/L."""
    def log_x(a, c):
        water = sea(a, c, t_c, **options)
        return np.log(water.pco2_atm[0]), -np.log(10.0) * water.ph_on("free")[0]
    step, rho = 0.2, sea(0.0, 0.0, t_c).density_kg_l[0]
    over_c = (np.array(log_x(alkalinity, dic + step)) - log_x(alkalinity, dic - step)) / (2e-6 * step * rho)
    over_a = (np.array(log_x(alkalinity + step, dic)) - log_x(alkalinity - step, dic)) / (2e-6 * step * rho)
    return 1.0 / over_c[0], 1.0 / over_a[0], 1.0 / over_c[1], 1.0 / over_a[1]


def test_buffer_factors_are_the_derivatives():
    """Egleston's closed forms, written here from the species, against differences of the solved waters; and the
    identity gamma_Alk = -beta_DIC. HSO4- and HF, which the closed forms leave out, are 2e-6 of the sum."""
    water = sea(2300.0, 2000.0, 25.0, carbonic="lueker")
    s = {k: v[0] for k, v in water.species_mol_l.items()}
    carbonate = s["HCO3-"] + 2.0 * s["CO3--"]
    rest = s["B(OH)4-"] * s["B(OH)3"] / (s["B(OH)3"] + s["B(OH)4-"]) + s["H+"] + s["OH-"]
    total = s["HCO3-"] + 4.0 * s["CO3--"] + rest
    dic = water.dic_mol_l[0]
    expected = (dic - carbonate**2 / total, (carbonate**2 - dic * total) / carbonate,
                (dic * total - carbonate**2) / carbonate)
    g_dic, g_alk, b_dic, b_alk = numeric_factors(2300.0, 2000.0, 25.0, carbonic="lueker")
    assert_allclose([g_dic, g_alk, b_dic], expected, rtol=2e-5)
    assert_allclose(g_alk, -b_dic, rtol=2e-5)
    assert_allclose(b_alk, carbonate**2 / dic - total, rtol=2e-5)
    assert_allclose(water.buffer_intensity_eq_l(), -np.log(10.0) * b_alk, rtol=2e-5)
    # values per kg, worked out apart from this code: 0.2084, -0.2562, 0.2562, -0.2821 mmol/kg; slope 0.6495
    found = np.array([g_dic, g_alk, b_dic, b_alk]) / water.density_kg_l[0] * 1e3
    assert_allclose(found, [0.2084, -0.2562, 0.2562, -0.2821], rtol=2e-3)


def test_buffering_is_weakest_where_carbon_equals_alkalinity():
    """Egleston et al. 2010 (printed): minimum where DIC = Alk, pH about 7.5. At AT 2300, 15 °C: ratio 0.993, pH 7.50."""
    dic = np.arange(2200.0, 2360.0, 2.0)
    rho = sea(0.0, 0.0, 15.0).density_kg_l[0]
    water = sea(2300.0, dic, 15.0, carbonic="lueker")
    slope = np.gradient(-np.log(10.0) * water.ph_on("free"), dic * 1e-6 * rho)
    least = int(np.argmax(np.abs(slope)))
    assert_allclose(dic[least] / 2300.0, 0.993, rtol=0, atol=0.01)
    assert_allclose(water.ph_total[least], 7.50, rtol=0, atol=0.05)


def test_sea_salt_fills_only_what_is_not_given():
    """Boron, sulfate, fluoride and calcium come from salinity where missing; a given one stays (ratios printed/recalled)."""
    water = Water.from_ph_dic(ph=[8.0, 8.0, 8.0], dic_mol_l=2e-3, t_c=25.0, salinity=[35.0, 35.0, 0.0],
                              boron_mol_l=[np.nan, 1e-3, np.nan])
    assert_allclose(water.total_mol_l("boron") / water.density_kg_l, [4.1576e-4, 1e-3 / 1.02334306, 0.0], rtol=1e-4)
    assert_allclose(water.total_mol_l("sulfate")[0] / water.density_kg_l[0], 0.0282354, rtol=1e-5)
    assert_allclose(water.total_mol_l("fluoride")[0] / water.density_kg_l[0], 6.8326e-5, rtol=1e-4)
    assert_allclose(water.total_mol_l("calcium")[0] / water.density_kg_l[0], 0.010282, rtol=1e-4)
    assert np.isnan(water.total_mol_l("calcium")[2])


def test_dickson_1990_gives_the_scale_factors_the_engine_uses():
    """The engine's factors are those of the definition at the row's own sulfate and fluoride."""
    water = Water.from_ph_dic(ph=[8.0], dic_mol_l=2e-3, t_c=12.0, salinity=20.0, sulfate_mol_l=0.01, fluoride_mol_l=1e-4)
    rho = water.density_kg_l
    k_s, k_f = marine.k_bisulfate(12.0, 20.0), marine.k_fluoride(12.0, 20.0)
    assert_allclose(10.0 ** (water.ph_on("free") - water.ph_on("total")), free_to_total_scale(0.01 / rho, k_s), rtol=1e-12)
    assert_allclose(10.0 ** (water.ph_on("free") - water.ph_on("seawater")),
                    free_to_seawater_scale(0.01 / rho, k_s, 1e-4 / rho, k_f), rtol=1e-12)

"""The water of lakes by hand-written carbonate balances: sources, closed and open acid, temperature of the meter."""

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_lakes import AIR_PPM, HAWK_POND, budget_of, ions, lakes_of
from numpy.testing import assert_allclose, assert_array_equal
from scipy.optimize import brentq

from aquabuf.assess.lake.budget import GRAN_PH
from aquabuf.assess.lake.chemistry import ANC_SOURCES, CARBON_SOURCES, chemistry, choose_sources, of_titration
from aquabuf.assess.lake.inputs import Lakes

STRENGTH = 3e-4
VAPOR_ATM = {10.0: 1.2281 / 101.325, 25.0: 3.1690 / 101.325}  # printed steam tables [kPa]
THRESHOLDS = (6.0, 5.5, 5.0)
COLD, WARM = BareWater(10.0, STRENGTH), BareWater(25.0, STRENGTH)
AIR_CO2 = {10.0: AIR_PPM * 1e-6 * (1.0 - VAPOR_ATM[10.0]) * COLD.k0, 25.0: AIR_PPM * 1e-6 * (1.0 - VAPOR_ATM[25.0]) * WARM.k0}
# What four printed digits of the constants leave: of a charge 0.1 µeq/L and 0.1 %, of a pH 0.002
CHARGE, PH = {"rtol": 1e-3, "atol": 1e-7}, {"rtol": 0, "atol": 2e-3}


def answers(*rows, method="gran", **options):
    """Chemistry of the lakes; `anc` is of a Gran titration unless said otherwise."""
    lakes = lakes_of(*({"ionic_strength_mol_l": STRENGTH} | row for row in rows), **options)
    return _chemistry(lakes, method)


def _chemistry(lakes, method="gran"):
    b = budget_of(lakes, method)
    return chemistry(lakes, b, choose_sources(lakes, b), THRESHOLDS)


def sources(row, method="gran"):
    """Names of the sources of ANC and of carbon; "" for none."""
    lakes = lakes_of(row)
    anc, carbon = choose_sources(lakes, budget_of(lakes, method))
    return (*ANC_SOURCES, "")[anc[0]], (*CARBON_SOURCES, "")[carbon[0]]


def organic(ph, doc, pk=(3.04, 4.42, 6.70), sites=10.2e-6):
    """Charge of organic anions: Hruska et al. 2003, second set of pK (recalled). [eq/L]"""
    h, k = 10.0**-ph, np.cumprod(10.0 ** -np.array(pk))
    w = np.array([1.0, k[0] / h, k[1] / h**2, k[2] / h**3])
    return doc * sites * (w[1] + 2.0 * w[2] + 3.0 * w[3]) / w.sum() / 3.0


def aluminum(ph, total):
    """Charge of aluminum and its hydroxides: Nordstrom & May 1996 (recalled). [eq/L]"""
    h = 10.0**-ph
    w = np.array([1.0, 10.0**-5.0 / h, 10.0**-10.1 / h**2, 10.0**-16.9 / h**3, 10.0**-22.7 / h**4])
    return total * (3.0 * w[0] + 2.0 * w[1] + w[2] - w[4]) / w.sum()


def tangent(charge, *args):
    """Where the tangent of a charge in h, touching at GRAN_PH, meets h = 0; slope by differences in h."""
    h, d = 10.0**-GRAN_PH, 1e-9
    slope = (charge(-np.log10(h + d), *args) - charge(-np.log10(h - d), *args)) / (2.0 * d)
    return charge(GRAN_PH, *args) - h * slope


# ------------------------------------------------------------------ what an answer rests on

ION_ROW = ions(**HAWK_POND)
ALL = ION_ROW | {"ph": 5.9, "anc_eq_l": 3e-5, "alkalinity_eq_l": 3e-5, "dic_mol_l": 9e-5, "pco2_atm": 1e-3}


@pytest.mark.parametrize(("without", "anc", "carbon"), [
    ((), "Gran ANC", "carbon"),
    (("dic_mol_l",), "Gran ANC", "CO2 pressure"),
    (("dic_mol_l", "pco2_atm"), "Gran ANC", "pH and ANC"),
    (("anc_eq_l",), "alkalinity", "carbon"),
    (("anc_eq_l", "dic_mol_l", "pco2_atm"), "alkalinity", "pH and ANC"),
    (("anc_eq_l", "alkalinity_eq_l"), "charge balance", "carbon"),
    (("anc_eq_l", "alkalinity_eq_l", "dic_mol_l", "pco2_atm"), "charge balance", ""),
    (("anc_eq_l", "alkalinity_eq_l", "chloride_mol_l"), "pH and carbon", "carbon"),
    (("anc_eq_l", "alkalinity_eq_l", "chloride_mol_l", "dic_mol_l"), "pH and carbon", "CO2 pressure"),
    (("anc_eq_l", "alkalinity_eq_l", "chloride_mol_l", "dic_mol_l", "pco2_atm"), "", ""),
    (("anc_eq_l", "alkalinity_eq_l", "chloride_mol_l", "ph"), "", "carbon"),
    (("ph", "dic_mol_l", "pco2_atm"), "Gran ANC", ""),
], ids=str)  # fmt: skip
def test_sources_come_in_order(without, anc, carbon):
    """The best that is there; a sum of ions never tells carbon, for it carries too much error."""
    assert sources({name: v for name, v in ALL.items() if name not in without}) == (anc, carbon)


def test_an_end_point_anc_is_no_source():
    """It is another quantity: the ions or pH and carbon stand in."""
    assert sources({"ph": 5.9, "anc_eq_l": 3e-5}, "end_point") == ("", "")
    assert sources(ALL | {"alkalinity_eq_l": np.nan}, "end_point") == ("charge balance", "carbon")


def test_sources_are_one_per_lake():
    """One-dimensional, chosen from the first column of values, so that all draws of a lake rest on the same."""
    lakes = lakes_of(ALL, {"ph": 6.0})
    values = {name: np.repeat(v, 4, axis=1) for name, v in lakes.values.items()}
    values["dic_mol_l"][0, 2] = np.nan
    drawn = Lakes(values, lakes.setting, lakes.organic, np.ones((1, 4)))
    anc, carbon = choose_sources(drawn, budget_of(drawn))
    assert_array_equal(anc, [0, len(ANC_SOURCES)])
    assert_array_equal(carbon, [0, len(CARBON_SOURCES)])


# ------------------------------------------------------------------ clear water: carbonate by hand


@pytest.mark.parametrize("ph", [5.3, 6.2, 7.1])
def test_closed_lake_of_ph_and_carbon(ph):
    """Acid to each threshold, buffer intensity, carbonate and CO2 pressure, all from pH and carbon alone."""
    dic = 1.2e-4
    c = answers({"ph": ph, "dic_mol_l": dic})
    for level, found in zip(THRESHOLDS, c.closed_to, strict=True):
        assert_allclose(found[0, 0], COLD.alkalinity(ph, dic) - COLD.alkalinity(level, dic), **CHARGE)
    _, a1, a2 = COLD.shares(ph)
    assert_allclose(c.carbonate[0, 0], dic * (a1 + 2.0 * a2), **CHARGE)
    assert_allclose(c.buffer_closed[0, 0], COLD.buffer(ph, dic), rtol=1e-3)
    assert_allclose(c.pco2_atm[0, 0], dic * COLD.shares(ph)[0] / COLD.k0, rtol=2e-3)
    assert (c.ph[0, 0], c.dic[0, 0]) == (ph, dic)
    assert np.isnan(c.organic).all()  # carbon was not measured


@pytest.mark.parametrize(("t_c", "hand"), [(10.0, COLD), (25.0, WARM)])
@pytest.mark.parametrize("anc", [-3e-5, 4e-5, 2.5e-4])
def test_open_lake_of_a_gran_anc(t_c, hand, anc):
    """pH at air, acid to each threshold with CO2 held, buffer intensity with CO2 held."""
    c = answers({"temperature_c": t_c, "anc_eq_l": anc})
    at_air = hand.ph_at_co2(anc, AIR_CO2[t_c])
    assert_allclose(c.ph_at_air[0, 0], at_air, **PH)
    for level, found in zip(THRESHOLDS, c.open_to, strict=True):
        assert_allclose(found[0, 0], anc - hand.alkalinity_at_co2(level, AIR_CO2[t_c]), **CHARGE)
    dic = AIR_CO2[t_c] / hand.shares(at_air)[0]
    assert_allclose(c.buffer_open[0, 0], hand.buffer(at_air, dic, "open"), rtol=6e-3)  # by the 0.002 of its pH
    assert np.isnan(c.ph).all()
    assert np.isnan(c.closed_to).all()


def test_carbon_of_each_source():
    """Measured; pressure over what CO2 is of it; alkalinity less that of water over the carbonate fraction."""
    ph, anc, pco2 = 6.4, 7e-5, 1.1e-3
    c = answers({"ph": ph, "anc_eq_l": anc, "dic_mol_l": 2e-4}, {"ph": ph, "anc_eq_l": anc, "pco2_atm": pco2},
                {"ph": ph, "anc_eq_l": anc})
    assert_allclose(c.dic[:, 0], [2e-4, pco2 * COLD.k0 / COLD.shares(ph)[0], COLD.dic(ph, anc)], rtol=2e-3)
    assert_allclose(c.pco2_atm[1, 0], pco2, rtol=1e-9)
    assert_allclose(c.anc[:, 0], anc, rtol=1e-12)


def test_a_titration_that_leaves_no_carbonate_has_the_carbon_of_air():
    """At pH 4.5 and ANC -60 µeq/L the free acid is less than the ANC asks: carbonate as it comes out, CO2 of air."""
    c = answers({"ph": 4.5, "anc_eq_l": -6e-5})
    assert_allclose(c.dic[0, 0], AIR_CO2[10.0] / COLD.shares(4.5)[0], rtol=2e-3)
    assert_allclose(c.carbonate[0, 0], -6e-5 - COLD.alkalinity(4.5, 0.0), rtol=2e-3)
    assert c.carbonate[0, 0] < 0.0


def test_anc_by_charge_counts_fluoride():
    """Without a titration: base cations and ammonium less sulfate, nitrate, chloride and fluoride."""
    c = answers(ION_ROW, ION_ROW | {"fluoride_mol_l": np.nan})
    assert_allclose(1e6 * c.anc[:, 0], [-45.720 - 2.853, -45.720], rtol=0, atol=0.005)
    assert_allclose(c.ph_at_air[0, 0], COLD.ph_at_co2(-48.573e-6, AIR_CO2[10.0]), **PH)


def test_missing_ph_with_anc_and_carbon():
    """The pH in the lake follows from both, and everything closed with it."""
    anc, dic = 9e-5, 1.3e-4
    c = answers({"anc_eq_l": anc, "dic_mol_l": dic})
    ph = COLD.ph(anc, dic)
    assert_allclose(c.ph[0, 0], ph, **PH)
    assert_allclose(c.closed_to[2][0, 0], anc - COLD.alkalinity(5.0, dic), **CHARGE)
    assert_allclose(c.pco2_atm[0, 0], dic * COLD.shares(ph)[0] / COLD.k0, rtol=5e-3)
    assert_allclose(c.carbonate[0, 0], dic * (COLD.shares(ph)[1:] @ [1.0, 2.0]), **CHARGE)


def test_ph_read_at_another_temperature():
    """Read at 25 °C from a lake of 10 °C: alkalinity and carbon of the bottle are those of the lake, its pH is not."""
    read, dic = 6.8, 2e-4
    c = answers({"ph": read, "ph_temperature_c": 25.0, "dic_mol_l": dic}, {"ph": read, "dic_mol_l": dic})
    alkalinity = WARM.alkalinity(read, dic)
    in_lake = COLD.ph(alkalinity, dic)
    assert in_lake - read > 0.05  # the same water is more alkaline in the cold
    assert_allclose(c.ph[:, 0], [in_lake, read], **PH)
    assert_allclose(c.anc[0, 0], alkalinity, **CHARGE)
    assert_allclose(c.closed_to[0][0, 0], alkalinity - COLD.alkalinity(6.0, dic), **CHARGE)
    assert_allclose(c.open_to[0][0, 0], alkalinity - COLD.alkalinity_at_co2(6.0, AIR_CO2[10.0]), **CHARGE)
    assert_allclose(c.pco2_atm[0, 0], dic * COLD.shares(in_lake)[0] / COLD.k0, rtol=5e-3)


# ------------------------------------------------------------------ brown and acid water


def test_closed_lake_with_organic_acids_and_aluminum():
    """From pH 6.5 to 5.0 organic anions take 8.091 - 6.142 µeq per mg C (worked out apart), aluminum its hydroxides."""
    dic, doc, metal = 1.2e-4, 8.0, 4e-6
    c = answers({"ph": 6.5, "dic_mol_l": dic, "doc_mg_l": doc, "aluminum_mol_l": metal})
    by_hand = (COLD.alkalinity(6.5, dic) - COLD.alkalinity(5.0, dic) + 1e-6 * doc * (8.091 - 6.142)
               - aluminum(6.5, metal) + aluminum(5.0, metal))
    assert_allclose(c.closed_to[2][0, 0], by_hand, **CHARGE)
    assert_allclose(c.organic[0, 0], 8.091e-6 * doc, rtol=1e-4)
    assert_allclose(c.anc[0, 0], COLD.alkalinity(6.5, dic) + 8.091e-6 * doc - aluminum(6.5, metal), **CHARGE)


def test_a_gran_anc_becomes_one_by_charge():
    """With the anions that the line leaves out, without the aluminum; then the whole balance gives the pH at air."""
    gran, doc, metal = 2e-5, 9.0, 6e-6
    by_hand = gran + tangent(organic, doc) - tangent(aluminum, metal)
    c = answers({"anc_eq_l": gran, "doc_mg_l": doc, "aluminum_mol_l": metal})
    assert_allclose(c.anc[0, 0], by_hand, rtol=0, atol=1e-10)
    assert_allclose(of_titration(lakes_of({"doc_mg_l": doc, "aluminum_mol_l": metal}), np.array([[gran]])), by_hand, rtol=0, atol=1e-10)

    def excess(ph):
        return COLD.alkalinity_at_co2(ph, AIR_CO2[10.0]) + organic(ph, doc) - aluminum(ph, metal) - by_hand

    assert_allclose(c.ph_at_air[0, 0], brentq(excess, 3.0, 9.0), **PH)
    assert_allclose(c.open_to[1][0, 0], by_hand - (excess(5.5) + by_hand), **CHARGE)


def test_carbon_of_ph_and_anc_in_brown_water():
    """What organic anions, aluminum and free acid leave of the ANC is carbonate."""
    ph, gran, doc, metal = 6.1, 4e-5, 6.0, 1e-6
    anc = gran + tangent(organic, doc) - tangent(aluminum, metal)
    c = answers({"ph": ph, "anc_eq_l": gran, "doc_mg_l": doc, "aluminum_mol_l": metal})
    assert_allclose(c.dic[0, 0], COLD.dic(ph, anc - organic(ph, doc) + aluminum(ph, metal)), rtol=3e-3)


# ------------------------------------------------------------------ rows and shapes


def test_a_lake_without_temperature_has_nothing():
    """No water is solved, without a warning; its neighbors are answered as if alone. What was read stays as read."""
    row = {"ph": 6.3, "anc_eq_l": 6e-5, "dic_mol_l": 1e-4, "doc_mg_l": 4.0}
    c, alone = answers(row, row | {"temperature_c": np.nan}, row), answers(row)
    for name in ("ph_at_air", "carbonate", "pco2_atm", "buffer_closed", "buffer_open"):
        found = getattr(c, name)
        assert_array_equal(np.isnan(found)[:, 0], [False, True, False], err_msg=name)
        assert_allclose(found[[0, 2]], np.repeat(getattr(alone, name), 2, axis=0), rtol=1e-11, err_msg=name)
    for found in (*c.closed_to, *c.open_to):
        assert_array_equal(np.isnan(found)[:, 0], [False, True, False])
    assert_array_equal(c.ph[:, 0], 6.3)


def test_a_lake_with_nothing_has_nothing():
    """A temperature alone gives no water."""
    c = answers({}, {"doc_mg_l": 5.0})
    for name in ("anc", "ph", "dic", "carbonate", "organic", "pco2_atm", "ph_at_air", "buffer_closed", "buffer_open"):
        assert np.isnan(getattr(c, name)).all(), name
    assert np.isnan([*c.closed_to, *c.open_to]).all()


def test_draws_are_single_answers():
    """Lakes in rows, draws in columns: each cell is what the lake would have with those readings."""
    rows = [{"ph": 6.3, "dic_mol_l": 1e-4, "doc_mg_l": 4.0, "anc_eq_l": 5e-5},
            {"dic_mol_l": 2e-4, "doc_mg_l": 7.0, "anc_eq_l": 1e-4, "ph_temperature_c": 25.0}]
    single = lakes_of(*({"ionic_strength_mol_l": STRENGTH} | row for row in rows))
    factors = np.array([[1.0, 0.9, 1.2]])
    values = {name: v * factors if name in ("dic_mol_l", "doc_mg_l", "anc_eq_l") else v for name, v in single.values.items()}
    drawn = _chemistry(Lakes(values, single.setting, single.organic, np.ones((1, 1))))
    for j, factor in enumerate(factors[0]):
        one = answers(*(row | {n: factor * row[n] for n in ("dic_mol_l", "doc_mg_l", "anc_eq_l")} for row in rows))
        for name in ("anc", "ph", "dic", "carbonate", "organic", "pco2_atm", "ph_at_air", "buffer_closed", "buffer_open"):
            assert_allclose(np.broadcast_to(getattr(drawn, name), (2, 3))[:, j], getattr(one, name)[:, 0], rtol=1e-10, err_msg=name)
        for many, few in zip(drawn.closed_to + drawn.open_to, one.closed_to + one.open_to, strict=True):
            assert many.shape == (2, 3)
            assert_allclose(many[:, j], few[:, 0], rtol=1e-9, atol=1e-15)

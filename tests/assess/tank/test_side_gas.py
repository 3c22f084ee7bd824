"""Toxic gases, carbon dioxide and heat of a neutralization against tables, closed forms and thermochemistry."""

import csv
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.side import Treated, side_effects
from aquabuf.assess.tank.side_gas import (
    co2_effects,
    gas_hazards,
    gas_share,
    gas_shares,
    mixing_effects,
    stripped_ph,
)
from aquabuf.assess.tank.side_heat import heat_effects, heat_kj_l
from aquabuf.chem.acids import Acid
from aquabuf.chem.products import find_product, own_product
from aquabuf.engine.water import Water

FOLDER = Path(__file__).parents[2] / "published"


def rows_of(name):
    """Published rows."""
    return list(csv.DictReader((FOLDER / f"{name}.csv").read_text(encoding="utf-8").splitlines()))


SHARES = rows_of("gas_shares")
ROWS = [r for r in rows_of("tank_side") if r["quantity"].startswith(("co2", "rise", "heat"))]
TOTAL_OF = {"H2S": "sulfide", "HCN": "cyanide", "NH3": "ammonium"}
H2SO4_G = 98.074


def treated(reagent="sulfuric acid", **given):
    """Acid on an alkaline waste of 10 m3/h, with what is given put in."""
    case = {"flow_m3_h": 10.0, "t_c": 25.0, "start_ph": 11.0, "end_ph": 7.5, "dose_eq_l": 0.01,
            "product": find_product(reagent)}
    return Treated(**case | given)


# ---------------------------------------------------------------- toxic gases


@pytest.mark.parametrize("row", SHARES, ids=lambda r: f"{r['gas']} {r['ph']}")
def test_gas_shares(row):
    """Shares with the pK of the table to three decimals; with the pK of the house within what 0.01 in pK moves."""
    expected, ph = float(row["expected"]), float(row["ph"])
    assert_allclose(gas_share(ph, float(row["pk"]), row["side"]), expected, rtol=0, atol=0.00051)
    name = TOTAL_OF[row["gas"]]
    assert gas_hazards()[name].gas == row["gas"]
    assert gas_hazards()[name].side == row["side"]
    assert_allclose(gas_shares(treated(totals={name: 1e-3}), [ph])[name], [expected], rtol=0, atol=0.0065)


@pytest.mark.parametrize("name", ["sulfide", "cyanide", "hypochlorite"])
@pytest.mark.parametrize("reagent", ["sulfuric acid", "hydrochloric acid", "carbon dioxide"])
def test_acid_into_what_makes_toxic_gas_stops(name, reagent):
    """Whatever the acid, whatever the end pH."""
    for end in (6.0, 10.0):
        stops = side_effects(treated(reagent, end_ph=end, totals={name: 1e-3})).stops
        assert [row.name.partition(",")[0] for row in stops] == [name]
        assert "Acid must not go to this waste" in stops[0].words


@pytest.mark.parametrize("name", ["sulfide", "cyanide", "hypochlorite"])
def test_base_does_not_stop_but_an_acid_waste_of_the_kind_warns(name):
    """Base raises pH; a waste that stands at pH 4 gives the gas off already. Traces only warn."""
    base = treated("caustic soda 25 %", start_ph=4.0, end_ph=11.5, totals={name: 1e-3})
    found = side_effects(base)
    assert not found.stops
    assert [r for r in found.warnings if r.name.startswith(name)]
    trace = side_effects(treated(totals={name: 1e-8}))
    assert not trace.stops
    assert [r for r in trace.warnings if r.name.startswith(name)]
    assert not [r for r in side_effects(treated()).rows if r.name.startswith(name)]


def test_stop_begins_at_the_listed_level():
    """Just below and just above the level of each row of the table that stops."""
    mass = {"sulfide": 32.06, "cyanide": 26.018, "hypochlorite": 51.449}
    for name, hazard in gas_hazards().items():
        if hazard.severity == "stop":
            level = 1e-3 * hazard.limit_mg_l / mass[name]
            stops = [bool(side_effects(treated(totals={name: f * level})).stops) for f in (0.99, 1.01)]
            assert stops == [False, True]


def test_ammonia_warns_with_base_only():
    """Lime into 1 g/L of ammonium nitrogen past pH 9 warns; acid bringing it from 7 to 6 does not."""
    base = side_effects(treated("hydrated lime", start_ph=7.0, end_ph=10.0, totals={"ammonium": 0.07}))
    assert [r.value for r in base.warnings if r.name.startswith("ammonium")] == [
        pytest.approx(1.0 / (1.0 + 10.0 ** (9.245 - 10.0)), abs=1e-3)]
    acid = side_effects(treated(start_ph=7.0, end_ph=6.0, totals={"ammonium": 0.07}))
    assert not [r for r in acid.warnings if r.name.startswith("ammonium")]


def test_streams_that_must_not_meet():
    """Cyanide beside acid stops, beside another alkaline stream not; hypochlorite beside ammonium warns."""
    cyanide, acid = ("plating", 11.5, {"cyanide": 1e-3}), ("pickling", 1.0, {"sulfate": 0.1})
    rows = mixing_effects([cyanide, acid])
    assert [(r.name, r.severity) for r in rows] == [("plating beside pickling", "stop")]
    assert mixing_effects([cyanide, ("rinse", 10.0, {})]) == []
    bleach = ("bleach", 12.0, {"hypochlorite": 0.01})
    rows = mixing_effects([bleach, ("scrubber", 8.0, {"ammonium": 0.01})])
    assert [(r.name, r.severity) for r in rows] == [("bleach with ammonia of scrubber", "warning")]


# ---------------------------------------------------------------- carbon dioxide


def whole(reagent):
    """A carbonate that just uses up 0.1 mol/L of sulfuric acid; its CO2 stays in until air takes it: pH by mass action."""
    product = find_product(reagent)
    carbon = 0.2 * product.adds["carbon"] / product.adds["alkalinity"]
    return treated(reagent, start_ph=0.8, end_ph=0.5 * (6.3519 - np.log10(carbon)), dose_eq_l=0.2,
                   totals={"sulfate": 0.1})


def value_of(row):
    """What the code gives for a row of heat or carbon dioxide."""
    quantity, at = row["quantity"], row["at"]
    if quantity.startswith("co2"):
        found = side_effects(whole(at))
        acid_kg_m3 = 0.1 * H2SO4_G
        kg = found.value("carbon dioxide set free") / acid_kg_m3
        return kg if quantity.startswith("co2_kg") else found.value("carbon dioxide gas") / (240.0 * acid_kg_m3)
    if quantity == "heat_kj_per_mol_h2so4":
        return sum(heat_kj_l(treated(start_ph=treated().pkw - 1.0, end_ph=7.0, dose_eq_l=0.1, strength=1.0))[:2]) / 0.05
    dose = 1.0 if quantity == "rise_k_per_eq_l" else 2.0 * 50.0 / H2SO4_G
    case = treated("caustic soda 25 %", start_ph=0.0, end_ph=7.0, dose_eq_l=dose)
    return heat_effects(case)[2].value


@pytest.mark.parametrize("row", ROWS, ids=lambda r: f"{r['quantity']} {r['at']}")
def test_heat_and_carbon_dioxide_match_their_source(row):
    """0.449 kg and 0.249 m3 of CO2 per kilogram of acid; 13.35 K per eq/L; 206.9 kJ per mole of sulfuric acid."""
    assert_allclose(value_of(row), float(row["expected"]), rtol=0, atol=float(row["atol"]))


def test_ph_after_stripping_is_that_of_the_engine_in_air():
    """A bicarbonate water at pH 7, and one with ammonium and phosphate, against the engine's open water."""
    case = treated(t_c=20.0, end_ph=7.0, totals={"carbon": 0.01})
    water = Water.from_ph_dic(ph=7.0, dic_mol_l=0.01, t_c=20.0, ionic_strength_mol_l=0.0).at_air()
    ph, carbon = stripped_ph(case)
    assert_allclose(ph, water.ph, atol=2e-4)
    assert_allclose(carbon, water.dic_mol_l, rtol=1e-3)
    case = treated(t_c=20.0, end_ph=7.0, totals={"carbon": 0.01, "ammonium": 0.02, "phosphate": 0.005})
    water = Water.from_ph_dic(ph=7.0, dic_mol_l=0.01, ammonium_mol_l=0.02, phosphate_mol_l=0.005, t_c=20.0,
                              ionic_strength_mol_l=0.0).at_air()
    assert_allclose(stripped_ph(case)[0], water.ph, atol=2e-4)


def test_held_base_takes_the_place_of_named_acids():
    """A curve that holds what 0.02 mol/L of ammonium holds gives the same pH; the named acid alone is not counted then."""
    by_name = treated(end_ph=7.0, totals={"carbon": 0.01, "ammonium": 0.02})
    k = 10.0**-9.245
    by_curve = treated(end_ph=7.0, totals={"carbon": 0.01}, held=lambda ph: 0.02 * k / (k + 10.0**-ph))
    assert_allclose(stripped_ph(by_curve)[0], stripped_ph(by_name)[0], atol=5e-3)


def test_stripping_out_of_the_window_warns():
    """A bicarbonate water of 50 meq/L rises past 9; the drift of a waste without carbon is only a note."""
    rows = co2_effects(treated(end_ph=7.5, totals={"carbon": 0.05}), window=(6.0, 9.0))
    assert [r.severity for r in rows if r.name == "pH after CO2 strips"] == ["warning"]
    rows = co2_effects(treated(end_ph=7.0), window=(6.0, 9.0))
    assert [(r.name, r.severity) for r in rows] == [("pH in contact with air", "note")]
    assert_allclose(rows[0].value, Water.from_alkalinity_pco2(alkalinity_eq_l=0.0, pco2_atm=425e-6 * 0.9687, t_c=25.0).ph,
                    atol=0.01)


def test_pressure_of_carbon_dioxide():
    """Henry's law with 10^-1.468: 0.05 mol/L as CO2 bubbles and warns; 0.1 mmol/L at pH 8 does not."""
    found = side_effects(whole("limestone"))
    assert_allclose(found.value("carbon dioxide pressure"), 0.1 / 10.0**-1.468, rtol=0.01)
    assert "it bubbles" in next(r.words for r in found.warnings if r.name == "carbon dioxide pressure")
    rows = co2_effects(treated(end_ph=8.0, totals={"carbon": 2e-3}))
    assert [r.severity for r in rows if r.name == "carbon dioxide pressure"] == ["note"]


# ---------------------------------------------------------------- heat


def test_weak_acid_gives_off_less_by_its_enthalpy():
    """A waste of 0.2 mol/L ammonium brought from far below its pK to far above: 55.8 - 51.95 kJ/mol, and OH- is free."""
    case = treated("caustic soda 25 %", start_ph=6.0, end_ph=12.0, dose_eq_l=0.21, totals={"ammonium": 0.2})
    off = 1.0 / (1.0 + 10.0 ** (9.245 - 12.0)) - 1.0 / (1.0 + 10.0 ** (9.245 - 6.0))
    assert_allclose(heat_kj_l(case)[0], (0.21 - case.hydroxide(12.0)) * 55.815 - 0.2 * off * 51.95, rtol=1e-3)


def test_acid_of_the_users_own():
    """Two steps with enthalpies 5 and 10 kJ/mol; both come off."""
    own = Acid(name="own", pk=(3.0, 6.0), enthalpy_j_mol=(5e3, 10e3))
    case = treated("caustic soda 25 %", start_ph=0.0, end_ph=9.0, dose_eq_l=1.2, acids={own: 0.1})
    assert_allclose(heat_kj_l(case)[0], 1.2 * 55.815 - 0.1 * 15.0, rtol=1e-3)


def test_soda_ash_warms_less_than_caustic():
    """Carbonate to CO2(aq) with strong acid: the two enthalpies of ionization, 24 kJ/mol, turned round (recalled)."""
    case = treated("soda ash", start_ph=0.7, end_ph=3.8, dose_eq_l=0.2)
    assert_allclose(heat_kj_l(case)[0], 0.1 * (9.15 + 14.7), rtol=0.02)
    assert heat_kj_l(case)[1:] == (0.0, True)


def test_bicarbonate_takes_one_proton():
    """Only the first enthalpy of ionization is turned round, 9.15 kJ/mol (recalled)."""
    case = treated("sodium bicarbonate", start_ph=0.7, end_ph=3.8, dose_eq_l=0.2)
    assert_allclose(heat_kj_l(case)[0], 0.2 * 9.15, rtol=0.02)


def test_carbon_dioxide_on_caustic():
    """CO2(g) + OH- = HCO3-: CODATA enthalpies of formation -689.93 + 393.51 + 230.02 (recalled), 66.4 kJ/mol."""
    case = treated("carbon dioxide", start_ph=treated().pkw - 1.0, end_ph=8.34, dose_eq_l=0.1)
    assert_allclose(sum(heat_kj_l(case)[:2]) / 0.1, 66.4, rtol=0.01)


def test_slaking_counts_with_quicklime_only():
    """1.14 MJ/kg of CaO (recalled); hydrated lime is slaked already."""
    assert_allclose(heat_kj_l(treated("quicklime", start_ph=1.0, dose_eq_l=0.1))[1], 0.05 * 56.077 * 1.14, rtol=1e-6)
    assert heat_kj_l(treated("hydrated lime", start_ph=1.0))[1] == 0.0


def test_acid_taken_up_by_what_is_not_known_counts_as_by_hydroxide():
    """A waste known by its curve alone: all of the dose is counted, the hot side."""
    assert_allclose(heat_kj_l(treated(start_ph=9.0, end_ph=7.0, dose_eq_l=0.05))[0], 0.05 * 55.815, rtol=1e-3)


def test_unknown_heat_of_dilution_is_told():
    """Nitric acid has no row; the rise is told to be too low."""
    found = side_effects(treated("nitric acid", strength=0.6))
    assert "heat of dilution" in [r.name for r in found.warnings]
    assert "heat of dilution" not in [r.name for r in side_effects(treated(strength=0.93)).warnings]


def test_outlet_temperature_against_limits():
    """20 °C and 1.5 eq/L just reach 40 °C; above the limit a warning, near boiling a stop."""
    def row(dose, **more):
        case = treated("caustic soda 25 %", t_c=20.0, start_ph=0.0, end_ph=7.0, dose_eq_l=dose)
        return heat_effects(case, **more)[-1]
    assert_allclose(row(1.5).value, 40.0, atol=0.1)
    assert [row(d).severity for d in (1.4, 1.6, 5.5)] == ["note", "warning", "stop"]
    assert row(1.4, outlet_limit_c=35.0).severity == "warning"
    assert "guard hot surfaces" in row(3.5).words
    assert "guard" not in row(1.6).words


def test_reagent_of_the_users_own_has_no_dilution_heat():
    """Its formula is not in the table."""
    own = own_product("own base", formula="KOH", ions={"potassium": 1.0}, strength=0.4, density_kg_l=1.4)
    assert heat_kj_l(treated(product=own, start_ph=2.0, strength=0.4))[1:] == (0.0, False)

"""Plan files: what a plan becomes in house units, with its assumptions and notes."""

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.plant.faults import Guards
from aquabuf.assess.plant.plan_file import SECTIONS, read_plan
from aquabuf.assess.plant.storage import feed_rules
from aquabuf.assess.plant.stream import stream_of
from aquabuf.chem.products import find_product, products
from aquabuf.readings.schema import quantities

HEAD = '[plan]\nname = "Upper Mill"\n[flow]\nnow = "9.6 ML/d"\n'
WATER = '[water]\n"alkalinity (mg/L as CaCO3)" = 50.0\nph = 7.68\ntemperature_c = 11.2\n'
LIME = '[products.lime]\nis = "hydrated lime"\nstrength = "92 %"\n'
CO2 = '[products.co2]\nis = "carbon dioxide"\nstrength = "100 %"\n'
ALUM = '[products.alum]\nis = "liquid alum as 14.3-water"\nstrength = "48.2 %"\n'
ADJUST = '[[steps]]\ndo = "adjust"\nproducts = ["lime", "co2"]\ntarget = { ph = 8.4, alkalinity = "45 mg/L as CaCO3" }\n'
SEASON = "sample_id,date,temperature_c,ph,alkalinity_mg_l_caco3,alkalinity_u_mg_l_caco3,calcium_mg_l\n" \
    "R14-05,2026-03-12,10.0,7.5,40,2,16\nR14-06,2026-03-13,11.0,7.6,50,1,18\nR14-07,2026-03-14,12.0,99,60,1,20\n"
CACO3_PER_EQ = 50043.2  # mg, half of 100.086 g


@pytest.fixture
def plan_of(tmp_path):
    """The plan of a text; a table of readings lies beside it."""
    (tmp_path / "year.csv").write_text(SEASON, encoding="utf-8")

    def read(text):
        path = tmp_path / "plan.toml"
        path.write_text(text, encoding="utf-8")
        return read_plan(path)
    return read


def with_products(*parts, steps=ADJUST):
    """A whole plan with these products beside lime and carbon dioxide."""
    return HEAD + WATER + LIME + CO2 + "".join(parts) + steps


def first_step(plan):
    """Values of the first step."""
    return plan.steps[0].values


# ---------------------------------------------------------------- head, flow, water


def test_a_plain_plan(plan_of):
    """Flow in m3/d, raw water in house units, products by name, steps with their lines."""
    plan = plan_of(with_products())
    assert (plan.name, plan.use, plan.file, list(plan.store), plan.sources, plan.hold, plan.drift) == (
        "Upper Mill", "drinking water", "plan.toml", ["lime", "co2"], {}, None, None)
    assert (plan.flow.now_m3_d, plan.flow.least_m3_d) == (9600.0, None)
    assert {n: v.shape for n, v in plan.raw.values.items()} == dict.fromkeys(("alkalinity_eq_l", "ph", "temperature_c"), (1,))
    assert_allclose(plan.raw.values["alkalinity_eq_l"], 50.0 / CACO3_PER_EQ, rtol=1e-5)
    assert (plan.steps[0].kind, plan.steps[0].name) == ("adjust", "adjust")
    assert with_products().splitlines()[plan.steps[0].line - 1] == "[[steps]]"
    assert set(SECTIONS) > {"plan", "flow", "water", "products", "steps"}


def test_head_and_flows(plan_of):
    """Words are kept; any unit of flow."""
    text = with_products().replace('now = "9.6 ML/d"', 'now = "400 m3/h"\nleast = "1 MGD"\nmost = "200 L/s"')
    plan = plan_of(text.replace("[flow]", 'currency = "EUR"\ndate = 2026-03-14\nnote = "after snowmelt"\nuse = "laboratory"\n[flow]'.replace('use = "laboratory"\n', "")))
    assert (plan.currency, plan.date, plan.note) == ("EUR", "2026-03-14", "after snowmelt")
    assert_allclose([plan.flow.now_m3_d, plan.flow.least_m3_d, plan.flow.most_m3_d], [9600.0, 3785.411784, 17280.0])


def test_water_in_texts_with_units_and_uncertainties(plan_of):
    """Own standard uncertainty, else the default of the column table."""
    plan = plan_of(with_products().replace("ph = 7.68", 'ph = 7.68\nph_u = 0.02\ncalcium = "40.078 mg/L"\ncalcium_u = "4.0078 mg/L"'))
    assert_allclose([plan.raw.values["calcium_mol_l"][0], plan.raw.u["calcium_mol_l"][0]], [1e-3, 1e-4], rtol=1e-9)
    assert (plan.raw.u["ph"][0], plan.raw.words) == (0.02, "given in the plan")
    q = quantities()["alkalinity_eq_l"]
    assert_allclose(plan.raw.u["alkalinity_eq_l"], q.default_u + q.default_u_rel * plan.raw.values["alkalinity_eq_l"])
    assert "ph_u" not in plan.raw.values
    assert np.isfinite(stream_of(plan.raw.values)[0].water().ph).all()


def test_water_from_a_row(plan_of):
    """A named row, or the last one that can be used: the row with pH 99 cannot."""
    rows = {}
    for line in ('sample = "R14-05"\n', ""):
        plan = plan_of(with_products().replace(WATER, f'[water]\nreadings = "year.csv"\n{line}'))
        rows[line] = plan.raw
    first, last = rows.values()
    assert (first.words, last.words) == ("sample R14-05 of year.csv, row 2, 2026-03-12", "sample R14-06 of year.csv, row 3, 2026-03-13")
    assert_allclose([first.values["temperature_c"][0], last.values["temperature_c"][0]], [10.0, 11.0])
    assert_allclose(first.u["alkalinity_eq_l"], 2.0 / CACO3_PER_EQ, rtol=1e-5)
    assert_allclose(last.values["calcium_mol_l"], 18.0 / 40078.0, rtol=1e-9)


def test_keys_replace_those_of_the_row(plan_of):
    """With their uncertainty; what is not named stays; an uncertainty alone may go with a value of the row."""
    row = '[water]\nreadings = "year.csv"\nsample = "R14-05"\nalkalinity = "1 meq/L"\n"calcium_u (mg/L)" = 0.40078\n'
    plan = plan_of(with_products().replace(WATER, row))
    assert_allclose(plan.raw.values["alkalinity_eq_l"], 1e-3)
    q = quantities()["alkalinity_eq_l"]
    assert_allclose(plan.raw.u["alkalinity_eq_l"], q.default_u + q.default_u_rel * 1e-3)
    assert_allclose([plan.raw.values["ph"][0], plan.raw.u["calcium_mol_l"][0]], [7.5, 1e-5])
    assert plan.raw.words == "sample R14-05 of year.csv, row 2, 2026-03-12; given in the plan: alkalinity"


def test_readings_with_a_map(plan_of, tmp_path):
    """Someone else's headers."""
    (tmp_path / "theirs.csv").write_text("id;T;pH;Alk\na;9;7.1;0.8\n", encoding="utf-8")
    (tmp_path / "map.toml").write_text('[columns]\nid = "sample_id"\nT = "temperature_c"\nAlk = "alkalinity (meq/L)"\n', encoding="utf-8")
    plan = plan_of(with_products().replace(WATER, '[water]\nreadings = "theirs.csv"\nmap = "map.toml"\n'))
    assert_allclose([plan.raw.values[n][0] for n in ("temperature_c", "ph", "alkalinity_eq_l")], [9.0, 7.1, 8e-4])


# ---------------------------------------------------------------- products


def test_certificate_strength_and_its_basis(plan_of):
    """Fractions of the formula; 8.3 % Al2O3 of liquid alum is 8.3/17.0 alum of 14.3 waters (101.961/599.75)."""
    plan = plan_of(with_products('[products.alum]\nis = "liquid alum as 14.3-water"\nstrength = "8.3 %"\nstrength_as = "Al2O3"\n'))
    assert (plan.store["lime"].strength, plan.store["lime"].strength_from) == (0.92, "certificate")
    assert_allclose(plan.store["alum"].strength, 0.083 * 599.75 / 101.961, rtol=1e-4)


def test_polyaluminum_chloride_counts_al2o3(plan_of):
    """Its certificates do; 17 % Al2O3 is 9.0 % Al, and 3 (1 - 0.7) eq go per mole of it."""
    plan = plan_of(with_products('[products.pacl]\nis = "polyaluminum chloride"\nstrength = "17 %"\nbasicity = "70 %"\ndensity = "1.37 kg/L"\n'))
    pacl = plan.store["pacl"]
    assert_allclose(pacl.strength, 0.17 * 2 * 26.982 / 101.961, rtol=1e-4)
    assert_allclose(pacl.product.adds["alkalinity"], -0.9)
    assert any("its strength counts Al2O3" in a for a in plan.assumptions)


def test_usual_strength_is_an_assumption(plan_of):
    """Quicklime has one with a source; its density goes with it."""
    plan = plan_of(with_products('[products.quick]\nis = "quicklime"\n'))
    quick = find_product("quicklime")
    assert (plan.store["quick"].strength, plan.store["quick"].density_kg_l) == (quick.strength, quick.density_kg_l)
    said = [a for a in plan.assumptions if a.startswith("[products.quick]")]
    assert any("strength 87 % CaO, the usual one of quicklime (printed: " in a and "no certificate strength" in a for a in said)
    assert "[products.quick]: density 0.85 kg/L, that of the products table" in said


def test_strength_by_density_and_density_by_strength(plan_of):
    """Liquid alum, specific gravity 1.3303: 48.2 % dry alum (a supplier's table, printed), within 0.002."""
    plan = plan_of(with_products('[products.alum]\nis = "liquid alum as 14.3-water"\ndensity = "1.329 kg/L"\n'))
    alum = plan.store["alum"]
    assert_allclose(alum.strength, 0.4818, atol=0.003)
    assert (alum.strength_from, alum.density_kg_l) == ("density", 1.329)
    assert any("by its density of 1.329 kg/L" in a for a in plan.assumptions)
    back = plan_of(with_products('[products.alum]\nis = "liquid alum as 14.3-water"\nstrength = "48.18 %"\n'))
    assert_allclose(back.store["alum"].density_kg_l, 1.329, atol=0.004)
    assert any("as belongs to its strength" in a for a in back.assumptions)


def test_a_density_of_another_strength_is_not_taken(plan_of):
    """40 % caustic has not the density of 50 %: it is unknown where no table has it."""
    plan = plan_of(with_products('[products.potash]\nis = "caustic potash"\nstrength = "20 %"\n'))
    assert plan.store["potash"].density_kg_l is None
    kept = plan_of(with_products('[products.potash]\nis = "caustic potash"\nstrength = "45 %"\n'))
    assert kept.store["potash"].density_kg_l == products()["caustic potash"].density_kg_l


def test_notes_on_strength(plan_of):
    """Density that does not belong to it, and strengths that are not sold."""
    plan = plan_of(with_products('[products.alum]\nis = "liquid alum as 14.3-water"\nstrength = "48.2 %"\ndensity = "1.20 kg/L"\n'))
    assert len(plan.notes) == 1
    assert plan.notes[0].startswith("[products.alum]: strength and density of 'liquid alum as 14.3-water' disagree: 48.2 %")
    low = plan_of(with_products().replace('"92 %"', '"40 %"'))
    assert low.notes == ("[products.lime]: a strength of 40 % Ca(OH)2 is outside the 82 to 99 % that hydrated lime is sold with; "
                         "check the certificate and what its figure counts",)
    assert plan_of(with_products()).notes == ()


def test_own_product(plan_of):
    """By formula and what it adds; alkalinity follows from the charge of magnesium."""
    plan = plan_of(with_products('[products.mine]\nis = "own"\nformula = "Mg(OH)2"\nadds = { magnesium = 1 }\nstrength = "60 %"\nform = "slurry"\ngroups = ["base"]\n'
                                 '[products.other]\nis = "own"\nmolar_mass = 100\nadds = { alkalinity = 2, carbon = 1 }\nsolids = { "SiO2" = 0.5 }\nstrength = "50 %"\n'))
    mine, other = plan.store["mine"].product, plan.store["other"].product
    assert (mine.adds["alkalinity"], mine.form, mine.groups) == (2.0, "slurry", ("base",))
    assert [plan.store[n].strength for n in ("mine", "other")] == [0.6, 0.5]
    assert (other.molar_mass_g, other.adds["carbon"], other.solids["SiO2"]) == (100.0, 1.0, 0.5)
    assert '[products.other]: form = "liquid", as the plan does not say' in plan.assumptions


def test_price_feed_and_store(plan_of):
    """Pump with its curve, slurry, tanks; volumes in store become mass by density."""
    plan = plan_of(with_products(
        '[products.caustic]\nis = "caustic soda 50 %"\nstrength = "50 %"\ndensity = "1.525 kg/L"\nprice = "400 per t"\n'
        'pump = { name = "P 1", largest = "20 L/h", stroke = "60 %", curve = [[20, 3.9], [40, 8.1]] }\n'
        'day_tank = "250 L"\nstore = "5 m3"\nstock = "2 t"\ndelivery = "1000 kg"\nshipping = "7 d"\nsupply = "interruptible"\n'
        '[products.soda]\nis = "soda ash"\nfeeder = { largest = "360 kg/d", turndown = 10, range = ["10 %", "90 %"] }\nslurry = "10 %"\nslurry_density = "1.1 kg/L"\n'))
    assert_allclose(plan.store["caustic"].price_per_kg, 0.4)
    feed, soda = plan.feeds["caustic"], plan.feeds["soda"]
    assert (feed.pump.name, feed.pump.largest_l_h, feed.pump.stroke, feed.pump.curve.rate) == ("P 1", 20.0, 0.6, (3.9, 8.1))
    assert_allclose([feed.day_tank_l, feed.store_kg, feed.stock_kg, feed.delivery_kg, feed.shipping_d], [250.0, 7625.0, 2000.0, 1000.0, 7.0])
    assert (feed.supply, feed.feeder, feed.made_up) == ("interruptible", None, None)
    assert_allclose([soda.feeder.largest_kg_h, *soda.feeder.range_pct, soda.made_up.fraction, soda.made_up.density_kg_l], [15.0, 10.0, 90.0, 0.1, 1.1])
    assert plan.feeds["lime"].pump is None
    said = [a for a in plan.assumptions if "supply" in a or "pump" in a]
    assert said == ['[products.caustic] pump: sets = "speed", as the plan does not say', '[products.caustic] pump: curve_unit = "L/h", as the plan does not say']


# ---------------------------------------------------------------- steps


@pytest.mark.parametrize(("dose", "expected"), [
    ('"59.97465 mg/L"', 1e-4), ('"59.97465 mg/L"\ndose_as = "pure"', 1e-4), ('"59.97465 mg/L"\ndose_as = "product"', 0.482e-4), ('"59.97465 mg/L as product"', 0.482e-4),
    ('"5.3963 mg/L as Al"', 1e-4), ('"5.3963 mg/L"\ndose_as = "Al"', 1e-4), ('"10.1961 mg/L as Al2O3"', 1e-4), ('"66.6408 mg/L as Al2(SO4)3.18H2O"', 1e-4),
    ('"0.1 mmol/L"', 1e-4), ('"59974.65 µg/L as pure"', 1e-4)])
def test_doses_count_what_they_say(plan_of, dose, expected):
    """Alum of 599.7465 g/mol holds two aluminum of 26.9815 g; Al2O3 is 101.961 g, the 18-hydrate 666.41 g (IUPAC masses)."""
    plan = plan_of(with_products(ALUM, steps=f'[[steps]]\ndo = "coagulate"\nproduct = "alum"\ndose = {dose}\n'))
    assert_allclose(first_step(plan)["dose"], expected, rtol=2e-4)
    assumed = [a for a in plan.assumptions if "its dose counts" in a]
    assert assumed == (["[[steps]] 1 (coagulate): its dose counts pure Al2(SO4)3.14.3H2O, as the plan does not say"] if dose == '"59.97465 mg/L"' else [])


def test_chlorine_counts_as_cl2(plan_of):
    """One hypochlorite is worth one Cl2, 70.90 g; caustic by mass."""
    hypo = '[products.hypo]\nis = "sodium hypochlorite"\nstrength = "12 %"\nstrength_as = "available chlorine"\ndensity = "1.2 kg/L"\n'
    plan = plan_of(with_products(hypo, steps='[[steps]]\ndo = "chlorinate"\nproduct = "hypo"\ndose = "3.545 mg/L"\ndemand = "0.709 mg/L"\nexcess_caustic = "0.5 %"\n'))
    assert_allclose([first_step(plan)[k] for k in ("dose", "demand", "excess_caustic")], [5e-5, 1e-5, 0.005], rtol=2e-4)
    assert_allclose(plan.store["hypo"].strength, 0.12 * 74.44 / 70.90, rtol=1e-4)
    assert "[[steps]] 1 (chlorinate): its dose counts Cl2, as the plan does not say" in plan.assumptions


def test_targets(plan_of):
    """A value, a window, one limit; in house units, signed where a quantity is."""
    steps = ADJUST.replace('{ ph = 8.4, alkalinity = "45 mg/L as CaCO3" }',
                           '{ ph = [8.2, 8.6], alkalinity = "at least 50.0432 mg/L as CaCO3", ccpp = ["-4 mg/L as CaCO3", "10.0086 mg/L as CaCO3"], '
                           'si_calcite = "at most 0.5", calcium = "40.078 mg/L", buffer_intensity = "0.5 meq/L per pH", hardness = "1 mmol/L" }')
    found = {t.quantity.name: (t.low, t.high) for t in first_step(plan_of(with_products(steps=steps)))["target"]}
    expected = {"ph": (8.2, 8.6), "alkalinity": (1e-3, math.inf), "ccpp": (-4e-3 / 100.086, 1e-4), "si_calcite": (-math.inf, 0.5),
                "calcium": (1e-3, 1e-3), "buffer_intensity": (5e-4, 5e-4), "hardness": (1e-3, 1e-3)}
    assert list(found) == list(expected)
    assert_allclose(list(found.values()), list(expected.values()), rtol=1e-5)
    assert [p.name for p in first_step(plan_of(with_products(steps=steps)))["products"]] == ["lime", "co2"]


@pytest.mark.parametrize(("step", "expected"), [
    ('do = "nitrify"', {"oxidize": "all"}), ('do = "denitrify"\ndonor = "none"', {"remove": "all", "donor": "none"}),
    ('do = "aerate"\nefficiency = "80 %"', {"efficiency": 0.8}), ('do = "aerate"\nto_air = true', {"to_air": True}),
    ('do = "aerate"\nkla = "120 per d"\ntime = "30 min"', {"kla": 5.0, "time": 0.5}),
    ('do = "temperature"\nto = "50 °F"', {"to": 10.0}), ('do = "recarbonate"\nproduct = "co2"\nph = 8.6', {"ph": (8.6,)}),
    ('do = "contact"\nproduct = "stone"\nrate = "6 per h"\ntime = "0.5 h"', {"rate": 6.0, "time": 0.5}),
    ('do = "contact"\nproduct = "stone"\nco2 = "co2"\nco2_dose = "4.4009 mg/L"', {"co2_dose": 1e-4}),
    ('do = "soften"\nmethod = "split"\nlime = "lime"\nmagnesium = "24.305 mg/L"\nexcess = "1.25 meq/L"', {"method": "split", "magnesium": 1e-3, "excess": 1.25e-3, "noncarbonate_left": 0.0}),
    ('do = "remineralize"\nmineral = "stone"\nco2 = "co2"\ncalcium = "40.078 mg/L"', {"calcium": 1e-3}),
    ('do = "fluoridate"\nproduct = "lime"\nfluoride = "0.7 mg/L"', {"fluoride": 0.7 / 18998.4}), ('do = "dose"\nproduct = "co2"\ndose = "44.009 mg/L"', {"dose": 1e-3})])
def test_every_kind_of_step(plan_of, step, expected):
    """Values in the unit of the list of keys."""
    plan = plan_of(with_products('[products.stone]\nis = "limestone"\nstrength = "98 %"\n', steps=f'[[steps]]\n{step}\nname = "mine"\n'))
    assert plan.steps[0].name == "mine"
    for key, value in expected.items():
        found = first_step(plan)[key]
        if isinstance(value, str | bool | tuple):
            assert found == value
        else:
            assert_allclose(found, value, rtol=1e-4)


def test_blend_of_sources(plan_of):
    """Waters of their own, shares here or there."""
    source = "[sources.{}]\nph = 7.2\nalkalinity = \"5 meq/L\"\ntemperature_c = 9\n{}\n"
    blend = '[[steps]]\ndo = "blend"\nwith = ["well", "permeate"]\n'
    plan = plan_of(HEAD + WATER + source.format("well", 'share = "30 %"') + source.format("permeate", "share = 0.2") + blend)
    assert [(s.name, s.share, s.water.values["ph"][0]) for s in plan.sources.values()] == [("well", 0.3, 7.2), ("permeate", 0.2, 7.2)]
    assert first_step(plan)["with"] == ("well", "permeate")
    other = plan_of(HEAD + WATER + source.format("well", 'flow = "1 ML/d"') + source.format("permeate", "") + blend + 'shares = ["40 %", 0.1]\n')
    assert (first_step(other)["shares"], other.sources["well"].flow_m3_d) == ((0.4, 0.1), 1000.0)


# ---------------------------------------------------------------- the rest


def test_guards_and_their_defaults(plan_of):
    """Those of the shipped table, told as assumptions; or the plan's."""
    plan = plan_of(with_products())
    assert plan.guards == Guards()
    assert "[guards]: ph = [6, 9.5], as the plan does not say" in plan.assumptions
    own = plan_of(with_products(steps="[guards]\nph = [6.5, 9]\nover_dose = 1.3\nover_ph = 9.8\n" + ADJUST))
    assert (own.guards.ph_low, own.guards.ph_high, own.guards.over_dose, own.guards.over_ph) == (6.5, 9.0, 1.3, 9.8)
    assert not [a for a in own.assumptions if "guards" in a]


def test_hold(plan_of):
    """A fault of acid counts plus, of base minus; the window is that of the guards where none is given."""
    hold = '[hold]\nph = 8.4\nintensity = "0.5 meq/L per pH"\n'
    bare = plan_of(with_products(steps=hold + ADJUST))
    assert (bare.hold.use, bare.hold.window, bare.hold.fault_eq_l, bare.hold.basin_m3) == ("drinking water", (6.0, 9.5), None, None)
    assert_allclose(bare.hold.intensity_eq_l, 5e-4)
    assert [a for a in bare.assumptions if a.startswith("[hold]")] == ["[hold]: window = [6, 9.5], that of [guards], as the plan does not say",
                                                                      '[hold]: use = "drinking water", that of [plan], as the plan does not say']
    full = plan_of(with_products(steps=hold + 'use = "drinking water"\nwindow = [8, 8.8]\nbasin = "50 m3"\nfault = "0.5 meq/L"\nfault_of = "base"\n' + ADJUST))
    assert (full.hold.window, full.hold.basin_m3) == ((8.0, 8.8), 50.0)
    assert_allclose(full.hold.fault_eq_l, -5e-4)
    assert plan_of(with_products(steps=hold + 'fault = "0.5 meq/L"\n' + ADJUST)).hold.fault_eq_l > 0.0


def test_drift(plan_of, tmp_path):
    """Errors are spreads: 9 °F are 5 °C; the feed error is that of the rule on feeds."""
    plan = plan_of(with_products(steps='[drift]\nreadings = "year.csv"\nerrors = { ph = 0.1, alkalinity = "2 mg/L as CaCO3", temperature = "9 °F" }\n' + ADJUST))
    assert plan.drift.readings == tmp_path / "year.csv"
    assert_allclose([plan.drift.errors[n] for n in ("ph", "alkalinity_eq_l", "temperature_c")], [0.1, 2 / CACO3_PER_EQ, 5.0], rtol=1e-5)
    assert (plan.drift.feed_error, plan.drift.draws, plan.drift.seed) == (feed_rules()["feed accuracy"].limit / 100.0, 1000, 1)
    own = plan_of(with_products(steps='[drift]\nfeed_error = "3 %"\ndraws = 200\nseed = 7\n' + ADJUST)).drift
    assert (own.readings, own.mapping, own.errors, own.feed_error, own.draws, own.seed) == (None, None, {}, 0.03, 200, 7)


def test_limits_are_kept_as_they_stand(plan_of):
    """They are checked by those who judge."""
    plan = plan_of(with_products(steps='[limits."my pH"]\nquantity = "ph"\noperator = "<"\nlimit = 7.5\n' + ADJUST))
    assert plan.limits == {"my pH": {"quantity": "ph", "operator": "<", "limit": 7.5}}


def test_a_byte_order_mark_and_windows_lines(tmp_path):
    """As editors write them; lines stay the same."""
    path = tmp_path / "plan.toml"
    path.write_bytes(("\ufeff" + with_products()).replace("\n", "\r\n").encode())
    assert read_plan(path).steps[0].line == with_products().splitlines().index("[[steps]]") + 1

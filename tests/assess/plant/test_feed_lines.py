"""From doses to rates, settings, tanks, stock and cost, against worked examples of handbooks (facts file, section 4)."""

import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parents[2]))

from invented_plans import FIXED, IMPOSSIBLE, RIVER, TWO_STAGES, UPLAND, write_plan

from aquabuf.assess.plant.answer import solve_plan
from aquabuf.assess.plant.answer_json import answer_record
from aquabuf.assess.plant.feed_lines import feed_of, largest_mol_l
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.errors import InputError

HEAD = '[plan]\nname = "x"\n[flow]\nnow = "{flow}"\n[water]\ntemperature_c = 15\nph = 7.5\nalkalinity = "300 mg/L as CaCO3"\n'
STEP = '[[steps]]\ndo = "dose"\nname = "feed"\nproduct = "p"\ndose = "{dose}"\n'
KEPT = 'store = "12000 kg"\nstock = "{stock}"\ndelivery = "{load}"\nshipping = "{shipping}"\nsupply = "{supply}"\n'
LB_PER_KG, GAL_PER_L = 1.0 / 0.45359237, 1.0 / 3.785411784  # exact


@pytest.fixture
def solve(tmp_path):
    """Solve the text of a plan without draws."""
    def go(text):
        return solve_plan(read_plan(write_plan(tmp_path, text=text)), draws=0)
    return go


@pytest.fixture
def fed(solve):
    """The answer to one fixed dose of a product."""
    def go(dose, product, flow="10 ML/d"):
        return solve(HEAD.format(flow=flow) + f"[products.p]\n{product}\n" + STEP.format(dose=dose))
    return go


# ---------------------------------------------------------------- rates and settings


def test_lime_slurry(fed):
    """25 mg/L Ca(OH)2 in 10 ML/d at 92 % are 271.7 kg/d; as a 10 % slurry of 1.06 kg/L, 106.8 L/h (computed in the facts)."""
    (line,) = fed("25 mg/L", 'is = "hydrated lime"\nstrength = "92 %"\nslurry = "10 %"\nslurry_density = "1.06 kg/L"').feeds
    assert_allclose(line.rate.product_kg_d, 271.7, rtol=0, atol=0.05)
    assert_allclose(line.rate.l_h, 106.8, rtol=0, atol=0.05)
    assert_allclose([line.mg_l_pure, line.mg_l_product], [25.0, 25.0 / 0.92], rtol=1e-6)
    assert_allclose(line.meq_l, 25.0 / 74.092 * 2.0, rtol=1e-5)


@pytest.mark.parametrize(("strength", "density", "l_h", "atol"), [("50 %", "1.525 kg/L", 8.20, 0.005), ("25 %", "1.274 kg/L", 19.6, 0.05)])
def test_caustic(fed, strength, density, l_h, atol):
    """15 mg/L NaOH in 10 ML/d (computed in the facts); the setting is the share of a pump of 20 L/h, 41 % for the stronger."""
    (line,) = fed("15 mg/L", f'is = "caustic soda"\nstrength = "{strength}"\ndensity = "{density}"\npump = {{ largest = "20 L/h" }}').feeds
    assert_allclose(line.rate.l_h, l_h, rtol=0, atol=atol)
    assert_allclose(line.setting.setting_pct, 100.0 * l_h / 20.0, rtol=0, atol=5 * atol)
    assert line.setting_words().startswith("pump 'p': set ")
    assert not line.out_of_reach


@pytest.mark.parametrize(("tank", "hours", "kept"), [("240 L", 29.3, [True, True, True]), ("400 L", 48.8, [True, True, False]),
                                                     ("150 L", 18.3, [False, True, True]), ("4500 L", 549.0, [True, False, False])])
def test_day_tank(fed, tank, hours, kept):
    """8.20 L/h: 246 L would last 30 h; a day at least, 30 h at most, and 5 % of the tank a day (facts, 1.4)."""
    (line,) = fed("15 mg/L", f'is = "caustic soda"\nstrength = "50 %"\ndensity = "1.525 kg/L"\nday_tank = "{tank}"').feeds
    assert_allclose(line.tank[0].value, hours, rtol=2e-3)
    assert [bool(v.met[0]) for v in line.tank] == kept


def test_dry_alum_of_a_handbook(fed):
    """18 mg/L of alum in 15 MGD: 2,252 lb/d and 93.8 lb/h with 8.34, 2,253.3 with the exact factor (facts, check 2)."""
    answer = fed("18 mg/L", 'is = "alum 14-water"\nstrength = "100 %"\nfeeder = { largest = "60 kg/h" }', flow="15 MGD")
    feed = answer_record(answer)["doses"][0]["feed"]
    assert_allclose([feed["product_lb_d"], feed["product_lb_h"]], [2253.3, 2253.3 / 24.0], rtol=1e-4)
    assert_allclose(feed["setting_percent"], 100.0 * 2253.3 / 24.0 / LB_PER_KG / 60.0, rtol=1e-4)
    assert (feed["l_h"], feed["moved"]) == (None, "")


def test_liquid_ferric_chloride(fed):
    """4,750 kg/d of a liquid of 1.440 kg/L are 0.14 m3/h, 0.1374 (Davis 5-17)."""
    (line,) = fed("190 mg/L", 'is = "ferric chloride"\nstrength = "40 %"\ndensity = "1.44 kg/L"').feeds
    assert_allclose(line.rate.product_kg_d, 4750.0, rtol=1e-6)
    assert_allclose(line.rate.l_h, 137.4, rtol=0, atol=0.05)
    assert_allclose(line.rate.in_us()["gal_h"], line.rate.l_h * GAL_PER_L, rtol=1e-12)


def test_other_flows(solve):
    """Rates go with the flow at the same dose; a setting out of reach says so."""
    (line,) = solve(FIXED.replace('now = "10 ML/d"', 'now = "10 ML/d"\nleast = "5 ML/d"\nmost = "40 ML/d"')).feeds
    assert [name for name, _, _ in line.at_flows] == ["least flow", "largest flow"]
    assert_allclose([rate.l_h[0] for _, rate, _ in line.at_flows], [0.5 * line.rate.l_h[0], 4.0 * line.rate.l_h[0]], rtol=1e-12)
    assert [setting.status[0] for _, _, setting in line.at_flows] == ["set", "too large"]


def test_measured_curve_of_a_pump(solve):
    """Straight between its points: 8.20 L/h on a curve from 5 L/h at 20 % to 10 L/h at 40 % is 32.8 %."""
    (line,) = solve(FIXED.replace('{ largest = "20 L/h" }', '{ largest = "20 L/h", curve = [[20, 5], [40, 10], [80, 18]] }')).feeds
    assert_allclose(line.setting.setting_pct, 20.0 + 20.0 * (8.197 - 5.0) / 5.0, rtol=1e-4)


def test_a_machine_out_of_reach(solve):
    """Told as a warning of the plan, with what would do."""
    answer = solve(RIVER)
    alum = answer.feeds[0]
    assert alum.out_of_reach
    assert "it gives no more than 120 L/h" in alum.setting_words()
    assert f"alum: {alum.setting_words()}" in answer_record(answer)["warnings"]


def test_dry_product_with_a_pump_needs_something_to_move(fed):
    """The slurry is asked for, not guessed."""
    (line,) = fed("25 mg/L", 'is = "hydrated lime"\nstrength = "92 %"\npump = { largest = "200 L/h" }').feeds
    assert line.setting is None
    assert line.setting_words() == "its pump needs something to move: give [products.p] its slurry or solution"


def test_largest_dose_of_a_feeder(solve):
    """15 kg/h of 99.9 % in 10 ML/d; without a machine there is none."""
    gas = solve(UPLAND).feeds[1]
    assert_allclose(largest_mol_l(gas, 10_000.0) * 44.009e3, 15.0 * 24.0 * 0.999 / 10.0, rtol=1e-5)
    bare = solve(FIXED.replace('pump = { largest = "20 L/h" }\n', "")).feeds[0]
    assert largest_mol_l(bare, 10_000.0) is None


def test_rates_of_many_doses(solve):
    """A row for each; an unknown dose has no rate and no setting, and leaves the others alone."""
    answer = solve(FIXED)
    rate, setting = feed_of(answer.plan, answer.feeds[0].product, np.array([0.0, np.nan, 15e-3 / 39.997]))
    assert_allclose(rate.product_kg_d, [0.0, np.nan, 300.0], rtol=1e-4)
    assert list(setting.status) == ["off", "unknown", "set"]


@pytest.mark.parametrize(("product", "message"), [
    ('is = "sodium hypochlorite"\nstrength = "12 %"', r"a liquid product needs its density \[kg/L\] .* found none\. Take it from"),
    ('is = "own"\nformula = "NaOH"\nadds = { alkalinity = 1 }\nstrength = "20 %"\nform = "slurry"', r"a slurry product needs its density"),
    ('is = "caustic soda"\nstrength = "50 %"\ndensity = "0.3 kg/L"', r"density \[kg/L\] must be above 0\.5 and at most 3; found 0\.3"),
    ('is = "carbon dioxide"\nstrength = "99 %"\nslurry = "10 %"\nslurry_density = "1 kg/L"', r"no gas where a mixture is made up; found 'gas'"),
], ids=["liquid", "slurry", "too light", "gas"])
def test_what_cannot_become_a_rate(fed, product, message):
    """Told with the file and the product that it is about."""
    with pytest.raises(InputError, match=rf"^plan\.toml, \[products\.p\]: .*{message}"):
        fed("3 mg/L", product)


# ---------------------------------------------------------------- store and cost


@pytest.fixture
def store(solve):
    """The line of the store of 300 kg/d of product: 15 mg/L of pure in 10 ML/d at 50 %."""
    def go(*, stock="4000 kg", load="5000 kg", shipping="7 d", supply="critical", dose="15 mg/L"):
        kept = KEPT.format(stock=stock, load=load, shipping=shipping, supply=supply)
        (line,) = solve(FIXED.replace("day_tank", f"{kept}day_tank").replace('dose = "15 mg/L"', f'dose = "{dose}"')).store
        return line
    return go


def test_use_and_stock(store):
    """A month of 365.25/12 days; 4,000 kg last 13.3 days; two shipping times left is when to order."""
    line = store(shipping="3 d")
    assert_allclose([line.kg_d, line.kg_month, line.stock_days], [300.0, 300.0 * 365.25 / 12.0, 4000.0 / 300.0], rtol=1e-4)
    assert_allclose([line.order.at_kg[0], line.order.days[0]], [2 * 3 * 300.0, 4000.0 / 300.0 - 6.0], rtol=1e-4)


def test_silo_of_a_handbook(solve):
    """200 mg/L CaO in 0.18 m3/s at 87 %, 10 days + 1.5 x 7 days: 3,575 kg/d and 73,290 kg (Davis 5-1, facts W4)."""
    product = ('[products.p]\nis = "quicklime"\nstrength = "87 %"\nstock = "90000 kg"\nstore = "70000 kg"\nshipping = "7 d"\n'
               'supply = "interruptible"\nfeeder = { largest = "200 kg/h" }\n')
    (line,) = solve(HEAD.format(flow="0.18 m3/s") + product + STEP.format(dose="200 mg/L")).store
    assert_allclose(line.kg_d, 3575.2, rtol=1e-4)
    assert line.silo_words == "a store of 73,291 kg (20.5 d) is asked for; it holds 70,000 kg: too small"


@pytest.mark.parametrize(("supply", "load", "days"), [("critical", "5000 kg", 30 + 2 * 7), ("interruptible", "4000 kg", 10 + 1.5 * 7),
                                                      ("critical", "10000 kg", 50)])
def test_store_that_is_asked_for(store, supply, load, days):
    """30 d + 2 shipping times, 10 d + 1.5, and 1.5 truck loads at least (Davis, table 5-1)."""
    assert f"a store of {300 * days:,.0f} kg ({days:.3g} d) is asked for" in store(supply=supply, load=load).silo_words


@pytest.mark.parametrize(("options", "words"), [
    ({}, "a load of 5,000 kg fits and lasts 16.7 d"),  # 4000 - 7 x 300 leave room for 10,100
    ({"stock": "11000 kg"}, "a load of 5,000 kg does not fit yet: wait 13.3 d"),  # 4000 kg too many / 300
    ({"load": "15000 kg"}, "a load of 15,000 kg is more than the store holds, 12,000 kg"),
    ({"dose": "0 mg/L"}, "a load of 5,000 kg fits"),
    ({"dose": "0 mg/L", "stock": "11000 kg"}, "a load of 5,000 kg does not fit, and nothing is used"),
])
def test_whether_a_load_fits(store, options, words):
    """By what is left when it comes; no figure that is none."""
    assert store(**options).delivery_words == words


def test_a_bulk_density_decides_no_mass(solve):
    """However fluffy a powder is, its store is asked for by mass."""
    (lime, _) = solve(UPLAND.replace('strength = "92 %"', 'strength = "92 %"\ndensity = "0.04 kg/L"')).store
    assert "(44 d) is asked for; it holds 12,000 kg" in lime.silo_words


def test_cost(solve):
    """300 kg/d at 0.5: 150 a day, 15 per 1000 m3 in 10 ML/d, 56.8 per million gallons."""
    (line,) = solve(FIXED.replace("day_tank", 'price = "0.5 per kg"\nday_tank')).store
    found = [line.cost.per_day, line.cost.per_month, line.cost.per_1000_m3, line.cost.per_million_gal]
    assert_allclose(np.ravel(found), [150.0, 150.0 * 365.25 / 12.0, 15.0, 15.0 * 3.785411784], rtol=1e-4)
    assert solve(FIXED).store[0].cost is None


def test_use_of_a_product_that_goes_in_twice(solve):
    """Both stages of gas together."""
    answer = solve(TWO_STAGES)
    assert len(answer.feeds) == 2
    (line,) = answer.store
    assert_allclose(line.kg_d, sum(f.rate.product_kg_d[0] for f in answer.feeds), rtol=1e-12)
    assert all(f.rate.product_kg_d[0] > 0.0 for f in answer.feeds)


def test_doses_not_found_have_no_use(solve):
    """Unknown, not nothing: no order, no days, no cost is told."""
    kept = KEPT.format(stock="4000 kg", load="5000 kg", shipping="7 d", supply="critical")
    record = answer_record(solve(IMPOSSIBLE.replace("day_tank", f'{kept}price = "0.5 per kg"\nday_tank')))
    (line,) = record["store"]
    assert record["feasible"] is False
    assert [line[k] for k in ("use_kg_d", "use_lb_month", "stock_days", "order_in_days", "cost_per_day")] == [None] * 5
    assert line["order_words"] == "when to order cannot be told: stock or use is unknown"
    assert (line["store_words"], line["delivery_words"]) == ("", "")

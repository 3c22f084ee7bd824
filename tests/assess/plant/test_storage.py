"""Drawdown, tanks, stock, cost and lime against printed examples, mass balances and figures worked by hand."""

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.feed import MadeUp, made_up_l_h, product_kg_d, pure_kg_d
from aquabuf.assess.plant.storage import (
    DAYS_PER_MONTH,
    SUPPLIES,
    batch,
    column_seconds,
    cost,
    day_tank,
    day_tank_sizes_l,
    delivery,
    drawdown,
    feed_rules,
    hours_of_use,
    judged,
    least_feeder_size,
    lime_feed,
    lime_solubility_g_l,
    months_use,
    order,
    packages,
    silo,
    storage_days,
)
from aquabuf.errors import InputError, InputRangeError
from aquabuf.tables import read_table

LB_KG = 0.45359237
GAL_L = 3.785411784
LIME = MadeUp(fraction=0.10, density_kg_l=1.06)

# Limits of the rules as the sources have them: name, operator, limit, unit, mark
RULES = [
    ("feed accuracy", "<=", 5, "%", "printed"), ("feeder margin", ">=", 10, "%", "printed"),
    ("day tank lasts", ">=", 24, "h", "printed"), ("day tank drop", ">=", 5, "%", "printed"),
    ("day tank limit", "<=", 30, "h", "recalled"), ("critical days", ">=", 30, "d", "printed"),
    ("critical shipping", ">=", 2, "-", "printed"), ("interruptible days", ">=", 10, "d", "printed"),
    ("interruptible shipping", ">=", 1.5, "-", "printed"), ("truck loads", ">=", 1.5, "-", "printed"),
    ("cold lime", "=", 1.85, "g/L", "recalled"), ("usual lime", "=", 1.65, "g/L", "recalled"),
    ("warm lime", "=", 1.5, "g/L", "recalled")]


def test_rules_are_those_of_the_sources():
    """Every shipped rule has its limit written here again, and a source."""
    found = [(r["name"], r["operator"], float(r["limit"]), r["unit"], r["mark"]) for r in read_table("feed_rules")]

    assert found == RULES
    assert all(r["source"] and r["words"] for r in read_table("feed_rules"))
    assert all(rule.source.endswith("(recalled)") == (mark == "recalled")
               for rule, (*_, mark) in zip(feed_rules().values(), RULES, strict=True))


@pytest.mark.parametrize(("value", "met"), [(24.0, True), (24.0 * (1 - 1e-12), True), (23.99, False), (25.0, True)])
def test_a_value_on_the_limit_keeps_the_rule(value, met):
    """Rounding must not break it."""
    assert judged("day tank lasts", value).met.item() is met


# drawdown


def test_drawdown_in_gallons():
    """100 mL in a minute is 6 L/h and 1.585 gal/h (printed factor 0.0158)."""
    check = drawdown(100.0, 60.0, 6.0)

    assert_allclose(check.l_h, 6.0, rtol=1e-12)
    assert_allclose(check.gal_h, 1.585, atol=0.0005)


def test_drawdown_against_the_accuracy_rule():
    """5 % off is kept, 5.1 % is not, either way; nothing wanted or measured is not judged."""
    check = drawdown([105.0, 105.1, 95.0, 94.9, 50.0, np.nan], 60.0, [6.0, 6.0, 6.0, 6.0, 0.0, 6.0])

    assert_allclose(check.off, [0.05, 0.051, -0.05, -0.051, np.nan, np.nan], rtol=1e-9)
    assert_array_equal(check.verdict.met, [True, False, True, False, False, False])
    assert_array_equal(check.verdict.judged, [True, True, True, True, False, False])


def test_drawdown_words():
    """Both systems, which side, the verdict, the source and the remedy."""
    check = drawdown([94.0, 102.0, 94.0], 60.0, [6.0, 6.0, 0.0])

    assert check.words(0).startswith("drawdown: 5.64 L/h (1.49 gal/h), 6.00 % below the wanted 6.00 L/h (1.59 gal/h); "
                                     "feed error: 6.00 %, broken (at most 5 %, so that the feed keeps to the wanted rate; "
                                     "New Jersey rules")
    assert check.words(0).endswith(": set the pump anew and draw down again; if it stays off look for air or grit or a worn valve")
    assert "2.00 % above the wanted" in check.words(1)
    assert "kept (at most 5 %" in check.words(1)
    assert check.words(2) == "drawdown: 5.64 L/h (1.49 gal/h); nothing to compare it with"


def test_column_time():
    """At 6 L/h 200 mL go in 120 s, and the drawdown in that time finds the rate; without a feed it never ends."""
    seconds = column_seconds(200.0, [6.0, 8.2])

    assert_allclose(seconds[0], 120.0, rtol=1e-12)
    assert_allclose(drawdown(200.0, seconds, [6.0, 8.2]).off, 0.0, atol=1e-12)
    assert_array_equal(column_seconds(200.0, [0.0, np.nan]), [np.inf, np.nan])


def test_feeder_size():
    """10 % more than the dose asks (printed, Water Treatment Plant Design): 428 for 389 lb/MG of CO2."""
    assert_allclose(least_feeder_size([389.0, 0.0]), [428.0, 0.0], atol=0.2)


# day tank


def test_day_tank_for_30_hours():
    """8.20 L/h for 30 h is 246 L (worked apart)."""
    least, most = day_tank_sizes_l(8.20)

    assert_allclose(most, 246.0, rtol=1e-12)
    assert_allclose(least, 196.8, rtol=1e-12)
    assert_allclose(hours_of_use(246.0, 8.20), 30.0, rtol=1e-12)


@pytest.mark.parametrize(("tank", "lasts", "drop", "limit"), [
    (230.0, True, True, True), (190.0, False, True, True), (250.0, True, True, False), (4000.0, True, False, False)])
def test_day_tank_rules(tank, lasts, drop, limit):
    """A feed of 8.20 L/h (197 L/d): a day needs 197 L, 30 h are 246 L, 5 % a day are 3,936 L."""
    verdicts = day_tank(tank, 8.20)

    assert [v.rule.name for v in verdicts] == ["day tank lasts", "day tank drop", "day tank limit"]
    assert [v.met.item() for v in verdicts] == [lasts, drop, limit]


def test_day_tank_figures_and_words():
    """Of 400 L at 10 L/h: 40 h, 60 % a day."""
    verdicts = day_tank(400.0, [10.0])

    assert_allclose([v.value.item() for v in verdicts], [40.0, 60.0, 40.0], rtol=1e-12)
    assert verdicts[1].words() == ("share of the tank used in a day: 60.0 %, kept (at least 5 %, so that the fall of the level "
                                   "can be read; NR 811: daily use at least 5 % of the tank)")
    assert verdicts[2].words().endswith("no more than 30 h of supply (recalled)): fill it only as far as this many hours")


def test_idle_tank_is_not_judged():
    """Nothing fed breaks no rule and keeps none; other rows stay."""
    for verdict in day_tank(240.0, [0.0, np.nan, 9.0]):
        assert_array_equal(verdict.judged, [False, False, True])
        assert_array_equal(verdict.met, [False, False, True])
        assert "not judged, nothing is fed or a value is missing" in verdict.words(0)


# batch and packages


def test_batch_adds_up():
    """1000 L of 10 % slurry at 1.06 kg/L: 1060 kg, 106 kg of product, 954 kg of water (0.99910 kg/L at 15 °C, IAPWS)."""
    recipe = batch(1000.0, LIME, t_c=15.0)

    assert_allclose(recipe.product_kg, 106.0, rtol=1e-12)
    assert_allclose(recipe.product_kg + recipe.water_kg, 1060.0, rtol=1e-12)
    assert_allclose(recipe.water_l, 954.0 / 0.99910, rtol=1e-5)
    assert recipe.words() == "106 kg (234 lb) of product and 955 L (252 gal) of water make 1,000 L (264 gal)"


def test_batch_feeds_what_the_dose_asks():
    """A batch lasts as long as its product: 106 kg at 271.7 kg/d is 9.36 h, by the volume of the slurry too."""
    product = product_kg_d(pure_kg_d(25.0, 1e4), 0.92)
    recipe = batch(1000.0, LIME)

    assert_allclose(hours_of_use(recipe.volume_l, made_up_l_h(product, LIME)), 24.0 * 106.0 / 271.739, rtol=1e-5)


def test_bags():
    """1,761 lb of hydrate in 50 lb bags is 35.2 bags (worked apart)."""
    assert_allclose(packages(1761.0 * LB_KG, 50.0 * LB_KG), 35.2, atol=0.05)


# stock


def test_silo_of_the_book():
    """3,575 kg/d, a week of shipping, 850 kg/m3, interruptible: 20.5 d, 73,287.5 kg, 86.2 m3 (printed, Davis example 5-1)."""
    store = silo(3575.0, 7.0, bulk_density_kg_m3=850.0, supply="interruptible")

    assert_allclose(store.days, 20.5, rtol=1e-12)
    assert_allclose(store.kg, 73_287.5, rtol=1e-12)
    assert_allclose(store.m3, 86.22, atol=0.005)
    assert not store.by_truck.any()


def test_silo_that_must_not_run_out():
    """30 d and twice the shipping time: 44 d of 100 kg/d; a truck of 20 t asks for 30 t."""
    store = silo([100.0, 1000.0, 0.0, np.nan], 7.0, truck_kg=20_000.0)

    assert_allclose(store.kg, [30_000.0, 44_000.0, 30_000.0, np.nan], rtol=1e-12)
    assert_allclose(store.days, [300.0, 44.0, np.inf, np.nan], rtol=1e-12)
    assert_array_equal(store.by_truck, [True, False, True, False])
    assert np.isnan(store.m3).all()


def test_storage_days():
    """What is there over what is used; a missing stock stays missing where nothing is used."""
    assert_array_equal(storage_days([100.0, 0.0, 5.0, np.nan], [20.0, 20.0, 0.0, 0.0]), [5.0, 0.0, np.inf, np.nan])


def test_order_by_hand():
    """5000 kg at 100 kg/d last 50 d; twice 7 d of shipping and 3 d of reserve are 17 d or 1700 kg: order in 33 d."""
    due = order([5000.0, 1000.0], 100.0, 7.0, reserve_d=3.0)

    assert_allclose(due.days, [33.0, 0.0], rtol=1e-12)
    assert_allclose(due.at_kg, [1700.0, 1700.0], rtol=1e-12)
    assert_allclose(5000.0 - 100.0 * due.days[0], due.at_kg[0], rtol=1e-12)
    assert due.words(0) == "order in 33.0 d, when 1,700 kg (3,748 lb) are left; the stock is gone in 50.0 d"
    assert due.words(1).startswith("order now, ")


def test_order_without_use_or_stock():
    """No use, no order; no reading, no answer."""
    due = order([10.0, np.nan], [0.0, 5.0], 7.0, supply="interruptible")

    assert due.words(0) == "nothing is used: no order is due"
    assert due.words(1) == "when to order cannot be told: stock or use is unknown"


def test_delivery_by_hand():
    """A store of 30 t with 20 t in it, 1 t/d, 5 d on the way: 15 t left and 15 t of room, so 20 t fit after 10 d."""
    load = delivery([20_000.0, 15_000.0, 40_000.0], 20_000.0, 30_000.0, 1000.0, 5.0)

    assert_allclose(load.room_kg, 15_000.0, rtol=1e-12)
    assert_array_equal(load.fits, [False, True, False])
    assert_allclose(load.wait_d, [10.0, 5.0, np.inf], rtol=1e-12)
    assert_allclose(load.lasts_d, [20.0, 15.0, 40.0], rtol=1e-12)
    assert_array_equal(load.loads.met, [True, True, False])  # 1.5 loads, 2 loads, 0.75 of one


def test_delivery_to_an_idle_or_emptied_store():
    """What runs out on the way leaves all the room; without use a full store never takes a load; missing stays so."""
    load = delivery(10_000.0, [1000.0, 25_000.0, np.nan], 30_000.0, [1000.0, 0.0, 1000.0], 5.0)

    assert_allclose(load.room_kg, [30_000.0, 5000.0, np.nan], rtol=1e-12)
    assert_array_equal(load.fits, [True, False, False])
    assert_array_equal(load.wait_d, [0.0, np.inf, np.nan])


# use and cost


def test_month():
    """A twelfth of 365.25 d."""
    assert_allclose(DAYS_PER_MONTH, 365.25 / 12.0, rtol=1e-12)
    assert_allclose(months_use([12.0, 0.0]), [365.25, 0.0], rtol=1e-12)


def test_cost_by_hand():
    """100 kg/d at 0.5 in 10,000 m3/d: 50 a day, 5 per 1000 m3; a million gallons are 3785.4 m3."""
    bill = cost([100.0, 0.0], 0.5, 1e4, "crowns")

    assert_allclose(bill.per_day, [50.0, 0.0], rtol=1e-12)
    assert_allclose(bill.per_month, [50.0 * 365.25 / 12.0, 0.0], rtol=1e-12)
    assert_allclose(bill.per_1000_m3, [5.0, 0.0], rtol=1e-12)
    assert_allclose(bill.per_million_gal, [5.0 * GAL_L, 0.0], rtol=1e-12)
    assert bill.rows() == (("a day", "50.0 crowns"), ("a month", "1,522 crowns"), ("1000 m³", "5.00 crowns"),
                           ("a million gallons", "18.9 crowns"))


def test_cost_without_flow():
    """Nothing to spread it over."""
    assert np.isnan(cost(100.0, 0.5, [0.0], "crowns").per_1000_m3).all()


# lime


def test_lime_solubility():
    """1.85, 1.65 and 1.5 g/L at 0, 20 and 30 °C (recalled), halfway between them 1.75 and 1.575; nothing beyond."""
    assert_allclose(lime_solubility_g_l([0.0, 10.0, 20.0, 25.0, 30.0]), [1.85, 1.75, 1.65, 1.575, 1.5], rtol=1e-12)
    assert np.isnan(lime_solubility_g_l([-0.1, 30.1, np.nan])).all()


def test_lime_water_carries_the_dose():
    """25 mg/L at 1.65 g/L is 25/1650 of the flow; both feeds hold 250 kg/d of Ca(OH)2."""
    lime = lime_feed(250.0, 1e4, 20.0, mixture=LIME, strength=0.92)

    assert_allclose(lime.water_pct, 100.0 * 25.0 / 1650.0, rtol=1e-12)
    assert_allclose(lime.water_l_h * 24.0 * 1.65e-3, 250.0, rtol=1e-12)
    assert_allclose(lime.slurry_l_h * 24.0 * 1.06 * 0.10 * 0.92, 250.0, rtol=1e-12)
    assert_allclose(lime.carries_g_l, 97.52, rtol=1e-12)  # 1060 g/L x 0.10 x 0.92


def test_lime_words():
    """A slurry is solid and clouds water past the filters; a thin one is lime water; the table ends at 30 °C."""
    thick = lime_feed(250.0, 1e4, [20.0, 40.0], mixture=LIME, strength=0.92)
    thin = lime_feed(250.0, 1e4, 20.0, mixture=MadeUp(fraction=0.001, density_kg_l=1.0), strength=1.0)

    assert thick.words(after_filters=False) == (
        "the lime as made up carries 97.5 g/L of Ca(OH)2 and about 1.65 g/L dissolve (recalled): most of it is solid, so keep "
        "it stirred, and dissolves only in the stream")
    assert thick.words(after_filters=True).endswith(
        "feed saturated lime water there, 6,313 L/h (1,668 gal/h), 1.52 % of the flow")
    assert thick.words(1, after_filters=True).endswith("how much dissolves is known from 0 to 30 °C only")
    assert thin.words(after_filters=True).endswith("dissolve (recalled): clear lime water, grit apart")


# refusals


@pytest.mark.parametrize(("act", "message"), [
    (lambda: drawdown(-1.0, 60.0, 6.0), "volume drawn down [mL] must be 0 or more; found -1. Give what is there."),
    (lambda: drawdown(1.0, 0.0, 6.0), "time of the drawdown [s] must be above 0; found 0. Time it with a watch."),
    (lambda: drawdown(1.0, 60.0, -6.0), "wanted rate [L/h] must be 0 or more; found -6. Nothing is fed at 0."),
    (lambda: column_seconds(0.0, 6.0), "volume of the calibration column [mL] must be above 0; found 0. Read it off"),
    (lambda: least_feeder_size(-1.0), "rate at the design dose must be 0 or more; found -1."),
    (lambda: day_tank(0.0, 6.0), "volume of the tank [L] must be above 0; found 0. Give what it holds when full."),
    (lambda: day_tank(9.0, -6.0), "feed [L/h] must be 0 or more; found -6. Nothing is fed at 0."),
    (lambda: batch(-5.0, LIME), "volume of a batch [L] must be above 0; found -5. Give what the slurry or solution tank"),
    (lambda: packages(5.0, 0.0), "product in a package [kg] must be above 0; found 0. Read it off the bag; 50 lb are 22.68"),
    (lambda: packages(-5.0, 1.0), "amount to pack [kg] must be 0 or more; found -5."),
    (lambda: storage_days(-5.0, 1.0), "stock [kg] must be 0 or more; found -5. Give what is there."),
    (lambda: storage_days(5.0, -1.0), "use [kg/d] must be 0 or more; found -1. Nothing is fed at 0."),
    (lambda: silo(1.0, -7.0), "shipping time [d] must be 0 or more; found -7. Count from order to delivery."),
    (lambda: silo(1.0, 7.0, bulk_density_kg_m3=0.85), "bulk density [kg/m3] must be above 50 and at most 3000; found 0.85. Write 0.85"),
    (lambda: silo(1.0, 7.0, truck_kg=-1.0), "truck load [kg] must be 0 or more; found -1. Ask the seller."),
    (lambda: order(1.0, 1.0, 1.0, reserve_d=-3.0), "reserve [d] must be 0 or more; found -3. Give the days that must stay"),
    (lambda: delivery(0.0, 1.0, 1.0, 1.0, 1.0), "delivery [kg] must be above 0; found 0. Give the load of one truck or order."),
    (lambda: delivery(1.0, 1.0, 0.0, 1.0, 1.0), "capacity of the store [kg] must be above 0; found 0. Give what it holds"),
    (lambda: months_use(-1.0), "daily use must be 0 or more; found -1."),
    (lambda: cost(1.0, -0.5, 1.0, "x"), "price per kg must be 0 or more; found -0.5. Give it without a sign."),
    (lambda: cost(1.0, 0.5, -1.0, "x"), "flow [m3/d] must be 0 or more; found -1. Give the flow that is treated."),
    (lambda: lime_feed(1.0, 0.0, 20.0, mixture=LIME, strength=1.0), "flow [m3/d] must be above 0; found 0. Give the flow"),
    (lambda: lime_feed(-1.0, 1.0, 20.0, mixture=LIME, strength=1.0), "lime [kg/d] must be 0 or more; found -1."),
])
def test_out_of_range(act, message):
    """Numbers out of range are named with their rule and what to do."""
    with pytest.raises(InputRangeError, match=f"^{re.escape(message)}"):
        act()


@pytest.mark.parametrize("act", [lambda: silo(1.0, 1.0, supply="vital"), lambda: order(1.0, 1.0, 1.0, supply="vital")])
def test_unknown_supply(act):
    """The names are those of the table."""
    with pytest.raises(InputError, match=f"^supply must be {' or '.join(SUPPLIES)}; found 'vital'. Use one of these.$"):
        act()

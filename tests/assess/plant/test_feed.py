"""Feed rates and settings against printed examples, exact unit factors, mass balances and figures worked by hand."""

import re

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.feed import (
    FORMS,
    Curve,
    Feeder,
    MadeUp,
    Pump,
    both_units,
    feed_rate,
    in_us,
    liquid_l_h,
    made_up_l_h,
    measured_curve,
    metric_and_us,
    product_kg_d,
    pure_kg_d,
    shown,
)
from aquabuf.errors import InputError, InputRangeError

LB_KG = 0.45359237            # international avoirdupois pound, exact
GAL_L = 231.0 * 0.0254**3 * 1e3  # US gallon is 231 cubic inches, exact
MGD = 1e6 * GAL_L / 1e3       # m3/d
LIME = MadeUp(fraction=0.10, density_kg_l=1.06)
CURVE = [(20, 3.0), (40, 7.0), (80, 19.0)]  # steeper further up


def dry(dose, flow, strength=1.0):
    """A dry feed."""
    return feed_rate(dose, flow, strength=strength, form="solid")


def curved(**changes):
    """A pump that was measured at three settings."""
    return Pump(**{"name": "P1", "largest_l_h": 20.0, "curve": measured_curve("pump 'P1'", CURVE)} | changes)


# published examples


def test_pounds_of_alum():
    """18 mg/L in 15 MGD: 2,252 lb/d with the rounded 8.34, 93.8 lb/h, 1.56 lb/min (printed, VCCS operator course)."""
    us = dry(18.0, 15.0 * MGD).in_us()

    assert_allclose(us["pure_lb_d"], 18 * 15 * 8.34, rtol=0.0008)  # 8.34 is 0.07 % low
    assert_allclose(us["pure_lb_d"], 2253.3, atol=0.05)  # exact factor 8.3454, worked apart
    assert_allclose(us["product_lb_h"], 93.8, atol=0.1)
    assert_allclose(us["product_lb_h"] / 60.0, 1.56, atol=0.006)


def test_quicklime_of_the_silo_example():
    """200 mg/L CaO in 0.18 m3/s at 87 %: 3,575 kg/d (printed, Davis example 5-1)."""
    assert_allclose(dry(200.0, 0.18 * 86400.0, 0.87).product_kg_d, 3575.0, atol=0.5)


def test_ferric_chloride_pump():
    """4,750 kg/d of liquid at 1,440 kg/m3: 0.14 m3/h (printed, Davis p. 5-17), 137.4 L/h worked apart."""
    assert_allclose(liquid_l_h(4750.0, 1.440), 137.4, atol=0.05)
    assert_allclose(liquid_l_h(4750.0, 1.440) / 1e3, 0.14, atol=0.005)


def test_alum_of_an_exam():
    """33 mg/L in 22,000 m3/d: 726 kg/d (worked by hand from an exam question)."""
    assert_allclose(pure_kg_d(33.0, 22_000.0), 726.0, rtol=1e-12)


def test_hydrated_lime_dry_and_as_slurry():
    """25 mg/L Ca(OH)2 in 10 ML/d at 92 %: 271.7 kg/d; as 10 % slurry of 1.06 kg/L 106.8 L/h (worked apart)."""
    rate = feed_rate(25.0, 1e4, strength=0.92, form="solid", made_up=LIME)

    assert_allclose(rate.product_kg_d, 271.7, atol=0.05)
    assert_allclose(rate.l_h, 106.8, atol=0.05)


@pytest.mark.parametrize(("strength", "density", "l_h", "atol"), [(0.50, 1.525, 8.20, 0.005), (0.25, 1.274, 19.6, 0.05)])
def test_caustic(strength, density, l_h, atol):
    """15 mg/L NaOH in 10 ML/d: 8.20 L/h at 50 %, 19.6 L/h at 25 % (worked apart)."""
    rate = feed_rate(15.0, 1e4, strength=strength, form="liquid", density_kg_l=density)

    assert_allclose(rate.l_h, l_h, atol=atol)


def test_ml_min_form():
    """MGD x dose x 3.785e6 / (active mg/mL x 1440) mL/min (printed, operator courses): NaOH 50 %, 1.525 kg/L."""
    rate = feed_rate(15.0, 2.5 * MGD, strength=0.50, form="liquid", density_kg_l=1.525)

    assert_allclose(rate.ml_min, 2.5 * 15.0 * 3.785411784e6 / (0.50 * 1525.0 * 1440.0), rtol=1e-12)


def test_bags_of_lime_in_pounds():
    """Short of 128.5 mg/L CaCO3 in 2.22 MGD: 2,379 lb/d as CaCO3, 1,761 lb/d of hydrate (worked apart)."""
    assert_allclose(dry(128.5, 2.22 * MGD).in_us()["pure_lb_d"], 2379.0, rtol=0.0012)  # the rounded 8.34
    assert_allclose(dry(128.5 * 0.7403, 2.22 * MGD).in_us()["pure_lb_d"], 1761.0, rtol=0.0012)


# identities


def test_mass_comes_back_from_the_volume():
    """What is pumped holds the dose: L/h x 24 x density x fraction over the flow, row by row."""
    dose, flow = np.array([0.4, 25.0, 300.0]), np.array([50.0, 1e4, 3e5])
    liquid = feed_rate(dose, flow, strength=0.485, form="liquid", density_kg_l=1.33)
    slurry = feed_rate(dose, flow, strength=0.92, form="solid", made_up=LIME)

    assert_allclose(1e3 * liquid.l_h * 24.0 * 1.33 * 0.485 / flow, dose, rtol=1e-12)
    assert_allclose(1e3 * slurry.l_h * 24.0 * 1.06 * 0.10 * 0.92 / flow, dose, rtol=1e-12)


def test_thin_mixture_needs_more():
    """The volume goes with one over the fraction at one density."""
    half = MadeUp(fraction=0.05, density_kg_l=1.06)

    assert_allclose(made_up_l_h(100.0, half) / made_up_l_h(100.0, LIME), 2.0, rtol=1e-12)


@pytest.mark.parametrize(("unit", "factor", "name"), [
    ("mg/L", 1e-6 * MGD * 1e3 / LB_KG, "lb/MG"), ("m³/d", 1.0 / MGD, "MGD"), ("kg/d", 1.0 / LB_KG, "lb/d"),
    ("kg/h", 1.0 / LB_KG, "lb/h"), ("kg", 1.0 / LB_KG, "lb"), ("L/h", 1.0 / GAL_L, "gal/h"), ("L/d", 1.0 / GAL_L, "gal/d"),
    ("L", 1.0 / GAL_L, "gal"), ("m³", 1.0 / 0.3048**3, "ft³"), ("mL/min", 1.0, "mL/min")])
def test_us_factors(unit, factor, name):
    """Factors from the definitions of pound, gallon and foot."""
    value, found = in_us(1.0, unit)

    assert found == name
    assert_allclose(value, factor, rtol=1e-12)


def test_rates_agree_with_each_other():
    """A day has 24 h; 1 L/h is 1000/60 mL/min; pounds and gallons are those of the metric rates."""
    rate = feed_rate([12.0, 3.0], 5000.0, strength=0.3, form="slurry", density_kg_l=1.4)
    us = rate.in_us()

    assert_allclose(rate.product_kg_h * 24.0, rate.product_kg_d, rtol=1e-14)
    assert_allclose(rate.ml_min, rate.l_h * 1000.0 / 60.0, rtol=1e-12)
    assert_allclose(us["gal_d"], 24.0 * us["gal_h"], rtol=1e-12)
    assert_allclose(us["gal_h"], rate.l_h / GAL_L, rtol=1e-12)
    assert_allclose(us["product_lb_d"], 24.0 * us["product_lb_h"], rtol=1e-12)
    assert_allclose(us["pure_lb_d"], 0.3 * us["product_lb_d"], rtol=1e-12)


def test_rows_do_not_see_each_other():
    """Nothing fed at dose 0, nan only where the dose is missing."""
    rate = feed_rate([0.0, np.nan, 10.0], 1000.0, strength=1.0, form="liquid", density_kg_l=1.0)

    assert_array_equal(rate.product_kg_d, [0.0, np.nan, 10.0])
    assert_allclose(rate.l_h, [0.0, np.nan, 10.0 / 24.0], rtol=1e-14)


@pytest.mark.parametrize("form", ["solid", "gas"])
def test_dry_and_gas_are_not_pumped(form):
    """They have kg/h and no volume, on the sheet neither."""
    rate = feed_rate(24.0, 1000.0, strength=1.0, form=form)

    assert_allclose(rate.product_kg_h, 1.0, rtol=1e-14)
    assert np.isnan(rate.l_h).all()
    assert not [line for line in rate.rows() if "L/h" in line[1]]


# text


def test_sheet_has_both_systems():
    """Each line holds metric and US text of one row."""
    rate = feed_rate([1.0, 25.0], 1e4, strength=0.92, form="solid", made_up=LIME)

    assert rate.rows(1) == (
        ("dose, pure", "25.0 mg/L", "209 lb/MG"), ("flow", "10,000 m³/d", "2.64 MGD"),
        ("pure substance", "250 kg/d", "551 lb/d"), ("product", "272 kg/d", "599 lb/d"),
        ("product", "11.3 kg/h", "25.0 lb/h"), ("mixture to pump", "107 L/h", "28.2 gal/h"),
        ("mixture to pump", "2,564 L/d", "677 gal/d"), ("mixture to pump", "1,780 mL/min", "1,780 mL/min"))


@pytest.mark.parametrize(("value", "text"), [
    (0.0, "0"), (0.01234, "0.0123"), (8.2, "8.20"), (9.996, "10.0"), (1.0 - 1e-15, "1.00"), (106.8, "107"), (73291.4, "73,291"), (-2.5, "-2.50"),
    (np.nan, "unknown"), (np.inf, "endless")])
def test_shown(value, text):
    """Three figures, whole numbers in full."""
    assert shown(value) == text


def test_pairs_of_text():
    """A gallon is 3.785 L."""
    assert metric_and_us(3.785411784, "L/h") == ("3.79 L/h", "1.00 gal/h")
    assert both_units(100.0, "kg") == "100 kg (220 lb)"


# pumps and feeders


def test_name_plate_setting():
    """8.20 L/h on a 20 L/h pump is 41 % (worked apart); the words say what that rests on."""
    rate = feed_rate(15.0, 1e4, strength=0.50, form="liquid", density_kg_l=1.525)
    setting = Pump(name="P1", largest_l_h=20.0).reach.setting(rate.l_h)

    assert_allclose(setting.setting_pct, 41.0, atol=0.05)
    assert setting.words() == ("pump 'P1': set 41.0 % for 8.20 L/h (2.17 gal/h), as largest rate x stroke x speed, which "
                               "holds only once a measured curve bears it out")


@pytest.mark.parametrize("sets", ["speed", "stroke"])
def test_held_knob_counts(sets):
    """At half stroke (or speed) the same rate needs twice the speed (or stroke): 5 of 20 x 0.5 L/h is 50 %."""
    held = {"speed": "stroke", "stroke": "speed"}[sets]
    pump = Pump(name="P1", largest_l_h=20.0, sets=sets, **{held: 0.5, sets: 0.3})

    assert_allclose(pump.reach.setting([5.0]).setting_pct, [50.0], rtol=1e-12)
    assert_allclose(pump.reach.largest, 10.0, rtol=1e-12)


def test_measured_curve_by_hand():
    """On the line from 40 %, 7 L/h to 80 %, 19 L/h: 13 L/h at 60 %; from 20 %, 3 L/h: 5 L/h at 30 %."""
    setting = curved().reach.setting([3.0, 5.0, 13.0, 19.0])

    assert_allclose(setting.setting_pct, [20.0, 30.0, 60.0, 80.0], rtol=1e-12)
    assert_allclose(curved().reach.rate_at([20.0, 30.0, 60.0, 80.0]), [3.0, 5.0, 13.0, 19.0], rtol=1e-12)
    assert setting.words(2) == "pump 'P1': set 60.0 % for 13.0 L/h (3.43 gal/h), by its measured curve"


def test_setting_rises_with_the_rate():
    """A curve that rises gives settings that rise, and the rate comes back."""
    rate = np.linspace(3.0, 19.0, 301)
    setting = curved().reach.setting(rate).setting_pct

    assert (np.diff(setting) > 0.0).all()
    assert_allclose(curved().reach.rate_at(setting), rate, rtol=1e-12)


def test_outside_the_curve():
    """No setting outside what was measured, 0 % where nothing is wanted, the other rows as they are."""
    setting = curved().reach.setting([0.0, 2.9, 7.0, 19.1, np.nan])

    assert_array_equal(setting.setting_pct, [0.0, np.nan, 40.0, np.nan, np.nan])
    assert list(setting.status) == ["off", "too small", "set", "too large", "unknown"]
    assert setting.words(0) == "pump 'P1': off, nothing is to be fed"
    assert setting.words(4) == "pump 'P1': no setting, the wanted rate is unknown"
    assert_array_equal(curved().reach.rate_at([19.0, 81.0]), [np.nan, np.nan])


def test_ways_out_of_too_much():
    """38 L/h of 19: twice as strong, or half the dose of 30 mg/L."""
    words = curved().reach.setting([38.0]).words(dose_mg_l=30.0)

    assert words == ("pump 'P1': 38.0 L/h (10.0 gal/h) is wanted and it gives no more than 19.0 L/h (5.02 gal/h), by its "
                     "measured curve; take one that gives 38.0 L/h (10.0 gal/h), or feed a mixture 2.00 times as strong, "
                     "or dose at most 15.0 mg/L")


def test_ways_out_of_too_little():
    """0.75 L/h of at least 3: thin it four times, or four times the dose of 2 mg/L."""
    words = curved().reach.setting([0.75]).words(dose_mg_l=2.0)

    assert "gives no less than 3.00 L/h" in words
    assert words.endswith("take one that goes down to 0.750 L/h (0.198 gal/h), or thin what is fed: 1 L made up to 4.00 L, "
                          "or dose at least 8.00 mg/L")


@pytest.mark.parametrize(("dose", "toward"), [(60.0, 0.99), (1.0, 1.01)])
def test_the_dose_of_the_words_is_in_reach(dose, toward):
    """Fed at the dose that the words name (a hundredth inside, they are rounded), the pump has a setting."""
    def setting(mg_l):
        return curved().reach.setting(feed_rate(mg_l, 1e4, strength=0.5, form="liquid", density_kg_l=1.525).l_h)

    named = float(re.search(r"dose at (?:most|least) ([\d.]+) mg/L", setting(dose).words(dose_mg_l=dose))[1])

    assert list(setting(named * toward).status) == ["set"]
    assert list(setting(named / toward).status) != ["set"]


def test_smallest_rate():
    """The larger of the lowest setting and the turndown: 5 % or a tenth of 20 L/h; on a curve its first point."""
    assert_allclose(Pump(name="P", largest_l_h=20.0, range_pct=(5.0, 100.0)).reach.smallest, 1.0, rtol=1e-12)
    assert_allclose(Pump(name="P", largest_l_h=20.0, range_pct=(5.0, 90.0), turndown=10.0).reach.smallest, 2.0)
    assert_allclose(Pump(name="P", largest_l_h=20.0, range_pct=(5.0, 90.0)).reach.largest, 18.0, rtol=1e-12)
    assert_allclose(curved().reach.smallest, 3.0, rtol=1e-12)
    assert_allclose(curved(range_pct=(30.0, 60.0)).reach.smallest, 5.0, rtol=1e-12)
    assert_allclose(curved(range_pct=(30.0, 60.0)).reach.largest, 13.0, rtol=1e-12)


def test_feeder_of_dry_lime():
    """A feeder of 40 kg/h gives 10 kg/h at a quarter, by its curve of lb/h where it was measured; no dilution is offered."""
    plain = Feeder(name="F1", largest_kg_h=40.0, turndown=20.0).reach
    measured = Feeder(name="F1", largest_kg_h=40.0, curve=measured_curve("feeder 'F1'", [(0, 0), (50, 50)], "lb/h")).reach

    assert_allclose(plain.setting([10.0]).setting_pct, [25.0], rtol=1e-12)
    assert_allclose(measured.setting([10.0 * LB_KG]).setting_pct, [10.0], rtol=1e-12)
    assert plain.setting([1.0]).words().endswith("; take one that goes down to 1.00 kg/h (2.20 lb/h)")


def test_curve_in_milliliters_a_minute_in_any_order():
    """100 mL/min is 6 L/h."""
    curve = measured_curve("pump 'P1'", [(60, 200), (30, 100)], "mL/min")

    assert curve.setting_pct == (30.0, 60.0)
    assert_allclose(curve.rate, [6.0, 12.0], rtol=1e-12)


# refusals


@pytest.mark.parametrize(("act", "message"), [
    (lambda: pure_kg_d([1.0, -2.0], 1.0), "dose [mg/L] must be 0 or more; found -2. A negative dose calls for the opposite"),
    (lambda: pure_kg_d(1.0, -5.0), "flow [m3/d] must be 0 or more; found -5. Give the flow"),
    (lambda: product_kg_d(1.0, 92.0), "strength (mass fraction) must be above 0 and at most 1; found 92. Write 92 % as 0.92."),
    (lambda: product_kg_d(1.0, 0.0), "strength (mass fraction) must be above 0 and at most 1; found 0."),
    (lambda: liquid_l_h(1.0, 1525.0), "density [kg/L] must be above 0.5 and at most 3; found 1525. Weigh a liter of it"),
    (lambda: MadeUp(fraction=10.0, density_kg_l=1.06), "mass fraction of product in a mixture must be above 0 and at most 1; "
                                                       "found 10. Write 10 % as 0.1."),
    (lambda: curved().reach.setting([-1.0]), "wanted rate of pump 'P1' must be 0 or more; found -1."),
    (lambda: Pump(name="P1", largest_l_h=0.0), "largest rate of pump 'P1' [L/h] must be above 0; found 0. Read it off"),
    (lambda: Pump(name="P1", largest_l_h=9.0, stroke=80.0), "stroke and speed of pump 'P1' must be above 0 and at most 1; "
                                                            "found 80. Write 80 % as 0.8."),
    (lambda: Feeder(name="F1", largest_kg_h=9.0, turndown=0.1), "turndown of feeder 'F1' must be above 1; found 0.1. A turndown"),
    (lambda: measured_curve("x", [(10, 1), (120, 2)]), "setting [%] in the calibration curve of x must be 0 or more and at "
                                                       "most 100; found 120. Give points as (%, rate)."),
    (lambda: measured_curve("x", [(10, -1), (20, 2)]), "rate in the calibration curve of x must be 0 or more; found -1."),
])
def test_out_of_range(act, message):
    """Numbers out of range are named with their rule and what to do; the rows are marked."""
    with pytest.raises(InputRangeError, match=f"^{re.escape(message)}") as err:
        act()

    assert err.value.mask.any()


@pytest.mark.parametrize(("act", "message"), [
    (lambda: feed_rate(1.0, 1.0, strength=1.0, form="powder"),
     f"form of a product must be one of {', '.join(FORMS)}, and no gas where a mixture is made up; found 'powder'. Correct it."),
    (lambda: feed_rate(1.0, 1.0, strength=1.0, form="gas", made_up=LIME), "form of a product must be one of"),
    (lambda: feed_rate(1.0, 1.0, strength=1.0, form="liquid"),
     "a liquid product needs its density [kg/L] to become a volume; found none. Take it from the certificate."),
    (lambda: in_us(1.0, "stone"), "a metric unit must be one of mg/L, m³/d, L/h"),
    (lambda: MadeUp(fraction=np.nan, density_kg_l=1.0), "every figure of a mixture must be a number; found nan."),
    (lambda: Pump(name="P1", largest_l_h=np.nan), "every figure of pump 'P1' must be a number; found nan. Read it off"),
    (lambda: Pump(name="P1", largest_l_h=9.0, sets="dial"), "pump 'P1' must be set by speed or stroke; found 'dial'. Use one"),
    (lambda: curved(range_pct=(80.0, 100.0)), "settings of pump 'P1' must run from a lower to a higher percentage within 0 to "
                                              "100, and its curve through them; found 80 to 80 %. Correct the range"),
    (lambda: Pump(name="P1", largest_l_h=9.0, stroke=0.1, turndown=10.0),
     "smallest rate of pump 'P1' must be below its largest; found 0.9 and 0.9 L/h. Correct its turndown, stroke or speed."),
    (lambda: curved(curve=measured_curve("P1", [(0, 0), (9, 9)], "kg/h")),
     "calibration curve of pump 'P1' must be in L/h; found kg/h. Measure a volume per time."),
    (lambda: measured_curve("P1", [(0, 0), (9, 9)], "bar"),
     "calibration curve of P1 must be in a volume or mass per time; found 'bar'. Use L/h, mL/min, kg/h or lb/h."),
    (lambda: measured_curve("P1", [(10, 1)]), "calibration curve of P1 needs 2 points or more; found 1. Measure at another"),
    (lambda: measured_curve("P1", [(20, 3), (40, 7), (60, 6.5)]),
     "calibration curve of P1 must rise from point to point; found 6.5 L/h at 60 % after 7 L/h at 40 %. Measure again at 60 %."),
    (lambda: measured_curve("P1", [(20, 3), (20, 4)]), "calibration curve of P1 must rise from point to point; found 4 L/h at 20"),
    (lambda: measured_curve("P1", [(20, 3), (40, 3)]), "calibration curve of P1 must rise from point to point; found 3 L/h at 40"),
    (lambda: Curve(owner="P1", setting_pct=(1.0, np.nan), rate=(1.0, 2.0), unit="L/h"), "every figure of the calibration curve"),
])
def test_refused(act, message):
    """What cannot be used is named with its rule and what to do."""
    with pytest.raises(InputError, match=f"^{re.escape(message)}"):
        act()

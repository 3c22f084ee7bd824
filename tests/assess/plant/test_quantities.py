"""Quantities of the plant room: units by hand, values by hand or by the 40-digit reference, words."""

import carbonate_reference as reference
import mpmath as mp
import numpy as np
import pytest
from carbonate_by_hand import BareWater
from made_streams import IONS, random_streams, stream
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.plant.quantities import (
    STEP_QUANTITIES,
    find_quantity,
    in_house,
    in_unit,
    measured,
    plant_quantities,
)
from aquabuf.errors import InputError

# One house unit in the unit of the tables; IUPAC masses Ca 40.078, Mg 24.305, Na 22.990, F 18.998, CaCO3 100.086
PER_HOUSE = {
    "ph": 1.0, "ph_at_air": 1.0, "alkalinity": 100.086e3 / 2, "dic": 1e3, "calcium": 40.078e3, "magnesium": 24.305e3,
    "hardness": 100.086e3, "sodium": 22.990e3, "fluoride": 18.998e3, "chloride_sulfate_ratio": 1.0, "larson_ratio": 1.0,
    "si_calcite": 1.0, "ccpp": 100.086e3, "buffer_intensity": 1e3, "tds": 1.0, "pco2": 1e3,
}


def test_units_of_every_quantity():
    """Every row of the table has a factor by hand here, in both directions."""
    assert set(plant_quantities()) == set(PER_HOUSE)
    for name, factor in PER_HOUSE.items():
        quantity = find_quantity(name, target=False)
        assert_allclose(quantity.per_house, factor, rtol=1e-6)
        assert_allclose(in_unit(quantity, [0.0, 2.0]), [0.0, 2.0 * factor], rtol=1e-6)
        assert_allclose(in_house(quantity, 3.0), 3.0 / factor, rtol=1e-6)


@pytest.mark.parametrize(("name", "value", "unit", "house"), [
    ("alkalinity", 1.0, "meq/L", 1e-3), ("alkalinity", 1.0, "°dH", 0.35665e-3),  # 10 mg CaO/L, CaO 56.077
    ("alkalinity", 61.016, "mg/L as HCO3", 1e-3), ("calcium", 100.086, "mg/L as CaCO3", 1e-3), ("calcium", 2.0, "meq/L", 1e-3),
    ("hardness", 10.0, "°fH", 100.0 / 100.086e3), ("hardness", 2.0, "meq/L", 1e-3), ("ccpp", 0.5, "mmol/L", 5e-4),
    ("dic", 12.011, "mg/L as C", 1e-3), ("buffer_intensity", 50.043, "mg/L as CaCO3 per pH", 1e-3),
    ("buffer_intensity", 0.4, "mmol/L per pH", 4e-4), ("ph", 8.3, "pH", 8.3)])
def test_other_units(name, value, unit, house):
    """Factors by IUPAC masses."""
    assert_allclose(in_house(find_quantity(name), value, unit), house, rtol=2e-5)


@pytest.mark.parametrize(("name", "unit", "words"), [
    ("ph", "mg/L", r"pH has no unit; found 'mg/L'\. Give the bare number"),
    ("si_calcite", "mmol/L", "saturation index has no unit; found 'mmol/L'"),
    ("alkalinity", "furlong", r"alkalinity must be in one of .*mg/L as CaCO3.*; found 'furlong'\. Correct the unit"),
    ("ccpp", "meters", "precipitation potential must be in one of .*mmol/L.*; found 'meters'")])
def test_wrong_units(name, unit, words):
    """Rule, value found and remedy."""
    with pytest.raises(InputError, match=words):
        in_house(find_quantity(name), 1.0, unit)


def test_unknown_names():
    """The nearest is named; what is only told is nothing to aim at; what is far from all has no nearest."""
    with pytest.raises(InputError, match=r"'alkalinty' is no quantity .* there are ph, .* The nearest is alkalinity\. Correct it"):
        find_quantity("alkalinty")
    with pytest.raises(InputError, match="'tds' is no quantity that a target can be set for"):
        find_quantity("tds")
    with pytest.raises(InputError, match=r"buffer_intensity\. Correct it"):
        find_quantity("zzz")
    assert find_quantity("tds", target=False).is_target is False
    assert find_quantity("ph").is_target


@pytest.mark.parametrize(("name", "house", "words"), [
    ("ph", 8.204, "8.20"), ("alkalinity", 1e-3, "50.0 mg/L as CaCO3"), ("buffer_intensity", 4.2e-4, "0.420 meq/L per pH"),
    ("tds", 123.6, "124 mg/L"), ("si_calcite", np.nan, "not known"), ("si_calcite", -0.001, "0.00"), ("si_calcite", -0.35, "-0.35"),
    ("ccpp", np.inf, "not known")])
def test_text(name, house, words):
    """Digits of the table, the unit, and no minus before nothing."""
    assert find_quantity(name, target=False).text(house) == words


# ------------------------------------------------------------------ values


def test_larson_ratio_and_chloride_to_sulfate():
    """Cl 30, SO4 60, HCO3 122 mg/L: 1.048 (worked apart); chloride to sulfate 30/60."""
    one = stream(122.0 / 61016.0, 2.1e-3, chloride=30.0 / 35450.0, sulfate=60.0 / 96056.0)
    found = measured(one, ["larson_ratio", "chloride_sulfate_ratio"])
    assert_allclose(found["larson_ratio"], 1.048, rtol=0, atol=5e-4)
    assert_allclose(found["chloride_sulfate_ratio"], 0.5, rtol=1e-6)


def test_ratios_without_a_denominator():
    """No sulfate or no alkalinity makes a ratio endless, in that row only; an unknown ion: not known."""
    some = stream([1e-3, -1e-4, 1e-3], 1e-3, chloride=1e-3, sulfate=[0.0, 1e-3, np.nan])
    found = measured(some, ["larson_ratio", "chloride_sulfate_ratio"])
    assert_allclose(found["chloride_sulfate_ratio"], [np.inf, 35.45 / 96.056, np.nan], rtol=1e-6)
    assert_allclose(found["larson_ratio"], [1.0, np.inf, np.nan], rtol=1e-12)
    assert np.isnan(measured(stream(), STEP_QUANTITIES)["tds"]).all()


def test_dissolved_solids_by_hand():
    """Ca 40.078, Mg 24.305, Na 22.990, Cl 35.45, SO4 96.056 mg/L, K 3.9098, and alkalinity 2 meq/L as half its CO3, 60.008."""
    one = stream(2e-3, 2e-3, calcium=1e-3, magnesium=1e-3, sodium=1e-3, chloride=1e-3, sulfate=1e-3, potassium=1e-4, silica=np.nan)
    assert_allclose(measured(one, ["tds"])["tds"], 40.078 + 24.305 + 22.990 + 35.45 + 96.056 + 3.9098 + 60.008, rtol=1e-5)
    acid = one.replaced(alkalinity_eq_l=np.array([-1e-3]))
    assert_allclose(measured(acid, ["tds"])["tds"], 40.078 + 24.305 + 22.990 + 35.45 + 96.056 + 3.9098, rtol=1e-5)


def test_totals_are_themselves():
    """Calcium, magnesium, sodium, fluoride, carbon and alkalinity as carried; hardness the sum of two."""
    some = random_streams(8, seed=4)
    found = measured(some, ["calcium", "magnesium", "sodium", "fluoride", "dic", "alkalinity", "hardness"])
    for name in ("calcium", "magnesium", "sodium", "fluoride"):
        assert_array_equal(found[name], some.total(name))
    assert_array_equal(found["dic"], some.carbon_mol_l)
    assert_array_equal(found["alkalinity"], some.alkalinity_eq_l)
    assert_array_equal(found["hardness"], some.total("calcium") + some.total("magnesium"))


def test_against_the_reference():
    """pH, saturation index, precipitation potential and buffer intensity of plain calcium waters in 40 digits.

    Buffer intensity: the slope of alkalinity over pH, taken by a central difference of 1e-12 pH.
    """
    cases = [(8.2, 2e-3, 1e-3, 15.0, 5e-3), (7.0, 4e-4, 2e-4, 5.0, 1e-3), (9.6, 6e-4, 5e-4, 25.0, 2e-3)]
    names = ("ph", "si_calcite", "ccpp", "buffer_intensity")
    with mp.workdps(reference.DIGITS):
        for ph, alkalinity, calcium, t_c, strength in cases:
            carbon = reference.carbon_of(ph, alkalinity, t_c, strength)
            tiny = mp.mpf(10) ** -12
            up, down = (reference.alkalinity(ph + side * tiny, carbon, t_c, strength) for side in (1, -1))
            expected = [ph, reference.saturation(ph, alkalinity, calcium, t_c, strength)[0],
                        reference.potential(ph, alkalinity, calcium, t_c, strength)[0], (up - down) / (2 * tiny)]
            found = measured(stream(alkalinity, float(carbon), t_c=t_c, strength=strength, calcium=calcium), names)
            assert_allclose([found[n][0] for n in names], [float(v) for v in expected], rtol=1e-9)


def test_check_case_of_saturation():
    """Alkalinity 100, calcium 100 mg/L as CaCO3, pH 8.2, 15 °C, I 0.005: SI 0.33 and potential 3.68 mg/L, computed apart by two
    solvers without pairs; pairs take 0.015 of the index and add 0.27 mg/L of dissolved CaCO3."""
    alkalinity = 100.0 / 50043.0
    carbon = float(reference.carbon_of(8.2, alkalinity, 15.0, 0.005))
    one = stream(alkalinity, carbon, strength=0.005, calcium=100.0 / 100086.0)
    found = measured(one, ["si_calcite", "ccpp"])
    assert_allclose(found["si_calcite"], 0.33, rtol=0, atol=0.02)
    assert_allclose(found["ccpp"] * 100086.0, 3.68, rtol=0, atol=0.3)


def test_ph_at_air():
    """At 25 °C with 420 ppm CO2, vapor pressure 23.756 mmHg (handbook), against printed constants."""
    bare = BareWater(25.0, 2e-3)
    expected = bare.ph_at_co2(1e-3, 420e-6 * (1.0 - 23.756 / 760.0) * bare.k0)
    one = stream(1e-3, 1.2e-3, t_c=25.0, strength=2e-3)
    assert_allclose(measured(one, ["ph_at_air"], air_co2_ppm=420.0)["ph_at_air"], expected, rtol=0, atol=0.002)
    double = measured(one, ["ph_at_air"], air_co2_ppm=840.0)["ph_at_air"]
    assert_allclose(double, expected - np.log10(2.0), rtol=0, atol=0.02)  # bicarbonate water: one over the CO2


def test_co2_pressure():
    """CO2 of the reference over Henry's constant at 25 °C; printed constants."""
    bare = BareWater(25.0, 2e-3)
    one = stream(1e-3, 1.2e-3, t_c=25.0, strength=2e-3)
    expected = 1.2e-3 * bare.shares(bare.ph(1e-3, 1.2e-3))[0] / bare.k0
    assert_allclose(measured(one, ["pco2"])["pco2"], expected, rtol=0.003)


def test_every_quantity_has_a_value():
    """Finite for a whole water, and nan only where an ion is missing that the table says it needs."""
    whole = stream(1.2e-3, 1.3e-3, fluoride=1e-5, **IONS)
    assert all(np.isfinite(v).all() for v in measured(whole, plant_quantities()).values())
    bare = measured(stream(1.2e-3, 1.3e-3), plant_quantities())
    assert {n for n, v in bare.items() if np.isnan(v).all()} == {
        "calcium", "magnesium", "hardness", "sodium", "fluoride", "chloride_sulfate_ratio", "larson_ratio", "si_calcite", "ccpp", "tds"}
    assert set(STEP_QUANTITIES) <= set(plant_quantities())

"""Quality checks of lakes: sums of ions of a printed lake, each check met and broken, a lake's own history."""

import numpy as np
import pandas as pd
import pytest
from assessed_lakes import FULL, assessed, without
from carbonate_by_hand import BareWater
from made_lakes import HAWK_POND, budget_of, ions, lakes_of
from numpy.testing import assert_allclose, assert_array_equal
from published_rows import read_rows

from aquabuf.assess.ionsums import conductivity_of_ions
from aquabuf.assess.lake.beside import BUBBLED_T_C
from aquabuf.assess.lake.budget import NEEDED
from aquabuf.assess.lake.chemistry import chemistry, choose_sources
from aquabuf.assess.lake.quality import HISTORY_COLUMNS, ion_sums, own_history
from aquabuf.assess.sample.quality import allowed, check_facts, check_rows, fixed_check
from aquabuf.chem.organic import organic_models
from aquabuf.tables import read_table

PRINTED = {row["quantity"]: row for row in read_rows("lake_ions") if not row["at"]}
STRENGTH = 3e-4
PURE, HAND = BareWater(25.0, 0.0), BareWater(10.0, STRENGTH)
H, HCO3 = 16.2181e-6, 0.882e-6  # of Hawk Pond as the agency prints them [eq/L]
# Hawk Pond at zero ionic strength, with the pH and the carbon that have just those amounts of H+ and HCO3-
HAWK_PH = -np.log10(H / PURE.c_h)
HAWK = ions(**HAWK_POND) | {"temperature_c": 25.0, "ionic_strength_mol_l": 0.0, "ph": HAWK_PH,
                            "dic_mol_l": HCO3 / PURE.shares(HAWK_PH)[1]}
LAMBDA = {"calcium": 59.47, "magnesium": 53.0, "sodium": 50.08, "potassium": 73.48, "ammonium": 73.5, "sulfate": 80.0,
          "nitrate": 71.42, "chloride": 76.31}  # µS/cm per meq/L, US lake surveys


def sums_of(*rows):
    """Sums over the ions of the lakes."""
    lakes = lakes_of(*rows)
    b = budget_of(lakes)
    return ion_sums(lakes, chemistry(lakes, b, choose_sources(lakes, b), (6.0,)))


def check_of(name, *rows, **options):
    """Value, limits and verdict of one check over some lakes."""
    found = assessed(*rows, **options)
    return next(c for c in found.checks if c.name == name)


# ------------------------------------------------------------------ sums


def test_sums_of_hawk_pond():
    """Cations 120.77, anions 154.01 µeq/L and so 12.10 % (agency's sums); conductivity at infinite dilution."""
    sums = sums_of(HAWK)
    row = PRINTED["balance_percent"]
    assert_allclose(sums.balance, float(row["expected"]), rtol=0, atol=float(row["atol"]))
    assert_allclose(sums.total, float(PRINTED["cations"]["expected"]) + float(PRINTED["anions"]["expected"]), rtol=0,
                    atol=0.02)
    row = PRINTED["conductivity"]
    for found in (sums.conductivity, sums.known):
        assert_allclose(found, float(row["expected"]), rtol=0, atol=float(row["atol"]))


def test_each_sum_of_hawk_pond():
    """From total and difference: the cation sum and the anion sum by themselves."""
    sums = sums_of(HAWK)
    difference = 0.01 * sums.balance * sums.total
    for name, found in (("anions", sums.total + difference), ("cations", sums.total - difference)):
        assert_allclose(found / 2.0, float(PRINTED[name]["expected"]), rtol=0, atol=float(PRINTED[name]["atol"]))


def test_carbonate_and_hydroxide_count():
    """An alkaline water of sodium and carbon: its ions by printed constants, two charges for carbonate."""
    row = ions(**dict.fromkeys(HAWK_POND, 0.0)) | {"temperature_c": 10.0, "ionic_strength_mol_l": STRENGTH, "ph": 10.0,
                                                     "dic_mol_l": 2e-4, "sodium_mol_l": 3e-4}
    sums = sums_of(row)
    _, a1, a2 = HAND.shares(10.0)
    minus = 2e-4 * (a1 + 2.0 * a2) + HAND.c_oh * 1e10
    assert_allclose(sums.total, 1e6 * (3e-4 + minus), rtol=1e-3)
    assert_allclose(sums.balance, 100.0 * (minus - 3e-4) / (minus + 3e-4), rtol=0, atol=0.1)
    s = np.sqrt(STRENGTH)
    dilute = 1e3 * (3e-4 * 50.08 + 2e-4 * (44.5 * a1 + 2.0 * 69.3 * a2) + 198.0 * HAND.c_oh * 1e10)
    # hydroxide is a tenth of it, and the constants of water differ by up to 2 %
    assert_allclose(sums.conductivity, dilute * 10.0 ** -(s / (1.0 + s) - 0.3 * STRENGTH), rtol=3e-3)


@pytest.mark.parametrize("ion", NEEDED)
def test_no_sum_without_an_ion(ion):
    """Never taken as zero; conductivity of the ions known is still told; the other lake keeps its sums."""
    sums = sums_of(HAWK, HAWK | {f"{ion}_mol_l": np.nan})
    _nothing_in_the_second(sums)
    assert_allclose(sums.known, 23.886 - np.array([0.0, 1e-3 * LAMBDA[ion] * HAWK_POND[ion]]), rtol=0, atol=0.005)


@pytest.mark.parametrize("gone", ["dic_mol_l", "temperature_c", "ph"])
def test_no_sum_without_what_solves_the_water(gone):
    """H+ and HCO3- of a titrated or measured water only; never zero, and never from the ions that are to be checked."""
    _nothing_in_the_second(sums_of(HAWK, HAWK | {gone: np.nan}))


def _nothing_in_the_second(sums):
    for name in ("balance", "balance_organic", "total", "conductivity"):
        assert_array_equal(np.isnan(getattr(sums, name)), [False, True], err_msg=name)


@pytest.mark.parametrize(("gone", "charge"), [("ammonium", 5.156), ("fluoride", -2.853)])
def test_sums_without_ammonium_or_fluoride(gone, charge):
    """These two count as none where they were not measured: the balance is told all the same."""
    sums = sums_of(HAWK | {f"{gone}_mol_l": np.nan})
    assert_allclose(sums.total, 274.78 - abs(charge), rtol=0, atol=0.02)
    assert_allclose(sums.balance, 100.0 * (154.01 - 120.77 + charge) / (274.78 - abs(charge)), rtol=0, atol=0.01)


def test_organic_anions_in_the_balance():
    """Hruska et al. 2003, second set of pK, by mass action: they join the anions and the total."""
    row = HAWK | {"doc_mg_l": 5.0}
    h = 10.0**-HAWK_PH
    w = np.array([1.0, 10.0**-3.04 / h, 10.0**-7.46 / h**2, 10.0**-14.16 / h**3])
    organic = 5.0 * 3.4 * (w @ np.arange(4)) / w.sum()
    sums = sums_of(row)
    assert_allclose(sums.balance_organic, 100.0 * (154.01 - 120.77 + organic) / (274.78 + organic), rtol=0, atol=0.01)
    assert_allclose(sums.balance, sums_of(HAWK).balance, rtol=1e-12)


def test_aluminum_in_the_balance():
    """It joins the cations, and the total with its own size: Nordstrom & May 1996 (recalled)."""
    sums = sums_of(HAWK | {"doc_mg_l": 5.0, "aluminum_mol_l": 1e-5})
    h = 10.0**-HAWK_PH
    w = np.array([1.0, 10.0**-5.0 / h, 10.0**-10.1 / h**2, 10.0**-16.9 / h**3, 10.0**-22.7 / h**4])
    metal = 10.0 * (w @ np.array([3.0, 2.0, 1.0, 0.0, -1.0])) / w.sum()
    organic = 5e6 * float(organic_models()["hruska_b"].anion_eq_l(np.ones(1), np.array([HAWK_PH]))[0])
    expected = 100.0 * (154.01 - 120.77 + organic - metal) / (274.78 + organic + metal)
    assert_allclose(sums.balance_organic, expected, rtol=0, atol=0.02)


# ------------------------------------------------------------------ checks


NO_ALUMINUM = without(FULL, "aluminum_mol_l")
BROWN = FULL | {"doc_mg_l": 12.0} | ions(calcium=80.0, magnesium=30.0, sodium=75.0, potassium=10.0, sulfate=65.0,
                                         nitrate=5.0, chloride=25.0)
CASES = {  # check: a lake that meets it, a lake that breaks it
    "ion balance": (FULL, BROWN),
    "ion balance with organic anions": (BROWN, FULL | ions(sodium=250.0)),
    "conductivity": (FULL, FULL | {"conductivity_us_cm": 30.0}),
    "pH against alkalinity": (FULL, FULL | {"ph": 9.5, "anc_eq_l": 1e-6}),
    "alkalinity against pH and carbon": (FULL, FULL | {"dic_mol_l": 160e-6}),
    "ANC by charge against titration": (FULL, FULL | {"anc_eq_l": -60e-6}),
    "pH at air": (FULL | {"ph_air_equilibrated": 6.6, "equilibration_co2_ppm": 420.0},
                  FULL | {"ph_air_equilibrated": 7.8, "equilibration_co2_ppm": 420.0}),
    "sea salt": (FULL, FULL | ions(chloride=200.0)),
    "CO2 pressure": (FULL, FULL | {"dic_mol_l": 3e-3}),
    "temperature": (FULL | {"temperature_c": 35.0}, FULL | {"temperature_c": 35.1}),
    "holding time": (FULL | {"holding_days": 14.0}, FULL | {"holding_days": 14.1}),
    "usual ranges": (FULL, FULL | {"ph": 2.9}),
}


@pytest.mark.parametrize("name", CASES)
def test_check_met_and_broken(name):
    """One lake meets it, another breaks it and says so in its row."""
    met, broken = CASES[name]
    found = assessed(met, broken)
    check = next(c for c in found.checks if c.name == name)
    assert_array_equal(np.isfinite(check.value), [True, True])
    assert_array_equal(check.met, [True, False])
    assert [name in words.split("; ") for words in found.results["failed_checks"]] == [False, True]
    assert (found.made[name], found.unmet[name]) == (2, 1)


def test_every_check_is_in_a_table_and_tested_here():
    """Words, remedy and source of each come from the shipped tables."""
    names = [c.name for c in assessed(FULL).checks]
    assert set(names) == {*CASES, "own history"}
    assert set(names) <= set(check_facts())
    assert {row["name"] for row in read_table("lake_checks")} <= set(names)


@pytest.mark.parametrize(("name", "gone"), [
    ("ion balance", "sodium_mol_l"), ("ion balance with organic anions", "sulfate_mol_l"),
    ("conductivity", "conductivity_us_cm"),
    ("conductivity", "calcium_mol_l"), ("pH against alkalinity", "ph"), ("pH against alkalinity", "anc_eq_l"),
    ("alkalinity against pH and carbon", "ph"), ("alkalinity against pH and carbon", "dic_mol_l"),
    ("alkalinity against pH and carbon", "anc_eq_l"), ("ANC by charge against titration", "nitrate_mol_l"),
    ("ANC by charge against titration", "doc_mg_l"),
    ("sea salt", "chloride_mol_l"), ("CO2 pressure", "temperature_c"), ("temperature", "temperature_c"),
])
def test_check_without_its_reading_is_not_made(name, gone):
    """Neither met nor broken; the lake beside is checked all the same."""
    check = check_of(name, FULL, FULL | {gone: np.nan})
    assert_array_equal(np.isfinite(check.value), [True, False])


@pytest.mark.parametrize("name", ["pH at air", "holding time", "own history"])
def test_checks_of_readings_seldom_given(name):
    """No reading, no check."""
    assert np.isnan(check_of(name, FULL).value).all()


@pytest.mark.parametrize(("factor", "allowed_percent"), [(0.15, 60.0), (0.3, 30.0), (1.0, 15.0)])
def test_limits_of_the_balance_follow_the_total(factor, allowed_percent):
    """Below 50, up to 100 and above 100 µeq/L of all ions (Hillman et al. 1986, recalled)."""
    row = HAWK | {"ph": 7.0, "dic_mol_l": 1e-8} | ions(**{ion: factor * v for ion, v in HAWK_POND.items()})
    check = check_of("ion balance", row)
    assert_array_equal([check.low, check.high], [[-allowed_percent], [allowed_percent]])


def test_conductivity_of_a_lake_by_hand():
    """Sum of the survey's equivalent conductivities with H+ and HCO3-, times the square of a Davies coefficient."""
    row = FULL | {"ionic_strength_mol_l": STRENGTH}
    hydrogen, bicarbonate = HAND.c_h * 10.0**-6.5, 80e-6 * HAND.shares(6.5)[1]
    charges = {"calcium": 80, "magnesium": 30, "sodium": 40, "potassium": 5, "ammonium": 2, "sulfate": 65, "nitrate": 5,
               "chloride": 25}
    dilute = 1e-3 * sum(LAMBDA[ion] * v for ion, v in charges.items()) + 1e3 * (349.65 * hydrogen + 44.5 * bicarbonate)
    s = np.sqrt(STRENGTH)
    by_hand = dilute * 10.0 ** -(s / (1.0 + s) - 0.3 * STRENGTH)
    found = assessed(row).results.iloc[0]
    assert_allclose(found["conductivity_calculated_us_cm"], by_hand, rtol=0, atol=0.01)
    assert_allclose(found["conductivity_percent"], 100.0 * (by_hand / 22.0 - 1.0), rtol=0, atol=0.05)


def test_conductivity_of_zero_is_no_check():
    """A meter that reads nothing measured nothing."""
    assert np.isnan(check_of("conductivity", FULL | {"conductivity_us_cm": 0.0}).value).all()


def test_carbonate_left_by_the_ph():
    """Titrated ANC + OH- and H+ of the pH, in meq/L, for a clear lake; at most twice its uncertainty below zero."""
    row = without(FULL, "doc_mg_l", "aluminum_mol_l") | {"ionic_strength_mol_l": STRENGTH, "anc_u_eq_l": 3e-6,
                                                         "ph_u": 0.0}
    check = check_of("pH against alkalinity", row)
    left = 40e-6 - HAND.c_oh * 10.0**6.5 + HAND.c_h * 10.0**-6.5
    assert_allclose(check.value, 1e3 * left, rtol=1e-3)
    assert_allclose(check.low, -2.0 * 3e-3, rtol=1e-9)
    assert check.high == np.inf


@pytest.mark.parametrize("named", ["anc", "alkalinity"])
def test_titration_against_ph_and_carbon(named):
    """Clear water: 40 µeq/L less what pH 6.5 and 80 µmol/L make by printed constants, in meq/L; all three uncertain."""
    row = without(FULL, "doc_mg_l", "aluminum_mol_l", "anc_eq_l", "anc_method") | {
        "ionic_strength_mol_l": STRENGTH, f"{named}_eq_l": 40e-6, f"{named}_u_eq_l": 3e-6, "ph_u": 0.04,
        "dic_u_mol_l": 2e-6}
    check = check_of("alkalinity against pH and carbon", row)
    _, a1, a2 = HAND.shares(6.5)
    u = np.sqrt(3e-6**2 + ((a1 + 2.0 * a2) * 2e-6) ** 2 + (HAND.buffer(6.5, 80e-6) * 0.04) ** 2)
    assert_allclose(check.value, 1e3 * (40e-6 - HAND.alkalinity(6.5, 80e-6)), rtol=0, atol=2e-4)
    assert_allclose([check.low, check.high], 2e3 * u * np.array([[-1.0], [1.0]]), rtol=5e-3)


def test_organic_anions_make_that_comparison_wider():
    """15 % of those that the titration counts between pH 6.5 and the foot of its tangent at 4.5, twice; mass action.

    Hruska et al. 2003, second set of pK (recalled), 3 mg/L of carbon; all readings exact.
    """
    def organic(ph):
        h = 10.0**-ph
        w = np.array([1.0, 10.0**-3.04 / h, 10.0**-7.46 / h**2, 10.0**-14.16 / h**3])
        return 3.0 * 3.4e-6 * (w @ np.arange(4)) / w.sum()

    h, d = 10.0**-4.5, 1e-9
    foot = organic(4.5) - h * (organic(-np.log10(h + d)) - organic(-np.log10(h - d))) / (2.0 * d)
    row = without(FULL, "aluminum_mol_l") | {"anc_u_eq_l": 0.0, "ph_u": 0.0, "dic_u_mol_l": 0.0}
    check = check_of("alkalinity against pH and carbon", row)
    assert_allclose(check.high, 2e3 * 0.15 * (organic(6.5) - foot), rtol=1e-4)


def test_ph_of_bubbled_water():
    """Clear water with the CO2 of 1000 ppm in dry air, at the temperature of a laboratory: between 10 and 25 °C.

    Worked out at 25 °C from printed constants; the pH there differs from that at BUBBLED_T_C by less than 0.03.
    """
    warm = BareWater(25.0, STRENGTH)
    co2 = 1000e-6 * (1.0 - 3.1690 / 101.325) * warm.k0
    row = without(FULL, "doc_mg_l", "aluminum_mol_l") | {"ionic_strength_mol_l": STRENGTH, "ph_air_equilibrated": 6.0,
                                                         "equilibration_co2_ppm": 1000.0}
    check = check_of("pH at air", row)
    assert 20.0 <= BUBBLED_T_C <= 25.0
    assert_allclose(check.value, warm.ph_at_co2(40e-6, co2) - 6.0, rtol=0, atol=0.03)
    assert_allclose(check.low, -np.asarray(check.high), rtol=1e-12)
    assert np.all(check.high > 2.0 * 0.05)  # the meter's own, twice


def test_fixed_limits_come_from_the_table():
    """Values and words of a check whose limits are the same for all."""
    check = fixed_check("sea salt", np.array([0.0, 1.0, np.nan]))
    assert (check.low, check.high) == (-np.inf, 0.0)
    assert_array_equal(check.met, [True, False, False])
    facts = check_facts()
    assert allowed(facts["sea salt"]).endswith(": at most 0 ions")
    assert allowed(facts["ion balance with organic anions"]) == facts["ion balance with organic anions"]["limit_words"]


def test_table_of_checks():
    """Names the ions that fell below zero; a check that is met has no remedy."""
    found = assessed(FULL, FULL | ions(chloride=250.0))
    table = check_rows(found.checks, found.frame, only_unmet=False)
    rows = table[table["check"] == "sea salt"].set_index("sample_id")
    assert list(rows["met"]) == ["yes", "no"]
    assert rows.loc["s0", "remedy"] == ""
    # of 250 µeq/L of chloride 214.8 sodium and 49 magnesium
    assert rows.loc["s1", "remedy"].endswith((": sodium; magnesium", ": magnesium; sodium"))
    assert rows.loc["s1", "value"] == 2.0
    assert rows.loc["s1", "source"] == "equivalent ratios of sea water"


# ------------------------------------------------------------------ own history


#          median 100, distances 0 0 1 1 2 2 3 3 and one far: robust deviation 1.4826 x 2 = 2.9652
SULFATE = np.array([100.0, 102.0, 98.0, 101.0, 99.0, 100.0, 103.0, 97.0, 160.0])


def history(keys, **columns):
    """How many readings of each row lie far from the lake's own, and which."""
    n = len(keys)
    table = pd.DataFrame({name: columns.get(name, np.full(n, np.nan)) for name in HISTORY_COLUMNS})
    count, names = own_history(table, np.array(keys, dtype=object))
    return count, list(names)


def test_planted_outlier_is_found():
    """It and nothing else, with its column."""
    count, names = history(["a"] * 9, sulfate_ueq_l=SULFATE)
    assert_array_equal(count, [0] * 8 + [1])
    assert names == [""] * 8 + ["sulfate_ueq_l"]


@pytest.mark.parametrize(("last", "far"), [(114.82, 0), (114.83, 1), (85.18, 0), (85.17, 1)])
def test_five_robust_deviations(last, far):
    """5 x 1.4826 x 2 = 14.826 on either side of the median."""
    count, _ = history(["a"] * 9, sulfate_ueq_l=np.append(SULFATE[:8], last))
    assert count[-1] == far
    assert not count[:8].any()


@pytest.mark.parametrize(("last", "far"), [(6.49, 0), (6.51, 1)])
def test_rounding_is_no_finding(last, far):
    """Readings that are all the same leave a tenth of the unit as deviation: half a pH is far, less is not."""
    count, _ = history(["a"] * 9, ph=np.append(np.full(8, 6.0), last))
    assert count[-1] == far


def test_few_samples_are_left_alone():
    """Seven of one lake, and rows without a lake, cannot be judged; missing readings do not count as samples."""
    keys = ["a"] * 7 + [""] * 9 + ["b"] * 9
    sulfate = np.concatenate([SULFATE[2:], SULFATE, SULFATE])
    count, names = history(keys, sulfate_ueq_l=sulfate)
    assert_array_equal(np.isnan(count), [True] * 16 + [False] * 9)
    assert names[:24] == [""] * 24
    assert count[24] == 1
    few = np.where(np.arange(9) < 2, np.nan, SULFATE)
    count, names = history(["a"] * 9, sulfate_ueq_l=few)  # nine samples, seven with sulfate
    assert_array_equal(count, np.zeros(9))


def test_lakes_and_columns_do_not_see_each_other():
    """Rows of two lakes mixed; two columns far in one row are both told."""
    keys = ["a", "b"] * 9
    sulfate = np.repeat(SULFATE, 2)
    sulfate[1::2] += 400.0
    ph = np.full(18, 6.0)
    ph[16] = 4.0
    count, names = history(keys, sulfate_ueq_l=sulfate, ph=ph)
    assert_array_equal(count, [0] * 16 + [2, 1])
    assert names[16:] == ["ph, sulfate_ueq_l", "sulfate_ueq_l"]


def test_history_of_an_assessed_survey():
    """Nine samples of one lake, one with ten times its sulfate: told in the row, with the column, as a broken check."""
    rows = [FULL | {"site": "Tarn", "date": f"2001-0{k + 1}-15"} | ions(sulfate=65.0 + k % 3) for k in range(8)]
    found = assessed(*rows, FULL | {"site": "Tarn", "date": "2001-09-15"} | ions(sulfate=650.0))
    assert ["own history" in words for words in found.results["failed_checks"]] == [False] * 8 + [True]
    check = next(c for c in found.checks if c.name == "own history")
    assert "sulfate_ueq_l" in check.detail[8].split(", ")


def test_conductivity_function_is_the_one_of_the_samples():
    """One sum for both rooms: the lake's known ions by it."""
    sums = sums_of(HAWK)
    charges = {ion: np.array([v * 1e-6]) for ion, v in HAWK_POND.items()} | {
        "hydrogen": np.array([H]), "bicarbonate": np.array([HCO3])}
    assert_allclose(sums.known, conductivity_of_ions(charges, np.zeros(1)), rtol=0, atol=2e-3)

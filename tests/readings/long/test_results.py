"""Single results: what each unit, speciation and detection condition gives, and which words refuse a result."""

import math
import re

import pytest
from numpy.testing import assert_allclose
from wqx_rows import PH, result

from aquabuf.readings.long.parse import ESTIMATED
from aquabuf.readings.result import BELOW_DETECTION

# molar masses: IUPAC; CaCO3 100.086 g/mol carries two equivalents
N, NO3, SO4, S, CA, AL, SI, SIO2, CACO3 = 14.007, 62.004, 96.056, 32.06, 40.078, 26.982, 28.085, 60.083, 100.086


@pytest.mark.parametrize(
    ("row", "column", "expected"),
    [
        (result("Temperature, water", "50", "deg F"), "temperature_c", 10.0),
        (result("Temperature, water", "10", "deg C"), "temperature_c", 10.0),
        (result("Specific conductance", "25", "uS/cm @25C"), "conductivity_us_cm", 25.0),
        (result("Specific conductance", "25", "umho/cm"), "conductivity_us_cm", 25.0),
        (result("Acid Neutralizing Capacity (ANC)", "-35", "ueq/L"), "anc_eq_l", -35e-6),
        (result("Gran acid neutralizing capacity", "10", "mg/l CaCO3"), "anc_eq_l", 10 * 2 / CACO3 / 1e3),
        (result("Alkalinity, total", "10", "mg/l", speciation="as CaCO3"), "alkalinity_eq_l", 10 * 2 / CACO3 / 1e3),
        (result("Alkalinity, total", "0.5", "meq/L", speciation="as CaCO3"), "alkalinity_eq_l", 0.5e-3),
        (result("Calcium", "4", "mg/l", fraction="Dissolved"), "calcium_mol_l", 4e-3 / CA),
        (result("Calcium", "4", "mg/l", speciation="as CaCO3"), "calcium_mol_l", 4e-3 / CACO3),
        (result("Sulfate", "3", "mg/l"), "sulfate_mol_l", 3e-3 / SO4),
        (result("Sulfate", "3", "mg/l", speciation="as SO4"), "sulfate_mol_l", 3e-3 / SO4),
        (result("Sulfate", "3", "mg/l", speciation="as S"), "sulfate_mol_l", 3e-3 / S),
        (result("Nitrate", "2", "mg/l", speciation="as N"), "nitrate_mol_l", 2e-3 / N),
        (result("Nitrate", "2", "mg/l as N"), "nitrate_mol_l", 2e-3 / N),
        (result("Nitrate", "2", "mg/l as N", speciation="as N"), "nitrate_mol_l", 2e-3 / N),
        (result("Nitrate", "2", "mg/l", speciation="as NO3"), "nitrate_mol_l", 2e-3 / NO3),
        (result("Nitrate", "2", "umol/L", speciation="as N"), "nitrate_mol_l", 2e-6),
        # the name says nitrogen; the words after "as" win over it
        (result("Inorganic nitrogen (nitrate and nitrite)", "2", "mg/l"), "nitrate_mol_l", 2e-3 / N),
        (result("Inorganic nitrogen (nitrate and nitrite)", "2", "mg/l", speciation="as NO3"), "nitrate_mol_l", 2e-3 / NO3),
        (result("Ammonia-nitrogen", "0.1", "mg/l"), "ammonium_mol_l", 0.1e-3 / N),
        (result("Silica", "5", "mg/l"), "silica_mol_l", 5e-3 / SIO2),
        (result("Silica", "5", "mg/l", speciation="as Si"), "silica_mol_l", 5e-3 / SI),
        (result("Aluminum", "20", "ug/l", fraction="Dissolved"), "aluminum_mol_l", 20e-6 / AL),
        (result("Organic carbon", "4.5", "mg/l", fraction="Dissolved"), "doc_mg_l", 4.5),
        (result("True color", "40", "PCU"), "color_pt_co", 40.0),
        (result("Turbidity", "1.5", "NTRU"), "turbidity_ntu", 1.5),
        (result("  temperature,  WATER ", " 10 ", " deg C "), "temperature_c", 10.0),
        (result("Calcium", "4", "mg/l", depth="3", depth_unit="ft"), "depth_m", 3 * 0.3048),
    ],
    ids=lambda value: f"{value['what']} {value['unit']} {value['speciation']}" if isinstance(value, dict) else None,
)
def test_a_result_in_house_units(read, row, column, expected):
    """The value of each is the conversion written out here."""
    readings = read(row)
    assert readings.rejected.empty, readings.rejected.to_string()
    assert_allclose(readings.frame[column], [expected], rtol=1e-12)


@pytest.mark.parametrize("unit", ["None", "", "std units"])
def test_ph_without_a_unit(read, unit):
    """A scale without a unit may say so in words or not at all."""
    assert read(result("pH", "6.5", unit)).frame["ph"].tolist() == [6.5]


@pytest.mark.parametrize(
    ("row", "value", "rule", "remedy"),
    [
        (result("Calcium", "few", "mg/l"), "few", "must be a number", "units belong in the column of units"),
        (result("Calcium", "2,870", "mg/l"), "2,870", "thousands separators are not read", "1234.5"),
        (result("Calcium", "-3", "mg/l"), "-3", "must be 0 to 400780 mg/L", "cannot be below zero"),
        (result("Calcium", "1e9", "mg/l"), "1e9", "must be 0 to 400780 mg/L", "check the unit in the column of units"),
        (result("pH, lab", "74"), "74", "must be -1 to 15", r"is it 7\.4\? Check the decimal sign"),
        (result("Chloride", "3", "mg/g"), "3", "'mg/g' is not a unit of chloride", r"use one of: .*mg/L.*under \[units\]"),
        (result("Chloride", "3"), "3", "a result of chloride needs a unit", "use one of: .*mg/L"),
        (result("Nitrate", "3", "mg/l"), "3", "mg/L of nitrate can mean as N or as NO3, which are different amounts",
         "fill in the speciation, or say as = 'N'"),
        (result("Alkalinity, total", "3", "mg/l"), "3", "can mean as CaCO3 or as HCO3", "fill in the speciation"),
        (result("Nitrate", "3", "mg/l as N", speciation="as NO3"), "3", "the unit says as N and the speciation says as NO3",
         "correct one of the two"),
        (result("Nitrate", "3", "mg/l", speciation="as nitrogen gas"), "3", "the speciation 'as nitrogen gas' names no known",
         "nitrate can have: as N, as NO3"),
        (result("Nitrate", "3", "mg/l", speciation="as P"), "3", "nitrate cannot be given in mg/L as P, because it is not given as P",
         "use one of: "),
        (result("Nitrate", "3", "umol/L", speciation="as P"), "3", "nitrate is not given as P", "correct the speciation"),
        (result("Alkalinity, total", "3", "mmol/L", speciation="as CaCO3"), "3",
         "mmol/L as CaCO3 does not tell whether atoms or equivalents are counted", "use meq/L or mg/L"),
        (result("Orthophosphate", "3", "ueq/L"), "3", "its charge is zero or depends on pH", "use one of: "),
        (result("Calcium", condition="Not Detected"), "Not Detected", "a value below detection needs its limit",
         "fill in the detection limit and its unit"),
        (result("Calcium", "0.02", "mg/l", condition="Not Detected"), "0.02", "a value below detection needs its limit", "limit"),
        (result("Calcium", condition="Not Detected", limit="0.02"), "Not Detected", "a result of calcium needs a unit", "use one"),
        (result("Calcium", condition="Not Detected", limit="0.02", limit_unit="furlong"), "Not Detected",
         "'furlong' is not a unit of calcium", "use one of"),
        (result("Calcium", condition="Not Detected", limit="-1", limit_unit="mg/l"), "<-1", "a detection limit must be above zero",
         "leave it blank"),
        (result("Acid Neutralizing Capacity (ANC)", condition="Not Detected", limit="5", limit_unit="ueq/L"), "<5",
         "'<' has no use for anc", "enter the value itself"),
        (result("Calcium", "9", "mg/l", condition="Present Above Quantification Limit"), ">9",
         "a value above the range of the method is not a number", "enter the diluted result"),
        (result("Calcium", "9", "mg/l", condition="Misty"), "9", "the detection condition 'Misty' is not known",
         r"list it under \[detection\]"),
        (result("Calcium", condition="Not Detected", limit="*Non-detect", limit_unit="mg/l"), "Not Detected",
         "a value below detection needs its limit", "limit"),
        (result("Calcium", "*Present >QL", limit="9", limit_unit="mg/l"), ">9", "a value above the range of the method", "diluted"),
        (result("Calcium", condition="Misty"), "Misty", "the detection condition 'Misty' is not known", "correct it"),
    ],
    ids=lambda value: value["what"] if isinstance(value, dict) else None,
)  # fmt: skip
def test_a_bad_result_is_refused_and_its_sample_stays(refused, row, value, rule, remedy):
    """Row of the result, name, characteristic, value, rule and remedy."""
    line = refused(row)
    assert line["value"] == value
    assert rule in line["rule"]
    assert re.search(remedy, line["remedy"])


@pytest.mark.parametrize(
    ("row", "cell"),
    [
        (result("Calcium", condition="Not Detected", limit="4", limit_unit="mg/l"), "<4"),
        (result("Calcium", "0", "mg/l", condition="Not Detected", limit="4", limit_unit="mg/l"), "<4"),
        (result("Calcium", unit="mg/l", condition="not detected", limit="4"), "<4"),  # the limit in the unit of the result
        (result("Calcium", "9", "ug/l", condition="Not Detected", limit="4", limit_unit="mg/l"), "<4"),
        (result("Calcium", "<4", "mg/l"), "<4"),
        (result("Calcium", "<4", "mg/l", condition="Not Detected"), "<4"),
        (result("Calcium", "<4", "mg/l", condition="Not Detected", limit_unit="ug/l"), "<4"),
        (result("Calcium", "*Non-detect", limit="4", limit_unit="mg/l"), "<4"),  # the word stands in place of the value
        (result("Calcium", condition="Present Below Quantification Limit", limit="4", limit_unit="mg/l"), "<4"),
        (result("Calcium", condition="Not Detected", limit="< 4", limit_unit="mg/l"), "<4"),
    ],
)
def test_below_detection_is_half_the_limit(read, row, cell):
    """A value evenly likely from 0 to x has mean x/2 and standard deviation x/sqrt(12); flagged at the sample."""
    readings = read(PH, row)
    assert readings.rejected.empty
    assert_allclose(readings.frame["calcium_mol_l"] * CA * 1e3, [2.0])
    assert_allclose(readings.frame["calcium_u_mol_l"] * CA * 1e3, [4 / math.sqrt(12)])
    assert readings.below_detection("calcium_mol_l").tolist() == [True]
    assert readings.flags.values.tolist() == [[2, "ORG_A", "calcium_mol_l", cell, BELOW_DETECTION]]


def test_several_words_in_place_of_values(read):
    """Each keeps its own meaning, also beside one in the column of conditions, which then counts."""
    readings = read(
        PH,
        result("Calcium", "*Non-detect", limit="4", limit_unit="mg/l"),
        result("Magnesium", "*Present >QL", limit="5", limit_unit="mg/l"),
        result("Sodium", "*Not Reported", limit="6", limit_unit="mg/l"),
        result("Potassium", "*Not Reported", condition="Not Detected", limit="7", limit_unit="mg/l"),
    )
    assert readings.flags[["column", "value"]].values.tolist() == [["calcium_mol_l", "<4"], ["potassium_mol_l", "<7"]]
    assert readings.rejected[["column", "value"]].values.tolist() == [["Magnesium", ">5"]]
    assert "1 results have no value" in readings.notes


def test_an_estimate_is_used_and_said_to_be_one(read):
    """Between detection and quantification limit the laboratory gives a number, and it is the best there is."""
    row = result("Calcium", "3", "mg/l", condition="Present Below Quantification Limit", limit="4", limit_unit="mg/l")
    readings = read(PH, row)
    assert_allclose(readings.frame["calcium_mol_l"] * CA * 1e3, [3.0])
    assert "calcium_u_mol_l" not in readings.frame
    assert readings.flags.values.tolist() == [[2, "ORG_A", "calcium_mol_l", "3", ESTIMATED]]


@pytest.mark.parametrize("row", [
    result("Calcium", "", "mg/l"), result("Calcium", "NA", "mg/l"), result("Calcium", "", ""),
    result("Calcium", "", "furlong"), result("Calcium", "4", "mg/l", condition="Not Reported"),
    result("Calcium", "*Not Reported", ""),
])  # fmt: skip
def test_a_result_without_a_value_is_no_error(read, row):
    """It is missing, and counted."""
    readings = read(PH, row)
    assert readings.rejected.empty
    assert readings.frame["ph"].tolist() == [7.1]
    assert readings.frame["calcium_mol_l"].isna().all()
    assert "1 results have no value" in readings.notes


def test_negative_values_as_the_map_says(read):
    """Zero, missing, or refused by the limit, and noted like in a wide table."""
    rows = [PH, result("Ammonium", "-2", "ueq/L")]
    assert read(*rows).rejected["rule"].str.startswith("must be 0 to").all()
    own = 'base = "wqx"\n[characteristics]\n"Ammonium" = { is = "ammonium", negative = "%s" }\n'
    zero = read(*rows, by=own % "zero")
    assert zero.frame["ammonium_mol_l"].tolist() == [0.0]
    missing = read(*rows, by=own % "missing")
    assert missing.frame["ammonium_mol_l"].isna().tolist() == [True]
    found = [readings.flags[["column", "value", "what"]].values.tolist() for readings in (zero, missing)]
    assert found == [[["ammonium_mol_l", "-2", f"below zero, {what}"]] for what in ("set to zero", "left out")]


def test_results_per_kilogram_take_the_density_of_their_sample(read):
    """2000 µmol/kg times the density in kg/L; where temperature is missing, fresh water at 20 °C, and it is said."""
    rows = [
        result("Alkalinity, total", "2000", "umol/kg"),
        result("Alkalinity, total", "2000", "umol/kg", id="B"),
        result("Temperature, water", "4", "deg C"),
        result("pH", "7", id="C"),
    ]
    readings = read(*rows)
    # density of pure water: 0.999975 at 4 °C, 0.998207 at 20 °C (CRC Handbook, recalled)
    assert_allclose(readings.frame["alkalinity_eq_l"], [2e-3 * 0.999975, 2e-3 * 0.998207, math.nan], rtol=3e-5)
    assert readings.headers["Alkalinity, total"] == ("alkalinity_eq_l", "µmol/kg")
    said = readings.flags[readings.flags["what"].str.startswith("no temperature")]
    assert said["sample_id"].tolist() == ["ORG_B"]


def test_a_fill_leaves_measured_values_alone(read):
    """Also those per kilogram, which are worked out last; a filled temperature serves their density."""
    own = 'base = "wqx"\n[fill]\ntemperature_c = 4\n"alkalinity (meq/L)" = 5\n'
    readings = read(result("Alkalinity, total", "2000", "umol/kg"), result("pH", "7", id="B"), by=own)
    # density of pure water: 0.999975 at 4 °C (CRC Handbook, recalled)
    assert_allclose(readings.frame["alkalinity_eq_l"], [2e-3 * 0.999975, 5e-3], rtol=3e-5)
    assert readings.frame["temperature_c"].tolist() == [4, 4]

"""The invented lake survey of field_data, read by the shipped map; expected values from its raw text and its design."""

import csv
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose
from wqx_rows import HEADERS

from aquabuf.readings.long.choose import DIFFERS_RULE
from aquabuf.readings.result import BELOW_DETECTION, join_readings
from aquabuf.readings.source import open_any

LAKES = Path(__file__).parents[3] / "field_data" / "lake_results_long.csv"
FACTORS = {  # house unit per unit of the file; molar masses of IUPAC
    "pH": ("ph", 1), "Temperature, water": ("temperature_c", 1), "Specific conductance": ("conductivity_us_cm", 1),
    "Acid Neutralizing Capacity (ANC)": ("anc_eq_l", 1e-6), "Calcium": ("calcium_mol_l", 1e-3 / 40.078),
    "Magnesium": ("magnesium_mol_l", 1e-3 / 24.305), "Sodium": ("sodium_mol_l", 1e-3 / 22.990),
    "Potassium": ("potassium_mol_l", 1e-3 / 39.098), "Sulfate": ("sulfate_mol_l", 1e-3 / 96.056),
    "Chloride": ("chloride_mol_l", 1e-3 / 35.45), "Organic carbon": ("doc_mg_l", 1), "True color": ("color_pt_co", 1),
    "Aluminum": ("aluminum_mol_l", 1e-6 / 26.982), "Ammonia-nitrogen": ("ammonium_mol_l", 1e-3 / 14.007),
    "Inorganic nitrogen (nitrate and nitrite)": ("nitrate_mol_l", 1e-3 / 14.007),
}  # fmt: skip
WRONG = {  # lake -> characteristic, value: wrong on purpose
    "Lower Tarn": ("Magnesium", "0.61"), "High Water": ("Nitrate", "0.055"), "Quarry Pond": ("pH", "65"),
    "Mill Pond": ("Chloride", "11.0"),
}  # fmt: skip


def raw():
    """Rows by short names with their line in the file."""
    short = {header: name for name, header in HEADERS.items()}
    lines = LAKES.read_text(encoding="utf-8").splitlines()
    assert all(line.startswith("# ") for line in lines[:2])
    assert "Invented data" in lines[0]
    rows = csv.DictReader(lines[2:])
    return [{short[name]: cell for name, cell in row.items()} | {"line": 4 + n} for n, row in enumerate(rows)]


@pytest.fixture(scope="module")
def lakes():
    """The survey by the shipped map."""
    return join_readings(open_any(LAKES, "wqx"))


def test_one_row_per_lake(lakes):
    """Twelve lakes, none of them from the blank; the late results of the second laboratory find their sample."""
    rows = [row for row in raw() if row["type"] == "Sample-Routine"]
    sites = list(dict.fromkeys(row["site"] for row in rows))
    assert (len(sites), lakes.frame["site"].tolist()) == (12, sites)
    assert lakes.frame["row"].tolist() == [min(row["line"] for row in rows if row["site"] == site) for site in sites]
    assert lakes.frame["date_parsed"].dt.month.eq(9).all()
    assert lakes.frame["depth_m"].eq(0.5).all()


@pytest.mark.parametrize("what", FACTORS)
def test_each_number_is_that_of_the_file(lakes, what):
    """The cell times the factor, or half the limit; nothing else gets in."""
    column, factor = FACTORS[what]
    found = lakes.frame.set_index("site")[column].to_dict()
    expected = dict.fromkeys(found, np.nan)
    for row in raw():
        wrong = WRONG.get(row["site"]) == (what, row["value"])
        counts = row["type"] == "Sample-Routine" and row["status"] == "Final" and row["fraction"] != "Total"
        if row["what"] == what and (counts or what.startswith("Acid")) and not wrong:
            assert np.isnan(expected[row["site"]]), "the file has it once"
            not_found = row["condition"] == "Not Detected"
            expected[row["site"]] = float(row["limit"]) / 2 * factor if not_found else float(row["value"]) * factor
    assert_allclose(list(found.values()), list(expected.values()), rtol=1e-12)


def test_what_is_wrong_on_purpose(lakes):
    """Four results, each at another lake, and every lake stays."""
    listed = lakes.rejected.merge(lakes.frame[["sample_id", "site"]])
    assert {site: (what, value) for site, what, value in listed[["site", "column", "value"]].values.tolist()} == WRONG
    by_row = {row["line"]: row["value"] for row in raw()}
    assert [by_row[row] for row in lakes.rejected["row"]] == lakes.rejected["value"].tolist()
    rules = dict(listed[["site", "rule"]].values.tolist())
    assert rules["Lower Tarn"] == DIFFERS_RULE
    assert "as N or as NO3" in rules["High Water"]
    assert rules["Quarry Pond"] == "must be -1 to 15"
    assert rules["Mill Pond"] == "'mg/g' is not a unit of chloride"


def test_what_is_left_out_and_noticed(lakes):
    """A blank, a replicate, a result the laboratory took back, a characteristic that plays no part."""
    rows = raw()
    assert "5 rows left out by ActivityTypeCode: Quality Control Sample-Field Blank (4), Quality Control Field Replicate Msr/Obs (1)" in lakes.notes
    assert "1 rows left out by ResultStatusIdentifier: Rejected (1)" in lakes.notes
    assert "2 results of 1 characteristics left out, which the map does not name: Phosphorus (2)" in lakes.notes
    halved = sum(row["condition"] == "Not Detected" and row["type"] == "Sample-Routine" for row in rows)
    assert (lakes.flags["what"] == BELOW_DETECTION).sum() == halved


def test_charges_balance_in_clear_water(lakes):
    """ANC is what base cations have over strong acid anions (charge balance), where organic acids and metals are few."""
    f = lakes.frame
    cations = 2 * f["calcium_mol_l"] + 2 * f["magnesium_mol_l"] + f["sodium_mol_l"] + f["potassium_mol_l"] + f["ammonium_mol_l"]
    anions = 2 * f["sulfate_mol_l"] + f["nitrate_mol_l"] + f["chloride_mol_l"]
    clear = (f["doc_mg_l"] < 5) & (f["anc_eq_l"] > 4e-5) & anions.notna()
    assert clear.sum() >= 5
    # noise of 1.5 % in each ion, and up to 10 µeq of organic acid per mg of carbon (Oliver, Thurman & Malcolm 1983)
    gap = (cations - anions - f["anc_eq_l"])[clear]
    assert (gap.abs() < 0.03 * cations[clear] + 1e-5 * f["doc_mg_l"][clear]).all()


def test_visits_give_the_same_numbers(lakes):
    """Here place and day make the same samples; only their names differ."""
    visits = join_readings(open_any(LAKES, "wqx_visit"))
    assert visits.frame["sample_id"][0] == "AMBREL_Raven Tarn_2024-09-10"
    assert visits.frame.drop(columns="sample_id").equals(lakes.frame.drop(columns="sample_id"))

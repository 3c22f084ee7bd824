"""The ion table: masses from atomic weights, charges, conductivities and activity parameters."""

import csv
import os
import re
from collections import Counter
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose
from published_rows import read_rows

from aquabuf.tables import read_table

IONS = {row["name"]: row for row in read_table("ions")}
ROWS = read_rows("ion_properties")

# IUPAC abridged standard atomic weights 2021 (recalled).
ATOMIC_WEIGHT = {
    "H": 1.008, "Li": 6.94, "B": 10.81, "C": 12.011, "N": 14.007, "O": 15.999, "F": 18.998, "Na": 22.990,
    "Mg": 24.305, "Al": 26.982, "Si": 28.085, "P": 30.974, "S": 32.06, "Cl": 35.45, "K": 39.098, "Ca": 40.078,
    "Mn": 54.938, "Fe": 55.845, "Cu": 63.546, "Zn": 65.38, "Br": 79.904, "Sr": 87.62, "Ba": 137.327, "Pb": 207.2,
}
# Charges of the free ions in natural water (general chemistry); forms whose charge depends on pH have none.
CHARGE = {
    "hydrogen": 1, "hydroxide": -1, "calcium": 2, "magnesium": 2, "sodium": 1, "potassium": 1, "ammonium": 1,
    "chloride": -1, "sulfate": -2, "nitrate": -1, "nitrite": -1, "fluoride": -1, "bicarbonate": -1, "carbonate": -2,
    "bromide": -1, "lithium": 1, "strontium": 2, "barium": 2, "iron": 2, "manganese": 2, "zinc": 2, "copper": 2,
    "lead": 2, "aluminum": 3, "dihydrogen phosphate": -1, "hydrogen phosphate": -2, "bisulfate": -1, "bisulfide": -1,
    "acetate": -1, "formate": -1, "propionate": -1, "butyrate": -1, "lactate": -1, "benzoate": -1,
}
# Lake 1A1-003 of the EPA Eastern Lake Survey 1984 [µeq/L] and the agency's calculated conductivity [µS/cm], printed.
LAKE_UEQ_L = {
    "hydrogen": 16.2181, "calcium": 59.281, "magnesium": 16.287, "sodium": 17.487, "potassium": 6.341,
    "ammonium": 5.156, "sulfate": 132.457, "nitrate": 9.775, "chloride": 8.040, "fluoride": 2.853, "bicarbonate": 0.882,
}
LAKE_CONDUCTIVITY_US_CM = 23.886


def _atoms(formula):
    """Atoms of a formula, one level of parentheses opened first."""
    opened = re.sub(r"\(([^)]*)\)(\d*)", lambda m: m.group(1) * int(m.group(2) or 1), formula)
    atoms = Counter()
    for symbol, count in re.findall(r"([A-Z][a-z]?)(\d*)", opened):
        atoms[symbol] += int(count or 1)
    return atoms


@pytest.mark.parametrize("name", IONS)
def test_molar_mass_is_the_sum_of_atomic_weights(name):
    """The formula and the mass of each row agree to the last printed digit."""
    expected = sum(ATOMIC_WEIGHT[symbol] * count for symbol, count in _atoms(IONS[name]["formula"]).items())
    assert_allclose(float(IONS[name]["molar_mass_g"]), expected, rtol=0, atol=0.00055)


def test_charges_are_those_of_the_free_ions():
    """Each charged row has the charge of general chemistry; no charged row is left unchecked."""
    charges = {name: int(row["charge"]) for name, row in IONS.items() if row["charge"] not in ("", "0")}
    assert charges == CHARGE


def test_molecules_are_uncharged_by_their_formula():
    """Rows of charge zero conduct nothing."""
    assert [name for name, row in IONS.items() if row["charge"] == "0" and row["conductivity_s_cm2_eq"]] == []


@pytest.mark.parametrize("row", ROWS, ids=lambda r: f"{r['ion']}-{r['quantity']}")
def test_ion_property_matches_its_source(row):
    """Equivalent conductivities and activity parameters reproduce their sources."""
    assert_allclose(float(IONS[row["ion"]][row["quantity"]]), float(row["expected"]), rtol=0, atol=float(row["atol"]))


def test_every_ion_property_has_a_published_row():
    """A number that nobody checked cannot be shipped."""
    shipped = {(name, key) for name, row in IONS.items() for key in ("conductivity_s_cm2_eq", "tj_a", "tj_b") if row[key]}
    assert shipped - {(row["ion"], row["quantity"]) for row in ROWS} == set()


def test_lake_conductivity_is_the_agency_s():
    """Sum of equivalent conductivity times concentration at infinite dilution, as the agency calculated it."""
    total = sum(float(IONS[name]["conductivity_s_cm2_eq"]) * value for name, value in LAKE_UEQ_L.items())
    assert_allclose(total / 1000.0, LAKE_CONDUCTIVITY_US_CM, rtol=0, atol=0.005)


@pytest.mark.open_data
@pytest.mark.skipif("AQUABUF_OPEN_DATA" not in os.environ, reason="AQUABUF_OPEN_DATA names no folder")
def test_conductivity_of_a_whole_survey_is_the_agency_s():
    """Every lake of the survey file, within 0.005 µS/cm; the agency left hydroxide out."""
    path = Path(os.environ["AQUABUF_OPEN_DATA"]) / "nsws_lakes_1984.csv"
    with path.open(encoding="utf-8", newline="") as handle:
        lakes = [row for row in csv.DictReader(handle) if row["cond_calc_uS_cm"]]
    columns = {name: f"{IONS[name]['formula']}_ueq_L" for name in LAKE_UEQ_L}
    columns |= {name: f"{IONS[name]['formula']}_calc_ueq_L" for name in ("bicarbonate", "carbonate")}
    total = sum(float(IONS[name]["conductivity_s_cm2_eq"]) * np.array([float(lake[column] or "nan") for lake in lakes])
                for name, column in columns.items()) / 1000.0
    expected = np.array([float(lake["cond_calc_uS_cm"]) for lake in lakes])
    complete = np.isfinite(total)
    assert complete.sum() > 0.9 * len(lakes) > 500
    assert_allclose(total[complete], expected[complete], rtol=0, atol=0.005)

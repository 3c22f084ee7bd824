"""Conductivity of ions and the limits of both sums: a printed lake, every lake of a survey, a formula."""

import csv
import os
import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.ionsums import conductivity_of_ions, most_conductivity_percent, most_imbalance_percent

sys.path.insert(0, str(Path(__file__).parents[1] / "published"))
from published_rows import MARKS, read_rows

ROWS = read_rows("lake_ions")
FUNCTIONS = {"most_imbalance": most_imbalance_percent, "most_conductivity": most_conductivity_percent}
DATA = os.environ.get("AQUABUF_OPEN_DATA", "")

# µeq/L of lake 1A1-003, Eastern Lake Survey 1984 (US EPA)
HAWK_POND = {"hydrogen": 16.2181, "calcium": 59.281, "magnesium": 16.287, "sodium": 17.487, "potassium": 6.341,
             "ammonium": 5.156,
             "sulfate": 132.457, "nitrate": 9.775, "chloride": 8.040, "fluoride": 2.853, "bicarbonate": 0.882}
# Equivalent conductivities that the survey used, recovered from 1798 lakes [µS/cm per meq/L, 25 °C]
LAMBDA = {"hydrogen": 349.65, "calcium": 59.47, "magnesium": 53.0, "sodium": 50.08, "potassium": 73.48,
          "ammonium": 73.5,
          "sulfate": 80.0, "nitrate": 71.42, "chloride": 76.31, "fluoride": 55.41, "bicarbonate": 44.5,
          "carbonate": 69.3}
COLUMNS = {"hydrogen": "H_ueq_L", "calcium": "Ca_ueq_L", "magnesium": "Mg_ueq_L", "sodium": "Na_ueq_L",
           "potassium": "K_ueq_L",
           "ammonium": "NH4_ueq_L", "sulfate": "SO4_ueq_L", "nitrate": "NO3_ueq_L", "chloride": "Cl_ueq_L",
           "fluoride": "F_ueq_L",
           "bicarbonate": "HCO3_calc_ueq_L", "carbonate": "CO3_calc_ueq_L"}


def hawk_pond():
    """Charges as arrays of one lake. [eq/L]"""
    return {name: np.array([v * 1e-6]) for name, v in HAWK_POND.items()}


def published(quantity):
    """The one row of a quantity."""
    return next(row for row in ROWS if row["quantity"] == quantity)


def test_rows_tell_where_they_are_from():
    """Every check value has a mark and a source."""
    assert {row["mark"] for row in ROWS} <= MARKS
    assert all(row["source"] for row in ROWS)


@pytest.mark.parametrize("row", [r for r in ROWS if r["at"]], ids=lambda r: f"{r['quantity']} {r['at']}")
def test_limits_on_both_sides(row):
    """What is accepted of a sum of ions, and of a conductivity, at and beside each limit."""
    assert float(FUNCTIONS[row["quantity"]](np.array(float(row["at"])))) == float(row["expected"])


def test_limits_take_arrays():
    """Row by row, of any shape."""
    assert_array_equal(most_imbalance_percent(np.array([[10.0, 60.0], [99.0, 300.0]])), [[60, 30], [30, 15]])
    assert_array_equal(most_conductivity_percent(np.array([[1.0], [20.0], [90.0]])), [[50], [30], [20]])


def test_conductivity_of_a_printed_lake():
    """The agency's own figure, at infinite dilution."""
    row = published("conductivity")
    assert_allclose(conductivity_of_ions(hawk_pond(), np.zeros(1)), float(row["expected"]), rtol=0,
                    atol=float(row["atol"]))


@pytest.mark.parametrize("ion", LAMBDA)
def test_each_ion_by_its_own_conductivity(ion):
    """One meq/L alone: the conductivity that the survey used."""
    assert_allclose(conductivity_of_ions({ion: np.array([1e-3])}, np.zeros(1)), LAMBDA[ion], rtol=2e-4)


def test_ionic_strength_lowers_conductivity():
    """Square of a monovalent Davies coefficient with A = 0.5 (Standard Methods 2510, recalled), row by row."""
    strength = np.array([0.0, 2.5e-4, 0.01, 0.1])
    s = np.sqrt(strength)
    by_hand = 23.886 * 10.0 ** (-2 * 0.5 * (s / (1 + s) - 0.3 * strength))
    many = {name: np.full(4, v[0]) for name, v in hawk_pond().items()}
    assert_allclose(conductivity_of_ions(many, strength), by_hand, rtol=0, atol=0.005)


def test_a_missing_ion_counts_as_none_and_strangers_do_not_count():
    """nan is none in its row alone; a name without charge or conductivity in the table adds nothing."""
    charges = {"sodium": np.array([1e-3, np.nan]), "chloride": np.array([1e-3, 1e-3]), "silica": np.array([1e-3, 1e-3]),
               "phlogiston": np.array([1.0, 1.0])}
    assert_allclose(conductivity_of_ions(charges, np.zeros(2)), [50.08 + 76.31, 76.31], rtol=1e-12)
    assert_array_equal(conductivity_of_ions({}, np.zeros((3, 1))), np.zeros((3, 1)))


@pytest.mark.open_data
@pytest.mark.skipif(not DATA, reason="AQUABUF_OPEN_DATA names no folder")
def test_conductivity_of_every_lake_of_a_survey():
    """What the agency computed for 905 lakes, to 0.005 µS/cm."""
    with (Path(DATA) / "nsws_lakes_1984.csv").open(encoding="utf-8", newline="") as handle:
        rows = list(csv.DictReader(handle))
    charges = {ion: np.array([float(row[column]) for row in rows]) * 1e-6 for ion, column in COLUMNS.items()}
    printed = np.array([float(row["cond_calc_uS_cm"]) for row in rows])
    assert printed.size == 905
    assert np.abs(conductivity_of_ions(charges, np.zeros(905)) - printed).max() < 0.005

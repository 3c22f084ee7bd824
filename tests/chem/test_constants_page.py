"""The page of constants names each public constant and shows what the code gives."""

import importlib
import inspect
import re
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose
from published_rows import CHEM_TABLES

from aquabuf.chem.aluminum import LOG_BETA
from aquabuf.tables import read_table

PAGE = (Path(__file__).parents[2] / "docs" / "constants.md").read_text(encoding="utf-8")
MODULES = [importlib.import_module(f"aquabuf.chem.{name}") for name in CHEM_TABLES]
PUBLIC = {name: getattr(module, name) for module in MODULES for name in module.__all__}
# They hold no number of their own.
LOOK_UPS = {"Acid", "acid_named", "acid_table", "OrganicModel", "organic_models", "TransferRelation", "transfer_relations",
            "schmidt_relations", "transfer_velocity_m_d", "FORMS", "Product", "atoms", "find_product", "molar_mass",
            "own_product", "products", "strength_of", "with_basicity", "zero_level_charge", "check_certificate",
            "density_from_strength", "freezes_at_c", "strength_from_density",
            "Conflict", "Metal", "complex_at", "conflict", "dissolved_at", "free_at", "least_ph", "metal_named", "metals",
            "precipitation_window", "soluble_window", "window_disagreement"}

# The conditions that the page states above its tables.
CONDITIONS = {
    "t_c": 25.0, "salinity": 35.0, "elevation_m": 1000.0, "pressure_atm": 1.0, "co2_ppm": 400.0, "charge": 1,
    "ionic_strength": 0.1, "a": 0.51, "b": 0.328, "size": 4.0, "slope": 0.075, "sulfate": 0.028235,
    "k_bisulfate": 0.1003, "fluoride": 6.833e-5, "k_fluoride": 0.002366, "pk": 4.756, "enthalpy_j_mol": -410.0,
    "heat_capacity_j_mol_k": -142.0, "doc_mg_l": 1.0, "ph": 7.0, "pk1": 3.04, "pk2": 4.42, "pk3": 6.70, "wind_m_s": 5.0,
    "lake_area_m2": 1e6, "k600_m_d": 1.0, "schmidt": 600.0,
    "sg": 1.335, "ionization_kj_mol": 43.6, "heat_kj_l": 55.815, "capacity_kj_l_k": 4.18, "water_per_acid": 1.0,
}


def _cells(line):
    return [cell.strip() for cell in line.strip("|").split("|")]


TABLE_ROWS = [_cells(line) for line in PAGE.splitlines() if line.startswith("| `")]
CONSTANT_ROWS = {row[0].strip("`"): row for row in TABLE_ROWS if len(row) == 7}
ACID_ROWS = {row[0].strip("`"): row for row in TABLE_ROWS if len(row) == 5}


def test_page_names_every_public_constant():
    """Nothing is computed with that the page does not list."""
    assert {name for name in set(PUBLIC) - LOOK_UPS if f"`{name}`" not in PAGE} == set()


def test_page_lists_no_constant_that_is_gone():
    """A row of the page belongs to a name of the code."""
    assert set(CONSTANT_ROWS) - set(PUBLIC) == set()


@pytest.mark.parametrize("name", CONSTANT_ROWS)
def test_page_shows_the_value_of_the_code(name):
    """The last column is right to its last digit."""
    kind, printed = re.fullmatch(r"(pK |log |)(\S+)", CONSTANT_ROWS[name][-1]).groups()
    target = PUBLIC[name]
    if callable(target):
        target = target(**{key: CONDITIONS[key] for key in inspect.signature(target).parameters})
    value = {"pK ": lambda k: -np.log10(k), "log ": np.log10, "": lambda k: k}[kind](target)
    mantissa, _, exponent = printed.partition("e")
    digits = len(mantissa.partition(".")[2])
    assert_allclose(value, float(printed), rtol=0, atol=0.51 * 10.0 ** (int(exponent or 0) - digits))


def test_page_lists_the_shipped_acids():
    """Acid by acid, the page repeats the shipped table."""
    columns = ("pk", "enthalpy_kj_mol", "heat_capacity_j_mol_k", "mark")
    expected = {row["name"]: [row[key].replace(";", ", ") for key in columns] for row in read_table("acids")}
    assert {name: row[1:] for name, row in ACID_ROWS.items()} == expected


def test_page_lists_the_shipped_sea_salt_ratios():
    """Ion by ion, the page repeats the shipped table."""
    expected = [[row[key] for key in ("ion", "tracer", "ratio", "mark", "source")] for row in read_table("sea_salt_ratios")]
    lines = PAGE.splitlines()
    start = lines.index("| ion | with one of | equivalents | known | source |") + 2
    assert [_cells(line) for line in lines[start:start + len(expected)]] == expected
    assert not lines[start + len(expected)].startswith("|")


def test_page_lists_the_hydroxides_of_aluminum():
    """The constants that the charge of aluminum is made of."""
    listed = re.search(r"`aluminum_charge` .* log β ([^|]*) \|", PAGE)[1]
    assert tuple(float(x) for x in listed.split(", ")) == LOG_BETA


def test_page_states_the_conditions_of_its_values():
    """The conditions used here are those the reader is told."""
    for phrase in ("25 °C and salinity 35", "elevation 1000 m, 1 atm and 400 ppm", "A 0.51, B 0.328, size 4.0 and slope 0.075",
                   "sulfate 0.028235, its constant 0.1003", "fluoride 6.833e-5 and its constant 0.002366",
                   "pH 7 and 1 mg/L of carbon, for pK 3.04, 4.42 and 6.70",
                   "wind 5 m/s at 10 m, a lake of 1 km², a k600 of 1 m/d and Schmidt number 600"):
        assert phrase in PAGE.replace("\n", " ")

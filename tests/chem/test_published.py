"""Every constant reproduces its source; no constant and no acid ships without a check value."""

import importlib

import pytest
from numpy.testing import assert_allclose
from published_rows import CHEM_TABLES, MARKS, TRANSFORMS, computed, read_rows, row_id

from aquabuf.chem.acids import acid_named, acid_table, k_of_temperature

ROWS = [row for name in CHEM_TABLES for row in read_rows(name)]
ACID_ROWS = read_rows("weak_acids")

# Public names that are no quantities: records, look-ups, the year that labels AIR_CO2_PPM, and a pair of a quantity with
# its slope, which has tests of its own; the ratios of sea salt have their rows in critical_loads.csv.
NOT_QUANTITIES = {"Acid", "acid_named", "acid_table", "AIR_CO2_YEAR", "OrganicModel", "organic_models", "charge_and_slope",
                  "TransferRelation", "transfer_relations", "schmidt_relations", "transfer_velocity_m_d",
                  "equivalents_per_chloride", "equivalents_per_sodium",
                  # metals have their rows in metal_hydroxides.csv; a pair has tests of its own
                  "Conflict", "Metal", "complex_at", "conflict", "dissolved_at", "free_at", "least_ph", "metal_named", "metals",
                  "precipitation_window", "soluble_window", "window_disagreement", "carbonic_enthalpies_kj_mol",
                  # products have their rows in treatment_products.csv
                  "FORMS", "Product", "atoms", "find_product", "own_product", "products", "strength_of", "with_basicity",
                  "zero_level_charge", "check_certificate", "density_from_strength", "freezes_at_c",
                  "strength_from_density"}


def _public_quantities():
    modules = (importlib.import_module(f"aquabuf.chem.{name}") for name in CHEM_TABLES)
    return {name for module in modules for name in module.__all__} - NOT_QUANTITIES


@pytest.mark.parametrize("row", ROWS, ids=row_id)
def test_constant_matches_its_source(row):
    """Each quantity reproduces the printed digits of its source."""
    assert_allclose(computed(row), float(row["expected"]), rtol=0, atol=float(row["atol"]), err_msg=row["source"])


@pytest.mark.parametrize("row", ACID_ROWS, ids=row_id)
def test_weak_acid_matches_its_source(row):
    """Each step of each shipped acid reproduces tabulated constants against temperature."""
    acid, i = acid_named(row["acid"]), int(row["step"]) - 1
    k = k_of_temperature(acid.pk[i], acid.enthalpy_j_mol[i], acid.heat_capacity_j_mol_k[i], float(row["t_c"]))
    assert_allclose(TRANSFORMS[row["transform"]](k), float(row["expected"]), rtol=0, atol=float(row["atol"]),
                    err_msg=row["source"])


def test_every_public_quantity_has_a_published_row():
    """A constant that nobody checked cannot be shipped."""
    assert _public_quantities() - {row["quantity"] for row in ROWS} == set()


def test_no_published_row_is_about_a_quantity_that_is_gone():
    """A renamed constant must take its check values along."""
    assert {row["quantity"] for row in ROWS} - _public_quantities() == set()


def test_every_step_of_every_acid_has_a_row_at_25_and_at_another_temperature():
    """An acid's pK and its slope in temperature are both checked."""
    steps = {(acid.name, str(i + 1)) for acid in acid_table().values() for i in range(len(acid.pk))}
    at_25 = {(row["acid"], row["step"]) for row in ACID_ROWS if float(row["t_c"]) == 25.0}
    elsewhere = {(row["acid"], row["step"]) for row in ACID_ROWS if float(row["t_c"]) != 25.0}
    assert steps - at_25 == set()
    assert steps - elsewhere == set()


def _can_fail(row):
    """Whether the tolerance is small: 0.06 in a logarithm, a fifth of a plain number."""
    limit = 0.2 * abs(float(row["expected"])) if row["transform"] == "plain" else 0.06
    return 0.0 < float(row["atol"]) <= limit


def test_every_row_names_its_source_and_mark_and_can_fail():
    """A row without source, or with a tolerance that lets anything pass, is no check."""
    rows = ROWS + ACID_ROWS
    assert [row_id(row) for row in rows if row["mark"] not in MARKS or len(row["source"]) <= 10] == []
    assert [row_id(row) for row in rows if not _can_fail(row)] == []

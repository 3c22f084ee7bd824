"""Every definition of ANC of a run by hand, and which one is used."""

import csv

import pytest
from lake_tables import ALDER, BIRCH, CEDAR, DOCK, SURVEY, charge, organic_left_by_gran
from numpy.testing import assert_allclose

from aquabuf.assess.lake.options import LakeOptions
from aquabuf.report.lake_run import LakeFiles, assess_survey


@pytest.fixture
def rows(table, tmp_path):
    """Rows of results.csv by sample."""
    assess_survey(LakeFiles(survey=table(SURVEY, "lakes.csv")), tmp_path / "o", LakeOptions(draws=0), figure=False)
    with (tmp_path / "o" / "results.csv").open(encoding="utf-8", newline="") as stream:
        return {r["sample_id"]: r for r in csv.DictReader(stream)}


SURVEYED = ((ALDER, "Gran ANC"), (BIRCH, "alkalinity (method unstated)"), (CEDAR, "Gran ANC"), (DOCK, "Gran ANC of the ions"))


@pytest.mark.parametrize(("row", "used"), SURVEYED, ids=lambda x: x["site"] if isinstance(x, dict) else x)
def test_charge_balance_and_organic_acids_by_hand(rows, row, used):
    """Cations less anions; less a third of 10.2 µeq of sites per mg of carbon (Hesthagen et al. 2008); on the Gran scale.

    There aluminum adds its charge: three where it is all Al3+, two where it is all AlOH2+; at pH 4.5 it lies between.
    """
    r = {name: float(value) for name, value in rows[row["sample_id"]].items() if name.startswith("anc_") and name.endswith("_l") and value}
    assert rows[row["sample_id"]]["anc_used_from"] == used
    assert_allclose(r["anc_charge_ueq_l"], charge(row), rtol=0, atol=1e-9)
    assert_allclose(r["anc_organic_corrected_ueq_l"], charge(row) - 3.4 * row["doc_mg_l"], rtol=0, atol=1e-9)
    aluminum = r["anc_gran_of_ions_ueq_l"] - charge(row) + organic_left_by_gran(row["doc_mg_l"])
    micromoles = row.get("aluminum_ug_l", 0) / 26.982
    assert 2.0 * micromoles - 0.051 <= aluminum <= 3.0 * micromoles + 0.051

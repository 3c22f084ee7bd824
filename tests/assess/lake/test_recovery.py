"""Recovery from acid is told by ANC and its drivers, never by pH alone."""

import numpy as np
import pandas as pd
import pytest

from aquabuf.assess.lake.recovery import PH_ALONE, RECOVERY_COLUMNS, VERDICTS, recovery
from aquabuf.assess.lake.trends import trend_table
from aquabuf.errors import InputError

YEARS = np.arange(1995, 2015)
CASES = {  # slopes per year of what is measured, and the verdict
    "recovering": ({"anc_gran_ueq_l": 1, "sulfate_ueq_l": -3, "base_cations_ueq_l": -2}, "ANC rises as acid anions fall"),
    "by charge": ({"anc_charge_ueq_l": 1, "nitrate_ueq_l": -1, "ph": 0.1}, "ANC rises as acid anions fall"),
    "limed": ({"anc_gran_ueq_l": 1, "sulfate_ueq_l": 0}, "ANC rises, cause not shown"),
    "nitrate takes over": ({"anc_gran_ueq_l": 1, "sulfate_ueq_l": -1, "nitrate_ueq_l": 2}, "ANC rises, cause not shown"),
    "one only": ({"anc_gran_ueq_l": 1, "anc_charge_ueq_l": 0, "sulfate_ueq_l": -3},
                 "Gran ANC rises, charge balance does not: look for a change of method"),
    "quarrel": ({"anc_gran_ueq_l": -1, "anc_charge_ueq_l": 1, "sulfate_ueq_l": -3}, "definitions of ANC disagree"),
    "not yet": ({"anc_gran_ueq_l": 0, "sulfate_ueq_l": -3, "base_cations_ueq_l": -3.2, "ph": 0.1},
                "acid anions fall, ANC does not surely rise"),
    "still": ({"anc_gran_ueq_l": 0, "sulfate_ueq_l": 0, "ph": 0.1}, "no sure trend of ANC"),
    "worse": ({"anc_gran_ueq_l": -1, "sulfate_ueq_l": 2}, "ANC falls"),
    "meter only": ({"ph": 0.1, "sulfate_ueq_l": -3}, "no trend of ANC can be told"),
}


def lake(name, slopes):
    """Yearly August samples with these slopes and one part in a thousand of scatter, the same for all."""
    t = YEARS - YEARS[0]
    scatter = np.random.default_rng(1).permutation(np.tile([-1.0, 1.0], 10)) * 1e-3
    return pd.DataFrame({"site": name, "date": pd.to_datetime([f"{y}-08-01" for y in YEARS]),
                         **{q: 50.0 + slope * t + scatter for q, slope in slopes.items()}})


def verdicts():
    """All cases at once."""
    return recovery(trend_table(pd.concat([lake(name, slopes) for name, (slopes, _) in CASES.items()]))).set_index("site")


def test_every_verdict():
    """Each case gets its verdict and what that means; no verdict is left without a case."""
    found = verdicts()
    assert found["verdict"].to_dict() == {name: verdict for name, (_, verdict) in CASES.items()}
    assert set(VERDICTS) == {verdict for _, verdict in CASES.values()}
    assert found["recovering"].to_dict() == {
        "recovering": "yes", "by charge": "yes", "limed": "unclear", "nitrate takes over": "unclear", "quarrel": "unclear",
        "one only": "unclear",
        "not yet": "not shown", "still": "not shown", "worse": "no", "meter only": "unknown"}


def test_ph_alone_is_no_recovery():
    """It is said where pH rises and ANC does not, and only there."""
    said = verdicts()["words"].str.contains(PH_ALONE, regex=False)
    assert set(said[said].index) == {"not yet", "still", "meter only"}
    assert "alone is no recovery" in PH_ALONE


def test_words_and_slopes():
    """Sizes, what base cations take up, and names of what goes where."""
    row = verdicts().loc["recovering"]
    assert row["words"] == ("ANC rises as acid anions fall; Gran ANC 1.0, sulfate -3.0 µeq/L per year; "
                            "base cations fall too and take up 67 % of the fall of acid anions")
    assert (row["anc_quantity"], row["rising"], row["falling"]) == ("anc_gran_ueq_l", "Gran ANC", "sulfate, base cations")
    assert row[["anc_slope_ueq_l_yr", "anions_slope_ueq_l_yr", "cations_slope_ueq_l_yr"]].round(2).tolist() == [1.0, -3.0, -2.0]
    assert verdicts().loc["not yet", "words"].startswith(
        "acid anions fall, ANC does not surely rise; sulfate -3.0 µeq/L per year; base cations fall too and take up all the fall")
    assert verdicts().loc["limed", "no_sure_trend"] == "sulfate"
    assert "pH alone shows none" in row["rule"]
    assert list(recovery(trend_table(lake("a", {"ph": 0.0}))).columns) == list(RECOVERY_COLUMNS)


def test_gran_decides_over_charge_balance():
    """A rise of charge-balance ANC alone is told, but is not the verdict."""
    row = recovery(trend_table(lake("a", {"anc_gran_ueq_l": 0, "anc_charge_ueq_l": 1, "sulfate_ueq_l": -1}))).iloc[0]
    assert row["recovering"] == "not shown"
    assert "charge-balance ANC rises, but Gran ANC decides" in row["words"]


def test_a_trend_that_cannot_be_told_counts_as_not_known():
    """Few years of Gran ANC leave the verdict to charge-balance ANC."""
    frame = lake("a", {"anc_gran_ueq_l": -5, "anc_charge_ueq_l": 1, "sulfate_ueq_l": -1})
    frame.loc[5:, "anc_gran_ueq_l"] = np.nan
    assert recovery(trend_table(frame)).loc[0, ["anc_quantity", "recovering"]].tolist() == ["anc_charge_ueq_l", "yes"]


def test_message():
    """The column that is missing, and the remedy."""
    with pytest.raises(InputError, match=r"recovery needs the column direction .* it is missing\. Pass the table as"):
        recovery(trend_table(lake("a", {"ph": 0.0})).drop(columns="direction"))

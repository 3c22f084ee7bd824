"""The demo history of four lakes: what happens in each over the years, as field_data/README.md tells it.

Tests of trend are those of scipy, on values read with the csv module.
"""

import csv
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.testing import assert_allclose
from scipy.stats import kendalltau, theilslopes

HISTORY = Path(__file__).parents[1] / "field_data" / "lake_history.csv"
MG_PER_MEQ = {"Calcium (mg/L)": 20.039, "Magnesium (mg/L)": 12.1525, "Sodium (mg/L)": 22.990, "Potassium (mg/L)": 39.098,
              "Sulfate (mg/L)": 48.028, "Nitrate (mg/L as N)": 14.007, "Chloride (mg/L)": 35.45}  # IUPAC  # fmt: skip
ANIONS = ("Sulfate (mg/L)", "Nitrate (mg/L as N)", "Chloride (mg/L)")
GRAN, SLIP = "Gran ANC (µeq/L)", "OR-2011-07"


@cache
def history():
    """All samples by name, with day, time in years and base cations less acid anions [µeq/L]."""
    with HISTORY.open(newline="", encoding="utf-8") as stream:
        table = pd.DataFrame(csv.DictReader(line for line in stream if not line.startswith("#"))).set_index("Sample")
    for name in (*MG_PER_MEQ, GRAN, "pH (field)", "DOC (mg/L)"):
        table[name] = pd.to_numeric(table[name])
    day = pd.to_datetime(table["Sampling date"])
    charge = sum((-1e3 if ion in ANIONS else 1e3) * table[ion] / mass for ion, mass in MG_PER_MEQ.items())
    return table.assign(day=day, t=day.dt.year + (day.dt.day_of_year - 0.5) / 365.25, charge=charge)


def lake(name):
    """Samples of one lake, which stand in order of time."""
    good = history()[history()["Lake"] == name]
    assert good["day"].is_monotonic_increasing
    return good


def bounds(series, t):
    """95 % interval of the Sen slope, of independent values."""
    found = theilslopes(series, t)
    return found.low_slope, found.high_slope


def yearly(series, day):
    """Median of each year, by year."""
    return series.groupby(day.dt.year).median()


def test_the_four_lakes_are_all():
    """Names as in the README; samples named by lake and month."""
    assert history()["Lake"].unique().tolist() == ["Ormsel Water", "Corriden Water", "Lantry Tarn", "Threlsby Lough"]
    assert (history().index.str[3:] == history()["day"].dt.strftime("%Y-%m")).all()
    assert history().index.is_unique



def test_ormsel_water_recovers():
    """Monthly; sulfate falls, ANC and organic carbon rise, months resemble the month before, all but a slip in its place."""
    good = lake("Ormsel Water")
    per_year = good.groupby(good["day"].dt.year).size()
    assert len(per_year) == 22
    assert per_year.min() >= 11
    slipped = good["Sulfate (mg/L)"][SLIP]
    around = good["Sulfate (mg/L)"][(good["day"] - good.loc[SLIP, "day"]).abs() < pd.Timedelta(days=45)].drop(SLIP)
    assert_allclose(slipped, 10.0 * around.mean(), rtol=0.1)
    for column, sign in (("Sulfate (mg/L)", -1), (GRAN, 1), ("DOC (mg/L)", 1), ("pH (field)", 1), ("Calcium (mg/L)", -1)):
        years = yearly(good[column], good["day"])
        low, high = bounds(years, years.index)
        assert min(sign * low, sign * high) > 0.0, column
    rest = good[GRAN] - good.groupby(good["day"].dt.month)[GRAN].transform("median")
    rest -= np.polyval(np.polyfit(good["t"], rest, 1), good["t"])
    assert np.corrcoef(rest[1:], rest[:-1])[0, 1] > 0.3
    ends = yearly(good[GRAN], good["day"])
    assert ends[1999] < 0.0 < ends[2020]


def test_corriden_water_changes_laboratory_and_nothing_else():
    """Quarterly; the river board titrates 12 µeq/L more of the same ions, within a laboratory nothing moves."""
    good = lake("Corriden Water")
    assert (good.groupby([good["day"].dt.year, good["day"].dt.quarter]).size() == 1).all()
    assert len(good) == 88
    board = good["Laboratory"] == "river board"
    assert good["day"][board].min().year == 2010
    assert good["day"][~board].max().year == 2009
    gap = good[GRAN] - good["charge"]
    error = np.hypot(gap[board].std() / np.sqrt(board.sum()), gap[~board].std() / np.sqrt((~board).sum()))
    assert_allclose(gap[board].mean() - gap[~board].mean(), 12.0, rtol=0, atol=3.0 * error)
    assert error < 1.0
    for part, column in ((board, GRAN), (~board, GRAN), (board | True, "charge")):
        years = yearly(good[column][part], good["day"][part])
        low, high = bounds(years, years.index)
        assert low < 0.0 < high


def test_lantry_tarn_was_sampled_ever_earlier():
    """Autumns; pH rises while ANC stands still, as samples move from November to September; a gap of eight years."""
    good = lake("Lantry Tarn")
    assert good["day"].dt.year.tolist() == [1999, 2000, *range(2009, 2021)]
    assert (good["day"].dt.month.iloc[0], good["day"].dt.month.iloc[-1]) == (11, 9)
    low, high = bounds(good["pH (field)"], good["t"])
    assert 0.0 < low < high
    assert kendalltau(good["t"], good[GRAN]).pvalue > 0.2
    assert kendalltau(good["day"].dt.day_of_year, good["pH (field)"]).statistic < -0.7


def test_threlsby_lough_has_four_samples():
    """Autumns of 2017 to 2020, too few for any trend."""
    assert lake("Threlsby Lough")["day"].dt.year.tolist() == [2017, 2018, 2019, 2020]

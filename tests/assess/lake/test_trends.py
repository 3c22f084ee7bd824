"""The table of trends: how samples become series, what is warned of, and the agency's own lakes."""

import os
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose
from published_rows import read_rows

from aquabuf.assess.lake.trend import CORRECTED_YEARS, step_between, trend_of
from aquabuf.assess.lake.trends import FULL_YEAR, trend_table
from aquabuf.errors import InputError
from aquabuf.tables import read_table

DATA = os.environ.get("AQUABUF_OPEN_DATA", "")
LAKE_ROWS = [r for r in read_rows("trends") if r["what"] == "lake"]


def samples(dates, *, site="lake", **columns):
    """Samples of one site."""
    return pd.DataFrame({"site": site, "date": pd.DatetimeIndex(dates), **columns})


def monthly(first, last, months=range(1, 13)):
    """The 15th of some months of every year."""
    return [f"{y}-{m:02d}-15" for y in range(first, last + 1) for m in months]


def one(frame, **options):
    """The only row of the table."""
    table = trend_table(frame, **options)
    assert len(table) == 1
    return table.iloc[0]


def noise(dates, seed=0):
    """Normal values, one per date."""
    return np.random.default_rng(seed).standard_normal(len(dates))


def test_columns_are_those_of_the_table():
    """The shipped list of columns is what comes out, whole numbers whole."""
    table = trend_table(samples(monthly(2000, 2011), sulfate_ueq_l=noise(monthly(2000, 2011))))
    assert list(table.columns) == [r["name"] for r in read_table("trend_columns")]
    assert all(r["digits"].isdigit() or not r["digits"] for r in read_table("trend_columns"))
    assert all(r["meaning"] for r in read_table("trend_columns"))
    assert {table[c].dtype.name for c in ("n", "s", "years", "first_year", "step_year")} == {"Int64"}


def test_quantities_are_columns_of_the_lake_results():
    """Names and units are those of the result table; directions and marks are known words."""
    units = {r["name"]: r["unit"] for r in read_table("lake_results")}
    rows = read_table("trend_quantities")
    assert {r["name"]: r["unit"] for r in rows} == {r["name"]: units.get(r["name"]) for r in rows}
    assert {r["harmful"] for r in rows} <= {"rising", "falling", ""}
    assert {r["mark"] for r in rows} <= {"printed", "recalled", "derived", "practice"}
    assert all(r["source"] for r in rows)


def test_a_row_for_each_site_and_quantity_that_has_a_value():
    """Sites as they come, quantities as listed; what is never measured has no row; sites do not see each other."""
    dates = monthly(2000, 2012)
    b = samples(dates, site="b", ph=6.0 + noise(dates), sulfate_ueq_l=noise(dates, 1), anc_gran_ueq_l=np.nan)
    a = samples(dates, site="a", ph=np.nan, sulfate_ueq_l=noise(dates, 2), anc_gran_ueq_l=noise(dates, 3))
    table = trend_table(pd.concat((b, a)).iloc[::-1])
    assert list(zip(table["site"], table["quantity"], strict=True)) == [
        ("a", "anc_gran_ueq_l"), ("a", "sulfate_ueq_l"), ("b", "sulfate_ueq_l"), ("b", "ph")]
    pd.testing.assert_frame_equal(table[table["site"] == "b"].reset_index(drop=True), trend_table(b))


def test_monthly_samples_by_month():
    """Auto takes months where most years have most of them; two samples of a month are their median."""
    dates = monthly(2000, 2013)
    x = noise(dates).reshape(14, 12)
    frame = samples(dates * 2, sulfate_ueq_l=np.concatenate((x.ravel() - 1.0, x.ravel() + 1.0)))
    row = one(frame)
    t = np.array([d.year + (d.day_of_year - 0.5) / (366 if d.is_leap_year else 365) for d in pd.DatetimeIndex(dates)])
    expected = trend_of(t.reshape(14, 12), x)
    assert (row["kind"], row["season"], row["samples"], row["n"], row["years"]) == ("seasonal", "month", 336, 168, 14)
    assert_allclose([row[c] for c in ("s", "z", "p", "p_corrected", "sen_slope", "sen_low", "sen_high")],
                    [getattr(expected, c) for c in ("s", "z", "p", "p_corrected", "slope", "low", "high")], rtol=1e-9)
    assert_allclose(row["change"], row["sen_slope"] * np.ptp(t))
    assert row["rule"].startswith("seasonal Kendall test by month")


def test_quarters_if_asked_for():
    """Quarters hold three months each."""
    dates = monthly(2000, 2013)
    row = one(samples(dates, sulfate_ueq_l=noise(dates)), seasonal="quarter")
    assert (row["kind"], row["season"], row["n"]) == ("seasonal", "quarter", 56)


def test_few_months_or_few_years_by_year():
    """Six months a year, or years too few to count the correlation of months, become annual values."""
    for dates in (monthly(2000, 2013, range(5, 11)), monthly(2000, 2000 + CORRECTED_YEARS - 1)):
        assert one(samples(dates, sulfate_ueq_l=noise(dates)))["kind"] == "annual"


def test_annual_means_of_full_years():
    """Where most years have ten samples, half a year does not stand for one: its mean is of another season."""
    assert FULL_YEAR == 10
    dates = monthly(2000, 2011) + monthly(2012, 2017, range(7, 13))
    season = np.array([np.cos(d.month * np.pi / 6.0) * 50.0 for d in pd.DatetimeIndex(dates)])
    row = one(samples(dates, sulfate_ueq_l=season + pd.DatetimeIndex(dates).year), seasonal="annual")
    assert (row["n"], row["last_year"], row["s"]) == (12, 2011, 66)
    assert_allclose((row["sen_slope"], row["median"]), (1.0, 2005.5))
    assert "annual means of years with 10 samples or more" in row["rule"]


def test_annual_medians_of_sparse_samples():
    """Fewer samples give the median of what there is; equal seasons need no caution, others do."""
    same = one(samples(monthly(2000, 2011, (4, 7, 10)), sulfate_ueq_l=np.tile([1.0, 2.0, 90.0], 12)))
    assert (same["kind"], same["median"], same["cautions"]) == ("annual", 2.0, "100 % of the pairs are tied, too many to trust the slope")
    assert "annual medians" in same["rule"]


@pytest.mark.parametrize(("day", "cautions"), [("08-31", ""), ("10-01", "the time of year sampled differs between 55 % of the pairs of years")])
def test_another_time_of_year(day, cautions):
    """Samples that move by a month are no cause for alarm, by two they are: 36 of 66 pairs are of two seasons."""
    dates = [f"{y}-{'08-01' if y < 2006 else day}" for y in range(2000, 2012)]
    row = one(samples(dates, sulfate_ueq_l=noise(dates)))
    assert row["cautions"] == cautions
    assert row["words"].endswith(cautions)
    odd = [f"{y}-{'08-01' if y != 2006 else day}" for y in range(2000, 2012)]
    assert one(samples(odd, sulfate_ueq_l=noise(odd)))["cautions"] == ""  # one odd year is not worth a word


def test_cautions():
    """A long gap, values too coarse, values without a date."""
    dates = [f"{y}-08-01" for y in (*range(1985, 1991), *range(2005, 2013))]
    row = one(samples([*dates, pd.NaT], sulfate_ueq_l=np.append(noise(dates), 5.0)))
    assert row["cautions"] == "no value in 14 of 28 years in a row, so compare the ends rather than draw a line; 1 value without a date left out"
    assert (row["undated"], row["samples"]) == (1, 14)
    coarse = one(samples(monthly(2000, 2012), nitrate_ueq_l=np.round(noise(monthly(2000, 2012)) * 0.4)))
    assert coarse["cautions"].endswith("of the pairs are tied, too many to trust the slope")
    undated = one(samples([pd.NaT], sulfate_ueq_l=[1.0]))
    assert (undated["n"], undated["status"], undated["s"]) == (0, "too few years", 0)
    assert undated["words"] == "no trend can be told: 0 years with a value, 8 are needed; 1 value without a date left out"


def test_too_little_gives_no_figures():
    """Seven years: S and n, no slope and no p, and words that say what is missing."""
    dates = [f"{y}-08-01" for y in range(2000, 2007)]
    row = one(samples(dates, sulfate_ueq_l=np.arange(7.0)))
    assert (row["status"], row["n"], row["s"], row["direction"], row["toward"]) == ("too few years", 7, 21, "", "")
    assert row[["z", "p", "p_corrected", "sen_slope", "sen_low", "sen_high", "change"]].isna().all()
    assert row["words"] == "no trend can be told: 7 years with a value, 8 are needed"


def test_a_change_of_laboratory_is_no_trend():
    """A flat lake read 20 higher by the later method: no trend, a step of 20, and without methods a false slope."""
    dates = monthly(1995, 2014)
    late = pd.DatetimeIndex(dates).year >= 2005
    frame = samples(dates, anc_gran_ueq_l=noise(dates) + 20.0 * late, method=np.where(late, "closed cell", "open cell"))
    row = one(frame)
    assert (row["direction"], row["methods"]) == ("no sure trend", "open cell > closed cell")
    assert (row["step_from"], row["step_to"], row["step_year"]) == ("open cell", "closed cell", 2005)
    assert row["step_low"] < 20.0 < row["step_high"]
    assert row["step_p"] < 0.001
    assert "the change of method in 2005 (open cell to closed cell) moved the values by +" in row["words"]
    assert "not part of the trend" in row["words"]
    assert abs(row["sen_slope"]) < 0.05
    assert one(frame.drop(columns="method"))["sen_slope"] > 1.0


def test_a_method_without_a_name_stands_alone():
    """An unknown method is compared with none that is known; a year halved by two methods is no full year of either."""
    dates = monthly(1995, 2014)
    late = pd.DatetimeIndex(dates).year >= 2005
    named = samples(dates, ph=noise(dates), method=np.where(late, "glass", None))
    assert one(named)["methods"] == "unknown method > glass"
    assert one(named.assign(method=None))["methods"] == ""
    assert one(named.assign(method="glass"))["methods"] == "glass"
    halved = named.assign(method=np.where((pd.DatetimeIndex(dates).year == 2004) & (pd.DatetimeIndex(dates).month > 6) | late, "b", "a"))
    assert one(halved, seasonal="annual")["n"] == 19


def test_memory_of_the_lake_widens_the_step():
    """The interval of the step counts serial correlation as the trend does."""
    dates = [f"{y}-08-01" for y in range(1990, 2014)]
    x, late = np.cumsum(noise(dates)), np.arange(24) >= 12
    row = one(samples(dates, ph=x, method=np.where(late, "b", "a")))
    both = np.stack((np.where(late, np.nan, x), np.where(late, x, np.nan)), axis=1)
    t = np.repeat(np.arange(1990.5, 2014)[:, None], 2, axis=1)
    expected = step_between(t, both, [0, 0], [False, True], row["sen_slope"], widened=row["inflation"])
    assert row["inflation"] > 1.5
    assert_allclose([row["step"], row["step_low"], row["step_high"], row["step_p"]],
                    [expected.size, expected.low, expected.high, expected.p], rtol=1e-9)


def test_a_step_that_cannot_be_told():
    """Two years of a new method: nothing is compared with the old one, and it is said."""
    dates = [f"{y}-08-01" for y in range(2000, 2014)]
    row = one(samples(dates, ph=noise(dates), method=["a"] * 12 + ["b"] * 2))
    assert np.isnan(row["step"])
    assert "what the change of method in 2012 (a to b) did cannot be told, so values before and after it are not compared" in row["words"]
    three = one(samples(dates, ph=noise(dates), method=["a"] * 8 + ["b"] * 4 + ["c"] * 2))
    assert three["step_to"] == "b"
    assert three["words"].endswith("; 1 more change of method")


@pytest.mark.parametrize(("quantity", "slope", "direction", "toward"), [
    ("anc_gran_ueq_l", 1.0, "rising", "recovery"), ("anc_gran_ueq_l", -1.0, "falling", "harm"),
    ("sulfate_ueq_l", -1.0, "falling", "recovery"), ("nitrate_ueq_l", 1.0, "rising", "harm"),
    ("base_cations_ueq_l", -1.0, "falling", ""), ("doc_mg_l", 1.0, "rising", ""), ("ph", 0.0, "no sure trend", "")])
def test_direction_and_what_it_means(quantity, slope, direction, toward):
    """A fall of sulfate is recovery, a fall of ANC harm; of base cations and DOC neither."""
    dates = monthly(1995, 2014)
    t = pd.DatetimeIndex(dates).year - 1995.0
    row = one(samples(dates, **{quantity: slope * t + noise(dates)}))
    assert (row["direction"], row["toward"]) == (direction, toward)


@pytest.mark.parametrize(("frame", "options", "words"), [
    (pd.DataFrame({"site": ["a"]}), {}, r"trends need a column date; found site\. Add it"),
    (pd.DataFrame({"site": ["a"], "date": ["2000"]}), {}, r"column date of trends must hold dates; found (object|str)\. Parse it"),
    (samples(["2000"], site=None, ph=1.0), {}, r"every sample of a trend needs a site; 1 have none\. Name them"),
    (samples(["2000"], ph=1.0), {"seasonal": "week"}, r"seasonal must be one of auto, month, quarter, annual; found 'week'\. Choose"),
    (samples(["2000"], ph=1.0), {"confidence": 90.0}, r"confidence must be between 0 and 1; found 90\. Give 90 % as 0\.90"),
    (samples(["2000"]), {}, r"trends need one of the columns anc_gran_ueq_l, .*; found none\. Add one"),
    (samples(["2000"], ph=["low"]), {}, r"column ph of trends must hold numbers; found (object|str)\. Convert it"),
    (samples(["2000"], ph=[np.inf]), {}, r"column ph of trends must hold finite numbers; found an infinite one\. Empty it"),
])
def test_messages(frame, options, words):
    """Rule, value and remedy."""
    with pytest.raises(InputError, match=words):
        trend_table(frame, **options)


def agency_lake(site_id):
    """Samples of one agency lake from 1993 to 2019."""
    raw = pd.read_csv(Path(DATA) / "ltm_adirondack_1982_2020.csv", parse_dates=["date"], dtype={"site_id": str})
    raw = raw[(raw["site_id"] == site_id) & raw["date"].dt.year.between(1993, 2019)]
    return samples(raw["date"], anc_gran_ueq_l=raw["anc_ueq_L"].to_numpy(), sulfate_ueq_l=raw["SO4_ueq_L"].to_numpy())


@pytest.mark.skipif(not DATA, reason="AQUABUF_OPEN_DATA names no folder")
@pytest.mark.open_data
@pytest.mark.parametrize("row", LAKE_ROWS, ids=lambda r: f"{r['where']} {r['quantity']}")
def test_agency_lake_by_year(row):
    """S, score and slope of annual means as worked out apart from the code."""
    quantity, figure = row["quantity"].split()
    table = trend_table(agency_lake(row["where"]), seasonal="annual").set_index("quantity")
    assert_allclose(float(table.loc[quantity, figure]), float(row["expected"]), rtol=0, atol=float(row["atol"]))


@pytest.mark.skipif(not DATA, reason="AQUABUF_OPEN_DATA names no folder")
@pytest.mark.open_data
def test_agency_lake_by_month():
    """S, score and slope by a plain loop; the uncorrected p is absurdly sure, the corrected one is sure enough."""
    frame = agency_lake("1A1-102")
    row = trend_table(frame).set_index("quantity").loc["sulfate_ueq_l"]
    s, variance, slopes = 0, 0.0, []
    for _, month in frame.dropna().groupby(frame["date"].dt.month):
        by_year = month.groupby(month["date"].dt.year)["sulfate_ueq_l"].median()
        n, ties = len(by_year), by_year.value_counts()
        variance += (n * (n - 1) * (2 * n + 5) - (ties * (ties - 1) * (2 * ties + 5)).sum()) / 18
        for i in range(n):
            for j in range(i):
                rise = by_year.iloc[i] - by_year.iloc[j]
                s += np.sign(rise)
                slopes.append(rise / (by_year.index[i] - by_year.index[j]))
    assert row["s"] == s
    assert_allclose(row["z"], (s + 1) / np.sqrt(variance), rtol=1e-9)
    assert_allclose(row["sen_slope"], np.median(slopes), rtol=0.01)  # whole years here, dates there
    assert row["z"] < -20.0
    assert 1e-6 < row["p_corrected"] < 0.05

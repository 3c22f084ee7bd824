"""Trends of dated lake results: one row per site and quantity."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.lake.trend import CONFIDENCE, CORRECTED_YEARS, Step, Trend, step_between, trend_of
from aquabuf.assess.lake.trend_words import Change, direction_of, step_words, trend_words
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["COARSE_SHARE", "FULL_YEAR", "GAP_SHARE", "MONTHLY_MONTHS", "SEASONAL", "trend_table"]

Array = NDArray[np.float64]

SEASONAL = ("auto", "month", "quarter", "annual")
FULL_YEAR = 10        # samples of a year whose mean stands for it, where sampling is monthly; practice, no source
MONTHLY_MONTHS = 7    # months of a year that are most of it; practice, no source
GAP_SHARE = 1.0 / 3.0  # longest gap over the whole span: Helsel & Hirsch 2002 (recalled)
COARSE_SHARE = 0.5    # share of tied pairs from which values are too coarse; practice, no source
DRIFT = 2.0 * np.sin(np.pi / 8.0)  # distance of two points of the year's circle 1.5 months apart; practice, no source
DRIFT_PAIRS = 0.2     # share of the pairs of years that may lie farther apart than that; practice, no source
UNKNOWN = "unknown method"

_SOURCE = ("Mann 1945, Kendall 1975 (S); Sen 1968, Gilbert 1987 (slope and interval); Hirsch, Slack & Smith 1982 "
           "(seasons); Hirsch & Slack 1984, after Hamed & Rao 1998 (serial correlation); Hirsch 1988 (step); all "
           "recalled; comparing within one method only is a choice of this program")
_WHOLE = ("samples", "undated", "n", "years", "first_year", "last_year", "s", "step_year")  # columns of whole numbers


@dataclass(frozen=True, slots=True, eq=False)
class _Samples:
    """Dated values of one site and quantity."""

    value: Array
    t: Array
    year: NDArray[np.intp]
    month: NDArray[np.intp]
    method: NDArray[np.intp]

    def where(self, kept: NDArray[np.bool_]) -> _Samples:
        """Some of them."""
        return _Samples(self.value[kept], self.t[kept], self.year[kept], self.month[kept], self.method[kept])


@dataclass(slots=True, eq=False)
class _Series:
    """The samples as a rectangle of years times blocks; season and method of each block, and how it was made."""

    t: Array
    x: Array
    year: NDArray[np.intp]
    season: NDArray[np.intp]
    method: NDArray[np.intp]
    season_unit: str
    made: str
    cautions: list[str] = field(default_factory=list)


def trend_table(frame: pd.DataFrame, *, seasonal: str = "auto", confidence: float = CONFIDENCE) -> pd.DataFrame:
    """Trend of each quantity at each site, a row for each that has a value.

    Parameters
    ----------
    frame
        A row per sample: `site`, `date` (datetime), `method` if wanted (text, "" where not known) and columns named in
        `trend_quantities.csv`. Values of different methods are never compared; an unknown method counts as one of its
        own.
    seasonal
        `month` or `quarter`: seasonal Kendall test on the median of each. `annual`: Mann-Kendall test on one value per
        year. `auto`: by month where more than half of the years have values in at least `MONTHLY_MONTHS` months and
        there are more than `CORRECTED_YEARS` years (in fewer the correlation of months cannot be told), else annual.
    confidence
        Of all intervals.

    Returns
    -------
    pandas.DataFrame
        Columns of `trend_columns.csv`, sites in order of appearance, quantities in that of their table.

    Raises
    ------
    InputError
        Where a column is missing or of the wrong kind, a value is infinite, or an option is not one of those above.

    Notes
    -----
    An annual value is the mean of the year where more than half of the years have `FULL_YEAR` samples or more by one
    method (the other years are left out: a mean of half a year is of another season), else the median of what there is,
    with a caution where the time of year differs. Times are decimal years; an annual value stands at midyear.
    """
    quantities = _checked(frame, seasonal, confidence)
    rows = [_row(site, quantity, samples, undated, names, seasonal, confidence)
            for site, quantity, samples, undated, names in _series_of(frame, quantities)]
    table = pd.DataFrame(rows, columns=[r["name"] for r in read_table("trend_columns")])
    return table.astype(dict.fromkeys(_WHOLE, "Int64"))


def _checked(frame: pd.DataFrame, seasonal: str, confidence: float) -> list[dict[str, str]]:
    """Rows of the table of quantities that the frame has."""
    for name in ("site", "date"):
        if name not in frame:
            found = ", ".join(map(str, frame.columns)) or "none"
            raise InputError(f"trends need a column {name}; found {found}. Add it.")
    if frame["date"].dtype.kind != "M":
        raise InputError(f"the column date of trends must hold dates; found {frame['date'].dtype}. Parse it first.")
    if frame["site"].isna().any():
        raise InputError(f"every sample of a trend needs a site; {frame['site'].isna().sum()} have none. Name them.")
    if seasonal not in SEASONAL:
        raise InputError(f"seasonal must be one of {', '.join(SEASONAL)}; found {seasonal!r}. Choose one.")
    if not 0.0 < confidence < 1.0:
        raise InputError(f"confidence must be between 0 and 1; found {confidence:g}. Give 90 % as 0.90.")
    known = list(read_table("trend_quantities"))
    there = [q for q in known if q["name"] in frame]
    if not there:
        raise InputError(f"trends need one of the columns {', '.join(q['name'] for q in known)}; found none. Add one.")
    for name in (q["name"] for q in there):
        if frame[name].dtype.kind not in "fiu":
            raise InputError(f"the column {name} of trends must hold numbers; found {frame[name].dtype}. Convert it.")
        if np.isinf(frame[name].to_numpy(dtype=float)).any():
            raise InputError(f"the column {name} of trends must hold finite numbers; found an infinite one. Empty it.")
    return there


def _series_of(frame: pd.DataFrame, quantities: Sequence[dict[str, str]]
               ) -> Iterator[tuple[str, dict[str, str], _Samples, int, Sequence[str]]]:
    """Site, quantity, dated values, number of undated ones and names of methods, for all that have a value."""
    date = frame["date"]
    year, month = date.dt.year.to_numpy(dtype=float), date.dt.month.to_numpy(dtype=float)
    length = 365.0 + date.dt.is_leap_year.to_numpy()
    t = year + (date.dt.day_of_year.to_numpy(dtype=float) - 0.5) / length
    method = frame["method"].fillna("").astype(str) if "method" in frame else pd.Series("", index=frame.index)
    method_code, found = pd.factorize(method)
    names = [str(name) for name in found]
    site_code, sites = pd.factorize(frame["site"])
    order = np.argsort(site_code, kind="stable")
    values = {q["name"]: frame[q["name"]].to_numpy(dtype=float) for q in quantities}
    for site, at in zip(sites, np.split(order, np.flatnonzero(np.diff(site_code[order])) + 1), strict=False):
        for quantity in quantities:
            has = at[np.isfinite(values[quantity["name"]][at])]
            dated = has[np.isfinite(t[has])]
            if has.size:
                yield str(site), quantity, _Samples(
                    values[quantity["name"]][dated], t[dated], year[dated].astype(int), month[dated].astype(int),
                    method_code[dated]), int(has.size - dated.size), names


def _series(samples: _Samples, seasonal: str) -> _Series:
    """The samples as blocks, by the rule asked for."""
    years, year_of = np.unique(samples.year, return_inverse=True)
    months = np.unique(year_of * 12 + samples.month - 1)
    most = np.bincount(months // 12, minlength=years.size) >= MONTHLY_MONTHS
    monthly = most.sum() > 0.5 * years.size and years.size > CORRECTED_YEARS
    by = ("month" if monthly else "annual") if seasonal == "auto" else seasonal
    if by == "annual":
        return _annual(samples, year_of, years.size)
    season = samples.month if by == "month" else (samples.month + 2) // 3
    return _blocks(samples, season, by, f"seasonal Kendall test by {by} (median of the samples of a {by})")


def _annual(samples: _Samples, year_of: NDArray, years: int) -> _Series:
    """One value per year and method: means of full years, else medians of what there is."""
    whole = np.zeros(samples.value.size, dtype=int)
    both, group = np.unique(np.stack((year_of, samples.method)), axis=1, return_inverse=True)
    full = np.bincount(group, minlength=both.shape[1]) >= FULL_YEAR
    if np.unique(both[0][full]).size <= 0.5 * years:
        series = _blocks(samples, whole, "", "Mann-Kendall test on annual medians")
        series.cautions += _drift(samples, year_of)
        return series
    kept = full[group]
    picked = samples.where(kept)
    made = f"Mann-Kendall test on annual means of years with {FULL_YEAR} samples or more"
    return _blocks(picked, whole[kept], "", made, mean=True)


def _blocks(samples: _Samples, season: NDArray, unit: str, made: str, *, mean: bool = False) -> _Series:
    """Rectangle of years times (season, method); several samples of one cell become their median, or mean."""
    years, row = np.unique(samples.year, return_inverse=True)
    both, column = np.unique(np.stack((season, samples.method)), axis=1, return_inverse=True)
    cell, group = np.unique(row * max(both.shape[1], 1) + column, return_inverse=True)
    count = np.bincount(group, minlength=cell.size)
    t, x = np.full((2, years.size, both.shape[1]), np.nan)
    at = np.unravel_index(cell, x.shape) if cell.size else ((), ())
    x[at] = (np.bincount(group, samples.value, cell.size) / count if mean else _medians(samples.value, group, count))
    t[at] = np.bincount(group, samples.t, cell.size) / count if unit else years[at[0]] + 0.5
    return _Series(t, x, years, both[0], both[1], unit, made)


def _medians(value: Array, group: NDArray, count: NDArray) -> Array:
    """Median of each group."""
    ordered = value[np.lexsort((value, group))]
    first = np.cumsum(count) - count
    return 0.5 * (ordered[first + (count - 1) // 2] + ordered[first + count // 2])


def _drift(samples: _Samples, year_of: NDArray) -> list[str]:
    """A caution where the samples of the years are not of the same time of year."""
    if not year_of.size:
        return []
    angle = 2.0 * np.pi * (samples.t - samples.year)
    count = np.bincount(year_of)
    place = np.bincount(year_of, np.cos(angle)) / count + 1j * np.bincount(year_of, np.sin(angle)) / count
    apart = np.abs(np.subtract.outer(place, place))[np.triu_indices(count.size, 1)]
    if not apart.size or (apart > DRIFT).mean() <= DRIFT_PAIRS:
        return []
    return [f"the time of year sampled differs between {100.0 * (apart > DRIFT).mean():.0f} % of the pairs of years"]


def _row(site: str, quantity: dict[str, str], samples: _Samples, undated: int, names: Sequence[str], seasonal: str,
         confidence: float) -> dict[str, object]:
    """One row of the table."""
    series = _series(samples, seasonal)
    trend = trend_of(series.t, series.x, confidence=confidence)
    methods, changes = _changes(series, trend, names, confidence)
    cautions = _cautions(series, trend, undated)
    known = np.isfinite(series.x)
    times, values = series.t[known], series.x[known]
    direction = direction_of(trend)
    unit = "" if quantity["unit"] == "-" else f" {quantity['unit']}"
    row: dict[str, object] = {
        name: getattr(trend, name) for name in ("status", "n", "years", "s", "z", "p", "p_from", "p_corrected", "tied")}
    row |= {
        "site": site, "quantity": quantity["name"], "label": quantity["label"], "unit": quantity["unit"],
        "words": "; ".join([trend_words(trend, unit), *step_words(changes, unit), *cautions]),
        "direction": direction, "toward": _toward(direction, quantity["harmful"]),
        "kind": "seasonal" if series.season_unit else "annual", "season": series.season_unit,
        "samples": samples.value.size, "undated": undated, "methods": " > ".join(methods),
        "sen_slope": trend.slope, "sen_low": _if_bounded(trend.low), "sen_high": _if_bounded(trend.high),
        "inflation": trend.inflation_seasons * trend.inflation_years, "cautions": "; ".join(cautions),
        "rule": _rule(series, confidence), "source": _SOURCE, "step_from": "", "step_to": ""}
    if values.size:
        row |= {"first_year": int(series.year[0]), "last_year": int(series.year[-1]),
                "median": float(np.median(values)), "change": trend.slope * float(np.ptp(times))}
    if changes:
        surest = changes[0]
        row |= {"step_from": surest.before, "step_to": surest.after, "step_year": surest.year, "step": surest.step.size,
                "step_low": _if_bounded(surest.step.low), "step_high": _if_bounded(surest.step.high),
                "step_p": surest.step.p}
    return row


def _if_bounded(end: float) -> float:
    """The end of an interval, nan where it is infinite."""
    return end if np.isfinite(end) else np.nan


def _toward(direction: str, harmful: str) -> str:
    """Whether a direction is harm or recovery; blank where neither can be said."""
    if direction not in ("rising", "falling") or not harmful:
        return ""
    return "harm" if direction == harmful else "recovery"


def _changes(series: _Series, trend: Trend, names: Sequence[str], confidence: float) -> tuple[list[str], list[Change]]:
    """Names of the methods in order of mean time, and the step from each to the next, the surest first."""
    mean = {int(m): float(np.nanmean(series.t[:, series.method == m])) for m in np.unique(series.method)}
    order = sorted(mean, key=lambda m: mean[m])
    label = {m: names[m] or UNKNOWN for m in order}
    changes = []
    for before, after in pairwise(order):
        later = [{before: False, after: True}.get(int(m)) for m in series.method]
        step = Step(size=np.nan, low=np.nan, high=np.nan, p=np.nan)
        if trend.status == "ok":
            step = step_between(series.t, series.x, series.season, later, trend.slope, widened=trend.widened,
                                confidence=confidence)
        year = series.year[np.isfinite(series.x[:, series.method == after]).any(axis=1)][0]
        changes.append(Change(label[before], label[after], int(year), step))
    methods = [] if list(label.values()) == [UNKNOWN] else list(label.values())
    return methods, sorted(changes, key=lambda c: (np.isnan(c.step.p), c.step.p))


def _cautions(series: _Series, trend: Trend, undated: int) -> list[str]:
    """What to beware of besides the figures."""
    cautions = list(series.cautions)
    if series.year.size > 1:
        gap, span = int(np.diff(series.year).max()) - 1, int(np.ptp(series.year)) + 1
        if gap > GAP_SHARE * span:
            cautions.append(f"no value in {gap} of {span} years in a row, so compare the ends rather than draw a line")
    if trend.tied > COARSE_SHARE:
        cautions.append(f"{100.0 * trend.tied:.0f} % of the pairs are tied, too many to trust the slope")
    if undated:
        cautions.append(f"{undated} value{'s' if undated > 1 else ''} without a date left out")
    return cautions


def _rule(series: _Series, confidence: float) -> str:
    """How the trend was worked out, in one line."""
    within = f"the same {series.season_unit} and method" if series.season_unit else "the same method"
    between = "covariance of the seasons times " if series.season_unit else ""
    return (f"{series.made}; Sen slope of all pairs of {within}, {100.0 * confidence:g} % interval; serial "
            f"correlation: {between}inflation by the lag-one autocorrelation of the years")

"""A survey as a whole: what to look at first, and how its lakes are spread over classes by group."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.lake.schemes import QUANTITIES, Scheme
from aquabuf.units import key

__all__ = ["ALL_LAKES", "group_table", "latest_of_site", "priorities", "site_keys", "weighted_quantile"]

ALL_LAKES = "(all)"
NO_NAMES = {"", "no_name", "noname", "unnamed", "unnamed_lake", "unknown", "none", "na", "n_a"}  # in plain form
FAR_DEGREES = 0.02  # between samples of one lake, about 2 km; common practice, no source
QUANTILES = (("low", 0.1), ("median", 0.5), ("high", 0.9))
SPREAD_OF = ("anc_used_ueq_l", "ph", "critical_load_meq_m2_yr", "exceedance_meq_m2_yr")
PRIORITY_COLUMNS = ("sample_id", "row", "site", "region", "class", "class_probability", "anc_used_ueq_l", "ph",
                    "exceedance_meq_m2_yr", "exceedance_probability", "episode_anc_ueq_l", "warnings")


def priorities(results: pd.DataFrame, scheme: Scheme) -> pd.DataFrame:
    """Lakes in the order in which to look at them, with the reason in words and the next step.

    Worst class first, then the surest exceedance of the critical load, then the lowest ANC; lakes without a class last.
    """
    order = {c.name: i for i, c in enumerate(scheme.classes)}
    rank = results["class"].map(lambda name: order.get(name, len(order))).to_numpy()
    exceeded = _exceedance(results)
    anc = results["anc_used_ueq_l"].to_numpy(dtype=float)
    at = np.lexsort((np.where(np.isnan(anc), np.inf, anc), -exceeded, rank))
    kept = [name for name in PRIORITY_COLUMNS if name in results]
    table = results.iloc[at][kept].reset_index(drop=True)
    by_name = {c.name: c for c in scheme.classes}
    unknown = f"nothing to class it by: {scheme.name} needs {' or '.join(QUANTITIES[d] for d in scheme.definitions)}"
    drawn = bool(np.isfinite(results["exceedance_probability"].to_numpy(dtype=float)).any())
    reason = [_reason(name, by_name[name].words if name in by_name else unknown, p, warnings, drawn)
              for name, p, warnings in zip(table["class"], exceeded[at], table["warnings"], strict=True)]
    steps = [by_name[name].next_step if name in by_name else "titrate it, or have its ions measured"
             for name in table["class"]]
    table.insert(0, "rank", np.arange(1, len(table) + 1))
    return table.assign(reason=reason, next_step=steps)


def _exceedance(results: pd.DataFrame) -> NDArray[np.float64]:
    """Probability that the critical load is exceeded; 1 or 0 by the value itself where there are no draws."""
    chance = results["exceedance_probability"].to_numpy(dtype=float)
    by_value = (results["exceedance_meq_m2_yr"].to_numpy(dtype=float) > 0.0).astype(float)
    return np.where(np.isfinite(chance), chance, by_value)


def _reason(class_name: str, words: str, exceeded: float, warnings: str, drawn: bool) -> str:
    parts = [words]
    if exceeded > 0.5:
        parts.append(f"critical load exceeded{f' (probability {exceeded:.2f})' if drawn else ''}")
    parts += [w for w in warnings.split("; ") if w and w not in (class_name, "critical load exceeded")]
    return "; ".join(parts)


def site_keys(frame: pd.DataFrame) -> NDArray[np.object_]:
    """Name of the lake of each row, unique for the place: its site, with the region where one name stands in several.

    Rows of one name whose coordinates lie far apart (FAR_DEGREES) are different lakes, told apart by a number behind
    the name in order of appearance. Empty where no site is given, or only words such as "unnamed".
    """
    site = frame["site"].to_numpy(dtype=object) if "site" in frame else np.full(len(frame), "", dtype=object)
    keys = np.array(["" if key(name) in NO_NAMES else name for name in site], dtype=object)
    if "region" in frame:
        region = frame["region"].to_numpy(dtype=object)
        given = pd.Series(region, dtype=object).where(region != "")
        several = given.groupby(pd.Series(keys, dtype=object)).transform("nunique").to_numpy() > 1
        more = several & (keys != "") & (region != "")
        keys[more] = keys[more] + " (" + region[more] + ")"
    if "latitude" in frame and "longitude" in frame:
        _number_places(keys, frame[["latitude", "longitude"]].to_numpy(dtype=float))
    return keys


def _number_places(keys: NDArray[np.object_], places: NDArray[np.float64]) -> None:
    """Put a number behind the names that stand in places far apart; a place is that of the first row near it."""
    known = np.flatnonzero((keys != "") & np.isfinite(places).all(axis=1))
    for rows in pd.Series(keys[known], dtype=object).groupby(keys[known], sort=False).indices.values():
        at = known[np.asarray(rows)]
        if (np.ptp(places[at], axis=0) <= FAR_DEGREES).all():
            continue
        seen: list[NDArray[np.float64]] = []
        for i in at.tolist():
            near = next((k for k, p in enumerate(seen) if (np.abs(places[i] - p) <= FAR_DEGREES).all()), None)
            if near is None:
                near = len(seen)
                seen.append(places[i])
            keys[i] = f"{keys[i]} ({near + 1})"


def latest_of_site(keys: NDArray[np.object_], dates: NDArray[np.datetime64], *,
                   classed: NDArray[np.bool_] | None = None, depth_m: NDArray[np.float64] | None = None,
                   ) -> NDArray[np.bool_]:
    """Rows that stand for their lake in the survey: the latest sample of each key; every row without one.

    A sample that has a class goes before one that has none, and of one day the shallowest counts.
    """
    keep = keys == ""
    named = np.flatnonzero(~keep)
    when = np.where(np.isnat(dates), np.datetime64("0001-01-01"), dates)[named]
    has_class = np.ones(named.size, dtype=bool) if classed is None else classed[named]
    depth = np.zeros(named.size) if depth_m is None else np.nan_to_num(depth_m)[named]
    order = named[np.lexsort((named, -depth, when, has_class))]
    last = {keys[i]: i for i in order.tolist()}
    keep[list(last.values())] = True
    return keep


def group_table(results: pd.DataFrame, scheme: Scheme, group: str, latest: NDArray[np.bool_]) -> pd.DataFrame:
    """Lakes of each group by class, and the spread of the main figures; one row for all lakes first.

    Counts are of lakes in the table, one sample each (`latest`). Where a survey weight is given, `share_` columns say
    which part of the weighted lakes falls into a class; else of the lakes counted.
    """
    table = results[latest]
    weight = table["survey_weight"].to_numpy(dtype=float) if "survey_weight" in table else np.full(len(table), np.nan)
    weighted = bool(np.isfinite(weight).any())
    weight = np.where(np.isfinite(weight), weight, 0.0 if weighted else 1.0)
    groups = table[group].to_numpy(dtype=object) if group in table else np.full(len(table), "", dtype=object)
    names = [name for name in dict.fromkeys(sorted(groups)) if name]
    sets = [(ALL_LAKES, np.ones(len(table), dtype=bool)), *((name, groups == name) for name in names)]
    return pd.DataFrame([_group_row(name, group, table[at], weight[at], scheme, weighted) for name, at in sets])


def _group_row(name: str, group: str, table: pd.DataFrame, weight: NDArray, scheme: Scheme, weighted: bool) -> dict:
    classed = (table["class"] != "").to_numpy()
    whole = float(weight[classed].sum())
    row: dict[str, object] = {
        "group": name, "grouped_by": group, "lakes": len(table), "classed": int(classed.sum()),
        "weighted": "yes" if weighted else "no", "lakes_stood_for": float(weight.sum()) if weighted else np.nan}
    for c in scheme.classes:
        hit = (table["class"] == c.name).to_numpy()
        row[f"lakes_{key(c.name)}"] = int(hit.sum())
        row[f"share_{key(c.name)}"] = float(weight[hit].sum()) / whole if whole > 0.0 else np.nan
    for column in SPREAD_OF:
        values = table[column].to_numpy(dtype=float)
        for word, quantile in QUANTILES:
            row[f"{column}_{word}"] = weighted_quantile(values, weight, quantile)
    exceeded = table["exceedance_meq_m2_yr"].to_numpy(dtype=float)
    known = np.isfinite(exceeded)
    row["exceeded"] = int((exceeded[known] > 0.0).sum())
    row["with_critical_load"] = int(known.sum())
    return row


def weighted_quantile(values: NDArray, weight: NDArray, quantile: float) -> float:
    """Smallest value up to which the weights add to `quantile` of all; nan without values."""
    known = np.isfinite(values) & (weight > 0.0)
    if not known.any():
        return float("nan")
    order = np.argsort(values[known], kind="stable")
    total = np.cumsum(weight[known][order])
    at = np.searchsorted(total, quantile * total[-1] * (1.0 - 1e-12))
    return float(values[known][order][min(at, order.size - 1)])

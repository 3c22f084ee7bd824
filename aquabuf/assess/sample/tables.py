"""The tables of an assessment: a row per sample, a row per broken limit."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.arrays import worded
from aquabuf.assess.frames import LongRows, frame_of
from aquabuf.assess.limits import Limit
from aquabuf.assess.options import Options
from aquabuf.assess.sample.columns import AS_GIVEN, result_columns
from aquabuf.assess.sample.draws import Intervals
from aquabuf.assess.sample.inputs import TITRATED_BY, alkalinity_source, ionic_strength
from aquabuf.assess.sample.solve import PAIRS, PH_AIR
from aquabuf.engine.conditions import FRESH_BELOW, LIMITS

__all__ = ["results_table", "verdict_table"]

OUTSIDE_RANGE = "air pressure is outside the range of the constants"
CARBON_FROM_AIR = ("pH and alkalinity of this acid water cannot tell its carbon (carbonate within uncertainty and "
                   "organic charge of zero); pH was kept and carbon set by air")


def results_table(kept: pd.DataFrame, figures: Mapping[str, NDArray], values: Mapping[str, NDArray],
                  choice: NDArray, spread: Intervals, broken: Mapping[str, NDArray], options: Options) -> pd.DataFrame:
    """One row per sample, all columns of results.csv in their order; those only repeated where they were given."""
    n = len(kept)
    columns = dict(figures) | _words(kept, figures, values, choice, broken)
    ordered = {}
    for column in result_columns(options):
        if column.name in AS_GIVEN and column.name not in kept:
            continue
        ordered[column.name] = columns[column.name]
        if column.interval and options.draws:
            for end, store in (("low", spread.low), ("high", spread.high)):
                ordered[f"{column.name}_{end}"] = store.get(column.name, np.full(n, np.nan))
    return frame_of(ordered)


def _words(kept: pd.DataFrame, figures: Mapping[str, NDArray], values: Mapping[str, NDArray], choice: NDArray,
           broken: Mapping[str, NDArray]) -> dict[str, NDArray]:
    """The columns that say where a row comes from and what became of it."""
    n = len(kept)
    from_air = choice == PAIRS.index(PH_AIR)
    flagged = figures["flagged"].astype(bool)
    warnings = np.full(n, "", dtype=object)
    for name, hit in broken.items():
        warnings[hit] = np.where(warnings[hit] == "", name, warnings[hit] + "; " + name)
    return {name: kept[name].to_numpy() for name in AS_GIVEN if name in kept} | {
        "status": worded(n, (flagged, "outside range"), (from_air, "carbon from air"), default="ok"),
        "status_reason": worded(n, (flagged, OUTSIDE_RANGE), *_beyond(figures), (from_air, CARBON_FROM_AIR)),
        "ionic_strength_from": ionic_strength(values)[1], "alkalinity_from": _alkalinity_from(kept, values),
        "warnings": warnings,
    }


def _alkalinity_from(kept: pd.DataFrame, values: Mapping[str, NDArray]) -> NDArray[np.object_]:
    """Where each alkalinity comes from: as measured, computed, or a titration and the method it was worked out by."""
    source = alkalinity_source(values)
    if TITRATED_BY not in kept:
        return source
    method = kept[TITRATED_BY].to_numpy(dtype=object)
    return np.where(method != "", source + " by titration (" + method + ")", source)


def _beyond(figures: Mapping[str, NDArray]) -> list[tuple[NDArray[np.bool_], str]]:
    """Which quantity of a sample is outside the range of the constants, in words."""
    cases = []
    for key, (column, unit) in {"t_c": ("temperature_c", " °C"), "salinity": ("salinity", ""),
                                "ionic_strength_mol_l": ("ionic_strength_mol_l", " mol/L of fresh water")}.items():
        low, high = LIMITS[key][:2]
        value = figures[column].astype(float)
        outside = (value < low) | (value > high)
        if key == "ionic_strength_mol_l":
            outside &= figures["salinity"].astype(float) < FRESH_BELOW
        cases.append((outside, f"{column} is outside {low:g} to {high:g}{unit}, the range of the constants"))
    return cases


def verdict_table(kept: pd.DataFrame, limits: tuple[Limit, ...], broken: Mapping[str, NDArray],
                  figures: Mapping[str, NDArray], spread: Intervals) -> pd.DataFrame:
    """One row per broken limit, sample by sample, each with its rule and source."""
    n = len(kept)
    never, nothing = np.zeros(n, dtype=bool), np.full(n, np.nan)
    rows = LongRows([broken.get(x.name, never) for x in limits])

    def of_limit(field: str) -> NDArray:
        return rows.of_mask([getattr(x, field) for x in limits])

    def of_sample(source: Mapping[str, NDArray], field: str) -> NDArray:
        return rows.pick([source.get(getattr(x, field), nothing) for x in limits]).astype(float)

    return frame_of({
        "row": kept["row"].to_numpy()[rows.sample], "sample_id": kept["sample_id"].to_numpy(dtype=object)[rows.sample],
        "warning": of_limit("name"), "words": of_limit("words"), "quantity": of_limit("quantity"),
        "value": of_sample(figures, "quantity"), "low": of_sample(spread.low, "quantity"),
        "high": of_sample(spread.high, "quantity"), "operator": of_limit("operator"),
        "limit": of_limit("limit").astype(float), "unit": of_limit("unit"),
        "probability": of_sample(spread.probability, "name"), "next_step": of_limit("next_step"),
        "source": of_limit("source")})

"""Assess a table of readings: solve, describe, check, warn, and say what was refused and why."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.limits import Limit, verdicts
from aquabuf.assess.options import Options
from aquabuf.assess.sample.closure import Closure, closure
from aquabuf.assess.sample.columns import result_columns
from aquabuf.assess.sample.curves import Inputs
from aquabuf.assess.sample.draws import intervals
from aquabuf.assess.sample.headline import BESIDE_RESULTS, alkalinity_as_read, headline, words_and_details
from aquabuf.assess.sample.inputs import alkalinity_reading, own_acids, uncertainties, values_of
from aquabuf.assess.sample.quality import Rounding, check_rows, counted, failed, roundings, sample_checks
from aquabuf.assess.sample.refuse import refusals
from aquabuf.assess.sample.solve import ALKALINITY_AIR, NO_PAIR, PAIRS, believable, choose, groups, take_rows, water_of
from aquabuf.assess.sample.tables import results_table, verdict_table
from aquabuf.chem.acids import Acid
from aquabuf.engine.status import FLAGGED
from aquabuf.readings.duplicates import duplicate_rows
from aquabuf.readings.result import BELOW_DETECTION, Readings, notes_on_file

__all__ = ["Assessment", "assess"]


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Assessment:
    """Assessed samples in input order.

    results : one row per accepted sample, columns of results.csv.
    verdicts : one row per broken limit, with its rule.
    checks : quality checks, one row per check that could be made (or only those not met).
    made, unmet : how many samples each check could be made for, and how many broke it.
    notes, flags : what the reader did to the file, and to how many cells of a column.
    rounding, duplicates : whole numbers among the readings by column, and rows refused for a name used before.
    inputs : what each sample was solved from, for curves.
    rejected : rows refused, by the reader or here: row, sample_id, column, value, rule, remedy.
    """

    results: pd.DataFrame
    verdicts: pd.DataFrame
    checks: pd.DataFrame
    inputs: Inputs
    rejected: pd.DataFrame
    notes: tuple[str, ...]
    flags: Mapping[tuple[str, str], int]
    made: Mapping[str, int]
    unmet: Mapping[str, int]
    rounding: Mapping[str, Rounding]
    duplicates: int


def assess(readings: Readings, options: Options, limits: tuple[Limit, ...], *, only_unmet_checks: bool = False,
           ) -> Assessment:
    """Assess every sample of `readings`; bad samples come back in `rejected`, the others are not disturbed."""
    acids = own_acids(readings.acids)
    frame = readings.frame
    values = values_of(frame)
    n = len(frame)
    values.setdefault("temperature_c", np.full(n, np.nan))
    u = uncertainties(values, readings.headers)
    gap = closure(values, u, acids, options)
    choice, figures = _solve(values, n, acids, options, gap)
    solved = choice != NO_PAIR
    refused = refusals(frame, values, ~solved, acids, options, readings.headers)
    keep = np.flatnonzero(solved)
    if not keep.size:
        names = [c.name for c in result_columns(options)] + list(BESIDE_RESULTS)
        figures = {name: np.full(n, np.nan) for name in names}
    figures = {name: v[keep] for name, v in figures.items()}
    kept = frame.iloc[keep].reset_index(drop=True)
    values, u, choice = take_rows(values, keep), take_rows(u, keep), choice[keep]
    figures |= alkalinity_as_read(alkalinity_reading(values), figures)
    figures["alkalinity_umol_kg"] = figures["alkalinity_meq_l"] / figures["density_kg_l"] * 1e3
    spread = intervals(values, u, choice, acids, options, limits)
    figures["draws_solved"] = spread.solved
    gap = gap.take(keep)
    figures |= {"closure_meq_l": gap.carbon_meq_l, "closure_u_meq_l": gap.carbon_u_meq_l}
    kind = kept["water_kind"].to_numpy(dtype=object) if "water_kind" in kept else np.full(keep.size, "", dtype=object)
    broken = verdicts(limits, figures, kind, figures["regime"].astype(object))
    pair = np.array(PAIRS, dtype=object)[choice]
    checks = sample_checks(values, figures, pair, gap.carbonate, gap.carbonate_u)
    figures |= {"pair": pair, "failed_checks": failed(checks, keep.size), "below_detection": _halved(readings, kept)}
    table = results_table(kept, figures, values, choice, spread, broken, options)
    return Assessment(
        results=table,
        verdicts=verdict_table(kept, limits, broken, figures, spread),
        checks=check_rows(checks, kept, only_unmet=only_unmet_checks),
        inputs=Inputs(kept[["row", "sample_id"]], values, choice, acids),
        rejected=_all_rejected(readings.rejected, refused),
        notes=notes_on_file(readings),
        flags=Counter(zip(readings.flags["what"], readings.flags["column"], strict=True)),
        made=counted(checks), unmet=counted(checks, only_unmet=True),
        rounding=roundings(values, u, readings.headers), duplicates=duplicate_rows(readings.rejected),
    )


def _all_rejected(by_reader: pd.DataFrame, here: pd.DataFrame) -> pd.DataFrame:
    """Rows refused by the reader and here, in file order."""
    parts = [p for p in (by_reader, here) if len(p)]
    return pd.concat(parts).sort_values("row", kind="stable").reset_index(drop=True) if parts else by_reader


def _halved(readings: Readings, kept: pd.DataFrame) -> NDArray[np.object_]:
    """Columns of each sample that hold half a detection limit, joined by semicolons."""
    flags = readings.flags[readings.flags["what"] == BELOW_DETECTION]
    out = np.full(len(kept), "", dtype=object)
    place = {row: i for i, row in enumerate(kept["row"].tolist())} if len(flags) else {}
    for row, column in zip(flags["row"], flags["column"], strict=True):
        if row in place:
            out[place[row]] += f"; {column}" if out[place[row]] else column
    return out


def _solve(values: Mapping[str, NDArray], n: int, acids: tuple[Acid, ...], options: Options, gap: Closure,
           ) -> tuple[NDArray[np.int8], dict[str, NDArray]]:
    """Pair used for each sample and its figures; pairs are tried in order until one has a solution."""
    final = np.full(n, NO_PAIR, dtype=np.int8)
    figures: dict[str, NDArray] = {}
    for choice in choose(values, n, options, preferred=gap.preferred, carbon_unknown=gap.carbon_unknown):
        open_now = np.where(final == NO_PAIR, choice, NO_PAIR).astype(np.int8)
        for pair, ph_column, rows in groups(values, open_now):
            part = take_rows(values, rows)
            water = water_of(part, pair, ph_column, acids, options)
            good = np.flatnonzero(believable(water))
            if not good.size:
                continue
            if good.size < rows.size:
                rows, part = rows[good], take_rows(part, good)
                water = water_of(part, pair, ph_column, acids, options)
            if options.exchange == "open" and pair != ALKALINITY_AIR:
                water = water.at_air(options.air_co2_ppm)
            numbers = headline(water, options)
            numbers |= words_and_details(water, numbers["si_calcite"], numbers["ccpp_mg_l"])
            numbers["flagged"] = water.status == FLAGGED
            final[rows] = PAIRS.index(pair)
            if rows.size == n:
                return final, numbers
            for name, v in numbers.items():
                if name not in figures:
                    empty = "" if v.dtype.kind in "UO" else False if v.dtype.kind == "b" else np.nan
                    figures[name] = np.full(n, empty, dtype=object if v.dtype.kind in "UO" else v.dtype)
                figures[name][rows] = v
    return final, figures

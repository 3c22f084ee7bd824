"""Curves of pH and buffer intensity against added acid or base, for the worst-buffered samples."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.options import Options
from aquabuf.assess.sample.inputs import Values, water_keywords
from aquabuf.assess.sample.solve import ALKALINITY_AIR, air_pco2, groups, take_rows, water_of
from aquabuf.chem.acids import Acid

__all__ = ["CURVE_COLUMNS", "Inputs", "curve_rows", "worst"]

CURVE_COLUMNS = ("row", "sample_id", "ph", "acid_added_meq_l", "buffer_closed_meq_l_ph", "acid_added_open_meq_l",
                 "buffer_open_meq_l_ph")
PH_STEP = 0.1
PH_ENDS = (3.5, 11.0)


@dataclass(frozen=True, slots=True, eq=False)
class Inputs:
    """What samples were solved from: their names, values, pairs (index of PAIRS) and the user's own acids."""

    names: pd.DataFrame
    values: Values
    choice: NDArray[np.int8]
    acids: tuple[Acid, ...]

    def take(self, rows: NDArray[np.intp]) -> Inputs:
        """The same for some of the samples."""
        return Inputs(self.names.iloc[rows].reset_index(drop=True), take_rows(self.values, rows), self.choice[rows],
                      self.acids)

    def joined(self, other: Inputs) -> Inputs:
        """These samples, then the others; a value that one side lacks is missing there."""
        n, m = len(self.names), len(other.names)
        values = {name: np.concatenate([self.values.get(name, np.full(n, np.nan)),
                                        other.values.get(name, np.full(m, np.nan))])
                  for name in {**self.values, **other.values}}
        return Inputs(pd.concat([self.names, other.names], ignore_index=True), values,
                      np.concatenate([self.choice, other.choice]), self.acids)


def worst(acid_left: NDArray, count: int) -> NDArray[np.intp]:
    """Positions of the samples that take least acid to pH 6, worst first; input order decides ties."""
    return np.argsort(acid_left, kind="stable")[:count]


def curve_rows(inputs: Inputs, options: Options) -> pd.DataFrame:
    """Long table of curves, sample by sample: pH steps of 0.1 from 3.5 to 11, closed and open to air."""
    ph = np.round(np.arange(PH_ENDS[0], PH_ENDS[1] + 0.5 * PH_STEP, PH_STEP), 10)
    parts = []
    for pair, ph_column, rows in groups(inputs.values, inputs.choice):
        part = take_rows(inputs.values, rows)
        water = water_of(part, pair, ph_column, inputs.acids, options)
        if options.exchange == "open" and pair != ALKALINITY_AIR:
            water = water.at_air(options.air_co2_ppm)
        air = air_pco2(water_keywords(part, inputs.acids, options.carbonic), options)
        added, buffer = water.curve(ph)
        added_open, buffer_open = water.curve(ph, "open", pco2_atm=air)
        many = np.repeat(rows, ph.size)
        parts.append(pd.DataFrame({
            "order": many, "row": inputs.names["row"].to_numpy()[many],
            "sample_id": inputs.names["sample_id"].to_numpy()[many], "ph": np.tile(ph, rows.size),
            "acid_added_meq_l": 1e3 * added.ravel(), "buffer_closed_meq_l_ph": 1e3 * buffer.ravel(),
            "acid_added_open_meq_l": 1e3 * added_open.ravel(), "buffer_open_meq_l_ph": 1e3 * buffer_open.ravel()}))
    if not parts:
        return pd.DataFrame(columns=list(CURVE_COLUMNS))
    table = pd.concat(parts, ignore_index=True).sort_values("order", kind="stable")
    return table[list(CURVE_COLUMNS)].reset_index(drop=True)

"""Intervals of the headline figures, and the probability of each warning, by random draws."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.limits import Limit
from aquabuf.assess.options import Options
from aquabuf.assess.sample.headline import alkalinity_as_read, headline
from aquabuf.assess.sample.inputs import Array, Values, alkalinity_reading
from aquabuf.assess.sample.solve import ALKALINITY_AIR, PH_AIR, believable, groups, take_rows, water_of
from aquabuf.assess.uncertainty import drawn, interval, row_blocks, share
from aquabuf.chem.acids import Acid

__all__ = ["Intervals", "intervals"]

OF_CARBON = ("dic_mmol_l", "co2_mmol_l", "pco2_uatm", "pco2_air_ratio", "ph_at_air", "si_calcite", "ccpp_mg_l")


@dataclass(frozen=True, slots=True, eq=False)
class Intervals:
    """Low and high ends by column, probability by limit, and the share of draws that have a solution."""

    low: dict[str, Array]
    high: dict[str, Array]
    probability: dict[str, Array]
    solved: Array


def intervals(values: Values, u: Values, choice: NDArray[np.int8], acids: tuple[Acid, ...], options: Options,
              limits: tuple[Limit, ...]) -> Intervals:
    """Draw every reading within its uncertainty and solve each draw with the pair its sample was solved with."""
    n = choice.size
    out = Intervals({}, {}, {}, np.full(n, np.nan))
    if not options.draws:
        return out
    for pair, ph_column, rows in groups(values, choice):
        for block in row_blocks(rows, options.draws):
            part, part_u = take_rows(values, block), take_rows(u, block)
            many = drawn(part, part_u, options.draws, options.seed, u)
            water = water_of(many, pair, ph_column, acids, options)
            if options.exchange == "open" and pair != ALKALINITY_AIR:
                water = water.at_air(options.air_co2_ppm)
            solved = believable(water)
            out.solved[block] = solved.reshape(block.size, options.draws).mean(axis=1)
            figures = {name: np.where(solved, v, np.nan) for name, v in headline(water, options).items()}
            figures |= alkalinity_as_read(alkalinity_reading(many), figures)  # a reading stands, solved or not
            for name, v in figures.items():
                if pair == PH_AIR and name in OF_CARBON:
                    continue  # its carbon is an assumption, and an assumption has no interval
                ends = interval(v.reshape(block.size, options.draws))
                for store, end in zip((out.low, out.high), ends, strict=True):
                    store.setdefault(name, np.full(n, np.nan))[block] = end
            for limit in limits:
                if limit.quantity in figures:
                    met = limit.met(figures[limit.quantity]).reshape(block.size, options.draws)
                    valid = np.isfinite(figures[limit.quantity]).reshape(block.size, options.draws)
                    out.probability.setdefault(limit.name, np.full(n, np.nan))[block] = share(met, valid)
    return out


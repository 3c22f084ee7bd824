"""Intervals by seeded random draws of the readings.

Every quantity has one stream of standard normal numbers, fixed by the seed and the quantity's name and shared by all
rows. A row's interval therefore depends on nothing but its own readings, whatever else is in the file.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from zlib import crc32

import numpy as np
from numpy.typing import NDArray

__all__ = ["COVERAGE", "TO_COVERAGE", "drawn", "interval", "row_blocks", "share"]

Array = NDArray[np.float64]

COVERAGE = 0.90            # of the intervals
TO_COVERAGE = 1.645        # half their width over the standard uncertainty, of a normal distribution
BLOCK_STATES = 32_768      # rows times draws at once
SIGNED = ("ph", "ph_air_equilibrated", "ph_total", "ph_seawater", "ph_free", "alkalinity_eq_l", "anc_eq_l",
          "temperature_c", "ph_temperature_c", "elevation_m", "base_cation_deposition_eq_m2_yr")


def row_blocks(rows: NDArray[np.intp], draws: int) -> Iterator[NDArray[np.intp]]:
    """Rows in blocks small enough that all their draws fit the cache."""
    size = max(1, BLOCK_STATES // draws)
    for start in range(0, rows.size, size):
        yield rows[start:start + size]


def drawn(values: Mapping[str, Array], u: Mapping[str, Array], draws: int, seed: int, names: Iterable[str],
          ) -> dict[str, Array]:
    """Random draws of the named values, all others repeated: arrays of rows times draws, row by row.

    Amounts that cannot be negative are cut at zero.
    """
    out = {}
    wanted = set(names)
    for name, value in values.items():
        many = np.repeat(value[:, None], draws, axis=1)
        if name in wanted and name in u:
            normal = np.random.default_rng([seed, crc32(name.encode())]).standard_normal(draws)
            many = many + u[name][:, None] * normal
            if name not in SIGNED:
                many = np.maximum(many, 0.0)
        out[name] = many.reshape(-1)
    return out


def interval(many: Array) -> tuple[Array, Array]:
    """Low and high end of the central COVERAGE of the solved draws, per row of a (rows, draws) array.

    Infinite draws count; an end that falls among them is infinite.
    """
    ordered = np.sort(many, axis=1)  # nan sorts to the end
    count = (~np.isnan(ordered)).sum(axis=1)
    tail = 0.5 * (1.0 - COVERAGE)
    ends = []
    for quantile in (tail, 1.0 - tail):
        position = quantile * np.maximum(count - 1, 0)
        below = np.floor(position).astype(np.intp)
        above = np.minimum(below + 1, np.maximum(count - 1, 0))
        pick = np.arange(many.shape[0])
        low, high = ordered[pick, below], ordered[pick, above]
        with np.errstate(invalid="ignore"):
            between = low + (position - below) * (high - low)
        between = np.where(np.isinf(high), np.where(position > below, high, low), between)
        ends.append(np.where(count > 1, between, np.nan))
    return ends[0], ends[1]


def share(met: NDArray[np.bool_], valid: NDArray[np.bool_]) -> Array:
    """Share of the valid draws in which something holds; nan where none is valid."""
    count = valid.sum(axis=1)
    return np.where(count > 0, (met & valid).sum(axis=1) / np.maximum(count, 1), np.nan)

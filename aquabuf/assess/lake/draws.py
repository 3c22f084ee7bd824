"""Intervals and probabilities of lakes by seeded random draws of their readings."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from zlib import crc32

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.lake.answers import Plan, answers
from aquabuf.assess.lake.classes import class_probabilities, values_used
from aquabuf.assess.lake.columns import lake_columns
from aquabuf.assess.lake.inputs import IONS, ORGANIC_U_REL, Lakes, Setting
from aquabuf.assess.lake.options import LakeOptions, Rules
from aquabuf.assess.limits import Limit
from aquabuf.assess.sample.solve import take_rows
from aquabuf.assess.uncertainty import drawn, interval, row_blocks, share

__all__ = ["DRAWN", "Spread", "spread"]

Array = NDArray[np.float64]

# Readings that are drawn. Temperature is not: within its uncertainty it moves pH by less than 0.005.
DRAWN = (
    "ph", "anc_eq_l", "alkalinity_eq_l", "dic_mol_l", "pco2_atm", *(f"{ion}_mol_l" for ion in IONS), "doc_mg_l",
    "aluminum_mol_l", "runoff_m_yr", "precipitation_m_yr", "residence_time_yr", "lake_volume_m3", "mean_depth_m",
    "lake_area_m2", "watershed_area_m2", "wind_speed_m_s", "sulfur_deposition_eq_m2_yr", "nitrate_deposition_eq_m2_yr",
    "ammonium_deposition_eq_m2_yr", "chloride_deposition_eq_m2_yr", "base_cation_deposition_eq_m2_yr",
    "hydrogen_deposition_eq_m2_yr",
)


@dataclass(slots=True, eq=False)
class Spread:
    """Low and high end by column, class probabilities by (scheme, definition), probability of each broken limit."""

    low: dict[str, Array] = field(default_factory=dict)
    high: dict[str, Array] = field(default_factory=dict)
    classes: dict[tuple[str, str], Array] = field(default_factory=dict)
    limits: dict[str, Array] = field(default_factory=dict)
    exceeded: Array | None = None  # share of the draws above the critical load


def spread(values: Mapping[str, Array], u: Mapping[str, Array], setting: Setting, plan: Plan, rules: Rules,
           options: LakeOptions, limits: tuple[Limit, ...], used: Mapping[str, NDArray[np.intp]]) -> Spread:
    """Draw the readings of each lake within their uncertainty and answer every draw. Arrays are one-dimensional.

    used : place of the definition that the class of each lake rests on, by scheme; a draw never changes it.
    """
    out = Spread()
    n = values["temperature_c"].size
    if not options.draws or not n:
        return out
    exceeded = np.full(n, np.nan)
    wanted = [c.name for c in lake_columns(options.thresholds) if c.interval]
    kept = {name: v for name, v in values.items() if name in DRAWN}
    error = np.random.default_rng([options.seed, crc32(b"organic model")]).standard_normal(options.draws)
    factor = np.maximum(1.0 + ORGANIC_U_REL * error, 0.0)[None, :]
    for block in row_blocks(np.arange(n), options.draws):
        many = drawn(take_rows(kept, block), take_rows({k: v for k, v in u.items() if k in kept}, block), options.draws,
                     options.seed, kept)
        lakes = Lakes({k: v.reshape(block.size, options.draws) for k, v in many.items()}, setting.take(block),
                      rules.organic, factor)
        found = answers(lakes, plan.take(block), rules, options, draws=options.draws)
        for name in wanted:
            _store(out, name, found.columns[name], block, n, options.draws)
        _probabilities(out, found.by_definition, rules, used, block, n, options.draws)
        for limit in limits:
            if limit.quantity in found.columns:
                figures = np.broadcast_to(found.columns[limit.quantity], (block.size, options.draws))
                chance = share(limit.met(figures), np.isfinite(figures))
                out.limits.setdefault(limit.name, np.full(n, np.nan))[block] = chance
        over = np.broadcast_to(found.columns["exceedance_meq_m2_yr"], (block.size, options.draws))
        exceeded[block] = share(over > 0.0, np.isfinite(over))
    out.exceeded = exceeded
    return out


def _store(out: Spread, name: str, figures: Array, block: NDArray[np.intp], n: int, draws: int) -> None:
    full = np.broadcast_to(figures, (block.size, draws))
    for store, end in zip((out.low, out.high), interval(full), strict=True):
        store.setdefault(name, np.full(n, np.nan))[block] = end


def _probabilities(out: Spread, by_definition: Mapping[str, Array], rules: Rules, used: Mapping[str, NDArray[np.intp]],
                   block: NDArray[np.intp], n: int, draws: int) -> None:
    """Share of the draws in each class: by each definition of a scheme, and by the one in use ("")."""
    full = {d: np.broadcast_to(v, (block.size, draws)) for d, v in by_definition.items()}
    for scheme in rules.schemes:
        by = {d: full[d] for d in scheme.definitions}
        by[""] = values_used(scheme, full, used[scheme.name][block][:, None])
        for definition, v in by.items():
            store = out.classes.setdefault((scheme.name, definition), np.full((n, len(scheme.classes)), np.nan))
            store[block] = class_probabilities(scheme, v)

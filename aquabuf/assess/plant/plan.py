"""What a plan says, checked and in house units: flow, raw water, store, steps in order, targets, guard rails."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.faults import Guards
from aquabuf.assess.plant.feed import Feeder, MadeUp, Pump
from aquabuf.assess.plant.store import Stocked

__all__ = ["DigesterSpec", "DriftSpec", "FeedSpec", "Flow", "HoldSpec", "Plan", "RawWater", "Source", "StepSpec"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Flow:
    """Flow treated now, and the least and largest of the year where given. [m3/d]"""

    now_m3_d: float
    least_m3_d: float | None = None
    most_m3_d: float | None = None


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class RawWater:
    """One water as readings: house units by column name, arrays of one row; standard uncertainty of each value.

    words : where the values are from.
    """

    name: str
    values: Mapping[str, Array]
    u: Mapping[str, Array]
    words: str


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Source:
    """A further water to blend with; share of the blend [-] or flow [m3/d] where the plan gives one."""

    name: str
    water: RawWater
    share: float | None = None
    flow_m3_d: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class FeedSpec:
    """How a product is fed and kept: its machine, what is made up from it on site, tanks and deliveries.

    Amounts in store and delivery are of the product as delivered. supply : whether it may run out.
    """

    pump: Pump | None = None
    feeder: Feeder | None = None
    made_up: MadeUp | None = None
    day_tank_l: float | None = None
    store_kg: float | None = None
    stock_kg: float | None = None
    delivery_kg: float | None = None
    shipping_d: float | None = None
    supply: str = "critical"


@dataclass(frozen=True, slots=True, eq=False)
class StepSpec:
    """A step as the plan asks for it; `line` of the file.

    values : by key of plan_keys.csv, in the unit stated there; products as Stocked, doses as mol/L of the active
        substance, targets as a tuple of Target, what may have several units as Amount with the dimension it was given
        in. A key that is neither given nor has a default is not there.
    """

    kind: str
    name: str
    values: Mapping[str, Any]
    line: int


@dataclass(frozen=True, slots=True, kw_only=True)
class HoldSpec:
    """A pH to hold with a buffer intensity [eq/L per pH], and a feed fault to hold it against.

    fault_eq_l : strong acid in excess in each liter, negative for base. [eq/L]
    window : pH; that of the guards where the plan gives none. basin_m3 : None for flowing water.
    """

    ph: float
    intensity_eq_l: float
    use: str
    window: tuple[float, float]
    basin_m3: float | None = None
    fault_eq_l: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class DigesterSpec:
    """A digester to judge: total alkalinity and volatile acids [eq/L], CO2 of its dry gas [-]; what to come back to."""

    alkalinity_eq_l: float
    volatile_acids_eq_l: float
    co2_share: float
    t_c: float
    ionic_strength_mol_l: float
    ratio: float | None = None
    ph: float | None = None


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class DriftSpec:
    """What may vary: a season of raw water, errors of single readings, the feed.

    errors : standard uncertainty by column name in house units; others keep those of the raw water.
    feed_error : standard deviation of what is fed, as a share. [-]
    """

    readings: Path | None
    mapping: Path | None
    errors: Mapping[str, float]
    feed_error: float
    draws: int
    seed: int


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Plan:
    """A plan file.

    store, feeds : by the names that the plan gives its products. limits : tables of the user's own limits, unchecked.
    assumptions : what was taken because the plan does not say. notes : what the operator should look at in the plan.
    """

    name: str
    use: str
    flow: Flow
    raw: RawWater
    sources: Mapping[str, Source]
    store: Mapping[str, Stocked]
    feeds: Mapping[str, FeedSpec]
    steps: tuple[StepSpec, ...]
    guards: Guards
    hold: HoldSpec | None
    digester: DigesterSpec | None
    drift: DriftSpec | None
    limits: Mapping[str, Mapping[str, Any]]
    assumptions: tuple[str, ...]
    notes: tuple[str, ...]
    file: str
    currency: str = ""
    date: str = ""
    note: str = ""

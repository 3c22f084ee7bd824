"""What the engineer brings: wastes and how they come, the window, reagents, site, wishes for layout and simulation.

Flows in m3/h, times in h, min or s as the names say.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from aquabuf.assess.tank.curve import MeasuredCurve
from aquabuf.assess.tank.reagents import Reagent
from aquabuf.assess.tank.waste import Waste
from aquabuf.readings.profile_file import ProfileTable

__all__ = ["TIME_RULE", "Arrival", "Batch", "Daily", "Job", "Site", "Spread", "Trial", "Window", "Wishes"]

TIME_RULE = "40 CFR 401.17 on continuous monitoring (recalled); the permit outranks it"


@dataclass(frozen=True, slots=True, kw_only=True)
class Spread:
    """How the strength of a waste varies about its mean: log-normal, much the same for `lasting_h`."""

    relative_sd: float
    lasting_h: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Daily:
    """Daily cycle of a flow: swing about its mean as a share, and the hour of its peak."""

    swing: float
    peak_h: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Batch:
    """A waste that is dumped in batches."""

    size_m3: float
    every_h: float
    over_h: float
    first_h: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Arrival:
    """A waste and how it comes: flow [m3/h], least and most of it, spread of strength; other samples of its curve."""

    waste: Waste
    mean_m3_h: float | None
    least_m3_h: float | None = None
    most_m3_h: float | None = None
    spread: Spread | None = None
    daily: Daily | None = None
    batch: Batch | None = None
    samples: tuple[MeasuredCurve, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Window:
    """pH that the discharge must keep, the aim of the last stage (None: to be chosen), and the time rule.

    source : of the window. time_source : of the time rule, where that is not the file's own.
    """

    low: float
    high: float
    aim: float | None
    total_min: float
    each_min: float
    source: str
    time_source: str = TIME_RULE


@dataclass(frozen=True, slots=True, kw_only=True)
class Site:
    """What is there or bought: depth, errors of feed and probe, reagent line, storage."""

    depth_m: float
    feed_error: float
    resolution: float
    turndown: float
    line_m: float
    line_bore_mm: float
    probe_lag_s: float
    probe_noise_ph: float
    outlet_limit_c: float
    storage_d: float | None
    containment: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Wishes:
    """Parts of the layout that are set already; None where the design chooses."""

    stages: int | None
    volumes_m3: tuple[float, ...] | None
    set_points: tuple[float, ...] | None
    equalization_m3: float | None
    axis: str
    feedforward: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class Trial:
    """How the design is tried: length, step (None: by the fastest lag), cases, what varies from case to case."""

    days: float
    step_s: float | None
    cases: int
    seed: int
    buffer_sd: float
    probe_offset_sd: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Job:
    """A stream file, read and checked.

    residence_min : by reagent, where the file sets it. profile : measured course; statistics of the wastes else.
    """

    name: str
    arrivals: tuple[Arrival, ...]
    window: Window
    reagents: Mapping[str, Reagent]
    site: Site
    wishes: Wishes
    trial: Trial
    residence_min: Mapping[str, float] = field(default_factory=dict)
    base: str | None = None
    acid: str | None = None
    profile: ProfileTable | None = None
    date: str = ""
    note: str = ""
    currency: str = ""
    assumptions: tuple[str, ...] = field(default=())
    notes: tuple[str, ...] = field(default=())
    file: str = ""

    @property
    def wastes(self) -> tuple[Waste, ...]:
        """The wastes alone."""
        return tuple(a.waste for a in self.arrivals)

"""What a simulated plant is made of: feeders, probes, tanks in series, and the inflow they have to cope with."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.tank.control import Controller
from aquabuf.assess.tank.faults import Fault
from aquabuf.errors import InputError

__all__ = ["Feeder", "Inflow", "Probe", "Tank", "step_for"]

Array = NDArray[np.float64]

STEPS_PER_LAG = 5.0  # of dead time plus probe lag: sampling then adds a tenth to the dead time
STEPS_PER_TANK = 20.0
ROUND_STEPS_S = (0.5, 1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0, 12.0, 15.0, 20.0, 30.0, 60.0)


@dataclass(frozen=True, slots=True)
class Feeder:
    """A pump or valve with its reagent. Amounts are positive; its place in the tank says base or acid.

    largest_eq_h : what it can deliver. [eq/h]
    normality_eq_l : of the liquid fed, which adds its volume; inf adds none (gas, solid). [eq/L]
    base_eq_eq : base moved per equivalent fed; 0 for carbon dioxide. carbon_mol_eq : carbon brought. [mol/eq]
    resolution : smallest step of delivery, share of the largest.
    repeatability : each setting is off by an even chance within plus or minus this share of the flow asked for.
    turndown : largest over least; below the least it is off.
    line_dead_s : from feeder to tank. dissolution_per_min : first order; None at once.
    ceiling_ph : what is undissolved stops dissolving there.
    """

    largest_eq_h: float
    normality_eq_l: float
    carbon_mol_eq: float = 0.0
    base_eq_eq: float = 1.0
    resolution: float = 0.0
    repeatability: float = 0.0
    turndown: float = math.inf
    line_dead_s: float = 0.0
    dissolution_per_min: float | None = None
    ceiling_ph: float | None = None

    def __post_init__(self) -> None:
        if not (self.largest_eq_h > 0.0 and self.normality_eq_l > 0.0 and self.turndown >= 1.0):
            raise InputError(f"a feeder needs delivery and strength above zero and a turndown of 1 or more; found "
                             f"{self.largest_eq_h} eq/h, {self.normality_eq_l} eq/L and {self.turndown}. Correct it.")
        low = min(self.carbon_mol_eq, self.resolution, self.repeatability, self.line_dead_s, self.base_eq_eq)
        if not (low >= 0.0 and self.resolution <= 1.0 and self.repeatability <= 1.0):
            raise InputError("carbon, resolution, repeatability and dead time of a feeder must not be negative, and "
                             f"shares at most 1; found {self}. Correct it.")
        if self.dissolution_per_min is not None and not self.dissolution_per_min > 0.0:
            raise InputError(f"a dissolution rate must be above zero; found {self.dissolution_per_min} per min. Leave "
                             "it out for a reagent that is dissolved.")
        if self.ceiling_ph is not None and self.dissolution_per_min is None:
            raise InputError(f"a ceiling (pH {self.ceiling_ph}) slows dissolution, but this reagent dissolves at once. "
                             "Give dissolution_per_min or leave the ceiling out.")


@dataclass(frozen=True, slots=True, eq=False)
class Probe:
    """A pH electrode: dead time (mixing and its own) and first-order lag [s], noise (standard deviation) and offset."""

    lag_s: float = 0.0
    noise_ph: float = 0.0
    offset_ph: float | Array = 0.0
    dead_s: float = 0.0

    def __post_init__(self) -> None:
        if not min(self.lag_s, self.noise_ph, self.dead_s) >= 0.0:
            raise InputError(f"lag, noise and dead time of a probe must not be negative; found {self.lag_s} s, "
                             f"{self.noise_ph} pH and {self.dead_s} s. Correct it.")


@dataclass(frozen=True, slots=True, eq=False)
class Tank:
    """A stirred tank.

    volume_m3 : of its contents, which stay full; with least_m3 the level moves between the two while out_m3_h is
        drawn off; full, it lets everything through, and at its least no more than comes in.
    start_m3 : level at the start; halfway where None. start_base_eq_l, start_amounts : contents at the start, which
        are else those of the steady state.
    fixed_eq_h : feed where there is no controller, negative for acid; one value or one per case. [eq/h]
    """

    name: str
    volume_m3: float
    base: Feeder | None = None
    acid: Feeder | None = None
    probe: Probe = field(default_factory=Probe)
    controller: Controller | None = None
    fixed_eq_h: float | Array = 0.0
    least_m3: float | None = None
    out_m3_h: float | None = None
    start_m3: float | None = None
    start_base_eq_l: float | None = None
    start_amounts: tuple[float, ...] | None = None
    faults: tuple[Fault, ...] = ()

    def __post_init__(self) -> None:
        if not self.volume_m3 > 0.0:
            raise InputError(f"the volume of tank '{self.name}' must be above zero; found {self.volume_m3} m3. "
                             "Size it.")
        if self.least_m3 is not None and not (0.0 < self.least_m3 <= self.volume_m3 and (self.out_m3_h or -1.0) > 0.0):
            raise InputError(f"tank '{self.name}' with a moving level needs a least volume above zero and up to its "
                             f"{self.volume_m3} m3, and a draw-off; found {self.least_m3} m3 and {self.out_m3_h} m3/h. "
                             "Give least_m3 and out_m3_h.")
        if self.controller is not None and self.base is None and self.acid is None:
            raise InputError(f"the controller of tank '{self.name}' needs a feeder; found none. Give base or acid.")
        fixed = np.asarray(self.fixed_eq_h)
        if ((fixed > 0.0).any() and self.base is None) or ((fixed < 0.0).any() and self.acid is None):
            raise InputError(f"the fixed feed of tank '{self.name}' needs a feeder for it; found none. Give base or "
                             "acid.")

    @property
    def feeders(self) -> tuple[Feeder | None, Feeder | None]:
        """Base first."""
        return self.base, self.acid


class Inflow:
    """What comes in; each value holds until the next time.

    time_s : (n,), from 0, rising. flow_m3_h, base_eq_l : (n,) or (n, cases). amounts : (J, n) or (J, n, cases).
    """

    def __init__(self, time_s: ArrayLike, flow_m3_h: ArrayLike, base_eq_l: ArrayLike, amounts: ArrayLike):
        self.time_s = np.atleast_1d(np.asarray(time_s, dtype=float))
        n = self.time_s.size
        if n == 0 or self.time_s[0] != 0.0 or not (np.diff(self.time_s) > 0.0).all():
            raise InputError(f"times of an inflow start at 0 s and rise; found {self.time_s[:3]} ... Sort them.")
        flow, base = (np.asarray(v, dtype=float) for v in (flow_m3_h, base_eq_l))
        held = np.asarray(amounts, dtype=float)
        held = held.reshape(-1, n) if held.ndim < 2 else held
        columns = {a.shape[-1] for a in (flow, base) if a.ndim == 2} | ({held.shape[2]} if held.ndim == 3 else set())
        self.cases = max(columns, default=1)
        flow, base, held = (a[..., None] if a.ndim == d else a for a, d in ((flow, 1), (base, 1), (held, 2)))
        for name, a in (("flow", flow), ("base", base), ("amounts", held)):
            if a.shape[-2] != n or a.shape[-1] not in (1, self.cases):
                raise InputError(f"{name} of an inflow must have {n} times and 1 or {self.cases} cases; found shape "
                                 f"{a.shape}. Give one value per time.")
            if not np.isfinite(a).all():
                raise InputError(f"{name} of an inflow must be finite; found {np.count_nonzero(~np.isfinite(a))} "
                                 "values that are not. Fill the gaps first.")
        if (flow < 0.0).any() or (held < 0.0).any():
            raise InputError(f"flow and amounts of an inflow must not be negative; found {flow.min()} m3/h and "
                             f"{held.min(initial=0.0)}. Correct the profile.")
        self.flow_m3_h = np.broadcast_to(flow, (n, self.cases))
        self.base_eq_l = np.broadcast_to(base, (n, self.cases))
        self.amounts = np.broadcast_to(held, (held.shape[0], n, self.cases))

    @property
    def rows(self) -> Array:
        """Base and amounts together, shape (n, 1 + J, cases)."""
        return np.concatenate([self.base_eq_l[:, None], np.moveaxis(self.amounts, 0, 1)], axis=1)


def step_for(tanks: Sequence[Tank], flow_m3_h: float | None = None) -> float:
    """Step for a simulation, from the fastest loop: a fifth of dead time plus probe lag, at least 0.5 s. [s]

    With a flow, also no more than a twentieth of the shortest residence. Rounded down to a plain number.
    """
    wanted = [ROUND_STEPS_S[-1]]
    for tank in tanks:
        if tank.controller is not None:
            line = min(f.line_dead_s for f in tank.feeders if f is not None)
            quick = line + tank.probe.dead_s + tank.probe.lag_s
            wanted.append(quick / STEPS_PER_LAG)
        if flow_m3_h is not None:
            wanted.append(3600.0 * (tank.least_m3 or tank.volume_m3) / flow_m3_h / STEPS_PER_TANK)
    return max((s for s in ROUND_STEPS_S if s <= min(wanted)), default=ROUND_STEPS_S[0])

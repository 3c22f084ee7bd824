"""Contents of stirred tanks in series, carried forward exactly over a step.

Over a step inflow and feeds are constant, so each tank follows V dx/dt = sum F_in (x_in - x): an exponential where the
level stays, a power of the volume where it moves. What flows out is what came in less what stayed, so base and every
carrier are conserved to rounding. Base moves with reagents and nothing else (reaction invariants: Gustafsson & Waller
1983, recalled).

Arrays are stages first, then base and carriers as rows, then cases. Base in kiloequivalents: eq/L times m3.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.tank.equipment import Feeder, Tank
from aquabuf.engine.readout import Readout

__all__ = ["Flows", "Pool", "pools_of"]

Array = NDArray[np.float64]

NO_FLOW = 1e-300  # keeps a tank without flow from dividing by zero


@dataclass(frozen=True, slots=True)
class Pool:
    """Reagent of one feeder that waits to dissolve, in its own tank and all below."""

    stage: int
    side: int  # 0 base, 1 acid
    feeder: Feeder

    @property
    def per_h(self) -> float:
        """First-order rate away from the ceiling. [1/h]"""
        return 60.0 * (self.feeder.dissolution_per_min or 0.0)

    @property
    def sign(self) -> float:
        """Base moved per equivalent dissolved."""
        return self.feeder.base_eq_eq * (1.0, -1.0)[self.side]

    def share(self, ph: Array) -> Array:
        """Share of its rate left at a pH."""
        if self.feeder.ceiling_ph is None:
            return np.ones_like(ph)
        away = (ph - self.feeder.ceiling_ph) * (1.0, -1.0)[self.side]
        return 1.0 - 10.0 ** np.minimum(away, 0.0)


def pools_of(tanks: Sequence[Tank]) -> list[Pool]:
    """Feeders whose reagent takes time to dissolve."""
    return [Pool(s, side, f) for s, tank in enumerate(tanks) for side, f in enumerate(tank.feeders)
            if f is not None and f.dissolution_per_min is not None]


class Flows:
    """Contents x (S, rows, N) and undissolved u (P, S, N) of tanks, and the flows of the step just made."""

    def __init__(self, readout: Readout, tanks: Sequence[Tank], pools: Sequence[Pool], carbon: int | None,
                 volume_m3: Array, x: Array, u: Array, dt_h: float):
        shape = volume_m3.shape
        self._readout, self._pools, self._dt, self._carbon = readout, pools, dt_h, carbon
        self.volume, self.x, self.u = volume_m3.copy(), x.copy(), u.copy()
        self._moves = [t.least_m3 is not None for t in tanks]
        self._most = [t.volume_m3 for t in tanks]
        self._least = [t.least_m3 or t.volume_m3 for t in tanks]
        self._draw = [t.out_m3_h or 0.0 for t in tanks]
        feeders = [[t.feeders[side] for t in tanks] for side in (0, 1)]
        self._water = _each(feeders, lambda f: 1e-3 / f.normality_eq_l)
        direct = _each(feeders, lambda f: 1e-3 * float(f.dissolution_per_min is None))
        signed = direct * _each(feeders, lambda f: f.base_eq_eq) * np.array([1.0, -1.0])[:, None, None]
        self._base_per_eq, self._carbon_per_eq = signed, direct * _each(feeders, lambda f: f.carbon_mol_eq)
        self._has_carbon = carbon is not None and bool(self._carbon_per_eq.any())
        self.inflow = np.empty(shape)    # into each tank from above [m3/h]
        self._through, self._decay = np.empty(shape), np.empty(shape)
        self._new_volume = self.volume.copy()
        self._out_flow = np.empty(shape)
        self._fed, self._added, self._added_carbon = (np.empty((2, *shape)) for _ in range(3))
        rows = (x.shape[1], shape[1])
        self._rate, self._target, self._change = np.empty(rows), np.empty(rows), np.empty(rows)
        self.out_rate = np.zeros(rows)                       # of the last tank [keq/h, k units/h]
        self.out_pools = np.zeros((len(pools), shape[1]))    # [keq/h]
        self.full_h, self.empty_h = np.zeros(shape), np.zeros(shape)

    def advance(self, flow_m3_h: Array, in_rate: Array, fed_eq_h: Array, ph: Array) -> None:
        """One step: inflow (N,), what it carries (rows, N) [keq/h], feeds (2, S, N), pH at its start (S, N)."""
        self._flow(flow_m3_h, fed_eq_h)
        np.multiply(fed_eq_h, self._base_per_eq, out=self._added)
        np.add(self._added[0], self._added[1], out=self._added[0])
        if self._has_carbon:
            np.multiply(fed_eq_h, self._carbon_per_eq, out=self._added_carbon)
            np.add(self._added_carbon[0], self._added_carbon[1], out=self._added_carbon[0])
        else:
            self._added_carbon[0] = 0.0
        for p, pool in enumerate(self._pools):
            self._dissolve(p, pool, fed_eq_h[pool.side, pool.stage], ph)
        self._carry(in_rate)
        self.volume, self._new_volume = self._new_volume, self.volume

    def _flow(self, flow_m3_h: Array, fed_eq_h: Array) -> None:
        """Flows into and out of each tank, its volume at the end, and the share of its contents that remains."""
        fed, through, decay = self._fed, self._through, self._decay
        np.multiply(fed_eq_h, self._water, out=fed)
        np.add(fed[0], fed[1], out=fed[0])
        if any(self._moves):
            self._flow_levels(flow_m3_h)
        else:
            np.cumsum(fed[0], axis=0, out=through)
            np.add(through, flow_m3_h, out=through)
            np.subtract(through, fed[0], out=self.inflow)
            np.divide(through, self.volume, out=decay)
            self._out_flow = through
        np.multiply(decay, -self._dt, out=decay)
        np.exp(decay, out=decay)

    def _flow_levels(self, flow_m3_h: Array) -> None:
        """The same where a level moves: over a step it moves evenly, and ln x falls by through/slope ln(V1/V0)."""
        above: Array = flow_m3_h
        self._out_flow = np.empty(self.volume.shape)
        for s, moves in enumerate(self._moves):
            self.inflow[s] = above
            self._through[s] = above + self._fed[0][s]
            v0 = self.volume[s]
            if not moves:
                self._out_flow[s], self._new_volume[s] = self._through[s], v0
                self._decay[s] = self._through[s] / v0
            else:
                wanted = v0 + (self._through[s] - self._draw[s]) * self._dt
                v1 = np.minimum(np.maximum(wanted, self._least[s]), self._most[s])
                self._out_flow[s] = np.maximum(self._through[s] - (v1 - v0) / self._dt, 0.0)
                self._new_volume[s] = v1
                self.full_h[s] += (wanted > self._most[s]) * self._dt
                self.empty_h[s] += (wanted < self._least[s]) * self._dt
                rise = v1 / v0 - 1.0
                slowed = np.divide(np.log1p(rise), rise, out=np.ones_like(rise), where=rise != 0.0)
                self._decay[s] = self._through[s] / v0 * slowed
            above = self._out_flow[s]

    def _dissolve(self, p: int, pool: Pool, fed_eq_h: Array, ph: Array) -> None:
        """Undissolved reagent of one feeder down the tanks; adds what dissolves to base and carbon."""
        rate_in = 1e-3 * fed_eq_h
        for s in range(pool.stage, self.volume.shape[0]):
            v0, v1, through, u0 = self.volume[s], self._new_volume[s], self._through[s], self.u[p, s]
            middle = 0.5 * (v0 + v1)
            k = self._per_h(pool, s, ph[s], u0 * v0)
            loss = through + k * middle
            target = rate_in / np.maximum(loss, NO_FLOW)
            u1 = target + (u0 - target) * self._decay[s] * np.exp(-k * self._dt)
            gone = rate_in - (v1 * u1 - v0 * u0) / self._dt  # dissolved and carried off
            dissolved = gone * (k * middle / np.maximum(self._out_flow[s] + k * middle, NO_FLOW))
            self.u[p, s] = u1
            self._added[0, s] += pool.sign * dissolved
            self._added_carbon[0, s] += pool.feeder.carbon_mol_eq * dissolved
            rate_in = gone - dissolved
        self.out_pools[p] = rate_in

    def _per_h(self, pool: Pool, s: int, ph: Array, waiting: Array) -> Array:
        """Rate of dissolution [1/h]; near the ceiling no more in a step than would lift the tank to it."""
        k = pool.per_h * pool.share(ph)
        ceiling = pool.feeder.ceiling_ph
        if ceiling is None or pool.sign == 0.0:
            return k
        room = (self._readout.base_at(ceiling, self.x[s, 1:]) - self.x[s, 0]) / pool.sign * self.volume[s]
        at_most = np.maximum(room, 0.0) / np.maximum(waiting * self._dt, NO_FLOW)
        return np.minimum(k, at_most)

    def _carry(self, in_rate: Array) -> None:
        """Base and carriers down the tanks."""
        rate, target, change = self._rate, self._target, self._change
        np.copyto(rate, in_rate)
        through, decay, fresh = self._through, self._decay, self._has_carbon or bool(self._pools)
        np.maximum(through, NO_FLOW, out=through)
        for s, moves in enumerate(self._moves):
            rate[0] += self._added[0, s]
            if fresh and self._carbon is not None:
                rate[1 + self._carbon] += self._added_carbon[0, s]
            x = self.x[s]
            np.divide(rate, through[s], out=target)
            np.subtract(x, target, out=change)
            np.multiply(change, decay[s], out=change)
            np.add(change, target, out=change)   # contents at the end
            if moves:
                np.subtract(rate, (self._new_volume[s] * change - self.volume[s] * x) / self._dt, out=rate)
                np.copyto(x, change)
            else:
                np.copyto(target, x)
                np.copyto(x, change)
                np.subtract(change, target, out=change)
                np.multiply(change, self.volume[s], out=change)
                np.multiply(change, 1.0 / self._dt, out=change)
                np.subtract(rate, change, out=rate)
        np.copyto(self.out_rate, rate)


def _each(feeders: Sequence[Sequence[Feeder | None]], of: object) -> Array:
    """A property of each feeder, shape (2, S, 1); zero where there is none."""
    return np.array([[0.0 if f is None else of(f) for f in side] for side in feeders])[:, :, None]  # type: ignore[operator]

"""Contents of stirred tanks in series, carried forward exactly over a step.

Over a step inflow and feeds are constant, so each tank follows V dx/dt = sum F_in (x_in - x): an exponential where the
level stays, a power of the volume where it moves. What flows out is what came in less what stayed, so base and every
carrier are conserved to rounding. Base moves with reagents and nothing else (reaction invariants: Gustafsson & Waller
1983, recalled).

Arrays are stages first, then base and carriers as rows, then cases. Base in kiloequivalents: eq/L times m3.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.tank.equipment import Feeder, Tank
from aquabuf.engine.readout import GRID_PH, Readout

__all__ = ["Flows", "Pool", "pools_of"]

Array = NDArray[np.float64]

NO_FLOW = 1e-300  # keeps a tank without flow from dividing by zero
STANDING = 1e-9   # of its contents: a tank that exchanges less in a step counts as standing


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

    def rate_at(self, ph: Array) -> Array:
        """Rate at a pH: the same up to the ceiling, then none. [1/h]"""
        if self.feeder.ceiling_ph is None:
            return np.full(ph.shape, self.per_h)
        return np.where((ph - self.feeder.ceiling_ph) * (1.0, -1.0)[self.side] < 0.0, self.per_h, 0.0)


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
        self._per_step = volume_m3 / dt_h
        self._moves = [t.least_m3 is not None for t in tanks]
        self._any_moves = any(self._moves)
        self._most = [t.volume_m3 for t in tanks]
        self._least = [t.least_m3 or t.volume_m3 for t in tanks]
        self._draw = [t.out_m3_h or 0.0 for t in tanks]
        self._at_ceiling = {p: _ceiling(readout, p.feeder.ceiling_ph) for p in pools if p.feeder.ceiling_ph is not None}
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

    def advance(self, flow_m3_h: Array, in_rate: Array, fed_eq_h: Array) -> None:
        """One step: inflow (N,), what it carries (rows, N) [keq/h], and feeds (2, S, N)."""
        self._flow(flow_m3_h, fed_eq_h)
        np.multiply(fed_eq_h, self._base_per_eq, out=self._added)
        np.add(self._added[0], self._added[1], out=self._added[0])
        if self._has_carbon:
            np.multiply(fed_eq_h, self._carbon_per_eq, out=self._added_carbon)
            np.add(self._added_carbon[0], self._added_carbon[1], out=self._added_carbon[0])
        self._carry(in_rate, fed_eq_h)
        self.volume, self._new_volume = self._new_volume, self.volume

    def _flow(self, flow_m3_h: Array, fed_eq_h: Array) -> None:
        """Flows into and out of each tank, its volume at the end, and the share of its contents that remains."""
        fed, through, decay = self._fed, self._through, self._decay
        np.multiply(fed_eq_h, self._water, out=fed)
        np.add(fed[0], fed[1], out=fed[0])
        if self._any_moves:
            self._flow_levels(flow_m3_h)
        else:
            np.cumsum(fed[0], axis=0, out=through)
            np.add(through, flow_m3_h, out=through)
            np.subtract(through, fed[0], out=self.inflow)
            np.divide(through, self.volume, out=decay)
            self._out_flow = through  # the same array
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

    def _carry(self, in_rate: Array, fed_eq_h: Array) -> None:
        """Base and carriers down the tanks."""
        rate, change = self._rate, self._change
        np.copyto(rate, in_rate)
        np.maximum(self._through, NO_FLOW, out=self._through)
        self.out_pools.fill(0.0)
        for s, moves in enumerate(self._moves):
            rate[0] += self._added[0, s]
            if self._has_carbon:
                rate[1 + self._carbon] += self._added_carbon[0, s]  # type: ignore[operator]
            self._mix(s)
            for p, pool in enumerate(self._pools):
                if pool.stage <= s:
                    self._dissolve(p, pool, s, fed_eq_h)
                    self._mix(s)
            x = self.x[s]
            if moves:
                np.subtract(rate, (self._new_volume[s] * change - self.volume[s] * x) / self._dt, out=rate)
                np.copyto(x, change)
            else:
                stored = np.subtract(change, x, out=self._target)
                np.copyto(x, change)
                np.multiply(stored, self._per_step[s], out=stored)
                np.subtract(rate, stored, out=rate)
        np.copyto(self.out_rate, rate)

    def _mix(self, s: int) -> None:
        """Contents of a tank at the end of the step, given the rate at which all comes in; into `_change`."""
        x, target, change = self.x[s], self._target, self._change
        np.divide(self._rate, self._through[s], out=target)
        np.subtract(x, target, out=change)
        np.multiply(change, self._decay[s], out=change)
        np.add(change, target, out=change)

    def _dissolve(self, p: int, pool: Pool, s: int, fed_eq_h: Array) -> None:
        """Undissolved reagent of one feeder in one tank; adds what dissolves to what comes in.

        First order, but no more than brings the tank to the ceiling by the end of the step; then dissolution runs
        evenly at what there is room for.
        """
        v0, v1, through, decay, u0 = self.volume[s], self._new_volume[s], self._through[s], self._decay[s], self.u[p, s]
        into = 1e-3 * fed_eq_h[pool.side, s] if pool.stage == s else self.out_pools[p].copy()
        middle, k = 0.5 * (v0 + v1), pool.per_h
        rate = k * middle
        target = into / (through + rate)
        u1 = target + (u0 - target) * (decay * math.exp(-k * self._dt))
        gone = into - (v1 * u1 - v0 * u0) / self._dt  # dissolved and carried off
        dissolved = gone * (rate / (self._out_flow[s] + rate))
        room = self._room(pool, s, dissolved)
        if room is not None and (is_full := dissolved > room).any():
            dissolved = np.where(is_full, room, dissolved)
            target = (into - dissolved) / through
            u1 = np.where(is_full, target + (u0 - target) * decay, u1)
            gone = into - (v1 * u1 - v0 * u0) / self._dt
        self.u[p, s], self.out_pools[p] = u1, gone - dissolved
        self._rate[0] += pool.sign * dissolved
        if self._carbon is not None:
            self._rate[1 + self._carbon] += pool.feeder.carbon_mol_eq * dissolved

    def _room(self, pool: Pool, s: int, wanted: Array) -> Array | None:
        """Rate of dissolution that brings a tank to the ceiling by the end of the step [keq/h]; None where there is
        surely more than is wanted.

        Metals only hold base: what a base has room for without them is no more than it has.
        """
        if pool.feeder.ceiling_ph is None or pool.sign == 0.0:
            return None
        end, (water, held) = self._change, self._at_ceiling[pool]
        stays = np.maximum(1.0 - self._decay[s], STANDING)  # a steady rate lifts contents by stays / through
        if pool.sign > 0.0:
            lift = water + held @ end[1:] - end[0]
            if (pool.sign * wanted * stays <= lift * self._through[s]).all():
                return None
        lift = (self._readout.base_at(pool.feeder.ceiling_ph, end[1:]) - end[0]) / pool.sign
        return np.maximum(lift, 0.0) * np.where(stays > STANDING, self._through[s] / stays, self.volume[s] / self._dt)


def _ceiling(readout: Readout, ph: float) -> tuple[float, Array]:
    """Base of the water and of one unit of each carrier at a pH, without metals."""
    held = np.array([np.interp(ph, GRID_PH, table) for table in readout.held])
    return float(readout.c_oh * 10.0**ph - readout.c_h * 10.0**-ph), held


def _each(feeders: Sequence[Sequence[Feeder | None]], of: object) -> Array:
    """A property of each feeder, shape (2, S, 1); zero where there is none."""
    return np.array([[0.0 if f is None else of(f) for f in side] for side in feeders])[:, :, None]  # type: ignore[operator]

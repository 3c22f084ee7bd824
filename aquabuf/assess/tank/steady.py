"""Where a simulation starts: every tank at its set point, or as near as its feeders bring it, on the first inflow."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.tank.equipment import Inflow, Tank
from aquabuf.assess.tank.flows import Pool
from aquabuf.engine.readout import Readout

__all__ = ["Start", "start_of"]

Array = NDArray[np.float64]

HALVINGS = 60


@dataclass(frozen=True, slots=True, eq=False)
class Start:
    """Volumes (S, N) [m3], contents x (S, rows, N), undissolved u (P, S, N) [eq/L], signed feed (S, N) [eq/h], pH."""

    volume_m3: Array
    x: Array
    u: Array
    feed_eq_h: Array
    inflow_m3_h: Array
    ph: Array


def start_of(readout: Readout, tanks: Sequence[Tank], inflow: Inflow, pools: Sequence[Pool], carbon: int | None,
             until_s: float) -> Start:
    """Steady state on the first inflow; a tank with a moving level holds the mean of the inflow over the record."""
    flow, into = inflow.flow_m3_h[0], inflow.rows[0]
    mean_flow, mean = _mean(inflow, until_s)
    flow, into = np.where(flow > 0.0, flow, mean_flow), np.where(flow > 0.0, into, mean)
    n = inflow.cases
    rate, waiting = flow * into, np.zeros((len(pools), n))
    volume, feed, flow_in = np.empty((len(tanks), n)), np.empty((len(tanks), n)), np.empty((len(tanks), n))
    x, u = np.empty((len(tanks), *into.shape)), np.zeros((len(pools), len(tanks), n))
    for s, tank in enumerate(tanks):
        volume[s] = tank.volume_m3
        if tank.least_m3 is not None:
            volume[s] = 0.5 * (tank.least_m3 + tank.volume_m3) if tank.start_m3 is None else tank.start_m3
            drawn = np.full(n, tank.out_m3_h)
            rate = mean * drawn if s == 0 else rate * (drawn / np.where(flow > 0.0, flow, np.inf))
            flow = drawn
        one = _One(readout, tank, s, pools, carbon, volume[s], flow, rate, waiting)
        feed[s] = one.settled_feed() if tank.controller is not None else tank.fixed_eq_h
        flow_in[s] = flow
        x[s], u[:, s], flow = one.contents(feed[s])
        if tank.start_base_eq_l is not None:
            x[s, 0] = tank.start_base_eq_l
        if tank.start_amounts is not None:
            x[s, 1:] = np.reshape(tank.start_amounts, (-1, 1))
        rate, waiting = x[s] * flow, u[:, s] * flow
    return Start(volume, x, u, feed, flow_in, readout.ph(x[:, 0], np.moveaxis(x[:, 1:], 1, 0)))


def _mean(inflow: Inflow, until_s: float) -> tuple[Array, Array]:
    """Mean flow and flow-weighted mean of base and amounts over the record."""
    ends = np.append(inflow.time_s[1:], max(until_s, inflow.time_s[-1] + 1.0))
    lasts = np.clip(np.minimum(ends, until_s) - inflow.time_s, 0.0, None)[:, None]
    weight = lasts * inflow.flow_m3_h
    whole = weight.sum(axis=0)
    share = np.where(whole > 0.0, weight / np.where(whole > 0.0, whole, 1.0), lasts / lasts.sum())
    return whole / lasts.sum(), (share[:, None] * inflow.rows).sum(axis=0)


class _One:
    """One tank in steady state, given what comes in from above."""

    def __init__(self, readout: Readout, tank: Tank, stage: int, pools: Sequence[Pool], carbon: int | None,
                 volume: Array, flow: Array, rate: Array, waiting: Array):
        self._readout, self._tank, self._stage, self._pools, self._carbon = readout, tank, stage, pools, carbon
        self._volume, self._flow, self._rate, self._waiting = volume, flow, rate, waiting
        self._ph = np.full(flow.shape, readout.neutral_ph if tank.controller is None else tank.controller.setpoint_ph)

    def settled_feed(self) -> Array:
        """Signed feed at which the tank is at its set point, or the nearest that the feeders give. [eq/h]"""
        low, high = (np.full(self._flow.shape, sign * (f.largest_eq_h if f is not None else 0.0))
                     for f, sign in ((self._tank.acid, -1.0), (self._tank.base, 1.0)))
        for _ in range(HALVINGS):
            middle = 0.5 * (low + high)
            x, _, _ = self.contents(middle)
            is_short = x[0] < self._readout.base_at(self._ph, x[1:])
            low, high = np.where(is_short, middle, low), np.where(is_short, high, middle)
        return 0.5 * (low + high)

    def contents(self, feed_eq_h: Array) -> tuple[Array, Array, Array]:
        """Contents (rows, N), undissolved (P, N) and outflow for a feed."""
        fed = 1e-3 * np.maximum(np.stack([feed_eq_h, -feed_eq_h]), 0.0)
        rate, through = self._rate.copy(), self._flow.copy()
        for side, f in enumerate(self._tank.feeders):
            if f is None:
                continue
            through = through + fed[side] / f.normality_eq_l
            if f.dissolution_per_min is None:
                self._add(rate, (1.0, -1.0)[side] * f.base_eq_eq, f.carbon_mol_eq, fed[side])
        some = np.maximum(through, 1e-300)
        u = np.zeros(self._waiting.shape)
        for p, pool in enumerate(self._pools):
            supply = self._waiting[p] + (fed[pool.side] if pool.stage == self._stage else 0.0)
            k = pool.rate_at(self._ph)
            u[p] = supply / (some + k * self._volume)
            self._add(rate, pool.sign, pool.feeder.carbon_mol_eq, k * self._volume * u[p])
        return rate / some, u, through

    def _add(self, rate: Array, base_per_eq: float, carbon_per_eq: float, amount: Array) -> None:
        rate[0] += base_per_eq * amount
        if self._carbon is not None:
            rate[1 + self._carbon] += carbon_per_eq * amount

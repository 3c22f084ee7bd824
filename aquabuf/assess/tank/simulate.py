"""A neutralization plant in time: stirred tanks in series, feeds, probes, controllers and faults, many cases at once.

Balances of base and of every carrier are linear and exact over each step; pH is read from them last. Mixing dead time
stands in the measured signal, so that a tank's own lag is its full residence: a little slower than lag plus dead time.
A simulation starts at rest on the first inflow (`steady`).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.tank.control import Controller, Loops
from aquabuf.assess.tank.equipment import Feeder, Inflow, Probe, Tank, step_for
from aquabuf.assess.tank.faults import FAULTS, Fault, FaultMasks
from aquabuf.assess.tank.flows import Flows, Pool, pools_of
from aquabuf.assess.tank.signals import Delay, FeederAction, Noise, Probes
from aquabuf.assess.tank.steady import Start, start_of
from aquabuf.engine.readout import Readout
from aquabuf.errors import InputError

__all__ = ["FAULTS", "Controller", "Fault", "Feeder", "Inflow", "Probe", "Simulated", "Tank", "simulate", "step_for"]

Array = NDArray[np.float64]

ON_STEP = 1e-6  # of a step: a time this close to a step falls on it


@dataclass(frozen=True, slots=True, eq=False)
class Simulated:
    """What happened.

    Recorded: time_s (T,), ph, base_eq_l, reagent_eq_h (base less acid, as it reaches the tank) and level_m3, each
    (S, T, N).
    Over all steps, per case (N,): minutes of the last tank outside `window` and in its longest excursion, lowest and
    highest pH there. Per stage and case: base_used_eq, acid_used_eq; full_min, empty_min of a moving level.
    balance_error (1 + J, N): of base and each carrier, share of all that came in and was there at the start.
    """

    stages: tuple[str, ...]
    window: tuple[float, float]
    step_s: float
    steps: int
    time_s: Array
    ph: Array
    base_eq_l: Array
    reagent_eq_h: Array
    level_m3: Array
    outside_min: Array
    longest_min: Array
    lowest_ph: Array
    highest_ph: Array
    base_used_eq: Array
    acid_used_eq: Array
    full_min: Array
    empty_min: Array
    balance_error: Array

    @property
    def simulated_min(self) -> float:
        """Length of the record. [min]"""
        return self.steps * self.step_s / 60.0


def simulate(readout: Readout, tanks: Sequence[Tank], inflow: Inflow, *, until_s: float, window: tuple[float, float],
             dt_s: float | None = None, seed: int = 0, first_case: int = 0, carbon_carrier: int | None = None,
             sample_s: float | None = None, record_every_s: float | None = None) -> Simulated:
    """Run a plant.

    window : least and most pH of the last tank. dt_s : step, `step_for` where None. sample_s : interval of probes and
    controllers, the step where None. carbon_carrier : row of the amounts that carbon of reagents goes to.
    record_every_s : None records start and end only. first_case : number of the first case, which its noise follows.

    Raises InputError where the pieces do not fit.
    """
    dt_s = step_for(tanks, float(inflow.flow_m3_h.max())) if dt_s is None else dt_s
    _check(readout, tanks, inflow, until_s, dt_s, carbon_carrier)
    steps = math.ceil(until_s / dt_s - ON_STEP)
    every = max(1, round((sample_s or dt_s) / dt_s))
    keep = steps if record_every_s is None else max(1, round(record_every_s / dt_s))
    pools = pools_of(tanks)
    start = start_of(readout, tanks, inflow, pools, carbon_carrier, until_s)
    run = _Run(readout, tanks, inflow, start, pools, dt_s, every, carbon_carrier, seed, first_case)
    record, tally = _Record(run, start, steps, keep), _Tally(window, dt_s / 60.0, inflow.cases)
    for k in range(steps):
        run.step(k)
        tally.count(run.ph[-1])
        if (k + 1) % keep == 0:
            record.add(k + 1)
    used = run.fed_sum * (dt_s / 3600.0)
    return Simulated(
        stages=tuple(t.name for t in tanks), window=window, step_s=dt_s, steps=steps, time_s=record.time_s,
        ph=record.ph, base_eq_l=record.base, reagent_eq_h=record.reagent, level_m3=record.level,
        outside_min=tally.outside, longest_min=tally.longest, lowest_ph=tally.lowest, highest_ph=tally.highest,
        base_used_eq=used[0], acid_used_eq=used[1], full_min=60.0 * run.flows.full_h,
        empty_min=60.0 * run.flows.empty_h, balance_error=run.balance_error(start, steps))


def _check(readout: Readout, tanks: Sequence[Tank], inflow: Inflow, until_s: float, dt_s: float,
           carbon: int | None) -> None:
    if not tanks:
        raise InputError("a simulation needs at least one tank; found none. Give the stages of the plant.")
    if not (dt_s > 0.0 and until_s >= dt_s):
        raise InputError(f"step and length must be above zero and the length at least a step; found {dt_s} s and "
                         f"{until_s} s. Correct them.")
    if inflow.amounts.shape[0] != readout.carriers:
        raise InputError(f"an inflow needs one row of amounts per carrier ({readout.carriers}); found "
                         f"{inflow.amounts.shape[0]}. Give each carrier a row.")
    shortest = float(np.diff(inflow.time_s).min(initial=np.inf))
    if shortest < dt_s * (1.0 - ON_STEP):
        raise InputError(f"the step must not be longer than the inflow holds a value ({shortest:g} s); found "
                         f"{dt_s:g} s. Shorten dt_s, or average the profile.")
    feeders = [f for t in tanks for f in t.feeders if f is not None]
    if carbon is None and any(f.carbon_mol_eq > 0.0 for f in feeders):
        raise InputError("carbon that a reagent brings needs a carrier; none was named. Give carbon_carrier, its row.")
    if carbon is not None and not 0 <= carbon < readout.carriers:
        raise InputError(f"carbon_carrier is a row from 0 to {readout.carriers - 1}; found {carbon}. Correct it.")


class _Run:
    """The plant between two steps."""

    def __init__(self, readout: Readout, tanks: Sequence[Tank], inflow: Inflow, start: Start, pools: Sequence[Pool],
                 dt_s: float, every: int, carbon: int | None, seed: int, first_case: int):
        s, n = start.ph.shape
        self._inflow, self._dt_s, self._every, self._pools = inflow, dt_s, every, pools
        self._carbon, self._tanks = carbon, tanks
        self.flows = Flows(readout, tanks, pools, carbon, start.volume_m3, start.x, start.u, dt_s / 3600.0)
        self._amounts = np.moveaxis(self.flows.x[:, 1:], 1, 0)
        self._follower = readout.follower((s, n), start.ph)
        self.ph = self._follower.follow(self.flows.x[:, 0], self._amounts)
        feeders = [[t.feeders[side] for t in tanks] for side in (0, 1)]
        self._action = FeederAction(feeders, (s, n))
        fixed = np.stack([np.broadcast_to(np.asarray(t.fixed_eq_h, dtype=float), (n,)) for t in tanks])
        self._loops = Loops([t.controller for t in tanks], fixed, -self._action.largest[1], self._action.largest[0],
                            every * dt_s)
        self._probes = Probes(tanks, self.ph, dt_s)
        self._loops.settle(self._probes.shown, start.inflow_m3_h, start.feed_eq_h)
        self.flows.inflow[:] = start.inflow_m3_h
        self._noise = Noise(seed, range(first_case, first_case + n), s, even=self._action.has_scatter,
                            normal=any(t.probe.noise_ph > 0.0 for t in tanks))
        lines = [[round((0.0 if f is None else f.line_dead_s) / dt_s) for f in side] for side in feeders]
        feed = np.maximum(np.stack([start.feed_eq_h, -start.feed_eq_h]), 0.0)
        self._line = Delay(np.ravel(lines).astype(np.intp), feed.reshape(2 * s, n))
        self._masks = FaultMasks([t.faults for t in tanks], n)
        self._events = self._event_steps()
        self._delivered, self.fed, self.fed_sum = feed, feed, np.zeros((2, s, n))
        self.out_sum, self.pools_out_sum = np.zeros((1 + readout.carriers, n)), np.zeros((len(pools), n))
        self.in_sum, self.in_size = np.zeros(self.out_sum.shape), np.zeros(self.out_sum.shape)
        self._since, self._in_rate, self._flow = 0, np.zeros(self.out_sum.shape), np.zeros(n)

    def _event_steps(self) -> list[int]:
        """Steps at which inflow or faults change, last first."""
        times = [*self._inflow.time_s, *self._masks.edges_s]
        return sorted({math.ceil(t / self._dt_s - ON_STEP) for t in times}, reverse=True)

    def step(self, k: int) -> None:
        """One step from k dt to (k + 1) dt."""
        if self._events and self._events[-1] <= k:
            self._change(k)
        if k % self._every == 0:
            normal, even = self._noise.next()
            shown = self._probes.read(normal, self._masks.stuck if self._any_stuck else None)
            self._delivered = self._action.deliver(self._loops.act(shown, self.flows.inflow), even)
        if self._any_pump:
            np.copyto(self._delivered, self._action.largest, where=self._masks.full)
            np.copyto(self._delivered, 0.0, where=self._masks.out)
        two_rows = self._delivered.reshape(-1, self._delivered.shape[-1])
        self.fed = self._line.pass_on(two_rows).reshape(self._delivered.shape)
        self.flows.advance(self._flow, self._in_rate, self.fed)
        self._follower.follow(self.flows.x[:, 0], self._amounts)
        self._probes.follow(self.ph)
        np.add(self.fed_sum, self.fed, out=self.fed_sum)
        np.add(self.out_sum, self.flows.out_rate, out=self.out_sum)
        if self._pools:
            np.add(self.pools_out_sum, self.flows.out_pools, out=self.pools_out_sum)

    def _change(self, k: int) -> None:
        """Inflow and faults from step k on."""
        self._close(k)
        self._events.pop()
        time_s = (k + ON_STEP) * self._dt_s
        self._masks.set(time_s)
        self._any_stuck = bool(self._masks.stuck.any())
        self._any_pump = bool(self._masks.full.any() or self._masks.out.any())
        i = int(np.searchsorted(self._inflow.time_s, time_s, side="right")) - 1
        self._flow = self._inflow.flow_m3_h[i]
        amounts = self._inflow.amounts[:, i] * ~self._masks.buffer_lost
        self._in_rate = self._flow * np.concatenate([self._inflow.base_eq_l[i][None], amounts])

    def _close(self, k: int) -> None:
        """Book what came in since the last change."""
        self.in_sum += (k - self._since) * self._in_rate
        self.in_size += (k - self._since) * np.abs(self._in_rate)
        self._since = k

    def balance_error(self, start: Start, steps: int) -> Array:
        """In and fed, less out and stored, of base and each carrier; share of in, fed and start."""
        self._close(steps)
        dt_h = self._dt_s / 3600.0
        before = self._stored(start.volume_m3, start.x, start.u)
        fed, left = np.zeros(self.in_sum.shape), self.out_sum * dt_h
        for s, tank in enumerate(self._tanks):
            for side, f in enumerate(tank.feeders):
                if f is not None:
                    amount = self.fed_sum[side, s] * dt_h * 1e-3
                    fed += self._worth((1.0, -1.0)[side] * f.base_eq_eq, f.carbon_mol_eq, amount)
        for p, pool in enumerate(self._pools):
            left += self._worth(pool.sign, pool.feeder.carbon_mol_eq, self.pools_out_sum[p] * dt_h)
        rest = before + self.in_sum * dt_h + fed - left - self._stored(self.flows.volume, self.flows.x, self.flows.u)
        size = np.abs(before) + self.in_size * dt_h + np.abs(fed)
        return np.divide(np.abs(rest), size, out=np.abs(rest), where=size > 0.0)

    def _stored(self, volume: Array, x: Array, u: Array) -> Array:
        stored = (volume[:, None] * x).sum(axis=0)
        for p, pool in enumerate(self._pools):
            stored = stored + self._worth(pool.sign, pool.feeder.carbon_mol_eq, (volume * u[p]).sum(axis=0))
        return stored

    def _worth(self, base_per_eq: float, carbon_per_eq: float, amount: Array) -> Array:
        """Base and carbon in an amount of reagent, as rows."""
        rows = np.zeros(self.in_sum.shape)
        rows[0] = base_per_eq * amount
        if self._carbon is not None:
            rows[1 + self._carbon] = carbon_per_eq * amount
        return rows


class _Record:
    """Every so many steps, from the start on."""

    def __init__(self, run: _Run, start: Start, steps: int, keep: int):
        self._run, self._keep = run, keep
        s, n = start.ph.shape
        size = (s, steps // keep + 1, n)
        self.time_s: Array = np.arange(size[1], dtype=float) * keep * run._dt_s
        self.ph, self.base, self.reagent, self.level = (np.empty(size) for _ in range(4))
        self.add(0)

    def add(self, step: int) -> None:
        """Keep the moment after this many steps."""
        i, run = step // self._keep, self._run
        self.ph[:, i], self.base[:, i], self.level[:, i] = run.ph, run.flows.x[:, 0], run.flows.volume
        np.subtract(run.fed[0], run.fed[1], out=self.reagent[:, i])


class _Tally:
    """Minutes outside the window, of all steps."""

    def __init__(self, window: tuple[float, float], step_min: float, cases: int):
        self._low, self._high, self._step = *window, step_min
        self.outside, self.longest, self._run = np.zeros(cases), np.zeros(cases), np.zeros(cases)
        self.lowest, self.highest = np.full(cases, np.inf), np.full(cases, -np.inf)
        self._is_out = np.empty(cases, dtype=bool)
        self._other = np.empty(cases, dtype=bool)
        self._part = np.empty(cases)

    def count(self, ph: Array) -> None:
        """Count a step that ended at this pH."""
        np.minimum(self.lowest, ph, out=self.lowest)
        np.maximum(self.highest, ph, out=self.highest)
        np.less(ph, self._low, out=self._is_out)
        np.logical_or(np.greater(ph, self._high, out=self._other), self._is_out, out=self._is_out)
        np.multiply(self._is_out, self._step, out=self._part)
        np.add(self.outside, self._part, out=self.outside)
        np.add(self._run, self._part, out=self._run)
        np.multiply(self._run, self._is_out, out=self._run)
        np.maximum(self.longest, self._run, out=self.longest)

"""Between controller and tank: dead times, probes, noise, and what a feeder makes of the flow it is asked for."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.tank.equipment import Feeder, Tank

__all__ = ["Delay", "FeederAction", "Noise", "Probes"]

Array = NDArray[np.float64]

BLOCK = 512          # moments drawn at a time
FINEST = 1e-12       # of the largest delivery: a feeder without steps


class Delay:
    """Dead time of each row of a signal (R, N), in whole steps, kept in a ring."""

    def __init__(self, steps: NDArray[np.intp], start: Array):
        self._length = int(steps.max(initial=0)) + 1
        rows, n = start.shape
        self._ring = np.repeat(start[None], self._length, axis=0).reshape(-1, n)
        self._rows = rows
        now = np.arange(self._length)[:, None]
        self._late = (now - steps) % self._length * rows + np.arange(rows)  # places in the ring, for each now
        self._out = start.copy()
        self._now = 0

    def pass_on(self, value: Array) -> Array:
        """Take the signal of now, give that of each row's dead time ago."""
        if self._length == 1:
            return value
        self._ring[self._now * self._rows:(self._now + 1) * self._rows] = value
        self._ring.take(self._late[self._now], axis=0, out=self._out, mode="clip")
        self._now = (self._now + 1) % self._length
        return self._out


class Noise:
    """Random numbers of each case from its own stream, drawn in blocks: normal for probes, even for feeders.

    The stream of a case follows from seed and case number alone, so a case is the same in whatever company it runs.
    """

    def __init__(self, seed: int, cases: Sequence[int], stages: int, *, normal: bool, even: bool):
        streams = [np.random.SeedSequence([seed, c]).spawn(2) for c in cases]
        self._normal = [np.random.default_rng(s[0]) for s in streams] if normal else []
        self._even = [np.random.default_rng(s[1]) for s in streams] if even else []
        self._normals = np.zeros((BLOCK, stages, len(cases)))
        self._evens = np.zeros((BLOCK, 2, stages, len(cases)))
        self._at = BLOCK

    def next(self) -> tuple[Array, Array]:
        """Standard normals (S, N) and even draws from -1 to 1 (2, S, N); zeros where none were asked for."""
        if self._at == BLOCK:
            for i, g in enumerate(self._normal):
                self._normals[..., i] = g.standard_normal(self._normals.shape[:-1])
            for i, g in enumerate(self._even):
                self._evens[..., i] = g.uniform(-1.0, 1.0, self._evens.shape[:-1])
            self._at = 0
        self._at += 1
        return self._normals[self._at - 1], self._evens[self._at - 1]


class Probes:
    """What the probes of all tanks show: dead time, then a first-order lag on the pH, then offset and noise."""

    def __init__(self, tanks: Sequence[Tank], ph: Array, dt_s: float):
        probes = [t.probe for t in tanks]
        self._delay = Delay(np.array([round(p.dead_s / dt_s) for p in probes], dtype=np.intp), ph)
        self._share = np.array([1.0 if p.lag_s == 0.0 else -np.expm1(-dt_s / p.lag_s) for p in probes])[:, None]
        self._noise = np.array([p.noise_ph for p in probes])[:, None]
        self._offset = np.stack([np.broadcast_to(p.offset_ph, ph.shape[1:]) for p in probes]).astype(float)
        self._is_quick = bool((self._share == 1.0).all())
        self._lagged, self._part = ph.copy(), np.empty(ph.shape)
        self.shown = ph + self._offset

    def follow(self, ph: Array) -> None:
        """Let a step pass that ended at this pH."""
        late = self._delay.pass_on(ph)
        if self._is_quick:
            np.copyto(self._lagged, late)
            return
        np.subtract(late, self._lagged, out=self._part)
        np.multiply(self._part, self._share, out=self._part)
        np.add(self._lagged, self._part, out=self._lagged)

    def read(self, noise: Array, stuck: NDArray[np.bool_] | None) -> Array:
        """Take a reading; a stuck probe keeps its last."""
        part = np.multiply(noise, self._noise, out=self._part)
        np.add(part, self._offset, out=part)
        np.add(part, self._lagged, out=part)
        if stuck is None:
            np.copyto(self.shown, part)
        else:
            np.copyto(self.shown, part, where=~stuck)
        return self.shown


class FeederAction:
    """What base and acid feeders (2, S, N) make of the flow asked for: steps, scatter, limits, off below the least."""

    def __init__(self, feeders: Sequence[Sequence[Feeder | None]], shape: tuple[int, ...]):
        def each(of: object) -> Array:
            return np.array([[0.0 if f is None else of(f) for f in side]  # type: ignore[operator]
                             for side in feeders])[:, :, None]

        self.largest = each(lambda f: f.largest_eq_h)
        self._step = np.maximum(each(lambda f: f.resolution * f.largest_eq_h), FINEST * np.maximum(self.largest, 1.0))
        self._scatter = each(lambda f: f.repeatability)
        self._least = each(lambda f: f.largest_eq_h / f.turndown)
        self._is_stepped = bool(each(lambda f: f.resolution).any())
        self._has_least = bool(self._least.any())
        self.has_scatter = bool(self._scatter.any())
        self._out, self._part = np.empty((2, *shape)), np.empty((2, *shape))

    def deliver(self, asked: Array, even: Array) -> Array:
        """Flow delivered [eq/h] for a signed demand (S, N): positive to the base feeder, negative to the acid one."""
        out, part = self._out, self._part
        np.maximum(asked, 0.0, out=out[0])
        np.maximum(np.negative(asked, out=out[1]), 0.0, out=out[1])
        if self._is_stepped:
            np.multiply(np.rint(np.divide(out, self._step, out=out), out=out), self._step, out=out)
        if self.has_scatter:
            np.multiply(even, self._scatter, out=part)
            np.multiply(part, out, out=part)
            np.add(out, part, out=out)
        np.minimum(out, self.largest, out=out)
        if self._has_least:
            np.multiply(out, out >= self._least, out=out)
        return out

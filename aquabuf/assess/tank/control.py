"""Controllers of reagent feeds: their tuning from lag and dead time, and their action step by step.

A controller asks for reagent [eq/h], positive for base and negative for acid. Its error is counted on the pH axis, or
on the demand axis: base that the nominal titration curve needs from the measured pH to the set point. On that axis a
stirred tank is linear, so one gain serves all pH (reaction invariants: Gustafsson & Waller 1983; linear output: Wright
& Kravaris 1991, both recalled).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import brentq

from aquabuf.engine.readout import GRID_PH, PH_LEAST, PH_STEP
from aquabuf.errors import InputError

__all__ = ["AXES", "Controller", "Loop", "Loops", "Tuning", "half_rule", "simc", "steepest_slope", "tank_loop",
           "ultimate"]

Array = NDArray[np.float64]

AXES = ("ph", "demand")
RESET_DEAD_TIMES = 8.0  # SIMC: reset is the lag, but at most 8 dead times


@dataclass(frozen=True, slots=True)
class Loop:
    """A process as one lag and one dead time. [s]"""

    lag_s: float
    dead_s: float


@dataclass(frozen=True, slots=True)
class Tuning:
    """Settings of a PI controller and how far they are from cycling.

    gain : controller output per unit of error; reset_s : integral time.
    ultimate_gain, ultimate_period_s : where the loop would cycle; gain_margin : ultimate gain over gain.
    """

    gain: float
    reset_s: float
    ultimate_gain: float
    ultimate_period_s: float
    gain_margin: float
    rule: str = "SIMC (Skogestad 2003), closed-loop time constant equal to the dead time"


@dataclass(frozen=True, slots=True, eq=False)
class Controller:
    """A PI controller of one tank.

    gain : eq/h per pH on the axis "ph", eq/h per eq/L on the axis "demand".
    reset_s : integral time; inf leaves a proportional controller. [s]
    curve_ph, curve_base_eq_l : nominal titration curve, rising; needed on the demand axis.
    flow_ref_m3_h : with a value, output goes with the measured inflow over this flow (ratio feed-forward), so that the
        gain, tuned at this flow, follows the flow too.
    schedule : points (pH, factor on the gain), straight lines between them, held beyond.
    """

    setpoint_ph: float
    gain: float
    reset_s: float
    axis: str = "ph"
    curve_ph: Sequence[float] | Array | None = None
    curve_base_eq_l: Sequence[float] | Array | None = None
    flow_ref_m3_h: float | None = None
    schedule: tuple[tuple[float, float], ...] = ()

    def __post_init__(self) -> None:
        if self.axis not in AXES:
            raise InputError(f"the axis of a controller is one of {', '.join(AXES)}; found '{self.axis}'. Choose one.")
        if not (self.gain > 0.0 and self.reset_s > 0.0):
            raise InputError(f"gain and reset of a controller must be above zero; found gain {self.gain} and reset "
                             f"{self.reset_s} s. Tune it with `simc`.")
        if self.axis == "demand" and (self.curve_ph is None or self.curve_base_eq_l is None):
            raise InputError("a controller on the demand axis needs a nominal titration curve; none was given. Give "
                             "curve_ph and curve_base_eq_l, or use the axis ph.")
        if self.curve_ph is not None and not (np.diff(self.curve_ph) > 0.0).all():
            raise InputError("pH of a nominal titration curve must rise from point to point; it does not. Sort the "
                             "points.")
        if self.flow_ref_m3_h is not None and not self.flow_ref_m3_h > 0.0:
            raise InputError(f"the flow that a ratio refers to must be above zero; found {self.flow_ref_m3_h} m3/h. "
                             "Give the flow at which the controller was tuned.")

    def scale_at(self, ph: ArrayLike) -> Array:
        """The controlled axis at a pH: pH itself, or base on the nominal curve [eq/L]."""
        x = np.asarray(ph, dtype=float)
        if self.axis == "ph" or self.curve_ph is None or self.curve_base_eq_l is None:
            return x
        return np.interp(x, self.curve_ph, self.curve_base_eq_l)

    def gain_at(self, ph: ArrayLike) -> Array:
        """Gain at a measured pH."""
        x = np.asarray(ph, dtype=float)
        if not self.schedule:
            return np.full(x.shape, self.gain)
        at, factor = np.transpose(self.schedule)
        return self.gain * np.interp(x, at, factor)


# ---------------------------------------------------------------- tuning

def half_rule(lags_s: Sequence[float], dead_s: float = 0.0) -> Loop:
    """One lag and one dead time for several lags in series: half of the second lag goes to each, smaller ones to dead.

    Source: Skogestad 2003, J. Process Control 13:291 (recalled).
    """
    lags = sorted((lag for lag in lags_s if lag > 0.0), reverse=True)
    if not lags:
        raise InputError("a loop needs a lag above zero; none was given. Give volume and flow of the tank.")
    second = lags[1] if len(lags) > 1 else 0.0
    return Loop(lags[0] + 0.5 * second, dead_s + 0.5 * second + sum(lags[2:]))


def tank_loop(volume_m3: float, flow_m3_h: float, *, mixing_dead_s: float, line_dead_s: float = 0.0,
              probe_dead_s: float = 0.0, probe_lag_s: float = 0.0, dissolution_per_min: float | None = None,
              sample_s: float = 0.0) -> Loop:
    """Lag and dead time of a stirred tank with its feed line and probe.

    The tank's lag is volume over flow less its mixing dead time (Shinskey/McMillan form, recalled); dissolution and
    probe are further lags under the half rule; half a sampling interval counts as dead time.
    """
    lag = 3600.0 * volume_m3 / flow_m3_h - mixing_dead_s
    if not lag > 0.0:
        raise InputError(f"mixing must be quicker than the tank's residence of {lag + mixing_dead_s:.0f} s; found a "
                         f"dead time of {mixing_dead_s:.0f} s. Mix harder or enlarge the tank.")
    dissolving = 0.0 if dissolution_per_min is None else 60.0 / dissolution_per_min
    dead = line_dead_s + mixing_dead_s + probe_dead_s + 0.5 * sample_s
    return half_rule((lag, probe_lag_s, dissolving), dead)


def ultimate(loop: Loop) -> tuple[float, float]:
    """Ultimate period [s] and ultimate loop gain [-] of a lag with dead time under proportional control.

    Phase of -180 degrees: w dead + atan(w lag) = pi; gain there sqrt(1 + (w lag)^2).
    """
    if not loop.dead_s > 0.0:
        return 0.0, float("inf")
    low, high = 0.5 * np.pi / loop.dead_s, np.pi / loop.dead_s
    w = float(brentq(lambda x: x * loop.dead_s + np.arctan(x * loop.lag_s) - np.pi, low, high, xtol=1e-14 * high))
    return 2.0 * np.pi / w, float(np.hypot(1.0, w * loop.lag_s))


def simc(loop: Loop, process_gain: float) -> Tuning:
    """PI settings by the SIMC rule: gain lag / (2 dead K), reset min(lag, 8 dead).

    process_gain : K, change of the controlled axis per unit of output. On the demand axis 1 / (1000 flow), flow in m3/h
        [eq/L per eq/h]; on the pH axis that times the largest slope of the curve within the control band, because a
        loop tuned on a flat part cycles on the steep one.

    Source: Skogestad 2003, J. Process Control 13:291, closed-loop time constant equal to the dead time (recalled).
    """
    if not (loop.dead_s > 0.0 and process_gain > 0.0):
        raise InputError(f"SIMC needs a dead time and a process gain above zero; found {loop.dead_s} s and "
                         f"{process_gain}. Count mixing, line, probe and sampling.")
    period, ku = ultimate(loop)
    gain = loop.lag_s / (2.0 * loop.dead_s) / process_gain
    return Tuning(gain=gain, reset_s=min(loop.lag_s, RESET_DEAD_TIMES * loop.dead_s), ultimate_gain=ku / process_gain,
                  ultimate_period_s=period, gain_margin=ku / process_gain / gain)


def steepest_slope(curve_ph: ArrayLike, curve_base_eq_l: ArrayLike, low_ph: float, high_ph: float) -> float:
    """Largest slope of a titration curve within a control band. [pH per eq/L]"""
    ph, base = np.asarray(curve_ph, dtype=float), np.asarray(curve_base_eq_l, dtype=float)
    touched = (ph[1:] > low_ph) & (ph[:-1] < high_ph)
    if not touched.any():
        raise InputError(f"a titration curve must reach the control band pH {low_ph} to {high_ph}; it runs from "
                         f"{ph[0]:.2f} to {ph[-1]:.2f}. Titrate further.")
    rise = np.diff(base)[touched]
    return float((np.diff(ph)[touched] / np.where(rise > 0.0, rise, np.nan)).max()) if (rise > 0.0).all() else np.inf


# ---------------------------------------------------------------- action

class Loops:
    """Controllers of all stages, acting at once on stages times cases. A stage without one keeps its fixed feed.

    Positional form: output = scale (gain error + integral), held between the limits of the feeders. The integral rests
    while the output is at a limit and the error pushes further (anti-windup by conditional integration).
    """

    def __init__(self, controllers: Sequence[Controller | None], fixed_eq_h: Array, low_eq_h: Array, high_eq_h: Array,
                 interval_s: float):
        self._low, self._high = low_eq_h, high_eq_h
        shape = fixed_eq_h.shape
        some = [c or Controller(7.0, 1.0, np.inf) for c in controllers]
        held = np.array([c is not None for c in controllers])[:, None]
        tables = np.array([c.scale_at(GRID_PH) for c in some])
        slope = np.diff(tables) / PH_STEP
        self._slope, self._start = slope.ravel(), (tables[:, :-1] - slope * GRID_PH[:-1]).ravel()
        self._offset = (np.arange(len(some)) * slope.shape[1])[:, None]
        self._last = slope.shape[1] - 1
        self._aim = np.array([float(c.scale_at(c.setpoint_ph)) for c in some])[:, None]
        self._is_scheduled = any(c.schedule for c in some)
        self._gains = (np.array([c.gain_at(GRID_PH[:-1]) for c in some]) * held).ravel()
        self._gain: Array = np.array([c.gain for c in some])[:, None] * held
        self._per_reset = np.array([interval_s / c.reset_s for c in some])[:, None]
        self._ratio = np.array([c.flow_ref_m3_h is not None for c in some])[:, None]
        self._flow_ref = np.array([c.flow_ref_m3_h or 1.0 for c in some])[:, None]
        self._has_ratio = bool(self._ratio.any())
        self._integral = fixed_eq_h.copy()
        self._scale = np.ones(shape)
        self._k = np.empty(shape, dtype=np.intp)
        self._error, self._part, self._out, self._free = (np.empty(shape) for _ in range(4))

    def settle(self, ph: Array, flow_m3_h: Array, output_eq_h: Array) -> None:
        """Bumpless start: the first output at this pH and flow is `output_eq_h`."""
        self._measure(ph, flow_m3_h)
        live = self._gain > 0.0
        wanted = np.divide(output_eq_h, self._scale, out=np.zeros_like(self._scale), where=self._scale > 0.0)
        self._integral = np.where(live, wanted - self._part, self._integral)

    def act(self, ph: Array, flow_m3_h: Array) -> Array:
        """Reagent asked for now, given the pH measured and the inflow of each tank. [eq/h]"""
        self._measure(ph, flow_m3_h)
        raw, out, free = self._part, self._out, self._free
        change = np.multiply(raw, self._per_reset, out=free)
        np.add(raw, self._integral, out=raw)
        np.multiply(raw, self._scale, out=raw)
        np.minimum(np.maximum(raw, self._low, out=out), self._high, out=out)
        np.subtract(raw, out, out=raw)
        np.multiply(raw, self._error, out=raw)
        np.multiply(change, raw <= 0.0, out=change)
        np.add(self._integral, change, out=self._integral)
        return out

    def _measure(self, ph: Array, flow_m3_h: Array) -> None:
        """Error, gain times error, and scale."""
        error, part, k = self._error, self._part, self._k
        np.subtract(ph, PH_LEAST, out=part)
        np.multiply(part, 1.0 / PH_STEP, out=part)
        np.minimum(np.maximum(part, 0.0, out=part), self._last, out=part)
        np.add(part, self._offset, out=part)
        np.copyto(k, part, casting="unsafe")
        self._slope.take(k, out=error, mode="clip")
        np.multiply(error, ph, out=error)
        self._start.take(k, out=part, mode="clip")
        np.add(error, part, out=error)
        np.subtract(self._aim, error, out=error)
        if self._is_scheduled:
            self._gains.take(k, out=part, mode="clip")
            np.multiply(part, error, out=part)
        else:
            np.multiply(self._gain, error, out=part)
        if self._has_ratio:
            np.divide(flow_m3_h, self._flow_ref, out=self._scale)
            np.copyto(self._scale, 1.0, where=~self._ratio)

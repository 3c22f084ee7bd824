"""Exchange of carbon dioxide with air or another gas; alkalinity stays, carbon follows.

Efficiency is the share of the excess of dissolved CO2 over equilibrium with the gas that one pass takes away, both
measured in the water before and after (so that bicarbonate turning into CO2 on the way is already in it). By transfer
coefficient, dC/dt = -kLa (CO2 - CO2 at equilibrium), with C the total carbon and CO2 by the acid-base equilibrium at
every moment.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.integrate import cumulative_simpson

from aquabuf.arrays import LN10
from aquabuf.assess.plant.steps.base import Finding, StepOutcome
from aquabuf.assess.plant.steps.words import as_rows_of, holding, mg_l, span
from aquabuf.assess.plant.stream import CARBON, Stream
from aquabuf.chem.gases import AIR_CO2_PPM, AIR_CO2_YEAR, pco2_of_air
from aquabuf.engine.balance import protons_lost
from aquabuf.engine.water import Water
from aquabuf.errors import InputError

__all__ = ["Aerate", "Saturate", "co2_per_carbon", "excess_left", "exchanged"]

Array = NDArray[np.float64]

NODES = 65       # along the way to equilibrium
FARTHEST = 20.0  # folds of e of the excess that are followed; what is left then, 2e-9 of it, counts as the end
LEAST_RATIO, TINY = 1e-9, 1e-300
CO2 = "CO2"


def co2_per_carbon(water: Water) -> Array:
    """Change of dissolved CO2 per change of total carbon at constant alkalinity, above 0 to 1. [-]

    a0 (1 + ln10 C n^2 / beta): a0 share of CO2, C total carbon, n mean protons lost by it, beta closed buffer
    intensity. Follows from d(ln a0)/dpH = -ln10 n and dpH/dC = -n / beta.
    """
    state = water.state
    shares = state.carbonate_fractions()
    lost = protons_lost(shares)
    beta = water.buffer_intensity_eq_l().reshape(-1)
    return (shares[0] * (1.0 + LN10 * state.dic * lost * lost / beta)).reshape(water.shape)


def excess_left(water: Water, pco2_atm: ArrayLike, kla_time: ArrayLike) -> Array:
    """Share of the excess of CO2 over a gas that is left after a time of transfer, in kLa times time. [-]

    Parameters
    ----------
    water : one-dimensional rows.
    pco2_atm : of the gas. [atm]
    kla_time : transfer coefficient times time. [-]

    Notes
    -----
    The excess is written as its first value times exp(-s). Then ds/d(kLa t) is `co2_per_carbon` at that excess, so that
    kLa t is an integral over s of its reciprocal: Simpson's rule on nodes that reach as far as the excess can have
    fallen, and back from time to s by a cubic with both slopes. The carbon moved is within 1e-4 of itself.
    Nodes are even in z, with exp(s) = 1 + r (exp(z) - 1) and r the CO2 of the water over that of the gas, at most 1:
    even in s where the water gives off, and even in the logarithm of its CO2 where it starts far below the gas.
    """
    gas, wanted = np.asarray(pco2_atm, dtype=float), np.broadcast_to(np.asarray(kla_time, dtype=float), water.shape)
    start = water.pco2_atm
    ratio = np.clip(start / np.where(gas > 0.0, gas, start + TINY), LEAST_RATIO, 1.0)  # 1 where the water gives off
    farthest = np.log1p(np.expm1(np.minimum(wanted, FARTHEST)) / ratio)  # as s is never above kLa t
    z = np.linspace(0.0, 1.0, NODES)[:, None] * farthest
    grown = 1.0 + ratio * np.expm1(z)
    fall = np.log(grown)
    gain = co2_per_carbon(water.at_pco2(gas + (start - gas) / grown))  # ds/d(kLa t)
    time = farthest * cumulative_simpson(ratio * np.exp(z) / grown / gain, dx=1.0 / (NODES - 1), axis=0, initial=0.0)
    i = np.clip((time <= wanted).sum(axis=0) - 1, 0, NODES - 2)

    def ends(v: Array) -> tuple[Array, Array]:
        """Values at both ends of the interval in which the wanted time lies."""
        return np.take_along_axis(v, i[None, :], 0)[0], np.take_along_axis(v, i[None, :] + 1, 0)[0]

    (t0, t1), (d0, d1), (s0, s1) = ends(time), ends(gain), ends(fall)
    h = t1 - t0
    u = np.clip((wanted - t0) / np.where(h > 0.0, h, 1.0), 0.0, 1.0)
    first, last = s0 * (1.0 + 2.0 * u) + h * d0 * u, s1 * (3.0 - 2.0 * u) - h * d1 * (1.0 - u)
    return np.exp(-first * (1.0 - u) ** 2 - last * u * u)


def exchanged(stream: Stream, pco2_atm: ArrayLike, left: ArrayLike) -> Stream:
    """The water once only the share `left` of its CO2 excess over a gas of `pco2_atm` [atm] is left; alkalinity stays.

    Water with less CO2 than the gas takes it up in the same way.
    """
    water = stream.water()
    gas = np.asarray(pco2_atm, dtype=float)
    there = water.at_pco2(gas + np.asarray(left, dtype=float) * (water.pco2_atm - gas))
    return stream.added({CARBON: 1.0}, there.dic_mol_l - stream.carbon_mol_l)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Aerate:
    """Air takes carbon dioxide out of the water, or brings it.

    efficiency : share of the CO2 excess over air that is removed, 0 to 1; or
    kla_per_h, time_h : transfer coefficient of CO2 and time of contact [1/h], [h]; or neither: to equilibrium with air.
    co2_ppm : mole fraction in dry air. [ppm]
    Each one or one per row.
    """

    name: str
    efficiency: ArrayLike | None = None
    kla_per_h: ArrayLike | None = None
    time_h: ArrayLike | None = None
    co2_ppm: ArrayLike = AIR_CO2_PPM
    kind: str = "aerate"

    def __post_init__(self) -> None:
        if (self.kla_per_h is None) != (self.time_h is None):
            lacks, has = ("kla_per_h", "time_h") if self.kla_per_h is None else ("time_h", "kla_per_h")
            raise InputError(f"step {self.name!r} needs kla_per_h and time_h together; found {has} alone. Add {lacks}.")
        if self.efficiency is not None and self.time_h is not None:
            raise InputError(f"step {self.name!r} needs either efficiency or kla_per_h with time_h; found both. "
                             "Give one of them.")

    def run(self, stream: Stream) -> StepOutcome:
        """The water after the air. Raises InputError for settings out of range."""
        ppm = as_rows_of(self.co2_ppm, stream.rows, f"co2_ppm of step {self.name!r}")
        gas = pco2_of_air(ppm, stream.t_c, stream.pressure_atm)
        left, words = self._left(stream, gas)
        every = np.isfinite(gas)
        year = f", about the mean of {AIR_CO2_YEAR} (recalled)" if np.all(ppm == AIR_CO2_PPM) else ", set in the plan"
        air = Finding("note", f"air is taken to have {span(ppm, every, 0)} ppm of CO2{year}; {words}", every,
                      "alkalinity stays, carbon follows",
                      "indoors or in a closed tower the air holds more: give its CO2")
        return _outcome(stream, exchanged(stream, gas, left), left, (air,))

    def _left(self, stream: Stream, gas: Array) -> tuple[Array, str]:
        subject = f"of step {self.name!r}"
        if self.efficiency is not None:
            share = as_rows_of(self.efficiency, stream.rows, f"efficiency {subject}", high=1.0)
            return 1.0 - share, "efficiency is the share of dissolved CO2 above equilibrium that one pass removes"
        if self.kla_per_h is None or self.time_h is None:
            return np.zeros(stream.rows), "the water comes to equilibrium with it"
        time = (as_rows_of(self.kla_per_h, stream.rows, f"kla_per_h {subject}")
                * as_rows_of(self.time_h, stream.rows, f"time_h {subject}"))
        return excess_left(stream.water(), gas, time), (
            "transfer by kLa in a well-mixed parcel of water, bicarbonate turning into CO2 without delay")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Saturate:
    """The water meets a gas of a stated CO2 pressure, such as flue gas or the head space of a digester.

    pco2_atm : partial pressure of CO2 in the gas. [atm]
    efficiency : share of the difference in dissolved CO2 that is made good, 0 to 1.
    """

    name: str
    pco2_atm: ArrayLike
    efficiency: ArrayLike = 1.0
    kind: str = "saturate"

    def run(self, stream: Stream) -> StepOutcome:
        """The water after the gas. Raises InputError for settings out of range."""
        gas = as_rows_of(self.pco2_atm, stream.rows, f"pco2_atm of step {self.name!r}")
        left = 1.0 - as_rows_of(self.efficiency, stream.rows, f"efficiency of step {self.name!r}", high=1.0)
        every = np.isfinite(gas)
        words = Finding("note", f"the gas is taken to hold {span(gas, every, 4)} atm of CO2 throughout", every,
                        "alkalinity stays, carbon follows")
        return _outcome(stream, exchanged(stream, gas, left), left, (words,))


def _outcome(stream: Stream, after: Stream, left: Array, findings: tuple[Finding, ...]) -> StepOutcome:
    before, there = stream.water(), after.water()
    si, carbon = there.saturation_index(), stream.carbon_mol_l - after.carbon_mol_l
    figures = {
        "co2_before_mg_l": mg_l(before.species_mol_l[CO2], CO2), "co2_after_mg_l": mg_l(there.species_mol_l[CO2], CO2),
        "carbon_removed_mg_l_co2": mg_l(carbon, CO2), "excess_removed_share": 1.0 - left,
        "ph_before": before.ph, "ph_after": there.ph, "si_calcite_after": si,
    }
    deposits, dissolves = (si > 0.0) & (carbon > 0.0), (si < 0.0) & (carbon > 0.0)
    return StepOutcome(after, (), holding(
        *findings,
        Finding("note", f"calcium carbonate may deposit in the aerator (saturation index {span(si, deposits, 2)}), "
                "which is not counted: it would take alkalinity along", deposits, "saturation index of calcite above 0",
                "watch for scale on trays, packing and nozzles"),
        Finding("note", f"the water still dissolves calcium carbonate at pH {span(there.ph, dissolves, 2)} (saturation "
                f"index {span(si, dissolves, 2)}): stripping adds no alkalinity", dissolves,
                "saturation index of calcite below 0"),
    ), figures)

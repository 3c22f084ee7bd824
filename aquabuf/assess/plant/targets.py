"""What a plan wants: values and windows, and whether a water meets them."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.quantities import PlantQuantity, in_unit, measured
from aquabuf.assess.plant.stream import Stream
from aquabuf.chem.gases import AIR_CO2_PPM
from aquabuf.errors import InputError

__all__ = ["Target", "all_met", "reached"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Target:
    """A wanted value (low equals high) or window in house units; infinite ends are open."""

    quantity: PlantQuantity
    low: float
    high: float

    def __post_init__(self) -> None:
        if math.isnan(self.low) or math.isnan(self.high) or not self.low <= self.high:
            raise InputError(f"a window of {self.quantity.label} must go from low to high; found "
                             f"{in_unit(self.quantity, self.low):g} to {in_unit(self.quantity, self.high):g}. "
                             f"Swap them.")
        if math.isinf(self.low) and math.isinf(self.high):
            raise InputError(f"a window of {self.quantity.label} must have an end; found none. Give a value.")

    @property
    def is_point(self) -> bool:
        """Whether one value is wanted."""
        return self.low == self.high

    @property
    def words(self) -> str:
        """What is wanted, as a person reads it: "pH 8.20 to 8.60"."""
        q = self.quantity
        if self.is_point:
            return f"{q.label} {q.text(self.low)}"
        if math.isinf(self.high):
            return f"{q.label} at least {q.text(self.low)}"
        if math.isinf(self.low):
            return f"{q.label} at most {q.text(self.high)}"
        low = f"{float(in_unit(q, self.low)):z.{q.digits}f}"
        return f"{q.label} {low} to {q.text(self.high)}"

    def met(self, value: Array) -> NDArray[np.bool_]:
        """Whether values reach it, to the closeness of the table of quantities."""
        close = self.quantity.closeness / self.quantity.per_house
        with np.errstate(invalid="ignore"):
            return (value >= self.low - close) & (value <= self.high + close)


def reached(stream: Stream, targets: tuple[Target, ...], air_co2_ppm: float = AIR_CO2_PPM) -> dict[str, Array]:
    """Values of the quantities of the targets."""
    return measured(stream, [t.quantity.name for t in targets], air_co2_ppm=air_co2_ppm)


def all_met(stream: Stream, targets: tuple[Target, ...], air_co2_ppm: float = AIR_CO2_PPM) -> NDArray[np.bool_]:
    """Rows that meet every target."""
    values = reached(stream, targets, air_co2_ppm)
    return np.logical_and.reduce([t.met(values[t.quantity.name]) for t in targets])

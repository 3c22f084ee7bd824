"""A change of temperature on the way: to the tap, through a heater, in a long main in winter."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.steps.base import Finding, StepOutcome
from aquabuf.assess.plant.steps.words import as_rows_of, holding, span
from aquabuf.assess.plant.stream import Stream
from aquabuf.engine.conditions import LIMITS

__all__ = ["ChangeTemperature"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ChangeTemperature:
    """The water as a closed sample at another temperature: amounts per kilogram stay, no gas leaves, nothing deposits.

    t_c : temperature afterwards, one or one per row. [°C]
    """

    name: str
    t_c: ArrayLike
    kind: str = "temperature"

    def run(self, stream: Stream) -> StepOutcome:
        """The water at the other temperature. Raises InputError where it is out of the range of the constants."""
        low, high = LIMITS["t_c"][:2]
        t_c = as_rows_of(self.t_c, stream.rows, f"t_c of step {self.name!r}, in °C,", low, high)
        before = stream.water()
        water = before.at_temperature(t_c)
        ratio = water.density_kg_l / before.density_kg_l
        after = stream.replaced(
            t_c=t_c, alkalinity_eq_l=water.alkalinity_eq_l, carbon_mol_l=water.dic_mol_l,
            totals={n: v * ratio for n, v in stream.totals.items()},
            ionic_strength_mol_l=stream.ionic_strength_mol_l * ratio,
            solids={n: v * ratio for n, v in stream.solids.items()})
        figures = {"ph_before": before.ph, "ph_after": after.water().ph,
                   "si_calcite_before": before.saturation_index(), "si_calcite_after": after.water().saturation_index()}
        return StepOutcome(after, (), _findings(stream, t_c, figures), figures)


def _findings(stream: Stream, t_c: Array, figures: dict[str, Array]) -> tuple[Finding, ...]:
    si, si_after, ph = figures["si_calcite_before"], figures["si_calcite_after"], figures["ph_after"]
    moved = np.isfinite(ph) & (t_c != stream.t_c)

    def turn(to: str, where: NDArray[np.bool_], next_step: str) -> Finding:
        return Finding("warning", f"at {span(t_c, where)} °C the water turns to {to} calcium carbonate (saturation "
                       f"index {span(si, where, 2)} before, {span(si_after, where, 2)} after)", where,
                       "sign of the saturation index of calcite", next_step)

    return holding(
        turn("depositing", (si <= 0.0) & (si_after > 0.0), "look at heaters and hot mains for scale"),
        turn("dissolving", (si >= 0.0) & (si_after < 0.0), "judge the finished water at the temperature of the mains"),
        Finding("note", f"pH goes from {span(figures['ph_before'], moved, 2)} to {span(ph, moved, 2)} by temperature "
                "alone: alkalinity and carbon per kilogram stay, no carbon dioxide leaves", moved, "closed sample"),
    )

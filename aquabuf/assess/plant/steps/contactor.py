"""Calcite contactor: water dissolves calcium carbonate from a bed, toward saturation and never beyond it."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.steps.base import Dosed, Finding, StepOutcome
from aquabuf.assess.plant.steps.precipitation import CALCITE, CALCITE_FORMULA, dissolvable_calcite
from aquabuf.assess.plant.steps.recarbonate import check_carbon_dioxide
from aquabuf.assess.plant.steps.words import as_caco3, as_rows_of, holding, mg_l, span
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import ALKALINITY, Stream
from aquabuf.errors import InputError

__all__ = ["USUAL_SHARE", "CalciteContactor", "check_calcite", "share_in_bed"]

Array = NDArray[np.float64]

USUAL_SHARE = 0.9      # of the way to saturation in a well laid out bed; an assumption (recalled)
DISSOLVES = -0.1       # saturation index below which a water is said to dissolve calcium carbonate
CO2_PER_CALCITE = 1.0  # mol of carbon dioxide used per mol dissolved, all of it going to bicarbonate


def share_in_bed(rate_per_min: ArrayLike, contact_min: ArrayLike) -> Array:
    """Share of the way to saturation in an empty-bed contact time, by first order: 1 - exp(-k t). [-]

    The deficit of dissolved calcium against saturation falls in proportion to itself; plug flow. k of the own bed.
    """
    return -np.expm1(-np.asarray(rate_per_min, dtype=float) * np.asarray(contact_min, dtype=float))


def check_calcite(step: str, stone: Stocked) -> None:
    """Raises InputError for a product that is not calcium carbonate."""
    if {name: n for name, n in stone.product.adds.items() if n} != dict(CALCITE):
        raise InputError(f"step {step!r} needs calcium carbonate; found {stone.product.name!r} "
                         f"({stone.product.formula}). Name limestone or calcite.")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class CalciteContactor:
    """A bed of calcium carbonate, with carbon dioxide ahead of it if wanted.

    carbon_dioxide, co2_mol_l : the gas and how much of it goes in ahead; one value or one per row. [mol/L]
    share : of the way to saturation; or rate_per_min and contact_min (empty bed) by first order; neither: USUAL_SHARE.
    """

    name: str
    calcite: Stocked
    carbon_dioxide: Stocked | None = None
    co2_mol_l: ArrayLike = 0.0
    share: float | None = None
    rate_per_min: float | None = None
    contact_min: float | None = None
    kind: str = "contact"

    def __post_init__(self) -> None:
        check_calcite(self.name, self.calcite)
        if self.carbon_dioxide is not None:
            check_carbon_dioxide(self.name, self.carbon_dioxide)
        elif np.any(np.asarray(self.co2_mol_l, dtype=float) != 0.0):
            raise InputError(f"step {self.name!r} doses carbon dioxide, which no product is named for; found a dose. "
                             "Name carbon dioxide, or leave the dose out.")
        if (self.rate_per_min is None) != (self.contact_min is None) or (self.share is not None and self.contact_min):
            raise InputError(f"step {self.name!r} takes either a share of the way to saturation or both a rate and a "
                             "contact time; found another mix. Give one or the other.")
        for what, value, high in (("share", self.share, 1.0), ("rate", self.rate_per_min, 100.0),
                                  ("contact time", self.contact_min, 1e4)):
            if value is not None and not 0.0 <= value <= high:
                raise InputError(f"the {what} of step {self.name!r} must be 0 to {high:g}; found {value:g}. "
                                 "Correct it.")

    @property
    def approach(self) -> float:
        """Share of the way to saturation. [-]"""
        if self.rate_per_min is not None and self.contact_min is not None:
            return float(share_in_bed(self.rate_per_min, self.contact_min))
        return USUAL_SHARE if self.share is None else self.share

    def held(self, doses: tuple[Dosed, ...]) -> CalciteContactor:
        """The same bed behind another dose of gas; what dissolves is up to the water and no feed."""
        return self if self.carbon_dioxide is None else replace(self, co2_mol_l=doses[0].mol_l)

    def run(self, stream: Stream) -> StepOutcome:
        """The water after the bed. Water that would deposit passes unchanged."""
        gas = as_rows_of(self.co2_mol_l, stream.rows, f"co2_mol_l of step {self.name!r}")
        fed = stream if self.carbon_dioxide is None else stream.added(self.carbon_dioxide.product.adds, gas)
        self._needs_calcium(stream)
        whole = dissolvable_calcite(fed)
        stone = self.approach * whole
        after = fed.added(self.calcite.product.adds, stone)
        doses = (() if self.carbon_dioxide is None else (Dosed(self.carbon_dioxide, gas),))
        calcite = mg_l(stone, CALCITE_FORMULA)
        co2_before, co2_after = (s.water().species_mol_l["CO2"] for s in (fed, after))
        figures = {
            "calcite_dissolved_mg_l": calcite, "calcite_kg_per_ml": calcite / self.calcite.strength,
            "calcite_at_saturation_mg_l": mg_l(whole, CALCITE_FORMULA),
            "alkalinity_rise_mg_l_caco3": as_caco3(CALCITE[ALKALINITY] * stone),
            "calcium_rise_mg_l": mg_l(CALCITE["calcium"] * stone, "Ca"),
            "co2_used_mg_l": mg_l(co2_before - co2_after, "CO2"), "co2_left_mg_l": mg_l(co2_after, "CO2"),
            "co2_by_rule_mg_l": mg_l(CO2_PER_CALCITE * stone, "CO2"), "ph_after": after.water().ph,
            "saturation_index_after": after.water().saturation_index(),
            "share_of_saturation": np.full(stream.rows, self.approach),
        }
        return StepOutcome(after, (*doses, Dosed(self.calcite, stone)), holding(*self._findings(figures)), figures)

    def _needs_calcium(self, stream: Stream) -> None:
        if not np.isfinite(stream.total("calcium")).any():
            raise InputError(f"step {self.name!r} dissolves calcite and needs the calcium of the water; it is not "
                             "known. Give calcium, 0 for water without any.")

    def _findings(self, f: dict[str, Array]) -> tuple[Finding, ...]:
        known = np.isfinite(f["ph_after"])
        idle = known & (f["calcite_at_saturation_mg_l"] == 0.0)
        works = known & ~idle
        short = works & (f["saturation_index_after"] < DISSOLVES)
        assumed = works & (self.share is None) & (self.rate_per_min is None)
        return (
            Finding("warning", "the water is saturated with calcium carbonate before the bed, which dissolves nothing",
                    idle, "saturation index of calcite above 0", "dose carbon dioxide ahead, or bypass the bed"),
            Finding("note", f"taken as {100.0 * USUAL_SHARE:.0f} % of the way to saturation, which is an assumption",
                    assumed, "share for a well laid out bed (recalled)",
                    "measure alkalinity before and after the bed and give the share"),
            Finding("note", f"the water leaves the bed at pH {span(f['ph_after'], short, 2)} and would still dissolve "
                    f"calcium carbonate (saturation index {span(f['saturation_index_after'], short, 2)})", short,
                    "the bed stops short of saturation", "bring the pH up with a base or by aeration"),
        )

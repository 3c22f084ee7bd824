"""Recarbonation: carbon dioxide that brings softened water down to a pH, in one stage or two with settling between."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.steps.base import Dosed, Finding, StepOutcome
from aquabuf.assess.plant.steps.precipitation import CALCITE_FORMULA, Rest, settled
from aquabuf.assess.plant.steps.soften import LEAST_CALCIUM_MOL_L
from aquabuf.assess.plant.steps.words import as_caco3, as_rows_of, holding, mg_l, span
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import ALKALINITY, CARBON, Stream
from aquabuf.engine.water import Water
from aquabuf.errors import InputError

__all__ = ["FIRST_PH", "Recarbonate", "carbon_for_ph", "carbon_to_bicarbonate", "check_carbon_dioxide",
           "water_at_ph"]

Array = NDArray[np.float64]

# Calcium carbonate is least soluble here after excess lime; practice aims at 10.3 to 10.5 (recalled).
FIRST_PH = (10.0, 10.6)
NOTHING = 1e-12          # mol/L; carbon that no feed can set
RULE = "one mole of carbon dioxide turns one of carbonate to bicarbonate, or two of hydroxide to carbonate"


def carbon_to_bicarbonate(carbonate_eq_l: ArrayLike, hydroxide_eq_l: ArrayLike, *, settles: bool) -> Array:
    """Carbon dioxide by the trade's rule: 0.4397 mg per mg/L as CaCO3 of carbonate, as much of hydroxide. [mol/L]

    settles : the carbonate that hydroxide makes goes out as calcium carbonate. Where it stays, hydroxide takes twice as
    much on its way to bicarbonate. Water Treatment Plant Design, ex. 11.3.
    """
    carbonate, hydroxide = (np.asarray(v, dtype=float) for v in (carbonate_eq_l, hydroxide_eq_l))
    return 0.5 * carbonate + (0.5 if settles else 1.0) * hydroxide


def water_at_ph(stream: Stream, ph: ArrayLike) -> Water:
    """The water at a meter pH, its alkalinity held and its carbon what that takes."""
    conditions: dict[str, Any] = stream.keywords()
    return Water.from_ph_alkalinity(ph=ph, alkalinity_eq_l=stream.alkalinity_eq_l, **conditions)


def carbon_for_ph(stream: Stream, ph: ArrayLike) -> Array:
    """Carbon that brings water to a meter pH at its alkalinity; negative where carbon must leave. [mol/L]"""
    return water_at_ph(stream, ph).dic_mol_l - stream.carbon_mol_l


def check_carbon_dioxide(step: str, gas: Stocked) -> None:
    """Raises InputError for a product that brings anything but carbon."""
    adds = gas.product.adds
    if adds[ALKALINITY] != 0.0 or not adds[CARBON] > 0.0:
        raise InputError(f"step {step!r} needs carbon dioxide; found {gas.product.name!r}, which "
                         f"{'changes alkalinity' if adds[ALKALINITY] else 'brings no carbon'}. Name carbon dioxide.")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Recarbonate:
    """Carbon dioxide to a pH.

    to_ph : that leaves. first_ph : of a first stage whose calcium carbonate settles before the second; None: one stage.
    absorbed : share of the gas fed that dissolves.
    calcite_ratio, least_calcium_mol_l : where settling in between stops, see `Rest`.
    fixed_mol_l : gas fed instead (first stage and second), e.g. as the feed is set. [mol/L]
    """

    name: str
    carbon_dioxide: Stocked
    to_ph: float
    first_ph: float | None = None
    absorbed: float = 1.0
    calcite_ratio: float = 1.0
    least_calcium_mol_l: float = LEAST_CALCIUM_MOL_L
    fixed_mol_l: tuple[ArrayLike, ...] | None = None
    kind: str = "recarbonate"

    def __post_init__(self) -> None:
        check_carbon_dioxide(self.name, self.carbon_dioxide)
        if not 0.0 < self.absorbed <= 1.0:
            raise InputError(f"the absorbed share of step {self.name!r} must be above 0 and at most 1; found "
                             f"{self.absorbed:g}. Give 90 % as 0.9.")
        if not 6.0 <= self.to_ph <= 12.0:
            raise InputError(f"the pH that step {self.name!r} leaves must be 6 to 12; found {self.to_ph:g}. "
                             "Correct it.")
        if self.first_ph is not None and not self.to_ph < self.first_ph <= 12.0:
            raise InputError(f"the first pH of step {self.name!r} must lie above the last, {self.to_ph:g}, and at most "
                             f"at 12; found {self.first_ph:g}. Leave it out for one stage.")
        if self.fixed_mol_l is not None and len(self.fixed_mol_l) != len(self._stages):
            raise InputError(f"fixed_mol_l of step {self.name!r} must have {len(self._stages)} value(s), one per "
                             f"stage; found {len(self.fixed_mol_l)}. Give as many.")
        _ = self._rest

    @property
    def _stages(self) -> tuple[float, ...]:
        return (self.to_ph,) if self.first_ph is None else (self.first_ph, self.to_ph)

    @property
    def _rest(self) -> Rest:
        return Rest(calcite_ratio=self.calcite_ratio, brucite_ratio=None, least_calcium_mol_l=self.least_calcium_mol_l)

    def held(self, doses: tuple[Dosed, ...]) -> Recarbonate:
        """The same step with the gas it found."""
        return replace(self, fixed_mol_l=tuple(d.mol_l for d in doses))

    def run(self, stream: Stream) -> StepOutcome:
        """The water at its pH; water that is below it already keeps its carbon."""
        now, fed, rule, high = stream, [], np.zeros(stream.rows), []
        for stage, ph in enumerate(self._stages):
            forms = now.water().species_mol_l
            carbonate, hydroxide = 2.0 * forms["CO3--"], forms["OH-"]
            settles = stage < len(self._stages) - 1
            rule = rule + carbon_to_bicarbonate(np.where(settles, 0.0, carbonate), hydroxide, settles=settles)
            carbon = carbon_for_ph(now, ph)
            high.append(carbon >= -NOTHING)
            carbon = np.maximum(carbon, 0.0) if self.fixed_mol_l is None else self._absorbed(stage, stream.rows)
            fed.append(carbon / self.absorbed)
            now = now.added({CARBON: 1.0}, carbon)
            if settles:
                now = settled(now, self._rest)
        formed = now.solids.get(CALCITE_FORMULA, 0.0) - stream.solids.get(CALCITE_FORMULA, np.zeros(stream.rows))
        forms = now.water().species_mol_l
        figures = {
            "co2_by_rule_mg_l": mg_l(rule, "CO2"), "co2_taken_up_mg_l": mg_l(sum(fed) * self.absorbed, "CO2"),
            "co2_fed_mg_l": mg_l(sum(fed), "CO2"), "ph_before": stream.water().ph, "ph_after": now.water().ph,
            "caco3_formed_mg_l": mg_l(formed, CALCITE_FORMULA), "bicarbonate_left_mg_l_caco3": as_caco3(forms["HCO3-"]),
            "carbonate_left_mg_l_caco3": as_caco3(2.0 * forms["CO3--"]),
        }
        doses = tuple(Dosed(self.carbon_dioxide, v / self.carbon_dioxide.product.adds[CARBON]) for v in fed)
        return StepOutcome(now, doses, holding(*self._findings(high, figures)), figures)

    def _absorbed(self, stage: int, rows: int) -> Array:
        assert self.fixed_mol_l is not None
        gas = as_rows_of(self.fixed_mol_l[stage], rows, f"fixed_mol_l of step {self.name!r}")
        return gas * self.absorbed * self.carbon_dioxide.product.adds[CARBON]

    def _findings(self, high: list[NDArray[np.bool_]], f: dict[str, Array]) -> tuple[Finding, ...]:
        below = ~high[-1] & np.isfinite(f["ph_after"]) & (self.fixed_mol_l is None)
        every = np.isfinite(f["ph_after"])
        first = self.first_ph
        odd = every & (first is not None and not FIRST_PH[0] <= first <= FIRST_PH[1])
        return (
            Finding("warning", f"the water is below pH {self.to_ph:g} without carbon dioxide (pH "
                    f"{span(f['ph_after'], below, 2)}); none is fed", below, "carbon dioxide only lowers pH",
                    "ask for a lower pH, or add a base"),
            Finding("warning", f"the first stage goes to pH {first}: calcium carbonate settles best from "
                    f"{FIRST_PH[0]:g} to {FIRST_PH[1]:g}", odd, "practice after excess lime (recalled)",
                    "aim at 10.3 to 10.5 in the first stage"),
            Finding("note", f"the rule of thumb gives {span(f['co2_by_rule_mg_l'], every)} mg/L of carbon dioxide, the "
                    f"solved dose {span(f['co2_taken_up_mg_l'], every)} mg/L: the rule stops at bicarbonate, about pH "
                    "8.3, whatever pH is wanted", every, RULE, "feed by pH"),
        )



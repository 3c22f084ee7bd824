"""Fluoridation: the dose to a wanted fluoride, what it takes of alkalinity and pH, and what a feed fault would do."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.steps.base import Dosed, Finding, StepOutcome
from aquabuf.assess.plant.steps.words import as_caco3, as_rows_of, holding, mg_l, span
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import Stream
from aquabuf.chem.products import molar_mass
from aquabuf.errors import InputError

__all__ = ["GUIDELINE_MG_L", "LEGAL_LIMIT_MG_L", "Fluoridate", "feed_times_to"]

Array = NDArray[np.float64]

FLUORIDE, F = "fluoride", "F"
GUIDELINE_MG_L = 1.5    # WHO guideline value for drinking water (recalled)
LEGAL_LIMIT_MG_L = 4.0  # US maximum contaminant level (recalled)
FAULT_TIMES = 8.0       # pump at 80 % instead of 8 to 12 %: Orange Water and Sewer Authority 2017 (printed)
GUIDELINE = "WHO guideline value (recalled)"
LEGAL_LIMIT = "US maximum contaminant level (recalled)"
LESSON = "water works incident of 2017: one key press sent a fluoride pump from about 10 % to 80 % for 3.25 h, 5.9 mg/L"


def feed_times_to(limit_mol_l: ArrayLike, raw_mol_l: ArrayLike, added_mol_l: ArrayLike) -> Array:
    """How many times the dose brings the water to a limit; inf where nothing is dosed. [-]"""
    room, added = np.asarray(limit_mol_l, dtype=float) - raw_mol_l, np.asarray(added_mol_l, dtype=float)
    some = added > 0.0
    return np.where(some, room / np.where(some, added, 1.0), np.where(np.isfinite(added), np.inf, np.nan))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Fluoridate:
    """A fluoride product to a wanted fluoride of the water. [mol/L]

    most_mol_l : above which the step says stop; by default the WHO guideline value.
    fixed_mol_l : dose of the product instead. [mol/L]
    """

    name: str
    product: Stocked
    fluoride_mol_l: float
    most_mol_l: float = 1e-3 * GUIDELINE_MG_L / molar_mass(F)
    fixed_mol_l: tuple[ArrayLike, ...] | None = None
    kind: str = "fluoridate"

    def __post_init__(self) -> None:
        if not self.product.product.adds.get(FLUORIDE, 0.0) > 0.0:
            raise InputError(f"step {self.name!r} fluoridates and needs a product that brings fluoride; found "
                             f"{self.product.product.name!r}. Name fluosilicic acid.")
        for what, value in (("fluoride wanted", self.fluoride_mol_l), ("most fluoride", self.most_mol_l)):
            if not 0.0 <= value < 0.01:
                raise InputError(f"the {what} in step {self.name!r} must be 0 or more and below 0.01 mol/L (190 mg/L); "
                                 f"found {value:g}. Give 0.7 mg/L as 3.7e-5 mol/L.")
        if self.fixed_mol_l is not None and len(self.fixed_mol_l) != 1:
            raise InputError(f"fixed_mol_l of step {self.name!r} must have 1 value; found {len(self.fixed_mol_l)}. "
                             "Give the dose of the product.")

    def held(self, doses: tuple[Dosed, ...]) -> Fluoridate:
        """The same step with the dose it found."""
        return replace(self, fixed_mol_l=tuple(d.mol_l for d in doses))

    def run(self, stream: Stream) -> StepOutcome:
        """The water with its fluoride; fluoride that is not known counts as none, with a warning."""
        adds = self.product.product.adds
        known = np.isfinite(stream.total(FLUORIDE))
        raw = np.nan_to_num(stream.total(FLUORIDE))
        water = stream.replaced(totals={**stream.totals, FLUORIDE: raw})
        if self.fixed_mol_l is None:
            dose = np.maximum(self.fluoride_mol_l - raw, 0.0) / adds[FLUORIDE]
        else:
            dose = as_rows_of(self.fixed_mol_l[0], stream.rows, f"fixed_mol_l of step {self.name!r}")
        after, fault = (water.added(adds, times * dose, self.product.product.solids) for times in (1.0, FAULT_TIMES))
        added = adds[FLUORIDE] * dose
        figures = {
            "fluoride_before_mg_l": mg_l(stream.total(FLUORIDE), F), "fluoride_added_mg_l": mg_l(added, F),
            "fluoride_after_mg_l": mg_l(after.total(FLUORIDE), F),
            "alkalinity_change_mg_l_caco3": as_caco3(after.alkalinity_eq_l - stream.alkalinity_eq_l),
            "ph_before": stream.water().ph, "ph_after": after.water().ph,
            "feed_times_to_guideline": feed_times_to(1e-3 * GUIDELINE_MG_L / molar_mass(F), raw, added),
            "feed_times_to_legal_limit": feed_times_to(1e-3 * LEGAL_LIMIT_MG_L / molar_mass(F), raw, added),
            "fault_fluoride_mg_l": mg_l(fault.total(FLUORIDE), F), "fault_ph": fault.water().ph,
        }
        return StepOutcome(after, (Dosed(self.product, dose),), holding(*self._findings(known, dose, figures)), figures)

    def _findings(self, known: NDArray[np.bool_], dose: Array, f: dict[str, Array]) -> tuple[Finding, ...]:
        after, most = f["fluoride_after_mg_l"], float(mg_l(self.most_mol_l, F))
        own = abs(most - GUIDELINE_MG_L) > 1e-9
        over, illegal = after > most * (1.0 + 1e-9), after > LEGAL_LIMIT_MG_L * (1.0 + 1e-9)
        doses = dose > 0.0
        there = known & (f["fluoride_before_mg_l"] > float(mg_l(self.fluoride_mol_l, F))) & (self.fixed_mol_l is None)
        return (
            Finding("stop", f"fluoride of {span(after, over, 2)} mg/L is above {most:.3g} mg/L", over,
                    "set in the plan" if own else GUIDELINE, "lower the dose, or remove fluoride"),
            Finding("stop", f"fluoride of {span(after, illegal, 2)} mg/L is above the legal limit of "
                    f"{LEGAL_LIMIT_MG_L:g} mg/L", illegal, LEGAL_LIMIT, "do not send this water out"),
            Finding("warning", "fluoride of the raw water is not known and counts as none; what is there comes on top",
                    ~known, "fluoride after is raw plus dose", "measure fluoride of the raw water"),
            Finding("note", f"the water has {span(f['fluoride_before_mg_l'], there, 2)} mg/L of fluoride of its own, "
                    "more than wanted; none is fed", there, "a dose only raises fluoride"),
            Finding("note", f"{span(f['feed_times_to_guideline'], doses)} times this feed reaches {GUIDELINE_MG_L:g} "
                    f"mg/L of fluoride, {span(f['feed_times_to_legal_limit'], doses)} times {LEGAL_LIMIT_MG_L:g} mg/L; "
                    f"a pump that runs {FAULT_TIMES:g} times too fast gives {span(f['fault_fluoride_mg_l'], doses, 1)} "
                    f"mg/L at pH {span(f['fault_ph'], doses, 2)}", doses, LESSON,
                    "limit the pump by its size and a day tank; stop it by the alarm of a second fluoride probe"),
        )

"""Nitrification and denitrification: what bacteria take from alkalinity and give back.

Nitrification NH4+ + 2 O2 -> NO3- + 2 H+ + H2O, denitrification with a donor of carbon such as methanol,
6 NO3- + 5 CH3OH -> 3 N2 + 5 CO2 + 6 OH- + 7 H2O. Cell growth is not counted: it changes both by a few percent.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.steps.base import Finding, StepOutcome
from aquabuf.assess.plant.steps.coagulate import alkali_words, residual_alkali
from aquabuf.assess.plant.steps.words import as_caco3, as_rows_of, holding, mg_l, span
from aquabuf.assess.plant.stream import ALKALINITY, CARBON, Stream
from aquabuf.errors import InputError
from aquabuf.units import to_house

__all__ = ["DENITRIFIED", "METHANOL_CARBON", "NITRIFIED", "RESIDUAL_EQ_L", "Denitrify", "Nitrify", "nitrifiable"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

NITRIFIED = {ALKALINITY: -2.0, "ammonium": -1.0, "nitrate": 1.0}  # per mole of nitrogen: 7.14 mg CaCO3 per mg N
DENITRIFIED = {ALKALINITY: 1.0, "nitrate": -1.0}                  # 3.57 mg CaCO3 per mg N
METHANOL_CARBON = 5.0 / 6.0  # moles of CO2 per mole of nitrogen, by the equation above
# alkalinity to leave in a nitrifying tank: 50 to 100 mg/L as CaCO3, practice of US EPA and WEF manuals (recalled)
RESIDUAL_EQ_L = tuple(float(to_house(mg, "mg/L as CaCO3", ALKALINITY)) for mg in (50.0, 100.0))
RESIDUAL_SOURCE = "practice of US EPA and WEF manuals, 50 to 100 mg/L as CaCO3 (recalled)"
NO_GROWTH = "cell growth is not counted; it changes alkalinity by a few percent of this"


def nitrifiable(alkalinity_eq_l: ArrayLike, residual_eq_l: ArrayLike) -> Array:
    """Ammonium nitrogen that can be oxidized before alkalinity falls to a residual. [mol/L]"""
    spare = np.asarray(alkalinity_eq_l, dtype=float) - np.asarray(residual_eq_l, dtype=float)
    return np.maximum(spare, 0.0) / -NITRIFIED[ALKALINITY]


def _one_of(step: str, share: ArrayLike | None, amount: ArrayLike | None, amount_name: str) -> None:
    if (share is None) == (amount is None):
        raise InputError(f"step {step!r} needs either fraction or {amount_name}; found "
                         f"{'none' if share is None else 'both'}. Give one of them.")


def _amount(stream: Stream, step: str, total: str, share: ArrayLike | None, amount: ArrayLike | None,
            ) -> tuple[Array, Array]:
    """Nitrogen that reacts, and how much more was wanted than there is. [mol/L]"""
    there = stream.total(total)
    if share is None:
        assert amount is not None
        wanted = as_rows_of(amount, stream.rows, f"nitrogen of step {step!r}")
        reacts = np.where(wanted > there, there, wanted)  # an unknown total limits nothing
        return reacts, wanted - reacts
    part = as_rows_of(share, stream.rows, f"fraction of step {step!r}", high=1.0)
    if np.isnan(there).all():
        raise InputError(f"step {step!r} takes a fraction of {total}, which is not known in any row of the water. "
                         f"Give the {total} of the water, or the nitrogen that reacts in mg/L as N.")
    return part * there, np.zeros(stream.rows)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Nitrify:
    """Bacteria oxidize ammonium to nitrate.

    fraction : of the ammonium that is there; or oxidized_mol_l : nitrogen. One or one per row. [-], [mol/L]
    residual_eq_l : alkalinity that must be left, and that is safe to leave. [eq/L]
    """

    name: str
    fraction: ArrayLike | None = None
    oxidized_mol_l: ArrayLike | None = None
    residual_eq_l: tuple[float, float] = (RESIDUAL_EQ_L[0], RESIDUAL_EQ_L[1])
    kind: str = "nitrify"

    def __post_init__(self) -> None:
        _one_of(self.name, self.fraction, self.oxidized_mol_l, "oxidized_mol_l")

    def run(self, stream: Stream) -> StepOutcome:
        """The water after nitrification, closed: its carbon dioxide stays until a step of aeration.

        Raises InputError for settings out of range, or a fraction of ammonium that is not known.
        """
        nitrogen, missing = _amount(stream, self.name, "ammonium", self.fraction, self.oxidized_mol_l)
        after = stream.added(NITRIFIED, nitrogen)
        used = -NITRIFIED[ALKALINITY] * nitrogen
        least, safe = self.residual_eq_l
        short = residual_alkali(raw_eq_l=stream.alkalinity_eq_l, demand_eq_l=used, residual_eq_l=least)
        figures = {
            "ammonium_oxidized_mg_l_n": mg_l(nitrogen, "N"), "alkalinity_used_mg_l_caco3": as_caco3(used),
            "alkalinity_left_mg_l_caco3": as_caco3(after.alkalinity_eq_l),
            "alkalinity_short_mg_l_caco3": as_caco3(short),
            "nitrifiable_to_residual_mg_l_n": mg_l(nitrifiable(stream.alkalinity_eq_l, least), "N"),
            "ph_before": stream.water().ph, "ph_after": after.water().ph,
        }
        return StepOutcome(after, (), self._findings(stream, after, short, missing, safe, figures), figures)

    def _findings(self, stream: Stream, after: Stream, short: Array, missing: Array, safe: float,
                  figures: dict[str, Array]) -> tuple[Finding, ...]:
        left, oxidized = figures["alkalinity_left_mg_l_caco3"], figures["ammonium_oxidized_mg_l_n"]
        acts, low = oxidized > 0.0, (short > 0.0) & (oxidized > 0.0)
        between = acts & ~low & (after.alkalinity_eq_l < safe)
        own = self.residual_eq_l != RESIDUAL_EQ_L
        rule = "set in the plan" if own else RESIDUAL_SOURCE
        least = float(as_caco3(self.residual_eq_l[0]))
        return holding(
            Finding("warning", f"nitrification leaves {span(left, low)} mg/L as CaCO3 of alkalinity, below "
                    f"{least:.0f}: pH can crash and the bacteria stop. Only "
                    f"{span(figures['nitrifiable_to_residual_mg_l_n'], low)} mg/L as N can be oxidized before",
                    low, rule, alkali_words(short, low)),
            Finding("note", f"alkalinity left is {span(left, between)} mg/L as CaCO3; {float(as_caco3(safe)):.0f} "
                    "would be safe", between, rule, "watch pH and alkalinity daily"),
            _missing("oxidized", "ammonium", missing),
            Finding("note", f"{span(oxidized, acts)} mg/L as N oxidized takes two equivalents per mole, 7.14 mg/L as "
                    f"CaCO3 per mg/L as N; {NO_GROWTH}, and the carbon that the bacteria take up is left out. The "
                    "carbon dioxide stays in the water until it is aerated", acts, "stoichiometry"),
            Finding("note", "ammonium of the water is not known: it does not buffer here, and nothing limits what is "
                    "oxidized", acts & np.isnan(stream.total("ammonium")), "the plan gives nitrogen oxidized alone",
                    "measure ammonium"),
        )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Denitrify:
    """Bacteria turn nitrate into nitrogen gas and give alkalinity back.

    fraction : of the nitrate that is there; or removed_mol_l : nitrogen. One or one per row. [-], [mol/L]
    donor_carbon_per_n : moles of CO2 from an uncharged donor per mole of nitrogen: methanol 5/6, none 0. [mol/mol]
    """

    name: str
    fraction: ArrayLike | None = None
    removed_mol_l: ArrayLike | None = None
    donor_carbon_per_n: float = METHANOL_CARBON
    kind: str = "denitrify"

    def __post_init__(self) -> None:
        _one_of(self.name, self.fraction, self.removed_mol_l, "removed_mol_l")
        if not self.donor_carbon_per_n >= 0.0:
            raise InputError(f"donor_carbon_per_n of step {self.name!r} must be at least 0; found "
                             f"{self.donor_carbon_per_n:g}. Methanol makes 5/6, no carbon 0.")

    def run(self, stream: Stream) -> StepOutcome:
        """The water after denitrification. Raises InputError as `Nitrify.run` does."""
        nitrogen, missing = _amount(stream, self.name, "nitrate", self.fraction, self.removed_mol_l)
        after = stream.added(DENITRIFIED | {CARBON: self.donor_carbon_per_n}, nitrogen)
        gained = DENITRIFIED[ALKALINITY] * nitrogen
        carbon = self.donor_carbon_per_n * nitrogen
        acts = nitrogen > 0.0
        figures = {
            "nitrate_removed_mg_l_n": mg_l(nitrogen, "N"), "alkalinity_gained_mg_l_caco3": as_caco3(gained),
            "alkalinity_left_mg_l_caco3": as_caco3(after.alkalinity_eq_l), "co2_made_mg_l": mg_l(carbon, "CO2"),
            "ph_before": stream.water().ph, "ph_after": after.water().ph,
        }
        return StepOutcome(after, (), holding(
            _missing("removed", "nitrate", missing),
            Finding("note", f"{span(figures['nitrate_removed_mg_l_n'], acts)} mg/L as N removed gives back one "
                    f"equivalent per mole, 3.57 mg/L as CaCO3 per mg/L as N; {NO_GROWTH}", acts, "stoichiometry"),
            Finding("note", f"the donor is counted as uncharged and makes {self.donor_carbon_per_n:.2f} moles of "
                    "carbon dioxide per mole of nitrogen (methanol 0.83), all of which stays in the water; a donor "
                    "that is a salt, such as acetate, would leave more alkalinity", acts, "assumption on the donor",
                    "state another carbon per nitrogen, or 0"),
        ), figures)


def _missing(done: str, total: str, missing: Array) -> Finding:
    where = missing > 0.0
    return Finding("warning", f"the plan wants {span(mg_l(missing, 'N'), where)} mg/L as N more {done} than there is "
                   f"{total}: only what is there was {done}", where, f"the {total} of the water",
                   f"correct the nitrogen to be {done}, or the {total} of the water")

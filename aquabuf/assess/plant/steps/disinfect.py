"""Chlorination: the pH with all chlorine in the water, after the demand is met, and once no chlorine is left.

Free chlorine counts as hypochlorous acid at the zero level of alkalinity. Used up by organic matter, HOCl becomes
chloride and one acid equivalent: HOCl + RH2 -> R + Cl- + H+ + H2O.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.limits import EDGE
from aquabuf.assess.plant.steps.base import Dosed, Finding, StepOutcome
from aquabuf.assess.plant.steps.words import as_caco3, as_rows_of, holding, mg_l, span
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import ALKALINITY, Stream
from aquabuf.chem.products import molar_mass
from aquabuf.errors import InputError

__all__ = ["CHLORINE_PH_BELOW", "USED_UP", "Disinfect", "caustic_with", "hocl_share"]

Array = NDArray[np.float64]

HYPOCHLORITE = "hypochlorite"
CHLORINE = "Cl2"  # chlorine is counted as the gas of the same oxidizing power
CAUSTIC = "NaOH"
CAUSTIC_ADDS = {ALKALINITY: 1.0, "sodium": 1.0}
USED_UP = {ALKALINITY: -1.0, HYPOCHLORITE: -1.0, "chloride": 1.0}  # per mole of free chlorine
CHLORINE_PH_BELOW = 8.0  # chlorine works better below; WHO guidelines on pH in drinking water (printed)


def hocl_share(stream: Stream) -> Array:
    """Share of free chlorine that is hypochlorous acid; nan where there is none. [-]"""
    total = stream.total(HYPOCHLORITE)
    there = total > 0.0
    return np.where(there, stream.water().species_mol_l["HOCl"] / np.where(there, total, 1.0), np.nan)


def caustic_with(product: Stocked, mol_l: ArrayLike, excess_g_l: ArrayLike) -> Array:
    """Excess sodium hydroxide that comes with a dose of liquid hypochlorite. [mol/L]

    excess_g_l : NaOH in a liter of the product, as the certificate has it. Raises InputError without its density.
    """
    if product.density_kg_l is None:
        raise InputError(f"excess caustic in g/L needs the density of {product.name!r}; none is given. "
                         "Add its density, e.g. 1.2 kg/L.")
    liters = 1e-6 * product.mg_l_product(mol_l) / product.density_kg_l  # of product per liter of water
    return np.asarray(excess_g_l, dtype=float) / molar_mass(CAUSTIC) * liters


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Disinfect:
    """Chlorine gas or a hypochlorite goes in, and the demand of the water takes its part.

    dose_mol_l : of the active substance of the product, one or one per row. [mol/L]
    demand_mol_l : free chlorine that the water uses up within the works, counted as Cl2. [mol/L]
    excess_caustic_g_l : sodium hydroxide in a liter of liquid product. [g/L]

    Chlorine that the water brings and nobody has measured counts as none.
    """

    name: str
    product: Stocked
    dose_mol_l: ArrayLike
    demand_mol_l: ArrayLike = 0.0
    excess_caustic_g_l: float = 0.0
    kind: str = "chlorinate"

    def __post_init__(self) -> None:
        product = self.product.product
        if product.adds.get(HYPOCHLORITE, 0.0) <= 0.0:
            raise InputError(f"step {self.name!r} disinfects with chlorine and needs a product that brings "
                             f"hypochlorite; found {self.product.name!r} ({product.name}). Name another product.")
        if self.excess_caustic_g_l < 0.0 or (self.excess_caustic_g_l and product.form != "liquid"):
            raise InputError(f"excess caustic of step {self.name!r} must be at least 0 g/L, of a liquid product; "
                             f"found {self.excess_caustic_g_l:g} g/L in {self.product.name!r} ({product.form}). "
                             "Leave it out.")

    def run(self, stream: Stream) -> StepOutcome:
        """The water with the chlorine that is left. Raises InputError for settings that are negative or do not fit."""
        subject = f"of step {self.name!r}"
        dose = as_rows_of(self.dose_mol_l, stream.rows, f"dose_mol_l {subject}")
        demand = as_rows_of(self.demand_mol_l, stream.rows, f"demand_mol_l {subject}")
        known = stream.replaced(totals={**stream.totals, HYPOCHLORITE: np.nan_to_num(stream.total(HYPOCHLORITE))})
        dosed = known.added(self.product.product.adds, dose)
        if self.excess_caustic_g_l:
            dosed = dosed.added(CAUSTIC_ADDS, caustic_with(self.product, dose, self.excess_caustic_g_l))
        there = dosed.total(HYPOCHLORITE)
        used = np.minimum(demand, there)
        after = dosed.added(USED_UP, used)
        gone = after.added(USED_UP, after.total(HYPOCHLORITE))
        added = self.product.product.adds[HYPOCHLORITE] * dose
        figures = {
            "chlorine_dosed_mg_l_cl2": mg_l(added, CHLORINE), "chlorine_used_mg_l_cl2": mg_l(used, CHLORINE),
            "chlorine_left_mg_l_cl2": mg_l(after.total(HYPOCHLORITE), CHLORINE),
            "alkalinity_change_mg_l_caco3": as_caco3(after.alkalinity_eq_l - stream.alkalinity_eq_l),
            "ph_before": stream.water().ph, "ph_all_chlorine_there": dosed.water().ph, "ph_after": after.water().ph,
            "ph_no_chlorine_left": gone.water().ph, "hocl_share_all_chlorine_there": hocl_share(dosed),
            "hocl_share_after": hocl_share(after),
        }
        missing = np.where(demand - there > EDGE * demand, demand - there, 0.0)  # rounding is no shortage
        findings = _findings(stream, after, missing, figures)
        return StepOutcome(after, (Dosed(self.product, dose),), findings, figures)

    def held(self, doses: tuple[Dosed, ...]) -> Disinfect:
        """The same step with another dose."""
        return replace(self, dose_mol_l=doses[0].mol_l)


def _findings(stream: Stream, after: Stream, missing: Array, figures: dict[str, Array]) -> tuple[Finding, ...]:
    ph, share = figures["ph_after"], figures["hocl_share_after"]
    left, ammonium = after.total(HYPOCHLORITE) > 0.0, stream.total("ammonium")
    short, high = missing > 0.0, left & (ph >= CHLORINE_PH_BELOW)
    chlorine = left | (figures["chlorine_dosed_mg_l_cl2"] > 0.0)
    return holding(
        Finding("warning", f"the demand takes all chlorine and {span(mg_l(missing, CHLORINE), short, 2)} mg/L as Cl2 "
                "more was wanted: no free chlorine is left", short, "dose against demand", "raise the dose"),
        Finding("warning", f"at pH {span(ph, high, 2)} only {span(100.0 * share, high, 0)} % of the free chlorine is "
                "hypochlorous acid, the part that disinfects best", high,
                f"WHO guidelines: pH below {CHLORINE_PH_BELOW:g} preferred for chlorine (printed)",
                "raise pH after the contact tank, not before, or lengthen the contact"),
        Finding("note", f"the water has {span(mg_l(ammonium, 'N'), ammonium > 0.0, 2)} mg/L of ammonium nitrogen: free "
                "chlorine turns into chloramine, which is not modeled here; residual, share of hypochlorous acid and "
                "pH do not hold", chlorine & (ammonium > 0.0), "ammonium with chlorine",
                "take the residual and its kind from a measurement"),
        Finding("note", "ammonium is not known and counts as none; with ammonium, chlorine would turn into "
                "chloramine", chlorine & np.isnan(ammonium), "ammonium with chlorine", "measure ammonium"),
        Finding("note", f"pH is {span(figures['ph_all_chlorine_there'], chlorine, 2)} with all chlorine in the water, "
                f"{span(ph, chlorine, 2)} after the demand, {span(figures['ph_no_chlorine_left'], chlorine, 2)} once "
                "no chlorine is left", chlorine, "each mole of free chlorine used up by organic matter takes one "
                "equivalent of alkalinity (stoichiometry); used up by iron, manganese or ammonium it takes more"),
    )

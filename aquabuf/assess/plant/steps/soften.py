"""Lime softening: the lime and soda ash that the trade's rule asks for, and the water that leaves.

The rule counts equivalents: lime for carbon dioxide, for bicarbonate and, where magnesium must go, for magnesium and an
excess; soda ash for hardness that no bicarbonate goes with. The water that leaves is the chemistry of that dose:
calcium carbonate and magnesium hydroxide settle to their rest, the pH is solved.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.steps.base import Dosed, Finding, StepOutcome
from aquabuf.assess.plant.steps.precipitation import (
    BRUCITE_FORMULA,
    CALCITE_FORMULA,
    Rest,
    hydroxide_pair_share,
    settled,
)
from aquabuf.assess.plant.steps.words import as_caco3, as_rows_of, holding, mg_l, span
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import ALKALINITY, CARBON, Stream, mixed
from aquabuf.chem.products import molar_mass
from aquabuf.errors import InputError

__all__ = ["EXCESS_LIME_EQ_L", "LEAST_CALCIUM_MOL_L", "LEAST_MAGNESIUM_MOL_L", "PROCESSES", "LimeNeed", "Soften",
           "lime_need", "mg_l_cao", "of_whole", "treated_share"]

Array = NDArray[np.float64]

SINGLE, _, SPLIT = PROCESSES = ("single stage", "excess lime", "split")
CACO3 = "mg/L as CaCO3"
PER_MG = 1e-3 / molar_mass(CALCITE_FORMULA)   # mol/L of a divalent metal in 1 mg/L as CaCO3
EXCESS_LIME_EQ_L = 1.25e-3                    # course cards on excess lime treatment (printed)
LEAST_CALCIUM_MOL_L = 35.0 * PER_MG           # 30 to 40 mg/L as CaCO3 in practice (printed: Davis, ex. 7-19, has 35)
LEAST_MAGNESIUM_MOL_L = 10.0 * PER_MG         # practice (recalled)
MOST_MAGNESIUM_MOL_L = 40.0 * PER_MG          # practice (recalled): more leaves scale in water heaters
NEAR_MG = 1.0                                 # mg/L as CaCO3 that nobody calls a miss
RECARBONATE_ABOVE = 9.5                       # pH of softened water
RULE = "lime for carbon dioxide, bicarbonate, magnesium and excess; soda ash for non-carbonate hardness"


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LimeNeed:
    """Lime by what it is for, and soda ash, for the water that is treated; `left` is non-carbonate hardness. [eq/L]"""

    carbon_dioxide: Array
    bicarbonate: Array
    magnesium: Array
    excess: Array
    soda_ash: Array
    left: Array

    @property
    def lime(self) -> Array:
        """All lime. [eq/L]"""
        return self.carbon_dioxide + self.bicarbonate + self.magnesium + self.excess


def lime_need(
    *, carbon_dioxide_eq_l: ArrayLike, bicarbonate_eq_l: ArrayLike, calcium_eq_l: ArrayLike, magnesium_eq_l: ArrayLike,
    carbonate_eq_l: ArrayLike = 0.0, takes_magnesium: bool, excess_eq_l: ArrayLike = 0.0,
    noncarbonate_left_eq_l: ArrayLike = 0.0,
) -> LimeNeed:
    """The stoichiometric rule of lime and soda ash softening; all in equivalents. [eq/L]

    Without magnesium to take, lime is for the bicarbonate that goes with calcium; with it, for all bicarbonate and for
    all magnesium once more. Soda ash is for the hardness to take that exceeds bicarbonate and carbonate, less what may
    stay. Carbon dioxide counts two equivalents per mole. Davis, Water and Wastewater Engineering, ch. 7; Water
    Treatment Plant Design, ch. 11.
    """
    co2, bicarbonate, carbonate, calcium, magnesium, excess, may_stay = (np.asarray(v, dtype=float) for v in (
        carbon_dioxide_eq_l, bicarbonate_eq_l, carbonate_eq_l, calcium_eq_l, magnesium_eq_l, excess_eq_l,
        noncarbonate_left_eq_l))
    hardness = calcium + magnesium if takes_magnesium else calcium
    noncarbonate = np.maximum(hardness - bicarbonate - carbonate, 0.0)
    with_calcium = np.minimum(bicarbonate, np.maximum(calcium - carbonate, 0.0))
    soda = np.maximum(noncarbonate - may_stay, 0.0)
    return LimeNeed(
        carbon_dioxide=co2, bicarbonate=bicarbonate if takes_magnesium else with_calcium,
        magnesium=magnesium if takes_magnesium else np.zeros(magnesium.shape), excess=excess, soda_ash=soda,
        left=noncarbonate - soda)


def treated_share(raw_mol_l: ArrayLike, wanted_mol_l: ArrayLike, treated_mol_l: ArrayLike) -> Array:
    """Share of the water to treat so that the blend holds the wanted magnesium; balance of magnesium. [-]

    0 where the raw water has no more than that, 1 where treatment leaves more.
    """
    raw, wanted, treated = (np.asarray(v, dtype=float) for v in (raw_mol_l, wanted_mol_l, treated_mol_l))
    room = raw - treated
    share = (raw - wanted) / np.where(room > 0.0, room, 1.0)
    return np.clip(np.where(room > 0.0, share, np.where(raw > wanted, 1.0, 0.0 * share)), 0.0, 1.0)


def of_whole(share: ArrayLike, treated: ArrayLike, bypassed: ArrayLike) -> Array:
    """A dose per liter of all the water, from those of the treated part and of the bypass. [as given]"""
    part = np.asarray(share, dtype=float)
    return part * treated + (1.0 - part) * np.asarray(bypassed, dtype=float)


def mg_l_cao(lime_eq_l: ArrayLike) -> Array:
    """Lime as quicklime without anything else in it; divide by its strength for the product. [mg/L]"""
    return mg_l(0.5 * np.asarray(lime_eq_l, dtype=float), "CaO")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Soften:
    """Lime (and soda ash) by rule, and what settles of it.

    process : one of PROCESSES. "single stage" takes calcium, "excess lime" magnesium too, "split" treats a part with
        excess lime and blends it with the rest, where the excess is used up.
    excess_eq_l : lime over the rule; by default 1.25 meq/L where magnesium is to go, else none.
    noncarbonate_left_eq_l : hardness without bicarbonate that may stay; soda ash takes the rest. Without soda ash all
        stays.
    magnesium_wanted_mol_l : in the blend of a split.
    calcite_ratio, brucite_ratio, least_calcium_mol_l, least_magnesium_mol_l : where settling stops, see `Rest`; by
        default at practical limits. Ratios of 1 with nothing left are equilibrium.
    fixed_mol_l : doses of lime and soda ash per liter of all the water, instead of the rule. [mol/L]
    """

    name: str
    process: str
    lime: Stocked
    soda_ash: Stocked | None = None
    excess_eq_l: float | None = None
    noncarbonate_left_eq_l: float = 0.0
    magnesium_wanted_mol_l: float | None = None
    calcite_ratio: float = 1.0
    brucite_ratio: float = 1.0
    least_calcium_mol_l: float = LEAST_CALCIUM_MOL_L
    least_magnesium_mol_l: float = LEAST_MAGNESIUM_MOL_L
    fixed_mol_l: tuple[ArrayLike, ...] | None = None
    kind: str = "soften"

    def __post_init__(self) -> None:
        _check(self)

    @property
    def rest(self) -> Rest:
        """Where settling stops."""
        return Rest(calcite_ratio=self.calcite_ratio, brucite_ratio=self.brucite_ratio,
                    least_calcium_mol_l=self.least_calcium_mol_l, least_magnesium_mol_l=self.least_magnesium_mol_l)

    def held(self, doses: tuple[Dosed, ...]) -> Soften:
        """The same step with the doses it found."""
        return replace(self, fixed_mol_l=tuple(d.mol_l for d in doses))

    def need(self, stream: Stream) -> LimeNeed:
        """The rule for this water, per liter that is treated; without soda ash its hardness is left."""
        takes = self.process != SINGLE
        forms = stream.water().species_mol_l
        return lime_need(
            carbon_dioxide_eq_l=2.0 * forms["CO2"], bicarbonate_eq_l=forms["HCO3-"],
            carbonate_eq_l=2.0 * forms["CO3--"],
            calcium_eq_l=2.0 * stream.total("calcium"), takes_magnesium=takes,
            magnesium_eq_l=2.0 * (stream.total("magnesium") if takes else np.nan_to_num(stream.total("magnesium"))),
            excess_eq_l=np.full(stream.rows, self.excess), noncarbonate_left_eq_l=(
                np.inf if self.soda_ash is None else self.noncarbonate_left_eq_l))

    @property
    def excess(self) -> float:
        """Lime over the rule. [eq/L]"""
        if self.excess_eq_l is not None:
            return self.excess_eq_l
        return 0.0 if self.process == SINGLE else EXCESS_LIME_EQ_L

    def run(self, stream: Stream) -> StepOutcome:
        """The softened and settled water. Raises InputError where no row has the hardness that the rule counts."""
        self._needs_hardness(stream)
        need, share = self.need(stream), self._share(stream)
        products = (self.lime,) if self.soda_ash is None else (self.lime, self.soda_ash)
        if self.fixed_mol_l is None:
            mol_l = [of_whole(share, eq, 0.0) / p.product.adds[ALKALINITY]
                     for p, eq in zip(products, (need.lime, need.soda_ash), strict=False)]
        else:
            mol_l = [as_rows_of(v, stream.rows, f"fixed_mol_l of step {self.name!r}") for v in self.fixed_mol_l]
        dosed, after = self._treated(stream, share, [p.product.adds for p in products], mol_l)
        figures = self._figures(stream, need, share, mol_l, dosed, after)
        doses = tuple(Dosed(p, v) for p, v in zip(products, mol_l, strict=True))
        return StepOutcome(after, doses, holding(*self._findings(stream, need, figures)), figures)

    def _share(self, stream: Stream) -> Array:
        if self.magnesium_wanted_mol_l is None:
            return np.ones(stream.rows)
        return treated_share(stream.total("magnesium"), self.magnesium_wanted_mol_l, self.least_magnesium_mol_l)

    def _treated(self, stream: Stream, share: Array, adds: Sequence[Mapping[str, float]], mol_l: Sequence[Array],
                 ) -> tuple[Stream, Stream]:
        """The treated part before it settles, and all the water after."""
        some = ~(share <= 0.0)  # nothing is dosed where nothing is treated
        dosed = stream
        for brings, dose in zip(adds, mol_l, strict=True):
            dosed = dosed.added(brings, np.where(some, dose, 0.0) / np.where(some, share, 1.0))
        after = settled(dosed, self.rest)
        if self.process == SPLIT:
            volume = np.where(np.isfinite(share), share, 0.5)
            after = settled(mixed((after, stream), (volume, 1.0 - volume)), self.rest)
        return dosed, after

    def _figures(self, stream: Stream, need: LimeNeed, share: Array, mol_l: Sequence[Array], dosed: Stream,
                 after: Stream) -> dict[str, Array]:
        formed = {f: after.solids.get(f, 0.0) - stream.solids.get(f, np.zeros(stream.rows))
                  for f in (CALCITE_FORMULA, BRUCITE_FORMULA)}
        chalk, brucite = (mg_l(formed[f], f) for f in (CALCITE_FORMULA, BRUCITE_FORMULA))
        calcium, magnesium = (after.total(m) / PER_MG for m in ("calcium", "magnesium"))
        lime_eq = mol_l[0] * self.lime.product.adds[ALKALINITY]
        soda = mol_l[1] if self.soda_ash else np.zeros(stream.rows)
        return {
            "lime_for_carbon_dioxide_meq_l": 1e3 * need.carbon_dioxide,
            "lime_for_bicarbonate_meq_l": 1e3 * need.bicarbonate,
            "lime_for_magnesium_meq_l": 1e3 * need.magnesium, "lime_excess_meq_l": 1e3 * need.excess,
            "lime_by_rule_mg_l_caco3": as_caco3(need.lime), "soda_ash_by_rule_mg_l_caco3": as_caco3(need.soda_ash),
            "treated_share": share, "lime_mg_l_caco3": as_caco3(lime_eq), "lime_mg_l_cao": mg_l_cao(lime_eq),
            "soda_ash_mg_l": mg_l(soda, "Na2CO3"),
            "hardness_by_rule_mg_l_caco3": self._hardness_by_rule(stream, need, share),
            "calcium_left_mg_l_caco3": calcium, "magnesium_left_mg_l_caco3": magnesium,
            "hardness_left_mg_l_caco3": calcium + magnesium, "caco3_formed_mg_l": chalk,
            "magnesium_hydroxide_formed_mg_l": brucite, "dry_sludge_mg_l": chalk + brucite,
            "ph_dosed": dosed.water().ph, "ph_after": after.water().ph,
            "calcium_in_hydroxide_pairs_pct": 100.0 * hydroxide_pair_share(after, "calcium"),
            "magnesium_in_hydroxide_pairs_pct": 100.0 * hydroxide_pair_share(after, "magnesium"),
        }

    def _hardness_by_rule(self, stream: Stream, need: LimeNeed, share: Array) -> Array:
        """What the trade expects to be left: practical limits, magnesium that stays, non-carbonate hardness left."""
        raw = stream.total("magnesium")
        magnesium = raw if self.process == SINGLE else of_whole(share, self.least_magnesium_mol_l, raw)
        return (self.least_calcium_mol_l + magnesium) / PER_MG + as_caco3(need.left)

    def _findings(self, stream: Stream, need: LimeNeed, f: dict[str, Array]) -> tuple[Finding, ...]:
        left, magnesium = as_caco3(need.left), f["magnesium_left_mg_l_caco3"]
        every = np.isfinite(f["ph_after"])
        unwanted = (need.left > 0.0) & (self.soda_ash is None)
        high = magnesium > MOST_MAGNESIUM_MOL_L / PER_MG + NEAR_MG
        wanted = np.inf if self.magnesium_wanted_mol_l is None else self.magnesium_wanted_mol_l / PER_MG
        unmet = magnesium > wanted + NEAR_MG
        unknown = ~np.isfinite(stream.total("magnesium")) & every
        alkaline = f["ph_after"] > RECARBONATE_ABOVE
        return (
            Finding("warning", f"{span(left, unwanted, 0)} {CACO3} of hardness has no bicarbonate to go with and stays",
                    unwanted, RULE, "give the step soda ash"),
            Finding("warning", f"magnesium of {span(magnesium, high, 0)} {CACO3} stays: above "
                    f"{MOST_MAGNESIUM_MOL_L / PER_MG:.0f} it leaves scale in water heaters", high,
                    "practice (recalled)", "use excess lime or split treatment"),
            Finding("warning", f"the blend holds {span(magnesium, unmet, 0)} {CACO3} of magnesium, wanted were "
                    f"{wanted:.0f}", unmet, "balance of magnesium and its solubility at the pH reached",
                    "raise the excess of lime or ask for more magnesium"),
            Finding("warning", "magnesium is not known and counts as none", unknown, RULE,
                    "measure magnesium or hardness"),
            Finding("note", f"pH {span(f['ph_after'], alkaline, 1)} after settling", alkaline,
                    "softened water goes on depositing until its pH is brought down", "recarbonate next"),
            Finding("note", "pairs with hydroxide are left out: at this pH "
                    f"{span(f['calcium_in_hydroxide_pairs_pct'], alkaline)} % of calcium and "
                    f"{span(f['magnesium_in_hydroxide_pairs_pct'], alkaline)} % of magnesium would be in them, and so "
                    "much more of each can stay dissolved at equilibrium", alkaline,
                    "closed form with constants of 25 °C (recalled)", "check with hardness of the settled water"),
        )

    def _needs_hardness(self, stream: Stream) -> None:
        for metal in ("calcium",) if self.process == SINGLE else ("calcium", "magnesium"):
            if not np.isfinite(stream.total(metal)).any():
                raise InputError(f"step {self.name!r} softens and needs the {metal} of the water; it is not known. "
                                 f"Give {metal}{' or total hardness' if metal == 'magnesium' else ''}.")


def _check(step: Soften) -> None:
    if step.process not in PROCESSES:
        raise InputError(f"the process of step {step.name!r} must be one of {', '.join(PROCESSES)}; found "
                         f"{step.process!r}. Correct it.")
    adds = step.lime.product.adds
    if not (adds.get("calcium", 0.0) > 0.0 and adds[CARBON] == 0.0 and adds[ALKALINITY] > 0.0):
        raise InputError(f"step {step.name!r} softens with a lime that brings calcium and no carbonate; found "
                         f"{step.lime.product.name!r}. Name hydrated lime or quicklime.")
    if step.soda_ash is not None:
        adds = step.soda_ash.product.adds
        if not (adds[ALKALINITY] == 2.0 * adds[CARBON] > 0.0) or adds.get("calcium") or adds.get("magnesium"):
            raise InputError(f"step {step.name!r} takes non-carbonate hardness with a carbonate that brings none; "
                             f"found {step.soda_ash.product.name!r}. Name soda ash.")
    if (step.process == SPLIT) != (step.magnesium_wanted_mol_l is not None):
        raise InputError(f"the magnesium wanted belongs to split treatment and to it alone; step {step.name!r} is "
                         f"{step.process!r} {'without' if step.magnesium_wanted_mol_l is None else 'with'} it. "
                         "Give it, or change the process.")
    for what, value in (("excess lime", step.excess_eq_l), ("magnesium wanted", step.magnesium_wanted_mol_l),
                        ("hardness that may stay", step.noncarbonate_left_eq_l)):
        if value is not None and not 0.0 <= value < 1.0:
            raise InputError(f"the {what} of step {step.name!r} must be 0 or more; found {value:g}. Correct it.")
    wanted = 1 + (step.soda_ash is not None)
    if step.fixed_mol_l is not None and len(step.fixed_mol_l) != wanted:
        raise InputError(f"step {step.name!r} doses {wanted} product(s), and fixed_mol_l must have as many values; "
                         f"found {len(step.fixed_mol_l)}. Give lime first, then soda ash.")
    _ = step.rest

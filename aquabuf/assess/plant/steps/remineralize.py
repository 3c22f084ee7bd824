"""Remineralizing permeate: mineral for calcium and alkalinity, carbon dioxide to dissolve it, a base for the pH.

A pre-calculation, linear in the doses but for the pH: a trim by targets may follow it. What comes out is held against a
set of criteria from the table.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cache
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.plant.quantities import PlantQuantity, find_quantity, in_house, measured
from aquabuf.assess.plant.steps.base import Dosed, Finding, StepOutcome
from aquabuf.assess.plant.steps.recarbonate import carbon_for_ph, check_carbon_dioxide, water_at_ph
from aquabuf.assess.plant.steps.words import as_caco3, as_rows_of, holding, mg_l, span
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import ALKALINITY, CARBON, Stream
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["Criterion", "Remineralize", "carbon_dioxide_for", "criteria", "mineral_for", "saturation_ph"]

Array = NDArray[np.float64]

CALCIUM, CACO3 = "calcium", "mg/L as CaCO3"
START_PH, PH_ROUNDS, PH_TOLERANCE = 8.0, 60, 1e-9
BASE_ROUNDS = 8  # until the ionic strength of the base itself is counted
RULE = "one mole of carbon dioxide per two equivalents that a mineral brings without carbon of its own"


@dataclass(frozen=True, slots=True, kw_only=True)
class Criterion:
    """One row of the table of criteria, in house units; inf where there is no limit."""

    quantity: PlantQuantity
    low: float
    high: float
    words: str
    next_step: str
    mark: str
    source: str


@cache
def criteria() -> Mapping[str, tuple[Criterion, ...]]:
    """The sets of criteria by name, in table order."""
    sets: dict[str, tuple[Criterion, ...]] = {}
    for row in read_table("remineralization_sets"):
        quantity = find_quantity(row["quantity"], target=False)
        low, high = (in_house(quantity, float(row[end]), row["unit"]) if row[end] else edge
                     for end, edge in (("low", -np.inf), ("high", np.inf)))
        found = Criterion(quantity=quantity, low=low, high=high, words=row["words"], next_step=row["next_step"],
                          mark=row["mark"], source=row["source"])
        sets[row["set"]] = (*sets.get(row["set"], ()), found)
    return MappingProxyType(sets)


def mineral_for(stream: Stream, adds: Mapping[str, float], alkalinity_eq_l: ArrayLike, calcium_mol_l: ArrayLike,
                ) -> Array:
    """Mineral that brings alkalinity and calcium at least to what is wanted (0: nothing is); linear. [mol/L]"""
    gaps = ((np.asarray(alkalinity_eq_l, dtype=float) - stream.alkalinity_eq_l) / adds[ALKALINITY],
            (np.asarray(calcium_mol_l, dtype=float) - stream.total(CALCIUM)) / adds[CALCIUM])
    return np.maximum(np.maximum(*gaps), 0.0)


def carbon_dioxide_for(mineral_mol_l: ArrayLike, adds: Mapping[str, float]) -> Array:
    """Carbon dioxide that turns all alkalinity of the mineral to bicarbonate. [mol/L]

    0.44 mg per mg of calcium carbonate, 0.88 mg per mg/L as CaCO3 that lime brings: stoichiometry.
    """
    return (adds[ALKALINITY] - adds[CARBON]) * np.asarray(mineral_mol_l, dtype=float)


def saturation_ph(stream: Stream) -> Array:
    """pH at which the water is saturated with calcite, its alkalinity and calcium held. [-]

    inf where that is so little that hydroxide takes the alkalinity before it is saturated; nan without known calcium.
    The index rises with pH at most one to one, so that steps of its size come near without passing.
    """
    ph = np.full(stream.rows, START_PH)
    for _ in range(PH_ROUNDS):
        index = water_at_ph(stream, ph).saturation_index()
        ph = ph - index
        if not (np.abs(index) > PH_TOLERANCE).any():
            break
    known = (stream.water().status >= 0) & np.isfinite(stream.total(CALCIUM))
    return np.where(known & np.isnan(ph), np.inf, ph)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Remineralize:
    """Mineral, carbon dioxide and base for permeate.

    mineral : limestone through a bed, or lime. alkalinity_eq_l, calcium_mol_l : wanted at least; one of them or both.
    base, to_ph : strong base that brings the water to a pH at the end; both or none.
    criteria_set : of the table, that the water is held against; None: none.
    fixed_mol_l : doses of mineral, carbon dioxide (and base) instead. [mol/L]
    """

    name: str
    mineral: Stocked
    carbon_dioxide: Stocked
    alkalinity_eq_l: float | None = None
    calcium_mol_l: float | None = None
    base: Stocked | None = None
    to_ph: float | None = None
    criteria_set: str | None = "desalinated water"
    fixed_mol_l: tuple[ArrayLike, ...] | None = None
    kind: str = "remineralize"

    def __post_init__(self) -> None:
        _check(self)

    @property
    def _is_stone(self) -> bool:
        return self.mineral.product.adds[CARBON] > 0.0

    @property
    def _products(self) -> tuple[Stocked, ...]:
        return (self.mineral, self.carbon_dioxide, *(() if self.base is None else (self.base,)))

    def held(self, doses: tuple[Dosed, ...]) -> Remineralize:
        """The same step with the doses it found."""
        return replace(self, fixed_mol_l=tuple(d.mol_l for d in doses))

    def run(self, stream: Stream) -> StepOutcome:
        """The water after mineral, carbon dioxide and base. Raises InputError where no row has its calcium known."""
        if not np.isfinite(stream.total(CALCIUM)).any():
            raise InputError(f"step {self.name!r} needs the calcium of the permeate; it is not known. Give calcium, 0 "
                             "for water without any.")
        adds = self.mineral.product.adds
        if self.fixed_mol_l is not None:
            mol_l = [as_rows_of(v, stream.rows, f"fixed_mol_l of step {self.name!r}") for v in self.fixed_mol_l]
            stone, gas = mol_l[:2]
        else:
            stone = mineral_for(stream, adds, self.alkalinity_eq_l or 0.0, self.calcium_mol_l or 0.0)
        with_stone = stream.added(adds, stone)
        present = stream.water().species_mol_l["CO2"]
        by_rule = np.maximum(carbon_dioxide_for(stone, adds) - present, 0.0)
        to_dissolve = np.zeros(stream.rows)
        if self._is_stone:
            ph = saturation_ph(with_stone)
            least = np.maximum(carbon_for_ph(with_stone, ph), 0.0)
            to_dissolve = np.where((stone == 0.0) | np.isinf(ph), 0.0, least)
        if self.fixed_mol_l is None:
            gas = np.maximum(by_rule, to_dissolve) / self.carbon_dioxide.product.adds[CARBON]
        before = with_stone.added(self.carbon_dioxide.product.adds, gas)
        after, base = before, np.zeros(stream.rows)
        if self.base is not None:
            base = mol_l[2] if self.fixed_mol_l is not None else self._base(before)
            after = before.added(self.base.product.adds, base)
        doses = tuple(Dosed(p, v) for p, v in zip(self._products, (stone, gas, base), strict=False))
        figures = {
            "mineral_mg_l": self.mineral.mg_l_pure(stone), "mineral_kg_per_ml": self.mineral.mg_l_product(stone),
            "co2_by_rule_mg_l": mg_l(by_rule, "CO2"), "co2_to_dissolve_mg_l": mg_l(to_dissolve, "CO2"),
            "co2_fed_mg_l": self.carbon_dioxide.mg_l_pure(gas), "base_meq_l": _meq_l(self.base, base),
            "ph_before_base": before.water().ph, "ph_after": after.water().ph,
            "alkalinity_after_mg_l_caco3": as_caco3(after.alkalinity_eq_l),
            "calcium_after_mg_l": mg_l(after.total(CALCIUM), "Ca"),
        }
        short = self._is_stone & (mg_l(to_dissolve, "CO2") > figures["co2_fed_mg_l"] + 1e-6)
        return StepOutcome(after, doses, holding(*self._findings(figures, short), *self._verdict(after)), figures)

    def _base(self, water: Stream) -> Array:
        """Base to the wanted pH; none where the water is above it. [mol/L]"""
        assert self.base is not None
        brings, dose = self.base.product.adds, np.zeros(water.rows)
        for _ in range(BASE_ROUNDS):
            more = water.added(brings, dose).water().base_to_ph_eq_l(np.full(water.rows, self.to_ph))
            dose = np.maximum(dose + more / brings[ALKALINITY], 0.0)
        return dose

    def _findings(self, f: dict[str, Array], short: NDArray[np.bool_]) -> tuple[Finding, ...]:
        every = np.isfinite(f["ph_after"])
        gap = f["ph_after"] - (np.nan if self.to_ph is None else self.to_ph)
        off = every & (gap > 0.005) & (self.fixed_mol_l is None)
        more = every & (f["co2_to_dissolve_mg_l"] > f["co2_by_rule_mg_l"] + 0.05) & (self.fixed_mol_l is None)
        return (
            Finding("warning", f"so much limestone dissolves only with {span(f['co2_to_dissolve_mg_l'], short)} mg/L "
                    "of carbon dioxide or more; the feed gives less, and the bed stops at saturation before", short,
                    "saturation index of calcite 0 at the end of the bed", "feed more carbon dioxide or dissolve less"),
            Finding("note", f"by stoichiometry {span(f['co2_by_rule_mg_l'], more)} mg/L of carbon dioxide would do, "
                    f"but so much limestone dissolves only with {span(f['co2_to_dissolve_mg_l'], more)} mg/L or more, "
                    "and a real bed stops short of saturation", more, RULE,
                    "run the bed as a step of its own to see what a share of the way to saturation gives"),
            Finding("warning", f"the water is at pH {span(f['ph_after'], off, 2)} without base, above the wanted "
                    f"{0.0 if self.to_ph is None else self.to_ph:g}", off, "a base only raises pH",
                    "add carbon dioxide, or ask for a higher pH"),
        )

    def _verdict(self, after: Stream) -> tuple[Finding, ...]:
        if self.criteria_set is None:
            return ()
        out: list[Finding] = []
        met = np.isfinite(after.water().ph)
        for c in criteria()[self.criteria_set]:
            value = measured(after, (c.quantity.name,))[c.quantity.name]
            slack = c.quantity.closeness / c.quantity.per_house
            missed = (value < c.low - slack) | (value > c.high + slack)
            met &= ~missed & np.isfinite(value)
            out.append(Finding("warning", f"{c.quantity.label} of {_range(c.quantity, value, missed)} is outside "
                               f"{_limits(c)} ({c.words})", missed, f"{self.criteria_set}: {c.source} ({c.mark})",
                               c.next_step))
        return (*out, Finding("note", f"meets the criteria for {self.criteria_set}", met,
                              criteria()[self.criteria_set][0].source))


def _meq_l(product: Stocked | None, mol_l: Array) -> Array:
    return np.zeros(mol_l.shape) if product is None else product.meq_l(mol_l)


def _range(quantity: PlantQuantity, value: Array, where: NDArray[np.bool_]) -> str:
    if not where.any():
        return ""
    low, high = (quantity.text(float(v)) for v in (value[where].min(), value[where].max()))
    return low if low == high else f"{low} to {high}"


def _limits(c: Criterion) -> str:
    if not np.isfinite(c.low):
        return f"at most {c.quantity.text(c.high)}"
    if not np.isfinite(c.high):
        return f"at least {c.quantity.text(c.low)}"
    return f"{c.quantity.text(c.low)} to {c.quantity.text(c.high)}"


def _check(step: Remineralize) -> None:
    check_carbon_dioxide(step.name, step.carbon_dioxide)
    adds = step.mineral.product.adds
    if not (adds.get(CALCIUM, 0.0) > 0.0 and adds[ALKALINITY] == 2.0 * adds[CALCIUM]):
        raise InputError(f"step {step.name!r} remineralizes with limestone or lime; found "
                         f"{step.mineral.product.name!r}. Name one that brings calcium and two equivalents with it.")
    if step.alkalinity_eq_l is None and step.calcium_mol_l is None:
        raise InputError(f"step {step.name!r} must say what is wanted; found neither alkalinity nor calcium. "
                         "Give one or both.")
    for what, value in (("alkalinity", step.alkalinity_eq_l), (CALCIUM, step.calcium_mol_l)):
        if value is not None and not 0.0 <= value < 0.1:
            raise InputError(f"the {what} wanted in step {step.name!r} must be 0 or more and below 0.1; found "
                             f"{value:g}. Correct it.")
    if (step.base is None) != (step.to_ph is None):
        raise InputError(f"step {step.name!r} needs a base and the pH to bring the water to, or neither; found one. "
                         "Give both.")
    if step.base is not None and not (step.base.product.adds[ALKALINITY] > 0.0 == step.base.product.adds[CARBON]):
        raise InputError(f"the base of step {step.name!r} must bring alkalinity and no carbon; found "
                         f"{step.base.product.name!r}. Name caustic soda or lime, or trim in a step of its own.")
    if step.criteria_set is not None and step.criteria_set not in criteria():
        raise InputError(f"the criteria of step {step.name!r} must be one of {', '.join(criteria())}; found "
                         f"{step.criteria_set!r}. Correct the name or leave it out.")
    if step.fixed_mol_l is not None and len(step.fixed_mol_l) != len(step._products):
        raise InputError(f"fixed_mol_l of step {step.name!r} must have {len(step._products)} values, one per product; "
                         f"found {len(step.fixed_mol_l)}. Give mineral, carbon dioxide, base.")

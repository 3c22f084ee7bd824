"""Coagulation: what the metal takes of the alkalinity, what is left against a floor, and the pH it works at."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from aquabuf.assess.limits import EDGE
from aquabuf.assess.plant.steps.base import Dosed, Finding, StepOutcome
from aquabuf.assess.plant.steps.words import CACO3, as_caco3, as_rows_of, holding, mg_l, span
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import ALKALINITY, Stream
from aquabuf.chem.products import Product, find_product
from aquabuf.errors import InputError
from aquabuf.tables import read_table
from aquabuf.units import to_house

__all__ = ["Coagulate", "alkali_for", "alkalinity_floor_eq_l", "ph_window", "residual_alkali"]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

COAGULANT = "coagulant"
ALKALIS = ("hydrated lime", "soda ash")  # that words on missing alkalinity speak of


# ---------------------------------------------------------------- alkali


def residual_alkali(*, raw_eq_l: ArrayLike, demand_eq_l: ArrayLike, residual_eq_l: ArrayLike) -> Array:
    """Alkalinity to add so that `residual_eq_l` is left once `demand_eq_l` is taken; none where it is there already.

    Demand plus wanted residual less what the raw water has, the operators' sum. [eq/L]
    """
    raw, demand, residual = (np.asarray(v, dtype=float) for v in (raw_eq_l, demand_eq_l, residual_eq_l))
    return np.maximum(demand + residual - raw, 0.0)


def alkali_for(eq_l: ArrayLike) -> dict[str, Array]:
    """What brings some alkalinity, by product: mg/L of the pure substance."""
    out = {}
    for name in ALKALIS:
        product = find_product(name)
        out[name] = 1e3 * product.molar_mass_g / product.adds[ALKALINITY] * np.asarray(eq_l, dtype=float)
    return out


def alkali_words(short_eq_l: Array, where: Mask) -> str:
    """What to add for missing alkalinity, in words."""
    each = " or ".join(f"{span(v, where)} mg/L of pure {name}" for name, v in alkali_for(short_eq_l).items())
    return f"{span(as_caco3(short_eq_l), where)} {CACO3} is short: add {each}"


# ---------------------------------------------------------------- the table


def _row(product: Product, quantity: str) -> Mapping[str, str] | None:
    words = {*product.groups, product.formula, COAGULANT}
    rows = (r for r in read_table("coagulant_windows") if r["quantity"] == quantity)
    return next((r for r in rows if set(r["match"].split(";")) <= words), None)


def ph_window(product: Product) -> tuple[float, float] | None:
    """pH range in which a coagulant works, by the table; None where it has none for it."""
    row = _row(product, "ph")
    return (float(row["low"]), float(row["high"])) if row and row["low"] else None


def alkalinity_floor_eq_l() -> float:
    """Alkalinity that should be left after the coagulant, by the table. [eq/L]"""
    row = next(r for r in read_table("coagulant_windows") if r["quantity"] == ALKALINITY)
    return float(to_house(float(row["low"]), row["unit"], ALKALINITY))


def _rule(row: Mapping[str, str] | None, own: bool) -> str:
    if own:
        return "set in the plan"
    return f"{row['source']} ({row['mark']})" if row else "the table of coagulants has none"


# ---------------------------------------------------------------- the step


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Coagulate:
    """A coagulant goes in and precipitates whole as hydroxide.

    dose_mol_l : of its active substance, one or one per row. [mol/L]
    floor_eq_l : alkalinity that should be left; by default that of the table. [eq/L]
    ph_window : in which it works; by default that of the table.
    """

    name: str
    product: Stocked
    dose_mol_l: ArrayLike
    floor_eq_l: float | None = None
    ph_window: tuple[float, float] | None = None
    kind: str = "coagulate"

    def __post_init__(self) -> None:
        if COAGULANT not in self.product.product.groups:
            raise InputError(f"step {self.name!r} coagulates and needs a coagulant; found {self.product.name!r} "
                             f"({self.product.product.name}). Name another product, or give your own the group "
                             f"{COAGULANT!r}.")

    def run(self, stream: Stream) -> StepOutcome:
        """The water after the coagulant. Raises InputError for a dose that is negative or does not fit the rows."""
        product = self.product.product
        dose = as_rows_of(self.dose_mol_l, stream.rows, f"dose_mol_l of step {self.name!r}")
        after = stream.added(product.adds, dose, product.solids)
        used = -product.adds[ALKALINITY] * dose
        floor = alkalinity_floor_eq_l() if self.floor_eq_l is None else self.floor_eq_l
        short = residual_alkali(raw_eq_l=stream.alkalinity_eq_l, demand_eq_l=used, residual_eq_l=floor)
        figures = {
            "alkalinity_used_mg_l_caco3": as_caco3(used),
            "alkalinity_left_mg_l_caco3": as_caco3(after.alkalinity_eq_l),
            "alkalinity_short_mg_l_caco3": as_caco3(short),
            "raw_alkalinity_for_floor_mg_l_caco3": as_caco3(np.maximum(used + floor, 0.0)),
            "raw_alkalinity_used_up_mg_l_caco3": as_caco3(np.maximum(used, 0.0)),
            "metal_hydroxide_mg_l": sum((mg_l(n * dose, solid) for solid, n in product.solids.items()),
                                        np.zeros(stream.rows)),
            "ph_before": stream.water().ph, "ph_after": after.water().ph,
        } | {f"{name.replace(' ', '_')}_for_short_mg_l": v for name, v in alkali_for(short).items()}
        return StepOutcome(after, (Dosed(self.product, dose),),
                           holding(*self._floor_findings(used, after, floor, short), *self._ph_findings(after),
                                   *_assumptions(stream, product, dose)), figures)

    def held(self, doses: tuple[Dosed, ...]) -> Coagulate:
        """The same step with another dose."""
        return replace(self, dose_mol_l=doses[0].mol_l)

    def _floor_findings(self, used: Array, after: Stream, floor: float, short: Array) -> tuple[Finding, ...]:
        left = after.alkalinity_eq_l
        row = _row(self.product.product, ALKALINITY)
        rule = _rule(row, self.floor_eq_l is not None)
        limit = f"{as_caco3(floor):.1f} {CACO3}"
        low, gone, takes = short > EDGE * max(floor, EDGE), (left <= 0.0) & (used > 0.0), used > 0.0
        return (
            Finding("warning", f"the coagulant leaves {span(as_caco3(left), low)} {CACO3} of alkalinity, below the "
                    f"floor of {limit}", low, rule, f"{alkali_words(short, low)} ahead of the coagulant"),
            Finding("warning", "the coagulant uses up all alkalinity: part of the metal stays dissolved, and the pH "
                    "shown, which counts all of it as hydroxide, may be too low", gone, "stoichiometry of hydroxide",
                    "add alkali ahead of the coagulant, or lower its dose"),
            Finding("note", f"with this dose raw water below {span(as_caco3(used + floor), takes)} {CACO3} falls under "
                    f"the floor of {limit}, and raw water of {span(as_caco3(used), takes)} or less has none left",
                    takes, rule),
        )

    def _ph_findings(self, after: Stream) -> tuple[Finding, ...]:
        product = self.product.product
        row, own = _row(product, "ph"), self.ph_window is not None
        window = self.ph_window or ph_window(product)
        ph = after.water().ph
        words = f": {row['words']}" if row and not own else ""
        remedy = row["next_step"] if row else "find the window in jar tests and set it in the plan"
        if window is None:
            return (Finding("note", f"no pH window is known for {product.name}, so that pH "
                            f"{span(ph, np.isfinite(ph), 2)} is not judged{words}", np.isfinite(ph), _rule(row, own),
                            remedy),)
        out = (ph < window[0]) | (ph > window[1])
        return (Finding("warning", f"the coagulant works at pH {span(ph, out, 2)}, outside {window[0]:g} to "
                        f"{window[1]:g}{words}", out, _rule(row, own), remedy),)


def _assumptions(stream: Stream, product: Product, dose: Array) -> tuple[Finding, ...]:
    dosed = dose > 0.0
    phosphate = dosed & ~(stream.total("phosphate") == 0.0)
    return (
        Finding("note", f"doses count {product.name} as {product.formula}", dosed, "name and formula of the product",
                "check that the certificate counts the same formula"),
        Finding("note", "phosphate that the metal takes out is not counted: it would spare a little alkalinity",
                phosphate, "all metal counted as hydroxide"),
    )

"""Steps that dose: a fixed dose of a product, and the doses that bring the water to targets."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.choose import cheapest, cost_per_mol
from aquabuf.assess.plant.dose import REACHED, Point, dosed, solve_doses
from aquabuf.assess.plant.explain import why_not
from aquabuf.assess.plant.steps.base import Dosed, Finding, StepOutcome
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import Stream
from aquabuf.assess.plant.targets import Target
from aquabuf.chem.gases import AIR_CO2_PPM

__all__ = ["Adjust", "Dose"]

Array = NDArray[np.float64]

AT_THE_END = ", with no room left"  # where only the very end of a window is reached


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Dose:
    """Fixed doses of one or several products. [mol/L of active substance], one value or one per row."""

    name: str
    products: tuple[Stocked, ...]
    mol_l: tuple[Array | float, ...]
    kind: str = "dose"

    def run(self, stream: Stream) -> StepOutcome:
        """The water after the doses; what forms solids leaves with them."""
        x = np.stack([np.broadcast_to(np.asarray(m, dtype=float), (stream.rows,)) for m in self.mol_l])
        after = dosed(stream, [p.product for p in self.products], x)
        return StepOutcome(after, tuple(Dosed(p, v) for p, v in zip(self.products, x, strict=True)))

    def held(self, doses: tuple[Dosed, ...]) -> Dose:
        """The same with other doses."""
        return replace(self, mol_l=tuple(d.mol_l for d in doses))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Adjust:
    """Doses of the products that meet the targets: as many values as products solved exactly, else the cheapest mix.

    Rows that nothing reaches keep their water and have doses of nan; the finding says why, for the first of them.

    margin : share of the width of a window that is kept free at each end, because the cheapest mix lies at an end and
        any error would leave it; rows that only reach the window itself are taken to its end.
    """

    name: str
    products: tuple[Stocked, ...]
    targets: tuple[Target, ...]
    margin: float = 0.0
    air_co2_ppm: float = AIR_CO2_PPM
    explain: bool = True
    kind: str = field(default="adjust", init=False)

    def run(self, stream: Stream) -> StepOutcome:
        """The water once it meets the targets."""
        x, binding = self._doses(stream)
        failed = np.asarray(~np.isfinite(x).all(axis=0))
        after = dosed(stream, [p.product for p in self.products], np.where(failed, 0.0, x))
        findings = [self._failure(stream, failed)] if failed.any() and self.explain else []
        if binding is not None and not failed.all():
            findings.append(self._cheapest_words(binding, failed))
        return StepOutcome(after, tuple(Dosed(p, v) for p, v in zip(self.products, np.where(failed, np.nan, x),
                                                                    strict=True)), tuple(findings))

    def held(self, doses: tuple[Dosed, ...]) -> Dose:
        """The same step with the doses it found, as a feed goes on when the water drifts."""
        return Dose(name=self.name, kind=self.kind, products=tuple(d.product for d in doses),
                    mol_l=tuple(d.mol_l for d in doses))

    def _doses(self, stream: Stream) -> tuple[Array, NDArray[np.object_] | None]:
        """Doses (products, rows), nan where none does; what binds, where there was a choice."""
        if len(self.products) == len(self.targets) and all(t.is_point for t in self.targets) and self._one_curved():
            solved = solve_doses(stream, [p.product for p in self.products],
                                 [Point(t.quantity, t.low) for t in self.targets], air_co2_ppm=self.air_co2_ppm,
                                 only_positive=True)
            return np.where(solved.status == REACHED, solved.mol_l, np.nan), None
        chosen = cheapest(stream, self.products, self._inside(), air_co2_ppm=self.air_co2_ppm)
        x, binding = np.where(chosen.feasible, chosen.mol_l, np.nan), chosen.binding.copy()
        rest = np.flatnonzero(~chosen.feasible)
        if rest.size and self.margin > 0.0:
            wider = cheapest(stream.take(rest), self.products, self.targets, air_co2_ppm=self.air_co2_ppm)
            x[:, rest] = np.where(wider.feasible, wider.mol_l, np.nan)
            binding[rest] = wider.binding + AT_THE_END
        return x, binding

    def _inside(self) -> tuple[Target, ...]:
        """The targets, windows with two ends narrowed by the margin."""
        free = [self.margin * (t.high - t.low) for t in self.targets]
        return tuple(replace(t, low=t.low + f, high=max(t.low + f, t.high - f)) if np.isfinite(f) else t
                     for t, f in zip(self.targets, free, strict=True))

    def _one_curved(self) -> bool:
        return sum(t.quantity.kind == "curved" for t in self.targets) <= 1

    def _failure(self, stream: Stream, failed: NDArray[np.bool_]) -> Finding:
        first = stream.take(np.flatnonzero(failed)[:1])
        return Finding("stop", why_not(first, self.products, self.targets, air_co2_ppm=self.air_co2_ppm), failed,
                       rule=" and ".join(t.words for t in self.targets), next_step="change the products or the targets")

    def _cheapest_words(self, binding: NDArray[np.object_], failed: NDArray[np.bool_]) -> Finding:
        _, by = cost_per_mol(self.products)
        words = binding[np.flatnonzero(~failed)[0]]
        least = "least cost" if by == "price" else "least mass of product (give every product a price for least cost)"
        aimed = f"; aimed {100.0 * self.margin:g} % of the width inside each window" if self.margin > 0.0 else ""
        return Finding("note", f"{least}: held by {words}{aimed}", ~failed)

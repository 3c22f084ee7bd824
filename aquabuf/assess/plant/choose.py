"""The cheapest doses that meet values and windows: which products, how much, and which end of a window binds.

Cost is linear in the doses, so that the cheapest mix lies where as many ends of windows bind as products are used. All
such corners are solved, for every row at once, and the cheapest that meets everything counts. Where a curved quantity
has a window the border between corners bends, and a constrained search (SLSQP) from the best corner may still gain.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import combinations, product

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from aquabuf.assess.plant.dose import NOTHING, REACHED, Point, dosed, refuse_curved, solve_doses
from aquabuf.assess.plant.quantities import find_quantity, measured
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import Stream
from aquabuf.assess.plant.targets import Target, all_met
from aquabuf.chem.gases import AIR_CO2_PPM
from aquabuf.errors import InputError

__all__ = ["MOST_PRODUCTS", "Chosen", "cheapest", "cost_per_mol"]

Array = NDArray[np.float64]
Words = NDArray[np.object_]

MOST_PRODUCTS, MOST_TARGETS = 6, 5  # corners grow fast with both
SCANNED_PH = tuple(np.round(np.arange(6.0, 11.01, 0.1), 1))
_ANY_PH = Target(quantity=find_quantity("ph"), low=SCANNED_PH[0], high=SCANNED_PH[-1])
GAIN = 1e-6                         # relative saving from which a search counts
SEARCHES, SMALL = 20, 1e-5          # rounds of it, and the step of its slopes in parts of a dose


@dataclass(frozen=True, slots=True, eq=False)
class Chosen:
    """Doses (products, rows) [mol/L], nan where nothing meets the targets; the water then, and its cost.

    cost : in the unit of `cost_per_mol`, per liter. binding : what holds the doses up, in words, per row.
    """

    mol_l: Array
    stream: Stream
    cost: Array
    binding: Words

    @property
    def feasible(self) -> NDArray[np.bool_]:
        """Rows that meet every target."""
        return np.isfinite(self.cost)


def cost_per_mol(products: Sequence[Stocked]) -> tuple[Array, str]:
    """What a mole of each costs, and in what it is counted: price where all have one, else kilograms of product.

    Without prices the mass of product as delivered stands in, so that something is least; the words say so.
    """
    kg = np.array([1e-3 * p.product.molar_mass_g / p.strength for p in products])
    if all(p.price_per_kg is not None for p in products):
        return kg * np.array([p.price_per_kg for p in products], dtype=float), "price"
    return kg, "mass of product"


def cheapest(stream: Stream, products: Sequence[Stocked], targets: Sequence[Target], *,
             air_co2_ppm: float = AIR_CO2_PPM) -> Chosen:
    """The cheapest doses of `products` that meet all `targets`, per row. Raises InputError for too many of either."""
    _check_numbers(products, targets)
    price, _ = cost_per_mol(products)
    best = Chosen(np.full((len(products), stream.rows), np.nan), stream, np.full(stream.rows, np.inf),
                  np.full(stream.rows, "", dtype=object))
    for used, held, ends in _corners(products, targets):
        for x, words in _corner(stream, products, used, held, ends, air_co2_ppm):
            after = dosed(stream, [p.product for p in products], np.nan_to_num(x))
            cost = np.where(all_met(after, tuple(targets), air_co2_ppm), price @ np.nan_to_num(x), np.inf)
            cost[~np.isfinite(x).all(axis=0)] = np.inf
            with np.errstate(invalid="ignore"):
                better = cost < best.cost * (1.0 - 1e-9)
            if better.any():
                best = Chosen(np.where(better, x, best.mol_l), best.stream, np.where(better, cost, best.cost),
                              np.where(better, words, best.binding))
    best = _polished(stream, products, targets, best, price, air_co2_ppm)
    after = dosed(stream, [p.product for p in products], np.nan_to_num(best.mol_l))
    return Chosen(best.mol_l, after, np.where(np.isfinite(best.cost), best.cost, np.nan), best.binding)


def _check_numbers(products: Sequence[Stocked], targets: Sequence[Target]) -> None:
    for what, number, most in (("products", len(products), MOST_PRODUCTS), ("targets", len(targets), MOST_TARGETS)):
        if not 1 <= number <= most:
            raise InputError(f"one adjustment takes 1 to {most} {what}; found {number}. Split it into two steps, or "
                             f"leave out those that hardly matter.")
    refuse_curved([t.quantity for t in targets if t.is_point])


Corners = tuple[tuple[int, ...], tuple[Target, ...], list[tuple[float, ...]]]


def _corners(products: Sequence[Stocked], targets: Sequence[Target]) -> Iterator[Corners]:
    """Products used, targets held, and the values to hold them at; as many products as targets.

    A value that must be met is always held, a window at either of its ends. One curved quantity at a time can be held:
    see `_with_ph`.
    """
    fixed = tuple(t for t in targets if t.is_point)
    windows = [t for t in targets if not t.is_point]
    for size in range(len(fixed), min(len(products), len(targets)) + 1):
        for extra in combinations(windows, size - len(fixed)):
            held = _with_ph(fixed + extra)
            ends = list(product(*(SCANNED_PH if t is _ANY_PH else [t.low] if t.is_point else
                                  [v for v in (t.low, t.high) if math.isfinite(v)] for t in held)))
            for used in combinations(range(len(products)), size):
                if sum(t.quantity.kind == "curved" for t in held) <= 1:
                    yield used, held, ends


def _with_ph(held: tuple[Target, ...]) -> tuple[Target, ...]:
    """Of two curved quantities one is held, the other watched while a scan of pH stands in for it."""
    curved = [t for t in held if t.quantity.kind == "curved"]
    if len(curved) != 2 or any(t.quantity.name == "ph" for t in held):
        return held
    watched = next(t for t in reversed(curved) if not t.is_point)
    return tuple(_ANY_PH if t is watched else t for t in held)


def _corner(stream: Stream, products: Sequence[Stocked], used: tuple[int, ...], held: tuple[Target, ...],
            ends: list[tuple[float, ...]], air_co2_ppm: float) -> Iterator[tuple[Array, str]]:
    """Doses (products, rows) at each of the corners, and what binds there; all corners solved as rows of one stream."""
    if not used:
        yield np.zeros((len(products), stream.rows)), "nothing to add"
        return
    many = stream.take(np.tile(np.arange(stream.rows), len(ends)))
    points = [Point(t.quantity, np.repeat([values[k] for values in ends], stream.rows)) for k, t in enumerate(held)]
    solved = solve_doses(many, [products[k].product for k in used], points, air_co2_ppm=air_co2_ppm, only_positive=True)
    doses = np.where(solved.status == REACHED, solved.mol_l, np.nan).reshape(len(used), len(ends), stream.rows)
    for k, values in enumerate(ends):
        x = np.zeros((len(products), stream.rows))
        x[list(used)] = doses[:, k]
        yield x, " and ".join(_binding(t, v) for t, v in zip(held, values, strict=True))


def _binding(target: Target, value: float) -> str:
    q = target.quantity
    end = "" if target.is_point or target is _ANY_PH else " (low end)" if value == target.low else " (high end)"
    return f"{q.label} {q.text(value)}{end}"


def _polished(stream: Stream, products: Sequence[Stocked], targets: Sequence[Target], best: Chosen, price: Array,
              air_co2_ppm: float) -> Chosen:
    """One row with a curved window: what a constrained search from the best corner still saves."""
    bent = any(t.quantity.kind == "curved" and not t.is_point for t in targets)
    if stream.rows != 1 or not bent or len(products) < 2 or not np.isfinite(best.cost[0]):
        return best
    scale = np.maximum(best.mol_l[:, 0], 1e-6)
    whole = float(price @ best.mol_l[:, 0]) or 1.0
    room = _Room(stream, products, targets, scale, air_co2_ppm)
    found = minimize(lambda y: float(price @ (y * scale)) / whole, best.mol_l[:, 0] / scale, method="SLSQP",
                     jac=lambda y: price * scale / whole, bounds=[(0.0, None)] * len(products),
                     constraints={"type": "ineq", "fun": room.left, "jac": room.slopes},
                     options={"maxiter": SEARCHES, "ftol": 1e-9})
    x = np.where(found.x * scale < NOTHING, 0.0, found.x * scale)[:, None]
    after = dosed(stream, [p.product for p in products], x)
    cost = float(price @ x[:, 0])
    if not all_met(after, tuple(targets), air_co2_ppm)[0] or cost >= best.cost[0] * (1.0 - GAIN):
        return best
    return Chosen(x, after, np.array([cost]), np.array(["between the ends of the windows"], dtype=object))


@dataclass(frozen=True, slots=True, eq=False)
class _Room:
    """What is left to every end of every window, in its unit, for doses in parts of `scale`."""

    stream: Stream
    products: Sequence[Stocked]
    targets: Sequence[Target]
    scale: Array
    air_co2_ppm: float

    def _sides(self, doses: Array) -> Array:
        """Shape (sides, columns of `doses`)."""
        many = self.stream.repeated(doses.shape[1])
        after = dosed(many, [p.product for p in self.products], doses * self.scale[:, None])
        values = measured(after, [t.quantity.name for t in self.targets], air_co2_ppm=self.air_co2_ppm)
        sides = [side * (values[t.quantity.name] - end) * t.quantity.per_house
                 for t in self.targets for side, end in ((1.0, t.low), (-1.0, t.high)) if math.isfinite(end)]
        return np.nan_to_num(np.array(sides), nan=-1e3)

    def left(self, y: Array) -> Array:
        """At one set of doses."""
        return self._sides(y[:, None])[:, 0]

    def slopes(self, y: Array) -> Array:
        """Against each dose, all at once."""
        steps = np.concatenate([y[:, None], y[:, None] + SMALL * np.eye(y.size)], axis=1)
        sides = self._sides(steps)
        return (sides[:, 1:] - sides[:, :1]) / SMALL

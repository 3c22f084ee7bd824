"""Doses that bring every row of a stream to wanted values: as many products as values, all solved together.

At fixed pH the balance of acids and bases is linear in alkalinity, carbon and totals, so that most targets make a
small linear system; ionic strength follows the doses by a few rounds. Saturation, precipitation potential and buffer
intensity are not linear: one of them may be among the targets, found by a bracketed root along the dose of one product.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import elementwise

from aquabuf.arrays import exp10
from aquabuf.assess.plant.quantities import PlantQuantity, measured
from aquabuf.assess.plant.stream import Stream
from aquabuf.chem.acids import acid_table
from aquabuf.chem.gases import AIR_CO2_PPM, pco2_of_air
from aquabuf.chem.products import Product
from aquabuf.engine.balance import System, alkalinity_at
from aquabuf.engine.conditions import Conditions, conditions
from aquabuf.engine.state import Dissolved, families_of
from aquabuf.errors import InputError
from aquabuf.units import substances

__all__ = ["NEGATIVE", "NO_EFFECT", "REACHED", "STATUS_WORDS", "UNREACHED", "Point", "Solved", "alkalinity_at_ph",
           "dosed", "refuse_curved", "solve_doses"]

Array = NDArray[np.float64]

REACHED, NEGATIVE, UNREACHED, NO_EFFECT = 0, 1, 2, 3
STATUS_WORDS = {REACHED: "reached", NEGATIVE: "would need less than nothing of a product",
                UNREACHED: "not reached by any dose", NO_EFFECT: "the products do not move these targets apart"}
NOTHING = 1e-12       # a dose below this is none [mol/L]
ROUNDS = 12           # of ionic strength following the doses; 3 to 5 are usual
SETTLED = 1e-13       # change of a dose that ends them [mol/L]
SINGULAR = 1e-9       # determinant over the product of row lengths
FIRST_STEP, LAST_STEP = 1e-6, 0.2  # of the search along one dose; no works doses more than the last [mol/L]
MANY = 4096                        # waters worked at once in that search
GROWTH = 2.0                       # from step to step of that search
WELL_WITHIN = 0.01                 # of the closeness of the table, where a root ends
NEAR_MISS_ROUNDS, NEAR_MISS_STEPS = 3, 17  # where no sign turned
SMALL_GROWTH = {"buffer_intensity": 1.15}  # which falls and rises again along a dose
FAR_BELOW = {"si_calcite": -10.0, "ccpp": -1e-2}  # in water without calcium or carbonate, where it has no value


@dataclass(frozen=True, slots=True, eq=False)
class Point:
    """A value to be reached, in house units; one for all rows or one per row."""

    quantity: PlantQuantity
    value: ArrayLike


@dataclass(frozen=True, slots=True, eq=False)
class Solved:
    """Doses (products, rows) [mol/L], the water then, and the status of each row: see STATUS_WORDS.

    Where the status is not REACHED the doses are those that mathematics asks for (NEGATIVE) or nan.
    """

    mol_l: Array
    stream: Stream
    status: NDArray[np.int8]


def dosed(stream: Stream, products: Sequence[Product], mol_l: Array) -> Stream:
    """The stream after doses of shape (products, rows)."""
    for product, x in zip(products, mol_l, strict=True):
        stream = stream.added(product.adds, x, product.solids)
    return stream


def solve_doses(stream: Stream, products: Sequence[Product], points: Sequence[Point], *,
                air_co2_ppm: float = AIR_CO2_PPM, only_positive: bool = False) -> Solved:
    """Doses of `products` that bring the stream to `points`. Raises InputError where their numbers differ.

    Parameters
    ----------
    stream
        Water before the products, of any number of rows.
    products, points
        As many of one as of the other; at most one point of a curved quantity.
    only_positive
        Leave out the search below zero for a curved target, whose result only tells what would be needed.

    Returns
    -------
    Solved
        Met to the closeness of the table of quantities when the water is computed again.
    """
    if len(products) != len(points) or not points:
        raise InputError(f"as many products as targets are needed; found {len(products)} and {len(points)}. "
                         f"Add or remove one.")
    curved = [p for p in points if p.quantity.kind == "curved"]
    straight = [p for p in points if p.quantity.kind != "curved"]
    refuse_curved([p.quantity for p in curved])
    if not curved:
        x, able = _straight(stream, products, straight, air_co2_ppm)
    else:
        x, able = _curved(stream, products, straight, curved[0], air_co2_ppm, (1.0,) if only_positive else (1.0, -1.0))
    return _judged(stream, products, points, x, able, air_co2_ppm)


def refuse_curved(fixed: Sequence[PlantQuantity]) -> None:
    """Raise InputError where more than one quantity that bends with the doses shall have a fixed value."""
    labels = [q.label for q in fixed if q.kind == "curved"]
    if len(labels) > 1:
        raise InputError(f"only one of saturation index, precipitation potential and buffer intensity can be a fixed "
                         f"value; found {' and '.join(labels)}. Give windows instead.")


def _judged(stream: Stream, products: Sequence[Product], points: Sequence[Point], x: Array, able: NDArray[np.bool_],
            air_co2_ppm: float) -> Solved:
    status = np.where(able, REACHED, NO_EFFECT).astype(np.int8)
    status[able & ~np.isfinite(x).all(axis=0)] = UNREACHED
    with np.errstate(invalid="ignore"):
        too_much = (np.abs(x) > LAST_STEP).any(axis=0)
        status[too_much] = UNREACHED if len(products) == 1 else NO_EFFECT  # two that work almost alike
        status[(status == REACHED) & (x < -NOTHING).any(axis=0)] = NEGATIVE
    x = np.where(np.abs(x) < NOTHING, 0.0, x)
    after = dosed(stream, products, x)
    good = status == REACHED
    for point in points:
        name = point.quantity.name
        away = measured(after, [name], air_co2_ppm=air_co2_ppm)[name] - np.asarray(point.value, dtype=float)
        with np.errstate(invalid="ignore"):
            off = ~(np.abs(away) * point.quantity.per_house <= point.quantity.closeness)
        status[good & off] = UNREACHED
    return Solved(x, after, status)


# ------------------------------------------------------------------ targets that are linear in the doses


def conditions_of(stream: Stream) -> Conditions:
    """Constants at the stream's temperature and ionic strength."""
    return conditions(stream.t_c, 0.0, stream.ionic_strength_mol_l, pressure_atm=stream.pressure_atm)


def alkalinity_at_ph(stream: Stream, ph: ArrayLike, c: Conditions, *, co2: ArrayLike | None = None) -> Array:
    """Alkalinity that the stream would have at a meter pH: with its carbon, or with CO2 held [mol/L]. [eq/L]

    Only arithmetic, so that amounts below zero, which a search may pass through, do no harm.
    """
    known = acid_table()
    acids = tuple(Dissolved(known[n], np.nan_to_num(stream.total(n))) for n in stream.totals if n in known)
    h = exp10(-np.broadcast_to(np.asarray(ph, dtype=float), stream.t_c.shape)) / c.activity_per_h
    held = None if co2 is None else np.broadcast_to(np.asarray(co2, dtype=float), h.shape)
    system = System(np.zeros(h.shape), c.c_h, c.c_oh, c.k1, c.k2, dic=stream.carbon_mol_l if held is None else None,
                    co2=held, families=families_of(c, acids))
    return alkalinity_at(system, h)


def _off_ratio(numerator: Callable[[Stream], Array], denominator: Callable[[Stream], Array],
               ) -> Callable[[Stream, Array, Conditions, float], Array]:
    return lambda s, value, c, ppm: numerator(s) - value * denominator(s)


def _mass(name: str) -> Callable[[Stream], Array]:
    return lambda s: s.total(name) * substances()[name].molar_mass_g


def _off_total(*names: str) -> Callable[[Stream, Array, Conditions, float], Array]:
    return lambda s, value, c, ppm: sum(s.total(n) for n in names) - value


# How far a stream is from a value: linear in alkalinity, carbon and totals at given constants
_OFF: Mapping[str, Callable[[Stream, Array, Conditions, float], Array]] = MappingProxyType({
    "ph": lambda s, value, c, ppm: s.alkalinity_eq_l - alkalinity_at_ph(s, value, c),
    "ph_at_air": lambda s, value, c, ppm: s.alkalinity_eq_l - alkalinity_at_ph(
        s, value, c, co2=pco2_of_air(ppm, c.t_c, c.pressure_atm, c.salinity) * c.k0),
    "alkalinity": lambda s, value, c, ppm: s.alkalinity_eq_l - value,
    "dic": lambda s, value, c, ppm: s.carbon_mol_l - value,
    "calcium": _off_total("calcium"), "magnesium": _off_total("magnesium"), "sodium": _off_total("sodium"),
    "fluoride": _off_total("fluoride"), "hardness": _off_total("calcium", "magnesium"),
    "chloride_sulfate_ratio": _off_ratio(_mass("chloride"), _mass("sulfate")),
    "larson_ratio": _off_ratio(lambda s: s.total("chloride") + 2.0 * s.total("sulfate"), lambda s: s.alkalinity_eq_l),
})
UNIT_DOSE = 1e-3  # for slopes, which are exact [mol/L]


def _straight(stream: Stream, products: Sequence[Product], points: Sequence[Point], air_co2_ppm: float,
              ) -> tuple[Array, NDArray[np.bool_]]:
    """Doses (products, rows) of a linear system, and rows where the products move the targets apart."""
    x = np.zeros((len(products), stream.rows))
    able = np.ones(stream.rows, dtype=bool)
    for _ in range(ROUNDS):
        now = dosed(stream, products, x)
        c = conditions_of(now)
        off = [_OFF[p.quantity.name](now, np.asarray(p.value), c, air_co2_ppm) for p in points]
        slopes = np.empty((stream.rows, len(points), len(products)))
        for j, product in enumerate(products):
            moved = now.added(product.adds, UNIT_DOSE)
            for i, point in enumerate(points):
                value = _OFF[point.quantity.name](moved, np.asarray(point.value), c, air_co2_ppm)
                slopes[:, i, j] = (value - off[i]) / UNIT_DOSE
        step, able = _linear(slopes, -np.stack(off, axis=1))
        x = x + step.T
        with np.errstate(invalid="ignore"):
            if not (np.abs(step) > SETTLED + 1e-13 * np.abs(x.T)).any():
                break
    return x, able


def _linear(slopes: Array, right: Array) -> tuple[Array, NDArray[np.bool_]]:
    """Solution (rows, n) of a small system per row; nan and False where it is singular."""
    length = np.sqrt((slopes**2).sum(axis=2))
    with np.errstate(invalid="ignore", divide="ignore"):
        scaled = slopes / length[:, :, None]
        able = np.isfinite(scaled).all(axis=(1, 2)) & np.isfinite(right).all(axis=1)
        able &= np.abs(np.linalg.det(np.where(able[:, None, None], scaled, 0.0))) > SINGULAR
    out = np.full(right.shape, np.nan)
    if able.any():
        out[able] = np.linalg.solve(scaled[able], (right[able] / length[able])[:, :, None])[:, :, 0]
    return out, able


# ------------------------------------------------------------------ one target that is not linear


def _curved(stream: Stream, products: Sequence[Product], straight: Sequence[Point], point: Point, air_co2_ppm: float,
            signs: tuple[float, ...]) -> tuple[Array, NDArray[np.bool_]]:
    """Doses where one target is curved: the others follow the dose of a lead product, along which a root is searched.

    Each product leads in turn, in the rows that have no doses yet, or less than nothing of one.
    """
    x, able = np.full((len(products), stream.rows), np.nan), np.zeros(stream.rows, dtype=bool)
    for lead in range(len(products)):
        with np.errstate(invalid="ignore"):
            rows = np.flatnonzero(~(x >= -NOTHING).all(axis=0))
        if not rows.size:
            break
        others = [p for k, p in enumerate(products) if k != lead]
        if straight:
            here = [Point(p.quantity, of_rows(p.value, stream.rows)[rows]) for p in straight]
            rows = rows[_straight(stream.take(rows), others, here, air_co2_ppm)[1]]
            if not rows.size:
                continue
        here = [Point(p.quantity, of_rows(p.value, stream.rows)[rows]) for p in (*straight, point)]
        path = _Path(stream.take(rows), products[lead], others, here[:-1], here[-1], air_co2_ppm)
        t = path.root(signs)
        found = np.insert(path.others_at(t, np.arange(rows.size)), lead, t, axis=0)
        with np.errstate(invalid="ignore"):
            better = np.isnan(x[:, rows]).any(axis=0) | (found >= -NOTHING).all(axis=0)
        x[:, rows[better]], able[rows] = found[:, better], True
    return x, able


def of_rows(value: ArrayLike, rows: int) -> Array:
    """A value per row."""
    return np.broadcast_to(np.asarray(value, dtype=float), (rows,))


def _turn(t: Array, f: Array) -> tuple[Array, Array]:
    """Doses on both sides of the first turn of sign of `f` (steps, rows), nan if none; steps without value skipped."""
    near, far = np.full((2, t.shape[1]), np.nan)
    last_t, last_f = np.full((2, t.shape[1]), np.nan)
    for now_t, now_f in zip(t, f, strict=True):
        with np.errstate(invalid="ignore"):
            turned = np.isnan(far) & (now_f * last_f <= 0.0)
        near, far = np.where(turned, last_t, near), np.where(turned, now_t, far)
        last_t, last_f = np.where(np.isnan(now_f), last_t, now_t), np.where(np.isnan(now_f), last_f, now_f)
    return near, far


@dataclass(frozen=True, slots=True, eq=False)
class _Path:
    """Water along the dose of the lead product, the other products holding the straight targets."""

    stream: Stream
    lead: Product
    others: Sequence[Product]
    straight: Sequence[Point]
    point: Point
    air_co2_ppm: float

    def _led(self, t: Array, rows: NDArray[np.intp]) -> Stream:
        return self.stream.take(rows).added(self.lead.adds, t, self.lead.solids)

    def others_at(self, t: Array, rows: NDArray[np.intp]) -> Array:
        """Doses (others, rows) that hold the straight targets where the lead's dose is `t`."""
        if not self.straight:
            return np.zeros((0, rows.size))
        points = [Point(p.quantity, of_rows(p.value, self.stream.rows)[rows]) for p in self.straight]
        return _straight(self._led(t, rows), self.others, points, self.air_co2_ppm)[0]

    def off(self, t: Array, rows: NDArray[np.intp]) -> Array:
        """How far the curved quantity is from its value; nan where the water there makes no sense."""
        rest = self.others_at(t, rows)
        water = dosed(self._led(t, rows), self.others, rest)
        sane = water.replaced(carbon_mol_l=np.where(water.carbon_mol_l >= 0.0, water.carbon_mol_l, np.nan))
        name = self.point.quantity.name
        found = measured(sane, [name])[name]
        if name in FAR_BELOW:
            empty = (sane.water().status >= 0) & np.isfinite(sane.total("calcium")) & np.isnan(found)
            found = np.where(empty, FAR_BELOW[name], found)
        return found - of_rows(self.point.value, self.stream.rows)[rows]

    def root(self, signs: tuple[float, ...]) -> Array:
        """Dose where the curved quantity has its value: the least from zero up, else the least below; nan if none."""
        out = np.full(self.stream.rows, np.nan)
        here = self.off(np.zeros(self.stream.rows), np.arange(self.stream.rows))
        out[here == 0.0] = 0.0
        for sign in signs:
            rows = np.flatnonzero(np.isnan(out))
            if rows.size:
                out[rows] = self._search(rows, here[rows], sign)
        return out

    def _search(self, rows: NDArray[np.intp], start: Array, sign: float) -> Array:
        """Roots on one side of zero: steps that grow until the sign turns, then a bracketed root."""
        growth = SMALL_GROWTH.get(self.point.quantity.name, GROWTH)
        steps = sign * FIRST_STEP * growth ** np.arange(np.ceil(np.log(LAST_STEP / FIRST_STEP) / np.log(growth)))
        steps = np.concatenate([[0.0], steps])
        f = np.full((steps.size, rows.size), np.nan)
        f[0], k = start, np.arange(rows.size)
        near, far = np.full((2, rows.size), np.nan)
        batch = max(1, MANY // rows.size)  # few rows: many steps at once
        for first in range(1, steps.size, batch):
            some = steps[first:first + batch]
            found = self.off(np.repeat(some, k.size), np.tile(rows[k], some.size))
            f[first:first + batch, k] = found.reshape(-1, k.size)
            near[k], far[k] = _turn(np.broadcast_to(steps[:, None], (steps.size, k.size)), f[:, k])
            k = k[np.isnan(far[k])]
            if not k.size:
                break
        nearest = np.argmin(np.where(np.isfinite(f), np.abs(f), np.inf), axis=0)
        k = k[(nearest[k] > 0) & (nearest[k] < len(steps) - 1)]
        if k.size:
            near[k], far[k] = self._near_miss(rows[k], np.repeat(steps[:, None], k.size, axis=1), f[:, k])
        return self._closed_in(rows, near, far)

    def _near_miss(self, rows: NDArray[np.intp], t: Array, f: Array) -> tuple[Array, Array]:
        """Bracket where the value turns between two steps and only just reaches: ever finer steps round the nearest."""
        every = np.arange(rows.size)
        for _ in range(NEAR_MISS_ROUNDS):
            nearest = np.argmin(np.where(np.isfinite(f), np.abs(f), np.inf), axis=0)
            low, high = (t[np.clip(nearest + side, 0, len(t) - 1), every] for side in (-1, 1))
            t = low + (high - low) * np.linspace(0.0, 1.0, NEAR_MISS_STEPS)[:, None]
            f = self.off(t.reshape(-1), np.tile(rows, len(t))).reshape(t.shape)
        return _turn(t, f)

    def _closed_in(self, rows: NDArray[np.intp], near: Array, far: Array) -> Array:
        found, out = np.isfinite(far), np.full(rows.size, np.nan)
        if found.any():
            close = WELL_WITHIN * self.point.quantity.closeness / self.point.quantity.per_house
            root = elementwise.find_root(
                self._at, (near[found], far[found]), args=(rows[found].astype(float),),
                tolerances={"xatol": 0.0, "xrtol": 1e-13, "fatol": close, "frtol": 0.0})
            out[found] = np.where(root.success, root.x, np.nan)
        return out

    def _at(self, t: Array, rows: Array) -> Array:
        shape = np.broadcast_shapes(t.shape, rows.shape)
        flat = np.broadcast_to(rows, shape).reshape(-1).astype(np.intp)
        return self.off(np.broadcast_to(t, shape).reshape(-1), flat).reshape(shape)

"""Waters along the doses of one product, or over those of two, worked out in advance on a grid and read between points.

Between points a value is interpolated linearly (one product) or bilinearly (two). How far that is off is measured: at
the middle of every cell, edge and interval the works are run directly, and the largest difference is told.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.aims import FINAL, Aim, aims_of
from aquabuf.assess.plant.curve import CURVE_QUANTITIES
from aquabuf.assess.plant.quantities import PlantQuantity, find_quantity, in_unit, measured
from aquabuf.assess.plant.steps.base import Dosed, Held, Step
from aquabuf.assess.plant.steps.blend import Blend
from aquabuf.assess.plant.steps.contactor import CalciteContactor
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import Stream
from aquabuf.assess.plant.train import Train, run_train
from aquabuf.chem.gases import AIR_CO2_PPM
from aquabuf.errors import InputError

__all__ = ["LARGEST_FACTOR", "Channel", "DoseGrid", "MovedDose", "between", "dose_grid", "grids_of", "moved_doses"]

Array = NDArray[np.float64]

LARGEST_FACTOR = 2.0   # on the dose of the plan, where a grid ends
CELLS = (160, 80)      # along one product; along each of two


@dataclass(frozen=True, slots=True)
class MovedDose:
    """A dose that can be moved: its place among the steps and in the step, its product, the dose of the plan."""

    place: int
    which: int
    step: str
    product: Stocked
    mol_l: float


@dataclass(frozen=True, slots=True, eq=False)
class Channel:
    """A quantity of a water over the grid, in the unit of the tables.

    place : of the step it leaves, None for the final water. values : a dimension per product. error : largest
        difference from a direct run; nan where no value is known. targets : windows that are wanted there.
    """

    quantity: PlantQuantity
    where: str
    place: int | None
    values: Array
    error: float
    targets: tuple[Aim, ...]


@dataclass(frozen=True, slots=True, eq=False)
class DoseGrid:
    """Waters over the doses of one product or two; doses in mg/L of product as delivered, evenly spaced from none."""

    moved: tuple[MovedDose, ...]
    mg_l: tuple[Array, ...]
    channels: tuple[Channel, ...]


def between(values: Array, at: Sequence[float]) -> float:
    """Value between the points of a grid, `at` in cells from its corner; linear along one, bilinear over two.

    Places beyond the grid are taken to its edge.
    """
    if not len(at):
        return float(values)
    last = values.shape[0] - 1
    place = min(max(at[0], 0.0), float(last))
    k = min(int(place), last - 1)
    part = place - k
    return (1.0 - part) * between(values[k], at[1:]) + part * between(values[k + 1], at[1:])


def moved_doses(train: Train) -> tuple[MovedDose, ...]:
    """Every dose that a machine feeds and that is above nothing, in the order of the steps."""
    return tuple(
        MovedDose(k, j, p.step.name, d.product, float(d.mol_l[0]))
        for k, p in enumerate(train.passed) if isinstance(p.step, Held) for j, d in enumerate(p.outcome.doses)
        if d.mol_l[0] > 0.0 and not (isinstance(p.step, CalciteContactor) and d.product.name == p.step.calcite.name))


def grids_of(train: Train) -> tuple[DoseGrid, ...]:
    """A grid for two products of the last step that adjusts with two or more, then one for each other dose alone.

    No grid where a dose of the run was not found.
    """
    if not train.feasible()[0]:
        return ()
    every = moved_doses(train)
    aimed = [k for k, p in enumerate(train.passed) if getattr(p.step, "targets", ())
             and sum(m.place == k for m in every) > 1]
    pair = [m for m in every if m.place == aimed[-1]][:2] if aimed else []
    groups = ([pair] if pair else []) + [[m] for m in every if m not in pair]
    return tuple(dose_grid(train, group) for group in groups)


def dose_grid(train: Train, moved: Sequence[MovedDose], cells: int | None = None) -> DoseGrid:
    """The grid of one dose or two, all others held; from none to LARGEST_FACTOR times the dose of the plan.

    cells : along each dose, an even number so that the dose of the plan is a point of its own.

    Raises InputError for no dose, more than two, or an odd number of cells.
    """
    if len(moved) not in (1, 2):
        raise InputError(f"a grid must be of one dose or two; found {len(moved)}. Move one or two.")
    n = cells or CELLS[len(moved) - 1]
    if n % 2 or n < 2:
        raise InputError(f"a grid must have an even number of cells, 2 or more; found {n}. Take another.")
    fine = [np.linspace(0.0, LARGEST_FACTOR, 2 * n + 1) * m.mol_l for m in moved]
    mesh = [x.ravel() for x in np.meshgrid(*fine, indexing="ij")]
    shape = tuple(x.size for x in fine)
    waters = _run(train, moved, mesh)
    channels = [_channel(q, where, place, aims, _values(waters, q, place, air).reshape(shape))
                for q, where, place, aims, air in _wanted(train, min(m.place for m in moved))]
    return DoseGrid(tuple(moved), tuple(m.product.mg_l_product(x[::2]) for m, x in zip(moved, fine, strict=True)),
                    tuple(channels))


def _run(train: Train, moved: Sequence[MovedDose], mol_l: Sequence[Array]) -> list[Stream]:
    """Waters behind every step with the doses moved, in the order of the steps; the raw water before the first."""
    rows, first = mol_l[0].size, min(m.place for m in moved)
    given = {(m.place, m.which): x for m, x in zip(moved, mol_l, strict=True)}
    steps: list[Step] = []
    for k, p in enumerate(train.passed[first:], start=first):
        doses = tuple(Dosed(d.product, given.get((k, j), np.repeat(d.mol_l[:1], rows)))
                      for j, d in enumerate(p.outcome.doses))
        step = replace(p.step, with_sweep=False) if isinstance(p.step, Blend) else p.step
        steps.append(step.held(doses) if isinstance(step, Held) else step)
    run = run_train(train.passed[first].before.take(np.zeros(rows, dtype=int)), steps)
    return [p.after for p in (*train.passed[:first], *run.passed)]


def _wanted(train: Train, first: int) -> list[tuple[PlantQuantity, str, int | None, tuple[Aim, ...], float]]:
    """Channels: those of a curve behind the step and in the final water, and what is aimed at from the step on."""
    last = len(train.passed) - 1
    aims: dict[tuple[str, int | None], list[Aim]] = {}
    for name in CURVE_QUANTITIES:
        aims[name, first] = []
        if first != last:
            aims.setdefault((name, None), [])
    for aim in aims_of(train):
        if aim.place is not None and aim.place >= first:
            same_as_final = aim.place == last and first != last
            aims.setdefault((aim.target.quantity.name, None if same_as_final else aim.place), []).append(aim)
    out = []
    for (name, place), own in aims.items():
        where = FINAL if place is None else f"behind {train.passed[place].step.name}"
        air = own[0].air_co2_ppm if own else AIR_CO2_PPM
        out.append((find_quantity(name, target=False), where, place, tuple(own), air))
    return out


def _values(waters: Sequence[Stream], quantity: PlantQuantity, place: int | None, air: float) -> Array:
    stream = waters[-1 if place is None else place]
    return in_unit(quantity, measured(stream, [quantity.name], air_co2_ppm=air)[quantity.name])


def _channel(quantity: PlantQuantity, where: str, place: int | None, aims: tuple[Aim, ...], fine: Array) -> Channel:
    """The channel of a grid of half its cells, with the error at the points that are left out."""
    values = fine[tuple(slice(None, None, 2) for _ in fine.shape)]
    off = np.abs(_refined(values) - fine)
    return Channel(quantity, where, place, values, float(np.nanmax(off)) if np.isfinite(off).any() else np.nan, aims)


def _refined(values: Array) -> Array:
    """Interpolated values at the points and halfway between them, along every dimension."""
    for axis in range(values.ndim):
        v = np.moveaxis(values, axis, 0)
        out = np.empty((2 * v.shape[0] - 1, *v.shape[1:]))
        out[::2], out[1::2] = v, 0.5 * (v[:-1] + v[1:])
        values = np.moveaxis(out, 0, axis)
    return values

"""How far the dose of one product may go, all others held, before a window is left."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from aquabuf.assess.frames import frame_of
from aquabuf.assess.plant.aims import PERCENT, Aim, aims_of, dosed_of, repeated
from aquabuf.assess.plant.steps.words import brief
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.targets import Target
from aquabuf.assess.plant.train import Train, held_steps, run_train
from aquabuf.errors import InputError

__all__ = ["MOST_FACTOR", "ControlRange", "control_range"]

Array = NDArray[np.float64]

MOST_FACTOR = 10.0   # how far up is looked
GROWTH = 1.05        # of the factors looked at on the way up
DOWN = 40            # equal steps on the way down to nothing
CLOSE = 1e-8         # of the end, in parts of the dose
AT_ONCE = 64         # waters worked at once in closing in
EDGE_PERCENT = 0.05  # less room is none
PURPOSES = {"oxidant": "disinfection", "coagulant": "coagulation", "fluoride": "fluoride"}  # by group of product


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ControlRange:
    """Least and most factor on the dose of a product; arrays of rows.

    least, most : 0 where nothing of it is needed, inf where MOST_FACTOR times as much still keeps every window, nan
        where the windows are not kept even with the dose that was found, or where none is dosed.
    ends_low, ends_high : the target that is left first beyond each end, "" where there is no end.
    feeds : places where it goes in; the doses are their sum.
    """

    product: Stocked
    mol_l: Array
    least: Array
    most: Array
    ends_low: NDArray[np.object_]
    ends_high: NDArray[np.object_]
    feeds: int = 1

    def table(self) -> pd.DataFrame:
        """One row per water."""
        dose = self.product.mg_l_product(self.mol_l)
        return frame_of({
            "row": np.arange(1, dose.size + 1), "product": np.full(dose.size, self.product.name),
            "dose_mg_l_product": dose, "least_mg_l_product": dose * self.least, "most_mg_l_product": dose * self.most,
            "least_percent": PERCENT * self.least, "most_percent": PERCENT * self.most,
            "ends_low": self.ends_low, "ends_high": self.ends_high})

    def words(self, row: int = 0) -> str:
        """The range of one row as a person reads it."""
        least, most, dose = self.least[row], self.most[row], float(self.product.mg_l_product(self.mol_l[row]))
        if np.isnan(least):
            return f"{self.product.name}: no range, since its dose does not keep every window, or none is dosed"
        low = "nothing" if least == 0.0 else _end_words(dose, least)
        fed = f", {self.feeds} feeds moved alike, {brief(dose)} mg/L together" if self.feeds > 1 else ""
        high = f"more than {MOST_FACTOR:g} times as much" if np.isinf(most) else _end_words(dose, most)
        sides = (("below", self.ends_low[row]), ("above", self.ends_high[row]))
        ends = [f"{side}, {end} is left" for side, end in sides if end]
        if self.ends_low[row] and self.ends_low[row] == self.ends_high[row]:
            ends = [f"beyond, {self.ends_low[row]} is left"]
        kept = f"{self.product.name}{fed}: from {low} to {high} keeps every window"
        return "; ".join([kept, *ends, *self._purpose()])

    def _purpose(self) -> list[str]:
        """What the product is fed for where that is no window, so that nobody turns it down by the range alone."""
        found = [work for group, work in PURPOSES.items() if group in self.product.product.groups]
        return [f"{found[0]} is no window here and sets its least dose"] if found else []


def _end_words(dose: float, factor: float) -> str:
    percent = PERCENT * (factor - 1.0)
    room = "no room: the dose sits at the end of a window"
    if abs(percent) >= EDGE_PERCENT:
        room = f"{brief(percent, 2, '+')} %"
    return f"{brief(dose * factor)} mg/L ({room})"


def control_range(train: Train, product: str, targets: Sequence[Target] = ()) -> ControlRange:
    """Least and most dose of `product` that keeps all windows with the other doses held.

    The ends are found to better than 1e-6 of the dose. A fixed value counts with the band of target_bands.csv. A window
    that is left and kept again within a step of the search (a twentieth of the dose) is not seen.

    Parameters
    ----------
    targets
        Judged on the final water; by default those of the steps, each on the water that leaves its step.

    Raises
    ------
    InputError
        Where no step doses the product, or nothing is aimed at.
    """
    where = dosed_of(train, product)
    aims = aims_of(train, targets)
    if not aims:
        raise InputError(f"a control range of {product!r} needs a target; none is set. Give a step targets.")
    search = _Search(train, product, aims)
    mol_l = np.sum([d.mol_l for _, d in where], axis=0)
    inside = search.kept(np.ones((train.raw.rows, 1)))[:, 0] & (mol_l > 0.0)
    least, low = search.end(np.linspace(1.0, 0.0, DOWN + 1), inside, beyond=0.0)
    ups = np.append(GROWTH ** np.arange(np.ceil(np.log(MOST_FACTOR) / np.log(GROWTH))), MOST_FACTOR)
    most, high = search.end(ups, inside, beyond=np.inf)
    return ControlRange(product=where[0][1].product, mol_l=mol_l, least=least, most=most, ends_low=low, ends_high=high,
                        feeds=len(where))


@dataclass(frozen=True, slots=True, eq=False)
class _Search:
    """Whether the windows are kept with the dose of one product times any factors of shape (rows, k)."""

    train: Train
    product: str
    aims: Sequence[Aim]

    def each(self, factors: Array) -> NDArray[np.bool_]:
        """Shape (aims, rows, k)."""
        many = repeated(self.train, factors.shape[1])
        run = run_train(many.raw, held_steps(many, {self.product: factors.reshape(-1)}))
        return np.array([a.window.met(a.value(run)) for a in self.aims]).reshape(len(self.aims), *factors.shape)

    def kept(self, factors: Array) -> NDArray[np.bool_]:
        """Shape (rows, k)."""
        return np.logical_and.reduce(self.each(factors))

    def end(self, steps: Array, inside: NDArray[np.bool_], beyond: float) -> tuple[Array, NDArray[np.object_]]:
        """Last factor that keeps all windows on the way along `steps`, and what is left first beyond it."""
        rows = inside.size
        kept = self.kept(np.broadcast_to(steps, (rows, steps.size)).copy())
        kept[:, 0] = True
        first = np.where(kept.all(axis=1), -1, np.argmin(kept, axis=1))
        good, bad = steps[np.maximum(first - 1, 0)], steps[first]
        parts = np.linspace(0.0, 1.0, max(2, AT_ONCE // rows) + 1)
        while (np.abs(good - bad) > CLOSE).any():
            inner = good[:, None] + (bad - good)[:, None] * parts
            kept = self.kept(inner[:, 1:-1].copy())
            at = np.where(kept.all(axis=1), parts.size - 1, np.argmin(kept, axis=1) + 1)
            good, bad = inner[np.arange(rows), at - 1], inner[np.arange(rows), at]
        left = ~self.each(bad[:, None])[:, :, 0]
        names = np.full(rows, "", dtype=object)
        for k in np.flatnonzero(inside & (first >= 0)):
            names[k] = self.aims[int(np.argmax(left[:, k]))].window.words
        found = np.where(first < 0, beyond, good)
        return np.where(inside, found, np.nan), names

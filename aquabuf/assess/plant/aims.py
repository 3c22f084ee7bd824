"""Where a target is judged, the band that stands for a fixed value under drift, and runs with their doses held."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cache

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.quantities import PlantQuantity, find_quantity, in_unit, measured
from aquabuf.assess.plant.steps.base import Dosed
from aquabuf.assess.plant.targets import Target
from aquabuf.assess.plant.train import Passed, Train
from aquabuf.assess.uncertainty import TO_COVERAGE
from aquabuf.chem.gases import AIR_CO2_PPM
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["FINAL", "Aim", "aims_of", "banded", "column_of", "dosed_of", "repeated", "share_interval", "unit_words"]

Array = NDArray[np.float64]

FINAL = "final water"
PERCENT = 100.0
NO_PH = -2.0  # below every water: a window that nothing leaves


@cache
def _bands() -> dict[str, tuple[float, bool]]:
    """Band of each quantity and whether it is a share of the value."""
    return {r["quantity"]: (float(r["band"]), r["of"] == "percent") for r in read_table("target_bands")}


def banded(target: Target) -> Target:
    """A window as it is; for a fixed value the band that practice holds it to, by target_bands.csv."""
    if not target.is_point:
        return target
    width, relative = _bands()[target.quantity.name]
    half = abs(target.low) * width / PERCENT if relative else width / target.quantity.per_house
    return replace(target, low=target.low - half, high=target.high + half)


def column_of(quantity: PlantQuantity) -> str:
    """Name of a table column with its unit: alkalinity_mg_l_caco3."""
    unit = quantity.unit.lower().replace(" per ", "_").replace(" as ", "_").replace("/", "_")
    return quantity.name if unit == "-" else f"{quantity.name}_{unit}"


def unit_words(quantity: PlantQuantity) -> str:
    """Unit of a quantity; nothing for those without."""
    return "" if quantity.unit == "-" else quantity.unit


@dataclass(frozen=True, slots=True, kw_only=True)
class Aim:
    """A target on the water that leaves a step (by its place in the works), or on the final water (None).

    watched : the quantity is only looked at; nothing is wanted of it.
    """

    step: str
    place: int | None
    target: Target
    air_co2_ppm: float = AIR_CO2_PPM
    watched: bool = False

    @property
    def window(self) -> Target:
        """What is held against: the window, or the band around a fixed value."""
        return banded(self.target)

    @property
    def window_words(self) -> str:
        """The ends as a person reads them: "8.2 to 8.6"."""
        if self.watched:
            return ""
        q = self.target.quantity
        return self.window.words.removeprefix(f"{q.label} ")

    def value(self, train: Train) -> Array:
        """The quantity there, per row, in house units."""
        stream = train.final if self.place is None else train.passed[self.place].after
        name = self.target.quantity.name
        return measured(stream, [name], air_co2_ppm=self.air_co2_ppm)[name]

    def in_unit(self, house: Array) -> Array:
        """Values in the unit of the tables."""
        return in_unit(self.target.quantity, house)


def aims_of(train: Train, targets: Sequence[Target] = (), *, watch_ph: bool = False) -> tuple[Aim, ...]:
    """The targets of the steps, each on the water that leaves its step; or `targets`, all on the final water.

    watch_ph : pH of the final water as well, where nothing is wanted of it.
    """
    if targets:
        aims = tuple(Aim(step=FINAL, place=None, target=t) for t in targets)
    else:
        aims = tuple(Aim(step=p.step.name, place=k, target=t,
                         air_co2_ppm=getattr(p.step, "air_co2_ppm", AIR_CO2_PPM))
                     for k, p in enumerate(train.passed) for t in getattr(p.step, "targets", ()))
    last = len(train.passed) - 1
    if watch_ph and not any(a.target.quantity.name == "ph" and a.place in (None, last) for a in aims):
        anything = Target(quantity=find_quantity("ph"), low=NO_PH, high=math.inf)
        aims = (*aims, Aim(step=FINAL, place=None, target=anything, watched=True))
    return aims


def dosed_of(train: Train, product: str) -> list[tuple[Passed, Dosed]]:
    """Where a product of that name in the store goes in. Raises InputError where it does nowhere."""
    found = [(p, d) for p in train.passed for d in p.outcome.doses if d.product.name == product]
    if not found:
        names = dict.fromkeys(d.product.name for _, d in train.doses())
        raise InputError(f"no step doses {product!r}; dosed are {', '.join(names) or 'none'}. Correct the name.")
    return found


def repeated(train: Train, times: int) -> Train:
    """The run with every dose `times` times, row after row, so that its doses can be held on as many waters."""
    passed = tuple(replace(p, outcome=replace(p.outcome, doses=tuple(
        Dosed(d.product, np.repeat(d.mol_l, times)) for d in p.outcome.doses))) for p in train.passed)
    return Train(train.raw.repeated(times), passed)


def share_interval(share: Array, count: Array) -> tuple[Array, Array]:
    """Interval of a probability that `count` draws have told, at the coverage of all intervals; Wilson 1927."""
    n = np.maximum(count, 1)
    z2 = TO_COVERAGE**2
    middle = (share + 0.5 * z2 / n) / (1.0 + z2 / n)
    half = TO_COVERAGE / (1.0 + z2 / n) * np.sqrt(share * (1.0 - share) / n + 0.25 * z2 / n**2)
    return np.maximum(middle - half, 0.0), np.minimum(middle + half, 1.0)

"""Dose-response of one product of one step: the water along its dose, and what an error of the dose costs in pH."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.optimize import brentq

from aquabuf.assess.frames import frame_of
from aquabuf.assess.plant.aims import PERCENT, column_of
from aquabuf.assess.plant.quantities import find_quantity, in_unit, measured
from aquabuf.assess.plant.steps.base import Dosed, Held
from aquabuf.assess.plant.steps.words import brief
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import Stream
from aquabuf.assess.plant.train import Passed
from aquabuf.errors import InputError

__all__ = ["CURVE_QUANTITIES", "PH_STEP", "DoseCurve", "dose_curve", "round_doses"]

Array = NDArray[np.float64]

CURVE_QUANTITIES = ("ph", "alkalinity", "si_calcite", "ccpp", "buffer_intensity")
PH_STEP = 0.1        # the shift of pH whose price in dose is told
INTERVALS = 10       # between round doses
ROUND = (1.0, 1.2, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0)  # times a power of ten
ROUNDING = 1e-10    # of a figure of the table, which is none
SAME = 1e-9          # two doses that differ by less, in parts of the largest, are one
SLOPE_PART = 1e-5    # step of the slope in parts of the largest dose
FINE = 401           # doses along which the weakest buffering is looked for
WEAK = 1.25          # weakly buffered: intensity up to this times the least
SCAN = 64            # doses on the way to a shifted pH
FARTHEST = 1e4       # of them, in parts of the wanted dose or of the largest


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class DoseCurve:
    """The answer for one water; doses in mg/L of product as delivered.

    slope_ph_per_mg_l : of pH against dose at the wanted dose.
    up_mg_l, down_mg_l : change of the dose that raises and lowers pH by PH_STEP, solved; nan where none does.
    weakest_low_mg_l, weakest_high_mg_l : range of doses whose buffer intensity is at most WEAK times the least on the
        way from none to the largest; weakest_ph : pH at the least.
    table : one row per round dose, and one for the wanted.
    """

    step: str
    product: str
    wanted_mg_l: float
    wanted_ph: float
    slope_ph_per_mg_l: float
    up_mg_l: float
    down_mg_l: float
    weakest_low_mg_l: float
    weakest_high_mg_l: float
    weakest_ph: float
    table: pd.DataFrame

    @property
    def up_percent(self) -> float:
        """`up_mg_l` in parts of the wanted dose; nan for none. [%]"""
        return self._percent(self.up_mg_l)

    @property
    def down_percent(self) -> float:
        """`down_mg_l` in parts of the wanted dose; nan for none. [%]"""
        return self._percent(self.down_mg_l)

    @property
    def most_mg_l(self) -> float:
        """Largest dose of the table."""
        return float(self.table["dose_mg_l_product"].iloc[-1])

    @property
    def weak_throughout(self) -> bool:
        """Whether no dose of the table buffers better than the weakest by more than WEAK times."""
        return self.weakest_low_mg_l == 0.0 and bool(np.isclose(self.weakest_high_mg_l, self.most_mg_l, rtol=SAME))

    def _percent(self, change: float) -> float:
        return PERCENT * change / self.wanted_mg_l if self.wanted_mg_l > 0.0 else np.nan

    def words(self) -> tuple[str, ...]:
        """What the curve says, a sentence each."""
        low, high = brief(self.weakest_low_mg_l), brief(self.weakest_high_mg_l)
        weak = f"buffering is weakest from {low} to {high} mg/L (around pH {self.weakest_ph:.1f})"
        if self.weak_throughout:
            weak = f"buffering is much the same at every dose up to {brief(self.most_mg_l)} mg/L"
        return (f"{brief(self.wanted_mg_l)} mg/L of {self.product} gives pH {self.wanted_ph:.2f}; there 1 mg/L more or "
                f"less moves pH by about {abs(self.slope_ph_per_mg_l):.2g}",
                self._cost(self.up_mg_l, self.up_percent, "raises"),
                self._cost(self.down_mg_l, self.down_percent, "lowers"), weak)

    def _cost(self, change: float, percent: float, verb: str) -> str:
        if not np.isfinite(change):
            return f"no dose of {self.product} {verb} pH by {PH_STEP:g} from there"
        share = f" ({brief(abs(percent), 2)} %)" if np.isfinite(percent) else ""
        return f"{brief(abs(change), 2)} mg/L{share} {'more' if change > 0.0 else 'less'} {verb} pH by {PH_STEP:g}"


def round_doses(wanted: float, most: float | None = None) -> Array:
    """Round doses from 0 to about twice the wanted one, the wanted among them; or to about `most`. [as given]

    Raises InputError where the wanted dose is none and no largest is given.
    """
    top = 2.0 * wanted if most is None else most
    if not (np.isfinite(top) and top > 0.0):
        raise InputError(f"a dose-response needs a largest dose above 0; the wanted dose is {wanted:g} and the largest "
                         f"{'not given' if most is None else f'{most:g}'}. Give most_mg_l.")
    power = 10.0 ** np.floor(np.log10(top / INTERVALS))
    step = power * min(ROUND, key=lambda m: abs(np.log(m * power * INTERVALS / top)))
    grid = np.round(np.arange(INTERVALS + 1) * step / power, 6) * power
    near = np.abs(grid - wanted) <= SAME * grid[-1]
    return np.where(near, wanted, grid) if near.any() else np.sort(np.append(grid, wanted))


def dose_curve(passed: Passed, product: str, *, row: int = 0, most_mg_l: float | None = None) -> DoseCurve:
    """Dose-response of `product` in a step of a run, its other products held, for one row of water.

    Parameters
    ----------
    most_mg_l
        Largest dose, of product as delivered; by default about twice the wanted one.

    Raises
    ------
    InputError
        Where the step does not dose that product, a dose of the step was not found, or there is no largest dose.
    """
    which, doses = _doses(passed, product, row)
    stocked = doses[which].product
    after = _response(passed, doses, which, row)
    wanted = float(doses[which].mol_l[0])
    grid = round_doses(float(stocked.mg_l_product(wanted)), most_mg_l)
    mol_l = stocked.mol_l(grid)
    mol_l[grid == stocked.mg_l_product(wanted)] = wanted
    top = float(mol_l[-1])
    per_mg = float(stocked.mol_l(1.0))
    table = _table(stocked, grid, mol_l, after, per_mg * _slopes(after, mol_l, SLOPE_PART * top), wanted)
    at = _Ph(after)
    up, down = (_shift(at, wanted, top, change) / per_mg for change in (PH_STEP, -PH_STEP))
    low, high, ph = _weakest(after, top)
    here = np.array([wanted])
    return DoseCurve(
        step=passed.step.name, product=product, wanted_mg_l=float(stocked.mg_l_product(wanted)), wanted_ph=at(wanted),
        slope_ph_per_mg_l=per_mg * float(_slopes(after, here, SLOPE_PART * top)[0]), up_mg_l=up, down_mg_l=down,
        weakest_low_mg_l=low / per_mg, weakest_high_mg_l=high / per_mg, weakest_ph=ph, table=table)


def _doses(passed: Passed, product: str, row: int) -> tuple[int, list[Dosed]]:
    doses = [Dosed(d.product, d.mol_l[row:row + 1]) for d in passed.outcome.doses]
    names = [d.product.name for d in doses]
    if product not in names or not isinstance(passed.step, Held):
        raise InputError(f"step {passed.step.name!r} must dose the product of a dose-response; it doses "
                         f"{', '.join(names) or 'none'}, not {product!r}. Name one of them, or another step.")
    if not all(np.isfinite(d.mol_l).all() for d in doses):
        raise InputError(f"a dose-response needs the doses of step {passed.step.name!r}; they were not found. "
                         "Change its products or targets first.")
    return names.index(product), doses


def _response(passed: Passed, doses: list[Dosed], which: int, row: int) -> Callable[[Array], Stream]:
    """Water behind the step for any doses of one product. [mol/L]"""
    before, step = passed.before.take(np.array([row])), passed.step
    assert isinstance(step, Held)

    def after(mol_l: Array) -> Stream:
        held = tuple(Dosed(d.product, mol_l if k == which else np.repeat(d.mol_l, mol_l.size))
                     for k, d in enumerate(doses))
        return step.held(held).run(before.repeated(mol_l.size)).stream
    return after


@dataclass(frozen=True, slots=True)
class _Ph:
    """pH at one dose."""

    after: Callable[[Array], Stream]

    def __call__(self, mol_l: float) -> float:
        return float(self.after(np.array([mol_l])).water().ph[0])


def _table(stocked: Stocked, mg_l: Array, mol_l: Array, after: Callable[[Array], Stream], slopes: Array, wanted: float,
           ) -> pd.DataFrame:
    values = measured(after(mol_l), CURVE_QUANTITIES)
    columns: dict[str, NDArray] = {"dose_mg_l_product": mg_l, "dose_mg_l_pure": stocked.mg_l_pure(mol_l)}
    for name, house in values.items():
        quantity = find_quantity(name)
        value = np.asarray(in_unit(quantity, house))
        columns[column_of(quantity)] = np.where(np.abs(value) < ROUNDING, 0.0, value)
    return frame_of(columns | {"slope_ph_per_mg_l": slopes, "is_wanted": mol_l == wanted})


def _slopes(after: Callable[[Array], Stream], mol_l: Array, h: float) -> Array:
    """Slope of pH against dose between two doses a small step to either side, none below zero. [L/mol]"""
    middle = np.maximum(mol_l, h)
    below, above = after(np.concatenate([middle - h, middle + h])).water().ph.reshape(2, -1)
    return (above - below) / (2.0 * h)


def _shift(at: _Ph, wanted: float, top: float, change: float) -> float:
    """Change of the dose that shifts pH by `change`; of the two sides the nearer; nan where neither does. [mol/L]"""
    goal = at(wanted) + change
    more = wanted + np.geomspace(SLOPE_PART, FARTHEST, SCAN) * max(wanted, top)
    less = wanted * (1.0 - np.linspace(0.0, 1.0, SCAN)[1:])
    found = []
    for side in (more, less):
        if wanted == 0.0 and side is less:
            continue
        ph = at.after(side).water().ph
        past = np.flatnonzero((ph >= goal) if change > 0.0 else (ph <= goal))
        if past.size:
            ends = (wanted, float(side[past[0]]))
            found.append(brentq(lambda x: at(x) - goal, *ends, xtol=1e-16, rtol=1e-12) - wanted)
    return float(min(found, key=abs)) if found else np.nan


def _weakest(after: Callable[[Array], Stream], top: float) -> tuple[float, float, float]:
    """Ends of the range of doses with weak buffering [mol/L], and pH at the least."""
    x = np.linspace(0.0, top, FINE)
    water = after(x).water()
    intensity = water.buffer_intensity_eq_l()
    least = int(np.argmin(intensity))
    weak = intensity <= WEAK * intensity[least]
    below, above = np.flatnonzero(~weak[:least]), np.flatnonzero(~weak[least:])
    low = 0.0 if not below.size else _crossing(x, intensity, int(below[-1]), WEAK * intensity[least])
    high = top if not above.size else _crossing(x, intensity, least + int(above[0]) - 1, WEAK * intensity[least])
    return low, high, float(water.ph[least])


def _crossing(x: Array, y: Array, k: int, level: float) -> float:
    """Where a line from point k to the next passes a level."""
    return float(x[k] + (level - y[k]) / (y[k + 1] - y[k]) * (x[k + 1] - x[k]))

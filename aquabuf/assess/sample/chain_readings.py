"""The first links of a chain: readings as entered, in house units, and how certain each one is."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from aquabuf.assess.sample.chain_steps import Part, Step, quantity_label, six
from aquabuf.assess.sample.inputs import OWN_ACID_U_REL, TITRATED_BY, Values
from aquabuf.readings.derive import CONDUCTIVITY_PER_DEGREE
from aquabuf.readings.origin import Cell
from aquabuf.readings.result import BELOW_DETECTION
from aquabuf.readings.schema import Quantity, quantities
from aquabuf.readings.sheet import FILLED

__all__ = ["Origin", "entered", "house_label", "in_house_units", "uncertainty_steps"]

TITRATED = ("alkalinity_eq_l", "anc_eq_l")
DERIVED = {  # by canonical column: what it follows from and how
    "conductivity_us_cm": f"measured conductivity over 1 + {CONDUCTIVITY_PER_DEGREE:g} (t - 25)",
    "calcium_mol_l": "the hardness due to calcium",
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Origin:
    """Where the readings of one sample come from: its file, its cells, what was noticed about them, its titration."""

    file: str
    cells: tuple[Cell, ...] = ()
    flags: tuple[tuple[str, str], ...] = ()  # canonical column, what
    titrated_by: str = ""
    per_kg: frozenset[str] = frozenset()

    @classmethod
    def of(cls, file: str, cells: Iterable[Cell], flags: pd.DataFrame, frame: pd.DataFrame,
           headers: Mapping[str, tuple[str, str]]) -> Origin:
        """The origin of the one sample of `frame`."""
        method = str(frame[TITRATED_BY].iloc[0]) if TITRATED_BY in frame else ""
        noted = tuple(zip(flags["column"].astype(str), flags["what"].astype(str), strict=True))
        return cls(file=file, cells=tuple(cells), flags=noted, titrated_by=method,
                   per_kg=frozenset(name for name, unit in headers.values() if "/kg" in unit))

    def cell(self, name: str) -> Cell | None:
        """The cell of a canonical column."""
        return next((c for c in self.cells if c.name == name), None)

    def noted(self, name: str) -> list[str]:
        """What was noticed about a column."""
        return [what for column, what in self.flags if column == name]

    def replaced(self, name: str) -> bool:
        """Whether a titration stands in place of the cell."""
        return bool(self.titrated_by) and name in TITRATED


def house_label(name: str) -> tuple[str, str]:
    """Label and house unit of a canonical column, an acid of the user's own included."""
    quantity = quantities().get(name)
    if quantity is None:
        return quantity_label(name.removesuffix("_mol_l")), "mol/L"
    return quantity_label(quantity.base), "" if quantity.house_unit == "-" else quantity.house_unit


def entered(origin: Origin, row: int) -> Part:
    """The cells as they stand in the file."""
    steps = []
    for cell in origin.cells:
        quantity = cell.column.quantity
        if not quantity.is_number and quantity.kind != "choice":
            continue
        label = quantity_label(quantity.base if quantity.is_number else quantity.name)
        where = cell.place or f"column {cell.column.header!r}" + (f", row {cell.row}" if cell.row != row else "")
        notes = [*origin.noted(cell.name), *(["a titration takes its place"] if origin.replaced(cell.name) else [])]
        unit = "" if cell.column.unit_label == "-" else cell.column.unit_label
        steps.append(Step(label=f"{label}, standard uncertainty" if cell.column.is_u else label, value=cell.text,
                          unit=unit, words="; ".join([where, *notes])))
    return Part("Readings as entered", tuple(steps), f"{origin.file}, row {row}")


def in_house_units(values: Values, origin: Origin) -> Part:
    """Every number that is used, in the unit of the work, with its conversion."""
    steps = []
    for name, value in _numbers(values):
        label, unit = house_label(name)
        steps.append(Step(label=label, value=six(value), unit=unit, words=_way(name, origin)))
    return Part("In the units of the work", tuple(steps))


def _numbers(values: Values) -> Iterable[tuple[str, float]]:
    """Quantities that were measured, uncertainties apart."""
    known = quantities()
    for name, v in values.items():
        own = name not in known
        if np.isfinite(v[0]) and not (own and ("_u_" in name or not name.endswith("_mol_l"))):
            yield name, float(v[0])


def _way(name: str, origin: Origin) -> str:
    """How a number came about."""
    if origin.replaced(name):
        return f"recommended result of its titration ({origin.titrated_by})"
    cell, notes = origin.cell(name), origin.noted(name)
    if cell is None:
        if FILLED in notes:
            return FILLED
        return f"from {DERIVED[name]}" if name in DERIVED else ""
    half = ["half the detection limit"] if BELOW_DETECTION in notes else []
    others = [what for what in notes if what != BELOW_DETECTION]
    return "; ".join([cell.conversion(), *half, *others])


def uncertainty_steps(values: Values, u: Values, origin: Origin) -> Part:
    """The standard uncertainty of every number that has one, and where it is from."""
    steps = []
    for name, value in _numbers(values):
        if name not in u or not np.isfinite(u[name][0]):
            continue
        label, unit = house_label(name)
        own_u = values.get(quantities()[name].u_name if name in quantities() else name.replace("_mol_l", "_u_mol_l"))
        given = own_u is not None and np.isfinite(own_u[0])
        words, source = _given(name, origin) if given else _default(name, origin)
        with np.errstate(over="ignore"):
            share = np.divide(u[name][0], value) if value else np.inf
        percent = f" ({_percent(share)} %)" if np.isfinite(share) and unit not in ("", "°C") else ""
        steps.append(Step(label=label, value=six(float(u[name][0])), unit=f"{unit}{percent}".strip(),
                          words=words, source=source))
    return Part("Standard uncertainty of each reading", tuple(steps),
                "one standard deviation; the draws behind the intervals use it")


def _percent(ratio: float) -> str:
    percent = 100.0 * abs(ratio)
    return f"{percent:.0f}" if percent >= 10.0 else f"{percent:.2g}"


def _given(name: str, origin: Origin) -> tuple[str, str]:
    quantity = quantities().get(name)
    u_name = quantity.u_name if quantity else name.replace("_mol_l", "_u_mol_l")
    if origin.replaced(name):
        return "of the titration", "points of the titration and its strength and volumes"
    cell = origin.cell(u_name)
    if BELOW_DETECTION in origin.noted(name):
        return "below detection: any value from 0 to the limit is as likely, limit / (2 √3)", "uniform distribution"
    if cell is not None:
        return f"given: {cell.text} {cell.column.unit_label.removeprefix('-')}".rstrip(), \
            cell.place or f"column {cell.column.header!r}"
    return f"given, carried over from {DERIVED.get(name, 'another column')}", "given in the readings"


def _default(name: str, origin: Origin) -> tuple[str, str]:
    quantity = quantities().get(name)
    if quantity is None:
        return f"default: {OWN_ACID_U_REL:.0%} of the value", "common practice, no source"
    if name in origin.per_kg and quantity.default_u_per_kg is not None:
        return f"default for readings per kilogram: {quantity.default_u_per_kg:g} {quantity.house_unit}", \
            quantity.u_per_kg_source
    return f"default: {_rule(quantity)}", quantity.u_source


def _rule(quantity: Quantity) -> str:
    """The default uncertainty in words."""
    unit = "" if quantity.house_unit == "-" else f" {quantity.house_unit}"
    terms: Sequence[str] = [f"{quantity.default_u:g}{unit}"] if quantity.default_u else []
    terms = [*terms, f"{100.0 * quantity.default_u_rel:g} % of the value"] if quantity.default_u_rel else terms
    return " and ".join(terms) or "none"

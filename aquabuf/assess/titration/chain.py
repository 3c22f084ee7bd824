"""The chain of one titration, from its burette readings to its result: what it rests on, which method and why."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.sample.chain_readings import Origin, entered
from aquabuf.assess.sample.chain_steps import FOUND, REFUSED, Chain, Part, Step, quantity_label, six
from aquabuf.assess.titration.assess import TitrationResult, assumptions
from aquabuf.assess.titration.chain_results import (
    findings_part,
    method_part,
    result_parts,
    uncertainty_part,
    verdict_words,
)
from aquabuf.assess.titration.curves import SHARED_BY_ALL, u_of
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.readings.origin import Cell
from aquabuf.readings.schema import titration_quantities
from aquabuf.readings.titration.piece import POINT_NAMES
from aquabuf.readings.titration.points import ADDED, READ
from aquabuf.readings.titration.result import Titrations

__all__ = ["TitrationOrigin", "refused_titration_chain", "titration_chain"]


@dataclass(frozen=True, slots=True, kw_only=True)
class TitrationOrigin:
    """Where a titration stands: the cells of its points by their row, and those of its row in the file of samples."""

    points_file: str
    points: Mapping[int, tuple[Cell, ...]] = field(default_factory=dict)
    samples_file: str = ""
    sample: tuple[Cell, ...] = ()

    def facts(self) -> tuple[Cell, ...]:
        """The cells that tell of the whole sample, those among the points with their place."""
        found = {cell.name: cell for cell in self.sample}
        for row in sorted(self.points):
            for cell in self.points[row]:
                if cell.name not in POINT_NAMES and cell.name not in found:
                    place = cell.place or f"column {cell.column.header!r} of {self.points_file}, row {cell.row}"
                    found[cell.name] = replace(cell, place=place)
        return tuple(found.values())


def titration_chain(part: TitrationResult, i: int, t: Titrations, options: TitrationOptions, origin: TitrationOrigin,
                    ) -> Chain:
    """The chain of titration `i` of those solved in `part`, which is the assessment of `t` with these options."""
    place = int(part.at[i])
    row = {str(name): value for name, value in part.results.iloc[place].items()}
    of_sample = part.findings["row"].to_numpy() == row["row"]
    found = part.findings[of_sample & (part.findings["sample_id"].to_numpy() == row["sample_id"])]
    parts = (
        _points_part(part, i, t, place, origin, found), _sample_part(t, place, origin), _units_part(part, i, origin),
        _not_stated(part, i), method_part(part, i), *result_parts(part, i, row, options),
        uncertainty_part(part, i), findings_part(found))
    return Chain(sample_id=str(row["sample_id"]), row=int(row["row"]), file=origin.points_file,
                 verdict=verdict_words(part, i, row), parts=tuple(p for p in parts if p.steps or p.words))


def refused_titration_chain(sample_id: str, row: int, origin: TitrationOrigin, reasons: pd.DataFrame) -> Chain:
    """The chain of a titration that was refused: each reason with its place and remedy."""
    files = {"points": origin.points_file, "samples": origin.samples_file}
    steps = [Step(label=str(r["column"]), value=str(r["value"]), sign=REFUSED,
                  words=f"{files[str(r['file'])]}, row {r['row']}: {r['rule']}; to do: {r['remedy']}")
             for r in reasons.to_dict("records")]
    return Chain(sample_id=sample_id, row=row, file=origin.points_file, refused=True,
                 verdict="refused: it was not assessed", parts=(Part("Why it was refused", tuple(steps)),))


# ---------------------------------------------------------------- readings


def _points_part(part: TitrationResult, i: int, t: Titrations, place: int, origin: TitrationOrigin,
                 found: pd.DataFrame) -> Part:
    """Every point as entered, what it took part in, and what was found about it."""
    steps = []
    for k in range(int(t.start[place]), int(t.start[place + 1])):
        row = int(t.point_row[k])
        about = found["finding"][(found["point_row"] == row).fillna(False).to_numpy(dtype=bool)].tolist()
        cells = {cell.name: cell for cell in origin.points.get(row, ())}
        added = _shown(cells.get(ADDED[str(t.added_by[place])]), float(t.added[k]))
        read = _shown(cells.get(READ[str(t.read_as[place])]), float(t.reading[k]))
        what = "pH" if t.read_as[place] == "ph" else "potential"
        minutes = f"after {t.minutes[k]:g} min" if np.isfinite(t.minutes[k]) else ""
        words = [minutes, *_part_of(part, i, row), *(f"found: {name}" for name in about)]
        steps.append(Step(label=f"row {row}", value=f"{added}: {what} {read}", words="; ".join(filter(None, words)),
                          sign=FOUND if about else ""))
    return Part("Readings as entered", tuple(steps), f"{origin.points_file}; titrant since the start: what was read")


def _shown(cell: Cell | None, value: float) -> str:
    """A reading as it stands in the file."""
    if cell is None:
        return f"{value:g}"
    return f"{cell.text} {cell.column.unit_label.removeprefix('-')}".rstrip()


def _part_of(part: TitrationResult, i: int, row: int) -> Iterator[str]:
    """What a point took part in."""
    s = part.solved
    at = np.flatnonzero(s.curves.there[i] & (s.curves.row[i] == row))
    if not at.size:
        yield "gave way to the next reading at the same titrant"
        return
    k = int(at[0])
    if s.curves.is_potential[i] and np.isfinite(s.ph[i, k]):
        yield f"pH {s.ph[i, k]:.3f} by the electrode"
    if s.gran.first[i] >= 0 and s.gran.first[i] <= k <= s.gran.last[i]:
        yield "on the Gran line"
    if np.isfinite(s.fit.fit.residual_ph[i, k]):
        yield "in the fit"
    if np.isfinite(s.excess.fit.residual_ph[i, k]):
        yield "in the fit of acid in excess"


def _sample_part(t: Titrations, place: int, origin: TitrationOrigin) -> Part:
    """What was entered of sample, titrant and instruments."""
    cells = origin.facts()
    row = origin.sample[0].row if origin.sample else int(t.samples["row"].iloc[place])
    own = t.flags[t.flags["sample_id"] == t.samples["sample_id"].iloc[place]]
    noted = tuple(zip(own["column"].astype(str), own["what"].astype(str), strict=True))
    file = origin.samples_file if origin.sample else origin.points_file
    return replace(entered(Origin(file=file, cells=cells, flags=noted), row), title="Sample and titrant as entered")


# ---------------------------------------------------------------- units of the work


def _units_part(part: TitrationResult, i: int, origin: TitrationOrigin) -> Part:
    """Every number that is used, in the unit of the work, with its conversion and standard uncertainty."""
    s = part.solved
    values: dict[str, Any] = {name: v[i:i + 1] for name, v in s.samples.items() if v.dtype.kind == "f"}
    cells = {cell.name: cell for cell in origin.facts()}
    known = titration_quantities()
    steps = []
    for name, value in values.items():
        is_u = any(name == q.u_name for q in known.values())
        quantity = known.get(name)
        if np.isnan(value[0]) or is_u or (quantity is None and not name.endswith("_mol_l")):
            continue
        base, unit = (quantity.base, quantity.house_unit) if quantity else (name.removesuffix("_mol_l"), "mol/L")
        words = [cells[name].conversion()] if name in cells else []
        source = ""
        if quantity is not None and name in SHARED_BY_ALL:
            u = float(u_of(values, quantity, value)[0])
            own = values.get(quantity.u_name)
            given = own is not None and np.isfinite(own[0])
            words.append(f"standard uncertainty {six(u)} {unit.removeprefix('-')}".rstrip()
                         + (", given" if given else ", default"))
            source = "" if given else quantity.u_source
        steps.append(Step(label=quantity_label(base), value=six(float(value[0])), unit=unit.removeprefix("-"),
                          words="; ".join(words), source=source))
    return Part("In the units of the work", (*steps, *_worked_out(part, i)))


def _worked_out(part: TitrationResult, i: int) -> Iterator[Step]:
    """What follows from several of these numbers, and how far a single reading is trusted."""
    c, k = part.solved.curves, part.solved.calibration
    unit, titrant = ("eq/kg" if c.by_mass[i] else "eq/L"), ("g" if c.added_mass[i] else "mL")
    per_added = abs(float(c.per_added[i]))
    yield Step(label="base per titrant" if c.is_base[i] else "acid per titrant", value=six(per_added),
               unit=f"{unit} per {titrant}",
               words=f"strength times cartridge factor over the sample: {c.strength[i]:.6g} "
                     f"eq/{'kg' if c.added_mass[i] else 'L'} over {c.sample[i]:.6g} {'g' if c.by_mass[i] else 'mL'}; "
                     f"relative standard uncertainty {100.0 * c.relative_u[i]:.2g} % (strength, sample, scale of the "
                     f"burette)")
    yield Step(label="scatter of one titrant reading", value=six(float(c.u_acid[i]) / per_added), unit=titrant,
               words="standard deviation")
    yield Step(label="scatter of one pH reading", value=six(float(c.u_ph_scatter[i])),
               words=f"standard deviation; what all readings share: {c.u_ph[i]:.3g}")
    if c.is_potential[i]:
        told = f"from {k.standards[i]} standards" if k.standards[i] else "no standards: from the acid end of the curve"
        yield Step(label="potential at pH 0", value=f"{k.zero_mv[i]:.2f}", unit="mV",
                   words=f"{told}; pH = (this - potential) / slope")
        yield Step(label="slope of the electrode", value=f"{k.slope_mv[i]:.3f}", unit="mV per pH",
                   words=f"{k.efficiency[i]:.4f} of theory", source="Nernst equation")


def _not_stated(part: TitrationResult, i: int) -> Part:
    """What is taken where it was not stated."""
    steps = []
    for words, mask in assumptions(part.solved).items():
        if mask[i]:
            what, _, taken = words.partition(": ")
            steps.append(Step(label=what, words=taken, source="assumption"))
    return Part("What was not stated, and what is taken", tuple(steps))

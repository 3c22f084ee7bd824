"""Chains of the samples that a page shows first, gathered while a run goes through its file piece by piece."""

from __future__ import annotations

from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.lake.assess import LakeAssessment
from aquabuf.assess.lake.chain import LakeTables, lake_chain
from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.limits import Limit
from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import Assessment
from aquabuf.assess.sample.chain import chain_of
from aquabuf.assess.sample.chain_readings import Origin
from aquabuf.assess.sample.chain_steps import Chain
from aquabuf.assess.sample.headline import RANK_BY
from aquabuf.assess.titration.assess import TitrationResult, assess_titrations
from aquabuf.assess.titration.chain import TitrationOrigin, titration_chain
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.readings.origin import Cell, cells_of
from aquabuf.readings.result import Readings
from aquabuf.readings.schema import titration_quantities
from aquabuf.readings.source import load_map
from aquabuf.readings.table import as_map
from aquabuf.readings.titration.files import open_both
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.readings.titration.result import Titrations, join_titrations

__all__ = ["ON_PAGE", "FirstTitrations", "WorstSamples", "amounts_of", "first_lakes", "no_cells", "only_rows",
           "only_titrations", "titration_origins"]

ON_PAGE = 20  # chains of a page, the worst first
T = TypeVar("T")


def _first(kept: list[tuple[float, T]], ranks: Sequence[float] | NDArray, make: Callable[[int], T],
           ) -> list[tuple[float, T]]:
    """The `ON_PAGE` least ranks of those kept and of a new piece, of equal ones the earlier; made only if they stay."""
    ordered = np.argsort(np.nan_to_num(np.asarray(ranks, dtype=float), nan=np.inf), kind="stable")[:ON_PAGE].tolist()
    places: list[tuple[float, int]] = [(rank, -1 - k) for k, (rank, _) in enumerate(kept)]
    places += [(float(np.nan_to_num(ranks[k], nan=np.inf)), k) for k in ordered]
    best = sorted(places, key=lambda place: place[0])[:ON_PAGE]
    return [(rank, make(k) if k >= 0 else kept[-1 - k][1]) for rank, k in best]


# ---------------------------------------------------------------- samples


def only_rows(readings: Readings, kept: NDArray[np.bool_]) -> Readings:
    """The readings with some samples left and what was noticed about them."""
    frame = readings.frame[kept].reset_index(drop=True)
    flags = readings.flags[readings.flags["row"].isin(frame["row"])].reset_index(drop=True)
    return replace(readings, frame=frame, flags=flags, rejected=readings.rejected.iloc[:0])


@dataclass(slots=True)
class WorstSamples:
    """The samples that take the least acid, each with its readings and its assessment."""

    _kept: list[tuple[float, tuple[Readings, Assessment]]] = field(default_factory=list)

    def add(self, readings: Readings, part: Assessment) -> None:
        """Take in one assessed piece."""
        self._kept = _first(self._kept, part.results[RANK_BY].to_numpy(), lambda k: _one_sample(readings, part, k))

    def chains(self, path: Path, map_file: Path | None, options: Options, limits: tuple[Limit, ...]) -> list[Chain]:
        """Their chains, the worst first; `path` and `map_file` are those of the readings."""
        rows = [int(part.results["row"].iloc[0]) for _, (_, part) in self._kept]
        cells = cells_of(path, None if map_file is None else load_map(map_file), set(rows))
        out = []
        for row, (_, (readings, part)) in zip(rows, self._kept, strict=True):
            origin = Origin.of(path.name, cells.get(row, ()), readings.flags, readings.frame, readings.headers)
            out.append(chain_of(part, readings, options, limits, origin, with_shares=False))
        return out


def _one_sample(readings: Readings, part: Assessment, k: int) -> tuple[Readings, Assessment]:
    row = part.results["row"].iloc[k]
    only = only_rows(readings, (readings.frame["row"] == row).to_numpy())
    verdicts, checks = (table[(table["row"] == row).to_numpy()] if len(table) else table
                        for table in (part.verdicts, part.checks))
    return only, replace(part, results=part.results.iloc[[k]], verdicts=verdicts, checks=checks,
                         inputs=part.inputs.take(np.array([k])))


# ---------------------------------------------------------------- lakes


def first_lakes(found: LakeAssessment, readings: Readings, rows: Sequence[int], tables: LakeTables,
                options: LakeOptions, limits: tuple[Limit, ...], path: Path, map_file: Path | None) -> list[Chain]:
    """The chains of the lakes in these rows of the survey, in their order."""
    cells = cells_of(path, None if map_file is None else load_map(map_file), set(rows))
    place = {int(row): k for k, row in enumerate(found.results["row"])}
    out = []
    for row in rows:
        i = place[row]
        flags = readings.flags[readings.flags["row"] == row]
        origin = Origin.of(path.name, cells.get(row, ()), flags, found.frame.iloc[[i]], readings.headers)
        out.append(lake_chain(found, i, tables, options, limits, origin, readings.headers))
    return out


# ---------------------------------------------------------------- titrations


@dataclass(slots=True)
class FirstTitrations:
    """The titrations to look at first, each with its points."""

    _kept: list[tuple[float, Titrations]] = field(default_factory=list)

    def add(self, t: Titrations, part: TitrationResult, rank_of: Callable[[str], int]) -> None:
        """Take in one assessed piece; refused titrations have no chain."""
        ranks = [rank_of(status) for status in part.results["status"].iloc[part.at]]
        self._kept = _first(self._kept, np.array(ranks, dtype=float),
                            lambda k: only_titrations(t, part.at[k:k + 1]))

    def chains(self, files: TitrationFiles, options: TitrationOptions) -> list[Chain]:
        """Their chains, the first to look at first."""
        if not self._kept:
            return []
        t = join_titrations([one for _, one in self._kept])
        by_liter, by_kilogram = amounts_of(t)
        part = assess_titrations(t, options, by_liter=by_liter, by_kilogram=by_kilogram)
        names = t.samples["sample_id"].astype(str).tolist()
        origins = titration_origins(files, names, t)
        return [titration_chain(part, i, t, options, origins[name]) for i, name in enumerate(names)]


def amounts_of(t: Titrations) -> tuple[bool, bool]:
    """Whether the table of results has columns per liter, and per kilogram."""
    columns = {name for name, _ in t.headers.values()}
    by_kilogram = "sample_mass_g" in columns
    return "sample_volume_ml" in columns or not by_kilogram, by_kilogram


def only_titrations(t: Titrations, places: np.ndarray) -> Titrations:
    """Some of the titrations, with their points and what was noticed about them."""
    counts = np.diff(t.start)[places]
    points = np.concatenate([np.arange(t.start[k], t.start[k + 1]) for k in places.tolist()]).astype(np.int64)
    samples = t.samples.iloc[places].reset_index(drop=True)
    ids = set(samples["sample_id"].astype(str))
    return replace(
        t, samples=samples, usable=t.usable[places], start=np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
        added=t.added[points], reading=t.reading[points], minutes=t.minutes[points], point_row=t.point_row[points],
        added_by=t.added_by[places], read_as=t.read_as[places],
        rejected=t.rejected[t.rejected["sample_id"].isin(ids)], flags=t.flags[t.flags["sample_id"].isin(ids)])


def no_cells(files: TitrationFiles) -> TitrationOrigin:
    """Where titrations stand, without any cells."""
    return TitrationOrigin(points_file=files.points.name, samples_file=files.samples.name if files.samples else "")


def titration_origins(files: TitrationFiles, names: Collection[str], t: Titrations) -> dict[str, TitrationOrigin]:
    """The cells of some titrations of `t`, by name: their points, and their row in the file of samples."""
    schema = titration_quantities()
    points = cells_of(files.points, as_map(files.points_map, schema), {int(row) for row in t.point_row})
    sample: dict[str, tuple[Cell, ...]] = {}
    if files.samples is not None:
        known = open_both(files.points, files.samples, files.points_map, files.samples_map).samples
        assert known is not None  # the file is given
        at = {str(name): int(row) for name, row in zip(known.names, known.rows, strict=True) if str(name) in names}
        cells = cells_of(files.samples, as_map(files.samples_map, schema), set(at.values()))
        sample = {name: cells.get(row, ()) for name, row in at.items()}
    out = {}
    for place, name in enumerate(t.samples["sample_id"].astype(str)):
        rows = t.point_row[t.start[place]:t.start[place + 1]].tolist()
        out[name] = replace(no_cells(files), points={int(row): points.get(int(row), ()) for row in rows},
                            sample=sample.get(name, ()))
    return {name: origin for name, origin in out.items() if name in names}

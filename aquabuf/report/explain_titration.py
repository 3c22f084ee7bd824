"""Explain one titration of a run: the same points, options and methods again, and the same numbers."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.sample.chain_steps import Chain
from aquabuf.assess.titration.assess import assess_titrations
from aquabuf.assess.titration.chain import TitrationOrigin, refused_titration_chain, titration_chain
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.tables import titration_digits
from aquabuf.readings.origin import Cell, cells_of
from aquabuf.readings.schema import titration_quantities
from aquabuf.readings.table import as_map
from aquabuf.readings.titration.files import open_both
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.readings.titration.reader import iter_titrations
from aquabuf.readings.titration.result import Titrations
from aquabuf.report.explain_files import RunFiles, options_from
from aquabuf.report.explain_search import prove, unknown_sample

__all__ = ["amounts_of", "only_titrations", "titration_chains", "titration_origins"]


def titration_chains(folder: Path, record: Mapping[str, Any], sample_id: str, given: Path | None, row: int | None,
                     ) -> list[Chain]:
    """The chain of the titration of this name, or of what was refused of it."""
    found = RunFiles.of(folder, record, given, "points")
    options = options_from(record, TitrationOptions)
    points = found.find("points")
    assert points is not None  # `RunFiles.of` saw to it
    files = TitrationFiles(points, found.find("samples"), found.find("points_map"), found.find("samples_map"))
    names: dict[str, None] = {}
    ours: list[Titrations] = []
    refused: list[pd.DataFrame] = []
    for t in iter_titrations(files.points, files.samples, points_map=files.points_map, samples_map=files.samples_map):
        of_piece = t.samples["sample_id"].astype(str)
        names |= dict.fromkeys((*of_piece, *t.rejected["sample_id"].astype(str)))
        refused.append(t.rejected[t.rejected["sample_id"] == sample_id])
        places = np.flatnonzero((of_piece == sample_id).to_numpy())
        ours += [only_titrations(t, places)] if places.size else []
    reasons = pd.concat(refused)
    good = [t for t in ours if t.usable.any()]
    rows = [int(t.samples["row"].iloc[0]) for t in ours] or sorted({int(r) for r in reasons["row"]})[:1]
    if not rows or (row is not None and row not in rows):
        raise unknown_sample(sample_id, rows, names, points.name, row)
    if not good:
        return [refused_titration_chain(sample_id, rows[0], _no_cells(files), reasons)]
    t, = good
    origin = titration_origins(files, [sample_id], t)[sample_id]
    by_liter, by_kilogram = amounts_of(t)
    part = assess_titrations(t, options, by_liter=by_liter, by_kilogram=by_kilogram)
    prove(part.results, folder, titration_digits(options), record, "alkalinity.csv", skip=("figure",))
    return [titration_chain(part, 0, t, options, origin)]


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


def _no_cells(files: TitrationFiles) -> TitrationOrigin:
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
        out[name] = replace(_no_cells(files), points={int(row): points.get(int(row), ()) for row in rows},
                            sample=sample.get(name, ()))
    return {name: origin for name, origin in out.items() if name in names}

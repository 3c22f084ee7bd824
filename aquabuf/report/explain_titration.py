"""Explain one titration of a run: the same points, options and methods again, and the same numbers."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from aquabuf.assess.sample.chain_steps import Chain
from aquabuf.assess.titration.assess import assess_titrations
from aquabuf.assess.titration.chain import refused_titration_chain, titration_chain
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.tables import titration_digits
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.readings.titration.reader import iter_titrations
from aquabuf.readings.titration.result import Titrations
from aquabuf.report.chains import amounts_of, no_cells, only_titrations, titration_origins
from aquabuf.report.explain_files import RunFiles, options_from
from aquabuf.report.explain_search import prove, unknown_sample

__all__ = ["titration_chains"]


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
        return [refused_titration_chain(sample_id, rows[0], no_cells(files), reasons)]
    t, = good
    origin = titration_origins(files, [sample_id], t)[sample_id]
    by_liter, by_kilogram = amounts_of(t)
    part = assess_titrations(t, options, by_liter=by_liter, by_kilogram=by_kilogram)
    prove(part.results, folder, titration_digits(options), record, "alkalinity.csv", skip=("figure",))
    return [titration_chain(part, 0, t, options, origin)]

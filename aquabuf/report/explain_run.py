"""Explain one sample of a run: the same readings, options and rules again, and proof that the numbers are the same."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pandas as pd

from aquabuf.assess.limits import Limit
from aquabuf.assess.limits_file import read_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import Assessment, assess
from aquabuf.assess.sample.chain import Chain, chain_of, refused_chain
from aquabuf.assess.sample.chain_readings import Origin
from aquabuf.assess.sample.columns import limit_quantities
from aquabuf.assess.sample.titrated import Titrated
from aquabuf.errors import InputError
from aquabuf.readings.long.mapping import LongMap
from aquabuf.readings.origin import cells_of
from aquabuf.readings.result import Readings
from aquabuf.readings.source import load_map, open_any
from aquabuf.report.chains import only_rows
from aquabuf.report.explain import chain_text
from aquabuf.report.explain_files import RunFiles, options_from, read_record, titrations_of
from aquabuf.report.explain_lake import lake_chains
from aquabuf.report.explain_search import prove, unknown_sample
from aquabuf.report.explain_titration import titration_chains
from aquabuf.report.run import CHUNK_ROWS
from aquabuf.report.tables import result_digits

__all__ = ["chains_of_run", "explain"]


def explain(folder: Path, sample_id: str, *, given: Path | None = None, row: int | None = None) -> str:
    """The chains of a sample as text; see `chains_of_run`."""
    return "\n\n".join(chain_text(chain) for chain in chains_of_run(folder, sample_id, given=given, row=row))


def chains_of_run(folder: Path, sample_id: str, *, given: Path | None = None, row: int | None = None) -> list[Chain]:
    """The chain of every row of the readings that has this name, or of one of them.

    given : the readings, where they are neither beside the results nor in the current folder.

    Raises FileError or InputError where the run cannot be repeated as it was: a file that is missing or has changed, a
    name that no row has, numbers that are not those of results.csv.
    """
    record = read_record(folder)
    chains = COMMANDS.get(record["command"])
    if chains is None:
        raise InputError(f"{folder.name} holds results of `aquabuf {record['command']}`; only samples of "
                         f"{' and '.join(f'`aquabuf {name}`' for name in COMMANDS)} can be explained. Assess the "
                         f"readings and explain that.")
    return chains(folder, record, sample_id, given, row)


def sample_chains(folder: Path, record: Mapping[str, Any], sample_id: str, given: Path | None, row: int | None,
                  ) -> list[Chain]:
    """The same of a run over samples."""
    files = RunFiles.of(folder, record, given)
    options = options_from(record, Options)
    limits = read_limits(files.find("limits"), limit_quantities(options))
    path, map_path = files.find("readings"), files.find("map")
    assert path is not None  # `RunFiles.of` saw to it
    mapping = None if map_path is None else load_map(map_path)
    found = _search(open_any(path, mapping, CHUNK_ROWS), titrations_of(files), sample_id, options, limits)
    rows = found.rows if row is None else [r for r in found.rows if r == row]
    if not rows:
        raise unknown_sample(sample_id, found.rows, found.names, path.name, row)
    cells = cells_of(path, mapping, set(rows))
    in_parts = isinstance(mapping, LongMap) and bool(found.accepted)
    chains = []
    for one in rows:
        own = cells.get(one, ())
        if one in found.accepted:
            readings, part = found.accepted[one]
            prove(part.results, folder, result_digits(options), record)
            origin = Origin.of(path.name, own, readings.flags, readings.frame, readings.headers)
            chains.append(chain_of(part, readings, options, limits, origin))
        if one in found.refused:
            chains.append(refused_chain(sample_id, one, Origin(file=path.name, cells=own), found.refused[one],
                                        only_result=in_parts))
    return chains


# ---------------------------------------------------------------- the sample


@dataclass(slots=True)
class _Found:
    """Rows of one name: their readings and assessment where accepted, and the reasons where refused; all names seen."""

    sample_id: str
    accepted: dict[int, tuple[Readings, Assessment]] = field(default_factory=dict)
    refused: dict[int, pd.DataFrame] = field(default_factory=dict)
    names: dict[str, None] = field(default_factory=dict)

    @property
    def rows(self) -> list[int]:
        """Rows of that name in file order."""
        return sorted({*self.accepted, *self.refused})


def _search(pieces: Iterable[Readings], titrated: Titrated | None, sample_id: str, options: Options,
            limits: tuple[Limit, ...]) -> _Found:
    """Look through the whole table, since a name used again is refused where it stands the second time."""
    found = _Found(sample_id)
    for piece in pieces:
        found.names |= dict.fromkeys((*piece.frame["sample_id"], *piece.rejected["sample_id"].astype(str)))
        refused = [piece.rejected[piece.rejected["sample_id"] == sample_id]]
        hit = (piece.frame["sample_id"] == sample_id).to_numpy()
        if hit.any():
            only = only_rows(piece, hit)
            readings = only if titrated is None else titrated.put_into(only)
            part = assess(readings, options, limits)
            refused.append(part.rejected)
            if len(part.results):
                found.accepted[int(part.results["row"].iloc[0])] = (readings, part)
        for lines in refused:
            for row in dict.fromkeys(lines["row"].tolist()):
                reasons, before = lines[lines["row"] == row], found.refused.get(row)
                found.refused[row] = reasons if before is None else pd.concat([before, reasons])
    return found


COMMANDS = {"assess": sample_chains, "titration": titration_chains, "lake": lake_chains}

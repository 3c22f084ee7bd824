"""Explain one sample of a run: the same readings, options and rules again, and proof that the numbers are the same."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from difflib import get_close_matches
from pathlib import Path
from typing import Any

import pandas as pd

import aquabuf
from aquabuf.assess.limits import Limit
from aquabuf.assess.limits_file import read_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import Assessment, assess
from aquabuf.assess.sample.chain import Chain, chain_of, refused_chain
from aquabuf.assess.sample.chain_readings import Origin
from aquabuf.assess.sample.columns import limit_quantities
from aquabuf.assess.sample.titrated import Titrated, titrated_by
from aquabuf.errors import FileError, InputError
from aquabuf.readings.long.mapping import LongMap
from aquabuf.readings.origin import cells_of
from aquabuf.readings.result import Readings
from aquabuf.readings.source import load_map, open_any
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.explain import chain_text, plain
from aquabuf.report.explain_files import RunFiles, options_from, read_record
from aquabuf.report.run import CHUNK_ROWS
from aquabuf.report.tables import csv_text, result_digits, rounded

__all__ = ["chains_of_run", "explain"]

NEAR = 3              # names that are told where one is not known
SEARCHED = 20_000     # names that are compared letter by letter; beyond, only those with the same beginning
LAST_DIGIT = 1.001    # units of the last decimal that rounding may part


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
    if record["command"] != "assess":
        raise InputError(f"{folder.name} holds results of `aquabuf {record['command']}`; only samples of "
                         f"`aquabuf assess` can be explained. Assess the readings and explain that.")
    files = RunFiles.of(folder, record, given)
    options = options_from(record, Options)
    limits = read_limits(files.find("limits"), limit_quantities(options))
    path, map_path = files.find("readings"), files.find("map")
    assert path is not None  # `RunFiles.of` saw to it
    mapping = None if map_path is None else load_map(map_path)
    found = _search(open_any(path, mapping, CHUNK_ROWS), _titrations(files), sample_id, options, limits)
    rows = found.rows if row is None else [r for r in found.rows if r == row]
    if not rows:
        raise _unknown(found, sample_id, path.name, row)
    cells = cells_of(path, mapping, set(rows))
    in_parts = isinstance(mapping, LongMap) and bool(found.accepted)
    chains = []
    for one in rows:
        own = cells.get(one, ())
        if one in found.accepted:
            readings, part = found.accepted[one]
            _prove(part, folder, options, str(record.get("version", "")))
            origin = Origin.of(path.name, own, readings.flags, readings.frame, readings.headers)
            chains.append(chain_of(part, readings, options, limits, origin))
        if one in found.refused:
            chains.append(refused_chain(sample_id, one, Origin(file=path.name, cells=own), found.refused[one],
                                        only_result=in_parts))
    return chains


def _titrations(files: RunFiles) -> Titrated | None:
    points = files.find("titration points")
    if points is None:
        return None
    return titrated_by(TitrationFiles(points, files.find("titration samples"), files.find("titration points_map"),
                                      files.find("titration samples_map")))


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
            only = _only(piece, hit)
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


def _only(piece: Readings, hit: Any) -> Readings:
    """The piece with one sample left and what was noticed about it."""
    frame = piece.frame[hit].reset_index(drop=True)
    flags = piece.flags[piece.flags["row"].isin(frame["row"])].reset_index(drop=True)
    return replace(piece, frame=frame, flags=flags, rejected=piece.rejected.iloc[:0])


def _unknown(found: _Found, sample_id: str, file: str, row: int | None) -> InputError:
    if found.rows:
        return InputError(f"{plain(sample_id)!r} stands in row {_listed(found.rows)} of {file}; found row {row}. "
                          f"Correct --row, or leave it out for all of them.")
    near = [repr(plain(name)) for name in _nearest(sample_id, found.names)]
    hint = f"The nearest names are {', '.join(near)}." if near else "No name is near."
    return InputError(f"no row of {file} has the sample_id {plain(sample_id)!r}. {hint} Correct the name.")


def _listed(rows: list[int]) -> str:
    return ", ".join(map(str, rows))


def _nearest(wanted: str, names: Iterable[str]) -> list[str]:
    """Names that resemble the one wanted, without regard to capitals."""
    by_plain: dict[str, str] = {}
    for name in names:
        by_plain.setdefault(name.casefold().strip(), name)
    plain_names = list(filter(None, by_plain))
    key = wanted.casefold().strip()
    if len(plain_names) > SEARCHED:
        plain_names = [name for name in plain_names if name[:3] == key[:3] or key in name][:SEARCHED]
    close = get_close_matches(key, plain_names, n=NEAR, cutoff=0.5)
    close += [name for name in plain_names if key and key in name and name not in close]
    return [by_plain[name] for name in close[:NEAR]]


# ---------------------------------------------------------------- the proof


def _prove(part: Assessment, folder: Path, options: Options, version: str) -> None:
    """Compare every number with results.csv. Raises FileError where one of them is another."""
    digits = result_digits(options)
    text = csv_text(rounded(part.results, digits), header=True)
    now = next(csv.DictReader(io.StringIO(text, newline="")))
    then = _written_row(folder, now["sample_id"], now["row"])
    for name, value in now.items():
        if not _same(value, then.get(name), digits.get(name)):
            other = f" The run was made by version {version}, this is {aquabuf.__version__}." \
                if version != aquabuf.__version__ else ""
            raise FileError(f"results.csv in {folder.name} has {name} = {then.get(name)!r} for "
                            f"{plain(now['sample_id'])!r}; worked out again it is {value!r}.{other} Run the assessment "
                            f"again with --force and explain that.")


def _written_row(folder: Path, sample_id: str, row: str) -> Mapping[str, str]:
    """The line of results.csv of one sample."""
    path = folder / "results.csv"
    try:
        with path.open(encoding="utf-8", newline="") as stream:
            for line in csv.DictReader(stream):
                if line.get("sample_id") == sample_id and line.get("row") == row:
                    return line
    except OSError:
        raise FileError(f"{folder.name} has no results.csv that can be read. Run the assessment again with "
                        f"--force.") from None
    raise FileError(f"results.csv in {folder.name} has no line for {plain(sample_id)!r} of row {row}, which the "
                    f"readings have. Run the assessment again with --force.")


def _same(now: str, then: str | None, digits: int | None) -> bool:
    """Whether two cells are alike, but for a rounding of the last digit."""
    if now == then or then is None:
        return now == then
    try:
        a, b = float(now), float(then)
    except ValueError:
        return False
    return abs(a - b) <= (LAST_DIGIT * 10.0**-digits if digits is not None else 2e-5 * abs(a))


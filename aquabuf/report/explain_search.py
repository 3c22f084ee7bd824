"""What every explanation needs: names that are near one that is not known, and proof that the numbers are the same."""

from __future__ import annotations

import csv
import io
from collections.abc import Collection, Iterable, Mapping
from difflib import get_close_matches
from pathlib import Path
from typing import Any

import pandas as pd

import aquabuf
from aquabuf.errors import FileError, InputError
from aquabuf.report.explain import plain
from aquabuf.report.tables import csv_text, rounded

__all__ = ["prove", "unknown_sample"]

NEAR = 3              # names that are told where one is not known
SEARCHED = 20_000     # names that are compared letter by letter; beyond, only those with the same beginning
LAST_DIGIT = 1.001    # units of the last decimal that rounding may part


# ---------------------------------------------------------------- names


def unknown_sample(sample_id: str, rows: list[int], names: Iterable[str], file: str, row: int | None) -> InputError:
    """The error for a name that no row has, or a row that is none of this name."""
    if rows:
        return InputError(f"{plain(sample_id)!r} stands in row {_listed(rows)} of {file}; found row {row}. "
                          f"Correct --row, or leave it out for all of them.")
    near = [repr(plain(name)) for name in _nearest(sample_id, names)]
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


def prove(results: pd.DataFrame, folder: Path, digits: Mapping[str, int], record: Mapping[str, Any],
          name: str = "results.csv", skip: Collection[str] = ()) -> None:
    """Compare every number of the first row with the table of the run. Raises FileError where one of them is another.

    skip : columns that the run fills in later.
    """
    text = csv_text(rounded(results.iloc[:1], digits), header=True)
    now = next(csv.DictReader(io.StringIO(text, newline="")))
    then = _written_row(folder, name, now["sample_id"], now["row"])
    version = str(record.get("version", ""))
    for column, value in now.items():
        if column not in skip and not _same(value, then.get(column), digits.get(column)):
            other = f" The run was made by version {version}, this is {aquabuf.__version__}." \
                if version != aquabuf.__version__ else ""
            raise FileError(f"{name} in {folder.name} has {column} = {then.get(column)!r} for "
                            f"{plain(now['sample_id'])!r}; worked out again it is {value!r}.{other} Run the assessment "
                            f"again with --force and explain that.")


def _written_row(folder: Path, name: str, sample_id: str, row: str) -> Mapping[str, str]:
    """The line of a table of the run of one sample."""
    path = folder / name
    try:
        with path.open(encoding="utf-8", newline="") as stream:
            for line in csv.DictReader(stream):
                if line.get("sample_id") == sample_id and line.get("row") == row:
                    return line
    except OSError:
        raise FileError(f"{folder.name} has no {name} that can be read. Run the assessment again with "
                        f"--force.") from None
    raise FileError(f"{name} in {folder.name} has no line for {plain(sample_id)!r} of row {row}, which the "
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


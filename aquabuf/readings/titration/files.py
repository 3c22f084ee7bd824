"""Both files of titrations, opened: their columns understood and each in the right file, the samples read."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from aquabuf.errors import HeaderError, InputError
from aquabuf.readings.mapping import TableMap
from aquabuf.readings.result import UserAcid
from aquabuf.readings.schema import titration_quantities
from aquabuf.readings.table import Table, as_map, open_table
from aquabuf.readings.titration.piece import POINT_NAMES
from aquabuf.readings.titration.points import ADDED, READ
from aquabuf.readings.titration.refusal import Labels
from aquabuf.readings.titration.samples import Samples, read_samples

__all__ = ["Files", "MapOf", "open_both"]

MapOf = TableMap | str | Path | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Files:
    """Both files, opened: points to be streamed, samples read."""

    points: Table
    labels: Labels
    samples: Samples | None
    notes: tuple[str, ...]
    headers: Mapping[str, tuple[str, str]]
    acids: Mapping[str, UserAcid]


def _open(path: str | Path, mapping: MapOf) -> Table:
    """A file of titrations; what is wrong with its header says which file it is."""
    table_map = as_map(mapping, titration_quantities())
    try:
        return open_table(path, table_map)
    except HeaderError as error:
        raise HeaderError(f"{Path(path).name}: {error}") from None


def _check_point_columns(labels: Labels) -> None:
    """HeaderError when the file of points has no column of titrant or none of readings."""
    for what, names in (("the titrant added", ADDED.values()), ("the pH or potential read", READ.values())):
        if not any(name in labels for name in names):
            raise HeaderError(
                f"{labels.file}: no column gives {what}, which each point needs; one of {', '.join(names)} is "
                "required. Rename the column, or give its meaning in a map file."
            )


def _check_sample_columns(labels: Labels) -> None:
    """HeaderError when a column of points stands in the file of samples."""
    wrong = [repr(column.header) for name, column in labels.columns.items() if name in POINT_NAMES]
    if wrong:
        raise HeaderError(
            f"{labels.file}: a file of samples has a row per sample, and {', '.join(wrong)} belongs to single points. "
            'Move it to the file of points, or set it to "ignore" in a map file. Are the two files exchanged?'
        )


def _check_together(points: Labels, samples: Labels) -> None:
    """HeaderError when the files give one column per liter and per kilogram."""
    for name in points.columns:
        if name in samples and (name in points.per_kg) != (name in samples.per_kg):
            raise HeaderError(
                f"{points.header(name)!r} in {points.file} and {samples.header(name)!r} in {samples.file} both give "
                f"{name}, one per kilogram and one per liter. Remove one of them."
            )


def _acids_of(tables: list[Table]) -> dict[str, UserAcid]:
    """Acids of all map files; InputError when two define one acid in different ways."""
    found: dict[str, UserAcid] = {}
    for table in tables:
        for name, acid in table.table_map.acids.items():
            if found.setdefault(name, acid) != acid:
                raise InputError(
                    f"[acids.{acid.name}] differs between the map files of points and samples. Make both the same."
                )
    return found


def open_both(points: str | Path, samples: str | Path | None, points_map: MapOf, samples_map: MapOf) -> Files:
    """Open the files and check that their columns are in the right one."""
    tables = [_open(points, points_map)] + ([] if samples is None else [_open(samples, samples_map)])
    labels = [Labels(table) for table in tables]
    _check_point_columns(labels[0])
    if samples is not None:
        _check_sample_columns(labels[1])
        _check_together(*labels)
    headers: dict[str, tuple[str, str]] = {}
    for table in reversed(tables):
        headers |= table.plan.headers()
    return Files(
        points=tables[0],
        labels=labels[0],
        samples=read_samples(tables[1]) if samples is not None else None,
        notes=tuple(f"{table.path.name}: {note}" for table in tables for note in table.notes),
        headers=headers,
        acids=_acids_of(tables),
    )

"""Read a table of readings, wide or long: the map tells which."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from aquabuf.errors import FileError
from aquabuf.readings.long.mapping import LongMap, is_long, read_long_map
from aquabuf.readings.long.reader import iter_long_readings
from aquabuf.readings.long.shipped import shipped_map, shipped_names
from aquabuf.readings.mapping import TableMap, _load, read_map
from aquabuf.readings.reader import CHUNK_ROWS, iter_readings
from aquabuf.readings.result import Readings

__all__ = ["load_map", "open_any", "resolve_map"]


def resolve_map(text_or_path: str | Path) -> Path:
    """The map file that is meant: a shipped map by its name ("wqx"), else a file of the user's own.

    A file that happens to have the name of a shipped map is meant by "./wqx".

    Raises
    ------
    FileError
        Neither a shipped map nor a file.
    """
    if str(text_or_path) in shipped_names():
        return shipped_map(str(text_or_path))
    path = Path(text_or_path)
    if not path.exists():
        shipped = ", ".join(shipped_names())
        raise FileError(f"{text_or_path}: no such map file. Check the name and the folder; shipped maps are {shipped}.")
    return path


def load_map(text_or_path: str | Path) -> TableMap | LongMap:
    """Read and check a map, of whichever kind it is.

    Raises
    ------
    FileError, HeaderError, InputError
        No such map, or a key or value in it that means nothing.
    """
    path = resolve_map(text_or_path)
    return read_long_map(path) if is_long(_load(path)) else read_map(path)


def open_any(
    path: str | Path, mapping: TableMap | LongMap | str | Path | None = None, chunk_rows: int = CHUNK_ROWS
) -> Iterator[Readings]:
    """Read a table piece by piece, `chunk_rows` samples at a time; a long table where the map says so.

    Parameters
    ----------
    path
        CSV table with a header line.
    mapping
        A map, the path of one, or the name of a shipped map; none where a wide table explains itself.
    chunk_rows
        Samples per piece, 1 or more.

    Raises
    ------
    FileError, HeaderError, InputError
        At once for the map; for the table when the first piece is asked for.
    """
    table_map = load_map(mapping) if isinstance(mapping, str | Path) else mapping
    if isinstance(table_map, LongMap):
        return iter_long_readings(path, table_map, chunk_rows)
    return iter_readings(path, table_map, chunk_rows)

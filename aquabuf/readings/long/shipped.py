"""The maps of long tables that come with the program."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import aquabuf.tables
from aquabuf.errors import InputError

__all__ = ["shipped_map", "shipped_names"]

_PREFIX = "long_"


@cache
def _files() -> dict[str, Path]:
    folder = Path(aquabuf.tables.__file__).parent / "data"
    return {path.stem.removeprefix(_PREFIX): path for path in sorted(folder.glob(f"{_PREFIX}*.toml"))}


def shipped_names() -> list[str]:
    """Names of the shipped maps, such as "wqx"."""
    return list(_files())


def shipped_map(name: str) -> Path:
    """The file of a shipped map; InputError when there is none of this name."""
    if name not in _files():
        raise InputError(f"no shipped map is named {name!r}. Use one of: {', '.join(shipped_names())}.")
    return _files()[name]

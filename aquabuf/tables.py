"""The shipped tables of facts, read once."""

from __future__ import annotations

import csv
from functools import cache
from pathlib import Path

__all__ = ["read_table"]


@cache
def read_table(name: str) -> tuple[dict[str, str], ...]:
    """Rows of the shipped table `name` (without ending) as dictionaries of strings, in file order."""
    text = (Path(__file__).parent / "data" / f"{name}.csv").read_text(encoding="utf-8")
    return tuple(csv.DictReader(text.splitlines()))

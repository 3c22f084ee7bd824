"""The columns of the results as text."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable

from aquabuf.tables import read_table

__all__ = ["result_columns_text", "titration_columns_text"]

WIDTH = 100
UNIT_WORDS = {"eq": "µeq/L, or µmol/kg for samples by mass", "mol": "µmol/L, or µmol/kg for samples by mass", "": "",
              "-": ""}


def result_columns_text() -> str:
    """One paragraph per column of results.csv: name, unit, interval, meaning."""
    head = "Columns of results.csv (* is a pH such as 6_0; those marked ± also have _low and _high, the interval)"
    rows = ((r["name"], "±" if r["interval"] == "yes" else " ", r["unit"], r["meaning"]) for r in read_table("results"))
    return _listed(head, rows)


def titration_columns_text() -> str:
    """One paragraph per column of alkalinity.csv: name, unit, meaning."""
    head = ("Columns of alkalinity.csv (* is a pH such as 4_5; {eq} is ueq_l, or umol_kg for samples by mass; {mol} is "
            "umol_l or umol_kg)")
    rows = ((r["name"], "", r["unit"], r["meaning"]) for r in read_table("titration_results"))
    return _listed(textwrap.fill(head, WIDTH), rows)


def _listed(head: str, rows: Iterable[tuple[str, str, str, str]]) -> str:
    rows = list(rows)
    widest = max(len(name) + len(mark) for name, mark, _, _ in rows)
    lines = [head]
    for name, mark, unit, meaning in rows:
        unit = UNIT_WORDS.get(unit, unit)
        first = f"{name.ljust(widest - len(mark))} {mark} " if mark else f"{name.ljust(widest)} "
        lines.append(textwrap.fill(f"{meaning}{f' [{unit}]' if unit else ''}", WIDTH, initial_indent=first,
                                   subsequent_indent=" " * len(first)))
    return "\n".join(lines)

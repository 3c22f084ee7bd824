"""The columns of the results as text."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Iterator

from aquabuf.tables import read_table

__all__ = ["lake_columns_text", "result_columns_text", "titration_columns_text"]

WIDTH = 100
MARKS = "(* is a pH such as 6_0; those marked ± also have _low and _high, the interval)"
UNIT_WORDS = {"eq": "µeq/L, or µmol/kg for samples by mass", "mol": "µmol/L, or µmol/kg for samples by mass", "": "",
              "-": ""}


def result_columns_text() -> str:
    """One paragraph per column of results.csv: name, unit, interval, meaning."""
    return _listed(f"Columns of results.csv {MARKS}", _with_intervals("results"))


def lake_columns_text() -> str:
    """The same for results.csv of lakes."""
    return _listed(f"Columns of results.csv of `aquabuf lake` {MARKS}", _with_intervals("lake_results"))


def titration_columns_text() -> str:
    """One paragraph per column of alkalinity.csv: name, unit, meaning."""
    head = ("Columns of alkalinity.csv (* is a pH such as 4_5; {eq} is ueq_l, or umol_kg for samples by mass; {mol} is "
            "umol_l or umol_kg)")
    rows = ((r["name"], "", r["unit"], r["meaning"]) for r in read_table("titration_results"))
    return _listed(head, rows)


def _with_intervals(table: str) -> Iterator[tuple[str, str, str, str]]:
    return ((r["name"], "±" if r["interval"] == "yes" else " ", r["unit"], r["meaning"]) for r in read_table(table))


def _listed(head: str, rows: Iterable[tuple[str, str, str, str]]) -> str:
    rows = list(rows)
    widest = max(len(name) + len(mark) for name, mark, _, _ in rows)
    lines = [textwrap.fill(head, WIDTH)]
    for name, mark, unit, meaning in rows:
        unit = UNIT_WORDS.get(unit, unit)
        first = f"{name.ljust(widest - len(mark))} {mark} " if mark else f"{name.ljust(widest)} "
        lines.append(textwrap.fill(f"{meaning}{f' [{unit}]' if unit else ''}", WIDTH, initial_indent=first,
                                   subsequent_indent=" " * len(first)))
    return "\n".join(lines)

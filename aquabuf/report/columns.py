"""The columns of results.csv as text."""

from __future__ import annotations

import textwrap

from aquabuf.tables import read_table

__all__ = ["result_columns_text"]

WIDTH = 100


def result_columns_text() -> str:
    """One paragraph per result column: name, unit, interval, meaning."""
    rows = read_table("results")
    widest = max(len(r["name"]) for r in rows)
    lines = ["Columns of results.csv (* is a pH such as 6_0; those marked ± also have _low and _high, the interval)"]
    for r in rows:
        unit = f" [{r['unit']}]" if r["unit"] not in ("", "-") else ""
        mark = "±" if r["interval"] == "yes" else " "
        lines.append(textwrap.fill(f"{r['meaning']}{unit}", WIDTH, initial_indent=f"{r['name'].ljust(widest)} {mark} ",
                                   subsequent_indent=" " * (widest + 3)))
    return "\n".join(lines)

"""What became of each row."""

from __future__ import annotations

__all__ = ["FLAGGED", "IMPOSSIBLE", "NOT_FINITE", "OUT_OF_RANGE", "SOLVED", "STATUS_WORDS"]

SOLVED = 0
FLAGGED = 1
IMPOSSIBLE = -1
OUT_OF_RANGE = -2
NOT_FINITE = -3

STATUS_WORDS = {
    SOLVED: "solved",
    FLAGGED: "solved outside the range of a constant",
    IMPOSSIBLE: "no water has these values",
    OUT_OF_RANGE: "temperature, salinity or ionic strength far outside the range of the constants",
    NOT_FINITE: "a value is missing or not a number",
}

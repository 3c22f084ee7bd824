"""The ANC limit: a number, a shipped name, or the one that varies with the critical load."""

from __future__ import annotations

from dataclasses import dataclass

from aquabuf.assess.lake.critical_choice import MOST_LIMIT_EQ_L, limit_words
from aquabuf.errors import InputError
from aquabuf.tables import read_table

__all__ = ["AncLimit", "find_anc_limit"]

MICRO = 1e6


@dataclass(frozen=True, slots=True, kw_only=True)
class AncLimit:
    """One limit; `value_eq_l` is nan where it varies. [eq/L]"""

    name: str
    value_eq_l: float

    @property
    def is_variable(self) -> bool:
        """Whether the limit rises with the critical load."""
        return self.value_eq_l != self.value_eq_l

    def in_words(self) -> str:
        """The limit with what is known of it."""
        return limit_words(None if self.is_variable else self.value_eq_l)


def find_anc_limit(text: str) -> AncLimit:
    """The limit that an option names: µeq/L, or a name of the shipped table. Raises InputError for anything else."""
    rows = {r["name"]: r["limit_ueq_l"] for r in read_table("anc_limits")}
    given = rows.get(text, text)
    try:
        value = float(given or "nan") / MICRO
    except ValueError:
        value = 2.0 * MOST_LIMIT_EQ_L
    if not abs(value) <= MOST_LIMIT_EQ_L and text not in rows:
        raise InputError(f"the ANC limit must be a number of µeq/L within {MICRO * MOST_LIMIT_EQ_L:g} of zero or one "
                         f"of "
                         f"{', '.join(rows)}; found {text!r}. Write for example 20.")
    return AncLimit(name=text, value_eq_l=value)

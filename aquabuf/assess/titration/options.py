"""What the assessment of titrations may be told, with its defaults."""

from __future__ import annotations

from dataclasses import dataclass

from aquabuf.errors import InputError

__all__ = ["ALWAYS_END_POINT", "CONVERSIONS", "END_POINTS", "TitrationOptions", "ph_digits"]

END_POINTS = (8.3, 5.4, 4.9, 4.6, 4.5, 4.3)
ALWAYS_END_POINT = 4.5  # the column that others rely on
CONVERSIONS = ("none", "proton_balance", "henriksen_1982", "charge_balance")


def ph_digits(ph: float) -> str:
    """A pH as part of a column name, such as 4_5."""
    return (f"{ph:g}" if ph % 1.0 else f"{ph:.1f}").replace(".", "_")


@dataclass(frozen=True, slots=True, kw_only=True)
class TitrationOptions:
    """Choices of one run over titrations; raises InputError for values that make no sense.

    end_points : meter pH values that acid titrations are read at.
    weak_acid : seek the total and pK of one more weak acid in the fit of the curve.
    conversion : definition to bring the result to beside its own, one of CONVERSIONS; nothing is converted unasked.
    """

    end_points: tuple[float, ...] = END_POINTS
    weak_acid: bool = False
    conversion: str = "none"

    def __post_init__(self) -> None:
        points = tuple(dict.fromkeys(round(ph, 2) for ph in (*self.end_points, ALWAYS_END_POINT)))
        for ph in points:
            if not 2.5 <= ph <= 11.0:
                raise InputError(f"an end point must be from pH 2.5 to 11; found {ph:g}. Correct the list.")
        object.__setattr__(self, "end_points", tuple(sorted(points, reverse=True)))
        if self.conversion not in CONVERSIONS:
            raise InputError(f"a conversion must be one of {', '.join(CONVERSIONS)}; found {self.conversion!r}. "
                             f"Leave it out to convert nothing.")

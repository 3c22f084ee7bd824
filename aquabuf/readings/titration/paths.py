"""The files that a run over titrations reads."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

__all__ = ["TitrationFiles"]


@dataclass(frozen=True, slots=True)
class TitrationFiles:
    """Points, and, where given, the table of samples and the map file of each."""

    points: Path
    samples: Path | None = None
    points_map: Path | None = None
    samples_map: Path | None = None

    def given(self) -> dict[str, Path]:
        """The files there are, by their part in the run."""
        parts = {"points": self.points, "samples": self.samples, "points_map": self.points_map,
                 "samples_map": self.samples_map}
        return {name: path for name, path in parts.items() if path is not None}

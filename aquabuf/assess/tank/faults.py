"""Failures that a simulated plant has to live through."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.errors import InputError

__all__ = ["FAULTS", "Fault", "FaultMasks"]

FAULTS = {
    "probe stuck": "the probe keeps showing what it showed when the fault began",
    "base pump full on": "the base feeder delivers all it can, whatever is asked",
    "acid pump full on": "the acid feeder delivers all it can, whatever is asked",
    "base out": "the base feeder delivers nothing",
    "acid out": "the acid feeder delivers nothing",
    "buffer lost": "what buffers the inflow is gone; its base stays",
}


@dataclass(frozen=True, slots=True)
class Fault:
    """A failure of one tank: what, from when, how long [s], and in which case (None: in all)."""

    kind: str
    start_s: float
    length_s: float = math.inf
    case: int | None = None

    def __post_init__(self) -> None:
        if self.kind not in FAULTS:
            raise InputError(f"a fault is one of {', '.join(FAULTS)}; found '{self.kind}'. Choose one.")
        if not (self.start_s >= 0.0 and self.length_s > 0.0):
            raise InputError(f"a fault starts at 0 s or later and lasts; found start {self.start_s} s and length "
                             f"{self.length_s} s. Correct it.")


class FaultMasks:
    """Which faults are on at a moment; `stuck` (S, N), `full` and `out` (2, S, N) with base first, `buffer_lost` (N,).

    N : number of cases, 1 where no fault is of one case alone.
    """

    def __init__(self, faults: Sequence[Sequence[Fault]], cases: int):
        self._faults = [(s, f) for s, some in enumerate(faults) for f in some]
        for s, f in self._faults:
            if f.kind == "buffer lost" and s > 0:
                raise InputError(f"the fault 'buffer lost' belongs to the inflow of the first tank; found it at tank "
                                 f"{s + 1}. Move it to the first.")
            if f.case is not None and not 0 <= f.case < cases:
                raise InputError(f"a fault of one case needs a case from 0 to {cases - 1}; found {f.case}. Correct it.")
        n, wide = len(faults), cases if any(f.case is not None for _, f in self._faults) else 1
        self.stuck: NDArray[np.bool_] = np.zeros((n, wide), dtype=bool)
        self.full: NDArray[np.bool_] = np.zeros((2, n, wide), dtype=bool)
        self.out: NDArray[np.bool_] = np.zeros((2, n, wide), dtype=bool)
        self.buffer_lost: NDArray[np.bool_] = np.zeros(wide, dtype=bool)

    @property
    def edges_s(self) -> list[float]:
        """Times at which something begins or ends."""
        return sorted({t for _, f in self._faults for t in (f.start_s, f.start_s + f.length_s) if math.isfinite(t)})

    def set(self, time_s: float) -> None:
        """Set the masks to a moment."""
        self.stuck[:], self.full[:], self.out[:], self.buffer_lost[:] = False, False, False, False
        for s, f in self._faults:
            if not f.start_s <= time_s < f.start_s + f.length_s:
                continue
            case = slice(None) if f.case is None else f.case
            if f.kind == "probe stuck":
                self.stuck[s, case] = True
            elif f.kind == "buffer lost":
                self.buffer_lost[case] = True
            else:
                side = 0 if f.kind.startswith("base") else 1
                (self.full if f.kind.endswith("full on") else self.out)[side, s, case] = True

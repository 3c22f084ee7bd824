"""What every step of the works is, takes and returns."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Protocol, runtime_checkable

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import Stream

__all__ = ["Dosed", "Finding", "Held", "Step", "StepOutcome"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Dosed:
    """A product and how much of its active substance went in. [mol/L]"""

    product: Stocked
    mol_l: Array


@dataclass(frozen=True, slots=True, eq=False)
class Finding:
    """Something that a person must know of a step: words, where it holds, the rule behind it, and what to do.

    severity : "stop" (a guard rail), "warning", or "note".
    """

    severity: str
    words: str
    where: NDArray[np.bool_]
    rule: str = ""
    next_step: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class StepOutcome:
    """What leaves a step.

    figures : values of the step alone by name with their unit in the name, such as ammonium_oxidized_mg_l_n.
    """

    stream: Stream
    doses: tuple[Dosed, ...] = ()
    findings: tuple[Finding, ...] = ()
    figures: Mapping[str, Array] = field(default_factory=dict)


class Step(Protocol):
    """A step with its settings in house units."""

    @property
    def name(self) -> str:
        """How the plan calls it."""
        ...

    @property
    def kind(self) -> str:
        """The word after `do` in a plan."""
        ...

    def run(self, stream: Stream) -> StepOutcome:
        """What the step does to the water."""
        ...


@runtime_checkable
class Held(Protocol):
    """A step that doses and can go on with given doses, whatever water comes."""

    def held(self, doses: tuple[Dosed, ...]) -> Step:
        """The step with these doses in place of those it would find."""
        ...

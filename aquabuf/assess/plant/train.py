"""The works as a row of steps: the water after each, and the same works with its doses held while the water changes."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.assess.plant.steps.base import Dosed, Finding, Held, Step, StepOutcome
from aquabuf.assess.plant.stream import Stream

__all__ = ["Passed", "Train", "held_steps", "run_train"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Passed:
    """One step of a run: the step, the water that came in, and what left."""

    step: Step
    before: Stream
    outcome: StepOutcome

    @property
    def after(self) -> Stream:
        """Water that leaves the step."""
        return self.outcome.stream


@dataclass(frozen=True, slots=True, eq=False)
class Train:
    """A run of all steps."""

    raw: Stream
    passed: tuple[Passed, ...]

    @property
    def final(self) -> Stream:
        """Water that leaves the last step."""
        return self.passed[-1].after if self.passed else self.raw

    def findings(self, severity: str | None = None) -> list[tuple[str, Finding]]:
        """Findings of all steps with the name of the step; of one severity if asked."""
        return [(p.step.name, f) for p in self.passed for f in p.outcome.findings
                if severity is None or f.severity == severity]

    def doses(self) -> list[tuple[str, Dosed]]:
        """Every dose with the name of its step, in order."""
        return [(p.step.name, d) for p in self.passed for d in p.outcome.doses]

    def feasible(self) -> NDArray[np.bool_]:
        """Rows in which every dose was found."""
        found = [np.isfinite(d.mol_l) for _, d in self.doses()]
        return np.logical_and.reduce([np.ones(self.raw.rows, dtype=bool), *found])


def run_train(raw: Stream, steps: Sequence[Step]) -> Train:
    """Send `raw` through the steps."""
    passed: list[Passed] = []
    stream = raw
    for step in steps:
        outcome = step.run(stream)
        passed.append(Passed(step, stream, outcome))
        stream = outcome.stream
    return Train(raw, tuple(passed))


def held_steps(train: Train, factors: Mapping[str, Array | float] | None = None) -> list[Step]:
    """The steps with the doses that the run found, as feeds go on when the water or a pump drifts.

    factors : on the doses of a product, by its name in the store; 1.2 is a pump that gives a fifth too much.
    """
    factors = factors or {}
    out: list[Step] = []
    for p in train.passed:
        doses = tuple(Dosed(d.product, d.mol_l * factors.get(d.product.name, 1.0)) for d in p.outcome.doses)
        out.append(p.step.held(doses) if isinstance(p.step, Held) else p.step)
    return out

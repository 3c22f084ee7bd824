"""Rules that judge the water: limits by use, replaceable by the plan's own; cautions by product and step."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from aquabuf.assess.limits import Limit, shipped_limits
from aquabuf.assess.limits_file import limits_of
from aquabuf.assess.plant.hold import buffer_uses
from aquabuf.assess.plant.plan import Plan
from aquabuf.assess.plant.quantities import in_unit, measured, plant_quantities
from aquabuf.assess.plant.stream import Stream
from aquabuf.assess.plant.train import Train
from aquabuf.tables import read_table

__all__ = ["LIMITS_TABLE", "Judged", "cautions_of", "judged_by", "plan_limits"]

LIMITS_TABLE = "plant_limits"
ALWAYS = "any"


@dataclass(frozen=True, slots=True)
class Judged:
    """A rule and the value it was held against, in the rule's unit; broken where it warns."""

    limit: Limit
    value: float
    broken: bool


def plan_limits(plan: Plan) -> tuple[Limit, ...]:
    """Shipped limits of the plan's use, replaced or joined by its own. Raises InputError for a faulty own limit."""
    units = {q.column: q.unit for q in plant_quantities().values()}
    found = limits_of(plan.file, {"limits": dict(plan.limits)}, units, shipped_limits(LIMITS_TABLE),
                      kinds=buffer_uses(), where="steps.csv")
    return tuple(x for x in found if x.applies(plan.use, "fresh"))


def judged_by(stream: Stream, limits: Sequence[Limit]) -> tuple[Judged, ...]:
    """Every limit against the first row of the water; of the limits that share a group only the first broken counts."""
    quantity = {q.column: q for q in plant_quantities().values()}
    values = measured(stream, [quantity[x.quantity].name for x in limits])
    out: list[Judged] = []
    broken: set[str] = set()
    for limit in limits:
        q = quantity[limit.quantity]
        value = float(in_unit(q, values[q.name])[0])
        fails = bool(limit.met(np.array([value]))[0]) and limit.group not in broken
        if fails:
            broken.add(limit.group)
        out.append(Judged(limit, value, fails))
    return tuple(out)


def cautions_of(train: Train, kinds: Iterable[str]) -> tuple[str, ...]:
    """Cautions that belong to the products and kinds of steps of a run, in the order of the table."""
    hangs = {ALWAYS, *kinds} | {group for _, d in train.doses() for group in d.product.product.groups}
    return tuple(row["words"] for row in read_table("plant_cautions") if row["hangs_on"] in hangs)

"""Words for what an operator sets: the rate in both units, the setting, how far the dose may go."""

from __future__ import annotations

import numpy as np

from aquabuf.assess.plant.answer import Answer
from aquabuf.assess.plant.feed import metric_and_us, shown
from aquabuf.assess.plant.feed_lines import FeedLine

__all__ = ["NO_MACHINE", "OUT_OF_REACH", "control_words", "rate_words", "setting_words"]

OUT_OF_REACH, NO_MACHINE = "OUT OF REACH", "no pump or feeder in the plan"


def rate_words(line: FeedLine) -> tuple[str, str]:
    """What is fed in metric and US units: volume of what a pump moves, else mass."""
    if line.rate.moved:
        return metric_and_us(float(line.rate.l_h[0]), "L/h")
    return metric_and_us(float(line.rate.product_kg_h[0]), "kg/h")


def setting_words(line: FeedLine, *, bed: bool = False) -> tuple[str, str]:
    """What to set in large letters, and what must be known of it; of a `bed` there is nothing to set."""
    if bed:
        return "bed", "keep it filled"
    if not np.isfinite(line.mol_l[0]):
        return "none", line.setting_words()
    if line.mol_l[0] == 0.0:
        return "OFF", "nothing is needed"
    if line.setting is None:
        return "not known", NO_MACHINE
    if line.setting.status[0] != "set":
        return OUT_OF_REACH, f"the rate is {line.setting.status[0]} for it"
    pump = line.spec.pump if line.rate.moved else None
    knob = pump.sets if pump else "setting"
    return f"{knob} {shown(float(line.setting.setting_pct[0]))} %", line.setting.reach.owner


def control_words(answer: Answer, line: FeedLine) -> str:
    """How far the dose of a line may go while every window is kept, in few words."""
    for r in answer.ranges:
        if r.product.name == line.product.name and np.isfinite(r.least[0]):
            low, high = (shown(line.mg_l_product * float(end[0])) for end in (r.least, r.most))
            several = sum(d.product.name == r.product.name for _, d in answer.train.doses()) > 1
            also = ", its other feeds alike" if several else ""
            if r.least[0] == 0.0:
                return f"at most {high} mg/L{also}" if np.isfinite(r.most[0]) else ""
            return (f"keep {low} mg/L or more" if np.isinf(r.most[0]) else f"keep {low} to {high} mg/L") + also
    return ""

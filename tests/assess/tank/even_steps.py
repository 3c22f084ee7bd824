"""Courses in equal steps, and the tank run on them."""

import numpy as np

from aquabuf.assess.tank.equalize import equalize
from aquabuf.assess.tank.profile import Profile

HOUR = 3600.0


def profile(flow, dt_h=1.0, base=None):
    """A profile of one waste in equal steps."""
    flow = np.asarray(flow, dtype=float)
    return Profile(time_s=np.arange(flow.size) * dt_h * HOUR, flow_m3_h=flow, strength=np.ones((1, flow.size)), step_s=dt_h * HOUR,
                   base_eq_l=None if base is None else np.asarray(base, dtype=float))


def run(flow, base, draw_by, dt_h=1.0, amounts=None, **more):
    """Equalize in equal steps."""
    n = len(flow)
    return equalize(np.arange(n) * dt_h * HOUR, dt_h * HOUR, np.asarray(flow, dtype=float), np.asarray(base, dtype=float),
                    np.ones((0, n)) if amounts is None else amounts, draw=draw_by, **more)

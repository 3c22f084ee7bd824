"""The inflection point: where pH falls fastest."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["INFLECTION_PH", "Inflection", "inflection", "slopes"]

Array = NDArray[np.float64]

INFLECTION_PH = (3.7, 6.2)  # where that of alkalinity is looked for
SPANS = (1, 2, 3, 4, 6, 8)  # steps between the two points of a slope: as few as the scatter allows
NOISE_PART = 0.05           # largest share of the fall that scatter of the two readings may have
STEP_PARTS = 0.2            # of a step that the top of a parabola is off, found by simulation


@dataclass(frozen=True, slots=True, eq=False)
class Inflection:
    """Per titration, nan where there is none.

    acid : where pH falls fastest. [eq per unit of sample]
    u_acid : standard uncertainty from the spacing of the points and scatter. [eq per unit of sample]
    resolution : acid between the two points of the steepest slope. [eq per unit of sample]
    span : number of steps that slope is taken over.
    """

    acid: Array
    u_acid: Array
    resolution: Array
    span: NDArray[np.intp]


def slopes(acid: Array, ph: Array, span: int) -> tuple[Array, Array, Array]:
    """Fall of pH per acid over `span` steps: middle acid, slope and middle pH; one column less per step."""
    with np.errstate(invalid="ignore", divide="ignore"):
        dx = acid[:, span:] - acid[:, :-span]
        fall = np.where(dx > 0.0, (ph[:, :-span] - ph[:, span:]) / dx, np.nan)
    return 0.5 * (acid[:, span:] + acid[:, :-span]), fall, 0.5 * (ph[:, span:] + ph[:, :-span])


def inflection(acid: Array, ph: Array, u_ph: Array, u_acid: Array) -> Inflection:
    """Point of steepest fall between the pH of INFLECTION_PH, by a parabola through the three highest slopes.

    `u_ph` and `u_acid` are the scatter of one reading of pH and of acid, per titration. The slope is taken over as many
    steps as it needs for scatter to be small against the fall.
    """
    n = ph.shape[0]
    out = [np.full(n, np.nan) for _ in range(3)]
    span = np.zeros(n, dtype=np.intp)
    for steps in SPANS:
        if ph.shape[1] < steps + 3:
            break
        found, width, fall, u = _steepest(acid, ph, steps, u_ph, u_acid)
        with np.errstate(invalid="ignore"):
            scatter = np.sqrt(2.0) * np.hypot(u_ph, fall / width * u_acid)
            better = (span == 0) & np.isfinite(found) & (scatter <= NOISE_PART * fall)
        for kept, new in zip(out, (found, u, width), strict=True):
            kept[better] = new[better]
        span[better] = steps
    return Inflection(out[0], out[1], out[2], span)


def _steepest(acid: Array, ph: Array, steps: int, u_ph: Array, u_acid: Array,
             ) -> tuple[Array, Array, Array, Array]:
    """Acid of the steepest fall, the interval it was found in, the fall of pH there, and the standard uncertainty."""
    rows = np.arange(ph.shape[0])
    middle, fall, at_ph = slopes(acid, ph, steps)
    low, high = INFLECTION_PH
    with np.errstate(invalid="ignore"):
        inside = np.isfinite(fall) & (at_ph > low) & (at_ph < high)
    searched = np.where(inside, fall, -np.inf)
    top = searched.argmax(axis=1)
    last = fall.shape[1] - 1
    before, after = (np.clip(top + k, 0, last) for k in (-1, 1))
    x0, x1, x2 = (middle[rows, k] for k in (before, top, after))
    y0, y1, y2 = (fall[rows, k] for k in (before, top, after))
    width = acid[rows, top + steps] - acid[rows, top]
    with np.errstate(invalid="ignore", divide="ignore"):
        is_peak = (top > 0) & (top < last) & (searched[rows, top] > -np.inf) & (y1 >= y0) & (y1 >= y2)
        d1, d2 = (y1 - y0) / (x1 - x0), (y2 - y1) / (x2 - x1)
        curved = (d2 - d1) / (0.5 * (x2 - x0))
        vertex = 0.5 * (x0 + x1) - d1 / curved
        vertex = np.clip(np.where(curved < 0.0, vertex, x1), 0.5 * (x0 + x1), 0.5 * (x1 + x2))
        # a slope is wrong by scatter over its interval; the top of a parabola moves by that over its curvature
        noise = np.hypot(u_ph, y1 * u_acid) / width / np.abs(curved) / (0.5 * (x2 - x0))
    noise = np.where(np.isfinite(noise), np.minimum(noise, 0.5 * width), 0.5 * width)
    u = np.hypot(STEP_PARTS * width / steps, noise)

    def or_nan(v: Array) -> Array:
        return np.where(is_peak, v, np.nan)
    return or_nan(vertex), or_nan(width), or_nan(y1 * width), or_nan(u)

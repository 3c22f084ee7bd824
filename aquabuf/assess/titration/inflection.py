"""The inflection point: where pH falls fastest."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["INFLECTION_PH", "Inflection", "inflection", "slopes"]

Array = NDArray[np.float64]

INFLECTION_PH = (3.7, 6.2)  # where that of alkalinity is looked for
SPANS = (1, 2, 3, 4, 6, 8, 12, 16)  # steps between the two points of a slope: as few as the scatter allows
NOISE_PART = 0.05           # largest share of the fall that scatter of the two readings may have
HALF_WIDTH_PH = 0.55        # of the piece of curve that is smoothed
FEWEST_SMOOTHED = 5         # points in it; with fewer the steepest steps must do
STEP_PARTS = 0.1            # of a step that the top of a parabola through three slopes is off, found by simulation
STEP_FALL = 0.7             # pH; beyond, the square of the fall counts, up to anywhere within the step
ANYWHERE = 1.0 / np.sqrt(12.0)
ROUNDS = 4
# Share of the free acid at the bend by which it may miss the equivalence point: bicarbonate gives way to CO2 near
# pH 6.3, so that the curve is not quite the same on both sides; found by simulation.
BEND_SHARE = 0.2


@dataclass(frozen=True, slots=True, eq=False)
class Inflection:
    """Per titration, nan where there is none.

    acid : where pH falls fastest. [eq per unit of sample]
    u_acid : standard uncertainty from the spacing of the points and scatter. [eq per unit of sample]
    resolution : acid between the two points of the steepest slope. [eq per unit of sample]
    span : steps between those two points; 0 where there is none.
    """

    acid: Array
    u_acid: Array
    resolution: Array
    span: NDArray[np.intp]


def slopes(acid: Array, ph: Array, span: int = 1) -> tuple[Array, Array, Array]:
    """Fall of pH per acid over `span` steps: middle acid, slope and middle pH; one column less per step."""
    with np.errstate(invalid="ignore", divide="ignore"):
        dx = acid[:, span:] - acid[:, :-span]
        fall = np.where(dx > 0.0, (ph[:, :-span] - ph[:, span:]) / dx, np.nan)
    return 0.5 * (acid[:, span:] + acid[:, :-span]), fall, 0.5 * (ph[:, span:] + ph[:, :-span])


def inflection(acid: Array, ph: Array, u_ph: Array, u_acid: Array) -> Inflection:
    """Point of steepest fall between the pH of INFLECTION_PH.

    The steepest step (or run of steps, where scatter needs it) is found first. Where five or more points lie within
    0.55 pH of it, acid is smoothed there by a cubic in pH, weighted by what scatter of pH and of acid make of each
    point, and the point where the cubic bends the other way counts. With fewer points the top of a parabola through
    the three steepest slopes does. `u_ph` and `u_acid` are the scatter of one reading of pH and of acid, per titration.
    """
    n = ph.shape[0]
    out = [np.full(n, np.nan) for _ in range(3)]
    center, span = np.full(n, np.nan), np.zeros(n, dtype=np.intp)
    for steps in SPANS:
        if ph.shape[1] < steps + 3:
            break
        top, width, fall, u, at_ph = _steepest(acid, ph, steps, u_ph, u_acid)
        with np.errstate(invalid="ignore"):
            scatter = np.sqrt(2.0) * np.hypot(u_ph, fall / width * u_acid)
            clear = (span == 0) & np.isfinite(top) & (scatter <= NOISE_PART * fall)
        for kept, new in zip((*out, center), (top, u, width, at_ph), strict=True):
            kept[clear] = new[clear]
        span[clear] = steps
    smooth, u_smooth = _smoothed(acid, ph, center, u_ph, u_acid)
    use = np.isfinite(smooth)
    u = np.hypot(np.where(use, u_smooth, out[1]), BEND_SHARE * 10.0**-center)
    return Inflection(np.where(use, smooth, out[0]), u, out[2], span)


def _steepest(acid: Array, ph: Array, steps: int, u_ph: Array, u_acid: Array,
              ) -> tuple[Array, Array, Array, Array, Array]:
    """Acid of the steepest fall, its interval, the fall of pH there, standard uncertainty, and the pH in the middle."""
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
    with np.errstate(invalid="ignore"):
        parts = np.clip(STEP_PARTS * np.maximum(y1 * width / STEP_FALL, 1.0) ** 2, STEP_PARTS, ANYWHERE)
    u = np.hypot(parts * width / steps, noise)

    def or_nan(v: Array) -> Array:
        return np.where(is_peak, v, np.nan)
    return or_nan(vertex), or_nan(width), or_nan(y1 * width), or_nan(u), or_nan(at_ph[rows, top])


def _smoothed(acid: Array, ph: Array, center: Array, u_ph: Array, u_acid: Array) -> tuple[Array, Array]:
    """Acid at the inflection of a cubic in pH about `center`, and its standard uncertainty; nan where it has none."""
    x = np.where(np.isfinite(acid), acid, 0.0)
    zero = np.nanmean(np.where(np.isfinite(acid), acid, 0.0), axis=1, keepdims=True)
    at = np.where(np.isfinite(center), center, 5.0)
    slope = np.zeros_like(at)
    for _ in range(ROUNDS):
        p = np.where(np.isfinite(ph), ph, 99.0) - at[:, None]
        use = np.abs(p) <= HALF_WIDTH_PH
        p = np.where(use, p, 0.0)
        powers = np.stack([np.ones_like(p), p, p**2, p**3], axis=-1)
        # what scatter makes of a point, by the slope of the round before
        local = slope[:, None] * np.cosh(np.log(10.0) * p)
        weight = np.where(use, 1.0 / (u_acid[:, None] ** 2 + (u_ph[:, None] * local) ** 2 + 1e-30), 0.0)
        scale = np.maximum(weight.max(axis=1, keepdims=True), 1e-300)
        matrix = np.einsum("nmi,nm,nmj->nij", powers, weight / scale, powers)
        right = np.einsum("nmi,nm->ni", powers, weight / scale * (x - zero))
        inverse = np.linalg.pinv(matrix, hermitian=True)
        c = np.einsum("nij,nj->ni", inverse, right)
        with np.errstate(invalid="ignore", divide="ignore"):
            bend = -c[:, 2] / (3.0 * c[:, 3])
        able = np.isfinite(center) & (use.sum(axis=1) >= FEWEST_SMOOTHED)
        able &= (c[:, 3] < 0.0) & (np.abs(bend) < HALF_WIDTH_PH)
        b = np.where(able, bend, 0.0)
        slope = np.where(able, np.abs(c[:, 1] + 2.0 * c[:, 2] * b + 3.0 * c[:, 3] * b**2), slope)
        value = c[:, 0] + b * (c[:, 1] + b * (c[:, 2] + b * c[:, 3]))
        covariance = inverse / scale[:, :, None]
        gradient = _bend_gradient(c, b)
        at = at + b
    u = np.sqrt(np.maximum(np.einsum("ni,nij,nj->n", gradient, covariance, gradient), 0.0))
    return np.where(able, value + zero[:, 0], np.nan), np.where(able, u, np.nan)


def _bend_gradient(c: Array, b: Array) -> Array:
    """Change of the value at the bend with each coefficient of the cubic; the bend itself moves with the last two."""
    slope = c[:, 1] + 2.0 * c[:, 2] * b + 3.0 * c[:, 3] * b**2
    with np.errstate(invalid="ignore", divide="ignore"):
        by_second, by_third = -1.0 / (3.0 * c[:, 3]), c[:, 2] / (3.0 * c[:, 3] ** 2)
        gradient = np.stack([np.ones_like(b), b, b**2 + slope * by_second, b**3 + slope * by_third], axis=-1)
    return np.where(np.isfinite(gradient), gradient, 0.0)

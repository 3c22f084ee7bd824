"""Solve the proton balance for pH, many rows at once, each on its own.

Newton's method on ln(surplus/deficit) against ln h: far from every pK both sides are powers of h, so the first steps
land near the root from anywhere. A bracket of pH -6 to 22 is kept and halved whenever a step would leave it or
progress stalls, so every row ends.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from aquabuf.arrays import LN10
from aquabuf.engine.balance import System, alkalinity_at
from aquabuf.engine.status import IMPOSSIBLE, NOT_FINITE, SOLVED

__all__ = ["PH_HIGHEST", "PH_LOWEST", "SolveResult", "solve_h"]

Array = NDArray[np.float64]

PH_LOWEST, PH_HIGHEST = -1.0, 15.0  # a root outside is reported as no water at all
BLOCK_ROWS = 16_384                 # temporaries of one block stay in the processor's cache
BRACKET = (-22.0 * LN10, 6.0 * LN10)
STEP_DONE = 3e-8                    # in ln h; the quadratic step after it is below rounding
MAX_ITERATIONS = 120
BARE_STEPS = 3                      # enough for most waters from the first guess
BARE_STEPS_WITH_ACIDS = 5           # the first guess knows carbonate and water only
LARGEST_STEP = 12.0                 # of a bare step, in ln h
PATIENCE = 8                        # guarded steps before a stalled row is halved instead


@dataclass(frozen=True, slots=True, eq=False)
class SolveResult:
    """Outcome per row: `h` (nan where not solved), `residual` [eq/L], `status`, `iterations`."""

    h: Array
    residual: Array
    status: NDArray[np.int8]
    iterations: NDArray[np.int16]


def solve_h(system: System) -> SolveResult:
    """Hydrogen variable at which each row of `system` balances; rows are one-dimensional.

    Status: solved; -1 where a total is negative or the root lies outside pH -1 to 15; -3 where an input is not finite.
    """
    n = system.alkalinity.shape[0]
    h, residual = np.full(n, np.nan), np.full(n, np.nan)
    iterations = np.zeros(n, dtype=np.int16)
    status = _input_status(system)
    for start in range(0, n, BLOCK_ROWS):
        rows = np.flatnonzero(status[start:start + BLOCK_ROWS] == SOLVED) + start
        if rows.size:
            whole = rows.size == min(BLOCK_ROWS, n - start)
            block = system.take(slice(start, start + rows.size) if whole else rows)
            h[rows], iterations[rows] = _solve_block(block)
            residual[rows] = alkalinity_at(block, h[rows]) - block.alkalinity
    with np.errstate(invalid="ignore"):
        outside = (status == SOLVED) & ~((h >= 10.0**-PH_HIGHEST) & (h <= 10.0**-PH_LOWEST))
    status[outside] = IMPOSSIBLE
    h[outside] = residual[outside] = np.nan
    return SolveResult(h, residual, status, iterations)


def _input_status(system: System) -> NDArray[np.int8]:
    carbon = system.carbon
    arrays = [system.alkalinity, carbon, system.c_h, system.c_oh, system.k1, system.k2]
    totals = [carbon] + [f.total for f in system.families]
    finite = np.ones(system.alkalinity.shape, dtype=bool)
    for a in arrays + totals:
        finite &= np.isfinite(a)
    status = np.full(finite.shape, SOLVED, dtype=np.int8)
    for total in totals:
        with np.errstate(invalid="ignore"):
            status[total < 0.0] = IMPOSSIBLE
    status[~finite] = NOT_FINITE
    return status


def _solve_block(system: System) -> tuple[Array, NDArray[np.int16]]:
    """A few bare Newton steps for the whole block, then guarded ones for the rows that are not done."""
    h = _first_guess(system)
    bare_steps = BARE_STEPS_WITH_ACIDS if system.families else BARE_STEPS
    for _ in range(bare_steps):
        _, step = _newton_step(system, h)
        h = h * np.exp(np.clip(step, -LARGEST_STEP, LARGEST_STEP))
    count = np.full(h.shape, bare_steps, dtype=np.int16)
    rest = np.flatnonzero(~(np.abs(step) < STEP_DONE))
    if rest.size:
        h[rest], more = _solve_guarded(system.take(rest), h[rest])
        count[rest] += more
    return h, count


def _newton_step(system: System, h: Array) -> tuple[Array, Array]:
    """ln(surplus/deficit) at `h`, and the step in ln h that would close it."""
    surplus, deficit, d_surplus, d_deficit = system.sides(h)
    gap = np.log(surplus / deficit)
    return gap, gap / (d_deficit / deficit - d_surplus / surplus)


def _solve_guarded(system: System, h: Array) -> tuple[Array, NDArray[np.int16]]:
    """Newton inside a bracket that only shrinks; a row's answer is the one of the step that ended it."""
    n = h.shape[0]
    x_out, count = np.full(n, np.nan), np.zeros(n, dtype=np.int16)
    rows = np.arange(n)
    x = np.clip(np.log(h), *BRACKET)
    low, high = np.full(n, BRACKET[0]), np.full(n, BRACKET[1])
    last, done = np.full(n, np.inf), np.zeros(n, dtype=bool)
    for iteration in range(1, MAX_ITERATIONS + 1):
        gap, step = _newton_step(system, np.exp(x))
        too_low = gap > 0.0  # more base than the balance asks for: h must rise
        low, high = np.where(too_low, x, low), np.where(too_low, high, x)
        new = x + step
        halve = ~((new > low) & (new < high)) & (np.abs(step) >= STEP_DONE)
        if iteration > PATIENCE:
            halve |= np.abs(step) > 0.5 * last
        new = np.where(halve, 0.5 * (low + high), new)
        last = np.abs(new - x)
        x = new
        done |= last < STEP_DONE
        fresh = done & (count[rows] == 0)
        x_out[rows[fresh]], count[rows[fresh]] = x[fresh], iteration
        if done.all():
            break
        if 2 * np.count_nonzero(done) > done.size:  # gathering costs as much as a step
            keep = np.flatnonzero(~done)
            system, rows = system.take(keep), rows[keep]
            x, low, high, last, done = x[keep], low[keep], high[keep], last[keep], done[keep]
    return np.exp(x_out), count


def _first_guess(system: System) -> Array:
    """Positive root of the quadratic that the balance becomes once its minor carbonate species is dropped.

    Closed water: CO3-- is minor where alkalinity is well below the carbon, CO2 and H+ where it is above, and around
    the bicarbonate point HCO3- is nearly all of the carbon. Open water: CO3-- and OH- share the square term.
    """
    alk, c_h, c_oh, k1, k2 = system.alkalinity, system.c_h, system.c_oh, system.k1, system.k2
    if system.dic is None:
        q = system.carbon * k1 + c_oh
        acid = _positive_root(c_h, alk, -q)
        base = _positive_root(np.maximum(alk, 1e-12), -q, -2.0 * k2 * system.carbon * k1)
        return np.where(alk > 0.0, np.maximum(acid, base), acid)
    dic = system.dic
    excess = alk - dic
    a, b, c = dic / k1 + c_h, excess, -(dic * k2 + c_oh)
    is_acid, is_base = excess < -0.1 * dic, excess > 0.1 * dic
    a = np.where(is_acid, c_h, np.where(is_base, excess, a))
    b = np.where(is_acid, c_h * k1 + alk, np.where(is_base, (alk - 2.0 * dic) * k2 - c_oh, b))
    c = np.where(is_acid, k1 * excess, np.where(is_base, -c_oh * k2, c))
    return _positive_root(a, b, c)


def _positive_root(a: Array, b: Array, c: Array) -> Array:
    """Positive root of a h^2 + b h + c with a > 0 > c, without cancellation."""
    q = -0.5 * (b + np.copysign(np.sqrt(b * b - 4.0 * a * c), b))
    return np.maximum(np.where(q < 0.0, c / q, q / a), 1e-22)

"""Speed of the closed solve, side by side with a general-purpose vector root finder and a loop of scalar ones.

Run by hand: `python tests/bench/bench_solve.py [rows]`. All three solve the same residual of the same fresh waters to the
same tolerance in one run; ratios are printed, so the machine matters little. Goals: 10 times the vector root finder and
100 times the loop for carbonate alone, 5 times the vector root finder with eight acids.
"""

import sys
from time import perf_counter

import numpy as np
from scipy.optimize import brentq
from scipy.optimize.elementwise import find_root

from aquabuf.chem.acids import acid_table
from aquabuf.engine.balance import System, alkalinity_at
from aquabuf.engine.conditions import conditions
from aquabuf.engine.solve import solve_h
from aquabuf.engine.state import Dissolved, families_of

ACIDS = ("boron", "phosphate", "silica", "ammonium", "sulfide", "sulfate", "acetate", "citrate")
LOOP_ROWS = 2000
BLOCK = 8192  # rows that the vector root finder is given at a time in its second run: near its best on a small cache
TOLERANCE = {"xatol": 1e-12, "xrtol": 0.0}


def waters(rows, acids):
    """Balance of random fresh waters of the usual kind: 0.01 to 10 meq/L, 0 to 40 °C."""
    rng = np.random.default_rng(1)
    alkalinity = 10.0 ** rng.uniform(-5, -2, rows)
    c = conditions(rng.uniform(0, 40, rows), 0.0, alkalinity)
    dissolved = tuple(Dissolved(acid_table()[n], 10.0 ** rng.uniform(-6, -3.3, rows)) for n in acids)
    return System(alkalinity, c.c_h, c.c_oh, c.k1, c.k2, dic=alkalinity * rng.uniform(0.7, 1.5, rows),
                  families=families_of(c, dissolved))


def flat(system):
    """The arrays of a system in a row, and how to build the residual from them again."""
    arrays = [system.alkalinity, system.c_h, system.c_oh, system.k1, system.k2, system.dic]
    arrays += [a for f in system.families for a in (f.total, *f.k)]
    shape = [(len(f.k), f.zero) for f in system.families]

    def residual(ph, alkalinity, c_h, c_oh, k1, k2, dic, *rest):
        h = 10.0**-ph
        inv = 1.0 / h
        r = k1 * inv
        second = r * k2 * inv
        total = dic * (r + 2.0 * second) / (1.0 + r + second) + c_oh * inv - c_h * h - alkalinity
        at = 0
        for steps, zero in shape:
            amount, weight, whole, lost = rest[at], 1.0, 1.0, 0.0
            for j in range(1, steps + 1):
                weight = weight * rest[at + j] * inv
                whole, lost = whole + weight, lost + j * weight
            total = total + amount * (lost / whole - zero)
            at += steps + 1
        return total

    return residual, arrays


def timed(act):
    """Seconds of one call, and what it returned."""
    start = perf_counter()
    result = act()
    return perf_counter() - start, result


def by_vector(residual, arrays, block):
    """The general-purpose root finder, `block` rows at a time."""
    out = []
    for start in range(0, arrays[0].size, block):
        part = tuple(a[start:start + block] for a in arrays)
        out.append(find_root(residual, (-1.0, 15.0), args=part, tolerances=TOLERANCE).x)
    return np.concatenate(out)


def by_loop(residual, arrays):
    """A scalar root finder, row by row."""
    columns = [a[:LOOP_ROWS].tolist() for a in arrays]
    return np.array([brentq(residual, -1.0, 15.0, args=row, xtol=1e-12, rtol=1e-14) for row in zip(*columns, strict=True)])


def compare(title, rows, acids):
    """Time the three ways on the same waters and print seconds, ratios and the largest disagreement."""
    system = waters(rows, acids)
    residual, arrays = flat(system)
    solve_h(system.take(slice(0, BLOCK)))  # warm up
    ours, result = timed(lambda: solve_h(system))
    vector, x_vector = timed(lambda: by_vector(residual, arrays, rows))
    blocks, _ = timed(lambda: by_vector(residual, arrays, BLOCK))
    loop, x_loop = timed(lambda: by_loop(residual, arrays))
    loop *= rows / LOOP_ROWS
    ph = -np.log10(result.h)
    apart = max(np.abs(ph - x_vector).max(), np.abs(ph[:LOOP_ROWS] - x_loop).max())
    left = np.abs(alkalinity_at(system, result.h) - system.alkalinity).max()
    print(f"{title}: {rows} rows in {ours:.3f} s ({1e9 * ours / rows:.0f} ns a row); vector root finder {vector:.2f} s, "
          f"{vector / ours:.1f} times (in blocks {blocks / ours:.1f} times); scalar loop {loop:.1f} s, {loop / ours:.0f} times; "
          f"pH apart at most {apart:.1e}; residual at most {left:.1e} eq/L; iterations at most {result.iterations.max()}")


def main():
    """Both comparisons; rows from the command line, one million by default."""
    rows = int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000
    compare("carbonate and water", rows, ())
    compare("with eight acids", rows, ACIDS)


if __name__ == "__main__":
    main()

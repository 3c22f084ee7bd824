"""Worst pH error of the solver over many random waters, against the same balance in 50 digits.

Run by hand: `python tests/bench/bench_accuracy.py [rows]`. Takes about a minute for 2,000 waters.
"""

import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "engine"))
from precise_balance import ph_errors, random_waters


def main():
    """Print how many waters were solved, and the worst, the median and the 99th percentile of the pH error."""
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 2000
    water = random_waters(count, seed=99)
    rows, errors = ph_errors(water)
    print(f"{rows.size} of {count} waters solved; pH error: median {np.median(errors):.1e}, "
          f"99 % {np.quantile(errors, 0.99):.1e}, worst {errors.max():.1e}")
    worst = rows[np.argsort(errors)[-3:]]
    for row in worst:
        s = water.state
        print(f"  pH {s.ph()[row]:.4f}, alkalinity {s.alkalinity[row]:.3e} eq/L, carbon {s.dic[row]:.3e} mol/L, "
              f"t {s.conditions.t_c[row]:.1f} °C, S {s.conditions.salinity[row]:.1f}")


if __name__ == "__main__":
    main()

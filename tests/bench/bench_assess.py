"""CPU time and memory of the whole assessment without draws, beyond reading and writing. Run by hand.

One million invented fresh waters go through `assess` and the tally in the pieces that the command uses.
Goal: at most 10 s of CPU and 1.5 GB.
"""

from __future__ import annotations

import resource
import sys
import time

import numpy as np
import pandas as pd

from aquabuf.assess.limits import shipped_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.assess import assess
from aquabuf.readings.result import REJECTED_COLUMNS, Readings
from aquabuf.report.run import CHUNK_ROWS
from aquabuf.report.tally import Tally


def piece(first: int, rows: int) -> Readings:
    """Invented readings of pH, alkalinity, temperature, conductivity and major ions."""
    rng = np.random.default_rng(first)
    alkalinity = 10.0 ** rng.uniform(-4.3, -2.3, rows)
    calcium = 0.4 * alkalinity * rng.uniform(0.5, 1.2, rows)
    frame = pd.DataFrame({
        "row": np.arange(first, first + rows), "sample_id": [f"s{i}" for i in range(first, first + rows)],
        "ph": rng.uniform(6.0, 8.8, rows), "temperature_c": rng.uniform(0.0, 25.0, rows),
        "alkalinity_eq_l": alkalinity, "conductivity_us_cm": 1e5 * alkalinity, "calcium_mol_l": calcium,
        "magnesium_mol_l": 0.3 * calcium, "sodium_mol_l": 0.2 * alkalinity, "chloride_mol_l": 0.1 * alkalinity,
        "sulfate_mol_l": 0.05 * alkalinity,
    })
    return Readings(frame=frame, rejected=pd.DataFrame(columns=list(REJECTED_COLUMNS)))


def main(rows: int) -> None:
    """Print CPU seconds of each step and the peak memory."""
    options, limits, tally = Options(draws=0), shipped_limits(), Tally()
    spent = 0.0
    for first in range(0, rows, CHUNK_ROWS):
        readings = piece(first, min(CHUNK_ROWS, rows - first))
        start = time.process_time()
        tally.add(assess(readings, options, limits, only_unmet_checks=True))
        spent += time.process_time() - start
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0**2
    print(f"{rows:,} samples: {spent:.2f} s CPU ({1e6 * spent / rows:.2f} µs each), peak memory {peak:.2f} GB, "
          f"{tally.assessed:,} assessed, {tally.warned:,} warned")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000)

"""Trends of monthly lake series: seconds for many sites, and the pair statistics beside a plain double loop. Run by hand.

    python tests/bench/bench_trends.py

Prints seconds of processor time and ratios measured side by side in the same run. With AQUABUF_OPEN_DATA it times the
agency's file of six lakes too.
"""

import os
import time
from pathlib import Path

import numpy as np
import pandas as pd

from aquabuf.assess.lake.trend import kendall_s, pair_slopes, trend_of
from aquabuf.assess.lake.trends import trend_table
from aquabuf.tables import read_table

SITES, YEARS = 40, 30
HEADERS = {"anc_gran_ueq_l": "anc_ueq_L", "sulfate_ueq_l": "SO4_ueq_L", "nitrate_ueq_l": "NO3_ueq_L",
           "calcium_ueq_l": "Ca_ueq_L", "doc_mg_l": "doc_mgC_L_int"}


def clock(call, *args):
    """Result and seconds of processor time."""
    start = time.process_time()
    out = call(*args)
    return out, time.process_time() - start


def invented():
    """Monthly samples of all quantities at many sites."""
    rng = np.random.default_rng(1)
    dates = pd.date_range("1990-01-15", periods=12 * YEARS, freq="30.4375D")
    frame = pd.DataFrame({"site": np.repeat([f"lake {i}" for i in range(SITES)], dates.size), "date": np.tile(dates, SITES)})
    for quantity in read_table("trend_quantities"):
        frame[quantity["name"]] = rng.standard_normal(len(frame)).round(1)
    return frame


def agency(folder):
    """The agency's file, a site for each place of a lake."""
    raw = pd.read_csv(Path(folder) / "ltm_adirondack_1982_2020.csv", parse_dates=["date"])
    return pd.DataFrame({"site": raw["site_name"] + " " + raw["location"], "date": raw["date"],
                         **{name: raw[header] for name, header in HEADERS.items()}})


def looped(t, x):
    """S and Sen slope by two loops over the years of each month."""
    s, slopes = 0, []
    for times, values in zip(t.T.tolist(), x.T.tolist(), strict=True):
        for j, (later, value) in enumerate(zip(times, values, strict=True)):
            for i in range(j):
                rise = value - values[i]
                s += (rise > 0.0) - (rise < 0.0)
                slopes.append(rise / (later - times[i]))
    return s, float(np.median(slopes))


def main():
    """Print the figures."""
    table, seconds = clock(trend_table, invented())
    print(f"{SITES} sites of {12 * YEARS} samples: {len(table)} trends in {seconds:.2f} s, {1e3 * seconds / len(table):.2f} ms each")
    if os.environ.get("AQUABUF_OPEN_DATA"):
        table, seconds = clock(trend_table, agency(os.environ["AQUABUF_OPEN_DATA"]))
        print(f"agency file, {int(table['samples'].groupby(table['site']).max().sum()):,} samples: {len(table)} trends in {seconds:.2f} s")
    x = np.random.default_rng(2).standard_normal((YEARS, 12))
    t = np.repeat(np.arange(YEARS, dtype=float)[:, None], 12, axis=1)
    found, fast = clock(lambda: [trend_of(t, x) for _ in range(50)][-1])
    _, same_work = clock(lambda: [(kendall_s(x).sum(), np.median(pair_slopes(t, x))) for _ in range(50)])
    (s, slope), slow = clock(lambda: [looped(t, x) for _ in range(50)][-1])
    print(f"S and slope of {YEARS} years of months: {1e3 * same_work / 50:.2f} ms; double loop {1e3 * slow / 50:.2f} ms; "
          f"ratio {slow / same_work:.1f}; with variance, interval and correction {1e3 * fast / 50:.2f} ms; "
          f"same S {found.s == s}, same slope {np.isclose(found.slope, slope)}")


if __name__ == "__main__":
    main()

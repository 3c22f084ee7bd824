"""Surveys of lakes by the file: draws beside a loop over the lakes, memory, and trends of dated series. Run by hand.

    python tests/bench/bench_lake.py [LAKES [DRAWS]]

Prints seconds of processor time, peak memory, and a ratio measured side by side in the same run. The loop assesses one lake
after another with the same functions and options. With AQUABUF_OPEN_DATA it also runs the agency's file of six lakes.
"""

import os
import resource
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

import aquabuf
from aquabuf.assess.lake.assess import assess_lakes
from aquabuf.assess.lake.options import LakeOptions, rules_of
from aquabuf.assess.limits import shipped_limits
from aquabuf.readings.reader import read_readings
from aquabuf.readings.result import REJECTED_COLUMNS, Readings
from aquabuf.report.lake_run import LakeFiles, assess_survey

LAKES, DRAWS, LOOPED = 10_000, 1_000, 20
MAPS = Path(aquabuf.__file__).parents[1] / "docs" / "maps"
IONS = ("calcium", "magnesium", "sodium", "potassium", "ammonium", "sulfate", "nitrate", "chloride")


def clock(call, *args, **kwargs):
    """Result and seconds of processor time."""
    start = time.process_time()
    out = call(*args, **kwargs)
    return out, time.process_time() - start


def peak_gb():
    """Most memory that this process has held so far."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0**2


def write(path, lakes):
    """Invented lakes with everything an answer can ask for: pH, Gran ANC, ions, carbon, aluminum, hydrology, deposition."""
    rng = np.random.default_rng(1)
    anc, chloride = rng.uniform(-30.0, 300.0, lakes), rng.uniform(10.0, 60.0, lakes)
    sulfate, nitrate, doc = rng.uniform(20.0, 100.0, lakes), rng.uniform(0.0, 20.0, lakes), rng.uniform(0.5, 12.0, lakes)
    cations = anc + sulfate + nitrate + chloride + 6.0 * doc
    charges = [0.55 * cations, 0.2 * cations, 0.2 * cations, 0.04 * cations, 0.01 * cations, sulfate, nitrate, chloride]
    others = {"temperature_c": rng.uniform(2.0, 20.0, lakes), "ph": np.clip(4.6 + 0.9 * np.arcsinh((anc + 20.0) / 15.0), 4.2, 8.0),
              "anc_ueq_l": anc, "doc_mg_l": doc, "aluminum_ug_l": rng.uniform(0.0, 200.0, lakes), "lake_area_ha": rng.uniform(2.0, 200.0, lakes),
              "watershed_area_ha": rng.uniform(300.0, 3000.0, lakes), "mean_depth_m": rng.uniform(1.0, 10.0, lakes),
              "residence_time_yr": rng.uniform(0.1, 3.0, lakes), "runoff_m_yr": rng.uniform(0.3, 1.5, lakes),
              "precipitation_m_yr": rng.uniform(0.8, 2.0, lakes), "wind_speed_m_s": rng.uniform(1.0, 6.0, lakes),
              "sulfur_deposition_meq_m2_yr": rng.uniform(5.0, 80.0, lakes), "nitrate_deposition_meq_m2_yr": rng.uniform(5.0, 40.0, lakes),
              "ammonium_deposition_meq_m2_yr": rng.uniform(5.0, 40.0, lakes)}
    columns = others | {f"{ion}_ueq_l": v for ion, v in zip(IONS, charges, strict=True)}
    with path.open("w", encoding="utf-8") as out:
        out.write(f"sample_id,region,anc_method,{','.join(columns)}\n")
        for i, row in enumerate(np.column_stack(list(columns.values())).tolist()):
            out.write(f"s{i},r{i % 5},gran,{','.join(f'{v:.4g}' for v in row)}\n")


def one_by_one(readings, count, options):
    """The same assessment, a lake at a time."""
    rules, limits = rules_of(options), shipped_limits("lake_limits")
    nothing = readings.rejected.iloc[:0]
    for i in range(count):
        one = Readings(frame=readings.frame.iloc[[i]].reset_index(drop=True), rejected=nothing, headers=readings.headers)
        assess_lakes(one, rules, options, limits)


def main(lakes=LAKES, draws=DRAWS):
    """Print the figures."""
    options = LakeOptions(draws=draws)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "lakes.csv"
        write(path, lakes)
        _, bare = clock(assess_survey, LakeFiles(survey=path), Path(folder) / "bare", LakeOptions(draws=0), figure=False)
        print(f"{lakes:,} lakes without draws, read, every table written: {bare:.1f} s, {1e3 * bare / lakes:.2f} ms each; peak memory {peak_gb():.2f} GB")
        _, seconds = clock(assess_survey, LakeFiles(survey=path), Path(folder) / "out", options, figure=False)
        print(f"{lakes:,} lakes with {draws:,} draws: {seconds:.1f} s, {1e3 * seconds / lakes:.2f} ms each, "
              f"{1e6 * (seconds - bare) / (lakes * max(draws, 1)):.2f} µs a draw; peak memory {peak_gb():.2f} GB")
        readings = read_readings(path)
    assert list(readings.rejected) == list(REJECTED_COLUMNS)
    count = min(LOOPED, lakes)
    _, loop = clock(one_by_one, readings, count, options)
    _, whole = clock(assess_lakes, readings, rules_of(options), options, shipped_limits("lake_limits"))
    print(f"assessment alone: {1e3 * whole / lakes:.2f} ms each; lake by lake {1e3 * loop / count:.1f} ms each; ratio {loop / count / (whole / lakes):.0f}")
    if os.environ.get("AQUABUF_OPEN_DATA"):
        series = LakeFiles(survey=Path(os.environ["AQUABUF_OPEN_DATA"]) / "ltm_adirondack_1982_2020.csv", mapping=str(MAPS / "ltm_adirondack.toml"))
        with tempfile.TemporaryDirectory() as folder:
            words, seconds = clock(assess_survey, series, Path(folder) / "out", LakeOptions(draws=0), figure=False)
        print(f"{words.splitlines()[0]}\nwith trends, without draws: {seconds:.1f} s")


if __name__ == "__main__":
    main(*[int(x) for x in sys.argv[1:]])

"""Titrations by the file: all methods and writing, the fit beside a least-squares loop, and memory. Run by hand.

    python tests/bench/bench_titration.py

Prints seconds of processor time and ratios measured side by side in the same run.
"""

import resource
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
from scipy.optimize import least_squares

sys.path.insert(0, str(Path(__file__).parents[1] / "assess"))
sys.path.insert(0, str(Path(__file__).parents[1] / "assess" / "titration"))

from simulated import Bench

from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.assess.titration.solve import solve_titrations
from aquabuf.engine.fit import fit_curve
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.titration_run import titrate_file

COUNT, LOOPED = 10_000, 100


def clock(call, *args, **kwargs):
    """Result and seconds of processor time."""
    start = time.process_time()
    out = call(*args, **kwargs)
    return out, time.process_time() - start


def write(bench, folder):
    """The bench as the two files of a user."""
    points, samples = folder / "points.csv", folder / "samples.csv"
    with points.open("w", encoding="utf-8") as out:
        out.write("sample_id,titrant_ml,ph\n")
        for i in range(bench.count):
            out.writelines(f"s{i},{v:g},{p:g}\n" for v, p in zip(bench.added[i], bench.ph[i], strict=True))
    with samples.open("w", encoding="utf-8") as out:
        out.write("sample_id,sample_volume_ml,titrant_eq_l,titrant_acid,temperature_c,ionic_strength_mol_l,filtered\n")
        out.writelines(f"s{i},{bench.sample_ml:g},{bench.strength[i]:g},hydrochloric,25,{bench.salt[i]:.6g},yes\n"
                       for i in range(bench.count))
    return TitrationFiles(points, samples)


def one_by_one(solved, rows):
    """The same fit by scipy's least squares, a titration at a time, on the same balance."""
    c, points = solved.curves, solved.points
    for i in rows:
        one = points.take(np.array([i]))
        ph, u_ph, u_acid = solved.ph[i:i + 1], c.u_ph_scatter[i], c.u_acid[i]

        def residual(p, one=one, ph=ph, u_ph=u_ph, u_acid=u_acid):
            carbon, rest, d_carbon, d_rest = one.terms(one.h(ph - p[2]))
            slope = np.log(10.0) * (p[1] * 1e-3 * d_carbon + d_rest)
            return ((p[0] * 1e-3 - one.acid - p[1] * 1e-3 * carbon - rest) / np.hypot(u_ph * slope, u_acid))[0]
        a = solved.first_guess[i] * 1e3
        least_squares(residual, [a, abs(a) + 0.01, 0.0])


def main():
    """Print the figures."""
    bench = Bench(COUNT, 5e-5, 4e-3, seed=1)
    with tempfile.TemporaryDirectory() as folder:
        files = write(bench, Path(folder))
        _, seconds = clock(titrate_file, files, Path(folder) / "out", TitrationOptions(), figures=0)
    print(f"{COUNT:,} titrations of 30 points, read, all methods, written: {seconds:.1f} s, {1e3 * seconds / COUNT:.2f} ms each")
    solved, seconds = clock(solve_titrations, bench.titrations(), TitrationOptions())
    print(f"all methods in one piece of {COUNT:,}: {seconds:.1f} s")
    c = solved.curves
    use = np.isfinite(solved.ph)
    args = {"u_ph": c.u_ph_scatter, "u_acid": c.u_acid, "alkalinity": solved.first_guess}
    _, all_fits = clock(fit_curve, solved.points, solved.ph, use, **args)
    _, loop = clock(one_by_one, solved, range(LOOPED))
    print(f"fits: {1e3 * all_fits / COUNT:.3f} ms each; least-squares loop {1e3 * loop / LOOPED:.2f} ms each; "
          f"ratio {loop / LOOPED / (all_fits / COUNT):.0f}")
    print(f"peak memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MB (the bench itself included)")


if __name__ == "__main__":
    main()

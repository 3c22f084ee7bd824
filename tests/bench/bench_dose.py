"""Dosing: a plan from the shell, a year of hourly raw water through a works, how close targets are met. Run by hand.

    python tests/bench/bench_dose.py [HOURS]

Prints seconds of processor time, and a ratio measured side by side in the same run: the loop solves one row after another with the
same functions. Closeness is that of the solved targets when each row's water is computed again from its doses.
"""

import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

import aquabuf
from aquabuf.assess.plant.quantities import find_quantity, in_house, measured
from aquabuf.assess.plant.steps.adjust import Adjust
from aquabuf.assess.plant.steps.coagulate import Coagulate
from aquabuf.assess.plant.steps.disinfect import Disinfect
from aquabuf.assess.plant.steps.temperature import ChangeTemperature
from aquabuf.assess.plant.store import Stocked
from aquabuf.assess.plant.stream import stream_of
from aquabuf.assess.plant.targets import Target
from aquabuf.assess.plant.train import run_train
from aquabuf.chem.products import find_product

HOURS, LOOPED = 8_760, 30
PLAN = Path(aquabuf.__file__).parents[1] / "field_data" / "plan_upland.toml"
WORKS = {"pH and alkalinity": {"ph": 8.3, "alkalinity": 60.0}, "pH and precipitation potential": {"ph": 8.3, "ccpp": 2.0}}


def raw_water(hours):
    """Invented hourly raw water."""
    rng = np.random.default_rng(1)
    alkalinity = rng.uniform(2e-4, 1.2e-3, hours)
    return {"temperature_c": rng.uniform(2.0, 20.0, hours), "ph": rng.uniform(6.3, 7.6, hours), "alkalinity_eq_l": alkalinity,
            "calcium_mol_l": 0.4 * alkalinity, "magnesium_mol_l": 0.1 * alkalinity, "sodium_mol_l": np.full(hours, 2e-4),
            "chloride_mol_l": np.full(hours, 2e-4), "sulfate_mol_l": np.full(hours, 1e-4)}


def stocked(name):
    """A pure product."""
    return Stocked(name=name, product=find_product(name), strength=1.0)


def works(wanted):
    """Coagulation, chlorination, lime with carbon dioxide to two targets, the tap in summer."""
    targets = tuple(Target(quantity=(q := find_quantity(name)), low=in_house(q, v), high=in_house(q, v)) for name, v in wanted.items())
    return [Coagulate(name="alum", product=stocked("alum 14-water"), dose_mol_l=20e-3 / 594.34),
            Disinfect(name="chlorine", product=stocked("sodium hypochlorite"), dose_mol_l=4e-5, demand_mol_l=2e-5),
            Adjust(name="final", products=(stocked("hydrated lime"), stocked("carbon dioxide")), targets=targets, explain=False),
            ChangeTemperature(name="tap", t_c=18.0)]


def clock(call, *args):
    """Result and seconds of processor time."""
    start = time.process_time()
    out = call(*args)
    return out, time.process_time() - start


def shell_seconds():
    """Least processor and wall time of the command on the demo plan, figures left out, of three runs."""
    command = [str(Path(sys.executable).with_name("aquabuf")), "dose", str(PLAN), "--no-figure"]
    best = []
    for _ in range(3):
        with tempfile.TemporaryDirectory() as folder:
            before, start = resource.getrusage(resource.RUSAGE_CHILDREN), time.perf_counter()
            subprocess.run([*command, "--out", folder + "/out"], check=True, stdout=subprocess.DEVNULL)
            after = resource.getrusage(resource.RUSAGE_CHILDREN)
            best.append((after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime, time.perf_counter() - start))
    return min(best)


def main(hours=HOURS):
    """All figures."""
    print("one plan from the shell: {:.2f} s of processor, {:.2f} s by the clock (goal 1.5)".format(*shell_seconds()))
    values = raw_water(hours)
    raw, _ = stream_of(values)
    for name, wanted in WORKS.items():
        steps = works(wanted)
        train, seconds = clock(run_train, raw, steps)
        _, looped = clock(lambda s=steps: [run_train(raw.take(np.array([k])), s) for k in range(LOOPED)])
        ratio = looped / LOOPED / (seconds / hours)
        found = train.feasible()
        after = train.passed[2].after
        off = max(np.abs((measured(after, [q])[q] - in_house(find_quantity(q), v)) * find_quantity(q).per_house)[found].max()
                  for q, v in wanted.items())
        print(f"{hours:,} rows, four steps, {name}: {seconds:.2f} s (goal 10), {ratio:.0f} times a loop over rows; "
              f"{100 * found.mean():.0f} % reached, within {off:.0e} of their unit (goal 1e-6)")


if __name__ == "__main__":
    main(*map(int, sys.argv[1:]))

"""Speed of the plant simulation, from scaled runs.

Run by hand: `python tests/bench/bench_tank.py [steps]`. Three stages with noise, scatter, dead times and an inflow that
changes every 5 min. Goals: 30 days at 5 s (518,400 steps) with 200 cases in 120 s on two cores, which is about 230
microseconds per step and 100 cases; one case well below 60 s.
"""

import sys
from time import perf_counter

import numpy as np

from aquabuf.assess.tank.control import Controller, simc, tank_loop
from aquabuf.assess.tank.monte import Bands, TimeRule, monte_carlo
from aquabuf.assess.tank.simulate import Feeder, Inflow, Probe, Tank, simulate, step_for
from aquabuf.engine.readout import GRID_PH, MetalTable, Readout

FLOW, STEP, MONTH = 10.0, 5.0, 518_400
AMOUNTS = np.array([0.01, 0.001])


def readout(metals=0):
    """Acetic acid and carbonate, with some metals in the first."""
    acetate = 1.0 / (1.0 + 10.0 ** (4.756 - GRID_PH))
    first, second = 10.0 ** (GRID_PH - 6.352), 10.0 ** (2.0 * GRID_PH - 6.352 - 10.329)
    h = 10.0**-GRID_PH
    tables = tuple(MetalTable(f"metal {m}", 2, 3, 10.0 ** (11.0 - m) * h**2, 10.0**-17.0 / h, np.array([0.1, 0.0]))
                   for m in range(metals))
    return Readout(1.0, 1e-14, np.array([acetate, (first + 2.0 * second) / (1.0 + first + second)]), tables)


def stage(table, setpoint, volume, largest, dissolution=None):
    """A tank tuned by SIMC on the demand axis."""
    mixing = volume / FLOW * 3600.0 / 20.0
    loop = tank_loop(volume, FLOW, mixing_dead_s=mixing, line_dead_s=10.0, probe_lag_s=10.0, sample_s=STEP,
                     dissolution_per_min=dissolution)
    tuning = simc(loop, 1.0 / (1000.0 * FLOW))
    controller = Controller(setpoint, tuning.gain, tuning.reset_s, "demand", GRID_PH,
                            table.base_at(GRID_PH, AMOUNTS[:, None]), flow_ref_m3_h=FLOW)
    base = Feeder(largest, 1.0, resolution=1e-3, repeatability=5e-3, turndown=100.0, line_dead_s=10.0,
                  dissolution_per_min=dissolution)
    acid = Feeder(largest, 1.0, resolution=1e-3, turndown=100.0, line_dead_s=10.0)
    return Tank(f"pH {setpoint}", volume, base=base, acid=acid, probe=Probe(10.0, 0.02, 0.0, mixing), controller=controller)


def plant(table, dissolution=None):
    """Three stages of unequal size."""
    return [stage(table, 4.5, 2.0, 300.0, dissolution), stage(table, 6.5, 2.5, 100.0), stage(table, 7.5, 3.0, 30.0)]


class Waste:
    """Flow, acid and buffers that change every 5 min."""

    def __init__(self, steps):
        self.times = np.arange(int(steps * STEP / 300.0) + 1) * 300.0

    def __call__(self, generator):
        """One case."""
        n = self.times.size
        normal = generator.standard_normal((4, n))
        return Inflow(self.times, FLOW * np.exp(0.2 * normal[0]), -0.01 * np.exp(0.3 * normal[1]),
                      AMOUNTS[:, None] * np.exp(0.3 * normal[2:]))


def one_run(name, table, tanks, cases, steps, step=STEP):
    """Time per step of one process."""
    drawn = [Waste(steps)(np.random.default_rng(c)) for c in range(cases)]
    inflow = Inflow(drawn[0].time_s, *(np.concatenate([getattr(d, a) for d in drawn], axis=-1)
                                       for a in ("flow_m3_h", "base_eq_l", "amounts")))
    begin = perf_counter()
    run = simulate(table, tanks, inflow, until_s=steps * step, dt_s=step, window=(6.0, 9.0), record_every_s=300.0)
    seconds = perf_counter() - begin
    print(f"{name:42s} {cases:4d} cases  {1e6 * seconds / steps:7.1f} us/step   30 days at 5 s: "
          f"{seconds / steps * MONTH:6.1f} s   balance {run.balance_error.max():.1e}")


def main(steps):
    """Each setting once."""
    plain, metals = readout(), readout(4)
    one_run("three stages", plain, plant(plain), 100, steps)
    one_run("three stages", plain, plant(plain), 1, steps)
    one_run("three stages, slow reagent", plain, plant(plain, 0.3), 100, steps)
    one_run("three stages, four metals", metals, plant(metals), 100, steps)
    level = Tank("equalization", 100.0, least_m3=20.0, out_m3_h=FLOW)
    one_run("equalization and three stages", plain, [level, *plant(plain)], 100, steps)
    begin = perf_counter()
    result = monte_carlo(plain, plant(plain), Waste(steps), cases=200, seed=1, until_s=steps * STEP, window=(6.0, 9.0),
                         rule=TimeRule(446.0, 60.0, "40 CFR 401.17, recalled"), bands=Bands(0.1, 0.1, 0.05), dt_s=STEP)
    seconds = perf_counter() - begin
    print(f"Monte Carlo, 200 cases in {result.processes} processes: {1e6 * seconds / steps:.1f} us/step; 30 days at 5 s: "
          f"{seconds / steps * MONTH:.0f} s; probability {result.probability:.3f} ({result.low:.3f} to {result.high:.3f})")
    step = step_for(plant(plain), FLOW)
    days3 = int(3 * 86_400 / step)
    begin = perf_counter()
    simulate(plain, plant(plain), Waste(1)(np.random.default_rng(0)), until_s=days3 * step, dt_s=step, window=(6.0, 9.0))
    print(f"3 days, 1 case, step_for {step:g} s: {perf_counter() - begin:.1f} s")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 10_000)

"""How a mixed tank flattens loads: closed forms against the facts, simulation and a general integrator."""

import numpy as np
import pytest
from even_steps import run
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from aquabuf.assess.tank.attenuation import (
    attenuation,
    sine_share,
    slug_peak,
    slug_peak_two_tanks,
    variance_share,
    variance_share_correlated,
    variance_share_end,
    variance_share_low,
)
from aquabuf.assess.tank.equalize import Draw, equalize
from aquabuf.assess.tank.profile import Profile, Variation
from aquabuf.errors import InputError
from aquabuf.tables import read_table


@pytest.mark.parametrize(("ratio", "simulated", "low"), [(0.05, 0.0246, 0.0244), (0.1, 0.0499, 0.0476), (0.2, 0.1008, 0.0909),
                                                         (0.5, 0.2448, 0.20), (1.0, 0.4608, 0.333)])  # fmt: skip
def test_variance_of_the_facts(ratio, simulated, low):
    """Simulated and low-side values of the facts, section 6.1 (computed there); the simulation was good to about 2 %."""
    assert_allclose(variance_share_end(ratio, 1.0), simulated, rtol=0.02)
    assert_allclose(variance_share_low(ratio, 1.0), low, rtol=3e-3)
    assert_allclose(variance_share(ratio, 1.0), ratio / 2)


def test_variance_by_simulation():
    """Check case 9: 0.0997 at the end of steps of 0.2 tau, through the tank itself; 6 standard errors."""
    n = 400
    base = np.random.default_rng(2).normal(size=(60 + 24, n))
    got = run(np.full((84, n), 5.0), base, Draw(0.0), volume_m3=25.0, start_base_eq_l=0.0).base_eq_l[60::24]
    assert_allclose(variance_share_end(0.2, 1.0), 0.0997, atol=5e-5)
    assert_allclose(got.var(), variance_share_end(0.2, 1.0), rtol=6 * np.sqrt(2 / got.size))


def test_correlated_loads_by_simulation():
    """Memory of 3 tau in fine steps: theta/(theta + tau) = 0.75; the low-side form is the memory of half a step."""
    z = Profile(time_s=np.arange(400) * 360.0, flow_m3_h=np.full(400, 2.0), strength=np.ones((1, 400)), step_s=360.0)
    noisy = np.log(z.cases(3000, 5, strength=(Variation(0.3, 3.0),)).strength[0])
    noisy = (noisy - noisy.mean()) / noisy.std()
    got = equalize(z.time_s, 360.0, z.flow_m3_h[:, None], noisy, np.ones((0, 400)), volume_m3=2.0, draw=Draw(),
                   start_base_eq_l=0.0).base_eq_l[-1]
    assert_allclose(got.var(), variance_share_correlated(3.0, 1.0), rtol=0.02 + 6 * np.sqrt(2 / 3000))
    assert variance_share_correlated(3.0, 1.0) == 0.75
    assert_allclose(variance_share_correlated(0.1, 1.0), variance_share_low(0.2, 1.0), rtol=1e-14)


@pytest.mark.parametrize(("d", "one", "two"), [(0.1, 0.0952, 0.0726), (0.5, 0.393, 0.352)])
def test_slug(d, one, two):
    """Facts, section 6.1: its value of two tanks is 1.2 % below the exact one; the exact peak by running two tanks finely."""
    assert_allclose(slug_peak(d, 1.0), one, atol=5e-4)
    assert_allclose(slug_peak_two_tanks(d, 1.0), two, rtol=0.013)
    a = 2.0
    def slope(t, y, into):
        return [a * (into - y[0]), a * (y[0] - y[1])]
    first = solve_ivp(slope, (0, d), [0, 0], args=(1.0,), rtol=1e-11, atol=1e-12)
    second = solve_ivp(slope, (d, 3), first.y[:, -1], args=(0.0,), rtol=1e-11, atol=1e-12, dense_output=True)
    assert_allclose(slug_peak_two_tanks(d, 1.0), second.sol(np.linspace(d, 3, 200_001))[1].max(), rtol=1e-8)


def test_slug_through_the_tank():
    """The tank itself gives 1 - exp(-d/tau)."""
    got = run([4.0, 4.0, 4.0], [0.0, 1.0, 0.0], Draw(0.0), volume_m3=8.0, start_base_eq_l=0.0)
    assert_allclose(got.base_eq_l.max(), slug_peak(1.0, 2.0), rtol=1e-14)


@pytest.mark.parametrize(("omega_tau", "one", "two"), [(10, 0.0995, 0.0385), (50, 0.0200, 0.0016)])
def test_sine(omega_tau, one, two):
    """Facts, section 6.1; and 1/|1 + i omega tau/n| to the n-th."""
    assert_allclose([sine_share(omega_tau), sine_share(omega_tau, 2)], [one, two], atol=5e-5)
    assert_allclose(sine_share(omega_tau, 3), abs(1 / (1 + 1j * omega_tau / 3)) ** 3, rtol=1e-13)


def test_attenuation_names_its_sources():
    """Every form with range and source; each row of the table is used."""
    rows = attenuation(2.0, step_h=0.4, correlation_h=1.0, slug_h=0.2)
    assert [r.name for r in rows] == [row["name"] for row in read_table("tank_attenuation")]
    assert all(r.source and r.range and r.mark for r in rows)
    by = {r.name: r.share for r in rows}
    assert_allclose(by["variance of the outflow"], 0.1)
    assert_allclose(by["sine"], 1 / np.hypot(1, 2 * np.pi * 2 / 24), rtol=1e-12)
    assert len(attenuation(2.0, step_h=0.4, period_h=None)) == 3
    with pytest.raises(InputError, match=r"tau must be above 0; found 0\. Correct it"):
        variance_share(1.0, 0.0)
    with pytest.raises(InputError, match=r"the number of tanks must be 1 or more; found 0"):
        sine_share(1.0, 0)

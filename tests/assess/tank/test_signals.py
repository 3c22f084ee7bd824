"""Dead times, probes, feeders and noise against their definitions."""

import numpy as np
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.tank.equipment import Feeder, Probe, Tank
from aquabuf.assess.tank.signals import Delay, FeederAction, Noise, Probes


def test_dead_time_shifts_each_row_by_its_own_steps():
    """Rows late by 0, 1 and 3 steps; before the start they show the start."""
    delay = Delay(np.array([0, 1, 3]), np.full((3, 1), -1.0))
    seen = np.array([delay.pass_on(np.full((3, 1), float(k)))[:, 0].copy() for k in range(6)])
    assert_array_equal(seen.T, [[0, 1, 2, 3, 4, 5], [-1, 0, 1, 2, 3, 4], [-1, -1, -1, 0, 1, 2]])


def test_probe_is_a_lag_with_offset_and_noise():
    """A step shows 1 - exp(-t/lag) of itself; then offset and noise are added; a stuck probe keeps its reading."""
    probes = Probes([Tank("one", 1.0, probe=Probe(lag_s=20.0, noise_ph=0.1, offset_ph=0.3))], np.array([[7.0]]), 5.0)
    for _ in range(4):
        probes.follow(np.array([[8.0]]))
    shown = 7.0 + (1.0 - np.exp(-1.0)) + 0.3
    assert_allclose(probes.read(np.array([[2.0]]), None), shown + 0.2, rtol=1e-12)
    assert_allclose(probes.read(np.array([[-2.0]]), np.array([[True]])), shown + 0.2, rtol=1e-12)
    assert_allclose(probes.read(np.array([[-2.0]]), np.array([[False]])), shown - 0.2, rtol=1e-12)


def test_feeder_steps_limits_and_least():
    """Largest 200, steps of 1 %, turndown 20: rounds to 2, stops at 200, is off below 10; acid is the mirror image."""
    action = FeederAction([[Feeder(200.0, 1.0, resolution=0.01, turndown=20.0)], [Feeder(200.0, 1.0)]], (1, 6))
    asked = np.array([[0.0, 9.4, 10.9, 11.1, 999.0, -33.3]])
    out = action.deliver(asked, np.zeros((2, 1, 6)))
    assert_allclose(out[0, 0], [0.0, 10.0, 10.0, 12.0, 200.0, 0.0], rtol=1e-12)
    assert_allclose(out[1, 0], [0.0, 0.0, 0.0, 0.0, 0.0, 33.3], rtol=1e-9)
    assert_allclose(action.deliver(np.full((1, 6), 8.9), np.zeros((2, 1, 6)))[0], 0.0, atol=0.0)


def test_feeder_scatter_is_a_share_of_the_flow():
    """Plus or minus 2 % of what is asked."""
    action = FeederAction([[Feeder(200.0, 1.0, repeatability=0.02)], [None]], (1, 3))
    out = action.deliver(np.full((1, 3), 50.0), np.array([[[-1.0, 0.0, 1.0]], [[0.0, 0.0, 0.0]]]))
    assert_allclose(out[0], [[49.0, 50.0, 51.0]], rtol=1e-12)


def test_noise_has_its_size_and_a_case_its_own_stream():
    """Standard normal and even draws; case 7 is the same alone and among others."""
    many, alone = Noise(5, range(4, 9), 2, normal=True, even=True), Noise(5, [7], 2, normal=True, even=True)
    normals, evens = [], []
    for _ in range(1500):
        n, e = many.next()
        n1, e1 = alone.next()
        assert_array_equal(n[:, 3:4], n1)
        assert_array_equal(e[..., 3:4], e1)
        normals.append(n.copy())
        evens.append(e.copy())
    normals, evens = np.array(normals), np.array(evens)
    assert_allclose([normals.mean(), normals.std()], [0.0, 1.0], rtol=0, atol=0.03)
    assert_allclose([evens.mean(), evens.std(), np.abs(evens).max()], [0.0, 3.0**-0.5, 1.0], rtol=0, atol=0.02)
    assert abs(np.corrcoef(normals[:, 0, 0], normals[:, 0, 1])[0, 1]) < 0.1

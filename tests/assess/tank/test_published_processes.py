"""Published neutralization processes set up from their numbers and run by the simulator (all values recalled by the facts).

Chemistry is ideal with the constants of each source; the tables of the readout are closed forms written here.
"""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.simulate import Feeder, Inflow, Tank, simulate
from aquabuf.engine.readout import GRID_PH, Readout

KW = 1e-14
MINUTE, HOUR = 60.0, 3600.0
WINDOW = (6.0, 9.0)
BARE = Readout(1.0, KW, np.zeros((0, GRID_PH.size)))


def carbonate(pk1, pk2, ph=GRID_PH):
    """Base that a mole of carbon has taken up: bicarbonate and twice carbonate."""
    first, second = 10.0 ** (ph - pk1), 10.0 ** (2.0 * ph - pk1 - pk2)
    return (first + 2.0 * second) / (1.0 + first + second)


# ---------------------------------------------------------------- Henson & Seborg 1994

PK1, PK2 = 6.35, 10.25
Q1, Q2, Q3 = 16.6, 0.55, 15.55            # acid, buffer, base [mL/s]
WA = (3.00e-3, -3.00e-2, -3.05e-3)        # [mol/L]
WB = (0.0, 3.00e-2, 5.00e-5)
VOLUME_ML = 207.0 * 14.0                  # area times level; the level is held constant here
M3_H = HOUR * 1e-6                        # of 1 mL/s
CARBON = Readout(1.0, KW, carbonate(PK1, PK2)[None])


def henson_seborg(q3, *, q2=Q2, start_base=None, until_s=40 * 88.62, dt_s=10.0, **more):
    """The main tank with constant feeds; one case per base flow."""
    q3 = np.atleast_1d(np.asarray(q3, dtype=float))
    q = Q1 + q2
    inflow = Inflow([0.0], [q * M3_H], [-(Q1 * WA[0] + q2 * WA[1]) / q], [[(Q1 * WB[0] + q2 * WB[1]) / q]])
    inflow = Inflow([0.0], np.full((1, q3.size), q * M3_H), inflow.base_eq_l, inflow.amounts)
    base = Feeder(largest_eq_h=1.0, normality_eq_l=-WA[2], carbon_mol_eq=WB[2] / -WA[2])
    tank = Tank("main", VOLUME_ML * 1e-6, base=base, fixed_eq_h=q3 * 3.6 * -WA[2], start_base_eq_l=start_base, **more)
    return simulate(CARBON, [tank], inflow, until_s=until_s, dt_s=dt_s, window=WINDOW, carbon_carrier=0, record_every_s=dt_s)


@pytest.mark.parametrize("start", [None, -3e-3, 1e-3])
def test_henson_seborg_steady_states(start):
    """pH over base flow, section 2.1 of the facts; from rest, from acid and from base."""
    q3 = [0, 5, 10, 12, 14, 15, 15.55, 15.60, 16, 16.5, 17, 18, 20, 30]
    expected = [2.712, 3.089, 3.976, 5.737, 6.432, 6.764, 7.0002, 7.0258, 7.279, 7.957, 8.991, 9.558, 10.011, 10.750]
    run = henson_seborg(q3, start_base=start)
    assert_allclose(run.ph[0, -1], expected, rtol=0, atol=1e-3)


def test_henson_seborg_invariants():
    """Wa4 -4.320e-4 at q3 = 15.55; pH 4.131 without buffer flow: check case 1 of the facts."""
    assert_allclose(henson_seborg(Q3).base_eq_l[0, -1, 0], 4.3203e-4, rtol=1e-3)
    assert_allclose(henson_seborg(Q3, q2=0.0).ph[0, -1, 0], 4.131, rtol=0, atol=2e-3)


def test_henson_seborg_gain_and_buffer():
    """0.5030 pH per mL/s, equal to -(dWa + a dWb)/beta; beta 1.8295e-4 eq/L/pH; 9.993 without buffer: section 2.1."""
    q = Q1 + Q2 + Q3
    wa, wb = (sum(f * w for f, w in zip((Q1, Q2, Q3), v, strict=True)) / q for v in (WA, WB))
    ph = henson_seborg([Q3 - 1e-3, Q3 + 1e-3]).ph[0, -1]
    beta = CARBON.buffer_at(7.0002, [wb])
    a = float(carbonate(PK1, PK2, 7.0002))
    assert_allclose(beta, 1.8295e-4, rtol=5e-3)
    assert_allclose((ph[1] - ph[0]) / 2e-3, 0.5030, rtol=5e-3)
    assert_allclose(-((WA[2] - wa) + a * (WB[2] - wb)) / q / beta, 0.5030, rtol=5e-3)
    unbuffered = henson_seborg([16.550 - 1e-3, 16.550 + 1e-3], q2=0.0).ph[0, -1]
    assert_allclose((unbuffered[1] - unbuffered[0]) / 2e-3, 9.993, rtol=1e-2)


def test_henson_seborg_lag():
    """Base approaches its end as exp(-t/88.62 s): tau = A h / q of section 2.1, at constant level."""
    run = henson_seborg(Q3, start_base=0.0, until_s=400.0, dt_s=4.0)
    base = run.base_eq_l[0, :, 0]
    left = 1.0 - base / 4.3203e-4
    assert_allclose(left[[10, 25, 50]], np.exp(-run.time_s[[10, 25, 50]] / 88.62), rtol=2e-3)


def test_linear_output_is_zero_at_the_set_point():
    """Wright & Kravaris 1991: Y is base to the set point; at the steady state -3.2e-8 with a(7.0) = 0.81762 (facts 2.3).

    H+ and OH- cancel at pH 7, so Y = Wa + a Wb.
    """
    assert_allclose(carbonate(PK1, PK2, 7.0), 0.81762, rtol=1e-5)
    q = Q1 + Q2 + Q3
    wb = sum(f * w for f, w in zip((Q1, Q2, Q3), WB, strict=True)) / q
    assert_allclose(CARBON.base_at(7.0, [wb]) - henson_seborg(Q3).base_eq_l[0, -1, 0], -3.2e-8, rtol=0, atol=5e-9)


def test_linear_output_is_linear_in_the_reagent():
    """V dY/dt = F (Yin - Y) - u N with reagent flow left out, as they do: responses add, those of pH do not."""
    feeds = np.array([0.0, 4.0, 8.0, 12.0])
    tank = Tank("one", 1.0, base=Feeder(100.0, np.inf), fixed_eq_h=feeds, start_base_eq_l=-0.012, start_amounts=(2e-3,))
    inflow = Inflow([0.0], np.full((1, 4), 1.0), [-0.01], [[2e-3]])
    run = simulate(CARBON, [tank], inflow, until_s=2 * HOUR, dt_s=30.0, window=WINDOW, record_every_s=600.0)
    y = run.base_eq_l[0] - run.base_eq_l[0][:, :1]
    time_h = run.time_s / HOUR
    assert_allclose(y[:, 1:], feeds[1:] * 1e-3 * (1.0 - np.exp(-time_h))[:, None], rtol=1e-9, atol=1e-15)
    ph = run.ph[0] - run.ph[0][:, :1]
    assert abs(ph[-1, 3] / ph[-1, 1] - 3.0) > 0.1


# ---------------------------------------------------------------- McAvoy, Hsu & Lowenthal 1972

KA = 1.8e-5
ACETATE = Readout(1.0, KW, (KA / (KA + 10.0**-GRID_PH))[None])


def mcavoy(f2_l_min, start_base=-0.3):
    """Acetic acid 0.3178 M at 81 L/min, NaOH 0.05 M, 1000 L: set A of the facts."""
    f2 = np.atleast_1d(np.asarray(f2_l_min, dtype=float))
    tank = Tank("one", 1.0, base=Feeder(1e5, 0.05), fixed_eq_h=f2 * 60.0 * 0.05, start_base_eq_l=start_base,
                start_amounts=(0.0,))
    inflow = Inflow([0.0], np.full((1, f2.size), 81.0 * 0.06), [0.0], [[0.3178]])
    return simulate(ACETATE, [tank], inflow, until_s=60 * MINUTE, dt_s=6.0, window=WINDOW, record_every_s=6.0)


def test_mcavoy_steady_state_and_lag():
    """pH 7.0013, sodium 0.043170 mol/L, tau 1.686 min (section 2.2)."""
    run = mcavoy(512.0)
    base = run.base_eq_l[0, :, 0]
    assert_allclose(run.ph[0, -1, 0], 7.0013, rtol=0, atol=5e-4)
    assert_allclose(base[-1], 0.043170, rtol=2e-5)
    i = 17
    assert_allclose(-run.time_s[i] / np.log((base[i] - base[-1]) / (base[0] - base[-1])) / MINUTE, 1.686, rtol=1e-3)


@pytest.mark.parametrize(("f2", "slope"), [(300.0, 0.0035), (512.0, 0.154), (514.83, 3.71)])
def test_mcavoy_slopes(f2, slope):
    """pH per L/min, a thousandfold apart (section 2.2, given to two or three figures)."""
    half = 1e-4 if slope > 1.0 else 0.05
    ph = mcavoy([f2 - half, f2 + half]).ph[0, -1]
    assert_allclose((ph[1] - ph[0]) / (2.0 * half), slope, rtol=0.02)


# ---------------------------------------------------------------- strong acid with strong base, section 2.4

ROWS = {45: 3.037, 49: 3.740, 49.9: 4.740, 49.99: 5.739, 50: 7.000, 50.01: 8.261, 50.1: 9.260, 51: 10.259, 55: 10.955,
        49.99456: 6.0, 50.05500: 9.0}


def test_strong_acid_and_base_run_to_steady_state():
    """HCl 0.01 M at 500 L/min, NaOH 0.1 M, 20 m3 of raw acid at the start: the rows of section 2.4 after 25 lags."""
    f2 = np.array(list(ROWS))
    tank = Tank("one", 20.0, base=Feeder(1e4, 0.1), fixed_eq_h=f2 * 60.0 * 0.1, start_base_eq_l=-0.01)
    inflow = Inflow([0.0], np.full((1, f2.size), 30.0), [-0.01], np.zeros((0, 1)))
    run = simulate(BARE, [tank], inflow, until_s=25 * 36.36 * MINUTE, dt_s=30.0, window=WINDOW, record_every_s=30.0)
    assert_allclose(run.ph[0, -1], list(ROWS.values()), rtol=0, atol=2e-3)
    at_50 = run.base_eq_l[0, :, 4]
    assert_allclose(-run.time_s[40] / np.log(at_50[40] / at_50[0]) / MINUTE, 36.36, rtol=1e-3)

"""The simple lake form: what a lake keeps back, the whole balance on every edge of the function, and the way back in."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.simple_lake import (
    NITROGEN_VELOCITIES_M_YR,
    REASONS,
    SULFUR_VELOCITY_M_YR,
    at_both_ends,
    lake_share,
    load_function,
    position,
    retained_share,
)

CATCHMENT, LAKE, RUNOFF, SINK = 2e6, 0.16e6, 0.6, 0.030  # m2, m2, m/yr, eq/m2/yr
BC0, LIMIT = 90e-6, 20e-6                                # eq/L
LOAD = 1000.0 * RUNOFF * (BC0 - LIMIT)                   # 0.042 eq/m2/yr


def outflow_anc(sulfur, nitrogen, s_s, s_n):
    """ANC of the outflow in eq/L, by the amounts that enter and leave in a year.

    Land and lake get the deposition of their area; the sink of the whole catchment is taken from nitrogen; of what reaches
    the lake, c Q A leaves with the water and c s A_lake (1000 L/m3) goes to the bed.
    """
    concentrations = []
    for entering, velocity in ((sulfur * CATCHMENT, s_s), (max(nitrogen - SINK, 0.0) * CATCHMENT, s_n)):
        concentrations.append(entering / (1000.0 * (RUNOFF * CATCHMENT + velocity * LAKE)))
    return BC0 - sum(concentrations)


def function(load=LOAD, s_n=5.0, sink=SINK, share=LAKE / CATCHMENT):
    """Critical load function of the lake above."""
    return load_function(load, sink, RUNOFF, share, nitrogen_velocity_m_yr=s_n)


# ------------------------------------------------------------------ shares


def test_velocities_are_the_published_ones():
    """0.5 m/yr for sulfate, 5 to 6.5 m/yr for nitrate (recalled with the method)."""
    assert (SULFUR_VELOCITY_M_YR, NITROGEN_VELOCITIES_M_YR) == (0.5, (5.0, 6.5))


def test_share_of_the_lake():
    """A lake is part of its catchment: 0.08; no lake 0; more lake than catchment, or no area, is nan."""
    assert_allclose(lake_share([LAKE, 0.0, 3e6, 1.0, -1.0, np.nan], [CATCHMENT, 1e6, 2e6, 0.0, 1e6, 1e6]),
                    [0.08, 0.0, np.nan, np.nan, np.nan, np.nan], rtol=1e-14)


def test_retained_share_by_hand():
    """s r = Q keeps half; 0.5 x 0.08 to the bed against 0.6 in the water; none without a lake; nan without runoff."""
    assert_allclose(retained_share([5.0, 0.5, 5.0, 5.0, 5.0], [0.4, 0.6, 0.6, 0.0, np.nan], [0.08, 0.08, 0.0, 0.08, 0.08]),
                    [0.5, 0.04 / 0.64, 0.0, np.nan, np.nan], rtol=1e-14)


def test_retained_share_leaves_the_same_as_the_balance():
    """1 - rho is the share of a year's sulfur that runs off, in amounts."""
    per_year = 0.05 * CATCHMENT
    concentration = per_year / (RUNOFF * CATCHMENT + 0.5 * LAKE)
    assert_allclose(1.0 - retained_share(0.5, RUNOFF, 0.08), concentration * RUNOFF * CATCHMENT / per_year, rtol=1e-14)


# ------------------------------------------------------------------ the function


@pytest.mark.parametrize("s_n", NITROGEN_VELOCITIES_M_YR)
@pytest.mark.parametrize("part", np.linspace(0.0, 1.0, 6))
def test_every_point_of_the_edge_leaves_the_outflow_at_the_limit(part, s_n):
    """Flat edge below the sink, slope from there to no sulfur: by the whole balance of the lake the ANC is the limit."""
    f = function(s_n=s_n)
    flat = (f.sulfur_max, part * SINK)
    slope = ((1.0 - part) * f.sulfur_max, f.nitrogen_min + part * (f.nitrogen_max - f.nitrogen_min))
    for pair in (flat, slope):
        assert_allclose(outflow_anc(*pair, 0.5, s_n), LIMIT, rtol=1e-12)


def test_corners_by_hand():
    """Load over what runs off: 0.042 x 0.64/0.6 and 0.030 + 0.042 x (0.6 + 5 x 0.08)/0.6."""
    f = function()
    assert_allclose([f.sulfur_max, f.nitrogen_min, f.nitrogen_max], [0.0448, 0.030, 0.100], rtol=1e-12)


def test_without_a_lake_it_is_the_plain_sum():
    """Sulfur and leached nitrogen count in full."""
    f = function(share=0.0)
    assert_allclose([f.sulfur_max, f.nitrogen_max - f.nitrogen_min], [LOAD, LOAD], rtol=1e-14)


# ------------------------------------------------------------------ the position


@pytest.mark.parametrize(("sulfur", "nitrogen"), [(0.04, 0.01), (0.04, 0.09), (0.0, 0.099), (0.05, 0.0), (0.02, 0.2),
                                                  (0.06, 0.12), (0.0447, 0.029), (0.03, 0.05)])
def test_excess_is_what_the_balance_says(sulfur, nitrogen):
    """Excess = runoff times how far the ANC of the outflow is below its limit; outside where that is above zero."""
    at = position(function(), sulfur, nitrogen)
    below = LIMIT - outflow_anc(sulfur, nitrogen, 0.5, 5.0)
    assert_allclose(at.excess, 1000.0 * RUNOFF * below, rtol=1e-9)
    assert bool(at.outside) == (below > 0.0)


def test_a_cut_leads_to_the_edge_and_no_further():
    """Less the cut, the ANC of the outflow is its limit, along either axis."""
    at = position(function(), 0.040, 0.060)
    assert at.sulfur_cut > 0.0
    assert at.nitrogen_cut > 0.0
    assert_allclose([outflow_anc(0.040 - at.sulfur_cut, 0.060, 0.5, 5.0), outflow_anc(0.040, 0.060 - at.nitrogen_cut, 0.5, 5.0)],
                    LIMIT, rtol=1e-12)


WORDS = {"": "", "S": REASONS["sulfur"], "N": REASONS["nitrogen"], "SN": f"{REASONS['sulfur']}; {REASONS['nitrogen']}",
         "L": REASONS["out_of_reach"]}
# load, sulfur, nitrogen: whether a cut of S, of N alone does, and the reason. CLmax(S) 0.0448, CLmax(N) 0.100.
CASES = [
    (LOAD, 0.040, 0.030, False, True, True, ""),
    (LOAD, 0.0449, 0.0, True, True, False, "N"),
    (LOAD, 0.0, 0.101, True, False, True, "S"),
    (LOAD, 0.040, 0.060, True, True, True, ""),
    (LOAD, 0.0449, 0.101, True, False, False, "SN"),
    (-0.001, 0.0, 0.0, True, False, False, "L"),
    (0.0, 0.0, 0.030, False, True, True, ""),
]


@pytest.mark.parametrize(("load", "sulfur", "nitrogen", "outside", "by_sulfur", "by_nitrogen", "reason"), CASES)
def test_which_cut_is_enough_and_why_not(load, sulfur, nitrogen, outside, by_sulfur, by_nitrogen, reason):
    """nan where one alone does not do, with the reason; nothing to cut inside."""
    at = position(function(load=np.array([load])), sulfur, nitrogen)
    assert bool(at.outside[0]) is outside
    assert_array_equal(np.isfinite([at.sulfur_cut[0], at.nitrogen_cut[0]]), [by_sulfur, by_nitrogen])
    assert_array_equal([at.sulfur_cannot[0], at.nitrogen_cannot[0]], [not by_sulfur, not by_nitrogen])
    assert at.reason()[0] == WORDS[reason]
    if not outside:
        assert (at.sulfur_cut[0], at.nitrogen_cut[0]) == (0.0, 0.0)


def test_both_ends_of_the_range_for_nitrogen():
    """The slower uptake leaves more acid: at 0.2 of nitrogen above the sink, 0.2 x 0.6/(0.6 + 0.08 s) runs off."""
    low, high = at_both_ends(LOAD, SINK, RUNOFF, 0.08, 0.0, SINK + 0.2)
    assert_allclose([low.excess, high.excess], [0.2 * 0.6 / 1.0 - LOAD, 0.2 * 0.6 / 1.12 - LOAD], rtol=1e-12)
    assert low.excess > high.excess


def test_rows_and_draws():
    """(lakes, 1) with (lakes, draws) equals single calls; a missing reading is never outside and has no cut."""
    load = np.array([[0.02, 0.04, 0.06], [0.05, np.nan, -0.01]])
    sulfur, nitrogen = np.array([[0.03], [0.05]]), np.array([[0.05], [0.02]])
    at = position(function(load=load), sulfur, nitrogen)
    for i, j in np.ndindex(2, 3):
        one = position(function(load=load[i, j]), sulfur[i, 0], nitrogen[i, 0])
        for name in ("excess", "sulfur_cut", "nitrogen_cut", "outside", "sulfur_cannot", "nitrogen_cannot"):
            assert_array_equal(getattr(at, name)[i, j], getattr(one, name))
    assert not at.outside[1, 1]
    assert np.isnan([at.excess[1, 1], at.sulfur_cut[1, 1], at.nitrogen_cut[1, 1]]).all()
    assert (bool(at.sulfur_cannot[1, 1]), at.reason()[1, 1]) == (False, "")

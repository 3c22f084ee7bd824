"""How wastes come: shares, statistics of their common stream, courses that conserve flow and load."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from stream_texts import changed, reader

from aquabuf.assess.tank.arrivals import courses, design_course, mean_shares, statistics_of
from aquabuf.assess.tank.composition import Waste
from aquabuf.assess.tank.job import Arrival, Batch, Daily, Spread
from aquabuf.assess.tank.waste import chemistry
from aquabuf.errors import InputError

FLOW = 'flow = "6 m3/h"'
WASH = '[wastes.wash]\ntemperature = "25 °C"\nholds = { "caustic soda" = "0.4 g/L" }\nflow = "2 m3/h"\n[window]'


@pytest.fixture
def read(tmp_path):
    """Reads a text as a stream file."""
    return reader(tmp_path)


def arrival(mean, name="w", **more):
    """A waste that comes so."""
    return Arrival(waste=Waste(name=name, base_eq_l=-0.01), mean_m3_h=mean, **more)


def made(job):
    """The course a job is sized by, and its chemistry."""
    chem = chemistry(job.wastes)
    return design_course(job, chem), chem


def test_shares():
    """By mean volume; even where a flow is not known."""
    assert_allclose(mean_shares([arrival(6.0), arrival(2.0)]), [0.75, 0.25])
    assert_allclose(mean_shares([arrival(6.0), arrival(None)]), [0.5, 0.5])
    assert_allclose(mean_shares([arrival(None), arrival(None)]), [0.5, 0.5])


def test_statistics_add_up():
    """Means, least and largest flow of two steady wastes; the one without a largest adds its daily top."""
    s = statistics_of([arrival(6.0, least_m3_h=2.0, most_m3_h=10.0), arrival(2.0, daily=Daily(swing=0.5, peak_h=8.0))], 3.0)
    assert (s.mean_m3_h, s.least_m3_h, s.most_m3_h) == (8.0, 2.0, 13.0)
    assert_allclose([s.daily_amplitude, s.daily_peak_h], [1.0 / 8.0, 8.0])
    assert_allclose(s.shares, [0.75, 0.25])
    assert s.flow.relative_sd > 0.0
    steady = statistics_of([arrival(6.0)], 3.0)
    assert (steady.flow.relative_sd, steady.most_m3_h) == (0.0, np.inf)


def test_opposite_daily_cycles_cancel():
    """Vectors: equal swings twelve hours apart give none; a quarter turn apart the root of the squares, in between."""
    a, b = (arrival(5.0, daily=Daily(swing=0.4, peak_h=p)) for p in (6.0, 18.0))
    assert_allclose(statistics_of([a, b], 1.0).daily_amplitude, 0.0, atol=1e-12)
    c = arrival(5.0, daily=Daily(swing=0.4, peak_h=12.0))
    s = statistics_of([a, c], 1.0)
    assert_allclose([s.daily_amplitude, s.daily_peak_h], [0.4 / np.sqrt(2.0), 9.0])


def test_largest_flow_is_passed_one_percent_of_the_time():
    """Log-normal: ln(most/mean) = z s - s^2/2 with z = 2.3263 (normal table); 1 % of draws lie above."""
    s = statistics_of([arrival(6.0, most_m3_h=10.0)], 3.0)
    log_sd = np.sqrt(np.log1p(s.flow.relative_sd**2))
    assert_allclose(2.3263 * log_sd - 0.5 * log_sd**2, np.log(10.0 / 6.0), rtol=1e-4)
    daily = statistics_of([arrival(6.0, most_m3_h=10.0, daily=Daily(swing=0.2, peak_h=1.0))], 3.0)  # from the top of the day
    log_sd = np.sqrt(np.log1p(daily.flow.relative_sd**2))
    assert_allclose(2.3263 * log_sd - 0.5 * log_sd**2, np.log(10.0 / 7.2), rtol=1e-4)


def test_cycle_that_reaches_the_largest_flow_leaves_no_noise():
    """6 m3/h with a swing of half is 9 at its top."""
    s = statistics_of([arrival(6.0, most_m3_h=9.0, daily=Daily(swing=0.5, peak_h=1.0))], 3.0)
    assert s.flow.relative_sd == 0.0
    with pytest.raises(InputError, match=r"daily cycle must stay within least and most flow, 0 to 8 m3/h; found 3 to 9 m3/h"):
        statistics_of([arrival(6.0, most_m3_h=8.0, daily=Daily(swing=0.5, peak_h=1.0))], 3.0)


def test_steps_do_not_outlast_the_course():
    """A course of half an hour has steps of half an hour at most."""
    assert statistics_of([arrival(6.0)], 0.5 / 24.0, step_h=1.0).step_h == 0.5


BATCH = Batch(size_m3=6.0, every_h=8.0, over_h=0.5, first_h=1.0)


def test_dumps_and_spread():
    """Each waste keeps its number, size, times and spread."""
    s = statistics_of([arrival(4.0), arrival(0.75, batch=BATCH, spread=Spread(relative_sd=0.3, lasting_h=2.0))], 2.0)
    (dump,) = s.dumps
    assert (dump.waste, dump.size_m3, dump.every_h, dump.lasts_h, dump.first_h) == (1, 6.0, 8.0, 0.5, 1.0)
    assert (s.mean_m3_h, s.shares) == (4.0, (1.0, 0.0))
    assert [(v.relative_sd, v.correlation_h) for v in s.strength] == [(0.0, 0.0), (0.3, 2.0)]


def test_batches_alone_bring_their_volume(read):
    """42 dumps of 6 m3 in two weeks, and a millionth of that beside them; strength is that of the waste while it flows."""
    job = read(changed((FLOW, 'batch = { size = "6 m3", every = "8 h", over = "30 min", first = "1 h" }')))
    course, chem = made(job)
    assert_allclose(course.volume_m3.sum(), 42 * 6.0, rtol=1e-5)
    assert_allclose(course.duration_s, 14 * 86400.0)
    load = (course.base(chem.base_eq_l) * course.volume_m3).sum()
    assert_allclose(load, 42 * 6.0 * -2 * 0.98 / 98.079, rtol=1e-4)  # keq: sulfuric acid, two each
    assert_allclose(course.flow_m3_h.max(), 12.0, rtol=1e-3)


def test_two_wastes_conserve_each_load(read):
    """Mean base of the stream is that of its wastes by volume."""
    job = read(changed(("[window]", WASH)))
    course, chem = made(job)
    mean = (course.base(chem.base_eq_l) * course.volume_m3).sum() / course.volume_m3.sum()
    assert_allclose(mean, (6.0 * -2 * 0.98 / 98.079 + 2.0 * 0.4 / 39.997) / 8.0, rtol=1e-4)
    assert "drawn for 14 days from the statistics of the wastes, seed 1" in course.source


def test_measured_course(read):
    """Flow and strength of the table; load by hand: 4 x 1 + 8 x 0.5 + 6 x 2 = 20 m3 of the waste as stated."""
    job = read(changed() + '[profile]\nfile = "flows.csv"\n')
    course, chem = made(job)
    assert_array_equal(course.flow_m3_h, [4.0, 8.0, 6.0])
    assert_allclose((course.base(chem.base_eq_l) * course.volume_m3).sum(), 20.0 * chem.base_eq_l[0], rtol=1e-9)


def test_measured_course_is_repeated_to_the_length_asked(read):
    """Three hours sixteen times in two days; its last repetition is like its first; noise keeps the mean of strength."""
    job = read(changed((FLOW, FLOW + '\nstrength = { spread = "20 %", lasting = "30 min" }')) + '[profile]\nfile = "flows.csv"\n')
    chem = chemistry(job.wastes)
    cases = courses(job, chem, 400)
    assert cases.flow_m3_h.shape == (48, 400)
    assert_allclose(cases.flow_m3_h[:, 0], np.tile([4.0, 8.0, 6.0], 16))
    assert_allclose(np.diff(cases.time_s), 3600.0)
    once = np.tile([1.0, 0.5, 2.0], 16)
    assert_allclose(cases.strength[0].mean(axis=1) / once, 1.0, atol=0.05)
    assert_allclose(np.std(cases.strength[0] / once[:, None]), 0.2, rtol=0.05)


def test_a_long_profile_is_not_cut(read):
    """One hour of simulation still has the whole table."""
    job = read(changed() + '[profile]\nfile = "flows.csv"\n[simulate]\ndays = "1 h"\n')
    assert courses(job, chemistry(job.wastes), 1).flow_m3_h.shape == (3, 1)


def test_measured_shares_of_two_wastes(read):
    """Columns for each waste are amounts where no mean flow is known; with flows they multiply its share, and that is told."""
    two = changed(("[window]", WASH)).replace('flow = "2 m3/h"\n', "").replace(FLOW + "\n", "")
    job = read(two + '[profile]\nfile = "two.csv"\n')
    assert_allclose(made(job)[0].strength, [[1.0, 0.5, 0.0], [0.0, 0.5, 1.0]])
    assert any("strength of each waste in the table is its share of the flow" in a for a in job.assumptions)
    known = changed(("[window]", WASH)) + '[profile]\nfile = "flows.csv"\n'
    assert_allclose(made(read(known))[0].strength, [[0.75, 0.375, 1.5], [0.25, 0.125, 0.5]])
    assert any("its share of the mean flows, times its strength" in a for a in read(known).assumptions)


def test_cases_are_drawn_anew(read):
    """Without a profile each case has its own noise, and the same seed the same draws."""
    job = read(changed((FLOW, FLOW + '\nmost = "10 m3/h"')))
    chem = chemistry(job.wastes)
    first, again = courses(job, chem, 3), courses(job, chem, 3)
    assert_array_equal(first.flow_m3_h, again.flow_m3_h)
    assert (first.flow_m3_h[:, 0] != first.flow_m3_h[:, 1]).any()
    assert first.flow_m3_h.shape[0] == 2 * 24 * 12
    assert first.flow_m3_h.max() <= 10.0

"""The figures of a simulated neutralization: courses, cases and failures are those of the trial."""

import sys
from dataclasses import replace
from pathlib import Path

import matplotlib
import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

sys.path.insert(0, str(Path(__file__).parent))

from drawn_page import lines, panel, patches, said
from made_designs import SIMULATED, WINDOW, axis, design_of, page_of, texts

from aquabuf.errors import InputError
from aquabuf.report.dose_page import PAGE_STYLE
from aquabuf.report.tank_figures import save_simulation, simulation_figure
from aquabuf.report.tank_time import brief, outside_runs, plot_last_ph


@pytest.fixture(autouse=True)
def _style():
    """Panels drawn alone look as on the page."""
    with matplotlib.rc_context(PAGE_STYLE):
        yield


@pytest.fixture(scope="module")
def run():
    """The page of a simulation, drawn once."""
    return lambda name: page_of(simulation_figure, name)


@pytest.mark.parametrize("name", SIMULATED)
def test_courses_are_those_of_the_trial(run, name):
    """pH and reagent of every stage at every recorded time, the flow as it was held."""
    found, figure = design_of(name), run(name)
    course, hours = found.trial.course, found.trial.course.time_s / 3600.0
    flow, _ = panel(figure, "Flow")
    assert_array_equal(np.unique(lines(flow, "_flow")[0][1]), np.unique(
        found.trial.inflow.flow_m3_h[found.trial.inflow.time_s <= hours[-1] * 3600.0, 0]))
    last, _ = panel(figure, f"pH of tank {len(found.layout.stages)}")
    assert_array_equal(lines(last, "_ph")[0], [hours, course.ph[-1, :, 0]])
    assert_allclose([p[2:] for p in patches(last, "_window")], [WINDOW])
    early = [ax for ax in figure.axes if ax.get_title(loc="left").startswith("pH ahead")]
    assert bool(early) == (len(found.layout.stages) > 1)
    for ax in early:
        assert_array_equal([x[1] for x in lines(ax, "_ph")], course.ph[:-1, :, 0])
    for k, stage in enumerate(found.layout.stages):
        ax, _ = panel(figure, f"Reagent to {stage.name}")
        assert_array_equal(lines(ax, "_rate")[0], [hours, course.reagent_eq_h[k, :, 0]])
        assert ax.get_ylabel() == "[eq/h]"


def test_strength_is_the_base_to_the_aim(run):
    """Base of the water at the aim less its own, as the chemistry of the design has it for a share of the waste."""
    found = design_of("one")
    ax, _ = panel(run("one"), "Strength")
    share = found.trial.inflow.amounts[0, 0, 0]
    wanted = found.basis.chem.demand(found.basis.aim_ph, [share])
    assert lines(ax, "_strength")[0][1, 0] == pytest.approx(float(wanted), rel=1e-9)


def test_time_outside_is_shaded_and_counted():
    """Each run between its first and last record outside; minutes and rule in words."""
    found = design_of("two")
    trial = found.trial
    ph = np.full_like(trial.course.ph, 7.5)
    ph[-1, 10:14], ph[-1, 20] = 9.5, 5.0
    course = replace(trial.course, ph=ph, outside_min=np.array([90.0]), longest_min=np.array([70.0]))
    ax = plot_last_ph(found, replace(trial, course=course), ax=axis())
    hours = course.time_s / 3600.0
    half = 0.5 * (hours[1] - hours[0])
    spans = [p[:2] for p in patches(ax, "_outside")]
    assert_allclose(spans, [(hours[10] - half, hours[13] + half), (hours[20] - half, hours[20] + half)])
    assert len(lines(ax, "_cross")) == 2
    title = ax.get_title(loc="left")
    ax = plot_last_ph(found, replace(trial, course=course), ax=axis(9.0))
    allowed = 446.0 * 0.1 / 31.0  # min of the rule by 40 CFR 401.17, over a tenth of a day of a month of 31
    assert ax.get_title(loc="left").endswith(f"RULE BROKEN, 90 min outside ({allowed:.2f} allowed), longest 70 min (60)")
    assert title.startswith("pH of tank 2, the last: RULE BROKEN")


def test_runs_outside():
    """None inside; ends counted; a run at the end of the record."""
    time = np.arange(6.0)
    assert outside_runs(time, np.full(6, 7.0), 6.0, 9.0) == []
    assert outside_runs(time, np.array([5.0, 5.0, 7.0, 9.1, 9.0, 9.5]), 6.0, 9.0) == [(0.0, 1.0), (3.0, 3.0), (5.0, 5.0)]


def test_cases_make_a_distribution_against_what_is_allowed(run):
    """Rises by one over the cases at each; upright lines at both limits of the rule."""
    found = design_of("two")
    ax, worst = panel(run("two"), "Time outside, all cases")
    monte = found.trial.monte
    for name, values, bound in (("total", monte.outside_min, monte.allowed_min), ("longest", monte.longest_min, 60.0)):
        x, share = lines(ax, f"_{name}")[0]
        assert_array_equal(x[1:-1], np.sort(values))
        assert_allclose(share[:-1], [0.0, 50.0, 100.0])
        assert lines(ax, f"_{name}_allowed")[0][0, 0] == bound
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("minutes", "share of cases [%]")
    assert_allclose([p[:2] for p in patches(worst, "_window")], [WINDOW])
    for name, values in (("lowest", monte.lowest_ph), ("highest", monte.highest_ph)):
        assert_array_equal(lines(worst, f"_{name}")[0][0][2:-1], np.sort(values))
    assert f"{100.0 * monte.probability:.0f} % of 2 cases keep both" in said(run("two"))


def test_without_cases_there_is_no_distribution(run):
    """Words in its place."""
    assert "No cases were asked for" in said(run("gas"))
    assert [ax for ax in run("gas").axes if "all cases" in ax.get_title(loc="left")] == []


@pytest.mark.parametrize("name", SIMULATED)
def test_failures_stand_at_the_minutes_they_take(run, name):
    """Crosses at the minutes to leave, rings for those that never do, pH in words."""
    ax, _ = panel(run(name), "Failures of 60 min")
    faults = design_of(name).trial.faults
    minutes = np.array([f.minutes_to_leave for f in faults])
    crosses, rings = lines(ax, "_leaves")[0], lines(ax, "_stays")[0]
    place = np.arange(len(faults))[::-1]
    assert_array_equal(crosses, [minutes[np.isfinite(minutes)], place[np.isfinite(minutes)]])
    assert_array_equal(rings[1], place[np.isnan(minutes)])
    for fault, words in zip(faults, texts(ax), strict=True):
        assert f"pH {fault.lowest_ph:.1f} to {fault.highest_ph:.1f}" in words
        assert ("stays inside" in words) == (not np.isfinite(fault.minutes_to_leave))
    assert [t.get_text() for t in ax.get_yticklabels()] == [f"{f.tank}: {f.kind}" for f in faults]


def test_no_simulation_no_figure():
    """Told why, and what to do: a design that was stopped, and one made without."""
    with pytest.raises(InputError, match=r"needs a design that nothing forbids; 'Rinse' was not simulated, as cyanide.*"
                                         r"Deal with that first"):
        simulation_figure(design_of("stopped"))
    with pytest.raises(InputError, match=r"'Rinse' was designed without one\. Design it with simulate=True"):
        save_simulation(design_of("sampled"), {})


def test_brief_numbers():
    """Three figures, no zeros that say nothing."""
    assert [brief(v) for v in (0.0, 60.0, 28.8, 446.4, 1234.0)] == ["0", "60", "28.8", "446", "1,230"]

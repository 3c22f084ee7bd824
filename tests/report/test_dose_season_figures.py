"""The season and the blend of a plan: each figure shows the figures of the answer, and its words keep their place."""

import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

sys.path.insert(0, str(Path(__file__).parent))

from dosing_plans import MISSED_ROWS, ROWS, UNREAD_ROWS, answer_of
from drawn_page import lines, overlaps, patches, said

from aquabuf.assess.plant.season import UNREAD
from aquabuf.errors import InputError
from aquabuf.report.dose_figures import (
    blend_figure,
    blends_of,
    save_blend,
    save_season,
    season_figure,
)
from aquabuf.report.dose_season import _band_words

KINDS = ("png", "svg", "pdf")


def test_season_and_blend_keep_their_words_apart():
    """The other two figures."""
    assert overlaps(season_figure(answer_of("season"))) == []
    assert overlaps(blend_figure(answer_of("blend"))) == []


def test_season_and_blend_write_their_files(tmp_path):
    """In every format, twice the same."""
    for save, name in ((save_season, "season"), (save_blend, "blend")):
        found = []
        for folder in ("a", "b"):
            paths = {kind: tmp_path / f"{folder}_{name}.{kind}" for kind in KINDS}
            save(answer_of(name), paths)
            found.append([p.read_bytes() for p in paths.values()])
        assert found[0] == found[1]
        assert [f[:4] for f in found[0]] == [b"\x89PNG", b"<?xm", b"%PDF"]


# ---------------------------------------------------------------- season


def test_season_shows_doses_with_their_band():
    """One panel per feed: the rows of the table, and 5 and 95 % of the rows that were found."""
    answer = answer_of("season")
    figure = season_figure(answer)
    for k, (product, step) in enumerate((("lime", "final pH"), ("gas", "final pH"))):
        ax = figure.axes[k]
        (x, dose), = lines(ax, "_dose")
        assert_array_equal(x, np.arange(1, ROWS + 1))
        table = answer.season.table[f"final_ph_{product}_mg_l_product"].to_numpy()
        assert_array_equal(dose, table)
        low, high = np.quantile(dose[np.isfinite(dose)], (0.05, 0.95))
        assert_allclose([lines(ax, f"_{end}_mg_l_product")[0][1, 0] for end in ("low", "high")], [low, high])
        assert ax.get_title(loc="left").startswith(f"{product} in {step}: {low:.3g} to {high:.3g} mg/L")
        assert ax.get_ylabel() == "product [mg/L]"


def test_season_marks_rows_that_are_missed_and_not_read():
    """Crosses and gray at the three rich days, a bar at the day without readings, a gap in every line."""
    figure = season_figure(answer_of("season"))
    for ax in figure.axes:
        assert_array_equal(lines(ax, "_crosses")[0][0], MISSED_ROWS)
        assert_array_equal(lines(ax, "_unread")[0][0], UNREAD_ROWS)
        assert [p[:2] for p in patches(ax, "_missed")] == [(MISSED_ROWS[0] - 0.5, MISSED_ROWS[-1] + 0.5)]
    gaps = np.isnan(lines(figure.axes[0], "_dose")[0][1])
    assert_array_equal(np.flatnonzero(gaps) + 1, sorted((*MISSED_ROWS, *UNREAD_ROWS)))
    assert "rows that cannot be met (3)" in said(figure)
    assert f"{UNREAD} (1)" in said(figure)


def test_season_shows_ph_against_its_window():
    """The step with the target in its band of 8.3 to 8.5, and the water at the tap beside it."""
    answer = answer_of("season")
    ax = season_figure(answer).axes[-1]
    assert_allclose([p[2:] for p in patches(ax, "_window")], [(8.3, 8.5)], rtol=0, atol=1e-9)
    ph, final = (lines(ax, label)[0][1] for label in ("_ph", "_final"))
    assert_array_equal(final, answer.season.table["final_ph"])
    met = ~np.isin(np.arange(1, ROWS + 1), (*MISSED_ROWS, *UNREAD_ROWS))
    assert_allclose(ph[met], 8.4, rtol=0, atol=1e-6)
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("row of raw water", "pH")


def test_a_plan_without_season_says_what_to_add():
    """It has none to draw."""
    with pytest.raises(InputError, match=r"needs readings; plan 'M' has none. Add readings = \"year.csv\" to its \[drift\]"):
        season_figure(answer_of("minimal"))


# ---------------------------------------------------------------- blends


def test_blend_shows_the_sweep_and_the_mean_that_is_wrong():
    """pH as solved; the straight mean between lake and well (2 to 3, as blended) and permeate, by hand."""
    answer = answer_of("blend")
    ax, below = blend_figure(answer).axes
    (share, ph), (_, mean) = lines(ax, "solved")[0], lines(ax, "mean of the pH values: wrong")[0]
    passed = answer.train.passed[0]
    sweep = passed.step.sweep(passed.before)
    assert_allclose(share, 100.0 * sweep.share)
    assert_array_equal(ph, sweep.ph[:, 0])
    rest = (0.3 * 7.3 + 0.2 * 8.1) / 0.5
    assert_allclose(mean, rest + (5.9 - rest) * sweep.share, rtol=0, atol=1e-9)
    assert np.interp(50.0, share, mean) == pytest.approx(float(passed.outcome.figures["mean_of_ph"][0]), abs=1e-9)
    assert [line.get_linestyle() for line in ax.lines if line.get_label().startswith("mean")] == ["--"]
    assert_allclose(lines(ax, "this plan: 50 %")[0][:, 0], [50.0, passed.outcome.figures["ph_after"][0]])
    assert ax.get_ylabel() == "pH"
    assert (below.get_xlabel(), below.get_ylabel()) == (
        "share of permeate in the blend [%]", "precipitation potential\n[mg/L as CaCO3]")


def test_blend_marks_the_worst_ratios():
    """Where the sweep of the answer deposits and dissolves most, said in words."""
    answer = answer_of("blend")
    figures = answer.train.passed[0].outcome.figures
    _, below = blend_figure(answer).axes
    marks = np.array([x[:, 0] for x in lines(below, "_worst")])
    wanted = [[figures[f"most_{what}_share_percent"][0], figures[f"most_{what}_ccpp_mg_l_caco3"][0]]
              for what in ("depositing", "dissolving")]
    wanted = [w for w in wanted if np.isfinite(w[0])]
    assert wanted
    assert_allclose(marks, wanted, rtol=1e-9)
    words = [t.get_text() for t in below.texts]
    assert f"dissolves most: {-wanted[-1][1]:.1f} mg/L at {wanted[-1][0]:.3g} %" in words


def test_a_plan_that_does_not_blend_says_so():
    """No step, or none of that name."""
    assert blends_of(answer_of("blend")) == ("tank",)
    with pytest.raises(InputError, match="needs a step that blends; plan 'M' has none"):
        blend_figure(answer_of("minimal"))
    with pytest.raises(InputError, match=r"plan 'Marrow Hill' has tank, not 'basin'\. Name one of them"):
        blend_figure(answer_of("blend"), "basin")


# ---------------------------------------------------------------- text


@pytest.mark.parametrize(("low", "high", "wanted"), [
    (4.34, 7.25, "4.34 to 7.25 mg/L in nine rows of ten"), (13.0, 13.0, "13 mg/L in nine rows of ten"),
    (0.0, 0.0, "none in nine rows of ten"), (0.0, 3.0, "0 to 3 mg/L in nine rows of ten"), (1890.0, 4916.3, "1,890 to 4,916 mg/L in nine rows of ten")])
def test_band_of_a_dose_in_words(low, high, wanted):
    """One dose throughout is no band, and no dose is none."""
    assert _band_words(low, high) == wanted

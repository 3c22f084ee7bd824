"""The demo titrations give back what went into them, and show what the pages say they show."""

import re
from pathlib import Path

import pandas as pd
import pytest
from click.testing import CliRunner
from numpy.testing import assert_allclose

from aquabuf.cli.main import main

ROOT = Path(__file__).parent.parent
DATA = ROOT / "field_data"
# µeq/L (µmol/kg at sea) that each curve was made with; BP-base and TW-effluent have weak acids that shift definitions
MADE = {"UT-base": 50, "CS-melt": -22, "KB-base": 2848, "QP-base": 2050, "TB-base": 1217, "TL-base": 1242, "DM-base": 1247, "R16-06": 1093}
MADE_SEA = {"A9_0.5": 2080, "A9_8.0": 2115, "A6_0.5": 1640}


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    """Both sets of demo titrations, assessed from the command line without figures."""
    folder = tmp_path_factory.mktemp("demo")
    text = {}
    for name in ("", "sea_"):
        done = CliRunner().invoke(main, ["titration", str(DATA / f"{name}titration_points.csv"), "--samples",
                                         str(DATA / f"{name}titration_samples.csv"), "--out", str(folder / f"o{name}"), "--figures", "0"])
        assert done.exit_code == 0, done.output
        text[name] = done.output
    return folder, text


def table(run, name="", file="alkalinity.csv"):
    """A table of a run by sample."""
    return pd.read_csv(run[0] / f"o{name}" / file).set_index("sample_id")


@pytest.mark.parametrize(("name", "truth"), MADE.items())
def test_results_give_back_what_was_put_in(run, name, truth):
    """Within 2.6 standard uncertainties, which one in a hundred misses."""
    r = table(run).loc[name]
    assert abs(r["recommended_ueq_l"] - truth) < 2.6 * r["recommended_u_ueq_l"]


@pytest.mark.parametrize(("name", "truth"), MADE_SEA.items())
def test_sea_water_by_mass_without_standards(run, name, truth):
    """Acid in excess after CO2 was swept out, in µmol/kg."""
    r = table(run, "sea_").loc[name]
    assert r["recommended_method"] == "acid_excess"
    assert abs(r["recommended_umol_kg"] - truth) < 2.6 * r["recommended_u_umol_kg"]
    assert r["recommended_u_umol_kg"] < 5.0


def test_methods_suit_the_waters(run):
    """Dilute by Gran, ordinary by the fit, effluent by its customary end point, none for what stops at pH 4.5."""
    method = table(run)["recommended_method"].fillna("")
    expected = {"UT-base": "gran", "CS-melt": "gran", "BP-base": "gran", "KB-base": "fit", "QP-base": "fit", "TL-base": "fit",
                "DM-base": "fit", "TW-effluent": "fixed_4_5", "SB-melt": "", "R16-20": ""}
    assert {name: method[name] for name in expected} == expected


@pytest.mark.parametrize(("name", "finding"), [
    ("CS-melt", "end point hides acid"), ("BP-base", "choice of points matters"), ("TB-base", "points swapped"), ("TL-base", "electrode offset"),
    ("SB-melt", "own method unfit"), ("R16-20", "strength doubtful")])
def test_each_slip_is_found(run, name, finding):
    """What the README of the data says was put in on purpose."""
    assert finding in table(run).loc[name, "warnings"].split("; ")


@pytest.mark.parametrize("name", ["UT-base", "KB-base", "QP-base", "DM-base", "R16-06"])
def test_sound_titrations_raise_nothing(run, name):
    """No finding where nothing was put in."""
    assert table(run)["warnings"].isna()[name]


def test_swapped_rows_are_named(run):
    """The finding points at the first of the two rows."""
    found = table(run, file="findings.csv").loc["TB-base"].set_index("finding")
    row = int(found.loc["points swapped", "point_row"])
    lines = (DATA / "titration_points.csv").read_text(encoding="utf-8").splitlines()
    first, second = (float(lines[k - 1].split(",")[3]) for k in (row, row + 1))
    assert lines[row - 1].startswith("TB-base")
    assert first < second, "pH rises here though acid was added"


def test_offset_put_into_the_electrode_is_found(run):
    """0.28 pH too low, and the alkalinity does not mind."""
    assert_allclose(table(run).loc["TL-base", "fit_offset_ph"], -0.28, atol=0.01)


def test_doubtful_strength_names_one_that_would_fit(run):
    """1.6 was written for 0.16; the cartridge factor of 1.01 is in the strength."""
    reason = table(run).loc["R16-20", "recommended_reason"]
    named = float(re.search(r"as ([0-9.]+) eq/L would", reason)[1])
    assert_allclose(named, 0.16, rtol=0.3)


def test_carbonate_water_by_rule_and_by_speciation(run):
    """The quarry pool holds carbonate; both ways of telling agree to a tenth of the alkalinity."""
    r = table(run).loc["QP-base"]
    assert r["partition_carbonate_ueq_l"] > 800
    assert_allclose(r["partition_carbonate_ueq_l"], r["species_carbonate_ueq_l"], atol=205)


def test_refused_with_reasons(run):
    """Five on purpose, each with its rule, and each a row of the table."""
    rejected, results = table(run, file="rejected.csv"), table(run)
    assert results.index[results["status"] == "refused"].tolist() == rejected.index.tolist() == [
        "X1-no-strength", "X2-one-point", "X3-slip", "X4-falls", "X5-mixed"]
    for name, words in (("X1-no-strength", "must be known"), ("X2-one-point", "2 points or more"), ("X3-slip", "0 to 14"),
                        ("X4-falls", "must not fall"), ("X5-mixed", "mixed units")):
        assert words in rejected.loc[name, "rule"]


def test_figures_of_the_page(run):
    """Numbers that docs/titration.md tells of the demo are those of the run."""
    text = (ROOT / "docs" / "titration.md").read_text(encoding="utf-8")
    r = table(run)
    assert f"tarn of {r.loc['UT-base', 'recommended_ueq_l']:.0f} µeq/L" in text
    assert f"would read {r.loc['UT-base', 'fixed_4_5_ueq_l']:.0f}" in re.sub(r"\s+", " ", text)
    assert f"acid ({r.loc['CS-melt', 'recommended_ueq_l']:.0f})" in text
    assert f"alkaline (+{r.loc['CS-melt', 'fixed_4_5_ueq_l']:.0f})" in text


def test_assessment_takes_the_results(tmp_path):
    """Seven samples of the survey were titrated with a result; the others keep their own alkalinity."""
    done = CliRunner().invoke(main, ["assess", str(DATA / "stream_survey.csv"), "--titrations", str(DATA / "titration_points.csv"),
                                     "--titration-samples", str(DATA / "titration_samples.csv"), "--out", str(tmp_path / "o"),
                                     "--no-figure", "--draws", "0"])
    assert done.exit_code == 0, done.output
    r = pd.read_csv(tmp_path / "o" / "results.csv").set_index("sample_id")
    titrated = r.index[r["alkalinity_from"].str.contains("by titration")]
    assert sorted(titrated) == ["BP-base", "CS-melt", "DM-base", "KB-base", "TB-base", "TL-base", "UT-base"]
    assert r.loc["UT-base", "alkalinity_from"] == "anc by titration (gran)"
    assert "Alkalinity of 7 samples is the recommended result of their titration" in " ".join(done.output.split())

"""The summary: one golden text whose figures are checked by hand, and the sentences of other cases."""

import os
import re
from pathlib import Path

import pytest
from numpy.testing import assert_allclose
from run_table import TABLE, TORN

from aquabuf.tables import read_table

GOLDEN = Path(__file__).parent / "golden" / "summary.txt"


def test_summary_is_the_golden_text(run):
    """Wording and layout as agreed on; AQUABUF_WRITE_GOLDEN=1 writes the file anew, to be read before it is kept."""
    words, _ = run(draws=0)
    if os.environ.get("AQUABUF_WRITE_GOLDEN"):
        GOLDEN.write_text(words, encoding="utf-8")
    assert words == GOLDEN.read_text(encoding="utf-8")


def test_figures_of_the_golden_text_by_hand():
    """Acid to pH 6 in closed water, hill: alkalinity less bicarbonate at pH 6, carbon kept.

    At 8 °C pK1 is 6.484 (Harned & Davis 1943 lies within 0.01; between the 5 and 10 °C values of Plummer & Busenberg 1982), at a
    strength of 0.03 mmol/L activity moves it by less than 0.003. Bicarbonate shares at pH 6.6 and 6.0 are 0.566 and 0.247.
    """
    shares = [1.0 / (1.0 + 10.0 ** (6.484 - ph)) for ph in (6.6, 6.0)]
    h = [10.0**-6.6 * 1e3, 10.0**-6.0 * 1e3]
    dic = (0.03 + h[0]) / shares[0]
    by_hand = 0.03 - (dic * shares[1] - h[1])
    line = next(x for x in GOLDEN.read_text(encoding="utf-8").splitlines() if x.startswith("  hill"))
    assert line.split()[1:3] == ["6.60", "0.030"]
    assert_allclose(float(line.split()[3]), by_hand, rtol=0, atol=0.0007)


def test_worst_stand_first(run):
    """Least acid to pH 6 on top, eight at most, names cut."""
    rows = "".join(f"{'n' * 30 if i == 3 else f's{i}'},10,{8.0 - 0.1 * i:.1f},1\n" for i in range(12))
    words, _ = run("sample_id,temperature_c,ph,alkalinity_meq_l\n" + rows)
    block = words.split("Worst buffered first")[1].split("\n\n")[0].splitlines()[2:]
    assert [line.split()[0] for line in block] == [f"s{i}" for i in range(11, 3, -1)]
    acid = [float(line.split()[3]) for line in block]
    assert acid == sorted(acid)


def test_lines_fit_a_screen(run):
    """No line is longer than 120 characters."""
    words, _ = run(TABLE, draws=100)
    assert max(map(len, words.splitlines())) <= 120


def test_intervals_are_explained_where_there_are_any(run):
    """Number of draws, seed and coverage; or that there are none."""
    with_draws, without = run(draws=100, seed=5, out="a")[0], run(draws=0, out="b")[0]
    flat = " ".join(with_draws.split())
    assert "90% intervals from 100 seeded draws (seed 5)" in flat
    assert re.search(r"hill .* \(0\.0\d\d to 0\.0\d\d\)", with_draws)
    assert "No intervals (--draws 0)" in without


def test_air_is_explained(run):
    """The default names its year; another value does not pretend to be the default."""
    assert "425 ppm CO2 in dry air (default: about the global mean of 2025, recalled)" in " ".join(run(out="a")[0].split())
    words = " ".join(run(out="b", air_co2_ppm=410.0, exchange="open")[0].split())
    assert "410 ppm CO2 in dry air." in words
    assert "Exchange open: every water brought to equilibrium with air first" in words


def test_nothing_wrong(run):
    """No warning, no unmet check, no refusal: said in a line each, or left out."""
    words, _ = run("sample_id,temperature_c,ph,alkalinity_meq_l\nfine,10,7.6,2\n")
    assert words.startswith("waters.csv: 1 sample assessed, 0 with a warning, 0 rows refused.")
    assert "No limit is broken" in words
    assert "Quality: every check that could be made is met." in words
    assert "Refused" not in words


def test_refusals_and_unmet_checks_are_counted(run):
    """With rule and remedy."""
    words, _ = run("sample_id,temperature_c,ph,alkalinity_meq_l,holding_days\na,10,7.6,2,20\nb,,7,1,3\nc,,7,1,3\nd,10,7.2,2,30\n")
    flat = " ".join(words.split())
    assert "2 of 2 fail holding time (days from sampling to titration: 0 to 14 d): titrate sooner; within a day is better." in flat
    assert "Refused: 2 rows" in flat
    assert "2 x temperature_c: every sample needs a water temperature" in flat


def test_salt_water_names_its_constants(run):
    """Marine set and what came from salinity."""
    words, _ = run("sample_id,water_kind,temperature_c,salinity,alkalinity_umol_kg,dic_umol_kg\nsea,sea,15,35,2300,2000\n", carbonic="lueker")
    flat = " ".join(words.split())
    assert "marine constants of set 'lueker'" in flat
    assert "Known pair: alkalinity and carbon 1." in flat


def test_status_other_than_ok_is_told(run):
    """A constant used outside its range is no secret."""
    words, _ = run("sample_id,temperature_c,ph,alkalinity_meq_l\nhot,55,7.6,2\nfine,10,7.6,2\n")
    assert "Status other than ok: outside range 1." in words


@pytest.mark.parametrize(("kind", "caution"), [(k, row["words"]) for row in read_table("cautions") if row["command"] == "assess" for k in row["kinds"].split(";")])
def test_cautions_by_kind_of_water(run, kind, caution):
    """Each caution stands where its kind of water is, and only there."""
    def text(water_kind):
        return " ".join(run(f"sample_id,water_kind,temperature_c,ph,alkalinity_meq_l\na,{water_kind},10,7.6,2\n", out=water_kind or "none")[0].split())
    stated = {"any": "sea", "unstated": ""}.get(kind, kind)
    assert caution in text(stated)
    if kind not in ("any", "wastewater"):
        assert caution not in text("wastewater")


def test_next_steps_are_those_of_the_broken_limits(run):
    """Each once, as a sentence, and the files that were written."""
    words, _ = run(TABLE.replace(TORN, ""))
    block = words.split("\nNext\n")[1]
    assert block.count("Sample through a melt or a storm.") == 1
    assert "Written: results.csv, verdicts.csv, checks.csv, curves.csv, report.html, run.json." in " ".join(block.split())

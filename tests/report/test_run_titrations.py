"""Titrations in an assessment: their results as readings, what they replace, and what the text and the record say of it."""

import csv
import json

import pytest
from numpy.testing import assert_allclose
from titration_tables import BROKEN, FACTS, HARD, HEADER, POINTS, SAMPLES, SOFT, facts, points

from aquabuf.assess.options import Options
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.errors import FileError, HeaderError
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report import run as run_module
from aquabuf.report.run import assess_file
from aquabuf.report.titration_run import titrate_file

WATERS = """sample_id,temperature_c,ph,alkalinity_meq_l,anc_ueq_l
soft,12,6.8,,
hard,13,7.4,2.9,
plain,10,7.5,1.5,
broken,9,7.0,0.4,
"""


@pytest.fixture
def files(table):
    """The two files of titrations."""
    def write(text=POINTS, samples=SAMPLES):
        return TitrationFiles(table(text, "points.csv"), None if samples is None else table(samples, "samples.csv"))
    return write


@pytest.fixture
def assess(table, tmp_path, files):
    """Assess waters with titrations; returns the text and the folder."""
    def go(text=WATERS, given=None, *, out="out", titrated=True, **options):
        chosen = Options(**({"draws": 0} | options))
        titrations = (files() if given is None else given) if titrated else None
        return assess_file(table(text), tmp_path / out, chosen, titrations=titrations, figure=False), tmp_path / out
    return go


def read(folder, name="results.csv"):
    """A table of the run by sample."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return {line["sample_id"]: line for line in csv.DictReader(stream)}


def rests_on(text):
    """The lines on titrations, unwrapped."""
    return " ".join(next(b for b in text.split("\n\n") if b.startswith("What the answers rest on")).split())


# ------------------------------------------------------------------ values

def test_results_of_titrations_are_the_alkalinity(assess):
    """100 µeq/L where the table had none, 2 meq/L in place of 2.9; the source is named with the method."""
    rows = read(assess()[1])
    assert_allclose(float(rows["soft"]["alkalinity_meq_l"]), 0.100, rtol=0, atol=0.004)
    assert_allclose(float(rows["hard"]["alkalinity_meq_l"]), 2.0, rtol=0, atol=0.01)
    assert rows["soft"]["alkalinity_from"] == "anc by titration (gran)"          # not filtered
    assert rows["hard"]["alkalinity_from"] == "alkalinity by titration (fit)"    # filtered
    assert rows["plain"]["alkalinity_from"] == "alkalinity"


def test_the_value_is_that_of_the_command_titration(assess, files, tmp_path):
    """The very number that alkalinity.csv recommends, and its uncertainty: half the 90 % interval of draws is 1.645 times that."""
    _, folder = assess(draws=5000)
    titrate_file(files(), tmp_path / "t", TitrationOptions(), figures=0)
    recommended = read(tmp_path / "t", "alkalinity.csv")
    for name in ("soft", "hard"):
        r, t = read(folder)[name], recommended[name]
        assert_allclose(float(r["alkalinity_meq_l"]), float(t["recommended_ueq_l"]) / 1e3, rtol=0, atol=6e-5)
        half = 0.5 * (float(r["alkalinity_meq_l_high"]) - float(r["alkalinity_meq_l_low"]))
        assert_allclose(half, 1.645e-3 * float(t["recommended_u_ueq_l"]), rtol=0.05, atol=1e-4)


def test_results_by_mass_come_to_liters_by_density(assess, files):
    """2 meq/kg at 25 °C and salinity 0 are 0.99705 times that per liter: density by the handbook."""
    value = {}
    for size in ("sample_mass_g", "sample_volume_ml"):
        given = files(f"{HEADER}\n{HARD}", f"sample_id,{size},titrant_eq_l,temperature_c\nhard,100,0.05,25\n")
        value[size] = float(read(assess(given=given, out=size)[1])["hard"]["alkalinity_meq_l"])
    assert_allclose(value["sample_mass_g"] / value["sample_volume_ml"], 0.99705, rtol=0, atol=3e-4)


def test_whole_samples_replace_an_alkalinity_and_filtered_ones_an_anc(assess):
    """Whatever the table gave, in either column, gives way; nothing of it is left to compete."""
    text = "sample_id,temperature_c,ph,alkalinity_meq_l,anc_ueq_l\nsoft,12,6.8,9,\nhard,13,7.4,,9000\nplain,10,7.5,1.5,\n"
    words, folder = assess(text)
    rows = read(folder)
    assert rows["soft"]["alkalinity_from"] == "anc by titration (gran)"
    assert rows["hard"]["alkalinity_from"] == "alkalinity by titration (fit)"
    assert float(rows["soft"]["alkalinity_meq_l"]) < 0.11
    assert float(rows["hard"]["alkalinity_meq_l"]) < 2.1
    assert "in 2 of them it took the place of the alkalinity in the readings" in rests_on(words)


def test_samples_without_a_titration_are_untouched(assess):
    """The row is that of a run without titrations, but for nothing."""
    with_them, without = read(assess(out="a")[1]), read(assess(titrated=False, out="b")[1])
    for name in ("plain", "broken"):
        assert with_them[name] == without[name]
    assert with_them["hard"] != without["hard"]


def test_a_refused_titration_leaves_the_reading(assess):
    """Its sample keeps the alkalinity of the table, and the text says that nothing came of it."""
    words, folder = assess()
    assert float(read(folder)["broken"]["alkalinity_meq_l"]) == 0.4
    assert "Nothing came of 1 titration (refused 1): where the readings have an alkalinity of their own, it stands." in rests_on(words)


def test_a_detection_limit_that_is_replaced_is_not_told(assess):
    """`<0.01` of a titrated sample is no longer used; that of another still is."""
    text = "sample_id,temperature_c,ph,alkalinity_meq_l,anc_ueq_l\nsoft,12,6.8,<0.01,\nplain,10,6.5,<0.02,\n"
    words, folder = assess(text)
    assert "1 x below detection, half the limit used: alkalinity_eq_l" in words
    assert (read(folder)["soft"]["below_detection"], read(folder)["plain"]["below_detection"]) == ("", "alkalinity_eq_l")


# ------------------------------------------------------------------ what is said

def test_text_and_record_say_the_same(assess):
    """Who got a result by which method, what has no sample, what came to nothing."""
    words, folder = assess()
    record = json.loads((folder / "run.json").read_text(encoding="utf-8"))
    assert record["titrations"] == [
        "Alkalinity of 2 samples is the recommended result of their titration in points.csv (gran 1, fit 1); in 1 of them it took the place of the "
        "alkalinity in the readings.",
        "Without an accepted sample of their name in the readings: 1 titration with a result.",
        "Nothing came of 1 titration (refused 1): where the readings have an alkalinity of their own, it stands. `aquabuf titration` says why."]
    assert all(" ".join(line.split()) in rests_on(words) for line in record["titrations"])
    assert set(record["sha256"]) == {"readings", "titration points", "titration samples"}


def test_one_sample_is_one(assess, files):
    """Singular words, and nothing on what did not happen."""
    words, folder = assess(given=files(f"{HEADER}\n{SOFT}", f"{FACTS}\n{facts('soft', filtered='no')}"))
    assert json.loads((folder / "run.json").read_text())["titrations"] == ["Alkalinity of 1 sample is the recommended result of its titration in points.csv (gran 1)."]
    assert "titration (gran" not in words


def test_no_titration_of_any_sample(assess, files):
    """Names that do not match: the usual slip is said, not passed over."""
    words, _ = assess(given=files(f"{HEADER}\n{points('SOFT', 1e-4)}", f"{FACTS}\n{facts('SOFT')}"))
    assert "No accepted sample of the readings has a titration with a result in points.csv." in rests_on(words)
    assert "Without an accepted sample of their name in the readings: 1 titration with a result." in rests_on(words)


def test_warnings_of_titrations_are_passed_on(assess, files):
    """A result with a warning is used, and the text says where to look."""
    words, _ = assess(given=files(f"{HEADER}\n{SOFT}", f"{FACTS}\n{facts('soft', t_c='')}"))
    assert "A warning stands with 1 result of titrations; `aquabuf titration` tells which." in rests_on(words)


def test_base_titrations_without_alkalinity_are_told(assess, files):
    """Acidity is no alkalinity: nothing is put into the readings, and that is said."""
    base = "".join(f"co2,{v / 10:g},{ph}\n" for v, ph in zip(range(6), (6.6, 6.9, 7.2, 7.6, 8.1, 8.9), strict=True))
    given = files(f"{HEADER}\n{base}", "sample_id,sample_volume_ml,titrant_eq_l,temperature_c,titrant_kind\nco2,100,0.05,25,base\n")
    words, _ = assess(given=given)
    assert "Nothing came of 1 titration (acidity only 1)" in rests_on(words)


def test_without_titrations_nothing_is_said(assess):
    """An empty list in the record."""
    words, folder = assess(titrated=False)
    assert "titration" not in rests_on(words)
    assert json.loads((folder / "run.json").read_text())["titrations"] == []


# ------------------------------------------------------------------ pieces, limits, errors

def test_pieces_make_no_difference(assess, monkeypatch):
    """Readings in pieces of one row, titrations whole: the same files and text."""
    whole = assess(out="whole", draws=100)
    monkeypatch.setattr(run_module, "CHUNK_ROWS", 1)
    pieces = assess(out="pieces", draws=100)
    assert pieces[0] == whole[0]
    for path in whole[1].iterdir():
        assert (pieces[1] / path.name).read_bytes() == path.read_bytes(), path.name


@pytest.mark.parametrize(("text", "samples", "error", "message"), [
    (f"{HEADER}\n", SAMPLES, Exception, "points.csv"), ("sample_id,ph\na,7\n", SAMPLES, HeaderError, "no column gives the titrant added"),
    (POINTS, POINTS, HeaderError, "Are the two files exchanged")], ids=["no rows", "no titrant", "exchanged"])
def test_titrations_that_cannot_be_read_stop_the_run(assess, files, tmp_path, text, samples, error, message):
    """Before anything is written: a run without them would rest on other numbers than were asked for."""
    with pytest.raises(error, match=message):
        assess(given=files(text, samples))
    assert not (tmp_path / "out").exists()


def test_a_file_of_titrations_that_is_not_there(assess, table, tmp_path):
    """Named in the message."""
    with pytest.raises(FileError, match=r"none.csv cannot be read: no such file or directory"):
        assess(given=TitrationFiles(tmp_path / "none.csv"))


def test_only_refused_titrations_are_no_error(assess, files):
    """The readings can be assessed all the same; the text says that nothing came of the titrations."""
    words, _ = assess(given=files(f"{HEADER}\n{BROKEN}", f"{FACTS}\n{facts('broken')}"))
    assert "No accepted sample of the readings has a titration with a result in points.csv." in rests_on(words)
    assert "Nothing came of 1 titration (refused 1)" in rests_on(words)

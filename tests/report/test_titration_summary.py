"""The text of a run over titrations: one golden text, and the sentences of other cases."""

import os
import re
from functools import partial
from pathlib import Path

import pytest
from numpy.testing import assert_allclose
from titration_tables import BROKEN, FACTS, HARD, HEADER, POINTS, SAMPLES, SOFT, facts, points

from aquabuf.assess.titration.findings import finding_facts
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report import titration_run
from aquabuf.report.titration_run import titrate_file
from aquabuf.report.titration_summary import titration_summary
from aquabuf.report.titration_tally import LISTED, TitrationTally
from aquabuf.tables import read_table

GOLDEN = Path(__file__).parent / "golden" / "titration_summary.txt"


@pytest.fixture
def words(table, tmp_path):
    """The text of a run without figures."""
    def go(text=POINTS, samples=SAMPLES, *, figures=0, **options):
        files = TitrationFiles(table(text, "points.csv"), None if samples is None else table(samples, "samples.csv"))
        return titrate_file(files, tmp_path / "out", TitrationOptions(**options), figures=figures, force=True)
    return go


def flat(text):
    """One line."""
    return " ".join(text.split())


def block(text, head):
    """Lines of the block that begins so."""
    return next(b for b in text.split("\n\n") if b.startswith(head)).splitlines()


def cells(text, sample):
    """Columns of a sample's line."""
    return re.split(r" {2,}", next(x for x in text.splitlines() if x.startswith(f"  {sample} ")).strip())


SLIPS = f"{HEADER}\n{SOFT}{HARD}" + HARD.replace("hard", "tenfold") + BROKEN + points("acid", -2e-5)
SLIP_SAMPLES = (f"{FACTS}\n" + facts("soft", filtered="no", conductivity="15", t_c="") + facts("hard", strength="0.05") + facts("tenfold", strength="0.5")
                + facts("broken") + facts("acid", conductivity="28"))


def test_text_is_the_golden_text(words):
    """Wording and layout as agreed on; AQUABUF_WRITE_GOLDEN=1 writes the file anew, to be read before it is kept."""
    text = words(SLIPS, SLIP_SAMPLES)
    if os.environ.get("AQUABUF_WRITE_GOLDEN"):
        GOLDEN.write_text(text, encoding="utf-8")
    assert text == GOLDEN.read_text(encoding="utf-8")


def test_figures_of_the_golden_text_by_hand():
    """100, 2000 and -20 µeq/L went in, so each interval holds its own; mg/L are those times 0.0500435; no result for the tenfold strength."""
    text = GOLDEN.read_text(encoding="utf-8")
    for sample, truth in (("soft", 100.0), ("hard", 2000.0), ("acid", -20.0)):
        _, result, mg_l, *_ = cells(text, sample)
        value, half = (float(x.replace(",", "")) for x in result.removesuffix(" µeq/L").split(" ± "))
        assert abs(value - truth) < half
        assert_allclose(float(mg_l), value * 0.0500435, rtol=0.01)
    assert cells(text, "tenfold")[1:] == ["-", "strength doubtful (+1)"]


def test_first_line_counts(words):
    """Titrations seen, with a result, with a warning, without, refused."""
    assert words(SLIPS, SLIP_SAMPLES).startswith("points.csv: 5 titrations, 3 with a result (2 of them with a warning), 1 without, 1 refused.\n")
    assert words(f"{HEADER}\n{SOFT}", f"{FACTS}\n{facts('soft')}").startswith("points.csv: 1 titration, 1 with a result (0 of them with a warning), 0 without, 0 refused.\n")


def test_lines_fit_a_screen(words):
    """None is longer than 120 characters."""
    assert max(map(len, words(SLIPS, SLIP_SAMPLES, conversion="charge_balance").splitlines())) <= 120


def test_findings_are_told_with_sample_remedy_and_row(words):
    """Count, name, where, what it means and what to do; in the order of the table of findings."""
    swap = SOFT.splitlines()
    swap[9:11] = [",".join([*swap[9].split(",")[:2], swap[10].split(",")[2]]), ",".join([*swap[10].split(",")[:2], swap[9].split(",")[2]])]
    text = words(f"{HEADER}\n" + "\n".join(swap) + "\n" + SLIPS.split("\n", 1)[1].replace("soft", "s2"), SLIP_SAMPLES.replace("soft", "s2") + facts("soft"))
    lines = flat("\n".join(block(text, "Diagnosis")))
    fact = finding_facts()["points swapped"]
    assert re.search(rf"- 1 x points swapped \(soft row 11: 0\.\d+\): {re.escape(fact['words'])}\. Next: {re.escape(fact['remedy'])}\.", lines)
    assert "- 1 x temperature missing (s2): no temperature, so 20 °C is taken" in lines
    told = [name for name in finding_facts() if f" x {name} (" in lines]
    assert told == sorted(told, key=lambda name: lines.index(f" x {name} ("))
    assert told == ["strength doubtful", "alkalinity against conductivity", "temperature missing", "points swapped", "end point hides acid"]


def test_only_the_first_samples_of_a_finding_are_named(words):
    """Three names, then dots; the count is whole."""
    many = "".join(points(f"s{i}", 1e-4, count=12) for i in range(5))
    text = flat(words(f"{HEADER}\n{many}", f"{FACTS}\n" + "".join(facts(f"s{i}", t_c="") for i in range(5))))
    assert "5 x temperature missing (s0, s1, s2 ...): " in text


def test_nothing_suspicious_is_said(words):
    """Silence would leave doubt whether anything was looked for."""
    assert "Diagnosis: nothing suspicious was found." in words()


def test_refusals_are_counted_by_rule(words):
    """Twice the same rule is one line, though each names another row; columns as they are written in the file."""
    falls = "".join(f"f{i},0,7\nf{i},{i},5\nf{i},0.5,4\n" for i in (2, 3))
    text = words(f"{HEADER}\n{SOFT}{falls}{BROKEN}", f"{FACTS}\n{facts('soft')}{facts('f2')}{facts('f3')}{facts('broken')}")
    assert block(text, "Refused") == [
        "Refused (rejected.csv names file, row, column, value and remedy)", "  - 2 x titrant_ml: the titrant added since the start must not fall (f2, f3)",
        "  - 1 x ph: must be 0 to 14 (broken)"]


def test_long_files_list_the_first_samples(words, monkeypatch):
    """Twenty lines, and how many there are; the same when the file is read in pieces."""
    many_text = f"{HEADER}\n" + "".join(points(f"s{i}", 1e-4, count=8) for i in range(LISTED + 3))
    many_samples = f"{FACTS}\n" + "".join(facts(f"s{i}") for i in range(LISTED + 3))
    text = words(many_text, many_samples)
    monkeypatch.setattr(titration_run, "iter_titrations", partial(titration_run.iter_titrations, chunk_samples=7))
    assert words(many_text, many_samples) == text
    lines = block(text, "Results (first 20 of 23)")
    assert [line.split()[0] for line in lines[2:]] == [f"s{i}" for i in range(LISTED)]


def test_long_names_are_cut(words):
    """A name of 60 letters does not push the table off the screen."""
    name = "n" * 60
    text = words(f"{HEADER}\n{SOFT.replace('soft', name)}", f"{FACTS}\n{facts(name)}")
    assert cells(text, "n" * 20)[0] == "n" * 20


def test_acidity_of_a_base_titration(words):
    """1 mM of strong acid and no carbon by 0.05 eq/L base: its acidity to pH 8.3 stands where others have alkalinity, and is called so."""
    lines = "".join(f"mine,{v / 10:g},{ph:.2f}\n" for v, ph in zip(range(0, 26, 2), (3.0, 3.05, 3.10, 3.16, 3.22, 3.3, 3.4, 3.53, 3.7, 4.01, 7.0, 10.0, 10.3),
                                                               strict=True))
    text = words(f"{HEADER}\n{lines}", "sample_id,sample_volume_ml,titrant_eq_l,temperature_c,titrant_kind\nmine,100,0.05,25,base\n")
    _, result, per_l, method, *_ = cells(text, "mine")
    assert_allclose(float(per_l), 50.04 * float(result.split(" ± ")[0].replace(",", "")) / 1000.0, rtol=1e-3)
    assert "signed alkalinity by the Gran line -" in text
    assert result.endswith(" µeq/L acidity to pH 8.3")
    assert method == "end point"
    assert_allclose(float(result.split(" ± ")[0].replace(",", "")), 1000.0, rtol=0, atol=60.0)


def test_assumptions_are_told_with_their_number(words):
    """What nobody stated, and for how many of all."""
    lines = block(words(SLIPS, SLIP_SAMPLES), "What the results rest on")
    assert "  - no temperature: 20 °C (1 of 5)." in lines
    assert "  - uncertainty of the strength not stated: default (4 of 5)." in lines
    assert "  - Methods: Gran line 2, fit of the whole curve 1." in lines


@pytest.mark.parametrize(("conversion", "words_of_it"), [("none", "Nothing is converted between definitions (--convert does)."),
                                                         ("henriksen_1982", "Converted to: henriksen_1982 (Scandinavian convention).")])
def test_definition_is_told(words, conversion, words_of_it):
    """That nothing was converted, or to what."""
    assert words_of_it in flat(words(conversion=conversion))


def test_the_converted_result_is_told(words):
    """Below the result of the sample, with its unit and what it is converted to."""
    assert re.search(r"\d µeq/L by henriksen_1982\.", words(conversion="henriksen_1982"))


def test_what_a_finding_adds_is_told(words):
    """Of a single sample: the finding explains itself on the screen, not in the table alone."""
    off = SOFT.replace("soft", "off")
    text = flat(words(f"{HEADER}\n{off}", f"{FACTS}\n{facts('off', strength='0.03')}"))
    assert "the uncertainty counts it. Next: titrate a weighed" in text


def test_cautions_of_the_table(words):
    """Each caution of this command, no other."""
    lines = flat("\n".join(block(words(), "Cautions")))
    for row in read_table("cautions"):
        assert (row["words"] in lines) == (row["command"] == "titration"), row["words"]


def test_next_steps_and_files(words, monkeypatch):
    """What was written, how to go on, and how many figures were drawn."""
    monkeypatch.setattr("aquabuf.report.titration_figures.save_titration", lambda result, i, path: path.write_bytes(b"drawn"))
    some, none = words(figures=2), words(figures=0)
    assert some.endswith("  - Written: alkalinity.csv, findings.csv, rejected.csv, report.html, run.json, titration_*.png.\n")
    assert none.endswith("  - Written: alkalinity.csv, findings.csv, rejected.csv, report.html, run.json.\n")
    assert "Figures were drawn of the first 2; --figures all draws every one." in some
    assert "Figures" not in none
    assert "`aquabuf assess READINGS.csv --titrations POINTS.csv --out FOLDER` takes these results into the assessment; " in flat(some)
    assert "where there is a table of samples, add --titration-samples SAMPLES.csv." in flat(some)


def test_an_empty_tally_has_a_text():
    """Nothing to show is no error."""
    text = titration_summary(TitrationTally(), TitrationOptions(), source="x.csv", files=["run.json"])
    assert text.startswith("x.csv: 0 titrations, 0 with a result (0 of them with a warning), 0 without, 0 refused.\n\nWhat the results rest on")

"""The report on a neutralization: the verdict first, every block with its units, what to do next; and the curve log."""

import sys
from dataclasses import replace
from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).parent))

from stream_files import BREAKS, CYANIDE, HOLDS, MINIMAL, TITRATED, write_stream

from aquabuf.assess.tank.design import design
from aquabuf.assess.tank.design_json import design_record
from aquabuf.assess.tank.job_file import read_stream
from aquabuf.report.summary import WIDTH
from aquabuf.report.tank_blocks import number
from aquabuf.report.tank_proof import spread_words
from aquabuf.report.tank_report import failing, headline, next_steps, tank_report
from aquabuf.report.tank_tables import curve_log

TEXTS = {"holds": HOLDS, "breaks": BREAKS, "minimal": MINIMAL, "cyanide": CYANIDE, "titrated": TITRATED}
BLOCKS = ("VERDICT", "STREAM", "REAGENT DEMAND", "REAGENTS COMPARED", "WINDOW", "EQUALIZATION", "TANKS",
          "NUMBER OF TANKS BY RULES OF THUMB", "FEEDS", "SIMULATION", "FAILURES", "SIDE EFFECTS", "STORAGE AND CONTAINMENT",
          "BATCH TANKS INSTEAD", "SENSITIVITY", "ASSUMPTIONS", "CAUTIONS", "WHAT TO DO NEXT")
NOT_TO_BE_BUILT = ("EQUALIZATION", "TANKS", "NUMBER OF TANKS BY RULES OF THUMB", "FEEDS", "FAILURES",
                   "STORAGE AND CONTAINMENT", "BATCH TANKS INSTEAD")


def job_of(text):
    """A stream file as it is read."""
    with TemporaryDirectory() as folder:
        return read_stream(write_stream(Path(folder), text))


@cache
def designed(name, simulate=True):
    """A design and its record."""
    found = design(job_of(TEXTS[name]), simulate=simulate, processes=1)
    return found, design_record(found)


def report(name, simulate=True):
    """The report as one line per paragraph, by its title."""
    text = tank_report(*designed(name, simulate))
    return {block.split("\n")[0]: " ".join(block.split()) for block in text.split("\n\n")}


def block(name, title, simulate=True):
    """One block by the beginning of its title."""
    return next(text for head, text in report(name, simulate).items() if head.startswith(title))


@pytest.mark.parametrize("name", TEXTS)
def test_page_is_100_columns(name):
    """No line is longer, and none ends in blanks."""
    lines = tank_report(*designed(name)).splitlines()
    assert [line for line in lines if len(line) > WIDTH or line != line.rstrip()] == []


@pytest.mark.parametrize("name", ["holds", "breaks", "titrated"])
def test_blocks_stand_in_their_order(name):
    """The verdict first, what to do last."""
    heads = [head for head in report(name) if head.startswith(BLOCKS)]
    assert [next(b for b in BLOCKS if head.startswith(b)) for head in heads] == list(BLOCKS)


def test_a_stop_leaves_nothing_to_build():
    """It stands above all else; no tank, feed or store is shown, and nobody is sent to try the reagent."""
    heads = list(report("cyanide"))
    assert heads[1:3] == ["VERDICT: STOP", "STOP: NOTHING IS TO BE BUILT"]
    assert [h for h in heads if h.startswith(NOT_TO_BE_BUILT)] == []
    assert "destroy cyanide first" in block("cyanide", "STOP")
    steps = next_steps(*designed("cyanide"))
    assert len(steps) == 1
    assert "not in a beaker either" in steps[0]


@pytest.mark.parametrize(("name", "simulate", "word"), [
    ("holds", True, "ACCEPTED"), ("breaks", True, "NOT ACCEPTED"), ("minimal", True, "NOT PROVEN"),
    ("holds", False, "NOT PROVEN"), ("cyanide", True, "STOP"), ("cyanide", False, "STOP")])
def test_verdict(name, simulate, word):
    """By what was simulated; only what is refuted or forbidden fails."""
    found, _ = designed(name, simulate)
    assert headline(found) == word
    assert bool(failing(found)) == (word in ("NOT ACCEPTED", "STOP"))
    assert f"VERDICT: {word}" in report(name, simulate)


def test_one_course_can_refute_but_not_prove():
    """Without cases, a course that breaks the rule is enough to fail."""
    found, record = designed("minimal")
    assert headline(found) == "NOT PROVEN"
    course = replace(found.trial.course, outside_min=np.array([1e4]))
    broken = replace(found, trial=replace(found.trial, course=course))
    assert (headline(broken), failing(broken)) == ("NOT ACCEPTED", broken.verdict)
    assert "Prove it" in " ".join(next_steps(found, record))


def test_verdict_names_probability_interval_and_rule():
    """2 of 2 cases: the exact interval begins at 0.025^(1/2) (Clopper & Pearson), 16 %; 446 min in 31 days are 1.4 in 0.1."""
    words = block("holds", "VERDICT")
    assert "100 % of 2 simulated cases keep the time rule (95 % interval 16 to 100 %)" in words
    assert "scaled to 1.4 min in the 0.1 days simulated" in words
    assert "401.17 on continuous monitoring (recalled); the permit outranks it" in words  # the file sets no rule of its own
    assert "2 tanks, stirred" in words
    assert "fed with caustic, with acid to take back overdoses" in words


def test_demand_is_stoichiometry():
    """6 m3/h of 10.01 meq/L hydrochloric acid: 60.07 eq/h, 2.403 kg/h of NaOH, 9.61 kg/h at 25 %."""
    wanted = 6.0 * 0.365 / 36.458 * 1e3 * 39.997e-3 / 0.25
    row = next(line.split() for line in tank_report(*designed("minimal")).splitlines() if line.split()[:4] == ["caustic", "mean", "6.00", "set"])
    assert float(row[7]) == pytest.approx(wanted, rel=2e-3)
    assert float(row[6]) == pytest.approx(0.01001, rel=2e-3)


def test_what_is_taken_and_why():
    """The named reagent, and that the comparison would take another."""
    words = block("holds", "REAGENTS COMPARED")
    assert "Chosen base: caustic, as the file names it; the comparison would take lime." in words
    assert "it only takes back what the other feed overdoes" in words
    assert "Chosen base: caustic, by the comparison." in block("minimal", "REAGENTS COMPARED")


def test_units_stand_everywhere():
    """In the heads of tables and behind figures."""
    for title, units in (("STREAM", ("°C", "meq/L", "m³/h")), ("REAGENT DEMAND", ("eq/L", "kg/h", "L/h", "EUR/d")),
                         ("WINDOW", ("meq/L per pH", "pH per meq/L")), ("EQUALIZATION", ("m³", " h ")),
                         ("TANKS", ("m³/h", "kW", "min")), ("FEEDS", ("eq/h", "L/h", "%")),
                         ("SIMULATION", ("min outside", "reset s")), ("STORAGE", ("kg", "m³"))):
        words = block("holds", title)
        assert [unit for unit in units if unit not in words] == [], title


def test_rules_of_thumb_stand_beside_the_simulation():
    """What was taken with its proof, then each rule with its source."""
    assert "Taken: 2 tanks; 100 % of the simulated cases keep the time rule" in block("holds", "NUMBER OF TANKS")
    assert "Taken: 2 tanks; not simulated" in block("holds", "NUMBER OF TANKS", simulate=False)
    assert "continuous: at least 2 tanks;" in block("holds", "NUMBER OF TANKS")
    assert "[military handbook MIL-HDBK-1005/9A, 2.6.5.1]" in block("holds", "NUMBER OF TANKS")


def test_a_design_that_does_not_hold_says_what_it_points_to():
    """The side it leaves to, the feed, one tank more, the sensitivity, the quickest failure."""
    found, record = designed("breaks")
    steps = next_steps(found, record)
    low, high = record["simulation"]["lowest_ph"], record["simulation"]["highest_ph"]
    assert low < 6.0
    assert high > 9.0
    assert steps[0].startswith("pH leaves the window below, down to pH ")
    assert " and above, up to pH " in steps[0]
    joined = " ".join(steps)
    feed = next(f for f in record["feed"] if f["holds"] is False)
    assert f"the window needs {100.0 * feed['resolution_needed']:.2g} % of the full rate" in joined
    assert "Try one tank more, [layout] stages = 2" in joined
    worst = min((r for r in record["sensitivity"]), key=lambda r: r["tolerance_ratio"])
    assert f"({worst['change']}: {100.0 * worst['tolerance_ratio']:.0f} % of that of the design is left" in joined
    assert "Provide an alarm" in joined


def test_what_is_not_measured_is_to_be_measured():
    """Composition asks for a titration, statistics for a record; tables ask for neither."""
    known = " ".join(next_steps(*designed("titrated")))
    assert "Titrate more samples of w" in known
    assert "Record flow" not in known
    guessed = " ".join(next_steps(*designed("minimal")))
    assert "Titrate samples of w and name the table as titration" in guessed
    assert "Record flow and strength for two weeks" in guessed


def test_few_cases_ask_for_more():
    """2 of 2 leave the interval wide."""
    assert next_steps(*designed("holds"))[0].startswith("Run more cases: with 2 the interval begins at 16 %")


def test_gravest_side_effects_come_first():
    """A stop, then warnings, then the table."""
    words = block("cyanide", "SIDE EFFECTS")
    assert words.index("STOP, acid: cyanide") < words.index("heat of reaction")
    assert "kg/m³" in words or "K" in words


def test_warnings_are_told_once():
    """One that a block above tells in the same words is not told again; all stay in the record."""
    found, record = designed("holds")
    text = " ".join(tank_report(found, record).split()).casefold()
    lines = [w for w in record["warnings"] if "longer than the" in w]
    assert lines
    for w in lines:
        assert text.count(" ".join(w.partition(": ")[2].split()).casefold().removesuffix(".")) == 1
    alarms = [w for w in record["warnings"] if "leaves the window" in w]
    assert all(" ".join(w.split()).casefold().removesuffix(".") in text for w in alarms)


def test_what_failing_cases_have_in_common():
    """Means of both groups; nothing where all hold or all fail."""
    monte = designed("holds")[0].trial.monte
    split = replace(monte, meets=np.array([True, False]), buffer=np.array([1.2, 0.8]), strength=np.ones(2))
    assert spread_words(split) == ("Buffers on average 0.80 times those of the design where the rule breaks, 1.20 times where "
                                   "it holds.")
    assert spread_words(replace(split, meets=np.array([True, True]))) == ""
    assert spread_words(replace(split, meets=np.array([False, False]))) == ""


def test_same_design_same_text():
    """No draw of luck in the words."""
    assert tank_report(*designed("breaks")) == tank_report(*designed("breaks"))


def test_numbers_for_cells():
    """Three figures, a dash for none."""
    assert [number(v) for v in (None, 0.0123456, 1234.56, 9.999)] == ["-", "0.0123", "1,235", "10.0"]


# ------------------------------------------------------------------ the curve for the log

def curve_rows(text):
    """Cells of the rows, and whether they lie in the window."""
    lines = [line.split() for line in text.splitlines()[3:] if line.strip()]
    return {float(c[c[0] == "*":][0]): (c[0] == "*", c[c[0] == "*":]) for c in lines if c[-1].replace(",", "").replace(".", "").isdigit()}


def test_curve_for_the_log():
    """Strong acid: base to pH 7 is the acid, kg/m3 by the strength, gain 1 over intensity, window marked."""
    text = curve_log(job_of(MINIMAL))
    assert text.startswith("Least: titration curve of the mean waste, pH 2.0")
    found = curve_rows(text)
    acid = 0.365 / 36.458 * 1e3  # meq/L; molar mass of HCl by IUPAC
    assert float(found[7.0][1][1]) == pytest.approx(acid, rel=2e-3)
    assert float(found[7.0][1][2]) == pytest.approx(acid * 39.997e-3 / 0.25, abs=2e-3)
    assert {ph for ph, (inside, _) in found.items() if inside} == {ph for ph in found if 6.0 <= ph <= 9.0} != set()
    for _, cells in found.values():
        buffer, gain = (float(c.replace(",", "")) for c in cells[-2:])
        assert buffer * gain == pytest.approx(1.0, rel=0.02)
    assert min(found) < 2.0 < 10.0 <= max(found)
    assert found[min(found)][1][2] == "-"  # caustic does not lower pH

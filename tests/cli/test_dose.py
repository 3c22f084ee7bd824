"""`aquabuf dose`: exit codes, where text goes, the table for the shift log, and plans that cannot be used."""

import json
import re
import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parents[1]))

from invented_plans import FIXED, IMPOSSIBLE, RIVER, SMALLEST, UPLAND, year

NAOH, CACO3_EQ = 39.997, 100.086 / 2.0  # g/mol and g per equivalent; IUPAC masses


@pytest.fixture
def plan(table):
    """Write a plan as a file and return its name."""
    def write(text=UPLAND):
        table(year(), "year.csv")
        return table(text, "plan.toml")
    return write


@pytest.fixture
def run(call, plan):
    """Solve a plan without figures."""
    def go(text=UPLAND, *words, out="o"):
        return call("dose", plan(text), "--out", out, "--no-figure", *words)
    return go


@pytest.fixture
def log(call, plan):
    """Print the table for the shift log."""
    def go(text=UPLAND, *words):
        return call("dose", "sheet", plan(text), *words)
    return go


def rows(text):
    """Cells of the rows of the table, the mark of the wanted one apart."""
    found = re.findall(r"(?m)^ +(>?) +([\d.,]+ .*)$", text)
    return [(mark == ">", cells.split()) for mark, cells in found]


# ------------------------------------------------------------------ the run

def test_done(run):
    """The sheet to standard output, nothing to standard error, exit code 0."""
    done = run()
    assert (done.exit_code, done.stderr) == (0, "")
    assert done.stdout.startswith("Ambrel Dam")
    assert done.stdout.splitlines()[-2].startswith("Written to o: answer.json, sheet.txt")


def test_the_command_may_be_named(call, plan, run):
    """`aquabuf dose run ...` does the same."""
    named = call("dose", "run", plan(), "--out", "o", "--no-figure")
    assert named.stdout == run(UPLAND, "--force").stdout


def test_a_plan_that_does_not_hold_is_noticed_by_a_script(run):
    """Exit code 1 and the reason in one line on standard error, once everything is written."""
    done = run(IMPOSSIBLE)
    assert done.exit_code == 1
    assert re.fullmatch(r"Error: the plan does not hold\. final pH: pH 8\.40 with alkalinity 90\.0 mg/L as CaCO3 cannot be met .*\n", done.stderr)
    assert "STOP: DO NOT SET THESE FEEDS" in done.stdout
    assert json.loads(Path("o/answer.json").read_text(encoding="utf-8"))["feasible"] is False


def test_overwriting_needs_force(run):
    """An earlier result is refused, named, and left as it is."""
    run(FIXED)
    before = Path("o/answer.json").read_bytes()
    done = run(SMALLEST)
    assert (done.exit_code, done.stdout) == (1, "")
    assert "o/answer.json exists already and is not overwritten" in done.stderr
    assert Path("o/answer.json").read_bytes() == before
    assert run(SMALLEST, "--force").exit_code == 0
    assert Path("o/answer.json").read_bytes() != before


def test_draws(run):
    """None leaves the errors out."""
    assert run(UPLAND, "--draws", "0").exit_code == 0
    assert not Path("o/errors.csv").exists()
    few = run(UPLAND, "--draws", "5", "--force")
    assert few.exit_code == 1
    assert "draws must be from 100 to 100000; found 5" in few.stderr
    assert run(UPLAND, "--draws", "-1").exit_code == 2


@pytest.mark.parametrize(("old", "new", "message"), [
    ('slurry = "10 %"', 'slury = "10 %"', r"plan\.toml, line 24, \[products\.lime\]: slury is not a key here\. The nearest is slurry\."),
    ('strength = "92 %"\n', "", r"plan\.toml, line \d+, \[products\.lime\].*strength"),
    ("ph = 8.4, alk", "pH_target = 8.4, alk", r"plan\.toml, line 43, .*pH_target is not a quantity that a target can be set for\. The nearest is"),
    ('"lime", "gas"', '"lime", "gass"', r"line \d+.*'gass'.*gas"),
    ('now = "10 ML/d"', 'now = "10 furlongs"', r"plan\.toml, line 7, \[flow\].*'furlongs'"),
    ("[flow]", "[flow", r"plan\.toml is not valid TOML"),
], ids=["unknown key", "no strength", "unknown target", "unknown product", "unknown unit", "no TOML"])
def test_a_bad_plan_is_told_in_one_line(run, old, new, message):
    """File, line, what is wrong and the nearest that is known; nothing is written."""
    assert old in UPLAND
    done = run(UPLAND.replace(old, new, 1))
    assert (done.exit_code, done.stdout) == (1, "")
    assert re.search(message, done.stderr), done.stderr
    assert done.stderr.count("\n") == 1
    assert "Traceback" not in done.stderr
    assert not Path("o").exists()


def test_a_missing_plan(call, tmp_path):
    """One line, without the folders of this machine."""
    done = call("dose", tmp_path / "none.toml", "--out", "o")
    assert done.exit_code == 1
    assert "the plan file none.toml cannot be read" in done.stderr
    assert str(tmp_path) not in done.stderr


def test_wrong_usage(call, plan):
    """No folder, no plan: exit code 2."""
    assert call("dose", plan()).exit_code == 2
    assert call("dose", "--out", "o").exit_code == 2
    assert call("dose", plan(), "--out", "o", "--colour").exit_code == 2


def test_help_names_both_ways_and_the_exit_codes(call):
    """What a script must know."""
    assert "PLAN.toml --out FOLDER [OPTIONS] | COMMAND [ARGS]..." in call("dose", "--help").stdout
    text = " ".join(call("dose", "run", "--help").stdout.split())
    assert "does not hold; then the results are written all the same, and the reason goes to standard error" in text


# ------------------------------------------------------------------ the starter plan

def test_starter_plan_is_a_plan_that_holds(call, table):
    """What `aquabuf template plan` prints runs as it is: nothing refused, targets met, every feed within reach."""
    text = call("template", "plan").stdout
    done = call("dose", table(text, "mine.toml"), "--out", "o", "--no-figure")
    assert (done.exit_code, done.stderr) == (0, "")
    answer = json.loads(Path("o/answer.json").read_text(encoding="utf-8"))
    assert (answer["feasible"], answer["reason"]) == (True, "")
    assert len(answer["targets"]) == 2
    assert all(t["met"] for t in answer["targets"])
    status = {d["product"]: d["feed"]["setting_status"] for d in answer["doses"]}
    assert status == {"alum": None, "lime": "set", "gas": "off"}  # the alum has no machine; lime alone is cheapest


def test_starter_plan_by_mass_balance(call, table):
    """20 mg/L of product at 99 % takes 0.5052 mg as CaCO3 per mg of alum, and lime brings 1.3508 (facts: computed)."""
    call("dose", table(call("template", "plan").stdout, "mine.toml"), "--out", "o", "--no-figure", "--draws", "0")
    answer = json.loads(Path("o/answer.json").read_text(encoding="utf-8"))
    alkalinity = [step["alkalinity_mg_l_caco3"] for step in answer["steps"]]
    alum, lime, gas = (d["dose_mg_l_pure"] for d in answer["doses"])
    assert alum == pytest.approx(0.99 * 20.0)
    assert alkalinity == pytest.approx([32.0, 32.0 - 0.5052 * alum, 32.0 - 0.5052 * alum + 1.3508 * lime], abs=0.01)
    dic = [step["dic_mmol_l"] for step in answer["steps"]]
    assert dic[2] - dic[1] == pytest.approx(gas / 44.009, abs=1e-4)
    assert 8.0 <= answer["steps"][2]["ph"] <= 8.4


@pytest.mark.parametrize("line", ['# least = "1 ML/d"', '# most = "4 ML/d"', '# price = "0.35 per kg"'])
def test_what_the_starter_plan_leaves_out_can_be_used(call, table, line):
    """Each key behind a # works once the # is taken away."""
    text = call("template", "plan").stdout
    assert f"\n{line}\n" in text
    done = call("dose", table(text.replace(line, line.removeprefix("# ")), "mine.toml"), "--out", "o", "--no-figure", "--draws", "0")
    assert (done.exit_code, done.stderr) == (0, "")


# ------------------------------------------------------------------ the shift log

def test_table_for_the_shift_log(log):
    """A table for each product, the wanted dose marked once, with the setting at this flow."""
    done = log()
    assert (done.exit_code, done.stderr) == (0, "")
    lime, gas = done.stdout.split("\n\nAmbrel Dam")
    for text, setting in ((lime, "55.4"), (gas, "40.3")):
        marked = [cells for wanted, cells in rows(text) if wanted]
        assert len(marked) == 1
        assert marked[0][3] == setting
        assert marked[0][4] == "8.40"
    assert "raises pH by 0.1" in lime
    assert "lowers pH by 0.1" in lime
    assert "time: ______" in lime


def test_alkalinity_along_the_doses_is_the_stoichiometry(log):
    """An equivalent per mole of caustic soda, at 60 mg/L as CaCO3 to start with."""
    found = rows(log(FIXED).stdout)
    for _, cells in found:
        pure, alkalinity = float(cells[1]), float(cells[5])
        assert alkalinity == pytest.approx(60.0 + pure / NAOH * CACO3_EQ, abs=0.06 + 0.01 * pure)
    assert len(found) >= 11


def test_feed_along_the_doses_follows_the_flow(log):
    """L/h = mg/L of product x ML/d / 24 / density."""
    for _, cells in rows(log(FIXED).stdout):
        assert float(cells[2]) == pytest.approx(float(cells[0]) * 10.0 / 24.0 / 1.525, rel=0.01)


def test_one_product_and_the_largest_dose(log):
    """Only what is asked for, up to what is asked for."""
    done = log(UPLAND, "--product", "gas", "--most", "60 mg/L")
    assert "lime in final pH" not in done.stdout
    assert float(rows(done.stdout)[-1][1][0]) == pytest.approx(60.0)
    assert log(RIVER, "--step", "rapid mix").stdout.startswith("Tarn Weir: alum in rapid mix")


def test_settings_out_of_reach_are_said(log):
    """The lime pump ends at 200 L/h."""
    settings = [cells[3] for _, cells in rows(log(UPLAND, "--product", "lime").stdout)]
    assert settings[0] == "off"
    assert "too" in settings[-1]


@pytest.mark.parametrize(("words", "message"), [
    (("--product", "chalk"), "found product 'chalk', and it doses lime in final pH; gas in final pH. Correct the name."),
    (("--step", "first"), "found step 'first'"),
])
def test_a_name_that_is_not_there(log, words, message):
    """Told with those that are."""
    done = log(UPLAND, *words)
    assert (done.exit_code, done.stdout) == (1, "")
    assert message in done.stderr


@pytest.mark.parametrize("most", ["60", "60 furlongs", "much", "-5 mg/L", "0 mg/L", "nan mg/L"])
def test_a_largest_dose_that_is_none(log, most):
    """Wrong usage: what was given, and how to write it."""
    done = log(UPLAND, "--most", most)
    assert done.exit_code == 2
    assert "the largest dose must" in done.stderr
    assert "60 mg/L" in done.stderr


def test_nothing_to_draw(log):
    """A plan that doses nothing, one whose doses are not found, and a dose of nothing."""
    assert "found no dose, and it doses nothing. Add a step that doses." in log(SMALLEST).stderr
    impossible = log(IMPOSSIBLE)
    assert impossible.exit_code == 1
    assert "has no doses to draw a response around. final pH: pH 8.40" in impossible.stderr
    none = FIXED.replace('dose = "15 mg/L"', 'dose = "0 mg/L"')
    assert "nothing of 'caustic' is wanted in step 'feed'" in log(none).stderr
    assert log(none, "--most", "30 mg/L").exit_code == 0

"""Sliders: what the script says is what the grid says, its arithmetic is that of Python, and no name gets out of its data."""

import json
import random
import shutil
import subprocess
import sys
from dataclasses import replace
from functools import cache
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).parents[1]))

from dosing_plans import answer_of

from aquabuf.assess.plant.dose_grid import between, grids_of
from aquabuf.assess.plant.steps.adjust import Dose
from aquabuf.assess.plant.train import run_train
from aquabuf.report.html.whatif import data_script, grid_record, whatif_panels, whatif_script

NODE = shutil.which("node")
SCRIPT = Path(__file__).parents[3] / "aquabuf" / "data" / "whatif.js"
LIME, GAS = 74.092, 44.009  # g/mol of Ca(OH)2 and CO2, IUPAC masses
needs_node = pytest.mark.skipif(NODE is None, reason="node is not installed, so the script itself cannot be run")


@cache
def record(name, k=0):
    """A grid of a plan as the script reads it."""
    answer = answer_of(name)
    return grid_record(answer, grids_of(answer.train)[k])


def node(code, data):
    """What a piece of script prints as JSON; `w` is the script, `d` the data."""
    source = f"const w = require({json.dumps(str(SCRIPT))}); const d = JSON.parse(require('fs').readFileSync(0, 'utf8'));{code}"
    done = subprocess.run([NODE, "-e", source], input=json.dumps(data), capture_output=True, text=True, check=True, timeout=60)
    return json.loads(done.stdout)


def answers(grid, percents):
    """Everything that the panel says at each of several places."""
    return node("console.log(JSON.stringify(d.at.map(p => Object.assign(w.answer(d.grid, p), "
                "{verdict: w.verdict(d.grid, w.answer(d.grid, p))}))))", {"grid": grid, "at": percents})


# ---------------------------------------------------------------- arithmetic


@needs_node
@pytest.mark.parametrize("shape", [(5,), (2,), (4, 3), (2, 2)])
def test_script_interpolates_as_python_does(shape):
    """At random places, at points, and beyond the edge."""
    rng = random.Random(3)
    values = np.array([rng.uniform(-5.0, 5.0) for _ in range(int(np.prod(shape)))]).reshape(shape)
    at = [[rng.uniform(-0.5, n - 0.5) for n in shape] for _ in range(50)] + [[n - 1 for n in shape], [0 for _ in shape]]
    found = node("console.log(JSON.stringify(d.at.map(p => w.between(d.values, d.counts, p))))",
                 {"values": values.ravel().tolist(), "counts": shape, "at": at})
    assert found == pytest.approx([between(values, p) for p in at], abs=1e-12)


@needs_node
def test_script_tells_what_is_not_known():
    """Beside an unknown point there is no value; on a known one there is."""
    found = node("console.log(JSON.stringify(d.at.map(p => w.between([1, null, 3], [3], p))))", {"at": [[0], [0.5], [1.5], [2]]})
    assert found == [1, None, None, 3]


@needs_node
def test_script_against_the_works_run_directly():
    """pH and alkalinity it says are those of fixed doses sent through the step, to the error that the page tells."""
    answer, grid = answer_of("upland"), record("upland")
    percents = [[100, 100], [100, 97.75], [33.25, 150.5], [0, 0], [200, 0]]
    lime, gas = (np.array([p[k] / 100.0 * line.mg_l_product for p in percents]) for k, line in enumerate(answer.feeds))
    fixed = Dose(name="fixed", products=answer.train.passed[0].step.products,
                 mol_l=(lime * 0.92 / LIME * 1e-3, gas * 0.999 / GAS * 1e-3))
    water = run_train(answer.train.raw.take(np.zeros(len(percents), dtype=int)), [fixed]).final
    said = answers(grid, percents)
    at = {(c["label"], i): i for i, c in enumerate(grid["channels"])}
    ph, alkalinity = (next(i for (name, i) in at if name == label) for label in ("pH", "Alkalinity"))
    off = np.abs([float(s["texts"][ph]) for s in said] - water.water().ph)
    assert off.max() <= grid["channels"][ph]["error"] + 0.01
    assert [float(s["texts"][alkalinity]) for s in said] == pytest.approx(water.alkalinity_eq_l * 50_043.0, abs=0.06)


@needs_node
def test_script_at_the_plan():
    """The doses, rates and settings of the sheet, every window kept."""
    answer = answer_of("upland")
    (said,) = answers(record("upland"), [[100, 100]])
    for line, dose in zip(answer.feeds, said["doses"], strict=True):
        assert dose.startswith(f"{line.mg_l_product:.1f} mg/L, ")
        assert f"{float(line.setting.setting_pct[0]):.1f} %" in dose
    assert "L/h (" in said["doses"][0]
    assert "lb/h)" in said["doses"][1]
    assert {w["state"] for w in said["windows"]} == {"kept"}
    assert said["verdict"] == "pH 8.40. Every window is kept."


@needs_node
def test_script_says_which_window_is_lost():
    """pH and alkalinity with no lime; alkalinity alone kept with no gas, and the guard rails passed."""
    none, no_gas = answers(record("upland"), [[0, 100], [100, 0]])
    assert [w["state"] for w in none["windows"]] == ["NOT KEPT", "kept", "NOT KEPT"]
    assert "final pH: pH 8.30 to 8.50: NOT KEPT (" in none["verdict"]
    assert [w["state"] for w in no_gas["windows"]] == ["NOT KEPT", "NOT KEPT", "kept"]
    assert no_gas["windows"][1]["words"].startswith("guard rails: pH 6 to 9.5")


@needs_node
def test_script_does_not_tell_what_it_cannot():
    """Closer to the end of a window than the error, it says so; just beyond it, it tells; an open end is none."""
    channel = {"label": "pH", "kind": "plain", "digits": 2, "nothing": 0.05, "error": 0.03, "close": 1e-4,
               "windows": [{"words": "x", "low": 8.0, "high": None}], "values": [7.0, 9.0]}
    moved = {"points": 2, "dose": 10.0, "rate": 1.0, "unit": "L/h", "us_rate": 1.0, "us_unit": "gal/h", "knob": "speed",
             "settings": [None, 50.0]}
    grid = {"largest": 200.0, "moved": [moved], "channels": [channel]}
    said = answers(grid, [[100 + x] for x in (-4, -2, 2, 4, 100)])
    assert [s["windows"][0]["state"] for s in said] == ["NOT KEPT", "AT THE EDGE", "AT THE EDGE", "kept", "kept"]
    assert "out of reach of its machine" in said[0]["doses"][0]
    assert said[-1]["doses"] == ["20.0 mg/L, 2.00 L/h (2.00 gal/h), speed 50.0 %"]


@needs_node
def test_script_moves_the_page():
    """A slider that is moved changes the figures, the words and what a screen reader hears; the button goes back."""
    grid = record("upland")
    channels, windows = len(grid["channels"]), sum(len(c["windows"]) for c in grid["channels"])
    code = """
    function element(data) { return {data, value: "100", hidden: true, textContent: "", heard: {}, on: {},
      getAttribute(n) { return this.data; }, setAttribute(n, v) { this.heard[n] = v; },
      addEventListener(n, f) { this.on[n] = f; }}; }
    const all = {"input": d.grid.moved.map(element), "[data-dose]": d.grid.moved.map(element), "button": [element()],
      "[data-channel]": Array.from({length: d.channels}, (x, i) => element(String(i))),
      "[data-window]": Array.from({length: d.windows}, element), "[data-verdict]": [element()]};
    const panel = {hidden: true, querySelectorAll(s) { return all[s]; }, querySelector(s) { return all[s][0]; }};
    const seen = () => ({cells: all["[data-channel]"].map(e => e.textContent), doses: all["[data-dose]"].map(e => e.textContent),
      windows: all["[data-window]"].map(e => e.textContent), verdict: all["[data-verdict]"][0].textContent,
      heard: all["input"].map(e => e.heard["aria-valuetext"]), hidden: panel.hidden});
    w.start(panel, d.grid); const first = seen();
    all["input"][0].value = "150"; all["input"][0].on.input(); const moved = seen();
    all["button"][0].on.click(); console.log(JSON.stringify([first, moved, seen()]));"""
    first, moved, back = node(code, {"grid": grid, "channels": channels, "windows": windows})
    assert not first["hidden"]
    assert back == first
    assert moved["cells"][0] != first["cells"][0]
    assert "NOT KEPT" in moved["verdict"]
    assert moved["heard"] == moved["doses"]
    assert all(": kept (" in w for w in first["windows"])


# ---------------------------------------------------------------- data


@pytest.mark.parametrize("name", ["upland", "minimal", "many", "blend", "nitrify", "ten feeds"])
def test_stored_values_are_those_of_the_grid(name):
    """To half of the last stored place, row by row; the errors too; nothing but plain numbers."""
    answer = answer_of(name)
    for k, grid in enumerate(grids_of(answer.train)):
        found = record(name, k)
        json.dumps(found, allow_nan=False)
        assert [m["points"] for m in found["moved"]] == [x.size for x in grid.mg_l]
        for c, r in zip(grid.channels, found["channels"], strict=True):
            stored = np.array([np.nan if v is None else v for v in r["values"]])
            np.testing.assert_allclose(stored, c.values.ravel(), rtol=0.0, atol=0.51 * r["close"])
            assert r["error"] == pytest.approx(np.nan_to_num(c.error), abs=1e-6)


def test_rates_are_those_of_the_feeds():
    """Of the product in the step that is moved, also where it goes in twice."""
    answer = answer_of("many")
    for k, grid in enumerate(grids_of(answer.train)):
        for moved, found in zip(grid.moved, record("many", k)["moved"], strict=True):
            (line,) = [x for x in answer.feeds if (x.step, x.product.name) == (moved.step, moved.product.name)]
            l_h, kg_h = float(line.rate.l_h[0]), float(line.rate.product_kg_h[0])
            assert (found["dose"], found["unit"]) == (pytest.approx(line.mg_l_product), "L/h" if line.rate.moved else "kg/h")
            assert found["rate"] == (l_h if line.rate.moved else kg_h)


HOSTILE = '</script><script>alert(1)</script><!--&amp;"\u2028'


def test_no_name_ends_the_data():
    """Neither tag nor comment nor entity stands in the block, and it reads as it was."""
    text = data_script("x", [HOSTILE])
    inner = text.removeprefix('<script type="application/json" id="x">').removesuffix("</script>")
    assert not set("<>&") & set(inner)
    assert json.loads(inner) == [HOSTILE]


class Tags(HTMLParser):
    """Tags with their attributes, and ids that labels point at."""

    def __init__(self):
        super().__init__()
        self.found = []

    def handle_starttag(self, tag, attrs):
        """Note a tag."""
        self.found.append((tag, dict(attrs)))


def tags(html):
    """Tags of a text."""
    reader = Tags()
    reader.feed(html)
    return reader.found


def hostile(answer):
    """The same answer with names of a step that try to get out."""
    passed = tuple(replace(p, step=replace(p.step, name=HOSTILE)) for p in answer.train.passed)
    return replace(answer, train=replace(answer.train, passed=passed))


def test_names_stay_text():
    """The same tags as with a calm name, and the data of the block readable."""
    calm, odd = ("\n".join(whatif_panels(a)) for a in (answer_of("minimal"), hostile(answer_of("minimal"))))
    assert [t for t, _ in tags(odd)] == [t for t, _ in tags(calm)]
    assert [sorted(a) for _, a in tags(odd)] == [sorted(a) for _, a in tags(calm)]
    data = odd[odd.index('id="whatif-data">') + len('id="whatif-data">'):odd.rindex("</script>")]
    assert any(HOSTILE in w["words"] for c in json.loads(data)[0]["channels"] for w in c["windows"])


def test_sliders_can_be_reached_and_heard():
    """A range with a label each, a live verdict, hidden until the script runs; not printed."""
    found = tags("\n".join(whatif_panels(answer_of("many"))))
    sliders = [a for t, a in found if t == "input"]
    assert len(sliders) == 7
    assert {a["type"] for a in sliders} == {"range"}
    assert len({a["id"] for a in sliders}) == 7
    assert [a["for"] for t, a in found if t == "label"] == [a["id"] for a in sliders]
    assert all((a["min"], a["max"], a["value"]) == ("0", "200", "100") for a in sliders)
    panels = [a for _, a in found if "data-whatif" in a]
    assert len(panels) == 6
    assert all("hidden" in a and "screen" in a["class"].split() for a in panels)
    assert [a["aria-live"] for t, a in found if t == "output"] == ["polite"] * 6


def test_without_a_script_the_table_stands_open():
    """A row for every tenth of the grid with the figures of the grid, the row of the plan keeps its windows."""
    answer = answer_of("minimal")
    (grid,) = grids_of(answer.train)
    html = "\n".join(whatif_panels(answer))
    assert [a for t, a in tags(html) if t == "details"] == [{"class": "curves", "open": None}]
    rows = [line for line in html.splitlines() if '<th scope="row">' in line and "data-channel" not in line]
    assert len(rows) == 11
    ph = next(c for c in grid.channels if c.quantity.name == "ph")
    for k, row in enumerate(rows):
        assert f">{100 * k // 5}</td>" in row
        assert f">{ph.values[16 * k]:.2f}</td>" in row
        assert ("NOT KEPT" in row) == (not 7.5 - 1e-6 <= ph.values[16 * k] <= 7.9 + 1e-6)
    assert "kept</td>" in rows[5]


def test_tables_of_two_doses_hold_the_other_at_the_plan():
    """Lime from none to twice with the gas of the plan, then the gas with the lime of the plan."""
    grid = grids_of(answer_of("upland").train)[0]
    html = "\n".join(whatif_panels(answer_of("upland")))
    rows = [line for line in html.splitlines() if '<th scope="row">' in line and "data-channel" not in line]
    ph = grid.channels[0].values
    assert len(rows) == 22
    for k in range(11):
        assert f">{ph[8 * k, 40]:.2f}</td>" in rows[k]
        assert f">{ph[40, 8 * k]:.2f}</td>" in rows[11 + k]


def test_the_page_tells_grid_way_and_error():
    """How many points, how it is read between them, and the largest error of pH, rounded."""
    html = "\n".join(whatif_panels(answer_of("upland")))
    error = max(c.error for c in grids_of(answer_of("upland").train)[0].channels if c.quantity.name == "ph")
    assert f"Read bilinearly between 81 by 81 doses. Checked against the works run in the middle of every cell and of every edge, the " \
        f"largest error anywhere is: pH {error:.2g}," in html
    assert "Read linearly between 161 doses." in "\n".join(whatif_panels(answer_of("minimal")))
    assert error < 0.03


def test_nothing_to_move():
    """No dose, or none found."""
    assert whatif_panels(answer_of("no dose")) == ()
    assert whatif_panels(answer_of("infeasible")) == ()


def test_script_asks_for_nothing():
    """No request, no text taken for code or tags."""
    script = whatif_script()
    for word in ("fetch", "XMLHttp", "import", "eval", "innerHTML", "http", "insertAdjacent", "document.write"):
        assert word not in script

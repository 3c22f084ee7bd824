"""The page on neutralization: it repeats the shipped tables, names the keys and files of a real design, and its code runs."""

import csv
import importlib
import json
import re
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from aquabuf.assess.tank.design import design
from aquabuf.assess.tank.design_json import design_record
from aquabuf.assess.tank.faults import FAULTS
from aquabuf.assess.tank.job_file import read_stream
from aquabuf.report.tank_run import OUTPUT_FILES

ROOT = Path(__file__).parents[1]
PAGE = ROOT / "docs" / "tank.md"
TEXT = PAGE.read_text(encoding="utf-8")
DEMO = ("plating", "dairy", "regeneration")
DATA, TANK = ROOT / "aquabuf" / "data", ROOT / "aquabuf" / "assess" / "tank"


def shipped(name):
    """Rows of a shipped table, read with the csv module alone."""
    with (DATA / f"{name}.csv").open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def cells(line):
    """Cells of a row of a table of the page."""
    return [cell.strip().replace("\\|", "|") for cell in re.split(r"(?<!\\)\|", line.strip()[1:-1])]


def table(*head):
    """The one table of the page with this head."""
    lines = TEXT.splitlines()
    (k,) = [i for i, line in enumerate(lines) if line.startswith("|") and cells(line) == list(head)]
    end = next(i for i in range(k, len(lines) + 1) if i == len(lines) or not lines[i].startswith("|"))
    return [cells(row) for row in lines[k + 2:end]]


def codes(text):
    """Words in code marks."""
    return re.findall(r"`([^`]+)`", text)


def numbers(text):
    """Plain numbers of a cell."""
    return {float(x) for x in re.findall(r"(?<![\w.])-?\d+(?:\.\d+)?(?:e[+-]?\d+)?", text)}


def figures(row, *names):
    """Numbers of a row of a shipped table, as the page rounds them."""
    return {float(f"{float(row[n]):.4g}") for n in names if row[n]}


# ------------------------------------------------------------------ shipped tables


def test_every_rule_of_thumb():
    """Key, group, words, source and mark in the order of the table; each of its figures."""
    rows, wanted = table("rule", "about", "figure", "what", "source", "mark"), shipped("tank_rules")
    assert [[r[0], r[1], *r[3:]] for r in rows] == [[f"`{w['key']}`", w["group"], w["words"], w["source"], w["mark"]] for w in wanted]
    for row, w in zip(rows, wanted, strict=True):
        assert figures(w, "low", "value", "high") <= numbers(row[2]), w["key"]


def test_every_rule_of_equalization_and_batches():
    """Name, words or range, source and mark of three tables below each other."""
    rows = table("rule", "formula or figure", "what", "source", "mark")
    wanted = [(w["name"], w["words"], w["source"], w["mark"]) for w in shipped("tank_volume_rules")]
    wanted += [(w["name"], w["range"], w["source"], w["mark"]) for w in shipped("tank_attenuation")]
    wanted += [(w["name"], w["words"], w["source"], w["mark"]) for w in shipped("tank_batch_rules")]
    assert [(codes(r[0])[0], r[2], r[3], r[4]) for r in rows] == wanted
    for w in shipped("tank_attenuation"):
        assert f"`{w['formula']}`" in {r[1] for r in rows}
    for w in shipped("tank_batch_rules"):
        assert any(f"{w['quantity']} {w['operator']} {w['limit']}".strip() in r[1] for r in rows), w["name"]


def test_every_reagent_rule():
    """Products, quantity, words, source and mark in order; each figure."""
    rows, wanted = table("products", "quantity", "figure", "what", "source", "mark"), shipped("tank_reagents")
    assert [[r[0], r[1], *r[3:]] for r in rows] == [
        [w["products"].replace(";", ", "), f"`{w['quantity']}`", w["words"], w["source"], w["mark"]] for w in wanted]
    for row, w in zip(rows, wanted, strict=True):
        assert figures(w, "low", "usual", "high") <= numbers(row[2]), (w["products"], w["quantity"])


def test_every_metal():
    """Constants, windows and levels, each with source and mark."""
    one = table("metal", "hydroxide", "pKsp", "log K", "n", "source", "mark")
    two = table("metal", "window", "source", "mark", "begins, done, back", "source", "mark", "level", "source", "mark")
    wanted = shipped("metals")
    assert one == [[f"`{w['name']}`", w["hydroxide"], w["pksp"], w["log_k_up"], w["charge_up"], w["solubility_source"], w["solubility_mark"]]
                   for w in wanted]
    for row, w in zip(two, wanted, strict=True):
        assert row[0] == f"`{w['name']}`"
        assert [row[i] for i in (2, 3, 5, 6, 8, 9)] == [w[n] for n in ("window_source", "window_mark", "table_source", "table_mark",
                                                                        "limit_source", "limit_mark")]
        assert numbers(row[1]) == figures(w, "ph_low", "ph_high")
        assert numbers(row[4]) == figures(w, "table_start", "table_done", "table_back")
        assert numbers(row[7]) == figures(w, "limit_mg_l")


def test_every_toxic_gas():
    """Total, gas, level with what it counts, words, pH to hold, severity."""
    assert table("total", "gas", "level", "told", "hold at pH", "severity") == [
        [f"`{w['name']}`", w["gas"], f"{w['limit_mg_l']} mg/L as {w['counted_as']}", w["words"],
         f"{'above' if w['side'] == 'acid' else 'below'} {w['hold_ph']}", w["severity"]] for w in shipped("gas_hazards")]


def test_every_caution():
    """What it hangs on, words, source."""
    assert table("hangs on", "caution", "source") == [[w["hangs_on"], w["words"], f"{w['source']} ({w['mark']})"]
                                                      for w in shipped("tank_cautions")]


def test_every_failure():
    """Name and words of what the simulation tries."""
    assert table("failure", "what") == [[f"`{name}`", words] for name, words in FAULTS.items()]


# ------------------------------------------------------------------ figures by judgment


def judged():
    """Constants of the table, as module and name, with the value shown."""
    return [(*codes(row[0])[0].split("."), float(row[1])) for row in table("constant", "value", "what")]


@pytest.mark.parametrize(("module", "name", "shown"), judged(), ids=lambda x: str(x))
def test_figures_of_judgment_are_those_of_the_code(module, name, shown):
    """To the digits shown."""
    assert shown == pytest.approx(getattr(importlib.import_module(f"aquabuf.assess.tank.{module}"), name), rel=5e-4)


def test_no_figure_of_judgment_is_left_out():
    """Each constant whose comment calls it practice or judgment is on the page."""
    marked = set()
    for path in TANK.glob("*.py"):
        for line in path.read_text(encoding="utf-8").splitlines():
            found = re.match(r"([A-Z][A-Z0-9_, ]*) = [^#]*\d[^#]*#.*\b(?:practice|judgment)\b", line)
            marked |= {(path.stem, name) for name in found[1].split(", ")} if found else set()
    assert len(marked) > 10
    assert marked - {(module, name) for module, name, _ in judged()} == set()


# ------------------------------------------------------------------ design.json and files


@cache
def records():
    """Records of demo designs as they are written: one simulated for a quarter of a day, the others sized only."""
    jobs = [read_stream(ROOT / "field_data" / f"stream_{name}.toml") for name in DEMO]
    first = replace(jobs[0], trial=replace(jobs[0].trial, days=0.25))
    found = [design(first, cases=2, processes=1), *(design(job, simulate=False) for job in jobs[1:])]
    return [json.loads(json.dumps(design_record(d), allow_nan=False)) for d in found]


def keys():
    """Keys at each dotted path of the records, lists passed through."""
    found = {}

    def walk(value, path):
        if isinstance(value, dict):
            found.setdefault(path, set()).update(value)
            for key, inner in value.items():
                walk(inner, f"{path}.{key}".strip("."))
        for inner in value if isinstance(value, list) else []:
            walk(inner, path)

    walk(records(), "")
    return found


def documented():
    """Each path of the table of design.json, with the words in code marks beside it."""
    return {key: set(codes(what)) - {"null"} for names, what in table("key", "what") for key in codes(names)}


def test_top_keys_are_those_of_a_design():
    """None more, none less, and the same for every stream."""
    assert {path for path in documented() if "." not in path} == keys()[""]
    assert all(set(record) == keys()[""] for record in records())


def test_each_inner_record_has_its_row_and_each_row_its_keys():
    """Every path that holds keys is a row, and the row names exactly these."""
    inner = {path: names for path, names in keys().items() if path}
    assert {path for path, names in documented().items() if names} == set(inner)
    for path, names in inner.items():
        assert documented()[path] == names, path


@pytest.mark.parametrize("key", ["demand", "window", "equalization", "stages", "feed", "simulation", "side_effects", "storage",
                                 "assumptions", "warnings", "cautions"])
def test_keys_that_others_rely_on_are_there(key):
    """The promise of the page, and never empty."""
    assert all(record[key] for record in records() if key != "simulation")
    assert records()[0][key]


def test_output_files_are_those_of_a_run():
    """Each file once, and no other."""
    named = [name for row in table("file", "what") for name in codes(row[0])]
    assert sorted(named) == sorted(OUTPUT_FILES)


def test_columns_of_the_two_series():
    """The columns that the page promises of curve.csv, from the design itself."""
    job = read_stream(ROOT / "field_data" / "stream_plating.toml")
    found = design(job, simulate=False)
    promised = codes(re.search(r"`curve\.csv` has ([^\n]*(?:\n[^\n]+)*?)\. `simulation", TEXT)[1])
    assert list(found.curve.columns) == promised
    assert np.isfinite(found.curve.to_numpy()).all()


# ------------------------------------------------------------------ code


def python_blocks():
    """Python of the page that is no doctest, which tests/test_documents.py runs."""
    return [b for b in re.findall(r"```python\n(.*?)```", TEXT, flags=re.S) if ">>>" not in b]


def test_there_is_python_to_run():
    """The page shows the whole job in Python."""
    assert python_blocks()


@pytest.mark.parametrize("block", python_blocks())
def test_python_of_the_page_runs(block, monkeypatch):
    """From the top of a checkout."""
    monkeypatch.chdir(ROOT)
    exec(compile(block, str(PAGE), "exec"), {})


def streams():
    """TOML of the front pages that is a whole stream file."""
    found = []
    for page in (ROOT / "README.md", *sorted((ROOT / "docs").glob("*.md"))):
        blocks = re.findall(r"```toml\n(.*?)```", page.read_text(encoding="utf-8"), flags=re.S)
        found += [pytest.param(t, id=f"{page.name}-{k}") for k, t in enumerate(blocks) if "[tank]" in t and "[window]" in t]
    return found


@pytest.mark.parametrize("text", streams())
def test_stream_files_of_the_pages_can_be_read(tmp_path, text):
    """As they stand."""
    path = tmp_path / "stream.toml"
    path.write_text(text, encoding="utf-8")
    assert read_stream(path).wastes

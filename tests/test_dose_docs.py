"""The pages on dosing: they repeat the shipped tables, name the files and keys that a run gives, and their plans run."""

import csv
import json
import re
from functools import cache
from pathlib import Path

import pytest

from aquabuf.assess.plant.answer import solve_plan
from aquabuf.assess.plant.answer_json import answer_record
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.chem.products import products
from aquabuf.report.dose_run import OUTPUT_FILES

ROOT = Path(__file__).parents[1]
PAGE, PLAN_PAGE, README = ROOT / "docs" / "dose.md", ROOT / "docs" / "dose_plan.md", ROOT / "README.md"
DEMO_PLANS = ("plan_upland.toml", "plan_river.toml", "plan_wells.toml", "plan_effluent.toml")
CODE = r"`([^`]+)`"
MG_CACO3_PER_EQ = 100.086 / 2.0  # IUPAC masses


def shipped(name):
    """Rows of a shipped table, read with the csv module alone."""
    with (ROOT / "aquabuf" / "data" / f"{name}.csv").open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def cells(line):
    """Cells of a row of a table of a page."""
    return [cell.strip().replace("\\|", "|") for cell in re.split(r"(?<!\\)\|", line.strip().strip("|"))]


def tables(page):
    """Every table of a page: the last line of text above it, its head, its rows."""
    found, above, lines = [], "", page.read_text(encoding="utf-8").splitlines()
    for k, line in enumerate(lines):
        if line.startswith("|") and "".join(lines[k + 1:k + 2]).startswith("|---"):
            end = next((i for i in range(k, len(lines)) if not lines[i].startswith("|")), len(lines))
            found.append((above, cells(line), [cells(row) for row in lines[k + 2:end]]))
        elif line and not line.startswith("|"):
            above = line
    return found


def table(page, *head):
    """The one table of a page whose head begins so."""
    (rows,) = [rows for _, found, rows in tables(page) if found[:len(head)] == list(head)]
    return rows


def codes(text):
    """Words in code marks."""
    return re.findall(CODE, text)


# ------------------------------------------------------------------ tables


def test_output_files_are_those_of_a_run():
    """Each file once, and no other."""
    named = [name for row in table(PAGE, "file") for name in codes(row[0])]
    assert sorted(named) == sorted(OUTPUT_FILES)


def test_no_page_names_another_file():
    """Wherever a page of dosing names a file of results, a run can write it; inputs are those of the demo data."""
    given = {p.name for p in (ROOT / "field_data").iterdir()} | {row["example"].strip('"') for row in shipped("plan_keys")}
    for page in (PAGE, PLAN_PAGE):
        named = re.findall(r"\b[\w/]+\.(?:csv|json|txt|pdf|png|svg)\b", page.read_text(encoding="utf-8"))
        assert {name.rpartition("/")[2] for name in named} - set(OUTPUT_FILES) <= given, page.name


def sections():
    """Sections of the key list by the heading that stands above their table."""
    names = dict.fromkeys(row["section"] for row in shipped("plan_keys"))
    marks = {name: f'`do = "{name.removeprefix("steps.")}"`' for name in names if name.startswith("steps.")}
    own = {"steps": "`[[steps]]`", "products": "`[products.NAME]`", "sources": "`[sources.NAME]`"}
    return {name: marks.get(name) or own.get(name) or f"`[{name}]`" for name in names}


@pytest.mark.parametrize("section", sections())
def test_every_key_of_a_plan(section):
    """Key, words and example of each row of its section, in order; what is needed says so, a default is told."""
    (rows,) = [rows for above, head, rows in tables(PLAN_PAGE) if head[0] == "key" and sections()[section] in above]
    wanted = [row for row in shipped("plan_keys") if row["section"] == section]
    assert [row[:3] for row in rows] == [[f"`{w['key']}`", w["words"], f"`{w['example']}`"] for w in wanted]
    for row, w in zip(rows, wanted, strict=True):
        told = "needed" if w["needed"] == "yes" else "from the tables of rules" if w["default"].startswith("@") else \
            f"`{w['default']}`" if w["default"] else ""
        assert row[3] == told, w["key"]


def test_every_product():
    """Name, formula and equivalents in the order of the table; the asked strengths, and the usual ones by their figure."""
    rows, wanted = table(PLAN_PAGE, "product"), shipped("products")
    assert [row[0] for row in rows] == [w["name"] for w in wanted]
    for row in rows:
        product = products()[row[0]]
        assert row[1] == product.formula
        if row[2] != "by basicity":
            assert (float(row[2]), float(row[3])) == (product.adds["alkalinity"], product.adds.get("carbon", 0.0))
            assert float(row[5]) == pytest.approx(product.adds["alkalinity"] * MG_CACO3_PER_EQ / product.molar_mass_g, abs=6e-4)
            assert row[4] == ", ".join(f"{n} {v:g}" for n, v in product.adds.items() if n not in ("alkalinity", "carbon"))
        if row[6] == "asked":
            assert product.strength is None
        else:
            assert float(row[6].removesuffix(" %")) == pytest.approx(100.0 * product.strength, rel=5e-3)


@pytest.mark.parametrize(("name", "factor"), [
    ("hydrated lime", 1.351), ("soda ash", 0.944), ("caustic soda", 1.251), ("alum 14-water", -0.505), ("alum 18-water", -0.451),
    ("ferric chloride", -0.926), ("sulfuric acid", -1.021), ("sodium bicarbonate", 0.596)])
def test_factors_of_the_page_are_those_of_handbooks(name, factor):
    """mg CaCO3 per mg: 1.35, 0.94, 1.25, 0.50, 0.45, 0.92, 1.02, 0.60 as handbooks round them (trade tables, printed or recalled)."""
    (row,) = [row for row in table(PLAN_PAGE, "product") if row[0] == name]
    assert float(row[5]) == pytest.approx(factor, abs=1.1e-3)


def test_every_quantity():
    """Name, unit, words, and whether a target can be set for it."""
    assert table(PAGE, "quantity") == [
        [f"`{q['name']}`", q["unit"], q["words"], "no" if q["kind"] == "told" else "yes"] for q in shipped("plant_quantities")]


def test_every_rule():
    """Name, use, where it is broken, source."""
    def broken(r):
        return f"{r['quantity']} {r['operator']} {r['limit']}{'' if r['unit'] == '-' else ' ' + r['unit']}"
    assert table(PAGE, "rule") == [[r["name"], r["kinds"], broken(r), r["source"]] for r in shipped("plant_limits")]


# ------------------------------------------------------------------ answer.json


@cache
def answers():
    """Records of the demo plans, as they are written."""
    return [json.loads(json.dumps(answer_record(solve_plan(read_plan(ROOT / "field_data" / name), draws=100))))
            for name in DEMO_PLANS]


def at(record, path):
    """Every dictionary that stands at a dotted path, through lists; the record itself for ""."""
    found = [record]
    for part in filter(None, path.split(".")):
        found = [x for d in found for x in _each(d.get(part))]
    return [d for d in found if isinstance(d, dict)]


def _each(value):
    return value if isinstance(value, list) else [value]


def keys_at(path):
    """Keys of what stands at a path, over all demo plans."""
    return {key for record in answers() for d in at(record, path) for key in d}


def documented():
    """Key of the table of answer.json, and the words in code marks beside it which are no file, section or null."""
    return {key: [w for w in codes(what) if w != "null" and not re.search(r"[.\[]", w)]
            for keys, what in table(PAGE, "key") for key in codes(keys)}


def test_every_key_of_the_answer_is_told():
    """At the top, and nothing that is not there."""
    assert {key.partition(".")[0] for key in documented()} == keys_at("")
    assert set(answers()[0]) == keys_at("")  # the same for every plan


@pytest.mark.parametrize("key", list(documented()))
def test_keys_of_the_page_are_in_a_real_answer(key):
    """Each path exists, and so does each key named beside it."""
    outer, _, last = key.rpartition(".")
    assert last in keys_at(outer)
    assert set(documented()[key]) <= keys_at(key) | keys_at(outer)


@pytest.mark.parametrize("key", [
    "flow", "raw_water", "doses", "doses.feed", "doses.feed.day_tank", "steps", "targets", "limits", "findings", "saturation",
    "store", "curves", "control_ranges", "faults", "error.of_readings", "error.of_feeds", "hold", "season"])
def test_keys_of_a_real_answer_are_on_the_page(key):
    """None is left out."""
    assert keys_at(key) == set(documented()[key])


# ------------------------------------------------------------------ plans


def plans():
    """TOML of the pages that is a whole plan."""
    found = []
    for page in (README, *sorted((ROOT / "docs").glob("*.md"))):
        blocks = re.findall(r"```toml\n(.*?)```", page.read_text(encoding="utf-8"), flags=re.S)
        found += [pytest.param(text, id=f"{page.name}-{k}") for k, text in enumerate(blocks) if "[plan]" in text]
    return found


def test_the_page_of_plans_has_one():
    """There is something to copy."""
    assert [p.id for p in plans() if p.id.startswith(PLAN_PAGE.name)]


@pytest.mark.parametrize("text", plans())
def test_plans_of_the_pages_can_be_solved(tmp_path, text):
    """As they stand, and they hold."""
    path = tmp_path / "plan.toml"
    path.write_text(text, encoding="utf-8")
    answer = solve_plan(read_plan(path), draws=0)
    assert (answer.feasible, answer.reason) == (True, "")
    assert all(line.setting.status[0] == "set" for line in answer.feeds)

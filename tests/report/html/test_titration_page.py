"""The page of titrations: without a result first, figures of the CSV, tones, links, hostile names, same bytes."""

import csv

import pytest
from page_reader import assert_stands_alone, read_page
from titration_tables import ACID, BROKEN, HARD, HEADER, POINTS, SAMPLES, SOFT, facts, points

from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.html.common import ROWS
from aquabuf.report.titration_run import OUTPUT_FILES, PAGE_TITRATIONS, titrate_file
from aquabuf.tables import read_table

HOSTILE = "<b onclick=alert(1)>"
SHORT = "short,0,6\nshort,0.5,5.5\n"  # two points: no method can work


@pytest.fixture
def page(table, tmp_path):
    """Run, and return what stands on the page with the rows of alkalinity.csv."""
    def go(text=POINTS, samples=SAMPLES, *, out="out", figures=0):
        folder = tmp_path / out
        files = TitrationFiles(table(text, "points.csv"), table(samples, "samples.csv"))
        titrate_file(files, folder, TitrationOptions(), figures=figures)
        reader, text = read_page(folder / "report.html")
        assert_stands_alone(reader, text, folder)
        with (folder / "alkalinity.csv").open(encoding="utf-8", newline="") as stream:
            return reader, text, {r["sample_id"]: r for r in csv.DictReader(stream)}
    return go


def with_short(text=POINTS, samples=SAMPLES):
    """The tables with a titration that gives no result."""
    return text + SHORT, samples + facts("short")


def test_each_result_with_its_interval(page):
    """Value and half the 90 % interval (1.645 standard uncertainties) as alkalinity.csv has them; mg/L, method, why."""
    reader, _, results = page()
    for row in reader.table("Sample"):
        r = results[row["Sample"]]
        if r["status"] == "refused":
            assert row["Result (µeq/L)"] == "refused"
            continue
        value, half = (float(x.replace(",", "")) for x in row["Result (µeq/L)"].split(" ± "))
        assert value == pytest.approx(float(r["recommended_ueq_l"]), abs=0.51)
        assert half == pytest.approx(1.645 * float(r["recommended_u_ueq_l"]), abs=0.51)
        assert float(row["mg/L as CaCO3"]) == pytest.approx(float(r["recommended_mg_l_caco3"]), abs=0.0051)
        assert row["Why"] == r["recommended_reason"]
        words = {m["name"]: m["words"] for m in read_table("titration_methods") if m["kind"] == "method"}
        assert row["Method"] == words[r["recommended_method"]]


def test_what_has_no_result_stands_first(page):
    """No result, refused, then those with a warning, then the rest; the card says it in words and with a next step."""
    reader, _, results = page(*with_short())
    order = ["no result", "refused", "warned", "ok"]
    shown = [order.index(results[row["Sample"]]["status"]) for row in reader.table("Sample")]
    assert shown == sorted(shown)
    assert len(shown) == len(results)
    assert shown[0] == 0
    assert [tone for tone, _ in reader.cards] == ["warn", "stop"]
    assert "3 of 5 titrations have a result" in reader.cards[0][1]
    assert "short: no result" in reader.cards[1][1]
    assert "Next:" in reader.cards[1][1]


def test_all_good_is_calm(page):
    """A titration without finding gets an OK and its number on the first screen."""
    reader, _, results = page(f"{HEADER}\n{HARD}", SAMPLES)
    assert [tone for tone, _ in reader.cards] == ["good", "good"]
    assert results["hard"]["status"] == "ok"
    assert f"{float(results['hard']['recommended_ueq_l']):,.0f} ±" in reader.cards[1][1]
    assert "90% interval" in reader.cards[1][1]


def test_nothing_usable_writes_no_page(table, tmp_path):
    """As with the other files."""
    from aquabuf.errors import InputError

    files = TitrationFiles(table(f"{HEADER}\n{BROKEN}", "points.csv"), table(SAMPLES, "samples.csv"))
    with pytest.raises(InputError, match="can be used"):
        titrate_file(files, tmp_path / "out", TitrationOptions(), figures=0)
    assert not (tmp_path / "out" / "report.html").exists()


def test_findings_and_refusals_are_listed(page):
    """Each finding of findings.csv with its remedy; the refused one with its rule."""
    reader, _, results = page(*with_short())
    names = {n for r in results.values() for n in r["warnings"].split("; ") if n}
    assert names
    listed = next(t for t in reader.tables if t[0][:2] == ["Sample", "Finding"])
    assert {row[1] for row in listed[1:]} == names
    (refused,) = reader.table("Name")
    assert (refused["Name"], refused["Found"], refused["Rule"]) == ("broken", "44", "must be 0 to 14")
    assert "Diagnosis" in reader.headings
    assert "What the results rest on" in reader.headings


def test_figures_of_those_to_look_at_first(page):
    """Curve and Gran line of at most a few, and a link to the figure of each; none where none was asked for."""
    reader, _, results = page(*with_short(), figures=9)
    assert len(reader.figures) <= 2 * PAGE_TITRATIONS
    assert reader.figures[0].startswith("Titration curve, short: no result")
    assert {r["figure"] for r in results.values() if r["figure"]} <= set(reader.links)
    assert page(out="none")[0].figures == []


def test_hostile_names_stay_text(page):
    """In tables, cards and figures."""
    calm, _, _ = page(f"{HEADER}\n{SOFT}{ACID}", SAMPLES, figures=2, out="calm")
    text = f"{HEADER}\n{SOFT}{ACID}".replace("soft", HOSTILE)
    reader, shown, _ = page(text, SAMPLES.replace("soft", HOSTILE), figures=2)
    assert HOSTILE in [row["Sample"] for row in reader.table("Sample")]
    assert "onclick" not in [name for name, _ in reader.attributes]
    assert reader.tags.count("b") == calm.tags.count("b") == 0
    assert HOSTILE not in shown


def test_same_bytes_twice_and_no_path(page, tmp_path):
    """Figures included."""
    assert page(figures=2)[1] == page(figures=2, out="two")[1]
    assert str(tmp_path) not in page(out="three")[1]


def test_many_titrations(page):
    """More than the page lists: the rest is behind a link."""
    names = [f"t{k}" for k in range(ROWS + 30)]
    text = HEADER + "\n" + "".join(points(name, 2e-3, strength=0.05, count=12) for name in names)
    samples = SAMPLES.splitlines()[0] + "\n" + "".join(facts(name, strength="0.05") for name in names)
    reader, shown, _ = page(text, samples)
    assert sum(len(t) - 1 for t in reader.tables if t[0][0] == "Sample" and t[0][1] != "Finding") == ROWS
    assert f"The first {ROWS} of {len(names)} titrations" in shown


def test_files_are_described():
    """Every file that a run can write."""
    assert [row["file"] for row in read_table("page_files") if row["command"] == "titration"] == list(OUTPUT_FILES)

"""The page of a lake survey: worst first by the ranking, figures of the CSV, tones, links, hostile names, same bytes."""

import csv

import pytest
from lake_tables import ALDER, BIRCH, CEDAR, SURVEY, series, table_of
from page_reader import assert_stands_alone, read_page

from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.lake.schemes import shipped_schemes
from aquabuf.report.html.common import OPEN_ROWS, ROWS
from aquabuf.report.lake_run import OUTPUT_FILES, LakeFiles, assess_survey
from aquabuf.tables import read_table

HOSTILE = "</td><script>alert(1)</script>"
SCHEME = shipped_schemes()["survey_bands"]


@pytest.fixture
def survey(table, tmp_path):
    """Run, and return what stands on the page and the folder."""
    def go(text=SURVEY, *, out="out", figure=False, **options):
        folder = tmp_path / out
        assess_survey(LakeFiles(survey=table(text, "lakes.csv")), folder, LakeOptions(**({"draws": 0} | options)),
                      figure=figure)
        reader, page = read_page(folder / "report.html")
        assert_stands_alone(reader, page, folder)
        return reader, page, folder
    return go


def rows_of(folder, name):
    """Rows of a CSV of the run."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def test_lakes_stand_in_the_order_of_the_ranking(survey):
    """As priorities.csv has them, with class, probability, ANC, pH and exceedance of results.csv."""
    reader, _, folder = survey(draws=100)
    shown = reader.table("Lake")
    expected = rows_of(folder, "priorities.csv")
    results = {r["row"]: r for r in rows_of(folder, "results.csv")}
    assert [r["Lake"] for r in shown] == [r["site"] or r["sample_id"] for r in expected]
    for row, p in zip(shown, expected, strict=True):
        r = results[p["row"]]
        assert row["Class"].startswith(r["class"])
        assert float(row["Probability"]) == pytest.approx(float(r["class_probability"]), abs=0.0051)
        assert row["pH"] == f"{float(r['ph']):.2f}"
        assert row["Why"] == p["reason"]
        for title, name in (("ANC (µeq/L)", "anc_used_ueq_l"), ("Acid to pH 6 at air (µeq/L)", "acid_to_ph_6_0_open_ueq_l"),
                            ("Exceedance (meq/m²/yr)", "exceedance_meq_m2_yr")):
            if not r[name]:
                assert row[title] == ""
                continue
            value, low, _, high = row[title].replace("(", "").replace(")", "").replace(",", "").split()
            for text, end in ((value, ""), (low, "_low"), (high, "_high")):
                assert float(text) == pytest.approx(float(r[name + end]), abs=0.56), title


def test_the_first_screen(survey):
    """How many are at risk, and the worst with class, rule, source and next step: Cedar Pool is acid by its ANC of -20."""
    reader, _, folder = survey()
    risk = {c.name for c in SCHEME.classes if c.at_risk}
    at_risk = sum(r["class"] in risk for r in rows_of(folder, "results.csv"))
    assert [tone for tone, _ in reader.cards] == ["warn", "warn"]
    assert f"{at_risk} of 4 lakes" in reader.cards[0][1]
    worst = SCHEME.classes[0]
    for words in ("Cedar Pool", worst.name, "-20", "Gran ANC ≤ 0 µeq/L", worst.source[:20], worst.next_step[1:]):
        assert words in reader.cards[1][1], words


def test_a_lake_that_is_not_sensitive_is_calm(survey):
    """ANC of 500 µeq/L is above every limit."""
    reader, _, _ = survey("sample_id,anc_ueq_l\na,500\n")
    assert [tone for tone, _ in reader.cards] == ["good", "good"]
    assert "0 of 1 lake is at risk" in reader.cards[0][1]


def test_a_lake_without_class_is_noted(survey):
    """A pH alone gives no class by ANC; the card says so and calls for a titration."""
    reader, _, _ = survey("sample_id,ph,temperature_c\na,6.5,10\n")
    assert [tone for tone, _ in reader.cards] == ["note", "note"]
    assert "no class" in reader.cards[1][1]
    assert "itrate it" in reader.cards[1][1]


def test_groups(survey):
    """Counts of groups.csv, the region with the larger share at risk first, all lakes last."""
    reader, _, folder = survey(table_of(ALDER, BIRCH, {**CEDAR, "region": "west"}, {**ALDER, "sample_id": "x", "site": "X"}))
    rows = reader.table("Region")
    counts = {r["group"]: r for r in rows_of(folder, "groups.csv")}
    assert rows[-1]["Region"] == "all lakes"
    assert [int(r["Lakes"]) for r in rows[:-1]] == [int(counts[r["Region"]]["lakes"]) for r in rows[:-1]]
    shares = [float(r["Share at risk"].rstrip(" %")) for r in rows[:-1]]
    assert (rows[0]["Region"], shares) == ("west", [100.0, 0.0, 0.0])


def test_trends_those_that_do_not_recover_first(survey):
    """A lake whose ANC falls by 2 µeq/L a year stands before one whose ANC rises as its sulfate falls."""
    text = table_of(*series("Fir", range(20, 42, 2), range(80, 58, -2)), *series("Ash", range(42, 20, -2), [60] * 11))
    reader, _, folder = survey(text, figure=True)
    rows = next(t for t in reader.tables if t[0][1] == "Recovers from acid")[1:]
    assert [(row[0], row[1]) for row in rows] == [("Ash", "no"), ("Fir", "yes")]
    assert [float(row[3]) for row in rows] == pytest.approx([-2.0, 2.0], abs=0.01)
    assert [r["site"] for r in rows_of(folder, "recovery.csv")] == ["Fir", "Ash"]
    assert any(words.startswith("Fir: ") for words in reader.figures)
    assert "Trends" not in survey(out="none")[0].headings


def test_blocks_of_the_report_are_on_the_page(survey):
    """What the text report tells of, the page does: tolerance, loads, assumptions, rules, cautions."""
    reader, page, _ = survey()
    for title in ("Acid tolerance", "Critical load of acidity", "Quality", "What the answers rest on", "Cautions"):
        assert title in reader.headings
    for title in ("Schemes", "Checks", "Constants and where they hold", "Where this comes from", "Limits behind the warnings"):
        assert f"<summary>{title}</summary>" in page
    limits = next(t for t in reader.tables if t[0][:2] == ["Warning", "Lakes"])
    assert [row[0] for row in limits[1:]] == [r["words"] for r in read_table("lake_limits")]
    assert not [row[2] for row in limits[1:] if "_" in row[2]]


def test_figures(survey):
    """Panels that say their numbers; none where none was asked for."""
    reader, _, _ = survey(figure=True)
    assert len(reader.figures) == 4
    assert "1 chronically acidic" in reader.figures[0]
    assert survey(out="none")[0].figures == []


def test_hostile_names_stay_text(survey):
    """Site and region from outside."""
    calm, _, _ = survey(table_of(ALDER, BIRCH, CEDAR), figure=True, out="calm")
    reader, page, _ = survey(table_of({**ALDER, "site": HOSTILE}, {**BIRCH, "region": HOSTILE}, CEDAR), figure=True)
    assert reader.tags.count("script") == calm.tags.count("script") == 1
    assert HOSTILE in [r["Lake"] for r in reader.table("Lake")]
    assert HOSTILE in [r["Region"] for r in reader.table("Region")]
    assert HOSTILE not in page


def test_same_bytes_twice_and_no_path(survey, tmp_path):
    """Figures included."""
    assert survey(figure=True)[1] == survey(figure=True, out="two")[1]
    assert str(tmp_path) not in survey(out="three")[1]


def test_many_lakes(survey):
    """The first 200 of the ranking, the rest behind a link."""
    text = "sample_id,anc_ueq_l\n" + "".join(f"a{k},{k - 100}\n" for k in range(1000))
    reader, page, folder = survey(text)
    tables = [t for t in reader.tables if t[0][0] == "Lake"]
    assert [len(t) - 1 for t in tables] == [OPEN_ROWS, ROWS - OPEN_ROWS]
    shown = [row[0] for t in tables for row in t[1:]]
    assert shown == [r["sample_id"] for r in rows_of(folder, "priorities.csv")][:ROWS]
    assert f"The first {ROWS} of 1,000 lakes" in page
    assert len(page) < 300_000


def test_files_are_described(survey):
    """Every file that a run can write, and a link to each that it wrote."""
    assert [row["file"] for row in read_table("page_files") if row["command"] == "lake"] == list(OUTPUT_FILES)
    reader, _, folder = survey(figure=True)
    assert {path.name for path in folder.iterdir()} - {"report.html"} <= set(reader.links)

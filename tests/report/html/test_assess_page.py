"""The page of an assessment: worst first, figures of the CSV, tones, links, hostile names, few rows, same bytes."""

import csv

import pytest
from page_reader import assert_stands_alone, read_page
from run_table import TABLE

from aquabuf.report.chains import ON_PAGE
from aquabuf.report.html.common import OPEN_ROWS, ROWS, Kept, blocks_of, quantity_words, rule_words
from aquabuf.report.run import OUTPUT_FILES
from aquabuf.tables import read_table

HOSTILE = '<script>alert(1)</script>'
CALM = "sample_id,water_kind,temperature_c,ph,alkalinity_meq_l\nvale,stream,12,7.8,1.5\n"
GROUPS = """sample_id,region,temperature_c,ph,alkalinity_meq_l
a,upland,8,6.6,0.03
b,upland,8,6.7,0.05
c,plain,12,7.8,1.5
d,plain,12,7.9,1.6
"""


def results(folder, name="results.csv"):
    """Rows of a CSV of the run."""
    with (folder / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def page_of(folder):
    """The page that a run wrote."""
    reader, page = read_page(folder / "report.html")
    assert_stands_alone(reader, page, folder)
    return reader, page


def test_figures_of_the_page_are_those_of_the_table(run):
    """Every sample, pH to two decimals, alkalinity and acid to pH 6 to three, the least acid first."""
    _, folder = run(draws=100)
    rows = page_of(folder)[0].table("Sample")
    expected = sorted(results(folder), key=lambda r: float(r["acid_to_ph_6_0_meq_l"]))
    assert [r["Sample"] for r in rows] == [r["sample_id"] for r in expected]
    for shown, r in zip(rows, expected, strict=True):
        assert float(shown["pH"]) == pytest.approx(float(r["ph"]), abs=0.0051)
        assert float(shown["Alkalinity (meq/L)"]) == pytest.approx(float(r["alkalinity_meq_l"]), abs=0.00051)
        value, low, _, high = shown["Acid to pH 6 (meq/L)"].replace("(", "").replace(")", "").split()
        for text, end in ((value, ""), (low, "_low"), (high, "_high")):
            assert float(text) == pytest.approx(float(r[f"acid_to_ph_6_0_meq_l{end}"]), abs=0.00051)


def test_the_first_screen_says_what_is_wrong(run):
    """Warned samples are counted as verdicts.csv has them; the worst is named with rule, source and next step."""
    _, folder = run()
    reader, _ = page_of(folder)
    warned = {r["sample_id"] for r in results(folder, "verdicts.csv")}
    assert [tone for tone, _ in reader.cards] == ["warn", "warn"]
    assert f"{len(warned)} of 4 samples break a limit" in reader.cards[0][1]
    limit = next(r for r in read_table("limits") if r["name"] == "may turn acid")
    assert "Worst buffered: hill, " + limit["words"] in reader.cards[1][1]
    assert "alkalinity below 0.05 meq/L" in reader.cards[1][1]
    assert limit["source"][:20] in reader.cards[1][1]
    assert limit["next_step"][1:] in reader.cards[1][1]


def test_no_warning_is_calm(run):
    """A water that breaks nothing gives an OK in words and no warning."""
    reader, page = page_of(run(CALM)[1])
    assert [tone for tone, _ in reader.cards] == ["good", "good"]
    assert "OK" in reader.cards[0][1]
    assert "No limit is broken in 1 sample" in reader.cards[0][1]
    assert "Warnings and their rules" not in page


def test_warnings_have_their_rule_in_words(run):
    """As many samples as verdicts.csv has of each; no name of a column among the rules."""
    _, folder = run()
    rows = page_of(folder)[0].table("Warning")
    verdicts = [r["warning"] for r in results(folder, "verdicts.csv")]
    words = {r["words"]: r["name"] for r in read_table("limits")}
    assert {words[r["Warning"]]: int(r["Samples"]) for r in rows} == {name: verdicts.count(name) for name in verdicts}
    assert not [r["Rule"] for r in rows if "_" in r["Rule"]]


def test_refused_rows_have_their_remedy(run):
    """As rejected.csv has them."""
    _, folder = run()
    (row,) = page_of(folder)[0].table("Name")
    (expected,) = results(folder, "rejected.csv")
    assert (row["Name"], row["Row"], row["Column"], row["Rule"], row["What to do"]) == tuple(
        expected[name] for name in ("sample_id", "row", "column", "rule", "remedy"))


def test_groups_the_worst_first(run):
    """Counts and extremes of each region, the one with the lower median first."""
    _, folder = run(GROUPS)
    rows = page_of(folder)[0].table("Region")
    assert [(r["Region"], r["Samples"], r["Lowest pH"]) for r in rows] == [("upland", "2", "6.60"), ("plain", "2", "7.80")]
    assert not [h for h in page_of(run(out="x")[1])[0].headings if h == "By region"]


def test_figures_only_where_asked_for(run):
    """Four panels that say their numbers; none with no figure."""
    reader, _ = page_of(run(figure=True)[1])
    assert len(reader.figures) == 4
    assert "hill" in reader.figures[0]
    assert page_of(run(out="none")[1])[0].figures == []


def test_hostile_names_stay_text(run):
    """A name with a tag in it is shown and does nothing, in tables, cards and figures."""
    calm, _ = page_of(run(figure=True, out="calm")[1])
    reader, page = page_of(run(TABLE.replace("hill", HOSTILE).replace("torn", "\u202etorn"), figure=True)[1])
    assert reader.tags.count("script") == calm.tags.count("script") == 1
    assert reader.table("Sample")[0]["Sample"] == HOSTILE
    assert "\u202e" not in page


def test_same_bytes_twice_and_no_path(run, tmp_path):
    """Figures included."""
    first, second = (run(out=name, figure=True)[1] / "report.html" for name in ("one", "two"))
    assert first.read_bytes() == second.read_bytes()
    assert str(tmp_path) not in first.read_text(encoding="utf-8")


def test_many_samples(run):
    """10,000 samples: the worst 200, the rest behind a link; small, and drawn in little time."""
    lines = "".join(f"s{k},lake,{5 + k % 20},{6 + k % 300 / 100:.2f},{0.02 + k * 1e-4:.4f}\n" for k in range(10_000))
    _, folder = run("sample_id,water_kind,temperature_c,ph,alkalinity_meq_l\n" + lines)
    reader, page = page_of(folder)
    assert len([t for t in reader.tables if t[0][0] == "Sample"]) == 2
    shown = [row[0] for t in reader.tables if t[0][0] == "Sample" for row in t[1:]]
    values = {r["sample_id"]: float(r["acid_to_ph_6_0_meq_l"]) for r in results(folder)}
    assert len(shown) == ROWS
    assert len(reader.table("Sample")) == OPEN_ROWS
    assert max(values[name] for name in shown) <= sorted(values.values())[ROWS]
    assert f"The first {ROWS} of {len(values):,} samples" in page
    before, chains = page.split('<section id="chains">')
    chains, after = chains.split("</section>", 1)
    assert len(before) + len(after) < 300_000
    assert chains.count("<details") == ON_PAGE
    assert len(chains) < ON_PAGE * 20_000


def test_provenance_and_files(run):
    """The hash of run.json, the program, and a link to every file but the page itself."""
    _, folder = run(figure=True)
    reader, page = page_of(folder)
    assert set(OUTPUT_FILES) - {"report.html"} <= set(reader.links)
    assert "sha256" in page
    assert [row["file"] for row in read_table("page_files") if row["command"] == "assess"] == list(OUTPUT_FILES)


def test_a_failed_run_writes_no_page(table, tmp_path):
    """Where nothing is assessed there is nothing to show."""
    from aquabuf.assess.options import Options
    from aquabuf.errors import InputError
    from aquabuf.report.run import assess_file

    with pytest.raises(InputError, match="can be assessed"):
        assess_file(table("sample_id,temperature_c,ph,alkalinity_meq_l\na,12,44,1\n"), tmp_path / "out", Options(draws=0))
    assert not (tmp_path / "out" / "report.html").exists()


# ---------------------------------------------------------------- shared helpers


def test_kept_rows_are_the_least_of_all_pieces():
    """By rank, ties in the order of the file, what is missing last; the total counts all."""
    import pandas as pd

    kept = Kept(most=3)
    kept.add(pd.DataFrame({"n": [1, 2, 3]}), [5.0, float("nan"), 2.0])
    kept.add(pd.DataFrame({"n": [4, 5]}), [2.0, 1.0])
    assert [r["n"] for r in kept.rows] == [5, 3, 4]
    assert kept.total == 5


def test_blocks_of_a_summary():
    """Titles and items come apart, lines of an item together."""
    first, second = blocks_of("One line\nand more.\n\nTitle (why)\n  - an item\n    that goes on\n  - another\n")
    assert (first.title, first.lines) == ("One line and more.", ())
    assert (second.title, second.lines) == ("Title (why)", ("an item that goes on", "another"))


@pytest.mark.parametrize(("table", "columns"), [("limits", "results"), ("lake_limits", "lake_results")])
def test_rules_have_no_names_of_columns(table, columns):
    """Every shipped limit can be said in words."""
    from aquabuf.assess.lake.columns import lake_columns
    from aquabuf.assess.limits import shipped_limits
    from aquabuf.assess.options import Options
    from aquabuf.assess.sample.columns import result_columns

    words = quantity_words(result_columns(Options()) if columns == "results" else lake_columns((6.0,)))
    for limit in shipped_limits(table):
        said = rule_words(limit, words)
        assert "_" not in said
        assert f" {limit.limit:g}" in said

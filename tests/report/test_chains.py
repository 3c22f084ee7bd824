"""Chains on the pages: of the samples that stand first, with the words that the command prints, however it is read."""

import re
from html import unescape
from pathlib import Path

import pytest

from aquabuf.assess.lake.options import LakeOptions
from aquabuf.assess.options import Options
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report import run as run_module
from aquabuf.report import titration_run as titration_module
from aquabuf.report.chains import ON_PAGE
from aquabuf.report.explain_run import chains_of_run
from aquabuf.report.lake_run import LakeFiles, assess_survey
from aquabuf.report.run import assess_file
from aquabuf.report.titration_run import titrate_file

DATA = Path(__file__).parents[2] / "field_data"


def assess_streams(folder):
    """A run over the demo streams."""
    assess_file(DATA / "stream_survey.csv", folder, Options(draws=100), figure=False)
    return DATA / "stream_survey.csv"


def assess_demo_lakes(folder):
    """A run over the demo lakes."""
    assess_survey(LakeFiles(survey=DATA / "lake_survey.csv"), folder, LakeOptions(draws=100), figure=False)
    return DATA / "lake_survey.csv"


def titrate_river(folder):
    """A run over the demo titrations."""
    titrate_file(TitrationFiles(DATA / "titration_points.csv", DATA / "titration_samples.csv"), folder, TitrationOptions(), figures=0)
    return DATA / "titration_points.csv"


def chains_on_page(folder):
    """Each chain of the page as its title and the texts of its cells, in order."""
    page = (folder / "report.html").read_text(encoding="utf-8")
    part = page.split('<section id="chains">')[1].split("</section>")[0]
    found = {}
    for details in part.split("<details")[1:]:
        title = unescape(re.search(r"<summary>(.*?)</summary>", details).group(1))
        found[title] = [unescape(re.sub(r"<[^>]+>", "", cell)) for cell in re.findall(r"<t[hd][^>]*>.*?</t[hd]>|<p>.*?</p>", details, flags=re.S)]
    return found


@pytest.mark.parametrize("go", [assess_streams, assess_demo_lakes, titrate_river], ids=["assess", "lake", "titration"])
def test_the_page_has_the_words_of_the_command(tmp_path, go):
    """Every step of each chain, but for the shares of the readings in an interval, which the page leaves to the command."""
    given = go(tmp_path / "out")
    shown = chains_on_page(tmp_path / "out")
    assert 10 < len(shown) <= ON_PAGE
    for title, cells in shown.items():
        name, row = re.fullmatch(r"How (.*) was worked out \(row (\d+)\)", title).groups()
        chain, = chains_of_run(tmp_path / "out", name, given=given, row=int(row))
        assert f"Outcome: {chain.verdict}." in cells
        for step in chain.steps():
            words = re.sub(r"(\. )?Interval from .*", "", step.words)
            for text in (step.label, " ".join(filter(None, (step.value, step.unit))), words, step.source, step.sign):
                assert not text or " ".join(text.split()) in cells, (name, step)


@pytest.mark.parametrize("go", [assess_streams, assess_demo_lakes, titrate_river], ids=["assess", "lake", "titration"])
def test_same_bytes_twice(tmp_path, go):
    """Nothing in a chain depends on when or where."""
    go(tmp_path / "one")
    go(tmp_path / "two")
    assert (tmp_path / "one" / "report.html").read_bytes() == (tmp_path / "two" / "report.html").read_bytes()


def test_order_is_that_of_the_table(tmp_path):
    """The samples of the first table of the page, from its beginning."""
    assess_streams(tmp_path / "out")
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    rows = re.findall(r'<th scope="row">(.*?)</th>', page.split('id="worst"')[1].split("</section>")[0])
    assert [re.fullmatch(r"How (.*) was .*", t).group(1) for t in chains_on_page(tmp_path / "out")] == rows[:ON_PAGE]


def test_pieces_make_no_difference(tmp_path, monkeypatch):
    """A file that is read three samples at a time gives the same chains."""
    assess_streams(tmp_path / "whole")
    monkeypatch.setattr(run_module, "CHUNK_ROWS", 3)
    assess_streams(tmp_path / "pieces")
    assert chains_on_page(tmp_path / "whole") == chains_on_page(tmp_path / "pieces")


def test_pieces_of_titrations_make_no_difference(tmp_path, monkeypatch):
    """The same of titrations, two at a time."""
    titrate_river(tmp_path / "whole")
    whole = titration_module.iter_titrations
    monkeypatch.setattr(titration_module, "iter_titrations", lambda *a, **k: whole(*a, chunk_samples=2, **k))
    titrate_river(tmp_path / "pieces")
    assert chains_on_page(tmp_path / "whole") == chains_on_page(tmp_path / "pieces")


def test_a_long_file_has_none(table, tmp_path, monkeypatch):
    """It would have to be read again."""
    monkeypatch.setattr(run_module, "ALL_CHECKS_UP_TO", 2)
    assess_file(table(), tmp_path / "out", Options(draws=0), figure=False)
    assert 'id="chains"' not in (tmp_path / "out" / "report.html").read_text(encoding="utf-8")

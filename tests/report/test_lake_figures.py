"""The page of a lake survey: words keep their place, files are the same for the same lakes, odd surveys are drawn."""

import itertools
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parent))

from made_survey import (
    BANDS,
    HARD_NAME,
    MANY_ANC,
    NAMES,
    PH_SCHEME,
    RESPONSE,
    bars,
    clouds,
    steps,
    survey,
    ticks_of,
    title,
    words,
)

from aquabuf.assess.lake.assess import assess_lakes
from aquabuf.assess.lake.columns import lake_quantities
from aquabuf.assess.lake.options import LakeOptions, rules_of
from aquabuf.assess.lake.schemes import shipped_schemes
from aquabuf.assess.limits_file import read_limits
from aquabuf.readings.reader import read_readings
from aquabuf.report.lake_figures import lake_figure, save_lakes

PAGES = {
    "many": (survey(MANY_ANC, region=["north", "south"] * 41), BANDS),
    "three": (survey([-10.0, 30.0, 400.0], region=["a", "a", "b"]), BANDS),
    "one": (survey([30.0]), BANDS),
    "no loads": (survey(MANY_ANC[::3], loads=False), BANDS),
    "no deposition": (survey(MANY_ANC[::3], exceedance_meq_m2_yr=np.nan), BANDS),
    "soda lakes": (survey([-3000.0, *MANY_ANC, 2e5], region=["a"] * 42 + ["b"] * 42), BANDS),
    "names": (survey(MANY_ANC[::3], site=HARD_NAME, sample_id=HARD_NAME, region=[HARD_NAME, "b " * 30] * 14, loads=False), BANDS),
    "weights": (survey(MANY_ANC[::3], survey_weight=25.0, region=list("abcd") * 7), BANDS),
    "on pH": (survey(MANY_ANC, scheme=PH_SCHEME), PH_SCHEME),
    "five classes": (survey(MANY_ANC, scheme=shipped_schemes()["sweden_alkalinity"]), shipped_schemes()["sweden_alkalinity"]),
    "two classes": (survey(MANY_ANC, scheme=shipped_schemes()["norway_20"]), shipped_schemes()["norway_20"]),
    "no pH": (survey(MANY_ANC, ph=np.nan), BANDS),
    "nothing": (survey([np.nan] * 3, ph=np.nan, ph_at_air=np.nan), BANDS),
}  # fmt: skip


def drawn_page(name, **options):
    """The finished page."""
    table, scheme = PAGES[name]
    return lake_figure(table, scheme, RESPONSE, **({"source": "lakes.csv", "anc_limit_ueq_l": 20.0} | options))


@pytest.mark.filterwarnings("ignore:Glyph")
@pytest.mark.parametrize("name", PAGES)
def test_words_keep_their_place(name):
    """On the finished page no words leave it; titles, labels of axes and of ticks do not touch."""
    figure = drawn_page(name, source=f"{HARD_NAME}.csv")
    figure.draw_without_rendering()
    page = figure.bbox
    outer = [t for ax in figure.axes for t in (ax.title, ax._left_title, ax.xaxis.label, ax.yaxis.label)]
    by_axis = [ticks_of(axis) for ax in figure.axes for axis in (ax.xaxis, ax.yaxis)]
    ticks = list(itertools.chain(*by_axis))
    key = [t for legend in figure.legends for t in legend.get_texts()]
    told = [t for t in [*outer, *ticks, *key, *figure.texts] if t.get_text()]
    inner = [t for ax in figure.axes for t in ax.texts if t.get_text()]
    for text in told + inner:
        box = text.get_window_extent()
        assert page.x0 <= box.x0 < box.x1 <= page.x1, text.get_text()
        assert page.y0 <= box.y0 < box.y1 <= page.y1, text.get_text()
    clear = [t for t in told if t not in ticks]
    for a, b in itertools.combinations(clear, 2):
        assert not a.get_window_extent().overlaps(b.get_window_extent()), (a.get_text(), b.get_text())
    for axis in by_axis:
        assert not any(a.get_window_extent().overlaps(b.get_window_extent()) for a, b in itertools.combinations(axis, 2))


def test_page():
    """Four panels in reading order; the title counts lakes and those at risk; the key has every class with its lakes."""
    table, _ = PAGES["many"]
    figure = drawn_page("many")
    assert [title(ax) for ax in figure.axes] == ["pH and ANC", "How ANC is spread", "Classes by region",
                                                 "Critical load and acid deposition"]
    counts = [int((table["class"] == name).sum()) for name in NAMES]
    assert figure.get_suptitle() == f"lakes.csv: 82 lakes, {sum(counts[:2])} at risk by survey_bands"
    assert [t.get_text() for t in figure.legends[0].get_texts()] == [f"{n} ({c})" for n, c in zip(NAMES, counts, strict=True)]
    assert figure.texts[1].get_text().startswith("Classes: survey_bands, bands of the US lake surveys. Upright gray lines")
    assert tuple(figure.get_size_inches()) == (11.0, 8.0)
    assert title(drawn_page("no loads").axes[3]).startswith("First lakes to look at")


def test_long_names_of_file_and_classes_are_cut():
    """A file of two hundred letters, classes of the user's own with signs of all kinds: inside the page, as they are."""
    classes = tuple(replace(c, name=f"$\\frac{{$ _class {k} of a very long name") for k, c in enumerate(BANDS.classes))
    scheme = replace(BANDS, classes=classes, words="own words " * 40)
    figure = lake_figure(survey(MANY_ANC, scheme=scheme), scheme, None, source="x" * 200)
    figure.draw_without_rendering()
    for text in (*figure.texts, *figure.legends[0].get_texts()):
        box = text.get_window_extent()
        assert figure.bbox.x0 <= box.x0 < box.x1 <= figure.bbox.x1
    assert figure.legends[0].get_texts()[0].get_text().startswith("$\\frac{$ _class 0 of a")
    assert figure.get_suptitle().startswith("x" * 59 + "…: ")
    assert figure.texts[1].get_text().endswith("…")


def test_samples_of_one_lake_count_once():
    """The first panel shows every sample, the others the one that stands for the lake; title and foot say so."""
    table = survey([10.0, 30.0, 60.0, 300.0])
    figure = lake_figure(table, BANDS, None, source="lakes.csv", latest=np.array([True, False, True, True]))
    assert sum(c.shape[1] for c in clouds(figure.axes[0]).values()) == 4
    assert_allclose(steps(figure.axes[1], "all lakes")[0], [10.0, 60.0, 300.0])
    assert sum(map(sum, bars(figure.axes[2]).values())) == 3
    assert figure.get_suptitle() == "lakes.csv: 3 lakes (4 samples), 1 at risk by survey_bands"
    assert "First panel: all samples" in figure.texts[1].get_text()


def test_empty_panels_say_why():
    """Lakes without ANC: words, no error."""
    figure = drawn_page("nothing")
    assert [words(figure.axes[k])[0] for k in (0, 1, 3)] == [
        "No lake has both ANC and pH", "No lake has an ANC", "No critical load, acid to pH 6 or ANC is known"]


READINGS = """sample_id,site,region,date,temperature_c,ph,anc (µeq/L),doc_mg_l,conductivity_us_cm
a,{name},north,2001-07-01,12,5.1,-4,4,20
b,Pond,north,2001-07-02,14,6.4,45,6,22
c,Tarn,south,2001-07-03,15,7.2,310,3,50
"""


@pytest.fixture
def found(tmp_path):
    """A small survey, assessed."""
    def go(name="Lake"):
        path = tmp_path / "lakes.csv"
        path.write_text(READINGS.format(name=name), encoding="utf-8")
        options = LakeOptions(draws=100)
        limits = read_limits(None, lake_quantities(options.thresholds), "lake_limits")
        return assess_lakes(read_readings(path), rules_of(options), options, limits)
    return go


def saved(folder, found, name="f", source="lakes.csv"):
    """Bytes of both formats."""
    paths = {kind: folder / f"{name}.{kind}" for kind in ("png", "svg")}
    save_lakes(found, np.ones(len(found.results), dtype=bool), paths, source=source)
    return [path.read_bytes() for path in paths.values()]


def test_an_assessed_survey_is_drawn(tmp_path, found):
    """From readings to files: same survey, same bytes; no date, no program name; text in the drawing stays text."""
    a = found()
    png, svg = first = saved(tmp_path, a)
    assert saved(tmp_path, a, "again") == first
    assert png[:8] == b"\x89PNG\r\n\x1a\n"
    for word in (b"tEXt", b"tIME"):
        assert word not in png
    for word in (b"<dc:date>", b"<dc:creator>"):
        assert word not in svg
    text = svg.decode("utf-8")
    for said in ("Gran ANC (method unstated) [µeq/L]", "ANC limit 20", "At 14 °C, air of 425 ppm", "brown water, DOC 5.6 mg/L", "prone to turn acid (1)",
                 "Acid to pH 6, open to air [µeq/L]; negative: below it", "lakes.csv: 3 lakes, 2 at risk by survey_bands"):
        assert said in text


@pytest.mark.parametrize("name", ["a $\\frac{$ b", "_hidden", "湖水", HARD_NAME])
def test_any_name_can_be_drawn(tmp_path, found, name):
    """Dollar signs, a leading underscore, another script, sixty letters: as they are, cut to a label's length."""
    _, svg = saved(tmp_path, found(name), source=name)
    assert name[:22] in svg.decode("utf-8")

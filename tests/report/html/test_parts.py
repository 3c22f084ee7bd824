"""Parts of pages: what comes from outside stays text, ids of drawings do not meet, a document stands alone."""

import re
from html.parser import HTMLParser
from urllib.parse import quote

import pytest

from aquabuf.errors import InputError
from aquabuf.report.html.document import document
from aquabuf.report.html.parts import (
    TONES,
    Column,
    Link,
    bullets,
    card,
    details,
    drawing,
    facts,
    gallery,
    paragraph,
    section,
    shown_text,
    table,
)

HOSTILE = ('<script>alert("x")</script>', '" onmouseover="x', "a&b'c", "\u202egnihton", "x" * 5000, "]]>", "${title}")
VOID = {"meta", "br", "img", "input", "hr", "link"}
SVG = """<?xml version="1.0"?><!DOCTYPE svg>
<svg width="10pt" viewBox="0 0 10 10"><metadata><rdf>made on a day</rdf></metadata>
<defs><clipPath id="p1"><rect/></clipPath><path id="p10"/></defs>
<g id="figure_1" clip-path="url(#p1)"><use xlink:href="#p10"/></g></svg>"""


class Reader(HTMLParser):
    """Text, tags and attributes of a page; fails on tags that are not closed in order."""

    def __init__(self):
        super().__init__()
        self.open, self.tags, self.text, self.attributes = [], [], [], []

    def handle_starttag(self, tag, attrs):
        """Note a tag."""
        self.tags.append(tag)
        self.attributes += attrs
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        """Close the innermost tag, which must be the same."""
        assert self.open.pop() == tag

    def handle_data(self, data):
        """Note text."""
        self.text.append(data)


def read(page):
    """A page that was read to its end."""
    reader = Reader()
    reader.feed(page)
    reader.close()
    assert reader.open == []
    return reader


def parts(words):
    """Every part with the same words in every place."""
    return [paragraph(words), section(words, paragraph(words)), bullets([words]), facts([(words, words)]),
            card("stop", words, number=words, rule=words, next_step=words, caution=words), details(words, paragraph(words)),
            table([Column(title=words, meaning=words), Column(title=words, number=True)], [[words, words]], caption=words),
            drawing(SVG, name="f", alt=words, caption=words)]


@pytest.mark.parametrize("words", HOSTILE, ids=range(len(HOSTILE)))
def test_words_from_outside_stay_words(words):
    """No tag, attribute or turn of direction comes out of a name; long ones are cut."""
    calm = read(document("a", "b", parts("calm"), closing="c"))
    page = document(words, words, parts(words), closing=words)
    found = read(page)
    assert found.tags == calm.tags
    assert [name for name, _ in found.attributes] == [name for name, _ in calm.attributes]
    assert "\u202e" not in page
    assert max(map(len, found.text)) < 30_000
    if len(words) < 100 and "\u202e" not in words:
        assert sum(words in text for text in found.text) >= 12


def test_a_document_stands_alone():
    """Nothing is fetched: no link, source or import, and a policy that forbids it."""
    page = document("Title", "of a run", parts("calm"))
    found = read(page)
    assert not {"link", "img", "iframe"} & set(found.tags)
    assert not [v for n, v in found.attributes if n in ("src", "srcset") or (n == "href" and not v.startswith("#"))]
    assert not re.search(r"@import|url\((?!#)|https?://(?!www\.w3\.org/2000/svg)", page)
    assert "default-src 'none'" in page
    assert dict(found.attributes)["lang"] == "en"
    assert page == document("Title", "of a run", parts("calm"))


@pytest.mark.parametrize("tone", TONES)
def test_a_card_says_its_tone_in_words(tone):
    """Color is never the only sign."""
    assert f">{TONES[tone]}<" in card(tone, "it holds")


def test_unknown_tone():
    """A tone that has no sign is refused."""
    with pytest.raises(InputError, match="must be one of stop, warn, good, note; found 'red'"):
        card("red", "x")


def test_a_table_names_its_rows_and_columns():
    """Headings carry their scope, numbers are set apart, one row needs no sorting."""
    page = table([Column(title="lake"), Column(title="ANC (µeq/L)", number=True, meaning="acid neutralizing capacity")],
                 [["One", "12"], ["Two", "-3"]], caption="Lakes", tones=["", "stop"])
    assert page.count('scope="col"') == 2
    assert page.count('scope="row"') == 2
    assert 'class="sortable"' in page
    assert 'title="acid neutralizing capacity"' in page
    assert '<tr class="stop"><th scope="row">Two' in page
    assert "sortable" not in table([Column(title="a")], [["1"]])
    assert table([Column(title="a")], []) == ""


def test_a_row_that_does_not_fit():
    """A missing cell would shift the rest."""
    with pytest.raises(InputError, match="row 2 of a table must have 2 cells; found 1"):
        table([Column(title="a"), Column(title="b")], [["1", "2"], ["3"]])


def test_empty_parts_leave_nothing():
    """No heading without what belongs under it."""
    assert section("a", "", "") == details("a", "") == bullets([]) == facts([("a", "")]) == paragraph("") == ""


def test_ids_of_drawings_do_not_meet():
    """Each drawing's ids begin with its name, and what points at them follows; what tells a date is gone."""
    page = drawing(SVG, name="one", alt="a") + drawing(SVG, name="two", alt="b")
    ids = re.findall(r'\bid="([^"]+)"', page)
    assert len(ids) == len(set(ids)) == 6
    assert set(re.findall(r'(?:url\(|href=")#([^")]+)', page)) == {"one-p1", "one-p10", "two-p1", "two-p10"}
    assert "metadata" not in page
    assert "<?xml" not in page
    assert 'role="img" aria-label="a"' in page


def test_no_drawing():
    """What is not SVG is refused."""
    with pytest.raises(InputError, match="must be an SVG text with a viewBox"):
        drawing("<p>", name="x", alt="y")


def test_text_is_cut_with_a_mark():
    """A long name ends in an ellipsis."""
    assert shown_text("abc", 2) == "ab…"


@pytest.mark.parametrize("file", ["a b.csv", "javascript:alert(1)", "../x", 'a"onclick="x', "https://x.org/y", "#top"])
def test_a_link_leads_into_the_folder(file):
    """No scheme, path, fragment or attribute comes out of the name of a file; the words stay words."""
    words = "<b>all</b>"
    page = table([Column(title="file")], [[Link(words, file)]]) + paragraph("All rows:", link=Link(words, file))
    found = read(page)
    (first, second) = [value for name, value in found.attributes if name == "href"]
    assert first == second == quote(file, safe="")
    assert not set(':/#"') & set(first)
    assert found.text.count(words) == 2
    assert "b" not in found.tags


def test_sentences_and_numbers_have_a_class_of_their_own():
    """The style gives sentences room and sets numbers to the right."""
    page = table([Column(title="a"), Column(title="b", number=True), Column(title="c", sentence=True)], [["1", "2", "3"]])
    assert '<td class="number">2</td><td class="sentence">3</td>' in page


def test_what_is_not_printed():
    """Long lists stay away from the printer; the style hides that class there."""
    assert '<details class="screen">' in details("a", paragraph("b"), printed=False)
    assert "<details>" in details("a", paragraph("b"))
    assert ".screen { display: none; }" in document("a", "b", [])


def test_a_gallery_holds_its_drawings():
    """None, no gallery."""
    page = gallery([drawing(SVG, name="one", alt="a"), drawing(SVG, name="two", alt="b")])
    assert read(page).tags.count("figure") == 2
    assert gallery([]) == ""

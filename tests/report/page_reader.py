"""Reads a page for the tests: its tags in order, its tables as rows of texts, its cards, links and figures."""

import re
from html.parser import HTMLParser

VOID = {"meta", "br", "img", "input", "hr", "link"}
TABLE_PARTS = ("td", "th")


class PageReader(HTMLParser):
    """What stands on a page; fails on a tag that is not closed in order."""

    def __init__(self):
        super().__init__()
        self.open, self.tags, self.attributes, self.text = [], [], [], []
        self.tables, self.cards, self.links, self.figures, self.headings = [], [], [], [], []

    def handle_starttag(self, tag, attrs):
        """Note a tag and what begins with it."""
        given = dict(attrs)
        self.tags.append(tag)
        self.attributes += attrs
        kind = (given.get("class") or "").split()
        if tag == "table":
            self.tables.append([])
        elif tag == "tr" and self.tables:
            self.tables[-1].append([])
        elif tag in TABLE_PARTS:
            self.tables[-1][-1].append("")
        elif tag == "div" and "card" in kind:
            self.cards.append([kind[1], ""])
        elif tag == "a":
            self.links.append(given["href"])
        elif tag == "h2":
            self.headings.append("")
        elif tag == "svg":
            self.figures.append(given.get("aria-label", ""))
        if tag not in VOID:
            self.open.append((tag, kind))

    def handle_endtag(self, tag):
        """Close the innermost tag, which must be the same."""
        assert self.open.pop()[0] == tag

    def handle_data(self, data):
        """Put text where it belongs."""
        self.text.append(data)
        tags = [tag for tag, _ in self.open]
        if set(TABLE_PARTS) & set(tags):
            self.tables[-1][-1][-1] += data
        if any("card" in kind for _, kind in self.open):
            self.cards[-1][1] += data
        if "h2" in tags:
            self.headings[-1] += data

    def table(self, first_heading):
        """The rows of the first table whose first heading is this, as dictionaries."""
        head, *rows = next(t for t in self.tables if t[0][0] == first_heading)
        return [dict(zip(head, row, strict=True)) for row in rows]


def read_page(path):
    """A page that was read to its end, and its text."""
    page = path.read_text(encoding="utf-8")
    reader = PageReader()
    reader.feed(page)
    reader.close()
    assert reader.open == []
    return reader, page


def assert_stands_alone(reader, page, folder):
    """Nothing is fetched, links lead into the folder, ids differ, figures can be read aloud, and the page is small."""
    assert not {"link", "img", "iframe", "object"} & set(reader.tags)
    assert not [value for name, value in reader.attributes if name in ("src", "srcset", "action")]
    assert not re.search(r"@import|url\((?!#)|https?://(?!www\.w3\.org/)", page)
    there = {path.name for path in folder.iterdir()}
    assert [href for href in reader.links if not href.startswith("#") and href not in there] == []
    ids = [value for name, value in reader.attributes if name == "id"]
    assert len(ids) == len(set(ids))
    assert all(any(ch.isdigit() for ch in words) for words in reader.figures)
    assert len(page.encode()) < 5_000_000

"""A chain folded into a page: all of its links, as text. All waters are invented."""

import re
from html import unescape
from html.parser import HTMLParser

from aquabuf.assess.sample.chain_steps import BROKEN, INSIDE, OUTSIDE, REFUSED, Chain, Part, Step
from aquabuf.report.html.chain import chain_details

EVIL = '<script>alert("x")</script>'
CHAIN = Chain(sample_id=EVIL, row=7, file="w.csv", verdict="1 rule broken (acidic)", parts=(
    Part("Readings as entered", (Step(label="pH", value="5,1", words=f"column '{EVIL}'"),), "w.csv, row 7"),
    Part("Constants", (Step(label="K1", value="pK 6.35", unit="mol/kg", source="P & B 1982", sign=INSIDE),
                       Step(label="K2", value="pK 10.33", unit="mol/kg", source="P & B 1982", sign=OUTSIDE))),
    Part("Rules", (Step(label="acidic", value="-0.02", unit="meq/L", words="next: look", source="S", sign=BROKEN),))))


class Balance(HTMLParser):
    """Counts tags that are open and the folded parts."""

    def __init__(self):
        super().__init__()
        self.open, self.seen = [], []

    def handle_starttag(self, tag, attrs):
        """One more."""
        self.open.append(tag)
        self.seen.append(tag)

    def handle_endtag(self, tag):
        """The last one opened."""
        assert self.open.pop() == tag


def test_everything_is_there_and_folded():
    """One folded part with a table per kind of link, every text of every step in it, tags in balance."""
    html = chain_details(CHAIN)
    parser = Balance()
    parser.feed(html)
    assert parser.open == []
    assert (parser.seen.count("details"), parser.seen.count("table")) == (1, 3)
    assert "script" not in parser.seen
    text = unescape(re.sub(r"<[^>]+>", "\n", html))
    for step in CHAIN.steps():
        for part in (step.label, step.value, step.unit, step.words, step.source, step.sign):
            assert part in text
    assert f"How {EVIL} was worked out (row 7)" in text
    assert "Outcome: 1 rule broken (acidic)." in text
    assert "1. Readings as entered (w.csv, row 7)" in text


def test_columns_only_where_they_hold_something():
    """No empty column of sources or signs."""
    heads = [re.findall(r'<th scope="col"[^>]*>([^<]+)', part) for part in chain_details(CHAIN).split("</table>")[:3]]
    assert heads == [["What", "Value", "How"], ["What", "Value", "How", "Source", "Judged"], ["What", "Value", "How", "Source", "Judged"]]


def test_color_is_never_the_only_sign():
    """Rows in color say it in words too."""
    html = chain_details(CHAIN)
    for tone, word in (("warn", OUTSIDE), ("stop", BROKEN)):
        rows = re.findall(rf'<tr class="{tone}">.*?</tr>', html)
        assert len(rows) == 1
        assert word in rows[0]
    refused = Chain(sample_id="a", row=2, file="w", verdict="refused", parts=(Part("Why", (Step(label="x", sign=REFUSED),)),))
    assert re.search(r'<tr class="stop">.*REFUSED', chain_details(refused))

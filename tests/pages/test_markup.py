"""Text, names and tables as HTML, and the frame around them: safe for every name."""

from __future__ import annotations

import base64
import hashlib
import json
import re
from html.parser import HTMLParser

from hypothesis import given
from hypothesis import strategies as st

from pyomo_latpath.pages.frame import page
from pyomo_latpath.pages.markup import NAME_WIDTH, name, names, shortened, table, text, visible

ANY_TEXT = st.text(st.characters(exclude_categories=()), max_size=60)


class Reader(HTMLParser):
    """What a browser would make of a piece of HTML: its tags and its text."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.words = ""
        self.feed(html)
        self.close()

    def handle_starttag(self, tag: str, attributes: object) -> None:
        self.tags.append(tag)

    def handle_data(self, data: str) -> None:
        self.words += data


@given(ANY_TEXT)
def test_text_is_read_back_as_it_was_and_brings_no_tag(raw):
    read = Reader(f"<p>{text(raw)}</p>")
    assert read.tags == ["p"]
    assert read.words == visible(raw)


@given(ANY_TEXT)
def test_text_cannot_leave_an_attribute(raw):
    assert '"' not in text(raw)
    assert "<" not in text(raw)


@given(ANY_TEXT)
def test_what_is_visible_can_be_written_and_ends_no_line(raw):
    shown = visible(raw)
    shown.encode("utf-8")
    assert len(shown.splitlines()) <= 1
    assert not set(shown) & set("\u202a\u202b\u202d\u202e\u2066\u2067\u2068\u200e\u200f")
    assert visible(shown) == shown


def test_names_of_people_and_places_stay_as_they_are():
    for word in ("Käse", "خانه\u200cها", "नमस्ते", "👩\u200d🌾", "ship[cave 1,'town']"):
        assert visible(word) == word


@given(ANY_TEXT, st.integers(3, 30))
def test_a_shortened_name_keeps_both_ends(raw, width):
    short = shortened(raw, width)
    assert len(short) <= width or short == raw
    if len(raw) > width:
        head, tail = short.split("…", 1) if "…" not in raw else (short[:1], short[-1:])
        assert raw.startswith(head)
        assert raw.endswith(tail)


def test_long_names_and_long_lists_are_cut_and_counted():
    assert len(Reader(name("x" * 10_000)).words) == NAME_WIDTH
    assert Reader(names(["van"] * 1_234, 3)).words == "van, van, van and 1,231 more"


def test_a_table_has_headings_for_rows_and_columns():
    html = table("key", "Caves", ["cave", "lots"], [["north", "3"], ["south", "4"]], numbers=[1])
    assert html.count('scope="col"') == 2
    assert html.count('scope="row"') == 2
    assert 'aria-labelledby="key"' in html
    assert '<caption id="key">' in html


def test_data_can_hold_the_end_of_its_element():
    names_ = ["</script><script>alert(1)</script>", "<!--<script>", "\u2028"]
    document = page("t", "s", "", script="records.js", data={"names": names_})
    held = re.search(r'<script type="application/json" id="data">(.*?)</script>', document, re.S)
    assert json.loads(held.group(1)) == {"names": names_}


def test_the_policy_allows_the_page_s_own_script_and_nothing_else():
    document = page("t", "s", "", script="records.js")
    code = re.search(r"<script>(.*)</script>", document, re.S).group(1)
    digest = base64.b64encode(hashlib.sha256(code.encode()).digest()).decode()
    policy = re.search(r'Content-Security-Policy" content="([^"]*)"', document).group(1)
    assert f"script-src 'sha256-{digest}'" in policy
    assert policy.startswith("default-src 'none';")
    assert "script-src 'none'" in page("t", "s", "")

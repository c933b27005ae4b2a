"""The page of an explanation in a real browser."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

import made_up
import pytest
from browser import PHONE, WIDE, Browser

from pyomo_latpath.explain.telling.page import to_html

#: Names beside the cycle: how many, how many leave the drawing, how many cover one another.
LABELS = """
const svg = [...document.querySelectorAll('svg')].find((each) => each.querySelector('.mono'));
const frame = svg.getBoundingClientRect();
const boxes = [...svg.querySelectorAll('.mono')].map((each) => each.getBoundingClientRect());
const out = boxes.filter((box) => box.left < frame.left || box.right > frame.right
  || box.top < frame.top || box.bottom > frame.bottom);
const covering = boxes.filter((a, i) => boxes.slice(i + 1).some((b) =>
  a.left < b.right && b.left < a.right && a.top + 2 < b.bottom - 2 && b.top + 2 < a.bottom - 2));
return [boxes.length, out.length, covering.length];
"""


@pytest.fixture(params=made_up.MAKERS, ids=lambda maker: maker.__name__)
def path(request: pytest.FixtureRequest, tmp_path: Path) -> Path:
    return written(tmp_path, to_html(request.param(), "cellar budget"))


def written(folder: Path, document: str) -> Path:
    file = folder / "page.html"
    file.write_text(document, encoding="utf-8")
    return file


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_it_can_be_read_in_every_view_and_scheme(browser: Browser, path, scheme):
    for size in (PHONE, WIDE):
        browser.open(path, size, scheme)
        assert browser.overflow() <= 0
        assert browser.colours() > 20
        assert browser.faint_text() == []
        assert browser.complaints() == []
        assert browser.requests() == [path.as_uri()]


def test_light_and_dark_differ(browser: Browser, tmp_path):
    path = written(tmp_path, to_html(made_up.fractional()))
    papers = []
    for scheme in ("light", "dark"):
        browser.open(path, scheme=scheme)
        papers.append(browser.background())
    assert len(set(papers)) == 2


def test_keyboard_and_screen_reader_reach_everything(browser: Browser, path):
    for size in (PHONE, WIDE):
        browser.open(path, size)
        assert browser.not_reached() == []
        assert browser.nameless() == []
    levels = browser.heading_levels()
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(b <= a + 1 for a, b in pairwise(levels))
    landmarks = browser.run("return document.querySelectorAll('main, header.top, footer').length")
    assert landmarks == 3


def test_names_do_nothing_but_stand_there(browser: Browser, tmp_path):
    browser.open(written(tmp_path, to_html(made_up.hostile(), made_up.HOSTILE[0])))
    assert browser.run("return document.scripts.length") == 0
    assert browser.driver.title.startswith("latpath explain: <script>")
    assert browser.run("return document.querySelectorAll('h1').length") == 1
    words = browser.run("return document.body.textContent")
    assert made_up.HOSTILE[0] in words
    assert "turned\\u202egnp.exe" in words
    assert "\u202e" not in words
    ids = browser.run("return [...document.querySelectorAll('[id]')].map((each) => each.id)")
    assert len(ids) == len(set(ids))


def test_every_reference_of_an_element_to_another_one_holds(browser: Browser, path):
    browser.open(path)
    lost = browser.run(
        "return [...document.querySelectorAll('[aria-labelledby], [href^=\"#\"]')]"
        ".flatMap((each) => (each.getAttribute('aria-labelledby')"
        " ?? each.getAttribute('href').slice(1)).split(' '))"
        ".filter((id) => !document.getElementById(id))"
    )
    assert lost == []


def test_thousands_of_names_stay_a_page_of_bearable_size(browser: Browser, tmp_path):
    document = to_html(made_up.very_large())
    assert len(document) < 3_000_000
    browser.open(written(tmp_path, document), PHONE)
    assert browser.overflow() <= 0
    assert "more" in browser.run("return document.body.textContent")


def test_a_cycle_is_drawn_with_names_where_there_is_room_for_them(browser: Browser, tmp_path):
    path = written(tmp_path, to_html(made_up.fractional()))
    for size, named in ((WIDE, True), (PHONE, False)):
        browser.open(path, size)
        drawn = browser.run(
            "return [...document.querySelectorAll('svg')].filter((each) => each.checkVisibility()"
            " && each.querySelector('.node')).map((each) => each.textContent)"
        )
        assert len(drawn) == 1
        assert ("open[cave 4]" in drawn[0]) == named
    nodes = browser.run("return document.querySelectorAll('#content .small-only .node').length")
    assert nodes == 10


def test_labels_of_a_cycle_stay_within_the_drawing_and_apart(browser: Browser, tmp_path):
    for k in (2, 3, 7, 12):
        told = made_up.fractional(violators=(made_up.odd_cycle(k),))
        browser.open(written(tmp_path, to_html(told)))
        overlaps = browser.run(LABELS)
        assert overlaps == [2 * k, 0, 0]


def test_print_shows_what_scrolls_on_screen(browser: Browser, tmp_path):
    browser.open(written(tmp_path, to_html(made_up.very_large(500))))
    browser.driver.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": "print"})
    hidden = browser.run(
        "return [...document.querySelectorAll('.scroll')]"
        ".filter((each) => each.scrollHeight > each.clientHeight + 1).length"
    )
    assert hidden == 0


def test_nothing_moves_by_itself(browser: Browser, path):
    browser.open(path)
    moving = browser.run(
        "return [...document.querySelectorAll('*')].map((each) => getComputedStyle(each))"
        ".filter((style) => style.animationName !== 'none' || style.scrollBehavior !== 'auto'"
        " || style.transitionDuration !== '0s').length"
    )
    assert moving == 0


def test_names_within_sentences_are_code():
    document = to_html(made_up.fractional())
    assert "Without <code>budget</code> what is left" in document
    hostile = to_html(made_up.hostile())
    assert "<script" not in hostile.lower()


def test_a_table_that_is_wider_than_the_view_shows_it(browser: Browser, tmp_path):
    browser.open(written(tmp_path, to_html(made_up.fractional())), PHONE)
    look = "return getComputedStyle(document.querySelector('.scroll')).backgroundAttachment"
    assert browser.run(look).split(", ") == ["local", "local", "scroll", "scroll"]

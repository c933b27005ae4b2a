"""The browser helper sees what it is there to see: each fault is planted once, and found."""

from __future__ import annotations

from pathlib import Path

import pytest
from browser import PHONE, Browser

FINE = "<!DOCTYPE html><html lang='en'><title>t</title><body><h1>Caves</h1>{}</body></html>"


@pytest.fixture
def opened(browser: Browser, tmp_path: Path):
    def open_page(content: str) -> Browser:
        page = tmp_path / "page.html"
        page.write_text(FINE.format(content), encoding="utf-8")
        browser.open(page, PHONE)
        return browser

    return open_page


def test_a_fine_page_has_no_fault(opened):
    page = opened("<p>text</p><button>sort</button>")
    assert page.faint_text() == page.nameless() == page.not_reached() == page.complaints() == []
    assert page.overflow() <= 0
    assert page.heading_levels() == [1]


def test_faint_text_is_found(opened):
    page = opened("<p style='color: #888; background: #fff'>pale</p><p>dark</p>")
    assert [words for _, words in page.faint_text()] == ["pale"]
    page = opened("<svg><text y='20' style='fill: #bbb'>drawn</text></svg>")
    assert [words for _, words in page.faint_text()] == ["drawn"]


def test_a_nameless_control_is_found(opened):
    assert opened("<button></button>").nameless() == ["button"]
    assert opened("<svg role='img' width='9' height='9'><path d='M0 0h9'/></svg>").nameless()


def test_a_control_without_visible_focus_is_found(opened):
    page = opened("<button style='outline: none'>a</button><button>b</button>")
    (html,) = page.not_reached()
    assert html.endswith(">a</button>")


def test_a_page_that_is_too_wide_is_found(opened):
    assert opened("<div style='width: 700px'>wide</div>").overflow() > 200


def test_errors_and_requests_are_found(opened):
    page = opened("<script>missing();</script>")
    assert any("missing" in words for words in page.complaints())
    page = opened("<img src='absent.png' alt='none'>")
    assert any(address.endswith("absent.png") for address in page.requests())


def test_an_empty_page_has_few_colours(opened):
    assert opened("<style>h1 { color: transparent }</style>").colours() == 1

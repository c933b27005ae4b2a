"""The page of a batch in a real browser: a table of ten thousand records that stays quick."""

from __future__ import annotations

import random
from pathlib import Path

import pytest
from browser import PHONE, WIDE, Browser
from selenium.webdriver.common.keys import Keys

from pyomo_latpath.batch.page import batch_page
from pyomo_latpath.batch.record import BatchRecord
from pyomo_latpath.batch.summary import summarise

HOSTILE = (
    "</script><script>document.title = 'taken'</script>",
    "turned\u202egnp.exe\n<b>",
    "long-" + "cave-" * 100,
)


def record(k: int) -> BatchRecord:
    """The k-th of a batch whose every fifth goes to branch and bound, and every fiftieth fails."""
    draw = random.Random(k)
    if k % 50 == 49:
        return BatchRecord(f"roster-{k:05d}.mps", "0f", "error", error=f"line {k % 3}: no number")
    path = k % 5 > 0
    return BatchRecord(
        instance=f"roster-{k:05d}.mps",
        fingerprint=f"{k:08x}",
        status="optimal",
        rows=draw.randrange(10, 500),
        columns=draw.randrange(10, 9000),
        integers=10,
        nonzeros=draw.randrange(100, 90000),
        verdict="proven" if path else "sampled",
        structure="interval" if path else None,
        samples=0 if path else 32,
        route="path" if path else "highs",
        why="the nonzeros are consecutive" if path else "no proof",
        proof="exact",
        objective=round(draw.gauss(1e5, 3e4), 2),
        bound=None,
        steps=int(draw.lognormvariate(3, 2)) if path else None,
        pivots=7 if path else None,
        seconds={"compile": 0.01, "solve": draw.lognormvariate(-3, 1.5)},
    )


def written(folder: Path, records: list[BatchRecord]) -> Path:
    page = folder / "report.html"
    document = batch_page(records, summarise(records, waiting=0, wall_seconds=12.5, kept=0))
    page.write_text(document, encoding="utf-8")
    return page


@pytest.fixture(scope="module")
def large(tmp_path_factory) -> Path:
    names = [BatchRecord(name, "0f", "optimal", objective=-1e12) for name in HOSTILE]
    return written(tmp_path_factory.mktemp("large"), [*map(record, range(10_000)), *names])


def instances(browser: Browser) -> list[str]:
    """Names in view, from top to bottom."""
    return browser.run(
        "return [...document.querySelectorAll('#records-region tbody button')]"
        ".map((each) => each.textContent)"
    )


def count(browser: Browser) -> str:
    return browser.run("return document.getElementById('count').textContent")


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_it_can_be_read_in_every_view_and_scheme(browser: Browser, large, scheme):
    for size in (PHONE, WIDE):
        browser.open(large, size, scheme)
        assert browser.overflow() <= 0
        assert browser.colours() > 20
        assert browser.faint_text() == []
        assert browser.nameless() == []
        assert browser.complaints() == []
        assert browser.requests() == [large.as_uri()]


def test_failures_come_first_with_their_reasons(browser: Browser, large):
    browser.open(large)
    titles = browser.run("return [...document.querySelectorAll('h2')].map((h) => h.textContent)")
    assert titles[0] == "Not solved"
    assert "200" in browser.run("return document.querySelector('.figures').textContent")
    told = browser.run("return document.querySelector('.cards').textContent")
    assert "line 1: no number" in told
    assert "roster-00049.mps" in told


def test_only_the_rows_in_view_are_drawn_and_scrolling_draws_the_others(browser: Browser, large):
    browser.open(large)
    assert len(instances(browser)) < 100
    assert instances(browser)[0] == "roster-00000.mps"
    browser.run("document.getElementById('records-region').scrollTop = 1e9")
    browser.settle()
    assert len(instances(browser)) < 100
    assert instances(browser)[-1] == "long-cave-cave…" + HOSTILE[2][-25:]
    names = browser.run("return document.querySelectorAll('#records-region [title]')")
    assert names[-1].accessible_name == HOSTILE[2]
    position = browser.run(
        "return document.querySelector('#records-region tbody tr:nth-last-child(2)').ariaRowIndex"
    )
    assert position == "10004"


def test_ten_thousand_records_sort_and_filter_at_once(browser: Browser, large):
    browser.open(large)
    slowest = browser.run(
        "const times = [];"
        "const timed = (act) => { const since = performance.now(); act();"
        "  document.body.offsetHeight; times.push(performance.now() - since); };"
        "for (const button of document.querySelectorAll('#records-region thead button')) {"
        "  timed(() => button.click()); timed(() => button.click()); }"
        "const search = document.getElementById('search');"
        "for (const words of ['r', 'roster-00', 'interval 9', '']) {"
        "  search.value = words; timed(() => search.dispatchEvent(new Event('input'))); }"
        "return Math.max(...times);"
    )
    assert slowest < 5_000


@pytest.mark.parametrize("title", ["instance", "objective", "steps"])
def test_a_heading_sorts_up_and_down_and_says_so(browser: Browser, large, title):
    by_name = {each.instance: each for each in map(record, range(10_000))}
    browser.open(large)
    browser.run("document.getElementById('search').value = 'roster-'")
    browser.run("document.getElementById('search').dispatchEvent(new Event('input'))")
    known = [each for each in by_name.values() if getattr(each, title) is not None]
    ordered = sorted(known, key=lambda each: getattr(each, title))
    headings = browser.driver.find_elements("css selector", "#records-region thead button")
    button = next(each for each in headings if each.text.startswith(title))
    for way, expected in (("ascending", ordered[0]), ("descending", ordered[-1])):
        button.click()
        heading = button.find_element("xpath", "..")
        assert heading.get_attribute("aria-sort") == way
        first = by_name[instances(browser)[0]]
        assert getattr(first, title) == getattr(expected, title)
    if len(known) < len(by_name):
        browser.run("document.getElementById('records-region').scrollTop = 1e9")
        browser.settle()
        assert getattr(by_name[instances(browser)[-1]], title) is None


def test_filters_narrow_the_table_together(browser: Browser, large):
    browser.open(large)
    search = browser.driver.find_element("id", "search")
    search.send_keys("ROSTER-00 interval")
    expected = [record(k) for k in range(1_000) if record(k).structure]
    assert count(browser) == f"{len(expected)} of 10,003 instances"
    route = next(
        each for each in browser.driver.find_elements("tag name", "select") if "highs" in each.text
    )
    route.send_keys("highs")
    assert count(browser) == "0 of 10,003 instances"
    assert instances(browser) == []
    browser.driver.find_element("css selector", "button[type=reset]").click()
    browser.settle()
    assert count(browser) == "10,003 of 10,003 instances"


def test_everything_works_by_keyboard(browser: Browser, large):
    browser.open(large)
    assert browser.not_reached() == []
    button = browser.driver.find_element("css selector", "#records-region thead button")
    browser.run("arguments[0].focus()", button)
    browser.press(Keys.ENTER)
    browser.press(Keys.ENTER)
    assert instances(browser)[0] == "turned\\u202egnp.exe\\n<b>"
    first = browser.driver.find_element("css selector", "#records-region tbody button")
    browser.run("arguments[0].focus()", first)
    browser.press(Keys.ARROW_DOWN)
    browser.press(Keys.END)
    focus = browser.driver.switch_to.active_element
    assert focus.text.startswith("</script>")
    browser.press(Keys.HOME)
    browser.press(Keys.ARROW_DOWN)
    name = browser.driver.switch_to.active_element.text
    browser.press(Keys.ENTER)
    shown = browser.driver.find_element("id", "record")
    assert shown.is_displayed()
    assert name in shown.text
    browser.press(Keys.ESCAPE)
    assert not shown.is_displayed()
    assert browser.driver.switch_to.active_element.text == name


def test_a_record_opens_with_everything_in_it(browser: Browser, tmp_path):
    error = 'Traceback (most recent call last):\n  File "x.py", line 3\nValueError: <b>no</b>'
    page = written(tmp_path, [BatchRecord("a & <i>b</i>", "0f", "error", error=error)])
    browser.open(page, PHONE)
    browser.driver.find_element("css selector", "#records-region tbody button").click()
    shown = browser.driver.find_element("id", "record")
    assert "a & <i>b</i>" in shown.text
    assert error.splitlines()[1].strip() in shown.text
    assert browser.overflow() <= 0
    assert browser.nameless() == []
    assert browser.run("return document.querySelectorAll('#record i, #record b').length") == 0


def test_names_do_nothing_but_stand_there(browser: Browser, large):
    browser.open(large)
    assert "taken" not in browser.driver.title
    assert browser.run("return document.scripts.length") == 2


def test_bars_count_every_record(browser: Browser, large):
    browser.open(large)
    for key, values in (
        ("seconds", [k for k in range(10_000) if record(k).seconds]),
        ("steps", [k for k in range(10_000) if record(k).steps is not None]),
    ):
        told = browser.run(f"return document.getElementById('{key}-bars-d').textContent")
        counts = [int(part.rsplit(": ", 1)[1].replace(",", "")) for part in told.split("; ")]
        assert sum(counts) == len(values)


def test_paper_shows_the_rows_that_are_out_of_view(browser: Browser, tmp_path):
    page = written(tmp_path, [record(k) for k in range(300)])
    browser.open(page)
    browser.run("dispatchEvent(new Event('beforeprint'))")
    assert len(instances(browser)) == 300
    browser.run("dispatchEvent(new Event('afterprint'))")
    assert len(instances(browser)) < 300


def test_paper_is_white_and_holds_no_empty_pages(browser: Browser, large):
    browser.open(large, scheme="dark")
    features = [{"name": "prefers-color-scheme", "value": "dark"}]
    browser.driver.execute_cdp_cmd(
        "Emulation.setEmulatedMedia", {"media": "print", "features": features}
    )
    browser.run("dispatchEvent(new Event('beforeprint'))")
    assert browser.background() == "rgb(255, 255, 255)"
    assert browser.faint_text() == []
    assert count(browser) == "10,003 of 10,003 instances; on paper the first 2,000"
    rows = browser.run("return document.querySelector('#records-region tbody').offsetHeight")
    assert rows < 2_100 * 40


def test_a_batch_without_records_is_a_page_too(browser: Browser, tmp_path):
    browser.open(written(tmp_path, []))
    assert browser.complaints() == []
    assert browser.run("return document.querySelector('h1').textContent").startswith("No instance")

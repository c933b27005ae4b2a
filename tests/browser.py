"""A real browser for the page tests: headless Chromium, asked what a person would meet.

On a machine without Chromium the tests that ask for it are skipped, unless CI is set: there they
fail. `conftest.py` starts one for all tests.
"""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest
from selenium import webdriver
from selenium.webdriver.common.keys import Keys

FLAGS = (
    "--headless=new",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-dev-shm-usage",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--no-first-run",
)
PHONE, WIDE = (400, 400), (1600, 900)
LEAST_CONTRAST = 4.5

#: Everything the Tab key should reach, in the order of the document; closed details hide theirs.
REACHABLE = """
const tags = 'a[href], button, input, select, textarea, summary, [tabindex]';
return [...document.querySelectorAll(tags)].filter((each) =>
  each.tabIndex >= 0 && !each.disabled && each.checkVisibility({visibilityProperty: true}));
"""

#: Text below the least contrast with what lies behind it: [contrast, text], worst first.
FAINT = """
const least = arguments[0];
const channels = (colour) => {
  const found = colour.match(/[\\d.]+/g).map(Number);
  return found.length > 3 ? found : [...found, 1];
};
const over = (top, under) => top.slice(0, 3).map((c, k) => c * top[3] + under[k] * (1 - top[3]));
const luminance = (colour) => {
  const [r, g, b] = colour.slice(0, 3).map((c) =>
    c / 255 <= 0.04045 ? c / 255 / 12.92 : ((c / 255 + 0.055) / 1.055) ** 2.4);
  return 0.2126 * r + 0.7152 * g + 0.0722 * b;
};
const behind = (element) => {
  if (!element) return [255, 255, 255];
  const own = channels(getComputedStyle(element).backgroundColor);
  return own[3] === 1 ? own : over(own, behind(element.parentElement));
};
const walker = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
const faint = [];
while (walker.nextNode()) {
  const element = walker.currentNode.parentElement;
  const words = walker.currentNode.data.trim();
  if (!words || ['SCRIPT', 'title', 'desc', 'NOSCRIPT'].includes(element.tagName)) continue;
  if (!element.checkVisibility({visibilityProperty: true})) continue;
  const style = getComputedStyle(element);
  const under = behind(element);
  const ink = over(channels(element.closest('svg') ? style.fill : style.color), under);
  const [low, high] = [luminance(ink), luminance(under)].sort((a, b) => a - b);
  const contrast = (high + 0.05) / (low + 0.05);
  if (contrast < least) faint.push([contrast, words]);
}
return faint.sort((a, b) => a[0] - b[0]);
"""

#: How many colours a picture (data URL) has.
COLOURS = """
const done = arguments[1];
const image = new Image();
image.onload = () => {
  const canvas = new OffscreenCanvas(image.width, image.height);
  const context = canvas.getContext('2d');
  context.drawImage(image, 0, 0);
  const pixels = new Uint32Array(context.getImageData(0, 0, image.width, image.height).data.buffer);
  done(new Set(pixels).size);
};
image.src = arguments[0];
"""

#: Roles that are of no use to a screen reader without a name.
NAMED_ROLES = {
    "button",
    "link",
    "region",
    "table",
    "image",
    "searchbox",
    "combobox",
    "heading",
    "dialog",
    "img",
    "search",
    "columnheader",
    "textbox",
}


class Browser:
    """Opens pages, and tells what a person with or without eyes, mouse or colours would meet."""

    def __init__(self, driver: webdriver.Chrome) -> None:
        self.driver = driver

    def open(self, page: Path, size: tuple[int, int] = WIDE, scheme: str = "light") -> None:
        """Load a page in a view of the given size and colour scheme."""
        features = [{"name": "prefers-color-scheme", "value": scheme}]
        self._command("Emulation.setEmulatedMedia", media="", features=features)
        width, height = size
        self._command(
            "Emulation.setDeviceMetricsOverride",
            width=width,
            height=height,
            deviceScaleFactor=1,
            mobile=False,
        )
        for log in ("browser", "performance"):
            self.driver.get_log(log)  # what earlier pages left
        self.driver.get(page.as_uri())

    def run(self, script: str, *arguments: Any) -> Any:
        """The value that a script in the page returns."""
        return self.driver.execute_script(script, *arguments)

    def settle(self) -> None:
        """Wait until the page has drawn itself anew."""
        self.driver.execute_async_script(
            "const done = arguments[0];"
            "requestAnimationFrame(() => requestAnimationFrame(() => setTimeout(done)));"
        )

    def complaints(self) -> list[str]:
        """What the console says: errors, warnings, what the page's policy refused."""
        return [entry["message"] for entry in self.driver.get_log("browser")]

    def requests(self) -> list[str]:
        """Addresses asked for since the page was opened, data URLs left out."""
        events = [
            json.loads(each["message"])["message"] for each in self.driver.get_log("performance")
        ]
        asked = [
            event["params"]["request"]["url"]
            for event in events
            if event["method"] == "Network.requestWillBeSent"
        ]
        return [address for address in asked if not address.startswith("data:")]

    def overflow(self) -> int:
        """Pixels by which the page is wider than the view."""
        return self.run("return document.scrollingElement.scrollWidth - innerWidth")

    def colours(self) -> int:
        """How many colours the visible part of the page has."""
        picture = "data:image/png;base64," + self.driver.get_screenshot_as_base64()
        self.driver.switch_to.new_window("tab")
        try:
            return self.driver.execute_async_script(COLOURS, picture)
        finally:
            self.driver.close()
            self.driver.switch_to.window(self.driver.window_handles[0])

    def background(self) -> str:
        """Colour of the paper."""
        return self.run("return getComputedStyle(document.body).backgroundColor")

    def faint_text(self) -> list[tuple[float, str]]:
        """Texts whose contrast is below the least one."""
        return self.run(FAINT, LEAST_CONTRAST)

    def not_reached(self) -> list[str]:
        """Controls that the Tab key never gets to, or that do not show that they have the focus."""
        wanted = self.run(REACHABLE)
        self.run("document.activeElement.blur(); scrollTo(0, 0);")
        reached = []
        for _ in range(len(wanted) + 5):
            self.press(Keys.TAB)
            focus = self.driver.switch_to.active_element
            outlined = self.run("return getComputedStyle(arguments[0]).outlineStyle", focus)
            if outlined != "none":
                reached.append(focus)
        return [each.get_attribute("outerHTML")[:80] for each in wanted if each not in reached]

    def press(self, *keys: str) -> None:
        """Press keys, wherever the focus is."""
        webdriver.ActionChains(self.driver).send_keys(*keys).perform()

    def nameless(self) -> list[str]:
        """Roles in the accessibility tree that need a name and have none."""
        nodes = self._command("Accessibility.getFullAXTree")["nodes"]
        return [
            node["role"]["value"]
            for node in nodes
            if not node["ignored"]
            and node["role"]["value"] in NAMED_ROLES
            and not node.get("name", {}).get("value", "").strip()
        ]

    def heading_levels(self) -> list[int]:
        """Levels of the visible headings in their order."""
        return self.run(
            "return [...document.querySelectorAll('h1,h2,h3,h4,h5,h6')]"
            ".filter((h) => h.checkVisibility()).map((h) => Number(h.tagName[1]))"
        )

    def _command(self, name: str, **parameters: Any) -> Any:
        return self.driver.execute_cdp_cmd(name, parameters)


def _found(*names: str) -> str | None:
    return next((path for path in map(shutil.which, names) if path), None)


@contextmanager
def running_browser(profile: Path) -> Iterator[Browser]:
    """A Chromium with a fresh profile, for as long as the context lasts."""
    chromium, driver = _found("chromium", "chromium-browser"), _found("chromedriver")
    if chromium is None or driver is None:
        reason = "page tests need the commands chromium and chromedriver (apt: chromium-driver)"
        if os.environ.get("CI"):
            pytest.fail(reason)
        pytest.skip(reason)
    options = webdriver.ChromeOptions()
    options.binary_location = chromium
    for flag in (*FLAGS, f"--user-data-dir={profile}"):
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    running = webdriver.Chrome(options=options, service=webdriver.ChromeService(driver))
    try:
        yield Browser(running)
    finally:
        running.quit()

"""Makes the helpers beside this file importable from all tests; none of them is timed.

Where CI is set in the environment the same examples are drawn each time; elsewhere new ones, which
is how most faults were found.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from typing import TYPE_CHECKING

import pytest
from hypothesis import settings

if TYPE_CHECKING:
    from browser import Browser

settings.register_profile("untimed", deadline=None, derandomize=bool(os.environ.get("CI")))
settings.load_profile("untimed")


@pytest.fixture(scope="session")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Browser]:
    """One Chromium for all page tests, started by the first of them."""
    from browser import running_browser

    with running_browser(tmp_path_factory.mktemp("chromium")) as running:
        yield running

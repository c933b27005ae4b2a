"""Sentences as HTML: names that stand in quotes there are set apart as code here."""

from __future__ import annotations

import re
from collections.abc import Iterable

from ...pages.markup import text

#: An apostrophe within a word or after one opens no quote, and one before a word closes none.
QUOTED = re.compile(r"(?<![\w'])'(.+?)'(?![\w'])")


def prose(sentence: str) -> str:
    """A sentence ready to stand between tags, the names in it as code.

    Examples
    --------
    >>> prose("Without 'open' the plan's rows < 3")
    'Without <code>open</code> the plan&#x27;s rows &lt; 3'
    """
    parts = QUOTED.split(sentence)
    return "".join(
        f"<code>{text(part)}</code>" if k % 2 else text(part) for k, part in enumerate(parts)
    )


def sentences(those: Iterable[str], css: str = "") -> str:
    """Sentences as paragraphs; empty ones are left out."""
    look = f' class="{css}"' if css else ""
    return "".join(f"<p{look}>{prose(sentence)}</p>" for sentence in those if sentence)

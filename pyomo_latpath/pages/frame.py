"""The frame around a page's content: one self-contained HTML document."""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Sequence
from importlib.resources import files
from typing import Any

from .markup import text


def page(
    title: str,
    subject: str,
    body: str,
    *,
    sheets: Sequence[str] = (),
    footer: Sequence[str] = (),
    script: str | None = None,
    data: Any = None,
) -> str:
    """Return a whole HTML document that needs no other file and no network.

    Parameters
    ----------
    title : str
        The one sentence to take away; it is the page's first heading.
    subject : str
        What the page is about, in two or three words.
    body : str
        HTML.
    sheets : sequence of str
        Style sheets of this package beside `frame.css`.
    footer : sequence of str
        Quiet lines at the end, plain text.
    script : str, optional
        A script of this package. The page's policy lets it run, by its hash, and nothing else.
    data : plain data, optional
        What the script works on: JSON in the element `data`.

    Examples
    --------
    >>> document = page("All plans are whole", "Caves & towns", "<p>That is all.</p>")
    >>> document.startswith("<!DOCTYPE html>"), "Caves &amp; towns" in document
    (True, True)
    """
    style = "\n".join(_resource(sheet) for sheet in ("frame.css", *sheets))
    code = "" if script is None else _resource(script)
    policy = f"default-src 'none'; style-src 'unsafe-inline'; img-src data:; {_allowed(code)}"
    scripts = "" if data is None else f'<script type="application/json" id="data">{_json(data)}'
    scripts += "</script>" if scripts else ""
    scripts += f"<script>{code}</script>" if code else ""
    quiet = "".join(f"<p>{text(line)}</p>" for line in footer)
    return f"""<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta http-equiv="Content-Security-Policy" content="{policy}">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta name="color-scheme" content="light dark">
<meta name="referrer" content="no-referrer">
<link rel="icon" href="data:,">
<title>{text(subject)} – {text(title)}</title>
<style>
{style}
</style>
</head>
<body>
<a class="skip" href="#content">Skip to the content</a>
<header class="top"><p>{text(subject)}</p><h1>{text(title)}</h1></header>
<main id="content" tabindex="-1">
{body}
</main>
<footer>{quiet}</footer>
{scripts}
</body>
</html>
"""


def _resource(name: str) -> str:
    return files(__package__).joinpath(name).read_text(encoding="utf-8")


def _allowed(code: str) -> str:
    if not code:
        return "script-src 'none'"
    digest = hashlib.sha256(code.encode()).digest()
    return f"script-src 'sha256-{base64.b64encode(digest).decode()}'"


def _json(data: Any) -> str:
    """JSON that can hold no end of its element, whatever a name contains."""
    return json.dumps(data, allow_nan=False, separators=(",", ":")).replace("<", "\\u003c")

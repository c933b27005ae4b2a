"""Numbers and entries as the console shows them."""

from __future__ import annotations

import math
import textwrap

WIDTH = 80


def number(value: float) -> str:
    """A number as people write it.

    Examples
    --------
    >>> number(6191726.0), number(0.1 + 0.2), number(float("nan"))
    ('6191726', '0.3', '-')
    """
    if math.isnan(value):
        return "-"
    if float(value).is_integer() and abs(value) < 1e15:
        return str(int(value))
    return f"{value:.10g}"


def entry(title: str, text: str, indent: int = 2) -> list[str]:
    """Lines with a title before a text, which is wrapped beside it.

    Examples
    --------
    >>> entry("route", "path")
    ['  route      path']
    """
    margin = " " * (indent + 11)
    lines = textwrap.wrap(text, WIDTH, initial_indent=margin, subsequent_indent=margin)
    return [f"{' ' * indent}{title:<11}{lines[0].lstrip()}", *lines[1:]]

"""Text, names, numbers and tables as HTML, safe for whatever a model calls its parts."""

from __future__ import annotations

import html
import math
import re
import unicodedata
from collections.abc import Iterable, Sequence

#: Joiners that Persian, Indic and emoji names need; other invisible characters are spelled out.
_JOINERS = "\u200c\u200d"
_INVISIBLE = {"Cc", "Cf", "Cs", "Zl", "Zp"}
#: Names in a list, and characters of a name, at most.
NAMES, NAME_WIDTH = 60, 160
_SUSPECT = re.compile(r"[^\x20-\x7e]")


def visible(text: str) -> str:
    r"""Spell out characters that nobody sees: line ends, control and direction marks.

    Without it a name could end a line of a table, or turn the text after it around.

    Examples
    --------
    >>> print(visible("van[1]\n"), visible("a\u202eb"), visible("Käse"))
    van[1]\n a\u202eb Käse
    """
    return text if text.isascii() and text.isprintable() else _SUSPECT.sub(_spelled, text)


def _spelled(match: re.Match[str]) -> str:
    character = match.group()
    if character in _JOINERS or unicodedata.category(character) not in _INVISIBLE:
        return character
    return character.encode("unicode_escape").decode("ascii")


def text(value: object) -> str:
    """Text ready to stand between tags or in a quoted attribute.

    Examples
    --------
    >>> text('budget <"all">')
    'budget &lt;&quot;all&quot;&gt;'
    """
    return html.escape(visible(str(value)))


def name(value: str) -> str:
    """The name of a row, column or group, kept apart from the text around it.

    `bdi` keeps a name written from right to left from turning its neighbours around.

    Examples
    --------
    >>> name("demand[town & dairy]")
    '<bdi class="name">demand[town &amp; dairy]</bdi>'
    """
    return f'<bdi class="name">{text(shortened(value, NAME_WIDTH))}</bdi>'


def shortened(value: str, width: int) -> str:
    """At most `width` characters, the middle left out: names differ at both ends.

    Examples
    --------
    >>> shortened("shelves[Upper cave,December]", 16)
    'shelves[…cember]'
    """
    if len(value) <= width:
        return value
    head = width // 2
    return f"{value[:head]}…{value[len(value) - (width - head - 1) :]}"


def number(value: float | None) -> str:
    """A number as people write it, with its thousands apart; a dash where there is none.

    Examples
    --------
    >>> number(12000), number(0.1 + 0.2), number(None), number(float("nan"))
    ('12,000', '0.3', '–', '–')
    >>> number(8608417.9471), number(1.5e-7), number(float("-inf"))
    ('8,608,417.947', '1.5e-07', '-∞')
    """
    if value is None or math.isnan(value):
        return "–"
    if math.isinf(value):
        return "∞" if value > 0 else "-∞"
    if float(value).is_integer() and abs(value) < 1e15:
        return f"{int(value):,}"
    return f"{value:,.10g}" if abs(value) >= 1e-4 else f"{value:.4g}"


def counted(count: int, one: str, many: str | None = None) -> str:
    """A count with its noun.

    Examples
    --------
    >>> counted(1, "row"), counted(12000, "row"), counted(2, "entry", "entries")
    ('1 row', '12,000 rows', '2 entries')
    """
    return f"{count:,} {one if count == 1 else many or one + 's'}"


def paragraphs(sentences: Iterable[str], css: str = "") -> str:
    """Plain sentences as paragraphs; empty ones are left out."""
    look = f' class="{css}"' if css else ""
    return "".join(f"<p{look}>{text(sentence)}</p>" for sentence in sentences if sentence)


def names(those: Sequence[str], most: int = NAMES) -> str:
    """Names in a line, at most so many; the rest is counted.

    Examples
    --------
    >>> names(["van", "cart", "sledge"], 1)
    '<bdi class="name">van</bdi> and 2 more'
    """
    shown = ", ".join(name(each) for each in those[:most])
    return shown + (f" and {len(those) - most:,} more" if len(those) > most else "")


def numbered(those: Sequence[str]) -> str:
    """Names as a numbered list."""
    items = "".join(f"<li>{name(each)}</li>" for each in those[:NAMES])
    rest = len(those) - NAMES
    return f"<ol>{items}</ol>" + (f"<p>and {rest:,} more</p>" if rest > 0 else "")


def cards(contents: Iterable[str]) -> str:
    """Pieces of HTML as a list of sheets."""
    return f'<ul class="cards">{"".join(f"<li>{each}</li>" for each in contents)}</ul>'


def folded(title: str, body: str) -> str:
    """What is shown only to those who ask for it."""
    return f"<details><summary>{text(title)}</summary>{body}</details>"


def figures(pairs: Iterable[tuple[str, str]]) -> str:
    """Key figures in a row: what is counted, and the count (both as HTML)."""
    items = "".join(f"<div><dt>{what}</dt><dd>{value}</dd></div>" for what, value in pairs)
    return f'<dl class="figures">{items}</dl>'


def section(key: str, title: str, body: str, lead: str = "", wide: bool = False) -> str:
    """A part of the page with its heading.

    Parameters
    ----------
    key : str
        Unique on the page.
    title : str
        Plain text.
    body, lead : str
        HTML; the lead is what to know before reading the body.
    wide : bool
        Whether the body needs the whole width, below its heading.
    """
    lead = f'<p class="lead">{lead}</p>' if lead else ""
    css = ' class="wide"' if wide else ""
    return (
        f'<section aria-labelledby="{key}"{css}><header><h2 id="{key}">{text(title)}</h2>{lead}'
        f'</header><div class="body">{body}</div></section>'
    )


def table(
    key: str,
    caption: str,
    head: Sequence[str],
    rows: Iterable[Sequence[str]],
    numbers: Sequence[int] = (),
    prose: Sequence[int] = (),
) -> str:
    """A table that scrolls within its own region; the first cell of a row is its heading.

    Parameters
    ----------
    key : str
        Unique on the page.
    caption, head : str, sequence of str
        Plain text.
    rows : iterable of sequence of str
        Cells as HTML.
    numbers, prose : sequence of int
        Columns that hold numbers; columns that hold sentences, and need room for them.
    """

    def align(k: int) -> str:
        css = "number" if k in numbers else "prose" if k in prose else ""
        return f' class="{css}"' if css else ""

    titles = "".join(f'<th scope="col"{align(k)}>{text(t)}</th>' for k, t in enumerate(head))
    lines = "".join(
        f'<tr><th scope="row"{align(0)}>{row[0]}</th>'
        + "".join(f"<td{align(k)}>{cell}</td>" for k, cell in enumerate(row[1:], 1))
        + "</tr>"
        for row in rows
    )
    return (
        f'<div class="scroll" role="region" tabindex="0" aria-labelledby="{key}">'
        f'<table><caption id="{key}"><span>{text(caption)}</span></caption>'
        f"<thead><tr>{titles}</tr></thead><tbody>{lines}</tbody></table></div>"
    )

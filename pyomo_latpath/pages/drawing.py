"""Inline SVG: pictures with a title and a description for those who do not see them."""

from __future__ import annotations

from collections.abc import Sequence

from .markup import number, text

#: Each verdict has a pattern of its own, so that no one needs to tell its colour.
PATTERNS = """<defs>
<pattern id="fill-proven" width="8" height="8" patternUnits="userSpaceOnUse">
<rect width="8" height="8" class="proven"/></pattern>
<pattern id="fill-sampled" width="8" height="8" patternUnits="userSpaceOnUse">
<rect width="8" height="8" class="sampled pale"/><circle cx="4" cy="4" r="1.8" class="sampled"/>
</pattern>
<pattern id="fill-refuted" width="8" height="8" patternUnits="userSpaceOnUse"
 patternTransform="rotate(45)"><rect width="8" height="8" class="refuted pale"/>
<rect width="3.5" height="8" class="refuted"/></pattern>
<pattern id="fill-undecided" width="8" height="8" patternUnits="userSpaceOnUse">
<rect width="8" height="8" class="undecided pale"/>
<path d="M0 4h8M4 0v8" class="undecided line"/></pattern>
</defs>"""


def picture(key: str, width: float, height: float, title: str, description: str, body: str) -> str:
    """A drawing of the given size in px, never wider than its place.

    Parameters
    ----------
    key : str
        Unique on the page.
    title, description : str
        Plain text: what the picture is, and what there is to see.
    body : str
        SVG elements.

    Examples
    --------
    >>> drawing = picture("plan", 20, 10, "Caves", "One cave.", box(0, 0, 20, 10, "bar"))
    >>> 'role="img"' in drawing and "<desc id=\\"plan-d\\">One cave.</desc>" in drawing
    True
    """
    return (
        f'<svg role="img" aria-labelledby="{key}-t {key}-d" viewBox="0 0 {width:g} {height:g}" '
        f'width="{width:g}" height="{height:g}">'
        f'<title id="{key}-t">{text(title)}</title><desc id="{key}-d">{text(description)}</desc>'
        f"{body}</svg>"
    )


def box(x: float, y: float, width: float, height: float, css: str = "", fill: str = "") -> str:
    """A rectangle with a CSS class, or filled with one of the patterns."""
    look = f' class="{css}"' if css else ""
    look += f' fill="url(#fill-{fill})"' if fill else ""
    return f'<rect x="{x:.5g}" y="{y:.5g}" width="{width:.5g}" height="{height:.5g}"{look}/>'


def label(x: float, y: float, words: str, css: str = "", anchor: str = "start") -> str:
    """A line of text that starts, ends or is centred at a point."""
    look = f' class="{css}"' if css else ""
    return f'<text x="{x:.5g}" y="{y:.5g}" text-anchor="{anchor}"{look}>{text(words)}</text>'


def bars(key: str, title: str, pairs: Sequence[tuple[str, float]]) -> str:
    """Named amounts as bars from left to right, narrow enough for a phone.

    Parameters
    ----------
    key : str
        Unique on the page.
    title : str
    pairs : sequence of (str, float)
        What is measured, and its amount from 0 on.
    """
    most = max(amount for _, amount in pairs) or 1.0
    body = "".join(
        label(126, 24 * k + 17, words, "soft", "end")
        + box(134, 24 * k + 5, max(1.0, 140 * amount / most), 16, "bar")
        + label(140 + 140 * amount / most, 24 * k + 17, _amount(amount))
        for k, (words, amount) in enumerate(pairs)
    )
    told = "; ".join(f"{words}: {_amount(amount)}" for words, amount in pairs)
    drawing = picture(key, 340, 24 * len(pairs) + 6, title, told, body)
    return f"<figure><figcaption>{text(title)}</figcaption>{drawing}</figure>"


def _amount(amount: float) -> str:
    """Counts in full, measured amounts to three digits."""
    return number(amount if float(amount).is_integer() else float(f"{amount:.3g}"))

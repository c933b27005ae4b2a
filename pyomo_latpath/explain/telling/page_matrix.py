"""The part of the page that shows the matrix by blocks."""

from __future__ import annotations

from ...integrality.finding import WORST_FIRST
from ...pages.markup import number, section, table, text
from ..explanation import Explanation
from . import words
from .drawings import largest, matrix
from .prose import prose


def blocks(told: Explanation) -> str:
    """The section on blocks; empty where there are none."""
    if not told.blocks:
        return ""
    marked = largest(told.blocks)
    rows = [
        [
            str(place),
            number(block.rows),
            number(block.columns),
            text(block.verdict.value),
            text(words.structure(block.structure or "–")),
            prose(block.sentence),
        ]
        for place, block in marked
    ]
    rest = len(told.blocks) - len(marked)
    caption = "Blocks: parts of the model that share no row and no column"
    caption += f"; the largest ones, {rest:,} more are not listed" if rest else ""
    head = ["block", "rows", "columns", "verdict", "structure", "what it is"]
    drawing = matrix("matrix-picture", told.sketch, told.blocks)
    body = f'<div class="beside"><div>{drawing}</div>{_legend(told)}</div>' if drawing else ""
    body += table("block-table", caption, head, rows, numbers=(0, 1, 2), prose=[5])
    return section("blocks", "The matrix by blocks", body)


def _legend(told: Explanation) -> str:
    """Which pattern stands for which verdict, and how many blocks have it."""
    verdicts = [block.verdict for block in told.blocks]
    items = "".join(
        '<li><svg width="28" height="16" aria-hidden="true"><rect width="28" height="16" '
        f'fill="url(#fill-{verdict})"/></svg>{verdict}: {verdicts.count(verdict):,}</li>'
        for verdict in WORST_FIRST
        if verdict in verdicts
    )
    return f'<ul class="legend">{items}</ul>'

"""The drawings of an explanation: a conflict as a cycle, the matrix from afar, gaps as bars."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from ...integrality.finding import WORST_FIRST, Verdict
from ...pages.drawing import box, label, picture
from ...pages.markup import counted, shortened, visible
from ..explanation import BlockSummary, NamedViolator, Sketch

Point = tuple[float, float]

#: Rows of a cycle drawn with their names, and with their numbers.
NAMED, NUMBERED = 12, 18
#: Blocks with a number of their own in the picture of the matrix.
MARKED = 8
#: Side of the picture of the matrix, and room for numbers beside it, in px.
MATRIX_SIDE, GUTTER = 340, 20


def cycle(key: str, violator: NamedViolator, named: bool) -> str:
    """Rows (squares) and columns (circles) by turns on a circle; a thick edge is a -1.

    Parameters
    ----------
    key : str
        Unique on the page.
    violator : NamedViolator
        A cycle.
    named : bool
        Whether names stand beside the nodes; else their numbers stand in them.
    """
    k = len(violator.row_names)
    radius = max(110.0, (15.5 if named else 10.5) * k)
    margin = 215 if named else 50
    width, height = 2 * (radius + margin), 2 * radius + 80

    def points(radius: float) -> list[Point]:
        angles = [math.pi * (node + 0.5) / k for node in range(2 * k)]
        return [
            (width / 2 + radius * math.sin(angle), height / 2 - radius * math.cos(angle))
            for angle in angles
        ]

    places = points(radius)
    body = "".join(
        _edge(a, b, _sign(violator, node))
        for node, (a, b) in enumerate(zip(places, places[1:] + places[:1], strict=True))
    )
    body += "".join(_node(node, place, k) for node, place in enumerate(places))
    if named:
        outside = enumerate(points(radius + 20))
        body += "".join(_name(node, place, violator) for node, place in outside)
    minus = sum(_sign(violator, node) < 0 for node in range(2 * k))
    told = (
        f"{counted(k, 'row')} and {counted(k, 'column')} by turns, each sharing an entry with the "
        f"next; {minus} of the {2 * k} entries are negative."
    )
    return picture(key, width, height, "The conflict as a cycle", told, body)


def _sign(violator: NamedViolator, node: int) -> int:
    """Sign of the entry between a node and the next: row 0, column 0, row 1, column 1, ..."""
    k = len(violator.row_names)
    i, is_column = divmod(node, 2)
    return int(np.sign(violator.entries[(i + is_column) % k, i]))


def _edge(a: Point, b: Point, sign: int) -> str:
    css = "edge minus" if sign < 0 else "edge"
    x, y = (a[0] + b[0]) / 2, (a[1] + b[1]) / 2
    edge = f'<path d="M{a[0]:.5g} {a[1]:.5g}L{b[0]:.5g} {b[1]:.5g}" class="{css}"/>'
    if math.dist(a, b) < 32:
        return edge
    return f'{edge}<circle cx="{x:.5g}" cy="{y:.5g}" r="7" class="paper"/>' + label(
        x, y + 4.5, "−" if sign < 0 else "+", anchor="middle"
    )


def _node(node: int, point: Point, k: int) -> str:
    """A row's square or a column's circle, with its number where there is room for it."""
    (x, y), (i, is_column) = point, divmod(node, 2)
    size = 10 if k <= NUMBERED else 4
    shape = (
        f'<circle cx="{x:.5g}" cy="{y:.5g}" r="{size + 1}" class="node column"/>'
        if is_column
        else box(x - size, y - size, 2 * size, 2 * size, "node")
    )
    return shape + (label(x, y + 4.5, str(i + 1), anchor="middle") if k <= NUMBERED else "")


def _name(node: int, point: Point, violator: NamedViolator) -> str:
    """A node's name, running away from the circle."""
    (x, y), (i, is_column) = point, divmod(node, 2)
    words = visible((violator.column_names if is_column else violator.row_names)[i])
    anchor = "start" if node < len(violator.row_names) else "end"
    return label(x, y + 4.5, shortened(words, 24), "mono", anchor)


def matrix(key: str, sketch: Sketch, blocks: Sequence[BlockSummary]) -> str:
    """The matrix from afar: each cell in the pattern of its block's verdict, denser where fuller.

    Parameters
    ----------
    key : str
        Unique on the page.
    sketch : Sketch
    blocks : sequence of BlockSummary
    """
    if not sketch.rows or not sketch.columns or not blocks:
        return ""
    ratio = min(1.3, max(0.25, sketch.rows / sketch.columns))
    height = MATRIX_SIDE * ratio
    across, down = MATRIX_SIDE / sketch.columns, height / sketch.rows
    body = "".join(_frame(block, across, down) for block in blocks)
    verdicts = _worst_verdicts(sketch, blocks)
    area = np.outer(np.diff(sketch.row_edges), np.diff(sketch.column_edges))
    for i, j in np.argwhere(sketch.counts):
        x, y = sketch.column_edges[j] * across, sketch.row_edges[i] * down
        wide, high = sketch.column_edges[j + 1] * across - x, sketch.row_edges[i + 1] * down - y
        full = 0.5 + 0.5 * math.sqrt(sketch.counts[i, j] / area[i, j])
        cell = box(x, y, max(1.0, wide), max(1.0, high), fill=verdicts[i][j])
        body += cell.replace("/>", f' fill-opacity="{full:.2f}"/>')
    for place, block in largest(blocks):
        body += _mark(place, block, down)
    body += box(0, 0, MATRIX_SIDE, height, "outline")
    body = f'<g transform="translate({GUTTER} 0)">{body}</g>'
    told = (
        f"{counted(sketch.rows, 'row')} down and {counted(sketch.columns, 'column')} across, "
        f"put in order so that {counted(len(blocks), 'block')} stand on the diagonal."
    )
    return picture(key, MATRIX_SIDE + GUTTER, height, "The matrix from afar", told, body)


def largest(blocks: Sequence[BlockSummary]) -> list[tuple[int, BlockSummary]]:
    """The largest blocks with their numbers, from 1 on."""
    order = sorted(blocks, key=lambda block: (-block.nonzeros, -block.columns))
    return list(enumerate(order[:MARKED], 1))


def _frame(block: BlockSummary, across: float, down: float) -> str:
    """The block's outline, where it is large enough to be seen."""
    (top, bottom), (left, right) = block.row_slice, block.column_slice
    wide, high = (right - left) * across, (bottom - top) * down
    if min(wide, high) < 3:
        return ""
    return box(left * across, top * down, wide, high, f"{block.verdict.value} tint")


def _mark(place: int, block: BlockSummary, down: float) -> str:
    """The number of a block beside its rows, where there is room for it."""
    top, bottom = block.row_slice
    if (bottom - top) * down < 14:
        return ""
    return label(-6, (top + bottom) / 2 * down + 4.5, str(place), "soft", "end")


def _worst_verdicts(sketch: Sketch, blocks: Sequence[BlockSummary]) -> list[list[str]]:
    """For each cell the worst verdict of the blocks that it touches."""
    ranks = np.array([WORST_FIRST.index(block.verdict) for block in blocks])
    touched = [
        (edges[:-1, None] < ends[:, 1]) & (edges[1:, None] > ends[:, 0])
        for edges, ends in (
            (sketch.row_edges, np.array([block.row_slice for block in blocks])),
            (sketch.column_edges, np.array([block.column_slice for block in blocks])),
        )
    ]
    rows, columns = touched
    worst = np.full((rows.shape[0], columns.shape[0]), WORST_FIRST.index(Verdict.PROVEN))
    for rank in reversed(range(len(WORST_FIRST))):
        mine = ranks == rank
        met = rows[:, mine].astype(np.int64) @ columns[:, mine].T.astype(np.int64) > 0
        worst[met] = rank
    return [[WORST_FIRST[rank].value for rank in row] for row in worst.tolist()]

"""The face-fixing walk: real costs met by short walks for rounded ones.

After Tardos (1985, 1986): an optimum for rounded costs already shows, by a large price, rows
and bounds that are tight at every optimum for the true ones. They are held, the costs seen
from within that face are rounded anew, and so on; neither the costs' size nor the sides' nor
the number of rows enters the number of steps.

Written for minimisation. Let the box have total side length W, let c~ be within theta of a
multiple of c (modulo the span of the held rows), and let y be optimal prices for c~. A vertex
x with slack >= 1 in row h has c~ (x - x~) >= |y_h|, and rounding changes that difference by at
most theta W; so |y_h| > theta W shows that row h is tight at every optimum.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.sparse.linalg as spla
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from ..proof import exact_product
from .box import Box
from .cost_scaling import phase_bound, scaling_walk
from .vertex_oracle import Vertex, VertexOracle

Floats = NDArray[np.float64]
Whole = NDArray[Any]
Flags = NDArray[np.bool_]

#: Rounding error of the costs: a half, and a little for the floating-point projection.
THETA = 0.51
#: Rounds after which the walk stops rounding; the theorem's n is never met in practice.
MOST_ROUNDS = 60


@dataclass(frozen=True, eq=False)
class Walk:
    """Where a walk ended.

    Attributes
    ----------
    vertex : Vertex
    settled : bool
        Whether the vertex was shown optimal for the true costs.
    rounds, phases, faces_fixed : int
    step_bound : int or None
        Proven bound on the steps of such a walk.
    """

    vertex: Vertex
    settled: bool
    rounds: int
    phases: int
    faces_fixed: int
    step_bound: int | None


def rounding_size(normal: NormalForm, box: Box) -> int:
    """Return S, the size to which costs are rounded so that every round holds a new row.

    S > n theta |a| W + theta sqrt(n), with |a| the largest 2-norm of a row that may be held:
    an inequality row, or a bound (norm 1).

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> from pyomo_latpath.paths.box import box_of
    >>> normal = normalise(LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1,
    ...                                           col_lower=0, col_upper=3, cost=1))
    >>> rounding_size(normal, box_of(normal))
    7
    """
    total = box.total or 1
    square = np.bincount(
        normal.matrix.indices, weights=normal.matrix.data**2, minlength=normal.row_lower.size
    )
    loose = square[normal.row_lower != normal.row_upper]
    norm = math.sqrt(max(1.0, float(loose.max(initial=1.0))))
    return math.floor(THETA * (box.dimension * norm * total + math.sqrt(box.dimension))) + 1


def face_fixing_walk(
    normal: NormalForm,
    costs: Whole,
    box: Box,
    oracle: VertexOracle,
    optimal: Callable[[Vertex], bool],
    *,
    largest: int,
    stride: bool,
    deadline: Deadline,
) -> Walk:
    """Walk to a vertex that minimises whole costs of any size.

    Parameters
    ----------
    normal : NormalForm
        A block whose box is known (`box.total` is not None).
    costs : ndarray, shape (n,), int64 or object
    box : Box
    oracle : PricingOracle
        Standing at a vertex, or free to choose its first one.
    optimal : callable
        Decides exactly whether a vertex is optimal for `costs`; a walk stops there.
    largest : int
        Largest cost the oracle takes; smaller costs need no rounding, so one round does.
    stride : bool
        Go to each round's optimum in one call of the oracle, not digit by digit.
    deadline : Deadline

    Returns
    -------
    Walk
    """
    held_rows = normal.row_lower == normal.row_upper
    held_columns = normal.col_lower == normal.col_upper
    size = largest if stride else min(rounding_size(normal, box), largest)
    whole = largest if largest_size(costs) <= largest else size
    bound = step_bound(normal, costs, box, largest, stride)
    sides = np.floor(box.upper) - np.ceil(box.lower)
    rounds = phases = fixed = 0
    current: Whole = costs
    while True:
        rounds += 1
        final = largest_size(current) <= whole
        rounded = current if final else _round(normal, current, held_rows, held_columns, size)
        if stride:
            vertex, walked = oracle.optimise(rounded, deadline), 1
        else:
            vertex, walked = scaling_walk(oracle, rounded, deadline)
        phases += walked
        if vertex.status != "optimal":
            return Walk(vertex, False, rounds, phases, fixed, bound)
        if optimal(vertex):
            return Walk(vertex, True, rounds, phases, fixed, bound)
        if final or rounds == MOST_ROUNDS:
            break
        limit = THETA * float(sides[~held_columns].sum())
        rows = (np.abs(vertex.row_dual) > limit) & ~held_rows
        columns = (np.abs(vertex.reduced_cost) > limit) & ~held_columns
        oracle.hold(rows, columns)
        held_rows, held_columns = held_rows | rows, held_columns | columns
        fixed += int(rows.sum() + columns.sum())
        seen = _seen_from_face(normal, costs, oracle, held_rows, held_columns)
        if not (rows.any() or columns.any()) and 2 * largest_size(seen) > largest_size(current):
            break
        current = seen
    # The vertex is best on its face; prices that prove it best of all are a matter of
    # degenerate pivots at the true costs.
    oracle.release()
    vertex = oracle.optimise(costs, deadline)
    settled = vertex.status == "optimal" and optimal(vertex)
    return Walk(vertex, settled, rounds, phases, fixed, bound)


def step_bound(
    normal: NormalForm, costs: Whole, box: Box, largest: int, stride: bool = False
) -> int | None:
    """Most steps of a walk: one scaling walk for costs up to `largest`, else one a held row.

    A stride meets rounded costs undivided, each step for a gain of at least 1. None where no
    box is known.
    """
    if box.total is None:
        return None
    if largest_size(costs) <= largest:
        return phase_bound(box.total, largest_size(costs))
    size = largest if stride else min(rounding_size(normal, box), largest)
    a_round = box.total * size if stride else phase_bound(box.total, size)
    return max(1, box.dimension) * a_round


def largest_size(costs: Whole) -> int:
    """Largest |cost|."""
    return max(abs(int(costs.max())), abs(int(costs.min()))) if costs.size else 0


def _seen_from_face(
    normal: NormalForm, costs: Whole, oracle: VertexOracle, rows: Flags, columns: Flags
) -> Whole:
    """Costs less what the held rows are worth at the current basis; 0 for held columns.

    On the face the two differ by a constant, and the difference is exact.
    """
    prices = oracle.basis_prices(costs, np.zeros(rows.size, dtype=object))
    seen = costs.astype(object) - exact_product(normal.matrix.T, np.where(rows, prices, 0))
    seen[columns] = 0
    return seen


def _round(normal: NormalForm, costs: Whole, rows: Flags, columns: Flags, size: int) -> Whole:
    """Project costs onto the face's directions, scale them to `size` and round them."""
    shift = max(0, largest_size(costs).bit_length() - 512)
    direction = (costs // (1 << shift)).astype(np.float64)
    direction /= np.abs(direction).max()
    free = np.flatnonzero(~columns)
    span = normal.matrix[:, free].tocsr()[np.flatnonzero(rows), :]
    if span.shape[0] and span.nnz:
        fit = spla.lsqr(span.T, direction[free], atol=1e-12, btol=1e-12)[0]
        projected = direction[free] - span.T @ fit
        # A projection that leaves nothing but noise says nothing: keep the exact costs' direction.
        if np.abs(projected).max(initial=0.0) > 1e-6 * np.abs(direction[free]).max(initial=0.0):
            direction[free] = projected
    direction[columns] = 0.0
    largest = np.abs(direction).max(initial=0.0)
    if largest == 0.0:
        return np.zeros(costs.size, np.int64)
    return np.rint(direction * (size / largest)).astype(np.int64)

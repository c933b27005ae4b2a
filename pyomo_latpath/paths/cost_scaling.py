"""The scaling walk: whole costs met one binary digit at a time, each digit a short walk.

After Edmonds and Karp (1972), section 3, carried from flows to polytopes with whole vertices.
Written for minimisation: with L = ceil(log2 max|c|), phase t = 0..L minimises
floor(c / 2**(L - t)) from the vertex at which the phase before ended. The costs of a phase are
twice those before minus 0 or 1 in each entry, so the vertex is off its new optimum by at most
the box's total side length W, and each step gains at least 1: at most W steps a phase.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from ..deadline import Deadline
from .vertex_oracle import Vertex, VertexOracle

Whole = NDArray[Any]


def phase_costs(cost: Whole) -> list[Whole]:
    """Return the costs of all phases, coarsest first; the last one is `cost`.

    Parameters
    ----------
    cost : ndarray, shape (n,), int64 or object
        Whole numbers.

    Examples
    --------
    >>> [phase.tolist() for phase in phase_costs(np.array([5, -3, 0]))]
    [[0, -1, 0], [1, -1, 0], [2, -2, 0], [5, -3, 0]]
    """
    digits = digits_of(cost)
    return [cost // (1 << (digits - t)) for t in range(digits + 1)]


def digits_of(cost: Whole) -> int:
    """Return L = ceil(log2 max|c|), 0 for costs within -1..1."""
    largest = max((abs(value) for value in (int(cost.max()), int(cost.min()))), default=0)
    return max(0, (largest - 1).bit_length()) if cost.size and largest else 0


def scaling_walk(oracle: VertexOracle, cost: Whole, deadline: Deadline) -> tuple[Vertex, int]:
    """Walk to a vertex that minimises `cost` over the oracle's face.

    Parameters
    ----------
    oracle : VertexOracle
        Stands at a vertex; its counts of steps and pivots go on.
    cost : ndarray, shape (n,), int64 or object
    deadline : Deadline

    Returns
    -------
    vertex : Vertex
        Its status is other than 'optimal' where a phase did not end well.
    phases : int
        Phases walked.
    """
    phases = phase_costs(cost)
    vertex = oracle.optimise(phases[0], deadline)
    for done, phase in enumerate(phases[1:], start=1):
        if vertex.status != "optimal":
            return vertex, done
        vertex = oracle.optimise(phase, deadline)
    return vertex, len(phases)


def phase_bound(box_total: int, cost_limit: int) -> int:
    """Most steps of a scaling walk for whole costs up to `cost_limit` in a box.

    Examples
    --------
    >>> phase_bound(10, 8)
    40
    """
    return box_total * (digits_of(np.array([max(cost_limit, 1)], dtype=object)) + 1)

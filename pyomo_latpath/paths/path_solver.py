"""The path solver: from a first vertex along whole vertices to a proven optimum."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from ..highs import Basis, LinearProgram
from ..proof import Proof, WholeCosts, prove_optimal
from .box import Box, box_of
from .conetwork_flow import ConetworkOracle, ConetworkStructure
from .face_fixing import Walk, face_fixing_walk, largest_size, step_bound
from .network_oracle import NetworkOracle, NetworkStructure, costs_too_wide, largest_cost, repays
from .vertex_oracle import (
    LARGEST_HIGHS_COST,
    LARGEST_TABLEAU_COST,
    HighsBasis,
    Tableau,
    Vertex,
    resting,
)

Floats = NDArray[np.float64]


Oracle = HighsBasis | Tableau | NetworkOracle | ConetworkOracle
Engine = TypeVar("Engine", HighsBasis, NetworkOracle, ConetworkOracle)
#: Outcomes of a walk from the last vertex after which another one starts afresh.
UNSETTLED = ("optimal", "pivot_limit", "error")


@dataclass(frozen=True, eq=False)
class PathResult:
    """Outcome of the path solver on a block (scaled units, minimisation).

    Attributes
    ----------
    status : str
        'optimal', 'infeasible', 'unbounded', 'time_limit' or 'error'.
    x : ndarray, shape (n,), float64
    proof : Proof
    ray, farkas : ndarray or None
    walk : Walk
    box : Box
    engine : str
        'network', 'conetwork', 'highs' or 'tableau'.
    steps, pivots : int
    exact_steps : bool
        Whether `steps` is exact or an upper count.
    note : str
        Anything out of the ordinary, one sentence.
    """

    status: str
    x: Floats
    proof: Proof
    ray: Floats | None
    farkas: Floats | None
    walk: Walk
    box: Box
    engine: str
    steps: int
    pivots: int
    exact_steps: bool
    note: str


@dataclass(frozen=True, eq=False)
class LastWalk:
    """Where a walk ended, for the next one over a block with the same matrix.

    Attributes
    ----------
    normal : NormalForm
        The block walked over.
    box : Box
    oracle : HighsBasis, NetworkOracle or ConetworkOracle
        Standing at the optimum.
    walks : int
        How many there were, this one included.
    """

    normal: NormalForm
    box: Box
    oracle: HighsBasis | NetworkOracle | ConetworkOracle
    walks: int

    def had_limits_of(self, normal: NormalForm) -> bool:
        """Whether the other block has the very same sides and bounds."""
        return self.normal.row_lower is normal.row_lower


def walk_to_optimum(
    normal: NormalForm,
    costs: WholeCosts,
    deadline: Deadline,
    start: Floats | None = None,
    structure: NetworkStructure | ConetworkStructure | None = None,
    last_walk: deque[LastWalk] | None = None,
) -> PathResult:
    """Solve a block whose vertices are whole.

    Parameters
    ----------
    normal : NormalForm
        The block.
    costs : WholeCosts
        Its costs.
    deadline : Deadline
    start : ndarray, shape (n,), float64, optional
        A whole feasible plan (scaled units) to walk from; without one the first vertex is an
        optimum of the costs, as far as the engine can tell them apart.
    structure : NetworkStructure or ConetworkStructure, optional
        Of a block that is a network matrix, or whose transpose is one.
    last_walk : deque of LastWalk, at most one, optional
        Without a start, the walk goes on from where this one ended, and leaves its own end.

    Returns
    -------
    PathResult

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> from pyomo_latpath.proof import whole_costs
    >>> normal = normalise(LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1,
    ...                                           col_lower=0, col_upper=1, cost=[5, 3]))
    >>> result = walk_to_optimum(normal, whole_costs(normal), Deadline(None))
    >>> result.x, result.proof.exact
    (array([0., 1.]), True)
    """
    last = None if start is not None or last_walk is None else _taken(last_walk)
    box = last.box if last is not None and last.had_limits_of(normal) else box_of(normal)
    first = None if start is None else vertex_at_least_as_good(normal, start, deadline)
    oracle, largest = _engine(normal, costs, box, first, structure, last)
    resumed = last is not None and oracle is last.oracle
    proofs: list[Proof] = []

    def optimal(vertex: Vertex) -> bool:
        guess = vertex.row_dual / float(costs.denominator)
        proofs.append(prove_optimal(normal, costs, vertex.x, guess, oracle.basis_prices))
        return proofs[-1].exact

    walk = None
    if first is None or box.total is None:
        # Without a box the walk might run away at rounded costs where it does not at true ones.
        walk = _at_true_costs(normal, costs, box, oracle, optimal, largest, resumed, deadline)
    if resumed and walk is not None and not walk.settled and walk.vertex.status in UNSETTLED:
        return walk_to_optimum(normal, costs, deadline, None, structure, last_walk)
    if walk is None or (walk.vertex.status == "optimal" and not walk.settled and box.total):
        walk = face_fixing_walk(
            normal,
            costs.numerators,
            box,
            oracle,
            optimal,
            largest=largest,
            stride=first is None,
            deadline=deadline,
        )
    vertex = walk.vertex
    if vertex.status == "pivot_limit":
        again = walk_to_optimum(normal, costs, deadline, structure=structure)
        return replace(again, note="the walk from the start plan was lost among degenerate pivots")
    if start is None and last_walk is not None and vertex.status == "optimal":
        assert not isinstance(oracle, Tableau)
        walks = 1 if last is None else last.walks + 1
        last_walk.append(LastWalk(normal, box, oracle, walks))
    unproven = Proof(False, vertex.row_dual, vertex.reduced_cost, "no optimum was reached")
    return PathResult(
        status=vertex.status,
        x=vertex.x,
        proof=proofs[-1] if proofs else unproven,
        ray=vertex.ray,
        farkas=vertex.farkas,
        walk=walk,
        box=box,
        engine=oracle.engine,
        steps=oracle.steps,
        pivots=oracle.pivots,
        exact_steps=oracle.exact_steps or oracle.steps == 0,
        note="" if walk.settled or not proofs else proofs[-1].reason,
    )


def vertex_at_least_as_good(
    normal: NormalForm, start: Floats, deadline: Deadline
) -> tuple[Basis, Floats] | None:
    """Move from a feasible point to a vertex that is no dearer.

    The smallest face around the point has a vertex that is best on it; rows and bounds that
    are tight at the point stay so.

    Returns
    -------
    basis : Basis
    x : ndarray, shape (n,), float64
        None in place of both where the face is unbounded or the time is up.
    """
    activity = normal.matrix @ start
    at_low, at_high = activity == normal.row_lower, activity == normal.row_upper
    down, up = start == normal.col_lower, start == normal.col_upper
    face = LinearProgram(
        normal.matrix,
        np.where(at_high, normal.row_upper, normal.row_lower),
        np.where(at_low, normal.row_lower, normal.row_upper),
        np.where(up, normal.col_upper, normal.col_lower),
        np.where(down, normal.col_lower, normal.col_upper),
        normal.cost,
    )
    result = face.solve(deadline=deadline)
    if result.status != "optimal":
        return None
    x = np.rint(result.x)
    held = face.basis()
    return Basis(
        resting(held.col_status, x, normal.col_lower, normal.col_upper),
        resting(held.row_status, normal.matrix @ x, normal.row_lower, normal.row_upper),
    ), x


def _engine(
    normal: NormalForm,
    costs: WholeCosts,
    box: Box,
    first: tuple[Basis, Floats] | None,
    structure: NetworkStructure | ConetworkStructure | None,
    last: LastWalk | None,
) -> tuple[Oracle, int]:
    """The engine that serves as oracle, and the largest costs it takes as they are."""
    walks = 0 if last is None else last.walks
    if isinstance(structure, ConetworkStructure):
        # It walks no vertices, so none from a start; and without a box costs must be exact.
        exact = box.total is not None or np.abs(costs.numerators).max() <= structure.largest_cost
        if (
            first is None
            and exact
            and structure.fits(normal)
            and repays(structure.transpose, walks)
        ):
            largest = structure.largest_cost
            conetwork = _resumed(last, ConetworkOracle, normal)
            return conetwork or ConetworkOracle(normal, structure), largest
    elif (
        structure is not None
        and repays(structure, walks)
        and (first is not None or not costs_too_wide(structure, costs.numerators))
    ):
        largest = largest_cost(structure)
        narrow = np.abs(costs.numerators).max(initial=0) <= largest
        network = _resumed(last, NetworkOracle, normal) if narrow else None
        return network or NetworkOracle(normal, structure, first), largest
    if first is None:
        return _resumed(last, HighsBasis, normal) or HighsBasis(normal), LARGEST_HIGHS_COST
    basis, x = first
    if Tableau.fits(normal) and box.total is not None:
        return Tableau(normal, basis, x), LARGEST_TABLEAU_COST
    return HighsBasis(normal, basis), LARGEST_HIGHS_COST


def _taken(last_walk: deque[LastWalk]) -> LastWalk | None:
    """Take the last walk out, so that no other thread goes on from it at the same time."""
    try:
        return last_walk.pop()
    except IndexError:
        return None


def _resumed(last: LastWalk | None, kind: type[Engine], normal: NormalForm) -> Engine | None:
    """The engine of the last walk at its vertex, if it is of the kind wanted."""
    if last is None or not isinstance(last.oracle, kind):
        return None
    last.oracle.resume(normal, last.had_limits_of(normal))
    return last.oracle


def _at_true_costs(
    normal: NormalForm,
    costs: WholeCosts,
    box: Box,
    oracle: Oracle,
    optimal: Callable[[Vertex], bool],
    largest: int,
    resumed: bool,
    deadline: Deadline,
) -> Walk:
    """Let the oracle go to an optimum of the true costs, as far as it can tell them apart."""
    vertex = oracle.optimise(costs.numerators, deadline)
    settled = vertex.status == "optimal" and optimal(vertex)
    if resumed:  # each step gains at least 1
        bound = None if box.total is None else box.total * largest_size(costs.numerators)
    else:
        bound = step_bound(normal, costs.numerators, box, largest)
    return Walk(vertex, settled, 1, 1, 0, bound)

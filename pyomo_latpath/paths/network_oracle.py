"""The network simplex as an oracle of the walks, on blocks that are network matrices.

Steps are counted exactly, all numbers are 64-bit integers. The engine is compiled; importing and
compiling it take time once, so small blocks are left to others until it is there.
"""

from __future__ import annotations

import sys
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ..deadline import Deadline
from ..forms.normalise import NormalForm
from ..highs import Basis
from .network_compile import compiled_before
from .network_from_tree import TreeFlow, network_from_tree
from .network_problem import FlowProblem, FlowResult, FlowStart
from .network_simplex import NetworkSimplex
from .network_standard import MOST_COST
from .vertex_oracle import Vertex

Floats = NDArray[np.float64]
Whole = NDArray[Any]
Flags = NDArray[np.bool_]

#: Rows and columns from which on the engine repays: its call, where numba is loaded; loading it,
#: where machine code lies on disk; compiling it.
REPAYS_CALL, REPAYS_LOADING, REPAYS_COMPILING = 1_000, 30_000, 100_000
#: The same, added up over walks one after another: loading takes the time of so many small walks.
LOADING_OVER_WALKS, COMPILING_OVER_WALKS = 200_000, 5_000_000
#: Costs of so many orders of magnitude, on blocks of this size, are met sooner by HiGHS's dual
#: simplex (1.9 times at 200,000 arcs; measured in the engine's benchmark).
WIDE_COSTS, WIDE_SIZE = 6, 40_000


#: Runs at what is left of costs beyond 64 bits, at most.
REFINEMENTS = 8


@dataclass(frozen=True, eq=False)
class NetworkStructure:
    """What a network certificate says of a block.

    Attributes
    ----------
    tree : ndarray, shape (m, 2), int64
        Tail and head of each row's arc; together a tree on the nodes 0..m.
    arcs : ndarray, shape (n, 2), int64
        Tail and head of each column's arc.
    """

    tree: NDArray[np.int64]
    arcs: NDArray[np.int64]


def glued(
    parts: list[tuple[Whole, Whole, Whole, Whole]], rows: int, columns: int
) -> NetworkStructure:
    """Glue the trees of several blocks together at their first nodes: a tree again.

    Parameters
    ----------
    parts : list of (rows, columns, tree, arcs)
        Places of each block's rows and columns in the whole, and its structure.
    rows, columns : int
        Of the whole.

    Examples
    --------
    >>> one = np.array([0]), np.array([0]), np.array([[1, 0]]), np.array([[0, 1]])
    >>> two = np.array([1]), np.array([1]), np.array([[0, 1]]), np.array([[0, 1]])
    >>> glued([one, two], 2, 2).tree.tolist()
    [[1, 0], [0, 2]]
    """
    tree, arcs = np.zeros((rows, 2), np.int64), np.zeros((columns, 2), np.int64)
    shift = 0
    for part_rows, part_columns, part_tree, part_arcs in parts:
        tree[part_rows] = np.where(part_tree == 0, 0, part_tree + shift)
        arcs[part_columns] = np.where(part_arcs == 0, 0, part_arcs + shift)
        shift += part_rows.size
    return NetworkStructure(tree, arcs)


def repays(structure: NetworkStructure, walks: int = 0) -> bool:
    """Whether the engine is worth its start, as things stand in this process.

    Parameters
    ----------
    structure : NetworkStructure
    walks : int
        Walks over blocks of this structure so far; more of them are then to be expected.
    """
    size = structure.tree.shape[0] + structure.arcs.shape[0]
    if size < REPAYS_CALL:
        return False
    loading = size >= REPAYS_LOADING or size * walks >= LOADING_OVER_WALKS
    if "numba" not in sys.modules and not loading:
        return False
    compiling = size >= REPAYS_COMPILING or size * walks >= COMPILING_OVER_WALKS
    return compiling or compiled_before()


def costs_too_wide(structure: NetworkStructure, costs: Whole) -> bool:
    """Whether costs spread so widely over a large block that HiGHS is the better engine.

    Examples
    --------
    >>> large = NetworkStructure(np.zeros((0, 2), np.int64), np.zeros((50_000, 2), np.int64))
    >>> wide = 10 ** (np.arange(50_000) % 10)
    >>> costs_too_wide(large, wide), costs_too_wide(large, np.full(50_000, 7))
    (True, False)
    """
    if structure.tree.shape[0] + structure.arcs.shape[0] < WIDE_SIZE:
        return False
    sizes = np.abs(costs[costs != 0]).astype(np.float64)
    if not sizes.size:
        return False
    low, high = np.quantile(np.log10(sizes), [0.1, 0.9])
    return bool(high - low >= WIDE_COSTS)


def largest_cost(structure: NetworkStructure) -> int:
    """Largest cost with which no potential can leave 64 bits.

    Examples
    --------
    >>> largest_cost(NetworkStructure(np.zeros((6, 2), np.int64), np.zeros((9, 2), np.int64)))
    144115188075855870
    """
    return MOST_COST // (structure.tree.shape[0] + 2) - 2


class NetworkOracle:
    """A network simplex on a certified block.

    Parameters
    ----------
    normal : NormalForm
        The block.
    structure : NetworkStructure
    start : (Basis, ndarray), optional
        A vertex to walk from. Without one the first call goes from a first tree of the
        engine's own to an optimal vertex of its costs.
    compiled : bool
        False runs plain Python.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> normal = normalise(LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1,
    ...                                           col_lower=0, col_upper=1, cost=0))
    >>> star = NetworkStructure(np.array([[1, 0]]), np.array([[1, 0], [1, 0]]))
    >>> oracle = NetworkOracle(normal, star, compiled=False)
    >>> oracle.optimise(np.array([5, 3]), Deadline(None)).x
    array([0., 1.])
    """

    engine = "network"
    exact_steps = True

    def __init__(
        self,
        normal: NormalForm,
        structure: NetworkStructure,
        start: tuple[Basis, Floats] | None = None,
        compiled: bool = True,
    ) -> None:
        self._structure = structure
        self._flow = self._flow_of(normal)
        self._start: FlowStart | None = None
        self._tree: FlowStart | None = None
        if start is not None:
            basis, x = start
            basic = np.concatenate([basis.col_status == 1, basis.row_status == 1])
            activity = np.rint(normal.matrix @ x).astype(np.int64)
            self._start = self._flow.start(x.astype(np.int64), activity, basic)
        self._largest = largest_cost(structure)
        self._compiled = compiled
        self._engine: NetworkSimplex | None = None
        self._before_the_walk = self._pivots_before = 0
        self._held = False

    def resume(self, normal: NormalForm, same_limits: bool) -> None:
        """Begin another walk where the last one ended.

        With other sides or bounds its tree is the first one, and the way from there to the first
        vertex is no part of the walk.

        Parameters
        ----------
        normal : NormalForm
            A block with the same matrix.
        same_limits : bool
            Whether it differs in costs only.
        """
        assert self._engine is not None
        if same_limits:
            if self._held:
                self.release()
            self._before_the_walk, self._pivots_before = self._engine.steps, self._engine.pivots
            return
        self._flow, self._start = self._flow_of(normal), None
        self._tree = self._engine.end
        self._engine, self._held = None, False
        self._before_the_walk = self._pivots_before = 0

    def _flow_of(self, normal: NormalForm) -> TreeFlow:
        return network_from_tree(
            self._structure.tree,
            self._structure.arcs,
            row_lower=normal.row_lower,
            row_upper=normal.row_upper,
            col_lower=normal.col_lower,
            col_upper=normal.col_upper,
            cost=np.zeros(self._structure.arcs.shape[0], np.int64),
        )

    @property
    def steps(self) -> int:
        """Moves to another vertex, those that found the first one left out."""
        return 0 if self._engine is None else self._engine.steps - self._before_the_walk

    @property
    def pivots(self) -> int:
        """Basis changes."""
        return 0 if self._engine is None else self._engine.pivots - self._pivots_before

    def optimise(self, cost: Whole, deadline: Deadline) -> Vertex:
        """Walk to a vertex of the current face that minimises `cost`.

        Costs beyond 64 bits are met shifted right first, then by what the prices of the basis
        leave of them, cut off where that is large: what decides between near ties is small.
        """
        every = np.zeros(self._flow.problem.cost.size, cost.dtype)
        every[: self._flow.columns] = cost
        size = max(abs(int(every.max())), abs(int(every.min()))) if every.size else 0
        shift = max(0, (size // self._largest).bit_length())
        result = self._run((every >> shift).astype(np.int64), deadline)
        for _ in range(REFINEMENTS if shift else 0):
            if result.status != "optimal":
                break
            left = every - self._priced(self._potential(every))
            if not _improvable(self._flow.problem, left, result).any():
                break
            result = self._run(
                np.clip(left, -self._largest, self._largest).astype(np.int64), deadline
            )
        if result.status != "optimal":
            return self._vertex(result, None)
        potential = self._potential(every) if shift else result.potential
        return self._vertex(result, every - self._priced(potential))

    def _run(self, costs: NDArray[np.int64], deadline: Deadline) -> FlowResult:
        """Run the engine at 64-bit costs of all arcs."""
        if self._engine is not None:
            self._engine.set_cost(costs)
            return self._engine.run(deadline)
        problem = replace(self._flow.problem, cost=costs)
        first = self._start or self._tree
        self._engine = NetworkSimplex(problem, first, compiled=self._compiled)
        result = self._engine.run(deadline)
        if self._start is None:
            self._before_the_walk = self._engine.steps
        return result

    def _vertex(self, result: FlowResult, reduced: Whole | None) -> Vertex:
        """The engine's answer in the block's terms, with reduced costs where it has any."""
        n = self._flow.columns
        if reduced is None:
            reduced = np.full(self._flow.problem.tail.size, np.nan)
        ray = self._flow.ray(result)
        return Vertex(
            status=result.status,
            x=self._flow.x(result).astype(np.float64),
            row_dual=reduced[n:].astype(np.float64),
            reduced_cost=reduced[:n].astype(np.float64),
            ray=None if ray is None else ray.astype(np.float64),
            farkas=(
                None if result.cut is None else self._flow.farkas(result.cut).astype(np.float64)
            ),
        )

    def _potential(self, every: Whole) -> Whole:
        assert self._engine is not None
        return self._engine.tree_potentials(every)

    def _priced(self, potential: Whole) -> Whole:
        """What the potentials make of each arc's cost: cost less this is the reduced cost."""
        problem = self._flow.problem
        return potential[problem.head] - potential[problem.tail]

    def hold(self, rows: Flags, columns: Flags) -> None:
        """Leave rows and columns where they are: their arcs are not priced."""
        assert self._engine is not None
        self._engine.hold(np.concatenate([columns, rows]))
        self._held = True

    def release(self) -> None:
        """Let all arcs move again."""
        assert self._engine is not None
        self._engine.release()
        self._held = False

    def basis_prices(self, costs: Whole, guess: Whole) -> Whole:
        """Exact prices of the rows for whole costs; the guess is not needed."""
        del guess
        every = np.zeros(self._flow.problem.cost.size, dtype=object)
        every[: self._flow.columns] = costs
        return (every - self._priced(self._potential(every)))[self._flow.columns :]


def _improvable(problem: FlowProblem, reduced: Whole, result: FlowResult) -> Flags:
    """Arcs that would gain by more, or by less, flow."""
    up = (reduced < 0) & (result.flow < problem.capacity)
    down = (reduced > 0) & (result.flow > problem.lower)
    return np.asarray(up | down, dtype=np.bool_)

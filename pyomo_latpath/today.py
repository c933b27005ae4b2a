"""From today's plan: solve from a start, and tell the moves that lead to the best plan.

The best plan x* is taken as near to the start x0 as its value allows (`starts.nearest_optimum`).
The form *between* them has the columns that differ, bounded by their two values, and the rows
these meet, bounded by their two activities: every plan in it is feasible. Its blocks change
independently of each other; each is split into elementary changes (`paths.moves`) or, where
columns change by fractions, is one move. As x* cannot be improved, undoing any of the moves gains
nothing: no gain is below 0.
"""

from __future__ import annotations

import time
from dataclasses import replace
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from . import routing
from .answers import exact_sum
from .certificates import BlockCertificate, Network
from .deadline import Deadline
from .forms.blocks import Block, blocks_of
from .forms.linear_form import Floats, LinearForm
from .forms.normalise import NormalForm, normalise
from .forms.plan import feasible_start, largest_violation
from .integrality.certify import certify
from .paths.moves import Change, elementary_changes
from .paths.network_oracle import NetworkStructure
from .solution import Move, Solution
from .starts import (
    Start,
    StartError,
    nearest_optimum,
    nearest_plan,
    read_costs,
    read_start,
    worsening,
)

#: Relative differences up to here are no change.
NOISE = 1e-9
#: Share of the time limit that the repair of a start may take.
REPAIR_SHARE = 0.5


def solve(
    form: LinearForm,
    *,
    start: Start | None = None,
    max_moves: int | None = None,
    repair_start: bool = False,
    time_limit: float | None = None,
    **options: Any,
) -> Solution:
    """Solve a form, from today's plan where one is given.

    Parameters
    ----------
    form : LinearForm
    start : array_like, shape (n,), or mapping of str to float, optional
        Today's plan: a whole feasible plan, in the order of the columns or by their names.
    max_moves : int, optional
        Make only so many of the moves from the start, those with the largest gains. If that
        leaves some out, the status is 'limit', `x` is the feasible whole plan reached,
        `objective` less `bound` is what the moves left out would still gain, and
        `report.further_moves` tells them; prices are those of the best plan. 0 only asks how
        far the start is from the best plan.
    repair_start : bool
        Replace a start that is not whole or not feasible by the plan nearest to it, the one
        with the least sum of absolute changes, instead of refusing it.
    time_limit : float, optional
        Seconds for everything together. A start is at worst returned as it is.
    **options
        As `routing.solve`.

    Returns
    -------
    Solution
        With `report.moves`, see `solution.Move`.

    Raises
    ------
    StartError
        For a start that is not a whole feasible plan (names the row or column).
    ValueError
        As `routing.solve`, and for `max_moves` or `repair_start` without a start.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1, 0, 0], [0, 0, 1, 1]], row_lower=1, row_upper=1,
    ...                               col_lower=0, col_upper=1, cost=[5, 3, 9, 1])
    >>> solution = solve(form, start=[1, 0, 1, 0], max_moves=1)
    >>> solution.status, solution.x, solution.objective, solution.bound
    ('limit', array([1., 0., 0., 1.]), 6.0, 4.0)
    >>> [(move.names, move.gain) for move in solution.report.moves]
    [(('x3', 'x4'), 8.0)]
    >>> [(move.names, move.gain) for move in solution.report.further_moves]
    [(('x1', 'x2'), 2.0)]
    """
    if start is None:
        if max_moves is not None or repair_start:
            raise ValueError("max_moves and repair_start need a start")
        return routing.solve(form, start=None, time_limit=time_limit, **options)
    if max_moves is not None and max_moves < 0:
        raise ValueError(f"max_moves is {max_moves}; it must be 0 or more")
    wanted = read_start(form, start)
    deadline, begun = Deadline(time_limit), time.perf_counter()
    today, repaired = _feasible(form, wanted, repair_start, deadline, options.get("threads"))
    left = deadline.left if repaired and time_limit is not None else time_limit
    spent = time.perf_counter() - begun
    solution = routing.solve(form, start=today, time_limit=left, **options)
    begun = time.perf_counter()
    if today is not None:
        solution = _with_moves(form, solution, today, max_moves, deadline)
    elif solution.x is not None:
        raise StartError("the start could not be repaired in the time given")
    if repaired and today is not None:
        solution = replace(
            solution, report=replace(solution.report, repair=_repair(form, wanted, today))
        )
    return _spent(solution, spent + time.perf_counter() - begun)


def _feasible(
    form: LinearForm, wanted: Floats, repair: bool, deadline: Deadline, threads: int | None
) -> tuple[Floats | None, bool]:
    """A whole feasible plan from a start, or None without one, and whether it was repaired."""
    try:
        return feasible_start(form, wanted), False
    except ValueError as reason:
        if not repair:
            raise StartError(str(reason)) from None
        if form.semicontinuous.any():
            raise StartError(f"{reason}; semicontinuous columns stand against a repair") from None
    left = _seconds(deadline)
    share = None if left is None else REPAIR_SHARE * left
    _, nearest = nearest_plan(form, wanted, time_limit=share, samples=0, threads=threads)
    return nearest, True


def _with_moves(
    form: LinearForm, solution: Solution, today: Floats, max_moves: int | None, deadline: Deadline
) -> Solution:
    """Tell the moves from today's plan to the best one, and stop after some of them."""
    report = solution.report
    if solution.x is None:
        if solution.status not in ("time_limit", "limit", "interrupted"):
            return solution
        report = replace(report, largest_violation=largest_violation(form, today))
        return replace(solution, x=today, objective=_objective(form, today), report=report)
    nearest = nearest_optimum(form, solution, today, _seconds(deadline))
    x = solution.x.copy() if nearest is None else nearest
    costs = read_costs(form)
    gainful: list[tuple[Fraction, Change]] = []
    for change in changes_between(form, today, x, deadline):
        gain = -worsening(costs, change.columns, change.amounts)
        if gain > 0:
            gainful.append((gain, change))
        else:
            x[change.columns] -= change.amounts
    gainful.sort(key=lambda pair: (-pair[0], int(pair[1].columns[0])))
    best = _objective(form, x)
    moves = _told(form, today, gainful, best)
    count = len(moves) if max_moves is None else min(max_moves, len(moves))
    for _, change in gainful[count:]:
        x[change.columns] -= change.amounts
    objective, status, why = best, solution.status, report.why
    if count < len(moves):
        objective = moves[count - 1].objective_after if count else _objective(form, today)
        status = "limit" if status == "optimal" else status
        why = f"{why}; stopped after {count} of {len(moves)} moves from the start"
    report = replace(
        report,
        why=why,
        moves=moves[:count],
        further_moves=moves[count:],
        largest_violation=largest_violation(form, x),
    )
    proven = solution.status == "optimal" and solution.bound == solution.objective
    bound = best if proven else solution.bound
    return replace(solution, status=status, x=x, objective=objective, bound=bound, report=report)


def _told(
    form: LinearForm, today: Floats, gainful: list[tuple[Fraction, Change]], best: float
) -> tuple[Move, ...]:
    """Write the changes as moves, made one after the other."""
    sign = 1 if form.sense == "min" else -1
    left = sum((gain for gain, _ in gainful), Fraction(0))
    now, moves = today.copy(), []
    for gain, change in gainful:
        left -= gain
        before = now[change.columns]
        now[change.columns] += change.amounts
        moves.append(
            Move(
                columns=change.columns,
                names=_names(form, change.columns),
                before=before,
                after=now[change.columns],
                gain=float(gain),
                objective_after=float(Fraction(best) + sign * left),
            )
        )
    return tuple(moves)


def changes_between(
    form: LinearForm, before: Floats, after: Floats, deadline: Deadline | None = None
) -> list[Change]:
    """Split the difference of two feasible plans into changes that go in any order.

    Parameters
    ----------
    form : LinearForm
    before, after : ndarray, shape (n,), float64
        Integer columns hold whole numbers.
    deadline : Deadline, optional
        What is not split by then stays together.

    Returns
    -------
    list of Change
        In the form's columns and units; every set of them leads to a feasible whole plan.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1, 0, 0], [0, 0, 1, 1]], row_lower=1, row_upper=1,
    ...                               col_lower=0, col_upper=1, cost=0)
    >>> changes = changes_between(form, np.array([1.0, 0, 1, 0]), np.array([0.0, 1, 0, 1]))
    >>> [change.columns.tolist() for change in changes]
    [[0, 1], [2, 3]]
    """
    deadline = deadline or Deadline(None)
    moved = np.abs(after - before) > NOISE * np.maximum(1.0, np.abs(after))
    columns = np.flatnonzero(moved)
    if not columns.size:
        return []
    normal = normalise(_between(form, before, after, columns))
    amounts = (after - before)[columns]
    if normal.conflict is not None or normal.columns.size < columns.size:
        return [Change(columns, amounts)]
    blocks = blocks_of(normal)
    changes = []
    for block, proof in zip(blocks, certify(normal, blocks, deadline, "linear"), strict=True):
        changes += _changes_of_block(normal, block, proof, amounts, deadline)
    return [Change(columns[change.columns], change.amounts) for change in changes]


def _between(
    form: LinearForm, before: Floats, after: Floats, columns: NDArray[np.int64]
) -> LinearForm:
    """The form of all plans between two, in the columns that differ and the rows these meet."""
    matrix = form.matrix[:, columns]
    rows = np.unique(matrix.indices)
    matrix = matrix[rows, :]
    first, last = before[columns], after[columns]
    sides = matrix @ first, matrix @ last
    integer = form.integer[columns]
    if not integer.any():
        # Certificates are looked for beside integer columns only; whole plans have them too.
        integer = (np.rint(first) == first) & (np.rint(last) == last)
    return LinearForm.from_arrays(
        matrix,
        row_lower=np.minimum(*sides),
        row_upper=np.maximum(*sides),
        col_lower=np.minimum(first, last),
        col_upper=np.maximum(first, last),
        cost=form.cost[columns],
        sense=form.sense,
        integer=integer,
        semicontinuous=form.semicontinuous[columns],
    )


def _changes_of_block(
    normal: NormalForm,
    block: Block,
    proof: tuple[str, BlockCertificate] | None,
    amounts: Floats,
    deadline: Deadline,
) -> list[Change]:
    """Split one block of the form between; local columns, the form's units."""
    amounts = amounts[block.columns]
    if block.trivial:
        return [Change(block.columns[k : k + 1], amounts[k : k + 1]) for k in range(amounts.size)]
    piece = normal.restrict(block.rows, block.columns)
    factor = piece.col_num / piece.col_den
    scaled = np.rint(amounts / factor)
    whole = np.abs(amounts - scaled * factor) <= NOISE * np.maximum(1.0, np.abs(amounts))
    if not (whole.all() and piece.certifiable) or piece.form.semicontinuous[piece.columns].any():
        return [Change(block.columns, amounts)]
    part = None if proof is None else proof[1].part
    structure = NetworkStructure(part.tree, part.arcs) if isinstance(part, Network) else None
    changes = elementary_changes(piece.matrix, scaled, piece.cost, structure, deadline)
    return [
        Change(block.columns[change.columns], change.amounts * factor[change.columns])
        for change in changes
    ]


def _repair(form: LinearForm, wanted: Floats, today: Floats) -> Move:
    """The change that made the start feasible; it may well cost something."""
    columns = np.flatnonzero(wanted != today)
    change = Change(columns, (today - wanted)[columns])
    return Move(
        columns=columns,
        names=_names(form, columns),
        before=wanted[columns],
        after=today[columns],
        gain=float(-worsening(read_costs(form), change.columns, change.amounts)),
        objective_after=_objective(form, today),
    )


def _names(form: LinearForm, columns: NDArray[np.int64]) -> tuple[str, ...]:
    return tuple(form.col_names[j] for j in columns.tolist())


def _seconds(deadline: Deadline) -> float | None:
    return None if deadline.left == np.inf else deadline.left


def _objective(form: LinearForm, x: Floats) -> float:
    return form.offset + exact_sum(form.cost * x)


def _spent(solution: Solution, seconds: float) -> Solution:
    stages = dict(solution.report.seconds)
    stages["solve"] += seconds
    return replace(solution, report=replace(solution.report, seconds=stages))

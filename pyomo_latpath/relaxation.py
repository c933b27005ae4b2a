"""The relaxation of a block without a certificate, from its last optimum where there is one."""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass
from typing import Any

from .deadline import Deadline
from .forms.normalise import NormalForm
from .highs import LinearProgram, LpResult

#: Pivots that a solve from the last optimum may take beyond those of the one from nothing.
FEW_PIVOTS = 100


@dataclass(frozen=True, eq=False)
class Relaxation:
    """A relaxation and its optimum.

    Attributes
    ----------
    normal : NormalForm
    program : LinearProgram
        Whoever uses it may put any costs and bounds on it.
    optimum : LpResult
    basis : object or None
        Of the optimum, where there is one.
    pivots : int
        That the last solve from nothing took.
    lost : bool
        Whether a solve from the last optimum once took more.
    """

    normal: NormalForm
    program: LinearProgram
    optimum: LpResult
    basis: Any
    pivots: int
    lost: bool


def relax(normal: NormalForm, last: deque[Relaxation], deadline: Deadline) -> Relaxation:
    """Solve the relaxation of a block.

    Should it take more pivots from the last optimum than from nothing, it is begun afresh, this
    time and from then on.

    Parameters
    ----------
    normal : NormalForm
    last : deque of Relaxation, at most one
        Of a block with the same matrix. It is taken out: when the program is not needed any more,
        the new one is to be put in.
    deadline : Deadline
    """
    try:
        before = last.pop()
    except IndexError:
        program = LinearProgram(
            normal.matrix,
            normal.row_lower,
            normal.row_upper,
            normal.col_lower,
            normal.col_upper,
            normal.cost,
        )
        return _from_nothing(normal, program, deadline, lost=False)
    program, lost = before.program, before.lost
    program.set_cost(normal.cost)
    program.set_row_bounds(normal.row_lower, normal.row_upper)
    program.set_col_bounds(normal.col_lower, normal.col_upper)
    if before.basis is not None and not lost:
        program.stand_at(before.basis)
        method = "primal" if normal.row_lower is before.normal.row_lower else "dual"
        most = before.pivots + FEW_PIVOTS
        optimum = program.solve(method=method, deadline=deadline, max_pivots=most)
        if optimum.status != "pivot_limit":
            basis = _basis(program, optimum)
            return Relaxation(normal, program, optimum, basis, before.pivots, lost)
        lost = True
    program.forget_basis()
    return _from_nothing(normal, program, deadline, lost)


def _from_nothing(
    normal: NormalForm, program: LinearProgram, deadline: Deadline, lost: bool
) -> Relaxation:
    optimum = program.solve(deadline=deadline)
    return Relaxation(normal, program, optimum, _basis(program, optimum), optimum.pivots, lost)


def _basis(program: LinearProgram, optimum: LpResult) -> Any:
    return program.standing() if optimum.status == "optimal" else None

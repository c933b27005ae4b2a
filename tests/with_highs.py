"""HiGHS itself, with nothing of the package between it and the arrays."""

from __future__ import annotations

import highspy
import scipy.sparse as sp

from pyomo_latpath.forms.linear_form import LinearForm


def program(
    matrix: sp.csc_array, cost, row_lower, row_upper, col_lower, col_upper
) -> highspy.HighsLp:
    """A linear program to minimise."""
    lp = highspy.HighsLp()
    lp.num_row_, lp.num_col_ = matrix.shape
    lp.col_cost_, lp.col_lower_, lp.col_upper_ = cost, col_lower, col_upper
    lp.row_lower_, lp.row_upper_ = row_lower, row_upper
    lp.a_matrix_.format_ = highspy.MatrixFormat.kColwise
    lp.a_matrix_.start_, lp.a_matrix_.index_ = matrix.indptr, matrix.indices
    lp.a_matrix_.value_ = matrix.data
    return lp


def program_of(form: LinearForm) -> highspy.HighsLp:
    """A whole form, with names, sense, constant and integer columns."""
    lp = program(
        form.matrix, form.cost, form.row_lower, form.row_upper, form.col_lower, form.col_upper
    )
    lp.offset_ = form.offset
    lp.sense_ = highspy.ObjSense.kMinimize if form.sense == "min" else highspy.ObjSense.kMaximize
    kinds = highspy.HighsVarType
    if form.integer.any():
        lp.integrality_ = [kinds.kInteger if whole else kinds.kContinuous for whole in form.integer]
    lp.row_names_, lp.col_names_ = list(form.row_names), list(form.col_names)
    return lp


def highs(lp: highspy.HighsLp, **options: object) -> highspy.Highs:
    """A silent HiGHS that holds the program; every option must be one that it takes."""
    solver = highspy.Highs()
    for name, value in {"output_flag": False, **options}.items():
        assert solver.setOptionValue(name, value) == highspy.HighsStatus.kOk, name
    assert solver.passModel(lp) == highspy.HighsStatus.kOk
    return solver

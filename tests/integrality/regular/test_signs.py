"""Signs that contradict each other."""

import numpy as np
import pytest
import scipy.sparse as sp
from all_minors import is_tu, minors
from decisions import small_matrix
from hypothesis import given, settings
from hypothesis import strategies as st
from regular_models import disguised, regular

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality.regular.clock import OutOfTime
from pyomo_latpath.integrality.regular.signs import odd_hole


def hole_of(matrix: np.ndarray) -> list[int] | None:
    return odd_hole(sp.csc_array(matrix), Deadline(None))


def assert_odd_hole(matrix: np.ndarray, lines: list[int]) -> None:
    """The lines are a chordless cycle, in its order, and their entries sum to 2 modulo 4."""
    m = len(matrix)
    rows, columns = lines[::2], [line - m for line in lines[1::2]]
    part = matrix[np.ix_(rows, columns)]
    ring = np.eye(len(rows), dtype=bool)
    assert ((part != 0) == (ring | np.roll(ring, 1, axis=0))).all()
    assert part.sum() % 4 == 2


@settings(max_examples=300)
@given(st.integers(0, 10**6))
def test_an_odd_hole_is_one(seed):
    matrix = small_matrix(np.random.default_rng(seed), most=7)
    lines = hole_of(matrix)
    if lines is None:
        return
    assert not is_tu(matrix)
    assert_odd_hole(matrix, lines)
    rows = [x for x in lines if x < len(matrix)]
    part = matrix[np.ix_(rows, [x - len(matrix) for x in lines if x >= len(matrix)])]
    *smaller, (value,) = minors(part)
    assert abs(value[0]) == 2
    assert all(np.abs(values).max() <= 1 for values in smaller)


@settings(max_examples=80)
@given(st.integers(0, 10**6))
def test_signs_are_right_up_to_negated_lines_or_there_is_a_hole(seed):
    rng = np.random.default_rng(seed)
    matrix = disguised(rng, regular(rng, 3, 6), pivots=2).matrix
    assert hole_of(matrix) is None
    other = matrix * np.where(rng.random(matrix.shape) < 0.05, -1, 1)
    # A TU matrix has one set of signs up to negated lines: those of all cycles are the same.
    same = hole_of_two(matrix, other)
    lines = hole_of(other)
    assert (lines is None) == same
    if lines is not None:
        assert_odd_hole(other, lines)


def hole_of_two(matrix: np.ndarray, other: np.ndarray) -> bool:
    """Whether negated rows and columns make one of the other, by walks through the nonzeros."""
    m, n = matrix.shape
    ratio = matrix * other
    sign = {}
    for start in range(m):
        if start in sign:
            continue
        sign[start], front = 1, [start]
        while front:
            line = front.pop()
            across = ratio[line] if line < m else ratio[:, line - m]
            for k in np.flatnonzero(across).tolist():
                beside = k + m if line < m else k
                if beside not in sign:
                    sign[beside] = sign[line] * int(across[k])
                    front.append(beside)
    row, column = ([sign.get(k, 1) for k in some] for some in (range(m), range(m, m + n)))
    return bool((np.outer(row, column) * np.abs(ratio) == ratio).all())


def test_out_of_time():
    with pytest.raises(OutOfTime):
        odd_hole(sp.csc_array(np.ones((3, 3))), Deadline(0))

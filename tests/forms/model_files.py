"""Small model files to write, and whether two readings of a model are the same."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from pyomo_latpath.forms.linear_form import LinearForm

# One column outside integer markers and one inside; the bounds are put in by the tests.
MPS = """NAME          CELLAR
ROWS
 N  cost
 L  shelf
COLUMNS
    milk      cost                1.   shelf               1.
    M1        'MARKER'                 'INTORG'
    wheel     cost                1.   shelf               2.
    M2        'MARKER'                 'INTEND'
RHS
    RHS       shelf              10.
BOUNDS
{bounds}ENDATA
"""

# Every kind of row, with ranges, and a constant in the objective.
ROWS = """NAME
OBJSENSE
    MAX
ROWS
 L  l
 N  gain
 G  g
 E  e
 E  f
 N  unused
COLUMNS
    x  l 1 g 2
    x  e 3 f 4
    x  gain 5 unused 6
    y  l 1
RHS
    RHS  l 10 g 20
    RHS  e 30 f 40
    RHS  gain -7
RANGES
    RNG  l -4 g 4
    RNG  e 4 f -4
ENDATA
"""

LP = """\\ turning the wheels
Maximize
 gain: 3 young + 2 old - 4
Subject To
 shelf: young + old <= 12.5
 young - old >= -3
 shelf: young + 0 old >= 1
Bounds
 old <= 9
 -inf <= mould <= 7
 4 <= salt <= 8
General
 young old
Semi-continuous
 salt
End
"""


def write(folder: Path, name: str, text: str) -> Path:
    """Write a file as it stands, without a change of line ends."""
    path = folder / name
    path.write_bytes(text.encode())
    return path


def assert_same_form(left: LinearForm, right: LinearForm) -> None:
    """Names, kinds and all numbers agree."""
    assert np.array_equal(left.matrix.toarray(), right.matrix.toarray())
    for field in ("row_lower", "row_upper", "col_lower", "col_upper", "cost"):
        assert np.array_equal(getattr(left, field), getattr(right, field)), field
    assert np.array_equal(left.integer, right.integer)
    assert np.array_equal(left.semicontinuous, right.semicontinuous)
    assert (left.offset, left.sense) == (right.offset, right.sense)
    assert list(left.row_names) == list(right.row_names)
    assert list(left.col_names) == list(right.col_names)

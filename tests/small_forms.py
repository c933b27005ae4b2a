"""Two models that many tests speak of: one with a fractional vertex, and one without."""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp

from pyomo_latpath.forms.linear_form import LinearForm

#: An odd cycle: any two of three columns share a row. Its determinant is 2.
TRIANGLE = np.array([[1, 1, 0], [0, 1, 1], [1, 0, 1]])


def triangle(**changes) -> LinearForm:
    """At most one of any two of three columns; a half of each is a vertex, and the optimum."""
    limits = {"row_lower": -np.inf, "row_upper": 1, "col_lower": 0, "col_upper": 1}
    return LinearForm.from_arrays(TRIANGLE, **{**limits, "cost": -1, **changes})


def pairs(m: int, n: int) -> sp.csc_array:
    """A column for each pair of one of m and one of n, a row for each of the m, then of the n."""
    first = sp.kron(sp.eye_array(m), np.ones((1, n)))
    return sp.vstack([first, sp.kron(np.ones((1, m)), sp.eye_array(n))], format="csc")


def assignment(cost, **changes) -> LinearForm:
    """Keepers to caves, each exactly one, at the costs of a table."""
    cost = np.asarray(cost)
    limits = {"row_lower": 1, "row_upper": 1, "col_lower": 0, "col_upper": 1}
    return LinearForm.from_arrays(pairs(*cost.shape), **{**limits, "cost": cost.ravel(), **changes})

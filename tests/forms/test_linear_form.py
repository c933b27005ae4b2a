"""The form refuses what makes no sense, and names it."""

import pickle

import numpy as np
import pytest

from pyomo_latpath.forms.linear_form import LinearForm

GOOD = {"row_lower": 0, "row_upper": 1, "col_lower": 0, "col_upper": 1, "cost": 0}


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"row_lower": [0, 0]}, "row_lower has shape"),
        ({"cost": [np.nan, 0]}, "column 'x1' has the cost nan"),
        ({"col_upper": [1, np.nan]}, "column 'x2' has the limits"),
        ({"row_lower": np.inf}, "row 'r1' has the limits"),
        ({"row_names": ["a", "b"]}, "row_names has 2 names; it needs 1"),
        ({"sense": "best"}, "sense is 'best'"),
        ({"integer": [True]}, "integer has shape"),
        ({"offset": np.inf}, "the objective's constant is inf"),
    ],
)
def test_bad_data_is_named(changes, message):
    with pytest.raises(ValueError, match=message):
        LinearForm.from_arrays([[1, 1]], **(GOOD | changes))


def test_a_bad_coefficient_is_named_by_row_and_column():
    with pytest.raises(ValueError, match="row 'r1' has the coefficient inf at column 'x2'"):
        LinearForm.from_arrays([[1, np.inf]], **GOOD)


def test_replace_changes_data_and_keeps_the_structure():
    form = LinearForm.from_arrays([[1, 1]], **GOOD)
    other = form.replace(cost=[1, 2], row_upper=5)
    assert other.matrix is form.matrix
    assert (other.cost.tolist(), other.row_upper.tolist()) == ([1, 2], [5])
    assert form.cost.tolist() == [0, 0]
    with pytest.raises(TypeError, match="cannot change matrix"):
        form.replace(matrix=None)
    with pytest.raises(ValueError, match="column 'x1' has the cost"):
        form.replace(cost=np.nan)


def test_duplicates_are_summed_and_zeros_dropped():
    import scipy.sparse as sp

    A = sp.coo_array(([1.0, 2.0, 0.0], ([0, 0, 0], [0, 0, 1])), shape=(1, 2))
    assert LinearForm.from_arrays(A, **GOOD).matrix.nnz == 1


def test_a_form_travels_to_another_process():
    form = LinearForm.from_arrays([[1, 1]], **GOOD)
    copy = pickle.loads(pickle.dumps(form))
    assert copy.shape == form.shape
    assert list(copy.col_names) == ["x1", "x2"]

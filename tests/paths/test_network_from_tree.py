"""Network certificates as circulations: same answers as the linear program, with its proofs."""

import numpy as np
import pytest
import scipy.sparse as sp
from brute_force import network_matrix

from pyomo_latpath.highs import LinearProgram
from pyomo_latpath.paths.network_from_tree import network_from_tree
from pyomo_latpath.paths.network_simplex import solve_flow


def random_network(rng, rows, columns):
    """A random directed tree and arcs."""
    label = rng.permutation(rows + 1)
    above = [label[rng.integers(0, i)] for i in range(1, rows + 1)]
    tree = np.stack([label[1:], above], axis=1)
    turned = rng.random(rows) < 0.5
    tree[turned] = tree[turned][:, ::-1]
    return tree, rng.integers(0, rows + 1, (columns, 2))


def limits(rng, count):
    """Whole and missing limits, free ones included."""
    lower = np.where(rng.random(count) < 0.25, -np.inf, rng.integers(-4, 3, count).astype(float))
    width = rng.integers(0, 6, count)
    upper = np.where(rng.random(count) < 0.25, np.inf, np.maximum(lower, -3) + width)
    return lower, upper


def random_case(seed):
    """A flow, its matrix and its limits."""
    rng = np.random.default_rng(seed)
    rows, columns = int(rng.integers(1, 7)), int(rng.integers(1, 9))
    tree, arcs = random_network(rng, rows, columns)
    data = dict(
        zip(("row_lower", "row_upper"), limits(rng, rows), strict=True),
        **dict(zip(("col_lower", "col_upper"), limits(rng, columns), strict=True)),
        cost=rng.integers(-3, 9, columns),
    )
    return network_from_tree(tree, arcs, **data), network_matrix(tree, arcs), data


@pytest.mark.parametrize("share", range(8))
def test_solutions_prices_and_proofs_are_those_of_the_program(share):
    seen = set()
    for seed in range(share, 800, 8):
        flow, matrix, data = random_case(seed)
        result = solve_flow(flow.problem, compiled=False)
        seen.add(result.status)
        if result.status == "optimal":
            assert_optimal(flow, matrix, data, result)
            assert flow.problem.value(result.flow) == pytest.approx(least(matrix, data))
        elif result.status == "infeasible":
            assert_no_solution(matrix, data, flow.farkas(result.cut))
        else:
            assert_ray(matrix, data, flow.ray(result))
    assert seen == {"optimal", "infeasible", "unbounded"}


def least(matrix, data):
    """Optimum by HiGHS."""
    program = LinearProgram(
        sp.csc_array(matrix.astype(float)), **data | {"cost": data["cost"] * 1.0}
    )
    result = program.solve()
    assert result.status == "optimal"
    return result.objective


def assert_optimal(flow, matrix, data, result):
    """Feasible, complementary, equal prices, and a basis of determinant +-1."""
    x = flow.x(result)
    activity = matrix @ x
    np.testing.assert_array_equal(activity, result.flow[flow.columns :])
    dual, reduced = flow.prices(result)
    np.testing.assert_array_equal(reduced, data["cost"] - dual @ matrix)
    for value, price, kind in ((x, reduced, "col"), (activity, dual, "row")):
        low, high = data[f"{kind}_lower"], data[f"{kind}_upper"]
        assert ((value >= low) & (value <= high)).all()
        assert ((price <= 0) | (value == low)).all()
        assert ((price >= 0) | (value == high)).all()
    rows, columns = flow.basic(result)
    basis = np.hstack([matrix[:, columns], -np.eye(len(matrix))[:, rows]])
    assert abs(round(np.linalg.det(basis))) == 1
    again = solve_flow(
        flow.problem, flow.start(x, activity, np.append(columns, rows)), compiled=False
    )
    assert again.steps == 0


def assert_no_solution(matrix, data, dual):
    """The multipliers' least value over the bounds is above their most over the sides."""
    column = dual @ matrix
    used, rows = np.flatnonzero(column), np.flatnonzero(dual)
    lowest = np.where(column > 0, data["col_lower"], data["col_upper"])[used] @ column[used]
    highest = np.where(dual > 0, data["row_upper"], data["row_lower"])[rows] @ dual[rows]
    assert lowest > highest


def assert_ray(matrix, data, ray):
    """A direction without end that pays."""
    assert data["cost"] @ ray < 0
    for direction, kind in ((ray, "col"), (matrix @ ray, "row")):
        assert ((direction <= 0) | (data[f"{kind}_upper"] == np.inf)).all()
        assert ((direction >= 0) | (data[f"{kind}_lower"] == -np.inf)).all()


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"row_upper": np.array([1.5])}, "row 0 has the limit 1.5, not a whole number"),
        ({"col_lower": np.array([np.nan])}, "column 0 has the limit nan, not a whole number"),
        ({"col_lower": np.array([3.0])}, "lower limit 3 above its capacity 2"),
    ],
)
def test_bad_limits_are_told(change, message):
    data = {
        "row_lower": np.zeros(1),
        "row_upper": np.ones(1),
        "col_lower": np.zeros(1),
        "col_upper": np.full(1, 2.0),
        "cost": np.ones(1, int),
    } | change
    with pytest.raises(ValueError, match=message):
        network_from_tree(np.array([[0, 1]]), np.array([[0, 1]]), **data)

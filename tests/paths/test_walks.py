"""The walks: exact steps within proven bounds, true optima for costs of any size."""

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from small_forms import assignment, triangle

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.highs import LinearProgram
from pyomo_latpath.paths.box import box_of
from pyomo_latpath.paths.cost_scaling import digits_of, phase_bound, phase_costs, scaling_walk
from pyomo_latpath.paths.face_fixing import face_fixing_walk, rounding_size, step_bound
from pyomo_latpath.paths.path_solver import vertex_at_least_as_good, walk_to_optimum
from pyomo_latpath.paths.vertex_oracle import HighsBasis, Tableau
from pyomo_latpath.proof import WholeCosts, prove_optimal, whole_costs

FOREVER = Deadline(None)


def network_form(rng, m, n, sides):
    """A random flow: every column leaves one row and enters another, or is a slack."""
    A = np.zeros((m, n))
    for j in range(n):
        tail, head = rng.choice(m + 1, 2, replace=False)
        if tail < m:
            A[tail, j] = 1
        if head < m:
            A[head, j] = -1
    x = rng.integers(0, 3, n)
    upper = rng.integers(1, 4, n)
    x = np.minimum(x, upper)
    activity = A @ x
    slack = rng.integers(0, 3, m) if sides == "ranges" else np.zeros(m, int)
    form = LinearForm.from_arrays(
        A,
        row_lower=activity - slack,
        row_upper=activity + slack,
        col_lower=0,
        col_upper=upper,
        cost=0,
    )
    return form, x.astype(float)


def brute_force(normal, costs):
    """Least cost over all whole plans of a block."""
    ranges = [
        range(int(low), int(up) + 1)
        for low, up in zip(normal.col_lower, normal.col_upper, strict=True)
    ]
    A = normal.matrix.toarray()
    best = None
    for plan in itertools.product(*ranges):
        activity = A @ np.array(plan)
        if ((activity >= normal.row_lower) & (activity <= normal.row_upper)).all():
            value = sum(int(c) * v for c, v in zip(costs.tolist(), plan, strict=True))
            best = value if best is None else min(best, value)
    return best


def at_start(form, x):
    normal = normalise(form)
    kept = x[normal.columns]
    found = vertex_at_least_as_good(normal, kept, FOREVER)
    assert found is not None
    return normal, kept, found


costs_of = st.sampled_from(["small", "huge", "spread", "tied"])


def draw_costs(rng, kind, n):
    if kind == "small":
        return rng.integers(-9, 10, n)
    if kind == "tied":
        return rng.integers(-1, 2, n)
    if kind == "huge":
        return np.array([int(v) << 60 for v in rng.integers(-(2**20), 2**20, n)], dtype=object)
    return np.array([int(v) << int(s) for v, s in rng.integers(-99, 99, (n, 2)) % [99, 80]], object)


@settings(max_examples=150, deadline=None)
@given(st.integers(0, 2**32 - 1), costs_of, st.sampled_from(["equations", "ranges"]))
def test_walks_end_at_true_optima_within_their_step_bounds(seed, kind, sides):
    rng = np.random.default_rng(seed)
    form, x = network_form(rng, int(rng.integers(1, 4)), int(rng.integers(2, 6)), sides)
    normal, _, (basis, vertex) = at_start(form, x)
    if not normal.columns.size or not normal.rows.size:
        return
    costs = draw_costs(rng, kind, normal.columns.size)
    box = box_of(normal)
    tableau = Tableau(normal, basis, vertex)
    # Rounding is forced by a limit far below the costs' size.
    largest = rounding_size(normal, box)

    def optimal(v):
        return prove_optimal(
            normal, WholeCosts(costs, 1), v.x, v.row_dual, tableau.basis_prices
        ).exact

    walk = face_fixing_walk(
        normal, costs, box, tableau, optimal, largest=largest, stride=False, deadline=FOREVER
    )
    assert walk.settled
    found = sum(int(c) * int(v) for c, v in zip(costs.tolist(), walk.vertex.x, strict=True))
    assert found == brute_force(normal, costs)
    assert tableau.steps <= tableau.pivots
    assert tableau.steps <= walk.step_bound == step_bound(normal, costs, box, largest)
    if walk.rounds > 1:
        assert walk.rounds <= box.dimension + 2


@settings(max_examples=100, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_each_phase_of_a_scaling_walk_takes_at_most_the_box(seed):
    rng = np.random.default_rng(seed)
    form, x = network_form(rng, 3, 8, "ranges")
    normal, _, (basis, vertex) = at_start(form, x)
    if not normal.columns.size or not normal.rows.size:
        return
    costs = rng.integers(-1000, 1000, normal.columns.size)
    box = box_of(normal)
    tableau = Tableau(normal, basis, vertex)
    for phase in phase_costs(costs):
        before = tableau.steps
        tableau.optimise(phase, FOREVER)
        assert tableau.steps - before <= box.total
    whole = Tableau(normal, basis, vertex)
    end, phases = scaling_walk(whole, costs, FOREVER)
    assert phases == digits_of(costs) + 1
    assert whole.steps <= phase_bound(box.total, int(np.abs(costs).max()))
    assert costs @ end.x == costs @ tableau.value[: costs.size]


@settings(max_examples=100, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_a_basic_walk_with_whole_costs_gains_at_least_one_a_step(seed):
    rng = np.random.default_rng(seed)
    form, x = network_form(rng, 3, 8, "ranges")
    normal, _, (basis, vertex) = at_start(form, x)
    if not normal.columns.size or not normal.rows.size:
        return
    costs = rng.integers(-20, 20, normal.columns.size)
    tableau = Tableau(normal, basis, vertex)
    end = tableau.optimise(costs, FOREVER)
    assert tableau.steps <= costs @ (vertex - end.x)


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_the_tableau_and_highs_agree(seed):
    rng = np.random.default_rng(seed)
    form, x = network_form(rng, 4, 9, "ranges")
    normal, _, (basis, vertex) = at_start(form, x)
    if not normal.columns.size or not normal.rows.size:
        return
    costs = rng.integers(-50, 50, normal.columns.size)
    ends = [
        oracle.optimise(costs, FOREVER)
        for oracle in (
            Tableau(normal, basis, vertex),
            HighsBasis(normal, basis),
            HighsBasis(normal),
        )
    ]
    assert len({int(costs @ end.x) for end in ends}) == 1
    for end in ends:
        assert prove_optimal(normal, WholeCosts(costs, 1), end.x, end.row_dual).exact


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_a_start_becomes_a_vertex_that_is_no_dearer(seed):
    rng = np.random.default_rng(seed)
    form, x = network_form(rng, 3, 7, "ranges")
    form = form.replace(cost=rng.integers(-9, 9, 7))
    normal, kept, (basis, vertex) = at_start(form, x)
    assert normal.cost @ vertex <= normal.cost @ kept
    A, n = normal.matrix.toarray(), vertex.size
    tight = [
        A[i] for i, v in enumerate(A @ vertex) if v in (normal.row_lower[i], normal.row_upper[i])
    ]
    tight += [
        np.eye(n)[j] for j in range(n) if vertex[j] in (normal.col_lower[j], normal.col_upper[j])
    ]
    assert np.linalg.matrix_rank(np.array(tight)) == n if n else True
    assert (basis.col_status == 1).sum() + (basis.row_status == 1).sum() == normal.rows.size


@pytest.mark.parametrize(
    "cost",
    [
        lambda rng, n: rng.integers(1, 1000, n).astype(float),
        lambda rng, n: np.round(100 * rng.random(n), 2),
        lambda rng, n: rng.random(n),
        lambda rng, n: rng.integers(1, 10**12, n).astype(float),
        lambda rng, n: rng.random(n) * 10.0 ** rng.integers(-6, 6, n),
        lambda rng, n: 1 + 1e-10 * rng.integers(0, 1000, n),
    ],
    ids=["whole", "decimal", "float", "large", "many sizes", "tenth digit"],
)
def test_optima_are_exact_whatever_the_costs_are_like(cost):
    normal = normalise(assignment(cost(np.random.default_rng(3), 625).reshape(25, 25)))
    result = walk_to_optimum(normal, whole_costs(normal), FOREVER)
    assert result.status == "optimal"
    assert result.proof.exact, result.proof.reason
    assert np.array_equal(normal.matrix @ result.x, np.ones(50))


def test_large_blocks_walk_from_a_start_too():
    rng = np.random.default_rng(4)
    normal = normalise(assignment(rng.integers(1, 100, (60, 60)).astype(float)))
    start = np.eye(60).ravel()
    assert not Tableau.fits(normal)
    result = walk_to_optimum(normal, whole_costs(normal), FOREVER, start)
    assert result.proof.exact
    assert 0 < result.steps <= result.walk.step_bound
    assert not result.exact_steps


def test_without_a_box_the_walk_goes_at_true_costs_and_has_no_bound():
    form = LinearForm.from_arrays(
        [[1, -1]], row_lower=0, row_upper=0, col_lower=0, col_upper=np.inf, cost=[3, -2]
    )
    normal = normalise(form)
    assert box_of(normal).total is None
    result = walk_to_optimum(normal, whole_costs(normal), FOREVER)
    assert (result.status, result.x.tolist(), result.walk.step_bound) == ("optimal", [0, 0], None)
    normal = normalise(form.replace(cost=[1, -2]))
    assert walk_to_optimum(normal, whole_costs(normal), FOREVER).status == "unbounded"


def test_the_time_limit_ends_a_walk():
    normal = normalise(assignment(np.random.default_rng(0).random((30, 30))))
    assert walk_to_optimum(normal, whole_costs(normal), Deadline(0)).status == "time_limit"


def test_a_block_that_is_not_unimodular_gets_no_tableau():
    normal = normalise(triangle())
    lp = LinearProgram(
        normal.matrix,
        normal.row_lower,
        normal.row_upper,
        normal.col_lower,
        normal.col_upper,
        normal.cost,
    )
    x = lp.solve().x
    with pytest.raises(ValueError, match="not whole"):
        Tableau(normal, lp.basis(), x)


def test_phases_halve_the_costs_and_end_with_them():
    costs = np.array([13, -7, 0, 1])
    phases = phase_costs(costs)
    assert np.abs(phases[0]).max() <= 1
    for coarse, fine in itertools.pairwise(phases):
        assert set((fine - 2 * coarse).tolist()) <= {0, 1}
    assert phases[-1].tolist() == costs.tolist()
    assert [digits_of(np.array([c])) for c in (0, 1, 2, 3, 4, 5)] == [0, 0, 1, 2, 2, 3]

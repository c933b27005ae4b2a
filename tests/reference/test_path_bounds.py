"""Known facts about short paths on polytopes with whole vertices, on small cases.

- A 0/1 polytope of dimension n has diameter at most n: Naddef (1989), The Hirsch conjecture is
  true for (0,1)-polytopes, Mathematical Programming 45.
- A polytope with whole vertices in [0, k]^n has diameter at most k n: Kleinschmidt and Onn (1992),
  On the diameter of convex polytopes, Discrete Mathematics 102.
- A simplex walk with whole costs takes at most c x0 - c x* steps: common practice, since each step
  to another vertex gains at least 1.
"""

import itertools

import networkx as nx
import numpy as np
import pytest

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.paths.path_solver import vertex_at_least_as_good
from pyomo_latpath.paths.vertex_oracle import Tableau

FOREVER = Deadline(None)


def random_polytope(rng, k):
    """A random flow polytope in a box with sides k, and a whole point in it."""
    m, n = int(rng.integers(1, 4)), int(rng.integers(2, 6))
    A = np.zeros((m, n))
    for j in range(n):
        tail, head = rng.choice(m + 1, 2, replace=False)
        for end, sign in ((tail, 1), (head, -1)):
            if end < m:
                A[end, j] = sign
    x = rng.integers(0, k + 1, n)
    slack = rng.integers(0, 2, m)
    form = LinearForm.from_arrays(
        A,
        row_lower=A @ x - slack,
        row_upper=A @ x + slack,
        col_lower=0,
        col_upper=k,
        cost=rng.integers(-9, 10, n),
    )
    return form, x.astype(float)


def constraints(form):
    """All inequalities g x <= h, equations twice."""
    A, n = form.matrix.toarray(), form.shape[1]
    G = np.vstack([A, -A, np.eye(n), -np.eye(n)])
    h = np.concatenate([form.row_upper, -form.row_lower, form.col_upper, -form.col_lower])
    return G, h


def vertices_and_edges(form):
    """The graph of a polytope: n tight constraints make a vertex, n - 1 in common an edge."""
    G, h = constraints(form)
    n = form.shape[1]
    graph = nx.Graph()
    k = int(form.col_upper.max())
    for point in itertools.product(range(k + 1), repeat=n):
        slack = h - G @ np.array(point)
        if (slack >= 0).all():
            tight = slack == 0
            if np.linalg.matrix_rank(G[tight]) == n:
                graph.add_node(point, tight=tight)
    for (p, one), (q, two) in itertools.combinations(graph.nodes(data="tight"), 2):
        if np.linalg.matrix_rank(G[one & two]) == n - 1:
            graph.add_edge(p, q)
    return graph


@pytest.mark.parametrize("k", [1, 2])
def test_diameters_are_at_most_k_times_n(k):
    rng = np.random.default_rng(k)
    longest = 0.0
    for _ in range(40):
        form, _ = random_polytope(rng, k)
        graph = vertices_and_edges(form)
        if len(graph) < 2:
            continue
        diameter = nx.diameter(graph)
        assert diameter <= k * form.shape[1]
        longest = max(longest, diameter / form.shape[1])
    assert longest > 0.3  # the bound was put to the test


@pytest.mark.parametrize("k", [1, 3])
def test_walks_go_along_edges_and_gain_at_least_one_each(k):
    rng = np.random.default_rng(10 + k)
    walked = 0
    for _ in range(40):
        form, x = random_polytope(rng, k)
        normal = normalise(form)
        if normal.columns.size < form.shape[1] or normal.rows.size < form.shape[0]:
            continue
        found = vertex_at_least_as_good(normal, x, FOREVER)
        assert found is not None
        graph = vertices_and_edges(form)
        tableau = Tableau(normal, *found)
        here = tuple(found[1].astype(int))
        assert here in graph
        costs = form.cost.astype(int)
        begin = int(costs @ np.array(here))
        while True:
            chosen = tableau._entering(tableau.reduced_costs(costs).astype(np.int64), bland=True)
            if chosen[0] < 0:
                break
            length = tableau._pivot(*chosen)
            there = tuple(tableau.value[: form.shape[1]].astype(int))
            if length:
                assert graph.has_edge(here, there)
                assert costs @ np.array(there) <= costs @ np.array(here) - 1
                tableau.steps += 1
                here = there
        best = min(int(costs @ np.array(point)) for point in graph)
        assert costs @ np.array(here) == best
        assert tableau.steps <= begin - best
        walked += tableau.steps
    assert walked > 10

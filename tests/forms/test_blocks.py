"""Blocks are connected components, and cover everything once."""

import networkx as nx
import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise


@settings(max_examples=100, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_blocks_are_the_connected_components(seed):
    rng = np.random.default_rng(seed)
    m, n = rng.integers(1, 8, 2)
    A = rng.integers(1, 4, (m, n)) * (rng.random((m, n)) < 0.2)
    normal = normalise(
        LinearForm.from_arrays(A, row_lower=0, row_upper=50, col_lower=0, col_upper=3, cost=0)
    )
    graph = nx.Graph()
    graph.add_nodes_from(("column", j) for j in range(normal.columns.size))
    graph.add_edges_from(
        (("row", int(i)), ("column", int(j))) for i, j in zip(*normal.matrix.nonzero(), strict=True)
    )
    expected = set()
    lone = set()
    for component in nx.connected_components(graph):
        columns = [j for kind, j in component if kind == "column"]
        (lone.update(component) if len(columns) == 1 else expected.add(frozenset(component)))
    if lone:
        expected.add(frozenset(lone))
    found = {
        frozenset([("row", int(i)) for i in b.rows] + [("column", int(j)) for j in b.columns])
        for b in blocks_of(normal)
    }
    assert found == expected
    assert [b.trivial for b in blocks_of(normal)].count(True) == bool(lone)

"""Random totally unimodular matrices, put together as Seymour (1980) says all of them are.

Network matrices, their transposes and R10 are joined by sums of order 1, 2 and 3. For a sum of
order 3, a piece has ports: lines z1, z2 and z3 with z3 = z1 + sign z2, where z3 is a column, and a
row stands for its unit column. In the graph of a network matrix these are triangles; nodes where
three edges meet are ports of its transpose, and turn into ports when the whole is transposed.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import networkx as nx
import numpy as np
from brute_force import network_matrix
from known_matrices import R10

Line = tuple[str, int]
OTHER = {"row": "column", "column": "row"}


@dataclass(frozen=True)
class Port:
    """Three lines; `dual` if they are a port of the transpose."""

    lines: tuple[Line, Line, Line]
    sign: int = 1
    dual: bool = False

    @property
    def shape(self) -> tuple[str, str]:
        """What z1 and z2 are."""
        return self.lines[0][0], self.lines[1][0]


@dataclass(frozen=True)
class Piece:
    """A matrix, the leaf that each of its lines is from, and the ports that are left.

    Leaf k was joined to a line or port of leaf `hosts[k - 1]` by a sum of order `orders[k - 1]`.
    """

    matrix: np.ndarray
    rows: np.ndarray
    columns: np.ndarray
    ports: tuple[Port, ...] = ()
    orders: tuple[int, ...] = ()
    hosts: tuple[int, ...] = ()

    @property
    def T(self) -> Piece:
        """The transpose."""
        ports = [
            Port(tuple((OTHER[axis], k) for axis, k in port.lines), port.sign, not port.dual)
            for port in self.ports
        ]
        lines = {"rows": self.columns, "columns": self.rows, "ports": tuple(ports)}
        return replace(self, matrix=self.matrix.T, **lines)

    def kept(self, gone: list[Line]) -> tuple[np.ndarray, np.ndarray]:
        """Masks of the rows and columns but some."""
        rows, columns = np.ones(len(self.rows), bool), np.ones(len(self.columns), bool)
        rows[[k for axis, k in gone if axis == "row"]] = False
        columns[[k for axis, k in gone if axis == "column"]] = False
        return rows, columns

    def without(self, gone: list[Line]) -> Piece:
        """The rest, and the ports that are not touched."""
        rows, columns = self.kept(gone)
        place = {"row": np.cumsum(rows) - 1, "column": np.cumsum(columns) - 1}
        ports = [
            replace(port, lines=tuple((axis, int(place[axis][k])) for axis, k in port.lines))
            for port in self.ports
            if not set(port.lines) & set(gone)
        ]
        lines = {"rows": self.rows[rows], "columns": self.columns[columns], "ports": tuple(ports)}
        return replace(self, matrix=self.matrix[rows][:, columns], **lines)

    def line(self, line: Line) -> np.ndarray:
        """Entries of a row or column."""
        axis, k = line
        return self.matrix[k] if axis == "row" else self.matrix[:, k]


def joined(
    first: Piece,
    second: Piece,
    links: list[tuple[Line, Line, int]],
    gone: tuple[Line, ...] = (),
    gone_too: tuple[Line, ...] = (),
) -> Piece:
    """The sum of two pieces: each link joins a column of one and a row of the other, by a sign.

    The linked lines disappear, and those named to be gone.
    """
    above, below = [*gone, *(a for a, _, _ in links)], [*gone_too, *(b for _, b, _ in links)]
    (rows, columns), (rows_too, columns_too) = first.kept(above), second.kept(below)
    upper = np.zeros((len(rows), len(columns_too)), np.int64)
    lower = np.zeros((len(rows_too), len(columns)), np.int64)
    for a, b, sign in links:
        if a[0] == "column":
            upper += sign * np.outer(first.line(a), second.line(b))
        else:
            lower += sign * np.outer(second.line(b), first.line(a))
    rest, rest_too = first.without(above), second.without(below)
    place = {"row": len(rest.rows), "column": len(rest.columns)}
    moved = [
        replace(port, lines=tuple((axis, k + place[axis]) for axis, k in port.lines))
        for port in rest_too.ports
    ]
    upper, lower = upper[rows][:, columns_too], lower[rows_too][:, columns]
    hosts = [first.rows[k] if axis == "row" else first.columns[k] for (axis, k), _, _ in links[:1]]
    return Piece(
        np.block([[rest.matrix, upper], [lower, rest_too.matrix]]),
        np.concatenate([rest.rows, rest_too.rows]),
        np.concatenate([rest.columns, rest_too.columns]),
        (*rest.ports, *moved),
        (*first.orders, *second.orders, len(links) + 1),
        (*first.hosts, *second.hosts, int(hosts[0]) if hosts else 0),
    )


def joined_at_ports(first: Piece, second: Piece, p: Port, q: Port) -> Piece:
    """The sum of order 3 at two ports, of which one has a row where the other has a column."""
    p, q = settled(first, p), settled(second, q)
    ends = q.lines[:2] if p.shape[0] != q.shape[0] else q.lines[1::-1]
    links = [(p.lines[0], ends[0], 1), (p.lines[1], ends[1], p.sign * q.sign)]
    return joined(first, second, links, p.lines[2:], q.lines[2:])


def settled(piece: Piece, port: Port) -> Port:
    """The same port; if z2 alone is a row, the entry of z1 there is zero."""
    z1, z2, z3 = port.lines
    if port.shape == ("column", "row") and piece.matrix[z2[1], z1[1]]:
        return Port((z3, z2, z1), -port.sign)
    return port


@dataclass
class Graph:
    """A tree and further arcs, with the lines of ports among them."""

    rng: np.random.Generator
    tree: list[tuple[int, int]] = field(default_factory=list)
    arcs: list[tuple[int, int]] = field(default_factory=list)
    used: set[int] = field(default_factory=set)
    ports: list[Port] = field(default_factory=list)

    def add_tree_arc(self, tail: int, head: int) -> Line:
        """A row."""
        self.tree.append((tail, head))
        return "row", len(self.tree) - 1

    def add_arc(self, tail: int, head: int) -> Line:
        """A column."""
        self.arcs.append((int(tail), int(head)))
        return "column", len(self.arcs) - 1

    def unused(self) -> int:
        """A tree arc that is in no port."""
        free = [row for row in range(len(self.tree)) if row not in self.used]
        return int(self.rng.choice(free))

    def triangle(self, rows: int, nodes: int) -> None:
        """A port with some tree arcs among its three edges."""
        if rows == 0:
            u, v, w = self.rng.choice(nodes, 3, replace=False)
            lines = self.add_arc(u, v), self.add_arc(v, w), self.add_arc(u, w)
            self.ports.append(Port(lines))
            return
        row = self.unused()
        u, v = self.tree[row]
        if rows == 1:
            w = self.rng.choice([node for node in range(nodes) if node not in (u, v)])
            lines = self.add_arc(w, u), ("row", row), self.add_arc(w, v)
            self.ports.append(Port(lines))
        else:
            y, z = v, len(self.tree) + 1
            second = self.add_tree_arc(*((y, z) if self.rng.random() < 0.5 else (z, y)))
            sign = 1 if self.tree[-1] == (y, z) else -1
            lines = ("row", row), second, self.add_arc(u, z)
            self.ports.append(Port(lines, sign))
        self.used |= {k for axis, k in lines if axis == "row"}

    def star(self, rows: int, nodes: int) -> None:
        """A new node with three edges, some of them in the tree: a port of the transpose."""
        y, others = len(self.tree) + 1, self.rng.choice(nodes, 2, replace=False)
        if rows == 1:
            row = self.add_tree_arc(int(self.rng.choice(nodes)), y)
            lines = self.add_arc(others[0], y), self.add_arc(others[1], y), row
        else:
            row = self.unused()
            p, q = self.tree[row]
            self.tree[row] = (p, y)
            out = self.add_tree_arc(y, q)
            if rows == 2:
                lines = ("row", row), self.add_arc(y, others[0]), out
            else:
                z = y + 1
                lines = ("row", row), self.add_tree_arc(z, y), out
                for node in others:
                    self.add_arc(z, node)
        self.used |= {k for axis, k in lines if axis == "row"}
        self.ports.append(Port(lines, dual=True))


def leaf(rng: np.random.Generator, kind: str, name: int, size: int, columns: int | None) -> Piece:
    """A piece of a kind, 'network', 'conetwork' or 'R10', of at least `size` rows and columns.

    R10 has five, the others a few more. One port has as many columns among z1 and z2 as `columns`
    says, if it does.
    """
    if kind == "R10":
        matrix = R10[rng.integers(2)]
        return Piece(matrix, np.full(5, name), np.full(5, name))
    graph = Graph(rng)
    nodes = max(size, 5)
    for node in range(1, nodes):
        ends = (node, int(rng.integers(max(0, node - 4), node)))
        graph.add_tree_arc(*(ends if rng.random() < 0.5 else ends[::-1]))
    for _ in range(2 * nodes):  # enough not to be planar, as a rule
        graph.add_arc(*rng.choice(nodes, 2, replace=False))
    further = rng.integers(0, 3, 2).tolist()
    if kind == "network":
        for count in ([] if columns is None else [2 - columns]) + further[:1]:
            graph.triangle(count, nodes)
        graph.star(further[1] + 1, nodes)
    else:
        graph.triangle(further[0], nodes)
        for count in ([] if columns is None else [columns + 1]) + further[1:]:
            graph.star(count, nodes)
    matrix = network_matrix(graph.tree, graph.arcs)
    m, n = matrix.shape
    piece = Piece(matrix, np.full(m, name), np.full(n, name), tuple(graph.ports))
    return piece if kind == "network" else piece.T


def regular(
    rng: np.random.Generator,
    leaves: int = 4,
    size: int = 8,
    *,
    orders: tuple[int, ...] = (2, 3, 3, 3),
    kinds: tuple[str, ...] = ("network", "network", "conetwork", "conetwork", "R10"),
) -> Piece:
    """A random sum of leaves of about `size` rows and columns each; not disguised.

    Of the given orders one is drawn for each joint; it is 2 where 3 was drawn and there is no port.
    """
    whole = leaf(rng, str(rng.choice(kinds)), 0, size, None)
    for name in range(1, leaves):
        order, kind = int(rng.choice(orders)), str(rng.choice(kinds))
        if rng.random() < 0.3:
            whole = whole.T
        ports = [port for port in whole.ports if not port.dual]
        if order == 3 and (not ports or kind == "R10"):
            order = 2
        if order == 1:
            whole = joined(whole, leaf(rng, kind, name, size, None), [])
        elif order == 2:
            whole = two_sum(rng, whole, leaf(rng, kind, name, size, None))
        else:
            port = ports[rng.integers(len(ports))]
            other = leaf(rng, kind, name, size, port.shape.count("row"))
            matching = next(q for q in other.ports if not q.dual and facing(port, q))
            whole = joined_at_ports(whole, other, port, matching)
    return whole


def facing(p: Port, q: Port) -> bool:
    """Whether one has as many columns as the other has rows."""
    return p.shape.count("row") == q.shape.count("column")


def two_sum(rng: np.random.Generator, first: Piece, second: Piece) -> Piece:
    """Join a random column of one with a random row of the other, or a row with a column."""
    axis = str(rng.choice(["row", "column"]))
    ends = []
    for piece, end in ((first, axis), (second, OTHER[axis])):
        table = piece.matrix if end == "row" else piece.matrix.T
        busy = {k for port in piece.ports for a, k in port.lines if a == end}
        weights = np.abs(table).sum(axis=1)
        good = [k for k in range(len(table)) if weights[k] > 1 and k not in busy]
        ends.append((end, int(rng.choice(good or np.flatnonzero(weights)))))
    return joined(first, second, [(*ends, int(rng.choice([1, -1])))])


def graph_matrix(graph: nx.Graph) -> np.ndarray:
    """The network matrix of a graph and one of its spanning trees."""
    tree = list(nx.minimum_spanning_edges(nx.Graph(graph), data=False))
    return network_matrix(tree, [edge for edge in graph.edges if edge not in tree])


def plain(matrix: np.ndarray) -> Piece:
    """A matrix as a piece of its own."""
    return Piece(matrix, *(np.zeros(size, np.int64) for size in matrix.shape))


def pivoted(piece: Piece, i: int, j: int) -> Piece:
    """Exchange a row and a column; ports are lost."""
    matrix, entry = piece.matrix, piece.matrix[i, j]
    result = matrix - entry * np.outer(matrix[:, j], matrix[i])
    result[i], result[:, j], result[i, j] = entry * matrix[i], -entry * matrix[:, j], entry
    rows, columns = piece.rows.copy(), piece.columns.copy()
    rows[i], columns[j] = piece.columns[j], piece.rows[i]
    return replace(piece, matrix=result, rows=rows, columns=columns, ports=())


def disguised(rng: np.random.Generator, piece: Piece, pivots: int = 0) -> Piece:
    """Pivots at random, lines in any order, and any signs."""
    for _ in range(pivots):
        places = np.argwhere(piece.matrix)
        piece = pivoted(piece, *places[rng.integers(len(places))])
    m, n = piece.matrix.shape
    rows, columns = rng.permutation(m), rng.permutation(n)
    signs = rng.choice([1, -1], m)[:, None] * rng.choice([1, -1], n)
    matrix = signs * piece.matrix[rows][:, columns]
    lines = {"rows": piece.rows[rows], "columns": piece.columns[columns], "ports": ()}
    return replace(piece, matrix=matrix, **lines)

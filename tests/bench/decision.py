"""The complete decision of total unimodularity: seconds by size, and their growth.

Run: python tests/bench/decision.py [PLOT.png]
"""

from __future__ import annotations

import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import scipy.sparse as sp
from network_recognition import bushy, stretched
from timing import medians

sys.path.insert(0, str(Path(__file__).parent.parent))
from regular_models import disguised, regular

from pyomo_latpath.certificates import check_certificate
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality.regular.decision import totally_unimodular
from pyomo_latpath.integrality.regular.minors import neither
from pyomo_latpath.integrality.regular.signs import odd_hole

Generator = np.random.Generator


def sums(lines: int, rng: Generator, pivots: int = 0):
    """Four networks and transposed networks, joined by sums of order 2 and 3."""
    kinds = ("network", "conetwork")
    while True:
        piece = regular(rng, leaves=4, size=lines // 12, kinds=kinds, orders=(3, 3, 2))
        matrix = sp.csc_array(disguised(rng, piece, pivots).matrix)
        if neither(matrix, Deadline(None)):
            return matrix


def pivoted_sums(lines: int, rng: Generator):
    """The same after many pivots: dense, and no summand in sight."""
    return sums(lines, rng, pivots=lines // 2)


def many_r10(lines: int, rng: Generator):
    """Many small summands, R10 among them."""
    piece = regular(rng, leaves=lines // 16, size=5, orders=(2, 3))
    return sp.csc_array(disguised(rng, piece).matrix)


def planted(lines: int, rng: Generator):
    """A network in disguise, one entry of which has the wrong sign."""
    matrix = stretched(3 * lines, rng)
    matrix.data[rng.integers(matrix.nnz)] *= -1
    return matrix


def planted_elsewhere(lines: int, rng: Generator):
    """A network in disguise, with one entry too many."""
    matrix = bushy(3 * lines, rng).tolil()
    while True:
        place = tuple(int(rng.integers(size)) for size in matrix.shape)
        if not matrix[place]:
            matrix[place] = 1
            return matrix.tocsc()


def hidden_fano(lines: int, rng: Generator):
    """A network in disguise, joined to F7 by a sum of order 2: no sign contradicts another."""
    net = stretched(3 * lines, rng)
    marker = net[:, [int(rng.integers(net.shape[1]))]]
    fano = sp.csc_array([[1, 1, 0, 1], [1, 0, 1, 1], [0, 1, -1, 1]])
    matrix = sp.block_array([[net, marker @ fano[[0], :]], [None, fano[1:, :]]], format="csc")
    rows, columns = (rng.permutation(size) for size in matrix.shape)
    matrix = matrix[rows, :][:, columns].tocsc()
    while (cycle := odd_hole(matrix, Deadline(None))) is not None:
        matrix[cycle[-2 * int(rng.integers(2))], cycle[-1] - matrix.shape[0]] *= -1
    return matrix


#: Each with sizes in lines, rows and columns together, and whether the matrix is TU.
KINDS: tuple[tuple[Callable[..., sp.csc_array], tuple[int, ...], bool], ...] = (
    (sums, (60, 120, 240, 480, 960, 1920), True),
    (pivoted_sums, (60, 120, 240, 480), True),
    (many_r10, (60, 120, 240, 400, 800), True),
    (planted, (400, 800, 1600, 3200, 6400), False),
    (planted_elsewhere, (400, 800, 1600, 3200, 6400), False),
    (hidden_fano, (400, 800, 1600, 3200), False),
)


def main() -> None:
    """Print seconds by size and the exponent of their growth, and plot them."""
    curves = {}
    totally_unimodular(np.eye(2))
    for kind, sizes, expected in KINDS:
        lines, seconds, told = [], [], []
        for size in sizes:
            matrix = kind(size, np.random.default_rng(size))
            decision = totally_unimodular(matrix)
            assert decision.holds == expected, kind
            if expected:
                check_certificate(matrix, decision.certificate)
            m, n = matrix.shape
            took = medians({"": lambda m=matrix: totally_unimodular(m)}, 3)[""]
            lines.append(m + n)
            seconds.append(took)
            told.append(f"{m}x{n} ({matrix.nnz:,}): {took:.2f} s")
        growth = np.polyfit(np.log(lines), np.log(seconds), 1)[0]
        print(f"{kind.__name__:17} {', '.join(told)}; growth exponent {growth:.2f}", flush=True)
        curves[f"{kind.__name__}, exponent {growth:.2f}"] = lines, seconds
    if len(sys.argv) > 1:
        plot(curves, sys.argv[1])


def plot(curves: dict[str, tuple[list[int], list[float]]], path: str) -> None:
    """Draw the growth curves."""
    from matplotlib import pyplot

    for name, (lines, seconds) in curves.items():
        pyplot.loglog(lines, seconds, marker="o", label=name)
    pyplot.xlabel("rows and columns")
    pyplot.ylabel("seconds")
    pyplot.legend()
    pyplot.savefig(path, dpi=150)


if __name__ == "__main__":
    main()

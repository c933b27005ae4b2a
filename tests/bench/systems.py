"""Systems of equations that are networks in disguise: seconds to recognise and to check them.

Each family of `tests/system_models.py` up to 10,000 rows, as a curve over its nonzeros.

Run: python tests/bench/systems.py [PLOT.png]
"""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from functools import partial
from pathlib import Path

import numpy as np
from growth import measure, plot

sys.path.insert(0, str(Path(__file__).parents[1]))
from system_models import FAMILIES, Family, System

from pyomo_latpath.certificates import Part, Unimodular
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.integrality import unimodular
from pyomo_latpath.integrality.recognise import prove_tu

ROWS = (625, 1_250, 2_500, 5_000, 10_000)


def recognise(system: System) -> Unimodular | None:
    """The certificate of a system."""

    def rest(matrix) -> Part | None:
        proof = prove_tu(matrix)
        return None if proof is None else proof[1]

    return unimodular.recognise(*system, rest, Deadline(None))


def recognition(family: Family) -> Iterator[tuple[int, Callable[[], object]]]:
    """What finds the certificate, at each size."""
    for rows in ROWS:
        system = family(rows, np.random.default_rng(0))
        yield system.matrix.nnz, partial(recognise, system)


def checking(family: Family) -> Iterator[tuple[int, Callable[[], object]]]:
    """What checks it."""
    for rows in ROWS:
        system = family(rows, np.random.default_rng(0))
        part = recognise(system)
        assert part is not None, family
        yield system.matrix.nnz, partial(part.check, system.matrix)


def main() -> None:
    """Print seconds by size and the exponents of their growth, and plot them."""
    curves = []
    for family in FAMILIES:
        curves.append(measure(family.__name__, recognition(family)))
        measure("  check", checking(family))
    if len(sys.argv) > 1:
        plot(curves, sys.argv[1])


if __name__ == "__main__":
    main()

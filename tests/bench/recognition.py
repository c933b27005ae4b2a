"""Recognition of incidence and interval matrices: seconds up to 1,000,000 nonzeros, and growth.

Run: python tests/bench/recognition.py
"""

from __future__ import annotations

import numpy as np
import scipy.sparse as sp
from timing import medians

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.blocks import blocks_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.normalise import normalise
from pyomo_latpath.integrality.assess import certify

SIZES = (62_500, 125_000, 250_000, 500_000, 1_000_000)


def incidence(nonzeros: int, rng: np.random.Generator) -> sp.csc_array:
    """A random network's incidence matrix, some rows negated."""
    arcs, nodes = nonzeros // 2, nonzeros // 20
    tail = rng.integers(0, nodes, arcs)
    head = (tail + rng.integers(1, nodes, arcs)) % nodes
    sign = rng.choice([-1.0, 1.0], nodes)
    column = np.arange(arcs)
    data = np.concatenate([sign[tail], -sign[head]])
    return sp.csc_array((data, (np.r_[tail, head], np.r_[column, column])), shape=(nodes, arcs))


def interval(nonzeros: int, rng: np.random.Generator) -> sp.csc_array:
    """Runs of ones, 30 periods long on average."""
    columns, rows = nonzeros // 30, nonzeros // 200
    length = rng.integers(2, 59, columns)
    begin = (rng.random(columns) * (rows - length)).astype(int)
    row = np.concatenate([np.arange(b, b + k) for b, k in zip(begin, length, strict=True)])
    column = np.repeat(np.arange(columns), length)
    return sp.csc_array((np.ones(row.size), (row, column)), shape=(rows, columns))


def main() -> None:
    """Print seconds by size and the exponent of their growth."""
    for kind in (incidence, interval):
        seconds = []
        for size in SIZES:
            matrix = kind(size, np.random.default_rng(0))
            form = LinearForm.from_arrays(
                matrix, row_lower=0, row_upper=9, col_lower=0, col_upper=1, cost=0
            )
            normal = normalise(form)
            blocks = blocks_of(normal)
            found = certify(normal, blocks, Deadline(None))
            assert all(found), kind
            seconds.append(
                medians({"": lambda n=normal, b=blocks: certify(n, b, Deadline(None))}, 3)[""]
            )
        growth = np.polyfit(np.log(SIZES), np.log(seconds), 1)[0]
        told = ", ".join(f"{n:,}: {s:.3f} s" for n, s in zip(SIZES, seconds, strict=True))
        print(f"{kind.__name__:10} {told}; growth exponent {growth:.2f}", flush=True)


if __name__ == "__main__":
    main()

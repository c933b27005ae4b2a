"""The decision against the definition, on many random matrices of up to eight rows and columns.

Run: python tests/bench/decision_by_definition.py [COUNT]
"""

from __future__ import annotations

import sys
import time
from collections import Counter
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parent.parent))
from decisions import assert_right, small_matrix, without_odd_holes

from pyomo_latpath.integrality.regular.decision import totally_unimodular


def main() -> None:
    """Draw, decide, check; print how many of which kind there were, and their CPU time."""
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 20_000
    rng, kinds, seconds = np.random.default_rng(0), Counter[str](), []
    while sum(kinds.values()) < count:
        matrix = small_matrix(rng)
        if rng.random() < 0.2:
            support = rng.random(rng.integers(3, 9, 2)) < rng.choice([0.3, 0.5, 0.6])
            matrix = without_odd_holes(rng, support)
        if matrix is None:
            continue
        begun = time.process_time()
        decision = totally_unimodular(matrix)
        seconds.append(time.process_time() - begun)
        assert_right(matrix, decision)
        if decision.holds:
            kinds[decision.certificate.blocks[0].part.kind] += 1
        else:
            kinds[f"violator of {decision.violator.rows.size} rows"] += 1
    median, most = np.median(seconds), max(seconds)
    print(f"{dict(sorted(kinds.items()))}; median {median * 1e3:.1f} ms, most {most * 1e3:.0f} ms")


if __name__ == "__main__":
    main()

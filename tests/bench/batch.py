"""Batches: what a small instance costs beside its solve, and what a second worker gains.

Run: python tests/bench/batch.py [instances]
"""

from __future__ import annotations

import itertools
import sys
import tempfile
import time
from collections.abc import Iterable
from pathlib import Path

import numpy as np

import pyomo_latpath as latpath


def turns(size: int, seed: int) -> latpath.LinearForm:
    """Keepers to caves: an assignment."""
    who, where = np.divmod(np.arange(size * size), size)
    matrix = np.vstack([who == k for k in range(size)] + [where == k for k in range(size)])
    return latpath.LinearForm.from_arrays(
        matrix.astype(float),
        row_lower=1,
        row_upper=1,
        col_lower=0,
        col_upper=1,
        cost=np.random.default_rng(seed).integers(1, 99, size * size),
    )


def seconds_each(forms: Iterable[latpath.LinearForm], workers: int) -> tuple[float, float]:
    """Seconds from record to record once all workers are at work, and those of their solves."""
    with tempfile.TemporaryDirectory() as folder:
        records = latpath.solve_many(
            forms, workers=workers, progress=False, journal=Path(folder) / "journal.jsonl"
        )
        for _ in itertools.islice(records, 20):  # workers start, and load what they need
            pass
        begun, count, solving = time.perf_counter(), 0, 0.0
        for record in records:
            assert record.solved
            count += 1
            solving += record.total_seconds
    return (time.perf_counter() - begun) / count, solving / count


def main() -> None:
    """Print both."""
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 500
    small = [turns(5 + seed % 20, seed) for seed in range(count)]
    each, solving = seconds_each(small, 1)
    print(f"small instances, one worker: {each * 1e3:.2f} ms each, {solving * 1e3:.2f} ms of it")
    print(f"in solves: {(each - solving) * 1e3:.2f} ms on top", flush=True)
    larger = [turns(100 + seed, seed) for seed in range(count // 5)]
    one, two = (seconds_each(larger, workers)[0] for workers in (1, 2))
    print(f"larger instances: {one * 1e3:.1f} ms each with one worker, {two * 1e3:.1f} ms with two")
    print(f"a second worker: {one / two:.2f}x")


if __name__ == "__main__":
    main()

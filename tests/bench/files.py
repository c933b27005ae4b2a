"""Model files: `latpath` against HiGHS's branch and bound on the same arrays, by route.

Both sides get arrays, so reading and compiling count for neither. Files are not part of the
project; public collections serve. Run: python tests/bench/files.py FILE... [--repeats N]
"""

from __future__ import annotations

import math
import sys
from pathlib import Path

import numpy as np
from timing import medians

import pyomo_latpath as latpath
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.highs_mip import MipSettings, branch_and_bound

LIMIT = 60.0


def plain_highs(form: latpath.LinearForm) -> float:
    """HiGHS on the form as it is; returns the objective."""
    sign = 1.0 if form.sense == "min" else -1.0
    result = branch_and_bound(
        form.matrix,
        form.row_lower,
        form.row_upper,
        form.col_lower,
        form.col_upper,
        sign * form.cost,
        form.integer.astype(np.int32),
        MipSettings(),
        Deadline(LIMIT),
    )
    return math.nan if result.x is None else form.offset + float(form.cost @ result.x)


def geometric_mean(values: list[float]) -> float:
    """Geometric mean; NaN of nothing."""
    return math.exp(sum(map(math.log, values)) / len(values)) if values else math.nan


def main() -> None:
    """Print a row for each file, and the geometric means by route."""
    repeats = int(sys.argv[sys.argv.index("--repeats") + 1]) if "--repeats" in sys.argv else 3
    names = [name for name in sys.argv[1:] if Path(name).suffix]
    ratios: dict[str, list[float]] = {}
    for name in names:
        form = latpath.read(name)
        solution = latpath.solve(form, time_limit=LIMIT)
        seconds = medians(
            {
                "latpath": lambda f=form: latpath.solve(f, time_limit=LIMIT),
                "highs": lambda f=form: plain_highs(f),
            },
            repeats,
        )
        report = solution.report
        ratio = seconds["latpath"] / seconds["highs"]
        kind = report.route + (" proven" if report.finding.verdict == "proven" else "")
        ratios.setdefault(kind, []).append(ratio)
        print(
            f"{Path(name).name:24}{report.finding.verdict.value:10}{kind:12}{solution.status:11}"
            f"{solution.objective:>16.8g}{report.proof:>10}{seconds['latpath']:>9.3f} s"
            f"{seconds['highs']:>9.3f} s{ratio:>8.2f}",
            flush=True,
        )
    for kind, values in ratios.items():
        print(f"{kind}: geometric mean of latpath / highs {geometric_mean(values):.3f}")


if __name__ == "__main__":
    main()

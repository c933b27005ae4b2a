"""What it saves to tell branch and bound of the needed declarations only.

    python tests/bench/needed_declarations.py [SIZE] [FILE ...]

Models in which openings imply amounts, SIZE 1 to 5 (3 as a rule), and model files, if any; gap 0,
one thread. Printed are the declarations made and needed, and the seconds of our whole solve beside
HiGHS's with all declarations.
"""

from __future__ import annotations

import math
import statistics
import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from mixed_models import FAMILIES
from timing import anew, medians, print_row

from pyomo_latpath import LinearForm, read
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.highs_mip import MipSettings, branch_and_bound
from pyomo_latpath.routing import solve

SETTINGS = MipSettings(rel_gap=0.0, threads=1)
#: Seconds for one solve.
LIMIT = 120.0


def compare(name: str, form: LinearForm, repeats: int = 3) -> float:
    """Print one line; return how many times faster we are."""
    sign = 1.0 if form.sense == "min" else -1.0
    arrays = form.matrix, form.row_lower, form.row_upper, form.col_lower, form.col_upper
    kinds = form.integer.astype(np.int32)
    report = solve(form, rel_gap=0.0, threads=1, time_limit=LIMIT).report
    ways = {
        "latpath": lambda: solve(anew(form), rel_gap=0.0, threads=1, time_limit=LIMIT),
        "all declarations": lambda: branch_and_bound(
            *arrays, sign * form.cost, kinds, SETTINGS, Deadline(LIMIT)
        ),
    }
    seconds = medians(ways, repeats)
    print_row(f"{name}, {report.needed} of {report.declared}", seconds)
    return seconds["all declarations"] / seconds["latpath"]


def main(size: int = 3, *files: str) -> None:
    """Print a line for each model, and the geometric mean of each family."""
    for family, make in FAMILIES.items():
        ratios = [compare(family, make(np.random.default_rng(seed), size)) for seed in range(5)]
        mean = math.exp(statistics.fmean(map(math.log, ratios)))
        print(f"{family}: {mean:.1f} times faster in geometric mean")
    for file in files:
        compare(Path(file).stem, read(file))


if __name__ == "__main__":
    main(*map(int, sys.argv[1:2]), *sys.argv[2:])

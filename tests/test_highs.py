"""The talk with HiGHS: outcomes mapped completely, options checked, clocks kept."""

import signal
import subprocess
import sys
import time

import highspy
import numpy as np
import pytest
import scipy.sparse as sp

from pyomo_latpath import highs
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.highs import LinearProgram, OptionError, conflicting_set
from pyomo_latpath.highs_mip import MipSettings, branch_and_bound, check_settings

INF = np.inf
FOREVER = Deadline(None)


def program(A, row_lower, row_upper, col_lower, col_upper, cost):
    A = sp.csc_array(np.atleast_2d(np.array(A, dtype=float)))
    m, n = A.shape
    return (
        A,
        np.broadcast_to(np.array(row_lower, float), m).copy(),
        np.broadcast_to(np.array(row_upper, float), m).copy(),
        np.broadcast_to(np.array(col_lower, float), n).copy(),
        np.broadcast_to(np.array(col_upper, float), n).copy(),
        np.broadcast_to(np.array(cost, float), n).copy(),
    )


def test_every_status_of_highs_is_mapped():
    known = {name for name in dir(highspy.HighsModelStatus) if name.startswith("k")}
    assert known <= set(highs._OUTCOME)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"no_such_option": 1}, "HiGHS has no option 'no_such_option'"),
        ({"presolve": "perhaps"}, "'presolve' does not take 'perhaps'"),
        ({"mip_rel_gap": "small"}, "'mip_rel_gap' does not take 'small'"),
    ],
)
def test_options_are_checked(options, message):
    with pytest.raises(OptionError, match=message):
        check_settings(MipSettings(options=options))


def test_infeasible_comes_with_multipliers_and_unbounded_with_a_ray():
    result = LinearProgram(*program([[1, 1], [1, 1]], [3, -INF], [INF, 1], 0, 5, 1)).solve()
    assert result.status == "infeasible"
    assert result.farkas is not None
    assert result.farkas[0] * result.farkas[1] < 0
    result = LinearProgram(*program([[1, -1]], 0, 0, 0, INF, -1)).solve()
    assert result.status == "unbounded"
    assert result.ray is not None
    assert result.ray[0] == result.ray[1] > 0


def test_warm_starts_and_bases_round_trip():
    lp = LinearProgram(*program([[1, 2, 3]], 4, 4, 0, 5, [1, 1, 1]))
    first = lp.solve()
    basis = lp.basis()
    lp.set_cost(np.array([0.0, 5.0, 5.0]))
    assert lp.solve(method="primal").x.tolist() == [4, 0, 0]
    lp.set_cost(np.ones(3))
    lp.set_basis(basis)
    again = lp.solve(method="primal")
    assert (again.pivots, again.objective) == (0, first.objective)


def test_the_clock_is_kept_per_call_not_per_instance():
    rng = np.random.default_rng(0)
    lp = LinearProgram(*program(rng.integers(0, 2, (60, 90)), 0, 20, 0, 1, -rng.random(90)))
    for _ in range(5):
        lp.set_cost(-rng.random(90))
        assert lp.solve(deadline=Deadline(5)).status == "optimal"
    assert lp.solve(deadline=Deadline(0)).status in ("time_limit", "optimal")


def test_branch_and_bound_settles_infeasible_or_unbounded():
    whole = np.ones(2, np.int32)
    unbounded = program([[1, -1]], 0, 0, 0, INF, -1)
    assert branch_and_bound(*unbounded, whole, MipSettings(), FOREVER).status == "unbounded"
    neither = program([[2, -2], [1, 1]], [1, 0], [1, INF], 0, INF, -1)
    assert branch_and_bound(*neither, whole, MipSettings(), FOREVER).status == "infeasible"


def test_branch_and_bound_keeps_its_time_and_returns_plan_and_bound():
    rng = np.random.default_rng(0)
    knapsacks = program(rng.integers(1, 100, (40, 60)), -INF, 1000, 0, 1, -rng.integers(50, 99, 60))
    lines = []
    result = branch_and_bound(
        *knapsacks, np.ones(60, np.int32), MipSettings(log=lines.append), Deadline(1.0)
    )
    assert result.status == "time_limit"
    assert result.x is not None
    assert result.bound <= knapsacks[-1] @ result.x
    assert lines


def test_a_conflicting_set_has_no_needless_member():
    rows, columns = conflicting_set(
        *program([[1, 1], [1, 1], [1, 0]], [3, -INF, 0], [INF, 1, 4], 0, 5, 0)[:5], FOREVER
    )
    assert rows.tolist() == [0, 1]
    assert columns.size == 0
    rows, columns = conflicting_set(*program([[1, 1]], 30, INF, 0, 5, 0)[:5], FOREVER)
    assert (rows.tolist(), columns.tolist()) == ([0], [0, 1])
    rows, columns = conflicting_set(*program([[1, 1]], 3, INF, 0, 5, 0)[:5], FOREVER)
    assert rows.size == columns.size == 0


def test_the_number_of_threads_may_change_from_solve_to_solve():
    knapsack = program([[3, 5, 7]], -INF, 9, 0, 1, [-4, -5, -6])
    for threads in (None, 1, 2, None, 1):
        result = branch_and_bound(
            *knapsack, np.ones(3, np.int32), MipSettings(threads=threads), FOREVER
        )
        assert (result.status, result.bound) == ("optimal", -9.0)


def test_an_error_in_the_log_is_raised():
    def full(line):
        raise OSError("no space left")

    A, *limits, cost = program([[3, 5, 7]], -INF, 8, 0, 1, [-2, -3, -4])
    kinds = np.ones(3, np.int32)
    with pytest.raises(OSError, match="no space left"):
        branch_and_bound(A, *limits, cost, kinds, MipSettings(log=full), FOREVER)


SEARCH = """
import numpy as np
import pyomo_latpath as latpath

# Market shares: a plan is at hand, the proof that it is the best one takes days.
rng = np.random.default_rng(0)
share = rng.integers(0, 100, (6, 50))
over = np.eye(6)
form = latpath.LinearForm.from_arrays(
    np.hstack((share, over, -over)), row_lower=share.sum(axis=1) // 2,
    row_upper=share.sum(axis=1) // 2, col_lower=0, col_upper=[1] * 50 + [np.inf] * 12,
    cost=[0] * 50 + [1] * 12, integer=[True] * 50 + [False] * 12,
)
found = latpath.solve(form, log=lambda line: print(line, flush=True))
print("status", found.status, found.x is not None, found.objective >= found.bound)
"""


@pytest.mark.skipif(sys.platform == "win32", reason="no SIGINT can be sent to one process there")
def test_an_interrupted_search_keeps_the_best_plan():
    command = [sys.executable, "-c", SEARCH]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as search:
        for line in search.stdout:
            if line.startswith("Src:"):  # the search itself begins
                break
        time.sleep(2)
        search.send_signal(signal.SIGINT)
        told = search.communicate(timeout=60)[0].splitlines()
    assert search.returncode == 0 and told[-1] == "status interrupted True True"
    assert not any("Ctrl-C" in line for line in told)

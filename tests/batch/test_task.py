"""One instance to one record."""

from __future__ import annotations

import io
import pickle

import numpy as np
import odd_instances as odd
import pytest

from pyomo_latpath.batch.instance import FormInstance, SharedForm
from pyomo_latpath.batch.task import Settings, Task, plan_name, run_task
from pyomo_latpath.batch.workers import _Pickler, _Unpickler
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.prepared import RecentMatrices

# Three cellars of which any two exclude each other: half of each is a vertex.
TRIANGLE = LinearForm.from_arrays(
    [[1, 1, 0], [0, 1, 1], [1, 0, 1]],
    row_lower=0,
    row_upper=1,
    col_lower=0,
    col_upper=1,
    cost=1,
    sense="max",
)


def record_of(form, compare=False, **settings):
    return run_task(Task("a", FormInstance("a", form), Settings(**settings), compare))


def test_branch_and_bound_is_measured_in_the_model_s_own_sense():
    record = record_of(TRIANGLE, compare=True)
    assert (record.status, record.objective, record.route) == ("optimal", 1, "highs")
    assert (record.highs_status, record.highs_seconds > 0) == ("optimal", True)
    assert record.verdict == "refuted"
    assert record_of(TRIANGLE).highs_seconds is None


def test_seconds_of_compiling_a_model_are_told():
    instance = FormInstance("a", odd.turning(), compile_seconds=7.5)
    assert run_task(Task("a", instance, Settings())).seconds["compile"] >= 7.5


def test_options_reach_the_solve():
    wide = LinearForm.from_arrays(
        [[3, 5, 7, 9]], row_lower=13, row_upper=13, col_lower=0, col_upper=3, cost=[4, 5, 9, 8]
    )
    assert record_of(wide, samples=0).samples == 0
    late = record_of(odd.turning(8), time_limit=0)  # a matrix that nothing remembers
    assert (late.status, late.objective) == ("time_limit", None)
    assert not late.solved


def test_of_very_many_matrices_only_the_last_are_remembered(monkeypatch):
    monkeypatch.setattr("pyomo_latpath.prepared.MOST_MATRICES", 5)
    recent = RecentMatrices()
    forms = [recent.lend(odd.turning(size)) for size in range(2, 22)]
    for size in range(21, 16, -1):
        assert recent.lend(odd.turning(size)).memory is forms[size - 2].memory
    for size in range(2, 17):
        assert recent.lend(odd.turning(size)).memory is not forms[size - 2].memory


def test_a_defect_is_shown_in_full():
    record = run_task(Task("a", odd.Faulty("a"), Settings()))
    assert record.status == "error"
    assert record.error.startswith("Traceback")
    assert record.reason == "RuntimeError: a wheel came off"


def test_running_out_of_memory_is_left_to_whoever_can_mend_it():
    with pytest.raises(MemoryError):
        run_task(Task("a", odd.Hungry("a"), Settings()))


@pytest.mark.parametrize("name", ["a/b.min", "..", "/", "x" * 500, "später\n?*.mps", ".hidden"])
def test_plans_have_names_of_their_own_that_any_system_takes(name):
    plan = plan_name(name)
    assert len(plan) < 110
    assert not set(plan) & set('/\\:*?"<>|\n')
    assert not plan.startswith(".")
    assert plan != plan_name(name + "/")


def test_a_shared_form_travels_once():
    shared = SharedForm.of(odd.turning(30))
    known, forms = set(), {}
    sizes = []
    for _ in range(3):
        file = io.BytesIO()
        pickler = _Pickler(file, known)
        pickler.dump([shared, shared])
        known |= pickler.sent
        sizes.append(file.tell())
        first, second = _Unpickler(file.getvalue(), forms).load()
        assert first is second is forms[shared.key]
        assert np.array_equal(first.form.cost, shared.form.cost)
    assert sizes[1] == sizes[2] < sizes[0] / 10
    assert pickle.loads(pickle.dumps(shared)).key == shared.key

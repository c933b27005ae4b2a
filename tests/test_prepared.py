"""Solves after other solves of one matrix: the same answers, and nothing worked out twice."""

from __future__ import annotations

import copy
import pickle
import threading

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from random_models import KINDS as RANDOM_KINDS
from random_models import random_form
from tu_models import KINDS as TU_KINDS
from tu_models import tu_form

from pyomo_latpath import prepared
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.paths import path_solver
from pyomo_latpath.routing import solve
from pyomo_latpath.solution import Solution

FOREVER = Deadline(None)


def anew(form: LinearForm) -> LinearForm:
    """The same form without anything remembered."""
    names = "row_lower row_upper col_lower col_upper cost offset sense integer semicontinuous"
    return LinearForm.from_arrays(
        form.matrix.copy(), **{name: getattr(form, name) for name in names.split()}
    )


def assert_same(again: Solution, fresh: Solution) -> None:
    assert again.status == fresh.status
    assert again.objective == pytest.approx(fresh.objective, rel=1e-9, abs=1e-9, nan_ok=True)
    assert again.report.proof == fresh.report.proof
    assert again.report.largest_violation <= max(1e-9, fresh.report.largest_violation)


def other_data(rng: np.random.Generator, form: LinearForm) -> LinearForm:
    """Change one or two of: costs, sense, sides, bounds, fixed columns, integer columns."""
    m, n = form.shape
    kinds = rng.choice(6, size=int(rng.integers(1, 3)), replace=False)
    changes = {}
    for kind in kinds.tolist():
        if kind == 0:
            changes["cost"] = form.cost + rng.integers(-3, 4, n) * (rng.random(n) < 0.6)
        elif kind == 1:
            changes["sense"] = "max" if form.sense == "min" else "min"
        elif kind == 2:
            shift = rng.integers(-1, 2, m) * rng.choice([1.0, 1.0, 0.5])
            changes |= {"row_lower": form.row_lower + shift, "row_upper": form.row_upper + shift}
            if rng.random() < 0.2:
                changes["row_upper"] = np.full(m, np.inf)
        elif kind == 3:
            changes["col_upper"] = form.col_upper + rng.integers(0, 2, n) * rng.choice([1.0, 0.5])
        elif kind == 4:
            value = np.where(np.isfinite(form.col_lower), form.col_lower, 0.0)
            fixed = rng.random(n) < 0.3
            changes["col_lower"] = np.where(fixed, value, form.col_lower)
            changes["col_upper"] = np.where(fixed, value, form.col_upper)
        else:
            changes["integer"] = form.integer ^ (rng.random(n) < 0.3)
    return form.replace(**changes)


@pytest.fixture
def network_engine(monkeypatch):
    monkeypatch.setattr(path_solver, "repays", lambda structure, walks: True)


@given(st.integers(0, 10**9), st.sampled_from(RANDOM_KINDS))
def test_members_are_answered_as_if_each_were_the_first(seed, kind):
    rng = np.random.default_rng(seed)
    form = random_form(rng, kind)
    for _ in range(5):
        form = other_data(rng, form) if rng.random() < 0.8 else form
        assert_same(solve(form), solve(anew(form)))


@pytest.mark.usefixtures("network_engine")
@pytest.mark.parametrize("kind", TU_KINDS)
def test_certified_members_are_answered_by_resumed_engines(kind):
    for seed in range(12):
        rng = np.random.default_rng(seed)
        form, plan = tu_form(rng, kind)
        for _ in range(6):
            member = form.replace(cost=rng.integers(-9, 10, form.shape[1]))
            if rng.random() < 0.4:
                # The plan stays feasible, but what was tight need not be so any more.
                room = rng.integers(0, 3, form.shape[0])
                activity = form.matrix @ plan
                member = member.replace(row_lower=activity - room, row_upper=activity + room)
            if rng.random() < 0.2:
                member = other_data(rng, member)
            assert_same(solve(member), solve(anew(member)))


@pytest.mark.usefixtures("network_engine")
@pytest.mark.parametrize("kind", ["network", "transposed"])
def test_blocks_of_each_kind_go_on_side_by_side(kind):
    rng = np.random.default_rng(3)
    pieces = [tu_form(rng, k)[0] for k in (kind, "incidence")] + [random_form(rng, "general")]
    A = np.zeros([sum(piece.shape[axis] for piece in pieces) for axis in (0, 1)])
    i = j = 0
    for piece in pieces:
        m, n = piece.shape
        A[i : i + m, j : j + n] = piece.matrix.toarray()
        i, j = i + m, j + n
    together = {
        name: np.concatenate([getattr(piece, name) for piece in pieces])
        for name in ("row_lower", "row_upper", "col_lower", "col_upper", "cost")
    }
    form = LinearForm.from_arrays(A, **together)
    for _ in range(10):
        form = form.replace(cost=rng.integers(-9, 10, form.shape[1]))
        assert_same(solve(form), solve(anew(form)))


def test_nothing_is_recognised_twice(monkeypatch):
    rng = np.random.default_rng(0)
    form, _ = tu_form(rng, "network")
    assert solve(form).report.recognition == "found"

    def never(*_):
        raise AssertionError("recognition was asked again")

    monkeypatch.setattr(prepared, "certify", never)
    monkeypatch.setattr(prepared, "blocks_of", never)
    for changes in ({"cost": 1}, {"row_upper": form.row_upper + 1}, {"col_upper": 5}):
        again = solve(form.replace(**changes))
        assert again.report.recognition == "remembered"
        assert again.report.finding.certificate is not None


def test_sides_that_are_not_whole_any_more_are_not_claimed():
    form = LinearForm.from_arrays(
        [[1, 1, 0], [0, 1, 1]], row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=-1,
        integer=[True, True, False],
    )  # fmt: skip
    assert solve(form).report.finding.verdict == "proven"
    odd = solve(form.replace(row_upper=[1, 0.5]))
    assert [block.verdict for block in odd.report.finding.blocks] != ["proven"]
    assert solve(form.replace(row_upper=[1, 2])).report.finding.verdict == "proven"


def test_costs_alone_need_neither_steps_nor_pivots_where_the_optimum_stays(network_engine):
    form, _ = tu_form(np.random.default_rng(1), "incidence", m=8, n=30)
    solve(form)
    walk = solve(form.replace(cost=2 * form.cost)).report.walk
    assert (walk.engine, walk.steps, walk.pivots) == ("network", 0, 0)


@pytest.mark.usefixtures("network_engine")
def test_steps_from_the_last_vertex_are_counted_and_bounded():
    rng = np.random.default_rng(5)
    form, _ = tu_form(rng, "network", m=8, n=40)
    taken = 0
    for _ in range(20):
        form = form.replace(cost=rng.integers(-99, 100, 40))
        before, after = solve(form), solve(form.replace(cost=rng.integers(-99, 100, 40)))
        walk = after.report.walk
        assert walk.exact_steps
        assert (before.x != after.x).any() <= walk.steps <= walk.pivots
        assert walk.steps <= walk.step_bound
        taken += walk.steps
    assert taken > 0


@pytest.mark.parametrize(
    "name", ["row_lower", "row_upper", "col_lower", "col_upper", "cost", "integer", "matrix"]
)
def test_changing_arrays_in_place_cannot_make_the_memory_stale(name):
    rng = np.random.default_rng(7)
    for _ in range(20):
        form, _ = tu_form(rng, "network")
        form = form.replace(**{n: getattr(form, n).copy() for n in ("row_lower", "col_upper")})
        solve(form)
        vector = form.matrix.data if name == "matrix" else getattr(form, name)
        place = int(rng.integers(vector.size))
        if name == "matrix":
            vector[place] = -vector[place]
        else:
            vector[place] = not vector[place] if name == "integer" else vector[place] + 1
        assert_same(solve(form), solve(anew(form)))


def test_what_travels_begins_without_memory():
    form, _ = tu_form(np.random.default_rng(2), "network")
    solve(form)
    for copied in (pickle.loads(pickle.dumps(form)), copy.deepcopy(form)):
        assert copied.memory.content is None
        assert solve(copied).report.recognition == "found"


def test_a_form_does_not_keep_itself_alive():
    import gc
    import weakref

    form, _ = tu_form(np.random.default_rng(2), "network")
    solve(form)
    solve(form.replace(cost=1))
    gone = weakref.ref(form)
    gc.disable()
    try:
        del form
        assert gone() is None
    finally:
        gc.enable()


@pytest.mark.usefixtures("network_engine")
def test_threads_do_not_disturb_each_other():
    rng = np.random.default_rng(4)
    form, _ = tu_form(rng, "network", m=10, n=60)
    members = [form.replace(cost=rng.integers(-99, 100, 60)) for _ in range(60)]
    expected = [solve(anew(member)).objective for member in members]
    wrong = []

    def work(mine: slice) -> None:
        for member, value in zip(members[mine], expected[mine], strict=True):
            if solve(member).objective != value:
                wrong.append(member)

    threads = [threading.Thread(target=work, args=(slice(k, None, 3),)) for k in range(3)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert not wrong


def test_a_time_limit_that_cuts_recognition_short_leaves_nothing_behind():
    form, _ = tu_form(np.random.default_rng(2), "network")
    prepared.prepare(form, Deadline(0))
    assert form.memory.content is None
    assert solve(form).report.finding.verdict == "proven"


def test_equal_matrices_share_a_memory_as_long_as_there_is_room():
    def drawn(seed: int) -> LinearForm:
        return tu_form(np.random.default_rng(seed), "network")[0]

    def met(seed: int) -> str:
        return solve(recent.lend(drawn(seed))).report.recognition

    forms = [drawn(seed) for seed in range(3)]
    recent = prepared.RecentMatrices(most=sum(form.matrix.nnz for form in forms) - 1)
    assert [met(0), met(1), met(0), met(1)] == ["found"] * 2 + ["remembered"] * 2
    # The third takes the place of the first, which was not met for longest.
    assert [met(2), met(1), met(0)] == ["found", "remembered", "found"]

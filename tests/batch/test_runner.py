"""solve_many: every instance gets exactly one record, whatever it or its worker does."""

from __future__ import annotations

import io
import multiprocessing
import os
import re
import signal
import subprocess
import sys
import time
from concurrent.futures import ProcessPoolExecutor, ThreadPoolExecutor
from pathlib import Path

import numpy as np
import odd_instances as odd
import pyomo.environ as pyo
import pytest

import pyomo_latpath as latpath
from pyomo_latpath.batch import workers
from pyomo_latpath.batch.family import Family
from pyomo_latpath.batch.journal import Journal, JournalError
from pyomo_latpath.batch.runner import OutOfTime, Tasks, run
from pyomo_latpath.batch.task import Settings
from pyomo_latpath.deadline import Deadline


@pytest.fixture(scope="module")
def thread():
    """One worker in this process, where a test is not about processes: these take long to start."""
    with ThreadPoolExecutor(1) as executor:
        yield {"executor": executor, "workers": 1}


def by_name(records):
    records = list(records)
    assert len({record.instance for record in records}) == len(records)
    return {record.instance: record for record in records}


def solve(instances, **options):
    return by_name(latpath.solve_many(instances, progress=False, **options))


def test_each_instance_gets_the_record_of_its_own_solve(tmp_path):
    (tmp_path / "caves.min").write_text(odd.FLOW)
    (tmp_path / "crowded.min").write_text(odd.CROWDED)
    (tmp_path / "broken.min").write_text(odd.BROKEN)
    (tmp_path / "endless.lp").write_text(odd.ENDLESS)
    found = solve(tmp_path, workers=2)
    assert sorted(Path(name).name for name in found) == sorted(os.listdir(tmp_path))
    statuses = {Path(name).name: record.status for name, record in found.items()}
    assert statuses == {
        "caves.min": "optimal",
        "crowded.min": "infeasible",
        "broken.min": "error",
        "endless.lp": "unbounded",
    }
    caves = found[str(tmp_path / "caves.min")]
    solution = latpath.solve(latpath.read(tmp_path / "caves.min"))
    assert (caves.rows, caves.columns, caves.integers, caves.nonzeros) == (4, 5, 5, 10)
    assert (caves.objective, caves.bound) == (odd.FLOW_OPTIMUM, odd.FLOW_OPTIMUM)
    assert (caves.verdict, caves.route, caves.proof) == ("proven", "path", "exact")
    assert (caves.why, caves.structure) == (solution.report.why, "incidence")
    assert caves.steps == solution.report.walk.steps
    assert set(caves.seconds) == {"compile", "assess", "solve", "proof"}
    assert (caves.attempts, caves.error, caves.plan) == (1, None, None)
    assert "broken.min, line 5: the head 9" in found[str(tmp_path / "broken.min")].error


def test_bad_instances_cost_themselves_only(monkeypatch):
    monkeypatch.setattr(workers, "GRACE", 0.5)
    instances = [
        odd.Deadly("deadly"),
        odd.Faulty("faulty"),
        odd.Unsendable("unsendable"),
        odd.Stuck("stuck"),
    ]
    instances += [odd.Quick(f"quick {k}") for k in range(30)]
    found = solve(instances, workers=2, time_limit=6)
    assert len(found) == len(instances)
    assert all(found[f"quick {k}"].solved for k in range(30))
    assert "SIGKILL" in found["deadly"].error
    assert "a second time" in found["deadly"].error
    assert found["deadly"].attempts == 2
    assert found["deadly"].fingerprint == "deadly"
    assert "RuntimeError: a wheel came off" in found["faulty"].error
    assert found["faulty"].error.startswith("Traceback")
    assert "cannot be sent to a worker: cannot pickle a cellar" in found["unsendable"].error
    assert found["stuck"].status == "time_limit"
    assert "did not stop at its time limit of 6 s" in found["stuck"].error


def test_workers_killed_at_any_moment_lose_and_double_nothing(tmp_path):
    log, journal = tmp_path / "log", tmp_path / "journal.jsonl"
    instances = [odd.Quick(f"quick {k}", str(log)) for k in range(120)]
    killed = 0
    found = []
    for record in latpath.solve_many(instances, workers=2, progress=False, journal=journal):
        found.append(record)
        children = multiprocessing.active_children()
        if len(found) % 20 == 0 and children:
            os.kill(children[len(found) % len(children)].pid, signal.SIGKILL)
            killed += 1
    assert killed >= 3
    assert all(record.solved or record.attempts == 2 for record in by_name(found).values())
    assert sorted(by_name(found)) == sorted(instance.name for instance in instances)
    # Twice in a row one instance may have been the victim, but not often.
    assert sum(record.solved for record in found) >= 110
    lines = journal.read_bytes().splitlines()
    assert len(lines) == 1 + len(instances)


def test_what_is_finished_is_not_solved_again(tmp_path):
    log, journal = tmp_path / "log", tmp_path / "journal.jsonl"
    instances = [odd.Quick(f"quick {k}", str(log)) for k in range(8)]
    batch = latpath.solve_many(instances, workers=1, progress=False, journal=journal)
    first = [next(batch) for _ in range(3)]
    batch.close()
    with Journal(journal, Settings().plain()) as kept:
        saved = list(kept.records())
    assert saved[:3] == first
    log.unlink()
    again = solve(instances, workers=1, journal=journal)
    assert len(again) == 8
    assert all(again[record.instance] == record for record in saved)
    loaded = log.read_text().split("\n")[:-1]
    assert sorted(loaded) == sorted(set(again) - {record.instance for record in saved})


def test_an_instance_whose_source_has_changed_is_solved_again(tmp_path, thread):
    journal = tmp_path / "journal.jsonl"
    for name in ("a", "b", "c"):
        (tmp_path / f"{name}.min").write_text(odd.BROKEN if name == "a" else odd.FLOW)
    assert solve(tmp_path, **thread, journal=journal)[str(tmp_path / "a.min")].error
    (tmp_path / "a.min").write_text(odd.FLOW)
    (tmp_path / "b.min").unlink()
    found = solve(tmp_path, **thread, journal=journal)
    assert {Path(name).name: record.status for name, record in found.items()} == {
        "a.min": "optimal",
        "c.min": "optimal",
    }


def test_a_file_that_was_not_readable_and_still_is_not_keeps_its_record(tmp_path, thread):
    journal = tmp_path / "journal.jsonl"
    lost = [str(tmp_path / "a.min")]
    (tmp_path / "a.min").write_text(odd.FLOW)
    instances = latpath.batch.inputs.from_paths(lost)
    (tmp_path / "a.min").unlink()
    first = solve(instances, **thread, journal=journal)[lost[0]]
    assert first.error == f"{lost[0]}: no such file or directory"
    solve(instances, **thread, journal=journal)
    assert len(journal.read_bytes().splitlines()) == 2
    (tmp_path / "a.min").write_text(odd.FLOW)
    assert solve(instances, **thread, journal=journal)[lost[0]].solved


def test_a_journal_of_other_options_is_refused(tmp_path, thread):
    journal = tmp_path / "journal.jsonl"
    solve([odd.Quick("a")], **thread, journal=journal)
    with pytest.raises(JournalError, match="begun with seed = 0, now it is 5"):
        solve([odd.Quick("a")], **thread, journal=journal, seed=5)


def test_instances_are_taken_as_they_are_needed():
    taken = []

    def endless():
        for k in range(10**9):
            taken.append(k)
            yield odd.turning(seed=k)

    batch = latpath.solve_many(endless(), workers=2, progress=False)
    found = [next(batch) for _ in range(40)]
    batch.close()
    assert all(record.solved for record in found)
    assert len(taken) <= 40 + 2 * workers.AHEAD + 1
    assert not multiprocessing.active_children()


def test_work_begins_while_instances_are_still_being_made(tmp_path):
    log = tmp_path / "log"

    def slowly():
        yield odd.Quick("early", str(log))
        for _ in range(6000):
            if log.exists():
                break
            time.sleep(0.01)
        yield odd.Quick("late" if log.exists() else "alone")

    assert sorted(solve(slowly(), workers=1)) == ["early", "late"]


def test_pyomo_models_pairs_and_forms(tmp_path, thread):
    def model(cost, name=None):
        made = pyo.ConcreteModel(name=name)
        made.x = pyo.Var(range(2), domain=pyo.Binary)
        made.one = pyo.Constraint(expr=made.x[0] + made.x[1] == 1)
        made.cost = pyo.Objective(expr=cost[0] * made.x[0] + cost[1] * made.x[1])
        return made

    curved = model((1, 2), "curved")
    curved.bend = pyo.Constraint(expr=curved.x[0] ** 2 <= 1)
    (tmp_path / "caves.min").write_text(odd.FLOW)
    found = solve(
        iter(
            [
                model((2, 3)),
                model((5, 4), "tuesday"),
                model((6, 7), "tuesday"),
                ("wednesday", model((8, 9))),
                ("form", odd.turning()),
                odd.turning(),
                curved,
                tmp_path / "caves.min",
            ]
        ),
        **thread,
    )
    objectives = {name: record.objective for name, record in found.items()}
    assert objectives == {
        "instance 1": 2,
        "tuesday": 4,
        "tuesday (2)": 6,
        "wednesday": 8,
        "form": latpath.solve(odd.turning()).objective,
        "instance 6": latpath.solve(odd.turning()).objective,
        "curved": None,
        str(tmp_path / "caves.min"): odd.FLOW_OPTIMUM,
    }
    assert "bend" in found["curved"].error


@pytest.mark.parametrize("wrong", [odd.turning(), pyo.ConcreteModel(), 5, None])
def test_what_is_no_batch_is_refused_at_once(wrong):
    with pytest.raises(TypeError, match="made of many instances"):
        latpath.solve_many(wrong)


def test_an_item_that_is_no_instance_is_named():
    with pytest.raises(TypeError, match="item 2 of the batch is of type int"):
        list(latpath.solve_many([odd.turning(), 5], progress=False, workers=1))


@pytest.mark.parametrize(
    "options",
    [
        {"workers": 0},
        {"workers": "2"},
        {"workers": 1.5},
        {"time_limit": -1},
        {"time_limit": "a"},
        {"samples": -1},
        {"seed": "x"},
        {"rel_gap": float("nan")},
        {"executor": 3},
    ],
)
def test_senseless_options_are_refused_at_once(options):
    with pytest.raises(ValueError, match=next(iter(options))):
        latpath.solve_many([odd.turning()], **options)


@pytest.mark.parametrize("option", ["plans", "store"])
def test_a_folder_that_cannot_be_made_is_named(tmp_path, option):
    (tmp_path / "file").write_text("no folder")
    folder = tmp_path / "file" / "below"
    with pytest.raises(ValueError, match=re.escape(f"cannot make the folder {folder}: ")):
        latpath.solve_many([odd.turning()], **{option: folder})


def test_a_family_sends_its_form_once_to_each_worker(monkeypatch):
    sizes = []
    send = workers._Worker.send

    def measured(worker, task):
        file = io.BytesIO()
        workers._Pickler(file, worker.forms).dump(task)
        sizes.append(file.tell())
        send(worker, task)

    monkeypatch.setattr(workers._Worker, "send", measured)
    form = odd.turning(40)
    costs = np.random.default_rng(1).integers(1, 30, (20, form.shape[1])).astype(float)
    costs[:, 5:] = form.cost[5:]
    found = solve(Family(form, {"cost": costs}), workers=1)
    for name, record in found.items():
        assert record.objective == latpath.solve(form.replace(cost=costs[int(name) - 1])).objective
    assert max(sizes[1:]) < sizes[0] / 2


def test_the_whole_batch_may_have_a_limit():
    crew = workers.Processes(1, None)
    tasks = Tasks([odd.Quick("quick"), odd.Stuck("stuck"), odd.Quick("late")], Settings())
    deadline = Deadline(None)
    found = []
    with pytest.raises(OutOfTime, match="time for the batch"):
        for done in run(tasks, crew, None, deadline):
            found.append(done.record.instance)
            deadline.at = time.monotonic() + 0.5
    assert found == ["quick"]
    assert not multiprocessing.active_children()


def test_workers_that_never_come_up_end_the_batch(monkeypatch):
    monkeypatch.setattr(workers, "serve", os._exit)
    with pytest.raises(workers.BatchError, match="ended before they were ready"):
        solve([odd.Quick("quick")], workers=1)


#: A script that starts a batch wherever it is read.
UNGUARDED = """
from concurrent.futures import ThreadPoolExecutor
import pyomo_latpath as latpath
form = latpath.LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0, col_upper=1,
                                      cost=[2, 3])
for record in latpath.solve_many([form] * 2, progress=False, workers=2, executor=%s):
    print(record.instance, record.objective)
"""


def run_python(*arguments, **options):
    command = [sys.executable, *arguments]
    return subprocess.run(command, capture_output=True, text=True, timeout=120, **options)


def test_a_script_without_guard_is_told_once_and_by_the_parent_alone(tmp_path):
    (tmp_path / "nights.py").write_text(UNGUARDED % None)
    done = run_python(tmp_path / "nights.py")
    assert (done.returncode, done.stdout) == (1, "")
    assert done.stderr.count("Traceback") == 1
    assert "below `if __name__ == '__main__':`" in done.stderr.splitlines()[-1]


def test_a_script_without_file_needs_one_or_threads():
    refused = run_python("-", input=UNGUARDED % None)
    assert refused.stderr.count("Traceback") == 1
    assert "ThreadPoolExecutor(1)" in refused.stderr.splitlines()[-1]
    done = run_python("-", input=UNGUARDED % "ThreadPoolExecutor(1)")
    assert sorted(done.stdout.splitlines()) == ["instance 1 2.0", "instance 2 2.0"]


def test_processes_of_an_executor_do_the_same(tmp_path):
    (tmp_path / "caves.min").write_text(odd.FLOW)
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(2, mp_context=context) as executor:
        instances = [odd.Quick(f"quick {k}") for k in range(40)] + [odd.Hungry("hungry")]
        found = solve(instances, executor=executor, workers=2)
        assert executor.submit(len, "left running").result() == 12
    assert len(found) == 41
    assert sum(record.solved for record in found.values()) == 40
    assert found["hungry"].attempts == 2
    assert found["hungry"].error == "it ran out of memory, and so it was a second time"


def test_a_broken_executor_ends_the_batch_and_loses_nothing(tmp_path, thread):
    journal = tmp_path / "journal.jsonl"
    context = multiprocessing.get_context("spawn")
    instances = [odd.Quick(f"quick {k}") for k in range(5)] + [odd.Deadly("deadly")]
    with (
        ProcessPoolExecutor(1, mp_context=context) as executor,
        pytest.raises(workers.BatchError, match="the executor takes no more work"),
    ):
        solve(instances, executor=executor, workers=1, journal=journal)
    with Journal(journal, Settings().plain()) as kept:
        assert all(record.solved for record in kept.records())
    instances[-1] = odd.Quick("deadly")
    found = solve(instances, journal=journal, **thread)
    assert all(record.solved for record in found.values())
    assert len(found) == 6


def test_threads_take_turns():
    forms = [(f"form {k}", odd.turning(seed=k)) for k in range(12)]
    with ThreadPoolExecutor(3) as executor:
        found = solve(forms, executor=executor, workers=3)
    for name, form in forms:
        assert found[name].objective == latpath.solve(form).objective


def test_workers_take_one_core_each_unless_the_user_says_otherwise(monkeypatch):
    monkeypatch.delenv("OPENBLAS_NUM_THREADS", raising=False)
    monkeypatch.setenv("OMP_NUM_THREADS", "3")
    started = []
    real = workers.get_context("spawn").Process.start

    def start(process):
        started.append({name: os.environ.get(name) for name in workers.THREADS})
        real(process)

    monkeypatch.setattr(workers.get_context("spawn").Process, "start", start)
    form = latpath.LinearForm.from_arrays(
        [[1, 1]], row_lower=1, row_upper=1, col_lower=0, col_upper=1, cost=[2, 3]
    )
    assert [record.objective for record in solve([form], workers=1).values()] == [2.0]
    assert started[0]["OPENBLAS_NUM_THREADS"] == "1"
    assert started[0]["OMP_NUM_THREADS"] == "3"
    assert "OPENBLAS_NUM_THREADS" not in os.environ

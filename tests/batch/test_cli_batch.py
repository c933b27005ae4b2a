"""latpath batch as people use it: what it prints, writes, returns, and survives."""

from __future__ import annotations

import csv
import errno
import json
import os
import signal
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
import odd_instances as odd
import pytest
from click.testing import CliRunner, Result

import pyomo_latpath as latpath
from pyomo_latpath import cli, cli_batch
from pyomo_latpath.batch import task
from pyomo_latpath.batch.executors import InExecutor
from pyomo_latpath.batch.output import COLUMNS
from pyomo_latpath.batch.record import BatchRecord, Summary
from pyomo_latpath.forms.from_file import read
from pyomo_latpath.prepared import RecentMatrices

SCRIPT = """
import pyomo.environ as pyo
print("a model that talks")

def create_model(orders, price=1):
    model = pyo.ConcreteModel()
    model.wheels = pyo.Var(range(len(orders)), domain=pyo.NonNegativeIntegers)
    model.orders = pyo.Constraint(
        range(len(orders)), rule=lambda m, k: m.wheels[k] >= orders[k])
    model.cost = pyo.Objective(expr=price * pyo.quicksum(model.wheels.values()))
    return model
"""


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    days = tmp_path / "days"
    (days / "more").mkdir(parents=True)
    for name, text in {
        "caves.min": odd.FLOW,
        "crowded.min": odd.CROWDED,
        "broken.min": odd.BROKEN,
        "more/endless.lp": odd.ENDLESS,
        "notes.txt": "no model",
    }.items():
        (days / name).write_text(text)
    (tmp_path / "good").mkdir()
    (tmp_path / "good" / "caves.min").write_text(odd.FLOW)
    (tmp_path / "build.py").write_text(SCRIPT)
    return tmp_path


@pytest.fixture
def in_a_thread(monkeypatch):
    """Work here, where a test is not about processes: these take long to start."""
    monkeypatch.setattr(task, "_RECENT", RecentMatrices())
    with ThreadPoolExecutor(1) as executor:
        monkeypatch.setattr(cli_batch, "Processes", lambda *_: InExecutor(executor, 1))
        yield


def run(*arguments: object) -> Result:
    return CliRunner().invoke(cli.main, ["batch", *map(str, arguments)])


def process(*arguments: object, **options: object) -> subprocess.Popen[str]:
    return subprocess.Popen(
        [sys.executable, "-m", "pyomo_latpath", "batch", *map(str, arguments)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        **options,
    )


def table(out: Path) -> dict[str, dict[str, str]]:
    with (out / "table.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    found = {row["instance"]: row for row in rows}
    assert len(found) == len(rows)
    return found


def many(folder: Path, count: int) -> Path:
    """A folder of small flows."""
    (folder / "flows").mkdir()
    for k in range(count):
        text = odd.FLOW.replace("a 1 2 0 4 2", f"a 1 2 0 4 {k % 7}")
        (folder / "flows" / f"day{k:03}.min").write_text(text)
    return folder / "flows"


def test_a_folder_with_bad_files_in_it(folder, in_a_thread):
    result = run("days", "--out", "out", "--plans", "--compare", "4")
    assert result.exit_code == 2
    assert "4 instances: 1 error, 1 optimal, 1 infeasible, 1 unbounded" in result.output
    told = " ".join(result.output.split())
    assert "error days/broken.min, line 5: the head 9 is not a node" in told
    assert told.index("error days/broken") < told.index("infeasible days/crowded")
    assert max(map(len, result.output.splitlines())) <= 80
    rows = table(folder / "out")
    assert sorted(rows) == [
        "days/broken.min",
        "days/caves.min",
        "days/crowded.min",
        "days/more/endless.lp",
    ]
    caves = rows["days/caves.min"]
    assert (caves["status"], caves["objective"], caves["verdict"]) == ("optimal", "14.0", "proven")
    assert tuple(caves) == COLUMNS
    with (folder / "out" / "plans" / caves["plan"]).open(newline="") as file:
        head, *plan = csv.reader(file)
    form = read("days/caves.min")
    x = np.array([float(value) for _, value in plan])
    assert head == ["column", "value"]
    assert [name for name, _ in plan] == list(form.col_names)
    assert (form.cost @ x, (form.matrix @ x).tolist()) == (14, form.row_lower.tolist())
    assert os.listdir(folder / "out" / "plans") == [caves["plan"]]
    summary = Summary.from_dict(json.loads((folder / "out" / "summary.json").read_text()))
    assert (summary.records, summary.errors, summary.unsolved_count) == (4, 1, 3)
    assert summary.comparison.instances == 3
    page = (folder / "out" / "report.html").read_text()
    assert "days/broken.min" in page
    assert "days/caves.min" in page


@pytest.mark.parametrize(
    ("paths", "status"), [(["good"], 0), (["days/crowded.min", "good"], 1), (["days"], 2)]
)
def test_the_exit_status_says_whether_all_went_well(folder, in_a_thread, paths, status):
    assert run(*paths, "--out", "out").exit_code == status


def test_json_has_a_line_for_each_record_and_nothing_else(folder):
    (folder / "orders.json").write_text('{"orders": [3, 4]}')
    job = process("days", "build.py", "--data", "orders.json", "--out", "out", "--json")
    out, err = job.communicate(timeout=300)
    assert job.returncode == 2
    records = [BatchRecord.from_json(line) for line in out.splitlines()]
    assert len(records) == 5
    by_name = {record.instance: record for record in records}
    assert by_name["build.py:orders.json"].objective == 7
    assert "a model that talks" in err


def test_python_files_build_one_model_from_each_data_file(folder, in_a_thread):
    (folder / "data").mkdir()
    (folder / "data" / "mon.json").write_text('{"orders": [1, 2]}')
    (folder / "data" / "tue.json").write_text('{"orders": [5], "price": 3}')
    (folder / "data" / "wed.json").write_text('{"odors": [5]}')
    (folder / "data" / "thu.json").write_text('{"orders": [5]')
    (folder / "data" / "fri.json").write_text('{"orders": ["many"]}')
    (folder / "plain.py").write_text(SCRIPT + "model = create_model([8])\n")
    assert run("build.py", "--data", "data", "--out", "out").exit_code == 2
    rows = table(folder / "out")
    assert [rows[f"build.py:data/{day}.json"]["objective"] for day in ("mon", "tue")] == [
        "3.0",
        "15.0",
    ]
    errors = {day: rows[f"build.py:data/{day}.json"]["error"] for day in ("wed", "thu", "fri")}
    assert "create_model does not take these data" in errors["wed"]
    assert errors["thu"].startswith("data/thu.json, line 1: no JSON")
    assert errors["fri"].startswith("build.py, line 9: it fails with")
    assert run("plain.py", "--out", "other").exit_code == 0
    assert table(folder / "other")["plain.py"]["objective"] == "8.0"
    assert run("build.py", "--out", "third").exit_code == 2
    error = table(folder / "third")["build.py"]["error"]
    assert "create_model does not take these data (missing a required argument" in error


def test_a_table_of_changes_makes_a_family(folder, in_a_thread):
    costs = np.array([[2.0, 2, 1, 3, 1], [9, 1, 1, 1, 1]])
    np.savez("changes.npz", cost=costs)
    assert run("good/caves.min", "--changes", "changes.npz", "--out", "out").exit_code == 0
    form = read("good/caves.min")
    found = [float(row["objective"]) for row in table(folder / "out").values()]
    assert found == [latpath.solve(form.replace(cost=cost)).objective for cost in costs]
    told = [row["recognition"] for row in table(folder / "out").values()]
    assert told == ["found", "remembered"]


def test_certificates_of_one_batch_serve_the_next(folder, in_a_thread, monkeypatch):
    monkeypatch.setattr("pyomo_latpath.batch.store.WORTH_KEEPING", 0.0)
    text = "min\n {0} a + b + c\nst\n r: a + b >= 1\n s: b + c >= 1\n t: a + b + c >= 2\n"
    text += "General\n a b c\nEnd\n"
    (folder / "mon.lp").write_text(text.format(1))
    (folder / "tue.lp").write_text(text.format(3))
    assert run("mon.lp", "--out", "out", "--store", "proofs").exit_code == 0
    task._store.cache_clear()
    monkeypatch.setattr(task, "_RECENT", RecentMatrices())
    assert run("tue.lp", "--out", "other", "--store", "proofs").exit_code == 0
    assert table(folder / "out")["mon.lp"]["recognition"] == "found"
    assert table(folder / "other")["tue.lp"]["recognition"] == "stored"
    assert table(folder / "other")["tue.lp"]["verdict"] == "proven"
    assert run("mon.lp", "--out", "third", "--store", "build.py").exit_code == 2


def test_branch_and_bound_is_measured_on_as_many_as_asked_for(folder, in_a_thread):
    told = " ".join(run(many(folder, 12), "--out", "out", "--compare", "5").output.split())
    assert "compared on 5 of them HiGHS took " in told
    assert "; for all, about " in told
    rows = table(folder / "out").values()
    measured = [row for row in rows if row["highs_seconds"]]
    assert len(measured) == 5
    assert {row["highs_status"] for row in measured} == {"optimal"}
    np.savez("changes.npz", cost=np.ones((9, 5)))
    run("good/caves.min", "--changes", "changes.npz", "--out", "family", "--compare", "2")
    assert sum(bool(row["highs_seconds"]) for row in table(folder / "family").values()) == 2


def test_file_names_may_hold_any_bytes(folder, in_a_thread):
    for name, text in ((b"day\xff.min", odd.FLOW), (b"day\xfe,\n.min", odd.BROKEN)):
        Path(os.fsdecode(os.fsencode(folder / "good") + b"/" + name)).write_text(text)
    result = run("good", "--out", "out", "--plans")
    assert result.exit_code == 2
    rows = table(folder / "out")
    assert rows["good/day\\udcff.min"]["objective"] == "14.0"
    assert "line 5: the head 9" in rows["good/day\\udcfe,\n.min"]["error"]
    assert len(os.listdir(folder / "out" / "plans")) == 2


def test_quiet_says_nothing(folder, in_a_thread):
    assert run("good", "--out", "out", "--quiet").output == ""


def test_parquet_holds_the_same_table(folder, in_a_thread):
    parquet = pytest.importorskip("pyarrow.parquet")
    run("days", "--out", "out", "--parquet")
    rows = parquet.read_table(folder / "out" / "table.parquet").to_pylist()
    texts = [{key: "" if v is None else str(v) for key, v in row.items()} for row in rows]
    assert texts == list(table(folder / "out").values())


def test_what_is_not_installed_is_named(folder, monkeypatch):
    monkeypatch.setattr(cli_batch.importlib.util, "find_spec", lambda _: None)
    result = run("good", "--out", "out", "--parquet")
    assert (result.exit_code, "pip install 'pyomo_latpath[tables]'" in result.output) == (2, True)
    monkeypatch.undo()
    monkeypatch.chdir(folder)
    monkeypatch.setitem(sys.modules, "distributed", None)
    result = run("good", "--out", "out", "--cluster", "tcp://127.0.0.1:9")
    assert (result.exit_code, "pip install 'pyomo_latpath[cluster]'" in result.output) == (2, True)


@pytest.mark.parametrize(
    ("arguments", "sentence"),
    [
        (["nowhere", "--out", "out"], "nowhere: no such file or directory"),
        (["days/*.mps", "--out", "out"], "days/*.mps: no file matches"),
        (["good", "--data", "days", "--out", "out"], "days: the folder holds no file that ends"),
        (["good", "--data", "o.json", "--out", "out"], "data are for Python files"),
        (["days", "--changes", "o.json", "--out", "out"], "changes are made to one model"),
        (["good", "days", "--changes", "o.json", "--out", "out"], "--changes takes one PATH"),
        (["good/caves.min", "--changes", "none.csv", "--out", "out"], "none.csv: no such file"),
        (["days/broken.min", "--changes", "o.json", "--out", "out"], "line 5: the head 9"),
        (["good", "--out", "build.py"], "is a file"),
        (["good"], "Missing option '--out'"),
        (["good", "--out", "out", "--workers", "0"], "0 is not in the range"),
        (["good", "--out", "out", "--cluster", "a", "--workers", "1"], "--workers are local"),
    ],
)
def test_wrong_usage_is_told_before_anything_is_done(folder, arguments, sentence):
    (folder / "o.json").write_text("{}")
    result = run(*arguments)
    assert result.exit_code == 2
    assert sentence in result.output
    assert not (folder / "out").exists()


def test_other_options_or_inputs_are_not_mixed(folder, in_a_thread):
    run("days", "--out", "out")
    before = (folder / "out" / "journal.jsonl").read_bytes()
    result = run("days", "--out", "out", "--seed", 4)
    assert (result.exit_code, "begun with seed = 0, now it is 4" in result.output) == (2, True)
    result = run("good", "--out", "out")
    assert (result.exit_code, "records of other instances" in result.output) == (2, True)
    assert (folder / "out" / "journal.jsonl").read_bytes() == before


def test_a_mended_file_is_solved_again_and_a_removed_one_left_out(folder, in_a_thread):
    run("days", "--out", "out")
    (folder / "days" / "broken.min").write_text(odd.FLOW)
    (folder / "days" / "crowded.min").unlink()
    result = run("days", "--out", "out")
    assert "1 with a record were solved again: another source" in result.output
    assert "left out of the results: 1 in out/journal.jsonl that are not among" in result.output
    statuses = {name: row["status"] for name, row in table(folder / "out").items()}
    assert statuses == {
        "days/broken.min": "optimal",
        "days/caves.min": "optimal",
        "days/more/endless.lp": "unbounded",
    }


def test_what_ran_out_of_time_is_solved_again_when_there_is_more(folder, in_a_thread):
    statuses = []
    for limit in (["--time-limit", "0"], ["--time-limit", "0"], ["--time-limit", "60"], []):
        result = run("good", "--out", "out", *limit)
        (row,) = table(folder / "out").values()
        statuses.append((result.exit_code, row["status"], "solved again" in result.output))
    assert statuses == [
        (1, "time_limit", False),
        (1, "time_limit", False),
        (0, "optimal", True),
        (0, "optimal", False),
    ]


def test_a_half_line_is_told_and_mended(folder, in_a_thread):
    run("days", "--out", "out")
    whole = (folder / "out" / "journal.jsonl").read_bytes()
    (folder / "out" / "journal.jsonl").write_bytes(whole[:-7])
    result = run("days", "--out", "out")
    assert "line 5 of out/journal.jsonl was only half written" in result.output
    assert len(table(folder / "out")) == 4


def test_a_time_limit_for_the_batch_leaves_the_rest_for_later(folder, in_a_thread):
    result = run("days", "--out", "out", "--stop-after", "0")
    assert result.exit_code == 3
    assert "time for the batch has run out; run the same command again" in result.output
    done = len(table(folder / "out"))
    assert f"{4 - done} more have no record yet" in result.output
    assert run("days", "--out", "out").exit_code == 2
    assert len(table(folder / "out")) == 4


def test_results_that_do_not_fit_on_the_disk_are_told(folder, in_a_thread, monkeypatch):
    def full(*_: object) -> None:
        raise OSError(errno.ENOSPC, "No space left on device", "out/table.csv")

    run("good", "--out", "out")
    monkeypatch.setattr(cli_batch, "write_csv", full)
    result = run("good", "--out", "out")
    assert result.exit_code == 3
    assert "out/table.csv: no space left on device" in result.output


def test_a_plan_that_cannot_be_written_is_told_beside_its_solution(
    folder, in_a_thread, monkeypatch
):
    def full(*_: object) -> None:
        raise OSError(errno.ENOSPC, "No space left on device", "plan.csv")

    monkeypatch.setattr("pyomo_latpath.batch.task.write_plan", full)
    assert run("good", "--out", "out", "--plans").exit_code == 2
    (row,) = table(folder / "out").values()
    assert (row["status"], row["objective"], row["plan"]) == ("optimal", "14.0", "")
    assert row["error"] == "its plan is not written: plan.csv: no space left on device"
    monkeypatch.undo()
    monkeypatch.chdir(folder)
    assert run("good", "--out", "out", "--plans", "--workers", "1").exit_code == 0
    (row,) = table(folder / "out").values()
    assert (row["error"], os.listdir(folder / "out" / "plans")) == ("", [row["plan"]])


def grown(journal: Path, lines: int, job: subprocess.Popen[str]) -> None:
    """Wait until a journal has so many records, or its batch has ended."""
    for _ in range(12_000):
        if job.poll() is not None:
            return
        if journal.exists() and journal.read_bytes().count(b"\n") > lines:
            return
        time.sleep(0.01)
    raise AssertionError("the batch does not get on")


def test_killed_and_started_again_it_loses_and_doubles_nothing(folder):
    count = 90
    command = [many(folder, count), "--out", "out", "--plans", "--workers", "2"]
    journal = folder / "out" / "journal.jsonl"
    for lines in (1, 20):  # far from the end, so that it cannot come first
        job = process(*command)
        grown(journal, lines, job)
        job.kill()
        job.communicate(timeout=60)
        assert job.returncode == -signal.SIGKILL
    with journal.open("rb") as file:
        kept = [line for line in file if line.endswith(b"\n")]
    job = process(*command)
    out, err = job.communicate(timeout=300)
    assert (job.returncode, f"{count} instances: {count} optimal" in out) == (0, True), err
    with journal.open("rb") as file:
        lines = list(file)
    assert lines[: len(kept)] == kept
    assert len(lines) == 1 + count
    rows = table(folder / "out")
    assert len(rows) == count
    assert sorted(os.listdir(folder / "out" / "plans")) == sorted(r["plan"] for r in rows.values())


def test_ctrl_c_leaves_what_is_finished_and_says_how_to_go_on(folder):
    job = process(many(folder, 400), "--out", "out", "--workers", "1")
    grown(folder / "out" / "journal.jsonl", 5, job)
    job.send_signal(signal.SIGINT)
    out, err = job.communicate(timeout=120)
    assert job.returncode == 130
    assert "stopped; run the same command again to go on" in err
    assert "Traceback" not in err
    done = len(table(folder / "out"))
    assert 5 <= done < 400
    assert f"{400 - done} more have no record yet" in out


def test_a_full_disk_stops_the_batch_and_keeps_what_is_finished(folder):
    resource = pytest.importorskip("resource", reason="limits of the operating system")

    def small_files() -> None:
        resource.setrlimit(resource.RLIMIT_FSIZE, (9000, 9000))

    command = [many(folder, 40), "--out", "out", "--workers", "1"]
    job = process(*command, preexec_fn=small_files)
    out, err = job.communicate(timeout=300)
    assert job.returncode == 3
    assert "out/journal.jsonl: file too large; the" in err
    assert "Traceback" not in err + out
    kept = (folder / "out" / "journal.jsonl").read_bytes()
    assert 0 < kept.count(b"\n") < 40
    assert kept.endswith(b"\n")
    job = process(*command)
    assert job.wait(timeout=300) == 0
    assert (folder / "out" / "journal.jsonl").read_bytes().startswith(kept)
    assert len(table(folder / "out")) == 40


def test_records_that_nobody_reads_end_the_batch_without_noise(folder):
    latpath = f"{sys.executable} -m pyomo_latpath"
    flows = many(folder, 30)
    line = f"{latpath} batch {flows} --out out --json --quiet | head -n 1"
    command = ["bash", "-c", line + "; exit ${PIPESTATUS[0]}"]
    done = subprocess.run(command, capture_output=True, text=True, timeout=300, cwd=folder)
    assert (done.returncode, done.stderr) == (141, "")
    lines = (folder / "out" / "journal.jsonl").read_bytes()
    assert lines.endswith(b"\n")
    assert len(lines.splitlines()) > 1
    assert run(str(flows), "--out", "out", "--workers", "1").exit_code == 0


def test_folders_that_cannot_be_made_are_wrong_usage(folder):
    for options in (("--out", "build.py/out"), ("--out", "out", "--store", "build.py/proofs")):
        result = run("good", *options)
        assert result.exit_code == 2
        assert result.output == f"latpath: cannot make the folder {options[-1]}: not a directory\n"


def test_what_is_passed_over_in_a_folder_is_counted(folder, in_a_thread):
    (folder / "good" / "notes.txt").write_text("turn the wheels")
    (folder / "good" / "old.mps").mkdir()
    told = "latpath: passed over in the folders: 2 that are no model files\n"
    assert run("good", "--out", "out").output.startswith(told)
    assert "passed over" not in run("good/caves.min", "--out", "other").output


def test_the_tables_that_the_help_shows_can_be_read(folder, in_a_thread):
    text = "minimize\n 3 van + 2 cart\nst\n need: van + cart <= 9\nend"
    (folder / "vans.lp").write_text(text)
    pairs = [line.split() for line in run("--help").output.splitlines() if "," in line]
    tables = zip(*[pair for pair in pairs if len(pair) == 2 and "," in pair[1]], strict=True)
    for k, lines in enumerate(tables):
        assert lines[0].startswith("instance,")
        (folder / f"{k}.csv").write_text("\n".join(lines))
        assert run("vans.lp", "--changes", f"{k}.csv", "--out", f"out{k}").exit_code == 0
    assert k == 1

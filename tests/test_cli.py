"""The command line: what it prints, writes and returns."""

from __future__ import annotations

import csv
import json
import os
import signal
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner, Result

from pyomo_latpath import cli, cli_output, plan_files
from pyomo_latpath.forms.from_file import read
from pyomo_latpath.integrality.finding import BlockFinding, Finding, Verdict
from pyomo_latpath.solution import RouteReport, Solution

# Wheels of cheese from a dairy (node 1) to a market (node 4); the cheapest plan costs 14.
FLOW = """p min 4 5
n 1 4
n 4 -4
a 1 2 0 4 2
a 1 3 0 2 2
a 2 3 0 2 1
a 2 4 0 3 3
a 3 4 0 5 1
"""
CROWDED = FLOW.replace("n 1 4", "n 1 7").replace("n 4 -4", "n 4 -7")

# Three cellars of which any two exclude each other: half of each is a vertex.
TRIANGLE = """Maximize
 value: a + b + c
Subject To
 ab: a + b <= 1
 bc: b + c <= 1
 ca: c + a <= 1
Binary
 a b c
End
"""
ENDLESS = "Maximize\n value: a\nSubject To\n r: a - b <= 1\nGeneral\n a b\nEnd\n"


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    for name, text in {
        "caves.min": FLOW,
        "crowded.min": CROWDED,
        "cellars.lp": TRIANGLE,
        "endless.lp": ENDLESS,
        "broken.min": FLOW.replace("a 1 3 0 2 2", "a 1 9 0 2 2"),
    }.items():
        (tmp_path / name).write_text(text)
    return tmp_path


def run(*arguments: object) -> Result:
    return CliRunner().invoke(cli.main, [str(argument) for argument in arguments])


def test_one_file_is_told_in_80_columns(folder):
    result = run("solve", folder / "caves.min")
    assert result.exit_code == 0
    lines = result.output.splitlines()
    assert lines[0] == "caves.min"
    assert max(map(len, lines)) <= 80
    entries = {line[2:13].strip(): line[13:] for line in lines[1:]}
    assert entries["size"] == "4 rows, 5 columns (5 integer), 10 nonzeros"
    assert entries["verdict"].startswith("proven: every vertex is whole (")
    assert entries["route"].startswith("path: ")
    assert entries["status"] == "optimal, checked in exact arithmetic"
    assert entries["objective"] == "14"
    assert "read" in entries["seconds"]


def test_a_fractional_model_says_so(folder):
    result = run("solve", folder / "cellars.lp")
    assert result.exit_code == 0
    assert "refuted: a fractional vertex is known" in result.output
    assert "highs: " in result.output
    assert "objective  1\n" in result.output


@pytest.mark.parametrize(
    ("name", "status"), [("crowded.min", "infeasible"), ("endless.lp", "unbounded")]
)
def test_without_an_optimum_the_exit_status_is_1(folder, name, status):
    result = run("solve", folder / name)
    assert result.exit_code == 1
    assert f"status     {status}" in result.output


def test_several_files_make_an_aligned_table(folder):
    names = ["caves.min", "cellars.lp", "crowded.min"]
    result = run("solve", *(folder / name for name in names))
    assert result.exit_code == 1
    head, *rest, last = result.output.splitlines()
    rows = [line for line in rest if not line.startswith("    ")]
    assert [row.split()[0] for row in rows] == names
    status = head.index("status")
    assert [row[status:].split()[0] for row in rows] == ["optimal", "optimal", "infeasible"]
    end = head.index("objective") + len("objective")
    assert [row[:end].split()[-1] for row in rows] == ["14", "1", "-"]
    assert last == "3 files: 2 optimal, 1 infeasible"


def test_files_of_one_name_are_told_apart_by_their_paths(folder):
    (folder / "other").mkdir()
    (folder / "other" / "caves.min").write_text(FLOW)
    paths = [str(folder / "caves.min"), str(folder / "other" / "caves.min")]
    result = run("solve", *paths)
    shown = [line.split()[0] for line in result.output.splitlines() if line.startswith("/")]
    assert shown == paths


def test_a_bad_file_does_not_stop_the_others(folder):
    result = run("solve", folder / "broken.min", folder / "none.lp", folder / "caves.min")
    assert result.exit_code == 2
    assert f"latpath: {folder / 'broken.min'}, line 5: the head 9 is not a node" in result.output
    assert f"latpath: {folder / 'none.lp'}: no such file or directory" in result.output
    assert "3 files: 2 error, 1 optimal" in result.output


def test_a_defect_in_solving_is_shown_and_does_not_stop_the_others(folder, monkeypatch):
    solve_form = cli.solve_form

    def breaks_on_flows(form, **options):
        if form.shape == (4, 5):
            raise RuntimeError("a wheel came off")
        return solve_form(form, **options)

    monkeypatch.setattr(cli, "solve_form", breaks_on_flows)
    result = run("solve", folder / "caves.min", folder / "cellars.lp")
    assert result.exit_code == 2
    assert "Traceback" in result.output
    assert f"latpath: {folder / 'caves.min'}: RuntimeError: a wheel came off" in result.output
    assert "2 files: 1 error, 1 optimal" in result.output


def test_options_reach_the_solver(folder, monkeypatch):
    met = {}

    def remember(form, **options):
        met.update(options)
        raise RuntimeError("enough seen")

    monkeypatch.setattr(cli, "solve_form", remember)
    options = [
        "--time-limit",
        "2.5",
        "--rel-gap",
        "0.01",
        "--threads",
        "3",
        "--samples",
        "7",
        "--seed",
        "5",
    ]
    run("solve", folder / "caves.min", *options)
    assert met.pop("compile_seconds") > 0
    assert met == {"time_limit": 2.5, "rel_gap": 0.01, "threads": 3, "samples": 7, "seed": 5}


@pytest.mark.parametrize(
    "arguments",
    [
        [],
        ["caves.min", "--time-limit", "-1"],
        ["caves.min", "--rel-gap", "much"],
        ["caves.min", "--threads", "0"],
        ["caves.min", "--samples", "-1"],
        ["caves.min", "cellars.lp", "--plan", "plan.csv"],
        ["caves.min", "cellars.lp", "--certificate", "proof.json"],
        ["caves.min", "--plan", "nowhere/plan.csv"],
        ["caves.min", "--sample", "3", "--unknown"],
    ],
)
def test_wrong_usage_is_exit_status_2(folder, monkeypatch, arguments):
    monkeypatch.chdir(folder)
    assert run("solve", *arguments).exit_code == 2


def test_help_tells_the_exit_statuses():
    text = run("solve", "--help").output
    assert "Exit status:\n    0    every file was solved to optimality\n    1    " in text
    assert "\n    2    wrong usage, or some file could not be read or written" in text
    assert all(field in text for field in cli_output.FIELDS)


def test_json_is_one_object_a_line(folder):
    process = subprocess.run(
        [sys.executable, "-m", "pyomo_latpath", "solve", "--json"]
        + [str(folder / name) for name in ("caves.min", "broken.min", "endless.lp")],
        capture_output=True,
        text=True,
        timeout=120,
    )
    assert process.returncode == 2
    assert "line 5: the head 9" in process.stderr
    flow, broken, endless = [json.loads(line) for line in process.stdout.splitlines()]
    assert (flow["instance"], flow["rows"], flow["columns"]) == ("caves.min", 4, 5)
    assert (flow["integers"], flow["nonzeros"]) == (5, 10)
    assert (flow["verdict"], flow["route"], flow["status"]) == ("proven", "path", "optimal")
    assert (flow["objective"], flow["bound"], flow["proof"]) == (14, 14, "exact")
    assert flow["steps"] <= flow["report"]["walk"]["step_bound"]
    assert set(flow["seconds"]) == {"compile", "assess", "solve", "proof"}
    assert flow["error"] is None
    assert (broken["status"], "line 5" in broken["error"]) == ("error", True)
    assert list(broken) == list(flow) == list(cli_output.FIELDS)
    assert (endless["status"], endless["objective"]) == ("unbounded", None)


def test_the_plan_is_written_by_name(folder):
    plan = folder / "plan.csv"
    result = run("solve", folder / "caves.min", "--plan", plan)
    assert result.exit_code == 0
    with plan.open(newline="") as file:
        head, *rows = csv.reader(file)
    assert head == ["column", "value"]
    form = read(folder / "caves.min")
    assert [name for name, _ in rows] == list(form.col_names)
    x = np.array([int(value) for _, value in rows])
    assert form.cost @ x == 14
    assert np.array_equal(form.matrix @ x, form.row_lower)
    assert {path.name for path in folder.iterdir() if "plan" in path.name} == {"plan.csv"}
    assert plan.stat().st_mode == (folder / "caves.min").stat().st_mode


def test_without_a_plan_nothing_is_written(folder):
    plan = folder / "plan.csv"
    plan.write_text("yesterday's")
    result = run("solve", folder / "crowded.min", "--plan", plan)
    assert result.exit_code == 1
    assert f"{plan} is not written: there is no plan (status infeasible)" in result.output
    assert plan.read_text() == "yesterday's"


def test_a_plan_that_cannot_be_finished_leaves_nothing_behind(folder, monkeypatch):
    plan = folder / "plan.csv"
    plan.write_text("yesterday's")
    before = sorted(folder.iterdir())

    def full(*_):
        raise OSError(28, "No space left on device", str(plan))

    monkeypatch.setattr(os, "replace", full)
    result = run("solve", folder / "caves.min", "--plan", plan)
    assert result.exit_code == 2
    assert f"latpath: {plan}: no space left on device" in result.output
    assert plan.read_text() == "yesterday's"
    assert sorted(folder.iterdir()) == before


def test_a_written_certificate_can_be_checked(folder):
    proof = folder / "proof.json"
    assert run("solve", folder / "caves.min", "--certificate", proof).exit_code == 0
    result = run("check", proof, folder / "caves.min")
    assert result.exit_code == 0
    assert f"every vertex of {folder / 'caves.min'} is whole (1 block)" in result.output


def test_a_certificate_does_not_pass_for_another_model(folder):
    proof = folder / "proof.json"
    run("solve", folder / "caves.min", "--certificate", proof)
    result = run("check", proof, folder / "crowded.min")
    assert result.exit_code == 1
    assert "does not prove" in result.output


def test_a_changed_certificate_does_not_pass(folder):
    proof = folder / "proof.json"
    run("solve", folder / "caves.min", "--certificate", proof)
    data = json.loads(proof.read_text())
    data["blocks"][0]["columns"].reverse()
    proof.write_text(json.dumps(data))
    assert run("check", proof, folder / "caves.min").exit_code == 1
    proof.write_text("[]")
    assert run("check", proof, folder / "caves.min").exit_code == 1


@pytest.mark.parametrize("content", [b"{'no': json}", b"\xff\xfe\x00", None])
def test_an_unreadable_certificate_is_exit_status_2(folder, content):
    proof = folder / "proof.json"
    if content is not None:
        proof.write_bytes(content)
    result = run("check", proof, folder / "caves.min")
    assert result.exit_code == 2
    assert f"latpath: {proof}" in result.output


def test_what_is_no_certificate_is_told_with_what_writes_one(folder):
    output = run("check", folder / "cellars.lp", folder / "caves.min").output
    assert "cellars.lp, line 1: no JSON (expecting value), so no certificate" in output
    assert "`latpath solve FILE --certificate CERTIFICATE` writes one" in output


@pytest.mark.parametrize(
    ("command", "status", "told"),
    [
        ("solve FILE FILE FILE --json | head -n 1", 141, ""),
        ("solve FILE > /dev/full", 2, "no space"),
    ],
)
def test_output_that_nobody_takes_ends_without_noise(folder, command, status, told):
    latpath = f"{sys.executable} -m pyomo_latpath "
    line = latpath + command.replace("FILE", str(folder / "caves.min")) + "; exit ${PIPESTATUS[0]}"
    done = subprocess.run(["bash", "-c", line], capture_output=True, text=True, timeout=120)
    assert done.returncode == status
    assert done.stderr.count("\n") == bool(told)
    assert told in done.stderr


@pytest.mark.skipif(os.name == "nt", reason="Ctrl-C reaches other processes differently there")
def test_ctrl_c_while_the_package_is_imported_just_ends_the_command(tmp_path):
    (tmp_path / "pyomo_latpath").mkdir()
    slow = "import time\nprint('importing', flush=True)\ntime.sleep(60)\n"
    (tmp_path / "pyomo_latpath" / "__init__.py").write_text(slow)
    path = os.pathsep.join([str(tmp_path), str(Path(__file__).parents[1])])
    with subprocess.Popen(
        [sys.executable, "-c", "import latpath_command as command; command.main()"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        cwd=tmp_path,
        env=os.environ | {"PYTHONPATH": path},
    ) as job:
        assert job.stdout.readline() == "importing\n"
        job.send_signal(signal.SIGINT)
        assert job.communicate(timeout=60) == ("", "")
    assert job.returncode == -signal.SIGINT


def test_ctrl_c_ends_a_command_quietly(folder, monkeypatch):
    def interrupted(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr(cli, "solve_form", interrupted)
    result = run("solve", folder / "caves.min")
    assert (result.exit_code, result.output) == (130, "")


def test_an_unreadable_model_is_exit_status_2(folder):
    proof = folder / "proof.json"
    run("solve", folder / "caves.min", "--certificate", proof)
    assert run("check", proof, folder / "broken.min").exit_code == 2


def test_without_a_proof_no_certificate_is_written(folder):
    proof = folder / "proof.json"
    result = run("solve", folder / "cellars.lp", "--certificate", proof)
    assert result.exit_code == 1
    assert f"{proof} is not written: 1 of 1 blocks have no certificate" in result.output
    assert not proof.exists()


@pytest.fixture
def sampled(folder: Path) -> cli_output.Outcome:
    """A result that rests on 12 vertices of one block; another block is proven."""
    form = read(folder / "caves.min")
    none = np.zeros(0, dtype=np.int64)
    proven = BlockFinding(none, none, Verdict.PROVEN, "trivial", None, None, 3, "it is proven")
    block = replace(proven, verdict=Verdict.SAMPLED, structure=None, samples=12, reason="sampled")
    report = RouteReport(
        route="path",
        why="The optimum of the relaxation is whole.",
        finding=Finding((proven, block), 0, 0),
        walk=None,
        proof="exact",
        seconds={"compile": 0.25, "assess": 0.5, "solve": 1.0, "proof": 0.0},
        blame=tuple(f"row {i}" for i in range(8)),
    )
    x = np.array([2, 2, 0, 2, 2.5])
    duals = np.zeros(4), np.zeros(5)
    solution = Solution("optimal", x, 14.5, 14.5, *duals, None, None, report)
    return cli_output.Outcome("caves.min", form, solution)


def test_a_verdict_that_rests_on_samples_is_told_as_such(sampled):
    sentence = "no fractional vertex among the 12 looked at; this is no proof"
    assert sentence in " ".join(" ".join(cli_output.describe(sampled)).split())
    assert sentence in " ".join(" ".join(cli_output.table_rows(sampled, ["caves.min"])).split())
    assert json.loads(cli_output.json_line(sampled))["samples"] == 12


def test_a_long_conflict_is_cut_short_and_counted(sampled):
    text = "\n".join(cli_output.describe(sampled))
    assert "conflict   row 0, row 1, row 2, row 3, row 4 and 3 more" in text
    assert "1.750 (read 0.250, assess 0.500, solve 1.000, proof 0.000)" in text


def test_a_plan_keeps_values_that_are_not_whole(sampled, tmp_path):
    plan_files.write_plan(tmp_path / "plan.csv", sampled.form, sampled.solution)
    assert (tmp_path / "plan.csv").read_text().splitlines() == [
        "column,value",
        "a1 (1->2),2",
        "a2 (1->3),2",
        "a3 (2->3),0",
        "a4 (2->4),2",
        "a5 (3->4),2.5",
    ]

"""The command `latpath explain`: what it prints, writes and returns."""

from __future__ import annotations

import json
import os
import pty
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from pyomo_latpath import cli, cli_explain

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
WHOLE = TRIANGLE.replace(" ca: c + a <= 1\n", "")
CROWDED = TRIANGLE.replace(" ca: c + a <= 1\n", " ca: c + a >= 3\n")


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    for name, text in {
        "cellars.lp": TRIANGLE,
        "whole.lp": WHOLE,
        "crowded.lp": CROWDED,
        "broken.lp": "Maximize\n value: a + \nSubject <=",
    }.items():
        (tmp_path / name).write_text(text)
    return tmp_path


def run(*arguments: object) -> Result:
    return CliRunner().invoke(cli.main, ["explain", *(str(argument) for argument in arguments)])


def test_one_file_is_told_on_one_screen(folder):
    result = run(folder / "cellars.lp")
    assert result.exit_code == 0
    lines = result.stdout.splitlines()
    assert lines[0] == "cellars.lp"
    assert "3 of 3 integer columns are fractional" in result.stdout
    assert lines.index("") <= 25
    assert max(map(len, lines)) <= 80
    assert result.stderr == ""


def test_whole_and_infeasible_models_are_explained_too(folder):
    result = run(folder / "whole.lp", folder / "crowded.lp")
    assert result.exit_code == 0
    assert "Every vertex is whole" in result.stdout
    assert "No plan meets all rows" in result.stdout


def test_json_has_a_line_for_each_file(folder):
    result = run("--json", *(folder / f"{name}.lp" for name in ("cellars", "broken", "whole")))
    assert result.exit_code == 2
    told = [json.loads(line) for line in result.stdout.splitlines()]
    assert [each["instance"] for each in told] == ["cellars.lp", "broken.lp", "whole.lp"]
    assert [each["error"] is None for each in told] == [True, False, True]
    assert told[0]["fractional"]["count"] == 3
    assert told[0]["gap"]["absolute"] == pytest.approx(0.5)
    assert told[0]["complete"] in (True, False)


def test_a_page_is_written_whole(folder):
    page = folder / "why.html"
    assert run(folder / "cellars.lp", "--html", page).exit_code == 0
    text = page.read_text(encoding="utf-8")
    assert text.startswith("<!DOCTYPE html>")
    assert text.rstrip().endswith("</html>")
    assert "latpath explain: cellars.lp" in text
    assert not [each for each in folder.iterdir() if each.name.startswith(".")]


def test_a_file_name_may_hold_any_bytes(folder):
    path = folder / os.fsdecode(b"caf\xe9\n.lp")
    path.write_text(TRIANGLE)
    command = [sys.executable, "-m", "pyomo_latpath", "explain", str(path), "--html", "why.html"]
    done = subprocess.run(command, cwd=folder, capture_output=True, timeout=120)
    assert done.returncode == 0, done.stderr.decode()
    assert done.stdout.splitlines()[0] == rb"caf\udce9\n.lp"
    assert "caf\\udce9\\n.lp" in (folder / "why.html").read_text(encoding="utf-8")


def test_a_page_that_fails_leaves_the_old_one(folder, monkeypatch):
    page = folder / "why.html"
    page.write_text("old")

    def fail(*_: object) -> str:
        raise OSError(28, "No space left on device", str(page))

    monkeypatch.setattr(cli_explain, "to_html", fail)
    result = run(folder / "cellars.lp", "--html", page)
    assert result.exit_code == 2
    assert "no space left on device" in result.stderr
    assert page.read_text() == "old"
    assert not [each for each in folder.iterdir() if each.name.startswith(".")]


def test_a_missing_folder_is_refused_before_any_work(folder, monkeypatch):
    monkeypatch.setattr(cli_explain, "read", lambda path: pytest.fail("work has begun"))
    result = run(folder / "cellars.lp", "--html", folder / "absent" / "why.html")
    assert result.exit_code == 2
    assert "there is no folder" in result.stderr


def test_a_page_takes_one_file_only(folder):
    result = run(folder / "cellars.lp", folder / "whole.lp", "--html", folder / "why.html")
    assert result.exit_code == 2
    assert "--html takes one FILE only" in result.stderr


def test_a_bad_file_does_not_stop_the_others(folder):
    result = run(folder / "broken.lp", folder / "absent.lp", folder / "whole.lp")
    assert result.exit_code == 2
    assert "broken.lp, line" in result.stderr
    assert "absent.lp: no such file" in result.stderr
    assert "Every vertex is whole" in result.stdout


def test_a_defect_of_ours_is_shown_and_does_not_stop_the_others(folder, monkeypatch):
    inner = cli_explain.explain_form

    def fail_once(form: object, **options: object) -> object:
        monkeypatch.setattr(cli_explain, "explain_form", inner)
        raise ZeroDivisionError("made up")

    monkeypatch.setattr(cli_explain, "explain_form", fail_once)
    result = run(folder / "cellars.lp", folder / "whole.lp")
    assert result.exit_code == 2
    assert "ZeroDivisionError: made up" in result.stderr
    assert "Every vertex is whole" in result.stdout


def test_without_time_the_exit_status_is_1(folder):
    result = run(folder / "cellars.lp", "--time-limit", 0)
    assert result.exit_code == 1
    assert "left open" in result.stdout


def test_progress_goes_to_a_terminal_only(folder):
    command = [sys.executable, "-m", "pyomo_latpath", "explain", str(folder / "cellars.lp")]
    leader, follower = pty.openpty()
    done = subprocess.run(command, stdout=subprocess.PIPE, stderr=follower, timeout=120, check=True)
    os.close(follower)
    shown = os.read(leader, 100_000).decode()
    os.close(leader)
    assert "latpath: assessing the model" in shown
    assert b"assessing" not in done.stdout


def test_ctrl_c_gives_the_best_answer_so_far(folder, tmp_path):
    """Interrupted in the middle of a question, the answers to the earlier ones are told."""
    script = tmp_path / "slow.py"
    script.write_text(
        "import sys, time\n"
        "from pyomo_latpath.explain import explain\n"
        "from pyomo_latpath import cli\n"
        "def slow(*_):\n"
        "    print('looking', file=sys.stderr, flush=True)\n"
        "    time.sleep(60)\n"
        "explain.find_remedies = slow\n"
        "cli.main(sys.argv[1:])\n"
    )
    files = [str(folder / "cellars.lp"), str(folder / "whole.lp")]
    command = [sys.executable, str(script), "explain", *files]
    with subprocess.Popen(
        command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    ) as running:
        assert running.stderr.readline() == "looking\n"
        time.sleep(0.1)
        running.send_signal(signal.SIGINT)
        told, _ = running.communicate(timeout=60)
    assert running.returncode == 1
    assert "3 of 3 integer columns are fractional" in told
    assert "interrupted" in told
    assert "whole.lp" not in told

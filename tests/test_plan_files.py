"""Plans from CSV files and moves into them, and both on the command line."""

from __future__ import annotations

import csv
import json

import numpy as np
import pytest
from click.testing import CliRunner

from pyomo_latpath import cli
from pyomo_latpath.forms.file_text import ModelFileError
from pyomo_latpath.forms.from_file import read
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.plan_files import read_plan, write_moves, write_plan
from pyomo_latpath.today import solve

# Two keepers for two caves each; the second cave is the better one for both.
KEEPERS = """Minimize
 hours: 5 anna_alp + 3 anna_dorf + 9 beat_alp + 1 beat_dorf
Subject To
 anna: anna_alp + anna_dorf = 1
 beat: beat_alp + beat_dorf = 1
Binary
 anna_alp anna_dorf beat_alp beat_dorf
End
"""
TODAY = "column,value\nanna_alp,1\nanna_dorf,0\nbeat_dorf,0\nbeat_alp,1\n"
MOVES = [
    ["1", "yes", "beat_alp", "1", "0", "8", "6"],
    ["1", "yes", "beat_dorf", "0", "1", "8", "6"],
    ["2", "no", "anna_alp", "1", "0", "2", "4"],
    ["2", "no", "anna_dorf", "0", "1", "2", "4"],
]


@pytest.fixture
def folder(tmp_path):
    (tmp_path / "keepers.lp").write_text(KEEPERS)
    (tmp_path / "today.csv").write_text(TODAY)
    return tmp_path


@pytest.fixture
def form(folder):
    return read(folder / "keepers.lp")


def rows_of(path):
    with path.open(newline="") as file:
        return list(csv.reader(file))


def run(*arguments):
    return CliRunner().invoke(cli.main, [str(argument) for argument in arguments])


# --- plans in -----------------------------------------------------------------------------------


def test_lines_may_come_in_any_order(folder, form):
    plan = dict(zip(form.col_names, read_plan(folder / "today.csv", form), strict=True))
    assert plan == {"anna_alp": 1, "anna_dorf": 0, "beat_alp": 1, "beat_dorf": 0}


def test_what_is_written_is_read(tmp_path):
    names = ['a "wheel"', "cave, upper", "tomme\nbrie"]
    form = LinearForm.from_arrays(
        [[1, 1, 1]],
        row_lower=2.7,
        row_upper=2.7,
        col_lower=0,
        col_upper=[1, 1, 2],
        cost=[1, 1, 2],
        integer=[True, True, False],
        col_names=names,
    )
    solution = solve(form)
    write_plan(tmp_path / "plan.csv", form, solution)
    assert np.array_equal(read_plan(tmp_path / "plan.csv", form), solution.x)


@pytest.mark.parametrize(
    ("text", "line", "reason"),
    [
        ("", 1, "the header must be column,value"),
        ("name,value\n", 1, "the header must be column,value"),
        (TODAY.replace("anna_dorf,0", "anna_dorf"), 3, "1 fields"),
        (TODAY.replace("anna_dorf,0", "anna_dorf,0,0"), 3, "3 fields"),
        (TODAY.replace("anna_dorf", "anna_inn"), 3, "no column 'anna_inn'"),
        (TODAY + "beat_alp,1\n", 6, "'beat_alp' has a value already"),
        (TODAY.replace("beat_dorf,0", "beat_dorf,none"), 4, "'none' is no number"),
        (TODAY.replace("beat_dorf,0", "beat_dorf,nan"), 4, "'nan' is no number"),
        (TODAY.replace("beat_dorf,0", "beat_dorf,inf"), 4, "'inf' is no number"),
        (TODAY.replace("beat_dorf,0\n", ""), None, "no value for column 'beat_dorf'"),
        (TODAY + '"beat', 6, "no CSV text"),
    ],
)
def test_a_plan_that_cannot_be_read_says_where(folder, form, text, line, reason):
    path = folder / "plan.csv"
    path.write_text(text)
    with pytest.raises(ModelFileError, match=reason) as caught:
        read_plan(path, form)
    assert (caught.value.path, caught.value.line) == (str(path), line)


def test_bytes_that_are_no_text_are_refused(folder, form):
    (folder / "plan.csv").write_bytes(b"column,value\n\xff,1\n")
    with pytest.raises(ModelFileError, match="no CSV text"):
        read_plan(folder / "plan.csv", form)


def test_blank_lines_are_passed_over(folder, form):
    (folder / "plan.csv").write_text(TODAY.replace("\n", "\r\n\r\n"))
    assert read_plan(folder / "plan.csv", form).sum() == 2


# --- moves out ----------------------------------------------------------------------------------


def test_moves_are_written_made_or_not(folder, form):
    start = read_plan(folder / "today.csv", form)
    write_moves(folder / "moves.csv", form, solve(form, start=start, max_moves=1))
    head, *lines = rows_of(folder / "moves.csv")
    assert head == ["move", "made", "column", "before", "after", "gain", "objective_after"]
    assert lines == MOVES


def test_a_repair_is_move_0(folder, form):
    start = read_plan(folder / "today.csv", form) * [1, 1, 0, 1]
    solution = solve(form, start=start, repair_start=True)
    write_moves(folder / "moves.csv", form, solution)
    assert rows_of(folder / "moves.csv")[1][:2] == ["0", "yes"]


def test_without_a_plan_no_moves_are_written(tmp_path):
    form = LinearForm.from_arrays(
        [[1, 1]], row_lower=3, row_upper=3, col_lower=0, col_upper=1, cost=0
    )
    with pytest.raises(ValueError, match="no plan"):
        write_moves(tmp_path / "moves.csv", form, solve(form))
    assert list(tmp_path.iterdir()) == []


# --- the command line ---------------------------------------------------------------------------


def test_a_few_moves_on_the_command_line(folder):
    plan, moves = folder / "next.csv", folder / "moves.csv"
    arguments = ("solve", folder / "keepers.lp", "--from", folder / "today.csv")
    result = run(*arguments, "--max-moves", 1, "--moves", moves, "--plan", plan)
    assert result.exit_code == 0
    entries = {line[2:13].strip(): line[13:] for line in result.output.splitlines()[1:]}
    assert entries["status"] == "limit"
    assert entries["objective"] == "6 (bound 4)"
    assert entries["moves"] == "1 from the start, worth 8; 1 left, worth 2"
    assert rows_of(moves)[1:] == MOVES
    result = run("solve", folder / "keepers.lp", "--from", plan, "--moves", moves)
    assert result.exit_code == 0
    assert "moves      1 from the start, worth 2\n" in result.output
    assert len(rows_of(moves)) == 3


def test_json_tells_the_moves(folder):
    result = run("solve", folder / "keepers.lp", "--from", folder / "today.csv", "--json")
    report = json.loads(result.output)["report"]
    assert [move["gain"] for move in report["moves"]] == [8, 2]


def test_a_start_that_is_no_plan_names_its_file(folder):
    (folder / "today.csv").write_text(TODAY.replace("anna_alp,1", "anna_alp,0"))
    arguments = ("solve", folder / "keepers.lp", "--from", folder / "today.csv")
    result = run(*arguments)
    assert result.exit_code == 2
    expected = f"latpath: {folder / 'today.csv'}: the start is not feasible: row 'anna' is at 0"
    assert expected in result.output
    result = run(*arguments, "--repair-start")
    assert result.exit_code == 0
    assert "repair     values of the start changed: 1" in result.output


@pytest.mark.parametrize("text", [None, "no,plan\n"])
def test_a_start_that_cannot_be_read_is_exit_status_2(folder, text):
    path = folder / "lost.csv"
    if text is not None:
        path.write_text(text)
    result = run("solve", folder / "keepers.lp", "--from", path)
    assert result.exit_code == 2
    assert "lost.csv" in result.output


@pytest.mark.parametrize(
    "arguments",
    [
        ["--moves", "moves.csv"],
        ["--max-moves", "3"],
        ["--repair-start"],
        ["--from", "today.csv", "--max-moves", "-1"],
        ["--from", "today.csv", "keepers.lp"],
        ["--from", "today.csv", "--moves", "nowhere/moves.csv"],
    ],
)
def test_wrong_usage_is_exit_status_2(folder, monkeypatch, arguments):
    monkeypatch.chdir(folder)
    assert run("solve", "keepers.lp", *arguments).exit_code == 2

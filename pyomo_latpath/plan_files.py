"""Plans and moves as CSV files: today's plan in, the moves that lead on from it out."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np

from .files import whole_file
from .forms.file_text import ModelFileError
from .forms.linear_form import Floats, LinearForm
from .solution import Move, Solution

PLAN_HEAD = ["column", "value"]
MOVES_HEAD = ["move", "made", "column", "before", "after", "gain", "objective_after"]


def read_plan(path: Path, form: LinearForm) -> Floats:
    """Read a plan: CSV with the header `column,value` and one line for each column.

    Parameters
    ----------
    path : Path
    form : LinearForm

    Returns
    -------
    ndarray, shape (n,), float64

    Raises
    ------
    ModelFileError
        Names file and line: another header, a line of another kind, a column that is unknown,
        there twice or missing, or a value that is no finite number.
    OSError
        If the file cannot be read.
    """
    place = {name: j for j, name in enumerate(form.col_names)}
    x = np.full(form.shape[1], np.nan)
    with path.open(encoding="utf-8", newline="") as file:
        lines = csv.reader(file, strict=True)
        try:
            head = next(lines, [])
            if head != PLAN_HEAD:
                raise ModelFileError(path, 1, f"the header must be {','.join(PLAN_HEAD)}")
            for line in lines:
                _read_line(path, lines.line_num, line, place, x)
        except (csv.Error, UnicodeDecodeError) as error:
            reason = str(error) if isinstance(error, csv.Error) else "it is not in UTF-8"
            raise ModelFileError(path, lines.line_num, f"no CSV text ({reason})") from error
    missing = np.flatnonzero(np.isnan(x))
    if missing.size:
        name = form.col_names[int(missing[0])]
        raise ModelFileError(path, None, f"there is no value for column {name!r}")
    return x


def _read_line(path: Path, number: int, line: list[str], place: dict[str, int], x: Floats) -> None:
    if not line:
        return
    if len(line) != len(PLAN_HEAD):
        raise ModelFileError(path, number, f"{len(line)} fields; a column and its value are two")
    name, text = line
    if name not in place:
        raise ModelFileError(path, number, f"the model has no column {name!r}")
    if not np.isnan(x[place[name]]):
        raise ModelFileError(path, number, f"column {name!r} has a value already")
    try:
        value = float(text)
    except ValueError:
        value = np.nan
    if not np.isfinite(value):
        raise ModelFileError(path, number, f"{text!r} is no number")
    x[place[name]] = value


def write_plan(path: Path, form: LinearForm, solution: Solution) -> None:
    """Write the plan as CSV with the header `column,value`, whole or not at all.

    Raises
    ------
    ValueError
        When there is no plan.
    """
    if solution.x is None:
        raise ValueError(f"there is no plan (status {solution.status})")
    with whole_file(path) as file:
        rows = csv.writer(file, lineterminator="\n")
        rows.writerow(["column", "value"])
        for name, value in zip(form.col_names, solution.x.tolist(), strict=True):
            rows.writerow([name, _number(value)])


def write_moves(path: Path, form: LinearForm, solution: Solution) -> None:
    """Write the moves from the start as CSV, whole or not at all.

    A line for each column that a move changes: the number of the move, whether it was made
    (`yes`; `no` for those that a limit on the moves left out), the column, its value before and
    after, and the move's gain and the objective after it. Move 0 is what made the start
    feasible, where that was needed.

    Raises
    ------
    ValueError
        When there is no plan.
    """
    del form
    if solution.x is None:
        raise ValueError(f"there is no plan (status {solution.status})")
    report = solution.report
    made, further = report.moves, report.further_moves
    with whole_file(path) as file:
        rows = csv.writer(file, lineterminator="\n")
        rows.writerow(MOVES_HEAD)
        if report.repair is not None:
            rows.writerows(_lines(0, "yes", report.repair))
        for number, move in enumerate((*made, *further), 1):
            rows.writerows(_lines(number, "yes" if number <= len(made) else "no", move))


def _lines(number: int, made: str, move: Move) -> list[list[object]]:
    ends = [_number(move.gain), _number(move.objective_after)]
    triples = zip(move.names, move.before.tolist(), move.after.tolist(), strict=True)
    return [[number, made, name, _number(a), _number(b), *ends] for name, a, b in triples]


def _number(value: float) -> int | str:
    whole = float(value).is_integer() and abs(value) < 2**53
    return int(value) if whole else repr(value)

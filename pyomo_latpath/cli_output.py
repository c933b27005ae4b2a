"""What the command line prints and writes: records, tables, plans."""

from __future__ import annotations

import json
import math
import textwrap
from collections import Counter
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from .certificates import Certificate, fingerprint
from .console import WIDTH, entry, number
from .files import whole_file
from .forms.linear_form import LinearForm
from .integrality.finding import Finding, Verdict
from .integrality.sentences import FEW, describe_part
from .solution import RouteReport, Solution

#: Names shown of a conflict before the rest is only counted.
BLAME_SHOWN = 5
#: Summands shown of a matrix that is a sum.
SUMMANDS_SHOWN = 6

#: Fields of a record, see `record`.
FIELDS = (
    "instance",
    "status",
    "rows",
    "columns",
    "integers",
    "nonzeros",
    "verdict",
    "structure",
    "samples",
    "route",
    "why",
    "objective",
    "bound",
    "proof",
    "steps",
    "pivots",
    "seconds",
    "report",
    "error",
)

#: Title and width of each column of the table for several files, after the name.
TABLE = (
    ("rows", 8),
    ("columns", 8),
    ("integer", 8),
    ("verdict", -9),
    ("structure", -10),
    ("route", -5),
    ("status", -10),
    ("objective", 16),
    ("steps", 9),
    ("read", 7),
    ("assess", 7),
    ("solve", 7),
    ("proof", 7),
)


@dataclass(frozen=True, eq=False)
class Outcome:
    """What became of one file: a solution, or an error."""

    name: str
    form: LinearForm | None = None
    solution: Solution | None = None
    error: str | None = None

    @property
    def status(self) -> str:
        return "error" if self.solution is None else self.solution.status


def record(outcome: Outcome) -> dict[str, Any]:
    """Return one flat record for machines, with all of `FIELDS`.

    What is not known is None. `status` is 'error' where `error` has a sentence; `samples`
    counts the vertices on which a verdict 'sampled' rests; `seconds` are by stage, with the
    reading of the file as 'compile'; `report` is the whole `RouteReport.to_dict()`.
    """
    form, solution = outcome.form, outcome.solution
    fields: dict[str, Any] = dict.fromkeys(FIELDS)
    fields |= {"instance": outcome.name, "status": outcome.status, "error": outcome.error}
    if form is not None:
        fields["rows"], fields["columns"] = form.shape
        fields["integers"] = int(form.integer.sum())
        fields["nonzeros"] = int(form.matrix.nnz)
    if solution is not None:
        report = solution.report
        fields["verdict"] = report.finding.verdict.value
        fields["structure"] = ", ".join(report.finding.structures) or None
        fields["samples"] = report.finding.samples
        fields["route"], fields["why"] = report.route, report.why
        fields["objective"], fields["bound"] = _known(solution.objective), _known(solution.bound)
        fields["proof"] = report.proof
        fields["seconds"] = dict(report.seconds)
        fields["report"] = report.to_dict()
        if report.walk is not None:
            fields["steps"], fields["pivots"] = report.walk.steps, report.walk.pivots
    return fields


def json_line(outcome: Outcome) -> str:
    """The record as one line of JSON."""
    return json.dumps(_plain(record(outcome)), allow_nan=False)


def describe(outcome: Outcome) -> Iterator[str]:
    """One file's result on lines of at most 80 columns."""
    form, solution = outcome.form, outcome.solution
    if form is None or solution is None:
        return
    report = solution.report
    yield outcome.name
    rows, columns = form.shape
    yield from entry(
        "size",
        f"{rows} rows, {columns} columns ({int(form.integer.sum())} integer), "
        f"{form.matrix.nnz} nonzeros",
    )
    yield from entry("verdict", verdict_words(report.finding))
    yield from sum_words(report.finding)
    yield from entry("route", f"{report.route}: {report.why}")
    exact = "checked in exact arithmetic" if report.proof == "exact" else "within tolerances"
    settled = solution.status in ("optimal", "infeasible", "unbounded")
    yield from entry("status", f"{solution.status}, {exact}" if settled else solution.status)
    if report.blame:
        yield from entry("conflict", _some(report.blame))
    if solution.x is not None:
        gap = "" if solution.status == "optimal" else f" (bound {number(solution.bound)})"
        yield from entry("objective", number(solution.objective) + gap)
    if report.repair is not None:
        yield from entry("repair", f"values of the start changed: {len(report.repair.names)}")
    if report.moves or report.further_moves:
        yield from entry("moves", _moves_words(report))
    if report.largest_violation > 0:
        yield from entry("violation", f"a row or bound is missed by {report.largest_violation:.3g}")
    if report.walk is not None:
        walk = report.walk
        bound = "" if walk.step_bound is None else f", never more than {walk.step_bound} steps"
        yield from entry("walk", f"{_steps(solution)} steps, {walk.pivots} pivots{bound}")
        if walk.note:
            yield from entry("", walk.note)
    parts = ", ".join(f"{name} {seconds:.3f}" for name, seconds in _stages(solution))
    yield from entry("seconds", f"{sum(report.seconds.values()):.3f} ({parts})")


def verdict_words(finding: Finding) -> str:
    """The verdict as a clause, plain about what it rests on.

    Examples
    --------
    >>> verdict_words(Finding((), 0, 0))
    'proven: every vertex is whole'
    """
    structures = ", ".join(finding.structures)
    if finding.verdict is Verdict.PROVEN:
        return "proven: every vertex is whole" + (f" ({structures})" if structures else "")
    if finding.verdict is Verdict.SAMPLED:
        return (
            f"sampled: no fractional vertex among the {finding.samples} looked at; this is no proof"
        )
    if finding.verdict is Verdict.REFUTED:
        return "refuted: a fractional vertex is known"
    return "undecided: neither a proof nor a fractional vertex was found"


def sum_words(finding: Finding) -> Iterator[str]:
    """What the largest block that is a sum is put together from."""
    sums = [block for block in finding.blocks if block.structure == "sum"]
    largest = max(sums, key=lambda block: block.columns.size, default=None)
    if largest is None or largest.certificate is None:
        return
    part = largest.certificate.blocks[0].part
    whole, *summands = describe_part(part, largest.rows.size, largest.columns.size)
    yield from entry("sum", whole)
    if len(summands) > FEW:  # else they are told already
        rest = len(summands) - SUMMANDS_SHOWN
        for sentence in summands[:SUMMANDS_SHOWN] if rest > 1 else summands:
            yield from entry("", sentence)
        if rest > 1:
            yield from entry("", f"and {rest} further summands")


def _moves_words(report: RouteReport) -> str:
    """How many moves were made, and what they and the others are worth."""
    made, further = report.moves, report.further_moves
    gain = number(math.fsum(move.gain for move in made))
    if not further:
        return f"{len(made)} from the start, worth {gain}"
    left = number(math.fsum(move.gain for move in further))
    return f"{len(made)} from the start, worth {gain}; {len(further)} left, worth {left}"


def table_head(names: Sequence[str]) -> str:
    """The titles of the table for several files."""
    return _cells(_name_width(names), "instance", [title for title, _ in TABLE])


def table_rows(outcome: Outcome, names: Sequence[str]) -> Iterator[str]:
    """One file's row of the table, and its reason on the lines below."""
    form, solution = outcome.form, outcome.solution
    if form is None or solution is None:
        return
    report = solution.report
    finding = report.finding
    rows, columns = form.shape
    structures = finding.structures
    more = f"+{len(structures) - 1}" if len(structures) > 1 else ""
    cells = [
        str(rows),
        str(columns),
        str(int(form.integer.sum())),
        finding.verdict.value,
        (structures[0] + more) if structures else "-",
        report.route,
        solution.status,
        "-" if solution.x is None else number(solution.objective),
        _steps(solution),
        *(f"{seconds:.3f}" for _, seconds in _stages(solution)),
    ]
    yield _cells(_name_width(names), outcome.name, cells)
    reason = report.why
    if finding.verdict is Verdict.SAMPLED:
        reason = f"{verdict_words(finding)}. {reason}"
    yield from textwrap.wrap(reason, WIDTH, initial_indent="    ", subsequent_indent="    ")


def summary(outcomes: Iterable[Outcome]) -> str:
    """How many files ended in which way.

    Examples
    --------
    >>> summary([Outcome("a.mps", error="no such file"), Outcome("b.mps", error="too old")])
    '2 files: 2 error'
    """
    counts = Counter(outcome.status for outcome in outcomes)
    parts = ", ".join(f"{count} {status}" for status, count in counts.most_common())
    return f"{sum(counts.values())} files: {parts}"


def write_certificate(path: Path, form: LinearForm, solution: Solution) -> None:
    """Write the proof of all blocks as JSON, whole or not at all.

    Raises
    ------
    ValueError
        When a block has no certificate.
    """
    finding = solution.report.finding
    certificates = [block.certificate for block in finding.blocks]
    bare = [k for k, certificate in enumerate(certificates) if certificate is None]
    if bare:
        reason = finding.blocks[bare[0]].reason
        raise ValueError(
            f"{len(bare)} of {len(certificates)} blocks have no certificate; the first: {reason}"
        )
    blocks = tuple(block for c in certificates if c is not None for block in c.blocks)
    with whole_file(path) as file:
        json.dump(Certificate(fingerprint(form), blocks).to_dict(), file)
        file.write("\n")


def _some(names: Sequence[str]) -> str:
    rest = len(names) - BLAME_SHOWN
    shown = ", ".join(names[:BLAME_SHOWN])
    return f"{shown} and {rest} more" if rest > 0 else shown


def _steps(solution: Solution) -> str:
    walk = solution.report.walk
    if walk is None:
        return "-"
    return str(walk.steps) if walk.exact_steps else f"<={walk.steps}"


def _stages(solution: Solution) -> list[tuple[str, float]]:
    seconds = solution.report.seconds
    shown = {"compile": "read"}
    return [
        (shown.get(stage, stage), seconds.get(stage, 0.0))
        for stage in ("compile", "assess", "solve", "proof")
    ]


def _name_width(names: Sequence[str]) -> int:
    return max(len("instance"), *(len(name) for name in names))


def _cells(name_width: int, name: str, cells: Sequence[str]) -> str:
    texts = [
        f"{cell:<{-width}}" if width < 0 else f"{cell:>{width}}"
        for cell, (_, width) in zip(cells, TABLE, strict=True)
    ]
    return "  ".join([f"{name:<{name_width}}", *texts]).rstrip()


def _known(value: float) -> float | None:
    return None if math.isnan(value) else float(value)


def _plain(data: Any) -> Any:
    """Replace what JSON has no word for: NaN by null, infinities by strings."""
    if isinstance(data, dict):
        return {key: _plain(value) for key, value in data.items()}
    if isinstance(data, (list, tuple)):
        return [_plain(value) for value in data]
    if isinstance(data, float) and not math.isfinite(data):
        return None if math.isnan(data) else str(data)
    return data

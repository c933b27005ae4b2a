"""The command line: solve model files, check certificates."""

from __future__ import annotations

import json
import os
import sys
import time
import traceback
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import click

from .certificates import Certificate, CertificateError, check_certificate
from .cli_batch import batch
from .cli_common import INPUT, INTERRUPTED, OUTPUT, UNREADABLE, complain, in_a_folder, names_of
from .cli_explain import explain
from .cli_output import (
    Outcome,
    describe,
    json_line,
    summary,
    table_head,
    table_rows,
    write_certificate,
)
from .files import sentence
from .forms.from_file import ModelFileError, read
from .plan_files import read_plan, write_moves, write_plan
from .starts import StartError
from .today import solve as solve_form

OPTIMAL, NOT_OPTIMAL = 0, 1
#: What a shell gives for a program that nobody listens to any more.
UNHEARD = 141


class _Commands(click.Group):
    """The commands; Ctrl-C, or a closed stdout as by `| head`, ends them without noise."""

    def invoke(self, context: click.Context) -> Any:
        try:
            return super().invoke(context)
        except BrokenPipeError:
            # What is still to be flushed has to go somewhere, else Python complains at its end.
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            sys.exit(UNHEARD)
        except KeyboardInterrupt:
            sys.exit(INTERRUPTED)
        except OSError as error:
            complain(f"the output cannot be written: {sentence(error)}")
            sys.exit(UNREADABLE)


@click.group(cls=_Commands, context_settings={"help_option_names": ["-h", "--help"]})
def main() -> None:
    """Solve whole-number models as linear programs wherever that is proven safe."""


main.add_command(batch)
main.add_command(explain)


@main.command()
@click.argument("files", nargs=-1, required=True, type=INPUT, metavar="FILE...")
@click.option("--json", "as_json", is_flag=True, help="One JSON object per file and line.")
@click.option(
    "--plan",
    type=OUTPUT,
    callback=in_a_folder,
    help="Write the solution as CSV with the header column,value. One FILE only.",
)
@click.option(
    "--certificate",
    type=OUTPUT,
    callback=in_a_folder,
    help="Write the proof that every vertex is whole as JSON. One FILE only.",
)
@click.option(
    "--from",
    "start",
    type=INPUT,
    metavar="PLAN",
    help="Today's plan, as --plan writes it: tell the moves from it to the best one.",
)
@click.option(
    "--moves",
    type=OUTPUT,
    callback=in_a_folder,
    help="Write these moves as CSV, largest gain first.",
)
@click.option("--max-moves", type=click.IntRange(min=0), help="Make only so many of the moves.")
@click.option(
    "--repair-start",
    is_flag=True,
    help="Where PLAN is no feasible plan, start from the one nearest to it.",
)
@click.option("--time-limit", type=click.FloatRange(min=0), help="Seconds for each file.")
@click.option("--rel-gap", type=click.FloatRange(min=0), help="Relative gap of branch and bound.")
@click.option("--threads", type=click.IntRange(min=1), help="Threads of branch and bound.")
@click.option("--samples", type=click.IntRange(min=0), help="Vertices to look at without a proof.")
@click.option("--seed", type=click.IntRange(min=0), default=0, show_default=True)
def solve(
    files: tuple[Path, ...],
    as_json: bool,
    plan: Path | None,
    certificate: Path | None,
    start: Path | None,
    moves: Path | None,
    max_moves: int | None,
    repair_start: bool,
    **options: Any,
) -> None:
    """Solve model files: .mps, .lp, .min and .asn, each also .gz.

    A file that cannot be read does not stop the others.

    Every set of the moves from today's plan (--from) leads to a feasible whole plan, in any
    order. --moves has a line for each column that a move changes: move, made (yes or no),
    column, before, after, gain, objective_after. A plan after --max-moves moves is as good
    as asked for: it has status 'limit' if there are more, and counts as solved.

    Fields of --json, null where not known: instance, status, rows, columns, integers,
    nonzeros, verdict, structure, samples (vertices that a verdict 'sampled' rests on), route,
    why, objective, bound, proof, steps, pivots, seconds (by stage), report (in full), error.

    \b
    Exit status:
      0    every file was solved to optimality
      1    some file is infeasible or unbounded, or its time ran out
      2    wrong usage, or some file could not be read or written
      130  stopped by Ctrl-C
    """
    if len(files) > 1 and (plan or certificate or start):
        raise click.UsageError("--plan, --certificate and --from take one FILE only")
    if start is None and (moves or max_moves is not None or repair_start):
        raise click.UsageError("--moves, --max-moves and --repair-start need --from")
    if start is not None:
        options |= {"start": start, "max_moves": max_moves, "repair_start": repair_start}
    names = names_of(files)
    tabular = len(files) > 1 and not as_json
    if tabular:
        click.echo(table_head(names))
    outcomes = []
    code = OPTIMAL
    for path, name in zip(files, names, strict=True):
        outcome = _outcome(path, name, options)
        outcomes.append(outcome)
        _show(outcome, as_json, names)
        code = max(code, _code(outcome), _write(outcome, plan, certificate, moves))
    if tabular:
        click.echo(summary(outcomes))
    sys.exit(code)


@main.command()
@click.argument("certificate", type=INPUT)
@click.argument("file", type=INPUT)
def check(certificate: Path, file: Path) -> None:
    """Check that CERTIFICATE proves the vertices of the model in FILE whole.

    \b
    Exit status:
      0  the certificate holds
      1  it does not
      2  wrong usage, or a file could not be read
    """
    try:
        form = read(file)
        data = _json(certificate)
    except (OSError, ValueError) as error:
        complain(sentence(error))
        sys.exit(UNREADABLE)
    try:
        claim = Certificate.from_dict(data)
        check_certificate(form, claim)
    except CertificateError as error:
        complain(f"{certificate} does not prove {file}: {error}")
        sys.exit(NOT_OPTIMAL)
    blocks = "1 block" if len(claim.blocks) == 1 else f"{len(claim.blocks)} blocks"
    covered = sum(block.columns.size for block in claim.blocks)
    reach = "" if claim.complete else f", which hold {covered} of {form.shape[1]} columns"
    click.echo(f"{certificate} holds: every vertex of {file} is whole ({blocks}{reach})")


#: Where certificates come from.
_WRITTEN_BY = "`latpath solve FILE --certificate CERTIFICATE` writes one"


def _json(path: Path) -> Any:
    try:
        return json.loads(path.read_bytes())
    except json.JSONDecodeError as error:
        told = f"no JSON ({error.msg[0].lower()}{error.msg[1:]}), so no certificate; {_WRITTEN_BY}"
        raise ModelFileError(path, error.lineno, told) from error
    except UnicodeDecodeError as error:
        raise ModelFileError(path, None, f"no text, so no certificate; {_WRITTEN_BY}") from error
    except RecursionError as error:
        raise ModelFileError(path, None, "its JSON is nested too deeply") from error


def _outcome(path: Path, name: str, options: dict[str, Any]) -> Outcome:
    """Read and solve one file; whatever goes wrong becomes part of the outcome."""
    begun = time.perf_counter()
    plan = options.get("start")
    try:
        form = read(path)
        if plan is not None:
            options = options | {"start": read_plan(plan, form)}
    except (OSError, ValueError) as error:
        return Outcome(name, error=sentence(error))
    try:
        solution = solve_form(form, compile_seconds=time.perf_counter() - begun, **options)
    except StartError as error:
        return Outcome(name, form, error=f"{plan}: {error}")
    except Exception as error:
        # A defect of ours must not cost the files that follow; it is shown in full.
        traceback.print_exc()
        return Outcome(name, form, error=f"{path}: {type(error).__name__}: {error}")
    return Outcome(name, form, solution)


def _show(outcome: Outcome, as_json: bool, names: Sequence[str]) -> None:
    if as_json:
        click.echo(json_line(outcome))
    elif outcome.error is None:
        lines = describe(outcome) if len(names) == 1 else table_rows(outcome, names)
        click.echo("\n".join(lines))
    if outcome.error is not None:
        complain(outcome.error)


def _code(outcome: Outcome) -> int:
    if outcome.error is not None:
        return UNREADABLE
    solution = outcome.solution
    stopped = solution is not None and solution.status == "limit" and solution.report.further_moves
    return OPTIMAL if outcome.status == "optimal" or stopped else NOT_OPTIMAL


def _write(
    outcome: Outcome, plan: Path | None, certificate: Path | None, moves: Path | None
) -> int:
    """Write the files asked for; return the exit status that this calls for."""
    if outcome.form is None or outcome.solution is None:
        return OPTIMAL
    code = OPTIMAL
    writers = ((plan, write_plan), (certificate, write_certificate), (moves, write_moves))
    for path, writer in writers:
        if path is None:
            continue
        try:
            writer(path, outcome.form, outcome.solution)
        except OSError as error:
            complain(sentence(error))
            code = UNREADABLE
        except ValueError as error:
            complain(f"{path} is not written: {error}")
            code = max(code, NOT_OPTIMAL)
    return code

"""The command `latpath batch`: a folder of models in, a folder of results out."""

from __future__ import annotations

import importlib.util
import os
import signal
import sys
import time
from contextlib import ExitStack
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import click

from .batch.cluster import Cluster
from .batch.crew import BatchError, Crew
from .batch.family import Family
from .batch.inputs import InputError, family_of, from_paths, passed_over
from .batch.instance import Instance
from .batch.journal import Journal, JournalError
from .batch.output import (
    RESULTS,
    FolderError,
    make_folder,
    summary_text,
    write_csv,
    write_parquet,
    write_summary,
)
from .batch.page import batch_page
from .batch.progress import Progress
from .batch.record import Summary
from .batch.runner import Tasks, run
from .batch.summary import summarise
from .batch.task import Settings
from .batch.workers import Processes
from .cli_common import INTERRUPTED, complain
from .deadline import Deadline
from .files import sentence, whole_file

SOLVED, UNSOLVED, FAILED, STOPPED = 0, 1, 2, 3

#: Records on a page; browsers take no more.
MOST_ON_PAGE = 100_000

_FOLDER = click.Path(path_type=Path, file_okay=False)
_NUMBER = click.FloatRange(min=0)
_COUNT = click.IntRange(min=1)


@dataclass(frozen=True)
class _Ending:
    """How the work ended: an exit status if it was early, and what went before."""

    early: int | None
    kept: int
    seconds: float


@click.command()
@click.argument("paths", nargs=-1, required=True, metavar="PATH...")
@click.option("--out", type=_FOLDER, required=True, metavar="DIR", help="Folder for the results.")
@click.option("--data", multiple=True, metavar="PATH", help="JSON data for Python files.")
@click.option("--changes", metavar="TABLE", help="Solve PATH once for each member of TABLE.")
@click.option("--plans", is_flag=True, help="Write each plan as CSV to DIR/plans.")
@click.option("--parquet", is_flag=True, help="Write the table as Parquet, too.")
@click.option("--store", type=_FOLDER, metavar="FOLDER", help="Keep certificates for later there.")
@click.option("--workers", type=_COUNT, help="Processes; one for each core if not given.")
@click.option("--cluster", metavar="ADDRESS", help="Work on the Dask cluster at ADDRESS.")
@click.option("--compare", type=_COUNT, help="Measure branch and bound on so many of them, too.")
@click.option("--time-limit", type=_NUMBER, help="Seconds for each instance.")
@click.option("--stop-after", type=_NUMBER, help="Seconds for the whole batch.")
@click.option("--rel-gap", type=_NUMBER, help="Relative gap of branch and bound.")
@click.option("--samples", type=click.IntRange(min=0), help="Vertices to look at without a proof.")
@click.option("--seed", type=click.IntRange(min=0), default=0, show_default=True)
@click.option("--quiet", is_flag=True, help="Show neither progress nor summary.")
@click.option("--json", "as_json", is_flag=True, help="Records as JSON lines on stdout.")
def batch(
    paths: tuple[str, ...],
    out: Path,
    data: tuple[str, ...],
    changes: str | None,
    plans: bool,
    parquet: bool,
    store: Path | None,
    workers: int | None,
    cluster: str | None,
    compare: int | None,
    stop_after: float | None,
    quiet: bool,
    as_json: bool,
    **solving: Any,
) -> None:
    """Solve many models; go on where an earlier run of the same command stopped.

    PATH is a model file (.mps, .lp, .min, .asn, each also .gz), a folder of such, a pattern in
    quotes, or a Python file. A Python file defines a Pyomo `model` or a function
    `create_model(**data)`; with --data it builds one model from each JSON file (files,
    folders, patterns), whose object holds the arguments.

    --changes reads a table of costs, sides or bounds that one model is to be solved with. As
    .csv, .csv.gz or .parquet it has a line for each changed entry (of cost, row_lower,
    row_upper, col_lower or col_upper), or a line of costs for each member:

    \b
      instance,what,name,value        instance,van,cart
      mon,row_upper,need,7            mon,4,7.5

    As .npz it holds arrays of these five names, as .npy costs: a row for each member.

    \b
    DIR receives
      journal.jsonl   a record for each instance, safe on disk as soon as it ends
      table.csv       all records (table.parquet with --parquet)
      summary.json    counts, what is not solved and why, the slowest
      report.html     the same as a page
      plans/          the plans, with --plans

    Solved again is an instance whose source has changed since its record was written, whose plan
    is missing, or whose time ran out and is longer now. One that kills its worker is tried once
    more. Ten seconds past --time-limit a local worker is ended.

    \b
    Exit status:
      0    every instance was solved to optimality
      1    some are infeasible or unbounded, or their time ran out
      2    wrong usage, or some could not be read, solved or written
      3    stopped early (--stop-after, full disk, no workers): run it again to go on
      130  stopped by Ctrl-C or SIGTERM: run it again to go on
    """
    if cluster and workers:
        raise click.UsageError("--workers are local, --cluster has its own")
    if parquet and importlib.util.find_spec("pyarrow") is None:
        raise click.UsageError("--parquet needs pyarrow: pip install 'pyomo_latpath[tables]'")
    settings = Settings(
        plans=str((out / "plans").absolute()) if plans else None,
        store=None if store is None else str(store.absolute()),
        **solving,
    )
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    try:
        instances = _instances(paths, data, changes)
        if others := passed_over(paths):
            complain(f"passed over in the folders: {others} that are no model files")
        tasks = Tasks(instances, settings, compare or 0)
        make_folder(out)
        if store is not None:
            make_folder(store)
        with ExitStack() as stack:
            options = {"changes": changes, "compare": compare, **settings.plain()}
            journal = stack.enter_context(Journal(out / "journal.jsonl", options))
            _refuse_other_inputs(journal, instances)
            make_folder(out, RESULTS)
            if plans:
                make_folder(out / "plans", ["*.csv"])
            crew = _crew(stack, cluster, workers, settings)
            shown = stack.enter_context(Progress(tasks.total, not quiet))
            ending = _work(tasks, crew, journal, Deadline(stop_after), shown, as_json)
            if plans:
                make_folder(out / "plans", ["*.csv"])
            summary = _leave(out, tasks, journal, ending, parquet)
    except BrokenPipeError:
        raise
    except (InputError, JournalError, BatchError, FolderError) as error:
        complain(str(error))
        sys.exit(FAILED)
    except OSError as error:
        complain(f"{sentence(error)}; run the same command again to go on")
        sys.exit(STOPPED)
    if not (quiet or as_json):
        click.echo(summary_text(summary))
        names = [name for name in (*RESULTS, "plans") if (out / name).exists()]
        click.echo(f"written    {out}: {', '.join(names)}")
    sys.exit(_status(summary) if ending.early is None else ending.early)


def _instances(
    paths: tuple[str, ...], data: tuple[str, ...], changes: str | None
) -> Family | list[Instance]:
    if changes is None:
        return from_paths(paths, data)
    if len(paths) != 1 or data:
        raise InputError("--changes takes one PATH, and no --data")
    return family_of(paths[0], changes)


def _refuse_other_inputs(journal: Journal, instances: Family | list[Instance]) -> None:
    known = isinstance(instances, list)
    if len(journal) and known and not any(item.name in journal for item in instances):
        other = next(journal.records()).instance
        raise JournalError(
            f"{journal.path} holds records of other instances ({other!r} is one), and of none that "
            "is given now: use another folder for these"
        )


def _crew(stack: ExitStack, cluster: str | None, workers: int | None, settings: Settings) -> Crew:
    if cluster is None:
        return Processes(workers or os.cpu_count() or 1, settings.time_limit)
    return stack.enter_context(Cluster(cluster)).crew()


def _work(
    tasks: Tasks, crew: Crew, journal: Journal, deadline: Deadline, shown: Progress, as_json: bool
) -> _Ending:
    """Do what can be done; whatever ends it early is told, and what is finished is safe."""
    for note in journal.notes:
        shown.say(note)
    begun, early = time.monotonic(), None
    try:
        for done in run(tasks, crew, journal, deadline):
            shown.add(done.record, done.kept)
            if as_json:
                click.echo(done.record.to_json())
    except KeyboardInterrupt:
        early = INTERRUPTED
        journal.read()
        shown.say("stopped; run the same command again to go on")
    except (BatchError, JournalError) as error:
        early = STOPPED
        shown.say(f"{error}; run the same command again to go on")
    if journal.replaced:
        why = "another source, more time, or no plan there"
        shown.say(f"{journal.replaced} with a record were solved again: {why}")
    return _Ending(early, shown.kept, time.monotonic() - begun)


def _leave(out: Path, tasks: Tasks, journal: Journal, ending: _Ending, parquet: bool) -> Summary:
    """Write what a batch leaves behind, from the journal."""
    wanted = tasks.names if ending.early is None else None
    if wanted is not None and (gone := len(journal) - len(wanted)):
        complain(
            f"left out of the results: {gone} in {journal.path} that are not among the "
            "instances given now"
        )
    waiting = 0 if ending.early is None else None
    if waiting is None and tasks.total is not None:
        waiting = max(0, tasks.total - len(journal))
    summary = summarise(
        journal.records(wanted), waiting=waiting, wall_seconds=ending.seconds, kept=ending.kept
    )
    write_csv(out / "table.csv", journal.records(wanted))
    if parquet:
        write_parquet(out / "table.parquet", journal.records(wanted))
    write_summary(out / "summary.json", summary)
    page = out / "report.html"
    page.unlink(missing_ok=True)
    if summary.records <= MOST_ON_PAGE:
        with whole_file(page) as file:
            file.write(batch_page(list(journal.records(wanted)), summary))
    return summary


def _status(summary: Summary) -> int:
    if summary.errors:
        return FAILED
    return UNSOLVED if summary.unsolved_count else SOLVED

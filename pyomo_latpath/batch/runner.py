"""A batch from its instances to its records: the loop, the journal, and who does the work."""

from __future__ import annotations

import math
import operator
import os
from collections.abc import Iterable, Iterator
from concurrent.futures import Executor
from dataclasses import dataclass
from numbers import Integral, Real
from pathlib import Path
from typing import Any

from ..deadline import Deadline
from .crew import BatchError, Crew
from .executors import InExecutor
from .inputs import instances_of
from .instance import Instance
from .journal import Journal
from .output import make_folder
from .progress import Progress
from .record import BatchRecord
from .store import CertificateStore
from .task import Settings, Task, printable
from .workers import Processes, end_if_starting, refuse_script_without_file


class OutOfTime(BatchError):
    """The time for the whole batch has run out."""


@dataclass(frozen=True)
class Done:
    """A record, and whether an earlier run had left it."""

    record: BatchRecord
    kept: bool


def solve_many(
    instances: Any,
    *,
    workers: int | None = None,
    executor: Executor | None = None,
    store: str | os.PathLike[str] | None = None,
    progress: bool = True,
    journal: str | os.PathLike[str] | None = None,
    time_limit: float | None = None,
    rel_gap: float | None = None,
    samples: int | None = None,
    seed: int = 0,
    plans: str | os.PathLike[str] | None = None,
) -> Iterator[BatchRecord]:
    """Solve many instances, in many processes.

    Parameters
    ----------
    instances : path, Family, or iterable
        Paths of model files (folders and patterns as well), Pyomo models, `LinearForm`s, pairs of
        a name and a model or form, or objects with `name`, `fingerprint()` and `load()`. An
        iterable is consumed as the work goes on; models are compiled here, files read by the
        workers.
    workers : int, optional
        Local processes, as many as there are cores when not given (one is a process, too); a
        script starts them below `if __name__ == "__main__":`. With an executor: how many it has.
    executor : concurrent.futures.Executor, optional
        Does the work instead; it is left running. Threads take turns, since HiGHS has one
        set of threads for a whole process.
    store : path-like, optional
        Folder of certificates, kept for later batches over the same structures.
    progress : bool
        Show a bar (or, where stderr is no terminal, now and then a line).
    journal : path-like, optional
        File for the records. Where it holds some already, these instances are not solved
        again, unless their source has changed or they ran out of time and have more now.
    time_limit : float, optional
        Seconds for each instance. A process that overruns it by more than ten is ended.
    rel_gap, samples, seed
        As in `solve`.
    plans : path-like, optional
        Folder for the plans, made if it is not there.

    Yields
    ------
    BatchRecord
        One for each instance, as they end. Whatever goes wrong with one is told in its `error`.

    Raises
    ------
    ValueError
        For options that make no sense, paths that lead nowhere, and folders that cannot be made.
    JournalError
        For a journal of other options, in use, or on a full disk.
    BatchError
        When no worker can be kept running, and for a script that workers cannot read, or that
        starts the batch outside of `if __name__ == "__main__":`.

    Examples
    --------
    >>> import pyomo_latpath as latpath
    >>> form = latpath.LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                                       col_upper=1, cost=[2, 3])
    >>> nights = (form.replace(cost=[2, dear]) for dear in (1, 3))
    >>> records = latpath.solve_many(nights, workers=1, progress=False)
    >>> [(record.instance, record.objective) for record in records]
    [('instance 1', 1.0), ('instance 2', 2.0)]
    """
    end_if_starting()
    if executor is None:
        refuse_script_without_file()
    _refuse_unless_number("workers", workers, 1, whole=True)
    _refuse_unless_number("samples", samples, 0, whole=True)
    _refuse_unless_number("seed", seed, 0, whole=True)
    _refuse_unless_number("time_limit", time_limit, 0)
    _refuse_unless_number("rel_gap", rel_gap, 0)
    if not isinstance(executor, Executor | None):
        raise ValueError(f"executor is {executor!r}; it must be a concurrent.futures.Executor")
    if plans is not None:
        make_folder(Path(plans), ["*.csv"])
    if store is not None:
        CertificateStore(store)  # refuses what is no folder
        make_folder(Path(store))
    settings = Settings(
        time_limit=time_limit,
        rel_gap=rel_gap,
        samples=samples,
        seed=seed,
        plans=None if plans is None else os.path.abspath(plans),
        store=None if store is None else os.path.abspath(store),
    )
    tasks = Tasks(instances_of(instances), settings)
    return _records(tasks, workers or os.cpu_count() or 1, executor, journal, progress)


def _refuse_unless_number(name: str, value: Any, least: int, whole: bool = False) -> None:
    """Refuse an option that is given, and no number from `least` on."""
    fits = isinstance(value, Integral if whole else Real)
    if value is not None and not (fits and value >= least):
        kind = "whole number" if whole else "number"
        raise ValueError(f"{name} is {value!r}; it must be a {kind} from {least} on")


def _records(
    tasks: Tasks,
    workers: int,
    executor: Executor | None,
    journal: str | os.PathLike[str] | None,
    progress: bool,
) -> Iterator[BatchRecord]:
    if journal is None:
        yield from _shown(tasks, crew_of(workers, executor, tasks.settings), None, progress)
        return
    with Journal(Path(journal), tasks.settings.plain()) as kept:
        yield from _shown(tasks, crew_of(workers, executor, tasks.settings), kept, progress)


def _shown(
    tasks: Tasks, crew: Crew, journal: Journal | None, progress: bool
) -> Iterator[BatchRecord]:
    with Progress(tasks.total, progress) as shown:
        for note in journal.notes if journal is not None else ():
            shown.say(note)
        for done in run(tasks, crew, journal):
            shown.add(done.record, done.kept)
            yield done.record


def crew_of(workers: int, executor: Executor | None, settings: Settings) -> Crew:
    """Local processes, or the executor's workers."""
    if executor is None:
        return Processes(workers, settings.time_limit)
    return InExecutor(executor, workers)


class Tasks:
    """The instances as tasks, each under a name of its own.

    Parameters
    ----------
    instances : iterable of Instance
    settings : Settings
    compare : int
        On so many of them branch and bound is measured: evenly spread ones where `total` is
        known, else the first.

    Attributes
    ----------
    total : int or None
        How many there are, where that is known beforehand.
    names : set of str
        Met so far.
    """

    def __init__(self, instances: Iterable[Instance], settings: Settings, compare: int = 0) -> None:
        self.instances, self.settings, self.compare = instances, settings, compare
        self.total: int | None = operator.length_hint(instances) or None
        self.names: set[str] = set()

    def __iter__(self) -> Iterator[Task]:
        apart = max(1.0, self.total / self.compare) if self.total and self.compare else 1.0
        chosen = {int(k * apart) for k in range(self.compare)}
        for k, instance in enumerate(self.instances):
            name = self._unique(printable(instance.name))
            yield Task(name, instance, self.settings, k in chosen)

    def _unique(self, name: str) -> str:
        unique, number = name, 1
        while unique in self.names:
            number += 1
            unique = f"{name} ({number})"
        self.names.add(unique)
        return unique


def run(
    tasks: Iterable[Task],
    crew: Crew,
    journal: Journal | None = None,
    deadline: Deadline | None = None,
) -> Iterator[Done]:
    """Have tasks done, and give each one's record once it is in the journal.

    Parameters
    ----------
    tasks : iterable of Task
    crew : Crew
        Closed in the end.
    journal : Journal, optional
    deadline : Deadline, optional
        What is not finished by then is dropped.

    Yields
    ------
    Done

    Raises
    ------
    OutOfTime, BatchError, JournalError
    """
    deadline = deadline or Deadline(None)
    try:
        for task in tasks:
            record = journal.get(task.name) if journal is not None else None
            if record is not None and task.finished_by(record):
                yield Done(record, kept=True)
                continue
            crew.submit(task)
            yield from _finished(crew, journal, deadline, wait=False)
            while crew.full:
                yield from _finished(crew, journal, deadline)
        while crew.busy:
            yield from _finished(crew, journal, deadline)
    finally:
        crew.close()


def _finished(
    crew: Crew, journal: Journal | None, deadline: Deadline, wait: bool = True
) -> Iterator[Done]:
    """Take what is finished, safe in the journal, and have what was lost tried once more."""
    left = deadline.left if wait else 0.0
    records, again = [], []
    for answer in crew.collect(None if left == math.inf else left):
        if isinstance(answer, BatchRecord):
            records.append(answer)
        elif answer.task.attempt == 1:
            again.append(answer.task.again())
        else:
            records.append(answer.task.failed(f"{answer.reason}, and so it was a second time"))
    if journal is not None and records:
        journal.append(records)
    for task in again:
        crew.submit(task)
    for record in records:
        yield Done(record, kept=False)
    if deadline.passed:
        raise OutOfTime("the time for the batch has run out")

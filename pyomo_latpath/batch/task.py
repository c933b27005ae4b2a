"""One instance to one record: what every worker does, wherever it runs."""

from __future__ import annotations

import math
import threading
import time
import traceback
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import lru_cache
from hashlib import sha256
from pathlib import Path
from typing import Any

import numpy as np

from ..deadline import Deadline
from ..files import sentence
from ..forms.linear_form import LinearForm
from ..highs_mip import MipSettings, branch_and_bound
from ..plan_files import write_plan
from ..prepared import RecentMatrices
from ..routing import solve
from ..solution import Solution
from .instance import Instance
from .record import BatchRecord
from .store import CertificateStore


@dataclass(frozen=True)
class Settings:
    """What all instances of a batch are solved with.

    Attributes
    ----------
    time_limit : float or None
        Seconds for each instance, reading included.
    rel_gap : float or None
        Of branch and bound; HiGHS's own when None.
    samples : int or None
        Vertices to look at without a proof; see `routing.solve`.
    seed : int
        Of the vertex sampler.
    plans : str or None
        Folder for the plans; none are written when None.
    store : str or None
        Folder of the store of certificates; none is kept when None.
    """

    time_limit: float | None = None
    rel_gap: float | None = None
    samples: int | None = None
    seed: int = 0
    plans: str | None = None
    store: str | None = None

    def plain(self) -> dict[str, Any]:
        """What a finished record depends on, as plain data."""
        return {
            "rel_gap": self.rel_gap,
            "samples": self.samples,
            "seed": self.seed,
            "plans": self.plans is not None,
        }


@dataclass(frozen=True, eq=False)
class Task:
    """An instance on its way through a worker.

    Attributes
    ----------
    name : str
        Of the instance, made unique.
    instance : Instance
    settings : Settings
    compare : bool
        Measure branch and bound on it, too.
    attempt : int
        2 after a worker died under it.
    """

    name: str
    instance: Instance
    settings: Settings
    compare: bool = False
    attempt: int = 1

    def again(self) -> Task:
        """The next attempt."""
        return replace(self, attempt=self.attempt + 1)

    def failed(self, error: str, status: str = "error") -> BatchRecord:
        """The record of an instance that gave no solution."""
        return BatchRecord(
            instance=self.name,
            fingerprint=self.fingerprint(),
            status=status,
            attempts=self.attempt,
            time_limit=self.settings.time_limit,
            error=printable(error),
        )

    def fingerprint(self) -> str:
        """That of the instance; empty where there is none, which its `load` will explain."""
        try:
            return self.instance.fingerprint()
        except Exception:
            return ""

    def finished_by(self, record: BatchRecord) -> bool:
        """Whether a record of an earlier run will do.

        It will not where the source has changed, its plan is missing, or its time ran out and
        there is more now.
        """
        will_do = record.fingerprint == self.fingerprint()
        if record.status == "time_limit":
            will_do &= _or_endless(self.settings.time_limit) <= _or_endless(record.time_limit)
        plans = self.settings.plans
        if plans is not None and record.objective is not None:
            will_do &= record.plan is not None and Path(plans, record.plan).exists()
        return will_do


@dataclass(frozen=True, eq=False)
class Lost:
    """A task without a record, because its worker died or ran out of memory."""

    task: Task
    reason: str


#: HiGHS has one set of threads for a whole process: two instances in it must take turns.
_TURN = threading.Lock()
#: What this process found out about the matrices it met lately.
_RECENT = RecentMatrices()

#: What comes back of a task.
Answer = BatchRecord | Lost


def run_tasks(tasks: Sequence[Task]) -> list[Answer]:
    """Run some tasks, one after the other.

    An instance that runs out of memory is lost, and may be tried once more somewhere else.
    """
    return [_run_or_lose(task) for task in tasks]


def _run_or_lose(task: Task) -> Answer:
    try:
        return run_task(task)
    except MemoryError:
        return Lost(task, "it ran out of memory")


def run_task(task: Task) -> BatchRecord:
    """Load and solve one instance; whatever goes wrong becomes part of its record.

    Raises
    ------
    MemoryError
        The only error that another attempt elsewhere may mend.

    Examples
    --------
    >>> from pyomo_latpath.batch.instance import FileInstance, FormInstance
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                               col_upper=1, cost=[2, 3])
    >>> record = run_task(Task("vans", FormInstance("vans", form), Settings()))
    >>> record.status, record.objective, record.route, record.error
    ('optimal', 2.0, 'path', None)
    >>> run_task(Task("lost.mps", FileInstance("lost.mps"), Settings())).error
    'lost.mps: no such file or directory'
    """
    try:
        with _TURN:
            return _run(task)
    except MemoryError:
        raise
    except Exception:
        # A defect of this package: it must not cost the other instances, nor be hidden.
        return task.failed(traceback.format_exc())


def _run(task: Task) -> BatchRecord:
    settings, begun = task.settings, time.perf_counter()
    deadline = Deadline(settings.time_limit)
    try:
        fingerprint = task.instance.fingerprint()
        form = _RECENT.lend(task.instance.load())
    except (OSError, ValueError) as error:
        return task.failed(sentence(error))
    compiled = getattr(task.instance, "compile_seconds", 0.0) + time.perf_counter() - begun
    solution = solve(
        form,
        store=None if settings.store is None else _store(settings.store),
        samples=settings.samples,
        time_limit=None if settings.time_limit is None else deadline.left,
        rel_gap=settings.rel_gap,
        threads=1,  # the other cores have instances of their own
        seed=settings.seed,
        compile_seconds=compiled,
    )
    record = record_of(task, fingerprint, form, solution)
    if settings.plans is not None and solution.x is not None:
        record = _with_plan(record, Path(settings.plans), form, solution)
    return _compared(record, form, settings) if task.compare else record


@lru_cache(maxsize=4)
def _store(folder: str) -> CertificateStore:
    """A process has one view of a store, and remembers what it has checked."""
    return CertificateStore(folder)


def record_of(task: Task, fingerprint: str, form: LinearForm, solution: Solution) -> BatchRecord:
    """What a record keeps of a solution."""
    report = solution.report
    walk = report.walk
    rows, columns = form.shape
    return BatchRecord(
        instance=task.name,
        fingerprint=fingerprint,
        status=solution.status,
        rows=rows,
        columns=columns,
        integers=int(form.integer.sum()),
        nonzeros=int(form.matrix.nnz),
        verdict=report.finding.verdict.value,
        structure=", ".join(report.finding.structures) or None,
        samples=report.finding.samples,
        route=report.route,
        why=report.why,
        proof=report.proof,
        objective=_known(solution.objective),
        bound=_known(solution.bound),
        steps=None if walk is None else walk.steps,
        pivots=None if walk is None else walk.pivots,
        seconds=dict(report.seconds),
        recognition=report.recognition,
        attempts=task.attempt,
        time_limit=task.settings.time_limit,
        error=report.why if solution.status == "error" else None,
    )


def _with_plan(
    record: BatchRecord, folder: Path, form: LinearForm, solution: Solution
) -> BatchRecord:
    name = plan_name(record.instance)
    try:
        write_plan(folder / name, form, solution)
    except OSError as error:
        return replace(record, error=f"its plan is not written: {sentence(error)}")
    return replace(record, plan=name)


def plan_name(instance: str) -> str:
    """Name of an instance's plan: what people recognise, and what no other instance has.

    Examples
    --------
    >>> plan_name("days/monday.mps")
    'monday.mps-dbd5abcc.csv'
    """
    last = instance.replace("\\", "/").rstrip("/").rpartition("/")[2]
    readable = "".join(letter if letter.isalnum() or letter in "._-" else "_" for letter in last)
    return f"{readable[:80].lstrip('.')}-{sha256(instance.encode()).hexdigest()[:8]}.csv"


def _compared(record: BatchRecord, form: LinearForm, settings: Settings) -> BatchRecord:
    """Measure branch and bound on the same arrays, with the same limit."""
    begun = time.perf_counter()
    result = branch_and_bound(
        form.matrix,
        form.row_lower,
        form.row_upper,
        form.col_lower,
        form.col_upper,
        form.cost if form.sense == "min" else -form.cost,
        (form.integer + 2 * form.semicontinuous).astype(np.int32),
        MipSettings(rel_gap=settings.rel_gap, threads=1),
        Deadline(settings.time_limit),
    )
    seconds = time.perf_counter() - begun
    return replace(record, highs_seconds=seconds, highs_status=result.status)


def printable(text: str) -> str:
    """Text that can be written as UTF-8: names of files may hold any bytes.

    Examples
    --------
    >>> print(printable("day\\udcff.mps"))
    day\\udcff.mps
    """
    return text.encode("utf-8", "backslashreplace").decode("utf-8")


def _or_endless(limit: float | None) -> float:
    return math.inf if limit is None else limit


def _known(value: float) -> float | None:
    return None if np.isnan(value) else float(value)

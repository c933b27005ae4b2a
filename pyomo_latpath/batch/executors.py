"""A crew behind an executor of the caller's, a Dask cluster among them.

Tasks go out in groups, so that small instances do not pay for the way and a family's form travels
once for each group. A group whose worker died is lost as a whole, and its tasks are tried again
one by one; no record is lost or doubled by that, since a group's records come together.
"""

from __future__ import annotations

import math
from concurrent.futures import FIRST_COMPLETED, Executor, Future, wait

from .crew import BatchError
from .task import Answer, Lost, Task, run_tasks

#: A group should take about so many seconds, and has so many tasks at most.
GROUP_SECONDS, MOST_TASKS = 0.25, 64


class InExecutor:
    """The workers of a `concurrent.futures.Executor`, as a `Crew`; it is left running.

    A task that overruns its time limit cannot be ended here.

    Parameters
    ----------
    executor : Executor
    workers : int
        How many it has; twice as many groups are out at a time.
    """

    def __init__(self, executor: Executor, workers: int) -> None:
        self.executor, self.workers = executor, workers
        self.group: list[Task] = []
        self.out: dict[Future[list[Answer]], list[Task]] = {}
        self.size = 1

    @property
    def full(self) -> bool:
        return len(self.out) >= 2 * self.workers

    @property
    def busy(self) -> bool:
        return bool(self.out or self.group)

    def submit(self, task: Task) -> None:
        if task.attempt > 1:
            self._send([task])
            return
        self.group.append(task)
        if len(self.group) >= self.size:
            self._send_group()

    def collect(self, timeout: float | None = None) -> list[Answer]:
        if self.group and len(self.out) < self.workers:
            self._send_group()
        done, _ = wait(self.out, timeout, FIRST_COMPLETED)
        answers: list[Answer] = []
        for future in [future for future in self.out if future in done]:  # as they were sent
            answers += self._answers(future, self.out.pop(future))
        return answers

    def close(self) -> None:
        for future in self.out:
            future.cancel()

    def _send_group(self) -> None:
        group, self.group = self.group, []
        self._send(group)

    def _send(self, group: list[Task]) -> None:
        try:
            future = self.executor.submit(run_tasks, group)
        except RuntimeError as error:  # broken, or shut down
            raise BatchError(f"the executor takes no more work: {error}") from error
        self.out[future] = group

    def _answers(self, future: Future[list[Answer]], group: list[Task]) -> list[Answer]:
        if future.cancelled():
            raise BatchError("the executor was shut down, or its cluster is gone")
        error = future.exception()
        if error is not None:
            words = f"{type(error).__name__}: {error}".strip(": ")
            return [Lost(task, f"its worker failed ({words})") for task in group]
        answers = future.result()
        seconds = math.fsum(a.total_seconds for a in answers if not isinstance(a, Lost))
        fitting = GROUP_SECONDS * len(group) / max(seconds, 1e-6)
        self.size = max(1, min(MOST_TASKS, 2 * self.size, int(fitting)))
        return answers

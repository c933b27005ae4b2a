"""A crew of local processes.

The executors of the standard library cannot end one worker and keep the others; here a task that
hangs, eats up the memory or kills its process costs itself only. Each process has a pipe. It works
through what comes in on it, sends an answer for each task in order, and ends when the pipe does,
so no process outlives its batch. While its tasks are quick and light, a process gets some ahead,
so that it does not wait for the journal.
"""

from __future__ import annotations

import io
import math
import os
import pickle
import queue
import signal
import sys
import threading
import time
from collections import deque
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from multiprocessing import connection, current_process, get_context
from multiprocessing.connection import Connection
from typing import Any

from .crew import BatchError
from .instance import SharedForm
from .record import BatchRecord
from .task import Answer, Lost, Task, run_task

#: Seconds that a task may overrun its time limit before its process is ended.
GRACE = 10.0
#: Tasks that a process may hold while each takes less than so many seconds, and so many bytes:
#: what does not fit into the pipe would have the batch wait until the process reads it.
AHEAD, QUICK, LIGHT = 8, 0.05, 2**14
#: Processes in a row that may end before they are ready.
MOST_STILLBORN = 3
#: How many threads linear algebra takes, by the libraries that NumPy may be built with.
THREADS = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")
#: Name of a process until it is ready, and its exit status when the script, which it runs to know
#: what the caller's classes are, would have it start a batch of its own.
STARTING, UNGUARDED = "latpath worker, starting", 87


class Processes:
    """Local processes, as a `Crew`; spawned, not forked.

    Parameters
    ----------
    count : int
        Processes at most; they are started as tasks come in.
    time_limit : float or None
        Seconds that a task promises to take; it is ended `GRACE` seconds later.
    """

    def __init__(self, count: int, time_limit: float | None) -> None:
        self.count = count
        self.patience = math.inf if time_limit is None else time_limit + GRACE
        self.time_limit = time_limit
        self.waiting: deque[Task] = deque()
        self.workers: list[_Worker] = []
        self._stillborn = 0

    @property
    def full(self) -> bool:
        return len(self.waiting) >= self.count

    @property
    def busy(self) -> bool:
        return bool(self.waiting) or any(worker.tasks for worker in self.workers)

    def submit(self, task: Task) -> None:
        if task.attempt > 1:
            self.waiting.appendleft(task)
        else:
            self.waiting.append(task)

    def collect(self, timeout: float | None = None) -> list[Answer]:
        answers = self._hand_out()
        pipes: dict[Any, _Worker] = {worker.pipe: worker for worker in self.workers}
        for pipe in connection.wait(list(pipes), 0 if answers else self._wait(timeout)):
            answers += self._listen(pipes[pipe])
        answers += self._end_stuck()
        return answers + self._hand_out()

    def _wait(self, timeout: float | None) -> float | None:
        """Seconds until a process may have to be ended, at most `timeout`."""
        ends = [worker.since + self.patience for worker in self.workers if worker.runs]
        left = max(0.0, min(ends, default=math.inf) - time.monotonic())
        left = min(left, math.inf if timeout is None else timeout)
        return None if left == math.inf else left

    def close(self) -> None:
        self.waiting.clear()
        for worker in self.workers:
            worker.end()
        self.workers.clear()

    def _hand_out(self) -> list[Answer]:
        """Give waiting tasks to processes; return answers for those that cannot travel."""
        answers: list[Answer] = []
        while self.waiting and (worker := self._next_free()) is not None:
            task = self.waiting.popleft()
            try:
                worker.send(task)
            except Exception as error:  # whatever an instance does when it is pickled
                answers.append(task.failed(f"it cannot be sent to a worker: {error}"))
        return answers

    def _next_free(self) -> _Worker | None:
        idle = [worker for worker in self.workers if not worker.tasks]
        if idle:
            return max(idle, key=lambda worker: worker.ready)
        if len(self.workers) < self.count:
            self.workers.append(_Worker())
            return self.workers[-1]
        quick = [worker for worker in self.workers if worker.takes_ahead]
        return min(quick, key=lambda worker: len(worker.tasks), default=None)

    def _listen(self, worker: _Worker) -> list[Answer]:
        """Take all that a process has sent."""
        answers: list[Answer] = []
        try:
            while worker.pipe.poll():
                message = worker.pipe.recv()
                worker.since = time.monotonic()
                self._stillborn = 0
                if message is None:
                    worker.ready = True
                    continue
                task = worker.tasks.popleft()
                if isinstance(message, BatchRecord):
                    worker.quick = message.total_seconds < QUICK
                    answers.append(message)
                else:
                    self._dismiss(worker)
                    return [*answers, Lost(task, message)]
            return answers
        except (EOFError, OSError):
            pass
        return answers + self._bury(worker)

    def _bury(self, worker: _Worker) -> list[Answer]:
        """Replace a process that ended by itself; only its first task is to blame."""
        worker.process.join(timeout=5)
        worker.end()
        code = worker.process.exitcode
        if code == UNGUARDED and not worker.ready:
            raise BatchError(
                "each worker process runs this script once more, and would start the batch again: "
                "put what starts it below `if __name__ == '__main__':`"
            )
        how = f"exit status {code}"
        if code is not None and code < 0:
            how = signal.Signals(-code).name if -code in set(signal.Signals) else f"signal {-code}"
        answers: list[Answer] = []
        if worker.ready and worker.tasks:
            reason = f"its worker process was ended ({how})"
            if how == "SIGKILL":
                reason += "; perhaps the machine ran out of memory"
            answers.append(Lost(worker.tasks.popleft(), reason))
        elif not worker.ready:
            self._stillborn += 1
            if self._stillborn >= MOST_STILLBORN:
                raise BatchError(
                    f"{self._stillborn} worker processes in a row ended before they were ready "
                    f"({how}; see above for what they said)"
                )
        self._dismiss(worker)
        return answers

    def _end_stuck(self) -> list[Answer]:
        answers: list[Answer] = []
        for worker in list(self.workers):
            spent = time.monotonic() - worker.since
            if worker.runs and spent > self.patience:
                task = worker.tasks.popleft()
                self._dismiss(worker)
                answers.append(
                    task.failed(
                        f"it did not stop at its time limit of {self.time_limit:g} s, and was "
                        f"ended after {spent:.0f} s",
                        "time_limit",
                    )
                )
        return answers

    def _dismiss(self, worker: _Worker) -> None:
        """End a process, and keep what it has not begun for another one."""
        worker.end()
        self.workers.remove(worker)
        self.waiting.extendleft(reversed(worker.tasks))
        worker.tasks.clear()


def end_if_starting() -> None:
    """End a worker process whose script starts a batch while it is read; `_bury` says why."""
    if current_process().name == STARTING:
        sys.exit(UNGUARDED)


def refuse_script_without_file() -> None:
    """Refuse a script that worker processes could not read.

    Raises
    ------
    BatchError
    """
    script = sys.modules["__main__"]
    file = getattr(script, "__file__", None)
    if file is not None and script.__spec__ is None and not os.path.exists(file):
        raise BatchError(
            f"worker processes read the script again, and {file} is no file: save it as one, or "
            "give executor=concurrent.futures.ThreadPoolExecutor(1)"
        )


class _Worker:
    """A process as the batch sees it; the first of its tasks is the one that it works on."""

    def __init__(self) -> None:
        context = get_context("spawn")
        self.pipe, theirs = context.Pipe()
        self.process = context.Process(target=serve, args=(theirs,), name=STARTING, daemon=True)
        with _deaf_to_ctrl_c(), _one_thread_each():
            self.process.start()
        theirs.close()
        self.tasks: deque[Task] = deque()
        self.forms: set[str] = set()
        self.ready = self.quick = self.light = False
        self.since = time.monotonic()

    @property
    def takes_ahead(self) -> bool:
        return self.quick and self.light and len(self.tasks) < AHEAD

    @property
    def runs(self) -> bool:
        return self.ready and bool(self.tasks)

    def send(self, task: Task) -> None:
        file = io.BytesIO()
        pickler = _Pickler(file, self.forms)
        pickler.dump(task)
        if not self.tasks:
            self.since = time.monotonic()
        self.tasks.append(task)
        with suppress(BrokenPipeError, ConnectionError):  # its end shows when it is listened to
            self.pipe.send_bytes(file.getbuffer())
        self.forms |= pickler.sent
        self.light = file.tell() <= LIGHT

    def end(self) -> None:
        self.process.kill()
        self.process.join()
        self.pipe.close()


class _Pickler(pickle.Pickler):
    """Sends the arrays of a shared form once, and its key from then on."""

    def __init__(self, file: io.BytesIO, known: set[str]) -> None:
        super().__init__(file, protocol=5)
        self.known, self.sent = known, set[str]()

    def persistent_id(self, thing: Any) -> Any:
        if not isinstance(thing, SharedForm):
            return None
        if thing.key in self.known | self.sent:
            return thing.key, None
        self.sent.add(thing.key)
        return thing.key, thing.form


class _Unpickler(pickle.Unpickler):
    """Reads what `_Pickler` sends."""

    def __init__(self, data: bytes, forms: dict[str, SharedForm]) -> None:
        super().__init__(io.BytesIO(data))
        self.forms = forms

    def persistent_load(self, pid: Any) -> SharedForm:
        key, form = pid
        if form is not None:
            self.forms[key] = SharedForm(key, form)
        return self.forms[key]


def serve(pipe: Connection) -> None:
    """What a worker process does: answer each task with a record, or why it is lost."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    current_process().name = "latpath worker"
    os.dup2(2, 1)  # what models print must not come between records
    inbox: queue.SimpleQueue[bytes] = queue.SimpleQueue()
    threading.Thread(target=_receive, args=(pipe, inbox), daemon=True).start()
    forms: dict[str, SharedForm] = {}
    with suppress(BrokenPipeError):
        pipe.send(None)
        while True:
            pipe.send(_answer(inbox.get(), forms))


def _receive(pipe: Connection, inbox: queue.SimpleQueue[bytes]) -> None:
    """Read ahead; when the batch has ended or was killed, end at once, whatever is going on."""
    try:
        while True:
            inbox.put(pipe.recv_bytes())
    except (EOFError, OSError):
        os._exit(0)


def _answer(data: bytes, forms: dict[str, SharedForm]) -> BatchRecord | str:
    try:
        task = _Unpickler(data, forms).load()
        return run_task(task)
    except MemoryError:
        return "it ran out of memory"
    except Exception as error:  # of unpickling: what was sent needs something that is not here
        return f"its worker could not make sense of it: {type(error).__name__}: {error}"


@contextmanager
def _one_thread_each() -> Iterator[None]:
    """Let processes start whose linear algebra does not take the cores of the others.

    NumPy reads these when it is loaded; what the user has set stays.
    """
    ours = {name: "1" for name in THREADS if name not in os.environ}
    os.environ.update(ours)
    try:
        yield
    finally:
        for name in ours:
            del os.environ[name]


@contextmanager
def _deaf_to_ctrl_c() -> Iterator[None]:
    """Let processes start that overhear Ctrl-C: it is the batch that is meant."""
    if threading.current_thread() is not threading.main_thread() or sys.platform == "win32":
        yield
        return
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)

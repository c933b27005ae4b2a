"""Who does the work of a batch: what local processes and executors have in common."""

from __future__ import annotations

from typing import Protocol

from .task import Answer, Task


class BatchError(Exception):
    """The batch cannot go on; what is finished stays in the journal."""


class Crew(Protocol):
    """Takes tasks, and gives each one's answer exactly once."""

    @property
    def full(self) -> bool:
        """Whether it has as much as it needs to keep busy."""

    @property
    def busy(self) -> bool:
        """Whether some answer is outstanding."""

    def submit(self, task: Task) -> None:
        """Take a task; also when full."""

    def collect(self, timeout: float | None = None) -> list[Answer]:
        """Wait for some answers; after `timeout` seconds there may be none.

        Raises
        ------
        BatchError
            When no worker is left to wait for.
        """

    def close(self) -> None:
        """Drop what is not answered, and end what was started."""

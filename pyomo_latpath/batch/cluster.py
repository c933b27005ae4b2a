"""A Dask cluster as a crew.

Instances that are files are read by the workers, and plans are written by them: both need a file
system that the workers share. Where a worker dies, Dask itself tries again on another one (three
times, unless its scheduler is set otherwise) before it gives up.
"""

from __future__ import annotations

from types import TracebackType
from typing import Any

from .crew import BatchError
from .executors import InExecutor

#: Seconds to wait for the scheduler.
PATIENCE = 30
#: Workers to have work ready for, also where a cluster starts its workers when there is work.
LEAST = 8


class Cluster:
    """A connection to a Dask scheduler, for use in a `with` statement.

    Parameters
    ----------
    address : str
        Of the scheduler, as `tcp://host:8786`.

    Raises
    ------
    BatchError
        Without the packages `dask` and `distributed`, or when no scheduler answers.
    """

    def __init__(self, address: str) -> None:
        try:
            from distributed import Client
        except ImportError as error:
            raise BatchError(
                "a cluster needs the packages dask and distributed: pip install "
                "'pyomo_latpath[cluster]'"
            ) from error
        try:
            self.client: Any = Client(address, timeout=PATIENCE, set_as_default=False)
        except (OSError, ValueError, TimeoutError) as error:
            raise BatchError(f"no Dask scheduler answers at {address} ({error})") from error

    def __enter__(self) -> Cluster:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.client.close()

    def crew(self) -> InExecutor:
        """The cluster's workers, as many as it has now; some more may be on their way."""
        threads = sum(self.client.nthreads().values())
        return InExecutor(self.client.get_executor(), max(threads, LEAST))

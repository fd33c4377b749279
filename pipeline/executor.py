"""Where work is done: in this process, in several, or on a cluster, behind one interface.

All three have the methods of ``concurrent.futures.Executor``. Results come back in the order of
the tasks, and no task knows where it runs, so that none of this changes a byte of them. A task
is a function of a module and small arguments; large things (the road graph) are opened by their
path where the task runs.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from multiprocessing import get_context
from typing import Any, ParamSpec, TypeVar, cast

from pipeline.errors import StudyError
from pipeline.settings import ComputeSettings

P = ParamSpec("P")
T = TypeVar("T")

LARGEST_TASK = "1 GiB"  # beyond it the cluster's client warns
WAIT_S = 30  # for a scheduler to answer


class InProcess(Executor):
    """Does every task at once, in this process."""

    workers = 1

    def submit(self, fn: Callable[P, T], /, *args: P.args, **kwargs: P.kwargs) -> Future[T]:
        """Do the task; the future is done already, and holds its error if it failed."""
        future: Future[T] = Future()
        try:
            future.set_result(fn(*args, **kwargs))
        except Exception as error:  # noqa: BLE001 - handed on to whoever asks for the result
            future.set_exception(error)
        return future

    def map(
        self,
        fn: Callable[..., T],
        *iterables: Iterable[Any],
        timeout: float | None = None,  # noqa: ARG002 - nothing is waited for
        chunksize: int = 1,  # noqa: ARG002
    ) -> Iterator[T]:
        """Do one task after the other, each when its result is asked for."""
        return map(fn, *iterables)


class Processes(ProcessPoolExecutor):
    """Several processes on this machine.

    They start fresh: a fork of a process whose libraries run threads can hang.
    """

    def __init__(self, workers: int) -> None:
        super().__init__(workers, mp_context=get_context("spawn"))
        self.workers = workers


class Cluster(Executor):
    """The workers of a dask.distributed scheduler; a task whose worker dies is done again."""

    def __init__(self, scheduler: str) -> None:
        try:
            import dask
            from distributed import Client
        except ImportError:
            raise StudyError(
                "compute.scheduler needs dask.distributed, and it is not installed. "
                "Install the extra 'cluster' (pip install 'roadworth[cluster]') here and on "
                "every worker, or remove compute.scheduler."
            ) from None
        dask.config.set({"distributed.admin.large-graph-warning-threshold": LARGEST_TASK})
        try:
            self._client: Any = cast("Any", Client)(scheduler, timeout=WAIT_S, set_as_default=False)
            self._client.wait_for_workers(1, timeout=WAIT_S)
        except (OSError, ValueError) as error:
            raise StudyError(
                f"compute.scheduler: {scheduler!r} has no scheduler with a worker ({error}). "
                "Start 'dask scheduler' and 'dask worker' there, correct the address, or remove "
                "compute.scheduler to work on this machine."
            ) from None
        self._executor = self._client.get_executor(pure=False)
        self.workers = max(1, sum(self._client.ncores().values()))

    def submit(self, fn: Callable[P, T], /, *args: P.args, **kwargs: P.kwargs) -> Future[T]:
        """Hand the task to the scheduler."""
        return cast("Future[T]", self._executor.submit(fn, *args, **kwargs))

    def shutdown(self, wait: bool = True, *, cancel_futures: bool = False) -> None:  # noqa: FBT001, FBT002 - as in the standard library
        """Leave the scheduler, which goes on without this client."""
        self._executor.shutdown(wait=wait and not cancel_futures)
        self._client.close()


Workforce = InProcess | Processes | Cluster


def make_executor(compute: ComputeSettings) -> Workforce:
    """The executor that the study asks for.

    Raises
    ------
    StudyError
        dask.distributed is not installed, or no scheduler with a worker answers.
    """
    if compute.scheduler:
        return Cluster(compute.scheduler)
    return InProcess() if compute.workers == 1 else Processes(compute.workers)


def in_batches(
    executor: Executor, work: Callable[..., list[T]], tasks: list[Any], *shared: Any, batches: int
) -> Iterator[T]:
    """Results of `work(batch, *shared)` over the tasks, in their order.

    `shared` is sent once for each batch, and not for each task.
    """
    dealt = [tasks[first::batches] for first in range(min(batches, len(tasks)))]
    done = [executor.submit(work, batch, *shared) for batch in dealt]
    results = [iter(future.result()) for future in done]
    for place in range(len(tasks)):
        yield next(results[place % len(results)])

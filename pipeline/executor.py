"""Where work is done: in this process, or in several, behind one interface.

Whatever has the methods of ``concurrent.futures.Executor`` will do, so that a cluster's executor
can take the place of these. Results come back in the order of the tasks, so that the number of
workers changes no byte of them.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from multiprocessing import get_context
from typing import Any, ParamSpec, TypeVar

P = ParamSpec("P")
T = TypeVar("T")


class InProcess(Executor):
    """Does every task at once, in this process."""

    def submit(self, fn: Callable[P, T], /, *args: P.args, **kwargs: P.kwargs) -> Future[T]:
        """Do the task; the future is done already, and holds its error if it failed."""
        future: Future[T] = Future()
        try:
            future.set_result(fn(*args, **kwargs))
        except Exception as error:  # noqa: BLE001 - handed on to whoever asks for the result
            future.set_exception(error)
        return future


def make_executor(workers: int) -> Executor:
    """An executor with so many processes; one is this process itself.

    New processes start fresh: a fork of a process whose libraries run threads can hang.
    """
    if workers == 1:
        return InProcess()
    return ProcessPoolExecutor(workers, mp_context=get_context("spawn"))


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

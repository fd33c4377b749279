"""Large things for tasks: as they are in this process, by their path in any other.

The road graph is never sent. Another process, or another machine that sees the same folder,
opens its arrays where they lie (they are memory-mapped, so processes of a machine share
them); what else all tasks need is written once into a folder beside the graph, which goes when
the work is done.
"""

from __future__ import annotations

import pickle
from collections.abc import Callable, Iterator
from concurrent.futures import Executor
from contextlib import contextmanager
from functools import lru_cache, partial
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any, TypeVar

from pipeline.executor import InProcess
from pipeline.roads.graph import RoadGraph

T = TypeVar("T")
Find = Callable[[], tuple[RoadGraph, T]]


@contextmanager
def at_hand(graph: RoadGraph, thing: T, executor: Executor) -> Iterator[Find[T]]:
    """A small function by which tasks of the executor get the graph and another thing."""
    if isinstance(executor, InProcess):
        yield partial(_as_they_are, graph, thing)
        return
    beside = graph.folder.parent if graph.folder else None
    with TemporaryDirectory(prefix=".tasks-", dir=beside, ignore_cleanup_errors=True) as name:
        file, folder = Path(name) / "thing.pickle", graph.folder
        file.write_bytes(pickle.dumps(thing))
        if folder is None:
            folder = Path(name) / RoadGraph.folder_name
            folder.mkdir()
            graph.write(folder)
        yield partial(_opened, folder.resolve(), file.resolve())


def _as_they_are(graph: RoadGraph, thing: T) -> tuple[RoadGraph, T]:
    return graph, thing


@lru_cache(maxsize=1)  # the file's name is never used twice
def _opened(folder: Path, file: Path) -> tuple[RoadGraph, Any]:
    """What lies at the paths; a process opens it once for all its tasks."""
    return RoadGraph.read(folder), pickle.loads(file.read_bytes())

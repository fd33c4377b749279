"""Progress of a run: a bar on a terminal, plain lines in a log."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager

Tell = Callable[[str], None]
Begin = Callable[[str, int, int], None]


@contextmanager
def stage_progress(*, shown: bool) -> Iterator[tuple[Tell, Begin]]:
    """Give a function for a stage's line when it is done, and one for when it starts.

    The bar goes to the terminal on standard error and is wiped when the run ends; the lines go to
    standard output, without colours, whether that is a terminal or not.
    """
    if not shown:
        yield _nothing, _no_start
    elif not sys.stderr.isatty():
        yield _plain, _no_start
    else:
        with _bar() as functions:
            yield functions


def _nothing(line: str) -> None:
    del line


def _plain(line: str) -> None:
    print(line, flush=True)


def _no_start(name: str, place: int, total: int) -> None:
    del name, place, total


@contextmanager
def _bar() -> Iterator[tuple[Tell, Begin]]:
    from rich.console import Console
    from rich.progress import BarColumn, Progress, SpinnerColumn, TextColumn, TimeElapsedColumn

    columns = (SpinnerColumn(), TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn())
    with Progress(*columns, console=Console(stderr=True), transient=True) as progress:
        task = progress.add_task("", total=None)

        def begin(name: str, place: int, total: int) -> None:
            progress.update(task, description=name, completed=place, total=total)

        def tell(line: str) -> None:
            if sys.stdout.isatty():
                progress.print(line, markup=False, highlight=False)
            else:
                _plain(line)

        yield tell, begin

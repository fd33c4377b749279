"""Reading and writing stage tables; nothing half-written is ever read.

A file or folder is written beside its final place, flushed to the disk, and renamed over it.
"""

from __future__ import annotations

import fcntl
import os
import shutil
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import geopandas as gpd
import pandas as pd
import pyarrow.parquet as pq

from pipeline.errors import PipelineError
from pipeline.schema import Table


@contextmanager
def atomic_file(path: Path) -> Iterator[Path]:
    """Give a temporary path beside `path`; on leaving without error it takes `path`'s place."""
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, name = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
    os.close(handle)
    temporary = Path(name)
    try:
        yield temporary
        _flush(temporary)
        temporary.chmod(0o644)
        temporary.replace(path)
        _flush(path.parent)
    finally:
        temporary.unlink(missing_ok=True)


@contextmanager
def atomic_folder(path: Path) -> Iterator[Path]:
    """Give an empty temporary folder; on leaving without error it takes `path`'s place.

    The old folder, if any, is renamed away first and removed last. A reader that comes between
    the two renames finds no folder, never a mixture of old and new files.
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    temporary = Path(tempfile.mkdtemp(prefix=f".{path.name}.", dir=path.parent))
    retired = temporary.with_name(temporary.name + ".old")
    try:
        yield temporary
        for file in sorted(temporary.rglob("*")):
            _flush(file)
        _flush(temporary)
        temporary.chmod(0o755)
        if path.exists():
            path.rename(retired)
        temporary.rename(path)
        _flush(path.parent)
    finally:
        shutil.rmtree(temporary, ignore_errors=True)
        shutil.rmtree(retired, ignore_errors=True)


@contextmanager
def locked(folder: Path) -> Iterator[None]:
    """Hold a folder for one run; a second run there is refused, not mixed in.

    Raises
    ------
    PipelineError
        Another run holds the folder.
    """
    folder.mkdir(parents=True, exist_ok=True)
    with (folder / ".lock").open("w") as handle:
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            raise PipelineError(
                f"another run is at work in {folder}; wait for it, or give --output another folder."
            ) from None
        yield


def _flush(path: Path) -> None:
    """Ask the system to put a file, or a folder's list of names, on the disk."""
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def write_table(frame: pd.DataFrame, path: Path) -> None:
    """Write a stage table as Parquet, or as GeoParquet where it has a geometry."""
    with atomic_file(path) as temporary:
        frame.to_parquet(temporary, index=False, compression="zstd")


def read_table(table: type[Table], path: Path) -> pd.DataFrame:
    """Read a stage table back and check it against its declaration."""
    if b"geo" in (pq.read_schema(path).metadata or {}):
        return table.checked(gpd.read_parquet(path), source=path.name)
    return table.checked(pd.read_parquet(path), source=path.name)


def write_text(text: str, path: Path) -> None:
    """Write UTF-8 text with plain line feeds."""
    with atomic_file(path) as temporary:
        temporary.write_text(text, encoding="utf-8", newline="\n")

"""Array types and compilation that the road modules and the search share."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar, cast

import numba
import numpy as np
import numpy.typing as npt

Bool = npt.NDArray[np.bool_]
Int8 = npt.NDArray[np.int8]
Uint8 = npt.NDArray[np.uint8]
Int32 = npt.NDArray[np.int32]
Int64 = npt.NDArray[np.int64]
Float32 = npt.NDArray[np.float32]
Float64 = npt.NDArray[np.float64]

F = TypeVar("F", bound=Callable[..., object])


def compiled(function: F) -> F:
    """Compile with numba; without its disk cache where no cache folder can be written."""
    try:
        return cast("F", numba.njit(cache=True, nogil=True)(function))
    except RuntimeError:
        return cast("F", numba.njit(nogil=True)(function))


def ranges(starts: Int64, counts: Int64) -> Int64:
    """`starts[i], starts[i] + 1, ...` (`counts[i]` of them) for every `i`, in one array."""
    ends = np.cumsum(counts)
    total = int(ends[-1]) if len(ends) else 0
    shift = np.repeat(starts - (ends - counts), counts)
    return np.asarray(np.arange(total, dtype=np.int64) + shift, dtype=np.int64)


def offsets(counts: Int64) -> Int64:
    """Where each of `counts` consecutive groups starts, and where the last one ends."""
    return np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)


@compiled
def grouped(group: Int64 | Int32, groups: int) -> tuple[Int64, Int64]:
    """Rows of each group in their order: ``order[first[g]:first[g + 1]]`` (a counting sort)."""
    first = np.zeros(groups + 1, dtype=np.int64)
    for row in range(len(group)):
        first[group[row] + 1] += 1
    for number in range(groups):
        first[number + 1] += first[number]
    at = first[:-1].copy()
    order = np.empty(len(group), dtype=np.int64)
    for row in range(len(group)):
        order[at[group[row]]] = row
        at[group[row]] += 1
    return first, order

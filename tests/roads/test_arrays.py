"""Helpers on arrays, and compilation where no cache folder can be written."""

from __future__ import annotations

from typing import Any

import numba
import numpy as np
import pytest

from pipeline.roads.arrays import compiled, offsets, ranges


def test_ranges_one_after_the_other() -> None:
    counts = np.array([2, 0, 3])
    assert ranges(np.array([10, 5, 20]), counts).tolist() == [10, 11, 20, 21, 22]
    assert offsets(counts).tolist() == [0, 2, 2, 5]
    assert ranges(counts[:0], counts[:0]).tolist() == []


def test_compiles_without_a_cache_folder(monkeypatch: pytest.MonkeyPatch) -> None:
    """numba refuses to cache where it can write nowhere; the function works all the same."""
    njit = numba.njit

    def refusing(*functions: Any, cache: bool = False, **options: Any) -> Any:
        if cache:
            raise RuntimeError("cannot cache function: no locator available")
        return njit(*functions, **options)

    monkeypatch.setattr(numba, "njit", refusing)

    def double(value: int) -> int:
        return 2 * value

    assert compiled(double)(21) == 42

"""Rows of a table, one at a time."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import pandas as pd


def rows_of(frame: pd.DataFrame) -> Iterator[Any]:
    """Rows as named tuples; their types are those that ``tables`` declares."""
    yield from frame.itertuples()

"""Tables of one site each, gathered into one in which the sites of a zone stand together."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.roads.arrays import Int64


class Gathering:
    """Room for so many tables with the same columns and as many rows, each put in at its place.

    A table is copied into the final columns at once and need not be kept: of 50 sites and 33,000
    zones the tables beside the result would be as large again. Words are held as the numbers of
    the different ones.
    """

    def __init__(self, tables: int) -> None:
        self.tables = tables
        self.columns: dict[str, npt.NDArray[Any]] = {}
        self.words: dict[str, dict[str, int]] = {}

    def put(self, place: int, table: pd.DataFrame) -> None:
        """Copy a table into its place."""
        for name, values in table.items():
            column = str(name)
            numbers = self._numbered(column, values) if values.dtype == "str" else values.to_numpy()
            if column not in self.columns:
                self.columns[column] = np.empty((len(table), self.tables), dtype=numbers.dtype)
            self.columns[column][:, place] = numbers

    def _numbered(self, column: str, values: pd.Series[str]) -> Int64:
        """Numbers of words, the same in every table; -1 where one is missing."""
        known = self.words.setdefault(column, {})
        codes, found = pd.factorize(values)
        numbers = [known.setdefault(str(word), len(known)) for word in found]
        return np.append(np.array(numbers, dtype=np.int64), -1)[codes]

    def table(self) -> pd.DataFrame:
        """All tables in one: the first rows of all, then the second rows, and so on."""
        return pd.DataFrame({name: self._column(name) for name in list(self.columns)}, copy=False)

    def _column(self, name: str) -> Any:
        numbers = self.columns.pop(name).ravel()
        if name not in self.words:
            return numbers
        return pd.array(list(self.words[name]), dtype="str").take(numbers, allow_fill=True)

"""How a table is declared and checked: the base class of everything in ``tables.py``."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Self, cast

import numpy as np
import pandas as pd
import pandera.pandas as pa

from pipeline.errors import TableError


def column(meaning: str, *, unit: str = "", **checks: Any) -> Any:
    """Declare a column: what it means, its unit ('' for none), its checks."""
    return pa.Field(description=meaning, metadata={"unit": unit}, **checks)


@dataclass(frozen=True)
class Source:
    """Where a table came from, so that an error can speak of the file as its owner knows it.

    Parameters
    ----------
    name : the file's name, or the stage's.
    names : the owner's column names by ours, where they differ.
    first_line : line of the file that the first data row stands in; 0 where there are no lines.
    """

    name: str
    names: Mapping[str, str] = field(default_factory=dict)
    first_line: int = 0

    def column(self, name: str) -> str:
        """The column's name as its owner knows it."""
        return self.names.get(name, name)

    def row(self, index: object) -> str:
        """' in row 7 (line 8)' for position 6 of a file; '' for what is no position."""
        if isinstance(index, int | float | np.integer) and index == index // 1:
            line = f" (line {int(index) + self.first_line})" if self.first_line else ""
            return f" in row {int(index) + 1}{line}"
        return ""


class Table(pa.DataFrameModel):
    """Base of all tables: validation with clear errors, and the data dictionary."""

    class Config:
        coerce = True
        strict = False

    @classmethod
    def table_name(cls) -> str:
        """The table's fixed name: the class's, in lower case with underscores."""
        return re.sub(r"(?<!^)(?=[A-Z])", "_", cls.__name__).lower()

    @classmethod
    def checked(cls, frame: pd.DataFrame, *, source: str | Source = "") -> pd.DataFrame:
        """Return `frame` with declared types, or say what is wrong with it.

        Parameters
        ----------
        frame : any columns in any order; declared columns come first in the result.
        source : where it came from, for the message (a file name, a stage, or a `Source` with
            the owner's own column names and row numbers).

        Raises
        ------
        TableError
            A declared column is missing, or holds a wrong type, value or duplicate key.
        """
        where = source if isinstance(source, Source) else Source(source or cls.table_name())
        _refuse_fractions(cls, frame, where)
        try:
            table = cls.validate(frame, lazy=True)
        except pa.errors.SchemaErrors as error:
            raise TableError(_explain(cls, frame, error, where)) from None
        declared = [column for column in cls.columns() if column in table]
        others = [column for column in table.columns if column not in declared]
        return table[declared + others]

    @classmethod
    def columns(cls) -> list[str]:
        """Names of the declared columns: the table's own, then those that it shares."""
        names = list(cls.to_schema().columns)
        return sorted(names, key=lambda name: name not in cls.__annotations__)

    @classmethod
    def dictionary(cls) -> pd.DataFrame:
        """Data dictionary: `table, column, type, unit, required, missing_allowed, meaning`."""
        rows = []
        schema = cls.to_schema().columns
        for name, column in ((name, schema[name]) for name in cls.columns()):
            unit = (column.metadata or {}).get("unit", "")
            rows.append(
                {
                    "table": cls.table_name(),
                    "column": name,
                    "type": _type_word(str(column.dtype)),
                    "unit": unit,
                    "required": column.required,
                    "missing_allowed": column.nullable,
                    "meaning": column.description,
                }
            )
        return pd.DataFrame(rows)

    @classmethod
    def describe(cls: type[Self]) -> str:
        """First line of the table's docstring."""
        return cast("str", cls.__doc__).strip().splitlines()[0]


def _type_word(dtype: str) -> str:
    words = {"float64": "number", "int64": "integer", "bool": "boolean"}
    return words.get(dtype, "string")


def _refuse_fractions(table: type[Table], frame: pd.DataFrame, where: Source) -> None:
    """A count with a fraction is an error; coercion alone would cut the fraction off."""
    for name, column in table.to_schema().columns.items():
        if str(column.dtype) != "int64" or name not in frame:
            continue
        numbers = pd.to_numeric(frame[name], errors="coerce").to_numpy(dtype=float, na_value=0)
        broken = numbers != np.floor(numbers)
        if broken.any():
            first = int(broken.argmax())
            raise TableError(
                f"{where.name}: {int(broken.sum())} value(s) in column {where.column(name)!r} are "
                f"no whole numbers; first: {_plain(frame[name].iloc[first])}"
                f"{where.row(frame.index[first])}. Correct the table."
            )


def _explain(
    table: type[Table], frame: pd.DataFrame, error: pa.errors.SchemaErrors, where: Source
) -> str:
    """One sentence per kind of failure: what, how many, an example, the remedy."""
    missing = [c for c in _required(table) if c not in frame.columns]
    if missing:
        have = ", ".join(map(str, frame.columns[:20]))
        return (
            f"{where.name}: column {missing[0]!r} is missing (needed: {', '.join(missing)}; "
            f"the table has: {have}). Add it, or map the table's own name to it in the study file."
        )
    cases = error.failure_cases
    first = _first_case(cases)
    if "unique" in str(first["check"]):
        return _explain_duplicates(table, frame, where)
    name = str(first["column"])
    same = cases[(cases["check"] == first["check"]) & (cases["column"] == first["column"])]
    number = "1 value" if len(same) == 1 else f"{len(same)} values"
    verb = "is" if len(same) == 1 else "are"
    words = _check_words(str(first["check"]), table, name)
    example = "" if pd.isna(first["failure_case"]) else f" {_plain(first['failure_case'])}"
    return (
        f"{where.name}: {number} in column {where.column(name)!r} {verb} {words}; "
        f"first:{example}{where.row(first['index'])}. "
        f"{where.column(name)!r} is: {_meaning(table, name)}. Correct the table."
    )


def _first_case(cases: pd.DataFrame) -> pd.Series[Any]:
    """The failure to speak of: wrong types before wrong values, then the order of the rows."""
    coerced = cases["check"].astype(str).str.startswith("coerce_dtype")
    return cases[coerced].iloc[0] if coerced.any() else cases.iloc[0]


def _explain_duplicates(table: type[Table], frame: pd.DataFrame, where: Source) -> str:
    key = list(table.to_schema().unique or [])
    doubled = frame[frame.duplicated(key, keep=False)]
    same = (doubled[key] == doubled[key].iloc[0]).all(axis=1)
    example = ", ".join(f"{where.column(name)} {_plain(doubled[name].iloc[0])}" for name in key)
    rows = " and".join(where.row(index) for index in doubled.index[same][:2])
    return (
        f"{where.name}: {len(doubled)} rows share a key that must be unique "
        f"({', '.join(map(where.column, key))}); first: {example}{rows}. "
        "Remove or merge the duplicate rows."
    )


def _required(table: type[Table]) -> list[str]:
    return [name for name, column in table.to_schema().columns.items() if column.required]


def _meaning(table: type[Table], column: str) -> str:
    spec = table.to_schema().columns.get(column)
    return str(spec.description) if spec is not None else "a declared column"


def _plain(value: object) -> str:
    """A value as it stands in the file, without its numpy wrapping."""
    item = getattr(value, "item", None)
    return repr(item() if callable(item) else value)


_CHECKS = {
    "not_nullable": "missing",
    "greater_than": "not greater than",
    "greater_than_or_equal_to": "below",
    "less_than_or_equal_to": "above",
    "isin": "not one of",
}


def _check_words(check: str, table: type[Table], name: str) -> str:
    """A failed check in words: `greater_than(0)` becomes 'not greater than 0'."""
    kind, _, argument = check.partition("(")
    if kind in ("coerce_dtype", "dtype"):
        return f"not of type {_type_word(str(table.to_schema().columns[name].dtype))}"
    argument = argument.strip("[]()")
    return f"{_CHECKS.get(kind, kind)} {argument}".strip()

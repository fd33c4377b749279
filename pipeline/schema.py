"""How a table is declared and checked: the base class of everything in ``tables.py``."""

from __future__ import annotations

import re
from numbers import Integral
from typing import Any, Self, cast

import pandas as pd
import pandera.pandas as pa

from pipeline.errors import TableError


def column(meaning: str, *, unit: str = "", **checks: Any) -> Any:
    """Declare a column: what it means, its unit ('' for none), its checks."""
    return pa.Field(description=meaning, metadata={"unit": unit}, **checks)


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
    def checked(cls, frame: pd.DataFrame, *, source: str = "") -> pd.DataFrame:
        """Return `frame` with declared types, or say what is wrong with it.

        Parameters
        ----------
        frame : any columns in any order; declared columns come first in the result.
        source : where it came from, for the message (a file name, a stage).

        Raises
        ------
        TableError
            A declared column is missing, or holds a wrong type, value or duplicate key.
        """
        where = source or cls.table_name()
        try:
            table = cls.validate(frame, lazy=True)
        except pa.errors.SchemaErrors as error:
            raise TableError(_explain(cls, frame, error, where)) from None
        declared = [column for column in cls.columns() if column in table]
        others = [column for column in table.columns if column not in declared]
        return table[declared + others]

    @classmethod
    def columns(cls) -> list[str]:
        """Names of the declared columns, in order."""
        return list(cls.to_schema().columns)

    @classmethod
    def dictionary(cls) -> pd.DataFrame:
        """Data dictionary: `table, column, type, unit, required, missing_allowed, meaning`."""
        rows = []
        for name, column in cls.to_schema().columns.items():
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


def _explain(
    table: type[Table], frame: pd.DataFrame, error: pa.errors.SchemaErrors, where: str
) -> str:
    """One sentence per kind of failure: what, how many, an example, the remedy."""
    missing = [c for c in _required(table) if c not in frame.columns]
    if missing:
        have = ", ".join(map(str, frame.columns[:20]))
        return (
            f"{where}: column {missing[0]!r} is missing (needed: {', '.join(missing)}; "
            f"the table has: {have}). Add it, or map the table's own name to it in the study file."
        )
    cases = error.failure_cases
    first = cases.iloc[0]
    if "unique" in str(first["check"]):
        return _explain_duplicates(table, frame, where)
    name = str(first["column"])
    same = cases[(cases["check"] == first["check"]) & (cases["column"] == first["column"])]
    return (
        f"{where}: {len(same)} value(s) in column {name!r} {_check_words(str(first['check']))}; "
        f"first: {_plain(first['failure_case'])}{_row_word(first['index'])}. "
        f"{name!r} is: {_meaning(table, name)}. Correct the table."
    )


def _explain_duplicates(table: type[Table], frame: pd.DataFrame, where: str) -> str:
    key = list(table.to_schema().unique or [])
    doubled = frame[frame.duplicated(key, keep=False)]
    example = ", ".join(f"{name} {_plain(doubled[name].iloc[0])}" for name in key)
    return (
        f"{where}: {len(doubled)} rows share a key that must be unique "
        f"({', '.join(key)}); first: {example}{_row_word(doubled.index[0])}. "
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


def _row_word(index: object) -> str:
    """Row as a person counts it: data rows from 1."""
    return f" in row {int(index) + 1}" if isinstance(index, Integral) else ""


_CHECKS = {
    "not_nullable": "are missing",
    "greater_than": "must be greater than",
    "greater_than_or_equal_to": "must be at least",
    "less_than_or_equal_to": "must be at most",
    "isin": "must be one of",
}


def _check_words(check: str) -> str:
    """A check in words: `greater_than(0)` becomes 'must be greater than 0'."""
    name, _, argument = check.partition("(")
    argument = argument.rstrip(")")
    if name in ("coerce_dtype", "dtype"):
        return f"must be of type {_type_word(argument.strip(chr(39)))}"
    return f"{_CHECKS.get(name, name)} {argument}".strip()

"""Columns of a user's table by our names, with defaults for what may be absent."""

from __future__ import annotations

import pandas as pd

from pipeline.errors import StudyError, TableError
from pipeline.sections import FileSection, Section
from pipeline.userfiles import UserTable, first_true, read_user_table

TRUTH = {"true": True, "1": True, "yes": True, "false": False, "0": False, "no": False}


class Mapped:
    """Columns of a user's table by our names; what may be absent has a default."""

    def __init__(self, table: UserTable, columns: Section) -> None:
        self.table, self.columns = table, columns

    def has(self, name: str) -> bool:
        """Whether the study names a column for it."""
        return getattr(self.columns, name) is not None

    def texts(self, name: str, default: object = None) -> pd.Series[str]:
        """A column as text; `default` where it is absent and may be."""
        column = self._column(name, default)
        if column is not None:
            return self.table.texts(column)
        return self._filled(default).astype("str").where(self._filled(default).notna())

    def numbers(self, name: str, default: float | None = None) -> pd.Series[float]:
        """A column as numbers; `default` where it is absent and may be."""
        column = self._column(name, default)
        return self._filled(default) if column is None else self.table.numbers(column)

    def _filled(self, default: object) -> pd.Series:
        if isinstance(default, pd.Series):
            return default
        return pd.Series(default, index=self.table.frame.index)

    def _column(self, name: str, default: object) -> str | None:
        """The user's column; None where it is absent and may be."""
        column = str(getattr(self.columns, name))
        asked_for = name in self.columns.model_fields_set
        if default is None or asked_for or self.table.has(column):
            meaning = type(self.columns).model_fields[name].description or name
            self.table.need(column, f"{name}: {meaning.split(';')[0].rstrip('.').lower()}")
            return column
        return None


def read_section(section: FileSection) -> UserTable:
    """Read a section's own file."""
    if section.file is None:
        raise StudyError(
            f"[{section.section_name}] file is needed and missing; name the file in the study file."
        )
    return read_user_table(
        section.file, sheet=section.sheet, layer=section.layer, encoding=section.encoding
    )


def as_truth(table: UserTable, name: str) -> pd.Series[bool]:
    """A column as true and false; TableError where a value is neither."""
    text = table.texts(name).str.lower()
    wrong = ~text.isin(list(TRUTH))
    if wrong.any():
        first = first_true(wrong)
        raise TableError(
            f"{table.name}: {int(wrong.sum())} value(s) in column {name!r} are neither true nor "
            f"false; first: {text.iloc[first]!r}{table.row(wrong, first)}. Write true or false."
        )
    return text.map(TRUTH).astype("bool")

"""What a section of a study file is made of: declared keys, checked values, paths.

``settings`` declares the sections with this; ``cost_settings`` those of [costs].
"""

from __future__ import annotations

import re
from pathlib import Path
from typing import Annotated, Any, ClassVar, get_args

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, ValidationInfo
from pydantic.fields import FieldInfo


def setting(
    meaning: str, default: Any = ..., *, unit: str = "", usual: str = "", **bounds: Any
) -> Any:
    """Declare a key: what it means, its unit, a usual value, its bounds.

    A key with a `usual` value is an assumption: it moves the answer, and the report lists it.
    """
    extra: dict[str, Any] = {"unit": unit, "usual": usual}
    return Field(default, description=meaning, json_schema_extra=extra, **bounds)


def _resolve(value: object, info: ValidationInfo) -> object:
    """Paths in a study file are relative to the study file."""
    if isinstance(value, str | Path):
        return (Path((info.context or {}).get("base", ".")) / value).resolve()
    return value


def _known_crs(value: str) -> str:
    # Imported here: a study with nothing to do should not wait for the library.
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    try:
        CRS.from_user_input(value)
    except CRSError:
        raise ValueError(f"{value!r} is no coordinate reference system that PROJ knows") from None
    return value


CrsName = Annotated[str, AfterValidator(_known_crs)]
InputPath = Annotated[Path, BeforeValidator(_resolve), "input"]
OutputPath = Annotated[Path, BeforeValidator(_resolve), "output"]
Share = Annotated[float, Field(ge=0, le=1)]
Positive = Annotated[float, Field(gt=0)]
NotNegative = Annotated[float, Field(ge=0)]


def _regex(value: str) -> str:
    try:
        re.compile(value)
    except re.error as error:
        raise ValueError(f"not a regular expression ({error})") from None
    return value


Regex = Annotated[str, AfterValidator(_regex)]


class Section(BaseModel):
    """Base of all sections: strict and frozen."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, validate_default=True)
    section_name: ClassVar[str] = ""


class FileSection(Section):
    """A section whose table is a file of the study's own."""

    file: InputPath | None = setting("CSV, Excel or Parquet.", None)
    sheet: str | None = setting("Sheet, where the file is a workbook; default: the first.", None)
    layer: str | None = setting("Layer, where the file is a GIS file with several.", None)
    encoding: str = setting("Encoding of a CSV file: 'utf-8', 'latin-1', 'cp1252', ...", "utf-8")


def inner_section(info: FieldInfo) -> type[Section] | None:
    """The section that a key holds many of (by name, or in a list); None for a plain key."""
    for part in get_args(info.annotation):
        if isinstance(part, type) and issubclass(part, Section):
            return part
    return None

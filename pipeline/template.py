"""A new study file, and the reference of every key; both made from ``settings``."""

from __future__ import annotations

import json
import textwrap
from collections.abc import Iterator
from pathlib import Path
from typing import Any, get_origin

from pydantic import BaseModel
from pydantic.fields import FieldInfo
from pydantic_core import PydanticUndefined

from pipeline.errors import StudyError
from pipeline.sections import Section, inner_section
from pipeline.settings import SECTIONS
from pipeline.stamps import CONFIG
from pipeline.tables import TABLES

WIDTH = 96

# What a new study fills in; every other key stands as a comment with its default.
FILLED: dict[str, Any] = {
    "study.title": "What a visit to {name} is worth",
    "study.currency": "EUR",
    "study.price_year": 2025,
    "sites.file": "{data}/sites.csv",
    "zones.file": "{data}/zones.csv",
    "visits.file": "{data}/visits.csv",
    "roads.files": ["{data}/roads.osm.pbf"],
    "costs.vehicle_cost_per_km": 0.25,
    "costs.wage_fraction": 0.3333,
}


def write_new_study(name: str, *, config: Path = CONFIG) -> str:
    """Write `config/<name>.toml` and the folder for its inputs; say what to do next.

    Raises
    ------
    StudyError
        The name cannot be used, or the study file is there already.
    """
    if not name.isidentifier() or not name.islower():
        raise StudyError(f"{name!r}: take a name in lower-case letters, digits and underscores.")
    path = config / f"{name}.toml"
    if path.exists():
        raise StudyError(f"{path} is there already; choose another name or edit it.")
    folder = config.parent / "data" / name / "input"
    folder.mkdir(parents=True, exist_ok=True)
    config.mkdir(parents=True, exist_ok=True)
    path.write_text(commented_study(name), encoding="utf-8")
    return (
        f"wrote {path}\n"
        f"next: put sites, zones, visit records and roads into {folder}, "
        f"check the names and assumptions in the study file, then: make all STUDY={name}"
    )


def commented_study(name: str) -> str:
    """A study file with every key, its meaning, unit and usual value as comments."""
    filled = {key: _fill(value, name) for key, value in FILLED.items()}
    filled |= {"study.name": name, "study.folder": f"../data/{name}"}
    head = (
        f"# Study file of {name}. Paths are relative to this file.\n"
        "# A key that is commented out has the value that it shows.\n"
        "# Look at every 'usual' value: those assumptions move the answer.\n\n"
    )
    return head + "".join(
        "\n".join(_section_lines(section, section.section_name, filled)) + "\n"
        for section in SECTIONS
    )


def settings_reference() -> str:
    """Every section and key as a Markdown document."""
    parts = ["# Study file: every section and key\n\nPaths are relative to the study file.\n"]
    for section in SECTIONS:
        parts.append(f"## [{section.section_name}]\n\n{_summary(section)}\n")
        parts.append("| key | default | unit | usual value | meaning |\n|---|---|---|---|---|")
        parts.append("\n".join(_reference_rows(section, "")) + "\n")
    return "\n".join(parts)


def tables_reference() -> str:
    """Every table and column as a Markdown document."""
    parts = ["# Data dictionary\n\nMoney is in the study's currency.\n"]
    for table in TABLES:
        parts.append(f"## {table.table_name()}\n\n{table.describe()}\n")
        parts.append("| column | type | unit | missing | meaning |\n|---|---|---|---|---|")
        parts.append(
            "\n".join(
                f"| `{row.column}` | {row.type} | {row.unit} | "
                f"{'may be' if row.missing_allowed else 'never'} | {row.meaning} |"
                for row in table.dictionary().itertuples()
            )
            + "\n"
        )
    return "\n".join(parts)


def _section_lines(section: type[BaseModel], title: str, filled: dict[str, Any]) -> Iterator[str]:
    yield f"# {_summary(section)}"
    yield f"[{title}]"
    nested = []
    for key, info in section.model_fields.items():
        if _is_section(info):
            nested.append((key, info))
            continue
        value = filled.get(f"{title}.{key}", _default(info))
        yield from _comment(info)
        if f"{title}.{key}" in filled:
            yield f"{key} = {_toml(value)}"
        else:
            yield f"# {key} = {_toml(value)}" if value is not None else f"# {key} is not set"
        yield ""
    for key, info in nested:
        assert isinstance(info.annotation, type)
        yield from _section_lines(info.annotation, f"{title}.{key}", filled)
    for key, info in section.model_fields.items():
        inner = inner_section(info)
        if inner is not None:
            yield from _sample_lines(inner, _sample_title(title, key, info), key)


def _sample_title(title: str, key: str, info: FieldInfo) -> str:
    is_list = get_origin(info.annotation) is tuple
    return f"[[{title}.{key}]]" if is_list else f"[{title}.{key}.<name>]"


def _sample_lines(section: type[BaseModel], title: str, key: str) -> Iterator[str]:
    """A section of which a study may have many, as comments: none is there by default."""
    yield f"# Any number of these ({key}). {_summary(section)}"
    yield f"# {title}"
    for name, info in section.model_fields.items():
        yield from (f"#   {line.removeprefix('# ')}" for line in _comment(info))
        given = " (needed)" if info.is_required() else f"; default {_toml(_default(info))}"
        yield f"#   {name} = ...{given if _default(info) is not None or given[1] == '(' else ''}"
    yield ""


def _reference_rows(section: type[BaseModel], prefix: str) -> Iterator[str]:
    for key, info in section.model_fields.items():
        if _is_section(info):
            assert isinstance(info.annotation, type)
            yield from _reference_rows(info.annotation, f"{prefix}{key}.")
            continue
        inner = inner_section(info)
        default = _reference_default(info)
        unit, usual = _extra(info, "unit"), _extra(info, "usual")
        yield f"| `{prefix}{key}` | {default} | {unit} | {usual} | {info.description} |"
        if inner is not None:
            yield from _reference_rows(inner, f"{prefix}{key}.<name>.")


def _reference_default(info: FieldInfo) -> str:
    if info.is_required():
        return "needed"
    return "not set" if _default(info) is None else f"`{_toml(_default(info))}`"


def _comment(info: FieldInfo) -> Iterator[str]:
    notes = [str(info.description)]
    notes += [f"Unit: {_extra(info, 'unit')}."] if _extra(info, "unit") else []
    notes += [f"Usual: {_extra(info, 'usual')}."] if _extra(info, "usual") else []
    yield from textwrap.wrap(" ".join(notes), WIDTH, initial_indent="# ", subsequent_indent="# ")


def _is_section(info: FieldInfo) -> bool:
    return isinstance(info.annotation, type) and issubclass(info.annotation, Section)


def _summary(section: type[BaseModel]) -> str:
    return str(section.__doc__).strip().splitlines()[0]


def _extra(info: FieldInfo, name: str) -> str:
    extra = info.json_schema_extra
    return str(extra.get(name, "")) if isinstance(extra, dict) else ""


def _default(info: FieldInfo) -> Any:
    return None if info.default is PydanticUndefined else info.default


def _fill(value: Any, name: str) -> Any:
    if isinstance(value, list):
        return [_fill(item, name) for item in value]
    if isinstance(value, str):
        return value.format(name=name, data=f"../data/{name}/input")
    return value


def _toml(value: Any) -> str:
    """A value as TOML writes it."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, dict):
        return "{" + ", ".join(f"{key} = {_toml(item)}" for key, item in value.items()) + "}"
    if isinstance(value, tuple | list):
        return "[" + ", ".join(map(_toml, value)) + "]"
    return json.dumps(value, ensure_ascii=False)


def main() -> None:
    """Write the documents that are made from the code (``make docs``)."""
    docs = CONFIG.parent / "docs"
    docs.mkdir(exist_ok=True)
    (docs / "study_file.md").write_text(settings_reference(), encoding="utf-8")
    (docs / "tables.md").write_text(tables_reference(), encoding="utf-8")


if __name__ == "__main__":
    main()

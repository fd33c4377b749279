"""What was assumed: every setting that moves the answer, and who set it."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.results import Results

NOT_ASSUMPTIONS = ("study", "sites", "publish", "compute")


def assumption_rows(results: Results) -> list[tuple[object, ...]]:
    """One row per assumption: meaning and key, value, unit, usual value, who set it."""
    given = frozenset(results.provenance.settings_set)
    rows: list[tuple[object, ...]] = []
    for section, settings in results.study:
        if section in NOT_ASSUMPTIONS or not isinstance(settings, BaseModel):
            continue
        for key, field, value in _assumptions(settings, f"{section}."):
            extra = field.json_schema_extra
            about = extra if isinstance(extra, dict) else {}
            unit = str(about.get("unit", "")).replace("currency", results.currency)
            what = join([_with_code(field.description or ""), " ", tag("code", key, class_="key")])
            who = tag("b", "study") if _is_set(key, given) else "default"
            rows.append((what, _shown(value), unit, about.get("usual", ""), who))
    return rows


def _assumptions(section: BaseModel, prefix: str) -> Iterator[tuple[str, FieldInfo, object]]:
    """Keys that have a usual value, sections within sections included."""
    for name, field in type(section).model_fields.items():
        value = getattr(section, name)
        extra = field.json_schema_extra
        if isinstance(value, BaseModel):
            yield from _assumptions(value, f"{prefix}{name}.")
        elif isinstance(extra, dict) and extra.get("usual"):
            yield f"{prefix}{name}", field, value


def _with_code(meaning: str) -> Html:
    """A meaning whose `quoted` words are set as code."""
    parts = meaning.split("`")
    return join(tag("code", part) if i % 2 else part for i, part in enumerate(parts))


def _is_set(key: str, given: frozenset[str]) -> bool:
    return any(name == key or name.startswith(f"{key}.") for name in given)


def _shown(value: object) -> object:
    """A setting's value as people write it."""
    if value is None or value in ((), {}, ""):
        return "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, dict):
        return join((f"{key}: {_shown(item)}" for key, item in value.items()), "; ")
    if isinstance(value, tuple | list):
        return ", ".join(str(_shown(item)) for item in value)
    if isinstance(value, int | float):
        return f"{value:,}" if isinstance(value, int) else f"{value:,.10g}"
    return value.name if isinstance(value, Path) else str(value)


def assumptions_table(results: Results) -> Html:
    """The table of assumptions."""
    head = ("What it is", "Value", "Unit", "Usual value", "Set by")
    return table(
        head,
        assumption_rows(results),
        caption="Settings that move the answer",
        class_="prose",
    )

"""What was assumed: every setting that moves the answer, and who set it."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from pipeline.presets import load_preset
from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.results import Results

DEFAULT = "default"
NOT_ASSUMPTIONS = ("study", "publish", "compute")


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
            who = tag("b", "study") if _is_set(key, given) else _preset_words(results, key)
            rows.append((what, _shown(value), unit, about.get("usual", ""), who))
    return rows


def _preset_words(results: Results, key: str) -> object:
    """The preset and the source of its figure; DEFAULT where no preset gave it."""
    costs = results.study.costs
    section, _, name = key.partition(".")
    if section != "costs" or costs is None or costs.preset is None:
        return DEFAULT
    preset = load_preset(costs.preset)
    source = preset.source(name)
    if not source:
        return DEFAULT
    label = f"preset {preset.name} ({preset.country}, prices of {preset.year}): "
    return join([tag("b", label), source])


def _preset_caution(results: Results) -> Html | None:
    """A preset's figures age: say which year they are of."""
    costs = results.study.costs
    if costs is None or costs.preset is None:
        return None
    preset = load_preset(costs.preset)
    return tag(
        "p",
        f"Figures of the preset {preset.name} are of {preset.country} in {preset.year}; the study "
        f"is in prices of {results.study.study.price_year}. Check every one of them against its "
        "source and the year before you rely on it.",
    )


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
    if isinstance(value, BaseModel):
        return _shown({name: item for name, item in value if item not in (None, {}, 0.0)})
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
    """What the study chose first, then what was left at its default."""
    head = ("What it is", "Value", "Unit", "Usual value", "Set by")
    rows = assumption_rows(results)
    chosen = [row for row in rows if row[-1] != DEFAULT]
    left = [row for row in rows if row[-1] == DEFAULT]
    tables = [
        table(head, part, caption=caption, class_="prose cards")
        for part, caption in (
            (chosen, "Settings that move the answer, as the study chose them"),
            (left, "Settings that move the answer, left at their defaults"),
        )
        if part
    ]
    return join([_preset_caution(results), *tables])

"""The study file: TOML, strict, frozen; paths in it are relative to it.

``load_study`` reads and checks it; ``Study.only`` hands a stage the sections that it declares
and no other, so that a stage is run again exactly when something that it reads has changed;
``commented_study`` writes a new study file with every key explained.
"""

from __future__ import annotations

import difflib
import hashlib
import json
import tomllib
from collections.abc import Iterator
from datetime import date
from pathlib import Path
from typing import Any, cast

from pydantic import BaseModel, ConfigDict, Field, ValidationError
from pydantic_core import ErrorDetails

from pipeline.cost_settings import CostsSettings
from pipeline.errors import StudyError
from pipeline.presets import load_preset
from pipeline.road_settings import RoadsSettings, RoutesSettings
from pipeline.route_prices import with_route_prices
from pipeline.sections import Section, inner_section
from pipeline.sensitivity_settings import SensitivitySettings
from pipeline.settings import (
    ComputeSettings,
    DemandSettings,
    MarketSettings,
    PublishSettings,
    ScenarioSettings,
    SitesSettings,
    StudySettings,
    SurplusSettings,
)
from pipeline.variants import check_own_variants
from pipeline.visit_settings import VisitsSettings, ZonesSettings


class Study(BaseModel):
    """One study: the sections of its file. Immutable."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True)

    study: StudySettings
    sites: SitesSettings = SitesSettings()
    zones: ZonesSettings = ZonesSettings()
    visits: VisitsSettings = VisitsSettings()
    roads: RoadsSettings = RoadsSettings()
    routes: RoutesSettings = RoutesSettings()
    # None only where the study brings a finished table and prices nothing.
    costs: CostsSettings = Field(default_factory=lambda: cast("CostsSettings", None))
    market: MarketSettings = MarketSettings()
    demand: DemandSettings = DemandSettings()
    surplus: SurplusSettings = SurplusSettings()
    sensitivity: SensitivitySettings = SensitivitySettings()
    scenarios: dict[str, ScenarioSettings] = {}
    publish: PublishSettings = PublishSettings()
    compute: ComputeSettings = ComputeSettings()

    def only(self, sections: tuple[type[Section], ...]) -> Study:
        """A study that holds [study] and the given sections; any other raises AttributeError."""
        names = {"study", *(section.section_name for section in sections)}
        view = self.model_copy()
        for name in set(vars(view)) - names:
            del vars(view)[name]
        return view

    def input_files(self) -> list[Path]:
        """Every input file that the study names, in the order of the file, without doubles."""
        return list(dict.fromkeys(_paths(self)))

    def resolved(self) -> dict[str, Any]:
        """Every setting in force, as JSON values; of an input file only its name."""
        return dict(_plain(self))

    def settings_digest(self, sections: tuple[type[Section], ...]) -> str:
        """SHA-256 of the given sections and [study]; paths count by their name only.

        [compute] does not count: where the work is done changes no figure.
        """
        counting = tuple(section for section in sections if section is not ComputeSettings)
        plain = json.dumps(_plain(self.only(counting)), sort_keys=True)
        return hashlib.sha256(plain.encode()).hexdigest()


def load_study(path: Path, *, output: Path | None = None) -> Study:
    """Read and check a study file.

    Parameters
    ----------
    path : the study file (TOML, UTF-8).
    output : takes the place of the study's own folder for work/ and output/.

    Raises
    ------
    StudyError
        The file is not there, is not TOML, has an unknown key or a value out of range, or
        names an input file that does not exist.
    """
    try:
        raw = tomllib.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise StudyError(_no_study(path)) from None
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as error:
        raise StudyError(f"{path}: not a readable TOML file ({error}); correct it.") from None
    study_section = raw.setdefault("study", {})
    if isinstance(study_section, dict):
        study_section.setdefault("folder", str(study_section.get("name", "study")))
        if output is not None:
            study_section["folder"] = str(output.resolve())
    return study_from(raw, base=path.parent, source=path.name)


def study_from(raw: dict[str, Any], *, base: Path, source: str) -> Study:
    """Check settings that are already a dictionary; `base` is where their paths start."""
    try:
        study = Study.model_validate(_tuples(raw), context={"base": base})
    except ValidationError as error:
        raise StudyError(_explain(error, raw, source)) from None
    if study.costs is None and not (study.market.zone_table or study.market.trip_table):
        raise StudyError(f"{source}: section [costs] is needed and missing; add it.")
    if study.costs is not None:
        _check_prices(study, source)
    study = with_route_prices(study)
    check_own_variants(study)
    for file in study.input_files():
        if not file.is_file():
            raise StudyError(
                f"{source}: input file {file} does not exist. "
                "Correct the path (it is relative to the study file) or put the file there."
            )
    return study


def _check_prices(study: Study, source: str) -> None:
    """A preset is of the study's currency, and every amount can be brought to the price year."""
    costs, about = study.costs, study.study
    if costs.preset is not None:
        preset = load_preset(costs.preset)
        if preset.currency != about.currency:
            raise StudyError(
                f"{source}: [costs] preset = {costs.preset!r} is in {preset.currency} "
                f"({preset.country}), the study in {about.currency}. Take a preset of your own "
                "country and currency, or set the figures in the study."
            )
    for key in costs.price_years:
        try:
            costs.price_factor(key, about.price_year)
        except ValueError as error:
            raise StudyError(f"{source}: [costs.price_years] {error}.") from None


def _no_study(path: Path) -> str:
    there = sorted(p.stem for p in path.parent.glob("*.toml")) if path.parent.is_dir() else []
    near = difflib.get_close_matches(path.stem, there, n=1)
    hint = f" Did you mean {near[0]}?" if near else ""
    return f"study file {path} does not exist.{hint} 'make new STUDY=name' writes a new one."


def _tuples(value: Any) -> Any:
    """TOML arrays as tuples, whole numbers left as they are; settings are immutable."""
    if isinstance(value, dict):
        return {key: _tuples(item) for key, item in value.items()}
    return tuple(_tuples(item) for item in value) if isinstance(value, list) else value


def _plain(value: Any) -> Any:
    """Settings as JSON values; of a path only the name, so that folders can move."""
    if isinstance(value, BaseModel):
        fields = type(value).model_fields
        return {
            key: _plain(item)
            for key, item in value.__dict__.items()
            if "output" not in fields[key].metadata
        }
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, tuple):
        return [_plain(item) for item in value]
    if isinstance(value, date):
        return value.isoformat()
    return value.name if isinstance(value, Path) else value


def _paths(value: Any) -> Iterator[Path]:
    if isinstance(value, BaseModel):
        for name, field in type(value).model_fields.items():
            if "output" not in field.metadata:
                yield from _paths(vars(value).get(name))
    elif isinstance(value, tuple):
        for item in value:
            yield from _paths(item)
    elif isinstance(value, dict):
        for item in value.values():
            yield from _paths(item)
    elif isinstance(value, Path):
        yield value


def _explain(error: ValidationError, raw: dict[str, Any], source: str) -> str:
    """The first thing that is wrong, and in how many more places something is."""
    # A misspelt key is also a missing one: name the misspelling.
    first = min(error.errors(), key=lambda item: item["type"] != "extra_forbidden")
    where = _place(first, raw)
    here = [item for item in error.errors() if _place(item, raw) == where]
    rest = len({tuple(_place(item, raw)) for item in error.errors()}) - 1
    more = f" ({rest} more problem(s) in the file.)" if rest else ""
    if first["type"] == "extra_forbidden":
        return f"{source}: {_unknown_key(where)}{more}"
    if first["type"] == "missing":
        return f"{source}: {_key(where)} is needed and missing; add it.{more}"
    # A key of several types gives an error for each.
    said = " or ".join(dict.fromkeys(item["msg"].removeprefix("Value error, ") for item in here))
    if first["type"] == "value_error":
        return f"{source}: {_key(where)}: {said}. Correct it.{more}"
    return (
        f"{source}: {_key(where)} = {first['input']!r} is not valid: {said}. "
        f"Correct it; 'make new' writes a study file that explains every key.{more}"
    )


def _place(item: ErrorDetails, raw: dict[str, Any]) -> list[str]:
    """Where an error is, as keys of the file; what the checker adds about types is left out."""
    parts: list[str] = []
    value: Any = raw
    for part in item["loc"]:
        try:
            value = value[part]
        except (KeyError, IndexError, TypeError):
            if item["type"] == "missing":
                parts.append(str(part))
            break
        parts.append(str(part))
    return parts or [str(item["loc"][0])]


def _key(where: list[str]) -> str:
    return f"[{'.'.join(where[:-1])}] {where[-1]}" if len(where) > 1 else f"section [{where[0]}]"


def _unknown_key(where: list[str]) -> str:
    valid = _valid_keys(where[:-1])
    near = difflib.get_close_matches(where[-1], valid, n=1, cutoff=0.0)
    kind = "key " if len(where) > 1 else ""
    return (
        f"unknown {kind}{_key(where)}; the nearest valid one is {near[0]!r} "
        f"(valid: {', '.join(valid)})."
    )


def _valid_keys(where: list[str]) -> list[str]:
    model: Any = Study
    parts = iter(where)
    for part in parts:
        if model is Study and part == "scenarios":
            return sorted(ScenarioSettings.model_fields) or ["(none yet)"]
        field = model.model_fields[part]
        inner = inner_section(field)
        if inner is not None:
            next(parts, None)  # the name, or the place in the list
        model = inner or field.annotation
    return list(model.model_fields)

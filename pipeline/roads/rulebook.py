"""The table of rules, ``config/roads.toml``, for the study's vehicle and with what it replaces.

The table holds the rules for a car. Under ``[profiles.<name>]`` stands what is different for a
motorcycle, a bicycle and people on foot; classes and speeds by surface, where a profile has
them, take the place of the car's as a whole. The study's own [roads] rules come last.
"""

from __future__ import annotations

import difflib
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from pipeline.errors import StudyError
from pipeline.road_settings import RoadsSettings
from pipeline.roads.arrays import Bool, Float64

RULES_FILE = Path(__file__).parents[2] / "config" / "roads.toml"
FERRY = "ferry"
CLASS_DEFAULTS = {"oneway": False, "unpaved": False, "on_request": False, "if_tagged": False}
# Sections whose keys are values of tags: a profile has its own, and a study may add some.
OPEN_SECTIONS = ("classes", "unpaved_kmh", "smoothness_kmh", "tracktype_kmh")


@dataclass(frozen=True)
class RoadRules:
    """The table of rules, with what the study replaces in it.

    Attributes
    ----------
    classes : road classes in order; a class's code is its position; ferries come last.
    class_kmh, class_oneway, class_unpaved : defaults of each class, in that order.
    on_request : classes that are used only where the study opens tracks.
    if_tagged : classes that are used only where a tag opens them to the vehicle by name.
    access, barriers, turns, oneway, speed, unpaved_kmh, smoothness_kmh, tracktype_kmh : sections
        of the table, as they stand there.
    vehicle, ferry : likewise.
    delays_s : delays with what the study replaces, times its calibration factor.
    """

    classes: tuple[str, ...]
    class_kmh: Float64
    class_oneway: Bool
    class_unpaved: Bool
    on_request: Bool
    if_tagged: Bool
    access: dict[str, Any]
    barriers: dict[str, Any]
    turns: dict[str, Any]
    oneway: dict[str, Any]
    speed: dict[str, Any]
    vehicle: dict[str, Any]
    unpaved_kmh: dict[str, float]
    smoothness_kmh: dict[str, float]
    tracktype_kmh: dict[str, float]
    delays_s: dict[str, float]
    ferry: dict[str, float]


def load_rules(settings: RoadsSettings, file: Path = RULES_FILE) -> RoadRules:
    """Read the table of rules for the study's profile, and put the study's own in it.

    Raises
    ------
    StudyError
        The study replaces a rule that the table does not have, or by something of another kind.
    """
    table = tomllib.loads(file.read_text(encoding="utf-8"))
    profile = table.pop("profiles").get(settings.profile, {})
    for section, own in profile.items():
        table[section] = own if section in OPEN_SECTIONS else table[section] | own
    for section, own in settings.rules.items():
        table[section] = _replaced(table, section, own)
    classes = table["classes"]
    for name, kmh in settings.class_speed_kmh.items():
        if name not in classes:
            raise StudyError(
                f"roads.class_speed_kmh: {name!r} is no road class; known: {', '.join(classes)}."
            )
        classes[name] = classes[name] | {"kmh": kmh}
    rows = [CLASS_DEFAULTS | row for row in (*classes.values(), {"kmh": np.nan})]

    def of_classes(key: str) -> Bool:
        return np.array([row[key] for row in rows], dtype=np.bool_)

    return RoadRules(
        classes=(*classes, FERRY),
        class_kmh=np.array([row["kmh"] for row in rows], dtype=np.float64),
        class_oneway=of_classes("oneway"),
        class_unpaved=of_classes("unpaved"),
        on_request=of_classes("on_request"),
        if_tagged=of_classes("if_tagged"),
        delays_s=_delays(table.pop("delays_s"), settings),
        **{name: section for name, section in table.items() if name != "classes"},
    )


def _replaced(table: dict[str, Any], section: str, own: dict[str, Any]) -> dict[str, Any]:
    """A section of the table with the study's own entries.

    Raises
    ------
    StudyError
        The table has no such section or key, or the value is of another kind.
    """
    where = "[roads.rules]"
    if section not in table:
        raise StudyError(
            f"{where}: {section!r} is no section of config/roads.toml; {_near(section, table)}."
        )
    known: dict[str, Any] = table[section]
    result = dict(known)
    for key, value in own.items():
        if key not in known and section not in OPEN_SECTIONS:
            raise StudyError(f"{where} {section}: {key!r} is not known; {_near(key, known)}.")
        pattern = known.get(key, next(iter(known.values())))
        if isinstance(value, tuple):
            value = list(value)
        if not _alike(value, pattern):
            raise StudyError(
                f"{where} {section}.{key} = {value!r} is not of the kind that it replaces "
                f"({pattern!r}). Correct it."
            )
        result[key] = {**known.get(key, {}), **value} if isinstance(value, dict) else value
        if section == "classes" and "kmh" not in result[key]:
            raise StudyError(f"{where} classes.{key}: a new class needs its kmh.")
    return result


def _near(word: str, known: dict[str, Any]) -> str:
    near = difflib.get_close_matches(word, known, n=1, cutoff=0.0)
    return f"the nearest is {near[0]!r}"


def _alike(value: Any, pattern: Any) -> bool:
    """Whether a value can take the place of another."""
    if isinstance(pattern, bool) or isinstance(value, bool):
        return isinstance(value, bool) and isinstance(pattern, bool)
    if isinstance(pattern, int | float):
        return isinstance(value, int | float) and value >= 0
    if isinstance(pattern, dict) and isinstance(value, dict):
        return all(_alike(item, pattern[key]) for key, item in value.items() if key in pattern)
    return isinstance(value, type(pattern))


def _delays(table: dict[str, float], settings: RoadsSettings) -> dict[str, float]:
    """Delays with what the study replaces in them, times its calibration."""
    strange = sorted(set(settings.delay_s) - set(table))
    if strange:
        raise StudyError(f"roads.delay_s: {strange[0]!r} is no delay; known: {', '.join(table)}.")
    factor = settings.calibration_factor
    delays = table | settings.delay_s
    return {name: s if name == "sharp_deg" else s * factor for name, s in delays.items()}

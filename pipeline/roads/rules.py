"""Rules of the road: what each way allows, by the table in ``config/roads.toml``.

Every rule is a function of a tag's value. A column of tags is categorical, so each rule is
worked out once per distinct value and spread over the ways.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from pipeline.road_settings import RoadsSettings
from pipeline.roads.arrays import Bool, Float64, Int8, Int32
from pipeline.roads.conditions import Calendar
from pipeline.roads.extract import RoadExtract
from pipeline.roads.rulebook import FERRY, RoadRules
from pipeline.roads.speeds import read_code_kmh, read_duration_min, read_limit_kmh


@dataclass(frozen=True)
class WayTraits:
    """What the vehicle may do on each way: arrays with one value per way of the extract.

    Attributes
    ----------
    class_code : position in ``RoadRules.classes``; -1: no way for it (a path, a class that
        the study leaves out).
    closed : whether access tags close it.
    forward, backward : whether it can be driven in the order of its nodes, and against it.
    forward_kmh, backward_kmh : driven speed; of ferries NaN (see `ferry_min`).
    limit_tagged, limit_unreadable : whether a limit is tagged, and cannot be read.
    is_limited : whether it is open only at the ends of a trip.
    is_ferry, is_toll, is_unpaved : what it is.
    ferry_min : crossing by its `duration`, minutes; NaN where there is none to read.
    """

    class_code: Int32
    closed: Bool
    forward: Bool
    backward: Bool
    forward_kmh: Float64
    backward_kmh: Float64
    limit_tagged: Bool
    limit_unreadable: Bool
    is_limited: Bool
    is_ferry: Bool
    is_toll: Bool
    is_unpaved: Bool
    ferry_min: Float64


def way_traits(
    extract: RoadExtract, rules: RoadRules, settings: RoadsSettings, calendar: Calendar
) -> WayTraits:
    """Apply the rules to every way of an extract, on the days of travel."""
    tags = extract.way_tags
    class_code = _class_codes(tags, rules, settings)
    is_ferry = class_code == len(rules.classes) - 1
    has_class = class_code >= 0
    access = _access(tags, rules, calendar)
    closed = (access == 0) | _untagged_ferry(is_ferry, access, settings)
    closed |= _not_opened_by_name(tags, class_code, rules, calendar)
    direction = _direction(tags, class_code, rules, calendar)
    surface_kmh = _by_value(tags["surface"], lambda v: rules.unpaved_kmh.get(v, np.inf), np.nan)
    default_unpaved = np.isnan(surface_kmh) & has_class & rules.class_unpaved[class_code]
    is_unpaved = np.isfinite(surface_kmh) | default_unpaved
    rough = _by_value(tags["4wd_only"], lambda v: float(v == "yes"), 0) == 1
    rough &= bool(rules.vehicle["heeds_4wd_only"])
    closed |= _out_of_season(tags, calendar)
    closed |= _too_rough(tags, rough, is_unpaved & ~is_ferry, settings)
    cap_kmh = np.fmin(surface_kmh, _rough_cap(tags, rules))
    forward_kmh, backward_kmh, unreadable = _speeds(tags, class_code, cap_kmh, rules, calendar)
    factor = settings.speed_factor / settings.calibration_factor
    share = np.where(is_unpaved, settings.unpaved_speed_factor, 1.0)
    share = share * np.where(rough, settings.rough_speed_factor, 1.0) * factor
    is_open = has_class & ~closed
    return WayTraits(
        class_code=class_code,
        closed=closed & has_class,
        forward=is_open & (direction >= 0) & (direction != CLOSED),
        backward=is_open & (direction <= 0),
        forward_kmh=forward_kmh * share,
        backward_kmh=backward_kmh * share,
        limit_tagged=tags["maxspeed"].notna().to_numpy(),
        limit_unreadable=unreadable,
        is_limited=is_open & ((access == ENDS) | _last_stretch(class_code, rules, settings)),
        is_ferry=is_ferry,
        is_toll=_is_toll(extract, rules, settings),
        is_unpaved=is_unpaved,
        ferry_min=np.where(is_ferry, _by_value(tags["duration"], read_duration_min), np.nan),
    )


ENDS = 0.5  # access: 0 closed, 1 open, between them open only at the ends of a trip
CLOSED = 2  # a direction: 1 forward only, -1 backward only, 0 both, 2 neither


def _class_codes(tags: pd.DataFrame, rules: RoadRules, settings: RoadsSettings) -> Int32:
    """Code of each way's class; a way that is a road and a ferry counts as a ferry."""
    codes = {name: code for code, name in enumerate(rules.classes)}
    if settings.tracks is False:
        codes = {name: code for name, code in codes.items() if not rules.on_request[code]}
    ferry = codes.pop(FERRY) if settings.ferries != "none" else -1
    road = _by_value(tags["highway"], lambda value: codes.get(value, -1), -1)
    is_ferry = _by_value(tags["route"], lambda value: value == FERRY, 0) == 1
    return np.where(is_ferry, ferry, road).astype(np.int32)


def _access(
    tags: pd.DataFrame,
    rules: RoadRules,
    calendar: Calendar | None = None,
    keys: list[str] | None = None,
) -> Float64:
    """1 open, 0 closed, NaN untagged: the most specific key with a known value decides."""
    known = dict.fromkeys(rules.access["closed"], 0.0) | dict.fromkeys(rules.access["open"], 1.0)
    known |= dict.fromkeys(rules.access["ends"], ENDS)
    keys = rules.access["keys"] if keys is None else keys
    return _last_tagged(tags, keys, lambda value: known.get(value, np.nan), calendar)


def _out_of_season(tags: pd.DataFrame, calendar: Calendar) -> Bool:
    """Ways that exist in another season only."""
    return np.asarray(_by_value(tags["seasonal"], calendar.is_open(tags["seasonal"])) == 0)


def _not_opened_by_name(
    tags: pd.DataFrame, class_code: Int32, rules: RoadRules, calendar: Calendar
) -> Bool:
    """Ways of classes that the vehicle uses only where a tag of its own opens them."""
    asks = (class_code >= 0) & rules.if_tagged[class_code]
    own = _access(tags, rules, calendar, rules.access["keys"][-1:])
    return np.asarray(asks & ~(own > 0))


def _is_toll(extract: RoadExtract, rules: RoadRules, settings: RoadsSettings) -> Bool:
    """Ways on which the vehicle owes a toll, by their tags or by the study's list."""
    listed = np.isin(extract.way_id, np.array(settings.toll_ways, dtype=np.int64))
    keys = rules.vehicle["toll_keys"]
    tagged = _last_tagged(extract.way_tags, keys, lambda value: float(value == "yes")) == 1
    return np.asarray(tagged | listed)


def _too_rough(tags: pd.DataFrame, rough: Bool, is_unpaved: Bool, settings: RoadsSettings) -> Bool:
    """Ways that the study's vehicle does not take: fords, rough tracks, unpaved roads."""
    ford = _by_value(tags["ford"], lambda value: float(value != "no"), 0) == 1
    return np.asarray(
        (ford & (settings.fords == "closed"))
        | (rough & (not settings.four_wheel_drive))
        | (is_unpaved & (settings.unpaved == "closed"))
    )


def _rough_cap(tags: pd.DataFrame, rules: RoadRules) -> Float64:
    """Highest speed by smoothness and grade of track; NaN where neither caps it."""
    smooth = _by_value(tags["smoothness"], lambda value: rules.smoothness_kmh.get(value, np.nan))
    grade = _by_value(tags["tracktype"], lambda value: rules.tracktype_kmh.get(value, np.nan))
    return np.asarray(np.fmin(smooth, grade))


def _last_stretch(class_code: Int32, rules: RoadRules, settings: RoadsSettings) -> Bool:
    """Tracks, where the study opens them at the ends of a trip only."""
    is_track = (class_code >= 0) & rules.on_request[class_code]
    return np.asarray(is_track & (settings.tracks == "last_stretch"))


def closed_barriers(extract: RoadExtract, rules: RoadRules, settings: RoadsSettings) -> Bool:
    """Of each tagged node, whether it is a barrier (or ford) that cannot be passed."""
    tags = extract.tagged_nodes.tags
    closed = set(rules.barriers["closed"])
    by_kind = _by_value(tags["barrier"], lambda value: float(value in closed), 0) == 1
    access = _access(tags, rules)
    is_locked = _by_value(tags["locked"], lambda value: float(value == "yes"), 0) == 1
    is_barrier = tags["barrier"].notna().to_numpy()
    ford = _by_value(tags["ford"], lambda value: float(value != "no"), 0) == 1
    closed_ford = ford & (settings.fords == "closed")
    blocked = (by_kind & ~(access > 0)) | (access == 0) | is_locked
    return np.asarray((is_barrier & blocked) | closed_ford)


def turn_values(extract: RoadExtract, rules: RoadRules, calendar: Calendar) -> pd.Series[str]:
    """Of each turn restriction what it forbids; missing where it does not bind the vehicle."""
    tags = extract.turn_relations.tags
    values = tags["restriction"].astype(object)
    if not rules.turns["bind"]:
        return pd.Series(np.full(len(values), np.nan, dtype=object), index=values.index)
    for key in rules.turns["keys"]:
        own = tags[key].astype(object)
        values = own.where(own.notna(), values)
    in_season = calendar.read(tags["restriction:conditional"]).astype(object)
    values = in_season.where(in_season.notna(), values)
    spared = set(rules.turns["excepted"])
    is_spared = _by_value(
        tags["except"], lambda value: float(bool(spared & set(re.split(r"[;, ]+", value)))), 0
    )
    return values.where(is_spared == 0)


def _untagged_ferry(is_ferry: Bool, access: Float64, settings: RoadsSettings) -> Bool:
    """Ferries that do not say that they take cars, where the study wants them to."""
    return np.asarray(is_ferry & (access != 1) & (settings.ferries == "car_tagged"))


def _direction(tags: pd.DataFrame, class_code: Int32, rules: RoadRules, calendar: Calendar) -> Int8:
    """1 forward only, -1 backward only, 0 both, 2 neither."""
    known = dict.fromkeys(rules.oneway["forward"], 1.0)
    known |= dict.fromkeys(rules.oneway["backward"], -1.0)
    known |= dict.fromkeys(rules.oneway["both"], 0.0)
    known |= dict.fromkeys(rules.oneway["closed"], float(CLOSED))
    keys = rules.oneway["keys"]
    tagged = _last_tagged(tags, keys, lambda value: known.get(value, np.nan), calendar)
    around = rules.oneway["implied_by_junction"]
    implied = (_by_value(tags["junction"], lambda value: value in around, 0) == 1) | (
        (class_code >= 0) & rules.class_oneway[class_code]
    )
    return np.where(np.isnan(tagged), implied, tagged).astype(np.int8)


def _speeds(
    tags: pd.DataFrame, class_code: Int32, cap_kmh: Float64, rules: RoadRules, calendar: Calendar
) -> tuple[Float64, Float64, Bool]:
    """Speed along and against each way: the limit, else the class's, capped by the surface.

    The third array says where a limit is tagged that cannot be read.
    """

    def limit(key: str) -> Float64:
        return _by_value(tags[key], lambda value: read_limit_kmh(value, rules.speed))

    default = np.where(class_code >= 0, rules.class_kmh[class_code], np.nan)
    both = limit("maxspeed")
    unreadable = tags["maxspeed"].notna().to_numpy() & np.isnan(both)
    for key in rules.speed["code_keys"]:
        code = _by_value(tags[key], lambda value: read_code_kmh(value, rules.speed))
        both = np.where(np.isnan(both), code, both)
    in_season = _by_value(
        calendar.read(tags["maxspeed:conditional"]),
        lambda value: read_limit_kmh(value, rules.speed),
    )
    both = np.where(np.isnan(in_season), both, in_season)
    speeds = []
    for key in ("maxspeed:forward", "maxspeed:backward"):
        one = limit(key)
        unreadable |= tags[key].notna().to_numpy() & np.isnan(one)
        kmh = np.where(np.isnan(one), both, one)
        kmh = np.where(np.isnan(kmh), default, kmh)
        if not rules.vehicle["drives_at_limit"]:
            kmh = np.fmin(kmh, default)
        speeds.append(np.fmin(kmh, cap_kmh))
    return speeds[0], speeds[1], unreadable


def _by_value(
    column: pd.Series[Any], meaning: Callable[[str], float], missing: float = np.nan
) -> Float64:
    """`meaning` of each value, worked out once per distinct value; `missing` where untagged."""
    values = [float(meaning(value)) for value in column.cat.categories]
    table = np.array([*values, missing], dtype=np.float64)
    codes = column.cat.codes.to_numpy()
    return table[codes]  # code -1, untagged, takes the last entry


def _last_tagged(
    tags: pd.DataFrame,
    keys: tuple[str, ...] | list[str],
    meaning: Callable[[str], float],
    calendar: Calendar | None = None,
) -> Float64:
    """Meaning by the last of `keys` that has one; keys run from the general to the specific.

    With a calendar a key's conditional values go before its plain ones.
    """
    result = np.full(len(tags), np.nan)
    for key in keys:
        value = _by_value(tags[key], meaning)
        if calendar is not None and f"{key}:conditional" in tags:
            in_season = _by_value(calendar.read(tags[f"{key}:conditional"]), meaning)
            value = np.where(np.isnan(in_season), value, in_season)
        result = np.where(np.isnan(value), result, value)
    return result

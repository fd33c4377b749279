"""Reads speed limits and durations as people tag them."""

from __future__ import annotations

import math
import re
from typing import Any

_NUMBER = re.compile(r"(\d+(?:\.\d+)?)\s*(km/h|kmh|kph|mph|knots)?")
_CLOCK = re.compile(r"(?:(\d+):)?(\d{1,3}):(\d{2})")
_CODE = re.compile(r"[a-z]{2}(?:-[a-z]{2,3})?:([a-z_]+)")
_ZONE = re.compile(r"[a-z]{2}(?:-[a-z]{2,3})?:(?:zone:?)?(\d{1,3})")
_ISO = re.compile(r"PT?(?:(\d+)H)?(?:(\d+)M)?(?:(\d+)S)?", re.IGNORECASE)


def read_limit_kmh(value: str, speed: dict[str, Any]) -> float:
    """A `maxspeed` in km/h; NaN where it cannot be read or is out of all reason.

    Parameters
    ----------
    value : ``50``, ``50 km/h``, ``30 mph``, ``10 knots``, ``none``, ``walk``, a code such as
        ``DE:rural`` or ``DE:zone30``, or a list of them, of which the lowest that can be read
        counts.
    speed : section [speed] of config/roads.toml.

    Notes
    -----
    The forms are those of the OpenStreetMap wiki, Key:maxspeed (from memory).
    """
    limits = [_one_limit_kmh(part.strip(), speed) for part in re.split("[;|]", value.lower())]
    return min((kmh for kmh in limits if not math.isnan(kmh)), default=math.nan)


def read_code_kmh(value: str, speed: dict[str, Any]) -> float:
    """A code such as ``DE:rural`` in km/h; NaN where it is none, or none that is known."""
    text = value.strip().lower()
    codes: dict[str, float] = speed["implicit_kmh"]
    if text in codes:
        return float(codes[text])
    if match := _ZONE.fullmatch(text):
        return float(match[1]) * (speed["mph_kmh"] if text.startswith(("gb:", "us")) else 1.0)
    if (match := _CODE.fullmatch(text)) and match[1] in ("living_street", "walk"):
        return float(speed["walk_kmh"])
    return math.nan


def _one_limit_kmh(text: str, speed: dict[str, Any]) -> float:
    if text in ("none", "walk"):
        return float(speed[f"{text}_kmh"])
    if ":" in text:
        return read_code_kmh(text, speed)
    match = _NUMBER.fullmatch(text)
    if match is None:
        return math.nan
    unit_kmh = {"mph": speed["mph_kmh"], "knots": speed["knots_kmh"]}
    kmh = float(match[1]) * unit_kmh.get(match[2] or "", 1.0)
    return kmh if speed["lowest_kmh"] <= kmh <= speed["highest_kmh"] else math.nan


def read_duration_min(value: str) -> float:
    """A `duration` in minutes; NaN where it cannot be read or is nothing.

    Parameters
    ----------
    value : ``35`` (minutes), ``1:05`` (hours and minutes), ``1:05:30``, ``PT1H5M`` (ISO 8601).

    Notes
    -----
    The forms are those of the OpenStreetMap wiki, Key:duration (from memory).
    """
    text = value.strip()
    if re.fullmatch(r"\d+(?:\.\d+)?", text):
        minutes = float(text)
    elif match := _CLOCK.fullmatch(text):
        first, second, third = match[1], int(match[2]), int(match[3])
        if third >= 60 or (first and second >= 60):
            return math.nan
        minutes = int(first) * 60 + second + third / 60 if first else second * 60.0 + third
    elif (match := _ISO.fullmatch(text)) and any(match.groups()):
        hours, mins, seconds = (int(part or 0) for part in match.groups())
        minutes = hours * 60 + mins + seconds / 60
    else:
        return math.nan
    return minutes if minutes > 0 else math.nan

"""Conditional tags (``no @ (Nov-Apr)``) on the days of travel.

The study's travel date or season says on which days people travel. A condition made of months,
dates and seasons holds if it holds on all of those days, and does not hold if it holds on
none; everything else (hours, weekdays, weather, a season that the condition covers in part,
no travel date at all) cannot be read. What cannot be read is kept for the report and
changes nothing.

The forms are those of the OpenStreetMap wiki, "Conditional restrictions" (from memory).
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, field
from datetime import date
from typing import Any

import pandas as pd

LEAP = 2000  # a leap year: the calendar of all days
FIRST = date(LEAP, 1, 1).toordinal()
ALL_DAYS = frozenset(range(366))
MONTHS = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")
SEASONS = {
    "spring": (3, 5),
    "summer": (6, 8),
    "autumn": (9, 11),
    "fall": (9, 11),
    "winter": (12, 2),
}

_CLAUSE = re.compile(r"\s*([^@;]+?)\s*@\s*(\([^)]*\)|[^;()]+)\s*")
_DAY = rf"({'|'.join(MONTHS)})(?:\s+(\d{{1,2}}))?"
_RANGE = re.compile(rf"{_DAY}(?:\s*-\s*(?:{_DAY}|(\d{{1,2}})))?")
_HEAVY = re.compile(r"(?:max)?weight(?:rating)?\s*>=?\s*(\d+(?:\.\d+)?)\s*(?:t|st)?")
CAR_TONNES = 3.0  # a car with its passengers weighs less than a limit from here on up


@dataclass(frozen=True)
class Calendar:
    """The days on which people travel, and what could not be read for them.

    Attributes
    ----------
    days : days of a leap year, 0 to 365; empty: not known.
    southern : whether summer is December to February.
    unread : how often each ``key=value`` could not be read.
    """

    days: frozenset[int]
    southern: bool = False
    unread: Counter[str] = field(default_factory=Counter)

    def holds(self, condition: str) -> bool | None:
        """Whether a condition holds on the days of travel; None: cannot be read."""
        text = condition.strip().removeprefix("(").removesuffix(")")
        parts = [self._holds_one(part.strip()) for part in re.split(r"\s+AND\s+", text)]
        if False in parts:
            return False
        return None if None in parts else True

    def _holds_one(self, text: str) -> bool | None:
        if heavy := _HEAVY.fullmatch(text):
            return False if float(heavy[1]) >= CAR_TONNES else None
        named = self.days_of(text)
        if named is None or not self.days:
            return None
        if self.days <= named:
            return True
        return None if self.days & named else False

    def days_of(self, text: str) -> frozenset[int] | None:
        """Days that months, dates, ranges or seasons name; None: cannot be read."""
        days: set[int] = set()
        for part in re.split(r"\s*[,;]\s*", text.strip()):
            if part in SEASONS:
                days |= season_days(part, southern=self.southern)
                continue
            match = _RANGE.fullmatch(part)
            named = None if match is None else _range_days(match)
            if named is None:
                return None
            days |= named
        return frozenset(days)

    def value_of(self, text: str) -> str | None:
        """Value of a conditional tag on the days of travel: that of the last clause that holds.

        Raises
        ------
        ValueError
            A clause cannot be read.
        """
        value = None
        clauses = list(_CLAUSE.finditer(text))
        if ";".join(clause[0] for clause in clauses) != text:
            raise ValueError(f"cannot be read: {text}")
        for clause in clauses:
            holds = self.holds(clause[2])
            if holds is None:
                raise ValueError(f"cannot be read: {text}")
            value = clause[1] if holds else value
        return value

    def read(self, column: pd.Series[Any]) -> pd.Series[Any]:
        """Values of a column of conditional tags on the days of travel; unread ones counted."""
        known: dict[str, str | None] = {}
        for text, count in column.value_counts().items():
            try:
                known[str(text)] = self.value_of(str(text)) if count else None
            except ValueError:
                self.unread[f"{column.name}={text}"] += int(count)
        return column.map(known).astype("category")

    def is_open(self, column: pd.Series[Any]) -> Callable[[str], float]:
        """Meaning of `seasonal`: 1 open on the days of travel, 0 closed, NaN cannot be read."""
        counts = column.value_counts()

        def meaning(value: str) -> float:
            if value == "no":
                return 1.0
            holds = self._holds_one(value)
            if holds is None and counts.get(value, 0):
                self.unread[f"{column.name}={value}"] += int(counts[value])
            return float("nan") if holds is None else float(holds)

        return meaning


def calendar_of(travel_date: date | None, season: str | None, *, southern: bool) -> Calendar:
    """The days of travel by the study's date, or else by its season."""
    if travel_date is not None:
        day = date(LEAP, travel_date.month, travel_date.day).toordinal() - FIRST
        return Calendar(frozenset({day}), southern)
    days = season_days(season, southern=southern) if season else frozenset()
    return Calendar(days, southern)


def season_days(season: str, *, southern: bool) -> frozenset[int]:
    """Days of a season (whole months, as the weather services count them)."""
    first, last = SEASONS[season]
    if southern:
        first, last = (first + 5) % 12 + 1, (last + 5) % 12 + 1
    return _days_between(date(LEAP, first, 1), _month_end(last))


def _month_end(month: int) -> date:
    following = date(LEAP + month // 12, month % 12 + 1, 1)
    return date(LEAP, month, (following - date(LEAP, month, 1)).days)


def _days_between(first: date, last: date) -> frozenset[int]:
    """Days from one to the other, both included, over the turn of the year if need be."""
    one, two = first.toordinal() - FIRST, last.toordinal() - FIRST
    if one <= two:
        return frozenset(range(one, two + 1))
    return ALL_DAYS - frozenset(range(two + 1, one))


def _range_days(match: re.Match[str]) -> frozenset[int] | None:
    """Days of ``Nov``, ``Nov 5``, ``Nov-Apr``, ``Nov 5-Apr 30``, ``Nov 5-20``; None: no days."""
    month, day, last_month, last_day, same_month_day = match.groups()
    one = MONTHS.index(month) + 1
    try:
        first = date(LEAP, one, int(day or 1))
        if same_month_day:
            return _days_between(first, date(LEAP, one, int(same_month_day)))
        two = MONTHS.index(last_month) + 1 if last_month else one
        ends = last_day if last_month else day
        return _days_between(first, date(LEAP, two, int(ends)) if ends else _month_end(two))
    except ValueError:
        return None

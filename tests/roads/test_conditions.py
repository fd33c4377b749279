"""Conditional tags on the day or in the season of travel."""

from __future__ import annotations

from datetime import date
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pipeline.roads.conditions import Calendar, calendar_of
from pipeline.routes import route
from tests.roads.worlds import (
    ROAD,
    STEP_KM,
    Places,
    Ways,
    a_study,
    signed_graph_of,
    sites_at,
    zones_at,
)

JULY_1 = calendar_of(date(2024, 7, 1), None, southern=False)
WINTER = calendar_of(None, "winter", southern=False)
UNKNOWN = calendar_of(None, None, southern=False)


@pytest.mark.parametrize(
    ("condition", "in_july", "in_winter"),
    [
        ("Nov-Apr", False, True),
        ("(Nov-Apr)", False, True),
        ("May 15-Sep 30", True, False),
        ("Oct 1 - Jun 30", False, True),
        ("Jan 1-20", False, None),
        ("Jul", True, False),
        ("Jul 1", True, False),
        ("Jul 31 - Oct", False, False),
        ("Jun,Jul", True, False),
        ("summer", True, False),
        ("winter", False, True),
        ("Jan-Feb", False, None),  # December is winter, too
        ("Mo-Fr 07:00-09:00", None, None),
        ("wet", None, None),
        ("weight>7.5", False, False),
        ("weight>7.5 AND wet", False, False),
        ("Jul AND wet", None, False),
        ("Feb 31", None, None),
    ],
)
def test_conditions(condition: str, in_july: bool | None, in_winter: bool | None) -> None:
    """July 1 is a date; winter is all days from December 1 to the end of February."""
    assert JULY_1.holds(condition) is in_july
    assert WINTER.holds(condition) is in_winter
    if "weight" not in condition:
        assert UNKNOWN.holds(condition) is None


def test_seasons_of_the_south() -> None:
    """December to February is the south's summer."""
    southern = calendar_of(None, "summer", southern=True)
    assert southern.holds("Nov-Mar") is True
    assert southern.holds("winter") is False


def test_the_last_clause_that_holds_decides() -> None:
    assert JULY_1.value_of("no @ (Nov-Apr); destination @ (May-Sep)") == "destination"
    assert JULY_1.value_of("no @ (May-Oct); yes @ (Jul)") == "yes"
    assert JULY_1.value_of("no @ Nov-Apr") is None
    for unread in ("no", "no @", "no @ (Mo-Fr 07:00-09:00)", "no @ (Jul) and more"):
        with pytest.raises(ValueError, match="cannot be read"):
            JULY_1.value_of(unread)


@given(st.text(max_size=30))
def test_any_text_is_read_or_refused(text: str) -> None:
    calendar = Calendar(frozenset({181}))
    try:
        value = calendar.value_of(text)
    except ValueError:
        return
    assert value is None or value in text


# a ── b ── c, the stretch b ── c with tags; 3 steps round by n.
PLACES: Places = {"a": (0.0, 0.0), "b": (0.01, 0.0), "c": (0.02, 0.0)}
PLACES |= {"n": (0.01, 0.01), "m": (0.02, 0.01)}


def world(folder: Path, tags: dict[str, str], **roads: object) -> tuple[float, float, float]:
    """Steps and minutes from a to c, and how many conditions were unread."""
    ways: Ways = [("a b", ROAD), ("b c", ROAD | tags), ("b n m c", ROAD)]
    graph, quality, _ = signed_graph_of(folder, PLACES, ways, roads=roads)
    zones, sites = zones_at({"z": PLACES["a"]}), sites_at({"s": PLACES["c"]})
    row = route(zones, sites, graph, study=a_study())[0].iloc[0]
    unread = quality.set_index("measure")["value"]["conditions unread"]
    return row["distance_km"] / STEP_KM, row["drive_time_min"], unread


WINTER_DAY, SUMMER_DAY = {"travel_date": date(2025, 1, 15)}, {"travel_date": date(2025, 7, 15)}


@pytest.mark.parametrize(
    ("tags", "roads", "steps", "unread"),
    [
        ({"motor_vehicle:conditional": "no @ (Nov-Apr)"}, WINTER_DAY, 4, 0),
        ({"motor_vehicle:conditional": "no @ (Nov-Apr)"}, SUMMER_DAY, 2, 0),
        ({"motor_vehicle:conditional": "no @ (Nov-Apr)"}, {"season": "winter"}, 4, 0),
        ({"motor_vehicle:conditional": "no @ (Nov-Apr)"}, {}, 2, 1),
        ({"access": "no", "access:conditional": "yes @ (May-Oct)"}, SUMMER_DAY, 2, 0),
        ({"access": "no", "access:conditional": "yes @ (May-Oct)"}, WINTER_DAY, 4, 0),
        ({"access:conditional": "no @ (Mo-Fr 07:45-09:30)"}, SUMMER_DAY, 2, 1),
        ({"seasonal": "winter"}, SUMMER_DAY, 4, 0),
        ({"seasonal": "winter"}, WINTER_DAY, 2, 0),
        ({"seasonal": "yes"}, SUMMER_DAY, 2, 1),
        ({"oneway:conditional": "-1 @ (Jun-Aug)"}, SUMMER_DAY, 4, 0),
        ({"4wd_only": "yes"}, {}, 4, 0),
        ({"4wd_only": "yes"}, {"four_wheel_drive": True}, 2, 0),
        ({"ford": "yes"}, {}, 2, 0),
        ({"ford": "yes"}, {"fords": "closed"}, 4, 0),
        ({"surface": "gravel"}, {"unpaved": "closed"}, 4, 0),
        ({"surface": "asphalt"}, {"unpaved": "closed"}, 2, 0),
    ],
)
def test_roads_that_close(
    tmp_path: Path, tags: dict[str, str], roads: dict[str, object], steps: float, unread: int
) -> None:
    """``a ── b ── c`` is 2 steps; where b ── c is closed it is 4, round by n and m."""
    found, _, left_out = world(tmp_path, tags, **roads)
    assert found == pytest.approx(steps, abs=0.05)
    assert left_out == unread


@pytest.mark.parametrize(
    ("tags", "kmh"),
    [
        ({"maxspeed": "60", "maxspeed:conditional": "100 @ (May-Sep)"}, 100),
        ({"maxspeed": "60", "maxspeed:conditional": "100 @ (Oct-Apr)"}, 60),
        ({"maxspeed": "60", "smoothness": "horrible"}, 15),
        ({"maxspeed": "60", "tracktype": "grade4"}, 15),
    ],
)
def test_speeds(tmp_path: Path, tags: dict[str, str], kmh: float) -> None:
    """One step at 60, the second one at the speed of the case; 15 is slower than round by n."""
    _, minutes, _ = world(tmp_path, tags, **SUMMER_DAY)
    assert minutes == pytest.approx(min(STEP_KM + STEP_KM / kmh * 60, 4 * STEP_KM), abs=0.05)


def test_codes_of_limits(tmp_path: Path) -> None:
    """Without a maxspeed the code counts: DE:rural is 100."""
    places, road = {"a": (0.0, 0.0), "b": (0.01, 0.0)}, {"highway": "road"}
    graph, _, _ = signed_graph_of(
        tmp_path, places, [("a b", road | {"source:maxspeed": "DE:rural"})]
    )
    zones, sites = zones_at({"z": places["a"]}), sites_at({"s": places["b"]})
    row = route(zones, sites, graph, study=a_study())[0].iloc[0]
    assert row["drive_time_min"] == pytest.approx(STEP_KM / 100 * 60, abs=1e-3)


def test_turns_in_season(tmp_path: Path) -> None:
    """From a b not into b c from November to April."""
    ways: Ways = [("a b", ROAD), ("b c", ROAD), ("b n m c", ROAD)]
    turns = [("1 b 2", {"restriction:conditional": "no_straight_on @ (Nov-Apr)"})]
    for roads, steps in ((WINTER_DAY, 4), (SUMMER_DAY, 2), ({}, 2)):
        graph, _, _ = signed_graph_of(
            tmp_path, PLACES, ways, turns=turns, roads=dict[str, object](roads)
        )
        zones, sites = zones_at({"z": PLACES["a"]}), sites_at({"s": PLACES["c"]})
        row = route(zones, sites, graph, study=a_study())[0].iloc[0]
        assert row["distance_km"] / STEP_KM == pytest.approx(steps, abs=0.05)

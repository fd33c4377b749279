"""Delays at nodes and in turning off, and the factor that is fitted to measured times."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest

from pipeline.errors import RouteError, StudyError
from pipeline.roads.delays import fit_calibration
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

# a ── b ── c ── d along the equator; n lies north of c, m north-east of it.
PLACES: Places = {name: (i * 0.01, 0.0) for i, name in enumerate("abcd")}
PLACES |= {"n": (0.02, 0.01), "m": (0.03, 0.003)}
LINE: Ways = [("a b c d", ROAD)]
SECONDS: dict[str, object] = {
    "delay_s": {
        "traffic_signals": 10.0,
        "stop": 6.0,
        "give_way": 4.0,
        "crossing": 1.0,
        "toll_booth": 20.0,
        "ford": 15.0,
        "smaller_road": 3.0,
    }
}


def delays(
    folder: Path,
    tags: dict[str, str],
    start: tuple[float, float] = PLACES["a"],
    end: tuple[float, float] = PLACES["d"],
    ways: Ways = LINE,
) -> tuple[float, float, float]:
    """Seconds of delay there by `delay_min`, there and home by the times (60 km/h throughout)."""
    graph, _, _ = signed_graph_of(folder, PLACES, ways, signs={"b": tags}, roads=SECONDS)
    row = route(zones_at({"z": start}), sites_at({"s": end}), graph, study=a_study())[0].iloc[0]
    there = (row["drive_time_min"] - row["distance_km"]) * 60
    home = (row["return_drive_time_min"] - row["return_distance_km"]) * 60
    return float(row["delay_min"]) * 60, there, home


@pytest.mark.parametrize(
    ("tags", "there", "home"),
    [
        ({}, 0, 0),
        ({"highway": "traffic_signals"}, 10, 10),
        ({"highway": "traffic_signals", "traffic_signals:direction": "forward"}, 10, 0),
        ({"highway": "stop", "direction": "backward"}, 0, 6),
        ({"highway": "stop"}, 3, 3),  # it faces one way, but which is not said
        ({"highway": "give_way", "direction": "forward"}, 4, 0),
        ({"highway": "crossing"}, 1, 1),
        ({"barrier": "toll_booth"}, 20, 20),
        ({"ford": "yes"}, 15, 15),
        ({"highway": "street_lamp"}, 0, 0),
    ],
)
def test_at_a_node(tmp_path: Path, tags: dict[str, str], there: float, home: float) -> None:
    """``a ── b ── c ── d`` with the sign at b, inside the one edge of the graph."""
    assert delays(tmp_path, tags) == pytest.approx((there, there, home), abs=0.05)


def test_only_who_passes_pays(tmp_path: Path) -> None:
    """Trips from the middle of a b to c pass the signals at b; trips from the middle of b c not."""
    signals = {"highway": "traffic_signals"}
    passing = delays(tmp_path, signals, (0.005, 0.0), PLACES["c"])
    assert passing == pytest.approx((10, 10, 10), abs=0.05)
    past = delays(tmp_path, signals, (0.015, 0.0), PLACES["c"])
    assert past == pytest.approx((0, 0, 0), abs=0.05)


def test_turning_off_into_a_smaller_road(tmp_path: Path) -> None:
    """From a to n one turns off at c by a right angle, and pays; coming back one does not.

    The road to m leaves c at 17 degrees from straight on: no sharp turn from a, but one from d,
    so it is not sharp from everywhere and nobody pays.
    """
    small = {"highway": "residential", "maxspeed": "60"}
    ways: Ways = [*LINE, ("c n", small)]
    found = delays(tmp_path, {}, PLACES["a"], PLACES["n"], ways)
    assert found == pytest.approx((3, 3, 0), abs=0.05)
    found = delays(tmp_path, {}, PLACES["a"], (0.02, 0.005), ways)
    assert found == pytest.approx((3, 3, 0), abs=0.05)
    found = delays(tmp_path, {}, PLACES["a"], PLACES["m"], [*LINE, ("c m", small)])
    assert found == pytest.approx((0, 0, 0), abs=0.05)


def test_calibration_multiplies_times_and_delays_on_roads(tmp_path: Path) -> None:
    """3 steps at 60 km/h and 10 s at the signals, all by 1.5."""
    graph, _, _ = signed_graph_of(
        tmp_path,
        PLACES,
        LINE,
        signs={"b": {"highway": "traffic_signals"}},
        roads=SECONDS | {"calibration_factor": 1.5},
    )
    zones, sites = zones_at({"z": PLACES["a"]}), sites_at({"s": PLACES["d"]})
    row = route(zones, sites, graph, study=a_study())[0].iloc[0]
    assert row["drive_time_min"] == pytest.approx(1.5 * (3 * STEP_KM + 10 / 60), abs=1e-3)


def test_factor_from_measured_times() -> None:
    """60 and 40 min modelled, 10 of the 60 on a ferry; measured 70 and 60.

    The factor is (60 + 60) / (50 + 40).
    """
    routes = pd.DataFrame(
        {
            "zone_id": ["a", "b", "c"],
            "site_id": "s",
            "drive_time_min": [60.0, 40.0, 50.0],
            "ferry_min": [10.0, 0.0, 0.0],
        }
    )
    measured = pd.DataFrame({"zone_id": ["a", "b"], "site_id": "s", "measured_min": [70.0, 60.0]})
    found = fit_calibration(routes, measured)
    assert found.factor == pytest.approx(120 / 90)
    assert found.pairs == 2
    assert found.error_before == pytest.approx((10 / 70 + 20 / 60) / 2)
    assert found.error_after == pytest.approx((20 / 3 / 70 + 20 / 3 / 60) / 2)
    with pytest.raises(RouteError, match="none of the 2 measured times"):
        fit_calibration(routes, measured.assign(site_id="t"))


def test_unknown_delay_in_the_study_is_refused(tmp_path: Path) -> None:
    with pytest.raises(StudyError, match="'signals' is no delay"):
        signed_graph_of(tmp_path, PLACES, LINE, roads={"delay_s": {"signals": 1.0}})

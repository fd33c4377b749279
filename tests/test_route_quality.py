"""How well routes stand on the roads: a road a ── b ── c ── d ── e along the equator."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest

from pipeline.inputs import read_measured_times
from pipeline.route_quality import route_and_check, summarise_routes
from pipeline.tables import RouteQuality
from tests.roads.worlds import (
    ROAD,
    STEP_KM,
    Places,
    a_study,
    signed_graph_of,
    sites_at,
    zones_at,
)

LINE: Places = {name: (i * 0.01, 0.0) for i, name in enumerate("abcde")}


def quality_of(
    folder: Path, zones: Places, measured: pd.DataFrame | None = None, factor: float = 1.0
) -> tuple[pd.Series, str]:
    """Figures by measure, and the stage's line."""
    roads: dict[str, object] = {"calibration_factor": factor, "delay_s": {"traffic_signals": 60.0}}
    signs = {"b": {"highway": "traffic_signals"}}
    graph, _, _ = signed_graph_of(folder, LINE, [("a b c d e", ROAD)], signs=signs, roads=roads)
    study = a_study(roads=roads)
    outputs = route_and_check(
        zones_at(zones), sites_at({"s": LINE["e"]}), graph, None, measured, study=study
    )
    table = RouteQuality.checked(outputs[2]).set_index("measure")["value"]
    return table, summarise_routes(outputs)


def test_gaps_and_what_is_too_far(tmp_path: Path) -> None:
    """Zones at a (on the road), 0.01 degrees north of b (1,105.7 m), and 14 km north of c."""
    zones = {"z": LINE["a"], "y": (0.01, 0.01), "far": (0.02, 0.1266)}
    table, _ = quality_of(tmp_path, zones)
    assert table["gap from zone to road, median"] == pytest.approx(1105.7, abs=0.1)
    assert table["gap from zone to road, largest"] == pytest.approx(14_000, abs=5)
    assert table["gap from site to road, largest"] == pytest.approx(0, abs=0.01)
    assert table["zones too far from a road"] == 1
    assert table["pairs without a path"] == 0


def test_how_much_of_the_time_is_delay(tmp_path: Path) -> None:
    """From a to e: 4 steps at 60 km/h and a minute at the signals."""
    table, line = quality_of(tmp_path, {"z": LINE["a"]})
    share = 1 / (1 + 4 * STEP_KM)
    assert table["share of the routed time that is delay"] == pytest.approx(share, abs=1e-4)
    assert table["calibration factor in use"] == 1
    assert "calibration" not in line


@pytest.mark.parametrize("factor", [1.0, 1.25])
def test_measured_times_give_the_same_factor_whatever_is_in_use(
    tmp_path: Path, factor: float
) -> None:
    """From a 5.453 min are modelled and 1.5 times as much is measured."""
    minutes = 1 + 4 * STEP_KM
    measured = pd.DataFrame({"zone_id": ["z"], "site_id": ["s"], "measured_min": [1.5 * minutes]})
    table, line = quality_of(tmp_path, {"z": LINE["a"]}, measured, factor)
    wanted = table["calibration factor by the measured times"]
    assert wanted == pytest.approx(1.5, abs=1e-3)
    assert table["measured times compared"] == 1
    off = abs(1.5 - factor) / 1.5
    assert table["error of the times as they are"] == pytest.approx(off, abs=1e-3)
    assert table["error with that factor"] == pytest.approx(0, abs=1e-9)
    assert "calibration_factor 1.500" in line


def test_measured_times_are_read_by_their_own_names(tmp_path: Path) -> None:
    file = tmp_path / "driven.csv"
    file.write_text("postcode,place,minutes\n0012,mere,34.5\n")
    columns = {"zone_id": "postcode", "site_id": "place", "measured_min": "minutes"}
    study = a_study(routes={"measured": {"file": str(file), "columns": columns}})
    table = read_measured_times(study)
    assert table is not None
    assert table.iloc[0].tolist() == ["0012", "mere", 34.5]
    assert read_measured_times(a_study()) is None

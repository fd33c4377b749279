"""A real country: Iceland's roads. Needs the fetched inputs (`make iceland`); slow.

Sources: the Icelandic road authority's distance between Reykjavík and Akureyri on the ring road
is 389 km (from memory). That Grímsey (611), Hrísey (630), Flatey (345) and Vestmannaeyjar (900)
are islands with a car or passenger ferry is common knowledge.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from pipeline.files import read_table
from pipeline.inputs import read_zones
from pipeline.roads import RoadGraph
from pipeline.routes import route
from pipeline.runner import Run
from pipeline.study import Study, load_study
from pipeline.tables import Routes, Sites, Surplus

STUDY_FILE = Path(__file__).parents[1] / "config" / "iceland.toml"
INPUT = Path(__file__).parents[1] / "data" / "iceland" / "input"
TRUE_SURPLUS_PER_TRIP = 8_000

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(
        not (INPUT / "visits.csv").is_file(), reason="the inputs are fetched by `make iceland`"
    ),
]


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Study:
    """The study with its stages run up to surplus."""
    study = load_study(STUDY_FILE, output=tmp_path_factory.mktemp("iceland"))
    Run(study, lambda _: None).upto("surplus")
    return study


@pytest.fixture(scope="module")
def graph(study: Study) -> RoadGraph:
    return RoadGraph.read(study.study.folder / "work" / "road_graph")


def test_reykjavik_to_akureyri(study: Study, graph: RoadGraph) -> None:
    zones = read_zones(study)
    akureyri = zones.loc[zones["zone_id"] == "600"].iloc[0]
    reykjavik = zones[zones["zone_id"] == "101"].reset_index(drop=True)
    routes, _ = route(
        reykjavik, _site("akureyri", akureyri["lon"], akureyri["lat"]), graph, study=study
    )
    row = routes.iloc[0]
    assert row["route_status"] == "routed"
    assert row["distance_km"] == pytest.approx(389, rel=0.03)
    assert row["ferry_km"] == 0
    assert row["shortest_distance_km"] <= row["distance_km"]


@pytest.mark.parametrize("code", ["345", "611", "630", "900"])
def test_islands_with_a_ferry_take_it(study: Study, code: str) -> None:
    routes = read_table(Routes, study.study.folder / "work" / "routes.parquet")
    rows = routes[routes["zone_id"] == code]
    assert len(rows) == 4
    assert (rows["route_status"] == "routed").all()
    assert (rows["ferry_km"] > 1).all()
    # Not moved across the sea: the point stands by a road of its own island.
    assert (rows["zone_snap_m"] < 1_000).all()


def test_island_without_a_road_has_no_route(study: Study, graph: RoadGraph) -> None:
    """Surtsey (63.303 N, 20.605 W, from memory): nobody may land, there is no road."""
    zones = read_zones(study).head(2).reset_index(drop=True)
    zones.loc[1, ["lon", "lat"]] = [-20.605, 63.303]
    routes, _ = route(zones, _site("thingvellir", -21.123, 64.264), graph, study=study)
    reykjavik, surtsey = routes.iloc[0], routes.iloc[1]
    assert reykjavik["route_status"] == "routed"
    assert surtsey["route_status"] in ("no_path", "too_far_from_road")
    assert np.isnan(surtsey["distance_km"])


@pytest.mark.parametrize("site_id", ["thingvellir", "skaftafell"])
def test_interval_covers_the_surplus_that_the_visits_were_drawn_with(
    study: Study, site_id: str
) -> None:
    values = read_table(Surplus, study.study.folder / "work" / "surplus.parquet")
    rows = values[
        values["chosen"]
        & (values["site_id"] == site_id)
        & (values["measure"] == "surplus_per_trip")
    ]
    assert set(rows["method"]) == {"delta", "fieller", "simulated"}
    assert (rows["ci_low"] <= TRUE_SURPLUS_PER_TRIP).all()
    assert (rows["ci_high"] >= TRUE_SURPLUS_PER_TRIP).all()


def _site(name: str, lon: float, lat: float) -> pd.DataFrame:
    row = {"site_id": name, "access_id": "1", "site_name": name, "role": "site"}
    return Sites.checked(pd.DataFrame([{**row, "lon": lon, "lat": lat, "fee": 0.0}]))

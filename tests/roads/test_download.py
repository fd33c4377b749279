"""Roads by a boundary, asked of a server on loopback; no other address is ever asked."""

from __future__ import annotations

import socket
import time
from collections.abc import Iterator
from pathlib import Path
from typing import get_args

import geopandas as gpd
import numpy as np
import osmnx
import pandas as pd
import pytest
import shapely

from pipeline.__main__ import main
from pipeline.download import LEFT_OUT, downloaded_file, with_downloaded_roads
from pipeline.errors import InputError, PipelineError, RoadsError, StudyError
from pipeline.road_settings import RoadsSettings
from pipeline.roads import RoadExtract, read_extract
from pipeline.roads.rulebook import load_rules
from pipeline.study import Study
from tests.ministudy import write_ministudy
from tests.roads.overpass_server import MapServer, map_server
from tests.roads.test_formats import PLACES, SLOW, WAYS, pbf_of, routes_of
from tests.roads.worlds import a_study, osm_xml

# The streets of test_formats, with a path between a1 and b2, signals at c1, a bollard at a3 on
# its way to b3, and no turn from way 1 by b1 into way 6.
PATH = [("a1 b2", {"highway": "footway"}), ("b2 c3", SLOW | {"highway": "construction"})]
SIGNS = {"c1": {"highway": "traffic_signals"}, "a3": {"barrier": "bollard"}}
TURNS = [("1 b1 6", {"restriction": "no_left_turn"})]
ALL = shapely.box(-0.001, -0.001, 0.03, 0.021)  # the far end of the ferry lies outside

Asked = tuple[MapServer, Path]


@pytest.fixture
def asked(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[Asked]:
    """A server with that world, and the world as a file."""
    monkeypatch.setenv("NO_PROXY", "127.0.0.1")
    world = tmp_path / "world.osm"
    world.write_text(osm_xml(PLACES, WAYS + PATH, signs=SIGNS, turns=TURNS), encoding="utf-8")
    with map_server(world) as server:
        yield server, world


def boundary(folder: Path, shape: shapely.Geometry = ALL, name: str = "around.geojson") -> Path:
    file = folder / name
    gpd.GeoDataFrame(geometry=[shape], crs=4326).to_file(file)
    return file


def a_study_with(file: Path, server: MapServer, **roads: object) -> Study:
    return a_study(roads={"boundary": str(file), "download_server": server.url} | roads)


def downloaded(file: Path, server: MapServer, **roads: object) -> tuple[Path, ...]:
    return with_downloaded_roads(a_study_with(file, server, **roads), print).roads.files


def assert_same(one: RoadExtract, other: RoadExtract) -> None:
    """Ways, nodes, tags, signs and turn restrictions are the same."""
    for name in ("node_id", "node_lon_e7", "node_lat_e7", "way_id", "way_start", "way_node"):
        np.testing.assert_array_equal(getattr(one, name), getattr(other, name), err_msg=name)
    pd.testing.assert_frame_equal(one.way_tags, other.way_tags)
    pd.testing.assert_frame_equal(one.tagged_nodes.tags, other.tagged_nodes.tags)
    np.testing.assert_array_equal(one.tagged_nodes.node, other.tagged_nodes.node)
    pd.testing.assert_frame_equal(one.turn_relations.tags, other.turn_relations.tags)
    np.testing.assert_array_equal(one.turn_relations.member_ref, other.turn_relations.member_ref)


def test_nothing_is_lost_of_what_a_file_holds(asked: Asked, tmp_path: Path) -> None:
    """On foot every way is asked for: the same extract as from XML and PBF, `d e` apart."""
    server, world = asked
    wide = boundary(tmp_path, shapely.box(-0.001, -0.001, 0.07, 0.021))
    extract = read_extract(downloaded(wide, server, profile="foot"))
    assert extract.turn_relations.count == 1
    assert len(extract.tagged_nodes.node) == 2
    assert_same(extract, read_extract((world,)))
    assert_same(extract, read_extract((pbf_of(world),)))


def test_routes_are_those_of_the_file_to_the_metre(asked: Asked, tmp_path: Path) -> None:
    """By car the path is not asked for, and the ferry comes whole though it leaves the box."""
    server, world = asked
    files = downloaded(boundary(tmp_path, ALL.union(shapely.box(0.05, 0, 0.07, 0.01))), server)
    expected, found = routes_of(read_extract((world,))), routes_of(read_extract(files))
    assert expected["route_status"].eq("routed").all()
    assert found["route_status"].tolist() == expected["route_status"].tolist()
    for column in ("distance_km", "shortest_distance_km", "return_distance_km", "toll_km"):
        assert np.allclose(found[column], expected[column], atol=0.001), column
    assert '"highway"!~"^(' in server.asked[0][1]
    assert len(PATH) == read_extract((world,)).ways - read_extract(files).ways + 1


def test_ways_are_whole_beyond_the_boundary(asked: Asked, tmp_path: Path) -> None:
    """The ferry from c1 is in to its far end d; the road beyond d is not."""
    server, _ = asked
    extract = read_extract(downloaded(boundary(tmp_path), server, profile="foot"))
    assert extract.ways == len(WAYS) + len(PATH) - 1
    assert (extract.way_node >= 0).all()


def test_it_is_asked_once_in_our_name_and_osmnx_is_as_it_was(asked: Asked, tmp_path: Path) -> None:
    server, _ = asked
    before = {k: v for k, v in vars(osmnx.settings).items() if not k.startswith("_")}
    lookup = socket.getaddrinfo
    file = boundary(tmp_path)
    first = downloaded(file, server)
    bytes_then = first[0].read_bytes()
    assert [agent for agent, _ in server.asked] == [f"roadworth/{_version()}"]
    assert downloaded(file, server) == first
    assert len(server.asked) == 1
    assert {k: v for k, v in vars(osmnx.settings).items() if not k.startswith("_")} == before
    assert socket.getaddrinfo is lookup
    # Removed, it is asked for again, and comes to the same bytes.
    first[0].unlink()
    downloaded(file, server)
    assert first[0].read_bytes() == bytes_then
    assert sorted(p.name for p in tmp_path.iterdir()) == [
        "around.geojson", first[0].name, "world.osm",
    ]  # fmt: skip


def _version() -> str:
    from pipeline import __version__

    return __version__


def test_a_large_boundary_is_asked_for_in_parts(
    asked: Asked, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Ways that two parts have are there once; a run that broke off goes on where it was."""
    server, world = asked
    monkeypatch.setattr(osmnx.settings, "max_query_area_size", 1200.0**2)
    file = boundary(tmp_path, shapely.box(-0.001, -0.001, 0.07, 0.021))
    study = a_study_with(file, server, profile="foot")
    original, answered = server.answer, []

    def until_the_third(question: str) -> tuple[int, str]:
        answered.append(question)
        return original(question) if len(answered) < 3 else (400, "no more")

    monkeypatch.setattr(server, "answer", until_the_third)
    with pytest.raises(RoadsError, match="HTTP 400: no more"):
        with_downloaded_roads(study, print)
    monkeypatch.setattr(server, "answer", original)
    extract = read_extract(with_downloaded_roads(study, print).roads.files)
    questions = [question for _, question in server.asked]
    assert len(questions) > 8
    assert len(set(questions)) == len(questions) - 1  # only the refused one was put twice
    assert_same(extract, read_extract((world,)))


def test_a_run_repeats_offline_with_the_same_bytes(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """A study with a boundary in place of its file: the same routes, and again without server."""
    monkeypatch.setenv("NO_PROXY", "127.0.0.1")
    study = write_ministudy(tmp_path)
    assert main(["route", str(study)]) == 0
    routes = (tmp_path / "mini" / "work" / "routes.parquet").read_bytes()
    boundary(tmp_path, shapely.box(9.9, 49.9, 11.0, 50.1))
    with map_server(tmp_path / "roads.osm.pbf") as server:
        _replace(study, 'files = ["roads.osm.pbf"]', _by_boundary(server))
        assert main(["route", str(study)]) == 0
        assert len(server.asked) == 1
    assert "wrote around_" in capsys.readouterr().out
    assert (tmp_path / "mini" / "work" / "routes.parquet").read_bytes() == routes
    (tmp_path / "roads.osm.pbf").unlink()
    assert main(["route", str(study), "--output", str(tmp_path / "again")]) == 0
    assert (tmp_path / "again" / "work" / "routes.parquet").read_bytes() == routes
    assert "asking" not in capsys.readouterr().out


def _by_boundary(server: MapServer) -> str:
    return f'boundary = "around.geojson"\ndownload_server = "{server.url}"'


def _replace(file: Path, old: str, new: str) -> None:
    text = file.read_text(encoding="utf-8")
    assert old in text
    file.write_text(text.replace(old, new), encoding="utf-8")


def test_it_may_stand_beside_files_and_is_idle_with_ready_routes(
    asked: Asked, tmp_path: Path
) -> None:
    server, world = asked
    files = downloaded(boundary(tmp_path), server, files=[str(world)])
    assert files[0] == world
    assert len(files) == 2
    assert read_extract(files).ways == read_extract((world,)).ways
    ready = tmp_path / "routes.csv"
    ready.touch()
    study = a_study(
        roads={"boundary": str(boundary(tmp_path, name="other.gpkg"))},
        routes={"table": str(ready)},
    )
    assert with_downloaded_roads(study, print) is study


def test_the_name_of_the_file_is_that_of_the_question(tmp_path: Path) -> None:
    """Another boundary or other ways are another file; another speed is not."""
    file = boundary(tmp_path)
    named = {
        downloaded_file(file, RoadsSettings.model_validate(keys)).name
        for keys in (
            {},
            {"speed_factor": 0.9},
            {"profile": "motorcycle"},
            {"profile": "foot"},
            {"rules": {"classes": {"path": {"kmh": 5}}}},
        )
    }
    named.add(downloaded_file(boundary(tmp_path, shapely.box(0, 0, 1, 1)), RoadsSettings()).name)
    assert len(named) == 4


def test_no_profile_leaves_out_a_class_of_its_own() -> None:
    profiles = get_args(RoadsSettings.model_fields["profile"].annotation)
    assert set(profiles) == set(LEFT_OUT)
    for profile in profiles:
        classes = load_rules(RoadsSettings(profile=profile)).classes
        assert not set(classes) & set(LEFT_OUT[profile])


# --- what goes wrong -------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("refusal", "extra", "message"),
    [
        ((400, "parse error"), {}, r"refused \(HTTP 400: parse error\).*Try later"),
        ((403, '{"a": 1}'), {}, r"refused \(HTTP 403"),
        ((200, "<html>"), {}, r"no answer from the map server"),
        (None, {"elements": []}, r"no road inside around\.geojson.*reference system"),
        (None, {"remark": "runtime error: timed out"}, r"gave up on a part \(runtime error"),
        (None, {"elements": [{"type": "way", "id": 1, "nodes": [1, 2]}]}, r"lacks 2 of 2 nodes"),
        (None, {"elements": [{"type": "way", "id": 1}]}, r"none of an Overpass API"),
    ],
)
def test_no_answer_is_taken_for_less_than_it_is(
    asked: Asked,
    tmp_path: Path,
    refusal: tuple[int, str] | None,
    extra: dict[str, object],
    message: str,
) -> None:
    server, _ = asked
    server.refusal, server.extra = refusal, extra
    with pytest.raises(RoadsError, match=message):
        downloaded(boundary(tmp_path), server)
    assert not list(tmp_path.glob("*.pbf"))
    server.refusal, server.extra = None, {}
    assert downloaded(boundary(tmp_path), server)[0].is_file()


def test_a_busy_server_is_waited_for_but_not_for_ever(
    asked: Asked, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    server, _ = asked
    server.refusal = (429, "too many requests")
    waits: list[float] = []
    monkeypatch.setattr(time, "sleep", waits.append)
    with pytest.raises(RoadsError, match="HTTP 429"):
        downloaded(boundary(tmp_path), server)
    assert len(server.asked) == 5
    assert sum(waits) == 4 * 55


def test_without_a_server_it_says_so_at_once(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("NO_PROXY", "127.0.0.1")
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        closed = MapServer([], url=f"http://127.0.0.1:{free.getsockname()[1]}/api")
    started = time.perf_counter()
    with pytest.raises(RoadsError, match=r"no answer .* not downloaded yet: go online"):
        downloaded(boundary(tmp_path), closed)
    assert time.perf_counter() - started < 5


@pytest.mark.parametrize(
    ("shape", "error", "message"),
    [
        (shapely.Point(0, 0), StudyError, r"something else than polygons"),
        (shapely.LineString([(0, 0), (1, 1)]), InputError, r"neither point nor polygon"),
        (shapely.box(0, 0, 10, 10), StudyError, r"encloses 1,2\d\d,\d\d\d km², more than"),
    ],
)
def test_a_boundary_that_is_none_is_refused(
    asked: Asked,
    tmp_path: Path,
    shape: shapely.Geometry,
    error: type[PipelineError],
    message: str,
) -> None:
    server, _ = asked
    with pytest.raises(error, match=message):
        downloaded(boundary(tmp_path, shape), server)
    assert not server.asked

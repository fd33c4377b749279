"""Where the work is done changes no byte: one process, several, a cluster that loses a worker."""

from __future__ import annotations

import json
import os
import pickle
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest

from pipeline import routes as routes_module
from pipeline.at_hand import Find, at_hand
from pipeline.demand.bootstrap import replicates
from pipeline.demand.counts import NegativeBinomial
from pipeline.errors import StudyError
from pipeline.executor import InProcess, Processes, make_executor
from pipeline.road_settings import RoutesSettings
from pipeline.roads import RoadGraph
from pipeline.roads.arrays import Int64
from pipeline.roads.route_lines import Leg
from pipeline.routes import route
from pipeline.sensitivity import run_variants
from pipeline.settings import ComputeSettings
from pipeline.site_routes import Errand, one_site
from pipeline.variants import own_variants
from tests.demand.persons import drawn
from tests.roads.worlds import ROAD, Places, Ways, a_study, graph_of, sites_at, zones_at
from tests.test_sensitivity import study, tables

SIDE = 6
ROOT = Path(__file__).parents[1]
STALLED = "s3"


def town() -> tuple[Places, Ways]:
    """A grid of 6 × 6 crossings, streets of 1.1 km with speeds of their own."""
    places = {f"p{x}q{y}": (x * 0.01, y * 0.01) for x in range(SIDE) for y in range(SIDE)}
    lines = [[f"p{x}q{y}" for x in range(SIDE)] for y in range(SIDE)]
    lines += [[f"p{x}q{y}" for y in range(SIDE)] for x in range(SIDE)]
    ways = [(" ".join(a), ROAD | {"maxspeed": str(30 + 5 * k)}) for k, a in enumerate(lines)]
    return places, ways


@pytest.fixture
def graph(tmp_path: Path) -> RoadGraph:
    """The town's graph as the flow has it: opened from its folder."""
    made, _, _ = graph_of(tmp_path, *town())
    folder = tmp_path / RoadGraph.folder_name
    folder.mkdir()
    made.write(folder)
    return RoadGraph.read(folder)


def routes_with(graph: RoadGraph, **compute: object) -> tuple[pd.DataFrame, gpd.GeoDataFrame]:
    places, _ = town()
    zones = zones_at({f"z{k}": (x + 0.002, y) for k, (x, y) in enumerate(places.values())})
    sites = sites_at({f"s{k}": places[f"p{k}q{k}"] for k in range(SIDE)})
    return route(zones, sites, graph, study=a_study(compute=compute))


def assert_same_bytes(
    one: tuple[pd.DataFrame, gpd.GeoDataFrame], two: tuple[pd.DataFrame, gpd.GeoDataFrame]
) -> None:
    assert one[0].to_csv() == two[0].to_csv()
    assert one[0].to_parquet() == two[0].to_parquet()
    assert pd.DataFrame(one[1].to_wkb()).to_parquet() == pd.DataFrame(two[1].to_wkb()).to_parquet()


def test_two_processes_give_the_bytes_of_one(graph: RoadGraph, tmp_path: Path) -> None:
    """Searches, replicates and alternatives; what the tasks shared on disk is gone."""
    before = sorted(tmp_path.iterdir())
    assert_same_bytes(routes_with(graph), routes_with(graph, workers=2))
    assert sorted(tmp_path.iterdir()) == before
    sample = drawn("negative_binomial", seed=25, count=200)
    model = NegativeBinomial().fit(sample, errors="HC3")
    alone = replicates(model, sample, count=120, seed=3)
    settings = study(grid={"costs.wage_fraction": (0.0, 0.2, 0.4)})
    work = own_variants(settings), tables(settings), settings
    with make_executor(ComputeSettings(workers=2)) as executor:
        together = replicates(model, sample, count=120, seed=3, executor=executor)
        there = run_variants(*work, executor)
    assert alone.theta.tobytes() == together.theta.tobytes()
    here = run_variants(*work, InProcess())
    pd.testing.assert_frame_equal(pd.DataFrame(there), pd.DataFrame(here), check_exact=True)


def test_another_process_gets_paths_and_never_the_graph(graph: RoadGraph) -> None:
    """A task of a graph of any size and of any number of zones is a few hundred bytes."""
    zones = zones_at({f"z{k}": (0.0, 0.0) for k in range(1000)})
    with Processes(1) as executor, at_hand(graph, zones, executor) as find:
        assert len(pickle.dumps(find)) < 500
        found, there = find()
    assert found.folder == graph.folder
    np.testing.assert_array_equal(found.arc_cost, graph.arc_cost)
    pd.testing.assert_frame_equal(there, zones)


def test_where_the_work_is_done_is_no_reason_to_do_it_again() -> None:
    sections = (RoutesSettings, ComputeSettings)
    here, there = a_study(), a_study(compute={"workers": 2})
    assert here.settings_digest(sections) == there.settings_digest(sections)


# --- a cluster -------------------------------------------------------------------------------


def stalled(find: Find[Errand], rows: Int64) -> tuple[pd.DataFrame, list[Leg]]:
    """The task of a site; the first process that comes to the fourth one never ends it."""
    if find()[1].sites["site_id"].iloc[rows[0]] == STALLED:
        with suppress(FileExistsError), mark_file().open("x") as mark:
            mark.write(str(os.getpid()))
            mark.flush()
            time.sleep(600)
    return one_site(find, rows)


def mark_file() -> Path:
    """Where the process that stalls says which it is."""
    return Path(os.environ["ROADWORTH_TEST_MARK"])


@contextmanager
def cluster(folder: Path) -> Iterator[str]:
    """A scheduler and two workers on this machine; gives the scheduler's address."""
    file = folder / "scheduler.json"
    at_home = ["--host", "127.0.0.1", "--no-dashboard"]
    worker = ["worker", "--scheduler-file", str(file), "--nthreads", "1", "--no-nanny", *at_home]
    commands = [
        ["scheduler", "--scheduler-file", str(file), "--port", "0", *at_home],
        worker,
        worker,
    ]
    environment = os.environ | {"PYTHONPATH": str(ROOT)}
    with (folder / "cluster.log").open("w") as log:
        started = [
            subprocess.Popen(
                [sys.executable, "-m", "dask", *command],
                cwd=folder,
                env=environment,
                stdout=log,
                stderr=log,
            )
            for command in commands
        ]
        try:
            while not file.exists() or not file.read_text():
                assert started[0].poll() is None, (folder / "cluster.log").read_text()
                time.sleep(0.1)
            yield json.loads(file.read_text())["address"]
        finally:
            for process in started:
                process.kill()
                process.wait()


def test_a_cluster_that_loses_a_worker_gives_the_same_bytes(
    graph: RoadGraph, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A real scheduler and two workers; one is killed in the middle of its fourth site."""
    pytest.importorskip("distributed", reason="needs the extra 'test' (dask.distributed)")
    serial = routes_with(graph)
    mark = tmp_path / "stalled"
    monkeypatch.setenv("ROADWORTH_TEST_MARK", str(mark))
    monkeypatch.setattr(routes_module, "one_site", stalled)

    def kill() -> None:
        while not mark.exists() or not mark.read_text():
            time.sleep(0.05)
        os.kill(int(mark.read_text()), signal.SIGKILL)

    with cluster(tmp_path) as scheduler:
        killer = threading.Thread(target=kill, daemon=True)
        killer.start()
        there = routes_with(graph, scheduler=scheduler)
        killer.join(timeout=1)
    assert not killer.is_alive(), "no worker was killed"
    assert_same_bytes(serial, there)


def test_no_scheduler_is_said_with_the_remedy(monkeypatch: pytest.MonkeyPatch) -> None:
    pytest.importorskip("distributed", reason="needs the extra 'test' (dask.distributed)")
    monkeypatch.setattr("pipeline.executor.WAIT_S", 0.2)
    with pytest.raises(StudyError, match="Start 'dask scheduler'"):
        make_executor(ComputeSettings(scheduler="tcp://127.0.0.1:9"))


def test_a_study_for_a_cluster_needs_the_extra(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "distributed", None)
    with pytest.raises(StudyError, match="extra 'cluster'"):
        make_executor(ComputeSettings(scheduler="tcp://127.0.0.1:9"))

"""Files are whole or not there at all."""

from __future__ import annotations

from pathlib import Path

import geopandas as gpd
import pandas as pd
import pytest
from shapely import LineString

from pipeline.errors import PipelineError, TableError
from pipeline.files import atomic_file, atomic_folder, locked, read_table, write_table
from pipeline.tables import Crosswalk, RouteLines


def test_a_write_that_fails_leaves_the_old_file(tmp_path: Path) -> None:
    path = tmp_path / "a.txt"
    path.write_text("old")

    def half() -> None:
        with atomic_file(path) as temporary:
            temporary.write_text("ne")
            raise RuntimeError

    with pytest.raises(RuntimeError):
        half()
    assert path.read_text() == "old"
    assert [p.name for p in tmp_path.iterdir()] == ["a.txt"]


def test_a_folder_is_replaced_as_a_whole(tmp_path: Path) -> None:
    path = tmp_path / "graph"
    for name in ("first", "second"):
        with atomic_folder(path) as temporary:
            (temporary / name).write_text(name)
            assert not (path / name).exists()
    assert [p.name for p in path.iterdir()] == ["second"]
    assert [p.name for p in tmp_path.iterdir()] == ["graph"]


def test_a_folder_that_fails_leaves_the_old_one(tmp_path: Path) -> None:
    path = tmp_path / "graph"
    with atomic_folder(path) as temporary:
        (temporary / "a").write_text("old")

    def half() -> None:
        with atomic_folder(path) as temporary:
            (temporary / "a").write_text("new")
            raise RuntimeError

    with pytest.raises(RuntimeError):
        half()
    assert (path / "a").read_text() == "old"
    assert [p.name for p in tmp_path.iterdir()] == ["graph"]


def test_a_table_comes_back_as_it_was(tmp_path: Path) -> None:
    frame = Crosswalk.checked(pd.DataFrame({"postal_code": ["007"], "zone_id": ["01"]}))
    write_table(frame, tmp_path / "crosswalk.parquet")
    back = read_table(Crosswalk, tmp_path / "crosswalk.parquet")
    pd.testing.assert_frame_equal(back, frame)


def test_a_table_with_geometry_comes_back_as_it_was(tmp_path: Path) -> None:
    frame = gpd.GeoDataFrame(
        {"zone_id": ["1"], "site_id": ["fen"]},
        geometry=[LineString([(0, 0), (1, 1)])],
        crs="EPSG:4326",
    )
    write_table(RouteLines.checked(frame), tmp_path / "lines.parquet")
    back = read_table(RouteLines, tmp_path / "lines.parquet")
    assert isinstance(back, gpd.GeoDataFrame)
    assert back.crs == frame.crs
    assert back.geometry.iloc[0].equals(frame.geometry.iloc[0])


def test_a_table_that_was_tampered_with_is_refused(tmp_path: Path) -> None:
    pd.DataFrame({"postal_code": ["1", "1"], "zone_id": ["a", "b"]}).to_parquet(
        tmp_path / "crosswalk.parquet"
    )
    with pytest.raises(TableError, match="2 rows share a key"):
        read_table(Crosswalk, tmp_path / "crosswalk.parquet")


def test_two_runs_never_share_a_folder(tmp_path: Path) -> None:
    def second() -> None:
        with locked(tmp_path):
            pass

    with locked(tmp_path), pytest.raises(PipelineError, match="another run is at work"):
        second()
    second()

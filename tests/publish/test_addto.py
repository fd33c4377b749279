"""The one-command join into a layer that somebody already has."""

from __future__ import annotations

from pathlib import Path

import geopandas as gpd
import pytest

from pipeline.publish.addto import main
from tests.publish.conftest import COST, make_zones


@pytest.fixture
def layer(tmp_path: Path) -> Path:
    """A layer of parishes with a column of its own; one parish is no zone of the study."""
    zones = make_zones().rename(columns={"zone_id": "code"})[["code", "population", "geometry"]]
    zones.loc[8, "code"] = "999"
    zones.to_file(tmp_path / "parishes.gpkg", layer="parishes")
    return tmp_path / "parishes.gpkg"


def test_figures_stand_beside_the_layer_s_own_columns(folder: Path, layer: Path) -> None:
    table, joined = folder / "tables" / "zone_table.csv", layer.with_name("joined.gpkg")
    assert main([str(table), str(layer), "parishes", "code", str(joined)]) == 0
    rows = gpd.read_file(joined).set_index("code")
    assert list(rows.index) == [*list(COST)[:8], "999"]
    assert rows.loc["005", "travel_cost"] == COST["005"]
    assert rows.loc["005", "population_study"] == 1000
    assert rows["travel_cost"].isna().sum() == 1


@pytest.mark.parametrize(
    ("key", "words"), [("code", "no 'code' of the layer"), ("id", "no column")]
)
def test_a_layer_that_does_not_fit_is_refused(
    folder: Path, layer: Path, key: str, words: str, capsys: pytest.CaptureFixture[str]
) -> None:
    parishes = gpd.read_file(layer).assign(code=[f"X{n}" for n in range(9)])
    parishes.to_file(layer, layer="parishes")
    table = str(folder / "tables" / "zone_table.csv")
    assert main([table, str(layer), "parishes", key, str(layer.with_name("no.gpkg"))]) == 1
    assert words in capsys.readouterr().err


def test_numbers_in_place_of_text_are_refused(
    folder: Path, layer: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    parishes = gpd.read_file(layer)
    parishes.assign(code=parishes["code"].astype(int)).to_file(layer, layer="parishes")
    table = str(folder / "tables" / "zone_table.csv")
    assert main([table, str(layer), "parishes", "code", str(layer.with_name("no.gpkg"))]) == 1
    assert "leading zeros are lost" in capsys.readouterr().err

"""datapackage.json and GeoParquet, checked by readers of the standards."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import geopandas as gpd
import pyarrow.parquet as pq
import pytest

from tests.publish.test_files import LAYERS


@pytest.fixture(scope="module")
def package(folder: Path) -> Any:
    return json.loads((folder / "datapackage.json").read_text(encoding="utf-8"))


def test_every_file_is_described_with_its_digest(folder: Path, package: Any) -> None:
    written = {p.relative_to(folder).as_posix() for p in folder.rglob("*") if p.is_file()}
    described = {resource["path"]: resource for resource in package["resources"]}
    assert set(described) == written - {"datapackage.json"}
    for path, resource in described.items():
        content = (folder / path).read_bytes()
        assert resource["hash"] == f"sha256:{hashlib.sha256(content).hexdigest()}"
        assert resource["bytes"] == len(content)


def test_names_keep_the_data_package_standard(package: Any) -> None:
    """Data Package 1.0: names are unique, of lower-case letters, digits and . _ - /."""
    names = [package["name"], *(resource["name"] for resource in package["resources"])]
    assert len(set(names)) == len(names)
    assert all(set(name) <= set("abcdefghijklmnopqrstuvwxyz0123456789._-") for name in names)


def test_columns_are_described_with_type_unit_and_meaning(package: Any) -> None:
    (table,) = [r for r in package["resources"] if r["name"] == "zone-table"]
    fields = {field["name"]: field for field in table["schema"]["fields"]}
    assert fields["travel_cost"]["unit"] == "EUR"
    assert fields["zone_id"]["type"] == "string"
    assert fields["zone_id"]["constraints"] == {"required": True}
    assert fields["in_market"]["type"] == "boolean"


@pytest.mark.parametrize("layer", LAYERS)
def test_geoparquet_keeps_1_1(folder: Path, layer: str) -> None:
    """GeoParquet 1.1.0: version, covering of the bounding box, crs as PROJJSON; zstd inside."""
    path = folder / "geoparquet" / f"{layer}.parquet"
    file = pq.ParquetFile(path)
    about = json.loads(file.schema_arrow.metadata[b"geo"])
    column = about["columns"]["geometry"]
    assert (about["version"], about["primary_column"]) == ("1.1.0", "geometry")
    assert column["encoding"] == "WKB"
    assert column["crs"]["id"] == {"authority": "EPSG", "code": 4326}
    assert column["covering"]["bbox"]["xmin"] == ["bbox", "xmin"]
    assert file.metadata.row_group(0).column(0).compression == "ZSTD"
    back = gpd.read_parquet(path, bbox=(8.0, 50.0, 8.05, 50.05))
    everything = gpd.read_parquet(path)
    assert 0 <= len(back) < len(everything)

"""Checks by other people's validators, on the county's, the demo's and Iceland's outputs.

`make validate` installs what they need and runs them; each skips where it is missing. On Debian:
apt-get install gdal-bin python3-gdal python3-qgis; from PyPI: frictionless, geoparquet-validator.
"""

from __future__ import annotations

import importlib
import json
import os
import shutil
import subprocess
from pathlib import Path

import numpy as np
import pyogrio
import pytest
from PIL import Image

from pipeline.runner import Run
from pipeline.study import load_study
from tests.publish.test_files import check_rfc_7946

pytestmark = pytest.mark.slow
SYSTEM_PYTHON = "/usr/bin/python3"
ROOT = Path(__file__).parents[2]


@pytest.fixture(scope="session", params=["county", "demo", "iceland"])
def output(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """What people take away from a whole run; the county's is the small one of these tests."""
    if request.param == "county":
        return Path(request.getfixturevalue("folder"))
    if not (ROOT / "data" / request.param / "input" / "sites.csv").is_file():
        pytest.skip(f"needs the inputs of {request.param}: make {request.param}")
    place = tmp_path_factory.mktemp(request.param)
    study = load_study(ROOT / "config" / f"{request.param}.toml", output=place)
    Run(study, lambda _: None).upto("publish")
    return study.study.folder / "output"


def geopackage(output: Path) -> Path:
    (path,) = output.glob("*.gpkg")
    return path


def layers(output: Path) -> list[str]:
    """Its layers with a geometry, as in the folders beside it."""
    return sorted(path.stem for path in (output / "geojson").glob("*.geojson"))


def run(*command: str) -> subprocess.CompletedProcess[str]:
    environment = {**os.environ, "QT_QPA_PLATFORM": "offscreen", "XDG_RUNTIME_DIR": "/tmp"}
    return subprocess.run(command, capture_output=True, text=True, env=environment, check=False)


def need(module: str, package: str) -> None:
    """Skip unless the system's Python has a module."""
    if not Path(SYSTEM_PYTHON).exists() or run(SYSTEM_PYTHON, "-c", f"import {module}").returncode:
        pytest.skip(f"needs Debian's package {package}: apt-get install {package}")


def test_gdal_validates_the_geopackage(output: Path) -> None:
    need("osgeo_utils.samples.validate_gpkg", "python3-gdal")
    script = (SYSTEM_PYTHON, "-m", "osgeo_utils.samples.validate_gpkg")
    done = run(*script, str(geopackage(output)))
    assert (done.returncode, done.stdout.strip()) == (0, "")


def test_ogrinfo_reads_every_layer(output: Path) -> None:
    if shutil.which("ogrinfo") is None:
        pytest.skip("needs Debian's package gdal-bin: apt-get install gdal-bin")
    assert len(layers(output)) >= 5
    for layer in layers(output):
        done = run("ogrinfo", "-so", str(geopackage(output)), layer)
        assert done.returncode == 0, done.stderr
        assert f"Layer name: {layer}" in done.stdout
        assert "Feature Count: 0" not in done.stdout
        assert "Warning" not in done.stderr


def test_frictionless_validates_the_package(output: Path) -> None:
    # Imported by name: its own dependencies warn on import.
    try:
        frictionless = importlib.import_module("frictionless")
    except ImportError:
        pytest.skip("needs frictionless: pip install frictionless")
    report = frictionless.validate(str(output / "datapackage.json"))
    assert report.flatten(["name", "type", "message"]) == []
    assert len(report.tasks) > 30


def test_every_geoparquet_file_is_conformant(output: Path) -> None:
    """Core, bounding-box covering and distribution: the tests of the OGC's GeoParquet."""
    try:
        validator = importlib.import_module("geoparquet_validator")
    except ImportError:
        pytest.skip("needs geoparquet-validator: pip install geoparquet-validator")
    for layer in layers(output):
        report = validator.check(str(output / "geoparquet" / f"{layer}.parquet"))
        assert validator.failed(report) == [], layer
        passed = {row["id"] for row in report["outcomes"] if row["status"] == "pass"}
        assert {"/conf/core/wkb", "/conf/core/bbox-array"} <= passed
        assert any(name.startswith("/conf/covering/") for name in passed)


def test_geojson_of_a_whole_run_keeps_rfc_7946(output: Path) -> None:
    for layer in layers(output):
        check_rfc_7946(output / "geojson" / f"{layer}.geojson")


QGIS = """
import json, sys
from qgis.PyQt.QtCore import QSize
from qgis.core import (
    QgsApplication, QgsMapRendererParallelJob, QgsMapSettings, QgsVectorLayer,
)
app = QgsApplication([], False)
QgsApplication.setPrefixPath("/usr", True)
app.initQgis()
found, drawn = {}, []
for name in sys.argv[3:]:
    layer = QgsVectorLayer(f"{sys.argv[1]}|layername={name}", name, "ogr")
    loaded = layer.isValid() and layer.loadDefaultStyle()[1]
    items = [item.label() for item in layer.renderer().legendSymbolItems()]
    found[name] = [loaded, layer.renderer().type(), items, layer.attributeAlias(1)]
    drawn.append(layer)
settings = QgsMapSettings()
settings.setLayers(drawn)
zones = drawn[sys.argv[3:].index("zones")]
settings.setDestinationCrs(zones.crs())
settings.setExtent(zones.extent())
settings.setOutputSize(QSize(1000, 800))
job = QgsMapRendererParallelJob(settings)
job.start()
job.waitForFinished()
job.renderedImage().save(sys.argv[2])
print(json.dumps(found))
sys.stdout.flush()
import os
os._exit(0)
"""
ON_TOP = ("sites", "zone_points", "routes", "roads_used", "dropped_roads", "zones")


def test_desktop_software_draws_every_layer_with_style_and_aliases(
    output: Path, tmp_path: Path
) -> None:
    need("qgis.core", "python3-qgis")
    picture = tmp_path / "map.png"
    # Of several sites, each has its layer of zones too: beneath the first one's.
    names = sorted(layers(output), key=lambda name: [*ON_TOP, name].index(name))
    done = run(SYSTEM_PYTHON, "-c", QGIS, str(geopackage(output)), str(picture), *names)
    assert done.returncode == 0, done.stderr
    found = json.loads(done.stdout.splitlines()[-1])
    assert {name: row[0] for name, row in found.items()} == dict.fromkeys(names, True)
    assert found["zones"][1] == "RuleRenderer"
    assert found["zones"][2][-1].endswith("no figure")
    assert all(row[3] for row in found.values())
    # Not an empty sheet: points and lines alone, where zones have no polygons, fill some 6 %.
    with Image.open(picture) as image:
        colours, counts = np.unique(
            np.asarray(image.convert("RGB")).reshape(-1, 3), axis=0, return_counts=True
        )
    assert len(colours) > 20
    assert counts.max() < 0.97 * counts.sum()


def test_layers_of_the_geopackage_are_those_of_the_folders(output: Path) -> None:
    names = [str(name) for name in pyogrio.list_layers(geopackage(output))[:, 0]]
    assert sorted(names) == sorted([*layers(output), "layer_styles"])

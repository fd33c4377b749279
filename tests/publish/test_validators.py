"""Checks by other people's validators; `make validate` runs them, each skips where it is missing.

On Debian: apt-get install gdal-bin python3-gdal python3-qgis; from PyPI: frictionless.
"""

from __future__ import annotations

import importlib
import json
import os
import shutil
import subprocess
from pathlib import Path

import pytest

from tests.publish.test_files import LAYERS

pytestmark = pytest.mark.slow
SYSTEM_PYTHON = "/usr/bin/python3"


def run(*command: str) -> subprocess.CompletedProcess[str]:
    environment = {**os.environ, "QT_QPA_PLATFORM": "offscreen", "XDG_RUNTIME_DIR": "/tmp"}
    return subprocess.run(command, capture_output=True, text=True, env=environment, check=False)


def need(module: str, package: str) -> None:
    """Skip unless the system's Python has a module."""
    if not Path(SYSTEM_PYTHON).exists() or run(SYSTEM_PYTHON, "-c", f"import {module}").returncode:
        pytest.skip(f"needs Debian's package {package}: apt-get install {package}")


def test_gdal_validates_the_geopackage(folder: Path) -> None:
    need("osgeo_utils.samples.validate_gpkg", "python3-gdal")
    script = (SYSTEM_PYTHON, "-m", "osgeo_utils.samples.validate_gpkg")
    done = run(*script, str(folder / "fenland.gpkg"))
    assert (done.returncode, done.stdout.strip()) == (0, "")


@pytest.mark.parametrize("layer", LAYERS)
def test_ogrinfo_reads_every_layer(folder: Path, layer: str) -> None:
    if shutil.which("ogrinfo") is None:
        pytest.skip("needs Debian's package gdal-bin: apt-get install gdal-bin")
    done = run("ogrinfo", "-so", str(folder / "fenland.gpkg"), layer)
    assert done.returncode == 0, done.stderr
    assert f"Layer name: {layer}" in done.stdout
    assert "Warning" not in done.stderr


def test_frictionless_validates_the_package(folder: Path) -> None:
    # Imported by name: its own dependencies warn on import.
    try:
        frictionless = importlib.import_module("frictionless")
    except ImportError:
        pytest.skip("needs frictionless: pip install frictionless")
    report = frictionless.validate(str(folder / "datapackage.json"))
    assert report.flatten(["name", "type", "message"]) == []
    assert len(report.tasks) > 30


QGIS = """
import json, sys
from qgis.core import QgsApplication, QgsVectorLayer
app = QgsApplication([], False)
QgsApplication.setPrefixPath("/usr", True)
app.initQgis()
found = {}
for name in sys.argv[2:]:
    layer = QgsVectorLayer(f"{sys.argv[1]}|layername={name}", name, "ogr")
    loaded = layer.isValid() and layer.loadDefaultStyle()[1]
    items = [item.label() for item in layer.renderer().legendSymbolItems()]
    found[name] = [loaded, layer.renderer().type(), items, layer.attributeAlias(1)]
    del layer
print(json.dumps(found))
"""


def test_desktop_software_opens_every_layer_with_style_and_aliases(folder: Path) -> None:
    need("qgis.core", "python3-qgis")
    done = run(SYSTEM_PYTHON, "-c", QGIS, str(folder / "fenland.gpkg"), *LAYERS)
    found = json.loads(done.stdout.splitlines()[-1])
    assert {name: row[0] for name, row in found.items()} == dict.fromkeys(LAYERS, True)
    assert found["zones"][1] == "RuleRenderer"
    assert found["zones"][2][-1] == "no figure"
    assert all(row[3] for row in found.values())

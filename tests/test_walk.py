"""The walk in docs/new_site.md, typed line by line in a copy of the project."""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import geopandas as gpd
import pytest

ROOT = Path(__file__).parents[1]

pytestmark = pytest.mark.slow


def test_every_command_of_the_walk_works(tmp_path: Path) -> None:
    for name in ("pipeline", "tests", "config"):
        ignored = shutil.ignore_patterns("__pycache__")
        shutil.copytree(ROOT / name, tmp_path / name, ignore=ignored)
    text = (ROOT / "docs" / "new_site.md").read_text(encoding="utf-8")
    blocks = re.findall(r"^```\n(.*?)^```$", text, re.MULTILINE | re.DOTALL)
    assert len(blocks) == 7
    folder = str(Path(sys.executable).parent)
    environment = {**os.environ, "PATH": f"{folder}{os.pathsep}{os.environ['PATH']}"}
    for block in blocks:
        done = subprocess.run(
            ["bash", "-e", "-c", block],
            cwd=tmp_path,
            env=environment,
            capture_output=True,
            text=True,
            check=False,
        )
        assert done.returncode == 0, f"{block}\n{done.stdout}\n{done.stderr}"
    runs = [tmp_path / "data" / name / "output" for name in ("lakeshore", "lakeshore_dearer")]
    values = [
        json.loads((run / "run.json").read_text(encoding="utf-8"))["headline"][0] for run in runs
    ]
    assert values[1]["annual_surplus"]["value"] > values[0]["annual_surplus"]["value"] > 0
    assert "costs.wage_fraction" in (tmp_path / "comparison.html").read_text(encoding="utf-8")
    zones = gpd.read_file(tmp_path / "joined.gpkg")
    assert list(zones["zone_id"])[:2] == ["01", "02"]
    assert zones["travel_cost_study"].notna().all()

"""The demo, run twice: in another folder, on another day and clock, with another hash seed."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from tests.publish.test_files import digests

pytestmark = pytest.mark.slow
ROOT = Path(__file__).parents[2]


def run_demo(place: Path, *before: str, **environment: str) -> dict[str, str]:
    """Digests of everything that the demo's run leaves behind for people."""
    command = [*before, sys.executable, "-m", "pipeline", "all", "config/demo.toml"]
    done = subprocess.run(
        [*command, "--output", str(place), "--quiet"],
        cwd=ROOT,
        env={**os.environ, **environment},
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    return digests(place / "output")


def test_another_day_folder_and_time_zone_give_the_same_bytes(tmp_path: Path) -> None:
    if shutil.which("faketime") is None:
        pytest.skip("needs Debian's package faketime: apt-get install faketime")
    here = run_demo(tmp_path / "here", TZ="UTC", PYTHONHASHSEED="1")
    later = run_demo(
        tmp_path / "a folder of another name",
        "faketime",
        "-f",
        "+400d",
        TZ="Pacific/Auckland",
        PYTHONHASHSEED="2",
        LC_ALL="C",
    )
    assert len(here) > 40
    assert later == here

"""An independent routing engine, and cuts of extracts in which it and we see the same roads."""

from __future__ import annotations

import json
import shutil
import subprocess
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import osmium

from pipeline.roads.arrays import Float64

ROOT = Path(__file__).parents[2]
ENGINE_PYTHON = ROOT / ".venv-engine" / "bin" / "python"
PROCESS = Path(__file__).parent / "engine_process.py"

# What a strict cut keeps: roads that any car may use, and the tags that say how.
ROADS = {
    *("motorway", "trunk", "primary", "secondary", "tertiary"),
    *("motorway_link", "trunk_link", "primary_link", "secondary_link", "tertiary_link"),
    *("unclassified", "residential", "living_street", "service"),
}
KEPT = ("highway", "oneway", "junction", "maxspeed", "name", "surface")
OPEN = {"yes", "permissive", "designated"}
ACCESS = ("access", "vehicle", "motor_vehicle", "motorcar")
ONEWAY = {"yes", "no", "-1", "1", "true"}


def strict_cut(source: Path, target: Path) -> Path:
    """The open roads of an extract without barriers, ferries, tracks, seasons and restrictions."""
    ways: list[tuple[int, list[int], dict[str, str]]] = []
    highways: Any = osmium.FileProcessor(str(source), osmium.osm.WAY)
    for way in highways.with_filter(osmium.filter.KeyFilter("highway")):
        tags = dict(way.tags)
        if _is_plain(tags):
            kept = {key: tags[key] for key in KEPT if key in tags}
            ways.append((way.id, [node.ref for node in way.nodes], kept))
    used = osmium.filter.IdFilter(sorted({node for _, nodes, _ in ways for node in nodes}))
    places: Any = osmium.FileProcessor(str(source), osmium.osm.NODE).with_filter(used)
    with osmium.SimpleWriter(str(target)) as writer:
        for node in places:
            if node.location.valid():
                writer.add_node(osmium.osm.mutable.Node(id=node.id, location=node.location))
        for number, nodes, tags in ways:
            writer.add_way(osmium.osm.mutable.Way(id=number, nodes=nodes, tags=tags))
    return target


def _is_plain(tags: dict[str, str]) -> bool:
    """Whether everybody reads the way alike: an open road, in no season, of no special kind."""
    if tags.get("highway") not in ROADS or tags.get("oneway", "no") not in ONEWAY:
        return False
    if any(tags[key] not in OPEN for key in ACCESS if key in tags):
        return False
    special = ("service", "area", "ford", "4wd_only", "seasonal", "impassable", "route", "barrier")
    if any(key in tags for key in special) or "construction" in tags:
        return False
    return not any(key.startswith("oneway:") or key.endswith(":conditional") for key in tags)


@dataclass(frozen=True)
class Matrix:
    """What the engine says of trips from each source to each destination."""

    minutes: Float64  # (sources, destinations)
    km: Float64
    moved_m: Float64  # (sources + destinations,)


@dataclass(frozen=True)
class Engine:
    """A data set of the engine, for one weight."""

    data: Path

    @classmethod
    def build(cls, extract: Path, folder: Path, weight: str) -> Engine:
        """Make the data set; `weight` is ``duration`` or ``distance``."""
        profiles = folder / "profiles"
        if not profiles.exists():
            shutil.copytree(_package() / "share" / "profiles", profiles)
        text = (profiles / "car.lua").read_text()
        changed = text.replace("'routability',", f"'{weight}',", 1)
        assert changed != text
        profile = profiles / f"car_{weight}.lua"
        profile.write_text(changed)
        data = folder / f"{weight}.osrm"
        tool = [str(ENGINE_PYTHON), "-m", "osrm"]
        _run(
            [
                *tool,
                "extract",
                "-t",
                "1",
                "-p",
                str(profile),
                "-o",
                str(data.with_suffix("")),
                str(extract),
            ]
        )
        _run([*tool, "partition", "-t", "1", str(data)])
        _run([*tool, "customize", "-t", "1", str(data)])
        return cls(data)

    def matrix(self, lon: Float64, lat: Float64, sources: int) -> Matrix:
        """From the first so many points to all others."""
        count = len(lon)
        work: dict[str, Any] = {
            "lon": lon.tolist(),
            "lat": lat.tolist(),
            "sources": list(range(sources)),
            "destinations": list(range(sources, count)),
        }
        file = self.data.with_suffix(".json")
        file.write_text(json.dumps(work))
        _run([str(ENGINE_PYTHON), str(PROCESS), str(self.data), str(file)])
        found = json.loads(file.read_text())
        numbers = {name: np.array(values, dtype=np.float64) for name, values in found.items()}
        return Matrix(numbers["durations"] / 60, numbers["distances"] / 1000, numbers["moved_m"])


def _package() -> Path:
    where = "import osrm, pathlib; print(pathlib.Path(osrm.__file__).parent)"
    found = subprocess.run(
        [str(ENGINE_PYTHON), "-c", where], check=True, capture_output=True, text=True
    )
    return Path(found.stdout.strip())


def _run(command: list[str]) -> None:
    found = subprocess.run(command, capture_output=True, text=True)
    assert found.returncode == 0, f"{' '.join(command)}\n{found.stdout}\n{found.stderr}"

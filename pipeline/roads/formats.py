"""Reads road extracts of any supported format, told apart by the file's name."""

from __future__ import annotations

from pathlib import Path

from pipeline.errors import RoadsError
from pipeline.roads.extract import RoadExtract
from pipeline.roads.merge import merge
from pipeline.roads.osm import read_osm


def read_extract(paths: tuple[Path, ...]) -> RoadExtract:
    """Read road extracts and merge them by OSM id.

    Parameters
    ----------
    paths : OSM PBF or OSM XML files (plain, .gz or .bz2), in any order of their objects.

    Raises
    ------
    RoadsError
        A file is truncated or malformed, or none of them holds a road.
    """
    if not paths:
        raise RoadsError("no road extract is given; set roads.files in the study file.")
    files = [read_osm(path) for path in paths]
    if not any(len(file.way_id) for file in files):
        names = ", ".join(path.name for path in paths)
        raise RoadsError(
            f"{names}: no way with a highway or ferry tag. "
            "Give an extract that holds roads in roads.files."
        )
    return merge(files)

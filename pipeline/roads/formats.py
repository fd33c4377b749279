"""Reads road extracts of any supported format, told apart by the file's name."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

import numpy as np

from pipeline.errors import RoadsError
from pipeline.road_settings import RoadsSettings
from pipeline.roads.extract import RoadExtract
from pipeline.roads.graphml import read_graphml
from pipeline.roads.layers import LAYERS, read_layers
from pipeline.roads.merge import FileRoads, merge
from pipeline.roads.osm import read_osm
from pipeline.roads.pbf import read_pbf
from pipeline.roads.pbf_frame import OddFileError
from pipeline.roads.rulebook import load_rules

# A clean cut leaves roads without nodes along its edge only; more than this share, and this
# many, and the file has lost nodes.
MOST_CUT, FEWEST_CUT = 0.3, 5


def read_extract(paths: tuple[Path, ...], settings: RoadsSettings | None = None) -> RoadExtract:
    """Read road extracts and merge them by OSM id.

    Parameters
    ----------
    paths : OSM PBF, OSM XML (plain, .gz or .bz2) and GraphML files; or layers of lines.
    settings : how layers of lines are to be read; default: as OSM names things.

    Raises
    ------
    RoadsError
        A file is truncated or malformed, none of them holds a road, or so many roads lack nodes
        that something has been lost.
    """
    if not paths:
        raise RoadsError("no road extract is given; set roads.files in the study file.")
    layers = tuple(path for path in paths if path.suffix.lower() in LAYERS)
    if layers and len(layers) < len(paths):
        raise RoadsError(
            f"roads.files: {layers[0].name} is a layer of lines, and the others are not; they "
            "have no ids in common to be joined by. Give files of one kind."
        )
    if layers:
        settings = settings or RoadsSettings()
        return merge([read_layers(layers, settings, set(load_rules(settings).classes))])
    files = [_read_file(path) for path in paths]
    if not any(len(file.way_id) for file in files):
        names = ", ".join(path.name for path in paths)
        raise RoadsError(
            f"{names}: no way with a highway or ferry tag. "
            "Give an extract that holds roads in roads.files."
        )
    for file, path in zip(files, paths, strict=True):
        _refuse_two_ways_of_one_id(file, path)
    extract = merge(files)
    _refuse_holes(extract, paths)
    return extract


def _read_file(path: Path) -> FileRoads:
    """Read by compiled code where the file lets that be, else by libosmium."""
    if path.suffix.lower() == ".graphml":
        return read_graphml(path)
    try:
        return read_pbf(path) if path.suffix == ".pbf" else read_osm(path)
    except (OddFileError, OSError):
        return read_osm(path)


def _refuse_two_ways_of_one_id(file: FileRoads, path: Path) -> None:
    """One id may be there twice, but not for two ways."""
    order = np.argsort(file.way_id, kind="stable")
    for one, other in pairwise(order) if _has_twins(file) else ():
        if file.way_id[one] == file.way_id[other] and file.nodes_of(one) != file.nodes_of(other):
            raise RoadsError(
                f"{path.name}: two different ways have the id {file.way_id[one]}. The file is "
                "damaged or holds the history of its ways; download or cut the extract again."
            )


def _has_twins(file: FileRoads) -> bool:
    return len(np.unique(file.way_id)) < len(file.way_id)


def _refuse_holes(extract: RoadExtract, paths: tuple[Path, ...]) -> None:
    """Raise RoadsError where too many roads lack a node."""
    way = np.repeat(np.arange(extract.ways), np.diff(extract.way_start))
    cut = np.unique(way[extract.way_node < 0])
    if len(cut) < FEWEST_CUT or len(cut) <= MOST_CUT * extract.ways:
        return
    raise RoadsError(
        f"{', '.join(path.name for path in paths)}: {len(cut)} of {extract.ways} roads lack some "
        f"of their nodes (first: way {extract.way_id[cut[0]]}). Download the extract again, or "
        "cut the extract again with complete ways."
    )

"""Roads by a boundary: downloaded once, kept beside the boundary, read like any other extract.

This is the edge, before the flow: the downloaded file joins [roads] files, so the stages, their
stamps and the record of inputs treat it like a file that was brought. This module imports nothing
heavy, so that a study with nothing to do says so at once.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from pathlib import Path

from pipeline.road_settings import RoadsSettings
from pipeline.study import Study

# Changes when another question would be asked of the server, so that old answers do not serve it.
QUESTION = "1"
# `highway` values that are not asked for, unless the study makes one a road class of its own.
NOT_BY_MOTOR = (
    "bridleway", "corridor", "cycleway", "elevator", "footway", "path", "pedestrian", "platform",
    "steps",
)  # fmt: skip
LEFT_OUT = {"car": NOT_BY_MOTOR, "motorcycle": NOT_BY_MOTOR, "bicycle": (), "foot": ()}


def with_downloaded_roads(study: Study, tell: Callable[[str], None]) -> Study:
    """The study with the roads inside its boundary among its files.

    They are asked for once: while the file is there, nothing is. Remove it to ask again.

    Parameters
    ----------
    study : a study with or without [roads] boundary.
    tell : gets a line before something is asked for, and one when it is there.

    Raises
    ------
    InputError, StudyError
        The boundary is no polygon, or too large to be asked for.
    RoadsError
        The server cannot be reached, refuses, or has no road there.
    """
    settings = study.roads
    if settings.boundary is None or _is_past_roads(study):
        return study
    path = downloaded_file(settings.boundary, settings)
    if not path.exists():
        # osmnx and the libraries under it: only where something is to be asked for.
        from pipeline.roads.overpass import download

        download(settings.boundary, left_out(settings), path, settings.download_server, tell)
    files = tuple(dict.fromkeys((*settings.files, path)))
    return study.model_copy(update={"roads": settings.model_copy(update={"files": files})})


def left_out(settings: RoadsSettings) -> tuple[str, ...]:
    """`highway` values that the study's profile has no use for."""
    own = settings.rules.get("classes", {})
    return tuple(name for name in LEFT_OUT[settings.profile] if name not in own)


def downloaded_file(boundary: Path, settings: RoadsSettings) -> Path:
    """Where the roads inside a boundary are kept; named by the boundary and what was asked."""
    asked = "|".join((QUESTION, *left_out(settings))).encode()
    name = hashlib.sha256(boundary.read_bytes() + b"|" + asked).hexdigest()[:12]
    return boundary.with_name(f"{boundary.stem}_{name}.osm.pbf")


def _is_past_roads(study: Study) -> bool:
    """Whether the study brings a table that is made from roads."""
    market = study.market
    return any((study.routes.table, market.zone_table, market.trip_table))

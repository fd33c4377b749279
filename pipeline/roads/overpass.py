"""Asks a map server (Overpass API) for the roads inside a polygon, and writes them as OSM PBF.

osmnx cuts a large polygon into parts, waits for the server's free slot and keeps each answer, so
that a broken download goes on where it stopped. Its graphs hold no turn restrictions and
no tags but a chosen few, so the answers are written as they came: ways with all their tags and
nodes, tagged nodes, and the turn restrictions of those ways.
"""

from __future__ import annotations

import shutil
import socket
import warnings
from collections import OrderedDict
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any
from urllib.error import HTTPError
from urllib.request import Request, urlopen

import osmium
import pyproj
import shapely
from osmium.osm.mutable import Node, Relation, Way
from osmnx import settings as osmnx_settings

# Not public; osmnx's public functions ask for no relations.
from osmnx._overpass import (
    _make_overpass_polygon_coord_strs,
    _make_overpass_settings,
    _overpass_request,
)

from pipeline import __version__
from pipeline.centroids import POLYGONS, shapes_wgs84
from pipeline.errors import RoadsError, StudyError
from pipeline.files import atomic_file
from pipeline.userfiles import read_user_table

MOST_KM2 = 100_000  # 40 of osmnx's parts of 50 by 50 km
MOST_CORNERS = 1000  # a boundary with more is slow to work on for the server
MOST_BUSY = 5  # osmnx waits 55 s each time that the server is busy
BUSY = (429, 504)
REACH_S = 30.0
TAKE_FILE = "or give a ready extract in [roads] files"
QUERY = (
    '{settings};(way["highway"]{without}(poly:"{part}");way["route"="ferry"](poly:"{part}");)'
    '->.roads;(.roads;node(w.roads);rel(bw.roads)["type"="restriction"];);out;'
)
Element = dict[str, Any]
Found = dict[str, dict[int, Element]]  # by kind and id


def download(
    boundary: Path,
    left_out: tuple[str, ...],
    path: Path,
    server: str | None,
    tell: Callable[[str], None],
) -> None:
    """Write the roads and ferries inside a boundary to `path`; ways are whole, also beyond it.

    Parameters
    ----------
    boundary : polygons in any CRS; their holes are filled, many parts or corners enclosed.
    left_out : `highway` values that are not asked for.
    server : address of an Overpass API; None: that of osmnx.
    tell : gets a line before and after.

    Raises
    ------
    InputError, StudyError
        The boundary is no polygon, or too large.
    RoadsError
        The server cannot be reached, refuses, or answers with less than whole roads.
    """
    polygon = _polygon(boundary)
    kept = _folder_for_parts(path)
    with _polite(server, kept):
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", UserWarning)  # osmnx: there are many parts
            parts = _make_overpass_polygon_coord_strs(polygon)
        tell(f"roads: asking a map server for {boundary.name} in {len(parts)} part(s)")
        _refuse_unreachable(str(osmnx_settings.overpass_url))
        answers = [_ask(_query(part, left_out)) for part in parts]
    shutil.rmtree(kept, ignore_errors=True)
    try:
        found = _elements(answers, boundary)
        _write(found, answers, path)
    except (KeyError, TypeError, ValueError, RuntimeError) as error:
        raise RoadsError(
            f"[roads] boundary: the answer is none of an Overpass API ({error!r}). "
            f"Look at [roads] download_server, {TAKE_FILE}."
        ) from None
    tell(f"roads: wrote {path.name}, {len(found['way']):,} ways; it serves later runs")


def _folder_for_parts(path: Path) -> Path:
    """A folder beside the file-to-be, where answers stay until the last one is there."""
    kept = path.with_name(f".{path.name}.parts")
    try:
        kept.mkdir(exist_ok=True)
    except OSError as error:
        raise StudyError(
            f"[roads] boundary: roads are kept beside the boundary, and {path.parent} cannot be "
            f"written to ({error.strerror}). Put the boundary into the study's input folder."
        ) from None
    return kept


def _polygon(boundary: Path) -> shapely.Polygon | shapely.MultiPolygon:
    """The boundary as one geometry in WGS 84."""
    shapes = shapes_wgs84(read_user_table(boundary))
    polygon = shapely.union_all(shapes.to_numpy())
    if shapely.get_num_coordinates(polygon) > MOST_CORNERS:
        polygon = polygon.convex_hull
    are_polygons = not shapes.empty and bool(shapes.geom_type.isin(POLYGONS).all())
    if not are_polygons or not isinstance(polygon, shapely.Polygon | shapely.MultiPolygon):
        raise StudyError(
            f"[roads] boundary: {boundary.name} holds something else than polygons. "
            "Give a layer with a polygon around all zones and sites."
        )
    area, _ = pyproj.Geod(ellps="WGS84").geometry_area_perimeter(polygon.convex_hull)
    if abs(area) > MOST_KM2 * 1e6:
        raise StudyError(
            f"[roads] boundary: {boundary.name} encloses {abs(area) / 1e6:,.0f} km², more than "
            f"{MOST_KM2:,} km² that can be asked of a shared server. Draw it smaller, {TAKE_FILE}."
        )
    return polygon


def _query(part: str, left_out: tuple[str, ...]) -> str:
    without = f'["highway"!~"^({"|".join(left_out)})$"]' if left_out else ""
    return QUERY.format(settings=_make_overpass_settings(), part=part, without=without)


# --- the server ------------------------------------------------------------------------------


@contextmanager
def _polite(server: str | None, kept: Path) -> Iterator[None]:
    """Let osmnx ask in our name, with its own pauses and limits; afterwards it is as it was.

    Its second way to look up a host name, by a third party, is off.
    """
    own = {
        "http_user_agent": f"roadworth/{__version__}",
        "http_referer": "roadworth",
        "doh_url_template": None,
        "use_cache": True,
        "cache_folder": kept,
        "requests_kwargs": {**osmnx_settings.requests_kwargs, "hooks": {"response": _Watch()}},
    }
    own |= {"overpass_url": server} if server else {}
    before = {name: getattr(osmnx_settings, name) for name in own}
    lookup = socket.getaddrinfo  # osmnx puts its own in its place
    try:
        for name, value in own.items():
            setattr(osmnx_settings, name, value)
        yield
    finally:
        for name, value in before.items():
            setattr(osmnx_settings, name, value)
        socket.getaddrinfo = lookup


class _Watch:
    """Looks at each answer: a refusal is an error, and a busy server is not asked for ever."""

    def __init__(self) -> None:
        self.busy = 0

    def __call__(self, response: Any, **_: Any) -> None:
        status = int(response.status_code)
        if response.request.method != "POST" or status < 400:
            return
        self.busy += status in BUSY
        if status not in BUSY or self.busy >= MOST_BUSY:
            said = " ".join(str(response.text).split())[:200]
            raise RoadsError(
                f"[roads] boundary: the map server refused (HTTP {status}: {said}). "
                f"Try later, name another server in [roads] download_server, {TAKE_FILE}."
            )


def _refuse_unreachable(server: str) -> None:
    """Raise RoadsError at once; osmnx would wait a minute for a server that is not there."""
    status = Request(server.rstrip("/") + "/status", headers={"User-Agent": "roadworth"})
    try:
        with urlopen(status, timeout=REACH_S):
            return
    except HTTPError as error:
        error.close()  # it answers
    except (OSError, ValueError) as error:
        raise _no_answer(error) from None


def _no_answer(error: Exception) -> RoadsError:
    return RoadsError(
        f"[roads] boundary: no answer from the map server ({error}). The roads are not downloaded "
        f"yet: go online, look at [roads] download_server, {TAKE_FILE}."
    )


def _ask(query: str) -> dict[str, Any]:
    """One answer; what the server remarks is an error, for then the answer is not whole."""
    try:
        answer: dict[str, Any] = _overpass_request(OrderedDict(data=query))
    except (OSError, ValueError) as error:
        raise _no_answer(error) from None
    if "remark" in answer:
        raise RoadsError(
            f"[roads] boundary: the map server gave up on a part ({answer['remark']}). "
            f"Try later, draw the boundary smaller, {TAKE_FILE}."
        )
    return answer


# --- the answers -----------------------------------------------------------------------------


def _elements(answers: list[dict[str, Any]], boundary: Path) -> Found:
    """Every object once, by kind and id in ascending order.

    Raises
    ------
    RoadsError
        There is no road, or a road lacks a node.
    """
    found: Found = {"node": {}, "way": {}, "relation": {}}
    for answer in answers:
        for element in answer.get("elements", []):
            found[element["type"]].setdefault(int(element["id"]), element)
    if not found["way"]:
        raise RoadsError(
            f"[roads] boundary: the map server has no road inside {boundary.name}. Look at the "
            "place and the coordinate reference system of the polygon."
        )
    used = {node for way in found["way"].values() for node in way["nodes"]}
    lost = len(used - found["node"].keys())
    if lost:
        raise RoadsError(
            f"[roads] boundary: the answer lacks {lost} of {len(used)} nodes of its roads. "
            f"Try later, {TAKE_FILE}."
        )
    return {kind: dict(sorted(items.items())) for kind, items in found.items()}


def _write(found: Found, answers: list[dict[str, Any]], path: Path) -> None:
    """Write the objects as OSM PBF; the same answers give the same bytes."""
    header = osmium.io.Header()
    header.set("generator", "roadworth")
    stamps = [answer.get("osm3s", {}).get("timestamp_osm_base") for answer in answers]
    if all(stamps):
        header.set("osmosis_replication_timestamp", min(stamps))
    with (
        atomic_file(path) as temporary,
        osmium.SimpleWriter(
            osmium.io.File(str(temporary), "pbf"), header=header, overwrite=True
        ) as writer,
    ):
        for number, node in found["node"].items():
            place = (node["lon"], node["lat"])
            writer.add_node(Node(id=number, location=place, tags=node.get("tags", {})))
        for number, way in found["way"].items():
            writer.add_way(Way(id=number, nodes=way["nodes"], tags=way.get("tags", {})))
        for number, relation in found["relation"].items():
            members = [(m["type"][0], m["ref"], m["role"]) for m in relation["members"]]
            writer.add_relation(Relation(id=number, members=members, tags=relation.get("tags", {})))

"""A map server on this machine's loopback that answers one kind of Overpass question."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path
from threading import Thread
from typing import Any
from urllib.parse import parse_qs

import osmium
import shapely

# The question that is understood; another one is refused as a real server refuses nonsense.
POLY = r'\(poly:"(?P<poly>[-0-9. ]+)"\)'
QUESTION = re.compile(
    r"\[out:json\]\[timeout:180\];"
    rf'\(way\["highway"\](\["highway"!~"\^\((?P<without>[a-z_|]+)\)\$"\])?{POLY};'
    r'way\["route"="ferry"\]\(poly:"(?P=poly)"\);\)->\.roads;'
    r'\(\.roads;node\(w\.roads\);rel\(bw\.roads\)\["type"="restriction"\];\);out;'
)
STATUS = "Connected as: 1\nCurrent time: now\nRate limit: 2\n\n2 slots available now.\n"


@dataclass
class MapServer:
    """What the server has, what it was asked, and how it is to answer.

    Attributes
    ----------
    elements : its objects, as Overpass writes them.
    asked : (user agent, question) of each request.
    refusal : status and text of every answer, instead of a proper one.
    extra : what stands beside the elements of an answer.
    """

    elements: list[dict[str, Any]]
    asked: list[tuple[str, str]] = field(default_factory=list)
    refusal: tuple[int, str] | None = None
    extra: dict[str, Any] = field(default_factory=dict)
    url: str = ""

    def answer(self, question: str) -> tuple[int, str]:
        """Status and text of the answer."""
        understood = QUESTION.fullmatch(question)
        if self.refusal or not understood:
            return self.refusal or (400, "<html>Error: line 1: parse error</html>")
        numbers = [float(text) for text in understood["poly"].split()]
        inside = shapely.Polygon(list(zip(numbers[1::2], numbers[::2], strict=True)))
        without = (understood["without"] or "").split("|")
        base = {"timestamp_osm_base": "2025-06-01T00:00:00Z"}
        found = {"osm3s": base, "elements": self._select(inside, without)} | self.extra
        return 200, json.dumps(found)

    def _select(self, inside: shapely.Polygon, without: list[str]) -> list[dict[str, Any]]:
        kinds: dict[str, list[dict[str, Any]]] = {"node": [], "way": [], "relation": []}
        for element in self.elements:
            kinds[element["type"]].append(element)
        place = {n["id"]: shapely.Point(n["lon"], n["lat"]) for n in kinds["node"]}
        ways = [
            way
            for way in kinds["way"]
            if way["tags"].get("highway", without[0]) not in without
            or way["tags"].get("route") == "ferry"
            if inside.intersects(shapely.LineString([place[n] for n in way["nodes"]]))
        ]
        ids = {way["id"] for way in ways}
        used = {node for way in ways for node in way["nodes"]}
        turns = [
            turn
            for turn in kinds["relation"]
            if any(m["type"] == "way" and m["ref"] in ids for m in turn["members"])
        ]
        return [*ways, *(n for n in kinds["node"] if n["id"] in used), *turns]


@contextmanager
def map_server(file: Path) -> Iterator[MapServer]:
    """A server that has what an OSM file holds."""
    server = MapServer(elements_of(file))

    class Handler(BaseHTTPRequestHandler):
        def do_GET(self) -> None:
            self._send(200, STATUS)

        def do_POST(self) -> None:
            body = self.rfile.read(int(self.headers["Content-Length"])).decode()
            question = parse_qs(body)["data"][0]
            server.asked.append((self.headers["User-Agent"], question))
            self._send(*server.answer(question))

        def _send(self, status: int, text: str) -> None:
            self.send_response(status)
            self.end_headers()
            self.wfile.write(text.encode())

        def log_message(self, format: str, *args: Any) -> None:  # noqa: A002  # the library's name
            del format, args

    with ThreadingHTTPServer(("127.0.0.1", 0), Handler) as http:
        server.url = f"http://127.0.0.1:{http.server_port}/api"
        thread = Thread(target=http.serve_forever, kwargs={"poll_interval": 0.02})
        thread.start()
        try:
            yield server
        finally:
            http.shutdown()
            thread.join()


def elements_of(file: Path) -> list[dict[str, Any]]:
    """The objects of an OSM file as Overpass writes them."""
    elements: list[dict[str, Any]] = []
    for item in osmium.FileProcessor(str(file)):
        element: dict[str, Any] = {"id": item.id, "tags": dict(item.tags)}
        if isinstance(item, osmium.osm.Node):
            place = {"lat": item.location.lat, "lon": item.location.lon}
            elements.append({"type": "node"} | place | element)
        elif isinstance(item, osmium.osm.Way):
            elements.append({"type": "way", "nodes": [n.ref for n in item.nodes]} | element)
        elif isinstance(item, osmium.osm.Relation):
            kinds = {"n": "node", "w": "way", "r": "relation"}
            members = [{"type": kinds[m.type], "ref": m.ref, "role": m.role} for m in item.members]
            elements.append({"type": "relation", "members": members} | element)
    return elements

"""Small road worlds for tests: drawn as places and ways, written as OSM XML, read back."""

from __future__ import annotations

from pathlib import Path
from xml.sax.saxutils import quoteattr

import geopandas as gpd
import pandas as pd

from pipeline.roads import RoadExtract, RoadGraph, build_roads, read_extract
from pipeline.study import Study, study_from

Places = dict[str, tuple[float, float]]
Ways = list[tuple[str, dict[str, str]]]
Signs = dict[str, dict[str, str]]  # tags of places
Turns = list[tuple[str, dict[str, str]]]  # 'way node way' or 'way way way', tags

# Near the equator a hundredth of a degree of longitude is 1.11319 km (WGS 84: the equator's
# radius of 6,378.137 km times pi over 18,000), so lengths can be checked by hand.
STEP_KM = 6378.137 * 3.141592653589793 / 18_000
ROAD = {"highway": "primary", "maxspeed": "60"}


def a_study(**sections: dict[str, object]) -> Study:
    """A study with usual settings, and the given ones."""
    raw: dict[str, object] = {
        "study": {
            "name": "test",
            "title": "Test",
            "currency": "EUR",
            "price_year": 2020,
            "folder": "/nowhere",
        },
        "costs": {"vehicle_cost_per_km": 0.2, "wage_fraction": 0.33},
    }
    return study_from({**raw, **sections}, base=Path(), source="test")


def osm_xml(
    places: Places,
    ways: Ways,
    *,
    ways_first: bool = False,
    signs: Signs | None = None,
    turns: Turns | None = None,
) -> str:
    """OSM XML of named places (longitude, latitude) and ways (``'a b c'``, tags).

    Names get ids in the order of `places`, from 1; a name in a way that is no place is a node
    that the extract lacks. Ways get ids in their order, from 1. A turn restriction is written
    ``'1 b 2'``: from way 1 by node b (or way, if a number) to way 2.
    """
    ids = {name: number for number, name in enumerate(places, start=1)}
    signs = signs or {}
    nodes = [
        f'<node id="{ids[name]}" lon="{lon:.7f}" lat="{lat:.7f}">'
        f"{_tags(signs.get(name, {}))}</node>"
        for name, (lon, lat) in places.items()
    ]
    lines = []
    for number, (names, tags) in enumerate(ways, start=1):
        refs = "".join(f'<nd ref="{ids.get(name, 999)}"/>' for name in names.split())
        lines.append(f'<way id="{number}">{refs}{_tags(tags)}</way>')
    rules = [
        f'<relation id="{number}">{_members(text, ids)}{_tags({"type": "restriction"} | tags)}'
        "</relation>"
        for number, (text, tags) in enumerate(turns or [], start=1)
    ]
    parts = lines + nodes + rules if ways_first else nodes + lines + rules
    return '<osm version="0.6">' + "".join(parts) + "</osm>"


def _tags(tags: dict[str, str]) -> str:
    return "".join(f"<tag k={quoteattr(k)} v={quoteattr(v)}/>" for k, v in tags.items())


def _members(text: str, ids: dict[str, int]) -> str:
    names = text.split()
    roles = ["from", *["via"] * (len(names) - 2), "to"]
    return "".join(
        f'<member type="{"way" if name.isdigit() else "node"}" ref="{ids.get(name, name)}" '
        f'role="{role}"/>'
        for name, role in zip(names, roles, strict=True)
    )


def extract_of(
    folder: Path,
    places: Places,
    ways: Ways,
    signs: Signs | None = None,
    turns: Turns | None = None,
) -> RoadExtract:
    """The extract that a drawn world makes."""
    file = folder / "world.osm"
    file.write_text(osm_xml(places, ways, signs=signs, turns=turns), encoding="utf-8")
    return read_extract((file,))


def graph_of(
    folder: Path, places: Places, ways: Ways, **roads: object
) -> tuple[RoadGraph, pd.DataFrame, gpd.GeoDataFrame]:
    """Graph, quality and lines of a drawn world; keywords are keys of [roads]."""
    return build_roads(extract_of(folder, places, ways), study=a_study(roads=roads))


def signed_graph_of(
    folder: Path,
    places: Places,
    ways: Ways,
    *,
    signs: Signs | None = None,
    turns: Turns | None = None,
    roads: dict[str, object] | None = None,
) -> tuple[RoadGraph, pd.DataFrame, gpd.GeoDataFrame]:
    """The same of a world with signs at places and turn restrictions."""
    extract = extract_of(folder, places, ways, signs, turns)
    return build_roads(extract, study=a_study(roads=roads or {}))


def arcs_between(graph: RoadGraph) -> set[tuple[tuple[float, float], tuple[float, float]]]:
    """Open directions as pairs of (longitude, latitude), rounded to 1e-5 degree."""

    def place(node: int) -> tuple[float, float]:
        lon, lat = graph.node_lon_e7[node], graph.node_lat_e7[node]
        return round(float(lon) * 1e-7, 5), round(float(lat) * 1e-7, 5)

    return {(place(u), place(v)) for u, v in graph.to_networkx().edges()}


def zones_at(points: Places) -> pd.DataFrame:
    """Zones with their points."""
    return pd.DataFrame(
        {
            "zone_id": list(points),
            "lon": [lon for lon, _ in points.values()],
            "lat": [lat for _, lat in points.values()],
        }
    )


def sites_at(points: Places, site_ids: list[str] | None = None) -> pd.DataFrame:
    """Sites, one access point each unless `site_ids` says otherwise."""
    return pd.DataFrame(
        {
            "site_id": site_ids or list(points),
            "access_id": list(points),
            "site_name": list(points),
            "role": "site",
            "lon": [lon for lon, _ in points.values()],
            "lat": [lat for _, lat in points.values()],
            "fee": 0.0,
        }
    )

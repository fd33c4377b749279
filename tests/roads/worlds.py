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


def osm_xml(places: Places, ways: Ways, *, ways_first: bool = False) -> str:
    """OSM XML of named places (longitude, latitude) and ways (``'a b c'``, tags).

    Names get ids in the order of `places`, from 1; a name in a way that is no place is a node
    that the extract lacks.
    """
    ids = {name: number for number, name in enumerate(places, start=1)}
    nodes = [
        f'<node id="{ids[name]}" lon="{lon:.7f}" lat="{lat:.7f}"/>'
        for name, (lon, lat) in places.items()
    ]
    lines = []
    for number, (names, tags) in enumerate(ways, start=1):
        refs = "".join(f'<nd ref="{ids.get(name, 999)}"/>' for name in names.split())
        pairs = "".join(f"<tag k={quoteattr(k)} v={quoteattr(v)}/>" for k, v in tags.items())
        lines.append(f'<way id="{number}">{refs}{pairs}</way>')
    parts = lines + nodes if ways_first else nodes + lines
    return '<osm version="0.6">' + "".join(parts) + "</osm>"


def extract_of(folder: Path, places: Places, ways: Ways) -> RoadExtract:
    """The extract that a drawn world makes."""
    file = folder / "world.osm"
    file.write_text(osm_xml(places, ways), encoding="utf-8")
    return read_extract((file,))


def graph_of(
    folder: Path, places: Places, ways: Ways, **roads: object
) -> tuple[RoadGraph, pd.DataFrame, gpd.GeoDataFrame]:
    """Graph, quality and lines of a drawn world; keywords are keys of [roads]."""
    return build_roads(extract_of(folder, places, ways), study=a_study(roads=roads))


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

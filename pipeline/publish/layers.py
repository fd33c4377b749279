"""GIS layers from the tables of a run.

Every zones layer has one row per zone and the same columns, so that a style or a join that was
made for one fits all. With one site, ``zones`` carries that site's figures. With several, there
is a layer ``zones_<site>`` for each, and ``zones`` carries the sums over all sites and the
travel cost, distance and time to the site that is cheapest to reach (named in ``site_id``).
"""

from __future__ import annotations

import re

import geopandas as gpd
import pandas as pd

from pipeline.publish.results import Results
from pipeline.publish.roads_used import roads_used

KEY = ["zone_id", "site_id"]
ZONE_COLUMNS = ["zone_id", "postal_code", "zone_name", "population", "household_income"]
SUMS = ["sampled_records", "sampled_visits", "visits", "visits_per_1000"]
SURPLUS_COLUMNS = ["predicted_visits", "annual_surplus"]
WGS84 = "EPSG:4326"


def build_layers(results: Results) -> dict[str, gpd.GeoDataFrame]:
    """Every layer that the run has the tables for, in WGS 84.

    Returns
    -------
    Layers by name: `zones`, `zones_<site>` (only with several sites), `zone_points`, `routes`,
    `roads_used`, `dropped_roads`, `sites`. A study that was entered at a finished table may
    have none.
    """
    layers: dict[str, gpd.GeoDataFrame] = {}
    if results.zones is not None:
        layers |= _zone_layers(results, results.zones)
        layers["zone_points"] = _as_points(layers["zones"], results.zones)
    if results.route_lines is not None:
        layers["routes"] = _route_layer(results, results.route_lines)
        layers["roads_used"] = roads_used(results.route_lines, results.zone_table)
    if results.dropped_roads is not None:
        layers["dropped_roads"] = results.dropped_roads
    if results.sites is not None:
        layers["sites"] = _site_layer(results, results.sites)
    return {name: layer for name, layer in layers.items() if len(layer)}


def roads_in_use(road_lines: gpd.GeoDataFrame | None) -> gpd.GeoDataFrame | None:
    """Lines of the roads that routes can run on."""
    if road_lines is None or "left_out" not in road_lines:
        return road_lines
    kept = road_lines[road_lines["left_out"].isna()]
    return kept.drop(columns="left_out").reset_index(drop=True)


def dropped_roads(road_lines: gpd.GeoDataFrame | None) -> gpd.GeoDataFrame | None:
    """Lines of the roads that were left out of the graph, with the reason."""
    if road_lines is None or "left_out" not in road_lines:
        return None
    return road_lines[road_lines["left_out"].notna()].reset_index(drop=True)


def zone_figures(results: Results) -> pd.DataFrame | None:
    """What is known of every zone and site: finished table, surplus and route status."""
    if results.zone_table is None:
        return None
    figures = results.zone_table.drop(columns=["population", "household_income"])
    surplus = results.zone_surplus[[*KEY, *SURPLUS_COLUMNS]]
    figures = figures.merge(surplus, on=KEY, how="left", validate="one_to_one")
    if results.routes is not None:
        status = results.routes[[*KEY, "route_status"]]
        figures = figures.merge(status, on=KEY, how="left", validate="one_to_one")
    return figures


def _zone_layers(results: Results, zones: gpd.GeoDataFrame) -> dict[str, gpd.GeoDataFrame]:
    base = gpd.GeoDataFrame(zones[[*ZONE_COLUMNS, "geometry"]], geometry="geometry", crs=WGS84)
    figures = zone_figures(results)
    if figures is None:
        return {"zones": base}
    sites = [headline.site_id for headline in results.headlines]
    if len(sites) == 1:
        return {"zones": _with_figures(base, figures[figures["site_id"] == sites[0]])}
    layers = {"zones": _with_figures(base, _over_sites(figures))}
    for name, site_id in zip(_layer_names(sites), sites, strict=True):
        layers[name] = _with_figures(base, figures[figures["site_id"] == site_id])
    return layers


def _with_figures(base: gpd.GeoDataFrame, figures: pd.DataFrame) -> gpd.GeoDataFrame:
    """Zones with the figures of one site; geometry last. A zone without figures keeps its row."""
    merged = base.merge(figures, on="zone_id", how="left", validate="one_to_one")
    if "in_market" in merged:
        merged["in_market"] = merged["in_market"].astype("boolean")
    order = [column for column in merged.columns if column != "geometry"]
    return gpd.GeoDataFrame(merged[[*order, "geometry"]], geometry="geometry", crs=WGS84)


def _over_sites(figures: pd.DataFrame) -> pd.DataFrame:
    """One row per zone: sums over the sites, the rest from the site that is cheapest to reach."""
    ordered = figures.sort_values([*KEY[:1], "travel_cost", "site_id"], na_position="last")
    cheapest = ordered.drop_duplicates("zone_id").set_index("zone_id")
    sums = [column for column in [*SUMS, *SURPLUS_COLUMNS] if column in figures]
    totals = figures.groupby("zone_id")[sums].sum(min_count=1)
    cheapest[sums] = totals.reindex(cheapest.index)
    if "in_market" in cheapest:
        cheapest["in_market"] = figures.groupby("zone_id")["in_market"].any()
    return cheapest.drop(columns=["visits_se"], errors="ignore").reset_index()


def _layer_names(sites: list[str]) -> list[str]:
    """A layer name for every site: letters, digits and underscores, none twice."""
    names: list[str] = []
    for site_id in sites:
        plain = "zones_" + re.sub(r"[^a-z0-9]+", "_", site_id.lower()).strip("_")
        twin = sum(name == plain or name.startswith(f"{plain}__") for name in names)
        names.append(f"{plain}__{twin + 1}" if twin else plain)
    return names


def _as_points(layer: gpd.GeoDataFrame, zones: gpd.GeoDataFrame) -> gpd.GeoDataFrame:
    """The zones layer at the points that the routes start from."""
    points = gpd.GeoSeries.from_xy(zones["lon"], zones["lat"], crs=WGS84)
    placed = layer.drop(columns="geometry")
    placed["centroid_source"] = zones["centroid_source"].to_numpy()
    return gpd.GeoDataFrame(placed, geometry=points.to_numpy(), crs=WGS84)


def _route_layer(results: Results, lines: gpd.GeoDataFrame) -> gpd.GeoDataFrame:
    layer = lines.sort_values(KEY, kind="stable")
    if results.routes is not None:
        layer = layer.merge(results.routes, on=KEY, how="left", validate="one_to_one")
    if results.costs is not None:
        price = results.costs[[*KEY, "travel_cost"]]
        layer = layer.merge(price, on=KEY, how="left", validate="one_to_one")
    order = [column for column in layer.columns if column != "geometry"]
    return gpd.GeoDataFrame(layer[[*order, "geometry"]], geometry="geometry", crs=WGS84)


def _site_layer(results: Results, sites: pd.DataFrame) -> gpd.GeoDataFrame:
    """Access points, with what their site is worth."""
    values = pd.DataFrame(
        {
            "site_id": [h.site_id for h in results.headlines],
            "visits": [h.visits for h in results.headlines],
            **{
                f"{measure}{part}": [
                    getattr(getattr(h, measure), source, None) for h in results.headlines
                ]
                for measure in ("annual_surplus", "surplus_per_trip")
                for part, source in (("", "value"), ("_ci_low", "ci_low"), ("_ci_high", "ci_high"))
            },
        }
    )
    plain = pd.DataFrame(sites).drop(columns="geometry", errors="ignore")
    layer = plain.merge(values, on="site_id", how="left", validate="many_to_one")
    points = gpd.GeoSeries.from_xy(layer["lon"], layer["lat"], crs=WGS84)
    return gpd.GeoDataFrame(layer, geometry=points.to_numpy(), crs=WGS84)

"""The evidence: map and demand curve of every site, with the zones as a table."""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.publish.charts import demand_chart, is_skewed
from pipeline.publish.curve import Curve
from pipeline.publish.mapmeasures import ZONE_HEAD, MapFigures, map_figures
from pipeline.publish.mapview import BaseMap, draw_map
from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.results import Headline, Results
from pipeline.publish.words import count, level, model_words, number

MOST_ROWS = 250
MOST_POINTS = 1_500
CLASSES = 60


def site_heading(results: Results, headline: Headline) -> Html | None:
    """Name of the site, where there are several."""
    return tag("h3", headline.site_name) if len(results.headlines) > 1 else None


def site_map(results: Results, base: BaseMap | None, headline: Headline) -> MapFigures | None:
    """What the map of a site can show; None where there is nothing to draw."""
    rows = results.site_zones(headline.site_id)
    if rows is None or base is None:
        return None
    return map_figures(results, headline.site_id, _with_surplus(results, rows), base.zone_names)


def _with_surplus(results: Results, rows: pd.DataFrame) -> pd.DataFrame:
    rated = rows if "visits_per_1000" in rows else rows.assign(visits_per_1000=_rates(rows))
    keys = ["zone_id", "site_id"]
    return rated.merge(results.zone_surplus, on=keys, how="left", validate="one_to_one")


def map_figure(
    results: Results, base: BaseMap | None, headline: Headline, figures: MapFigures | None
) -> Html:
    """Map of one site, and the same as a table."""
    rows = results.site_zones(headline.site_id)
    if rows is None:
        words = "The study brought records of trips without zones, so there is no map."
        return tag("p", words)
    if base is None:
        words = "The study brought a finished table without zones' places, so there is no map."
        return join([tag("p", words), zone_table(results, rows)])
    if figures is None:
        words = (
            "So that this page stays small it draws the first site's map only; the GIS layers hold "
            "every site's."
        )
        return join([tag("p", words), zone_table(results, rows)])
    caption = "Lambert azimuthal equal-area projection centred on the zones; north is up. "
    if not base.has_roads:
        caption += "The study brought no roads to draw. "
    if base.left_out:
        caption += f"{base.left_out.capitalize()}. "
    figure_ = tag(
        "figure",
        _measure_switch(figures),
        draw_map(results, base, figures),
        _zone_picker(figures),
        tag("figcaption", caption, results.study.publish.attribution),
        data_map=headline.site_id,
    )
    return join([figure_, zone_table(results, rows)])


def _measure_switch(figures: MapFigures) -> Html | None:
    """Radio buttons that the page's script shows and obeys."""
    if len(figures.measures) < 2:
        return None
    choices = [
        tag(
            "label",
            tag(
                "input",
                type="radio",
                name=f"measure-{figures.site_id}",
                value=measure.column,
                checked="checked" if place == 0 else None,
            ),
            measure.short,
        )
        for place, measure in enumerate(figures.measures)
    ]
    legend = tag("legend", "The map shows")
    return tag("fieldset", legend, *choices, class_="map-tool", hidden="hidden")


def _zone_picker(figures: MapFigures) -> Html | None:
    """A list of zones, filled by the page's script; the row of the one that is chosen."""
    if figures.rows is None:
        return None
    choice = tag("select", tag("option", "point at the map, or choose", value="-1"))
    label = tag("label", "Zone ", choice)
    row = tag("dl", class_="zone-row", aria_live="polite")
    return tag("div", label, row, class_="map-tool picker", hidden="hidden")


def _rates(rows: pd.DataFrame) -> pd.Series:
    """Visits per 1,000 people; a zone without people has no rate."""
    people = rows["population"].where(rows["population"] > 0)
    return rows["visits"] * 1000 / people


def zone_table(results: Results, rows: pd.DataFrame) -> Html:
    """Zones with their figures, the most visited first."""
    frame = _with_surplus(results, rows)
    names = _zone_names(results)
    frame = frame.sort_values(["visits", "zone_id"], ascending=[False, True], na_position="last")
    shown = [(column, words) for column, words in ZONE_HEAD if column in frame]
    body = [
        (names.get(str(row["zone_id"]), row["zone_id"]), *(number(row[c], 4) for c, _ in shown))
        for row in frame.head(MOST_ROWS).to_dict("records")
    ]
    head = ("Zone", *(words for _, words in shown))
    more = len(frame) - len(body)
    caption = f"Zones of origin; money in {results.currency}"
    if more:
        caption += f"; the {more:,} least visited are in tables/zone_table.csv"
    grid = table(head, body, caption=caption, numbers=range(1, len(head)))
    return tag("details", tag("summary", "The zones as a table"), grid)


def _zone_names(results: Results) -> dict[str, str]:
    if results.zones is None:
        return {}
    named = results.zones.dropna(subset=["zone_name"])
    return {
        str(zone_id): str(name) if str(name) == str(zone_id) else f"{name} ({zone_id})"
        for zone_id, name in zip(named["zone_id"], named["zone_name"], strict=True)
    }


def demand_figure(results: Results, headline: Headline) -> Html:
    """The demand curve on its points."""
    points = demand_points(results, headline)
    if points.empty:
        return tag("p", "There is no point to draw.")
    curve = results.curves.get(headline.site_id)
    per_zone = results.zone_table is not None
    rate_words = "Visits per 1,000 people and year" if per_zone else "Trips per person and year"
    chart = demand_chart(
        points,
        curve,
        currency=results.currency,
        visitor=results.visitor,
        rate_words=rate_words,
        name=f"Demand for visits to {headline.site_name}",
    )
    words = _point_words(results, points)
    return tag("figure", chart, tag("figcaption", words, _curve_words(results, headline, curve)))


def _point_words(results: Results, points: pd.DataFrame) -> str:
    """What the circles are, and how the axis goes."""
    words = "One circle per class of travel cost, its area by number of records. "
    if results.zone_table is not None:
        words = "One circle per zone, its area by population. "
        if "zones" in points:
            words = "One circle per class of travel cost, its area by population. "
        if points["outside"].any():
            words += "Hollow circles are outside the market. "
    if is_skewed(points["rate"].to_numpy()):
        words += "The upright axis goes by square roots, so that small rates stay visible. "
    return words


def _curve_words(results: Results, headline: Headline, curve: Curve | None) -> str:
    sure = level(results.study.surplus.confidence)
    if curve is None:
        return ""
    return (
        f"Line: {model_words(headline.model)} model, other terms at the market's means; "
        f"band: {sure} interval of it."
    )


def demand_points(results: Results, headline: Headline) -> pd.DataFrame:
    """Points of the demand chart: `cost, rate, size, label, outside`."""
    rows = results.site_zones(headline.site_id)
    if rows is None:
        return _class_points(results, headline)
    rate = rows["visits_per_1000"] if "visits_per_1000" in rows else _rates(rows)
    names = _zone_names(results)
    inside = rows["in_market"].astype(bool) if "in_market" in rows else rate.notna()
    points = pd.DataFrame(
        {
            "cost": rows["travel_cost"],
            "rate": rate,
            "size": rows["population"] / max(float(rows["population"].max()), 1e-9),
            "label": [names.get(str(zone), str(zone)) for zone in rows["zone_id"]],
            "outside": ~inside,
        }
    )
    points = points.dropna(subset=["cost", "rate"])
    return points if len(points) <= MOST_POINTS else _in_classes(points)


def _in_classes(points: pd.DataFrame) -> pd.DataFrame:
    """Very many zones as classes of travel cost: means weighted by population."""
    grade = pd.qcut(points["cost"], CLASSES, labels=False, duplicates="drop")
    rows = []
    for (outside, _), group in points.groupby(["outside", grade], sort=True):
        weight = group["size"].clip(lower=1e-12)
        rows.append(
            {
                "cost": float(np.average(group["cost"], weights=weight)),
                "rate": float(np.average(group["rate"], weights=weight)),
                "size": float(weight.sum()),
                "label": count(len(group), "zone"),
                "outside": bool(outside),
                "zones": len(group),
            }
        )
    classes = pd.DataFrame(rows)
    return classes.assign(size=classes["size"] / classes["size"].max())


def _class_points(results: Results, headline: Headline) -> pd.DataFrame:
    means = results.trip_means
    assert means is not None
    means = means[means["site_id"] == headline.site_id]
    return pd.DataFrame(
        {
            "cost": means["travel_cost"],
            "rate": means["trips"],
            "size": means["records"] / max(int(means["records"].max() or 1), 1),
            "label": [f"{records} records" for records in means["records"]],
            "outside": False,
        }
    )

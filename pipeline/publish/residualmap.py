"""The map of residuals: where more or fewer people come than the model expects."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.publish.mapview import BaseMap
from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.results import Headline, Results
from pipeline.publish.words import count, model_words, number, p_value

#: Bounds between the classes, in standard deviations; of a right model 2 zones in 100 lie beyond
#: either of the outer ones, 16 in 100 beyond either of the inner ones.
BOUNDS = (-2.0, -1.0, 1.0, 2.0)
CLASSES = (
    "far fewer than expected (−2 and below)",
    "fewer (−2 to −1)",
    "as expected (−1 to 1)",
    "more (1 to 2)",
    "far more than expected (2 and above)",
)
MOST_ROWS = 250
#: Zones whose residuals are drawn; beyond, the page would become heavy.
MOST_DRAWN = 20_000


def residual_map(results: Results, headline: Headline, base: BaseMap | None) -> Html:
    """Map and table of one site's residuals, with Moran's I; nothing where there are none."""
    rows = results.residuals
    if rows is None or not (rows["site_id"] == headline.site_id).any():
        return Html("")
    own = rows[rows["site_id"] == headline.site_id]
    words = tag("p", _kind_words(own, headline), " ", _moran_words(results, headline))
    # Below the site's own heading, where there is one.
    size = "h4" if len(results.headlines) > 1 else "h3"
    heading = tag(size, "What the model leaves of each zone")
    picture = _figure(base, own, headline) if base is not None else None
    return join([heading, words, picture, _as_table(results, own, base)])


def _kind_words(rows: pd.DataFrame, headline: Headline) -> str:
    kind = str(rows["residual_kind"].iloc[0])
    beyond = int((rows["residual"].abs() >= 2).sum())
    what = (
        "Randomised quantile residuals (Dunn and Smyth, 1996)"
        if kind.startswith("randomised")
        else "Standardised residuals"
    )
    return (
        f"{what} of the {model_words(headline.model)} model in {count(len(rows), 'zone')}: about "
        f"standard normal where it is right, so that about {0.0455 * len(rows):.0f} would lie 2 or "
        f"more from zero; here {beyond:,} do."
    )


def _moran_words(results: Results, headline: Headline) -> str:
    """Moran's I of the chosen model, as the diagnostics have it."""
    rows = results.diagnostics
    if rows is None:
        return ""
    own = rows[
        (rows["site_id"] == headline.site_id)
        & (rows["model"] == headline.model)
        & (rows["diagnostic"] == "moran_i")
    ]
    if own.empty:
        return "Moran's I was not worked out: places or enough zones are missing."
    row = own.iloc[0]
    small = float(row["p_value"]) < 0.05 and float(row["value"]) > float(row["expected"])
    verdict = (
        "neighbours are alike beyond what the model explains, so its errors are too small and a "
        "regressor that varies over the map may be missing"
        if small
        else "no clear pattern on the map is left"
    )
    return (
        f"Moran's I {number(row['value'])} (expected {number(row['expected'])} without a pattern, "
        f"p {p_value(float(row['p_value']))}): {verdict}."
    )


def classes_of(values: npt.NDArray[np.float64]) -> npt.NDArray[np.int64]:
    """Class 0 to 4 of every residual; −1 where there is none."""
    places = np.digitize(values, BOUNDS, right=False)
    # A residual of exactly −2 or −1 belongs to the outer class, as 1 and 2 do.
    places = np.where(np.isin(values, BOUNDS[:2]), places - 1, places)
    return np.where(np.isnan(values), -1, places).astype(np.int64)


def _figure(base: BaseMap, rows: pd.DataFrame, headline: Headline) -> Html:
    if len(base.zone_names) > MOST_DRAWN:
        return tag("p", "There are too many zones to draw here; the table files hold them all.")
    values = rows.set_index("zone_id")["residual"].reindex(list(base.zone_names))
    residuals = values.to_numpy(dtype=np.float64)
    places = classes_of(residuals)
    drawn = [
        tag(
            "use",
            tag("title", f"{name}: {_value_words(value)}"),
            href=f"#z{i}",
            class_=f"d{place}" if place >= 0 else "none",
        )
        for i, (name, value, place) in enumerate(
            zip(base.zone_names.values(), residuals, places, strict=True)
        )
    ]
    shape = "zones shapes" if base.has_areas else "zones shapes dots"
    picture = tag(
        "svg",
        tag("title", f"Residuals of visits: {headline.site_name}"),
        tag("g", tag("g", *drawn, class_=shape), transform="scale(.1)"),
        viewBox=f"0 0 {base.frame.width:g} {base.frame.height:g}",
        role="img",
        class_="map",
    )
    caption = (
        "Five classes of the scheme BrBG from ColorBrewer, whose two sides stay apart with colour "
        "vision deficiency (Harrower and Brewer, 2003)."
    )
    return tag("figure", picture, _legend(places), tag("figcaption", caption))


def _value_words(value: float) -> str:
    return "not in the regression, or hidden" if np.isnan(value) else f"{number(value)} deviations"


def _legend(places: npt.NDArray[np.int64]) -> Html:
    entries = [(f"d{k}", words, int((places == k).sum())) for k, words in enumerate(CLASSES)]
    missing = int((places == -1).sum())
    if missing:
        entries.append(("none", "not in the regression, or hidden", missing))
    items = [
        tag("li", _swatch(style), words, tag("small", f" {total:,}"))
        for style, words, total in entries
    ]
    title = tag("p", tag("b", "Visits beside what the model expects"), tag("small", " (zones)"))
    return tag("div", title, tag("ul", *items), class_="legend")


def _swatch(style: str) -> Html:
    square = tag("rect", width=180, height=120, class_=style)
    scaled = tag("g", square, transform="scale(.1)", class_="zones")
    return tag("svg", scaled, viewBox="0 0 18 12", class_="swatch", aria_hidden="true")


def _as_table(results: Results, rows: pd.DataFrame, base: BaseMap | None) -> Html:
    """The same as rows, the furthest from zero first."""
    names = {} if base is None else base.zone_names
    keys = ["zone_id", "site_id"]
    predicted = results.zone_surplus[[*keys, "predicted_visits"]]
    frame = rows.merge(predicted, on=keys, how="left", validate="one_to_one")
    if results.zone_table is not None:
        visits = results.zone_table[[*keys, "visits"]]
        frame = frame.merge(visits, on=keys, how="left", validate="one_to_one")
    frame = frame.assign(size=frame["residual"].abs())
    frame = frame.sort_values(["size", "zone_id"], ascending=[False, True]).head(MOST_ROWS)
    body = [
        (
            names.get(str(row["zone_id"]), str(row["zone_id"])),
            number(row.get("visits"), 4),
            number(row["predicted_visits"], 4),
            number(row["residual"]),
        )
        for row in frame.to_dict("records")
    ]
    head = ("Zone", "Visits a year", "Expected", "Residual, deviations")
    caption = "Zones by the size of their residual"
    if len(rows) > len(body):
        caption += f"; the {len(rows) - len(body):,} nearest to zero are in tables/residuals.csv"
    grid = table(head, body, caption=caption, numbers=(1, 2, 3))
    return tag("details", tag("summary", "The residuals as a table"), grid)
